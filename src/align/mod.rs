//! From reports at their own times to winds of all stations at analysis times.
//!
//! A [`WindBlock`] holds the winds of a run of analysis times, station-major: all times of a station lie side by side,
//! so that later stages work on whole columns.

mod books;
mod height;
mod instrument;
mod marks;
mod scalars;
mod time;
pub mod vector;

use std::ops::Range;

use rayon::prelude::*;

use self::instrument::SensorVariances;
use self::marks::Marks;
use crate::check::Flag;
use crate::report::{Content, ReportTable};
use crate::settings::{AlignMethod, Analysis, SensorErrors};
use crate::station::Correction;
use crate::tally::Reason;
use crate::time::{Time, micros_of};
use crate::units::Wind;

pub use books::{AlignBooks, Period};
pub use height::{HeightReduction, Profile, height_factor};
pub use instrument::{Covariance, instrument_covariance};
pub use scalars::ScalarBlock;
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
/// Where the flag is [`Flag::Missing`] the value is 0 and means nothing; where it is [`Flag::Fail`] it is not to be used.
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

    /// Turns and scales the winds of a station and their covariances.
    fn correct(&mut self, station: usize, correction: &Correction) {
        let n = self.times.len();
        let unit = |u, v| correction.apply(Wind { u, v });
        let (east, north) = (unit(1.0, 0.0), unit(0.0, 1.0));
        for t in (0..n).filter(|&t| correction.holds_at(self.times[t])) {
            let cell = station * n + t;
            let wind = unit(self.u[cell], self.v[cell]);
            (self.u[cell], self.v[cell]) = (wind.u, wind.v);
            let (uu, uv, vv) = (self.var_u[cell], self.cov_uv[cell], self.var_v[cell]);
            let entry =
                |[a, b]: [f64; 2], [c, d]: [f64; 2]| a * c * uu + (a * d + b * c) * uv + b * d * vv;
            let (u, v) = ([east.u, north.u], [east.v, north.v]);
            self.var_u[cell] = entry(u, u);
            self.cov_uv[cell] = entry(u, v);
            self.var_v[cell] = entry(v, v);
        }
    }

    /// Raises the flag of the value of a station at a time of the block to at least `flag`.
    pub fn raise_flag(&mut self, station: usize, time: usize, flag: Flag) {
        let cell = station * self.times.len() + time;
        self.flag[cell] = self.flag[cell].worst(flag);
    }

    /// For each station how many values it has that did not fail.
    #[must_use]
    pub fn values(&self) -> Vec<u64> {
        let there = |flags: &[Flag]| flags.iter().filter(|f| f.is_usable()).count() as u64;
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
    usable: Vec<Usable>,
    /// Times of the reports that failed a check, for each station, μs.
    failed: Vec<Vec<i64>>,
    /// Error variances of each station's sensor.
    variances: Vec<SensorVariances>,
    /// For each report whether a value came of it.
    used: Marks,
    corrections: Vec<Option<Correction>>,
}

/// The usable reports of a station.
enum Usable {
    /// All of them.
    All(Range<usize>),
    /// These.
    Some(Vec<u32>),
}

impl Usable {
    fn len(&self) -> usize {
        match self {
            Self::All(range) => range.len(),
            Self::Some(reports) => reports.len(),
        }
    }

    /// Number `k` of them, below the length.
    fn get(&self, k: usize) -> usize {
        match self {
            Self::All(range) => range.start + k,
            Self::Some(reports) => reports[k] as usize,
        }
    }

    /// How many of them, from the first on, stand before `time` (μs).
    fn before(&self, table: &ReportTable, time: i64) -> usize {
        let times = table.times();
        match self {
            Self::All(range) => times[range.clone()].partition_point(|t| t.micros() < time),
            Self::Some(reports) => reports.partition_point(|&i| times[i as usize].micros() < time),
        }
    }
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
        let of_station = |station: usize| -> (Usable, Vec<(i64, i64)>) {
            let has_height = sensors
                .height_factors
                .get(station)
                .is_none_or(Option::is_some);
            let reports = table.of_station(station);
            let usable =
                if has_height && analysis.level.is_none() && table.all_usable(reports.clone()) {
                    Usable::All(reports)
                } else {
                    let is_usable =
                        |&i: &usize| has_height && unusable(table, i, analysis.level).is_none();
                    let index = |i: usize| u32::try_from(i).unwrap_or(u32::MAX);
                    Usable::Some(reports.filter(is_usable).map(index).collect())
                };
            let times = (0..usable.len()).map(|k| table.times()[usable.get(k)]);
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
            variances: sensors.errors.iter().map(SensorVariances::of).collect(),
            used: Marks::new(table.len()),
            corrections: Vec::new(),
            failed: failed_times(table, &usable),
            usable,
            table,
        }
    }

    /// Corrects the winds of stations whose reports are known to be off; nothing for a station without an entry.
    #[must_use]
    pub fn with_corrections(mut self, corrections: Vec<Option<Correction>>) -> Self {
        self.corrections = corrections;
        self
    }

    /// The analysis times.
    #[must_use]
    pub fn grid(&self) -> &TimeGrid {
        &self.grid
    }

    /// The reports.
    #[must_use]
    pub fn table(&self) -> &ReportTable {
        self.table
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
            self.mark_failed(station, &mut block);
            if let Some(Some(correction)) = self.corrections.get(station) {
                block.correct(station, correction);
            }
        }
        block
    }

    /// Marks the times without a value for which there would be one if a report had not failed: those with such a report
    /// within the tolerance, or in the window of the mean.
    fn mark_failed(&self, station: usize, block: &mut WindBlock) {
        let Some(failed) = self.failed.get(station).filter(|f| !f.is_empty()) else {
            return;
        };
        let (back, ahead) = match self.method {
            AlignMethod::Nearest { tolerance } | AlignMethod::Linear { tolerance } => {
                (micros_of(tolerance), micros_of(tolerance))
            }
            AlignMethod::VectorMean { window, .. } => (micros_of(window).saturating_sub(1), 0),
        };
        let cells = block.of_station(station);
        for (time, flag) in block.times.iter().zip(&mut block.flag[cells]) {
            if *flag == Flag::Missing {
                let from = time.micros().saturating_sub(back);
                let first = failed.get(failed.partition_point(|&t| t < from));
                if first.is_some_and(|&t| t <= time.micros().saturating_add(ahead)) {
                    *flag = Flag::Fail;
                }
            }
        }
    }

    /// Marks reports of which a value came before.
    pub fn mark_used(&self, reports: impl Iterator<Item = usize>) {
        let mut pen = self.used.pen();
        reports.for_each(|i| pen.mark(i));
    }

    /// True if a value came of report `i`.
    #[must_use]
    pub fn is_used(&self, i: usize) -> bool {
        self.used.is_marked(i)
    }

    /// The usable report of a station that its value at an analysis time comes from: the nearest, of a mean the last.
    #[must_use]
    pub fn report_at(&self, station: usize, time: Time) -> Option<usize> {
        let usable = self.usable.get(station)?;
        let at = time.micros();
        let after = usable.before(self.table, at.saturating_add(1));
        let before = after.checked_sub(1).map(|k| self.report(station, k));
        if matches!(self.method, AlignMethod::VectorMean { .. }) {
            return before.map(|(_, i)| i);
        }
        let next = (after < usable.len()).then(|| self.report(station, after));
        match (before, next) {
            (Some((b, _)), Some((a, i))) if a - at < at - b => Some(i),
            (before, next) => before.or(next).map(|(_, i)| i),
        }
    }

    /// By how much the wind of a station's usable reports before and after differs from that of the report behind its
    /// value at an analysis time, reduced to the common height and corrected as the value is; `None` for reports more
    /// than `within` μs from it. Of a mean there is no such report.
    #[must_use]
    pub fn changes_around(
        &self,
        station: usize,
        time: Time,
        within: i64,
    ) -> Option<[Option<Wind>; 2]> {
        if matches!(self.method, AlignMethod::VectorMean { .. }) {
            return None;
        }
        let i = self.report_at(station, time)?;
        let (here, at) = (self.table.winds()[i], self.table.times()[i].micros());
        let usable = &self.usable[station];
        let k = usable.before(self.table, at);
        let change = |k: Option<usize>| {
            let (other, j) = self.report(station, k.filter(|&k| k < usable.len())?);
            let wind = self.table.winds()[j];
            let factor = self.sensors.height_factors[station].unwrap_or(1.0);
            let change = Wind {
                u: factor * (wind.u - here.u),
                v: factor * (wind.v - here.v),
            };
            let correction = self.corrections.get(station).and_then(Option::as_ref);
            let correction = correction.filter(|c| c.holds_at(time));
            let apart = other.saturating_sub(at).abs();
            (apart <= within).then(|| correction.map_or(change, |c| c.apply(change)))
        };
        // Reports on other levels at the same time are not usable, so each time is there once.
        Some([change(k.checked_sub(1)), change(k.checked_add(1))])
    }

    /// Time and index of the usable report `k` of a station.
    fn report(&self, station: usize, k: usize) -> (i64, usize) {
        let i = self.usable[station].get(k);
        (self.table.times()[i].micros(), i)
    }

    fn nearest(&self, station: usize, tolerance: i64, block: &mut WindBlock) {
        let usable = &self.usable[station];
        let end = usable.len();
        let mut pen = self.used.pen();
        let Some(first) = block.times.first() else {
            return;
        };
        let mut c = usable.before(self.table, first.micros() - tolerance);
        if c == end {
            return;
        }
        let times = self.table.times();
        let winds = self.table.winds();
        let time_of = |k: usize| times[usable.get(k)].micros();
        let cells = block.of_station(station);
        let columns = block.times.iter().zip(&mut block.u[cells.clone()]);
        let columns = columns.zip(&mut block.v[cells.clone()]);
        let columns = columns.zip(&mut block.flag[cells.clone()]);
        let columns = columns.zip(&mut block.age[cells.clone()]);
        for ((((at, u), v), flag), age) in columns {
            let at = at.micros();
            let mut distance = (time_of(c) - at).abs();
            while distance > 0 && c + 1 < end {
                let next = (time_of(c + 1) - at).abs();
                if next >= distance {
                    break;
                }
                c += 1;
                distance = next;
            }
            if distance <= tolerance {
                let i = usable.get(c);
                (*u, *v) = (winds[i].u, winds[i].v);
                (*flag, *age) = (self.table.flag(i), seconds(distance));
                pen.mark(i);
            }
        }
        self.finish_column(station, block);
    }

    /// Covariances and height of the winds of a station, which stand in the block as reported.
    fn finish_column(&self, station: usize, block: &mut WindBlock) {
        let cells = block.of_station(station);
        let (u, v) = (&mut block.u[cells.clone()], &mut block.v[cells.clone()]);
        let covariances = [
            &mut block.var_u[cells.clone()],
            &mut block.cov_uv[cells.clone()],
            &mut block.var_v[cells.clone()],
        ];
        self.variances[station].fill(u, v, covariances);
        // Every station with usable reports has a factor.
        let factor = self.sensors.height_factors[station].unwrap_or(1.0);
        #[expect(clippy::float_cmp, reason = "a factor of 1 is stated, not computed")]
        if factor != 1.0 {
            u.iter_mut().chain(v).for_each(|value| *value *= factor);
            for column in [&mut block.var_u, &mut block.cov_uv, &mut block.var_v] {
                let column = &mut column[cells.clone()];
                for value in column {
                    *value *= factor * factor;
                }
            }
        }
        if block.flag[cells.clone()].contains(&Flag::Missing) {
            for cell in cells {
                if block.flag[cell] == Flag::Missing {
                    block.var_u[cell] = 0.0;
                    block.cov_uv[cell] = 0.0;
                    block.var_v[cell] = 0.0;
                }
            }
        }
    }

    fn linear(&self, station: usize, tolerance: i64, block: &mut WindBlock) {
        let end = self.usable[station].len();
        let mut pen = self.used.pen();
        let Some(first) = block.times.first() else {
            return;
        };
        let mut c = self.usable[station].before(self.table, first.micros() - tolerance);
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
                pen.mark(k);
            }
            block.set(station, t, &value);
            pen.mark(i);
        }
    }

    fn vector_mean(&self, station: usize, window: i64, least: usize, block: &mut WindBlock) {
        let end = self.usable[station].len();
        let mut pen = self.used.pen();
        let Some(first) = block.times.first() else {
            return;
        };
        let mut low = self.usable[station].before(self.table, first.micros() - window);
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
                pen.mark(i);
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

    #[inline]
    fn value(&self, station: usize, i: usize) -> AlignedWind {
        // Every usable report has a wind, and its station a factor and variances.
        let wind = self.table.winds()[i];
        let factor = self.sensors.height_factors[station].unwrap_or(1.0);
        let covariance = self.variances[station].covariance(wind, false);
        AlignedWind {
            wind: Wind {
                u: wind.u * factor,
                v: wind.v * factor,
            },
            covariance: covariance.scaled(factor * factor),
            flag: self.table.flag(i),
            age: 0.0,
        }
    }
}

/// For each station the times of its reports that failed a check, μs.
fn failed_times(table: &ReportTable, usable: &[Usable]) -> Vec<Vec<i64>> {
    let of_station = |(station, usable): (usize, &Usable)| match usable {
        Usable::All(_) => Vec::new(),
        Usable::Some(_) => table
            .of_station(station)
            .filter(|&i| table.flag(i) == Flag::Fail)
            .map(|i| table.times()[i].micros())
            .collect(),
    };
    usable.iter().enumerate().map(of_station).collect()
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

/// True if report `i` stands on the level that is wanted, or any is.
fn on_level(table: &ReportTable, i: usize, level: Option<f64>) -> bool {
    level.is_none_or(|wanted| {
        let found = table.moving(i).and_then(|m| m.level);
        found.is_some_and(|found| (found - wanted).abs() <= SAME_LEVEL * wanted.abs())
    })
}

/// Why a report cannot be used at any time.
fn unusable(table: &ReportTable, i: usize, level: Option<f64>) -> Option<Reason> {
    if !on_level(table, i, level) {
        return Some(Reason::OtherLevel);
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
