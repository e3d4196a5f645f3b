//! From the reports to the calibration of the stations.

use rayon::prelude::*;

use super::estimation::{corrections, height_factors, sensor_errors};
use super::field::FieldState;
use super::run::{levels_agree, no_usable_report};
use super::{Reading, Setup, Window, Windows};
use crate::align::{Aligner, StationSensors, WindBlock, block_times};
use crate::calibration::{Calibration, CalibrationSettings, Calibrator, Cost, wake_sectors};
use crate::error::Error;
use crate::report::{InputOrder, ReportFiles};
use crate::station::Declinations;
use crate::warning::Warning;

/// What came of a calibration run.
#[derive(Debug)]
pub struct CalibrationOutcome {
    /// The books of the reports as read and checked.
    pub reading: Reading,
    /// What was found.
    pub calibration: Calibration,
    /// What leaving each ticket costs.
    pub costs: Vec<Cost>,
    /// Magnetic declination of each station, degrees, in the middle of the record.
    pub declinations: Vec<Option<f64>>,
    /// What the user should know.
    pub warnings: Vec<Warning>,
}

/// Calibrates the stations of a network. Corrections of the station list are applied first, so what is found is what they
/// leave. `progress` hears how many rows have been read.
///
/// # Errors
/// As [`super::run()`].
pub fn calibrate(
    setup: &Setup,
    order: InputOrder,
    mut progress: impl FnMut(u64),
) -> Result<CalibrationOutcome, Error> {
    let network = &setup.network;
    known_stations(setup)?;
    let files = ReportFiles::new(&setup.settings.reports, network);
    let mut windows = Windows::new(&files, &setup.settings, order)?;
    let (factors, height_warnings) = height_factors(&setup.settings, network);
    let spacing = setup.spacing();
    let interval = setup.settings.analysis.interval.as_secs_f64();
    let mut state = State {
        setup,
        sensors: StationSensors {
            errors: Vec::new(),
            height_factors: factors,
        },
        field: spacing.map(|m| FieldState::new(&setup.settings, network, m)),
        calibrator: Calibrator::new(
            network,
            spacing.unwrap_or(1.0),
            interval,
            settings_of(setup),
        ),
    };
    let mut current = windows.after(None)?;
    while let Some(window) = current {
        levels_agree(&window.table, &setup.settings)?;
        let (next, ()) = rayon::join(|| windows.after(Some(&window)), || state.window(&window));
        current = next?;
        progress(windows.rows());
    }
    let mut reading = windows.reading();
    let Some([first, last]) = state.calibrator.period() else {
        return Err(no_usable_report(&mut reading));
    };
    let middle = first.plus_micros((last.micros() - first.micros()) / 2);
    let model = Declinations::new(network);
    let declinations: Vec<Option<f64>> = (0..network.len()).map(|s| model.at(s, middle)).collect();
    let calibration = state.calibrator.finish(&declinations);
    let polygons = &setup.built.polygons;
    let costs = calibration.tickets.iter().map(|t| t.cost(polygons));
    let warnings = [&setup.warnings, &reading.warnings, &height_warnings];
    Ok(CalibrationOutcome {
        costs: costs.collect(),
        warnings: warnings.into_iter().flatten().cloned().collect(),
        reading,
        calibration,
        declinations,
    })
}

/// What is kept from window to window.
struct State<'a> {
    setup: &'a Setup,
    sensors: StationSensors,
    field: Option<FieldState>,
    calibrator: Calibrator,
}

impl State<'_> {
    fn window(&mut self, window: &Window) {
        let setup = self.setup;
        self.sensors.errors = sensor_errors(&setup.settings.sensor, &window.rounding);
        let analysis = &setup.settings.analysis;
        let multiples = window.multiples.clone();
        let aligner = Aligner::new(&window.table, analysis, &self.sensors, multiples)
            .with_corrections(corrections(&setup.network));
        let blocks = aligner.grid().blocks(block_times(setup.network.len()));
        let winds: Vec<WindBlock> = blocks
            .into_par_iter()
            .map(|times| aligner.align(times))
            .collect();
        let Some(field) = &mut self.field else {
            return;
        };
        let models = field.advance(&winds);
        for (block, models) in winds.iter().zip(&models) {
            self.calibrator.take(block, models);
        }
        field.keep_last(winds);
    }
}

/// Refuses settings that name stations which are not in the list.
fn known_stations(setup: &Setup) -> Result<(), Error> {
    let chosen = &setup.settings.calibration;
    let sectors = chosen.station_sectors.keys();
    let rotors = chosen.station_rotors.keys();
    for (key, named) in [
        ("exclude_sectors_of", sectors.collect::<Vec<_>>()),
        ("rotor_diameter_of", rotors.collect()),
    ] {
        let unknown = named.iter().map(|id| id.as_str());
        let unknown: Vec<&str> = unknown
            .filter(|id| setup.network.find(id).is_none())
            .collect();
        if !unknown.is_empty() {
            return Err(Error::Network(format!(
                "`calibration.{key}` names stations that are not in the list: {}",
                unknown.join(", ")
            )));
        }
    }
    Ok(())
}

/// Sectors that turbines disturb, by station.
fn wakes(setup: &Setup) -> Vec<Vec<[f64; 2]>> {
    let chosen = &setup.settings.calibration;
    let stations = setup.network.stations().iter();
    let diameter = |id: &String| {
        let own = chosen.station_rotors.get(id).copied();
        own.or(chosen.rotor).unwrap_or(0.0)
    };
    let diameters: Vec<f64> = stations.map(|s| diameter(&s.id)).collect();
    wake_sectors(&setup.network, &diameters, chosen.wake_reach)
}

/// The settings of the calibration, stations by their number.
fn settings_of(setup: &Setup) -> CalibrationSettings {
    let chosen = &setup.settings.calibration;
    let stations = setup.network.stations().iter();
    let averaging = setup.settings.reports.first();
    CalibrationSettings {
        averaging: averaging.map_or(0.0, |r| r.format.time.averaging.as_secs_f64()),
        sectors: chosen.sectors.clone(),
        station_sectors: stations
            .zip(wakes(setup))
            .map(|(s, mut sectors)| {
                sectors.extend(chosen.station_sectors.get(&s.id).into_iter().flatten());
                sectors
            })
            .collect(),
        ..CalibrationSettings::default()
    }
}
