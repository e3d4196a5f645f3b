//! Means by hour of the day, calendar day, month, or named period.

use std::collections::BTreeMap;
use std::ops::Range;

use chrono::{DateTime, Datelike, FixedOffset, NaiveDateTime, TimeDelta, Timelike};

use super::{EstimateBlock, RunStatistics};
use crate::input::Zone;
use crate::settings::{MeansBy, MeansSettings};
use crate::time::Time;

/// Times that are averaged together, in the order of the output.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Group {
    /// Hour of the day, 0 to 23.
    Hour(u32),
    /// Year and month.
    Month(i32, u32),
    /// Year, month and day.
    Day(i32, u32, u32),
    /// Number of the named period.
    Period(usize),
}

/// Statistics of each polygon over each group of times.
///
/// The mean of a group has the error of [`super::MeanError`]: errors of instruments persist, those of sampling and timing
/// last as long as the wind between the stations does, over the gaps between the parts of a group too. It says how well
/// the mean of these very times is known; weather of other days differs, by the standard deviation.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct GroupMeans(pub BTreeMap<Group, RunStatistics>);

impl GroupMeans {
    /// Those of a block; `lasting` as in [`RunStatistics::of`].
    #[must_use]
    pub fn of(block: &EstimateBlock, lasting: &[f64], settings: &MeansSettings) -> Self {
        let mut out = Self::default();
        for (group, times) in groups_of(&block.times, settings) {
            let part = RunStatistics::of_times(block, lasting, times);
            out.0.entry(group).or_default().merge(&part);
        }
        out
    }

    /// Takes in those of a later block.
    pub fn merge(&mut self, later: &Self) {
        for (&group, statistics) in &later.0 {
            self.0.entry(group).or_default().merge(statistics);
        }
    }
}

/// Runs of times that belong to one group, in the order of time; those of named periods may overlap. None if no means are
/// asked for.
#[must_use]
pub fn groups_of(times: &[Time], settings: &MeansSettings) -> Vec<(Group, Range<usize>)> {
    let Some(by) = settings.by else {
        return Vec::new();
    };
    let mut out = Vec::new();
    if by == MeansBy::Period {
        for (k, period) in settings.periods.iter().enumerate() {
            let before = times.partition_point(|&t| t < period.from);
            let until = times.partition_point(|&t| t <= period.to);
            out.push((Group::Period(k), before..until.max(before)));
        }
    } else {
        let group = |time: Time| {
            let local = local_time(time, settings.zone);
            match by {
                MeansBy::Day => Group::Day(local.year(), local.month(), local.day()),
                MeansBy::Month => Group::Month(local.year(), local.month()),
                MeansBy::Hour | MeansBy::Period => Group::Hour(local.hour()),
            }
        };
        let groups: Vec<Group> = times.iter().map(|&t| group(t)).collect();
        let mut start = 0;
        for run in groups.chunk_by(|a, b| a == b) {
            out.push((run[0], start..start + run.len())); // a run has a first
            start += run.len();
        }
    }
    out.retain(|(_, times)| !times.is_empty());
    out
}

/// What the clock of a zone shows.
fn local_time(time: Time, zone: Zone) -> NaiveDateTime {
    let utc = DateTime::from_timestamp_micros(time.micros()).unwrap_or_default();
    match zone {
        Zone::Named(zone) => utc.with_timezone(&zone).naive_local(),
        Zone::Fixed(offset) => match FixedOffset::east_opt(offset) {
            Some(offset) => utc.with_timezone(&offset).naive_local(),
            None => utc.naive_utc() + TimeDelta::seconds(i64::from(offset)),
        },
        Zone::InText => utc.naive_utc(),
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    #[test]
    fn clocks_of_zones() {
        let time = Time::parse_rfc3339("2031-06-30T23:30:00Z").unwrap();
        let of = |zone: &str| local_time(time, Zone::parse(zone).unwrap()).to_string();
        assert_eq!(of("UTC"), "2031-06-30 23:30:00");
        assert_eq!(of("+08:00"), "2031-07-01 07:30:00");
        // Daylight time, four hours behind UTC.
        assert_eq!(of("America/New_York"), "2031-06-30 19:30:00");
    }
}
