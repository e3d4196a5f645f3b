//! `gyremesh profile`.

use clap::Args;

use super::Status;
use super::args::{InputArgs, OutputArgs};
use super::pictures::PictureArgs;
use super::run::{over_reports, tell};
use super::text::profile::profile_text;
use crate::error::Error;
use crate::output::plot::profile_picture;
use crate::output::{profile_csv, profile_json};
use crate::pipeline::{self, PolygonProfile};

/// Options of `profile`.
#[derive(Debug, Args)]
pub(super) struct ProfileArgs {
    #[command(flatten)]
    output: OutputArgs,
    #[command(flatten)]
    pictures: PictureArgs,
    #[command(flatten)]
    input: InputArgs,
}

pub(super) fn profile(args: &ProfileArgs) -> Result<Status, Error> {
    let setup = args.input.setup()?;
    let files = args.output.files("profile.csv", &[args.pictures.asked()])?;
    let outcome = over_reports(&setup.settings, args.output.json, |order, progress| {
        pipeline::profile(&setup, order, progress)
    })?;
    if let Some(mut set) = files {
        set.put("profile.csv", profile_csv(&setup, &outcome).as_bytes())?;
        if let Some(profile) = most_complete(&outcome.profiles)
            && let Some(picture) = profile_picture(&setup, &outcome, profile)
        {
            args.pictures.put(&mut set, "profile", &picture)?;
        }
        set.commit()?;
    }
    let status = tell(&outcome.warnings, &outcome.reading);
    args.output.show(
        || profile_json(&setup, &outcome),
        || profile_text(&setup, &outcome),
    )?;
    Ok(status)
}

/// The profile whose vertical motion is largest against its error among those with the most levels.
fn most_complete(profiles: &[PolygonProfile]) -> Option<&PolygonProfile> {
    let levels = |p: &PolygonProfile| p.levels.iter().filter(|l| l.estimate.is_some()).count();
    let most = profiles.iter().map(levels).max()?;
    let strength = |p: &PolygonProfile| {
        let motions = p.levels.iter().filter_map(|l| l.adjusted.or(l.motion));
        let sizes = motions.map(|m| m.value.abs() / m.se.max(m.se_correlated).max(1e-12));
        sizes.fold(0.0, f64::max)
    };
    let complete = profiles.iter().filter(|p| levels(p) == most);
    complete.max_by(|a, b| strength(a).total_cmp(&strength(b)))
}
