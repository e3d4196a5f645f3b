//! Checks of the reports. A check removes nothing: it raises a flag, and the alignment decides.

mod range;
mod summary;

use serde::Serialize;

pub use range::check_range;
pub use summary::{StationReading, StationSums};

/// Quality flag with the values of IOOS QARTOD.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize)]
#[serde(into = "u8")]
#[repr(u8)]
pub enum Flag {
    // In the order of severity: a test that ran says more than one that did not.
    /// 2: not evaluated.
    NotEvaluated,
    /// 1: passed what was checked.
    Pass,
    /// 3: suspect, or of high interest.
    Suspect,
    /// 4: failed.
    Fail,
    /// 9: missing.
    Missing,
}

impl Flag {
    /// The QARTOD value.
    #[must_use]
    pub const fn value(self) -> u8 {
        match self {
            Self::Pass => 1,
            Self::NotEvaluated => 2,
            Self::Suspect => 3,
            Self::Fail => 4,
            Self::Missing => 9,
        }
    }

    /// The worse of two flags.
    #[must_use]
    pub fn worst(self, other: Self) -> Self {
        self.max(other)
    }
}

impl From<Flag> for u8 {
    fn from(flag: Flag) -> Self {
        flag.value()
    }
}
