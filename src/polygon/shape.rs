//! Shape of a polygon: what makes its numbers good or bad before any wind blows.

use std::f64::consts::PI;

use serde::Serialize;

use super::CoefficientRow;
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
    /// Slope of the plane of the stations, if the elevations are known; for more than three the mean over the area.
    pub slope: Option<f64>,
}

impl Shape {
    /// Measures a ring of known area and coefficient rows (1/m).
    pub(super) fn of(
        area: f64,
        ring: &[DirectedEdge],
        edges: &EdgeSet,
        row: &CoefficientRow,
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
            noise_factor: row
                .weights
                .iter()
                .map(|[x, y]| x * x + y * y)
                .sum::<f64>()
                .sqrt(),
            slope: slope(row, network),
            elevation_spread: elevations.map(|e| {
                let high = e.iter().copied().fold(f64::NEG_INFINITY, f64::max);
                let low = e.iter().copied().fold(f64::INFINITY, f64::min);
                high - low
            }),
        }
    }
}

/// The gradient of the elevation by the rule of the wind: with u = z and v = 0 the row gives −∂z/∂y and ∂z/∂x.
fn slope(row: &CoefficientRow, network: &Network) -> Option<f64> {
    let of = |&s: &usize| network.stations()[s].elevation;
    let elevations: Vec<f64> = row.stations.iter().map(of).collect::<Option<_>>()?;
    // The weights add up to nothing in a plane only.
    let mean = elevations.iter().sum::<f64>() / elevations.len() as f64;
    let mut gradient = [0.0; 2];
    for (z, [x, y]) in elevations.iter().zip(&row.weights) {
        gradient[0] += y * (z - mean);
        gradient[1] -= x * (z - mean);
    }
    Some(gradient[0].hypot(gradient[1]))
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
    /// The stations stand at too different heights, m.
    ElevationSpread(f64, f64),
    /// The stations stand on too steep a slope: its product with the shear to expect, 1/s.
    Slope(f64, f64),
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
        if let (Some(limit), Some(spread)) = (limits.elevation_spread, shape.elevation_spread)
            && spread > limit
        {
            return Some(Self::ElevationSpread(spread, limit));
        }
        if let (Some(limit), Some(slope)) = (limits.slope_error, shape.slope)
            && slope * limits.vertical_shear > limit
        {
            return Some(Self::Slope(slope * limits.vertical_shear, limit));
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
            Self::ElevationSpread(..) => "elevation_spread",
            Self::Slope(..) => "slope",
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
            Self::ElevationSpread(found, limit) => {
                write!(f, "elevations differ by {found:.0} > {limit:.0} m")
            }
            Self::Slope(found, limit) => {
                write!(f, "slope times shear {found:.1e} > {limit:.1e} 1/s")
            }
        }
    }
}
