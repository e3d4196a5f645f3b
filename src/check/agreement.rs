//! Fields of a report against each other.

use super::witness::Witness;
use super::{Flag, Test};
use crate::report::{Content, ReportTable};
use crate::settings::AgreementLimits;

/// Suspect where the gust is below the mean, and, if asked for, where a calm has a direction. A speed without a
/// direction, or the other way round, is what the report holds and no fault.
///
/// - **Reference**: WMO guidelines on quality control for automatic stations (Zahumenský 2004), internal consistency:
///   gust ≥ mean; speed 0 and direction 00 go together. Many loggers keep the last direction in a calm, so the second is
///   off by default.
#[inline]
pub(super) fn agreement_flag<W: Witness>(
    table: &ReportTable,
    i: usize,
    content: Content,
    limits: &AgreementLimits,
    witness: &mut W,
) -> Flag {
    let speed = table.speed(i).unwrap_or(0.0);
    let gust = table.gust(i);
    let low_gust = gust.is_some_and(|gust| gust < speed - limits.gust_below);
    let turned_calm =
        content == Content::Calm && limits.calm_direction && table.calm_has_direction(i);
    let flag = if low_gust || turned_calm {
        Flag::Suspect
    } else {
        Flag::Pass
    };
    witness.tell(Test::Agreement, flag, || {
        let mut words = match gust {
            Some(gust) => format!(
                "gust {gust:.1} m/s, mean {speed:.1} m/s; more than {} m/s below the mean is suspect",
                limits.gust_below
            ),
            None => "no gust".into(),
        };
        if content == Content::SpeedOnly {
            words.push_str("; a speed without a direction is no fault");
        }
        if content == Content::Calm && table.calm_has_direction(i) {
            words.push_str("; a calm with a direction");
        }
        words
    });
    flag
}
