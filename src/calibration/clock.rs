//! Errors of a station's clock: the lag at which it fits its neighbours best.

use nalgebra::Complex;

use super::gains::Fit;
use super::record::{Record, complex};
use super::spread::Blocks;

type C = Complex<f64>;

/// Lags are tried out to 13 h on either side: any time zone against UTC, and daylight time.
const LARGEST: i64 = 13 * 3_600_000_000;
/// Lags tried, at most; a short interval is tried in steps of several.
const MOST_LAGS: i64 = 400;
/// Deviations are from the mean over this long, s: what lasts longer says little of a clock.
const MEAN_OVER: f64 = 6.0 * 3600.0;
/// Times that a lag needs.
const LEAST_TIMES: f64 = 30.0;

/// The clock of a station.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct ClockLag {
    /// Reported minus true time, s; positive if the station's clock is ahead.
    pub lag: f64,
    /// Its standard error, s.
    pub error: f64,
    /// Correlation with the prediction from the neighbours without the lag.
    pub correlation: f64,
    /// Correlation with it.
    pub with_lag: f64,
}

#[derive(Debug, Clone, Copy, Default)]
struct Sums {
    cross: C,
    field: f64,
    own: f64,
    count: f64,
}

impl Sums {
    fn correlation(&self) -> f64 {
        if self.count < LEAST_TIMES || self.field <= 0.0 || self.own <= 0.0 {
            return 0.0;
        }
        // The real part: a lag does not turn the wind.
        self.cross.re / (self.field * self.own).sqrt()
    }

    fn less(&self, other: &Self) -> Self {
        Self {
            cross: self.cross - other.cross,
            field: self.field - other.field,
            own: self.own - other.own,
            count: self.count - other.count,
        }
    }
}

/// The lag of the largest correlation of a station's deviations with those of its prediction (Kundu 1976, J. Phys.
/// Oceanogr. 6, 238, complex correlation; from memory), with a jackknife over blocks for its error.
pub(super) fn clock_lag(record: &Record, fit: &Fit, blocks: &Blocks, s: usize) -> Option<ClockLag> {
    let interval = record.interval.max(1);
    let stride = (2 * LARGEST / interval / MOST_LAGS).max(1);
    let reach = LARGEST / interval / stride;
    let series = &record.fine[s].values;
    let first = series.first()?.0;
    let last = series.last()?.0;
    let span = usize::try_from(last - first).ok()? + 1;
    // Running means over the winds of the station; the gain is taken off, so that a lag is told from a turn.
    let gain = fit.gain(s, record.times.len().saturating_sub(1));
    let mut dense: Vec<Option<C>> = vec![None; span];
    for &(step, wind) in series {
        let place = usize::try_from(step - first).ok()?;
        *dense.get_mut(place)? = complex(wind).map(|w| w / gain);
    }
    let half = (MEAN_OVER * 5e5) / interval as f64;
    let own = deviations(&dense, half);
    let mut field: Vec<Option<C>> = vec![None; span];
    let mut at = Vec::new();
    for e in fit.expected(s) {
        let step = record.times.get(e.t)?.micros().div_euclid(interval);
        if let Ok(place) = usize::try_from(step - first)
            && place < span
        {
            field[place] = Some(e.field);
            at.push((place, blocks.of[e.t]));
        }
    }
    let field = deviations(&field, half);
    let lags: Vec<i64> = (-reach..=reach).map(|k| k * stride).collect();
    let mut of_blocks = vec![vec![Sums::default(); lags.len()]; blocks.count];
    for &(place, block) in &at {
        let Some(f) = field[place] else { continue };
        let square = f.norm_sqr();
        for (sum, &lag) in of_blocks[block].iter_mut().zip(&lags) {
            let shifted = i64::try_from(place).ok()? + lag;
            let wind = usize::try_from(shifted).ok().and_then(|p| *own.get(p)?);
            if let Some(w) = wind {
                sum.cross += w * f.conj();
                sum.field += square;
                sum.own += w.norm_sqr();
                sum.count += 1.0;
            }
        }
    }
    let mut whole = vec![Sums::default(); lags.len()];
    for of_block in &of_blocks {
        for (sum, s) in whole.iter_mut().zip(of_block) {
            sum.cross += s.cross;
            sum.field += s.field;
            sum.own += s.own;
            sum.count += s.count;
        }
    }
    let (lag, with_lag) = peak(&whole)?;
    let middle = usize::try_from(reach).ok()?;
    let unit = (stride * interval) as f64 * 1e-6;
    let seconds = |k: f64| (k - middle as f64) * unit;
    let mut squares = 0.0;
    let mut count = 0.0;
    for of_block in &of_blocks {
        if of_block.iter().all(|s| s.count <= 0.0) {
            continue;
        }
        let rest: Vec<Sums> = whole.iter().zip(of_block).map(|(a, b)| a.less(b)).collect();
        if let Some((other, _)) = peak(&rest) {
            squares += (seconds(other) - seconds(lag)).powi(2);
            count += 1.0;
        }
    }
    if count < 2.0 {
        return None;
    }
    Some(ClockLag {
        lag: seconds(lag),
        // The lag is known no better than to part of a step.
        error: (squares * (count - 1.0) / count).sqrt().max(0.1 * unit),
        correlation: whole[middle].correlation(),
        with_lag,
    })
}

/// Deviations from the mean over `half` steps on either side.
fn deviations(series: &[Option<C>], half: f64) -> Vec<Option<C>> {
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "some hundreds of steps"
    )]
    let half = half.max(1.0) as usize;
    let mut sums = Vec::with_capacity(series.len() + 1);
    let (mut sum, mut count) = (C::default(), 0.0);
    sums.push((sum, count));
    for value in series {
        if let Some(v) = value {
            sum += v;
            count += 1.0;
        }
        sums.push((sum, count));
    }
    let deviation = |(k, value): (usize, &Option<C>)| {
        let (from, to) = (k.saturating_sub(half), (k + half + 1).min(series.len()));
        let (sum, count) = (sums[to].0 - sums[from].0, sums[to].1 - sums[from].1);
        value.map(|v| v - sum / f64::max(count, 1.0))
    };
    series.iter().enumerate().map(deviation).collect()
}

/// Place and height of the largest correlation; the place between steps by a parabola.
fn peak(sums: &[Sums]) -> Option<(f64, f64)> {
    let values: Vec<f64> = sums.iter().map(Sums::correlation).collect();
    let (k, &top) = values
        .iter()
        .enumerate()
        .max_by(|a, b| a.1.total_cmp(b.1).then(b.0.cmp(&a.0)))?;
    if top <= 0.0 {
        return None;
    }
    let (before, after) = (
        k.checked_sub(1).and_then(|k| values.get(k)).copied(),
        values.get(k + 1).copied(),
    );
    let shift = match before.zip(after) {
        Some((a, b)) if a + b < 2.0 * top => 0.5 * (a - b) / (a + b - 2.0 * top),
        _ => 0.0,
    };
    Some((k as f64 + shift.clamp(-0.5, 0.5), top))
}
