//! Joins the stages: settings and stations, reports, checks, alignment, estimates.

use std::fmt::Write;
use std::path::{Path, PathBuf};

use rayon::prelude::*;

use crate::align::{AlignTally, Aligner, StationSensors, TimeGrid, WindBlock, height_factor};
use crate::check::{Flag, check_range};
use crate::error::{Error, Problem};
use crate::integral::{
    EstimateBlock, Extremes, SELF_TEST_ALLOWED, SelfTest, estimate, planetary_vorticity, self_test,
};
use crate::polygon::{BuiltPolygons, build_polygons};
use crate::report::{
    Content, FileOutcome, ReportTable, Rounding, SpeedStep, find_rounding, read_reports,
};
use crate::settings::{Overrides, SensorErrors, Settings, read_settings};
use crate::station::{Network, Position, Station, read_catalogue};
use crate::tally::Tally;
use crate::time::Time;
use crate::units::Wind;
use crate::warning::Warning;

/// A network ready to work on: settings checked, stations read, polygons built.
#[derive(Debug)]
pub struct Setup {
    /// The settings file.
    pub path: PathBuf,
    /// The settings.
    pub settings: Settings,
    /// The stations.
    pub network: Network,
    /// The polygons.
    pub built: BuiltPolygons,
    /// Planetary vorticity of each polygon, 1/s.
    pub planetary: Vec<f64>,
    /// The self-test of the geometry, passed.
    pub self_test: SelfTest,
}

impl Setup {
    /// Reads settings and stations, and builds the polygons.
    ///
    /// # Errors
    /// All defects of settings, station list, rings and regions at once; stations that make no polygon; a failed
    /// self-test.
    pub fn read(path: &Path, overrides: &Overrides) -> Result<Self, Error> {
        let (settings, mut problems) = read_settings(path, overrides)?;
        if settings.station_file.as_os_str().is_empty() {
            return Err(Error::Invalid(problems));
        }
        let network = match read_catalogue(&settings.station_file, &settings.catalogue) {
            Ok(network) => network,
            Err(Error::Invalid(more)) => {
                problems.extend(more);
                return Err(Error::Invalid(problems));
            }
            Err(error) => return Err(error),
        };
        let built = match build_polygons(&network, &settings.polygons, &settings.limits) {
            Ok(built) => built,
            Err(Error::Invalid(more)) => {
                problems.extend(more);
                return Err(Error::Invalid(problems));
            }
            Err(error) if problems.is_empty() => return Err(error),
            Err(error) => {
                problems.push(Problem::new(
                    crate::error::Place::default(),
                    error.to_string(),
                ));
                return Err(Error::Invalid(problems));
            }
        };
        if !problems.is_empty() {
            return Err(Error::Invalid(problems));
        }
        let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
        let self_test = self_test(&built.polygons, &built.edges, &positions);
        if self_test.largest_difference > SELF_TEST_ALLOWED {
            return Err(Error::SelfTest {
                polygon: self_test.polygon,
                difference: self_test.largest_difference,
                allowed: SELF_TEST_ALLOWED,
            });
        }
        let planetary = built
            .polygons
            .iter()
            .map(|p| planetary_vorticity(p, &positions))
            .collect();
        Ok(Self {
            path: path.to_path_buf(),
            settings,
            network,
            built,
            planetary,
            self_test,
        })
    }
}

/// What a station contributed.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct StationHealth {
    /// Reports, each station and time once.
    pub reports: u64,
    /// Of them calm.
    pub calm: u64,
    /// With a speed but no direction.
    pub no_direction: u64,
    /// Without a speed.
    pub no_speed: u64,
    /// Flagged suspect.
    pub suspect: u64,
    /// Flagged fail.
    pub failed: u64,
    /// Used at an analysis time.
    pub used: u64,
    /// Analysis times with a value.
    pub values: u64,
    /// First and last report.
    pub period: Option<(Time, Time)>,
    /// Mean of the speeds (scalar mean) of the reports with a direction or calm that did not fail, m/s.
    pub mean_speed: Option<f64>,
    /// Their vector mean.
    pub vector_mean: Option<Wind>,
    /// Steps found in its reports.
    pub rounding: Rounding,
    /// What its speeds were multiplied with to stand for the common height.
    pub height_factor: Option<f64>,
}

/// What came of a run.
#[derive(Debug)]
pub struct Outcome {
    /// Rows of the files.
    pub rows: Tally,
    /// The same per file.
    pub files: Vec<FileOutcome>,
    /// Repeats taken out.
    pub repeats: Tally,
    /// What became of the reports at the analysis times.
    pub aligned: AlignTally,
    /// The analysis times.
    pub grid: TimeGrid,
    /// Each station's part.
    pub stations: Vec<StationHealth>,
    /// Strongest values.
    pub extremes: Extremes,
    /// What the user should know.
    pub warnings: Vec<Warning>,
    /// Files that could not be read.
    pub failures: Vec<Error>,
}

impl Outcome {
    /// True if all input was usable.
    #[must_use]
    pub fn is_complete(&self) -> bool {
        self.failures.is_empty() && !self.warnings.iter().any(Warning::is_unusable_input)
    }

    /// Share of the rows of listed stations that were used.
    #[must_use]
    pub fn share_used(&self) -> f64 {
        let read = self.rows.passed.max(1);
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
/// No usable report; whatever `write` returns.
pub fn run<T: Send>(
    setup: &Setup,
    encode: impl Fn(&EstimateBlock) -> T + Sync,
    mut write: impl FnMut(T) -> Result<(), Error>,
    mut progress: impl FnMut(usize, usize),
) -> Result<Outcome, Error> {
    let mut read = read_reports(&setup.settings.reports, &setup.network);
    let (mut table, repeats) = ReportTable::new(&read.rows, setup.network.len());
    read.rows = Vec::new();
    check_range(&mut table, &setup.settings.range);

    let rounding: Vec<Rounding> = (0..setup.network.len())
        .map(|s| find_rounding(&table, s))
        .collect();
    let (sensors, mut warnings) = station_sensors(setup, &rounding);
    let factors = sensors.height_factors.clone();
    levels_agree(&table, &setup.settings)?;
    let mut aligner = Aligner::new(&table, &setup.settings.analysis, sensors);
    if aligner.grid().is_empty() {
        return Err(no_usable_report(
            &read.tally,
            &mut read.failures,
            &read.warnings,
        ));
    }
    let times = aligner.grid().len();
    let polygons = &setup.built.polygons;
    let mut extremes = Extremes::default();
    let mut done = 0;
    loop {
        let wave: Vec<WindBlock> = std::iter::from_fn(|| aligner.next_block())
            .take(BLOCKS_PER_THREAD * rayon::current_num_threads())
            .collect();
        if wave.is_empty() {
            break;
        }
        let results: Vec<(usize, Extremes, T)> = wave
            .par_iter()
            .map(|winds| {
                let block = estimate(polygons, winds);
                (
                    winds.times.len(),
                    Extremes::of(&block, &setup.planetary),
                    encode(&block),
                )
            })
            .collect();
        for (n, peaks, encoded) in results {
            extremes.merge(&peaks);
            write(encoded)?;
            done += n;
        }
        progress(done, times);
    }
    let aligned = aligner.tally();
    let stations = (0..setup.network.len())
        .map(|s| StationHealth {
            rounding: rounding[s],
            height_factor: factors[s],
            ..health(&table, s, aligned.used[s], aligner.values()[s])
        })
        .collect();
    warnings.splice(0..0, setup.built.warnings.iter().cloned());
    warnings.append(&mut read.warnings);
    Ok(Outcome {
        rows: read.tally,
        files: read.files,
        repeats,
        grid: aligner.grid().clone(),
        aligned,
        stations,
        extremes,
        warnings,
        failures: read.failures,
    })
}

/// Errors and height factors of the stations; those whose speeds cannot be reduced are named.
fn station_sensors(setup: &Setup, rounding: &[Rounding]) -> (StationSensors, Vec<Warning>) {
    let stated = setup.settings.sensor;
    let errors = rounding
        .iter()
        .map(|found| SensorErrors {
            speed_step: stated
                .speed_step
                .or(found.speed.map(SpeedStep::metres_per_second)),
            direction_step: stated.direction_step.or(found.direction),
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

fn health(table: &ReportTable, station: usize, used: u64, values: u64) -> StationHealth {
    let reports = table.of_station(station);
    let mut health = StationHealth {
        reports: reports.len() as u64,
        used,
        values,
        ..StationHealth::default()
    };
    let mut mean = crate::align::vector::VectorMean::default();
    for i in reports.clone() {
        match table.content(i) {
            Content::Calm => health.calm += 1,
            Content::SpeedOnly => health.no_direction += 1,
            Content::Nothing => health.no_speed += 1,
            Content::Wind => {}
        }
        match table.flag(i) {
            Flag::Suspect => health.suspect += 1,
            Flag::Fail => health.failed += 1,
            _ => {}
        }
        if let Some(wind) = table.wind(i).filter(|_| table.flag(i) != Flag::Fail) {
            mean.add(wind);
        }
    }
    if !reports.is_empty() {
        let times = &table.times()[reports];
        health.period = times.first().copied().zip(times.last().copied());
    }
    health.mean_speed = mean.scalar_mean_speed();
    health.vector_mean = mean.wind();
    health
}

/// Why there is nothing to estimate from, in the words of what was read.
fn no_usable_report(rows: &Tally, failures: &mut Vec<Error>, warnings: &[Warning]) -> Error {
    if rows.received == 0 && failures.len() == 1 {
        return failures.remove(0);
    }
    let mut message = format!(
        "none of {} rows gives a wind at an analysis time",
        rows.received
    );
    // Writing to a string cannot fail.
    for (reason, n) in &rows.set_aside {
        let _ = write!(message, "\n  {n} {}", reason.words());
    }
    for failure in failures {
        let _ = write!(message, "\n  {failure}");
    }
    for warning in warnings.iter().take(5) {
        let _ = write!(message, "\n  {warning}");
    }
    Error::Reports(message)
}
