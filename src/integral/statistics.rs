//! What a polygon's values come to over a run.

use std::ops::Range;

use super::{ErrorParts, EstimateBlock, MeanError, lanes};
use crate::check::Flag;
use crate::time::Time;

/// Statistics of the values of one quantity of one polygon.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Statistics {
    /// Values.
    pub count: u64,
    /// Their mean, 1/s.
    pub mean: f64,
    /// Sum of the squared differences from the mean, 1/s².
    squares: f64,
    /// What the errors of the values come to.
    pub error: MeanError,
    /// Values called different from 0.
    pub significant: u64,
    /// Smallest value and its time.
    pub smallest: Option<(f64, Time)>,
    /// Largest value and its time.
    pub largest: Option<(f64, Time)>,
}

impl Statistics {
    /// Those of values with their times, all of one length.
    #[expect(
        clippy::inline_always,
        reason = "it must become part of the caller's vector code"
    )]
    #[inline(always)]
    #[must_use]
    pub fn of(values: &[f64], times: &[Time], significant: u64, error: MeanError) -> Self {
        let count = values.len() as f64;
        let (Some((least, first)), Some((most, last))) = (
            lanes::strongest(values, -1.0),
            lanes::strongest(values, 1.0),
        ) else {
            return Self::default();
        };
        let mean = lanes::sum(values, |value| value) / count;
        Self {
            count: values.len() as u64,
            mean,
            squares: lanes::sum(values, |value| (value - mean) * (value - mean)),
            error,
            significant,
            smallest: times.get(first).map(|&time| (-least, time)),
            largest: times.get(last).map(|&time| (most, time)),
        }
    }

    /// Takes in the statistics of later values.
    pub fn merge(&mut self, later: &Self) {
        if later.count == 0 {
            return;
        }
        // Chan, Golub & LeVeque 1983, Am. Stat. 37, 242.
        let (a, b) = (self.count as f64, later.count as f64);
        let difference = later.mean - self.mean;
        self.mean += difference * b / (a + b);
        self.squares += later.squares + difference * difference * a * b / (a + b);
        self.error.merge(&later.error);
        self.count += later.count;
        self.significant += later.significant;
        self.smallest = match (self.smallest, later.smallest) {
            (Some(a), Some(b)) if a.0 <= b.0 => Some(a),
            (a, b) => b.or(a),
        };
        self.largest = match (self.largest, later.largest) {
            (Some(a), Some(b)) if a.0 >= b.0 => Some(a),
            (a, b) => b.or(a),
        };
    }

    /// Standard deviation of the values (n − 1), 1/s.
    #[must_use]
    pub fn standard_deviation(&self) -> Option<f64> {
        (self.count > 1).then(|| (self.squares / (self.count - 1) as f64).sqrt())
    }

    /// Standard error of the mean, 1/s ([`MeanError`]).
    #[must_use]
    pub fn mean_error(&self) -> Option<f64> {
        self.error.standard_error()
    }
}

/// Those of a column that are not flagged worse than suspect.
fn good<T: Copy>(column: &[T], flags: &[Flag]) -> Vec<T> {
    let pairs = column.iter().zip(flags);
    let good = pairs.filter(|&(_, &flag)| flag < Flag::Fail);
    good.map(|(&value, _)| value).collect()
}

/// Statistics of all polygons: vorticity and divergence of the values that passed or were not flagged worse than
/// suspect.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct RunStatistics {
    /// For each polygon its vorticity.
    pub vorticity: Vec<Statistics>,
    /// For each polygon its divergence.
    pub divergence: Vec<Statistics>,
}

impl RunStatistics {
    /// Those of a block, whose errors are complete. `lasting` says for each polygon how long the errors of sampling and
    /// timing last, s.
    #[must_use]
    pub fn of(block: &EstimateBlock, lasting: &[f64]) -> Self {
        Self::of_times(block, lasting, 0..block.times.len())
    }

    /// Those of a part of its times.
    #[must_use]
    pub fn of_times(block: &EstimateBlock, lasting: &[f64], times: Range<usize>) -> Self {
        // With the widest vectors that the processor has.
        pulp::Arch::new().dispatch(|| Self::of_columns(block, lasting, times.clone()))
    }

    #[expect(
        clippy::inline_always,
        reason = "it must become part of the caller's vector code"
    )]
    #[inline(always)]
    fn of_columns(block: &EstimateBlock, lasting: &[f64], part: Range<usize>) -> Self {
        let n = block.times.len();
        let mut out = Self::default();
        let [vorticity, divergence] = &block.significant;
        for (polygon, &lasting) in lasting.iter().enumerate() {
            let cells = polygon * n + part.start..polygon * n + part.end;
            let flags = &block.flag[cells.clone()];
            let all_good = flags.iter().all(|&flag| flag < Flag::Fail);
            let of = |values: &[f64], parts: &ErrorParts, significant: &[bool]| {
                let called = significant[cells.clone()].iter().map(|&s| u64::from(s));
                let called = called.sum();
                let columns = [values, &parts.instrument, &parts.sampling, &parts.timing];
                let columns = columns.map(|column| &column[cells.clone()]);
                let statistics = |[values, own, sampling, timing]: [&[f64]; 4], times: &[Time]| {
                    let error = MeanError::of_column(lasting, times, own, [sampling, timing]);
                    Statistics::of(values, times, called, error)
                };
                if all_good {
                    return statistics(columns, &block.times[part.clone()]);
                }
                let columns = columns.map(|column| good(column, flags));
                let columns: [&[f64]; 4] = std::array::from_fn(|k| columns[k].as_slice());
                statistics(columns, &good(&block.times[part.clone()], flags))
            };
            let budget = &block.budget;
            out.vorticity
                .push(of(&block.vorticity, &budget.vorticity, vorticity));
            out.divergence
                .push(of(&block.divergence, &budget.divergence, divergence));
        }
        out
    }

    /// Takes in those of a later block.
    pub fn merge(&mut self, later: &Self) {
        let merge = |all: &mut Vec<Statistics>, later: &[Statistics]| {
            all.resize(all.len().max(later.len()), Statistics::default());
            for (a, b) in all.iter_mut().zip(later) {
                a.merge(b);
            }
        };
        merge(&mut self.vorticity, &later.vorticity);
        merge(&mut self.divergence, &later.divergence);
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    /// NumPy 2.4: x = [3, 1, 4, 1, 5, 9, 2, 6] * 1e-5; x.mean() = 3.875e-5, x.std(ddof=1) = 2.748376143938713e-05.
    #[test]
    fn merged_parts_equal_the_whole() {
        let values = [3.0, 1.0, 4.0, 1.0, 5.0, 9.0, 2.0, 6.0].map(|x| x * 1e-5);
        let times: Vec<Time> = (0..8).map(|k| Time::from_micros(k * 1_000_000)).collect();
        let of = |part: std::ops::Range<usize>| {
            let errors = vec![2e-5; part.len()];
            let passing = vec![1e-5; part.len()];
            let times = &times[part.clone()];
            let error = MeanError::of_column(3.0, times, &errors, [&passing, &passing]);
            Statistics::of(&values[part.clone()], times, part.len() as u64 / 2, error)
        };
        let whole = of(0..8);
        let mut merged = Statistics::default();
        for part in [0..2, 2..6, 6..8] {
            merged.merge(&of(part));
        }
        assert!((merged.mean - 3.875e-5).abs() < 1e-18);
        let deviation = merged.standard_deviation().unwrap();
        assert!(
            (deviation - 2.748_376_143_938_713e-5).abs() < 1e-18,
            "{deviation:e}"
        );
        assert!((whole.standard_deviation().unwrap() - deviation).abs() < 1e-18);
        let (parts, one) = (merged.mean_error().unwrap(), whole.mean_error().unwrap());
        assert!((parts - one).abs() < 1e-15, "{parts:e} {one:e}");
        assert!(one > 2e-5 && one < 3e-5, "{one:e}");
        assert_eq!((merged.count, merged.significant), (8, 4));
        assert_eq!(merged.smallest.unwrap().1, times[1]);
        assert_eq!(merged.largest.unwrap().1, times[5]);
        assert_eq!(whole.smallest, merged.smallest);
    }
}
