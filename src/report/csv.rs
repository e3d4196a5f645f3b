//! Long tables: one row for each station and time.
//!
//! One line is one row. Fields may be quoted, but a quote must end on its line, so a damaged quote spoils one row and
//! not the rest of the file.

use std::collections::{BTreeMap, HashMap};
use std::fs::File;
use std::io::{self, BufRead, BufReader, Read};
use std::path::Path;

use rayon::prelude::*;

use super::blocks::{Block, Blocks};
use super::number::{TimeReader, parse_number};
use super::{MISSING_MARKS, ReportFormat, Rows, WindColumns};
use crate::error::{Error, Place, Problem};
use crate::settings::ReportSource;
use crate::station::{Network, missing_column};
use crate::tally::{Reason, Tally};
use crate::units::{FromDirection, Wind};
use crate::warning::Warning;

/// Problems of rows that are kept with their text; the others are only counted.
const PROBLEMS_KEPT: usize = 5;
/// Blocks read ahead and then parsed in parallel.
const BLOCKS_AT_ONCE: usize = 16;

/// What came of reading.
#[derive(Debug, Default)]
pub struct ReadOutcome {
    /// The reports, in the order of the input.
    pub rows: Rows,
    /// Rows received, passed on, set aside.
    pub tally: Tally,
    /// The same per file, in the order read; the number of a file in it is [`Rows`]' number.
    pub files: Vec<(String, Tally)>,
    /// What the user should know.
    pub warnings: Vec<Warning>,
    /// Files that could not be read at all.
    pub failures: Vec<Error>,
}

/// Reads all report files, in order.
#[must_use]
pub fn read_reports(sources: &[ReportSource], network: &Network) -> ReadOutcome {
    let names = Names::new(network);
    let mut outcome = ReadOutcome::default();
    let mut unknown: BTreeMap<Vec<u8>, u64> = BTreeMap::new();
    for source in sources {
        for path in &source.files {
            let number = u32::try_from(outcome.files.len()).unwrap_or(u32::MAX);
            let name = path.display().to_string();
            let part = open(path)
                .map_err(|e| Error::read(path, e))
                .and_then(|input| read_table(input, &name, number, &source.format, &names));
            match part {
                Ok(part) => {
                    if part.unusable > 0 {
                        outcome.warnings.push(Warning::UnusableRows {
                            file: name.clone(),
                            rows: part.unusable,
                            first: part.problems,
                        });
                    }
                    for (station, n) in part.unknown {
                        *unknown.entry(station).or_default() += n;
                    }
                    outcome.rows.append(part.rows);
                    outcome.tally += &part.tally;
                    outcome.files.push((name, part.tally));
                }
                Err(error) => {
                    outcome.files.push((name, Tally::default()));
                    outcome.failures.push(error);
                }
            }
        }
    }
    for (name, rows) in unknown {
        let name = String::from_utf8_lossy(&name).into_owned();
        let ids = network.stations().iter().map(|s| s.id.as_str());
        let nearest = crate::error::nearest_name(&name, ids).map(str::to_string);
        outcome.warnings.push(Warning::UnknownStation {
            name,
            rows,
            nearest,
        });
    }
    outcome
}

/// Opens a file; gzip is recognised by its first bytes (RFC 1952).
fn open(path: &Path) -> io::Result<Box<dyn Read>> {
    if path.is_dir() {
        return Err(io::Error::new(
            io::ErrorKind::IsADirectory,
            "it is a folder, not a file",
        ));
    }
    let mut file = BufReader::with_capacity(1 << 16, File::open(path)?);
    if file.fill_buf()?.starts_with(&[0x1f, 0x8b]) {
        return Ok(Box::new(flate2::bufread::MultiGzDecoder::new(file)));
    }
    Ok(Box::new(file))
}

/// Station identifiers as bytes.
struct Names {
    index: HashMap<Vec<u8>, u32>,
    ids: Vec<Vec<u8>>,
    not_asked_for: std::collections::HashSet<Vec<u8>>,
}

impl Names {
    fn new(network: &Network) -> Self {
        let ids: Vec<Vec<u8>> = network
            .stations()
            .iter()
            .map(|s| s.id.clone().into_bytes())
            .collect();
        let index = ids.iter().cloned().zip(0..).collect();
        let not_asked_for = network
            .not_asked_for()
            .map(|id| id.as_bytes().to_vec())
            .collect();
        Self {
            index,
            ids,
            not_asked_for,
        }
    }
}

/// A file as read.
#[derive(Default)]
struct Part {
    rows: Rows,
    tally: Tally,
    unusable: u64,
    problems: Vec<Problem>,
    unknown: BTreeMap<Vec<u8>, u64>,
}

impl Part {
    fn append(&mut self, later: Self) {
        self.rows.append(later.rows);
        self.tally += &later.tally;
        self.unusable += later.unusable;
        self.problems.extend(later.problems);
        self.problems.truncate(PROBLEMS_KEPT);
        for (name, n) in later.unknown {
            *self.unknown.entry(name).or_default() += n;
        }
    }
}

fn read_table(
    input: impl Read,
    name: &str,
    number: u32,
    format: &ReportFormat,
    names: &Names,
) -> Result<Part, Error> {
    let read_error = |e| Error::read(Path::new(name), e);
    let mut blocks = Blocks::new(input);
    let mut part = Part::default();
    let mut layout = None;
    loop {
        let mut batch: Vec<Block> = Vec::with_capacity(BLOCKS_AT_ONCE);
        let mut failure = None;
        while batch.len() < BLOCKS_AT_ONCE {
            match blocks.next_block() {
                Ok(Some(block)) => batch.push(block),
                Ok(None) => break,
                // What came before the damage is used.
                Err(error) => {
                    failure = Some(error);
                    break;
                }
            }
        }
        if layout.is_none() {
            layout = batch
                .first_mut()
                .map(|first| take_header(first, name, number, format))
                .transpose()?;
        }
        let Some(layout) = &layout else {
            return Err(failure.map_or_else(
                || Error::Invalid(vec![missing_column(name, &format.time, std::iter::empty())]),
                read_error,
            ));
        };
        let ended = batch.len() < BLOCKS_AT_ONCE;
        let parts: Vec<Part> = batch
            .par_iter()
            .map(|block| {
                let mut reader = BlockReader::new(layout, names);
                reader.read(block);
                reader.part
            })
            .collect();
        for p in parts {
            part.append(p);
        }
        if let Some(error) = failure {
            part.unusable += 1;
            part.tally.set_aside(Reason::BrokenLine, 1);
            let place = Place {
                file: name.into(),
                ..Place::default()
            };
            part.problems.insert(
                0,
                Problem::new(place, format!("reading ended early: {error}")),
            );
            return Ok(part);
        }
        if ended {
            return Ok(part);
        }
    }
}

/// Where the needed values stand in a row.
struct Layout<'a> {
    file: &'a str,
    number: u32,
    format: &'a ReportFormat,
    /// For each column the value it holds, up to the last one needed.
    slots: Vec<Option<Slot>>,
    names: [&'a str; 4],
    missing: Vec<&'a [u8]>,
    factor: f64,
}

/// The values a row must have; `First` and `Second` are direction and speed, or eastward and northward component.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Slot {
    Station = 0,
    Time = 1,
    First = 2,
    Second = 3,
}

const SLOTS: [Slot; 4] = [Slot::Station, Slot::Time, Slot::First, Slot::Second];

/// Takes the header line off the first block.
fn take_header<'a>(
    block: &mut Block,
    file: &'a str,
    number: u32,
    format: &'a ReportFormat,
) -> Result<Layout<'a>, Error> {
    let end = memchr::memchr(b'\n', &block.bytes).map_or(block.bytes.len(), |end| end + 1);
    let rest = block.bytes.split_off(end);
    let line = std::mem::replace(&mut block.bytes, rest);
    block.first_line += 1;
    let line = line.strip_prefix(b"\xef\xbb\xbf").unwrap_or(&line);

    let mut reader = csv::ReaderBuilder::new()
        .has_headers(false)
        .trim(csv::Trim::All)
        .from_reader(line);
    let mut header = csv::ByteRecord::new();
    // A header that is no CSV line leaves an empty record, and all columns are missing.
    let _ = reader.read_byte_record(&mut header);
    let header: Vec<String> = header
        .iter()
        .map(|h| String::from_utf8_lossy(h).into_owned())
        .collect();

    let (first, second) = match &format.wind {
        WindColumns::DirectionSpeed { direction, speed } => (direction, speed),
        WindColumns::Components {
            eastward,
            northward,
        } => (eastward, northward),
    };
    let names = [&*format.station, &*format.time, &**first, &**second];
    let mut slots = Vec::new();
    let mut problems = Vec::new();
    for (slot, name) in SLOTS.into_iter().zip(names) {
        let mut found = header
            .iter()
            .enumerate()
            .filter(|(_, h)| *h == name)
            .map(|(i, _)| i);
        let Some(column) = found.next() else {
            problems.push(missing_column(
                file,
                name,
                header.iter().map(String::as_str),
            ));
            continue;
        };
        if found.next().is_some() {
            let place = Place {
                file: file.into(),
                line: Some(1),
                column: Some(name.into()),
            };
            problems.push(Problem::new(place, "there is more than one such column"));
        }
        if slots.len() <= column {
            slots.resize(column + 1, None);
        }
        slots[column] = Some(slot);
    }
    if !problems.is_empty() {
        return Err(Error::Invalid(problems));
    }
    let missing = if format.missing.is_empty() {
        MISSING_MARKS.iter().map(|m| m.as_bytes()).collect()
    } else {
        format
            .missing
            .iter()
            .map(std::string::String::as_bytes)
            .collect()
    };
    Ok(Layout {
        file,
        number,
        format,
        slots,
        names,
        missing,
        factor: format.speed_unit.in_metres_per_second(),
    })
}

/// A row that cannot be used.
struct Unusable {
    reason: Reason,
    column: Option<Slot>,
    message: String,
}

impl Unusable {
    fn line(reason: Reason, message: String) -> Self {
        Self {
            reason,
            column: None,
            message,
        }
    }

    fn field(reason: Reason, column: Slot, text: &[u8], expected: &str) -> Self {
        Self {
            reason,
            column: Some(column),
            message: format!("`{}` {expected}", shown(text)),
        }
    }
}

/// Input text for a message: cut, with control characters shown.
fn shown(text: &[u8]) -> String {
    let cut = text.get(..60).unwrap_or(text);
    String::from_utf8_lossy(cut).escape_debug().to_string()
}

struct BlockReader<'a> {
    layout: &'a Layout<'a>,
    names: &'a Names,
    time: TimeReader,
    /// Station of the last row, and for each station the one that followed it last time: files repeat their order.
    last: usize,
    follows: Vec<u32>,
    quotes: csv_core::Reader,
    scratch: Scratch,
    part: Part,
}

/// Room to undo the quotes of a line.
#[derive(Default)]
struct Scratch {
    line: Vec<u8>,
    text: Vec<u8>,
    ends: Vec<usize>,
}

impl<'a> BlockReader<'a> {
    fn new(layout: &'a Layout<'a>, names: &'a Names) -> Self {
        Self {
            layout,
            names,
            time: TimeReader::default(),
            last: 0,
            follows: vec![0; names.ids.len()],
            quotes: csv_core::Reader::new(),
            scratch: Scratch::default(),
            part: Part::default(),
        }
    }

    fn read(&mut self, block: &Block) {
        let has_quotes = memchr::memchr(b'"', &block.bytes).is_some();
        let mut rest = block.bytes.as_slice();
        let mut number = block.first_line;
        while !rest.is_empty() {
            let end = memchr::memchr(b'\n', rest).unwrap_or(rest.len());
            let mut line = &rest[..end];
            rest = rest.get(end + 1..).unwrap_or_default();
            while let [before @ .., b'\r'] = line {
                line = before;
            }
            if !line.is_empty() {
                let result = if has_quotes && line.contains(&b'"') {
                    self.quoted_row(line, number)
                } else {
                    self.plain_row(line, number)
                };
                if let Err(unusable) = result {
                    self.set_aside(unusable, number);
                }
            }
            number += 1;
        }
        if let Some(number) = block.overlong {
            let message = "the line is longer than 1 MiB".to_string();
            self.set_aside(Unusable::line(Reason::BrokenLine, message), number);
        }
    }

    fn set_aside(&mut self, unusable: Unusable, line: u64) {
        self.part.tally.set_aside(unusable.reason, 1);
        if !unusable.reason.is_unusable() {
            return;
        }
        self.part.unusable += 1;
        if self.part.problems.len() < PROBLEMS_KEPT {
            let place = Place {
                file: self.layout.file.into(),
                line: Some(line),
                column: unusable
                    .column
                    .map(|slot| self.layout.names[slot as usize].to_string()),
            };
            self.part
                .problems
                .push(Problem::new(place, unusable.message));
        }
    }

    fn plain_row(&mut self, line: &[u8], number: u64) -> Result<(), Unusable> {
        let mut values = [None; 4];
        let mut rest = Some(line);
        for slot in &self.layout.slots {
            let Some(text) = rest else {
                break;
            };
            let (field, after) = match memchr::memchr(b',', text) {
                Some(end) => (&text[..end], Some(&text[end + 1..])),
                None => (text, None),
            };
            rest = after;
            if let Some(slot) = slot {
                values[*slot as usize] = Some(field.trim_ascii());
            }
        }
        self.row(values, number)
    }

    /// The same for a line with quotes, which csv-core undoes.
    fn quoted_row(&mut self, line: &[u8], number: u64) -> Result<(), Unusable> {
        let mut scratch = std::mem::take(&mut self.scratch);
        scratch.line.clear();
        scratch.line.extend_from_slice(line);
        // The line end ends the record, unless a quote is still open: then it would be text.
        scratch.line.push(b'\n');
        scratch.text.resize(scratch.line.len(), 0);
        scratch.ends.resize(scratch.line.len() + 1, 0);
        self.quotes.reset();
        let (outcome, _, _, fields) =
            self.quotes
                .read_record(&scratch.line, &mut scratch.text, &mut scratch.ends);
        let result = if outcome == csv_core::ReadRecordResult::Record {
            let mut values = [None; 4];
            let mut start = 0;
            let ends = scratch.ends.get(..fields).unwrap_or_default();
            for (slot, &end) in self.layout.slots.iter().zip(ends) {
                if let Some(slot) = slot {
                    values[*slot as usize] = scratch.text.get(start..end).map(<[u8]>::trim_ascii);
                }
                start = end;
            }
            self.row(values, number)
        } else {
            Err(Unusable::line(
                Reason::BrokenLine,
                format!("a quote does not end on its line: `{}`", shown(line)),
            ))
        };
        self.scratch = scratch;
        result
    }

    fn row(&mut self, values: [Option<&[u8]>; 4], number: u64) -> Result<(), Unusable> {
        let [Some(station), Some(time), Some(first), Some(second)] = values else {
            return Err(Unusable::line(
                Reason::TooFewColumns,
                format!(
                    "the row has too few columns (at least {} expected)",
                    self.layout.slots.len()
                ),
            ));
        };
        let station = self.station(station)?;
        let time = self.time.parse(time).map_err(|message| Unusable {
            reason: Reason::UnreadableTime,
            column: Some(Slot::Time),
            message,
        })?;
        let (speed, direction) = match self.layout.format.wind {
            WindColumns::DirectionSpeed { .. } => {
                let direction = self.direction(first)?;
                let speed = self.number(second, Slot::Second)?;
                if let Some(speed) = speed
                    && speed < 0.0
                {
                    let expected = "is below 0 (a speed of 0 or more expected)";
                    return Err(Unusable::field(
                        Reason::NegativeSpeed,
                        Slot::Second,
                        second,
                        expected,
                    ));
                }
                (speed.map(|s| s * self.layout.factor), direction)
            }
            WindColumns::Components { .. } => {
                let u = self.number(first, Slot::First)?;
                let v = self.number(second, Slot::Second)?;
                match (u, v) {
                    (Some(u), Some(v)) => {
                        let wind = Wind {
                            u: u * self.layout.factor,
                            v: v * self.layout.factor,
                        };
                        (Some(wind.speed()), wind.from_direction())
                    }
                    _ => (None, None),
                }
            }
        };
        let place = (self.layout.number, number);
        self.part.rows.push(station, time, speed, direction, place);
        self.part.tally.pass(1);
        Ok(())
    }

    fn station(&mut self, text: &[u8]) -> Result<u32, Unusable> {
        let guess = self.follows.get(self.last).copied().unwrap_or(0);
        let found = match self.names.ids.get(guess as usize) {
            Some(id) if id == text => Some(guess),
            _ => match self.names.index.get(text) {
                Some(&index) => Some(index),
                None => {
                    let tidy = crate::station::tidy_id(&String::from_utf8_lossy(text));
                    self.names.index.get(tidy.as_bytes()).copied()
                }
            },
        };
        if let Some(index) = found {
            if let Some(next) = self.follows.get_mut(self.last) {
                *next = index;
            }
            self.last = index as usize;
            return Ok(index);
        }
        let tidy = crate::station::tidy_id(&String::from_utf8_lossy(text));
        if self.names.not_asked_for.contains(tidy.as_bytes()) {
            return Err(Unusable::line(Reason::StationNotAskedFor, String::new()));
        }
        *self.part.unknown.entry(text.to_vec()).or_default() += 1;
        Err(Unusable::line(Reason::UnknownStation, String::new()))
    }

    fn is_missing(&self, text: &[u8]) -> bool {
        self.layout
            .missing
            .iter()
            .any(|mark| mark.eq_ignore_ascii_case(text))
    }

    /// A number, or `None` for a missing mark; a mark may itself look like a number.
    fn number(&self, text: &[u8], slot: Slot) -> Result<Option<f64>, Unusable> {
        match parse_number(text) {
            Some(value) if value >= 0.0 || !self.is_missing(text) => Ok(Some(value)),
            _ if self.is_missing(text) => Ok(None),
            _ => Err(Unusable::field(
                Reason::UnreadableWind,
                slot,
                text,
                "is not a number (decimal point expected)",
            )),
        }
    }

    fn direction(&self, text: &[u8]) -> Result<Option<FromDirection>, Unusable> {
        let Some(degrees) = self.number(text, Slot::First)? else {
            return Ok(None);
        };
        if let Some(direction) = FromDirection::new(degrees) {
            return Ok(Some(direction));
        }
        let expected = "is no direction (0 to 360 degrees expected)";
        Err(Unusable::field(
            Reason::DirectionOutOfRange,
            Slot::First,
            text,
            expected,
        ))
    }
}
