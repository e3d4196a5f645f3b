//! Which station stands behind the odd means of the polygons around it.

use super::{RunStatistics, Statistics};
use crate::polygon::StationPolygon;
use crate::units::Wind;

/// A station whose winds, if they were off by this much on average, would explain the means of the polygons around it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Attribution {
    /// The station.
    pub station: usize,
    /// By how much its mean wind would be off: reported minus true, m/s.
    pub offset: Wind,
    /// Standard error of either component, m/s.
    pub error: f64,
    /// Share of the squared means around it, in units of their errors, that this explains.
    pub explained: f64,
    /// Polygons around it.
    pub polygons: usize,
}

/// Share that must be explained: chance alone explains two of the 2 n values, a tenth with ten polygons' worth.
const LEAST_SHARE: f64 = 0.6;
/// Standard errors that the offset must be away from zero.
const LEAST_DEVIATION: f64 = 5.0;
/// Polygons around a station that make a pattern: three have six values for two unknowns.
const LEAST_POLYGONS: usize = 3;

/// Finds the stations behind the means of a run, the one that explains most first; what a station explains is taken off
/// before the next one is looked for.
///
/// One bad wind V + δ adds to every polygon around its station x δu + y δv to the vorticity and y δu − x δv to the
/// divergence, with the weights (x, y) of the station in each: for a triangle the part of δ along the opposite side,
/// and along the altitude, over the altitude (`methods.md` 1.1). δ is the weighted least-squares fit to the means. The error is
/// scaled up where the rest is larger than the means' errors say, as the means of weather are not zero either.
///
/// - **Neglects**: that polygons which share a station have errors in common; the limits above allow for it.
/// - **Cannot tell**: a site that always differs (a valley, a mountain) from a sensor that is off.
#[must_use]
pub fn attribute(polygons: &[StationPolygon], statistics: &RunStatistics) -> Vec<Attribution> {
    let value = |s: &Statistics| {
        let error = s.mean_error().filter(|e| *e > 0.0)?;
        (s.count > 0).then_some((s.mean, error))
    };
    // Vorticity and divergence of each polygon: mean and error.
    let mut means: Vec<Option<[(f64, f64); 2]>> = statistics
        .vorticity
        .iter()
        .zip(&statistics.divergence)
        .map(|(z, d)| Some([value(z)?, value(d)?]))
        .collect();
    let mut around: Vec<Vec<(usize, [f64; 2])>> = Vec::new();
    for (p, polygon) in polygons.iter().enumerate() {
        for (&station, &weight) in polygon.row.stations.iter().zip(&polygon.row.weights) {
            if around.len() <= station {
                around.resize(station + 1, Vec::new());
            }
            around[station].push((p, weight));
        }
    }
    let mut found: Vec<Attribution> = Vec::new();
    while found.len() < around.len() {
        let candidates = around
            .iter()
            .enumerate()
            .filter(|(station, _)| !found.iter().any(|a| a.station == *station))
            .filter_map(|(station, around)| fit(station, around, &means));
        let Some((best, _)) = candidates.reduce(|a, b| if b.1 > a.1 { b } else { a }) else {
            break;
        };
        for &(p, [x, y]) in &around[best.station] {
            if let Some(Some([z, d])) = means.get_mut(p) {
                z.0 -= x * best.offset.u + y * best.offset.v;
                d.0 -= y * best.offset.u - x * best.offset.v;
            }
        }
        found.push(best);
    }
    found
}

/// The offset that explains the means around a station best, and by how much it lowers their weighted squares.
fn fit(
    station: usize,
    around: &[(usize, [f64; 2])],
    means: &[Option<[(f64, f64); 2]>],
) -> Option<(Attribution, f64)> {
    let values: Vec<([f64; 2], f64, f64)> = around
        .iter()
        .filter_map(|&(p, [x, y])| {
            let [z, d] = (*means.get(p)?)?;
            Some([([x, y], z.0, z.1), ([y, -x], d.0, d.1)])
        })
        .flatten()
        .collect();
    if values.len() < 2 * LEAST_POLYGONS {
        return None;
    }
    let mut normal = [0.0; 3];
    let mut right = [0.0; 2];
    let mut before = 0.0;
    for ([a, b], value, error) in &values {
        let weight = 1.0 / (error * error);
        normal[0] += weight * a * a;
        normal[1] += weight * a * b;
        normal[2] += weight * b * b;
        right[0] += weight * a * value;
        right[1] += weight * b * value;
        before += weight * value * value;
    }
    let determinant = normal[0] * normal[2] - normal[1] * normal[1];
    if determinant <= 1e-9 * normal[0] * normal[2] {
        return None;
    }
    let u = (normal[2] * right[0] - normal[1] * right[1]) / determinant;
    let v = (normal[0] * right[1] - normal[1] * right[0]) / determinant;
    let gained = right[0] * u + right[1] * v;
    let rest = (before - gained).max(0.0) / (values.len() - 2) as f64;
    let variance = 0.5 * (normal[0] + normal[2]) / determinant * rest.max(1.0);
    let offset = Wind { u, v };
    let attribution = Attribution {
        station,
        offset,
        error: variance.sqrt(),
        explained: gained / before,
        polygons: values.len() / 2,
    };
    let is_clear = attribution.explained >= LEAST_SHARE
        && offset.speed() >= LEAST_DEVIATION * attribution.error;
    is_clear.then_some((attribution, gained))
}
