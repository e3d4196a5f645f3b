//! Mean wind and velocity gradient of a polygon as linear forms of its stations' winds, and the covariance of all six.
//!
//! The mean of a component over the area and its derivatives along x and y are three forms, alike for u and v: a
//! station's wind has the weights (mean, d/dx, d/dy). Any two of them have one symmetric 2×2 covariance of the
//! components: six matrices hold all covariances of the mean wind and the gradient. The vorticity is one of their
//! combinations, with the same error as in [`super::ErrorBudget`].

use rayon::prelude::*;

use super::boundary::{
    GAUSS_8, Segment, Symmetric, along, edge_and_point, edge_pair, growth, mean_along, minus,
};
use super::sampling::{Sampling, dot};
use super::second_opinion::centroid;
use crate::structure::{Exponent, StructureFunction};

/// The pairs of forms: 0 the mean, 1 d/dx, 2 d/dy.
pub const PAIRS: [(usize, usize); 6] = [(0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2)];

/// Weights of the mean over the area inside closed paths, by station; they sum to 1.
///
/// - **Formula**: ∫ u dA = ½ ∮ u (r − c)·n ds − ½ ∫ (r − c)·∇u dA, and with c the centroid the last term is 0 for a
///   wind that varies linearly. A third at each station of a triangle.
/// - **Assumes**: the wind varies linearly along each edge, as the line integral does.
#[must_use]
pub fn mean_weights(outline: &[Segment]) -> Vec<(usize, f64)> {
    let area = area(outline);
    let centre = centroid(outline);
    let mut weights: Vec<(usize, f64)> = Vec::with_capacity(outline.len());
    for e in outline {
        let weight = dot(minus(e.ends[0], centre), e.normal()) * e.length / (4.0 * area);
        for station in e.stations {
            match weights.iter().rposition(|w| w.0 == station) {
                Some(k) => weights[k].1 += weight,
                None => weights.push((station, weight)),
            }
        }
    }
    weights
}

/// Area inside closed paths with the inside on the left.
fn area(outline: &[Segment]) -> f64 {
    let twice = outline.iter().map(|e| {
        let [a, b] = e.ends;
        a[0] * b[1] - b[0] * a[1]
    });
    0.5 * twice.sum::<f64>()
}

/// Covariances of the three forms, in the order of [`PAIRS`]: of the u of the first with the u of the second, of u with
/// v, of v with v. The mean in m²/s², a derivative 1/m more each.
pub type MomentCovariance = [[f64; 3]; 6];

/// Sampling covariances of one polygon for structure functions (r/r0)^p of unit amplitude: −½ ∬ dm dm′ (r/r0)^p e eᵀ for
/// each pair of forms, m the contrast of the form with what the stations give.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct MomentConstants([Symmetric; 6]);

impl MomentConstants {
    /// Those of a closed outline in units of the reference distance; the area by which the gradient is divided likewise.
    ///
    /// - **Method**: the derivatives have their contrast on the edges (`edge_pair`). Integrals of r^p e eᵀ over the area
    ///   become integrals along the edges, since ∇·(f d) = (p + 2) f for f of degree p in d, and once more for the
    ///   second area.
    /// - **Accuracy**: 10⁻³ or better (fine sums in the test, which are no better themselves).
    #[must_use]
    pub fn of(outline: &[Segment], of_gradient: f64, p: f64) -> Self {
        let mut sums = [Symmetric::default(); 6];
        let squared = of_gradient * of_gradient;
        for e in outline {
            let n = e.normal();
            for f in outline {
                let (m, o) = (edge_pair(e, f, p), f.normal());
                for (sum, (a, b)) in sums.iter_mut().zip(PAIRS).skip(3) {
                    *sum = sum.plus(m, n[a - 1] * o[b - 1] / squared); // 1 and 2 from the third pair on
                }
            }
        }
        let mean = Mean::of(outline, p);
        for e in outline {
            let (m, n) = (mean.with_edge(e), e.normal());
            sums[1] = sums[1].plus(m, n[0] / of_gradient);
            sums[2] = sums[2].plus(m, n[1] / of_gradient);
        }
        sums[0] = mean.with_itself();
        Self(sums)
    }

    /// The covariances for a structure function, in the units of the outline.
    #[must_use]
    pub fn covariance(&self, structure: &StructureFunction) -> MomentCovariance {
        let (l, t) = (structure.longitudinal, structure.transverse);
        self.0.map(|m| {
            let [xx, xy, yy] = m.entries();
            [l * xx + t * yy, (l - t) * xy, l * yy + t * xx]
        })
    }

    fn in_metres(self, reference: f64) -> Self {
        let mut powers = PAIRS.iter().map(|&(a, b)| {
            let derivatives = i32::from(a > 0) + i32::from(b > 0);
            reference.powi(-derivatives)
        });
        Self(self.0.map(|m| m.times(powers.next().unwrap_or(1.0))))
    }
}

/// The contrast of the mean over an area with the weighted stations.
struct Mean<'a> {
    outline: &'a [Segment],
    area: f64,
    p: f64,
    /// Places of the stations and their weights.
    stations: Vec<([f64; 2], f64)>,
}

impl<'a> Mean<'a> {
    fn of(outline: &'a [Segment], p: f64) -> Self {
        let place = |station: usize| {
            let ends = outline
                .iter()
                .flat_map(|e| e.stations.into_iter().zip(e.ends));
            let mut found = ends.filter(|&(s, _)| s == station).map(|(_, at)| at);
            found.next().unwrap_or_default()
        };
        let weights = mean_weights(outline).into_iter();
        Self {
            outline,
            area: area(outline),
            p,
            stations: weights.map(|(s, w)| (place(s), w)).collect(),
        }
    }

    /// Mean of r^p e eᵀ from a point over the area.
    fn over_area(&self, point: [f64; 2]) -> Symmetric {
        let mut sum = Symmetric::default();
        for e in self.outline {
            let height = dot(minus(e.ends[0], point), e.normal());
            if height.abs() > 1e-12 * e.length {
                let factor = height * e.length / (self.area * (self.p + 2.0));
                sum = sum.plus(mean_along(point, e, self.p), factor);
            }
        }
        sum
    }

    /// With the error of the trapezoidal rule on an edge.
    fn with_edge(&self, e: &Segment) -> Symmetric {
        let mut sum = Symmetric::default();
        for [s, w] in GAUSS_8 {
            sum = sum.plus(self.over_area(along(e.ends, s)), w);
        }
        for end in e.ends {
            sum = sum.plus(self.over_area(end), -0.5);
        }
        let mut sum = sum.times(-0.5 * e.length);
        for &(place, weight) in &self.stations {
            sum = sum.plus(edge_and_point(e, place, self.p), -weight);
        }
        sum
    }

    fn with_itself(&self) -> Symmetric {
        let mut sum = Symmetric::default();
        let factor = -1.0 / (self.area * self.area * (self.p + 2.0) * (self.p + 3.0));
        for (k, e) in self.outline.iter().enumerate() {
            // Within one edge no difference has a part across it.
            for f in &self.outline[k + 1..] {
                let both = 2.0 * factor * e.length * f.length;
                let (n, o) = (e.normal(), f.normal());
                for [s, w] in GAUSS_8 {
                    let x = along(e.ends, s);
                    for [s2, w2] in GAUSS_8 {
                        let d = minus(x, along(f.ends, s2));
                        sum = sum.plus(growth(d, self.p), both * w * w2 * dot(d, n) * dot(d, o));
                    }
                }
            }
        }
        for &(x, w) in &self.stations {
            sum = sum.plus(self.over_area(x), -2.0 * w);
            for &(y, w2) in &self.stations {
                sum = sum.plus(growth(minus(x, y), self.p), w * w2);
            }
        }
        sum.times(-0.5)
    }
}

impl Sampling {
    /// The constants of mean wind and gradient of all polygons for an exponent, 1/m for each derivative.
    #[must_use]
    pub fn moment_constants(&self, exponent: Exponent) -> &[MomentConstants] {
        self.moments[exponent.index()].get_or_init(|| {
            let squared = self.reference() * self.reference();
            (0..self.polygons())
                .into_par_iter()
                .map(|polygon| {
                    let (outline, _) = self.in_plane(polygon);
                    let area = self.area(polygon) / squared;
                    MomentConstants::of(&outline, area, exponent.value())
                        .in_metres(self.reference())
                })
                .collect()
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::integral::SamplingConstants;

    fn ring(points: &[[f64; 2]]) -> Vec<Segment> {
        (0..points.len())
            .map(|k| {
                let next = (k + 1) % points.len();
                Segment::new([k, next], [points[k], points[next]])
            })
            .collect()
    }

    const TRIANGLE: [[f64; 2]; 3] = [[0.0, 0.0], [1.2, 0.1], [0.3, 0.8]];
    // Not convex.
    const DART: [[f64; 2]; 4] = [[0.0, 0.0], [1.0, 0.0], [0.35, 0.3], [0.1, 1.1]];

    #[test]
    fn mean_weights_give_the_mean_of_a_linear_wind() {
        for (station, weight) in mean_weights(&ring(&TRIANGLE)) {
            assert!((weight - 1.0 / 3.0).abs() < 1e-15, "{station}");
        }
        let outline = ring(&DART);
        let weights = mean_weights(&outline);
        let [x, y] = centroid(&outline);
        let sum = |of: &dyn Fn([f64; 2]) -> f64| -> f64 {
            weights.iter().map(|&(s, w)| w * of(DART[s])).sum()
        };
        assert!((sum(&|_| 1.0) - 1.0).abs() < 1e-15);
        assert!((sum(&|p| p[0]) - x).abs() < 1e-15 && (sum(&|p| p[1]) - y).abs() < 1e-15);
    }

    /// A combination of the six matrices is the sampling variance of the vorticity, and of the divergence.
    #[test]
    fn vorticity_and_divergence_are_among_them() {
        let outline = ring(&DART);
        let (area, p) = (area(&outline), 0.8);
        let known = SamplingConstants::of(&outline, area, p);
        let [.., xx, xy, yy] = MomentConstants::of(&outline, area, p)
            .0
            .map(Symmetric::entries);
        // c_L alone: vorticity v_x − u_y, divergence u_x + v_y.
        let vorticity = xx[2] - 2.0 * xy[1] + yy[0];
        let divergence = xx[0] + 2.0 * xy[1] + yy[2];
        assert!((vorticity / known.along - 1.0).abs() < 1e-12);
        assert!((divergence / known.across - 1.0).abs() < 1e-12);
    }

    /// The contrasts as many points, summed in pairs: midpoints of edges, and of the cells of a fine grid.
    #[test]
    fn agrees_with_fine_sums() {
        for points in [TRIANGLE.as_slice(), DART.as_slice()] {
            let outline = ring(points);
            let area = area(&outline);
            let grid = 16;
            let mut forms: [Vec<([f64; 2], f64)>; 3] = Default::default();
            // The area as small triangles, in a fan of signed ones.
            for e in &outline {
                let [a, b, c] = [points[0], e.ends[0], e.ends[1]];
                let (ab, ac) = (minus(b, a), minus(c, a));
                let whole = 0.5 * (ab[0] * ac[1] - ab[1] * ac[0]) / area;
                let small = whole / f64::from(grid * grid);
                for i in 0..grid {
                    for j in 0..2 * (grid - i) - 1 {
                        let (third, k) = (f64::from(1 + j % 2) / 3.0, f64::from(j / 2));
                        let s = (f64::from(i) + third) / f64::from(grid);
                        let t = (k + third) / f64::from(grid);
                        let at = [0, 1].map(|c| a[c] + s * ab[c] + t * ac[c]);
                        if small != 0.0 {
                            forms[0].push((at, small));
                        }
                    }
                }
            }
            for (station, weight) in mean_weights(&outline) {
                forms[0].push((points[station], -weight));
            }
            for e in &outline {
                for axis in 0..2 {
                    let factor = e.normal()[axis] * e.length / area;
                    let pieces = 100;
                    for k in 0..pieces {
                        let s = (f64::from(k) + 0.5) / f64::from(pieces);
                        forms[1 + axis].push((along(e.ends, s), factor / f64::from(pieces)));
                    }
                    for end in e.ends {
                        forms[1 + axis].push((end, -0.5 * factor));
                    }
                }
            }
            for p in [2.0 / 3.0, 1.3] {
                let found = MomentConstants::of(&outline, area, p)
                    .0
                    .map(Symmetric::entries);
                for ((a, b), found) in PAIRS.into_iter().zip(found) {
                    let mut sum = Symmetric::default();
                    for &(x, w) in &forms[a] {
                        for &(y, w2) in &forms[b] {
                            sum = sum.plus(growth(minus(x, y), p), -0.5 * w * w2);
                        }
                    }
                    for (found, expected) in found.iter().zip(sum.entries()) {
                        // The fine sums err by some 1/100^(1 + p).
                        assert!(
                            (found - expected).abs() < 1e-3 + 2e-3 * expected.abs(),
                            "{a} {b} {p}: {found} {expected}"
                        );
                    }
                }
            }
        }
    }
}
