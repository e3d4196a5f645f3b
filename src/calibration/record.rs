//! Winds kept for the calibration: thinned in time, in bounded memory.

use nalgebra::Complex;

use super::CalibrationSettings;
use crate::align::WindBlock;
use crate::check::Flag;
use crate::structure::StructureFunction;
use crate::time::Time;

/// Winds of a station at all analysis times of the last days, for the clock.
#[derive(Debug, Clone, Default)]
pub(super) struct FineSeries {
    /// Step (analysis interval since 1970) and wind, ascending.
    pub(super) values: Vec<(i64, [f32; 2])>,
}

/// What the calibration keeps of a run.
///
/// One analysis time of each [`CalibrationSettings::step`] with all stations; when these exceed
/// [`CalibrationSettings::values`], every second time is dropped and the step doubled. At all times only the last
/// [`CalibrationSettings::clock_days`] are kept.
#[derive(Debug, Clone)]
pub(super) struct Record {
    settings: CalibrationSettings,
    stations: usize,
    /// μs
    step: i64,
    /// μs
    pub(super) interval: i64,
    pub(super) times: Vec<Time>,
    pub(super) structure: Vec<StructureFunction>,
    /// By station, one for each time; not finite where there is none.
    pub(super) winds: Vec<Vec<[f32; 2]>>,
    /// Sum of instrument variances (mean of both components) and their number, by station.
    pub(super) noise: Vec<(f64, u64)>,
    pub(super) fine: Vec<FineSeries>,
    repeats: Vec<Repeat>,
    pub(super) tallies: Vec<StationTally>,
}

/// What was set aside before the fit, by station.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct StationTally {
    /// Values at all analysis times.
    pub values: u64,
    /// Of them such as repeat a wind without end: the sensor is stuck.
    pub stuck: u64,
    /// Of them such as are 0 without end while the network has wind.
    pub still: u64,
    /// Left out because the wind came from an excluded sector.
    pub excluded: u64,
}

#[derive(Debug, Clone, Copy, Default)]
struct Repeat {
    last: [f64; 2],
    run: u32,
}

/// A wind that is the same in so many reports in a row is no measurement: an hour of 5-minute reports.
const STUCK_RUN: u32 = 12;
/// While the network's median speed is above this, m/s, a station at rest is no calm.
const NO_CALM: f64 = 3.0;

const NONE: [f32; 2] = [f32::NAN; 2];

impl Record {
    pub(super) fn new(stations: usize, interval: f64, settings: &CalibrationSettings) -> Self {
        Self {
            settings: settings.clone(),
            stations,
            step: micros(settings.step).max(micros(interval)),
            interval: micros(interval),
            times: Vec::new(),
            structure: Vec::new(),
            winds: vec![Vec::new(); stations],
            noise: vec![(0.0, 0); stations],
            fine: vec![FineSeries::default(); stations],
            repeats: vec![Repeat::default(); stations],
            tallies: vec![StationTally::default(); stations],
        }
    }

    /// Takes in a block of winds in the order of time, with the structure function at each of its times.
    pub(super) fn take(&mut self, block: &WindBlock, models: &[StructureFunction]) {
        let n = block.times.len();
        for (t, (time, model)) in block.times.iter().zip(models).enumerate() {
            let micros = time.micros();
            let kept = micros.rem_euclid(self.step) < self.interval;
            let still = self.median_speed(block, t) > NO_CALM;
            if kept {
                self.times.push(*time);
                self.structure.push(*model);
            }
            for s in 0..self.stations {
                let cell = s * n + t;
                let wind = (block.flag[cell] < Flag::Fail).then(|| [block.u[cell], block.v[cell]]);
                let wind = wind.and_then(|wind| self.usable(s, wind, still));
                let stored = wind.map_or(NONE, single);
                if kept {
                    self.winds[s].push(stored);
                }
                if wind.is_some() {
                    let fine = &mut self.fine[s].values;
                    fine.push((micros.div_euclid(self.interval), stored));
                    self.noise[s].0 += 0.5 * (block.var_u[cell] + block.var_v[cell]);
                    self.noise[s].1 += 1;
                }
            }
        }
        self.forget();
        while self.times.len() > 64 && self.times.len() * self.stations > self.settings.values {
            self.thin();
        }
    }

    /// The wind unless the sensor stands still or the sector is excluded.
    fn usable(&mut self, s: usize, wind: [f64; 2], windy: bool) -> Option<[f64; 2]> {
        let tally = &mut self.tallies[s];
        let repeat = &mut self.repeats[s];
        tally.values += 1;
        let same = (wind[0] - repeat.last[0]).abs() + (wind[1] - repeat.last[1]).abs() < 1e-9;
        repeat.run = if same {
            repeat.run.saturating_add(1)
        } else {
            1
        };
        repeat.last = wind;
        let calm = wind[0].hypot(wind[1]) < 1e-9;
        if calm {
            if windy {
                tally.still += 1;
            }
            // A calm has no direction, and says of the speed only that it is small.
            return None;
        }
        if repeat.run >= STUCK_RUN {
            tally.stuck += 1;
            return None;
        }
        if self.settings.is_excluded(s, wind) {
            tally.excluded += 1;
            return None;
        }
        Some(wind)
    }

    fn median_speed(&self, block: &WindBlock, t: usize) -> f64 {
        let n = block.times.len();
        let cells = (0..self.stations).map(|s| s * n + t);
        let there = cells.filter(|&c| block.flag[c] < Flag::Fail);
        let mut speeds: Vec<f64> = there.map(|c| block.u[c].hypot(block.v[c])).collect();
        median(&mut speeds).unwrap_or(0.0)
    }

    /// Drops what is older than the days kept at all times.
    fn forget(&mut self) {
        let length = micros(86_400.0 * self.settings.clock_days);
        for fine in &mut self.fine {
            let Some(&(last, _)) = fine.values.last() else {
                continue;
            };
            let oldest = last - length / self.interval.max(1);
            // In large pieces, so that it costs little.
            let old = fine.values.partition_point(|v| v.0 < oldest);
            if 4 * old > fine.values.len() {
                fine.values.drain(..old);
            }
        }
    }

    fn thin(&mut self) {
        self.step *= 2;
        let (step, interval) = (self.step, self.interval);
        let keep: Vec<bool> = self
            .times
            .iter()
            .map(|t| t.micros().rem_euclid(step) < interval)
            .collect();
        let mut flags = keep.iter();
        self.times.retain(|_| *flags.next().unwrap_or(&false));
        let mut flags = keep.iter();
        self.structure.retain(|_| *flags.next().unwrap_or(&false));
        for winds in &mut self.winds {
            let mut flags = keep.iter();
            winds.retain(|_| *flags.next().unwrap_or(&false));
        }
    }

    /// The wind of a station at a kept time.
    pub(super) fn wind(&self, station: usize, t: usize) -> Option<Complex<f64>> {
        complex(self.winds[station][t])
    }
}

pub(super) fn complex([u, v]: [f32; 2]) -> Option<Complex<f64>> {
    (u.is_finite() && v.is_finite()).then(|| Complex::new(f64::from(u), f64::from(v)))
}

#[expect(
    clippy::cast_possible_truncation,
    reason = "winds need no more than single precision"
)]
fn single([u, v]: [f64; 2]) -> [f32; 2] {
    [u as f32, v as f32]
}

/// Whole microseconds of seconds, at least 1.
fn micros(seconds: f64) -> i64 {
    #[expect(
        clippy::cast_possible_truncation,
        reason = "saturates, and times are far below 2^63 µs"
    )]
    let whole = (seconds * 1e6).round() as i64;
    whole.max(1)
}

/// The middle one, of an even number the upper; sorts.
pub(super) fn median(values: &mut [f64]) -> Option<f64> {
    values.sort_by(f64::total_cmp);
    values.get(values.len() / 2).copied()
}
