//! `[calibration]`: what the calibration leaves out.

use std::collections::BTreeMap;

use super::CalibrationChoice;
use super::section::Section;
use crate::error::Place;
use crate::station::tidy_id;

type Sectors = Vec<[f64; 2]>;

pub(super) fn calibration(mut section: Section) -> CalibrationChoice {
    let all = section.value::<Sectors>("exclude_sectors");
    let stations = section.value::<BTreeMap<String, Sectors>>("exclude_sectors_of");
    let mut choice = CalibrationChoice::default();
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
