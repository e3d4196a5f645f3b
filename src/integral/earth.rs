//! The rotation of the Earth as a known wind: planetary vorticity by the engine itself, and the self-test on it.

use geographiclib_rs::{DirectGeodesic, Geodesic};

use crate::polygon::{DirectedEdge, EdgeSet, StationPolygon};
use crate::station::Position;
use crate::sum::CompensatedSum;
use crate::units::{Wind, sin_cos_degrees};

/// Angular velocity of the Earth, rad/s (IERS conventions and WGS 84, nominal value; from memory).
pub const OMEGA: f64 = 7.292_115e-5;
/// WGS 84: semi-major axis, m.
const A: f64 = 6_378_137.0;
/// WGS 84: flattening.
const FLATTENING: f64 = 1.0 / 298.257_223_563;

/// Largest difference of the self-test, in units of 2Ω: rounding gives some 1e-13 for polygons of 30 km, a wrong azimuth
/// or sign 1e-3 or more.
const ALLOWED: f64 = 1e-9;
/// Accuracy of positions along a geodesic, m (Karney 2013: 15 nm). Where a polygon is small, this times the speed of the
/// surface is much against its area.
const POSITION_ACCURACY: f64 = 15e-9;

/// The largest difference that the accuracy of positions explains, in units of 2Ω: p·δ·n/(2A).
fn allowed(polygon: &StationPolygon) -> f64 {
    let corners = polygon.path.len() as f64;
    ALLOWED + A * POSITION_ACCURACY * corners / (2.0 * polygon.shape.area)
}

/// Polygons that the self-test looks at, evenly spread over all.
const SELF_TEST_POLYGONS: usize = 100;

/// Distance from the axis of the Earth, m: N cos φ.
fn axis_distance(latitude: f64) -> f64 {
    let (sin, cos) = sin_cos_degrees(latitude);
    let e2 = FLATTENING * (2.0 - FLATTENING);
    A / (1.0 - e2 * sin * sin).sqrt() * cos
}

/// Velocity of the Earth's own surface, m/s: Ω times the distance to the axis, eastward.
#[must_use]
pub fn earth_rotation(position: Position) -> Wind {
    Wind {
        u: OMEGA * axis_distance(position.latitude()),
        v: 0.0,
    }
}

/// Area mean of f = 2Ω sin φ, 1/s: the vorticity that the engine finds for the surface velocity of the Earth.
///
/// - **Accuracy**: exact but for rounding and the area (Clairaut: the component along a geodesic is constant); within
///   1e-9 of the table `tests/data/planetary_vorticity.csv`.
/// - **Reference**: `design.md` 3, `methods.md` 2.
#[must_use]
pub fn planetary_vorticity(polygon: &StationPolygon, positions: &[Position]) -> f64 {
    polygon
        .row
        .apply(|station| earth_rotation(positions[station]))
        .0
}

/// Result of the self-test.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct SelfTest {
    /// Polygons tested.
    pub polygons: usize,
    /// Difference between the engine's planetary vorticity and the integral along the edges, in units of 2Ω, where it is
    /// largest against what is allowed.
    pub largest_difference: f64,
    /// Polygon where it was found.
    pub polygon: String,
    /// Largest difference allowed there.
    pub allowed: f64,
    /// True if no polygon goes beyond what it is allowed.
    pub passed: bool,
}

/// Compares the planetary vorticity of polygons with ∮ Ω p² dλ / A, integrated along the edges with positions found
/// from the start of each edge by the direct geodesic problem (8 Gauss points an edge).
///
/// It uses neither the azimuths at the ends nor the trapezoid rule, so a fault of either shows.
#[must_use]
pub fn self_test(polygons: &[StationPolygon], edges: &EdgeSet, positions: &[Position]) -> SelfTest {
    let geodesic = Geodesic::wgs84();
    let step = polygons.len().div_ceil(SELF_TEST_POLYGONS).max(1);
    let mut worst = SelfTest {
        polygons: 0,
        largest_difference: 0.0,
        polygon: String::new(),
        allowed: ALLOWED,
        passed: true,
    };
    let mut worst_ratio = 0.0;
    for polygon in polygons.iter().step_by(step) {
        let circulation: CompensatedSum = polygon
            .path
            .iter()
            .map(|&edge| along_edge(edge, edges, positions, &geodesic))
            .collect();
        let expected = circulation.total() / polygon.shape.area;
        let difference = (planetary_vorticity(polygon, positions) - expected).abs() / (2.0 * OMEGA);
        worst.polygons += 1;
        let ratio = difference / allowed(polygon);
        if ratio > worst_ratio {
            worst_ratio = ratio;
            worst.largest_difference = difference;
            worst.allowed = allowed(polygon);
            worst.polygon.clone_from(&polygon.id);
        }
    }
    worst.passed = worst_ratio <= 1.0;
    worst
}

/// ∫ Ω p² dλ along an edge, m²/s, by Gauss-Legendre in pieces: dλ from successive positions, not from azimuths.
fn along_edge(
    edge: DirectedEdge,
    edges: &EdgeSet,
    positions: &[Position],
    geodesic: &Geodesic,
) -> f64 {
    let (from, to, length) = edges.ends(edge);
    let azimuth = edges.azimuths(edge).0;
    let start = positions[from];
    let at = |s: f64| -> (f64, f64, f64) {
        geodesic.direct(start.latitude(), start.longitude(), azimuth, s)
    };
    // dλ/ds = sin(azimuth)/p: the eight-point rule on Ω p sin(azimuth), with the azimuth of the direct problem.
    let along: CompensatedSum = GAUSS_8
        .iter()
        .map(|&(x, w)| {
            let (latitude, _, azimuth) = at(0.5 * length * (1.0 + x));
            0.5 * length * w * OMEGA * axis_distance(latitude) * sin_cos_degrees(azimuth).0
        })
        .collect();
    // The path must also arrive where the edge ends: what is missing in longitude is circulation missing.
    let (latitude, longitude, _) = at(length);
    let end = positions[to];
    let gap = (longitude - end.longitude() + 180.0).rem_euclid(360.0) - 180.0;
    let p = axis_distance(latitude);
    along.total() - OMEGA * p * p * gap.to_radians()
}

/// Nodes and weights of the eight-point Gauss-Legendre rule (Abramowitz & Stegun 1964, table 25.4).
const GAUSS_8: [(f64, f64); 8] = [
    (-0.960_289_856_497_536_2, 0.101_228_536_290_376_26),
    (-0.796_666_477_413_626_7, 0.222_381_034_453_374_47),
    (-0.525_532_409_916_329, 0.313_706_645_877_887_3),
    (-0.183_434_642_495_649_8, 0.362_683_783_378_362),
    (0.183_434_642_495_649_8, 0.362_683_783_378_362),
    (0.525_532_409_916_329, 0.313_706_645_877_887_3),
    (0.796_666_477_413_626_7, 0.222_381_034_453_374_47),
    (0.960_289_856_497_536_2, 0.101_228_536_290_376_26),
];
