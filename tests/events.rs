//! Events of the demo's weather, and of turbulence alone.
//!
//! The demo is made here with other seeds, by the program that made the shipped day.
#![allow(
    clippy::unwrap_used,
    clippy::print_stdout,
    clippy::cast_possible_truncation,
    dead_code,
    reason = "tests may panic and print; not all of the demo's source is used here"
)]

#[path = "../examples/make_demo/field.rs"]
mod field;
#[path = "../examples/make_demo/network.rs"]
mod network;
#[path = "../examples/make_demo/reports.rs"]
mod reports;
#[path = "../examples/make_demo/scenario.rs"]
mod scenario;

use std::fs;
use std::path::{Path, PathBuf};

use gyremesh::event::{AreaKind, Motion};
use gyremesh::pipeline::{EventsOutcome, Setup, find_events};
use gyremesh::report::InputOrder;
use gyremesh::settings::Overrides;
use gyremesh::time::Time;
use rayon::prelude::*;

/// A day of the demo in a folder of its own; the path of its settings.
fn day(folder: &Path, seed: u64, weather: bool, faults: bool, more: &str) -> PathBuf {
    let plane = network::LocalPlane::about_centre();
    let field = field::WindField::new(seed, weather);
    let reports = reports::Reports::of_day(&field, &plane, seed, faults);
    fs::write(folder.join("stations.csv"), network::station_list()).unwrap();
    fs::write(folder.join("reports.csv"), &reports.text).unwrap();
    let shipped = Path::new(env!("CARGO_MANIFEST_DIR")).join("networks/ostrin/network.toml");
    let settings = fs::read_to_string(shipped).unwrap();
    let settings = settings.replace("../../examples/ostrin/reports.csv", "reports.csv");
    let path = folder.join("network.toml");
    fs::write(&path, settings + more).unwrap();
    path
}

fn events(seed: u64, weather: bool, faults: bool, more: &str) -> (Setup, EventsOutcome) {
    let folder = tempfile::tempdir().unwrap();
    let settings = day(folder.path(), seed, weather, faults, more);
    let setup = Setup::read(&settings, &Overrides::default()).unwrap();
    let found = find_events(&setup, InputOrder::ByTime, |_| {}).unwrap();
    (setup, found)
}

fn seeds(name: &str, default: std::ops::Range<u64>) -> Vec<u64> {
    match std::env::var(name) {
        Ok(text) => {
            let (a, b) = text.split_once("..").unwrap();
            (a.parse().unwrap()..b.parse().unwrap()).collect()
        }
        Err(_) => default.collect(),
    }
}

#[test]
#[ignore = "exploration"]
fn look() {
    let faults = std::env::var("FAULTS").is_ok();
    let weather = std::env::var("CALM").is_err();
    let more = std::env::var("MORE").unwrap_or_default();
    for seed in seeds("SEEDS", 20_310_614..20_310_615) {
        let (_, found) = events(seed, weather, faults, &more);
        println!(
            "seed {seed}: {} areas {} lines {} passages",
            found.areas.len(),
            found.lines.len(),
            found.passages.len()
        );
        for a in &found.areas {
            let at = a
                .path
                .points()
                .first()
                .unwrap()
                .1
                .map(|x| (x / 1e3).round());
            println!(
                "  {:<22} {}-{} strength {:.2} peak {:.1}±{:.1} area {:.0} {at:?} {:?} {:?} split {:?} merged {:?}",
                a.kind.name(),
                &a.start.to_string()[11..16],
                &a.end.to_string()[11..16],
                a.strength,
                a.peak.value * 1e5,
                a.peak.error * 1e5,
                a.area / 1e6,
                a.motion.map(|m| format!(
                    "{:.1}±{:.1} m/s {:.0}±{:.0}",
                    m.speed, m.speed_error, m.heading, m.heading_error
                )),
                a.peak.polygon,
                a.split_from,
                a.merged_into
            );
        }
        for l in &found.lines {
            let m = l.motion;
            println!(
                "  {} {}-{} known {} {} stations {:.2}±{:.2} m/s {:.1}±{:.1} change {:.1?} closing {:.1}",
                l.name(),
                &l.start.to_string()[11..16],
                &l.end.to_string()[11..16],
                &l.known_at.to_string()[11..16],
                l.stations.len(),
                m.speed,
                m.speed_error,
                m.heading,
                m.heading_error,
                l.change,
                l.closing
            );
            for a in &l.arrivals {
                println!("    {a:?}");
            }
        }
        if std::env::var("PASSAGES").is_ok() {
            for (p, line) in &found.passages {
                let plane = network::LocalPlane::about_centre();
                let at = plane.point(&network::STATIONS[p.station]);
                let (e, n) = field::toward(scenario::LINE_HEADING);
                let along = at.x * e + at.y * n - 1e3 * scenario::SHORE_KM;
                let truth = 11.0 * 3600.0 + along / scenario::LINE_SPEED;
                let off = (p.time.micros() / 1_000_000).rem_euclid(86_400) as f64 - truth;
                println!(
                    "RES {:.2} {:.0} {:.0} {:.0} {}",
                    truth / 3600.0,
                    off,
                    p.error,
                    p.width,
                    line.is_some()
                );
            }
        }
    }
}

/// Times at which the planted line reaches the places of the settings, μs.
fn truths(setup: &Setup) -> Vec<i64> {
    let plane = network::LocalPlane::about_centre();
    let (e, n) = field::toward(scenario::LINE_HEADING);
    let begin = Time::parse_rfc3339(&scenario::rfc3339(scenario::LINE_START)).unwrap();
    let places = setup.settings.places.iter().map(|place| {
        let x =
            (place.position.longitude() - network::CENTRE_LONGITUDE) * plane.metres_per_degree_east;
        let y =
            (place.position.latitude() - network::CENTRE_LATITUDE) * plane.metres_per_degree_north;
        let way = x * e + y * n - 1e3 * scenario::SHORE_KM;
        begin.micros() + (way / scenario::LINE_SPEED * 1e6) as i64
    });
    places.collect()
}

/// How far a direction is from another, degrees.
fn turn(from: f64, to: f64) -> f64 {
    (to - from + 180.0).rem_euclid(360.0) - 180.0
}

/// What is found in a variant of the demo without faults, in units of its own errors.
struct Variant {
    /// Speed and heading of the line, of the vortex.
    line: Option<[f64; 2]>,
    vortex: Option<[f64; 2]>,
    /// First forecasts and final times of the places.
    first: Vec<f64>,
    last: Vec<f64>,
    others: usize,
    lead: Vec<f64>,
}

fn variant(seed: u64) -> Variant {
    let (setup, found) = events(seed, true, false, "");
    let truths = truths(&setup);
    let off = |motion: &Motion, speed: f64, heading: f64| {
        [
            (motion.speed - speed) / motion.speed_error,
            turn(heading, motion.heading) / motion.heading_error,
        ]
    };
    let convergent = || found.lines.iter().filter(|line| line.is_convergent());
    let line = convergent().max_by_key(|line| line.stations.len());
    let areas = found.areas.iter().filter(|a| a.kind == AreaKind::Cyclonic);
    let vortex = areas.max_by(|a, b| a.strength.total_cmp(&b.strength));
    let (mut first, mut last, mut lead) = (Vec::new(), Vec::new(), Vec::new());
    for arrival in line.iter().flat_map(|line| &line.arrivals) {
        let truth = truths[arrival.place];
        let miss = |(time, error): (Time, f64)| (time.micros() - truth) as f64 * 1e-6 / error;
        first.extend(arrival.first.map(|f| miss((f.time, f.error))));
        lead.extend(
            arrival
                .first
                .map(|f| (truth - f.made_at.micros()) as f64 / 6e7),
        );
        last.extend(arrival.last.map(miss));
    }
    Variant {
        line: line.map(|l| off(&l.motion, scenario::LINE_SPEED, scenario::LINE_HEADING)),
        vortex: vortex.and_then(|v| {
            Some(off(
                v.motion.as_ref()?,
                scenario::VORTEX_SPEED,
                scenario::VORTEX_HEADING,
            ))
        }),
        first,
        last,
        others: found.lines.len() - usize::from(line.is_some()),
        lead,
    }
}

fn share_within(values: &[f64], limit: f64) -> f64 {
    values.iter().filter(|v| v.abs() <= limit).count() as f64 / values.len() as f64
}

#[test]
#[ignore = "100 days; run by .ci/run"]
fn arrivals_come_within_their_errors() {
    let variants: Vec<Variant> = seeds("SEEDS", 1000..1100)
        .into_par_iter()
        .map(variant)
        .collect();
    let all = |of: &dyn Fn(&Variant) -> Vec<f64>| variants.iter().flat_map(of).collect::<Vec<_>>();
    let rms = |v: &[f64]| (v.iter().map(|x| x * x).sum::<f64>() / v.len() as f64).sqrt();
    let mean = |v: &[f64]| v.iter().sum::<f64>() / v.len() as f64;
    for (name, values) in [
        ("first", all(&|v| v.first.clone())),
        ("last", all(&|v| v.last.clone())),
        (
            "line speed",
            all(&|v| v.line.iter().map(|m| m[0]).collect()),
        ),
        (
            "line heading",
            all(&|v| v.line.iter().map(|m| m[1]).collect()),
        ),
        (
            "vortex speed",
            all(&|v| v.vortex.iter().map(|m| m[0]).collect()),
        ),
        (
            "vortex heading",
            all(&|v| v.vortex.iter().map(|m| m[1]).collect()),
        ),
    ] {
        println!(
            "{name}: {} values, {:.2} within 1.96, {:.2} within 2, mean {:.2} rms {:.2}",
            values.len(),
            share_within(&values, 1.96),
            share_within(&values, 2.0),
            mean(&values),
            rms(&values)
        );
    }
    println!(
        "other lines {}",
        variants.iter().map(|v| v.others).sum::<usize>()
    );
    println!("lead {:.0}", mean(&all(&|v| v.lead.clone())));
    let first = all(&|v| v.first.clone());
    assert!(share_within(&first, 1.96) >= 0.9);
}
