//! The demo's weather without its faults: a convergence line and a vortex must come through the checks.
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
use std::process::Command;

use serde_json::Value;

/// A day of the demo in a folder of its own; the path of its settings.
fn day(folder: &Path, seed: u64, faults: bool) -> PathBuf {
    let plane = network::LocalPlane::about_centre();
    let field = field::WindField::new(seed, true);
    let reports = reports::Reports::of_day(&field, &plane, seed, faults);
    fs::write(folder.join("stations.csv"), network::station_list()).unwrap();
    fs::write(folder.join("reports.csv"), &reports.text).unwrap();
    let shipped = Path::new(env!("CARGO_MANIFEST_DIR")).join("networks/ostrin/network.toml");
    let settings = fs::read_to_string(shipped).unwrap();
    let settings = settings.replace("../../examples/ostrin/reports.csv", "reports.csv");
    let path = folder.join("network.toml");
    fs::write(&path, settings).unwrap();
    path
}

fn gyremesh(arguments: &[&str]) -> String {
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .args(arguments)
        .output()
        .unwrap();
    assert!(output.status.success(), "{output:?}");
    String::from_utf8(output.stdout).unwrap()
}

/// Without faults nothing is missing and at most one report of a thousand fails; so no polygon on the line, nor anywhere
/// else, loses more than that, and the strongest convergence of the day is that of the line.
#[test]
fn the_line_and_the_vortex_are_kept() {
    let (mut reports, mut failed, mut suspect) = (0, 0, 0);
    for seed in [20_310_614, 1, 2, 3] {
        let folder = tempfile::tempdir().unwrap();
        let settings = day(folder.path(), seed, false);
        let out = folder.path().join("out");
        let (settings, out) = (settings.to_str().unwrap(), out.to_str().unwrap());
        let checked: Value =
            serde_json::from_str(&gyremesh(&["check", settings, "--json"])).unwrap();
        for station in checked["stations"].as_array().unwrap() {
            reports += station["reports"].as_u64().unwrap();
            failed += station["failed"].as_u64().unwrap();
            suspect += station["suspect"].as_u64().unwrap();
        }
        gyremesh(&["estimate", settings, "--out", out, "--quiet"]);
        let mut reader = csv::Reader::from_path(Path::new(out).join("polygons.csv")).unwrap();
        let headers = reader.headers().unwrap().clone();
        let column = |name: &str| headers.iter().position(|h| h == name).unwrap();
        let (time, flag) = (column("time"), column("flag"));
        let (divergence, error) = (column("divergence"), column("divergence_se"));
        let (mut lost, mut rows) = (0, 0);
        let mut strongest = (0.0, String::new());
        for row in reader.records().map(Result::unwrap) {
            rows += 1;
            lost += usize::from(&row[flag] == "4" || &row[flag] == "9");
            if let (Ok(value), Ok(error)) =
                (row[divergence].parse::<f64>(), row[error].parse::<f64>())
                && value / error < strongest.0
            {
                strongest = (value / error, row[time].to_string());
            }
        }
        assert!(lost * 1000 <= rows, "seed {seed}: {lost} of {rows}");
        // The line is there from 11 to 19 h (`scenario`).
        let hour = &strongest.1[11..13];
        assert!(("11".."19").contains(&hour), "seed {seed}: {strongest:?}");
    }
    println!("{failed} failed, {suspect} suspect of {reports}");
    assert!(failed * 1000 <= reports, "{failed} of {reports}");
    assert!(suspect * 200 <= reports, "{suspect} of {reports}");
}

/// With the faults: the stuck sensor fails, the neighbours doubt the knots, the means around a station give away the knots and
/// the turned vane, and nothing else is told.
#[test]
fn the_planted_faults_are_found_and_nothing_else() {
    for seed in [20_310_614, 1, 2] {
        let folder = tempfile::tempdir().unwrap();
        let settings = day(folder.path(), seed, true);
        let out = folder.path().join("out");
        let (settings, out) = (settings.to_str().unwrap(), out.to_str().unwrap());
        gyremesh(&["estimate", settings, "--out", out, "--quiet"]);
        let mut reader = csv::Reader::from_path(Path::new(out).join("stations.csv")).unwrap();
        let headers = reader.headers().unwrap().clone();
        let column = |name: &str| headers.iter().position(|h| h == name).unwrap();
        let (mut failed, mut doubted, mut explained) = (Vec::new(), Vec::new(), Vec::new());
        for row in reader.records().map(Result::unwrap) {
            let id = row[0].to_string();
            let count = |name: &str| row[column(name)].parse::<u64>().unwrap();
            if count("failed") > 2 {
                failed.push(id.clone());
            }
            if count("neighbour_suspect") > 14 {
                doubted.push(id.clone());
            }
            if !row[column("mean_offset_u_m_s")].is_empty() {
                explained.push(id);
            }
        }
        println!("{seed}: failed {failed:?}, doubted {doubted:?}, explained {explained:?}");
        assert_eq!(failed, ["OS36"], "seed {seed}");
        assert!(
            doubted.iter().all(|id| id == "OS18" || id == "OS13"),
            "{doubted:?}"
        );
        assert_eq!(explained, ["OS13", "OS18"], "seed {seed}");
    }
}
