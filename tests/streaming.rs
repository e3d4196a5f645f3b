//! The same results however the reports come: in one file or many, in any order, from memory, disk or a cache.
#![allow(
    clippy::unwrap_used,
    clippy::panic,
    clippy::cast_possible_wrap,
    reason = "tests may panic; their numbers are small"
)]

use std::fmt::Write as _;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use gyremesh::time::Time;
use rand::seq::SliceRandom;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use serde_json::Value;
use tempfile::TempDir;

const STATIONS: usize = 7;
/// More than three windows, which have 1024 analysis times each.
const TIMES: usize = 3500;
const HEADER: &str = "time,station,direction,speed\n";

struct Site {
    folder: TempDir,
    /// (time, station, line), in the order of time.
    rows: Vec<(usize, usize, String)>,
}

impl Site {
    fn new() -> Self {
        let folder = tempfile::tempdir().unwrap();
        let mut rng = ChaCha8Rng::seed_from_u64(11);
        let mut stations = String::from("id,latitude,longitude\n");
        for s in 0..STATIONS {
            let (latitude, longitude) = (45.0 + 0.1 * (s % 3) as f64, 8.0 + 0.13 * (s / 3) as f64);
            let _ = writeln!(
                stations,
                "P{s},{:.4},{longitude:.4}",
                latitude + 0.01 * s as f64
            );
        }
        fs::write(folder.path().join("stations.csv"), stations).unwrap();
        let settings = "name = \"Streams\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"all.csv\"]\n\
                        [analysis]\ninterval = \"5 min\"\ntolerance = \"4 min\"\n";
        fs::write(folder.path().join("network.toml"), settings).unwrap();
        let mut rows = Vec::new();
        for t in 0..TIMES {
            for s in 0..STATIONS {
                // Gaps, a long one of a station, reports beside the analysis time, repeats that say something else.
                if rng.random_bool(0.03) || (s == 3 && (1100..2400).contains(&t)) {
                    continue;
                }
                // A gap of the whole network, longer than a window.
                let day = if t > 3000 { 40 } else { 0 };
                let second = (t * 300 + day * 86_400 + rng.random_range(0..3) * 60) as i64;
                let time = Time::from_micros((1_900_000_200 + second) * 1_000_000);
                let (direction, speed) = (rng.random_range(0..=36) * 10, rng.random_range(0..150));
                let (direction, speed) = match (s, t) {
                    // Sensors at fault, over the ends of windows and beside them.
                    (1, 1000..1100) | (2, 2040..2056) => (270, 61),
                    (4, 900..1400) => (direction, 83),
                    (5, 1700..2200) => (40, speed),
                    _ if rng.random_bool(0.003) => (direction, 700),
                    _ => (direction, speed),
                };
                let line = format!("{time},P{s},{direction},{:.1}\n", f64::from(speed) / 10.0);
                rows.push((t, s, line));
                if rng.random_bool(0.01) {
                    rows.push((t, s, format!("{time},P{s},{direction},99.5\n")));
                }
            }
        }
        Self { folder, rows }
    }

    fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    fn write<'a>(&self, name: &str, lines: impl IntoIterator<Item = &'a String>) -> PathBuf {
        let text: String = std::iter::once(HEADER)
            .chain(lines.into_iter().map(String::as_str))
            .collect();
        let path = self.path(name);
        fs::write(&path, text).unwrap();
        path
    }

    /// The results on these files, and what was said; the flags of all reports are among the results.
    fn run(&self, files: &[PathBuf], options: &[&str]) -> (Results, String) {
        let (mut results, said) =
            self.run_with(files, &[&["--errors", "instrument"], options].concat());
        let out = self.path("checked");
        let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg("check")
            .arg(self.path("network.toml"))
            .arg("--out")
            .arg(&out)
            .args(options)
            .arg("--reports")
            .args(files)
            .output();
        let Output { status, stderr, .. } = output.unwrap();
        assert!(status.success(), "{}", String::from_utf8_lossy(&stderr));
        let flagged = fs::read_to_string(out.join("reports_flagged.csv")).unwrap();
        // Without file and line.
        let lines = flagged
            .lines()
            .map(|line| line.rsplitn(3, ',').last().unwrap());
        results.flagged = lines.collect::<Vec<_>>().join("\n");
        (results, said)
    }

    fn run_with(&self, files: &[PathBuf], options: &[&str]) -> (Results, String) {
        let out = self.path("out");
        let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg("estimate")
            .arg(self.path("network.toml"))
            .args(["--quiet", "--out"])
            .arg(&out)
            .args(options)
            .arg("--reports")
            .args(files)
            .output();
        let Output { status, stderr, .. } = output.unwrap();
        let said = String::from_utf8_lossy(&stderr).into_owned();
        assert!(status.success(), "{said}");
        (Results::read(&out), said)
    }
}

#[derive(Debug, PartialEq)]
struct Results {
    polygons: String,
    polygon_summary: String,
    stations: String,
    flagged: String,
    period: Value,
    rows: Value,
    repeats: Value,
    aligned: Value,
}

impl Results {
    fn read(out: &Path) -> Self {
        let text = |name: &str| fs::read_to_string(out.join(name)).unwrap();
        let summary: Value = serde_json::from_str(&text("summary.json")).unwrap();
        let of_reports = |name: &str| summary["reports"][name].clone();
        Self {
            polygons: text("polygons.csv"),
            polygon_summary: text("polygon_summary.csv"),
            stations: text("stations.csv"),
            flagged: String::new(),
            period: summary["period"].clone(),
            rows: of_reports("rows"),
            repeats: of_reports("repeats"),
            aligned: of_reports("aligned"),
        }
    }
}

/// Rows that a tally set aside.
fn set_aside(tally: &Value) -> u64 {
    let reasons = tally["set_aside"].as_object().unwrap();
    reasons.values().map(|n| n.as_u64().unwrap()).sum()
}

#[test]
fn the_order_and_number_of_files_change_nothing() {
    let site = Site::new();
    let lines = || site.rows.iter().map(|row| &row.2);
    let whole = site.write("all.csv", lines());
    let (expected, said) = site.run(std::slice::from_ref(&whole), &[]);
    assert_eq!(said, "", "in order");
    assert!(expected.polygons.lines().count() > 10_000);
    assert_eq!(expected.rows["passed"], site.rows.len());
    // Every report once, in the order of time, and faults among them.
    let reports = expected.rows["passed"].as_u64().unwrap() - set_aside(&expected.repeats);
    let flagged: Vec<&str> = expected.flagged.lines().skip(1).collect();
    assert_eq!(flagged.len() as u64, reports);
    assert!(flagged.is_sorted_by_key(|line| &line[..20]));
    let with = |flag: &str| {
        flagged
            .iter()
            .filter(|l| l.split(',').nth(5) == Some(flag))
            .count()
    };
    assert!(
        with("3") > 50 && with("4") > 50,
        "{} {}",
        with("3"),
        with("4")
    );

    let (one_thread, _) = site.run(std::slice::from_ref(&whole), &["--threads", "1"]);
    assert_eq!(one_thread, expected);

    let stations: Vec<PathBuf> = (0..STATIONS)
        .map(|s| {
            let of_station = site.rows.iter().filter(|row| row.1 == s);
            site.write(&format!("station{s}.csv"), of_station.map(|row| &row.2))
        })
        .collect();
    let (found, said) = site.run(&stations, &[]);
    assert_eq!(said, "", "stations");
    assert!(found == expected, "a file for each station");

    // With the structure function, which follows the run.
    let (complete, _) = site.run_with(std::slice::from_ref(&whole), &[]);
    let (found, _) = site.run_with(&stations, &["--threads", "1"]);
    assert_ne!(complete.polygons, expected.polygons);
    assert_eq!(found, complete, "complete errors");

    let days: Vec<PathBuf> = site
        .rows
        .chunk_by(|a, b| a.0 / 288 == b.0 / 288)
        .enumerate()
        .map(|(day, rows)| site.write(&format!("day{day:02}.csv"), rows.iter().map(|r| &r.2)))
        .collect();
    let (found, said) = site.run(&days, &[]);
    assert_eq!(said, "", "days");
    assert_eq!(found, expected, "a file for each day");
}

#[test]
fn rows_out_of_order_are_sorted_in_memory_or_on_disk() {
    let site = Site::new();
    let whole = site.write("all.csv", site.rows.iter().map(|row| &row.2));
    let (expected, _) = site.run(&[whole], &[]);

    // Station after station in one file: the second begins when windows of the first are closed.
    let mut rows = site.rows.clone();
    rows.sort_by_key(|row| row.1);
    // With remarks, so that the file is not read in one go.
    let remark = format!(",{}\n", "remark ".repeat(30));
    let long: Vec<String> = rows.iter().map(|r| r.2.replace('\n', &remark)).collect();
    let by_station = site.write("by_station.csv", &long);
    for (memory, reason) in [("1GiB", "by_station.csv:"), ("1MiB", "too far apart")] {
        let files = std::slice::from_ref(&by_station);
        let options = ["--memory", memory, "--threads", "1"];
        let (found, said) = site.run(files, &options);
        assert!(said.contains("not in the order of time"), "{said}");
        assert!(said.contains(reason), "{said}");
        assert_eq!(found, expected, "{memory}");
    }

    // Any order, but repeats of a time stay in theirs: the last of them holds.
    let mut groups: Vec<Vec<&String>> = site
        .rows
        .chunk_by(|a, b| (a.0, a.1) == (b.0, b.1))
        .map(|group| group.iter().map(|row| &row.2).collect())
        .collect();
    groups.shuffle(&mut ChaCha8Rng::seed_from_u64(3));
    let shuffled = site.write("shuffled.csv", groups.into_iter().flatten());
    let (found, _) = site.run(&[shuffled], &["--memory", "1MiB"]);
    assert_eq!(found, expected, "shuffled");
}

#[test]
fn a_cache_gives_the_same_until_its_files_change() {
    let site = Site::new();
    let whole = site.write("all.csv", site.rows.iter().map(|row| &row.2));
    let files = std::slice::from_ref(&whole);
    let (expected, _) = site.run(files, &[]);
    let cache = site.path("rows.cache");
    let kept = ["--cache", cache.to_str().unwrap()];
    let (first, _) = site.run(files, &kept);
    assert_eq!(first, expected);
    let bytes = fs::read(&cache).unwrap();
    let (second, _) = site.run(files, &kept);
    assert_eq!(second, expected, "from the cache");
    assert_eq!(
        fs::read(&cache).unwrap(),
        bytes,
        "it was used, not made anew"
    );

    // Other values in a file of the same size.
    let text = fs::read_to_string(&whole).unwrap();
    fs::write(&whole, text.replacen(",1.", ",2.", 1000)).unwrap();
    let (changed, _) = site.run(files, &kept);
    assert_ne!(changed.polygons, expected.polygons);
    assert_eq!(changed, site.run(files, &[]).0);
    assert_ne!(fs::read(&cache).unwrap(), bytes, "it was made anew");

    // A damaged one is no cache.
    let mut bytes = fs::read(&cache).unwrap();
    bytes.truncate(100);
    fs::write(&cache, &bytes).unwrap();
    assert_eq!(site.run(files, &kept).0, changed);

    // Sorted rows are kept in their order.
    let mut rows = site.rows.clone();
    rows.sort_by_key(|row| row.1);
    let by_station = site.write("by_station.csv", rows.iter().map(|row| &row.2));
    let files = std::slice::from_ref(&by_station);
    assert_eq!(site.run(files, &kept).0, expected);
    let (found, said) = site.run(files, &kept);
    assert_eq!((found, said.as_str()), (expected, ""), "in order now");
}

/// Events too: areas of gusty winds over several windows of time, and a front that sweeps over the network between two.
#[test]
fn events_do_not_depend_on_files_threads_or_order() {
    let site = Site::new();
    // Steady winds of two sides of a front, in place of random ones, for five hours around the end of the first window.
    let rows: Vec<(usize, usize, String)> = site
        .rows
        .iter()
        .map(|(t, s, line)| {
            if !(990..1050).contains(t) {
                return (*t, *s, line.clone());
            }
            let passes = 1020 + s % 3;
            // Not quite steady, as no sensor that works is.
            let (more, turn) = (0.1 * ((t + s) % 7) as f64, (3 * t + s) % 11);
            let wind = if *t < passes {
                format!("{},{:.1}", 85 + turn, 3.0 + more)
            } else {
                format!("{},{:.1}", 265 + turn, 8.0 + more)
            };
            let fields: Vec<&str> = line.split(',').collect();
            (*t, *s, format!("{},{},{wind}\n", fields[0], fields[1]))
        })
        .collect();
    let settings = fs::read_to_string(site.path("network.toml")).unwrap();
    let settings = settings
        + "[events]\nleast_stations = 5\nlasting = \"5 min\"\n[errors]\nparts = \"instrument\"\n";
    fs::write(site.path("network.toml"), settings).unwrap();
    let run = |files: &[PathBuf], options: &[&str]| {
        let out = site.path("events");
        let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg("events")
            .arg(site.path("network.toml"))
            .arg("--out")
            .arg(&out)
            .args(options)
            .arg("--reports")
            .args(files)
            .output()
            .unwrap();
        assert!(output.status.success(), "{output:?}");
        let names = ["events.csv", "shifts.csv", "arrivals.csv", "events.geojson"];
        names.map(|name| fs::read_to_string(out.join(name)).unwrap())
    };
    let whole = site.write("all.csv", rows.iter().map(|row| &row.2));
    let expected = run(std::slice::from_ref(&whole), &["--threads", "1"]);
    assert!(expected[0].lines().count() > 100, "{}", expected[0]);
    assert!(expected[1].lines().count() > 5, "{}", expected[1]);
    assert!(run(&[whole], &["--threads", "2"]) == expected, "threads");
    let stations: Vec<PathBuf> = (0..STATIONS)
        .map(|s| {
            let of_station = rows.iter().filter(|row| row.1 == s);
            site.write(&format!("one{s}.csv"), of_station.map(|row| &row.2))
        })
        .collect();
    assert!(run(&stations, &[]) == expected, "a file for each station");
    let mut sorted = rows.clone();
    sorted.sort_by_key(|row| row.1);
    let by_station = site.write("by_station.csv", sorted.iter().map(|row| &row.2));
    let found = run(&[by_station], &["--memory", "1MiB"]);
    assert!(found == expected, "station after station");
}
