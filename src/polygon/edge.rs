//! Edges between stations: geodesics of WGS 84, each made once however many polygons share it.

use std::collections::HashMap;

use geographiclib_rs::{Geodesic, InverseGeodesic};

use crate::station::Position;
use crate::units::sin_cos_degrees;

/// Edges longer than this give a warning, m (`design.md` 3).
pub const LONG_EDGE: f64 = 500e3;

/// Error of the flux through an edge relative to the flux, for rigid rotation: about θ²/12, θ = length / Earth radius
/// (`design.md` 3: 2·10⁻⁵ for 100 km).
#[must_use]
pub fn flux_rule_error(length: f64) -> f64 {
    let theta = length / 6_371_008.8; // mean radius of the Earth, m (IUGG 1980, from memory)
    theta * theta / 12.0
}

/// A geodesic from one station to another.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Edge {
    /// Station where it starts; the smaller number of the two.
    pub from: usize,
    /// Station where it ends.
    pub to: usize,
    /// Length, m.
    pub length: f64,
    /// Azimuth at the start and at the end, in the direction of travel, degrees clockwise from true north.
    pub azimuth: [f64; 2],
    /// Half the length times (sine, cosine) of the azimuth at start and end, m: what the wind (u, v) of either end is
    /// multiplied with to give its part of the circulation along the edge.
    pub half: [[f64; 2]; 2],
}

/// An edge as a polygon runs along it.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct DirectedEdge {
    /// Its number in the [`EdgeSet`].
    pub edge: usize,
    /// True from `from` to `to`.
    pub forward: bool,
}

/// All edges of a network's polygons.
#[derive(Debug, Default)]
pub struct EdgeSet {
    edges: Vec<Edge>,
    index: HashMap<(usize, usize), usize>,
}

impl EdgeSet {
    /// The edge from station `a` to station `b`, made now if it is new.
    pub fn directed(
        &mut self,
        a: usize,
        b: usize,
        positions: &[Position],
        geodesic: &Geodesic,
    ) -> DirectedEdge {
        let (from, to) = (a.min(b), a.max(b));
        let edge = *self.index.entry((from, to)).or_insert_with(|| {
            let (p, q) = (positions[from], positions[to]);
            let (length, start, end, _arc): (f64, f64, f64, f64) =
                geodesic.inverse(p.latitude(), p.longitude(), q.latitude(), q.longitude());
            let half = [start, end].map(|azimuth| {
                let (sin, cos) = sin_cos_degrees(azimuth);
                [0.5 * length * sin, 0.5 * length * cos]
            });
            self.edges.push(Edge {
                from,
                to,
                length,
                azimuth: [start, end],
                half,
            });
            self.edges.len() - 1
        });
        DirectedEdge {
            edge,
            forward: a == from,
        }
    }

    /// The edges, in the order they were made.
    #[must_use]
    pub fn edges(&self) -> &[Edge] {
        &self.edges
    }

    /// Start station, end station and length of a directed edge.
    #[must_use]
    pub fn ends(&self, directed: DirectedEdge) -> (usize, usize, f64) {
        let edge = &self.edges[directed.edge];
        if directed.forward {
            (edge.from, edge.to, edge.length)
        } else {
            (edge.to, edge.from, edge.length)
        }
    }

    /// Azimuth at start and end of a directed edge, in its direction, degrees.
    #[must_use]
    pub fn azimuths(&self, directed: DirectedEdge) -> (f64, f64) {
        let [start, end] = self.edges[directed.edge].azimuth;
        if directed.forward {
            (start, end)
        } else {
            (end + 180.0, start + 180.0)
        }
    }
}

/// Median length of the edges, m; `None` without any.
#[must_use]
pub fn median_edge(edges: &EdgeSet) -> Option<f64> {
    let mut lengths: Vec<f64> = edges.edges().iter().map(|edge| edge.length).collect();
    lengths.sort_by(f64::total_cmp);
    lengths.get(lengths.len() / 2).copied()
}
