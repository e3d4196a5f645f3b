//! Hard rings, hard networks and bad input: what is accepted, what is refused, and in which words.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::collections::BTreeSet;

use common::{
    NO_LIMITS, Plane, build, close, network, positions, region, ring, ring_of, triangles, winds,
};
use geographiclib_rs::Geodesic;
use gyremesh::error::{Error, ErrorKind, Place};
use gyremesh::integral::{OMEGA, planetary_vorticity};
use gyremesh::polygon::{
    BuiltPolygons, Exclusion, InvalidPolygon, PolygonKind, build_polygons, defects, geodesic_area,
    triangulate,
};
use gyremesh::settings::{PolygonChoice, PolygonLimits, RegionParts, RegionSettings, RingSettings};
use gyremesh::station::{Network, Position};
use gyremesh::warning::Warning;
use rand::SeedableRng;
use rand::seq::SliceRandom;
use rand_chacha::ChaCha8Rng;

type Points = [(f64, f64)];

/// A unit square of half a degree with a station in it.
const SQUARE: [(f64, f64); 5] = [
    (47.0, 8.0),
    (47.0, 8.7),
    (47.5, 8.7),
    (47.5, 8.0),
    (47.2, 8.3),
];

/// The text of the refusal of rings and regions.
fn refusal(points: &Points, rings: Vec<RingSettings>, regions: Vec<RegionSettings>) -> String {
    let error = build(&network(points), true, rings, regions).unwrap_err();
    assert_eq!(error.kind(), ErrorKind::Settings, "{error}");
    error.to_string()
}

fn network_refusal(result: Result<BuiltPolygons, Error>) -> String {
    let error = result.unwrap_err();
    assert_eq!(error.kind(), ErrorKind::Network, "{error}");
    error.to_string()
}

fn parts(names: &[&str]) -> RegionParts {
    RegionParts::Polygons(names.iter().map(|&n| n.to_string()).collect())
}

fn assert_says(text: &str, words: &[&str]) {
    for word in words {
        assert!(text.contains(word), "`{word}` is not in: {text}");
    }
}

fn limited(points: &Points, limits: &PolygonLimits) -> BuiltPolygons {
    let choice = PolygonChoice {
        triangles: true,
        rings: vec![],
        regions: vec![],
    };
    build_polygons(&network(points), &choice, limits).unwrap()
}

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

#[test]
fn parts_of_a_region_that_overlap_are_refused() {
    let cases: [(&str, Vec<RingSettings>, RegionParts); 5] = [
        // The same triangle twice.
        (
            "S000+S001+S004",
            vec![],
            parts(&["S000+S001+S004", "S000+S001+S004"]),
        ),
        // A ring over its own triangle.
        (
            "S000+S001+S004",
            vec![ring("whole", &[0, 1, 2, 3])],
            parts(&["whole", "S000+S001+S004"]),
        ),
        // Two halves that cross.
        (
            "one",
            vec![ring("one", &[0, 1, 2]), ring("two", &[0, 1, 3])],
            parts(&["one", "two"]),
        ),
        // The same ground in two rings that begin elsewhere.
        (
            "two",
            vec![ring("one", &[0, 1, 2]), ring("two", &[2, 0, 1])],
            parts(&["one", "two"]),
        ),
        // A ring within a ring that shares no station with it, see below for the stations.
        (
            "inner",
            vec![ring("outer", &[0, 1, 2, 3]), ring("inner", &[4, 5, 6])],
            parts(&["outer", "inner"]),
        ),
    ];
    let mut points = SQUARE.to_vec();
    points.extend([(47.2, 8.4), (47.3, 8.3)]);
    for (k, (name, rings, parts)) in cases.into_iter().enumerate() {
        let points = if k < 4 { &SQUARE[..] } else { &points[..] };
        let text = refusal(points, rings, vec![region("sum", parts)]);
        assert_says(&text, &["region `sum`", &format!("`{name}`"), "overlap"]);
    }
}

/// Neighbours that share an edge or a corner do not overlap, and the shared edge is gone from the sum.
#[test]
fn parts_that_touch_are_joined() {
    let rings = vec![ring("one", &[0, 1, 2]), ring("two", &[0, 2, 3])];
    let built = build(
        &network(&SQUARE),
        false,
        rings,
        vec![region("sum", parts(&["one", "two"]))],
    );
    let built = built.unwrap();
    let sum = built.polygons.last().unwrap();
    assert_eq!(sum.outline, [[0, 1, 2, 3]]);
    assert_eq!(sum.path.len(), 4);
    // A ring and the triangles beside it, and two triangles that meet at a station.
    let rings = vec![ring("half", &[0, 1, 4])];
    let regions = vec![
        region("more", parts(&["half", "S001+S002+S004"])),
        region("bow", parts(&["half", "S002+S003+S004"])),
    ];
    let built = build(&network(&SQUARE), true, rings, regions).unwrap();
    let [more, bow] = &built.polygons[built.polygons.len() - 2..] else {
        panic!()
    };
    assert_eq!((more.size(), more.path.len()), (4, 4));
    assert_eq!((bow.size(), bow.path.len()), (5, 6));
}

/// A region may be made of a region.
#[test]
fn a_region_of_a_region_is_the_same_ground() {
    let regions = vec![
        region("south", parts(&["S000+S001+S004", "S001+S002+S004"])),
        region("most", parts(&["south", "S002+S003+S004"])),
        region(
            "twice",
            parts(&["S000+S001+S004", "S001+S002+S004", "S002+S003+S004"]),
        ),
    ];
    let built = build(&network(&SQUARE), true, vec![], regions).unwrap();
    let [_, most, twice] = &built.polygons[built.polygons.len() - 3..] else {
        panic!()
    };
    // Areas summed in another order: a last bit.
    assert!(close(most.shape.area, twice.shape.area, 1e-5));
    assert_eq!(most.outline, twice.outline);
}

#[test]
fn a_region_of_an_excluded_polygon_is_refused_with_the_reason() {
    let choice = PolygonChoice {
        triangles: true,
        rings: vec![],
        regions: vec![region("sum", parts(&["S000+S001+S004", "S000+S004+S003"]))],
    };
    let limits = PolygonLimits {
        smallest_angle: 35.0,
        ..NO_LIMITS
    };
    let error = build_polygons(&network(&SQUARE), &choice, &limits).unwrap_err();
    assert_eq!(error.kind(), ErrorKind::Settings);
    let text = error.to_string();
    assert_says(
        &text,
        &[
            "region `sum`: polygon `S000+S004+S003` is outside the limits (angle ",
            " < 35 deg)",
        ],
    );

    // With none left, a region of all has nothing to be made of.
    let choice = PolygonChoice {
        regions: vec![region("all", RegionParts::AllTriangles)],
        ..choice
    };
    let limits = PolygonLimits {
        smallest_area: 1e12,
        ..NO_LIMITS
    };
    let error = build_polygons(&network(&SQUARE), &choice, &limits).unwrap_err();
    assert_eq!(error.kind(), ErrorKind::Settings);
    assert_says(
        &error.to_string(),
        &["region `all` has no polygon within the limits"],
    );
}

/// A region of named triangles is offered the nearest name.
#[test]
fn a_region_of_an_unknown_polygon_is_refused_with_the_nearest() {
    let text = refusal(
        &SQUARE,
        vec![],
        vec![region("sum", parts(&["S000+S001+S044"]))],
    );
    assert_says(
        &text,
        &["there is no polygon `S000+S001+S044`; is `S000+S001+S004` meant?"],
    );
}

/// Each limit leaves out what breaks it and says by which figure.
#[test]
fn limits_exclude_with_the_reason() {
    let all = limited(&SQUARE, &NO_LIMITS);
    assert_eq!((all.polygons.len(), all.excluded.len()), (4, 0));
    let middle = |of: fn(&gyremesh::polygon::Shape) -> f64| {
        let mut values: Vec<f64> = all.polygons.iter().map(|p| of(&p.shape)).collect();
        values.sort_by(f64::total_cmp);
        0.5 * (values[0] + values[3])
    };
    let (angle, edge, area) = (
        middle(|s| s.smallest_angle),
        middle(|s| s.longest_edge),
        middle(|s| s.area),
    );
    let cases = [
        (
            PolygonLimits {
                smallest_angle: angle,
                ..NO_LIMITS
            },
            "small_angle",
        ),
        (
            PolygonLimits {
                longest_edge: Some(edge),
                ..NO_LIMITS
            },
            "long_edge",
        ),
        (
            PolygonLimits {
                smallest_area: area,
                ..NO_LIMITS
            },
            "small_area",
        ),
        (
            PolygonLimits {
                largest_area: Some(area),
                ..NO_LIMITS
            },
            "large_area",
        ),
    ];
    for (limits, name) in cases {
        let built = limited(&SQUARE, &limits);
        assert_eq!(built.polygons.len() + built.excluded.len(), 4);
        assert!(
            !built.polygons.is_empty() && !built.excluded.is_empty(),
            "{name}"
        );
        for (polygon, why) in &built.excluded {
            assert_eq!(why.name(), name);
            let (found, limit, breaks) = match *why {
                Exclusion::SmallAngle(found, limit) => {
                    assert!(close(found, polygon.shape.smallest_angle, 0.0));
                    (found, limit, found < limit)
                }
                Exclusion::LongEdge(found, limit) => {
                    assert!(close(found, polygon.shape.longest_edge, 0.0));
                    (found, limit, found > limit)
                }
                Exclusion::SmallArea(found, limit) => (found, limit, found < limit),
                Exclusion::LargeArea(found, limit) => (found, limit, found > limit),
                _ => panic!("{why:?}"),
            };
            assert!(breaks, "{found} {limit}");
        }
        assert!(
            built
                .polygons
                .iter()
                .all(|p| Exclusion::of(&p.shape, &limits).is_none())
        );
    }
}

/// The words of the reasons, and the warning when most polygons go.
#[test]
fn the_reasons_are_told_in_units_of_the_field() {
    assert_eq!(
        Exclusion::SmallAngle(12.34, 15.0).to_string(),
        "angle 12.3 < 15 deg"
    );
    assert_eq!(
        Exclusion::LongEdge(612_300.0, 500e3).to_string(),
        "edge 612 > 500 km"
    );
    assert_eq!(
        Exclusion::SmallArea(1.26e6, 10e6).to_string(),
        "area 1.3 < 10.0 km2"
    );
    assert_eq!(
        Exclusion::LargeArea(1.26e10, 10e9).to_string(),
        "area 12600 > 10000 km2"
    );
    let limits = PolygonLimits {
        smallest_angle: 59.0,
        ..NO_LIMITS
    };
    let built = limited(&SQUARE, &limits);
    assert_eq!((built.polygons.len(), built.excluded.len()), (0, 4));
    assert_eq!(built.warnings, [Warning::FewPolygons { usable: 0, of: 4 }]);
}

/// Limits hold for rings as well; triangles that were only parts of regions are not listed.
#[test]
fn limits_hold_for_rings_and_not_for_regions() {
    let choice = PolygonChoice {
        triangles: false,
        rings: vec![ring("thin", &[0, 4, 3]), ring("wide", &[0, 1, 2, 3])],
        regions: vec![region("all", RegionParts::AllTriangles)],
    };
    let limits = PolygonLimits {
        largest_area: Some(1.2e9),
        smallest_angle: 10.0,
        ..NO_LIMITS
    };
    let built = build_polygons(&network(&SQUARE), &choice, &limits).unwrap();
    let ids: Vec<&str> = built.polygons.iter().map(|p| p.id.as_str()).collect();
    assert_eq!(ids, ["thin", "all"]);
    assert_eq!(built.excluded.len(), 1);
    assert_eq!(built.excluded[0].1.name(), "large_area");
}

#[test]
fn edges_over_500_km_warn() {
    let wide = triangles(&network(&[(45.0, 0.0), (45.0, 8.0), (49.0, 4.0)])).unwrap();
    let [Warning::LongEdges { polygons, longest }] = wide.warnings[..] else {
        panic!("{:?}", wide.warnings)
    };
    assert_eq!(polygons, 1);
    let (a, b) = (
        Position::new(45.0, 0.0).unwrap(),
        Position::new(45.0, 8.0).unwrap(),
    );
    assert!(close(longest, a.distance(b, &Geodesic::wgs84()), 1e-6));
    assert_says(
        &wide.warnings[0].to_string(),
        &["over 500 km", "longest 631 km", "limits.longest_edge"],
    );
    let narrow = triangles(&network(&[(45.0, 0.0), (45.0, 6.0), (48.0, 3.0)])).unwrap();
    assert!(narrow.warnings.is_empty(), "{:?}", narrow.warnings);
}

/// Two stations over the pole from each other: the edge between them runs through the pole.
#[test]
fn an_edge_through_the_pole() {
    let (network, polygon) = ring_of(&[(89.0, 0.0), (89.0, 180.0), (88.0, -90.0)]);
    let f = planetary_vorticity(&polygon, &positions(&network));
    assert!(close(f, 2.0 * OMEGA, 2.0 * OMEGA * 6e-4), "{f:e}");
    // Right at the pole: 1 degree of meridian to either side is 2 x 111.69 km; the third is 223.38 km off.
    assert!(
        close(polygon.shape.area, 0.5 * 223.38e3 * 223.38e3, 3e7),
        "{}",
        polygon.shape.area
    );
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

/// The spread of heights is that of the polygon's own stations, and unknown if one of them is.
#[test]
fn elevation_spread_is_that_of_the_corners() {
    let elevations = [Some(400.0), Some(-20.0), Some(1800.0), None, Some(650.0)];
    let mut stations = network(&SQUARE).stations().to_vec();
    for (station, elevation) in stations.iter_mut().zip(elevations) {
        station.elevation = elevation;
    }
    let network = Network::new(stations);
    let built = triangles(&network).unwrap();
    let spread = |id: &str| {
        let polygon = built.polygons.iter().find(|p| p.id == id).unwrap();
        polygon.shape.elevation_spread
    };
    assert_eq!(spread("S000+S001+S004"), Some(670.0));
    assert_eq!(spread("S001+S002+S004"), Some(1820.0));
    assert_eq!(spread("S000+S004+S003"), None);
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
