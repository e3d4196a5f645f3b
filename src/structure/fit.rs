//! From sums of squared differences to the structure function.

use super::function::{Exponent, StructureFunction, StructureSettings, TemporalFunction};
use super::geometry::{CLASSES, NetworkGeometry};
use super::sums::{LagSum, PairSum, StructureSums};

/// A law of two scales or more, of which a value lies this many standard errors away, does not hold there.
const FAR: f64 = 2.0;
/// An amplitude is not taken to be less than this share of what is otherwise known of it: a variance that is lost in
/// the instruments' errors is not 0.
const LEAST_SHARE: f64 = 0.01;

/// Mean squared differences at one scale.
#[derive(Debug, Clone, Copy)]
struct Scale {
    /// Distance or lag, relative to the reference.
    at: f64,
    /// Mean squared difference, less noise.
    value: f64,
    /// Noise taken off.
    noise: f64,
    /// Terms in the mean.
    count: f64,
    /// Independent values behind it.
    independent: f64,
}

/// A power law through mean squared differences.
#[derive(Debug, Clone, Copy)]
struct PowerLaw {
    exponent: Exponent,
    amplitude: f64,
}

/// Fits the structure function to the sums of a window; `recent` are those of its last hours, weighted.
///
/// - **Exponent** p, from the pairs of the whole window, `D_L` + `D_T` by class of distance out to twice the spacing:
///   least squares with weights 1/(value + noise)², so that each class counts by its relative error, and a Huber weight
///   (Huber 1964, Ann. Math. Stat. 35, 73) for classes more than 2 standard errors from the law. *Saturation*: the
///   outermost class is left out if it falls more than 2 standard errors below the law of those inside it, then the
///   next.
/// - **`c_T`/`c_L`**, from the same pairs, within 1/(1+p) to 1+p (two-dimensional isotropy: Batchelor 1953, section
///   3.4 written for two dimensions; from memory).
/// - **Site variance** n, only where the differences grow more slowly than r^(1/3): the intercept.
/// - **Amplitude** `c_L` + `c_T`, from the differences of stations with planes through their neighbours, which do not
///   see a wind that varies linearly, as the line integral makes no error in it (generalised increments of order 1:
///   Matheron 1973, Adv. Appl. Prob. 5, 439; from memory): first of the window, then of the last hours, each shrunk
///   to what is known without it in proportion to the number of independent values. Without planes, from the pairs.
#[must_use]
pub(super) fn fit(
    geometry: &NetworkGeometry,
    settings: &StructureSettings,
    window: &StructureSums,
    recent: &StructureSums,
) -> StructureFunction {
    let prior = settings.prior(geometry.spacing);
    let values = window.independent;
    let mut scales = pair_scales(geometry, &window.pairs, values);
    let raw = power_law(&mut scales);
    let weight = values / (values + settings.prior_exponent_values);
    let from_pairs = match raw {
        Some(law) => shrunk_exponent(law.exponent, prior.exponent, weight),
        None => prior.exponent,
    };
    let exponent = match plane_exponent(geometry, window) {
        Some((found, values)) => shrunk_exponent(
            found,
            from_pairs,
            values / (values + settings.pair_exponent_values),
        ),
        None => from_pairs,
    };
    let flat = raw.is_some_and(|law| law.exponent == Exponent::SMALLEST);
    let site = if flat {
        // 4 n: both components of both stations.
        weight * 0.25 * intercept(&scales, exponent.value())
    } else {
        0.0
    };
    let of_pairs = |sums: &StructureSums| {
        let scales = pair_scales(geometry, &sums.pairs, sums.independent);
        amplitude(&scales, exponent.value(), 4.0 * site)
    };
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
    let ratio = transverse_ratio(&scales, &window.pairs, site);
    let bound = 1.0 + exponent.value();
    let ratio = ratio
        .map_or(1.0, |r| {
            r.powf(values / (values + settings.prior_values))
        })
        .clamp(1.0 / bound, bound);
    let share = |known: f64| known / (values + known);
    let mut found = StructureFunction {
        longitudinal: total / (1.0 + ratio),
        transverse: total * ratio / (1.0 + ratio),
        exponent,
        site_variance: site,
        prior_share: share(settings.prior_values),
        exponent_prior_share: if raw.is_some() {
            share(settings.prior_exponent_values)
        } else {
            1.0
        },
        ..prior
    };
    found.temporal = temporal(&found, settings, window);
    found
}

fn pair_scales(geometry: &NetworkGeometry, pairs: &[PairSum; CLASSES], values: f64) -> Vec<Scale> {
    let all: f64 = pairs.iter().map(|c| c.count).sum();
    (0..CLASSES)
        .filter(|&k| pairs[k].count > 0.0)
        .map(|k| {
            let class = &pairs[k];
            Scale {
                at: geometry.class_distance[k],
                value: (class.along + class.across) / class.count,
                noise: class.noise / class.count,
                count: class.count,
                independent: values * class.count / all,
            }
        })
        .collect()
}

/// The law through all scales (ascending class, so descending distance); leaves out those that have saturated.
fn power_law(scales: &mut Vec<Scale>) -> Option<PowerLaw> {
    scales.sort_by(|a, b| b.at.total_cmp(&a.at));
    // Two scales make a law, and a third within them tells whether the outermost follows it.
    while scales.len() > 3 {
        let Some(inner) = huber_fit(&scales[1..]) else {
            break;
        };
        let outer = scales[0];
        let expected = inner.amplitude * outer.at.powf(inner.exponent.value());
        let error = (expected + outer.noise) / outer.independent.max(1.0).sqrt();
        if outer.value >= expected - FAR * error || scales.len() <= CLASSES_KEPT {
            break;
        }
        scales.remove(0);
    }
    huber_fit(scales)
}

/// Scales that stay, however much the others have saturated.
const CLASSES_KEPT: usize = 3;

fn huber_fit(scales: &[Scale]) -> Option<PowerLaw> {
    if scales.len() < 2 {
        return None;
    }
    let mean = scales.iter().map(|s| s.count * s.value).sum::<f64>()
        / scales.iter().map(|s| s.count).sum::<f64>();
    if mean.is_nan() || mean <= 0.0 {
        return None;
    }
    let mut weights: Vec<f64> = scales
        .iter()
        .map(|s| s.count / (s.value.max(0.1 * mean) + s.noise).powi(2))
        .collect();
    let mut law = best_law(scales, &weights)?;
    for _ in 0..2 {
        for (weight, s) in weights.iter_mut().zip(scales) {
            let expected = law.amplitude * s.at.powf(law.exponent.value());
            let error = (expected + s.noise) / s.independent.max(1.0).sqrt();
            let far = (s.value - expected).abs() / error;
            *weight = s.count / (expected + s.noise).powi(2) * (FAR / far).min(1.0);
        }
        law = best_law(scales, &weights)?;
    }
    Some(law)
}

fn best_law(scales: &[Scale], weights: &[f64]) -> Option<PowerLaw> {
    let mut best: Option<(f64, PowerLaw)> = None;
    for exponent in Exponent::all().take(Exponent::LARGEST_FITTED.index() + 1) {
        let (mut xy, mut xx, mut yy) = (0.0, 0.0, 0.0);
        for (s, w) in scales.iter().zip(weights) {
            let x = s.at.powf(exponent.value());
            xy += w * x * s.value;
            xx += w * x * x;
            yy += w * s.value * s.value;
        }
        let amplitude = xy / xx;
        let misfit = yy - amplitude * xy;
        if amplitude > 0.0 && best.is_none_or(|(least, _)| misfit < least) {
            best = Some((
                misfit,
                PowerLaw {
                    exponent,
                    amplitude,
                },
            ));
        }
    }
    best.map(|b| b.1)
}

/// Intercept of value = a + b x^p, at least 0.
fn intercept(scales: &[Scale], p: f64) -> f64 {
    let (mut n, mut x, mut y, mut xx, mut xy) = (0.0, 0.0, 0.0, 0.0, 0.0);
    for s in scales {
        let w = s.count / (s.value.abs() + s.noise).powi(2);
        let a = s.at.powf(p);
        n += w;
        x += w * a;
        y += w * s.value;
        xx += w * a * a;
        xy += w * a * s.value;
    }
    let determinant = n * xx - x * x;
    if determinant.is_nan() || determinant <= 1e-9 * n * xx {
        return 0.0;
    }
    let slope = ((n * xy - x * y) / determinant).max(0.0);
    ((y - slope * x) / n).max(0.0)
}

/// Amplitude at a given exponent of what is left after `constant`.
fn amplitude(scales: &[Scale], p: f64, constant: f64) -> Option<f64> {
    let (mut xy, mut xx) = (0.0, 0.0);
    for s in scales {
        let x = s.at.powf(p);
        let w = s.count / (s.value.abs() + s.noise).max(f64::MIN_POSITIVE).powi(2);
        xy += w * x * (s.value - constant);
        xx += w * x * x;
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

/// Exponent from the planes of different sizes, and the independent values behind it: least squares with weights from
/// the relative error of each class.
fn plane_exponent(geometry: &NetworkGeometry, sums: &StructureSums) -> Option<(Exponent, f64)> {
    let classes: Vec<(usize, f64, f64)> = (0..CLASSES)
        .filter(|&k| sums.planes[k].count > 0.0)
        .map(|k| {
            let class = &sums.planes[k];
            let value = class.squares / class.count;
            let error = value.abs() + class.noise / class.count;
            (k, value, class.count / (error * error))
        })
        .collect();
    let least = |&(k, _, _): &(usize, f64, f64)| sums.planes[k].count / sums.winds.max(1.0);
    // The second largest class limits what is known of the slope.
    let mut shares: Vec<f64> = classes.iter().map(|c| least(c).min(1.0)).collect();
    shares.sort_by(f64::total_cmp);
    let values = sums.independent * shares.len().checked_sub(2).map_or(0.0, |k| shares[k]);
    let mut best: Option<(f64, Exponent)> = None;
    for exponent in Exponent::all().take(Exponent::LARGEST_FITTED.index() + 1) {
        let (mut xy, mut xx, mut yy) = (0.0, 0.0, 0.0);
        for &(k, value, w) in &classes {
            let x = geometry.plane_growth[k][exponent.index()];
            xy += w * x * value;
            xx += w * x * x;
            yy += w * value * value;
        }
        let misfit = yy - xy * xy / xx;
        if xy > 0.0 && best.is_none_or(|(least, _)| misfit < least) {
            best = Some((misfit, exponent));
        }
    }
    best.filter(|_| values > 0.0).map(|(_, exponent)| (exponent, values))
}

/// `c_T`/`c_L` over the scales that follow the law.
fn transverse_ratio(scales: &[Scale], pairs: &[PairSum; CLASSES], site: f64) -> Option<f64> {
    let farthest = scales.first()?.at;
    let (mut along, mut across) = (0.0, 0.0);
    // A distance tells its class: those left out are the outermost.
    for (k, class) in pairs.iter().enumerate() {
        let at = super::geometry::middle_of_class(k);
        if at <= farthest * 1.001 && class.count > 0.0 {
            let mean = (class.along + class.across) / class.count;
            let weight = 1.0 / (mean.abs() + class.noise / class.count);
            along += weight * (class.along - 2.0 * site * class.count);
            across += weight * (class.across - 2.0 * site * class.count);
        }
    }
    if along.is_nan() || across.is_nan() || (along <= 0.0 && across <= 0.0) {
        return None;
    }
    // A part that is lost in noise is little, not nothing.
    let least = LEAST_SHARE * (along.max(0.0) + across.max(0.0));
    Some(across.max(least) / along.max(least))
}

/// The weighted mean of two exponents.
fn shrunk_exponent(found: Exponent, prior: Exponent, weight: f64) -> Exponent {
    Exponent::nearest(prior.value() + weight * (found.value() - prior.value()))
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
/// to 0 with the lag: growth slower than τ^(1/3).
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
    let mut scales: Vec<Scale> = window
        .lags
        .iter()
        .filter(|l: &&LagSum| l.count > 0.0)
        .map(|l| Scale {
            at: l.lag / l.count / reference,
            value: 0.5 * l.squares / l.count,
            noise: 0.0,
            count: l.count,
            independent: values,
        })
        .collect();
    scales.sort_by(|a, b| b.at.total_cmp(&a.at));
    let law = huber_fit(&scales);
    let weight = values / (values + settings.prior_exponent_values);
    let exponent = match law {
        Some(law) => shrunk_exponent(law.exponent, space.exponent, weight),
        None => space.exponent,
    };
    let constant = if law.is_some_and(|l| l.exponent == Exponent::SMALLEST) {
        let count: f64 = window.lags.iter().map(|l| l.count).sum();
        let noise = 0.5 * window.lags.iter().map(|l| l.noise).sum::<f64>() / count.max(1.0);
        intercept(&scales, exponent.value()).min(noise)
    } else {
        0.0
    };
    match amplitude(&scales, exponent.value(), constant) {
        Some(found) => TemporalFunction {
            reference,
            amplitude: shrunk(found, known, values, settings.prior_values),
            exponent,
            prior_share: settings.prior_values / (values + settings.prior_values),
        },
        None => TemporalFunction {
            reference,
            amplitude: known,
            exponent,
            prior_share: 1.0,
        },
    }
}
