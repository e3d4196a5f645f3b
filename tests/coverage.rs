//! Do the intervals hold what they claim? Winds that are known everywhere, estimated as the program does it.
#![allow(
    clippy::unwrap_used,
    clippy::panic,
    clippy::print_stdout,
    reason = "tests may panic and print"
)]

mod common;

use common::turbulence::{Class, Layout, Simulation};
use gyremesh::align::WindBlock;
use gyremesh::check::Flag;
use gyremesh::integral::{Sampling, complete_errors, estimate};
use gyremesh::structure::{BlockSums, NetworkGeometry, StructureSettings, StructureWindow};

/// Hours of one realisation; values of the second half are counted, when the window holds twelve hours or more.
const HOURS: usize = 24;

/// How many values lie within the intervals.
#[derive(Debug, Default, Clone, Copy)]
struct Coverage {
    values: f64,
    in_68: f64,
    in_95: f64,
    squares: f64,
}

impl Coverage {
    fn add(&mut self, error: f64, se: f64) {
        let z = (error / se).abs();
        self.values += 1.0;
        // Two-sided 68 % and 95 % of the normal distribution.
        self.in_68 += f64::from(u8::from(z < 0.994_458));
        self.in_95 += f64::from(u8::from(z < 1.959_964));
        self.squares += z * z;
    }

    fn shares(&self) -> [f64; 3] {
        [self.in_68, self.in_95, self.squares].map(|c| c / self.values)
    }

    fn holds(&self) -> bool {
        let [c68, c95, _] = self.shares();
        (0.65..=0.71).contains(&c68) && (0.93..=0.97).contains(&c95)
    }
}

/// Vorticity and divergence.
fn coverage(class: Class, realisations: u64, trace: bool) -> [Coverage; 2] {
    let mut all = [Coverage::default(); 2];
    for seed in 0..realisations {
        let simulation = Simulation::new(class, seed);
        let (winds, truth) = simulation.noisy(HOURS, 1000 + seed);
        count(&simulation, &winds, &truth, &mut all, trace);
    }
    all
}

fn count(
    simulation: &Simulation,
    winds: &WindBlock,
    truth: &[Vec<[f64; 2]>],
    all: &mut [Coverage; 2],
    trace: bool,
) {
    let settings = StructureSettings::default();
    let mut edges: Vec<f64> = simulation
        .built
        .edges
        .edges()
        .iter()
        .map(|e| e.length)
        .collect();
    edges.sort_by(f64::total_cmp);
    let spacing = edges[edges.len() / 2];
    let geometry = NetworkGeometry::new(&simulation.network, spacing, &[]);
    let mut window = StructureWindow::new(&geometry, settings);
    let sums = BlockSums::of(&geometry, &settings, 3600.0, None, winds);
    let models = window.advance(&geometry, &sums, &winds.times);
    if trace {
        println!("{:?} {spacing}", models.last().unwrap());
    }
    let polygons = &simulation.built.polygons;
    let sampling = Sampling::new(
        polygons,
        &simulation.built.edges,
        &common::positions(&simulation.network),
        geometry.spacing,
    );
    let mut block = estimate(polygons, winds);
    complete_errors(polygons, &sampling, winds, &models, &mut block);
    let n = winds.times.len();
    for p in 0..polygons.len() {
        for t in n / 2..n {
            let cell = p * n + t;
            if block.flag[cell] < Flag::Fail {
                let [z, d] = truth[t][p];
                all[0].add(block.vorticity[cell] - z, block.vorticity_se[cell]);
                all[1].add(block.divergence[cell] - d, block.divergence_se[cell]);
            }
        }
    }
}

fn line(class: &Class, [z, d]: &[Coverage; 2]) -> String {
    let percent = |c: &Coverage| {
        let [a, b, s] = c.shares();
        format!("{:5.1} {:5.1} {s:5.2}", 100.0 * a, 100.0 * b)
    };
    format!(
        "{:4.2} {:3.1} {:3.1} {:5.0} {:9} {:3.1} {:3.1} {:4.0} | {} | {} {}",
        class.slope,
        class.divergent,
        class.rms,
        class.spacing / 1e3,
        format!("{:?}", class.layout),
        class.noise,
        class.dropouts,
        class.outer,
        percent(z),
        percent(d),
        if z.holds() && d.holds() { "" } else { "FAILS" }
    )
}

const SLOPES: [f64; 3] = [5.0 / 3.0, 2.0, 3.0];
const LAYOUTS: [Layout; 3] = [Layout::Regular, Layout::Jittered, Layout::Clustered];

/// All classes of spectrum, divergent share, strength, spacing, layout, sensor noise and dropouts. Values of one class:
/// 8 realisations × 12 hours × some 70 triangles of 49 stations; the errors of 49 stations and 130 sides are
/// independent, so the 70 triangles are worth no less than 30: 2,900 independent values.
#[test]
#[ignore = "takes a minute when optimised, half an hour when not; run by .ci/run"]
fn every_class() {
    let mut failed = Vec::new();
    for slope in SLOPES {
        for divergent in [0.0, 0.5, 1.0] {
            for layout in LAYOUTS {
                for spacing in [3e3, 30e3, 150e3] {
                    for (rms, noise) in [(1.0, 0.1), (1.0, 1.0), (5.0, 0.1), (5.0, 1.0)] {
                        for dropouts in [0.0, 0.1] {
                            let class = Class {
                                slope,
                                divergent,
                                rms,
                                spacing,
                                layout,
                                noise,
                                dropouts,
                                ..Class::default()
                            };
                            let found = coverage(class, 8, false);
                            println!("{}", line(&class, &found));
                            if !found.iter().all(Coverage::holds) {
                                failed.push(line(&class, &found));
                            }
                        }
                    }
                }
            }
        }
    }
    assert!(failed.is_empty(), "{}\n{}", failed.len(), failed.join("\n"));
}

#[test]
#[ignore = "explores"]
fn explore() {
    for slope in SLOPES {
        for (side, outer, rms, noise) in [(7, 20.0, 5.0, 0.1), (7, 20.0, 1.0, 1.0), (7, 4.0, 2.0, 0.3), (7, 2.0, 2.0, 0.3), (4, 20.0, 2.0, 0.3), (3, 20.0, 2.0, 0.3), (2, 20.0, 2.0, 0.3)] {
            for layout in [Layout::Jittered, Layout::Clustered] {
              for dropouts in [0.0, 0.1] {
                let class = Class {
                    slope,
                    layout,
                    side,
                    outer, rms, noise, dropouts,
                    ..Class::default()
                };
                let runs = 8 * 49 / (side * side) as u64;
                let found = coverage(class, runs, std::env::var("TRACE").is_ok());
                println!("side {side} {}", line(&class, &found));
            }
          }
        }
    }
}
