//! What pictures and pages keep of a run: estimates and winds at some times.

use crate::check::Flag;
use crate::integral::Cause;
use crate::pipeline::BlockView;
use crate::time::Time;
use crate::units::Wind;

/// Times kept at most, so that a page stays small: two days at 5 minutes.
const MOST_TIMES: usize = 600;
/// Estimates kept at most, all polygons together.
const MOST_CELLS: usize = 100_000;

/// One polygon at one time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Cell {
    /// Vorticity and divergence, 1/s.
    pub value: [f64; 2],
    /// Their standard errors, 1/s.
    pub error: [f64; 2],
    /// Whether they differ from zero.
    pub significant: [bool; 2],
    /// The flag; values mean nothing where it is not usable.
    pub flag: Flag,
    /// Why it is flagged.
    pub cause: Option<Cause>,
}

/// All polygons of the whole network and all stations at one time.
#[derive(Debug, Clone, PartialEq)]
pub struct Frame {
    /// When.
    pub time: Time,
    /// For each polygon its estimate.
    pub cells: Vec<Cell>,
    /// For each station its wind, with the worst flag behind it.
    pub winds: Vec<(Option<Wind>, Flag)>,
}

impl Frame {
    /// The largest value of a quantity (0 vorticity, 1 divergence) that no check found fault with, by its size.
    fn largest(&self, quantity: usize) -> f64 {
        let sound = self.cells.iter().filter(|cell| cell.flag <= Flag::Pass);
        let sizes = sound.map(|cell| cell.value[quantity].abs());
        sizes.fold(0.0, f64::max)
    }
}

/// Frames of a run: all of a short one; of a long one every second, fourth, ... analysis time, so that as many are kept
/// as a page can hold.
#[derive(Debug)]
pub struct Frames {
    most: usize,
    seen: u64,
    /// Every so many analysis times one was kept.
    pub every: u64,
    /// Those kept, in the order of time.
    pub kept: Vec<Frame>,
    /// Those with the strongest vorticity and divergence of all times.
    pub strongest: [Option<Frame>; 2],
    wanted: Vec<Time>,
    /// For each time asked for the nearest one.
    pub at: Vec<Frame>,
}

impl Frames {
    /// No frames yet, of a network with so many polygons; those nearest to the times of `wanted` are kept besides.
    #[must_use]
    pub fn new(polygons: usize, wanted: &[Time]) -> Self {
        Self {
            most: (MOST_CELLS / polygons.max(1)).clamp(24, MOST_TIMES),
            seen: 0,
            every: 1,
            kept: Vec::new(),
            strongest: [None, None],
            wanted: wanted.to_vec(),
            at: Vec::new(),
        }
    }

    /// The frames of a block; `polygons` are those of the whole network.
    #[must_use]
    pub fn of(seen: &BlockView, polygons: usize) -> Vec<Frame> {
        let (block, winds) = (seen.estimates, seen.winds);
        let n = block.times.len();
        let stations = winds.u.len() / n.max(1);
        let cell = |cell: usize| Cell {
            value: [block.vorticity[cell], block.divergence[cell]],
            error: [block.vorticity_se[cell], block.divergence_se[cell]],
            significant: [0, 1].map(|q| block.significant[q].get(cell).is_some_and(|&s| s)),
            flag: block.flag[cell],
            cause: block.causes.get(cell).copied().flatten(),
        };
        let wind = |cell: usize| {
            let flag = winds.flag[cell];
            let (u, v) = (winds.u[cell], winds.v[cell]);
            (flag.is_usable().then_some(Wind { u, v }), flag)
        };
        (0..n)
            .map(|t| Frame {
                time: block.times[t],
                cells: (0..polygons).map(|p| cell(p * n + t)).collect(),
                winds: (0..stations).map(|s| wind(s * n + t)).collect(),
            })
            .collect()
    }

    /// Adds the frames of a block, in the order of time.
    pub fn add(&mut self, frames: Vec<Frame>) {
        for frame in frames {
            for quantity in 0..2 {
                let strongest = &mut self.strongest[quantity];
                let before = strongest.as_ref().map_or(-1.0, |s| s.largest(quantity));
                if frame.largest(quantity) > before {
                    *strongest = Some(frame.clone());
                }
            }
            if self.at.is_empty() {
                self.at = vec![frame.clone(); self.wanted.len()];
            }
            for (at, wanted) in self.at.iter_mut().zip(&self.wanted) {
                let away = |frame: &Frame| frame.time.micros().abs_diff(wanted.micros());
                if away(&frame) < away(at) {
                    *at = frame.clone();
                }
            }
            if self.seen.is_multiple_of(self.every) {
                self.kept.push(frame);
            }
            self.seen += 1;
            if self.kept.len() > self.most {
                // Every second one, the first among them.
                let mut k = 0;
                self.kept.retain(|_| {
                    k += 1;
                    k % 2 == 1
                });
                self.every *= 2;
            }
        }
    }

    /// Those kept and those with the strongest values, in the order of time.
    #[must_use]
    pub fn shown(&self) -> Vec<&Frame> {
        let mut shown: Vec<&Frame> = self.kept.iter().collect();
        shown.extend(self.strongest.iter().flatten());
        shown.sort_by_key(|frame| frame.time);
        shown.dedup_by_key(|frame| frame.time);
        shown
    }

    /// Analysis times of the run.
    #[must_use]
    pub fn times(&self) -> u64 {
        self.seen
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn frame(minute: i64, value: f64) -> Frame {
        let cell = Cell {
            value: [value, -value],
            error: [1e-5; 2],
            significant: [false; 2],
            flag: Flag::Pass,
            cause: None,
        };
        Frame {
            time: Time::from_micros(minute * 60_000_000),
            cells: vec![cell],
            winds: Vec::new(),
        }
    }

    #[test]
    fn long_runs_are_thinned_evenly_and_keep_their_peak() {
        let wanted = Time::from_micros(777 * 60_000_000);
        let mut frames = Frames::new(1, &[wanted]);
        for block in 0..250 {
            let minutes = (10 * block)..(10 * block + 10);
            frames.add(
                minutes
                    .map(|m| frame(m, if m == 1001 { -9e-4 } else { 1e-5 }))
                    .collect(),
            );
        }
        assert_eq!((frames.times(), frames.every), (2500, 8));
        assert_eq!(frames.kept.len(), 313);
        let minutes: Vec<i64> = frames
            .kept
            .iter()
            .map(|f| f.time.micros() / 60_000_000)
            .collect();
        assert!(minutes.windows(2).all(|w| w[1] - w[0] == 8));
        let at = |frame: &Frame| frame.time.micros() / 60_000_000;
        assert_eq!(frames.strongest[0].as_ref().map(at), Some(1001));
        assert_eq!(frames.strongest[1].as_ref().map(at), Some(1001));
        assert_eq!(frames.at.iter().map(at).collect::<Vec<_>>(), [777]);
        let shown: Vec<i64> = frames.shown().into_iter().map(at).collect();
        assert_eq!(shown.len(), 314);
        assert!(shown.is_sorted() && shown.contains(&1001));
    }
}
