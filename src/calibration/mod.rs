//! Stations that are turned, mis-scaled, mis-timed or mixed up, found from the network itself.
//!
//! # How
//!
//! With winds as complex numbers W = u + iv a turned vane and a wrong scale of speed are one complex gain for each station:
//! reported wind = g · W + noise. The wind-field model ([`crate::structure`]) says what the others have to do with W.
//!
//! 1. *Expectation*: the wind at each station from the others' reports over their gains, with the weights of
//!    [`crate::structure::Predictor::weights`] (neighbourhoods of 30 stations, a large constant for the mean wind).
//!    The station itself is left out: with it the expectation would repeat the gain it was given, the more so the better
//!    the sensor, and the iteration would crawl.
//! 2. *Maximisation*: g = Σ w W F* / Σ w (|F|² − ν), F the expectation. ν is what not knowing the mean wind adds to |F|²; the
//!    weight w grows with the square of light winds and is 1 in strong ones, over the amplitude of the structure function at the time.
//! 3. A station is held near 1 (3 %, 1.7 degrees) until its reports stand out against its neighbours', the worst first:
//!    a fault is that of one station, weather that of many. Steps are over-relaxed by 1.6; outliers beyond five robust
//!    standard deviations are left out; stations that follow no gain predict no others. Median angle 0 and median modulus 1
//!    over the network: **a network that is turned or scaled as a whole cannot be told from another wind.**
//! 4. The structure function is found again from the winds over their first gains, since the faults are in the first one.
//!
//! Errors come from the disagreement of days (blocks of a tenth of the record if there are fewer than five days: less sure,
//! since such blocks hang together). Reflection and exchange are alternative hypotheses. What all sound stations differ by
//! beyond that (sites, weather that lasts through the record) is added as it is found, so in rough country errors are wide.
//! Changes of gain are splits of the days that explain them best, as many as are sure; the last state is that of the station.
//!
//! Clock: lag of the largest complex correlation with the expectation. A stretch of the record with another lag (daylight
//! time), or a lag that grows (drift), is told if it leaves less of the variance on nearly all days. Lags are tried at the
//! analysis interval and read off between them; a label that is off by less than three quarters of the interval is not told.
//!
//! - **Sign**: turn = reported minus true direction, degrees clockwise; factor = reported over true speed; lag positive if
//!   the station's clock is ahead.
//! - **Cannot see**: what all stations share; a turn or factor that the site itself makes (a valley, a building, another
//!   height) from one of the sensor: a ticket says what to look at, not what it will be.
//! - **Reference**: expectation and conditional maximisation, Meng and Rubin 1993, Biometrika 80, 267 (from memory);
//!   offset and gain against the prediction from the others, `methods.md` 6.3.
//!
//! # Measured
//!
//! On simulated networks of 40 stations 30 km apart, turbulence of 1.5 m/s carried by a mean wind that comes and goes,
//! sensors of 0.3 m/s, 5-minute reports, four faults in each (`tests/calibration.rs`): 200 weeks, turns of 8 to 40 degrees and
//! factors off by 15 to 50 %: 99.9 % found with the right station and cause, 0.1 % of the sound stations told wrongly; errors
//! of the turn 0.7 degrees (bias 0.02; of planted turns −0.06), of the logarithm of the factor 0.012; the 95 % intervals
//! held 97.6 and 97.7 %. Single days: 75 % found, 0.8 % false, 1.8 degrees, 0.034; intervals held 94 %.
//!
//! Changes: 20 vanes in months of 40 stations that turn twice (12 degrees and back, 10 and 15 more): all with both days right to
//! one, no change at 380 others; turns of the states off by 0.6 degrees, 88 % of their 95 % intervals held.
//!
//! Clocks: in 20 months of 40 stations with 5-minute reports of 10-minute means, labels off by 5 and 10 minutes, a zone, daylight
//! time that begins and that begins and ends, and drifts of 2 and −1 minutes a day: each named so in 10 of 10, none of 730
//! sound stations; days of the switch right to one; rates off by 3.5 s a day (17 of 20 intervals of two errors held). Lags
//! of sound clocks scatter by 35 s. At 10 minutes the same but for the label off by 5, which is not told, and
//! the drift of −1 minute a day, of which two in ten were taken for a clock set anew. With 7 such faults in one network the
//! lags of their neighbours scatter by so much that the label off by 5 minutes was told in 3 of 10 only.
//!
//! Turbines (`tests/turbines.rs`): farms of 30 at 6 diameters, three weeks of 10-minute data, wakes after Jensen: of 50
//! offsets of 5 to 15 degrees 49 were found, none falsely of 240; errors 0.2 degrees, 99 % held; of factors 0.014, 85 % held,
//! since wakes slow. With wake sectors left out (8 diameters: 59 % of the values) 34 were found, 5 falsely, errors 1.9
//! degrees: inside a farm the sectors leave too few neighbours.
//!
//! Stations with planted faults by what the first ticket says, two in each of ten weeks:
//!
//! | Planted | told so | told otherwise | not told |
//! |---|---|---|---|
//! | turned 15°, factor 0.8, knots, direction to, u and v swapped, mirrored | 20 each | | |
//! | clock 1 h ahead | 20 | | |
//! | 3 % spikes | 19 | | 1 |
//! | stuck, still | 20 each | | |
//! | exchanged with one 90 km away | 16 | | 4 |
//! | none (4180) | | 1 | 4179 |

mod cause;
mod change;
mod clock;
mod course;
mod gains;
mod record;
mod result;
mod robust;
mod shape;
mod spread;
mod statistics;
mod ticket;
mod wake;

use crate::align::WindBlock;
use crate::station::{Network, Position};
use crate::structure::{LocalPlane, NetworkGeometry, Predictor, StructureFunction};
use crate::time::Time;
use crate::units::Wind;

pub use cause::{Fault, cause_of_factor, cause_of_lag, cause_of_turn};
pub use clock::ClockLag;
pub use course::{ClockDrift, ClockStretch, Course};
pub use record::StationTally;
pub use result::{Calibration, Change, GainEstimate, StationCalibration};
pub use shape::Reflection;
pub use ticket::{Cost, Ticket};
pub use wake::{disturbed_sector, wake_sectors};

use gains::Fit;
use record::Record;
use spread::Blocks;

/// How the calibration works.
#[derive(Debug, Clone, PartialEq)]
pub struct CalibrationSettings {
    /// Time between the times used, s. 30 min: winds of nearer ones say nearly the same.
    pub step: f64,
    /// Winds kept, at most, 8 bytes each; a longer record is thinned.
    pub values: usize,
    /// Days of the record that the clock is judged by, the last ones.
    pub clock_days: f64,
    /// Averaging interval of the reports, s; 0 if unknown.
    pub averaging: f64,
    /// Sectors of wind direction left out at all stations, degrees, from and to clockwise.
    pub sectors: Vec<[f64; 2]>,
    /// The same for each station.
    pub station_sectors: Vec<Vec<[f64; 2]>>,
}

impl Default for CalibrationSettings {
    fn default() -> Self {
        Self {
            step: 1800.0,
            values: 1 << 25,
            clock_days: 31.0,
            averaging: 0.0,
            sectors: Vec::new(),
            station_sectors: Vec::new(),
        }
    }
}

impl CalibrationSettings {
    fn is_excluded(&self, station: usize, [u, v]: [f64; 2]) -> bool {
        let own = self.station_sectors.get(station).into_iter().flatten();
        let mut sectors = self.sectors.iter().chain(own).peekable();
        if sectors.peek().is_none() {
            return false;
        }
        let Some(from) = (Wind { u, v }).from_direction() else {
            return false;
        };
        sectors.any(|[start, end]| {
            (from.degrees() - start).rem_euclid(360.0) <= (end - start).rem_euclid(360.0)
        })
    }
}

/// Takes in the winds of a run, block by block, and calibrates the stations at its end.
#[derive(Debug, Clone)]
pub struct Calibrator {
    settings: CalibrationSettings,
    predictor: Predictor,
    geometry: NetworkGeometry,
    /// By station whether others stand all around it.
    around: Vec<bool>,
    record: Record,
}

impl Calibrator {
    /// For a network with stations `spacing` m apart and analysis times `interval` s apart.
    #[must_use]
    pub fn new(
        network: &Network,
        spacing: f64,
        interval: f64,
        settings: CalibrationSettings,
    ) -> Self {
        Self {
            predictor: Predictor::new(network, spacing),
            geometry: NetworkGeometry::new(network, spacing, &[]),
            around: surrounded(network, spacing),
            record: Record::new(network.len(), interval, &settings),
            settings,
        }
    }

    /// Takes in the next block with the structure function at each of its times
    /// ([`crate::structure::StructureWindow::advance`]).
    pub fn take(&mut self, block: &WindBlock, structure: &[StructureFunction]) {
        self.record.take(block, structure);
    }

    /// First and last time kept; `None` without any.
    #[must_use]
    pub fn period(&self) -> Option<[Time; 2]> {
        let times = &self.record.times;
        times.first().zip(times.last()).map(|(a, b)| [*a, *b])
    }

    /// The calibration of all stations. `declinations` holds the magnetic declination of each, as far as it is known.
    #[must_use]
    pub fn finish(&self, declinations: &[Option<f64>]) -> Calibration {
        let blocks = Blocks::of(&self.record);
        let fit = Fit::new(
            &self.record,
            &self.predictor,
            &self.around,
            &blocks,
            &self.geometry,
        );
        Calibration::of(&self.record, &blocks, fit, &self.settings, declinations)
    }
}

/// For each station whether others within three spacings stand all around it: no gap of the horizon wider than 150
/// degrees.
fn surrounded(network: &Network, spacing: f64) -> Vec<bool> {
    let reach = 3.0 * spacing;
    let places = network.stations();
    let around = |here: Position| {
        let plane = LocalPlane::at((here.latitude(), here.longitude()));
        let degrees = reach / 111e3;
        let near = places
            .iter()
            .filter(|s| (s.position.latitude() - here.latitude()).abs() <= degrees);
        let mut bearings: Vec<f64> = near
            .map(|s| plane.place(s.position).at)
            .filter(|[x, y]| (1.0..=reach).contains(&x.hypot(*y)))
            .map(|[x, y]| x.atan2(y).to_degrees())
            .collect();
        bearings.sort_by(f64::total_cmp);
        let Some((first, last)) = bearings.first().copied().zip(bearings.last().copied()) else {
            return false;
        };
        let gaps = bearings.windows(2).map(|w| w[1] - w[0]);
        gaps.chain([first + 360.0 - last])
            .all(|gap| gap <= WIDEST_GAP)
    };
    places.iter().map(|s| around(s.position)).collect()
}

const WIDEST_GAP: f64 = 150.0;
