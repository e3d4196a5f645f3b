//! Reads station lists: text tables and GeoJSON.

use std::io::{self, Read};
use std::path::Path;

use super::{StationList, features, table};
use crate::error::{Error, Place, Problem, nearest_name};
use crate::input::{BLOCK, Blocks, TextFormat, open};

/// A list in GeoJSON is read as a whole; a larger one is a slip.
const LARGEST_GEOJSON: u64 = 1 << 30;
/// The form of a list shows in its first bytes.
const FIRST_BYTES: u64 = 1 << 10;

/// Which columns of a station list hold what; in GeoJSON, which properties.
#[derive(Debug, Clone, PartialEq, Eq, serde::Serialize)]
pub struct StationColumns {
    /// Identifier, as the reports write it.
    pub id: String,
    /// Name for people.
    pub name: Option<String>,
    /// Degrees north. In GeoJSON the position is that of the point.
    pub latitude: String,
    /// Degrees east.
    pub longitude: String,
    /// Height of the ground above mean sea level.
    pub elevation: Option<String>,
    /// Other identifiers: a whole field is one, and so is each of its parts between `;`.
    pub aliases: Vec<String>,
    /// From when on the station stands there: RFC 3339, or a date for 00:00 UTC.
    pub valid_from: Option<String>,
    /// Until when, exclusive.
    pub valid_to: Option<String>,
    /// Unit of the station's speeds.
    pub speed_unit: Option<String>,
    /// What its directions are counted from: `true` or `magnetic`.
    pub north: Option<String>,
    /// Magnetic declination, degrees, east positive.
    pub declination: Option<String>,
    /// Height of the sensor above the ground, m.
    pub sensor_height: Option<String>,
    /// Roughness length of the surroundings, m.
    pub roughness: Option<String>,
    /// Degrees that are added to reported directions.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub direction_correction: Option<String>,
    /// Factor that reported speeds are multiplied with.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub speed_factor: Option<String>,
    /// From when on both hold: RFC 3339, or a date for 00:00 UTC.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub correction_from: Option<String>,
    /// Where both come from, in words.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub correction_origin: Option<String>,
}

impl Default for StationColumns {
    fn default() -> Self {
        Self {
            id: "id".into(),
            name: None,
            latitude: "latitude".into(),
            longitude: "longitude".into(),
            elevation: None,
            aliases: Vec::new(),
            valid_from: None,
            valid_to: None,
            speed_unit: None,
            north: None,
            declination: None,
            sensor_height: None,
            roughness: None,
            direction_correction: None,
            speed_factor: None,
            correction_from: None,
            correction_origin: None,
        }
    }
}

/// A station list as the settings describe it.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Catalogue {
    /// Column names.
    pub columns: StationColumns,
    /// How the text is written, if it is a table.
    pub text: TextFormat,
    /// One unit of the elevation column in metres.
    pub elevation_unit: f64,
    /// Only these stations, if given.
    pub only: Option<Vec<String>>,
    /// The list is a table of reports: of each station the first row with a position holds.
    pub first_of_each: bool,
}

impl Default for Catalogue {
    fn default() -> Self {
        Self {
            columns: StationColumns::default(),
            text: TextFormat::default(),
            elevation_unit: 1.0,
            only: None,
            first_of_each: false,
        }
    }
}

/// Reads a station list, compressed or not: GeoJSON if its first sign is `{`, else a text table with a header line.
///
/// # Errors
/// All defects of the list, or the system's refusal to read it.
pub fn read_catalogue(path: &Path, catalogue: &Catalogue) -> Result<StationList, Error> {
    let file = path.display().to_string();
    let input = open(path).map_err(|e| Error::read(path, e))?;
    read_list(&file, input, catalogue)
        .map_err(|e| Error::read(path, e))?
        .map_err(Error::Invalid)
}

/// Reads a list from anything.
fn read_list(
    file: &str,
    mut input: impl Read,
    catalogue: &Catalogue,
) -> io::Result<Result<StationList, Vec<Problem>>> {
    let mut start = Vec::new();
    input.by_ref().take(FIRST_BYTES).read_to_end(&mut start)?;
    let text = start.strip_prefix(b"\xef\xbb\xbf").unwrap_or(&start);
    let is_geojson = text.trim_ascii_start().starts_with(b"{");
    let mut input = start.chain(input);
    if !is_geojson {
        return table::read_table(file, Blocks::new(input, BLOCK), catalogue);
    }
    let mut bytes = Vec::new();
    input
        .by_ref()
        .take(LARGEST_GEOJSON + 1)
        .read_to_end(&mut bytes)?;
    if bytes.len() as u64 > LARGEST_GEOJSON {
        let message = format!("it is larger than {} MiB", LARGEST_GEOJSON >> 20);
        return Err(io::Error::new(io::ErrorKind::FileTooLarge, message));
    }
    Ok(features::read_features(file, &bytes, catalogue))
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

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::super::{Network, Period};
    use super::*;

    fn read(text: &str, only: Option<Vec<String>>) -> Result<Network, Vec<String>> {
        let catalogue = Catalogue {
            only,
            ..Catalogue::default()
        };
        read_list("s.csv", text.as_bytes(), &catalogue)
            .unwrap()
            .and_then(|list| list.network(Period::default()))
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
