//! Strongest values of a run.

use super::{EstimateBlock, lanes};
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

/// Strongest values among those that no check found fault with, and how many values there are.
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
        // With the widest vectors that the processor has.
        pulp::Arch::new().dispatch(|| Self::of_columns(block, planetary))
    }

    #[expect(
        clippy::inline_always,
        reason = "it must become part of the caller's vector code"
    )]
    #[inline(always)]
    fn of_columns(block: &EstimateBlock, planetary: &[f64]) -> Self {
        let n = block.times.len();
        let mut extremes = Self {
            values: vec![0; planetary.len()],
            ..Self::default()
        };
        for (polygon, &f) in planetary.iter().enumerate() {
            let cells = polygon * n..(polygon + 1) * n;
            let flags = &block.flag[cells.clone()];
            let there = flags.iter().filter(|flag| flag.is_usable());
            extremes.values[polygon] += there.count() as u64;
            let faultless = flags.iter().all(|&flag| flag <= Flag::Pass);
            let peak = |values: &[f64], errors: &[f64], sign: f64| {
                let t = if faultless {
                    lanes::strongest(&values[cells.clone()], sign)?.1
                } else {
                    strongest(&values[cells.clone()], flags, sign)?
                };
                Some(Peak {
                    polygon,
                    time: block.times[t],
                    value: values[cells.start + t],
                    error: errors[cells.start + t],
                })
            };
            let d = |sign| peak(&block.divergence, &block.divergence_se, sign);
            raise(&mut extremes.convergence, d(-1.0), -1.0);
            raise(&mut extremes.divergence, d(1.0), 1.0);
            // On the equator nothing is cyclonic.
            if f.abs() > 0.0 {
                let z = |sign| peak(&block.vorticity, &block.vorticity_se, sign);
                raise(&mut extremes.cyclonic, z(f.signum()), f.signum());
                raise(&mut extremes.anticyclonic, z(-f.signum()), -f.signum());
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
            raise(slot, peak, peak.map_or(1.0, |peak| peak.value.signum()));
        }
        let polygons = self.values.len().max(later.values.len());
        self.values.resize(polygons, 0);
        for (sum, n) in self.values.iter_mut().zip(&later.values) {
            *sum += n;
        }
    }
}

/// The first of the strongest values in the sense of `sign`, among those that no check found fault with.
fn strongest(values: &[f64], flags: &[Flag], sign: f64) -> Option<usize> {
    let mut best = (0.0, None);
    for (t, (&value, &flag)) in values.iter().zip(flags).enumerate() {
        let strength = value * sign;
        if strength > best.0 && flag <= Flag::Pass {
            best = (strength, Some(t));
        }
    }
    best.1
}

/// Takes `peak` if it is stronger in the sense of `sign`; a value of the other sign is no peak.
fn raise(slot: &mut Option<Peak>, peak: Option<Peak>, sign: f64) {
    let Some(peak) = peak else {
        return;
    };
    let strength = peak.value * sign;
    if strength > 0.0 && slot.is_none_or(|old| strength > old.value.abs()) {
        *slot = Some(peak);
    }
}
