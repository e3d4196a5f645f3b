//! Regions and limits: what is joined, what is left out, and with which reason.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use common::hard::{SQUARE, assert_says, limited, parts, refusal};
use common::{NO_LIMITS, build, close, network, positions, region, ring, ring_of, triangles};
use geographiclib_rs::Geodesic;
use gyremesh::error::ErrorKind;
use gyremesh::integral::{OMEGA, planetary_vorticity};
use gyremesh::polygon::{Exclusion, build_polygons};
use gyremesh::settings::{PolygonChoice, PolygonLimits, RegionParts, RingSettings};
use gyremesh::station::{Network, Position};
use gyremesh::warning::Warning;

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

/// A plane that rises by 1 m in 100 m: with a shear of 0.01 1/s it passes for 1e-4 1/s (`methods.md` 4).
#[test]
fn slopes_and_heights_are_limits() {
    let mut stations = network(&SQUARE).stations().to_vec();
    for station in &mut stations {
        let east = station.position.longitude() * station.position.latitude().to_radians().cos();
        station.elevation = Some(0.01 * 111_320.0 * east);
    }
    let network = Network::new(stations);
    let all = triangles(&network).unwrap();
    for polygon in &all.polygons {
        let slope = polygon.shape.slope.unwrap();
        assert!((slope - 0.01).abs() < 2e-4, "{slope}");
    }
    let told: Vec<String> = all.warnings.iter().map(ToString::to_string).collect();
    assert!(told.iter().any(|w| w.contains("slopes")), "{told:?}");
    let within = |limits: PolygonLimits| {
        let choice = PolygonChoice {
            triangles: true,
            rings: vec![],
            regions: vec![],
        };
        build_polygons(&network, &choice, &limits).unwrap()
    };
    let steep = within(PolygonLimits {
        slope_error: Some(0.9e-4),
        ..NO_LIMITS
    });
    assert!(steep.polygons.is_empty());
    assert!(steep.excluded.iter().all(|(_, why)| why.name() == "slope"));
    let gentler = within(PolygonLimits {
        slope_error: Some(0.9e-4),
        vertical_shear: 0.005,
        ..NO_LIMITS
    });
    assert_eq!(gentler.polygons.len(), all.polygons.len());
    let spread = |p: &gyremesh::polygon::StationPolygon| p.shape.elevation_spread.unwrap();
    let limit = 0.5 * all.polygons.iter().map(spread).fold(0.0, f64::max);
    let high = within(PolygonLimits {
        elevation_spread: Some(limit),
        ..NO_LIMITS
    });
    assert!(high.polygons.iter().all(|p| spread(p) <= limit));
    for (polygon, why) in &high.excluded {
        assert!(spread(polygon) > limit && why.name() == "elevation_spread");
    }
    assert!(!high.excluded.is_empty());
}
