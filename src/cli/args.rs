//! The commands, and the options that several of them have.

use std::path::{Path, PathBuf};
use std::time::Duration;

use clap::{Parser, Subcommand, ValueEnum};

use super::calibrate::CalibrateArgs;
use super::check::CheckArgs;
use super::completions::CompletionsArgs;
use super::estimate::EstimateArgs;
use super::events::EventsArgs;
use super::manual::ManualArgs;
use super::polygons::PolygonsArgs;
use super::profile::ProfileArgs;
use super::report::PageArgs;
use super::{help, print};
use crate::error::Error;
use crate::output::OutputSet;
use crate::pipeline::Setup;
use crate::settings::Overrides;
use crate::time::Time;
use crate::units;

/// Where the air converges and spins up, by how much, and whether to believe it.
#[derive(Debug, Parser)]
#[command(version, about, long_about = help::LONG_ABOUT, after_help = help::laid_out(help::AFTER_HELP), max_term_width = 80)]
pub(super) struct Args {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// The commands, in the order of the data.
#[derive(Debug, Subcommand)]
pub(super) enum Command {
    /// Read all reports and show what came of each file and station; estimates nothing
    #[command(after_help = help::laid_out(help::CHECK))]
    Check(CheckArgs),
    /// List the polygons of a network, their shape and what is left out; needs no reports
    #[command(after_help = help::laid_out(help::POLYGONS))]
    Polygons(PolygonsArgs),
    /// Estimate area-mean vorticity and divergence from the reports (the main job)
    #[command(after_help = help::laid_out(help::ESTIMATE))]
    Estimate(EstimateArgs),
    /// Find vanes that are turned, speeds mis-scaled, clocks off and data mixed up, from the network itself
    #[command(after_help = help::laid_out(help::CALIBRATE))]
    Calibrate(CalibrateArgs),
    /// Tell what happened: areas that converge or spin up, wind-shift lines, and when they reach your places
    #[command(after_help = help::laid_out(help::EVENTS))]
    Events(EventsArgs),
    /// Profiles of vorticity, divergence and vertical motion from reports on levels: soundings, profilers, masts, lidars
    #[command(after_help = help::laid_out(help::PROFILE))]
    Profile(ProfileArgs),
    /// Make one page for a browser, which works offline: map that moves in time, series, events, stations, settings
    #[command(after_help = help::laid_out(help::REPORT))]
    Report(PageArgs),
    /// Print what makes a shell complete commands and options
    #[command(after_help = help::laid_out(help::COMPLETIONS))]
    Completions(CompletionsArgs),
    /// Print or write the manual, for `man`
    #[command(after_help = help::laid_out(help::MANUAL))]
    Manual(ManualArgs),
}

/// What every command that estimates takes: a network, its reports, and which of them are used.
#[derive(Debug, clap::Args)]
pub(super) struct InputArgs {
    /// Settings file
    pub network: PathBuf,
    #[command(flatten)]
    pub mesh: MeshArgs,
    #[command(flatten)]
    pub reports: ReportArgs,
}

impl InputArgs {
    /// What stands in place of the settings.
    pub fn overrides(&self) -> Overrides {
        self.reports.over(self.mesh.overrides())
    }

    /// The network, with the threads set.
    pub fn setup(&self) -> Result<Setup, Error> {
        self.setup_with(&self.overrides())
    }

    /// The same with options of a command's own.
    pub fn setup_with(&self, overrides: &Overrides) -> Result<Setup, Error> {
        self.reports.use_threads();
        Setup::read(&self.network, overrides)
    }
}

/// How reports are read.
#[derive(Debug, clap::Args)]
pub(super) struct ReportArgs {
    /// Report files in place of those of the settings, in the format of the first group of the settings
    #[arg(long, value_name = "FILE", num_args = 1..)]
    pub reports: Vec<PathBuf>,
    /// Take all reports as they are, without checks
    #[arg(long)]
    pub no_screen: bool,
    /// Keep the reports, once read, in this file, and take them from it as long as neither they nor the settings change
    #[arg(long, value_name = "FILE")]
    pub cache: Option<PathBuf>,
    /// Memory that reports may take which are not in the order of time, such as 500MiB; the rest is sorted on disk
    /// [default: 1GiB]
    #[arg(long, value_name = "SIZE", value_parser = units::parse_memory)]
    pub memory: Option<usize>,
    /// Threads; the results do not depend on it [default: all processors]
    #[arg(long, value_name = "N")]
    pub threads: Option<usize>,
}

impl ReportArgs {
    /// Adds these to what stands in place of the settings.
    pub fn over(&self, mut overrides: Overrides) -> Overrides {
        overrides.reports.clone_from(&self.reports);
        overrides.no_screen = self.no_screen;
        overrides.cache.clone_from(&self.cache);
        overrides.memory = self.memory;
        overrides
    }

    /// Limits the threads; fails only if a pool is already there, which then serves as well.
    pub fn use_threads(&self) {
        if let Some(threads) = self.threads {
            let _ = rayon::ThreadPoolBuilder::new()
                .num_threads(threads)
                .build_global();
        }
    }
}

/// Which times and polygons are used.
#[derive(Debug, clap::Args)]
pub(super) struct MeshArgs {
    /// First time used, RFC 3339; stations as they stand from then on
    #[arg(long, value_name = "TIME", value_parser = Time::parse_rfc3339)]
    pub from: Option<Time>,
    /// Last time used, RFC 3339; stations as they stand until then
    #[arg(long, value_name = "TIME", value_parser = Time::parse_rfc3339)]
    pub to: Option<Time>,
    /// Leave out polygons with a smaller angle
    #[arg(long, value_name = "DEGREES")]
    pub smallest_angle: Option<f64>,
    /// Leave out polygons with a longer edge, such as 80km
    #[arg(long, value_name = "LENGTH", value_parser = units::parse_length)]
    pub longest_edge: Option<f64>,
}

impl MeshArgs {
    /// What stands in place of the settings.
    pub fn overrides(&self) -> Overrides {
        Overrides {
            from: self.from,
            to: self.to,
            smallest_angle: self.smallest_angle,
            longest_edge: self.longest_edge,
            ..Overrides::default()
        }
    }
}

/// How the winds at the analysis times come about.
#[derive(Debug, clap::Args)]
pub(super) struct AnalysisArgs {
    /// Time between estimates, such as 5min or 1h
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    pub interval: Option<Duration>,
    /// How far a report may be from the analysis time
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    pub tolerance: Option<Duration>,
    /// Take the vector mean of the reports in the window of this length that ends at the analysis time
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    pub window: Option<Duration>,
}

impl AnalysisArgs {
    /// Adds these to what stands in place of the settings.
    pub fn over(&self, overrides: Overrides) -> Overrides {
        Overrides {
            interval: self.interval,
            tolerance: self.tolerance,
            window: self.window,
            ..overrides
        }
    }
}

/// Where the results of a command that prints go.
#[derive(Debug, clap::Args)]
pub(super) struct OutputArgs {
    /// Write the files named below into this folder too; `-`: only the first of them, to standard output
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,
    /// Print JSON
    #[arg(long)]
    pub json: bool,
}

impl OutputArgs {
    /// The files of `--out`, if it is given; of them `main` alone for standard output, if no option of `more` is there.
    pub fn files(&self, main: &str, more: &[(&str, bool)]) -> Result<Option<OutputSet>, Error> {
        let Some(out) = &self.out else {
            return Ok(None);
        };
        let more = [&[("--json", self.json)], more].concat();
        output_set(out, main, &more).map(Some)
    }

    /// Prints the results for programs or for people, unless standard output has a file.
    pub fn show(
        &self,
        json: impl FnOnce() -> String,
        text: impl FnOnce() -> String,
    ) -> Result<(), Error> {
        if self.out.as_deref().is_some_and(is_stdout) {
            return Ok(());
        }
        print(&if self.json { json() } else { text() })
    }
}

/// True for `-`.
pub(super) fn is_stdout(out: &Path) -> bool {
    out == Path::new("-")
}

/// The files for a folder; or `main` alone for standard output, if none of the options `more` asks for something else.
pub(super) fn output_set(
    out: &Path,
    main: &str,
    more: &[(&str, bool)],
) -> Result<OutputSet, Error> {
    if !is_stdout(out) {
        return OutputSet::new(out);
    }
    let asked = more.iter().filter(|(_, asked)| *asked);
    let asked: Vec<&str> = asked.map(|(option, _)| *option).collect();
    if asked.is_empty() {
        Ok(OutputSet::for_stdout(main))
    } else {
        Err(Error::Options(format!(
            "`--out -` writes {main} alone to standard output: leave out {}, or name a folder",
            asked.join(" and ")
        )))
    }
}

/// A format of a table.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(super) enum Format {
    /// Text
    Csv,
    /// The same columns, typed, null for missing
    Parquet,
}

/// What does not go with a single file.
pub(super) fn several<T>(formats: &[T]) -> (&'static str, bool) {
    ("all formats but one", formats.len() > 1)
}

impl Format {
    /// Ending of the names of its files.
    pub fn ending(self) -> &'static str {
        match self {
            Self::Csv => "csv",
            Self::Parquet => "parquet",
        }
    }
}
