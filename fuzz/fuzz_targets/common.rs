//! What the targets that read reports share.
#![allow(dead_code, reason = "each target uses a part of it")]

use gyremesh::check::{StationScreen, StationSums, screen};
use gyremesh::report::{ReadOutcome, ReportTable, Rows};
use gyremesh::settings::CheckLimits;
use gyremesh::station::{Network, Position, Station};
use gyremesh::time::Time;
use gyremesh::units::{FromDirection, SpeedUnit};

/// Four stations: plain, with its own unit and an alias, moved away in 2031, with a code-form name.
///
/// # Panics
/// Never: the positions are good.
pub fn network() -> Network {
    let station = |id: &str, latitude, longitude| {
        Station::new(id, Position::new(latitude, longitude).expect("in range"))
    };
    let mut knots = station("B", 46.0, -29.7);
    knots.site.speed_unit = Some(SpeedUnit::Knot);
    knots.site.declination = Some(-11.5);
    knots.aliases = vec!["Bee Hill".into(), "90002".into()];
    let mut moved = station("C", 46.2, -29.85);
    moved.valid_to = Time::parse_rfc3339("2031-07-01T00:00:00Z").ok();
    let mut coded = station("QXAA", 46.3, -29.5);
    coded.aliases = vec!["90001".into()];
    Network::new(vec![station("A", 46.0, -30.0), knots, moved, coded])
        .with_not_asked_for(vec!["D".into()])
}

/// A time that day and hour can be near to.
pub fn reference() -> Option<Time> {
    Time::parse_rfc3339("2031-06-14T12:00:00Z").ok()
}

/// The books balance from the bytes to the table, and no value in it is none.
///
/// # Panics
/// If they do not.
pub fn balance(outcome: &ReadOutcome, network: &Network) -> ReportTable {
    assert!(outcome.tally.balances(), "{:?}", outcome.tally);
    let by_file: u64 = outcome.files.iter().map(|f| f.tally.received).sum();
    assert_eq!(by_file, outcome.tally.received);
    let rows: usize = outcome.rows.iter().map(Rows::len).sum();
    assert_eq!(rows as u64, outcome.tally.passed);

    let (mut table, repeats) = ReportTable::new(&outcome.rows, network.len());
    assert!(repeats.balances(), "{repeats:?}");
    assert_eq!(repeats.received, rows as u64);
    assert_eq!(repeats.passed, table.len() as u64);
    let mut screens = vec![StationScreen::default(); network.len()];
    screen(&mut table, &mut screens, &[], Some(&CheckLimits::default()));
    let mut reports = 0;
    for station in 0..network.len() {
        let mut sums = StationSums::default();
        sums.add(&table, station);
        reports += sums.reading(screens[station].rounding()).reports;
        let of_station = table.of_station(station);
        assert!(table.times()[of_station.clone()].is_sorted());
        for i in of_station {
            assert!(table.speed(i).is_none_or(|speed| speed >= 0.0));
            let direction = table.direction(i).map(FromDirection::degrees);
            assert!(direction.is_none_or(|d| d > 0.0 && d <= 360.0));
        }
    }
    assert_eq!(reports, table.len() as u64);
    table
}
