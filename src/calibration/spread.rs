//! How sure the gains are: what each block of time says of them, and how far blocks disagree.

use nalgebra::Complex;

use super::gains::Fit;
use super::record::{Record, median};
use super::statistics::student_975;

type C = Complex<f64>;

const DAY: i64 = 86_400_000_000;
/// With fewer days than this, blocks are shorter than days.
pub(super) const LEAST_DAYS: usize = 5;
/// Blocks that a short record is cut into, and their least length, μs.
const SHORT_BLOCKS: i64 = 10;
const SHORTEST_BLOCK: i64 = 3_600_000_000;
/// Days that the network's typical variance is worth beside a station's own.
const SHARED: f64 = 6.0;
const SWEEPS: usize = 200;
/// Stations whose scatter says something.
const LEAST_FOR_SCATTER: usize = 6;

/// Blocks of time.
#[derive(Debug, Clone)]
pub(super) struct Blocks {
    /// For each kept time its block.
    pub(super) of: Vec<usize>,
    pub(super) count: usize,
    /// True if a block is a day.
    pub(super) days: bool,
}

impl Blocks {
    /// Days since 1970, or ten blocks of a record of less than five days.
    pub(super) fn of(record: &Record) -> Self {
        let day = |t: &crate::time::Time| t.micros().div_euclid(DAY);
        let times = &record.times;
        let mut days: Vec<i64> = times.iter().map(day).collect();
        days.dedup();
        let days_enough = days.len() >= LEAST_DAYS;
        let length = match (times.first(), times.last()) {
            _ if days_enough => DAY,
            (Some(a), Some(b)) => {
                ((b.micros() - a.micros()) / SHORT_BLOCKS + 1).max(SHORTEST_BLOCK)
            }
            _ => DAY,
        };
        let origin = if days_enough {
            0
        } else {
            times.first().map_or(0, |t| t.micros())
        };
        let mut of = Vec::with_capacity(times.len());
        let mut count: usize = 0;
        let mut last = None;
        for time in times {
            let number = (time.micros() - origin).div_euclid(length);
            if last != Some(number) {
                count += 1;
                last = Some(number);
            }
            of.push(count - 1);
        }
        Self {
            of,
            count,
            days: days_enough,
        }
    }
}

/// What a block says of a station: Σ w z F* and Σ w (|F|² − excess), with F the prediction and z wind over gain.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct BlockSum {
    pub(super) top: C,
    pub(super) bottom: f64,
}

impl BlockSum {
    pub(super) fn add(&mut self, other: &Self) {
        self.top += other.top;
        self.bottom += other.bottom;
    }
}

/// Sums of all stations by block, with each station's winds over its first gain.
pub(super) fn block_sums(fit: &Fit, blocks: &Blocks) -> Vec<Vec<BlockSum>> {
    let stations = fit.gains.len();
    let of_station = |s: usize| {
        let mut sums = vec![BlockSum::default(); blocks.count];
        for e in fit.expected(s) {
            if let Some(z) = fit.corrected(s, e.t) {
                let sum = &mut sums[blocks.of[e.t]];
                sum.top += e.weight * z * e.field.conj();
                sum.bottom += e.weight * (e.field.norm_sqr() - e.excess);
            }
        }
        sums
    };
    (0..stations).map(of_station).collect()
}

/// Error of a gain.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct GainError {
    /// Of the angle, rad.
    pub(super) angle: f64,
    /// Of the logarithm of the modulus.
    pub(super) log: f64,
    /// Degrees of freedom.
    pub(super) freedom: f64,
}

impl GainError {
    /// Half the length of the 95 % interval in standard errors.
    pub(super) fn half_95(&self) -> f64 {
        student_975(self.freedom)
    }
}

/// Variance of a station's relative gain (mean of angle and logarithm) as far as it comes of its own residuals.
pub(super) fn own_variance(sums: &[BlockSum]) -> Option<f64> {
    let [angle, log, _] = spread(&station_scores(sums, sums), sums, true)?;
    Some(0.5 * (angle + log))
}

/// Errors of all stations' gains, of each part between their splits.
///
/// Near the solution the relative error of a station's gain is (1 + λ) ε = s + C ε: λ is the weight of the prior, s is what the residuals of a block add, C how
/// its prediction leans on the others. Solved for the residuals of each block this gives what each block adds to each
/// gain. Drawing blocks with replacement, as a bootstrap of blocks does (Künsch 1989, Ann. Stat. 17, 1217; from memory),
/// spreads the sum of these by the root of their sum of squares, so nothing needs drawing. Blocks shorter than a day are
/// not independent: products of blocks one and two apart are added with weights ⅔ and ⅓ (Newey and West 1987, Econometrica
/// 55, 703; from memory).
///
/// A variance of few days is itself uncertain, so the network's median is taken in, worth six days.
pub(super) fn gain_errors(
    fit: &Fit,
    blocks: &Blocks,
    sums: &[Vec<BlockSum>],
) -> Vec<Vec<Option<GainError>>> {
    let stations = fit.gains.len();
    let scores: Vec<Vec<C>> = sums.iter().map(|of| station_scores(of, of)).collect();
    let coupling: Vec<Vec<(usize, C)>> = (0..stations).map(|s| fit.coupling(s)).collect();
    let prior: Vec<f64> = (0..stations).map(|s| fit.prior_of(s)).collect();
    let influence = solve(&scores, &coupling, &prior, blocks.count);
    let block_of = |t: &usize| blocks.of.get(*t).copied().unwrap_or(blocks.count);
    // Of each station and part: variance of angle and of log, blocks in it.
    let raw = |s: usize| -> Vec<Option<[f64; 3]>> {
        if fit.splits[s].is_empty() {
            return vec![spread(&influence[s], &sums[s], blocks.days)];
        }
        // The own residuals count by their part alone; what comes of the others is that of the whole.
        let ends = fit.splits[s].iter().map(block_of).chain([blocks.count]);
        let mut from = 0;
        ends.map(|to| {
            let part = &sums[s][from..to];
            let own = station_scores(part, part);
            let whole = &scores[s];
            let of_part: Vec<C> = (from..to)
                .map(|b| influence[s][b] + (own[b - from] - whole[b]) / (1.0 + prior[s]))
                .collect();
            from = to;
            spread(&of_part, part, blocks.days)
        })
        .collect()
    };
    let found: Vec<_> = (0..stations).map(raw).collect();
    let typical = |k: usize| {
        let mut values: Vec<f64> = found
            .iter()
            .filter_map(|f| f.last()?.map(|v| v[k] * v[2]))
            .collect();
        median(&mut values)
    };
    let (angle, log) = (typical(0), typical(1));
    let shared = if stations < 5 { 0.0 } else { SHARED };
    let finish = |part: Option<[f64; 3]>| {
        let [own_angle, own_log, count] = part?;
        let freedom = count - 1.0;
        let pooled = |own: f64, typical: Option<f64>| {
            let typical = typical.unwrap_or(own * count) / count;
            ((freedom * own + shared * typical) / (freedom + shared)).sqrt()
        };
        Some(GainError {
            angle: pooled(own_angle, angle),
            log: pooled(own_log, log),
            freedom: freedom + shared,
        })
    };
    let all = |parts: Vec<_>| parts.into_iter().map(finish).collect();
    let mut errors: Vec<Vec<_>> = found.into_iter().map(all).collect();
    add_scatter(fit, &mut errors);
    errors
}

/// Adds what sound stations differ by and blocks do not show: sites, and weather that lasts through the record. It is what
/// the robust variance of all gains has beyond the median of the variances of their errors.
fn add_scatter(fit: &Fit, errors: &mut [Vec<Option<GainError>>]) {
    let excess = |value: fn(C) -> f64, error: fn(&GainError) -> f64| -> f64 {
        let known = errors.iter().enumerate();
        let known = known.filter_map(|(s, e)| Some((fit.last_gain(s), (*e.last()?)?)));
        let (mut sizes, mut variances): (Vec<f64>, Vec<f64>) = known
            .map(|(gain, e)| (value(gain).abs(), error(&e).powi(2)))
            .unzip();
        // The median of all gains is 1, so the median size is the median deviation; 1.4826 of it for a Gaussian.
        let scatter = median(&mut sizes).map_or(0.0, |m| 1.4826 * m);
        (scatter * scatter - median(&mut variances).unwrap_or(0.0)).max(0.0)
    };
    if errors.len() < LEAST_FOR_SCATTER {
        return;
    }
    let (angle, log) = (
        excess(C::arg, |e| e.angle),
        excess(|g| g.norm().ln(), |e| e.log),
    );
    for error in errors.iter_mut().flatten().flatten() {
        error.angle = (error.angle * error.angle + angle).sqrt();
        error.log = (error.log * error.log + log).sqrt();
    }
}

/// What the residuals of each block add to the relative gain.
fn station_scores(sums: &[BlockSum], whole: &[BlockSum]) -> Vec<C> {
    let mut total = BlockSum::default();
    for sum in whole {
        total.add(sum);
    }
    if total.bottom <= 0.0 {
        return vec![C::default(); sums.len()];
    }
    // At the solution top = bottom; what is left of convergence is taken off by the mean.
    let rest = total.top / total.bottom;
    sums.iter()
        .map(|s| (s.top - rest * s.bottom) / total.bottom)
        .collect()
}

/// (1 + prior) ε = s + C ε for all blocks, with the mean of all stations at 0.
fn solve(
    scores: &[Vec<C>],
    coupling: &[Vec<(usize, C)>],
    prior: &[f64],
    blocks: usize,
) -> Vec<Vec<C>> {
    let mut found: Vec<Vec<C>> = scores.to_vec();
    let mut next = vec![C::default(); blocks];
    for _ in 0..SWEEPS {
        let mut largest: f64 = 0.0;
        for s in 0..scores.len() {
            next.copy_from_slice(&scores[s]);
            for &(other, c) in &coupling[s] {
                for (x, e) in next.iter_mut().zip(&found[other]) {
                    *x += c * e;
                }
            }
            for (old, new) in found[s].iter_mut().zip(&next) {
                let step = (new / (1.0 + prior[s]) - *old) * 1.5;
                largest = largest.max(step.norm());
                *old += step;
            }
        }
        let n = scores.len().max(1) as f64;
        for b in 0..blocks {
            let mean: C = found.iter().map(|f| f[b]).sum::<C>() / n;
            for f in &mut found {
                f[b] -= mean;
            }
        }
        if largest < 1e-6 {
            break;
        }
    }
    found
}

/// Variances of angle and log of a sum of what blocks add, and the number of blocks with values.
fn spread(influence: &[C], sums: &[BlockSum], days: bool) -> Option<[f64; 3]> {
    let there: Vec<C> = influence
        .iter()
        .zip(sums)
        .filter(|(_, s)| s.bottom > 0.0)
        .map(|(e, _)| *e)
        .collect();
    let count = there.len();
    if count < 2 {
        return None;
    }
    let n = count as f64;
    let variance = |of: fn(&C) -> f64| {
        let mean = there.iter().map(of).sum::<f64>() / n;
        let x: Vec<f64> = there.iter().map(|e| of(e) - mean).collect();
        let lagged =
            |lag: usize| -> f64 { x.iter().zip(&x[lag.min(count)..]).map(|(a, b)| a * b).sum() };
        let own = lagged(0);
        let more = if days {
            0.0
        } else {
            2.0 * (2.0 * lagged(1) + lagged(2)) / 3.0
        };
        (own + more.max(0.0)) * n / (n - 1.0)
    };
    Some([variance(|e| e.im), variance(|e| e.re), n])
}
