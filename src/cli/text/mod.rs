//! What the commands say to people, in 80 columns.

pub(super) mod calibration;
pub(super) mod estimate;
pub(super) mod events;
pub(super) mod polygons;
pub(super) mod profile;
pub(super) mod reading;
pub(super) mod screening;

use std::fmt::Write as _;

use anstyle::{AnsiColor, Style};
use unicode_width::{UnicodeWidthChar, UnicodeWidthStr};

use crate::check::Flag;
use crate::pipeline::Setup;

/// Width of everything printed.
pub(super) const WIDTH: usize = 80;

/// Text cut to a width on the terminal; what is an order to the terminal and no sign is shown as `\u{fffd}`.
pub(super) fn cut(text: &str, most: usize) -> String {
    let shown = |c: char| if c.is_control() { '\u{fffd}' } else { c };
    let text: String = text.chars().map(shown).collect();
    if text.width() <= most {
        return text;
    }
    let mut short = String::new();
    for c in text.chars() {
        if short.width() + c.width().unwrap_or(0) + 1 > most {
            break;
        }
        short.push(c);
    }
    short.push('…');
    short
}

/// An identifier cut to a width: its middle is left out, as many differ in their ends only.
pub(super) fn short_id(id: &str, most: usize) -> String {
    let id = cut(id, usize::MAX);
    if id.width() <= most {
        return id;
    }
    let start = cut(&id, most / 2 + 1);
    let (mut end, mut width) = (id.len(), start.width());
    for (at, c) in id.char_indices().rev() {
        width += c.width().unwrap_or(0);
        if width > most {
            break;
        }
        end = at;
    }
    // Both bounds are those of characters.
    start + id.get(end..).unwrap_or_default()
}

/// An identifier cut to a width, or filled with spaces.
pub(super) fn cell(id: &str, width: usize) -> String {
    let mut text = short_id(id, width);
    text.push_str(&" ".repeat(width.saturating_sub(text.width())));
    text
}

/// A heading: bold on a terminal.
pub(super) fn heading(text: &str) -> String {
    let style = Style::new().bold();
    format!("{style}{text}{style:#}")
}

/// Words on what is suspect or failed: coloured on a terminal.
pub(super) fn flagged(flag: Flag, words: &str) -> String {
    let color = match flag {
        Flag::Suspect => AnsiColor::Yellow,
        Flag::Fail => AnsiColor::Red,
        Flag::NotEvaluated | Flag::Pass | Flag::Missing => return words.to_string(),
    };
    let style = color.on_default();
    format!("{style}{words}{style:#}")
}

/// A row with a label of up to eleven columns, its further lines under the first.
pub(super) fn row(out: &mut String, label: &str, text: &str) {
    for (k, line) in wrapped(text, WIDTH - 12).lines().enumerate() {
        // Writing to a string cannot fail.
        let _ = writeln!(out, "{:<11} {line}", if k == 0 { label } else { "" });
    }
}

/// Text in lines of at most the width; a longer word has a line of its own.
pub(super) fn wrapped(text: &str, most: usize) -> String {
    let mut out = String::new();
    let mut width = 0;
    for word in text.split_whitespace() {
        let length = word.width();
        if width > 0 && width + 1 + length > most {
            out.push('\n');
            width = 0;
        } else if width > 0 {
            out.push(' ');
            width += 1;
        }
        out.push_str(word);
        width += length;
    }
    out
}

/// Says which corrections of the station list are used, all of them.
pub(super) fn corrections_text(out: &mut String, setup: &Setup) {
    for station in setup.network.stations() {
        if let Some(correction) = &station.correction {
            let _ = writeln!(
                out,
                "Corrected   {} {}",
                short_id(&station.id, 12),
                cut(&correction.words(), WIDTH - 25)
            );
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Widths after Unicode Standard Annex 11: an ideograph takes two columns, a combining accent none.
    #[test]
    fn widths_are_those_of_a_terminal() {
        assert_eq!(cut("大帽山測站", 10), "大帽山測站");
        assert_eq!(cut("大帽山測站", 9), "大帽山測…");
        assert_eq!(cut("大帽山測站", 8), "大帽山…");
        assert_eq!(short_id("0-20000-0-54511", 12), "0-2000…54511");
        assert_eq!(short_id("大帽山測站", 8), "大帽…站");
        assert_eq!(cell("大帽山", 8), "大帽山  ");
        assert_eq!(cell("Zu\u{308}rich", 7), "Zu\u{308}rich ");
        assert_eq!(cut("a\u{1b}[31mb\n", 20), "a\u{fffd}[31mb\u{fffd}");
        assert_eq!(wrapped("大帽山 測站 x", 9), "大帽山\n測站 x");
    }
}
