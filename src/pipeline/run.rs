//! The main job: from the reports to the estimates.

use std::fmt::Write;

use rayon::prelude::*;

use super::{Reading, Setup};
use crate::align::{AlignTally, Aligner, StationSensors, TimeGrid, WindBlock, height_factor};
use crate::check::StationReading;
use crate::error::Error;
use crate::integral::{EstimateBlock, Extremes, RunStatistics, estimate};
use crate::polygon::StationPolygon;
use crate::report::{ReportTable, SpeedStep};
use crate::settings::{SensorErrors, Settings};
use crate::station::Station;
use crate::warning::Warning;

/// What came of a run.
#[derive(Debug)]
pub struct Outcome {
    /// The reports as read and checked.
    pub reading: Reading,
    /// What became of them at the analysis times.
    pub aligned: AlignTally,
    /// The analysis times.
    pub grid: TimeGrid,
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
        self.aligned.all.passed as f64 / read as f64
    }
}

/// Blocks worked on at a time by each thread.
const BLOCKS_PER_THREAD: usize = 2;

/// Runs the main job. `encode` turns a block of estimates into what `write` takes; blocks are encoded in parallel and
/// written in the order of time, so the output does not depend on the number of threads. `progress` hears how many
/// analysis times are done and how many there are.
///
/// # Errors
/// No usable report; reports on levels without a level asked for; whatever `write` returns.
pub fn run<T: Send>(
    setup: &Setup,
    encode: impl Fn(&EstimateBlock) -> T + Sync,
    mut write: impl FnMut(T) -> Result<(), Error>,
    mut progress: impl FnMut(usize, usize),
) -> Result<Outcome, Error> {
    let mut reading = Reading::of(&setup.settings, &setup.network);
    levels_agree(&reading.table, &setup.settings)?;
    let (sensors, sensor_warnings) = station_sensors(setup, &reading.stations);
    let height_factors = sensors.height_factors.clone();
    let mut aligner = Aligner::new(&reading.table, &setup.settings.analysis, sensors);
    if aligner.grid().is_empty() {
        return Err(no_usable_report(&mut reading));
    }
    let times = aligner.grid().len();
    let polygons = &setup.built.polygons;
    let mut extremes = Extremes::default();
    let mut statistics = RunStatistics::default();
    let mut done = 0;
    loop {
        let wave: Vec<WindBlock> = std::iter::from_fn(|| aligner.next_block())
            .take(BLOCKS_PER_THREAD * rayon::current_num_threads())
            .collect();
        if wave.is_empty() {
            break;
        }
        let results: Vec<(usize, Extremes, RunStatistics, T)> = wave
            .par_iter()
            .map(|winds| {
                let block = estimate(polygons, winds);
                let peaks = Extremes::of(&block, &setup.planetary);
                let sums = RunStatistics::of(&block, polygons.len());
                (winds.times.len(), peaks, sums, encode(&block))
            })
            .collect();
        for (n, peaks, sums, encoded) in results {
            extremes.merge(&peaks);
            statistics.merge(&sums);
            write(encoded)?;
            done += n;
        }
        progress(done, times);
    }
    let (aligned, values, grid) = (
        aligner.tally(),
        aligner.values().to_vec(),
        aligner.grid().clone(),
    );
    let silent = never_reported(setup, &values);
    let warnings = [
        &setup.warnings,
        &setup.built.warnings,
        &reading.warnings,
        &sensor_warnings,
        &silent,
    ];
    Ok(Outcome {
        warnings: warnings.into_iter().flatten().cloned().collect(),
        reading,
        aligned,
        grid,
        values,
        height_factors,
        extremes,
        statistics,
    })
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

/// Errors and height factors of the stations; those whose speeds cannot be reduced are named.
fn station_sensors(setup: &Setup, stations: &[StationReading]) -> (StationSensors, Vec<Warning>) {
    let stated = setup.settings.sensor;
    let errors = stations
        .iter()
        .map(|s| SensorErrors {
            speed_step: stated
                .speed_step
                .or(s.rounding.speed.map(SpeedStep::metres_per_second)),
            direction_step: stated.direction_step.or(s.rounding.direction),
            ..stated
        })
        .collect();
    let mut warnings = Vec::new();
    let mut factor = |station: &Station| {
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
    let height_factors = setup.network.stations().iter().map(&mut factor).collect();
    let sensors = StationSensors {
        errors,
        height_factors,
    };
    (sensors, warnings)
}

/// Reports on levels need a level to be asked for.
fn levels_agree(table: &ReportTable, settings: &Settings) -> Result<(), Error> {
    let mut levels = (0..table.len()).filter_map(|i| table.moving(i).and_then(|m| m.level));
    match (table.has_moving(), settings.analysis.level) {
        (true, None) => match levels.next() {
            Some(level) => Err(Error::Reports(format!(
                "the reports stand on levels (the first at {level} Pa or m): state the one to use as `analysis.level`, \
                 such as \"850 hPa\" or \"100 m\""
            ))),
            None => Ok(()),
        },
        (false, Some(_)) => Err(Error::Reports(
            "`analysis.level` is stated, but the reports have no level (`columns.level`)".into(),
        )),
        _ => Ok(()),
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
