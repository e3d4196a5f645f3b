//! The estimates of a block with all that is said of them.

use super::remesh::Fill;
use crate::align::WindBlock;
use crate::check::Flag;
use crate::integral::{
    ErrorBudget, ErrorParts, EstimateBlock, ExtraPolygon, FalseDiscovery, FitColumn, Sampling,
    SecondOpinion, complete_errors, estimate, find_causes, find_significant,
};
use crate::polygon::{BuiltPolygons, StationPolygon};
use crate::settings::PolygonLimits;
use crate::station::{Network, Position};
use crate::structure::StructureFunction;

/// What all blocks of a run have in common.
pub(super) struct Common<'a> {
    pub(super) polygons: &'a [StationPolygon],
    pub(super) errors: Option<&'a ErrorModel>,
    pub(super) rule: &'a FalseDiscovery,
    pub(super) limits: &'a PolygonLimits,
}

/// The triangles that fill the holes in a block, as they are estimated.
pub(super) struct Holes {
    pub(super) fill: Fill,
    pub(super) extra: Vec<ExtraPolygon>,
    pub(super) errors: Option<ErrorModel>,
}

impl Common<'_> {
    /// The estimates of a block; how long the errors of sampling and timing of each polygon last, s.
    pub(super) fn estimate(
        &self,
        winds: &WindBlock,
        models: &[StructureFunction],
        holes: Option<Holes>,
    ) -> (EstimateBlock, Vec<f64>) {
        let lasting = |errors: Option<&ErrorModel>, polygons: usize| match errors {
            Some(errors) => errors.lasting(polygons, models),
            None => vec![1.0; polygons],
        };
        let mut block = with_errors(self.polygons, self.errors, winds, models);
        let mut last = lasting(self.errors, self.polygons.len());
        if let Some(Holes {
            fill,
            extra,
            errors,
        }) = holes
        {
            let polygons = &fill.built.polygons;
            let estimates = with_errors(polygons, errors.as_ref(), winds, models);
            last.extend(lasting(errors.as_ref(), polygons.len()));
            fill.append(self.polygons, &mut block, extra, estimates);
        }
        find_significant(&mut block, self.rule);
        if let Some(errors) = self.errors {
            block.fits = errors.fits(winds, models, &block);
        }
        find_causes(&mut block, self.polygons, winds, self.limits);
        (block, last)
    }
}

/// Estimates with their errors.
fn with_errors(
    polygons: &[StationPolygon],
    errors: Option<&ErrorModel>,
    winds: &WindBlock,
    models: &[StructureFunction],
) -> EstimateBlock {
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
    block
}

/// What the complete errors of the polygons need beside the structure function.
pub(super) struct ErrorModel {
    pub(super) sampling: Sampling,
    /// For each polygon with more than three stations.
    opinions: Vec<(usize, SecondOpinion)>,
}

impl ErrorModel {
    /// For the polygons of a network with stations `spacing` m apart.
    pub(super) fn new(built: &BuiltPolygons, network: &Network, spacing: f64) -> Self {
        let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
        let (polygons, edges) = (&built.polygons, &built.edges);
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
    pub(super) fn lasting(&self, polygons: usize, models: &[StructureFunction]) -> Vec<f64> {
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
