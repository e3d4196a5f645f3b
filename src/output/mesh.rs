//! The polygons of a network as JSON, for `gyremesh polygons --json`.

use serde_json::{Value, json};

use super::csv::station_list;
use super::geojson::mesh_rows;
use crate::pipeline::Setup;

/// All polygons with the columns of `mesh.csv`, those left out with the reason.
#[must_use]
pub fn mesh_json(setup: &Setup) -> String {
    let built = &setup.built;
    let polygons = mesh_rows(setup, &[]).map(|row| {
        let shape = &row.polygon.shape;
        json!({
            "polygon": row.polygon.id,
            "kind": row.polygon.kind.name(),
            "stations": station_list(row.polygon, &setup.network),
            "area_km2": shape.area / 1e6,
            "perimeter_km": shape.perimeter / 1e3,
            "longest_edge_km": shape.longest_edge / 1e3,
            "smallest_angle_deg": shape.smallest_angle,
            "shape_quality": shape.quality,
            "noise_factor_per_m": shape.noise_factor,
            "elevation_spread_m": shape.elevation_spread,
            "slope": shape.slope,
            "planetary_vorticity": row.planetary,
            "excluded": row.excluded,
        })
    });
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
