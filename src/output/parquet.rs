//! The series as Parquet: the columns of `polygons.csv`, typed; null for a missing value.
//!
//! A block of estimates is one row group. Row groups are encoded where the block was made, in parallel, and put one
//! after the other in the order of time.

use std::sync::Arc;

use arrow_array::types::Int32Type;
use arrow_array::{
    ArrayRef, DictionaryArray, Float32Array, Float64Array, Int32Array, StringArray,
    TimestampMicrosecondArray, UInt8Array,
};
use arrow_schema::{DataType, Field, Schema, SchemaRef, TimeUnit};
use parquet::arrow::ArrowWriter;
use parquet::arrow::arrow_writer::{ArrowColumnChunk, ArrowRowGroupWriterFactory, compute_leaves};
use parquet::basic::{Compression, ZstdLevel};
use parquet::errors::Result;
use parquet::file::metadata::KeyValue;
use parquet::file::properties::WriterProperties;
use parquet::file::writer::SerializedFileWriter;

use super::csv::station_list;
use crate::check::Flag;
use crate::integral::{EstimateBlock, Sense};
use crate::pipeline::Setup;

/// Columns that hold new numbers in every row: a dictionary of them would only cost time.
const NUMBERS: [&str; 5] = [
    "vorticity",
    "vorticity_se",
    "divergence",
    "divergence_se",
    "absolute_vorticity",
];

/// Encodes blocks of estimates as row groups.
pub struct ParquetRows {
    schema: SchemaRef,
    factory: ArrowRowGroupWriterFactory,
    polygons: ArrayRef,
    stations: ArrayRef,
    senses: ArrayRef,
    area: Vec<f64>,
    planetary: Vec<f64>,
}

/// The file that the row groups become.
pub struct ParquetFile {
    writer: SerializedFileWriter<Vec<u8>>,
}

/// An encoded block.
pub struct RowGroup(Vec<ArrowColumnChunk>);

/// Starts a file for the series of a network.
///
/// # Errors
/// The library's refusal.
pub fn parquet_series(setup: &Setup) -> Result<(ParquetRows, ParquetFile)> {
    let polygons = &setup.built.polygons;
    let schema = Arc::new(schema());
    let mut properties = WriterProperties::builder()
        .set_compression(Compression::ZSTD(ZstdLevel::try_new(1)?))
        .set_key_value_metadata(Some(vec![
            KeyValue::new(
                "program".into(),
                format!("gyremesh {}", env!("CARGO_PKG_VERSION")),
            ),
            KeyValue::new("network".into(), setup.settings.name.clone()),
            KeyValue::new("caution".into(), super::CAUTION.to_string()),
            KeyValue::new("error_bars".into(), super::ERROR_BARS.to_string()),
        ]));
    for name in NUMBERS {
        properties = properties.set_column_dictionary_enabled(name.into(), false);
    }
    let writer = ArrowWriter::try_new(Vec::new(), Arc::clone(&schema), Some(properties.build()))?;
    let (writer, factory) = writer.into_serialized_writer()?;
    let rows = ParquetRows {
        schema,
        factory,
        polygons: Arc::new(StringArray::from_iter_values(
            polygons.iter().map(|p| &p.id),
        )),
        stations: Arc::new(StringArray::from_iter_values(
            polygons.iter().map(|p| station_list(p, &setup.network)),
        )),
        senses: Arc::new(StringArray::from(vec![
            Sense::Cyclonic.name(),
            Sense::Anticyclonic.name(),
        ])),
        area: polygons.iter().map(|p| p.shape.area / 1e6).collect(),
        planetary: setup.planetary.clone(),
    };
    Ok((rows, ParquetFile { writer }))
}

/// The columns of the contract, with their units.
fn schema() -> Schema {
    let dictionary = || DataType::Dictionary(Box::new(DataType::Int32), Box::new(DataType::Utf8));
    let field = |name: &str, kind: DataType, nullable: bool, units: &str| {
        let field = Field::new(name, kind, nullable);
        if units.is_empty() {
            field
        } else {
            field.with_metadata([("units".to_string(), units.to_string())].into())
        }
    };
    let number =
        |name: &str, nullable: bool, units: &str| field(name, DataType::Float64, nullable, units);
    let time = DataType::Timestamp(TimeUnit::Microsecond, Some("UTC".into()));
    Schema::new(vec![
        field("time", time, false, ""),
        field("polygon", dictionary(), false, ""),
        field("stations", dictionary(), false, ""),
        number("area_km2", false, "km2"),
        number("vorticity", true, "s-1"),
        number("vorticity_se", true, "s-1"),
        number("divergence", true, "s-1"),
        number("divergence_se", true, "s-1"),
        number("planetary_vorticity", false, "s-1"),
        number("absolute_vorticity", true, "s-1"),
        field("flag", DataType::UInt8, false, ""),
        field("sense", dictionary(), true, ""),
        field("age_s", DataType::Float32, true, "s"),
    ])
}

impl ParquetRows {
    /// Encodes a block: rows by time, then polygon.
    ///
    /// # Errors
    /// The library's refusal.
    pub fn encode(&self, block: &EstimateBlock) -> Result<RowGroup> {
        let columns = self.columns(block)?;
        let mut writers = self.factory.create_column_writers(0)?.into_iter();
        let mut chunks = Vec::with_capacity(columns.len());
        for (field, column) in self.schema.fields().iter().zip(&columns) {
            for leaf in compute_leaves(field, column)? {
                // There is a writer for each leaf of the schema.
                if let Some(mut writer) = writers.next() {
                    writer.write(&leaf)?;
                    chunks.push(writer.close()?);
                }
            }
        }
        Ok(RowGroup(chunks))
    }

    fn columns(&self, block: &EstimateBlock) -> Result<Vec<ArrayRef>> {
        let (n, polygons) = (block.times.len(), self.area.len());
        let cells = || (0..n).flat_map(move |t| (0..polygons).map(move |p| (t, p, p * n + t)));
        let there = |cell: usize| block.flag[cell] != Flag::Missing;
        let values = |column: &[f64]| -> ArrayRef {
            let values = cells().map(|(_, _, cell)| there(cell).then(|| column[cell]));
            Arc::new(values.collect::<Float64Array>())
        };
        let fixed = |column: &[f64]| -> ArrayRef {
            Arc::new(Float64Array::from_iter_values(
                cells().map(|(_, p, _)| column[p]),
            ))
        };
        let keys: Int32Array = cells().map(|(_, p, _)| i32::try_from(p).ok()).collect();
        let named = |keys: Int32Array, names: &ArrayRef| -> Result<ArrayRef> {
            Ok(Arc::new(DictionaryArray::<Int32Type>::try_new(
                keys,
                Arc::clone(names),
            )?))
        };
        let times = cells().map(|(t, _, _)| block.times[t].micros());
        let absolute = cells()
            .map(|(_, p, cell)| there(cell).then(|| block.vorticity[cell] + self.planetary[p]));
        let sense: Int32Array = cells()
            .map(|(_, p, cell)| {
                let sense = Sense::of(block.vorticity[cell], self.planetary[p]);
                sense
                    .filter(|_| there(cell))
                    .map(|s| i32::from(s == Sense::Anticyclonic))
            })
            .collect();
        let age = cells().map(|(_, _, cell)| there(cell).then(|| block.age[cell]));
        let flag = cells().map(|(_, _, cell)| block.flag[cell].value());
        Ok(vec![
            Arc::new(TimestampMicrosecondArray::from_iter_values(times).with_timezone("UTC")),
            named(keys.clone(), &self.polygons)?,
            named(keys, &self.stations)?,
            fixed(&self.area),
            values(&block.vorticity),
            values(&block.vorticity_se),
            values(&block.divergence),
            values(&block.divergence_se),
            fixed(&self.planetary),
            Arc::new(absolute.collect::<Float64Array>()),
            Arc::new(UInt8Array::from_iter_values(flag)),
            named(sense, &self.senses)?,
            Arc::new(age.collect::<Float32Array>()),
        ])
    }
}

impl ParquetFile {
    /// Appends an encoded block; the bytes that are ready come back.
    ///
    /// # Errors
    /// The library's refusal.
    pub fn append(&mut self, group: RowGroup) -> Result<Vec<u8>> {
        let mut row_group = self.writer.next_row_group()?;
        for chunk in group.0 {
            chunk.append_to_row_group(&mut row_group)?;
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
