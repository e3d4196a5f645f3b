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

use super::ReportFormat;
use super::format::Columns;
use super::names::Names;
use super::read::PartOutcome;
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

/// Reads a columnar table.
#[cfg(feature = "parquet")]
pub(super) fn read_columnar(
    path: &Path,
    number: u32,
    format: &ReportFormat,
    columns: &Columns,
    names: &Names,
) -> Result<PartOutcome, Error> {
    use super::values::ValueReader;

    let cannot_read = |error: io::Error| Error::read(path, error);
    let file = path.display().to_string();
    let table = open::guarded(|| open::Table::open(path)).map_err(cannot_read)?;
    let layout = layout::Layout::new(table.schema(), &file, format, columns)?;
    let mut batches = open::guarded(|| table.batches(&layout.wanted)).map_err(cannot_read)?;
    let values = ValueReader::new(&file, number, format, columns, names);
    let mut reader = batch::BatchReader::new(&values, &layout);
    loop {
        match open::guarded(|| batches.next_batch()) {
            Ok(Some(batch)) => reader.read(&batch),
            Ok(None) => return Ok(reader.outcome),
            Err(error) if reader.outcome.tally.received == 0 => return Err(cannot_read(error)),
            Err(error) => {
                reader.outcome.ended_early(&file, &error);
                return Ok(reader.outcome);
            }
        }
    }
}

/// Says that columnar tables are not read.
#[cfg(not(feature = "parquet"))]
pub(super) fn read_columnar(
    path: &Path,
    _number: u32,
    _format: &ReportFormat,
    _columns: &Columns,
    _names: &Names,
) -> Result<PartOutcome, Error> {
    let message = "it is a Parquet or Arrow IPC file, and this program was built without the feature `parquet`";
    Err(Error::read(
        path,
        io::Error::new(io::ErrorKind::Unsupported, message),
    ))
}

#[cfg(all(test, feature = "parquet"))]
#[path = "columnar_tests.rs"]
mod tests;
