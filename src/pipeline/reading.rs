//! What came of reading and checking the reports.

use super::Windows;
use crate::check::StationReading;
use crate::error::{Error, ErrorKind};
use crate::report::{Conflict, FileOutcome, InputOrder, ReportFiles};
use crate::settings::Settings;
use crate::station::Network;
use crate::tally::Tally;
use crate::warning::Warning;

/// The books of the reports: read, sorted and checked.
#[derive(Debug, Default)]
pub struct Reading {
    /// Rows of the files.
    pub rows: Tally,
    /// The same per file.
    pub files: Vec<FileOutcome>,
    /// Repeats taken out.
    pub repeats: Tally,
    /// The first rows that say different things of the same station and time.
    pub conflicts: Vec<Conflict>,
    /// What each station sent.
    pub stations: Vec<StationReading>,
    /// What the user should know.
    pub warnings: Vec<Warning>,
    /// Files that could not be read.
    pub failures: Vec<Error>,
}

impl Reading {
    /// Reads all report files and checks the reports, in the order of time if the files have it, else sorted first.
    ///
    /// # Errors
    /// The disk cannot take what does not fit into memory.
    pub fn of(settings: &Settings, network: &Network) -> Result<Self, Error> {
        let files = ReportFiles::new(&settings.reports, network);
        let all = |order: InputOrder| -> Result<Self, Error> {
            let mut windows = Windows::new(&files, settings, order)?;
            let mut window = None;
            loop {
                match windows.after(window.as_ref())? {
                    Some(next) => window = Some(next),
                    None => return Ok(windows.reading()),
                }
            }
        };
        match all(InputOrder::first_try(&settings.reports)) {
            Err(error) if error.kind() == ErrorKind::Order => all(InputOrder::Any),
            result => result,
        }
    }

    /// True if all input was usable.
    #[must_use]
    pub fn is_complete(&self) -> bool {
        self.failures.is_empty() && !self.warnings.iter().any(Warning::is_unusable_input)
    }
}
