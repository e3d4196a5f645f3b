//! Text tables as they come: compressed or not, in any of a few encodings, with any delimiter.
//!
//! One line is one row. Fields may be quoted, but a quote must end on its line, so a damaged quote spoils one row and
//! not the rest of the file.

mod blocks;
mod number;
mod row;
mod source;
mod time;

use serde::Serialize;

pub(crate) use blocks::{BLOCK, Block, Blocks};
pub(crate) use number::{parse_number, parse_number_with_comma, parse_short};
pub(crate) use row::{Header, Row, Splitter, find_delimiter, find_separators, read_header};
pub use source::open;
pub(crate) use source::{latin1_to_utf8, read_all};
pub(crate) use time::TimeReader;
pub use time::{Label, RepeatedHour, TimeForm, TimeFormat, Zone};

/// How a text table is written.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize)]
pub struct TextFormat {
    /// What separates the fields; found from the header if not stated.
    pub delimiter: Option<char>,
    /// Numbers have a comma for the decimal point.
    pub decimal_comma: bool,
    /// The text is Latin-1 (ISO 8859-1), not UTF-8.
    pub latin1: bool,
    /// Lines before the header.
    pub skip_lines: u64,
    /// Texts that mean "no value"; if empty, [`MISSING_MARKS`].
    pub missing: Vec<String>,
}

/// Texts that mean "no value" unless the settings state others (common practice). Case does not matter.
pub const MISSING_MARKS: [&str; 14] = [
    "", "NA", "N/A", "NaN", "null", "none", "M", "MM", "-", "/", "//", "///", "-9999", "-999",
];

/// The marks of missing values, as bytes.
#[derive(Debug, Clone)]
pub(crate) struct MissingMarks<'a>(Vec<&'a [u8]>);

impl<'a> MissingMarks<'a> {
    pub(crate) fn new(format: &'a TextFormat) -> Self {
        if format.missing.is_empty() {
            Self(MISSING_MARKS.iter().map(|m| m.as_bytes()).collect())
        } else {
            // An empty field is never a value.
            let stated = format.missing.iter().map(String::as_bytes);
            Self(stated.chain([&b""[..]]).collect())
        }
    }

    pub(crate) fn contains(&self, text: &[u8]) -> bool {
        if self.0.iter().any(|mark| mark.eq_ignore_ascii_case(text)) {
            return true;
        }
        // -9999 is also written -9999.0, or -9999,0.
        let endings: [&[u8]; 4] = [b".0", b".00", b",0", b",00"];
        let whole = endings.into_iter().find_map(|end| text.strip_suffix(end));
        whole.is_some_and(|whole| {
            self.0
                .iter()
                .any(|mark| mark.starts_with(b"-") && *mark == whole)
        })
    }
}

/// Input text for a message: cut, with control characters shown.
pub(crate) fn shown(text: &[u8]) -> String {
    let cut = text.get(..60).unwrap_or(text);
    String::from_utf8_lossy(cut).escape_debug().to_string()
}
