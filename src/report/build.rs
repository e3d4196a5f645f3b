//! From rows in the order of the input to a table by station and time.

use std::cmp::Ordering;
use std::ops::Range;

use super::rows::{NO_SCALARS, Packed, Rows, kind};
use super::table::{Conflict, ReportTable, TableColumns};
use crate::check::{Flag, TestFlags};
use crate::tally::{Reason, Tally};
use crate::time::Time;
use crate::units::{FromDirection, Wind};

/// Conflicts that are kept with their places; the others are only counted.
pub const CONFLICTS_KEPT: usize = 100;

/// A row among several [`Rows`].
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
struct At {
    part: u32,
    row: u32,
}

/// Builds the table of `parts` after the reports of `before` from `keep_from` on, to be judged until `judged_until`.
pub(super) fn build(
    parts: &[Rows],
    stations: usize,
    before: &ReportTable,
    keep_from: Time,
    judged_until: Time,
) -> (ReportTable, Tally) {
    let carried: Vec<Range<usize>> = (0..stations)
        .map(|s| {
            if s < before.stations() {
                before.of_station_from(s, keep_from)
            } else {
                0..0
            }
        })
        .collect();
    let mut counts = vec![0_usize; stations];
    let mut kinds = 0;
    for report in parts.iter().flat_map(|p| &p.packed) {
        counts[report.station as usize] += 1; // stations are < `stations`
        kinds |= report.kind;
    }
    let plain = kinds & (kind::SPEED_PART | kind::DIRECTION_PART) == 0
        && !before.has_rare_columns()
        && parts.iter().all(|p| {
            p.gust.is_empty()
                && p.moving.is_empty()
                && p.correction.is_empty()
                && p.scalars.is_empty()
        });
    let (mut table, tally) = plain
        .then(|| straight(parts, &counts, before, &carried))
        .flatten()
        .unwrap_or_else(|| sorted(parts, &counts, before, &carried));
    table.judged = before.judged.end..judged_until;
    (table, tally)
}

/// The table of rows that have the order of time at every station, each time once: every value goes straight to its
/// place. `None` if a row is out of order.
fn straight(
    parts: &[Rows],
    counts: &[usize],
    before: &ReportTable,
    carried: &[Range<usize>],
) -> Option<(ReportTable, Tally)> {
    let mut starts = vec![0];
    let mut added = Vec::with_capacity(counts.len());
    let mut total = 0;
    for (count, carried) in counts.iter().zip(carried) {
        added.push(total + carried.len());
        total += carried.len() + count;
        starts.push(total);
    }
    let mut out = TableColumns {
        time: vec![Time::default(); total],
        given: vec![[0.0; 2]; total],
        wind: vec![Wind::default(); total],
        kind: vec![0; total],
        origin: vec![(0, 0); total],
        flag: vec![Flag::NotEvaluated; total],
        tests: vec![TestFlags::default(); total],
        ..TableColumns::default()
    };
    for (&start, carried) in starts.iter().zip(carried) {
        let (to, from) = (start..start + carried.len(), carried.clone());
        let columns = &before.columns;
        out.time[to.clone()].copy_from_slice(&columns.time[from.clone()]);
        out.given[to.clone()].copy_from_slice(&columns.given[from.clone()]);
        out.wind[to.clone()].copy_from_slice(&columns.wind[from.clone()]);
        out.kind[to.clone()].copy_from_slice(&columns.kind[from.clone()]);
        out.origin[to.clone()].copy_from_slice(&columns.origin[from.clone()]);
        out.flag[to.clone()].copy_from_slice(&columns.flag[from.clone()]);
        out.tests[to].copy_from_slice(&columns.tests[from]);
    }
    let mut next: Vec<(usize, Time)> = added
        .iter()
        .map(|&k| (k, Time::from_micros(i64::MIN)))
        .collect();
    for report in parts.iter().flat_map(|p| &p.packed) {
        let (k, last) = next[report.station as usize];
        if report.time <= last {
            return None;
        }
        next[report.station as usize] = (k + 1, report.time);
        out.time[k] = report.time;
        out.given[k] = [report.speed, report.direction];
        out.wind[k] = wind_of(report.kind, report.speed, report.direction);
        out.kind[k] = report.kind;
        out.origin[k] = (report.line, report.file);
    }
    let mut tally = Tally::default();
    tally.pass(counts.iter().sum::<usize>() as u64);
    let table = ReportTable {
        columns: out,
        starts,
        added,
        ..ReportTable::default()
    };
    Some((table, tally))
}

/// The table of rows in any order.
fn sorted(
    parts: &[Rows],
    counts: &[usize],
    before: &ReportTable,
    carried: &[Range<usize>],
) -> (ReportTable, Tally) {
    let ends = counts.iter().scan(0, |end, count| {
        *end += count;
        Some(*end)
    });
    let starts: Vec<usize> = std::iter::once(0).chain(ends).collect();
    // The order of the input within each station.
    let mut next = starts.clone();
    let mut order = vec![At { part: 0, row: 0 }; starts[counts.len()]];
    for (part, rows) in (0..).zip(parts) {
        for (row, report) in (0..).zip(&rows.packed) {
            let slot = &mut next[report.station as usize];
            order[*slot] = At { part, row };
            *slot += 1;
        }
    }
    let mut builder = TableBuilder {
        parts,
        out: TableColumns::default(),
        tally: Tally::default(),
        conflicts: Vec::new(),
    };
    let mut sorted_starts = vec![0];
    let mut added = Vec::with_capacity(counts.len());
    for (s, carried) in carried.iter().enumerate() {
        builder.out.append(&before.columns, carried.clone());
        added.push(builder.out.time.len());
        let of_station = &mut order[starts[s]..starts[s + 1]];
        if !of_station.is_sorted_by_key(|at| builder.key(*at)) {
            of_station.sort_by(|a, b| {
                let (a, b) = (builder.key(*a), builder.key(*b));
                a.partial_cmp(&b).unwrap_or(Ordering::Equal)
            });
        }
        builder.station(of_station);
        sorted_starts.push(builder.out.time.len());
    }
    let table = ReportTable {
        columns: builder.out,
        starts: sorted_starts,
        added,
        conflicts: builder.conflicts,
        ..ReportTable::default()
    };
    (table, builder.tally)
}

/// The wind of a report; 0 where there is none.
fn wind_of(kind: u8, speed: f64, degrees: f64) -> Wind {
    let both = kind::SPEED | kind::DIRECTION;
    if kind & both != both || speed <= 0.0 {
        return Wind::default();
    }
    FromDirection::new(degrees).map_or_else(Wind::default, |from| Wind::blowing_from(speed, from))
}

impl TableColumns {
    /// Appends reports of another table.
    fn append(&mut self, other: &Self, range: Range<usize>) {
        let before = self.time.len();
        self.time.extend_from_slice(&other.time[range.clone()]);
        self.given.extend_from_slice(&other.given[range.clone()]);
        self.wind.extend_from_slice(&other.wind[range.clone()]);
        self.kind.extend_from_slice(&other.kind[range.clone()]);
        self.origin.extend_from_slice(&other.origin[range.clone()]);
        self.flag.extend_from_slice(&other.flag[range.clone()]);
        self.tests.extend_from_slice(&other.tests[range.clone()]);
        // A column that one of the tables has and the other has not is filled up.
        if !other.gust.is_empty() || !self.gust.is_empty() {
            self.gust.resize(before, None);
            let values = range.clone().map(|i| other.gust.get(i).copied().flatten());
            self.gust.extend(values);
        }
        if !other.moving.is_empty() || !self.moving.is_empty() {
            self.moving.resize(before, None);
            let values = range
                .clone()
                .map(|i| other.moving.get(i).copied().flatten());
            self.moving.extend(values);
        }
        if !other.scalars.is_empty() || !self.scalars.is_empty() {
            self.scalars.resize(before, NO_SCALARS);
            let values = range.map(|i| other.scalars.get(i).copied().unwrap_or(NO_SCALARS));
            self.scalars.extend(values);
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

    /// What rows are sorted by: time, level (those without come first), place in the input.
    fn key(&self, at: At) -> (Time, f64, (u16, u32)) {
        let (time, level) = self.when(at);
        (time, level, self.place(at))
    }

    /// Time and level; a station has one report of each.
    fn when(&self, at: At) -> (Time, f64) {
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
            let when = self.when(order[start]);
            let mut end = start + 1;
            while end < order.len() && self.when(order[end]) == when {
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
        out.given.push([report.speed, degrees]);
        out.wind.push(wind_of(kind, report.speed, degrees));
        out.kind.push(kind & (kind::SPEED | kind::DIRECTION));
        out.origin.push((report.line, report.file));
        out.flag.push(Flag::NotEvaluated);
        out.tests.push(TestFlags::default());
        // A column that one part has and another has not is filled up.
        if !rows.gust.is_empty() || !out.gust.is_empty() {
            out.gust.resize(before, None);
            out.gust.push(rows.gust.get(row).copied().flatten());
        }
        if !rows.moving.is_empty() || !out.moving.is_empty() {
            out.moving.resize(before, None);
            out.moving.push(rows.moving.get(row).copied().flatten());
        }
        // The parts of a wind may both have scalars.
        let scalars = |at: At| {
            let column = &self.parts[at.part as usize].scalars;
            column.get(at.row as usize).copied().unwrap_or(NO_SCALARS)
        };
        let (own, other) = (scalars(at), direction.map_or(NO_SCALARS, scalars));
        let values = std::array::from_fn(|k| own[k].or(other[k]));
        if values != NO_SCALARS || !out.scalars.is_empty() {
            out.scalars.resize(before, NO_SCALARS);
            out.scalars.push(values);
        }
    }
}
