//! Rate of change.

use super::point::{Step, hours, larger};
use super::witness::Witness;
use super::{Flag, Test};
use crate::settings::RateLimits;

/// Parts of the past that are forgotten one after the other.
const PARTS: i64 = 8;

/// Sums of the changes of u and v.
#[derive(Debug, Clone, Copy, Default)]
struct Sums {
    count: f64,
    u: f64,
    uu: f64,
    v: f64,
    vv: f64,
}

impl Sums {
    fn plus(self, other: &Self) -> Self {
        Self {
            count: self.count + other.count,
            u: self.u + other.u,
            uu: self.uu + other.uu,
            v: self.v + other.v,
            vv: self.vv + other.vv,
        }
    }

    /// Standard deviations of the changes of u and v.
    fn deviations(&self) -> (f64, f64) {
        let deviation = |sum: f64, squares: f64| {
            let variance = (squares - sum * sum / self.count) / (self.count - 1.0);
            variance.max(0.0).sqrt()
        };
        (deviation(self.u, self.uu), deviation(self.v, self.vv))
    }
}

/// Remembers the changes of the past hours, to an eighth of them.
#[derive(Debug, Clone, Default)]
pub(super) struct RateOfChange {
    /// End of the current part, μs; parts end at multiples of their length since 1970.
    end: i64,
    current: Sums,
    /// The parts before; `next` is the oldest.
    past: [Sums; 8],
    next: usize,
    total: Sums,
}

impl RateOfChange {
    /// Suspect where u or v changes by more than a few standard deviations of its changes in the past hours.
    ///
    /// - **Reference**: QARTOD wind manual, test 7 (rate of change; N_DEV 3, 8 h in its example; no fail).
    /// - The change must also be above the least one that WMO doubts (Zahumenský 2004), or calm hours would make every
    ///   breeze suspect; on top comes what rounding of the direction can make of a steady wind (`rounding`, m/s).
    #[inline]
    pub fn judge<W: Witness>(
        &mut self,
        time: i64,
        step: Option<Step>,
        rounding: f64,
        limits: &RateLimits,
        witness: &mut W,
    ) -> Flag {
        if time >= self.end {
            self.forget(time, limits.period);
        }
        let Some(step) = step else {
            witness.tell(Test::RateOfChange, Flag::NotEvaluated, || {
                "no report near enough before it to compare with".into()
            });
            return Flag::NotEvaluated;
        };
        let count = self.current.count + self.total.count;
        let flag = if count < limits.least_changes {
            Flag::NotEvaluated
        } else if larger(step.u.abs(), step.v.abs()) <= limits.least {
            Flag::Pass
        } else {
            let (u, v) = self.deviations();
            let beyond = |change: f64, deviation: f64| {
                change.abs() - rounding > limits.least.max(limits.deviations * deviation)
            };
            if beyond(step.u, u) || beyond(step.v, v) {
                Flag::Suspect
            } else {
                Flag::Pass
            }
        };
        witness.tell(Test::RateOfChange, flag, || {
            self.words(step, count, rounding, limits)
        });
        self.current.count += 1.0;
        self.current.u += step.u;
        self.current.uu += step.u * step.u;
        self.current.v += step.v;
        self.current.vv += step.v * step.v;
        flag
    }

    fn deviations(&self) -> (f64, f64) {
        self.total.plus(&self.current).deviations()
    }

    fn words(&self, step: Step, count: f64, rounding: f64, limits: &RateLimits) -> String {
        let changes = format!(
            "u changed by {:.1}, v by {:.1} m/s in {}",
            step.u,
            step.v,
            hours(step.time)
        );
        if count < limits.least_changes {
            return format!("{changes}; only {count} changes are known before it");
        }
        let (u, v) = self.deviations();
        format!(
            "{changes}; above {:.1} and {:.1} m/s is suspect ({} standard deviations of {count} changes in {}, at \
             least {} m/s, and {rounding:.1} for rounding)",
            (limits.deviations * u).max(limits.least) + rounding,
            (limits.deviations * v).max(limits.least) + rounding,
            limits.deviations,
            hours(limits.period),
            limits.least
        )
    }

    /// Begins the part in which `time` lies.
    #[cold]
    fn forget(&mut self, time: i64, period: i64) {
        let length = (period / PARTS).max(1);
        let parts = (time - self.end).div_euclid(length).saturating_add(1);
        for k in 0..parts.min(PARTS + 1) {
            let leaving = if k == 0 {
                std::mem::take(&mut self.current)
            } else {
                Sums::default()
            };
            self.past[self.next] = leaving; // below its length
            self.next = (self.next + 1) % self.past.len();
        }
        self.end = time
            .div_euclid(length)
            .saturating_add(1)
            .saturating_mul(length);
        self.total = self.past.iter().fold(Sums::default(), Sums::plus);
    }
}
