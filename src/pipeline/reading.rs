//! Reads and checks the reports.

use crate::check::{StationReading, check_range, summarise};
use crate::error::Error;
use crate::report::{FileOutcome, ReportTable, read_reports};
use crate::settings::Settings;
use crate::station::Network;
use crate::tally::Tally;
use crate::warning::Warning;

/// The reports, read, sorted and checked.
#[derive(Debug)]
pub struct Reading {
    /// Rows of the files.
    pub rows: Tally,
    /// The same per file.
    pub files: Vec<FileOutcome>,
    /// Repeats taken out.
    pub repeats: Tally,
    /// The reports.
    pub table: ReportTable,
    /// What each station sent.
    pub stations: Vec<StationReading>,
    /// What the user should know.
    pub warnings: Vec<Warning>,
    /// Files that could not be read.
    pub failures: Vec<Error>,
}

impl Reading {
    /// Reads all report files and flags the reports.
    #[must_use]
    pub fn of(settings: &Settings, network: &Network) -> Self {
        let outcome = read_reports(&settings.reports, network);
        let (mut table, repeats) = ReportTable::new(&outcome.rows, network.len());
        drop(outcome.rows);
        check_range(&mut table, &settings.range);
        let stations = (0..network.len()).map(|s| summarise(&table, s)).collect();
        Self {
            rows: outcome.tally,
            files: outcome.files,
            repeats,
            table,
            stations,
            warnings: outcome.warnings,
            failures: outcome.failures,
        }
    }

    /// True if all input was usable.
    #[must_use]
    pub fn is_complete(&self) -> bool {
        self.failures.is_empty() && !self.warnings.iter().any(Warning::is_unusable_input)
    }
}
