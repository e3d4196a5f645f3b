//! Files that appear only when they are whole.

use std::fs::{self, File};
use std::io::{self, BufWriter, Seek, Write};
use std::path::{Path, PathBuf};

use tempfile::{Builder, NamedTempFile};

use crate::error::Error;

/// Bytes written at once.
const BUFFER: usize = 1 << 18;

/// The files of one run: each is written beside its name and renamed when all are complete; dropped before that, it
/// leaves nothing behind. Or one of them alone, for standard output, which gets it when it is complete.
#[derive(Debug)]
pub struct OutputSet {
    to: Destination,
    files: Vec<(PathBuf, Part)>,
}

#[derive(Debug)]
enum Destination {
    Folder(PathBuf),
    /// The name of the one file.
    Stdout(String),
}

/// A file until it is complete.
#[derive(Debug)]
enum Part {
    Beside(BufWriter<NamedTempFile>),
    ForStdout(BufWriter<File>),
    /// Not wanted.
    Nowhere,
}

impl OutputSet {
    /// Files in `folder`, made if need be.
    ///
    /// # Errors
    /// The folder cannot be made.
    pub fn new(folder: &Path) -> Result<Self, Error> {
        fs::create_dir_all(folder).map_err(|e| Error::write(folder, e))?;
        Ok(Self {
            to: Destination::Folder(folder.to_path_buf()),
            files: Vec::new(),
        })
    }

    /// The file of this name for standard output; all others are not written.
    #[must_use]
    pub fn for_stdout(name: &str) -> Self {
        Self {
            to: Destination::Stdout(name.to_string()),
            files: Vec::new(),
        }
    }

    /// Starts a file; the number returned names it.
    ///
    /// # Errors
    /// The system's refusal.
    pub fn create(&mut self, name: &str) -> Result<usize, Error> {
        let file = match &self.to {
            Destination::Folder(folder) => (folder.join(name), beside(folder, name)?),
            Destination::Stdout(main) if main == name => {
                let file = tempfile::tempfile().map_err(|e| Error::write(Path::new(name), e))?;
                let part = Part::ForStdout(BufWriter::with_capacity(BUFFER, file));
                (name.into(), part)
            }
            Destination::Stdout(_) => (name.into(), Part::Nowhere),
        };
        self.files.push(file);
        Ok(self.files.len() - 1)
    }

    /// Adds bytes to a file.
    ///
    /// # Errors
    /// The system's refusal, a full disk for one.
    pub fn write(&mut self, file: usize, bytes: &[u8]) -> Result<(), Error> {
        let (path, part) = &mut self.files[file];
        match part {
            Part::Beside(writer) => writer.write_all(bytes),
            Part::ForStdout(writer) => writer.write_all(bytes),
            Part::Nowhere => Ok(()),
        }
        .map_err(|e| Error::write(path, e))
    }

    /// Writes a whole file.
    ///
    /// # Errors
    /// The system's refusal.
    pub fn put(&mut self, name: &str, bytes: &[u8]) -> Result<(), Error> {
        let file = self.create(name)?;
        self.write(file, bytes)
    }

    /// Completes all files, then gives them their names; returns these. Standard output gets its file.
    ///
    /// # Errors
    /// The system's refusal; files already renamed are whole, the others are gone.
    pub fn commit(self) -> Result<Vec<PathBuf>, Error> {
        let mut whole = Vec::new();
        for (path, part) in self.files {
            let failed = |e: io::Error| Error::write(&path, e);
            match part {
                Part::Beside(writer) => {
                    let file = writer.into_inner().map_err(|e| failed(e.into_error()))?;
                    whole.push((path, file));
                }
                Part::ForStdout(writer) => {
                    let file = writer.into_inner().map_err(|e| failed(e.into_error()))?;
                    to_stdout(file).map_err(|e| Error::write(Path::new("standard output"), e))?;
                }
                Part::Nowhere => (),
            }
        }
        let mut names = Vec::new();
        for (path, file) in whole {
            file.persist(&path)
                .map_err(|e| Error::write(&path, e.error))?;
            names.push(path);
        }
        Ok(names)
    }
}

/// A file of another name in the folder.
fn beside(folder: &Path, name: &str) -> Result<Part, Error> {
    let mut builder = Builder::new();
    builder.prefix(".").suffix(".part");
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // What a plain new file would have; the system takes its mask off.
        builder.permissions(fs::Permissions::from_mode(0o666));
    }
    let file = builder
        .tempfile_in(folder)
        .map_err(|e| Error::write(&folder.join(name), e))?;
    Ok(Part::Beside(BufWriter::with_capacity(BUFFER, file)))
}

fn to_stdout(mut file: File) -> io::Result<()> {
    file.rewind()?;
    let mut out = io::stdout().lock();
    io::copy(&mut file, &mut out)?;
    out.flush()
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    #[test]
    fn nothing_is_left_of_a_set_that_was_not_completed() {
        let folder = tempfile::tempdir().unwrap();
        let mut set = OutputSet::new(&folder.path().join("a/b")).unwrap();
        set.put("x.csv", b"half").unwrap();
        drop(set);
        assert_eq!(fs::read_dir(folder.path().join("a/b")).unwrap().count(), 0);
    }

    #[test]
    fn an_old_file_stays_until_the_new_one_is_whole() {
        let folder = tempfile::tempdir().unwrap();
        fs::write(folder.path().join("x.csv"), "old").unwrap();
        let mut set = OutputSet::new(folder.path()).unwrap();
        set.put("x.csv", b"new").unwrap();
        assert_eq!(fs::read(folder.path().join("x.csv")).unwrap(), b"old");
        let names = set.commit().unwrap();
        assert_eq!(names, [folder.path().join("x.csv")]);
        assert_eq!(fs::read(folder.path().join("x.csv")).unwrap(), b"new");
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);
    }
}
