//! The map: Lambert's azimuthal equal-area projection, since what is drawn are means over areas.

use crate::polygon::sphere::{cap_centre, latitude_longitude, unit_vector};
use crate::station::Position;

/// Radius of the sphere, m: mean radius R1 of GRS 80 (Moritz 2000, Geodetic Reference System 1980).
pub(super) const RADIUS: f64 = 6_371_008.8;

/// A centred map: metres to the east and north of the middle.
///
/// - **Reference**: Snyder 1987, USGS PP 1395, eqs. 24-2 to 24-4, on a sphere.
#[derive(Debug, Clone, Copy)]
pub(super) struct Projection {
    centre: (f64, f64),
    sin_cos: (f64, f64),
}

impl Projection {
    /// With the middle at a latitude and longitude, degrees.
    pub(super) fn at(centre: (f64, f64)) -> Self {
        Self {
            centre,
            sin_cos: centre.0.to_radians().sin_cos(),
        }
    }

    /// With the middle of places; 0, 0 if they surround the Earth.
    fn around(places: &[Position]) -> Self {
        let directions: Vec<_> = places.iter().map(|&p| unit_vector(p)).collect();
        let centre = cap_centre(&directions);
        Self::at(centre.map_or((0.0, 0.0), |c| latitude_longitude(&c)))
    }

    /// Metres east and north of the middle, along the map.
    pub(super) fn project(&self, latitude: f64, longitude: f64) -> [f64; 2] {
        let (sin, cos) = latitude.to_radians().sin_cos();
        let (sin_turn, cos_turn) = (longitude - self.centre.1).to_radians().sin_cos();
        let (sin0, cos0) = self.sin_cos;
        let towards = sin0 * sin + cos0 * cos * cos_turn;
        // The antipode is a circle; the point chosen for it does not matter.
        let scale = RADIUS * (2.0 / (1.0 + towards).max(1e-9)).sqrt();
        [
            scale * cos * sin_turn,
            scale * (cos0 * sin - sin0 * cos * cos_turn),
        ]
    }
}

/// A map within a rectangle of a picture.
#[derive(Debug, Clone, Copy)]
pub(super) struct Frame {
    projection: Projection,
    /// Left, top, width, height, pixels.
    pub(super) inside: [f64; 4],
    middle: [f64; 2],
    /// Metres a pixel.
    pub(super) metres: f64,
}

impl Frame {
    /// Shows all places with a margin of pixels around, as large as the rectangle allows. The whole frame has the width
    /// of the rectangle; its height shrinks to `least` where the places lie flat.
    pub(super) fn around(
        places: &[Position],
        [left, top, width, height]: [f64; 4],
        least: f64,
        margin: f64,
    ) -> Self {
        let projection = Projection::around(places);
        let (mut low, mut high) = ([f64::INFINITY; 2], [f64::NEG_INFINITY; 2]);
        for place in places {
            let at = projection.project(place.latitude(), place.longitude());
            for k in 0..2 {
                low[k] = low[k].min(at[k]);
                high[k] = high[k].max(at[k]);
            }
        }
        if places.is_empty() {
            (low, high) = ([-1e3; 2], [1e3; 2]);
        }
        // A single place shows some kilometres around it.
        let size = [0, 1].map(|k| (high[k] - low[k]).max(1.0));
        let across = size[0] / (width - 2.0 * margin).max(1.0);
        let up = size[1] / (height - 2.0 * margin).max(1.0);
        let metres = across.max(up).max(1e-3);
        let wanted = size[1] / metres + 2.0 * margin;
        let height = wanted.clamp(least.min(height), height);
        Self {
            projection,
            inside: [left, top, width, height],
            middle: [0.5 * (low[0] + high[0]), 0.5 * (low[1] + high[1])],
            metres,
        }
    }

    /// Pixels of a latitude and longitude; it may lie outside.
    pub(super) fn pixel(&self, latitude: f64, longitude: f64) -> [f64; 2] {
        let [x, y] = self.projection.project(latitude, longitude);
        let [left, top, width, height] = self.inside;
        [
            left + 0.5 * width + (x - self.middle[0]) / self.metres,
            top + 0.5 * height - (y - self.middle[1]) / self.metres,
        ]
    }

    /// Which way north is at a place: degrees clockwise from the top of the picture.
    pub(super) fn north(&self, latitude: f64, longitude: f64) -> f64 {
        let step = if latitude > 0.0 { -1e-3 } else { 1e-3 };
        let [ax, ay] = self.pixel(latitude, longitude);
        let [bx, by] = self.pixel(latitude + step, longitude);
        let (east, up) = ((bx - ax) * step.signum(), (ay - by) * step.signum());
        east.atan2(up).to_degrees()
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    /// Snyder 1987, p. 332, numerical example of the spherical form, R = 3.
    #[test]
    fn published_example() {
        let [x, y] = Projection::at((40.0, -100.0)).project(-20.0, 100.0);
        let scale = 3.0 / RADIUS;
        assert!((x * scale - -4.233_930_3).abs() < 1e-6, "{}", x * scale);
        assert!((y * scale - 4.025_777_5).abs() < 1e-6, "{}", y * scale);
    }

    #[test]
    fn all_places_lie_inside_their_margin() {
        let place = |latitude, longitude| Position::new(latitude, longitude).unwrap();
        let places = [place(51.0, 179.5), place(52.0, -179.0), place(51.5, 179.9)];
        let frame = Frame::around(&places, [10.0, 20.0, 400.0, 300.0], 100.0, 30.0);
        for p in places {
            let [x, y] = frame.pixel(p.latitude(), p.longitude());
            assert!((39.9..=380.1).contains(&x), "{x}");
            assert!(y >= 49.9 && y <= 20.0 + frame.inside[3] - 29.9, "{y}");
        }
        assert!(frame.north(51.5, 180.0).abs() < 1.0);
    }
}
