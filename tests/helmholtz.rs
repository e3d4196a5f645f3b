//! Rotational, divergent and harmonic part of the wind: a table made with SciPy, fields with known potentials, laws.
#![allow(
    clippy::unwrap_used,
    clippy::panic,
    clippy::float_cmp,
    clippy::print_stdout,
    reason = "tests may panic and print; counts are written as whole numbers"
)]

mod common;

use std::f64::consts::PI;
use std::hint::black_box;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::time::Instant;

use csv::StringRecord;

use common::{network, positions, table};
use gyremesh::helmholtz::{AtStation, Decomposer, Mesh, Part, Split};
use gyremesh::polygon::triangulate;
use gyremesh::units::Wind;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

fn decomposer(triangles: &[[usize; 3]], points: &[[f64; 2]]) -> Decomposer {
    Decomposer::new(Mesh::in_plane(triangles, points).unwrap()).unwrap()
}

fn split(decomposer: &Decomposer, winds: &[Wind]) -> Split {
    decomposer.split(1, |station, _| winds[station]).remove(0)
}

/// Two triangles of each cell of a square grid over the unit square, points inside pushed off the grid by up to a fifth of
/// a cell.
fn square(n: usize, seed: u64) -> (Vec<[usize; 3]>, Vec<[f64; 2]>) {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let cell = 1.0 / n as f64;
    let mut points = Vec::new();
    for i in 0..=n {
        for j in 0..=n {
            let mut push = |k: usize| {
                let inside = k > 0 && k < n;
                let by: f64 = rng.random_range(-0.2..0.2);
                if inside { by } else { 0.0 }
            };
            let (x, y) = (push(j), push(i));
            points.push([(j as f64 + x) * cell, (i as f64 + y) * cell]);
        }
    }
    let at = |i: usize, j: usize| i * (n + 1) + j;
    let cells = (0..n).flat_map(|i| (0..n).map(move |j| (i, j)));
    let triangles = cells.flat_map(|(i, j)| {
        let (a, b, c, d) = (at(i, j), at(i, j + 1), at(i + 1, j + 1), at(i + 1, j));
        if (i + j) % 2 == 0 {
            [[a, b, c], [a, c, d]]
        } else {
            [[a, b, d], [b, c, d]]
        }
    });
    (triangles.collect(), points)
}

/// Random stations on the Earth around a place, within so many degrees, with random winds.
fn on_earth(n: usize, place: (f64, f64), degrees: f64, seed: u64) -> (Mesh, Vec<Wind>) {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let (lat, lon) = place;
    let points: Vec<(f64, f64)> = (0..n)
        .map(|_| {
            let (a, b): (f64, f64) = (rng.random_range(-1.0..1.0), rng.random_range(-1.0..1.0));
            let longitude = lon + b * degrees / f64::to_radians(lat).cos();
            (
                lat + a * degrees,
                (longitude + 540.0).rem_euclid(360.0) - 180.0,
            )
        })
        .collect();
    let positions = positions(&network(&points));
    let triangles = triangulate(&positions, &(0..n).collect::<Vec<_>>()).unwrap();
    let mesh = Mesh::new(&triangles, &positions).unwrap();
    let winds = (0..n).map(|_| Wind {
        u: rng.random_range(-10.0..15.0),
        v: rng.random_range(-10.0..10.0),
    });
    let winds = winds.collect();
    (mesh, winds)
}

/// `tests/data/helmholtz.py`: the same elements, assembled and solved by NumPy and SciPy.
#[test]
fn agrees_with_scipy() {
    let rows = table("helmholtz.csv");
    for (mesh, holes) in [("whole", 0), ("holes", 1), ("strip", 0)] {
        let of = |kind: &str| -> Vec<Vec<f64>> {
            let wanted = rows.iter().filter(|r| &r[0] == kind && &r[1] == mesh);
            wanted
                .map(|r| r.iter().skip(2).map_while(|f| f.parse().ok()).collect())
                .collect()
        };
        let nodes = of("node");
        let triangles: Vec<[usize; 3]> = rows
            .iter()
            .filter(|r| &r[0] == "triangle" && &r[1] == mesh)
            .map(|r| [2, 3, 4].map(|k| r[k].parse().unwrap()))
            .collect();
        let points: Vec<[f64; 2]> = nodes.iter().map(|r| [r[0], r[1]]).collect();
        let winds: Vec<Wind> = nodes.iter().map(|r| Wind { u: r[2], v: r[3] }).collect();
        let decomposer = decomposer(&triangles, &points);
        let found = split(&decomposer, &winds);
        assert!(decomposer.mesh().holes >= holes, "{mesh}");
        assert_eq!(decomposer.mesh().triangles, triangles.len());
        let largest = |column: usize| nodes.iter().map(|r| r[column].abs()).fold(0.0, f64::max);
        let (psi, chi) = (largest(4), largest(5));
        assert!(psi > 1e4 && chi > 1e4);
        for (row, at) in nodes.iter().zip(&found.stations) {
            assert!((at.streamfunction - row[4]).abs() < 1e-9 * psi, "{mesh}");
            assert!(
                (at.velocity_potential - row[5]).abs() < 1e-9 * chi,
                "{mesh}"
            );
        }
        let energies = &of("energy")[0];
        let own = [found.energy, found.parts[0], found.parts[1], found.parts[2]];
        for (found, expected) in own.iter().zip(energies) {
            assert!((found / expected - 1.0).abs() < 1e-9, "{mesh}");
        }
    }
}

/// The energies of the parts sum to that of the wind, for any wind on meshes of any size and place.
#[test]
fn energies_add_up() {
    for (n, place, degrees) in [
        (10, (46.5, 8.0), 0.3),
        (300, (46.5, -30.0), 1.0),
        (300, (-17.0, 179.9), 2.0),
        (200, (85.0, 100.0), 4.0),
        (400, (10.0, 20.0), 30.0),
    ] {
        let (mesh, winds) = on_earth(n, place, degrees, 7);
        let found = split(&Decomposer::new(mesh).unwrap(), &winds);
        let sum: f64 = found.parts.iter().sum();
        assert!((sum / found.energy - 1.0).abs() < 1e-10, "{n} {place:?}");
        assert!(found.parts.iter().all(|&part| part > 0.0));
        let shares: f64 = Part::ALL.iter().map(|&p| found.share(p).unwrap()).sum();
        assert!((shares - 1.0).abs() < 1e-10);
    }
}

/// Streamfunction sin(πx) sin(πy), potential ½ sin(2πx) sin(πy) and a uniform and stretching wind on the unit square: the
/// errors of a linear element fall with the square of the size of the triangles (Strang & Fix 1973, from memory).
#[test]
fn known_potentials_come_back() {
    let stream = |[x, y]: [f64; 2]| (PI * x).sin() * (PI * y).sin();
    let potential = |[x, y]: [f64; 2]| 0.5 * (2.0 * PI * x).sin() * (PI * y).sin();
    let wind = |[x, y]: [f64; 2]| {
        let psi = [
            PI * (PI * x).cos() * (PI * y).sin(),
            PI * (PI * x).sin() * (PI * y).cos(),
        ];
        let chi = [
            PI * (2.0 * PI * x).cos() * (PI * y).sin(),
            0.5 * PI * (2.0 * PI * x).sin() * (PI * y).cos(),
        ];
        Wind {
            u: -psi[1] + chi[0] + 1.0 + 0.5 * x,
            v: psi[0] + chi[1] - 0.5 - 0.5 * y,
        }
    };
    // ½ ∫ |∇ψ|² = π²/4, ½ ∫ |∇χ|² = 5π²/32, ½ ∫ (1 + x/2)² + (½ + y/2)² = ½ (19/12 + 7/12).
    let energies = [PI * PI / 4.0, 5.0 * PI * PI / 32.0, 13.0 / 12.0];
    let mut errors: Vec<[f64; 4]> = Vec::new();
    for n in [10, 20, 40] {
        let (triangles, points) = square(n, 3);
        let winds: Vec<Wind> = points.iter().map(|&p| wind(p)).collect();
        let decomposer = decomposer(&triangles, &points);
        let found = split(&decomposer, &winds);
        let pairs = || points.iter().zip(&found.stations);
        let rms = |error: &dyn Fn([f64; 2], &AtStation) -> f64| {
            let squares: f64 = pairs().map(|(&p, at)| error(p, at).powi(2)).sum();
            (squares / points.len() as f64).sqrt()
        };
        errors.push([
            rms(&|p, at| at.streamfunction - stream(p)),
            rms(&|p, at| at.velocity_potential - potential(p)),
            // The rotational wind itself, at stations inside.
            rms(&|[x, y], at| {
                let inside = (0.15..0.85).contains(&x) && (0.15..0.85).contains(&y);
                let u = -PI * (PI * x).sin() * (PI * y).cos();
                if inside { at.parts[0].u - u } else { 0.0 }
            }),
            (0..3)
                .map(|k| (found.parts[k] / energies[k] - 1.0).abs())
                .fold(0.0, f64::max),
        ]);
    }
    for pair in errors.windows(2) {
        for (k, (coarse, fine)) in pair[0].iter().zip(pair[1]).enumerate() {
            // A fourth, and less than a third with points off the grid; winds are derivatives: a half.
            let least = if k == 2 { 1.8 } else { 3.0 };
            assert!(fine < coarse / least, "{errors:?}");
        }
    }
    // At 40 by 40: 2 in 1000 of the potentials.
    assert!(errors[2][0] < 2e-3 && errors[2][1] < 2e-3, "{errors:?}");
}

/// A vortex turns counter-clockwise around a minimum of ψ, a source blows away from a minimum of χ.
#[test]
fn signs() {
    let (triangles, points) = square(8, 1);
    let decomposer = decomposer(&triangles, &points);
    let middle = points
        .iter()
        .position(|p| (p[0] - 0.5).hypot(p[1] - 0.5) < 0.05)
        .unwrap();
    let vortex: Vec<Wind> = points
        .iter()
        .map(|&[x, y]| Wind {
            u: 0.5 - y,
            v: x - 0.5,
        })
        .collect();
    let found = split(&decomposer, &vortex).stations[middle];
    assert!(found.streamfunction < -0.1 && found.velocity_potential.abs() < 1e-12);
    let source: Vec<Wind> = points
        .iter()
        .map(|&[x, y]| Wind {
            u: x - 0.5,
            v: y - 0.5,
        })
        .collect();
    let found = split(&decomposer, &source).stations[middle];
    assert!(found.velocity_potential < -0.1 && found.streamfunction.abs() < 1e-12);
}

/// Winds with neither vorticity nor divergence are harmonic: a uniform wind and pure deformation to rounding, the vortex
/// 1/r around a hole as finely as the mesh sees it.
#[test]
fn harmonic_winds() {
    let (triangles, points) = square(12, 5);
    let whole = decomposer(&triangles, &points);
    let linear: Vec<Wind> = points
        .iter()
        .map(|&[x, y]| Wind {
            u: 4.0 + 3.0 * x + 2.0 * y,
            v: -1.0 + 2.0 * x - 3.0 * y,
        })
        .collect();
    let found = split(&whole, &linear);
    assert!(found.share(Part::Harmonic).unwrap() > 1.0 - 1e-12);
    assert!(found.parts[0] < 1e-25 && found.parts[1] < 1e-25);

    // An annulus of radii 1 and 3.
    let share = |rings: usize, around: usize| {
        let points: Vec<[f64; 2]> = (0..=rings)
            .flat_map(|i| {
                let r = 1.0 + 2.0 * i as f64 / rings as f64;
                (0..around).map(move |j| {
                    let (sin, cos) = (2.0 * PI * j as f64 / around as f64).sin_cos();
                    [r * cos, r * sin]
                })
            })
            .collect();
        let at = |i: usize, j: usize| i * around + j % around;
        let cells = (0..rings).flat_map(|i| (0..around).map(move |j| (i, j)));
        let triangles: Vec<[usize; 3]> = cells
            .flat_map(|(i, j)| {
                let (a, b, c, d) = (at(i, j), at(i + 1, j), at(i + 1, j + 1), at(i, j + 1));
                [[a, b, c], [a, c, d]]
            })
            .collect();
        let vortex = points.iter().map(|&[x, y]| {
            let squared = x * x + y * y;
            Wind {
                u: -y / squared,
                v: x / squared,
            }
        });
        let vortex: Vec<Wind> = vortex.collect();
        let annulus = decomposer(&triangles, &points);
        assert_eq!(annulus.mesh().holes, 1);
        split(&annulus, &vortex).share(Part::Harmonic).unwrap()
    };
    let (coarse, fine) = (share(4, 24), share(8, 48));
    assert!(
        coarse > 0.98 && 1.0 - fine < (1.0 - coarse) / 3.0,
        "{coarse} {fine}"
    );
}

/// Turned around the Earth's axis, over the date line, everything stays as it is; and on a small part of the Earth it is
/// what it is in a plane.
#[test]
fn the_place_does_not_matter() {
    let of = |longitude| {
        let (mesh, winds) = on_earth(60, (46.0, longitude), 1.0, 11);
        split(&Decomposer::new(mesh).unwrap(), &winds)
    };
    let (here, there) = (of(8.0), of(179.7));
    for (a, b) in here.stations.iter().zip(&there.stations) {
        assert!((a.streamfunction - b.streamfunction).abs() < 1e-3); // of 1e5 and more
        for (a, b) in a.parts.iter().zip(b.parts) {
            assert!((a.u - b.u).abs() < 1e-8 && (a.v - b.v).abs() < 1e-8);
        }
    }
    // 40 km: the curvature is (40/6400)², 4e-5.
    let (triangles, points) = square(6, 2);
    let metres: Vec<[f64; 2]> = points.iter().map(|p| p.map(|c| (c - 0.5) * 4e4)).collect();
    let plane = common::Plane {
        origin: (46.0, 8.0),
        shrink: 1.0,
    };
    let flat: Vec<(f64, f64)> = metres.iter().map(|p| (p[0], p[1])).collect();
    let winds: Vec<(f64, f64)> = points
        .iter()
        .map(|&[x, y]| (8.0 * (3.0 * x + 2.0 * y).sin(), 5.0 * (4.0 * y * x).cos()))
        .collect();
    let positions = positions(&network(&plane.place(&flat)));
    let earth = Decomposer::new(Mesh::new(&triangles, &positions).unwrap()).unwrap();
    let turned = plane.turn(&flat, &winds);
    let on_earth = earth.split(1, |s, _| Wind {
        u: turned[s].0,
        v: turned[s].1,
    });
    let in_plane = decomposer(&triangles, &metres).split(1, |s, _| Wind {
        u: winds[s].0,
        v: winds[s].1,
    });
    let [on_earth, in_plane] = [&on_earth[0], &in_plane[0]];
    for (a, b) in on_earth.parts.iter().zip(in_plane.parts) {
        assert!((a / b - 1.0).abs() < 1e-4);
    }
    let largest = |s: &Split| {
        s.stations
            .iter()
            .map(|a| a.streamfunction.abs())
            .fold(0.0, f64::max)
    };
    for (a, b) in on_earth.stations.iter().zip(&in_plane.stations) {
        assert!((a.streamfunction - b.streamfunction).abs() < 1e-4 * largest(in_plane));
    }
}

/// Many times at once give what each gives alone, to the last bit.
#[test]
fn times_do_not_touch_each_other() {
    let (mesh, winds) = on_earth(80, (46.0, 8.0), 1.0, 4);
    let decomposer = Decomposer::new(mesh).unwrap();
    let wind = |station: usize, t: usize| Wind {
        u: winds[station].u * (t as f64 + 0.7),
        v: winds[station].v + t as f64,
    };
    let together = decomposer.split(5, wind);
    for (t, found) in together.iter().enumerate() {
        let alone = decomposer.split(1, |station, _| wind(station, t)).remove(0);
        assert_eq!(&alone, found);
    }
    assert!(decomposer.split(0, wind).is_empty());
}

/// Without a station inside all is harmonic.
#[test]
fn a_single_triangle_is_harmonic() {
    let one = decomposer(&[[0, 1, 2]], &[[0.0, 0.0], [1.0, 0.0], [0.3, 0.9]]);
    let winds = [(1.0, 2.0), (3.0, -1.0), (0.0, 4.0)].map(|(u, v)| Wind { u, v });
    let found = split(&one, &winds);
    assert!(one.factor().is_none());
    assert_eq!(found.parts, [0.0, 0.0, found.energy]);
    // The mean wind: (4/3, 5/3).
    assert!((found.energy - 41.0 / 18.0).abs() < 1e-14);
    let calm = split(&one, &[Wind { u: 0.0, v: 0.0 }; 3]);
    assert_eq!(calm.share(Part::Rotational), None);
}

/// How many solutions cost what the factor costs. The clock is no part of any check; run with
/// `cargo test --release --test helmholtz -- --ignored --nocapture`.
#[test]
#[ignore = "prints times"]
fn factor_against_solutions() {
    let (mesh, winds) = on_earth(2000, (46.0, 8.0), 3.0, 9);
    let decomposer = Decomposer::new(mesh.clone()).unwrap();
    let factor = decomposer.factor().unwrap();
    let n = factor.unknowns();
    println!("{n} unknowns, {} entries of the factor", factor.entries());
    let mut rng = ChaCha8Rng::seed_from_u64(9);
    let sides: Vec<f64> = (0..n * 50).map(|_| rng.random_range(-1.0..1.0)).collect();
    let best = |work: &mut dyn FnMut()| {
        let runs = (0..5).map(|_| {
            let start = Instant::now();
            work();
            start.elapsed().as_secs_f64()
        });
        runs.fold(f64::INFINITY, f64::min)
    };
    // With the assembly of the matrix.
    let factored = best(&mut || drop(black_box(Decomposer::new(mesh.clone()))));
    let one_by_one = best(&mut || {
        for k in 0..50 {
            let mut side: Vec<f64> = (0..n).map(|i| sides[i * 50 + k]).collect();
            factor.solve(&mut side, 1);
            black_box(&side);
        }
    });
    let together = best(&mut || {
        let mut sides = sides.clone();
        factor.solve(&mut sides, 50);
        black_box(&sides);
    });
    println!(
        "factor {:.2} ms, 50 solutions one by one {:.2} ms, together {:.2} ms",
        1e3 * factored,
        1e3 * one_by_one,
        1e3 * together
    );
    println!(
        "the factor costs {:.1} solutions",
        50.0 * factored / one_by_one
    );
    let all = best(&mut || drop(black_box(decomposer.split(64, |s, _| winds[s]))));
    println!("64 times together {:.1} ms", 1e3 * all);
}

/// `decompose.csv` and `decompose_stations.csv` of the demo: a row for each time, energies and shares that add up, rows of
/// stations that belong to them, the same bytes for any number of threads.
#[test]
fn files_of_the_demo() {
    let site = Demo::new("");
    site.estimate("one", &["--decompose", "--threads", "1"]);
    site.estimate(
        "three",
        &["--decompose", "--threads", "3", "--format", "parquet"],
    );
    for name in ["decompose.csv", "decompose_stations.csv"] {
        assert!(
            site.bytes("one", name) == site.bytes("three", name),
            "{name}"
        );
    }
    let (header, energies) = site.rows("one", "decompose.csv");
    let (of_stations, stations) = site.rows("one", "decompose_stations.csv");
    assert_eq!(energies.len(), 49);
    let (mut at, mut holes) = (0, 0.0);
    for row in &energies {
        let number = |name: &str| value(&header, row, name);
        let parts = |what: &str| Part::ALL.map(|p| number(&format!("{}_{what}", p.name())));
        let energy = number("kinetic_energy");
        assert!((parts("energy").iter().sum::<f64>() / energy - 1.0).abs() < 1e-10);
        for (share, part) in parts("share").into_iter().zip(parts("energy")) {
            assert!((share - part / energy).abs() < 1e-15);
        }
        assert!(number("stations") <= number("stations_reporting"));
        let mut inside = 0.0;
        let start = at;
        while stations.get(at).is_some_and(|s| s[0] == row[0]) {
            let value = |name: &str| value(&of_stations, &stations[at], name);
            if stations[at][2] == *"true" {
                inside += 1.0;
            } else {
                assert_eq!(
                    (value("streamfunction"), value("velocity_potential")),
                    (0.0, 0.0)
                );
            }
            at += 1;
        }
        assert_eq!((at - start) as f64, number("stations"));
        assert_eq!(inside, number("stations_inside"));
        holes += number("holes");
    }
    assert_eq!(at, stations.len());
    // Stations inside are missing at some times.
    assert!(holes > 0.0);

    let summary = String::from_utf8(site.bytes("one", "summary.json")).unwrap();
    let summary: serde_json::Value = serde_json::from_str(&summary).unwrap();
    let total = |name: &str| {
        energies
            .iter()
            .map(|row| value(&header, row, name))
            .sum::<f64>()
    };
    let share = summary["kinetic_energy"]["rotational_share"]
        .as_f64()
        .unwrap();
    assert!((share - total("rotational_energy") / total("kinetic_energy")).abs() < 1e-12);

    // Holes are closed where the triangulation is made anew, by the section of the settings as by the option.
    let closed = Demo::new("[decompose]\nwrite = true\n");
    closed.settings("[polygons]\n", "[polygons]\nmissing = \"remesh\"\n");
    closed.estimate("out", &[]);
    let (header, closed) = closed.rows("out", "decompose.csv");
    assert!(closed.iter().all(|row| value(&header, row, "holes") == 0.0));
    // Nothing is written where it is not asked for.
    site.estimate("plain", &[]);
    assert!(!site.path("plain").join("decompose.csv").exists());
}

/// The demo at every half hour, without what takes time and is not needed here.
struct Demo(tempfile::TempDir);

impl Demo {
    fn new(more: &str) -> Self {
        let demo = Path::new(env!("CARGO_MANIFEST_DIR")).join("networks/ostrin");
        let reports = demo.join("../../examples/ostrin/reports.csv");
        let settings = std::fs::read_to_string(demo.join("network.toml")).unwrap();
        let settings = settings.replace(
            "../../examples/ostrin/reports.csv",
            reports.to_str().unwrap(),
        );
        let folder = tempfile::tempdir().unwrap();
        std::fs::copy(
            demo.join("stations.csv"),
            folder.path().join("stations.csv"),
        )
        .unwrap();
        std::fs::write(folder.path().join("network.toml"), settings + "\n" + more).unwrap();
        Self(folder)
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn settings(&self, from: &str, to: &str) {
        let text = std::fs::read_to_string(self.path("network.toml")).unwrap();
        let text = if text.contains(from) {
            text.replace(from, to)
        } else {
            text + "\n" + to
        };
        std::fs::write(self.path("network.toml"), text).unwrap();
    }

    fn estimate(&self, out: &str, options: &[&str]) {
        let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg("estimate")
            .arg(self.path("network.toml"))
            .args([
                "--quiet",
                "--interval",
                "30min",
                "--errors",
                "instrument",
                "--no-screen",
                "--out",
            ])
            .arg(self.path(out))
            .args(options)
            .output()
            .unwrap();
        let told = String::from_utf8_lossy(&output.stderr);
        assert_eq!(output.status.code(), Some(0), "{told}");
    }

    fn bytes(&self, out: &str, name: &str) -> Vec<u8> {
        std::fs::read(self.path(out).join(name)).unwrap()
    }

    fn rows(&self, out: &str, name: &str) -> (StringRecord, Vec<StringRecord>) {
        let mut reader = csv::Reader::from_path(self.path(out).join(name)).unwrap();
        let header = reader.headers().unwrap().clone();
        (header, reader.records().map(Result::unwrap).collect())
    }
}

fn value(header: &StringRecord, row: &StringRecord, name: &str) -> f64 {
    let column = header.iter().position(|h| h == name).unwrap();
    row[column].parse().unwrap()
}
