//! The report: one page that works offline, with a map that moves in time, series, tables and settings.

mod data;
mod tables;

use minijinja::syntax::SyntaxConfig;
use minijinja::value::Serde;
use minijinja::{AutoEscape, Environment};
use serde::Serialize;
use serde_json::{Value, json};

use super::frames::Frames;
use super::plot::base::{MapBase, label_texts};
use super::plot::{self, barb};
use super::{CAUTION, GAUGE, error_bars, significant_share, summary_json};
use crate::error::Error;
use crate::pipeline::{CalibrationOutcome, EventsOutcome, Setup};

/// Size of the map, pixels of its own.
const MAP: [f64; 4] = [0.0, 0.0, 680.0, 580.0];
/// Least height of the map.
const LEAST: f64 = 320.0;
/// Areas in the table of events.
const AREAS: usize = 20;

/// A polygon of the map.
#[derive(Serialize)]
struct PolygonOnMap<'a> {
    id: &'a str,
    path: &'a str,
    filled: bool,
    area: String,
    kind: &'static str,
}

/// A station of the map.
#[derive(Serialize)]
struct StationOnMap<'a> {
    id: &'a str,
    name: &'a str,
    x: String,
    y: String,
    north: String,
    label: &'a str,
    foot: Option<[String; 2]>,
}

/// The page of a run: map, series, strongest values, events, stations with their calibration if there is one, polygons
/// left out, settings and cautions. It loads nothing from elsewhere.
///
/// # Errors
/// The page cannot be made, which a test would tell.
pub fn report_html(
    setup: &Setup,
    events: &EventsOutcome,
    frames: &Frames,
    calibration: Option<&CalibrationOutcome>,
) -> Result<String, Error> {
    let outcome = &events.run;
    let base = MapBase::new(setup, MAP, LEAST);
    let texts = label_texts(setup);
    let feet = base.labels(&texts, &[]);
    let pixels = |value: f64| format!("{value:.1}");
    let polygons: Vec<PolygonOnMap> = (setup.built.polygons.iter().zip(&base.polygons))
        .map(|(polygon, outline)| PolygonOnMap {
            id: &polygon.id,
            path: &outline.path,
            filled: outline.filled,
            area: format!("{:.0}", polygon.shape.area / 1e6),
            kind: polygon.kind.name(),
        })
        .collect();
    let excluded = setup.built.excluded.iter().zip(&base.excluded);
    let excluded: Vec<Value> = excluded
        .map(|((polygon, why), path)| {
            json!({ "id": polygon.id, "why": why.to_string(), "path": path })
        })
        .collect();
    let stations: Vec<StationOnMap> = (setup.network.stations().iter().zip(&base.stations))
        .zip(texts.iter().zip(&feet))
        .map(|((station, spot), (label, foot))| StationOnMap {
            id: &station.id,
            name: &station.name,
            x: pixels(spot.at[0]),
            y: pixels(spot.at[1]),
            north: pixels(spot.north),
            label,
            foot: foot.map(|foot| foot.map(pixels)),
        })
        .collect();
    let barbs: Vec<Value> = (0..=barb::MOST)
        .map(|n| json!({ "path": barb::barb(n, base.southern), "filled": n >= 10 }))
        .collect();
    // The summary is what the page says of the run; a map of names and values reads back.
    let summary: Value = serde_json::from_str(&summary_json(setup, outcome)).unwrap_or_default();
    let data = data::data(setup, frames).to_string();
    let period = outcome.period.ends;
    let share = |statistics| significant_share(statistics).map(|s| format!("{:.1} %", 100.0 * s));
    let context = json!({
        "name": setup.settings.name,
        "style": include_str!("page.css"),
        "script": include_str!("page.js"),
        // No text can end the script.
        "data": data.replace("</", "<\\/"),
        "period": period.map(|(first, last)| [first, last].map(plot::plain_time)),
        "times": outcome.period.times,
        "interval": format!("{} min", setup.settings.analysis.interval.as_secs_f64() / 60.0),
        "every": frames.every,
        "map": {
            "width": base.inside[2],
            "height": format!("{:.1}", base.inside[3]),
            "land": base.land,
            "sea": plot::SEA,
            "bar": pixels(base.bar.0),
            "bar_text": base.bar.1,
            "north": pixels(base.north),
            "hatch": plot::HATCH,
        },
        "polygons": polygons,
        "excluded": excluded,
        "stations": stations,
        "barbs": barbs,
        "reports": {
            "read": outcome.reading.rows.received,
            "used": outcome.aligned.passed,
            "share": format!("{:.1} %", 100.0 * outcome.share_used()),
        },
        "reporting": outcome.values.iter().filter(|&&n| n > 0).count(),
        "significant": [share(&outcome.statistics.vorticity), share(&outcome.statistics.divergence)],
        "false_rate": format!("{}", 100.0 * setup.settings.errors.false_discovery_rate),
        "strongest": tables::strongest(setup, outcome),
        "lines": tables::lines(events),
        "arrivals": tables::arrivals(setup, events),
        "areas": tables::areas(setup, events, AREAS),
        "areas_all": events.areas.len(),
        "station_rows": tables::stations(setup, outcome, calibration),
        "calibrated": calibration.is_some(),
        "gauge": GAUGE,
        "warnings": outcome.warnings.iter().map(ToString::to_string).collect::<Vec<_>>(),
        "error_bars": error_bars(&setup.settings.errors),
        "settings": format!("{:#}", summary["settings"]),
        "corrections": summary["corrections"],
        "version": env!("CARGO_PKG_VERSION"),
        "caution": CAUTION.split_once(". ").map(|(first, rest)| [format!("{first}."), rest.into()]),
    });
    page(context).map_err(|e| {
        let place = std::path::Path::new("report.html");
        Error::write(place, std::io::Error::other(e.to_string()))
    })
}

fn page(context: Value) -> Result<String, minijinja::Error> {
    let mut environment = Environment::new();
    environment.set_auto_escape_callback(|_| AutoEscape::Html);
    let syntax = SyntaxConfig::builder()
        .trim_blocks(true)
        .lstrip_blocks(true)
        .build()?;
    environment.set_syntax(syntax);
    let context = minijinja::Value::from(Serde(context));
    environment.render_str(include_str!("page.html"), context)
}
