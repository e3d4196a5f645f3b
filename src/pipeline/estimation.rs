//! The estimates of one window of time after the other.

use rayon::prelude::*;

use super::field::FieldState;
use super::outliers::OutlierBooks;
use super::{Setup, Window};
use crate::align::{AlignBooks, Aligner, StationSensors, WindBlock, block_times, height_factor};
use crate::check::Flag;
use crate::integral::{
    CauseBooks, ErrorBudget, ErrorParts, EstimateBlock, Extremes, FalseDiscovery, FitBooks,
    FitColumn, RunStatistics, Sampling, SecondOpinion, complete_errors, estimate, find_causes,
    find_significant,
};
use crate::report::{Rounding, SpeedStep};
use crate::settings::{SensorErrors, Settings};
use crate::spatial::SpatialCheck;
use crate::station::{Correction, Network, Position, Station};
use crate::structure::StructureFunction;
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
    rule: FalseDiscovery,
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
                .map(|m| ErrorModel::new(setup, m)),
            rule: FalseDiscovery::new(
                setup.settings.errors.false_discovery_rate,
                setup.built.polygons.len(),
            ),
            setup,
        }
    }

    /// Estimates all polygons at the analysis times of a window; the encoded blocks in the order of time.
    pub(super) fn window<T: Send>(
        &mut self,
        window: &Window,
        encode: &(impl Fn(&EstimateBlock) -> T + Sync),
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
        let (errors, rule) = (self.errors.as_ref(), &self.rule);
        let polygons = setup.built.polygons.len();
        let results: Vec<(Sums, T)> = winds
            .par_iter()
            .zip(models)
            .map(|(winds, models)| {
                let block = estimate_complete(setup, errors, rule, winds, &models);
                let lasting = match errors {
                    Some(errors) => errors.lasting(polygons, &models),
                    None => vec![1.0; polygons],
                };
                let causes = CauseBooks::of(&block, polygons);
                let sums = Sums {
                    extremes: Extremes::of(&block, &setup.planetary),
                    statistics: RunStatistics::of(&block, &lasting),
                    fits: FitBooks::of(&block),
                    causes,
                };
                (sums, encode(&block))
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

/// What the estimates come to over the times.
#[derive(Default)]
pub(super) struct Sums {
    pub(super) extremes: Extremes,
    pub(super) statistics: RunStatistics,
    pub(super) fits: FitBooks,
    pub(super) causes: CauseBooks,
}

impl Sums {
    fn merge(&mut self, later: &Self) {
        self.extremes.merge(&later.extremes);
        self.statistics.merge(&later.statistics);
        self.fits.merge(&later.fits);
        self.causes.merge(&later.causes);
    }
}

/// The estimates of a block with all that is said of them.
fn estimate_complete(
    setup: &Setup,
    errors: Option<&ErrorModel>,
    rule: &FalseDiscovery,
    winds: &WindBlock,
    models: &[StructureFunction],
) -> EstimateBlock {
    let polygons = &setup.built.polygons;
    let mut block = estimate(polygons, winds);
    block.budget = match errors {
        Some(errors) => complete_errors(polygons, &errors.sampling, winds, models, &mut block),
        None => {
            let instruments_alone = |se: &[f64]| ErrorParts {
                instrument: se.to_vec(),
                sampling: vec![0.0; se.len()],
                timing: vec![0.0; se.len()],
            };
            ErrorBudget {
                vorticity: instruments_alone(&block.vorticity_se),
                divergence: instruments_alone(&block.divergence_se),
            }
        }
    };
    find_significant(&mut block, rule);
    if let Some(errors) = errors {
        block.fits = errors.fits(winds, models, &block);
    }
    find_causes(&mut block, polygons, winds, &setup.settings.limits);
    block
}

/// What the complete errors of the polygons need beside the structure function.
struct ErrorModel {
    sampling: Sampling,
    /// For each polygon with more than three stations.
    opinions: Vec<(usize, SecondOpinion)>,
}

impl ErrorModel {
    fn new(setup: &Setup, spacing: f64) -> Self {
        let positions: Vec<Position> = setup
            .network
            .stations()
            .iter()
            .map(|s| s.position)
            .collect();
        let (polygons, edges) = (&setup.built.polygons, &setup.built.edges);
        let sampling = Sampling::new(polygons, edges, &positions, spacing);
        let opinions = polygons.iter().enumerate();
        let opinions = opinions
            .filter_map(|(p, polygon)| Some((p, SecondOpinion::new(polygon, p, &sampling)?)));
        Self {
            opinions: opinions.collect(),
            sampling,
        }
    }

    /// How long the errors of sampling and timing of each polygon last, s.
    fn lasting(&self, polygons: usize, models: &[StructureFunction]) -> Vec<f64> {
        let Some(structure) = models.get(models.len() / 2) else {
            return vec![1.0; polygons];
        };
        let edges = (0..polygons).map(|p| self.sampling.mean_edge(p));
        edges
            .map(|edge| structure.decorrelation_time(edge))
            .collect()
    }

    /// The linear fits of a block.
    fn fits(
        &self,
        winds: &WindBlock,
        models: &[StructureFunction],
        block: &EstimateBlock,
    ) -> Vec<FitColumn> {
        let n = block.times.len();
        let column = |(p, opinion): &(usize, SecondOpinion)| {
            let at = models.iter().enumerate().map(|(t, structure)| {
                let is_there = block.flag[p * n + t] < Flag::Fail;
                is_there.then(|| {
                    let edges = &self.sampling.constants(structure.exponent)[*p];
                    opinion.compare(winds, t, structure, edges)
                })
            });
            FitColumn {
                polygon: *p,
                at: at.collect(),
            }
        };
        self.opinions.iter().map(column).collect()
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
