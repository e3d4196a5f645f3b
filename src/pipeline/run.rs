//! The main job: from the reports to the estimates.

use std::fmt::Write;

use rayon::prelude::*;

use super::{Reading, Setup, Window, Windows};
use crate::align::{AlignBooks, Aligner, Period, StationSensors, block_times, height_factor};
use crate::error::Error;
use crate::integral::{EstimateBlock, Extremes, RunStatistics, estimate};
use crate::polygon::StationPolygon;
use crate::report::{InputOrder, ReportFiles, ReportTable, Rounding, SpeedStep};
use crate::settings::{SensorErrors, Settings};
use crate::station::Station;
use crate::tally::Tally;
use crate::warning::Warning;

/// What came of a run.
#[derive(Debug)]
pub struct Outcome {
    /// The books of the reports as read and checked.
    pub reading: Reading,
    /// What became of them at the analysis times.
    pub aligned: Tally,
    /// For each station the reports used.
    pub used: Vec<u64>,
    /// The analysis times.
    pub period: Period,
    /// For each station the analysis times with a value.
    pub values: Vec<u64>,
    /// For each station what its speeds were multiplied with to stand for the common height.
    pub height_factors: Vec<Option<f64>>,
    /// Strongest values.
    pub extremes: Extremes,
    /// Statistics of each polygon.
    pub statistics: RunStatistics,
    /// What the user should know of all stages.
    pub warnings: Vec<Warning>,
}

impl Outcome {
    /// Share of the rows of listed stations that were used.
    #[must_use]
    pub fn share_used(&self) -> f64 {
        let read = self.reading.rows.passed.max(1);
        self.aligned.passed as f64 / read as f64
    }
}

/// Runs the main job on reports in the order of time, or in any order. `encode` turns a block of estimates into what
/// `write` takes; blocks are encoded in parallel and written in the order of time, so the output depends neither on the
/// number of threads nor on how the reports were read. `progress` hears how many rows have been read.
///
/// While one window of time is estimated, the next one is read and the results of the one before are written.
///
/// # Errors
/// No usable report; reports on levels without a level asked for; reports that are not in the order that they should
/// have ([`Error::NotInOrder`]: what was written is not all, and the run must be begun again with
/// [`InputOrder::Any`]); whatever `write` returns.
pub fn run<T: Send>(
    setup: &Setup,
    order: InputOrder,
    encode: impl Fn(&EstimateBlock) -> T + Sync,
    mut write: impl FnMut(T) -> Result<(), Error> + Send,
    mut progress: impl FnMut(u64),
) -> Result<Outcome, Error> {
    let files = ReportFiles::new(&setup.settings.reports, &setup.network);
    let mut windows = Windows::new(&files, &setup.settings, order)?;
    let mut estimation = Estimation::new(setup);
    let mut current = windows.after(None)?;
    let mut encoded = Vec::new();
    while let Some(window) = current {
        levels_agree(&window.table, &setup.settings)?;
        let before = std::mem::take(&mut encoded);
        let (next, (results, written)) = rayon::join(
            || windows.after(Some(&window)),
            || {
                rayon::join(
                    || estimation.window(&window, &encode),
                    || before.into_iter().try_for_each(&mut write),
                )
            },
        );
        written?;
        encoded = results;
        current = next?;
        progress(windows.rows());
    }
    encoded.into_iter().try_for_each(&mut write)?;
    let mut reading = windows.reading();
    if !estimation.any_moving && setup.settings.analysis.level.is_some() {
        return Err(Error::Reports(
            "`analysis.level` is stated, but the reports have no level (`columns.level`)".into(),
        ));
    }
    if estimation.books.period.times == 0 {
        return Err(no_usable_report(&mut reading));
    }
    let silent = never_reported(setup, &estimation.values);
    let warnings = [
        &setup.warnings,
        &setup.built.warnings,
        &reading.warnings,
        &estimation.warnings,
        &silent,
    ];
    Ok(Outcome {
        warnings: warnings.into_iter().flatten().cloned().collect(),
        reading,
        aligned: estimation.books.all,
        used: estimation.books.used,
        period: estimation.books.period,
        values: estimation.values,
        height_factors: estimation.sensors.height_factors,
        extremes: estimation.extremes,
        statistics: estimation.statistics,
    })
}

/// The estimates of window after window.
struct Estimation<'a> {
    setup: &'a Setup,
    sensors: StationSensors,
    warnings: Vec<Warning>,
    books: AlignBooks,
    /// For the reports that the last window hands on whether a value came of them, by station and time.
    carried: Vec<bool>,
    any_moving: bool,
    values: Vec<u64>,
    extremes: Extremes,
    statistics: RunStatistics,
}

impl<'a> Estimation<'a> {
    fn new(setup: &'a Setup) -> Self {
        let (height_factors, warnings) = height_factors(setup);
        Self {
            sensors: StationSensors {
                errors: Vec::new(),
                height_factors,
            },
            warnings,
            books: AlignBooks::default(),
            carried: Vec::new(),
            any_moving: false,
            values: vec![0; setup.network.len()],
            extremes: Extremes::default(),
            statistics: RunStatistics::default(),
            setup,
        }
    }

    /// Estimates all polygons at the analysis times of a window; the encoded blocks in the order of time.
    fn window<T: Send>(
        &mut self,
        window: &Window,
        encode: &(impl Fn(&EstimateBlock) -> T + Sync),
    ) -> Vec<T> {
        let setup = self.setup;
        let (table, polygons) = (&window.table, &setup.built.polygons);
        let stations = table.stations();
        self.any_moving |= table.has_moving();
        self.sensors.errors = sensor_errors(&setup.settings.sensor, &window.rounding);
        let analysis = &setup.settings.analysis;
        let aligner = Aligner::new(table, analysis, &self.sensors, window.multiples.clone());
        let handed_on = (0..stations).flat_map(|s| table.carried(s));
        let used = handed_on.zip(&self.carried).filter(|&(_, &used)| used);
        aligner.mark_used(used.map(|(i, _)| i));
        let blocks = aligner.grid().blocks(block_times(stations));
        let results: Vec<(Vec<u64>, Extremes, RunStatistics, T)> = blocks
            .into_par_iter()
            .map(|times| {
                let winds = aligner.align(times);
                let block = estimate(polygons, &winds);
                let peaks = Extremes::of(&block, &setup.planetary);
                let sums = RunStatistics::of(&block, polygons.len());
                (winds.values(), peaks, sums, encode(&block))
            })
            .collect();
        let mut encoded = Vec::with_capacity(results.len());
        for (values, peaks, sums, result) in results {
            for (sum, n) in self.values.iter_mut().zip(values) {
                *sum += n;
            }
            self.extremes.merge(&peaks);
            self.statistics.merge(&sums);
            encoded.push(result);
        }
        self.books.add(&aligner, window.carried_from);
        self.carried = match window.carried_from {
            Some(from) => (0..stations)
                .flat_map(|s| table.of_station_from(s, from))
                .map(|i| aligner.is_used(i))
                .collect(),
            None => Vec::new(),
        };
        encoded
    }
}

/// Stations without any value, if they cost polygons.
fn never_reported(setup: &Setup, values: &[u64]) -> Vec<Warning> {
    let silent: Vec<usize> = (0..values.len()).filter(|&s| values[s] == 0).collect();
    let lost = |p: &&StationPolygon| p.row.stations.iter().any(|s| silent.contains(s));
    let polygons = setup.built.polygons.iter().filter(lost).count();
    if polygons == 0 {
        return Vec::new();
    }
    let id = |&s: &usize| setup.network.stations()[s].id.clone();
    vec![Warning::NeverReported {
        stations: silent.len(),
        first: silent.iter().take(3).map(id).collect(),
        polygons,
    }]
}

/// Errors of each station's sensor: as stated, with the steps that were found in its reports.
fn sensor_errors(stated: &SensorErrors, rounding: &[Rounding]) -> Vec<SensorErrors> {
    rounding
        .iter()
        .map(|found| SensorErrors {
            speed_step: stated
                .speed_step
                .or(found.speed.map(SpeedStep::metres_per_second)),
            direction_step: stated.direction_step.or(found.direction),
            ..*stated
        })
        .collect()
}

/// Height factors of the stations; those whose speeds cannot be reduced are named.
fn height_factors(setup: &Setup) -> (Vec<Option<f64>>, Vec<Warning>) {
    let mut warnings = Vec::new();
    let factor = |station: &Station| {
        let Some(reduction) = setup.settings.analysis.height else {
            return Some(1.0);
        };
        match height_factor(&station.site, &reduction) {
            Ok(factor) => Some(factor),
            Err(reason) => {
                warnings.push(Warning::NoHeightFactor {
                    station: station.id.clone(),
                    reason,
                });
                None
            }
        }
    };
    let factors = setup.network.stations().iter().map(factor).collect();
    (factors, warnings)
}

/// Reports on levels need a level to be asked for.
fn levels_agree(table: &ReportTable, settings: &Settings) -> Result<(), Error> {
    if settings.analysis.level.is_some() || !table.has_moving() {
        return Ok(());
    }
    let mut levels = (0..table.len()).filter_map(|i| table.moving(i).and_then(|m| m.level));
    match levels.next() {
        Some(level) => Err(Error::Reports(format!(
            "the reports stand on levels (the first at {level} Pa or m): state the one to use as `analysis.level`, \
             such as \"850 hPa\" or \"100 m\""
        ))),
        None => Ok(()),
    }
}

/// Why there is nothing to estimate from, in the words of what was read.
fn no_usable_report(reading: &mut Reading) -> Error {
    if reading.rows.received == 0 && reading.failures.len() == 1 {
        return reading.failures.remove(0);
    }
    let rows = &reading.rows;
    let mut message = format!(
        "none of {} rows gives a wind at an analysis time",
        rows.received
    );
    // Writing to a string cannot fail.
    for (reason, n) in &rows.set_aside {
        let _ = write!(message, "\n  {n} {}", reason.words());
    }
    for failure in &reading.failures {
        let _ = write!(message, "\n  {failure}");
    }
    for warning in reading.warnings.iter().take(5) {
        let _ = write!(message, "\n  {warning}");
    }
    Error::Reports(message)
}
