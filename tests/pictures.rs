//! Pictures of every command: well-formed, with their axes, units and cautions; the numbers in them are those of the run.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fmt::Write as _;
use std::fs;
use std::path::Path;
use std::process::Command;

use tempfile::TempDir;

/// Runs a command with pictures in both formats; the names of the files that it left.
fn draw(command: &str, folder: &Path, more: &[&str]) -> Vec<String> {
    let out = folder.join("out");
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg(command)
        .arg(folder.join("network.toml"))
        .args(["--plot", "png,svg", "--out"])
        .arg(&out)
        .args(more)
        .output()
        .unwrap();
    let text = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.code() < Some(2), "{command}: {text}");
    let names = fs::read_dir(&out).unwrap();
    let mut names: Vec<String> = names
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .filter(|name| {
            ["png", "svg"].contains(&Path::new(name).extension().unwrap().to_str().unwrap())
        })
        .collect();
    names.sort();
    names
}

/// An SVG of a run, which must hold these texts; its PNG must be one.
fn picture(folder: &Path, name: &str, texts: &[&str]) -> String {
    let png = fs::read(folder.join(format!("out/{name}.png"))).unwrap();
    // The signature of PNG (W3C, PNG third edition, 5.2).
    assert_eq!(png[..8], *b"\x89PNG\r\n\x1a\n", "{name}");
    let svg = fs::read_to_string(folder.join(format!("out/{name}.svg"))).unwrap();
    for text in texts {
        assert!(svg.contains(text), "{name}: `{text}` is missing");
    }
    assert!(!svg.contains("NaN") && !svg.contains("inf"), "{name}");
    svg
}

/// Four stations in a wind that converges by 2e-5 1/s and turns by 4e-5 1/s, for three hours; one of them falls silent.
fn field() -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    let places = [
        ("NW", 0.15, -30.15),
        ("SW", -0.15, -30.15),
        ("SE", -0.15, -29.85),
        ("NE", 0.15, -29.85),
    ];
    let mut stations = String::from("id,latitude,longitude\n");
    let mut reports = String::from("time,station,eastward,northward\n");
    for (id, latitude, longitude) in places {
        writeln!(stations, "{id},{},{longitude}", 46.0 + latitude).unwrap();
        let (x, y) = ((longitude + 30.0) * 77_200.0, latitude * 111_100.0);
        for minute in (0..180).step_by(10) {
            if id == "NE" && minute > 120 {
                continue;
            }
            let (u, v) = (5.0 - 1e-5 * x - 2e-5 * y, -1e-5 * y + 2e-5 * x);
            let (hour, minute) = (minute / 60, minute % 60);
            writeln!(reports, "2031-06-14T0{hour}:{minute:02}:00Z,{id},{u},{v}").unwrap();
        }
    }
    fs::write(folder.path().join("stations.csv"), stations).unwrap();
    fs::write(folder.path().join("reports.csv"), reports).unwrap();
    let settings = "name = \"Four & more\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\n\
                    columns = { eastward = \"eastward\", northward = \"northward\" }\n";
    fs::write(folder.path().join("network.toml"), settings).unwrap();
    folder
}

#[test]
fn estimate_draws_maps_a_series_and_the_structure_function() {
    let field = field();
    let at = ["--at", "2031-06-14T01:04:00Z", "--polygon", "NE+NW+SW"];
    let names = draw("estimate", field.path(), &at);
    // The nearest analysis time.
    let map = "map_divergence_20310614T010000Z";
    assert_eq!(
        names,
        [
            "map_divergence_20310614T010000Z.png",
            "map_divergence_20310614T010000Z.svg",
            "map_vorticity_20310614T010000Z.png",
            "map_vorticity_20310614T010000Z.svg",
            "series.png",
            "series.svg",
            "structure.png",
            "structure.svg",
        ]
    );
    let caution = "These are estimates, not warnings.";
    let texts = [
        "Four &amp; more",
        "2031-06-14 01:00 UTC",
        "10⁻⁵ s⁻¹",
        "hatched",
        "km",
        ">NW<",
        caution,
    ];
    let svg = picture(field.path(), map, &texts);
    // 4 barbs with their halos, the hatching and north; both triangles have the colour of -2e-5, which is the end of the scale.
    assert_eq!(
        svg.matches("rotate(").count() - svg.matches("rotate(90)").count(),
        2 * 4 + 2
    );
    assert_eq!(svg.matches("fill=\"#0d3a66\"").count(), 2);
    let series = picture(
        field.path(),
        "series",
        &[
            "NE+NW+SW",
            "vorticity, 10⁻⁵ s⁻¹",
            "time, UTC",
            "95 % interval",
            caution,
        ],
    );
    assert!(series.contains(">01:00<") && series.contains(">02:00<"));
    picture(
        field.path(),
        "structure",
        &["distance, km", "m² s⁻²", "exponent"],
    );
}

#[test]
fn calibrate_draws_turns_and_factors() {
    let folder = tempfile::tempdir().unwrap();
    let network = fs::read_to_string("networks/ostrin/network.toml").unwrap();
    let root = std::env::current_dir().unwrap();
    let network = network
        .replace("../../examples", root.join("examples").to_str().unwrap())
        .replace(
            "stations.csv",
            root.join("networks/ostrin/stations.csv").to_str().unwrap(),
        );
    fs::write(folder.path().join("network.toml"), network).unwrap();
    assert_eq!(
        draw("calibrate", folder.path(), &[]),
        ["calibration.png", "calibration.svg"]
    );
    let svg = picture(
        folder.path(),
        "calibration",
        &[
            "turn, degrees clockwise",
            "factor of the speed",
            "95 % intervals",
            ">OS38<",
        ],
    );
    // A point for each of 38 stations in either panel; turned and mis-scaled ones in colour, and the sign of the legend.
    assert_eq!(svg.matches("<circle").count(), 2 * 38 + 1);
    assert_eq!(
        svg.matches("<circle").count() - svg.matches("r=\"3.4\" fill=\"#59626e\"").count(),
        5
    );
}

#[test]
fn profile_draws_the_levels() {
    let folder = tempfile::tempdir().unwrap();
    let mut reports = String::from("time,station,eastward,northward,latitude,longitude,level\n");
    let places = [("A", 0.0, 0.0), ("B", 0.0, 0.4), ("C", 0.4, 0.1)];
    let mut stations = String::from("id,latitude,longitude\n");
    for (id, latitude, longitude) in places {
        writeln!(stations, "{id},{latitude},{longitude}").unwrap();
        for level in [1000.0, 850.0, 700.0, 500.0] {
            let u = 3e-5 * longitude * 111_000.0;
            writeln!(
                reports,
                "2031-06-14T12:00:00Z,{id},{u},2,{latitude},{longitude},{level}"
            )
            .unwrap();
        }
    }
    fs::write(folder.path().join("stations.csv"), stations).unwrap();
    fs::write(folder.path().join("reports.csv"), reports).unwrap();
    let settings = "name = \"Levels\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\ncolumns = \
                    { eastward = \"eastward\", northward = \"northward\", latitude = \"latitude\", longitude = \
                    \"longitude\", level = \"level\" }\nlevel_unit = \"hPa\"\n[analysis]\ninterval = \"12 h\"\ntolerance = \
                    \"90 min\"\n[profile]\nlevels = [\"1000 hPa\", \"850 hPa\", \"700 hPa\", \"500 hPa\"]\n";
    fs::write(folder.path().join("network.toml"), settings).unwrap();
    assert_eq!(
        draw("profile", folder.path(), &[]),
        ["profile.png", "profile.svg"]
    );
    let texts = [
        "A+B+C",
        "pressure, hPa",
        "divergence, 10⁻⁵ s⁻¹",
        "ω, Pa s⁻¹",
        "O'Brien 1970",
        "These are estimates, not warnings.",
    ];
    let svg = picture(folder.path(), "profile", &texts);
    // Vorticity, divergence and motion at four levels.
    assert_eq!(svg.matches("<circle").count(), 3 * 4);
}
