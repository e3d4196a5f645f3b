//! Outlines as RFC 7946 asks: within -180 to 180, cut at the antimeridian, exteriors counter-clockwise.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use common::{build, network, region, ring_of, triangles};
use geo::{CoordsIter, MultiPolygon, Winding};
use geographiclib_rs::Geodesic;
use gyremesh::output::outline_geometry;
use gyremesh::polygon::geodesic_area;
use gyremesh::settings::RegionParts;
use gyremesh::station::Position;

/// Geodesic area of all parts, their edges being straight in longitude and latitude.
fn area(parts: &MultiPolygon<f64>) -> f64 {
    let geodesic = Geodesic::wgs84();
    let ring = |line: &geo::LineString<f64>| {
        // The pole's edge runs along a parallel of length 0: its points are one place.
        let points: Vec<Position> = line
            .coords()
            .skip(1)
            .map(|c| Position::new(c.y, c.x).unwrap())
            .collect();
        geodesic_area(points.into_iter(), &geodesic).0
    };
    parts
        .iter()
        .map(|p| ring(p.exterior()) + p.interiors().iter().map(ring).sum::<f64>())
        .sum()
}

fn assert_rfc7946(parts: &MultiPolygon<f64>) {
    for polygon in parts {
        assert!(polygon.exterior().is_ccw());
        assert!(polygon.interiors().iter().all(Winding::is_cw));
        for c in polygon.coords_iter() {
            assert!(
                (-180.0..=180.0).contains(&c.x) && (-90.0..=90.0).contains(&c.y),
                "{c:?}"
            );
        }
        let exterior = polygon.exterior();
        assert_eq!(exterior.0.first(), exterior.0.last());
        assert!(
            exterior.0.windows(2).all(|w| w[0] != w[1]),
            "a point stands twice: {exterior:?}"
        );
        // No edge jumps across the map.
        assert!(
            exterior
                .0
                .windows(2)
                .all(|w| (w[0].x - w[1].x).abs() < 180.0 || w[0].y.abs() >= 89.9)
        );
    }
}

/// Edges in pieces of 25 km leave the geodesic by 12 m: the area is kept to 1e-3.
fn assert_kept(points: &[(f64, f64)], parts: usize) {
    let (network, polygon) = ring_of(points);
    let outline = outline_geometry(&polygon, &network);
    assert_rfc7946(&outline);
    assert_eq!(outline.0.len(), parts, "{outline:?}");
    let (found, expected) = (area(&outline), polygon.shape.area);
    assert!(
        (found / expected - 1.0).abs() < 1e-3,
        "{points:?}: {found:e} {expected:e}"
    );
}

#[test]
fn an_ordinary_polygon_is_one_part() {
    assert_kept(&[(46.0, 7.0), (46.0, 9.0), (47.5, 8.0)], 1);
    assert_kept(&[(-46.0, 178.0), (-46.0, 179.9), (-44.5, 179.0)], 1);
}

#[test]
fn a_polygon_across_the_antimeridian_is_cut() {
    assert_kept(&[(-17.0, 179.0), (-17.0, -179.0), (-16.0, 180.0)], 2);
    assert_kept(
        &[(60.0, 170.0), (55.0, -175.0), (65.0, -170.0), (66.0, 175.0)],
        2,
    );
    // A concave ring that crosses the line four times.
    assert_kept(
        &[
            (10.0, 178.0),
            (10.0, -178.0),
            (11.0, 179.0),
            (12.0, -178.0),
            (12.0, 178.0),
        ],
        3,
    );
}

/// A station on the line itself belongs to one side.
#[test]
fn a_station_on_the_antimeridian() {
    assert_kept(&[(10.0, 180.0), (10.0, -178.0), (12.0, -179.0)], 1);
    assert_kept(&[(10.0, 180.0), (12.0, 179.0), (10.0, 178.0)], 1);
}

/// The part of the map is closed along the pole; 0.1 of the area is left for the pole's own edge.
#[test]
fn a_pole_inside_becomes_an_edge_of_the_map() {
    for sign in [1.0, -1.0] {
        let (network, polygon) = ring_of(&[
            (85.0 * sign, 10.0),
            (84.0 * sign, 100.0),
            (86.0 * sign, -170.0),
            (85.0 * sign, -80.0),
        ]);
        let outline = outline_geometry(&polygon, &network);
        assert_rfc7946(&outline);
        assert!(
            outline
                .iter()
                .any(|p| p.coords_iter().any(|c| c.y.abs() >= 90.0))
        );
        let width: f64 = outline
            .iter()
            .map(|p| {
                let x = || p.coords_iter().map(|c| c.x);
                x().fold(f64::MIN, f64::max) - x().fold(f64::MAX, f64::min)
            })
            .sum();
        assert!((width - 360.0).abs() < 1e-6, "{width}");
    }
}

#[test]
fn a_region_with_a_hole_has_an_interior() {
    let points: Vec<(f64, f64)> = (0..5)
        .flat_map(|i| {
            (0..5).map(move |j| {
                (
                    46.0 + 0.2 * f64::from(i),
                    7.0 + 0.31 * f64::from(j) + 0.01 * f64::from(i),
                )
            })
        })
        .collect();
    let network = network(&points);
    let all = triangles(&network).unwrap();
    // Everything but the triangles around station 12, in the middle.
    let parts: Vec<String> = all
        .polygons
        .iter()
        .filter(|p| !p.outline[0].contains(&12))
        .map(|p| p.id.clone())
        .collect();
    let built = build(
        &network,
        true,
        vec![],
        vec![region("around", RegionParts::Polygons(parts))],
    )
    .unwrap();
    let around = built.polygons.iter().find(|p| p.id == "around").unwrap();
    assert_eq!(around.outline.len(), 2);
    let outline = outline_geometry(around, &network);
    assert_rfc7946(&outline);
    assert_eq!((outline.0.len(), outline.0[0].interiors().len()), (1, 1));
    // Cutting out the hole drops stations that stand on one parallel: the straight line stays, the geodesic of this
    // test moves by up to 170 m over 96 km.
    let (found, expected) = (area(&outline), around.shape.area);
    assert!(
        (found / expected - 1.0).abs() < 3e-3,
        "{found:e} {expected:e}"
    );
}
