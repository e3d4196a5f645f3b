//! What a gain may come of: causes whose numbers fit within the errors.

use serde::Serialize;

/// What is wrong with a station.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(tag = "cause", rename_all = "snake_case")]
#[non_exhaustive]
pub enum Fault {
    /// It reports 0 while the others have wind.
    Still,
    /// It repeats one wind.
    Stuck,
    /// Many single values stand far outside.
    Spikes,
    /// It reports the winds of another station, and that one its.
    Exchanged {
        /// The other station.
        with: usize,
    },
    /// u and v are swapped.
    Swapped,
    /// Directions are counted the wrong way round.
    Mirrored,
    /// The clock is whole hours off: zone or daylight time.
    ClockHours {
        /// Hours ahead.
        hours: f64,
    },
    /// The time stands for another point of the averaging interval.
    ClockLabel {
        /// By what share of the interval: ½ or 1.
        share: f64,
    },
    /// The clock is an hour off in part of the record: daylight time.
    DaylightTime,
    /// The clock was set anew.
    ClockSet,
    /// The clock gains or loses.
    ClockDrift,
    /// The clock is off.
    Clock,
    /// Directions say where the wind blows to.
    Reversed,
    /// The magnetic declination is not applied.
    DeclinationMissing {
        /// The declination, degrees.
        declination: f64,
    },
    /// The magnetic declination is applied twice, or where it should not be.
    DeclinationDoubled {
        /// The declination, degrees.
        declination: f64,
    },
    /// The vane is turned.
    Turned,
    /// Speeds are in another unit.
    Unit {
        /// Reported over true.
        factor: f64,
        /// The unit reported in.
        reported: &'static str,
        /// The unit taken.
        taken: &'static str,
    },
    /// Speeds are too low.
    Slow,
    /// Speeds are too high.
    Fast,
    /// Its gain was off, and is in order now.
    PutRight,
    /// It does not follow its neighbours.
    Unexplained,
}

/// Unit mix-ups: reported over true, the unit of the reports, the unit that they are taken for. Knot and mile from their
/// definitions of 1852 m and 1609.344 m.
const UNITS: [(f64, &str, &str); 6] = [
    (3600.0 / 1852.0, "kt", "m/s"),
    (1852.0 / 3600.0, "m/s", "kt"),
    (3600.0 / 1609.344, "mph", "m/s"),
    (1609.344 / 3600.0, "m/s", "mph"),
    (3.6, "km/h", "m/s"),
    (1.0 / 3.6, "m/s", "km/h"),
];
/// A site by itself may add so much to the logarithm of a factor.
const SITE_LOG: f64 = 0.04;
/// And to an angle, degrees.
const SITE_ANGLE: f64 = 2.0;
/// A declination smaller than this cannot be told from a site, degrees.
const LEAST_DECLINATION: f64 = 4.0;

/// The cause of a turn, reported minus true, degrees clockwise, of which the 95 % interval is ± `half`.
///
/// Without the correction a vane set to magnetic north reports true − declination; with the correction where the vane was
/// set to true north, or twice, true + declination.
#[must_use]
pub fn cause_of_turn(turn: f64, half: f64, declination: Option<f64>) -> Fault {
    let off = |from: f64| {
        let d = (turn - from).rem_euclid(360.0);
        d.min(360.0 - d)
    };
    let within = half + SITE_ANGLE;
    if off(180.0) <= within.max(12.0) {
        return Fault::Reversed;
    }
    if let Some(declination) = declination.filter(|d| d.abs() >= LEAST_DECLINATION) {
        if off(-declination) <= within {
            return Fault::DeclinationMissing { declination };
        }
        if off(declination) <= within {
            return Fault::DeclinationDoubled { declination };
        }
    }
    Fault::Turned
}

/// The cause of a factor, reported over true, of which the 95 % interval of the logarithm is ± `half`.
#[must_use]
pub fn cause_of_factor(factor: f64, half: f64) -> Fault {
    let log = factor.ln();
    let off = |unit: &(f64, &'static str, &'static str)| (log - unit.0.ln()).abs();
    let nearest = UNITS.iter().min_by(|a, b| off(a).total_cmp(&off(b)));
    if let Some(unit) = nearest.filter(|unit| off(unit) <= half + SITE_LOG) {
        return Fault::Unit {
            factor: unit.0,
            reported: unit.1,
            taken: unit.2,
        };
    }
    if log < 0.0 { Fault::Slow } else { Fault::Fast }
}

/// The cause of a clock error, s ahead, of standard error `error`; `averaging` is the averaging interval of the reports,
/// s, if known. An hour is taken for the zone, also where reports are hourly means.
#[must_use]
pub fn cause_of_lag(lag: f64, error: f64, interval: f64, averaging: f64) -> Fault {
    let slack = (2.0 * error).max(0.5 * interval).min(900.0);
    let hours = (lag / 3600.0).round();
    if hours != 0.0 && (lag - 3600.0 * hours).abs() <= slack {
        return Fault::ClockHours { hours };
    }
    for share in [0.5, 1.0] {
        let label = share * averaging;
        if label > 0.0 && (lag.abs() - label).abs() <= slack.min(0.25 * averaging) {
            return Fault::ClockLabel { share };
        }
    }
    Fault::Clock
}

impl Fault {
    /// The cause in one word, for tables.
    #[must_use]
    pub fn name(&self) -> &'static str {
        match self {
            Self::Still => "still",
            Self::Stuck => "stuck",
            Self::Spikes => "spikes",
            Self::Exchanged { .. } => "exchanged",
            Self::Swapped => "u_v_swapped",
            Self::Mirrored => "mirrored",
            Self::ClockHours { .. } => "clock_hours",
            Self::ClockLabel { .. } => "clock_label",
            Self::DaylightTime => "daylight_time",
            Self::ClockSet => "clock_set",
            Self::ClockDrift => "clock_drift",
            Self::Clock => "clock",
            Self::Reversed => "direction_to",
            Self::DeclinationMissing { .. } => "declination_missing",
            Self::DeclinationDoubled { .. } => "declination_doubled",
            Self::Turned => "turned",
            Self::Unit { .. } => "unit",
            Self::Slow => "slow",
            Self::Fast => "fast",
            Self::PutRight => "put_right",
            Self::Unexplained => "unexplained",
        }
    }

    /// What is wrong, in words.
    #[must_use]
    pub fn words(&self) -> String {
        match self {
            Self::Still => "reports 0 while others have wind".into(),
            Self::Stuck => "repeats one wind".into(),
            Self::Spikes => "single values far outside".into(),
            Self::Exchanged { .. } => "data of two stations exchanged".into(),
            Self::Swapped => "u and v swapped".into(),
            Self::Mirrored => "directions run the wrong way round".into(),
            Self::ClockHours { hours } => {
                let side = if *hours > 0.0 { "ahead" } else { "behind" };
                format!("clock {} h {side}: zone or daylight time", hours.abs())
            }
            Self::ClockLabel { share } if *share < 0.75 => {
                "time half an averaging interval off (middle for start or end)".into()
            }
            Self::ClockLabel { .. } => "time of the other end of the averaging interval".into(),
            Self::DaylightTime => "daylight time in part of the record".into(),
            Self::ClockSet => "clock set anew in the record".into(),
            Self::ClockDrift => "clock drifts".into(),
            Self::Clock => "clock off".into(),
            Self::Reversed => "direction to instead of from".into(),
            Self::DeclinationMissing { declination } => {
                format!("declination of {declination:+.1} degrees not applied")
            }
            Self::DeclinationDoubled { declination } => {
                format!("declination of {declination:+.1} degrees applied twice or in error")
            }
            Self::Turned => "vane turned".into(),
            Self::Unit {
                reported, taken, ..
            } => format!("{reported} taken for {taken}"),
            Self::Slow => "speeds too low".into(),
            Self::Fast => "speeds too high".into(),
            Self::PutRight => "was off, in order now".into(),
            Self::Unexplained => "does not follow its neighbours".into(),
        }
    }

    /// What to check on site.
    #[must_use]
    pub fn to_check(&self) -> &'static str {
        match self {
            Self::Still => "anemometer seized or iced, cable, power of the sensor",
            Self::Stuck => {
                "sensor and logger: does the value change when the vane is turned by hand?"
            }
            Self::Spikes => "plugs, cable, lightning protection, transmission",
            Self::Exchanged { .. } => "identifiers in logger and data base, not the mast",
            Self::Swapped => "order of the components in logger or data base",
            Self::Mirrored => {
                "wiring of the vane's potentiometer, sign of a component in the logger"
            }
            Self::ClockHours { .. } => "time zone and daylight time of the logger or of its file",
            Self::DaylightTime => "logger or file: switch to and from daylight time",
            Self::ClockSet => "log of the logger's clock: when and why it was set",
            Self::ClockDrift => "battery and quartz of the logger's clock; its synchronisation",
            Self::ClockLabel { .. } => {
                "whether the time is the start, middle or end of the average"
            }
            Self::Clock => "clock of the logger and its synchronisation",
            Self::Reversed => "logger: direction from or to",
            Self::DeclinationMissing { .. } => "whether the vane was set to magnetic north",
            Self::DeclinationDoubled { .. } => {
                "whether logger and data base both correct for magnetic north"
            }
            Self::Turned => {
                "north mark of the vane against a bearing; clamp; then buildings and trees"
            }
            Self::Unit { .. } => "unit in logger and settings, not the mast",
            Self::Slow => "bearings, ice, age of the anemometer; shelter; height of the sensor",
            Self::Fast => {
                "scale of the anemometer in the logger; height of the sensor; exposed site"
            }
            Self::PutRight => "nothing on site; leave out or correct its earlier reports",
            Self::Unexplained => {
                "exposure of the site; vane and anemometer; what else changed there"
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn causes_whose_numbers_fit() {
        assert_eq!(cause_of_turn(178.0, 3.0, Some(12.0)), Fault::Reversed);
        assert_eq!(cause_of_turn(-179.0, 1.0, None), Fault::Reversed);
        let declination = 12.0;
        assert_eq!(
            cause_of_turn(-11.0, 2.0, Some(declination)),
            Fault::DeclinationMissing { declination }
        );
        assert_eq!(
            cause_of_turn(13.0, 2.0, Some(declination)),
            Fault::DeclinationDoubled { declination }
        );
        assert_eq!(cause_of_turn(25.0, 2.0, Some(declination)), Fault::Turned);
        assert_eq!(cause_of_turn(1.0, 2.0, Some(0.5)), Fault::Turned);
        for (factor, unit) in [
            (1.95, "kt"),
            (0.51, "m/s"),
            (2.25, "mph"),
            (0.45, "m/s"),
            (3.5, "km/h"),
            (0.28, "m/s"),
        ] {
            let found = cause_of_factor(factor, 0.03);
            assert!(
                matches!(found, Fault::Unit { reported, .. } if reported == unit),
                "{factor} {found:?}"
            );
        }
        assert_eq!(cause_of_factor(0.8, 0.03), Fault::Slow);
        assert_eq!(cause_of_factor(1.3, 0.03), Fault::Fast);
        assert_eq!(
            cause_of_lag(3590.0, 60.0, 300.0, 0.0),
            Fault::ClockHours { hours: 1.0 }
        );
        for (lag, share) in [(300.0, 0.5), (-600.0, 1.0)] {
            assert_eq!(
                cause_of_lag(lag, 20.0, 60.0, 600.0),
                Fault::ClockLabel { share }
            );
        }
        assert_eq!(cause_of_lag(300.0, 20.0, 60.0, 0.0), Fault::Clock);
        assert_eq!(cause_of_lag(1500.0, 60.0, 300.0, 600.0), Fault::Clock);
    }
}
