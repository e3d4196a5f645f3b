//! From reports at their own times to winds of all stations at analysis times.
//!
//! A [`WindBlock`] holds the winds of a run of analysis times, station-major: all times of a station lie side by side,
//! so that later stages work on whole columns.

mod books;
mod height;
mod instrument;
mod time;
pub mod vector;

use std::ops::Range;
use std::sync::atomic::AtomicBool;
use std::sync::atomic::Ordering::Relaxed;

use rayon::prelude::*;

use crate::check::Flag;
use crate::report::{Content, ReportTable};
use crate::settings::{AlignMethod, Analysis, SensorErrors};
use crate::tally::Reason;
use crate::time::{Time, micros_of};
use crate::units::Wind;

pub use books::{AlignBooks, Period};
pub use height::{HeightReduction, Profile, height_factor};
pub use instrument::{Covariance, instrument_covariance};
pub use time::TimeGrid;

/// Most analysis times in one block. A triangle's columns then take about 30 kB: they stay in the first-level cache.
pub const BLOCK_TIMES: usize = 256;
/// Values of all stations that a block should not exceed, so that a block of a large network is no longer in memory.
const BLOCK_VALUES: usize = 1 << 17;

/// Analysis times in one block of a network, a power of two.
#[must_use]
pub fn block_times(stations: usize) -> usize {
    let fit = (BLOCK_VALUES / stations.max(1)).max(16);
    BLOCK_TIMES.min(1 << fit.ilog2())
}

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

    /// For each station how many values it has.
    #[must_use]
    pub fn values(&self) -> Vec<u64> {
        let there = |flags: &[Flag]| flags.iter().filter(|&&f| f != Flag::Missing).count() as u64;
        self.flag
            .chunks(self.times.len().max(1))
            .map(there)
            .collect()
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

/// Aligns the reports of a window to analysis times, block by block.
pub struct Aligner<'a> {
    table: &'a ReportTable,
    method: AlignMethod,
    level: Option<f64>,
    sensors: &'a StationSensors,
    grid: TimeGrid,
    /// Reports that carry a wind and did not fail, for each station.
    usable: Vec<Vec<u32>>,
    /// For each report whether a value came of it.
    used: Vec<AtomicBool>,
}

impl<'a> Aligner<'a> {
    /// Prepares the analysis times among `multiples` of the interval, those of the period at which any station has a
    /// value.
    #[must_use]
    pub fn new(
        table: &'a ReportTable,
        analysis: &Analysis,
        sensors: &'a StationSensors,
        multiples: Range<i64>,
    ) -> Self {
        // The usable reports of a station, and the analysis times that they serve.
        let of_station = |station: usize| -> (Vec<u32>, Vec<(i64, i64)>) {
            let has_height = sensors
                .height_factors
                .get(station)
                .is_none_or(Option::is_some);
            let usable: Vec<u32> = table
                .of_station(station)
                .filter(|&i| has_height && unusable(table, i, analysis.level).is_none())
                .map(|i| u32::try_from(i).unwrap_or(u32::MAX))
                .collect();
            let times = usable.iter().map(|&i| table.times()[i as usize]);
            let runs = time::served_runs(times, analysis, &multiples);
            (usable, runs)
        };
        let (usable, runs): (Vec<_>, Vec<_>) = (0..table.stations())
            .into_par_iter()
            .map(of_station)
            .unzip();
        Self {
            method: analysis.method,
            level: analysis.level,
            sensors,
            grid: TimeGrid::new(analysis, runs.concat()),
            used: (0..table.len()).map(|_| AtomicBool::new(false)).collect(),
            usable,
            table,
        }
    }

    /// The analysis times.
    #[must_use]
    pub fn grid(&self) -> &TimeGrid {
        &self.grid
    }

    /// The winds at the analysis times of one block.
    #[must_use]
    pub fn align(&self, times: Vec<Time>) -> WindBlock {
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
                    let least = least_reports as usize;
                    self.vector_mean(station, micros_of(window), least, &mut block);
                }
            }
        }
        block
    }

    /// Marks reports of which a value came before.
    pub fn mark_used(&self, reports: impl Iterator<Item = usize>) {
        for i in reports {
            self.mark(i);
        }
    }

    fn mark(&self, i: usize) {
        self.used[i].store(true, Relaxed);
    }

    /// True if a value came of report `i`.
    #[must_use]
    pub fn is_used(&self, i: usize) -> bool {
        self.used[i].load(Relaxed)
    }

    /// Time and index of the usable report `k` of a station.
    fn report(&self, station: usize, k: usize) -> (i64, usize) {
        let i = self.usable[station][k] as usize;
        (self.table.times()[i].micros(), i)
    }

    /// The first usable report of a station from `time` on, μs.
    fn first_from(&self, station: usize, time: i64) -> usize {
        let times = self.table.times();
        self.usable[station].partition_point(|&i| times[i as usize].micros() < time)
    }

    fn nearest(&self, station: usize, tolerance: i64, block: &mut WindBlock) {
        let end = self.usable[station].len();
        let Some(first) = block.times.first() else {
            return;
        };
        let mut c = self.first_from(station, first.micros() - tolerance);
        if c == end {
            return;
        }
        for t in 0..block.times.len() {
            let at = block.times[t].micros();
            let distance = |k: usize| (self.report(station, k).0 - at).abs();
            while c + 1 < end && distance(c + 1) < distance(c) {
                c += 1;
            }
            if distance(c) <= tolerance {
                let (time, i) = self.report(station, c);
                let mut value = self.value(station, i);
                value.age = seconds(time - at);
                block.set(station, t, &value);
                self.mark(i);
            }
        }
    }

    fn linear(&self, station: usize, tolerance: i64, block: &mut WindBlock) {
        let end = self.usable[station].len();
        let Some(first) = block.times.first() else {
            return;
        };
        let mut c = self.first_from(station, first.micros() - tolerance);
        for t in 0..block.times.len() {
            let at = block.times[t].micros();
            while c + 1 < end && self.report(station, c + 1).0 <= at {
                c += 1;
            }
            let Some((before, i)) = (c < end)
                .then(|| self.report(station, c))
                .filter(|r| r.0 <= at && at - r.0 <= tolerance)
            else {
                continue;
            };
            let mut value = self.value(station, i);
            if before < at {
                let next = (c + 1 < end).then(|| self.report(station, c + 1));
                let Some((after, k)) = next.filter(|r| r.0 - at <= tolerance) else {
                    continue;
                };
                let share = (at - before) as f64 / (after - before) as f64;
                value = between(&value, &self.value(station, k), share);
                value.age = seconds((at - before).max(after - at));
                self.mark(k);
            }
            block.set(station, t, &value);
            self.mark(i);
        }
    }

    fn vector_mean(&self, station: usize, window: i64, least: usize, block: &mut WindBlock) {
        let end = self.usable[station].len();
        let Some(first) = block.times.first() else {
            return;
        };
        let mut low = self.first_from(station, first.micros() - window);
        for t in 0..block.times.len() {
            let at = block.times[t].micros();
            while low < end && self.report(station, low).0 <= at - window {
                low += 1;
            }
            let high = (low..end)
                .find(|&k| self.report(station, k).0 > at)
                .unwrap_or(end);
            if high - low < least.max(1) {
                continue;
            }
            let mut mean = vector::VectorMean::default();
            let mut covariance = Covariance::default();
            let mut flag = Flag::NotEvaluated;
            let mut ages = 0.0;
            for k in low..high {
                let (time, i) = self.report(station, k);
                let value = self.value(station, i);
                mean.add(value.wind, value.wind.speed());
                covariance.add(value.covariance);
                flag = flag.worst(value.flag);
                ages += seconds(at - time);
                self.mark(i);
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
            }
        }
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
