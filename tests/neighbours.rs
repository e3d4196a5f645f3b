//! The neighbour test on simulated winds: what it finds, what it lets pass, and whether its variances hold.
#![allow(
    clippy::unwrap_used,
    clippy::print_stdout,
    reason = "tests may panic and print"
)]

mod common;

use common::faults::{Planted, case};
use gyremesh::align::WindBlock;
use gyremesh::check::Flag;
use gyremesh::settings::NeighbourLimits;
use gyremesh::spatial::{Outlier, SpatialCheck};
use gyremesh::structure::{StructureFunction, typical_spacing};
use gyremesh::units::Wind;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const STATIONS: usize = 40;

fn judge(
    network: &gyremesh::station::Network,
    blocks: &[(WindBlock, Vec<StructureFunction>)],
) -> Vec<Outlier> {
    let spacing = typical_spacing(network).unwrap();
    let mut check = SpatialCheck::new(network, spacing, NeighbourLimits::default());
    let (winds, models): (Vec<WindBlock>, Vec<_>) = blocks.iter().cloned().unzip();
    check.judge(&winds, &models, &|_, _| None)
}

/// Squared deviations of sound stations are 2 on average; beyond 5 standard deviations (3.7e-6 of normal errors) are fewer
/// than one of 10,000.
#[test]
fn sound_winds_pass_and_their_variances_hold() {
    let (mut squares, mut count, mut beyond) = (0.0, 0.0, 0);
    let mut of_station = vec![(0.0, 0.0); STATIONS];
    for seed in 0..5 {
        let case = case(700 + seed, 1.0, 300.0, &[]);
        let blocks = case.blocks();
        let spacing = typical_spacing(&case.network).unwrap();
        let check = SpatialCheck::new(&case.network, spacing, NeighbourLimits::default());
        for (block, models) in &blocks {
            for t in (0..block.times.len()).step_by(12) {
                for (s, sums) in of_station.iter_mut().enumerate() {
                    let size = check.deviation(block, models, s, t).unwrap().size();
                    squares += size * size;
                    count += 1.0;
                    sums.0 += size * size;
                    sums.1 += 1.0;
                }
            }
        }
        beyond += judge(&case.network, &blocks).len();
    }
    let mean: f64 = squares / count;
    println!("mean square {mean:.3} of {count}, {beyond} outliers");
    assert!((1.8..2.2).contains(&mean), "{mean}");
    assert!(beyond <= 5 * 288 * STATIONS / 10_000, "{beyond}");
    // The corners' variances hold as well as the middle's (stations lie in columns of five).
    for corner in [0, 4, 35, 39] {
        let (sum, n): (f64, f64) = of_station[corner];
        assert!((1.4..2.8).contains(&(sum / n)), "{corner}: {}", sum / n);
    }
}

/// Single wild values by their size: which fail, and what else does.
#[test]
fn single_wild_values_fail_by_their_size() {
    let (mut found, mut planted) = ([0; 3], [0; 3]);
    let mut wrongly = 0;
    for seed in 0..4 {
        let mut case = case(800 + seed, 1.0, 300.0, &[]);
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        let mut wild = Vec::new();
        for t in (5..280).step_by(7) {
            let station = random.random_range(0..STATIONS);
            let size = random.random_range(3.0..15.0_f64);
            let (sin, cos) = random.random_range(0.0..360.0_f64).to_radians().sin_cos();
            let wind = &mut case.winds[station][t];
            *wind = (wind.0 + size * cos, wind.1 + size * sin);
            wild.push((station, t, size));
        }
        let blocks = case.blocks();
        let outliers = judge(&case.network, &blocks);
        let at = |o: &Outlier| {
            (
                o.deviation.station,
                o.at.0 * blocks[0].0.times.len() + o.at.1,
            )
        };
        for &(station, t, size) in &wild {
            let class = if size < 5.0 {
                0
            } else {
                usize::from(size >= 8.0) + 1
            };
            planted[class] += 1;
            let failed = |o: &&Outlier| at(o) == (station, t) && o.flag() == Flag::Fail;
            found[class] += outliers.iter().filter(failed).count();
        }
        let other = |o: &&Outlier| !wild.iter().any(|w| (w.0, w.1) == at(o));
        wrongly += outliers
            .iter()
            .filter(other)
            .filter(|o| o.flag() == Flag::Fail)
            .count();
    }
    println!("failed {found:?} of {planted:?} (3 to 5, 5 to 8, 8 to 15 m/s), {wrongly} others");
    assert!(
        found[2] * 100 >= planted[2] * 97,
        "{found:?} of {planted:?}"
    );
    assert!(wrongly <= 2, "{wrongly}");
}

/// What lasts is suspect, never failed: a vane turned by 90 degrees, knots, u and v swapped.
#[test]
fn what_lasts_is_suspect() {
    let kinds = [
        Planted::Turned(90.0),
        Planted::Scaled(1.943_844),
        Planted::Swapped,
    ];
    let planted: Vec<(usize, Planted)> = kinds
        .iter()
        .enumerate()
        .map(|(k, &p)| (7 + 12 * k, p))
        .collect();
    let (mut suspect, mut failed) = ([0; 3], 0);
    for seed in 0..2 {
        let case = case(900 + seed, 1.0, 300.0, &planted);
        let outliers = judge(&case.network, &case.blocks());
        for outlier in &outliers {
            let at = planted
                .iter()
                .position(|p| p.0 == outlier.deviation.station);
            match (at, outlier.flag()) {
                (Some(k), Flag::Suspect) => suspect[k] += 1,
                (None, Flag::Suspect) => {}
                _ => failed += 1,
            }
        }
    }
    println!("suspect {suspect:?} of {} each, {failed} failed", 2 * 288);
    // The knots show in strong winds, the swap only where u and v differ much.
    let least = [144, 20, 5];
    assert!(
        suspect.iter().zip(least).all(|(&n, least)| n >= least),
        "{suspect:?}"
    );
    // The noise of a single report can push one beyond the limit on its own.
    assert!(failed <= 10, "{failed}");
}

/// A line over which the wind jumps by 8 m/s crosses the network at 5 m/s. Its stations may be suspect while it passes; no
/// more than one report of a thousand fails.
#[test]
fn a_passing_line_is_no_fault() {
    let (mut failed, mut suspect, mut all) = (0, 0, 0);
    for seed in 0..4 {
        let mut case = case(950 + seed, 1.0, 300.0, &[]);
        let stations = case.network.stations().to_vec();
        for (station, winds) in stations.iter().zip(&mut case.winds) {
            let x = (station.position.longitude() - 8.0) * 76e3;
            for (t, wind) in winds.iter_mut().enumerate() {
                let ahead = x - (5.0 * 300.0 * t as f64 - 216e3);
                let behind = 0.5 * (1.0 - (ahead / 3e3).tanh());
                *wind = (wind.0 + 8.0 * behind, wind.1);
            }
        }
        let blocks = case.blocks();
        all += 288 * STATIONS;
        for outlier in judge(&case.network, &blocks) {
            match outlier.flag() {
                Flag::Fail => failed += 1,
                _ => suspect += 1,
            }
        }
    }
    println!("line: {failed} failed, {suspect} suspect of {all}");
    assert!(failed * 1000 <= all, "{failed} of {all}");
    assert!(suspect * 100 <= all, "{suspect} of {all}");
}

/// Winds of stations that failed are not in any polygon's estimate; the wind itself stays readable.
#[test]
fn deviation_points_from_the_prediction_to_the_report() {
    let mut case = case(990, 0.25, 300.0, &[]);
    let wind = &mut case.winds[22][40];
    *wind = (wind.0 + 10.0, wind.1);
    let blocks = case.blocks();
    let outliers = judge(&case.network, &blocks);
    let found = outliers.iter().find(|o| o.deviation.station == 22).unwrap();
    let Wind { u, v } = found.deviation.residual;
    assert!((u - 10.0).abs() < 3.0 && v.abs() < 3.0, "{found:?}");
}
