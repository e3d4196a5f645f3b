//! The reading as JSON, for `gyremesh check --json`.

use serde_json::{Value, json};

use crate::check::{StationReading, Test};
use crate::pipeline::Reading;
use crate::settings::Settings;
use crate::station::Network;

/// Books of every file and station. Holds nothing that differs between two runs of the same input.
#[must_use]
pub fn reading_json(settings: &Settings, network: &Network, reading: &Reading) -> String {
    let files: Vec<Value> = reading
        .files
        .iter()
        .map(|f| json!({ "file": f.file, "rows": f.tally }))
        .collect();
    let stations: Vec<Value> = network
        .stations()
        .iter()
        .zip(&reading.stations)
        .map(|(station, s)| {
            json!({
                "station": station.id,
                "reports": s.reports,
                "wind": s.wind,
                "calm": s.calm,
                "no_direction": s.no_direction,
                "no_speed": s.no_speed,
                "passed": s.passed,
                "suspect": s.suspect,
                "failed": s.failed,
                "tests": tests(s),
                "first_report": s.period.map(|p| p.0.to_string()),
                "last_report": s.period.map(|p| p.1.to_string()),
                "interval_s": s.interval.map(|i| i as f64 * 1e-6),
                "gaps": s.gaps,
                "missing_in_gaps": s.missing_in_gaps,
                "direction_step_deg": s.rounding.direction,
                "speed_step": s.rounding.speed,
            })
        })
        .collect();
    let explained: Vec<Value> = reading
        .explained
        .iter()
        .map(|e| {
            json!({
                "time": e.time.to_string(),
                "report": e.report,
                "line": e.origin.1,
                "flag": e.flag,
                "tests": e.findings,
            })
        })
        .collect();
    let place = |(file, line): (u16, u32)| {
        let file = reading
            .files
            .get(usize::from(file))
            .map(|f| f.file.as_str());
        json!({ "file": file, "line": line })
    };
    let conflicts: Vec<Value> = reading
        .conflicts
        .iter()
        .map(|c| {
            json!({
                "station": network.stations().get(c.station as usize).map(|s| s.id.as_str()),
                "time": c.time.to_string(),
                "holds": place(c.holds),
                "set_aside": place(c.set_aside),
            })
        })
        .collect();
    let failures: Vec<String> = reading.failures.iter().map(ToString::to_string).collect();
    let warnings: Vec<String> = reading.warnings.iter().map(ToString::to_string).collect();
    let summary = json!({
        "program": { "name": env!("CARGO_PKG_NAME"), "version": env!("CARGO_PKG_VERSION") },
        "network": settings.name,
        "rows": reading.rows,
        "files": files,
        "repeats": reading.repeats,
        "stations": stations,
        "explained": explained,
        "conflicts": conflicts,
        "failures": failures,
        "warnings": warnings,
    });
    let mut text = format!("{summary:#}");
    text.push('\n');
    text
}

/// For each test that raised a flag, the reports that it found suspect and those that failed it.
fn tests(station: &StationReading) -> Value {
    let raised = Test::ALL.into_iter().filter_map(|test| {
        let (suspect, failed) = station.of_test(test);
        let counts = match test {
            Test::TimingGap => json!({ "missing": failed }),
            _ => json!({ "suspect": suspect, "failed": failed }),
        };
        (suspect + failed > 0).then(|| (test.name().to_string(), counts))
    });
    Value::Object(raised.collect())
}
