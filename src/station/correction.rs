//! What the list says that a station's reports are off by.

use crate::time::Time;
use crate::units::Wind;

/// Correction of a station's reports, from a calibration or a visit.
#[derive(Debug, Clone, PartialEq)]
pub struct Correction {
    /// Added to reported directions, degrees clockwise.
    pub direction: f64,
    /// Reported speeds are multiplied with it.
    pub speed_factor: f64,
    /// It holds from this time on; `None` for all times.
    pub from: Option<Time>,
    /// Where it comes from.
    pub origin: String,
}

impl Correction {
    /// True if it changes anything.
    #[must_use]
    pub fn is_some(&self) -> bool {
        self.direction.abs() > 1e-9 || (self.speed_factor - 1.0).abs() > 1e-9
    }

    /// True if it holds at a time.
    #[must_use]
    pub fn holds_at(&self, time: Time) -> bool {
        self.from.is_none_or(|from| time >= from)
    }

    /// A wind corrected.
    #[must_use]
    pub fn apply(&self, wind: Wind) -> Wind {
        let (sin, cos) = self.direction.to_radians().sin_cos();
        Wind {
            u: self.speed_factor * (wind.u * cos + wind.v * sin),
            v: self.speed_factor * (wind.v * cos - wind.u * sin),
        }
    }

    /// In words: `direction -25.0 degrees, speed x 0.514`.
    #[must_use]
    pub fn words(&self) -> String {
        let mut parts = Vec::new();
        if self.direction.abs() > 1e-9 {
            parts.push(format!("direction {:+.1} degrees", self.direction));
        }
        if (self.speed_factor - 1.0).abs() > 1e-9 {
            parts.push(format!("speed x {:.3}", self.speed_factor));
        }
        if let Some(from) = self.from {
            parts.push(format!("from {from}"));
        }
        parts.join(", ")
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::units::FromDirection;

    #[test]
    fn degrees_are_added_to_the_direction() {
        let correction = Correction {
            direction: -25.0,
            speed_factor: 0.5,
            from: None,
            origin: String::new(),
        };
        let reported = Wind::blowing_from(8.0, FromDirection::new(265.0).unwrap());
        let corrected = correction.apply(reported);
        assert!((corrected.speed() - 4.0).abs() < 1e-12);
        assert!((corrected.from_direction().unwrap().degrees() - 240.0).abs() < 1e-9);
        assert_eq!(correction.words(), "direction -25.0 degrees, speed x 0.500");
    }
}
