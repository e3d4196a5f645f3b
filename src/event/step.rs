//! The smooth step that fits the winds about a shift best.

use nalgebra::{Matrix3, Vector3};

use super::track::seconds;
use crate::structure::TemporalFunction;
use crate::time::Time;

/// A wind of a station.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Sample {
    pub(super) time: Time,
    pub(super) wind: [f64; 2],
    /// Instrument variance of either component, m²/s².
    pub(super) variance: f64,
}

/// A step a + b tanh((t − t0)/τ).
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Step {
    /// t0 less the time asked about, s.
    pub(super) shift: f64,
    /// Standard error of t0, s.
    pub(super) error: f64,
    /// τ, s.
    pub(super) width: f64,
    /// Variance of the winds about the step over that which the day's structure function and the instruments make expect.
    pub(super) scale: f64,
    /// The step's winds at the ends of the samples.
    pub(super) before: [f64; 2],
    pub(super) after: [f64; 2],
}

/// Widths τ that are tried, in windows: from a step within one report to a change as slow as the window.
const WIDTHS: [f64; 7] = [0.03, 0.0625, 0.125, 0.25, 0.4, 0.6, 1.0];
/// Share of what is expected in the variance about a step. 0.2: about ten values, less the five that are fitted, against
/// the one of the day.
const PRIOR_SHARE: f64 = 0.2;
/// Places of t0 that are tried on either side, for each width.
const PLACES: i32 = 15;

/// Fits a step to samples, with t0 within `hold` s of `about`.
///
/// - **Error**: of t0 with τ as fitted (the two are hardly correlated): the weights of the winds in t0, times the
///   covariance that the wind's structure function in time and the instruments give them.
pub(super) fn fit(
    samples: &[Sample],
    about: Time,
    window: f64,
    hold: f64,
    temporal: &TemporalFunction,
) -> Option<Step> {
    if samples.len() < 4 {
        return None;
    }
    let times: Vec<f64> = samples.iter().map(|s| seconds(about, s.time)).collect();
    // The best of a grid, then twice a finer grid around it.
    let mut best = Best::default();
    for width in WIDTHS.map(|share| share * window) {
        for place in -PLACES..=PLACES {
            best.try_out(
                samples,
                &times,
                hold * f64::from(place) / f64::from(PLACES),
                width,
            );
        }
    }
    let mut spacing = hold / f64::from(PLACES);
    for _ in 0..2 {
        let (middle, width) = (best.shift, best.width);
        for k in -4..=4 {
            let shift = middle + spacing * f64::from(k) / 4.0;
            best.try_out(samples, &times, shift, width);
        }
        spacing /= 4.0;
    }
    let Best { shift, width, .. } = best;
    let (level, half) = best.levels?;
    let size = half[0].hypot(half[1]);
    if size <= 0.0 {
        return None;
    }
    // Along the change: level, step, and what moving t0 does.
    let columns: Vec<Vector3<f64>> = times
        .iter()
        .map(|t| {
            let s = ((t - shift) / width).tanh();
            Vector3::new(1.0, s, -size * (1.0 - s * s) / width)
        })
        .collect();
    let normal: Matrix3<f64> = columns.iter().map(|c| c * c.transpose()).sum();
    let inverse = normal.try_inverse()?;
    let weights: Vec<f64> = columns.iter().map(|c| (inverse * c)[2]).collect();
    let scale = scale(samples, &columns, &inverse, best.squares, temporal);
    let variance = scale * variance_of(samples, &weights, temporal);
    let ends = [times.first()?, times.last()?].map(|t| ((t - shift) / width).tanh());
    let wind = |s: f64| [level[0] + half[0] * s, level[1] + half[1] * s];
    Some(Step {
        shift,
        error: variance.max(0.0).sqrt(),
        width,
        scale,
        before: wind(ends[0]),
        after: wind(ends[1]),
    })
}

/// Squares about the fit over those expected, both components, the expected ones counted as [`PRIOR_SHARE`]: the winds of the
/// day hold other events too, the winds about the step say how steady it was here.
fn scale(
    samples: &[Sample],
    columns: &[Vector3<f64>],
    inverse: &Matrix3<f64>,
    squares: f64,
    temporal: &TemporalFunction,
) -> f64 {
    // The trace of P C, with P taking off what the columns explain, and C = −½ D + instruments. What is constant in C
    // does not matter, as the first column is constant.
    let mut expected = 0.0;
    for (i, a) in columns.iter().enumerate() {
        let own = 1.0 - (a.transpose() * inverse * a)[0];
        expected += own * samples[i].variance;
        for (j, b) in columns[..i].iter().enumerate() {
            let off = -(a.transpose() * inverse * b)[0];
            expected -= off * temporal.at(seconds(samples[j].time, samples[i].time));
        }
    }
    let ratio = squares / (2.0 * expected);
    if ratio.is_finite() {
        PRIOR_SHARE + (1.0 - PRIOR_SHARE) * ratio
    } else {
        1.0
    }
}

/// The best step so far.
struct Best {
    squares: f64,
    shift: f64,
    width: f64,
    levels: Option<([f64; 2], [f64; 2])>,
}

impl Default for Best {
    fn default() -> Self {
        Self {
            squares: f64::INFINITY,
            shift: 0.0,
            width: 1.0,
            levels: None,
        }
    }
}

impl Best {
    fn try_out(&mut self, samples: &[Sample], times: &[f64], shift: f64, width: f64) {
        let count = samples.len() as f64;
        let step: Vec<f64> = times.iter().map(|t| ((t - shift) / width).tanh()).collect();
        let mean = step.iter().sum::<f64>() / count;
        let spread: f64 = step.iter().map(|s| (s - mean).powi(2)).sum();
        if spread < 1e-6 {
            return;
        }
        let (mut level, mut half, mut squares) = ([0.0; 2], [0.0; 2], 0.0);
        for k in 0..2 {
            let middle = samples.iter().map(|s| s.wind[k]).sum::<f64>() / count;
            let pairs = || samples.iter().zip(&step);
            half[k] = pairs()
                .map(|(w, s)| (w.wind[k] - middle) * (s - mean))
                .sum::<f64>()
                / spread;
            level[k] = middle - half[k] * mean;
            squares += pairs()
                .map(|(w, s)| (w.wind[k] - level[k] - half[k] * s).powi(2))
                .sum::<f64>();
        }
        if squares < self.squares {
            (self.squares, self.shift, self.width) = (squares, shift, width);
            self.levels = Some((level, half));
        }
    }
}

/// Variance of the length of the difference of two means, both components together, m²/s²; `side` is +1 for winds of
/// the one, −1 for those of the other, 0 for the rest.
pub(super) fn contrast_variance(
    samples: &[Sample],
    side: impl Fn(&Sample) -> f64,
    temporal: &TemporalFunction,
) -> f64 {
    let sides: Vec<f64> = samples.iter().map(side).collect();
    let count = |wanted: f64| sides.iter().filter(|&&s| s * wanted > 0.0).count().max(1) as f64;
    let (ahead, behind) = (count(1.0), count(-1.0));
    let weight = |s: &f64| if *s > 0.0 { s / ahead } else { s / behind };
    let weights: Vec<f64> = sides.iter().map(weight).collect();
    2.0 * variance_of(samples, &weights, temporal)
}

/// Variance of Σ w·x of one component for weights that add up to nothing: −½ ΣΣ w w D(t − t′) + Σ w² σ².
fn variance_of(samples: &[Sample], weights: &[f64], temporal: &TemporalFunction) -> f64 {
    let mut variance = 0.0;
    for (i, (a, wa)) in samples.iter().zip(weights).enumerate() {
        variance += wa * wa * a.variance;
        for (b, wb) in samples[..i].iter().zip(weights) {
            variance -= wa * wb * temporal.at(seconds(b.time, a.time));
        }
    }
    variance
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::structure::StructureSettings;
    use rand::{RngExt, SeedableRng};
    use rand_chacha::ChaCha8Rng;
    use rand_distr::StandardNormal;

    /// White noise of the instruments alone: the fitted times scatter as stated, about the true one.
    #[test]
    fn the_time_of_a_step_scatters_as_stated() {
        let quiet = TemporalFunction {
            amplitude: 0.0,
            ..StructureSettings::default().prior(20e3).temporal
        };
        let mut rng = ChaCha8Rng::seed_from_u64(5);
        let (mut sum, mut squares, mut stated) = (0.0, 0.0, 0.0);
        let runs = 300;
        for _ in 0..runs {
            let samples: Vec<Sample> = (-9..=9)
                .map(|k| {
                    let t = 300.0 * f64::from(k);
                    let step = ((t - 140.0) / 700.0).tanh();
                    let mut noise = || 0.4 * rng.sample::<f64, _>(StandardNormal);
                    Sample {
                        time: Time::from_micros(i64::from(k) * 300_000_000),
                        wind: [2.0 + 2.0 * step + noise(), -1.5 * step + noise()],
                        variance: 0.16,
                    }
                })
                .collect();
            let step = fit(&samples, Time::default(), 1800.0, 900.0, &quiet).unwrap();
            sum += step.shift - 140.0;
            squares += (step.shift - 140.0).powi(2);
            stated += step.error.powi(2);
        }
        let runs = f64::from(runs);
        let ratio = squares / stated;
        // 300 squares: ±8 %; the width is fitted too, and the grid of t0 is 15 s wide.
        assert!((0.75..1.35).contains(&ratio), "{ratio}");
        assert!(
            (sum / runs).abs() < 3.0 * (squares / runs / runs).sqrt(),
            "{}",
            sum / runs
        );
    }
}
