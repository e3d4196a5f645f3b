//! The quantities, their units, and how each follows from the state with its error.

use std::f64::consts::PI;

use super::State;
use crate::units::Wind;

/// A kinematic quantity of a polygon.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Quantity {
    /// Mean wind over the area towards east at the polygon's middle, m/s.
    MeanU,
    /// Towards north, m/s.
    MeanV,
    /// Speed of the mean wind, m/s.
    MeanSpeed,
    /// Direction it blows from, degrees clockwise from true north, in (0, 360].
    MeanDirection,
    /// u_x − v_y, 1/s.
    Stretching,
    /// v_x + u_y, 1/s.
    Shearing,
    /// E = √(stretching² + shearing²), 1/s.
    TotalDeformation,
    /// Axis along which E stretches, degrees clockwise from true north, in [0, 180).
    DilatationAxis,
    /// V ∂β/∂s, β the heading (counter-clockwise), s downwind: vorticity of curved flow, 1/s.
    CurvatureVorticity,
    /// −∂V/∂n, n to the left of the wind: vorticity of shear, 1/s.
    ShearVorticity,
    /// V ∂β/∂n: divergence of streamlines that spread, 1/s.
    Diffluence,
    /// ∂V/∂s: divergence of wind that speeds up, 1/s.
    DownwindAcceleration,
    /// E² − ζ², less what errors add to it, 1/s²: below 0 rotation prevails, above 0 strain.
    OkuboWeiss,
    /// (E − δ)/2: rate at which lines across the axis of dilatation shorten now, 1/s.
    ContractionRate,
    /// (√OW − δ)/2: the same after long, 1/s; where strain prevails.
    AsymptoticContractionRate,
    /// ζ/f: its size is the Rossby number, above 0 it is cyclonic.
    RossbyNumber,
    /// −(ζ + f) δ: rate of change of absolute vorticity by stretching, 1/s².
    VorticityStretching,
}

/// Their number.
pub const QUANTITIES: usize = 17;

/// Half of a 95 % interval in standard errors (normal distribution).
const Z95: f64 = 1.959_964;
/// The root of Okubo-Weiss is given where that is more than this many errors above 0.
pub(super) const LEAST_RATIO: f64 = 3.0;
/// Parts along and across the wind are given where its speed is more than this many errors: the direction is then known
/// to a third of a radian.
const LEAST_SPEED_RATIO: f64 = 3.0;
/// No Rossby number nearer to the equator, degrees (`methods.md` 2).
const LEAST_LATITUDE: f64 = 5.0;

impl Quantity {
    /// All of them, in the order of the columns.
    pub const ALL: [Self; QUANTITIES] = [
        Self::MeanU,
        Self::MeanV,
        Self::MeanSpeed,
        Self::MeanDirection,
        Self::Stretching,
        Self::Shearing,
        Self::TotalDeformation,
        Self::DilatationAxis,
        Self::CurvatureVorticity,
        Self::ShearVorticity,
        Self::Diffluence,
        Self::DownwindAcceleration,
        Self::OkuboWeiss,
        Self::ContractionRate,
        Self::AsymptoticContractionRate,
        Self::RossbyNumber,
        Self::VorticityStretching,
    ];

    /// Name of its column; that of its error has `_se` added.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::MeanU => "mean_u",
            Self::MeanV => "mean_v",
            Self::MeanSpeed => "mean_speed",
            Self::MeanDirection => "mean_direction",
            Self::Stretching => "stretching",
            Self::Shearing => "shearing",
            Self::TotalDeformation => "total_deformation",
            Self::DilatationAxis => "dilatation_axis",
            Self::CurvatureVorticity => "curvature_vorticity",
            Self::ShearVorticity => "shear_vorticity",
            Self::Diffluence => "diffluence",
            Self::DownwindAcceleration => "downwind_acceleration",
            Self::OkuboWeiss => "okubo_weiss",
            Self::ContractionRate => "contraction_rate",
            Self::AsymptoticContractionRate => "asymptotic_contraction_rate",
            Self::RossbyNumber => "rossby_number",
            Self::VorticityStretching => "vorticity_stretching",
        }
    }

    /// Its unit, as CF writes them.
    #[must_use]
    pub const fn units(self) -> &'static str {
        match self {
            Self::MeanU | Self::MeanV | Self::MeanSpeed => "m s-1",
            Self::MeanDirection | Self::DilatationAxis => "degree",
            Self::OkuboWeiss | Self::VorticityStretching => "s-2",
            Self::RossbyNumber => "1",
            _ => "s-1",
        }
    }
}

/// The quantities of one polygon at one time.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Quantities {
    values: [f64; QUANTITIES],
    errors: [f64; QUANTITIES],
    there: u32,
}

impl Quantities {
    /// Value and standard error; `None` where it is suppressed or missing.
    #[must_use]
    pub fn get(&self, quantity: Quantity) -> Option<(f64, f64)> {
        let k = quantity as usize;
        (self.there & (1 << k) != 0).then(|| (self.values[k], self.errors[k]))
    }

    fn set(&mut self, quantity: Quantity, value: f64, error: f64) {
        let k = quantity as usize;
        (self.values[k], self.errors[k]) = (value, error);
        self.there |= 1 << k;
    }

    /// All quantities of a state over an area with planetary vorticity f, 1/s, at a latitude, degrees; what depends on
    /// the direction of the wind is left out below `least_speed`, m/s.
    ///
    /// Errors are carried on to first order (delta method). Where that does not do:
    ///
    /// - Directions and axes: the 95 % interval is ± asin(1.96 σ/r), σ the error across the vector and r its length
    ///   (Fieller 1954, J. R. Stat. Soc. B 16, 175; from memory); the error is that over 1.96. Where r is less than
    ///   1.96 σ, near calm or without strain, any direction is possible: 92 degrees, any axis: 46 degrees.
    /// - Okubo-Weiss: errors add the variances of stretching and shearing and take off that of the vorticity; the value
    ///   is corrected for it. Its variance has half of the second-order term 2 tr (QC)² added, C the covariance and Q
    ///   the quadratic form: without it, or with all of it, the intervals hold in 92 or 98 % where strain and rotation
    ///   are about as large as their errors.
    /// - Its root, in the asymptotic rate: given where it is more than 3 of its errors above 0, with the slope down to
    ///   the lower end of its interval, since the root is steeper there.
    /// - Curvature and the like: given where the speed is more than 3 of its errors, and with the error of the
    ///   direction.
    /// - Total deformation and speed cannot be negative: their intervals hold in 93 % or more, 97 to 98 % where they are
    ///   about as large as their errors, but in 85 % where there is nothing at all.
    ///
    /// **Reference**: `methods.md` 3.
    #[must_use]
    pub fn of(state: &State, planetary: f64, latitude: f64, least_speed: f64) -> Self {
        let mut out = Self::default();
        let [u, v, z, d, st, sh] = state.values;
        let c = &state.covariance;
        let sd = |k: usize| c[k][k].max(0.0).sqrt();
        out.set(Quantity::MeanU, u, sd(0));
        out.set(Quantity::MeanV, v, sd(1));
        out.set(Quantity::Stretching, st, sd(4));
        out.set(Quantity::Shearing, sh, sd(5));

        let wind = Arrow::of([u, v], [c[0][0], c[0][1], c[1][1]]);
        out.set(Quantity::MeanSpeed, wind.length, wind.along);
        if let Some(error) = wind.angle_error()
            && let Some(from) = (Wind { u, v }).from_direction()
        {
            out.set(Quantity::MeanDirection, from.degrees(), error.to_degrees());
        }
        let strain = Arrow::of([st, sh], [c[4][4], c[4][5], c[5][5]]);
        out.set(Quantity::TotalDeformation, strain.length, strain.along);
        if let Some(error) = strain.angle_error() {
            // Half the angle of (stretching, shearing) counter-clockwise from east.
            let axis = 90.0 - 0.5 * sh.atan2(st).to_degrees();
            let axis = if axis >= 180.0 { axis - 180.0 } else { axis };
            out.set(Quantity::DilatationAxis, axis, 0.5 * error.to_degrees());
        }
        out.rotation_and_strain(state, &strain);
        if wind.length >= least_speed && wind.length > LEAST_SPEED_RATIO * wind.across {
            out.along_the_wind(state, wind.length);
        }
        let absolute = z + planetary;
        let error = state.error_of([0.0, 0.0, -d, -absolute, 0.0, 0.0]);
        out.set(Quantity::VorticityStretching, -absolute * d, error);
        let f = planetary.abs();
        if latitude.abs() >= LEAST_LATITUDE && f > 0.0 {
            out.set(Quantity::RossbyNumber, z / planetary, sd(2) / f);
        }
        out
    }

    /// Okubo-Weiss and the contraction rates.
    fn rotation_and_strain(&mut self, state: &State, strain: &Arrow) {
        let [.., z, d, st, sh] = state.values;
        let c = &state.covariance;
        let [e_st, e_sh] = strain.direction;
        let rate = 0.5 * (strain.length - d);
        let error = state.error_of([0.0, 0.0, 0.0, -0.5, 0.5 * e_st, 0.5 * e_sh]);
        self.set(Quantity::ContractionRate, rate, error);

        let added = c[4][4] + c[5][5] - c[2][2];
        let okubo_weiss = st * st + sh * sh - z * z - added;
        let slope = [0.0, 0.0, -2.0 * z, 0.0, 2.0 * st, 2.0 * sh];
        let first = state.error_of(slope);
        // tr (QC)², Q = diag(−1, 1, 1) for ζ and the two deformations.
        let square = |a: usize, b: usize| c[a][b] * c[a][b];
        let own = square(2, 2) + square(4, 4) + square(5, 5);
        let second = own + 2.0 * (square(4, 5) - square(2, 4) - square(2, 5));
        let error = (first * first + second).max(0.0).sqrt();
        self.set(Quantity::OkuboWeiss, okubo_weiss, error);
        if okubo_weiss > LEAST_RATIO * error && okubo_weiss > 0.0 {
            let root = okubo_weiss.sqrt();
            let lower = (okubo_weiss - Z95 * error).max(0.0).sqrt();
            // The difference quotient down to there: 1/(root + lower).
            let mut slope = slope.map(|s| 0.5 * s / (root + lower));
            slope[3] = -0.5;
            let error = state.error_of(slope);
            let rate = 0.5 * (root - d);
            self.set(Quantity::AsymptoticContractionRate, rate, error);
        }
    }

    /// What needs the direction β of the wind (`methods.md` 3, natural coordinates).
    fn along_the_wind(&mut self, state: &State, speed: f64) {
        let [u, v, z, d, st, sh] = state.values;
        let squared = speed * speed;
        // cos 2β and sin 2β, and the gradient of β.
        let (c2, s2) = ((u * u - v * v) / squared, 2.0 * u * v / squared);
        let of_beta = [-v / squared, u / squared];
        let (turned, aligned) = (sh * c2 - st * s2, st * c2 + sh * s2);
        let curvature = 0.5 * (z + turned);
        let acceleration = 0.5 * (d + aligned);
        // Turning β by dβ changes half of `turned` by −`aligned` dβ, half of `aligned` by `turned` dβ.
        let across = [-aligned * of_beta[0], -aligned * of_beta[1]];
        let along = [turned * of_beta[0], turned * of_beta[1]];
        let half = [0.5 * s2, 0.5 * c2];
        for (quantity, value, gradient) in [
            (
                Quantity::CurvatureVorticity,
                curvature,
                [across[0], across[1], 0.5, 0.0, -half[0], half[1]],
            ),
            (
                Quantity::ShearVorticity,
                z - curvature,
                [-across[0], -across[1], 0.5, 0.0, half[0], -half[1]],
            ),
            (
                Quantity::DownwindAcceleration,
                acceleration,
                [along[0], along[1], 0.0, 0.5, half[1], half[0]],
            ),
            (
                Quantity::Diffluence,
                d - acceleration,
                [-along[0], -along[1], 0.0, 0.5, -half[1], -half[0]],
            ),
        ] {
            self.set(quantity, value, state.error_of(gradient));
        }
    }
}

/// A vector of two components with its errors along and across it.
pub(super) struct Arrow {
    pub(super) length: f64,
    direction: [f64; 2],
    pub(super) along: f64,
    pub(super) across: f64,
}

impl Arrow {
    pub(super) fn of([x, y]: [f64; 2], [xx, xy, yy]: [f64; 3]) -> Self {
        let length = x.hypot(y);
        if length <= 0.0 {
            let any = (0.5 * (xx + yy)).max(0.0).sqrt();
            return Self {
                length: 0.0,
                direction: [0.0; 2],
                along: any,
                across: any,
            };
        }
        let [a, b] = [x / length, y / length];
        let along = a * a * xx + 2.0 * a * b * xy + b * b * yy;
        let across = b * b * xx - 2.0 * a * b * xy + a * a * yy;
        Self {
            length,
            direction: [a, b],
            along: along.max(0.0).sqrt(),
            across: across.max(0.0).sqrt(),
        }
    }

    /// Error of its angle, radians, if it has one: the interval is ± asin(1.96 σ/r) with σ across and r the length, and
    /// the whole circle where r is less than 1.96 σ.
    pub(super) fn angle_error(&self) -> Option<f64> {
        let sine = Z95 * self.across / self.length;
        let half = if sine < 1.0 { sine.asin() } else { PI };
        (self.length > 0.0).then_some(half / Z95)
    }
}
