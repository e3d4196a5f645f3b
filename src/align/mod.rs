//! From reports at their own times to winds of all stations at analysis times.
//!
//! A [`WindBlock`] holds the winds of a run of analysis times, station-major: all times of a station lie side by side,
//! so that later stages work on whole columns.

mod instrument;
mod time;
pub mod vector;

use crate::check::Flag;
use crate::report::{Content, ReportTable};
use crate::settings::{AlignMethod, Analysis, SensorErrors};
use crate::tally::{Reason, Tally};
use crate::time::{Time, micros_of};
use crate::units::Wind;

pub use instrument::{Covariance, instrument_covariance};
pub use time::TimeGrid;

/// Analysis times in one block. A triangle's columns then take about 30 kB: they stay in the first-level cache.
pub const BLOCK_TIMES: usize = 256;

/// Winds of all stations at a run of analysis times.
///
/// Columns have the shape stations × times; the value of station `s` at time `t` stands at `s * times.len() + t`.
/// Where the flag is [`Flag::Missing`] the value is 0 and means nothing.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct WindBlock {
    /// The analysis times.
    pub times: Vec<Time>,
    /// Component towards east, m/s.
    pub u: Vec<f64>,
    /// Component towards north, m/s.
    pub v: Vec<f64>,
    /// Instrument variance of u, m²/s².
    pub var_u: Vec<f64>,
    /// Instrument covariance of u and v, m²/s².
    pub cov_uv: Vec<f64>,
    /// Instrument variance of v, m²/s².
    pub var_v: Vec<f64>,
    /// Worst flag of the reports behind the value.
    pub flag: Vec<Flag>,
}

impl WindBlock {
    /// A block without values.
    #[must_use]
    pub fn empty(times: Vec<Time>, stations: usize) -> Self {
        let cells = times.len() * stations;
        Self {
            times,
            u: vec![0.0; cells],
            v: vec![0.0; cells],
            var_u: vec![0.0; cells],
            cov_uv: vec![0.0; cells],
            var_v: vec![0.0; cells],
            flag: vec![Flag::Missing; cells],
        }
    }

    /// Sets the value of a station at a time of the block.
    pub fn set(
        &mut self,
        station: usize,
        time: usize,
        wind: Wind,
        covariance: Covariance,
        flag: Flag,
    ) {
        let cell = station * self.times.len() + time;
        self.u[cell] = wind.u;
        self.v[cell] = wind.v;
        self.var_u[cell] = covariance.uu;
        self.cov_uv[cell] = covariance.uv;
        self.var_v[cell] = covariance.vv;
        self.flag[cell] = flag;
    }

    /// The cells of one station.
    #[must_use]
    pub fn of_station(&self, station: usize) -> std::ops::Range<usize> {
        station * self.times.len()..(station + 1) * self.times.len()
    }
}

/// Aligns reports to analysis times, block by block in the order of time.
pub struct Aligner<'a> {
    table: &'a ReportTable,
    method: AlignMethod,
    sensor: SensorErrors,
    grid: TimeGrid,
    next: usize,
    /// Reports that carry a wind and did not fail, by station.
    usable: Vec<u32>,
    starts: Vec<usize>,
    /// For each station the first report of `usable` that still matters.
    cursor: Vec<usize>,
    used: Vec<bool>,
    values: Vec<u64>,
}

impl<'a> Aligner<'a> {
    /// Prepares the analysis times, those of the period at which any station has a value.
    #[must_use]
    pub fn new(table: &'a ReportTable, analysis: &Analysis, sensor: SensorErrors) -> Self {
        let mut usable = Vec::new();
        let mut starts = vec![0];
        for station in 0..table.stations() {
            let reports = table.of_station(station);
            usable.extend(
                reports
                    .filter(|&i| unusable(table, i).is_none())
                    .map(|i| u32::try_from(i).unwrap_or(u32::MAX)),
            );
            starts.push(usable.len());
        }
        let times = starts.windows(2).map(|w| {
            usable[w[0]..w[1]]
                .iter()
                .map(|&i| table.times()[i as usize])
        });
        let grid = TimeGrid::covering(times, analysis);
        Self {
            method: analysis.method,
            sensor,
            grid,
            next: 0,
            cursor: starts[..table.stations()].to_vec(),
            used: vec![false; table.len()],
            values: vec![0; table.stations()],
            usable,
            starts,
            table,
        }
    }

    /// The analysis times.
    #[must_use]
    pub fn grid(&self) -> &TimeGrid {
        &self.grid
    }

    /// The next block; `None` after the last.
    pub fn next_block(&mut self) -> Option<WindBlock> {
        let times: Vec<Time> = self.grid.times_from(self.next).take(BLOCK_TIMES).collect();
        if times.is_empty() {
            return None;
        }
        self.next += times.len();
        let mut block = WindBlock::empty(times, self.table.stations());
        for station in 0..self.table.stations() {
            match self.method {
                AlignMethod::Nearest { tolerance } => {
                    self.nearest(station, micros_of(tolerance), &mut block);
                }
                AlignMethod::VectorMean {
                    window,
                    least_reports,
                } => {
                    self.vector_mean(
                        station,
                        micros_of(window),
                        least_reports as usize,
                        &mut block,
                    );
                }
            }
        }
        Some(block)
    }

    /// Time and index of the usable report `k` of all.
    fn report(&self, k: usize) -> (i64, usize) {
        let i = self.usable[k] as usize;
        (self.table.times()[i].micros(), i)
    }

    fn nearest(&mut self, station: usize, tolerance: i64, block: &mut WindBlock) {
        let end = self.starts[station + 1];
        let mut c = self.cursor[station];
        if c == end {
            return;
        }
        for t in 0..block.times.len() {
            let at = block.times[t].micros();
            let distance = |this: &Self, k: usize| (this.report(k).0 - at).abs();
            while c + 1 < end && distance(self, c + 1) < distance(self, c) {
                c += 1;
            }
            if distance(self, c) <= tolerance {
                let i = self.report(c).1;
                let (wind, covariance) = self.value(i);
                block.set(station, t, wind, covariance, self.table.flag(i));
                self.used[i] = true;
                self.values[station] += 1;
            }
        }
        self.cursor[station] = c;
    }

    fn vector_mean(&mut self, station: usize, window: i64, least: usize, block: &mut WindBlock) {
        let end = self.starts[station + 1];
        let mut low = self.cursor[station];
        for t in 0..block.times.len() {
            let at = block.times[t].micros();
            while low < end && self.report(low).0 <= at - window {
                low += 1;
            }
            let high = (low..end).find(|&k| self.report(k).0 > at).unwrap_or(end);
            if high - low < least.max(1) {
                continue;
            }
            let mut mean = vector::VectorMean::default();
            let mut covariance = Covariance::default();
            let mut flag = Flag::NotEvaluated;
            for k in low..high {
                let i = self.report(k).1;
                let (wind, c) = self.value(i);
                mean.add(wind);
                covariance.add(c);
                flag = flag.worst(self.table.flag(i));
                self.used[i] = true;
            }
            if let Some(wind) = mean.wind() {
                // The errors of successive reports of a sensor go together, so the mean is no better than one of them.
                let covariance = covariance.scaled(1.0 / (high - low) as f64);
                block.set(station, t, wind, covariance, flag);
                self.values[station] += 1;
            }
        }
        self.cursor[station] = low;
    }

    fn value(&self, i: usize) -> (Wind, Covariance) {
        // Every index in `usable` has a wind.
        let wind = self.table.wind(i).unwrap_or_default();
        let calm = self.table.content(i) == Content::Calm;
        (wind, instrument_covariance(wind, calm, &self.sensor))
    }

    /// Values of each station so far.
    #[must_use]
    pub fn values(&self) -> &[u64] {
        &self.values
    }

    /// The books after the last block: each report was used, or was not for one reason.
    #[must_use]
    pub fn tally(&self) -> AlignTally {
        let mut all = Tally::default();
        let mut used = vec![0; self.table.stations()];
        for (station, used) in used.iter_mut().enumerate() {
            for i in self.table.of_station(station) {
                if self.used[i] {
                    *used += 1;
                    all.pass(1);
                } else {
                    let reason = unusable(self.table, i).unwrap_or_else(|| self.why_not_used(i));
                    all.set_aside(reason, 1);
                }
            }
        }
        AlignTally { all, used }
    }

    fn why_not_used(&self, i: usize) -> Reason {
        let time = self.table.times()[i];
        match self.method {
            AlignMethod::Nearest { tolerance }
                if self.grid.distance(time) <= micros_of(tolerance) =>
            {
                return Reason::NotNearest;
            }
            AlignMethod::VectorMean { window, .. }
                if self.grid.until_next(time) < micros_of(window) =>
            {
                return Reason::TooFewInWindow;
            }
            _ => {}
        }
        match (self.grid.first(), self.grid.last()) {
            (Some(first), Some(last)) if (first..=last).contains(&time) => Reason::TooFarInTime,
            _ => Reason::OutsidePeriod,
        }
    }
}

/// The books of the alignment.
#[derive(Debug, Clone, PartialEq)]
pub struct AlignTally {
    /// All reports.
    pub all: Tally,
    /// Reports used, for each station.
    pub used: Vec<u64>,
}

/// Why a report cannot be used at any time.
fn unusable(table: &ReportTable, i: usize) -> Option<Reason> {
    match table.content(i) {
        Content::Nothing => Some(Reason::NoSpeed),
        _ if matches!(table.flag(i), Flag::Fail) => Some(Reason::FailedCheck),
        Content::SpeedOnly => Some(Reason::NoDirection),
        Content::Wind | Content::Calm => None,
    }
}

#[cfg(test)]
mod tests;
