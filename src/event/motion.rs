//! How an area moves: a straight path through its centres.

use super::track::seconds;
use crate::time::Time;

/// Most points of a path that are kept; beyond, every second one is let go.
const MOST_POINTS: usize = 512;
/// Fewest points, and shortest time (s), that say how an area moves.
const LEAST_POINTS: usize = 4;
const LEAST_TIME: f64 = 1800.0;

/// A velocity with its errors.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Motion {
    /// Speed, m/s.
    pub speed: f64,
    /// Its standard error, m/s.
    pub speed_error: f64,
    /// Heading: towards where, degrees clockwise from north, 0 to 360.
    pub heading: f64,
    /// Its standard error, degrees; 180 where nothing is known.
    pub heading_error: f64,
}

impl Motion {
    /// From a velocity towards east and north and the covariance of its components (xx, xy, yy).
    pub(super) fn of([x, y]: [f64; 2], [xx, xy, yy]: [f64; 3]) -> Self {
        let speed = x.hypot(y);
        let (e, n) = if speed > 0.0 {
            (x / speed, y / speed)
        } else {
            (0.0, 1.0)
        };
        let along = e * e * xx + 2.0 * e * n * xy + n * n * yy;
        let across = n * n * xx - 2.0 * e * n * xy + e * e * yy;
        Self {
            speed,
            speed_error: along.max(0.0).sqrt(),
            heading: heading([x, y]),
            heading_error: (across.max(0.0).sqrt() / speed).to_degrees().min(180.0),
        }
    }
}

/// Towards where a vector points, degrees clockwise from the y axis, 0 to 360.
pub(super) fn heading([x, y]: [f64; 2]) -> f64 {
    let degrees = x.atan2(y).to_degrees().rem_euclid(360.0);
    // Rounding may leave 360.
    if degrees < 360.0 { degrees } else { 0.0 }
}

/// The centres of an area, thinned so that the longest event has no more than some hundred.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Path {
    points: Vec<(Time, [f64; 2])>,
    /// One of 2^k is kept.
    halvings: u32,
    /// Points given so far.
    given: u64,
    /// Sum of their variances, m².
    variances: f64,
    /// The last time that counts for the motion.
    until: Option<Time>,
}

impl Path {
    /// Adds the next centre, of triangles with this mean area, m².
    pub fn push(&mut self, time: Time, centre: [f64; 2], area: f64) {
        // Where in a square of that area the middle is: a twelfth of the square of its side in either direction.
        self.variances += area / 12.0;
        let is_kept = self.given.is_multiple_of(1 << self.halvings);
        self.given += 1;
        if !is_kept {
            return;
        }
        self.points.push((time, centre));
        if self.points.len() >= MOST_POINTS {
            let mut number = 0;
            self.points.retain(|_| {
                number += 1;
                number % 2 == 1
            });
            self.halvings += 1;
        }
    }

    /// Lets all centres so far count for the motion; those that never do are of a fading area.
    pub fn count(&mut self, time: Time) {
        self.until = Some(time);
    }

    /// The centres in the plane of the network, m, in the order of time.
    #[must_use]
    pub fn points(&self) -> &[(Time, [f64; 2])] {
        &self.points
    }

    /// The motion along the straight path that fits the centres that count best; `None` for fewer than four centres or half an hour.
    ///
    /// - **Error**: from the scatter about the path, alike in both directions and not below what the size of the triangles
    ///   leaves open. Centres of following times stray together, as they jump from
    ///   triangle to triangle: their first autocorrelation r makes n centres worth n (1 − r)/(1 + r) independent ones
    ///   (Bayley & Hammersley 1946, Suppl. J. R. Stat. Soc. 8, 184, first-order form), with r corrected for its bias in
    ///   short series, (1 + 4 r)/n (Kendall 1954, Biometrika 41, 403; from memory), and no fewer than 3 of them. The difference of the path without
    ///   its first and last eighth is added.
    #[must_use]
    pub fn motion(&self) -> Option<Motion> {
        let until = self.until?;
        let points = &self.points[..self.points.partition_point(|p| p.0 <= until)];
        let n = points.len();
        let (first, last) = (points.first()?.0, points.last()?.0);
        if n < LEAST_POINTS || seconds(first, last) < LEAST_TIME {
            return None;
        }
        let count = n as f64;
        let fit = straight(points, first);
        let [off_x, off_y] = fit.off;
        let sum = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
        let squares = sum(&off_x, &off_x) + sum(&off_y, &off_y);
        let lagged = sum(&off_x[1..], &off_x) + sum(&off_y[1..], &off_y);
        let r = if squares > 0.0 { lagged / squares } else { 0.0 };
        let r = (r + (1.0 + 4.0 * r) / count).clamp(0.0, 0.99);
        let independent = (count * (1.0 - r) / (1.0 + r)).max(3.0);
        // Two of them go into the straight line; each stands for n / independent centres.
        let scatter = 0.5 * squares / (independent - 2.0);
        let floor = self.variances / self.given as f64 * count / independent;
        let variance = scatter.max(floor) / fit.spread;
        // What the path does not keep to: an area that comes in at the edge of the network, or leaves it, is seen in part.
        let ends = n.div_ceil(8);
        let inner = points.get(ends..n - ends).filter(|p| p.len() >= 3);
        let [u, v] = fit.velocity;
        let [du, dv] = inner.map_or([0.0; 2], |inner| {
            let of_inner = straight(inner, first).velocity;
            [of_inner[0] - u, of_inner[1] - v]
        });
        let covariance = [variance + du * du, du * dv, variance + dv * dv];
        Some(Motion::of([u, v], covariance))
    }
}

/// A straight path at constant velocity.
struct Straight {
    velocity: [f64; 2],
    /// Sum of the squared times from their mean, s².
    spread: f64,
    /// What the points are off it, by component.
    off: [Vec<f64>; 2],
}

fn straight(points: &[(Time, [f64; 2])], zero: Time) -> Straight {
    let count = points.len() as f64;
    let times: Vec<f64> = points.iter().map(|p| seconds(zero, p.0)).collect();
    let mean_time = times.iter().sum::<f64>() / count;
    let spread: f64 = times.iter().map(|t| (t - mean_time).powi(2)).sum();
    let (mut velocity, mut off) = ([0.0; 2], [Vec::new(), Vec::new()]);
    for k in 0..2 {
        let mean = points.iter().map(|p| p.1[k]).sum::<f64>() / count;
        let pairs = || points.iter().zip(&times);
        let moment = pairs().map(|(p, t)| (t - mean_time) * (p.1[k] - mean));
        velocity[k] = moment.sum::<f64>() / spread;
        let from_path =
            |(p, t): (&(Time, [f64; 2]), &f64)| p.1[k] - mean - velocity[k] * (t - mean_time);
        off[k] = pairs().map(from_path).collect();
    }
    Straight {
        velocity,
        spread,
        off,
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn path(n: i64, noise: impl Fn(i64) -> f64) -> Path {
        let mut path = Path::default();
        for k in 0..n {
            let t = 300.0 * k as f64;
            path.push(
                Time::from_micros(k * 300_000_000),
                [3.0 * t + noise(k), 4.0 * t],
                1.0,
            );
            path.count(Time::from_micros(k * 300_000_000));
        }
        path
    }

    #[test]
    fn a_straight_path_gives_its_velocity() {
        let motion = path(50, |_| 0.0).motion().unwrap();
        assert!((motion.speed - 5.0).abs() < 1e-9 && motion.speed_error < 1e-3);
        assert!((motion.heading - 3f64.atan2(4.0).to_degrees()).abs() < 1e-9);
    }

    #[test]
    fn a_slow_wander_is_less_sure_than_a_quick_one() {
        let quick = path(60, |k| if k % 2 == 0 { 500.0 } else { -500.0 });
        let slow = path(60, |k| 500.0 * (k as f64 / 8.0).sin());
        let (quick, slow) = (quick.motion().unwrap(), slow.motion().unwrap());
        assert!(
            slow.speed_error > 2.0 * quick.speed_error,
            "{slow:?} {quick:?}"
        );
    }

    #[test]
    fn too_short_a_path_says_nothing_and_a_long_one_stays_short() {
        assert!(path(3, |_| 0.0).motion().is_none());
        assert!(path(5, |_| 0.0).motion().is_none());
        let long = path(10_000, |_| 0.0);
        assert!(long.points().len() < MOST_POINTS);
        assert!((long.motion().unwrap().speed - 5.0).abs() < 1e-9);
    }
}
