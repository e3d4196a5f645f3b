//! What the rounding of a station's reports does to the tests.

use crate::report::{Rounding, SpeedStep};

/// Steps of direction, degrees, and of speed, m/s, from which on a value repeats by itself in sound stations.
const COARSE: (f64, f64) = (5.0, 0.4);
/// The steps for which the times of coarse stations are stated, degrees: EPA's 10 degrees in 18 h.
const USUAL: f64 = 10.0;
/// Before anything is known: points of the compass and knots, the coarsest there is.
const UNKNOWN: (f64, f64) = (45.0, 0.514_444);

/// The steps to which a station rounds.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Steps {
    /// The turn that rounding alone can make, radians.
    pub turn: f64,
    /// By what the times of the coarse tests are multiplied, 1 or more; 0 where the station is fine.
    pub direction: f64,
    /// The same for the speed.
    pub speed: f64,
    /// The same for both together: a pair repeats by itself only where the two are coarse taken together.
    pub both: f64,
}

impl Default for Steps {
    fn default() -> Self {
        Self::new(UNKNOWN.0, UNKNOWN.1)
    }
}

impl From<Rounding> for Steps {
    fn from(found: Rounding) -> Self {
        Self::new(
            found.direction.unwrap_or(0.0),
            found.speed.map_or(0.0, SpeedStep::metres_per_second),
        )
    }
}

impl Steps {
    /// From steps of direction, degrees, and speed, m/s; 0 where there is none.
    pub fn new(direction: f64, speed: f64) -> Self {
        let times = (direction / USUAL).max(1.0);
        let if_coarse = |is: bool, times: f64| if is { times } else { 0.0 };
        Self {
            turn: direction.to_radians(),
            direction: if_coarse(direction >= COARSE.0, times),
            speed: if_coarse(speed >= COARSE.1, 1.0),
            both: if_coarse(direction * speed >= COARSE.0 * COARSE.1, times),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn coarse_and_fine_codes() {
        let is_coarse = |direction, speed| Steps::new(direction, speed).both > 0.0;
        assert!(is_coarse(10.0, 0.514)); // METAR
        assert!(is_coarse(45.0, 1.0 / 3.6)); // points of the compass, km/h
        assert!(!is_coarse(1.0, 0.0514) && !is_coarse(10.0, 0.1) && !is_coarse(0.0, 0.0));
        assert!((Steps::new(45.0, 0.1).direction - 4.5).abs() < 1e-12);
        assert!(Steps::default().both >= 1.0);
    }
}
