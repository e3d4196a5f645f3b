//! Faults of sensors in simulated networks: are they found, and nothing else?
#![allow(
    clippy::unwrap_used,
    clippy::expect_used,
    clippy::panic,
    clippy::print_stdout,
    reason = "tests may panic and print"
)]

mod common;

use common::faults::{Planted, case};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

/// Errors of sound stations and of planted gains over many cases.
#[derive(Default)]
struct Score {
    turn: Vec<f64>,
    log: Vec<f64>,
    held: [usize; 2],
    count: usize,
    planted_turn: Vec<f64>,
    planted_log: Vec<f64>,
    planted: usize,
    found: usize,
    sound: usize,
    falsely: usize,
}

fn sd(values: &[f64]) -> (f64, f64) {
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    let variance = values.iter().map(|v| (v - mean) * (v - mean)).sum::<f64>() / n;
    (mean, variance.sqrt())
}

impl Score {
    fn add(&mut self, seed: u64, days: f64) {
        let mut random = ChaCha8Rng::seed_from_u64(10_000 + seed);
        let mut places: Vec<usize> = (0..40).collect();
        let mut take = || places.swap_remove(random.random_range(0..places.len()));
        let sign = |random: &mut ChaCha8Rng| if random.random_bool(0.5) { 1.0 } else { -1.0 };
        let at = [take(), take(), take(), take()];
        let turn = |random: &mut ChaCha8Rng| sign(random) * random.random_range(8.0..40.0);
        let scale = |random: &mut ChaCha8Rng| {
            let by: f64 = random.random_range(0.15..0.5);
            1.0 + sign(random) * by
        };
        let planted = [
            (at[0], Planted::Turned(turn(&mut random))),
            (at[1], Planted::Turned(sign(&mut random) * 8.0)),
            (at[2], Planted::Scaled(scale(&mut random))),
            (at[3], Planted::Scaled(1.0 + sign(&mut random) * 0.15)),
        ];
        let found = case(seed, days, 300.0, &planted).calibrate();
        for (s, station) in found.stations.iter().enumerate() {
            let fault = planted.iter().find(|p| p.0 == s).map(|p| p.1);
            let (turn, factor) = match fault {
                Some(Planted::Turned(d)) => (d, 1.0),
                Some(Planted::Scaled(f)) => (0.0, f),
                _ => (0.0, 1.0),
            };
            let gain = station.gain.unwrap();
            let off = gain.turn - turn;
            let log = (gain.factor / factor).ln();
            self.count += 1;
            self.held[0] += usize::from(off.abs() <= gain.half_95 * gain.turn_se);
            self.held[1] += usize::from(log.abs() <= gain.half_95 * gain.factor_se / gain.factor);
            self.turn.push(off);
            self.log.push(log);
            if std::env::var("ALL").is_ok() {
                println!(
                    "{s:2} {fault:?} {:6.2} ± {:.2} {:.3} ± {:.3} misfit {:.2} {} times {} speed {:.1} dev {:.2} change {:?}",
                    gain.turn,
                    gain.turn_se,
                    gain.factor,
                    gain.factor_se,
                    station.misfit,
                    station.predicts,
                    station.times,
                    station.speed,
                    station.deviation,
                    station
                        .change
                        .map(|c| (c.at.to_string(), c.before.turn, c.before.factor))
                );
            }
            let causes: Vec<&str> = found
                .tickets
                .iter()
                .filter(|t| t.station == s)
                .map(|t| t.fault.name())
                .collect();
            match fault {
                None => {
                    self.sound += 1;
                    self.falsely += usize::from(!causes.is_empty());
                    if !causes.is_empty() && std::env::var("SHOW").is_ok() {
                        println!(
                            "seed {seed} station {s}: {causes:?} {gain:?} change {:?}",
                            station.change.is_some()
                        );
                    }
                }
                Some(fault) => {
                    self.planted += 1;
                    let right = match fault {
                        Planted::Turned(_) => causes.iter().any(|c| {
                            ["turned", "declination_missing", "declination_doubled"].contains(c)
                        }),
                        _ => causes.iter().any(|c| ["slow", "fast", "unit"].contains(c)),
                    };
                    self.found += usize::from(right);
                    if !right && std::env::var("SHOW").is_ok() {
                        println!(
                            "seed {seed} station {s}: {fault:?} missed: {causes:?} {gain:?} change {:?}",
                            station.change.is_some()
                        );
                    }
                    match fault {
                        Planted::Turned(d) => self.planted_turn.push(off * d.signum()),
                        _ => self.planted_log.push(log * (factor - 1.0).signum()),
                    }
                }
            }
        }
    }

    fn print(&self, name: &str) {
        let share = |a: usize, b: usize| 100.0 * a as f64 / b as f64;
        let (tm, ts) = sd(&self.turn);
        let (lm, ls) = sd(&self.log);
        let (pm, ps) = sd(&self.planted_turn);
        let (qm, qs) = sd(&self.planted_log);
        println!(
            "{name}: found {:.1} % of {}, false {:.2} % of {}; turn {tm:.2} ± {ts:.2}°, held {:.1} %; log {lm:.3} ± {ls:.3}, held {:.1} %; \
             planted turn {pm:.2} ± {ps:.2}, log {qm:.3} ± {qs:.3}",
            share(self.found, self.planted),
            self.planted,
            share(self.falsely, self.sound),
            self.sound,
            share(self.held[0], self.count),
            share(self.held[1], self.count),
        );
    }
}

#[test]
fn look() {
    let runs: u64 = std::env::var("RUNS").map_or(8, |r| r.parse().unwrap());
    let days: f64 = std::env::var("DAYS").map_or(7.0, |r| r.parse().unwrap());
    let mut score = Score::default();
    for seed in std::env::var("FROM").map_or(0, |r| r.parse().unwrap())..runs {
        score.add(seed, days);
    }
    score.print("all");
}

#[test]
fn debug() {
    let found = case(28, 7.0, 300.0, &[]).calibrate();
    for (s, st) in found.stations.iter().enumerate() {
        println!(
            "{s} {:?} speed {:.1} dev {:.2} misfit {:.2} blocks {} times {}",
            st.gain.map(|g| (g.turn, g.turn_se, g.factor, g.factor_se)),
            st.speed,
            st.deviation,
            st.misfit,
            st.blocks,
            st.times
        );
    }
}
