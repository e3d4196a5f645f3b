//! A report as the tests of a series see it.

use crate::report::ReportTable;

/// A report with a wind, calm or not, that is not impossible.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Point {
    /// μs
    pub time: i64,
    /// m/s
    pub u: f64,
    /// m/s
    pub v: f64,
    /// m/s
    pub speed: f64,
    /// Degrees; 0 for calm.
    pub direction: f64,
}

impl Point {
    /// Report `i`, if it has a place in the series.
    #[inline]
    pub fn of(table: &ReportTable, i: usize, fastest: f64) -> Option<Self> {
        let (speed, direction, wind) = table.plain_wind(i)?;
        (speed <= fastest).then(|| Self {
            time: table.times()[i].micros(),
            u: wind.u,
            v: wind.v,
            speed,
            direction,
        })
    }

    /// The change from an earlier report, if that is at most `within` (μs) before.
    #[inline]
    pub fn step_from(&self, before: Option<&Self>, within: i64) -> Option<Step> {
        let before = before?;
        let time = self.time - before.time;
        // Of several levels at one time none follows the other.
        (time > 0 && time <= within).then_some(Step {
            u: self.u - before.u,
            v: self.v - before.v,
            speed: self.speed - before.speed,
            time,
        })
    }
}

/// The change between successive reports.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Step {
    /// m/s
    pub u: f64,
    /// m/s
    pub v: f64,
    /// m/s
    pub speed: f64,
    /// μs
    pub time: i64,
}

/// The larger of two numbers that are numbers, in one instruction.
#[inline]
pub(super) fn larger(a: f64, b: f64) -> f64 {
    if a > b { a } else { b }
}

/// The smaller of two numbers that are numbers, in one instruction.
#[inline]
pub(super) fn smaller(a: f64, b: f64) -> f64 {
    if a < b { a } else { b }
}

/// The angle between two directions, 0 to 180 degrees.
#[inline]
pub(super) fn turn(a: f64, b: f64) -> f64 {
    let turn = (a - b).abs();
    smaller(turn, 360.0 - turn)
}

/// A time in hours, for people.
pub(super) fn hours(micros: i64) -> String {
    if micros < 3_600_000_000 {
        format!("{} min", (micros as f64 / 6e6).round() / 10.0)
    } else {
        format!("{} h", (micros as f64 / 3.6e8).round() / 10.0)
    }
}
