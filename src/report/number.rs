//! Numbers and times from bytes: a fast path for the usual form, the exact library for the rest.

use chrono::NaiveDate;

use crate::time::Time;

/// Powers of ten that are exact in f64.
const POWERS: [f64; 16] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15,
];

/// Reads a decimal number; `None` if it is none, or not finite.
///
/// Up to 15 digits without exponent are one integer divided by one exact power of ten: correctly rounded (Clinger
/// 1990, How to read floating point numbers accurately). Anything else goes to `fast-float2`.
pub(super) fn parse_number(text: &[u8]) -> Option<f64> {
    let (negative, digits) = match text {
        [b'-', rest @ ..] => (true, rest),
        _ => (false, text),
    };
    if digits.is_empty() || digits.len() > 16 {
        return parse_any(text);
    }
    let mut mantissa = 0_u64;
    let mut point = None;
    for (i, &byte) in digits.iter().enumerate() {
        match byte {
            b'0'..=b'9' => mantissa = mantissa * 10 + u64::from(byte - b'0'),
            b'.' if point.is_none() => point = Some(i),
            _ => return parse_any(text),
        }
    }
    let decimals = point.map_or(0, |p| digits.len() - 1 - p);
    let digit_count = digits.len() - usize::from(point.is_some());
    if digit_count == 0 || digit_count > 15 {
        return parse_any(text);
    }
    let value = mantissa as f64 / POWERS[decimals]; // decimals <= 15, checked above
    Some(if negative { -value } else { value })
}

fn parse_any(text: &[u8]) -> Option<f64> {
    let value: f64 = fast_float2::parse(text).ok()?;
    value.is_finite().then_some(value)
}

/// Reads RFC 3339 times; remembers the last date, since most rows share it with the row before.
#[derive(Debug, Default)]
pub(super) struct TimeReader {
    date: [u8; 10],
    /// Midnight of that date, s.
    midnight: i64,
    known: bool,
}

impl TimeReader {
    pub(super) fn parse(&mut self, text: &[u8]) -> Result<Time, String> {
        if let Some(time) = self.fast(text) {
            return Ok(time);
        }
        Time::parse_rfc3339(&String::from_utf8_lossy(text))
    }

    /// `YYYY-MM-DDThh:mm:ssZ` and nothing else.
    fn fast(&mut self, text: &[u8]) -> Option<Time> {
        let text: &[u8; 20] = text.try_into().ok()?;
        let (date, clock) = text.split_first_chunk::<10>()?;
        let &[b'T', h1, h2, b':', m1, m2, b':', s1, s2, b'Z'] = clock else {
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
        if !self.known || *date != self.date {
            self.learn(date)?;
        }
        Some(Time::from_micros(
            (self.midnight + hour * 3600 + minute * 60 + second) * 1_000_000,
        ))
    }

    fn learn(&mut self, date: &[u8; 10]) -> Option<()> {
        // The library checks the date and its year; midnight is all that is kept.
        let text = std::str::from_utf8(date).ok()?;
        NaiveDate::parse_from_str(text, "%Y-%m-%d").ok()?;
        let midnight = Time::parse_rfc3339(&format!("{text}T00:00:00Z")).ok()?;
        self.midnight = midnight.micros() / 1_000_000;
        self.date = *date;
        self.known = true;
        Some(())
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    proptest! {
        #[test]
        fn numbers_equal_the_standard_library(text in "-?[0-9]{0,12}(\\.[0-9]{0,6})?(e-?[0-9]{1,2})?") {
            prop_assert_eq!(parse_number(text.as_bytes()), text.parse::<f64>().ok().filter(|x| x.is_finite()));
        }

        #[test]
        fn times_equal_the_library(text in "[0-9]{4}-[01][0-9]-[0-3][0-9]T[0-2][0-9]:[0-6][0-9]:[0-6][0-9]Z") {
            prop_assert_eq!(TimeReader::default().parse(text.as_bytes()).ok(), Time::parse_rfc3339(&text).ok());
        }
    }

    #[test]
    fn odd_numbers_are_read_exactly_or_refused() {
        assert_eq!(parse_number(b"8.89999"), Some(8.89999));
        assert_eq!(
            parse_number(b"1.7000000000000002"),
            Some(1.700_000_000_000_000_2)
        );
        assert_eq!(parse_number(b"-0.5"), Some(-0.5));
        for bad in [
            "", "-", ".", "1.2.3", "12,5", "nan", "inf", "1e400", "0x10", "5 ",
        ] {
            assert_eq!(parse_number(bad.as_bytes()), None, "{bad}");
        }
    }
}
