//! `mesh.parquet`: the polygons of `mesh.geojson` as GeoParquet 1.1, outlines as well-known binary.

use std::sync::Arc;

use arrow_array::{ArrayRef, BinaryArray, BooleanArray, Float64Array, RecordBatch, StringArray};
use arrow_schema::{DataType, Field, Schema};
use geo::{BoundingRect, LineString, MultiPolygon, Polygon};
use parquet::arrow::ArrowWriter;
use parquet::basic::{Compression, ZstdLevel};
use parquet::errors::Result;
use parquet::file::metadata::KeyValue;
use parquet::file::properties::WriterProperties;
use serde_json::json;

use super::csv::station_list;
use super::geojson::{MeshRow, mesh_rows, outline_geometry};
use crate::integral::ExtraPolygon;
use crate::pipeline::Setup;
use crate::polygon::StationPolygon;

/// zstd's usual level.
const ZSTD: i32 = 3;

/// The file; `extra` are polygons that stand only where stations are missing.
///
/// # Errors
/// The library's refusal.
pub(super) fn mesh_parquet(setup: &Setup, extra: &[ExtraPolygon]) -> Result<Vec<u8>> {
    let rows: Vec<MeshRow> = mesh_rows(setup, extra).collect();
    let outlines: Vec<MultiPolygon<f64>> = rows
        .iter()
        .map(|row| outline_geometry(row.polygon, &setup.network))
        .collect();
    let (mut fields, mut columns): (Vec<Field>, Vec<ArrayRef>) = (Vec::new(), Vec::new());
    let mut put = |name: &str, units: &str, kind: DataType, nullable: bool, column: ArrayRef| {
        let field = Field::new(name, kind, nullable);
        fields.push(if units.is_empty() {
            field
        } else {
            field.with_metadata([("units".to_string(), units.to_string())].into())
        });
        columns.push(column);
    };
    let words = |of: &dyn Fn(&MeshRow) -> String| -> ArrayRef {
        Arc::new(StringArray::from_iter_values(rows.iter().map(of)))
    };
    let ids = words(&|row| row.polygon.id.clone());
    put("polygon", "", DataType::Utf8, false, ids);
    let kinds = words(&|row| row.polygon.kind.name().into());
    put("kind", "", DataType::Utf8, false, kinds);
    let stations = words(&|row| station_list(row.polygon, &setup.network));
    put("stations", "", DataType::Utf8, false, stations);
    type Of = fn(&StationPolygon) -> Option<f64>;
    let numbers: [(&str, &str, Of); 8] = [
        ("area_km2", "km2", |p| Some(p.shape.area / 1e6)),
        ("perimeter_km", "km", |p| Some(p.shape.perimeter / 1e3)),
        ("longest_edge_km", "km", |p| {
            Some(p.shape.longest_edge / 1e3)
        }),
        ("smallest_angle_deg", "degree", |p| {
            Some(p.shape.smallest_angle)
        }),
        ("shape_quality", "1", |p| Some(p.shape.quality)),
        ("noise_factor_per_m", "m-1", |p| Some(p.shape.noise_factor)),
        ("elevation_spread_m", "m", |p| p.shape.elevation_spread),
        ("slope", "1", |p| p.shape.slope),
    ];
    for (name, units, of) in numbers {
        let values = rows
            .iter()
            .map(|row| of(row.polygon).filter(|v| v.is_finite()));
        let values: Float64Array = values.collect();
        put(name, units, DataType::Float64, true, Arc::new(values));
    }
    let planetary: Float64Array = rows.iter().map(|row| row.planetary).collect();
    let planetary = Arc::new(planetary);
    put(
        "planetary_vorticity",
        "s-1",
        DataType::Float64,
        true,
        planetary,
    );
    let fills: Vec<bool> = rows.iter().map(|row| row.fills_hole).collect();
    let fills = Arc::new(BooleanArray::from(fills));
    put("fills_hole", "", DataType::Boolean, false, fills);
    let excluded: StringArray = rows.iter().map(|row| row.excluded.as_deref()).collect();
    put("excluded", "", DataType::Utf8, true, Arc::new(excluded));
    let shapes = BinaryArray::from_iter_values(outlines.iter().map(well_known));
    put("geometry", "", DataType::Binary, false, Arc::new(shapes));

    let schema = Arc::new(Schema::new(fields));
    let batch = RecordBatch::try_new(Arc::clone(&schema), columns)?;
    let metadata = super::file_metadata(setup);
    let metadata = metadata.map(|(key, value)| KeyValue::new(key.into(), value));
    let geo = KeyValue::new("geo".into(), about(&outlines));
    let properties = WriterProperties::builder()
        .set_compression(Compression::ZSTD(ZstdLevel::try_new(ZSTD)?))
        .set_key_value_metadata(Some(metadata.into_iter().chain([geo]).collect()))
        .build();
    let mut writer = ArrowWriter::try_new(Vec::new(), schema, Some(properties))?;
    writer.write(&batch)?;
    writer.into_inner()
}

/// The metadata of GeoParquet 1.1. Without `crs` the coordinates are longitude and latitude on WGS 84 (OGC:CRS84);
/// `edges` is left out, since the outlines are in pieces short enough for straight lines.
fn about(outlines: &[MultiPolygon<f64>]) -> String {
    let kind = |outline: &MultiPolygon<f64>| match outline.0.len() {
        1 => "Polygon",
        _ => "MultiPolygon",
    };
    let mut kinds: Vec<&str> = outlines.iter().map(kind).collect();
    kinds.sort_unstable();
    kinds.dedup();
    let boxes = || outlines.iter().filter_map(BoundingRect::bounding_rect);
    let least =
        |of: fn(geo::Coord) -> f64| boxes().map(|b| of(b.min())).fold(f64::INFINITY, f64::min);
    let most = |of: fn(geo::Coord) -> f64| {
        boxes()
            .map(|b| of(b.max()))
            .fold(f64::NEG_INFINITY, f64::max)
    };
    json!({
        "version": "1.1.0",
        "primary_column": "geometry",
        "columns": { "geometry": {
            "encoding": "WKB",
            "geometry_types": kinds,
            "orientation": "counterclockwise",
            "bbox": [least(|c| c.x), least(|c| c.y), most(|c| c.x), most(|c| c.y)],
        } },
    })
    .to_string()
}

/// Well-known binary, little-endian (OGC 06-103r4, 8.2).
fn well_known(outline: &MultiPolygon<f64>) -> Vec<u8> {
    let mut out = Vec::new();
    match outline.0.as_slice() {
        [one] => put_polygon(&mut out, one),
        all => {
            out.push(1);
            put_count(&mut out, 6);
            put_count(&mut out, all.len());
            for polygon in all {
                put_polygon(&mut out, polygon);
            }
        }
    }
    out
}

fn put_polygon(out: &mut Vec<u8>, polygon: &Polygon<f64>) {
    out.push(1);
    put_count(out, 3);
    put_count(out, 1 + polygon.interiors().len());
    put_ring(out, polygon.exterior());
    for ring in polygon.interiors() {
        put_ring(out, ring);
    }
}

fn put_ring(out: &mut Vec<u8>, ring: &LineString<f64>) {
    put_count(out, ring.0.len());
    for c in ring.coords() {
        out.extend_from_slice(&c.x.to_le_bytes());
        out.extend_from_slice(&c.y.to_le_bytes());
    }
}

fn put_count(out: &mut Vec<u8>, n: usize) {
    // No outline has four thousand million points.
    out.extend_from_slice(&u32::try_from(n).unwrap_or(u32::MAX).to_le_bytes());
}
