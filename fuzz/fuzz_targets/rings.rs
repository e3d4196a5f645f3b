//! Stations on a coarse grid, near the poles and the antimeridian too, joined in any order.
#![no_main]

use gyremesh::error::Place;
use gyremesh::integral::{OMEGA, planetary_vorticity, self_test};
use gyremesh::polygon::{PolygonKind, StationPolygon, build_polygons, triangulate};
use gyremesh::settings::{PolygonChoice, PolygonLimits, RegionParts, RegionSettings, RingSettings};
use gyremesh::station::{Network, Position, Station};
use libfuzzer_sys::fuzz_target;

/// Stations at most; a ring may name each of them.
const MOST: usize = 24;

fn check(polygon: &StationPolygon, positions: &[Position]) {
    let shape = &polygon.shape;
    assert!(shape.area > 0.0 && shape.area.is_finite(), "{}", polygon.id);
    assert!(shape.noise_factor > 0.0 && shape.noise_factor.is_finite());
    assert!((0.0..=360.0).contains(&shape.smallest_angle));
    let weights = polygon.row.weights.iter().flatten();
    assert!(weights.clone().all(|w| w.is_finite()), "{}", polygon.id);
    // The area mean of 2 Omega sin(latitude), to rounding: 1e-6 is 1000 times the accuracy that is promised of a
    // polygon that is not flat.
    if shape.smallest_angle > 1.0 {
        let mean = planetary_vorticity(polygon, positions) / (2.0 * OMEGA);
        assert!(mean.abs() <= 1.0 + 1e-6, "{}: {mean}", polygon.id);
    }
}

fuzz_target!(|data: &[u8]| {
    let [choice, latitude, longitude, count, rest @ ..] = data else {
        return;
    };
    // The step of the grid, degrees, and its corner.
    let step = [0.01, 0.1, 1.0, 4.0][usize::from(choice & 3)];
    let corner = (
        f64::from(*latitude % 181) - 90.0,
        f64::from(*longitude) * 1.5 - 180.0,
    );
    let count = usize::from(*count) % MOST;
    let Some((places, order)) = rest.split_at_checked(2 * count) else {
        return;
    };
    let stations: Vec<Station> = (0..)
        .zip(places.chunks_exact(2))
        .filter_map(|(k, at)| {
            let (north, east) = (f64::from(at[0] % 16) * step, f64::from(at[1] % 16) * step);
            let longitude = (corner.1 + east + 180.0).rem_euclid(360.0) - 180.0;
            // Beyond the pole the grid stays at the pole.
            let position = Position::new((corner.0 + north).min(90.0), longitude).ok()?;
            Some(Station::new(format!("S{k:02}"), position))
        })
        .collect();
    let network = Network::new(stations);
    let names: Vec<String> = order
        .iter()
        .filter(|_| !network.is_empty())
        .map(|&k| {
            network.stations()[usize::from(k) % network.len()]
                .id
                .clone()
        })
        .take(MOST)
        .collect();
    let rings = if names.is_empty() {
        Vec::new()
    } else {
        let place = Place::default();
        vec![RingSettings {
            name: "ring".into(),
            stations: names,
            place,
        }]
    };
    let all = RegionSettings {
        name: "all".into(),
        parts: RegionParts::AllTriangles,
        place: Place::default(),
    };
    let no_limits = choice & 4 == 4;
    let choice = PolygonChoice {
        triangles: true,
        rings,
        regions: if choice & 8 == 8 {
            vec![all]
        } else {
            Vec::new()
        },
    };
    let limits = PolygonLimits {
        smallest_angle: if no_limits { 0.0 } else { 15.0 },
        ..PolygonLimits::default()
    };
    let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
    let every: Vec<usize> = (0..network.len()).collect();
    let triangles = triangulate(&positions, &every);
    if let Ok(triangles) = &triangles {
        // Euler: at most 2 n - 5 triangles.
        assert!(triangles.len() <= 2 * network.len() - 5);
        assert!(triangles.iter().all(|t| t[0] < t[1] && t[0] < t[2]));
    }
    let Ok(built) = build_polygons(&network, &choice, &limits) else {
        return;
    };
    assert!(triangles.is_ok());
    for polygon in built
        .polygons
        .iter()
        .chain(built.excluded.iter().map(|(p, _)| p))
    {
        check(polygon, &positions);
    }
    if !no_limits {
        let test = self_test(&built.polygons, &built.edges, &positions);
        assert!(test.passed, "{test:?}");
        return;
    }
    let is_triangle = |p: &&StationPolygon| p.kind == PolygonKind::Triangle;
    let area = |polygons: Vec<&StationPolygon>| -> f64 {
        let triangles = polygons.into_iter().filter(is_triangle);
        triangles.map(|p| p.shape.area).sum()
    };
    let used = area(built.polygons.iter().collect());
    let left_out = area(built.excluded.iter().map(|(p, _)| p).collect());
    let mut regions = built
        .polygons
        .iter()
        .filter(|p| p.kind == PolygonKind::Region);
    if let Some(all) = regions.next() {
        // Flat triangles that others enclose belong to it.
        let most = (used + left_out) * (1.0 + 1e-9);
        let least = used * (1.0 - 1e-9);
        assert!(
            (least..=most).contains(&all.shape.area),
            "{} {used} {left_out}",
            all.shape.area
        );
    }
});
