//! The frame of a polygon: winds of its stations carried to its middle.

use geographiclib_rs::{Geodesic, InverseGeodesic};

use crate::integral::{Segment, mean_weights};
use crate::polygon::{EdgeSet, StationPolygon};
use crate::station::Position;
use crate::units::{Wind, sin_cos_degrees};

/// A station as a polygon sees it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CarriedStation {
    /// Its number.
    pub station: usize,
    /// Sine and cosine of the angle by which its winds turn counter-clockwise when they are carried to the middle along
    /// the geodesic, keeping their angle to it.
    pub turn: [f64; 2],
    /// Weights of the carried wind in the mean over the area, and in the derivatives along x and y, 1/m.
    pub weights: [f64; 3],
}

impl CarriedStation {
    /// A wind of the station in the polygon's frame.
    #[must_use]
    pub fn carry(&self, wind: Wind) -> Wind {
        let [sin, cos] = self.turn;
        Wind {
            u: wind.u * cos - wind.v * sin,
            v: wind.v * cos + wind.u * sin,
        }
    }
}

/// A polygon's own axes, x towards east and y towards north at its middle, and its stations in it.
#[derive(Debug, Clone, PartialEq)]
pub struct PolygonFrame {
    /// The stations.
    pub stations: Vec<CarriedStation>,
    /// Latitude of the middle, degrees.
    pub latitude: f64,
}

/// Mean wind and velocity gradient over an area, in the polygon's frame.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct LocalWind {
    /// Mean wind, m/s.
    pub mean: Wind,
    /// ∂u/∂x, ∂u/∂y, ∂v/∂x, ∂v/∂y, 1/s.
    pub gradient: [f64; 4],
}

/// A position as seen from a middle (latitude, longitude): its place by distance and azimuth, x towards east and y towards
/// north, and sine and cosine of the angle by which its winds turn counter-clockwise when they are carried to the middle.
pub(crate) fn seen_from(
    geodesic: &Geodesic,
    (latitude, longitude): (f64, f64),
    position: Position,
) -> ([f64; 2], [f64; 2]) {
    let (distance, start, end, _arc): (f64, f64, f64, f64) = geodesic.inverse(
        latitude,
        longitude,
        position.latitude(),
        position.longitude(),
    );
    let (x, y) = sin_cos_degrees(start);
    let turn = if distance > 0.0 { end - start } else { 0.0 };
    let (sin, cos) = sin_cos_degrees(turn);
    ([distance * x, distance * y], [sin, cos])
}

impl PolygonFrame {
    /// The frame of a polygon.
    ///
    /// - **Gradient**: the line integrals ∮ u dy, −∮ u dx, ∮ v dy, −∮ v dx over the area with the edges and winds of
    ///   [`crate::polygon::CoefficientRow`], both turned into the polygon's frame. Turning an edge and its wind alike
    ///   changes neither the circulation nor the flux, so ∂v/∂x − ∂u/∂y and ∂u/∂x + ∂v/∂y are the estimate's vorticity
    ///   and divergence but for rounding.
    /// - **Accuracy**: exact for a linear wind in a plane. On the Earth one that is linear in the plane about the middle
    ///   comes back to 3·10⁻⁶ of its gradient for polygons of 50 km in radius, 5·10⁻⁵ for 200 km; a uniform wind adds
    ///   10⁻⁹ and 5·10⁻⁸ of its speed over the radius (`tests/kinematics.rs`).
    /// - **Reference**: `methods.md` 1.1 (collected by station), 2 (metric terms).
    #[must_use]
    pub fn new(polygon: &StationPolygon, edges: &EdgeSet, positions: &[Position]) -> Self {
        let geodesic = Geodesic::wgs84();
        // Place, and turn to the middle, of every station.
        let seen: Vec<([f64; 2], [f64; 2])> = polygon
            .row
            .stations
            .iter()
            .map(|&station| seen_from(&geodesic, polygon.middle, positions[station]))
            .collect();
        let number = |station: usize| polygon.row.stations.iter().position(|&s| s == station);
        let place = |station: usize| number(station).map_or([0.0; 2], |k| seen[k].0);
        let outline: Vec<Segment> = polygon
            .path
            .iter()
            .map(|&edge| {
                let (from, to, _) = edges.ends(edge);
                Segment::new([from, to], [place(from), place(to)])
            })
            .collect();
        let means = mean_weights(&outline);
        let rows = polygon.row.stations.iter().zip(&polygon.row.weights);
        let stations = rows.zip(&seen).map(|((&station, &[x, y]), &(_, turn))| {
            let mean = means.iter().find(|m| m.0 == station).map_or(0.0, |m| m.1);
            let [sin, cos] = turn;
            // The edges' part at this station, turned like its wind.
            let (x, y) = (x * cos - y * sin, y * cos + x * sin);
            CarriedStation {
                station,
                turn,
                weights: [mean, y, -x],
            }
        });
        Self {
            stations: stations.collect(),
            latitude: polygon.middle.0,
        }
    }

    /// Mean wind and gradient of winds given by station.
    pub fn apply(&self, wind: impl Fn(usize) -> Wind) -> LocalWind {
        let mut sum = LocalWind::default();
        for s in &self.stations {
            let w = s.carry(wind(s.station));
            let [mean, x, y] = s.weights;
            sum.mean.u += mean * w.u;
            sum.mean.v += mean * w.v;
            for (part, term) in sum
                .gradient
                .iter_mut()
                .zip([x * w.u, y * w.u, x * w.v, y * w.v])
            {
                *part += term;
            }
        }
        sum
    }
}

impl LocalWind {
    /// Relative vorticity ∂v/∂x − ∂u/∂y, 1/s, positive counter-clockwise.
    #[must_use]
    pub fn vorticity(&self) -> f64 {
        self.gradient[2] - self.gradient[1]
    }

    /// Divergence ∂u/∂x + ∂v/∂y, 1/s.
    #[must_use]
    pub fn divergence(&self) -> f64 {
        self.gradient[0] + self.gradient[3]
    }

    /// Stretching deformation ∂u/∂x − ∂v/∂y, 1/s.
    #[must_use]
    pub fn stretching(&self) -> f64 {
        self.gradient[0] - self.gradient[3]
    }

    /// Shearing deformation ∂v/∂x + ∂u/∂y, 1/s.
    #[must_use]
    pub fn shearing(&self) -> f64 {
        self.gradient[2] + self.gradient[1]
    }
}
