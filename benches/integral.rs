//! Polygon-times per second of the block kernel, beside a plain loop over times and polygons, and beside the copy of the
//! same columns.
#![allow(
    clippy::print_stdout,
    clippy::unwrap_used,
    reason = "a bench prints and may panic"
)]

mod common;

use gyremesh::align::WindBlock;
use gyremesh::check::Flag;
use gyremesh::integral::estimate;
use gyremesh::polygon::{StationPolygon, build_polygons};
use gyremesh::settings::{PolygonChoice, PolygonLimits};
use gyremesh::station::{Network, Position, Station};
use gyremesh::time::Time;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

fn polygons(stations: usize, rng: &mut ChaCha8Rng) -> Vec<StationPolygon> {
    let stations = (0..stations).map(|k| {
        let position =
            Position::new(rng.random_range(45.0..48.0), rng.random_range(-31.0..-27.0)).unwrap();
        Station::new(format!("S{k:05}"), position)
    });
    let choice = PolygonChoice {
        triangles: true,
        rings: vec![],
        regions: vec![],
    };
    let limits = PolygonLimits {
        smallest_angle: 0.0,
        ..PolygonLimits::default()
    };
    build_polygons(&Network::new(stations.collect()), &choice, &limits)
        .unwrap()
        .polygons
}

/// What one would write first: for each time and polygon, sum over its stations.
fn plain(polygons: &[StationPolygon], winds: &WindBlock) -> Vec<[f64; 4]> {
    let n = winds.times.len();
    let mut out = Vec::with_capacity(n * polygons.len());
    for t in 0..n {
        for polygon in polygons {
            let mut sum = [0.0; 4];
            let mut missing = false;
            for (&s, &[x, y]) in polygon.row.stations.iter().zip(&polygon.row.weights) {
                let c = s * n + t;
                let (u, v) = (winds.u[c], winds.v[c]);
                let (uu, uv, vv) = (winds.var_u[c], winds.cov_uv[c], winds.var_v[c]);
                sum[0] += x * u + y * v;
                sum[1] += y * u - x * v;
                sum[2] += x * x * uu + 2.0 * x * y * uv + y * y * vv;
                sum[3] += y * y * uu - 2.0 * x * y * uv + x * x * vv;
                missing |= winds.flag[c] == Flag::Missing;
            }
            sum[2] = sum[2].sqrt();
            sum[3] = sum[3].sqrt();
            out.push(if missing { [0.0; 4] } else { sum });
        }
    }
    out
}

fn main() {
    let mut rng = ChaCha8Rng::seed_from_u64(1);
    println!("integral: kernel of the estimate with instrument errors");
    for (stations, times) in [(40, 256), (120, 256), (2000, 64)] {
        let polygons = polygons(stations, &mut rng);
        let mut winds = WindBlock::empty((0..times).map(Time::from_micros).collect(), stations);
        for c in 0..winds.u.len() {
            winds.u[c] = rng.random_range(-10.0..10.0);
            winds.v[c] = rng.random_range(-10.0..10.0);
            (winds.var_u[c], winds.cov_uv[c], winds.var_v[c]) = (0.1, 0.01, 0.2);
            winds.flag[c] = if rng.random_bool(0.01) {
                Flag::Missing
            } else {
                Flag::Pass
            };
        }
        let (kernel, _, ratio) =
            common::against(|| estimate(&polygons, &winds), || plain(&polygons, &winds));
        let (_, _, copy) = common::against(|| estimate(&polygons, &winds), || winds.clone());
        println!(
            "  {stations:>5} stations, {:>5} polygons, {times} times: {:>6.1} million polygon-times/s, \
             {ratio:.2} of a plain loop, {copy:.1} of the copy of the winds",
            polygons.len(),
            (polygons.len() as f64 * times as f64) / kernel / 1e6,
        );
    }
}
