//! The books of a stage: received = passed + set aside, by reason.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

/// Why something was set aside.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
#[non_exhaustive]
pub enum Reason {
    /// The row has fewer columns than the header.
    TooFewColumns,
    /// A quote does not end on its line, or the line is too long to be a row.
    BrokenLine,
    /// The time cannot be read.
    UnreadableTime,
    /// Speed, direction or component is neither a number nor a missing mark.
    UnreadableWind,
    /// The direction is not within 0 to 360 degrees.
    DirectionOutOfRange,
    /// The speed is below 0.
    NegativeSpeed,
    /// The text of a METAR or SYNOP report cannot be read.
    UnreadableReport,
    /// The position that the row carries is none.
    UnreadablePosition,
    /// The direction is magnetic, and the declination is not known.
    NoDeclination,
    /// A NIL report: the station says that it has none.
    Nil,
    /// The station is not in the list.
    UnknownStation,
    /// The station is in the list, but the settings do not ask for it.
    StationNotAskedFor,
    /// Before or after the time for which the list has the station where it stands.
    OutsideValidity,
    /// A row of the same station and time that lacks what another has.
    Emptier,
    /// The other half of a report: speed and direction came separately.
    Joined,
    /// The same report again.
    Repeated,
    /// A later row of the same station and time says something else, and holds.
    Replaced,
    /// A correction of the report holds.
    Corrected,
    /// There is no speed.
    NoSpeed,
    /// There is a speed, but no direction.
    NoDirection,
    /// Failed a check.
    FailedCheck,
    /// The report stands on another level than the one asked for.
    OtherLevel,
    /// The speed cannot be reduced to the common height.
    NoHeightFactor,
    /// Before the first or after the last analysis time.
    OutsidePeriod,
    /// Another report of the station is nearer to the analysis time.
    NotNearest,
    /// Further from every analysis time than the tolerance, or in no window.
    TooFarInTime,
    /// In a window with fewer reports than asked for.
    TooFewInWindow,
}

impl Reason {
    /// The reason in words, for tables.
    #[must_use]
    pub const fn words(self) -> &'static str {
        match self {
            Self::TooFewColumns => "too few columns",
            Self::BrokenLine => "broken line",
            Self::UnreadableTime => "unreadable time",
            Self::UnreadableWind => "unreadable wind",
            Self::DirectionOutOfRange => "direction out of range",
            Self::NegativeSpeed => "negative speed",
            Self::UnreadableReport => "unreadable report",
            Self::UnreadablePosition => "unreadable position",
            Self::NoDeclination => "no declination",
            Self::Nil => "NIL",
            Self::UnknownStation => "unknown station",
            Self::StationNotAskedFor => "station not asked for",
            Self::OutsideValidity => "outside the station's validity",
            Self::Emptier => "less complete than another",
            Self::Joined => "joined speed and direction",
            Self::Repeated => "repeated",
            Self::Replaced => "replaced by a later row",
            Self::Corrected => "corrected",
            Self::NoSpeed => "no speed",
            Self::NoDirection => "no direction",
            Self::FailedCheck => "failed a check",
            Self::OtherLevel => "on another level",
            Self::NoHeightFactor => "no reduction to the height",
            Self::OutsidePeriod => "outside the period",
            Self::NotNearest => "not nearest to an analysis time",
            Self::TooFarInTime => "too far from an analysis time",
            Self::TooFewInWindow => "too few in the window",
        }
    }

    /// True if the input itself is at fault, not its place in time.
    #[must_use]
    pub const fn is_unusable(self) -> bool {
        matches!(
            self,
            Self::TooFewColumns
                | Self::BrokenLine
                | Self::UnreadableTime
                | Self::UnreadableWind
                | Self::DirectionOutOfRange
                | Self::NegativeSpeed
                | Self::NoDeclination
                | Self::UnreadablePosition
                | Self::UnreadableReport
        )
    }
}

/// What a stage received and what became of it.
#[derive(Debug, Clone, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Tally {
    /// Everything that came in.
    pub received: u64,
    /// What was passed on.
    pub passed: u64,
    /// What was not, by reason.
    pub set_aside: BTreeMap<Reason, u64>,
}

impl Tally {
    /// Counts `n` passed on.
    pub fn pass(&mut self, n: u64) {
        self.received += n;
        self.passed += n;
    }

    /// Counts `n` set aside.
    pub fn set_aside(&mut self, reason: Reason, n: u64) {
        if n > 0 {
            self.received += n;
            *self.set_aside.entry(reason).or_default() += n;
        }
    }

    /// Counts `n`, passed before, as set aside after all.
    pub fn withdraw(&mut self, reason: Reason, n: u64) {
        if n > 0 {
            self.passed -= n;
            *self.set_aside.entry(reason).or_default() += n;
        }
    }

    /// True if received = passed + set aside.
    #[must_use]
    pub fn balances(&self) -> bool {
        self.received == self.passed + self.set_aside.values().sum::<u64>()
    }

    /// How many were set aside for one reason.
    #[must_use]
    pub fn count(&self, reason: Reason) -> u64 {
        self.set_aside.get(&reason).copied().unwrap_or(0)
    }
}

impl std::ops::AddAssign<&Self> for Tally {
    fn add_assign(&mut self, other: &Self) {
        self.received += other.received;
        self.passed += other.passed;
        for (&reason, &n) in &other.set_aside {
            *self.set_aside.entry(reason).or_default() += n;
        }
    }
}
