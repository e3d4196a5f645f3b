//! When a gain changed.

use nalgebra::Complex;

use super::spread::BlockSum;

type C = Complex<f64>;

/// Blocks on either side of a change, at least.
const LEAST: usize = 2;
/// Chance of so large an F by accident, times the number of splits tried (Bonferroni), at which a change is believed. A
/// network has some tens of stations.
const CHANCE: f64 = 2e-4;

/// A change between two blocks.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Split {
    /// First block after it.
    pub(super) block: usize,
    /// First and last block that it may as well be.
    pub(super) from: usize,
    pub(super) to: usize,
    /// By how much the gain changed.
    pub(super) change: f64,
    /// Whether the days of the station bear it out.
    pub(super) sure: bool,
}

/// The split that explains the blocks' gains best.
///
/// Gains of blocks, weighted by what each block says, with one mean or two: F = (S1 − S2)/2 / (S2/(2 n − 4)), with S the
/// weighted sums of squares. The interval holds the splits whose S2 is not larger than the least by more than the 95 % of
/// F with two degrees of freedom.
pub(super) fn find_split(sums: &[BlockSum]) -> Option<Split> {
    let there: Vec<(usize, C, f64)> = sums
        .iter()
        .enumerate()
        .filter(|(_, s)| s.bottom > 0.0)
        .map(|(b, s)| (b, s.top / s.bottom, s.bottom))
        .collect();
    let n = there.len();
    if n < 2 * LEAST + 1 {
        return None;
    }
    let mean = |part: &[(usize, C, f64)]| -> C {
        let weight: f64 = part.iter().map(|x| x.2).sum();
        part.iter().map(|x| x.1 * x.2).sum::<C>() / weight
    };
    let squares = |part: &[(usize, C, f64)]| -> f64 {
        let mean = mean(part);
        part.iter().map(|x| x.2 * (x.1 - mean).norm_sqr()).sum()
    };
    let one = squares(&there);
    let two = |k: usize| squares(&there[..k]) + squares(&there[k..]);
    let all: Vec<(usize, f64)> = (LEAST..=n - LEAST).map(|k| (k, two(k))).collect();
    let &(k, least) = all.iter().min_by(|a, b| a.1.total_cmp(&b.1))?;
    let freedom = (2 * n - 4) as f64;
    let f = 0.5 * (one - least) / (least / freedom).max(1e-12);
    let change = (mean(&there[k..]) - mean(&there[..k])).norm();
    // The upper tail of F with 2 and m degrees of freedom is (1 + 2 F/m)^(−m/2).
    let chance = (1.0 + 2.0 * f / freedom).powf(-0.5 * freedom) * all.len() as f64;
    // 95 % of F with 2 and m degrees of freedom: (m/2) (20^(2/m) − 1), in closed form.
    let limit = 0.5 * freedom * (20_f64.powf(2.0 / freedom) - 1.0);
    let allowed = least * (1.0 + 2.0 * limit / freedom);
    let near: Vec<usize> = all.iter().filter(|x| x.1 <= allowed).map(|x| x.0).collect();
    Some(Split {
        block: there[k].0,
        change,
        sure: chance <= CHANCE,
        from: there[near.first().copied().unwrap_or(k)].0,
        to: there[near.last().copied().unwrap_or(k)].0,
    })
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn sums(gains: impl Iterator<Item = f64>) -> Vec<BlockSum> {
        let of = |degrees: f64| BlockSum {
            top: C::from_polar(100.0, degrees.to_radians()),
            bottom: 100.0,
        };
        gains.map(of).collect()
    }

    #[test]
    fn a_turn_on_the_eleventh_day_is_found_and_noise_is_none() {
        let noise = |k: i32| f64::from((k * 7919) % 13 - 6) * 0.3;
        assert!(!find_split(&sums((0..30).map(noise))).unwrap().sure);
        let turned = (0..30).map(|k| noise(k) + if k < 10 { 0.0 } else { 8.0 });
        let found = find_split(&sums(turned)).unwrap();
        assert!(found.sure);
        assert_eq!(found.block, 10);
        assert!(found.from <= 10 && found.to >= 10 && found.to - found.from < 4);
    }

    #[test]
    fn too_few_blocks_have_no_change() {
        assert_eq!(find_split(&sums([0.0, 0.0, 30.0, 30.0].into_iter())), None);
    }
}
