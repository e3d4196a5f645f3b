//! From coefficient rows and winds to area-mean vorticity and divergence with their errors.
//!
//! Circulation and outward flux are the values times the polygon's area.
//!
//! [`estimate`] gives the values with the errors of the instruments, [`complete_errors`] adds what the stations do not
//! see and what comes of late reports ([`crate::structure`] says what an interval contains), [`error_covariance`] is for
//! differences and means of polygons, [`MeanError`] for means over time, [`adjusted`] for what differs from zero among
//! many, [`SecondOpinion`] for polygons of more than three stations.

mod attribution;
mod boundary;
mod budget;
mod discovery;
mod earth;
mod extra;
mod extremes;
mod fit_books;
mod group_means;
mod lanes;
mod mean_error;
mod moments;
mod sampling;
mod second_opinion;
mod statistics;
mod verdict;

use crate::align::WindBlock;
use crate::check::Flag;
use crate::polygon::{CoefficientRow, StationPolygon};
use crate::time::Time;

pub use attribution::{Attribution, attribute};
pub use boundary::Segment;
pub use budget::{
    ErrorBudget, ErrorParts, ExpectedErrors, complete_errors, error_covariance, expected_errors,
    station_covariance,
};
pub use discovery::{
    FalseDiscovery, adjusted, adjusted_for_any_dependence, chance_of, chance_of_square,
    find_significant,
};
pub use earth::{OMEGA, SelfTest, earth_rotation, planetary_vorticity, self_test};
pub use extra::ExtraPolygon;
pub use extremes::{Extremes, Peak};
pub use fit_books::{FitBook, FitBooks};
pub use group_means::{Group, GroupMeans, groups_of};
pub use mean_error::MeanError;
pub use moments::{MomentConstants, MomentCovariance, PAIRS, mean_weights};
pub use sampling::{PairCovariance, Sampling, SamplingConstants};
pub use second_opinion::{Comparison, NoQuadratic, SecondOpinion, quadratic, slopes_of_plane};
pub use statistics::{RunStatistics, Statistics};
pub use verdict::{Cause, CauseBooks, find_causes};

/// Estimates of all polygons at a run of analysis times.
///
/// Columns have the shape polygons × times; the value of polygon `p` at time `t` stands at `p * times.len() + t`. Where
/// the flag is [`Flag::Fail`] or [`Flag::Missing`] the value is 0 and means nothing.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct EstimateBlock {
    /// The analysis times.
    pub times: Vec<Time>,
    /// Area-mean relative vorticity, 1/s, positive counter-clockwise.
    pub vorticity: Vec<f64>,
    /// Its standard error, 1/s.
    pub vorticity_se: Vec<f64>,
    /// Area-mean horizontal divergence, 1/s.
    pub divergence: Vec<f64>,
    /// Its standard error, 1/s.
    pub divergence_se: Vec<f64>,
    /// Worst flag of the stations, or that of the estimate itself if it is worse ([`find_causes`]).
    pub flag: Vec<Flag>,
    /// Why an estimate is flagged worse than pass; empty before [`find_causes`], and where none is.
    pub causes: Vec<Option<Cause>>,
    /// Largest age of the stations' values, s.
    pub age: Vec<f32>,
    /// What the standard errors are made of; empty before [`complete_errors`].
    pub budget: ErrorBudget,
    /// Whether vorticity and divergence differ from zero, among all polygons of a time; empty before
    /// [`find_significant`].
    pub significant: [Vec<bool>; 2],
    /// Linear fits beside the line integrals of the polygons with more than three stations; empty before they are made.
    pub fits: Vec<FitColumn>,
    /// The polygons that follow those of the whole network in the columns: triangles where stations are missing.
    pub extra: Vec<ExtraPolygon>,
    /// Cells of polygons that do not stand at that time, as a station is missing or no longer is; empty if all stand.
    pub absent: Vec<bool>,
}

/// The linear fit of one polygon at the times of a block.
#[derive(Debug, Clone, PartialEq)]
pub struct FitColumn {
    /// Number of the polygon.
    pub polygon: usize,
    /// At each time; `None` where a wind is missing.
    pub at: Vec<Option<Comparison>>,
}

/// Estimates every polygon at every time of a block, in one pass over the columns of its stations.
///
/// - **Error**: instrument errors only ([`complete_errors`] adds the others), independent between stations: var ζ = Σ wᵀ C w with the 2×2 covariance C of
///   each report (`methods.md` 1.4, full form; Davies-Jones 1993, MWR 121, 713).
/// - **Missing**: a polygon without one of its stations, or of which one failed, has no value at that time.
#[must_use]
pub fn estimate(polygons: &[StationPolygon], winds: &WindBlock) -> EstimateBlock {
    // With the widest vectors that the processor has; every step is the same in each, so the bytes are too.
    pulp::Arch::new().dispatch(|| estimate_columns(polygons, winds))
}

#[expect(
    clippy::inline_always,
    reason = "it must become part of the caller's vector code"
)]
#[inline(always)]
fn estimate_columns(polygons: &[StationPolygon], winds: &WindBlock) -> EstimateBlock {
    let n = winds.times.len();
    let cells = polygons.len() * n;
    let mut out = EstimateBlock {
        times: winds.times.clone(),
        vorticity: vec![0.0; cells],
        vorticity_se: vec![0.0; cells],
        divergence: vec![0.0; cells],
        divergence_se: vec![0.0; cells],
        flag: vec![Flag::NotEvaluated; cells],
        age: vec![0.0; cells],
        ..EstimateBlock::default()
    };
    if n == 0 {
        return out;
    }
    let columns = out
        .vorticity
        .chunks_exact_mut(n)
        .zip(out.vorticity_se.chunks_exact_mut(n))
        .zip(out.divergence.chunks_exact_mut(n))
        .zip(out.divergence_se.chunks_exact_mut(n))
        .zip(out.flag.chunks_exact_mut(n))
        .zip(out.age.chunks_exact_mut(n));
    for (polygon, (((((vorticity, vorticity_se), divergence), divergence_se), flag), age)) in
        polygons.iter().zip(columns)
    {
        let row = &polygon.row;
        if let ([a, b, c], [wa, wb, wc]) = (row.stations.as_slice(), row.weights.as_slice()) {
            let (values, variances) = (
                [&mut *vorticity, divergence],
                [&mut *vorticity_se, divergence_se],
            );
            set_triangle([*a, *b, *c], [*wa, *wb, *wc], winds, values, variances);
        } else {
            add_values(row, winds, vorticity, divergence);
            add_variances(row, winds, vorticity_se, divergence_se);
        }
        for &station in &polygon.row.stations {
            let cells = winds.of_station(station);
            for (flag, &of_station) in flag.iter_mut().zip(&winds.flag[cells.clone()]) {
                *flag = flag.worst(of_station);
            }
            for (age, &of_station) in age.iter_mut().zip(&winds.age[cells]) {
                *age = age.max(of_station);
            }
        }
        for (z, d) in vorticity_se.iter_mut().zip(divergence_se.iter_mut()) {
            // Rounding may leave a variance of nothing just below 0.
            *z = if *z > 0.0 { z.sqrt() } else { 0.0 };
            *d = if *d > 0.0 { d.sqrt() } else { 0.0 };
        }
        if !flag.iter().all(|f| f.is_usable()) {
            for t in (0..n).filter(|&t| !flag[t].is_usable()) {
                (vorticity[t], divergence[t]) = (0.0, 0.0);
                (vorticity_se[t], divergence_se[t]) = (0.0, 0.0);
            }
        }
    }
    out
}

/// The values of three stations side by side.
#[expect(
    clippy::inline_always,
    reason = "it must become part of the caller's vector code"
)]
#[inline(always)]
fn three<'w>(
    column: &'w [f64],
    [a, b, c]: &[std::ops::Range<usize>; 3],
) -> impl Iterator<Item = ((&'w f64, &'w f64), &'w f64)> {
    let of = |cells: &std::ops::Range<usize>| column[cells.clone()].iter();
    of(a).zip(of(b)).zip(of(c))
}

/// Both forms of a triangle, all three stations in one pass, so that nothing is stored between; the order of the steps is
/// that of [`add_values`] and [`add_variances`].
#[expect(
    clippy::inline_always,
    reason = "it must become part of the caller's vector code"
)]
#[inline(always)]
fn set_triangle(
    [a, b, c]: [usize; 3],
    [[xa, ya], [xb, yb], [xc, yc]]: [[f64; 2]; 3],
    winds: &WindBlock,
    values: [&mut [f64]; 2],
    variances: [&mut [f64]; 2],
) {
    let stations = [a, b, c].map(|station| winds.of_station(station));
    let [vorticity, divergence] = values;
    let out = vorticity.iter_mut().zip(divergence);
    for ((z, d), (((ua, ub), uc), ((va, vb), vc))) in
        out.zip(three(&winds.u, &stations).zip(three(&winds.v, &stations)))
    {
        *z = xa * ua + ya * va + (xb * ub + yb * vb) + (xc * uc + yc * vc);
        *d = ya * ua - xa * va + (yb * ub - xb * vb) + (yc * uc - xc * vc);
    }
    let form = |x: f64, y: f64| (x * x, 2.0 * x * y, y * y);
    let (fa, fb, fc) = (form(xa, ya), form(xb, yb), form(xc, yc));
    let of_z = |f: (f64, f64, f64), uu: f64, uv: f64, vv: f64| f.0 * uu + f.1 * uv + f.2 * vv;
    let of_d = |f: (f64, f64, f64), uu: f64, uv: f64, vv: f64| f.2 * uu - f.1 * uv + f.0 * vv;
    let [vorticity, divergence] = variances;
    let out = vorticity.iter_mut().zip(divergence);
    let covariances = three(&winds.var_u, &stations)
        .zip(three(&winds.cov_uv, &stations))
        .zip(three(&winds.var_v, &stations));
    for ((z, d), ((((ua, ub), uc), ((xa, xb), xc)), ((va, vb), vc))) in out.zip(covariances) {
        *z = of_z(fa, *ua, *xa, *va) + of_z(fb, *ub, *xb, *vb) + of_z(fc, *uc, *xc, *vc);
        *d = of_d(fa, *ua, *xa, *va) + of_d(fb, *ub, *xb, *vb) + of_d(fc, *uc, *xc, *vc);
    }
}

/// Adds the linear forms; the loop over times has no branch and vectorises.
#[expect(
    clippy::inline_always,
    reason = "it must become part of the caller's vector code"
)]
#[inline(always)]
fn add_values(
    row: &CoefficientRow,
    winds: &WindBlock,
    vorticity: &mut [f64],
    divergence: &mut [f64],
) {
    for (&station, &[x, y]) in row.stations.iter().zip(&row.weights) {
        let cells = winds.of_station(station);
        let (u, v) = (&winds.u[cells.clone()], &winds.v[cells]);
        for (((z, d), u), v) in vorticity
            .iter_mut()
            .zip(divergence.iter_mut())
            .zip(u)
            .zip(v)
        {
            *z += x * u + y * v;
            *d += y * u - x * v;
        }
    }
}

/// Adds the quadratic forms wᵀ C w.
#[expect(
    clippy::inline_always,
    reason = "it must become part of the caller's vector code"
)]
#[inline(always)]
fn add_variances(
    row: &CoefficientRow,
    winds: &WindBlock,
    vorticity: &mut [f64],
    divergence: &mut [f64],
) {
    for (&station, &[x, y]) in row.stations.iter().zip(&row.weights) {
        let cells = winds.of_station(station);
        let (xx, xy2, yy) = (x * x, 2.0 * x * y, y * y);
        let covariance = winds.var_u[cells.clone()]
            .iter()
            .zip(&winds.cov_uv[cells.clone()])
            .zip(&winds.var_v[cells]);
        for ((z, d), ((uu, uv), vv)) in vorticity
            .iter_mut()
            .zip(divergence.iter_mut())
            .zip(covariance)
        {
            *z += xx * uu + xy2 * uv + yy * vv;
            *d += yy * uu - xy2 * uv + xx * vv;
        }
    }
}

/// Sense of rotation relative to the Earth's.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Sense {
    /// With the planetary vorticity.
    Cyclonic,
    /// Against it.
    Anticyclonic,
}

impl Sense {
    /// The sense of a vorticity where the planetary vorticity is `planetary`; `None` on the equator, and where nothing
    /// turns.
    #[must_use]
    pub fn of(vorticity: f64, planetary: f64) -> Option<Self> {
        let product = vorticity * planetary;
        if product > 0.0 {
            Some(Self::Cyclonic)
        } else if product < 0.0 {
            Some(Self::Anticyclonic)
        } else {
            None
        }
    }

    /// The sense as a word.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Cyclonic => "cyclonic",
            Self::Anticyclonic => "anticyclonic",
        }
    }
}
