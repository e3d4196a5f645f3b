//! Columns of the Parquet series that are the same in every block of as many times: encoded once, copied then.

use std::collections::HashMap;
use std::sync::{Arc, Mutex, PoisonError};

use arrow_array::types::Int32Type;
use arrow_array::{
    ArrayRef, DictionaryArray, Float32Array, Float64Array, Int32Array, RecordBatch, new_null_array,
};
use arrow_schema::{Schema, SchemaRef};
use bytes::Bytes;
use parquet::arrow::ArrowWriter;
use parquet::column::writer::ColumnCloseResult;
use parquet::errors::Result;
use parquet::file::metadata::ParquetMetaData;
use parquet::file::properties::WriterProperties;
use parquet::file::writer::SerializedRowGroupWriter;

use super::columns::SeriesColumns;

/// What stands in every row of a polygon, encoded.
pub(super) struct FixedColumns {
    schema: SchemaRef,
    properties: WriterProperties,
    /// By the number of times. There are at most as many as a block has times.
    templates: Mutex<HashMap<usize, Arc<Template>>>,
}

/// An encoded row group of which some columns are of use.
pub(super) struct Template {
    bytes: Bytes,
    metadata: ParquetMetaData,
}

impl FixedColumns {
    pub(super) fn new(schema: &SchemaRef, properties: WriterProperties) -> Self {
        // The columns that are not of use may be null here.
        let nullable = schema.fields().iter().map(|f| f.as_ref().clone());
        let used = [
            "polygon",
            "stations",
            "area_km2",
            "planetary_vorticity",
            "vorticity_se_timing",
            "divergence_se_timing",
        ];
        let nullable = nullable.map(|f| {
            let is_used = used.contains(&f.name().as_str());
            let may_be_null = f.is_nullable() || !is_used;
            f.with_nullable(may_be_null)
        });
        Self {
            schema: Arc::new(Schema::new(nullable.collect::<Vec<_>>())),
            properties,
            templates: Mutex::default(),
        }
    }

    /// The fixed columns of a block of this many times.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn of_times(&self, times: usize, own: &SeriesColumns) -> Result<Arc<Template>> {
        let mut templates = self
            .templates
            .lock()
            .unwrap_or_else(PoisonError::into_inner);
        if let Some(template) = templates.get(&times) {
            return Ok(Arc::clone(template));
        }
        let template = Arc::new(self.encode(times, own)?);
        templates.insert(times, Arc::clone(&template));
        Ok(template)
    }

    fn encode(&self, times: usize, own: &SeriesColumns) -> Result<Template> {
        let rows = times * own.area.len();
        let numbers = |values: &[f64]| -> ArrayRef {
            let repeated = std::iter::repeat_n(values, times).flatten();
            Arc::new(Float64Array::from_iter_values(repeated.copied()))
        };
        let named = |names: &ArrayRef| -> Result<ArrayRef> {
            let keys = (0..times).flat_map(|_| 0..names.len());
            let keys: Int32Array = keys.map(|k| i32::try_from(k).ok()).collect();
            let array = DictionaryArray::<Int32Type>::try_new(keys, Arc::clone(names))?;
            Ok(Arc::new(array))
        };
        let columns = self.schema.fields().iter().map(|field| {
            Ok(match field.name().as_str() {
                "polygon" => named(&own.polygons)?,
                "stations" => named(&own.stations)?,
                "area_km2" => numbers(&own.area),
                "planetary_vorticity" => numbers(&own.planetary),
                // Where every report stands at its analysis time.
                "vorticity_se_timing" | "divergence_se_timing" => {
                    Arc::new(Float32Array::from(vec![0.0; rows]))
                }
                _ => new_null_array(field.data_type(), rows),
            })
        });
        let columns = columns.collect::<Result<Vec<ArrayRef>>>()?;
        let batch = RecordBatch::try_new(Arc::clone(&self.schema), columns)?;
        let mut bytes = Vec::new();
        let properties = self
            .properties
            .clone()
            .into_builder()
            .set_max_row_group_row_count(Some(rows.max(1)))
            .build();
        let mut writer =
            ArrowWriter::try_new(&mut bytes, Arc::clone(&self.schema), Some(properties))?;
        writer.write(&batch)?;
        let metadata = writer.close()?;
        Ok(Template {
            bytes: bytes.into(),
            metadata,
        })
    }
}

impl Template {
    /// Copies column `k` into a row group.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn append(
        &self,
        k: usize,
        group: &mut SerializedRowGroupWriter<'_, Vec<u8>>,
    ) -> Result<()> {
        let of_use = self.metadata.row_group(0);
        let metadata = of_use.column(k).clone();
        let close = ColumnCloseResult {
            bytes_written: u64::try_from(metadata.compressed_size()).unwrap_or(0),
            rows_written: u64::try_from(of_use.num_rows()).unwrap_or(0),
            metadata,
            bloom_filter: None,
            column_index: None,
            offset_index: None,
        };
        group.append_column(&self.bytes, close)
    }
}
