//! Rings named by the user: what is accepted, what is refused, and in which words.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use common::hard::{Points, SQUARE, assert_says, parts, refusal};
use common::{Plane, build, close, network, positions, region, ring, ring_of};
use geographiclib_rs::Geodesic;
use gyremesh::error::{ErrorKind, Place};
use gyremesh::polygon::{InvalidPolygon, PolygonKind, defects, geodesic_area};
use gyremesh::settings::RegionParts;

#[test]
fn a_ring_that_crosses_itself_has_its_edges_named() {
    let bow = ring("bow", &[0, 1, 3, 2]);
    let text = refusal(&SQUARE, vec![bow], vec![]);
    assert_eq!(
        text.lines().count(),
        1,
        "one crossing, one line expected: {text}"
    );
    assert_says(
        &text,
        &["ring `bow`: the edge from `S001` to `S003` crosses the edge from `S002` to `S000`"],
    );
    // Over the date line and over a pole the edges cross where they do on the Earth.
    let text = refusal(
        &[(0.0, 179.0), (0.0, -179.0), (1.0, 179.0), (1.0, -179.0)],
        vec![ring("bow", &[0, 1, 2, 3])],
        vec![],
    );
    assert_says(&text, &["`S001` to `S002`", "`S003` to `S000`"]);
    let text = refusal(
        &[(85.0, 0.0), (85.0, 180.0), (85.0, 90.0), (84.0, -90.0)],
        vec![ring("bow", &[0, 1, 2, 3])],
        vec![],
    );
    assert_says(&text, &["`S000` to `S001`", "`S002` to `S003`"]);
}

/// A pentagram crosses itself five times, and all are told.
#[test]
fn every_crossing_of_a_pentagram_is_told() {
    let plane = Plane {
        origin: (-60.0, 100.0),
        shrink: 1.0,
    };
    let points: Vec<(f64, f64)> = (0..5)
        .map(|k| {
            let (sin, cos) = (std::f64::consts::TAU * f64::from(k) / 5.0).sin_cos();
            (50e3 * cos, 50e3 * sin)
        })
        .collect();
    let network = network(&plane.place(&points));
    let found = defects(&[0, 2, 4, 1, 3], &network);
    assert_eq!(found.len(), 5, "{found:?}");
    assert!(
        found
            .iter()
            .all(|d| matches!(d, InvalidPolygon::EdgesCross { .. }))
    );
    assert!(defects(&[0, 1, 2, 3, 4], &network).is_empty());
}

/// `methods.md` 1.3: collinear vertices are allowed. Stations along the equator and along a meridian lie on the edge.
#[test]
fn a_station_on_the_side_of_a_ring_is_accepted() {
    let rings: [&Points; 3] = [
        &[(0.0, 0.0), (0.0, 1.0), (0.0, 2.0), (1.0, 1.0)],
        &[(0.0, 10.0), (0.0, 9.0), (0.0, 8.0), (0.0, 7.5), (-1.0, 9.0)],
        &[(50.0, 7.0), (50.5, 7.0), (51.0, 7.0), (50.5, 8.0)],
    ];
    for points in rings {
        let (network, polygon) = ring_of(points);
        assert_eq!(polygon.size(), points.len());
        let area = geodesic_area(positions(&network).into_iter(), &Geodesic::wgs84()).0;
        assert!(close(polygon.shape.area, area.abs(), 0.1));
    }
}

/// Out and back on one line is no ring, though its stations differ: the third station stands on the first edge. On the
/// equator and on meridians that holds on the ellipsoid exactly.
#[test]
fn a_spike_is_refused() {
    let mut accepted = Vec::new();
    for k in 0..40 {
        let start = -170.0 + 8.5 * f64::from(k);
        let equator = [
            (0.0, start),
            (0.0, start + 2.0),
            (0.0, start + 1.0),
            (1.0, start + 0.7),
        ];
        let lat = -60.0 + 3.0 * f64::from(k);
        let meridian = [
            (lat, start),
            (lat + 1.3, start),
            (lat + 0.4, start),
            (lat + 0.7, start + 1.0),
        ];
        for points in [equator, meridian] {
            match build(
                &network(&points),
                false,
                vec![ring("spike", &[0, 1, 2, 3])],
                vec![],
            ) {
                Ok(_) => accepted.push(points),
                Err(error) => {
                    assert_eq!(error.kind(), ErrorKind::Settings);
                    assert_says(&error.to_string(), &["ring `spike`", "`S000` to `S001`"]);
                }
            }
        }
    }
    assert!(
        accepted.is_empty(),
        "{} of 80 were accepted, first {:?}",
        accepted.len(),
        accepted.first()
    );
}

#[test]
fn an_unknown_station_is_named_with_the_nearest() {
    let mut typo = ring("west", &[0, 1, 2]);
    typo.stations[1] = "S0O1".into();
    typo.place = Place {
        file: "network.toml".into(),
        line: Some(12),
        column: None,
    };
    let text = refusal(&SQUARE, vec![typo], vec![]);
    assert_says(
        &text,
        &["network.toml:12", "`west`", "`S0O1`", "is `S001` meant?"],
    );
    let mut strange = ring("east", &[0, 1]);
    strange.stations.push("Zugspitze".into());
    let text = refusal(&SQUARE, vec![strange], vec![]);
    assert_says(&text, &["`Zugspitze`, which is not in the list"]);
    assert!(!text.contains("meant"), "{text}");
    let of = RegionParts::TrianglesOf(vec!["S000".into(), "s003".into(), "S00".into()]);
    let text = refusal(&SQUARE, vec![], vec![region("part", of)]);
    assert_says(
        &text,
        &["`part` names station `s003`", "is `S003` meant?", "`S00`"],
    );
}

#[test]
fn a_name_is_given_once() {
    let text = refusal(
        &SQUARE,
        vec![ring("west", &[0, 1, 2]), ring("west", &[0, 2, 3])],
        vec![],
    );
    assert_says(&text, &["there is already a polygon `west`"]);
    let text = refusal(
        &SQUARE,
        vec![ring("west", &[0, 1, 2])],
        vec![region("west", RegionParts::AllTriangles)],
    );
    assert_says(&text, &["there is already a polygon `west`"]);
    let text = refusal(&SQUARE, vec![ring("S000+S001+S004", &[0, 1, 4])], vec![]);
    assert_says(&text, &["there is already a polygon `S000+S001+S004`"]);
}

#[test]
fn a_station_is_named_once_in_a_ring() {
    let text = refusal(&SQUARE, vec![ring("closed", &[0, 1, 2, 0])], vec![]);
    assert_says(
        &text,
        &[
            "ring `closed`",
            "`S000` is named twice",
            "without closing the ring",
        ],
    );
}

/// All defects of all rings and regions in one refusal, in the order of the settings.
#[test]
fn every_defect_is_told_at_once() {
    let text = refusal(
        &SQUARE,
        vec![
            ring("bow", &[0, 1, 3, 2]),
            ring("two", &[0, 1]),
            ring("good", &[0, 1, 2]),
        ],
        vec![region("none", parts(&["gone"]))],
    );
    let lines: Vec<&str> = text.lines().collect();
    assert_eq!(lines.len(), 3, "{text}");
    assert!(lines[0].contains("`bow`") && lines[1].contains("`two`"));
    assert_says(lines[2], &["region `none`: there is no polygon `gone`"]);
}

#[test]
fn a_clockwise_ring_is_turned_round() {
    let network = network(&SQUARE);
    let rings = vec![ring("there", &[0, 1, 2, 3]), ring("back", &[3, 2, 1, 0])];
    let built = build(&network, false, rings, vec![]).unwrap();
    let [there, back] = &built.polygons[..] else {
        panic!()
    };
    assert_eq!(there.outline, [[0, 1, 2, 3]]);
    assert_eq!(back.outline, [[0, 1, 2, 3]]);
    assert!(there.shape.area > 0.0);
    assert_eq!(there.shape, back.shape);
    assert_eq!(there.kind, PolygonKind::Ring);
}

/// An arrowhead: the reflex corner counts as an angle of more than 180 degrees, so the smallest is that of the tip.
#[test]
fn a_concave_ring_is_accepted() {
    let plane = Plane {
        origin: (10.0, 20.0),
        shrink: 1.0,
    };
    let points = [(0.0, 0.0), (10e3, -20e3), (0.0, 30e3), (-10e3, -20e3)];
    for order in [[0, 1, 2, 3], [3, 2, 1, 0]] {
        let network = network(&plane.place(&points));
        let built = build(&network, false, vec![ring("arrow", &order)], vec![]).unwrap();
        let shape = built.polygons[0].shape;
        // Area of the plane, curvature (30/6371)² of it: A = 1/2 · 20 km · 50 km - 1/2 · 20 km · 20 km.
        assert!(close(shape.area, 300e6, 300e6 * 2.2e-5), "{}", shape.area);
        // The tip has 22.6 degrees, a barb lies between its edges to the tip and to the notch.
        let barb = (50.0_f64 / 10.0).atan().to_degrees() - (20.0_f64 / 10.0).atan().to_degrees();
        assert!(
            close(shape.smallest_angle, barb, 0.001),
            "{}",
            shape.smallest_angle
        );
    }
}

/// Far apart in longitude at a high latitude, close on the ground: shapes are those of the Earth, not of degrees.
#[test]
fn a_ring_near_the_pole_is_measured_on_the_ground() {
    let (_, polygon) = ring_of(&[(89.9, 0.0), (89.9, 120.0), (89.9, -120.0)]);
    assert!(close(polygon.shape.smallest_angle, 60.0, 1e-3));
    // Equilateral in a circle of 0.1 degree, 11.169 km: quality 1, noise factor 2/(√3 R).
    assert!(close(polygon.shape.quality, 1.0, 1e-5));
    let noise = 2.0 / (3.0_f64.sqrt() * 11_169.4);
    assert!(close(polygon.shape.noise_factor, noise, 1e-4 * noise));
}
