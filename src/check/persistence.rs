//! WMO's persistence test of one-minute values.

use super::point::{Point, hours, larger, smaller, turn};
use super::run::Run;
use super::witness::Witness;
use super::{Flag, Test};
use crate::settings::PersistenceLimits;

/// Follows how long speed and direction stay within narrow bands.
#[derive(Debug, Clone, Default)]
pub(super) struct Persistence {
    speed: Run,
    speeds: (f64, f64),
    direction: Run,
    /// Direction at the beginning, and the furthest turns to the left and right of it, degrees.
    turns: (f64, f64, f64),
}

impl Persistence {
    /// Suspect where, over an hour of reports two minutes apart or less, speed or direction varies by less than the
    /// limits. The bands begin anew where one is left.
    ///
    /// - **Reference**: WMO guidelines on quality control for automatic stations (Zahumenský 2004), persistence: over at
    ///   least 60 min, one-minute values vary by 0.5 m/s and 10 degrees, unless the wind is nearly calm.
    #[inline]
    pub fn judge<W: Witness>(
        &mut self,
        now: &Point,
        since: i64,
        limits: &PersistenceLimits,
        witness: &mut W,
    ) -> Flag {
        if since > limits.interval || now.speed < limits.exempt_below {
            self.speed.count = 0;
            self.direction.count = 0;
            witness.tell(Test::Persistence, Flag::NotEvaluated, || {
                format!(
                    "only for reports at most {} apart and winds of {} m/s or more",
                    hours(limits.interval),
                    limits.exempt_below
                )
            });
            return Flag::NotEvaluated;
        }
        let (slowest, fastest) = (
            smaller(self.speeds.0, now.speed),
            larger(self.speeds.1, now.speed),
        );
        let stays = self.speed.count > 0 && fastest - slowest < limits.speed;
        self.speed.go_on(stays, now.time);
        self.speeds = if stays {
            (slowest, fastest)
        } else {
            (now.speed, now.speed)
        };
        let signed = signed_turn(now.direction, self.turns.0);
        let (left, right) = (smaller(self.turns.1, signed), larger(self.turns.2, signed));
        let stays = self.direction.count > 0 && right - left < limits.direction;
        self.direction.go_on(stays, now.time);
        self.turns = if stays {
            (self.turns.0, left, right)
        } else {
            (now.direction, 0.0, 0.0)
        };
        let long = |run: &Run| run.count > 2 && now.time - run.since >= limits.period;
        let flag = if long(&self.speed) || long(&self.direction) {
            Flag::Suspect
        } else {
            Flag::Pass
        };
        witness.tell(Test::Persistence, flag, || {
            let minutes = |run: &Run| (now.time - run.since) as f64 / 6e7;
            format!(
                "speed within {} m/s for {:.0} min, direction within {} degrees for {:.0} min; {:.0} min is suspect",
                limits.speed,
                minutes(&self.speed),
                limits.direction,
                minutes(&self.direction),
                limits.period as f64 / 6e7
            )
        });
        flag
    }
}

/// The turn from `b` to `a`, −180 to 180 degrees, clockwise positive.
#[inline]
fn signed_turn(a: f64, b: f64) -> f64 {
    let clockwise = a - b;
    let size = turn(a, b);
    if clockwise > 180.0 || (-180.0..0.0).contains(&clockwise) {
        -size
    } else {
        size
    }
}
