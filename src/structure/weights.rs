//! With which weights the other stations predict one.

use nalgebra::Matrix2;

use super::function::StructureFunction;
use super::plane::PlanePoint;
use super::predict::{Group, Predictor, covariance};
use crate::align::WindBlock;

/// Weights of a 2×2 block by rows, for components towards local east and north at both ends.
pub type Block = [f64; 4];

/// How one station is predicted from others when only they report.
#[derive(Debug, Clone, PartialEq)]
pub struct StationWeights {
    /// The station.
    pub station: usize,
    /// The others with their weights; these add up to a little less than the unit matrix.
    pub others: Vec<(usize, Block)>,
    /// Mean variance of either component of the prediction's error, m²/s²; the station's own site and sensor are in it.
    pub variance: f64,
    /// Covariance of prediction and error, per component, that comes of not knowing the mean wind, m²/s² (the Lagrange
    /// multiplier of the weights' sum; Cressie 1993, Statistics for Spatial Data, 3.4, from memory). It is what a
    /// regression on the prediction has to take off.
    pub covariance: f64,
}

impl Predictor {
    /// The weights of all stations that have a value at time `t` of a block, for winds that are not known yet. The values
    /// of the block do not matter, only which of them are there and their instrument covariances.
    #[must_use]
    pub fn weights(
        &self,
        structure: &StructureFunction,
        winds: &WindBlock,
        t: usize,
        may_predict: &[bool],
    ) -> Vec<StationWeights> {
        let mut found = Vec::new();
        for group in &self.groups {
            group.weights(structure, winds, t, may_predict, &mut found);
        }
        found.sort_by_key(|w| w.station);
        found
    }
}

impl Group {
    fn weights(
        &self,
        structure: &StructureFunction,
        winds: &WindBlock,
        t: usize,
        may_predict: &[bool],
        found: &mut Vec<StationWeights>,
    ) {
        let n = winds.times.len();
        let there = |s: &(usize, PlanePoint)| winds.flag[s.0 * n + t] < crate::check::Flag::Fail;
        let trusted = |s: usize| may_predict.get(s).copied().unwrap_or(true);
        let of = |present: &[&(usize, PlanePoint)], wanted: &[usize], found: &mut Vec<_>| {
            let (k, _, vague) = covariance(structure, winds, t, present);
            let Some(cholesky) = k.cholesky() else {
                return;
            };
            let inverse = cholesky.inverse();
            for &i in wanted {
                let own: Matrix2<f64> = inverse.fixed_view::<2, 2>(2 * i, 2 * i).into_owned();
                let Some(own) = own.try_inverse() else {
                    continue;
                };
                let (station, here) = *present[i];
                let mut others = Vec::with_capacity(present.len() - 1);
                let mut rest = Matrix2::identity();
                for (j, &&(other, there)) in present.iter().enumerate() {
                    if j == i {
                        continue;
                    }
                    let block: Matrix2<f64> = inverse.fixed_view::<2, 2>(2 * i, 2 * j).into_owned();
                    let weight = -(own * block);
                    rest -= weight;
                    others.push((other, local(&weight, &here, &there)));
                }
                found.push(StationWeights {
                    station,
                    others,
                    variance: 0.5 * own.trace(),
                    covariance: 0.5 * vague * rest.trace(),
                });
            }
        };
        let predicted: Vec<&(usize, PlanePoint)> = self.stations[..self.predicted]
            .iter()
            .filter(|s| there(s))
            .collect();
        let all: Vec<&(usize, PlanePoint)> = self
            .stations
            .iter()
            .filter(|s| there(s) && trusted(s.0))
            .collect();
        if all.len() >= 3 {
            let wanted: Vec<usize> = (0..all.len())
                .filter(|&i| predicted.iter().any(|p| p.0 == all[i].0))
                .collect();
            of(&all, &wanted, found);
        }
        // Those that may not predict others are predicted one by one.
        for &station in predicted.iter().filter(|s| !trusted(s.0)) {
            let mut present = vec![station];
            present.extend(&all);
            if present.len() >= 3 {
                of(&present, &[0], found);
            }
        }
    }
}

/// A block of weights in the axes of the plane, between components towards local east and north.
fn local(weight: &Matrix2<f64>, here: &PlanePoint, there: &PlanePoint) -> Block {
    let column = |unit: [f64; 2]| {
        let [x, y] = there.to_plane(unit);
        here.to_local([
            weight[(0, 0)] * x + weight[(0, 1)] * y,
            weight[(1, 0)] * x + weight[(1, 1)] * y,
        ])
    };
    let (east, north) = (column([1.0, 0.0]), column([0.0, 1.0]));
    [east[0], north[0], east[1], north[1]]
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::align::{AlignedWind, Covariance};
    use crate::check::Flag;
    use crate::station::{Network, Position, Station};
    use crate::structure::StructureSettings;
    use crate::time::Time;
    use crate::units::Wind;

    #[test]
    fn the_weights_give_the_prediction() {
        let at = [
            (47.0, 8.0),
            (47.2, 8.3),
            (46.9, 8.4),
            (47.3, 7.9),
            (46.8, 7.8),
        ];
        let stations = at.iter().enumerate().map(|(k, &(lat, lon))| {
            Station::new(format!("S{k}"), Position::new(lat, lon).unwrap())
        });
        let network = Network::new(stations.collect());
        let mut block = WindBlock::empty(vec![Time::from_micros(0)], 5);
        for s in 0..5 {
            let x = f64::from(u8::try_from(s).unwrap());
            let value = AlignedWind {
                wind: Wind {
                    u: 3.0 + x.sin(),
                    v: x.cos(),
                },
                covariance: Covariance {
                    uu: 0.1,
                    uv: 0.01,
                    vv: 0.2,
                },
                flag: Flag::Pass,
                age: 0.0,
            };
            block.set(s, 0, &value);
        }
        let structure = StructureSettings::default().prior(20e3);
        let predictor = Predictor::new(&network, 20e3);
        let predictions = predictor.predict(&structure, &block, 0);
        for weights in predictor.weights(&structure, &block, 0, &[]) {
            let (mut u, mut v) = (0.0, 0.0);
            for &(other, [a, b, c, d]) in &weights.others {
                u += a * block.u[other] + b * block.v[other];
                v += c * block.u[other] + d * block.v[other];
            }
            let expected = predictions.iter().find(|p| p.station == weights.station);
            let wind = expected.unwrap().wind;
            // The weights add up to 1 − 1e-4 or so, the prediction is about the mean wind.
            assert!(
                (u - wind.u).abs() + (v - wind.v).abs() < 2e-3,
                "{u} {v} {wind:?}"
            );
            assert!(weights.covariance > 0.0 && weights.covariance < weights.variance);
        }
    }
}
