//! What several tests need.
#![allow(dead_code, reason = "each test uses a part of it")]
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

pub mod faults;
pub mod hard;
pub mod turbulence;

use std::path::{Path, PathBuf};

use geographiclib_rs::{DirectGeodesic, Geodesic};
use gyremesh::error::{Error, Place};
use gyremesh::polygon::{BuiltPolygons, StationPolygon, build_polygons};
use gyremesh::settings::{PolygonChoice, PolygonLimits, RegionParts, RegionSettings, RingSettings};
use gyremesh::station::{Network, Position, Station};
use gyremesh::units::Wind;

/// Settings of the demo with triangles that come and go, written into `folder`.
pub fn remeshed_demo(folder: &Path) -> PathBuf {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let settings = std::fs::read_to_string(root.join("networks/ostrin/network.toml")).unwrap();
    let stations = root.join("networks/ostrin/stations.csv");
    let settings = settings
        .replace("\"stations.csv\"", &format!("'{}'", stations.display()))
        .replace("../../examples", root.join("examples").to_str().unwrap())
        .replace("[limits]", "[polygons]\nmissing = \"remesh\"\n[limits]");
    let path = folder.join("network.toml");
    std::fs::write(&path, settings).unwrap();
    path
}

/// No limits at all.
pub const NO_LIMITS: PolygonLimits = PolygonLimits {
    smallest_angle: 0.0,
    longest_edge: None,
    smallest_area: 0.0,
    largest_area: None,
    elevation_spread: None,
    slope_error: None,
    vertical_shear: 0.01,
    largest_age: None,
};

/// A network of stations `S000`, `S001`, ... at (latitude, longitude).
pub fn network(points: &[(f64, f64)]) -> Network {
    let stations = points
        .iter()
        .enumerate()
        .map(|(k, &(lat, lon))| Station::new(format!("S{k:03}"), Position::new(lat, lon).unwrap()));
    Network::new(stations.collect())
}

pub fn positions(network: &Network) -> Vec<Position> {
    network.stations().iter().map(|s| s.position).collect()
}

fn id(station: usize) -> String {
    format!("S{station:03}")
}

/// A named ring of station numbers.
pub fn ring(name: &str, stations: &[usize]) -> RingSettings {
    RingSettings {
        name: name.into(),
        stations: stations.iter().map(|&s| id(s)).collect(),
        place: Place::default(),
    }
}

pub fn region(name: &str, parts: RegionParts) -> RegionSettings {
    RegionSettings {
        name: name.into(),
        parts,
        place: Place::default(),
    }
}

pub fn triangles(network: &Network) -> Result<BuiltPolygons, Error> {
    build(network, true, vec![], vec![])
}

pub fn build(
    network: &Network,
    triangles: bool,
    rings: Vec<RingSettings>,
    regions: Vec<RegionSettings>,
) -> Result<BuiltPolygons, Error> {
    let choice = PolygonChoice {
        triangles,
        rings,
        regions,
    };
    build_polygons(network, &choice, &NO_LIMITS)
}

/// The ring through all points, as one polygon.
pub fn ring_of(points: &[(f64, f64)]) -> (Network, StationPolygon) {
    let network = network(points);
    let all: Vec<usize> = (0..points.len()).collect();
    let built = build(&network, false, vec![ring("ring", &all)], vec![]).unwrap();
    let polygon = built.polygons.into_iter().next().unwrap();
    (network, polygon)
}

/// Winds by station number.
pub fn winds(values: &[(f64, f64)]) -> impl Fn(usize) -> Wind + '_ {
    |s| Wind {
        u: values[s].0,
        v: values[s].1,
    }
}

/// `"a b;c d"` as pairs.
pub fn pairs(text: &str) -> Vec<(f64, f64)> {
    text.split(';')
        .map(|pair| {
            let (a, b) = pair.split_once(' ').unwrap();
            (a.parse().unwrap(), b.parse().unwrap())
        })
        .collect()
}

/// Rows of a table of `tests/data`.
pub fn table(name: &str) -> Vec<csv::StringRecord> {
    let path = format!("{}/tests/data/{name}", env!("CARGO_MANIFEST_DIR"));
    let mut reader = csv::ReaderBuilder::new()
        .comment(Some(b'#'))
        .from_path(path)
        .unwrap();
    reader.records().map(Result::unwrap).collect()
}

pub fn close(found: f64, expected: f64, tolerance: f64) -> bool {
    (found - expected).abs() <= tolerance
}

/// A plane that touches the Earth at `origin` (latitude, longitude), x towards east and y towards north there; distances
/// and bearings from the origin are true. Its coordinates are `shrink` times as long as on the Earth.
#[derive(Debug, Clone, Copy)]
pub struct Plane {
    pub origin: (f64, f64),
    pub shrink: f64,
}

impl Plane {
    /// Position of the point (x, y), m, and by how much a wind turns clockwise in its frame of true north, degrees.
    fn direct(self, (x, y): (f64, f64)) -> ((f64, f64), f64) {
        let bearing = x.atan2(y).to_degrees();
        let (lat, lon) = self.origin;
        let (lat, lon, azimuth): (f64, f64, f64) =
            Geodesic::wgs84().direct(lat, lon, bearing, x.hypot(y) / self.shrink);
        ((lat, lon), azimuth - bearing)
    }

    /// Latitude and longitude of points (x, y), m.
    pub fn place(self, points: &[(f64, f64)]) -> Vec<(f64, f64)> {
        points.iter().map(|&p| self.direct(p).0).collect()
    }

    /// Winds of the plane in the local frame of each point.
    pub fn turn(self, points: &[(f64, f64)], winds: &[(f64, f64)]) -> Vec<(f64, f64)> {
        let pairs = points.iter().zip(winds);
        pairs
            .map(|(&p, &(u, v))| {
                let (sin, cos) = self.direct(p).1.to_radians().sin_cos();
                (u * cos + v * sin, v * cos - u * sin)
            })
            .collect()
    }
}

/// Sets a wind of a block, of no age.
pub fn set(
    block: &mut gyremesh::align::WindBlock,
    station: usize,
    time: usize,
    wind: Wind,
    covariance: gyremesh::align::Covariance,
    flag: gyremesh::check::Flag,
) {
    let value = gyremesh::align::AlignedWind {
        wind,
        covariance,
        flag,
        age: 0.0,
    };
    block.set(station, time, &value);
}
