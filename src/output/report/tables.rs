//! The tables of the page, in words.

use serde::Serialize;

use crate::calibration::{StationCalibration, Ticket};
use crate::check::Test;
use crate::event::{AreaKind, Motion};
use crate::integral::Peak;
use crate::output::calibration::what;
use crate::output::plot::plain_time;
use crate::output::{area_id, line_id};
use crate::pipeline::{CalibrationOutcome, EventsOutcome, Outcome, Setup};
use crate::time::Time;

/// One of the strongest values.
#[derive(Debug, Serialize)]
pub(super) struct Strongest {
    what: &'static str,
    value: String,
    time: String,
    micros: i64,
    polygon: String,
    number: usize,
    place: String,
}

pub(super) fn strongest(setup: &Setup, outcome: &Outcome) -> Vec<Strongest> {
    let extremes = &outcome.extremes;
    let row = |what: &'static str, peak: Option<Peak>| {
        let peak = peak?;
        let polygon = outcome.polygon(setup, peak.polygon)?;
        Some(Strongest {
            what,
            value: minus(&format!(
                "{:+.1} ± {:.1}",
                1e5 * peak.value,
                1e5 * peak.error
            )),
            time: plain_time(peak.time),
            micros: peak.time.micros(),
            polygon: polygon.id.clone(),
            number: peak.polygon,
            place: place(polygon.middle),
        })
    };
    let rows = [
        row("Convergence", extremes.convergence),
        row("Divergence", extremes.divergence),
        row("Cyclonic vorticity", extremes.cyclonic),
        row("Anticyclonic vorticity", extremes.anticyclonic),
    ];
    rows.into_iter().flatten().collect()
}

fn place((latitude, longitude): (f64, f64)) -> String {
    let (south, west) = (latitude < 0.0, longitude < 0.0);
    format!(
        "{:.2}° {}, {:.2}° {}",
        latitude.abs(),
        if south { "S" } else { "N" },
        longitude.abs(),
        if west { "W" } else { "E" }
    )
}

/// A station.
#[derive(Debug, Serialize)]
pub(super) struct StationRow {
    id: String,
    name: String,
    there: String,
    passed: String,
    suspect: String,
    failed: String,
    neighbours: u64,
    speed: String,
    turn: String,
    factor: String,
    ticket: String,
}

pub(super) fn stations(
    setup: &Setup,
    outcome: &Outcome,
    calibration: Option<&CalibrationOutcome>,
) -> Vec<StationRow> {
    let times = outcome.period.times.max(1) as f64;
    let row = |(k, station): (usize, &crate::station::Station)| {
        let reading = &outcome.reading.stations[k]; // one for each station
        let share = |part: f64| match reading.reports {
            0 => String::new(),
            _ => percent(part),
        };
        let [pass, suspect, fail] = reading.shares();
        let (doubted, refused) = reading.of_test(Test::Neighbour);
        let found = calibration.and_then(|c| c.calibration.stations.get(k));
        let [turn, factor] = gains(found);
        let tickets = calibration.map(|c| c.calibration.tickets.iter());
        let tickets = tickets.into_iter().flatten().filter(|t| t.station == k);
        let tickets: Vec<String> = tickets.map(|t| ticket(setup, t)).collect();
        StationRow {
            id: station.id.clone(),
            name: if station.name == station.id {
                String::new()
            } else {
                station.name.clone()
            },
            there: percent(outcome.values[k] as f64 / times), // one for each station
            passed: share(pass),
            suspect: share(suspect),
            failed: share(fail),
            neighbours: doubted + refused,
            speed: reading
                .mean_speed
                .map_or_else(String::new, |v| format!("{v:.1}")),
            turn,
            factor,
            ticket: tickets.join("; "),
        }
    };
    setup
        .network
        .stations()
        .iter()
        .enumerate()
        .map(row)
        .collect()
}

fn gains(found: Option<&StationCalibration>) -> [String; 2] {
    match found.and_then(|f| f.gain.as_ref()) {
        Some(gain) => [
            minus(&format!("{:+.1} ± {:.1}", gain.turn, gain.turn_se)),
            format!("{:.2} ± {:.2}", gain.factor, gain.factor_se),
        ],
        None => [String::new(), String::new()],
    }
}

fn ticket(setup: &Setup, ticket: &Ticket) -> String {
    let since = ticket
        .since
        .map(|(at, _)| format!(" since {}", plain_time(at)));
    format!("{}{}", what(setup, ticket), since.unwrap_or_default())
}

/// With a true minus sign.
fn minus(number: &str) -> String {
    number.replace('-', "−")
}

fn percent(share: f64) -> String {
    let text = format!("{:.1} %", 100.0 * share);
    // Nothing hides behind a rounded 0.
    if share > 0.0 && text == "0.0 %" {
        "< 0.1 %".into()
    } else {
        text
    }
}

/// A line along which the wind shifts.
#[derive(Debug, Serialize)]
pub(super) struct LineRow {
    id: String,
    kind: &'static str,
    from: String,
    to: String,
    moves: String,
    change: String,
    stations: usize,
}

/// When a line reaches a place.
#[derive(Debug, Serialize)]
pub(super) struct ArrivalRow {
    line: String,
    place: String,
    told: String,
    forecast: String,
    last: String,
}

/// An area.
#[derive(Debug, Serialize)]
pub(super) struct AreaRow {
    id: String,
    kind: &'static str,
    from: String,
    to: String,
    micros: i64,
    peak: String,
    at: String,
    polygon: String,
    number: usize,
    area: String,
    moves: String,
    doubt: String,
}

pub(super) fn lines(outcome: &EventsOutcome) -> Vec<LineRow> {
    let row = |(k, line): (usize, &crate::event::LineEvent)| {
        let [x, y] = line.change;
        let towards = x.atan2(y).to_degrees().rem_euclid(360.0);
        LineRow {
            id: line_id(k),
            kind: line.name(),
            from: plain_time(line.start),
            to: until(line.end, line.open),
            moves: motion(Some(&line.motion)),
            change: format!("{:.1} m/s towards {towards:03.0}°", x.hypot(y)),
            stations: line.stations.len(),
        }
    };
    outcome.lines.iter().enumerate().map(row).collect()
}

pub(super) fn arrivals(setup: &Setup, outcome: &EventsOutcome) -> Vec<ArrivalRow> {
    let clock = |time: Time, error: f64| format!("{} ± {:.0} min", plain_time(time), error / 60.0);
    let mut rows = Vec::new();
    for (k, line) in outcome.lines.iter().enumerate() {
        for arrival in &line.arrivals {
            let place = &setup.settings.places[arrival.place]; // a place of the settings
            rows.push(ArrivalRow {
                line: line_id(k),
                place: place.name.clone(),
                told: arrival
                    .first
                    .map_or_else(String::new, |f| plain_time(f.made_at)),
                forecast: arrival
                    .first
                    .map_or_else(String::new, |f| clock(f.time, f.error)),
                last: arrival
                    .last
                    .map_or_else(String::new, |(time, error)| clock(time, error)),
            });
        }
    }
    rows
}

/// The strongest areas first, at most so many.
pub(super) fn areas(setup: &Setup, outcome: &EventsOutcome, most: usize) -> Vec<AreaRow> {
    let mut order: Vec<usize> = (0..outcome.areas.len()).collect();
    let areas = &outcome.areas;
    let sound = |k: usize| outcome.doubts[k].is_none(); // one for each area
    order.sort_by(|&a, &b| {
        let strength = areas[b].strength.total_cmp(&areas[a].strength);
        sound(b).cmp(&sound(a)).then(strength).then(a.cmp(&b))
    });
    let row = |k: usize| {
        let area = &areas[k];
        let polygon = outcome.run.polygon(setup, area.peak.polygon);
        let doubt = outcome.doubts[k].and_then(|s| setup.network.stations().get(s));
        AreaRow {
            id: area_id(k),
            kind: match area.kind {
                AreaKind::Convergence => "convergence",
                AreaKind::Divergence => "divergence",
                AreaKind::Cyclonic => "cyclonic spin-up",
                AreaKind::Anticyclonic => "anticyclonic spin-up",
            },
            from: plain_time(area.start),
            to: until(area.end, area.open),
            micros: area.peak.time.micros(),
            peak: minus(&format!(
                "{:+.0} ± {:.0}",
                1e5 * area.peak.value,
                1e5 * area.peak.error
            )),
            at: plain_time(area.peak.time),
            polygon: polygon.map_or_else(String::new, |p| p.id.clone()),
            number: area.peak.polygon,
            area: format!("{:.0}", area.area / 1e6),
            moves: motion(area.motion.as_ref()),
            doubt: doubt.map_or_else(String::new, |s| s.id.clone()),
        }
    };
    order.into_iter().take(most).map(row).collect()
}

fn until(end: Time, open: bool) -> String {
    if open {
        format!("{}, still on", plain_time(end))
    } else {
        plain_time(end)
    }
}

fn motion(motion: Option<&Motion>) -> String {
    motion.map_or_else(String::new, |m| {
        format!(
            "{:.1} ± {:.1} m/s towards {:03.0}° ± {:.0}°",
            m.speed, m.speed_error, m.heading, m.heading_error
        )
    })
}
