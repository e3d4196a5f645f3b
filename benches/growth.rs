//! How time and memory of the whole job grow with stations and with times: a table with the exponent from each size to
//! the next, and with `--plot FILE` a picture (SVG).
#![allow(
    clippy::print_stdout,
    clippy::unwrap_used,
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    clippy::cast_possible_wrap,
    reason = "a bench prints and may panic; its numbers are small"
)]

#[path = "common/archive.rs"]
mod archive;
mod common;
#[path = "common/process.rs"]
mod process;

use std::fmt::Write as _;
use std::process::Command;

use archive::Archive;
use common::median;
use process::measure;

const RUNS: usize = 3;

/// Size, seconds, MiB.
type Point = (f64, f64, f64);

/// The job on archives that grow in one respect.
fn grow(what: &str, archives: &[(usize, Archive)]) -> Vec<Point> {
    println!("  {what:>8} reports/1e6       s exponent    MiB exponent");
    let mut points: Vec<Point> = Vec::new();
    for (size, archive) in archives {
        let folder = tempfile::tempdir().unwrap();
        let network = archive.write(folder.path());
        let runs: Vec<(f64, f64)> = (0..RUNS)
            .map(|_| {
                let mut command = Command::new(env!("CARGO_BIN_EXE_gyremesh"));
                command
                    .arg("estimate")
                    .arg(&network)
                    .args(["--quiet", "--no-screen", "--summary-only", "--out"])
                    .arg(folder.path().join("out"));
                measure(&mut command)
            })
            .collect();
        let seconds = median(runs.iter().map(|run| run.0).collect());
        let memory = median(runs.iter().map(|run| run.1).collect());
        let exponent = |value: f64, of: fn(&Point) -> f64| {
            points.last().map_or_else(String::new, |before| {
                let growth = (value / of(before)).ln() / (*size as f64 / before.0).ln();
                format!("{growth:.2}")
            })
        };
        println!(
            "  {size:>8} {:>11.3} {seconds:>7.3} {:>8} {memory:>6.0} {:>8}",
            archive.reports() as f64 / 1e6,
            exponent(seconds, |p| p.1),
            exponent(memory, |p| p.2),
        );
        points.push((*size as f64, seconds, memory));
    }
    points
}

/// Name, colour, points.
type Series = (&'static str, &'static str, Vec<(f64, f64)>);

/// Both axes logarithmic; a line for each series.
fn plot(series: &[Series]) -> String {
    let (width, height, margin) = (640.0, 420.0, 60.0);
    let all = || series.iter().flat_map(|s| &s.2);
    let span = |of: fn(&(f64, f64)) -> f64| {
        let logs = all().map(of).map(f64::log10);
        let low = logs.clone().fold(f64::INFINITY, f64::min).floor();
        (low, logs.fold(low + 1.0, f64::max).ceil())
    };
    let (x_span, y_span) = (span(|p| p.0), span(|p| p.1));
    let x = |v: f64| margin + (v - x_span.0) / (x_span.1 - x_span.0) * (width - 2.0 * margin);
    let y =
        |v: f64| height - margin - (v - y_span.0) / (y_span.1 - y_span.0) * (height - 2.0 * margin);
    let mut out = format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {width} {height}\" font-family=\"sans-serif\" \
         font-size=\"13\"><rect width=\"100%\" height=\"100%\" fill=\"white\"/>\n"
    );
    for decade in x_span.0 as i64..=x_span.1 as i64 {
        let at = x(decade as f64);
        let _ = writeln!(
            out,
            "<path d=\"M{at},{margin}V{}\" stroke=\"#ccc\"/><text x=\"{at}\" y=\"{}\" text-anchor=\"middle\">1e{decade}</text>",
            height - margin,
            height - margin + 20.0
        );
    }
    for decade in y_span.0 as i64..=y_span.1 as i64 {
        let at = y(decade as f64);
        let _ = writeln!(
            out,
            "<path d=\"M{margin},{at}H{}\" stroke=\"#ccc\"/><text x=\"{}\" y=\"{}\" text-anchor=\"end\">1e{decade}</text>",
            width - margin,
            margin - 8.0,
            at + 4.0
        );
    }
    for (k, (name, colour, points)) in series.iter().enumerate() {
        let path: Vec<String> = points
            .iter()
            .map(|p| format!("{:.1},{:.1}", x(p.0.log10()), y(p.1.log10())))
            .collect();
        let _ = writeln!(
            out,
            "<polyline points=\"{}\" fill=\"none\" stroke=\"{colour}\" stroke-width=\"2\"/>\
             <text x=\"{}\" y=\"{}\" fill=\"{colour}\">{name}</text>",
            path.join(" "),
            margin + 10.0,
            margin + 18.0 + 18.0 * k as f64
        );
    }
    out.push_str("</svg>\n");
    out
}

fn main() {
    let of = |stations, days| Archive {
        stations,
        days,
        minutes: 5,
    };
    println!("growth: summary of each polygon, unscreened, whole process");
    let stations = [10, 100, 1000, 10_000].map(|n| (n, of(n, 1)));
    let by_stations = grow("stations", &stations);
    let days = [1, 10, 100].map(|days| (days * 288, of(120, days)));
    let by_times = grow("times", &days);
    let file = std::env::args().skip_while(|arg| arg != "--plot").nth(1);
    if let Some(file) = file {
        let seconds = |points: &[Point]| points.iter().map(|p| (p.0, p.1)).collect();
        let memory = |points: &[Point]| points.iter().map(|p| (p.0, p.2)).collect();
        let series = [
            (
                "seconds by stations (288 times)",
                "#0b5394",
                seconds(&by_stations),
            ),
            ("MiB by stations", "#6fa8dc", memory(&by_stations)),
            (
                "seconds by times (120 stations)",
                "#990000",
                seconds(&by_times),
            ),
            ("MiB by times", "#e06666", memory(&by_times)),
        ];
        std::fs::write(file, plot(&series)).unwrap();
    }
}
