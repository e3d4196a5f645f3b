//! Files that appear only when they are whole.

use std::fs;
use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};

use tempfile::{Builder, NamedTempFile};

use crate::error::Error;

/// The files of one run: each is written beside its name and renamed when all are complete; dropped before that, it
/// leaves nothing behind.
#[derive(Debug)]
pub struct OutputSet {
    folder: PathBuf,
    files: Vec<(PathBuf, BufWriter<NamedTempFile>)>,
}

impl OutputSet {
    /// Files in `folder`, made if need be.
    ///
    /// # Errors
    /// The folder cannot be made.
    pub fn new(folder: &Path) -> Result<Self, Error> {
        fs::create_dir_all(folder).map_err(|e| Error::write(folder, e))?;
        Ok(Self {
            folder: folder.to_path_buf(),
            files: Vec::new(),
        })
    }

    /// Starts a file; the number returned names it.
    ///
    /// # Errors
    /// The system's refusal.
    pub fn create(&mut self, name: &str) -> Result<usize, Error> {
        let path = self.folder.join(name);
        let mut builder = Builder::new();
        builder.prefix(".").suffix(".part");
        #[cfg(unix)]
        {
            use std::os::unix::fs::PermissionsExt;
            // What a plain new file would have; the system takes its mask off.
            builder.permissions(fs::Permissions::from_mode(0o666));
        }
        let file = builder
            .tempfile_in(&self.folder)
            .map_err(|e| Error::write(&path, e))?;
        self.files
            .push((path, BufWriter::with_capacity(1 << 18, file)));
        Ok(self.files.len() - 1)
    }

    /// Adds bytes to a file.
    ///
    /// # Errors
    /// The system's refusal, a full disk for one.
    pub fn write(&mut self, file: usize, bytes: &[u8]) -> Result<(), Error> {
        let (path, writer) = &mut self.files[file];
        writer.write_all(bytes).map_err(|e| Error::write(path, e))
    }

    /// Writes a whole file.
    ///
    /// # Errors
    /// The system's refusal.
    pub fn put(&mut self, name: &str, bytes: &[u8]) -> Result<(), Error> {
        let file = self.create(name)?;
        self.write(file, bytes)
    }

    /// Completes all files, then gives them their names; returns these.
    ///
    /// # Errors
    /// The system's refusal; files already renamed are whole, the others are gone.
    pub fn commit(self) -> Result<Vec<PathBuf>, Error> {
        let mut whole = Vec::new();
        for (path, writer) in self.files {
            let file = writer
                .into_inner()
                .map_err(|e| Error::write(&path, e.into_error()))?;
            whole.push((path, file));
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
