//! The series as an Arrow IPC file: the columns of the Parquet file, in record batches compressed with LZ4.

use std::sync::Arc;

use arrow_array::cast::AsArray;
use arrow_array::types::Int32Type;
use arrow_array::{ArrayRef, RecordBatch, StringArray};
use arrow_ipc::CompressionType;
use arrow_ipc::writer::{FileWriter, IpcWriteOptions};
use arrow_schema::{ArrowError, DataType, Field, Schema, SchemaRef};

use super::columns::SeriesColumns;
use super::kinematics::{KinematicsColumns, SCHEMA};
use crate::integral::EstimateBlock;
use crate::kinematics::KinematicsBlock;
use crate::pipeline::Setup;
use crate::settings::Missing;

/// Makes record batches of blocks.
pub(super) struct ArrowRows {
    own: SeriesColumns,
    schema: SchemaRef,
    /// True where polygons come and go: a file may not change a dictionary, so their names are then plain text.
    plain_names: bool,
}

/// The file that the batches become.
pub(super) struct ArrowFile(FileWriter<Vec<u8>>);

impl ArrowFile {
    fn new(setup: &Setup, schema: &Schema) -> Result<Self, ArrowError> {
        let options = IpcWriteOptions::default();
        let options = options.try_with_compression(Some(CompressionType::LZ4_FRAME))?;
        let metadata = super::file_metadata(setup);
        let metadata = metadata.map(|(key, value)| (key.to_string(), value));
        let schema = schema.clone().with_metadata(metadata.into());
        FileWriter::try_new_with_options(Vec::new(), &schema, options).map(Self)
    }

    /// Appends a batch; the bytes that are ready come back.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn append(&mut self, batch: &RecordBatch) -> Result<Vec<u8>, ArrowError> {
        self.0.write(batch)?;
        Ok(std::mem::take(self.0.get_mut()))
    }

    /// The last bytes of the file.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn finish(mut self) -> Result<Vec<u8>, ArrowError> {
        self.0.finish()?;
        Ok(std::mem::take(self.0.get_mut()))
    }
}

impl ArrowRows {
    /// Starts `polygons.arrow`.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn start(setup: &Setup) -> Result<(Self, ArrowFile), ArrowError> {
        let own = SeriesColumns::new(setup);
        let plain_names = setup.settings.missing == Missing::Remesh;
        let fields = own.schema.fields().iter().map(|field| {
            let field = field.as_ref().clone();
            if plain_names && is_name(&field) {
                field.with_data_type(DataType::Utf8)
            } else {
                field
            }
        });
        let rows = Self {
            schema: Arc::new(Schema::new(fields.collect::<Vec<Field>>())),
            own,
            plain_names,
        };
        let file = ArrowFile::new(setup, &rows.schema)?;
        Ok((rows, file))
    }

    /// Makes a batch of a block: rows by time, then polygon.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn encode(&self, block: &EstimateBlock) -> Result<RecordBatch, ArrowError> {
        let mut columns = self.own.of(block)?;
        if self.plain_names {
            for (field, column) in self.schema.fields().iter().zip(&mut columns) {
                if is_name(field) {
                    *column = plain(column);
                }
            }
        }
        RecordBatch::try_new(Arc::clone(&self.schema), columns)
    }
}

/// True for the columns whose words are not all known at the beginning.
fn is_name(field: &Field) -> bool {
    matches!(field.name().as_str(), "polygon" | "stations")
}

/// The words of a dictionary column.
fn plain(column: &ArrayRef) -> ArrayRef {
    let words = column.as_dictionary::<Int32Type>();
    match words.downcast_dict::<StringArray>() {
        Some(words) => Arc::new(words.into_iter().collect::<StringArray>()),
        None => Arc::clone(column),
    }
}

/// Starts `kinematics.arrow`.
///
/// # Errors
/// The library's refusal.
pub(super) fn kinematics_arrow(
    setup: &Setup,
) -> Result<(KinematicsColumns, ArrowFile), ArrowError> {
    let columns = KinematicsColumns::new(setup);
    Ok((columns, ArrowFile::new(setup, &SCHEMA)?))
}

/// Makes a batch of the kinematics of a block.
///
/// # Errors
/// The library's refusal.
pub(super) fn kinematics_batch(
    columns: &KinematicsColumns,
    block: &KinematicsBlock,
) -> Result<RecordBatch, ArrowError> {
    RecordBatch::try_new(Arc::clone(&SCHEMA), columns.of(block)?)
}
