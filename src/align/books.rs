//! What became of the reports at the analysis times.

use super::{Aligner, TimeGrid, unusable};
use crate::report::ReportTable;
use crate::settings::AlignMethod;
use crate::tally::{Reason, Tally};
use crate::time::{Time, micros_of};

/// The analysis times of a run.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct Period {
    /// How many there are.
    pub times: u64,
    /// The first and the last.
    pub ends: Option<(Time, Time)>,
    /// Times between them at which no station has a value.
    pub empty_times: u64,
}

impl Period {
    /// Takes in the times of a later window.
    fn extend(&mut self, grid: &TimeGrid) {
        if let (Some(first), Some(last)) = (grid.first(), grid.last()) {
            self.times += grid.len() as u64;
            self.empty_times += grid.empty_times();
            if let Some((_, before)) = self.ends {
                self.empty_times += grid.steps_between(before, first);
            }
            self.ends = Some((self.ends.map_or(first, |ends| ends.0), last));
        }
    }
}

/// The books of the alignment, window by window: each report was used, or was not for one reason.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct AlignBooks {
    /// All reports.
    pub all: Tally,
    /// Reports used, for each station.
    pub used: Vec<u64>,
    /// The analysis times.
    pub period: Period,
    /// The times of the window before.
    before: Option<TimeGrid>,
    /// Reports that are off every time so far, and later than the last of them.
    after_last: u64,
}

impl AlignBooks {
    /// Takes in a window, of whose reports those from `carried_from` on come again in the next one; none at the end.
    pub fn add(&mut self, aligner: &Aligner, carried_from: Option<Time>) {
        let (table, grid) = (aligner.table, &aligner.grid);
        if !grid.is_empty() {
            self.all
                .set_aside(Reason::TooFarInTime, std::mem::take(&mut self.after_last));
        }
        self.period.extend(grid);
        self.used.resize(table.stations(), 0);
        for station in 0..table.stations() {
            let reports = table.of_station(station);
            let end = carried_from.map_or(reports.end, |t| table.of_station_from(station, t).start);
            let mut used = 0;
            for i in reports.start..end {
                if aligner.is_used(i) {
                    used += 1;
                } else if let Some(reason) = self.why_not_used(aligner, table, station, i) {
                    self.all.set_aside(reason, 1);
                } else {
                    self.after_last += 1;
                }
            }
            self.all.pass(used);
            self.used[station] += used;
        }
        if !grid.is_empty() {
            self.before = Some(grid.clone());
        }
        if carried_from.is_none() {
            self.all
                .set_aside(Reason::OutsidePeriod, std::mem::take(&mut self.after_last));
        }
    }

    /// The reason; `None` if it depends on whether there is a later analysis time.
    fn why_not_used(
        &self,
        aligner: &Aligner,
        table: &ReportTable,
        station: usize,
        i: usize,
    ) -> Option<Reason> {
        if let Some(reason) = unusable(table, i, aligner.level) {
            return Some(reason);
        }
        let factors = &aligner.sensors.height_factors;
        if factors.get(station).is_some_and(Option::is_none) {
            return Some(Reason::NoHeightFactor);
        }
        let time = table.times()[i];
        let grids = [self.before.as_ref(), Some(&aligner.grid)];
        let near = |reason: Reason, distance: &dyn Fn(&TimeGrid) -> bool| {
            grids.into_iter().flatten().any(distance).then_some(reason)
        };
        let reason = match aligner.method {
            AlignMethod::Nearest { tolerance } | AlignMethod::Linear { tolerance } => {
                near(Reason::NotNearest, &|grid| {
                    grid.distance(time) <= micros_of(tolerance)
                })
            }
            AlignMethod::VectorMean { window, .. } => near(Reason::TooFewInWindow, &|grid| {
                grid.until_next(time) < micros_of(window)
            }),
        };
        reason.or_else(|| match self.period.ends {
            Some((first, _)) if time < first => Some(Reason::OutsidePeriod),
            Some((_, last)) if time <= last => Some(Reason::TooFarInTime),
            _ => None,
        })
    }
}
