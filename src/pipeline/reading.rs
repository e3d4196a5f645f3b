//! What came of reading and checking the reports.

use super::neighbours::NeighbourRun;
use super::{Window, Windows};
use crate::check::{Explained, Flag, StationReading};
use crate::error::{Error, ErrorKind};
use crate::report::{Conflict, FileOutcome, InputOrder, ReportFiles};
use crate::settings::Settings;
use crate::station::Network;
use crate::tally::Tally;
use crate::time::Time;
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
    /// The tests of the reports that were to be explained.
    pub explained: Vec<Explained>,
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
        let all = |order| Self::with(settings, network, order, None, |_, _| Ok(()));
        match all(InputOrder::first_try(&settings.reports)) {
            Err(error) if error.kind() == ErrorKind::Order => all(InputOrder::Any),
            result => result,
        }
    }

    /// Reads and checks the reports in an order; `explain` is the station and time whose reports are to be explained,
    /// and `each` is given every window, with the flag of the neighbour test for each of its reports (none where the test
    /// is not made).
    ///
    /// # Errors
    /// As [`Windows::after`]: reports that are not in the order that they should have ([`Error::NotInOrder`]), for one;
    /// whatever `each` returns.
    pub fn with(
        settings: &Settings,
        network: &Network,
        order: InputOrder,
        explain: Option<(usize, Time)>,
        mut each: impl FnMut(&Window, &[Flag]) -> Result<(), Error>,
    ) -> Result<Self, Error> {
        let files = ReportFiles::new(&settings.reports, network);
        let mut windows = Windows::new(&files, settings, order)?;
        if let Some((station, at)) = explain {
            windows.listen(station, at);
        }
        let mut neighbours = NeighbourRun::new(settings, network, explain);
        let mut window = None;
        while let Some(next) = windows.after(window.as_ref())? {
            let flags = neighbours.as_mut().map(|n| n.window(&next));
            each(&next, &flags.unwrap_or_default())?;
            window = Some(next);
        }
        let mut reading = windows.reading();
        if let Some(neighbours) = neighbours {
            neighbours.finish(&mut reading.stations, &mut reading.explained);
        }
        Ok(reading)
    }

    /// True if all input was usable.
    #[must_use]
    pub fn is_complete(&self) -> bool {
        self.failures.is_empty() && !self.warnings.iter().any(Warning::is_unusable_input)
    }
}
