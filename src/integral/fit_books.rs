//! What the linear fits beside the line integrals come to over a run.

use super::EstimateBlock;

/// A difference with a smaller chance, if the model holds, counts as a disagreement.
const DISAGREES: f64 = 0.01;

/// With a smaller one the estimate of that time is suspect: one of a thousand by chance, so that a ring keeps its peaks.
pub(super) const DISAGREES_AT_A_TIME: f64 = 1e-3;

/// Agreement of the two estimates of one polygon.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct FitBook {
    /// Number of the polygon.
    pub polygon: usize,
    /// Times compared.
    pub times: u64,
    /// Times with a difference that chance gives in less than one of a hundred.
    pub disagree: u64,
    /// Sums of the squared differences of vorticity and divergence, 1/s².
    squares: [f64; 2],
    /// Sum of the squared residuals of the fit, m²/s².
    residuals: f64,
}

impl FitBook {
    /// Share of the times at which the estimates disagree; 0.01 if the model holds.
    #[must_use]
    pub fn share(&self) -> f64 {
        self.disagree as f64 / self.times.max(1) as f64
    }

    /// Root mean square differences of vorticity and divergence, 1/s.
    #[must_use]
    pub fn difference(&self) -> [f64; 2] {
        self.squares
            .map(|sum| (sum / self.times.max(1) as f64).sqrt())
    }

    /// Root mean square residual of a wind component, m/s.
    #[must_use]
    pub fn residual(&self) -> f64 {
        (self.residuals / self.times.max(1) as f64).sqrt()
    }

    /// True if the two disagree clearly more often than chance lets them: at five times the share, in more than a
    /// handful of times.
    #[must_use]
    pub fn is_doubtful(&self) -> bool {
        self.disagree > 5 && self.share() > 5.0 * DISAGREES
    }
}

/// Agreement of all polygons with more than three stations.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct FitBooks(pub Vec<FitBook>);

impl FitBooks {
    /// Those of a block.
    #[must_use]
    pub fn of(block: &EstimateBlock) -> Self {
        let of_polygon = |column: &super::FitColumn| {
            let mut book = FitBook {
                polygon: column.polygon,
                ..FitBook::default()
            };
            for fit in column.at.iter().flatten() {
                book.times += 1;
                book.disagree += u64::from(fit.chance < DISAGREES);
                for (sum, difference) in book.squares.iter_mut().zip(fit.difference) {
                    *sum += difference * difference;
                }
                book.residuals += fit.residual * fit.residual;
            }
            book
        };
        Self(block.fits.iter().map(of_polygon).collect())
    }

    /// Takes in those of a later block.
    pub fn merge(&mut self, later: &Self) {
        if self.0.is_empty() {
            self.0.clone_from(&later.0);
            return;
        }
        for (book, later) in self.0.iter_mut().zip(&later.0) {
            book.times += later.times;
            book.disagree += later.disagree;
            book.residuals += later.residuals;
            for (sum, more) in book.squares.iter_mut().zip(later.squares) {
                *sum += more;
            }
        }
    }
}
