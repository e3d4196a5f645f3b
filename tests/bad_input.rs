//! Bad input through the program: what is said, with its place, and how the run ends. One unusable row or file never
//! stops a run (exit status 1); where nothing can be done, the status is 2.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fs;
use std::io::{BufWriter, Write};
use std::path::PathBuf;
use std::process::Command;

use flate2::Compression;
use flate2::write::GzEncoder;
use serde_json::Value;
use tempfile::TempDir;

const STATIONS: &str = "id,latitude,longitude\nA,46.0,-30.0\nB,46.0,-29.7\nC,46.2,-29.85\n";
const HEADER: &str = "time,station,direction,speed\n";
const GOOD: &str = "2031-06-14T00:00:00Z,A,270,5\n\
                    2031-06-14T00:00:00Z,B,280,6\n\
                    2031-06-14T00:00:00Z,C,250,7\n";

/// A network in a folder of its own; its reports are `*.csv` there.
struct Site(TempDir);

struct Run {
    status: i32,
    err: String,
    json: Value,
}

impl Site {
    fn new(files: &[(&str, &[u8])], format: &str) -> Self {
        let site = Self(tempfile::tempdir().unwrap());
        fs::write(site.path("stations.txt"), STATIONS).unwrap();
        for (name, bytes) in files {
            fs::write(site.path(name), bytes).unwrap();
        }
        let settings = format!(
            "name = \"test\"\n[stations]\nfile = \"stations.txt\"\n[[reports]]\nfiles = [\"*.csv\"]\n{format}\n"
        );
        fs::write(site.path("network.toml"), settings).unwrap();
        site
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn run(&self, command: &str, more: &[&str]) -> Run {
        let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg(command)
            .arg(self.path("network.toml"))
            .args(more)
            .output()
            .unwrap();
        Run {
            status: output.status.code().unwrap(),
            err: String::from_utf8_lossy(&output.stderr).into_owned(),
            json: serde_json::from_slice(&output.stdout).unwrap_or_default(),
        }
    }

    fn check(&self) -> Run {
        self.run("check", &["--json"])
    }

    fn estimate(&self) -> Run {
        let out = self.path("out");
        self.run("estimate", &["--quiet", "--out", out.to_str().unwrap()])
    }
}

impl Run {
    fn says(&self, status: i32, parts: &[&str]) {
        for part in parts {
            assert!(self.err.contains(part), "`{part}` is not in:\n{}", self.err);
        }
        assert_eq!(self.status, status, "{}", self.err);
    }
}

fn table(rows: &str) -> String {
    format!("{HEADER}{GOOD}{rows}")
}

/// The good rows and one more; the run goes on with the good ones and says what is wrong with the other.
fn one_bad_row(row: &str, parts: &[&str]) {
    let text = table(&format!("{row}\n"));
    let site = Site::new(&[("r.csv", text.as_bytes())], "");
    let check = site.check();
    check.says(1, &["r.csv: 1 rows could not be used"]);
    check.says(1, parts);
    assert_eq!(check.json["rows"]["passed"], 3, "{row}");
    let estimate = site.estimate();
    estimate.says(1, parts);
    assert!(site.path("out/polygons.csv").is_file(), "{row}");
}

#[test]
fn a_direction_of_400_degrees() {
    one_bad_row(
        "2031-06-14T00:10:00Z,A,400,5",
        &["r.csv:5 `direction`: `400` is no direction (0 to 360 degrees expected)"],
    );
    one_bad_row(
        "2031-06-14T00:10:00Z,A,-10,5",
        &["r.csv:5 `direction`: `-10` is no direction"],
    );
    let words = "`NEN` is no direction (degrees or a point of the compass expected)";
    one_bad_row(
        "2031-06-14T00:10:00Z,A,NEN,5",
        &["r.csv:5 `direction`:", words],
    );
}

#[test]
fn a_speed_below_0() {
    one_bad_row(
        "2031-06-14T00:10:00Z,A,40,-3",
        &["r.csv:5 `speed`: `-3` is below 0 (a speed of 0 or more expected)"],
    );
}

#[test]
fn a_number_with_two_points() {
    one_bad_row(
        "2031-06-14T00:10:00Z,A,40,1.2.3",
        &["r.csv:5 `speed`: `1.2.3` is not a number (decimal point expected)"],
    );
}

#[test]
fn a_decimal_comma_that_was_not_stated() {
    let words = "`12,5` is not a number (decimal point expected)";
    one_bad_row(
        "2031-06-14T00:10:00Z,A,40,\"12,5\"",
        &["r.csv:5 `speed`:", words],
    );
}

#[test]
fn the_year_0000() {
    one_bad_row(
        "0000-01-01T00:00:00Z,A,40,3",
        &["r.csv:5 `time`: `0000-01-01T00:00:00Z` is not in the years 1800 to 2200"],
    );
}

#[test]
fn a_nul_byte() {
    one_bad_row(
        "2031-06-14T00:10:00Z,A,40,\u{0}",
        &["r.csv:5 `speed`: `\\0` is not a number (decimal point expected)"],
    );
    // In a name it makes another name.
    let text = table("2031-06-14T00:10:00Z,A\u{0},40,3\n");
    let run = Site::new(&[("r.csv", text.as_bytes())], "").check();
    run.says(
        1,
        &["1 reports of `A\\0`, which is not in the station list"],
    );
}

/// The station stands last: without it the row is short, not of a station without a name.
#[test]
fn a_row_cut_before_its_station() {
    let text =
        "time,direction,speed,station\n2031-06-14T00:00:00Z,270,5,A\n2031-06-14T00:10:00Z,270,5\n";
    let run = Site::new(&[("r.csv", text.as_bytes())], "").check();
    run.says(1, &["r.csv:3: the row has 3 columns (at least 4 expected)"]);
}

#[test]
fn a_row_with_too_few_columns_and_a_quote_without_an_end() {
    one_bad_row(
        "2031-06-14T00:10:00Z,A",
        &["r.csv:5: the row has 2 columns (at least 4 expected)"],
    );
    one_bad_row(
        "2031-06-14T00:10:00Z,\"A,10,3",
        &["r.csv:5: a quote does not end on its line"],
    );
}

#[test]
fn a_line_of_100_megabytes() {
    let site = Site::new(&[], "");
    let file = fs::File::create(site.path("r.csv")).unwrap();
    let mut file = BufWriter::new(file);
    let (first, rest) = GOOD.split_at(GOOD.find('\n').unwrap() + 1);
    file.write_all(format!("{HEADER}{first}").as_bytes())
        .unwrap();
    let megabyte = vec![b'1'; 1 << 20];
    for _ in 0..100 {
        file.write_all(&megabyte).unwrap();
    }
    file.write_all(format!("\n{rest}").as_bytes()).unwrap();
    file.flush().unwrap();
    let run = site.check();
    run.says(1, &["r.csv:3: the line is longer than 1 MiB"]);
    assert_eq!(run.json["rows"]["passed"], 3);
    assert_eq!(run.json["rows"]["set_aside"]["broken_line"], 1);
}

/// Rows of as many minutes, compressed and cut in the middle.
fn truncated_gzip(minutes: usize) -> Vec<u8> {
    let mut encoder = GzEncoder::new(Vec::new(), Compression::fast());
    encoder.write_all(HEADER.as_bytes()).unwrap();
    for minute in 0..minutes {
        let (day, hour, minute) = (1 + minute / 1440, minute / 60 % 24, minute % 60);
        for (k, station) in ["A", "B", "C"].into_iter().enumerate() {
            // A speed that does not compress away.
            let speed = (minute * 7919 + k * 104_729) % 997;
            let row =
                format!("2031-06-{day:02}T{hour:02}:{minute:02}:00Z,{station},270,0.{speed:03}\n");
            encoder.write_all(row.as_bytes()).unwrap();
        }
    }
    let mut bytes = encoder.finish().unwrap();
    bytes.truncate(bytes.len() / 2);
    bytes
}

/// What is read of a compressed file that is cut in the middle: rows passed on, of how many.
fn truncated(minutes: usize) -> (u64, u64) {
    let bytes = truncated_gzip(minutes);
    let run = Site::new(&[("r.csv", &bytes)], "").check();
    run.says(1, &["r.csv: reading ended early: "]);
    assert_eq!(run.json["rows"]["set_aside"]["broken_line"], 1);
    (
        run.json["rows"]["passed"].as_u64().unwrap(),
        3 * minutes as u64,
    )
}

/// 10 kB of text: less than the reader takes at once. A row is cut; the compression keeps back less than a quarter.
#[test]
fn what_came_before_the_cut_of_a_small_gzip_is_used() {
    let (passed, of) = truncated(100);
    assert!(passed > of / 4 && passed < of, "{passed} of {of}");
}

/// 0.8 to 4 MB of text, so that the cut comes in the first blocks and after many.
#[test]
fn a_truncated_gzip_is_never_silent() {
    for minutes in [8000, 15_000, 40_000] {
        let (passed, of) = truncated(minutes);
        assert!(passed > of / 5 && passed < of, "{passed} of {of}");
    }
}

#[test]
fn a_truncated_gzip_beside_a_good_file() {
    let mut cut = truncated_gzip(100);
    cut.truncate(5);
    let text = table("");
    let site = Site::new(&[("a.csv", &cut), ("b.csv", text.as_bytes())], "");
    let run = site.check();
    run.says(1, &["a.csv"]);
    assert_eq!(run.json["rows"]["passed"], 3);
    site.estimate().says(1, &["a.csv"]);
    // Alone it leaves nothing to do.
    Site::new(&[("a.csv", &cut)], "")
        .estimate()
        .says(2, &["a.csv"]);
}

#[test]
fn a_header_alone() {
    let run = Site::new(&[("r.csv", HEADER.as_bytes())], "").estimate();
    run.says(2, &["none of 0 rows"]);
    let text = table("");
    let files: [(&str, &[u8]); 2] = [("a.csv", HEADER.as_bytes()), ("b.csv", text.as_bytes())];
    let run = Site::new(&files, "").check();
    run.says(0, &[]);
    assert_eq!(run.json["files"][0]["rows"]["received"], 0);
    assert_eq!(run.json["rows"]["passed"], 3);
}

#[test]
fn a_missing_column_names_those_found() {
    let text = table("").replace("direction", "dir");
    let message =
        "r.csv:1 `direction`: there is no such column (found: `time`, `station`, `dir`, `speed`)";
    let site = Site::new(&[("r.csv", text.as_bytes())], "");
    site.estimate().says(2, &[message]);
    site.check().says(2, &[message]);
    // Another file goes on.
    let good = table("");
    let files: [(&str, &[u8]); 2] = [("a.csv", good.as_bytes()), ("r.csv", text.as_bytes())];
    let run = Site::new(&files, "").check();
    run.says(1, &[message]);
    assert_eq!(run.json["rows"]["passed"], 3);
}

#[test]
fn a_column_named_twice() {
    let text = "time,station,speed,direction,speed\n2031-06-14T00:00:00Z,A,5,270,5\n";
    let run = Site::new(&[("r.csv", text.as_bytes())], "").check();
    run.says(2, &["r.csv:1 `speed`: there is more than one such column"]);
}

#[test]
fn a_unit_never_heard_of() {
    let text = table("");
    let run = Site::new(&[("r.csv", text.as_bytes())], "speed_unit = \"furlongs\"").estimate();
    run.says(
        2,
        &["network.toml:6 `reports.speed_unit`: `furlongs` is not a unit of speed"],
    );
    let run = Site::new(&[("r.csv", text.as_bytes())], "level_unit = \"fathom\"").check();
    run.says(
        2,
        &["network.toml:6 `reports.level_unit`: `fathom` is not a unit of a level"],
    );
}

#[test]
fn a_settings_key_misspelt_in_an_inner_table() {
    let text = table("");
    let run = Site::new(
        &[("r.csv", text.as_bytes())],
        "[reports.time]\nzoen = \"UTC\"",
    )
    .check();
    run.says(
        2,
        &["network.toml:7 `reports.time.zoen`: there is no such key; is `zone` meant?"],
    );
}

#[test]
fn a_code_form_without_a_reference() {
    let message = "`reports`: `reference` is missing: the reports carry only day and hour";
    for format in [
        "form = \"synop\"",
        "form = \"metar\"",
        "columns = { report = \"text\" }",
    ] {
        let run = Site::new(&[("r.csv", b"AAXX 14124\n")], format).check();
        run.says(2, &["network.toml:4 ", message]);
    }
}

#[test]
fn a_folder_for_a_file() {
    let text = table("");
    let site = Site::new(&[("r.csv", text.as_bytes())], "");
    fs::create_dir(site.path("folder")).unwrap();
    let (folder, file) = (site.path("folder"), site.path("r.csv"));
    let (folder, file) = (folder.to_str().unwrap(), file.to_str().unwrap());
    let message = "folder: it is a folder, not a file";
    let run = site.run("check", &["--json", "--reports", folder, file]);
    run.says(1, &[message]);
    assert_eq!(run.json["rows"]["passed"], 3);
    site.run("check", &["--json", "--reports", folder])
        .says(2, &[message]);

    let settings = fs::read_to_string(site.path("network.toml")).unwrap();
    let settings = settings.replace("*.csv", "folder");
    fs::write(site.path("network.toml"), settings).unwrap();
    site.check().says(
        2,
        &[
            "network.toml:5 `reports.files`: ",
            "folder` matches no file",
        ],
    );
}

/// The smallest that fuzzing found: its planetary vorticity differs from the integral along the edges by 5e-9 of 2 Omega,
/// which is the rounding of longitudes (3e-9 m at 166 degrees west).
#[test]
fn three_stations_three_kilometres_apart_pass_the_self_test() {
    let text = table("");
    let site = Site::new(&[("r.csv", text.as_bytes())], "");
    let stations = "id,latitude,longitude\nA,-29.85,-166.39\nB,-29.86,-166.37\nC,-29.88,-166.36\n";
    fs::write(site.path("stations.txt"), stations).unwrap();
    site.run("polygons", &[]).says(0, &[]);
    site.estimate().says(0, &[]);
}

#[cfg(unix)]
#[test]
#[expect(clippy::print_stderr, reason = "a test that is skipped says so")]
fn a_file_without_permission() {
    use std::os::unix::fs::PermissionsExt;

    let text = table("");
    let files: [(&str, &[u8]); 2] = [("a.csv", text.as_bytes()), ("b.csv", text.as_bytes())];
    let site = Site::new(&files, "");
    let locked = site.path("b.csv");
    fs::set_permissions(&locked, fs::Permissions::from_mode(0o000)).unwrap();
    if fs::read(&locked).is_ok() {
        eprintln!("skipped: this user may read every file");
        return;
    }
    let run = site.check();
    run.says(1, &["cannot read ", "b.csv: Permission denied"]);
    assert_eq!(run.json["rows"]["passed"], 3);
}
