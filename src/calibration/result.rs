//! What the calibration found of each station.

use nalgebra::Complex;
use rayon::prelude::*;
use serde::Serialize;

use super::CalibrationSettings;
use super::change::{Blockwise, Split};
use super::clock::{ClockLag, add_scatter, clock_lag, silence_echoes};
use super::course::Course;
use super::gains::{Expected, Fit};
use super::record::{Record, StationTally, median};
use super::shape::{Exchange, Reflection, exchanges, reflection, spikes};
use super::spread::{BlockSum, Blocks, GainError, block_sums, gain_errors};
use super::ticket::{Ticket, history, tickets};
use crate::time::Time;

type C = Complex<f64>;

/// Rounds in which changes are looked for.
const CHANGE_ROUNDS: usize = 6;
/// Smallest change that counts: of the angle 4 degrees, of the logarithm 7 %; and in units of the median change that the
/// best splits of all stations give.
const LEAST_CHANGE: f64 = 0.07;
const USUAL_CHANGES: f64 = 3.0;

/// A gain with its errors.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct GainEstimate {
    /// Reported minus true direction, degrees clockwise, −180 to 180.
    pub turn: f64,
    /// Its standard error.
    pub turn_se: f64,
    /// Reported over true speed.
    pub factor: f64,
    /// Its standard error.
    pub factor_se: f64,
    /// Half the length of the 95 % interval in standard errors; more than 1.96 if the record is short.
    pub half_95: f64,
}

/// A change of the gain.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Change {
    /// First time after it.
    pub at: Time,
    /// First and last time at which it may as well have been (95 %).
    pub between: [Time; 2],
    /// The gain before it, from the change before or the start of the record on.
    pub before: GainEstimate,
}

/// What was found of a station.
#[derive(Debug, Clone, PartialEq)]
pub struct StationCalibration {
    /// The gain, after the last change if there was one; `None` if the record is too short or has gaps.
    pub gain: Option<GainEstimate>,
    /// When it changed, in the order of time.
    pub changes: Vec<Change>,
    /// The clock.
    pub clock: Option<ClockLag>,
    /// Directions that run the wrong way round.
    pub reflection: Option<Reflection>,
    /// The station that it exchanged its data with, and what that leaves of the variance.
    pub exchange: Option<(usize, f64)>,
    /// Share of values that stand alone far outside.
    pub spikes: f64,
    /// Variance of its residuals over what the wind-field model says, relative to the network's median.
    pub misfit: f64,
    /// Whether others are predicted from it.
    pub predicts: bool,
    /// Whether it stands inside the network: others all around it.
    pub inside: bool,
    /// Root mean square of its reports less what the others say, m/s, robust.
    pub deviation: f64,
    /// Mean speed that the others say, m/s.
    pub speed: f64,
    /// Blocks with values.
    pub blocks: usize,
    /// Times compared.
    pub times: usize,
    /// What was set aside.
    pub tally: StationTally,
}

impl StationCalibration {
    /// How the lag of its clock changes or grows, if that is sure.
    #[must_use]
    pub fn course(&self) -> Option<Course> {
        self.clock?.course.filter(Course::is_sure)
    }

    /// The states before the present one, in words, the earliest first; empty if the gain never changed.
    #[must_use]
    pub fn history(&self) -> String {
        history(&self.changes)
    }
}

/// The calibration of a network.
#[derive(Debug, Clone, PartialEq)]
pub struct Calibration {
    /// In the order of the network.
    pub stations: Vec<StationCalibration>,
    /// What needs looking at, the costliest first.
    pub tickets: Vec<Ticket>,
    /// First and last time used.
    pub period: Option<[Time; 2]>,
    /// Blocks of time that the errors come of.
    pub blocks: usize,
    /// True if blocks are days; else the record is shorter than five days, and errors are less sure.
    pub days: bool,
    /// Times used.
    pub times: usize,
}

impl Calibration {
    pub(super) fn of(
        record: &Record,
        blocks: &Blocks,
        mut fit: Fit,
        settings: &CalibrationSettings,
        declinations: &[Option<f64>],
    ) -> Self {
        let (found, sums) = find_changes(&mut fit, blocks);
        let errors = gain_errors(&fit, blocks, &sums);
        let expected: Vec<Vec<Expected>> = (0..sums.len()).map(|s| fit.expected(s)).collect();
        let exchanged = exchanges(record, &fit, &expected, blocks.days);
        let stations = 0..sums.len();
        let lag = |s: usize| clock_lag(record, &fit, blocks, s);
        let mut clocks: Vec<Option<ClockLag>> = stations.into_par_iter().map(lag).collect();
        let inside: Vec<bool> = (0..sums.len()).map(|s| fit.surrounded(s)).collect();
        add_scatter(&mut clocks, &inside, |s| fit.leans_on(s));
        silence_echoes(&mut clocks, |s| fit.leans_on(s));
        let start_of = |block: usize| {
            let t = blocks.of.partition_point(|&b| b < block);
            record
                .times
                .get(t)
                .or(record.times.last())
                .copied()
                .unwrap_or_default()
        };
        let station = |s: usize| -> StationCalibration {
            let parts = fit.gains[s].iter().zip(&errors[s]);
            let mut estimates: Vec<Option<GainEstimate>> = parts
                .map(|(gain, error)| Some(estimate(*gain, error.as_ref()?)))
                .collect();
            let gain = estimates.pop().flatten();
            let changes = found[s]
                .iter()
                .zip(estimates)
                .filter_map(|(split, before)| {
                    Some(Change {
                        at: start_of(split.block),
                        between: [start_of(split.from), start_of(split.to)],
                        before: before?,
                    })
                });
            let mut squares: Vec<f64> = expected[s]
                .iter()
                .filter_map(|e| Some((record.wind(s, e.t)? - e.field).norm_sqr()))
                .collect();
            let times = squares.len();
            let speeds = expected[s].iter().map(|e| e.field.norm()).sum::<f64>();
            StationCalibration {
                gain,
                changes: changes.collect(),
                clock: clocks[s],
                reflection: reflection(record, &expected[s], s),
                exchange: exchanged.iter().find_map(|x: &Exchange| match x.stations {
                    [a, b] if a == s => Some((b, x.left)),
                    [a, b] if b == s => Some((a, x.left)),
                    _ => None,
                }),
                spikes: spikes(&fit, record, s),
                misfit: fit.misfit[s],
                predicts: fit.may_predict[s],
                inside: inside[s],
                // Median of an exponential distribution: ln 2 of its mean.
                deviation: (median(&mut squares).unwrap_or(0.0) / std::f64::consts::LN_2).sqrt(),
                speed: speeds / expected[s].len().max(1) as f64,
                blocks: sums[s].iter().filter(|b| b.bottom > 0.0).count(),
                times,
                tally: record.tallies[s],
            }
        };
        let stations: Vec<StationCalibration> = (0..sums.len()).map(station).collect();
        let ends = record.times.first().zip(record.times.last());
        let interval = record.interval as f64 * 1e-6;
        Self {
            tickets: tickets(&stations, settings, blocks.days, interval, declinations),
            stations,
            period: ends.map(|(a, b)| [*a, *b]),
            blocks: blocks.count,
            days: blocks.days,
            times: record.times.len(),
        }
    }
}

/// Finds the changes of all stations and gives the fit their parts. With the changes the sums of the blocks, each over the
/// gain of its part.
fn find_changes(fit: &mut Fit, blocks: &Blocks) -> (Vec<Vec<Split>>, Vec<Vec<BlockSum>>) {
    let mut sums = block_sums(fit, blocks);
    let mut found: Vec<Vec<Split>> = vec![Vec::new(); sums.len()];
    if !blocks.days {
        return (found, sums);
    }
    let first_time = |split: &Split| blocks.of.partition_point(|&b| b < split.block);
    for _ in 0..CHANGE_ROUNDS {
        let whole: Vec<Blockwise> = (0..sums.len())
            .map(|s| Blockwise::new(&whole_gain(fit, blocks, s, &sums[s])))
            .collect();
        // Where many stations change it is the weather that has changed, and what the sites make of it.
        let mut sizes: Vec<f64> = whole.iter().filter_map(Blockwise::best_change).collect();
        let usual = median(&mut sizes).unwrap_or(0.0);
        let least = LEAST_CHANGE.max(USUAL_CHANGES * usual);
        let now: Vec<Vec<Split>> = whole.iter().map(|w| w.changes(least)).collect();
        let size = |s: usize| -> f64 {
            let more = now[s].len() > found[s].len();
            let sizes = now[s].iter().filter(|_| more).map(|split| split.change);
            sizes.fold(0.0, f64::max)
        };
        // A station that changes takes its neighbours' expectations along: the largest change of each goes first.
        let first = |s: &usize| size(*s) > 0.0 && fit.leans_on(*s).all(|o| size(o) <= size(*s));
        let chosen: Vec<usize> = (0..now.len()).filter(first).collect();
        if chosen.is_empty() {
            break;
        }
        for s in chosen {
            found[s].clone_from(&now[s]);
        }
        let times = |splits: &Vec<Split>| splits.iter().map(first_time).collect();
        fit.split(found.iter().map(times).collect());
        sums = block_sums(fit, blocks);
    }
    (found, sums)
}

/// The sums of a station's blocks with its gain in them, relative to that of the present.
fn whole_gain(fit: &Fit, blocks: &Blocks, s: usize, sums: &[BlockSum]) -> Vec<BlockSum> {
    let time = |block: usize| blocks.of.partition_point(|&b| b < block);
    let gain = |block: usize| fit.gain(s, time(block)) / fit.last_gain(s);
    let sums = sums.iter().enumerate();
    sums.map(|(block, sum)| BlockSum {
        top: sum.top * gain(block),
        bottom: sum.bottom,
    })
    .collect()
}

fn estimate(gain: C, error: &GainError) -> GainEstimate {
    let factor = gain.norm();
    GainEstimate {
        // Angles of complex numbers run anticlockwise.
        turn: -gain.arg().to_degrees(),
        turn_se: error.angle.to_degrees(),
        factor,
        factor_se: factor * error.log,
        half_95: error.half_95(),
    }
}
