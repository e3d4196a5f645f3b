//! Reads all report files.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

use super::ReportFormat;
use super::feed::ReportFiles;
use super::names::Found;
use super::rows::Rows;
use super::stream::ReportStream;
use crate::error::{Error, Place, Problem, nearest_name};
use crate::input::shown;
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
    pub(super) books: Books,
}

/// The books of a file.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub(super) struct Books {
    pub(super) tally: Tally,
    unusable: u64,
    problems: Vec<Problem>,
    /// Why reading ended before the end of the file.
    cut: Option<Problem>,
    /// Names that the network does not have. They are bytes of any kind.
    unknown: Vec<(Vec<u8>, u64)>,
}

impl Books {
    /// Takes in the books of the following part.
    pub(super) fn append(&mut self, later: Self) {
        self.tally += &later.tally;
        self.unusable += later.unusable;
        self.problems.extend(later.problems);
        self.problems.truncate(PROBLEMS_KEPT);
        self.cut = self.cut.take().or(later.cut);
        for (name, n) in later.unknown {
            self.count_unknown(&name, n);
        }
    }

    fn count_unknown(&mut self, name: &[u8], n: u64) {
        match self
            .unknown
            .binary_search_by(|(known, _)| known.as_slice().cmp(name))
        {
            Ok(k) => self.unknown[k].1 += n, // found there
            Err(k) if self.unknown.len() < UNKNOWN_KEPT => {
                self.unknown.insert(k, (name.to_vec(), n));
            }
            Err(_) => {}
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
        self.cut = Some(Problem::new(place, format!("reading ended early: {error}")));
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
    let files = ReportFiles::of_bytes(bytes, name, format, network);
    read_files(&files)
}

/// Reads all report files; the result has the order of the settings.
#[must_use]
pub fn read_reports(sources: &[ReportSource], network: &Network) -> ReadOutcome {
    read_files(&ReportFiles::new(sources, network))
}

fn read_files(files: &ReportFiles) -> ReadOutcome {
    let mut stream = ReportStream::in_file_order(files);
    let mut rows = Vec::new();
    while let Some(wave) = stream.next_wave(None) {
        rows.extend(wave);
    }
    ReadOutcome {
        rows,
        ..stream.outcome()
    }
}

/// Puts the books of the files together.
pub(super) fn gather(parts: Vec<(String, Result<Books, Error>)>, network: &Network) -> ReadOutcome {
    let mut outcome = ReadOutcome::default();
    let mut unknown: BTreeMap<Vec<u8>, u64> = BTreeMap::new();
    for (file, books) in parts {
        let books = books.unwrap_or_else(|error| {
            outcome.failures.push(error);
            Books::default()
        });
        if books.unusable > 0 {
            let mut first: Vec<Problem> = books.cut.into_iter().chain(books.problems).collect();
            first.truncate(PROBLEMS_KEPT);
            outcome.warnings.push(Warning::UnusableRows {
                file: file.clone(),
                rows: books.unusable,
                first,
            });
        }
        for (name, n) in books.unknown {
            *unknown.entry(name).or_default() += n;
        }
        outcome.tally += &books.tally;
        outcome.files.push(FileOutcome {
            file,
            tally: books.tally,
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
