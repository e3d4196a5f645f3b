//! An observed scalar over a polygon: gradient, flux convergence, frontogenesis.
//!
//! Units are those of the scalar; potential temperature rather than temperature where stations differ in height.

use super::{LocalWind, PolygonFrame};
use crate::polygon::{EdgeSet, StationPolygon};
use crate::sum::CompensatedSum;
use crate::units::Wind;

/// Gradient of a scalar given by station, per m towards east and towards north in the polygon's frame; its error per
/// unit error of each value is the polygon's noise factor, shared out between the two.
///
/// The mean of the stations is taken off first: on the curved Earth the weights do not sum to 0 to the last digit.
#[must_use]
pub fn gradient(frame: &PolygonFrame, scalar: impl Fn(usize) -> f64) -> [f64; 2] {
    let n = frame.stations.len().max(1) as f64;
    let mean = frame
        .stations
        .iter()
        .map(|s| scalar(s.station))
        .sum::<f64>()
        / n;
    let mut sum = [CompensatedSum::default(); 2];
    for s in &frame.stations {
        let [_, x, y] = s.weights;
        let difference = scalar(s.station) - mean;
        sum[0].add(x * difference);
        sum[1].add(y * difference);
    }
    sum.map(CompensatedSum::total)
}

/// Standard errors of [`gradient`] for independent errors of this standard deviation in the values.
#[must_use]
pub fn gradient_error(frame: &PolygonFrame, sd: f64) -> [f64; 2] {
    [1, 2].map(|form| {
        let squares = frame.stations.iter().map(|s| s.weights[form].powi(2));
        sd * squares.sum::<f64>().sqrt()
    })
}

/// Area-mean convergence of the flux of a scalar q, −∇·(q V), in units of q per s.
///
/// - **Formula**: along an edge both q and the wind across it vary linearly; their product is integrated exactly:
///   (2 q₁ n₁ + q₁ n₂ + q₂ n₁ + 2 q₂ n₂)/6, n the wind across times the length (`methods.md` 3).
#[must_use]
pub fn flux_convergence(
    polygon: &StationPolygon,
    edges: &EdgeSet,
    wind: impl Fn(usize) -> Wind,
    scalar: impl Fn(usize) -> f64,
) -> f64 {
    let mut outward = CompensatedSum::default();
    for &directed in &polygon.path {
        let edge = &edges.edges()[directed.edge];
        let sign = if directed.forward { 1.0 } else { -1.0 };
        let across = |station: usize, [x, y]: [f64; 2]| {
            let w = wind(station);
            2.0 * sign * (y * w.u - x * w.v)
        };
        let (n1, n2) = (
            across(edge.from, edge.half[0]),
            across(edge.to, edge.half[1]),
        );
        let (q1, q2) = (scalar(edge.from), scalar(edge.to));
        outward.add((2.0 * q1 * n1 + q1 * n2 + q2 * n1 + 2.0 * q2 * n2) / 6.0);
    }
    -outward.total() / polygon.shape.area
}

/// Petterssen's frontogenesis d|∇θ|/dt of the horizontal wind, units of θ per m and s; `None` without a gradient.
///
/// - **Formula**: −[θ_x² u_x + θ_y² v_y + θ_x θ_y (v_x + u_y)]/|∇θ| = |∇θ|/2 (E cos 2b − δ), b the angle between isentropes
///   and axis of dilatation.
/// - **Reference**: Petterssen 1936, Geofys. Publ. 11 (6) (from memory); `methods.md` 3. K m⁻¹ s⁻¹ × 1.08·10⁹ = K per 100 km
///   and 3 h.
#[must_use]
pub fn frontogenesis(wind: &LocalWind, [x, y]: [f64; 2]) -> Option<f64> {
    let size = x.hypot(y);
    let [u_x, _, _, v_y] = wind.gradient;
    (size > 0.0).then(|| -(x * x * u_x + y * y * v_y + x * y * wind.shearing()) / size)
}
