//! The text of `gyremesh check`, in 80 columns.

use std::fmt::Write as _;

use super::screening::screening_text;
use super::{WIDTH, cell, cut, heading, short_id};
use crate::pipeline::Reading;
use crate::settings::Settings;
use crate::station::Network;
use crate::tally::Tally;
use crate::time::Time;

/// Conflicting repeats that are printed.
const CONFLICTS: usize = 5;

/// Tables of files, stations and conflicts.
pub(crate) fn reading_text(settings: &Settings, network: &Network, reading: &Reading) -> String {
    let mut out = String::new();
    // Writing to a string cannot fail.
    let _ = writeln!(
        out,
        "{}\n{} stations in the list",
        heading(&cut(&settings.name, WIDTH)),
        network.len()
    );
    let columns = format!("{:>10} {:>10} {:>10}  file", "rows", "passed", "set aside");
    let _ = writeln!(out, "\n{}", heading(&columns));
    for file in &reading.files {
        let tally = &file.tally;
        let name: String = shortened(&file.file, 44);
        let _ = writeln!(
            out,
            "{:>10} {:>10} {:>10}  {name}",
            tally.received,
            tally.passed,
            tally.received - tally.passed
        );
        reasons(&mut out, tally);
    }
    let _ = writeln!(
        out,
        "\n{} rows are {} reports (each station and time once)",
        reading.repeats.received, reading.repeats.passed
    );
    reasons(&mut out, &reading.repeats);
    contents(&mut out, network, reading);
    timing(&mut out, network, reading);
    if settings.screen {
        screening_text(&mut out, network, reading);
    }
    let conflicts = &reading.conflicts;
    if !conflicts.is_empty() {
        let _ = writeln!(
            out,
            "\nRows that say different things of the same station and time:"
        );
        for conflict in conflicts.iter().take(CONFLICTS) {
            let place = |(file, line): (u16, u32)| {
                let file = reading
                    .files
                    .get(usize::from(file))
                    .map_or("?", |f| f.file.as_str());
                format!("{}:{line}", shortened(file, 52))
            };
            let station = network
                .stations()
                .get(conflict.station as usize)
                .map_or("", |s| s.id.as_str());
            let _ = writeln!(
                out,
                "  {} {}:\n    {} holds,\n    not {}",
                short_id(station, 12),
                minute(conflict.time),
                place(conflict.holds),
                place(conflict.set_aside)
            );
        }
        if conflicts.len() > CONFLICTS {
            let _ = writeln!(
                out,
                "  and more; `--json` lists the first {}",
                conflicts.len()
            );
        }
    }
    out
}

fn reasons(out: &mut String, tally: &Tally) {
    for (reason, n) in &tally.set_aside {
        let _ = writeln!(out, "{n:>32}  {}", reason.words());
    }
}

/// What the reports of each station hold.
fn contents(out: &mut String, network: &Network, reading: &Reading) {
    let columns = format!(
        "{:<16} {:>8} {:>8} {:>7} {:>8} {:>8} {:>7} {:>7}",
        "station", "reports", "wind", "calm", "no dir", "no speed", "suspect", "failed"
    );
    let _ = writeln!(out, "\n{}", heading(&columns));
    for (station, s) in network.stations().iter().zip(&reading.stations) {
        let _ = writeln!(
            out,
            "{} {:>8} {:>8} {:>7} {:>8} {:>8} {:>7} {:>7}",
            cell(&station.id, 16),
            s.reports,
            s.wind,
            s.calm,
            s.no_direction,
            s.no_speed,
            s.suspect,
            s.failed
        );
    }
}

/// When each station reports, and how it rounds.
fn timing(out: &mut String, network: &Network, reading: &Reading) {
    let columns = format!(
        "{:<16} {:<16} {:<16} {:>7} {:>5} {:>5} {:>8}",
        "station", "first (UTC)", "last", "every", "gaps", "deg", "speed"
    );
    let _ = writeln!(out, "\n{}", heading(&columns));
    for (station, s) in network.stations().iter().zip(&reading.stations) {
        let (first, last) = s
            .period
            .map_or_else(Default::default, |(a, b)| (minute(a), minute(b)));
        let _ = writeln!(
            out,
            "{} {first:<16} {last:<16} {:>7} {:>5} {:>5} {:>8}",
            cell(&station.id, 16),
            s.interval.map_or_else(String::new, interval),
            s.gaps,
            s.rounding
                .direction
                .map_or_else(String::new, |d| d.to_string()),
            s.rounding
                .speed
                .map_or_else(String::new, |step| format!("{} {}", step.count, step.unit)),
        );
    }
    let _ = writeln!(
        out,
        "\ndeg, speed: steps to which directions and speeds are rounded, where found"
    );
}

/// A time to the minute: `2031-06-14 12:00`.
fn minute(time: Time) -> String {
    let text = time.to_string();
    text.get(..16).map_or(text.clone(), |t| t.replace('T', " "))
}

/// A time between reports in the largest unit that divides it.
fn interval(micros: i64) -> String {
    for (unit, name) in [
        (86_400_000_000, "d"),
        (3_600_000_000, "h"),
        (60_000_000, "min"),
        (1_000_000, "s"),
    ] {
        if micros % unit == 0 {
            return format!("{} {name}", micros / unit);
        }
    }
    format!("{} ms", micros / 1000)
}

/// A file name whose beginning is cut off if it is too long.
pub(crate) fn shortened(name: &str, width: usize) -> String {
    // Its end, as the beginning of what is turned round.
    let reversed: String = name.chars().rev().collect();
    cut(&reversed, width).chars().rev().collect()
}
