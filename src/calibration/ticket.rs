//! What needs looking at.

use serde::Serialize;

use super::cause::{Fault, cause_of_factor, cause_of_lag, cause_of_turn};
use super::result::{Change, StationCalibration};
use super::{CalibrationSettings, ClockLag, Course, GainEstimate};
use crate::polygon::StationPolygon;
use crate::time::Time;

/// Smaller turns and factors are no ticket: sites make them. Degrees, and the logarithm of 1.1.
const LEAST_TURN: f64 = 5.0;
const LEAST_LOG: f64 = 0.095;
/// A gain must differ from 1 by so many half 95 % intervals: 1.7 of them are 3.3 standard errors, one in a thousand.
const SURE: f64 = 1.7;
/// In a record of less than five days, of which the parts share their weather.
const SURE_OF_DAY: f64 = 2.2;
/// Share of a record that is stuck, or still, for a ticket.
const STUCK_SHARE: f64 = 0.5;
const STILL_SHARE: f64 = 0.5;
/// Share of single outliers that makes a ticket. Of a Gaussian none, of sharp fronts some in a thousand.
const SPIKE_SHARE: f64 = 0.015;
/// Misfit of a station that nothing else explains.
const UNEXPLAINED: f64 = 8.0;
/// A lag must reduce what the correlation leaves unexplained to this share; at the edge of a network, where the others
/// see the weather earlier or later, to the second.
const LAG_LEAVES: [f64; 2] = [0.6, 0.45];
/// In a record of less than five days, which may be one storm that passes.
const LAG_LEAVES_OF_STORM: f64 = 0.35;
/// Correlation with the lag, at least.
const LEAST_CORRELATION: f64 = 0.6;
/// Smallest lag that is told, in steps of the analysis interval, and in standard errors.
const LEAST_LAG: f64 = 1.5;
const LAG_ERRORS: f64 = 4.0;
/// A lag of less than an interval is told only if days agree on it by so many standard deviations of theirs.
const LEAST_SMALL_LAG: f64 = 0.75;
const SURE_LAG: f64 = 3.0;

/// A fault of a station.
#[derive(Debug, Clone, PartialEq)]
pub struct Ticket {
    /// The station.
    pub station: usize,
    /// What is wrong.
    pub fault: Fault,
    /// How much: degrees, a factor, seconds, or a share.
    pub size: f64,
    /// Its standard error, if there is one.
    pub error: Option<f64>,
    /// Unit of the size.
    pub unit: &'static str,
    /// First time after the change, with the interval; `None` if it was so all the time.
    pub since: Option<(Time, [Time; 2])>,
    /// The states before, in words; empty if it was so all the time.
    pub before: String,
    /// What it is seen by.
    pub evidence: String,
    /// Error of the station's wind, m/s.
    pub wind_error: f64,
}

/// What a fault adds to the polygons around its station, 1/s.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize)]
pub struct Cost {
    /// Polygons with the station.
    pub polygons: usize,
    /// Error of vorticity or divergence, mean over them.
    pub mean: f64,
    /// The largest.
    pub largest: f64,
}

impl Ticket {
    /// What leaving it costs: coefficient row of each polygon × error of the wind.
    #[must_use]
    pub fn cost(&self, polygons: &[StationPolygon]) -> Cost {
        let mut cost = Cost::default();
        for polygon in polygons {
            let row = &polygon.row;
            let Some(k) = row.stations.iter().position(|&s| s == self.station) else {
                continue;
            };
            let [x, y] = row.weights[k];
            let error = x.hypot(y) * self.wind_error;
            cost.polygons += 1;
            cost.mean += error;
            cost.largest = cost.largest.max(error);
        }
        cost.mean /= cost.polygons.max(1) as f64;
        cost
    }
}

/// The tickets of all stations, the largest errors of wind first.
pub(super) fn tickets(
    stations: &[StationCalibration],
    settings: &CalibrationSettings,
    days: bool,
    interval: f64,
    declinations: &[Option<f64>],
) -> Vec<Ticket> {
    let mut all = Vec::new();
    for (s, station) in stations.iter().enumerate() {
        let declination = declinations.get(s).copied().flatten();
        if let Some(ticket) = no_gain(s, station, settings, days, interval) {
            all.push(ticket);
        } else {
            all.extend(gain_tickets(s, station, days, declination));
        }
    }
    all.sort_by(|a, b| {
        let size = b.wind_error.total_cmp(&a.wind_error);
        size.then(a.station.cmp(&b.station))
    });
    all
}

/// The fault of a station that no gain describes.
fn no_gain(
    s: usize,
    station: &StationCalibration,
    settings: &CalibrationSettings,
    days: bool,
    interval: f64,
) -> Option<Ticket> {
    let tally = &station.tally;
    let share = |part: u64| part as f64 / tally.values.max(1) as f64;
    let ticket = |fault: Fault, size: f64, unit: &'static str, evidence: String| Ticket {
        station: s,
        fault,
        size,
        error: None,
        unit,
        since: None,
        before: String::new(),
        evidence,
        wind_error: station.deviation.max(0.1),
    };
    if share(tally.still) >= STILL_SHARE {
        let evidence = format!(
            "0 in {:.0} % of the values, while the network has more than 3 m/s",
            100.0 * share(tally.still)
        );
        let mut found = ticket(Fault::Still, share(tally.still), "share", evidence);
        found.wind_error = station.speed.max(3.0);
        return Some(found);
    }
    if share(tally.stuck) >= STUCK_SHARE {
        let evidence = format!(
            "{:.0} % of the values repeat the one before, 12 times or more",
            100.0 * share(tally.stuck)
        );
        let mut found = ticket(Fault::Stuck, share(tally.stuck), "share", evidence);
        found.wind_error = station.speed.max(station.deviation);
        return Some(found);
    }
    if let Some((other, left)) = station.exchange {
        let evidence = format!(
            "exchanged, {:.0} % of the residuals' variance is left",
            100.0 * left
        );
        return Some(ticket(
            Fault::Exchanged { with: other },
            left,
            "share",
            evidence,
        ));
    }
    if let Some(reflection) = station.reflection {
        let off = |angle: f64| (reflection.angle - angle).rem_euclid(360.0);
        let near = |angle: f64| off(angle).min(360.0 - off(angle)) < 30.0;
        let fault = if near(90.0) {
            Fault::Swapped
        } else {
            Fault::Mirrored
        };
        let evidence = format!(
            "a reflection leaves {:.0} % of the variance, a turn {:.0} %",
            100.0 * reflection.left_by_reflection,
            100.0 * reflection.left_by_turn
        );
        return Some(ticket(fault, reflection.angle, "degrees", evidence));
    }
    if let Some(course) = station.course() {
        return Some(course_ticket(&course, ticket, interval));
    }
    if let Some(clock) = station
        .clock
        .filter(|c| is_off(c, station.inside, days, interval))
    {
        let fault = cause_of_lag(clock.lag, clock.error, interval, settings.averaging);
        let evidence = format!(
            "correlation with neighbours {:.2}, with the lag {:.2}",
            clock.correlation, clock.with_lag
        );
        let mut found = ticket(fault, clock.lag, "s", evidence);
        found.error = Some(clock.error);
        return Some(found);
    }
    if station.spikes >= SPIKE_SHARE {
        let evidence = format!(
            "{:.1} % of the values stand alone more than 5 standard deviations off",
            100.0 * station.spikes
        );
        return Some(ticket(Fault::Spikes, station.spikes, "share", evidence));
    }
    if station.misfit >= UNEXPLAINED && station.times > 0 {
        let evidence = format!(
            "its residuals have {:.0} times the variance of other stations'",
            station.misfit
        );
        return Some(ticket(
            Fault::Unexplained,
            station.misfit,
            "ratio",
            evidence,
        ));
    }
    None
}

fn is_off(clock: &ClockLag, inside: bool, days: bool, interval: f64) -> bool {
    let leaves = if days {
        LAG_LEAVES[usize::from(!inside)]
    } else {
        LAG_LEAVES_OF_STORM
    };
    let left = |correlation: f64| 1.0 - correlation.max(0.0).powi(2);
    let large = clock.lag.abs() >= LEAST_LAG * interval
        && left(clock.with_lag) <= leaves * left(clock.correlation);
    // A label off by some minutes leaves nearly as much, but all days agree on it.
    let small = days && clock.sure >= SURE_LAG && clock.lag.abs() >= LEAST_SMALL_LAG * interval;
    clock.with_lag >= LEAST_CORRELATION
        && clock.lag.abs() >= LAG_ERRORS * clock.error
        && (large || small)
}

/// The ticket of a clock whose error changes or grows.
fn course_ticket(
    course: &Course,
    ticket: impl Fn(Fault, f64, &'static str, String) -> Ticket,
    interval: f64,
) -> Ticket {
    let minutes = |lag: f64| lag / 60.0;
    match course {
        Course::Drift(drift) => {
            let half = 0.5 * drift.rate * drift.days;
            let evidence = format!(
                "{:+.0} to {:+.0} min ahead within {:.0} days",
                minutes(drift.middle - half),
                minutes(drift.middle + half),
                drift.days
            );
            let mut found = ticket(Fault::ClockDrift, drift.rate, "s/day", evidence);
            found.error = Some(drift.error);
            found
        }
        Course::Stretch(stretch) => {
            let (inside, outside) = (stretch.inside, stretch.outside);
            let slack = (2.0 * interval).clamp(300.0, 900.0);
            let hour = ((inside - outside).abs() - 3600.0).abs() <= slack
                && inside.abs().min(outside.abs()) <= slack;
            let fault = if hour {
                Fault::DaylightTime
            } else {
                Fault::ClockSet
            };
            let size = if inside.abs() >= outside.abs() {
                inside
            } else {
                outside
            };
            let day = |t: Time| -> String { t.to_string().chars().take(10).collect() };
            let evidence = format!(
                "{:+.0} min from {} to {}, else {:+.0} min",
                minutes(inside),
                day(stretch.from),
                stretch.to.map_or_else(|| "the end".into(), day),
                minutes(outside)
            );
            let mut found = ticket(fault, size, "s", evidence);
            found.since = Some((stretch.from, stretch.between));
            found
        }
    }
}

/// Turn and factor of a station; if it has neither now but had, that.
fn gain_tickets(
    s: usize,
    station: &StationCalibration,
    days: bool,
    declination: Option<f64>,
) -> Vec<Ticket> {
    let Some(gain) = &station.gain else {
        return Vec::new();
    };
    let sure = if days { SURE } else { SURE_OF_DAY };
    let of = |gain: &GainEstimate| {
        let turned = turn_ticket(s, station, (gain, sure), declination);
        turned
            .into_iter()
            .chain(factor_ticket(s, station, (gain, sure)))
    };
    let now: Vec<Ticket> = of(gain).collect();
    if !now.is_empty() {
        return now;
    }
    let past = station.changes.iter().rev();
    let past = past.filter_map(|change| of(&change.before).next().map(|t| (change, t)));
    let put_right = past.take(1).map(|(change, ticket)| Ticket {
        fault: Fault::PutRight,
        since: Some((change.at, change.between)),
        before: history(&station.changes),
        wind_error: 0.0,
        ..ticket
    });
    put_right.collect()
}

/// A gain is the same as another if they differ by less: degrees, logarithm, and joint standard errors.
const SAME: (f64, f64, f64) = (2.0, 0.04, 3.0);

/// The change since which a value has been what it is now.
fn since(
    changes: &[Change],
    is_same: impl Fn(&GainEstimate) -> bool,
) -> (Option<(Time, [Time; 2])>, String) {
    let before = changes.iter().rposition(|c| !is_same(&c.before));
    let Some(k) = before else {
        return (None, String::new());
    };
    let change = &changes[k];
    let words = history(&changes[..=k]);
    (Some((change.at, change.between)), words)
}

/// States in words, the earliest first.
pub(super) fn history(changes: &[Change]) -> String {
    let state = |c: &Change| {
        let day: String = c.at.to_string().chars().take(10).collect();
        let GainEstimate {
            turn,
            turn_se,
            factor,
            ..
        } = c.before;
        format!("{turn:+.1} ± {turn_se:.1} degrees, x {factor:.2} until {day}")
    };
    let states: Vec<String> = changes.iter().map(state).collect();
    states.join("; ")
}

fn turn_ticket(
    s: usize,
    station: &StationCalibration,
    (gain, sure): (&GainEstimate, f64),
    declination: Option<f64>,
) -> Option<Ticket> {
    let half = gain.half_95 * gain.turn_se;
    if gain.turn.abs() < LEAST_TURN || gain.turn.abs() < sure * half {
        return None;
    }
    let (since, before) = since(&station.changes, |before| {
        let off = (before.turn - gain.turn).rem_euclid(360.0);
        off.min(360.0 - off) < SAME.0.max(SAME.2 * before.turn_se.hypot(gain.turn_se))
    });
    Some(Ticket {
        station: s,
        fault: cause_of_turn(gain.turn, half, declination),
        size: gain.turn,
        error: Some(gain.turn_se),
        unit: "degrees",
        since,
        before,
        evidence: evidence(station),
        wind_error: 2.0 * station.speed * (0.5 * gain.turn).to_radians().sin().abs(),
    })
}

fn factor_ticket(
    s: usize,
    station: &StationCalibration,
    (gain, sure): (&GainEstimate, f64),
) -> Option<Ticket> {
    let log = gain.factor.ln();
    let half = gain.half_95 * gain.factor_se / gain.factor;
    if log.abs() < LEAST_LOG || log.abs() < sure * half {
        return None;
    }
    let (since, before) = since(&station.changes, |before| {
        let error = (before.factor_se / before.factor).hypot(gain.factor_se / gain.factor);
        (before.factor / gain.factor).ln().abs() < SAME.1.max(SAME.2 * error)
    });
    Some(Ticket {
        station: s,
        fault: cause_of_factor(gain.factor, half),
        size: gain.factor,
        error: Some(gain.factor_se),
        unit: "",
        since,
        before,
        evidence: evidence(station),
        wind_error: station.speed * (gain.factor - 1.0).abs(),
    })
}

fn evidence(station: &StationCalibration) -> String {
    format!(
        "{} times of {} blocks against the others; residuals {:.1} m/s",
        station.times, station.blocks, station.deviation
    )
}
