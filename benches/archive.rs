//! The whole job as a process on a made-up archive, beside what merely reads the file.
//!
//! `cargo bench --bench archive -- [--stations N] [--days N] [--minutes N] [--keep DIR]`. With `polars` in the Python of
//! `GYREMESH_PYTHON` (or `python3`), its parse of the file stands beside; without, that line is left out.
#![allow(
    clippy::print_stdout,
    clippy::unwrap_used,
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    clippy::cast_possible_wrap,
    reason = "a bench prints and may panic; its numbers are small"
)]

#[path = "common/archive.rs"]
mod archive;
mod common;
#[path = "common/process.rs"]
mod process;

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

use archive::Archive;
use common::median;
use process::measure;

/// Runs of each measurement; the median counts.
const RUNS: usize = 5;

fn estimate(network: &Path, out: &Path, options: &[&str]) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_gyremesh"));
    command
        .arg("estimate")
        .arg(network)
        .args(["--quiet", "--no-screen", "--out"])
        .arg(out)
        .args(options);
    command
}

/// The data-frame engine's mere parse of times, names and numbers, if it is there.
fn data_frame(reports: &Path) -> Option<Command> {
    let python = std::env::var("GYREMESH_PYTHON").unwrap_or_else(|_| "python3".into());
    let there = Command::new(&python)
        .args(["-c", "import polars"])
        .stderr(Stdio::null())
        .status();
    there.ok().filter(std::process::ExitStatus::success)?;
    let mut command = Command::new(python);
    let parse = "import sys, polars\nframe = polars.read_csv(sys.argv[1], try_parse_dates=True)\nassert frame.height > 0";
    command.args(["-c", parse]).arg(reports);
    Some(command)
}

fn number(name: &str, otherwise: usize) -> usize {
    let mut args = std::env::args().skip_while(|arg| arg != name);
    args.nth(1)
        .map_or(otherwise, |value| value.parse().unwrap())
}

fn main() {
    let archive = Archive {
        stations: number("--stations", 120),
        days: number("--days", 60),
        minutes: number("--minutes", 5),
    };
    let kept = std::env::args().skip_while(|arg| arg != "--keep").nth(1);
    let folder = tempfile::tempdir().unwrap();
    let folder = kept.map_or_else(|| folder.path().to_path_buf(), PathBuf::from);
    std::fs::create_dir_all(&folder).unwrap();
    let network = archive.write(&folder);
    let (reports, out) = (folder.join("reports.csv"), folder.join("out"));
    println!(
        "archive: {} stations, {} days, every {} min: {:.1} million reports, {:.0} MB",
        archive.stations,
        archive.days,
        archive.minutes,
        archive.reports() as f64 / 1e6,
        std::fs::metadata(&reports).unwrap().len() as f64 / 1e6
    );
    let jobs: [(&str, &[&str]); 8] = [
        ("summary", &["--summary-only", "--errors", "instrument"]),
        (
            "summary, one thread",
            &["--summary-only", "--errors", "instrument", "--threads", "1"],
        ),
        ("summary, complete errors", &["--summary-only"]),
        (
            "Parquet",
            &["--format", "parquet", "--errors", "instrument"],
        ),
        (
            "Parquet, one thread",
            &[
                "--format",
                "parquet",
                "--errors",
                "instrument",
                "--threads",
                "1",
            ],
        ),
        ("Parquet, complete errors", &["--format", "parquet"]),
        (
            "the same, unscreened",
            &["--format", "parquet", "--no-screen"],
        ),
        ("CSV, complete errors", &["--format", "csv"]),
    ];
    let mut parse = data_frame(&reports);
    let mut parses = Vec::new();
    let mut results = vec![(Vec::new(), Vec::new(), Vec::new()); jobs.len()];
    let bare = || {
        let mut reader = csv::Reader::from_path(&reports).unwrap();
        let mut record = csv::ByteRecord::new();
        let mut rows = 0;
        while reader.read_byte_record(&mut record).unwrap() {
            rows += 1;
        }
        rows
    };
    let mut bares = Vec::new();
    for _ in 0..RUNS {
        let bare = common::seconds(bare);
        bares.push(bare);
        let parse = parse.as_mut().map(|command| measure(command).0);
        parses.extend(parse);
        for ((_, options), (seconds, memory, ratios)) in jobs.iter().zip(&mut results) {
            let (took, peak) = measure(&mut estimate(&network, &out, options));
            seconds.push(took);
            memory.push(peak);
            ratios.push((took / bare, parse.map(|parse| took / parse)));
        }
    }
    println!("  {:<25} {:>7.2} s", "bare csv record loop", median(bares));
    if !parses.is_empty() {
        println!("  {:<25} {:>7.2} s", "data-frame parse", median(parses));
    }
    for ((name, _), (seconds, memory, ratios)) in jobs.iter().zip(results) {
        let to_bare = median(ratios.iter().map(|r| r.0).collect());
        let to_parse: Vec<f64> = ratios.iter().filter_map(|r| r.1).collect();
        let to_parse = if to_parse.is_empty() {
            String::new()
        } else {
            format!(", {:.2} of the data-frame parse", median(to_parse))
        };
        println!(
            "  {name:<25} {:>7.2} s, {:>4.0} MiB, {to_bare:.2} of the record loop{to_parse}",
            median(seconds),
            median(memory)
        );
    }
}
