//! Events as tables, `GeoJSON` and JSON.

use geo::{LineString, MultiPolygon};
use geojson::{Feature, FeatureCollection, Geometry, JsonObject, JsonValue, feature::Id};
use serde_json::{Value, json};

use super::csv::{number, optional, quoted};
use super::geojson::outline_geometry;
use crate::event::{AreaEvent, LineEvent, Motion};
use crate::pipeline::{EventsOutcome, Setup};
use crate::time::Time;

/// Columns that areas and lines share begin the table; those of the other kind are empty.
const EVENT_COLUMNS: &str = "event,kind,start,end,open,speed_m_s,speed_se_m_s,heading_deg,heading_se_deg,\
                             start_latitude,start_longitude,end_latitude,end_longitude,\
                             peak,peak_se,peak_time,peak_polygon,strength,largest_area_km2,split_from,merged_into,\
                             doubtful_station,\
                             stations,known_at,change_m_s,change_towards_deg,closing_m_s\n";

/// The identifier of an area: A1, A2, ... in the order of their start.
#[must_use]
pub fn area_id(number: usize) -> String {
    format!("A{}", number + 1)
}

/// The identifier of a line: L1, L2, ... in the order of their start.
#[must_use]
pub fn line_id(number: usize) -> String {
    format!("L{}", number + 1)
}

fn motion_fields(motion: Option<&Motion>) -> [String; 4] {
    [
        optional(motion.map(|m| m.speed)),
        optional(motion.map(|m| m.speed_error)),
        optional(motion.map(|m| m.heading)),
        optional(motion.map(|m| m.heading_error)),
    ]
}

fn place_fields(place: Option<(f64, f64)>) -> [String; 2] {
    [
        optional(place.map(|p| rounded(p.0))),
        optional(place.map(|p| rounded(p.1))),
    ]
}

/// Degrees to a metre.
fn rounded(degrees: f64) -> f64 {
    (degrees * 1e5).round() / 1e5
}

/// `events.csv`: lines, then areas, each in the order of their start. Peak in 1/s, strength in units of the onset, closing: part of
/// the change of wind along the motion.
#[must_use]
pub fn events_csv(setup: &Setup, outcome: &EventsOutcome) -> String {
    let mut out = String::from(EVENT_COLUMNS);
    for (k, line) in outcome.lines.iter().enumerate() {
        let place = |front: Option<&(Time, [[f64; 2]; 2])>| {
            front.and_then(|(_, [a, b])| outcome.place([0.5 * (a[0] + b[0]), 0.5 * (a[1] + b[1])]))
        };
        let [x, y] = line.change;
        let mut fields = vec![
            line_id(k),
            line.name().into(),
            line.start.to_string(),
            line.end.to_string(),
            u8::from(line.open).to_string(),
        ];
        fields.extend(motion_fields(Some(&line.motion)));
        fields.extend(place_fields(place(line.fronts.first())));
        fields.extend(place_fields(place(line.fronts.last())));
        fields.extend(vec![String::new(); 9]);
        fields.extend([
            quoted(&station_ids(setup, &line.stations)),
            line.known_at.to_string(),
            number(x.hypot(y)),
            number(x.atan2(y).to_degrees().rem_euclid(360.0)),
            number(line.closing),
        ]);
        out.push_str(&fields.join(","));
        out.push('\n');
    }
    for (k, area) in outcome.areas.iter().enumerate() {
        let points = area.path.points();
        let mut fields = vec![
            area_id(k),
            area.kind.name().into(),
            area.start.to_string(),
            area.end.to_string(),
            u8::from(area.open).to_string(),
        ];
        fields.extend(motion_fields(area.motion.as_ref()));
        for point in [points.first(), points.last()] {
            fields.extend(place_fields(point.and_then(|p| outcome.place(p.1))));
        }
        let id = |number: Option<usize>| number.map_or_else(String::new, area_id);
        fields.extend([
            number(area.peak.value),
            number(area.peak.error),
            area.peak.time.to_string(),
            quoted(&polygon_id(setup, outcome, area.peak.polygon)),
            number(area.strength),
            number(area.area / 1e6),
            id(area.split_from),
            id(area.merged_into),
            outcome.doubts[k].map_or_else(String::new, |s| quoted(&station_id(setup, s))),
        ]);
        fields.extend(vec![String::new(); 5]);
        out.push_str(&fields.join(","));
        out.push('\n');
    }
    out
}

/// `shifts.csv`: every wind shift at a station, with its line if it belongs to one.
#[must_use]
pub fn shifts_csv(setup: &Setup, outcome: &EventsOutcome) -> String {
    let mut out = String::from(
        "station,time,time_se_s,duration_s,turn_deg,speed_change_m_s,speed_before_m_s,direction_before_deg,\
         speed_after_m_s,direction_after_deg,known_at,line\n",
    );
    for (passage, line) in &outcome.passages {
        let direction = |wind: crate::units::Wind| {
            optional(
                wind.from_direction()
                    .map(crate::units::FromDirection::degrees),
            )
        };
        let fields = [
            quoted(&station_id(setup, passage.station)),
            passage.time.to_string(),
            number(passage.error),
            number(passage.width),
            optional(passage.turn()),
            number(passage.speed_change()),
            number(passage.before.speed()),
            direction(passage.before),
            number(passage.after.speed()),
            direction(passage.after),
            passage.known_at.to_string(),
            line.map_or_else(String::new, line_id),
        ];
        out.push_str(&fields.join(","));
        out.push('\n');
    }
    out
}

/// `arrivals.csv`: when each line reaches the places that it comes by; first forecast, and time with all its stations.
#[must_use]
pub fn arrivals_csv(setup: &Setup, outcome: &EventsOutcome) -> String {
    let mut out = String::from(
        "line,place,latitude,longitude,made_at,forecast,forecast_se_s,final,final_se_s\n",
    );
    for (k, line) in outcome.lines.iter().enumerate() {
        for arrival in &line.arrivals {
            let place = &setup.settings.places[arrival.place]; // a place of the settings
            let (first, last) = (arrival.first, arrival.last);
            let fields = [
                line_id(k),
                quoted(&place.name),
                number(place.position.latitude()),
                number(place.position.longitude()),
                first.map_or_else(String::new, |f| f.made_at.to_string()),
                first.map_or_else(String::new, |f| f.time.to_string()),
                optional(first.map(|f| f.error)),
                last.map_or_else(String::new, |l| l.0.to_string()),
                optional(last.map(|l| l.1)),
            ];
            out.push_str(&fields.join(","));
            out.push('\n');
        }
    }
    out
}

/// `events.geojson` (RFC 7946): the largest area of each event, its path, and lines at whole hours.
#[must_use]
pub fn events_geojson(setup: &Setup, outcome: &EventsOutcome) -> String {
    let mut features = Vec::new();
    for (k, line) in outcome.lines.iter().enumerate() {
        for (time, ends) in &line.fronts {
            let points: Option<Vec<_>> = ends.iter().map(|&end| outcome.place(end)).collect();
            let Some(points) = points else { continue };
            let mut properties = line_json(setup, outcome, k, line);
            properties["time"] = json!(time.to_string());
            properties["shape"] = json!("line");
            features.push(feature(&line_id(k), track(&points), properties));
        }
    }
    for (k, area) in outcome.areas.iter().enumerate() {
        let polygons = area.polygons.iter();
        let outlines = polygons.filter_map(|&p| outcome.run.polygon(setup, p));
        let parts = outlines.flat_map(|polygon| outline_geometry(polygon, &setup.network).0);
        let mut properties = area_json(setup, outcome, k, area);
        properties["shape"] = json!("largest area");
        let shape = Geometry::from(&MultiPolygon::new(parts.collect()));
        features.push(feature(&area_id(k), shape, properties));
        let points: Vec<(f64, f64)> = (area.path.points().iter())
            .filter_map(|point| outcome.place(point.1))
            .collect();
        if points.len() > 1 {
            let mut properties = area_json(setup, outcome, k, area);
            properties["shape"] = json!("path");
            let times = area.path.points().iter().map(|point| point.0.to_string());
            properties["times"] = times.collect();
            features.push(feature(&area_id(k), track(&points), properties));
        }
    }
    let collection = FeatureCollection {
        bbox: None,
        features,
        foreign_members: None,
    };
    let mut text = collection.to_string();
    text.push('\n');
    text
}

/// A line through points (latitude, longitude), cut where it crosses the antimeridian (RFC 7946, 3.1.9).
fn track(points: &[(f64, f64)]) -> Geometry {
    let mut parts: Vec<Vec<(f64, f64)>> = vec![Vec::new()];
    let mut before: Option<(f64, f64)> = None;
    for &(latitude, longitude) in points {
        if let Some((y, x)) = before
            && (longitude - x).abs() > 180.0
        {
            let side = if x > 0.0 { 180.0 } else { -180.0 };
            let way = (side - x).abs() / (360.0 - (longitude - x).abs());
            let crossing = rounded(y + way * (latitude - y));
            if let Some(part) = parts.last_mut() {
                part.push((side, crossing));
            }
            parts.push(vec![(-side, crossing)]);
        }
        if let Some(part) = parts.last_mut() {
            part.push((rounded(longitude), rounded(latitude)));
        }
        before = Some((latitude, longitude));
    }
    let lines: Vec<LineString<f64>> = parts.into_iter().map(LineString::from).collect();
    match lines.as_slice() {
        [one] => Geometry::from(one),
        _ => Geometry::from(&geo::MultiLineString::new(lines)),
    }
}

fn feature(id: &str, geometry: Geometry, mut properties: Value) -> Feature {
    properties["event"] = json!(id);
    let properties: Option<JsonObject> = match properties {
        JsonValue::Object(object) => Some(object),
        _ => None,
    };
    let shape = properties.as_ref().and_then(|p| p.get("shape"));
    let time = properties.as_ref().and_then(|p| p.get("time"));
    let words = [shape, time]
        .into_iter()
        .flatten()
        .filter_map(Value::as_str);
    let words: Vec<&str> = words.collect();
    Feature {
        bbox: None,
        geometry: Some(geometry),
        id: Some(Id::String(format!("{id} {}", words.join(" ")))),
        properties,
        foreign_members: None,
    }
}

/// All events as JSON.
#[must_use]
pub fn events_json(setup: &Setup, outcome: &EventsOutcome) -> String {
    let lines = outcome.lines.iter().enumerate();
    let areas = outcome.areas.iter().enumerate();
    let period = outcome.period().map(|(a, b)| [a, b].map(|t| t.to_string()));
    let value = json!({
        "network": setup.settings.name,
        "period": period,
        "settings": setup.settings.events,
        "lines": lines.map(|(k, line)| line_json(setup, outcome, k, line)).collect::<Vec<_>>(),
        "areas": areas.map(|(k, area)| area_json(setup, outcome, k, area)).collect::<Vec<_>>(),
        "wind_shifts": outcome.passages.len(),
        "caution": super::CAUTION,
    });
    format!("{value:#}\n")
}

fn motion_json(motion: Option<&Motion>) -> Value {
    motion.map_or(Value::Null, |m| {
        json!({
            "speed_m_s": m.speed,
            "speed_se_m_s": m.speed_error,
            "heading_deg": m.heading,
            "heading_se_deg": m.heading_error,
        })
    })
}

fn line_json(setup: &Setup, outcome: &EventsOutcome, k: usize, line: &LineEvent) -> Value {
    let arrivals = line.arrivals.iter().map(|arrival| {
        json!({
            "place": setup.settings.places[arrival.place].name, // a place of the settings
            "made_at": arrival.first.map(|f| f.made_at.to_string()),
            "forecast": arrival.first.map(|f| f.time.to_string()),
            "forecast_se_s": arrival.first.map(|f| f.error),
            "final": arrival.last.map(|l| l.0.to_string()),
            "final_se_s": arrival.last.map(|l| l.1),
        })
    });
    let ids: Vec<String> = (line.stations.iter())
        .map(|&s| station_id(setup, s))
        .collect();
    let shifts = outcome.passages.iter().filter(|p| p.1 == Some(k));
    let [x, y] = line.change;
    json!({
        "event": line_id(k),
        "kind": line.name(),
        "start": line.start.to_string(),
        "end": line.end.to_string(),
        "open": line.open,
        "known_at": line.known_at.to_string(),
        "motion": motion_json(Some(&line.motion)),
        "change_m_s": x.hypot(y),
        "change_towards_deg": x.atan2(y).to_degrees().rem_euclid(360.0),
        "closing_m_s": line.closing,
        "stations": ids,
        "wind_shifts": shifts.count(),
        "arrivals": arrivals.collect::<Vec<_>>(),
    })
}

fn area_json(setup: &Setup, outcome: &EventsOutcome, k: usize, area: &AreaEvent) -> Value {
    json!({
        "event": area_id(k),
        "kind": area.kind.name(),
        "start": area.start.to_string(),
        "end": area.end.to_string(),
        "open": area.open,
        "motion": motion_json(area.motion.as_ref()),
        "quantity": area.kind.quantity(),
        "peak": area.peak.value,
        "peak_se": area.peak.error,
        "peak_time": area.peak.time.to_string(),
        "peak_polygon": polygon_id(setup, outcome, area.peak.polygon),
        "strength": area.strength,
        "largest_area_km2": area.area / 1e6,
        "split_from": area.split_from.map(area_id),
        "merged_into": area.merged_into.map(area_id),
        "doubtful_station": outcome.doubts[k].map(|s| station_id(setup, s)),
    })
}

fn station_id(setup: &Setup, station: usize) -> String {
    let found = setup.network.stations().get(station);
    found.map_or_else(String::new, |s| s.id.clone())
}

fn station_ids(setup: &Setup, stations: &[usize]) -> String {
    let ids: Vec<String> = stations.iter().map(|&s| station_id(setup, s)).collect();
    ids.join(" ")
}

fn polygon_id(setup: &Setup, outcome: &EventsOutcome, polygon: usize) -> String {
    let found = outcome.run.polygon(setup, polygon);
    found.map_or_else(String::new, |p| p.id.clone())
}
