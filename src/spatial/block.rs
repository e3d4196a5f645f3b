//! A block of winds as the test sees it.

use std::collections::{BTreeSet, HashMap};
use std::ops::Range;

use super::row::{Key, ModelClass, Row};
use super::{Deviation, SpatialCheck};
use crate::align::WindBlock;
use crate::check::Flag;
use crate::structure::StructureFunction;
use crate::units::Wind;

/// A block with what is derived from it once.
pub(super) struct BlockView<'a> {
    pub(super) block: &'a WindBlock,
    models: &'a [StructureFunction],
    /// Site, instrument and age of each wind: variance per component, m²/s²; shape of the block.
    noise: Vec<f64>,
    /// Runs of times with one class of the model.
    classes: Vec<(Range<usize>, ModelClass)>,
    /// For each station whether it is there at all times.
    whole: Vec<bool>,
}

/// Columns of one block's length.
struct Scratch {
    u: Vec<f64>,
    v: Vec<f64>,
    variance: Vec<f64>,
}

impl<'a> BlockView<'a> {
    /// `models` has the structure function at each time of the block.
    pub(super) fn new(
        check: &SpatialCheck,
        block: &'a WindBlock,
        models: &'a [StructureFunction],
    ) -> Self {
        let n = block.times.len().min(models.len());
        let stations = check.around.len();
        let mut noise = vec![0.0; stations * block.times.len()];
        let (mut sum, mut count) = (0.0, 0.0);
        let mut whole = vec![true; stations];
        for (station, whole) in whole.iter_mut().enumerate() {
            let cells = block.of_station(station);
            let columns = block.var_u[cells.clone()]
                .iter()
                .zip(&block.var_v[cells.clone()]);
            let columns = columns
                .zip(&block.flag[cells.clone()])
                .zip(&block.age[cells.clone()]);
            let columns = columns.zip(&mut noise[cells]);
            for (model, ((((uu, vv), flag), age), noise)) in models.iter().zip(columns) {
                let instrument = 0.5 * (uu + vv);
                let temporal = if *age > 0.0 {
                    model.temporal.at(f64::from(*age))
                } else {
                    0.0
                };
                *noise = model.site_variance + instrument + temporal;
                let there = *flag < Flag::Fail;
                *whole &= there;
                sum += instrument;
                count += f64::from(u8::from(there));
            }
        }
        let instrument = if count > 0.0 { sum / count } else { 0.0 };
        let mut classes: Vec<(Range<usize>, ModelClass)> = Vec::new();
        for (t, model) in models[..n].iter().enumerate() {
            let class = ModelClass::of(model, instrument);
            match classes.last_mut() {
                Some((times, last)) if *last == class => times.end = t + 1,
                _ => classes.push((t..t + 1, class)),
            }
        }
        Self {
            block,
            models,
            noise,
            classes,
            whole,
        }
    }

    fn cell(&self, station: usize, t: usize) -> usize {
        station * self.block.times.len() + t
    }

    /// True if a station has a wind that did not fail.
    pub(super) fn is_there(&self, station: usize, t: usize) -> bool {
        self.block.flag[self.cell(station, t)] < Flag::Fail
    }

    pub(super) fn wind(&self, station: usize, t: usize) -> Wind {
        let cell = self.cell(station, t);
        Wind {
            u: self.block.u[cell],
            v: self.block.v[cell],
        }
    }

    /// The neighbours of a station that are there, one bit each.
    fn there(&self, check: &SpatialCheck, station: usize, t: usize, without: &[usize]) -> u16 {
        let others = check.around[station].others.iter().enumerate();
        others.fold(0, |bits, (k, (other, _))| {
            let counts = self.is_there(*other, t) && !without.contains(other);
            bits | u16::from(counts) << k
        })
    }

    /// Runs of times at which a station is predicted with the same weights.
    fn runs(&self, check: &SpatialCheck, station: usize, mut each: impl FnMut(Range<usize>, Key)) {
        let others = &check.around[station].others;
        let steady = self.whole[station] && others.iter().all(|(other, _)| self.whole[*other]);
        for (times, class) in &self.classes {
            let key = |there: u16| Key {
                station,
                there,
                class: *class,
            };
            if steady {
                each(times.clone(), key(mask_of(others.len())));
                continue;
            }
            let mut t = times.start;
            while t < times.end {
                let there = self.there(check, station, t, &[]);
                let own = self.is_there(station, t);
                let end = (t + 1..times.end)
                    .find(|&end| {
                        self.is_there(station, end) != own
                            || self.there(check, station, end, &[]) != there
                    })
                    .unwrap_or(times.end);
                if own {
                    each(t..end, key(there));
                }
                t = end;
            }
        }
    }

    /// The weights that the block needs and that are not known.
    pub(super) fn keys(
        &self,
        check: &SpatialCheck,
        known: &HashMap<Key, Option<Row>>,
    ) -> BTreeSet<Key> {
        let mut keys = BTreeSet::new();
        for station in 0..check.around.len() {
            self.runs(check, station, |_, key| {
                if !known.contains_key(&key) {
                    keys.insert(key);
                }
            });
        }
        keys
    }

    /// Times at which stations are more than `limit` standard deviations off when all their neighbours are trusted.
    pub(super) fn candidates(&self, check: &SpatialCheck, limit: f64) -> Vec<(usize, Vec<usize>)> {
        let n = self.block.times.len();
        let mut scratch = Scratch {
            u: vec![0.0; n],
            v: vec![0.0; n],
            variance: vec![0.0; n],
        };
        let mut at: Vec<Vec<usize>> = vec![Vec::new(); n];
        for station in 0..check.around.len() {
            self.runs(check, station, |times, key| {
                let Some(Some(row)) = check.rows.get(&key) else {
                    return;
                };
                pulp::Arch::new()
                    .dispatch(|| self.residuals(row, station, times.clone(), &mut scratch));
                let columns = scratch.u[times.clone()]
                    .iter()
                    .zip(&scratch.v[times.clone()]);
                let columns = columns.zip(&scratch.variance[times.clone()]);
                for (t, ((u, v), variance)) in times.zip(columns) {
                    if u * u + v * v > limit * limit * variance {
                        at[t].push(station);
                    }
                }
            });
        }
        let filled = at.into_iter().enumerate();
        filled
            .filter(|(_, stations)| !stations.is_empty())
            .collect()
    }

    /// Residuals and their variance at a run of times.
    #[expect(
        clippy::inline_always,
        reason = "it must become part of the caller's vector code"
    )]
    #[inline(always)]
    fn residuals(&self, row: &Row, station: usize, times: Range<usize>, out: &mut Scratch) {
        let cells = |s: usize| self.cell(s, times.start)..self.cell(s, times.end);
        let ru = &mut out.u[times.clone()];
        let rv = &mut out.v[times.clone()];
        let variance = &mut out.variance[times.clone()];
        ru.copy_from_slice(&self.block.u[cells(station)]);
        rv.copy_from_slice(&self.block.v[cells(station)]);
        variance.copy_from_slice(&self.noise[cells(station)]);
        for &(other, [a, b, c, d], square) in &row.others {
            let winds = self.block.u[cells(other)]
                .iter()
                .zip(&self.block.v[cells(other)]);
            let noise = &self.noise[cells(other)];
            let columns = ru.iter_mut().zip(rv.iter_mut()).zip(variance.iter_mut());
            for (((ru, rv), variance), ((u, v), noise)) in columns.zip(winds.zip(noise)) {
                *ru -= a * u + b * v;
                *rv -= c * u + d * v;
                *variance += square * noise;
            }
        }
        for (variance, model) in variance.iter_mut().zip(&self.models[times]) {
            *variance += model.longitudinal * row.between[0] + model.transverse * row.between[1];
        }
    }

    /// What the neighbours say of one wind, those of `without` left out; weights not known yet go to `own`.
    pub(super) fn deviation(
        &self,
        check: &SpatialCheck,
        own: &mut HashMap<Key, Option<Row>>,
        station: usize,
        t: usize,
        without: &[usize],
    ) -> Option<Deviation> {
        if !self.is_there(station, t) {
            return None;
        }
        let class = self.classes.iter().find(|(times, _)| times.contains(&t))?.1;
        let key = Key {
            station,
            there: self.there(check, station, t, without),
            class,
        };
        let row = match check.rows.get(&key) {
            Some(row) => row,
            None => own.entry(key).or_insert_with(|| check.row(key)),
        };
        let row = row.as_ref()?;
        let mut residual = self.wind(station, t);
        let mut variance = self.noise[self.cell(station, t)];
        for &(other, [a, b, c, d], square) in &row.others {
            let Wind { u, v } = self.wind(other, t);
            residual.u -= a * u + b * v;
            residual.v -= c * u + d * v;
            variance += square * self.noise[self.cell(other, t)];
        }
        let model = self.models.get(t)?;
        variance += model.longitudinal * row.between[0] + model.transverse * row.between[1];
        (variance > 0.0).then(|| Deviation {
            station,
            residual,
            variance,
            neighbours: key.there.count_ones(),
        })
    }
}

/// The lowest `count` bits, at most 16.
fn mask_of(count: usize) -> u16 {
    (0..count.min(16)).fold(0, |bits, k| bits | 1 << k)
}
