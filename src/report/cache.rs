//! Rows kept for another run: what reading gave, wave by wave, in the order in which it was handed on.
//!
//! A cache holds for the same files (size, time of change and hash of each), read in the same way for the same stations
//! by the same version; else it is made anew.

use std::fs::File;
use std::io::{self, BufReader, BufWriter, Read, Write};
use std::path::{Path, PathBuf};
use std::time::UNIX_EPOCH;

use rayon::prelude::*;
use serde::{Deserialize, Serialize};
use tempfile::NamedTempFile;
use xxhash_rust::xxh3::{Xxh3, xxh3_128};

use super::chunk;
use super::feed::ReportFiles;
use super::read::Books;
use super::rows::Rows;
use crate::error::Error;
use crate::time::Time;

/// The first bytes of a cache.
const MARK: &[u8; 16] = b"gyremesh rows 1\n";
/// Longest text or chunk in a cache, bytes; more is a sign of damage.
const LONGEST: u32 = 1 << 30;
/// Bytes hashed at a time.
const PIECE: usize = 1 << 20;

/// What a cache is of.
#[derive(Debug, PartialEq, Eq, Serialize, Deserialize)]
struct Key {
    version: String,
    files: Vec<FileKey>,
    /// Hash of how the files are read, and of the stations.
    meaning: u128,
}

#[derive(Debug, PartialEq, Eq, Serialize, Deserialize)]
struct FileKey {
    name: String,
    size: u64,
    /// Nanoseconds since 1970.
    changed: u128,
    hash: u128,
}

impl Key {
    /// `None` if an input is no plain file.
    fn of(files: &ReportFiles) -> io::Result<Option<Self>> {
        let paths: Vec<&Path> = files.paths().collect();
        if paths.len() < files.files.len() || paths.iter().any(|path| !path.is_file()) {
            return Ok(None);
        }
        let keys: io::Result<Vec<FileKey>> = paths.par_iter().map(|path| file_key(path)).collect();
        Ok(Some(Self {
            version: env!("CARGO_PKG_VERSION").into(),
            files: keys?,
            meaning: xxh3_128(files.meaning().as_bytes()),
        }))
    }
}

fn file_key(path: &Path) -> io::Result<FileKey> {
    let mut file = File::open(path)?;
    let metadata = file.metadata()?;
    let changed = metadata.modified()?.duration_since(UNIX_EPOCH);
    let mut hash = Xxh3::new();
    let mut piece = vec![0; PIECE];
    loop {
        let n = file.read(&mut piece)?;
        if n == 0 {
            break;
        }
        hash.update(&piece[..n]); // read says how many
    }
    Ok(FileKey {
        name: path.display().to_string(),
        size: metadata.len(),
        changed: changed.map_or(0, |age| age.as_nanos()),
        hash: hash.digest128(),
    })
}

/// A cache that holds, or one that is being made.
pub(super) enum Cache {
    Old(Box<CacheReader>),
    New(Box<CacheWriter>),
}

impl Cache {
    /// Opens the cache at `path` if it holds for these files, else begins a new one; `None` if an input is no plain
    /// file.
    ///
    /// # Errors
    /// An input cannot be read, or the cache not be written.
    pub(super) fn open(path: &Path, files: &ReportFiles) -> Result<Option<Self>, Error> {
        let Some(key) = Key::of(files).map_err(|error| Error::read(path, error))? else {
            return Ok(None);
        };
        if let Ok(reader) = CacheReader::open(path, &key) {
            return Ok(Some(Self::Old(Box::new(reader))));
        }
        let writer = CacheWriter::new(path, &key).map_err(|error| Error::write(path, error))?;
        Ok(Some(Self::New(Box::new(writer))))
    }
}

pub(super) struct CacheReader {
    path: PathBuf,
    input: BufReader<File>,
    reached: Option<Time>,
    pub(super) books: Option<Vec<Books>>,
}

impl CacheReader {
    fn open(path: &Path, key: &Key) -> io::Result<Self> {
        let mut input = BufReader::with_capacity(PIECE, File::open(path)?);
        let mut mark = [0; MARK.len()];
        input.read_exact(&mut mark)?;
        let found: Key = serde_json::from_slice(&read_piece(&mut input)?)?;
        if mark != *MARK || found != *key {
            return Err(io::ErrorKind::InvalidData.into());
        }
        Ok(Self {
            path: path.to_path_buf(),
            input,
            reached: None,
            books: None,
        })
    }

    pub(super) fn reached(&self) -> Option<Time> {
        self.reached
    }

    /// The next wave; `None` at the end, after which the books are there.
    pub(super) fn next_wave(&mut self) -> Result<Option<Vec<Rows>>, Error> {
        self.wave().map_err(|error| Error::read(&self.path, error))
    }

    fn wave(&mut self) -> io::Result<Option<Vec<Rows>>> {
        if self.books.is_some() {
            return Ok(None);
        }
        let mut chunks = Vec::new();
        loop {
            let piece = read_piece(&mut self.input)?;
            if piece.is_empty() {
                break;
            }
            chunks.push(piece);
        }
        let mut reached = [0; 8];
        self.input.read_exact(&mut reached)?;
        let reached = i64::from_le_bytes(reached);
        self.reached = (reached != i64::MIN).then(|| Time::from_micros(reached));
        if chunks.is_empty() && self.reached.is_none() {
            self.books = Some(serde_json::from_slice(&read_piece(&mut self.input)?)?);
            return Ok(None);
        }
        let rows: io::Result<Vec<Rows>> = chunks
            .par_iter()
            .map(|bytes| chunk::decode(bytes))
            .collect();
        rows.map(Some)
    }
}

fn read_piece(input: &mut impl Read) -> io::Result<Vec<u8>> {
    let mut length = [0; 4];
    input.read_exact(&mut length)?;
    let length = u32::from_le_bytes(length);
    if length > LONGEST {
        return Err(io::ErrorKind::InvalidData.into());
    }
    let mut piece = Vec::new();
    input.take(u64::from(length)).read_to_end(&mut piece)?;
    if piece.len() < length as usize {
        return Err(io::ErrorKind::UnexpectedEof.into());
    }
    Ok(piece)
}

pub(super) struct CacheWriter {
    path: PathBuf,
    out: BufWriter<NamedTempFile>,
}

impl CacheWriter {
    fn new(path: &Path, key: &Key) -> io::Result<Self> {
        let folder = path.parent().filter(|p| !p.as_os_str().is_empty());
        let file = NamedTempFile::new_in(folder.unwrap_or(Path::new(".")))?;
        let mut out = BufWriter::with_capacity(PIECE, file);
        out.write_all(MARK)?;
        write_piece(&mut out, &serde_json::to_vec(key)?)?;
        Ok(Self {
            path: path.to_path_buf(),
            out,
        })
    }

    /// Keeps a wave, after which no row comes before `reached`.
    pub(super) fn put(&mut self, wave: &[Rows], reached: Option<Time>) -> Result<(), Error> {
        self.put_wave(wave, reached)
            .map_err(|error| Error::write(&self.path, error))
    }

    fn put_wave(&mut self, wave: &[Rows], reached: Option<Time>) -> io::Result<()> {
        let full: Vec<&Rows> = wave.iter().filter(|rows| !rows.is_empty()).collect();
        if full.is_empty() && reached.is_none() {
            // Nothing and nowhere is how the end is written.
            return Ok(());
        }
        let chunks: Vec<io::Result<Vec<u8>>> =
            full.par_iter().map(|rows| chunk::encode(rows)).collect();
        for chunk in chunks {
            write_piece(&mut self.out, &chunk?)?;
        }
        write_piece(&mut self.out, &[])?;
        let reached = reached.map_or(i64::MIN, Time::micros);
        self.out.write_all(&reached.to_le_bytes())
    }

    /// Writes the books and gives the cache its name.
    pub(super) fn finish(mut self, books: &[Books]) -> Result<(), Error> {
        let path = std::mem::take(&mut self.path);
        self.complete(&path, books)
            .map_err(|error| Error::write(&path, error))
    }

    fn complete(mut self, path: &Path, books: &[Books]) -> io::Result<()> {
        write_piece(&mut self.out, &[])?;
        self.out.write_all(&i64::MIN.to_le_bytes())?;
        write_piece(&mut self.out, &serde_json::to_vec(books)?)?;
        let file = self
            .out
            .into_inner()
            .map_err(io::IntoInnerError::into_error)?;
        file.persist(path)?;
        Ok(())
    }
}

fn write_piece(out: &mut impl Write, piece: &[u8]) -> io::Result<()> {
    let length = u32::try_from(piece.len()).map_err(|_| io::ErrorKind::FileTooLarge)?;
    out.write_all(&length.to_le_bytes())?;
    out.write_all(piece)
}
