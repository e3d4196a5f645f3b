//! Observed scalars at analysis times.

use super::{Aligner, on_level};
use crate::report::SCALARS;
use crate::settings::AlignMethod;
use crate::time::{Time, micros_of};

/// Scalars of all stations at a run of analysis times.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct ScalarBlock {
    stations: usize,
    times: usize,
    /// Scalars × stations × times.
    values: Vec<Option<f64>>,
}

impl ScalarBlock {
    /// A block without values.
    #[must_use]
    pub fn empty(scalars: usize, stations: usize, times: usize) -> Self {
        Self {
            stations,
            times,
            values: vec![None; scalars * stations * times],
        }
    }

    /// A scalar of a station at all times.
    #[must_use]
    pub fn of_station(&self, scalar: usize, station: usize) -> &[Option<f64>] {
        let start = (scalar * self.stations + station) * self.times;
        self.values
            .get(start..start + self.times)
            .unwrap_or_default()
    }

    /// Sets a scalar of a station at a time.
    pub fn set(&mut self, scalar: usize, station: usize, time: usize, value: Option<f64>) {
        let cell = (scalar * self.stations + station) * self.times + time;
        self.values[cell] = value;
    }
}

impl Aligner<'_> {
    /// The first `scalars` scalars at the analysis times of one block: by the method of the winds, from all reports that have
    /// them, whatever is said of their wind. No test looks at them.
    #[must_use]
    pub fn scalars(&self, times: &[Time], scalars: usize) -> ScalarBlock {
        let stations = self.table.stations();
        let scalars = scalars.min(SCALARS);
        let mut block = ScalarBlock::empty(scalars, stations, times.len());
        let (Some(first), Some(last)) = (times.first(), times.last()) else {
            return block;
        };
        let reach = match self.method {
            AlignMethod::Nearest { tolerance } | AlignMethod::Linear { tolerance } => tolerance,
            AlignMethod::VectorMean { window, .. } => window,
        };
        let reach = micros_of(reach);
        let (from, until) = (
            first.micros().saturating_sub(reach),
            last.micros().saturating_add(reach),
        );
        let mut series: Vec<(i64, f64)> = Vec::new();
        for station in 0..stations {
            let reports = self.table.of_station_from(station, Time::from_micros(from));
            for scalar in 0..scalars {
                series.clear();
                let near = reports
                    .clone()
                    .map(|i| (self.table.times()[i].micros(), i))
                    .take_while(|&(time, _)| time <= until);
                series.extend(near.filter_map(|(time, i)| {
                    let value = self.table.scalar(i, scalar)?;
                    on_level(self.table, i, self.level).then_some((time, value))
                }));
                if series.is_empty() {
                    continue;
                }
                for (t, at) in times.iter().enumerate() {
                    let value = value_at(&series, at.micros(), self.method);
                    block.set(scalar, station, t, value);
                }
            }
        }
        block
    }
}

/// The value of a series, in the order of time, at a time.
fn value_at(series: &[(i64, f64)], at: i64, method: AlignMethod) -> Option<f64> {
    let after = series.partition_point(|&(time, _)| time <= at);
    let before = after.checked_sub(1).and_then(|k| series.get(k));
    let next = series.get(after);
    match method {
        AlignMethod::Nearest { tolerance } => {
            let tolerance = micros_of(tolerance);
            let near = |&&(time, _): &&(i64, f64)| time.abs_diff(at) <= tolerance.unsigned_abs();
            let (before, next) = (before.filter(near), next.filter(near));
            match (before, next) {
                // Of two as near as each other the earlier, as with winds.
                (Some(b), Some(n)) if n.0 - at < at - b.0 => Some(n.1),
                (before, next) => before.or(next).map(|&(_, value)| value),
            }
        }
        AlignMethod::Linear { tolerance } => {
            let tolerance = micros_of(tolerance);
            let &(start, from) = before.filter(|b| at - b.0 <= tolerance)?;
            if start == at {
                return Some(from);
            }
            let &(end, to) = next.filter(|n| n.0 - at <= tolerance)?;
            let share = (at - start) as f64 / (end - start) as f64;
            Some(from + share * (to - from))
        }
        AlignMethod::VectorMean {
            window,
            least_reports,
        } => {
            let low = at - micros_of(window);
            let first = series.partition_point(|&(time, _)| time <= low);
            let inside = series.get(first..after)?;
            let enough = inside.len() >= (least_reports as usize).max(1);
            let sum: f64 = inside.iter().map(|&(_, value)| value).sum();
            enough.then(|| sum / inside.len() as f64)
        }
    }
}

#[cfg(test)]
mod tests {
    use std::time::Duration;

    use super::*;

    #[test]
    fn by_the_method_of_the_winds() {
        let second = 1_000_000;
        let series = [(0, 10.0), (60 * second, 16.0), (120 * second, 4.0)];
        let s = |n: u64| Duration::from_secs(n);
        let nearest = |at: i64| {
            let method = AlignMethod::Nearest { tolerance: s(30) };
            value_at(&series, at * second, method)
        };
        assert_eq!(nearest(20), Some(10.0));
        assert_eq!(nearest(30), Some(10.0));
        assert_eq!(nearest(31), Some(16.0));
        assert_eq!((nearest(150), nearest(151)), (Some(4.0), None));
        let linear = |at: i64, tolerance| {
            let method = AlignMethod::Linear {
                tolerance: s(tolerance),
            };
            value_at(&series, at * second, method)
        };
        assert_eq!(linear(20, 60), Some(12.0));
        assert_eq!(linear(60, 60), Some(16.0));
        assert_eq!(linear(20, 30), None);
        assert_eq!(linear(121, 60), None);
        let mean = |at: i64, least_reports| {
            let method = AlignMethod::VectorMean {
                window: s(120),
                least_reports,
            };
            value_at(&series, at * second, method)
        };
        // The window is open at its start.
        assert_eq!(mean(120, 2), Some(10.0));
        assert_eq!(mean(119, 2), Some(13.0));
        assert_eq!(mean(120, 3), None);
    }
}
