//! A plane about a place: distances and directions from its origin are true.

use crate::station::Position;

/// Semi-axis of WGS 84, m, and the square of its eccentricity (NGA.STND.0036, f = 1/298.257223563).
const SEMI_AXIS: f64 = 6_378_137.0;
const ECCENTRICITY_SQUARED: f64 = 6.694_379_990_141_317e-3;

/// A plane touching the Earth at an origin, x towards east and y towards north there.
///
/// - **Accuracy**: azimuthal equidistant on the sphere (Snyder 1987, USGS PP 1395, ch. 25), stretched by the two radii
///   of curvature at the origin. At a distance d from the origin lengths across are too long by d²/(6 R²): 4·10⁻⁵ at
///   100 km.
#[derive(Debug, Clone, Copy)]
pub struct LocalPlane {
    sin_latitude: f64,
    cos_latitude: f64,
    longitude: f64,
    /// Radii of curvature along the parallel and along the meridian, m.
    radii: [f64; 2],
}

/// A station in a plane.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PlanePoint {
    /// x and y, m.
    pub at: [f64; 2],
    /// Sine and cosine of the angle by which true north stands clockwise of the plane's y axis there.
    pub north: [f64; 2],
}

impl PlanePoint {
    /// A vector given by its components towards local east and north, in the axes of the plane.
    #[must_use]
    pub fn to_plane(&self, [east, north]: [f64; 2]) -> [f64; 2] {
        let [sin, cos] = self.north;
        [east * cos + north * sin, north * cos - east * sin]
    }

    /// A vector given in the axes of the plane, by its components towards local east and north.
    #[must_use]
    pub fn to_local(&self, [x, y]: [f64; 2]) -> [f64; 2] {
        let [sin, cos] = self.north;
        [x * cos - y * sin, y * cos + x * sin]
    }
}

impl LocalPlane {
    /// The plane at latitude and longitude, degrees.
    #[must_use]
    pub fn at((latitude, longitude): (f64, f64)) -> Self {
        let (sin_latitude, cos_latitude) = latitude.to_radians().sin_cos();
        let w = 1.0 - ECCENTRICITY_SQUARED * sin_latitude * sin_latitude;
        Self {
            sin_latitude,
            cos_latitude,
            longitude: longitude.to_radians(),
            radii: [
                SEMI_AXIS / w.sqrt(),
                SEMI_AXIS * (1.0 - ECCENTRICITY_SQUARED) / (w * w.sqrt()),
            ],
        }
    }

    /// The position of a point of the plane: what [`Self::place`] came from.
    ///
    /// # Errors
    /// Only for coordinates that are not finite.
    pub fn position(&self, [x, y]: [f64; 2]) -> Result<Position, String> {
        let (east, north) = (x / self.radii[0], y / self.radii[1]);
        let angle = east.hypot(north);
        let scale = if angle < 1e-12 {
            1.0
        } else {
            angle.sin() / angle
        };
        let (east, north, up) = (scale * east, scale * north, angle.cos());
        let (s0, c0) = (self.sin_latitude, self.cos_latitude);
        let latitude = (s0 * up + c0 * north).clamp(-1.0, 1.0).asin();
        let longitude = self.longitude + east.atan2(c0 * up - s0 * north);
        let degrees = (longitude.to_degrees() + 180.0).rem_euclid(360.0) - 180.0;
        Position::new(latitude.to_degrees(), degrees)
    }

    /// Where a position lies, and how its north stands there.
    #[must_use]
    pub fn place(&self, position: Position) -> PlanePoint {
        let (sin, cos) = position.latitude().to_radians().sin_cos();
        let (sin_lon, cos_lon) = (position.longitude().to_radians() - self.longitude).sin_cos();
        let (s0, c0) = (self.sin_latitude, self.cos_latitude);
        // Components of the position towards east, north and up at the origin.
        let (east, north, up) = (
            cos * sin_lon,
            c0 * sin - s0 * cos * cos_lon,
            s0 * sin + c0 * cos * cos_lon,
        );
        let across = east.hypot(north);
        if across < 1e-12 {
            return PlanePoint {
                at: [0.0; 2],
                north: [0.0, 1.0],
            };
        }
        let scale = across.atan2(up) / across;
        // Bearing of the great circle at the origin and, in the direction of travel, at the position.
        let bearing = east.atan2(north);
        let arrival = (c0 * sin_lon).atan2(-(s0 * cos - c0 * sin * cos_lon));
        // The circle leaves at `bearing` from y and arrives at `arrival` from true north.
        let (turn_sin, turn_cos) = (bearing - arrival).sin_cos();
        PlanePoint {
            at: [scale * east * self.radii[0], scale * north * self.radii[1]],
            north: [turn_sin, turn_cos],
        }
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use geographiclib_rs::{Geodesic, InverseGeodesic};

    #[test]
    fn agrees_with_geodesics() {
        let geodesic = Geodesic::wgs84();
        for (lat, lon, lat2, lon2) in [
            (47.0, 8.0, 47.5, 9.1),
            (-60.0, 179.5, -60.4, -179.8),
            (10.0, 0.0, 9.0, -0.5),
        ] {
            let (s, start, end, _): (f64, f64, f64, f64) = geodesic.inverse(lat, lon, lat2, lon2);
            let p = LocalPlane::at((lat, lon)).place(Position::new(lat2, lon2).unwrap());
            let back = LocalPlane::at((lat, lon)).position(p.at).unwrap();
            assert!((back.latitude() - lat2).abs() < 1e-9, "{back:?}");
            assert!((back.longitude() - lon2).abs() < 1e-9, "{back:?}");
            let found = p.at[0].hypot(p.at[1]);
            assert!((found / s - 1.0).abs() < 1e-4, "{found} {s}");
            let bearing = p.at[0].atan2(p.at[1]).to_degrees();
            assert!((bearing - start).abs() < 0.02, "{bearing} {start}");
            // A vector along the geodesic at its end points along the same bearing in the plane.
            let (sin, cos) = end.to_radians().sin_cos();
            let [x, y] = p.to_plane([sin, cos]);
            let along = x.atan2(y).to_degrees();
            assert!((along - start).abs() < 0.03, "{along} {start}");
            let [e, n] = p.to_local([x, y]);
            assert!((e - sin).abs() + (n - cos).abs() < 1e-12);
        }
    }
}
