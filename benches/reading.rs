//! Rows per second of the report reader, beside the bare record loop of the `csv` crate and beside that loop with
//! `chrono` and `str::parse`, all on one thread.
#![allow(
    clippy::print_stdout,
    clippy::unwrap_used,
    reason = "a bench prints and may panic"
)]

mod common;

use std::fmt::Write as _;

use gyremesh::report::{ReportFormat, read_reports};
use gyremesh::settings::ReportSource;
use gyremesh::station::{Network, Position, Station};
use gyremesh::time::Time;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const STATIONS: usize = 120;
const TIMES: i64 = 2000;

fn main() {
    let mut rng = ChaCha8Rng::seed_from_u64(2);
    let mut text = String::from("time,station,direction,speed\n");
    for t in 0..TIMES {
        let time = Time::from_micros(1_900_000_000_000_000 + 300_000_000 * t);
        for s in 0..STATIONS {
            let (direction, speed) = (rng.random_range(1..=360), rng.random_range(0..200));
            let _ = writeln!(
                text,
                "{time},ST{s:03},{direction},{}.{}",
                speed / 10,
                speed % 10
            );
        }
    }
    let file = tempfile::NamedTempFile::new().unwrap();
    std::fs::write(file.path(), &text).unwrap();
    let stations = (0..STATIONS).map(|s| {
        let position = Position::new(45.0, s as f64 * 0.1).unwrap();
        Station::new(format!("ST{s:03}"), position)
    });
    let network = Network::new(stations.collect());
    let source = ReportSource {
        files: vec![file.path().to_path_buf()],
        format: ReportFormat::default(),
    };
    let sources = [source];
    let pool = rayon::ThreadPoolBuilder::new()
        .num_threads(1)
        .build()
        .unwrap();
    let ours = || {
        pool.install(|| {
            read_reports(&sources, &network)
                .rows
                .iter()
                .map(gyremesh::report::Rows::len)
                .sum::<usize>()
        })
    };

    let bare = || {
        let mut reader = csv::Reader::from_path(file.path()).unwrap();
        let mut record = csv::ByteRecord::new();
        let mut rows = 0;
        while reader.read_byte_record(&mut record).unwrap() {
            rows += 1;
        }
        rows
    };
    let usual = || {
        let mut reader = csv::Reader::from_path(file.path()).unwrap();
        let mut record = csv::StringRecord::new();
        let mut rows = Vec::new();
        while reader.read_record(&mut record).unwrap() {
            let time = chrono::DateTime::parse_from_rfc3339(&record[0])
                .unwrap()
                .timestamp_micros();
            let station = network.find(&record[1]).unwrap();
            let direction: f64 = record[2].parse().unwrap();
            let speed: f64 = record[3].parse().unwrap();
            rows.push((time, station, direction, speed));
        }
        rows.len()
    };
    let rows = ours();
    assert!(rows > 200_000);
    let (seconds, _, to_bare) = common::against(ours, bare);
    let (_, _, to_usual) = common::against(ours, usual);
    println!(
        "reading: {:.1} million rows/s ({:.0} MB/s) on one thread; {to_bare:.2} of the time of a bare csv record loop, \
         {to_usual:.2} of that loop with chrono and str::parse",
        rows as f64 / seconds / 1e6,
        text.len() as f64 / seconds / 1e6,
    );
}
