//! Another estimate for polygons with more than three stations: fits to the winds as functions of place.

use nalgebra::DMatrix;

use super::boundary::{Segment, edge_and_point, growth};
use super::discovery::chance_of_square;
use super::sampling::{Sampling, dot};
use crate::align::WindBlock;
use crate::polygon::{CoefficientRow, StationPolygon};
use crate::structure::{PlanePoint, StructureFunction};

/// A quadratic fit of which the scaled design matrix has a larger condition number is refused: errors of the winds would
/// come through tenfold and more. Stations on one conic section (circle, ellipse, two lines) have an infinite one
/// (Davies-Jones 1993, MWR 121, 713); rings of 8 to 20 stations at random 5 to 50.
pub const LARGEST_CONDITION: f64 = 300.0;

/// Fewest stations of a quadratic fit: six coefficients and two to spare.
pub const QUADRATIC_STATIONS: usize = 8;

/// Fits for one polygon, prepared once.
#[derive(Debug, Clone)]
pub struct SecondOpinion {
    /// Least-squares linear fit: its vorticity and divergence as a row of weights.
    pub linear: CoefficientRow,
    /// Quadratic fit averaged over the polygon's area, or why there is none.
    pub quadratic: Result<CoefficientRow, NoQuadratic>,
    stations: Vec<(usize, PlanePoint)>,
    segments: Vec<Segment>,
    /// Linear fit minus line integral, in the axes of the plane, 1/m.
    difference: Vec<[f64; 2]>,
    /// The same in local axes.
    local_difference: CoefficientRow,
    /// m
    reference: f64,
    /// m²
    area: f64,
}

/// Why there is no quadratic fit.
#[derive(Debug, Clone, Copy, PartialEq)]
#[non_exhaustive]
pub enum NoQuadratic {
    /// Too few stations.
    TooFew(usize),
    /// The stations lie on or near a conic section; the condition number of the design matrix.
    OnConic(f64),
}

impl std::fmt::Display for NoQuadratic {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::TooFew(n) => {
                write!(
                    f,
                    "{n} stations, {QUADRATIC_STATIONS} needed for a quadratic fit"
                )
            }
            Self::OnConic(condition) => write!(
                f,
                "the stations lie on or near a conic section (condition number {condition:.1e} > {LARGEST_CONDITION})"
            ),
        }
    }
}

/// The linear fit beside the line integral at one time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Comparison {
    /// Vorticity and divergence of the linear fit, 1/s.
    pub fitted: [f64; 2],
    /// Their standard errors against the area means, 1/s: instruments, sites and sampling.
    pub fitted_se: [f64; 2],
    /// Linear fit minus line integral, 1/s.
    pub difference: [f64; 2],
    /// Standard errors of the difference, 1/s: what the winds' errors and the wind between the stations make of it.
    pub difference_se: [f64; 2],
    /// Root mean square of the residuals of either component, m/s, on n − 3 degrees of freedom.
    pub residual: f64,
    /// Probability of a difference as large as this if the model holds (χ² with two degrees of freedom).
    pub chance: f64,
}

impl SecondOpinion {
    /// Prepares the fits for polygon number `p`; `None` for triangles, for which linear fit and line integral are the
    /// same, and for stations on a line.
    #[must_use]
    pub fn new(polygon: &StationPolygon, p: usize, sampling: &Sampling) -> Option<Self> {
        if polygon.size() <= 3 {
            return None;
        }
        let (segments, plane) = sampling.in_plane(p);
        let stations: Vec<(usize, PlanePoint)> = polygon
            .row
            .stations
            .iter()
            .map(|&s| (s, plane.place(sampling.position(s))))
            .collect();
        let places: Vec<[f64; 2]> = stations.iter().map(|s| s.1.at).collect();
        let slopes = slopes_of_plane(&places)?;
        let reference = sampling.reference();
        let mut line = vec![[0.0; 2]; places.len()];
        for e in &segments {
            for station in e.stations {
                if let Some(k) = stations.iter().position(|s| s.0 == station) {
                    let factor = 0.5 * e.length * reference / polygon.shape.area;
                    line[k][0] += factor * e.tangent[0];
                    line[k][1] += factor * e.tangent[1];
                }
            }
        }
        let linear: Vec<[f64; 2]> = slopes.iter().map(|&[x, y]| [-y, x]).collect();
        let difference: Vec<[f64; 2]> = linear
            .iter()
            .zip(&line)
            .map(|(f, l)| [f[0] - l[0], f[1] - l[1]])
            .collect();
        let row = |weights: &[[f64; 2]]| CoefficientRow {
            stations: polygon.row.stations.clone(),
            weights: weights
                .iter()
                .zip(&stations)
                .map(|(&w, (_, point))| point.to_local(w))
                .collect(),
        };
        let centre = centroid(&segments).map(|c| c * reference);
        Some(Self {
            linear: row(&linear),
            quadratic: quadratic(&places, centre).map(|w| row(&w)),
            local_difference: row(&difference),
            stations,
            segments,
            difference,
            reference,
            area: polygon.shape.area,
        })
    }

    /// Constants of the difference and of the linear fit's own error for unit `c_L` and `c_T`: `[[along, across]; 2]`,
    /// 1/m² times the structure function's unit.
    fn constants(&self, structure: &StructureFunction, edges: [f64; 2]) -> [[f64; 2]; 2] {
        let p = structure.exponent.value();
        let at = |k: usize| self.stations[k].1.at.map(|c| c / self.reference);
        let mut points = [0.0; 2];
        for (i, a) in self.difference.iter().enumerate() {
            for (j, b) in self.difference.iter().enumerate().skip(i + 1) {
                let (x, y) = (at(i), at(j));
                let g = growth([x[0] - y[0], x[1] - y[1]], p);
                let along = g.between(*a, *b);
                // −½ twice: either order of the pair.
                points[0] -= along;
                points[1] -= dot(*a, *b) * g.trace() - along;
            }
        }
        let mut mixed = [0.0; 2];
        for e in &self.segments {
            for (k, d) in self.difference.iter().enumerate() {
                let m = edge_and_point(e, at(k), p);
                let along = m.between(e.tangent, *d);
                mixed[0] += along;
                mixed[1] += dot(e.tangent, *d) * m.trace() - along;
            }
        }
        // The line integral's error is minus the integral against μ; lengths of edges are in units of the reference.
        let scale = -2.0 * self.reference / self.area;
        let fitted = std::array::from_fn(|k| edges[k] + points[k] + scale * mixed[k]);
        [fitted, points]
    }

    /// Compares at time `t` of a block, all of whose stations must have a wind; `edges` are the sampling constants of
    /// the polygon for the structure function's exponent.
    ///
    /// - **Reference**: linear fit `methods.md` 1.3 (Davies-Jones 1993). The difference of the two is itself a linear
    ///   form of the winds, blind to a linear wind, and its variance comes from the same model; the two estimates share
    ///   their stations, so the sum of both variances would be far too large.
    #[must_use]
    pub fn compare(
        &self,
        winds: &WindBlock,
        t: usize,
        structure: &StructureFunction,
        edges: &super::SamplingConstants,
    ) -> Comparison {
        let n = winds.times.len();
        let cell = |station: usize| station * n + t;
        let apply = |row: &CoefficientRow| {
            row.apply(|s| crate::units::Wind {
                u: winds.u[cell(s)],
                v: winds.v[cell(s)],
            })
        };
        let (vorticity, divergence) = apply(&self.linear);
        let (dz, dd) = apply(&self.local_difference);
        let [fitted, points] = self.constants(structure, [edges.along, edges.across]);
        let (l, c) = (structure.longitudinal, structure.transverse);
        let both = |[along, across]: [f64; 2]| {
            [l * along + c * across, l * across + c * along].map(|v: f64| v.max(0.0))
        };
        let of_stations =
            |row: &CoefficientRow| super::station_covariance(row, row, winds, t, structure);
        let own = of_stations(&self.linear);
        let sampled = both(fitted);
        let apart = of_stations(&self.local_difference);
        let spread = both(points);
        let variance = [apart.vorticity + spread[0], apart.divergence + spread[1]];
        // The two components of the difference are taken as independent; the covariance is small (it is 0 for equal
        // c_L and c_T and errors without direction).
        let square = [dz, dd]
            .iter()
            .zip(variance)
            .map(|(d, v)| if v > 0.0 { d * d / v } else { 0.0 })
            .sum();
        Comparison {
            fitted: [vorticity, divergence],
            fitted_se: [own.vorticity + sampled[0], own.divergence + sampled[1]].map(f64::sqrt),
            difference: [dz, dd],
            difference_se: variance.map(f64::sqrt),
            residual: self.residual(winds, t),
            chance: chance_of_square(square),
        }
    }

    /// Root of RSS/(2 (n − 3)) of the linear fit, m/s.
    fn residual(&self, winds: &WindBlock, t: usize) -> f64 {
        let n = self.stations.len() as f64;
        let values: Vec<[f64; 2]> = self
            .stations
            .iter()
            .map(|(s, point)| {
                let cell = s * winds.times.len() + t;
                point.to_plane([winds.u[cell], winds.v[cell]])
            })
            .collect();
        let places: Vec<[f64; 2]> = self.stations.iter().map(|s| s.1.at).collect();
        let Some(slopes) = slopes_of_plane(&places) else {
            return 0.0;
        };
        let mean = |axis: usize, of: &[[f64; 2]]| of.iter().map(|p| p[axis]).sum::<f64>() / n;
        let middle = [mean(0, &places), mean(1, &places)];
        let mut sum = 0.0;
        for component in 0..2 {
            let m = mean(component, &values);
            let slope = |axis: usize| {
                let products = slopes.iter().zip(&values);
                products.map(|(s, v)| s[axis] * v[component]).sum::<f64>()
            };
            let (gx, gy) = (slope(0), slope(1));
            for (p, v) in places.iter().zip(&values) {
                let fit = m + gx * (p[0] - middle[0]) + gy * (p[1] - middle[1]);
                sum += (v[component] - fit) * (v[component] - fit);
            }
        }
        (sum / (2.0 * (n - 3.0))).sqrt()
    }
}

/// Weights that give the slopes along x and y of the least-squares plane (`methods.md` 1.3); `None` for places on a
/// line.
#[must_use]
pub fn slopes_of_plane(places: &[[f64; 2]]) -> Option<Vec<[f64; 2]>> {
    let n = places.len() as f64;
    let mean = |axis: usize| places.iter().map(|p| p[axis]).sum::<f64>() / n;
    let (mx, my) = (mean(0), mean(1));
    let (mut sxx, mut sxy, mut syy) = (0.0, 0.0, 0.0);
    for p in places {
        let (x, y) = (p[0] - mx, p[1] - my);
        sxx += x * x;
        sxy += x * y;
        syy += y * y;
    }
    let q = sxx * syy - sxy * sxy;
    // 10⁻⁸ of the largest it can be: an aspect of 1 to 10,000.
    if q.is_nan() || q <= 1e-8 * (0.5 * (sxx + syy)).powi(2) {
        return None;
    }
    Some(
        places
            .iter()
            .map(|p| {
                let (x, y) = (p[0] - mx, p[1] - my);
                [(syy * x - sxy * y) / q, (sxx * y - sxy * x) / q]
            })
            .collect(),
    )
}

/// Weights (x, y) of the vorticity of a least-squares quadratic fit, averaged over an area with this centroid: the
/// slopes are linear, so their mean is that at the centroid.
///
/// # Errors
/// Too few stations; stations on or near a conic section.
pub fn quadratic(places: &[[f64; 2]], centre: [f64; 2]) -> Result<Vec<[f64; 2]>, NoQuadratic> {
    let n = places.len();
    if n < QUADRATIC_STATIONS {
        return Err(NoQuadratic::TooFew(n));
    }
    let mean = |axis: usize| places.iter().map(|p| p[axis]).sum::<f64>() / n as f64;
    let middle = [mean(0), mean(1)];
    let squares = places
        .iter()
        .map(|p| (p[0] - middle[0]).powi(2) + (p[1] - middle[1]).powi(2))
        .sum::<f64>();
    let scale = (squares / n as f64).sqrt();
    let scaled = |p: &[f64; 2]| [(p[0] - middle[0]) / scale, (p[1] - middle[1]) / scale];
    let design = DMatrix::from_fn(n, 6, |row, column| {
        let [x, y] = scaled(&places[row]);
        [1.0, x, y, x * x, x * y, y * y][column]
    });
    let svd = design.svd(true, true);
    let values = &svd.singular_values;
    let condition = values.max() / values.min();
    if condition.is_nan() || condition > LARGEST_CONDITION {
        return Err(NoQuadratic::OnConic(condition));
    }
    let Ok(inverse) = svd.pseudo_inverse(0.0) else {
        return Err(NoQuadratic::OnConic(f64::INFINITY));
    };
    let [x, y] = scaled(&centre);
    Ok((0..n)
        .map(|k| {
            let c = |row: usize| inverse[(row, k)];
            let along_x = (c(1) + 2.0 * x * c(3) + y * c(4)) / scale;
            let along_y = (c(2) + x * c(4) + 2.0 * y * c(5)) / scale;
            [-along_y, along_x]
        })
        .collect())
}

/// Centroid of the area inside closed paths.
pub(super) fn centroid(segments: &[Segment]) -> [f64; 2] {
    let (mut area, mut x, mut y) = (0.0, 0.0, 0.0);
    for e in segments {
        let [a, b] = e.ends;
        let cross = a[0] * b[1] - b[0] * a[1];
        area += 0.5 * cross;
        x += (a[0] + b[0]) * cross / 6.0;
        y += (a[1] + b[1]) * cross / 6.0;
    }
    [x / area, y / area]
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    const PENTAGON: [[f64; 2]; 5] = [
        [0.0, 0.0],
        [40e3, -5e3],
        [55e3, 30e3],
        [20e3, 50e3],
        [-10e3, 25e3],
    ];

    /// `methods.md` 1.3: least squares D = 9.3281459e-5, zeta = -6.69344e-8.
    #[test]
    fn pentagon() {
        let (u, v) = ([5.0, 7.0, 9.0, 4.0, 3.0], [1.0, 2.0, -1.0, 3.0, 2.0]);
        let slopes = slopes_of_plane(&PENTAGON).unwrap();
        let sum = |axis: usize, of: &[f64; 5]| -> f64 {
            slopes.iter().zip(of).map(|(s, w)| s[axis] * w).sum()
        };
        assert!((sum(0, &u) + sum(1, &v) - 9.328_145_9e-5).abs() < 1e-12);
        assert!((sum(0, &v) - sum(1, &u) + 6.693_44e-8).abs() < 1e-13);
        assert!(slopes_of_plane(&[[0.0, 0.0], [1.0, 1.0], [2.0, 2.0], [5.0, 5.0]]).is_none());
    }

    /// Davies-Jones 1993: no quadratic fit for stations on a conic section.
    #[test]
    fn stations_on_a_conic_have_no_quadratic_fit() {
        let ellipse: Vec<[f64; 2]> = (0..9)
            .map(|k| {
                let (sin, cos) = (0.7 * f64::from(k)).sin_cos();
                [3e4 * cos + 1e4 * sin, 2e4 * sin]
            })
            .collect();
        assert!(matches!(
            quadratic(&ellipse, [0.0; 2]),
            Err(NoQuadratic::OnConic(_))
        ));
        assert_eq!(quadratic(&PENTAGON, [0.0; 2]), Err(NoQuadratic::TooFew(5)));
        let mut inside = ellipse;
        inside.push([2e3, -1e3]);
        // With a station inside, a quadratic wind has its own vorticity: v = 1e-9 x², u = 1e-9 x y, at (4 km, 3 km).
        let row = quadratic(&inside, [4e3, 3e3]).unwrap();
        let vorticity: f64 = row
            .iter()
            .zip(&inside)
            .map(|(w, p)| w[0] * 1e-9 * p[0] * p[1] + w[1] * 1e-9 * p[0] * p[0])
            .sum();
        assert!(
            (vorticity - (2.0 - 1.0) * 1e-9 * 4e3).abs() < 1e-15,
            "{vorticity}"
        );
    }
}
