//! The rows of all report files, wave by wave: in the order of the files, or in that of time.

use std::path::Path;

use rayon::prelude::*;

use super::cache::{Cache, CacheReader, CacheWriter};
use super::feed::{Feed, ReportFiles};
use super::read::{Books, ReadOutcome, gather};
use super::rows::Rows;
use super::spill::{Runs, Sorter};
use crate::error::Error;
use crate::settings::ReportSource;
use crate::time::Time;

/// Blocks of a wave for each thread.
const BLOCKS_PER_THREAD: usize = 8;
/// Most files that are open at once; systems allow about 1000 (common practice).
const MOST_OPEN: usize = 500;

/// The files as they are read.
pub struct ReportStream<'f> {
    files: &'f ReportFiles<'f>,
    feeds: Vec<Feed<'f>>,
    /// Rows of files that come after one that has not ended.
    held: Vec<Vec<Rows>>,
    by_time: bool,
}

impl<'f> ReportStream<'f> {
    /// Rows in the order of the files.
    #[must_use]
    pub fn in_file_order(files: &'f ReportFiles<'f>) -> Self {
        let feeds: Vec<Feed> = files
            .files
            .iter()
            .map(|file| Feed::new(file, &files.names))
            .collect();
        Self {
            files,
            held: feeds.iter().map(|_| Vec::new()).collect(),
            feeds,
            by_time: false,
        }
    }

    /// No files at all.
    fn nothing(files: &'f ReportFiles<'f>) -> Self {
        Self {
            files,
            feeds: Vec::new(),
            held: Vec::new(),
            by_time: false,
        }
    }

    /// The books so far; `None` if a file could not be read.
    fn books(&self) -> Option<Vec<Books>> {
        let books = self.feeds.iter().map(|feed| feed.books.as_ref().ok());
        books.map(Option::<&Books>::cloned).collect()
    }

    /// Rows of all files together in the order of time, as far as each file has it: always the files that are furthest
    /// behind are read on.
    #[must_use]
    pub fn in_time_order(files: &'f ReportFiles<'f>) -> Self {
        let mut stream = Self::in_file_order(files);
        stream.by_time = true;
        if stream.feeds.len() > 1 {
            stream.feeds.par_iter_mut().for_each(Feed::look);
        }
        stream
    }

    /// The time before which no row comes any more, if every file has the order of time; `None` before all files have
    /// been looked at, and after the end.
    #[must_use]
    pub fn reached(&self) -> Option<Time> {
        let active = self.feeds.iter().filter(|feed| !feed.has_ended());
        active.map(|feed| feed.reached).min().flatten()
    }

    /// The next rows; `None` at the end of all files. In the order of time, no file is read further than to `until`.
    pub fn next_wave(&mut self, until: Option<Time>) -> Option<Vec<Rows>> {
        let slots = BLOCKS_PER_THREAD * rayon::current_num_threads();
        let mut active: Vec<&mut Feed> = self
            .feeds
            .iter_mut()
            .filter(|feed| !feed.has_ended())
            .collect();
        if active.is_empty() {
            return None;
        }
        if !self.by_time {
            active.truncate(slots);
            let rows: Vec<(u32, Vec<Rows>)> = active
                .into_par_iter()
                .enumerate()
                // Files behind the first wait after their first block.
                .filter(|(k, feed)| *k == 0 || feed.is_closed())
                .map(|(k, feed)| (feed.number(), feed.turn(if k == 0 { slots } else { 1 })))
                .collect();
            for (number, rows) in rows {
                self.held[number as usize].extend(rows); // one for each feed
            }
            return Some(self.release());
        }
        active.sort_by_key(|feed| (feed.reached, feed.number()));
        let behind = active
            .iter()
            .take_while(|feed| {
                feed.reached.is_none() || until.is_none_or(|u| feed.reached < Some(u))
            })
            .count();
        active.truncate(behind.clamp(1, slots));
        let each = (slots / active.len()).max(1);
        let rows: Vec<Vec<Rows>> = active.into_par_iter().map(|feed| feed.turn(each)).collect();
        Some(rows.into_iter().flatten().collect())
    }

    /// Rows of the files up to the first that has not ended.
    fn release(&mut self) -> Vec<Rows> {
        let mut rows = Vec::new();
        for (feed, held) in self.feeds.iter().zip(&mut self.held) {
            rows.append(held);
            if !feed.has_ended() {
                break;
            }
        }
        rows
    }

    /// True if more files are open than systems allow.
    fn too_many_open(&self) -> bool {
        let open = |feed: &&Feed| !feed.is_closed() && !feed.has_ended();
        self.feeds.iter().filter(open).count() > MOST_OPEN
    }

    /// The books of all files; no rows.
    #[must_use]
    pub fn outcome(self) -> ReadOutcome {
        let books = self.feeds.into_iter().map(|feed| feed.books);
        gathered(self.files, books)
    }
}

fn gathered(files: &ReportFiles, books: impl Iterator<Item = Result<Books, Error>>) -> ReadOutcome {
    let named = files.files.iter().zip(books);
    let named = named.map(|(file, books)| (file.name.clone(), books));
    gather(named.collect(), files.names.network)
}

/// How the order of time is come by.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum InputOrder {
    /// Every file has it: rows are worked on as they come.
    ByTime,
    /// Unknown: all rows are read and sorted first.
    Any,
}

impl InputOrder {
    /// The order to try first: a pipe cannot be read again, should it turn out that its rows are not in order.
    #[must_use]
    pub fn first_try(sources: &[ReportSource]) -> Self {
        let mut files = sources.iter().flat_map(|source| &source.files);
        if files.all(|file| file.is_file()) {
            Self::ByTime
        } else {
            Self::Any
        }
    }
}

/// Reports in the order of time.
pub struct OrderedReports<'f> {
    files: &'f ReportFiles<'f>,
    source: Source<'f>,
    /// What comes is kept here for another run.
    keep: Option<Box<CacheWriter>>,
}

enum Source<'f> {
    /// Files that have the order of time.
    Files(ReportStream<'f>),
    /// Files in any order, with the memory that sorting may take.
    Unsorted(ReportStream<'f>, usize),
    Sorted(ReportStream<'f>, Runs),
    Kept(Box<CacheReader>),
}

impl<'f> OrderedReports<'f> {
    /// The rows of these files. To sort them takes at most about `memory` bytes; what does not fit is put on disk, in
    /// the system's folder for temporary files. If the rows were kept at `cache`, they come from there; if not, they
    /// will be.
    ///
    /// # Errors
    /// The cache cannot be written.
    pub fn new(
        files: &'f ReportFiles<'f>,
        order: InputOrder,
        memory: usize,
        cache: Option<&Path>,
    ) -> Result<Self, Error> {
        let cache = match cache {
            Some(path) => Cache::open(path, files)?,
            None => None,
        };
        let (source, keep) = match (cache, order) {
            (Some(Cache::Old(reader)), _) => (Source::Kept(reader), None),
            (cache, order) => {
                let source = match order {
                    InputOrder::ByTime => Source::Files(ReportStream::in_time_order(files)),
                    InputOrder::Any => Source::Unsorted(ReportStream::in_file_order(files), memory),
                };
                let keep = match cache {
                    Some(Cache::New(writer)) => Some(writer),
                    _ => None,
                };
                (source, keep)
            }
        };
        Ok(Self {
            files,
            source,
            keep,
        })
    }

    /// The next rows; `None` at the end. No row comes before [`Self::reached`] any more, as far as the files keep their
    /// order.
    ///
    /// # Errors
    /// The disk cannot take what does not fit into memory; too many files would be open at once.
    pub fn next_wave(&mut self, until: Time) -> Result<Option<Vec<Rows>>, Error> {
        let wave = self.wave(until)?;
        let reached = self.reached();
        match (&mut self.keep, &wave) {
            (Some(keep), Some(wave)) => keep.put(wave, reached)?,
            (Some(_), None) => {
                let books = match &self.source {
                    Source::Files(stream) | Source::Sorted(stream, _) => stream.books(),
                    _ => None,
                };
                // A file that could not be read may be there the next time.
                if let (Some(keep), Some(books)) = (self.keep.take(), books) {
                    keep.finish(&books)?;
                }
            }
            (None, _) => {}
        }
        Ok(wave)
    }

    fn wave(&mut self, until: Time) -> Result<Option<Vec<Rows>>, Error> {
        if let Source::Unsorted(stream, memory) = &mut self.source {
            let mut sorter = Sorter::new(*memory);
            while let Some(wave) = stream.next_wave(None) {
                sorter.push(wave)?;
            }
            let read = std::mem::replace(stream, ReportStream::nothing(self.files));
            self.source = Source::Sorted(read, sorter.finish());
        }
        match &mut self.source {
            Source::Files(stream) => {
                let wave = stream.next_wave(Some(until));
                if stream.too_many_open() {
                    let message = format!("more than {MOST_OPEN} files have reports of one time");
                    return Err(Error::NotInOrder(message));
                }
                Ok(wave)
            }
            Source::Sorted(_, runs) => runs.next_wave(until),
            Source::Kept(reader) => reader.next_wave(),
            Source::Unsorted(..) => Ok(None),
        }
    }

    /// The time before which no row comes any more; `None` before the first wave and after the end.
    #[must_use]
    pub fn reached(&self) -> Option<Time> {
        match &self.source {
            Source::Files(stream) => stream.reached(),
            Source::Unsorted(..) => None,
            Source::Sorted(_, runs) => runs.reached(),
            Source::Kept(reader) => reader.reached(),
        }
    }

    /// The books of all files; no rows.
    #[must_use]
    pub fn outcome(self) -> ReadOutcome {
        match self.source {
            Source::Files(stream) | Source::Unsorted(stream, _) | Source::Sorted(stream, _) => {
                stream.outcome()
            }
            Source::Kept(reader) => {
                let books = reader.books.unwrap_or_default();
                gathered(self.files, books.into_iter().map(Ok))
            }
        }
    }
}
