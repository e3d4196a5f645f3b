//! The polygons of a network as JSON, for `gyremesh polygons --json`.

use serde_json::{Value, json};

use super::geojson::mesh_rows;
use crate::pipeline::Setup;

/// All polygons with the columns of `mesh.csv`, those left out with the reason.
#[must_use]
pub fn mesh_json(setup: &Setup) -> String {
    let built = &setup.built;
    let polygons = mesh_rows(setup, &[]).map(|row| row.json(&setup.network));
    let polygons: Vec<Value> = polygons.collect();
    let warnings: Vec<String> = built.warnings.iter().map(ToString::to_string).collect();
    let value = json!({
        "network": setup.settings.name,
        "stations": setup.network.len(),
        "used": built.polygons.len(),
        "excluded": built.excluded.len(),
        "flat_triangles": built.flat,
        "polygons": polygons,
        "warnings": warnings,
    });
    format!("{value:#}\n")
}
