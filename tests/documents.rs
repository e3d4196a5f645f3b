//! README, networks and examples say what is so.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fs;
use std::path::Path;
use std::process::Command;

fn repository() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

fn readme() -> String {
    fs::read_to_string(repository().join("README.md")).unwrap()
}

/// The output that the README shows under its first command is what the command prints.
#[test]
fn the_first_run_of_the_readme_prints_what_it_shows() {
    let readme = readme();
    assert!(readme.contains("cargo run --release -- estimate networks/ostrin/network.toml"));
    assert!(readme.contains("cargo test"));
    let shown = readme
        .split("```text\n")
        .find(|block| block.starts_with("Ostrin Lake mesonet\n"))
        .and_then(|block| block.split("```").next())
        .unwrap();
    let folder = tempfile::tempdir().unwrap();
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .current_dir(repository())
        .args(["estimate", "networks/ostrin/network.toml", "--out"])
        .arg(folder.path().join("ostrin"))
        .output()
        .unwrap();
    let printed = String::from_utf8(output.stdout).unwrap();
    let printed = printed.replace(
        &format!("{}", folder.path().join("ostrin").display()),
        "out/ostrin",
    );
    assert_eq!(printed.trim(), shown.trim());
    assert!(printed.lines().all(|line| line.chars().count() <= 80));
}

#[test]
fn the_readme_states_the_cautions() {
    let readme = readme();
    for words in [
        "estimate",
        "national weather service",
        "site safety rules",
        "local codes",
        "licensed practice",
    ] {
        assert!(readme.contains(words), "{words}");
    }
}

/// The demo files are those that the generator makes.
#[test]
fn the_demo_data_is_what_its_generator_writes() {
    let folder = tempfile::tempdir().unwrap();
    let cargo = std::env::var("CARGO").unwrap_or_else(|_| "cargo".into());
    let status = Command::new(cargo)
        .current_dir(repository())
        .args(["run", "--quiet", "--example", "make_demo", "--", "--out"])
        .arg(folder.path())
        .status()
        .unwrap();
    assert!(status.success());
    for (made, kept) in [
        ("stations.csv", "networks/ostrin/stations.csv"),
        ("reports.csv", "examples/ostrin/reports.csv"),
        ("truth.json", "examples/ostrin/truth.json"),
    ] {
        let made = fs::read(folder.path().join(made)).unwrap();
        assert!(
            made == fs::read(repository().join(kept)).unwrap(),
            "{kept} differs"
        );
    }
}
