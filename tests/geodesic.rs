//! The engine against tables of GeographicLib, SciPy and NumPy, and against published figures.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::collections::BTreeSet;

use common::{close, network, pairs, positions, ring_of, table, triangles, winds};
use gyremesh::integral::{OMEGA, planetary_vorticity, self_test};
use gyremesh::polygon::sphere::{cap_centre, unit_vector};
use gyremesh::polygon::triangulate;
use gyremesh::station::Position;

/// `planetary_vorticity.py`: 240 rings, integrated without the edge rule. Tolerance 1e-9 relative, of 2 Omega where the
/// ring straddles the equator and the mean itself nearly vanishes; small rings round a pole inherit the 0.1 m2 of the
/// area (SOURCES.md). What is left is GeographicLib's position error of some nanometres times 465 m/s.
#[test]
fn planetary_vorticity_of_240_rings() {
    let rows = table("planetary_vorticity.csv");
    assert!(rows.len() >= 200);
    for row in &rows {
        let points = pairs(&row[2]);
        let (network, polygon) = ring_of(&points);
        let area: f64 = row[3].parse().unwrap();
        let expected: f64 = row[4].parse().unwrap();
        let found = planetary_vorticity(&polygon, &positions(&network));
        let of_area = 0.1 / area;
        assert!(
            close(polygon.shape.area, area, 0.1 + 1e-12 * area),
            "area of ring {}: {} {area}",
            &row[0],
            polygon.shape.area
        );
        let scale = if &row[1] == "equator" {
            2.0 * OMEGA
        } else {
            expected.abs()
        };
        assert!(
            close(found, expected, scale * (1e-9 + of_area)),
            "{} {}: {found:e} {expected:e}",
            &row[0],
            &row[1]
        );
    }
}

/// `line_integral.py`: NumPy and GeographicLib, random winds. Tolerance 1e-9 of the largest term, wind / length, plus
/// the area's own 0.1 m2.
#[test]
fn line_integrals_of_300_polygons() {
    let rows = table("line_integral.csv");
    assert!(rows.len() >= 300);
    for row in &rows {
        let (points, wind) = (pairs(&row[1]), pairs(&row[2]));
        let (_, polygon) = ring_of(&points);
        let [area, vorticity, divergence] = [3, 6, 7].map(|k| row[k].parse::<f64>().unwrap());
        let (z, d) = polygon.row.apply(winds(&wind));
        // Circulation and flux do not know the area: to 1e-9 of wind times perimeter.
        let [circulation, flux] = [4, 5].map(|k| row[k].parse::<f64>().unwrap());
        let (c, f) = polygon.circulation_and_flux(winds(&wind));
        let largest = 20.0 * polygon.shape.perimeter;
        assert!(
            close(c, circulation, 1e-9 * largest),
            "polygon {}: {c} {circulation}",
            &row[0]
        );
        assert!(
            close(f, flux, 1e-9 * largest),
            "polygon {}: {f} {flux}",
            &row[0]
        );
        let scale = polygon.shape.noise_factor;
        let tolerance = 1e-9 * scale + 0.1 / area * vorticity.abs().max(divergence.abs());
        assert!(
            close(z, vorticity, tolerance),
            "polygon {}: {z:e} {vorticity:e}",
            &row[0]
        );
        assert!(
            close(d, divergence, tolerance),
            "polygon {}: {d:e} {divergence:e}",
            &row[0]
        );
    }
}

/// `spherical_delaunay.py`: faces of SciPy's convex hull of the unit vectors. A face whose cap holds the antipode of the
/// network's centre is the back of the hull, no triangle of the network.
#[test]
fn spherical_delaunay_equals_the_convex_hull() {
    let rows = table("spherical_delaunay.csv");
    let names: BTreeSet<String> = rows.iter().map(|r| r[0].to_string()).collect();
    assert_eq!(names.len(), 5);
    for name in names {
        let of = |kind: &str| -> Vec<Vec<f64>> {
            let rows = rows.iter().filter(|r| r[0] == name && &r[1] == kind);
            rows.map(|r| (2..5).map(|k| r[k].parse().unwrap()).collect())
                .collect()
        };
        let stations: Vec<Position> = of("station")
            .iter()
            .map(|s| Position::new(s[1], s[2]).unwrap())
            .collect();
        let directions: Vec<_> = stations.iter().map(|&p| unit_vector(p)).collect();
        let centre = cap_centre(&directions).unwrap();
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "the table holds small whole numbers"
        )]
        let hull: BTreeSet<[usize; 3]> = of("face")
            .iter()
            .map(|f| [f[0] as usize, f[1] as usize, f[2] as usize])
            .filter(|f| {
                let [a, b, c] = f.map(|s| directions[s]);
                let normal = (b - a).cross(&(c - a));
                // Outward normal: the antipode lies beyond the face's plane if this is negative.
                normal.dot(&a) >= normal.dot(&-centre)
            })
            .map(|mut f| {
                let lowest = (0..3).min_by_key(|&k| f[k]).unwrap();
                f.rotate_left(lowest);
                f
            })
            .collect();
        let all: Vec<usize> = (0..stations.len()).collect();
        let found: BTreeSet<[usize; 3]> =
            triangulate(&stations, &all).unwrap().into_iter().collect();
        assert!(found.len() > stations.len(), "{name}");
        assert_eq!(found, hull, "{name}");
    }
}

/// Check values of `methods.md` 2 [V]: area, perimeter, mean of f.
#[test]
fn handbook_polygons() {
    type Case = (&'static [(f64, f64)], f64, f64);
    let cases: [Case; 5] = [
        (
            &[(45.0, 0.0), (45.0, 1.0), (46.0, 0.5)],
            4_376_881_021.527,
            1.037_244_281e-4,
        ),
        (
            &[(52.0, 5.0), (52.0, 5.7), (52.4, 5.35)],
            1_068_474_240.633,
            1.151_341_933e-4,
        ),
        (
            &[(60.0, 10.0), (60.0, 12.0), (61.0, 11.0)],
            6_193_704_468.813,
            1.267_265_680e-4,
        ),
        (
            &[(-17.0, 179.0), (-17.0, -179.0), (-16.0, 180.0)],
            11_813_598_680.034,
            -4.183_068_340e-5,
        ),
        (
            &[(-45.0, 1.0), (-45.0, 0.0), (-46.0, 0.5)],
            4_376_881_021.527,
            -1.037_244_281e-4,
        ),
    ];
    for (points, area, f) in cases {
        let (network, polygon) = ring_of(points);
        assert!(
            close(polygon.shape.area, area, 0.01),
            "{points:?}: {}",
            polygon.shape.area
        );
        let found = planetary_vorticity(&polygon, &positions(&network));
        assert!(close(found, f, 1e-13), "{points:?}: {found:e}");
    }
    let (network, across) = ring_of(&[(-1.0, 0.0), (0.0, 1.0), (1.0, 0.0)]);
    assert!(planetary_vorticity(&across, &positions(&network)).abs() < 1e-18);
    // T45: perimeter, and the pitfall of meridian convergence: u = 10 everywhere turns.
    let (_, t45) = ring_of(&[(45.0, 0.0), (45.0, 1.0), (46.0, 0.5)]);
    assert!(close(t45.shape.perimeter, 314_468.491, 1e-3));
    let (z, d) = t45.row.apply(winds(&[(10.0, 0.0); 3]));
    assert!(close(z, 1.5680e-6, 5e-11) && d.abs() < 1e-15, "{z:e} {d:e}");
    let (z, d) = t45.row.apply(winds(&[(0.0, 10.0); 3]));
    assert!(
        z.abs() < 1e-15 && close(d, -1.5680e-6, 5e-11),
        "{z:e} {d:e}"
    );
}

/// `methods.md` 2 [V]: the octant of the Earth; mean of f 7.3084454e-5, area 63 758 202 715 511 m2.
#[test]
fn an_eighth_of_the_earth() {
    let (network, polygon) = ring_of(&[(0.0, 0.0), (0.0, 90.0), (90.0, 0.0)]);
    assert!(close(polygon.shape.area, 63_758_202_715_511.0, 1.0));
    assert!(close(
        planetary_vorticity(&polygon, &positions(&network)),
        7.308_445_4e-5,
        5e-13
    ));
}

/// The self-test of the geometry is small on real networks and counts what it looked at.
#[test]
fn self_test_of_a_sound_network_is_rounding() {
    let points: Vec<(f64, f64)> = (0..40)
        .map(|k| {
            let k = f64::from(k);
            (
                60.0 + 2.0 * (k * 0.7).sin() + 0.01 * k,
                179.0 + 3.0 * (k * 1.3).cos(),
            )
        })
        .collect();
    let network = network(&points);
    let built = triangles(&network).unwrap();
    let test = self_test(&built.polygons, &built.edges, &positions(&network));
    assert!(test.polygons > 20);
    assert!(test.largest_difference < 1e-11, "{test:?}");
}
