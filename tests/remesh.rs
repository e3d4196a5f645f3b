//! Triangles where stations are missing (`polygons.missing = "remesh"`).
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::Path;
use std::process::Command;

const ROOT: &str = env!("CARGO_MANIFEST_DIR");

/// Runs `estimate` on the demo with other settings; the rows of `polygons.csv` by time, then polygon.
fn estimate(
    change: impl Fn(String) -> String,
) -> (
    BTreeMap<String, BTreeMap<String, csv::StringRecord>>,
    String,
) {
    let folder = tempfile::tempdir().unwrap();
    let root = Path::new(ROOT);
    let settings = fs::read_to_string(root.join("networks/ostrin/network.toml")).unwrap();
    let settings = settings
        .replace(
            "\"stations.csv\"",
            &format!(
                "\"{}\"",
                root.join("networks/ostrin/stations.csv").display()
            ),
        )
        .replace("../../examples", root.join("examples").to_str().unwrap())
        .replace("smallest_angle = 15", "smallest_angle = 0");
    let path = folder.path().join("network.toml");
    fs::write(&path, change(settings)).unwrap();
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("estimate")
        .arg(&path)
        .arg("--out")
        .arg(folder.path().join("out"))
        .args(["--errors", "instrument", "--no-screen"])
        .output()
        .unwrap();
    let printed = String::from_utf8(output.stdout).unwrap();
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
    let mut reader = csv::Reader::from_path(folder.path().join("out/polygons.csv")).unwrap();
    let mut rows: BTreeMap<String, BTreeMap<String, csv::StringRecord>> = BTreeMap::new();
    for row in reader.records().map(Result::unwrap) {
        let before = rows
            .entry(row[0].to_string())
            .or_default()
            .insert(row[1].to_string(), row.clone());
        assert!(before.is_none(), "{row:?}");
    }
    (rows, printed)
}

fn remesh(settings: &str) -> String {
    settings.replace("[limits]", "[polygons]\nmissing = \"remesh\"\n[limits]")
}

/// At each of a few times the triangles are those of a network that has only the stations which report then, with the same
/// values; the areas add up to the hull of these.
#[test]
fn the_triangles_are_those_of_the_stations_that_report() {
    let (rows, _) = estimate(|settings| remesh(&settings));
    let (skipped, _) = estimate(|settings| settings);
    assert_eq!(rows.len(), skipped.len());
    let all: BTreeSet<&str> = rows
        .values()
        .flat_map(|r| r.values())
        .flat_map(|row| row[2].split([' ', '|']))
        .filter(|s| !s.is_empty())
        .collect();
    assert_eq!(all.len(), 38);
    let mut compared = 0;
    for (time, triangles) in &rows {
        // A triangle without a value does not stand; regions do.
        let standing: Vec<&csv::StringRecord> = triangles
            .values()
            .filter(|r| &r[1] != "whole network")
            .collect();
        assert!(standing.iter().all(|row| !row[4].is_empty()), "{time}");
        let there: BTreeSet<&str> = standing.iter().flat_map(|row| row[2].split(' ')).collect();
        if there.len() == 38 {
            let before: Vec<&csv::StringRecord> = skipped[time].values().collect();
            assert_eq!(triangles.values().collect::<Vec<_>>(), before);
        }
        if !(35..38).contains(&there.len()) || compared == 8 {
            continue;
        }
        compared += 1;
        let ids: Vec<String> = there.iter().map(|id| format!("{id:?}")).collect();
        let (alone, _) = estimate(|settings| {
            settings
                .replace(
                    "[stations]\n",
                    &format!("[stations]\nonly = [{}]\n", ids.join(", ")),
                )
                .replace(
                    "[analysis]\n",
                    &format!("[analysis]\nfrom = \"{time}\"\nto = \"{time}\"\n"),
                )
        });
        let expected: Vec<&csv::StringRecord> = alone[time]
            .values()
            .filter(|r| &r[1] != "whole network")
            .collect();
        assert_eq!(standing.len(), expected.len(), "{time}");
        for (found, expected) in standing.iter().zip(expected) {
            assert_eq!(
                found.iter().take(4).collect::<Vec<_>>(),
                expected.iter().take(4).collect::<Vec<_>>()
            );
            for column in [4, 5, 6, 7, 8] {
                let (a, b): (f64, f64) = (
                    found[column].parse().unwrap(),
                    expected[column].parse().unwrap(),
                );
                assert!(
                    (a - b).abs() <= 1e-12 * b.abs().max(1e-5),
                    "{time} {} {column}: {a} {b}",
                    &found[1]
                );
            }
        }
    }
    assert_eq!(compared, 8);
}

#[test]
fn only_skip_and_remesh_are_policies() {
    let folder = tempfile::tempdir().unwrap();
    let settings =
        fs::read_to_string(Path::new(ROOT).join("networks/ostrin/network.toml")).unwrap();
    let path = folder.path().join("network.toml");
    fs::write(
        &path,
        settings.replace("[limits]", "[polygons]\nmissing = \"mend\"\n[limits]"),
    )
    .unwrap();
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("polygons")
        .arg(&path)
        .output()
        .unwrap();
    assert_eq!(output.status.code(), Some(2));
    let told = String::from_utf8(output.stderr).unwrap();
    assert!(
        told.contains("`mend` is neither \"skip\" nor \"remesh\""),
        "{told}"
    );
}
