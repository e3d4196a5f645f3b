//! Formats of the series that are made at the end of a run, and all of them for any number of threads.
//!
//! What other programs make of the files: `.ci/python/check_results.py`.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;
use std::process::{Command, Output};

use geo::{MultiPolygon, Winding};
use geojson::{Feature, FeatureCollection};

/// Two blocks of times: the second begins at 10:40 (a whole multiple of 256 times 5 min since 1970).
const PERIOD: [&str; 4] = [
    "--from",
    "2031-06-14T08:00:00Z",
    "--to",
    "2031-06-14T12:00:00Z",
];

fn demo() -> std::path::PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("networks/ostrin/network.toml")
}

fn estimate(network: &Path, out: &Path, more: &[&str]) -> Output {
    let output = Command::new(env!("CARGO_BIN_EXE_gyremesh"))
        .arg("estimate")
        .arg(network)
        .args(["--quiet", "--out"])
        .arg(out)
        .args(more)
        .output()
        .unwrap();
    let said = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{said}");
    output
}

/// Every file of a run with one thread has the bytes of that with two, where triangles come and go and with kinematics.
#[test]
fn bytes_do_not_depend_on_threads() {
    let out = tempfile::tempdir().unwrap();
    let network = common::remeshed_demo(out.path());
    let formats = if cfg!(feature = "parquet") {
        "csv,parquet,arrow,netcdf,geojson"
    } else {
        "csv,netcdf,geojson"
    };
    let mut files = Vec::new();
    for threads in ["1", "2"] {
        let folder = out.path().join(threads);
        let more = ["--kinematics", "--threads", threads, "--format", formats];
        estimate(&network, &folder, &[&PERIOD[..], &more].concat());
        let entries = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap());
        let entries = entries.map(|e| (e.file_name(), fs::read(e.path()).unwrap()));
        files.push(entries.collect::<BTreeMap<_, _>>());
    }
    let names: Vec<_> = files[0].keys().collect();
    assert_eq!(names, files[1].keys().collect::<Vec<_>>());
    for (name, bytes) in &files[0] {
        assert!(*bytes == files[1][name], "{name:?} differs");
    }
    let netcdf = &files[0]["polygons.nc".as_ref() as &std::ffi::OsStr];
    // NetCDF-4 is HDF5, whose signature this is (HDF5 File Format Specification 3.0, II.A).
    assert_eq!(&netcdf[..8], b"\x89HDF\r\n\x1a\n");
    assert!(netcdf.len() > 100_000, "{}", netcdf.len());
}

fn features(path: &Path) -> Vec<Feature> {
    let text = fs::read_to_string(path).unwrap();
    text.parse::<FeatureCollection>().unwrap().features
}

/// Rows of `polygons.csv` at a time, as column name and text, by polygon.
fn rows_at(path: &Path, time: &str) -> BTreeMap<String, BTreeMap<String, String>> {
    let mut reader = csv::Reader::from_path(path).unwrap();
    let header = reader.headers().unwrap().clone();
    let rows = reader.records().map(Result::unwrap);
    rows.filter(|row| &row[0] == time)
        .map(|row| {
            let cells = header.iter().zip(&row);
            let cells = cells.map(|(name, cell)| (name.to_string(), cell.to_string()));
            (row[1].to_string(), cells.collect())
        })
        .collect()
}

/// A property is what `polygons.csv` holds: the same number, word, or nothing.
fn assert_same(name: &str, found: &serde_json::Value, cell: &str) {
    match found {
        serde_json::Value::Null => assert_eq!(cell, "", "{name}"),
        serde_json::Value::Bool(b) => assert_eq!(cell, if *b { "1" } else { "0" }, "{name}"),
        serde_json::Value::String(text) => assert_eq!(cell, text, "{name}"),
        serde_json::Value::Number(number) => {
            let (found, cell) = (number.as_f64().unwrap(), cell.parse::<f64>().unwrap());
            // Parts of errors have seven digits in the table; this reader of JSON rounds to a bit.
            let tolerance = if name.contains("_se_") { 1e-6 } else { 1e-15 };
            assert!(
                (found - cell).abs() <= tolerance * cell.abs(),
                "{name}: {found} {cell}"
            );
        }
        _ => panic!("{name}: {found}"),
    }
}

fn assert_features_are_rows(features: &[Feature], csv: &Path, time: &str) {
    let rows = rows_at(csv, time);
    let of_time: Vec<&Feature> = features
        .iter()
        .filter(|f| f.property("time").unwrap() == time)
        .collect();
    assert!(!rows.is_empty());
    assert_eq!(of_time.len(), rows.len());
    for feature in of_time {
        let row = &rows[feature.property("polygon").unwrap().as_str().unwrap()];
        let properties = feature.properties.as_ref().unwrap();
        for (name, cell) in row {
            assert_same(name, &properties[name], cell);
        }
    }
}

/// The last time, or those asked for; a time that is none is told.
#[test]
fn geojson_holds_the_rows_of_the_times_asked_for() {
    let out = tempfile::tempdir().unwrap();
    let csv = out.path().join("polygons.csv");
    let geojson = out.path().join("polygons.geojson");
    let formats = ["--format", "csv,geojson"];
    estimate(&demo(), out.path(), &[&PERIOD[..], &formats].concat());
    let found = features(&geojson);
    let last = "2031-06-14T12:00:00Z";
    assert!(found.iter().all(|f| f.property("time").unwrap() == last));
    assert_features_are_rows(&found, &csv, last);

    let network = common::remeshed_demo(out.path());
    // One in each block, and one between analysis times.
    let times = [
        "2031-06-14T09:25:00Z",
        "2031-06-14T11:30:00Z",
        "2031-06-14T11:31:00Z",
    ];
    let at = times.map(|time| ["--at", time]).concat();
    let output = estimate(&network, out.path(), &[&PERIOD[..], &formats, &at].concat());
    let said = String::from_utf8(output.stderr).unwrap();
    assert!(
        said.contains("polygons.geojson: 2031-06-14T11:31:00Z is no analysis time with reports"),
        "{said}"
    );
    assert_eq!(said.matches("no analysis time").count(), 1, "{said}");
    let found = features(&geojson);
    for time in &times[..2] {
        assert_features_are_rows(&found, &csv, time);
    }
    let all = rows_at(&csv, times[0]).len() + rows_at(&csv, times[1]).len();
    assert_eq!(found.len(), all);
}

/// RFC 7946: counter-clockwise, cut at the antimeridian (3.1.6, 3.1.9).
#[test]
fn geojson_across_the_antimeridian() {
    let out = tempfile::tempdir().unwrap();
    let put = |name: &str, text: &str| fs::write(out.path().join(name), text).unwrap();
    put(
        "stations.csv",
        "id,latitude,longitude\nA,-17.0,179.8\nB,-17.0,-179.8\nC,-16.7,-179.9\nD,-16.7,179.7\n",
    );
    let mut reports = String::from("id,time,dir,spd\n");
    for (id, direction) in [("A", 90), ("B", 100), ("C", 110), ("D", 120)] {
        reports += &format!("{id},2031-01-01T00:00:00Z,{direction},5.0\n");
    }
    put("reports.csv", &reports);
    put(
        "network.toml",
        "name = \"Line\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\n\
         columns = { station = \"id\", time = \"time\", direction = \"dir\", speed = \"spd\" }\nspeed_unit = \"m/s\"\n\
         [analysis]\ninterval = \"10 min\"\n",
    );
    let network = out.path().join("network.toml");
    let results = out.path().join("out");
    estimate(&network, &results, &["--format", "geojson,netcdf"]);
    let features = features(&results.join("polygons.geojson"));
    assert_eq!(features.len(), 2);
    for feature in features {
        assert!(feature.property("vorticity").unwrap().is_f64());
        let parts: MultiPolygon<f64> = feature.geometry.unwrap().try_into().unwrap();
        assert_eq!(parts.0.len(), 2);
        for part in &parts {
            assert!(part.exterior().is_ccw());
            let x: Vec<f64> = part.exterior().coords().map(|c| c.x).collect();
            assert!(
                x.iter().all(|x| *x >= 179.0) || x.iter().all(|x| *x <= -179.0),
                "{x:?}"
            );
        }
    }
}

/// The polygons of `mesh.geojson`, coordinate for coordinate, in the form of GeoParquet 1.1.
#[cfg(feature = "parquet")]
#[test]
fn the_mesh_as_geoparquet_holds_what_the_geojson_holds() {
    use arrow_array::cast::AsArray;
    use arrow_array::types::Float64Type;
    use parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder;

    let out = tempfile::tempdir().unwrap();
    let network = common::remeshed_demo(out.path());
    let more = ["--format", "parquet", "--errors", "instrument"];
    estimate(&network, out.path(), &[&PERIOD[..], &more].concat());
    let file = fs::File::open(out.path().join("mesh.parquet")).unwrap();
    let builder = ParquetRecordBatchReaderBuilder::try_new(file).unwrap();
    let metadata = builder.metadata().file_metadata().key_value_metadata();
    let geo = metadata.unwrap().iter().find(|pair| pair.key == "geo");
    let geo: serde_json::Value =
        serde_json::from_str(geo.unwrap().value.as_deref().unwrap()).unwrap();
    assert_eq!(geo["version"], "1.1.0");
    assert_eq!(geo["primary_column"], "geometry");
    assert_eq!(geo["columns"]["geometry"]["encoding"], "WKB");
    let kinds = &geo["columns"]["geometry"]["geometry_types"];
    assert_eq!(*kinds, serde_json::json!(["Polygon"]));
    let batches: Vec<_> = builder.build().unwrap().map(Result::unwrap).collect();
    let [batch] = batches.as_slice() else {
        panic!("one batch expected");
    };
    let features = features(&out.path().join("mesh.geojson"));
    assert_eq!(batch.num_rows(), features.len());
    let words = |name: &str| batch.column_by_name(name).unwrap().as_string::<i32>();
    let areas = batch.column_by_name("area_km2").unwrap();
    let shapes = batch.column_by_name("geometry").unwrap().as_binary::<i32>();
    let (mut excluded, mut filling) = (0, 0);
    for (k, feature) in features.into_iter().enumerate() {
        let property = |name: &str| feature.property(name).unwrap().clone();
        assert_eq!(property("polygon"), words("polygon").value(k));
        let area = areas.as_primitive::<Float64Type>().value(k);
        assert!((property("area_km2").as_f64().unwrap() / area - 1.0).abs() < 1e-15);
        let reason = words("excluded");
        let reason = (!arrow_array::Array::is_null(reason, k)).then(|| reason.value(k));
        assert_eq!(property("excluded").as_str(), reason);
        excluded += usize::from(reason.is_some());
        let fills = batch.column_by_name("fills_hole").unwrap().as_boolean();
        assert_eq!(property("fills_hole"), fills.value(k));
        filling += usize::from(fills.value(k));
        // One polygon without holes: byte order, kind, one ring, its points (OGC 06-103r4, 8.2).
        let bytes = shapes.value(k);
        assert_eq!(bytes[..9], [1, 3, 0, 0, 0, 1, 0, 0, 0]);
        let numbers = bytes[13..].chunks(8);
        let numbers: Vec<f64> = numbers
            .map(|b| f64::from_le_bytes(b.try_into().unwrap()))
            .collect();
        let outline: geo::Polygon<f64> = feature.geometry.unwrap().try_into().unwrap();
        let points: Vec<f64> = outline
            .exterior()
            .coords()
            .flat_map(|c| [c.x, c.y])
            .collect();
        assert_eq!(
            bytes[9..13],
            u32::try_from(points.len() / 2).unwrap().to_le_bytes()
        );
        assert_eq!(numbers.len(), points.len());
        // Seven decimals in both.
        assert!(
            numbers
                .iter()
                .zip(&points)
                .all(|(a, b)| (a - b).abs() < 1e-12)
        );
    }
    assert!(excluded > 0 && filling > 0, "{excluded} {filling}");
}
