//! What can go wrong, and where in the input.

use std::fmt;
use std::path::{Path, PathBuf};

use serde::{Deserialize, Serialize};

/// Where in an input something stands. Lines count from 1.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Place {
    /// The file as the user named it.
    pub file: String,
    /// Line in the file, if known.
    pub line: Option<u64>,
    /// Column or key, if known.
    pub column: Option<String>,
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.file)?;
        if let Some(line) = self.line {
            write!(f, ":{line}")?;
        }
        if let Some(column) = &self.column {
            write!(f, " `{column}`")?;
        }
        Ok(())
    }
}

/// One defect of an input: its place, and what is wrong with what is expected.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Problem {
    /// Where it stands.
    pub place: Place,
    /// The text found and what was expected, in one sentence without a final stop.
    pub message: String,
}

impl Problem {
    /// A defect at `place`.
    pub fn new(place: Place, message: impl Into<String>) -> Self {
        Self {
            place,
            message: message.into(),
        }
    }
}

impl fmt::Display for Problem {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}: {}", self.place, self.message)
    }
}

/// The family an [`Error`] belongs to.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum ErrorKind {
    /// Options, settings or station list.
    Settings,
    /// Stations that make no polygons: too few, too wide, all on a line.
    Network,
    /// No usable report.
    Reports,
    /// The reports are not in the order of time.
    Order,
    /// A file could not be read.
    Read,
    /// A file could not be written.
    Write,
    /// The geometry failed its own test against the rotation of the Earth.
    SelfTest,
}

/// Why a run was not done.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum Error {
    /// Settings and station list have these defects, all that were found.
    #[error("{}", list(.0))]
    Invalid(Vec<Problem>),
    /// Options that do not go together.
    #[error("{0}")]
    Options(String),
    /// The stations make no polygons.
    #[error("{0}")]
    Network(String),
    /// There is nothing to estimate from.
    #[error("{0}")]
    Reports(String),
    /// Reports came after others of the same time had been worked on; they must be sorted first.
    #[error("the reports are not in the order of time ({0})")]
    NotInOrder(String),
    /// A file could not be read.
    #[error("cannot read {}: {source}", path.display())]
    Read {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// A file could not be written; none was left half written.
    #[error("cannot write {}: {source}", path.display())]
    Write {
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// The engine's planetary vorticity differs from the independent integral.
    #[error(
        "self-test of the geometry: planetary vorticity of polygon {polygon} differs by {difference:.1e} of 2 Omega \
         (at most {allowed:.0e} expected); no results were written"
    )]
    SelfTest {
        /// Worst polygon.
        polygon: String,
        /// Difference divided by 2 Omega.
        difference: f64,
        /// Largest difference allowed.
        allowed: f64,
    },
}

impl Error {
    /// The family of the error.
    #[must_use]
    pub fn kind(&self) -> ErrorKind {
        match self {
            Self::Invalid(_) | Self::Options(_) => ErrorKind::Settings,
            Self::Network(_) => ErrorKind::Network,
            Self::Reports(_) => ErrorKind::Reports,
            Self::NotInOrder(_) => ErrorKind::Order,
            Self::Read { .. } => ErrorKind::Read,
            Self::Write { .. } => ErrorKind::Write,
            Self::SelfTest { .. } => ErrorKind::SelfTest,
        }
    }

    /// Where the (first) defect stands, for defects of an input.
    #[must_use]
    pub fn position(&self) -> Option<&Place> {
        match self {
            Self::Invalid(problems) => problems.first().map(|p| &p.place),
            _ => None,
        }
    }

    pub(crate) fn read(path: &Path, source: std::io::Error) -> Self {
        Self::Read {
            path: path.to_path_buf(),
            source,
        }
    }

    pub(crate) fn write(path: &Path, source: std::io::Error) -> Self {
        Self::Write {
            path: path.to_path_buf(),
            source,
        }
    }

    /// True if the cause is a reader that closed the pipe.
    #[must_use]
    pub fn is_closed_pipe(&self) -> bool {
        matches!(self, Self::Write { source, .. } if source.kind() == std::io::ErrorKind::BrokenPipe)
    }
}

fn list(problems: &[Problem]) -> String {
    let lines: Vec<String> = problems.iter().map(ToString::to_string).collect();
    lines.join("\n")
}

/// The known name closest to `found`, if one is close enough to be meant.
#[must_use]
pub fn nearest_name<'a>(found: &str, known: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let found = found.to_lowercase();
    known
        .into_iter()
        .filter_map(|name| {
            let candidate = name.to_lowercase();
            let distance = strsim::damerau_levenshtein(&found, &candidate);
            let shorter = found.len().min(candidate.len());
            let abbreviated =
                shorter >= 3 && (found.starts_with(&candidate) || candidate.starts_with(&found));
            let allowed = 1 + found.len().max(candidate.len()) / 6;
            (abbreviated || distance <= allowed && distance < shorter).then_some((distance, name))
        })
        .min_by_key(|(distance, _)| *distance)
        .map(|(_, name)| name)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nearest_name_needs_likeness() {
        assert_eq!(
            nearest_name("intervall", ["tolerance", "interval"]),
            Some("interval")
        );
        assert_eq!(nearest_name("latitude", ["lat", "longitude"]), Some("lat"));
        assert_eq!(nearest_name("colour", ["tolerance", "interval"]), None);
    }
}
