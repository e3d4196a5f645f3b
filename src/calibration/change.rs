//! When a gain changed: none, one or several times.
//!
//! Binary segmentation (Scott and Knott 1974, Biometrics 30, 507): the split that explains the blocks' gains best divides
//! the record if it is sure, and each part is searched again. A state that begins and ends hides from a single split, so
//! where none is sure, stretches inside the part are tried against what lies around them (circular segmentation, Olshen
//! and others 2004, Biostatistics 5, 557). In the end each split is found again between its neighbours (Bai 1997,
//! Econometric Theory 13, 315). All from memory.

use std::ops::Range;

use nalgebra::Complex;

use super::spread::BlockSum;

type C = Complex<f64>;

/// Blocks of a part, at least.
const LEAST: usize = 2;
/// Blocks that a single split needs.
const LEAST_BLOCKS: usize = 2 * LEAST + 1;
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
}

/// What the blocks of a station say of its gain, summed up so that any stretch of them is two subtractions away.
pub(super) struct Blockwise {
    /// Number of each block that has values.
    number: Vec<usize>,
    /// Sums of weight, weight × gain, and weight × |gain|² of the blocks before each.
    before: Vec<(f64, C, f64)>,
}

/// The best division of a part.
struct Best {
    /// Inside of the stretch that stands out; of a single split all that comes after it.
    inside: Range<usize>,
    change: f64,
    chance: f64,
    /// First and last start of a single split that is not worse by more than chance.
    may_be: [usize; 2],
}

impl Blockwise {
    /// Of sums with the station's whole gain in them (`top` / `bottom` is the block's gain).
    pub(super) fn new(sums: &[BlockSum]) -> Self {
        let mut number = Vec::new();
        let (mut weight, mut first, mut second) = (0.0, C::default(), 0.0);
        let mut before = vec![(weight, first, second)];
        for (block, sum) in sums.iter().enumerate().filter(|(_, s)| s.bottom > 0.0) {
            let gain = sum.top / sum.bottom;
            weight += sum.bottom;
            first += sum.bottom * gain;
            second += sum.bottom * gain.norm_sqr();
            number.push(block);
            before.push((weight, first, second));
        }
        Self { number, before }
    }

    /// Size of the best single change of the whole record.
    pub(super) fn best_change(&self) -> Option<f64> {
        Some(self.single(&(0..self.number.len()))?.change)
    }

    /// The changes that are sure and at least so large, in the order of time.
    pub(super) fn changes(&self, least: f64) -> Vec<Split> {
        let n = self.number.len();
        let mut starts = Vec::new();
        let mut parts = Vec::from([Range { start: 0, end: n }]);
        while let Some(part) = parts.pop() {
            let sure = |best: &Best| best.chance <= CHANCE && best.change >= least;
            let single = self.single(&part).filter(sure);
            let Some(best) = single.or_else(|| self.stretch(&part).filter(sure)) else {
                continue;
            };
            let Range { start, end } = best.inside;
            starts.push(start);
            parts.push(part.start..start);
            parts.push(start..end);
            if end < part.end {
                starts.push(end);
                parts.push(end..part.end);
            }
        }
        starts.sort_unstable();
        // Each again between its neighbours: a first split was found with the later ones still hidden in its parts.
        let around = |starts: &[usize], k: usize| {
            let from = k.checked_sub(1).map_or(0, |before| starts[before]);
            from..starts.get(k + 1).copied().unwrap_or(n)
        };
        for _ in 0..2 {
            for k in 0..starts.len() {
                if let Some(best) = self.single(&around(&starts, k)) {
                    starts[k] = best.inside.start;
                }
            }
        }
        let split = |k: usize| {
            let part = around(&starts, k);
            let near = self.single(&part).map(|best| best.may_be);
            let [from, to] = near.unwrap_or([starts[k]; 2]);
            Split {
                block: self.number[starts[k]],
                from: self.number[from],
                to: self.number[to],
                change: (self.mean(starts[k]..part.end) - self.mean(part.start..starts[k])).norm(),
            }
        };
        let all = (0..starts.len()).map(split);
        all.filter(|split| split.change >= least).collect()
    }

    /// The split into two that explains the gains of a part best.
    ///
    /// Gains of blocks, weighted by what each block says, with one mean or two: F = (S1 − S2)/2 / (S2/(2 n − 4)), with S
    /// the weighted sums of squares. The interval holds the splits whose S2 is not larger than the least by more than the
    /// 95 % of F with two degrees of freedom.
    fn single(&self, part: &Range<usize>) -> Option<Best> {
        let n = part.len();
        if n < LEAST_BLOCKS {
            return None;
        }
        let two = |k: usize| self.squares(part.start..k) + self.squares(k..part.end);
        let tried = part.start + LEAST..=part.end - LEAST;
        let all: Vec<(usize, f64)> = tried.map(|k| (k, two(k))).collect();
        let &(k, least) = all.iter().min_by(|a, b| a.1.total_cmp(&b.1))?;
        let freedom = (2 * n - 4) as f64;
        // 95 % of F with 2 and m degrees of freedom: (m/2) (20^(2/m) − 1), in closed form.
        let limit = 0.5 * freedom * (20_f64.powf(2.0 / freedom) - 1.0);
        let allowed = least * (1.0 + 2.0 * limit / freedom);
        let mut near = all.iter().filter(|x| x.1 <= allowed).map(|x| x.0);
        let first = near.next().unwrap_or(k);
        Some(Best {
            inside: k..part.end,
            change: (self.mean(k..part.end) - self.mean(part.start..k)).norm(),
            chance: self.chance(part, least, all.len()),
            may_be: [first, near.next_back().unwrap_or(first)],
        })
    }

    /// The stretch inside a part that differs most from what lies on both sides of it.
    fn stretch(&self, part: &Range<usize>) -> Option<Best> {
        let outside = |i: usize, j: usize| -> (f64, C, f64) {
            let (a, b) = (self.sums(part.start..i), self.sums(j..part.end));
            (a.0 + b.0, a.1 + b.1, a.2 + b.2)
        };
        let mut best: Option<(Range<usize>, f64)> = None;
        let mut tried = 0;
        for i in part.start + LEAST..=part.end.saturating_sub(2 * LEAST) {
            for j in i + LEAST..=part.end - LEAST {
                let two = self.squares(i..j) + squares(outside(i, j));
                tried += 1;
                if best.as_ref().is_none_or(|(_, least)| two < *least) {
                    best = Some((i..j, two));
                }
            }
        }
        let (inside, least) = best?;
        let around = outside(inside.start, inside.end);
        Some(Best {
            change: (self.mean(inside.clone()) - around.1 / around.0).norm(),
            chance: self.chance(part, least, tried),
            may_be: [inside.start; 2],
            inside,
        })
    }

    /// Chance that the best of so many divisions leaves so little by accident. The upper tail of F with 2 and m degrees of
    /// freedom is (1 + 2 F/m)^(−m/2).
    fn chance(&self, part: &Range<usize>, least: f64, tried: usize) -> f64 {
        let freedom = (2 * part.len() - 4) as f64;
        let f = 0.5 * (self.squares(part.clone()) - least) / (least / freedom).max(1e-12);
        (1.0 + 2.0 * f / freedom).powf(-0.5 * freedom) * tried as f64
    }

    fn sums(&self, part: Range<usize>) -> (f64, C, f64) {
        let (a, b) = (self.before[part.start], self.before[part.end]);
        (b.0 - a.0, b.1 - a.1, b.2 - a.2)
    }

    fn squares(&self, part: Range<usize>) -> f64 {
        squares(self.sums(part))
    }

    fn mean(&self, part: Range<usize>) -> C {
        let (weight, first, _) = self.sums(part);
        first / weight
    }
}

/// Weighted sum of squares about the mean.
fn squares((weight, first, second): (f64, C, f64)) -> f64 {
    (second - first.norm_sqr() / weight).max(0.0)
}

#[cfg(test)]
#[expect(clippy::panic, reason = "a test may panic")]
mod tests {
    use super::*;

    fn blocks(gains: impl Iterator<Item = f64>) -> Blockwise {
        let of = |degrees: f64| BlockSum {
            top: C::from_polar(100.0, degrees.to_radians()),
            bottom: 100.0,
        };
        Blockwise::new(&gains.map(of).collect::<Vec<_>>())
    }

    /// Within ±1.8 degrees, without order.
    fn noise(k: i32) -> f64 {
        f64::from((k * 7919) % 13 - 6) * 0.3
    }

    fn found(gain: impl Fn(i32) -> f64, days: i32) -> Vec<Split> {
        blocks((0..days).map(|k| gain(k) + noise(k))).changes(0.05)
    }

    #[test]
    fn a_turn_on_the_eleventh_day_is_found_and_noise_is_none() {
        assert_eq!(found(|_| 0.0, 30), []);
        let turned = found(|k| if k < 10 { 0.0 } else { 8.0 }, 30);
        let [split] = turned[..] else {
            panic!("{turned:?}");
        };
        assert_eq!(split.block, 10);
        assert!(split.from <= 10 && split.to >= 10 && split.to - split.from < 4);
    }

    #[test]
    fn a_vane_turned_on_day_8_and_put_right_on_day_20() {
        let there_and_back = found(|k| if (8..20).contains(&k) { 12.0 } else { 0.0 }, 30);
        let at: Vec<usize> = there_and_back.iter().map(|s| s.block).collect();
        assert_eq!(at, [8, 20]);
        assert!(there_and_back.iter().all(|s| s.to - s.from < 4));
        // The closer to the middle and the shorter, the less a single split sees of it.
        let short = found(|k| if (14..17).contains(&k) { 10.0 } else { 0.0 }, 30);
        let at: Vec<usize> = short.iter().map(|s| s.block).collect();
        assert_eq!(at, [14, 17]);
    }

    #[test]
    fn turns_by_different_amounts() {
        let turns = |k: i32| match k {
            0..9 => 0.0,
            9..22 => 10.0,
            22..33 => 26.0,
            _ => 5.0,
        };
        let at: Vec<usize> = found(turns, 40).iter().map(|s| s.block).collect();
        assert_eq!(at, [9, 22, 33]);
    }

    #[test]
    fn too_few_blocks_have_no_change() {
        assert_eq!(blocks([0.0, 0.0, 30.0, 30.0].into_iter()).changes(0.05), []);
        assert_eq!(blocks([].into_iter()).best_change(), None);
    }

    /// Days whose angles and logarithms err alike and independently (2 degrees): a change is asked to be 2·10⁻⁴ probable or
    /// less in either search, and later parts add to it. At most 6 in 3000 records.
    #[test]
    fn noise_gives_no_change() {
        use rand::SeedableRng;
        use rand_distr::{Distribution, StandardNormal};
        let mut random = rand_chacha::ChaCha8Rng::seed_from_u64(5);
        let mut falsely = 0;
        for _ in 0..3000 {
            let mut error = || -> f64 {
                let e: f64 = StandardNormal.sample(&mut random);
                0.035 * e
            };
            let mut day = || BlockSum {
                top: C::from_polar(100.0 * error().exp(), error()),
                bottom: 100.0,
            };
            let days: Vec<BlockSum> = (0..30).map(|_| day()).collect();
            let found = Blockwise::new(&days).changes(0.0);
            falsely += usize::from(!found.is_empty());
        }
        assert!(falsely <= 6, "{falsely} of 3000");
    }
}
