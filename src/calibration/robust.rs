//! What keeps the fit honest: outliers, stations that follow no gain, those that stand out, a structure function without
//! the faults.

use super::gains::{Fit, is_sane};
use super::record::median;
use super::spread::{BlockSum, block_sums, own_variance};
use crate::align::{AlignedWind, Covariance, WindBlock};
use crate::check::Flag;
use crate::structure::{BlockSums, NetworkGeometry, StructureSettings, StructureWindow};
use crate::units::Wind;

/// Residuals beyond this many robust standard deviations are left out.
const OUTLIER: f64 = 5.0;
/// An outlier that is a spike, in robust standard deviations.
const SPIKE: f64 = 8.0;
/// A station that errs by this many times the variance that the model says, relative to the network, predicts no others.
const UNTRUSTED: f64 = 4.0;
/// A residual's median length in standard deviations of a component (Rayleigh): √(2 ln 2).
const RAYLEIGH_MEDIAN: f64 = 1.177_41;
/// Scale of the gains of sound sensors about 1: 3 %, or 1.7 degrees. It keeps what is common to many neighbours, which
/// the data say little of, small.
const SENSOR_SD: f64 = 0.03;
/// Least weight of the prior. Days tell nothing of a pattern of the weather that lasts through the record, such as a wind that is
/// always backed at one end of the network: without this it would be taken for turned vanes.
const LEAST_PRIOR: f64 = 0.3;
/// A gain that stands out differs from 1 by this, in logarithm and radians, and by this many of its own errors.
const LEAST_OFF: f64 = 0.07;
const OFF_ERRORS: f64 = 3.0;
/// How far residuals may exceed the model.
const LARGEST_SCALE: f64 = 2.0;

impl Fit<'_> {
    /// The structure function of the winds over their first gains, without outliers and stations that follow no gain.
    pub(super) fn find_structure(&mut self, geometry: &NetworkGeometry) {
        let n = self.times();
        let mut block = WindBlock::empty(self.record.times.clone(), self.gains.len());
        for s in 0..self.gains.len() {
            if self.misfit[s] > UNTRUSTED {
                continue;
            }
            let (sum, count) = self.record.noise[s];
            let noise = sum / count.max(1) as f64;
            for t in 0..n {
                if let Some(z) = self.corrected(s, t) {
                    let value = AlignedWind {
                        wind: Wind { u: z.re, v: z.im },
                        covariance: Covariance {
                            uu: noise,
                            uv: 0.0,
                            vv: noise,
                        },
                        flag: Flag::Pass,
                        age: 0.0,
                    };
                    block.set(s, t, &value);
                }
            }
        }
        let settings = StructureSettings::default();
        let step = self.record.interval as f64 * 1e-6;
        let sums = BlockSums::of(geometry, &settings, step, None, &block);
        let mut window = StructureWindow::new(geometry, settings);
        self.structure = window.advance(geometry, &sums, &block.times);
    }

    /// What a gain of 1 weighs beforehand: the variance of the station's own gain over that expected of sensors.
    pub(super) fn weigh_prior(&mut self) {
        let sums = block_sums(self, self.blocks);
        let own: Vec<Option<f64>> = sums.iter().map(|of| own_variance(of)).collect();
        let mut known: Vec<f64> = own.iter().flatten().copied().collect();
        let typical = median(&mut known).unwrap_or(0.0);
        let weight = |own: &Option<f64>| 0.5 * (own.unwrap_or(typical) + typical);
        self.prior = own
            .iter()
            .map(|v| (weight(v) / (SENSOR_SD * SENSOR_SD)).clamp(LEAST_PRIOR, 10.0))
            .collect();
    }

    /// Lets go of the stations whose reports stand out most against their neighbours. True if there was one.
    ///
    /// A fault is that of one station, weather that of many: so the others are held near 1, and a pattern that many share
    /// does not become a gain.
    pub(super) fn release(&mut self) -> bool {
        let sums = block_sums(self, self.blocks);
        let off: Vec<f64> = (0..sums.len())
            .map(|s| {
                let mut total = BlockSum::default();
                for sum in &sums[s] {
                    total.add(sum);
                }
                let raw = self.last_gain(s) * total.top / total.bottom;
                let error = own_variance(&sums[s]).unwrap_or(f64::INFINITY).sqrt();
                let far = if total.bottom > 0.0 && is_sane(raw) {
                    raw.ln().norm()
                } else {
                    0.0
                };
                if self.stands_out[s] || far < LEAST_OFF.max(OFF_ERRORS * error) {
                    0.0
                } else {
                    far
                }
            })
            .collect();
        let mut any = false;
        for s in 0..off.len() {
            let worse = self.leans_on(s).any(|other| off[other] > off[s]);
            if off[s] > 0.0 && !worse {
                self.stands_out[s] = true;
                any = true;
            }
        }
        any
    }

    /// Residuals of a station: wind over gain less prediction, over the square root of the strength.
    pub(super) fn residuals(&self, s: usize, with_outliers: bool) -> Vec<(usize, f64)> {
        let n = self.times();
        let mut found = Vec::new();
        for e in self.expected(s) {
            if self.outlier[s * n + e.t] && !with_outliers {
                continue;
            }
            if let Some(wind) = self.record.wind(s, e.t) {
                let residual = wind / self.gain(s, e.t) - e.field;
                found.push((e.t, residual.norm() / self.strength[e.t].sqrt()));
            }
        }
        found
    }

    pub(super) fn find_outliers(&mut self) {
        let n = self.times();
        for s in 0..self.gains.len() {
            let residuals = self.residuals(s, true);
            let mut lengths: Vec<f64> = residuals.iter().map(|r| r.1).collect();
            let Some(middle) = median(&mut lengths) else {
                continue;
            };
            let limit = middle / RAYLEIGH_MEDIAN;
            for (t, length) in residuals {
                // A quiet hour by the structure function is no reason to call a wind an outlier.
                let length = length * self.strength[t].min(1.0).sqrt();
                self.outlier[s * n + t] = length > OUTLIER * limit;
                self.far_off[s * n + t] = length > SPIKE * limit;
            }
        }
        self.refresh_all();
    }

    pub(super) fn find_misfit(&mut self) {
        let ratio = |s: usize| -> Option<f64> {
            let mut squares: Vec<f64> = Vec::new();
            let residuals = self.residuals(s, true);
            let mut residuals = residuals.iter().peekable();
            for stretch in &self.stretches {
                let variance = stretch.weights[s].as_ref().map_or(1.0, |w| w.variance);
                while let Some(&(_, length)) = residuals.next_if(|r| r.0 < stretch.times.end) {
                    squares.push(length * length / variance);
                }
            }
            median(&mut squares).map(|m| m / (RAYLEIGH_MEDIAN * RAYLEIGH_MEDIAN))
        };
        let ratios: Vec<Option<f64>> = (0..self.gains.len()).map(ratio).collect();
        let mut known: Vec<f64> = ratios.iter().flatten().copied().collect();
        let typical = median(&mut known).filter(|&m| m > 0.0).unwrap_or(1.0);
        self.scale = typical.min(LARGEST_SCALE);
        self.misfit = ratios
            .iter()
            .map(|r| r.map_or(1.0, |r| r / typical))
            .collect();
    }

    /// Stops the worst stations of each neighbourhood from predicting others. True if there was one.
    pub(super) fn distrust_worst(&mut self) -> bool {
        self.find_misfit();
        let mut any = false;
        for s in 0..self.gains.len() {
            if !self.may_predict[s] || self.misfit[s] < UNTRUSTED {
                continue;
            }
            // A bad station spoils the predictions of those that lean on it: the worst of them goes first.
            let worse = self
                .leans_on(s)
                .any(|other| self.may_predict[other] && self.misfit[other] > self.misfit[s]);
            if !worse {
                self.may_predict[s] = false;
                any = true;
            }
        }
        any
    }
}
