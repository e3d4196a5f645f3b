//! `gyremesh estimate`.

use std::path::{Path, PathBuf};

use clap::{Args, ValueEnum};

use super::args::{AnalysisArgs, InputArgs, is_stdout, output_set, several};
use super::pictures::{PictureArgs, polygon, put_pictures};
use super::report::put_page;
use super::run::{over_reports, tell};
use super::text::estimate::run_summary;
use super::{Status, print, say};
use crate::error::Error;
use crate::output::{
    EncodedBlock, Frame, Frames, OutputSet, SeriesChoice, SeriesFormat, kinematics_means_csv,
    means_csv, mesh_geojson, series, stations_csv, structure_csv, summary_csv, summary_json,
};
use crate::pipeline::{BlockView, EventsOutcome, Outcome, Setup, epochs, find_events_and, run};
use crate::settings::{MeansBy, MeansSettings, Overrides, height_above_ground};
use crate::time::Time;

/// Options of `estimate`.
#[derive(Debug, Args)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "each is an option of its own"
)]
pub(super) struct EstimateArgs {
    /// Folder of the results; `-`: only the series, with --summary-only polygon_summary.csv, to standard output [default: out/NAME, NAME being the folder of the settings file]
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    #[command(flatten)]
    analysis: AnalysisArgs,
    /// Formats of the series, several separated by commas
    #[arg(
        long,
        value_name = "FORMAT",
        value_delimiter = ',',
        default_value = "csv"
    )]
    format: Vec<Format>,
    /// Times of polygons.geojson and of the maps of --plot, RFC 3339; several are allowed [default: the last, and that
    /// of the strongest value]
    #[arg(long, value_name = "TIME", value_parser = Time::parse_rfc3339)]
    at: Vec<Time>,
    #[command(flatten)]
    pictures: PictureArgs,
    /// Polygon whose series --plot draws [default: that of the strongest convergence]
    #[arg(long, value_name = "NAME", requires = "plot")]
    polygon: Option<String>,
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
    /// Print summary.json in place of the summary
    #[arg(long, conflicts_with = "quiet")]
    json: bool,
    #[command(flatten)]
    input: InputArgs,
}

fn means_by(text: &str) -> Result<MeansBy, String> {
    let found = MeansSettings::WORDS.iter().find(|w| w.0 == text);
    found
        .map(|w| w.1)
        .ok_or_else(|| format!("`{text}` is none of hour, day, month, period"))
}

/// A format of the series.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Format {
    /// Text
    Csv,
    /// The same columns, typed, null for missing; with mesh.parquet (GeoParquet)
    Parquet,
    /// The columns of Parquet as an Arrow IPC file
    Arrow,
    /// NetCDF-4 (CF, UGRID): polygons as faces, stations as nodes, with the winds
    Netcdf,
    /// The polygons with their values at the times of --at
    Geojson,
    /// The page of `gyremesh report`
    Html,
}

impl Format {
    /// Its file: the series, or the page.
    fn file(self) -> &'static str {
        match self {
            Self::Csv => "polygons.csv",
            Self::Parquet => "polygons.parquet",
            Self::Arrow => "polygons.arrow",
            Self::Netcdf => "polygons.nc",
            Self::Geojson => "polygons.geojson",
            Self::Html => "report.html",
        }
    }

    /// What it is of the series; the page is none.
    fn series(self) -> Option<SeriesFormat> {
        Some(match self {
            Self::Csv => SeriesFormat::Csv,
            Self::Parquet => SeriesFormat::Parquet,
            Self::Arrow => SeriesFormat::Arrow,
            Self::Netcdf => SeriesFormat::Netcdf,
            Self::Geojson => SeriesFormat::Geojson,
            Self::Html => return None,
        })
    }
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
            instrument_errors: self.errors == Parts::Instrument,
            kinematics: self.kinematics,
            decompose: self.decompose,
            w_at: self.w_at,
            by: self.by,
            ..self.analysis.over(self.input.overrides())
        }
    }

    fn files(&self, folder: &Path) -> Result<OutputSet, Error> {
        let written = |format: &&Format| !self.summary_only || **format == Format::Html;
        let first = self.format.first().filter(written);
        let main = first.map_or("polygon_summary.csv", |format| format.file());
        let more = [
            several(&self.format),
            ("--kinematics", self.kinematics),
            ("--w-at", self.w_at.is_some()),
            ("--decompose", self.decompose),
            ("--by", self.by.is_some()),
            self.pictures.asked(),
            ("--json", self.json),
        ];
        output_set(folder, main, &more)
    }
}

/// One run; where stations moved within the period, one for each part in which none does, with a mesh and a folder of its
/// own.
pub(super) fn estimate(args: &EstimateArgs) -> Result<Status, Error> {
    let overrides = args.overrides();
    let folder = args.out.clone();
    let folder = folder.unwrap_or_else(|| default_folder(&args.input.network));
    let epochs = epochs(&args.input.network, &overrides)?;
    if epochs.len() < 2 {
        return estimate_in(args, &overrides, &folder);
    }
    let all = epochs.len();
    if is_stdout(&folder) || args.json {
        let message = format!(
            "stations moved within the period, which makes {all} runs: name a folder and leave out `--json`, or set \
             `--from` and `--to` to one side of the moves"
        );
        return Err(Error::Options(message));
    }
    let mut done = None;
    let mut refused = None;
    for (k, epoch) in epochs.into_iter().enumerate() {
        let name = format!("epoch{}", k + 1);
        let ends = [("from", epoch.from), ("until", epoch.to)];
        let ends =
            ends.map(|(word, end)| end.map_or(String::new(), |end| format!(" {word} {end}")));
        say(
            "note",
            &format!("{name} of {all}, as stations moved:{}{}", ends[0], ends[1]),
        );
        let overrides = Overrides {
            from: epoch.from,
            to: epoch.to,
            ..overrides.clone()
        };
        match estimate_in(args, &overrides, &folder.join(&name)) {
            Ok(status) if done != Some(Status::SomeInputUnusable) => done = Some(status),
            Ok(_) => {}
            Err(error @ (Error::Reports(_) | Error::Network(_))) => {
                say("warning", &format!("{name} has no results: {error}"));
                refused = Some(error);
            }
            Err(error) => return Err(error),
        }
    }
    match (done, refused) {
        (Some(_), Some(_)) => Ok(Status::SomeInputUnusable),
        (Some(status), None) => Ok(status),
        (None, Some(error)) => Err(error),
        (None, None) => Ok(Status::NotDone),
    }
}

/// One run with one mesh.
fn estimate_in(args: &EstimateArgs, overrides: &Overrides, folder: &Path) -> Result<Status, Error> {
    let mut setup = args.input.setup_with(overrides)?;
    // Without a series there is no file for them.
    if args.summary_only {
        setup.settings.kinematics.write = false;
        setup.settings.w_at = None;
    }
    setup.has_polygons()?;
    let wanted = args.format.iter().filter(|_| !args.summary_only);
    let choice = SeriesChoice {
        formats: wanted.filter_map(|format| format.series()).collect(),
        at: args.at.clone(),
    };
    let page = args.format.contains(&Format::Html);
    let drawn = page || args.pictures.any();
    let shown = args.polygon.as_deref();
    let shown = shown.map(|name| polygon(&setup, name)).transpose()?;
    let polygons = setup.built.polygons.len();
    let run = over_reports(
        &setup.settings,
        args.quiet || args.json,
        |order, progress| {
            let mut set = args.files(folder)?;
            let (encoder, mut series_files) = series(&setup, &choice, &mut set)?;
            let mut frames = Frames::new(polygons, &args.at);
            let encode = |seen: &BlockView| {
                let frames = drawn.then(|| Frames::of(seen, polygons));
                (encoder.encode(seen), frames)
            };
            let write = |(encoded, block): (EncodedBlock, Option<Vec<Frame>>)| {
                frames.add(block.unwrap_or_default());
                series_files.write(&mut set, encoded)
            };
            // The page tells of events too.
            let done = if page {
                let events = find_events_and(&setup, order, encode, write, progress)?;
                Done::Events(Box::new(events))
            } else {
                Done::Run(Box::new(run(&setup, order, encode, write, progress)?))
            };
            Ok((done, set, series_files, frames))
        },
    );
    let (done, mut set, series_files, frames) = run?;
    let outcome = done.outcome();
    let unmet = series_files.finish(&setup, &outcome.extra, &mut set)?;
    put_tables(&mut set, &setup, outcome)?;
    put_pictures(&mut set, &args.pictures, (&setup, outcome), &frames, shown)?;
    if let Done::Events(events) = &done {
        put_page(&mut set, &setup, events, &frames)?;
    }
    let files = set.commit()?;

    for time in unmet {
        let message = format!("polygons.geojson: {time} is no analysis time with reports");
        say("warning", &message);
    }
    let status = tell(&outcome.warnings, &outcome.reading);
    if is_stdout(folder) {
        // It has the series.
    } else if args.json {
        print(&summary_json(&setup, outcome))?;
    } else if !args.quiet {
        print(&run_summary(&setup, outcome, &files))?;
    }
    Ok(status)
}

/// What was run.
enum Done {
    Run(Box<Outcome>),
    Events(Box<EventsOutcome>),
}

impl Done {
    fn outcome(&self) -> &Outcome {
        match self {
            Self::Run(outcome) => outcome,
            Self::Events(events) => &events.run,
        }
    }
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
pub(super) fn default_folder(network: &Path) -> PathBuf {
    let name = network
        .canonicalize()
        .ok()
        .and_then(|path| path.parent()?.file_name().map(PathBuf::from))
        .unwrap_or_else(|| "network".into());
    Path::new("out").join(name)
}
