//! Time and memory of a whole process.

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

/// Seconds and peak memory, MiB, of a process.
pub fn measure(command: &mut Command) -> (f64, f64) {
    let start = Instant::now();
    let mut child = command
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .spawn()
        .unwrap();
    let status = PathBuf::from(format!("/proc/{}/status", child.id()));
    let mut peak = 0.0_f64;
    let result = loop {
        peak = peak.max(high_water_mark(&status));
        match child.try_wait().unwrap() {
            Some(result) => break result,
            None => std::thread::sleep(Duration::from_millis(2)),
        }
    };
    assert!(result.success(), "{command:?}");
    (start.elapsed().as_secs_f64(), peak)
}

/// Peak memory of a process so far, MiB; 0 where the system does not tell.
fn high_water_mark(status: &Path) -> f64 {
    let text = std::fs::read_to_string(status).unwrap_or_default();
    let line = text.lines().find(|line| line.starts_with("VmHWM:"));
    let kilobytes = line.and_then(|line| line.split_whitespace().nth(1)?.parse().ok());
    kilobytes.map_or(0.0, |kb: f64| kb / 1024.0)
}
