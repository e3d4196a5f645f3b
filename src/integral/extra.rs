//! Estimates of polygons that stand at some times only.

use super::{CauseBooks, EstimateBlock, Extremes, RunStatistics};
use crate::check::Flag;
use crate::polygon::StationPolygon;

/// A triangle that fills the hole of a missing station at some times.
#[derive(Debug, Clone, PartialEq)]
pub struct ExtraPolygon {
    /// Its number in the run, after those of the polygons of the whole network.
    pub number: usize,
    /// The polygon; the edges of its path are those of no common set.
    pub polygon: StationPolygon,
    /// Its planetary vorticity, 1/s.
    pub planetary: f64,
}

impl EstimateBlock {
    /// Appends the polygons of another block of the same times.
    pub fn append(&mut self, other: Self, extra: Vec<ExtraPolygon>) {
        self.vorticity.extend(other.vorticity);
        self.vorticity_se.extend(other.vorticity_se);
        self.divergence.extend(other.divergence);
        self.divergence_se.extend(other.divergence_se);
        self.flag.extend(other.flag);
        self.age.extend(other.age);
        for (own, more) in [
            (&mut self.budget.vorticity, other.budget.vorticity),
            (&mut self.budget.divergence, other.budget.divergence),
        ] {
            own.instrument.extend(more.instrument);
            own.sampling.extend(more.sampling);
            own.timing.extend(more.timing);
        }
        self.extra.extend(extra);
    }

    /// Takes the value of a cell out.
    pub(crate) fn clear(&mut self, cell: usize, flag: Flag) {
        self.flag[cell] = flag;
        self.age[cell] = 0.0;
        let (z, d) = (&mut self.budget.vorticity, &mut self.budget.divergence);
        for column in [
            &mut self.vorticity,
            &mut self.vorticity_se,
            &mut self.divergence,
            &mut self.divergence_se,
            &mut z.instrument,
            &mut z.sampling,
            &mut z.timing,
            &mut d.instrument,
            &mut d.sampling,
            &mut d.timing,
        ] {
            column[cell] = 0.0;
        }
    }

    /// True if a polygon stands at the time of a cell.
    #[must_use]
    pub fn stands(&self, cell: usize) -> bool {
        !self.absent.get(cell).copied().unwrap_or(false)
    }
}

/// Puts what was found of the polygons of a block, of which those from `common` on are extra, where they stand in the run.
fn spread<T: Clone + Default>(of_block: &mut Vec<T>, common: usize, extra: &[ExtraPolygon]) {
    let found = of_block.split_off(common.min(of_block.len()));
    for (value, extra) in found.into_iter().zip(extra) {
        if of_block.len() <= extra.number {
            of_block.resize(extra.number + 1, T::default());
        }
        of_block[extra.number] = value;
    }
}

impl Extremes {
    /// Numbers the polygons as they stand in the run; those from `common` on are extra.
    pub fn renumber(&mut self, common: usize, extra: &[ExtraPolygon]) {
        spread(&mut self.values, common, extra);
        for peak in [
            &mut self.convergence,
            &mut self.divergence,
            &mut self.cyclonic,
            &mut self.anticyclonic,
        ]
        .into_iter()
        .flatten()
        {
            let extra = peak.polygon.checked_sub(common).and_then(|k| extra.get(k));
            peak.polygon = extra.map_or(peak.polygon, |extra| extra.number);
        }
    }
}

impl RunStatistics {
    /// Numbers the polygons as they stand in the run; those from `common` on are extra.
    pub fn renumber(&mut self, common: usize, extra: &[ExtraPolygon]) {
        spread(&mut self.vorticity, common, extra);
        spread(&mut self.divergence, common, extra);
    }
}

impl CauseBooks {
    /// Numbers the polygons as they stand in the run; those from `common` on are extra.
    pub fn renumber(&mut self, common: usize, extra: &[ExtraPolygon]) {
        spread(&mut self.0, common, extra);
    }
}
