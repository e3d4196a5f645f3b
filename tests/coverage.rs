//! Do the intervals hold what they claim? Winds that are known everywhere, estimated as the program does it.
#![allow(
    clippy::needless_range_loop,
    clippy::unwrap_used,
    clippy::panic,
    clippy::print_stdout,
    reason = "tests may panic and print; polygons and times index several columns"
)]

mod common;

use common::turbulence::{Class, Layout, Simulation};
use gyremesh::align::{WindBlock, instrument_covariance};
use gyremesh::check::Flag;
use gyremesh::integral::{Sampling, complete_errors, estimate};
use gyremesh::settings::SensorErrors;
use gyremesh::structure::{BlockSums, NetworkGeometry, StructureSettings, StructureWindow};
use gyremesh::units::Wind;

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

/// Coverage of vorticity and divergence. Each class has fields of its own: `number` sets the random numbers.
fn coverage(class: Class, realisations: u64, number: u64) -> [Coverage; 2] {
    let mut all = [Coverage::default(); 2];
    for k in 0..realisations {
        // Not the seeds with which the constants of the method were chosen.
        let seed = 7_000_000 + 1000 * number + k;
        let simulation = Simulation::new(class, seed);
        let (winds, truth) = simulation.noisy(HOURS, 1_000_000 + seed);
        count(&simulation, &winds, &truth, &mut all, HOURS / 2..HOURS);
    }
    all
}

fn count(
    simulation: &Simulation,
    winds: &WindBlock,
    truth: &[Vec<[f64; 2]>],
    all: &mut [Coverage; 2],
    hours: std::ops::Range<usize>,
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
        for t in hours.clone() {
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

/// A few classes of [`all_classes`].
#[test]
fn some_classes() {
    for (number, (slope, divergent, layout, noise, dropouts)) in [
        (5.0 / 3.0, 0.0, Layout::Regular, 0.1, 0.0),
        (5.0 / 3.0, 0.5, Layout::Clustered, 1.0, 0.0),
        (2.0, 1.0, Layout::Jittered, 0.3, 0.1),
        (3.0, 0.5, Layout::Jittered, 0.3, 0.0),
    ]
    .into_iter()
    .enumerate()
    {
        let class = Class {
            slope,
            divergent,
            layout,
            noise,
            dropouts,
            ..Class::default()
        };
        let found = coverage(class, 6, 900 + number as u64);
        println!("{}", line(&class, &found));
        assert!(
            found.iter().all(Coverage::holds),
            "{}",
            line(&class, &found)
        );
    }
}

/// All classes of spectrum, divergent share, strength, spacing, layout, sensor noise and dropouts. Values of one class:
/// 16 realisations × 12 hours × some 70 triangles of 49 stations; the errors of 49 stations and 130 sides are
/// independent, so the 70 triangles are worth no less than 30: 5,800 independent values, from which a share of 68 % is
/// known to 0.6 %. k^(−3) on a regular grid with dropouts is let through up to
/// 72 %: two of these 72 classes hold 71.1 and 71.2 %.
#[test]
#[ignore = "takes three minutes when optimised, an hour when not; every fifth of them runs in .ci/run"]
fn all_classes() {
    of_classes(1);
}

#[test]
#[ignore = "takes a minute when optimised; run by .ci/run"]
fn every_fifth_class() {
    of_classes(5);
}

/// One class of `every`, each with the seed that it has among all.
fn of_classes(every: u64) {
    let (mut failed, mut number) = (Vec::new(), 0);
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
                            let seed = number;
                            number += 1;
                            if seed % every != 0 {
                                continue;
                            }
                            let mut found = coverage(class, 16, seed);
                            println!("{}", line(&class, &found));
                            // 16 realisations have 16 amplitudes: where they do not hold, three times as many others
                            // decide alone.
                            if !found.iter().all(Coverage::holds) {
                                found = coverage(class, 48, 10_000 + number);
                                println!("{} again", line(&class, &found));
                            }
                            if !found.iter().all(Coverage::holds) {
                                failed.push(line(&class, &found));
                            }
                        }
                    }
                }
            }
        }
    }
    let report = failed.join("\n");
    assert!(failed.is_empty(), "{} of {number}\n{report}", failed.len());
}

/// Where the method is known to be weak, with bounds on the mean squared standardised error (1 if it were right):
///
/// - the longest waves are 4 or 2 spacings long: no pair and no plane is small against them, so the smooth wind between
///   the stations looks rough (4) or what the stations miss is larger than any law of theirs says (2);
/// - a steep spectrum over 16 stations or fewer: the prior exponent of 2/3 still counts;
/// - the first hours after a start, and winds that grow fourfold in a day: the amplitude lags by its memory.
#[test]
#[ignore = "takes a minute when optimised; run by .ci/run"]
fn weak_classes() {
    let base = Class::default();
    let mut outside = Vec::new();
    let mut number = 2000;
    for slope in SLOPES {
        for (name, class, bounds) in [
            (
                "waves of 4 spacings",
                Class { outer: 4.0, ..base },
                0.5..1.1,
            ),
            (
                "waves of 2 spacings",
                Class { outer: 2.0, ..base },
                0.9..1.4,
            ),
            ("16 stations", Class { side: 4, ..base }, 0.75..1.1),
            ("9 stations", Class { side: 3, ..base }, 0.65..1.15),
            ("4 stations", Class { side: 2, ..base }, 0.65..1.2),
            (
                "9 clustered",
                Class {
                    side: 3,
                    layout: Layout::Clustered,
                    ..base
                },
                0.75..1.15,
            ),
            (
                "growing winds",
                Class {
                    growth: 4.0,
                    ..base
                },
                0.85..1.2,
            ),
        ] {
            let class = Class { slope, ..class };
            let runs = 6 * 49 / (class.side * class.side) as u64;
            let found = coverage(class, runs, number);
            number += 1;
            println!("{name:20} {}", line(&class, &found));
            for c in found {
                if !bounds.contains(&c.shares()[2]) {
                    outside.push(format!("{name} {}", line(&class, &found)));
                }
            }
        }
        for (hours, bounds) in [(0..1, 0.7..1.3), (1..4, 0.8..1.2)] {
            let class = Class { slope, ..base };
            let mut found = [Coverage::default(); 2];
            for seed in 0..20 {
                let simulation = Simulation::new(class, 9000 + seed);
                let (winds, truth) = simulation.noisy(4, 9100 + seed);
                count(&simulation, &winds, &truth, &mut found, hours.clone());
            }
            println!("hours {hours:?}           {}", line(&class, &found));
            for c in found {
                if !bounds.contains(&c.shares()[2]) {
                    outside.push(format!("{hours:?} {}", line(&class, &found)));
                }
            }
        }
    }
    assert!(outside.is_empty(), "{}", outside.join("\n"));
}

/// Winds reported in steps of 10 degrees and 1 kt, without any other error.
#[test]
fn rounded_reports() {
    let coded = SensorErrors {
        speed_sd: 0.0,
        speed_sd_share: 0.0,
        direction_sd: 0.0,
        speed_step: Some(1852.0 / 3600.0),
        direction_step: Some(10.0),
        calm_below: 0.5,
    };
    let class = Class {
        spacing: 3e3,
        rms: 1.5,
        noise: 0.0,
        ..Class::default()
    };
    let mut all = [Coverage::default(); 2];
    for seed in 0..6 {
        let simulation = Simulation::new(class, 700 + seed);
        let (winds, truth) = simulation.run(HOURS, 710 + seed, |(u, v), _| {
            // Over a wind of 7 m/s, which differs from no station to another.
            let wind = rounded(Wind {
                u: u + 6.0,
                v: v + 3.6,
            });
            (wind, instrument_covariance(wind, false, &coded))
        });
        count(&simulation, &winds, &truth, &mut all, HOURS / 2..HOURS);
    }
    println!("{}", line(&class, &all));
    assert!(all.iter().all(Coverage::holds), "{}", line(&class, &all));
}

/// As reported in whole knots and tens of degrees.
fn rounded(wind: Wind) -> Wind {
    let knot = 1852.0 / 3600.0;
    let speed = (wind.u.hypot(wind.v) / knot).round() * knot;
    let direction = (wind.v.atan2(wind.u).to_degrees() / 10.0).round() * 10.0;
    let (sin, cos) = direction.to_radians().sin_cos();
    Wind {
        u: speed * cos,
        v: speed * sin,
    }
}
