//! Text tables, long (one row for each station and time) and wide (a column for each station).

use std::io::{self, Read};
use std::path::Path;
use std::sync::{Mutex, PoisonError};

use rayon::prelude::*;

use super::format::WindColumns;
use super::layout::{Layout, Role};
use super::metar::parse_metar;
use super::names::{Finder, Found};
use super::read::PartOutcome;
use super::rows::{Moving, NO_SCALARS, Rows, ScalarValues};
use super::values::{GivenWind, Unusable, Value, ValueReader, WindValue};
use crate::error::Error;
use crate::input::{
    Block, Blocks, Row, Splitter, TimeReader, find_separators, latin1_to_utf8, parse_short,
    read_header, shown,
};
use crate::station::missing_column;
use crate::tally::Reason;
use crate::time::Time;
use crate::units::FromDirection;

/// A row is seldom shorter than this, bytes; for the first guess of how many there are.
const SHORT_ROW: usize = 32;

/// A text table as it is read, some blocks at a time.
pub(super) struct TableFeed<'a> {
    values: ValueReader<'a>,
    blocks: Blocks<Box<dyn Read + Send + 'a>>,
    layout: Layout,
    /// The rest of the block that the header line stood in.
    first: Option<Block>,
}

impl<'a> TableFeed<'a> {
    /// Reads the header line, with blocks of about `block_size` bytes.
    pub(super) fn open(
        input: Box<dyn Read + Send + 'a>,
        values: ValueReader<'a>,
        block_size: usize,
    ) -> Result<Self, Error> {
        let mut blocks = Blocks::new(input, block_size);
        let mut first = match blocks.next_block() {
            Ok(Some(first)) => first,
            Ok(None) => {
                let wanted = values.columns.time.first().map_or("time", String::as_str);
                let problem = missing_column(values.file, wanted, std::iter::empty());
                return Err(Error::Invalid(vec![problem]));
            }
            Err(error) => return Err(Error::read(Path::new(values.file), error)),
        };
        let line = read_header(&mut first, values.format.text.skip_lines);
        Ok(Self {
            layout: Layout::new(&line, &values)?,
            values,
            blocks,
            first: Some(first),
        })
    }

    /// Reads at most `at_once` blocks, several at a time: while one thread waits for the next block, the others read
    /// theirs. The parts have the order of the input. The second value tells whether the input has ended.
    pub(super) fn turn(&mut self, at_once: usize) -> (Vec<PartOutcome>, bool) {
        let (layout, values) = (&self.layout, &self.values);
        let source = Mutex::new((0_usize, self.first.take(), &mut self.blocks));
        // The number of a block, the block; nothing at the end.
        let next = || -> io::Result<Option<(usize, Block)>> {
            let mut source = source.lock().unwrap_or_else(PoisonError::into_inner);
            let (count, first, blocks) = &mut *source;
            let block = match first.take() {
                Some(block) => Some(block),
                None => blocks.next_block()?,
            };
            *count += 1;
            Ok(block.map(|block| (*count, block)))
        };
        let give_back = |bytes: Vec<u8>| {
            let mut source = source.lock().unwrap_or_else(PoisonError::into_inner);
            source.2.give_back(bytes);
        };
        let mut parts: Vec<(usize, PartOutcome, bool)> = (0..at_once)
            .into_par_iter()
            .map(|_| match next() {
                Ok(Some((number, block))) => {
                    let part = BlockReader::new(layout, values, block.bytes.len()).read(&block);
                    give_back(block.bytes);
                    (number, part, false)
                }
                Ok(None) => (usize::MAX, PartOutcome::default(), true),
                Err(error) => {
                    let mut part = PartOutcome::default();
                    part.books.ended_early(values.file, &error);
                    (usize::MAX - 1, part, true)
                }
            })
            .collect();
        parts.sort_by_key(|part| part.0);
        let ended = parts.iter().any(|part| part.2);
        (parts.into_iter().map(|part| part.1).collect(), ended)
    }
}

struct BlockReader<'a> {
    layout: &'a Layout,
    values: &'a ValueReader<'a>,
    finder: Finder<'a>,
    time: TimeReader<'a>,
    time_text: Vec<u8>,
    rows: Rows,
    outcome: PartOutcome,
}

impl<'a> BlockReader<'a> {
    fn new(layout: &'a Layout, values: &'a ValueReader<'a>, bytes: usize) -> Self {
        Self {
            layout,
            values,
            finder: Finder::new(values.names),
            time: TimeReader::new(&values.format.time),
            time_text: Vec::new(),
            rows: Rows::with_capacity(bytes / SHORT_ROW + 1),
            outcome: PartOutcome::default(),
        }
    }

    fn read(mut self, block: &Block) -> PartOutcome {
        let converted;
        let mut rest = block.bytes.as_slice();
        if self.values.format.text.latin1 {
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

    fn plain_lines(&mut self, text: &[u8], first_line: u64) {
        let mut separators = Vec::new();
        let (mut rest, mut number) = (text, first_line);
        while !rest.is_empty() {
            let length = self.quick_row(rest, number).unwrap_or_else(|| {
                let end = memchr::memchr(b'\n', rest);
                let line = rest.get(..end.unwrap_or(rest.len())).unwrap_or_default();
                find_separators(line, self.layout.delimiter, &mut separators);
                // The end of the line ends its last field. Blocks are far smaller than 4 GiB.
                separators.push(u32::try_from(line.len()).unwrap_or(u32::MAX));
                self.row(&Row::new(line, 0, &separators), number);
                line.len() + 1
            });
            rest = rest.get(length..).unwrap_or_default();
            number += 1;
        }
    }

    fn quoted_lines(&mut self, text: &[u8], first_line: u64) {
        let mut splitter = Splitter::new(self.layout.delimiter);
        for (number, line) in (first_line..).zip(text.split(|&byte| byte == b'\n')) {
            let mut line = line;
            while let [before @ .., b'\r'] = line {
                line = before;
            }
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
        let values = self.values;
        let reason = unusable.reason;
        self.outcome
            .books
            .set_aside(reason, || values.problem(unusable, line));
    }

    fn row(&mut self, row: &Row, line: u64) {
        if row.is_blank() {
            return;
        }
        if !self.layout.wide.is_empty() {
            self.wide_row(row, line);
        } else if let Err(unusable) = self.long_row(row, line) {
            self.set_aside(unusable, line);
        }
    }

    /// The usual row of the plainest table: the time of the row before, the station that followed it last time, and two
    /// short numbers, each compared or read in its place without a search. Returns its length with the line end; `None`
    /// leaves the row, untouched, to the general way.
    fn quick_row(&mut self, rest: &[u8], line: u64) -> Option<usize> {
        let layout = self.layout;
        if layout.roles.is_empty() {
            return None;
        }
        let (usual, time) = self.time.usual()?;
        let (station, name) = self.finder.expected()?;
        let (mut degrees, mut speed) = (None, None);
        let mut at = 0;
        for (k, role) in layout.roles.iter().enumerate() {
            if k > 0 {
                if rest.get(at) != Some(&layout.delimiter) {
                    return None;
                }
                at += 1;
            }
            let field = rest.get(at..)?;
            at += match role {
                Role::Time => field.starts_with(usual).then_some(usual.len())?,
                Role::Station => field.starts_with(name).then_some(name.len())?,
                Role::Direction => {
                    let (number, length) = parse_short(field)?;
                    degrees = Some(number);
                    length
                }
                Role::Speed => {
                    let (number, length) = parse_short(field)?;
                    speed = Some(number);
                    length
                }
                Role::Other => memchr::memchr2(layout.delimiter, b'\n', field)?,
            };
        }
        let end = match rest.get(at..)? {
            [b'\n', ..] => 1,
            [b'\r', b'\n', ..] => 2,
            more @ [sign, ..] if *sign == layout.delimiter => memchr::memchr(b'\n', more)? + 1,
            _ => return None,
        };
        let direction = FromDirection::new(degrees?)?;
        let speed = speed? * self.values.factor(station);
        self.finder.was_expected(station);
        let place = (self.values.number, line);
        self.rows.push_wind(station, time, speed, direction, place);
        self.outcome.books.tally.pass(1);
        Some(at + end)
    }

    fn long_row(&mut self, row: &Row, line: u64) -> Result<(), Unusable> {
        let layout = self.layout;
        if matches!(self.values.columns.wind, WindColumns::Metar { .. }) {
            return self.metar_row(row, line);
        }
        let needed = [layout.station, layout.second, Some(layout.first)];
        let needed = needed
            .into_iter()
            .flatten()
            .chain(layout.time.iter().copied());
        let last = needed.fold(0, usize::max);
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
                self.outcome.books.no_station(found, name);
                return Ok(());
            }
        };
        let time = self.time(row)?;
        let mut wind = self.wind(
            station,
            time,
            row.field(layout.first),
            layout.second.map_or(&b""[..], |c| row.field(c)),
        )?;
        if let Some(column) = layout.gust {
            let gust = self.values.number_in(row.field(column), Value::Gust)?;
            wind.gust = self.values.speed(station, gust, Value::Gust)?;
        }
        let moving = self.moving(row)?;
        let mut scalars = NO_SCALARS;
        let named = self.values.columns.scalars.iter().zip(&layout.scalars);
        for (k, (named, &column)) in named.enumerate() {
            scalars[named.slot] = self.values.number_in(row.field(column), Value::Scalar(k))?;
        }
        self.push(station, time, &wind, (moving, &scalars), line);
        Ok(())
    }

    fn wide_row(&mut self, row: &Row, line: u64) {
        let layout = self.layout;
        let time = match self.time(row) {
            Ok(time) => time,
            Err(unusable) => {
                // The row holds a report of each station.
                let more = layout.wide.len() as u64 - 1;
                self.outcome.books.tally.set_aside(unusable.reason, more);
                self.set_aside(unusable, line);
                return;
            }
        };
        for entry in &layout.wide {
            let Found::Station(station) = entry.station else {
                self.outcome
                    .books
                    .no_station(entry.station, entry.name.as_bytes());
                continue;
            };
            let first = entry.first.map_or(&b""[..], |c| row.field(c));
            let second = entry.second.map_or(&b""[..], |c| row.field(c));
            match self.wind(station, time, first, second) {
                Ok(wind) => self.push(station, time, &wind, (None, &NO_SCALARS), line),
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
                self.outcome.books.no_station(found, name);
                return Ok(());
            }
        };
        let time = if layout.time.is_empty() {
            super::coded_file::resolve(metar.time, self.values.format.reference).ok_or_else(
                || Unusable {
                    reason: Reason::UnreadableTime,
                    value: Some(Value::First),
                    message: format!("`{}` has no time that can be resolved", shown(bytes)),
                },
            )?
        } else {
            self.time(row)?
        };
        if metar.nil {
            self.outcome.books.tally.set_aside(Reason::Nil, 1);
            return Ok(());
        }
        let (speed, direction, gust) = super::coded_file::wind_of(metar.wind.as_ref());
        let wind = WindValue {
            speed,
            direction,
            gust,
            correction: metar.correction,
        };
        self.push(station, time, &wind, (None, &NO_SCALARS), line);
        Ok(())
    }

    fn push(
        &mut self,
        station: u32,
        time: Time,
        wind: &WindValue,
        (moving, scalars): (Option<Moving>, &ScalarValues),
        line: u64,
    ) {
        match self.values.report(station, time, wind, moving, line) {
            Some(report) => {
                self.rows.push(&report);
                self.rows.put_scalars(scalars);
                self.outcome.books.tally.pass(1);
            }
            None => self
                .outcome
                .books
                .tally
                .set_aside(Reason::OutsideValidity, 1),
        }
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

    /// The wind of a row or of a station in a wide row.
    fn wind(
        &self,
        station: u32,
        time: Time,
        first: &[u8],
        second: &[u8],
    ) -> Result<WindValue, Unusable> {
        let values = self.values;
        let given = match values.columns.wind {
            WindColumns::DirectionSpeed { .. } | WindColumns::Metar { .. } => {
                GivenWind::DirectionSpeed(
                    values.direction_in(first)?,
                    values.number_in(second, Value::Second)?,
                )
            }
            WindColumns::Speed { .. } => GivenWind::Speed(values.number_in(first, Value::First)?),
            WindColumns::Direction { .. } => GivenWind::Direction(values.direction_in(first)?),
            WindColumns::Components { .. } => GivenWind::Components(
                values.number_in(first, Value::First)?,
                values.number_in(second, Value::Second)?,
            ),
        };
        values.wind(station, time, given)
    }

    /// Position and level of the row, where the table has such columns.
    fn moving(&self, row: &Row) -> Result<Option<Moving>, Unusable> {
        let layout = self.layout;
        if layout.latitude.is_none() && layout.longitude.is_none() && layout.level.is_none() {
            return Ok(None);
        }
        let number = |column: Option<usize>, value| match column {
            Some(column) => self.values.number_in(row.field(column), value),
            None => Ok(None),
        };
        let latitude = number(layout.latitude, Value::Latitude)?;
        let longitude = number(layout.longitude, Value::Longitude)?;
        let level = number(layout.level, Value::Level)?;
        self.values.moving(latitude, longitude, level).map(Some)
    }
}
