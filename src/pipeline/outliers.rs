//! Outliers of the neighbour test among the reports.

use crate::align::{Aligner, WindBlock};
use crate::check::{Flag, StationReading, Test};
use crate::settings::{AlignMethod, Analysis};
use crate::spatial::Outlier;
use crate::time::{Time, micros_of};

/// The report that is judged in the value of a station at an analysis time: the one that it comes from, if no other
/// time is nearer to that; of a mean the last. So each report is judged at most once, whatever window it is in.
pub(super) fn judged_in(
    aligner: &Aligner,
    analysis: &Analysis,
    station: usize,
    time: Time,
) -> Option<usize> {
    let i = aligner.report_at(station, time)?;
    let after = time.micros() - aligner.table().times()[i].micros();
    (after >= -ahead_of(analysis) && after < judged_within(analysis)).then_some(i)
}

/// How far after a report, at most, the analysis time stands that judges it, μs (not included).
pub(super) fn judged_within(analysis: &Analysis) -> i64 {
    let interval = micros_of(analysis.interval).max(1);
    match analysis.method {
        AlignMethod::VectorMean { .. } => interval,
        _ => interval - interval / 2,
    }
}

/// How far before it, at most, μs.
fn ahead_of(analysis: &Analysis) -> i64 {
    match analysis.method {
        AlignMethod::VectorMean { .. } => 0,
        _ => micros_of(analysis.interval).max(1) / 2,
    }
}

/// Counts the reports behind outliers, each once.
#[derive(Debug, Default)]
pub(super) struct OutlierBooks {
    stations: Vec<Counts>,
}

#[derive(Debug, Clone, Copy, Default)]
struct Counts {
    /// Time of the last report that was counted, μs.
    last: Option<i64>,
    suspect: u64,
    failed: u64,
    /// Of these, those that had passed so far, and those that were suspect and failed now.
    passed_before: [u64; 2],
    suspect_before: u64,
}

impl OutlierBooks {
    /// Takes in the outliers of a window, in the order of time; the reports behind them with their flags, each once.
    pub(super) fn add(
        &mut self,
        aligner: &Aligner,
        analysis: &Analysis,
        winds: &[WindBlock],
        outliers: &[Outlier],
    ) -> Vec<(usize, Flag)> {
        let table = aligner.table();
        self.stations.resize(table.stations(), Counts::default());
        let mut raised = Vec::new();
        for outlier in outliers {
            let (block, t) = outlier.at;
            let station = outlier.deviation.station;
            let Some(i) = judged_in(aligner, analysis, station, winds[block].times[t]) else {
                continue;
            };
            let time = table.times()[i].micros();
            let counts = &mut self.stations[station];
            if counts.last.is_some_and(|last| last >= time) {
                continue;
            }
            counts.last = Some(time);
            let flag = outlier.flag();
            let fails = flag == Flag::Fail;
            *(if fails {
                &mut counts.failed
            } else {
                &mut counts.suspect
            }) += 1;
            match table.flag(i) {
                Flag::Suspect => counts.suspect_before += u64::from(fails),
                Flag::Pass => counts.passed_before[usize::from(fails)] += 1,
                _ => {}
            }
            raised.push((i, flag));
        }
        raised
    }

    /// Adds the counts to those of the other tests.
    pub(super) fn put(&self, readings: &mut [StationReading]) {
        for (reading, counts) in readings.iter_mut().zip(&self.stations) {
            reading.by_test[Test::Neighbour as usize] = (counts.suspect, counts.failed);
            let [now_suspect, now_failed] = counts.passed_before;
            // Each was counted as passed, or as suspect, when it was read; no count can fall below 0.
            reading.passed = reading.passed.saturating_sub(now_suspect + now_failed);
            reading.suspect += now_suspect;
            reading.suspect = reading.suspect.saturating_sub(counts.suspect_before);
            reading.failed += now_failed + counts.suspect_before;
        }
    }
}
