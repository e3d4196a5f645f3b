//! From the text of `network.toml` to checked settings.

use std::path::{Path, PathBuf};
use std::time::Duration;

use super::analysis::analysis;
use super::calibration::calibration;
use super::check_keys::check;
use super::errors::errors;
use super::events::{events, places};
use super::kinematics::{decompose, kinematics};
use super::means::means;
use super::path::expand_path;
use super::profile::profile;
use super::reports::{reports, text_format};
use super::scalars::scalars;
use super::section::{Document, Section};
use super::{
    MEMORY, MeansBy, Missing, PolygonChoice, PolygonLimits, RegionParts, RegionSettings,
    RingSettings, SensorErrors, Settings,
};
use crate::error::{Error, Problem};
use crate::station::{Catalogue, StationColumns};
use crate::time::Time;
use crate::units;

/// What the command line sets in place of the file.
#[derive(Debug, Clone, Default)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "switches of the command line"
)]
pub struct Overrides {
    /// Report files in place of those of the settings; they have the format of the first `[[reports]]`.
    pub reports: Vec<PathBuf>,
    /// `analysis.interval`
    pub interval: Option<Duration>,
    /// `analysis.tolerance`
    pub tolerance: Option<Duration>,
    /// `analysis.method = "mean"` over this window.
    pub window: Option<Duration>,
    /// `analysis.from`
    pub from: Option<Time>,
    /// `analysis.to`
    pub to: Option<Time>,
    /// `limits.smallest_angle`
    pub smallest_angle: Option<f64>,
    /// `limits.longest_edge`, m
    pub longest_edge: Option<f64>,
    /// Memory that sorting the reports may take, bytes
    pub memory: Option<usize>,
    /// Where the reports are kept for another run
    pub cache: Option<PathBuf>,
    /// Errors of the instruments alone
    pub instrument_errors: bool,
    /// `means.by`
    pub by: Option<MeansBy>,
    /// `kinematics.write = true`
    pub kinematics: bool,
    /// `decompose.write = true`
    pub decompose: bool,
    /// `kinematics.w_at`, m
    pub w_at: Option<f64>,
    /// Take the reports unchecked
    pub no_screen: bool,
}

/// Reads a settings file. The settings come back even where there are defects, with defaults in their place, so that
/// the caller can go on to look for defects of the station list; with any defect they must not be used for a run.
///
/// # Errors
/// Only if the file itself cannot be read.
pub fn read_settings(
    path: &Path,
    overrides: &Overrides,
) -> Result<(Settings, Vec<Problem>), Error> {
    let text = std::fs::read_to_string(path).map_err(|e| Error::read(path, e))?;
    let file = path.display().to_string();
    let base = path.parent().unwrap_or(Path::new("."));
    Ok(parse_settings(&file, &text, base, overrides))
}

fn parse_settings(
    file: &str,
    text: &str,
    base: &Path,
    overrides: &Overrides,
) -> (Settings, Vec<Problem>) {
    let document = Document::new(file, text);
    let mut root = document.root();

    let name = root
        .required::<String>("name")
        .map_or_else(String::new, |f| f.value);
    let mut stations = root.section("stations");
    let station_file = station_file(&mut stations, base);
    let catalogue = catalogue(&mut stations);
    stations.finish();

    let sensor = sensor(root.section("sensor"));
    let (polygons, missing) = polygons(root.section("polygons"));
    let (kinematics, w_at) = kinematics(root.section("kinematics"), overrides);
    let mut reports = reports(&mut root, base, &overrides.reports);
    let settings = Settings {
        name,
        station_file,
        catalogue,
        scalars: scalars(&mut root, &mut reports),
        reports,
        analysis: analysis(root.section("analysis"), overrides),
        errors: errors(root.section("errors"), overrides),
        kinematics,
        w_at,
        decompose: decompose(root.section("decompose"), overrides),
        means: means(&mut root, overrides),
        calibration: calibration(root.section("calibration")),
        events: events(root.section("events")),
        places: places(root.sections("places")),
        profile: profile(root.section("profile")),
        check: check(root.section("check"), sensor.calm_below),
        sensor,
        limits: limits(root.section("limits"), overrides),
        screen: !overrides.no_screen,
        cache: overrides.cache.clone(),
        memory: overrides.memory.unwrap_or(MEMORY),
        polygons,
        missing,
    };
    root.finish();
    (settings, document.into_problems())
}

fn station_file(section: &mut Section, base: &Path) -> PathBuf {
    let Some(found) = section.required::<String>("file") else {
        return PathBuf::new();
    };
    let path = match expand_path(base, &found.value) {
        Ok(path) => path,
        Err(message) => {
            section.problem(found.place, message);
            return PathBuf::new();
        }
    };
    if !path.is_file() {
        section.problem(found.place, format!("`{}` is not a file", path.display()));
        return PathBuf::new();
    }
    path
}

fn catalogue(section: &mut Section) -> Catalogue {
    let default = StationColumns::default();
    let mut columns = section.section("columns");
    let text = |columns: &mut Section, key| columns.value::<String>(key).map(|f| f.value);
    let catalogue_columns = StationColumns {
        id: text(&mut columns, "id").unwrap_or(default.id),
        name: text(&mut columns, "name"),
        latitude: text(&mut columns, "latitude").unwrap_or(default.latitude),
        longitude: text(&mut columns, "longitude").unwrap_or(default.longitude),
        elevation: text(&mut columns, "elevation"),
        aliases: alias_columns(&mut columns),
        valid_from: text(&mut columns, "valid_from"),
        valid_to: text(&mut columns, "valid_to"),
        speed_unit: text(&mut columns, "speed_unit"),
        north: text(&mut columns, "north"),
        declination: text(&mut columns, "declination"),
        sensor_height: text(&mut columns, "sensor_height"),
        roughness: text(&mut columns, "roughness"),
        direction_correction: text(&mut columns, "direction_correction"),
        speed_factor: text(&mut columns, "speed_factor"),
        correction_from: text(&mut columns, "correction_from"),
        correction_origin: text(&mut columns, "correction_origin"),
    };
    columns.finish();
    let elevation_unit = section.parsed("elevation_unit", |unit| {
        units::length_unit(unit)
            .ok_or_else(|| format!("`{unit}` is not a unit of length (m, km or ft expected)"))
    });
    Catalogue {
        columns: catalogue_columns,
        text: text_format(section),
        elevation_unit: elevation_unit.unwrap_or(1.0),
        only: section.value("only").map(|f| f.value),
        first_of_each: section.value("first_of_each").is_some_and(|f| f.value),
    }
}

/// One column, or a list of columns.
fn alias_columns(section: &mut Section) -> Vec<String> {
    #[derive(serde::Deserialize)]
    #[serde(untagged)]
    enum OneOrMore {
        One(String),
        More(Vec<String>),
    }
    match section.value("aliases").map(|found| found.value) {
        None => Vec::new(),
        Some(OneOrMore::One(one)) => vec![one],
        Some(OneOrMore::More(more)) => more,
    }
}

fn sensor(mut section: Section) -> SensorErrors {
    let default = SensorErrors::default();
    let mut speed = |key| section.parsed(key, units::parse_speed);
    let (speed_sd, speed_step, calm_below) =
        (speed("speed_sd"), speed("speed_step"), speed("calm_below"));
    let errors = SensorErrors {
        speed_sd: speed_sd.unwrap_or(default.speed_sd),
        speed_sd_share: section
            .number("speed_sd_share", 0.0..=1.0)
            .unwrap_or(default.speed_sd_share),
        direction_sd: section
            .number("direction_sd", 0.0..=90.0)
            .unwrap_or(default.direction_sd),
        speed_step,
        direction_step: section.number("direction_step", 0.0..=90.0),
        calm_below: calm_below.unwrap_or(default.calm_below),
    };
    section.finish();
    errors
}

fn limits(mut section: Section, overrides: &Overrides) -> PolygonLimits {
    let default = PolygonLimits::default();
    let angle = section.number("smallest_angle", 0.0..=60.0);
    let edge = section.parsed("longest_edge", units::parse_length);
    let limits = PolygonLimits {
        smallest_angle: overrides
            .smallest_angle
            .or(angle)
            .unwrap_or(default.smallest_angle),
        longest_edge: overrides.longest_edge.or(edge),
        smallest_area: section
            .parsed("smallest_area", units::parse_area)
            .unwrap_or(default.smallest_area),
        largest_area: section.parsed("largest_area", units::parse_area),
        elevation_spread: section.parsed("elevation_spread", units::parse_length),
        slope_error: section.number("slope_error", 0.0..=1.0),
        vertical_shear: section
            .number("vertical_shear", 0.0..=1.0)
            .unwrap_or(default.vertical_shear),
        largest_age: section
            .parsed("largest_age", units::parse_duration)
            .map(|age| age.as_secs_f64()),
    };
    section.finish();
    limits
}

fn polygons(mut section: Section) -> (PolygonChoice, Missing) {
    let triangles = section.value("triangles").is_none_or(|f| f.value);
    let missing = section.parsed("missing", |text| match text {
        "skip" => Ok(Missing::Skip),
        "remesh" => Ok(Missing::Remesh),
        other => Err(format!("`{other}` is neither \"skip\" nor \"remesh\"")),
    });
    if !triangles && missing == Some(Missing::Remesh) {
        let message = "`missing = \"remesh\"` needs triangles";
        section.problem(section.place(), message);
    }
    let mut rings = Vec::new();
    for mut ring in section.sections("ring") {
        let name = ring.required::<String>("name");
        let stations = ring.required::<Vec<String>>("stations");
        if let (Some(name), Some(stations)) = (name, stations) {
            rings.push(RingSettings {
                name: name.value,
                stations: stations.value,
                place: stations.place,
            });
        }
        ring.finish();
    }
    let mut regions = Vec::new();
    for mut region in section.sections("region") {
        let place = region.place();
        let name = region.required::<String>("name");
        let parts = region.value::<Vec<String>>("polygons");
        let stations = region.value::<Vec<String>>("triangles_of");
        let all = region
            .value::<bool>("all_triangles")
            .is_some_and(|f| f.value);
        let parts = match (parts, stations, all) {
            (Some(parts), None, false) => Some(RegionParts::Polygons(parts.value)),
            (None, Some(stations), false) => Some(RegionParts::TrianglesOf(stations.value)),
            (None, None, true) => Some(RegionParts::AllTriangles),
            _ => {
                region.problem(
                    place.clone(),
                    "one of `polygons`, `triangles_of` or `all_triangles = true` is expected",
                );
                None
            }
        };
        if let (Some(name), Some(parts)) = (name, parts) {
            regions.push(RegionSettings {
                name: name.value,
                parts,
                place,
            });
        }
        region.finish();
    }
    section.finish();
    let choice = PolygonChoice {
        triangles,
        rings,
        regions,
    };
    (choice, missing.unwrap_or_default())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn problems(text: &str) -> Vec<String> {
        parse_settings("n.toml", text, Path::new("."), &Overrides::default())
            .1
            .iter()
            .map(ToString::to_string)
            .collect()
    }

    #[test]
    fn every_defect_is_listed_with_its_line() {
        let text = "nam = \"x\"\n[stations]\nfile = \"nowhere.csv\"\n[analysis]\nintervall = \"5 min\"\n\
                    tolerance = \"5 parsecs\"\n[sensor]\ndirection_sd = 400\n[[reports]]\nfiles = [\"*.nothing\"]\n\
                    speed_unit = \"furlong\"\n";
        let found = problems(text);
        let expected = [
            "n.toml:1: `name` is missing",
            "n.toml:1 `nam`: there is no such key; is `name` meant?",
            "n.toml:3 `stations.file`: `./nowhere.csv` is not a file",
            "n.toml:5 `analysis.intervall`: there is no such key; is `interval` meant?",
            "n.toml:6 `analysis.tolerance`: `5 parsecs` is not a duration (number and unit s, min, h or d expected, \
             such as `5 min`)",
            "n.toml:8 `sensor.direction_sd`: 400 is out of range (0 to 90 expected)",
            "n.toml:10 `reports.files`: `./*.nothing` matches no file",
            "n.toml:11 `reports.speed_unit`: `furlong` is not a unit of speed (m/s, km/h, mph or kt expected)",
        ];
        assert_eq!(found, expected);
    }

    #[test]
    fn a_wrong_type_and_broken_toml_have_their_line() {
        let found = problems("name = \"x\"\n[stations]\nfile = 3\n");
        assert_eq!(found.len(), 1, "{found:?}");
        assert!(
            found[0].starts_with("n.toml:3 `stations.file`: invalid type: integer `3`"),
            "{found:?}"
        );
        assert!(
            problems("name = \"x\n")
                .iter()
                .any(|p| p.starts_with("n.toml:1"))
        );
    }
}
