//! `[kinematics]`: deformation, curvature and the like of each polygon; `[decompose]`: the parts of the wind.

use super::KinematicsSettings;
use super::read::Overrides;
use super::section::Section;
use crate::units;

pub(super) fn kinematics(mut section: Section, overrides: &Overrides) -> KinematicsSettings {
    let default = KinematicsSettings::default();
    let write = section.value::<bool>("write").is_some_and(|f| f.value);
    let least_speed = section.parsed("least_speed", units::parse_speed);
    section.finish();
    KinematicsSettings {
        write: write || overrides.kinematics,
        least_speed: least_speed.unwrap_or(default.least_speed),
    }
}

/// True if the rotational, divergent and harmonic part of the wind are to be written.
pub(super) fn decompose(mut section: Section, overrides: &Overrides) -> bool {
    let write = section.value::<bool>("write").is_some_and(|f| f.value);
    section.finish();
    write || overrides.decompose
}
