//! Strongest values of a run.

use super::EstimateBlock;
use crate::check::Flag;
use crate::time::Time;

/// A strongest value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Peak {
    /// Number of the polygon.
    pub polygon: usize,
    /// When.
    pub time: Time,
    /// The value, 1/s.
    pub value: f64,
    /// Its standard error, 1/s.
    pub error: f64,
}

/// Strongest values among those that passed all checks, and how many values there are.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Extremes {
    /// Most negative divergence.
    pub convergence: Option<Peak>,
    /// Most positive divergence.
    pub divergence: Option<Peak>,
    /// Largest vorticity in the sense of the planetary vorticity, as its signed value.
    pub cyclonic: Option<Peak>,
    /// Largest vorticity against it, as its signed value.
    pub anticyclonic: Option<Peak>,
    /// For each polygon the number of times with a value.
    pub values: Vec<u64>,
}

impl Extremes {
    /// Those of a block; `planetary` holds the planetary vorticity of each polygon.
    #[must_use]
    pub fn of(block: &EstimateBlock, planetary: &[f64]) -> Self {
        let n = block.times.len();
        let mut extremes = Self {
            values: vec![0; planetary.len()],
            ..Self::default()
        };
        for (polygon, &f) in planetary.iter().enumerate() {
            for t in 0..n {
                let cell = polygon * n + t;
                if block.flag[cell] == Flag::Missing {
                    continue;
                }
                extremes.values[polygon] += 1;
                if block.flag[cell] != Flag::Pass {
                    continue;
                }
                let peak = |value: &[f64], error: &[f64]| Peak {
                    polygon,
                    time: block.times[t],
                    value: value[cell],
                    error: error[cell],
                };
                let d = peak(&block.divergence, &block.divergence_se);
                raise(&mut extremes.convergence, d, -1.0);
                raise(&mut extremes.divergence, d, 1.0);
                let z = peak(&block.vorticity, &block.vorticity_se);
                // On the equator nothing is cyclonic.
                if f.abs() > 0.0 {
                    raise(&mut extremes.cyclonic, z, f.signum());
                    raise(&mut extremes.anticyclonic, z, -f.signum());
                }
            }
        }
        extremes
    }

    /// Takes in those of a later block.
    pub fn merge(&mut self, later: &Self) {
        for (slot, peak) in [
            (&mut self.convergence, later.convergence),
            (&mut self.divergence, later.divergence),
            (&mut self.cyclonic, later.cyclonic),
            (&mut self.anticyclonic, later.anticyclonic),
        ] {
            if let Some(peak) = peak {
                raise(slot, peak, peak.value.signum());
            }
        }
        if self.values.is_empty() {
            self.values.clone_from(&later.values);
        } else {
            for (sum, n) in self.values.iter_mut().zip(&later.values) {
                *sum += n;
            }
        }
    }
}

/// Takes `peak` if it is stronger in the sense of `sign`; a value of the other sign is no peak.
fn raise(slot: &mut Option<Peak>, peak: Peak, sign: f64) {
    let strength = peak.value * sign;
    let stronger = strength > 0.0 && slot.is_none_or(|old| strength > old.value.abs());
    if stronger {
        *slot = Some(peak);
    }
}
