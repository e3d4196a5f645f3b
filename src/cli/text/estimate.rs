//! The text of `gyremesh estimate`, in 80 columns.

use std::fmt::Write as _;
use std::path::PathBuf;

use super::{WIDTH, cell, corrections_text, cut, heading, row, short_id, wrapped};
use crate::helmholtz::Part;
use crate::integral::{Cause, Peak};
use crate::output::{CAUTION, assumption_of_height, error_bars, significant_share};
use crate::pipeline::{Outcome, Setup};
use crate::units::Wind;

/// Stations named as those that reported least.
const LEAST: usize = 3;

/// The summary of `estimate`.
pub(crate) fn run_summary(setup: &Setup, outcome: &Outcome, files: &[PathBuf]) -> String {
    let mut out = String::new();
    let period = &outcome.period;
    let built = &setup.built;
    let _ = writeln!(out, "{}", heading(&cut(&setup.settings.name, WIDTH)));
    if let Some((first, last)) = period.ends {
        let interval = setup.settings.analysis.interval.as_secs_f64() / 60.0;
        let times = period.times;
        let text = format!("{first} to {last}, {times} times, every {interval} min");
        row(&mut out, "Period", &text);
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
    let _ = writeln!(out, "\n{}", heading("Strongest, in 1e-5 /s:"));
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
    if let Some(height) = setup.settings.w_at {
        let _ = writeln!(out, "{}", wrapped(&assumption_of_height(height), WIDTH));
    }
    let _ = writeln!(out, "{}", wrapped(CAUTION, WIDTH));
    let names: Vec<String> = files
        .iter()
        .filter_map(|f| f.file_name().map(|n| n.to_string_lossy().into_owned()))
        .collect();
    if let Some(folder) = files.first().and_then(|f| f.parent()) {
        let _ = writeln!(out, "\nWritten to {}:", folder.display());
        for line in wrapped(&names.join(", "), WIDTH - 2).lines() {
            let _ = writeln!(out, "  {line}");
        }
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
    let head = "Odd means, as if the wind of one station were off (see `gyremesh calibrate`):";
    let _ = writeln!(out, "\n{}", heading(head));
    for found in &outcome.attributions {
        // Stations of the network.
        let id = &setup.network.stations()[found.station].id;
        let _ = writeln!(
            out,
            "  {} {:.1} ± {:.1} m/s towards {:03.0} degrees; {:.0} % of {} polygons' means",
            cell(id, 12),
            found.offset.speed(),
            found.error,
            towards(found.offset),
            100.0 * found.explained,
            found.polygons
        );
    }
}

/// Where a vector points, degrees clockwise from north.
fn towards(vector: Wind) -> f64 {
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
        "{:<15} {}  {:.2} {} {:.2} {}\n{:20}{}",
        format!("{:+.1} ± {:.1}", peak.value * 1e5, peak.error * 1e5),
        peak.time,
        latitude.abs(),
        if latitude < 0.0 { "S" } else { "N" },
        longitude.abs(),
        if longitude < 0.0 { "W" } else { "E" },
        "",
        short_id(&polygon.id, WIDTH - 20),
    )
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
    let _ = writeln!(out, "\n{}", heading("Reported least:"));
    for &s in order.iter().take(LEAST) {
        let station = &setup.network.stations()[s];
        let values = outcome.values[s];
        let share = 100.0 * values as f64 / times.max(1) as f64;
        let _ = writeln!(
            out,
            "  {} {values} of {times} times ({share:.1} %)",
            cell(&station.id, 24)
        );
    }
}
