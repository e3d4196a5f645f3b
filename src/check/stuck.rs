//! Flat line, stuck vane, frozen anemometer.

use super::point::{Point, larger, smaller, turn};
use super::run::Run;
use super::steps::Steps;
use super::witness::Witness;
use super::{Flag, Test};
use crate::settings::CheckLimits;

/// Speeds count as the same within this, m/s: less than any station resolves.
const SAME_SPEED: f64 = 1e-6;

/// Flags of the three tests.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct StuckFlags {
    pub flat_line: Flag,
    pub vane: Flag,
    pub anemometer: Flag,
}

/// Follows what repeats.
#[derive(Debug, Clone, Default)]
pub(super) struct Stuck {
    /// Speed and direction.
    both: Run,
    /// Speed and direction at the beginning of it.
    first: (f64, f64),
    /// Direction.
    direction: Run,
    first_direction: f64,
    /// Slowest and fastest during it.
    speeds: (f64, f64),
    /// Speed.
    speed: Run,
    first_speed: f64,
    /// Direction at its beginning, and the largest turn from it.
    turned: (f64, f64),
}

impl Stuck {
    /// Judges a report; `follows` says that it stands near enough after the one before.
    ///
    /// - **Reference**: QARTOD wind manual, test 8 (flat line: 3 equal reports are suspect, 5 fail, in its example within
    ///   0.5 m/s, "0 may apply"). A count alone would fail sound stations that report each minute or round to 10 degrees
    ///   and 1 kt, so a time is asked for beside it. For one quantity alone: 3 h for finely rounded stations, 12 h (speed)
    ///   and 18 h (direction) for coarse ones, from EPA's guidance for meteorological monitoring (from memory). For both
    ///   together: in 420,000 one-minute reports of Singapore (1 degree, 0.1 kt) the longest run is 3 min, in a year of
    ///   three airports (10 degrees, 1 kt, hourly) 3 h, in two typhoons at Hong Kong (45 degrees, 1 km/h) 50 min.
    /// - Calm and winds below the starting threshold are exempt: they repeat in sound sensors.
    #[inline]
    pub fn judge<W: Witness>(
        &mut self,
        now: &Point,
        follows: bool,
        steps: Steps,
        limits: &CheckLimits,
        witness: &mut W,
    ) -> StuckFlags {
        if now.speed < limits.starting_speed {
            *self = Self::default();
            for test in [Test::FlatLine, Test::StuckVane, Test::FrozenAnemometer] {
                witness.tell(test, Flag::Pass, || {
                    format!(
                        "exempt: below the starting threshold of {} m/s",
                        limits.starting_speed
                    )
                });
            }
            return StuckFlags {
                flat_line: Flag::Pass,
                vane: Flag::Pass,
                anemometer: Flag::Pass,
            };
        }
        let epsilon = &limits.flat_line;
        let same_both = follows
            && (now.speed - self.first.0).abs() <= epsilon.speed + SAME_SPEED
            && turn(now.direction, self.first.1) <= epsilon.direction;
        self.both.go_on(same_both, now.time);
        if !same_both {
            self.first = (now.speed, now.direction);
        }
        let same_direction =
            follows && turn(now.direction, self.first_direction) <= epsilon.direction;
        self.direction.go_on(same_direction, now.time);
        if same_direction {
            self.speeds = (
                smaller(self.speeds.0, now.speed),
                larger(self.speeds.1, now.speed),
            );
        } else {
            self.first_direction = now.direction;
            self.speeds = (now.speed, now.speed);
        }
        let same_speed = follows && (now.speed - self.first_speed).abs() <= SAME_SPEED;
        self.speed.go_on(same_speed, now.time);
        if same_speed {
            self.turned.1 = larger(self.turned.1, turn(now.direction, self.turned.0));
        } else {
            self.first_speed = now.speed;
            self.turned = (now.direction, 0.0);
        }
        self.flags(now.time, steps, limits, witness)
    }

    #[inline]
    fn flags<W: Witness>(
        &self,
        time: i64,
        steps: Steps,
        limits: &CheckLimits,
        witness: &mut W,
    ) -> StuckFlags {
        let flat_line = self.both.flag(time, &limits.flat_line.run, steps.both);
        let varies = self.speeds.1 - self.speeds.0 >= limits.stuck_vane.varies;
        let vane = match self
            .direction
            .flag(time, &limits.stuck_vane.run, steps.direction)
        {
            Flag::Suspect | Flag::Fail if !varies => Flag::Pass,
            flag => flag,
        };
        let turns = self.turned.1 >= limits.frozen_anemometer.varies;
        let anemometer = match self
            .speed
            .flag(time, &limits.frozen_anemometer.run, steps.speed)
        {
            Flag::Suspect | Flag::Fail if !turns => Flag::Pass,
            flag => flag,
        };
        witness.tell(Test::FlatLine, flat_line, || {
            let words = self.both.words(time, &limits.flat_line.run, steps.both);
            format!("speed and direction {words}")
        });
        witness.tell(Test::StuckVane, vane, || {
            let run = &limits.stuck_vane.run;
            format!(
                "direction {}, if the speed varies by {} m/s (it does by {:.1})",
                self.direction.words(time, run, steps.direction),
                limits.stuck_vane.varies,
                self.speeds.1 - self.speeds.0
            )
        });
        witness.tell(Test::FrozenAnemometer, anemometer, || {
            let run = &limits.frozen_anemometer.run;
            format!(
                "speed {}, if the direction varies by {} degrees (it does by {:.0})",
                self.speed.words(time, run, steps.speed),
                limits.frozen_anemometer.varies,
                self.turned.1
            )
        });
        StuckFlags {
            flat_line,
            vane,
            anemometer,
        }
    }
}
