//! `gyremesh report`.

use std::path::PathBuf;

use clap::Args;

use super::args::{AnalysisArgs, InputArgs, output_set};
use super::estimate::default_folder;
use super::run::{over_reports, tell};
use super::{Status, print, say};
use crate::error::Error;
use crate::output::{Frames, OutputSet, report_html};
use crate::pipeline::{self, CalibrationOutcome, EventsOutcome, Setup};

/// Options of `report`.
#[derive(Debug, Args)]
pub(super) struct PageArgs {
    /// Folder of report.html; `-`: the page to standard output [default: out/NAME, NAME being the folder of the settings file]
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    #[command(flatten)]
    analysis: AnalysisArgs,
    #[command(flatten)]
    input: InputArgs,
}

pub(super) fn report(args: &PageArgs) -> Result<Status, Error> {
    let setup = args
        .input
        .setup_with(&args.analysis.over(args.input.overrides()))?;
    setup.has_polygons()?;
    let folder = args.out.clone();
    let folder = folder.unwrap_or_else(|| default_folder(&args.input.network));
    let polygons = setup.built.polygons.len();
    let (events, frames) = over_reports(&setup.settings, false, |order, progress| {
        let mut frames = Frames::new(polygons, &[]);
        let events = pipeline::find_events_and(
            &setup,
            order,
            |seen| Frames::of(seen, polygons),
            |block| {
                frames.add(block);
                Ok(())
            },
            progress,
        )?;
        Ok((events, frames))
    })?;
    let mut set = output_set(&folder, "report.html", &[])?;
    put_page(&mut set, &setup, &events, &frames)?;
    let files = set.commit()?;
    let status = tell(&events.run.warnings, &events.run.reading);
    for file in files {
        print(&format!("Written to {}\n", file.display()))?;
    }
    Ok(status)
}

/// The page, with the calibration if the reports reach for one.
pub(super) fn put_page(
    set: &mut OutputSet,
    setup: &Setup,
    events: &EventsOutcome,
    frames: &Frames,
) -> Result<(), Error> {
    let calibration = calibration(setup);
    let page = report_html(setup, events, frames, calibration.as_ref())?;
    set.put("report.html", page.as_bytes())
}

/// Needs to read the reports once more.
fn calibration(setup: &Setup) -> Option<CalibrationOutcome> {
    let calibrated = over_reports(&setup.settings, true, |order, progress| {
        pipeline::calibrate(setup, order, progress)
    });
    match calibrated {
        Ok(outcome) => Some(outcome),
        Err(error) => {
            say(
                "note",
                &format!("the report goes without a calibration: {error}"),
            );
            None
        }
    }
}
