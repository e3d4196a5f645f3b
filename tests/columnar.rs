//! Parquet and Arrow IPC tables, written here and read as reports; the same rows as text are the measure.
#![cfg(feature = "parquet")]
#![allow(
    clippy::unwrap_used,
    clippy::float_cmp,
    reason = "tests may panic; equal inputs give equal numbers"
)]

use std::fs::{self, File};
use std::path::{Path, PathBuf};
use std::str::FromStr;
use std::sync::Arc;
use std::time::Duration;

use arrow_array::types::{
    ArrowPrimitiveType, Float32Type, Float64Type, Int16Type, Int32Type, Int64Type, UInt8Type,
};
use arrow_array::{
    ArrayRef, BooleanArray, DictionaryArray, Float64Array, LargeStringArray, PrimitiveArray,
    RecordBatch, StringArray, StringViewArray, TimestampMicrosecondArray,
    TimestampMillisecondArray, TimestampNanosecondArray, TimestampSecondArray,
};
use arrow_ipc::CompressionType;
use arrow_ipc::writer::{FileWriter, IpcWriteOptions};
use gyremesh::error::Error;
use gyremesh::input::{Label, TextFormat, TimeForm, TimeFormat, Zone};
use gyremesh::report::{
    Columns, ReadOutcome, ReportForm, ReportFormat, ReportTable, ScalarColumn, WindColumns,
    read_reports,
};
use gyremesh::settings::ReportSource;
use gyremesh::station::{Network, Position, Station};
use gyremesh::tally::Reason;
use gyremesh::time::Time;
use gyremesh::units::North;
use gyremesh::units::SpeedUnit;
use parquet::arrow::ArrowWriter;
use parquet::basic::{Compression, ZstdLevel};
use parquet::file::properties::WriterProperties;
use tempfile::TempDir;

/// 2013-02-12T08:00:00Z in seconds since 1970.
const START: i64 = 1_360_656_000;

fn network() -> Network {
    let station = |id: &str, latitude| Station::new(id, Position::new(latitude, 7.0).unwrap());
    let mut mph = station("B", 46.1);
    mph.site.speed_unit = Some(SpeedUnit::MilePerHour);
    mph.aliases = vec!["Beta".into()];
    mph.site.declination = Some(-350.0);
    let mut moved = station("C", 46.2);
    moved.valid_to = Some(Time::from_micros((START + 1200) * 1_000_000));
    let mut stations = vec![station("A", 46.0), mph, moved, station("71508", 46.3)];
    for station in &mut stations {
        station.site.declination = station.site.declination.or(Some(3.5));
    }
    Network::new(stations)
}

fn batch(columns: &[(&str, ArrayRef)]) -> RecordBatch {
    // Every column may hold nulls, as most writers have it.
    let columns = columns.iter().map(|(name, c)| (*name, Arc::clone(c), true));
    RecordBatch::try_from_iter_with_nullable(columns).unwrap()
}

fn parquet(path: &Path, batch: &RecordBatch, compression: Compression) {
    let properties = WriterProperties::builder()
        .set_compression(compression)
        .set_max_row_group_row_count(Some(10_000))
        .build();
    let file = File::create(path).unwrap();
    let mut writer = ArrowWriter::try_new(file, batch.schema(), Some(properties)).unwrap();
    writer.write(batch).unwrap();
    writer.close().unwrap();
}

fn arrow_ipc(path: &Path, batches: &[RecordBatch], compression: Option<CompressionType>) {
    let options = IpcWriteOptions::default()
        .try_with_compression(compression)
        .unwrap();
    let file = File::create(path).unwrap();
    let mut writer = FileWriter::try_new_with_options(file, &batches[0].schema(), options).unwrap();
    for batch in batches {
        writer.write(batch).unwrap();
    }
    writer.finish().unwrap();
}

fn read(file: &Path, format: &ReportFormat) -> ReadOutcome {
    let source = ReportSource {
        files: vec![file.to_path_buf()],
        format: format.clone(),
    };
    let outcome = read_reports(&[source], &network());
    assert!(outcome.tally.balances());
    outcome
}

/// Everything of the reports that were read; lines from 1 for the first row below `header` lines.
fn listed(outcome: &ReadOutcome, header: u32) -> Vec<String> {
    let stations = network().len();
    let (table, tally) = ReportTable::new(&outcome.rows, stations);
    assert_eq!(tally.passed, outcome.tally.passed);
    let rows = (0..stations).flat_map(|s| table.of_station(s).map(move |i| (s, i)));
    rows.map(|(s, i)| {
        let (speed, direction, gust) = (table.speed(i), table.direction(i), table.gust(i));
        let (time, line) = (table.times()[i], table.origin(i).1 - header);
        let (content, moving) = (table.content(i), table.moving(i));
        format!(
            "{line} {s} {time} {speed:?} {direction:?} {gust:?} {content:?} {moving:?} {:?}",
            table.scalar(i, 2)
        )
    })
    .collect()
}

fn same_as_text(text: &str, table: &RecordBatch, format: &ReportFormat) {
    let folder = tempfile::tempdir().unwrap();
    let csv = folder.path().join("table.csv");
    fs::write(&csv, text).unwrap();
    let expected = read(&csv, format);
    assert!(expected.failures.is_empty(), "{:?}", expected.failures);
    for file in files(&folder, table) {
        let found = read(&file, format);
        assert!(found.failures.is_empty(), "{:?}", found.failures);
        assert_eq!(found.tally, expected.tally);
        assert_eq!(listed(&found, 0), listed(&expected, 1));
    }
}

/// The table in all forms.
fn files(folder: &TempDir, table: &RecordBatch) -> Vec<PathBuf> {
    let path = |name: &str| folder.path().join(name);
    let zstd = Compression::ZSTD(ZstdLevel::default());
    parquet(&path("zstd.parquet"), table, zstd);
    parquet(&path("snappy"), table, Compression::SNAPPY);
    parquet(&path("plain"), table, Compression::UNCOMPRESSED);
    let one = std::slice::from_ref(table);
    arrow_ipc(&path("plain.arrow"), one, None);
    arrow_ipc(&path("lz4.feather"), one, Some(CompressionType::LZ4_FRAME));
    arrow_ipc(&path("zstd.feather"), one, Some(CompressionType::ZSTD));
    let names = [
        "zstd.parquet",
        "snappy",
        "plain",
        "plain.arrow",
        "lz4.feather",
        "zstd.feather",
    ];
    names.map(path).to_vec()
}

/// The only failure of a file, as the user sees it.
fn refusal(table: &RecordBatch, format: &ReportFormat) -> String {
    let folder = tempfile::tempdir().unwrap();
    let texts: Vec<String> = files(&folder, table)
        .iter()
        .map(|file| {
            let outcome = read(file, format);
            assert_eq!(outcome.tally.received, 0);
            assert!(matches!(outcome.failures[..], [Error::Invalid(_)]));
            let text = outcome.failures[0].to_string();
            text.replace(&file.display().to_string(), "FILE")
        })
        .collect();
    assert!(texts.iter().all(|text| *text == texts[0]));
    texts[0].clone()
}

/// The column of a text table; `None` for what cannot be parsed.
fn column<T>(text: &str, name: &str, parse: impl Fn(&str) -> Option<T>) -> Vec<Option<T>> {
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let place = reader.headers().unwrap().iter().position(|h| h == name);
    let rows = reader.records().map(Result::unwrap);
    rows.map(|row| parse(&row[place.unwrap()])).collect()
}

fn texts(text: &str, name: &str) -> ArrayRef {
    let some = |cell: &str| (!cell.is_empty()).then(|| cell.to_string());
    Arc::new(StringArray::from(column(text, name, some)))
}

fn numbers<T: ArrowPrimitiveType<Native: FromStr>>(text: &str, name: &str) -> ArrayRef {
    let values = column(text, name, |cell| cell.parse::<T::Native>().ok());
    Arc::new(values.into_iter().collect::<PrimitiveArray<T>>())
}

fn times(text: &str) -> ArrayRef {
    let seconds = column(text, "time", |cell| {
        let time = Time::parse_rfc3339(cell).ok()?;
        Some(time.micros() / 1_000_000)
    });
    Arc::new(TimestampSecondArray::from(seconds).with_timezone("UTC"))
}

fn with_wind(wind: WindColumns) -> ReportFormat {
    ReportFormat {
        form: ReportForm::Table(Columns {
            wind,
            ..Columns::default()
        }),
        ..ReportFormat::default()
    }
}

#[test]
fn all_oddities_of_rows_are_those_of_text() {
    let text = "\
note,station,time,direction,speed,gust
n,A,2013-02-12T08:00:00Z,north by east,10,15
n,Beta,2013-02-12T08:05:00Z,270,10.5,
n,C,2013-02-12T08:10:00Z,VRB,1,NA
n,A,2013-02-12T08:15:00Z,calm,,-
n,X,2013-02-12T08:20:00Z,1,1,1
n,C,2013-02-12T08:25:00Z,10,2,2
n,B,2013-02-12T08:30:00Z,,NaN,3
n,A,2013-02-12T08:35:00Z,400,1,4
n,A,2013-02-12T08:40:00Z,90,-3,5
n,A,2013-02-12T08:45:00Z,up,2,6
n,A,2013-02-12T08:50:00Z,-9999,-9999,7
n,A,2013-02-12T08:55:00Z,0,-999,x
n,A,2013-02-12T09:00:00Z,5.5,0,9
n,,2013-02-12T09:05:00Z,5.5,0,9
n,A,,5.5,0,9
";
    let format = ReportFormat {
        form: ReportForm::Table(Columns {
            gust: Some("gust".into()),
            scalars: vec![ScalarColumn {
                name: "as written".into(),
                column: "gust".into(),
                slot: 2,
            }],
            ..Columns::default()
        }),
        time: TimeFormat {
            label: Label::Start,
            averaging: Duration::from_mins(5),
            ..TimeFormat::default()
        },
        speed_unit: SpeedUnit::Knot,
        north: North::Magnetic,
        ..ReportFormat::default()
    };
    let some = |cell: &str| (!cell.is_empty()).then(|| cell.to_string());
    let stations = column(text, "station", some);
    let names = || stations.iter().map(Option::as_deref);
    let directions = column(text, "direction", some);
    let few: DictionaryArray<UInt8Type> = directions.iter().map(Option::as_deref).collect();
    let station_columns: [ArrayRef; 4] = [
        texts(text, "station"),
        Arc::new(names().collect::<DictionaryArray<Int32Type>>()),
        Arc::new(names().collect::<LargeStringArray>()),
        Arc::new(names().collect::<StringViewArray>()),
    ];
    let direction_columns = [texts(text, "direction"), Arc::new(few)];
    for (station, direction) in (station_columns.into_iter()).zip(direction_columns.iter().cycle())
    {
        let table = batch(&[
            ("gust", texts(text, "gust")),
            ("speed", numbers::<Float64Type>(text, "speed")),
            ("other", Arc::new(BooleanArray::from(vec![true; 15]))),
            ("direction", Arc::clone(direction)),
            ("station", station),
            ("time", times(text)),
        ]);
        same_as_text(text, &table, &format);
    }
}

#[test]
fn all_time_units_and_zones() {
    let utc =
        "station,time,direction,speed\nA,2013-02-12T08:00:00Z,90,1\nA,2013-02-12T08:10:00Z,90,1\n";
    let local =
        "station,time,direction,speed\nA,2013-02-12 08:00:00,90,1\nA,2013-02-12 08:10:00,90,1\n";
    let values = |factor: i64| vec![START * factor, (START + 600) * factor];
    let in_zone = |zone| ReportFormat {
        time: TimeFormat {
            zone,
            ..TimeFormat::default()
        },
        ..ReportFormat::default()
    };
    let new_york = Zone::parse("America/New_York").unwrap();
    for zone in [None, Some("UTC"), Some("+05:30")] {
        let columns: [ArrayRef; 4] = [
            Arc::new(TimestampSecondArray::from(values(1)).with_timezone_opt(zone)),
            Arc::new(TimestampMillisecondArray::from(values(1_000)).with_timezone_opt(zone)),
            Arc::new(TimestampMicrosecondArray::from(values(1_000_000)).with_timezone_opt(zone)),
            Arc::new(TimestampNanosecondArray::from(values(1_000_000_000)).with_timezone_opt(zone)),
        ];
        for time in columns {
            let table = batch(&[
                ("station", texts(utc, "station")),
                ("time", time),
                ("direction", numbers::<Float64Type>(utc, "direction")),
                ("speed", numbers::<Float64Type>(utc, "speed")),
            ]);
            if zone.is_some() {
                // An instant is one, whatever the zone of the text columns beside it.
                same_as_text(utc, &table, &in_zone(Zone::InText));
                same_as_text(utc, &table, &in_zone(new_york));
            } else {
                same_as_text(local, &table, &in_zone(new_york));
                same_as_text(local, &table, &in_zone(Zone::Fixed(-18_000)));
                let message = refusal(&table, &in_zone(Zone::InText));
                assert!(
                    message.contains("`time`: its times have no zone"),
                    "{message}"
                );
            }
        }
    }
}

#[test]
fn texts_and_numbers_as_times() {
    let text = "\
station,day,clock,epoch,direction,speed
A,2013-02-12,08:00,1360656000.5,90,1
A,,,,90,1
";
    let table = batch(&[
        ("station", texts(text, "station")),
        ("day", texts(text, "day")),
        ("clock", texts(text, "clock")),
        ("epoch", numbers::<Float64Type>(text, "epoch")),
        ("direction", numbers::<Int16Type>(text, "direction")),
        ("speed", numbers::<Float32Type>(text, "speed")),
    ]);
    for (columns, form, zone) in [
        (vec!["day", "clock"], TimeForm::Rfc3339, Zone::Fixed(3600)),
        (
            vec!["day", "clock"],
            TimeForm::Pattern("%Y-%m-%d %H:%M".into()),
            Zone::Fixed(0),
        ),
        (vec!["epoch"], TimeForm::EpochSeconds, Zone::InText),
    ] {
        let format = ReportFormat {
            form: ReportForm::Table(Columns {
                time: columns.into_iter().map(String::from).collect(),
                ..Columns::default()
            }),
            time: TimeFormat {
                form,
                zone,
                ..TimeFormat::default()
            },
            ..ReportFormat::default()
        };
        same_as_text(text, &table, &format);
    }
}

#[test]
fn integer_stations_and_components_in_single_precision() {
    let text = "\
station,time,u,v,lat,lon,height
71508,2013-02-12T08:00:00Z,-3.5,4.25,46.5,7.5,120
71508,2013-02-12T08:10:00Z,,1,46.5,,
71509,2013-02-12T08:10:00Z,1,1,46,7,1
71508,2013-02-12T08:20:00Z,0,0,99,7,1
71508,2013-02-12T08:30:00Z,0,0,46,7,1
";
    let table = batch(&[
        ("station", numbers::<Int64Type>(text, "station")),
        ("time", times(text)),
        ("u", numbers::<Float32Type>(text, "u")),
        ("v", numbers::<Float32Type>(text, "v")),
        ("lat", numbers::<Float64Type>(text, "lat")),
        ("lon", numbers::<Float64Type>(text, "lon")),
        ("height", numbers::<Int16Type>(text, "height")),
    ]);
    let format = ReportFormat {
        form: ReportForm::Table(Columns {
            wind: WindColumns::Components {
                eastward: "u".into(),
                northward: "v".into(),
            },
            latitude: Some("lat".into()),
            longitude: Some("lon".into()),
            level: Some("height".into()),
            ..Columns::default()
        }),
        level_factor: 0.3048,
        ..ReportFormat::default()
    };
    same_as_text(text, &table, &format);
}

#[test]
fn speed_and_direction_in_separate_files() {
    let text = "station,time,x\nA,2013-02-12T08:00:00Z,10\nA,2013-02-12T08:10:00Z,\n";
    let table = batch(&[
        ("station", texts(text, "station")),
        ("time", times(text)),
        ("x", numbers::<Int16Type>(text, "x")),
    ]);
    let x = || "x".to_string();
    same_as_text(text, &table, &with_wind(WindColumns::Speed { speed: x() }));
    let direction = WindColumns::Direction { direction: x() };
    same_as_text(text, &table, &with_wind(direction));
}

#[test]
fn metar_texts() {
    let text = "\
station,time,report
A,2013-02-12T08:00:00Z,METAR AAAA 120800Z 27010G20KT 9999
A,2013-02-12T08:30:00Z,METAR COR AAAA 120830Z /////KT
A,2013-02-12T09:00:00Z,METAR AAAA
A,2013-02-12T09:00:00Z,
";
    let table = batch(&[
        ("station", texts(text, "station")),
        ("time", times(text)),
        ("report", texts(text, "report")),
    ]);
    let report = "report".to_string();
    same_as_text(text, &table, &with_wind(WindColumns::Metar { report }));
}

#[test]
fn missing_marks_may_be_numbers() {
    let text = "\
station,time,direction,speed
A,2013-02-12T08:00:00Z,90,1
A,2013-02-12T08:10:00Z,999,1
A,2013-02-12T08:20:00Z,90,-99.9
A,2013-02-12T08:30:00Z,90,999
";
    let table = batch(&[
        ("station", texts(text, "station")),
        ("time", times(text)),
        ("direction", texts(text, "direction")),
        ("speed", numbers::<Float32Type>(text, "speed")),
    ]);
    let format = ReportFormat {
        text: TextFormat {
            missing: vec!["999".into(), "-99.9".into()],
            ..TextFormat::default()
        },
        ..ReportFormat::default()
    };
    let folder = tempfile::tempdir().unwrap();
    for file in files(&folder, &table) {
        let rows = listed(&read(&file, &format), 0);
        let missing = |k: usize, what| rows[k].contains(what);
        assert!(missing(0, "Wind") && missing(1, "SpeedOnly"), "{rows:?}");
        assert!(missing(2, "Nothing") && missing(3, "Nothing"), "{rows:?}");
    }
}

#[test]
fn a_table_that_does_not_fit_is_refused_with_the_reason() {
    let text = "station,time,wind_speed\n1,2013-02-12T08:00:00Z,1\n";
    let table = batch(&[
        ("station", numbers::<Float64Type>(text, "station")),
        ("time", times(text)),
        ("direction", Arc::new(BooleanArray::from(vec![true]))),
        ("wind_speed", numbers::<Float64Type>(text, "wind_speed")),
        ("time2", times(text)),
    ]);
    let message = refusal(&table, &ReportFormat::default());
    for expected in [
        "FILE `speed`: there is no such column (found: `station`, `time`, `direction`, `wind_speed`, `time2`)",
        "FILE `station`: its type is Float64 (texts or integers expected)",
        "FILE `direction`: its type is Boolean (numbers or texts expected)",
    ] {
        assert!(message.contains(expected), "{message}");
    }
    let wide = with_wind(WindColumns::Speed {
        speed: "{station}_speed".into(),
    });
    assert!(refusal(&table, &wide).contains("is read from text alone"));
    let mut two = with_wind(WindColumns::Speed {
        speed: "wind_speed".into(),
    });
    if let ReportForm::Table(columns) = &mut two.form {
        columns.station = Some("direction".into());
        columns.time.push("time2".into());
    }
    assert!(refusal(&table, &two).contains("one of them holds whole times"));
}

/// Several batches of rows; 71508 and A, which the network has in this order, in turn.
fn long_table(rows: usize) -> RecordBatch {
    let stations: DictionaryArray<Int32Type> = (0..rows)
        .map(|k| if k % 2 == 0 { "71508" } else { "A" })
        .collect();
    let times: TimestampSecondArray = (START..).take(rows).map(Some).collect();
    let values: ArrayRef = Arc::new(
        (1..=rows)
            .map(|k| (k % 360) as f64)
            .collect::<Float64Array>(),
    );
    batch(&[
        ("station", Arc::new(stations)),
        ("time", Arc::new(times.with_timezone("UTC"))),
        ("direction", Arc::clone(&values)),
        ("speed", values),
    ])
}

#[test]
fn rows_are_counted_through_all_batches() {
    let folder = tempfile::tempdir().unwrap();
    for file in files(&folder, &long_table(25_000)) {
        let outcome = read(&file, &ReportFormat::default());
        assert_eq!(outcome.tally.passed, 25_000);
        let rows = listed(&outcome, 0);
        assert!(
            rows[0].starts_with("1 0 2013-02-12T08:00:00Z Some(1.0)"),
            "{}",
            rows[0]
        );
        assert!(
            rows[24_999].starts_with("25000 1 2013-02-12T14:56:39Z"),
            "{}",
            rows[24_999]
        );
    }
}

#[test]
fn a_file_cut_short_is_a_failure_that_names_it() {
    let folder = tempfile::tempdir().unwrap();
    for file in files(&folder, &long_table(1000)) {
        let bytes = fs::read(&file).unwrap();
        for end in [6, 8, 20, bytes.len() / 2, bytes.len() - 9, bytes.len() - 1] {
            fs::write(&file, &bytes[..end]).unwrap();
            let outcome = read(&file, &ReportFormat::default());
            assert_eq!(outcome.tally.received, 0);
            let text = outcome.failures[0].to_string();
            let start = format!("cannot read {}: ", file.display());
            assert!(text.starts_with(&start), "{text}");
        }
    }
}

#[test]
fn rows_before_damage_are_kept() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("damaged.arrow");
    let table = long_table(5000);
    let lz4 = Some(CompressionType::LZ4_FRAME);
    arrow_ipc(&file, &[table.clone(), table], lz4);
    let mut bytes = fs::read(&file).unwrap();
    // The second batch begins in the middle of the file.
    let middle = bytes.len() / 2;
    bytes[middle + 1000..middle + 3000].fill(0xa5);
    fs::write(&file, &bytes).unwrap();
    let outcome = read(&file, &ReportFormat::default());
    assert_eq!(outcome.tally.passed, 5000);
    assert_eq!(outcome.tally.count(Reason::BrokenLine), 1);
    let warning = outcome.warnings[0].to_string();
    assert!(warning.contains("reading ended early"), "{warning}");
}

#[test]
fn damaged_bytes_never_stop_the_program() {
    let folder = tempfile::tempdir().unwrap();
    for file in files(&folder, &long_table(300)) {
        let bytes = fs::read(&file).unwrap();
        for at in (0..bytes.len()).step_by(STEP) {
            let mut damaged = bytes.clone();
            damaged[at] ^= 0xff;
            fs::write(&file, &damaged).unwrap();
            // The books balance, whatever is read.
            read(&file, &ReportFormat::default());
        }
    }
}

/// Every so many bytes one is damaged; with 1 the test takes a minute.
const STEP: usize = 29;
