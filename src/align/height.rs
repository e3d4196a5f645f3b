//! Reduction of speeds to a common height.

use crate::station::Site;

/// To what height speeds are reduced, and by which law.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct HeightReduction {
    /// The common height above the ground, m.
    pub height: f64,
    /// The law.
    pub profile: Profile,
}

/// Wind profile near the ground.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Profile {
    /// Logarithmic, neutral: U ~ ln(z/z₀).
    Logarithmic,
    /// Power law: U ~ z^p.
    Power {
        /// The exponent p.
        exponent: f64,
    },
}

/// Lowest height in roughness lengths at which the logarithmic law holds: below lies the roughness sublayer (from
/// memory; WMO-No. 8 asks for 10 m over open ground with z₀ = 0.03 m).
const LOWEST: f64 = 10.0;
/// Highest height at which the logarithmic law is used, m: about the top of the surface layer (from memory).
const LOGARITHMIC_TOP: f64 = 100.0;
/// Heights between which the power law is used, m (common practice of wind energy).
const POWER_RANGE: std::ops::RangeInclusive<f64> = 2.0..=200.0;

/// What the speeds of a site are multiplied with.
///
/// Logarithmic: ln(h/z₀)/ln(z/z₀); power: (h/z)^p, with z the height of the sensor, h the common height.
///
/// - **Assumes**: a neutral surface layer over ground of one roughness; the direction does not turn with height.
/// - **Reference**: `methods.md` 5.2: z₀ 0.03 m, 2 to 10 m: 1.38323; power 1/7, 2 to 10 m: 1.25850.
///
/// # Errors
/// Says why the law does not hold at the site, or what is not known of it.
pub fn height_factor(site: &Site, reduction: &HeightReduction) -> Result<f64, String> {
    let z = site
        .sensor_height
        .ok_or("the height of its sensor is not stated (`sensor_height` in the station list)")?;
    let h = reduction.height;
    match reduction.profile {
        Profile::Logarithmic => {
            let z0 = site
                .roughness
                .ok_or("its roughness length is not stated (`roughness` in the station list)")?;
            let lower = z.min(h);
            if lower < LOWEST * z0 {
                return Err(format!(
                    "{lower} m is too close to the roughness elements for the logarithmic law (10 roughness lengths are \
                     {:.1} m)",
                    LOWEST * z0
                ));
            }
            let upper = z.max(h);
            if upper > LOGARITHMIC_TOP {
                return Err(format!(
                    "{upper} m is above the layer of the logarithmic law ({LOGARITHMIC_TOP} m)"
                ));
            }
            Ok((h / z0).ln() / (z / z0).ln())
        }
        Profile::Power { exponent } => {
            if !POWER_RANGE.contains(&z) || !POWER_RANGE.contains(&h) {
                return Err(format!(
                    "the power law is used between {} and {} m (sensor at {z} m, common height {h} m)",
                    POWER_RANGE.start(),
                    POWER_RANGE.end()
                ));
            }
            Ok((h / z).powf(exponent))
        }
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn site(height: f64, roughness: f64) -> Site {
        Site {
            sensor_height: Some(height),
            roughness: Some(roughness),
            ..Site::default()
        }
    }

    // methods.md 5.2 [V].
    #[test]
    fn handbook_factors() {
        let log = HeightReduction {
            height: 10.0,
            profile: Profile::Logarithmic,
        };
        assert!((height_factor(&site(2.0, 0.03), &log).unwrap() - 1.38323).abs() < 5e-6);
        assert!((height_factor(&site(3.0, 0.03), &log).unwrap() - 1.26144).abs() < 5e-6);
        let power = HeightReduction {
            height: 10.0,
            profile: Profile::Power {
                exponent: 1.0 / 7.0,
            },
        };
        assert!((height_factor(&site(2.0, 0.03), &power).unwrap() - 1.25850).abs() < 5e-6);
    }

    #[test]
    fn refused_where_the_law_does_not_hold() {
        let log = HeightReduction {
            height: 10.0,
            profile: Profile::Logarithmic,
        };
        for (site, words) in [
            (site(2.0, 0.5), "too close to the roughness"),
            (site(140.0, 0.03), "above the layer"),
            (Site::default(), "sensor is not stated"),
        ] {
            assert!(height_factor(&site, &log).unwrap_err().contains(words));
        }
        let power = HeightReduction {
            height: 10.0,
            profile: Profile::Power { exponent: 0.14 },
        };
        assert!(height_factor(&site(1.0, 0.03), &power).is_err());
    }
}
