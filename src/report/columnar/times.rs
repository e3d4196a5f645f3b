//! Times of columnar tables.

use chrono::{DateTime, NaiveDateTime};

use arrow_schema::TimeUnit;

use super::cells::{Cell, Cells, Kind};
use crate::input::{Label, TimeFormat, TimeReader, Zone};
use crate::time::{Time, micros_of};

/// One day, μs.
const DAY: i64 = 86_400_000_000;

/// Reads the times of one table.
pub(super) struct Times<'a> {
    kinds: &'a [Kind],
    format: &'a TimeFormat,
    /// For texts and numbers in the form that the settings state.
    stated: TimeReader<'a>,
    /// For what the table itself says to be days and times of day.
    clock: TimeReader<'a>,
    /// From the time of the row to the end of the averaging window, μs.
    shift: i64,
    last: Option<(i128, Time)>,
    text: Vec<u8>,
}

impl<'a> Times<'a> {
    /// `clock` is the format of the settings, with RFC 3339 for its form.
    pub(super) fn new(kinds: &'a [Kind], format: &'a TimeFormat, clock: &'a TimeFormat) -> Self {
        let window = micros_of(format.averaging);
        Self {
            kinds,
            format,
            stated: TimeReader::new(format),
            clock: TimeReader::new(clock),
            shift: match format.label {
                Label::Start => window,
                Label::Middle => window / 2,
                Label::End => 0,
            },
            last: None,
            text: Vec::new(),
        }
    }

    /// The time of a row from the columns of the time.
    pub(super) fn read(&mut self, columns: &[Cells], row: usize) -> Result<Time, String> {
        if let ([column], [Kind::Instant(unit) | Kind::Local(unit)]) = (columns, self.kinds) {
            let Cell::Integer(value) = column.at(row) else {
                return self.clock.parse(b"");
            };
            if let Some((last, time)) = self.last
                && last == value
            {
                return Ok(time);
            }
            let calendar = micros(value, *unit)
                .and_then(DateTime::from_timestamp_micros)
                .map(|time| time.naive_utc())
                .filter(|time| Time::from_utc(*time).is_some())
                .ok_or_else(|| format!("`{value}` is not in the years 1800 to 2200"))?;
            let time = if matches!(self.kinds, [Kind::Instant(_)]) {
                self.instant(calendar)?
            } else {
                self.local(calendar)?
            };
            self.last = Some((value, time));
            return Ok(time);
        }
        self.text.clear();
        for (kind, column) in self.kinds.iter().zip(columns) {
            if !self.text.is_empty() {
                self.text.push(b' ');
            }
            append(*kind, column.at(row), &mut self.text);
        }
        if !self.kinds.iter().all(|k| is_clock(*k)) {
            return self.stated.parse(&self.text);
        }
        if columns.len() == 1 && !self.text.is_empty() {
            // A day alone is its midnight.
            self.text.extend_from_slice(b" 00:00:00");
        }
        self.clock.parse(&self.text)
    }

    fn instant(&self, calendar: NaiveDateTime) -> Result<Time, String> {
        Time::from_utc(calendar)
            .map(|time| time.plus_micros(self.shift))
            .ok_or_else(|| format!("`{calendar}` is not in the years 1800 to 2200"))
    }

    /// A local time in the stated zone.
    fn local(&mut self, calendar: NaiveDateTime) -> Result<Time, String> {
        if let Zone::Fixed(offset) = self.format.zone {
            let offset = chrono::TimeDelta::seconds(i64::from(offset));
            if let Some(utc) = calendar.checked_sub_signed(offset) {
                return self.instant(utc);
            }
        }
        let text = calendar.format("%Y-%m-%d %H:%M:%S%.f").to_string();
        self.clock.parse(text.as_bytes())
    }
}

/// True for days and times of day.
pub(super) fn is_clock(kind: Kind) -> bool {
    matches!(kind, Kind::Day | Kind::DayInMilliseconds | Kind::Clock(_))
}

/// Whole microseconds, rounded down; `None` far outside the calendar.
fn micros(value: i128, unit: TimeUnit) -> Option<i64> {
    let micros = match unit {
        TimeUnit::Second => value.checked_mul(1_000_000)?,
        TimeUnit::Millisecond => value.checked_mul(1_000)?,
        TimeUnit::Microsecond => value,
        TimeUnit::Nanosecond => value.div_euclid(1_000),
    };
    i64::try_from(micros).ok()
}

/// Writes a part of a time as texts have it.
fn append(kind: Kind, cell: Cell, text: &mut Vec<u8>) {
    let calendar = |value, unit| {
        let micros = micros(value, unit)?;
        DateTime::from_timestamp_micros(micros).map(|time| time.naive_utc())
    };
    let written = match (kind, cell) {
        (Kind::Day, Cell::Integer(days)) => calendar(days * i128::from(DAY), TimeUnit::Microsecond)
            .map(|time| time.date().to_string()),
        (Kind::DayInMilliseconds, Cell::Integer(value)) => {
            calendar(value, TimeUnit::Millisecond).map(|time| time.date().to_string())
        }
        (Kind::Clock(unit), Cell::Integer(value)) => calendar(value, unit)
            .filter(|time| time.and_utc().timestamp_micros() < DAY)
            .map(|time| time.time().to_string()),
        _ => None,
    };
    match written {
        Some(written) => text.extend_from_slice(written.as_bytes()),
        None => cell.append_to(text),
    }
}
