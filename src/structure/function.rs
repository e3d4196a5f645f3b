//! The law by which winds differ with distance and with time.

use serde::Serialize;

/// Exponent of a power law, one of a grid from 1/3 to 2 in steps of 1/30, so that what depends on it can be kept.
///
/// The grid holds 2/3 (inertial range, k^(−5/3)), 1 (k^(−2)) and 2 (a wind that varies linearly).
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Exponent(u8);

impl Exponent {
    /// Members of the grid.
    pub const COUNT: usize = 51;
    /// 1/3, the smallest.
    pub const SMALLEST: Self = Self(0);
    /// 2/3, that of the inertial range (Kolmogorov 1941).
    pub const TWO_THIRDS: Self = Self(10);
    /// 1.967, the largest a fit may return: with 2 the wind would be claimed to be linear between the stations, and
    /// nothing to be unknown.
    pub const LARGEST_FITTED: Self = Self(49);

    /// The nearest member of the grid.
    #[must_use]
    pub fn nearest(value: f64) -> Self {
        let k = (30.0 * value - 10.0).round().clamp(0.0, 50.0);
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "0 to 50"
        )]
        Self(if k.is_nan() { 10 } else { k as u8 })
    }

    /// All members, ascending.
    pub fn all() -> impl Iterator<Item = Self> {
        (0..=50).map(Self)
    }

    /// Its place in the grid.
    #[must_use]
    pub fn index(self) -> usize {
        usize::from(self.0)
    }

    /// Its value.
    #[must_use]
    pub fn value(self) -> f64 {
        (10.0 + f64::from(self.0)) / 30.0
    }
}

impl Serialize for Exponent {
    fn serialize<S: serde::Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.serialize_f64(self.value())
    }
}

/// How the winds of a network differ with distance at one time.
///
/// The mean squared difference of the winds of two places r apart is, along and across the line that joins them,
///
/// - `D_L` = 2 n + `c_L` (r/r0)^p,
/// - `D_T` = 2 n + `c_T` (r/r0)^p,
///
/// with n the variance that each station adds to either component by itself (its site: what is not shared with the
/// wind around it at any distance that the network resolves). The tensor of the part that is shared is
/// `D_T` δ + (`D_L` − `D_T`) e eᵀ with e the unit vector from one place to the other.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct StructureFunction {
    /// r0, m: the network's spacing.
    pub reference: f64,
    /// `c_L`, m²/s².
    pub longitudinal: f64,
    /// `c_T`, m²/s². Within what isotropy allows in two dimensions: from `c_L`/(1+p), a wind without vorticity, to
    /// (1+p) `c_L`, a wind without divergence.
    pub transverse: f64,
    /// p.
    pub exponent: Exponent,
    /// n, m²/s².
    pub site_variance: f64,
    /// How the wind of a station differs with time.
    pub temporal: TemporalFunction,
    /// Share of the stated prior in the amplitude, 0 to 1.
    pub prior_share: f64,
    /// Share of the stated prior in the exponent, 0 to 1.
    pub exponent_prior_share: f64,
}

impl StructureFunction {
    /// `D_L` and `D_T` of the shared part at a distance, m²/s².
    #[must_use]
    pub fn at(&self, distance: f64) -> [f64; 2] {
        let growth = (distance / self.reference).powf(self.exponent.value());
        [self.longitudinal * growth, self.transverse * growth]
    }

    /// Time after which the winds of one place differ as much as those of two places `distance` apart at one time, s:
    /// how long an error of sampling at that scale lasts. Between a second and a year.
    #[must_use]
    pub fn decorrelation_time(&self, distance: f64) -> f64 {
        let [along, across] = self.at(distance);
        let ratio = 0.5 * (along + across) / self.temporal.amplitude;
        let time = self.temporal.reference * ratio.powf(1.0 / self.temporal.exponent.value());
        if time.is_nan() {
            return self.temporal.reference;
        }
        time.clamp(1.0, 3.15e7)
    }
}

/// How the wind of one place differs with time: the mean squared difference of either component over τ is
/// c (τ/τ0)^q.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct TemporalFunction {
    /// τ0, s.
    pub reference: f64,
    /// c, m²/s².
    pub amplitude: f64,
    /// q.
    pub exponent: Exponent,
    /// Share of the prior in c, 0 to 1.
    pub prior_share: f64,
}

impl TemporalFunction {
    /// The mean squared difference of either component over `age` s, m²/s².
    #[must_use]
    pub fn at(&self, age: f64) -> f64 {
        if age > 0.0 {
            self.amplitude * (age / self.reference).powf(self.exponent.value())
        } else {
            0.0
        }
    }
}

/// What the structure function is taken to be where the data say little, and over which times it is estimated.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct StructureSettings {
    /// Length of the trailing window, s. 24 h: a day has all its hours in it.
    pub window: f64,
    /// Memory of the amplitude within the window, s: a time ago its weight is 1/e. 1 h, the life of a convective
    /// system.
    pub memory: f64,
    /// Shortest time between the times used, s. 15 min: nearer ones say nearly the same of the wind's structure.
    pub step: f64,
    /// Prior exponent. 2/3, the inertial range.
    pub prior_exponent: f64,
    /// Prior mean of `D_L` and `D_T` at `prior_distance`, m²/s². One mast stands for an area of 10 to 50 km with an
    /// error of 1 to 2 m/s (`methods.md` 8); half the structure function at such a distance is its square:
    /// 2 × 1.5² m²/s².
    pub prior_difference: f64,
    /// The distance of `prior_difference`, m.
    pub prior_distance: f64,
    /// Prior speed with which structures move past a station, m/s. 5 m/s, a light wind near the ground.
    pub prior_speed: f64,
    /// Independent values that the prior amplitude is worth. 10: a variance from 10 values has an error of 45 %, a
    /// mild statement.
    pub prior_values: f64,
    /// Independent values that the prior exponent is worth. The slope from N values at distances within a factor of 3
    /// has an error of about 2/√N; 8 of them are as sure as "anything from 1/3 to 2, most often 2/3 or 1", a standard
    /// deviation of 0.7.
    pub prior_exponent_values: f64,
    /// Independent values at which the last hours and the whole window weigh alike in the amplitude. 10, as for the prior.
    pub window_values: f64,
    /// Time after which another value of a station counts as independent, s. 1 h.
    pub independent_after: f64,
}

impl Default for StructureSettings {
    fn default() -> Self {
        Self {
            window: 86_400.0,
            memory: 3600.0,
            step: 900.0,
            prior_exponent: 2.0 / 3.0,
            prior_difference: 4.5,
            prior_distance: 30e3,
            prior_speed: 5.0,
            prior_values: 10.0,
            prior_exponent_values: 8.0,
            window_values: 10.0,
            independent_after: 3600.0,
        }
    }
}

impl StructureSettings {
    /// The prior: what is used without any data, for a network of this spacing, m.
    #[must_use]
    pub fn prior(&self, spacing: f64) -> StructureFunction {
        let exponent = Exponent::nearest(self.prior_exponent);
        let p = exponent.value();
        let amplitude = self.prior_difference * (spacing / self.prior_distance).powf(p);
        let reference = 600.0;
        StructureFunction {
            reference: spacing,
            longitudinal: amplitude,
            transverse: amplitude,
            exponent,
            site_variance: 0.0,
            temporal: TemporalFunction {
                reference,
                // Taylor 1938, The spectrum of turbulence, Proc. R. Soc. A 164, 476 (from memory): the wind of a place
                // changes as structures move past.
                amplitude: amplitude * (self.prior_speed * reference / spacing).powf(p),
                exponent,
                prior_share: 1.0,
            },
            prior_share: 1.0,
            exponent_prior_share: 1.0,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_grid_holds_the_exponents_of_the_books() {
        for p in [1.0 / 3.0, 2.0 / 3.0, 1.0, 4.0 / 3.0, 2.0] {
            assert!((Exponent::nearest(p).value() - p).abs() < 1e-12);
        }
        assert_eq!(Exponent::all().count(), Exponent::COUNT);
        assert_eq!(Exponent::nearest(f64::NAN), Exponent::TWO_THIRDS);
        assert_eq!(Exponent::nearest(-9.0), Exponent::SMALLEST);
        assert!((Exponent::nearest(9.0).value() - 2.0).abs() < 1e-12);
    }

    #[test]
    fn the_prior_is_what_its_source_says() {
        let prior = StructureSettings::default().prior(60e3);
        let [along, across] = prior.at(30e3);
        assert!((along - 4.5).abs() < 1e-12 && (across - 4.5).abs() < 1e-12);
        // 30 km at 5 m/s: 6000 s.
        assert!((prior.decorrelation_time(30e3) - 6000.0).abs() < 1e-6);
    }
}
