//! `gyremesh profile`.

use clap::Args;

use super::args::{InputArgs, OutputArgs};
use super::run::{over_reports, tell};
use super::text::profile::profile_text;
use super::{Status, print};
use crate::error::Error;
use crate::output::{OutputSet, profile_csv, profile_json};
use crate::pipeline;

/// Options of `profile`.
#[derive(Debug, Args)]
pub(super) struct ProfileArgs {
    #[command(flatten)]
    output: OutputArgs,
    #[command(flatten)]
    input: InputArgs,
}

pub(super) fn profile(args: &ProfileArgs) -> Result<Status, Error> {
    let setup = args.input.setup()?;
    let outcome = over_reports(&setup.settings, args.output.json, |order, progress| {
        pipeline::profile(&setup, order, progress)
    })?;
    if let Some(folder) = &args.output.out {
        let mut set = OutputSet::new(folder)?;
        set.put("profile.csv", profile_csv(&setup, &outcome).as_bytes())?;
        set.commit()?;
    }
    let status = tell(&outcome.warnings, &outcome.reading);
    print(&if args.output.json {
        profile_json(&setup, &outcome)
    } else {
        profile_text(&setup, &outcome)
    })?;
    Ok(status)
}
