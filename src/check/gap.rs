//! Timing and gaps.

use super::point::hours;
use super::witness::Witness;
use super::{Flag, Test};

/// Whether the report before came in time: 9 (missing) stands for what should be between.
///
/// - **Reference**: QARTOD wind manual, test 1 (timing/gap, TIM_INC 1 h in its example). The manual flags what has not
///   arrived by now; in an archive that is what is missing before the next report.
#[inline]
pub(super) fn gap_flag<W: Witness>(since: Option<i64>, within: i64, witness: &mut W) -> Flag {
    let flag = match since {
        None => Flag::NotEvaluated,
        Some(since) if since > within => Flag::Missing,
        Some(_) => Flag::Pass,
    };
    witness.tell(Test::TimingGap, flag, || match since {
        None => "the first report of the station".into(),
        Some(since) => format!(
            "{} after the report before; more than {} is a gap",
            hours(since),
            hours(within)
        ),
    });
    flag
}
