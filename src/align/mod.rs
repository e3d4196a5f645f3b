//! From reports at their own times to winds of all stations at analysis times.
//!
//! A [`WindBlock`] holds the winds of a run of analysis times, station-major: all times of a station lie side by side,
//! so that later stages work on whole columns.

mod height;
mod instrument;
mod time;
pub mod vector;

use crate::check::Flag;
use crate::report::{Content, ReportTable};
use crate::settings::{AlignMethod, Analysis, SensorErrors};
use crate::tally::{Reason, Tally};
use crate::time::{Time, micros_of};
use crate::units::Wind;

pub use height::{HeightReduction, Profile, height_factor};
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
    /// Age of the value, s: from the analysis time to the report furthest from it, for a mean to the middle of the
    /// reports.
    pub age: Vec<f32>,
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
            age: vec![0.0; cells],
        }
    }

    /// Sets the value of a station at a time of the block.
    pub fn set(&mut self, station: usize, time: usize, value: &AlignedWind) {
        let cell = station * self.times.len() + time;
        self.u[cell] = value.wind.u;
        self.v[cell] = value.wind.v;
        self.var_u[cell] = value.covariance.uu;
        self.cov_uv[cell] = value.covariance.uv;
        self.var_v[cell] = value.covariance.vv;
        self.flag[cell] = value.flag;
        self.age[cell] = value.age;
    }

    /// The cells of one station.
    #[must_use]
    pub fn of_station(&self, station: usize) -> std::ops::Range<usize> {
        station * self.times.len()..(station + 1) * self.times.len()
    }
}

/// The wind of one station at an analysis time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AlignedWind {
    /// The wind.
    pub wind: Wind,
    /// Its instrument covariance.
    pub covariance: Covariance,
    /// Worst flag of the reports behind it.
    pub flag: Flag,
    /// Its age, s.
    pub age: f32,
}

/// What the aligner must know of the stations.
#[derive(Debug, Clone, PartialEq)]
pub struct StationSensors {
    /// Errors of each station's sensor, its rounding included.
    pub errors: Vec<SensorErrors>,
    /// What each station's speeds are multiplied with to stand for the common height; `None` where the law does not
    /// hold, so that its reports cannot be used.
    pub height_factors: Vec<Option<f64>>,
}

/// Aligns reports to analysis times, block by block in the order of time.
pub struct Aligner<'a> {
    table: &'a ReportTable,
    method: AlignMethod,
    level: Option<f64>,
    sensors: StationSensors,
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
    pub fn new(table: &'a ReportTable, analysis: &Analysis, sensors: StationSensors) -> Self {
        let mut usable = Vec::new();
        let mut starts = vec![0];
        for station in 0..table.stations() {
            let reports = table.of_station(station);
            let has_height = sensors
                .height_factors
                .get(station)
                .is_none_or(Option::is_some);
            let usable_here =
                reports.filter(|&i| has_height && unusable(table, i, analysis.level).is_none());
            usable.extend(usable_here.map(|i| u32::try_from(i).unwrap_or(u32::MAX)));
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
            level: analysis.level,
            sensors,
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
                AlignMethod::Linear { tolerance } => {
                    self.linear(station, micros_of(tolerance), &mut block);
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
                let (time, i) = self.report(c);
                let mut value = self.value(station, i);
                value.age = seconds(time - at);
                block.set(station, t, &value);
                self.used[i] = true;
                self.values[station] += 1;
            }
        }
        self.cursor[station] = c;
    }

    fn linear(&mut self, station: usize, tolerance: i64, block: &mut WindBlock) {
        let end = self.starts[station + 1];
        let mut c = self.cursor[station];
        for t in 0..block.times.len() {
            let at = block.times[t].micros();
            while c + 1 < end && self.report(c + 1).0 <= at {
                c += 1;
            }
            let Some((before, i)) = (c < end)
                .then(|| self.report(c))
                .filter(|r| r.0 <= at && at - r.0 <= tolerance)
            else {
                continue;
            };
            let mut value = self.value(station, i);
            if before < at {
                let next = (c + 1 < end).then(|| self.report(c + 1));
                let Some((after, k)) = next.filter(|r| r.0 - at <= tolerance) else {
                    continue;
                };
                let share = (at - before) as f64 / (after - before) as f64;
                value = between(&value, &self.value(station, k), share);
                value.age = seconds((at - before).max(after - at));
                self.used[k] = true;
            }
            block.set(station, t, &value);
            self.used[i] = true;
            self.values[station] += 1;
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
            let mut ages = 0.0;
            for k in low..high {
                let (time, i) = self.report(k);
                let value = self.value(station, i);
                mean.add(value.wind);
                covariance.add(value.covariance);
                flag = flag.worst(value.flag);
                ages += seconds(at - time);
                self.used[i] = true;
            }
            let count = (high - low) as f64;
            if let Some(wind) = mean.wind() {
                #[expect(
                    clippy::cast_possible_truncation,
                    reason = "an age in seconds needs no more than f32"
                )]
                let value = AlignedWind {
                    wind,
                    // The errors of successive reports of a sensor go together: the mean is no better than one of them.
                    covariance: covariance.scaled(1.0 / count),
                    flag,
                    age: (f64::from(ages) / count) as f32,
                };
                block.set(station, t, &value);
                self.values[station] += 1;
            }
        }
        self.cursor[station] = low;
    }

    fn value(&self, station: usize, i: usize) -> AlignedWind {
        // Every index in `usable` has a wind, and its station a factor.
        let wind = self.table.wind(i).unwrap_or_default();
        let factor = self
            .sensors
            .height_factors
            .get(station)
            .copied()
            .flatten()
            .unwrap_or(1.0);
        let calm = self.table.content(i) == Content::Calm;
        let errors = self
            .sensors
            .errors
            .get(station)
            .copied()
            .unwrap_or_default();
        AlignedWind {
            wind: Wind {
                u: wind.u * factor,
                v: wind.v * factor,
            },
            covariance: instrument_covariance(wind, calm, &errors).scaled(factor * factor),
            flag: self.table.flag(i),
            age: 0.0,
        }
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
                    let reason = unusable(self.table, i, self.level)
                        .unwrap_or_else(|| self.why_not_used(station, i));
                    all.set_aside(reason, 1);
                }
            }
        }
        AlignTally { all, used }
    }

    fn why_not_used(&self, station: usize, i: usize) -> Reason {
        if self
            .sensors
            .height_factors
            .get(station)
            .is_some_and(Option::is_none)
        {
            return Reason::NoHeightFactor;
        }
        let time = self.table.times()[i];
        match self.method {
            AlignMethod::Nearest { tolerance } | AlignMethod::Linear { tolerance }
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

/// Seconds of a distance in time.
#[expect(
    clippy::cast_possible_truncation,
    reason = "an age in seconds needs no more than f32"
)]
fn seconds(micros: i64) -> f32 {
    (micros.abs() as f64 * 1e-6) as f32
}

/// The wind on the straight line between two, `share` of the way from the first.
///
/// The errors of successive reports of a sensor go together, so the covariances are weighted like the winds.
fn between(a: &AlignedWind, b: &AlignedWind, share: f64) -> AlignedWind {
    let mix = |a: f64, b: f64| a + share * (b - a);
    AlignedWind {
        wind: Wind {
            u: mix(a.wind.u, b.wind.u),
            v: mix(a.wind.v, b.wind.v),
        },
        covariance: Covariance {
            uu: mix(a.covariance.uu, b.covariance.uu),
            uv: mix(a.covariance.uv, b.covariance.uv),
            vv: mix(a.covariance.vv, b.covariance.vv),
        },
        flag: a.flag.worst(b.flag),
        age: a.age,
    }
}

/// Levels count as the same within this share.
const SAME_LEVEL: f64 = 1e-3;

/// Why a report cannot be used at any time.
fn unusable(table: &ReportTable, i: usize, level: Option<f64>) -> Option<Reason> {
    if let Some(wanted) = level {
        let found = table.moving(i).and_then(|m| m.level);
        if found.is_none_or(|found| (found - wanted).abs() > SAME_LEVEL * wanted.abs()) {
            return Some(Reason::OtherLevel);
        }
    }
    match table.content(i) {
        Content::Nothing => Some(Reason::NoSpeed),
        _ if matches!(table.flag(i), Flag::Fail) => Some(Reason::FailedCheck),
        Content::SpeedOnly => Some(Reason::NoDirection),
        Content::Wind | Content::Calm => None,
    }
}

#[cfg(test)]
mod tests;
