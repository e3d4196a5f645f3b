//! Spikes.

use super::point::{Step, larger};
use super::witness::Witness;
use super::{Flag, Test};
use crate::settings::SpikeLimits;

/// A report that differs from the mean of its neighbours, and from both of them the same way.
///
/// - **Reference**: QARTOD wind manual, test 6 (spike): |x(n−1) − (x(n−2) + x(n))/2| above the low limit is suspect,
///   above the high one fails; 20 and 40 m/s in its example. Directions are tested through u and v, as it asks.
/// - **Departs from it** in that the report must differ from each neighbour by half of that or more, to the same side:
///   else the report before a step, or beside a spike, would be called a spike too.
/// - What rounding of the direction can make of a steady wind (`rounding`, m/s) is allowed on top for u and v.
/// - The last report of a station waits for the next one and is not evaluated.
#[inline]
pub(super) fn spike_flag<W: Witness>(
    back: Option<Step>,
    ahead: Option<Step>,
    rounding: f64,
    limits: &SpikeLimits,
    witness: &mut W,
) -> Flag {
    let (Some(back), Some(ahead)) = (back, ahead) else {
        witness.tell(Test::Spike, Flag::NotEvaluated, || {
            let side = if back.is_none() { "before" } else { "after" };
            format!("no report near enough {side} it to compare with")
        });
        return Flag::NotEvaluated;
    };
    let height = || {
        let vector = height(back.u, ahead.u).max(height(back.v, ahead.v));
        height(back.speed, ahead.speed)
            .max(vector - rounding)
            .max(0.0)
    };
    // No more than the deviation itself; nearly all reports end here.
    let rough = larger(
        (back.u - ahead.u).abs(),
        larger((back.v - ahead.v).abs(), (back.speed - ahead.speed).abs()),
    );
    let flag = if 0.5 * rough <= limits.suspect {
        Flag::Pass
    } else {
        let height = height();
        if height <= limits.suspect {
            Flag::Pass
        } else if height <= limits.fail {
            Flag::Suspect
        } else {
            Flag::Fail
        }
    };
    witness.tell(Test::Spike, flag, || {
        let height = height();
        format!(
            "stands out by {height:.1} m/s from its neighbours (the most of speed, u and v, these less {rounding:.1} for \
             rounding); above {} m/s is suspect, above {} m/s fails",
            limits.suspect, limits.fail
        )
    });
    flag
}

/// By how much a value stands out, from the steps to it and from it; 0 where it is no spike.
#[inline]
fn height(back: f64, ahead: f64) -> f64 {
    let deviation = 0.5 * (back - ahead).abs();
    let least = back.abs().min(ahead.abs());
    if back * ahead < 0.0 && 2.0 * least >= deviation {
        deviation
    } else {
        0.0
    }
}
