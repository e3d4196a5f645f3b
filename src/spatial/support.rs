//! What speaks for an outlier.

use std::collections::HashMap;

use super::block::BlockView;
use super::row::{Key, Row};
use super::{Deviation, Outlier, OwnChanges, SpatialCheck};
use crate::units::Wind;

/// What speaks for an outlier.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Support {
    /// This station near it departs likewise from what the others say of it.
    Neighbour(usize),
    /// Its own report before or after departs likewise from the same prediction.
    OwnReport,
    /// Not known yet: the report before or after it is not there.
    Unknown,
    /// Nothing.
    None,
}

/// Share of the outlier's residual that another must have along it to depart likewise: half of it, so that the first
/// stations behind a front, where it is not yet at its full strength, still count.
const SHARE: f64 = 0.5;

/// Standard deviations that a supporting neighbour must be off itself. By chance one of ten neighbours is 3 off in a tenth
/// of all cases (each with exp(−9/2)), and in a direction that supports in a third of these.
const DEPARTS: f64 = 3.0;

/// The outliers of block `b`, in the order of time and station, with what speaks for each.
pub(super) fn supported(
    check: &SpatialCheck,
    views: &[BlockView],
    b: usize,
    own: &mut HashMap<Key, Option<Row>>,
    outliers: &[(usize, Deviation)],
    changes: &OwnChanges,
) -> Vec<Outlier> {
    let mut found = Vec::with_capacity(outliers.len());
    for of_time in outliers.chunk_by(|a, b| a.0 == b.0) {
        let all: Vec<usize> = of_time.iter().map(|o| o.1.station).collect();
        for &(t, deviation) in of_time {
            let case = Case {
                check,
                views,
                at: (b, t),
                deviation,
            };
            found.push(Outlier {
                at: (b, t),
                deviation,
                support: case.support(own, &all, changes),
            });
        }
    }
    found
}

struct Case<'a> {
    check: &'a SpatialCheck,
    views: &'a [BlockView<'a>],
    at: (usize, usize),
    deviation: Deviation,
}

impl Case<'_> {
    fn support(
        &self,
        own: &mut HashMap<Key, Option<Row>>,
        all: &[usize],
        changes: &OwnChanges,
    ) -> Support {
        let station = self.deviation.station;
        let time = self.views[self.at.0].block.times[self.at.1];
        let residual = self.deviation.residual;
        let others = match changes(station, time) {
            Some(changes) => changes.map(|change| {
                change.map(|change| Wind {
                    u: residual.u + change.u,
                    v: residual.v + change.v,
                })
            }),
            None => [false, true].map(|back| {
                let (b, t) = self.other_report(back)?;
                let deviation = self.views[b].deviation(self.check, own, station, t, &[]);
                deviation.map(|d| d.residual)
            }),
        };
        if others.iter().flatten().any(|&other| self.is_like(other)) {
            return Support::OwnReport;
        }
        let known = others.iter().flatten().count();
        let (b, t) = self.at;
        let around = &self.check.around[station].others;
        for &(neighbour, _) in around {
            let theirs = self.views[b].deviation(self.check, own, neighbour, t, all);
            if theirs.is_some_and(|d| d.size() >= DEPARTS && self.is_like(d.residual)) {
                return Support::Neighbour(neighbour);
            }
        }
        if known == 2 {
            Support::None
        } else {
            Support::Unknown
        }
    }

    fn is_like(&self, other: Wind) -> bool {
        let own = self.deviation.residual;
        own.u * other.u + own.v * other.v >= SHARE * (own.u * own.u + own.v * own.v)
    }

    /// The station's report after, or before, this one: the next wind that is another, as values at analysis times may be
    /// of one report.
    fn other_report(&self, back: bool) -> Option<(usize, usize)> {
        let station = self.deviation.station;
        let here = self.views[self.at.0].wind(station, self.at.1);
        let time = self.views[self.at.0].block.times[self.at.1].micros();
        let (mut b, mut t) = self.at;
        loop {
            if back {
                while t == 0 {
                    b = b.checked_sub(1)?;
                    t = self.views[b].block.times.len();
                }
                t -= 1;
            } else {
                t += 1;
                while t >= self.views.get(b)?.block.times.len() {
                    b += 1;
                    t = 0;
                }
            }
            let view = &self.views[b];
            let apart = view.block.times[t].micros().saturating_sub(time).abs();
            if apart > self.check.limits.report_within {
                return None;
            }
            if view.is_there(station, t) && view.wind(station, t) != here {
                return Some((b, t));
            }
        }
    }
}
