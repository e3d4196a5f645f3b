//! Reports in the order of time, sorted and checked, window by window.

use std::ops::Range;

use rayon::prelude::*;

use super::Reading;
use super::outliers::judged_within;
use crate::align::block_times;
use crate::check::{Listener, StationScreen, StationSums, screen};
use crate::error::Error;
use crate::report::{
    CONFLICTS_KEPT, Conflict, InputOrder, OrderedReports, ReportFiles, ReportTable, Rounding, Rows,
};
use crate::settings::{AlignMethod, Analysis, Settings};
use crate::station::Position;
use crate::tally::Tally;
use crate::time::{Time, micros_of};

/// Blocks of analysis times in a window: enough for several threads, few enough to stay small.
const WINDOW_BLOCKS: usize = 4;

/// The reports of a run of analysis times, with those before and after it that matter to these times.
///
/// Windows are cut at multiples of a fixed length since 1970, so that what is in one does not depend on how the files
/// were read.
#[derive(Debug)]
pub struct Window {
    /// The reports, checked; the first of each station are those that the window before had too.
    pub table: ReportTable,
    /// The analysis times are these multiples of the interval.
    pub multiples: Range<i64>,
    /// The steps of each station's reports, as far as they are known by the end of the window.
    pub rounding: Vec<Rounding>,
    /// Reports of these times are judged for good in this window, by all tests; every report is in one such range.
    pub judged: Range<Time>,
    /// Reports from here on come again in the next window; `None` in the last one.
    pub carried_from: Option<Time>,
    /// Earlier reports would come too late.
    closed_until: Time,
}

/// Cuts the reports of all files into windows.
pub struct Windows<'f> {
    reports: OrderedReports<'f>,
    files: &'f ReportFiles<'f>,
    settings: &'f Settings,
    order: InputOrder,
    /// Analysis times of a window.
    times: i64,
    pending: Vec<Rows>,
    ended: bool,
    positions: Vec<Position>,
    screens: Vec<StationScreen>,
    sums: Vec<StationSums>,
    repeats: Tally,
    conflicts: Vec<Conflict>,
    rows: u64,
}

impl<'f> Windows<'f> {
    /// Windows of the reports of these files.
    ///
    /// # Errors
    /// The cache cannot be written.
    pub fn new(
        files: &'f ReportFiles<'f>,
        settings: &'f Settings,
        order: InputOrder,
    ) -> Result<Self, Error> {
        let stations = files.network().len();
        let times = WINDOW_BLOCKS * block_times(stations);
        let cache = settings.cache.as_deref();
        Ok(Self {
            reports: OrderedReports::new(files, order, settings.memory, cache)?,
            files,
            settings,
            order,
            times: i64::try_from(times).unwrap_or(i64::MAX),
            pending: Vec::new(),
            ended: false,
            positions: files
                .network()
                .stations()
                .iter()
                .map(|s| s.position)
                .collect(),
            screens: vec![StationScreen::default(); stations],
            sums: vec![StationSums::default(); stations],
            repeats: Tally::default(),
            conflicts: Vec::new(),
            rows: 0,
        })
    }

    /// The window after `before`; `None` after the last.
    ///
    /// # Errors
    /// [`Error::NotInOrder`] if a report belongs into a window that was given out before; whatever stops the reading.
    pub fn after(&mut self, before: Option<&Window>) -> Result<Option<Window>, Error> {
        let analysis = &self.settings.analysis;
        let interval = micros_of(analysis.interval).max(1);
        let (back, ahead) = reach(analysis);
        // The tests look at the next report too: what stands so far after a report that is used must be there.
        let sight = if self.settings.screen {
            self.settings.check.gap.saturating_add(1)
        } else {
            0
        };
        let length = self.times.saturating_mul(interval);
        let carried_from = match before {
            Some(Window {
                carried_from: None, ..
            }) => return Ok(None),
            Some(window) => window.carried_from,
            None => None,
        };
        // What comes in a file a little late, or station by station, is still in time for its window.
        let slack = match self.order {
            InputOrder::ByTime => length,
            InputOrder::Any => 0,
        };
        let number = loop {
            let number = self.number(before, length, ahead);
            let ready = match (number, self.reports.reached()) {
                (Some(number), Some(reached)) => {
                    let cut = end_of(number, length).saturating_add(ahead + sight);
                    reached.micros() >= cut.saturating_add(slack)
                }
                _ => false,
            };
            if ready || self.ended {
                break number;
            }
            let until = number.map_or(i64::MAX, |number| {
                end_of(number, length).saturating_add(ahead + sight + slack)
            });
            self.read(before, Time::from_micros(until))?;
        };
        let Some(number) = number else {
            return Ok(None);
        };
        let end = end_of(number, length);
        let judged_until = Time::from_micros(end.saturating_add(ahead));
        let cut = judged_until.plus_micros(sight);
        let fresh = self.take_before(cut);
        let nothing = ReportTable::default();
        let (mut table, repeats) = ReportTable::following(
            &fresh,
            self.sums.len(),
            before.map_or(&nothing, |window| &window.table),
            carried_from.unwrap_or_default(),
            judged_until,
        );
        self.repeats += &repeats;
        self.conflicts.extend_from_slice(table.conflicts());
        self.conflicts.truncate(CONFLICTS_KEPT);
        let limits = self.settings.screen.then_some(&self.settings.check);
        screen(&mut table, &mut self.screens, &self.positions, limits);
        self.sums
            .par_iter_mut()
            .enumerate()
            .for_each(|(station, sums)| sums.add(&table, station));
        let keep_from = Time::from_micros(end.saturating_sub(back));
        let is_last = self.ended
            && self.pending.is_empty()
            && table.times().iter().all(|&time| time < keep_from);
        let back = back.min(judged_within(analysis));
        let until = if is_last {
            i64::MAX
        } else {
            end.saturating_sub(back)
        };
        let from = before.map_or(i64::MIN, |window| window.judged.end.micros());
        Ok(Some(Window {
            table,
            judged: Time::from_micros(from)..Time::from_micros(until),
            multiples: number * self.times..(number + 1) * self.times,
            rounding: self.screens.iter().map(StationScreen::rounding).collect(),
            carried_from: (!is_last).then_some(keep_from),
            closed_until: cut,
        }))
    }

    /// Explains the tests of a station's reports at, or nearest to, a time.
    pub fn listen(&mut self, station: usize, at: Time) {
        if let Some(screen) = self.screens.get_mut(station) {
            screen.listen(Listener::new(at));
        }
    }

    /// The number of the window after `before`, as far as it is known: empty ones are left out.
    fn number(&self, before: Option<&Window>, length: i64, ahead: i64) -> Option<i64> {
        let spans = self.pending.iter().filter_map(Rows::span);
        let earliest = spans.map(|span| span.0).min();
        let first = earliest.map(|t| t.micros().saturating_sub(ahead).div_euclid(length));
        let Some(window) = before else {
            return first;
        };
        let next = window.multiples.end / self.times;
        let carries = window
            .carried_from
            .is_some_and(|from| window.table.times().iter().any(|&time| time >= from));
        if carries {
            Some(next)
        } else {
            first.map(|first| first.max(next))
        }
    }

    /// Reads a wave of rows.
    fn read(&mut self, before: Option<&Window>, until: Time) -> Result<(), Error> {
        let Some(wave) = self.reports.next_wave(until)? else {
            self.ended = true;
            return Ok(());
        };
        for rows in wave {
            let Some((first, _)) = rows.span() else {
                continue;
            };
            if before.is_some_and(|window| first < window.closed_until) {
                return Err(Error::NotInOrder(self.files.place_of_first(&rows, first)));
            }
            self.rows += rows.len() as u64;
            self.pending.push(rows);
        }
        let bytes: usize = self.pending.iter().map(Rows::bytes).sum();
        if self.order == InputOrder::ByTime && bytes > self.settings.memory {
            let message = "rows of one time stand too far apart to be held in memory".into();
            return Err(Error::NotInOrder(message));
        }
        Ok(())
    }

    /// Takes the pending rows before `cut`.
    fn take_before(&mut self, cut: Time) -> Vec<Rows> {
        let mut taken = Vec::new();
        let mut later = Vec::new();
        for mut rows in std::mem::take(&mut self.pending) {
            match rows.span() {
                Some((first, _)) if first >= cut => later.push(rows),
                Some((_, last)) if last >= cut => {
                    later.push(rows.split_off_from(cut));
                    taken.push(rows);
                }
                _ => taken.push(rows),
            }
        }
        self.pending = later;
        taken
    }

    /// Reports read so far.
    #[must_use]
    pub fn rows(&self) -> u64 {
        self.rows
    }

    /// What came of all files and stations.
    #[must_use]
    pub fn reading(self) -> Reading {
        let outcome = self.reports.outcome();
        let stations = self.sums.iter().zip(&self.screens);
        Reading {
            rows: outcome.tally,
            files: outcome.files,
            repeats: self.repeats,
            conflicts: self.conflicts,
            stations: stations
                .map(|(sums, screen)| sums.reading(screen.rounding()))
                .collect(),
            explained: self.screens.iter().flat_map(StationScreen::heard).collect(),
            warnings: outcome.warnings,
            failures: outcome.failures,
        }
    }
}

/// How far before and after an analysis time a report can stand that matters to it, μs.
fn reach(analysis: &Analysis) -> (i64, i64) {
    match analysis.method {
        AlignMethod::Nearest { tolerance } | AlignMethod::Linear { tolerance } => {
            (micros_of(tolerance), micros_of(tolerance))
        }
        AlignMethod::VectorMean { window, .. } => (micros_of(window), 0),
    }
}

/// Where a window ends, μs.
fn end_of(number: i64, length: i64) -> i64 {
    number.saturating_add(1).saturating_mul(length)
}
