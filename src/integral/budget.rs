//! The error budget: variances of vorticity and divergence by their causes.

use super::EstimateBlock;
use super::sampling::{PairCovariance, Sampling, SamplingConstants};
use crate::align::WindBlock;
use crate::polygon::{CoefficientRow, StationPolygon};
use crate::structure::StructureFunction;

/// Standard errors of one quantity by cause, 1/s, in columns like those of [`EstimateBlock`]; the total is the root of
/// the sum of their squares.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct ErrorParts {
    /// Sensors, their rounding, and the sites (the structure function's site variance): better with better sensors and
    /// sites.
    pub instrument: Vec<f64>,
    /// The wind between the stations: better with stations nearer to each other.
    pub sampling: Vec<f64>,
    /// Ages of the values: better with reports at the analysis time.
    pub timing: Vec<f64>,
}

/// The parts of both quantities.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct ErrorBudget {
    /// Of the vorticity.
    pub vorticity: ErrorParts,
    /// Of the divergence.
    pub divergence: ErrorParts,
}

/// Completes the errors of a block: `*_se`, which [`super::estimate`] leaves with the instruments alone, become
/// totals, and the parts are returned.
///
/// - **Formula**: var = Σ wᵀ C w + n Σ |w|² (instruments and sites) + `c_L` K + `c_T` K′ (sampling,
///   [`SamplingConstants`]) + Σ |w|² `D_t`(age) (timing), with w the weights of the stations.
/// - **Assumes**: the three are independent of each other; so are the instruments' errors of different stations, and the
///   changes of the wind at different stations since their reports (a change that all of them share cancels, so this
///   is too large where all are late alike).
/// - **Shape**: `models` has one structure function for each time of the block; where it is shorter, its last holds on.
///   An empty one adds nothing.
pub fn complete_errors(
    polygons: &[StationPolygon],
    sampling: &Sampling,
    winds: &WindBlock,
    models: &[StructureFunction],
    block: &mut EstimateBlock,
) -> ErrorBudget {
    let n = block.times.len();
    let cells = block.vorticity_se.len();
    let mut budget = ErrorBudget::default();
    for parts in [&mut budget.vorticity, &mut budget.divergence] {
        parts.instrument = vec![0.0; cells];
        parts.sampling = vec![0.0; cells];
        parts.timing = vec![0.0; cells];
    }
    let Some(last) = models.last() else {
        budget.vorticity.instrument.clone_from(&block.vorticity_se);
        budget
            .divergence
            .instrument
            .clone_from(&block.divergence_se);
        return budget;
    };
    if n == 0 {
        return budget;
    }
    let model: Vec<&StructureFunction> = (0..n).map(|t| models.get(t).unwrap_or(last)).collect();
    let runs = runs_of_exponent(&model);
    let aged = changes_with_age(winds, &model);
    let column =
        |of: fn(&StructureFunction) -> f64| -> Vec<f64> { model.iter().map(|m| of(m)).collect() };
    let sites = column(|m| m.site_variance);
    let longitudinal = column(|m| m.longitudinal);
    let transverse = column(|m| m.transverse);
    // With the widest vectors that the processor has.
    pulp::Arch::new().dispatch(|| {
        let mut timing = vec![0.0; n];
        for (p, polygon) in polygons.iter().enumerate() {
            let squared_weights: f64 = polygon.row.weights.iter().map(|[x, y]| x * x + y * y).sum();
            timing.fill(0.0);
            if let Some(aged) = &aged {
                add_timing(&polygon.row, winds, aged, &mut timing);
            }
            let cells = p * n..(p + 1) * n;
            let of_quantity = [
                (&mut budget.vorticity, &mut block.vorticity_se, false),
                (&mut budget.divergence, &mut block.divergence_se, true),
            ];
            for (parts, se, swapped) in of_quantity {
                let se = &mut se[cells.clone()];
                let instrument = &mut parts.instrument[cells.clone()];
                let sampled = &mut parts.sampling[cells.clone()];
                let timed = &mut parts.timing[cells.clone()];
                for (times, exponent) in &runs {
                    let SamplingConstants { along, across, .. } = sampling.constants(*exponent)[p];
                    let (of_l, of_t) = if swapped {
                        (across, along)
                    } else {
                        (along, across)
                    };
                    // No branch in here, so that it vectorises.
                    for t in times.clone() {
                        let own = se[t] * se[t] + squared_weights * sites[t];
                        let between = (longitudinal[t] * of_l + transverse[t] * of_t).max(0.0);
                        instrument[t] = own.sqrt();
                        sampled[t] = between.sqrt();
                        timed[t] = timing[t].sqrt();
                        se[t] = (own + between + timing[t]).sqrt();
                    }
                }
                for (t, flag) in block.flag[cells.clone()].iter().enumerate() {
                    if !flag.is_usable() {
                        (se[t], instrument[t], sampled[t], timed[t]) = (0.0, 0.0, 0.0, 0.0);
                    }
                }
            }
        }
    });
    budget
}

/// Errors to expect of a polygon before any report is read.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ExpectedErrors {
    /// Part of sensors and sites in vorticity and in divergence, 1/s.
    pub instrument: f64,
    /// Sampling part of vorticity and of divergence, 1/s.
    pub sampling: [f64; 2],
    /// Standard errors of vorticity and of divergence, 1/s.
    pub total: [f64; 2],
}

/// What a polygon can resolve with sensors of a stated error and a stated or past structure function: errors with
/// `sensor_sd`, m/s, in either component of every wind and all reports at the analysis time.
///
/// - **Reference**: `methods.md` 1.4 (noise factor: Davies-Jones 1993, MWR 121, 713), [`SamplingConstants::of`].
#[must_use]
pub fn expected_errors(
    polygon: &StationPolygon,
    constants: &SamplingConstants,
    structure: &StructureFunction,
    sensor_sd: f64,
) -> ExpectedErrors {
    let factor = polygon.shape.noise_factor;
    let instrument = factor * factor * (sensor_sd * sensor_sd + structure.site_variance);
    let [vorticity, divergence, _] = constants.variances(structure);
    ExpectedErrors {
        instrument: instrument.sqrt(),
        sampling: [vorticity.sqrt(), divergence.sqrt()],
        total: [
            (instrument + vorticity).sqrt(),
            (instrument + divergence).sqrt(),
        ],
    }
}

/// Runs of times with one exponent.
fn runs_of_exponent(
    model: &[&StructureFunction],
) -> Vec<(std::ops::Range<usize>, crate::structure::Exponent)> {
    let mut runs: Vec<(std::ops::Range<usize>, crate::structure::Exponent)> = Vec::new();
    for (t, m) in model.iter().enumerate() {
        match runs.last_mut() {
            Some((times, exponent)) if *exponent == m.exponent => times.end = t + 1,
            _ => runs.push((t..t + 1, m.exponent)),
        }
    }
    runs
}

/// `D_t` of the age of every value; `None` if none has an age.
fn changes_with_age(winds: &WindBlock, model: &[&StructureFunction]) -> Option<Vec<f64>> {
    winds.age.iter().any(|&age| age > 0.0).then(|| {
        let ages = winds.age.chunks(model.len());
        ages.flat_map(|ages| ages.iter().zip(model))
            .map(|(&age, m)| m.temporal.at(f64::from(age)))
            .collect()
    })
}

fn add_timing(row: &CoefficientRow, winds: &WindBlock, aged: &[f64], timing: &mut [f64]) {
    for (&station, &[x, y]) in row.stations.iter().zip(&row.weights) {
        let squared = x * x + y * y;
        for (sum, change) in timing.iter_mut().zip(&aged[winds.of_station(station)]) {
            *sum += squared * change;
        }
    }
}

/// Covariance of the errors of two polygons at time `t` of a block: sampling, and the instruments, sites and ages of
/// the stations they share. With `p` = `q` it gives the variances.
///
/// The sum over all pairs of parts of a union, each weighted with its share of the area, is the variance of the
/// union's mean: what inner sides miss cancels.
#[must_use]
pub fn error_covariance(
    polygons: &[StationPolygon],
    sampling: &Sampling,
    winds: &WindBlock,
    t: usize,
    structure: &StructureFunction,
    (p, q): (usize, usize),
) -> PairCovariance {
    let mut sum = sampling.covariance(p, q, structure);
    sum.add(&station_covariance(
        &polygons[p].row,
        &polygons[q].row,
        winds,
        t,
        structure,
    ));
    sum
}

/// The part of the covariance that comes from shared stations: instruments, sites and ages.
#[must_use]
pub fn station_covariance(
    a: &CoefficientRow,
    b: &CoefficientRow,
    winds: &WindBlock,
    t: usize,
    structure: &StructureFunction,
) -> PairCovariance {
    let mut sum = PairCovariance::default();
    for (station, &[x, y]) in a.stations.iter().zip(&a.weights) {
        let Some(k) = b.stations.iter().position(|s| s == station) else {
            continue;
        };
        let [x2, y2] = b.weights[k];
        let cell = station * winds.times.len() + t;
        let own = structure.site_variance + structure.temporal.at(f64::from(winds.age[cell]));
        let (uu, uv, vv) = (
            winds.var_u[cell] + own,
            winds.cov_uv[cell],
            winds.var_v[cell] + own,
        );
        // ζ = x u + y v, δ = y u − x v.
        let form = |a: [f64; 2], b: [f64; 2]| {
            a[0] * (uu * b[0] + uv * b[1]) + a[1] * (uv * b[0] + vv * b[1])
        };
        let (z, d, z2, d2) = ([x, y], [y, -x], [x2, y2], [y2, -x2]);
        sum.add(&PairCovariance {
            vorticity: form(z, z2),
            divergence: form(d, d2),
            vorticity_divergence: form(z, d2),
            divergence_vorticity: form(d, z2),
        });
    }
    sum
}
