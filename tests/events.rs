//! Events of the demo's weather, and of turbulence alone.
//!
//! The demo is made here with other seeds, by the program that made the shipped day.
#![allow(
    clippy::unwrap_used,
    clippy::panic,
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
use std::process::Command;

use gyremesh::event::{AreaKind, Motion};
use gyremesh::pipeline::{EventsOutcome, Setup, find_events};
use gyremesh::report::InputOrder;
use gyremesh::settings::Overrides;
use gyremesh::time::Time;
use rayon::prelude::*;
use serde_json::Value;

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

/// Values of all variants, and the share of them within so many of their errors.
fn within(variants: &[Variant], limit: f64, of: fn(&Variant) -> Vec<f64>) -> (usize, f64) {
    let values: Vec<f64> = variants.iter().flat_map(of).collect();
    let inside = values.iter().filter(|v| v.abs() <= limit).count();
    (values.len(), inside as f64 / values.len() as f64)
}

/// Line, vortex and arrivals in days with other turbulence and other sensor errors, none of which was used to choose the
/// defaults: the shares within 1.96 standard errors.
fn check_variants(seeds: std::ops::Range<u64>, least: f64) {
    let days = usize::try_from(seeds.end - seeds.start).unwrap();
    let variants: Vec<Variant> = seeds.into_par_iter().map(variant).collect();
    let measure = |name: &str, limit: f64, of: fn(&Variant) -> Vec<f64>| {
        let (values, share) = within(&variants, limit, of);
        println!("{name}: {values} values, {share:.3} within {limit}");
        assert!(share >= least, "{name}: {share}");
        values
    };
    let first = measure("first forecast", 1.96, |v| v.first.clone());
    let last = measure("final arrival", 1.96, |v| v.last.clone());
    // Three places; one of them may have been passed before the line is known.
    assert!(first >= 3 * days - days / 2 && last >= 3 * days - days / 20);
    for (name, of) in [
        (
            "speed of the line",
            (|v| part(v.line, 0)) as fn(&Variant) -> Vec<f64>,
        ),
        ("heading of the line", |v| part(v.line, 1)),
        ("speed of the vortex", |v| part(v.vortex, 0)),
        ("heading of the vortex", |v| part(v.vortex, 1)),
    ] {
        assert_eq!(measure(name, 2.0, of), days, "{name}");
    }
    let lead: Vec<f64> = variants.iter().flat_map(|v| v.lead.clone()).collect();
    println!(
        "told {:.0} min ahead on average",
        lead.iter().sum::<f64>() / lead.len() as f64
    );
}

fn part(motion: Option<[f64; 2]>, k: usize) -> Vec<f64> {
    motion.iter().map(|m| m[k]).collect()
}

/// A few variants, so that all of the ways is gone in every run of the tests.
#[test]
fn the_line_and_the_vortex_are_found_and_arrive_in_time() {
    check_variants(500..504, 0.7);
}

#[test]
#[ignore = "100 days; run by .ci/run"]
fn arrivals_of_a_hundred_days_come_within_their_errors() {
    check_variants(1000..1100, 0.85);
}

/// Events of days of turbulence alone.
fn of_turbulence(seeds: std::ops::Range<u64>) -> [usize; 3] {
    let counts: Vec<[usize; 3]> = seeds
        .into_par_iter()
        .map(|seed| {
            let (_, found) = events(seed, false, false, "");
            [found.areas.len(), found.lines.len(), found.passages.len()]
        })
        .collect();
    println!("{counts:?}");
    let sum = |k: usize| counts.iter().map(|c| c[k]).sum();
    [sum(0), sum(1), sum(2)]
}

#[test]
fn turbulence_alone_is_no_event() {
    assert_eq!(of_turbulence(500..502), [0, 0, 0]);
}

/// The stated rate: fewer than one area in ten days, no line. When it was chosen there was none in 50 days.
#[test]
#[ignore = "50 days; run by .ci/run"]
fn turbulence_alone_makes_an_event_less_than_every_ten_days() {
    let [areas, lines, shifts] = of_turbulence(2000..2050);
    println!("50 days: {areas} areas, {lines} lines, {shifts} wind shifts");
    assert!(areas < 5 && lines == 0, "{areas} {lines}");
}

fn gyremesh(arguments: &[&str]) -> (String, String, i32) {
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .args(arguments)
        .output()
        .unwrap();
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).unwrap();
    (
        text(output.stdout),
        text(output.stderr),
        output.status.code().unwrap(),
    )
}

/// The shipped day, with its faults: what `examples/ostrin/truth.json` says is planted is found within two standard errors.
#[test]
fn the_shipped_demo_tells_what_was_planted() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let network = root.join("networks/ostrin/network.toml");
    let network = network.to_str().unwrap();
    let truth = fs::read_to_string(root.join("examples/ostrin/truth.json")).unwrap();
    let truth: Value = serde_json::from_str(&truth).unwrap();
    let (json, _, status) = gyremesh(&["events", network, "--json"]);
    assert_eq!(status, 0);
    let found: Value = serde_json::from_str(&json).unwrap();
    let of = |list: &str, kind: &str| {
        let all = found[list].as_array().unwrap();
        all.iter().find(|e| e["kind"] == kind).unwrap().clone()
    };
    let (line, vortex) = (
        of("lines", "convergence line"),
        of("areas", "cyclonic spin-up"),
    );
    for (event, planted) in [(&line, &truth["line"]), (&vortex, &truth["vortex"])] {
        let number = |value: &Value, key: &str| value[key].as_f64().unwrap();
        let motion = &event["motion"];
        let speed = number(motion, "speed_m_s") - number(planted, "speed_m_s");
        assert!(
            speed.abs() <= 2.0 * number(motion, "speed_se_m_s"),
            "{event}"
        );
        let heading = turn(
            number(planted, "heading_deg"),
            number(motion, "heading_deg"),
        );
        assert!(
            heading.abs() <= 2.0 * number(motion, "heading_se_deg"),
            "{event}"
        );
        let time = |value: &Value, key: &str| value[key].as_str().unwrap().to_string();
        assert!(time(event, "start") >= time(planted, "start"), "{event}");
        assert!(time(event, "start") < time(planted, "end"), "{event}");
    }
    let setup = Setup::read(Path::new(network), &Overrides::default()).unwrap();
    let arrivals = line["arrivals"].as_array().unwrap();
    assert_eq!(arrivals.len(), 3);
    for (arrival, truth) in arrivals.iter().zip(truths(&setup)) {
        for (time, error) in [("forecast", "forecast_se_s"), ("final", "final_se_s")] {
            let told = Time::parse_rfc3339(arrival[time].as_str().unwrap()).unwrap();
            let off = (told.micros() - truth) as f64 * 1e-6;
            let error = arrival[error].as_f64().unwrap();
            assert!(off.abs() <= 1.96 * error, "{arrival} {off}");
        }
        // Told before it arrived.
        let made_at = Time::parse_rfc3339(arrival["made_at"].as_str().unwrap()).unwrap();
        assert!(made_at.micros() < truth);
    }
}

/// The bulletin fits 80 columns and carries the caution; the files are what they say, whatever the number of threads.
#[test]
fn bulletin_and_files() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let network = root.join("networks/ostrin/network.toml");
    let network = network.to_str().unwrap();
    let folder = tempfile::tempdir().unwrap();
    let run = |threads: &str| {
        let out = folder.path().join(threads);
        let (text, _, status) = gyremesh(&[
            "events",
            network,
            "--out",
            out.to_str().unwrap(),
            "--threads",
            threads,
        ]);
        assert_eq!(status, 0);
        let files = ["events.csv", "arrivals.csv", "shifts.csv", "events.geojson"];
        (
            text,
            files.map(|f| fs::read_to_string(out.join(f)).unwrap()),
        )
    };
    let (text, files) = run("1");
    assert!((text.clone(), files.clone()) == run("2"));
    assert!(
        text.lines().all(|line| line.chars().count() <= 80),
        "{text}"
    );
    // The README shows it, cut.
    let readme = fs::read_to_string(root.join("README.md")).unwrap();
    let shown = readme.split("## Events").nth(1).unwrap();
    let shown = shown.split("```").nth(1).unwrap();
    for line in shown.lines().skip(1).filter(|line| *line != "...") {
        assert!(text.lines().any(|told| told == line), "{line}");
    }
    let words: Vec<&str> = text.split_whitespace().collect();
    assert!(words.join(" ").ends_with(gyremesh::output::CAUTION));
    let [events, arrivals, shifts, shapes] = files;
    let rows = |text: &str| {
        let mut reader = csv::Reader::from_reader(text.as_bytes());
        reader.records().map(Result::unwrap).count()
    };
    assert!(rows(&events) >= 4 && rows(&arrivals) >= 3 && rows(&shifts) >= 30);
    let shapes: geojson::FeatureCollection = shapes.parse().unwrap();
    let mut kinds = [0; 3];
    for feature in &shapes.features {
        let shape = feature.property("shape").unwrap().as_str().unwrap();
        let value = &feature.geometry.as_ref().unwrap().value;
        match (shape, value) {
            ("line", geojson::GeometryValue::LineString { coordinates }) => {
                kinds[0] += 1;
                assert_eq!(coordinates.len(), 2);
            }
            ("path", geojson::GeometryValue::LineString { coordinates }) => {
                kinds[1] += 1;
                // Longitude first, within the network.
                assert!(coordinates.iter().all(|c| (-31.0..-29.0).contains(&c[0])));
            }
            ("largest area", geojson::GeometryValue::MultiPolygon { coordinates }) => {
                kinds[2] += 1;
                assert!(!coordinates.is_empty());
            }
            other => panic!("{other:?}"),
        }
    }
    assert!(kinds.iter().all(|&n| n > 0), "{kinds:?}");
}

/// Wrong settings are told with their line, as everywhere.
#[test]
fn wrong_settings_are_told() {
    let folder = tempfile::tempdir().unwrap();
    let path = day(
        folder.path(),
        1,
        false,
        false,
        "\n[[places]]\nname = \"Hollin Ridge wind farm\"\nlatitude = 1\nlongitude = 2\n\
         [[places]]\nname = \"X\"\nlatitude = 100\nlongitude = 2\nheight = 3\n\
         [events]\njump = \"-3 m/s\"\nshift = 3\nleast_station = 7\nleast_stations = 2\nwindow = \"1 s\"\n",
    );
    let (_, said, status) = gyremesh(&["events", path.to_str().unwrap()]);
    assert_eq!(status, 2);
    for expected in [
        "`places.name`: there are two places `Hollin Ridge wind farm`",
        "latitude 100 is out of range (-90 to 90 expected)",
        "`places.height`: there is no such key",
        "`events.jump`: `-3 m/s` is negative",
        "`events.shift`: invalid type",
        "`events.least_station`: there is no such key; is `least_stations` meant?",
        "`events.least_stations`: 2 is out of range (5 to 1000 expected)",
        "`events.window`: `1 s` is out of range (60 s to 1 d expected)",
    ] {
        assert!(said.contains(expected), "{expected}\n{said}");
    }
}
