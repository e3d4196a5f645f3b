//! Each station predicted from the others.

use nalgebra::{DMatrix, DVector, Matrix2, Vector2};

use super::function::StructureFunction;
use super::neighbours::Neighbours;
use super::plane::{LocalPlane, PlanePoint};
use crate::align::{Covariance, WindBlock};
use crate::check::Flag;
use crate::station::{Network, Position};
use crate::units::Wind;

/// Stations that a prediction is made from, at most: those farther away are screened by the nearer ones, and the cost
/// grows with the cube.
const NEIGHBOURHOOD: usize = 30;

/// Variance of the unknown mean wind of a neighbourhood, in units of the largest variance in it: large enough to say
/// nothing, small enough for double precision.
const VAGUE: f64 = 1e4;

/// What the other stations say of one.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Prediction {
    /// The station.
    pub station: usize,
    /// The wind predicted from the others.
    pub wind: Wind,
    /// Reported minus predicted.
    pub residual: Wind,
    /// Covariance of the residual: of the prediction, of the site and of the report's instrument.
    pub covariance: Covariance,
}

impl Prediction {
    /// Squared length of the residual in units of its error; χ² with two degrees of freedom if the model holds, 2 on
    /// average.
    #[must_use]
    pub fn squared_deviation(&self) -> f64 {
        let Covariance { uu, uv, vv } = self.covariance;
        let (u, v) = (self.residual.u, self.residual.v);
        (vv * u * u - 2.0 * uv * u * v + uu * v * v) / (uu * vv - uv * uv)
    }
}

/// Groups of stations that are predicted together.
#[derive(Debug, Clone)]
pub struct Predictor {
    pub(super) groups: Vec<Group>,
}

#[derive(Debug, Clone)]
pub(super) struct Group {
    /// Stations and their places in the plane of the group, m.
    pub(super) stations: Vec<(usize, PlanePoint)>,
    /// The first of them are predicted here.
    pub(super) predicted: usize,
}

impl Predictor {
    /// Chooses the neighbourhoods of a network with stations `spacing` m apart: up to 30 stations, of which those in the
    /// inner part are predicted, each once.
    #[must_use]
    pub fn new(network: &Network, spacing: f64) -> Self {
        let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
        let whole = positions.len() <= NEIGHBOURHOOD;
        // A network that fits into one neighbourhood is one, however wide.
        let reach = if whole { 2e7 } else { 4.0 * spacing };
        let near = Neighbours::new(&positions, reach);
        let mut done = vec![false; positions.len()];
        let mut groups = Vec::new();
        for station in 0..positions.len() {
            if done[station] {
                continue;
            }
            let mut members = vec![(station, 0.0)];
            members.extend(near.around(station).into_iter().take(NEIGHBOURHOOD - 1));
            let radius = members.last().map_or(0.0, |m| m.1);
            // Half the radius: there the neighbourhood lies all around.
            let inner = |m: &(usize, f64)| whole || m.1 <= 0.5 * radius;
            let here = positions[station];
            let plane = LocalPlane::at((here.latitude(), here.longitude()));
            let (first, rest): (Vec<_>, Vec<_>) =
                members.into_iter().partition(|m| inner(m) && !done[m.0]);
            for &(member, _) in &first {
                done[member] = true;
            }
            let predicted = first.len();
            let place = |&(s, _): &(usize, f64)| (s, plane.place(positions[s]));
            groups.push(Group {
                stations: first.iter().chain(&rest).map(place).collect(),
                predicted,
            });
        }
        Self { groups }
    }

    /// Predicts every station with a wind at time `t` of a block from the others of its neighbourhood; in order of the
    /// groups. Winds with a flag of [`Flag::Fail`] or worse are neither used nor predicted.
    ///
    /// The covariance of the winds is K = (a large constant, for the unknown mean wind) − ½ D + site and instrument
    /// variances. From its inverse the residual of a station against the best linear prediction without it is
    /// `[K⁻¹]ᵢᵢ⁻¹ [K⁻¹ y]ᵢ` and its covariance `[K⁻¹]ᵢᵢ⁻¹`, with 2×2 blocks for the two components.
    ///
    /// - **Reference**: Dubrule 1983, Cross validation of kriging in a unique neighborhood, Math. Geol. 15, 687 (from
    ///   memory); `methods.md` 6.3.
    #[must_use]
    pub fn predict(
        &self,
        structure: &StructureFunction,
        winds: &WindBlock,
        t: usize,
    ) -> Vec<Prediction> {
        let mut found = Vec::new();
        for group in &self.groups {
            group.predict(structure, winds, t, &mut found);
        }
        found
    }
}

impl Group {
    fn predict(
        &self,
        structure: &StructureFunction,
        winds: &WindBlock,
        t: usize,
        found: &mut Vec<Prediction>,
    ) {
        let n = winds.times.len();
        let cell = |station: usize| station * n + t;
        let usable = |s: &&(usize, PlanePoint)| winds.flag[cell(s.0)] < Flag::Fail;
        let predicted = self.stations[..self.predicted]
            .iter()
            .filter(usable)
            .count();
        let present: Vec<&(usize, PlanePoint)> = self.stations.iter().filter(usable).collect();
        if predicted == 0 || present.len() < 2 {
            return;
        }
        let (k, y, _) = covariance(structure, winds, t, &present);
        let Some(cholesky) = k.cholesky() else {
            return;
        };
        let weighted = cholesky.solve(&y);
        let inverse = cholesky.inverse();
        for (i, &&(station, point)) in present.iter().take(predicted).enumerate() {
            let block: Matrix2<f64> = inverse.fixed_view::<2, 2>(2 * i, 2 * i).into_owned();
            let Some(own) = block.try_inverse() else {
                continue;
            };
            let residual = own * Vector2::new(weighted[2 * i], weighted[2 * i + 1]);
            let [u, v] = point.to_local([residual[0], residual[1]]);
            let cell = cell(station);
            found.push(Prediction {
                station,
                wind: Wind {
                    u: winds.u[cell] - u,
                    v: winds.v[cell] - v,
                },
                residual: Wind { u, v },
                covariance: turned(own, &point),
            });
        }
    }
}

/// Covariance of the winds in the axes of the plane, the winds, and the variance of the unknown mean wind in it.
pub(super) fn covariance(
    structure: &StructureFunction,
    winds: &WindBlock,
    t: usize,
    present: &[&(usize, PlanePoint)],
) -> (DMatrix<f64>, DVector<f64>, f64) {
    let size = 2 * present.len();
    let mut k = DMatrix::zeros(size, size);
    let mut y = DVector::zeros(size);
    let mut largest = structure.site_variance;
    for (i, &&(_, a)) in present.iter().enumerate() {
        for (j, &&(_, b)) in present.iter().enumerate().skip(i + 1) {
            let d = [b.at[0] - a.at[0], b.at[1] - a.at[1]];
            let r = d[0].hypot(d[1]);
            if r <= 0.0 {
                continue;
            }
            let [along, across] = structure.at(r);
            let e = [d[0] / r, d[1] / r];
            for (p, q) in [(0, 0), (0, 1), (1, 0), (1, 1)] {
                let same = if p == q { across } else { 0.0 };
                let value = -0.5 * (same + (along - across) * e[p] * e[q]);
                k[(2 * i + p, 2 * j + q)] = value;
                k[(2 * j + p, 2 * i + q)] = value;
            }
            largest = largest.max(along + across);
        }
    }
    for (i, &&(station, point)) in present.iter().enumerate() {
        let cell = station * winds.times.len() + t;
        let own = structure.site_variance + structure.temporal.at(f64::from(winds.age[cell]));
        let c = in_plane(
            Covariance {
                uu: winds.var_u[cell],
                uv: winds.cov_uv[cell],
                vv: winds.var_v[cell],
            },
            &point,
        );
        k[(2 * i, 2 * i)] = c[0] + own;
        k[(2 * i, 2 * i + 1)] = c[1];
        k[(2 * i + 1, 2 * i)] = c[1];
        k[(2 * i + 1, 2 * i + 1)] = c[2] + own;
        largest = largest.max(c[0] + own).max(c[2] + own);
        let wind = point.to_plane([winds.u[cell], winds.v[cell]]);
        y[2 * i] = wind[0];
        y[2 * i + 1] = wind[1];
    }
    // Residuals do not depend on a constant wind, so it is taken off first, to keep what is left well scaled.
    for component in 0..2 {
        let values = (0..present.len()).map(|i| y[2 * i + component]);
        let mean = values.sum::<f64>() / present.len() as f64;
        for i in 0..present.len() {
            y[2 * i + component] -= mean;
        }
    }
    for i in 0..size {
        for j in (i % 2..size).step_by(2) {
            k[(i, j)] += VAGUE * largest;
        }
        // Two sensors without error in one place would make the matrix singular.
        k[(i, i)] += 1e-9 * largest;
    }
    (k, y, VAGUE * largest)
}

/// A covariance in the axes of the plane: xx, xy, yy.
fn in_plane(c: Covariance, point: &PlanePoint) -> [f64; 3] {
    let (x, y) = (point.to_plane([1.0, 0.0]), point.to_plane([0.0, 1.0]));
    let entry = |p: usize, q: usize| {
        c.uu * x[p] * x[q] + c.uv * (x[p] * y[q] + y[p] * x[q]) + c.vv * y[p] * y[q]
    };
    [entry(0, 0), entry(0, 1), entry(1, 1)]
}

/// A covariance given in the axes of the plane, by local components.
fn turned(c: Matrix2<f64>, point: &PlanePoint) -> Covariance {
    let (e, n) = (point.to_local([1.0, 0.0]), point.to_local([0.0, 1.0]));
    let entry = |p: usize, q: usize| {
        c[(0, 0)] * e[p] * e[q] + c[(0, 1)] * (e[p] * n[q] + n[p] * e[q]) + c[(1, 1)] * n[p] * n[q]
    };
    Covariance {
        uu: entry(0, 0),
        uv: entry(0, 1),
        vv: entry(1, 1),
    }
}
