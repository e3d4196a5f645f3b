//! What the calibration found of each station.

use nalgebra::Complex;
use serde::Serialize;

use super::CalibrationSettings;
use super::change::{Split, find_split};
use super::clock::{ClockLag, clock_lag};
use super::gains::{Expected, Fit};
use super::record::{Record, StationTally, median};
use super::shape::{Exchange, Reflection, exchanges, reflection, spikes};
use super::spread::{Blocks, GainError, block_sums, gain_errors};
use super::ticket::{Ticket, tickets};
use crate::time::Time;

type C = Complex<f64>;

/// Rounds in which changes are looked for.
const CHANGE_ROUNDS: usize = 3;
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
    /// The gain before it.
    pub before: GainEstimate,
}

/// What was found of a station.
#[derive(Debug, Clone, PartialEq)]
pub struct StationCalibration {
    /// The gain, after the change if there was one; `None` if the record is too short or has gaps.
    pub gain: Option<GainEstimate>,
    /// When it changed.
    pub change: Option<Change>,
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
        let mut sums = block_sums(&fit, blocks);
        let mut found: Vec<Option<Split>> = vec![None; sums.len()];
        for _ in 0..CHANGE_ROUNDS {
            let best: Vec<Option<Split>> = sums.iter().map(|of| find_split(of)).collect();
            // Where many stations change it is the weather that has changed, and what the sites make of it.
            let mut sizes: Vec<f64> = best.iter().flatten().map(|split| split.change).collect();
            let usual = median(&mut sizes).unwrap_or(0.0);
            let least = LEAST_CHANGE.max(USUAL_CHANGES * usual);
            let is_change = |split: &Split| split.sure && split.change >= least;
            let new: Vec<Option<Split>> = best
                .iter()
                .zip(&found)
                .map(|(split, found)| {
                    split.filter(|split| blocks.days && found.is_none() && is_change(split))
                })
                .collect();
            // A station that changes takes its neighbours' expectations along: the largest change of each goes first.
            let size = |s: usize| new[s].map_or(0.0, |split| split.change);
            let mut any = false;
            for (s, split) in new.iter().enumerate() {
                if split.is_some() && fit.leans_on(s).all(|other| size(other) <= size(s)) {
                    found[s] = *split;
                    any = true;
                }
            }
            if !any {
                break;
            }
            let first_time = |split: &Split| blocks.of.partition_point(|&b| b < split.block);
            fit.split(found.iter().map(|f| f.as_ref().map(first_time)).collect());
            sums = block_sums(&fit, blocks);
        }
        let errors = gain_errors(&fit, blocks, &sums);
        let expected: Vec<Vec<Expected>> = (0..sums.len()).map(|s| fit.expected(s)).collect();
        let exchanged = exchanges(record, &fit, &expected, blocks.days);
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
            let [before, after] = fit.gains[s];
            let change = found[s].and_then(|split| {
                Some(Change {
                    at: start_of(split.block),
                    between: [start_of(split.from), start_of(split.to)],
                    before: estimate(before, errors[s][0].as_ref()?),
                })
            });
            let mut squares: Vec<f64> = expected[s]
                .iter()
                .filter_map(|e| Some((record.wind(s, e.t)? - e.field).norm_sqr()))
                .collect();
            let times = squares.len();
            let speeds = expected[s].iter().map(|e| e.field.norm()).sum::<f64>();
            StationCalibration {
                gain: errors[s][1].as_ref().map(|e| estimate(after, e)),
                change,
                clock: clock_lag(record, &fit, blocks, s),
                reflection: reflection(record, &expected[s], s),
                exchange: exchanged.iter().find_map(|x: &Exchange| match x.stations {
                    [a, b] if a == s => Some((b, x.left)),
                    [a, b] if b == s => Some((a, x.left)),
                    _ => None,
                }),
                spikes: spikes(&fit, record, s),
                misfit: fit.misfit[s],
                predicts: fit.may_predict[s],
                inside: fit.surrounded(s),
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
