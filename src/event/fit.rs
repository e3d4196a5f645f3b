//! A straight line at constant speed through arrival times.

use nalgebra::{Matrix3, Vector3};

use super::motion::{Motion, heading};

/// Where and when a line came by.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Arrival {
    /// In the plane of the network, m.
    pub(super) at: [f64; 2],
    /// s
    pub(super) time: f64,
    /// Standard error, s.
    pub(super) error: f64,
}

/// Least error of an arrival beside that of its own step: the line is not quite straight, s.
const ROUGHNESS: f64 = 120.0;
/// Arrivals that are off by more than so many of their errors weigh less (Huber 1964, Ann. Math. Stat. 35, 73).
const TUNING: f64 = 1.345;
/// Rounds of reweighting; the weights settle within a few.
const ROUNDS: usize = 8;
/// How many arrivals the stated errors are worth against the scatter about the fit.
const PRIOR_VALUES: f64 = 4.0;

/// Arrival times t = t0 + s·(x − x̄), by robust least squares.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LineFit {
    /// x̄, m.
    middle: [f64; 2],
    /// t0, s.
    time: f64,
    /// s, s/m: the slowness.
    slowness: [f64; 2],
    /// Covariance of t0 and s.
    covariance: Matrix3<f64>,
    /// Variance of a single arrival about the line beyond that of its own step, s².
    excess: f64,
}

impl LineFit {
    /// Fits at least three arrivals that do not stand on one line.
    ///
    /// - **Error**: the stated errors of the arrivals, widened or narrowed by their scatter about the fit, in which the
    ///   stated ones count as four arrivals.
    pub(super) fn of(arrivals: &[Arrival]) -> Option<Self> {
        let count = arrivals.len() as f64;
        let mean = |k: usize| arrivals.iter().map(|a| a.at[k]).sum::<f64>() / count;
        let middle = [mean(0), mean(1)];
        let column = |a: &Arrival| Vector3::new(1.0, a.at[0] - middle[0], a.at[1] - middle[1]);
        let weight = |a: &Arrival| 1.0 / (a.error * a.error + ROUGHNESS * ROUGHNESS);
        let mut robust = vec![1.0; arrivals.len()];
        let mut found = Vector3::zeros();
        for _ in 0..if arrivals.len() > 4 { ROUNDS } else { 1 } {
            let mut normal = Matrix3::zeros();
            let mut right = Vector3::zeros();
            for (a, share) in arrivals.iter().zip(&robust) {
                let c = column(a);
                normal += c * c.transpose() * (share * weight(a));
                right += c * (share * weight(a) * a.time);
            }
            found = normal.try_inverse()? * right;
            for (a, share) in arrivals.iter().zip(&mut robust) {
                let off = (a.time - column(a).dot(&found)).abs() * weight(a).sqrt();
                *share = (TUNING / off).min(1.0);
            }
        }
        if !found.iter().all(|x| x.is_finite()) || arrivals.len() < 3 {
            return None;
        }
        // Variance of the estimate by Huber (1973, Ann. Stat. 1, 799): mean ψ² over the squared share that is not cut.
        let cut_misfit = |(a, share): (&Arrival, &f64)| {
            weight(a) * (share * (a.time - column(a).dot(&found))).powi(2)
        };
        let squares: f64 = arrivals.iter().zip(&robust).map(cut_misfit).sum();
        let whole = robust.iter().filter(|share| **share >= 1.0).count() as f64 / count;
        let scale =
            (PRIOR_VALUES + squares / (whole * whole).max(0.1)) / (PRIOR_VALUES + count - 3.0);
        let normal: Matrix3<f64> = arrivals
            .iter()
            .map(|a| column(a) * column(a).transpose() * weight(a))
            .sum();
        let inverse = normal.try_inverse()?;
        let stated = arrivals.iter().map(|a| 1.0 / weight(a)).sum::<f64>() / count;
        Some(Self {
            middle,
            time: found[0],
            slowness: [found[1], found[2]],
            covariance: inverse * scale,
            excess: ROUGHNESS * ROUGHNESS + (scale - 1.0).max(0.0) * stated,
        })
    }

    /// The same with what it does not keep to: the difference of the fit without the first and the last eighth of the
    /// arrivals is added to its errors, as a line that grows, dies, bends or changes its speed shows itself there.
    pub(super) fn with_unsteadiness(mut self, arrivals: &[Arrival]) -> Self {
        let mut order: Vec<Arrival> = arrivals.to_vec();
        order.sort_by(|a, b| a.time.total_cmp(&b.time));
        let ends = order.len().div_ceil(8);
        let inner = order.get(ends..order.len().saturating_sub(ends));
        if let Some(inner) = inner.filter(|inner| inner.len() >= 4).and_then(Self::of) {
            let off = Vector3::new(
                inner.time_at(self.middle) - self.time,
                inner.slowness[0] - self.slowness[0],
                inner.slowness[1] - self.slowness[1],
            );
            self.covariance += off * off.transpose();
        }
        self
    }

    /// When the line comes by a point, s.
    pub(super) fn time_at(&self, at: [f64; 2]) -> f64 {
        let [x, y] = [at[0] - self.middle[0], at[1] - self.middle[1]];
        self.time + self.slowness[0] * x + self.slowness[1] * y
    }

    /// Variance of that from the fit alone, s².
    pub(super) fn variance_at(&self, at: [f64; 2]) -> f64 {
        let c = Vector3::new(1.0, at[0] - self.middle[0], at[1] - self.middle[1]);
        (c.transpose() * self.covariance * c)[0].max(0.0)
    }

    /// Standard error of the time at which the line comes by a point, s: of the fit, and of what bends the line there.
    pub(super) fn error_at(&self, at: [f64; 2]) -> f64 {
        (self.variance_at(at) + self.excess).sqrt()
    }

    /// Variance of a single arrival about the line beyond that of its own step, s².
    pub(super) fn excess(&self) -> f64 {
        self.excess
    }

    /// Speed, m/s.
    pub(super) fn speed(&self) -> f64 {
        1.0 / self.slowness[0].hypot(self.slowness[1])
    }

    /// The direction of motion as a unit vector.
    pub(super) fn normal(&self) -> [f64; 2] {
        let length = self.slowness[0].hypot(self.slowness[1]);
        self.slowness.map(|s| s / length)
    }

    /// The point on the line through the middle, along the motion, at a time.
    pub(super) fn front(&self, time: f64) -> [f64; 2] {
        let n = self.normal();
        let way = (time - self.time) * self.speed();
        [self.middle[0] + way * n[0], self.middle[1] + way * n[1]]
    }

    /// How the line moves, by linear propagation: σ(v) = v² σ(|s|), σ(heading) = σ(s across)/|s|.
    pub(super) fn motion(&self) -> Motion {
        let (speed, [e, n]) = (self.speed(), self.normal());
        let c = &self.covariance;
        let (xx, xy, yy) = (c[(1, 1)], c[(1, 2)], c[(2, 2)]);
        let along = e * e * xx + 2.0 * e * n * xy + n * n * yy;
        let across = n * n * xx - 2.0 * e * n * xy + e * e * yy;
        let heading_error = (speed * across.max(0.0).sqrt()).to_degrees();
        Motion {
            speed,
            speed_error: speed * speed * along.max(0.0).sqrt(),
            heading: heading(self.slowness),
            heading_error: heading_error.min(180.0),
        }
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use rand::{RngExt, SeedableRng};
    use rand_chacha::ChaCha8Rng;
    use rand_distr::StandardNormal;

    /// 2000 lines with errors as stated: speed, heading and an arrival ahead lie within 1.96 standard errors in 95 %.
    #[test]
    fn errors_of_speed_heading_and_arrival_hold() {
        let mut rng = ChaCha8Rng::seed_from_u64(8);
        let (mut speed, mut direction, mut ahead) = (0, 0, 0);
        let runs = 2000;
        for _ in 0..runs {
            let (truth, bearing) = (4.0, 70f64.to_radians());
            let s = [bearing.sin() / truth, bearing.cos() / truth];
            let arrivals: Vec<Arrival> = (0..12)
                .map(|_| {
                    let at = [60e3 * rng.random::<f64>(), 60e3 * rng.random::<f64>()];
                    let noise = rng.sample::<f64, _>(StandardNormal) * 300f64.hypot(ROUGHNESS);
                    let time = 1e4 + s[0] * at[0] + s[1] * at[1] + noise;
                    Arrival {
                        at,
                        time,
                        error: 300.0,
                    }
                })
                .collect();
            let fit = LineFit::of(&arrivals).unwrap();
            let motion = fit.motion();
            let place = [80e3, 50e3];
            let off = fit.time_at(place) - (1e4 + s[0] * place[0] + s[1] * place[1]);
            speed += usize::from((motion.speed - truth).abs() < 1.96 * motion.speed_error);
            direction += usize::from((motion.heading - 70.0).abs() < 1.96 * motion.heading_error);
            ahead += usize::from(off * off < 1.96 * 1.96 * fit.variance_at(place));
        }
        for held in [speed, direction, ahead] {
            let share = f64::from(u32::try_from(held).unwrap()) / f64::from(runs);
            assert!((0.93..0.97).contains(&share), "{share}");
        }
    }
}
