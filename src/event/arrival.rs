//! When a line reaches a place.

use crate::time::Time;

/// An arrival time as it was forecast.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Forecast {
    /// The last time whose winds it rests on.
    pub made_at: Time,
    /// The arrival.
    pub time: Time,
    /// Its standard error, s.
    pub error: f64,
}

/// When a line reaches one of the places asked for.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PlaceArrival {
    /// The place, by its number in the settings.
    pub place: usize,
    /// The first forecast made before the arrival; `None` if the line had passed when it became known.
    pub first: Option<Forecast>,
    /// Time and standard error (s) with all stations of the line; `None` if these show that it does not come by.
    pub last: Option<(Time, f64)>,
}
