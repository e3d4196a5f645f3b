//! Hard places and networks: the date line, poles, lines, circles, stations at one place.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::collections::BTreeSet;

use common::hard::{Points, SQUARE, assert_says, network_refusal, refusal};
use common::{Plane, build, close, network, positions, ring, ring_of, triangles, winds};
use geographiclib_rs::Geodesic;
use gyremesh::error::ErrorKind;
use gyremesh::integral::{OMEGA, planetary_vorticity};
use gyremesh::polygon::{InvalidPolygon, defects, geodesic_area, triangulate};
use gyremesh::warning::Warning;
use rand::SeedableRng;
use rand::seq::SliceRandom;
use rand_chacha::ChaCha8Rng;

/// Triangles as sets of positions, whatever the stations are called.
fn triangles_by_place(points: &Points, order: &[usize]) -> BTreeSet<BTreeSet<usize>> {
    let shuffled: Vec<(f64, f64)> = order.iter().map(|&k| points[k]).collect();
    let built = triangles(&network(&shuffled)).unwrap();
    let sets = built.polygons.iter();
    sets.map(|p| p.row.stations.iter().map(|&s| order[s]).collect())
        .collect()
}

/// The triangles are the same for any order and names of the stations.
fn assert_order_does_not_matter(points: &Points, expected: usize) {
    let mut order: Vec<usize> = (0..points.len()).collect();
    let first = triangles_by_place(points, &order);
    assert_eq!(first.len(), expected, "{first:?}");
    let mut rng = ChaCha8Rng::seed_from_u64(5);
    for _ in 0..40 {
        order.shuffle(&mut rng);
        assert_eq!(triangles_by_place(points, &order), first);
    }
}

/// `methods.md` 2 [V]: (-17,179), (-17,-179), (-16,180): A = 11 813 598 680.034 m², mean f -4.183068340e-5. Tolerance
/// as printed.
#[test]
fn polygon_across_the_date_line() {
    let points = [(-17.0, 179.0), (-17.0, -179.0), (-16.0, 180.0)];
    let built = triangles(&network(&points)).unwrap();
    assert_eq!(built.polygons.len(), 1);
    let polygon = &built.polygons[0];
    assert!(close(polygon.shape.area, 11_813_598_680.034, 0.01));
    let (lat, lon) = polygon.middle;
    assert!(close(lat, -16.67, 0.01) && close(lon.abs(), 180.0, 1e-9));
    // 181 and -179 degrees are one place, and any way to write it gives the same polygon.
    let other = triangles(&network(&[(-17.0, 179.0), (-17.0, 181.0), (-16.0, -180.0)])).unwrap();
    assert_eq!(other.polygons[0], *polygon);
}

/// A ring round a pole: its area is that of the cap, and the mean of f close to 2 Omega sin 80 and beyond. On the sphere
/// the mean over a cap from latitude p is Omega (1 + sin p) (`methods.md` 2, zones), for 80 degrees 0.9924 of 2 Omega;
/// the ellipsoid and the straight edges of a dodecagon change less than 5e-4 of it.
#[test]
fn polygon_around_a_pole() {
    for sign in [1.0, -1.0] {
        let points: Vec<(f64, f64)> = (0..12)
            .map(|k| (80.0 * sign, 30.0 * f64::from(k) - 180.0))
            .collect();
        let (network, polygon) = ring_of(&points);
        let stations = positions(&network);
        let f = planetary_vorticity(&polygon, &stations);
        let of_cap = sign * OMEGA * (1.0 + 80.0_f64.to_radians().sin());
        assert!(close(f, of_cap, 2.0 * OMEGA * 5e-4), "{f:e} {of_cap:e}");
        // Cap of a sphere of polar radius of curvature 6 399 594 m; the dodecagon lacks 4.5 %.
        let cap =
            std::f64::consts::TAU * 6_399_594.0_f64.powi(2) * (1.0 - 80.0_f64.to_radians().sin());
        let share = polygon.shape.area / cap;
        assert!(close(share, 0.955, 0.005), "{share}");
        assert!(close(polygon.middle.0, 90.0 * sign, 1e-9));
        // The wind of a uniform plane over the pole is no wind of all stations alike: u = sin, v = cos of longitude.
        let wind: Vec<(f64, f64)> = points
            .iter()
            .map(|p| {
                let (sin, cos) = p.1.to_radians().sin_cos();
                (10.0 * cos, -10.0 * sign * sin)
            })
            .collect();
        let (z, d) = polygon.row.apply(winds(&wind));
        assert!(z.abs() < 1e-12 && d.abs() < 1e-12, "{z:e} {d:e}");
    }
}

/// Triangles over a pole, with a station on it: six of them, which fill the hexagon. Tolerance: 0.1 m² an area.
#[test]
fn triangles_over_a_pole_with_a_station_on_it() {
    for sign in [1.0, -1.0] {
        let mut points: Vec<(f64, f64)> = (0..6)
            .map(|k| (88.0 * sign, 60.0 * f64::from(k) - 170.0))
            .collect();
        points.push((90.0 * sign, 77.0));
        assert_order_does_not_matter(&points, 6);
        let built = triangles(&network(&points)).unwrap();
        let sum: f64 = built.polygons.iter().map(|p| p.shape.area).sum();
        let (_, hexagon) = ring_of(&points[..6]);
        assert!(close(sum, hexagon.shape.area, 0.7));
    }
}

#[test]
fn no_one_and_two_stations_make_no_polygon() {
    for n in [0, 1, 2] {
        let text = network_refusal(triangles(&network(&SQUARE[..n])));
        assert_says(&text, &[&format!("{n} stations"), "at least 3"]);
    }
    let text = refusal(&SQUARE, vec![ring("two", &[0, 1])], vec![]);
    assert_says(&text, &["ring `two`", "2 stations make no ring"]);
}

/// Stations of one meridian, of the equator, and of a geodesic aslant (placed to some nanometres) make flat triangles
/// only.
#[test]
fn stations_on_one_line_make_no_polygon() {
    let meridian: Vec<(f64, f64)> = (0..7).map(|k| (40.0 + 0.3 * f64::from(k), 12.0)).collect();
    let equator: Vec<(f64, f64)> = (0..7).map(|k| (0.0, 179.0 + 0.4 * f64::from(k))).collect();
    let aslant = Plane {
        origin: (33.0, -70.0),
        shrink: 1.0,
    }
    .place(&[-90.0, -35.0, 0.0, 20.0, 75.0].map(|s: f64| {
        (
            1e3 * s * 50.0_f64.to_radians().sin(),
            1e3 * s * 50.0_f64.to_radians().cos(),
        )
    }));
    for points in [meridian, equator, aslant] {
        let network = network(&points);
        let text = network_refusal(triangles(&network));
        assert_says(
            &text,
            &["on one line", &format!("{} stations", points.len())],
        );
        let all: Vec<usize> = (0..3).collect();
        let error = build(&network, false, vec![ring("line", &all)], vec![]).unwrap_err();
        assert_eq!(error.kind(), ErrorKind::Settings);
        assert_says(&error.to_string(), &["ring `line`"]);
    }
}

/// Flat triangles along the side of a grid are counted, not built: the stations of a meridian lie on one geodesic.
#[test]
fn a_straight_side_makes_no_sliver() {
    let points: Vec<(f64, f64)> = (0..4)
        .flat_map(|i| [0.0, 0.5].map(|j| (45.0 + 0.4 * f64::from(i), 7.0 + j)))
        .collect();
    let built = triangles(&network(&points)).unwrap();
    assert_eq!(built.polygons.len(), 6);
    assert!(built.polygons.iter().all(|p| p.shape.smallest_angle > 20.0));
}

#[test]
fn of_two_stations_at_one_place_one_makes_triangles() {
    let mut points = SQUARE.to_vec();
    // 5 m north of S004.
    points.push((47.2 + 4.5e-5, 8.3));
    let network = network(&points);
    let built = triangles(&network).unwrap();
    assert_eq!(built.polygons.len(), 4);
    assert!(built.polygons.iter().all(|p| !p.row.stations.contains(&5)));
    let [
        Warning::OnePlace {
            kept,
            left_out,
            metres,
        },
    ] = &built.warnings[..]
    else {
        panic!("{:?}", built.warnings)
    };
    assert_eq!((kept.as_str(), left_out.as_str()), ("S004", "S005"));
    assert!(close(*metres, 5.0, 0.01), "{metres}");
    assert_says(
        &built.warnings[0].to_string(),
        &["`S004` and `S005` stand 5.0 m apart", "`S005` is left out"],
    );
    // A ring may use either, but not both.
    assert!(build(&network, false, vec![ring("other", &[0, 1, 5])], vec![]).is_ok());
    let text = refusal(&points, vec![ring("both", &[0, 4, 5])], vec![]);
    assert_says(
        &text,
        &["ring `both`: stations `S004` and `S005` stand at one place (5.0 m apart)"],
    );
}

/// Five stations at two places make no triangle; the refusal counts places.
#[test]
fn five_stations_at_two_places_make_no_polygon() {
    let points = [
        (47.0, 8.0),
        (47.0, 8.0),
        (47.5, 8.5),
        (47.5, 8.5),
        (47.0, 8.0),
    ];
    let text = network_refusal(triangles(&network(&points)));
    assert_says(&text, &["2 stations", "different places"]);
}

/// Coincidence is looked for over the antimeridian and at a pole too.
#[test]
fn one_place_over_the_date_line_and_at_the_pole() {
    let points = [
        (10.0, -180.0),
        (10.0, 179.999_99),
        (11.0, 179.0),
        (11.0, -179.0),
    ];
    let built = triangles(&network(&points)).unwrap();
    assert_eq!((built.polygons.len(), built.warnings.len()), (1, 1));
    let points = [
        (90.0, 0.0),
        (90.0, 120.0),
        (89.0, 0.0),
        (89.0, 120.0),
        (89.0, -120.0),
    ];
    let built = triangles(&network(&points)).unwrap();
    assert_eq!((built.polygons.len(), built.warnings.len()), (3, 1));
}

#[test]
fn a_network_wider_than_a_hemisphere_is_refused() {
    let world = [
        (0.0, 0.0),
        (0.0, 120.0),
        (0.0, -120.0),
        (80.0, 0.0),
        (1.0, 1.0),
    ];
    let network = network(&world);
    for rings in [vec![], vec![ring("small", &[0, 3, 4])]] {
        let with_triangles = rings.is_empty();
        let text = network_refusal(build(&network, with_triangles, rings, vec![]));
        assert_says(&text, &["more than a hemisphere", "stations.only"]);
    }
    assert_eq!(defects(&[0, 1, 2], &network), [InvalidPolygon::TooWide]);
    // 150 degrees across is not more than a hemisphere.
    let wide = common::network(&[(0.0, 0.0), (0.0, 150.0), (60.0, 75.0)]);
    assert_eq!(triangles(&wide).unwrap().polygons.len(), 1);
}

/// Eight stations on one parallel, so on one circle, and the same round either pole and over the date line.
#[test]
fn stations_on_one_circle_give_the_same_triangles_in_any_order() {
    for lat in [80.0, -80.0, 45.0] {
        let points: Vec<(f64, f64)> = (0..8).map(|k| (lat, 45.0 * f64::from(k) - 180.0)).collect();
        assert_order_does_not_matter(&points, 6);
    }
    for origin in [(0.0, 0.0), (50.0, 180.0), (-33.0, 151.0), (89.9, 0.0)] {
        let plane = Plane {
            origin,
            shrink: 1.0,
        };
        let circle: Vec<(f64, f64)> = (0..10)
            .map(|k| {
                let (sin, cos) = (0.2 + std::f64::consts::TAU * f64::from(k) / 10.0).sin_cos();
                (5e3 * cos, 5e3 * sin)
            })
            .collect();
        assert_order_does_not_matter(&plane.place(&circle), 8);
    }
}

/// A grid of latitude and longitude: every cell is an isosceles trapezium, its corners on one circle.
#[test]
fn a_grid_gives_the_same_triangles_in_any_order() {
    for (lat, lon) in [(45.0, 7.0), (-2.0, 178.5), (-70.0, -0.5), (0.0, 0.0)] {
        let points: Vec<(f64, f64)> = (0..5)
            .flat_map(|i| {
                (0..6).map(move |j| {
                    let lon: f64 = lon + 0.5 * f64::from(j);
                    (
                        lat + 0.25 * f64::from(i),
                        if lon >= 180.0 { lon - 360.0 } else { lon },
                    )
                })
            })
            .collect();
        let order: Vec<usize> = (0..points.len()).collect();
        let first = triangles_by_place(&points, &order);
        let mut rng = ChaCha8Rng::seed_from_u64(9);
        for _ in 0..40 {
            let mut order = order.clone();
            order.shuffle(&mut rng);
            assert_eq!(triangles_by_place(&points, &order), first, "{lat} {lon}");
        }
        // Twenty cells of two triangles; slivers between a parallel and the geodesic beside it come on top.
        let cell = |set: &BTreeSet<usize>| {
            let (low, high) = (set.first().unwrap(), set.last().unwrap());
            high / 6 - low / 6 == 1
        };
        assert_eq!(first.iter().filter(|s| cell(s)).count(), 40);
    }
}

/// Only the stations asked for are used, and each triangle begins with its smallest station, counter-clockwise.
#[test]
fn triangulation_is_ordered() {
    let network = network(&SQUARE);
    let places = positions(&network);
    let found = triangulate(&places, &[0, 1, 2, 3, 4]).unwrap();
    assert_eq!(found, [[0, 1, 4], [0, 4, 3], [1, 2, 4], [2, 3, 4]]);
    assert_eq!(triangulate(&places, &[4, 1, 2]).unwrap(), [[1, 2, 4]]);
    let geodesic = Geodesic::wgs84();
    for triangle in found {
        assert!(geodesic_area(triangle.iter().map(|&s| places[s]), &geodesic).0 > 0.0);
    }
}
