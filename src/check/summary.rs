//! What a station sent: counts, period, interval, gaps, rounding.

use std::collections::BTreeMap;

use super::Flag;
use crate::align::vector::VectorMean;
use crate::report::{Content, ReportTable, Rounding, find_rounding};
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
    /// Flagged suspect.
    pub suspect: u64,
    /// Flagged fail.
    pub failed: u64,
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

/// Sums up the reports of a station.
#[must_use]
pub fn summarise(table: &ReportTable, station: usize) -> StationReading {
    let reports = table.of_station(station);
    let mut reading = StationReading {
        reports: reports.len() as u64,
        rounding: find_rounding(table, station),
        ..StationReading::default()
    };
    let mut mean = VectorMean::default();
    for i in reports.clone() {
        match table.content(i) {
            Content::Wind => reading.wind += 1,
            Content::Calm => reading.calm += 1,
            Content::SpeedOnly => reading.no_direction += 1,
            Content::Nothing => reading.no_speed += 1,
        }
        match table.flag(i) {
            Flag::Suspect => reading.suspect += 1,
            Flag::Fail => reading.failed += 1,
            _ => {}
        }
        if let Some(wind) = table.wind(i).filter(|_| table.flag(i) != Flag::Fail) {
            mean.add(wind);
        }
    }
    let times = &table.times()[reports];
    reading.period = times.first().copied().zip(times.last().copied());
    reading.interval = usual_interval(times);
    if let Some(interval) = reading.interval {
        for step in steps(times).filter(|step| 2 * step > 3 * interval) {
            reading.gaps += 1;
            // The nearest whole number of intervals, less the one that is there.
            reading.missing_in_gaps +=
                u64::try_from((2 * step + interval) / (2 * interval) - 1).unwrap_or(0);
        }
    }
    reading.mean_speed = mean.scalar_mean_speed();
    reading.vector_mean = mean.wind();
    reading
}

/// Times between successive reports, μs; reports on several levels at one time count once.
fn steps(times: &[Time]) -> impl Iterator<Item = i64> {
    times
        .windows(2)
        .map(|pair| pair[1].micros() - pair[0].micros())
        .filter(|&step| step > 0)
}

/// The most frequent time between reports; of several the shortest.
fn usual_interval(times: &[Time]) -> Option<i64> {
    let mut counts: BTreeMap<i64, u64> = BTreeMap::new();
    for step in steps(times) {
        *counts.entry(step).or_default() += 1;
    }
    let most = counts.values().copied().max()?;
    counts
        .into_iter()
        .find(|&(_, n)| n == most)
        .map(|(step, _)| step)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(minutes: &[i64]) -> Vec<Time> {
        minutes
            .iter()
            .map(|m| Time::from_micros(m * 60_000_000))
            .collect()
    }

    #[test]
    fn the_usual_interval_and_the_gaps() {
        let times = at(&[0, 5, 10, 25, 30, 30, 36]);
        assert_eq!(usual_interval(&times), Some(300_000_000));
        assert_eq!(usual_interval(&at(&[3])), None);
        assert_eq!(steps(&times).collect::<Vec<_>>().len(), 5);
    }
}
