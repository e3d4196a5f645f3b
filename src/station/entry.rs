//! One entry of a station list, whatever its form: texts by column, checked and made a station.

use std::borrow::Cow;
use std::fmt;

use chrono::{NaiveDate, NaiveTime};

use super::{Catalogue, Correction, Position, Site, Station, StationColumns};
use crate::error::{Place, Problem};
use crate::input::{MissingMarks, parse_number, parse_number_with_comma, shown};
use crate::time::Time;
use crate::units::{North, SpeedUnit};

/// What an entry may say of a station.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Field {
    Id,
    Name,
    Latitude,
    Longitude,
    Elevation,
    ValidFrom,
    ValidTo,
    SpeedUnit,
    North,
    Declination,
    SensorHeight,
    Roughness,
    DirectionCorrection,
    SpeedFactor,
    CorrectionFrom,
    CorrectionOrigin,
    /// One of the columns of aliases.
    Alias(usize),
}

impl StationColumns {
    /// The column of a field; `None` if the settings name none.
    pub(super) fn column(&self, field: Field) -> Option<&str> {
        match field {
            Field::Id => Some(self.id.as_str()),
            Field::Latitude => Some(self.latitude.as_str()),
            Field::Longitude => Some(self.longitude.as_str()),
            Field::Name => self.name.as_deref(),
            Field::Elevation => self.elevation.as_deref(),
            Field::ValidFrom => self.valid_from.as_deref(),
            Field::ValidTo => self.valid_to.as_deref(),
            Field::SpeedUnit => self.speed_unit.as_deref(),
            Field::North => self.north.as_deref(),
            Field::Declination => self.declination.as_deref(),
            Field::SensorHeight => self.sensor_height.as_deref(),
            Field::Roughness => self.roughness.as_deref(),
            Field::DirectionCorrection => self.direction_correction.as_deref(),
            Field::SpeedFactor => self.speed_factor.as_deref(),
            Field::CorrectionFrom => self.correction_from.as_deref(),
            Field::CorrectionOrigin => self.correction_origin.as_deref(),
            Field::Alias(k) => self.aliases.get(k).map(String::as_str),
        }
    }

    /// The fields that have a column, with its name.
    pub(super) fn named(&self) -> impl Iterator<Item = (Field, &str)> {
        let single = [
            Field::Id,
            Field::Latitude,
            Field::Longitude,
            Field::Name,
            Field::Elevation,
            Field::ValidFrom,
            Field::ValidTo,
            Field::SpeedUnit,
            Field::North,
            Field::Declination,
            Field::SensorHeight,
            Field::Roughness,
            Field::DirectionCorrection,
            Field::SpeedFactor,
            Field::CorrectionFrom,
            Field::CorrectionOrigin,
        ];
        let fields = single
            .into_iter()
            .chain((0..self.aliases.len()).map(Field::Alias));
        fields.filter_map(|field| Some((field, self.column(field)?)))
    }
}

/// Where an entry stands in its list.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub(super) enum Whence {
    /// A line of a table, from 1.
    Line(u64),
    /// A feature of a GeoJSON collection, from 1.
    Feature(usize),
}

impl Whence {
    /// The place in the file; the column only where there are columns.
    pub(super) fn place(self, file: &str, column: &str) -> Place {
        let (line, column) = match self {
            Self::Line(line) => (Some(line), column.to_string()),
            Self::Feature(_) => (None, self.to_string()),
        };
        Place {
            file: file.into(),
            line,
            column: Some(column),
        }
    }

    /// `on line 2`, `in feature 2`.
    pub(super) fn preposition(self) -> &'static str {
        match self {
            Self::Line(_) => "on",
            Self::Feature(_) => "in",
        }
    }
}

impl fmt::Display for Whence {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Line(line) => write!(f, "line {line}"),
            Self::Feature(number) => write!(f, "feature {number}"),
        }
    }
}

/// The texts of an entry; empty where it says nothing.
pub(super) type Texts<'t> = dyn Fn(Field) -> Cow<'t, str> + 't;

/// Makes stations of entries and collects the defects.
pub(super) struct EntryReader<'a> {
    file: &'a str,
    catalogue: &'a Catalogue,
    missing: MissingMarks<'a>,
    decimal_comma: bool,
    pub(super) problems: Vec<Problem>,
}

impl<'a> EntryReader<'a> {
    pub(super) fn new(file: &'a str, catalogue: &'a Catalogue, decimal_comma: bool) -> Self {
        Self {
            file,
            catalogue,
            missing: MissingMarks::new(&catalogue.text),
            decimal_comma,
            problems: Vec::new(),
        }
    }

    /// Notes a defect of a field.
    pub(super) fn problem(&mut self, at: Whence, field: Field, message: impl Into<String>) {
        let column = self.catalogue.columns.column(field).unwrap_or_default();
        let mut message = message.into();
        // The place of a feature has no room for the property.
        if matches!(at, Whence::Feature(_)) && !matches!(field, Field::Latitude | Field::Longitude)
        {
            message = format!("property `{column}`: {message}");
        }
        let place = at.place(self.file, column);
        self.problems.push(Problem::new(place, message));
    }

    /// True if a text says that there is no value.
    pub(super) fn is_missing(&self, text: &str) -> bool {
        self.missing.contains(text.as_bytes())
    }

    /// All other names of a station; `written` is its identifier as the list writes it.
    pub(super) fn aliases(&self, texts: &Texts, id: &str, written: &str) -> Vec<String> {
        let mut aliases: Vec<String> = Vec::new();
        let mut add = |text: &str| {
            let text = text.trim();
            if !self.is_missing(text) && text != id && !aliases.iter().any(|a| a == text) {
                aliases.push(text.to_string());
            }
        };
        add(written);
        for k in 0..self.catalogue.columns.aliases.len() {
            let field = texts(Field::Alias(k));
            add(&field);
            field.split(';').for_each(&mut add);
        }
        aliases
    }

    /// The station of an entry without its aliases; `None` if it has defects, which are noted.
    pub(super) fn station(&mut self, at: Whence, texts: &Texts, id: String) -> Option<Station> {
        let before = self.problems.len();
        let latitude = self.required(at, Field::Latitude, texts);
        let longitude = self.required(at, Field::Longitude, texts);
        let position = match latitude.zip(longitude).map(|(a, b)| Position::new(a, b)) {
            Some(Ok(position)) => Some(position),
            Some(Err(message)) => {
                let field = if message.starts_with("latitude") {
                    Field::Latitude
                } else {
                    Field::Longitude
                };
                self.problem(at, field, message);
                None
            }
            None => None,
        };
        let elevation = self.number(at, Field::Elevation, texts);
        let site = self.site(at, texts);
        let correction = self.correction(at, texts);
        let valid_from = self.parsed(at, Field::ValidFrom, texts, parse_day_or_time);
        let valid_to = self.parsed(at, Field::ValidTo, texts, parse_day_or_time);
        if let (Some(from), Some(to)) = (valid_from, valid_to)
            && to <= from
        {
            let message = format!("the station leaves ({to}) before it comes ({from})");
            self.problem(at, Field::ValidTo, message);
        }
        if self.problems.len() > before {
            return None;
        }
        let name = match texts(Field::Name) {
            name if name.is_empty() => id.clone(),
            name => name.into_owned(),
        };
        Some(Station {
            name,
            elevation: elevation.map(|e| e * self.catalogue.elevation_unit),
            valid_from,
            valid_to,
            site,
            correction,
            ..Station::new(id, position?)
        })
    }

    fn site(&mut self, at: Whence, texts: &Texts) -> Site {
        let speed_unit = self.parsed(at, Field::SpeedUnit, texts, str::parse::<SpeedUnit>);
        let north = self.parsed(at, Field::North, texts, str::parse::<North>);
        let declination = self.number(at, Field::Declination, texts);
        if let Some(degrees) = declination.filter(|d| !(-180.0..=180.0).contains(d)) {
            let message = format!("{degrees} is out of range (-180 to 180 degrees expected)");
            self.problem(at, Field::Declination, message);
        }
        Site {
            speed_unit,
            north,
            declination,
            sensor_height: self.positive(at, Field::SensorHeight, texts),
            roughness: self.positive(at, Field::Roughness, texts),
        }
    }

    /// What the reports are corrected by, if the list says anything of it.
    fn correction(&mut self, at: Whence, texts: &Texts) -> Option<Correction> {
        let direction = self.number(at, Field::DirectionCorrection, texts);
        if let Some(degrees) = direction.filter(|d| !(-360.0..=360.0).contains(d)) {
            let message = format!("{degrees} is out of range (-360 to 360 degrees expected)");
            self.problem(at, Field::DirectionCorrection, message);
        }
        let speed_factor = self.number(at, Field::SpeedFactor, texts);
        if let Some(factor) = speed_factor.filter(|f| !(1e-3..=1e3).contains(f)) {
            let message = format!("{factor} is out of range (0.001 to 1000 expected)");
            self.problem(at, Field::SpeedFactor, message);
        }
        let correction = Correction {
            direction: direction.unwrap_or(0.0),
            speed_factor: speed_factor.unwrap_or(1.0),
            from: self.parsed(at, Field::CorrectionFrom, texts, parse_day_or_time),
            origin: texts(Field::CorrectionOrigin).into_owned(),
        };
        correction.is_some().then_some(correction)
    }

    fn positive(&mut self, at: Whence, field: Field, texts: &Texts) -> Option<f64> {
        let metres = self.number(at, field, texts)?;
        if metres <= 0.0 {
            let message = format!("{metres} is out of range (more than 0 m expected)");
            self.problem(at, field, message);
        }
        Some(metres)
    }

    /// A number that may be absent.
    fn number(&mut self, at: Whence, field: Field, texts: &Texts) -> Option<f64> {
        let text = texts(field);
        if self.is_missing(&text) {
            return None;
        }
        self.required(at, field, texts)
    }

    fn required(&mut self, at: Whence, field: Field, texts: &Texts) -> Option<f64> {
        let text = texts(field);
        let number = if self.decimal_comma {
            parse_number_with_comma(text.as_bytes())
        } else {
            parse_number(text.as_bytes())
        };
        if number.is_none() {
            let expected = match (text.contains(','), text.contains('.')) {
                (true, false) if !self.decimal_comma => " (decimal point expected)",
                (false, true) if self.decimal_comma => " (decimal comma expected)",
                _ => "",
            };
            let message = format!("`{}` is not a number{expected}", shown(text.as_bytes()));
            self.problem(at, field, message);
        }
        number
    }

    /// A text turned into something by `parse`, unless it is absent.
    fn parsed<T>(
        &mut self,
        at: Whence,
        field: Field,
        texts: &Texts,
        parse: impl Fn(&str) -> Result<T, String>,
    ) -> Option<T> {
        let text = texts(field);
        if self.is_missing(&text) {
            return None;
        }
        match parse(&text) {
            Ok(value) => Some(value),
            Err(message) => {
                self.problem(at, field, message);
                None
            }
        }
    }
}

/// RFC 3339, or a date for 00:00 UTC.
fn parse_day_or_time(text: &str) -> Result<Time, String> {
    match NaiveDate::parse_from_str(text, "%Y-%m-%d") {
        Ok(day) => Time::from_utc(day.and_time(NaiveTime::MIN)).ok_or_else(|| {
            format!(
                "`{text}` is not in the years 1800 to 2200 (an empty field expected if there is no limit)"
            )
        }),
        Err(_) => Time::parse_rfc3339(text).map_err(|_| {
            format!(
                "`{}` is neither a day (2031-06-14) nor an RFC 3339 time with its offset (2031-06-14T12:00:00Z)",
                shown(text.as_bytes())
            )
        }),
    }
}
