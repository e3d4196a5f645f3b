//! Errors as users ask for them and see them: expected errors, parts, fits, settings.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fmt::Write as _;
use std::fs;
use std::path::PathBuf;
use std::process::{Command, Output};

use geographiclib_rs::{DirectGeodesic, Geodesic};
use serde_json::Value;
use tempfile::TempDir;

struct Site(TempDir);

impl Site {
    /// Stations at (distance, azimuth) from a point, m and degrees; hourly winds from the west with an odd one.
    fn new(places: &[(f64, f64)], more: &str) -> Self {
        let folder = tempfile::tempdir().unwrap();
        let mut stations = String::from("id,latitude,longitude\n");
        let mut reports = String::from("time,station,direction,speed\n");
        for (k, &(distance, azimuth)) in places.iter().enumerate() {
            let (latitude, longitude): (f64, f64) =
                Geodesic::wgs84().direct(46.0, -30.0, azimuth, distance);
            let _ = writeln!(stations, "S{k},{latitude},{longitude}");
            for hour in 0..24 {
                let direction = 200 + (37 * hour * (k + 1)) % 90;
                let speed = 4 + (hour * (k + 2)) % 5;
                let time = format!("2031-06-14T{hour:02}:00:00Z");
                let _ = writeln!(reports, "{time},S{k},{direction},{speed}");
            }
        }
        let settings = format!(
            "name = \"errors\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\n\
             [analysis]\ninterval = \"1 h\"\n{more}\n"
        );
        fs::write(folder.path().join("stations.csv"), stations).unwrap();
        fs::write(folder.path().join("reports.csv"), reports).unwrap();
        fs::write(folder.path().join("network.toml"), settings).unwrap();
        Self(folder)
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn run(&self, command: &str, more: &[&str]) -> (bool, String, String) {
        let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg(command)
            .arg(self.path("network.toml"))
            .arg("--out")
            .arg(self.path("out"))
            .args(more)
            .output();
        let Output {
            status,
            stdout,
            stderr,
        } = output.unwrap();
        let text = |bytes: Vec<u8>| String::from_utf8(bytes).unwrap();
        (status.success(), text(stdout), text(stderr))
    }

    fn rows(&self, name: &str) -> Vec<csv::StringRecord> {
        let mut reader = csv::Reader::from_path(self.path("out").join(name)).unwrap();
        reader.records().map(Result::unwrap).collect()
    }
}

/// An equilateral triangle of 30 km has its corners 30/√3 km from the middle.
fn triangle() -> [(f64, f64); 3] {
    let radius = 30e3 / 3.0_f64.sqrt();
    [(radius, 0.0), (radius, 120.0), (radius, 240.0)]
}

/// methods.md 8: sampling sd 1.149 √S(L)/L for p = 2/3 and 0.949 √S(L)/L for p = 1; methods.md 1.4: sensors 2 s/L.
#[test]
fn expected_errors_are_those_of_the_closed_forms() {
    let site = Site::new(&triangle(), "");
    for (exponent, factor) in [("0.6667", 1.149), ("1", 0.949)] {
        let options = [
            "--expect",
            "--sensor-error",
            "0.3m/s",
            "--difference",
            "2m/s",
            "--distance",
            "30km",
            "--exponent",
            exponent,
        ];
        let (done, text, _) = site.run("polygons", &options);
        assert!(done && text.contains("not warnings"), "{text}");
        assert!(
            text.lines().all(|line| line.chars().count() <= 80),
            "{text}"
        );
        let row = &site.rows("expected.csv")[0];
        let number = |k: usize| row[k].parse::<f64>().unwrap();
        // The triangle lies on an ellipsoid: 1e-5 of its sides.
        assert!((number(1) / (2.0 * 0.3 / 30e3) - 1.0).abs() < 1e-4);
        for sampling in [number(2), number(3)] {
            assert!((sampling / (factor * 2.0 / 30e3) - 1.0).abs() < 1e-3);
        }
        let total = number(1).hypot(number(2));
        assert!((number(4) / total - 1.0).abs() < 1e-6);
    }
}

#[test]
fn what_a_run_found_can_be_expected_of_another() {
    let site = Site::new(&triangle(), "");
    assert!(site.run("estimate", &["--quiet"]).0);
    let past = site.path("out/summary.json");
    let summary: Value = serde_json::from_str(&fs::read_to_string(&past).unwrap()).unwrap();
    let function = &summary["structure"]["function"];
    // Three stations say little: most of the exponent is the prior.
    let share = function["exponent_prior_share"].as_f64().unwrap();
    assert!(share > 0.3, "{function}");
    let past = past.to_str().unwrap();
    let (done, text, error) = site.run("polygons", &["--expect", "--past", past]);
    assert!(done, "{error}");
    assert!(
        text.split_whitespace()
            .collect::<Vec<_>>()
            .join(" ")
            .contains("as found in")
    );
    for options in [
        &["--expect", "--past", "network.toml"][..],
        &["--expect", "--exponent", "2.5"],
        &["--exponent", "1"],
    ] {
        assert!(!site.run("polygons", options).0, "{options:?}");
    }
}

#[test]
fn instruments_alone_leave_the_other_parts_empty() {
    let site = Site::new(&triangle(), "[errors]\nparts = \"instrument\"");
    assert!(site.run("estimate", &["--quiet"]).0);
    let rows = site.rows("polygons.csv");
    assert_eq!(rows.len(), 24);
    for row in &rows {
        assert!(!row[13].is_empty() && row[14].is_empty() && row[15].is_empty());
        let (whole, part): (f64, f64) = (row[5].parse().unwrap(), row[13].parse().unwrap());
        assert!((whole / part - 1.0).abs() < 1e-6);
    }
    assert!(!site.path("out/structure.csv").exists());
    let site = Site::new(&triangle(), "");
    assert!(
        site.run("estimate", &["--quiet", "--errors", "instrument"])
            .0
    );
    assert_eq!(site.rows("polygons.csv"), rows);
    let (_, text, _) = site.run("estimate", &["--errors", "instrument"]);
    assert!(text.contains("instrument errors"), "{text}");
}

/// A ring of six with one vane turned by 90 degrees for the whole day.
#[test]
fn a_second_estimate_stands_beside_rings_and_warns() {
    let places: Vec<(f64, f64)> = (0..6).map(|k| (20e3, 60.0 * f64::from(k))).collect();
    let ring = "[[polygons.ring]]\nname = \"six\"\nstations = [\"S0\", \"S1\", \"S2\", \"S3\", \"S4\", \"S5\"]";
    let site = Site::new(&places, ring);
    let mut reports = String::from("time,station,direction,speed\n");
    for minute in (0..1440).step_by(60) {
        for station in 0..6 {
            let direction = if station == 2 { 360 } else { 270 };
            let time = format!("2031-06-14T{:02}:00:00Z", minute / 60);
            let _ = writeln!(reports, "{time},S{station},{direction},{}", 8 + minute % 7);
        }
    }
    fs::write(site.path("reports.csv"), reports).unwrap();
    let (done, _, _) = site.run("estimate", &["--quiet"]);
    assert!(done);
    let fits = site.rows("fits.csv");
    assert_eq!(fits.len(), 24);
    assert!(fits.iter().all(|row| &row[1] == "six" && row.len() == 12));
    let summary = fs::read_to_string(site.path("out/summary.json")).unwrap();
    let summary: Value = serde_json::from_str(&summary).unwrap();
    let fit = &summary["fits"][0];
    assert_eq!(fit["times"], 24);
    // On a regular ring both estimates are the same (methods.md 1.3): nothing to disagree about, whatever the winds.
    assert!(fit["vorticity_difference"].as_f64().unwrap() < 1e-8);
    assert!(fit["residual"].as_f64().unwrap() > 1.0);
}
