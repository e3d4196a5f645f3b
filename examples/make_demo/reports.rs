//! Reports as the stations send them: sensor errors, rounding, planted faults and dropouts.

use std::fmt::Write as _;

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::StandardNormal;

use crate::field::{Wind, WindField};
use crate::network::{LocalPlane, STATIONS};
use crate::scenario as day;

/// Streams of random numbers; that of the turbulence is 1.
const SENSOR_STREAM: u64 = 2;
const DROPOUT_STREAM: u64 = 3;

/// What a sensor shows at one time.
#[derive(Clone, Copy)]
struct Reading {
    /// Degrees, not rounded; no meaning when calm.
    direction: f64,
    /// m/s, not rounded.
    speed: f64,
    /// m/s, not rounded.
    gust: f64,
}

/// The report file and the count of its rows.
pub struct Reports {
    /// CSV text.
    pub text: String,
    /// Rows written.
    pub rows: u32,
    /// Of them rows without direction, speed and gust.
    pub empty: u32,
    /// Rows lost at random.
    pub lost: u32,
    /// Rows not sent by the silent station.
    pub silent: u32,
    /// Rows of a calm.
    pub calm: u32,
}

impl Reports {
    /// Reports of the whole day, in the order of time, and of stations within one time.
    ///
    /// The sensor errors do not depend on `faults`: a report that no fault touches is the same with and without them.
    pub fn of_day(field: &WindField, plane: &LocalPlane, seed: u64, faults: bool) -> Self {
        let mut sensors = ChaCha8Rng::seed_from_u64(seed);
        sensors.set_stream(SENSOR_STREAM);
        let mut dropouts = ChaCha8Rng::seed_from_u64(seed);
        dropouts.set_stream(DROPOUT_STREAM);

        let mut reports = Self {
            text: String::from("time,station,direction_deg,speed_m_s,gust_m_s\n"),
            rows: 0,
            empty: 0,
            lost: 0,
            silent: 0,
            calm: 0,
        };
        let mut stuck = None;
        for minute in (0..=day::LAST_MINUTE).step_by(day::REPORT_INTERVAL_MINUTES as usize) {
            let time = day::rfc3339(minute);
            for station in &STATIONS {
                let wind = field.wind(plane.point(station), 60.0 * f64::from(minute));
                let mut reading = measure(wind, &mut sensors);
                let chance: f64 = dropouts.random();
                if !faults {
                    reports.add(&time, station.id, Some(reading));
                    continue;
                }
                spoil(&mut reading, station.id, minute, &mut stuck);
                if station.id == day::SILENT_STATION
                    && (day::SILENT_START..=day::SILENT_END).contains(&minute)
                {
                    reports.silent += 1;
                } else if chance < day::LOST_PROBABILITY {
                    reports.lost += 1;
                } else if chance < day::LOST_PROBABILITY + day::EMPTY_PROBABILITY {
                    reports.add(&time, station.id, None);
                } else {
                    reports.add(&time, station.id, Some(reading));
                }
            }
        }
        reports
    }

    fn add(&mut self, time: &str, id: &str, reading: Option<Reading>) {
        self.rows += 1;
        // Writing to a string cannot fail, here and below.
        let _ = write!(self.text, "{time},{id},");
        match reading {
            None => {
                self.empty += 1;
                self.text.push_str(",,\n");
            }
            Some(reading) if reading.speed < day::CALM_BELOW => {
                self.calm += 1;
                let _ = writeln!(self.text, "0,0.0,{:.1}", reading.gust);
            }
            Some(Reading {
                direction,
                speed,
                gust,
            }) => {
                let direction = whole_degrees(direction);
                let _ = writeln!(self.text, "{direction},{speed:.1},{gust:.1}");
            }
        }
    }
}

/// Direction rounded to whole degrees in 1 to 360.
fn whole_degrees(direction: f64) -> f64 {
    let rounded = direction.round().rem_euclid(360.0);
    if rounded < 0.5 { 360.0 } else { rounded }
}

/// Reading of a faultless sensor: the wind with the errors of the instrument.
fn measure(wind: Wind, random: &mut ChaCha8Rng) -> Reading {
    let speed_error: f64 = random.sample(StandardNormal);
    let direction_error: f64 = random.sample(StandardNormal);
    let peak: f64 = random.sample(StandardNormal);
    let speed = (wind.u.hypot(wind.v) + day::SPEED_NOISE * speed_error).max(0.0);
    let peak = (day::GUST_PEAK + day::GUST_PEAK_SPREAD * peak).max(day::GUST_PEAK_LEAST);
    Reading {
        direction: (-wind.u).atan2(-wind.v).to_degrees() + day::DIRECTION_NOISE * direction_error,
        speed,
        gust: speed * (1.0 + day::GUST_INTENSITY * peak),
    }
}

/// Applies the fault of a station, if it has one at this time; `stuck` keeps the reading that is repeated.
fn spoil(reading: &mut Reading, id: &str, minute: u32, stuck: &mut Option<Reading>) {
    match id {
        day::VANE_STATION => reading.direction += day::VANE_OFFSET,
        // A calm stays a calm: the station decides on it before the change of unit.
        day::KNOTS_STATION if reading.speed >= day::CALM_BELOW => {
            reading.speed *= day::KNOTS_PER_M_S;
            reading.gust *= day::KNOTS_PER_M_S;
        }
        day::STUCK_STATION if (day::STUCK_START..=day::STUCK_END).contains(&minute) => {
            *reading = *stuck.get_or_insert(*reading);
        }
        _ => {}
    }
}
