//! `[events]` and `[[places]]`: what counts as an event, and for which places arrival times are wanted.

use super::section::Section;
use crate::station::Position;
use crate::units;

/// What counts as an event.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct EventSettings {
    /// How strong a triangle's mean must be at the onset.
    pub onset: Onset,
    /// An area that lasts less is no event, s.
    pub lasting: f64,
    /// Least change of the wind that counts as a wind shift, m/s.
    pub shift: f64,
    /// The wind before and after a shift is a mean over this time, s.
    pub window: f64,
    /// Fewest stations that a line is made of.
    pub least_stations: usize,
    /// How far beyond the stations that a line has passed arrivals are given, m.
    pub reach: f64,
}

/// How strong a triangle's mean must be at the onset of an event.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Onset {
    /// As a jump of the wind by so much across the triangle would make it: value times the root of the area, m/s
    /// (a line with a jump ΔV that crosses a polygon of area A on a length c adds ΔV c/A; `methods.md` 9).
    Jump(f64),
    /// This value, 1/s.
    Value(f64),
}

impl Default for EventSettings {
    /// Chosen on simulated days of turbulence and of weather (`tests/events.rs` measures what they do on others).
    fn default() -> Self {
        Self {
            onset: Onset::Jump(5.0),
            lasting: 900.0,
            shift: 3.0,
            window: 1800.0,
            least_stations: 6,
            reach: 50e3,
        }
    }
}

/// A place for which arrival times are wanted.
#[derive(Debug, Clone, PartialEq)]
pub struct NamedPlace {
    /// Its name.
    pub name: String,
    /// Where it is.
    pub position: Position,
}

pub(super) fn events(mut section: Section) -> EventSettings {
    let default = EventSettings::default();
    let speed = |section: &mut Section, key| {
        section.parsed(key, |text| {
            let speed = units::parse_speed(text)?;
            if speed > 0.0 {
                Ok(speed)
            } else {
                Err(format!("`{text}` is not above 0"))
            }
        })
    };
    let place = section.place();
    let both = section.has("jump") && section.has("threshold");
    let jump = speed(&mut section, "jump").map(Onset::Jump);
    let value = section.number("threshold", 1e-9..=1.0).map(Onset::Value);
    if both {
        section.problem(place, "either `jump` or `threshold` is expected, not both");
    }
    let duration = |section: &mut Section, key, least: f64| {
        section.parsed(key, move |text| {
            let seconds = units::parse_duration(text)?.as_secs_f64();
            if (least..=86_400.0).contains(&seconds) {
                Ok(seconds)
            } else {
                Err(format!(
                    "`{text}` is out of range ({least} s to 1 d expected)"
                ))
            }
        })
    };
    let lasting = duration(&mut section, "lasting", 0.0);
    let shift = speed(&mut section, "shift");
    let window = duration(&mut section, "window", 60.0);
    let least = section.value::<u32>("least_stations").and_then(|found| {
        // Three times make a plane; below five nothing is left to judge it by.
        if (5..=1000).contains(&found.value) {
            return Some(found.value as usize);
        }
        let message = format!("{} is out of range (5 to 1000 expected)", found.value);
        section.problem(found.place, message);
        None
    });
    let reach = section.parsed("reach", units::parse_length);
    section.finish();
    EventSettings {
        onset: jump.or(value).unwrap_or(default.onset),
        lasting: lasting.unwrap_or(default.lasting),
        shift: shift.unwrap_or(default.shift),
        window: window.unwrap_or(default.window),
        least_stations: least.unwrap_or(default.least_stations),
        reach: reach
            .filter(|&metres| metres >= 0.0)
            .unwrap_or(default.reach),
    }
}

pub(super) fn places(sections: Vec<Section>) -> Vec<NamedPlace> {
    let mut places: Vec<NamedPlace> = Vec::new();
    for mut section in sections {
        let place = section.place();
        let name = section.required::<String>("name");
        let latitude = section.required::<f64>("latitude");
        let longitude = section.required::<f64>("longitude");
        if let (Some(name), Some(latitude), Some(longitude)) = (name, latitude, longitude) {
            match Position::new(latitude.value, longitude.value) {
                Ok(_) if places.iter().any(|p| p.name == name.value) => {
                    let message = format!("there are two places `{}`", name.value);
                    section.problem(name.place, message);
                }
                Ok(position) => places.push(NamedPlace {
                    name: name.value,
                    position,
                }),
                Err(message) => section.problem(place, message),
            }
        }
        section.finish();
    }
    places
}
