#![expect(clippy::unwrap_used, reason = "a test may panic")]

use std::time::Duration;

use super::*;
use crate::report::{Part, Report, Rows};
use crate::units::FromDirection;

const MINUTE: i64 = 60_000_000;

/// One station; each report is (minute, speed, direction).
fn table(reports: &[(f64, Option<f64>, Option<f64>)]) -> ReportTable {
    let mut rows = Rows::default();
    for &(minute, speed, direction) in reports {
        #[expect(clippy::cast_possible_truncation, reason = "small test numbers")]
        let time = Time::from_micros((minute * MINUTE as f64) as i64);
        rows.push(&Report {
            station: 0,
            time,
            speed,
            direction: direction.and_then(FromDirection::new),
            part: Part::Whole,
            gust: None,
            moving: None,
            correction: 0,
            place: (0, 1),
        });
    }
    ReportTable::new(&[rows], 1).0
}

fn analysis(minutes: u64, method: AlignMethod) -> Analysis {
    Analysis {
        interval: Duration::from_secs(60 * minutes),
        method,
        ..Analysis::default()
    }
}

fn nearest(minutes: u64) -> AlignMethod {
    AlignMethod::Nearest {
        tolerance: Duration::from_secs(60 * minutes),
    }
}

fn run(table: &ReportTable, analysis: &Analysis) -> (WindBlock, AlignTally) {
    let sensors = StationSensors {
        errors: vec![SensorErrors::default()],
        height_factors: vec![Some(1.0)],
    };
    let mut aligner = Aligner::new(table, analysis, sensors);
    let block = aligner.next_block().unwrap_or_default();
    assert!(aligner.next_block().is_none());
    let tally = aligner.tally();
    assert!(tally.all.balances());
    assert_eq!(tally.all.received, table.len() as u64);
    (block, tally)
}

#[test]
fn the_nearest_report_within_the_tolerance_stands() {
    let reports = table(&[
        (1.0, Some(1.0), Some(270.0)),
        (4.0, Some(2.0), Some(270.0)),
        (9.0, Some(3.0), Some(270.0)),
        (13.0, Some(4.0), None),
        (20.0, None, None),
        (26.0, Some(5.0), Some(270.0)),
    ]);
    let (block, tally) = run(&reports, &analysis(5, nearest(2)));
    let minutes: Vec<i64> = block.times.iter().map(|t| t.micros() / MINUTE).collect();
    assert_eq!(minutes, [0, 5, 10, 25]);
    assert_eq!(block.u, [1.0, 2.0, 3.0, 5.0]);
    assert_eq!(tally.all.passed, 4);
    assert_eq!(tally.all.count(Reason::NoDirection), 1);
    assert_eq!(tally.all.count(Reason::NoSpeed), 1);
}

#[test]
fn of_two_equally_near_the_earlier_and_the_other_is_told() {
    let reports = table(&[
        (9.0, Some(1.0), Some(270.0)),
        (11.0, Some(2.0), Some(270.0)),
    ]);
    let (block, tally) = run(&reports, &analysis(10, nearest(5)));
    assert_eq!(block.u, [1.0]);
    assert_eq!(tally.all.count(Reason::NotNearest), 1);
}

#[test]
fn the_window_ends_at_the_analysis_time() {
    let reports = table(&[
        (0.0, Some(8.0), Some(270.0)),
        (5.0, Some(2.0), Some(270.0)),
        (10.0, Some(4.0), Some(270.0)),
        (25.0, Some(4.0), Some(90.0)),
    ]);
    let mean = |least_reports| AlignMethod::VectorMean {
        window: Duration::from_mins(10),
        least_reports,
    };
    let (block, _) = run(&reports, &analysis(10, mean(1)));
    let minutes: Vec<i64> = block.times.iter().map(|t| t.micros() / MINUTE).collect();
    assert_eq!(minutes, [0, 10, 30]);
    assert_eq!(block.u, [8.0, 3.0, -4.0]);
    let (block, tally) = run(&reports, &analysis(10, mean(2)));
    assert_eq!(block.flag[0], Flag::Missing);
    assert_eq!(tally.all.passed, 2);
    assert_eq!(tally.all.count(Reason::TooFewInWindow), 2);
}

#[test]
fn a_stray_year_costs_one_time() {
    let far = 60.0 * 24.0 * 36_500.0;
    let reports = table(&[(0.0, Some(1.0), Some(270.0)), (far, Some(1.0), Some(270.0))]);
    let (block, _) = run(&reports, &analysis(5, nearest(2)));
    assert_eq!(block.times.len(), 2);
}

#[test]
fn the_period_asked_for_limits_the_times() {
    let reports = table(&[
        (0.0, Some(1.0), Some(270.0)),
        (10.0, Some(2.0), Some(270.0)),
        (20.0, Some(3.0), Some(270.0)),
    ]);
    let mut analysis = analysis(10, nearest(2));
    analysis.from = Some(Time::from_micros(MINUTE));
    analysis.to = Some(Time::from_micros(19 * MINUTE));
    let (block, tally) = run(&reports, &analysis);
    assert_eq!(block.u, [2.0]);
    assert_eq!(tally.all.count(Reason::OutsidePeriod), 2);
}

#[test]
fn calm_is_a_wind_of_zero_with_the_error_of_its_threshold() {
    let reports = table(&[(0.0, Some(0.0), None)]);
    let (block, _) = run(&reports, &analysis(10, nearest(2)));
    assert_eq!((block.u[0], block.flag[0]), (0.0, Flag::NotEvaluated));
    assert!((block.var_u[0] - 0.0625).abs() < 1e-12);
    let variance = block.of_station(0).map(|c| block.var_v[c]).next().unwrap();
    assert!((variance - 0.0625).abs() < 1e-12);
}

#[test]
fn linear_needs_a_report_on_both_sides() {
    let reports = table(&[
        (0.0, Some(2.0), Some(270.0)),
        (8.0, Some(6.0), Some(270.0)),
        (12.0, Some(8.0), Some(270.0)),
        (40.0, Some(8.0), Some(270.0)),
    ]);
    let linear = AlignMethod::Linear {
        tolerance: Duration::from_mins(10),
    };
    let (block, tally) = run(&reports, &analysis(4, linear));
    let minutes: Vec<i64> = block.times.iter().map(|t| t.micros() / MINUTE).collect();
    let values: Vec<(i64, f64, f32)> = (0..minutes.len())
        .filter(|&t| block.flag[t] != Flag::Missing)
        .map(|t| (minutes[t], block.u[t], block.age[t]))
        .collect();
    assert_eq!(
        values,
        [
            (0, 2.0, 0.0),
            (4, 4.0, 240.0),
            (8, 6.0, 0.0),
            (12, 8.0, 0.0),
            (40, 8.0, 0.0)
        ]
    );
    assert_eq!(tally.all.passed, 4);
}

#[test]
fn values_know_their_age_and_height() {
    let reports = table(&[(1.0, Some(4.0), Some(270.0))]);
    let sensors = |factor| StationSensors {
        errors: vec![SensorErrors::default()],
        height_factors: vec![factor],
    };
    let analysis = analysis(5, nearest(2));
    let block = Aligner::new(&reports, &analysis, sensors(Some(1.5)))
        .next_block()
        .unwrap();
    assert_eq!((block.u[0], block.age[0]), (6.0, 60.0));
    // 0.25 m/s along the wind, times the factor.
    assert!((block.var_u[0].sqrt() - 0.375).abs() < 1e-12);
    let mut aligner = Aligner::new(&reports, &analysis, sensors(None));
    assert!(aligner.next_block().is_none());
    assert_eq!(aligner.tally().all.count(Reason::NoHeightFactor), 1);
}
