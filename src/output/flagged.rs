//! `reports_flagged.csv`: every report with the flag of each test.

use std::ops::Range;

use rayon::prelude::*;
use zmij::Buffer;

use crate::check::{Flag, Test};
use crate::pipeline::Window;
use crate::report::ReportTable;
use crate::settings::Settings;
use crate::station::Network;
use crate::units::FromDirection;

/// Rows that one thread encodes at a time.
const CHUNK: usize = 1 << 14;

/// Writes rows of `reports_flagged.csv`, by time, then station, then level.
pub struct FlaggedRows {
    stations: Vec<String>,
    files: Vec<String>,
}

impl FlaggedRows {
    /// Prepares the names.
    #[must_use]
    pub fn new(settings: &Settings, network: &Network) -> Self {
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
    #[must_use]
    pub fn header() -> String {
        let tests = Test::ALL.map(Test::name).join(",");
        format!("time,station,direction_deg,speed_m_s,gust_m_s,flag,{tests},file,line\n")
    }

    /// The reports of a window that are judged for good in it, as pieces of text in order; `neighbours` holds the flag of
    /// the neighbour test for each report of the table.
    #[must_use]
    pub fn encode(&self, window: &Window, neighbours: &[Flag]) -> Vec<Vec<u8>> {
        let table = &window.table;
        let Range { start, end } = window.judged.clone();
        let mut reports: Vec<(i64, usize, usize)> = (0..table.stations())
            .flat_map(|s| {
                let from = table.of_station_from(s, start).start;
                let to = table.of_station_from(s, end).start;
                (from..to).map(move |i| (s, i))
            })
            .map(|(s, i)| (table.times()[i].micros(), s, i))
            .collect();
        reports.par_sort_unstable();
        reports
            .par_chunks(CHUNK)
            .map(|chunk| self.rows(table, neighbours, chunk))
            .collect()
    }

    fn rows(
        &self,
        table: &ReportTable,
        neighbours: &[Flag],
        reports: &[(i64, usize, usize)],
    ) -> Vec<u8> {
        let mut out = Vec::with_capacity(reports.len() * 128);
        let mut buffer = Buffer::new();
        for &(_, station, i) in reports {
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
            let by_neighbours = neighbours.get(i).copied().unwrap_or(Flag::NotEvaluated);
            let worst = table.flag(i).worst(by_neighbours);
            out.extend_from_slice(&[b',', b'0' + worst.value()]);
            for test in Test::ALL {
                let flag = match test {
                    Test::Neighbour => table.test_flag(i, test).worst(by_neighbours),
                    _ => table.test_flag(i, test),
                };
                out.extend_from_slice(&[b',', b'0' + flag.value()]);
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
