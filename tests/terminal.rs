//! What the program prints, for people and for other programs: JSON, standard output, widths, colours, manual.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fmt::Write as _;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

use serde_json::Value;
use tempfile::TempDir;
use unicode_width::UnicodeWidthStr;

struct Run {
    status: i32,
    out: Vec<u8>,
    err: String,
}

impl Run {
    fn text(&self) -> &str {
        std::str::from_utf8(&self.out).unwrap()
    }

    fn json(&self) -> Value {
        serde_json::from_slice(&self.out).unwrap()
    }
}

/// The program, without what a terminal would tell it.
fn program() -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_gyremesh"));
    for name in ["COLUMNS", "NO_COLOR", "CLICOLOR", "CLICOLOR_FORCE", "TERM"] {
        command.env_remove(name);
    }
    command
}

fn gyremesh(args: &[&str]) -> Run {
    finished(program().args(args))
}

fn finished(command: &mut Command) -> Run {
    let output = command.output().unwrap();
    Run {
        status: output.status.code().unwrap(),
        out: output.stdout,
        err: String::from_utf8(output.stderr).unwrap(),
    }
}

fn demo() -> String {
    let repository = Path::new(env!("CARGO_MANIFEST_DIR"));
    let network = repository.join("networks/ostrin/network.toml");
    network.to_str().unwrap().to_string()
}

/// A folder for results.
struct Folder(TempDir);

impl Folder {
    fn new() -> Self {
        Self(tempfile::tempdir().unwrap())
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn name(&self) -> &str {
        self.0.path().to_str().unwrap()
    }

    fn read(&self, name: &str) -> Vec<u8> {
        fs::read(self.path(name)).unwrap()
    }

    /// Rows of a table, without its header.
    fn rows(&self, name: &str) -> usize {
        let text = fs::read_to_string(self.path(name)).unwrap();
        text.lines().count() - 1
    }
}

/// A copy of the demo in the folder, with its reports before a time of the day, all of it changed.
fn demo_until(folder: &Folder, end: &str, changed: impl Fn(&str) -> String) -> String {
    let repository = Path::new(env!("CARGO_MANIFEST_DIR"));
    let read = |name: &str| fs::read_to_string(repository.join(name)).unwrap();
    let write = |name: &str, text: String| fs::write(folder.path(name), changed(&text)).unwrap();
    write("stations.csv", read("networks/ostrin/stations.csv"));
    let reports = read("examples/ostrin/reports.csv");
    let end = format!("2031-06-14T{end}");
    let early = |line: &&str| **line < *end || line.starts_with("time");
    let reports: Vec<&str> = reports.lines().filter(early).collect();
    write("reports.csv", reports.join("\n"));
    let settings = read("networks/ostrin/network.toml");
    let settings = settings.replace("../../examples/ostrin/reports.csv", "reports.csv");
    write("network.toml", settings);
    folder.path("network.toml").to_str().unwrap().to_string()
}

fn as_it_is(text: &str) -> String {
    text.to_string()
}

#[test]
fn estimate_prints_its_summary_as_json() {
    let folder = Folder::new();
    let (demo, out) = (demo_until(&folder, "01", as_it_is), folder.name());
    let mut args = vec!["estimate", &demo, "--out", out, "--json"];
    let run = gyremesh(&args);
    assert_eq!(run.status, 0, "{}", run.err);
    assert!(run.out == folder.read("summary.json"));
    assert_eq!(run.json()["network"], "Ostrin Lake mesonet");
    args.push("--quiet");
    assert_eq!(gyremesh(&args).status, 2);
}

/// As many polygons as `mesh.csv` and `expected.csv` have, with the same numbers.
#[test]
fn polygons_prints_json() {
    let folder = Folder::new();
    let (demo, out) = (demo(), folder.name());
    let mesh = gyremesh(&["polygons", &demo, "--json", "--out", out]).json();
    let polygons = mesh["polygons"].as_array().unwrap();
    assert_eq!(polygons.len(), folder.rows("mesh.csv"));
    let left_out = polygons.iter().filter(|p| p["excluded"].is_string());
    assert_eq!(mesh["excluded"], left_out.count());
    let text = String::from_utf8(folder.read("mesh.csv")).unwrap();
    let first: Vec<&str> = text.lines().nth(1).unwrap().split(',').collect();
    assert_eq!(polygons[0]["polygon"], first[0]);
    assert_eq!(polygons[0]["area_km2"], first[3].parse::<f64>().unwrap());

    let run = gyremesh(&["polygons", &demo, "--expect", "--json", "--out", out]);
    let expected = run.json();
    let polygons = expected["polygons"].as_array().unwrap();
    assert_eq!(polygons.len(), folder.rows("expected.csv"));
    for polygon in polygons {
        let number = |name: &str| polygon[name].as_f64().unwrap();
        // Both parts add as squares.
        let sum = number("se_instrument").hypot(number("vorticity_se_sampling"));
        assert!((sum / number("vorticity_se") - 1.0).abs() < 1e-12);
    }
    assert!(
        expected["caution"]
            .as_str()
            .unwrap()
            .contains("not warnings")
    );
}

/// `--out -` gives the bytes of the file, and nothing else on standard output.
#[test]
fn standard_output_gets_the_main_table_alone() {
    let site = Folder::new();
    let demo = demo_until(&site, "01", as_it_is);
    let all: [(&[&str], &str); 10] = [
        (&["estimate"], "polygons.csv"),
        (&["estimate", "--format", "parquet"], "polygons.parquet"),
        (&["estimate", "--format", "netcdf"], "polygons.nc"),
        (&["estimate", "--summary-only"], "polygon_summary.csv"),
        (&["polygons"], "mesh.csv"),
        (&["polygons", "--expect"], "expected.csv"),
        (&["events"], "events.csv"),
        (&["calibrate"], "maintenance.csv"),
        (&["check"], "reports_flagged.csv"),
        (&["check", "--format", "parquet"], "reports_flagged.parquet"),
    ];
    for (command, file) in all {
        let folder = Folder::new();
        let mut args = vec![command[0], &demo];
        args.extend(&command[1..]);
        args.push("--out");
        let to_folder = gyremesh(&[&args[..], &[folder.name()]].concat());
        let to_stdout = gyremesh(&[&args[..], &["-"]].concat());
        assert_eq!(to_stdout.status, to_folder.status, "{}", to_stdout.err);
        assert!(!to_folder.out.is_empty());
        assert!(to_stdout.out == folder.read(file), "{args:?}");
        assert_eq!(to_stdout.err, to_folder.err);
    }
}

#[test]
fn standard_output_holds_one_thing() {
    let demo = demo();
    for (command, more) in [
        ("estimate", "--format=csv,parquet"),
        ("estimate", "--kinematics"),
        ("estimate", "--decompose"),
        ("estimate", "--by=hour"),
        ("estimate", "--json"),
        ("events", "--json"),
        ("polygons", "--json"),
        ("calibrate", "--plot=svg"),
        ("check", "--format=csv,parquet"),
    ] {
        let run = gyremesh(&[command, &demo, "--out", "-", more]);
        assert_eq!(run.status, 2, "{command} {more}");
        assert!(run.out.is_empty());
        let option = match more.strip_prefix("--format") {
            Some(_) => "all formats but one",
            None => more.split('=').next().unwrap(),
        };
        let words = format!("alone to standard output: leave out {option}");
        assert!(run.err.contains(&words), "{}", run.err);
    }
}

/// A reader that has seen enough is no error.
#[test]
fn a_closed_pipe_under_a_table_ends_quietly() {
    let site = Folder::new();
    let demo = demo_until(&site, "01", as_it_is);
    let args = ["estimate", &demo, "--out", "-"];
    let mut child = program()
        .args(args)
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    drop(child.stdout.take());
    let output = child.wait_with_output().unwrap();
    assert_eq!(output.status.code(), Some(0));
    assert!(output.stderr.is_empty());
}

/// Reports out of order make the run begin anew; standard output sees it once.
#[test]
fn a_run_that_begins_anew_writes_its_table_once() {
    let folder = Folder::new();
    let stations = "id,latitude,longitude\nA,46.0,-30.0\nB,46.0,-29.7\nC,46.2,-29.85\n";
    fs::write(folder.path("stations.csv"), stations).unwrap();
    let mut reports = String::from("time,station,direction,speed,remark\n");
    // So long that the file is not read in one go.
    let remark = "remark ".repeat(15_000);
    // Odd days forward, then even days back.
    for day in (1..29).step_by(2).chain((2..29).step_by(2).rev()) {
        for station in ["A", "B", "C"] {
            let _ = writeln!(
                reports,
                "2031-06-{day:02}T00:00:00Z,{station},270,{day},{remark}"
            );
        }
    }
    fs::write(folder.path("reports.csv"), reports).unwrap();
    let settings = "name = \"test\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\n\
                    [analysis]\ninterval = \"10 min\"\n";
    fs::write(folder.path("network.toml"), settings).unwrap();
    let network = folder.path("network.toml");
    let run = gyremesh(&[
        "estimate",
        network.to_str().unwrap(),
        "--out",
        "-",
        "--threads",
        "1",
    ]);
    assert_eq!(run.status, 0, "{}", run.err);
    assert!(run.err.contains("sorted first"), "{}", run.err);
    let headers = run.text().lines().filter(|l| l.starts_with("time,"));
    assert_eq!(headers.count(), 1);
    let mut times: Vec<&str> = run.text().lines().skip(1).map(|l| &l[..20]).collect();
    let rows = times.len();
    times.dedup();
    assert_eq!((rows, times.len()), (28, 28));
    assert!(times.is_sorted());
}

#[test]
fn completions_are_scripts() {
    for shell in ["bash", "zsh", "fish", "elvish", "powershell"] {
        let run = gyremesh(&["completions", shell]);
        assert_eq!((run.status, run.err.as_str()), (0, ""), "{shell}");
        for word in ["estimate", "smallest-angle", "summary-only"] {
            assert!(run.text().contains(word), "{shell}: {word}");
        }
    }
    assert_eq!(gyremesh(&["completions", "cmd"]).status, 2);
}

/// The shell takes the script, and completes with it.
#[cfg(unix)]
#[test]
fn bash_completes_commands_and_options() {
    let folder = Folder::new();
    let script = gyremesh(&["completions", "bash"]);
    fs::write(folder.path("gyremesh.bash"), &script.out).unwrap();
    let complete = "source gyremesh.bash; COMP_WORDS=(gyremesh est); COMP_CWORD=1; _gyremesh gyremesh est gyremesh; \
                    echo \"${COMPREPLY[@]}\"; COMP_WORDS=(gyremesh estimate --summ); COMP_CWORD=2; \
                    _gyremesh gyremesh --summ estimate; echo \"${COMPREPLY[@]}\"";
    let bash =
        |args: &[&str]| finished(Command::new("bash").args(args).current_dir(folder.0.path()));
    let parsed = bash(&["-n", "gyremesh.bash"]);
    assert_eq!((parsed.status, parsed.err.as_str()), (0, ""));
    let run = bash(&["-c", complete]);
    assert_eq!(run.text(), "estimate\n--summary-only\n", "{}", run.err);
}

#[test]
fn the_manual_has_a_page_for_each_command() {
    let folder = Folder::new();
    let run = gyremesh(&["manual", "--out", folder.name()]);
    assert_eq!((run.status, run.err.as_str()), (0, ""));
    let program = folder.read("gyremesh.1");
    assert!(gyremesh(&["manual"]).out == program);
    let help = gyremesh(&["-h"]);
    let commands = help.text().split("Commands:\n").nth(1).unwrap();
    let commands = commands.split("\n\n").next().unwrap().lines();
    // Names stand at two columns, the rest of their text further in.
    let names = commands
        .filter(|l| !l.starts_with("    "))
        .map(|l| l.split_whitespace().next().unwrap());
    let names: Vec<&str> = names.filter(|name| *name != "help").collect();
    assert!(names.len() >= 9, "{names:?}");
    for name in names {
        let page = String::from_utf8(folder.read(&format!("gyremesh-{name}.1"))).unwrap();
        assert!(
            page.contains(&format!(".TH gyremesh\\-{name} 1"))
                || page.contains(&format!(".TH gyremesh-{name} 1")),
            "{page}"
        );
    }
}

/// Identifiers and names longer than their columns, of signs that take none, one and two.
fn with_long_names(text: &str) -> String {
    let mut text = text.replace("OS", "Zu\u{308}rich-mesonet-大帽山自動氣象站-OS");
    for name in [
        "Ostrin Lake mesonet",
        "Hollin Ridge wind farm",
        "whole network",
    ] {
        text = text.replace(
            name,
            &format!("{name} 香港天文台 {}", "very long ".repeat(12)),
        );
    }
    text
}

/// Runs a command and looks at what it prints: no line beyond 80 columns, no escape codes.
fn fits_80_columns(args: &[&str]) -> String {
    let run = gyremesh(args);
    assert!(
        run.status < 2 && run.text().len() > 40,
        "{args:?}\n{}",
        run.err
    );
    for line in run.text().lines() {
        assert!(
            line.width() <= 80,
            "{args:?}: {} columns\n{line}",
            line.width()
        );
        assert!(!line.contains('\u{1b}'), "{args:?}: {line:?}");
    }
    run.text().to_string()
}

#[test]
fn help_fits_80_columns() {
    let all = fits_80_columns(&["-h"]);
    fits_80_columns(&["--help"]);
    let names = all.split("Commands:\n").nth(1).unwrap().lines();
    let names = names.take_while(|line| !line.is_empty());
    // Names stand at two columns, the rest of their text further in.
    let names = names.filter(|line| !line.starts_with("   "));
    let names: Vec<&str> = names
        .map(|line| line.split_whitespace().next().unwrap())
        .collect();
    assert!(names.len() >= 10, "{names:?}");
    for name in names.into_iter().filter(|name| *name != "help") {
        fits_80_columns(&[name, "-h"]);
        fits_80_columns(&[name, "--help"]);
    }
}

#[test]
fn tables_fit_80_columns() {
    let plain = Folder::new();
    let site = Folder::new();
    let short = Folder::new();
    let plain = demo_until(&plain, "01", as_it_is);
    let short = demo_until(&short, "04", with_long_names);
    let long = demo_until(&site, "12", with_long_names);
    let station = with_long_names("OS36");
    for network in [&plain, &long] {
        fits_80_columns(&["polygons", network]);
        fits_80_columns(&["polygons", network, "--expect"]);
    }
    fits_80_columns(&["check", &plain]);
    fits_80_columns(&["calibrate", &plain]);
    let text = fits_80_columns(&["check", &short]);
    // Identifiers can be told apart.
    assert!(
        text.contains("OS36 ") && text.contains("Zu\u{308}rich"),
        "{text}"
    );
    let at = ["--explain", &station, "--at", "2031-06-14T03:00:00Z"];
    fits_80_columns(&[&["check", &short][..], &at].concat());
    let text = fits_80_columns(&["calibrate", &long]);
    assert!(text.contains("evidence"), "{text}");
}

#[test]
fn bulletins_and_summaries_fit_80_columns() {
    let site = Folder::new();
    let long = demo_until(&site, "15", with_long_names);
    let text = fits_80_columns(&["events", &long]);
    assert!(text.contains("reaches"), "{text}");
    let out = site.path("out");
    let long = demo_until(&site, "12", with_long_names);
    let text = fits_80_columns(&["estimate", &long, "--out", out.to_str().unwrap()]);
    assert!(
        text.contains("Odd means") && text.contains("Reported least"),
        "{text}"
    );
}

#[test]
fn profiles_fit_80_columns() {
    let folder = Folder::new();
    let stations = "id,latitude,longitude\nOS1,46.0,-30.0\nOS2,46.0,-29.7\nOS3,46.2,-29.85\n";
    let mut reports = String::from("time,station,direction,speed,level\n");
    for (station, speed) in [("OS1", 5), ("OS2", 7), ("OS3", 9)] {
        for level in ["850", "700", "500"] {
            // One has no wind at the top.
            if (station, level) != ("OS3", "500") {
                let _ = writeln!(
                    reports,
                    "2031-06-14T00:00:00Z,{station},270,{speed},{level}"
                );
            }
        }
    }
    let settings = "name = \"Ostrin Lake mesonet\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\n\
                    files = [\"reports.csv\"]\nlevel_unit = \"hPa\"\n\
                    columns = { time = \"time\", station = \"station\", direction = \"direction\", \
                    speed = \"speed\", level = \"level\" }\n[analysis]\ninterval = \"1 h\"\n\
                    [profile]\nlevels = [\"850 hPa\", \"700 hPa\", \"500 hPa\"]\n";
    for (name, text) in [
        ("stations.csv", stations),
        ("reports.csv", &reports),
        ("network.toml", settings),
    ] {
        fs::write(folder.path(name), with_long_names(text)).unwrap();
    }
    let network = folder.path("network.toml");
    let text = fits_80_columns(&["profile", network.to_str().unwrap()]);
    assert!(text.contains("850 hPa"), "{text}");
    let network = network.to_str().unwrap();
    let to_folder = gyremesh(&["profile", network, "--out", folder.name()]);
    assert_eq!(to_folder.status, 0);
    assert!(gyremesh(&["profile", network, "--out", "-"]).out == folder.read("profile.csv"));
}

/// Colours for those who ask for them (<https://no-color.org>, <https://bixense.com/clicolors>), not in a pipe.
#[test]
fn colours_are_asked_for() {
    let site = Folder::new();
    let demo = demo_until(&site, "01", as_it_is);
    let args = [
        "check",
        &demo,
        "--explain",
        "OS01",
        "--at",
        "2031-06-14T00:30:00Z",
    ];
    let plain = gyremesh(&args);
    let forced = finished(program().env("CLICOLOR_FORCE", "1").args(args));
    let none = finished(
        program()
            .env("CLICOLOR_FORCE", "1")
            .env("NO_COLOR", "1")
            .args(args),
    );
    assert!(plain.out == none.out);
    // Nothing is suspect here, so nothing is coloured.
    assert!(forced.out == plain.out);
    let table = ["polygons", &demo];
    let forced = finished(program().env("CLICOLOR_FORCE", "1").args(table));
    assert!(
        forced
            .text()
            .starts_with("\u{1b}[1mOstrin Lake mesonet\u{1b}[0m\n")
    );
    let stripped = forced
        .text()
        .replace("\u{1b}[1m", "")
        .replace("\u{1b}[0m", "");
    assert_eq!(stripped, gyremesh(&table).text());
    let json = ["polygons", &demo, "--json"];
    let forced = finished(program().env("CLICOLOR_FORCE", "1").args(json));
    assert!(forced.out == gyremesh(&json).out);

    let wrong = ["polygons", "nowhere.toml"];
    let run = gyremesh(&wrong);
    assert!(
        run.err.starts_with("error: cannot read nowhere.toml"),
        "{}",
        run.err
    );
    let run = finished(program().env("CLICOLOR_FORCE", "1").args(wrong));
    assert!(
        run.err
            .starts_with("\u{1b}[1m\u{1b}[31merror:\u{1b}[0m cannot"),
        "{:?}",
        run.err
    );
}

/// What failed is red.
#[test]
fn a_failed_test_is_coloured() {
    let site = Folder::new();
    let demo = demo_until(&site, "01", |text| {
        text.replace("T00:30:00Z,OS01,", "T00:30:00Z,OS01,10,120.0,,")
    });
    let args = [
        "check",
        &demo,
        "--explain",
        "OS01",
        "--at",
        "2031-06-14T00:30:00Z",
    ];
    let run = finished(program().env("CLICOLOR_FORCE", "1").args(args));
    assert!(
        run.text().contains("\u{1b}[31mflag 4, fail\u{1b}[0m"),
        "{}",
        run.text()
    );
    assert!(
        run.text().contains("  \u{1b}[31m4 gross range:\u{1b}[0m"),
        "{}",
        run.text()
    );
}
