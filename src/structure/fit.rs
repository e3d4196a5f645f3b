//! From sums of squared differences to the structure function.

use super::function::{Exponent, StructureFunction, StructureSettings, TemporalFunction};
use super::geometry::{CLASSES, NetworkGeometry};
use super::shape::{Scale, Shape, best_law};
use super::sums::{LAGS, LagSum, PairSum, StructureSums};

/// An amplitude is not taken to be less than this share of what is otherwise known of it: a variance that is lost in
/// the instruments' errors is not 0.
const LEAST_SHARE: f64 = 0.01;

/// Amplitudes at a given shape; `recent` are the sums of the window's last hours, weighted. The law in time is that of
/// `before`, if it is given: that of a whole day changes slowly.
///
/// - **`c_L` + `c_T`**, from the differences of stations with planes through their neighbours, which do not see a wind
///   that varies linearly, as the line integral makes no error in it (generalised increments of order 1: Matheron
///   1973, Adv. Appl. Prob. 5, 439; from memory): first of the window, then of the last hours, each shrunk to what is
///   known without it in proportion to the number of independent values. Without planes, from the pairs.
/// - **`c_T`/`c_L`**, from the pairs of the window, within 1/(1+p) to 1+p (two-dimensional isotropy: Batchelor 1953,
///   The theory of homogeneous turbulence, section 3.4 written for two dimensions; from memory).
#[must_use]
pub(super) fn fit(
    geometry: &NetworkGeometry,
    settings: &StructureSettings,
    shape: &Shape,
    window: &StructureSums,
    recent: &StructureSums,
    before: Option<TemporalFunction>,
) -> StructureFunction {
    let prior = settings.prior(geometry.spacing);
    let values = window.independent;
    let (exponent, site) = (shape.exponent, shape.site_variance);
    let of_pairs = |sums: &StructureSums| pair_amplitude(geometry, sums, shape);
    let prior_amplitude = prior.longitudinal + prior.transverse;
    let pairs = of_pairs(window).map_or(prior_amplitude, |found| {
        shrunk(found, prior_amplitude, values, settings.prior_values)
    });
    let planes = |sums: &StructureSums| plane_amplitude(geometry, sums, exponent, site);
    let of_window = planes(window).map_or(pairs, |(found, values)| {
        shrunk(found, pairs, values, settings.prior_values)
    });
    let of_recent = planes(recent).or_else(|| of_pairs(recent).map(|a| (a, recent.independent)));
    let total = of_recent.map_or(of_window, |(found, values)| {
        let all = values + settings.window_values;
        let mean = (values * found + settings.window_values * of_window) / all;
        mean.max(LEAST_SHARE * of_window)
    });
    let bound = 1.0 + exponent.value();
    let ratio = transverse_ratio(&window.pairs, shape)
        .map_or(1.0, |r| r.powf(values / (values + settings.prior_values)))
        .clamp(1.0 / bound, bound);
    let share = |known: f64| known / (values + known);
    let mut found = StructureFunction {
        longitudinal: total / (1.0 + ratio),
        transverse: total * ratio / (1.0 + ratio),
        exponent,
        site_variance: site,
        prior_share: share(settings.prior_values),
        exponent_prior_share: shape.prior_share,
        ..prior
    };
    found.temporal = before.unwrap_or_else(|| temporal(&found, settings, window));
    found
}

/// `c_L` + `c_T` from the pairs, less what the sites and a linear wind add.
fn pair_amplitude(geometry: &NetworkGeometry, sums: &StructureSums, shape: &Shape) -> Option<f64> {
    let (mut xy, mut xx) = (0.0, 0.0);
    for (k, class) in sums.pairs.iter().enumerate().skip(shape.saturated) {
        let at = geometry.class_distance[k];
        let x = at.powf(shape.exponent.value());
        let value = (class.along + class.across) / class.count;
        let noise = class.noise / class.count;
        let w = class.count / (value.abs() + noise).max(f64::MIN_POSITIVE).powi(2);
        if w.is_finite() && class.count > 0.0 {
            xy += w * x * (value - 4.0 * shape.site_variance - shape.linear * at * at);
            xx += w * x * x;
        }
    }
    (xx > 0.0 && xx.is_finite()).then(|| xy / xx)
}

/// `c_L` + `c_T` from the planes, and the independent values behind it.
fn plane_amplitude(
    geometry: &NetworkGeometry,
    sums: &StructureSums,
    exponent: Exponent,
    site: f64,
) -> Option<(f64, f64)> {
    let (mut found, mut expected, mut count) = (0.0, 0.0, 0.0);
    for (k, class) in sums.planes.iter().enumerate() {
        found += class.squares - 2.0 * site * geometry.plane_noise[k] * class.count;
        expected += class.count * geometry.plane_growth[k][exponent.index()];
        count += class.count;
    }
    let values = sums.independent * (count / sums.winds.max(1.0)).min(1.0);
    (expected > 0.0 && values > 0.0).then(|| (found / expected, values))
}

/// `c_T`/`c_L` over the classes that have not saturated.
fn transverse_ratio(pairs: &[PairSum; CLASSES], shape: &Shape) -> Option<f64> {
    let (mut along, mut across) = (0.0, 0.0);
    for class in pairs.iter().skip(shape.saturated).filter(|c| c.count > 0.0) {
        let mean = (class.along + class.across) / class.count;
        let weight = 1.0 / (mean.abs() + class.noise / class.count);
        let sites = 2.0 * shape.site_variance * class.count;
        along += weight * (class.along - sites);
        across += weight * (class.across - sites);
    }
    let sum = along.max(0.0) + across.max(0.0);
    if sum.is_nan() || sum <= 0.0 {
        return None;
    }
    // A part that is lost in noise is little, not nothing.
    Some(across.max(LEAST_SHARE * sum) / along.max(LEAST_SHARE * sum))
}

/// The geometric mean of an estimate and what is known without it, weighted with the values behind each.
fn shrunk(found: f64, known: f64, values: f64, values_known: f64) -> f64 {
    let weight = values / (values + values_known);
    known * (found / known).max(LEAST_SHARE).powf(weight)
}

/// The law in time; the prior is the law in space carried past at the root mean square speed (Taylor 1938).
///
/// The errors of a sensor that last cancel in its own differences and those that do not add to them. How much of
/// either there is, is not known; so the instrument variance is taken off only as far as the differences do not fall
/// to 0 with the lag.
fn temporal(
    space: &StructureFunction,
    settings: &StructureSettings,
    window: &StructureSums,
) -> TemporalFunction {
    let reference = 600.0;
    let values = window.independent;
    let speed = if window.winds > 0.0 {
        (window.squared_speed / window.winds).sqrt().max(1.0)
    } else {
        settings.prior_speed
    };
    let [along, across] = space.at(speed * reference);
    let known = 0.5 * (along + across);
    let scales: Vec<Scale> = window
        .lags
        .iter()
        .filter(|l: &&LagSum| l.count > 0.0)
        .map(|l| Scale {
            at: l.lag / l.count / reference,
            total: 0.5 * l.squares / l.count,
            noise: 0.0,
            values: values / LAGS.len() as f64,
        })
        .collect();
    let Some(law) = best_law(&scales, space.exponent, settings.prior_exponent_values) else {
        return TemporalFunction {
            reference,
            amplitude: known,
            exponent: space.exponent,
            prior_share: 1.0,
        };
    };
    let count: f64 = window.lags.iter().map(|l| l.count).sum();
    let noise = 0.5 * window.lags.iter().map(|l| l.noise).sum::<f64>() / count.max(1.0);
    // What does not go to 0 with the lag is the instruments', as far as they can have done it.
    let constant = (law.constant - noise).max(0.0);
    TemporalFunction {
        reference,
        amplitude: shrunk(
            law.amplitude + constant,
            known,
            values,
            settings.prior_values,
        ),
        exponent: law.exponent,
        prior_share: settings.prior_values / (values + settings.prior_values),
    }
}
