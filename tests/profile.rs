//! `gyremesh profile` on a field with a known divergence at each level, seen by platforms that drift.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fmt::Write as _;
use std::fs;
use std::path::Path;
use std::process::Command;

use serde_json::Value;

/// Metres in a degree along the equator and along a meridian there: a π/180 and a (1 − e²) π/180 of WGS 84.
const EAST: f64 = 6_378_137.0 * 0.017_453_292_519_943_295;
const NORTH: f64 = EAST * (1.0 - 0.006_694_379_990_14);

const STATIONS: [(&str, f64, f64, f64); 5] = [
    ("A", -0.2, -0.2, 0.0),
    ("B", -0.2, 0.25, 450.0),
    ("C", 0.22, 0.2, 450.0),
    ("D", 0.25, -0.22, 0.0),
    ("E", 0.0, 0.45, 650.0),
];

/// Pressure, hPa, divergence, 1e-5/s, and drift towards east, degrees.
const LEVELS: [(f64, f64, f64); 6] = [
    (1000.0, 0.9, 0.0),
    (850.0, 0.6, 0.02),
    (700.0, 0.3, 0.05),
    (500.0, 0.0, 0.1),
    (300.0, -0.6, 0.2),
    (100.0, -1.0, 0.3),
];

/// Wind u = D x/2 + 5, v = D y/2 − 3 where the platform is.
fn reports(skip: impl Fn(&str, f64) -> bool) -> String {
    let mut out = String::from("station,time,eastward,northward,latitude,longitude,level\n");
    for (id, latitude, longitude, _) in STATIONS {
        for (pressure, divergence, drift) in LEVELS {
            if skip(id, pressure) {
                continue;
            }
            let longitude = longitude + drift;
            let u = 0.5e-5 * divergence * longitude * EAST + 5.0;
            let v = 0.5e-5 * divergence * latitude * NORTH - 3.0;
            let minute = (1000.0 - pressure) / 20.0;
            let _ = writeln!(
                out,
                "{id},2031-06-14T11:{minute:02.0}:00Z,{u},{v},{latitude},{longitude},{pressure}"
            );
        }
    }
    out
}

fn write(folder: &Path, reports: &str, rest: &str) {
    let mut list = String::from("id,latitude,longitude,elevation\n");
    for (id, latitude, longitude, elevation) in STATIONS {
        let _ = writeln!(list, "{id},{latitude},{longitude},{elevation}");
    }
    fs::write(folder.join("stations.csv"), list).unwrap();
    fs::write(folder.join("reports.csv"), reports).unwrap();
    let settings = format!(
        "name = \"Invented soundings\"\n[stations]\nfile = \"stations.csv\"\ncolumns = {{ elevation = \"elevation\" }}\n\
         [[reports]]\nfiles = [\"reports.csv\"]\ncolumns = {{ eastward = \"eastward\", northward = \"northward\", latitude = \
         \"latitude\", longitude = \"longitude\", level = \"level\" }}\nlevel_unit = \"hPa\"\n\
         [analysis]\ninterval = \"12 h\"\ntolerance = \"90 min\"\n{rest}"
    );
    fs::write(folder.join("network.toml"), settings).unwrap();
}

fn run(folder: &Path, more: &[&str]) -> (String, String, i32) {
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("profile")
        .arg(folder.join("network.toml"))
        .args(more)
        .output()
        .unwrap();
    let text = |bytes: &[u8]| String::from_utf8_lossy(bytes).into_owned();
    (
        text(&output.stdout),
        text(&output.stderr),
        output.status.code().unwrap(),
    )
}

fn json(folder: &Path) -> Value {
    let (out, err, status) = run(folder, &["--json"]);
    assert_eq!(status, 0, "{err}");
    serde_json::from_str(&out).unwrap()
}

fn profile<'a>(all: &'a Value, polygon: &str) -> &'a Vec<Value> {
    let profiles = all["profiles"].as_array().unwrap();
    let found = profiles.iter().find(|p| p["polygon"] == polygon);
    found.unwrap_or_else(|| panic!("{all:#}"))["levels"]
        .as_array()
        .unwrap()
}

fn number(value: &Value) -> f64 {
    value.as_f64().unwrap_or_else(|| panic!("{value}"))
}

const ALL: &str = "[profile]\nlevels = [\"1000 hPa\", \"850 hPa\", \"700 hPa\", \"500 hPa\", \"300 hPa\", \"100 hPa\"]\n\
                   largest_gap = \"300 hPa\"\n";

// methods.md 11, case 7: the same divergences and levels; ω .1125, .18, .21, .15, −.01 Pa/s.
#[test]
fn platforms_that_drift_give_the_divergence_where_they_were() {
    let folder = tempfile::tempdir().unwrap();
    write(folder.path(), &reports(|_, _| false), ALL);
    let all = json(folder.path());
    let profiles = all["profiles"].as_array().unwrap();
    assert_eq!(profiles.len(), 3);
    let omega = [0.0, 0.1125, 0.18, 0.21, 0.15, -0.01];
    for one in profiles {
        assert_eq!(one["time"], "2031-06-14T12:00:00Z");
        let levels = one["levels"].as_array().unwrap();
        for (k, (found, (_, divergence, drift))) in levels.iter().zip(LEVELS).enumerate() {
            // The field is linear in degrees; what the meridians' convergence adds at 0.06 degrees (u tan φ/a) is below 5e-9.
            assert!(
                (number(&found["divergence"]) - 1e-5 * divergence).abs() < 2e-9,
                "{found}"
            );
            assert!(number(&found["vorticity"]).abs() < 5e-9, "{found}");
            assert!(
                (number(&found["omega"]["value"]) - omega[k]).abs() < 1e-4,
                "{found}"
            );
            let moved = number(&found["longitude"]) - number(&levels[0]["longitude"]);
            assert!((moved - drift).abs() < 1e-5, "{found}");
            assert_eq!(found["reason"], "");
        }
        assert!(number(&levels[5]["omega_adjusted"]["value"]).abs() < 1e-12);
        let errors = ["se", "se_correlated"].map(|se| number(&levels[3]["omega"][se]));
        assert!(errors[0] > 0.0 && errors[1] > errors[0]);
    }
    // Nothing but the prior is known after one time of five platforms.
    assert!(
        all["assumptions"]
            .to_string()
            .contains("by the stated prior")
    );
    assert!(
        number(&all["prior_share"][1]) > 0.3,
        "{}",
        all["prior_share"]
    );
}

#[test]
fn layers_and_levels_between() {
    let folder = tempfile::tempdir().unwrap();
    let layers = "[profile]\nlayers = [[\"850 hPa\", \"700 hPa\"], [\"1000 hPa\", \"850 hPa\"]]\nupper_boundary = \"0.18 Pa/s\"\n";
    write(folder.path(), &reports(|_, _| false), layers);
    let all = json(folder.path());
    let levels = profile(&all, "A+B+C");
    // Between two levels places and winds are means, so that of the divergence is near 0.75 and 0.45 (the drift bends it).
    assert!(
        (number(&levels[0]["divergence"]) - 0.75e-5).abs() < 1e-8,
        "{}",
        levels[0]
    );
    assert!((number(&levels[1]["divergence"]) - 0.45e-5).abs() < 1e-8);
    assert_eq!(levels[0]["level"], "1000 to 850 hPa");
    assert!((number(&levels[0]["omega"]["value"]) - 0.1125).abs() < 3e-4);
    assert!((number(&levels[1]["omega_adjusted"]["value"]) - 0.18).abs() < 1e-12);
}

#[test]
fn a_missing_platform_changes_the_ring_and_leaves_out_the_triangle() {
    let folder = tempfile::tempdir().unwrap();
    let ring = format!(
        "{ALL}[[polygons.ring]]\nname = \"ring\"\nstations = [\"A\", \"B\", \"C\", \"D\"]\n"
    );
    let lost = |id: &str, pressure: f64| id == "C" && pressure < 400.0;
    write(folder.path(), &reports(lost), &ring);
    let all = json(folder.path());
    let levels = profile(&all, "A+B+C");
    assert!(levels[3]["divergence"].is_number() && levels[4]["divergence"].is_null());
    assert_eq!(levels[4]["reason"], "C ends below");
    assert_eq!(
        levels[3]["reason"],
        "the profile ends here: motion not adjusted"
    );
    assert!(levels[3]["omega"].is_object() && levels[3]["omega_adjusted"].is_null());
    let levels = profile(&all, "ring");
    assert_eq!(levels[3]["stations"], "A B C D");
    assert_eq!(levels[4]["stations"], "A B D");
    assert_eq!(levels[4]["reason"], "C ends below: the polygon is without");
    assert!((number(&levels[5]["omega"]["value"]) + 0.01).abs() < 1e-4);
    assert_eq!(all["platform_levels"]["with_wind"], 28);
    assert_eq!(all["platform_levels"]["without"][0]["count"], 2);

    // A gap at the bottom is no ground: no boundary can be taken above it.
    let lost = |id: &str, pressure: f64| id == "A" && pressure > 900.0;
    write(folder.path(), &reports(lost), &ring);
    let all = json(folder.path());
    let levels = profile(&all, "A+B+C");
    assert_eq!(levels[0]["reason"], "A begins above");
    // A stands at sea level, where 1000 hPa is no deeper than a low can be.
    assert!(levels[1]["omega"].is_object());
    let lost = |id: &str, pressure: f64| id == "A" && pressure > 600.0;
    write(folder.path(), &reports(lost), &ring);
    let levels_of = json(folder.path());
    assert!(
        profile(&levels_of, "A+B+C")
            .iter()
            .all(|l| l["omega"].is_null())
    );
}

// The plane through the elevations rises 450 m over 0.45 degrees towards east between A and B: w = 5 m/s times 450 m/50.1 km,
// to first order, and omega = -rho g w with the standard air at 1000 hPa, 1.212 kg/m³ (U.S. Standard Atmosphere 1976).
#[test]
fn sloping_ground() {
    let folder = tempfile::tempdir().unwrap();
    let rest = format!(
        "{ALL}lower_boundary = \"slope\"\n[polygons]\ntriangles = false\n[[polygons.ring]]\nname = \"ring\"\nstations = [\"A\", \"B\", \"C\"]\n"
    );
    let flat_wind = reports(|_, _| false);
    write(folder.path(), &flat_wind, &rest);
    let all = json(folder.path());
    let bottom = &profile(&all, "ring")[0];
    // C stands 0.05 degrees west of B at the same height: the plane's slopes, solved by hand.
    let (x, y) = (0.45 * EAST, 0.42 * NORTH);
    let east = 450.0 / x;
    let north = (450.0 - east * 0.40 * EAST) / y;
    let mean = 0.5e-5 * 0.9 / 3.0;
    let u = 5.0 + mean * (-0.2 + 0.25 + 0.2) * EAST;
    let v = -3.0 + mean * (-0.2 - 0.2 + 0.22) * NORTH;
    let omega = -1.212 * 9.80665 * (u * east + v * north);
    let found = number(&bottom["omega"]["value"]);
    assert!((found / omega - 1.0).abs() < 2e-3, "{found} {omega}");
    assert!(number(&bottom["omega"]["se"]) > 0.0);
}

#[test]
fn a_height_for_reports_without_levels() {
    let folder = tempfile::tempdir().unwrap();
    let reports = reports(|_, pressure| pressure < 900.0);
    let cut = reports.lines().map(|line| line.rsplit_once(',').unwrap().0);
    let ground = cut.collect::<Vec<_>>().join("\n");
    write(folder.path(), &ground, "[profile]\nheight = \"500 m\"\n");
    let file = folder.path().join("network.toml");
    let settings = fs::read_to_string(&file).unwrap();
    let settings = settings
        .replace(", level = \"level\"", "")
        .replace("level_unit = \"hPa\"\n", "");
    fs::write(&file, settings).unwrap();
    let all = json(folder.path());
    let level = &profile(&all, "A+B+C")[0];
    assert!(
        (number(&level["w"]["value"]) + 500.0 * 0.9e-5).abs() < 1e-6,
        "{level}"
    );
    assert!(all["assumptions"].to_string().contains("up to h = 500 m"));
    let (out, _, status) = run(folder.path(), &[]);
    assert!(
        status == 0 && out.contains("ground") && out.contains("not warnings"),
        "{out}"
    );
}

#[test]
fn files_table_and_caution() {
    let folder = tempfile::tempdir().unwrap();
    write(folder.path(), &reports(|_, _| false), ALL);
    let out = folder.path().join("out");
    let (text, err, status) = run(folder.path(), &["--out", out.to_str().unwrap()]);
    assert_eq!(status, 0, "{err}");
    assert!(text.contains("These are estimates, not warnings."));
    assert!(
        text.lines().all(|line| line.chars().count() <= 80),
        "{text}"
    );
    let csv = fs::read_to_string(out.join("profile.csv")).unwrap();
    assert!(csv.starts_with(
        "time,polygon,stations,pressure,pressure_top,latitude,longitude,area_km2,vorticity,vorticity_se,divergence,\
         divergence_se,motion_at,omega,omega_se,omega_se_correlated,"
    ));
    assert_eq!(csv.lines().count(), 1 + 3 * 6);
    let columns = |line: &str| line.split(',').count();
    let header = columns(csv.lines().next().unwrap());
    assert!(csv.lines().all(|line| columns(line) == header));
}

/// Reports kept by an earlier run, or sorted in little memory, give the same profiles.
#[test]
fn a_cache_or_little_memory_changes_nothing() {
    let folder = tempfile::tempdir().unwrap();
    write(folder.path(), &reports(|_, _| false), ALL);
    let plain = run(folder.path(), &["--json"]);
    assert_eq!(plain.2, 0, "{}", plain.1);
    let file = folder.path().join("kept");
    let kept = ["--json", "--cache", file.to_str().unwrap()];
    for more in [&kept[..], &kept, &["--json", "--memory", "1MiB"]] {
        let (out, err, status) = run(folder.path(), more);
        assert_eq!((out, status), (plain.0.clone(), 0), "{more:?}: {err}");
    }
    assert!(file.exists());
}

#[test]
fn wrong_settings_say_what_is_expected() {
    let folder = tempfile::tempdir().unwrap();
    let refused = |rest: &str, words: &str| {
        write(folder.path(), &reports(|_, _| false), rest);
        let (_, err, status) = run(folder.path(), &[]);
        assert_eq!(status, 2, "{rest}: {err}");
        assert!(err.contains(words), "{rest}: {err}");
    };
    refused("", "`profile.levels`: there are no levels");
    refused("[profile]\nlevels = []\n", "there is no level");
    refused(
        "[profile]\nlevels = [\"850 hPa\"]\n",
        "one level makes no profile",
    );
    refused(
        "[profile]\nlevels = [\"850 hPa\", \"100 m\"]\n",
        "all pressures or all heights",
    );
    refused(
        "[profile]\nlevels = [\"850 hPa\", \"850 hPa\"]\n",
        "850 hPa is there twice",
    );
    refused(
        "[profile]\nlevels = [\"850 hpa\", \"500 hPa\"]\n",
        "`850 hpa` is not a level",
    );
    refused(
        "[profile]\nlevels = [\"-5 hPa\", \"500 hPa\"]\n",
        "is no pressure",
    );
    refused(
        "[profile]\nlayers = [[\"1000 hPa\", \"900 hPa\"], [\"850 hPa\", \"700 hPa\"]]\n",
        "a layer ends at 900 hPa and the next begins at 850 hPa",
    );
    let with = |rest: &str| format!("{ALL}{rest}\n");
    refused(
        &with("lower_boundary = \"rock\""),
        "`rock` is no boundary (`zero`, `slope`",
    );
    refused(
        &with("upper_boundary = \"slope\""),
        "`slope` is no boundary",
    );
    refused(&with("upper_boundary = \"0.1 m/s\""), "is no boundary");
    refused(&with("adjustment = \"best\""), "`best` is none of");
    refused(
        &with("lower_bondary = \"zero\""),
        "is `lower_boundary` meant?",
    );
    refused(
        &with("height = \"500 m\""),
        "a height is for reports without levels",
    );
    refused(
        "[profile]\nlevels = [\"100 m\", \"500 m\"]\n",
        "read as heights, the reports stand from 10000 m to 100000 m",
    );
    refused(
        "[profile]\nheight = \"500 m\"\n",
        "the reports stand on levels",
    );
}
