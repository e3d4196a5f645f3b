//! Timing: the median of several runs, stated as a ratio to a baseline timed in turn with it.
#![allow(dead_code, reason = "each bench uses a part of it")]

use std::time::Instant;

/// Runs of each measurement.
const RUNS: usize = 7;

/// Seconds of one call.
pub fn seconds<T>(work: impl FnOnce() -> T) -> f64 {
    let start = Instant::now();
    std::hint::black_box(work());
    start.elapsed().as_secs_f64()
}

/// Median seconds of `work` and of `baseline`, and the median of their ratio pair by pair.
pub fn against<T, U>(
    mut work: impl FnMut() -> T,
    mut baseline: impl FnMut() -> U,
) -> (f64, f64, f64) {
    let (mut a, mut b, mut ratio) = (Vec::new(), Vec::new(), Vec::new());
    for _ in 0..RUNS {
        let s = seconds(&mut work);
        let t = seconds(&mut baseline);
        a.push(s);
        b.push(t);
        ratio.push(s / t);
    }
    (median(a), median(b), median(ratio))
}

pub fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}
