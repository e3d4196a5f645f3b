//! The wind-field model as it follows a run.

use rayon::prelude::*;

use super::run::StructureReport;
use crate::align::WindBlock;
use crate::check::Flag;
use crate::settings::Settings;
use crate::spatial::{Outlier, OwnChanges, SpatialCheck};
use crate::station::Network;
use crate::structure::{
    BlockSums, NetworkGeometry, StructureFunction, StructureSettings, StructureWindow,
};
use crate::time::Time;

/// The structure function of a network, window after window.
pub(super) struct FieldState {
    settings: StructureSettings,
    /// Between analysis times, s.
    interval: f64,
    network: Network,
    geometry: NetworkGeometry,
    /// How much of the time each station reported when the geometry was made: never, seldom, often.
    reporting: Vec<u8>,
    /// The last block of the window before.
    last_block: Option<WindBlock>,
    past: Past,
}

/// What follows the times.
#[derive(Clone)]
struct Past {
    window: StructureWindow,
    /// At the end of each day, and of the run.
    reports: Vec<StructureReport>,
    /// The last time taken in.
    last: Option<Time>,
}

const DAY: i64 = 86_400_000_000;

/// Stations that report less than half of the time are seldom there ([`NetworkGeometry::new`]).
const SELDOM: u8 = 1;
const OFTEN: u8 = 2;

impl FieldState {
    /// Before any wind, for a network with stations `spacing` m apart.
    pub(super) fn new(settings: &Settings, network: &Network, spacing: f64) -> Self {
        let structure = settings.errors.structure;
        let geometry = NetworkGeometry::new(network, spacing, &[]);
        Self {
            settings: structure,
            interval: settings.analysis.interval.as_secs_f64(),
            reporting: vec![OFTEN; network.len()],
            last_block: None,
            past: Past {
                window: StructureWindow::new(&geometry, structure),
                reports: Vec::new(),
                last: None,
            },
            geometry,
            network: network.clone(),
        }
    }

    /// Takes in the winds of a window; for each block the structure function at each of its times.
    pub(super) fn advance(&mut self, winds: &[WindBlock]) -> Vec<Vec<StructureFunction>> {
        self.follow_reporting(winds);
        let (geometry, last_block) = (&self.geometry, &self.last_block);
        let sums: Vec<BlockSums> = winds
            .par_iter()
            .enumerate()
            .map(|(k, block)| {
                let before = match k.checked_sub(1) {
                    Some(before) => winds.get(before),
                    None => last_block.as_ref(),
                };
                BlockSums::of(geometry, &self.settings, self.interval, before, block)
            })
            .collect();
        let blocks = winds.iter().zip(&sums);
        blocks
            .map(|(block, sums)| self.past.advance(&self.geometry, block, sums))
            .collect()
    }

    /// As [`Self::advance`], with the winds judged by their neighbours on the way: their flags are raised, and what fails
    /// is not in the structure function.
    pub(super) fn judge(
        &mut self,
        winds: &mut [WindBlock],
        check: &mut SpatialCheck,
        changes: &OwnChanges,
    ) -> (Vec<Vec<StructureFunction>>, Vec<Outlier>) {
        let before = self.past.clone();
        let mut models = self.advance(winds);
        let outliers = check.judge(winds, &models, changes);
        for outlier in &outliers {
            let (block, t) = outlier.at;
            winds[block].raise_flag(outlier.deviation.station, t, outlier.flag());
        }
        if outliers.iter().any(|o| o.flag() == Flag::Fail) {
            self.past = before;
            models = self.advance(winds);
        }
        (models, outliers)
    }

    /// Keeps the last winds of a window for the next.
    pub(super) fn keep_last(&mut self, winds: Vec<WindBlock>) {
        if let Some(last) = winds.into_iter().next_back() {
            self.last_block = Some(last);
        }
    }

    /// The model at the end of each day, and as it stands.
    pub(super) fn into_reports(mut self) -> Vec<StructureReport> {
        if let Some(last) = self.past.last {
            let report = self.past.report(&self.geometry, last);
            self.past.reports.push(report);
        }
        self.past.reports
    }

    /// Chooses pairs and planes anew if other stations report than before.
    fn follow_reporting(&mut self, winds: &[WindBlock]) {
        let times: usize = winds.iter().map(|block| block.times.len()).sum();
        if times == 0 {
            return;
        }
        let mut values = vec![0; self.network.len()];
        for block in winds {
            for (sum, n) in values.iter_mut().zip(block.values()) {
                *sum += n;
            }
        }
        let class = |&n: &u64| match n {
            0 => 0,
            n if 2 * n < times as u64 => SELDOM,
            _ => OFTEN,
        };
        let reporting: Vec<u8> = values.iter().map(class).collect();
        if reporting != self.reporting {
            let shares: Vec<f64> = values.iter().map(|&n| n as f64 / times as f64).collect();
            self.geometry = NetworkGeometry::new(&self.network, self.geometry.spacing, &shares);
            self.reporting = reporting;
        }
    }
}

impl Past {
    fn advance(
        &mut self,
        geometry: &NetworkGeometry,
        block: &WindBlock,
        sums: &BlockSums,
    ) -> Vec<StructureFunction> {
        let mut models = Vec::with_capacity(block.times.len());
        for day in block.times.chunk_by(|a, b| day_of(*a) == day_of(*b)) {
            let (Some(&first), Some(&last)) = (day.first(), day.last()) else {
                continue;
            };
            if let Some(before) = self.last
                && day_of(before) != day_of(first)
            {
                self.reports.push(self.report(geometry, before));
            }
            models.extend(self.window.advance(geometry, sums, day));
            self.last = Some(last);
        }
        models
    }

    fn report(&self, geometry: &NetworkGeometry, time: Time) -> StructureReport {
        StructureReport {
            time,
            function: *self.window.current(),
            rows: self.window.table(geometry),
        }
    }
}

fn day_of(time: Time) -> i64 {
    time.micros().div_euclid(DAY)
}
