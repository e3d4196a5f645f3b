//! Which power law: exponent and site variance.

use nalgebra::{Matrix3, Vector3};

use super::function::{Exponent, StructureSettings};
use super::geometry::{CLASSES, NetworkGeometry};
use super::sums::StructureSums;

/// What the pairs say of the exponent counts as this many independent values at most: they cannot tell a wind that
/// varies linearly over the network, in which the line integral makes no error, from one that is rough. The planes
/// can.
const PAIR_VALUES: f64 = 20.0;

/// Misfit by which a site variance must better the fit to be believed: that of one more parameter (Akaike 1974, IEEE
/// Trans. Autom. Control 19, 716).
const BELIEVED: f64 = 2.0;

/// A site variance makes at least this share of the differences at one spacing: a smaller one cannot be told from winds
/// that do not quite follow a power law, of which there are more and more values.
const LEAST_SITES: f64 = 0.1;

/// A class this many standard errors below the law of the classes inside it has saturated.
const SATURATED: f64 = 2.0;

/// Classes that are kept, however much the others have saturated.
const KEPT: usize = 3;

/// Passes of the reweighted least squares; the fourth changes nothing that matters.
const PASSES: usize = 3;

/// A law of the pairs with its misfit and that of the planes and the prior; for the choice of the exponent, and with
/// the pairs at their full weight, for the choice whether sites add anything: of this the planes say little.
#[derive(Debug, Clone, Copy)]
struct Candidate {
    law: Law,
    full_misfit: f64,
}

/// The shape of the structure function.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Shape {
    pub(super) exponent: Exponent,
    /// Share of the prior in what is known of it, 0 to 1.
    pub(super) prior_share: f64,
    /// m²/s²
    pub(super) site_variance: f64,
    /// What a wind that varies linearly adds to `D_L` + `D_T` of the pairs at one spacing, m²/s².
    pub(super) linear: f64,
    /// Classes of pairs left out: so many of the outermost have saturated.
    pub(super) saturated: usize,
}

/// Mean squared differences at one scale.
#[derive(Debug, Clone, Copy)]
pub(super) struct Scale {
    /// Distance or lag, relative to the reference.
    pub(super) at: f64,
    /// Mean squared difference, noise included.
    pub(super) total: f64,
    /// Noise in it.
    pub(super) noise: f64,
    /// Independent values behind it.
    pub(super) values: f64,
}

/// total − noise = constant + amplitude at^p + linear at².
#[derive(Debug, Clone, Copy)]
pub(super) struct Law {
    pub(super) exponent: Exponent,
    pub(super) amplitude: f64,
    pub(super) constant: f64,
    linear: f64,
    misfit: f64,
}

impl Shape {
    /// The shape of the prior.
    pub(super) fn prior(settings: &StructureSettings) -> Self {
        Self {
            exponent: Exponent::nearest(settings.prior_exponent),
            prior_share: 1.0,
            site_variance: 0.0,
            linear: 0.0,
            saturated: 0,
        }
    }

    /// The exponent and site variance that make the sums of a window most likely.
    ///
    /// - **Method**: least of the sum of N (V/M − 1 − ln V/M) over the classes, twice, V the mean squared difference with
    ///   its noise, M the model's and N the independent values (the χ² likelihood, or gamma deviance: McCullagh &
    ///   Nelder 1989, section 8.3.4; from memory): classes count by relative error and one that is poorly filled by
    ///   little. The classes are the pairs, by distance out to twice the spacing, with 4 n + s r^p + b r² (b for a wind
    ///   that varies linearly), and the planes of different sizes, with their variances under r^p and n. The prior of
    ///   the exponent is a normal one of standard deviation 2/√`prior_exponent_values`. For the choice of the exponent
    ///   the pairs weigh as 20 values at most.
    /// - **Site variance** n: 0, unless it betters the fit by more than one parameter must (Akaike 1974), and makes a tenth of the
    ///   differences at one spacing.
    /// - **Saturation**: pairs at large distance differ by no more than twice the variance of the wind, which would make
    ///   the exponent too small. The outermost class is left out if it lies more than 2 standard errors below the
    ///   law of those inside it, then the next.
    pub(super) fn of(
        geometry: &NetworkGeometry,
        settings: &StructureSettings,
        window: &StructureSums,
    ) -> Self {
        let all: f64 = window.pairs.iter().map(|c| c.count).sum();
        let values = window.independent * PAIR_VALUES / (window.independent + PAIR_VALUES);
        let mut pairs: Vec<(usize, Scale)> = (0..CLASSES)
            .filter(|&k| window.pairs[k].count > 0.0)
            .map(|k| {
                let class = &window.pairs[k];
                let scale = Scale {
                    at: geometry.class_distance[k],
                    total: (class.along + class.across + class.noise) / class.count,
                    noise: class.noise / class.count,
                    values: values * class.count / all,
                };
                (k, scale)
            })
            .collect();
        if pairs.is_empty() {
            return Self::prior(settings);
        }
        let saturated = leave_out_saturated(&mut pairs, settings);
        let scales: Vec<Scale> = pairs.iter().map(|p| p.1).collect();
        let planes = plane_scales(window);
        let misfit = |exponent: Exponent, constant: bool| {
            let off = exponent.value() - settings.prior_exponent;
            let prior = off * off * settings.prior_exponent_values / 4.0;
            let law = law_of(&scales, exponent, constant, true)?;
            let others = prior + plane_misfit(geometry, &planes, exponent, law.constant);
            let candidate = Candidate {
                law,
                full_misfit: law.misfit * window.independent / values + others,
            };
            Some((law.misfit + others, candidate))
        };
        let best =
            [false, true].map(|constant| least_misfit(|exponent| misfit(exponent, constant)));
        let law = match best {
            [Some(without), Some(with)]
                if with.full_misfit + BELIEVED < without.full_misfit
                    && with.law.constant >= LEAST_SITES * with.law.at(1.0) =>
            {
                with.law
            }
            [Some(found), _] | [None, Some(found)] => found.law,
            [None, None] => return Self::prior(settings),
        };
        let constant = law.constant > 0.0;
        let curvature = curvature(law.exponent, |exponent| Some(misfit(exponent, constant)?.0));
        Self {
            exponent: law.exponent,
            prior_share: curvature.map_or(1.0, |all| {
                (0.5 * settings.prior_exponent_values / all).clamp(0.0, 1.0)
            }),
            site_variance: 0.25 * law.constant,
            linear: law.linear,
            saturated,
        }
    }
}

/// Takes the saturated classes off (they are in the order of the classes, so the outermost first); the number of the
/// first class left.
fn leave_out_saturated(pairs: &mut Vec<(usize, Scale)>, settings: &StructureSettings) -> usize {
    while pairs.len() > KEPT {
        let inner: Vec<Scale> = pairs[1..].iter().map(|p| p.1).collect();
        let prior = Exponent::nearest(settings.prior_exponent);
        let Some(law) = best_law(&inner, prior, settings.prior_exponent_values) else {
            break;
        };
        let outer = pairs[0].1;
        let expected = law.at(outer.at) + outer.noise;
        if outer.total >= expected * (1.0 - SATURATED / outer.values.max(1.0).sqrt()) {
            break;
        }
        pairs.remove(0);
    }
    pairs.first().map_or(0, |p| p.0)
}

/// Second derivative of a misfit at an exponent, or as near to it as the grid goes: what the data and the prior know of
/// it together. `None` if it is not one of a minimum.
fn curvature(at: Exponent, misfit: impl Fn(Exponent) -> Option<f64>) -> Option<f64> {
    const STEPS: usize = 3;
    let grid: Vec<Exponent> = Exponent::all().collect();
    let middle = at.index().clamp(STEPS, Exponent::COUNT - 1 - STEPS);
    let value = |k: usize| misfit(*grid.get(k)?);
    let (low, high) = (value(middle - STEPS)?, value(middle + STEPS)?);
    let step = STEPS as f64 / 30.0;
    let second = (low - 2.0 * value(middle)? + high) / (step * step);
    (second > 0.0).then_some(second)
}

/// What belongs to the exponent of least misfit: every fifth of the grid is tried, then those about the best.
fn least_misfit<T: Copy>(of: impl Fn(Exponent) -> Option<(f64, T)>) -> Option<T> {
    let grid: Vec<Exponent> = Exponent::all()
        .take(Exponent::LARGEST_FITTED.index() + 1)
        .collect();
    let best = |members: &mut dyn Iterator<Item = &Exponent>| {
        let mut best: Option<(f64, usize, T)> = None;
        for exponent in members {
            if let Some((misfit, found)) = of(*exponent)
                && best.is_none_or(|(least, _, _)| misfit < least)
            {
                best = Some((misfit, exponent.index(), found));
            }
        }
        best
    };
    let (_, about, _) = best(&mut grid.iter().step_by(5).chain(grid.last()))?;
    let near = about.saturating_sub(4)..(about + 5).min(grid.len());
    best(&mut grid[near].iter()).map(|(_, _, found)| found)
}

/// The most likely power law through scales, with a constant if it is believed, and no linear part.
pub(super) fn best_law(scales: &[Scale], prior: Exponent, prior_values: f64) -> Option<Law> {
    if scales.len() < 2 {
        return None;
    }
    let best = [false, true].map(|constant| {
        least_misfit(|exponent| {
            let off = exponent.value() - prior.value();
            let law = law_of(scales, exponent, constant, false)?;
            let misfit = law.misfit + off * off * prior_values / 4.0;
            Some((misfit, (misfit, law)))
        })
    });
    match best {
        [Some(without), Some(with)] if with.0 + BELIEVED < without.0 => Some(with.1),
        [Some((_, law)), _] | [None, Some((_, law))] => Some(law),
        [None, None] => None,
    }
}

impl Law {
    fn at(&self, at: f64) -> f64 {
        self.constant + self.amplitude * at.powf(self.exponent.value()) + self.linear * at * at
    }
}

/// The most likely law of one exponent, all parts at least 0: reweighted least squares.
fn law_of(scales: &[Scale], exponent: Exponent, constant: bool, linear: bool) -> Option<Law> {
    let mut law = Law {
        exponent,
        amplitude: 0.0,
        constant: 0.0,
        linear: 0.0,
        misfit: 0.0,
    };
    let used = [constant, true, linear];
    let terms: Vec<[f64; 3]> = scales
        .iter()
        .map(|s| [1.0, s.at.powf(exponent.value()), s.at * s.at])
        .collect();
    let mut model: Vec<f64> = scales.iter().map(|s| s.total).collect();
    for _ in 0..PASSES {
        let mut normal = [[0.0; 3]; 3];
        let mut right = [0.0; 3];
        for ((s, m), x) in scales.iter().zip(&model).zip(&terms) {
            let w = s.values / m.max(1e-12).powi(2);
            for i in 0..3 {
                right[i] += w * x[i] * (s.total - s.noise);
                for j in 0..3 {
                    normal[i][j] += w * x[i] * x[j];
                }
            }
        }
        let [c, a, b] = not_negative(&normal, &right, used);
        (law.constant, law.amplitude, law.linear) = (c, a, b);
        for ((s, m), x) in scales.iter().zip(&mut model).zip(&terms) {
            *m = c + a * x[1] + b * x[2] + s.noise;
        }
    }
    law.misfit = scales
        .iter()
        .zip(&model)
        .map(|(s, &m)| deviance(s, m))
        .sum();
    law.misfit.is_finite().then_some(law)
}

/// Twice the loss of likelihood of a mean square of two components against the model's.
fn deviance(s: &Scale, model: f64) -> f64 {
    let ratio = (s.total / model.max(1e-12)).max(1e-12);
    2.0 * s.values * (ratio - 1.0 - ratio.ln())
}

/// Least squares of three terms, those not `used` 0 and the others at least 0: of all choices of terms with no
/// negative one the best, which is the solution as the problem is convex.
fn not_negative(normal: &[[f64; 3]; 3], right: &[f64; 3], used: [bool; 3]) -> [f64; 3] {
    let (mut best, mut gain) = ([0.0; 3], 0.0);
    for choice in 1..8_u8 {
        let chosen: [bool; 3] = std::array::from_fn(|k| choice & (1 << k) != 0);
        if (0..3).any(|k| chosen[k] && !used[k]) {
            continue;
        }
        let Some(x) = solve(normal, right, chosen) else {
            continue;
        };
        // What the sum of squares falls by.
        let falls: f64 = (0..3).map(|k| x[k] * right[k]).sum();
        // Where one scale cannot tell them apart, the first stands: a power of the distance before a linear wind.
        if x.iter().all(|&v| v >= 0.0) && falls > gain * (1.0 + 1e-9) {
            (best, gain) = (x, falls);
        }
    }
    best
}

/// Solves the normal equations of the chosen terms; `None` if they cannot be told apart.
fn solve(normal: &[[f64; 3]; 3], right: &[f64; 3], chosen: [bool; 3]) -> Option<[f64; 3]> {
    // A term left out has a row of its own that says it is 0.
    let entry = |i: usize, j: usize| {
        if chosen[i] && chosen[j] {
            normal[i][j]
        } else if i == j {
            1.0
        } else {
            0.0
        }
    };
    let m: Matrix3<f64> = Matrix3::from_fn(entry);
    let y: Vector3<f64> = Vector3::from_fn(|i, _| if chosen[i] { right[i] } else { 0.0 });
    // Cholesky's pivots are what is left of a term when the others are taken off: its share must not be rounding.
    let cholesky = m.cholesky()?;
    let told = (0..3).all(|k| cholesky.l_dirty()[(k, k)].powi(2) > 1e-10 * m[(k, k)]);
    let x = cholesky.solve(&y);
    (told && x.iter().all(|v| v.is_finite())).then(|| x.into())
}

/// Planes by class; `at` is not used.
fn plane_scales(window: &StructureSums) -> Vec<(usize, Scale)> {
    (0..CLASSES)
        .filter(|&k| window.planes[k].count > 0.0)
        .map(|k| {
            let class = &window.planes[k];
            let share = (class.count / window.winds.max(1.0)).min(1.0);
            let scale = Scale {
                at: 0.0,
                total: (class.squares + class.noise) / class.count,
                noise: class.noise / class.count,
                values: window.independent * share,
            };
            (k, scale)
        })
        .collect()
}

/// Misfit of the planes with the best amplitude for an exponent and a site term (4 n).
fn plane_misfit(
    geometry: &NetworkGeometry,
    planes: &[(usize, Scale)],
    exponent: Exponent,
    constant: f64,
) -> f64 {
    let growth = |k: usize| geometry.plane_growth[k][exponent.index()];
    let fixed = |k: usize, s: &Scale| s.noise + 0.5 * constant * geometry.plane_noise[k];
    let mut amplitude = 0.0;
    let mut model: Vec<f64> = planes.iter().map(|p| p.1.total).collect();
    for _ in 0..PASSES {
        let (mut xy, mut xx) = (0.0, 0.0);
        for ((k, s), m) in planes.iter().zip(&model) {
            let w = s.values / m.max(1e-12).powi(2);
            xy += w * growth(*k) * (s.total - fixed(*k, s));
            xx += w * growth(*k) * growth(*k);
        }
        amplitude = if xx > 0.0 {
            (xy / xx).max(0.0)
        } else {
            amplitude
        };
        for ((k, s), m) in planes.iter().zip(&mut model) {
            *m = fixed(*k, s) + amplitude * growth(*k);
        }
    }
    planes
        .iter()
        .zip(&model)
        .map(|((_, s), &m)| deviance(s, m))
        .sum()
}
