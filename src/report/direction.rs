//! Directions as words.

use crate::units::FromDirection;

/// What stands for a direction.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum DirectionText {
    From(FromDirection),
    Calm,
    Variable,
}

/// The 32 points of the compass, clockwise from north, 11.25 degrees apart (common practice of seafaring).
const POINTS: [&str; 32] = [
    "N", "NBE", "NNE", "NEBN", "NE", "NEBE", "ENE", "EBN", "E", "EBS", "ESE", "SEBE", "SE", "SEBS",
    "SSE", "SBE", "S", "SBW", "SSW", "SWBS", "SW", "SWBW", "WSW", "WBS", "W", "WBN", "WNW", "NWBW",
    "NW", "NWBN", "NNW", "NBW",
];

/// Reads a point of the compass (`N`, `nne`, `North-northeast`, `NbE`, `north by east`), `Calm` or `Variable`.
pub(super) fn direction_word(text: &[u8]) -> Option<DirectionText> {
    // The longest is "northeast by north".
    let mut short = [0_u8; 8];
    let mut length = 0;
    let mut rest = text;
    if text.eq_ignore_ascii_case(b"calm") {
        return Some(DirectionText::Calm);
    }
    if text.eq_ignore_ascii_case(b"variable") || text.eq_ignore_ascii_case(b"vrb") {
        return Some(DirectionText::Variable);
    }
    while let [first, after @ ..] = rest {
        if matches!(first, b' ' | b'-' | b'_' | b'/') {
            rest = after;
            continue;
        }
        let words: [(&[u8], u8); 9] = [
            (b"north", b'N'),
            (b"east", b'E'),
            (b"south", b'S'),
            (b"west", b'W'),
            (b"by", b'B'),
            (b"n", b'N'),
            (b"e", b'E'),
            (b"s", b'S'),
            (b"w", b'W'),
        ];
        let (word, letter) = words
            .into_iter()
            .find(|(word, _)| {
                rest.get(..word.len())
                    .is_some_and(|r| r.eq_ignore_ascii_case(word))
            })
            .or_else(|| {
                first
                    .eq_ignore_ascii_case(&b'b')
                    .then_some((&b"b"[..], b'B'))
            })?;
        *short.get_mut(length)? = letter;
        length += 1;
        rest = rest.get(word.len()..)?;
    }
    let short = short.get(..length)?;
    let point = (0_u8..).zip(POINTS).find(|(_, p)| p.as_bytes() == short)?.0;
    FromDirection::new(11.25 * f64::from(point)).map(DirectionText::From)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn points_words_and_their_mixtures() {
        let degrees = |text: &str| match direction_word(text.as_bytes()) {
            Some(DirectionText::From(d)) => Some(d.degrees()),
            _ => None,
        };
        for (text, expected) in [
            ("North", 360.0),
            ("Northeast", 45.0),
            ("north-east", 45.0),
            ("ESE", 112.5),
            ("East-southeast", 112.5),
            ("NbE", 11.25),
            ("north by east", 11.25),
            ("Northeast by North", 33.75),
            ("nw", 315.0),
            ("SWbW", 236.25),
        ] {
            assert_eq!(degrees(text), Some(expected), "{text}");
        }
        for (k, point) in POINTS.into_iter().enumerate() {
            let expected = if k == 0 { 360.0 } else { 11.25 * k as f64 };
            assert_eq!(degrees(point), Some(expected));
        }
        assert_eq!(direction_word(b"calm"), Some(DirectionText::Calm));
        assert_eq!(direction_word(b"Variable"), Some(DirectionText::Variable));
        for bad in ["", "NEN", "EN", "up", "NNNNNNNNNNN", "-", "N/A"] {
            assert_eq!(direction_word(bad.as_bytes()), None, "{bad}");
        }
    }
}
