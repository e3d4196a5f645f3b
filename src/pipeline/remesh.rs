//! Triangles that fill the holes where stations are missing (`polygons.missing = "remesh"`).
//!
//! Without one of its points a Delaunay triangulation keeps all triangles that do not touch it: their circumcircles stay
//! empty. So at each time the triangles of the whole network whose stations report stand as they are, and only the holes
//! are triangulated anew. Rings and regions that the user named are not touched: without one of their stations they have no
//! value.

use std::collections::{BTreeMap, HashMap, HashSet};

use super::Setup;
use super::complete::{ErrorModel, Holes};
use crate::align::WindBlock;
use crate::check::Flag;
use crate::integral::{EstimateBlock, ExtraPolygon, planetary_vorticity};
use crate::polygon::{
    BuiltPolygons, PolygonKind, StationPolygon, build_triangles, smallest_first, triangulate,
};
use crate::settings::PolygonLimits;
use crate::station::{Network, Position};

/// Sets of reporting stations whose triangles are kept.
const SETS_KEPT: usize = 4096;

/// The triangles of a run that are not those of the whole network.
pub(super) struct Remesh {
    network: Network,
    positions: Vec<Position>,
    limits: PolygonLimits,
    /// Stations that make triangles.
    stations: Vec<usize>,
    /// All triangles of the whole network, those left out too.
    whole: HashSet<[usize; 3]>,
    /// Polygons of the whole network, rings and regions too.
    polygons: usize,
    spacing: Option<f64>,
    /// By the stations that report, one bit each: the triangles in the holes.
    holes: HashMap<Vec<u64>, Vec<[usize; 3]>>,
    numbers: BTreeMap<[usize; 3], usize>,
    /// Every triangle that was used, in the order in which they came.
    pub(super) extra: Vec<ExtraPolygon>,
}

/// The triangles that fill the holes in a block.
pub(super) struct Fill {
    pub(super) built: BuiltPolygons,
    /// For each its number in the run.
    numbers: Vec<usize>,
    /// Triangles × times: where each stands.
    active: Vec<bool>,
}

impl Remesh {
    /// `spacing` is that of the complete errors, if they are asked for.
    pub(super) fn new(setup: &Setup, spacing: Option<f64>) -> Self {
        let (network, built) = (&setup.network, &setup.built);
        let excluded = built.excluded.iter().map(|(polygon, _)| polygon);
        let triangles = built.polygons.iter().chain(excluded);
        let triangles = triangles.filter(|p| p.kind == PolygonKind::Triangle);
        let whole: HashSet<[usize; 3]> = triangles.filter_map(corners).collect();
        let mut stations: Vec<usize> = whole.iter().flatten().copied().collect();
        stations.sort_unstable();
        stations.dedup();
        Self {
            network: network.clone(),
            positions: network.stations().iter().map(|s| s.position).collect(),
            limits: setup.settings.limits,
            spacing,
            stations,
            whole,
            polygons: built.polygons.len(),
            holes: HashMap::new(),
            numbers: BTreeMap::new(),
            extra: Vec::new(),
        }
    }

    /// The triangles that fill the holes at the times of a block, and what their estimates need; `None` where there are
    /// none.
    pub(super) fn holes(&mut self, winds: &WindBlock) -> Option<Holes> {
        let fill = self.fill(winds)?;
        let of = |&number: &usize| self.extra.get(number.checked_sub(self.polygons)?).cloned();
        let errors = |spacing| ErrorModel::new(&fill.built, &self.network, spacing);
        Some(Holes {
            extra: fill.numbers.iter().filter_map(of).collect(),
            errors: self.spacing.map(errors),
            fill,
        })
    }

    fn fill(&mut self, winds: &WindBlock) -> Option<Fill> {
        let n = winds.times.len();
        let mut at: BTreeMap<[usize; 3], Vec<usize>> = BTreeMap::new();
        for t in 0..n {
            let there = |&&s: &&usize| winds.flag[s * n + t].is_usable();
            let present: Vec<usize> = self.stations.iter().filter(there).copied().collect();
            if present.len() == self.stations.len() {
                continue;
            }
            let mut bits = vec![0_u64; self.network.len().div_ceil(64)];
            for s in &present {
                bits[s / 64] |= 1 << (s % 64);
            }
            if self.holes.len() >= SETS_KEPT {
                self.holes.clear();
            }
            let holes = self.holes.entry(bits).or_insert_with(|| {
                let all = triangulate(&self.positions, &present).unwrap_or_default();
                all.into_iter()
                    .filter(|triangle| !self.whole.contains(triangle))
                    .collect()
            });
            for &triangle in &*holes {
                at.entry(triangle).or_default().push(t);
            }
        }
        if at.is_empty() {
            return None;
        }
        let triangles: Vec<[usize; 3]> = at.keys().copied().collect();
        let built = build_triangles(&self.network, &triangles, &self.limits);
        let mut numbers = Vec::with_capacity(built.polygons.len());
        let mut active = vec![false; built.polygons.len() * n];
        for (p, polygon) in built.polygons.iter().enumerate() {
            let Some(corners) = corners(polygon) else {
                continue;
            };
            for &t in at.get(&corners).into_iter().flatten() {
                active[p * n + t] = true;
            }
            let next = self.polygons + self.extra.len();
            let number = *self.numbers.entry(corners).or_insert(next);
            if number == next {
                self.extra.push(ExtraPolygon {
                    number,
                    polygon: polygon.clone(),
                    planetary: planetary_vorticity(polygon, &self.positions),
                });
            }
            numbers.push(number);
        }
        Some(Fill {
            built,
            numbers,
            active,
        })
    }
}

impl Fill {
    /// Appends the estimates of the triangles in the holes; rows of triangles that do not stand at a time are absent.
    pub(super) fn append(
        &self,
        polygons: &[StationPolygon],
        block: &mut EstimateBlock,
        extra: Vec<ExtraPolygon>,
        mut holes: EstimateBlock,
    ) {
        let n = block.times.len();
        block.absent = vec![false; block.flag.len()];
        for (p, polygon) in polygons.iter().enumerate() {
            if polygon.kind == PolygonKind::Triangle {
                let cells = p * n..(p + 1) * n;
                let flags = block.flag[cells.clone()].iter();
                for (absent, flag) in block.absent[cells].iter_mut().zip(flags) {
                    *absent = !flag.is_usable();
                }
            }
        }
        for (cell, active) in self.active.iter().enumerate() {
            if !active {
                holes.clear(cell, Flag::Missing);
            }
        }
        block
            .absent
            .extend(self.active.iter().map(|active| !active));
        block.append(holes, extra);
    }
}

/// The corners of a triangle, the lowest number first.
fn corners(polygon: &StationPolygon) -> Option<[usize; 3]> {
    let ring: [usize; 3] = polygon.outline.first()?.as_slice().try_into().ok()?;
    Some(smallest_first(ring))
}
