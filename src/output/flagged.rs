//! `reports_flagged.csv` and `reports_flagged.parquet`: every report with the flag of each test.

use std::ops::Range;
use std::path::Path;

use rayon::prelude::*;
use zmij::Buffer;

use super::file::OutputSet;
#[cfg(feature = "parquet")]
use super::flagged_parquet::FlaggedParquet;
use crate::check::{Flag, Test};
use crate::error::Error;
use crate::pipeline::Window;
use crate::report::ReportTable;
use crate::settings::Settings;
use crate::station::Network;
use crate::units::FromDirection;

/// Formats of the flagged reports.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct FlaggedFormats {
    /// `reports_flagged.csv`.
    pub csv: bool,
    /// `reports_flagged.parquet`.
    pub parquet: bool,
}

/// Rows that one thread encodes at a time.
pub(super) const CHUNK: usize = 1 << 14;

/// The reports that are judged for good in a window, with all their flags.
pub(super) struct JudgedReports<'a> {
    pub(super) table: &'a ReportTable,
    /// The flag of the neighbour test for each report of the table.
    neighbours: &'a [Flag],
    /// Time, station and row of the table; by time, then station, then level.
    pub(super) rows: Vec<(i64, usize, usize)>,
}

impl<'a> JudgedReports<'a> {
    fn of(window: &'a Window, neighbours: &'a [Flag]) -> Self {
        let table = &window.table;
        let Range { start, end } = window.judged.clone();
        let mut rows: Vec<(i64, usize, usize)> = (0..table.stations())
            .flat_map(|s| {
                let from = table.of_station_from(s, start).start;
                let to = table.of_station_from(s, end).start;
                (from..to).map(move |i| (s, i))
            })
            .map(|(s, i)| (table.times()[i].micros(), s, i))
            .collect();
        rows.par_sort_unstable();
        Self {
            table,
            neighbours,
            rows,
        }
    }

    fn by_neighbours(&self, i: usize) -> Flag {
        self.neighbours
            .get(i)
            .copied()
            .unwrap_or(Flag::NotEvaluated)
    }

    /// The worst flag of report `i`.
    pub(super) fn flag(&self, i: usize) -> Flag {
        self.table.flag(i).worst(self.by_neighbours(i))
    }

    /// The flag of a test of report `i`.
    pub(super) fn test_flag(&self, i: usize, test: Test) -> Flag {
        let flag = self.table.test_flag(i, test);
        match test {
            Test::Neighbour => flag.worst(self.by_neighbours(i)),
            _ => flag,
        }
    }
}

/// The files of flagged reports, in the formats asked for.
pub struct FlaggedFiles {
    csv: Option<(usize, FlaggedRows)>,
    #[cfg(feature = "parquet")]
    parquet: Option<(usize, FlaggedParquet)>,
}

const PARQUET: &str = "reports_flagged.parquet";

impl FlaggedFiles {
    /// Starts the files.
    ///
    /// # Errors
    /// A file cannot be made; Parquet is asked for and the program was built without it.
    pub fn new(
        settings: &Settings,
        network: &Network,
        formats: FlaggedFormats,
        set: &mut OutputSet,
    ) -> Result<Self, Error> {
        let csv = if formats.csv {
            let file = set.create("reports_flagged.csv")?;
            set.write(file, FlaggedRows::header().as_bytes())?;
            Some((file, FlaggedRows::new(settings, network)))
        } else {
            None
        };
        #[cfg(not(feature = "parquet"))]
        if formats.parquet {
            let reason = "this program was built without the feature `parquet`";
            return Err(parquet_error(&reason));
        }
        #[cfg(feature = "parquet")]
        let parquet = if formats.parquet {
            let file = set.create(PARQUET)?;
            let rows = FlaggedParquet::new(settings, network).map_err(|e| parquet_error(&e))?;
            Some((file, rows))
        } else {
            None
        };
        Ok(Self {
            csv,
            #[cfg(feature = "parquet")]
            parquet,
        })
    }

    /// Adds the reports that were judged in a window; `neighbours` holds the flag of the neighbour test for each report of
    /// its table.
    ///
    /// # Errors
    /// The system's refusal, a full disk for one.
    pub fn write(
        &mut self,
        set: &mut OutputSet,
        window: &Window,
        neighbours: &[Flag],
    ) -> Result<(), Error> {
        let reports = JudgedReports::of(window, neighbours);
        if let Some((file, rows)) = &self.csv {
            let pieces = rows.encode(&reports);
            pieces
                .iter()
                .try_for_each(|piece| set.write(*file, piece))?;
        }
        #[cfg(feature = "parquet")]
        if let Some((file, rows)) = &mut self.parquet {
            let bytes = rows.append(&reports).map_err(|e| parquet_error(&e))?;
            set.write(*file, &bytes)?;
        }
        Ok(())
    }

    /// Completes the files.
    ///
    /// # Errors
    /// The system's refusal.
    #[cfg_attr(
        not(feature = "parquet"),
        expect(unused_variables, reason = "only Parquet has an end")
    )]
    pub fn finish(self, set: &mut OutputSet) -> Result<(), Error> {
        #[cfg(feature = "parquet")]
        if let Some((file, rows)) = self.parquet {
            let bytes = rows.finish().map_err(|e| parquet_error(&e))?;
            set.write(file, &bytes)?;
        }
        Ok(())
    }
}

fn parquet_error(error: &dyn std::fmt::Display) -> Error {
    Error::write(Path::new(PARQUET), std::io::Error::other(error.to_string()))
}

/// Writes rows of `reports_flagged.csv`, by time, then station, then level.
struct FlaggedRows {
    stations: Vec<String>,
    files: Vec<String>,
}

impl FlaggedRows {
    /// Prepares the names.
    fn new(settings: &Settings, network: &Network) -> Self {
        let files = settings.reports.iter().flat_map(|source| &source.files);
        Self {
            stations: network
                .stations()
                .iter()
                .map(|s| super::csv::quoted(&s.id))
                .collect(),
            files: files
                .map(|f| super::csv::quoted(&f.display().to_string()))
                .collect(),
        }
    }

    /// The header line.
    fn header() -> String {
        let tests = Test::ALL.map(Test::name).join(",");
        format!("time,station,direction_deg,speed_m_s,gust_m_s,flag,{tests},file,line\n")
    }

    /// The reports as pieces of text in order.
    fn encode(&self, reports: &JudgedReports) -> Vec<Vec<u8>> {
        let chunks = reports.rows.par_chunks(CHUNK);
        chunks.map(|chunk| self.rows(reports, chunk)).collect()
    }

    fn rows(&self, reports: &JudgedReports, chunk: &[(i64, usize, usize)]) -> Vec<u8> {
        let table = reports.table;
        let mut out = Vec::with_capacity(chunk.len() * 128);
        let mut buffer = Buffer::new();
        for &(_, station, i) in chunk {
            out.extend_from_slice(table.times()[i].to_string().as_bytes());
            out.push(b',');
            // Stations of the table are those of the network.
            out.extend_from_slice(self.stations[station].as_bytes());
            let direction = table.direction(i).map(FromDirection::degrees);
            for value in [direction, table.speed(i), table.gust(i)] {
                out.push(b',');
                if let Some(value) = value {
                    out.extend_from_slice(buffer.format(value).as_bytes());
                }
            }
            out.extend_from_slice(&[b',', b'0' + reports.flag(i).value()]);
            for test in Test::ALL {
                out.extend_from_slice(&[b',', b'0' + reports.test_flag(i, test).value()]);
            }
            let (file, line) = table.origin(i);
            out.push(b',');
            if let Some(name) = self.files.get(usize::from(file)) {
                out.extend_from_slice(name.as_bytes());
            }
            out.push(b',');
            out.extend_from_slice(line.to_string().as_bytes());
            out.push(b'\n');
        }
        out
    }
}
