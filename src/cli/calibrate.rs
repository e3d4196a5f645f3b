//! `gyremesh calibrate`.

use std::path::{Path, PathBuf};

use clap::Args;

use super::args::{InputArgs, OutputArgs};
use super::pictures::PictureArgs;
use super::run::{over_reports, tell};
use super::text::calibration::calibration_text;
use super::{Status, say};
use crate::error::Error;
use crate::output::plot::calibration_picture;
use crate::output::{
    OutputSet, calibration_csv, calibration_json, corrected_list, corrected_list_section,
    corrections_of, maintenance_csv,
};
use crate::pipeline::{self, CalibrationOutcome, Setup};

/// Options of `calibrate`.
#[derive(Debug, Args)]
pub(super) struct CalibrateArgs {
    #[command(flatten)]
    output: OutputArgs,
    #[command(flatten)]
    pictures: PictureArgs,
    /// Write a station list with the corrections and their origin
    #[arg(long, value_name = "FILE")]
    apply: Option<PathBuf>,
    #[command(flatten)]
    input: InputArgs,
}

pub(super) fn calibrate(args: &CalibrateArgs) -> Result<Status, Error> {
    let setup = args.input.setup()?;
    let files = args
        .output
        .files("maintenance.csv", &[args.pictures.asked()])?;
    let outcome = over_reports(&setup.settings, args.output.json, |order, progress| {
        pipeline::calibrate(&setup, order, progress)
    })?;
    if let Some(mut set) = files {
        let maintenance = maintenance_csv(&setup, &outcome);
        set.put("maintenance.csv", maintenance.as_bytes())?;
        let calibration = calibration_csv(&setup, &outcome);
        set.put("calibration.csv", calibration.as_bytes())?;
        let picture = calibration_picture(&setup, &outcome);
        args.pictures.put(&mut set, "calibration", &picture)?;
        set.commit()?;
    }
    let status = tell(&outcome.warnings, &outcome.reading);
    args.output.show(
        || calibration_json(&setup, &outcome),
        || calibration_text(&setup, &outcome),
    )?;
    if let Some(file) = &args.apply {
        apply(file, &setup, &outcome)?;
    }
    Ok(status)
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
    say(
        "note",
        &format!(
            "{} corrects {corrected} stations; `estimate` uses it when the settings read it:\n\n{}",
            file.display(),
            corrected_list_section(&name)
        ),
    );
    Ok(())
}
