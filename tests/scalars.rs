//! Observed scalars from the report tables to `scalars.csv`: values of known fields, errors against simulated ones.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::fmt::Write as _;
use std::fs;
use std::path::PathBuf;
use std::process::{Command, Output};

use common::{Plane, network, positions, ring, set};
use gyremesh::align::{Covariance, ScalarBlock, WindBlock};
use gyremesh::check::Flag;
use gyremesh::integral::estimate;
use gyremesh::kinematics::{Kinematics, ScalarCell, ScalarQuantity};
use gyremesh::settings::KinematicsSettings;
use gyremesh::time::Time;
use gyremesh::units::Wind;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

/// 1/1000 of the size, flat to 1e-10; derivatives are 1000 times as large.
const SMALL: Plane = Plane {
    origin: (47.0, 8.0),
    shrink: 1000.0,
};

/// What is said of values at the points of a small plane, at as many times as there are draws of errors: of the winds with
/// standard deviation `sds[0]`, of the scalar with `sds[1]`. Errors are stated as they are drawn.
fn cells(
    points: &[(f64, f64)],
    winds: &[(f64, f64)],
    scalar: &[f64],
    draws: usize,
    sds: [f64; 2],
) -> Vec<ScalarCell> {
    let network = network(&SMALL.place(points));
    let all: Vec<usize> = (0..points.len()).collect();
    let built = common::build(&network, false, vec![ring("ring", &all)], vec![]).unwrap();
    let times: Vec<Time> = (0..).take(draws).map(Time::from_micros).collect();
    let mut block = WindBlock::empty(times, points.len());
    let mut scalars = ScalarBlock::empty(1, points.len(), draws);
    let mut rng = ChaCha8Rng::seed_from_u64(77);
    let mut error = |sd: f64| -> f64 {
        let unit: f64 = StandardNormal.sample(&mut rng);
        sd * unit
    };
    let local = SMALL.turn(points, winds);
    for t in 0..draws {
        for (s, &(u, v)) in local.iter().enumerate() {
            let wind = Wind {
                u: u + error(sds[0]),
                v: v + error(sds[0]),
            };
            let covariance = Covariance {
                uu: sds[0] * sds[0],
                uv: 0.0,
                vv: sds[0] * sds[0],
            };
            set(&mut block, s, t, wind, covariance, Flag::Pass);
            scalars.set(0, s, t, Some(scalar[s] + error(sds[1])));
        }
    }
    let estimates = estimate(&built.polygons, &block);
    let settings = KinematicsSettings {
        write: true,
        least_speed: 1.0,
    };
    let positions = positions(&network);
    let kinematics = Kinematics::new(&built.polygons, &built.edges, &positions, &[1e-4], settings);
    let mesh = (built.polygons.as_slice(), &built.edges);
    kinematics
        .scalars(mesh, &block, &estimates, None, (&scalars, &[sds[1]]))
        .cells
}

/// T0 of `methods.md` (section 0) with q = 8, 10, 9 g/kg (section 3): the flux convergence is that printed there.
#[test]
fn flux_convergence_of_the_worked_case() {
    let points = [(0.0, 0.0), (60e3, 10e3), (20e3, 50e3)];
    let winds = [(5.0, 2.0), (8.0, -1.0), (3.0, 6.0)];
    let cell = cells(&points, &winds, &[8e-3, 10e-3, 9e-3], 1, [0.0, 0.0])[0];
    let (found, error) = cell.get(ScalarQuantity::FluxConvergence).unwrap();
    assert!(
        (found / SMALL.shrink / -1.698_809_5e-6 - 1.0).abs() < 1e-6,
        "{found}"
    );
    assert!(error.abs() < 1e-20);
    let (mean, _) = cell.get(ScalarQuantity::Mean).unwrap();
    assert!((mean - 9e-3).abs() < 1e-15);
    assert_eq!(cell.flag, Flag::Pass);
}

/// A plane of temperature in the wind G0 of `methods.md` 3: gradient, direction, advection, and the frontogenesis printed
/// there, in a triangle and a ring of five.
#[test]
fn a_plane_in_a_linear_wind() {
    let triangle = vec![(-20e3, -15e3), (25e3, -10e3), (-5e3, 25e3)];
    let five = vec![
        (0.0, -22e3),
        (28e3, -6e3),
        (12e3, 20e3),
        (-15e3, 19e3),
        (-25e3, -11e3),
    ];
    for points in [triangle, five] {
        let n = points.len() as f64;
        let centre = points
            .iter()
            .fold((0.0, 0.0), |c, p| (c.0 + p.0 / n, c.1 + p.1 / n));
        let points: Vec<(f64, f64)> = points
            .iter()
            .map(|p| (p.0 - centre.0, p.1 - centre.1))
            .collect();
        let winds: Vec<(f64, f64)> = points
            .iter()
            .map(|&(x, y)| (6.0 + 3e-4 * x - 5e-4 * y, 3.0 + 2e-4 * x + 1e-4 * y))
            .collect();
        let scalar: Vec<f64> = points
            .iter()
            .map(|&(x, y)| 290.0 - 2e-5 * x + 3e-5 * y)
            .collect();
        let cell = cells(&points, &winds, &scalar, 1, [0.0, 0.0])[0];
        let of = |quantity| cell.get(quantity).unwrap().0;
        let derivative = |quantity| of(quantity) / SMALL.shrink;
        let close = |found: f64, expected: f64| (found / expected - 1.0).abs() < 1e-5;
        assert!(close(derivative(ScalarQuantity::GradientX), -2e-5));
        assert!(close(derivative(ScalarQuantity::GradientY), 3e-5));
        assert!(close(
            derivative(ScalarQuantity::Gradient),
            1300_f64.sqrt() * 1e-6
        ));
        // atan2(-2, 3) from north, clockwise.
        assert!(close(of(ScalarQuantity::GradientDirection), 326.309_932));
        // The mean wind over the ring is that at its centre of area; G0 has (6, 3) at the middle of the stations.
        if points.len() == 3 {
            assert!(close(derivative(ScalarQuantity::Advection), 3e-5));
        }
        let front = of(ScalarQuantity::Frontogenesis) / SMALL.shrink / SMALL.shrink;
        assert!(close(front, -1.081_665_4e-8), "{front}");
    }
}

/// The stated errors are the standard deviations of 20,000 simulated values (each known to 0.5 %), of errors of the scalar
/// alone, of the wind alone, and of both.
#[test]
fn errors_are_those_of_simulated_values() {
    let triangle = vec![(-20e3, -15e3), (25e3, -10e3), (-5e3, 25e3)];
    let five = vec![
        (0.0, -22e3),
        (28e3, -6e3),
        (12e3, 20e3),
        (-15e3, 19e3),
        (-25e3, -11e3),
    ];
    for points in [triangle, five] {
        let winds: Vec<(f64, f64)> = points
            .iter()
            .map(|&(x, y)| (6.0 + 3e-4 * x - 5e-4 * y, 3.0 + 2e-4 * x + 1e-4 * y))
            .collect();
        let scalar: Vec<f64> = points
            .iter()
            .map(|&(x, y)| 8.0 - 2e-4 * x + 3e-4 * y)
            .collect();
        for sds in [[0.0, 0.1], [0.2, 0.0], [0.2, 0.1]] {
            let cells = cells(&points, &winds, &scalar, 20_000, sds);
            for quantity in ScalarQuantity::ALL {
                let found: Vec<(f64, f64)> =
                    cells.iter().map(|c| c.get(quantity).unwrap()).collect();
                let n = found.len() as f64;
                let mean = found.iter().map(|f| f.0).sum::<f64>() / n;
                let variance = found.iter().map(|f| (f.0 - mean).powi(2)).sum::<f64>() / n;
                let stated = found.iter().map(|f| f.1 * f.1).sum::<f64>() / n;
                let largest = found.iter().map(|f| f.0.abs()).fold(0.0, f64::max);
                if stated.sqrt() < 1e-9 * largest {
                    assert!(variance.sqrt() < 1e-9 * largest, "{quantity:?} {sds:?}");
                    continue;
                }
                let ratio = (stated / variance).sqrt();
                // In a ring the flux convergence is not quite −q δ − V·∇q, whose error it is given.
                let is_ring = points.len() > 3 && quantity == ScalarQuantity::FluxConvergence;
                let allowed = if is_ring { 0.05 } else { 0.02 };
                assert!(
                    (ratio - 1.0).abs() < allowed,
                    "{quantity:?} {sds:?} {}: {ratio}",
                    points.len()
                );
            }
        }
    }
}

/// Five stations 30 km and more apart around 46.5 N, 8 E.
const STATIONS: [(&str, f64, f64); 5] = [
    ("A", 46.2, 7.6),
    ("B", 46.25, 8.4),
    ("C", 46.5, 8.02),
    ("D", 46.8, 7.7),
    ("E", 46.75, 8.5),
];

struct Site(tempfile::TempDir);

impl Site {
    /// Two hours of reports every ten minutes; temperature falls by 10 degrees for a degree of latitude and rises by one an
    /// hour; of station E every third is missing, and it reports no humidity.
    fn new(order: impl Fn(usize) -> usize, more: &str) -> Self {
        let folder = tempfile::tempdir().unwrap();
        let mut stations = String::from("id,latitude,longitude\n");
        for (id, lat, lon) in STATIONS {
            let _ = writeln!(stations, "{id},{lat},{lon}");
        }
        let mut rows = Vec::new();
        for minute in (0..=120).step_by(10) {
            for (k, (id, lat, _)) in STATIONS.iter().enumerate() {
                let temperature = 20.0 - 10.0 * (lat - 46.0) + f64::from(minute) / 60.0;
                let temperature = if *id == "E" && minute % 30 == 10 {
                    "NA".to_string()
                } else {
                    format!("{temperature:.4}")
                };
                let humidity = if *id == "E" { "" } else { "0.008" };
                let (direction, speed) = (220 + 7 * k, 4.0 + 0.3 * k as f64);
                let (hour, minute) = (minute / 60, minute % 60);
                rows.push(format!(
                    "{id},2031-06-01T{hour:02}:{minute:02}:00Z,{direction},{speed},{temperature},{humidity}\n"
                ));
            }
        }
        let mut reports = String::from("station,time,direction,speed,t,q\n");
        for k in 0..rows.len() {
            reports.push_str(&rows[order(k) % rows.len()]);
        }
        let settings = format!(
            "name = \"test\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\n\
             columns = {{ station = \"station\", time = \"time\", direction = \"direction\", speed = \"speed\", scalars = \
             {{ temperature = \"t\", humidity = \"q\" }} }}\n{more}\n"
        );
        for (name, text) in [
            ("stations.csv", stations),
            ("reports.csv", reports),
            ("network.toml", settings),
        ] {
            fs::write(folder.path().join(name), text).unwrap();
        }
        Self(folder)
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn estimate(&self, more: &[&str]) -> Output {
        Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg("estimate")
            .arg(self.path("network.toml"))
            .args(["--quiet", "--no-screen", "--interval", "10min", "--out"])
            .arg(self.path("out"))
            .args(more)
            .output()
            .unwrap()
    }

    fn scalars(&self, more: &[&str]) -> String {
        let output = self.estimate(more);
        let told = String::from_utf8_lossy(&output.stderr);
        assert_eq!(output.status.code(), Some(0), "{told}");
        fs::read_to_string(self.path("out/scalars.csv")).unwrap()
    }
}

const ERRORS: &str = "[scalars.temperature]\nerror = 0.2\n[scalars.humidity]\nerror = 1e-4\n";

#[test]
fn from_the_table_to_the_file() {
    let site = Site::new(|k| k, ERRORS);
    let text = site.scalars(&["--kinematics"]);
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let header = reader.headers().unwrap().clone();
    let column = |name: &str| header.iter().position(|h| h == name).unwrap();
    let rows: Vec<csv::StringRecord> = reader.records().map(Result::unwrap).collect();
    let polygons = fs::read_to_string(site.path("out/polygons.csv")).unwrap();
    // A row for each of polygons.csv and scalar.
    assert_eq!(rows.len(), 2 * (polygons.lines().count() - 1));
    let (mut with, mut without) = (0, 0);
    for row in &rows {
        let number = |name: &str| row[column(name)].parse::<f64>();
        let has_e = row[1].split('+').any(|id| id == "E");
        let minute: u32 = row[0][14..16].parse().unwrap();
        let missing = has_e && (&row[2] == "humidity" || minute % 30 == 10);
        if missing {
            assert_eq!(&row[column("flag")], "9");
            assert!(row.iter().take(row.len() - 1).skip(3).all(str::is_empty));
            without += 1;
            continue;
        }
        with += 1;
        assert!(matches!(&row[column("flag")], "1" | "2"));
        if &row[2] == "humidity" {
            assert!(number("gradient_y").unwrap().abs() < 1e-15);
            assert!((number("mean").unwrap() - 0.008).abs() < 1e-15);
            // A uniform value: −q δ.
            assert!(number("flux_convergence").unwrap().abs() < 0.008 * 3e-4);
            assert!(number("frontogenesis").is_err());
        } else {
            // 10 degrees for 111.16 km (a degree of latitude at 46.5 N, WGS 84), towards the south; parallels are curved
            // by some 0.13 km in 40.
            assert!((number("gradient_y").unwrap() / -10.0 * 111_160.0 - 1.0).abs() < 1e-2);
            assert!(number("gradient_x").unwrap().abs() < 2e-6);
            assert!((number("gradient_direction").unwrap() - 180.0).abs() < 2.0);
            // South-westerly winds bring warm air.
            assert!(number("advection").unwrap() > 0.0);
        }
    }
    assert!(with > 50 && without > 20, "{with} {without}");

    // The order of the rows does not matter, nor do rows kept on disk or in a cache.
    let mixed = Site::new(|k| (k * 17) % 65, ERRORS);
    let cache = mixed.path("cache");
    let cached = ["--kinematics", "--cache", cache.to_str().unwrap()];
    assert!(text == mixed.scalars(&cached));
    assert!(text == mixed.scalars(&cached));

    // Not written where no kinematics are asked for.
    let quiet = Site::new(|k| k, ERRORS);
    assert_eq!(quiet.estimate(&[]).status.code(), Some(0));
    assert!(!quiet.path("out/scalars.csv").exists());
}

/// w = −D h (`methods.md` 4), its error likewise, and its assumption in the summary.
#[test]
fn vertical_wind_at_a_height() {
    let site = Site::new(|k| k, ERRORS);
    assert_eq!(site.estimate(&["--w-at", "500m"]).status.code(), Some(0));
    let read = |name: &str| -> Vec<csv::StringRecord> {
        let mut reader = csv::Reader::from_path(site.path("out").join(name)).unwrap();
        reader.records().map(Result::unwrap).collect()
    };
    let (polygons, motions) = (read("polygons.csv"), read("vertical_motion.csv"));
    assert!(polygons.len() == motions.len() && polygons.len() > 50);
    for (polygon, motion) in polygons.iter().zip(&motions) {
        assert_eq!(
            [&polygon[0], &polygon[1], &polygon[10]],
            [&motion[0], &motion[1], &motion[5]]
        );
        let [d, d_se] = [6, 7].map(|k| polygon[k].parse::<f64>().unwrap());
        let [height, w, w_se] = [2, 3, 4].map(|k| motion[k].parse::<f64>().unwrap());
        assert_eq!(height.to_string(), "500");
        assert!((w + 500.0 * d).abs() < 1e-15 && (w_se - 500.0 * d_se).abs() < 1e-15);
    }
    let summary = fs::read_to_string(site.path("out/summary.json")).unwrap();
    assert!(summary.contains("the same from flat ground up to h = 500 m"));
    // As a key of the settings, and with the assumption in the text.
    let by_key = Site::new(|k| k, &format!("{ERRORS}[kinematics]\nw_at = \"0.5 km\"\n"));
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("estimate")
        .arg(by_key.path("network.toml"))
        .args(["--no-screen", "--interval", "10min", "--out"])
        .arg(by_key.path("out"))
        .output()
        .unwrap();
    let told = String::from_utf8_lossy(&output.stdout);
    let words = told.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(words.contains("up to h = 500 m."), "{told}");
    let of = |site: &Site| fs::read(site.path("out/vertical_motion.csv")).unwrap();
    assert!(of(&site) == of(&by_key));
    let wrong = site.estimate(&["--w-at=-3m"]);
    assert_eq!(wrong.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&wrong.stderr).contains("height"));
}

#[test]
fn what_is_wrong_with_scalars_is_told() {
    for (more, expected) in [
        ("", "the standard error of `humidity` is missing"),
        (
            "[scalars.temperature]\nerror = -1.0\n[scalars.humidity]\nerror = 1e-4\n",
            "the error of `temperature` is -1",
        ),
        (
            "[scalars.temperature]\nerror = 0.2\n[scalars.humidity]\nerror = 1e-4\n[scalars.pressure]\nerror = 1\n",
            "no report file has a scalar `pressure`",
        ),
        (
            "[scalars.temperature]\nerro = 0.2\n[scalars.humidity]\nerror = 1e-4\n",
            "unknown field `erro`",
        ),
    ] {
        let site = Site::new(|k| k, more);
        let output = site.estimate(&["--kinematics"]);
        let told = String::from_utf8_lossy(&output.stderr);
        assert_eq!(output.status.code(), Some(2));
        assert!(
            told.contains(expected) && told.contains("network.toml"),
            "{told}"
        );
    }
    let site = Site::new(|k| k, ERRORS);
    let settings = fs::read_to_string(site.path("network.toml")).unwrap();
    let wrong = settings.replace("= \"q\"", "= \"moisture\"");
    fs::write(site.path("network.toml"), wrong).unwrap();
    let output = site.estimate(&["--kinematics"]);
    let told = String::from_utf8_lossy(&output.stderr);
    assert!(told.contains("moisture"), "{told}");
    // An unreadable value is told with its place; the others of the run stand.
    fs::write(site.path("network.toml"), settings).unwrap();
    let reports = fs::read_to_string(site.path("reports.csv")).unwrap();
    fs::write(
        site.path("reports.csv"),
        reports.replacen(",0.008\n", ",wet\n", 1),
    )
    .unwrap();
    let output = site.estimate(&["--kinematics"]);
    let summary = fs::read_to_string(site.path("out/summary.json")).unwrap();
    let summary: serde_json::Value = serde_json::from_str(&summary).unwrap();
    assert_eq!(output.status.code(), Some(1));
    assert_eq!(
        summary["reports"]["rows"]["set_aside"]["unreadable_wind"],
        1
    );
}
