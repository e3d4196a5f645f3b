//! The error budget against tables, laws and simulated winds.
#![allow(
    clippy::needless_range_loop,
    clippy::unwrap_used,
    clippy::panic,
    clippy::print_stdout,
    reason = "tests may panic and print; polygons and times index several columns"
)]

mod common;

use common::turbulence::{Class, Simulation};
use common::{close, pairs, positions, ring, table};
use gyremesh::align::{Covariance, WindBlock};
use gyremesh::check::Flag;
use gyremesh::integral::{
    EstimateBlock, Sampling, SecondOpinion, adjusted, adjusted_for_any_dependence, chance_of,
    complete_errors, error_covariance, estimate, expected_errors, quadratic, slopes_of_plane,
};
use gyremesh::settings::RegionParts;
use gyremesh::structure::{
    BlockSums, NetworkGeometry, StructureFunction, StructureSettings, StructureWindow,
    typical_spacing,
};
use gyremesh::units::Wind;

#[test]
fn false_discovery_agrees_with_scipy() {
    let rows = table("false_discovery.csv");
    let sets = rows.chunk_by(|a, b| a[0] == b[0]);
    for set in sets {
        let column = |k: usize| -> Vec<f64> { set.iter().map(|r| r[k].parse().unwrap()).collect() };
        let chances: Vec<f64> = column(1).iter().map(|&z| chance_of(z, 1.0)).collect();
        let checks = [
            (chances.clone(), column(2)),
            (adjusted(&chances), column(3)),
            (adjusted_for_any_dependence(&chances), column(4)),
        ];
        for (found, expected) in checks {
            for (f, e) in found.iter().zip(&expected) {
                // erfc of the two libraries agrees to some 1e-15.
                assert!(close(*f, *e, 1e-12 * e), "{f} {e}");
            }
        }
    }
}

#[test]
fn fits_agree_with_numpy() {
    let mut quadratics = 0;
    for row in table("plane_fit.csv") {
        let places: Vec<[f64; 2]> = pairs(&row[0]).iter().map(|&(x, y)| [x, y]).collect();
        let winds = pairs(&row[1]);
        let value = |k: usize| -> Option<f64> { row[k].parse().ok() };
        let slopes = slopes_of_plane(&places).unwrap();
        let apply = |weights: &[[f64; 2]]| {
            let terms = weights.iter().zip(&winds);
            terms.fold((0.0, 0.0), |(z, d), ([x, y], (u, v))| {
                (z + x * u + y * v, d + y * u - x * v)
            })
        };
        let linear: Vec<[f64; 2]> = slopes.iter().map(|&[x, y]| [-y, x]).collect();
        let (z, d) = apply(&linear);
        let largest = 10.0 * linear.iter().flatten().fold(0.0_f64, |m, w| m.max(w.abs()));
        assert!(close(z, value(2).unwrap(), 1e-11 * largest));
        assert!(close(d, value(3).unwrap(), 1e-11 * largest));
        let fit = quadratic(&places, centroid(&places));
        assert_eq!(fit.is_ok(), value(5).is_some(), "{fit:?} {row:?}");
        if let (Ok(weights), Some(zq), Some(dq)) = (fit, value(5), value(6)) {
            quadratics += 1;
            let (z, d) = apply(&weights);
            // The condition number, up to 300, magnifies rounding.
            assert!(close(z, zq, 1e-9 * largest) && close(d, dq, 1e-9 * largest));
        }
    }
    assert!(quadratics > 10);
}

fn centroid(places: &[[f64; 2]]) -> [f64; 2] {
    let (mut a, mut x, mut y) = (0.0, 0.0, 0.0);
    for (k, p) in places.iter().enumerate() {
        let q = places[(k + 1) % places.len()];
        let c = p[0] * q[1] - q[0] * p[1];
        a += 0.5 * c;
        x += (p[0] + q[0]) * c / 6.0;
        y += (p[1] + q[1]) * c / 6.0;
    }
    [x / a, y / a]
}

/// A structure function whose parts all matter.
fn lopsided(reference: f64) -> StructureFunction {
    let mut structure = StructureSettings::default().prior(reference);
    structure.longitudinal = 3.0;
    structure.transverse = 1.9;
    structure.site_variance = 0.2;
    structure
}

/// A region is the area-weighted mean of its parts; so the double sum of the covariances of the parts is the variance of
/// the region, with what the inner sides miss cancelled.
#[test]
fn parts_of_a_region_have_its_variance() {
    let simulation = Simulation::new(
        Class {
            side: 4,
            ..Class::default()
        },
        3,
    );
    let network = &simulation.network;
    let all = common::region("all", RegionParts::AllTriangles);
    let built = common::build(network, true, vec![], vec![all]).unwrap();
    let (winds, _) = simulation.noisy(1, 5);
    let structure = lopsided(30e3);
    let sampling = Sampling::new(&built.polygons, &built.edges, &positions(network), 30e3);
    let covariance =
        |p, q| error_covariance(&built.polygons, &sampling, &winds, 0, &structure, (p, q));
    let region = built.polygons.len() - 1;
    let area = |p: usize| built.polygons[p].shape.area / built.polygons[region].shape.area;
    let mut sums = [0.0; 4];
    for p in 0..region {
        for q in 0..region {
            let c = covariance(p, q);
            let parts = [
                c.vorticity,
                c.divergence,
                c.vorticity_divergence,
                c.divergence_vorticity,
            ];
            for (sum, part) in sums.iter_mut().zip(parts) {
                *sum += area(p) * area(q) * part;
            }
        }
    }
    let whole = covariance(region, region);
    // Each polygon is laid out in a plane of its own: 100 km wide, they differ by some 1e-4 of the largest terms.
    let terms: f64 = (0..region)
        .map(|p| area(p).powi(2) * covariance(p, p).vorticity)
        .sum();
    for (found, expected) in sums.iter().zip([
        whole.vorticity,
        whole.divergence,
        whole.vorticity_divergence,
        whole.divergence_vorticity,
    ]) {
        assert!(
            close(*found, expected, 2e-3 * terms),
            "{found:e} {expected:e} {terms:e}"
        );
    }
    // The independent sum would be far from it.
    assert!(terms > 1.5 * whole.vorticity);

    // The variances of the covariance are those of the columns.
    let mut block = estimate(&built.polygons, &winds);
    complete_errors(&built.polygons, &sampling, &winds, &[structure], &mut block);
    for p in [0, 3, region] {
        let c = covariance(p, p);
        assert!(close(
            block.vorticity_se[p].powi(2),
            c.vorticity,
            1e-4 * c.vorticity
        ));
        assert!(close(
            block.divergence_se[p].powi(2),
            c.divergence,
            1e-4 * c.divergence
        ));
    }
}

#[test]
fn the_parts_add_up_and_age_adds_to_them() {
    let simulation = Simulation::new(
        Class {
            side: 3,
            dropouts: 0.1,
            ..Class::default()
        },
        4,
    );
    let (mut winds, _) = simulation.noisy(12, 6);
    let polygons = &simulation.built.polygons;
    let sampling = Sampling::new(
        polygons,
        &simulation.built.edges,
        &positions(&simulation.network),
        30e3,
    );
    let complete = |winds: &WindBlock, models: &[StructureFunction]| {
        let mut block = estimate(polygons, winds);
        let parts = complete_errors(polygons, &sampling, winds, models, &mut block);
        (block, parts)
    };
    let structure = lopsided(30e3);
    let (fresh, parts) = complete(&winds, &[structure]);
    assert!(parts.vorticity.timing.iter().all(|&t| t.abs() < 1e-30));
    winds.age.fill(300.0);
    let (late, parts_late) = complete(&winds, &[structure]);
    let weights = |p: usize| polygons[p].shape.noise_factor.powi(2);
    let n = winds.times.len();
    for cell in 0..fresh.flag.len() {
        if fresh.flag[cell] == Flag::Missing {
            assert!(late.vorticity_se[cell].abs() < 1e-30);
            continue;
        }
        let p = &parts_late.divergence;
        let sum = p.instrument[cell].powi(2) + p.sampling[cell].powi(2) + p.timing[cell].powi(2);
        assert!(close(late.divergence_se[cell].powi(2), sum, 1e-12 * sum));
        let timing = weights(cell / n) * structure.temporal.at(300.0);
        assert!(close(p.timing[cell].powi(2), timing, 1e-12 * timing));
        let grown = late.divergence_se[cell].powi(2) - fresh.divergence_se[cell].powi(2);
        assert!(close(grown, timing, 1e-9 * sum));
    }
    // What is expected without reports is what comes of reports with that error.
    let constants = sampling.constants(structure.exponent);
    for cell in (0..fresh.flag.len()).filter(|&c| fresh.flag[c] < Flag::Missing) {
        let p = cell / n;
        let expected = expected_errors(
            &polygons[p],
            &constants[p],
            &structure,
            simulation.class.noise,
        );
        assert!(close(
            expected.total[0],
            fresh.vorticity_se[cell],
            1e-9 * expected.total[0]
        ));
        assert!(close(
            expected.total[1],
            fresh.divergence_se[cell],
            1e-9 * expected.total[1]
        ));
    }
    // Without a model the instruments are all there is.
    let (bare, parts) = complete(&winds, &[]);
    assert_eq!(parts.vorticity.instrument, bare.vorticity_se);
    assert_eq!(bare, estimate(polygons, &winds));
}

/// The same structure functions however the run is cut into blocks.
#[test]
fn blocks_may_be_cut_anywhere() {
    let simulation = Simulation::new(
        Class {
            side: 4,
            dropouts: 0.2,
            ..Class::default()
        },
        8,
    );
    let (whole, _) = simulation.noisy(40, 9);
    let settings = StructureSettings::default();
    let geometry = NetworkGeometry::new(&simulation.network, 30e3, &[]);
    let run = |cuts: &[usize]| -> Vec<StructureFunction> {
        let mut window = StructureWindow::new(&geometry, settings);
        let mut previous = None;
        let mut all = Vec::new();
        for cut in cuts.windows(2) {
            let block = part(&whole, cut[0], cut[1], simulation.network.len());
            let sums = BlockSums::of(&geometry, &settings, 3600.0, previous.as_ref(), &block);
            all.extend(window.advance(&geometry, &sums, &block.times));
            previous = Some(block);
        }
        all
    };
    let uncut = run(&[0, 40]);
    assert_eq!(uncut.len(), 40);
    assert_eq!(uncut, run(&[0, 8, 17, 25, 40]));
    assert!(uncut[39].prior_share < 0.05 && uncut[0].prior_share > 0.3);
    // A window is all that is remembered, but for e^-24 of the last hours' weights.
    let later = run(&[8, 40]);
    let (a, b) = (uncut[39], later[31]);
    assert_eq!(a.exponent, b.exponent);
    assert!(close(a.longitudinal, b.longitudinal, 1e-6 * a.longitudinal));
}

fn part(block: &WindBlock, from: usize, to: usize, stations: usize) -> WindBlock {
    let n = block.times.len();
    let mut part = WindBlock::empty(block.times[from..to].to_vec(), stations);
    for s in 0..stations {
        for t in from..to {
            let cell = s * n + t;
            let wind = Wind {
                u: block.u[cell],
                v: block.v[cell],
            };
            let covariance = Covariance {
                uu: block.var_u[cell],
                uv: block.cov_uv[cell],
                vv: block.var_v[cell],
            };
            if block.flag[cell] < Flag::Missing {
                common::set(&mut part, s, t - from, wind, covariance, block.flag[cell]);
            }
        }
    }
    part
}

/// Rings of five to nine stations: the linear fit's own error and that of its difference from the line integral are as
/// large as stated, and few disagree.
#[test]
fn second_opinion_disagrees_as_often_as_it_says() {
    let (mut squares, mut fit_squares, mut count, mut few) = (0.0, 0.0, 0.0, 0.0);
    for seed in 0..3 {
        let class = Class {
            side: 4,
            ..Class::default()
        };
        let mut simulation = Simulation::new(class, 40 + seed);
        let rings = [
            ring("a", &[0, 4, 8, 13, 10, 6, 2, 1]),
            ring("b", &[5, 9, 14, 15, 11, 7]),
            ring("c", &[0, 5, 2, 3, 7, 10, 15, 13, 4]),
        ];
        let Ok(built) = common::build(&simulation.network, false, rings.to_vec(), vec![]) else {
            continue;
        };
        simulation.rebuild(built);
        let (winds, truth) = simulation.noisy(48, 50 + seed);
        let spacing = typical_spacing(&simulation.network).unwrap();
        let settings = StructureSettings::default();
        let geometry = NetworkGeometry::new(&simulation.network, spacing, &[]);
        let sums = BlockSums::of(&geometry, &settings, 3600.0, None, &winds);
        let models =
            StructureWindow::new(&geometry, settings).advance(&geometry, &sums, &winds.times);
        let polygons = &simulation.built.polygons;
        let sampling = Sampling::new(
            polygons,
            &simulation.built.edges,
            &positions(&simulation.network),
            spacing,
        );
        let estimates: EstimateBlock = estimate(polygons, &winds);
        for (p, polygon) in polygons.iter().enumerate() {
            let second = SecondOpinion::new(polygon, p, &sampling).unwrap();
            for t in 12..48 {
                let edges = sampling.constants(models[t].exponent)[p];
                let c = second.compare(&winds, t, &models[t], &edges);
                let cell = p * winds.times.len() + t;
                assert!(close(
                    c.fitted[0] - c.difference[0],
                    estimates.vorticity[cell],
                    1e-3 * c.difference_se[0]
                ));
                for k in 0..2 {
                    squares += (c.difference[k] / c.difference_se[k]).powi(2);
                    fit_squares += ((c.fitted[k] - truth[t][p][k]) / c.fitted_se[k]).powi(2);
                    count += 1.0;
                }
                few += f64::from(u8::from(c.chance < 0.05));
            }
        }
    }
    println!(
        "{} {} {} of {count}",
        squares / count,
        fit_squares / count,
        2.0 * few / count
    );
    assert!(count > 300.0);
    assert!((0.85..1.15).contains(&(squares / count)));
    assert!((0.85..1.15).contains(&(fit_squares / count)));
    assert!((0.02..0.08).contains(&(2.0 * few / count)));
}
