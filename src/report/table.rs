//! Reports in columns, by station and time.

use super::build::build;
use super::rows::{Moving, Rows, ScalarValues, kind};
use crate::check::{Flag, Test, TestFlags};
use crate::tally::Tally;
use crate::time::Time;
use crate::units::{FromDirection, Wind};

/// What a report says of the wind.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Content {
    /// Speed and direction.
    Wind,
    /// Calm: the speed is below what the sensor sees.
    Calm,
    /// A speed without a direction.
    SpeedOnly,
    /// Neither, or a direction alone.
    Nothing,
}

/// Two rows of the same station and time that say different things.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Conflict {
    /// Place of the station in the network.
    pub station: u32,
    /// The time of both.
    pub time: Time,
    /// File and line of the row set aside.
    pub set_aside: (u16, u32),
    /// File and line of the row that holds.
    pub holds: (u16, u32),
}

/// Reports sorted by station, time and level, each of these once.
///
/// A table may be a window of a longer series: then the reports of each station begin with the last ones of the window
/// before, which carry their flags. [`ReportTable::fresh`] tells those that are to be judged in this window: each report
/// once, with its past before it and what comes next after it.
#[derive(Debug)]
pub struct ReportTable {
    pub(super) columns: TableColumns,
    /// Station s has the rows `starts[s]..starts[s + 1]`.
    pub(super) starts: Vec<usize>,
    /// For each station the first row that was not in the window before.
    pub(super) added: Vec<usize>,
    /// The times of the reports to judge.
    pub(super) judged: std::ops::Range<Time>,
    pub(super) conflicts: Vec<Conflict>,
}

/// The values of the reports, one column each; gust, moving and scalars are empty where no report has any.
#[derive(Debug, Default)]
pub(super) struct TableColumns {
    pub(super) time: Vec<Time>,
    /// Speed, m/s, and direction, degrees; 0 where there is none.
    pub(super) given: Vec<[f64; 2]>,
    /// The wind; 0 where there is none.
    pub(super) wind: Vec<Wind>,
    pub(super) kind: Vec<u8>,
    /// Line, file.
    pub(super) origin: Vec<(u32, u16)>,
    pub(super) flag: Vec<Flag>,
    pub(super) tests: Vec<TestFlags>,
    pub(super) gust: Vec<Option<f64>>,
    pub(super) moving: Vec<Option<Moving>>,
    pub(super) scalars: Vec<ScalarValues>,
}

impl Default for ReportTable {
    fn default() -> Self {
        Self {
            columns: TableColumns::default(),
            starts: Vec::new(),
            added: Vec::new(),
            judged: FIRST..FIRST,
            conflicts: Vec::new(),
        }
    }
}

/// Before all reports, and after them.
const FIRST: Time = Time::from_micros(i64::MIN);
const LAST: Time = Time::from_micros(i64::MAX);

impl ReportTable {
    /// Sorts rows by station, then time and level. `parts` follow each other in the order of the input; `stations` is
    /// the number of stations in the network; the tally is of rows. Of rows with the same station, time and level one
    /// holds, the others are set aside:
    ///
    /// - speed and direction from different inputs become one report ([`Reason::Joined`]);
    /// - the highest correction holds ([`Reason::Corrected`]);
    /// - a row that lacks what another has says nothing against it ([`Reason::Emptier`]);
    /// - else the last of the input; the others are [`Reason::Repeated`] if they say the same, [`Reason::Replaced`] if
    ///   not, and the first of these are listed as conflicts.
    ///
    /// [`Reason::Joined`]: crate::tally::Reason::Joined
    /// [`Reason::Corrected`]: crate::tally::Reason::Corrected
    /// [`Reason::Emptier`]: crate::tally::Reason::Emptier
    /// [`Reason::Repeated`]: crate::tally::Reason::Repeated
    /// [`Reason::Replaced`]: crate::tally::Reason::Replaced
    #[must_use]
    pub fn new(parts: &[Rows], stations: usize) -> (Self, Tally) {
        build(parts, stations, &Self::default(), LAST, LAST)
    }

    /// As [`Self::new`], with the reports of `before` from `keep_from` on ahead of the new ones, which are all later
    /// than those; those before `judged_until` that were not judged before are now. The tally is of the new rows.
    #[must_use]
    pub fn following(
        parts: &[Rows],
        stations: usize,
        before: &Self,
        keep_from: Time,
        judged_until: Time,
    ) -> (Self, Tally) {
        build(parts, stations, before, keep_from, judged_until)
    }

    /// Number of stations of the network.
    #[must_use]
    pub fn stations(&self) -> usize {
        self.starts.len().saturating_sub(1)
    }

    /// Number of reports.
    #[must_use]
    pub fn len(&self) -> usize {
        self.columns.time.len()
    }

    /// True if there are no reports.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.columns.time.is_empty()
    }

    /// The reports of a station, in the order of time.
    #[must_use]
    pub fn of_station(&self, station: usize) -> std::ops::Range<usize> {
        self.starts[station]..self.starts[station + 1]
    }

    /// The reports of a station that are to be judged in this table.
    #[must_use]
    pub fn fresh(&self, station: usize) -> std::ops::Range<usize> {
        let from = self.of_station_from(station, self.judged.start).start;
        from..self.of_station_from(station, self.judged.end).start
    }

    /// The reports of a station that the window before had too.
    #[must_use]
    pub fn carried(&self, station: usize) -> std::ops::Range<usize> {
        self.starts[station]..self.added[station]
    }

    /// The reports of a station from `time` on.
    #[must_use]
    pub fn of_station_from(&self, station: usize, time: Time) -> std::ops::Range<usize> {
        let reports = self.of_station(station);
        let times = &self.columns.time[reports.clone()];
        reports.start + times.partition_point(|&t| t < time)..reports.end
    }

    /// Times of all reports.
    #[must_use]
    pub fn times(&self) -> &[Time] {
        &self.columns.time
    }

    /// What report `i` says.
    #[must_use]
    pub fn content(&self, i: usize) -> Content {
        let (speed, kind) = (self.columns.given[i][0], self.columns.kind[i]);
        match kind & (kind::SPEED | kind::DIRECTION) {
            // Common practice: no speed is calm, whatever stands for the direction.
            both if both & kind::SPEED != 0 && speed <= 0.0 => Content::Calm,
            kind::SPEED => Content::SpeedOnly,
            0 | kind::DIRECTION => Content::Nothing,
            _ => Content::Wind,
        }
    }

    /// Speed of report `i`, m/s.
    #[must_use]
    pub fn speed(&self, i: usize) -> Option<f64> {
        (self.columns.kind[i] & kind::SPEED != 0).then(|| self.columns.given[i][0])
    }

    /// Direction of report `i`; calm has none.
    #[must_use]
    pub fn direction(&self, i: usize) -> Option<FromDirection> {
        match self.content(i) {
            Content::Wind => FromDirection::new(self.columns.given[i][1]),
            _ => None,
        }
    }

    /// Wind vector of report `i`; calm is the zero vector.
    #[must_use]
    pub fn wind(&self, i: usize) -> Option<Wind> {
        match self.content(i) {
            Content::Calm | Content::Wind => Some(self.columns.wind[i]),
            Content::SpeedOnly | Content::Nothing => None,
        }
    }

    /// Speed, direction (degrees, 0 for calm) and wind of report `i`, if it has a wind.
    #[inline]
    #[must_use]
    pub(crate) fn plain_wind(&self, i: usize) -> Option<(f64, f64, Wind)> {
        let columns = &self.columns;
        let [speed, direction] = columns.given[i];
        match columns.kind[i] & (kind::SPEED | kind::DIRECTION) {
            k if k == kind::SPEED | kind::DIRECTION && speed > 0.0 => {
                Some((speed, direction, columns.wind[i]))
            }
            k if k & kind::SPEED != 0 && speed <= 0.0 => Some((0.0, 0.0, Wind::default())),
            _ => None,
        }
    }

    /// True if report `i` is calm and has a direction other than 0 and 360.
    #[must_use]
    pub(crate) fn calm_has_direction(&self, i: usize) -> bool {
        let degrees = self.columns.given[i][1];
        self.columns.kind[i] & kind::DIRECTION != 0
            && self.content(i) == Content::Calm
            && degrees > 0.0
            && degrees < 360.0
    }

    /// True if report `i` stands on a level.
    #[inline]
    #[must_use]
    pub(crate) fn has_level(&self, i: usize) -> bool {
        self.has_moving() && self.moving(i).is_some_and(|m| m.level.is_some())
    }

    /// Wind vectors of all reports; 0 where there is none.
    #[must_use]
    pub fn winds(&self) -> &[Wind] {
        &self.columns.wind
    }

    /// True if every report of the range has speed and direction and did not fail a check.
    #[must_use]
    pub fn all_usable(&self, range: std::ops::Range<usize>) -> bool {
        let both = kind::SPEED | kind::DIRECTION;
        self.columns.kind[range.clone()].iter().all(|&k| k == both)
            && self.columns.flag[range].iter().all(|&f| f < Flag::Fail)
    }

    /// Gust of report `i`, m/s.
    #[must_use]
    pub fn gust(&self, i: usize) -> Option<f64> {
        self.columns.gust.get(i).copied().flatten()
    }

    /// Position and level that report `i` carries itself.
    #[must_use]
    pub fn moving(&self, i: usize) -> Option<Moving> {
        self.columns.moving.get(i).copied().flatten()
    }

    /// True if any report carries its own position or level.
    #[must_use]
    pub fn has_moving(&self) -> bool {
        !self.columns.moving.is_empty()
    }

    /// Scalar number `slot` of report `i`, in the user's unit.
    #[must_use]
    pub fn scalar(&self, i: usize, slot: usize) -> Option<f64> {
        let values = self.columns.scalars.get(i)?;
        values.get(slot).copied().flatten()
    }

    /// True if any report has a gust, its own position or level, or scalars.
    pub(super) fn has_rare_columns(&self) -> bool {
        let columns = &self.columns;
        !columns.gust.is_empty() || !columns.moving.is_empty() || !columns.scalars.is_empty()
    }

    /// Place of report `i` in the input: number of the file as read, line.
    #[must_use]
    pub fn origin(&self, i: usize) -> (u16, u32) {
        let (line, file) = self.columns.origin[i];
        (file, line)
    }

    /// Flag of report `i`.
    #[must_use]
    pub fn flag(&self, i: usize) -> Flag {
        self.columns.flag[i]
    }

    /// Flags of the tests of report `i`.
    #[must_use]
    pub fn tests(&self, i: usize) -> TestFlags {
        self.columns.tests[i]
    }

    /// Flag of a test of report `i`; the tests of a wind that is not there are missing.
    #[must_use]
    pub fn test_flag(&self, i: usize, test: Test) -> Flag {
        let is_of_wind = !matches!(test, Test::TimingGap | Test::Location);
        if is_of_wind && self.flag(i) == Flag::Missing {
            Flag::Missing
        } else {
            self.tests(i).get(test)
        }
    }

    /// Takes the columns of the flags out, to be given back with [`Self::put_flags`].
    pub(crate) fn take_flags(&mut self) -> (Vec<Flag>, Vec<TestFlags>) {
        let columns = &mut self.columns;
        (
            std::mem::take(&mut columns.flag),
            std::mem::take(&mut columns.tests),
        )
    }

    pub(crate) fn put_flags(&mut self, flags: Vec<Flag>, tests: Vec<TestFlags>) {
        self.columns.flag = flags;
        self.columns.tests = tests;
    }

    /// Raises the flag of report `i` to at least `flag`.
    pub fn raise_flag(&mut self, i: usize, flag: Flag) {
        self.columns.flag[i] = self.columns.flag[i].worst(flag);
    }

    /// The first rows that say different things of the same station and time.
    #[must_use]
    pub fn conflicts(&self) -> &[Conflict] {
        &self.conflicts
    }

    /// First and last time of all reports.
    #[must_use]
    pub fn period(&self) -> Option<(Time, Time)> {
        let first = self.columns.time.iter().min()?;
        let last = self.columns.time.iter().max()?;
        Some((*first, *last))
    }
}

#[cfg(test)]
#[path = "table_tests.rs"]
mod tests;
