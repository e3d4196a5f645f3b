//! Times as reports write them.

use std::fmt;
use std::time::Duration;

use chrono::{DateTime, LocalResult, NaiveDate, NaiveDateTime, TimeZone};

use super::parse_number;
use crate::time::{Time, micros_of};

/// How times are written.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct TimeFormat {
    /// The form.
    pub form: TimeForm,
    /// Where the clock stands that they are read from.
    pub zone: Zone,
    /// What a local time means that the clock shows twice.
    pub repeated_hour: RepeatedHour,
    /// Which end of the averaging window the time names.
    pub label: Label,
    /// The averaging window, needed for labels other than its end.
    pub averaging: Duration,
}

impl Default for TimeFormat {
    fn default() -> Self {
        Self {
            form: TimeForm::Rfc3339,
            zone: Zone::InText,
            repeated_hour: RepeatedHour::First,
            label: Label::End,
            averaging: Duration::ZERO,
        }
    }
}

/// The form of a time.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum TimeForm {
    /// RFC 3339; with a stated zone also without an offset and without seconds, `T` or a space between date and time.
    Rfc3339,
    /// `YYYYMMDDHHMM` or `YYYYMMDDHHMMSS`.
    Compact,
    /// Seconds since 1970-01-01T00:00:00Z.
    EpochSeconds,
    /// Milliseconds since 1970-01-01T00:00:00Z.
    EpochMilliseconds,
    /// A pattern of `chrono` (strftime), such as `%d.%m.%Y %H:%M`.
    Pattern(String),
}

/// Where the clock stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Zone {
    /// Each time carries its own offset from UTC; one without is an error.
    InText,
    /// A fixed offset from UTC, seconds, east positive.
    Fixed(i32),
    /// A zone of the IANA database.
    Named(chrono_tz::Tz),
}

impl Zone {
    /// Reads `UTC`, an offset such as `+08:00`, or an IANA name such as `Asia/Hong_Kong`.
    ///
    /// # Errors
    /// Says what was found and what is expected.
    pub fn parse(text: &str) -> Result<Self, String> {
        if matches!(text, "UTC" | "Z") {
            return Ok(Self::Fixed(0));
        }
        if let Ok(offset) = text.parse::<chrono::FixedOffset>() {
            return Ok(Self::Fixed(offset.local_minus_utc()));
        }
        text.parse().map(Self::Named).map_err(|_| {
            format!("`{text}` is no zone (UTC, an offset such as +08:00, or a name such as Asia/Hong_Kong expected)")
        })
    }
}

impl fmt::Display for Zone {
    /// As [`Zone::parse`] reads it.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::InText => f.write_str("in the text"),
            Self::Fixed(0) => f.write_str("UTC"),
            Self::Fixed(offset) => {
                let (sign, size) = (if *offset < 0 { '-' } else { '+' }, offset.abs());
                write!(f, "{sign}{:02}:{:02}", size / 3600, size / 60 % 60)
            }
            Self::Named(zone) => f.write_str(zone.name()),
        }
    }
}

/// What a local time means that the clock shows twice, when daylight time ends.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum RepeatedHour {
    /// The first time: still daylight time.
    First,
    /// The second time: already standard time.
    Second,
}

/// Which part of the averaging window a time names. Inside the program it is the end.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Label {
    /// Its start.
    Start,
    /// Its middle.
    Middle,
    /// Its end.
    End,
}

/// Reads times of one format; remembers the last date and the last text, since most rows share one with the row before.
pub(crate) struct TimeReader<'a> {
    format: &'a TimeFormat,
    /// Added to every time, μs.
    shift: i64,
    date: [u8; 10],
    /// Midnight of that date, s.
    midnight: Option<i64>,
    /// The last text of the usual form, and of any other.
    last_usual: Option<([u8; 20], Time)>,
    last: Option<(Vec<u8>, Time)>,
}

impl<'a> TimeReader<'a> {
    pub(crate) fn new(format: &'a TimeFormat) -> Self {
        let window = micros_of(format.averaging);
        Self {
            format,
            shift: match format.label {
                Label::Start => window,
                Label::Middle => window / 2,
                Label::End => 0,
            },
            date: [0; 10],
            midnight: None,
            last_usual: None,
            last: None,
        }
    }

    /// The last text of the usual form, and its time.
    pub(crate) fn usual(&self) -> Option<(&[u8; 20], Time)> {
        self.last_usual.as_ref().map(|(text, time)| (text, *time))
    }

    pub(crate) fn parse(&mut self, text: &[u8]) -> Result<Time, String> {
        // A comparison of fixed length is a few instructions.
        if let Some((last, time)) = &self.last_usual
            && <&[u8; 20]>::try_from(text).is_ok_and(|text| text == last)
        {
            return Ok(*time);
        }
        self.parse_new(text)
    }

    fn parse_new(&mut self, text: &[u8]) -> Result<Time, String> {
        if self.format.form == TimeForm::Rfc3339
            && let Some(time) = self.fast(text)
        {
            if let Ok(usual) = text.try_into() {
                self.last_usual = Some((usual, time));
            }
            return Ok(time);
        }
        if let Some((last, time)) = &self.last
            && last == text
        {
            return Ok(*time);
        }
        let time = self
            .slow(&String::from_utf8_lossy(text))?
            .plus_micros(self.shift);
        match &mut self.last {
            Some((last, at)) => {
                last.clear();
                last.extend_from_slice(text);
                *at = time;
            }
            None => self.last = Some((text.to_vec(), time)),
        }
        Ok(time)
    }

    /// `YYYY-MM-DDThh:mm:ssZ` and nothing else, or the same with a space and without `Z` at a fixed offset.
    fn fast(&mut self, text: &[u8]) -> Option<Time> {
        let (date, clock) = text.split_first_chunk::<10>()?;
        let (clock, offset) = match (clock, self.format.zone) {
            ([b'T', clock @ .., b'Z'], _) => (clock, 0),
            ([b'T' | b' ', clock @ ..], Zone::Fixed(offset)) => (clock, i64::from(offset)),
            _ => return None,
        };
        let &[h1, h2, b':', m1, m2, b':', s1, s2] = clock else {
            return None;
        };
        let two = |a: u8, b: u8| {
            let (a, b) = (a.wrapping_sub(b'0'), b.wrapping_sub(b'0'));
            (a < 10 && b < 10).then(|| i64::from(a) * 10 + i64::from(b))
        };
        let (hour, minute, second) = (two(h1, h2)?, two(m1, m2)?, two(s1, s2)?);
        if hour > 23 || minute > 59 || second > 59 {
            return None;
        }
        if self.midnight.is_none() || *date != self.date {
            self.learn(date)?;
        }
        let seconds = self.midnight? + hour * 3600 + minute * 60 + second - offset;
        Some(Time::from_micros(seconds * 1_000_000).plus_micros(self.shift))
    }

    fn learn(&mut self, date: &[u8; 10]) -> Option<()> {
        // The library checks the date and its year; midnight is all that is kept.
        let text = std::str::from_utf8(date).ok()?;
        NaiveDate::parse_from_str(text, "%Y-%m-%d").ok()?;
        let midnight = Time::parse_rfc3339(&format!("{text}T00:00:00Z")).ok()?;
        self.midnight = Some(midnight.micros() / 1_000_000);
        self.date = *date;
        Some(())
    }

    fn slow(&self, text: &str) -> Result<Time, String> {
        match &self.format.form {
            TimeForm::Rfc3339 => match Time::parse_rfc3339(text) {
                Err(_) if self.format.zone != Zone::InText && !has_offset(text) => {
                    let forms = [
                        "%Y-%m-%dT%H:%M:%S%.f",
                        "%Y-%m-%d %H:%M:%S%.f",
                        "%Y-%m-%dT%H:%M",
                        "%Y-%m-%d %H:%M",
                    ];
                    let local = forms
                        .iter()
                        .find_map(|f| NaiveDateTime::parse_from_str(text, f).ok());
                    self.local(text, local, "YYYY-MM-DD hh:mm:ss")
                }
                result => result,
            },
            TimeForm::Compact => {
                let digits =
                    matches!(text.len(), 12 | 14) && text.bytes().all(|b| b.is_ascii_digit());
                let seconds = if text.len() == 12 { "00" } else { "" };
                let local = digits
                    .then(|| {
                        NaiveDateTime::parse_from_str(&format!("{text}{seconds}"), "%Y%m%d%H%M%S")
                            .ok()
                    })
                    .flatten();
                self.local(text, local, "YYYYMMDDHHMM")
            }
            TimeForm::EpochSeconds => epoch(text, 1e6, "seconds"),
            TimeForm::EpochMilliseconds => epoch(text, 1e3, "milliseconds"),
            TimeForm::Pattern(pattern) => {
                // A pattern with its own offset needs no zone.
                if let Ok(time) = DateTime::parse_from_str(text, pattern) {
                    return Time::from_utc(time.naive_utc()).ok_or_else(|| out_of_range(text));
                }
                let local = NaiveDateTime::parse_from_str(text, pattern)
                    .ok()
                    .or_else(|| {
                        let date = NaiveDate::parse_from_str(text, pattern).ok()?;
                        date.and_hms_opt(0, 0, 0)
                    });
                self.local(text, local, pattern)
            }
        }
    }

    /// A local time in the stated zone as an instant.
    fn local(&self, text: &str, local: Option<NaiveDateTime>, form: &str) -> Result<Time, String> {
        let local = local.ok_or_else(|| format!("`{text}` is not a time ({form} expected)"))?;
        let utc = match self.format.zone {
            Zone::InText => {
                return Err(format!(
                    "`{text}` has no offset from UTC (state `time.zone`, such as UTC, +08:00 or Asia/Hong_Kong)"
                ));
            }
            Zone::Fixed(offset) => {
                local.checked_sub_signed(chrono::TimeDelta::seconds(i64::from(offset)))
            }
            Zone::Named(zone) => match zone.from_local_datetime(&local) {
                LocalResult::Single(time) => Some(time.naive_utc()),
                LocalResult::Ambiguous(first, second) => Some(match self.format.repeated_hour {
                    RepeatedHour::First => first.naive_utc(),
                    RepeatedHour::Second => second.naive_utc(),
                }),
                LocalResult::None => {
                    return Err(format!(
                        "`{text}` does not exist in {zone}: the clock was put forward over it (another zone expected)"
                    ));
                }
            },
        };
        utc.and_then(Time::from_utc)
            .ok_or_else(|| out_of_range(text))
    }
}

fn has_offset(text: &str) -> bool {
    text.ends_with(['Z', 'z']) || text.get(16..).is_some_and(|end| end.contains(['+', '-']))
}

fn epoch(text: &str, micros: f64, unit: &str) -> Result<Time, String> {
    let number = parse_number(text.as_bytes()).ok_or_else(|| {
        format!("`{text}` is not a time ({unit} since 1970-01-01T00:00:00Z expected)")
    })?;
    let value = (number * micros).round();
    #[expect(
        clippy::cast_possible_truncation,
        reason = "checked to be within the years of the calendar"
    )]
    if value.abs() < 1e17 {
        let time = DateTime::from_timestamp_micros(value as i64).map(|t| t.naive_utc());
        return time
            .and_then(Time::from_utc)
            .ok_or_else(|| out_of_range(text));
    }
    Err(out_of_range(text))
}

fn out_of_range(text: &str) -> String {
    format!("`{text}` is not in the years 1800 to 2200")
}

#[cfg(test)]
#[path = "time_tests.rs"]
mod tests;
