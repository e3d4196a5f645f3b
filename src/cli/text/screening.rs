//! What `gyremesh check` says of the tests, in 80 columns.

use std::fmt::Write as _;

use super::reading::shortened;
use super::{WIDTH, cell, cut, flagged, heading, short_id, wrapped};
use crate::check::{Explained, StationReading, Test};
use crate::pipeline::Reading;
use crate::station::{Network, Station};

/// Stations in the table of the worst.
const WORST: usize = 10;

/// Tables of the tests and of the worst stations.
pub(crate) fn screening_text(out: &mut String, network: &Network, reading: &Reading) {
    let all: u64 = reading.stations.iter().map(|s| s.reports).sum();
    // Writing to a string cannot fail.
    let columns = format!(
        "{:<20} {:>9} {:>9} {:>9} {:>9}",
        "test", "suspect", "share", "failed", "share"
    );
    let _ = writeln!(out, "\n{}", heading(&columns));
    let sum = |of: &dyn Fn(&StationReading) -> u64| reading.stations.iter().map(of).sum::<u64>();
    for test in Test::ALL.into_iter().filter(|&t| t != Test::TimingGap) {
        let name = test.words();
        counts(
            out,
            &name,
            sum(&|s| s.of_test(test).0),
            sum(&|s| s.of_test(test).1),
            all,
        );
    }
    counts(out, "any", sum(&|s| s.suspect), sum(&|s| s.failed), all);
    let gaps = sum(&|s| s.of_test(Test::TimingGap).1);
    let _ = writeln!(out, "timing gap: before {gaps} reports one is missing");
    worst(out, network, reading);
}

fn counts(out: &mut String, name: &str, suspect: u64, failed: u64, all: u64) {
    let percent = |n: u64| format!("{:.3} %", share(n, all));
    let _ = writeln!(
        out,
        "{name:<20} {suspect:>9} {:>9} {failed:>9} {:>9}",
        percent(suspect),
        percent(failed)
    );
}

/// Percent.
fn share(n: u64, all: u64) -> f64 {
    100.0 * n as f64 / all.max(1) as f64
}

/// The stations with most reports that failed, then that are suspect.
fn worst(out: &mut String, network: &Network, reading: &Reading) {
    let mut order: Vec<(&Station, &StationReading)> = network
        .stations()
        .iter()
        .zip(&reading.stations)
        .filter(|(_, s)| s.failed + s.suspect > 0)
        .collect();
    if order.is_empty() {
        out.push_str("\nNo report is suspect or failed\n");
        return;
    }
    let key = |s: &StationReading| (share(s.failed, s.reports), share(s.suspect, s.reports));
    order.sort_by(|a, b| {
        let (a, b) = (key(a.1), key(b.1));
        b.0.total_cmp(&a.0).then(b.1.total_cmp(&a.1))
    });
    let columns = format!(
        "{:<16} {:>7} {:>8} {:>7}  raised by (reports)",
        "worst stations", "pass", "suspect", "failed"
    );
    let _ = writeln!(out, "\n{}", heading(&columns));
    for (station, s) in order.iter().take(WORST) {
        let mut tests: Vec<(u64, Test)> = Test::ALL
            .into_iter()
            .filter(|&test| test != Test::TimingGap)
            .map(|test| (s.of_test(test).0 + s.of_test(test).1, test))
            .filter(|raised| raised.0 > 0)
            .collect();
        tests.sort_by_key(|&(n, test)| (std::cmp::Reverse(n), test));
        let words: Vec<String> = tests
            .iter()
            .map(|(n, test)| format!("{} ({n})", test.words()))
            .collect();
        let line = format!(
            "{} {:>5.1} % {:>6.2} % {:>5.2} %  {}",
            cell(&station.id, 16),
            share(s.passed, s.reports),
            share(s.suspect, s.reports),
            share(s.failed, s.reports),
            words.join(", ")
        );
        let _ = writeln!(out, "{}", cut(&line, WIDTH));
    }
    if order.len() > WORST {
        let _ = writeln!(
            out,
            "and {} more with suspect or failed reports",
            order.len() - WORST
        );
    }
}

/// Every test of some reports of a station, with its numbers.
pub(crate) fn explained_text(station: &str, explained: &[Explained], reading: &Reading) -> String {
    let mut out = String::new();
    if explained.is_empty() {
        let _ = writeln!(out, "{station} has no reports");
    }
    for (k, report) in explained.iter().enumerate() {
        if k > 0 {
            out.push('\n');
        }
        let file = reading.files.get(usize::from(report.origin.0));
        let said = format!(
            "{} {}: {}",
            short_id(station, 24),
            report.time,
            cut(&report.report, 4 * WIDTH)
        );
        let _ = writeln!(
            out,
            "{}\n{}:{}",
            wrapped(&said, WIDTH),
            file.map_or_else(String::new, |f| shortened(&f.file, 60)),
            report.origin.1
        );
        let flag = format!("flag {}, {}", report.flag.value(), report.flag.word());
        let _ = writeln!(out, "{}", flagged(report.flag, &flag));
        for finding in &report.findings {
            let name = finding.test.words();
            let start = format!("{} {name}:", finding.flag.value());
            let text = wrapped(&format!("{start} {}", finding.words), WIDTH - 4);
            for (line, words) in text.lines().enumerate() {
                let indent = if line == 0 { "  " } else { "    " };
                let words = words.replacen(&start, &flagged(finding.flag, &start), 1);
                let _ = writeln!(out, "{indent}{words}");
            }
        }
    }
    out.push_str("1 pass, 2 not evaluated, 3 suspect, 4 fail, 9 missing\n");
    out
}
