//! The main job: from the reports to the estimates.

use std::fmt::Write;

use super::estimation::Estimation;
use super::field::FieldState;
use super::{Reading, Setup, Windows};
use crate::align::{Period, WindBlock};
use crate::error::Error;
use crate::helmholtz::{DecompositionBlock, EnergyBooks};
use crate::integral::{
    Attribution, CauseBooks, EstimateBlock, ExtraPolygon, Extremes, FitBook, FitBooks, GroupMeans,
    RunStatistics, attribute,
};
use crate::kinematics::{KinematicMeans, KinematicsBlock, ScalarCells};
use crate::polygon::StationPolygon;
use crate::report::{InputOrder, ReportFiles, ReportTable};
use crate::settings::Settings;
use crate::structure::{StructureFunction, StructureRow};
use crate::tally::Tally;
use crate::time::Time;
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
    /// Triangles that filled holes where stations were missing, in the order in which they came.
    pub extra: Vec<ExtraPolygon>,
    /// Stations that would explain odd means around them.
    pub attributions: Vec<Attribution>,
    /// Why estimates are flagged, for each polygon.
    pub causes: CauseBooks,
    /// The same by hour, day, month or period, if the settings ask for it.
    pub means: GroupMeans,
    /// Means of the kinematic quantities by the same groups, if both are asked for.
    pub kinematic_means: KinematicMeans,
    /// Linear fits beside the line integrals of polygons with more than three stations.
    pub fits: FitBooks,
    /// Kinetic energy by parts of the wind; nothing if they were not asked for.
    pub energy: EnergyBooks,
    /// The structure function at the end of each day and of the run; empty where it was not asked for.
    pub structure: Vec<StructureReport>,
    /// What the user should know of all stages.
    pub warnings: Vec<Warning>,
}

impl Outcome {
    /// The polygon of a number of the run.
    #[must_use]
    pub fn polygon<'a>(&'a self, setup: &'a Setup, number: usize) -> Option<&'a StationPolygon> {
        let polygons = &setup.built.polygons;
        let extra = || self.extra.get(number.checked_sub(polygons.len())?);
        polygons.get(number).or_else(|| Some(&extra()?.polygon))
    }

    /// Share of the rows of listed stations that were used.
    #[must_use]
    pub fn share_used(&self) -> f64 {
        let read = self.reading.rows.passed.max(1);
        self.aligned.passed as f64 / read as f64
    }
}

/// The structure function at one time.
#[derive(Debug, Clone)]
pub struct StructureReport {
    /// The last analysis time that is in it.
    pub time: Time,
    /// What was found.
    pub function: StructureFunction,
    /// The mean squared differences of the window by distance.
    pub rows: Vec<StructureRow>,
}

/// A block as it is estimated: what writers and finders of events see.
pub struct BlockView<'a> {
    /// The estimates of all polygons at the times of the block.
    pub estimates: &'a EstimateBlock,
    /// Where they are asked for.
    pub kinematics: Option<&'a KinematicsBlock>,
    /// Observed scalars, where kinematics are asked for and the reports have any.
    pub scalars: Option<&'a ScalarCells>,
    /// Where it is asked for.
    pub decomposition: Option<&'a DecompositionBlock>,
    /// The winds of all stations at these times.
    pub winds: &'a WindBlock,
    /// The structure function at each time; none if none was asked for.
    pub models: &'a [StructureFunction],
}

/// Runs the main job on reports in the order of time, or in any order. `encode` turns a block into what `write` takes;
/// blocks are encoded in parallel and written in the order of time, so the output depends neither on the number of
/// threads nor on how the reports were read. `progress` hears how many rows have been read.
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
    encode: impl Fn(&BlockView) -> T + Sync,
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
    estimation.outliers.put(&mut reading.stations);
    if !estimation.any_moving && setup.settings.analysis.level.is_some() {
        return Err(Error::Reports(
            "`analysis.level` is stated, but the reports have no level (`columns.level`)".into(),
        ));
    }
    if estimation.books.period.times == 0 {
        return Err(no_usable_report(&mut reading));
    }
    let silent = never_reported(setup, &estimation.values);
    let doubtful = doubtful_fits(setup, &estimation.sums.fits);
    let warnings = [
        &setup.warnings,
        &setup.built.warnings,
        &reading.warnings,
        &estimation.warnings,
        &silent,
        &doubtful,
    ];
    Ok(Outcome {
        warnings: warnings.into_iter().flatten().cloned().collect(),
        reading,
        aligned: estimation.books.all,
        used: estimation.books.used,
        period: estimation.books.period,
        values: estimation.values,
        height_factors: estimation.sensors.height_factors,
        extremes: estimation.sums.extremes,
        attributions: attribute(&setup.built.polygons, &estimation.sums.statistics),
        statistics: estimation.sums.statistics,
        means: estimation.sums.means,
        extra: estimation.remesh.map(|r| r.extra).unwrap_or_default(),
        causes: estimation.sums.causes,
        fits: estimation.sums.fits,
        energy: estimation.sums.energy,
        kinematic_means: estimation.sums.kinematics,
        structure: estimation
            .field
            .filter(|_| setup.settings.errors.complete)
            .map(FieldState::into_reports)
            .unwrap_or_default(),
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

/// Reports on levels need a level to be asked for.
pub(super) fn levels_agree(table: &ReportTable, settings: &Settings) -> Result<(), Error> {
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

/// Polygons whose line integral and linear fit disagree.
fn doubtful_fits(setup: &Setup, fits: &FitBooks) -> Vec<Warning> {
    let doubtful = fits.0.iter().filter(|book| book.is_doubtful());
    let warning = |book: &FitBook| Warning::FitDisagrees {
        polygon: setup.built.polygons[book.polygon].id.clone(),
        share: book.share(),
        times: book.times,
    };
    doubtful.map(warning).collect()
}

/// Why there is nothing to estimate from, in the words of what was read.
pub(super) fn no_usable_report(reading: &mut Reading) -> Error {
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
