//! Sums of squared differences at the times of a block.

use super::function::StructureSettings;
use super::geometry::{CLASSES, NetworkGeometry};
use crate::align::WindBlock;
use crate::check::Flag;
use crate::time::Time;

/// Differences in time are taken over this many analysis intervals.
pub const LAGS: [i64; 4] = [1, 2, 4, 8];

/// Sums of one class of distance, less the instrument variances.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct PairSum {
    /// Pairs.
    pub count: f64,
    /// Squared differences along the line between the stations, m²/s².
    pub along: f64,
    /// Squared differences across it, m²/s².
    pub across: f64,
    /// Instrument variances taken off, of both, m²/s².
    pub noise: f64,
}

/// Sums of stations against planes, of one class.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct PlaneSum {
    /// Planes.
    pub count: f64,
    /// Squared differences of both components, less the instrument variances, in units of what `c_L` + `c_T` =
    /// 1 m²/s² gives with an exponent of 2/3.
    pub squares: f64,
    /// Instrument variances taken off, in the same units.
    pub noise: f64,
}

/// Sums of the differences of each station with itself over one lag.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct LagSum {
    /// Stations.
    pub count: f64,
    /// Squared differences of both components, m²/s².
    pub squares: f64,
    /// Instrument variances of both components and both times, m²/s².
    pub noise: f64,
    /// Lags, s.
    pub lag: f64,
}

/// Sums at one or several times.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct StructureSums {
    /// By class of distance.
    pub pairs: [PairSum; CLASSES],
    /// By class of distance.
    pub planes: [PlaneSum; CLASSES],
    /// By lag.
    pub lags: [LagSum; LAGS.len()],
    /// Winds.
    pub winds: f64,
    /// Squared speeds, m²/s².
    pub squared_speed: f64,
    /// Independent values: winds less one for each time.
    pub independent: f64,
}

impl StructureSums {
    /// Adds other sums, `weight` times.
    pub fn add(&mut self, other: &Self, weight: f64) {
        for (a, b) in self.pairs.iter_mut().zip(&other.pairs) {
            a.count += weight * b.count;
            a.along += weight * b.along;
            a.across += weight * b.across;
            a.noise += weight * b.noise;
        }
        for (a, b) in self.planes.iter_mut().zip(&other.planes) {
            a.count += weight * b.count;
            a.squares += weight * b.squares;
            a.noise += weight * b.noise;
        }
        for (a, b) in self.lags.iter_mut().zip(&other.lags) {
            a.count += weight * b.count;
            a.squares += weight * b.squares;
            a.noise += weight * b.noise;
            a.lag += weight * b.lag;
        }
        self.winds += weight * other.winds;
        self.squared_speed += weight * other.squared_speed;
        self.independent += weight * other.independent;
    }

    /// These sums `factor` times.
    #[must_use]
    pub fn scaled(&self, factor: f64) -> Self {
        let mut scaled = Self::default();
        scaled.add(self, factor);
        scaled
    }
}

/// The times of a block that are used, with their sums.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct BlockSums {
    /// Times and sums, in order.
    pub at: Vec<(Time, StructureSums)>,
}

impl BlockSums {
    /// Sums of one block. Each time's sums depend on that time and, for differences in time, on the eight intervals
    /// before it; so they are the same however a run is cut, if `previous` is the block before and no block but the
    /// first is shorter than eight times.
    ///
    /// - **Used**: winds with a flag better than [`Flag::Fail`], at the first analysis time of each
    ///   [`StructureSettings::step`]; `interval` is the time between analysis times, s. Differences in time only
    ///   between values of which the ages together are less than half the lag, so that they are not the same report.
    #[must_use]
    pub fn of(
        geometry: &NetworkGeometry,
        settings: &StructureSettings,
        interval: f64,
        previous: Option<&WindBlock>,
        block: &WindBlock,
    ) -> Self {
        let (step, interval) = (micros(settings.step), micros(interval));
        let used: Vec<usize> = (0..block.times.len())
            .filter(|&t| block.times[t].micros().rem_euclid(step) < interval.max(1))
            .collect();
        let columns = Columns::of(block, geometry.stations, &used);
        let mut sums = vec![StructureSums::default(); used.len()];
        columns.add_winds(&mut sums);
        columns.add_pairs(geometry, &mut sums);
        columns.add_planes(geometry, &mut sums);
        for (k, &lag) in LAGS.iter().enumerate() {
            let lag = lag.saturating_mul(interval);
            for (&t, sums) in used.iter().zip(&mut sums) {
                let earlier = block.times[t].plus_micros(-lag);
                if let Some((other, s)) = find(block, earlier)
                    .map(|s| (block, s))
                    .or_else(|| previous.and_then(|b| find(b, earlier).map(|s| (b, s))))
                {
                    let of_lag = lag_sum((block, t), (other, s), lag, geometry.stations);
                    sums.lags[k] = of_lag;
                }
            }
        }
        let times = used.iter().map(|&t| block.times[t]);
        Self {
            at: times.zip(sums).collect(),
        }
    }
}

fn find(block: &WindBlock, time: Time) -> Option<usize> {
    block.times.binary_search(&time).ok()
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

fn lag_sum(later: (&WindBlock, usize), earlier: (&WindBlock, usize), lag: i64, n: usize) -> LagSum {
    let mut sum = LagSum::default();
    let seconds = lag as f64 * 1e-6;
    for station in 0..n {
        let a = station * later.0.times.len() + later.1;
        let b = station * earlier.0.times.len() + earlier.1;
        let usable = later.0.flag[a] < Flag::Fail && earlier.0.flag[b] < Flag::Fail;
        let ages = f64::from(later.0.age[a]) + f64::from(earlier.0.age[b]);
        if usable && ages < 0.5 * seconds {
            let (du, dv) = (later.0.u[a] - earlier.0.u[b], later.0.v[a] - earlier.0.v[b]);
            sum.count += 1.0;
            sum.squares += du * du + dv * dv;
            sum.noise += later.0.var_u[a] + later.0.var_v[a];
            sum.noise += earlier.0.var_u[b] + earlier.0.var_v[b];
            sum.lag += seconds;
        }
    }
    sum
}

/// The used times of a block, station-major; `present` is 1 or 0.
struct Columns {
    times: usize,
    u: Vec<f64>,
    v: Vec<f64>,
    var_u: Vec<f64>,
    cov_uv: Vec<f64>,
    var_v: Vec<f64>,
    present: Vec<f64>,
}

impl Columns {
    fn of(block: &WindBlock, stations: usize, used: &[usize]) -> Self {
        let n = block.times.len();
        let gather = |column: &[f64]| -> Vec<f64> {
            let cells = (0..stations).flat_map(|s| used.iter().map(move |&t| s * n + t));
            cells.map(|cell| column[cell]).collect()
        };
        let present = (0..stations)
            .flat_map(|s| used.iter().map(move |&t| s * n + t))
            .map(|cell| {
                if block.flag[cell] < Flag::Fail {
                    1.0
                } else {
                    0.0
                }
            })
            .collect();
        Self {
            times: used.len(),
            u: gather(&block.u),
            v: gather(&block.v),
            var_u: gather(&block.var_u),
            cov_uv: gather(&block.cov_uv),
            var_v: gather(&block.var_v),
            present,
        }
    }

    fn cells(&self, station: usize) -> std::ops::Range<usize> {
        station * self.times..(station + 1) * self.times
    }

    fn add_winds(&self, sums: &mut [StructureSums]) {
        if sums.is_empty() {
            return;
        }
        for station in 0..self.present.len() / self.times {
            let cells = self.cells(station);
            for (sum, cell) in sums.iter_mut().zip(cells) {
                let squared = self.u[cell] * self.u[cell] + self.v[cell] * self.v[cell];
                sum.winds += self.present[cell];
                sum.squared_speed += self.present[cell] * squared;
            }
        }
        for sum in sums {
            sum.independent = (sum.winds - 1.0).max(0.0);
        }
    }

    fn add_pairs(&self, geometry: &NetworkGeometry, sums: &mut [StructureSums]) {
        let m = self.times;
        let mut totals = vec![[0.0; 4]; CLASSES * m];
        for pair in &geometry.pairs {
            let [i, j] = pair.stations;
            let [[si, ci], [sj, cj]] = pair.azimuth;
            let total = &mut totals[pair.class * m..(pair.class + 1) * m];
            for ((total, a), b) in total.iter_mut().zip(self.cells(i)).zip(self.cells(j)) {
                let along = self.u[b] * sj + self.v[b] * cj - self.u[a] * si - self.v[a] * ci;
                let across = self.u[b] * cj - self.v[b] * sj - self.u[a] * ci + self.v[a] * si;
                let (uu, uv, vv) = (&self.var_u, &self.cov_uv, &self.var_v);
                let noise_along = uu[a] * si * si
                    + 2.0 * uv[a] * si * ci
                    + vv[a] * ci * ci
                    + uu[b] * sj * sj
                    + 2.0 * uv[b] * sj * cj
                    + vv[b] * cj * cj;
                let noise_across = uu[a] + vv[a] + uu[b] + vv[b] - noise_along;
                let both = self.present[a] * self.present[b];
                let weight = both * pair.to_class;
                total[0] += both;
                total[1] += weight * (along * along - noise_along);
                total[2] += weight * (across * across - noise_across);
                total[3] += weight * (noise_along + noise_across);
            }
        }
        for class in 0..CLASSES {
            for (sum, total) in sums.iter_mut().zip(&totals[class * m..(class + 1) * m]) {
                sum.pairs[class] = PairSum {
                    count: total[0],
                    along: total[1],
                    across: total[2],
                    noise: total[3],
                };
            }
        }
    }

    fn add_planes(&self, geometry: &NetworkGeometry, sums: &mut [StructureSums]) {
        let m = self.times;
        let (mut u, mut v, mut noise) = (vec![0.0; m], vec![0.0; m], vec![0.0; m]);
        let mut present = vec![1.0; m];
        for plane in &geometry.planes {
            u.fill(0.0);
            v.fill(0.0);
            noise.fill(0.0);
            present.fill(1.0);
            for &(station, weight) in &plane.weights {
                for (t, cell) in self.cells(station).enumerate() {
                    u[t] += weight * self.u[cell];
                    v[t] += weight * self.v[cell];
                    noise[t] += weight * weight * (self.var_u[cell] + self.var_v[cell]);
                    present[t] *= self.present[cell];
                }
            }
            for (t, sum) in sums.iter_mut().enumerate() {
                let squares = plane.to_unit * (u[t] * u[t] + v[t] * v[t] - noise[t]);
                sum.planes[plane.class].count += present[t];
                sum.planes[plane.class].squares += present[t] * squares;
                sum.planes[plane.class].noise += present[t] * plane.to_unit * noise[t];
            }
        }
    }
}
