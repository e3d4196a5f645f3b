//! Which of many values differ from zero.

use std::sync::OnceLock;

use super::EstimateBlock;
use crate::check::Flag;

/// Two-sided probability of a value at least as far from 0 by chance, for a normal error of standard deviation `se`.
///
/// p = erfc(|value| / (se √2)). 1 where there is no error to compare with.
#[must_use]
pub fn chance_of(value: f64, se: f64) -> f64 {
    let z = value.abs() / se;
    if z.is_nan() || z.is_infinite() {
        return 1.0;
    }
    libm::erfc(z * std::f64::consts::FRAC_1_SQRT_2)
}

/// Probability of a χ² at least as large, with two degrees of freedom: exp(−χ²/2).
#[must_use]
pub fn chance_of_square(square: f64) -> f64 {
    (-0.5 * square).exp()
}

/// Benjamini-Hochberg adjusted probabilities: calling all values with an adjusted probability of at most q different
/// from zero makes on average no more than a share q of false calls.
///
/// Not-a-number stands for a value that is missing: it takes no part and stays as it is.
///
/// - **Assumes**: values that are independent, or depend on each other positively (Benjamini & Yekutieli 2001, Ann.
///   Stat. 29, 1165; from memory). Polygons that share a station may depend negatively; in that case the share has no
///   strict bound, and [`adjusted_for_any_dependence`] has.
/// - **Reference**: Benjamini & Hochberg 1995, J. R. Stat. Soc. B 57, 289; Wilks 2016, BAMS 97, 2263 (its use for
///   fields; from memory). Checked against SciPy's `false_discovery_control`.
#[must_use]
pub fn adjusted(chances: &[f64]) -> Vec<f64> {
    adjust(chances, |_| 1.0)
}

/// As [`adjusted`], valid for any dependence: larger by Σ 1/k, 5.5 for 200 values (Benjamini & Yekutieli 2001).
#[must_use]
pub fn adjusted_for_any_dependence(chances: &[f64]) -> Vec<f64> {
    adjust(chances, |n| (1..=n).map(|k| 1.0 / k as f64).sum())
}

fn adjust(chances: &[f64], factor: impl Fn(usize) -> f64) -> Vec<f64> {
    let mut order: Vec<usize> = (0..chances.len())
        .filter(|&k| !chances[k].is_nan())
        .collect();
    order.sort_by(|&a, &b| chances[a].total_cmp(&chances[b]));
    let n = order.len();
    let factor = factor(n) * n as f64;
    let mut adjusted = chances.to_vec();
    let mut least = 1.0_f64;
    for (rank, &k) in order.iter().enumerate().rev() {
        least = least.min(chances[k] * factor / (rank + 1) as f64);
        adjusted[k] = least;
    }
    adjusted
}

/// Finds the values that differ from zero at a stated false-discovery rate, many times over, without sorting.
///
/// The step-up rule of Benjamini & Hochberg 1995 calls the k smallest probabilities of n, with the largest k for which
/// the k-th is at most k q/n. In terms of z = |value| / se: at least k values reach the z of k q/n. Starting from k = n
/// and counting again and again how many reach it gives that k.
#[derive(Debug)]
pub struct FalseDiscovery {
    rate: f64,
    /// By n: the z that the k-th value must reach, from k = 0 (not used) on.
    thresholds: Vec<OnceLock<Vec<f64>>>,
}

impl FalseDiscovery {
    /// At this rate, among at most `most` values.
    #[must_use]
    pub fn new(rate: f64, most: usize) -> Self {
        Self {
            rate,
            thresholds: (0..=most).map(|_| OnceLock::new()).collect(),
        }
    }

    /// The z that a value must exceed to be called different from zero among `z` (all of them there); infinity if none
    /// is.
    #[must_use]
    pub fn threshold(&self, z: &[f64]) -> f64 {
        let n = z.len();
        let Some(thresholds) = self.thresholds.get(n) else {
            return f64::INFINITY;
        };
        let thresholds = thresholds.get_or_init(|| {
            let n = n as f64;
            let of = |k: usize| z_of_chance(k as f64 * self.rate / n);
            (0..=z.len()).map(of).collect()
        });
        let mut k = n;
        while k > 0 {
            let least = thresholds[k]; // k <= n
            let reach = z.iter().map(|&z| usize::from(z >= least)).sum();
            if reach >= k {
                return least;
            }
            k = reach;
        }
        f64::INFINITY
    }
}

/// Times worked on at once, so that values which stand side by side are used together.
const TILE: usize = 8;

/// Calls the vorticities and divergences that differ from zero, among those of all polygons of each time that are there
/// and did not fail, each quantity by itself.
pub fn find_significant(block: &mut EstimateBlock, rule: &FalseDiscovery) {
    block.significant = [
        significant(&block.vorticity, &block.vorticity_se, block, rule),
        significant(&block.divergence, &block.divergence_se, block, rule),
    ];
}

fn significant(
    values: &[f64],
    errors: &[f64],
    block: &EstimateBlock,
    rule: &FalseDiscovery,
) -> Vec<bool> {
    let n = block.times.len();
    // Below 0 where there is no value to call.
    let of = |((&value, &error), &flag): ((&f64, &f64), &Flag)| -> f64 {
        match (flag < Flag::Fail, error > 0.0) {
            (true, true) => value.abs() / error,
            (true, false) => 0.0,
            (false, _) => -1.0,
        }
    };
    let z: Vec<f64> = values.iter().zip(errors).zip(&block.flag).map(of).collect();
    let mut calls = vec![false; z.len()];
    let mut at_time: [Vec<f64>; TILE] = std::array::from_fn(|_| Vec::new());
    for start in (0..n).step_by(TILE) {
        let times = start..n.min(start + TILE);
        at_time.iter_mut().for_each(Vec::clear);
        for column in z.chunks_exact(n) {
            for (at_time, &z) in at_time.iter_mut().zip(&column[times.clone()]) {
                if z >= 0.0 {
                    at_time.push(z);
                }
            }
        }
        let thresholds: [f64; TILE] = std::array::from_fn(|k| rule.threshold(&at_time[k]));
        for (calls, column) in calls.chunks_exact_mut(n).zip(z.chunks_exact(n)) {
            let cells = calls[times.clone()].iter_mut().zip(&column[times.clone()]);
            for ((call, &z), &threshold) in cells.zip(&thresholds) {
                *call = z >= threshold;
            }
        }
    }
    calls
}

/// The z that a standard normal value exceeds in size with this probability.
fn z_of_chance(chance: f64) -> f64 {
    if chance <= 0.0 {
        return f64::INFINITY;
    }
    if chance >= 1.0 {
        return 0.0;
    }
    // Newton's method on ln p, which is nearly a parabola, from the leading term of its asymptotic expansion.
    let mut z = (-2.0 * (chance * (1.0 - 0.5 * chance)).ln())
        .max(0.0)
        .sqrt();
    for _ in 0..50 {
        let p = libm::erfc(z * std::f64::consts::FRAC_1_SQRT_2);
        let density = (2.0 / std::f64::consts::PI).sqrt() * (-0.5 * z * z).exp();
        let step = (p / chance).ln() * p / density;
        z = (z + step).max(0.0);
        if step.abs() < 1e-13 * (1.0 + z) {
            break;
        }
    }
    z
}

#[cfg(test)]
mod tests {
    use super::*;

    /// SciPy 1.17: `2 * scipy.stats.norm.sf(z)`.
    #[test]
    fn chances_of_the_normal_distribution() {
        for (z, p) in [
            (0.0, 1.0),
            (1.0, 0.317_310_507_862_914_15),
            (1.959_963_984_540_054, 0.05),
            (6.0, 1.973_175_290_075_396e-9),
            (-2.5, 0.012_419_330_651_552_318),
        ] {
            assert!((chance_of(z * 3e-5, 3e-5) / p - 1.0).abs() < 1e-12, "{z}");
        }
        assert!((chance_of(1.0, 0.0) - 1.0).abs() < 1e-15);
        assert!((chance_of(f64::NAN, 1.0) - 1.0).abs() < 1e-15);
    }

    #[test]
    fn z_and_chance_are_inverse() {
        for chance in [1e-12, 1e-6, 0.000_3, 0.05, 0.3, 0.7, 0.99] {
            let z = z_of_chance(chance);
            assert!((chance_of(z, 1.0) / chance - 1.0).abs() < 1e-10, "{chance}");
        }
    }

    /// The counting rule calls the same values as the sorted probabilities.
    #[test]
    fn counting_gives_what_sorting_gives() {
        let mut state = 5_u64;
        let mut uniform = || {
            // Numerical Recipes' linear congruential generator (from memory); any other would do.
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1);
            (state >> 11) as f64 / (1_u64 << 53) as f64
        };
        let rule = FalseDiscovery::new(0.05, 60);
        for n in 1..=60 {
            for strength in [1.0, 2.0, 5.0] {
                let z: Vec<f64> = (0..n).map(|_| strength * -uniform().ln()).collect();
                let chances: Vec<f64> = z.iter().map(|&z| chance_of(z, 1.0)).collect();
                let threshold = rule.threshold(&z);
                for (z, p) in z.iter().zip(adjusted(&chances)) {
                    // Not where rounding decides.
                    if (p - 0.05).abs() > 1e-9 {
                        assert_eq!(*z >= threshold, p < 0.05, "{n} {z} {p}");
                    }
                }
            }
        }
        assert!(rule.threshold(&[]).is_infinite());
    }

    #[test]
    fn a_missing_value_takes_no_part() {
        let found = adjusted(&[0.01, f64::NAN, 0.04]);
        assert!((found[0] - 0.02).abs() < 1e-15 && (found[2] - 0.04).abs() < 1e-15);
        assert!(found[1].is_nan());
        assert!(adjusted(&[]).is_empty());
    }
}
