//! What the program says to people.

use std::fmt::Write as _;
use std::path::PathBuf;

use crate::helmholtz::Part;
use crate::integral::{Cause, Peak};
use crate::output::{CAUTION, error_bars, significant_share};
use crate::pipeline::{Outcome, Setup};
use crate::polygon::{Exclusion, StationPolygon};
use crate::units::Wind;

/// Width of everything printed.
pub(super) const WIDTH: usize = 80;
/// Stations named as those that reported least.
const LEAST: usize = 3;

/// Says something on stderr.
#[expect(
    clippy::print_stderr,
    reason = "this is the one place that speaks to stderr"
)]
pub(super) fn say(kind: &str, text: &str) {
    eprintln!("{kind}: {text}");
}

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

/// The table of `polygons`.
pub(super) fn polygon_table(setup: &Setup) -> String {
    let mut out = String::new();
    let built = &setup.built;
    // Writing to a string cannot fail.
    let _ = writeln!(
        out,
        "{}: {} stations, {} polygons within the limits, {} left out",
        setup.settings.name,
        setup.network.len(),
        built.polygons.len(),
        built.excluded.len()
    );
    let _ = writeln!(
        out,
        "noise: error of vorticity or divergence, 1e-5 /s, for 1 m/s in each component\n"
    );
    let _ = writeln!(
        out,
        "{:<24} {:>9} {:>8} {:>6} {:>7} {:>6}  left out",
        "polygon", "area km2", "edge km", "angle", "quality", "noise"
    );
    let used = built.polygons.iter().map(|p| (p, None));
    let excluded = built.excluded.iter().map(|(p, why)| (p, Some(why)));
    for (polygon, why) in used.chain(excluded) {
        out.push_str(&polygon_line(polygon, why));
    }
    if built.flat > 0 {
        let _ = writeln!(
            out,
            "\n{} triangles of stations on one line dropped",
            built.flat
        );
    }
    out
}

fn polygon_line(polygon: &StationPolygon, why: Option<&Exclusion>) -> String {
    let shape = &polygon.shape;
    let line = format!(
        "{:<24} {:>9.1} {:>8.1} {:>6.1} {:>7.2} {:>6.1}  {}",
        cut(&polygon.id, 24),
        shape.area / 1e6,
        shape.longest_edge / 1e3,
        shape.smallest_angle,
        shape.quality,
        shape.noise_factor * 1e5,
        why.map_or_else(String::new, short_reason)
    );
    cut(line.trim_end(), WIDTH) + "\n"
}

fn short_reason(why: &Exclusion) -> String {
    match why {
        Exclusion::SmallAngle(..) => "angle",
        Exclusion::LongEdge(..) => "edge",
        Exclusion::SmallArea(..) => "too small",
        Exclusion::LargeArea(..) => "too large",
        Exclusion::ElevationSpread(..) => "heights",
        Exclusion::Slope(..) => "slope",
    }
    .into()
}

/// The summary of `estimate`.
pub(super) fn run_summary(setup: &Setup, outcome: &Outcome, files: &[PathBuf]) -> String {
    let mut out = String::new();
    let period = &outcome.period;
    let built = &setup.built;
    let _ = writeln!(out, "{}", setup.settings.name);
    if let Some((first, last)) = period.ends {
        let interval = setup.settings.analysis.interval.as_secs_f64() / 60.0;
        let _ = writeln!(
            out,
            "Period      {first} to {last}, {} times, every {interval} min",
            period.times
        );
    }
    corrections_text(&mut out, setup);
    let reporting = outcome.values.iter().filter(|&&n| n > 0).count();
    let _ = writeln!(
        out,
        "Stations    {reporting} of {} reported",
        setup.network.len()
    );
    let _ = writeln!(
        out,
        "Reports     {} rows read, {} used ({:.1} %)",
        outcome.reading.rows.received,
        outcome.aligned.passed,
        100.0 * outcome.share_used()
    );
    for tally in [
        &outcome.reading.rows,
        &outcome.reading.repeats,
        &outcome.aligned,
    ] {
        for (reason, n) in &tally.set_aside {
            let _ = writeln!(out, "            {n:>8} {}", reason.words());
        }
    }
    let common = outcome.extremes.values.iter().take(built.polygons.len());
    let values: u64 = common.sum();
    let possible = (period.times * built.polygons.len() as u64).max(1) as f64;
    let _ = writeln!(
        out,
        "Polygons    {} used, {} left out; {:.1} % of their values are there",
        built.polygons.len(),
        built.excluded.len(),
        100.0 * values as f64 / possible
    );
    if !outcome.extra.is_empty() {
        let n = outcome.extra.len();
        let _ = writeln!(
            out,
            "            {n} more triangles where stations were missing"
        );
    }
    reasons_text(&mut out, outcome);
    let _ = writeln!(
        out,
        "Self-test   {:.0e} of 2 Omega on {} polygons",
        setup.self_test.largest_difference, setup.self_test.polygons
    );
    significance(&mut out, setup, outcome);
    energy_text(&mut out, outcome);
    let _ = writeln!(out, "\nStrongest, in 1e-5 /s:");
    let extremes = &outcome.extremes;
    for (what, peak) in [
        ("convergence", extremes.convergence),
        ("cyclonic spin-up", extremes.cyclonic),
        ("anticyclonic", extremes.anticyclonic),
    ] {
        let _ = writeln!(out, "  {what:<17} {}", peak_text(setup, outcome, peak));
    }
    attributions_text(&mut out, setup, outcome);
    least_reporting(&mut out, setup, outcome);
    let _ = writeln!(
        out,
        "\n{}",
        wrapped(
            &format!("Errors: {}.", error_bars(&setup.settings.errors)),
            WIDTH
        )
    );
    let _ = writeln!(out, "{}", wrapped(CAUTION, WIDTH));
    let names: Vec<String> = files
        .iter()
        .filter_map(|f| f.file_name().map(|n| n.to_string_lossy().into_owned()))
        .collect();
    if let Some(folder) = files.first().and_then(|f| f.parent()) {
        let _ = writeln!(
            out,
            "\nWritten to {}: {}",
            folder.display(),
            names.join(", ")
        );
    }
    out
}

/// Kinetic energy by parts of the wind.
fn energy_text(out: &mut String, outcome: &Outcome) {
    let books = &outcome.energy;
    let shares = Part::ALL.map(|part| Some((part.name(), 100.0 * books.share(part)?)));
    let [Some(first), Some(second), Some(third)] = shares else {
        return;
    };
    let words = [first, second, third].map(|(name, share)| format!("{share:.1} % {name}"));
    let _ = writeln!(
        out,
        "Energy      {} ({} times)",
        words.join(", "),
        books.times
    );
}

/// Stations behind odd means.
fn attributions_text(out: &mut String, setup: &Setup, outcome: &Outcome) {
    if outcome.attributions.is_empty() {
        return;
    }
    let _ = writeln!(
        out,
        "\nOdd means, as if the wind of one station were off (see `gyremesh calibrate`):"
    );
    for found in &outcome.attributions {
        // Stations of the network.
        let id = &setup.network.stations()[found.station].id;
        let _ = writeln!(
            out,
            "  {:<16} {:.1} +- {:.1} m/s towards {:03.0} degrees; {:.0} % of {} polygons' means",
            cut(id, 16),
            found.offset.speed(),
            found.error,
            towards(found.offset),
            100.0 * found.explained,
            found.polygons
        );
    }
}

/// Where a vector points, degrees clockwise from north.
pub(super) fn towards(vector: Wind) -> f64 {
    let from = vector.from_direction();
    from.map_or(0.0, |from| (from.degrees() + 180.0).rem_euclid(360.0))
}

/// Why values are not there or suspect.
fn reasons_text(out: &mut String, outcome: &Outcome) {
    let counts = Cause::NAMES.iter().zip(outcome.causes.all());
    let raised = counts.filter(|(_, n)| *n > 0);
    let raised: Vec<String> = raised
        .map(|(name, n)| format!("{n} {}", name.replace('_', " ")))
        .collect();
    if !raised.is_empty() {
        let text = format!("values: {}", raised.join(", "));
        for line in wrapped(&text, WIDTH - 12).lines() {
            let _ = writeln!(out, "            {line}");
        }
    }
}

/// How many values differ from zero, and how the winds differ from place to place.
fn significance(out: &mut String, setup: &Setup, outcome: &Outcome) {
    let statistics = &outcome.statistics;
    let shares =
        significant_share(&statistics.vorticity).zip(significant_share(&statistics.divergence));
    if let Some((vorticity, divergence)) = shares {
        let _ = writeln!(
            out,
            "Not zero    {:.1} % of vorticities, {:.1} % of divergences ({} % false)",
            100.0 * vorticity,
            100.0 * divergence,
            100.0 * setup.settings.errors.false_discovery_rate
        );
    }
    if let Some(report) = outcome.structure.last() {
        let f = &report.function;
        let [along, across] = f.at(f.reference);
        let _ = writeln!(
            out,
            "Winds       {:.0} km apart differ by {:.1} m/s (each component, last hours;\n            \
             exponent {:.2}, sites {:.1} m/s, prior {:.0} %)",
            f.reference / 1e3,
            (0.5 * (along + across)).sqrt(),
            f.exponent.value(),
            f.site_variance.sqrt(),
            100.0 * f.prior_share
        );
    }
}

fn peak_text(setup: &Setup, outcome: &Outcome, peak: Option<Peak>) -> String {
    let Some(peak) = peak else {
        return "none".into();
    };
    let Some(polygon) = outcome.polygon(setup, peak.polygon) else {
        return "none".into();
    };
    let (latitude, longitude) = polygon.middle;
    format!(
        "{:+.1} ± {:.1}  {}  {} ({:.2} {}, {:.2} {})",
        peak.value * 1e5,
        peak.error * 1e5,
        peak.time,
        cut(&polygon.id, 24),
        latitude.abs(),
        if latitude < 0.0 { "S" } else { "N" },
        longitude.abs(),
        if longitude < 0.0 { "W" } else { "E" },
    )
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

/// Names the stations with the fewest values, if any is incomplete.
fn least_reporting(out: &mut String, setup: &Setup, outcome: &Outcome) {
    let times = outcome.period.times;
    let mut order: Vec<usize> = (0..setup.network.len())
        .filter(|&s| outcome.values[s] < times)
        .collect();
    order.sort_by_key(|&s| outcome.values[s]);
    if order.is_empty() {
        let _ = writeln!(out, "\nEvery station has a value at every time");
        return;
    }
    let _ = writeln!(out, "\nReported least:");
    for &s in order.iter().take(LEAST) {
        let station = &setup.network.stations()[s];
        let values = outcome.values[s];
        let share = 100.0 * values as f64 / times.max(1) as f64;
        let _ = writeln!(
            out,
            "  {:<24} {values} of {times} times ({share:.1} %)",
            cut(&station.id, 24)
        );
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
