//! Winds with a known vorticity and divergence.
//!
//! Cases given in a plane are laid out on WGS 84 by distance and bearing from an origin and their winds turned into the
//! local frames. What is left of the Earth is second order in size / radius: lengths off by (L/a)²/6, areas by (L/a)²/12.
//! Most cases are shrunk a hundred times in length, which makes vorticity and divergence a hundred times larger.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::f64::consts::{PI, TAU};

use common::{Plane, build, close, network, positions, region, ring, ring_of, triangles, winds};
use gyremesh::align::{Covariance, WindBlock, instrument_covariance};
use gyremesh::check::Flag;
use gyremesh::integral::{OMEGA, estimate, planetary_vorticity};
use gyremesh::polygon::{StationPolygon, flux_rule_error};
use gyremesh::settings::{RegionParts, SensorErrors};
use gyremesh::time::Time;
use gyremesh::units::{FromDirection, Wind};
use nalgebra::{DMatrix, Matrix2, RowVector2};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

type Pairs = Vec<(f64, f64)>;

/// Radius of the Earth for estimates of what its curvature does, m.
const RADIUS: f64 = 6.371e6;
/// A place of middle latitude, where meridians converge.
const PLANE: Plane = Plane {
    origin: (52.0, 5.0),
    shrink: 100.0,
};

/// A case of the plane on the Earth.
struct Case {
    polygon: StationPolygon,
    winds: Pairs,
    shrink: f64,
    /// Largest distance from the origin, m, on the Earth.
    extent: f64,
}

impl Case {
    fn new(plane: Plane, points: &[(f64, f64)], winds: &[(f64, f64)]) -> Self {
        let (_, polygon) = ring_of(&plane.place(points));
        let extent = points.iter().map(|p| p.0.hypot(p.1)).fold(0.0, f64::max);
        Self {
            polygon,
            winds: plane.turn(points, winds),
            shrink: plane.shrink,
            extent: extent / plane.shrink,
        }
    }

    /// Of a field over the plane.
    fn field(points: &[(f64, f64)], field: impl Fn(f64, f64) -> (f64, f64)) -> Self {
        let winds: Pairs = points.iter().map(|&(x, y)| field(x, y)).collect();
        Self::new(PLANE, points, &winds)
    }

    /// Vorticity and divergence in the size of the plane, 1/s.
    fn values(&self) -> (f64, f64) {
        let (z, d) = self.polygon.row.apply(winds(&self.winds));
        (z / self.shrink, d / self.shrink)
    }

    /// Area in the size of the plane, m².
    fn area(&self) -> f64 {
        self.polygon.shape.area * self.shrink * self.shrink
    }

    fn noise_factor(&self) -> f64 {
        self.polygon.shape.noise_factor / self.shrink
    }

    /// Share by which the curvature of the Earth may change a term, and 0.1 m² an area.
    fn share(&self) -> f64 {
        (self.extent / RADIUS).powi(2) + 1e-12 + 0.1 / self.polygon.shape.area
    }

    /// Error of vorticity and divergence that the curvature, and the area's own 0.1 m², may make, 1/s. The area is a
    /// common factor of all terms; the edges are not, so there the largest wind counts.
    fn tolerance(&self) -> f64 {
        let fastest = self
            .winds
            .iter()
            .map(|w| w.0.hypot(w.1))
            .fold(0.0, f64::max);
        let (z, d) = self.values();
        let edges = (self.extent / RADIUS).powi(2) + 1e-12;
        edges * fastest * self.noise_factor() + 0.1 / self.polygon.shape.area * z.abs().max(d.abs())
    }

    fn assert_values(&self, vorticity: f64, divergence: f64) {
        let (z, d) = self.values();
        let tolerance = self.tolerance();
        assert!(
            close(z, vorticity, tolerance),
            "vorticity {z:e}, not {vorticity:e} within {tolerance:e}"
        );
        assert!(
            close(d, divergence, tolerance),
            "divergence {d:e}, not {divergence:e} within {tolerance:e}"
        );
    }
}

/// Test field T0 of `methods.md` 0.
fn t0() -> (Pairs, Pairs) {
    (
        vec![(0.0, 0.0), (60e3, 10e3), (20e3, 50e3)],
        vec![(5.0, 2.0), (8.0, -1.0), (3.0, 6.0)],
    )
}

/// Corners of the regular n-gon, the first at `start` radians from the x axis.
fn regular(n: u32, radius: f64, start: f64) -> Pairs {
    (0..n)
        .map(|k| {
            let (sin, cos) = (start + TAU * f64::from(k) / f64::from(n)).sin_cos();
            (radius * cos, radius * sin)
        })
        .collect()
}

fn from(speed: f64, degrees: f64) -> (f64, f64) {
    let wind = Wind::blowing_from(speed, FromDirection::new(degrees).unwrap());
    (wind.u, wind.v)
}

/// `methods.md` 1.1 [V]: A = 1.4e9 m², F = +235000, C = -5000 m²/s, D = +1.6785714e-4, zeta = -3.5714286e-6 1/s.
/// Tolerance: curvature over 0.6 km, 1e-8 of the terms.
#[test]
fn test_field_t0_has_its_handbook_values() {
    let (points, wind) = t0();
    let case = Case::new(PLANE, &points, &wind);
    case.assert_values(-5000.0 / 1.4e9, 235_000.0 / 1.4e9);
    assert!(close(case.area(), 1.4e9, 1.4e9 * case.share()));
    let (z, d) = case.values();
    // The printed figures have eight digits; the largest term of C is 6e5 m²/s.
    assert!(close(z, -3.571_428_6e-6, 1e-11) && close(d, 1.678_571_4e-4, 1e-10));
    assert!(close(z * case.area(), -5000.0, 0.01));
    assert!(close(d * case.area(), 235_000.0, 0.2));
}

/// `methods.md` 1.1 and 2 [V]: T0 in its full size at 52 N. The azimuthal plane is off by 2.7e-5 of the area for 100 km
/// triangles; tolerance (L/a)² of the terms, 1e-4.
#[test]
fn test_field_t0_in_full_size_is_off_by_the_curvature_only() {
    let (points, wind) = t0();
    let plane = Plane {
        shrink: 1.0,
        ..PLANE
    };
    let case = Case::new(plane, &points, &wind);
    case.assert_values(-5000.0 / 1.4e9, 235_000.0 / 1.4e9);
    assert!(close(case.area(), 1.4e9, 1.4e9 * 2.7e-5));
    assert!(case.tolerance() < 1e-7);
}

/// `methods.md` 1.3 [V]: the pentagon, A = 2312.5 km², D = 9.5135135e-5, zeta = -1.0810811e-6 (line integral; least
/// squares would give 9.3281459e-5 and -6.69344e-8). Tolerance: curvature over 0.6 km.
#[test]
fn the_pentagon_has_the_values_of_the_line_integral() {
    let points = [
        (0.0, 0.0),
        (40e3, -5e3),
        (55e3, 30e3),
        (20e3, 50e3),
        (-10e3, 25e3),
    ];
    let wind = [(5.0, 1.0), (7.0, 2.0), (9.0, -1.0), (4.0, 3.0), (3.0, 2.0)];
    let case = Case::new(PLANE, &points, &wind);
    assert!(close(case.area(), 2312.5e6, 2312.5e6 * case.share()));
    case.assert_values(-2500.0 / 2312.5e6, 220_000.0 / 2312.5e6);
    let (z, d) = case.values();
    assert!(close(z, -1.081_081_1e-6, 1e-11) && close(d, 9.513_513_5e-5, 1e-10));
}

/// `methods.md` 1.3 and 1.4 [V]: on a regular n-gon D = 2/(nR²) Σ r·V, zeta = 2/(nR²) Σ r×V, and the noise factor is
/// 2/(√n R). Tolerance: curvature over 0.3 km.
#[test]
fn a_regular_polygon_equals_the_plane_fit() {
    let radius = 30e3;
    for n in 3..=12 {
        let points = regular(n, radius, 0.3);
        let wind: Pairs = (0..n)
            .map(|k| {
                let k = f64::from(k);
                (7.0 * (1.7 * k).sin() + 3.0, 5.0 * (2.9 * k + 1.0).cos())
            })
            .collect();
        let case = Case::new(PLANE, &points, &wind);
        let factor = 2.0 / (f64::from(n) * radius * radius);
        let pairs = || points.iter().zip(&wind);
        let vorticity: f64 = pairs().map(|(r, w)| r.0 * w.1 - r.1 * w.0).sum();
        let divergence: f64 = pairs().map(|(r, w)| r.0 * w.0 + r.1 * w.1).sum();
        case.assert_values(factor * vorticity, factor * divergence);
        let noise = 2.0 / (f64::from(n).sqrt() * radius);
        assert!(close(case.noise_factor(), noise, noise * case.share()));
        let quality = case.polygon.shape.quality;
        assert!(close(quality, 1.0, case.share()), "{n}: {quality}");
    }
}

/// `methods.md` 1.3: the line integral over a quadrilateral is the area-weighted mean of its two triangles, whichever
/// diagonal cuts it. Tolerance 1e-12 of the terms: rounding.
#[test]
fn a_quadrilateral_is_the_mean_of_its_triangles() {
    let points = PLANE.place(&[(0.0, 0.0), (50e3, -10e3), (40e3, 30e3), (-5e3, 20e3)]);
    let wind = [(5.0, 2.0), (8.0, -1.0), (3.0, 6.0), (-2.0, 4.0)];
    let rings = vec![
        ring("all", &[0, 1, 2, 3]),
        ring("a", &[0, 1, 2]),
        ring("b", &[0, 2, 3]),
        ring("c", &[0, 1, 3]),
        ring("d", &[1, 2, 3]),
    ];
    let built = build(&network(&points), false, rings, vec![]).unwrap();
    let totals: Pairs = built
        .polygons
        .iter()
        .map(|p| {
            let (z, d) = p.row.apply(winds(&wind));
            (z * p.shape.area, d * p.shape.area)
        })
        .collect();
    let rounding = 1e-12 * 10.0 * built.polygons[0].shape.perimeter;
    for (a, b) in [(1, 2), (3, 4)] {
        assert!(close(totals[a].0 + totals[b].0, totals[0].0, rounding));
        assert!(close(totals[a].1 + totals[b].1, totals[0].1, rounding));
    }
}

/// `methods.md` 1.4 [V]: T0 with s = 0.5 m/s gives 1.7677670e-5, the equilateral triangle of side 50 km 2.0e-5 1/s.
/// Tolerance: eight printed digits and the share of curvature.
#[test]
fn noise_factors_are_those_of_the_handbook() {
    let (points, wind) = t0();
    let case = Case::new(PLANE, &points, &wind);
    let se = 0.5 * case.noise_factor();
    assert!(
        close(se, 1.767_767_0e-5, 1e-12 + 1.8e-5 * case.share()),
        "{se:e}"
    );
    let points = regular(3, 50e3 / 3.0_f64.sqrt(), PI / 2.0);
    let case = Case::field(&points, |_, _| (0.0, 0.0));
    let se = 0.5 * case.noise_factor();
    assert!(close(se, 2.0e-5, 2e-5 * case.share()), "{se:e}");
    let angle = case.polygon.shape.smallest_angle;
    assert!(close(angle, 60.0, 60.0 * case.share()), "{angle}");
}

/// `methods.md` 1.4 [V]: q = 0.8660 for the right isosceles triangle, 0.2279 for base 1 and height 0.1; four printed
/// digits. And `s_D` = s √(√3/(A q)).
#[test]
fn shape_quality_is_that_of_the_handbook() {
    let cases = [
        ([(0.0, 0.0), (40e3, 0.0), (0.0, 40e3)], 0.8660),
        ([(0.0, 0.0), (100e3, 0.0), (50e3, 10e3)], 0.2279),
    ];
    for (points, expected) in cases {
        let case = Case::field(&points, |_, _| (0.0, 0.0));
        let q = case.polygon.shape.quality;
        assert!(close(q, expected, 5e-5), "{q}");
        let noise = (3.0_f64.sqrt() / (case.area() * q)).sqrt();
        assert!(close(case.noise_factor(), noise, noise * case.share()));
    }
}

/// `methods.md` 1.4 [D, V]: all directions 10 degrees too large turn T0 into D' = 1.6468684e-4, zeta' = -3.2665258e-5.
/// Tolerance: curvature over 0.6 km.
#[test]
fn a_common_offset_of_direction_mixes_divergence_and_vorticity() {
    let (points, wind) = t0();
    let turned: Pairs = wind
        .iter()
        .map(|&(u, v)| {
            let wind = Wind { u, v };
            let degrees = wind.from_direction().unwrap().degrees() + 10.0;
            from(wind.speed(), degrees.rem_euclid(360.0))
        })
        .collect();
    let case = Case::new(PLANE, &points, &turned);
    let (z, d) = (-5000.0 / 1.4e9, 235_000.0 / 1.4e9);
    let (sin, cos) = 10.0_f64.to_radians().sin_cos();
    case.assert_values(z * cos - d * sin, d * cos + z * sin);
    let (z, d) = case.values();
    assert!(close(z, -3.266_525_8e-5, 1e-10) && close(d, 1.646_868_4e-4, 1e-10));
}

/// Holton 4th ed., ch. 4 no. 1 (`methods.md` 11 no. 1): a square of 1000 km in an easterly that weakens northward by
/// 10 m/s in 500 km: zeta = -2e-5 1/s, C = -2e7 m²/s. Tolerance: curvature over 10 km, 1e-6 of the terms.
#[test]
fn holton_4_1_circulation_about_a_square() {
    let points = [(0.0, 0.0), (1e6, 0.0), (1e6, 1e6), (0.0, 1e6)];
    let case = Case::field(&points, |_, y| (-30.0 + 10.0 * y / 500e3, 0.0));
    case.assert_values(-2e-5, 0.0);
    let circulation = case.values().0 * case.area();
    assert!(close(circulation, -2e7, 200.0), "{circulation}");
}

/// Holton 4th ed., ch. 4 no. 5 (`methods.md` 11 no. 5): V = 1e6 m²/s / r; the annulus from 200 to 400 km has no
/// vorticity, the inner circle 5e-5 1/s and C = 6.28e6 m²/s. On a regular n-gon the estimate is 2V/r exactly; its area is
/// sin(2π/n)/(2π/n) of the circle's, 0.5 % less for n = 36. Tolerance: curvature over 4 km.
#[test]
fn holton_4_5_annulus_without_vorticity() {
    let n = 36;
    let field = |x: f64, y: f64| {
        let r2 = x * x + y * y;
        (-1e6 * y / r2, 1e6 * x / r2)
    };
    let inside = Case::field(&regular(n, 200e3, 0.0), field);
    inside.assert_values(5e-5, 0.0);
    let of_polygon = (TAU / f64::from(n)).sin() / (TAU / f64::from(n));
    let circulation = inside.values().0 * inside.area();
    assert!(close(
        circulation,
        TAU * 1e6 * of_polygon,
        circulation * inside.share()
    ));
    assert!(close(circulation, 6.28e6, 6.28e6 * 0.006));

    // The annulus: the triangles with a corner on the outer circle, as a region with a hole.
    let mut points = regular(n, 200e3, 0.0);
    points.extend(regular(n, 400e3, 0.0));
    let network = network(&PLANE.place(&points));
    let tiles = triangles(&network).unwrap();
    let outer: Vec<String> = tiles
        .polygons
        .iter()
        .filter(|p| p.row.stations.iter().any(|&s| s >= 36))
        .map(|p| p.id.clone())
        .collect();
    assert_eq!(outer.len(), 72);
    let annulus = region("annulus", RegionParts::Polygons(outer));
    let built = build(&network, true, vec![], vec![annulus]).unwrap();
    let annulus = built.polygons.last().unwrap();
    assert_eq!(annulus.outline.len(), 2);
    assert_eq!(annulus.size(), 72);
    let wind: Pairs = points.iter().map(|&(x, y)| field(x, y)).collect();
    let (z, d) = annulus.row.apply(winds(&PLANE.turn(&points, &wind)));
    let tolerance = 5.0 * annulus.shape.noise_factor * (4e3 / RADIUS).powi(2);
    assert!(
        z.abs() < tolerance && d.abs() < tolerance,
        "{z:e} {d:e} {tolerance:e}"
    );
}

/// Holton ch. 3 (`methods.md` 11 no. 6): stations 50 km E, N, W and S report 90/10, 120/4, 90/8, 60/4: D = +2.0e-5,
/// zeta = 0; speed errors of 10 % give at worst 110 % of D and 1.31e-5 1/s as root of the sum of squares. Tolerance:
/// curvature over 0.5 km; the last two as printed.
#[test]
fn holton_3_divergence_of_four_stations() {
    let points = [(50e3, 0.0), (0.0, 50e3), (-50e3, 0.0), (0.0, -50e3)];
    let wind = [
        from(10.0, 90.0),
        from(4.0, 120.0),
        from(8.0, 90.0),
        from(4.0, 60.0),
    ];
    let case = Case::new(PLANE, &points, &wind);
    case.assert_values(0.0, 2.0e-5);

    let network = network(&PLANE.place(&points));
    let polygons = build(&network, false, vec![ring("ring", &[0, 1, 2, 3])], vec![])
        .unwrap()
        .polygons;
    let sensor = SensorErrors {
        speed_sd: 0.0,
        speed_sd_share: 0.1,
        direction_sd: 1e-6,
        ..SensorErrors::default()
    };
    let mut block = WindBlock::empty(vec![Time::from_micros(0)], 4);
    for (station, &(u, v)) in case.winds.iter().enumerate() {
        let wind = Wind { u, v };
        let covariance = instrument_covariance(wind, false, &sensor);
        common::set(&mut block, station, 0, wind, covariance, Flag::Pass);
    }
    let se = estimate(&polygons, &block).divergence_se[0] / PLANE.shrink;
    assert!(close(se, 1.31e-5, 5e-8), "{se:e}");
    let worst: f64 = (0..4)
        .map(|station| {
            let wind = case.winds[station];
            let mut more = vec![(0.0, 0.0); 4];
            more[station] = (0.1 * wind.0, 0.1 * wind.1);
            polygons[0].row.apply(winds(&more)).1.abs() / PLANE.shrink
        })
        .sum();
    assert!(close(worst, 2.2e-5, 5e-10), "{worst:e}");
}

/// `methods.md` 11 no. 14: a square of 400 km, an easterly that grows northward by 8 m/s in 100 km and a southerly that
/// grows eastward by 3 m/s in 200 km: zeta = +9.5e-5 1/s (the published solution takes the easterly as positive u).
/// Tolerance: curvature over 4 km.
#[test]
fn an_easterly_that_grows_northward_is_positive_vorticity() {
    let points = [(0.0, 0.0), (400e3, 0.0), (400e3, 400e3), (0.0, 400e3)];
    let case = Case::field(&points, |x, y| (-8.0 * y / 100e3, 3.0 * x / 200e3));
    case.assert_values(9.5e-5, 0.0);
}

/// `methods.md` 11, closed forms [V]: solid rotation 2w, pure strain 0, pure divergence 2c, uniform wind 0, on any
/// polygon, here a concave one and a thin one. Tolerance: curvature over 0.9 km.
#[test]
fn linear_fields_are_exact_on_any_polygon() {
    let shapes: [&[(f64, f64)]; 3] = [
        &[(0.0, 0.0), (60e3, 10e3), (20e3, 50e3)],
        &[
            (-50e3, -40e3),
            (60e3, -30e3),
            (10e3, 5e3),
            (40e3, 70e3),
            (-30e3, 50e3),
        ],
        &[(-40e3, 0.0), (40e3, 1e3), (0.0, 4e3)],
    ];
    let c = 1e-4;
    for points in shapes {
        Case::field(points, |x, y| (-c * y, c * x)).assert_values(2.0 * c, 0.0);
        Case::field(points, |x, y| (c * x, -c * y)).assert_values(0.0, 0.0);
        Case::field(points, |x, y| (c * y, c * x)).assert_values(0.0, 0.0);
        Case::field(points, |x, y| (c * x, c * y)).assert_values(0.0, 2.0 * c);
        Case::field(points, |_, _| (12.0, -7.0)).assert_values(0.0, 0.0);
        // A uniform wind on top changes nothing.
        Case::field(points, |x, y| (12.0 - c * y, c * x - 7.0)).assert_values(2.0 * c, 0.0);
    }
}

/// `methods.md` 11, closed forms [V]: Rankine vortex of core 20 km and 30 m/s: the regular n-gon on a circle round it
/// gives 2V/r, so beyond the core a triangle has 2 Vm Rc/r², the mean of the disc, though not its own mean. Tolerance:
/// curvature over 0.6 km.
#[test]
fn a_rankine_vortex_gives_twice_speed_by_radius() {
    let (core, fastest) = (20e3, 30.0);
    let field = |x: f64, y: f64| {
        let r: f64 = x.hypot(y);
        let speed = if r < core {
            fastest * r / core
        } else {
            fastest * core / r
        };
        (-speed * y / r, speed * x / r)
    };
    for n in [3, 4, 5, 8, 24] {
        let inside = Case::field(&regular(n, 15e3, 1.0), field);
        inside.assert_values(2.0 * fastest / core, 0.0);
        let outside = Case::field(&regular(n, 60e3, 1.0), field);
        outside.assert_values(2.0 * fastest * core / (60e3 * 60e3), 0.0);
    }
}

/// `methods.md` 2 [V]: u = U0 cos(latitude) has zeta = 2 U0 sin(latitude)/a; on T45 the integral is 2.230e-6 for U0 = 10.
/// The rigid rotation of the ellipsoid with the same U0 = w a has the published mean of f, 1.037244281e-4, times w/Omega.
/// Tolerances: the printed digits; against the sphere's closed form at the middle latitude 0.4 %, which is the
/// flattening of the ellipsoid (1/298 of lengths) and the curvature over 1 degree.
#[test]
fn rotation_about_the_polar_axis() {
    let points = [(45.0, 0.0), (45.0, 1.0), (46.0, 0.5)];
    let (_, polygon) = ring_of(&points);
    let wind = points.map(|(lat, _): (f64, f64)| (10.0 * lat.to_radians().cos(), 0.0));
    let (z, d) = polygon.row.apply(winds(&wind));
    assert!(close(z, 2.230e-6, 5e-10), "{z:e}");
    assert!(d.abs() < 1e-15, "{d:e}");
    let a = 6_378_137.0;
    assert!(close(z, 20.0 * 45.33_f64.to_radians().sin() / a, 0.004 * z));

    let e2 = (2.0 - 1.0 / 298.257_223_563) / 298.257_223_563;
    let rigid = points.map(|(lat, _): (f64, f64)| {
        let (sin, cos) = lat.to_radians().sin_cos();
        (10.0 / (1.0 - e2 * sin * sin).sqrt() * cos, 0.0)
    });
    let z = polygon.row.apply(winds(&rigid)).0;
    let expected = 1.037_244_281e-4 * (10.0 / a) / OMEGA;
    assert!(close(z, expected, 1e-9 * expected), "{z:e} {expected:e}");
}

/// The same rotation on large and small triangles from the equator to beyond both poles; `methods.md` 2. The flux of a
/// symmetric rotation is zero but for the edge rule, θ²/12 of the through-flow.
#[test]
fn rotation_about_the_polar_axis_at_all_latitudes() {
    for lat in [-90.0, -75.0, -30.0, 0.0, 10.0, 60.0, 90.0] {
        for size in [1e3, 30e3, 300e3] {
            let plane = Plane {
                origin: (lat, 170.0),
                shrink: 1.0,
            };
            let points = plane.place(&regular(3, size, 0.7));
            let (network, polygon) = ring_of(&points);
            let wind: Pairs = points
                .iter()
                .map(|p| (10.0 * p.0.to_radians().cos(), 0.0))
                .collect();
            let (z, d) = polygon.row.apply(winds(&wind));
            let expected = 20.0 * polygon.middle.0.to_radians().sin() / 6_378_137.0;
            // The flattening changes 1 %: e² = 0.0067 in the radii of curvature, and more where they mix.
            let curvature = (size / RADIUS).powi(2);
            let tolerance = 3.2e-6 * (0.01 + curvature) + 0.1 / polygon.shape.area * expected.abs();
            assert!(
                close(z, expected, tolerance),
                "{lat} {size}: {z:e} {expected:e}"
            );
            let through = 10.0 * polygon.shape.noise_factor;
            let flux = flux_rule_error(polygon.shape.longest_edge) * through;
            // And what is left of it after rounding.
            assert!(d.abs() <= flux + 1e-11 * through, "{lat} {size}: {d:e}");
            // The planetary vorticity has the same sense, and is Omega a / 10 times as large.
            let planetary = planetary_vorticity(&polygon, &positions(&network));
            let ratio = OMEGA * 6_378_137.0 / 10.0;
            assert!(close(z * ratio, planetary, 1.5e-4 * (0.01 + curvature)));
        }
    }
}

/// Winds, errors and flags of many stations and times, from a fixed seed.
fn random_block(stations: usize, times: usize) -> WindBlock {
    let mut rng = ChaCha8Rng::seed_from_u64(11);
    let minutes = i64::try_from(times).unwrap();
    let axis = (0..minutes)
        .map(|t| Time::from_micros(600_000_000 * t))
        .collect();
    let mut block = WindBlock::empty(axis, stations);
    for station in 0..stations {
        for time in 0..times {
            let mut draw = |scale: f64| scale * (2.0 * rng.random::<f64>() - 1.0);
            let wind = Wind {
                u: draw(20.0),
                v: draw(20.0),
            };
            // L Lᵀ is a covariance whatever L is.
            let (a, b, c) = (draw(1.0), draw(1.0), draw(1.0));
            let covariance = Covariance {
                uu: a * a,
                uv: a * b,
                vv: b * b + c * c,
            };
            common::set(&mut block, station, time, wind, covariance, Flag::Pass);
        }
    }
    block
}

/// Triangles, a ring and a region of a scattered network.
fn scattered() -> Vec<StationPolygon> {
    let points: Pairs = (0..20)
        .map(|k| {
            let k = f64::from(k);
            (90e3 * (1.9 * k).sin(), 80e3 * (2.7 * k + 0.4).cos())
        })
        .collect();
    let plane = Plane {
        origin: (-38.0, 179.9),
        shrink: 1.0,
    };
    let network = network(&plane.place(&points));
    let built = build(
        &network,
        true,
        vec![ring("ring", &[0, 1, 2])],
        vec![region("all", RegionParts::AllTriangles)],
    );
    built.unwrap().polygons
}

/// The engine's kernel over a block against the rows one by one, and its errors against Σ wᵀ C w (`methods.md` 1.4, full
/// form) by a dense matrix of all stations. Tolerance 1e-13 of the largest term: rounding of some twenty terms.
#[test]
fn the_kernel_equals_the_rows_and_the_full_form_of_the_error() {
    let polygons = scattered();
    assert!(polygons.len() > 20);
    let (stations, times) = (20, 300);
    let block = random_block(stations, times);
    let out = estimate(&polygons, &block);
    assert_eq!(out.times, block.times);
    for column in [
        &out.vorticity,
        &out.divergence,
        &out.vorticity_se,
        &out.divergence_se,
    ] {
        assert_eq!(column.len(), polygons.len() * times);
    }
    for (p, polygon) in polygons.iter().enumerate() {
        let noise = polygon.shape.noise_factor;
        let mut weights = DMatrix::zeros(2, 2 * stations);
        for (&s, &[x, y]) in polygon.row.stations.iter().zip(&polygon.row.weights) {
            weights[(0, 2 * s)] = x;
            weights[(0, 2 * s + 1)] = y;
            weights[(1, 2 * s)] = y;
            weights[(1, 2 * s + 1)] = -x;
        }
        for t in 0..times {
            let cell = |s: usize| s * times + t;
            let (z, d) = polygon.row.apply(|s| Wind {
                u: block.u[cell(s)],
                v: block.v[cell(s)],
            });
            let at = p * times + t;
            let rounding = 1e-13 * 100.0 * noise;
            assert!(close(out.vorticity[at], z, rounding));
            assert!(close(out.divergence[at], d, rounding));
            if t % 10 == 0 {
                let mut covariance = DMatrix::zeros(2 * stations, 2 * stations);
                for s in 0..stations {
                    let c = cell(s);
                    let (uu, uv, vv) = (block.var_u[c], block.cov_uv[c], block.var_v[c]);
                    let one = Matrix2::new(uu, uv, uv, vv);
                    covariance
                        .fixed_view_mut::<2, 2>(2 * s, 2 * s)
                        .copy_from(&one);
                }
                let full = &weights * covariance * weights.transpose();
                assert!(close(
                    out.vorticity_se[at],
                    full[(0, 0)].sqrt(),
                    1e-13 * noise
                ));
                assert!(close(
                    out.divergence_se[at],
                    full[(1, 1)].sqrt(),
                    1e-13 * noise
                ));
            }
            assert_eq!(out.flag[at], Flag::Pass);
        }
    }
}

/// A missing station takes its polygons away at that time and touches nothing else; the worst flag of the stations
/// stands. Exact: nothing is computed differently.
#[test]
#[expect(clippy::float_cmp, reason = "the same numbers must come out")]
fn a_missing_station_costs_its_own_polygons_only() {
    let polygons = scattered();
    let times = 40;
    let whole = random_block(20, times);
    let mut block = whole.clone();
    let nothing = (Wind::default(), Covariance::default());
    common::set(&mut block, 3, 7, nothing.0, nothing.1, Flag::Missing);
    for (station, time, flag) in [
        (5, 7, Flag::Suspect),
        (5, 8, Flag::Suspect),
        (6, 8, Flag::NotEvaluated),
    ] {
        block.flag[station * times + time] = flag;
    }
    let expected = estimate(&polygons, &whole);
    let found = estimate(&polygons, &block);
    for (p, polygon) in polygons.iter().enumerate() {
        let uses = |s: usize| polygon.row.stations.contains(&s);
        for t in 0..times {
            let at = p * times + t;
            let flag = match t {
                7 if uses(3) => Flag::Missing,
                7 | 8 if uses(5) => Flag::Suspect,
                _ => Flag::Pass,
            };
            assert_eq!(found.flag[at], flag, "{} at {t}", polygon.id);
            if flag == Flag::Missing {
                assert_eq!((found.vorticity[at], found.divergence[at]), (0.0, 0.0));
                continue;
            }
            assert_eq!(found.vorticity[at], expected.vorticity[at]);
            assert_eq!(found.divergence[at], expected.divergence[at]);
            assert_eq!(found.vorticity_se[at], expected.vorticity_se[at]);
            assert_eq!(found.divergence_se[at], expected.divergence_se[at]);
        }
    }
    // The case is there: some polygon lost its value, some kept it.
    assert!(found.flag.contains(&Flag::Missing) && found.flag.contains(&Flag::Suspect));
    // All stations not evaluated: the polygon is not either.
    let mut block = whole;
    block.flag.fill(Flag::NotEvaluated);
    let flags = estimate(&polygons, &block).flag;
    assert!(flags.iter().all(|&f| f == Flag::NotEvaluated));
}

/// `methods.md` 1.4, full form: `s_D`² = Σ aᵀ C a is 0 if the only error lies along the wind and the wind across a, as
/// in a pure vortex with exact directions. Rounding must not leave the root of a negative number. Tolerance 1e-7 of the
/// noise: the root of the rounding of the sum.
#[test]
fn an_error_that_cannot_reach_a_value_leaves_none() {
    let sensor = SensorErrors {
        direction_sd: 0.0,
        ..SensorErrors::default()
    };
    for turn in 0..200 {
        let points = regular(3, 30e3, 0.01 * f64::from(turn));
        let case = Case::field(&points, |x, y| (-2e-4 * y, 2e-4 * x));
        let mut block = WindBlock::empty(vec![Time::from_micros(0)], 3);
        for station in 0..3 {
            // Exactly across the weight of the divergence, whatever the Earth does to the plane.
            let k = case.polygon.row.stations.iter().position(|&s| s == station);
            let [x, y] = case.polygon.row.weights[k.unwrap()];
            let scale = 6.0 / x.hypot(y);
            let wind = Wind {
                u: scale * x,
                v: scale * y,
            };
            let covariance = instrument_covariance(wind, false, &sensor);
            common::set(&mut block, station, 0, wind, covariance, Flag::Pass);
        }
        let out = estimate(std::slice::from_ref(&case.polygon), &block);
        let noise = case.polygon.shape.noise_factor;
        let (z, d) = (out.vorticity_se[0], out.divergence_se[0]);
        assert!(d.abs() < 1e-7 * noise, "turn {turn}: {d:e}");
        // Along the wind is along the weight of the vorticity: 0.3 m/s is 5 % of 6 m/s.
        assert!(close(z, 0.3 * noise, 1e-9 * noise), "turn {turn}: {z:e}");
    }
}

/// `methods.md` 1.4 [V]: isotropic errors give vorticity and divergence the same error, s times the noise factor.
/// Tolerance: rounding.
#[test]
fn isotropic_errors_reach_both_values_alike() {
    let polygons = scattered();
    let mut block = random_block(20, 1);
    block.var_u.fill(0.25);
    block.var_v.fill(0.25);
    block.cov_uv.fill(0.0);
    let out = estimate(&polygons, &block);
    for (p, polygon) in polygons.iter().enumerate() {
        let expected = 0.5 * polygon.shape.noise_factor;
        assert!(close(out.vorticity_se[p], expected, 1e-12 * expected));
        assert!(close(out.divergence_se[p], expected, 1e-12 * expected));
        // cov(D, zeta) = Σ aᵀ C b = 0: the two weights of a station stand at right angles.
        let covariance: f64 = polygon
            .row
            .weights
            .iter()
            .map(|&[x, y]| (RowVector2::new(x, y) * RowVector2::new(y, -x).transpose())[0])
            .sum();
        assert!(covariance.abs() < 1e-15 * expected * expected);
    }
}
