//! Why an estimate is doubted, or missing, at a time.

use super::{EstimateBlock, fit_books::DISAGREES_AT_A_TIME};
use crate::align::WindBlock;
use crate::check::Flag;
use crate::polygon::StationPolygon;
use crate::settings::PolygonLimits;

/// Why an estimate is doubted or missing; the figure behind it stands elsewhere, as said.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Cause {
    /// This station has no wind: no value.
    Missing(usize),
    /// The wind of this station failed a check: no value.
    Failed(usize),
    /// The wind of this station is suspect.
    Suspect(usize),
    /// A wind is older than the limit (`limits.largest_age`; the age is in the block).
    OldWind,
    /// Line integral and linear fit disagree (the difference and its error are in the block's fits).
    FitDisagrees,
}

impl Cause {
    /// Names of all causes, in the order of [`Cause::index`].
    pub const NAMES: [&'static str; 5] =
        ["missing", "failed", "suspect", "old_wind", "fit_disagrees"];

    /// Its place among the causes.
    #[must_use]
    pub const fn index(self) -> usize {
        match self {
            Self::Missing(_) => 0,
            Self::Failed(_) => 1,
            Self::Suspect(_) => 2,
            Self::OldWind => 3,
            Self::FitDisagrees => 4,
        }
    }

    /// Its name.
    #[must_use]
    pub const fn name(self) -> &'static str {
        Self::NAMES[self.index()]
    }

    /// The station behind it.
    #[must_use]
    pub const fn station(self) -> Option<usize> {
        match self {
            Self::Missing(s) | Self::Failed(s) | Self::Suspect(s) => Some(s),
            Self::OldWind | Self::FitDisagrees => None,
        }
    }
}

/// Raises the flags of estimates with old winds, or whose fit disagrees, to suspect, and says for each that is flagged
/// why. Of several causes the one that costs most stands: no value before a doubt, and of two stations the first of the
/// polygon.
pub fn find_causes(
    block: &mut EstimateBlock,
    polygons: &[StationPolygon],
    winds: &WindBlock,
    limits: &PolygonLimits,
) {
    let extra: Vec<&StationPolygon> = block.extra.iter().map(|extra| &extra.polygon).collect();
    let n = block.times.len();
    let mut raised: Vec<(usize, Cause)> = Vec::new();
    if let Some(limit) = limits.largest_age {
        let cells = block.age.iter().zip(&block.flag).enumerate();
        let old = cells.filter(|(_, (age, flag))| **flag <= Flag::Pass && f64::from(**age) > limit);
        raised.extend(old.map(|(cell, _)| (cell, Cause::OldWind)));
    }
    for column in &block.fits {
        for (t, fit) in column.at.iter().enumerate() {
            let cell = column.polygon * n + t;
            let disagrees = fit.is_some_and(|fit| fit.chance < DISAGREES_AT_A_TIME);
            if disagrees && block.flag[cell] <= Flag::Pass {
                raised.push((cell, Cause::FitDisagrees));
            }
        }
    }
    let faultless = block.flag.iter().all(|&flag| flag <= Flag::Pass);
    if faultless && raised.is_empty() {
        return;
    }
    let mut causes = vec![None; block.flag.len()];
    for (p, polygon) in polygons.iter().chain(extra).enumerate() {
        for t in (0..n).filter(|&t| block.stands(p * n + t)) {
            let flag = block.flag[p * n + t];
            if flag > Flag::Pass {
                let of = |s: &&usize| winds.flag[*s * n + t] == flag;
                causes[p * n + t] = polygon.row.stations.iter().find(of).map(|&s| match flag {
                    Flag::Missing => Cause::Missing(s),
                    Flag::Fail => Cause::Failed(s),
                    _ => Cause::Suspect(s),
                });
            }
        }
    }
    for (cell, cause) in raised {
        block.flag[cell] = Flag::Suspect;
        causes[cell].get_or_insert(cause);
    }
    block.causes = causes;
}

/// For each polygon how often each cause stands.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct CauseBooks(pub Vec<[u64; 5]>);

impl CauseBooks {
    /// Those of a block.
    #[must_use]
    pub fn of(block: &EstimateBlock, polygons: usize) -> Self {
        let mut counts = vec![[0; 5]; polygons];
        let n = block.times.len().max(1);
        for (counts, causes) in counts.iter_mut().zip(block.causes.chunks(n)) {
            for cause in causes.iter().flatten() {
                counts[cause.index()] += 1;
            }
        }
        Self(counts)
    }

    /// Takes in those of a later block.
    pub fn merge(&mut self, later: &Self) {
        let polygons = self.0.len().max(later.0.len());
        self.0.resize(polygons, [0; 5]);
        for (all, more) in self.0.iter_mut().zip(&later.0) {
            for (sum, n) in all.iter_mut().zip(more) {
                *sum += n;
            }
        }
    }

    /// How often each cause stands, all polygons together.
    #[must_use]
    pub fn all(&self) -> [u64; 5] {
        let mut all = [0; 5];
        for counts in &self.0 {
            for (sum, n) in all.iter_mut().zip(counts) {
                *sum += n;
            }
        }
        all
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::align::{AlignedWind, Covariance};
    use crate::integral::{Comparison, FitColumn, estimate};
    use crate::polygon::build_triangles;
    use crate::station::{Network, Position, Station};
    use crate::time::Time;
    use crate::units::Wind;

    /// One triangle at six times: sound, one station suspect, failed, missing, old, and with a fit that disagrees.
    #[test]
    fn every_cause_is_named_and_counted() {
        let at = [(47.0, 8.0), (47.0, 8.5), (47.4, 8.2)];
        let stations = at.iter().enumerate().map(|(k, &(latitude, longitude))| {
            Station::new(format!("S{k}"), Position::new(latitude, longitude).unwrap())
        });
        let network = Network::new(stations.collect());
        let limits = PolygonLimits {
            largest_age: Some(600.0),
            ..PolygonLimits::default()
        };
        let polygons = build_triangles(&network, &[[0, 1, 2]], &limits).polygons;
        let mut winds = WindBlock::empty((0..6).map(Time::from_micros).collect(), 3);
        for station in 0..3 {
            for t in 0..6 {
                let value = AlignedWind {
                    wind: Wind { u: 3.0, v: 1.0 },
                    covariance: Covariance::default(),
                    flag: Flag::Pass,
                    age: if (station, t) == (1, 4) { 601.0 } else { 600.0 },
                };
                winds.set(station, t, &value);
            }
        }
        for (t, flag) in [(1, Flag::Suspect), (2, Flag::Fail), (3, Flag::Missing)] {
            winds.raise_flag(2, t, flag);
        }
        // A doubt beside a station that is missing says nothing more.
        winds.raise_flag(0, 3, Flag::Suspect);
        let mut block = estimate(&polygons, &winds);
        let fit = |chance| {
            Some(Comparison {
                fitted: [0.0; 2],
                fitted_se: [0.0; 2],
                difference: [0.0; 2],
                difference_se: [0.0; 2],
                residual: 0.0,
                chance,
            })
        };
        block.fits = vec![FitColumn {
            polygon: 0,
            at: vec![fit(0.002), fit(0.5), None, None, fit(0.5), fit(0.0005)],
        }];
        find_causes(&mut block, &polygons, &winds, &limits);
        let expected = [
            None,
            Some(Cause::Suspect(2)),
            Some(Cause::Failed(2)),
            Some(Cause::Missing(2)),
            Some(Cause::OldWind),
            Some(Cause::FitDisagrees),
        ];
        assert_eq!(block.causes, expected);
        let flags = [
            Flag::Pass,
            Flag::Suspect,
            Flag::Fail,
            Flag::Missing,
            Flag::Suspect,
            Flag::Suspect,
        ];
        assert_eq!(block.flag, flags);
        assert_eq!(block.vorticity[2..4], [0.0, 0.0]);
        let mut books = CauseBooks::of(&block, 1);
        books.merge(&CauseBooks::of(&block, 1));
        assert_eq!(books.all(), [2; 5]);
    }
}
