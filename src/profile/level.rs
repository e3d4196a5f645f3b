//! The wind and place of a platform at a level or in a layer, from its reports around.

use super::Coordinate;
use crate::align::Covariance;
use crate::check::Flag;
use crate::polygon::sphere::{latitude_longitude, unit_vector};
use crate::station::Position;
use crate::units::Wind;

/// Where a wind is wanted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Level {
    /// At a level: Pa or m.
    At(f64),
    /// The mean over a layer, from its bottom to its top: Pa or m.
    Between(f64, f64),
}

impl Level {
    /// The level, or the middle of the layer.
    #[must_use]
    pub fn middle(self) -> f64 {
        match self {
            Self::At(level) => level,
            Self::Between(bottom, top) => 0.5 * (bottom + top),
        }
    }

    /// In words: `850 hPa`, `1000 to 850 hPa`.
    #[must_use]
    pub fn words(self, coordinate: Coordinate) -> String {
        match self {
            Self::At(level) => coordinate.words(level),
            Self::Between(bottom, top) => {
                let bottom = coordinate.words(bottom);
                let number = bottom.split(' ').next().unwrap_or_default();
                format!("{number} to {}", coordinate.words(top))
            }
        }
    }
}

/// What a platform reports on one level.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LevelReport {
    /// Pa or m.
    pub level: f64,
    /// The wind.
    pub wind: Wind,
    /// Its instrument covariance.
    pub covariance: Covariance,
    /// Where the platform was.
    pub position: Position,
    /// The report's flag.
    pub flag: Flag,
    /// How far the report is from the nominal time, s.
    pub age: f64,
}

/// A platform's wind and place at a level or in a layer.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LevelWind {
    /// The wind.
    pub wind: Wind,
    /// Its instrument covariance.
    pub covariance: Covariance,
    /// Where the platform was.
    pub position: Position,
    /// Worst flag of the reports behind it.
    pub flag: Flag,
    /// Largest distance of these from the nominal time, s.
    pub age: f64,
}

/// Why a platform has no wind at a level.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum NoWind {
    /// No usable report at that time on any level.
    NoReport,
    /// All its reports are above.
    Below,
    /// All its reports are below.
    Above,
    /// Its reports around are too far apart.
    Gap,
}

impl NoWind {
    /// In words, after the platform's name.
    #[must_use]
    pub const fn words(self) -> &'static str {
        match self {
            Self::NoReport => "has no usable report",
            Self::Below => "begins above",
            Self::Above => "ends below",
            Self::Gap => "has a gap there",
        }
    }
}

/// Levels count as the same within this share (a rounded digit of what is reported).
const SAME: f64 = 1e-6;

/// The usable reports of a platform around a nominal time, by level.
#[derive(Debug, Clone, PartialEq)]
pub struct Ascent {
    coordinate: Coordinate,
    /// Furthest distance of two reports between which winds are interpolated, Pa or m.
    largest_gap: f64,
    /// From the smallest level to the largest, each once.
    reports: Vec<LevelReport>,
}

impl Ascent {
    /// Sorts reports by level; of several on one level that nearest in time holds, of these the first. Levels that are no
    /// number, and pressures that are not above 0, are left out.
    #[must_use]
    pub fn new(coordinate: Coordinate, largest_gap: f64, mut reports: Vec<LevelReport>) -> Self {
        reports
            .retain(|r| r.level.is_finite() && (coordinate == Coordinate::Height || r.level > 0.0));
        reports.sort_by(|a, b| a.level.total_cmp(&b.level).then(a.age.total_cmp(&b.age)));
        reports.dedup_by(|later, kept| same(later.level, kept.level));
        Self {
            coordinate,
            largest_gap,
            reports,
        }
    }

    /// The reports, from the smallest level to the largest.
    #[must_use]
    pub fn reports(&self) -> &[LevelReport] {
        &self.reports
    }

    /// The report nearest to the ground.
    #[must_use]
    pub fn lowest(&self) -> Option<&LevelReport> {
        match self.coordinate {
            Coordinate::Pressure => self.reports.last(),
            Coordinate::Height => self.reports.first(),
        }
    }

    /// Wind and place at a level or in a layer.
    ///
    /// - **Interpolation**: u, v and place are linear in ln p or in height between the reports below and above; nothing is
    ///   extrapolated. A mean over a layer is that of winds linear in p (weighted by mass) or in height between its
    ///   bounds and the reports within.
    /// - **Error**: the instrument errors of different reports are independent; that the wind between two reports is not
    ///   linear is not in it (for TEMP messages WMO-No. 306, FM 35, bounds it to 5 m/s by the choice of significant levels,
    ///   from memory).
    ///
    /// # Errors
    /// Why there is none.
    pub fn at(&self, level: Level) -> Result<LevelWind, NoWind> {
        let weights = match level {
            Level::At(level) => self.weights(level)?,
            Level::Between(a, b) => self.layer_weights(a.min(b), a.max(b))?,
        };
        self.blend(&weights).ok_or(NoWind::NoReport)
    }

    /// Weights of the reports at a level.
    fn weights(&self, level: f64) -> Result<Vec<(usize, f64)>, NoWind> {
        let reports = &self.reports;
        let near = |k: usize| reports.get(k).is_some_and(|r| same(r.level, level));
        let above = reports.partition_point(|r| r.level < level);
        if near(above) {
            return Ok(vec![(above, 1.0)]);
        }
        let Some(below) = above.checked_sub(1) else {
            return Err(match (reports.first(), self.coordinate) {
                (None, _) => NoWind::NoReport,
                (_, Coordinate::Pressure) => NoWind::Above,
                (_, Coordinate::Height) => NoWind::Below,
            });
        };
        if near(below) {
            return Ok(vec![(below, 1.0)]);
        }
        let Some(next) = reports.get(above) else {
            return Err(match self.coordinate {
                Coordinate::Pressure => NoWind::Below,
                Coordinate::Height => NoWind::Above,
            });
        };
        let (a, b) = (reports[below].level, next.level); // below < above <= len
        if b - a > self.largest_gap * (1.0 + SAME) {
            return Err(NoWind::Gap);
        }
        let share = match self.coordinate {
            Coordinate::Pressure => (level / a).ln() / (b / a).ln(),
            Coordinate::Height => (level - a) / (b - a),
        };
        Ok(vec![(below, 1.0 - share), (above, share)])
    }

    /// Weights of the reports in the mean between two levels, the smaller first.
    fn layer_weights(&self, low: f64, high: f64) -> Result<Vec<(usize, f64)>, NoWind> {
        let (first, last) = (self.weights(low)?, self.weights(high)?);
        let mut nodes = vec![(low, first)];
        for (k, report) in self.reports.iter().enumerate() {
            let inside = report.level > low && report.level < high;
            if inside && !same(report.level, low) && !same(report.level, high) {
                nodes.push((report.level, vec![(k, 1.0)]));
            }
        }
        nodes.push((high, last));
        let mut sums = vec![0.0; self.reports.len()];
        for pair in nodes.windows(2) {
            let [(a, below), (b, above)] = pair else {
                continue;
            };
            if b - a > self.largest_gap * (1.0 + SAME) {
                return Err(NoWind::Gap);
            }
            for &(k, weight) in below.iter().chain(above) {
                sums[k] += 0.5 * (b - a) / (high - low) * weight;
            }
        }
        let used = sums.into_iter().enumerate().filter(|(_, w)| w.abs() > 0.0);
        Ok(used.collect())
    }

    fn blend(&self, weights: &[(usize, f64)]) -> Option<LevelWind> {
        let (first, _) = *weights.first()?;
        let mut out = LevelWind {
            wind: Wind::default(),
            covariance: Covariance::default(),
            position: self.reports[first].position,
            flag: Flag::NotEvaluated,
            age: 0.0,
        };
        let mut place = nalgebra::Vector3::zeros();
        for &(k, weight) in weights {
            let report = &self.reports[k];
            out.wind.u += weight * report.wind.u;
            out.wind.v += weight * report.wind.v;
            let square = weight * weight;
            out.covariance.uu += square * report.covariance.uu;
            out.covariance.uv += square * report.covariance.uv;
            out.covariance.vv += square * report.covariance.vv;
            out.flag = out.flag.worst(report.flag);
            out.age = out.age.max(report.age);
            place += unit_vector(report.position) * weight;
        }
        // A platform that does not move keeps its position to the last digit.
        if weights
            .iter()
            .any(|&(k, _)| self.reports[k].position != out.position)
        {
            let (latitude, longitude) = latitude_longitude(&place);
            out.position = Position::new(latitude, longitude).ok()?;
        }
        Some(out)
    }
}

fn same(a: f64, b: f64) -> bool {
    (a - b).abs() <= SAME * a.abs().max(b.abs())
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn report(level: f64, u: f64, longitude: f64) -> LevelReport {
        LevelReport {
            level,
            wind: Wind { u, v: -u },
            covariance: Covariance {
                uu: 1.0,
                uv: 0.1,
                vv: 2.0,
            },
            position: Position::new(50.0, longitude).unwrap(),
            flag: Flag::Pass,
            age: 0.0,
        }
    }

    fn sounding() -> Ascent {
        let reports = vec![
            report(50e3, 20.0, 10.4),
            report(100e3, 4.0, 10.0),
            report(85e3, 10.0, 10.1),
        ];
        Ascent::new(Coordinate::Pressure, 40e3, reports)
    }

    #[test]
    fn linear_in_the_logarithm_of_pressure() {
        // Half-way in ln p between 850 and 500 hPa: √(850·500) hPa.
        let found = sounding().at(Level::At((85e3_f64 * 50e3).sqrt())).unwrap();
        assert!((found.wind.u - 15.0).abs() < 1e-9 && (found.wind.v + 15.0).abs() < 1e-9);
        assert!(
            (found.covariance.uu - 0.5).abs() < 1e-9 && (found.covariance.vv - 1.0).abs() < 1e-9
        );
        assert!((found.position.longitude() - 10.25).abs() < 1e-4);
        let at = sounding().at(Level::At(85e3)).unwrap();
        assert!((at.wind.u - 10.0).abs() < 1e-12 && (at.covariance.uu - 1.0).abs() < 1e-12);
        assert_eq!(at.position, Position::new(50.0, 10.1).unwrap());
    }

    #[test]
    fn linear_in_height_over_the_antimeridian() {
        let reports = vec![report(100.0, 4.0, 179.9), report(300.0, 8.0, -179.9)];
        let ascent = Ascent::new(Coordinate::Height, 500.0, reports);
        let found = ascent.at(Level::At(250.0)).unwrap();
        assert!((found.wind.u - 7.0).abs() < 1e-12);
        assert!((found.position.longitude() + 179.95).abs() < 1e-6);
        assert_eq!(ascent.at(Level::At(50.0)), Err(NoWind::Below));
        assert_eq!(ascent.at(Level::At(301.0)), Err(NoWind::Above));
        assert!((ascent.lowest().unwrap().level - 100.0).abs() < 1e-9);
    }

    #[test]
    fn means_of_layers() {
        // 1000 to 850 hPa: the mean of both ends.
        let found = sounding().at(Level::Between(100e3, 85e3)).unwrap();
        assert!((found.wind.u - 7.0).abs() < 1e-9 && (found.covariance.uu - 0.5).abs() < 1e-9);
        // 1000 to 500 hPa by mass: (150·7 + 350·15)/500.
        let found = sounding().at(Level::Between(100e3, 50e3)).unwrap();
        assert!((found.wind.u - (150.0 * 7.0 + 350.0 * 15.0) / 500.0).abs() < 1e-9);
    }

    #[test]
    fn nothing_is_made_up() {
        let ascent = sounding();
        assert_eq!(ascent.at(Level::At(101e3)), Err(NoWind::Below));
        assert_eq!(ascent.at(Level::At(49e3)), Err(NoWind::Above));
        assert_eq!(ascent.at(Level::Between(101e3, 90e3)), Err(NoWind::Below));
        let narrow = Ascent::new(Coordinate::Pressure, 20e3, ascent.reports().to_vec());
        assert_eq!(narrow.at(Level::At(70e3)), Err(NoWind::Gap));
        assert_eq!(narrow.at(Level::Between(90e3, 50e3)), Err(NoWind::Gap));
        let none = Ascent::new(Coordinate::Pressure, 20e3, vec![report(-5.0, 1.0, 0.0)]);
        assert_eq!(none.at(Level::At(70e3)), Err(NoWind::NoReport));
    }

    #[test]
    fn of_one_level_the_nearest_in_time_holds() {
        let mut late = report(85e3, 99.0, 0.0);
        late.age = 60.0;
        let ascent = Ascent::new(
            Coordinate::Pressure,
            40e3,
            vec![late, report(85e3, 1.0, 0.0)],
        );
        assert_eq!(ascent.reports().len(), 1);
        assert!((ascent.at(Level::At(85e3)).unwrap().wind.u - 1.0).abs() < 1e-12);
    }
}
