//! Means of winds. The vector mean and the mean speed are different things and have different names.

use crate::units::Wind;

/// Running vector mean: the mean of u and the mean of v.
///
/// Vorticity and divergence are linear in u and v, so they need this mean, not the mean speed with a mean direction.
#[derive(Debug, Clone, Copy, Default)]
pub struct VectorMean {
    sum: Wind,
    speeds: f64,
    count: u64,
}

impl VectorMean {
    /// Adds one wind and its speed.
    pub fn add(&mut self, wind: Wind, speed: f64) {
        self.sum.u += wind.u;
        self.sum.v += wind.v;
        self.speeds += speed;
        self.count += 1;
    }

    /// The vector mean; `None` of nothing.
    #[must_use]
    pub fn wind(&self) -> Option<Wind> {
        let n = self.count as f64;
        (self.count > 0).then(|| Wind {
            u: self.sum.u / n,
            v: self.sum.v / n,
        })
    }

    /// The mean of the speeds (scalar mean), m/s; at least the speed of the vector mean.
    #[must_use]
    pub fn scalar_mean_speed(&self) -> Option<f64> {
        (self.count > 0).then(|| self.speeds / self.count as f64)
    }

    /// Speed of the vector mean divided by the mean speed, 0 to 1.
    #[must_use]
    pub fn steadiness(&self) -> Option<f64> {
        let mean = self.scalar_mean_speed()?;
        (mean > 0.0).then(|| self.wind().map_or(0.0, Wind::speed) / mean)
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::units::FromDirection;

    // methods.md 5.3: 5 m/s from 350 and from 10 degrees.
    #[test]
    fn vector_mean_is_not_the_mean_speed() {
        let mut mean = VectorMean::default();
        for degrees in [350.0, 10.0] {
            let wind = Wind::blowing_from(5.0, FromDirection::new(degrees).unwrap());
            mean.add(wind, 5.0);
        }
        let wind = mean.wind().unwrap();
        assert!((wind.speed() - 4.92404).abs() < 5e-6, "{wind:?}");
        assert!((wind.from_direction().unwrap().degrees() - 360.0).abs() < 1e-9);
        assert!((mean.scalar_mean_speed().unwrap() - 5.0).abs() < 1e-12);
        assert!((mean.steadiness().unwrap() - 0.984_808).abs() < 1e-6);
    }
}
