use super::super::rows::{Part, Report};
use super::*;
use crate::tally::Reason;

fn report(station: u32, second: i64, speed: Option<f64>, part: Part) -> Report {
    Report {
        station,
        time: Time::from_micros(second * 1_000_000),
        speed,
        direction: FromDirection::new(90.0).filter(|_| part != Part::Speed),
        part,
        gust: None,
        moving: None,
        correction: 0,
        place: (0, 1),
    }
}

fn table(reports: &[Report]) -> (ReportTable, Tally) {
    let mut rows = Rows::default();
    for (line, report) in (1..).zip(reports) {
        rows.push(&Report {
            place: (0, line),
            ..*report
        });
    }
    // Cut anywhere: parts follow each other.
    let mut first = Rows::default();
    if let Some(one) = reports.first() {
        first.push(&Report {
            place: (0, 1),
            ..*one
        });
        rows = Rows::default();
        for (line, report) in (2..).zip(&reports[1..]) {
            rows.push(&Report {
                place: (0, line),
                ..*report
            });
        }
    }
    let (table, tally) = ReportTable::new(&[first, rows], 3);
    assert!(tally.balances());
    assert_eq!(tally.received, reports.len() as u64);
    assert_eq!(tally.passed, table.len() as u64);
    (table, tally)
}

#[test]
fn sorts_and_counts_repeats() {
    let (table, tally) = table(&[
        report(1, 20, Some(1.0), Part::Whole),
        report(0, 10, Some(2.0), Part::Whole),
        report(1, 10, Some(3.0), Part::Whole),
        report(1, 20, Some(1.0), Part::Whole), // the same again
        report(0, 10, Some(4.0), Part::Whole), // another speed: this one holds
    ]);
    assert_eq!(tally.count(Reason::Repeated), 1);
    assert_eq!(tally.count(Reason::Replaced), 1);
    assert_eq!(table.of_station(0), 0..1);
    assert_eq!(table.of_station(1), 1..3);
    assert_eq!(table.of_station(2), 3..3);
    assert_eq!(table.speed(0), Some(4.0));
    assert_eq!(table.origin(0), (0, 5));
    assert!(table.times()[1] < table.times()[2]);
    let conflict = table.conflicts()[0];
    assert_eq!((conflict.set_aside, conflict.holds), ((0, 2), (0, 5)));
}

#[test]
fn a_correction_holds_wherever_it_stands() {
    let corrected = Report {
        correction: 2,
        ..report(0, 10, Some(7.0), Part::Whole)
    };
    let first = Report {
        correction: 1,
        ..report(0, 10, Some(6.0), Part::Whole)
    };
    let (table, tally) = table(&[corrected, report(0, 10, Some(5.0), Part::Whole), first]);
    assert_eq!(table.speed(0), Some(7.0));
    assert_eq!(tally.count(Reason::Corrected), 2);
    assert!(table.conflicts().is_empty());
}

#[test]
fn a_row_without_a_wind_does_not_wipe_out_one_that_has_it() {
    let empty = Report {
        direction: None,
        ..report(0, 10, None, Part::Whole)
    };
    for rows in [
        [empty, report(0, 10, Some(5.0), Part::Whole)],
        [report(0, 10, Some(5.0), Part::Whole), empty],
    ] {
        let (table, tally) = table(&rows);
        assert_eq!(table.speed(0), Some(5.0));
        assert_eq!(tally.count(Reason::Emptier), 1);
        assert!(table.conflicts().is_empty());
    }
}

#[test]
fn speed_and_direction_of_two_files_become_one_report() {
    let (table, tally) = table(&[
        report(0, 10, Some(5.0), Part::Speed),
        report(0, 20, Some(6.0), Part::Speed),
        report(0, 10, None, Part::Direction),
        report(0, 30, None, Part::Direction),
    ]);
    assert_eq!(tally.count(Reason::Joined), 1);
    assert_eq!(table.content(0), Content::Wind);
    assert_eq!(table.content(1), Content::SpeedOnly);
    assert_eq!(table.content(2), Content::Nothing);
}

#[test]
fn levels_are_different_reports() {
    let at = |level| Report {
        moving: Some(Moving {
            position: None,
            level: Some(level),
        }),
        ..report(0, 10, Some(level), Part::Whole)
    };
    let (table, _) = table(&[
        at(850.0),
        at(1000.0),
        at(850.0),
        report(0, 10, Some(1.0), Part::Whole),
    ]);
    let levels: Vec<Option<f64>> = (0..table.len())
        .map(|i| table.moving(i).and_then(|m| m.level))
        .collect();
    assert_eq!(levels, [None, Some(850.0), Some(1000.0)]);
}
