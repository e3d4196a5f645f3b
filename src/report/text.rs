//! Text tables, long (one row for each station and time) and wide (a column for each station).

use std::io::Read;
use std::path::Path;

use rayon::prelude::*;

use super::direction::{DirectionText, direction_word};
use super::format::{Columns, North, ReportFormat, STATION_MARK, WindColumns};
use super::metar::parse_metar;
use super::names::{Finder, Found, Names};
use super::read::PartOutcome;
use super::rows::{Moving, Part, Report, Rows};
use crate::error::{Error, Place, Problem};
use crate::input::{
    Block, Blocks, Header, MissingMarks, Row, Splitter, TimeReader, find_delimiter,
    find_separators, latin1_to_utf8, parse_number, parse_number_with_comma, parse_short,
    read_header, shown,
};
use crate::station::{Position, missing_column};
use crate::tally::Reason;
use crate::time::Time;
use crate::units::{FromDirection, Wind};

/// Blocks read ahead and then parsed in parallel, for each thread.
const BLOCKS_PER_THREAD: usize = 2;
/// A row is seldom shorter than this, bytes; for the first guess of how many there are.
const SHORT_ROW: usize = 32;

/// Reads a text table.
pub(super) fn read_table(
    input: impl Read,
    file: &str,
    number: u32,
    format: &ReportFormat,
    columns: &Columns,
    names: &Names,
) -> Result<PartOutcome, Error> {
    let mut blocks = Blocks::new(input);
    let mut outcome = PartOutcome::default();
    let mut layout: Option<Layout> = None;
    let at_once = BLOCKS_PER_THREAD * rayon::current_num_threads();
    loop {
        let mut batch: Vec<Block> = Vec::with_capacity(at_once);
        let mut failure = None;
        while batch.len() < at_once {
            match blocks.next_block() {
                Ok(Some(block)) => batch.push(block),
                Ok(None) => break,
                Err(error) => {
                    failure = Some(error);
                    break;
                }
            }
        }
        let layout = match &layout {
            Some(layout) => layout,
            None => match (batch.first_mut(), failure.take()) {
                (Some(first), _) => {
                    let line = read_header(first, format.text.skip_lines);
                    let new = Layout::new(&line, file, number, format, columns, names)?;
                    layout.insert(new)
                }
                (None, Some(error)) => return Err(Error::read(Path::new(file), error)),
                (None, None) => {
                    let wanted = columns.time.first().map_or("time", String::as_str);
                    let problem = missing_column(file, wanted, std::iter::empty());
                    return Err(Error::Invalid(vec![problem]));
                }
            },
        };
        let ended = batch.len() < at_once;
        let parts: Vec<PartOutcome> = batch
            .par_iter()
            .map(|block| BlockReader::new(layout, names, block.bytes.len()).read(block))
            .collect();
        for part in parts {
            outcome.append(part);
        }
        for block in batch {
            blocks.give_back(block.bytes);
        }
        if let Some(error) = failure {
            outcome.ended_early(file, &error);
            return Ok(outcome);
        }
        if ended {
            return Ok(outcome);
        }
    }
}

/// A value of a report.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Value {
    Time,
    /// Direction, or eastward component, or whatever single value the table has.
    First,
    /// Speed, or northward component.
    Second,
    Gust,
    Latitude,
    Longitude,
    Level,
}

/// The columns of one station in a wide table.
struct WideStation {
    station: Found,
    name: String,
    first: Option<usize>,
    second: Option<usize>,
}

/// Where the values of a table stand.
struct Layout<'a> {
    file: &'a str,
    number: u32,
    format: &'a ReportFormat,
    columns: &'a Columns,
    delimiter: u8,
    station: Option<usize>,
    time: Vec<usize>,
    first: usize,
    second: Option<usize>,
    gust: Option<usize>,
    latitude: Option<usize>,
    longitude: Option<usize>,
    level: Option<usize>,
    wide: Vec<WideStation>,
    missing: MissingMarks<'a>,
    /// Direction and speed, one time column, true north, nothing else: most rows can go the short way.
    is_plain: bool,
    /// One of each station's unit of speed in m/s.
    factors: Vec<f64>,
}

impl<'a> Layout<'a> {
    fn new(
        line: &[u8],
        file: &'a str,
        number: u32,
        format: &'a ReportFormat,
        columns: &'a Columns,
        names: &Names,
    ) -> Result<Self, Error> {
        let line = if format.text.latin1 {
            latin1_to_utf8(line)
        } else {
            line.to_vec()
        };
        let (first, second) = columns.wind.names();
        let wanted = |name: &str| {
            columns.station.as_deref() == Some(name)
                || columns.time.iter().any(|t| t == name)
                || matches_pattern(first, name)
                || second.is_some_and(|s| matches_pattern(s, name))
        };
        let stated = format.text.delimiter.and_then(|d| u8::try_from(d).ok());
        let (delimiter, names_found) = find_delimiter(&line, stated, wanted);
        let header = Header {
            names: names_found,
            line: format.text.skip_lines + 1,
        };
        let mut finder = ColumnFinder {
            file,
            header: &header,
            problems: Vec::new(),
        };
        let is_wide = columns.wind.is_wide();
        let station = if is_wide {
            None
        } else {
            finder.optional(columns.station.as_deref())
        };
        let time = columns
            .time
            .iter()
            .filter_map(|name| finder.find(name))
            .collect();
        let (first_column, second_column) = if is_wide {
            (None, None)
        } else {
            (finder.find(first), finder.optional(second))
        };
        let gust = finder.optional(columns.gust.as_deref());
        let latitude = finder.optional(columns.latitude.as_deref());
        let longitude = finder.optional(columns.longitude.as_deref());
        let level = finder.optional(columns.level.as_deref());
        let wide = if is_wide {
            wide_stations(&header, first, second, names)
        } else {
            Vec::new()
        };
        if is_wide && wide.is_empty() {
            finder.missing(first);
        }
        if !finder.problems.is_empty() {
            return Err(Error::Invalid(finder.problems));
        }
        Ok(Self {
            file,
            number,
            format,
            columns,
            delimiter,
            station,
            time,
            first: first_column.unwrap_or(0),
            second: second_column,
            gust,
            latitude,
            longitude,
            level,
            wide,
            missing: MissingMarks::new(&format.text),
            is_plain: matches!(columns.wind, WindColumns::DirectionSpeed { .. })
                && !is_wide
                && columns.time.len() == 1
                && format.north == North::True
                && !format.text.decimal_comma
                && !names.any_moved
                && [
                    &columns.gust,
                    &columns.latitude,
                    &columns.longitude,
                    &columns.level,
                ]
                .iter()
                .all(|c| c.is_none()),
            factors: names
                .network
                .stations()
                .iter()
                .map(|s| {
                    s.site
                        .speed_unit
                        .unwrap_or(format.speed_unit)
                        .in_metres_per_second()
                })
                .collect(),
        })
    }

    /// Name of the column of a value, for messages.
    fn column_name(&self, value: Value) -> &str {
        let (first, second) = self.columns.wind.names();
        let optional = |name: &'a Option<String>| name.as_deref().unwrap_or("");
        match value {
            Value::Time => self.columns.time.first().map_or("", String::as_str),
            Value::First => first,
            Value::Second => second.unwrap_or(first),
            Value::Gust => optional(&self.columns.gust),
            Value::Latitude => optional(&self.columns.latitude),
            Value::Longitude => optional(&self.columns.longitude),
            Value::Level => optional(&self.columns.level),
        }
    }
}

/// True if a column name fits a name of the settings, in which `{station}` stands for anything.
fn matches_pattern(pattern: &str, name: &str) -> bool {
    station_in(pattern, name).is_some() || pattern == name
}

/// The station that a column name tells.
fn station_in<'a>(pattern: &str, name: &'a str) -> Option<&'a str> {
    let (before, after) = pattern.split_once(STATION_MARK)?;
    let station = name.strip_prefix(before)?.strip_suffix(after)?;
    (!station.is_empty()).then_some(station)
}

fn wide_stations(
    header: &Header,
    first: &str,
    second: Option<&str>,
    names: &Names,
) -> Vec<WideStation> {
    let mut stations: Vec<WideStation> = Vec::new();
    for (column, name) in header.names.iter().enumerate() {
        let (station, is_second) = match (
            station_in(first, name),
            second.and_then(|s| station_in(s, name)),
        ) {
            // A pattern such as `{station}` fits every column: the more particular one holds.
            (Some(a), Some(b)) => (if b.len() < a.len() { b } else { a }, b.len() < a.len()),
            (Some(a), None) => (a, false),
            (None, Some(b)) => (b, true),
            (None, None) => continue,
        };
        let found = names.find(station.as_bytes());
        // With a pattern that fits everything, what is no station (the time column) is no station column.
        if first == STATION_MARK && !matches!(found, Found::Station(_)) {
            continue;
        }
        let place = stations
            .iter()
            .position(|s| s.name == station)
            .unwrap_or_else(|| {
                stations.push(WideStation {
                    station: found,
                    name: station.to_string(),
                    first: None,
                    second: None,
                });
                stations.len() - 1
            });
        if let Some(entry) = stations.get_mut(place) {
            if is_second {
                entry.second = Some(column);
            } else {
                entry.first = Some(column);
            }
        }
    }
    stations
}

struct ColumnFinder<'a> {
    file: &'a str,
    header: &'a Header,
    problems: Vec<Problem>,
}

impl ColumnFinder<'_> {
    fn find(&mut self, name: &str) -> Option<usize> {
        let mut found = self.header.find(name);
        let Some(column) = found.next() else {
            self.missing(name);
            return None;
        };
        if found.next().is_some() {
            let place = Place {
                file: self.file.into(),
                line: Some(self.header.line),
                column: Some(name.into()),
            };
            self.problems
                .push(Problem::new(place, "there is more than one such column"));
        }
        Some(column)
    }

    fn optional(&mut self, name: Option<&str>) -> Option<usize> {
        name.and_then(|name| self.find(name))
    }

    fn missing(&mut self, name: &str) {
        let mut problem = missing_column(
            self.file,
            name,
            self.header.names.iter().map(String::as_str),
        );
        problem.place.line = Some(self.header.line);
        self.problems.push(problem);
    }
}

/// A row, or a station of a wide row, that cannot be used.
struct Unusable {
    reason: Reason,
    value: Option<Value>,
    message: String,
}

impl Unusable {
    fn new(reason: Reason, value: Value, text: &[u8], expected: &str) -> Self {
        Self {
            reason,
            value: Some(value),
            message: format!("`{}` {expected}", shown(text)),
        }
    }

    fn line(reason: Reason, message: String) -> Self {
        Self {
            reason,
            value: None,
            message,
        }
    }
}

/// Speed and direction as read, direction true; and the gust.
#[derive(Default)]
struct WindValue {
    speed: Option<f64>,
    direction: Option<FromDirection>,
    gust: Option<f64>,
    correction: u8,
}

struct BlockReader<'a> {
    layout: &'a Layout<'a>,
    names: &'a Names<'a>,
    finder: Finder<'a>,
    time: TimeReader<'a>,
    time_text: Vec<u8>,
    rows: Rows,
    outcome: PartOutcome,
}

impl<'a> BlockReader<'a> {
    fn new(layout: &'a Layout<'a>, names: &'a Names<'a>, bytes: usize) -> Self {
        Self {
            layout,
            names,
            finder: Finder::new(names),
            time: TimeReader::new(&layout.format.time),
            time_text: Vec::new(),
            rows: Rows::with_capacity(bytes / SHORT_ROW + 1),
            outcome: PartOutcome::default(),
        }
    }

    fn read(mut self, block: &Block) -> PartOutcome {
        let converted;
        let mut rest = block.bytes.as_slice();
        if self.layout.format.text.latin1 {
            converted = latin1_to_utf8(rest);
            rest = &converted;
        }
        if memchr::memchr(b'"', rest).is_some() {
            self.quoted_lines(rest, block.first_line);
        } else {
            self.plain_lines(rest, block.first_line);
        }
        if let Some(number) = block.overlong {
            let message = "the line is longer than 1 MiB".to_string();
            self.set_aside(Unusable::line(Reason::BrokenLine, message), number);
        }
        self.outcome.rows.push(self.rows);
        self.outcome
    }

    /// Lines without quotes: all separators of the block are found first.
    fn plain_lines(&mut self, text: &[u8], first_line: u64) {
        let mut separators = Vec::with_capacity(text.len() / 8);
        find_separators(text, self.layout.delimiter, &mut separators);
        let mut fields: Vec<(u32, u32)> = Vec::new();
        let (mut start, mut number) = (0, first_line);
        for at in separators {
            fields.push((start, at));
            start = at + 1;
            if text.get(at as usize) == Some(&b'\n') {
                self.row(&Row::new(text, &fields), number);
                fields.clear();
                number += 1;
            }
        }
        // The last line may lack its end. Blocks are far smaller than 4 GiB.
        let end = u32::try_from(text.len()).unwrap_or(u32::MAX);
        if start < end || !fields.is_empty() {
            fields.push((start, end));
            self.row(&Row::new(text, &fields), number);
        }
    }

    fn quoted_lines(&mut self, text: &[u8], first_line: u64) {
        let mut splitter = Splitter::new(self.layout.delimiter);
        for (number, line) in (first_line..).zip(text.split(|&byte| byte == b'\n')) {
            let line = line.trim_ascii_end();
            match splitter.split(line) {
                Some(row) => self.row(&row, number),
                None => {
                    let message = format!("a quote does not end on its line: `{}`", shown(line));
                    self.set_aside(Unusable::line(Reason::BrokenLine, message), number);
                }
            }
        }
    }

    fn set_aside(&mut self, unusable: Unusable, line: u64) {
        let layout = self.layout;
        self.outcome.set_aside(unusable.reason, || {
            let place = Place {
                file: layout.file.into(),
                line: Some(line),
                column: unusable
                    .value
                    .map(|value| layout.column_name(value).to_string()),
            };
            Problem::new(place, unusable.message)
        });
    }

    fn row(&mut self, row: &Row, line: u64) {
        if row.is_blank() {
            return;
        }
        if self.layout.is_plain && self.clean_row(row, line).is_some() {
            return;
        }
        if !self.layout.wide.is_empty() {
            self.wide_row(row, line);
        } else if let Err(unusable) = self.long_row(row, line) {
            self.set_aside(unusable, line);
        }
    }

    /// A row of the plainest table with nothing odd in it; `None` leaves it, untouched, to the general way.
    fn clean_row(&mut self, row: &Row, line: u64) -> Option<()> {
        let layout = self.layout;
        let degrees = parse_short(row.get(layout.first)?)?;
        let speed = parse_short(row.get(layout.second?)?)?;
        let direction = FromDirection::new(degrees)?;
        let time = self.time.parse(row.get(*layout.time.first()?)?).ok()?;
        let station = self.finder.expected(row.get(layout.station?)?)?;
        self.rows.push(&Report {
            station,
            time,
            speed: Some(speed * self.factor(station)),
            direction: Some(direction),
            part: Part::Whole,
            gust: None,
            moving: None,
            correction: 0,
            place: (layout.number, line),
        });
        self.outcome.tally.pass(1);
        Some(())
    }

    fn long_row(&mut self, row: &Row, line: u64) -> Result<(), Unusable> {
        let layout = self.layout;
        if matches!(layout.columns.wind, WindColumns::Metar { .. }) {
            return self.metar_row(row, line);
        }
        let last = layout.second.unwrap_or(0).max(layout.first);
        if row.len() <= last {
            let message = format!(
                "the row has {} columns (at least {} expected)",
                row.len(),
                last + 1
            );
            return Err(Unusable::line(Reason::TooFewColumns, message));
        }
        let name = row.field(layout.station.unwrap_or(0));
        let station = match self.finder.find(name) {
            Found::Station(station) => station,
            found => {
                self.outcome.no_station(found, name);
                return Ok(());
            }
        };
        let time = self.time(row)?;
        let mut wind = self.wind(
            station,
            time,
            row.field(layout.first),
            layout.second.map(|c| row.field(c)),
        )?;
        if let Some(column) = layout.gust {
            let factor = self.factor(station);
            wind.gust = self.speed(row.field(column), Value::Gust, factor)?;
        }
        let moving = self.moving(row)?;
        self.push(station, time, &wind, moving, line);
        Ok(())
    }

    fn wide_row(&mut self, row: &Row, line: u64) {
        let layout = self.layout;
        let time = match self.time(row) {
            Ok(time) => time,
            Err(unusable) => {
                // The row holds a report of each station.
                let more = layout.wide.len() as u64 - 1;
                self.outcome.tally.set_aside(unusable.reason, more);
                self.set_aside(unusable, line);
                return;
            }
        };
        for entry in &layout.wide {
            let Found::Station(station) = entry.station else {
                self.outcome
                    .no_station(entry.station, entry.name.as_bytes());
                continue;
            };
            let first = entry.first.map_or(&b""[..], |c| row.field(c));
            let second = layout
                .columns
                .wind
                .names()
                .1
                .map(|_| entry.second.map_or(&b""[..], |c| row.field(c)));
            match self.wind(station, time, first, second) {
                Ok(wind) => self.push(station, time, &wind, None, line),
                Err(unusable) => self.set_aside(unusable, line),
            }
        }
    }

    /// A row with the text of a METAR; station and time from their columns, or from the text.
    fn metar_row(&mut self, row: &Row, line: u64) -> Result<(), Unusable> {
        let layout = self.layout;
        let bytes = row.get(layout.first).ok_or_else(|| {
            let message = format!(
                "the row has {} columns (at least {} expected)",
                row.len(),
                layout.first + 1
            );
            Unusable::line(Reason::TooFewColumns, message)
        })?;
        let text = String::from_utf8_lossy(bytes);
        let metar = parse_metar(&text).map_err(|error| Unusable {
            reason: Reason::UnreadableReport,
            value: Some(Value::First),
            message: error.to_string(),
        })?;
        let name = match layout.station {
            Some(column) => row.field(column),
            None => metar.station.as_bytes(),
        };
        let station = match self.finder.find(name) {
            Found::Station(station) => station,
            found => {
                self.outcome.no_station(found, name);
                return Ok(());
            }
        };
        let time = if layout.time.is_empty() {
            super::coded_file::resolve(metar.time, layout.format.reference).ok_or_else(|| {
                Unusable {
                    reason: Reason::UnreadableTime,
                    value: Some(Value::First),
                    message: format!("`{}` has no time that can be resolved", shown(bytes)),
                }
            })?
        } else {
            self.time(row)?
        };
        let (speed, direction, gust) = super::coded_file::wind_of(metar.wind.as_ref());
        let wind = WindValue {
            speed,
            direction,
            gust,
            correction: metar.correction,
        };
        self.push(station, time, &wind, None, line);
        Ok(())
    }

    fn push(
        &mut self,
        station: u32,
        time: Time,
        wind: &WindValue,
        moving: Option<Moving>,
        line: u64,
    ) {
        if !self.names.is_valid(station, time) {
            self.outcome.tally.set_aside(Reason::OutsideValidity, 1);
            return;
        }
        let part = match self.layout.columns.wind {
            WindColumns::Speed { .. } => Part::Speed,
            WindColumns::Direction { .. } => Part::Direction,
            _ => Part::Whole,
        };
        self.rows.push(&Report {
            station,
            time,
            speed: wind.speed,
            direction: wind.direction,
            part,
            gust: wind.gust,
            moving,
            correction: wind.correction,
            place: (self.layout.number, line),
        });
        self.outcome.tally.pass(1);
    }

    fn time(&mut self, row: &Row) -> Result<Time, Unusable> {
        let result = match self.layout.time.as_slice() {
            [column] => self.time.parse(row.field(*column)),
            columns => {
                self.time_text.clear();
                for &column in columns {
                    if !self.time_text.is_empty() {
                        self.time_text.push(b' ');
                    }
                    self.time_text.extend_from_slice(row.field(column));
                }
                self.time.parse(&self.time_text)
            }
        };
        result.map_err(|message| Unusable {
            reason: Reason::UnreadableTime,
            value: Some(Value::Time),
            message,
        })
    }

    /// One of the station's unit of speed in m/s.
    fn factor(&self, station: u32) -> f64 {
        let factors = &self.layout.factors;
        factors.get(station as usize).copied().unwrap_or(1.0)
    }

    fn wind(
        &self,
        station: u32,
        time: Time,
        first: &[u8],
        second: Option<&[u8]>,
    ) -> Result<WindValue, Unusable> {
        let factor = self.factor(station);
        let second = second.unwrap_or_default();
        let mut value = WindValue::default();
        match self.layout.columns.wind {
            WindColumns::DirectionSpeed { .. } => {
                let direction = self.direction(first)?;
                value.speed = self.speed(second, Value::Second, factor)?;
                value.direction = self.true_direction(direction, station, time)?;
                // The word alone says that there is no wind.
                if direction == Some(DirectionText::Calm) && value.speed.is_none() {
                    value.speed = Some(0.0);
                }
            }
            WindColumns::Speed { .. } => value.speed = self.speed(first, Value::First, factor)?,
            WindColumns::Direction { .. } => {
                let direction = self.direction(first)?;
                value.direction = self.true_direction(direction, station, time)?;
            }
            WindColumns::Components { .. } => {
                let u = self.number(first, Value::First)?;
                let v = self.number(second, Value::Second)?;
                if let (Some(u), Some(v)) = (u, v) {
                    let wind = Wind {
                        u: u * factor,
                        v: v * factor,
                    };
                    value.speed = Some(wind.speed());
                    let direction = wind.from_direction().map(DirectionText::From);
                    value.direction = self.true_direction(direction, station, time)?;
                }
            }
            WindColumns::Metar { .. } => {}
        }
        Ok(value)
    }

    fn true_direction(
        &self,
        direction: Option<DirectionText>,
        station: u32,
        time: Time,
    ) -> Result<Option<FromDirection>, Unusable> {
        let Some(DirectionText::From(direction)) = direction else {
            return Ok(None);
        };
        if self.layout.format.north == North::True {
            return Ok(Some(direction));
        }
        match self.names.declinations.at(station as usize, time) {
            Some(declination) => Ok(FromDirection::new((direction.degrees() + declination).rem_euclid(360.0))),
            None => Err(Unusable::line(
                Reason::NoDeclination,
                "the direction is magnetic, and the declination is neither stated (`declination` in the station list) \
                 nor modelled (years 2020 to 2029)"
                    .into(),
            )),
        }
    }

    /// A number, or `None` for a missing mark; a mark may itself look like a number.
    fn number(&self, text: &[u8], value: Value) -> Result<Option<f64>, Unusable> {
        let comma = self.layout.format.text.decimal_comma;
        let number = if comma {
            parse_number_with_comma(text)
        } else {
            parse_number(text)
        };
        match number {
            Some(number) if number >= 0.0 || !self.layout.missing.contains(text) => {
                Ok(Some(number))
            }
            _ if self.layout.missing.contains(text) => Ok(None),
            _ => {
                let expected = if comma {
                    "is not a number (decimal comma expected)"
                } else {
                    "is not a number (decimal point expected)"
                };
                Err(Unusable::new(Reason::UnreadableWind, value, text, expected))
            }
        }
    }

    fn speed(&self, text: &[u8], value: Value, factor: f64) -> Result<Option<f64>, Unusable> {
        match self.number(text, value)? {
            Some(speed) if speed < 0.0 => {
                let expected = "is below 0 (a speed of 0 or more expected)";
                Err(Unusable::new(Reason::NegativeSpeed, value, text, expected))
            }
            speed => Ok(speed.map(|s| s * factor)),
        }
    }

    fn direction(&self, text: &[u8]) -> Result<Option<DirectionText>, Unusable> {
        if text.first().is_some_and(u8::is_ascii_alphabetic)
            && let Some(word) = direction_word(text)
        {
            return Ok(Some(word));
        }
        let degrees = self.number(text, Value::First).map_err(|_| {
            let expected = "is no direction (degrees or a point of the compass expected)";
            Unusable::new(Reason::UnreadableWind, Value::First, text, expected)
        })?;
        let Some(degrees) = degrees else {
            return Ok(None);
        };
        if let Some(direction) = FromDirection::new(degrees) {
            return Ok(Some(DirectionText::From(direction)));
        }
        let expected = "is no direction (0 to 360 degrees expected)";
        Err(Unusable::new(
            Reason::DirectionOutOfRange,
            Value::First,
            text,
            expected,
        ))
    }

    /// Position and level of the row, where the table has such columns.
    fn moving(&self, row: &Row) -> Result<Option<Moving>, Unusable> {
        let layout = self.layout;
        if layout.latitude.is_none() && layout.longitude.is_none() && layout.level.is_none() {
            return Ok(None);
        }
        let number = |column: Option<usize>, value| match column {
            Some(column) => self.number(row.field(column), value),
            None => Ok(None),
        };
        let latitude = number(layout.latitude, Value::Latitude)?;
        let longitude = number(layout.longitude, Value::Longitude)?;
        let level = number(layout.level, Value::Level)?.map(|l| l * layout.format.level_factor);
        let position = match (latitude, longitude) {
            (Some(latitude), Some(longitude)) => Some(Position::new(latitude, longitude).map_err(
                |message| Unusable {
                    reason: Reason::UnreadablePosition,
                    value: Some(Value::Latitude),
                    message,
                },
            )?),
            _ => None,
        };
        Ok(Some(Moving { position, level }))
    }
}
