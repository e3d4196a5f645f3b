//! Reports in columns, by station and time.

use std::cmp::Ordering;

use super::rows::{Moving, Packed, Rows, kind};
use crate::check::Flag;
use crate::tally::{Reason, Tally};
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

/// Conflicts that are kept with their places; the others are only counted.
const CONFLICTS_KEPT: usize = 100;

/// Reports sorted by station, time and level, each of these once.
#[derive(Debug)]
pub struct ReportTable {
    columns: TableColumns,
    flag: Vec<Flag>,
    /// Station s has the rows `starts[s]..starts[s + 1]`.
    starts: Vec<usize>,
    conflicts: Vec<Conflict>,
}

/// The values of the reports, one column each; gust, moving and correction are empty where no report has any.
#[derive(Debug, Default)]
struct TableColumns {
    time: Vec<Time>,
    /// m/s; 0 where there is none.
    speed: Vec<f64>,
    /// Degrees; 0 where there is none.
    direction: Vec<f64>,
    kind: Vec<u8>,
    file: Vec<u16>,
    line: Vec<u32>,
    gust: Vec<Option<f64>>,
    moving: Vec<Option<Moving>>,
}

/// A row among several [`Rows`].
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
struct At {
    part: u32,
    row: u32,
}

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
    #[must_use]
    pub fn new(parts: &[Rows], stations: usize) -> (Self, Tally) {
        let mut starts = vec![0_usize; stations + 1];
        for report in parts.iter().flat_map(|p| &p.packed) {
            starts[report.station as usize + 1] += 1; // stations are < `stations`
        }
        for s in 0..stations {
            starts[s + 1] += starts[s];
        }
        // The order of the input within each station.
        let mut next = starts.clone();
        let mut order = vec![At { part: 0, row: 0 }; starts[stations]];
        for (part, rows) in (0..).zip(parts) {
            for (row, report) in (0..).zip(&rows.packed) {
                let slot = &mut next[report.station as usize];
                order[*slot] = At { part, row };
                *slot += 1;
            }
        }

        let mut builder = TableBuilder {
            parts,
            out: TableColumns::with_capacity(order.len()),
            tally: Tally::default(),
            conflicts: Vec::new(),
        };
        let mut sorted_starts = vec![0];
        for s in 0..stations {
            let of_station = &mut order[starts[s]..starts[s + 1]];
            let key = |at: &At| builder.key(*at);
            if !of_station.is_sorted_by_key(key) {
                of_station.sort_by(|a, b| {
                    let (a, b) = (builder.key(*a), builder.key(*b));
                    a.partial_cmp(&b).unwrap_or(Ordering::Equal)
                });
            }
            builder.station(of_station);
            sorted_starts.push(builder.out.time.len());
        }
        let TableBuilder {
            out,
            tally,
            conflicts,
            ..
        } = builder;
        let table = Self {
            flag: vec![Flag::NotEvaluated; out.time.len()],
            columns: out,
            starts: sorted_starts,
            conflicts,
        };
        (table, tally)
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

    /// Times of all reports.
    #[must_use]
    pub fn times(&self) -> &[Time] {
        &self.columns.time
    }

    /// What report `i` says.
    #[must_use]
    pub fn content(&self, i: usize) -> Content {
        let (speed, kind) = (self.columns.speed[i], self.columns.kind[i]);
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
        (self.columns.kind[i] & kind::SPEED != 0).then(|| self.columns.speed[i])
    }

    /// Direction of report `i`; calm has none.
    #[must_use]
    pub fn direction(&self, i: usize) -> Option<FromDirection> {
        match self.content(i) {
            Content::Wind => FromDirection::new(self.columns.direction[i]),
            _ => None,
        }
    }

    /// Wind vector of report `i`; calm is the zero vector.
    #[must_use]
    pub fn wind(&self, i: usize) -> Option<Wind> {
        match self.content(i) {
            Content::Calm => Some(Wind::default()),
            Content::Wind => FromDirection::new(self.columns.direction[i])
                .map(|from| Wind::blowing_from(self.columns.speed[i], from)),
            Content::SpeedOnly | Content::Nothing => None,
        }
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

    /// Place of report `i` in the input: number of the file as read, line.
    #[must_use]
    pub fn origin(&self, i: usize) -> (u16, u32) {
        (self.columns.file[i], self.columns.line[i])
    }

    /// Flag of report `i`.
    #[must_use]
    pub fn flag(&self, i: usize) -> Flag {
        self.flag[i]
    }

    /// Raises the flag of report `i` to at least `flag`.
    pub fn raise_flag(&mut self, i: usize, flag: Flag) {
        self.flag[i] = self.flag[i].worst(flag);
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

impl TableColumns {
    fn with_capacity(n: usize) -> Self {
        Self {
            time: Vec::with_capacity(n),
            speed: Vec::with_capacity(n),
            direction: Vec::with_capacity(n),
            kind: Vec::with_capacity(n),
            file: Vec::with_capacity(n),
            line: Vec::with_capacity(n),
            ..Self::default()
        }
    }
}

struct TableBuilder<'a> {
    parts: &'a [Rows],
    out: TableColumns,
    tally: Tally,
    conflicts: Vec<Conflict>,
}

impl TableBuilder<'_> {
    fn packed(&self, at: At) -> &Packed {
        &self.parts[at.part as usize].packed[at.row as usize]
    }

    /// What rows are sorted by; reports without a level come first.
    fn key(&self, at: At) -> (Time, f64) {
        let moving = self.parts[at.part as usize].moving.get(at.row as usize);
        let level = moving.copied().flatten().and_then(|m| m.level);
        (self.packed(at).time, level.unwrap_or(f64::NEG_INFINITY))
    }

    fn correction(&self, at: At) -> u8 {
        let column = &self.parts[at.part as usize].correction;
        column.get(at.row as usize).copied().unwrap_or(0)
    }

    fn place(&self, at: At) -> (u16, u32) {
        let report = self.packed(at);
        (report.file, report.line)
    }

    fn same_wind(&self, a: At, b: At) -> bool {
        let value = |at: At| {
            let report = self.packed(at);
            (
                report.kind,
                report.speed.to_bits(),
                report.direction.to_bits(),
            )
        };
        value(a) == value(b)
    }

    /// True if row `a` has a speed or direction less than row `b`, and none more.
    fn says_less(&self, a: At, b: At) -> bool {
        let values = |at: At| self.packed(at).kind & (kind::SPEED | kind::DIRECTION);
        values(a) != values(b) && values(a) & !values(b) == 0
    }

    /// Adds the reports of a station, sorted.
    fn station(&mut self, order: &[At]) {
        let mut start = 0;
        while start < order.len() {
            let key = self.key(order[start]);
            let mut end = start + 1;
            while end < order.len() && self.key(order[end]) == key {
                end += 1;
            }
            self.group(&order[start..end]);
            start = end;
        }
    }

    /// Adds the one report of rows with the same station, time and level.
    fn group(&mut self, group: &[At]) {
        if let [one] = group {
            self.keep(*one, None);
            return;
        }
        let of = |part: u8| -> Vec<At> {
            let parts = kind::SPEED_PART | kind::DIRECTION_PART;
            group
                .iter()
                .copied()
                .filter(|&at| self.packed(at).kind & parts == part)
                .collect()
        };
        let (whole, speeds, directions) = (of(0), of(kind::SPEED_PART), of(kind::DIRECTION_PART));
        let speed = self.one_of(&speeds);
        let direction = self.one_of(&directions);
        match (self.one_of(&whole), speed, direction) {
            (Some(whole), speed, direction) => {
                let parts = u64::from(speed.is_some()) + u64::from(direction.is_some());
                self.tally.set_aside(Reason::Replaced, parts);
                self.keep(whole, None);
            }
            (None, Some(speed), direction) => {
                self.tally
                    .set_aside(Reason::Joined, u64::from(direction.is_some()));
                self.keep(speed, direction);
            }
            (None, None, Some(direction)) => self.keep(direction, None),
            (None, None, None) => {}
        }
    }

    /// The row that holds among rows of one kind; the others are set aside.
    fn one_of(&mut self, rows: &[At]) -> Option<At> {
        let mut holds = *rows.first()?;
        for &row in rows.get(1..)? {
            let (old, new) = (self.correction(holds), self.correction(row));
            let (out, reason) = match new.cmp(&old) {
                Ordering::Less => (row, Reason::Corrected),
                Ordering::Greater => (holds, Reason::Corrected),
                Ordering::Equal if self.same_wind(holds, row) => (holds, Reason::Repeated),
                Ordering::Equal if self.says_less(row, holds) => (row, Reason::Emptier),
                Ordering::Equal if self.says_less(holds, row) => (holds, Reason::Emptier),
                Ordering::Equal => (holds, Reason::Replaced),
            };
            self.tally.set_aside(reason, 1);
            if out == holds {
                holds = row;
            }
            if reason == Reason::Replaced && self.conflicts.len() < CONFLICTS_KEPT {
                let report = self.packed(row);
                self.conflicts.push(Conflict {
                    station: report.station,
                    time: report.time,
                    set_aside: self.place(out),
                    holds: self.place(holds),
                });
            }
        }
        Some(holds)
    }

    /// Adds a row to the table, with the direction of another one if given.
    fn keep(&mut self, at: At, direction: Option<At>) {
        self.tally.pass(1);
        let report = *self.packed(at);
        let (mut kind, mut degrees) = (report.kind, report.direction);
        if let Some(at) = direction {
            let other = self.packed(at);
            kind |= other.kind;
            degrees = other.direction;
        }
        let (rows, row) = (&self.parts[at.part as usize], at.row as usize);
        let out = &mut self.out;
        let before = out.time.len();
        out.time.push(report.time);
        out.speed.push(report.speed);
        out.direction.push(degrees);
        out.kind.push(kind & (kind::SPEED | kind::DIRECTION));
        out.file.push(report.file);
        out.line.push(report.line);
        // A column that one part has and another has not is filled up.
        if !rows.gust.is_empty() || !out.gust.is_empty() {
            out.gust.resize(before, None);
            out.gust.push(rows.gust.get(row).copied().flatten());
        }
        if !rows.moving.is_empty() || !out.moving.is_empty() {
            out.moving.resize(before, None);
            out.moving.push(rows.moving.get(row).copied().flatten());
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::rows::{Part, Report};
    use super::*;

    fn report(station: u32, second: i64, speed: Option<f64>, part: Part) -> Report {
        Report {
            station,
            time: Time::from_micros(second * 1_000_000),
            speed,
            direction: FromDirection::new(90.0).filter(|_| part != Part::Speed),
            part,
            gust: None,
            moving: None,
            correction: 0,
            place: (0, 1),
        }
    }

    fn table(reports: &[Report]) -> (ReportTable, Tally) {
        let mut rows = Rows::default();
        for (line, report) in (1..).zip(reports) {
            rows.push(&Report {
                place: (0, line),
                ..*report
            });
        }
        // Cut anywhere: parts follow each other.
        let mut first = Rows::default();
        if let Some(one) = reports.first() {
            first.push(&Report {
                place: (0, 1),
                ..*one
            });
            rows = Rows::default();
            for (line, report) in (2..).zip(&reports[1..]) {
                rows.push(&Report {
                    place: (0, line),
                    ..*report
                });
            }
        }
        let (table, tally) = ReportTable::new(&[first, rows], 3);
        assert!(tally.balances());
        assert_eq!(tally.received, reports.len() as u64);
        assert_eq!(tally.passed, table.len() as u64);
        (table, tally)
    }

    #[test]
    fn sorts_and_counts_repeats() {
        let (table, tally) = table(&[
            report(1, 20, Some(1.0), Part::Whole),
            report(0, 10, Some(2.0), Part::Whole),
            report(1, 10, Some(3.0), Part::Whole),
            report(1, 20, Some(1.0), Part::Whole), // the same again
            report(0, 10, Some(4.0), Part::Whole), // another speed: this one holds
        ]);
        assert_eq!(tally.count(Reason::Repeated), 1);
        assert_eq!(tally.count(Reason::Replaced), 1);
        assert_eq!(table.of_station(0), 0..1);
        assert_eq!(table.of_station(1), 1..3);
        assert_eq!(table.of_station(2), 3..3);
        assert_eq!(table.speed(0), Some(4.0));
        assert_eq!(table.origin(0), (0, 5));
        assert!(table.times()[1] < table.times()[2]);
        let conflict = table.conflicts()[0];
        assert_eq!((conflict.set_aside, conflict.holds), ((0, 2), (0, 5)));
    }

    #[test]
    fn a_correction_holds_wherever_it_stands() {
        let corrected = Report {
            correction: 2,
            ..report(0, 10, Some(7.0), Part::Whole)
        };
        let first = Report {
            correction: 1,
            ..report(0, 10, Some(6.0), Part::Whole)
        };
        let (table, tally) = table(&[corrected, report(0, 10, Some(5.0), Part::Whole), first]);
        assert_eq!(table.speed(0), Some(7.0));
        assert_eq!(tally.count(Reason::Corrected), 2);
        assert!(table.conflicts().is_empty());
    }

    #[test]
    fn a_row_without_a_wind_does_not_wipe_out_one_that_has_it() {
        let empty = Report {
            direction: None,
            ..report(0, 10, None, Part::Whole)
        };
        for rows in [
            [empty, report(0, 10, Some(5.0), Part::Whole)],
            [report(0, 10, Some(5.0), Part::Whole), empty],
        ] {
            let (table, tally) = table(&rows);
            assert_eq!(table.speed(0), Some(5.0));
            assert_eq!(tally.count(Reason::Emptier), 1);
            assert!(table.conflicts().is_empty());
        }
    }

    #[test]
    fn speed_and_direction_of_two_files_become_one_report() {
        let (table, tally) = table(&[
            report(0, 10, Some(5.0), Part::Speed),
            report(0, 20, Some(6.0), Part::Speed),
            report(0, 10, None, Part::Direction),
            report(0, 30, None, Part::Direction),
        ]);
        assert_eq!(tally.count(Reason::Joined), 1);
        assert_eq!(table.content(0), Content::Wind);
        assert_eq!(table.content(1), Content::SpeedOnly);
        assert_eq!(table.content(2), Content::Nothing);
    }

    #[test]
    fn levels_are_different_reports() {
        let at = |level| Report {
            moving: Some(Moving {
                position: None,
                level: Some(level),
            }),
            ..report(0, 10, Some(level), Part::Whole)
        };
        let (table, _) = table(&[
            at(850.0),
            at(1000.0),
            at(850.0),
            report(0, 10, Some(1.0), Part::Whole),
        ]);
        let levels: Vec<Option<f64>> = (0..table.len())
            .map(|i| table.moving(i).and_then(|m| m.level))
            .collect();
        assert_eq!(levels, [None, Some(850.0), Some(1000.0)]);
    }
}
