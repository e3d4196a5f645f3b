//! The estimates of one window of time after the other.

use rayon::prelude::*;

use super::complete::{Common, ErrorModel, Holes};
use super::decompose::Decomposition;
use super::field::FieldState;
use super::outliers::OutlierBooks;
use super::remesh::Remesh;
use super::run::BlockView;
use super::{Setup, Window};
use crate::align::{AlignBooks, Aligner, StationSensors, WindBlock, block_times, height_factor};
use crate::helmholtz::EnergyBooks;
use crate::integral::{
    CauseBooks, EstimateBlock, Extremes, FalseDiscovery, FitBooks, GroupMeans, RunStatistics,
};
use crate::kinematics::{KinematicMeans, Kinematics};
use crate::report::{Rounding, SpeedStep};
use crate::settings::{Missing, SensorErrors, Settings};
use crate::spatial::SpatialCheck;
use crate::station::{Correction, Network, Position, Station};
use crate::warning::Warning;

/// What is kept from window to window.
pub(super) struct Estimation<'a> {
    setup: &'a Setup,
    pub(super) sensors: StationSensors,
    pub(super) warnings: Vec<Warning>,
    pub(super) books: AlignBooks,
    /// For the reports that the last window hands on whether a value came of them, by station and time.
    carried: Vec<bool>,
    pub(super) any_moving: bool,
    pub(super) values: Vec<u64>,
    pub(super) sums: Sums,
    pub(super) field: Option<FieldState>,
    spatial: Option<SpatialCheck>,
    pub(super) outliers: OutlierBooks,
    errors: Option<ErrorModel>,
    pub(super) remesh: Option<Remesh>,
    rule: FalseDiscovery,
    /// Where they are asked for.
    kinematics: Option<Kinematics>,
    decomposition: Option<Decomposition>,
}

impl<'a> Estimation<'a> {
    pub(super) fn new(setup: &'a Setup) -> Self {
        let (height_factors, warnings) = height_factors(&setup.settings, &setup.network);
        let settings = &setup.settings;
        let complete = settings.errors.complete;
        let spacing = setup.spacing();
        let test = spacing.filter(|_| settings.tests_neighbours());
        let model = spacing.filter(|_| complete || test.is_some());
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
            sums: Sums::default(),
            field: model.map(|m| FieldState::new(settings, &setup.network, m)),
            spatial: test.map(|m| SpatialCheck::new(&setup.network, m, settings.check.neighbour)),
            outliers: OutlierBooks::default(),
            errors: spacing
                .filter(|_| complete)
                .map(|m| ErrorModel::new(&setup.built, &setup.network, m)),
            remesh: (settings.missing == Missing::Remesh)
                .then(|| Remesh::new(setup, spacing.filter(|_| complete))),
            kinematics: kinematics(setup),
            decomposition: settings.decompose.then(|| Decomposition::new(setup)),
            rule: FalseDiscovery::new(
                setup.settings.errors.false_discovery_rate,
                // A triangulation of n stations has fewer than 2 n triangles.
                setup.built.polygons.len() + 2 * setup.network.len(),
            ),
            setup,
        }
    }

    /// Estimates all polygons at the analysis times of a window; the encoded blocks in the order of time.
    pub(super) fn window<T: Send>(
        &mut self,
        window: &Window,
        encode: &(impl Fn(&BlockView) -> T + Sync),
    ) -> Vec<T> {
        let setup = self.setup;
        let table = &window.table;
        let stations = table.stations();
        self.any_moving |= table.has_moving();
        self.sensors.errors = sensor_errors(&setup.settings.sensor, &window.rounding);
        let analysis = &setup.settings.analysis;
        let aligner = Aligner::new(table, analysis, &self.sensors, window.multiples.clone())
            .with_corrections(corrections(&setup.network));
        let handed_on = (0..stations).flat_map(|s| table.carried(s));
        let used = handed_on.zip(&self.carried).filter(|&(_, &used)| used);
        aligner.mark_used(used.map(|(i, _)| i));

        let blocks = aligner.grid().blocks(block_times(stations));
        let mut winds: Vec<WindBlock> = blocks
            .into_par_iter()
            .map(|times| aligner.align(times))
            .collect();
        let within = setup.settings.check.neighbour.report_within;
        let changes = |station, time| aligner.changes_around(station, time, within);
        let models = match (&mut self.field, &mut self.spatial) {
            (Some(field), Some(check)) => {
                let (models, outliers) = field.judge(&mut winds, check, &changes);
                self.outliers.add(&aligner, analysis, &winds, &outliers);
                models
            }
            (Some(field), None) => field.advance(&winds),
            (None, _) => vec![Vec::new(); winds.len()],
        };
        let polygons = setup.built.polygons.len();
        let holes: Vec<Option<Holes>> = match &mut self.remesh {
            Some(remesh) => winds.iter().map(|winds| remesh.holes(winds)).collect(),
            None => winds.iter().map(|_| None).collect(),
        };
        let common = Common {
            polygons: &setup.built.polygons,
            errors: self.errors.as_ref(),
            rule: &self.rule,
            limits: &setup.settings.limits,
        };
        let kinematics = self.kinematics.as_ref();
        let scalar_errors: Vec<f64> = setup.settings.scalars.iter().map(|s| s.error).collect();
        let decomposition = self.decomposition.as_ref();
        let results: Vec<(Sums, T)> = winds
            .par_iter()
            .zip(models)
            .zip(holes)
            .map(|((winds, models), holes)| {
                let (block, lasting) = common.estimate(winds, &models, holes);
                let mut sums = Sums::of(setup, &block, &lasting, polygons);
                let decomposition = decomposition.map(|d| d.of(winds));
                sums.energy = decomposition
                    .as_ref()
                    .map(EnergyBooks::of)
                    .unwrap_or_default();
                let sampling = common.errors.map(|e| (&e.sampling, models.as_slice()));
                let scalars = kinematics.filter(|_| !scalar_errors.is_empty()).map(|k| {
                    let mesh = (setup.built.polygons.as_slice(), &setup.built.edges);
                    let values = aligner.scalars(&winds.times, scalar_errors.len());
                    k.scalars(mesh, winds, &block, sampling, (&values, &scalar_errors))
                });
                let moments = kinematics.map(|k| (k, k.of(winds, &block, sampling)));
                let by = &setup.settings.means;
                if let Some((k, moments)) = moments.as_ref().filter(|_| by.by.is_some()) {
                    let persistent = k.with_persistent_errors(winds, &block, sampling);
                    sums.kinematics = KinematicMeans::of(moments, &persistent, &lasting, by);
                }
                let kinematics = moments.map(|(_, moments)| moments);
                let seen = BlockView {
                    estimates: &block,
                    kinematics: kinematics.as_ref(),
                    scalars: scalars.as_ref(),
                    decomposition: decomposition.as_ref(),
                    winds,
                    models: &models,
                };
                (sums, encode(&seen))
            })
            .collect();

        for block in &winds {
            for (sum, n) in self.values.iter_mut().zip(block.values()) {
                *sum += n;
            }
        }
        if let Some(field) = &mut self.field {
            field.keep_last(winds);
        }
        let mut encoded = Vec::with_capacity(results.len());
        for (sums, result) in results {
            self.sums.merge(&sums);
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

/// The frames of the polygons, if their kinematics are asked for.
fn kinematics(setup: &Setup) -> Option<Kinematics> {
    let settings = setup.settings.kinematics;
    let positions = setup.network.stations().iter().map(|s| s.position);
    let positions: Vec<Position> = positions.collect();
    let (polygons, edges) = (&setup.built.polygons, &setup.built.edges);
    settings
        .write
        .then(|| Kinematics::new(polygons, edges, &positions, &setup.planetary, settings))
}

/// What the estimates come to over the times.
#[derive(Default)]
pub(super) struct Sums {
    pub(super) extremes: Extremes,
    pub(super) statistics: RunStatistics,
    pub(super) means: GroupMeans,
    pub(super) fits: FitBooks,
    pub(super) causes: CauseBooks,
    pub(super) energy: EnergyBooks,
    pub(super) kinematics: KinematicMeans,
}

impl Sums {
    /// Those of a block; polygons from `common` on are extra.
    fn of(setup: &Setup, block: &EstimateBlock, lasting: &[f64], common: usize) -> Self {
        let extra = block.extra.iter().map(|extra| extra.planetary);
        let planetary: Vec<f64> = setup.planetary.iter().copied().chain(extra).collect();
        let mut sums = Self {
            extremes: Extremes::of(block, &planetary),
            statistics: RunStatistics::of(block, lasting),
            means: GroupMeans::of(block, lasting, &setup.settings.means),
            fits: FitBooks::of(block),
            causes: CauseBooks::of(block, planetary.len()),
            energy: EnergyBooks::default(),
            kinematics: KinematicMeans::default(),
        };
        if !block.extra.is_empty() {
            sums.extremes.renumber(common, &block.extra);
            sums.statistics.renumber(common, &block.extra);
            for statistics in sums.means.0.values_mut() {
                statistics.renumber(common, &block.extra);
            }
            sums.causes.renumber(common, &block.extra);
        }
        sums
    }

    fn merge(&mut self, later: &Self) {
        self.extremes.merge(&later.extremes);
        self.statistics.merge(&later.statistics);
        self.means.merge(&later.means);
        self.fits.merge(&later.fits);
        self.causes.merge(&later.causes);
        self.energy.merge(&later.energy);
        self.kinematics.merge(&later.kinematics);
    }
}

/// What the station list corrects the reports by.
pub(super) fn corrections(network: &Network) -> Vec<Option<Correction>> {
    let stations = network.stations().iter();
    stations.map(|s| s.correction.clone()).collect()
}

/// Errors of each station's sensor: as stated, with the steps that were found in its reports.
pub(super) fn sensor_errors(stated: &SensorErrors, rounding: &[Rounding]) -> Vec<SensorErrors> {
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
pub(super) fn height_factors(
    settings: &Settings,
    network: &Network,
) -> (Vec<Option<f64>>, Vec<Warning>) {
    let mut warnings = Vec::new();
    let factor = |station: &Station| {
        let Some(reduction) = settings.analysis.height else {
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
    let factors = network.stations().iter().map(factor).collect();
    (factors, warnings)
}
