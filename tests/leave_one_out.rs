//! Each station predicted from the others by the network's own structure function: are the errors as large as said?
#![allow(
    clippy::unwrap_used,
    clippy::expect_used,
    clippy::panic,
    clippy::print_stdout,
    reason = "tests may panic and print"
)]

mod common;

use std::path::Path;

use common::turbulence::{Class, Layout, Simulation};
use gyremesh::align::{Aligner, BLOCK_TIMES, StationSensors, WindBlock};
use gyremesh::check::{StationScreen, screen};
use gyremesh::pipeline::Setup;
use gyremesh::report::{ReportTable, SpeedStep, read_reports};
use gyremesh::settings::{Overrides, SensorErrors};
use gyremesh::station::{Network, Position};
use gyremesh::structure::{
    BlockSums, NetworkGeometry, Predictor, StructureFunction, StructureSettings, StructureWindow,
    typical_spacing,
};

/// Standardised errors of the predictions.
#[derive(Debug, Default, Clone)]
struct Errors {
    count: f64,
    squares: f64,
    in_95: f64,
    by_station: Vec<(f64, f64)>,
}

impl Errors {
    fn add(&mut self, station: usize, squared: f64) {
        self.count += 1.0;
        // Two components.
        self.squares += 0.5 * squared;
        // 95 % of χ² with two degrees of freedom.
        self.in_95 += f64::from(u8::from(squared < 5.991_465));
        if self.by_station.len() <= station {
            self.by_station.resize(station + 1, (0.0, 0.0));
        }
        self.by_station[station].0 += 1.0;
        self.by_station[station].1 += 0.5 * squared;
    }

    fn variance(&self) -> f64 {
        self.squares / self.count
    }
}

/// Predicts all stations at all times of blocks in order.
fn leave_one_out(
    network: &Network,
    reports: &[f64],
    interval: f64,
    blocks: impl Iterator<Item = WindBlock>,
) -> (Errors, Vec<StructureFunction>) {
    let spacing = typical_spacing(network).unwrap();
    let settings = StructureSettings::default();
    let geometry = NetworkGeometry::new(network, spacing, reports);
    let predictor = Predictor::new(network, spacing);
    let mut window = StructureWindow::new(&geometry, settings);
    let mut previous: Option<WindBlock> = None;
    let (mut errors, mut all) = (Errors::default(), Vec::new());
    for block in blocks {
        let sums = BlockSums::of(&geometry, &settings, interval, previous.as_ref(), &block);
        let models = window.advance(&geometry, &sums, &block.times);
        for (t, model) in models.iter().enumerate() {
            for p in predictor.predict(model, &block, t) {
                errors.add(p.station, p.squared_deviation());
            }
        }
        all.extend(models);
        previous = Some(block);
    }
    (errors, all)
}

#[test]
fn simulated_winds_are_predicted_with_the_error_stated() {
    for (slope, divergent, layout) in [
        (5.0 / 3.0, 0.0, Layout::Jittered),
        (2.0, 1.0, Layout::Jittered),
        (3.0, 0.5, Layout::Clustered),
    ] {
        let mut errors = Errors::default();
        for seed in 0..4 {
            let class = Class {
                slope,
                divergent,
                layout,
                dropouts: 0.1,
                side: 5,
                ..Class::default()
            };
            let simulation = Simulation::new(class, seed);
            let (winds, _) = simulation.noisy(24, 100 + seed);
            let (found, _) =
                leave_one_out(&simulation.network, &[], 3600.0, std::iter::once(winds));
            errors.count += found.count;
            errors.squares += found.squares;
        }
        let variance = errors.variance();
        println!(
            "{slope:.2} {divergent} {layout:?}: {variance:.3} of {}",
            errors.count
        );
        assert!(
            (0.9..=1.1).contains(&variance),
            "{slope} {divergent} {layout:?} {variance}"
        );
    }
}

fn real(name: &str) -> (Errors, Network) {
    let path = Path::new(env!("CARGO_MANIFEST_DIR"))
        .join(format!("tests/data/networks/{name}/network.toml"));
    let setup = Setup::read(&path, &Overrides::default()).unwrap();
    let rows = read_reports(&setup.settings.reports, &setup.network).rows;
    let (mut table, _) = ReportTable::new(&rows, setup.network.len());
    let positions: Vec<Position> = setup
        .network
        .stations()
        .iter()
        .map(|s| s.position)
        .collect();
    let mut screens = vec![StationScreen::default(); positions.len()];
    let limits = Some(&setup.settings.check);
    screen(&mut table, &mut screens, &positions, limits);
    let stations = 0..setup.network.len();
    let count = |s: usize| {
        let reports = table.of_station(s);
        reports.filter(|&i| table.wind(i).is_some()).count() as f64
    };
    let counts: Vec<f64> = stations.clone().map(count).collect();
    let most = counts.iter().copied().fold(1.0, f64::max);
    let reports: Vec<f64> = counts.iter().map(|c| c / most).collect();
    let stated = setup.settings.sensor;
    let errors = stations.map(|s| {
        let found = screens[s].rounding();
        SensorErrors {
            speed_step: stated
                .speed_step
                .or(found.speed.map(SpeedStep::metres_per_second)),
            direction_step: stated.direction_step.or(found.direction),
            ..stated
        }
    });
    let sensors = StationSensors {
        errors: errors.collect(),
        height_factors: vec![Some(1.0); setup.network.len()],
    };
    let analysis = &setup.settings.analysis;
    let aligner = Aligner::new(&table, analysis, &sensors, i64::MIN..i64::MAX);
    let interval = setup.settings.analysis.interval.as_secs_f64();
    let blocks = aligner.grid().blocks(BLOCK_TIMES).into_iter();
    let blocks = blocks.map(|times| aligner.align(times));
    let (errors, _) = leave_one_out(&setup.network, &reports, interval, blocks);
    (errors, setup.network)
}

fn print(name: &str, errors: &Errors, network: &Network) {
    for (station, (count, squares)) in network.stations().iter().zip(&errors.by_station) {
        println!("{:30} {count:6} {:.2}", station.id, squares / count);
    }
    println!(
        "{name}: variance {:.3}, {:.1} % within 95 %, {} predictions",
        errors.variance(),
        100.0 * errors.in_95 / errors.count,
        errors.count
    );
}

/// Eight points of the compass, stations on mountains and at beaches. Both storms together are as said; the growing winds
/// of Saola alone, with a station on a mountain (Tate's Cairn) that errs 2.5 times as much as stated, are not: 1.4.
#[test]
#[ignore = "needs GYREMESH_DATA; run by .ci/run"]
fn hong_kong() {
    let mut both = Errors::default();
    for name in ["hong_kong_wipha", "hong_kong_saola"] {
        let (errors, network) = real(name);
        print(name, &errors, &network);
        both.count += errors.count;
        both.squares += errors.squares;
        assert!((0.8..=1.5).contains(&errors.variance()), "{name}");
    }
    println!("both: variance {:.3}", both.variance());
    assert!((0.8..=1.25).contains(&both.variance()));
}

#[test]
#[ignore = "needs GYREMESH_DATA; run by .ci/run"]
fn singapore() {
    let (errors, network) = real("singapore");
    print("singapore", &errors, &network);
    assert!((0.8..=1.25).contains(&errors.variance()));
}
