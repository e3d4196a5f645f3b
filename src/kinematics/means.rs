//! Means of the quantities by hour of the day, calendar day, month, or named period.

use std::collections::BTreeMap;

use super::{KinematicsBlock, QUANTITIES, Quantity};
use crate::integral::{Group, MeanError, Statistics, groups_of};
use crate::settings::MeansSettings;
use crate::time::Time;

/// Statistics over each group of times; polygons × [`Quantity::ALL`].
///
/// The error of a mean is that of [`MeanError`]: the part of instruments and sites persists, that of sampling and timing
/// lasts as long as the wind between the stations does. For quantities that are no linear forms of the winds it is taken
/// that an error acts in the same sense at all times, which makes the persistent part too large rather than too small. Of
/// directions and axes there are no means. Quantities that are suppressed at some times have means of the others, so
/// their parts need not add up.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct KinematicMeans(pub BTreeMap<Group, Vec<Statistics>>);

impl KinematicMeans {
    /// True if a quantity has a mean: directions and axes have none.
    #[must_use]
    pub fn has(quantity: Quantity) -> bool {
        !matches!(quantity, Quantity::MeanDirection | Quantity::DilatationAxis)
    }

    /// Those of a block; `persistent` is the same with the errors that persist, `lasting` says for each polygon how long
    /// the others last, s.
    #[must_use]
    pub fn of(
        block: &KinematicsBlock,
        persistent: &KinematicsBlock,
        lasting: &[f64],
        settings: &MeansSettings,
    ) -> Self {
        let n = block.times.len();
        let mut out = Self::default();
        let (mut values, mut times): (Vec<f64>, Vec<Time>) = Default::default();
        for (group, range) in groups_of(&block.times, settings) {
            let mut found = Vec::with_capacity(lasting.len() * QUANTITIES);
            for (p, &lasting) in (0..block.cells.len() / n.max(1)).zip(lasting) {
                for quantity in Quantity::ALL {
                    values.clear();
                    times.clear();
                    let mut error = MeanError::new(lasting);
                    let wanted = range.clone().filter(|_| Self::has(quantity));
                    for t in wanted {
                        let cell = p * n + t;
                        let Some((value, all)) = block.cells[cell].get(quantity) else {
                            continue;
                        };
                        let lasts = persistent.cells[cell].get(quantity);
                        let lasts = lasts.map_or(all, |(_, lasts)| lasts.min(all));
                        let passes = (all * all - lasts * lasts).sqrt();
                        values.push(value);
                        times.push(block.times[t]);
                        error.add(block.times[t], lasts, passes);
                    }
                    found.push(Statistics::of(&values, &times, 0, error));
                }
            }
            out.add(group, &found);
        }
        out
    }

    /// Takes in those of a later block.
    pub fn merge(&mut self, later: &Self) {
        for (&group, statistics) in &later.0 {
            self.add(group, statistics);
        }
    }

    fn add(&mut self, group: Group, later: &[Statistics]) {
        let all = self.0.entry(group).or_default();
        all.resize(all.len().max(later.len()), Statistics::default());
        for (a, b) in all.iter_mut().zip(later) {
            a.merge(b);
        }
    }
}
