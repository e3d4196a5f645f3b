//! One interval of a large network, from reports in memory to estimates with errors; the triangulation of a changed set
//! of stations; how both grow.
#![allow(
    clippy::print_stdout,
    clippy::unwrap_used,
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    clippy::cast_possible_wrap,
    reason = "a bench prints and may panic; its numbers are small"
)]

#[path = "common/archive.rs"]
mod archive;
mod common;

use std::time::Duration;

use archive::Archive;
use gyremesh::align::{AlignedWind, Aligner, Covariance, StationSensors, WindBlock, block_times};
use gyremesh::check::{Flag, StationScreen, screen};
use gyremesh::integral::estimate;
use gyremesh::polygon::{build_polygons, triangulate};
use gyremesh::report::{ReportTable, Rows};
use gyremesh::settings::{
    AlignMethod, Analysis, CheckLimits, NeighbourLimits, PolygonChoice, PolygonLimits, SensorErrors,
};
use gyremesh::spatial::SpatialCheck;
use gyremesh::station::{Network, Position, Station};
use gyremesh::structure::{StructureSettings, typical_spacing};
use gyremesh::time::Time;
use gyremesh::units::{FromDirection, Wind};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const RUNS: usize = 7;

fn network(stations: usize, rng: &mut ChaCha8Rng) -> Network {
    let archive = Archive {
        stations,
        days: 1,
        minutes: 5,
    };
    let places = archive.places(rng).into_iter().enumerate();
    let stations = places.map(|(k, (latitude, longitude))| {
        Station::new(
            format!("ST{k:06}"),
            Position::new(latitude, longitude).unwrap(),
        )
    });
    Network::new(stations.collect())
}

fn milliseconds<T>(mut work: impl FnMut() -> T) -> f64 {
    let runs = (0..RUNS).map(|_| common::seconds(&mut work) * 1e3);
    common::median(runs.collect())
}

/// The exponent of growth between two sizes.
fn exponent(before: Option<(usize, f64)>, now: (usize, f64)) -> String {
    before.map_or_else(String::new, |(n, took)| {
        let exponent = (now.1 / took).ln() / (now.0 as f64 / n as f64).ln();
        format!("{exponent:.2}")
    })
}

/// The neighbour test of one time: weights known, and with all weights found anew, as for a new class of the model.
fn neighbours(network: &Network, rng: &mut ChaCha8Rng) {
    let stations = network.len();
    let Some(spacing) = typical_spacing(network).filter(|_| stations >= 10) else {
        return;
    };
    let mut block = WindBlock::empty(vec![Time::from_micros(0)], stations);
    for station in 0..stations {
        let wind = Wind {
            u: 6.0 + rng.random_range(-1.0..1.0),
            v: rng.random_range(-1.0..1.0),
        };
        let value = AlignedWind {
            wind,
            covariance: Covariance {
                uu: 0.25,
                uv: 0.0,
                vv: 0.25,
            },
            flag: Flag::Pass,
            age: 0.0,
        };
        block.set(station, 0, &value);
    }
    let winds = [block];
    let models = [vec![StructureSettings::default().prior(spacing)]];
    let mut check = SpatialCheck::new(network, spacing, NeighbourLimits::default());
    let fresh = check.clone();
    let known = milliseconds(|| check.judge(&winds, &models, &|_, _| None).len());
    let anew = milliseconds(|| fresh.clone().judge(&winds, &models, &|_, _| None).len());
    let chosen = milliseconds(|| SpatialCheck::new(network, spacing, NeighbourLimits::default()));
    println!(
        "  {stations:>8} neighbour test: {known:.2} ms, with new weights {anew:.1} ms; neighbours chosen in {chosen:.1} ms"
    );
}

fn main() {
    let mut rng = ChaCha8Rng::seed_from_u64(6);
    let analysis = Analysis {
        interval: Duration::from_mins(5),
        method: AlignMethod::Nearest {
            tolerance: Duration::from_secs(150),
        },
        ..Analysis::default()
    };
    println!("live: one interval, reports in memory to estimates with instrument errors");
    println!(
        "  stations polygons interval ms exponent  triangulation ms exponent  polygons ms exponent"
    );
    let (mut last_live, mut last_triangles, mut last_build) = (None, None, None);
    for stations in [10, 100, 1000, 10_000, 100_000] {
        let network = network(stations, &mut rng);
        let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
        let all: Vec<usize> = (0..stations).collect();
        let triangles = milliseconds(|| triangulate(&positions, &all).unwrap());
        let choice = PolygonChoice {
            triangles: true,
            rings: vec![],
            regions: vec![],
        };
        let limits = PolygonLimits::default();
        let build = milliseconds(|| build_polygons(&network, &choice, &limits).unwrap());
        let polygons = build_polygons(&network, &choice, &limits).unwrap().polygons;
        let mut rows = Rows::with_capacity(stations);
        let time = Time::from_micros(1_924_992_000_000_000);
        for station in 0..stations as u32 {
            let direction = FromDirection::new(rng.random_range(0.0..360.0)).unwrap();
            rows.push_wind(
                station,
                time,
                rng.random_range(0.0..20.0),
                direction,
                (0, 1),
            );
        }
        let sensors = StationSensors {
            errors: vec![SensorErrors::default(); stations],
            height_factors: vec![Some(1.0); stations],
        };
        let parts = [rows];
        let limits = CheckLimits::default();
        let mut screens = vec![StationScreen::default(); stations];
        let live = milliseconds(|| {
            let (mut table, _) = ReportTable::new(&parts, stations);
            screen(&mut table, &mut screens, &[], Some(&limits));
            let aligner = Aligner::new(&table, &analysis, &sensors, i64::MIN..i64::MAX);
            let mut blocks = aligner.grid().blocks(block_times(stations));
            let winds = aligner.align(blocks.remove(0));
            estimate(&polygons, &winds)
        });
        println!(
            "  {stations:>8} {:>8} {live:>11.3} {:>8} {triangles:>17.2} {:>8} {build:>12.2} {:>8}",
            polygons.len(),
            exponent(last_live, (stations, live)),
            exponent(last_triangles, (stations, triangles)),
            exponent(last_build, (stations, build)),
        );
        neighbours(&network, &mut rng);
        last_live = Some((stations, live));
        last_triangles = Some((stations, triangles));
        last_build = Some((stations, build));
    }
}
