//! The command line: one function for each command, no physics.

pub mod args;
mod calibration;
mod events;
mod expect;
mod message;
mod profile;
mod reading;
mod screening;

use std::io::{self, Write};
use std::path::{Path, PathBuf};

use clap::Parser;
use indicatif::{ProgressBar, ProgressStyle};

use self::args::{
    Args, CalibrateArgs, CheckArgs, Command, EstimateArgs, EventsArgs, Format, PolygonsArgs,
    ProfileArgs,
};
use self::expect::Expectation;
use crate::error::{Error, ErrorKind, nearest_name};
use crate::output::{
    FlaggedFiles, FlaggedFormats, OutputSet, SeriesChoice, SeriesFormat, arrivals_csv,
    calibration_csv, calibration_json, corrected_list, corrected_list_section, corrections_of,
    events_csv, events_geojson, events_json, maintenance_csv, means_csv, mesh_csv, mesh_geojson,
    profile_csv, profile_json, reading_json, series, shifts_csv, stations_csv, structure_csv,
    summary_csv, summary_json,
};
use crate::pipeline::{self, CalibrationOutcome, Reading, Setup, Sources};
use crate::report::InputOrder;
use crate::settings::Overrides;
use crate::station::Network;

/// How a run ended; the value is the exit status.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[repr(u8)]
pub enum Status {
    /// Complete.
    Complete = 0,
    /// Complete, but some input was unusable.
    SomeInputUnusable = 1,
    /// Not done.
    NotDone = 2,
}

/// Runs the program with the arguments of the process.
#[must_use]
pub fn main() -> Status {
    let args = match Args::try_parse() {
        Ok(args) => args,
        Err(error) => {
            // Help and version are no errors; a closed pipe under them is none either.
            let status = if error.use_stderr() {
                Status::NotDone
            } else {
                Status::Complete
            };
            let _ = error.print();
            return status;
        }
    };
    let result = match &args.command {
        Command::Check(args) => check(args),
        Command::Polygons(args) => polygons(args),
        Command::Estimate(args) => estimate(args),
        Command::Calibrate(args) => calibrate(args),
        Command::Events(args) => events(args),
        Command::Profile(args) => profile(args),
    };
    match result {
        Ok(status) => status,
        Err(error) if error.is_closed_pipe() => Status::Complete,
        Err(error) => {
            message::say("error", &error.to_string());
            Status::NotDone
        }
    }
}

/// Results for the user.
fn print(text: &str) -> Result<(), Error> {
    let mut out = io::stdout().lock();
    out.write_all(text.as_bytes())
        .and_then(|()| out.flush())
        .map_err(|e| Error::write(Path::new("standard output"), e))
}

fn check(args: &CheckArgs) -> Result<Status, Error> {
    use_threads(args.threads);
    let sources = Sources::read(&args.network, &Overrides::from(args))?;
    let (settings, network) = (&sources.settings, &sources.network);
    let explain = match (&args.explain, args.at) {
        (Some(id), Some(at)) => Some((station(network, id)?, at)),
        _ => None,
    };
    let formats = FlaggedFormats {
        csv: args.format.contains(&Format::Csv),
        parquet: args.format.contains(&Format::Parquet),
    };
    let read = |order: InputOrder| {
        let mut set = match &args.out {
            Some(folder) => Some(OutputSet::new(folder)?),
            None => None,
        };
        let mut files = None;
        let reading = Reading::with(settings, network, order, explain, |window, neighbours| {
            let Some(set) = &mut set else {
                return Ok(());
            };
            let files = match &mut files {
                Some(files) => files,
                None => files.insert(FlaggedFiles::new(settings, network, formats, set)?),
            };
            files.write(set, window, neighbours)
        })?;
        if let (Some(set), Some(files)) = (&mut set, files) {
            files.finish(set)?;
        }
        Ok::<_, Error>((reading, set))
    };
    let (reading, set) = match read(InputOrder::first_try(&settings.reports)) {
        Err(error) if error.kind() == ErrorKind::Order => read(InputOrder::Any)?,
        result => result?,
    };
    if let Some(set) = set {
        set.commit()?;
    }
    for warning in sources.warnings.iter().chain(&reading.warnings) {
        message::say("warning", &warning.to_string());
    }
    for failure in &reading.failures {
        message::say("warning", &failure.to_string());
    }
    print(&match explain {
        _ if args.json => reading_json(settings, network, &reading),
        Some((s, _)) => {
            let id = &network.stations()[s].id; // a station of the network
            screening::explained_text(id, &reading.explained, &reading)
        }
        None => reading::reading_text(settings, network, &reading),
    })?;
    Ok(if reading.failures.len() == reading.files.len() {
        Status::NotDone
    } else if reading.is_complete() {
        Status::Complete
    } else {
        Status::SomeInputUnusable
    })
}

/// The station of an identifier.
fn station(network: &Network, id: &str) -> Result<usize, Error> {
    network.find(id).ok_or_else(|| {
        let ids = network.stations().iter().map(|s| s.id.as_str());
        let near = nearest_name(id, ids);
        let meant = near.map_or_else(String::new, |near| format!("; is `{near}` meant?"));
        Error::Network(format!("there is no station `{id}`{meant}"))
    })
}

/// Limits the threads; fails only if a pool is already there, which then serves as well.
fn use_threads(threads: Option<usize>) {
    if let Some(threads) = threads {
        let _ = rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .build_global();
    }
}

fn polygons(args: &PolygonsArgs) -> Result<Status, Error> {
    let setup = Setup::read(&args.network, &Overrides::from(args))?;
    for warning in &setup.built.warnings {
        message::say("warning", &warning.to_string());
    }
    let expectation = if args.expect {
        Some(Expectation::of(&setup, args)?)
    } else {
        None
    };
    if let Some(folder) = &args.out {
        let mut set = OutputSet::new(folder)?;
        set.put("mesh.geojson", mesh_geojson(&setup, &[]).as_bytes())?;
        set.put("mesh.csv", mesh_csv(&setup).as_bytes())?;
        if let Some(expectation) = &expectation {
            set.put("expected.csv", expectation.csv(&setup).as_bytes())?;
        }
        set.commit()?;
    }
    print(&match expectation {
        Some(expectation) => expectation.text(&setup),
        None => message::polygon_table(&setup),
    })?;
    Ok(Status::Complete)
}

fn estimate(args: &EstimateArgs) -> Result<Status, Error> {
    use_threads(args.threads);
    let mut setup = Setup::read(&args.network, &Overrides::from(args))?;
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
        .unwrap_or_else(|| default_folder(&args.network));
    let choice = SeriesChoice {
        formats: if args.summary_only {
            Vec::new()
        } else {
            args.format.iter().map(|&f| f.into()).collect()
        },
        at: args.at.clone(),
    };
    let bar = progress_bar(args.quiet);
    let run = |order: InputOrder| {
        let mut set = OutputSet::new(&folder)?;
        let (encoder, mut series_files) = series(&setup, &choice, &mut set)?;
        let outcome = pipeline::run(
            &setup,
            order,
            |seen| encoder.encode(seen),
            |encoded| series_files.write(&mut set, encoded),
            |rows| bar.set_position(rows),
        )?;
        Ok::<_, Error>((outcome, set, series_files))
    };
    let result = match run(InputOrder::first_try(&setup.settings.reports)) {
        Err(error) if error.kind() == ErrorKind::Order => {
            message::say("note", &format!("{error}: they are sorted first"));
            run(InputOrder::Any)
        }
        result => result,
    };
    bar.finish_and_clear();
    let (outcome, mut set, series_files) = result?;

    for time in series_files.finish(&setup, &outcome.extra, &mut set)? {
        let message = format!("polygons.geojson: {time} is no analysis time with reports");
        message::say("warning", &message);
    }
    set.put(
        "mesh.geojson",
        mesh_geojson(&setup, &outcome.extra).as_bytes(),
    )?;
    set.put("stations.csv", stations_csv(&setup, &outcome).as_bytes())?;
    set.put(
        "polygon_summary.csv",
        summary_csv(&setup, &outcome).as_bytes(),
    )?;
    if setup.settings.means.by.is_some() {
        set.put("polygon_means.csv", means_csv(&setup, &outcome).as_bytes())?;
    }
    if setup.settings.errors.complete {
        set.put("structure.csv", structure_csv(&outcome).as_bytes())?;
    }
    set.put("summary.json", summary_json(&setup, &outcome).as_bytes())?;
    let files = set.commit()?;

    for warning in &outcome.warnings {
        message::say("warning", &warning.to_string());
    }
    for failure in &outcome.reading.failures {
        message::say("warning", &failure.to_string());
    }
    if !args.quiet {
        print(&message::run_summary(&setup, &outcome, &files))?;
    }
    Ok(if outcome.reading.is_complete() {
        Status::Complete
    } else {
        Status::SomeInputUnusable
    })
}

impl From<Format> for SeriesFormat {
    fn from(format: Format) -> Self {
        match format {
            Format::Csv => Self::Csv,
            Format::Parquet => Self::Parquet,
            Format::Arrow => Self::Arrow,
            Format::Netcdf => Self::Netcdf,
            Format::Geojson => Self::Geojson,
        }
    }
}

fn calibrate(args: &CalibrateArgs) -> Result<Status, Error> {
    use_threads(args.threads);
    let setup = Setup::read(&args.network, &Overrides::from(args))?;
    let bar = progress_bar(args.json);
    let run = |order| pipeline::calibrate(&setup, order, |rows| bar.set_position(rows));
    let result = match run(InputOrder::first_try(&setup.settings.reports)) {
        Err(error) if error.kind() == ErrorKind::Order => run(InputOrder::Any),
        result => result,
    };
    bar.finish_and_clear();
    let outcome = result?;
    if let Some(folder) = &args.out {
        let mut set = OutputSet::new(folder)?;
        let maintenance = maintenance_csv(&setup, &outcome);
        set.put("maintenance.csv", maintenance.as_bytes())?;
        let calibration = calibration_csv(&setup, &outcome);
        set.put("calibration.csv", calibration.as_bytes())?;
        set.commit()?;
    }
    for warning in &outcome.warnings {
        message::say("warning", &warning.to_string());
    }
    for failure in &outcome.reading.failures {
        message::say("warning", &failure.to_string());
    }
    print(&if args.json {
        calibration_json(&setup, &outcome)
    } else {
        calibration::calibration_text(&setup, &outcome)
    })?;
    if let Some(file) = &args.apply {
        apply(file, &setup, &outcome)?;
    }
    Ok(if outcome.reading.is_complete() {
        Status::Complete
    } else {
        Status::SomeInputUnusable
    })
}

fn profile(args: &ProfileArgs) -> Result<Status, Error> {
    use_threads(args.threads);
    let setup = Setup::read(&args.network, &Overrides::from(args))?;
    let bar = progress_bar(args.json);
    let run = |order| pipeline::profile(&setup, order, |rows| bar.set_position(rows));
    let result = match run(InputOrder::first_try(&setup.settings.reports)) {
        Err(error) if error.kind() == ErrorKind::Order => run(InputOrder::Any),
        result => result,
    };
    bar.finish_and_clear();
    let outcome = result?;
    if let Some(folder) = &args.out {
        let mut set = OutputSet::new(folder)?;
        set.put("profile.csv", profile_csv(&setup, &outcome).as_bytes())?;
        set.commit()?;
    }
    for warning in &outcome.warnings {
        message::say("warning", &warning.to_string());
    }
    for failure in &outcome.reading.failures {
        message::say("warning", &failure.to_string());
    }
    print(&if args.json {
        profile_json(&setup, &outcome)
    } else {
        profile::profile_text(&setup, &outcome)
    })?;
    Ok(if outcome.reading.is_complete() {
        Status::Complete
    } else {
        Status::SomeInputUnusable
    })
}

fn events(args: &EventsArgs) -> Result<Status, Error> {
    use_threads(args.threads);
    let setup = Setup::read(&args.network, &Overrides::from(args))?;
    let bar = progress_bar(args.json);
    let run = |order| pipeline::find_events(&setup, order, |rows| bar.set_position(rows));
    let result = match run(InputOrder::first_try(&setup.settings.reports)) {
        Err(error) if error.kind() == ErrorKind::Order => run(InputOrder::Any),
        result => result,
    };
    bar.finish_and_clear();
    let outcome = result?;
    if let Some(folder) = &args.out {
        let mut set = OutputSet::new(folder)?;
        set.put("events.csv", events_csv(&setup, &outcome).as_bytes())?;
        set.put("shifts.csv", shifts_csv(&setup, &outcome).as_bytes())?;
        set.put("arrivals.csv", arrivals_csv(&setup, &outcome).as_bytes())?;
        let shapes = events_geojson(&setup, &outcome);
        set.put("events.geojson", shapes.as_bytes())?;
        set.commit()?;
    }
    for warning in &outcome.run.warnings {
        message::say("warning", &warning.to_string());
    }
    for failure in &outcome.run.reading.failures {
        message::say("warning", &failure.to_string());
    }
    print(&if args.json {
        events_json(&setup, &outcome)
    } else {
        events::bulletin(&setup, &outcome)
    })?;
    Ok(if outcome.run.reading.is_complete() {
        Status::Complete
    } else {
        Status::SomeInputUnusable
    })
}

/// Writes the station list with the corrections, and says how to use it.
fn apply(file: &Path, setup: &Setup, outcome: &CalibrationOutcome) -> Result<(), Error> {
    let corrections = corrections_of(setup, outcome);
    let folder = match file.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    };
    let name = file.file_name().unwrap_or_default().to_string_lossy();
    let mut set = OutputSet::new(folder)?;
    set.put(&name, corrected_list(setup, &corrections).as_bytes())?;
    set.commit()?;
    let corrected = corrections.iter().flatten().count();
    message::say(
        "note",
        &format!(
            "{} corrects {corrected} stations; `estimate` uses it when the settings read it:\n\n{}",
            file.display(),
            corrected_list_section(&name)
        ),
    );
    Ok(())
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

/// On stderr, and only on a terminal.
fn progress_bar(quiet: bool) -> ProgressBar {
    if quiet {
        return ProgressBar::hidden();
    }
    let bar = ProgressBar::new_spinner();
    if let Ok(style) = ProgressStyle::with_template("{spinner} {human_pos} reports read, {per_sec}")
    {
        bar.set_style(style);
    }
    bar
}
