//! Kinematics of polygons: published cases, NumPy tables, closed forms, laws that hold for any wind.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::f64::consts::TAU;

use common::turbulence::{Class, Simulation};
use common::{Plane, network, pairs, positions, ring, set, table};
use gyremesh::align::{Covariance, WindBlock};
use gyremesh::check::Flag;
use gyremesh::integral::{EstimateBlock, Sampling, complete_errors, estimate};
use gyremesh::kinematics::{
    Kinematics, LocalWind, PolygonFrame, Quantities, Quantity, State, scalar,
};
use gyremesh::polygon::BuiltPolygons;
use gyremesh::settings::KinematicsSettings;
use gyremesh::station::Network;
use gyremesh::structure::StructureSettings;
use gyremesh::time::Time;
use gyremesh::units::Wind;

const SETTINGS: KinematicsSettings = KinematicsSettings {
    write: true,
    least_speed: 1.0,
};

/// 1/1000 of the size: what is 50 km in the plane is 50 m on the Earth, flat to 1e-10, and derivatives are 1000 times
/// as large.
const SMALL: Plane = Plane {
    origin: (47.0, 8.0),
    shrink: 1000.0,
};

fn close(found: f64, expected: f64, tolerance: f64) -> bool {
    (found - expected).abs() <= tolerance
}

/// One ring of points of a plane with its frame.
struct Ring {
    network: Network,
    built: BuiltPolygons,
    frame: PolygonFrame,
}

fn ring_on_earth(points: &[(f64, f64)]) -> Ring {
    let network = network(points);
    let all: Vec<usize> = (0..points.len()).collect();
    let built = common::build(&network, false, vec![ring("ring", &all)], vec![]).unwrap();
    let frame = PolygonFrame::new(&built.polygons[0], &built.edges, &positions(&network));
    Ring {
        network,
        built,
        frame,
    }
}

/// Points about their middle, where the axes of the plane are those of the polygon.
fn centred(points: &[(f64, f64)]) -> Vec<(f64, f64)> {
    let n = points.len() as f64;
    let sum = points
        .iter()
        .fold((0.0, 0.0), |s, p| (s.0 + p.0, s.1 + p.1));
    points
        .iter()
        .map(|p| (p.0 - sum.0 / n, p.1 - sum.1 / n))
        .collect()
}

/// Mean wind and gradient of winds at the points of a small plane, per m of the plane.
fn in_plane(points: &[(f64, f64)], winds: &[(f64, f64)]) -> LocalWind {
    in_plane_at(SMALL.origin, points, winds)
}

fn in_plane_at(origin: (f64, f64), points: &[(f64, f64)], winds: &[(f64, f64)]) -> LocalWind {
    let plane = Plane { origin, ..SMALL };
    let points = centred(points);
    let found = ring_on_earth(&plane.place(&points));
    let local = plane.turn(&points, winds);
    let wind = found.frame.apply(common::winds(&local));
    LocalWind {
        gradient: wind.gradient.map(|g| g / SMALL.shrink),
        ..wind
    }
}

fn without_errors(wind: &LocalWind, planetary: f64) -> Quantities {
    let state = State::new(wind, &[[0.0; 3]; 6]);
    Quantities::of(&state, planetary, 45.0, 0.0)
}

fn value(quantities: &Quantities, quantity: Quantity) -> f64 {
    quantities.get(quantity).unwrap().0
}

/// `methods.md` T0: D=+1.6785714e-4, zeta=-3.5714286e-6, st=-4.6428571e-5, sh=-1.3214286e-4 s-1.
#[test]
fn t0() {
    let points = [(0.0, 0.0), (60e3, 10e3), (20e3, 50e3)];
    let wind = in_plane(&points, &[(5.0, 2.0), (8.0, -1.0), (3.0, 6.0)]);
    for (found, expected) in [
        (wind.divergence(), 1.678_571_4e-4),
        (wind.vorticity(), -3.571_428_6e-6),
        (wind.stretching(), -4.642_857_1e-5),
        (wind.shearing(), -1.321_428_6e-4),
    ] {
        assert!(close(found, expected, 1e-11), "{found:e} {expected:e}");
    }
    let (u, v) = (wind.mean.u, wind.mean.v);
    assert!(close(u, 16.0 / 3.0, 1e-6) && close(v, 7.0 / 3.0, 1e-6));
}

/// `methods.md` G0.
const G0: LocalWind = LocalWind {
    mean: Wind { u: 6.0, v: 3.0 },
    gradient: [3e-4, -5e-4, 2e-4, 1e-4],
};

#[test]
fn g0() {
    let found = without_errors(&G0, 1e-4);
    for (quantity, expected, tolerance) in [
        (Quantity::Stretching, 2e-4, 1e-15),
        (Quantity::Shearing, -3e-4, 1e-15),
        (Quantity::TotalDeformation, 3.605_551e-4, 1e-10),
        (Quantity::CurvatureVorticity, 1.8e-4, 1e-15),
        (Quantity::ShearVorticity, 5.2e-4, 1e-15),
        (Quantity::DownwindAcceleration, 1.4e-4, 1e-15),
        (Quantity::Diffluence, 2.6e-4, 1e-15),
        (Quantity::OkuboWeiss, -3.6e-7, 1e-15),
        (Quantity::ContractionRate, -1.972_24e-5, 1e-10),
        // −28.155 degrees counter-clockwise from east.
        (Quantity::DilatationAxis, 118.155, 5e-4),
        // Of u = 6, v = 3: from 180 + atan2(6, 3).
        (Quantity::MeanDirection, 243.434_949, 1e-6),
        (Quantity::MeanSpeed, 45.0_f64.sqrt(), 1e-12),
        (Quantity::RossbyNumber, 7.0, 1e-12),
        (Quantity::VorticityStretching, -8e-4 * 4e-4, 1e-20),
    ] {
        let found = value(&found, quantity);
        assert!(close(found, expected, tolerance), "{quantity:?} {found:e}");
    }
    // Rotation prevails: no strain lasts.
    assert_eq!(found.get(Quantity::AsymptoticContractionRate), None);
    // Strain prevails: u = 2 x, v = −3 y, and a vorticity of 1: eigenvalues of [[2, −½], [½, −3]], (−1 ± √24)/2.
    let strained = LocalWind {
        gradient: [2e-4, -0.5e-4, 0.5e-4, -3e-4],
        ..G0
    };
    let found = value(
        &without_errors(&strained, 1e-4),
        Quantity::AsymptoticContractionRate,
    );
    assert!(close(found, 0.5e-4 * (24.0_f64.sqrt() + 1.0), 1e-15));
}

/// `kinematics.py`: values and errors of 120 polygons, through the winds of a block.
#[test]
fn numpy_table() {
    let rows = table("kinematics.csv");
    let path = format!("{}/tests/data/kinematics.csv", env!("CARGO_MANIFEST_DIR"));
    let header = csv::Reader::from_path(path)
        .unwrap()
        .headers()
        .unwrap()
        .clone();
    let column = |name: &str| header.iter().position(|h| h == name).unwrap();
    assert_eq!(rows.len(), 120);
    let plane = Plane {
        shrink: 1.0,
        ..SMALL
    };
    for row in &rows {
        let number = |name: &str| -> f64 { row[column(name)].parse().unwrap() };
        let (points, winds) = (pairs(&row[1]), pairs(&row[2]));
        let Ring { network, built, .. } = ring_on_earth(&plane.place(&points));
        let mut block = WindBlock::empty(vec![Time::from_micros(0)], points.len());
        for (k, (wind, c)) in plane
            .turn(&points, &winds)
            .iter()
            .zip(row[3].split(';'))
            .enumerate()
        {
            let c: Vec<f64> = c.split(' ').map(|n| n.parse().unwrap()).collect();
            let [uu, uv, vv] = c[..] else { panic!("{c:?}") };
            let (u, v) = *wind;
            set(
                &mut block,
                k,
                0,
                Wind { u, v },
                Covariance { uu, uv, vv },
                Flag::Pass,
            );
        }
        let estimates = estimate(&built.polygons, &block);
        let kinematics = Kinematics::new(
            &built.polygons,
            &built.edges,
            &positions(&network),
            &[1.0640e-4],
            SETTINGS,
        );
        let found = kinematics.of(&block, &estimates, None).cells[0];
        for quantity in Quantity::ALL {
            if matches!(
                quantity,
                Quantity::AsymptoticContractionRate | Quantity::RossbyNumber
            ) {
                continue;
            }
            let name = quantity.name();
            let mut expected = [number(name), number(&format!("{name}_se"))];
            let (value, error) = found.get(quantity).unwrap();
            // The interval of a direction is ± asin(1.96 σ/r).
            let widened = |error: f64| {
                let sine = 1.959_964 * error.to_radians();
                (sine.asin() / 1.959_964).to_degrees()
            };
            match quantity {
                Quantity::MeanDirection => expected[1] = widened(expected[1]),
                Quantity::DilatationAxis => expected[1] = 0.5 * widened(2.0 * expected[1]),
                // With its second-order term.
                Quantity::OkuboWeiss => expected[1] = number("okubo_weiss_se"),
                _ => {}
            }
            // The Earth, (100 m / R)² and 15 nm in 100 m; the script's pieces, 1/4000²; its differences, 1e-8.
            let scale = match quantity.units() {
                "m s-1" => 10.0,
                "degree" => 100.0,
                "s-2" => 2e-3,
                _ => 0.05,
            };
            assert!(
                close(value, expected[0], 1e-6 * scale),
                "{name} of {}: {value:e} {:e}",
                &row[0],
                expected[0]
            );
            assert!(
                close(error, expected[1], 1e-4 * expected[1] + 1e-9 * scale),
                "{name} of {}: ± {error:e} {:e}",
                &row[0],
                expected[1]
            );
        }
    }
}

/// Vorticity and divergence of the tensor are those of the line integral, for 300 rings of 2 to 600 km over poles and
/// the antimeridian: the same sum in another order, to 1e-14 of its largest terms (measured 5e-16).
#[test]
fn vorticity_and_divergence_are_those_of_the_line_integral() {
    let mut largest: f64 = 0.0;
    for row in &table("line_integral.csv") {
        let (points, winds) = (pairs(&row[1]), pairs(&row[2]));
        let Ring { built, frame, .. } = ring_on_earth(&points);
        let polygon = &built.polygons[0];
        let (z, d) = polygon.row.apply(common::winds(&winds));
        let found = frame.apply(common::winds(&winds));
        let scale = 20.0 * polygon.shape.noise_factor;
        largest = largest.max(
            (found.vorticity() - z)
                .abs()
                .max((found.divergence() - d).abs())
                / scale,
        );
    }
    assert!(largest < 1e-14, "{largest:e}");
}

/// A wind that is linear in the plane about the middle comes back, on the ellipsoid: what is lost of the gradient, and
/// what a uniform wind adds in units of its speed over the polygon's radius d.
#[test]
fn linear_winds_on_the_earth() {
    // At most, measured: 9.9e-9 (positions to 15 nm), 1.3e-7, 3.3e-6, 5.3e-5 of the gradient; 4e-13, 7e-12, 9e-10, 5e-8.
    for (d, of_gradient, of_wind) in [
        (1e3, 2e-8, 1e-11),
        (10e3, 3e-7, 2e-11),
        (50e3, 7e-6, 2e-9),
        (200e3, 1.1e-4, 1.1e-7),
    ] {
        for origin in [
            (0.0, 10.0),
            (47.0, 8.0),
            (-60.0, 179.9),
            (89.9, 0.0),
            (-90.0, 30.0),
        ] {
            let plane = Plane {
                origin,
                shrink: 1.0,
            };
            for n in [3_u32, 5] {
                let points: Vec<(f64, f64)> = (0..n)
                    .map(|k| {
                        let (sin, cos) = (TAU * f64::from(k) / f64::from(n) + 0.3).sin_cos();
                        (d * cos, d * sin)
                    })
                    .collect();
                let found = ring_on_earth(&plane.place(&points));
                // The frame's own axes: where its middle lies, north stands as at the origin but for what is allowed.
                let g = [0.7, -0.4, 0.9, 0.2].map(|g| g * 10.0 / d);
                let wind = |u: f64, v: f64, g: [f64; 4]| -> Vec<(f64, f64)> {
                    let at =
                        |&(x, y): &(f64, f64)| (u + g[0] * x + g[1] * y, v + g[2] * x + g[3] * y);
                    plane.turn(&points, &points.iter().map(at).collect::<Vec<_>>())
                };
                let linear = found.frame.apply(common::winds(&wind(0.0, 0.0, g)));
                let uniform = found.frame.apply(common::winds(&wind(6.0, 8.0, [0.0; 4])));
                let known = LocalWind {
                    gradient: g,
                    ..linear
                };
                let strain = |w: &LocalWind| w.stretching().hypot(w.shearing());
                let lost = if origin.0 > -90.0 {
                    [0, 1, 2, 3].map(|k| linear.gradient[k] - g[k])
                } else {
                    // At the pole itself no longitude says where the axes point.
                    let of = |w: &LocalWind| [w.vorticity(), w.divergence(), strain(w), 0.0];
                    let (a, b) = (of(&linear), of(&known));
                    [0, 1, 2, 3].map(|k| a[k] - b[k])
                };
                for (lost, added) in lost.into_iter().zip(uniform.gradient) {
                    let (lost, added) = (lost.abs() * d / 10.0, added.abs() * d / 10.0);
                    assert!(
                        lost < of_gradient && added < of_wind,
                        "{origin:?} {d} {n}: {lost:e} {added:e}"
                    );
                }
            }
        }
    }
}

/// `methods.md` 2: u = 10 m/s at all stations of T45 is not a wind without vorticity, since east turns: +1.5680e-6,
/// divergence 0.
#[test]
fn the_same_components_at_all_stations_turn() {
    let t45 = ring_on_earth(&[(45.0, 0.0), (45.0, 1.0), (46.0, 0.5)]);
    let wind = t45.frame.apply(|_| Wind { u: 10.0, v: 0.0 });
    assert!(close(wind.vorticity(), 1.5680e-6, 1e-10));
    assert!(close(wind.divergence(), 0.0, 1e-10));
}

/// `methods.md` 11: solid rotation, pure strain, pure divergence on any polygon.
#[test]
fn closed_forms() {
    let points = [
        (0.0, 0.0),
        (40e3, -5e3),
        (55e3, 30e3),
        (20e3, 12e3), // a dent
        (-10e3, 25e3),
    ];
    let c = 1e-4;
    let of = |at: fn(f64, f64) -> (f64, f64)| {
        let winds: Vec<(f64, f64)> = points.iter().map(|&(x, y)| at(c * x, c * y)).collect();
        in_plane(&points, &winds)
    };
    for (wind, expected) in [
        (of(|x, y| (-y, x)), [2.0 * c, 0.0, 0.0, 0.0]),
        (of(|x, y| (x, -y)), [0.0, 0.0, 2.0 * c, 0.0]),
        (of(|x, y| (y, x)), [0.0, 0.0, 0.0, 2.0 * c]),
        (of(|x, y| (x, y)), [0.0, 2.0 * c, 0.0, 0.0]),
    ] {
        let found = [
            wind.vorticity(),
            wind.divergence(),
            wind.stretching(),
            wind.shearing(),
        ];
        for (found, expected) in found.into_iter().zip(expected) {
            assert!(close(found, expected, 1e-11), "{found:e} {expected:e}");
        }
    }
}

/// `methods.md` 11: regular n-gon on the circle r with tangential wind V: vorticity 2V/r, no deformation; for a Rankine
/// vortex beyond its core 2 Vm Rc/r².
#[test]
fn rankine_vortex() {
    let (core, most) = (40e3, 12.0);
    for r in [25e3, 70e3] {
        let speed = if r < core {
            most * r / core
        } else {
            most * core / r
        };
        for n in [3_u32, 6] {
            let angle = |k: u32| (TAU * f64::from(k) / f64::from(n)).sin_cos();
            let points: Vec<(f64, f64)> =
                (0..n).map(|k| (r * angle(k).1, r * angle(k).0)).collect();
            let winds: Vec<(f64, f64)> = (0..n)
                .map(|k| (-speed * angle(k).0, speed * angle(k).1))
                .collect();
            let wind = in_plane(&points, &winds);
            assert!(close(wind.vorticity(), 2.0 * speed / r, 1e-10));
            for rest in [wind.divergence(), wind.stretching(), wind.shearing()] {
                assert!(close(rest, 0.0, 1e-10), "{rest:e}");
            }
        }
    }
}

const POINTS: [(f64, f64); 4] = [(-20e3, -15e3), (30e3, -22e3), (25e3, 31e3), (-35e3, 6e3)];
const WINDS: [(f64, f64); 4] = [(5.0, 2.0), (8.0, -1.0), (3.0, 6.0), (6.5, 1.5)];

/// Turning the axes by θ turns stretching and shearing by 2θ and the axis by θ, and leaves the rest.
#[test]
fn axes_may_be_turned() {
    let (angle, degrees) = (0.6_f64, 0.6_f64.to_degrees());
    let turn = |&(x, y): &(f64, f64)| {
        let (sin, cos) = angle.sin_cos();
        (x * cos - y * sin, y * cos + x * sin)
    };
    let turned = |of: &[(f64, f64)]| of.iter().map(turn).collect::<Vec<_>>();
    let (a, b) = (
        in_plane(&POINTS, &WINDS),
        in_plane(&turned(&POINTS), &turned(&WINDS)),
    );
    let (st, sh) = (a.stretching(), a.shearing());
    let (sin, cos) = (2.0 * angle).sin_cos();
    assert!(close(b.stretching(), st * cos - sh * sin, 1e-11));
    assert!(close(b.shearing(), sh * cos + st * sin, 1e-11));
    let (a, b) = (without_errors(&a, 1e-4), without_errors(&b, 1e-4));
    for quantity in Quantity::ALL {
        let (Some((x, _)), Some((y, _))) = (a.get(quantity), b.get(quantity)) else {
            assert_eq!(a.get(quantity), b.get(quantity), "{quantity:?}");
            continue;
        };
        let difference = match quantity {
            Quantity::MeanU | Quantity::MeanV | Quantity::Stretching | Quantity::Shearing => 0.0,
            // Counter-clockwise is towards smaller azimuths.
            Quantity::MeanDirection => (y - x + degrees + 180.0).rem_euclid(360.0) - 180.0,
            Quantity::DilatationAxis => (y - x + degrees + 90.0).rem_euclid(180.0) - 90.0,
            _ => (y - x) / x,
        };
        assert!(close(difference, 0.0, 2e-5), "{quantity:?} {x:e} {y:e}");
    }
}

/// Order of the stations, place, a wind that is the same everywhere: none changes the gradient; cutting a polygon in two
/// leaves the mean over both.
#[test]
fn order_place_uniform_wind_and_cuts() {
    let known = in_plane(&POINTS, &WINDS);
    let same = |other: &LocalWind, tolerance: f64| {
        for (a, b) in known.gradient.iter().zip(other.gradient) {
            assert!(close(*a, b, tolerance), "{a:e} {b:e}");
        }
    };
    let (mut points, mut winds) = (POINTS.to_vec(), WINDS.to_vec());
    points.reverse();
    winds.reverse();
    same(&in_plane(&points, &winds), 1e-12);
    for origin in [(47.3, 8.9), (-61.0, 179.999), (89.0, 12.0), (0.0, 0.0)] {
        same(&in_plane_at(origin, &POINTS, &WINDS), 1e-11);
    }
    let faster: Vec<(f64, f64)> = WINDS.iter().map(|&(u, v)| (u - 14.0, v + 9.0)).collect();
    same(&in_plane(&POINTS, &faster), 1e-11);

    let part = |k: [usize; 3]| {
        let [a, b, c] = k.map(|k| POINTS[k]);
        let area = 0.5 * ((b.0 - a.0) * (c.1 - a.1) - (c.0 - a.0) * (b.1 - a.1));
        (area, in_plane(&k.map(|k| POINTS[k]), &k.map(|k| WINDS[k])))
    };
    for cut in [[[0, 1, 2], [0, 2, 3]], [[0, 1, 3], [1, 2, 3]]] {
        let [(a, first), (b, second)] = cut.map(part);
        let mean: Vec<f64> = first
            .gradient
            .iter()
            .zip(second.gradient)
            .map(|(x, y)| (a * x + b * y) / (a + b))
            .collect();
        // Each part has its own middle: 1e-5 rad.
        same(
            &LocalWind {
                gradient: mean.try_into().unwrap(),
                ..known
            },
            5e-9,
        );
    }
}

/// The mirror image in the other hemisphere: vorticity, shearing and f change sign, the Rossby number and the shares of
/// rotation and strain do not; cyclonic stays cyclonic.
#[test]
fn southern_hemisphere() {
    let points = [(46.0, 7.0), (46.0, 7.6), (46.5, 7.3)];
    let winds = [(5.0, 2.0), (8.0, -1.0), (3.0, 6.0)];
    let south = points.map(|(lat, lon)| (-lat, lon));
    let mirrored = winds.map(|(u, v)| (u, -v));
    let a = ring_on_earth(&points).frame.apply(common::winds(&winds));
    let b = ring_on_earth(&south).frame.apply(common::winds(&mirrored));
    let f = 1.05e-4;
    let (qa, qb) = (without_errors(&a, f), without_errors(&b, -f));
    assert!(close(a.vorticity(), -b.vorticity(), 1e-16));
    for (quantity, sign) in [
        (Quantity::Stretching, 1.0),
        (Quantity::Shearing, -1.0),
        (Quantity::CurvatureVorticity, -1.0),
        (Quantity::ShearVorticity, -1.0),
        (Quantity::Diffluence, 1.0),
        (Quantity::OkuboWeiss, 1.0),
        (Quantity::RossbyNumber, 1.0),
        (Quantity::VorticityStretching, -1.0),
    ] {
        let (x, y) = (value(&qa, quantity), value(&qb, quantity));
        assert!(
            close(x, sign * y, 1e-9 * x.abs()),
            "{quantity:?} {x:e} {y:e}"
        );
    }
}

/// Over the antimeridian as anywhere else on the parallel; round a pole a wind straight across it has no gradient.
#[test]
fn antimeridian_and_pole() {
    let points = [(-17.0, 1.0), (-17.0, 2.0), (-16.2, 1.4)];
    let winds = [(5.0, 2.0), (8.0, -1.0), (3.0, 6.0)];
    let there = points.map(|(lat, lon)| (lat, if lon > 1.5 { lon - 181.5 } else { lon + 178.5 }));
    let a = ring_on_earth(&points).frame.apply(common::winds(&winds));
    let b = ring_on_earth(&there).frame.apply(common::winds(&winds));
    for (x, y) in a.gradient.iter().zip(b.gradient) {
        assert!(close(*x, y, 1e-13), "{x:e} {y:e}");
    }

    // Straight along the meridian of 0: at longitude λ its components are (−V sin λ, ...) of "from 180 at 0".
    let ring = [(89.5, 0.0), (89.5, 90.0), (89.5, 180.0), (89.5, -90.0)];
    let across = ring.map(|(_, lon): (f64, f64)| {
        let (sin, cos) = lon.to_radians().sin_cos();
        (10.0 * sin, 10.0 * cos)
    });
    let found = ring_on_earth(&ring).frame.apply(common::winds(&across));
    // 56 km: (d/R)² U/d is 1.4e-8.
    for g in found.gradient {
        assert!(close(g, 0.0, 2e-8), "{g:e}");
    }
    assert!(close(found.mean.speed(), 10.0, 1e-3), "{:?}", found.mean);
}

/// The errors of vorticity and divergence are those of the complete budget: the curvature and shear vorticity sum to the
/// vorticity, and what is left of their errors agrees.
#[test]
fn errors_are_those_of_the_budget() {
    let simulation = Simulation::new(Class::default(), 31);
    let (winds, _) = simulation.noisy(3, 32);
    let (polygons, edges) = (&simulation.built.polygons, &simulation.built.edges);
    let places = positions(&simulation.network);
    let sampling = Sampling::new(polygons, edges, &places, 30e3);
    let mut model = StructureSettings::default().prior(30e3);
    (model.transverse, model.site_variance) = (1.4 * model.longitudinal, 0.05);
    let mut block = estimate(polygons, &winds);
    complete_errors(polygons, &sampling, &winds, &[model], &mut block);
    let kinematics = Kinematics::new(
        polygons,
        edges,
        &places,
        &vec![1e-4; polygons.len()],
        SETTINGS,
    );
    let found = kinematics.of(&winds, &block, Some((&sampling, &[model])));
    let mut seen = 0;
    for (cell, quantities) in found.cells.iter().enumerate() {
        let get = |quantity: Quantity| quantities.get(quantity);
        let z = block.vorticity[cell];
        let (rossby, error) = get(Quantity::RossbyNumber).unwrap();
        assert!(close(rossby * 1e-4, z, 1e-15));
        assert!(
            close(error * 1e-4 / block.vorticity_se[cell], 1.0, 1e-9),
            "{error:e}"
        );
        if let (Some((curvature, _)), Some((shear, _))) = (
            get(Quantity::CurvatureVorticity),
            get(Quantity::ShearVorticity),
        ) {
            assert!(close(curvature + shear, z, 1e-16), "{z:e}");
            let along = get(Quantity::DownwindAcceleration).unwrap().0;
            let spread = get(Quantity::Diffluence).unwrap().0;
            assert!(close(along + spread, block.divergence[cell], 1e-16));
            seen += 1;
        }
    }
    assert!(seen > 50, "{seen}");
}

/// What cannot be said is left out: near calm, near the equator, where the polygon has no value.
#[test]
fn suppressed() {
    let calm = LocalWind {
        mean: Wind { u: 0.4, v: 0.6 },
        ..G0
    };
    let state = State::new(&calm, &[[0.0; 3]; 6]);
    let of = |latitude: f64, least: f64| Quantities::of(&state, 1e-5, latitude, least);
    for quantity in [
        Quantity::CurvatureVorticity,
        Quantity::ShearVorticity,
        Quantity::Diffluence,
        Quantity::DownwindAcceleration,
    ] {
        assert_eq!(of(30.0, 1.0).get(quantity), None);
        assert!(of(30.0, 0.5).get(quantity).is_some());
    }
    assert!(of(30.0, 1.0).get(Quantity::MeanDirection).is_some());
    assert_eq!(of(-4.9, 1.0).get(Quantity::RossbyNumber), None);
    assert!(of(-5.1, 1.0).get(Quantity::RossbyNumber).is_some());
    // Errors as large as the wind and the strain: any direction, any axis.
    let mut covariance = [[0.0; 3]; 6];
    covariance[0] = [0.3, 0.0, 0.3];
    (covariance[3], covariance[5]) = ([4e-8, 0.0, 4e-8], [4e-8, 0.0, 4e-8]);
    let unsure = Quantities::of(&State::new(&calm, &covariance), 1e-5, 30.0, 0.0);
    assert_eq!(unsure.get(Quantity::CurvatureVorticity), None);
    // ± 1.96 of these is all the circle, and all axes.
    for (quantity, half) in [
        (Quantity::MeanDirection, 180.0),
        (Quantity::DilatationAxis, 90.0),
    ] {
        let error = unsure.get(quantity).unwrap().1;
        assert!(close(1.959_964 * error, half, 1e-9), "{quantity:?} {error}");
    }
    assert!(unsure.get(Quantity::TotalDeformation).is_some());

    let Ring { network, built, .. } = ring_on_earth(&[(45.0, 0.0), (45.0, 1.0), (46.0, 0.5)]);
    let nothing = WindBlock::empty(vec![Time::from_micros(0)], 3);
    let estimates: EstimateBlock = estimate(&built.polygons, &nothing);
    let places = positions(&network);
    let found = Kinematics::new(&built.polygons, &built.edges, &places, &[1e-4], SETTINGS)
        .of(&nothing, &estimates, None);
    assert!(
        Quantity::ALL
            .iter()
            .all(|&q| found.cells[0].get(q).is_none())
    );
}

/// `methods.md` 3: T0 with q = 8, 10, 9 g/kg: flux divergence +1.6988095e-6; G0 with th_x = -2e-5, th_y = 3e-5 K/m:
/// -1.0816654e-8.
#[test]
fn scalars() {
    let points = [(0.0, 0.0), (60e3, 10e3), (20e3, 50e3)];
    let winds = [(5.0, 2.0), (8.0, -1.0), (3.0, 6.0)];
    let q = [8e-3, 10e-3, 9e-3];
    let points = centred(&points);
    let Ring { built, frame, .. } = ring_on_earth(&SMALL.place(&points));
    let local = SMALL.turn(&points, &winds);
    let found = scalar::flux_convergence(
        &built.polygons[0],
        &built.edges,
        common::winds(&local),
        |s| q[s],
    );
    assert!(
        close(found / SMALL.shrink, -1.698_809_5e-6, 1e-12),
        "{found:e}"
    );
    // The plane through q: (60, 10) km gives 2, (20, 50) km gives 1 g/kg.
    let [x, y] = scalar::gradient(&frame, |s| q[s]).map(|g| g / SMALL.shrink);
    assert!(close(60e3 * x + 10e3 * y, 2e-3, 1e-9) && close(20e3 * x + 50e3 * y, 1e-3, 1e-9));
    // Its error from the weights, (50, -40)/2A and (40, 20)/2A and so on, 2A = 2.8e9 m2: √(40² + 50² + 10²) and
    // √(40² + 20² + 60²) km.
    let [ex, ey] = scalar::gradient_error(&frame, 1.0).map(|e| e / SMALL.shrink);
    assert!(close(ex * 2.8e9, 4200.0_f64.sqrt() * 1e3, 1.0), "{ex:e}");
    assert!(close(ey * 2.8e9, 5600.0_f64.sqrt() * 1e3, 1.0), "{ey:e}");

    let fronts = scalar::frontogenesis(&G0, [-2e-5, 3e-5]).unwrap();
    assert!(close(fronts, -1.081_665_4e-8, 1e-15), "{fronts:e}");
    assert_eq!(scalar::frontogenesis(&G0, [0.0, 0.0]), None);
}
