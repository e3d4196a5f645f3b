//! The structure function at each time of a run, from a trailing window.

use std::collections::VecDeque;

use super::fit::fit;
use super::function::{StructureFunction, StructureSettings};
use super::geometry::NetworkGeometry;
use super::shape::Shape;
use super::sums::{BlockSums, StructureSums};
use crate::time::Time;

/// Parts of the window; the window moves by one of them at a time.
const BINS: i64 = 24;

/// The shape is found anew after so many bins, and at each of the first times of a run: it is that of a whole day, and
/// takes longer to find than all else. So is the law in time, which is found anew with each bin.
const BINS_PER_SHAPE: i64 = 3;
const FIRST_TIMES: u64 = 8;

/// Sums of the trailing window, taken in in the order of time.
///
/// Bins are cut by absolute time, so the result does not depend on how the run is cut into blocks; a run that starts
/// later agrees once it has a window's length behind it (to e^(−window/memory) in the weights of the last hours).
#[derive(Debug, Clone)]
pub struct StructureWindow {
    settings: StructureSettings,
    /// Number of a bin and its sums, ascending.
    bins: VecDeque<(i64, StructureSums)>,
    /// Sum of all bins but the last.
    whole: StructureSums,
    recent: StructureSums,
    last: Option<Time>,
    /// Times taken in.
    taken: u64,
    shape: Shape,
    current: StructureFunction,
}

/// Mean squared differences of one class of distance.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct StructureRow {
    /// The distance that stands for the class, m.
    pub distance: f64,
    /// Pairs, each counted at every time.
    pub pairs: f64,
    /// Along the line between the stations, less instrument variances, m²/s²; below 0 where these are stated too large.
    pub longitudinal: f64,
    /// Across it, m²/s².
    pub transverse: f64,
    /// The structure function there, m²/s².
    pub fitted_longitudinal: f64,
    /// The structure function there, m²/s². It follows the last hours, and what a wind that varies linearly adds to the
    /// differences is not in it.
    pub fitted_transverse: f64,
}

impl StructureWindow {
    /// An empty window: the prior.
    #[must_use]
    pub fn new(geometry: &NetworkGeometry, settings: StructureSettings) -> Self {
        Self {
            settings,
            bins: VecDeque::new(),
            whole: StructureSums::default(),
            recent: StructureSums::default(),
            last: None,
            taken: 0,
            shape: Shape::prior(&settings),
            current: settings.prior(geometry.spacing),
        }
    }

    /// The structure function as it stands.
    #[must_use]
    pub fn current(&self) -> &StructureFunction {
        &self.current
    }

    /// Sums of the whole window, for tables.
    #[must_use]
    pub fn sums(&self) -> StructureSums {
        let mut sums = self.whole;
        if let Some((_, last)) = self.bins.back() {
            sums.add(last, 1.0);
        }
        sums
    }

    /// The mean squared differences of the window by class of distance, and the law beside them; classes without pairs
    /// are left out.
    #[must_use]
    pub fn table(&self, geometry: &NetworkGeometry) -> Vec<StructureRow> {
        let sums = self.sums();
        let filled = sums.pairs.iter().enumerate().filter(|(_, c)| c.count > 0.0);
        let rows = filled.map(|(k, class)| {
            let distance = geometry.class_distance[k] * geometry.spacing;
            let [along, across] = self.current.at(distance);
            let sites = 2.0 * self.current.site_variance;
            StructureRow {
                distance,
                pairs: class.count,
                longitudinal: class.along / class.count,
                transverse: class.across / class.count,
                fitted_longitudinal: sites + along,
                fitted_transverse: sites + across,
            }
        });
        rows.collect::<Vec<_>>().into_iter().rev().collect()
    }

    /// Takes in the sums of a block and gives the structure function at each of `times` (ascending, those of the
    /// block): from the sums at and before the time. Sums that are not later than those before them are not taken in
    /// again.
    pub fn advance(
        &mut self,
        geometry: &NetworkGeometry,
        sums: &BlockSums,
        times: &[Time],
    ) -> Vec<StructureFunction> {
        let mut next = sums.at.iter().peekable();
        times
            .iter()
            .map(|&time| {
                while let Some((at, of_time)) = next.next_if(|(at, _)| *at <= time) {
                    self.take_in(geometry, *at, of_time);
                }
                self.current
            })
            .collect()
    }

    fn take_in(&mut self, geometry: &NetworkGeometry, time: Time, sums: &StructureSums) {
        let since = match self.last {
            Some(last) if last >= time => return,
            Some(last) => time.micros().saturating_sub(last.micros()) as f64 * 1e-6,
            None => f64::INFINITY,
        };
        self.last = Some(time);
        // Times that follow each other closely say nearly the same.
        let mut sums = *sums;
        sums.independent *= (since / self.settings.independent_after).min(1.0);
        self.recent = self.recent.scaled((-since / self.settings.memory).exp());
        self.recent.add(&sums, 1.0);

        let bin = time.micros().div_euclid(self.bin_length());
        let period = |bin: i64| bin.div_euclid(BINS_PER_SHAPE);
        let new_period = self.bins.back().is_none_or(|b| period(b.0) != period(bin));
        let new_bin = self.bins.back().is_none_or(|b| b.0 != bin);
        match self.bins.back_mut() {
            Some((last, of_bin)) if *last == bin => of_bin.add(&sums, 1.0),
            _ => {
                while self.bins.front().is_some_and(|b| b.0 <= bin - BINS) {
                    self.bins.pop_front();
                }
                self.whole = StructureSums::default();
                for (_, of_bin) in &self.bins {
                    self.whole.add(of_bin, 1.0);
                }
                self.bins.push_back((bin, sums));
            }
        }
        let window = self.sums();
        if new_period || self.taken < FIRST_TIMES {
            self.shape = Shape::of(geometry, &self.settings, &window);
        }
        let temporal = (!new_bin && self.taken >= FIRST_TIMES).then_some(self.current.temporal);
        self.taken += 1;
        let (settings, shape) = (&self.settings, &self.shape);
        self.current = fit(geometry, settings, shape, &window, &self.recent, temporal);
    }

    /// μs
    fn bin_length(&self) -> i64 {
        #[expect(
            clippy::cast_possible_truncation,
            reason = "saturates, and windows are far below 2^63 µs"
        )]
        let length = (self.settings.window / BINS as f64 * 1e6) as i64;
        length.max(1)
    }
}
