//! Events of the demo's weather, and of turbulence alone.
//!
//! The demo is made here with other seeds, by the program that made the shipped day.
#![allow(
    clippy::unwrap_used,
    clippy::print_stdout,
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

use gyremesh::event::AreaKind;
use gyremesh::pipeline::{EventsOutcome, Setup, find_events};
use gyremesh::report::InputOrder;
use gyremesh::settings::Overrides;

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

#[test]
fn placeholder() {
    assert_eq!(AreaKind::ALL.len(), 4);
}
