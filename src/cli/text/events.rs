//! The bulletin of `gyremesh events`, in 80 columns.

use std::fmt::Write as _;

use super::{WIDTH, corrections_text, cut, heading, short_id, wrapped};
use crate::event::{AreaEvent, AreaKind, LineEvent, Motion, PlaceArrival};
use crate::output::{CAUTION, area_id, line_id};
use crate::pipeline::{EventsOutcome, Setup};
use crate::time::Time;

/// Areas told in full.
const AREAS: usize = 8;
/// Lines told in full.
const LINES: usize = 8;

/// What happened, the most important first: lines that come by places, other lines, the strongest areas.
pub(crate) fn bulletin(setup: &Setup, outcome: &EventsOutcome) -> String {
    let mut out = String::new();
    // Writing to a string cannot fail.
    let _ = writeln!(out, "{}", heading(&cut(&setup.settings.name, WIDTH)));
    if let Some((first, last)) = outcome.period() {
        let _ = writeln!(out, "Period      {first} to {last}");
    }
    corrections_text(&mut out, setup);
    let doubtful = outcome.doubts.iter().flatten().count();
    let sure = outcome.areas.len() - doubtful;
    let _ = writeln!(
        out,
        "Found       {}, {}, {}",
        counted(outcome.lines.len(), "line"),
        counted(sure, "area"),
        counted(outcome.passages.len(), "wind shift at a station")
            .replace("shift at a stations", "shifts at stations")
    );
    let mut lines: Vec<(usize, &LineEvent)> = outcome.lines.iter().enumerate().collect();
    lines.sort_by_key(|(k, line)| {
        let places = line.arrivals.iter().filter(|a| a.first.is_some()).count();
        (std::cmp::Reverse((places, line.stations.len())), *k)
    });
    for &(k, line) in lines.iter().take(LINES) {
        line_text(&mut out, setup, k, line);
    }
    more(&mut out, lines.len(), LINES, "lines");
    let mut areas: Vec<(usize, &AreaEvent)> = (outcome.areas.iter().enumerate())
        .filter(|(k, _)| outcome.doubts[*k].is_none())
        .collect();
    areas.sort_by(|a, b| b.1.strength.total_cmp(&a.1.strength).then(a.0.cmp(&b.0)));
    for &(k, area) in areas.iter().take(AREAS) {
        area_text(&mut out, setup, outcome, k, area);
    }
    more(&mut out, areas.len(), AREAS, "areas");
    if outcome.lines.is_empty() && areas.is_empty() {
        let _ = writeln!(out, "\nNothing that passes for an event.");
    }
    doubts_text(&mut out, setup, outcome);
    let _ = writeln!(
        out,
        "\n{}\n{}",
        wrapped(
            "Times are UTC, ± is one standard error. An arrival holds as long as the line keeps its way and nearly its pace.",
            WIDTH
        ),
        wrapped(CAUTION, WIDTH)
    );
    out
}

fn counted(n: usize, what: &str) -> String {
    let plural = if n == 1 { "" } else { "s" };
    format!("{n} {what}{plural}")
}

fn more(out: &mut String, all: usize, shown: usize, what: &str) {
    if all > shown {
        let _ = writeln!(out, "\n{} weaker {what} are in events.csv", all - shown);
    }
}

/// Day and minute.
fn minute(time: Time) -> String {
    let text = time.to_string();
    let day: String = text.chars().take(10).collect();
    let clock: String = text.chars().skip(11).take(5).collect();
    format!("{day} {clock}")
}

/// Both times, the day of the second only if it is another.
fn span(from: Time, to: Time) -> String {
    let (a, b) = (minute(from), minute(to));
    if a[..10] == b[..10] {
        format!("{a} to {}", &b[11..])
    } else {
        format!("{a} to {b}")
    }
}

const POINTS: [&str; 8] = [
    "north",
    "north-east",
    "east",
    "south-east",
    "south",
    "south-west",
    "west",
    "north-west",
];

/// The nearest of eight points of the compass.
fn point(degrees: f64) -> &'static str {
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "0 to 8; a cast takes anything else to the ends"
    )]
    let number = (degrees.rem_euclid(360.0) / 45.0).round() as usize;
    POINTS[number % 8]
}

fn motion_text(motion: &Motion) -> String {
    let heading_error = if motion.heading_error < 0.95 {
        format!("{:.1}", motion.heading_error)
    } else {
        format!("{:.0}", motion.heading_error)
    };
    format!(
        "{:.1} ± {:.1} m/s towards {:03.0} ± {heading_error} degrees ({})",
        motion.speed,
        motion.speed_error,
        motion.heading,
        point(motion.heading)
    )
}

fn line_text(out: &mut String, setup: &Setup, k: usize, line: &LineEvent) {
    let name = line.name();
    let mut letters = name.chars();
    let first = letters.next().map(|c| c.to_ascii_uppercase());
    let name: String = first.into_iter().chain(letters).collect();
    let head = format!(
        "{:<4} {name}, {}{}",
        line_id(k),
        span(line.start, line.end),
        if line.open { ", still under way" } else { "" }
    );
    let _ = writeln!(out, "\n{}", heading(&head));
    let mut row = |name: &str, text: &str| {
        let _ = writeln!(out, "     {name:<10} {}", cut(text, WIDTH - 16));
    };
    row("moves", &motion_text(&line.motion));
    let [x, y] = line.change;
    row(
        "change",
        &format!(
            "of the wind {:.1} m/s towards {:03.0} degrees, {}",
            x.hypot(y),
            x.atan2(y).to_degrees().rem_euclid(360.0),
            if line.is_convergent() {
                format!("{:.1} closing in", line.closing)
            } else {
                "mostly along the line".into()
            }
        ),
    );
    row(
        "seen by",
        &format!(
            "{} stations; known since {}",
            line.stations.len(),
            minute(line.known_at)
        ),
    );
    for arrival in &line.arrivals {
        arrival_text(out, setup, arrival);
    }
}

fn arrival_text(out: &mut String, setup: &Setup, arrival: &PlaceArrival) {
    let place = &setup.settings.places[arrival.place]; // a place of the settings
    let clock = |time: Time, error: f64| format!("{} ± {:.0} min", minute(time), error / 60.0);
    let text = match (arrival.first, arrival.last) {
        (Some(first), Some(last)) => format!(
            "{}; first told {}: {}",
            clock(last.0, last.1),
            &minute(first.made_at)[11..],
            clock(first.time, first.error).get(11..).unwrap_or_default()
        ),
        (None, Some(last)) => format!(
            "{}; it had passed before it was known",
            clock(last.0, last.1)
        ),
        (Some(first), None) => format!(
            "told {}: {}; it does not come by",
            &minute(first.made_at)[11..],
            clock(first.time, first.error)
        ),
        (None, None) => return,
    };
    let _ = writeln!(out, "     reaches    {}", cut(&place.name, WIDTH - 16));
    let _ = writeln!(out, "                {}", cut(&text, WIDTH - 16));
}

fn area_text(out: &mut String, setup: &Setup, outcome: &EventsOutcome, k: usize, area: &AreaEvent) {
    let name = match area.kind {
        AreaKind::Convergence => "Convergence",
        AreaKind::Divergence => "Divergence",
        AreaKind::Cyclonic => "Cyclonic spin-up",
        AreaKind::Anticyclonic => "Anticyclonic spin-up",
    };
    let head = format!(
        "{:<4} {name}, {}{}",
        area_id(k),
        span(area.start, area.end),
        if area.open { ", still on" } else { "" }
    );
    let _ = writeln!(out, "\n{}", heading(&head));
    let mut row = |name: &str, text: &str| {
        let _ = writeln!(out, "     {name:<10} {}", cut(text, WIDTH - 16));
    };
    let peak = &area.peak;
    let polygon = outcome.run.polygon(setup, peak.polygon);
    row(
        "strongest",
        &format!(
            "({:+.0} ± {:.0})e-5 /s at {} in {}",
            peak.value * 1e5,
            peak.error * 1e5,
            minute(peak.time),
            short_id(polygon.map_or("", |p| p.id.as_str()), 24)
        ),
    );
    let place = |p: Option<&(Time, [f64; 2])>| p.and_then(|p| outcome.place(p.1));
    let points = area.path.points();
    if let (Some(a), Some(b)) = (place(points.first()), place(points.last())) {
        let at = |(latitude, longitude): (f64, f64)| {
            format!(
                "{:.2} {} {:.2} {}",
                latitude.abs(),
                if latitude < 0.0 { "S" } else { "N" },
                longitude.abs(),
                if longitude < 0.0 { "W" } else { "E" }
            )
        };
        row(
            "where",
            &format!("{} to {}; up to {:.0} km2", at(a), at(b), area.area / 1e6),
        );
    }
    if let Some(motion) = area.motion.as_ref().filter(|m| m.heading_error < 45.0) {
        row("moves", &motion_text(motion));
    }
    let related = [
        ("split from", area.split_from),
        ("merged into", area.merged_into),
    ];
    for (words, other) in related {
        if let Some(other) = other {
            row(words, &area_id(other));
        }
    }
}

/// Areas that stand or fall with one station.
fn doubts_text(out: &mut String, setup: &Setup, outcome: &EventsOutcome) {
    let mut counts: Vec<(usize, usize)> = Vec::new();
    for &station in outcome.doubts.iter().flatten() {
        match counts.iter_mut().find(|c| c.0 == station) {
            Some(count) => count.1 += 1,
            None => counts.push((station, 1)),
        }
    }
    counts.sort_unstable();
    for (station, n) in counts {
        let id = setup
            .network
            .stations()
            .get(station)
            .map_or("", |s| s.id.as_str());
        let text = format!(
            "Left out: {} around {} alone, whose mean wind looks off (see `gyremesh calibrate`).",
            counted(n, "area"),
            short_id(id, 24)
        );
        let _ = writeln!(out, "\n{}", wrapped(&text, WIDTH));
    }
}
