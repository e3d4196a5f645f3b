//! Polygons as `GeoJSON` (RFC 7946): WGS 84, exterior rings counter-clockwise, cut at the antimeridian.

use geo::orient::{Direction, Orient};
use geo::{BooleanOps, Coord, LineString, MultiPolygon, Polygon, Rect};
use geographiclib_rs::{DirectGeodesic, Geodesic, InverseGeodesic};
use geojson::{Feature, FeatureCollection, Geometry, GeometryValue, JsonObject, feature::Id};
use serde_json::json;

use super::csv::station_list;
use crate::integral::ExtraPolygon;
use crate::pipeline::Setup;
use crate::polygon::StationPolygon;
use crate::station::{Network, Position};

/// Longest piece of an edge, m. `GeoJSON` joins points by straight lines in longitude and latitude; for 25 km these leave
/// the geodesic by 12 m at 45 degrees (L² tan φ / 8a).
const PIECE: f64 = 25e3;
/// Decimals of the coordinates: 1 cm (RFC 7946, 11.2 advises against more than needed).
const DECIMALS: f64 = 1e7;

/// A polygon of the mesh.
pub(super) struct MeshRow<'a> {
    pub(super) polygon: &'a StationPolygon,
    pub(super) planetary: Option<f64>,
    /// Why it is left out.
    pub(super) excluded: Option<String>,
    /// True if it stands only where stations are missing.
    pub(super) fills_hole: bool,
}

impl MeshRow<'_> {
    /// The columns of `mesh.csv`, and whether it fills a hole.
    pub(super) fn json(&self, network: &Network) -> serde_json::Value {
        let (polygon, shape) = (self.polygon, &self.polygon.shape);
        json!({
            "polygon": polygon.id,
            "kind": polygon.kind.name(),
            "stations": station_list(polygon, network),
            "area_km2": shape.area / 1e6,
            "perimeter_km": shape.perimeter / 1e3,
            "longest_edge_km": shape.longest_edge / 1e3,
            "smallest_angle_deg": shape.smallest_angle,
            "shape_quality": shape.quality,
            "noise_factor_per_m": shape.noise_factor,
            "elevation_spread_m": shape.elevation_spread,
            "slope": shape.slope,
            "planetary_vorticity": self.planetary,
            "fills_hole": self.fills_hole,
            "excluded": self.excluded,
        })
    }
}

/// The polygons of the network, those left out, and those of `extra`, which stand only where stations are missing.
pub(super) fn mesh_rows<'a>(
    setup: &'a Setup,
    extra: &'a [ExtraPolygon],
) -> impl Iterator<Item = MeshRow<'a>> {
    let polygons = setup.built.polygons.iter();
    let used = polygons.zip(&setup.planetary).map(|(polygon, &f)| MeshRow {
        polygon,
        planetary: Some(f),
        excluded: None,
        fills_hole: false,
    });
    let excluded = setup.built.excluded.iter().map(|(polygon, why)| MeshRow {
        polygon,
        planetary: None,
        excluded: Some(why.to_string()),
        fills_hole: false,
    });
    let extra = extra.iter().map(|extra| MeshRow {
        polygon: &extra.polygon,
        planetary: Some(extra.planetary),
        excluded: None,
        fills_hole: true,
    });
    used.chain(excluded).chain(extra)
}

/// `mesh.geojson`: one feature for each polygon, those left out with the reason; `extra` are those that stand only where
/// stations are missing.
#[must_use]
pub fn mesh_geojson(setup: &Setup, extra: &[ExtraPolygon]) -> String {
    let features = mesh_rows(setup, extra)
        .map(|row| {
            let polygon = row.polygon;
            let properties: Option<JsonObject> = match row.json(&setup.network) {
                serde_json::Value::Object(object) => Some(object),
                _ => None,
            };
            Feature {
                bbox: None,
                geometry: Some(geojson_geometry(&outline_geometry(polygon, &setup.network))),
                id: Some(Id::String(polygon.id.clone())),
                properties,
                foreign_members: None,
            }
        })
        .collect();
    let collection = FeatureCollection {
        bbox: None,
        features,
        foreign_members: None,
    };
    let mut text = collection.to_string();
    text.push('\n');
    text
}

pub(super) fn geojson_geometry(polygons: &MultiPolygon<f64>) -> Geometry {
    match polygons.0.as_slice() {
        [one] => Geometry::new(GeometryValue::from(one)),
        _ => Geometry::new(GeometryValue::from(polygons)),
    }
}

/// Outline of a polygon in longitude (x) and latitude (y): edges in pieces along the geodesic, cut at the antimeridian,
/// with the pole's edge where the pole lies inside.
#[must_use]
pub fn outline_geometry(polygon: &StationPolygon, network: &Network) -> MultiPolygon<f64> {
    let geodesic = Geodesic::wgs84();
    let (mut land, mut holes) = (MultiPolygon::new(Vec::new()), MultiPolygon::new(Vec::new()));
    for ring in &polygon.outline {
        let positions: Vec<Position> = ring
            .iter()
            .map(|&s| network.stations()[s].position)
            .collect();
        let (area, _) = crate::polygon::geodesic_area(positions.iter().copied(), &geodesic);
        let part = cut_at_antimeridian(&unrolled(&positions, &geodesic));
        if area >= 0.0 {
            land.0.extend(part.0);
        } else {
            holes.0.extend(part.0);
        }
    }
    if !holes.0.is_empty() {
        land = land.difference(&holes);
    }
    let rounded = land.0.into_iter().map(|polygon| {
        let (exterior, interiors) = polygon.into_inner();
        Polygon::new(round(exterior), interiors.into_iter().map(round).collect())
    });
    MultiPolygon::new(rounded.collect()).orient(Direction::Default)
}

fn round(ring: LineString<f64>) -> LineString<f64> {
    let round = |x: f64| (x * DECIMALS).round() / DECIMALS;
    ring.into_iter()
        .map(|c| Coord {
            x: round(c.x),
            y: round(c.y),
        })
        .collect()
}

/// The ring with continuous longitudes, which may leave -180 to 180; a ring round a pole gets the pole's edge.
fn unrolled(ring: &[Position], geodesic: &Geodesic) -> Polygon<f64> {
    let mut points: Vec<Coord<f64>> = Vec::new();
    let mut push = |longitude: f64, latitude: f64| {
        let x = match points.last() {
            Some(last) => last.x + (longitude - last.x + 180.0).rem_euclid(360.0) - 180.0,
            None => longitude,
        };
        points.push(Coord { x, y: latitude });
    };
    for (k, &p) in ring.iter().enumerate() {
        let q = ring[(k + 1) % ring.len()];
        let (length, azimuth, _, _): (f64, f64, f64, f64) =
            geodesic.inverse(p.latitude(), p.longitude(), q.latitude(), q.longitude());
        push(p.longitude(), p.latitude());
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "an edge is at most 20 000 km long"
        )]
        let pieces = (length / PIECE).ceil().max(1.0) as usize;
        for piece in 1..pieces {
            let along = length * piece as f64 / pieces as f64;
            let (latitude, longitude): (f64, f64) =
                geodesic.direct(p.latitude(), p.longitude(), azimuth, along);
            push(longitude, latitude);
        }
    }
    if let Some(first) = ring.first() {
        push(first.longitude(), first.latitude());
    }
    if let (Some(&first), Some(last)) = (points.first().copied().as_ref(), points.last_mut()) {
        let turns = ((last.x - first.x) / 360.0).round();
        // Exactly whole turns, so that the ring closes on its first point.
        last.x = first.x + 360.0 * turns;
        if turns != 0.0 {
            let last = *last;
            // Counter-clockwise round the north pole is eastward, round the south pole westward.
            let pole = if turns > 0.0 { 90.0 } else { -90.0 };
            points.push(Coord { x: last.x, y: pole });
            points.push(Coord {
                x: first.x,
                y: pole,
            });
        }
    }
    Polygon::new(LineString::new(points), Vec::new())
}

/// Cuts a polygon with continuous longitudes into parts within -180 to 180.
fn cut_at_antimeridian(polygon: &Polygon<f64>) -> MultiPolygon<f64> {
    let x: Vec<f64> = polygon.exterior().coords().map(|c| c.x).collect();
    let low = x.iter().copied().fold(f64::INFINITY, f64::min);
    let high = x.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let turn = |x: f64| ((x + 180.0) / 360.0).floor();
    let (first, last) = (turn(low), turn(high));
    let shift = |polygon: &Polygon<f64>, by: f64| {
        let ring = polygon.exterior().coords().map(|c| Coord {
            x: c.x - by,
            y: c.y,
        });
        Polygon::new(ring.collect(), Vec::new())
    };
    if first >= last || high <= 180.0 + 360.0 * first {
        return MultiPolygon::new(vec![shift(polygon, 360.0 * first)]);
    }
    let mut parts = Vec::new();
    let mut k = first;
    while k <= last {
        let strip = Rect::new(
            Coord {
                x: -180.0 + 360.0 * k,
                y: -90.0,
            },
            Coord {
                x: 180.0 + 360.0 * k,
                y: 90.0,
            },
        );
        let part = polygon.intersection(&strip.to_polygon());
        parts.extend(part.0.iter().map(|p| shift(p, 360.0 * k)));
        k += 1.0;
    }
    MultiPolygon::new(parts)
}
