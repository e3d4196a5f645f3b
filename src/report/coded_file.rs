//! Files of METAR, SPECI and SYNOP reports.

use super::coded::{CodeError, CodedWind, DayTime, Entry};
use super::format::{ReportForm, ReportFormat};
use super::metar::metars;
use super::names::{Found, Names};
use super::read::PartOutcome;
use super::rows::{Part, Report, Rows};
use super::synop::synops;
use crate::error::{Place, Problem};
use crate::input::{latin1_to_utf8, shown};
use crate::tally::Reason;
use crate::time::Time;
use crate::units::FromDirection;

/// Largest file of code forms, bytes: a day of the whole world is below 100 MiB.
pub(super) const LARGEST: u64 = 1 << 30;

/// Speed, direction and gust that can be used of a coded wind. A direction of 000 with a speed is no direction, and a
/// speed that is only a lower bound (P99) is none.
pub(super) fn wind_of(
    wind: Option<&CodedWind>,
) -> (Option<f64>, Option<FromDirection>, Option<f64>) {
    let Some(wind) = wind else {
        return (None, None, None);
    };
    let certain = |speed: super::coded::CodedSpeed| (!speed.at_least).then_some(speed.value);
    (
        wind.speed.and_then(certain),
        wind.known_direction(),
        wind.gust.and_then(certain),
    )
}

/// The instant of a day and time, near the reference.
pub(super) fn resolve(time: Option<DayTime>, reference: Option<Time>) -> Option<Time> {
    time?.nearest(reference?)
}

/// What the forms have in common.
struct CodedReport<'a> {
    line: u64,
    text: &'a str,
    report: Result<Known<'a>, CodeError<'a>>,
}

struct Known<'a> {
    station: &'a str,
    time: Option<DayTime>,
    correction: u8,
    nil: bool,
    wind: Option<CodedWind>,
}

/// Reads the text of a file of one code form.
pub(super) fn read_coded(
    bytes: Vec<u8>,
    file: &str,
    number: u32,
    format: &ReportFormat,
    names: &Names,
) -> PartOutcome {
    // The forms use ASCII alone; remarks may hold anything.
    let text = match String::from_utf8(bytes) {
        Ok(text) => text,
        Err(error) => String::from_utf8(latin1_to_utf8(error.as_bytes())).unwrap_or_default(),
    };
    let mut reader = CodedReader {
        file,
        number,
        format,
        names,
        rows: Rows::default(),
        outcome: PartOutcome::default(),
    };
    if matches!(format.form, ReportForm::Synop) {
        for Entry { line, text, report } in synops(&text) {
            let report = report.map(|synop| Known {
                station: synop.station,
                time: Some(synop.time),
                correction: synop.correction,
                nil: synop.nil,
                wind: synop.wind,
            });
            reader.take(&CodedReport { line, text, report });
        }
    } else {
        for Entry { line, text, report } in metars(&text) {
            let report = report.map(|metar| Known {
                station: metar.station,
                time: metar.time,
                correction: metar.correction,
                nil: metar.nil,
                wind: metar.wind,
            });
            reader.take(&CodedReport { line, text, report });
        }
    }
    reader.outcome.rows.push(reader.rows);
    reader.outcome
}

struct CodedReader<'a> {
    file: &'a str,
    number: u32,
    format: &'a ReportFormat,
    names: &'a Names<'a>,
    rows: Rows,
    outcome: PartOutcome,
}

impl CodedReader<'_> {
    fn take(&mut self, entry: &CodedReport) {
        match &entry.report {
            Ok(known) => self.known(known, entry),
            Err(error) => self.set_aside(Reason::UnreadableReport, entry, &error.to_string()),
        }
    }

    fn set_aside(&mut self, reason: Reason, entry: &CodedReport, message: &str) {
        let file = self.file;
        self.outcome.books.set_aside(reason, || {
            let place = Place {
                file: file.into(),
                line: Some(entry.line),
                column: None,
            };
            let text: Vec<&str> = entry.text.split_whitespace().take(6).collect();
            Problem::new(
                place,
                format!("{message}, in `{}`", shown(text.join(" ").as_bytes())),
            )
        });
    }

    fn known(&mut self, known: &Known, entry: &CodedReport) {
        if known.nil {
            self.outcome.books.tally.set_aside(Reason::Nil, 1);
            return;
        }
        let station = match self.names.find(known.station.as_bytes()) {
            Found::Station(station) => station,
            found => {
                self.outcome
                    .books
                    .no_station(found, known.station.as_bytes());
                return;
            }
        };
        let Some(time) = resolve(known.time, self.format.reference) else {
            let message = "the report has no time that can be resolved";
            self.set_aside(Reason::UnreadableTime, entry, message);
            return;
        };
        if !self.names.is_valid(station, time) {
            self.outcome
                .books
                .tally
                .set_aside(Reason::OutsideValidity, 1);
            return;
        }
        let (speed, direction, gust) = wind_of(known.wind.as_ref());
        self.rows.push(&Report {
            station,
            time,
            speed,
            direction,
            part: Part::Whole,
            gust,
            moving: None,
            correction: known.correction,
            place: (self.number, entry.line),
        });
        self.outcome.books.tally.pass(1);
    }
}
