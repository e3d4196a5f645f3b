//! Results of the calibration: `maintenance.csv`, `calibration.csv`, JSON, and the station list with corrections.

use std::fmt::Write as _;

use serde_json::{Value, json};

use super::CAUTION;
use super::csv::{number, optional, quoted};
use crate::calibration::{
    ClockDrift, ClockStretch, Course, Fault, GainEstimate, StationCalibration, Ticket,
};
use crate::pipeline::{CalibrationOutcome, Setup};
use crate::station::{Correction, Station};
use crate::units::North;

/// What a calibration cannot tell, wherever it is shown.
pub const GAUGE: &str = "Turns and factors are relative to the network's median: what all stations share cannot be seen. \
                         A site can turn and slow the wind as well as a sensor.";

/// `maintenance.csv`: a row for each ticket, the largest error of wind first. Errors of polygons in 1/s.
#[must_use]
pub fn maintenance_csv(setup: &Setup, outcome: &CalibrationOutcome) -> String {
    let mut out = String::from(
        "station,cause,what,size,standard_error,unit,since,since_earliest,since_latest,before,evidence,check,wind_error,\
         polygons,polygon_error_mean,polygon_error_largest\n",
    );
    for (ticket, cost) in outcome.calibration.tickets.iter().zip(&outcome.costs) {
        let since = ticket
            .since
            .map(|(at, [a, b])| [at, a, b].map(|t| t.to_string()));
        let [at, earliest, latest] = since.unwrap_or_default();
        let fields = [
            quoted(id(setup, ticket.station)),
            ticket.fault.name().into(),
            quoted(&what(setup, ticket)),
            number(ticket.size),
            optional(ticket.error),
            ticket.unit.into(),
            at,
            earliest,
            latest,
            quoted(&ticket.before),
            quoted(&ticket.evidence),
            quoted(ticket.fault.to_check()),
            number(ticket.wind_error),
            cost.polygons.to_string(),
            number(cost.mean),
            number(cost.largest),
        ];
        out.push_str(&fields.join(","));
        out.push('\n');
    }
    out
}

/// What is wrong, with the name of the other station where there is one.
#[must_use]
pub fn what(setup: &Setup, ticket: &Ticket) -> String {
    match ticket.fault {
        Fault::Exchanged { with } => format!("data exchanged with {}", id(setup, with)),
        fault => fault.words(),
    }
}

fn id(setup: &Setup, station: usize) -> &str {
    let station = setup.network.stations().get(station);
    station.map_or("", |s| s.id.as_str())
}

/// `calibration.csv`: a row for each station, its gain that after the last change. Turn: reported minus true direction, degrees clockwise; factor: reported over
/// true speed; clock: reported minus true time, s (drift in s a day; another value meanwhile, from and until a time).
#[must_use]
pub fn calibration_csv(setup: &Setup, outcome: &CalibrationOutcome) -> String {
    let mut out = String::from(
        "station,turn,turn_se,factor,factor_se,half_95,changes,changed,turn_before,factor_before,before,clock,clock_se,correlation,\
         correlation_with_clock,clock_drift,clock_drift_se,clock_from,clock_until,clock_meanwhile,misfit,spikes,deviation,mean_speed,inside,predicts,blocks,times,values,stuck,still,excluded\n",
    );
    for (station, found) in setup
        .network
        .stations()
        .iter()
        .zip(&outcome.calibration.stations)
    {
        let gain = |f: fn(&GainEstimate) -> f64| optional(found.gain.as_ref().map(f));
        let last = found.changes.last();
        let before = |f: fn(&GainEstimate) -> f64| optional(last.map(|c| f(&c.before)));
        let clock = found.clock;
        let (stretch, drift) = course_of(found);
        let fields = [
            quoted(&station.id),
            gain(|g| g.turn),
            gain(|g| g.turn_se),
            gain(|g| g.factor),
            gain(|g| g.factor_se),
            gain(|g| g.half_95),
            found.changes.len().to_string(),
            last.map_or_else(String::new, |c| c.at.to_string()),
            before(|g| g.turn),
            before(|g| g.factor),
            quoted(&found.history()),
            optional(clock.map(|c| c.lag)),
            optional(clock.map(|c| c.error)),
            optional(clock.map(|c| c.correlation)),
            optional(clock.map(|c| c.with_lag)),
            optional(drift.map(|d| d.rate)),
            optional(drift.map(|d| d.error)),
            stretch.map_or_else(String::new, |s| s.from.to_string()),
            stretch
                .and_then(|s| s.to)
                .map_or_else(String::new, |t| t.to_string()),
            optional(stretch.map(|s| s.inside)),
            number(found.misfit),
            number(found.spikes),
            number(found.deviation),
            number(found.speed),
            found.inside.to_string(),
            found.predicts.to_string(),
            found.blocks.to_string(),
            found.times.to_string(),
            found.tally.values.to_string(),
            found.tally.stuck.to_string(),
            found.tally.still.to_string(),
            found.tally.excluded.to_string(),
        ];
        out.push_str(&fields.join(","));
        out.push('\n');
    }
    out
}

fn course_of(station: &StationCalibration) -> (Option<ClockStretch>, Option<ClockDrift>) {
    match station.course() {
        Some(Course::Stretch(stretch)) => (Some(stretch), None),
        Some(Course::Drift(drift)) => (None, Some(drift)),
        None => (None, None),
    }
}

/// All of it as JSON.
#[must_use]
pub fn calibration_json(setup: &Setup, outcome: &CalibrationOutcome) -> String {
    let calibration = &outcome.calibration;
    let ticket = |(t, cost): (&Ticket, _)| -> Value {
        json!({
            "station": id(setup, t.station),
            "what": what(setup, t),
            "fault": t.fault,
            "size": t.size,
            "standard_error": t.error,
            "unit": t.unit,
            "since": t.since.map(|(at, [a, b])| json!({
                "at": at.to_string(), "earliest": a.to_string(), "latest": b.to_string(),
            })),
            "before": t.before,
            "evidence": t.evidence,
            "check": t.fault.to_check(),
            "wind_error": t.wind_error,
            "polygons": cost,
        })
    };
    let station = |(s, found): (&Station, &StationCalibration)| -> Value {
        let (stretch, drift) = course_of(found);
        json!({
            "station": s.id,
            "gain": found.gain,
            "changes": found.changes.iter().map(|c| json!({
                "at": c.at.to_string(),
                "earliest": c.between[0].to_string(),
                "latest": c.between[1].to_string(),
                "before": c.before,
            })).collect::<Vec<Value>>(),
            "clock": found.clock,
            "clock_drift": drift.map(|d| json!({
                "rate": d.rate, "standard_error": d.error, "middle": d.middle, "days": d.days,
            })),
            "clock_meanwhile": stretch.map(|c| json!({
                "from": c.from.to_string(),
                "until": c.to.map(|t| t.to_string()),
                "lag": c.inside,
                "else": c.outside,
            })),
            "misfit": found.misfit,
            "spikes": found.spikes,
            "blocks": found.blocks,
            "times": found.times,
            "correction_applied": s.correction.as_ref().map(Correction::words),
        })
    };
    let tickets: Vec<Value> = calibration
        .tickets
        .iter()
        .zip(&outcome.costs)
        .map(ticket)
        .collect();
    let stations = setup.network.stations().iter().zip(&calibration.stations);
    let value = json!({
        "network": setup.settings.name,
        "period": calibration.period.map(|p| p.map(|t| t.to_string())),
        "times": calibration.times,
        "blocks": calibration.blocks,
        "blocks_are_days": calibration.days,
        "tickets": tickets,
        "stations": stations.map(station).collect::<Vec<Value>>(),
        "reports": outcome.reading.rows,
        "warnings": outcome.warnings.iter().map(ToString::to_string).collect::<Vec<_>>(),
        "units": { "turn": "degrees clockwise, reported minus true", "factor": "reported over true", "clock": "s ahead", "clock_drift": "s ahead a day" },
        "gauge": GAUGE,
        "caution": CAUTION,
    });
    format!("{value:#}\n")
}

/// The corrections that the tickets call for, joined to those of the list, by station.
///
/// Only turns and factors are corrected: what the numbers name (a unit, the declination, direction to) by its own figure,
/// others by the estimate.
#[must_use]
pub fn corrections_of(setup: &Setup, outcome: &CalibrationOutcome) -> Vec<Option<Correction>> {
    let mut all: Vec<Option<Correction>> = setup
        .network
        .stations()
        .iter()
        .map(|s| s.correction.clone())
        .collect();
    let period = outcome.calibration.period.map(|p| p.map(|t| t.to_string()));
    for ticket in &outcome.calibration.tickets {
        let (direction, factor) = match ticket.fault {
            Fault::Turned => (-ticket.size, 1.0),
            Fault::Reversed => (180.0, 1.0),
            Fault::DeclinationMissing { declination } => (declination, 1.0),
            Fault::DeclinationDoubled { declination } => (-declination, 1.0),
            Fault::Unit { factor, .. } => (0.0, 1.0 / factor),
            Fault::Slow | Fault::Fast => (0.0, 1.0 / ticket.size),
            _ => continue,
        };
        let Some(entry) = all.get_mut(ticket.station) else {
            continue;
        };
        let [first, last] = period.clone().unwrap_or_default();
        let error = ticket
            .error
            .map_or_else(String::new, |e| format!(" ± {e:.2}"));
        let origin = format!(
            "gyremesh calibrate {first} to {last}: {} {:.2}{error} {}",
            ticket.fault.words(),
            ticket.size,
            ticket.unit
        );
        let origin = origin.trim_end().to_string();
        *entry = Some(match entry.take() {
            None => Correction {
                direction,
                speed_factor: factor,
                from: ticket.since.map(|s| s.0),
                origin,
            },
            Some(before) => Correction {
                direction: before.direction + direction,
                speed_factor: before.speed_factor * factor,
                // Two corrections of one station hold from the later time on.
                from: before.from.max(ticket.since.map(|s| s.0)),
                origin: [before.origin, origin].join("; "),
            },
        });
    }
    all
}

/// Columns of [`corrected_list`], as `[stations] columns` names them.
pub const LIST_COLUMNS: [(&str, &str); 13] = [
    ("name", "name"),
    ("elevation", "elevation_m"),
    ("aliases", "aliases"),
    ("valid_from", "valid_from"),
    ("valid_to", "valid_to"),
    ("speed_unit", "speed_unit"),
    ("north", "north"),
    ("declination", "declination"),
    ("sensor_height", "sensor_height_m"),
    ("roughness", "roughness_m"),
    ("direction_correction", "direction_correction"),
    ("speed_factor", "speed_factor"),
    ("correction_origin", "correction_origin"),
];

/// The station list with the corrections and where they come from.
#[must_use]
pub fn corrected_list(setup: &Setup, corrections: &[Option<Correction>]) -> String {
    let mut out = String::from("id,latitude,longitude");
    for (_, column) in LIST_COLUMNS {
        out.push(',');
        out.push_str(column);
    }
    out.push_str(",correction_from\n");
    for (station, correction) in setup.network.stations().iter().zip(corrections) {
        let site = &station.site;
        let of = |f: fn(&Correction) -> f64| optional(correction.as_ref().map(f));
        let fields = [
            quoted(&station.id),
            number(station.position.latitude()),
            number(station.position.longitude()),
            quoted(&station.name),
            optional(station.elevation),
            quoted(&station.aliases.join(";")),
            station
                .valid_from
                .map_or_else(String::new, |t| t.to_string()),
            station.valid_to.map_or_else(String::new, |t| t.to_string()),
            site.speed_unit.map_or("", |u| u.symbol()).into(),
            match site.north {
                Some(North::True) => "true".into(),
                Some(North::Magnetic) => "magnetic".into(),
                None => String::new(),
            },
            optional(site.declination),
            optional(site.sensor_height),
            optional(site.roughness),
            of(|c| c.direction),
            of(|c| c.speed_factor),
            quoted(correction.as_ref().map_or("", |c| c.origin.as_str())),
            correction
                .as_ref()
                .and_then(|c| c.from)
                .map_or_else(String::new, |t| t.to_string()),
        ];
        out.push_str(&fields.join(","));
        out.push('\n');
    }
    out
}

/// The `[stations]` section that reads such a list.
#[must_use]
pub fn corrected_list_section(file: &str) -> String {
    let mut out = format!("[stations]\nfile = {file:?}\n[stations.columns]\n");
    let from = ("correction_from", "correction_from");
    for (key, column) in LIST_COLUMNS.into_iter().chain([from]) {
        // Writing to a string cannot fail.
        let _ = writeln!(out, "{key} = \"{column}\"");
    }
    out
}
