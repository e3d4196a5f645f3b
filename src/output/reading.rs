//! The reading as JSON, for `gyremesh check --json`.

use serde_json::{Value, json};

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
                "suspect": s.suspect,
                "failed": s.failed,
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
        "conflicts": conflicts,
        "failures": failures,
        "warnings": warnings,
    });
    let mut text = format!("{summary:#}");
    text.push('\n');
    text
}
