//! What the program prints, for people and for other programs: JSON, standard output, widths, colours, manual.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

use serde_json::Value;
use tempfile::TempDir;

struct Run {
    status: i32,
    out: Vec<u8>,
    err: String,
}

impl Run {
    fn text(&self) -> &str {
        std::str::from_utf8(&self.out).unwrap()
    }

    fn json(&self) -> Value {
        serde_json::from_slice(&self.out).unwrap()
    }
}

/// The program, without what a terminal would tell it.
fn program() -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_gyremesh"));
    for name in ["COLUMNS", "NO_COLOR", "CLICOLOR", "CLICOLOR_FORCE", "TERM"] {
        command.env_remove(name);
    }
    command
}

fn gyremesh(args: &[&str]) -> Run {
    finished(program().args(args))
}

fn finished(command: &mut Command) -> Run {
    let output = command.output().unwrap();
    Run {
        status: output.status.code().unwrap(),
        out: output.stdout,
        err: String::from_utf8(output.stderr).unwrap(),
    }
}

fn demo() -> String {
    let repository = Path::new(env!("CARGO_MANIFEST_DIR"));
    let network = repository.join("networks/ostrin/network.toml");
    network.to_str().unwrap().to_string()
}

/// A folder for results.
struct Folder(TempDir);

impl Folder {
    fn new() -> Self {
        Self(tempfile::tempdir().unwrap())
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn name(&self) -> &str {
        self.0.path().to_str().unwrap()
    }

    fn read(&self, name: &str) -> Vec<u8> {
        fs::read(self.path(name)).unwrap()
    }

    /// Rows of a table, without its header.
    fn rows(&self, name: &str) -> usize {
        let text = fs::read_to_string(self.path(name)).unwrap();
        text.lines().count() - 1
    }
}

/// An hour of the demo is enough.
const HOUR: [&str; 4] = [
    "--from",
    "2031-06-14T12:00:00Z",
    "--to",
    "2031-06-14T13:00:00Z",
];

#[test]
fn estimate_prints_its_summary_as_json() {
    let folder = Folder::new();
    let (demo, out) = (demo(), folder.name());
    let mut args = vec!["estimate", &demo, "--out", out, "--json"];
    args.extend(HOUR);
    let run = gyremesh(&args);
    assert_eq!(run.status, 0, "{}", run.err);
    assert!(run.out == folder.read("summary.json"));
    assert_eq!(run.json()["network"], "Ostrin Lake mesonet");
    args.push("--quiet");
    assert_eq!(gyremesh(&args).status, 2);
}

/// As many polygons as `mesh.csv` and `expected.csv` have, with the same numbers.
#[test]
fn polygons_prints_json() {
    let folder = Folder::new();
    let (demo, out) = (demo(), folder.name());
    let mesh = gyremesh(&["polygons", &demo, "--json", "--out", out]).json();
    let polygons = mesh["polygons"].as_array().unwrap();
    assert_eq!(polygons.len(), folder.rows("mesh.csv"));
    let left_out = polygons.iter().filter(|p| p["excluded"].is_string());
    assert_eq!(mesh["excluded"], left_out.count());
    let text = String::from_utf8(folder.read("mesh.csv")).unwrap();
    let first: Vec<&str> = text.lines().nth(1).unwrap().split(',').collect();
    assert_eq!(polygons[0]["polygon"], first[0]);
    assert_eq!(polygons[0]["area_km2"], first[3].parse::<f64>().unwrap());

    let run = gyremesh(&["polygons", &demo, "--expect", "--json", "--out", out]);
    let expected = run.json();
    let polygons = expected["polygons"].as_array().unwrap();
    assert_eq!(polygons.len(), folder.rows("expected.csv"));
    for polygon in polygons {
        let number = |name: &str| polygon[name].as_f64().unwrap();
        // Both parts add as squares.
        let sum = number("se_instrument").hypot(number("vorticity_se_sampling"));
        assert!((sum / number("vorticity_se") - 1.0).abs() < 1e-12);
    }
    assert!(
        expected["caution"]
            .as_str()
            .unwrap()
            .contains("not warnings")
    );
}
