//! The polygons of a network as JSON, for `gyremesh polygons --json`.

use serde_json::{Value, json};

use super::csv::station_list;
use crate::pipeline::Setup;
use crate::polygon::StationPolygon;

/// All polygons with the columns of `mesh.csv`, those left out with the reason.
#[must_use]
pub fn mesh_json(setup: &Setup) -> String {
    let built = &setup.built;
    let used = built.polygons.iter().zip(&setup.planetary);
    let used = used.map(|(p, &planetary)| polygon(setup, p, Some(planetary), None));
    let excluded = built.excluded.iter();
    let excluded = excluded.map(|(p, why)| polygon(setup, p, None, Some(why.to_string())));
    let warnings: Vec<String> = built.warnings.iter().map(ToString::to_string).collect();
    let value = json!({
        "network": setup.settings.name,
        "stations": setup.network.len(),
        "used": built.polygons.len(),
        "excluded": built.excluded.len(),
        "flat_triangles": built.flat,
        "polygons": used.chain(excluded).collect::<Vec<Value>>(),
        "warnings": warnings,
    });
    format!("{value:#}\n")
}

fn polygon(
    setup: &Setup,
    polygon: &StationPolygon,
    planetary: Option<f64>,
    excluded: Option<String>,
) -> Value {
    let shape = &polygon.shape;
    json!({
        "polygon": polygon.id,
        "kind": polygon.kind.name(),
        "stations": station_list(polygon, &setup.network),
        "area_km2": shape.area / 1e6,
        "perimeter_km": shape.perimeter / 1e3,
        "longest_edge_km": shape.longest_edge / 1e3,
        "smallest_angle_deg": shape.smallest_angle,
        "shape_quality": shape.quality,
        "noise_factor_per_m": shape.noise_factor,
        "elevation_spread_m": shape.elevation_spread,
        "slope": shape.slope,
        "planetary_vorticity": planetary,
        "excluded": excluded,
    })
}
