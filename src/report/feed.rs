//! A report file as it is read, turn by turn.

use std::io::Read;
use std::path::Path;

use super::coded_file::{LARGEST, read_coded};
use super::columnar::{ColumnarFeed, is_columnar_file};
use super::format::{ReportForm, ReportFormat};
use super::names::Names;
use super::read::{Books, PartOutcome};
use super::rows::Rows;
use super::text::TableFeed;
use super::values::ValueReader;
use crate::error::Error;
use crate::input::{BLOCK, open, read_all};
use crate::settings::ReportSource;
use crate::station::Network;
use crate::time::Time;

/// Block for a look at the beginning of a file, bytes.
const FIRST_LOOK: usize = 1 << 13;

/// The report files of a network, and what the names in them mean.
pub struct ReportFiles<'a> {
    pub(super) names: Names<'a>,
    pub(super) files: Vec<InputFile<'a>>,
}

pub(super) struct InputFile<'a> {
    number: u32,
    /// As the settings name it.
    pub(super) name: String,
    format: &'a ReportFormat,
    content: Content<'a>,
}

enum Content<'a> {
    Path(&'a Path),
    Bytes(&'a [u8]),
}

impl<'a> ReportFiles<'a> {
    /// The files of all groups, in the order of the settings.
    #[must_use]
    pub fn new(sources: &'a [ReportSource], network: &'a Network) -> Self {
        let files = sources
            .iter()
            .flat_map(|s| s.files.iter().map(|f| (f.as_path(), &s.format)));
        Self {
            names: Names::new(network),
            files: (0..)
                .zip(files)
                .map(|(number, (path, format))| InputFile {
                    number,
                    name: path.display().to_string(),
                    format,
                    content: Content::Path(path),
                })
                .collect(),
        }
    }

    /// One file that stands in memory.
    #[must_use]
    pub fn of_bytes(
        bytes: &'a [u8],
        name: &str,
        format: &'a ReportFormat,
        network: &'a Network,
    ) -> Self {
        Self {
            names: Names::new(network),
            files: vec![InputFile {
                number: 0,
                name: name.to_string(),
                format,
                content: Content::Bytes(bytes),
            }],
        }
    }

    /// The stations that the reports are of.
    #[must_use]
    pub fn network(&self) -> &Network {
        self.names.network
    }

    /// Where the first of the rows with a time stands: file and line.
    #[must_use]
    pub fn place_of_first(&self, rows: &Rows, time: Time) -> String {
        let row = rows.packed.iter().find(|row| row.time == time);
        row.map_or_else(String::new, |row| {
            let file = self.files.get(usize::from(row.file));
            format!("{}:{}", file.map_or("?", |f| f.name.as_str()), row.line)
        })
    }

    /// How the files are read, and the stations that they are read for, in words.
    pub(super) fn meaning(&self) -> String {
        let network = self.names.network;
        let mut not_asked_for: Vec<&str> = network.not_asked_for().collect();
        not_asked_for.sort_unstable();
        let formats: Vec<&ReportFormat> = self.files.iter().map(|file| file.format).collect();
        format!("{formats:?} {:?} {not_asked_for:?}", network.stations())
    }

    /// The paths of the files.
    pub(super) fn paths(&self) -> impl Iterator<Item = &'a Path> {
        self.files.iter().filter_map(|file| match file.content {
            Content::Path(path) => Some(path),
            Content::Bytes(_) => None,
        })
    }
}

impl<'a> InputFile<'a> {
    fn open<'f>(&'f self) -> Result<Box<dyn Read + Send + 'f>, Error> {
        match self.content {
            Content::Path(path) => match open(path) {
                Ok(input) => Ok(input),
                Err(error) => Err(Error::read(path, error)),
            },
            Content::Bytes(bytes) => Ok(Box::new(bytes)),
        }
    }

    fn all(&self) -> Result<Vec<u8>, Error> {
        match self.content {
            Content::Path(path) => read_all(path, LARGEST).map_err(|e| Error::read(path, e)),
            Content::Bytes(bytes) => Ok(bytes.to_vec()),
        }
    }

    /// The path, if the file is a Parquet or Arrow table.
    fn columnar(&self) -> Option<&'a Path> {
        match self.content {
            Content::Path(path) if is_columnar_file(path) => Some(path),
            _ => None,
        }
    }
}

/// A file, how far it has been read, and its books.
pub(super) struct Feed<'f> {
    file: &'f InputFile<'f>,
    names: &'f Names<'f>,
    source: Source<'f>,
    /// The latest time so far; before anything was read, the first time if it is known.
    pub(super) reached: Option<Time>,
    pub(super) books: Result<Books, Error>,
}

enum Source<'f> {
    Closed,
    Table(Box<TableFeed<'f>>),
    Columnar(&'f Path, Box<ColumnarFeed<'f>>),
    Ended,
}

impl<'f> Feed<'f> {
    pub(super) fn new(file: &'f InputFile<'f>, names: &'f Names<'f>) -> Self {
        Self {
            file,
            names,
            source: Source::Closed,
            reached: None,
            books: Ok(Books::default()),
        }
    }

    pub(super) fn number(&self) -> u32 {
        self.file.number
    }

    pub(super) fn is_closed(&self) -> bool {
        matches!(self.source, Source::Closed)
    }

    pub(super) fn has_ended(&self) -> bool {
        matches!(self.source, Source::Ended)
    }

    /// Looks for the first time in the file, which then is closed again, so that many files need not be open at once.
    pub(super) fn look(&mut self) {
        // A pipe cannot be read twice; files of code forms are read whole.
        let is_table = matches!(self.file.format.form, ReportForm::Table(_));
        let is_file = matches!(self.file.content, Content::Path(path) if path.is_file());
        if !is_table || !is_file {
            return;
        }
        let mut first_look = Self::new(self.file, self.names);
        let rows = first_look.turn_of(1, FIRST_LOOK).unwrap_or_default().rows;
        let spans = rows.iter().filter_map(Rows::span);
        self.reached = spans.map(|span| span.0).min();
    }

    /// Reads on: at most `blocks` blocks of a table, a file of code forms as a whole.
    pub(super) fn turn(&mut self, blocks: usize) -> Vec<Rows> {
        match self.turn_of(blocks, BLOCK) {
            Ok(part) => {
                if let Ok(books) = &mut self.books {
                    books.append(part.books);
                }
                let last = part.rows.iter().filter_map(Rows::span).map(|s| s.1).max();
                self.reached = self.reached.max(last);
                part.rows
            }
            Err(error) => {
                self.source = Source::Ended;
                self.books = Err(error);
                Vec::new()
            }
        }
    }

    fn turn_of(&mut self, blocks: usize, block_size: usize) -> Result<PartOutcome, Error> {
        let file = self.file;
        if let (Source::Closed, ReportForm::Table(columns)) = (&self.source, &file.format.form) {
            let values =
                ValueReader::new(&file.name, file.number, file.format, columns, self.names);
            self.source = match file.columnar() {
                Some(path) => Source::Columnar(path, Box::new(ColumnarFeed::open(path, values)?)),
                None => Source::Table(Box::new(TableFeed::open(file.open()?, values, block_size)?)),
            };
        }
        match &mut self.source {
            Source::Closed => {
                self.source = Source::Ended;
                let (number, names) = (file.number, self.names);
                Ok(read_coded(
                    file.all()?,
                    &file.name,
                    number,
                    file.format,
                    names,
                ))
            }
            Source::Table(feed) => {
                let (parts, ended) = feed.turn(blocks);
                if ended {
                    self.source = Source::Ended;
                }
                let mut whole = PartOutcome::default();
                for part in parts {
                    whole.books.append(part.books);
                    whole.rows.extend(part.rows);
                }
                Ok(whole)
            }
            Source::Columnar(path, feed) => {
                let (part, ended) = feed.turn(path, blocks)?;
                if ended {
                    self.source = Source::Ended;
                }
                Ok(part)
            }
            Source::Ended => Ok(PartOutcome::default()),
        }
    }
}
