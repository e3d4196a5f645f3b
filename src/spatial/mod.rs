//! The neighbour test (QARTOD test 11): each wind at an analysis time against what the stations around it say.
//!
//! # How
//!
//! 1. A wind W is predicted from the ten nearest stations that report, Σ Bⱼ Wⱼ with 2×2 weights Bⱼ that add up to the unit
//!    matrix: the best linear prediction under the wind-field model ([`crate::structure`]) whatever the mean wind is
//!    (universal kriging; leave-one-out as in Gandin 1988, MWR 116, 1137, and Lorenc 1981, MWR 109, 701, from memory;
//!    `methods.md` 6.3).
//! 2. The residual r = W − Σ Bⱼ Wⱼ has, by the same model, the variance `c_L S_L + c_T S_T + n + ½ Σ |Bⱼ|² nⱼ` per component:
//!    what the stations do not see of the wind between them, then site, instrument and age of each. A station at the
//!    edge of the network, or with few others about it, has a larger one, so wider limits.
//! 3. |r| beyond so many standard deviations is an *outlier*. The worst of a time is taken out first, the others are
//!    judged again without it, until none is left; then each outlier is judged once more without all others.
//! 4. A front is no fault of a sensor. An outlier is *supported* if a station near it departs likewise from what the
//!    others say of it, or if its own report before or after it departs likewise from the same prediction. What is supported is
//!    suspect; what is not fails. Where the report before or after is not known the outlier is suspect too: the
//!    newest report of a station never fails.
//!
//! So a vane that is turned and stays turned becomes suspect, not failed: [`crate::calibration`] is for that. A single
//! wild value that the station's own neighbours in space and time deny fails, and no polygon uses it.
//!
//! Weights are kept for classes of the model (its exponent, ratio of transverse to longitudinal, noise) and sets of
//! reporting stations; variances are exact for the weights used, so a class costs a little width, not honesty.

//!
//! # Measured
//!
//! On simulated networks of 40 stations 30 km apart, turbulence of 1.5 m/s, sensors of 0.3 m/s (`tests/neighbours.rs`):
//! squared deviations of sound stations are 2 on average, at the corners as well; single wild values of 8 to 15 m/s fail
//! all (82 of 82), of 5 to 8 m/s 35 of 44, of 3 to 5 m/s 2 of 34, and nothing else does; of a line with a jump of 8 m/s that
//! crosses the network none of 46,080 values fails and 36 are suspect. Of real reports 2 of 420,238 fail in a month of
//! Singapore (one-minute gusts of S106 that stand alone) and 33 are suspect; of typhoons Saola and Wipha none fails and one
//! is suspect in each.

mod block;
mod neighbourhood;
mod row;
mod support;

use std::collections::{BTreeSet, HashMap};

use rayon::prelude::*;

use self::block::BlockView;
use self::neighbourhood::Neighbourhood;
use self::row::{Key, Row};
use crate::align::WindBlock;
use crate::check::Flag;
use crate::settings::NeighbourLimits;
use crate::station::Network;
use crate::structure::StructureFunction;
use crate::time::Time;
use crate::units::Wind;

pub use support::Support;

/// By how much the wind of a station's reports before and after the one behind its value at a time differs from that,
/// m/s.
pub type OwnChanges<'a> = dyn Fn(usize, Time) -> Option<[Option<Wind>; 2]> + Sync + 'a;

/// A wind that its neighbours deny.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Outlier {
    /// Number of the block in the window, and of the time in the block.
    pub at: (usize, usize),
    /// What the neighbours say of it.
    pub deviation: Deviation,
    /// What speaks for it.
    pub support: Support,
}

/// A wind against the prediction from its neighbours.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Deviation {
    /// The station.
    pub station: usize,
    /// Reported minus predicted, m/s.
    pub residual: Wind,
    /// Variance of either component of it, m²/s².
    pub variance: f64,
    /// Neighbours that it was predicted from.
    pub neighbours: u32,
}

impl Deviation {
    /// |r| in standard deviations of a component; its square is χ² with two degrees of freedom if the model holds.
    #[must_use]
    pub fn size(&self) -> f64 {
        self.square().sqrt()
    }

    fn square(&self) -> f64 {
        let Wind { u, v } = self.residual;
        (u * u + v * v) / self.variance
    }
}

impl Outlier {
    /// [`Flag::Suspect`] if anything speaks for it or more must be known, else [`Flag::Fail`].
    #[must_use]
    pub fn flag(&self) -> Flag {
        match self.support {
            Support::None => Flag::Fail,
            _ => Flag::Suspect,
        }
    }
}

/// The neighbour test of one network.
#[derive(Clone)]
pub struct SpatialCheck {
    limits: NeighbourLimits,
    network: Network,
    spacing: f64,
    /// For each station those that it is predicted from.
    around: Vec<Neighbourhood>,
    /// For each station those that are predicted from it.
    seen_by: Vec<Vec<usize>>,
    /// Stations that reported when the neighbourhoods were chosen.
    reporting: Vec<bool>,
    rows: HashMap<Key, Option<Row>>,
}

/// Weights kept, for each station, before all are found anew: some kB each.
const ROWS_PER_STATION: usize = 64;

impl SpatialCheck {
    /// Prepares the test for a network with stations `spacing` m apart.
    #[must_use]
    pub fn new(network: &Network, spacing: f64, limits: NeighbourLimits) -> Self {
        let mut check = Self {
            limits,
            network: network.clone(),
            spacing,
            around: Vec::new(),
            seen_by: Vec::new(),
            reporting: Vec::new(),
            rows: HashMap::new(),
        };
        check.choose(vec![true; network.len()]);
        check
    }

    /// Judges all winds of a window with the structure function at each time of each block; outliers by block, time and
    /// station. Winds with a flag of [`Flag::Fail`] or worse are neither judged nor used. `changes` gives, for a station
    /// and an analysis time, by how much its reports before and after differ from the one judged
    /// ([`crate::align::Aligner::changes_around`]); where it gives nothing the values at other analysis times are
    /// looked at instead.
    ///
    /// The result depends on the blocks of the window, not on the number of threads.
    pub fn judge(
        &mut self,
        winds: &[WindBlock],
        models: &[Vec<StructureFunction>],
        changes: &OwnChanges,
    ) -> Vec<Outlier> {
        self.follow_reporting(winds);
        let views: Vec<BlockView> = winds
            .par_iter()
            .zip(models)
            .map(|(block, models)| BlockView::new(self, block, models))
            .collect();
        self.prepare(&views);
        let this = &*self;
        let of_blocks: Vec<Vec<Outlier>> = (0..views.len())
            .into_par_iter()
            .map(|b| this.judge_block(&views, b, changes))
            .collect();
        of_blocks.concat()
    }

    /// What the neighbours say of a station at a time of a block, all of them trusted; `None` if too few of them report.
    #[must_use]
    pub fn deviation(
        &self,
        block: &WindBlock,
        models: &[StructureFunction],
        station: usize,
        t: usize,
    ) -> Option<Deviation> {
        let view = BlockView::new(self, block, models);
        view.deviation(self, &mut HashMap::new(), station, t, &[])
    }

    /// True if a station has a wind, and enough neighbours have, at a time of a block.
    #[must_use]
    pub fn can_judge(&self, block: &WindBlock, station: usize, t: usize) -> bool {
        let there = |s: usize| block.flag[s * block.times.len() + t].is_usable();
        let others = &self.around[station].others;
        let count = others.iter().filter(|(other, _)| there(*other)).count();
        there(station) && count >= self.limits.least_neighbours as usize
    }

    fn follow_reporting(&mut self, winds: &[WindBlock]) {
        let mut reporting = vec![false; self.network.len()];
        for block in winds {
            for (reports, n) in reporting.iter_mut().zip(block.values()) {
                *reports |= n > 0;
            }
        }
        if reporting != self.reporting && reporting.contains(&true) {
            self.choose(reporting);
        }
    }

    /// Chooses the neighbourhoods among the stations that report.
    fn choose(&mut self, reporting: Vec<bool>) {
        self.around = neighbourhood::choose(&self.network, self.spacing, &reporting);
        self.seen_by = vec![Vec::new(); self.network.len()];
        for (station, around) in self.around.iter().enumerate() {
            for other in &around.others {
                self.seen_by[other.0].push(station);
            }
        }
        self.rows.clear();
        self.reporting = reporting;
    }

    /// Finds the weights that the blocks need and that are not known yet.
    fn prepare(&mut self, views: &[BlockView]) {
        if self.rows.len() > ROWS_PER_STATION * self.network.len() {
            self.rows.clear();
        }
        let rows = &self.rows;
        let keys: BTreeSet<Key> = views.par_iter().map(|view| view.keys(self, rows)).reduce(
            BTreeSet::new,
            |mut all, more| {
                all.extend(more);
                all
            },
        );
        let found: Vec<(Key, Option<Row>)> = keys
            .into_iter()
            .collect::<Vec<_>>()
            .into_par_iter()
            .map(|key| (key, self.row(key)))
            .collect();
        self.rows.extend(found);
    }

    fn row(&self, key: Key) -> Option<Row> {
        let least = self.limits.least_neighbours;
        Row::new(&self.around[key.station], self.spacing, key, least)
    }

    fn judge_block(&self, views: &[BlockView], b: usize, changes: &OwnChanges) -> Vec<Outlier> {
        let view = &views[b];
        let mut own = HashMap::new();
        let mut outliers = Vec::new();
        for (t, stations) in view.candidates(self, self.limits.deviations) {
            let taken_out = self.worst_first(view, &mut own, t, &stations);
            outliers.extend(taken_out.into_iter().map(|deviation| (t, deviation)));
        }
        support::supported(self, views, b, &mut own, &outliers, changes)
    }

    /// The outliers of a time, the worst taken out first.
    fn worst_first(
        &self,
        view: &BlockView,
        own: &mut HashMap<Key, Option<Row>>,
        t: usize,
        candidates: &[usize],
    ) -> Vec<Deviation> {
        let limit = self.limits.deviations * self.limits.deviations;
        let mut taken_out: Vec<usize> = Vec::new();
        let beyond = |s: usize, out: &[usize], own: &mut HashMap<Key, Option<Row>>| {
            let found = view.deviation(self, own, s, t, out);
            found.filter(|d| d.square() > limit)
        };
        let mut left: Vec<Deviation> = candidates
            .iter()
            .filter_map(|&s| beyond(s, &taken_out, own))
            .collect();
        // The first of equals is that of the lowest number.
        while let Some(worst) = left
            .iter()
            .copied()
            .reduce(|a, b| if b.square() > a.square() { b } else { a })
        {
            taken_out.push(worst.station);
            left.retain(|d| d.station != worst.station);
            for &s in &self.seen_by[worst.station] {
                if !taken_out.contains(&s) {
                    left.retain(|d| d.station != s);
                    left.extend(beyond(s, &taken_out, own));
                }
            }
            left.sort_by_key(|d| d.station);
        }
        taken_out.sort_unstable();
        let others =
            |s: usize| -> Vec<usize> { taken_out.iter().copied().filter(|&o| o != s).collect() };
        taken_out
            .iter()
            .filter_map(|&s| beyond(s, &others(s), own))
            .collect()
    }
}

#[cfg(test)]
mod tests;
