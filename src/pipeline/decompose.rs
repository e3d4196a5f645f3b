//! The parts of the wind at the times of a run, with one factor for each set of reporting stations.

use std::collections::{BTreeMap, HashMap, HashSet};
use std::sync::{Arc, Mutex, PoisonError};

use super::Setup;
use crate::align::WindBlock;
use crate::helmholtz::{Decomposer, DecompositionBlock, Mesh};
use crate::polygon::{BuiltPolygons, PolygonKind, apart, build_triangles, triangulate};
use crate::settings::{Missing, PolygonLimits};
use crate::station::{Network, Position};
use crate::units::Wind;

/// Meshes kept times stations: some 100 MB, with fewer than 2 kB for each station.
const KEPT: usize = 1 << 16;

/// Triangles of stations: those within the limits, and those left out.
#[derive(Debug, Default)]
struct Triangles {
    used: Vec<[usize; 3]>,
    left_out: Vec<[usize; 3]>,
}

/// The meshes of a run.
pub(super) struct Decomposition {
    network: Network,
    positions: Vec<Position>,
    limits: PolygonLimits,
    /// Stations that make triangles.
    stations: Vec<usize>,
    /// Those of the whole network.
    whole: Triangles,
    /// Whether holes of missing stations are triangulated anew.
    remesh: bool,
    /// By the stations that report, one bit each; shared by all threads.
    kept: Mutex<HashMap<Vec<u64>, Option<Arc<Decomposer>>>>,
}

impl Decomposition {
    pub(super) fn new(setup: &Setup) -> Self {
        let network = &setup.network;
        let mut out = Self {
            positions: network.stations().iter().map(|s| s.position).collect(),
            limits: setup.settings.limits,
            stations: apart(network).0,
            whole: Triangles::of(&setup.built),
            remesh: setup.settings.missing == Missing::Remesh,
            kept: Mutex::default(),
            network: network.clone(),
        };
        // Rings alone may have been built.
        if out.whole.used.is_empty() {
            out.whole = out.of_stations(&out.stations);
        }
        out
    }

    /// The parts of the winds of a block. Times with the same reporting stations are solved together.
    pub(super) fn of(&self, winds: &WindBlock) -> DecompositionBlock {
        let n = winds.times.len();
        let mut sets: BTreeMap<Vec<u64>, Vec<usize>> = BTreeMap::new();
        let mut reporting = vec![0; n];
        for (t, count) in reporting.iter_mut().enumerate() {
            let mut bits = vec![0_u64; self.network.len().div_ceil(64)];
            for &s in &self.stations {
                if winds.flag[s * n + t].is_usable() {
                    bits[s / 64] |= 1 << (s % 64);
                    *count += 1;
                }
            }
            sets.entry(bits).or_default().push(t);
        }
        let mut at = vec![None; n];
        for (bits, times) in sets {
            let Some(decomposer) = self.decomposer(bits) else {
                continue;
            };
            let wind = |station: usize, k: usize| {
                let cell = station * n + times[k];
                Wind {
                    u: winds.u[cell],
                    v: winds.v[cell],
                }
            };
            let splits = decomposer.split(times.len(), wind);
            for (&t, split) in times.iter().zip(splits) {
                at[t] = Some((Arc::clone(decomposer.mesh()), split));
            }
        }
        DecompositionBlock {
            times: winds.times.clone(),
            reporting,
            at,
        }
    }

    /// The mesh of a set of stations with its factor.
    fn decomposer(&self, bits: Vec<u64>) -> Option<Arc<Decomposer>> {
        let lock = || self.kept.lock().unwrap_or_else(PoisonError::into_inner);
        if let Some(known) = lock().get(&bits) {
            return known.clone();
        }
        let reports = |s: usize| bits[s / 64] & (1 << (s % 64)) != 0;
        let triangles = if self.remesh {
            let present: Vec<usize> = self
                .stations
                .iter()
                .copied()
                .filter(|&s| reports(s))
                .collect();
            self.of_stations(&present).without_rim()
        } else {
            self.whole.of_reporting(reports).without_rim()
        };
        let mesh = Mesh::new(&triangles, &self.positions);
        let made = mesh.and_then(Decomposer::new).map(Arc::new);
        let mut kept = lock();
        if kept.len() * self.network.len() >= KEPT {
            kept.clear();
        }
        kept.insert(bits, made.clone());
        made
    }

    fn of_stations(&self, stations: &[usize]) -> Triangles {
        let all = triangulate(&self.positions, stations).unwrap_or_default();
        Triangles::of(&build_triangles(&self.network, &all, &self.limits))
    }
}

impl Triangles {
    fn of(built: &BuiltPolygons) -> Self {
        let excluded = built.excluded.iter().map(|(polygon, _)| polygon);
        let corners = |polygon: &crate::polygon::StationPolygon| -> Option<[usize; 3]> {
            let is_triangle = polygon.kind == PolygonKind::Triangle;
            let ring = polygon.outline.first().filter(|_| is_triangle)?;
            ring.as_slice().try_into().ok()
        };
        Self {
            used: built.polygons.iter().filter_map(corners).collect(),
            left_out: excluded.filter_map(corners).collect(),
        }
    }

    fn of_reporting(&self, reports: impl Fn(usize) -> bool) -> Self {
        let all = |triangles: &[[usize; 3]]| {
            let there = triangles
                .iter()
                .filter(|t| t.iter().all(|&station| reports(station)));
            there.copied().collect()
        };
        Self {
            used: all(&self.used),
            left_out: all(&self.left_out),
        }
    }

    /// Those within the limits, and those left out that others enclose, as in a region of all triangles: without them
    /// the mesh would have holes. The others are taken off from the outside.
    fn without_rim(self) -> Vec<[usize; 3]> {
        let Self { mut used, left_out } = self;
        let sides = |&[a, b, c]: &[usize; 3]| [(a, b), (b, c), (c, a)];
        let mut inside = left_out;
        loop {
            // Triangles are counter-clockwise: the one on the other side runs the other way.
            let there: HashSet<(usize, usize)> =
                used.iter().chain(&inside).flat_map(sides).collect();
            let before = inside.len();
            inside.retain(|t| sides(t).iter().all(|&(a, b)| there.contains(&(b, a))));
            if inside.len() == before {
                used.extend(inside);
                return used;
            }
        }
    }
}
