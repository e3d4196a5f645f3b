//! Columnar tables: Parquet and Arrow IPC files (also called Feather). Long layout: one row for each station and time.
//!
//! Columns are found by name, whatever their types are, as long as these hold what is asked for. Rows count from 1.

#[cfg(feature = "parquet")]
mod batch;
#[cfg(feature = "parquet")]
mod cells;
#[cfg(feature = "parquet")]
mod ipc;
#[cfg(feature = "parquet")]
mod layout;
#[cfg(feature = "parquet")]
mod open;
#[cfg(feature = "parquet")]
mod times;

use std::fs::File;
use std::io::{self, Read};
use std::path::Path;

use super::read::PartOutcome;
use super::values::ValueReader;
use crate::error::Error;

/// First bytes of Parquet and of Arrow IPC files (the format documents of Apache Parquet and Apache Arrow).
pub(super) const PARQUET: &[u8] = b"PAR1";
pub(super) const ARROW_IPC: &[u8] = b"ARROW1";

/// True if a file that starts so is columnar.
pub(super) fn is_columnar(start: &[u8]) -> bool {
    start.starts_with(PARQUET) || start.starts_with(ARROW_IPC)
}

/// True if the content of a file is columnar. False for what is no plain file: such tables are read from their end.
pub(super) fn is_columnar_file(path: &Path) -> bool {
    if !path.is_file() {
        return false;
    }
    let mut start = Vec::new();
    let read = File::open(path).and_then(|file| file.take(8).read_to_end(&mut start));
    read.is_ok() && is_columnar(&start)
}

/// A columnar table as it is read, some batches at a time.
#[cfg(feature = "parquet")]
pub(super) struct ColumnarFeed<'a> {
    values: ValueReader<'a>,
    layout: layout::Layout,
    batches: open::Batches,
    /// Rows read so far.
    line: u64,
}

#[cfg(feature = "parquet")]
impl<'a> ColumnarFeed<'a> {
    pub(super) fn open(path: &Path, values: ValueReader<'a>) -> Result<Self, Error> {
        let cannot_read = |error: io::Error| Error::read(path, error);
        let table = open::guarded(|| open::Table::open(path)).map_err(cannot_read)?;
        let layout =
            layout::Layout::new(table.schema(), values.file, values.format, values.columns)?;
        let batches = open::guarded(|| table.batches(&layout.wanted)).map_err(cannot_read)?;
        Ok(Self {
            values,
            layout,
            batches,
            line: 0,
        })
    }

    /// Reads at most `at_once` batches. The second value tells whether the table has ended.
    ///
    /// # Errors
    /// The table cannot be read at all; once rows have come, a failure ends the table and is counted.
    pub(super) fn turn(
        &mut self,
        path: &Path,
        at_once: usize,
    ) -> Result<(PartOutcome, bool), Error> {
        let mut reader = batch::BatchReader::new(&self.values, &self.layout, self.line);
        let mut ended = false;
        for _ in 0..at_once {
            match open::guarded(|| self.batches.next_batch()) {
                Ok(Some(batch)) => reader.read(&batch),
                Ok(None) => ended = true,
                Err(error) if reader.line == 0 => return Err(Error::read(path, error)),
                Err(error) => {
                    reader.outcome.books.ended_early(self.values.file, &error);
                    ended = true;
                }
            }
            if ended {
                break;
            }
        }
        self.line = reader.line;
        Ok((reader.outcome, ended))
    }
}

/// Says that columnar tables are not read.
#[cfg(not(feature = "parquet"))]
pub(super) struct ColumnarFeed<'a>(std::marker::PhantomData<&'a ()>);

#[cfg(not(feature = "parquet"))]
impl<'a> ColumnarFeed<'a> {
    pub(super) fn open(path: &Path, _values: ValueReader<'a>) -> Result<Self, Error> {
        let message = "it is a Parquet or Arrow IPC file, and this program was built without the feature `parquet`";
        Err(Error::read(
            path,
            io::Error::new(io::ErrorKind::Unsupported, message),
        ))
    }

    pub(super) fn turn(
        &mut self,
        _path: &Path,
        _at_once: usize,
    ) -> Result<(PartOutcome, bool), Error> {
        Ok((PartOutcome::default(), true))
    }
}

#[cfg(all(test, feature = "parquet"))]
#[path = "columnar_tests.rs"]
mod tests;
