//! Writes the demo day of the Ostrin Lake mesonet: station list, reports and what was planted in them.
//!
//! The network, its lake and its weather are invented. The wind is an analytic field in a local plane (`field`), seen by
//! stations with sensor errors and a few planted faults (`reports`); `truth` writes down all of it. Every number of the
//! scenario stands in `scenario`. The same seed gives the same files, byte for byte.
//!
//! ```text
//! cargo run --release --example make_demo
//! ```
#![allow(clippy::print_stderr, reason = "a command speaks to stderr")]

mod field;
mod network;
mod reports;
mod scenario;
mod truth;

use std::ffi::OsString;
use std::fs;
use std::io::{self, Write as _};
use std::path::{Path, PathBuf};
use std::process::ExitCode;

use crate::field::WindField;
use crate::network::LocalPlane;
use crate::reports::Reports;

const USAGE: &str = "\
Writes the invented demo day of the Ostrin Lake mesonet.

Usage: make_demo [--seed N] [--out DIR] [--without-faults] [--without-weather]

  --seed N           seed of the random numbers, a whole number [default: 20310614]
  --out DIR          write stations.csv, reports.csv and truth.json into DIR, which is
                     created if need be [default: networks/ostrin/stations.csv,
                     examples/ostrin/reports.csv and examples/ostrin/truth.json, seen from
                     the current directory]
  --without-faults   no sensor faults and no missing reports
  --without-weather  no lake-breeze line and no vortex: mean flow and turbulence only
  --help             this text

Exit status: 0 all files written, 2 not done.
";

/// What the command line asks for.
struct Args {
    seed: u64,
    out: Option<PathBuf>,
    faults: bool,
    weather: bool,
    help: bool,
}

impl Args {
    fn parse(mut given: impl Iterator<Item = OsString>) -> Result<Self, String> {
        let mut args = Self {
            seed: scenario::DEFAULT_SEED,
            out: None,
            faults: true,
            weather: true,
            help: false,
        };
        while let Some(name) = given.next() {
            match name.to_str() {
                Some("--seed") => {
                    let text = given.next().ok_or("`--seed` needs a whole number")?;
                    let text = text.to_string_lossy();
                    args.seed = text.parse().map_err(|_| {
                        format!(
                            "`--seed {text}`: whole number from 0 to {} expected",
                            u64::MAX
                        )
                    })?;
                }
                Some("--out") => {
                    args.out = Some(given.next().ok_or("`--out` needs a folder")?.into());
                }
                Some("--without-faults") => args.faults = false,
                Some("--without-weather") => args.weather = false,
                Some("--help" | "-h") => args.help = true,
                _ => {
                    let name = name.to_string_lossy();
                    return Err(format!("unknown argument `{name}`, see `--help`"));
                }
            }
        }
        Ok(args)
    }

    /// Paths of station list, reports and truth.
    fn paths(&self) -> [PathBuf; 3] {
        match &self.out {
            Some(folder) => ["stations.csv", "reports.csv", "truth.json"].map(|f| folder.join(f)),
            None => [
                "networks/ostrin/stations.csv",
                "examples/ostrin/reports.csv",
                "examples/ostrin/truth.json",
            ]
            .map(PathBuf::from),
        }
    }
}

fn main() -> ExitCode {
    match Args::parse(std::env::args_os().skip(1)).and_then(|args| run(&args)) {
        Ok(()) => ExitCode::SUCCESS,
        Err(message) => {
            eprintln!("error: {message}");
            ExitCode::from(2)
        }
    }
}

fn run(args: &Args) -> Result<(), String> {
    if args.help {
        return io::stdout()
            .write_all(USAGE.as_bytes())
            .map_err(|e| format!("standard output: {e}"));
    }
    let plane = LocalPlane::about_centre();
    let field = WindField::new(args.seed, args.weather);
    let reports = Reports::of_day(&field, &plane, args.seed, args.faults);
    let truth = truth::describe(
        args.seed,
        args.weather,
        args.faults,
        &field,
        &plane,
        &reports,
    );
    let [stations_path, reports_path, truth_path] = args.paths();
    write(&stations_path, &network::station_list())?;
    write(&reports_path, &reports.text)?;
    write(&truth_path, &format!("{truth:#}\n"))?;
    eprintln!(
        "{} reports of {} stations in {}",
        reports.rows,
        network::STATIONS.len(),
        reports_path.display()
    );
    Ok(())
}

/// Writes a text file, and the folders above it.
fn write(path: &Path, text: &str) -> Result<(), String> {
    let place = |e: io::Error| format!("{}: {e}", path.display());
    if let Some(folder) = path.parent() {
        fs::create_dir_all(folder).map_err(place)?;
    }
    fs::write(path, text).map_err(place)
}
