//! Errors of a station's clock: the lag at which it fits its neighbours best, and whether that lag changes or grows.

use nalgebra::Complex;

use super::course::{Course, Fits, course};
use super::gains::Fit;
use super::record::{Record, complex, median};
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
    /// Its standard error, s, with what the lags of all stations scatter by.
    pub error: f64,
    /// Correlation with the prediction from the neighbours without the lag.
    pub correlation: f64,
    /// Correlation with it.
    pub with_lag: f64,
    /// By how many standard deviations of its blocks the lag fits better than none.
    pub sure: f64,
    /// How the lag may change or grow; how sure that is, it says itself. `None` in a record of few days.
    #[serde(skip)]
    pub course: Option<Course>,
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

    fn add(&mut self, other: &Self) {
        self.cross += other.cross;
        self.field += other.field;
        self.own += other.own;
        self.count += other.count;
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
    let step_of = |t: usize| Some(record.times.get(t)?.micros().div_euclid(interval));
    // Running means over the winds of the station; its gains are taken off, so that a lag is told from a turn.
    let splits: Vec<i64> = fit.splits[s].iter().filter_map(|&t| step_of(t)).collect();
    let mut dense: Vec<Option<C>> = vec![None; span];
    for &(step, wind) in series {
        let place = usize::try_from(step - first).ok()?;
        let part = splits.partition_point(|&split| split <= step);
        let gain = fit.gains[s].get(part)?;
        *dense.get_mut(place)? = complex(wind).map(|w| w / gain);
    }
    let half = (MEAN_OVER * 5e5) / interval as f64;
    let own = deviations(&dense, half);
    let mut field: Vec<Option<C>> = vec![None; span];
    let mut at = Vec::new();
    for e in fit.expected(s) {
        let step = step_of(e.t)?;
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
            sum.add(s);
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
    let fits = fits(&of_blocks, &whole, record, blocks, middle, unit);
    Some(ClockLag {
        lag: seconds(lag),
        // The lag is known no better than to part of a step.
        error: (squares * (count - 1.0) / count).sqrt().max(0.1 * unit),
        correlation: whole[middle].correlation(),
        with_lag,
        sure: fits
            .as_ref()
            .map_or(0.0, |fits| fits.better_than_none(seconds(lag))),
        course: fits.filter(|_| blocks.days).and_then(|fits| course(&fits)),
    })
}

/// What each lag leaves of each block: the squares of own − β field, with β that of the largest correlation.
fn fits(
    of_blocks: &[Vec<Sums>],
    whole: &[Sums],
    record: &Record,
    blocks: &Blocks,
    middle: usize,
    unit: f64,
) -> Option<Fits> {
    let best = whole
        .iter()
        .max_by(|a, b| a.correlation().total_cmp(&b.correlation()))?;
    let beta = best.cross.re / best.field;
    let mut fits = Fits {
        left: Vec::new(),
        times: Vec::new(),
        middle,
        unit,
    };
    for (block, sums) in of_blocks.iter().enumerate() {
        let most = sums.iter().map(|s| s.count).fold(0.0, f64::max);
        if most <= 0.0 {
            continue;
        }
        // A lag that reaches beyond the record has few times in the first or last block: as good as the whole variance.
        let square = sums.iter().map(|s| s.own).sum::<f64>();
        let variance = square / sums.iter().map(|s| s.count).sum::<f64>();
        let left = sums.iter().map(|s| {
            let own = if 2.0 * s.count < most {
                variance
            } else {
                (s.own - 2.0 * beta * s.cross.re + beta * beta * s.field) / s.count
            };
            own * most
        });
        fits.left.push(left.collect());
        let t = blocks.of.partition_point(|&b| b < block);
        fits.times.push(*record.times.get(t)?);
    }
    Some(fits)
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
    let shift = before
        .zip(after)
        .map_or(0.0, |(a, b)| parabola(-a, -top, -b));
    Some((k as f64 + shift, top))
}

/// Where between −½ and ½ the parabola through (−1, a), (0, least), (1, b) is least.
pub(super) fn parabola(a: f64, least: f64, b: f64) -> f64 {
    let bend = a + b - 2.0 * least;
    if bend > 0.0 {
        (0.5 * (a - b) / bend).clamp(-0.5, 0.5)
    } else {
        0.0
    }
}

/// Stations of a kind whose scatter says something.
const LEAST_FOR_SCATTER: usize = 6;

/// A clock whose days agree so much that it is off does not count for the scatter, unless that is more than this share.
const SURE_OFF: f64 = 3.0;
const MOST_OFF: f64 = 0.2;

/// Adds what sound clocks differ by and blocks do not show: stations at the edge see the weather earlier or later than
/// those that predict them. Of the stations inside and of those at the edge apart, it is what the robust variance of the
/// lags has beyond the median of the variances of their errors. Clocks that are off, and stations that lean on them, are
/// left out of it as long as they are few. `leans_on` gives the stations that predict a station.
pub(super) fn add_scatter<I: Iterator<Item = usize>>(
    clocks: &mut [Option<ClockLag>],
    inside: &[bool],
    leans_on: impl Fn(usize) -> I,
) {
    let is_off = |clock: &Option<ClockLag>| {
        clock.is_some_and(|c| c.sure >= SURE_OFF || c.course.is_some_and(|c| c.is_sure()))
    };
    let off: Vec<bool> = clocks.iter().map(is_off).collect();
    let count = off.iter().filter(|off| **off).count();
    let few = count as f64 <= MOST_OFF * off.len() as f64;
    let leans = |s: usize| leans_on(s).any(|other| off[other]);
    for kind in [true, false] {
        let of_kind: Vec<usize> = (0..clocks.len())
            .filter(|&s| inside[s] == kind && clocks[s].is_some())
            .collect();
        let right = of_kind.iter().filter(|&&s| !few || !off[s]);
        let mut sound: Vec<usize> = right
            .clone()
            .copied()
            .filter(|&s| !few || !leans(s))
            .collect();
        if sound.len() < LEAST_FOR_SCATTER {
            sound = right.copied().collect();
        }
        if sound.len() < LEAST_FOR_SCATTER {
            continue;
        }
        let known = sound.iter().filter_map(|&s| clocks[s]);
        let (mut sizes, mut variances): (Vec<f64>, Vec<f64>) =
            known.map(|c| (c.lag.abs(), c.error * c.error)).unzip();
        let scatter = 1.4826 * median(&mut sizes).unwrap_or(0.0);
        let usual = median(&mut variances).unwrap_or(0.0);
        let more = (scatter * scatter - usual).max(0.0);
        for s in of_kind {
            if let Some(clock) = &mut clocks[s] {
                clock.error = (clock.error * clock.error + more).sqrt();
            }
        }
    }
}

/// A sound clock that leans on one that is off seems off the other way: it is not sure. `leans_on` gives the stations that
/// predict a station.
pub(super) fn silence_echoes<I: Iterator<Item = usize>>(
    clocks: &mut [Option<ClockLag>],
    leans_on: impl Fn(usize) -> I,
) {
    let before = clocks.to_vec();
    for (s, clock) in clocks.iter_mut().enumerate() {
        let Some(clock) = clock else { continue };
        let others = leans_on(s).filter_map(|o| before.get(o).copied().flatten());
        let mut echoes = others.filter(|other| {
            other.lag * clock.lag < 0.0
                && other.lag.abs() >= clock.lag.abs()
                && other.sure >= clock.sure
        });
        if echoes.next().is_some() {
            clock.sure = 0.0;
        }
    }
}
