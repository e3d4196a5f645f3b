//! `gyremesh estimate`.

use std::path::{Path, PathBuf};
use std::time::Duration;

use clap::{Args, ValueEnum};

use super::args::{Format, InputArgs};
use super::run::{over_reports, tell};
use super::text::estimate::run_summary;
use super::{Status, print};
use crate::error::Error;
use crate::output::{
    Formats, OutputSet, kinematics_means_csv, means_csv, mesh_geojson, series, stations_csv,
    structure_csv, summary_csv, summary_json,
};
use crate::pipeline::{self, Outcome, Setup};
use crate::settings::{MeansBy, MeansSettings, Overrides, height_above_ground};
use crate::units;

/// Options of `estimate`.
#[derive(Debug, Args)]
pub(super) struct EstimateArgs {
    /// Folder of the results [default: out/NAME, NAME being the folder of the settings file]
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Time between estimates, such as 5min or 1h
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    interval: Option<Duration>,
    /// How far a report may be from the analysis time
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    tolerance: Option<Duration>,
    /// Take the vector mean of the reports in the window of this length that ends at the analysis time
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    window: Option<Duration>,
    /// Formats of the series, several separated by commas
    #[arg(
        long,
        value_name = "FORMAT",
        value_delimiter = ',',
        default_value = "csv"
    )]
    format: Vec<Format>,
    /// Write no series, only the summary of each polygon
    #[arg(long)]
    summary_only: bool,
    /// What the errors hold: the sensors and sites, the wind between the stations, and late reports; or the sensors alone
    #[arg(long, value_name = "PARTS", default_value = "all")]
    errors: Parts,
    /// Write kinematics.csv (or .parquet) too: mean wind, deformation, curvature and shear and more of each polygon
    #[arg(long, conflicts_with = "summary_only")]
    kinematics: bool,
    /// Write vertical_motion.csv too: vertical wind at this height above the ground, if the divergence is the same up to it
    #[arg(long, value_name = "HEIGHT", value_parser = height_above_ground, conflicts_with = "summary_only")]
    w_at: Option<f64>,
    /// Write decompose.csv and decompose_stations.csv too: rotational, divergent and harmonic part of the wind
    #[arg(long)]
    decompose: bool,
    /// Write polygon_means.csv too: means of each polygon by hour of the day, calendar day, calendar month or named period
    #[arg(long, value_name = "WHAT", value_parser = means_by)]
    by: Option<MeansBy>,
    /// Print no summary and no progress; warnings remain
    #[arg(long, short)]
    quiet: bool,
    #[command(flatten)]
    input: InputArgs,
}

fn means_by(text: &str) -> Result<MeansBy, String> {
    let found = MeansSettings::WORDS.iter().find(|w| w.0 == text);
    found
        .map(|w| w.1)
        .ok_or_else(|| format!("`{text}` is none of hour, day, month, period"))
}

/// Parts of the errors.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Parts {
    /// As the settings say: all, if they say nothing
    All,
    /// The sensors and their rounding alone
    Instrument,
}

impl EstimateArgs {
    fn overrides(&self) -> Overrides {
        Overrides {
            interval: self.interval,
            tolerance: self.tolerance,
            window: self.window,
            instrument_errors: self.errors == Parts::Instrument,
            kinematics: self.kinematics,
            decompose: self.decompose,
            w_at: self.w_at,
            by: self.by,
            ..self.input.overrides()
        }
    }
}

pub(super) fn estimate(args: &EstimateArgs) -> Result<Status, Error> {
    let mut setup = args.input.setup_with(&args.overrides())?;
    // Without a series there is no file for them.
    setup.settings.kinematics.write &= !args.summary_only;
    if setup.built.polygons.is_empty() {
        return Err(Error::Network(format!(
            "none of {} polygons is within the limits; `gyremesh polygons` lists the reasons",
            setup.built.excluded.len()
        )));
    }
    let folder = args
        .out
        .clone()
        .unwrap_or_else(|| default_folder(&args.input.network));
    let formats = Formats {
        csv: !args.summary_only && args.format.contains(&Format::Csv),
        parquet: !args.summary_only && args.format.contains(&Format::Parquet),
    };
    let run = over_reports(&setup.settings, args.quiet, |order, progress| {
        let mut set = OutputSet::new(&folder)?;
        let (encoder, mut series_files) = series(&setup, formats, &mut set)?;
        let outcome = pipeline::run(
            &setup,
            order,
            |seen| encoder.encode(seen),
            |encoded| series_files.write(&mut set, encoded),
            progress,
        )?;
        Ok((outcome, set, series_files))
    });
    let (outcome, mut set, series_files) = run?;
    series_files.finish(&mut set)?;
    put_tables(&mut set, &setup, &outcome)?;
    let files = set.commit()?;

    let status = tell(&outcome.warnings, &outcome.reading);
    if !args.quiet {
        print(&run_summary(&setup, &outcome, &files))?;
    }
    Ok(status)
}

/// The files that are not series.
fn put_tables(set: &mut OutputSet, setup: &Setup, outcome: &Outcome) -> Result<(), Error> {
    let mut put = |name: &str, text: String| set.put(name, text.as_bytes());
    put("mesh.geojson", mesh_geojson(setup, &outcome.extra))?;
    put("stations.csv", stations_csv(setup, outcome))?;
    put("polygon_summary.csv", summary_csv(setup, outcome))?;
    if setup.settings.means.by.is_some() {
        put("polygon_means.csv", means_csv(setup, outcome))?;
        if setup.settings.kinematics.write {
            put("kinematics_means.csv", kinematics_means_csv(setup, outcome))?;
        }
    }
    if setup.settings.errors.complete {
        put("structure.csv", structure_csv(outcome))?;
    }
    put("summary.json", summary_json(setup, outcome))
}

/// `out/NAME`, NAME being the folder of the settings file.
fn default_folder(network: &Path) -> PathBuf {
    let name = network
        .canonicalize()
        .ok()
        .and_then(|path| path.parent()?.file_name().map(PathBuf::from))
        .unwrap_or_else(|| "network".into());
    Path::new("out").join(name)
}
