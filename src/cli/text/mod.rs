//! What the commands say to people, in 80 columns.

pub(super) mod calibration;
pub(super) mod estimate;
pub(super) mod events;
pub(super) mod polygons;
pub(super) mod profile;
pub(super) mod reading;
pub(super) mod screening;

use std::fmt::Write as _;

use crate::pipeline::Setup;

/// Width of everything printed.
pub(super) const WIDTH: usize = 80;

/// Text cut to a width in characters.
pub(super) fn cut(text: &str, width: usize) -> String {
    if text.chars().count() <= width {
        text.to_string()
    } else {
        let mut short: String = text.chars().take(width.saturating_sub(1)).collect();
        short.push('…');
        short
    }
}

/// Text in lines of at most the width.
pub(super) fn wrapped(text: &str, most: usize) -> String {
    let mut out = String::new();
    let mut width = 0;
    for word in text.split_whitespace() {
        let length = word.chars().count();
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
                cut(&station.id, 12),
                cut(&correction.words(), WIDTH - 25)
            );
        }
    }
}
