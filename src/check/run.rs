//! Runs of reports during which a value stays the same.

use crate::settings::RunLimits;

use super::Flag;
use super::point::hours;

/// A run of reports.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Run {
    /// Time of its first report, μs.
    pub since: i64,
    /// Reports in it.
    pub count: u32,
}

impl Run {
    /// Goes on, or begins anew.
    #[inline]
    pub fn go_on(&mut self, same: bool, time: i64) {
        if same {
            self.count = self.count.saturating_add(1);
        } else {
            *self = Self {
                since: time,
                count: 1,
            };
        }
    }

    /// What it is worth: both the count and the time must be reached.
    #[inline]
    pub fn flag(&self, time: i64, limits: &RunLimits, coarse: f64) -> Flag {
        // Most runs are short.
        if self.count < limits.suspect_reports {
            return Flag::Pass;
        }
        let lasts = time - self.since;
        let (suspect, fail) = limits.after(coarse);
        if self.count >= limits.fail_reports && lasts >= fail {
            Flag::Fail
        } else if lasts >= suspect {
            Flag::Suspect
        } else {
            Flag::Pass
        }
    }

    /// In words.
    pub fn words(&self, time: i64, limits: &RunLimits, coarse: f64) -> String {
        let (suspect, fail) = limits.after(coarse);
        format!(
            "the same in {} reports, {}; {} in {} is suspect, {} in {} fails",
            self.count,
            hours(time - self.since),
            limits.suspect_reports,
            hours(suspect),
            limits.fail_reports,
            hours(fail)
        )
    }
}
