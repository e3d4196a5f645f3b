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

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::align::{AlignedWind, Covariance, WindBlock};
    use crate::check::Flag;
    use crate::integral::{ErrorBudget, ErrorParts, FalseDiscovery, estimate, find_significant};
    use crate::polygon::build_polygons;
    use crate::settings::{PolygonChoice, PolygonLimits};
    use crate::station::{Network, Position, Station};
    use crate::time::Time;

    /// Means of a 5 × 5 grid in a wind that varies a little, with two stations off by known amounts.
    #[test]
    fn the_offsets_that_were_planted_are_found() {
        let stations = (0..25).map(|k: u32| {
            let (i, j) = (f64::from(k / 5), f64::from(k % 5));
            let off = 0.05 * (7.3 * f64::from(k)).sin();
            let position = Position::new(46.0 + 0.2 * i + off, 8.0 + 0.3 * j - off).unwrap();
            Station::new(format!("S{k:02}"), position)
        });
        let network = Network::new(stations.collect());
        let choice = PolygonChoice {
            triangles: true,
            rings: vec![],
            regions: vec![],
        };
        let polygons = build_polygons(&network, &choice, &PolygonLimits::default())
            .unwrap()
            .polygons;
        let means = |planted: &[(usize, Wind)]| {
            let mut winds = WindBlock::empty(
                (0..64)
                    .map(|t| Time::from_micros(t * 3_600_000_000))
                    .collect(),
                25,
            );
            for s in 0..25 {
                for t in 0..64 {
                    let x = 13.7 * s as f64 + 5.1 * t as f64;
                    let off = planted
                        .iter()
                        .find(|p| p.0 == s)
                        .map_or(Wind::default(), |p| p.1);
                    let value = AlignedWind {
                        wind: Wind {
                            u: 5.0 + 0.5 * x.sin() + off.u,
                            v: 2.0 + 0.5 * (1.3 * x).cos() + off.v,
                        },
                        covariance: Covariance {
                            uu: 0.2,
                            uv: 0.0,
                            vv: 0.2,
                        },
                        flag: Flag::Pass,
                        age: 0.0,
                    };
                    winds.set(s, t, &value);
                }
            }
            let mut block = estimate(&polygons, &winds);
            let parts = |se: &[f64]| ErrorParts {
                instrument: vec![0.0; se.len()],
                sampling: se.to_vec(),
                timing: vec![0.0; se.len()],
            };
            block.budget = ErrorBudget {
                vorticity: parts(&block.vorticity_se),
                divergence: parts(&block.divergence_se),
            };
            find_significant(&mut block, &FalseDiscovery::new(0.05, polygons.len()));
            RunStatistics::of(&block, &vec![1.0; polygons.len()])
        };
        assert_eq!(attribute(&polygons, &means(&[])), []);
        let planted = [(12, Wind { u: 1.5, v: -1.0 }), (6, Wind { u: 0.0, v: 2.5 })];
        let found = attribute(&polygons, &means(&planted));
        assert_eq!(found.len(), 2, "{found:?}");
        for (station, offset) in planted {
            let own = found.iter().find(|a| a.station == station).unwrap();
            let off = (own.offset.u - offset.u).hypot(own.offset.v - offset.v);
            assert!(off < 3.0 * own.error, "{own:?}");
            assert!(own.explained > 0.8 && own.polygons >= 5, "{own:?}");
        }
    }
}
