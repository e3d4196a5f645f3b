//! Double integrals of the structure function along outlines.
//!
//! The error of the trapezoidal rule on one edge, ∫ V·t dl − ½ L (V₁ + V₂)·t, is an integral of the wind against a
//! measure μ: length along the edge, less half of it at either end. It has neither mass nor first moment, so a wind
//! that varies linearly gives no error, and its covariance with the error on another edge needs the structure function
//! only: −½ ∬ dμ dμ′ t·D(x − x′)·t′.

/// Nodes and weights of the Gauss-Legendre rules of 4 and 8 points on 0 to 1 (Abramowitz & Stegun 1964, table 25.4;
/// weights sum to 1).
const GAUSS_4: [[f64; 2]; 4] = [
    [0.069_431_844_202_973_71, 0.173_927_422_568_726_93],
    [0.330_009_478_207_571_9, 0.326_072_577_431_273_1],
    [0.669_990_521_792_428_1, 0.326_072_577_431_273_1],
    [0.930_568_155_797_026_3, 0.173_927_422_568_726_93],
];
pub(super) const GAUSS_8: [[f64; 2]; 8] = [
    [0.019_855_071_751_231_884, 0.050_614_268_145_188_13],
    [0.101_666_761_293_186_63, 0.111_190_517_226_687_24],
    [0.237_233_795_041_835_5, 0.156_853_322_938_943_64],
    [0.408_282_678_752_175_1, 0.181_341_891_689_181],
    [0.591_717_321_247_825, 0.181_341_891_689_181],
    [0.762_766_204_958_164_5, 0.156_853_322_938_943_64],
    [0.898_333_238_706_813_4, 0.111_190_517_226_687_24],
    [0.980_144_928_248_768_1, 0.050_614_268_145_188_13],
];

/// From this distance on, in lengths, four points are enough: relative error (6 + √37)⁻⁸, 2·10⁻⁹.
const FAR: f64 = 3.0;
/// Nearer than this, in lengths, a piece is halved: eight points then err by (1 + √2)⁻¹⁶, 10⁻⁶.
const NEAR: f64 = 0.5;
/// Halvings, at most; what is left is 2⁻¹² of an edge, where the integrand, r^p, is itself near 0.
const HALVINGS: u32 = 12;

/// A symmetric matrix: xx, xy, yy.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(super) struct Symmetric([f64; 3]);

impl Symmetric {
    pub(super) fn plus(self, other: Self, factor: f64) -> Self {
        Self(std::array::from_fn(|k| self.0[k] + factor * other.0[k]))
    }

    pub(super) fn times(self, factor: f64) -> Self {
        Self(self.0.map(|m| m * factor))
    }

    /// a · M · b.
    pub(super) fn between(self, a: [f64; 2], b: [f64; 2]) -> f64 {
        let [xx, xy, yy] = self.0;
        a[0] * (xx * b[0] + xy * b[1]) + a[1] * (xy * b[0] + yy * b[1])
    }

    pub(super) fn trace(self) -> f64 {
        self.0[0] + self.0[2]
    }

    pub(super) fn entries(self) -> [f64; 3] {
        self.0
    }
}

/// A straight edge of an outline; lengths in units of the reference distance.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Segment {
    /// Stations at start and end.
    pub stations: [usize; 2],
    /// Their places.
    pub ends: [[f64; 2]; 2],
    /// Unit vector in the direction of travel.
    pub tangent: [f64; 2],
    /// Length.
    pub length: f64,
}

impl Segment {
    /// The edge from one place to another.
    #[must_use]
    pub fn new(stations: [usize; 2], ends: [[f64; 2]; 2]) -> Self {
        let d = minus(ends[1], ends[0]);
        let length = d[0].hypot(d[1]);
        Self {
            stations,
            ends,
            tangent: if length > 0.0 {
                d.map(|c| c / length)
            } else {
                [0.0; 2]
            },
            length,
        }
    }

    /// Outward unit normal of a path with the inside on its left.
    #[must_use]
    pub fn normal(&self) -> [f64; 2] {
        [self.tangent[1], -self.tangent[0]]
    }
}

/// r^p e eᵀ for the vector r e.
pub(super) fn growth(d: [f64; 2], p: f64) -> Symmetric {
    let squared = d[0] * d[0] + d[1] * d[1];
    if squared <= 0.0 {
        return Symmetric::default();
    }
    let factor = squared.powf(0.5 * p - 1.0);
    Symmetric([d[0] * d[0], d[0] * d[1], d[1] * d[1]]).times(factor)
}

/// −½ ∬ dμ dμ′ r^p e eᵀ of the errors of two edges.
///
/// With t and t′ the tangents (or normals) of the edges and M the result, the covariance of the two errors is
/// `c_L` t·M·t′ + `c_T` (t·t′ tr M − t·M·t′).
///
/// - **Method**: one edge with itself in closed form (`methods.md` 8); edges with one station in common by the
///   homogeneity of r^p about it: with s and s′ from the shared station the double integral over the unit square of a
///   function of degree p is ∫ (f(1, s) + f(s, 1)) ds / (p + 2) (Duffy 1982, SIAM J. Numer. Anal. 19, 1260; from
///   memory); others by Gauss-Legendre points, halved where they are near.
pub(super) fn edge_pair(e: &Segment, f: &Segment, p: f64) -> Symmetric {
    let both = e.length * f.length;
    let shared = |i: usize, j: usize| e.stations[i] == f.stations[j];
    if (shared(0, 0) && shared(1, 1)) || (shared(0, 1) && shared(1, 0)) {
        let variance = 0.5 * (2.0 / (p + 2.0) - 0.5);
        return growth(minus(e.ends[1], e.ends[0]), p).times(both * variance);
    }
    let corner = [(0, 0), (0, 1), (1, 0), (1, 1)]
        .into_iter()
        .find(|&(i, j)| shared(i, j));
    let mut sum = Symmetric::default();
    if let Some((i, j)) = corner {
        let (a, b) = (e.ends[1 - i], f.ends[1 - j]);
        let (from_a, from_b) = (mean_along(a, f, p), mean_along(b, e, p));
        let lines = 1.0 / (p + 2.0) - 0.5;
        sum = sum.plus(from_a, lines).plus(from_b, lines);
        // From the shared station along either edge, and from it to its other end.
        for edge in [e, f] {
            let whole = growth(minus(edge.ends[1], edge.ends[0]), p);
            sum = sum.plus(whole, 0.25 - 0.5 / (p + 1.0));
        }
        sum = sum.plus(growth(minus(a, b), p), 0.25);
    } else {
        sum = sum.plus(mean_between(e, f, p, HALVINGS), 1.0);
        for k in 0..2 {
            sum = sum.plus(mean_along(e.ends[k], f, p), -0.5);
            sum = sum.plus(mean_along(f.ends[k], e, p), -0.5);
            for l in 0..2 {
                sum = sum.plus(growth(minus(e.ends[k], f.ends[l]), p), 0.25);
            }
        }
    }
    sum.times(-0.5 * both)
}

/// −½ ∫ dμ r^p e eᵀ of the error of an edge and a single place.
pub(super) fn edge_and_point(e: &Segment, point: [f64; 2], p: f64) -> Symmetric {
    let mut sum = mean_along(point, e, p);
    for end in e.ends {
        sum = sum.plus(growth(minus(end, point), p), -0.5);
    }
    sum.times(-0.5 * e.length)
}

/// Mean of r^p e eᵀ from a point over a segment.
pub(super) fn mean_along(point: [f64; 2], e: &Segment, p: f64) -> Symmetric {
    mean_over(point, e.ends, p, HALVINGS)
}

fn mean_over(point: [f64; 2], ends: [[f64; 2]; 2], p: f64, halvings: u32) -> Symmetric {
    let d = minus(ends[1], ends[0]);
    let length = d[0].hypot(d[1]);
    let distance = distance_to(point, ends);
    if distance < NEAR * length && halvings > 0 {
        let middle = along(ends, 0.5);
        return mean_over(point, [ends[0], middle], p, halvings - 1)
            .times(0.5)
            .plus(mean_over(point, [middle, ends[1]], p, halvings - 1), 0.5);
    }
    rule(distance, length)
        .iter()
        .fold(Symmetric::default(), |sum, &[s, w]| {
            sum.plus(growth(minus(along(ends, s), point), p), w)
        })
}

/// Mean of r^p e eᵀ over the points of two segments that do not cross.
fn mean_between(e: &Segment, f: &Segment, p: f64, halvings: u32) -> Symmetric {
    let longer = e.length.max(f.length);
    let distance = [
        distance_to(e.ends[0], f.ends),
        distance_to(e.ends[1], f.ends),
        distance_to(f.ends[0], e.ends),
        distance_to(f.ends[1], e.ends),
    ]
    .into_iter()
    .fold(f64::INFINITY, f64::min);
    if distance < NEAR * longer && halvings > 0 {
        let (split, other) = if e.length >= f.length { (e, f) } else { (f, e) };
        let middle = along(split.ends, 0.5);
        let half = |ends| Segment {
            ends,
            length: 0.5 * split.length,
            ..*split
        };
        let first = half([split.ends[0], middle]);
        let second = half([middle, split.ends[1]]);
        return mean_between(&first, other, p, halvings - 1)
            .times(0.5)
            .plus(mean_between(&second, other, p, halvings - 1), 0.5);
    }
    let points = rule(distance, longer);
    let mut sum = Symmetric::default();
    for &[s, w] in points {
        let x = along(e.ends, s);
        for &[s2, w2] in points {
            sum = sum.plus(growth(minus(x, along(f.ends, s2)), p), w * w2);
        }
    }
    sum
}

fn rule(distance: f64, length: f64) -> &'static [[f64; 2]] {
    if distance >= FAR * length {
        &GAUSS_4
    } else {
        &GAUSS_8
    }
}

pub(super) fn minus(a: [f64; 2], b: [f64; 2]) -> [f64; 2] {
    [a[0] - b[0], a[1] - b[1]]
}

pub(super) fn along(ends: [[f64; 2]; 2], share: f64) -> [f64; 2] {
    let d = minus(ends[1], ends[0]);
    [ends[0][0] + share * d[0], ends[0][1] + share * d[1]]
}

fn distance_to(point: [f64; 2], ends: [[f64; 2]; 2]) -> f64 {
    let (d, q) = (minus(ends[1], ends[0]), minus(point, ends[0]));
    let squared = d[0] * d[0] + d[1] * d[1];
    let share = if squared > 0.0 {
        ((q[0] * d[0] + q[1] * d[1]) / squared).clamp(0.0, 1.0)
    } else {
        0.0
    };
    let off = minus(point, along(ends, share));
    off[0].hypot(off[1])
}

#[cfg(test)]
mod tests {
    use super::*;

    fn brute(e: &Segment, f: &Segment, p: f64, n: u32) -> Symmetric {
        let nodes: Vec<(f64, f64)> = (0..n)
            .map(|k| ((f64::from(k) + 0.5) / f64::from(n), 1.0 / f64::from(n)))
            .chain([(0.0, -0.5), (1.0, -0.5)])
            .collect();
        let mut sum = Symmetric::default();
        for &(s, w) in &nodes {
            for &(s2, w2) in &nodes {
                let d = minus(along(e.ends, s), along(f.ends, s2));
                sum = sum.plus(growth(d, p), w * w2);
            }
        }
        sum.times(-0.5 * e.length * f.length)
    }

    #[test]
    fn agrees_with_fine_midpoint_sums() {
        let o = [0.0, 0.0];
        let e = Segment::new([0, 1], [o, [1.0, 0.2]]);
        let others = [
            Segment::new([1, 2], [[1.0, 0.2], [0.4, 1.1]]),
            Segment::new([3, 0], [[0.9, 0.35], o]), // a sliver's corner
            Segment::new([4, 5], [[0.2, 0.1], [0.6, 0.9]]), // near, nothing shared
            Segment::new([6, 7], [[5.0, 2.0], [4.0, 3.0]]), // far
            e,
        ];
        for p in [1.0 / 3.0, 2.0 / 3.0, 1.0, 1.7, 2.0] {
            for f in &others {
                let (found, expected) = (edge_pair(&e, f, p), brute(&e, f, p, 400));
                for k in 0..3 {
                    // The midpoint rule errs by n^(-1-p) beside the singularity: 1.2e-4 for one edge and p = 1/3.
                    assert!(
                        (found.0[k] - expected.0[k]).abs() < 0.4 * 400_f64.powf(-1.0 - p) + 1e-5,
                        "{p} {f:?} {found:?} {expected:?}"
                    );
                }
            }
        }
    }
}
