//! With which weights the neighbours predict a wind, and what the prediction's error is.

use nalgebra::{DMatrix, Matrix2, Vector2};

use super::neighbourhood::Neighbourhood;
use crate::structure::{Exponent, PlanePoint, StructureFunction};

/// A class of the wind-field model, to which weights are kept.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub(super) struct ModelClass {
    exponent: Exponent,
    /// Transverse over longitudinal amplitude: this power of 1.25.
    ratio: i8,
    /// Noise of a station over the mean amplitude: this power of 2.
    noise: i8,
}

impl ModelClass {
    /// The class of a structure function with the mean instrument variance of the stations, m²/s².
    pub(super) fn of(structure: &StructureFunction, instrument: f64) -> Self {
        let mean = 0.5 * (structure.longitudinal + structure.transverse);
        let noise = (structure.site_variance + instrument) / mean;
        let power = |value: f64, base: f64, most: f64| {
            let power = (value.ln() / base.ln()).round().clamp(-most, most);
            #[expect(clippy::cast_possible_truncation, reason = "at most 12")]
            let whole = if power.is_nan() { 0 } else { power as i8 };
            whole
        };
        Self {
            exponent: structure.exponent,
            ratio: power(structure.transverse / structure.longitudinal, 1.25, 6.0),
            noise: power(noise, 2.0, 12.0),
        }
    }

    /// Longitudinal and transverse amplitude with a mean of 1, and the noise.
    fn values(self) -> (f64, f64, f64) {
        let ratio = 1.25_f64.powi(i32::from(self.ratio));
        let along = 2.0 / (1.0 + ratio);
        let noise = 2.0_f64.powi(i32::from(self.noise));
        (along, ratio * along, noise)
    }
}

/// Whose prediction, from which of its neighbours (bit k for neighbour k), under which model.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub(super) struct Key {
    pub(super) station: usize,
    pub(super) there: u16,
    pub(super) class: ModelClass,
}

/// The prediction of a station.
#[derive(Debug, Clone)]
pub(super) struct Row {
    /// Stations, their weights by rows for components towards local east and north, and half the sum of the weights'
    /// squares.
    pub(super) others: Vec<(usize, [f64; 4], f64)>,
    /// `S_L`, `S_T`: variance per component for unit longitudinal and transverse amplitude.
    pub(super) between: [f64; 2],
}

impl Row {
    /// The best linear prediction; `None` with fewer than `least` neighbours, or if these do not determine it.
    pub(super) fn new(around: &Neighbourhood, spacing: f64, key: Key, least: u32) -> Option<Self> {
        let present: Vec<&(usize, PlanePoint)> = around
            .others
            .iter()
            .enumerate()
            .filter(|(k, _)| key.there & 1 << k != 0)
            .map(|(_, other)| other)
            .collect();
        if present.is_empty() || present.len() < least as usize {
            return None;
        }
        let p = key.class.exponent.value();
        let (along, across, noise) = key.class.values();
        // Growth with distance and the unit vector, between two places.
        let pair = |a: &PlanePoint, b: &PlanePoint| -> (f64, Matrix2<f64>) {
            let d = Vector2::new(b.at[0] - a.at[0], b.at[1] - a.at[1]);
            let r = d.norm();
            let e = if r > 0.0 { d / r } else { Vector2::zeros() };
            ((r / spacing).powf(p), e * e.transpose())
        };
        let difference = |a: &PlanePoint, b: &PlanePoint| -> Matrix2<f64> {
            let (growth, ee) = pair(a, b);
            (Matrix2::identity() * across + ee * (along - across)) * growth
        };
        let m = present.len();
        let mut largest = noise;
        let mut k = DMatrix::zeros(2 * m, 2 * m);
        let mut right = DMatrix::zeros(2 * m, 4);
        for (i, (_, a)) in present.iter().enumerate() {
            for (j, (_, b)) in present.iter().enumerate().skip(i + 1) {
                let d = difference(a, b);
                largest = largest.max(d.trace());
                k.fixed_view_mut::<2, 2>(2 * i, 2 * j)
                    .copy_from(&(d * -0.5));
                k.fixed_view_mut::<2, 2>(2 * j, 2 * i)
                    .copy_from(&(d * -0.5));
            }
            let d = difference(&around.here, a);
            largest = largest.max(d.trace());
            right
                .fixed_view_mut::<2, 2>(2 * i, 0)
                .copy_from(&(d * -0.5));
        }
        // A constant in all covariances, larger than any difference: the weights do not depend on it.
        let constant = 10.0 * largest;
        for i in 0..2 * m {
            for j in (i % 2..2 * m).step_by(2) {
                k[(i, j)] += constant;
            }
            // Two sensors without error in one place would make the matrix singular.
            k[(i, i)] += noise + 1e-9 * largest;
            right[(i, i % 2)] += constant;
            right[(i, 2 + i % 2)] = 1.0;
        }
        let solved = k.cholesky()?.solve(&right);
        // Universal kriging (Cressie 1993, 3.4, from memory): B = (k + F A⁻¹ (1 − Fᵀ K⁻¹ k))ᵀ K⁻¹, A = Fᵀ K⁻¹ F.
        let column_sums = |from: usize| -> Matrix2<f64> {
            (0..m).fold(Matrix2::zeros(), |sum, i| {
                sum + solved.fixed_view::<2, 2>(2 * i, from)
            })
        };
        let correction = column_sums(2).try_inverse()? * (Matrix2::identity() - column_sums(0));
        let weights: Vec<Matrix2<f64>> = (0..m)
            .map(|i| {
                let simple = solved.fixed_view::<2, 2>(2 * i, 0);
                let unit = solved.fixed_view::<2, 2>(2 * i, 2);
                (simple + unit * correction).transpose()
            })
            .collect();
        let mut between = [0.0; 2];
        let mut add =
            |factor: f64, growth: f64, ee: &Matrix2<f64>, a: &Matrix2<f64>, b: &Matrix2<f64>| {
                let of = |tensor: Matrix2<f64>| (a * tensor * b.transpose()).trace();
                between[0] += factor * growth * of(*ee);
                between[1] += factor * growth * of(Matrix2::identity() - ee);
            };
        for (i, (_, a)) in present.iter().enumerate() {
            let (growth, ee) = pair(&around.here, a);
            add(0.5, growth, &ee, &Matrix2::identity(), &weights[i]);
            for (j, (_, b)) in present.iter().enumerate().skip(i + 1) {
                let (growth, ee) = pair(a, b);
                add(-0.5, growth, &ee, &weights[i], &weights[j]);
            }
        }
        let others = present
            .iter()
            .zip(&weights)
            .map(|(&&(other, there), weight)| {
                (
                    other,
                    local(weight, &around.here, &there),
                    0.5 * weight.norm_squared(),
                )
            });
        Some(Self {
            others: others.collect(),
            between,
        })
    }
}

/// Weights in the axes of the plane, between components towards local east and north.
fn local(weight: &Matrix2<f64>, here: &PlanePoint, there: &PlanePoint) -> [f64; 4] {
    let column = |unit: [f64; 2]| {
        let at = weight * Vector2::from(there.to_plane(unit));
        here.to_local([at[0], at[1]])
    };
    let (east, north) = (column([1.0, 0.0]), column([0.0, 1.0]));
    [east[0], north[0], east[1], north[1]]
}
