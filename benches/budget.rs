//! What the error budget adds: the structure function and the parts of the errors, beside the kernel of the estimate; and
//! the milliseconds of one live interval of 10,000 stations.
#![allow(
    clippy::print_stdout,
    clippy::unwrap_used,
    reason = "a bench prints and may panic"
)]

mod common;

use common::{against, seconds};
use gyremesh::align::WindBlock;
use gyremesh::check::Flag;
use gyremesh::integral::{Sampling, complete_errors, estimate};
use gyremesh::polygon::build_polygons;
use gyremesh::settings::{PolygonChoice, PolygonLimits};
use gyremesh::station::{Network, Position, Station};
use gyremesh::structure::{
    BlockSums, NetworkGeometry, StructureSettings, StructureWindow, typical_spacing,
};
use gyremesh::time::Time;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

/// 5 minutes.
const INTERVAL: i64 = 300_000_000;

fn main() {
    let mut rng = ChaCha8Rng::seed_from_u64(1);
    println!("budget: beside the kernel of the estimate, 5 minutes between times");
    for (stations, times) in [(120, 256), (10_000, 1)] {
        let span = (f64::from(stations) / 120.0).sqrt();
        let list = (0..stations).map(|k| {
            let place = (rng.random_range(0.0..3.0), rng.random_range(0.0..4.0));
            let position = Position::new(40.0 + span * place.0, -30.0 + span * place.1);
            Station::new(format!("S{k:05}"), position.unwrap())
        });
        let network = Network::new(list.collect());
        let choice = PolygonChoice {
            triangles: true,
            rings: vec![],
            regions: vec![],
        };
        let built = build_polygons(&network, &choice, &PolygonLimits::default()).unwrap();
        let n = network.len();
        let times = (0..times).map(|k| Time::from_micros(k * INTERVAL));
        let mut winds = WindBlock::empty(times.collect(), n);
        for c in 0..winds.u.len() {
            winds.u[c] = rng.random_range(-10.0..10.0);
            winds.v[c] = rng.random_range(-10.0..10.0);
            (winds.var_u[c], winds.cov_uv[c], winds.var_v[c]) = (0.1, 0.01, 0.2);
            winds.age[c] = if rng.random_bool(0.2) { 60.0 } else { 0.0 };
            winds.flag[c] = Flag::Pass;
        }
        let settings = StructureSettings::default();
        let spacing = typical_spacing(&network).unwrap();
        let mut geometry = None;
        let prepared = seconds(|| geometry = Some(NetworkGeometry::new(&network, spacing, &[])));
        let geometry = geometry.unwrap();
        let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
        let sampling = Sampling::new(&built.polygons, &built.edges, &positions, spacing);
        let sums = || BlockSums::of(&geometry, &settings, 300.0, None, &winds);
        let of_block = sums();
        let models = || {
            StructureWindow::new(&geometry, settings).advance(&geometry, &of_block, &winds.times)
        };
        let of_times = models();
        let exponent = of_times[0].exponent;
        let constants = seconds(|| sampling.constants(exponent).len());
        for model in &of_times {
            let _ = sampling.constants(model.exponent);
        }
        let kernel = || estimate(&built.polygons, &winds);
        let complete = || {
            let mut block = kernel();
            complete_errors(&built.polygons, &sampling, &winds, &of_times, &mut block)
        };
        let (a, _, sums) = against(sums, kernel);
        let (b, _, fits) = against(models, kernel);
        let (c, d, errors) = against(complete, kernel);
        println!(
            "  {n:>6} stations, {:>6} polygons, {:>3} times: sums {sums:.2}, fits {fits:.2}, errors {:.2} of the kernel; \
             together {:.1} ms more than its {:.1} ms",
            built.polygons.len(),
            winds.times.len(),
            errors - 1.0,
            1e3 * (a + b + c - d),
            1e3 * d,
        );
        let (pairs, planes) = geometry.sizes();
        println!(
            "         once: {pairs} pairs and {planes} planes {:.0} ms, constants of one exponent {:.0} ms",
            1e3 * prepared,
            1e3 * constants
        );
    }
}
