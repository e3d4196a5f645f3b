//! Observed scalars over all polygons, with errors.

use super::quantity::{Arrow, LEAST_RATIO};
use super::scalar::{flux_convergence, frontogenesis, gradient};
use super::{Errors, Kinematics, LocalWind, PolygonFrame, State};
use crate::align::{ScalarBlock, WindBlock};
use crate::check::Flag;
use crate::integral::{EstimateBlock, Sampling};
use crate::polygon::{EdgeSet, StationPolygon};
use crate::structure::StructureFunction;
use crate::time::Time;
use crate::units::Wind;

/// What is said of a scalar q over a polygon; units are those of q.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ScalarQuantity {
    /// Mean over the area.
    Mean,
    /// ∂q/∂x, x towards east at the polygon's middle, per m.
    GradientX,
    /// ∂q/∂y, y towards north, per m.
    GradientY,
    /// |∇q|, per m.
    Gradient,
    /// Where it grows to, degrees clockwise from true north, in [0, 360).
    GradientDirection,
    /// −V·∇q with the mean wind, per s.
    Advection,
    /// −∇·(q V), the area mean, per s.
    FluxConvergence,
    /// d|∇q|/dt by the wind, per m and s.
    Frontogenesis,
}

/// Their number.
pub const SCALAR_QUANTITIES: usize = 8;

impl ScalarQuantity {
    /// All of them, in the order of the columns.
    pub const ALL: [Self; SCALAR_QUANTITIES] = [
        Self::Mean,
        Self::GradientX,
        Self::GradientY,
        Self::Gradient,
        Self::GradientDirection,
        Self::Advection,
        Self::FluxConvergence,
        Self::Frontogenesis,
    ];

    /// Name of its column; that of its error has `_se` added.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Mean => "mean",
            Self::GradientX => "gradient_x",
            Self::GradientY => "gradient_y",
            Self::Gradient => "gradient",
            Self::GradientDirection => "gradient_direction",
            Self::Advection => "advection",
            Self::FluxConvergence => "flux_convergence",
            Self::Frontogenesis => "frontogenesis",
        }
    }
}

/// What is said of a scalar over one polygon at one time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ScalarCell {
    /// Values with standard errors, in the order of [`ScalarQuantity::ALL`].
    pub values: [Option<(f64, f64)>; SCALAR_QUANTITIES],
    /// That of the wind's estimate; missing where a station has no value of the scalar.
    pub flag: Flag,
}

impl ScalarCell {
    /// Nothing.
    pub const MISSING: Self = Self {
        values: [None; SCALAR_QUANTITIES],
        flag: Flag::Missing,
    };

    /// Value and standard error of a quantity.
    #[must_use]
    pub fn get(&self, quantity: ScalarQuantity) -> Option<(f64, f64)> {
        self.values[quantity as usize]
    }

    fn set(&mut self, quantity: ScalarQuantity, value: f64, error: f64) {
        self.values[quantity as usize] = Some((value, error));
    }
}

/// Scalars over all polygons at a run of times; polygons × scalars × times.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct ScalarCells {
    /// The analysis times.
    pub times: Vec<Time>,
    /// The cells.
    pub cells: Vec<ScalarCell>,
}

impl Kinematics {
    /// Scalars over the polygons, of which each value has the standard error given for its scalar.
    ///
    /// - **Error**: the values' own errors, taken as independent, and the errors of the wind as in [`Self::of`], to first
    ///   order; in a polygon of more than three stations that of the flux convergence is right to some 3 %. How the scalar varies between the stations is in no error: where it does not vary linearly, gradients mean
    ///   those of the plane through its values. Checked by simulated errors (`tests/scalars.rs`).
    /// - **Left out**: frontogenesis where the gradient is not more than 3 of its errors, as its direction is not known then.
    #[must_use]
    pub fn scalars(
        &self,
        (polygons, edges): (&[StationPolygon], &EdgeSet),
        winds: &WindBlock,
        block: &EstimateBlock,
        model: Option<(&Sampling, &[StructureFunction])>,
        (scalars, errors): (&ScalarBlock, &[f64]),
    ) -> ScalarCells {
        let n = block.times.len();
        let mut cells = Vec::with_capacity(errors.len() * polygons.len() * n);
        let mut values = Vec::new();
        let polygons = polygons.iter().zip(&self.frames).enumerate();
        for ((p, (polygon, frame)), states) in
            polygons.zip(self.states(winds, n, model, Errors::All))
        {
            for (scalar, &sd) in errors.iter().enumerate() {
                for (t, (wind, covariance)) in states.iter().enumerate() {
                    values.clear();
                    values.extend(frame.stations.iter().map_while(|s| {
                        let value = scalars.of_station(scalar, s.station).get(t)?;
                        Some((s.station, (*value)?))
                    }));
                    if values.len() < frame.stations.len() {
                        cells.push(ScalarCell::MISSING);
                        continue;
                    }
                    let of = |station: usize| {
                        let found = values.iter().find(|v| v.0 == station);
                        found.map_or(0.0, |v| v.1) // every station of the polygon is there
                    };
                    let flag = block.flag[p * n + t];
                    let mut cell = without_wind(frame, of, sd, flag);
                    if flag.is_usable() {
                        let wind_of = |station: usize| {
                            let at = winds.of_station(station).start + t;
                            Wind {
                                u: winds.u[at],
                                v: winds.v[at],
                            }
                        };
                        let convergence = flux_convergence(polygon, edges, wind_of, of);
                        let state = State::new(wind, covariance);
                        cell.with_wind(frame, wind, &state, sd, convergence);
                    }
                    cells.push(cell);
                }
            }
        }
        ScalarCells {
            times: block.times.clone(),
            cells,
        }
    }
}

/// Covariance of two forms of the values, of independent errors with this standard deviation.
fn covariance(frame: &PolygonFrame, sd: f64, a: usize, b: usize) -> f64 {
    let products = frame.stations.iter().map(|s| s.weights[a] * s.weights[b]);
    sd * sd * products.sum::<f64>()
}

fn without_wind(
    frame: &PolygonFrame,
    scalar: impl Fn(usize) -> f64,
    sd: f64,
    flag: Flag,
) -> ScalarCell {
    let mut cell = ScalarCell {
        flag,
        ..ScalarCell::MISSING
    };
    let of = |a, b| covariance(frame, sd, a, b);
    let mean = frame
        .stations
        .iter()
        .map(|s| s.weights[0] * scalar(s.station));
    cell.set(ScalarQuantity::Mean, mean.sum(), of(0, 0).sqrt());
    let [x, y] = gradient(frame, scalar);
    let errors = [of(1, 1), of(1, 2), of(2, 2)];
    cell.set(ScalarQuantity::GradientX, x, errors[0].sqrt());
    cell.set(ScalarQuantity::GradientY, y, errors[2].sqrt());
    let arrow = Arrow::of([x, y], errors);
    cell.set(ScalarQuantity::Gradient, arrow.length, arrow.along);
    if let Some(error) = arrow.angle_error() {
        let towards = x.atan2(y).to_degrees().rem_euclid(360.0);
        // A tiny negative angle is a whole turn after rounding.
        let towards = if towards < 360.0 { towards } else { 0.0 };
        cell.set(
            ScalarQuantity::GradientDirection,
            towards,
            error.to_degrees(),
        );
    }
    cell
}

impl ScalarCell {
    fn with_wind(
        &mut self,
        frame: &PolygonFrame,
        wind: &LocalWind,
        state: &State,
        sd: f64,
        convergence: f64,
    ) {
        let value = |quantity| self.get(quantity).map_or(0.0, |v| v.0); // set before
        let (mean, x, y) = (
            value(ScalarQuantity::Mean),
            value(ScalarQuantity::GradientX),
            value(ScalarQuantity::GradientY),
        );
        let Wind { u, v } = wind.mean;
        let divergence = wind.divergence();
        // Error of a form with these factors of the mean and the two derivatives of the scalar.
        let of_scalar = |[m, gx, gy]: [f64; 3]| {
            let squares = frame.stations.iter().map(|s| {
                let [wm, wx, wy] = s.weights;
                (m * wm + gx * wx + gy * wy).powi(2)
            });
            sd * squares.sum::<f64>().sqrt()
        };
        let of_wind = |slopes| state.error_of(slopes);
        let error = of_wind([-x, -y, 0.0, 0.0, 0.0, 0.0]).hypot(of_scalar([0.0, -u, -v]));
        let advection = -(u * x + v * y);
        // In a triangle −∇·(q V) = −q δ − V·∇q with the means of q and V, exactly (`methods.md` 3).
        let both = of_wind([-x, -y, 0.0, -mean, 0.0, 0.0]).hypot(of_scalar([-divergence, -u, -v]));
        self.set(ScalarQuantity::Advection, advection, error);
        self.set(ScalarQuantity::FluxConvergence, convergence, both);

        let of = |a, b| covariance(frame, sd, a, b);
        let arrow = Arrow::of([x, y], [of(1, 1), of(1, 2), of(2, 2)]);
        let size = arrow.length;
        if size > LEAST_RATIO * arrow.across
            && size > LEAST_RATIO * arrow.along
            && let Some(rate) = frontogenesis(wind, [x, y])
        {
            let (st, sh) = (wind.stretching(), wind.shearing());
            let slopes = [
                0.0,
                0.0,
                0.0,
                -0.5 * size,
                0.5 * (y * y - x * x) / size,
                -x * y / size,
            ];
            // F = −Q/|∇q|, Q quadratic in the gradient.
            let of_x = -(x * (divergence + st) + y * sh) / size - rate * x / (size * size);
            let of_y = -(y * (divergence - st) + x * sh) / size - rate * y / (size * size);
            let error = of_wind(slopes).hypot(of_scalar([0.0, of_x, of_y]));
            self.set(ScalarQuantity::Frontogenesis, rate, error);
        }
    }
}
