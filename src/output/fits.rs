//! `fits.csv`: a second estimate for polygons with more than three stations.

use zmij::Buffer;

use super::csv::quoted;
use crate::integral::{Comparison, EstimateBlock};
use crate::pipeline::Setup;

/// Writes rows of `fits.csv`, one for each time and polygon with more than three stations: the least-squares linear fit
/// to its winds, its difference from the line integral (1/s), the residual of a wind component (m/s), and the chance of
/// a difference as large as this if the errors are as said.
pub(super) struct FitRows {
    names: Vec<String>,
}

impl FitRows {
    pub(super) fn new(setup: &Setup) -> Self {
        let polygons = setup.built.polygons.iter();
        Self {
            names: polygons.map(|p| quoted(&p.id)).collect(),
        }
    }

    pub(super) fn header() -> &'static str {
        "time,polygon,vorticity_fit,vorticity_fit_se,divergence_fit,divergence_fit_se,vorticity_difference,\
         vorticity_difference_se,divergence_difference,divergence_difference_se,residual,chance\n"
    }

    pub(super) fn encode(&self, block: &EstimateBlock) -> Vec<u8> {
        let mut out = Vec::new();
        let mut buffer = Buffer::new();
        for (t, time) in block.times.iter().enumerate() {
            let time = time.to_string();
            for column in &block.fits {
                out.extend_from_slice(time.as_bytes());
                out.push(b',');
                out.extend_from_slice(self.names[column.polygon].as_bytes());
                let numbers = column.at.get(t).copied().flatten().map(numbers);
                for k in 0..10 {
                    out.push(b',');
                    if let Some(numbers) = numbers {
                        out.extend_from_slice(buffer.format(numbers[k]).as_bytes());
                    }
                }
                out.push(b'\n');
            }
        }
        out
    }
}

fn numbers(fit: Comparison) -> [f64; 10] {
    [
        fit.fitted[0],
        fit.fitted_se[0],
        fit.fitted[1],
        fit.fitted_se[1],
        fit.difference[0],
        fit.difference_se[0],
        fit.difference[1],
        fit.difference_se[1],
        fit.residual,
        fit.chance,
    ]
}
