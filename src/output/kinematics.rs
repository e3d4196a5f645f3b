//! `kinematics.csv`, `.parquet` and `.arrow`: a row for each time and polygon, in the order of `polygons.csv`; empty or
//! null where a quantity is suppressed or missing.

#[cfg(feature = "parquet")]
use std::sync::{Arc, LazyLock};

#[cfg(feature = "parquet")]
use arrow_array::{
    ArrayRef, DictionaryArray, Float32Array, Float64Array, Int32Array, StringArray,
    TimestampMicrosecondArray, types::Int32Type,
};
#[cfg(feature = "parquet")]
use arrow_schema::{ArrowError, DataType, Field, Schema, SchemaRef, TimeUnit};
#[cfg(feature = "parquet")]
use parquet::arrow::arrow_writer::ArrowRowGroupWriterFactory;
use zmij::Buffer;

use super::csv::{group_name, quoted};
#[cfg(feature = "parquet")]
use super::parquet::{ParquetFile, RowGroup, encode_columns, start_file};
use crate::kinematics::{KinematicsBlock, QUANTITIES, Quantity};
use crate::pipeline::{Outcome, Setup};

/// Writes rows of `kinematics.csv`.
pub(super) struct KinematicsRows {
    names: Vec<String>,
}

impl KinematicsRows {
    pub(super) fn new(setup: &Setup) -> Self {
        let polygons = setup.built.polygons.iter();
        Self {
            names: polygons.map(|p| quoted(&p.id)).collect(),
        }
    }

    pub(super) fn header() -> String {
        let mut out = String::from("time,polygon");
        for quantity in Quantity::ALL {
            for part in [",", quantity.name(), ",", quantity.name(), "_se"] {
                out.push_str(part);
            }
        }
        out.push('\n');
        out
    }

    pub(super) fn encode(&self, block: &KinematicsBlock) -> Vec<u8> {
        let n = block.times.len();
        let mut out = Vec::with_capacity(block.cells.len() * 512);
        let mut buffer = Buffer::new();
        for (t, time) in block.times.iter().enumerate() {
            let time = time.to_string();
            for (p, name) in self.names.iter().enumerate() {
                out.extend_from_slice(time.as_bytes());
                out.push(b',');
                out.extend_from_slice(name.as_bytes());
                let cell = &block.cells[p * n + t];
                for quantity in Quantity::ALL {
                    out.push(b',');
                    if let Some((value, error)) = cell.get(quantity) {
                        out.extend_from_slice(buffer.format(value).as_bytes());
                        out.push(b',');
                        out.extend_from_slice(buffer.format(short(error)).as_bytes());
                    } else {
                        out.push(b',');
                    }
                }
                out.push(b'\n');
            }
        }
        out
    }
}

/// `kinematics_means.csv`: a row for each group of times, polygon and quantity that has values.
#[must_use]
pub fn kinematics_means_csv(setup: &Setup, outcome: &Outcome) -> String {
    let mut out = String::from("group,polygon,quantity,values,mean,mean_se,sd,min,max\n");
    let mut buffer = Buffer::new();
    for (&group, statistics) in &outcome.kinematic_means.0 {
        let name = group_name(setup, group);
        let polygons = setup.built.polygons.iter();
        for (polygon, of_polygon) in polygons.zip(statistics.chunks_exact(QUANTITIES)) {
            let id = quoted(&polygon.id);
            let found = Quantity::ALL.iter().zip(of_polygon);
            for (quantity, s) in found.filter(|(_, s)| s.count > 0) {
                for text in [name.as_str(), &id, quantity.name(), &s.count.to_string()] {
                    out.push_str(text);
                    out.push(',');
                }
                out.push_str(buffer.format(s.mean));
                let ends = [s.smallest, s.largest].map(|end| end.map(|(value, _)| value));
                for number in [s.mean_error(), s.standard_deviation(), ends[0], ends[1]] {
                    out.push(',');
                    if let Some(number) = number {
                        out.push_str(buffer.format(number));
                    }
                }
                out.push('\n');
            }
        }
    }
    out
}

#[expect(
    clippy::cast_possible_truncation,
    reason = "seven digits are enough for an error"
)]
pub(super) fn short(error: f64) -> f32 {
    error as f32
}

/// The columns of `kinematics.parquet` and `kinematics.arrow`.
#[cfg(feature = "parquet")]
pub(super) struct KinematicsColumns {
    polygons: ArrayRef,
}

#[cfg(feature = "parquet")]
pub(super) static SCHEMA: LazyLock<SchemaRef> = LazyLock::new(|| {
    let time = DataType::Timestamp(TimeUnit::Microsecond, Some("UTC".into()));
    let name = DataType::Dictionary(Box::new(DataType::Int32), Box::new(DataType::Utf8));
    let mut fields = vec![
        Field::new("time", time, false),
        Field::new("polygon", name, false),
    ];
    for quantity in Quantity::ALL {
        let field = |name: String, kind| {
            let units = quantity.units().to_string();
            Field::new(name, kind, true).with_metadata([("units".to_string(), units)].into())
        };
        let name = quantity.name();
        fields.push(field(name.to_string(), DataType::Float64));
        fields.push(field(format!("{name}_se"), DataType::Float32));
    }
    Arc::new(Schema::new(fields))
});

#[cfg(feature = "parquet")]
impl KinematicsColumns {
    pub(super) fn new(setup: &Setup) -> Self {
        let names = setup.built.polygons.iter().map(|p| p.id.as_str());
        Self {
            polygons: Arc::new(StringArray::from_iter_values(names)),
        }
    }

    /// The columns of a block: rows by time, then polygon.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn of(&self, block: &KinematicsBlock) -> Result<Vec<ArrayRef>, ArrowError> {
        let (n, polygons) = (block.times.len(), self.polygons.len());
        let times = block.times.iter().map(|time| time.micros());
        let times = times.flat_map(|time| std::iter::repeat_n(time, polygons));
        let keys = (0..n).flat_map(|_| 0..polygons);
        let keys: Int32Array = keys.map(|k| i32::try_from(k).ok()).collect();
        let mut columns: Vec<ArrayRef> = vec![
            Arc::new(TimestampMicrosecondArray::from_iter_values(times).with_timezone("UTC")),
            Arc::new(DictionaryArray::<Int32Type>::try_new(
                keys,
                Arc::clone(&self.polygons),
            )?),
        ];
        let cells = || (0..n).flat_map(|t| (0..polygons).map(move |p| &block.cells[p * n + t]));
        for quantity in Quantity::ALL {
            let values = cells().map(|cell| cell.get(quantity).map(|v| v.0));
            columns.push(Arc::new(values.collect::<Float64Array>()));
            let errors = cells().map(|cell| cell.get(quantity).map(|v| short(v.1)));
            columns.push(Arc::new(errors.collect::<Float32Array>()));
        }
        Ok(columns)
    }
}

/// Encodes blocks as row groups of `kinematics.parquet`.
#[cfg(feature = "parquet")]
pub(super) struct KinematicsParquet {
    factory: ArrowRowGroupWriterFactory,
    columns: KinematicsColumns,
}

/// Starts the file.
///
/// # Errors
/// The library's refusal.
#[cfg(feature = "parquet")]
pub(super) fn kinematics_parquet(
    setup: &Setup,
) -> parquet::errors::Result<(KinematicsParquet, ParquetFile)> {
    let numbers = SCHEMA.fields().iter().skip(2).map(|f| f.name().as_str());
    let numbers: Vec<&str> = numbers.collect();
    let (_, factory, file) = start_file(setup, &SCHEMA, &numbers, &["time"])?;
    let columns = KinematicsColumns::new(setup);
    Ok((KinematicsParquet { factory, columns }, file))
}

#[cfg(feature = "parquet")]
impl KinematicsParquet {
    /// Encodes a block.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn encode(&self, block: &KinematicsBlock) -> parquet::errors::Result<RowGroup> {
        encode_columns(&self.factory, &SCHEMA, &self.columns.of(block)?)
    }
}
