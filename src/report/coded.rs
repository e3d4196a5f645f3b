//! What the traditional code forms METAR and SYNOP share: a wind as coded, the day and hour, and bulletins.
//!
//! Reference: WMO-No. 306, Manual on Codes, volume I.1; bulletin headings: WMO-No. 386, Manual on the Global
//! Telecommunication System, attachment II-5 (both from memory).

use std::fmt;

use chrono::{DateTime, Datelike, Months, NaiveDate};

use crate::time::Time;
use crate::units::{FromDirection, SpeedUnit};

/// Direction as the code form gives it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum CodedDirection {
    /// The wind blows from here.
    From(FromDirection),
    /// Variable: there is a speed, but no vector.
    Variable,
    /// 000 (METAR) or 00 (SYNOP) with a speed above 0.
    ///
    /// The code form has no such wind: north is 360 or 36, and zeros go with calm. The five stations that sent it in a
    /// world-wide sample (October 2022, three times over 33 hours, 14 reports of 11 to 36 kt) sent nothing else: a
    /// broken vane is likelier than a north wind.
    Zero,
    /// Not given, or calm.
    Missing,
}

/// Speed as the code form gives it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CodedSpeed {
    /// Speed, m/s.
    pub value: f64,
    /// The speed is this or more: the group has no room for more (P99KT is 100 kt or more, P49MPS is 50 m/s or more).
    pub at_least: bool,
}

impl CodedSpeed {
    /// From the figure in the group. With `above` the true figure is above it, so the bound is the next one.
    #[must_use]
    pub fn new(figure: u16, unit: SpeedUnit, above: bool) -> Self {
        Self {
            value: (f64::from(figure) + f64::from(u8::from(above))) * unit.in_metres_per_second(),
            at_least: above,
        }
    }
}

/// Wind as the code form gives it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CodedWind {
    /// Direction it blows from, degrees clockwise from true north.
    pub direction: CodedDirection,
    /// Mean speed.
    pub speed: Option<CodedSpeed>,
    /// Highest gust of the last 10 minutes; only reported if well above the mean.
    pub gust: Option<CodedSpeed>,
    /// The direction varied within this sector, from the first clockwise to the second.
    pub sector: Option<(FromDirection, FromDirection)>,
    /// Unit in the report; one of it is the step to which speeds are rounded.
    pub unit: SpeedUnit,
    /// Estimated by an observer, not measured.
    pub estimated: bool,
}

impl CodedWind {
    /// The wind is calm: a speed of 0, whatever the direction.
    #[must_use]
    pub fn is_calm(&self) -> bool {
        self.speed.is_some_and(|speed| speed.value <= 0.0)
    }

    /// The direction, where the report has one that can be used.
    #[must_use]
    pub fn known_direction(&self) -> Option<FromDirection> {
        match self.direction {
            CodedDirection::From(direction) if !self.is_calm() => Some(direction),
            _ => None,
        }
    }

    /// `None` if nothing is given at all.
    pub(super) fn if_any(self) -> Option<Self> {
        let none = self.direction == CodedDirection::Missing
            && self.speed.is_none()
            && self.gust.is_none();
        (!none).then_some(self)
    }
}

/// Day of the month and time of day, UTC: all that a report tells of its time.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct DayTime {
    day: u8,
    hour: u8,
    minute: u8,
}

impl DayTime {
    /// Takes days 1 to 31 and times 00:00 to 24:00; 24:00 is the end of the day.
    #[must_use]
    pub const fn new(day: u8, hour: u8, minute: u8) -> Option<Self> {
        let in_day = hour < 24 && minute < 60 || hour == 24 && minute == 0;
        if day >= 1 && day <= 31 && in_day {
            Some(Self { day, hour, minute })
        } else {
            None
        }
    }

    /// Reads `ddhhmm` or `ddhh`.
    pub(super) fn parse(text: &str) -> Option<Self> {
        let part = |at: usize| number(text.get(at..at + 2)?).and_then(|n| u8::try_from(n).ok());
        let minute = match text.len() {
            6 => part(4)?,
            4 => 0,
            _ => return None,
        };
        Self::new(part(0)?, part(2)?, minute)
    }

    /// The instant nearest to `reference` that has this day and time; of two as near, the earlier.
    ///
    /// The reference is the time of receipt, or any time known to be within two weeks. Months that lack the day
    /// are passed over. `None` only if the reference is outside the calendar.
    #[must_use]
    pub fn nearest(self, reference: Time) -> Option<Time> {
        let seconds = (i64::from(self.hour) * 60 + i64::from(self.minute)) * 60;
        let today = DateTime::from_timestamp_micros(reference.micros())?.date_naive();
        let first = NaiveDate::from_ymd_opt(today.year(), today.month(), 1)?;
        // Day 31 may be two months away: on 1 March the nearest is in January.
        let start = first.checked_sub_months(Months::new(2))?;
        (0..=4)
            .filter_map(|n| {
                let date = start
                    .checked_add_months(Months::new(n))?
                    .with_day(u32::from(self.day))?;
                let midnight = date.and_hms_opt(0, 0, 0)?.and_utc();
                Some(
                    Time::from_micros(midnight.timestamp_micros()).plus_micros(seconds * 1_000_000),
                )
            })
            .min_by_key(|time| time.micros().abs_diff(reference.micros()))
    }
}

/// What could not be read in a report, and what should stand there.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct CodeError<'a> {
    /// The word found; empty at the end of the report.
    pub word: &'a str,
    /// What the code form has there.
    pub expected: &'static str,
}

impl fmt::Display for CodeError<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.word.is_empty() {
            return write!(f, "the report ends early ({} expected)", self.expected);
        }
        f.write_str("`")?;
        for c in self.word.chars().take(60) {
            write!(f, "{}", c.escape_debug())?;
        }
        write!(f, "` cannot be read ({} expected)", self.expected)
    }
}

impl std::error::Error for CodeError<'_> {}

/// A report and its place in a text.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Entry<'a, T> {
    /// Line on which it starts, from 1.
    pub line: u64,
    /// The report as received, without the closing `=`.
    pub text: &'a str,
    /// The report as read.
    pub report: Result<T, CodeError<'a>>,
}

/// Words of a text; white space and control characters separate them.
pub(super) fn words(text: &str) -> impl Iterator<Item = &str> {
    text.split(is_blank).filter(|word| !word.is_empty())
}

fn is_blank(c: char) -> bool {
    c == ' ' || c.is_ascii_control()
}

/// A number of digits only.
pub(super) fn number(text: &str) -> Option<u16> {
    // `parse` would take a plus sign.
    if text.bytes().all(|b| b.is_ascii_digit()) {
        text.parse().ok()
    } else {
        None
    }
}

/// Solidi only: not given.
pub(super) fn is_missing(text: &str) -> bool {
    !text.is_empty() && text.bytes().all(|b| b == b'/')
}

/// Number of a correction from the last letter of `CCA`, `CCB` and so on: 1, 2 and so on.
pub(super) fn correction(word: &str) -> Option<u8> {
    match word.as_bytes() {
        [b'C', b'C', letter @ b'A'..=b'Z'] => Some(letter - b'A' + 1),
        b"COR" => Some(1),
        _ => None,
    }
}

/// Heading of a bulletin, such as `SMRO01 YRBK 171200 CCA`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Heading<'a> {
    /// Kind of data, area and number, such as `SMRO01`.
    pub designator: &'a str,
    /// Number of the correction, 0 for none.
    pub correction: u8,
}

impl<'a> Heading<'a> {
    fn parse(line: &'a str) -> Option<Self> {
        let mut words = words(line);
        let designator = words.next()?;
        let (centre, time) = (words.next()?, words.next()?);
        let letters = |word: &str| word.bytes().all(|b| b.is_ascii_uppercase());
        let (kind, number) = designator.split_at_checked(4)?;
        let is_heading = letters(kind)
            && matches!(number.len(), 1 | 2)
            && self::number(number).is_some()
            && centre.len() == 4
            && letters(centre)
            && time.len() == 6
            && time.bytes().all(|b| b.is_ascii_digit());
        let indicator = words.next();
        if !is_heading || words.next().is_some() || indicator.is_some_and(|w| w.len() != 3) {
            return None;
        }
        Some(Self {
            designator,
            correction: indicator.and_then(correction).unwrap_or(0),
        })
    }
}

/// A report cut out of a text.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Piece<'a> {
    /// Line on which it starts, from 1.
    pub line: u64,
    /// Its text, line ends included, white space around it not.
    pub text: &'a str,
    /// The heading it stands under.
    pub heading: Option<Heading<'a>>,
    /// Headings seen so far.
    pub bulletin: u64,
}

impl<'a> Piece<'a> {
    /// The first word, and the piece after it.
    pub fn split_first(self) -> (&'a str, Self) {
        let (word, rest) = self
            .text
            .split_at(self.text.find(is_blank).unwrap_or(self.text.len()));
        let text = rest.trim_start_matches(is_blank);
        let skipped = rest.bytes().take(rest.len() - text.len());
        let line = self.line + skipped.map(|b| u64::from(b == b'\n')).sum::<u64>();
        (word, Self { line, text, ..self })
    }
}

/// Cuts a text into reports.
///
/// A report ends with `=`, before a line that starts the next report or bulletin, or at the control characters
/// around a bulletin. If there is no `=` in the whole text, it also ends with its line.
#[derive(Debug, Clone)]
pub(super) struct Pieces<'a> {
    text: &'a str,
    at: usize,
    line: u64,
    at_line_start: bool,
    one_a_line: bool,
    heading: Option<Heading<'a>>,
    bulletin: u64,
    starts_report: fn(&str) -> bool,
}

impl<'a> Pieces<'a> {
    /// `starts_report` tells whether a line can only be the first one of a report.
    pub fn new(text: &'a str, starts_report: fn(&str) -> bool) -> Self {
        let text = text.trim_start_matches('\u{feff}');
        Self {
            text,
            at: 0,
            line: 1,
            at_line_start: true,
            one_a_line: !text.contains('='),
            heading: None,
            bulletin: 0,
            starts_report,
        }
    }
}

/// Ends a report, whatever the line: end of report, start of heading, end of text.
fn is_end(byte: u8) -> bool {
    matches!(byte, b'=' | 0x01 | 0x03)
}

/// Length of `text` up to the end of the line, or to what ends a report.
fn segment_length(text: &str) -> usize {
    text.bytes()
        .position(|b| b == b'\n' || is_end(b))
        .unwrap_or(text.len())
}

/// A line of digits before a heading is the number of the bulletin in its transmission.
fn is_transmission_number(line: &str, after: &str) -> bool {
    matches!(line.len(), 3..=5)
        && line.bytes().all(|b| b.is_ascii_digit())
        && after
            .split('\n')
            .map(|line| line.trim_matches(is_blank))
            .find(|line| !line.is_empty())
            .is_some_and(|line| Heading::parse(line).is_some())
}

impl<'a> Iterator for Pieces<'a> {
    type Item = Piece<'a>;

    fn next(&mut self) -> Option<Piece<'a>> {
        // Where the report that is open starts, and how it goes so far.
        let mut open: Option<(usize, Piece<'a>)> = None;
        while self.at < self.text.len() {
            let rest = self.text.get(self.at..).unwrap_or_default();
            let (segment, after) = rest.split_at(segment_length(rest));
            let segment_end = self.at + segment.len();
            let trimmed = segment.trim_start_matches(is_blank);
            let start = segment_end - trimmed.len();
            let trimmed = trimmed.trim_end_matches(is_blank);
            let end = start + trimmed.len();
            if !trimmed.is_empty() {
                let heading = self
                    .at_line_start
                    .then(|| Heading::parse(trimmed))
                    .flatten();
                let is_frame = self.at_line_start
                    && (trimmed == "NNNN"
                        || trimmed.starts_with("ZCZC ")
                        || is_transmission_number(trimmed, after));
                let is_new = self.at_line_start && (self.starts_report)(trimmed);
                if let Some((_, piece)) = open
                    && (heading.is_some() || is_frame || is_new)
                {
                    return Some(piece);
                }
                if heading.is_some() {
                    self.heading = heading;
                    self.bulletin += 1;
                } else if !is_frame {
                    let (from, piece) = open.get_or_insert((
                        start,
                        Piece {
                            line: self.line,
                            text: trimmed,
                            heading: self.heading,
                            bulletin: self.bulletin,
                        },
                    ));
                    piece.text = self.text.get(*from..end).unwrap_or_default();
                }
            }
            let stop = after.bytes().next();
            self.at = segment_end + usize::from(stop.is_some());
            self.at_line_start = stop.is_none_or(|b| b != b'=');
            let line_ends = stop == Some(b'\n');
            self.line += u64::from(line_ends);
            let ended = stop.is_some_and(is_end) || line_ends && self.one_a_line;
            if let Some((_, piece)) = open
                && ended
            {
                return Some(piece);
            }
        }
        open.map(|(_, piece)| piece)
    }
}

#[cfg(test)]
#[path = "coded_tests.rs"]
mod tests;
