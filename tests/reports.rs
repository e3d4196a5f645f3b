//! Reports in all the ways they come: text, compression, layouts, times, code forms, units; read through settings.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fs;
use std::io::Write;
use std::path::PathBuf;
use std::process::{Command, Output, Stdio};

use flate2::Compression;
use flate2::write::GzEncoder;
use gyremesh::check::screen_all;
use gyremesh::pipeline::{Reading, Sources};
use gyremesh::report::{ReportTable, read_reports};
use gyremesh::settings::Overrides;
use gyremesh::station::{Network, Position};
use gyremesh::tally::Reason;
use gyremesh::units::FromDirection;
use serde_json::Value;
use tempfile::TempDir;

#[path = "reports/codes.rs"]
mod codes;
#[path = "reports/values.rs"]
mod values;

const STATIONS: &str = "id,latitude,longitude\nA,46.0,-30.0\nB,46.0,-29.7\nC,46.2,-29.85\n";
const TABLE: &str = "time,station,direction,speed\n\
                     2031-06-14T00:00:00Z,A,270,5.5\n\
                     2031-06-14T00:00:00Z,B,280.5,6\n\
                     2031-06-14T00:00:00Z,C,250,7.25\n";
/// What [`TABLE`] says.
const WINDS: [&str; 3] = [
    "A 2031-06-14T00:00:00Z 270 5.5",
    "B 2031-06-14T00:00:00Z 280.5 6",
    "C 2031-06-14T00:00:00Z 250 7.25",
];
/// Columns of a group of files with one column of wind.
const SPEED: &str = "columns = { speed = \"speed\" }";
const DIRECTION: &str = "columns = { direction = \"direction\" }";

/// A network in a folder of its own.
struct Site(TempDir);

/// What was read.
struct Found {
    network: Network,
    reading: Reading,
    /// The reports, as the books are about them.
    table: ReportTable,
}

impl Site {
    /// `settings` begins with the keys of `[stations]` that follow its file.
    fn new(stations: &str, settings: &str, files: &[(&str, &[u8])]) -> Self {
        let site = Self(tempfile::tempdir().unwrap());
        let head = "name = \"test\"\n[stations]\nfile = \"stations.csv\"\n";
        fs::write(site.path("network.toml"), format!("{head}{settings}\n")).unwrap();
        fs::write(site.path("stations.csv"), stations).unwrap();
        for (name, bytes) in files {
            fs::write(site.path(name), bytes).unwrap();
        }
        site
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn read(&self) -> Found {
        let sources = Sources::read(&self.path("network.toml"), &Overrides::default())
            .unwrap_or_else(|error| panic!("{error}"));
        let reading = Reading::of(&sources.settings, &sources.network).unwrap();
        let rows = read_reports(&sources.settings.reports, &sources.network).rows;
        let (mut table, repeats) = ReportTable::new(&rows, sources.network.len());
        assert_eq!(repeats, reading.repeats);
        let stations = sources.network.stations().iter();
        let positions: Vec<Position> = stations.map(|s| s.position).collect();
        screen_all(&mut table, &positions, &sources.settings.check);
        assert!(reading.rows.balances() && reading.repeats.balances());
        Found {
            network: sources.network,
            reading,
            table,
        }
    }

    fn run(&self, command: &str, more: &[&str]) -> Command {
        let mut run = Command::new(env!("CARGO_BIN_EXE_gyremesh"));
        run.arg(command).arg(self.path("network.toml")).args(more);
        run
    }

    /// A column of a file that `estimate` writes.
    fn estimate(&self, file: &str, column: &str) -> Vec<f64> {
        let out = self.path("out");
        let output = self
            .run("estimate", &["--quiet", "--errors", "instrument", "--out"])
            .arg(&out)
            .output();
        let Output { status, stderr, .. } = output.unwrap();
        assert!(status.success(), "{}", String::from_utf8_lossy(&stderr));
        let mut reader = csv::Reader::from_path(out.join(file)).unwrap();
        let header = reader.headers().unwrap().clone();
        let place = header.iter().position(|name| name == column).unwrap();
        let rows = reader.records().map(Result::unwrap);
        rows.map(|row| row[place].parse().unwrap()).collect()
    }
}

impl Found {
    /// One line for each report: station, time, direction, speed (six decimals at most); `-` for none.
    fn lines(&self) -> Vec<String> {
        let shown = |x: Option<f64>| {
            x.map_or_else(|| "-".into(), |x| ((x * 1e6).round() / 1e6).to_string())
        };
        let table = &self.table;
        let mut lines = Vec::new();
        for (s, station) in self.network.stations().iter().enumerate() {
            for i in table.of_station(s) {
                let direction = shown(table.direction(i).map(FromDirection::degrees));
                let (time, speed) = (table.times()[i], shown(table.speed(i)));
                lines.push(format!("{} {time} {direction} {speed}", station.id));
            }
        }
        lines
    }

    fn repeats(&self, reason: Reason) -> u64 {
        self.reading.repeats.count(reason)
    }
}

/// The reports of one file, all of which can be used.
fn lines(format: &str, bytes: impl AsRef<[u8]>) -> Vec<String> {
    lines_of(STATIONS, format, bytes)
}

fn lines_of(stations: &str, format: &str, bytes: impl AsRef<[u8]>) -> Vec<String> {
    let settings = format!("[[reports]]\nfiles = [\"reports.csv\"]\n{format}");
    let site = Site::new(stations, &settings, &[("reports.csv", bytes.as_ref())]);
    let found = site.read();
    let reading = &found.reading;
    assert!(reading.is_complete(), "{format}: {:?}", reading.warnings);
    found.lines()
}

/// Direction and speed of one row of station A.
fn wind(format: &str, direction: &str, speed: &str) -> String {
    let text =
        format!("time;station;direction;speed\n2031-06-14T00:00:00Z;A;{direction};{speed}\n");
    let lines = lines(format, text);
    assert_eq!(lines.len(), 1, "{direction} {speed}");
    lines[0].replace("A 2031-06-14T00:00:00Z ", "")
}

fn gzip(bytes: &[u8]) -> Vec<u8> {
    let mut encoder = GzEncoder::new(Vec::new(), Compression::fast());
    encoder.write_all(bytes).unwrap();
    encoder.finish().unwrap()
}

#[test]
fn delimiters_are_found_or_stated() {
    for (format, sign) in [
        ("", ","),
        ("", ";"),
        ("", "\t"),
        ("", "|"),
        ("delimiter = \"|\"", "|"),
        ("delimiter = \"~\"", "~"),
        ("delimiter = \"tab\"", "\t"),
    ] {
        assert_eq!(
            lines(format, TABLE.replace(',', sign)),
            WINDS,
            "{format} {sign}"
        );
    }
}

#[test]
fn a_decimal_comma_with_and_without_quotes() {
    let semicolons = TABLE.replace(',', ";").replace('.', ",");
    let quoted = TABLE
        .replace("280.5", "\"280,5\"")
        .replace("5.5", "\"5,5\"");
    let quoted = quoted.replace("7.25", "\"7,25\"");
    for text in [semicolons, quoted] {
        assert_eq!(lines("decimal = \",\"", &text), WINDS, "{text}");
    }
}

#[test]
fn quotes_marks_of_byte_order_and_line_ends_change_nothing() {
    let quoted = TABLE
        .trim_end()
        .replace(',', "\",\"")
        .replace('\n', "\"\n\"");
    for text in [
        format!("\"{quoted}\"\n"),
        format!("\u{feff}{TABLE}"),
        TABLE.replace('\n', "\r\n"),
        TABLE.replace('\n', "\r\r\n"),
        TABLE.trim_end().to_string(),
        TABLE.replace(',', " , "),
        TABLE.replace('\n', "\n\n"),
    ] {
        assert_eq!(lines("", &text), WINDS, "{text:?}");
    }
}

#[test]
fn a_last_field_left_empty_is_missing_with_quotes_and_without() {
    for station in ["A", "\"A\""] {
        for sign in [",", ";", "\t"] {
            let text = TABLE.replace(",A,270,5.5", &format!(",{station},270,"));
            let found = lines("", text.replace(',', sign));
            assert_eq!(found[0], "A 2031-06-14T00:00:00Z - -", "{station} {sign:?}");
        }
    }
}

#[test]
fn lines_of_delimiters_alone_are_blank() {
    let text = TABLE.replace('\n', "\n,,,\n \n");
    assert_eq!(lines("", &text), WINDS);
}

#[test]
fn lines_before_the_header_are_skipped_and_counted() {
    let text = format!("\u{feff}Station data, \"all\n;;;\n{TABLE}").replace("A,270", "A,470");
    let settings = "[[reports]]\nfiles = [\"r.csv\"]\nskip_lines = 2";
    let found = Site::new(STATIONS, settings, &[("r.csv", text.as_bytes())]).read();
    assert_eq!(found.lines(), WINDS[1..]);
    let warning = found.reading.warnings[0].to_string();
    assert!(warning.contains("r.csv:4 `direction`"), "{warning}");
}

#[test]
fn latin_1_names_when_stated() {
    let stations = STATIONS.replace("A,", "M\u{f6}wenfels,");
    let text = TABLE.replace(",A,", ",M\u{f6}wenfels,");
    let latin1: Vec<u8> = text.chars().map(|c| u8::try_from(c).unwrap()).collect();
    let found = lines_of(&stations, "encoding = \"latin-1\"", latin1);
    assert_eq!(found[2], WINDS[0].replace('A', "M\u{f6}wenfels"));
}

#[test]
fn compression_shows_in_the_content_not_in_the_name() {
    let (head, tail) = TABLE.split_at(40);
    let members = [gzip(head.as_bytes()), gzip(tail.as_bytes())].concat();
    let zstandard = zstd::encode_all(TABLE.as_bytes(), 3).unwrap();
    for bytes in [gzip(TABLE.as_bytes()), members, zstandard] {
        assert_eq!(lines("", bytes), WINDS);
    }
}

#[test]
fn standard_input_in_place_of_the_files() {
    let site = Site::new(
        STATIONS,
        "[[reports]]\nfiles = [\"r.csv\"]",
        &[("r.csv", b"")],
    );
    let mut child = site
        .run("check", &["--json", "--reports", "-"])
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    let bytes = gzip(TABLE.as_bytes());
    child.stdin.take().unwrap().write_all(&bytes).unwrap();
    let output = child.wait_with_output().unwrap();
    let json: Value = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(
        (output.status.code(), &json["files"][0]["file"]),
        (Some(0), &"-".into())
    );
    assert_eq!(json["rows"]["passed"], 3);
}

#[test]
fn many_files_by_a_pattern_are_as_one_in_the_order_of_their_names() {
    let (header, rows) = TABLE.split_once('\n').unwrap();
    let files: Vec<(String, String)> = (0..)
        .zip(rows.lines())
        .map(|(k, row)| (format!("part{k}.csv"), format!("{header}\n{row}\n")))
        .collect();
    let mut files: Vec<(&str, &[u8])> = files
        .iter()
        .map(|(name, text)| (name.as_str(), text.as_bytes()))
        .collect();
    files.push(("other.csv", b"nothing"));
    let settings = "[[reports]]\nfiles = [\"part?.csv\"]";
    let found = Site::new(STATIONS, settings, &files).read();
    assert_eq!(found.lines(), WINDS);
    let read: Vec<&str> = found
        .reading
        .files
        .iter()
        .map(|f| f.file.as_str())
        .collect();
    assert_eq!(read.len(), 3);
    assert!(read.is_sorted() && read[0].ends_with("part0.csv"));
}

#[test]
fn a_pattern_in_a_folder_whose_name_has_brackets() {
    let settings = "[[reports]]\nfiles = [\"part*.csv\"]";
    let site = Site::new(STATIONS, settings, &[("part1.csv", TABLE.as_bytes())]);
    let folder = site.path("net[1]");
    fs::create_dir(&folder).unwrap();
    for name in ["network.toml", "stations.csv", "part1.csv"] {
        fs::rename(site.path(name), folder.join(name)).unwrap();
    }
    let sources = Sources::read(&folder.join("network.toml"), &Overrides::default());
    assert!(sources.is_ok(), "{}", sources.unwrap_err());
}

#[test]
fn speed_and_direction_from_two_files_are_joined() {
    let speeds = TABLE
        .replace(",270", "")
        .replace(",280.5", "")
        .replace(",250", "");
    let speeds = speeds.replace(",direction", "");
    let directions = "station,time,direction\nC,2031-06-14T00:00:00Z,250\n\
                      B,2031-06-14T00:00:00Z,280.5\nA,2031-06-14T00:00:00Z,270\n\
                      A,2031-06-14T00:10:00Z,271\n";
    let settings = format!(
        "[[reports]]\nfiles = [\"s.csv\"]\n{SPEED}\n[[reports]]\nfiles = [\"d.csv\"]\n{DIRECTION}"
    );
    let files: [(&str, &[u8]); 2] = [
        ("s.csv", speeds.as_bytes()),
        ("d.csv", directions.as_bytes()),
    ];
    let found = Site::new(STATIONS, &settings, &files).read();
    // A direction that no speed belongs to says nothing of the wind.
    let lonely = "A 2031-06-14T00:10:00Z - -";
    assert_eq!(found.lines(), [WINDS[0], lonely, WINDS[1], WINDS[2]]);
    assert_eq!(found.repeats(Reason::Joined), 3);
}

#[test]
fn wide_tables_give_what_long_ones_give() {
    let pairs = "time,A_dir,A_speed,B_dir,B_speed,C_speed,C_dir\n\
                 2031-06-14T00:00:00Z,270,5.5,280.5,6,7.25,250\n";
    let columns = "columns = { direction = \"{station}_dir\", speed = \"{station}_speed\" }";
    assert_eq!(lines(columns, pairs), WINDS);

    // A name that is the pattern alone.
    let settings = "[[reports]]\nfiles = [\"s.csv\"]\ncolumns = { speed = \"{station}\" }\n\
                    [[reports]]\nfiles = [\"d.csv\"]\ncolumns = { direction = \"{station}\" }";
    let files: [(&str, &[u8]); 2] = [
        ("s.csv", b"time,A,B,C\n2031-06-14T00:00:00Z,5.5,6,7.25\n"),
        ("d.csv", b"C,B,A,time\n250,280.5,270,2031-06-14T00:00:00Z\n"),
    ];
    let found = Site::new(STATIONS, settings, &files).read();
    assert!(found.reading.is_complete(), "{:?}", found.reading.warnings);
    assert_eq!(found.lines(), WINDS);
}

#[test]
fn a_wide_table_whose_speeds_have_the_names_of_the_stations() {
    let text = "time,A_dir,A,B_dir,B,C,C_dir\n2031-06-14T00:00:00Z,270,5.5,280.5,6,7.25,250\n";
    let columns = "columns = { direction = \"{station}_dir\", speed = \"{station}\" }";
    assert_eq!(lines(columns, text), WINDS);
}

#[test]
fn a_column_of_an_unknown_station_in_a_wide_table_is_told() {
    let text = "time,A,B,Cc\n2031-06-14T00:00:00Z,5.5,6,7.25\n";
    let settings = "[[reports]]\nfiles = [\"s.csv\"]\ncolumns = { speed = \"{station}\" }";
    let found = Site::new(STATIONS, settings, &[("s.csv", text.as_bytes())]).read();
    assert_eq!(found.reading.rows.passed, 2);
    assert_eq!(found.reading.rows.count(Reason::UnknownStation), 1);
    assert!(!found.reading.is_complete());
}

#[test]
fn missing_marks_by_default_and_as_stated() {
    for mark in [
        "", "NA", "n/a", "NaN", "null", "none", "M", "//", "///", "-", "-9999", "-9999.0",
    ] {
        assert_eq!(wind("", mark, "5"), "- 5", "{mark}");
        assert_eq!(wind("", "90", mark), "- -", "{mark}");
    }
    let stated = "missing = [\"999\", \"x\", \"-1\"]";
    for mark in ["999", "X", "-1", "-1.0", ""] {
        assert_eq!(wind(stated, "90", mark), "- -", "{mark}");
        assert_eq!(wind(stated, mark, "5"), "- 5", "{mark}");
    }
    assert_eq!(wind(stated, "90", "5"), "90 5");
}

#[test]
fn a_missing_mark_with_a_decimal_comma() {
    let format = "decimal = \",\"";
    assert_eq!(wind(format, "90", "-9999"), "- -");
    assert_eq!(wind(format, "90", "-9999,0"), "- -");
}

#[test]
fn directions_in_words_of_the_compass() {
    for (word, degrees) in [
        ("N", "360"),
        ("SE", "135"),
        ("Northwest", "315"),
        ("ssw", "202.5"),
        ("East-southeast", "112.5"),
        ("NbE", "11.25"),
        ("WBS", "258.75"),
        ("southwest by west", "236.25"),
        ("0", "360"),
        ("360.0", "360"),
    ] {
        assert_eq!(wind("", word, "5"), format!("{degrees} 5"), "{word}");
    }
    assert_eq!(wind("", "Variable", "5"), "- 5");
    assert_eq!(wind("", "VRB", "5"), "- 5");
    // The word is a wind of 0; beside a speed it is no direction. No speed is calm, whatever stands beside it.
    assert_eq!(wind("", "Calm", ""), "- 0");
    assert_eq!(wind("", "calm", "5"), "- 5");
    assert_eq!(wind("", "270", "0"), "- 0");
}

#[test]
fn each_form_of_a_time_names_the_same_instant() {
    for (time, text) in [
        ("", "2025-07-19T14:20:00Z"),
        ("", "2025-07-19T22:20:00+08:00"),
        ("zone = \"+08:00\"", "2025-07-19 22:20:00"),
        ("zone = \"+08:00\"", "2025-07-19T22:20"),
        ("zone = \"+08:00\"", "2025-07-19T14:20:00Z"),
        (
            "form = \"YYYYMMDDHHMM\", zone = \"Asia/Hong_Kong\"",
            "202507192220",
        ),
        (
            "form = \"YYYYMMDDHHMMSS\", zone = \"+08:00\"",
            "20250719222000",
        ),
        ("form = \"epoch seconds\"", "1752934800"),
        ("form = \"epoch milliseconds\"", "1752934800000"),
        (
            "form = \"%d.%m.%Y %H:%M\", zone = \"+08:00\"",
            "19.07.2025 22:20",
        ),
        ("form = \"%d.%m.%Y %H:%M %z\"", "19.07.2025 22:20 +0800"),
        (
            "label = \"start\", averaging = \"10 min\"",
            "2025-07-19T14:10:00Z",
        ),
        (
            "label = \"middle\", averaging = \"10 min\"",
            "2025-07-19T14:15:00Z",
        ),
        (
            "label = \"end\", averaging = \"10 min\"",
            "2025-07-19T14:20:00Z",
        ),
    ] {
        let table = format!("time;station;direction;speed\n{text};A;270;5\n");
        let found = lines(&format!("time = {{ {time} }}"), table);
        assert_eq!(found, ["A 2025-07-19T14:20:00Z 270 5"], "{time} {text}");
    }
    let two = "day,hour,station,direction,speed\n2025-07-19,14:20:00,A,270,5\n";
    let format = "columns = { time = [\"day\", \"hour\"] }\ntime = { zone = \"UTC\" }";
    assert_eq!(lines(format, two), ["A 2025-07-19T14:20:00Z 270 5"]);
}

/// The clocks of New York: 2013-03-10 has no hour 2, 2013-11-03 has hour 1 twice.
#[test]
fn the_missing_and_the_repeated_hour_of_a_zone() {
    let table =
        "time,station,direction,speed\n2013-03-10 02:30:00,A,270,5\n2013-11-03 01:00:00,A,280,5\n";
    for (which, time) in [("first", "05:00:00Z"), ("second", "06:00:00Z")] {
        let settings = format!(
            "[[reports]]\nfiles = [\"r.csv\"]\n\
             time = {{ zone = \"America/New_York\", repeated_hour = \"{which}\" }}"
        );
        let found = Site::new(STATIONS, &settings, &[("r.csv", table.as_bytes())]).read();
        assert_eq!(found.lines(), [format!("A 2013-11-03T{time} 280 5")]);
        let warning = found.reading.warnings[0].to_string();
        assert!(
            warning.contains(
                "r.csv:2 `time`: `2013-03-10 02:30:00` does not exist in America/New_York"
            ),
            "{warning}"
        );
    }
}
