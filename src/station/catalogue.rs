//! Reads station lists.

use std::collections::HashMap;
use std::path::Path;

use super::{Network, Position, Station, tidy_id};
use crate::error::{Error, Place, Problem, nearest_name};

/// Which columns of a station list hold what.
#[derive(Debug, Clone, PartialEq, Eq, serde::Serialize)]
pub struct StationColumns {
    /// Identifier, as the reports write it.
    pub id: String,
    /// Name for people.
    pub name: Option<String>,
    /// Degrees north.
    pub latitude: String,
    /// Degrees east.
    pub longitude: String,
    /// Height of the ground above mean sea level.
    pub elevation: Option<String>,
}

impl Default for StationColumns {
    fn default() -> Self {
        Self {
            id: "id".into(),
            name: None,
            latitude: "latitude".into(),
            longitude: "longitude".into(),
            elevation: None,
        }
    }
}

/// A station list as the settings describe it.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Catalogue {
    /// Column names.
    pub columns: StationColumns,
    /// One unit of the elevation column in metres.
    pub elevation_unit: f64,
    /// Only these stations, if given.
    pub only: Option<Vec<String>>,
}

/// Reads a station list in CSV, with a header line.
///
/// # Errors
/// All defects of the list, or the system's refusal to read it.
pub fn read_catalogue(path: &Path, catalogue: &Catalogue) -> Result<Network, Error> {
    let bytes = std::fs::read(path).map_err(|e| Error::read(path, e))?;
    let file = path.display().to_string();
    parse_catalogue(&file, &bytes, catalogue).map_err(Error::Invalid)
}

struct ColumnIndex {
    id: usize,
    name: Option<usize>,
    latitude: usize,
    longitude: usize,
    elevation: Option<usize>,
}

fn parse_catalogue(
    file: &str,
    bytes: &[u8],
    catalogue: &Catalogue,
) -> Result<Network, Vec<Problem>> {
    let bytes = bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(bytes);
    let mut reader = csv::ReaderBuilder::new()
        .trim(csv::Trim::All)
        .flexible(true)
        .from_reader(bytes);
    let header = reader.headers().cloned().unwrap_or_default();
    let columns = find_columns(file, &header, &catalogue.columns)?;

    let mut list = List {
        file,
        columns: &catalogue.columns,
        elevation_unit: catalogue.elevation_unit,
        problems: Vec::new(),
    };
    let mut stations: Vec<Station> = Vec::new();
    let mut not_asked_for = Vec::new();
    let mut first_line: HashMap<String, u64> = HashMap::new();
    for record in reader.records() {
        let record = match record {
            Ok(record) => record,
            Err(error) => {
                list.problems.push(Problem::new(
                    Place {
                        file: file.into(),
                        line: error.position().map(csv::Position::line),
                        column: None,
                    },
                    "the line is not UTF-8 text",
                ));
                continue;
            }
        };
        let line = record.position().map_or(0, csv::Position::line);
        let id = tidy_id(record.get(columns.id).unwrap_or(""));
        if let Some(only) = &catalogue.only
            && !only.iter().any(|o| tidy_id(o) == id)
        {
            not_asked_for.push(id);
            continue;
        }
        if id.is_empty() {
            list.problem(line, &catalogue.columns.id, "the identifier is empty");
            continue;
        }
        if let Some(first) = first_line.get(&id) {
            let message =
                format!("station `{id}` is already on line {first} (each station once expected)");
            list.problem(line, &catalogue.columns.id, message);
            continue;
        }
        first_line.insert(id.clone(), line);
        if let Some(station) = list.station(&record, &columns, line, id) {
            stations.push(station);
        }
    }
    let mut problems = list.problems;
    for wanted in catalogue.only.iter().flatten() {
        if !first_line.contains_key(&tidy_id(wanted)) {
            problems.push(Problem::new(
                Place {
                    file: file.into(),
                    line: None,
                    column: Some(catalogue.columns.id.clone()),
                },
                format!("station `{wanted}`, asked for in the settings, is not in the list"),
            ));
        }
    }
    if problems.is_empty() {
        Ok(Network::new(stations).with_not_asked_for(not_asked_for))
    } else {
        Err(problems)
    }
}

/// Finds the columns in the header; names those found when one is missing.
fn find_columns(
    file: &str,
    header: &csv::StringRecord,
    columns: &StationColumns,
) -> Result<ColumnIndex, Vec<Problem>> {
    let mut problems = Vec::new();
    let mut find = |name: &str| {
        let found = header.iter().position(|h| h == name);
        if found.is_none() {
            problems.push(missing_column(file, name, header.iter()));
        }
        found
    };
    let id = find(&columns.id);
    let latitude = find(&columns.latitude);
    let longitude = find(&columns.longitude);
    let name = columns.name.as_deref().map(&mut find);
    let elevation = columns.elevation.as_deref().map(&mut find);
    match (id, latitude, longitude) {
        (Some(id), Some(latitude), Some(longitude)) if problems.is_empty() => Ok(ColumnIndex {
            id,
            name: name.flatten(),
            latitude,
            longitude,
            elevation: elevation.flatten(),
        }),
        _ => Err(problems),
    }
}

/// The problem of a column that a header lacks.
pub(crate) fn missing_column<'a>(
    file: &str,
    name: &str,
    header: impl Iterator<Item = &'a str> + Clone,
) -> Problem {
    let found: Vec<String> = header.clone().map(|h| format!("`{h}`")).collect();
    let mut message = if found.is_empty() {
        "there is no such column: the file is empty".to_string()
    } else {
        format!("there is no such column (found: {})", found.join(", "))
    };
    if let Some(near) = nearest_name(name, header) {
        message.push_str("; is `");
        message.push_str(near);
        message.push_str("` meant?");
    }
    Problem::new(
        Place {
            file: file.into(),
            line: Some(1),
            column: Some(name.into()),
        },
        message,
    )
}

struct List<'a> {
    file: &'a str,
    columns: &'a StationColumns,
    elevation_unit: f64,
    problems: Vec<Problem>,
}

impl List<'_> {
    fn problem(&mut self, line: u64, column: &str, message: impl Into<String>) {
        self.problems.push(Problem::new(
            Place {
                file: self.file.into(),
                line: Some(line),
                column: Some(column.into()),
            },
            message,
        ));
    }

    fn number(
        &mut self,
        record: &csv::StringRecord,
        index: usize,
        line: u64,
        column: &str,
    ) -> Option<f64> {
        let text = record.get(index).unwrap_or("");
        match text.parse::<f64>() {
            Ok(number) if number.is_finite() => Some(number),
            _ => {
                self.problem(line, column, format!("`{text}` is not a number"));
                None
            }
        }
    }

    fn station(
        &mut self,
        record: &csv::StringRecord,
        index: &ColumnIndex,
        line: u64,
        id: String,
    ) -> Option<Station> {
        let columns = self.columns;
        let latitude = self.number(record, index.latitude, line, &columns.latitude);
        let longitude = self.number(record, index.longitude, line, &columns.longitude);
        let elevation = match (index.elevation, &columns.elevation) {
            // An unknown elevation is common in lists and only leaves out a shape measure.
            (Some(i), Some(column)) if !record.get(i).unwrap_or("").is_empty() => {
                self.number(record, i, line, column)
            }
            _ => None,
        };
        let position = match Position::new(latitude?, longitude?) {
            Ok(position) => position,
            Err(message) => {
                let column = if message.starts_with("latitude") {
                    &columns.latitude
                } else {
                    &columns.longitude
                };
                self.problem(line, column, message);
                return None;
            }
        };
        let name = index
            .name
            .and_then(|i| record.get(i))
            .filter(|name| !name.is_empty())
            .unwrap_or(&id)
            .to_string();
        Some(Station {
            name,
            elevation: elevation.map(|e| e * self.elevation_unit),
            ..Station::new(id, position)
        })
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn read(text: &str, only: Option<Vec<String>>) -> Result<Network, Vec<String>> {
        let catalogue = Catalogue {
            columns: StationColumns::default(),
            elevation_unit: 1.0,
            only,
        };
        parse_catalogue("s.csv", text.as_bytes(), &catalogue)
            .map_err(|problems| problems.iter().map(ToString::to_string).collect())
    }

    #[test]
    fn all_defects_are_listed_with_their_place() {
        let problems = read(
            "id,latitude,longitude\nA,91,0\nB,x,0\nA,1,1\nC,1,400\n",
            None,
        )
        .unwrap_err();
        assert_eq!(
            problems,
            [
                "s.csv:2 `latitude`: latitude 91 is out of range (-90 to 90 expected)",
                "s.csv:3 `latitude`: `x` is not a number",
                "s.csv:4 `id`: station `A` is already on line 2 (each station once expected)",
                "s.csv:5 `longitude`: longitude 400 is out of range (-180 to 360 expected)",
            ]
        );
    }

    #[test]
    fn a_missing_column_names_those_found() {
        let problems = read("id,lat,longitude\n", None).unwrap_err();
        assert_eq!(
            problems,
            [
                "s.csv:1 `latitude`: there is no such column (found: `id`, `lat`, `longitude`); is `lat` meant?"
            ]
        );
        assert!(read("", None).unwrap_err()[0].contains("the file is empty"));
    }

    #[test]
    fn only_the_stations_asked_for() {
        let list = "id,latitude,longitude\nKing's Park,1,1\nB,2,2\nBad,x,x\n";
        let network = read(list, Some(vec!["King's Park".into(), "B".into()])).unwrap();
        assert_eq!(network.len(), 2);
        assert_eq!(network.find("King's Park"), network.find("King's_Park"));
        assert!(read(list, Some(vec!["Z".into()])).unwrap_err()[0].contains("`Z`"));
    }
}
