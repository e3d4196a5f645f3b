//! The text of `gyremesh calibrate`, in 80 columns.

use std::fmt::Write as _;

use super::{WIDTH, cell, corrections_text, cut, heading, row, wrapped};
use crate::calibration::{Cost, Ticket};
use crate::output::{CAUTION, GAUGE, what};
use crate::pipeline::{CalibrationOutcome, Setup};
use crate::time::Time;

/// The tickets, and what they rest on.
pub(crate) fn calibration_text(setup: &Setup, outcome: &CalibrationOutcome) -> String {
    let mut out = String::new();
    let calibration = &outcome.calibration;
    // Writing to a string cannot fail.
    let _ = writeln!(out, "{}", heading(&cut(&setup.settings.name, WIDTH)));
    if let Some([first, last]) = calibration.period {
        let _ = writeln!(
            out,
            "Period      {first} to {last}, {} times compared",
            calibration.times
        );
    }
    let _ = writeln!(
        out,
        "Errors      from {} {}",
        calibration.blocks,
        if calibration.days {
            "days"
        } else {
            "parts of a record of less than five days: less sure"
        }
    );
    let judged = calibration
        .stations
        .iter()
        .filter(|s| s.gain.is_some())
        .count();
    let _ = writeln!(
        out,
        "Stations    {judged} of {} judged",
        calibration.stations.len()
    );
    corrections_text(&mut out, setup);
    if calibration.tickets.is_empty() {
        let _ = writeln!(
            out,
            "\nNothing to do: no station is off by more than its error"
        );
    }
    for (ticket, cost) in calibration.tickets.iter().zip(&outcome.costs) {
        ticket_text(&mut out, setup, ticket, cost);
    }
    let _ = writeln!(
        out,
        "\n{}\n\n{}",
        wrapped(GAUGE, WIDTH),
        wrapped(CAUTION, WIDTH)
    );
    out
}

fn ticket_text(out: &mut String, setup: &Setup, ticket: &Ticket, cost: &Cost) {
    let station = setup.network.stations().get(ticket.station);
    let id = station.map_or("", |s| s.id.as_str());
    let since = match ticket.since {
        Some((at, [from, to])) => {
            format!("since {} ({} to {})", day(at), day(from), day(to))
        }
        None => "in the whole record".into(),
    };
    let head = format!("{} {}: {}", cell(id, 12), what(setup, ticket), size(ticket));
    let _ = writeln!(out, "\n{}", heading(&cut(&head, WIDTH)));
    let mut line = |name: &str, text: &str| {
        row(out, &format!("  {name}"), text);
    };
    line("when", &since);
    for state in ticket.before.split("; ").filter(|state| !state.is_empty()) {
        line("before", state);
    }
    line("evidence", &ticket.evidence);
    line("check", ticket.fault.to_check());
    line(
        "cost",
        &format!(
            "{:.1} m/s; {:.1}e-5 /s in {} polygons on average, {:.1}e-5 /s at most",
            ticket.wind_error,
            cost.mean * 1e5,
            cost.polygons,
            cost.largest * 1e5
        ),
    );
}

fn day(time: Time) -> String {
    time.to_string().chars().take(10).collect()
}

fn size(ticket: &Ticket) -> String {
    let error = |digits: usize, unit: f64| {
        ticket
            .error
            .map_or_else(String::new, |e| format!(" ± {:.digits$}", e / unit))
    };
    match ticket.unit {
        "degrees" => format!("{:+.1}{} degrees", ticket.size, error(1, 1.0)),
        "s/day" => {
            let rate = ticket.size / 60.0;
            format!("{rate:+.2}{} min a day", error(2, 60.0))
        }
        "s" => format!("{:+.0}{} min", ticket.size / 60.0, error(0, 60.0)),
        "share" => format!("{:.1} %", 100.0 * ticket.size),
        "ratio" => format!("{:.0} times", ticket.size),
        _ => format!("x {:.3}{}", ticket.size, error(3, 1.0)),
    }
}
