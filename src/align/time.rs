//! Analysis times.

use std::ops::Range;

use crate::settings::{AlignMethod, Analysis};
use crate::time::{Time, micros_of};

/// Analysis times: whole multiples of the interval since 1970-01-01T00:00:00Z at which at least one station has a
/// value. A stray report of another year thus costs one time, not a year of empty ones.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct TimeGrid {
    /// μs
    interval: i64,
    /// Runs of multiples, first and last, in order and apart.
    runs: Vec<(i64, i64)>,
}

/// Runs of multiples of the interval, first and last, within `multiples` and the period, at which a station has a value
/// whose reports have these times, in ascending order.
pub(super) fn served_runs(
    times: impl Iterator<Item = Time>,
    analysis: &Analysis,
    multiples: &Range<i64>,
) -> Vec<(i64, i64)> {
    let interval = interval_of(analysis);
    // Spans of instants that a report at `time` serves, for a line together with the one `before` it.
    let served = |before: Option<i64>, time: i64| match analysis.method {
        AlignMethod::Nearest { tolerance } => {
            let reach = micros_of(tolerance).min(interval / 2);
            [Some((time - reach, time + reach)), None]
        }
        AlignMethod::Linear { tolerance } => {
            let reach = micros_of(tolerance);
            let between = before.map(|b| (b.max(time - reach), time.min(b + reach)));
            [
                between.filter(|(start, end)| start <= end),
                Some((time, time)),
            ]
        }
        // The window is open at its start: (t - window, t].
        AlignMethod::VectorMean { window, .. } => {
            let reach = micros_of(window).min(interval) - 1;
            [Some((time, time + reach)), None]
        }
    };
    let first = analysis
        .from
        .map_or(i64::MIN, |t| ceil_div(t.micros(), interval))
        .max(multiples.start);
    let last = analysis
        .to
        .map_or(i64::MAX, |t| t.micros().div_euclid(interval))
        .min(multiples.end - 1);

    let mut runs: Vec<(i64, i64)> = Vec::new();
    let mut open: Option<(i64, i64)> = None;
    let mut before = None;
    for time in times.map(Time::micros) {
        for (start, end) in served(before, time).into_iter().flatten() {
            // The usual report serves the next multiple alone: no division.
            if let Some((_, high)) = &mut open {
                let next = (*high + 1) * interval;
                if start > next - interval && start <= next && end >= next && end < next + interval
                {
                    *high += i64::from(*high < last);
                    continue;
                }
            }
            let low = ceil_div(start, interval).max(first);
            let high = end.div_euclid(interval).min(last);
            if low > high {
                continue;
            }
            open = match open {
                Some((start, end)) if low <= end + 1 => Some((start, end.max(high))),
                Some(run) => {
                    runs.push(run);
                    Some((low, high))
                }
                None => Some((low, high)),
            };
        }
        before = Some(time);
    }
    runs.extend(open);
    runs
}

fn interval_of(analysis: &Analysis) -> i64 {
    micros_of(analysis.interval).max(1)
}

impl TimeGrid {
    /// The times of these runs of multiples, in any order, which may overlap.
    pub(super) fn new(analysis: &Analysis, mut runs: Vec<(i64, i64)>) -> Self {
        let interval = interval_of(analysis);
        runs.sort_unstable();
        let mut merged: Vec<(i64, i64)> = Vec::new();
        for (low, high) in runs {
            match merged.last_mut() {
                Some(run) if low <= run.1 + 1 => run.1 = run.1.max(high),
                _ => merged.push((low, high)),
            }
        }
        Self {
            interval,
            runs: merged,
        }
    }

    /// Number of analysis times.
    #[must_use]
    pub fn len(&self) -> usize {
        let lengths = self.runs.iter().map(|&(low, high)| high - low + 1);
        lengths
            .map(|n| usize::try_from(n).unwrap_or(usize::MAX))
            .sum()
    }

    /// True if there is none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.runs.is_empty()
    }

    /// First analysis time.
    #[must_use]
    pub fn first(&self) -> Option<Time> {
        self.runs.first().map(|run| self.time(run.0))
    }

    /// Last analysis time.
    #[must_use]
    pub fn last(&self) -> Option<Time> {
        self.runs.last().map(|run| self.time(run.1))
    }

    /// Times between the first and the last at which no station has a value.
    #[must_use]
    pub fn empty_times(&self) -> u64 {
        self.runs
            .windows(2)
            .map(|w| u64::try_from(w[1].0 - w[0].1 - 1).unwrap_or(0))
            .sum()
    }

    /// The times, cut into blocks at multiples of `block_times` intervals since 1970.
    #[must_use]
    pub fn blocks(&self, block_times: usize) -> Vec<Vec<Time>> {
        let block_times = i64::try_from(block_times.max(1)).unwrap_or(i64::MAX);
        let mut blocks: Vec<Vec<Time>> = Vec::new();
        let mut last = None;
        for k in self.runs.iter().flat_map(|&(low, high)| low..=high) {
            let number = k.div_euclid(block_times);
            if last != Some(number) {
                blocks.push(Vec::new());
                last = Some(number);
            }
            if let Some(block) = blocks.last_mut() {
                block.push(self.time(k));
            }
        }
        blocks
    }

    /// How many multiples of the interval lie between two of them.
    #[must_use]
    pub fn steps_between(&self, before: Time, after: Time) -> u64 {
        let steps = (after.micros() - before.micros()) / self.interval - 1;
        u64::try_from(steps).unwrap_or(0)
    }

    /// From `time` to the nearest analysis time, μs.
    #[must_use]
    pub fn distance(&self, time: Time) -> i64 {
        let next = self.until_next(time);
        let k = self
            .runs
            .partition_point(|run| run.0 * self.interval <= time.micros());
        let since = self.runs.get(k.wrapping_sub(1)).map_or(i64::MAX, |run| {
            let last = run.1.min(time.micros().div_euclid(self.interval));
            time.micros() - last * self.interval
        });
        next.min(since)
    }

    /// From `time` to the first analysis time at or after it, μs.
    #[must_use]
    pub fn until_next(&self, time: Time) -> i64 {
        let k = self
            .runs
            .partition_point(|run| run.1 * self.interval < time.micros());
        self.runs.get(k).map_or(i64::MAX, |run| {
            run.0.max(ceil_div(time.micros(), self.interval)) * self.interval - time.micros()
        })
    }

    fn time(&self, multiple: i64) -> Time {
        Time::from_micros(multiple * self.interval)
    }
}

fn ceil_div(a: i64, b: i64) -> i64 {
    a.div_euclid(b) + i64::from(a.rem_euclid(b) > 0)
}
