//! Coefficient rows: vorticity and divergence of a polygon as linear forms of its stations' winds.

use super::edge::{DirectedEdge, EdgeSet};

/// Weights of one polygon.
///
/// With x, y the weights of a station (1/m):
///
/// - vorticity  = Σ ( x u + y v )
/// - divergence = Σ ( y u − x v )
///
/// since the outward normal is the direction of travel turned 90° to the right. Times the area they are circulation and
/// outward flux.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct CoefficientRow {
    /// Stations, each once.
    pub stations: Vec<usize>,
    /// Weights (x, y) of each, 1/m.
    pub weights: Vec<[f64; 2]>,
}

impl CoefficientRow {
    /// The row of a closed path of edges around `area` m².
    ///
    /// - **Sign**: positive counter-clockwise and outward for a counter-clockwise path, in both hemispheres.
    /// - **Assumes**: the wind component along and across an edge varies linearly between its ends; edges are geodesics
    ///   of WGS 84, and the component at either end is taken with the azimuth there.
    /// - **Accuracy**: exact to rounding for the circulation of rigid rotation about the polar axis; its flux is off by
    ///   θ²/12 of the through-flow ([`super::flux_rule_error`]).
    /// - **Reference**: Bellamy 1949 (BAMS 30, 45); Davies-Jones 1993 (MWR 121, 713); edge rule: `design.md` 3.
    #[must_use]
    pub fn of(path: &[DirectedEdge], edges: &EdgeSet, area: f64) -> Self {
        let mut row = Self::default();
        for &directed in path {
            let edge = &edges.edges()[directed.edge];
            let sign = if directed.forward { 1.0 } else { -1.0 };
            for (station, half) in [(edge.from, edge.half[0]), (edge.to, edge.half[1])] {
                let [x, y] = half.map(|h| sign * h / area);
                // Neighbouring edges share a station, so it is found near the end; outlines are short.
                match row.stations.iter().rposition(|&s| s == station) {
                    Some(k) => {
                        row.weights[k][0] += x;
                        row.weights[k][1] += y;
                    }
                    None => {
                        row.stations.push(station);
                        row.weights.push([x, y]);
                    }
                }
            }
        }
        row
    }

    /// Vorticity and divergence of winds given by station, 1/s.
    pub fn apply(&self, wind: impl Fn(usize) -> crate::units::Wind) -> (f64, f64) {
        let mut vorticity = crate::sum::CompensatedSum::default();
        let mut divergence = crate::sum::CompensatedSum::default();
        for (&station, &[x, y]) in self.stations.iter().zip(&self.weights) {
            let w = wind(station);
            vorticity.add(x * w.u);
            vorticity.add(y * w.v);
            divergence.add(y * w.u);
            divergence.add(-x * w.v);
        }
        (vorticity.total(), divergence.total())
    }
}
