//! Sorts rows by time in bounded memory: what does not fit is put on disk in sorted runs, which are merged.

use std::collections::VecDeque;
use std::fs::File;
use std::io::{self, Read, Seek, SeekFrom, Write};

use rayon::prelude::*;

use super::chunk;
use super::rows::Rows;
use crate::error::Error;
use crate::time::Time;

/// Rows of a chunk.
const CHUNK_ROWS: usize = 1 << 16;

/// Takes rows in the order of the input.
pub(super) struct Sorter {
    memory: usize,
    rows: Vec<Rows>,
    bytes: usize,
    runs: Vec<Run>,
}

impl Sorter {
    /// A sorter that uses at most about `memory` bytes.
    pub(super) fn new(memory: usize) -> Self {
        Self {
            memory,
            rows: Vec::new(),
            bytes: 0,
            runs: Vec::new(),
        }
    }

    /// Takes rows.
    ///
    /// # Errors
    /// The disk cannot take what does not fit into memory.
    pub(super) fn push(&mut self, rows: Vec<Rows>) -> Result<(), Error> {
        self.bytes += rows.iter().map(Rows::bytes).sum::<usize>();
        self.rows.extend(rows);
        // The sorted rows stand beside the others for a while, and an index of either.
        if self.bytes > self.memory / 3 {
            let sorted = sorted(&std::mem::take(&mut self.rows));
            self.bytes = 0;
            let run =
                on_disk(&sorted).map_err(|error| Error::write(&std::env::temp_dir(), error))?;
            self.runs.push(run);
        }
        Ok(())
    }

    /// The sorted runs; the last is in memory.
    pub(super) fn finish(mut self) -> Runs {
        let chunks = sorted(&self.rows).into_iter().map(Chunk::Memory);
        self.runs.push(Run {
            chunks: chunks.collect(),
            file: None,
        });
        Runs { runs: self.runs }
    }
}

/// Rows in the order of time, of the same time in the order of the input, in chunks.
fn sorted(parts: &[Rows]) -> Vec<Rows> {
    let mut order: Vec<(Time, (u16, u32), u32, u32)> = Vec::new();
    for (part, rows) in (0..).zip(parts) {
        for (row, packed) in (0..).zip(&rows.packed) {
            order.push((packed.time, (packed.file, packed.line), part, row));
        }
    }
    order.par_sort_unstable();
    order
        .par_chunks(CHUNK_ROWS)
        .map(|chunk| {
            let mut rows = Rows::with_capacity(chunk.len());
            for &(_, _, part, row) in chunk {
                // From the parts themselves.
                rows.push_from(&parts[part as usize], row as usize);
            }
            rows
        })
        .collect()
}

/// Writes chunks to a file that vanishes with the program.
fn on_disk(chunks: &[Rows]) -> io::Result<Run> {
    let mut file = tempfile::tempfile()?;
    let mut places = VecDeque::new();
    for some in chunks.chunks(rayon::current_num_threads()) {
        let encoded: Vec<io::Result<Vec<u8>>> = some.par_iter().map(chunk::encode).collect();
        for (rows, bytes) in some.iter().zip(encoded) {
            let bytes = bytes?;
            file.write_all(&bytes)?;
            if let Some((first, _)) = rows.span() {
                places.push_back(Chunk::Disk {
                    length: bytes.len(),
                    first,
                });
            }
        }
    }
    file.seek(SeekFrom::Start(0))?;
    Ok(Run {
        chunks: places,
        file: Some(file),
    })
}

/// Rows in the order of time.
struct Run {
    chunks: VecDeque<Chunk>,
    /// Where the chunks on disk stand, one after the other, at the next one.
    file: Option<File>,
}

enum Chunk {
    Memory(Rows),
    Disk { length: usize, first: Time },
}

impl Run {
    /// The first time of what is still to come.
    fn reached(&self) -> Option<Time> {
        match self.chunks.front()? {
            Chunk::Memory(rows) => rows.packed.first().map(|row| row.time),
            Chunk::Disk { first, .. } => Some(*first),
        }
    }

    fn next_chunk(&mut self) -> io::Result<Rows> {
        match (self.chunks.pop_front(), &mut self.file) {
            (Some(Chunk::Memory(rows)), _) => Ok(rows),
            (Some(Chunk::Disk { length, .. }), Some(file)) => {
                let mut bytes = vec![0; length];
                file.read_exact(&mut bytes)?;
                chunk::decode(&bytes)
            }
            _ => Ok(Rows::default()),
        }
    }
}

/// Sorted runs on their way to be merged.
pub(super) struct Runs {
    runs: Vec<Run>,
}

impl Runs {
    /// The time before which no row comes any more; `None` at the end.
    pub(super) fn reached(&self) -> Option<Time> {
        self.runs.iter().filter_map(Run::reached).min()
    }

    /// The next chunk of every run that has not reached `until`, at least of the one furthest behind; `None` at the end.
    ///
    /// # Errors
    /// The disk does not give back what was put there.
    pub(super) fn next_wave(&mut self, until: Time) -> Result<Option<Vec<Rows>>, Error> {
        let Some(reached) = self.reached() else {
            return Ok(None);
        };
        let until = until.max(reached.plus_micros(1));
        let behind = self
            .runs
            .par_iter_mut()
            .filter(|run| run.reached().is_some_and(|time| time < until));
        let rows: Vec<io::Result<Rows>> = behind.map(Run::next_chunk).collect();
        let rows: io::Result<Vec<Rows>> = rows.into_iter().collect();
        rows.map(Some)
            .map_err(|error| Error::read(&std::env::temp_dir(), error))
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::units::FromDirection;

    /// The same rows in the same order, however little memory there is.
    #[test]
    fn runs_on_disk_merge_to_what_memory_gives() {
        let parts = |seed: u64| -> Vec<Rows> {
            (0..30)
                .map(|part: u32| {
                    let mut rows = Rows::default();
                    for k in 0..1000_u32 {
                        let n = u64::from(part * 1000 + k);
                        // A permutation of the times, with ties.
                        let minute = i64::try_from((n * 7919 + seed) % 10_007).unwrap();
                        rows.push_wind(
                            k % 11,
                            Time::from_micros(minute * 60_000_000),
                            f64::from(k),
                            FromDirection::new(90.0).unwrap(),
                            (0, n),
                        );
                    }
                    rows
                })
                .collect()
        };
        let drain = |memory: usize| -> (Vec<(Time, u32)>, usize) {
            let mut sorter = Sorter::new(memory);
            for rows in parts(5) {
                sorter.push(vec![rows]).unwrap();
            }
            let spilled = sorter.runs.len();
            let mut runs = sorter.finish();
            let mut all = Vec::new();
            let mut pending: Vec<(Time, u32)> = Vec::new();
            while let Some(wave) = runs.next_wave(Time::from_micros(0)).unwrap() {
                pending.extend(
                    wave.iter()
                        .flat_map(|r| &r.packed)
                        .map(|r| (r.time, r.line)),
                );
                pending.sort_unstable();
                let ready = runs.reached().map_or(pending.len(), |reached| {
                    pending.partition_point(|row| row.0 < reached)
                });
                all.extend(pending.drain(..ready));
            }
            assert!(pending.is_empty());
            (all, spilled)
        };
        let (in_memory, none) = drain(usize::MAX);
        let (on_disk, some) = drain(1 << 20);
        assert_eq!(none, 0);
        assert!(some > 1, "{some}");
        assert_eq!(in_memory.len(), 30_000);
        assert!(in_memory.is_sorted());
        assert_eq!(in_memory, on_disk);
    }
}
