//! Stations and the network they make.

mod catalogue;
mod correction;
mod declination;
mod doubts;
mod entry;
mod features;
mod list;
mod table;

use std::collections::HashMap;

use geographiclib_rs::{Geodesic, InverseGeodesic};

use crate::time::Time;
use crate::units::{North, SpeedUnit};
use crate::warning::Warning;

pub(crate) use catalogue::missing_column;
pub use catalogue::{Catalogue, StationColumns, read_catalogue};
pub use correction::Correction;
pub use declination::Declinations;
pub use doubts::{PositionSlip, doubts};
pub use list::{Period, StationList};

/// Geodetic position on WGS 84, degrees: latitude in [-90, 90], longitude in [-180, 180).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Position {
    latitude: f64,
    longitude: f64,
}

impl Position {
    /// Takes a latitude of -90 to 90 and a longitude of -180 to 360 degrees.
    ///
    /// # Errors
    /// Says which of the two is out of range.
    pub fn new(latitude: f64, longitude: f64) -> Result<Self, String> {
        if !(-90.0..=90.0).contains(&latitude) {
            return Err(format!(
                "latitude {latitude} is out of range (-90 to 90 expected)"
            ));
        }
        if !(-180.0..=360.0).contains(&longitude) {
            return Err(format!(
                "longitude {longitude} is out of range (-180 to 360 expected)"
            ));
        }
        let longitude = if longitude >= 180.0 {
            longitude - 360.0
        } else {
            longitude
        };
        Ok(Self {
            latitude,
            longitude,
        })
    }

    /// Degrees north.
    #[must_use]
    pub fn latitude(self) -> f64 {
        self.latitude
    }

    /// Degrees east, in [-180, 180).
    #[must_use]
    pub fn longitude(self) -> f64 {
        self.longitude
    }

    /// Geodesic distance on WGS 84, m.
    #[must_use]
    pub fn distance(self, other: Self, geodesic: &Geodesic) -> f64 {
        geodesic.inverse(
            self.latitude,
            self.longitude,
            other.latitude,
            other.longitude,
        )
    }
}

/// A wind station.
#[derive(Debug, Clone, PartialEq)]
pub struct Station {
    /// Identifier, without white space; unique in the network.
    pub id: String,
    /// Name for people; the identifier where none is given.
    pub name: String,
    /// Other identifiers that reports may use.
    pub aliases: Vec<String>,
    /// Where it stands.
    pub position: Position,
    /// Height of the ground above mean sea level, m.
    pub elevation: Option<f64>,
    /// From when on it stands there, if it moved.
    pub valid_from: Option<Time>,
    /// Until when, exclusive, it stands there, if it moved.
    pub valid_to: Option<Time>,
    /// Sensor and site.
    pub site: Site,
    /// What its reports are corrected by.
    pub correction: Option<Correction>,
}

impl Station {
    /// A station of which only identifier and position are known.
    #[must_use]
    pub fn new(id: impl Into<String>, position: Position) -> Self {
        let id = id.into();
        Self {
            name: id.clone(),
            id,
            aliases: Vec::new(),
            position,
            elevation: None,
            valid_from: None,
            valid_to: None,
            site: Site::default(),
            correction: None,
        }
    }
}

/// What the list says of a station's sensor and site.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Site {
    /// Unit of its speeds, where it differs from that of the files.
    pub speed_unit: Option<SpeedUnit>,
    /// What its directions are counted from, where it differs from that of the files.
    pub north: Option<North>,
    /// Magnetic declination, degrees, east positive: true = magnetic + declination.
    pub declination: Option<f64>,
    /// Height of the sensor above the ground, m.
    pub sensor_height: Option<f64>,
    /// Roughness length of its surroundings, m.
    pub roughness: Option<f64>,
}

/// Stations nearer to each other than this count as one place (m): no polygon can use both. Common practice: the
/// sensors of one mast or one field.
pub const ONE_PLACE: f64 = 10.0;

/// All stations, in the order of their identifiers; every later stage names a station by its place in this order.
#[derive(Debug, Clone, PartialEq)]
pub struct Network {
    stations: Vec<Station>,
    index: HashMap<String, usize>,
    not_asked_for: Vec<String>,
}

impl Network {
    /// Sorts the stations by identifier. The caller has made sure that identifiers are unique
    /// ([`read_catalogue`] reports those that are not).
    #[must_use]
    pub fn new(mut stations: Vec<Station>) -> Self {
        stations.sort_by(|a, b| a.id.cmp(&b.id));
        let index = stations
            .iter()
            .enumerate()
            .map(|(i, station)| (station.id.clone(), i))
            .collect();
        Self {
            stations,
            index,
            not_asked_for: Vec::new(),
        }
    }

    /// Adds identifiers of the station list that the settings do not ask for: their reports are no surprise.
    #[must_use]
    pub fn with_not_asked_for(mut self, ids: Vec<String>) -> Self {
        self.not_asked_for = ids;
        self
    }

    /// Identifiers of the station list that the settings do not ask for.
    pub fn not_asked_for(&self) -> impl Iterator<Item = &str> {
        self.not_asked_for.iter().map(String::as_str)
    }

    /// The stations in order.
    #[must_use]
    pub fn stations(&self) -> &[Station] {
        &self.stations
    }

    /// How many there are.
    #[must_use]
    pub fn len(&self) -> usize {
        self.stations.len()
    }

    /// True if there are none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.stations.is_empty()
    }

    /// The station of this identifier, as settings and reports write it (white space counts as `_`).
    #[must_use]
    pub fn find(&self, id: &str) -> Option<usize> {
        self.index
            .get(id)
            .or_else(|| self.index.get(&tidy_id(id)))
            .copied()
    }

    /// Pairs of stations at one place, the later of each pair is left out of the triangulation.
    #[must_use]
    pub fn coincident(&self) -> Vec<Warning> {
        let geodesic = Geodesic::wgs84();
        // Sorted by latitude, only neighbours within the distance need comparing.
        let mut by_latitude: Vec<usize> = (0..self.len()).collect();
        by_latitude.sort_by(|&a, &b| {
            self.stations[a]
                .position
                .latitude
                .total_cmp(&self.stations[b].position.latitude)
        });
        let window = ONE_PLACE / 110_000.0;
        let mut pairs = Vec::new();
        for (k, &a) in by_latitude.iter().enumerate() {
            for &b in &by_latitude[k + 1..] {
                let (pa, pb) = (self.stations[a].position, self.stations[b].position);
                if pb.latitude - pa.latitude > window {
                    break;
                }
                let metres = pa.distance(pb, &geodesic);
                if metres < ONE_PLACE {
                    pairs.push((a.min(b), a.max(b), metres));
                }
            }
        }
        pairs.sort_by_key(|&(a, b, _)| (a, b));
        pairs
            .into_iter()
            .map(|(a, b, metres)| Warning::OnePlace {
                kept: self.stations[a].id.clone(),
                left_out: self.stations[b].id.clone(),
                metres,
            })
            .collect()
    }
}

/// An identifier as the outputs write it: white space, which separates identifiers there, becomes `_`.
#[must_use]
pub fn tidy_id(text: &str) -> String {
    text.split_whitespace().collect::<Vec<_>>().join("_")
}
