//! Where the values of a text table stand.

use super::format::{STATION_MARK, WindColumns};
use super::names::{Found, Names};
use super::values::ValueReader;
use crate::error::{Error, Place, Problem};
use crate::input::{Header, find_delimiter, latin1_to_utf8};
use crate::station::missing_column;
use crate::units::North;

/// The columns of one station in a wide table.
pub(super) struct WideStation {
    pub(super) station: Found,
    pub(super) name: String,
    pub(super) first: Option<usize>,
    pub(super) second: Option<usize>,
}

/// What a column of the plainest table holds.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Role {
    Station,
    Time,
    Direction,
    Speed,
    /// Nothing that is needed.
    Other,
}

/// True for a table so plain that its usual rows can be read in one go.
fn is_plain(values: &ValueReader) -> bool {
    let (format, columns, names) = (values.format, values.columns, values.names);
    matches!(columns.wind, WindColumns::DirectionSpeed { .. })
        && !columns.wind.is_wide()
        && columns.time.len() == 1
        && format.north == North::True
        && names
            .network
            .stations()
            .iter()
            .all(|s| s.site.north.is_none())
        && !format.text.decimal_comma
        && !names.any_moved
        && !values.positive_marks
        && [
            &columns.gust,
            &columns.latitude,
            &columns.longitude,
            &columns.level,
        ]
        .iter()
        .all(|c| c.is_none())
        && columns.scalars.is_empty()
}

/// The roles of the columns up to the last one needed.
fn roles(station: usize, time: usize, direction: usize, speed: usize) -> Vec<Role> {
    let named = [
        (station, Role::Station),
        (time, Role::Time),
        (direction, Role::Direction),
        (speed, Role::Speed),
    ];
    let last = station.max(time).max(direction).max(speed);
    (0..=last)
        .map(|column| {
            let role = named.iter().find(|(place, _)| *place == column);
            role.map_or(Role::Other, |&(_, role)| role)
        })
        .collect()
}

/// Where the values of a table stand.
pub(super) struct Layout {
    pub(super) delimiter: u8,
    pub(super) station: Option<usize>,
    pub(super) time: Vec<usize>,
    pub(super) first: usize,
    pub(super) second: Option<usize>,
    pub(super) gust: Option<usize>,
    pub(super) latitude: Option<usize>,
    pub(super) longitude: Option<usize>,
    pub(super) level: Option<usize>,
    /// Of the scalars, as they are listed.
    pub(super) scalars: Vec<usize>,
    pub(super) wide: Vec<WideStation>,
    /// The columns up to the last one needed, of a table so plain that most rows can go the short way: direction and
    /// speed, one time column, true north, nothing else. Empty for any other.
    pub(super) roles: Vec<Role>,
}

impl Layout {
    /// Finds the columns in the header line.
    pub(super) fn new(line: &[u8], values: &ValueReader) -> Result<Self, Error> {
        let (format, columns, names) = (values.format, values.columns, values.names);
        let line = if format.text.latin1 {
            latin1_to_utf8(line)
        } else {
            line.to_vec()
        };
        let (first, second) = columns.wind.names();
        let wanted = |name: &str| {
            columns.station.as_deref() == Some(name)
                || columns.time.iter().any(|t| t == name)
                || matches_pattern(first, name)
                || second.is_some_and(|s| matches_pattern(s, name))
        };
        let stated = format.text.delimiter.and_then(|d| u8::try_from(d).ok());
        let (delimiter, names_found) = find_delimiter(&line, stated, wanted);
        let header = Header {
            names: names_found,
            line: format.text.skip_lines + 1,
        };
        let mut finder = ColumnFinder {
            file: values.file,
            header: &header,
            problems: Vec::new(),
        };
        let is_wide = columns.wind.is_wide();
        let station = if is_wide {
            None
        } else {
            finder.optional(columns.station.as_deref())
        };
        let time: Vec<usize> = columns
            .time
            .iter()
            .filter_map(|name| finder.find(name))
            .collect();
        let (first_column, second_column) = if is_wide {
            (None, None)
        } else {
            (finder.find(first), finder.optional(second))
        };
        let gust = finder.optional(columns.gust.as_deref());
        let latitude = finder.optional(columns.latitude.as_deref());
        let longitude = finder.optional(columns.longitude.as_deref());
        let level = finder.optional(columns.level.as_deref());
        let scalars = columns.scalars.iter();
        let scalars = scalars.filter_map(|s| finder.find(&s.column)).collect();
        let wide = if is_wide {
            let others = [
                &columns.gust,
                &columns.latitude,
                &columns.longitude,
                &columns.level,
            ];
            let others = others.into_iter().flatten().chain(&columns.time);
            let others: Vec<&str> = others.map(String::as_str).collect();
            wide_stations(&header, first, second, &others, names)
        } else {
            Vec::new()
        };
        if is_wide && wide.is_empty() {
            finder.missing(first);
        }
        if !finder.problems.is_empty() {
            return Err(Error::Invalid(finder.problems));
        }
        let roles = match (&time[..], station, first_column, second_column) {
            (&[time], Some(station), Some(direction), Some(speed)) if is_plain(values) => {
                roles(station, time, direction, speed)
            }
            _ => Vec::new(),
        };
        Ok(Self {
            delimiter,
            station,
            time,
            first: first_column.unwrap_or(0),
            second: second_column,
            gust,
            latitude,
            longitude,
            level,
            scalars,
            wide,
            roles,
        })
    }
}

/// True if a column name fits a name of the settings, in which `{station}` stands for anything.
fn matches_pattern(pattern: &str, name: &str) -> bool {
    station_in(pattern, name).is_some() || pattern == name
}

/// The station that a column name tells.
fn station_in<'a>(pattern: &str, name: &'a str) -> Option<&'a str> {
    let (before, after) = pattern.split_once(STATION_MARK)?;
    let station = name.strip_prefix(before)?.strip_suffix(after)?;
    (!station.is_empty()).then_some(station)
}

fn wide_stations(
    header: &Header,
    first: &str,
    second: Option<&str>,
    others: &[&str],
    names: &Names,
) -> Vec<WideStation> {
    let mut stations: Vec<WideStation> = Vec::new();
    for (column, name) in header.names.iter().enumerate() {
        // A pattern may fit every column: those that hold something else are no stations.
        if others.contains(&name.as_str()) {
            continue;
        }
        let (station, is_second) = match (
            station_in(first, name),
            second.and_then(|s| station_in(s, name)),
        ) {
            // A pattern such as `{station}` fits every column: the more particular one holds.
            (Some(a), Some(b)) => (if b.len() < a.len() { b } else { a }, b.len() < a.len()),
            (Some(a), None) => (a, false),
            (None, Some(b)) => (b, true),
            (None, None) => continue,
        };
        let found = names.find(station.as_bytes());
        let place = stations
            .iter()
            .position(|s| s.name == station)
            .unwrap_or_else(|| {
                stations.push(WideStation {
                    station: found,
                    name: station.to_string(),
                    first: None,
                    second: None,
                });
                stations.len() - 1
            });
        if let Some(entry) = stations.get_mut(place) {
            if is_second {
                entry.second = Some(column);
            } else {
                entry.first = Some(column);
            }
        }
    }
    stations
}

struct ColumnFinder<'a> {
    file: &'a str,
    header: &'a Header,
    problems: Vec<Problem>,
}

impl ColumnFinder<'_> {
    fn find(&mut self, name: &str) -> Option<usize> {
        let mut found = self.header.find(name);
        let Some(column) = found.next() else {
            self.missing(name);
            return None;
        };
        if found.next().is_some() {
            let place = Place {
                file: self.file.into(),
                line: Some(self.header.line),
                column: Some(name.into()),
            };
            self.problems
                .push(Problem::new(place, "there is more than one such column"));
        }
        Some(column)
    }

    fn optional(&mut self, name: Option<&str>) -> Option<usize> {
        name.and_then(|name| self.find(name))
    }

    fn missing(&mut self, name: &str) {
        let mut problem = missing_column(
            self.file,
            name,
            self.header.names.iter().map(String::as_str),
        );
        problem.place.line = Some(self.header.line);
        self.problems.push(problem);
    }
}
