//! The gains of all stations: expectation of the field at each station from the others, then the gain that fits.

use nalgebra::Complex;

use super::record::{Record, median};
use super::spread::Blocks;
use crate::align::{AlignedWind, Covariance, WindBlock};
use crate::check::Flag;
use crate::structure::{NetworkGeometry, Predictor, StationWeights, StructureFunction};
use crate::time::Time;
use crate::units::Wind;

/// Stretches of time that share the weights of the predictions, at most, and their least length.
const STRETCHES: usize = 16;
const LEAST_STRETCH: usize = 48;
/// A station that is there less than this share of a stretch predicts no others in it.
const SELDOM: f64 = 0.3;
/// A prediction of which more than this share of the weight is missing is not used.
const MISSING_WEIGHT: f64 = 0.35;
/// Over-relaxation of the steps (`design.md` 5).
const RELAXATION: f64 = 1.6;
const SWEEPS: usize = 60;
/// Largest change of a sweep, relative, at which the fit is done.
const CONVERGED: f64 = 1e-4;
/// Wind at which a time has half the weight of a strong one, m/s: below it directions mean little.
const LIGHT_WIND: f64 = 1.0;
const ROUNDS: usize = 6;
/// Gains within this of 1, in logarithm and radians, are taken for 1 at first.
const SOUND: f64 = 0.3;
/// Stations whose median wind a first gain is found against.
const NEAR: usize = 8;
/// What is taken off the square of a prediction, at most, as a share of it.
const MOST_EXCESS: f64 = 0.1;

type C = Complex<f64>;

/// Times that share the weights of the predictions.
pub(super) struct Stretch {
    pub(super) times: std::ops::Range<usize>,
    pub(super) amplitude: f64,
    /// By station.
    pub(super) weights: Vec<Option<StationWeights>>,
}

/// The fit of all gains.
pub(super) struct Fit<'a> {
    pub(super) record: &'a Record,
    pub(super) predictor: &'a Predictor,
    /// At each time.
    pub(super) structure: Vec<StructureFunction>,
    pub(super) stretches: Vec<Stretch>,
    /// Gains of each station between its splits, in the order of time; the last is that of the present.
    pub(super) gains: Vec<Vec<C>>,
    /// First times with the next gain, ascending; one fewer than the gains.
    pub(super) splits: Vec<Vec<usize>>,
    /// Wind over gain, station-major; 0 where none is used.
    pub(super) z: Vec<C>,
    /// 1 where a wind is used, else 0.
    pub(super) used: Vec<f64>,
    /// Outliers, station-major.
    pub(super) outlier: Vec<bool>,
    pub(super) may_predict: Vec<bool>,
    /// Amplitude of the structure function at each time over that of its stretch.
    pub(super) strength: Vec<f64>,
    /// By station whether others stand all around it.
    pub(super) around: &'a [bool],
    pub(super) blocks: &'a Blocks,
    /// Of each station the weight of what is expected of a sensor beforehand, relative to its data.
    pub(super) prior: Vec<f64>,
    /// Variance of the residuals over what the model says, the network's median. The model has seen the faults too, and
    /// may say far too much; 0 as long as nothing is known.
    pub(super) scale: f64,
    /// Stations whose gain is not held near 1.
    pub(super) stands_out: Vec<bool>,
    /// Outliers so far off that they count as spikes, station-major.
    pub(super) far_off: Vec<bool>,
    /// Of each station the residuals' variance over what the model says, relative to the network's median.
    pub(super) misfit: Vec<f64>,
}

/// The prediction of one station at one time.
#[derive(Debug, Clone, Copy)]
pub(super) struct Expected {
    pub(super) t: usize,
    /// From the others.
    pub(super) field: C,
    /// What a regression on it takes off its square.
    pub(super) excess: f64,
    /// Weight of the time.
    pub(super) weight: f64,
}

impl<'a> Fit<'a> {
    /// The gains of all stations, robustly: from medians of neighbours to predictions; outliers are left out, and
    /// stations that do not follow the others predict none.
    pub(super) fn new(
        record: &'a Record,
        predictor: &'a Predictor,
        around: &'a [bool],
        blocks: &'a Blocks,
        geometry: &NetworkGeometry,
    ) -> Self {
        let n = record.winds.len();
        let cells = n * record.times.len();
        let mut fit = Self {
            record,
            predictor,
            structure: record.structure.clone(),
            around,
            blocks,
            prior: vec![0.0; n],
            scale: 0.0,
            stands_out: vec![false; n],
            far_off: vec![false; cells],
            stretches: Vec::new(),
            gains: vec![vec![C::new(1.0, 0.0)]; n],
            splits: vec![Vec::new(); n],
            z: vec![C::default(); cells],
            used: vec![0.0; cells],
            outlier: vec![false; cells],
            may_predict: vec![true; n],
            strength: vec![1.0; record.times.len()],
            misfit: vec![1.0; n],
        };
        fit.weigh();
        fit.refresh_all();
        fit.start();
        fit.weigh_prior();
        // The structure function of the run has seen the faults: it is found again without them.
        fit.solve();
        fit.find_outliers();
        fit.find_misfit();
        fit.find_structure(geometry);
        fit.weigh();
        fit.refresh_all();
        fit.start();
        fit.weigh_prior();
        for _ in 0..ROUNDS {
            fit.solve();
            fit.find_outliers();
            fit.find_misfit();
            fit.weigh_prior();
            for _ in 0..ROUNDS {
                fit.solve();
                if !fit.release() {
                    break;
                }
            }
            if !fit.distrust_worst() {
                break;
            }
            fit.weigh();
            fit.refresh_all();
        }
        fit.solve();
        fit.find_misfit();
        fit
    }

    pub(super) fn times(&self) -> usize {
        self.record.times.len()
    }

    /// Gives each station a gain for each part between its splits, and fits anew.
    pub(super) fn split(&mut self, splits: Vec<Vec<usize>>) {
        for (gains, splits) in self.gains.iter_mut().zip(&splits) {
            let last = gains.last().copied().unwrap_or(C::new(1.0, 0.0));
            gains.resize(splits.len() + 1, last);
        }
        self.splits = splits;
        self.solve();
        self.find_outliers();
        self.solve();
        self.find_misfit();
    }

    /// Weight of the prior: none for a station that stands out.
    pub(super) fn prior_of(&self, s: usize) -> f64 {
        if self.stands_out[s] {
            0.0
        } else {
            self.prior[s]
        }
    }

    /// Weights of the predictions in each stretch.
    pub(super) fn weigh(&mut self) {
        let times = self.times();
        let length = times.div_ceil(STRETCHES).max(LEAST_STRETCH);
        self.stretches.clear();
        for start in (0..times).step_by(length) {
            let range = start..(start + length).min(times);
            let Some(structure) = typical(&self.structure[range.clone()]) else {
                continue;
            };
            let block = self.presence(&range);
            let found = self
                .predictor
                .weights(&structure, &block, 0, &self.may_predict);
            let mut weights = vec![None; self.gains.len()];
            for w in found {
                let station = w.station;
                weights[station] = Some(w);
            }
            let amplitude = structure.longitudinal + structure.transverse;
            for t in range.clone() {
                let now = &self.structure[t];
                let ratio = (now.longitudinal + now.transverse) / amplitude;
                self.strength[t] = if ratio.is_finite() {
                    ratio.clamp(0.5, 4.0)
                } else {
                    1.0
                };
            }
            self.stretches.push(Stretch {
                times: range,
                amplitude,
                weights,
            });
        }
    }

    /// A block of one time with the stations that are there often enough and their mean instrument variances.
    fn presence(&self, range: &std::ops::Range<usize>) -> WindBlock {
        let mut block = WindBlock::empty(vec![Time::from_micros(0)], self.gains.len());
        for s in 0..self.gains.len() {
            let there = range
                .clone()
                .filter(|&t| self.record.wind(s, t).is_some())
                .count();
            let least = if self.may_predict[s] { SELDOM } else { 0.0 };
            if there == 0 || (there as f64) < least * range.len() as f64 {
                continue;
            }
            let (sum, count) = self.record.noise[s];
            let noise = sum / count.max(1) as f64;
            let value = AlignedWind {
                wind: Wind { u: 0.0, v: 0.0 },
                covariance: Covariance {
                    uu: noise,
                    uv: 0.0,
                    vv: noise,
                },
                flag: Flag::Pass,
                age: 0.0,
            };
            block.set(s, 0, &value);
        }
        block
    }

    pub(super) fn gain(&self, s: usize, t: usize) -> C {
        self.gains[s][self.part(s, t)]
    }

    /// The part of a station's record that a time lies in.
    pub(super) fn part(&self, s: usize, t: usize) -> usize {
        self.splits[s].partition_point(|&split| split <= t)
    }

    /// The gain of the present.
    pub(super) fn last_gain(&self, s: usize) -> C {
        // There is always one.
        self.gains[s].last().copied().unwrap_or(C::new(1.0, 0.0))
    }

    pub(super) fn refresh_all(&mut self) {
        for s in 0..self.gains.len() {
            self.refresh(s);
        }
    }

    /// Wind over gain of a station.
    fn refresh(&mut self, s: usize) {
        let n = self.times();
        for t in 0..n {
            let cell = s * n + t;
            match self.record.wind(s, t).filter(|_| !self.outlier[cell]) {
                Some(wind) => {
                    self.z[cell] = wind / self.gain(s, t);
                    self.used[cell] = 1.0;
                }
                None => {
                    self.z[cell] = C::default();
                    self.used[cell] = 0.0;
                }
            }
        }
    }

    /// The field at a station from the others, at all times that have enough of them.
    pub(super) fn expected(&self, s: usize) -> Vec<Expected> {
        let n = self.times();
        let mut found = Vec::with_capacity(n);
        for stretch in &self.stretches {
            let Some(weights) = &stretch.weights[s] else {
                continue;
            };
            let length = stretch.times.len();
            let mut sums = vec![[0.0; 3]; length];
            let mut total = 0.0;
            for &(other, [a, b, c, d]) in &weights.others {
                let cells = other * n + stretch.times.start..other * n + stretch.times.end;
                let mass = 0.5 * (a + d);
                total += mass;
                let columns = self.z[cells.clone()].iter().zip(&self.used[cells]);
                for (sum, (z, used)) in sums.iter_mut().zip(columns) {
                    sum[0] += a * z.re + b * z.im;
                    sum[1] += c * z.re + d * z.im;
                    sum[2] += mass * used;
                }
            }
            for (t, [u, v, mass]) in stretch.times.clone().zip(sums) {
                if (total - mass).abs() > MISSING_WEIGHT * total || mass <= 0.0 {
                    continue;
                }
                let field = C::new(u, v) / mass;
                let square = field.norm_sqr();
                let excess = 2.0 * weights.covariance * self.strength[t] * self.scale;
                let excess = excess.clamp(-MOST_EXCESS * square, MOST_EXCESS * square);
                let speed = square / (square + LIGHT_WIND * LIGHT_WIND);
                found.push(Expected {
                    t,
                    field,
                    excess,
                    weight: speed / (self.strength[t] * stretch.amplitude.max(1e-6)),
                });
            }
        }
        found
    }

    /// First gains: against the median wind of the stations that weigh most in the prediction.
    fn start(&mut self) {
        let n = self.times();
        let mut first = Vec::with_capacity(self.gains.len());
        for s in 0..self.gains.len() {
            let (mut top, mut bottom) = (C::default(), 0.0);
            for stretch in &self.stretches {
                let Some(weights) = &stretch.weights[s] else {
                    continue;
                };
                let mut near: Vec<(usize, f64)> = weights
                    .others
                    .iter()
                    .map(|&(other, w)| (other, 0.5 * (w[0] + w[3])))
                    .collect();
                near.sort_by(|a, b| b.1.total_cmp(&a.1));
                near.truncate(NEAR);
                for t in stretch.times.clone() {
                    let Some(wind) = self.record.wind(s, t) else {
                        continue;
                    };
                    let others = near.iter().map(|o| o.0 * n + t);
                    let there: Vec<usize> = others.filter(|&c| self.used[c] > 0.0).collect();
                    let mut u: Vec<f64> = there.iter().map(|&c| self.z[c].re).collect();
                    let mut v: Vec<f64> = there.iter().map(|&c| self.z[c].im).collect();
                    let Some((u, v)) = median(&mut u).zip(median(&mut v)) else {
                        continue;
                    };
                    let field = C::new(u, v);
                    top += wind * field.conj();
                    bottom += field.norm_sqr();
                }
            }
            let gain = top / bottom;
            // A small difference is the weather's until it proves to be the sensor's.
            let sound = !is_sane(gain) || gain.ln().norm() < SOUND;
            self.stands_out[s] = !sound;
            first.push(if sound { C::new(1.0, 0.0) } else { gain });
        }
        for (gain, first) in self.gains.iter_mut().zip(first) {
            *gain = vec![first];
        }
        self.refresh_all();
    }

    /// Sweeps over the stations until the gains stay.
    fn solve(&mut self) {
        for sweep in 0..SWEEPS {
            let mut largest: f64 = 0.0;
            for s in 0..self.gains.len() {
                let expected = self.expected(s);
                let mut sums = vec![(C::default(), 0.0); self.gains[s].len()];
                for e in &expected {
                    let cell = s * self.times() + e.t;
                    if self.used[cell] <= 0.0 {
                        continue;
                    }
                    let part = self.part(s, e.t);
                    let wind = self.z[cell] * self.gain(s, e.t);
                    sums[part].0 += e.weight * wind * e.field.conj();
                    sums[part].1 += e.weight * (e.field.norm_sqr() - e.excess);
                }
                for (part, (top, bottom)) in sums.into_iter().enumerate() {
                    let prior = self.prior_of(s) * bottom;
                    let fitted = (top + prior) / (bottom + prior);
                    if bottom <= 0.0 || !is_sane(fitted) {
                        continue;
                    }
                    let old = self.gains[s][part];
                    let change = fitted / old;
                    let far = (change - 1.0).norm();
                    // Large steps are not stretched.
                    let power = if sweep > 1 && far < 0.1 {
                        RELAXATION
                    } else {
                        1.0
                    };
                    self.gains[s][part] = old * change.powf(power);
                    largest = largest.max(far);
                }
                self.refresh(s);
            }
            self.fix_gauge();
            if largest < CONVERGED {
                break;
            }
        }
    }

    /// Turns and scales all gains so that their median angle is 0 and their median modulus 1. A network that is turned or
    /// scaled as a whole cannot be told from another wind.
    fn fix_gauge(&mut self) {
        let seen = |s: &usize| self.record.noise[*s].1 > 0;
        let stations: Vec<usize> = (0..self.gains.len()).filter(seen).collect();
        // Angles about the mean direction of the unit vectors, so that they do not wrap.
        let mean: C = stations
            .iter()
            .map(|&s| self.last_gain(s) / self.last_gain(s).norm())
            .sum();
        let about = if mean.norm() > 1e-9 {
            mean / mean.norm()
        } else {
            C::new(1.0, 0.0)
        };
        let angle = |&s: &usize| (self.last_gain(s) / about).arg();
        let mut angles: Vec<f64> = stations.iter().map(angle).collect();
        let mut logs: Vec<f64> = stations
            .iter()
            .map(|&s| self.last_gain(s).norm().ln())
            .collect();
        let Some((angle, log)) = median(&mut angles).zip(median(&mut logs)) else {
            return;
        };
        let common = about * C::from_polar(log.exp(), angle);
        for gain in self.gains.iter_mut().flatten() {
            *gain /= common;
        }
        for z in &mut self.z {
            *z *= common;
        }
    }

    /// How the prediction of each station answers to a relative error of the others: c of ε = s + c ε.
    pub(super) fn coupling(&self, s: usize) -> Vec<(usize, C)> {
        let n = self.times();
        let mut sums: Vec<(usize, C)> = Vec::new();
        let mut total = 0.0;
        let expected = self.expected(s);
        let mut expected = expected.iter().peekable();
        for stretch in &self.stretches {
            let Some(weights) = &stretch.weights[s] else {
                continue;
            };
            let mut now = Vec::new();
            while let Some(e) = expected.next_if(|e| e.t < stretch.times.end) {
                if self.used[s * n + e.t] > 0.0 {
                    total += e.weight * (e.field.norm_sqr() - e.excess);
                    now.push(e);
                }
            }
            for &(other, [a, b, c, d]) in &weights.others {
                let linear = C::new(0.5 * (a + d), 0.5 * (c - b));
                let sum: C = now
                    .iter()
                    .map(|e| e.weight * e.field.conj() * self.z[other * n + e.t])
                    .sum();
                match sums.iter_mut().find(|x| x.0 == other) {
                    Some(x) => x.1 += linear * sum,
                    None => sums.push((other, linear * sum)),
                }
            }
        }
        if total > 0.0 {
            for sum in &mut sums {
                sum.1 /= total;
            }
        } else {
            sums.clear();
        }
        sums
    }

    /// The stations that have much weight in the prediction of a station.
    pub(super) fn leans_on(&self, s: usize) -> impl Iterator<Item = usize> {
        let weights = self.stretches.iter().find_map(|p| p.weights[s].as_ref());
        let others = weights.into_iter().flat_map(|w| &w.others);
        others
            .filter(|(_, w)| 0.5 * (w[0] + w[3]) > 0.1)
            .map(|o| o.0)
    }

    /// True if a wind is far off by itself.
    pub(super) fn is_far_off(&self, s: usize, t: usize) -> bool {
        self.far_off[s * self.times() + t]
    }

    /// True if the stations that predict a station stand all around it.
    pub(super) fn surrounded(&self, s: usize) -> bool {
        self.around.get(s).copied().unwrap_or(false)
    }

    /// Wind over gain where it is used.
    pub(super) fn corrected(&self, s: usize, t: usize) -> Option<C> {
        let cell = s * self.times() + t;
        (self.used[cell] > 0.0).then(|| self.z[cell])
    }
}

/// A gain that some sensor may have.
pub(super) fn is_sane(gain: C) -> bool {
    let size = gain.norm();
    size.is_finite() && (0.02..50.0).contains(&size)
}

/// The structure function with the median amplitude.
fn typical(functions: &[StructureFunction]) -> Option<StructureFunction> {
    let mut order: Vec<&StructureFunction> = functions.iter().collect();
    let size = |f: &StructureFunction| f.longitudinal + f.transverse;
    order.sort_by(|a, b| size(a).total_cmp(&size(b)));
    order.get(order.len() / 2).map(|f| **f)
}
