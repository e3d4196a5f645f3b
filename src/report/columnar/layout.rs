//! Where the values of a columnar table stand.

use arrow_schema::{DataType, Schema};

use super::cells::Kind;
use super::times::is_clock;
use crate::error::{Error, Place, Problem};
use crate::input::{TimeForm, TimeFormat, Zone};
use crate::report::format::{Columns, ReportFormat, WindColumns};
use crate::station::missing_column;

/// Columns of a table by their place among those wanted.
#[derive(Debug)]
pub(super) struct Layout {
    /// Places of the wanted columns in the table, ascending.
    pub(super) wanted: Vec<usize>,
    pub(super) station: Option<usize>,
    pub(super) time: Vec<usize>,
    pub(super) time_kinds: Vec<Kind>,
    /// The format of the settings, with RFC 3339 for its form.
    pub(super) clock: TimeFormat,
    pub(super) first: Option<usize>,
    pub(super) second: Option<usize>,
    pub(super) gust: Option<usize>,
    pub(super) latitude: Option<usize>,
    pub(super) longitude: Option<usize>,
    pub(super) level: Option<usize>,
    /// Of the scalars, as they are listed.
    pub(super) scalars: Vec<Option<usize>>,
}

impl Layout {
    pub(super) fn new(
        schema: &Schema,
        file: &str,
        format: &ReportFormat,
        columns: &Columns,
    ) -> Result<Self, Error> {
        let mut finder = ColumnFinder {
            file,
            schema,
            problems: Vec::new(),
        };
        let (first_name, second_name) = columns.wind.names();
        if columns.wind.is_wide() {
            let message = "a table with a column for each station is read from text alone, not from Parquet or Arrow \
                           IPC (one row for each station and time expected)";
            finder.problem(first_name, message.into());
            return Err(Error::Invalid(finder.problems));
        }
        let is_metar = matches!(columns.wind, WindColumns::Metar { .. });
        if columns.station.is_none() && !is_metar {
            finder.problem("station", "the name of this column is not stated".into());
        }
        let is_text = |kind| kind == Kind::Text;
        let is_identifier = |kind| matches!(kind, Kind::Text | Kind::Integer);
        let is_number = |kind| matches!(kind, Kind::Text | Kind::Integer | Kind::Number);
        let number = "numbers or texts expected";
        let mut optional = |name: Option<&str>, fits: &dyn Fn(Kind) -> bool, expected| {
            let (place, _) = finder.find(name?, fits, expected)?;
            Some(place)
        };
        let station = optional(
            columns.station.as_deref(),
            &is_identifier,
            "texts or integers expected",
        );
        let first = if is_metar {
            optional(Some(first_name), &is_text, "texts expected")
        } else {
            optional(Some(first_name), &is_number, number)
        };
        let second = optional(second_name, &is_number, number);
        let gust = optional(columns.gust.as_deref(), &is_number, number);
        let latitude = optional(columns.latitude.as_deref(), &is_number, number);
        let longitude = optional(columns.longitude.as_deref(), &is_number, number);
        let level = optional(columns.level.as_deref(), &is_number, number);
        let scalars: Vec<Option<usize>> = columns
            .scalars
            .iter()
            .map(|s| optional(Some(&s.column), &is_number, number))
            .collect();
        let (time, time_kinds): (Vec<usize>, Vec<Kind>) = columns
            .time
            .iter()
            .filter_map(|name| finder.find(name, &|_| true, "times, texts or numbers expected"))
            .unzip();
        finder.check_times(columns, &time_kinds, format.time.zone);
        if !finder.problems.is_empty() {
            return Err(Error::Invalid(finder.problems));
        }
        let optional = [station, first, second, gust, latitude, longitude, level];
        let mut wanted: Vec<usize> = time
            .iter()
            .copied()
            .chain(
                optional
                    .into_iter()
                    .chain(scalars.iter().copied())
                    .flatten(),
            )
            .collect();
        wanted.sort_unstable();
        wanted.dedup();
        let place = |column: usize| wanted.binary_search(&column).ok();
        Ok(Self {
            station: station.and_then(place),
            time: time.into_iter().filter_map(place).collect(),
            time_kinds,
            clock: TimeFormat {
                form: TimeForm::Rfc3339,
                ..format.time.clone()
            },
            first: first.and_then(place),
            second: second.and_then(place),
            gust: gust.and_then(place),
            latitude: latitude.and_then(place),
            longitude: longitude.and_then(place),
            level: level.and_then(place),
            scalars: scalars.into_iter().map(|s| s.and_then(place)).collect(),
            wanted,
        })
    }
}

struct ColumnFinder<'a> {
    file: &'a str,
    schema: &'a Schema,
    problems: Vec<Problem>,
}

impl ColumnFinder<'_> {
    fn problem(&mut self, column: &str, message: String) {
        let place = Place {
            file: self.file.into(),
            line: None,
            column: Some(column.into()),
        };
        self.problems.push(Problem::new(place, message));
    }

    /// Place and kind of the one column of this name.
    fn find(
        &mut self,
        name: &str,
        fits: &dyn Fn(Kind) -> bool,
        expected: &str,
    ) -> Option<(usize, Kind)> {
        let schema = self.schema;
        let fields = schema.fields().iter().enumerate();
        let mut found = fields.filter(|(_, field)| field.name() == name);
        let Some((place, field)) = found.next() else {
            let header = schema.fields().iter().map(|field| field.name().as_str());
            let mut problem = missing_column(self.file, name, header);
            problem.place.line = None;
            self.problems.push(problem);
            return None;
        };
        if found.next().is_some() {
            self.problem(name, "there is more than one such column".into());
            return None;
        }
        match Kind::of(field.data_type()) {
            Some(kind) if kind == Kind::Nothing || fits(kind) => Some((place, kind)),
            _ => {
                let message = format!("its type is {} ({expected})", type_name(field.data_type()));
                self.problem(name, message);
                None
            }
        }
    }

    fn check_times(&mut self, columns: &Columns, kinds: &[Kind], zone: Zone) {
        let is_timestamp = |k: &Kind| matches!(k, Kind::Instant(_) | Kind::Local(_));
        let name = columns.time.first().map_or("time", String::as_str);
        if kinds.len() > 1 && kinds.iter().any(is_timestamp) {
            let message = "the time has several columns, and one of them holds whole times (one column expected)";
            self.problem(name, message.into());
        }
        if matches!(kinds, [Kind::Clock(_)]) {
            self.problem(
                name,
                "it is a time of day without a day (a column of days before it expected)".into(),
            );
        }
        let is_local = kinds
            .iter()
            .all(|&k| is_clock(k) || matches!(k, Kind::Local(_)));
        if !kinds.is_empty() && is_local && zone == Zone::InText {
            let message =
                "its times have no zone (state `time.zone`, such as UTC, +08:00 or Asia/Hong_Kong)";
            self.problem(name, message.into());
        }
    }
}

/// A type in few words.
fn type_name(data: &DataType) -> String {
    match data {
        DataType::Struct(_) => "a structure".into(),
        DataType::List(_) | DataType::LargeList(_) => "a list".into(),
        other => other.to_string(),
    }
}
