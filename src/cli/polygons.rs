//! `gyremesh polygons`.

use std::path::PathBuf;

use clap::Args;

use super::args::MeshArgs;
use super::expect::{ExpectArgs, Expectation};
use super::text::polygons::polygon_table;
use super::{Status, print, say};
use crate::error::Error;
use crate::output::{OutputSet, mesh_csv, mesh_geojson};
use crate::pipeline::Setup;

/// Options of `polygons`.
#[derive(Debug, Args)]
pub(super) struct PolygonsArgs {
    /// Settings file
    network: PathBuf,
    /// Write the files named below into this folder too
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
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
        None => polygon_table(&setup),
    })?;
    Ok(Status::Complete)
}
