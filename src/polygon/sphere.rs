//! Directions from the Earth's centre, and maps of the sphere that keep circles or straight lines.
//!
//! Only the topology (who is joined with whom) comes from these; lengths, azimuths and areas are those of WGS 84.

use nalgebra::Vector3;

use crate::station::Position;

/// Unit vector of a position, its geodetic latitude taken as on a sphere.
#[must_use]
pub fn unit_vector(position: Position) -> Vector3<f64> {
    let (sin_lat, cos_lat) = position.latitude().to_radians().sin_cos();
    let (sin_lon, cos_lon) = position.longitude().to_radians().sin_cos();
    Vector3::new(cos_lat * cos_lon, cos_lat * sin_lon, sin_lat)
}

/// Latitude and longitude of a direction, degrees.
#[must_use]
pub fn latitude_longitude(direction: &Vector3<f64>) -> (f64, f64) {
    let horizontal = direction.x.hypot(direction.y);
    (
        direction.z.atan2(horizontal).to_degrees(),
        direction.y.atan2(direction.x).to_degrees(),
    )
}

/// Centre of the smallest cap that holds all directions, nearly.
///
/// - **Reference**: Badoiu & Clarkson 2003, Smaller core-sets for balls (from memory): step towards the farthest point
///   by 1/(i+1); the centre of the smallest ball around points of a cap lies on the axis of the smallest cap.
#[must_use]
pub fn cap_centre(directions: &[Vector3<f64>]) -> Option<Vector3<f64>> {
    let mut centre = directions.iter().sum::<Vector3<f64>>() / (directions.len().max(1) as f64);
    for i in 1..=100 {
        let far = directions.iter().max_by(|a, b| {
            (*a - centre)
                .norm_squared()
                .total_cmp(&(*b - centre).norm_squared())
        })?;
        centre += (far - centre) / f64::from(i + 1);
    }
    let norm = centre.norm();
    // Directions all round the Earth have no cap.
    (norm > 1e-3).then(|| centre / norm)
}

/// A plane touching the sphere, with right-handed axes seen from above.
pub struct Tangent {
    centre: Vector3<f64>,
    pub(super) x: Vector3<f64>,
    y: Vector3<f64>,
}

impl Tangent {
    /// The plane at `centre`, a unit vector.
    #[must_use]
    pub fn at(centre: Vector3<f64>) -> Self {
        // Any direction that is not nearly along the centre gives a good first axis.
        let helper = if centre.z.abs() < 0.9 {
            Vector3::z()
        } else {
            Vector3::x()
        };
        let x = helper.cross(&centre).normalize();
        let y = centre.cross(&x);
        Self { centre, x, y }
    }

    /// Stereographic map from the antipode of the centre: circles stay circles (Snyder 1987, USGS PP 1395, ch. 21), so
    /// Delaunay in the plane is Delaunay on the sphere.
    #[must_use]
    pub fn stereographic(&self, p: &Vector3<f64>) -> [f64; 2] {
        let scale = 1.0 / (1.0 + p.dot(&self.centre));
        [p.dot(&self.x) * scale, p.dot(&self.y) * scale]
    }

    /// Gnomonic map: great circles become straight lines (Snyder 1987, ch. 22). Only for directions less than 90
    /// degrees from the centre.
    #[must_use]
    pub fn gnomonic(&self, p: &Vector3<f64>) -> [f64; 2] {
        let scale = 1.0 / p.dot(&self.centre);
        [p.dot(&self.x) * scale, p.dot(&self.y) * scale]
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    #[test]
    fn the_cap_of_a_lopsided_network_is_centred() {
        // A cluster and one station 100 degrees away: the mean would stay with the cluster.
        let mut directions = vec![unit_vector(Position::new(0.0, 0.0).unwrap()); 50];
        directions.push(unit_vector(Position::new(0.0, 100.0).unwrap()));
        let (lat, lon) = latitude_longitude(&cap_centre(&directions).unwrap());
        assert!(lat.abs() < 1e-9 && (lon - 50.0).abs() < 2.0, "{lat} {lon}");
    }

    #[test]
    fn axes_are_right_handed() {
        for (lat, lon) in [(47.0, 8.0), (-89.0, 100.0), (0.0, -180.0)] {
            let centre = unit_vector(Position::new(lat, lon).unwrap());
            let t = Tangent::at(centre);
            assert!((t.x.cross(&t.y) - centre).norm() < 1e-12);
        }
    }
}
