//! The series in its formats, and the summary of each polygon.
#![cfg(feature = "parquet")]
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::collections::BTreeMap;
use std::fs::File;
use std::path::Path;
use std::process::Command;

use gyremesh::integral::{adjusted, chance_of};

use arrow_array::cast::AsArray;
use arrow_array::types::{
    Float32Type, Float64Type, Int32Type, TimestampMicrosecondType, UInt8Type,
};
use arrow_array::{Array, RecordBatch};
use parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder;

fn estimate(out: &Path, more: &[&str]) {
    let network = Path::new(env!("CARGO_MANIFEST_DIR")).join("networks/ostrin/network.toml");
    estimate_network(&network, out, more);
}

fn estimate_network(network: &Path, out: &Path, more: &[&str]) {
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("estimate")
        .arg(network)
        .args(["--quiet", "--out"])
        .arg(out)
        .args(more)
        .output()
        .unwrap();
    assert_eq!(
        output.status.code(),
        Some(0),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
}

fn rows(path: &Path) -> Vec<csv::StringRecord> {
    csv::Reader::from_path(path)
        .unwrap()
        .records()
        .map(Result::unwrap)
        .collect()
}

/// A cell as `polygons.csv` writes it: shortest text that reads back the same, empty for null.
fn text(batch: &RecordBatch, column: usize, row: usize) -> Vec<f64> {
    let array = batch.column(column);
    if array.is_null(row) {
        return vec![];
    }
    match column {
        10 => vec![f64::from(array.as_primitive::<UInt8Type>().value(row))],
        12 => vec![f64::from(array.as_primitive::<Float32Type>().value(row))],
        _ => vec![array.as_primitive::<Float64Type>().value(row)],
    }
}

fn name(batch: &RecordBatch, column: usize, row: usize) -> String {
    let array = batch.column(column);
    if let Some(plain) = array.as_string_opt::<i32>() {
        return plain.value(row).to_string();
    }
    let array = array.as_dictionary::<Int32Type>();
    if array.is_null(row) {
        return String::new();
    }
    let key = usize::try_from(array.keys().value(row)).unwrap();
    array.values().as_string::<i32>().value(key).to_string()
}

/// The same bytes of every number, column for column, row for row.
#[test]
fn parquet_and_arrow_hold_what_the_csv_holds() {
    let out = tempfile::tempdir().unwrap();
    estimate(out.path(), &["--format", "csv,parquet,arrow"]);
    compare(out.path());
}

/// With triangles that come and go (`missing = "remesh"`) as well.
#[test]
fn parquet_and_arrow_hold_what_the_csv_holds_where_triangles_come_and_go() {
    let out = tempfile::tempdir().unwrap();
    let network = common::remeshed_demo(out.path());
    estimate_network(&network, out.path(), &["--format", "csv,parquet,arrow"]);
    compare(out.path());
}

fn compare(out: &Path) {
    let file = File::open(out.join("polygons.parquet")).unwrap();
    let builder = ParquetRecordBatchReaderBuilder::try_new(file).unwrap();
    let schema = builder.schema().clone();
    compare_batches(out, &schema, builder.build().unwrap().map(Result::unwrap));
    let file = File::open(out.join("polygons.arrow")).unwrap();
    let reader = arrow_ipc::reader::FileReader::try_new(file, None).unwrap();
    let schema = reader.schema();
    assert!(schema.metadata()["caution"].contains("not warnings"));
    compare_batches(out, &schema, reader.map(Result::unwrap));
}

fn compare_batches(
    out: &Path,
    schema: &arrow_schema::Schema,
    batches: impl Iterator<Item = RecordBatch>,
) {
    let csv = rows(&out.join("polygons.csv"));
    let names: Vec<String> = schema.fields().iter().map(|f| f.name().clone()).collect();
    let header = csv::Reader::from_path(out.join("polygons.csv"))
        .unwrap()
        .headers()
        .unwrap()
        .clone();
    assert_eq!(names, header.iter().collect::<Vec<_>>());
    let mut at = 0;
    for batch in batches {
        for row in 0..batch.num_rows() {
            let expected = &csv[at];
            let micros = batch
                .column(0)
                .as_primitive::<TimestampMicrosecondType>()
                .value(row);
            let time = gyremesh::time::Time::from_micros(micros).to_string();
            assert_eq!(time, expected[0]);
            for column in [1, 2, 11, 21] {
                assert_eq!(name(&batch, column, row), expected[column]);
            }
            for column in [3, 4, 5, 6, 7, 8, 9, 10, 12] {
                let found = text(&batch, column, row);
                let wanted: Vec<f64> = expected[column].parse().into_iter().collect();
                assert_eq!(found, wanted, "row {at}, column {}", &names[column]);
            }
            at += 1;
        }
    }
    assert_eq!(at, csv.len());
    // The demo has missing values, so nulls were compared too.
    assert!(csv.iter().any(|r| r[4].is_empty()));
}

/// A value of the series.
struct Divergence {
    value: f64,
    error: f64,
    /// Of the error: sensors and sites, the wind between the stations, late reports.
    parts: [f64; 3],
    significant: bool,
    time: String,
}

/// The divergences of each polygon.
fn divergences(folder: &Path) -> BTreeMap<String, Vec<Divergence>> {
    let mut series: BTreeMap<String, Vec<Divergence>> = BTreeMap::new();
    for row in rows(&folder.join("polygons.csv")) {
        let number = |k: usize| row[k].parse::<f64>();
        if let (Ok(value), Ok(error)) = (number(6), number(7)) {
            series
                .entry(row[1].to_string())
                .or_default()
                .push(Divergence {
                    value,
                    error,
                    parts: [16, 17, 18].map(|k| number(k).unwrap()),
                    significant: &row[20] == "1",
                    time: row[0].to_string(),
                });
        }
    }
    series
}

/// The parts make the whole, and what is called different from zero is so by the step-up rule of Benjamini & Hochberg
/// 1995 at 5 %, on sorted probabilities.
#[test]
fn errors_have_their_parts_and_calls_their_rate() {
    let out = tempfile::tempdir().unwrap();
    estimate(out.path(), &[]);
    let mut times: BTreeMap<String, Vec<Divergence>> = BTreeMap::new();
    let mut sampled = 0;
    for value in divergences(out.path()).into_values().flatten() {
        let whole = value
            .parts
            .iter()
            .map(|part| part * part)
            .sum::<f64>()
            .sqrt();
        // The parts have seven digits.
        assert!((whole / value.error - 1.0).abs() < 1e-6);
        sampled += usize::from(value.parts[1] > value.parts[0]);
        times.entry(value.time.clone()).or_default().push(value);
    }
    assert!(sampled > 10_000, "{sampled}");
    let mut called = 0;
    for values in times.values() {
        let z = |v: &Divergence| (v.value / v.error).abs();
        let chances: Vec<f64> = values.iter().map(|v| chance_of(z(v), 1.0)).collect();
        for (value, p) in values.iter().zip(adjusted(&chances)) {
            assert_eq!(value.significant, p <= 0.05, "{} {p}", value.time);
            called += usize::from(value.significant);
        }
    }
    assert!(called > 100, "{called}");
}

/// Counts, means, extremes and shares recomputed from the series. Tolerance: rounding of sums of 289 values.
#[test]
fn the_summary_of_each_polygon_is_that_of_its_series() {
    let out = tempfile::tempdir().unwrap();
    estimate(out.path(), &[]);
    let series = divergences(out.path());
    let summary = rows(&out.path().join("polygon_summary.csv"));
    assert!(summary.len() >= series.len());
    for row in &summary {
        let values = &series[&row[0]];
        let n = values.len() as f64;
        // The columns of divergence follow the nine of vorticity.
        let number = |k: usize| row[9 + k].parse::<f64>().unwrap();
        assert!((number(1) - n).abs() < 0.5);
        let mean = values.iter().map(|v| v.value).sum::<f64>() / n;
        assert!(
            (number(2) - mean).abs() < 1e-12 * 1e-3,
            "{} {mean:e}",
            number(2)
        );
        // What persists does not average out; what passes does, in part.
        let persists = values.iter().map(|v| v.parts[0]).sum::<f64>() / n;
        let rms = (values.iter().map(|v| v.error * v.error).sum::<f64>() / n).sqrt();
        assert!(
            number(3) > persists && number(3) < 0.9 * rms,
            "{} {rms}",
            number(3)
        );
        let sd = (values.iter().map(|v| (v.value - mean).powi(2)).sum::<f64>() / (n - 1.0)).sqrt();
        assert!((number(4) / sd - 1.0).abs() < 1e-12);
        let smallest = values.iter().min_by(|a, b| a.value.total_cmp(&b.value));
        let smallest = smallest.unwrap();
        let found = (number(5), &row[9 + 6]);
        assert_eq!(found, (smallest.value, smallest.time.as_str()));
        let largest = values.iter().max_by(|a, b| a.value.total_cmp(&b.value));
        let largest = largest.unwrap();
        let found = (number(7), &row[9 + 8]);
        assert_eq!(found, (largest.value, largest.time.as_str()));
        let significant = values.iter().filter(|v| v.significant).count() as f64;
        assert!((number(9) - significant / n).abs() < 1e-12);
    }
}

#[test]
fn summary_only_writes_no_series() {
    let (all, only) = (tempfile::tempdir().unwrap(), tempfile::tempdir().unwrap());
    estimate(all.path(), &["--format", "parquet"]);
    estimate(only.path(), &["--summary-only"]);
    assert!(
        all.path().join("polygons.parquet").is_file() && !all.path().join("polygons.csv").exists()
    );
    assert!(
        !only.path().join("polygons.csv").exists()
            && !only.path().join("polygons.parquet").exists()
    );
    for name in [
        "polygon_summary.csv",
        "structure.csv",
        "stations.csv",
        "mesh.geojson",
        "summary.json",
    ] {
        let read = |folder: &Path| std::fs::read(folder.join(name)).unwrap();
        assert!(read(all.path()) == read(only.path()), "{name}");
    }
}

/// `kinematics.csv` has the rows of `polygons.csv`; curvature and shear vorticity sum to its vorticity, and the Rossby
/// number times its f is it; `kinematics.parquet` holds the same numbers, and no number of threads changes a byte.
#[test]
fn kinematics_beside_the_series() {
    let out = tempfile::tempdir().unwrap();
    let options = ["--kinematics", "--format", "csv,parquet", "--threads"];
    let folders = ["1", "3"].map(|threads| {
        let folder = out.path().join(threads);
        estimate(&folder, &[options.as_slice(), &[threads]].concat());
        folder
    });
    for name in ["kinematics.csv", "kinematics.parquet", "polygons.csv"] {
        let [one, three] = folders
            .each_ref()
            .map(|f| std::fs::read(f.join(name)).unwrap());
        assert!(one == three, "{name}");
    }
    let folder = &folders[0];
    let (polygons, found) = (
        rows(&folder.join("polygons.csv")),
        rows(&folder.join("kinematics.csv")),
    );
    let header = csv::Reader::from_path(folder.join("kinematics.csv"))
        .unwrap()
        .headers()
        .unwrap()
        .clone();
    let column = |name: &str| header.iter().position(|h| h == name).unwrap();
    assert_eq!(polygons.len(), found.len());
    let (mut with_parts, mut without) = (0, 0);
    for (polygon, row) in polygons.iter().zip(&found) {
        assert_eq!((&polygon[0], &polygon[1]), (&row[0], &row[1]));
        let number = |name: &str| row[column(name)].parse::<f64>();
        assert_eq!(polygon[4].is_empty(), number("stretching").is_err());
        let Ok(vorticity) = polygon[4].parse::<f64>() else {
            assert!(row.iter().skip(2).all(str::is_empty));
            continue;
        };
        let f: f64 = polygon[8].parse().unwrap();
        let rossby = number("rossby_number").unwrap();
        assert!((rossby * f - vorticity).abs() < 1e-15);
        let error: f64 = polygon[5].parse().unwrap();
        // Written with seven digits.
        assert!((number("rossby_number_se").unwrap() * f / error - 1.0).abs() < 1e-6);
        match (number("curvature_vorticity"), number("shear_vorticity")) {
            (Ok(curvature), Ok(shear)) => {
                assert!((curvature + shear - vorticity).abs() < 1e-15);
                assert!(number("mean_speed").unwrap() >= 1.0);
                with_parts += 1;
            }
            _ => without += 1,
        }
    }
    assert!(with_parts > 10_000 && without > 0, "{with_parts} {without}");

    let file = File::open(folder.join("kinematics.parquet")).unwrap();
    let builder = ParquetRecordBatchReaderBuilder::try_new(file).unwrap();
    let names = builder.schema().fields().iter().map(|f| f.name().clone());
    assert!(names.eq(header.iter()));
    let mut at = 0;
    for batch in builder.build().unwrap() {
        let batch = batch.unwrap();
        for row in 0..batch.num_rows() {
            assert_eq!(name(&batch, 1, row), found[at][1]);
            for (k, expected) in found[at].iter().enumerate().skip(2) {
                let array = batch.column(k);
                let value = if array.is_null(row) {
                    String::new()
                } else if k % 2 == 0 {
                    let value = array.as_primitive::<Float64Type>().value(row);
                    assert_eq!(expected.parse(), Ok(value));
                    continue;
                } else {
                    let value = array.as_primitive::<Float32Type>().value(row);
                    assert_eq!(expected.parse(), Ok(value));
                    continue;
                };
                assert_eq!(value, expected, "row {at}, column {k}");
            }
            at += 1;
        }
    }
    assert_eq!(at, found.len());
}

/// Means by hour, day and named period against the series itself; every value is in one hour and in one day.
#[test]
fn means_by_group() {
    let out = tempfile::tempdir().unwrap();
    // A copy of the demo's settings with periods and a zone; its files by their full names.
    let demo = Path::new(env!("CARGO_MANIFEST_DIR")).join("networks/ostrin");
    let settings = std::fs::read_to_string(demo.join("network.toml")).unwrap();
    let reports = demo.join("../../examples/ostrin/reports.csv");
    let settings = settings.replace(
        "../../examples/ostrin/reports.csv",
        reports.to_str().unwrap(),
    );
    let run = |by: &str, more: &str, threads: &str| -> std::path::PathBuf {
        let folder = out.path().join(format!("{by}{threads}"));
        std::fs::create_dir_all(&folder).unwrap();
        for entry in std::fs::read_dir(&demo).unwrap() {
            let file = entry.unwrap().path();
            if file.is_file() {
                std::fs::copy(&file, folder.join(file.file_name().unwrap())).unwrap();
            }
        }
        let network = folder.join("network.toml");
        std::fs::write(&network, format!("{settings}\n{more}")).unwrap();
        let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
            .arg("estimate")
            .arg(&network)
            .args(["--quiet", "--by", by, "--threads", threads, "--out"])
            .arg(folder.join("out"))
            .output()
            .unwrap();
        let err = String::from_utf8_lossy(&output.stderr).into_owned();
        assert_eq!(output.status.code(), Some(0), "{err}");
        folder.join("out")
    };
    let periods = "[[periods]]\nname = \"morning\"\nfrom = \"2031-06-14T06:00:00Z\"\nto = \"2031-06-14T09:00:00Z\"\n\
                   [[periods]]\nname = \"six\"\nfrom = \"2031-06-14T06:00:00Z\"\nto = \"2031-06-14T06:55:00Z\"\n";
    let zone = "[means]\nzone = \"-02:00\"\n";
    let by_hour = run("hour", zone, "1");
    let all = divergences(&by_hour);
    let means = |folder: &Path| rows(&folder.join("polygon_means.csv"));
    // The columns of divergence follow group, polygon and the nine of vorticity.
    let number = |row: &csv::StringRecord, k: usize| row[10 + k].parse::<f64>();
    let check = |folder: &Path, in_group: &dyn Fn(&str, &str) -> bool| -> f64 {
        let mut counted = 0.0;
        for row in means(folder) {
            let values = all.get(&row[1]).into_iter().flatten();
            let of_group: Vec<&Divergence> =
                values.filter(|v| in_group(&row[0], &v.time)).collect();
            let n = of_group.len() as f64;
            assert!((number(&row, 1).unwrap() - n).abs() < 0.5, "{row:?} {n}");
            counted += n;
            if n < 2.0 {
                continue;
            }
            let mean = of_group.iter().map(|v| v.value).sum::<f64>() / n;
            assert!((number(&row, 2).unwrap() - mean).abs() < 1e-15, "{row:?}");
            let squares = of_group
                .iter()
                .map(|v| (v.value - mean).powi(2))
                .sum::<f64>();
            let sd = (squares / (n - 1.0)).sqrt();
            assert!((number(&row, 4).unwrap() / sd - 1.0).abs() < 1e-9);
            // Sensors and sites do not average out; the rest does in part, less than if each value stood alone.
            let part = |k: usize| of_group.iter().map(move |v| v.parts[k]);
            let persists = part(0).sum::<f64>() / n;
            let passes = part(1).chain(part(2)).map(|p| p * p).sum::<f64>() / n;
            let error = number(&row, 3).unwrap();
            assert!(error < (persists * persists + passes).sqrt() * (1.0 + 1e-6));
            assert!(error > (persists * persists + passes / n).sqrt() * (1.0 - 1e-6));
        }
        counted
    };
    let total: usize = all.values().map(Vec::len).sum();
    // 00 UTC is 22 of the day before.
    let hour = |group: &str, time: &str| {
        let utc: u32 = time[11..13].parse().unwrap();
        group.parse() == Ok((utc + 22) % 24)
    };
    assert!((check(&by_hour, &hour) - total as f64).abs() < 0.5);
    let by_day = run("day", "", "1");
    assert!((check(&by_day, &|group, time| time.starts_with(group)) - total as f64).abs() < 0.5);
    let by_month = run("month", "", "1");
    assert!(means(&by_month).iter().all(|row| &row[0] == "2031-06"));
    let by_period = run("period", periods, "1");
    check(&by_period, &|group, time| match group {
        "six" => time[11..13] == *"06",
        _ => ("2031-06-14T06:00:00Z"..="2031-06-14T09:00:00Z").contains(&time),
    });
    let again = run("period", periods, "3");
    assert_eq!(means(&by_period), means(&again));
}

/// `kinematics_means.csv` against `kinematics.csv`: values, means, deviations, extremes; the Rossby number is the vorticity
/// over f, so its means and their errors are those of the vorticity in `polygon_means.csv`.
#[test]
fn means_of_kinematics() {
    let out = tempfile::tempdir().unwrap();
    let options = [
        "--kinematics",
        "--by",
        "hour",
        "--no-screen",
        "--interval",
        "20min",
        "--threads",
    ];
    let folders = ["1", "3"].map(|threads| {
        let folder = out.path().join(threads);
        estimate(&folder, &[options.as_slice(), &[threads]].concat());
        folder
    });
    let [one, three] = folders
        .each_ref()
        .map(|f| rows(&f.join("kinematics_means.csv")));
    assert_eq!(one, three);
    let folder = &folders[0];
    let mut reader = csv::Reader::from_path(folder.join("kinematics.csv")).unwrap();
    let header = reader.headers().unwrap().clone();
    let mut all: BTreeMap<(String, String, String), Vec<f64>> = BTreeMap::new();
    for row in reader.records().map(Result::unwrap) {
        for (k, name) in header.iter().enumerate().skip(2).step_by(2) {
            if let Ok(value) = row[k].parse() {
                let key = (
                    row[0][11..13].to_string(),
                    row[1].to_string(),
                    name.to_string(),
                );
                all.entry(key).or_default().push(value);
            }
        }
    }
    all.retain(|key, _| key.2 != "mean_direction" && key.2 != "dilatation_axis");
    assert_eq!(all.len(), one.len());
    let planetary: BTreeMap<String, f64> = rows(&folder.join("polygons.csv"))
        .iter()
        .map(|row| (row[1].to_string(), row[8].parse().unwrap()))
        .collect();
    let of_vorticity: BTreeMap<(String, String), [f64; 2]> =
        rows(&folder.join("polygon_means.csv"))
            .iter()
            .filter(|row| !row[3].is_empty())
            .map(|row| {
                let numbers = [3, 4].map(|k| row[k].parse().unwrap());
                ((row[0].to_string(), row[1].to_string()), numbers)
            })
            .collect();
    let mut compared = 0;
    for row in &one {
        let number = |k: usize| row[k].parse::<f64>().unwrap();
        let values = &all[&(row[0].to_string(), row[1].to_string(), row[2].to_string())];
        let n = values.len() as f64;
        assert_eq!(row[3].parse(), Ok(values.len()));
        let mean = values.iter().sum::<f64>() / n;
        let size = values.iter().fold(0.0, |size: f64, v| size.max(v.abs()));
        assert!((number(4) - mean).abs() <= 1e-12 * size, "{row:?}");
        if values.len() > 1 {
            let squares = values.iter().map(|v| (v - mean).powi(2)).sum::<f64>();
            assert!((number(6) - (squares / (n - 1.0)).sqrt()).abs() <= 1e-9 * size);
        }
        let least = values.iter().copied().fold(f64::INFINITY, f64::min);
        assert!((number(7) - least).abs() <= 0.0);
        let most = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        assert!((number(8) - most).abs() <= 0.0);
        if &row[2] == "rossby_number" {
            let f = planetary[&row[1]];
            let [mean, error] = of_vorticity[&(row[0].to_string(), row[1].to_string())];
            assert!((number(4) * f - mean).abs() < 1e-15);
            assert!(
                (number(5) * f / error - 1.0).abs() < 1e-6,
                "{row:?} {error}"
            );
            compared += 1;
        }
    }
    assert!(compared > 1000, "{compared}");
}

/// `check --out`: the same cells in both formats, row for row.
#[test]
fn flagged_reports_as_parquet_hold_what_the_csv_holds() {
    let out = tempfile::tempdir().unwrap();
    let network = Path::new(env!("CARGO_MANIFEST_DIR")).join("networks/ostrin/network.toml");
    let status = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("check")
        .arg(network)
        .args(["--format", "csv,parquet", "--out"])
        .arg(out.path())
        .output()
        .unwrap()
        .status;
    assert_eq!(status.code(), Some(0));
    let mut csv = csv::Reader::from_path(out.path().join("reports_flagged.csv")).unwrap();
    let header: Vec<String> = csv.headers().unwrap().iter().map(String::from).collect();
    let mut csv = csv.records().map(Result::unwrap);
    let file = File::open(out.path().join("reports_flagged.parquet")).unwrap();
    let builder = ParquetRecordBatchReaderBuilder::try_new(file).unwrap();
    let fields = builder.schema().fields().clone();
    let names: Vec<String> = fields.iter().map(|f| f.name().clone()).collect();
    assert_eq!(names, header);
    let zstd = |c: &parquet::file::metadata::ColumnChunkMetaData| {
        matches!(c.compression(), parquet::basic::Compression::ZSTD(_))
    };
    assert!(
        builder
            .metadata()
            .row_groups()
            .iter()
            .all(|g| g.columns().iter().all(zstd))
    );
    let (mut rows, mut nulls) = (0, 0);
    for batch in builder.build().unwrap() {
        let batch = batch.unwrap();
        for row in 0..batch.num_rows() {
            let expected = csv.next().unwrap();
            for (column, field) in fields.iter().enumerate() {
                let array = batch.column(column);
                let text = match field.data_type() {
                    _ if array.is_null(row) => {
                        nulls += 1;
                        String::new()
                    }
                    arrow_schema::DataType::Timestamp(..) => {
                        let micros = array.as_primitive::<TimestampMicrosecondType>().value(row);
                        gyremesh::time::Time::from_micros(micros).to_string()
                    }
                    arrow_schema::DataType::Dictionary(..) => name(&batch, column, row),
                    arrow_schema::DataType::Float64 => {
                        let value = array.as_primitive::<Float64Type>().value(row);
                        assert!(value.is_finite());
                        // The same number, to the last bit.
                        assert_eq!(
                            expected[column].parse::<f64>().unwrap().to_bits(),
                            value.to_bits()
                        );
                        expected[column].to_string()
                    }
                    arrow_schema::DataType::UInt8 => {
                        array.as_primitive::<UInt8Type>().value(row).to_string()
                    }
                    _ => array
                        .as_primitive::<arrow_array::types::UInt32Type>()
                        .value(row)
                        .to_string(),
                };
                assert_eq!(text, expected[column], "row {rows}, {}", header[column]);
            }
            rows += 1;
        }
    }
    assert!(csv.next().is_none());
    // The demo has no gusts, so that column is null throughout.
    assert!(rows == 10_799 && nulls >= rows, "{rows} {nulls}");
}
