//! Reads all report files.

use std::collections::BTreeMap;
use std::path::Path;

use rayon::prelude::*;

use super::format::ReportForm;
use super::names::{Found, Names};
use super::rows::Rows;
use super::{ReportFormat, coded_file, columnar, text};
use crate::error::{Error, Place, Problem, nearest_name};
use crate::input::{open, read_all, shown};
use crate::settings::ReportSource;
use crate::station::Network;
use crate::tally::{Reason, Tally};
use crate::warning::Warning;

/// Problems of rows that are kept with their text, for each file; the others are only counted.
pub(super) const PROBLEMS_KEPT: usize = 5;
/// Unknown names that are kept, for each file, so that a column of free text cannot fill the memory.
const UNKNOWN_KEPT: usize = 1000;

/// What came of reading.
#[derive(Debug, Default)]
pub struct ReadOutcome {
    /// The reports, in the order of the input.
    pub rows: Vec<Rows>,
    /// Rows received, passed on, set aside.
    pub tally: Tally,
    /// Each file, in the order read; the number of a file in [`Rows`] is its place here.
    pub files: Vec<FileOutcome>,
    /// What the user should know.
    pub warnings: Vec<Warning>,
    /// Files that could not be read at all.
    pub failures: Vec<Error>,
}

/// What came of one file.
#[derive(Debug)]
pub struct FileOutcome {
    /// The file as the settings name it.
    pub file: String,
    /// Its rows.
    pub tally: Tally,
}

/// What came of a part of a file.
#[derive(Debug, Default)]
pub(super) struct PartOutcome {
    pub(super) rows: Vec<Rows>,
    pub(super) tally: Tally,
    unusable: u64,
    problems: Vec<Problem>,
    unknown: BTreeMap<Vec<u8>, u64>,
}

impl PartOutcome {
    /// Takes in what came of the following part.
    pub(super) fn append(&mut self, later: Self) {
        self.rows.extend(later.rows);
        self.tally += &later.tally;
        self.unusable += later.unusable;
        self.problems.extend(later.problems);
        self.problems.truncate(PROBLEMS_KEPT);
        for (name, n) in later.unknown {
            self.count_unknown(&name, n);
        }
    }

    fn count_unknown(&mut self, name: &[u8], n: u64) {
        if let Some(count) = self.unknown.get_mut(name) {
            *count += n;
        } else if self.unknown.len() < UNKNOWN_KEPT {
            self.unknown.insert(name.to_vec(), n);
        }
    }

    /// Counts a row of a station that the network does not have.
    pub(super) fn no_station(&mut self, found: Found, name: &[u8]) {
        if found == Found::NotAskedFor {
            self.tally.set_aside(Reason::StationNotAskedFor, 1);
        } else {
            self.tally.set_aside(Reason::UnknownStation, 1);
            self.count_unknown(name, 1);
        }
    }

    /// Counts a row that cannot be used; the first ones are kept with their text.
    pub(super) fn set_aside(&mut self, reason: Reason, problem: impl FnOnce() -> Problem) {
        self.tally.set_aside(reason, 1);
        if reason.is_unusable() {
            self.unusable += 1;
            if self.problems.len() < PROBLEMS_KEPT {
                self.problems.push(problem());
            }
        }
    }

    /// The input ended with an error: what came before is used.
    pub(super) fn ended_early(&mut self, file: &str, error: &std::io::Error) {
        self.tally.set_aside(Reason::BrokenLine, 1);
        self.unusable += 1;
        let place = Place {
            file: file.into(),
            ..Place::default()
        };
        let problem = Problem::new(place, format!("reading ended early: {error}"));
        self.problems.insert(0, problem);
        self.problems.truncate(PROBLEMS_KEPT);
    }
}

/// Reads reports from memory, named `name` in messages.
#[must_use]
pub fn read_bytes(
    bytes: &[u8],
    name: &str,
    format: &ReportFormat,
    network: &Network,
) -> ReadOutcome {
    let names = Names::new(network);
    let part = match &format.form {
        ReportForm::Table(columns) => text::read_table(bytes, name, 0, format, columns, &names),
        ReportForm::Metar | ReportForm::Synop => Ok(coded_file::read_coded(
            bytes.to_vec(),
            name,
            0,
            format,
            &names,
        )),
    };
    gather(vec![(name.to_string(), part)], network)
}

/// Reads all report files, several at a time; the result has the order of the settings.
#[must_use]
pub fn read_reports(sources: &[ReportSource], network: &Network) -> ReadOutcome {
    let names = Names::new(network);
    let files: Vec<(u32, &Path, &ReportFormat)> = (0..)
        .zip(
            sources
                .iter()
                .flat_map(|s| s.files.iter().map(|f| (f.as_path(), &s.format))),
        )
        .map(|(number, (file, format))| (number, file, format))
        .collect();
    let parts: Vec<(String, Result<PartOutcome, Error>)> = files
        .par_iter()
        .map(|&(number, file, format)| {
            (
                file.display().to_string(),
                read_file(file, number, format, &names),
            )
        })
        .collect();
    gather(parts, network)
}

/// Puts the parts together, in their order.
fn gather(parts: Vec<(String, Result<PartOutcome, Error>)>, network: &Network) -> ReadOutcome {
    let mut outcome = ReadOutcome::default();
    let mut unknown: BTreeMap<Vec<u8>, u64> = BTreeMap::new();
    for (file, part) in parts {
        let part = part.unwrap_or_else(|error| {
            outcome.failures.push(error);
            PartOutcome::default()
        });
        if part.unusable > 0 {
            outcome.warnings.push(Warning::UnusableRows {
                file: file.clone(),
                rows: part.unusable,
                first: part.problems,
            });
        }
        for (name, n) in part.unknown {
            *unknown.entry(name).or_default() += n;
        }
        outcome.rows.extend(part.rows);
        outcome.tally += &part.tally;
        outcome.files.push(FileOutcome {
            file,
            tally: part.tally,
        });
    }
    for (name, rows) in unknown {
        let name = shown(&name);
        let known = network.stations().iter().flat_map(|s| {
            [s.id.as_str()]
                .into_iter()
                .chain(s.aliases.iter().map(String::as_str))
        });
        let nearest = nearest_name(&name, known).map(str::to_string);
        outcome.warnings.push(Warning::UnknownStation {
            name,
            rows,
            nearest,
        });
    }
    outcome
}

fn read_file(
    path: &Path,
    number: u32,
    format: &ReportFormat,
    names: &Names,
) -> Result<PartOutcome, Error> {
    let file = path.display().to_string();
    match &format.form {
        ReportForm::Table(columns) if columnar::is_columnar_file(path) => {
            columnar::read_columnar(path, number, format, columns, names)
        }
        ReportForm::Table(columns) => {
            let input = open(path).map_err(|e| Error::read(path, e))?;
            text::read_table(input, &file, number, format, columns, names)
        }
        ReportForm::Metar | ReportForm::Synop => {
            let bytes = read_all(path, coded_file::LARGEST).map_err(|e| Error::read(path, e))?;
            Ok(coded_file::read_coded(bytes, &file, number, format, names))
        }
    }
}
