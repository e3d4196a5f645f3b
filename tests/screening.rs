//! `gyremesh check`: what the tests find in the demo, how it is told, and the keys of `[check]`.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

use serde_json::Value;

const DEMO: &str = "networks/ostrin/network.toml";

/// Exit status, standard output and error of `check`.
fn check(network: &str, more: &[&str]) -> (i32, String, String) {
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .current_dir(Path::new(env!("CARGO_MANIFEST_DIR")))
        .args(["check", network])
        .args(more)
        .output();
    let Output {
        status,
        stdout,
        stderr,
    } = output.unwrap();
    let text = |bytes| String::from_utf8(bytes).unwrap();
    (status.code().unwrap(), text(stdout), text(stderr))
}

/// The stuck sensor fails from its fifth report in half an hour on; nothing else does.
#[test]
fn of_the_demo_the_stuck_sensor_fails_and_nothing_else() {
    let folder = tempfile::tempdir().unwrap();
    let out = folder.path().to_str().unwrap();
    let (status, printed, _) = check(DEMO, &["--json", "--out", out]);
    assert_eq!(status, 0);
    let json: Value = serde_json::from_str(&printed).unwrap();
    for station in json["stations"].as_array().unwrap() {
        let raised = (station["suspect"].as_u64(), station["failed"].as_u64());
        let by_neighbours = station["tests"]["neighbour"]["suspect"].as_u64();
        let by_neighbours = by_neighbours.unwrap_or(0);
        match station["station"].as_str().unwrap() {
            "OS36" => {
                assert_eq!(raised, (Some(2), Some(47)));
                assert_eq!(station["tests"]["flat_line"]["failed"], 47);
            }
            // The knots, in strong winds; else a few reports as the vortex and the line pass.
            "OS18" => assert!(by_neighbours > 50 && raised.1 == Some(0), "{station}"),
            _ => assert!(
                by_neighbours <= 3 && raised == (Some(by_neighbours), Some(0)),
                "{station}"
            ),
        }
    }
    let truth = fs::read("examples/ostrin/truth.json").unwrap();
    let truth: Value = serde_json::from_slice(&truth).unwrap();
    let faults = truth["faults"].as_array().unwrap();
    let stuck = faults.iter().find(|f| f["station"] == "OS36").unwrap();
    let (from, to) = (
        stuck["from"].as_str().unwrap(),
        stuck["to"].as_str().unwrap(),
    );
    let mut reader = csv::Reader::from_path(folder.path().join("reports_flagged.csv")).unwrap();
    let rows: Vec<csv::StringRecord> = reader.records().map(Result::unwrap).collect();
    assert_eq!(rows.len(), 10_799);
    // The twelve station tests, without the neighbours'.
    let raised = |row: &&csv::StringRecord| (6..18).any(|c| &row[c] == "3" || &row[c] == "4");
    for row in rows.iter().filter(raised) {
        assert_eq!(&row[1], "OS36");
        assert!(from <= &row[0] && &row[0] <= to, "{row:?}");
    }
}

#[test]
fn tables_stay_within_80_columns_and_name_the_worst_first() {
    let (_, printed, _) = check(DEMO, &[]);
    assert!(printed.lines().all(|line| line.chars().count() <= 80));
    let worst = printed.split("worst stations").nth(1).unwrap();
    assert!(worst.lines().nth(1).unwrap().starts_with("OS36"), "{worst}");
    assert!(worst.contains("flat line (49)"));
    let (_, unscreened, _) = check(DEMO, &["--no-screen"]);
    assert!(!unscreened.contains("worst stations"));
}

#[test]
fn every_test_of_a_report_is_explained_with_its_numbers() {
    let at = ["--explain", "OS36", "--at", "2031-06-14T12:30:00Z"];
    let (status, printed, _) = check(DEMO, &at);
    assert_eq!(status, 0);
    assert!(printed.lines().all(|line| line.chars().count() <= 80));
    for words in [
        "OS36 2031-06-14T12:30:00Z: 6.1 m/s from 252 degrees",
        "flag 4, fail",
        "4 flat line: speed and direction the same in 39 reports, 3.3 h",
        "1 gross range: 6.1 m/s; above 75 m/s is suspect",
        "1 spike",
        "1 rate of change",
        "stuck vane",
        "attenuated signal",
    ] {
        assert!(printed.contains(words), "{words}: {printed}");
    }
    // Between two reports, one is lost: those before and after.
    let at = [
        "--json",
        "--explain",
        "OS01",
        "--at",
        "2031-06-14T12:32:00Z",
    ];
    let json: Value = serde_json::from_str(&check(DEMO, &at).1).unwrap();
    let times: Vec<&str> = json["explained"]
        .as_array()
        .unwrap()
        .iter()
        .map(|e| e["time"].as_str().unwrap())
        .collect();
    assert_eq!(times, ["2031-06-14T12:30:00Z", "2031-06-14T12:40:00Z"]);
    let (status, _, said) = check(DEMO, &["--explain", "OS99", "--at", "2031-06-14T12:32:00Z"]);
    assert_eq!(status, 2);
    assert!(said.contains("no station `OS99`"), "{said}");
}

/// A network of one station and these settings of `[check]`.
fn with_settings(settings: &str) -> (i32, String, String) {
    let folder = tempfile::tempdir().unwrap();
    let path = |name: &str| folder.path().join(name);
    fs::write(
        path("stations.csv"),
        "id,latitude,longitude\nA,46.0,-30.0\n",
    )
    .unwrap();
    let reports = "time,station,direction,speed\n2031-06-14T00:00:00Z,A,270,31\n";
    fs::write(path("reports.csv"), reports).unwrap();
    let head = "name = \"t\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\n[check]\n";
    fs::write(path("network.toml"), format!("{head}{settings}")).unwrap();
    check(path("network.toml").to_str().unwrap(), &["--json"])
}

#[test]
fn limits_are_settings_and_wrong_keys_are_told() {
    let suspect = |settings: &str| {
        let (_, printed, said) = with_settings(settings);
        let json: Value = serde_json::from_str(&printed).unwrap_or_else(|_| panic!("{said}"));
        json["stations"][0]["suspect"].clone()
    };
    assert_eq!(suspect(""), 0);
    assert_eq!(suspect("speed_suspect = \"60 kt\""), 1);
    assert_eq!(
        suspect("speed_suspect = \"60 kt\"\noff = [\"gross_range\"]"),
        0
    );
    let summer = "[[check.climatology]]\nmonths = [6, 7, 8]\nspeed_most = \"30 m/s\"\n";
    assert_eq!(suspect(summer), 1);
    for (settings, words) in [
        ("spike = { suspekt = \"20 m/s\" }", "is `suspect` meant?"),
        (
            "flat_line = { fail_after = 5 }",
            "check.flat_line.fail_after",
        ),
        ("off = [\"spikes\"]", "`spikes` is no test"),
        ("displacement = \"3 furlongs\"", "is not a length"),
        ("[[check.climatology]]\nmonths = [13]", "13 is no month"),
    ] {
        let (status, _, said) = with_settings(settings);
        assert_eq!(status, 2, "{settings}");
        assert!(said.contains(words), "{said}");
    }
}
