//! What the tests of hard polygons share.

use gyremesh::error::{Error, ErrorKind};
use gyremesh::polygon::{BuiltPolygons, build_polygons};
use gyremesh::settings::{PolygonChoice, PolygonLimits, RegionParts, RegionSettings, RingSettings};

use super::{build, network};

pub type Points = [(f64, f64)];

/// A unit square of half a degree with a station in it.
pub const SQUARE: [(f64, f64); 5] = [
    (47.0, 8.0),
    (47.0, 8.7),
    (47.5, 8.7),
    (47.5, 8.0),
    (47.2, 8.3),
];

/// The text of the refusal of rings and regions.
pub fn refusal(points: &Points, rings: Vec<RingSettings>, regions: Vec<RegionSettings>) -> String {
    let error = build(&network(points), true, rings, regions).unwrap_err();
    assert_eq!(error.kind(), ErrorKind::Settings, "{error}");
    error.to_string()
}

pub fn network_refusal(result: Result<BuiltPolygons, Error>) -> String {
    let error = result.unwrap_err();
    assert_eq!(error.kind(), ErrorKind::Network, "{error}");
    error.to_string()
}

pub fn parts(names: &[&str]) -> RegionParts {
    RegionParts::Polygons(names.iter().map(|&n| n.to_string()).collect())
}

pub fn assert_says(text: &str, words: &[&str]) {
    for word in words {
        assert!(text.contains(word), "`{word}` is not in: {text}");
    }
}

pub fn limited(points: &Points, limits: &PolygonLimits) -> BuiltPolygons {
    let choice = PolygonChoice {
        triangles: true,
        rings: vec![],
        regions: vec![],
    };
    build_polygons(&network(points), &choice, limits).unwrap()
}
