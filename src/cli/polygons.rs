//! `gyremesh polygons`.

use std::path::PathBuf;

use clap::Args;

use super::args::{MeshArgs, OutputArgs};
use super::expect::{ExpectArgs, Expectation};
use super::text::polygons::polygon_table;
use super::{Status, say};
use crate::error::Error;
use crate::output::{mesh_csv, mesh_geojson, mesh_json};
use crate::pipeline::Setup;

/// Options of `polygons`.
#[derive(Debug, Args)]
pub(super) struct PolygonsArgs {
    /// Settings file
    network: PathBuf,
    #[command(flatten)]
    output: OutputArgs,
    #[command(flatten)]
    mesh: MeshArgs,
    #[command(flatten)]
    expect: ExpectArgs,
}

pub(super) fn polygons(args: &PolygonsArgs) -> Result<Status, Error> {
    let setup = Setup::read(&args.network, &args.mesh.overrides())?;
    for warning in &setup.built.warnings {
        say("warning", &warning.to_string());
    }
    let expectation = if args.expect.expect {
        Some(Expectation::of(&setup, &args.expect)?)
    } else {
        None
    };
    let main = if args.expect.expect {
        "expected.csv"
    } else {
        "mesh.csv"
    };
    if let Some(mut set) = args.output.files(main, &[])? {
        set.put("mesh.geojson", mesh_geojson(&setup, &[]).as_bytes())?;
        set.put("mesh.csv", mesh_csv(&setup).as_bytes())?;
        if let Some(expectation) = &expectation {
            set.put("expected.csv", expectation.csv(&setup).as_bytes())?;
        }
        set.commit()?;
    }
    match expectation {
        Some(expectation) => args
            .output
            .show(|| expectation.json(&setup), || expectation.text(&setup))?,
        None => args
            .output
            .show(|| mesh_json(&setup), || polygon_table(&setup))?,
    }
    Ok(Status::Complete)
}
