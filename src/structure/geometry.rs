//! The differences of winds that a network offers: pairs of stations, and stations against a plane through others.

use std::f64::consts::{FRAC_PI_2, FRAC_PI_4, TAU};

use geographiclib_rs::{Geodesic, InverseGeodesic};

use super::function::Exponent;
use super::neighbours::Neighbours;
use super::plane::LocalPlane;
use crate::station::{Network, Position};
use crate::units::sin_cos_degrees;

/// Classes of distance: class k reaches up to 2^(1 − k/2) times the spacing, the last down to 0.
pub const CLASSES: usize = 8;

/// Pairs of one station in one class, at most, with stations that come later in the network.
const PAIRS_IN_CLASS: usize = 2;
/// Stations that a plane is laid through, at first; more where they stand badly.
const PLANE_STATIONS: usize = 4;
const MOST_PLANE_STATIONS: usize = 8;
/// Stations of wide planes are this many spacings away, give or take [`WIDE_BY`], one in each quarter of the horizon.
const WIDE: f64 = 1.8;
const WIDE_BY: f64 = 0.6;
/// A plane of which the value at the station has more than this times the variance of one wind is no comparison.
const LARGEST_SQUARED_WEIGHTS: f64 = 4.0;
/// Stations of planes report at least this share of the times.
const OFTEN: f64 = 0.5;
/// Planes of one class whose constants are computed; the mean over more of them is the same.
const PLANES_FOR_CONSTANTS: usize = 200;

/// Two stations.
#[derive(Debug, Clone, Copy)]
pub(super) struct Pair {
    pub(super) stations: [usize; 2],
    /// Sine and cosine of the azimuth of the geodesic at either end.
    pub(super) azimuth: [[f64; 2]; 2],
    pub(super) class: usize,
    /// What squared differences are multiplied with to stand for the distance of the class.
    pub(super) to_class: f64,
}

/// A station against the plane through stations around it: λ sums to 0, and so does λ times either coordinate, so
/// that winds that vary linearly give nothing.
#[derive(Debug, Clone)]
pub(super) struct PlaneDifference {
    pub(super) weights: Vec<(usize, f64)>,
    pub(super) class: usize,
    /// 1 / (its variance for a structure function (r/r0)^(2/3)).
    pub(super) to_unit: f64,
}

/// The pairs and planes of a network.
#[derive(Debug, Clone)]
pub struct NetworkGeometry {
    /// Distance between neighbouring stations, m.
    pub spacing: f64,
    /// Number of stations.
    pub stations: usize,
    pub(super) pairs: Vec<Pair>,
    pub(super) planes: Vec<PlaneDifference>,
    /// Distance that stands for a class, in spacings.
    pub(super) class_distance: [f64; CLASSES],
    /// For each class of planes and each exponent the mean of (variance for (r/r0)^p) × `to_unit`.
    pub(super) plane_growth: Vec<[f64; Exponent::COUNT]>,
    /// For each class of planes the mean of Σλ² × `to_unit`.
    pub(super) plane_noise: [f64; CLASSES],
}

impl NetworkGeometry {
    /// Chooses the pairs, out to twice the spacing, and the planes.
    ///
    /// `spacing` is the median edge of the triangles, or [`super::typical_spacing`], m. Stations at one place make no
    /// pair. The number of pairs grows with the number of stations, not with its square.
    ///
    /// `reports` says how much each station reports, relative to one that always does: planes are laid through stations
    /// with half or more, since one that is missing costs the whole plane, and pairs need more than nothing. A station
    /// without an entry reports always.
    #[must_use]
    pub fn new(network: &Network, spacing: f64, reports: &[f64]) -> Self {
        let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
        let spacing = if spacing.is_finite() && spacing > 1.0 {
            spacing
        } else {
            1.0
        };
        let near = Neighbours::new(&positions, 3.0 * spacing);
        let mut geometry = Self {
            spacing,
            stations: positions.len(),
            pairs: Vec::new(),
            planes: Vec::new(),
            class_distance: std::array::from_fn(middle_of_class),
            plane_growth: vec![[0.0; Exponent::COUNT]; CLASSES],
            plane_noise: [0.0; CLASSES],
        };
        let geodesic = Geodesic::wgs84();
        for station in 0..positions.len() {
            let share = |station: usize| reports.get(station).copied().unwrap_or(1.0);
            let mut around = near.some_around(station);
            around.retain(|&(other, _)| share(other) > 0.0);
            if share(station) > 0.0 {
                geometry.add_pairs(station, &around, &positions, &geodesic);
            }
            around.retain(|&(other, _)| share(other) >= OFTEN);
            if share(station) >= OFTEN {
                geometry.add_near_plane(station, &around, &positions);
                geometry.add_wide_planes(station, &around, &positions);
            }
        }
        geometry.plane_constants(&positions);
        geometry
    }

    /// Number of pairs and of planes.
    #[must_use]
    pub fn sizes(&self) -> (usize, usize) {
        (self.pairs.len(), self.planes.len())
    }

    fn add_pairs(
        &mut self,
        station: usize,
        around: &[(usize, f64)],
        positions: &[Position],
        geodesic: &Geodesic,
    ) {
        for class in 0..CLASSES {
            let inside: Vec<usize> = around
                .iter()
                .filter(|&&(other, d)| other > station && class_of(d / self.spacing) == Some(class))
                .map(|&(other, _)| other)
                .collect();
            let step = inside.len().div_ceil(PAIRS_IN_CLASS).max(1);
            for &other in inside.iter().step_by(step) {
                let (p, q) = (positions[station], positions[other]);
                let (length, start, end, _arc): (f64, f64, f64, f64) =
                    geodesic.inverse(p.latitude(), p.longitude(), q.latitude(), q.longitude());
                let unit = |azimuth| {
                    let (sin, cos) = sin_cos_degrees(azimuth);
                    [sin, cos]
                };
                self.pairs.push(Pair {
                    stations: [station, other],
                    azimuth: [unit(start), unit(end)],
                    class,
                    // Exact for an exponent of 1; classes are narrow enough for all others (under 1 %).
                    to_class: self.class_distance[class] * self.spacing / length,
                });
            }
        }
    }

    /// The plane through the nearest stations, of more of them where they stand badly.
    fn add_near_plane(&mut self, station: usize, around: &[(usize, f64)], positions: &[Position]) {
        for count in PLANE_STATIONS.min(around.len())..=MOST_PLANE_STATIONS.min(around.len()) {
            if self.add_plane(station, &around[..count], positions) {
                return;
            }
        }
    }

    /// Planes through four stations farther away, one in each quarter of the horizon, for two ways of quartering it: the
    /// same comparison at a larger scale, from which the exponent is found.
    fn add_wide_planes(&mut self, station: usize, around: &[(usize, f64)], positions: &[Position]) {
        let here = positions[station];
        let plane = LocalPlane::at((here.latitude(), here.longitude()));
        let spacing = self.spacing;
        let off = |d: f64| (d / spacing - WIDE).abs();
        let mut first = Vec::new();
        for turn in [0.0, FRAC_PI_4] {
            let mut quarters: [Option<(usize, f64)>; 4] = [None; 4];
            for &(other, d) in around.iter().filter(|c| off(c.1) < WIDE_BY) {
                let [x, y] = plane.place(positions[other]).at;
                let quarter = (y.atan2(x) + turn).rem_euclid(TAU) / FRAC_PI_2;
                #[expect(
                    clippy::cast_possible_truncation,
                    clippy::cast_sign_loss,
                    reason = "0 to 4"
                )]
                let best = &mut quarters[(quarter as usize).min(3)];
                if best.is_none_or(|(_, held)| off(d) < off(held)) {
                    *best = Some((other, d));
                }
            }
            let mut chosen: Vec<(usize, f64)> = quarters.into_iter().flatten().collect();
            chosen.sort_unstable_by_key(|c| c.0);
            if chosen.len() == 4 && chosen != first {
                self.add_plane(station, &chosen, positions);
                first = chosen;
            }
        }
    }

    fn add_plane(
        &mut self,
        station: usize,
        chosen: &[(usize, f64)],
        positions: &[Position],
    ) -> bool {
        let here = positions[station];
        let plane = LocalPlane::at((here.latitude(), here.longitude()));
        let points: Vec<[f64; 2]> = chosen
            .iter()
            .map(|&(other, _)| plane.place(positions[other]).at)
            .collect();
        let Some(weights) = value_of_plane(&points)
            .filter(|w| w.iter().map(|w| w * w).sum::<f64>() <= LARGEST_SQUARED_WEIGHTS)
        else {
            return false;
        };
        let mean_distance = chosen.iter().map(|c| c.1).sum::<f64>() / chosen.len() as f64;
        let Some(class) = class_of((mean_distance / self.spacing).min(2.0)) else {
            return false;
        };
        let mut all = vec![(station, 1.0)];
        all.extend(chosen.iter().zip(weights).map(|(c, w)| (c.0, -w)));
        let mut ends = vec![[0.0; 2]];
        ends.extend(points);
        let variance = self.variance_of_difference(&all, &ends, 2.0 / 3.0);
        if variance > 0.0 {
            self.planes.push(PlaneDifference {
                weights: all,
                class,
                to_unit: 1.0 / variance,
            });
        }
        variance > 0.0
    }

    /// −½ ΣΣ λ λ (r/r0)^p.
    fn variance_of_difference(
        &self,
        weights: &[(usize, f64)],
        points: &[[f64; 2]],
        exponent: f64,
    ) -> f64 {
        let mut sum = 0.0;
        for (i, a) in points.iter().enumerate() {
            for (j, b) in points.iter().enumerate().skip(i + 1) {
                let r = (a[0] - b[0]).hypot(a[1] - b[1]) / self.spacing;
                sum -= weights[i].1 * weights[j].1 * r.powf(exponent);
            }
        }
        sum
    }

    fn plane_constants(&mut self, positions: &[Position]) {
        for class in 0..CLASSES {
            let of_class: Vec<&PlaneDifference> =
                self.planes.iter().filter(|p| p.class == class).collect();
            let step = of_class.len().div_ceil(PLANES_FOR_CONSTANTS).max(1);
            let (mut growth, mut noise, mut count) = ([0.0; Exponent::COUNT], 0.0, 0.0);
            for difference in of_class.iter().step_by(step) {
                let here = positions[difference.weights[0].0];
                let plane = LocalPlane::at((here.latitude(), here.longitude()));
                let points: Vec<[f64; 2]> = difference
                    .weights
                    .iter()
                    .map(|&(s, _)| plane.place(positions[s]).at)
                    .collect();
                for p in Exponent::all() {
                    growth[p.index()] += difference.to_unit
                        * self.variance_of_difference(&difference.weights, &points, p.value());
                }
                noise +=
                    difference.to_unit * difference.weights.iter().map(|w| w.1 * w.1).sum::<f64>();
                count += 1.0;
            }
            if count > 0.0 {
                self.plane_growth[class] = growth.map(|g| g / count);
                self.plane_noise[class] = noise / count;
            }
        }
    }
}

/// Weights that give the value at (0, 0) of the least-squares plane through values at `points`; `None` if they stand
/// on a line.
fn value_of_plane(points: &[[f64; 2]]) -> Option<Vec<f64>> {
    let n = points.len() as f64;
    if points.len() < 3 {
        return None;
    }
    let mean = |axis: usize| points.iter().map(|p| p[axis]).sum::<f64>() / n;
    let (mx, my) = (mean(0), mean(1));
    let (mut sxx, mut sxy, mut syy) = (0.0, 0.0, 0.0);
    for p in points {
        let (x, y) = (p[0] - mx, p[1] - my);
        sxx += x * x;
        sxy += x * y;
        syy += y * y;
    }
    let determinant = sxx * syy - sxy * sxy;
    // On a line the determinant is 0; 10⁻³ of its largest value is an aspect of 1 to 30.
    if determinant <= 1e-3 * (0.5 * (sxx + syy)).powi(2) {
        return None;
    }
    let slope_x = (-syy * mx + sxy * my) / determinant;
    let slope_y = (sxy * mx - sxx * my) / determinant;
    Some(
        points
            .iter()
            .map(|p| 1.0 / n + slope_x * (p[0] - mx) + slope_y * (p[1] - my))
            .collect(),
    )
}

/// Class of a distance in spacings; `None` beyond two.
fn class_of(distance: f64) -> Option<usize> {
    if distance.is_nan() || distance > 2.0 {
        return None;
    }
    let halves = (2.0 * (2.0 / distance.max(1e-3)).log2()).floor();
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "0 to 22"
    )]
    Some((halves.max(0.0) as usize).min(CLASSES - 1))
}

/// Geometric middle of a class, in spacings.
pub(super) fn middle_of_class(class: usize) -> f64 {
    2.0 * 2.0_f64.powf(-0.5 * (class as f64 + 0.5))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn classes_are_half_octaves_below_two_spacings() {
        assert_eq!(class_of(2.0), Some(0));
        assert_eq!(class_of(1.42), Some(0));
        assert_eq!(class_of(1.41), Some(1));
        assert_eq!(class_of(1.01), Some(1));
        assert_eq!(class_of(0.99), Some(2));
        assert_eq!(class_of(1e-9), Some(CLASSES - 1));
        assert_eq!(class_of(2.01), None);
        for class in 0..CLASSES {
            assert_eq!(class_of(middle_of_class(class)), Some(class));
        }
    }

    #[test]
    fn a_plane_is_met_by_its_own_values() {
        let points = [
            [1.0, 0.5],
            [-1.0, 0.7],
            [0.2, -1.0],
            [0.9, 1.3],
            [-0.4, 0.1],
        ];
        let weights = value_of_plane(&points).unwrap_or_default();
        let value = |p: &[f64; 2]| 3.0 - 2.0 * p[0] + 5.0 * p[1];
        let found: f64 = points.iter().zip(&weights).map(|(p, w)| w * value(p)).sum();
        assert!((found - 3.0).abs() < 1e-12);
        assert!(value_of_plane(&[[0.0, 1.0], [1.0, 2.0], [2.0, 3.0]]).is_none());
    }
}
