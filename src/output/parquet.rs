//! The series as Parquet: the columns of `polygons.csv`, typed; null for a missing value.
//!
//! A block of estimates is one row group. Row groups are encoded where the block was made, in parallel, and put one
//! after the other in the order of time.

use std::sync::Arc;

use arrow_array::types::Int32Type;
use arrow_array::{
    ArrayRef, BooleanArray, DictionaryArray, Float32Array, Float64Array, Int32Array,
    TimestampMicrosecondArray, UInt8Array, new_null_array,
};
use arrow_buffer::NullBuffer;
use arrow_schema::{DataType, SchemaRef};
use parquet::arrow::ArrowWriter;
use parquet::arrow::arrow_writer::{ArrowColumnChunk, ArrowRowGroupWriterFactory, compute_leaves};
use parquet::basic::{Compression, Encoding, ZstdLevel};
use parquet::errors::Result;
use parquet::file::metadata::KeyValue;
use parquet::file::properties::{EnabledStatistics, WriterProperties};
use parquet::file::writer::SerializedFileWriter;

use super::columns::SeriesColumns;
use super::template::{FixedColumns, Template};
use crate::integral::{Cause, EstimateBlock, Sense};
use crate::pipeline::Setup;

/// Columns of numbers that differ from row to row: a dictionary of them would only cost time, their bytes side by side
/// compress best.
const NUMBERS: [&str; 12] = [
    "vorticity",
    "vorticity_se",
    "divergence",
    "divergence_se",
    "absolute_vorticity",
    "age_s",
    "vorticity_se_instrument",
    "vorticity_se_sampling",
    "vorticity_se_timing",
    "divergence_se_instrument",
    "divergence_se_sampling",
    "divergence_se_timing",
];
/// Columns of integers that change little from row to row.
const STEPS: [&str; 2] = ["time", "flag"];

/// Encodes blocks of estimates as row groups.
pub(super) struct ParquetRows {
    own: SeriesColumns,
    factory: ArrowRowGroupWriterFactory,
    fixed: FixedColumns,
}

/// The file that the row groups become.
pub struct ParquetFile {
    writer: SerializedFileWriter<Vec<u8>>,
}

/// An encoded block: its columns in the order of the schema.
pub struct RowGroup(Vec<EncodedColumn>);

enum EncodedColumn {
    Own(Box<ArrowColumnChunk>),
    /// Column `k` of a template.
    Fixed(Arc<Template>, usize),
}

/// Starts a file for the series of a network.
///
/// # Errors
/// The library's refusal.
pub(super) fn parquet_series(setup: &Setup) -> Result<(ParquetRows, ParquetFile)> {
    let own = SeriesColumns::new(setup);
    let (properties, factory, file) = start_file(setup, &own.schema, &NUMBERS, &STEPS)?;
    let fixed = FixedColumns::new(&own.schema, properties);
    let rows = ParquetRows {
        own,
        factory,
        fixed,
    };
    Ok((rows, file))
}

/// Starts a file with columns of numbers and of steps.
///
/// # Errors
/// The library's refusal.
pub(super) fn start_file(
    setup: &Setup,
    schema: &SchemaRef,
    numbers: &[&str],
    steps: &[&str],
) -> Result<(WriterProperties, ArrowRowGroupWriterFactory, ParquetFile)> {
    let mut properties = WriterProperties::builder()
        .set_compression(Compression::ZSTD(ZstdLevel::try_new(1)?))
        .set_statistics_enabled(EnabledStatistics::Chunk)
        // The copied columns have none, and all columns must be alike.
        .set_offset_index_disabled(true)
        .set_key_value_metadata(Some(
            super::file_metadata(setup)
                .map(|(key, value)| KeyValue::new(key.into(), value))
                .into(),
        ));
    for (names, encoding) in [
        (numbers, Encoding::BYTE_STREAM_SPLIT),
        (steps, Encoding::DELTA_BINARY_PACKED),
    ] {
        for &name in names {
            properties = properties
                .set_column_dictionary_enabled(name.into(), false)
                .set_column_encoding(name.into(), encoding);
        }
    }
    let properties = properties.build();
    let writer = ArrowWriter::try_new(Vec::new(), Arc::clone(schema), Some(properties.clone()))?;
    let (writer, factory) = writer.into_serialized_writer()?;
    Ok((properties, factory, ParquetFile { writer }))
}

/// Encodes columns, each of one leaf, as a row group.
///
/// # Errors
/// The library's refusal.
pub(super) fn encode_columns(
    factory: &ArrowRowGroupWriterFactory,
    schema: &SchemaRef,
    columns: &[ArrayRef],
) -> Result<RowGroup> {
    let writers = factory.create_column_writers(0)?;
    let mut encoded = Vec::with_capacity(columns.len());
    for ((field, column), mut writer) in schema.fields().iter().zip(columns).zip(writers) {
        for leaf in compute_leaves(field, column)? {
            writer.write(&leaf)?;
        }
        encoded.push(EncodedColumn::Own(Box::new(writer.close()?)));
    }
    Ok(RowGroup(encoded))
}

impl ParquetRows {
    /// Encodes a block: rows by time, then polygon.
    ///
    /// # Errors
    /// The library's refusal.
    pub fn encode(&self, block: &EstimateBlock) -> Result<RowGroup> {
        let template = self.fixed.of_times(block.times.len(), &self.own)?;
        let columns = self.columns(block)?;
        let writers = self.factory.create_column_writers(0)?;
        let mut encoded = Vec::with_capacity(columns.len());
        // Every column of the schema is one leaf.
        for (k, ((field, column), mut writer)) in self
            .own
            .schema
            .fields()
            .iter()
            .zip(&columns)
            .zip(writers)
            .enumerate()
        {
            let Some(column) = column else {
                encoded.push(EncodedColumn::Fixed(Arc::clone(&template), k));
                continue;
            };
            for leaf in compute_leaves(field, column)? {
                writer.write(&leaf)?;
            }
            encoded.push(EncodedColumn::Own(Box::new(writer.close()?)));
        }
        Ok(RowGroup(encoded))
    }

    /// The columns of a block; `None` for those that are the same in every block of as many times.
    fn columns(&self, block: &EstimateBlock) -> Result<Vec<Option<ArrayRef>>> {
        if !block.absent.is_empty() {
            let columns = self.own.of(block)?;
            return Ok(columns.into_iter().map(Some).collect());
        }
        let (n, polygons) = (block.times.len(), self.own.planetary.len());
        let all_there = block.flag.iter().all(|flag| flag.is_usable());
        let there: Option<NullBuffer> =
            (!all_there).then(|| by_time(&block.flag, n, |flag, _| flag.is_usable()).into());
        let values = |column: &[f64]| -> Option<ArrayRef> {
            let values = by_time(column, n, |&value, _| value);
            Some(Arc::new(Float64Array::new(values.into(), there.clone())))
        };
        let absolute = by_time(&block.vorticity, n, |&vorticity, polygon| {
            vorticity + self.own.planetary[polygon]
        });
        let sense = by_time(&block.vorticity, n, |&vorticity, polygon| {
            Sense::of(vorticity, self.own.planetary[polygon])
        });
        let sense: Int32Array = sense
            .into_iter()
            .enumerate()
            .map(|(row, sense)| {
                let is_there = there.as_ref().is_none_or(|there| there.is_valid(row));
                let sense = sense.filter(|_| is_there);
                sense.map(|s| i32::from(s == Sense::Anticyclonic))
            })
            .collect();
        let times = block.times.iter().map(|time| time.micros());
        let times = times.flat_map(|time| std::iter::repeat_n(time, polygons));
        let age = by_time(&block.age, n, |&age, _| age);
        let flag = by_time(&block.flag, n, |flag, _| flag.value());
        let part = |column: &[f64], asked_for: bool| -> Option<ArrayRef> {
            if !asked_for {
                return Some(new_null_array(&DataType::Float32, column.len()));
            }
            #[expect(
                clippy::cast_possible_truncation,
                reason = "seven digits are enough for a part of an error"
            )]
            let values = by_time(column, n, |&value, _| value as f32);
            Some(Arc::new(Float32Array::new(values.into(), there.clone())))
        };
        let no_ages =
            self.own.complete && there.is_none() && block.age.iter().all(|&age| age <= 0.0);
        let timing = |column: &[f64]| {
            if no_ages {
                None
            } else {
                part(column, self.own.complete)
            }
        };
        let called = |column: &[bool]| -> Option<ArrayRef> {
            let values = by_time(column, n, |&value, _| value);
            Some(Arc::new(BooleanArray::new(values.into(), there.clone())))
        };
        let (z, d) = (&block.budget.vorticity, &block.budget.divergence);
        Ok(vec![
            Some(Arc::new(
                TimestampMicrosecondArray::from_iter_values(times).with_timezone("UTC"),
            )),
            None,
            None,
            None,
            values(&block.vorticity),
            values(&block.vorticity_se),
            values(&block.divergence),
            values(&block.divergence_se),
            None,
            Some(Arc::new(Float64Array::new(absolute.into(), there.clone()))),
            Some(Arc::new(UInt8Array::from(flag))),
            Some(Arc::new(DictionaryArray::<Int32Type>::try_new(
                sense,
                Arc::clone(&self.own.senses),
            )?)),
            Some(Arc::new(Float32Array::new(age.into(), there.clone()))),
            part(&z.instrument, true),
            part(&z.sampling, self.own.complete),
            timing(&z.timing),
            part(&d.instrument, true),
            part(&d.sampling, self.own.complete),
            timing(&d.timing),
            called(&block.significant[0]),
            called(&block.significant[1]),
            self.reason(block)?,
        ])
    }
}

impl ParquetRows {
    /// Why estimates are flagged; `None` where none is.
    fn reason(&self, block: &EstimateBlock) -> Result<Option<ArrayRef>> {
        if block.causes.is_empty() {
            return Ok(None);
        }
        let index = |cause: &Option<Cause>, _| {
            let place = self.own.of_reasons.index((*cause)?);
            i32::try_from(place).ok()
        };
        let keys: Int32Array = by_time(&block.causes, block.times.len(), index)
            .into_iter()
            .collect();
        let array = DictionaryArray::<Int32Type>::try_new(keys, Arc::clone(&self.own.reasons))?;
        Ok(Some(Arc::new(array)))
    }
}

/// A column of a block, which stands by polygon, by time: what `of` makes of each value and the number of its polygon.
fn by_time<T, U>(column: &[T], times: usize, of: impl Fn(&T, usize) -> U) -> Vec<U> {
    let polygons = column.len() / times.max(1);
    let mut out = Vec::with_capacity(column.len());
    for t in 0..times {
        out.extend((0..polygons).map(|polygon| of(&column[polygon * times + t], polygon)));
    }
    out
}

impl ParquetFile {
    /// Appends an encoded block; the bytes that are ready come back.
    ///
    /// # Errors
    /// The library's refusal.
    pub fn append(&mut self, group: RowGroup) -> Result<Vec<u8>> {
        let mut row_group = self.writer.next_row_group()?;
        for column in group.0 {
            match column {
                EncodedColumn::Own(chunk) => chunk.append_to_row_group(&mut row_group)?,
                EncodedColumn::Fixed(template, k) => template.append(k, &mut row_group)?,
            }
        }
        row_group.close()?;
        Ok(std::mem::take(self.writer.inner_mut()))
    }

    /// The last bytes of the file.
    ///
    /// # Errors
    /// The library's refusal.
    pub fn finish(mut self) -> Result<Vec<u8>> {
        self.writer.finish()?;
        Ok(std::mem::take(self.writer.inner_mut()))
    }
}
