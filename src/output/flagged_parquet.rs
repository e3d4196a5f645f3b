//! `reports_flagged.parquet`: the columns of `reports_flagged.csv`, typed; null for a missing value.

use std::sync::Arc;

use arrow_array::types::Int32Type;
use arrow_array::{
    ArrayRef, DictionaryArray, Float64Array, Int32Array, RecordBatch, StringArray,
    TimestampMicrosecondArray, UInt8Array, UInt32Array,
};
use arrow_schema::{DataType, Field, Schema, SchemaRef, TimeUnit};
use parquet::arrow::ArrowWriter;
use parquet::basic::{Compression, ZstdLevel};
use parquet::errors::Result;
use parquet::file::metadata::KeyValue;
use parquet::file::properties::WriterProperties;

use super::flagged::{CHUNK, JudgedReports};
use crate::check::Test;
use crate::settings::Settings;
use crate::station::Network;
use crate::units::FromDirection;

/// Rows of a row group, give or take a chunk: some MB, whatever the length of the archive.
const ROW_GROUP: usize = 1 << 17;

/// Encodes reports with their flags.
pub(super) struct FlaggedParquet {
    schema: SchemaRef,
    writer: ArrowWriter<Vec<u8>>,
    stations: ArrayRef,
    files: ArrayRef,
}

impl FlaggedParquet {
    /// Starts a file.
    pub(super) fn new(settings: &Settings, network: &Network) -> Result<Self> {
        let schema = Arc::new(schema());
        let properties = WriterProperties::builder()
            .set_compression(Compression::ZSTD(ZstdLevel::try_new(1)?))
            .set_key_value_metadata(Some(vec![
                KeyValue::new(
                    "program".into(),
                    format!("gyremesh {}", env!("CARGO_PKG_VERSION")),
                ),
                KeyValue::new("network".into(), settings.name.clone()),
                KeyValue::new(
                    "flags".into(),
                    "IOOS QARTOD: 1 pass, 2 not evaluated, 3 suspect, 4 fail, 9 missing"
                        .to_string(),
                ),
            ]))
            .build();
        let stations = network.stations().iter().map(|s| Some(s.id.as_str()));
        let files = settings.reports.iter().flat_map(|source| &source.files);
        let files = files.map(|f| Some(f.display().to_string()));
        Ok(Self {
            writer: ArrowWriter::try_new(Vec::new(), Arc::clone(&schema), Some(properties))?,
            schema,
            stations: Arc::new(stations.collect::<StringArray>()),
            files: Arc::new(files.collect::<StringArray>()),
        })
    }

    /// Adds reports; the bytes that are ready come back.
    pub(super) fn append(&mut self, reports: &JudgedReports) -> Result<Vec<u8>> {
        for chunk in reports.rows.chunks(CHUNK) {
            let batch = self.batch(reports, chunk)?;
            self.writer.write(&batch)?;
            if self.writer.in_progress_rows() >= ROW_GROUP {
                self.writer.flush()?;
            }
        }
        Ok(std::mem::take(self.writer.inner_mut()))
    }

    /// The last bytes of the file.
    pub(super) fn finish(mut self) -> Result<Vec<u8>> {
        self.writer.finish()?;
        Ok(std::mem::take(self.writer.inner_mut()))
    }

    fn batch(&self, reports: &JudgedReports, chunk: &[(i64, usize, usize)]) -> Result<RecordBatch> {
        let table = reports.table;
        let rows = || chunk.iter().map(|r| r.2);
        let number = |of: &dyn Fn(usize) -> Option<f64>| -> ArrayRef {
            Arc::new(rows().map(of).collect::<Float64Array>())
        };
        let keys = |key: &mut dyn Iterator<Item = Option<usize>>, values: &ArrayRef| {
            let there = |key: Option<usize>| {
                let key = key.filter(|&key| key < values.len())?;
                i32::try_from(key).ok()
            };
            let keys: Int32Array = key.map(there).collect();
            DictionaryArray::<Int32Type>::try_new(keys, Arc::clone(values))
        };
        let flags = |of: &dyn Fn(usize) -> u8| -> ArrayRef {
            Arc::new(rows().map(of).collect::<UInt8Array>())
        };
        let times = TimestampMicrosecondArray::from_iter_values(chunk.iter().map(|r| r.0));
        let stations = keys(&mut chunk.iter().map(|r| Some(r.1)), &self.stations)?;
        let files = keys(
            &mut rows().map(|i| Some(usize::from(table.origin(i).0))),
            &self.files,
        )?;
        let lines = rows().map(|i| table.origin(i).1);
        let mut columns: Vec<ArrayRef> = vec![
            Arc::new(times.with_timezone("UTC")),
            Arc::new(stations),
            number(&|i| table.direction(i).map(FromDirection::degrees)),
            number(&|i| table.speed(i)),
            number(&|i| table.gust(i)),
            flags(&|i| reports.flag(i).value()),
        ];
        for test in Test::ALL {
            columns.push(flags(&|i| reports.test_flag(i, test).value()));
        }
        columns.push(Arc::new(files));
        columns.push(Arc::new(UInt32Array::from_iter_values(lines)));
        Ok(RecordBatch::try_new(Arc::clone(&self.schema), columns)?)
    }
}

/// The columns, with their units.
fn schema() -> Schema {
    let dictionary = || DataType::Dictionary(Box::new(DataType::Int32), Box::new(DataType::Utf8));
    let number = |name: &str, units: &str| {
        let field = Field::new(name, DataType::Float64, true);
        field.with_metadata([("units".to_string(), units.to_string())].into())
    };
    let flag = |name: &str| Field::new(name, DataType::UInt8, false);
    let time = DataType::Timestamp(TimeUnit::Microsecond, Some("UTC".into()));
    let mut fields = vec![
        Field::new("time", time, false),
        Field::new("station", dictionary(), false),
        number("direction_deg", "degrees"),
        number("speed_m_s", "m/s"),
        number("gust_m_s", "m/s"),
        flag("flag"),
    ];
    fields.extend(Test::ALL.map(|test| flag(test.name())));
    fields.push(Field::new("file", dictionary(), true));
    fields.push(Field::new("line", DataType::UInt32, false));
    Schema::new(fields)
}
