//! `[calibration]`: what the calibration leaves out.

use std::collections::BTreeMap;

use super::section::Section;
use super::{CalibrationChoice, WAKE_REACH};
use crate::error::Place;
use crate::station::tidy_id;

type Sectors = Vec<[f64; 2]>;

/// Largest rotor, m, and largest reach in diameters.
const LARGEST_ROTOR: f64 = 500.0;
const LARGEST_REACH: f64 = 100.0;

pub(super) fn calibration(mut section: Section) -> CalibrationChoice {
    let all = section.value::<Sectors>("exclude_sectors");
    let stations = section.value::<BTreeMap<String, Sectors>>("exclude_sectors_of");
    let rotors = section.value::<BTreeMap<String, f64>>("rotor_diameter_of");
    let reach = section.number("wake_reach", 1.0..=LARGEST_REACH);
    let mut choice = CalibrationChoice {
        rotor: section.number("rotor_diameter", 0.0..=LARGEST_ROTOR),
        wake_reach: reach.unwrap_or(WAKE_REACH),
        ..CalibrationChoice::default()
    };
    if let Some(all) = all {
        choice.sectors = all.value;
        check(&section, &all.place, &choice.sectors);
    }
    if let Some(stations) = stations {
        for (id, sectors) in stations.value {
            check(&section, &stations.place, &sectors);
            choice.station_sectors.insert(tidy_id(&id), sectors);
        }
    }
    if let Some(rotors) = rotors {
        for (id, diameter) in rotors.value {
            if !(0.0..=LARGEST_ROTOR).contains(&diameter) {
                let message = format!(
                    "{diameter} of `{id}` is no rotor diameter (0 to {LARGEST_ROTOR} m expected)"
                );
                section.problem(rotors.place.clone(), message);
            }
            choice.station_rotors.insert(tidy_id(&id), diameter);
        }
    }
    section.finish();
    choice
}

fn check(section: &Section, place: &Place, sectors: &[[f64; 2]]) {
    for [from, to] in sectors {
        if ![from, to].iter().all(|d| (0.0..=360.0).contains(*d)) {
            let message = format!(
                "[{from}, {to}] is no sector (two directions from 0 to 360 degrees expected)"
            );
            section.problem(place.clone(), message);
        }
    }
}
