//! Sampling error: what the stations do not see of the wind between them.

use std::sync::OnceLock;

use rayon::prelude::*;

use super::boundary::{Segment, edge_pair};
use super::moments::MomentConstants;
use crate::polygon::{EdgeSet, StationPolygon};
use crate::station::Position;
use crate::structure::{Exponent, LocalPlane, StructureFunction};

/// Sampling variances of one polygon for structure functions (r/r0)^p of unit amplitude, 1/m².
///
/// Since the normal of an edge is its tangent turned by 90°, what the longitudinal structure function is to the
/// circulation the transverse one is to the flux, and the other way round: two constants serve both.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct SamplingConstants {
    /// Of the vorticity for `c_L`, of the divergence for `c_T`.
    pub along: f64,
    /// Of the vorticity for `c_T`, of the divergence for `c_L`.
    pub across: f64,
    /// Covariance of vorticity and divergence for `c_L` − `c_T`.
    pub mixed: f64,
}

impl SamplingConstants {
    /// Those of a closed outline, a set of closed paths with the inside on the left, in units of the reference
    /// distance; `area` and the result likewise.
    ///
    /// - **Formula**: var = −½ ∬ w·D·w, w the contrast of the continuous boundary integral with the trapezoidal rule at
    ///   the stations, over the area (`design.md` 4).
    /// - **Accuracy**: 10⁻⁵ (closed forms of `methods.md` 8 in the tests).
    #[must_use]
    pub fn of(outline: &[Segment], area: f64, exponent: f64) -> Self {
        let mut sum = Self::default();
        for (k, e) in outline.iter().enumerate() {
            for (l, f) in outline.iter().enumerate().skip(k) {
                let both = if k == l { 1.0 } else { 2.0 };
                let m = edge_pair(e, f, exponent);
                let along = m.between(e.tangent, f.tangent);
                sum.along += both * along;
                sum.across += both * (dot(e.tangent, f.tangent) * m.trace() - along);
                // t·M·n′ and t′·M·n, whose δ parts cancel.
                sum.mixed += 0.5
                    * both
                    * (m.between(e.tangent, f.normal()) + m.between(f.tangent, e.normal()));
            }
        }
        let squared = area * area;
        Self {
            // One of them may be below 0 where p is near 2; their sum for what isotropy allows is not.
            along: sum.along / squared,
            across: sum.across / squared,
            mixed: sum.mixed / squared,
        }
    }

    /// Sampling variance of vorticity and of divergence, and their covariance, 1/s².
    #[must_use]
    pub fn variances(&self, structure: &StructureFunction) -> [f64; 3] {
        let (l, t) = (structure.longitudinal, structure.transverse);
        [
            // Rounding may leave a variance of nothing just below 0.
            (l * self.along + t * self.across).max(0.0),
            (l * self.across + t * self.along).max(0.0),
            (l - t) * self.mixed,
        ]
    }
}

/// Covariances between a quantity of one polygon and one of another, 1/s².
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct PairCovariance {
    /// Vorticity of the first with vorticity of the second.
    pub vorticity: f64,
    /// Divergence with divergence.
    pub divergence: f64,
    /// Vorticity of the first with divergence of the second.
    pub vorticity_divergence: f64,
    /// Divergence of the first with vorticity of the second.
    pub divergence_vorticity: f64,
}

impl PairCovariance {
    pub(super) fn add(&mut self, other: &Self) {
        self.vorticity += other.vorticity;
        self.divergence += other.divergence;
        self.vorticity_divergence += other.vorticity_divergence;
        self.divergence_vorticity += other.divergence_vorticity;
    }
}

/// The outlines of a network's polygons, each in its own plane, and their constants, made once for each exponent when
/// it is first asked for.
#[derive(Debug)]
pub struct Sampling {
    reference: f64,
    outlines: Vec<Outline>,
    positions: Vec<Position>,
    constants: Vec<OnceLock<Vec<SamplingConstants>>>,
    pub(super) moments: Vec<OnceLock<Vec<MomentConstants>>>,
}

#[derive(Debug)]
struct Outline {
    middle: (f64, f64),
    /// Start and end station of each edge.
    edges: Vec<[usize; 2]>,
    /// m²
    area: f64,
    /// Length of the mean edge, m.
    mean_edge: f64,
}

impl Sampling {
    /// Prepares the polygons; `reference` is that of the structure function, m.
    #[must_use]
    pub fn new(
        polygons: &[StationPolygon],
        edges: &EdgeSet,
        positions: &[Position],
        reference: f64,
    ) -> Self {
        let outlines = polygons
            .iter()
            .map(|polygon| Outline {
                middle: polygon.middle,
                edges: polygon
                    .path
                    .iter()
                    .map(|&e| {
                        let (from, to, _) = edges.ends(e);
                        [from, to]
                    })
                    .collect(),
                area: polygon.shape.area,
                mean_edge: polygon.shape.perimeter / polygon.path.len().max(1) as f64,
            })
            .collect();
        Self {
            reference,
            outlines,
            positions: positions.to_vec(),
            constants: (0..Exponent::COUNT).map(|_| OnceLock::new()).collect(),
            moments: (0..Exponent::COUNT).map(|_| OnceLock::new()).collect(),
        }
    }

    /// The constants of all polygons for an exponent.
    #[must_use]
    pub fn constants(&self, exponent: Exponent) -> &[SamplingConstants] {
        self.constants[exponent.index()].get_or_init(|| {
            let squared = self.reference * self.reference;
            self.outlines
                .par_iter()
                .map(|outline| {
                    let segments = self.segments(outline, outline.middle);
                    let found =
                        SamplingConstants::of(&segments, outline.area / squared, exponent.value());
                    SamplingConstants {
                        along: found.along / squared,
                        across: found.across / squared,
                        mixed: found.mixed / squared,
                    }
                })
                .collect()
        })
    }

    /// Mean edge of a polygon, m: the scale of its sampling error.
    #[must_use]
    pub fn mean_edge(&self, polygon: usize) -> f64 {
        self.outlines[polygon].mean_edge
    }

    /// Number of polygons.
    pub(super) fn polygons(&self) -> usize {
        self.outlines.len()
    }

    /// Area of a polygon, m².
    pub(super) fn area(&self, polygon: usize) -> f64 {
        self.outlines[polygon].area
    }

    /// The reference distance, m.
    #[must_use]
    pub fn reference(&self) -> f64 {
        self.reference
    }

    pub(super) fn position(&self, station: usize) -> Position {
        self.positions[station]
    }

    /// The outline of a polygon in its plane, in units of the reference, and the plane.
    pub(super) fn in_plane(&self, polygon: usize) -> (Vec<Segment>, LocalPlane) {
        let outline = &self.outlines[polygon];
        let plane = LocalPlane::at(outline.middle);
        (self.segments(outline, outline.middle), plane)
    }

    /// Covariance of the sampling errors of two polygons, which may share stations, sides, or lie apart.
    #[must_use]
    pub fn covariance(&self, p: usize, q: usize, structure: &StructureFunction) -> PairCovariance {
        let (first, second) = (&self.outlines[p], &self.outlines[q]);
        let exponent = structure.exponent.value();
        let e_path = self.segments(first, first.middle);
        let f_path = self.segments(second, first.middle);
        let mut sums = [[0.0; 2]; 4];
        for e in &e_path {
            for f in &f_path {
                let m = edge_pair(e, f, exponent);
                let mut add = |k: usize, a: [f64; 2], b: [f64; 2]| {
                    let along = m.between(a, b);
                    sums[k][0] += along;
                    sums[k][1] += dot(a, b) * m.trace() - along;
                };
                add(0, e.tangent, f.tangent);
                add(1, e.normal(), f.normal());
                add(2, e.tangent, f.normal());
                add(3, e.normal(), f.tangent);
            }
        }
        // Lengths are in units of the reference, areas in m².
        let scale = self.reference * self.reference / (first.area * second.area);
        let [
            vorticity,
            divergence,
            vorticity_divergence,
            divergence_vorticity,
        ] = sums.map(|[l, t]| scale * (structure.longitudinal * l + structure.transverse * t));
        PairCovariance {
            vorticity,
            divergence,
            vorticity_divergence,
            divergence_vorticity,
        }
    }

    fn segments(&self, outline: &Outline, middle: (f64, f64)) -> Vec<Segment> {
        let plane = LocalPlane::at(middle);
        let place = |station: usize| {
            plane
                .place(self.positions[station])
                .at
                .map(|c| c / self.reference)
        };
        outline
            .edges
            .iter()
            .map(|&[from, to]| Segment::new([from, to], [place(from), place(to)]))
            .collect()
    }
}

pub(super) fn dot(a: [f64; 2], b: [f64; 2]) -> f64 {
    a[0] * b[0] + a[1] * b[1]
}

#[cfg(test)]
mod tests {
    use super::*;

    fn ring(points: &[[f64; 2]]) -> Vec<Segment> {
        (0..points.len())
            .map(|k| {
                let next = (k + 1) % points.len();
                Segment::new([k, next], [points[k], points[next]])
            })
            .collect()
    }

    fn equilateral() -> (Vec<Segment>, f64) {
        let h = 3.0_f64.sqrt() / 2.0;
        (ring(&[[0.0, 0.0], [1.0, 0.0], [0.5, h]]), h / 2.0)
    }

    /// `methods.md` 8: one edge S(L)/8 for p = 2/3, S(L)/12 for p = 1, nothing for p = 2.
    #[test]
    fn one_edge() {
        let edge = Segment::new([0, 1], [[0.0, 0.0], [0.6, 0.8]]);
        for (p, expected) in [(2.0 / 3.0, 1.0 / 8.0), (1.0, 1.0 / 12.0), (2.0, 0.0)] {
            let m = edge_pair(&edge, &edge, p);
            assert!((m.between(edge.tangent, edge.tangent) - expected).abs() < 1e-12);
            assert!(m.between(edge.tangent, edge.normal()).abs() < 1e-12);
        }
    }

    /// `methods.md` 8: u and v independent, each with S = c r^p (`c_L` = `c_T`): 1.149 √S(L)/L for p = 2/3, 0.949 for
    /// p = 1.
    #[test]
    fn equilateral_triangle() {
        let (triangle, area) = equilateral();
        for (p, expected) in [(2.0 / 3.0, 1.149), (1.0, 0.949)] {
            let c = SamplingConstants::of(&triangle, area, p);
            let sd = (c.along + c.across).sqrt();
            assert!((sd - expected).abs() < 5e-4, "{p} {sd}");
            assert!(c.mixed.abs() < 1e-12);
        }
        let linear = SamplingConstants::of(&triangle, area, 2.0);
        assert!(linear.along < 1e-12 && linear.across < 1e-12);
    }

    #[test]
    fn the_plane_may_be_turned() {
        let points = [[0.0, 0.0], [1.3, 0.1], [1.0, 0.9], [0.5, 0.3], [-0.2, 1.1]];
        let turned = points.map(|[x, y]| {
            let (sin, cos) = 0.7_f64.sin_cos();
            [x * cos - y * sin, y * cos + x * sin]
        });
        let (a, b) = (
            SamplingConstants::of(&ring(&points), 1.0, 0.8),
            SamplingConstants::of(&ring(&turned), 1.0, 0.8),
        );
        assert!((a.along - b.along).abs() < 1e-6 * a.along);
        assert!((a.across - b.across).abs() < 1e-6 * a.across);
        assert!((a.mixed - b.mixed).abs() < 1e-6 * a.across);
    }
}
