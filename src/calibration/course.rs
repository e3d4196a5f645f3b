//! The course of a clock error: the same all the time, other in a stretch of the record (daylight time, a clock set anew),
//! or growing (drift).

use super::clock::parabola;
use crate::time::Time;

/// Blocks of a stretch, at least.
const LEAST: usize = 3;
/// Largest drift over the record, s.
const LARGEST_DRIFT: f64 = 3.0 * 3600.0;
const DAY: f64 = 86_400.0;

/// How a clock error changes.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Course {
    /// It is another in a stretch of the record.
    Stretch(ClockStretch),
    /// It grows.
    Drift(ClockDrift),
}

/// A stretch in which the clock is off by another lag.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ClockStretch {
    /// First time in it.
    pub from: Time,
    /// First and last time at which it may have begun: a block on either side.
    pub between: [Time; 2],
    /// First time after it; `None` if it lasts to the end.
    pub to: Option<Time>,
    /// Lag in it, s.
    pub inside: f64,
    /// Lag around it, s.
    pub outside: f64,
    /// By how many standard deviations of its blocks the two lags fit better than one, in the stretch or around it,
    /// whichever is less.
    pub sure: f64,
}

/// A clock that gains or loses.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ClockDrift {
    /// s that it gains in a day.
    pub rate: f64,
    /// Its standard error.
    pub error: f64,
    /// Lag in the middle of the record, s.
    pub middle: f64,
    /// Days that it is seen over.
    pub days: f64,
    /// By how many standard deviations of the blocks it fits better than a lag that stays.
    pub sure: f64,
}

/// A stretch is believed if it is so sure and its lags differ by so much, s.
const SURE_STRETCH: f64 = 3.5;
const LEAST_STRETCH: f64 = 900.0;
/// A drift is believed if it is so sure, so many of its errors, and so much over the record, s.
const SURE_DRIFT: f64 = 2.5;
const DRIFT_ERRORS: f64 = 5.0;
const LEAST_DRIFT: f64 = 900.0;

impl Course {
    /// Whether it is so, or chance.
    #[must_use]
    pub fn is_sure(&self) -> bool {
        match self {
            Self::Stretch(s) => {
                s.sure >= SURE_STRETCH && (s.inside - s.outside).abs() >= LEAST_STRETCH
            }
            Self::Drift(d) => {
                d.sure >= SURE_DRIFT
                    && d.rate.abs() >= DRIFT_ERRORS * d.error
                    && d.rate.abs() * d.days >= LEAST_DRIFT
            }
        }
    }
}

/// What each lag leaves of the variance of each block.
pub(super) struct Fits {
    /// By block, then lag.
    pub(super) left: Vec<Vec<f64>>,
    /// First time of each block.
    pub(super) times: Vec<Time>,
    /// Number of the lag 0.
    pub(super) middle: usize,
    /// Distance of lags, s.
    pub(super) unit: f64,
}

impl Fits {
    fn lags(&self) -> usize {
        self.left.first().map_or(0, Vec::len)
    }

    fn seconds(&self, k: f64) -> f64 {
        (k - self.middle as f64) * self.unit
    }

    /// What a lag between two of those tried leaves of a block; `None` beyond them.
    fn at(&self, block: usize, k: f64) -> Option<f64> {
        if !(0.0..=(self.lags().max(1) - 1) as f64).contains(&k) {
            return None;
        }
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "checked above"
        )]
        let before = k as usize;
        let share = k - before as f64;
        let left = &self.left[block];
        let next = left.get(before + 1).unwrap_or(&left[before]);
        Some(left[before] + share * (next - left[before]))
    }

    /// By how many standard deviations of the blocks a lag, s, fits better than none.
    pub(super) fn better_than_none(&self, lag: f64) -> f64 {
        let k = self.middle as f64 + lag / self.unit;
        let blocks = 0..self.left.len();
        let gain = blocks.filter_map(|b| Some(self.left[b][self.middle] - self.at(b, k)?));
        sure(&gain.collect::<Vec<f64>>())
    }
}

/// Mean over its standard error, as standard deviations of a Gaussian: of few blocks Student's t says less.
///
/// - **Reference**: Wallace 1959, Ann. Math. Stat. 30, 1121: z = (8ν + 1)/(8ν + 3) · √(ν ln(1 + t²/ν)); from memory.
fn sure(gains: &[f64]) -> f64 {
    let n = gains.len() as f64;
    let sum: f64 = gains.iter().sum();
    let mean = sum / n;
    let squares: f64 = gains.iter().map(|g| (g - mean) * (g - mean)).sum();
    if gains.len() < 2 || squares <= 0.0 {
        return 0.0;
    }
    let freedom = n - 1.0;
    let t = sum / (squares * n / freedom).sqrt();
    let z = (freedom * (t * t / freedom).ln_1p()).sqrt();
    t.signum() * z * (8.0 * freedom + 1.0) / (8.0 * freedom + 3.0)
}

/// The course that fits best of those that are sure, or else of both; how sure, it says itself.
///
/// What lags leave of the variance is summed over blocks: for all blocks the lag that leaves least; for each stretch one
/// inside and one around it; for each drift one in the middle. The least of all is taken.
pub(super) fn course(fits: &Fits) -> Option<Course> {
    let stretch = stretch(fits).map(|(left, stretch)| (left, Course::Stretch(stretch)));
    let drift = drift(fits).map(|(left, drift)| (left, Course::Drift(drift)));
    let both = [stretch, drift].into_iter().flatten();
    let order = |(left, course): &(f64, Course)| (!course.is_sure(), *left);
    let best = both.min_by(|a, b| {
        let (a, b) = (order(a), order(b));
        a.0.cmp(&b.0).then(a.1.total_cmp(&b.1))
    });
    best.map(|(_, course)| course)
}

/// Number and value of the least.
fn least(values: &[f64]) -> Option<(usize, f64)> {
    let of = values.iter().copied().enumerate();
    of.min_by(|a, b| a.1.total_cmp(&b.1))
}

/// Place of the least, between the steps by a parabola.
fn place_of_least(values: &[f64]) -> Option<f64> {
    let (k, top) = least(values)?;
    let before = k.checked_sub(1).and_then(|k| values.get(k));
    let shift = before
        .zip(values.get(k + 1))
        .map_or(0.0, |(a, b)| parabola(*a, top, *b));
    Some(k as f64 + shift)
}

fn stretch(fits: &Fits) -> Option<(f64, ClockStretch)> {
    let n = fits.left.len();
    if n < 2 * LEAST {
        return None;
    }
    // Sums over the blocks before each.
    let mut before = vec![vec![0.0; fits.lags()]];
    for left in &fits.left {
        let last = before.last()?;
        before.push(last.iter().zip(left).map(|(a, b)| a + b).collect());
    }
    let inside = |i: usize, j: usize| -> Vec<f64> {
        before[j]
            .iter()
            .zip(&before[i])
            .map(|(a, b)| a - b)
            .collect()
    };
    let around = |i: usize, j: usize| -> Vec<f64> {
        let inner = before[n].iter().zip(before[j].iter().zip(&before[i]));
        inner.map(|(all, (a, b))| all - (a - b)).collect()
    };
    let mut best: Option<(f64, usize, usize)> = None;
    // One that begins with the record is one around which the other lies.
    for i in LEAST..=n - LEAST {
        for j in i + LEAST..=n {
            let left = least(&inside(i, j))?.1 + least(&around(i, j))?.1;
            if best.is_none_or(|b| left < b.0) {
                best = Some((left, i, j));
            }
        }
    }
    let (left, i, j) = best?;
    let (inner, outer) = (
        place_of_least(&inside(i, j))?,
        place_of_least(&around(i, j))?,
    );
    let gain = |block: usize, own: f64, other: f64| -> Option<f64> {
        Some(fits.at(block, other)? - fits.at(block, own)?)
    };
    let is_in = |block: &usize| (i..j).contains(block);
    let in_it: Vec<f64> = (i..j).filter_map(|b| gain(b, inner, outer)).collect();
    let out: Vec<f64> = (0..n)
        .filter(|b| !is_in(b))
        .filter_map(|b| gain(b, outer, inner))
        .collect();
    let stretch = ClockStretch {
        from: fits.times[i],
        between: [fits.times[i - 1], *fits.times.get(i + 1)?],
        to: fits.times.get(j).copied(),
        inside: fits.seconds(inner),
        outside: fits.seconds(outer),
        sure: sure(&in_it).min(sure(&out)),
    };
    Some((left, stretch))
}

fn drift(fits: &Fits) -> Option<(f64, ClockDrift)> {
    let (first, last) = (fits.times.first()?, fits.times.last()?);
    let seconds = |t: &Time| (t.micros() - first.micros()) as f64 * 1e-6;
    let length = seconds(last);
    if fits.left.len() < 2 * LEAST || length <= 0.0 {
        return None;
    }
    // Of the whole drift over the record each block has this share, from −½ to ½.
    let share: Vec<f64> = fits
        .times
        .iter()
        .map(|t| seconds(t) / length - 0.5)
        .collect();
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "some hundreds at most"
    )]
    let most = (LARGEST_DRIFT / fits.unit) as usize;
    let count = 2 * most + 1;
    let steps = |r: usize| r as f64 - most as f64;
    let lags = fits.lags();
    // By drift, then lag in the middle.
    let of_block = |b: usize, r: usize, k: usize| fits.at(b, k as f64 + share[b] * steps(r));
    let mut sums = vec![0.0; count * lags];
    for b in 0..fits.left.len() {
        for (cell, sum) in sums.iter_mut().enumerate() {
            *sum += of_block(b, cell / lags, cell % lags).unwrap_or(f64::INFINITY);
        }
    }
    let profile = |sums: &[f64]| -> Vec<f64> {
        let rows = sums.chunks(lags);
        rows.map(|row| row.iter().copied().fold(f64::INFINITY, f64::min))
            .collect()
    };
    let of_drifts = profile(&sums);
    let place = place_of_least(&of_drifts)?;
    let (row, left) = least(&of_drifts)?;
    let middle = place_of_least(&sums[row * lags..(row + 1) * lags])?;
    let (stays, _) = least(&sums[most * lags..(most + 1) * lags])?;
    let gain = |b: usize| {
        let with = fits.at(b, middle + share[b] * (place - most as f64))?;
        Some(fits.left[b][stays] - with)
    };
    let gains: Vec<f64> = (0..fits.left.len()).filter_map(gain).collect();
    let a_day = fits.unit * DAY / length;
    // A jackknife over blocks, in the neighbourhood of the best.
    let mut squares = 0.0;
    let near = row.saturating_sub(NEAR)..(row + NEAR + 1).min(count);
    for b in 0..fits.left.len() {
        let mut rest = Vec::with_capacity(near.len());
        for r in near.clone() {
            let row = sums[r * lags..(r + 1) * lags].iter().enumerate();
            let without = row.map(|(k, sum)| sum - of_block(b, r, k).unwrap_or(0.0));
            rest.push(without.fold(f64::INFINITY, f64::min));
        }
        let other = near.start as f64 + place_of_least(&rest)?;
        squares += (other - place).powi(2);
    }
    let n = fits.left.len() as f64;
    let error = (squares * (n - 1.0) / n).sqrt() * a_day;
    let drift = ClockDrift {
        rate: (place - most as f64) * a_day,
        // The drift is known no better than to part of a step.
        error: error.max(0.1 * a_day),
        middle: fits.seconds(middle),
        days: length / DAY + 1.0,
        sure: sure(&gains),
    };
    Some((left, drift))
}

/// Drifts on either side of the best that a jackknife tries.
const NEAR: usize = 12;

#[cfg(test)]
#[expect(clippy::unwrap_used, clippy::panic, reason = "a test may panic")]
#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "small numbers"
)]
mod tests {
    use super::*;

    /// Days whose variance is left but for a dip of half a step's width at the lag of each day, with some noise in its depth.
    fn fits(lag: impl Fn(f64) -> f64) -> Fits {
        let of_day = |day: u32| -> Vec<f64> {
            let depth = 0.5 + 0.1 * f64::from((day * 7) % 5);
            let lags = (0..313).map(|k| (f64::from(k) - 156.0) * 300.0);
            let off = lags.map(|l| (l - lag(f64::from(day))) / 1800.0);
            off.map(|x| 1.0 - depth * (-0.5 * x * x).exp()).collect()
        };
        Fits {
            left: (0..30).map(of_day).collect(),
            times: (0..30)
                .map(|d| Time::from_micros(d * 86_400_000_000))
                .collect(),
            middle: 156,
            unit: 300.0,
        }
    }

    #[test]
    fn an_hour_in_part_of_the_record_is_a_stretch() {
        let found = course(&fits(|d| {
            if (9.0..21.0).contains(&d) {
                3600.0
            } else {
                0.0
            }
        }));
        let Some(Course::Stretch(stretch)) = found else {
            panic!("{found:?}");
        };
        assert!(found.unwrap().is_sure(), "{stretch:?}");
        let day = |t: Time| t.micros() / 86_400_000_000;
        assert_eq!((day(stretch.from), stretch.to.map(day)), (9, Some(21)));
        assert!((stretch.inside - 3600.0).abs() < 30.0 && stretch.outside.abs() < 30.0);
    }

    #[test]
    fn two_minutes_a_day_are_a_drift() {
        let found = course(&fits(|d| 120.0 * (d - 14.5)));
        let Some(Course::Drift(drift)) = found else {
            panic!("{found:?}");
        };
        assert!(found.unwrap().is_sure(), "{drift:?}");
        assert!((drift.rate - 120.0).abs() < 3.0, "{drift:?}");
        assert!(drift.middle.abs() < 30.0);
    }

    #[test]
    fn few_blocks_are_less_sure() {
        // Table of Student's t: with 2, 9 and 29 degrees of freedom 4.303, 2.262 and 2.045 leave 2.5 % beyond; so does a
        // Gaussian's 1.960.
        for (freedom, t) in [(2.0_f64, 4.303), (9.0, 2.262), (29.0, 2.045)] {
            // Values ±1 about a mean have the standard error √((ν + 1)/ν)/√(ν + 1) = 1/√ν; so have −√1.5, 0, √1.5.
            let about = t / freedom.sqrt();
            let spread: Vec<f64> = if freedom < 3.0 {
                vec![-1.5_f64.sqrt(), 0.0, 1.5_f64.sqrt()]
            } else {
                [-1.0, 1.0].repeat((freedom as usize).div_ceil(2))
            };
            let values: Vec<f64> = spread.iter().map(|x| about + x).collect();
            assert!(
                (sure(&values) - 1.960).abs() < 0.05,
                "{freedom} {}",
                sure(&values)
            );
        }
    }

    #[test]
    fn a_lag_that_stays_has_no_course() {
        for lag in [0.0, 280.0, 3600.0] {
            assert!(course(&fits(|_| lag)).is_none_or(|c| !c.is_sure()));
        }
    }
}
