//! Laws that hold for any network and any wind.
//!
//! Tolerances are in units of the largest term of a sum (wind times half a length): 1e-12 for rounding of some tens of
//! terms, more where positions themselves are rounded, with the reason at the place.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::collections::{BTreeMap, BTreeSet};

use common::{Plane, build, close, network, positions, region, ring, ring_of, triangles, winds};
use geographiclib_rs::Geodesic;
use gyremesh::integral::planetary_vorticity;
use gyremesh::polygon::{BuiltPolygons, PolygonKind, StationPolygon, geodesic_area};
use gyremesh::settings::{RegionParts, RingSettings};
use gyremesh::station::{Network, Position, Station};
use proptest::prelude::*;
use proptest::test_runner::RngSeed;

type Pairs = Vec<(f64, f64)>;

/// Most stations of a random network.
const MOST: usize = 24;
/// Rounding of a sum, relative to its largest terms.
const ROUNDING: f64 = 1e-12;
/// Accuracy of an area, m² (`tests/data/SOURCES.md`).
const AREA: f64 = 0.1;

/// The cases are the same in every run; `PROPTEST_RNG_SEED` draws others and `PROPTEST_CASES` more.
fn config() -> ProptestConfig {
    let default = ProptestConfig::default();
    ProptestConfig {
        // A quarter of the usual number keeps the file within some seconds.
        cases: default.cases.div_ceil(4),
        rng_seed: match default.rng_seed {
            RngSeed::Random => RngSeed::Fixed(20_260_612),
            seed @ RngSeed::Fixed(_) => seed,
        },
        failure_persistence: None,
        ..default
    }
}

/// Any place but the poles' own surroundings, and a size of 1 to 400 km.
fn plane() -> impl Strategy<Value = (Plane, f64)> {
    (-85.0..85.0, -180.0..180.0, 3.0..5.6).prop_map(|(lat, lon, size): (f64, f64, f64)| {
        let plane = Plane {
            origin: (lat, lon),
            shrink: 1.0,
        };
        (plane, 10.0_f64.powf(size))
    })
}

/// Positions of a network, no two nearer than 1/50 of its size.
fn stations() -> impl Strategy<Value = Pairs> {
    let points = prop::collection::vec((-0.5..0.5, -0.5..0.5), 5..MOST);
    (plane(), points).prop_filter_map(
        "three stations apart",
        |((plane, size), points): (_, Pairs)| {
            let mut apart: Pairs = Vec::new();
            for (x, y) in points {
                if apart.iter().all(|p| (p.0 - x).hypot(p.1 - y) > 0.02) {
                    apart.push((x, y));
                }
            }
            let metres: Pairs = apart.iter().map(|p| (p.0 * size, p.1 * size)).collect();
            (metres.len() >= 3).then(|| plane.place(&metres))
        },
    )
}

/// Positions of a simple ring, counter-clockwise: its stations lie in order round the middle.
fn simple_ring() -> impl Strategy<Value = Pairs> {
    let corners = prop::collection::vec((0.0..0.4, 0.3..1.0), 3..10);
    (plane(), corners).prop_map(|((plane, size), corners): (_, Pairs)| {
        let n = corners.len() as f64;
        let metres: Pairs = corners
            .iter()
            .enumerate()
            .map(|(k, &(jitter, radius))| {
                let (sin, cos) = (std::f64::consts::TAU * (k as f64 + jitter) / n).sin_cos();
                (0.5 * size * radius * cos, 0.5 * size * radius * sin)
            })
            .collect();
        plane.place(&metres)
    })
}

fn wind() -> impl Strategy<Value = Pairs> {
    prop::collection::vec((-20.0..20.0, -20.0..20.0), MOST)
}

/// Numbers 0 to n - 1 in any order.
fn order() -> impl Strategy<Value = Vec<usize>> {
    Just((0..MOST).collect::<Vec<_>>()).prop_shuffle()
}

/// Vorticity and divergence times area.
fn totals(polygon: &StationPolygon, wind: &[(f64, f64)]) -> (f64, f64) {
    let (z, d) = polygon.row.apply(winds(wind));
    (z * polygon.shape.area, d * polygon.shape.area)
}

/// Circulation and flux of a region against the sum over its tiles.
fn assert_is_sum(region: &StationPolygon, tiles: &[&StationPolygon], wind: &[(f64, f64)]) {
    let (mut c, mut f, mut area, mut perimeter) = (0.0, 0.0, 0.0, 0.0);
    for tile in tiles {
        let (tile_c, tile_f) = totals(tile, wind);
        c += tile_c;
        f += tile_f;
        area += tile.shape.area;
        perimeter += tile.shape.perimeter;
    }
    let rounding = ROUNDING * 30.0 * perimeter;
    let (region_c, region_f) = totals(region, wind);
    assert!(close(region_c, c, rounding), "{region_c:e} {c:e}");
    assert!(close(region_f, f, rounding), "{region_f:e} {f:e}");
    assert!(close(region.shape.area, area, ROUNDING * area));
}

fn of_kind(built: &BuiltPolygons, kind: PolygonKind) -> Vec<&StationPolygon> {
    built.polygons.iter().filter(|p| p.kind == kind).collect()
}

/// All triangles of a network and the region of all.
fn tiled(points: &[(f64, f64)]) -> Option<(Network, BuiltPolygons)> {
    let network = network(points);
    let all = region("all", RegionParts::AllTriangles);
    // All on one line is the only way to have none.
    let built = build(&network, true, vec![], vec![all]).ok()?;
    Some((network, built))
}

/// Values of polygons by the set of their stations, given by their places in `names`.
fn by_stations(
    polygons: &[StationPolygon],
    names: &[usize],
    wind: &[(f64, f64)],
) -> BTreeMap<BTreeSet<usize>, (f64, f64, f64)> {
    polygons
        .iter()
        .map(|p| {
            let (z, d) = p.row.apply(|s| winds(wind)(names[s]));
            let stations = p.row.stations.iter().map(|&s| names[s]).collect();
            (stations, (z, d, p.shape.noise_factor))
        })
        .collect()
}

/// Values of the one ring.
fn ring_values(
    network: &Network,
    stations: &[usize],
    wind: &[(f64, f64)],
) -> (f64, f64, StationPolygon) {
    let built = build(network, false, vec![ring("ring", stations)], vec![]).unwrap();
    let polygon = built.polygons.into_iter().next().unwrap();
    let (z, d) = polygon.row.apply(winds(wind));
    (z, d, polygon)
}

proptest! {
    #![proptest_config(config())]

    /// `methods.md` 1.3: the line integral is the area-weighted mean of any triangulation; inner edges cancel. So an
    /// inner station drops out of the total.
    #[test]
    fn tiles_sum_to_their_outline(points in stations(), wind in wind()) {
        let Some((_, built)) = tiled(&points) else { return Ok(()) };
        let tiles = of_kind(&built, PolygonKind::Triangle);
        let all = of_kind(&built, PolygonKind::Region)[0];
        assert_is_sum(all, &tiles, &wind);
        let on_outline: BTreeSet<usize> = all.outline.iter().flatten().copied().collect();
        let with_weight: BTreeSet<usize> = all.row.stations.iter().copied().collect();
        assert_eq!(on_outline, with_weight);
    }

    /// The same for any part of the triangles, with holes and pieces that touch at a station.
    #[test]
    fn any_choice_of_tiles_sums_to_its_outline(
        points in stations(),
        wind in wind(),
        chosen in prop::collection::vec(any::<bool>(), 2 * MOST),
    ) {
        let Some((network, built)) = tiled(&points) else { return Ok(()) };
        let tiles = of_kind(&built, PolygonKind::Triangle);
        let parts: Vec<&StationPolygon> =
            tiles.iter().zip(&chosen).filter(|(_, c)| **c).map(|(t, _)| *t).collect();
        prop_assume!(!parts.is_empty());
        let ids = parts.iter().map(|t| t.id.clone()).collect();
        let some = region("some", RegionParts::Polygons(ids));
        let again = build(&network, true, vec![], vec![some]).unwrap();
        assert_is_sum(of_kind(&again, PolygonKind::Region)[0], &parts, &wind);
    }

    /// A station that its triangles surround has no say in the region, however strong its wind (`methods.md` 1.3).
    #[test]
    fn a_surrounded_station_does_not_matter(ring in simple_ring(), wind in wind(), gust in -1e3..1e3) {
        // The middle of the ring, seen by all corners: all triangles with it tile the ring.
        let n = ring.len();
        let middle = {
            let (_, polygon) = ring_of(&ring);
            polygon.middle
        };
        let mut points = ring;
        points.push(middle);
        let Some((_, built)) = tiled(&points) else { return Ok(()) };
        let all = of_kind(&built, PolygonKind::Region)[0];
        prop_assume!(all.outline.len() == 1 && !all.outline[0].contains(&n));
        let before = all.row.apply(winds(&wind));
        let mut stronger = wind.clone();
        stronger[n] = (gust, -gust);
        prop_assert_eq!(before, all.row.apply(winds(&stronger)));
    }

    /// Triangles cover the network without overlap: each area is positive, and they sum to the geodesic area of the
    /// outline. Euler: 2n - 2 - h triangles for h stations on one outline. Tolerance: 0.1 m² for each area.
    #[test]
    fn triangles_cover_without_overlap(points in stations()) {
        let Some((network, built)) = tiled(&points) else { return Ok(()) };
        let positions = positions(&network);
        let tiles = of_kind(&built, PolygonKind::Triangle);
        let all = of_kind(&built, PolygonKind::Region)[0];
        let sum: f64 = tiles.iter().map(|t| t.shape.area).sum();
        prop_assert!(tiles.iter().all(|t| t.shape.area > 0.0));
        let geodesic = Geodesic::wgs84();
        let outline: f64 = all
            .outline
            .iter()
            .map(|ring| geodesic_area(ring.iter().map(|&s| positions[s]), &geodesic).0)
            .sum();
        let tolerance = AREA * (tiles.len() + 1) as f64 + ROUNDING * sum;
        prop_assert!(close(sum, outline, tolerance), "{} {}", sum, outline);
        if let [ring] = &all.outline[..] {
            prop_assert_eq!(tiles.len(), 2 * points.len() - 2 - ring.len());
        }
    }

    /// `methods.md` 2: planetary vorticity is a circulation as well, so tiles sum to their outline.
    #[test]
    fn planetary_vorticity_of_tiles_sums_to_the_outline(points in stations()) {
        let Some((network, built)) = tiled(&points) else { return Ok(()) };
        let positions = positions(&network);
        let circulation =
            |p: &StationPolygon| planetary_vorticity(p, &positions) * p.shape.area;
        let tiles = of_kind(&built, PolygonKind::Triangle);
        let sum: f64 = tiles.iter().map(|t| circulation(t)).sum();
        let whole = circulation(of_kind(&built, PolygonKind::Region)[0]);
        // The surface of the Earth moves at up to 465 m/s.
        let perimeter: f64 = tiles.iter().map(|t| t.shape.perimeter).sum();
        prop_assert!(close(sum, whole, ROUNDING * 465.0 * perimeter), "{:e} {:e}", sum, whole);
    }

    /// `methods.md` 11: the order of the vertices, taken either way from any of them, does not matter.
    #[test]
    fn the_way_a_ring_is_named_does_not_matter(
        points in simple_ring(),
        wind in wind(),
        start in 0..MOST,
    ) {
        let network = network(&points);
        let forward: Vec<usize> = (0..points.len()).collect();
        let (z, d, polygon) = ring_values(&network, &forward, &wind);
        let rounding = ROUNDING * 30.0 * polygon.shape.noise_factor;
        let mut rotated = forward.clone();
        rotated.rotate_left(start % points.len());
        let backward: Vec<usize> = rotated.iter().rev().copied().collect();
        for named in [rotated, backward] {
            let (z2, d2, other) = ring_values(&network, &named, &wind);
            prop_assert!(close(z, z2, rounding + AREA / polygon.shape.area * z.abs()));
            prop_assert!(close(d, d2, rounding + AREA / polygon.shape.area * d.abs()));
            prop_assert!(close(polygon.shape.area, other.shape.area, AREA));
            prop_assert!(close(polygon.shape.smallest_angle, other.shape.smallest_angle, 1e-7));
        }
    }

    /// Names of stations change neither the triangles nor their values.
    #[test]
    fn renaming_stations_does_not_matter(points in stations(), wind in wind(), order in order()) {
        let names: Vec<usize> = order.into_iter().filter(|&s| s < points.len()).collect();
        let renamed: Pairs = names.iter().map(|&s| points[s]).collect();
        let Ok(built) = triangles(&network(&points)) else { return Ok(()) };
        let again = triangles(&network(&renamed)).unwrap();
        let same: Vec<usize> = (0..points.len()).collect();
        let found = by_stations(&built.polygons, &same, &wind);
        let other = by_stations(&again.polygons, &names, &wind);
        prop_assert_eq!(found.len(), built.polygons.len());
        prop_assert_eq!(found.keys().collect::<Vec<_>>(), other.keys().collect::<Vec<_>>());
        for ((z, d, noise), (z2, d2, _)) in found.values().zip(other.values()) {
            // The area of a triangle begun at another corner differs by its 0.1 m²: noise² × √3 is 1 / area or less.
            let rounding = 30.0 * noise * ROUNDING + AREA * noise * noise * z.abs().max(d.abs());
            prop_assert!(close(*z, *z2, rounding) && close(*d, *d2, rounding));
        }
    }

    /// The order of the station list does not matter: the same polygons to the last bit.
    #[test]
    fn the_order_of_the_list_does_not_matter(points in stations(), order in order()) {
        let first = network(&points);
        let shuffled: Vec<Station> = order
            .into_iter()
            .filter(|&s| s < points.len())
            .map(|s| first.stations()[s].clone())
            .collect();
        let second = Network::new(shuffled);
        match (triangles(&first), triangles(&second)) {
            (Ok(a), Ok(b)) => prop_assert_eq!(a.polygons, b.polygons),
            (a, b) => prop_assert!(a.is_err() && b.is_err()),
        }
    }

    /// Vorticity and divergence are linear in the winds.
    #[test]
    fn winds_superpose(
        points in simple_ring(),
        one in wind(),
        two in wind(),
        a in -3.0..3.0,
        b in -3.0..3.0,
    ) {
        let (_, polygon) = ring_of(&points);
        let both: Pairs = one
            .iter()
            .zip(&two)
            .map(|(p, q)| (a * p.0 + b * q.0, a * p.1 + b * q.1))
            .collect();
        let (z1, d1) = polygon.row.apply(winds(&one));
        let (z2, d2) = polygon.row.apply(winds(&two));
        let (z, d) = polygon.row.apply(winds(&both));
        let rounding = ROUNDING * 180.0 * polygon.shape.noise_factor;
        prop_assert!(close(z, a * z1 + b * z2, rounding));
        prop_assert!(close(d, a * d1 + b * d2, rounding));
    }

    /// Twice the wind, twice the values; to the last bit, as a factor of two is exact.
    #[test]
    fn values_scale_with_the_wind(points in simple_ring(), wind in wind()) {
        let (_, polygon) = ring_of(&points);
        let doubled: Pairs = wind.iter().map(|w| (2.0 * w.0, 2.0 * w.1)).collect();
        let (z, d) = polygon.row.apply(winds(&wind));
        prop_assert_eq!(polygon.row.apply(winds(&doubled)), (2.0 * z, 2.0 * d));
    }

    /// A polygon keeps its values when it is carried round the Earth on its parallels, over the antimeridian too.
    /// Tolerance: a longitude is rounded to 3e-14 degrees, 3 nm, and the geodesics are good to 15 nm; of an edge of at
    /// least some metres.
    #[test]
    fn longitude_does_not_matter(points in simple_ring(), wind in wind(), shift in -180.0..180.0) {
        let (_, here) = ring_of(&points);
        let wrap = |lon: f64| (lon + 180.0).rem_euclid(360.0) - 180.0;
        let middle = here.middle.1;
        for shift in [shift, 180.0 - middle] {
            let shifted: Pairs = points.iter().map(|p| (p.0, wrap(p.1 + shift))).collect();
            let (_, there) = ring_of(&shifted);
            let (z, d) = here.row.apply(winds(&wind));
            let (z2, d2) = there.row.apply(winds(&wind));
            let noise = here.shape.noise_factor;
            let tolerance = ROUNDING * 30.0 * noise
                + 30.0 * 20.0 * 30e-9 / here.shape.area
                + AREA / here.shape.area * z.abs().max(d.abs());
            prop_assert!(close(z, z2, tolerance), "{:e} {:e} {:e}", z, z2, tolerance);
            prop_assert!(close(d, d2, tolerance), "{:e} {:e} {:e}", d, d2, tolerance);
            prop_assert!(close(here.shape.area, there.shape.area, AREA + ROUNDING * here.shape.area));
        }
    }

    /// Mirrored in the equator with v -> -v, vorticity changes its sign and divergence stays; so does the planetary
    /// vorticity change its sign (`methods.md` 2: mirror of T45).
    #[test]
    fn the_mirror_in_the_equator_turns_the_sign_of_vorticity(points in simple_ring(), wind in wind()) {
        let (network, north) = ring_of(&points);
        let mirrored: Pairs = points.iter().map(|p| (-p.0, p.1)).collect();
        let (mirror_network, south) = ring_of(&mirrored);
        let mirrored_wind: Pairs = wind.iter().map(|w| (w.0, -w.1)).collect();
        let (z, d) = north.row.apply(winds(&wind));
        let (z2, d2) = south.row.apply(winds(&mirrored_wind));
        let tolerance = ROUNDING * 30.0 * north.shape.noise_factor
            + AREA / north.shape.area * z.abs().max(d.abs());
        prop_assert!(close(z, -z2, tolerance), "{:e} {:e}", z, z2);
        prop_assert!(close(d, d2, tolerance), "{:e} {:e}", d, d2);
        let f = planetary_vorticity(&north, &positions(&network));
        let f2 = planetary_vorticity(&south, &positions(&mirror_network));
        let tolerance = ROUNDING * 465.0 * north.shape.noise_factor
            + AREA / north.shape.area * f.abs();
        prop_assert!(close(f, -f2, tolerance), "{:e} {:e}", f, f2);
    }

    /// The mean of f over a polygon lies between the values of f at its southern and northern ends (f = 2Ω sin φ grows
    /// northward). A geodesic edge bulges poleward of its ends by less than the polygon's size squared over 8 a, times
    /// tan φ; a degree of latitude holds that for 400 km up to 85 degrees.
    #[test]
    fn planetary_vorticity_lies_between_its_ends(points in simple_ring()) {
        let (network, polygon) = ring_of(&points);
        let f = planetary_vorticity(&polygon, &positions(&network));
        let of = |lat: f64| 2.0 * gyremesh::integral::OMEGA * lat.clamp(-90.0, 90.0).to_radians().sin();
        let south = points.iter().map(|p| p.0).fold(90.0, f64::min);
        let north = points.iter().map(|p| p.0).fold(-90.0, f64::max);
        // Small rings at high latitude: f is known to the share of the area.
        let slack = AREA / polygon.shape.area * 1.5e-4 + ROUNDING * 465.0 * polygon.shape.noise_factor;
        let holds_pole = polygon.middle.0.abs() > 80.0;
        let end = if holds_pole { 90.0 } else { 1.0 };
        prop_assert!(f <= of(north + end) + slack && f >= of(south - end) - slack);
    }
}

/// Two stations 12 m apart are two stations (one place begins below 10 m), so the inner ones of a network have no say in
/// the region of all triangles, and the triangles still cover the outline.
#[test]
fn close_neighbours_inside_a_network_do_not_matter() {
    let plane = Plane {
        origin: (47.0, 8.0),
        shrink: 1.0,
    };
    let points = plane.place(&[
        (-100e3, -80e3),
        (110e3, -90e3),
        (95e3, 100e3),
        (-105e3, 85e3),
        (0.0, 0.0),
        (8.0, 9.0),
    ]);
    let (network, built) = tiled(&points).unwrap();
    let all = of_kind(&built, PolygonKind::Region)[0];
    let positions: Vec<Position> = positions(&network);
    let outline = geodesic_area((0..4).map(|s| positions[s]), &Geodesic::wgs84()).0;
    let stations: BTreeSet<usize> = all.row.stations.iter().copied().collect();
    assert_eq!(stations, BTreeSet::from([0, 1, 2, 3]));
    // Seven areas of 0.1 m².
    assert!(close(all.shape.area, outline, 7.0 * AREA));
}

/// A ring and the triangles inside it have the same values: a ring is the sum of the triangles that tile it.
#[test]
fn a_ring_equals_the_region_of_its_triangles() {
    let plane = Plane {
        origin: (-17.0, 179.9),
        shrink: 1.0,
    };
    let points = plane.place(&[
        (-60e3, -50e3),
        (55e3, -60e3),
        (70e3, 40e3),
        (-10e3, 80e3),
        (-75e3, 20e3),
        (5e3, 7e3),
    ]);
    let network = network(&points);
    let hull: RingSettings = ring("hull", &[0, 1, 2, 3, 4]);
    let all = region("all", RegionParts::AllTriangles);
    let built = build(&network, true, vec![hull], vec![all]).unwrap();
    let by_ring = of_kind(&built, PolygonKind::Ring)[0];
    let by_tiles = of_kind(&built, PolygonKind::Region)[0];
    let wind = [
        (3.0, 4.0),
        (-5.0, 1.0),
        (7.0, -2.0),
        (0.0, 9.0),
        (2.0, 2.0),
        (50.0, 60.0),
    ];
    let (z, d) = by_ring.row.apply(winds(&wind));
    let (z2, d2) = by_tiles.row.apply(winds(&wind));
    // Six areas of 0.1 m² in 1.5e10 m², and rounding.
    let tolerance = 1e-10 * 9.0 * by_ring.shape.noise_factor;
    assert!(close(z, z2, tolerance) && close(d, d2, tolerance));
}
