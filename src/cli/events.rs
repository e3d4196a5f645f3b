//! `gyremesh events`.

use clap::Args;

use super::Status;
use super::args::{InputArgs, OutputArgs};
use super::run::{over_reports, tell};
use super::text::events::bulletin;
use crate::error::Error;
use crate::output::{arrivals_csv, events_csv, events_geojson, events_json, shifts_csv};
use crate::pipeline;

/// Options of `events`.
#[derive(Debug, Args)]
pub(super) struct EventsArgs {
    #[command(flatten)]
    output: OutputArgs,
    #[command(flatten)]
    input: InputArgs,
}

pub(super) fn events(args: &EventsArgs) -> Result<Status, Error> {
    let setup = args.input.setup()?;
    let files = args.output.files("events.csv", &[])?;
    let outcome = over_reports(&setup.settings, args.output.json, |order, progress| {
        pipeline::find_events(&setup, order, progress)
    })?;
    if let Some(mut set) = files {
        set.put("events.csv", events_csv(&setup, &outcome).as_bytes())?;
        set.put("shifts.csv", shifts_csv(&setup, &outcome).as_bytes())?;
        set.put("arrivals.csv", arrivals_csv(&setup, &outcome).as_bytes())?;
        let shapes = events_geojson(&setup, &outcome);
        set.put("events.geojson", shapes.as_bytes())?;
        set.commit()?;
    }
    let status = tell(&outcome.run.warnings, &outcome.run.reading);
    args.output.show(
        || events_json(&setup, &outcome),
        || bulletin(&setup, &outcome),
    )?;
    Ok(status)
}
