//! Magnetic declination of stations.

use std::collections::HashMap;
use std::sync::Mutex;

use chrono::{DateTime, Datelike};
use world_magnetic_model::GeomagneticField;
use world_magnetic_model::time::Date;
use world_magnetic_model::uom::si::angle::degree;
use world_magnetic_model::uom::si::f32::{Angle, Length};
use world_magnetic_model::uom::si::length::meter;

use super::{Network, Position};
use crate::time::Time;

/// Declination of each station: the stated one, else that of the World Magnetic Model in the middle of the year.
///
/// - **Sign**: degrees, east positive; true direction = magnetic direction + declination.
/// - **Accuracy**: the model's own, about 0.3 to 1 degree; the change within a year, about 0.1 degrees, is left out.
/// - **Reference**: NOAA/BGS World Magnetic Model 2020 and 2025, as the crate `world_magnetic_model` computes it; it
///   serves the years 2020 to 2029. Earlier campaigns state the declination in the station list.
#[derive(Debug)]
pub struct Declinations<'a> {
    network: &'a Network,
    modelled: Mutex<HashMap<(usize, i32), Option<f64>>>,
}

impl<'a> Declinations<'a> {
    /// For the stations of a network.
    #[must_use]
    pub fn new(network: &'a Network) -> Self {
        Self {
            network,
            modelled: Mutex::default(),
        }
    }

    /// Declination at a station, degrees; `None` if it is not stated and the model does not serve the year.
    #[must_use]
    pub fn at(&self, station: usize, time: Time) -> Option<f64> {
        let place = self.network.stations().get(station)?;
        if let Some(stated) = place.site.declination {
            return Some(stated);
        }
        let year = DateTime::from_timestamp_micros(time.micros())?.year();
        // A thread that died while it held the lock has left a map that is as good as before.
        let mut modelled = self
            .modelled
            .lock()
            .unwrap_or_else(std::sync::PoisonError::into_inner);
        *modelled
            .entry((station, year))
            .or_insert_with(|| model(place.position, place.elevation.unwrap_or(0.0), year))
    }
}

/// The model in the middle of a year.
fn model(position: Position, elevation: f64, year: i32) -> Option<f64> {
    #[expect(
        clippy::cast_possible_truncation,
        reason = "the model's own precision is that of f32"
    )]
    let single = |x: f64| x as f32;
    let field = GeomagneticField::new(
        Length::new::<meter>(single(elevation)),
        Angle::new::<degree>(single(position.latitude())),
        Angle::new::<degree>(single(position.longitude())),
        Date::from_ordinal_date(year, 183).ok()?,
    );
    Some(f64::from(field.ok()?.declination().get::<degree>()))
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::super::Station;
    use super::*;

    #[test]
    fn stated_before_modelled_and_none_before_2020() {
        let mut stated = Station::new("A", Position::new(46.0, 7.0).unwrap());
        stated.site.declination = Some(2.5);
        // WMM2025 test values (from memory): 80 N 0 E in 2025.0 has 1.28 degrees east; half a year adds about 0.3.
        let north = Station::new("B", Position::new(80.0, 0.0).unwrap());
        let network = Network::new(vec![stated, north]);
        let declinations = Declinations::new(&network);
        let in_2025 = Time::parse_rfc3339("2025-03-01T00:00:00Z").unwrap();
        let in_2013 = Time::parse_rfc3339("2013-03-01T00:00:00Z").unwrap();
        assert_eq!(declinations.at(0, in_2013), Some(2.5));
        let modelled = declinations.at(1, in_2025).unwrap();
        assert!((1.2..2.0).contains(&modelled), "{modelled}");
        assert_eq!(declinations.at(1, in_2013), None);
    }
}
