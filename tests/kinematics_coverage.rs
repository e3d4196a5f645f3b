//! Do the intervals of the kinematic quantities hold? Simulated winds, against the same quantity of the true area means.
#![allow(
    clippy::needless_range_loop,
    clippy::unwrap_used,
    clippy::panic,
    clippy::print_stdout,
    reason = "tests may panic and print; polygons and times index several columns"
)]

mod common;

use std::ops::RangeInclusive;

use common::turbulence::{Class, Layout, Simulation};
use gyremesh::integral::{Sampling, complete_errors, estimate};
use gyremesh::kinematics::{Kinematics, QUANTITIES, Quantities, Quantity, State};
use gyremesh::settings::KinematicsSettings;
use gyremesh::structure::{BlockSums, NetworkGeometry, StructureSettings, StructureWindow};

/// As in `coverage.rs`: values of the second half of a day are counted.
const HOURS: usize = 24;
/// f, 1/s: that of the place, 47 N.
const PLANETARY: f64 = 1.067e-4;

/// For each quantity: values shown, within their 95 % interval, and all that there might have been.
#[derive(Debug, Default, Clone, Copy)]
struct Counts {
    shown: f64,
    held: f64,
    all: f64,
}

fn coverage(
    class: Class,
    mean: (f64, f64),
    realisations: u64,
    number: u64,
) -> [Counts; QUANTITIES] {
    let mut all = [Counts::default(); QUANTITIES];
    for k in 0..realisations {
        let seed = 17_000_000 + 1000 * number + k;
        let simulation = Simulation::new(class, seed);
        count(&simulation, 1_000_000 + seed, mean, &mut all);
    }
    all
}

fn count(simulation: &Simulation, seed: u64, mean: (f64, f64), all: &mut [Counts; QUANTITIES]) {
    let (winds, truth) = simulation.kinematics(HOURS, seed, mean);
    let settings = StructureSettings::default();
    let (polygons, edges) = (&simulation.built.polygons, &simulation.built.edges);
    let mut lengths: Vec<f64> = edges.edges().iter().map(|e| e.length).collect();
    lengths.sort_by(f64::total_cmp);
    let spacing = lengths[lengths.len() / 2];
    let geometry = NetworkGeometry::new(&simulation.network, spacing, &[]);
    let mut window = StructureWindow::new(&geometry, settings);
    let sums = BlockSums::of(&geometry, &settings, 3600.0, None, &winds);
    let models = window.advance(&geometry, &sums, &winds.times);
    let places = common::positions(&simulation.network);
    let sampling = Sampling::new(polygons, edges, &places, geometry.spacing);
    let mut block = estimate(polygons, &winds);
    complete_errors(polygons, &sampling, &winds, &models, &mut block);
    let f = vec![PLANETARY; polygons.len()];
    let settings = KinematicsSettings::default();
    let kinematics = Kinematics::new(polygons, edges, &places, &f, settings);
    let found = kinematics.of(&winds, &block, Some((&sampling, &models)));
    for p in 0..polygons.len() {
        for t in HOURS / 2..HOURS {
            let cell = &found.cells[p * HOURS + t];
            if cell.get(Quantity::MeanU).is_none() {
                continue;
            }
            let exact = State::new(&truth[t][p], &[[0.0; 3]; 6]);
            let truth = Quantities::of(&exact, PLANETARY, 47.0, 0.0);
            for (quantity, counts) in Quantity::ALL.into_iter().zip(all.iter_mut()) {
                counts.all += 1.0;
                let Some((value, error)) = cell.get(quantity) else {
                    continue;
                };
                let expected = match (quantity, truth.get(quantity)) {
                    (_, Some((expected, _))) => expected,
                    // Where no strain lasts, its rate is 0.
                    (Quantity::AsymptoticContractionRate, None) => -0.5 * exact.values[3],
                    (_, None) => continue,
                };
                let off = match quantity {
                    Quantity::MeanDirection => (value - expected + 180.0).rem_euclid(360.0) - 180.0,
                    Quantity::DilatationAxis => (value - expected + 90.0).rem_euclid(180.0) - 90.0,
                    _ => value - expected,
                };
                counts.shown += 1.0;
                counts.held += f64::from(u8::from(off.abs() < 1.959_964 * error));
            }
        }
    }
}

/// What is asked of a quantity: 93 to 97 %. Wider, as measured:
///
/// - Sensor errors as large as the variations of the wind itself: 92 to 98.5 %.
/// - Total deformation cannot be negative: 90 to 98.5 %.
/// - Okubo-Weiss and the stretching of vorticity are products. Where both factors are about as large as their errors no
///   symmetric interval holds evenly: 90 to 100 %.
fn bounds(quantity: Quantity, class: &Class) -> RangeInclusive<f64> {
    match quantity {
        Quantity::TotalDeformation => 0.90..=0.985,
        Quantity::OkuboWeiss | Quantity::VorticityStretching => 0.90..=1.0,
        _ if class.noise >= class.rms => 0.92..=0.985,
        _ => 0.93..=0.97,
    }
}

fn report(class: &Class, over: (f64, f64), counts: &[Counts; QUANTITIES]) -> Vec<String> {
    let name = format!(
        "k^-{:.2}, divergent {}, {:?}, {} m/s + {over:?}, {} km, noise {}",
        class.slope,
        class.divergent,
        class.layout,
        class.rms,
        class.spacing / 1e3,
        class.noise
    );
    let mut failed = Vec::new();
    println!("{name}");
    for (quantity, c) in Quantity::ALL.into_iter().zip(counts) {
        let share = c.held / c.shown;
        let line = format!(
            "{:28} {:5.1} % of {:5.1} % shown",
            quantity.name(),
            100.0 * share,
            100.0 * c.shown / c.all
        );
        println!("  {line}");
        // Few values say nothing.
        if c.shown > 1000.0 && !bounds(quantity, class).contains(&share) {
            failed.push(format!("{name}: {line}"));
        }
    }
    failed
}

const OVER: (f64, f64) = (6.0, -3.0);

#[test]
fn some_classes() {
    let mut failed = Vec::new();
    for (number, (slope, divergent, layout, noise)) in [
        (5.0 / 3.0, 0.5, Layout::Jittered, 0.3),
        (2.0, 0.0, Layout::Regular, 0.1),
        (3.0, 1.0, Layout::Clustered, 0.3),
    ]
    .into_iter()
    .enumerate()
    {
        let class = Class {
            slope,
            divergent,
            layout,
            noise,
            ..Class::default()
        };
        let found = coverage(class, OVER, 6, 900 + number as u64);
        failed.extend(report(&class, OVER, &found));
    }
    assert!(failed.is_empty(), "{}", failed.join("\n"));
}

#[test]
#[ignore = "takes some minutes when optimised; run by .ci/run"]
fn every_eleventh_class() {
    of_classes(11);
}

#[test]
#[ignore = "takes a quarter of an hour when optimised; every eleventh of them runs in .ci/run"]
fn all_classes() {
    of_classes(1);
}

/// One class of `every`, each with the seed that it has among all.
fn of_classes(every: u64) {
    let (mut failed, mut number) = (Vec::new(), 0);
    let mut total = [Counts::default(); QUANTITIES];
    for slope in [5.0 / 3.0, 2.0, 3.0] {
        for divergent in [0.0, 0.5, 1.0] {
            for layout in [Layout::Regular, Layout::Jittered, Layout::Clustered] {
                for spacing in [3e3, 30e3, 150e3] {
                    for (rms, noise) in [(1.0, 0.1), (1.0, 1.0), (5.0, 0.1), (5.0, 1.0)] {
                        for over in [(0.0, 0.0), OVER] {
                            let class = Class {
                                slope,
                                divergent,
                                rms,
                                spacing,
                                layout,
                                noise,
                                ..Class::default()
                            };
                            let seed = number;
                            number += 1;
                            if seed % every != 0 {
                                continue;
                            }
                            let found = coverage(class, over, 8, seed);
                            failed.extend(report(&class, over, &found));
                            for (sum, c) in total.iter_mut().zip(found) {
                                sum.shown += c.shown;
                                sum.held += c.held;
                                sum.all += c.all;
                            }
                        }
                    }
                }
            }
        }
    }
    println!("all classes");
    for (quantity, c) in Quantity::ALL.into_iter().zip(total) {
        let (share, shown) = (c.held / c.shown, c.shown / c.all);
        println!("  {:28} {share:.4} of {shown:.4}", quantity.name());
    }
    assert!(
        failed.is_empty(),
        "{} of {number}\n{}",
        failed.len(),
        failed.join("\n")
    );
}
