//! Wind of METAR and SPECI reports.
//!
//! Only the part up to the wind is read:
//!
//! ```text
//! [METAR|SPECI] [COR] CCCC ddhhmmZ [AUTO] [COR|CCA..] [NIL] dddff[f][Gff[f]](KT|MPS|KMH) [dddVddd]
//! ```
//!
//! The place in the report makes a group the wind, not its look alone: `PK WND` and `WIND THR` in the remarks, or a
//! cloud group of solidi, are never taken for it.
//!
//! Reference: WMO-No. 306, Manual on Codes, volume I.1, FM 15 METAR and FM 16 SPECI, regulation 15.5 (from memory);
//! ICAO Annex 3, appendix 3. Beyond the code form: `E` before the wind (estimated), corrections `CCA`, `CCB` in the
//! report, a time without `Z`, and a speed of three digits below 100 are read, as some centres send them.

use super::coded::{
    CodeError, CodedDirection, CodedSpeed, CodedWind, DayTime, Entry, Pieces, correction,
    is_missing, number, words,
};
use crate::units::{FromDirection, SpeedUnit};

/// A METAR or SPECI, up to its wind.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Metar<'a> {
    /// Location indicator, four letters or digits.
    pub station: &'a str,
    /// Day and time of the observation; some reports have none.
    pub time: Option<DayTime>,
    /// SPECI: made because the weather changed.
    pub special: bool,
    /// Number of the correction: 0 for none, 1 for COR or CCA, 2 for CCB and so on. The highest stands.
    pub correction: u8,
    /// AUTO: without an observer.
    pub automatic: bool,
    /// NIL: the station has no report for this time.
    pub nil: bool,
    /// The wind; `None` if there is no wind group, or one of solidi only.
    pub wind: Option<CodedWind>,
}

const STATION: &str = "location indicator of four capital letters or digits";
const TIME: &str = "day and time ddhhmmZ";
const WIND: &str = "wind dddffKT or dddffGffKT, with KT, MPS or KMH";
const UNIT: &str = "unit of the wind, KT, MPS or KMH";
const SECTOR: &str = "directions dddVddd of 000 to 360";

/// Reads one report; what follows `=` is left.
///
/// # Errors
/// If the station, the time or the wind cannot be read. A report without a time must have a wind group or NIL in its
/// place, or it is no report.
pub fn parse_metar(text: &str) -> Result<Metar<'_>, CodeError<'_>> {
    let text = text.split('=').next().unwrap_or_default();
    let mut words = words(text).peekable();
    let mut metar = Metar {
        station: "",
        time: None,
        special: false,
        correction: 0,
        automatic: false,
        nil: false,
        wind: None,
    };
    while let Some(&word) = words.peek() {
        match word {
            "METAR" => metar.special = false,
            "SPECI" => metar.special = true,
            "COR" => metar.correction = 1,
            _ => break,
        }
        words.next();
    }
    metar.station = match words.next().unwrap_or_default() {
        word if is_station(word) => word,
        word => return Err(error(word, STATION)),
    };
    if let Some(&word) = words.peek()
        && looks_like_time(word)
    {
        let digits = word.strip_suffix('Z').unwrap_or(word);
        let time = Some(digits).filter(|digits| digits.len() == 6);
        metar.time = time.and_then(DayTime::parse);
        if metar.time.is_none() {
            return Err(error(word, TIME));
        }
        words.next();
    }
    let mut group = Group::Other;
    for word in words.by_ref() {
        if word == "AUTO" {
            metar.automatic = true;
        } else if word == "NIL" {
            metar.nil = true;
            return Ok(metar);
        } else if let Some(number) = correction(word) {
            metar.correction = metar.correction.max(number);
        } else {
            group = read_group(word)?;
            if metar.time.is_none() && group == Group::Other {
                return Err(error(word, TIME));
            }
            break;
        }
    }
    match group {
        Group::Wind(mut wind) => {
            if let Some(&word) = words.peek() {
                wind.sector = read_sector(word)?;
            }
            metar.wind = wind.if_any();
        }
        Group::Other if metar.time.is_none() => return Err(error("", TIME)),
        Group::Missing | Group::Other => {}
    }
    Ok(metar)
}

/// Reads all reports of a text: bulletins, or plain lines.
///
/// A report ends with `=`, or before a line that starts the next one, or, if the text has no `=` at all, with its line.
/// A heading (`SAUK31 EGGY 220250 CCA`), or METAR or SPECI alone on a line, counts for the reports after it; bulletins
/// of nothing but NIL have no reports.
pub fn metars(text: &str) -> Metars<'_> {
    Metars {
        pieces: Pieces::new(text, starts_report),
        bulletin: 0,
        special: false,
        correction: 0,
    }
}

/// Reports of a text; see [`metars`].
#[derive(Debug, Clone)]
pub struct Metars<'a> {
    pieces: Pieces<'a>,
    bulletin: u64,
    /// What the heading and the line of METAR or SPECI say.
    special: bool,
    correction: u8,
}

impl<'a> Iterator for Metars<'a> {
    type Item = Entry<'a, Metar<'a>>;

    fn next(&mut self) -> Option<Self::Item> {
        loop {
            let mut piece = self.pieces.next()?;
            if piece.bulletin != self.bulletin {
                self.bulletin = piece.bulletin;
                // SP: special reports of airfields.
                self.special = piece
                    .heading
                    .is_some_and(|heading| heading.designator.starts_with("SP"));
                self.correction = piece.heading.map_or(0, |heading| heading.correction);
            }
            let line = piece.text.split('\n').next().unwrap_or_default();
            if words(line).all(|word| matches!(word, "METAR" | "SPECI" | "COR")) {
                for _ in words(line) {
                    let (word, rest) = piece.split_first();
                    match word {
                        "COR" => self.correction = self.correction.max(1),
                        kind => self.special = kind == "SPECI",
                    }
                    piece = rest;
                }
            }
            if piece.text.is_empty() || is_empty_bulletin(piece.text) {
                continue;
            }
            let names_its_kind = matches!(piece.split_first().0, "METAR" | "SPECI");
            let report = parse_metar(piece.text).map(|metar| Metar {
                special: if names_its_kind {
                    metar.special
                } else {
                    self.special
                },
                correction: metar.correction.max(self.correction),
                ..metar
            });
            return Some(Entry {
                line: piece.line,
                text: piece.text,
                report,
            });
        }
    }
}

/// NIL without a station: the bulletin is empty.
fn is_empty_bulletin(text: &str) -> bool {
    let mut words = words(text).skip_while(|word| matches!(*word, "METAR" | "SPECI"));
    words.next() == Some("NIL") && words.next().is_none()
}

fn error<'a>(word: &'a str, expected: &'static str) -> CodeError<'a> {
    CodeError { word, expected }
}

fn starts_report(line: &str) -> bool {
    let mut words = words(line);
    match words.next() {
        Some("METAR" | "SPECI") => true,
        Some(word) => {
            is_station(word)
                && words
                    .next()
                    .and_then(|time| time.strip_suffix('Z'))
                    .is_some_and(|time| time.len() == 6 && DayTime::parse(time).is_some())
        }
        None => false,
    }
}

fn is_station(word: &str) -> bool {
    word.len() == 4
        && word
            .bytes()
            .all(|b| b.is_ascii_uppercase() || b.is_ascii_digit())
}

/// `ddhhmmZ`, the same without `Z`, or a slip of it.
fn looks_like_time(word: &str) -> bool {
    let digits = word.strip_suffix('Z');
    digits.unwrap_or(word).bytes().all(|b| b.is_ascii_digit())
        && (digits.is_some() || word.len() == 6)
}

/// The word where the wind should stand.
#[derive(PartialEq)]
enum Group {
    Wind(CodedWind),
    /// Solidi without a unit.
    Missing,
    /// Another group: the report has no wind.
    Other,
}

fn read_group(word: &str) -> Result<Group, CodeError<'_>> {
    if word == "/////" {
        return Ok(Group::Missing);
    }
    let units = [
        ("KT", SpeedUnit::Knot),
        ("MPS", SpeedUnit::MetrePerSecond),
        ("KMH", SpeedUnit::KilometrePerHour),
    ];
    for (letters, unit) in units {
        if let Some(figures) = word.strip_suffix(letters) {
            return read_figures(figures, unit)
                .map(Group::Wind)
                .ok_or(error(word, WIND));
        }
    }
    let starts_like_wind =
        word.starts_with("VRB") || word.starts_with(|c: char| c.is_ascii_digit());
    if starts_like_wind && read_figures(word, SpeedUnit::Knot).is_some() {
        return Err(error(word, UNIT));
    }
    Ok(Group::Other)
}

/// Reads the group without its unit.
fn read_figures(figures: &str, unit: SpeedUnit) -> Option<CodedWind> {
    let (estimated, figures) = match figures.strip_prefix('E') {
        Some(rest) => (true, rest),
        None => (false, figures),
    };
    let (direction, rest) = figures.split_at_checked(3)?;
    let (mean, gust) = match rest.split_once('G') {
        Some((mean, gust)) => (mean, read_speed(gust, unit)?),
        None => (rest, Speed::Missing),
    };
    let speed = read_speed(mean, unit)?.given();
    let direction = match direction {
        "VRB" => CodedDirection::Variable,
        "000" if speed.is_some_and(|speed| speed.value > 0.0) => CodedDirection::Zero,
        "000" | "///" => CodedDirection::Missing,
        degrees => CodedDirection::From(read_direction(degrees)?),
    };
    Some(CodedWind {
        direction,
        speed,
        gust: gust.given(),
        sector: None,
        unit,
        estimated,
    })
}

/// Three digits, 000 to 360.
fn read_direction(text: &str) -> Option<FromDirection> {
    let degrees = Some(text).filter(|text| text.len() == 3).and_then(number)?;
    FromDirection::new(f64::from(degrees))
}

/// A speed that can be read.
enum Speed {
    Given(CodedSpeed),
    Missing,
}

impl Speed {
    fn given(self) -> Option<CodedSpeed> {
        match self {
            Self::Given(speed) => Some(speed),
            Self::Missing => None,
        }
    }
}

/// Two or three digits, `P` before them for "more than", or solidi.
fn read_speed(text: &str, unit: SpeedUnit) -> Option<Speed> {
    let (above, digits) = match text.strip_prefix('P') {
        Some(digits) => (true, digits),
        None => (false, text),
    };
    if !matches!(digits.len(), 2 | 3) {
        return None;
    }
    if is_missing(digits) {
        return Some(Speed::Missing);
    }
    Some(Speed::Given(CodedSpeed::new(number(digits)?, unit, above)))
}

/// Extremes `dddVddd` after the wind, if the word is one; they may be solidi.
fn read_sector(word: &str) -> Result<Option<(FromDirection, FromDirection)>, CodeError<'_>> {
    let Some((first, second)) = word.split_once('V') else {
        return Ok(None);
    };
    let is_figure = |text: &str| text.len() == 3 && number(text).is_some();
    if !(is_figure(first) && is_figure(second)) {
        return Ok(None);
    }
    match (read_direction(first), read_direction(second)) {
        (Some(first), Some(second)) => Ok(Some((first, second))),
        _ => Err(error(word, SECTOR)),
    }
}

#[cfg(test)]
#[path = "metar_tests.rs"]
mod tests;
