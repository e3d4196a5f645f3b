//! Time that all tests of the reports take, beside reading the same reports from text, and beside a plain loop that only
//! looks for the largest change of each component; all on one thread.
#![allow(
    clippy::print_stdout,
    clippy::unwrap_used,
    reason = "a bench prints and may panic"
)]

mod common;

use std::fmt::Write as _;

use gyremesh::check::{Flag, StationScreen, screen};
use gyremesh::report::{ReportFormat, ReportTable, read_reports};
use gyremesh::settings::{CheckLimits, ReportSource};
use gyremesh::station::{Network, Position, Station};
use gyremesh::time::Time;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const STATIONS: usize = 120;
const TIMES: i64 = 8000;

fn main() {
    let mut rng = ChaCha8Rng::seed_from_u64(2);
    let mut text = String::from("time,station,direction,speed\n");
    let mut gusts = [(0.0, 0.0); STATIONS];
    for t in 0..TIMES {
        let time = Time::from_micros(1_900_000_000_000_000 + 300_000_000 * t);
        for (s, gust) in gusts.iter_mut().enumerate() {
            *gust = (
                0.8 * gust.0 + rng.random_range(-1.0..1.0),
                0.8 * gust.1 + rng.random_range(-1.0..1.0),
            );
            let (direction, speed): (f64, f64) = (200.0 + 12.0 * gust.0, 5.0 + gust.1);
            let speed = speed.max(0.0);
            let _ = writeln!(text, "{time},ST{s:03},{direction:.0},{speed:.1}");
        }
    }
    let file = tempfile::NamedTempFile::new().unwrap();
    std::fs::write(file.path(), &text).unwrap();
    let stations = (0..STATIONS).map(|s| {
        let position = Position::new(45.0, s as f64 * 0.1).unwrap();
        Station::new(format!("ST{s:03}"), position)
    });
    let network = Network::new(stations.collect());
    let sources = [ReportSource {
        files: vec![file.path().to_path_buf()],
        format: ReportFormat::default(),
    }];
    let pool = rayon::ThreadPoolBuilder::new()
        .num_threads(1)
        .build()
        .unwrap();
    let rows = pool.install(|| read_reports(&sources, &network).rows);
    let (mut table, _) = ReportTable::new(&rows, STATIONS);
    let (plain, _) = ReportTable::new(&rows, STATIONS);
    let limits = CheckLimits::default();
    let mut screened = || {
        let mut screens = vec![StationScreen::default(); STATIONS];
        pool.install(|| screen(&mut table, &mut screens, &[], Some(&limits)));
        table.flag(table.len() / 2) == Flag::Pass
    };
    let changes = || {
        let mut largest: f64 = 0.0;
        for s in 0..STATIONS {
            for pair in plain.winds()[plain.of_station(s)].windows(2) {
                let (u, v) = (pair[1].u - pair[0].u, pair[1].v - pair[0].v);
                largest = largest.max(u.abs()).max(v.abs());
            }
        }
        largest
    };
    let read = || pool.install(|| read_reports(&sources, &network).rows.len());
    let (seconds, _, to_changes) = common::against(&mut screened, changes);
    let (_, _, to_reading) = common::against(&mut screened, read);
    println!(
        "screening: {:.1} ns for all tests of a report, {to_reading:.2} of the time of reading it, {to_changes:.0} times a \
         plain loop over the changes of u and v",
        seconds / plain.len() as f64 * 1e9
    );
}
