//! Instants in UTC.

use std::fmt;
use std::time::Duration;

use chrono::{DateTime, Datelike, NaiveDateTime, SecondsFormat};

/// An instant in UTC: whole microseconds since 1970-01-01T00:00:00Z (no leap seconds).
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Default)]
pub struct Time(i64);

/// Years that a report may carry; a time outside is a slip of the source.
const YEARS: std::ops::RangeInclusive<i32> = 1800..=2200;

impl Time {
    /// From microseconds since 1970-01-01T00:00:00Z.
    #[must_use]
    pub const fn from_micros(micros: i64) -> Self {
        Self(micros)
    }

    /// Microseconds since 1970-01-01T00:00:00Z.
    #[must_use]
    pub const fn micros(self) -> i64 {
        self.0
    }

    /// This instant moved by a signed number of microseconds (saturating).
    #[must_use]
    pub const fn plus_micros(self, micros: i64) -> Self {
        Self(self.0.saturating_add(micros))
    }

    /// Reads an RFC 3339 time; it must carry its offset from UTC.
    ///
    /// # Errors
    /// Says what was found and what is expected.
    pub fn parse_rfc3339(text: &str) -> Result<Self, String> {
        let time = DateTime::parse_from_rfc3339(text).map_err(|_| {
            format!("`{text}` is not a time (RFC 3339 with its offset from UTC expected, such as 2031-06-14T12:00:00Z)")
        })?;
        Self::from_utc(time.naive_utc()).ok_or_else(|| {
            format!(
                "`{text}` is not in the years {} to {}",
                YEARS.start(),
                YEARS.end()
            )
        })
    }

    /// From a calendar time in UTC; `None` outside the years 1800 to 2200, which is a slip of the source.
    #[must_use]
    pub fn from_utc(time: NaiveDateTime) -> Option<Self> {
        YEARS
            .contains(&time.year())
            .then(|| Self(time.and_utc().timestamp_micros()))
    }
}

impl fmt::Display for Time {
    /// RFC 3339 in UTC, with a fraction only where there is one.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match DateTime::from_timestamp_micros(self.0) {
            Some(time) => f.write_str(&time.to_rfc3339_opts(SecondsFormat::AutoSi, true)),
            None => write!(f, "{} us", self.0),
        }
    }
}

/// Whole microseconds of a duration (saturating).
#[must_use]
pub fn micros_of(duration: Duration) -> i64 {
    i64::try_from(duration.as_micros()).unwrap_or(i64::MAX)
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    #[test]
    fn rfc3339_keeps_the_offset() {
        let time = Time::parse_rfc3339("2013-02-12T03:00:00-05:00").unwrap();
        assert_eq!(time.to_string(), "2013-02-12T08:00:00Z");
        assert_eq!(
            Time::parse_rfc3339("1970-01-01T00:00:01.5Z")
                .unwrap()
                .micros(),
            1_500_000
        );
    }

    #[test]
    fn times_without_offset_or_out_of_range_are_refused() {
        for bad in [
            "2013-02-12T03:00:00",
            "0000-01-01T00:00:00Z",
            "2013-13-01T00:00:00Z",
            "",
        ] {
            assert!(Time::parse_rfc3339(bad).is_err(), "{bad}");
        }
    }
}
