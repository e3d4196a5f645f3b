//! Rows of a columnar table as reports.

use arrow_array::RecordBatch;

use super::cells::{Cell, Cells};
use super::layout::Layout;
use super::times::Times;
use crate::input::shown;
use crate::report::coded_file::{resolve, wind_of};
use crate::report::direction::DirectionText;
use crate::report::format::WindColumns;
use crate::report::metar::parse_metar;
use crate::report::names::{Finder, Found};
use crate::report::read::PartOutcome;
use crate::report::rows::{Moving, NO_SCALARS, Rows, ScalarValues};
use crate::report::values::{GivenWind, Unusable, Value, ValueReader, WindValue};
use crate::tally::Reason;
use crate::time::Time;

/// Reads batch after batch of one table.
pub(super) struct BatchReader<'a> {
    values: &'a ValueReader<'a>,
    layout: &'a Layout,
    finder: Finder<'a>,
    times: Times<'a>,
    /// Rows read so far.
    pub(super) line: u64,
    name: Vec<u8>,
    rows: Rows,
    pub(super) outcome: PartOutcome,
}

/// The columns of one batch.
struct Columns<'b> {
    station: Cells<'b>,
    /// What the values of a dictionary of stations are, as far as they were met.
    known: Vec<Option<Found>>,
    time: Vec<Cells<'b>>,
    first: Cells<'b>,
    second: Cells<'b>,
    gust: Cells<'b>,
    latitude: Cells<'b>,
    longitude: Cells<'b>,
    level: Cells<'b>,
    scalars: Vec<Cells<'b>>,
}

impl<'b> Columns<'b> {
    fn new(batch: &'b RecordBatch, layout: &Layout) -> Self {
        let cells = |place: Option<usize>| {
            let column = place.and_then(|place| batch.columns().get(place));
            column.map_or(Cells::Nothing, Cells::new)
        };
        let station = cells(layout.station);
        Self {
            known: vec![None; station.dictionary_len()],
            station,
            time: layout
                .time
                .iter()
                .map(|&place| cells(Some(place)))
                .collect(),
            first: cells(layout.first),
            second: cells(layout.second),
            gust: cells(layout.gust),
            latitude: cells(layout.latitude),
            longitude: cells(layout.longitude),
            level: cells(layout.level),
            scalars: layout.scalars.iter().map(|&place| cells(place)).collect(),
        }
    }
}

impl<'a> BatchReader<'a> {
    /// A reader that has `line` rows of the table behind it.
    pub(super) fn new(values: &'a ValueReader<'a>, layout: &'a Layout, line: u64) -> Self {
        Self {
            values,
            layout,
            finder: Finder::new(values.names),
            times: Times::new(&layout.time_kinds, &values.format.time, &layout.clock),
            line,
            name: Vec::new(),
            rows: Rows::default(),
            outcome: PartOutcome::default(),
        }
    }

    /// Reads the rows of a batch.
    pub(super) fn read(&mut self, batch: &RecordBatch) {
        self.rows = Rows::with_capacity(batch.num_rows());
        let mut columns = Columns::new(batch, self.layout);
        let is_metar = matches!(self.values.columns.wind, WindColumns::Metar { .. });
        for row in 0..batch.num_rows() {
            self.line += 1;
            let result = if is_metar {
                self.metar_row(&mut columns, row)
            } else {
                self.long_row(&mut columns, row)
            };
            if let Err(unusable) = result {
                let (values, line) = (self.values, self.line);
                self.outcome
                    .books
                    .set_aside(unusable.reason, || values.problem(unusable, line));
            }
        }
        self.outcome.rows.push(std::mem::take(&mut self.rows));
    }

    fn long_row(&mut self, columns: &mut Columns, row: usize) -> Result<(), Unusable> {
        let Some(station) = self.station(columns, row) else {
            return Ok(());
        };
        let time = self.time(columns, row)?;
        let (first, second) = (columns.first.at(row), columns.second.at(row));
        let given = match self.values.columns.wind {
            WindColumns::DirectionSpeed { .. } => {
                let direction = self.direction(first)?;
                GivenWind::DirectionSpeed(direction, self.number(second, Value::Second)?)
            }
            WindColumns::Speed { .. } => GivenWind::Speed(self.number(first, Value::First)?),
            WindColumns::Direction { .. } => GivenWind::Direction(self.direction(first)?),
            WindColumns::Components { .. } | WindColumns::Metar { .. } => {
                let u = self.number(first, Value::First)?;
                GivenWind::Components(u, self.number(second, Value::Second)?)
            }
        };
        let mut wind = self.values.wind(station, time, given)?;
        let gust = self.number(columns.gust.at(row), Value::Gust)?;
        wind.gust = self.values.speed(station, gust, Value::Gust)?;
        let moving = self.moving(columns, row)?;
        let mut scalars = NO_SCALARS;
        let named = self.values.columns.scalars.iter().zip(&columns.scalars);
        for (k, (named, column)) in named.enumerate() {
            scalars[named.slot] = self.number(column.at(row), Value::Scalar(k))?;
        }
        self.push(station, time, &wind, (moving, &scalars));
        Ok(())
    }

    /// A row with the text of a METAR; station and time from their columns, or from the text.
    fn metar_row(&mut self, columns: &mut Columns, row: usize) -> Result<(), Unusable> {
        let bytes = match columns.first.at(row) {
            Cell::Text(bytes) => bytes,
            _ => b"",
        };
        let text = String::from_utf8_lossy(bytes);
        let metar = parse_metar(&text).map_err(|error| {
            Unusable::new(Reason::UnreadableReport, Value::First, error.to_string())
        })?;
        let station = if self.layout.station.is_some() {
            self.station(columns, row)
        } else {
            let name = metar.station.as_bytes();
            let found = self.finder.find(name);
            self.known_station(found, name)
        };
        let Some(station) = station else {
            return Ok(());
        };
        let time = if self.layout.time.is_empty() {
            resolve(metar.time, self.values.format.reference).ok_or_else(|| {
                let message = format!("`{}` has no time that can be resolved", shown(bytes));
                Unusable::new(Reason::UnreadableTime, Value::First, message)
            })?
        } else {
            self.time(columns, row)?
        };
        let (speed, direction, gust) = wind_of(metar.wind.as_ref());
        let wind = WindValue {
            speed,
            direction,
            gust,
            correction: metar.correction,
        };
        self.push(station, time, &wind, (None, &NO_SCALARS));
        Ok(())
    }

    fn push(
        &mut self,
        station: u32,
        time: Time,
        wind: &WindValue,
        (moving, scalars): (Option<Moving>, &ScalarValues),
    ) {
        match self.values.report(station, time, wind, moving, self.line) {
            Some(report) => {
                self.rows.push(&report);
                self.rows.put_scalars(scalars);
                self.outcome.books.tally.pass(1);
            }
            None => self
                .outcome
                .books
                .tally
                .set_aside(Reason::OutsideValidity, 1),
        }
    }

    /// The station of a row; `None`, and counted, if the network does not have it.
    fn station(&mut self, columns: &mut Columns, row: usize) -> Option<u32> {
        let key = columns.station.key(row);
        let slot = key.and_then(|key| columns.known.get_mut(key));
        if let Some(Some(Found::Station(station))) = slot {
            return Some(*station);
        }
        let mut name = std::mem::take(&mut self.name);
        name.clear();
        columns.station.at(row).append_to(&mut name);
        let found = self.finder.find(&name);
        if let Some(slot) = slot {
            *slot = Some(found);
        }
        let station = self.known_station(found, &name);
        self.name = name;
        station
    }

    fn known_station(&mut self, found: Found, name: &[u8]) -> Option<u32> {
        if let Found::Station(station) = found {
            return Some(station);
        }
        self.outcome.books.no_station(found, name);
        None
    }

    fn time(&mut self, columns: &Columns, row: usize) -> Result<Time, Unusable> {
        let time = self.times.read(&columns.time, row);
        time.map_err(|message| Unusable::new(Reason::UnreadableTime, Value::Time, message))
    }

    fn number(&self, cell: Cell, value: Value) -> Result<Option<f64>, Unusable> {
        match cell {
            Cell::Missing => Ok(None),
            Cell::Number(number) => self.values.number(number, value),
            Cell::Integer(integer) => self.values.number(integer as f64, value),
            Cell::Text(text) => self.values.number_in(text, value),
        }
    }

    fn direction(&self, cell: Cell) -> Result<Option<DirectionText>, Unusable> {
        match cell {
            Cell::Text(text) => self.values.direction_in(text),
            other => ValueReader::direction(self.number(other, Value::First)?),
        }
    }

    /// Position and level of the row, where the table has such columns.
    fn moving(&self, columns: &Columns, row: usize) -> Result<Option<Moving>, Unusable> {
        let layout = self.layout;
        if layout.latitude.is_none() && layout.longitude.is_none() && layout.level.is_none() {
            return Ok(None);
        }
        let latitude = self.number(columns.latitude.at(row), Value::Latitude)?;
        let longitude = self.number(columns.longitude.at(row), Value::Longitude)?;
        let level = self.number(columns.level.at(row), Value::Level)?;
        let moving = self.values.moving(latitude, longitude, level)?;
        Ok(Some(moving))
    }
}
