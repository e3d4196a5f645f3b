//! `[means]` and `[[periods]]`: over which times values are averaged.

use super::read::Overrides;
use super::section::Section;
use super::{MeansSettings, NamedPeriod};
use crate::input::Zone;
use crate::time::Time;

pub(super) fn means(root: &mut Section, overrides: &Overrides) -> MeansSettings {
    let mut section = root.section("means");
    let by = section.choice("by", &MeansSettings::WORDS);
    let zone = section.parsed("zone", Zone::parse);
    let by = overrides.by.or(by);
    let place = section.place();
    let mut periods: Vec<NamedPeriod> = Vec::new();
    for mut period in root.sections("periods") {
        let name = period.required::<String>("name");
        let from = period.parsed("from", Time::parse_rfc3339);
        let to = period.parsed("to", Time::parse_rfc3339);
        for key in ["from", "to"] {
            if !period.has(key) {
                period.missing(key);
            }
        }
        if let (Some(name), Some(from), Some(to)) = (name, from, to) {
            if from > to {
                let message = format!("the period ends ({to}) before it begins ({from})");
                period.problem(period.place(), message);
            }
            if periods.iter().any(|p| p.name == name.value) {
                let message = format!("there are two periods `{}`", name.value);
                period.problem(name.place, message);
            }
            periods.push(NamedPeriod {
                name: name.value,
                from,
                to,
            });
        }
        period.finish();
    }
    if by == Some(super::MeansBy::Period) && periods.is_empty() {
        section.problem(
            place,
            "means by period need `[[periods]]` with name, from and to",
        );
    }
    section.finish();
    MeansSettings {
        by,
        zone: zone.unwrap_or(Zone::Fixed(0)),
        periods,
    }
}
