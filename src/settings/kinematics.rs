//! `[kinematics]`: deformation, curvature and the like of each polygon; `[decompose]`: the parts of the wind.

use super::KinematicsSettings;
use super::read::Overrides;
use super::section::Section;
use crate::units;

/// Also the height for the vertical wind.
pub(super) fn kinematics(
    mut section: Section,
    overrides: &Overrides,
) -> (KinematicsSettings, Option<f64>) {
    let default = KinematicsSettings::default();
    let write = section.value::<bool>("write").is_some_and(|f| f.value);
    let least_speed = section.parsed("least_speed", units::parse_speed);
    let w_at = section.parsed("w_at", height_above_ground);
    section.finish();
    let settings = KinematicsSettings {
        write: write || overrides.kinematics,
        least_speed: least_speed.unwrap_or(default.least_speed),
    };
    (settings, overrides.w_at.or(w_at))
}

/// True if the rotational, divergent and harmonic part of the wind are to be written.
pub(super) fn decompose(mut section: Section, overrides: &Overrides) -> bool {
    let write = section.value::<bool>("write").is_some_and(|f| f.value);
    section.finish();
    write || overrides.decompose
}

/// A height above the ground, m.
///
/// # Errors
/// It is none, or not above 0.
pub fn height_above_ground(text: &str) -> Result<f64, String> {
    match units::parse_length(text)? {
        height if height > 0.0 => Ok(height),
        _ => Err(format!(
            "`{text}` is no height above the ground (more than 0 expected)"
        )),
    }
}
