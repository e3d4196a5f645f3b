//! The estimates of one window of time after the other.

use rayon::prelude::*;

use super::run::StructureReport;
use super::{Setup, Window};
use crate::align::{AlignBooks, Aligner, StationSensors, WindBlock, block_times, height_factor};
use crate::check::Flag;
use crate::integral::{
    ErrorBudget, ErrorParts, EstimateBlock, Extremes, FalseDiscovery, FitBooks, FitColumn,
    GroupMeans, RunStatistics, Sampling, SecondOpinion, complete_errors, estimate,
    find_significant,
};
use crate::kinematics::{Kinematics, KinematicsBlock};
use crate::report::{Rounding, SpeedStep};
use crate::settings::{ErrorSettings, SensorErrors};
use crate::station::{Correction, Network, Position, Station};
use crate::structure::{
    BlockSums, NetworkGeometry, StructureFunction, StructureWindow, typical_spacing,
};
use crate::time::Time;
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
    pub(super) extremes: Extremes,
    pub(super) statistics: RunStatistics,
    pub(super) means: GroupMeans,
    pub(super) fits: FitBooks,
    pub(super) structure: StructureState,
    rule: FalseDiscovery,
    /// Where they are asked for.
    kinematics: Option<Kinematics>,
}

impl<'a> Estimation<'a> {
    pub(super) fn new(setup: &'a Setup) -> Self {
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
            means: GroupMeans::default(),
            fits: FitBooks::default(),
            structure: StructureState::new(setup),
            kinematics: kinematics(setup),
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
        encode: &(impl Fn(&EstimateBlock, Option<&KinematicsBlock>) -> T + Sync),
    ) -> Vec<T> {
        let setup = self.setup;
        let table = &window.table;
        let stations = table.stations();
        self.any_moving |= table.has_moving();
        self.sensors.errors = sensor_errors(&setup.settings.sensor, &window.rounding);
        let analysis = &setup.settings.analysis;
        let aligner = Aligner::new(table, analysis, &self.sensors, window.multiples.clone())
            .with_corrections(corrections(setup));
        let handed_on = (0..stations).flat_map(|s| table.carried(s));
        let used = handed_on.zip(&self.carried).filter(|&(_, &used)| used);
        aligner.mark_used(used.map(|(i, _)| i));

        let blocks = aligner.grid().blocks(block_times(stations));
        let winds: Vec<WindBlock> = blocks
            .into_par_iter()
            .map(|times| aligner.align(times))
            .collect();
        let models = self.structure.advance(&winds);
        let (structure, rule) = (&self.structure, &self.rule);
        let kinematics = self.kinematics.as_ref();
        let results: Vec<(Extremes, RunStatistics, GroupMeans, FitBooks, T)> = winds
            .par_iter()
            .zip(models)
            .map(|(winds, models)| {
                let block = estimate_complete(setup, structure, rule, winds, &models);
                let peaks = Extremes::of(&block, &setup.planetary);
                let lasting = structure.lasting(&models);
                let sums = RunStatistics::of(&block, &lasting);
                let means = GroupMeans::of(&block, &lasting, &setup.settings.means);
                let kinematics = kinematics.map(|k| {
                    let model = structure.model.as_ref();
                    k.of(
                        winds,
                        &block,
                        model.map(|m| (&m.sampling, models.as_slice())),
                    )
                });
                let encoded = encode(&block, kinematics.as_ref());
                (peaks, sums, means, FitBooks::of(&block), encoded)
            })
            .collect();

        for block in &winds {
            for (sum, n) in self.values.iter_mut().zip(block.values()) {
                *sum += n;
            }
        }
        self.structure.keep_last(winds);
        let mut encoded = Vec::with_capacity(results.len());
        for (peaks, sums, means, fits, result) in results {
            self.extremes.merge(&peaks);
            self.statistics.merge(&sums);
            self.means.merge(&means);
            self.fits.merge(&fits);
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
        if window.carried_from.is_none() {
            self.structure.report();
        }
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

/// The estimates of a block with all that is said of them.
fn estimate_complete(
    setup: &Setup,
    structure: &StructureState,
    rule: &FalseDiscovery,
    winds: &WindBlock,
    models: &[StructureFunction],
) -> EstimateBlock {
    let polygons = &setup.built.polygons;
    let mut block = estimate(polygons, winds);
    block.budget = match &structure.model {
        Some(model) => complete_errors(polygons, &model.sampling, winds, models, &mut block),
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
    if let Some(model) = &structure.model {
        block.fits = model.fits(winds, models, &block);
    }
    block
}

/// The wind-field model as it follows the run.
pub(super) struct StructureState {
    settings: ErrorSettings,
    interval: f64,
    /// `None` if the errors hold the instruments alone.
    model: Option<Model>,
    polygons: usize,
    /// The last block of the window before.
    last_block: Option<WindBlock>,
    /// At the end of each day, and of the run.
    pub(super) reports: Vec<StructureReport>,
    /// The last time taken in.
    last: Option<Time>,
}

struct Model {
    geometry: NetworkGeometry,
    /// How much of the time each station reported when the geometry was made: never, seldom, often.
    reporting: Vec<u8>,
    window: StructureWindow,
    sampling: Sampling,
    network: Network,
    /// For each polygon with more than three stations.
    opinions: Vec<(usize, SecondOpinion)>,
}

const DAY: i64 = 86_400_000_000;

impl StructureState {
    pub(super) fn new(setup: &Setup) -> Self {
        let settings = setup.settings.errors;
        let network = &setup.network;
        let spacing = setup.median_edge().or_else(|| typical_spacing(network));
        let model = spacing.filter(|_| settings.complete).map(|spacing| {
            let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
            let (polygons, edges) = (&setup.built.polygons, &setup.built.edges);
            let geometry = NetworkGeometry::new(network, spacing, &[]);
            let sampling = Sampling::new(polygons, edges, &positions, spacing);
            let opinions = polygons.iter().enumerate();
            let opinions = opinions
                .filter_map(|(p, polygon)| Some((p, SecondOpinion::new(polygon, p, &sampling)?)));
            Model {
                opinions: opinions.collect(),
                window: StructureWindow::new(&geometry, settings.structure),
                geometry,
                reporting: vec![OFTEN; network.len()],
                sampling,
                network: network.clone(),
            }
        });
        Self {
            settings,
            interval: setup.settings.analysis.interval.as_secs_f64(),
            model,
            polygons: setup.built.polygons.len(),
            last_block: None,
            reports: Vec::new(),
            last: None,
        }
    }

    /// Takes in the winds of a window; for each block the structure function at each of its times.
    pub(super) fn advance(&mut self, winds: &[WindBlock]) -> Vec<Vec<StructureFunction>> {
        let Some(model) = &mut self.model else {
            return winds.iter().map(|_| Vec::new()).collect();
        };
        model.follow_reporting(winds);
        let (settings, interval) = (&self.settings.structure, self.interval);
        let (geometry, last_block) = (&model.geometry, &self.last_block);
        let sums: Vec<BlockSums> = winds
            .par_iter()
            .enumerate()
            .map(|(k, block)| {
                let before = match k.checked_sub(1) {
                    Some(before) => winds.get(before),
                    None => last_block.as_ref(),
                };
                BlockSums::of(geometry, settings, interval, before, block)
            })
            .collect();
        let mut of_blocks = Vec::with_capacity(winds.len());
        for (block, sums) in winds.iter().zip(&sums) {
            let mut models = Vec::with_capacity(block.times.len());
            for day in block.times.chunk_by(|a, b| day_of(*a) == day_of(*b)) {
                let (Some(&first), Some(&last)) = (day.first(), day.last()) else {
                    continue;
                };
                if let Some(before) = self.last
                    && day_of(before) != day_of(first)
                {
                    self.reports.push(model.report(before));
                }
                models.extend(model.window.advance(&model.geometry, sums, day));
                self.last = Some(last);
            }
            of_blocks.push(models);
        }
        of_blocks
    }

    /// How long the errors of sampling and timing of each polygon last, s.
    fn lasting(&self, models: &[StructureFunction]) -> Vec<f64> {
        let Some((model, structure)) = self.model.as_ref().zip(models.get(models.len() / 2)) else {
            return vec![1.0; self.polygons];
        };
        let edges = (0..self.polygons).map(|p| model.sampling.mean_edge(p));
        edges
            .map(|edge| structure.decorrelation_time(edge))
            .collect()
    }

    pub(super) fn keep_last(&mut self, winds: Vec<WindBlock>) {
        if let Some(last) = winds.into_iter().next_back() {
            self.last_block = Some(last);
        }
    }

    /// Notes the model as it stands at the end of the run.
    fn report(&mut self) {
        if let (Some(model), Some(last)) = (&self.model, self.last) {
            self.reports.push(model.report(last));
        }
    }
}

/// Stations that report less than half of the time are seldom there ([`NetworkGeometry::new`]).
const SELDOM: u8 = 1;
const OFTEN: u8 = 2;

impl Model {
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

    fn report(&self, time: Time) -> StructureReport {
        StructureReport {
            time,
            function: *self.window.current(),
            rows: self.window.table(&self.geometry),
        }
    }
}

/// What the station list corrects the reports by.
pub(super) fn corrections(setup: &Setup) -> Vec<Option<Correction>> {
    let stations = setup.network.stations().iter();
    stations.map(|s| s.correction.clone()).collect()
}

fn day_of(time: Time) -> i64 {
    time.micros().div_euclid(DAY)
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
pub(super) fn height_factors(setup: &Setup) -> (Vec<Option<f64>>, Vec<Warning>) {
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
