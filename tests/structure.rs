//! The structure function on winds of known structure, and where there is next to nothing to know.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use common::network;
use common::turbulence::{Class, Layout, Simulation};
use gyremesh::align::{Covariance, WindBlock};
use gyremesh::check::Flag;
use gyremesh::station::Network;
use gyremesh::structure::{
    BlockSums, Exponent, NetworkGeometry, StructureFunction, StructureSettings, StructureWindow,
    typical_spacing,
};
use gyremesh::time::Time;
use gyremesh::units::Wind;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

fn last(network: &Network, interval: f64, winds: &WindBlock) -> StructureFunction {
    let spacing = typical_spacing(network).unwrap_or(1.0);
    let settings = StructureSettings::default();
    let geometry = NetworkGeometry::new(network, spacing, &[]);
    let sums = BlockSums::of(&geometry, &settings, interval, None, winds);
    let mut window = StructureWindow::new(&geometry, settings);
    let models = window.advance(&geometry, &sums, &winds.times);
    assert_eq!(models.len(), winds.times.len());
    assert!(models.iter().all(sound), "{models:?}");
    *window.current()
}

fn sound(m: &StructureFunction) -> bool {
    let bound = (1.0 + m.exponent.value()) * (1.0 + 1e-9);
    let ratio = m.transverse / m.longitudinal;
    m.longitudinal > 0.0
        && m.longitudinal.is_finite()
        && (1.0 / bound..=bound).contains(&ratio)
        && m.site_variance >= 0.0
        && m.exponent <= Exponent::LARGEST_FITTED
        && m.temporal.amplitude > 0.0
        && m.temporal.amplitude.is_finite()
        && (0.0..=1.0).contains(&m.prior_share)
}

fn simulated(class: Class, seed: u64) -> StructureFunction {
    let simulation = Simulation::new(class, seed);
    let (winds, _) = simulation.noisy(24, seed + 1);
    last(&simulation.network, 3600.0, &winds)
}

/// k^(−5/3) has p = 2/3; winds without divergence have `c_T` = (1 + p) `c_L`, winds without vorticity the opposite.
#[test]
fn exponent_and_ratio_of_turbulence() {
    for (divergent, ratio) in [(0.0, 5.0 / 3.0), (1.0, 0.6)] {
        for (slope, low, high) in [(5.0 / 3.0, 0.5, 0.9), (2.0, 0.8, 1.3), (3.0, 1.5, 2.0)] {
            let class = Class {
                slope,
                divergent,
                ..Class::default()
            };
            let found = simulated(class, 11);
            let p = found.exponent.value();
            assert!((low..high).contains(&p), "{slope} {p}");
            if slope < 1.9 {
                let r = found.transverse / found.longitudinal;
                assert!((r / ratio - 1.0).abs() < 0.2, "{divergent} {r}");
            }
        }
    }
}

/// Errors that no one stated, each station's own, 4 m²/s²: the site variance, as far as it cannot be told from a wind that
/// is very rough at small distances (which comes to much the same for an area mean).
#[test]
fn what_stations_add_by_themselves_is_found() {
    let class = Class {
        layout: Layout::Clustered,
        noise: 2.0,
        rms: 2.0,
        ..Class::default()
    };
    let simulation = Simulation::new(class, 21);
    let (mut winds, _) = simulation.noisy(24, 22);
    let stated = last(&simulation.network, 3600.0, &winds);
    assert!(stated.site_variance < 0.2, "{stated:?}");
    winds.var_u.fill(0.0);
    winds.var_v.fill(0.0);
    let found = last(&simulation.network, 3600.0, &winds);
    assert!((2.0..5.0).contains(&found.site_variance), "{found:?}");
}

/// A random walk at each station: its mean squared difference grows in proportion to time, q = 1.
#[test]
fn changes_with_time() {
    let simulation = Simulation::new(Class::default(), 31);
    let network = &simulation.network;
    let mut random = ChaCha8Rng::seed_from_u64(32);
    let times: Vec<Time> = (0..250)
        .map(|k| Time::from_micros(k * 600_000_000))
        .collect();
    let mut winds = WindBlock::empty(times, network.len());
    for s in 0..network.len() {
        let mut wind = Wind { u: 5.0, v: 1.0 };
        for t in 0..winds.times.len() {
            let step = |random: &mut ChaCha8Rng| -> f64 {
                let step: f64 = StandardNormal.sample(random);
                0.5 * step
            };
            wind.u += step(&mut random);
            wind.v += step(&mut random);
            common::set(&mut winds, s, t, wind, Covariance::default(), Flag::Pass);
        }
    }
    let found = last(network, 600.0, &winds).temporal;
    assert!((found.exponent.value() - 1.0).abs() < 0.07, "{found:?}");
    assert!((found.at(600.0) / 0.25 - 1.0).abs() < 0.1, "{found:?}");
    assert!(found.at(0.0).abs() < 1e-30);
}

fn one_time(network: &Network, winds: &[(f64, f64)]) -> WindBlock {
    let mut block = WindBlock::empty(vec![Time::from_micros(0)], network.len());
    for (s, &(u, v)) in winds.iter().enumerate() {
        common::set(
            &mut block,
            s,
            0,
            Wind { u, v },
            Covariance::default(),
            Flag::Pass,
        );
    }
    block
}

#[test]
fn three_stations_and_one_time_are_mostly_prior() {
    let network = network(&[(46.0, 7.0), (46.0, 7.4), (46.3, 7.2)]);
    let found = last(
        &network,
        600.0,
        &one_time(&network, &[(3.0, 1.0), (4.0, 2.0), (2.0, 2.5)]),
    );
    assert!(found.prior_share > 0.79 && found.exponent_prior_share > 0.79);
    assert!((found.exponent.value() - 2.0 / 3.0).abs() < 0.2);
    let spacing = typical_spacing(&network).unwrap();
    let prior = StructureSettings::default().prior(spacing);
    let change = found.longitudinal / prior.longitudinal;
    assert!((0.3..3.0).contains(&change), "{change}");
    assert_eq!(last(&network, 600.0, &one_time(&network, &[])), prior);
}

/// No number of stations, places or winds makes it fail.
#[test]
fn odd_networks_and_winds() {
    let places = [
        (46.0, 7.0),
        (46.0, 7.0),
        (46.1, 7.0),
        (46.2, 7.0),
        (-89.9, 0.0),
        (46.0, 179.99),
    ];
    for n in 1..=places.len() {
        let network = network(&places[..n]);
        for wind in [(0.0, 0.0), (1e-300, 0.0), (1e9, -1e9), (3.0, 4.0)] {
            let winds = vec![wind; n];
            last(&network, 600.0, &one_time(&network, &winds));
            let mut winds = winds;
            winds[0] = (-wind.0, 1.0);
            last(&network, 600.0, &one_time(&network, &winds));
        }
    }
    assert_eq!(typical_spacing(&network(&[(46.0, 7.0)])), None);
}
