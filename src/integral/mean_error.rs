//! Error of a mean over time.

use crate::time::Time;

/// The error of the mean of a polygon's values over time, from the errors of the values and how long they last.
///
/// - Errors of instruments and sites persist: their part of the mean's error is the mean of the values' parts.
/// - Errors of sampling and timing last as long as the wind between the stations does: between two times Δ apart they
///   are correlated by exp(−Δ/T), T from [`crate::structure::StructureFunction::decorrelation_time`] at the length of
///   the polygon's edges.
///
/// Neither is the naive σ/√n. Values come in the order of time; two accumulators of successive periods can be merged,
/// each with its own T.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct MeanError {
    /// T, s.
    lasting: f64,
    count: f64,
    /// Sum of the persistent parts.
    persistent: f64,
    /// ΣΣ of the passing parts with their correlations.
    double: f64,
    /// Passing parts decayed to the last time, and to the first.
    tail: f64,
    head: f64,
    first: Option<Time>,
    last: Option<Time>,
}

impl Default for MeanError {
    fn default() -> Self {
        Self::new(1.0)
    }
}

impl MeanError {
    /// No values yet; passing errors last for `lasting` s.
    #[must_use]
    pub fn new(lasting: f64) -> Self {
        Self {
            lasting: lasting.max(1e-6),
            count: 0.0,
            persistent: 0.0,
            double: 0.0,
            tail: 0.0,
            head: 0.0,
            first: None,
            last: None,
        }
    }

    /// Takes in a value's standard errors: of instruments and sites, and of sampling and timing together.
    pub fn add(&mut self, time: Time, persistent: f64, passing: f64) {
        let mut one = Self::new(self.lasting);
        one.count = 1.0;
        one.persistent = persistent;
        one.double = passing * passing;
        (one.tail, one.head) = (passing, passing);
        (one.first, one.last) = (Some(time), Some(time));
        self.merge(&one);
    }

    /// Takes in a column of values' standard errors; the passing ones given as root of the sum of squares of two parts.
    #[must_use]
    pub fn of_column(
        lasting: f64,
        times: &[Time],
        persistent: &[f64],
        passing: [&[f64]; 2],
    ) -> Self {
        let mut sum = Self::new(lasting);
        (sum.first, sum.last) = (times.first().copied(), times.last().copied());
        // Most times follow at one interval: its decay is found once.
        let (mut interval, mut decay, mut since_first) = (0, 1.0, 1.0);
        let mut before = sum.first.map_or(0, Time::micros);
        let parts = passing[0].iter().zip(passing[1]);
        for ((time, &lasts), (&a, &b)) in times.iter().zip(persistent).zip(parts) {
            let step = time.micros() - before;
            before = time.micros();
            if step != interval {
                interval = step;
                decay = (-(step as f64) * 1e-6 / sum.lasting).exp();
            }
            let passes = if b > 0.0 { (a * a + b * b).sqrt() } else { a };
            since_first *= decay;
            sum.tail *= decay;
            sum.double += passes * (passes + 2.0 * sum.tail);
            sum.tail += passes;
            sum.head += since_first * passes;
            sum.persistent += lasts;
            sum.count += 1.0;
        }
        sum
    }

    /// Takes in later values.
    pub fn merge(&mut self, later: &Self) {
        let decay = |from: Option<Time>, to: Option<Time>| match (from, to) {
            (Some(a), Some(b)) => {
                let seconds = b.micros().saturating_sub(a.micros()) as f64 * 1e-6;
                (-seconds / self.lasting).exp()
            }
            _ => 0.0,
        };
        self.double += later.double + 2.0 * self.tail * decay(self.last, later.first) * later.head;
        self.tail = if later.last.is_some() {
            later.tail + self.tail * decay(self.last, later.last)
        } else {
            self.tail
        };
        self.head += if self.first.is_some() {
            later.head * decay(self.first, later.first)
        } else {
            later.head
        };
        self.count += later.count;
        self.persistent += later.persistent;
        self.first = self.first.or(later.first);
        self.last = later.last.or(self.last);
        self.lasting = later.lasting;
    }

    /// Standard error of the mean, 1/s; `None` without values.
    #[must_use]
    pub fn standard_error(&self) -> Option<f64> {
        (self.count > 0.0).then(|| {
            let persistent = self.persistent / self.count;
            (persistent * persistent + self.double / (self.count * self.count)).sqrt()
        })
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn time(seconds: i64) -> Time {
        Time::from_micros(seconds * 1_000_000)
    }

    #[test]
    fn equals_the_double_sum_however_it_is_cut() {
        let values: [(i32, f64); 5] = [(0, 2.0), (600, 1.0), (1200, 3.0), (9000, 1.5), (9600, 0.5)];
        let t = 1800.0_f64;
        let mut double = 0.0;
        for (a, x) in values {
            for (b, y) in values {
                double += x * y * (-f64::from((a - b).abs()) / t).exp();
            }
        }
        let persistent: f64 = 0.7;
        let expected = (persistent.powi(2) + double / 25.0).sqrt();
        for cut in 0..=values.len() {
            let mut parts = [MeanError::new(t); 2];
            for (k, &(at, passing)) in values.iter().enumerate() {
                parts[usize::from(k >= cut)].add(time(i64::from(at)), persistent, passing);
            }
            let later = parts[1];
            parts[0].merge(&later);
            let found = parts[0].standard_error().unwrap();
            assert!((found / expected - 1.0).abs() < 1e-12, "{cut}");
        }
    }

    #[test]
    fn errors_that_pass_average_out_and_others_do_not() {
        let mut mean = MeanError::new(600.0);
        for k in 0..10_000 {
            mean.add(time(6000 * k), 0.0, 1.0);
        }
        assert!((mean.standard_error().unwrap() - 0.01).abs() < 1e-5);
        mean.add(time(6000 * 10_000), 0.0, 1.0);
        let mut persists = MeanError::new(600.0);
        (0..100).for_each(|k| persists.add(time(6000 * k), 1.0, 0.0));
        assert!((persists.standard_error().unwrap() - 1.0).abs() < 1e-12);
        assert_eq!(MeanError::new(1.0).standard_error(), None);
    }
}
