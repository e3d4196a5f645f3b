//! Wind of SYNOP reports from land stations.
//!
//! ```text
//! SMRO01 YRBK 171200 CCA
//! AAXX YYGGiw
//! IIiii iRixhVV Nddff [00fff] ... [333 ... 910ff [00fff] ...]=
//! ```
//!
//! The place of a group makes it the wind, not its look: every group is five figures.
//!
//! Reference: WMO-No. 306, Manual on Codes, volume I.1, FM 12 SYNOP, regulations 12.2.2 and 12.4.10, code tables 0877
//! (dd) and 1855 (iw) (numbers from memory).

use super::coded::{
    CodeError, CodedDirection, CodedSpeed, CodedWind, DayTime, Entry, Piece, Pieces, is_missing,
    number, words,
};
use crate::units::{FromDirection, SpeedUnit};

/// A SYNOP of a land station: time and wind.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Synop<'a> {
    /// International number of the station, five digits.
    pub station: &'a str,
    /// Day and nominal hour; the 10 minutes of the wind may end up to 10 minutes before it.
    pub time: DayTime,
    /// Number of the correction: 0 for none, 1 for CCA, 2 for CCB and so on. The highest stands.
    pub correction: u8,
    /// NIL: the station has no report for this time.
    pub nil: bool,
    /// The wind, its gust from group 910ff of section 3; `None` if solidi stand for direction and speed.
    pub wind: Option<CodedWind>,
}

const SECTION_0: &str = "AAXX before the first station";
const TIME: &str = "day, hour and wind indicator YYGGiw";
const UNIT: &str = "wind indicator 0, 1, 3 or 4: without it the unit of the wind is unknown";
const STATION: &str = "station number of five digits";
const VISIBILITY: &str = "group iRixhVV of five figures";
const WIND: &str = "group Nddff with dd 00 to 36 or 99";

/// Reads all reports of a text of bulletins.
///
/// A report ends with `=`, or, if the text has none, with its line. AAXX and the group after it count up to the next
/// ones; a correction in the heading counts for its bulletin. Bulletins of nothing but NIL have no reports.
///
/// Each report that cannot be read is an error of its own, and says which word is wrong.
pub fn synops(text: &str) -> Synops<'_> {
    Synops {
        pieces: Pieces::new(text, starts_report),
        bulletin: 0,
        section: None,
    }
}

/// Reports of a text; see [`synops`].
#[derive(Debug, Clone)]
pub struct Synops<'a> {
    pieces: Pieces<'a>,
    bulletin: u64,
    section: Option<Result<Section<'a>, CodeError<'a>>>,
}

impl<'a> Iterator for Synops<'a> {
    type Item = Entry<'a, Synop<'a>>;

    fn next(&mut self) -> Option<Self::Item> {
        loop {
            let mut piece = self.pieces.next()?;
            if piece.bulletin != self.bulletin {
                self.bulletin = piece.bulletin;
                self.section = None;
            }
            piece = self.take_section(piece);
            if piece.text.is_empty() || piece.text == "NIL" {
                continue;
            }
            let correction = piece.heading.map_or(0, |heading| heading.correction);
            let report = match self.section {
                Some(Ok(section)) => parse_station(piece.text, section, correction),
                Some(Err(error)) => Err(error),
                None => Err(CodeError {
                    word: piece.split_first().0,
                    expected: SECTION_0,
                }),
            };
            return Some(Entry {
                line: piece.line,
                text: piece.text,
                report,
            });
        }
    }
}

impl<'a> Synops<'a> {
    /// Takes AAXX and the group after it off a report.
    fn take_section(&mut self, piece: Piece<'a>) -> Piece<'a> {
        let (word, rest) = piece.split_first();
        if !starts_report(word) {
            return piece;
        }
        if word != "AAXX" {
            self.section = Some(Err(CodeError {
                word,
                expected: "AAXX: only land stations are read",
            }));
            return rest;
        }
        let (word, rest) = rest.split_first();
        self.section = Some(Section::parse(word));
        rest
    }
}

/// Section 0: what counts for all stations after it.
#[derive(Debug, Clone, Copy)]
struct Section<'a> {
    word: &'a str,
    time: DayTime,
    /// Unit, and whether winds are estimated; `None` for a solidus.
    unit: Option<(SpeedUnit, bool)>,
}

impl<'a> Section<'a> {
    fn parse(word: &'a str) -> Result<Self, CodeError<'a>> {
        let error = |expected| CodeError { word, expected };
        let (time, indicator) = word.split_at_checked(4).ok_or(error(TIME))?;
        let time = DayTime::parse(time).ok_or(error(TIME))?;
        let unit = match indicator {
            "0" => Some((SpeedUnit::MetrePerSecond, true)),
            "1" => Some((SpeedUnit::MetrePerSecond, false)),
            "3" => Some((SpeedUnit::Knot, true)),
            "4" => Some((SpeedUnit::Knot, false)),
            "/" => None,
            _ => return Err(error(UNIT)),
        };
        Ok(Self { word, time, unit })
    }
}

/// The line starts a message of land stations, or one of ships or moving stations.
fn starts_report(line: &str) -> bool {
    matches!(words(line).next(), Some("AAXX" | "BBXX" | "OOXX"))
}

fn parse_station<'a>(
    text: &'a str,
    section: Section<'a>,
    correction: u8,
) -> Result<Synop<'a>, CodeError<'a>> {
    let mut words = words(text).peekable();
    let station = take(&mut words, is_station, STATION)?;
    let nil = words.peek() == Some(&"NIL");
    let mut synop = Synop {
        station,
        time: section.time,
        correction,
        nil,
        wind: None,
    };
    if nil {
        return Ok(synop);
    }
    take(&mut words, is_group, VISIBILITY)?;
    let word = take(&mut words, is_group, WIND)?;
    let wrong = CodeError {
        word,
        expected: WIND,
    };
    let (direction, speed) = word
        .get(1..)
        .and_then(|figures| figures.split_at_checked(2))
        .ok_or(wrong)?;
    if is_missing(direction) && is_missing(speed) {
        return Ok(synop);
    }
    let Some((unit, estimated)) = section.unit else {
        return Err(CodeError {
            word: section.word,
            expected: UNIT,
        });
    };
    let speed = if is_missing(speed) {
        None
    } else {
        let over = words.peek().copied();
        Some(read_speed(speed, over, unit).ok_or(wrong)?)
    };
    let direction = match direction {
        "00" if speed.is_some_and(|speed| speed.value > 0.0) => CodedDirection::Zero,
        "00" | "//" => CodedDirection::Missing,
        "99" => CodedDirection::Variable,
        tens => {
            let degrees = 10.0 * f64::from(number(tens).ok_or(wrong)?);
            CodedDirection::From(FromDirection::new(degrees).ok_or(wrong)?)
        }
    };
    synop.wind = CodedWind {
        direction,
        speed,
        gust: read_gust(words, unit),
        sector: None,
        unit,
        estimated,
    }
    .if_any();
    Ok(synop)
}

/// The next word, if it is right.
fn take<'a>(
    words: &mut impl Iterator<Item = &'a str>,
    is_right: fn(&str) -> bool,
    expected: &'static str,
) -> Result<&'a str, CodeError<'a>> {
    match words.next().unwrap_or_default() {
        word if is_right(word) => Ok(word),
        word => Err(CodeError { word, expected }),
    }
}

fn is_station(word: &str) -> bool {
    word.len() == 5 && word.bytes().all(|b| b.is_ascii_digit())
}

fn is_group(word: &str) -> bool {
    word.len() == 5 && word.bytes().all(|b| b.is_ascii_digit() || b == b'/')
}

/// Reads ff; 99 is 99 or more, and the group 00fff after it has the speed.
fn read_speed(figures: &str, after: Option<&str>, unit: SpeedUnit) -> Option<CodedSpeed> {
    let figure = number(figures)?;
    if figure < 99 {
        return Some(CodedSpeed::new(figure, unit, false));
    }
    let full = after
        .filter(|word| word.len() == 5)
        .and_then(|word| word.strip_prefix("00"))
        .and_then(number);
    Some(CodedSpeed {
        at_least: full.is_none(),
        ..CodedSpeed::new(full.unwrap_or(figure), unit, false)
    })
}

/// Finds 910ff in section 3: the highest gust of the 10 minutes before the observation.
///
/// The gust of 911ff is that of a longer period, so it is left.
fn read_gust<'a>(words: impl Iterator<Item = &'a str>, unit: SpeedUnit) -> Option<CodedSpeed> {
    let mut section_3 = words
        .skip_while(|word| *word != "333")
        .take_while(|word| !matches!(*word, "444" | "555"))
        .skip_while(|word| !(word.len() == 5 && word.starts_with("910")));
    let figures = section_3.next()?.get(3..)?;
    read_speed(figures, section_3.next(), unit)
}

#[cfg(test)]
#[path = "synop_tests.rs"]
mod tests;
