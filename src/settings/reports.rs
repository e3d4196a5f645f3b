//! `[[reports]]`: files, columns, units.

use std::path::{Path, PathBuf};
use std::time::Duration;

use super::ReportSource;
use super::path::{expand_path, expand_pattern};
use super::scalars;
use super::section::{Found, Section};
use crate::error::Place;
use crate::input::{Label, RepeatedHour, TextFormat, TimeForm, TimeFormat, Zone};
use crate::report::{Columns, ReportForm, ReportFormat, WindColumns};
use crate::time::Time;
use crate::units::{self, North};

/// Reads all groups of report files; `instead` replaces the files, in the format of the first group.
pub(super) fn reports(root: &mut Section, base: &Path, instead: &[PathBuf]) -> Vec<ReportSource> {
    let mut sources = Vec::new();
    for mut section in root.sections("reports") {
        let format = report_format(&mut section);
        let files: Vec<PathBuf> = match section.required::<Vec<String>>("files") {
            Some(found) if instead.is_empty() => expand(&section, base, &found),
            _ => Vec::new(),
        };
        section.finish();
        sources.push(ReportSource { files, format });
    }
    if !instead.is_empty() {
        sources.truncate(1);
        match sources.first_mut() {
            Some(first) => first.files = instead.to_vec(),
            None => root.missing("[[reports]]"),
        }
    }
    sources
}

/// Resolves names and globs; each must match at least one file. `-` is standard input.
fn expand(section: &Section, base: &Path, patterns: &Found<Vec<String>>) -> Vec<PathBuf> {
    let mut files = Vec::new();
    for pattern in &patterns.value {
        if pattern == "-" {
            files.push(PathBuf::from("-"));
            continue;
        }
        let named =
            expand_path(base, pattern).and_then(|full| Ok((full, expand_pattern(base, pattern)?)));
        let (full, full_pattern) = match named {
            Ok(named) => named,
            Err(message) => {
                section.problem(patterns.place.clone(), message);
                continue;
            }
        };
        if full.is_file() {
            files.push(full);
            continue;
        }
        match glob::glob(&full_pattern) {
            Ok(paths) => {
                let before = files.len();
                // Sorted by the glob itself; what cannot be looked at is reported when it is read.
                files.extend(paths.filter_map(Result::ok).filter(|p| p.is_file()));
                if files.len() == before {
                    let message = format!("`{}` matches no file", full.display());
                    section.problem(patterns.place.clone(), message);
                }
            }
            Err(error) => {
                let message = format!("`{pattern}` is not a pattern of file names: {error}");
                section.problem(patterns.place.clone(), message);
            }
        }
    }
    files
}

fn report_format(section: &mut Section) -> ReportFormat {
    let columns = columns(section.section("columns"));
    let form = section.choice(
        "form",
        &[
            ("table", ReportForm::Table(Columns::default())),
            ("metar", ReportForm::Metar),
            ("synop", ReportForm::Synop),
        ],
    );
    let form = match form {
        None | Some(ReportForm::Table(_)) => ReportForm::Table(columns),
        Some(form) => form,
    };
    let place = section.place();
    let reference = section.parsed("reference", Time::parse_rfc3339);
    let needs_reference = match &form {
        ReportForm::Metar | ReportForm::Synop => true,
        ReportForm::Table(columns) => columns.time.is_empty(),
    };
    if needs_reference && reference.is_none() && !section.has("reference") {
        section.problem(
            place,
            "`reference` is missing: the reports carry only day and hour, so a time within two weeks of all of them is \
             needed",
        );
    }
    ReportFormat {
        form,
        text: text_format(section),
        time: time_format(section.section("time")),
        speed_unit: section.parsed("speed_unit", str::parse).unwrap_or_default(),
        north: section.parsed("north", str::parse).unwrap_or(North::True),
        level_factor: section.parsed("level_unit", level_unit).unwrap_or(1.0),
        reference,
    }
}

fn level_unit(text: &str) -> Result<f64, String> {
    match text {
        "Pa" => Ok(1.0),
        "hPa" | "mbar" => Ok(100.0),
        _ => units::length_unit(text).ok_or_else(|| {
            format!("`{text}` is not a unit of a level (Pa, hPa, m, km or ft expected)")
        }),
    }
}

pub(super) fn text_format(section: &mut Section) -> TextFormat {
    let delimiter = section.parsed("delimiter", |text| match text {
        "tab" => Ok('\t'),
        _ => match text.chars().collect::<Vec<_>>().as_slice() {
            [one] if one.is_ascii() && !one.is_ascii_alphanumeric() && *one != '"' => Ok(*one),
            _ => Err(format!(
                "`{text}` is no delimiter (one sign such as `;`, or `tab`, expected)"
            )),
        },
    });
    TextFormat {
        delimiter,
        decimal_comma: section
            .choice("decimal", &[(".", false), (",", true)])
            .unwrap_or(false),
        latin1: section
            .choice("encoding", &[("utf-8", false), ("latin-1", true)])
            .unwrap_or(false),
        skip_lines: section
            .value::<u64>("skip_lines")
            .map_or(0, |f| f.value.min(1000)),
        missing: section
            .value("missing")
            .map(|f| f.value)
            .unwrap_or_default(),
    }
}

fn time_format(mut section: Section) -> TimeFormat {
    let form = section.parsed("form", |text| match text {
        "RFC 3339" => Ok(TimeForm::Rfc3339),
        "YYYYMMDDHHMM" | "YYYYMMDDHHMMSS" => Ok(TimeForm::Compact),
        "epoch seconds" => Ok(TimeForm::EpochSeconds),
        "epoch milliseconds" => Ok(TimeForm::EpochMilliseconds),
        _ if text.contains('%') => Ok(TimeForm::Pattern(text.to_string())),
        _ => Err(format!(
            "`{text}` is no form of a time (RFC 3339, YYYYMMDDHHMM, epoch seconds, epoch milliseconds, or a pattern such \
             as `%d.%m.%Y %H:%M` expected)"
        )),
    });
    let label_place = section.place();
    let format = TimeFormat {
        form: form.unwrap_or(TimeForm::Rfc3339),
        zone: section.parsed("zone", Zone::parse).unwrap_or(Zone::InText),
        repeated_hour: section
            .choice(
                "repeated_hour",
                &[
                    ("first", RepeatedHour::First),
                    ("second", RepeatedHour::Second),
                ],
            )
            .unwrap_or(RepeatedHour::First),
        label: section
            .choice(
                "label",
                &[
                    ("start", Label::Start),
                    ("middle", Label::Middle),
                    ("end", Label::End),
                ],
            )
            .unwrap_or(Label::End),
        averaging: section
            .parsed("averaging", units::parse_duration)
            .unwrap_or_default(),
    };
    if format.label != Label::End && format.averaging == Duration::ZERO {
        section.problem(
            label_place,
            "a label at the start or middle needs `averaging`, the length of the window",
        );
    }
    section.finish();
    format
}

fn columns(mut section: Section) -> Columns {
    let place = section.place();
    let text = |section: &mut Section, key| section.value::<String>(key).map(|f| f.value);
    let station = text(&mut section, "station");
    let time = time_columns(&mut section);
    let wind = wind_columns(&mut section, place);
    let metar = matches!(wind, WindColumns::Metar { .. });
    let columns = Columns {
        station: match station {
            None if metar || wind.is_wide() => None,
            station => station.or_else(|| Some("station".into())),
        },
        time: match time {
            None if metar => Vec::new(),
            time => time.unwrap_or_else(|| vec!["time".into()]),
        },
        scalars: scalars::columns(&mut section, &wind),
        wind,
        gust: text(&mut section, "gust"),
        latitude: text(&mut section, "latitude"),
        longitude: text(&mut section, "longitude"),
        level: text(&mut section, "level"),
    };
    section.finish();
    columns
}

/// One column, or a list of columns whose texts are joined.
fn time_columns(section: &mut Section) -> Option<Vec<String>> {
    #[derive(serde::Deserialize)]
    #[serde(untagged)]
    enum OneOrMore {
        One(String),
        More(Vec<String>),
    }
    section.value("time").map(|found| match found.value {
        OneOrMore::One(one) => vec![one],
        OneOrMore::More(more) => more,
    })
}

fn wind_columns(section: &mut Section, place: Place) -> WindColumns {
    let mut text = |key| section.value::<String>(key).map(|f| f.value);
    let (direction, speed) = (text("direction"), text("speed"));
    let (eastward, northward, report) = (text("eastward"), text("northward"), text("report"));
    match (direction, speed, eastward, northward, report) {
        (None, None, None, None, None) => Columns::default().wind,
        (Some(direction), Some(speed), None, None, None) => {
            WindColumns::DirectionSpeed { direction, speed }
        }
        (None, Some(speed), None, None, None) => WindColumns::Speed { speed },
        (Some(direction), None, None, None, None) => WindColumns::Direction { direction },
        (None, None, Some(eastward), Some(northward), None) => WindColumns::Components {
            eastward,
            northward,
        },
        (None, None, None, None, Some(report)) => WindColumns::Metar { report },
        _ => {
            section.problem(
                place,
                "`direction` and `speed` (or one of them, if the other stands in another file), or `eastward` and \
                 `northward`, or `report` are expected",
            );
            Columns::default().wind
        }
    }
}
