//! `[errors]`: what the errors of the estimates hold.

use super::ErrorSettings;
use super::read::Overrides;
use super::section::Section;
use crate::structure::StructureSettings;
use crate::units;

pub(super) fn errors(mut section: Section, overrides: &Overrides) -> ErrorSettings {
    let default = ErrorSettings::default();
    let parts = [("all", true), ("instrument", false)];
    let complete = section.choice("parts", &parts).unwrap_or(default.complete);
    let rate = section.number("false_discovery_rate", 1e-9..=0.5);
    let structure = default.structure;
    let mut seconds = |key: &'static str, least: f64| {
        section.parsed(key, move |text| {
            let seconds = units::parse_duration(text)?.as_secs_f64();
            if seconds < least {
                return Err(format!(
                    "`{text}` is too short (at least {least} s expected)"
                ));
            }
            Ok(seconds)
        })
    };
    let window = seconds("window", 60.0).unwrap_or(structure.window);
    let memory = seconds("memory", 1.0).unwrap_or(structure.memory);
    let distance = section.parsed("prior_distance", units::parse_length);
    let structure = StructureSettings {
        window,
        memory,
        prior_exponent: section
            .number("prior_exponent", 1.0 / 3.0..=1.9)
            .unwrap_or(structure.prior_exponent),
        prior_difference: section
            .number("prior_difference", 1e-6..=1e4)
            .unwrap_or(structure.prior_difference),
        prior_distance: distance
            .filter(|&metres| metres > 0.0)
            .unwrap_or(structure.prior_distance),
        ..structure
    };
    section.finish();
    ErrorSettings {
        complete: complete && !overrides.instrument_errors,
        false_discovery_rate: rate.unwrap_or(default.false_discovery_rate),
        structure,
    }
}
