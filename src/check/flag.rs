//! Flags of reports, and of each test of a report.

use serde::Serialize;

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

    /// The word for people.
    #[must_use]
    pub const fn word(self) -> &'static str {
        match self {
            Self::Pass => "pass",
            Self::NotEvaluated => "not evaluated",
            Self::Suspect => "suspect",
            Self::Fail => "fail",
            Self::Missing => "missing",
        }
    }

    /// True unless what it stands for failed or is missing.
    #[must_use]
    pub const fn is_usable(self) -> bool {
        !matches!(self, Self::Fail | Self::Missing)
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

/// A test of a report. The numbers are those of the QARTOD wind manual; its test 2 (syntax) is the reader's.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize)]
#[serde(rename_all = "snake_case")]
#[repr(u8)]
pub enum Test {
    /// 1: whether the report before it came in time. Says nothing of this one: it is not in the report's own flag.
    TimingGap,
    /// 3: the report's own position against the list.
    Location,
    /// 4: speeds that the sensor, or the place, cannot have.
    GrossRange,
    /// 5: the user's table by month.
    Climatology,
    /// 6: a report that both its neighbours deny.
    Spike,
    /// 7: a change beyond those of the past hours.
    RateOfChange,
    /// 8: speed and direction repeated.
    FlatLine,
    /// 8, for the direction alone.
    StuckVane,
    /// 8, for the speed alone.
    FrozenAnemometer,
    /// WMO: least variation in an hour of one-minute values.
    Persistence,
    /// WMO: fields that deny each other.
    Agreement,
    /// 10: too little variation in half a day.
    AttenuatedSignal,
    /// 11: against the stations around it, at the analysis times ([`crate::spatial`]).
    Neighbour,
}

impl Test {
    /// All of them, in order.
    pub const ALL: [Self; 13] = [
        Self::TimingGap,
        Self::Location,
        Self::GrossRange,
        Self::Climatology,
        Self::Spike,
        Self::RateOfChange,
        Self::FlatLine,
        Self::StuckVane,
        Self::FrozenAnemometer,
        Self::Persistence,
        Self::Agreement,
        Self::AttenuatedSignal,
        Self::Neighbour,
    ];

    /// The name in settings and tables.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::TimingGap => "timing_gap",
            Self::Location => "location",
            Self::GrossRange => "gross_range",
            Self::Climatology => "climatology",
            Self::Spike => "spike",
            Self::RateOfChange => "rate_of_change",
            Self::FlatLine => "flat_line",
            Self::StuckVane => "stuck_vane",
            Self::FrozenAnemometer => "frozen_anemometer",
            Self::Persistence => "persistence",
            Self::Agreement => "agreement",
            Self::AttenuatedSignal => "attenuated_signal",
            Self::Neighbour => "neighbour",
        }
    }

    /// The name for people.
    #[must_use]
    pub fn words(self) -> String {
        self.name().replace('_', " ")
    }

    /// Place of its two bits.
    const fn shift(self) -> u32 {
        2 * self as u32
    }
}

/// The flags of all tests of a report, two bits each.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct TestFlags(u32);

/// The lower bit of each test whose flag is part of the report's own.
const OF_THE_REPORT: u32 = 0x0155_5554;

impl TestFlags {
    /// The bits of the tests that are not among `off`.
    #[must_use]
    pub fn mask_without(off: &[Test]) -> Self {
        let mut mask = u32::MAX;
        for test in off {
            mask &= !(3 << test.shift());
        }
        Self(mask)
    }

    /// The flags of the tests of a mask; the others are not evaluated.
    #[must_use]
    pub const fn masked(self, mask: Self) -> Self {
        Self(self.0 & mask.0)
    }

    /// These flags, with that of a test that has none yet.
    #[inline]
    #[must_use]
    pub const fn with(self, test: Test, flag: Flag) -> Self {
        let bits = match flag {
            Flag::NotEvaluated => 0,
            Flag::Pass => 1,
            Flag::Suspect => 2,
            Flag::Fail | Flag::Missing => 3,
        };
        Self(self.0 | bits << test.shift())
    }

    /// The flag of a test.
    #[must_use]
    pub const fn get(self, test: Test) -> Flag {
        match (self.0 >> test.shift()) & 3 {
            0 => Flag::NotEvaluated,
            1 => Flag::Pass,
            2 => Flag::Suspect,
            // A gap is no failure: what is missing stands before the report.
            _ if matches!(test, Test::TimingGap) => Flag::Missing,
            _ => Flag::Fail,
        }
    }

    /// True if any test has more to say than pass, a gap included.
    #[inline]
    #[must_use]
    pub const fn any_raised(self) -> bool {
        self.0 & 0x02aa_aaaa != 0
    }

    /// The worst flag of the tests of the report itself.
    #[inline]
    #[must_use]
    pub const fn worst(self) -> Flag {
        let (low, high) = (self.0 & OF_THE_REPORT, self.0 >> 1 & OF_THE_REPORT);
        if high == 0 {
            if low == 0 {
                Flag::NotEvaluated
            } else {
                Flag::Pass
            }
        } else if high & low == 0 {
            Flag::Suspect
        } else {
            Flag::Fail
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn each_test_keeps_its_own_flag_and_the_worst_stands() {
        let mut flags = TestFlags::default();
        assert_eq!(flags.worst(), Flag::NotEvaluated);
        for test in Test::ALL {
            assert_eq!(flags.get(test), Flag::NotEvaluated);
            flags = flags.with(test, Flag::Pass);
            assert_eq!(flags.get(test), Flag::Pass);
        }
        assert_eq!(flags.worst(), Flag::Pass);
        let gap = TestFlags::default().with(Test::TimingGap, Flag::Missing);
        assert_eq!(gap.get(Test::TimingGap), Flag::Missing);
        assert_eq!(gap.worst(), Flag::NotEvaluated);
        for test in Test::ALL.into_iter().skip(1) {
            let suspect = gap.with(test, Flag::Suspect);
            assert_eq!(
                (suspect.worst(), suspect.get(test)),
                (Flag::Suspect, Flag::Suspect)
            );
            let failed = suspect.with(test, Flag::Fail);
            assert_eq!((failed.worst(), failed.get(test)), (Flag::Fail, Flag::Fail));
            let off = failed.masked(TestFlags::mask_without(&[test]));
            assert_eq!(off.get(test), Flag::NotEvaluated);
        }
    }
}
