//! Wind shifts: when the wind at a station changed, by how much, and how surely.

use std::collections::VecDeque;

use super::step::{self, Sample};
use super::track::seconds;
use crate::align::WindBlock;
use crate::settings::EventSettings;
use crate::structure::TemporalFunction;
use crate::time::Time;
use crate::units::Wind;

/// A change counts if it is so many times its own error. 2.5: chance gives that now and then, but hardly at six stations in
/// a row.
const DEVIATIONS: f64 = 2.5;
/// Share of the times of a window at which there must be a wind.
const LEAST_SHARE: f64 = 0.5;

/// A wind shift at a station.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Passage {
    /// The station.
    pub station: usize,
    /// When half of the change was over.
    pub time: Time,
    /// Standard error of the time, s.
    pub error: f64,
    /// How long it took, from a tenth to nine tenths of the change, s.
    pub width: f64,
    /// Mean wind before.
    pub before: Wind,
    /// Mean wind after.
    pub after: Wind,
    /// The last time that was needed to know it.
    pub known_at: Time,
}

impl Passage {
    /// The wind after less the wind before.
    #[must_use]
    pub fn change(&self) -> Wind {
        Wind {
            u: self.after.u - self.before.u,
            v: self.after.v - self.before.v,
        }
    }

    /// By how much the wind turned, degrees, positive clockwise (veered), within ±180; `None` if there was none before or
    /// after.
    #[must_use]
    pub fn turn(&self) -> Option<f64> {
        let (a, b) = (self.before.from_direction()?, self.after.from_direction()?);
        Some((b.degrees() - a.degrees() + 180.0).rem_euclid(360.0) - 180.0)
    }

    /// By how much the speed changed, m/s.
    #[must_use]
    pub fn speed_change(&self) -> f64 {
        self.after.speed() - self.before.speed()
    }
}

/// Finds the wind shifts of all stations; keeps the winds of a few windows.
#[derive(Debug)]
pub struct ShiftFinder {
    least: f64,
    /// Length of either window, s.
    window: f64,
    /// A change must be the largest for so long before and after, s.
    hold: f64,
    /// Between analysis times, s.
    interval: f64,
    stations: Vec<Recent>,
}

/// The last winds of a station.
#[derive(Debug, Clone, Default)]
struct Recent {
    winds: VecDeque<Sample>,
    /// The change at a time: squared, m²/s²; 0 where it is not known.
    changes: VecDeque<(Time, f64)>,
    last: Option<Time>,
}

impl ShiftFinder {
    /// For stations whose winds are given every `interval` s.
    #[must_use]
    pub fn new(stations: usize, settings: &EventSettings, interval: f64) -> Self {
        // Three times make a mean that a single gust does not carry.
        let window = settings.window.max(3.0 * interval);
        Self {
            least: settings.shift,
            window,
            hold: (0.5 * window).max(interval),
            interval,
            stations: vec![Recent::default(); stations],
        }
    }

    /// Takes in the winds of time `t` of a block; the passages that it makes known, by station.
    pub fn advance(
        &mut self,
        winds: &WindBlock,
        t: usize,
        temporal: &TemporalFunction,
    ) -> Vec<Passage> {
        let n = winds.times.len();
        let time = winds.times[t];
        let mut found = Vec::new();
        for station in 0..self.stations.len() {
            let cell = station * n + t;
            if winds.flag[cell].is_usable() {
                self.stations[station].winds.push_back(Sample {
                    time,
                    wind: [winds.u[cell], winds.v[cell]],
                    // The mean of both components: the change may point anywhere.
                    variance: 0.5 * (winds.var_u[cell] + winds.var_v[cell]),
                });
            }
            found.extend(self.station(station, time, temporal));
        }
        found
    }

    fn station(
        &mut self,
        station: usize,
        now: Time,
        temporal: &TemporalFunction,
    ) -> Option<Passage> {
        let (window, hold) = (self.window, self.hold);
        let (least, share) = (self.least, LEAST_SHARE * window / self.interval);
        let recent = &mut self.stations[station];
        let back = |seconds: f64| now.plus_micros(-micros(seconds));
        let from = back(2.0 * window + 2.0 * hold);
        while recent.winds.front().is_some_and(|s| s.time < from) {
            recent.winds.pop_front();
        }
        // The change about the time one window ago.
        let centre = back(window);
        let mean = |wanted: &dyn Fn(f64) -> bool| {
            let within = recent
                .winds
                .iter()
                .filter(|s| wanted(seconds(centre, s.time)));
            let (mut sum, mut count) = ([0.0; 2], 0.0);
            for sample in within {
                sum = [sum[0] + sample.wind[0], sum[1] + sample.wind[1]];
                count += 1.0;
            }
            (count >= share.max(2.0)).then(|| sum.map(|s| s / count))
        };
        let before = mean(&|since| (-window..0.0).contains(&since));
        let after = mean(&|since| since > 0.0 && since <= window);
        let change = match (before, after) {
            (Some(a), Some(b)) => (b[0] - a[0]).powi(2) + (b[1] - a[1]).powi(2),
            _ => 0.0,
        };
        recent.changes.push_back((centre, change));
        while recent
            .changes
            .front()
            .is_some_and(|c| seconds(c.0, centre) > 2.0 * hold)
        {
            recent.changes.pop_front();
        }
        // Is the change of `hold` ago the largest of all around it?
        let candidate = back(window + hold);
        let at = recent.changes.iter().position(|c| c.0 >= candidate)?;
        let (time, largest) = recent.changes[at];
        let mut others = recent.changes.iter().enumerate();
        let is_largest = others.all(|(k, c)| {
            if k < at {
                c.1 < largest
            } else {
                c.1 <= largest
            }
        });
        let is_new = recent.last.is_none_or(|last| seconds(last, time) > window);
        if !is_largest || !is_new || largest < least * least {
            return None;
        }
        let around = |s: &&Sample| seconds(time, s.time).abs() <= window + hold;
        let samples: Vec<Sample> = recent.winds.iter().filter(around).copied().collect();
        let contrast = |s: &Sample| match seconds(time, s.time) {
            since if since > 0.0 && since <= window => 1.0,
            since if since < 0.0 && since >= -window => -1.0,
            _ => 0.0,
        };
        let variance = step::contrast_variance(&samples, contrast, temporal);
        let fitted = step::fit(&samples, time, window, hold, temporal)?;
        if largest < DEVIATIONS * DEVIATIONS * fitted.scale * variance {
            return None;
        }
        recent.last = Some(time);
        let wind = |[u, v]: [f64; 2]| Wind { u, v };
        Some(Passage {
            station,
            time: time.plus_micros(micros(fitted.shift.round())),
            error: fitted.error.hypot(self.interval / 12f64.sqrt()),
            // tanh is 0.8 at 1.1.
            width: 2.2 * fitted.width,
            before: wind(fitted.before),
            after: wind(fitted.after),
            known_at: now,
        })
    }
}

#[expect(
    clippy::cast_possible_truncation,
    reason = "saturates; durations are at most a day"
)]
pub(super) fn micros(seconds: f64) -> i64 {
    (seconds * 1e6).round() as i64
}
