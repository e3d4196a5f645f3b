//! Instrument error of one report.

use crate::settings::SensorErrors;
use crate::units::Wind;

/// Covariance of the two components of one wind, m²/s².
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Covariance {
    /// Variance of u.
    pub uu: f64,
    /// Covariance of u and v.
    pub uv: f64,
    /// Variance of v.
    pub vv: f64,
}

impl Covariance {
    pub(super) fn add(&mut self, other: Self) {
        self.uu += other.uu;
        self.uv += other.uv;
        self.vv += other.vv;
    }

    pub(super) fn scaled(self, factor: f64) -> Self {
        Self {
            uu: self.uu * factor,
            uv: self.uv * factor,
            vv: self.vv * factor,
        }
    }
}

/// Covariance of a report's wind from the errors of speed and direction.
///
/// C = `σ_V²` e eᵀ + (V `σ_θ)²` n nᵀ, with e along and n across the wind, `σ_θ` in radians: the speed error acts along the
/// wind, the direction error across it. Rounding to a step adds step²/12 to either variance. A calm says only that the
/// wind is inside a circle of radius `calm_below`: variance `calm_below`²/4 in each component (uniform on the disc).
///
/// - **Assumes**: a direction error small against 1 rad; above about 20° the formula is too simple.
/// - **Reference**: `methods.md` 1.4 (full form) and 8; rounding: variance of a uniform distribution, common practice.
#[must_use]
pub fn instrument_covariance(wind: Wind, calm: bool, sensor: &SensorErrors) -> Covariance {
    SensorVariances::of(sensor).covariance(wind, calm)
}

/// The errors of a sensor, squared once for all its reports.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct SensorVariances {
    /// Of the components in a calm, m²/s².
    calm: f64,
    /// Of the speed at low speed, m²/s².
    speed: f64,
    /// Of the speed as a share of its square.
    speed_share: f64,
    /// Of the speed by rounding, m²/s².
    speed_step: f64,
    /// Of the direction, rounding included, rad².
    direction: f64,
}

impl SensorVariances {
    pub(super) fn of(sensor: &SensorErrors) -> Self {
        let speed_step = sensor.speed_step.unwrap_or(0.0);
        let direction_step = sensor.direction_step.unwrap_or(0.0).to_radians();
        let direction = sensor.direction_sd.to_radians();
        Self {
            calm: 0.25 * sensor.calm_below * sensor.calm_below,
            speed: sensor.speed_sd * sensor.speed_sd,
            speed_share: sensor.speed_sd_share * sensor.speed_sd_share,
            speed_step: speed_step * speed_step / 12.0,
            direction: direction * direction + direction_step * direction_step / 12.0,
        }
    }

    /// Covariances of a column of winds; calm is a wind of 0.
    pub(super) fn fill(&self, u: &[f64], v: &[f64], out: [&mut [f64]; 3]) {
        // With the widest vectors that the processor has.
        pulp::Arch::new().dispatch(|| self.fill_columns(u, v, out));
    }

    #[expect(
        clippy::inline_always,
        reason = "it must become part of the caller's vector code"
    )]
    #[inline(always)]
    fn fill_columns(&self, u: &[f64], v: &[f64], [uu, uv, vv]: [&mut [f64]; 3]) {
        let out = uu.iter_mut().zip(uv).zip(vv);
        for ((&u, &v), ((uu, uv), vv)) in u.iter().zip(v).zip(out) {
            let covariance = self.covariance(Wind { u, v }, false);
            *uu = covariance.uu;
            *uv = covariance.uv;
            *vv = covariance.vv;
        }
    }

    #[expect(
        clippy::inline_always,
        reason = "it must become part of the caller's vector code"
    )]
    #[inline(always)]
    pub(super) fn covariance(&self, wind: Wind, calm: bool) -> Covariance {
        let squared = wind.u * wind.u + wind.v * wind.v;
        let calm = calm || squared <= 0.0;
        let share = self.speed_share * squared;
        let larger = if share > self.speed {
            share
        } else {
            self.speed
        };
        let along = larger + self.speed_step;
        let across = squared * self.direction;
        // e eᵀ and n nᵀ from the components themselves: no square root, no angle.
        let (ee_uu, ee_uv, ee_vv) = (
            wind.u * wind.u / squared,
            wind.u * wind.v / squared,
            wind.v * wind.v / squared,
        );
        let or_calm = |value: f64, in_calm: f64| if calm { in_calm } else { value };
        Covariance {
            uu: or_calm(along * ee_uu + across * ee_vv, self.calm),
            uv: or_calm((along - across) * ee_uv, 0.0),
            vv: or_calm(along * ee_vv + across * ee_uu, self.calm),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // methods.md 8: at 10 m/s the errors are 0.5 m/s along and 0.44 m/s across; 1.4: rounding to 10 degrees alone is
    // 0.504 m/s across at 10 m/s, rounding to 1 kt is 0.1485 m/s along.
    #[test]
    fn handbook_sizes() {
        let east = Wind { u: 10.0, v: 0.0 };
        let c = instrument_covariance(east, false, &SensorErrors::default());
        assert!((c.uu.sqrt() - 0.5).abs() < 1e-12);
        assert!((c.vv.sqrt() - 0.4363).abs() < 5e-5);
        let coded = SensorErrors {
            speed_sd: 0.0,
            speed_sd_share: 0.0,
            direction_sd: 0.0,
            speed_step: Some(1852.0 / 3600.0),
            direction_step: Some(10.0),
            calm_below: 0.5,
        };
        let c = instrument_covariance(east, false, &coded);
        assert!((c.uu.sqrt() - 0.1485).abs() < 5e-5);
        assert!((c.vv.sqrt() - 0.504).abs() < 5e-4);
        let calm = instrument_covariance(Wind::default(), true, &coded);
        assert!((calm.uu - 0.0625).abs() < 1e-12 && calm.uv.abs() < 1e-15);
    }

    #[test]
    fn turning_the_wind_turns_the_covariance() {
        let sensor = SensorErrors::default();
        let east = instrument_covariance(Wind { u: 8.0, v: 0.0 }, false, &sensor);
        let (sin, cos) = 0.7_f64.sin_cos();
        let turned = instrument_covariance(
            Wind {
                u: 8.0 * cos,
                v: 8.0 * sin,
            },
            false,
            &sensor,
        );
        assert!((turned.uu - (east.uu * cos * cos + east.vv * sin * sin)).abs() < 1e-12);
        assert!((turned.uv - (east.uu - east.vv) * sin * cos).abs() < 1e-12);
        assert!((turned.uu + turned.vv - east.uu - east.vv).abs() < 1e-12);
    }
}
