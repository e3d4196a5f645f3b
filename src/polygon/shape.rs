//! Shape of a polygon: what makes its numbers good or bad before any wind blows.

use std::f64::consts::PI;

use serde::Serialize;

use super::edge::{DirectedEdge, EdgeSet};
use crate::settings::PolygonLimits;
use crate::station::Network;

/// Shape measures.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Shape {
    /// Area on WGS 84, m².
    pub area: f64,
    /// Perimeter, m.
    pub perimeter: f64,
    /// Longest edge, m.
    pub longest_edge: f64,
    /// Smallest interior angle, degrees.
    pub smallest_angle: f64,
    /// 4 tan(π/n)·A/Σl²: 1 for the regular n-gon, less for any other; 4√3·A/Σl² for a triangle.
    pub quality: f64,
    /// Error of vorticity, and of divergence, per unit error of each wind component, 1/m: √Σ(X²+Y²)/(2A), which is
    /// √Σl²/(2A) for a triangle and 2/L for the equilateral one (`methods.md` 1.4).
    pub noise_factor: f64,
    /// Highest minus lowest station, m, if the elevations are known.
    pub elevation_spread: Option<f64>,
}

impl Shape {
    /// Measures a ring of known area and coefficient rows (1/m).
    pub(super) fn of(
        area: f64,
        ring: &[DirectedEdge],
        edges: &EdgeSet,
        weights: &[[f64; 2]],
        network: &Network,
    ) -> Self {
        let lengths = ring.iter().map(|&e| edges.ends(e).2);
        let squares: f64 = lengths.clone().map(|l| l * l).sum();
        let smallest_angle = interior_angles(ring, edges).fold(f64::INFINITY, f64::min);
        let elevations: Option<Vec<f64>> = ring
            .iter()
            .map(|&e| network.stations()[edges.ends(e).0].elevation)
            .collect();
        Self {
            area,
            perimeter: lengths.clone().sum(),
            longest_edge: lengths.fold(0.0, f64::max),
            smallest_angle,
            quality: 4.0 * (PI / ring.len() as f64).tan() * area / squares,
            noise_factor: weights
                .iter()
                .map(|[x, y]| x * x + y * y)
                .sum::<f64>()
                .sqrt(),
            elevation_spread: elevations.map(|e| {
                let high = e.iter().copied().fold(f64::NEG_INFINITY, f64::max);
                let low = e.iter().copied().fold(f64::INFINITY, f64::min);
                high - low
            }),
        }
    }
}

/// Interior angle at the start of each edge of a path, degrees in 0 to 360.
pub(super) fn interior_angles<'a>(
    path: &'a [DirectedEdge],
    edges: &'a EdgeSet,
) -> impl Iterator<Item = f64> + 'a {
    (0..path.len()).map(|k| {
        // The edge that ends here: the one before, or the last of the path where a path begins.
        let here = edges.ends(path[k]).0;
        let ends_here = |e: &&DirectedEdge| edges.ends(**e).1 == here;
        let before = path[..k]
            .last()
            .filter(ends_here)
            .or_else(|| path[k..].iter().find(ends_here));
        // From the way out round to the way back: the inside lies to the left.
        let out = edges.azimuths(path[k]).0;
        let back = before.map_or(out, |&e| edges.azimuths(e).1 + 180.0);
        (out - back).rem_euclid(360.0)
    })
}

/// Why a polygon is left out, with its figure and the limit.
#[derive(Debug, Clone, Copy, PartialEq)]
#[non_exhaustive]
pub enum Exclusion {
    /// An interior angle is too small, degrees.
    SmallAngle(f64, f64),
    /// An edge is too long, m.
    LongEdge(f64, f64),
    /// The area is too small, m².
    SmallArea(f64, f64),
    /// The area is too large, m².
    LargeArea(f64, f64),
}

impl Exclusion {
    /// The first limit that a shape breaks.
    #[must_use]
    pub fn of(shape: &Shape, limits: &PolygonLimits) -> Option<Self> {
        if shape.smallest_angle < limits.smallest_angle {
            return Some(Self::SmallAngle(
                shape.smallest_angle,
                limits.smallest_angle,
            ));
        }
        if let Some(limit) = limits.longest_edge
            && shape.longest_edge > limit
        {
            return Some(Self::LongEdge(shape.longest_edge, limit));
        }
        if shape.area < limits.smallest_area {
            return Some(Self::SmallArea(shape.area, limits.smallest_area));
        }
        if let Some(limit) = limits.largest_area
            && shape.area > limit
        {
            return Some(Self::LargeArea(shape.area, limit));
        }
        None
    }

    /// The reason as one word, for tallies.
    #[must_use]
    pub const fn name(&self) -> &'static str {
        match self {
            Self::SmallAngle(..) => "small_angle",
            Self::LongEdge(..) => "long_edge",
            Self::SmallArea(..) => "small_area",
            Self::LargeArea(..) => "large_area",
        }
    }
}

impl std::fmt::Display for Exclusion {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::SmallAngle(found, limit) => write!(f, "angle {found:.1} < {limit} deg"),
            Self::LongEdge(found, limit) => {
                write!(f, "edge {:.0} > {:.0} km", found / 1e3, limit / 1e3)
            }
            Self::SmallArea(found, limit) => {
                write!(f, "area {:.1} < {:.1} km2", found / 1e6, limit / 1e6)
            }
            Self::LargeArea(found, limit) => {
                write!(f, "area {:.0} > {:.0} km2", found / 1e6, limit / 1e6)
            }
        }
    }
}
