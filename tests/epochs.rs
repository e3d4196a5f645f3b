//! Stations that move within the period of a run: one mesh for each part of it.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fmt::Write as _;
use std::fs;
use std::path::Path;
use std::process::{Command, Output};

use tempfile::TempDir;

/// X stands at 46.3 N until 00:30 and at 46.2 N from then on; a fourth station comes at 01:00 (which moves nothing).
const STATIONS: &str = "id,latitude,longitude,from,to\n\
                        A,46.0,-30.0,,\n\
                        B,46.0,-29.7,,\n\
                        X,46.3,-29.8,,2031-06-14T00:30:00Z\n\
                        X,46.2,-29.85,2031-06-14T00:30:00Z,\n\
                        Z,46.1,-29.4,2031-06-14T01:00:00Z,\n";

fn site(stations: &str) -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("stations.csv"), stations).unwrap();
    let mut reports = String::from("time,station,direction,speed\n");
    for minute in (0..90).step_by(10) {
        for (k, id) in ["A", "B", "X", "Z"].into_iter().enumerate() {
            let (hour, minute) = (minute / 60, minute % 60);
            let direction = 200 + 20 * k + minute;
            writeln!(
                reports,
                "2031-06-14T0{hour}:{minute:02}:00Z,{id},{direction},{}",
                4 + k
            )
            .unwrap();
        }
    }
    fs::write(folder.path().join("reports.csv"), reports).unwrap();
    let settings = "name = \"moving\"\n[stations]\nfile = \"stations.csv\"\ncolumns = { valid_from = \"from\", valid_to = \
                    \"to\" }\n[[reports]]\nfiles = [\"reports.csv\"]\n[analysis]\ntolerance = \"0 s\"\n";
    fs::write(folder.path().join("network.toml"), settings).unwrap();
    folder
}

fn estimate(folder: &Path, out: &str, more: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("estimate")
        .arg(folder.join("network.toml"))
        .arg("--out")
        .arg(if out == "-" {
            out.into()
        } else {
            folder.join(out)
        })
        .args(more)
        .output()
        .unwrap()
}

fn read(path: &Path) -> String {
    fs::read_to_string(path).unwrap_or_else(|e| panic!("{}: {e}", path.display()))
}

#[test]
fn every_epoch_has_its_mesh_and_equals_a_run_of_its_own() {
    let site = site(STATIONS);
    let folder = site.path();
    let formats = ["--format", "csv,netcdf", "--errors", "instrument"];
    let run = estimate(folder, "out", &formats);
    let said = String::from_utf8_lossy(&run.stderr);
    assert_eq!(run.status.code(), Some(0), "{said}");
    assert!(
        said.contains("epoch2 of 2, as stations moved: from 2031-06-14T00:30:00Z"),
        "{said}"
    );

    let before = ["--to", "2031-06-14T00:29:59Z"];
    let after = ["--from", "2031-06-14T00:30:00Z"];
    for (epoch, side, times) in [("epoch1", before, 3), ("epoch2", after, 6)] {
        let alone = estimate(folder, "alone", &[&formats[..], &side].concat());
        assert_eq!(alone.status.code(), Some(0));
        for file in ["polygons.csv", "mesh.geojson"] {
            let (found, wanted) = (format!("out/{epoch}/{file}"), format!("alone/{file}"));
            assert_eq!(
                read(&folder.join(found)),
                read(&folder.join(wanted)),
                "{epoch}"
            );
        }
        let table = read(&folder.join(format!("out/{epoch}/polygons.csv")));
        let triangle = table.lines().filter(|row| row.contains(",A+B+X,"));
        assert_eq!(triangle.count(), times);
        let netcdf = fs::read(folder.join(format!("out/{epoch}/polygons.nc"))).unwrap();
        assert_eq!(netcdf[..4], *b"\x89HDF");
    }
    let mesh = |epoch: &str| read(&folder.join(format!("out/{epoch}/mesh.geojson")));
    assert!(mesh("epoch1").contains("46.3") && !mesh("epoch2").contains("46.3]"));
}

#[test]
fn an_epoch_without_reports_is_told_and_standard_output_takes_one_mesh() {
    // The move lies a year before the reports.
    let site = site(&STATIONS.replace("2031-06-14T00:30", "2030-06-14T00:30"));
    let run = estimate(site.path(), "out", &[]);
    let said = String::from_utf8_lossy(&run.stderr);
    assert_eq!(run.status.code(), Some(1), "{said}");
    assert!(
        said.contains("warning: epoch1 has no results: none of"),
        "{said}"
    );
    assert!(site.path().join("out/epoch2/polygons.csv").exists());
    assert!(!site.path().join("out/epoch1/polygons.csv").exists());

    let run = estimate(site.path(), "-", &[]);
    let said = String::from_utf8_lossy(&run.stderr);
    assert_eq!(run.status.code(), Some(2));
    assert!(said.contains("makes 2 runs: name a folder"), "{said}");
    assert!(run.stdout.is_empty());
}
