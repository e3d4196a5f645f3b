//! Which of many values differ from zero.

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
    fn a_missing_value_takes_no_part() {
        let found = adjusted(&[0.01, f64::NAN, 0.04]);
        assert!((found[0] - 0.02).abs() < 1e-15 && (found[2] - 0.04).abs() < 1e-15);
        assert!(found[1].is_nan());
        assert!(adjusted(&[]).is_empty());
    }
}
