//! Flat line, stuck vane, frozen anemometer.

use super::point::{Point, turn};
use super::run::Run;
use super::witness::Witness;
use super::{Flag, Test};
use crate::settings::CheckLimits;

/// Speeds count as the same within this, m/s: less than any station resolves.
const SAME_SPEED: f64 = 1e-6;

/// To what a station rounds: steps of 5 degrees or of 0.4 m/s and more are coarse, and repeat by themselves.
#[derive(Debug, Clone, Copy)]
pub(super) struct Coarse {
    pub direction: bool,
    pub speed: bool,
}

impl Coarse {
    /// Nothing is known yet: be lenient.
    pub const UNKNOWN: Self = Self {
        direction: true,
        speed: true,
    };
}

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
    ///   and 1 kt, so a time is asked for beside it: the hour of WMO's persistence test (Zahumenský 2004) and the 3 h
    ///   and 12 h for speed, 3 h and 18 h for direction of EPA's guidance for meteorological monitoring (from memory).
    /// - Calm and winds below the starting threshold are exempt: they repeat in sound sensors.
    #[inline]
    pub fn judge<W: Witness>(
        &mut self,
        now: &Point,
        follows: bool,
        coarse: Coarse,
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
            self.speeds = (self.speeds.0.min(now.speed), self.speeds.1.max(now.speed));
        } else {
            self.first_direction = now.direction;
            self.speeds = (now.speed, now.speed);
        }
        let same_speed = follows && (now.speed - self.first_speed).abs() <= SAME_SPEED;
        self.speed.go_on(same_speed, now.time);
        if same_speed {
            self.turned.1 = self.turned.1.max(turn(now.direction, self.turned.0));
        } else {
            self.first_speed = now.speed;
            self.turned = (now.direction, 0.0);
        }
        self.flags(now.time, coarse, limits, witness)
    }

    #[inline]
    fn flags<W: Witness>(
        &self,
        time: i64,
        coarse: Coarse,
        limits: &CheckLimits,
        witness: &mut W,
    ) -> StuckFlags {
        // A pair repeats by itself only if both are coarse.
        let both = coarse.direction && coarse.speed;
        let flat_line = self.both.flag(time, &limits.flat_line.run, both);
        let varies = self.speeds.1 - self.speeds.0 >= limits.stuck_vane.varies;
        let vane = match self
            .direction
            .flag(time, &limits.stuck_vane.run, coarse.direction)
        {
            Flag::Suspect | Flag::Fail if !varies => Flag::Pass,
            flag => flag,
        };
        let turns = self.turned.1 >= limits.frozen_anemometer.varies;
        let anemometer = match self
            .speed
            .flag(time, &limits.frozen_anemometer.run, coarse.speed)
        {
            Flag::Suspect | Flag::Fail if !turns => Flag::Pass,
            flag => flag,
        };
        witness.tell(Test::FlatLine, flat_line, || {
            let words = self.both.words(time, &limits.flat_line.run, both);
            format!("speed and direction {words}")
        });
        witness.tell(Test::StuckVane, vane, || {
            let run = &limits.stuck_vane.run;
            format!(
                "direction {}, if the speed varies by {} m/s (it does by {:.1})",
                self.direction.words(time, run, coarse.direction),
                limits.stuck_vane.varies,
                self.speeds.1 - self.speeds.0
            )
        });
        witness.tell(Test::FrozenAnemometer, anemometer, || {
            let run = &limits.frozen_anemometer.run;
            format!(
                "speed {}, if the direction varies by {} degrees (it does by {:.0})",
                self.speed.words(time, run, coarse.speed),
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
