//! From the values of a row to a report: missing marks, units, signs, ranges, north and validity, whatever kind of table
//! the values come from.

use super::direction::{DirectionText, direction_word};
use super::format::{Columns, ReportFormat, WindColumns};
use super::names::Names;
use super::rows::{Moving, Part, Report};
use crate::error::{Place, Problem};
use crate::input::{MISSING_MARKS, MissingMarks, parse_number, parse_number_with_comma, shown};
use crate::station::Position;
use crate::tally::Reason;
use crate::time::Time;
use crate::units::{FromDirection, North, Wind};

/// A value of a report.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Value {
    Time,
    /// Direction, or eastward component, or whatever single value the table has.
    First,
    /// Speed, or northward component.
    Second,
    Gust,
    Latitude,
    Longitude,
    Level,
    /// Number of the column among the table's scalars.
    Scalar(usize),
}

/// A row that cannot be used.
#[derive(Debug)]
pub(super) struct Unusable {
    pub(super) reason: Reason,
    pub(super) value: Option<Value>,
    pub(super) message: String,
}

impl Unusable {
    pub(super) fn new(reason: Reason, value: Value, message: String) -> Self {
        Self {
            reason,
            value: Some(value),
            message,
        }
    }

    /// A whole line that is no row.
    pub(super) fn line(reason: Reason, message: String) -> Self {
        Self {
            reason,
            value: None,
            message,
        }
    }
}

/// The wind as the row gives it: speeds and components in its own unit, directions from its own north.
#[derive(Debug, Clone, Copy)]
pub(super) enum GivenWind {
    DirectionSpeed(Option<DirectionText>, Option<f64>),
    Speed(Option<f64>),
    Direction(Option<DirectionText>),
    Components(Option<f64>, Option<f64>),
}

/// Speed and gust, m/s, and true direction.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct WindValue {
    pub(super) speed: Option<f64>,
    pub(super) direction: Option<FromDirection>,
    pub(super) gust: Option<f64>,
    pub(super) correction: u8,
}

/// Turns the values of one table's rows into reports.
pub(super) struct ValueReader<'a> {
    pub(super) file: &'a str,
    pub(super) number: u32,
    pub(super) format: &'a ReportFormat,
    pub(super) columns: &'a Columns,
    pub(super) names: &'a Names<'a>,
    missing: MissingMarks<'a>,
    /// The missing marks that are numbers.
    #[cfg_attr(
        not(feature = "parquet"),
        allow(dead_code, reason = "for columnar tables")
    )]
    number_marks: Vec<f64>,
    /// True if a number of 0 or more can be a missing mark.
    pub(super) positive_marks: bool,
    /// One of each station's unit of speed in m/s.
    factors: Vec<f64>,
}

impl<'a> ValueReader<'a> {
    pub(super) fn new(
        file: &'a str,
        number: u32,
        format: &'a ReportFormat,
        columns: &'a Columns,
        names: &'a Names<'a>,
    ) -> Self {
        let stated = format.text.missing.iter().map(String::as_str);
        let marks: Vec<&str> = if format.text.missing.is_empty() {
            MISSING_MARKS.to_vec()
        } else {
            stated.collect()
        };
        let number_marks: Vec<f64> = marks
            .iter()
            .filter_map(|mark| parse_number(mark.as_bytes()))
            .collect();
        Self {
            file,
            number,
            format,
            columns,
            names,
            missing: MissingMarks::new(&format.text),
            positive_marks: number_marks.iter().any(|&mark| mark >= 0.0),
            number_marks,
            factors: names
                .network
                .stations()
                .iter()
                .map(|s| {
                    s.site
                        .speed_unit
                        .unwrap_or(format.speed_unit)
                        .in_metres_per_second()
                })
                .collect(),
        }
    }

    /// What is wrong with a row, with its place.
    pub(super) fn problem(&self, unusable: Unusable, line: u64) -> Problem {
        let place = Place {
            file: self.file.into(),
            line: Some(line),
            column: unusable
                .value
                .map(|value| self.column_name(value).to_string()),
        };
        Problem::new(place, unusable.message)
    }

    /// Name of the column of a value.
    fn column_name(&self, value: Value) -> &str {
        let (first, second) = self.columns.wind.names();
        let optional = |name: &'a Option<String>| name.as_deref().unwrap_or("");
        match value {
            Value::Time => self.columns.time.first().map_or("", String::as_str),
            Value::First => first,
            Value::Second => second.unwrap_or(first),
            Value::Gust => optional(&self.columns.gust),
            Value::Latitude => optional(&self.columns.latitude),
            Value::Longitude => optional(&self.columns.longitude),
            Value::Level => optional(&self.columns.level),
            Value::Scalar(k) => self.columns.scalars.get(k).map_or("", |s| &s.column),
        }
    }

    /// A number from its text, or `None` for a missing mark; a mark may itself look like a number.
    pub(super) fn number_in(&self, text: &[u8], value: Value) -> Result<Option<f64>, Unusable> {
        let comma = self.format.text.decimal_comma;
        let number = if comma {
            parse_number_with_comma(text)
        } else {
            parse_number(text)
        };
        match number {
            Some(number) if number >= 0.0 && !self.positive_marks => Ok(Some(number)),
            _ if self.missing.contains(text) => Ok(None),
            Some(number) => Ok(Some(number)),
            None => {
                let kind = if comma { "comma" } else { "point" };
                let message = format!(
                    "`{}` is not a number (decimal {kind} expected)",
                    shown(text)
                );
                Err(Unusable::new(Reason::UnreadableWind, value, message))
            }
        }
    }

    /// A number of a table that holds numbers, not texts; `None` for one that is not a number or a missing mark.
    #[cfg_attr(
        not(feature = "parquet"),
        allow(dead_code, reason = "for columnar tables")
    )]
    pub(super) fn number(&self, number: f64, value: Value) -> Result<Option<f64>, Unusable> {
        if number.is_nan() || self.is_mark(number) {
            Ok(None)
        } else if number.is_finite() {
            Ok(Some(number))
        } else {
            let message = format!("`{number}` is not a finite number");
            Err(Unusable::new(Reason::UnreadableWind, value, message))
        }
    }

    #[cfg_attr(
        not(feature = "parquet"),
        allow(dead_code, reason = "for columnar tables")
    )]
    #[expect(clippy::float_cmp, reason = "a mark is written exactly or not meant")]
    #[expect(
        clippy::cast_possible_truncation,
        reason = "a column of single precision holds the mark rounded to it"
    )]
    fn is_mark(&self, number: f64) -> bool {
        self.number_marks
            .iter()
            .any(|&mark| number == mark || number == f64::from(mark as f32))
    }

    /// A direction from its text: degrees, or a word.
    pub(super) fn direction_in(&self, text: &[u8]) -> Result<Option<DirectionText>, Unusable> {
        if text.first().is_some_and(u8::is_ascii_alphabetic)
            && let Some(word) = direction_word(text)
        {
            return Ok(Some(word));
        }
        let degrees = self.number_in(text, Value::First).map_err(|_| {
            let message = format!(
                "`{}` is no direction (degrees or a point of the compass expected)",
                shown(text)
            );
            Unusable::new(Reason::UnreadableWind, Value::First, message)
        })?;
        Self::direction(degrees)
    }

    /// A direction from its degrees.
    pub(super) fn direction(degrees: Option<f64>) -> Result<Option<DirectionText>, Unusable> {
        let Some(degrees) = degrees else {
            return Ok(None);
        };
        match FromDirection::new(degrees) {
            Some(direction) => Ok(Some(DirectionText::From(direction))),
            None => Err(Unusable::new(
                Reason::DirectionOutOfRange,
                Value::First,
                format!("`{degrees}` is no direction (0 to 360 degrees expected)"),
            )),
        }
    }

    /// Speed and true direction of a station's wind, without the gust.
    pub(super) fn wind(
        &self,
        station: u32,
        time: Time,
        given: GivenWind,
    ) -> Result<WindValue, Unusable> {
        let mut value = WindValue::default();
        match given {
            GivenWind::DirectionSpeed(direction, speed) => {
                value.speed = self.speed(station, speed, Value::Second)?;
                value.direction = self.true_direction(direction, station, time)?;
                // The word alone says that there is no wind.
                if direction == Some(DirectionText::Calm) && value.speed.is_none() {
                    value.speed = Some(0.0);
                }
            }
            GivenWind::Speed(speed) => value.speed = self.speed(station, speed, Value::First)?,
            GivenWind::Direction(direction) => {
                value.direction = self.true_direction(direction, station, time)?;
            }
            GivenWind::Components(Some(u), Some(v)) => {
                let factor = self.factor(station);
                let wind = Wind {
                    u: u * factor,
                    v: v * factor,
                };
                value.speed = Some(wind.speed());
                let direction = wind.from_direction().map(DirectionText::From);
                value.direction = self.true_direction(direction, station, time)?;
            }
            GivenWind::Components(..) => {}
        }
        Ok(value)
    }

    /// A speed in m/s.
    pub(super) fn speed(
        &self,
        station: u32,
        speed: Option<f64>,
        value: Value,
    ) -> Result<Option<f64>, Unusable> {
        match speed {
            Some(speed) if speed < 0.0 => {
                let message = format!("`{speed}` is below 0 (a speed of 0 or more expected)");
                Err(Unusable::new(Reason::NegativeSpeed, value, message))
            }
            speed => Ok(speed.map(|s| s * self.factor(station))),
        }
    }

    /// One of the station's unit of speed in m/s.
    pub(super) fn factor(&self, station: u32) -> f64 {
        let factor = self.factors.get(station as usize);
        factor.copied().unwrap_or(1.0)
    }

    fn true_direction(
        &self,
        direction: Option<DirectionText>,
        station: u32,
        time: Time,
    ) -> Result<Option<FromDirection>, Unusable> {
        let Some(DirectionText::From(direction)) = direction else {
            return Ok(None);
        };
        let own = self.names.network.stations().get(station as usize);
        let north = own.and_then(|s| s.site.north).unwrap_or(self.format.north);
        if north == North::True {
            return Ok(Some(direction));
        }
        match self.names.declinations.at(station as usize, time) {
            Some(declination) => {
                let degrees = direction.degrees() + declination;
                Ok(FromDirection::new(degrees.rem_euclid(360.0)))
            }
            None => Err(Unusable {
                reason: Reason::NoDeclination,
                value: None,
                message: "the direction is magnetic, and the declination is neither stated (`declination` in the \
                          station list) nor modelled (years 2020 to 2029)"
                    .into(),
            }),
        }
    }

    /// Position and level of a row of a table that has such columns; the level in the table's unit.
    pub(super) fn moving(
        &self,
        latitude: Option<f64>,
        longitude: Option<f64>,
        level: Option<f64>,
    ) -> Result<Moving, Unusable> {
        let position = match (latitude, longitude) {
            (Some(latitude), Some(longitude)) => {
                Some(Position::new(latitude, longitude).map_err(|message| {
                    Unusable::new(Reason::UnreadablePosition, Value::Latitude, message)
                })?)
            }
            _ => None,
        };
        Ok(Moving {
            position,
            level: level.map(|l| l * self.format.level_factor),
        })
    }

    /// The report, or `None` at a time at which the station does not stand where the list says.
    pub(super) fn report(
        &self,
        station: u32,
        time: Time,
        wind: &WindValue,
        moving: Option<Moving>,
        line: u64,
    ) -> Option<Report> {
        if !self.names.is_valid(station, time) {
            return None;
        }
        let part = match self.columns.wind {
            WindColumns::Speed { .. } => Part::Speed,
            WindColumns::Direction { .. } => Part::Direction,
            _ => Part::Whole,
        };
        Some(Report {
            station,
            time,
            speed: wind.speed,
            direction: wind.direction,
            part,
            gust: wind.gust,
            moving,
            correction: wind.correction,
            place: (self.number, line),
        })
    }
}
