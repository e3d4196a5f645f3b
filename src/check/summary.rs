//! What a station sent: counts, period, interval, gaps, rounding.

use std::collections::BTreeMap;

use super::{Flag, Test};
use crate::align::vector::VectorMean;
use crate::report::{Content, ReportTable, Rounding};
use crate::time::Time;
use crate::units::Wind;

/// What a station sent, after the checks.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct StationReading {
    /// Reports, each station, time and level once.
    pub reports: u64,
    /// With speed and direction.
    pub wind: u64,
    /// Calm.
    pub calm: u64,
    /// With a speed but no direction.
    pub no_direction: u64,
    /// Without a speed.
    pub no_speed: u64,
    /// Passed all tests that could be made.
    pub passed: u64,
    /// Flagged suspect.
    pub suspect: u64,
    /// Flagged fail.
    pub failed: u64,
    /// For each test the reports that it found suspect and those that failed it (for gaps: before which one is).
    pub by_test: [(u64, u64); Test::ALL.len()],
    /// First and last report.
    pub period: Option<(Time, Time)>,
    /// The usual time between reports, μs.
    pub interval: Option<i64>,
    /// Times between reports of more than one and a half intervals.
    pub gaps: u64,
    /// Reports that would have filled them.
    pub missing_in_gaps: u64,
    /// Steps found in its reports.
    pub rounding: Rounding,
    /// Mean of the speeds (scalar mean) of the winds and calms that did not fail, m/s.
    pub mean_speed: Option<f64>,
    /// Their vector mean.
    pub vector_mean: Option<Wind>,
}

/// Sums up the reports of one station as they come, window after window.
#[derive(Debug, Clone, Default)]
pub struct StationSums {
    /// Counts and times; the rest is filled in at the end.
    counts: StationReading,
    mean: VectorMean,
    steps: Steps,
}

impl StationReading {
    /// Share of the reports that passed, were suspect and failed.
    #[must_use]
    pub fn shares(&self) -> [f64; 3] {
        let all = self.reports.max(1) as f64;
        [self.passed, self.suspect, self.failed].map(|n| n as f64 / all)
    }

    /// Suspect and failed reports of a test.
    #[must_use]
    pub fn of_test(&self, test: Test) -> (u64, u64) {
        self.by_test[test as usize]
    }
}

impl StationSums {
    /// Takes in the new reports of the station in a table.
    pub fn add(&mut self, table: &ReportTable, station: usize) {
        let reports = table.fresh(station);
        let counts = &mut self.counts;
        counts.reports += reports.len() as u64;
        for i in reports.clone() {
            match table.content(i) {
                Content::Wind => counts.wind += 1,
                Content::Calm => counts.calm += 1,
                Content::SpeedOnly => counts.no_direction += 1,
                Content::Nothing => counts.no_speed += 1,
            }
            match table.flag(i) {
                Flag::Pass => counts.passed += 1,
                Flag::Suspect => counts.suspect += 1,
                Flag::Fail => counts.failed += 1,
                Flag::NotEvaluated | Flag::Missing => {}
            }
            if table.tests(i).any_raised() {
                for (test, sums) in Test::ALL.into_iter().zip(&mut counts.by_test) {
                    match table.tests(i).get(test) {
                        Flag::Suspect => sums.0 += 1,
                        Flag::Fail | Flag::Missing => sums.1 += 1,
                        _ => {}
                    }
                }
            }
            let is_wind = matches!(table.content(i), Content::Wind | Content::Calm);
            if is_wind && table.flag(i) != Flag::Fail {
                self.mean
                    .add(table.winds()[i], table.speed(i).unwrap_or(0.0));
            }
        }
        for &time in &table.times()[reports] {
            let (first, last) = counts.period.get_or_insert((time, time));
            self.steps.add(time.micros() - last.micros());
            (*first, *last) = (time.min(*first), time);
        }
    }

    /// What the reports come to, with the steps that were found in them.
    #[must_use]
    pub fn reading(&self, rounding: Rounding) -> StationReading {
        let mut reading = StationReading {
            rounding,
            mean_speed: self.mean.scalar_mean_speed(),
            vector_mean: self.mean.wind(),
            interval: self.steps.usual(),
            ..self.counts.clone()
        };
        if let Some(interval) = reading.interval {
            for (step, n) in self.steps.longer_than(interval + interval / 2) {
                reading.gaps += n;
                // The nearest whole number of intervals, less the one that is there.
                let missing = (2 * step + interval) / (2 * interval) - 1;
                reading.missing_in_gaps += n * u64::try_from(missing).unwrap_or(0);
            }
        }
        reading
    }
}

/// Different times between reports that are told apart.
const STEPS_KEPT: usize = 4096;

/// How often each time between successive reports occurs, μs; reports on several levels at one time count once.
#[derive(Debug, Clone, Default)]
struct Steps {
    counts: BTreeMap<i64, u64>,
    /// The last step and how often it came in a row.
    run: (i64, u64),
}

impl Steps {
    fn add(&mut self, step: i64) {
        if step == self.run.0 {
            self.run.1 += 1;
        } else if step > 0 {
            put(&mut self.counts, self.run);
            self.run = (step, 1);
        }
    }

    fn all(&self) -> BTreeMap<i64, u64> {
        let mut counts = self.counts.clone();
        put(&mut counts, self.run);
        counts
    }

    /// The most frequent; of several the shortest.
    fn usual(&self) -> Option<i64> {
        let counts = self.all();
        let most = counts.values().copied().max()?;
        let mut steps = counts.into_iter();
        steps.find(|&(_, n)| n == most).map(|(step, _)| step)
    }

    fn longer_than(&self, shortest: i64) -> impl Iterator<Item = (i64, u64)> {
        self.all()
            .into_iter()
            .filter(move |&(step, _)| step > shortest)
    }
}

/// Counts a step `n` times; where there is no room for another step, with the next longer one, or the longest.
fn put(counts: &mut BTreeMap<i64, u64>, (step, n): (i64, u64)) {
    if n == 0 || step <= 0 {
        return;
    }
    let known = if counts.len() < STEPS_KEPT || counts.contains_key(&step) {
        step
    } else {
        let longer = counts.range(step..).next();
        longer.or(counts.last_key_value()).map_or(step, |k| *k.0)
    };
    *counts.entry(known).or_default() += n;
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_usual_interval_and_the_gaps() {
        let mut steps = Steps::default();
        for step in [0, 5, 5, 15, 5, 0, 6] {
            steps.add(step * 60_000_000);
        }
        assert_eq!(steps.usual(), Some(300_000_000));
        let longer: Vec<(i64, u64)> = steps.longer_than(450_000_000).collect();
        assert_eq!(longer, [(900_000_000, 1)]);
        assert_eq!(Steps::default().usual(), None);
    }

    #[test]
    fn steps_of_any_number_take_no_more_room() {
        let mut steps = Steps::default();
        for step in 1..20_000 {
            steps.add(step * 1_000);
        }
        assert!(steps.all().len() <= STEPS_KEPT + 1);
        assert_eq!(steps.all().values().sum::<u64>(), 19_999);
    }
}
