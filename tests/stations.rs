//! Station lists: forms, repeats, moves, aliases, doubts. All stations are invented.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

use std::fmt::Write as _;
use std::fs;
use std::io::Write as _;
use std::path::PathBuf;
use std::process::Command;

use gyremesh::error::Error;
use gyremesh::input::TextFormat;
use gyremesh::station::{
    Catalogue, Network, Period, PositionSlip, Station, StationColumns, StationList, doubts,
    read_catalogue,
};
use gyremesh::time::Time;
use gyremesh::units::SpeedUnit;
use gyremesh::warning::Warning;
use proptest::prelude::*;
use tempfile::TempDir;

/// Reads a list; the defects come without the folder of the file.
fn list(bytes: &[u8], catalogue: &Catalogue) -> Result<StationList, Vec<String>> {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("s.csv");
    fs::write(&path, bytes).unwrap();
    match read_catalogue(&path, catalogue) {
        Ok(list) => Ok(list),
        Err(Error::Invalid(problems)) => Err(problems
            .iter()
            .map(|p| {
                p.to_string()
                    .replace(&format!("{}", path.display()), "s.csv")
            })
            .collect()),
        Err(other) => panic!("{other}"),
    }
}

fn network(text: &str, catalogue: &Catalogue) -> Network {
    let list = list(text.as_bytes(), catalogue).unwrap();
    list.network(Period::default()).unwrap()
}

fn defects(text: &str, catalogue: &Catalogue) -> Vec<String> {
    list(text.as_bytes(), catalogue).unwrap_err()
}

fn with_columns(columns: StationColumns) -> Catalogue {
    Catalogue {
        columns,
        ..Catalogue::default()
    }
}

#[expect(
    clippy::unnecessary_wraps,
    reason = "short for the columns that may be absent"
)]
fn named(text: &str) -> Option<String> {
    Some(text.into())
}

fn moving() -> Catalogue {
    with_columns(StationColumns {
        valid_from: named("from"),
        valid_to: named("to"),
        ..StationColumns::default()
    })
}

fn find<'a>(network: &'a Network, id: &str) -> &'a Station {
    &network.stations()[network.find(id).unwrap()]
}

fn time(text: &str) -> Time {
    Time::parse_rfc3339(text).unwrap()
}

#[test]
fn every_form_of_text_gives_the_same_list() {
    let plain = "id,latitude,longitude\nZürich,47.5,8.5\nB,-47.25,8\n";
    let expected = network(plain, &Catalogue::default());
    let mut gzip = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::fast());
    gzip.write_all(plain.as_bytes()).unwrap();
    let latin1: Vec<u8> = plain.chars().map(|c| u8::try_from(c).unwrap()).collect();
    let text = |text| Catalogue {
        text,
        ..Catalogue::default()
    };
    let cases: Vec<(Vec<u8>, TextFormat)> = vec![
        (gzip.finish().unwrap(), TextFormat::default()),
        (
            zstd::encode_all(plain.as_bytes(), 1).unwrap(),
            TextFormat::default(),
        ),
        (
            format!("\u{feff}{}\r\n\r\n", plain.replace('\n', "\r\n")).into_bytes(),
            TextFormat::default(),
        ),
        (plain.replace(',', "\t").into_bytes(), TextFormat::default()),
        (
            "id,latitude,longitude\n\"Zürich\", 47.5 ,\"8.5\"\nB,-47.25,8"
                .as_bytes()
                .to_vec(),
            TextFormat::default(),
        ),
        (
            plain.replace(',', ";").replace('.', ",").into_bytes(),
            TextFormat {
                decimal_comma: true,
                ..TextFormat::default()
            },
        ),
        (
            latin1,
            TextFormat {
                latin1: true,
                ..TextFormat::default()
            },
        ),
        (
            format!("made by hand, 2031\n\n{}", plain.replace(',', "#")).into_bytes(),
            TextFormat {
                skip_lines: 2,
                delimiter: Some('#'),
                ..TextFormat::default()
            },
        ),
    ];
    for (bytes, format) in cases {
        let read = list(&bytes, &text(format.clone())).unwrap();
        let read = read.network(Period::default()).unwrap();
        assert_eq!(read, expected, "{format:?}");
    }
}

#[test]
fn damaged_text_is_told_with_its_line() {
    let mut bytes = b"id,latitude,longitude\nA,1,1\nZ\xfcrich,2,2\n\xfc,3,3\n\"C,3,3\n".to_vec();
    bytes.extend_from_slice(b"D,\"1,5\",0\n");
    assert_eq!(
        list(&bytes, &Catalogue::default()).unwrap_err(),
        [
            "s.csv:5: a quote does not end on its line",
            "s.csv:6 `latitude`: `1,5` is not a number (decimal point expected)",
            "s.csv:3: the line is not UTF-8 text (is `encoding = \"latin-1\"` meant?); 1 more lines are like it",
        ]
    );
    let after_preamble = Catalogue {
        text: TextFormat {
            skip_lines: 1,
            ..TextFormat::default()
        },
        ..Catalogue::default()
    };
    let told = defects("x\nid,id,latitude\n", &after_preamble);
    assert_eq!(told[0], "s.csv:2 `id`: there is more than one such column");
    assert!(
        told[1].starts_with("s.csv:2 `longitude`: there is no such column"),
        "{told:?}"
    );
}

/// Rows in the form of OSCAR/Surface.
#[test]
fn wigos_identifiers_with_the_traditional_number_as_alias() {
    let catalogue = with_columns(StationColumns {
        id: "wigos_station_identifier".into(),
        name: named("station_name"),
        elevation: named("elevation"),
        aliases: vec![
            "traditional_station_identifier".into(),
            "station_name".into(),
        ],
        ..StationColumns::default()
    });
    let text = "station_name,wigos_station_identifier,traditional_station_identifier,facility_type,latitude,longitude,\
                elevation\n\
                COBAR FIELD (94767-0),0-20000-0-94767,94767,Land (fixed),-33.95,151.1,6\n\
                OSTRIN; PORT,0-578-0-99,,Land (fixed),-34.5,150.2,\n";
    let network = network(text, &catalogue);
    let first = find(&network, "0-20000-0-94767");
    assert_eq!(first.aliases, ["94767", "COBAR FIELD (94767-0)"]);
    assert_eq!(first.elevation, Some(6.0));
    let second = find(&network, "0-578-0-99");
    assert_eq!(second.aliases, ["OSTRIN; PORT", "OSTRIN", "PORT"]);
    assert_eq!(second.elevation, None);
}

#[test]
fn an_identifier_with_spaces_stays_an_alias() {
    let network = network(
        "id,latitude,longitude\nKing's  Park,1,1\n",
        &Catalogue::default(),
    );
    let station = &network.stations()[0];
    assert_eq!(station.id, "King's_Park");
    assert_eq!(station.aliases, ["King's  Park"]);
}

#[test]
fn an_alias_of_two_stations_is_a_warning_and_not_used() {
    let catalogue = with_columns(StationColumns {
        aliases: vec!["code".into()],
        ..StationColumns::default()
    });
    let text = "id,latitude,longitude,code\nA,1,1,X;AA\nB,2,2,X\nC,3,3,A\nD,4,4,-\nE,5,5,-\n";
    let list = list(text.as_bytes(), &catalogue).unwrap();
    let network = list.network(Period::default()).unwrap();
    assert_eq!(find(&network, "A").aliases, ["X;AA", "AA"]);
    for id in ["B", "C", "D", "E"] {
        assert!(find(&network, id).aliases.is_empty(), "{id}");
    }
    let told = list.warnings()[0].to_string();
    assert!(
        told.starts_with(
            "alias `A` belongs to several stations (`A`, `C`) and is not used, nor are 1 more like it"
        ),
        "{told}"
    );
}

#[test]
fn sensor_and_site_are_read_and_checked() {
    let catalogue = with_columns(StationColumns {
        elevation: named("z"),
        speed_unit: named("unit"),
        declination: named("decl"),
        sensor_height: named("h"),
        roughness: named("z0"),
        ..StationColumns::default()
    });
    let header = "id,latitude,longitude,z,unit,decl,h,z0\n";
    let network = network(
        &format!("{header}A,1,1,NA,kt,-12.5,10,0.03\nB,2,2,,,,,\n"),
        &catalogue,
    );
    let a = find(&network, "A");
    assert_eq!(a.elevation, None);
    assert_eq!(a.site.speed_unit, Some(SpeedUnit::Knot));
    assert_eq!(a.site.declination, Some(-12.5));
    assert_eq!(a.site.sensor_height, Some(10.0));
    assert_eq!(a.site.roughness, Some(0.03));
    assert_eq!(find(&network, "B").site, gyremesh::station::Site::default());
    assert_eq!(
        defects(
            &format!("{header}A,1,1,high,furlong,200,-2,0\n"),
            &catalogue
        ),
        [
            "s.csv:2 `z`: `high` is not a number",
            "s.csv:2 `unit`: `furlong` is not a unit of speed (m/s, km/h, mph or kt expected)",
            "s.csv:2 `decl`: 200 is out of range (-180 to 180 degrees expected)",
            "s.csv:2 `h`: -2 is out of range (more than 0 m expected)",
            "s.csv:2 `z0`: 0 is out of range (more than 0 m expected)",
        ]
    );
}

#[test]
fn an_identical_repeat_is_no_defect_and_another_position_is() {
    let text = "id,latitude,longitude\nA,1,1\nB,2,2\nA,1.0,1.00\n";
    let read = list(text.as_bytes(), &Catalogue::default()).unwrap();
    assert_eq!(read.repeats(), 1);
    assert_eq!(read.network(Period::default()).unwrap().len(), 2);
    assert_eq!(
        defects(
            "id,latitude,longitude\nA,1,1\nA,1,2\n",
            &Catalogue::default()
        ),
        ["s.csv:3 `id`: station `A` is already on line 2 (each station once expected)"]
    );
}

#[test]
fn a_table_of_reports_serves_as_list() {
    let catalogue = Catalogue {
        first_of_each: true,
        ..Catalogue::default()
    };
    let text = "id,latitude,longitude,dd\nA,,,10\nA,1,1,20\nB,2,2,30\nA,1.1,1,40\nC,,3,50\nD,-9999,-9999,60\n,,,1\n\
                E,,,2\nF,NA,NA,3\nA,x,x,1\n";
    let read = list(text.as_bytes(), &catalogue).unwrap();
    let network = read.network(Period::default()).unwrap();
    assert_eq!(network.len(), 2);
    assert!((find(&network, "A").position.latitude() - 1.0).abs() < 1e-15);
    assert_eq!(read.repeats(), 2);
    assert_eq!(
        read.warnings()[0].to_string(),
        "without a position in any row of the list, so left out: `C`, `D`, `E` and 1 more. Add a row with latitude and \
         longitude to use such a station"
    );
    assert!(network.not_asked_for().any(|id| id == "F"));
    let told = defects("id,latitude,longitude\nA,95,1\nA,96,1\nB,1,1\n", &catalogue);
    assert_eq!(told.len(), 1, "{told:?}");
}

const MOVED: &str = "id,latitude,longitude,from,to\n\
                     A,46.0,-30.0,,\n\
                     B,46.0,-29.7,,\n\
                     X,46.3,-29.80,2031-03-01,\n\
                     X,46.2,-29.85,,2031-03-01T00:00:00Z\n";

#[test]
fn a_moved_station_stands_where_the_period_finds_it() {
    let list = list(MOVED.as_bytes(), &moving()).unwrap();
    let at = |from, to| {
        list.network(Period { from, to })
            .map(|network| find(&network, "X").position.latitude())
    };
    let (move_, before) = (time("2031-03-01T00:00:00Z"), time("2031-02-28T23:50:00Z"));
    assert!((at(None, Some(before)).unwrap() - 46.2).abs() < 1e-12);
    assert!((at(Some(move_), None).unwrap() - 46.3).abs() < 1e-12);
    for (from, to) in [
        (None, None),
        (Some(before), Some(move_)),
        (None, Some(move_)),
    ] {
        let problems = at(from, to).unwrap_err();
        assert_eq!(problems[0].place.line, Some(4));
        assert_eq!(
            problems[0].message,
            "station `X` stands at 2 places in the period (until 2031-03-01T00:00:00Z, then from it): set \
             `analysis.from` and `analysis.to` to one side of the move"
        );
    }
    // Reports before the move do not belong to the new place.
    let network = list
        .network(Period {
            from: Some(move_),
            to: None,
        })
        .unwrap();
    assert_eq!(find(&network, "X").valid_from, Some(move_));
    let all = list.all_times();
    assert_eq!(all.len(), 3);
    assert!((find(&all, "X").position.latitude() - 46.3).abs() < 1e-12);
    assert_eq!(find(&all, "X").valid_from, None);
}

#[test]
fn a_gap_between_two_places_leaves_the_station_out() {
    let text = "id,latitude,longitude,from,to\nX,1,1,,2030-01-01\nX,2,2,2031-01-01,2032-01-01\n\
                X,3,3,2032-01-01,\n";
    let list = list(text.as_bytes(), &moving()).unwrap();
    let gap = Period {
        from: Some(time("2030-05-01T00:00:00Z")),
        to: Some(time("2030-06-01T00:00:00Z")),
    };
    let network = list.network(gap).unwrap();
    assert!(network.is_empty());
    assert!(network.not_asked_for().any(|id| id == "X"));
    let told = list.network(Period::default()).unwrap_err();
    assert!(
        told[0].message.contains(
            "3 places in the period (until 2030-01-01T00:00:00Z, then from 2031-01-01T00:00:00Z until \
             2032-01-01T00:00:00Z, then from it)"
        ),
        "{}",
        told[0]
    );
}

#[test]
fn periods_that_overlap_or_end_before_they_begin_are_defects() {
    let header = "id,latitude,longitude,from,to\n";
    assert_eq!(
        defects(
            &format!(
                "{header}X,1,1,2031-01-01,2031-06-01\nX,2,2,2031-05-31,\nY,1,1,,\nY,2,2,2031-01-01,\n\
                 Z,1,1,2031-02-01,2031-01-01\nZ,1,1,June,9999-12-31\n"
            ),
            &moving()
        ),
        [
            "s.csv:3 `id`: station `X` is already on line 2 in a part of this period (periods that do not overlap \
             expected)",
            "s.csv:5 `id`: station `Y` is already on line 4 in a part of this period (periods that do not overlap \
             expected)",
            "s.csv:6 `to`: the station leaves (2031-01-01T00:00:00Z) before it comes (2031-02-01T00:00:00Z)",
            "s.csv:7 `from`: `June` is neither a day (2031-06-14) nor an RFC 3339 time with its offset \
             (2031-06-14T12:00:00Z)",
            "s.csv:7 `to`: `9999-12-31` is not in the years 1800 to 2200 (an empty field expected if there is no limit)",
        ]
    );
}

#[test]
fn geojson_points_are_a_list() {
    let catalogue = with_columns(StationColumns {
        name: named("title"),
        elevation: named("alt_ft"),
        aliases: vec!["codes".into()],
        ..StationColumns::default()
    });
    let catalogue = Catalogue {
        elevation_unit: 0.3048,
        ..catalogue
    };
    let text = r#"
        {"type": "FeatureCollection", "features": [
          {"type": "Feature", "id": 94767, "geometry": {"type": "Point", "coordinates": [151.17, -33.95, 6.5]},
           "properties": {"title": "Field", "codes": ["YSSY", "SYD"]}},
          {"type": "Feature", "geometry": {"type": "Point", "coordinates": [150, -34]},
           "properties": {"id": "King's Park", "alt_ft": 100}}
        ]}"#;
    let network = network(text, &catalogue);
    let first = find(&network, "94767");
    assert_eq!(first.name, "Field");
    assert_eq!(first.elevation, Some(6.5));
    assert_eq!(first.aliases, ["YSSY;SYD", "YSSY", "SYD"]);
    assert!((first.position.latitude() + 33.95).abs() < 1e-12);
    let second = find(&network, "King's Park");
    assert!((second.elevation.unwrap() - 30.48).abs() < 1e-12);
}

#[test]
fn defects_of_geojson_name_the_feature() {
    let catalogue = with_columns(StationColumns {
        elevation: named("alt"),
        sensor_height: named("hight"),
        ..StationColumns::default()
    });
    let text = r#"{"type": "FeatureCollection", "features": [
        {"type": "Feature", "id": "A", "geometry": {"type": "Point", "coordinates": [1, 91]},
         "properties": {"height": 3}},
        {"type": "Feature", "id": "B", "geometry": {"type": "LineString", "coordinates": [[1, 1], [2, 2]]},
         "properties": null},
        {"type": "Feature", "geometry": {"type": "Point", "coordinates": [1, 1]}, "properties": null},
        {"type": "Feature", "id": "C", "geometry": null, "properties": null},
        {"type": "Feature", "id": "D", "geometry": {"type": "Point", "coordinates": [1, 1]},
         "properties": {"alt": "high"}},
        {"type": "Feature", "id": "D", "geometry": {"type": "Point", "coordinates": [1, 2]}, "properties": null},
        {"type": "Feature", "id": "E", "geometry": {"type": "Point", "coordinates": "here"}, "properties": null}
      ]}"#;
    let told = defects(text, &catalogue);
    let expected = [
        "s.csv `feature 1`: latitude 91 is out of range",
        "s.csv `feature 2`: the geometry is a LineString (a Point expected)",
        "s.csv `feature 3`: property `id`: the identifier is empty",
        "s.csv `feature 4`: there is no position",
        "s.csv `feature 5`: property `alt`: `high` is not a number",
        "s.csv `feature 6`: property `id`: station `D` is already in feature 5",
        "s.csv `feature 7`: it is not a GeoJSON feature",
        "s.csv `hight`: no feature has this property (found: `alt`, `height`); is `height` meant?",
    ];
    assert_eq!(told.len(), expected.len(), "{told:#?}");
    for (told, expected) in told.iter().zip(expected) {
        assert!(told.starts_with(expected), "{told}\n{expected}");
    }
    for (text, expected) in [
        ("{\n\"type\": }", "s.csv:2: not JSON"),
        ("{\"type\": \"Feature\"}", "s.csv: the type is `Feature`"),
        (
            "{\"type\": \"FeatureCollection\"}",
            "has no list of `features`",
        ),
    ] {
        assert!(defects(text, &catalogue)[0].contains(expected), "{text}");
    }
}

/// A field of stations some 11 km apart near 46 N 30 W, and more rows.
fn field(more: &str) -> Network {
    let mut text = String::from("id,latitude,longitude\n");
    for k in 0..12 {
        let (row, column) = (k / 4, k % 4);
        writeln!(
            text,
            "S{k},{},{}",
            46.0 + 0.1 * f64::from(row),
            -30.0 + 0.14 * f64::from(column)
        )
        .unwrap();
    }
    text.push_str(more);
    network(&text, &Catalogue::default())
}

fn slips(network: &Network) -> Vec<(String, Option<PositionSlip>)> {
    doubts(network)
        .into_iter()
        .map(|warning| match warning {
            Warning::FarStation { station, slip, .. } => (station, slip),
            other => panic!("{other:?}"),
        })
        .collect()
}

#[test]
fn slips_of_a_position_are_asked_for() {
    assert_eq!(doubts(&field("")), []);
    for (row, slip) in [
        ("46.15,29.9", Some(PositionSlip::LongitudeSign)),
        ("-46.15,-29.9", Some(PositionSlip::LatitudeSign)),
        ("-29.9,46.15", Some(PositionSlip::Swapped)),
        // Outside the box of the others, but near.
        ("46.0,30.2", Some(PositionSlip::LongitudeSign)),
        ("40.0,-20.0", None),
    ] {
        let found = slips(&field(&format!("X,{row}\n")));
        assert_eq!(found, [("X".to_string(), slip)], "{row}");
    }
    // Far in medians but not in kilometres.
    assert_eq!(slips(&field("X,46.9,-30.0\n")), []);
    let told = doubts(&field("X,46.15,29.9\n"))[0].to_string();
    assert!(
        told.contains("station `X` stands")
            && told.contains("is the sign of the longitude mirrored?"),
        "{told}"
    );
    let told = doubts(&field("X,40,-20\nY,30,-60\n"))[0].to_string();
    assert!(
        told.contains("and 1 more are as lonely: check the position"),
        "{told}"
    );
}

#[test]
fn stations_at_zero_are_one_doubt() {
    let warnings = doubts(&field("X,0,0\nY,0.005,-0.005\n"));
    let [
        Warning::AtZero {
            stations: 2,
            first,
            metres,
        },
    ] = &warnings[..]
    else {
        panic!("{warnings:?}");
    };
    assert_eq!(first, &["X", "Y"]);
    assert!(*metres > 5e6, "{metres}");
    // A network on the Gulf of Guinea has a right to such a station.
    let text = "id,latitude,longitude\nX,0,0\nA,1,1\nB,1,0\nC,0,1\n";
    assert_eq!(doubts(&network(text, &Catalogue::default())), []);
}

#[test]
fn networks_of_three_stations_and_uneven_ones_raise_no_doubt() {
    let three = "id,latitude,longitude\nA,1,1\nB,1,1.1\nC,50,50\n";
    assert_eq!(doubts(&network(three, &Catalogue::default())), []);
    let uneven = "id,latitude,longitude\nA,40,1\nB,41,1\nC,42,3\nD,45,9\n";
    assert_eq!(doubts(&network(uneven, &Catalogue::default())), []);
}

/// A network in a folder of its own.
struct Site {
    folder: TempDir,
}

impl Site {
    fn new(stations: &str, reports: &str, stations_settings: &str) -> Self {
        let folder = tempfile::tempdir().unwrap();
        fs::write(folder.path().join("stations.csv"), stations).unwrap();
        fs::write(folder.path().join("reports.csv"), reports).unwrap();
        let settings = format!(
            "name = \"test\"\n[stations]\nfile = \"stations.csv\"\n{stations_settings}\n[[reports]]\n\
             files = [\"reports.csv\"]\n"
        );
        fs::write(folder.path().join("network.toml"), settings).unwrap();
        Self { folder }
    }

    fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// Exit status and what it said on stderr.
    fn run(&self, command: &str, more: &[&str]) -> (i32, String) {
        let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg(command)
            .arg(self.path("network.toml"))
            .arg("--out")
            .arg(self.path("out"))
            .args(more)
            .output()
            .unwrap();
        let err = String::from_utf8_lossy(&output.stderr).into_owned();
        (output.status.code().unwrap(), err)
    }
}

#[test]
fn a_run_across_a_move_is_refused_and_one_side_of_it_is_done() {
    let reports = "time,station,direction,speed\n\
                   2031-02-28T00:00:00Z,A,270,5\n2031-02-28T00:00:00Z,B,280,6\n2031-02-28T00:00:00Z,X,250,7\n\
                   2031-03-02T00:00:00Z,A,270,5\n2031-03-02T00:00:00Z,B,280,6\n2031-03-02T00:00:00Z,X,250,7\n";
    let site = Site::new(
        MOVED,
        reports,
        "columns = { valid_from = \"from\", valid_to = \"to\" }",
    );
    // `estimate` makes two runs of it (`tests/epochs.rs`).
    let (status, err) = site.run("events", &[]);
    assert_eq!(status, 2, "{err}");
    assert!(
        err.contains("stations.csv:4 `id`: station `X` stands at 2 places in the period"),
        "{err}"
    );
    let area = |more: &[&str]| {
        let (status, err) = site.run("estimate", more);
        assert_eq!((status, err.as_str()), (0, ""));
        let mut reader = csv::Reader::from_path(site.path("out/polygons.csv")).unwrap();
        let row = reader.records().next().unwrap().unwrap();
        row[3].parse::<f64>().unwrap()
    };
    let before = area(&["--to", "2031-02-28T12:00:00Z"]);
    let after = area(&["--from", "2031-03-01T00:00:00Z"]);
    // The triangle is half as high again: 0.3 instead of 0.2 degrees, on the ellipsoid to 1 %.
    assert!((after / before - 1.5).abs() < 0.015, "{before} {after}");
    // The polygons alone take the same options.
    let (status, err) = site.run("polygons", &["--from", "2031-03-01T00:00:00Z"]);
    assert_eq!((status, err.as_str()), (0, ""));
    let mut reader = csv::Reader::from_path(site.path("out/mesh.csv")).unwrap();
    let row = reader.records().next().unwrap().unwrap();
    assert_eq!(row[3].parse::<f64>().unwrap().to_bits(), after.to_bits());
}

#[test]
fn the_settings_reach_the_list_and_reports_use_aliases() {
    let stations = "wigos;nr;breite;laenge\n0-1-0-A;101;46,0;-30,0\n0-1-0-B;102;46,0;-29,7\n0-1-0-C;103;46,2;-29,85\n\
                    0-1-0-D;104;46,2;29,5\n";
    let reports = "time,station,direction,speed\n2031-06-14T00:00:00Z,101,270,5\n\
                   2031-06-14T00:00:00Z,0-1-0-B,280,6\n2031-06-14T00:00:00Z,103,250,7\n";
    let site = Site::new(
        stations,
        reports,
        "columns = { id = \"wigos\", aliases = \"nr\", latitude = \"breite\", longitude = \"laenge\" }\n\
         delimiter = \";\"\ndecimal = \",\"\nencoding = \"latin-1\"\nskip_lines = 0",
    );
    let (status, err) = site.run("estimate", &[]);
    assert_eq!(status, 0, "{err}");
    assert!(
        err.contains("station `0-1-0-D` stands") && err.contains("longitude mirrored?"),
        "{err}"
    );
    let rows = fs::read_to_string(site.path("out/polygons.csv")).unwrap();
    assert!(rows.contains("0-1-0-A 0-1-0-B 0-1-0-C"), "{rows}");

    let site = Site::new(
        stations,
        reports,
        "first_of_each = true\ndelimiter = \"abc\"",
    );
    let (status, err) = site.run("polygons", &[]);
    assert_eq!(status, 2);
    assert!(
        err.contains("network.toml:5 `stations.delimiter`: `abc` is no delimiter"),
        "{err}"
    );
}

#[test]
fn a_network_that_a_misplaced_station_makes_too_wide_is_told_so() {
    let stations = "id,latitude,longitude\nA,-33,151\nB,-33.1,151\nC,-33,151.1\nD,-33.1,151.1\nE,33.05,-151\n\
                    F,33.05,-29\n";
    let (status, err) = Site::new(stations, "", "").run("polygons", &[]);
    assert_eq!(status, 2);
    assert!(
        err.contains("more than a hemisphere") && err.contains("nearest other station"),
        "{err}"
    );
}

proptest! {
    #[test]
    fn any_bytes_give_a_list_or_defects(bytes in proptest::collection::vec(any::<u8>(), 0..200)) {
        let _ = list(&bytes, &moving());
    }

    #[test]
    fn any_rows_give_a_network_or_defects(
        rows in "([A-C ]{0,2},[-0-9.]{0,4},[-0-9.]{0,4},(203[0-2]-01-01)?,(203[0-2]-01-01)?\\n){0,8}",
    ) {
        let text = format!("id,latitude,longitude,from,to\n{rows}");
        if let Ok(list) = list(text.as_bytes(), &moving()) {
            let all = list.all_times();
            if let Ok(network) = list.network(Period::default()) {
                prop_assert_eq!(network.len(), all.len());
                let _ = doubts(&network);
            }
        }
    }
}
