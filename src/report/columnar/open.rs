//! Opens Parquet and Arrow IPC files and takes their rows in batches.

use std::fs::File;
use std::io::{self, Read, Seek};
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::path::Path;

use arrow_array::RecordBatch;
use arrow_schema::{ArrowError, Schema};
use parquet::arrow::ProjectionMask;
use parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder;

use super::ARROW_IPC;
use super::ipc::IpcTable;

/// Rows taken at once.
const BATCH_ROWS: usize = 8192;

/// Runs a step of the libraries. They answer some damaged files with a panic, which is an error of the input here.
pub(super) fn guarded<T>(step: impl FnOnce() -> io::Result<T>) -> io::Result<T> {
    // After a panic nothing of the reader is used again.
    catch_unwind(AssertUnwindSafe(step)).unwrap_or_else(|_| Err(damaged("the file is damaged")))
}

pub(super) fn damaged(message: impl Into<String>) -> io::Error {
    io::Error::new(io::ErrorKind::InvalidData, message.into())
}

pub(super) fn arrow_error(error: ArrowError) -> io::Error {
    match error {
        ArrowError::IoError(_, error) => error,
        other => damaged(other.to_string()),
    }
}

/// A columnar table of which only the columns are known so far.
pub(super) enum Table {
    Parquet(Box<ParquetRecordBatchReaderBuilder<File>>),
    ArrowIpc(Box<IpcTable>),
}

impl Table {
    pub(super) fn open(path: &Path) -> io::Result<Self> {
        let mut file = File::open(path)?;
        let mut start = [0; ARROW_IPC.len()];
        file.read_exact(&mut start)?;
        file.rewind()?;
        if start == ARROW_IPC {
            return Ok(Self::ArrowIpc(Box::new(IpcTable::open(file)?)));
        }
        let builder = ParquetRecordBatchReaderBuilder::try_new(file)
            .map_err(|error| damaged(error.to_string()))?;
        Ok(Self::Parquet(Box::new(builder)))
    }

    pub(super) fn schema(&self) -> &Schema {
        match self {
            Self::Parquet(builder) => builder.schema(),
            Self::ArrowIpc(table) => table.schema(),
        }
    }

    /// The rows, with the wanted columns alone, in the order of the table.
    pub(super) fn batches(self, wanted: &[usize]) -> io::Result<Batches> {
        let source: Box<dyn Iterator<Item = io::Result<RecordBatch>> + Send> = match self {
            Self::Parquet(builder) => {
                let columns =
                    ProjectionMask::roots(builder.parquet_schema(), wanted.iter().copied());
                let reader = builder
                    .with_projection(columns)
                    .with_batch_size(BATCH_ROWS)
                    .build()
                    .map_err(|error| damaged(error.to_string()))?;
                Box::new(reader.map(|batch| batch.map_err(arrow_error)))
            }
            Self::ArrowIpc(table) => Box::new(table.batches(wanted)?),
        };
        Ok(Batches {
            source,
            batch: None,
        })
    }
}

/// The rows of a table.
pub(super) struct Batches {
    source: Box<dyn Iterator<Item = io::Result<RecordBatch>> + Send>,
    /// Rows of the file's own batch that are still to come.
    batch: Option<RecordBatch>,
}

impl Batches {
    /// The next rows, some thousands at most.
    pub(super) fn next_batch(&mut self) -> io::Result<Option<RecordBatch>> {
        let batch = match self.batch.take() {
            Some(batch) => batch,
            None => match self.source.next().transpose()? {
                Some(batch) => batch,
                None => return Ok(None),
            },
        };
        let rows = batch.num_rows();
        if rows <= BATCH_ROWS {
            return Ok(Some(batch));
        }
        self.batch = Some(batch.slice(BATCH_ROWS, rows - BATCH_ROWS));
        Ok(Some(batch.slice(0, BATCH_ROWS)))
    }
}
