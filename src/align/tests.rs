#![expect(clippy::unwrap_used, reason = "a test may panic")]

use std::time::Duration;

use super::*;
use crate::report::{Part, Report, Rows};
use crate::units::FromDirection;

const MINUTE: i64 = 60_000_000;

/// One station; each report is (minute, speed, direction).
fn table(reports: &[(f64, Option<f64>, Option<f64>)]) -> ReportTable {
    ReportTable::new(&[rows(reports)], 1).0
}

fn rows(reports: &[(f64, Option<f64>, Option<f64>)]) -> Rows {
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
    rows
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

const ALL: Range<i64> = i64::MIN..i64::MAX;

fn sensors(factor: Option<f64>) -> StationSensors {
    StationSensors {
        errors: vec![SensorErrors::default()],
        height_factors: vec![factor],
    }
}

/// The winds at all analysis times in one block, and the books.
fn aligned(
    table: &ReportTable,
    analysis: &Analysis,
    sensors: &StationSensors,
) -> (WindBlock, AlignBooks) {
    let aligner = Aligner::new(table, analysis, sensors, ALL);
    let times = aligner.grid().blocks(BLOCK_TIMES).concat();
    let block = aligner.align(times);
    let mut books = AlignBooks::default();
    books.add(&aligner, None);
    assert!(books.all.balances());
    assert_eq!(books.all.received, table.len() as u64);
    (block, books)
}

fn run(table: &ReportTable, analysis: &Analysis) -> (WindBlock, AlignBooks) {
    aligned(table, analysis, &sensors(Some(1.0)))
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
    let analysis = analysis(5, nearest(2));
    let (block, _) = aligned(&reports, &analysis, &sensors(Some(1.5)));
    assert_eq!((block.u[0], block.age[0]), (6.0, 60.0));
    // 0.25 m/s along the wind, times the factor.
    assert!((block.var_u[0].sqrt() - 0.375).abs() < 1e-12);
    let (block, books) = aligned(&reports, &analysis, &sensors(None));
    assert!(block.times.is_empty());
    assert_eq!(books.all.count(Reason::NoHeightFactor), 1);
}

/// Reports that come in two windows are aligned as in one.
#[test]
fn a_cut_between_windows_changes_nothing() {
    let minutes = [1.0, 4.0, 9.0, 18.0, 21.0, 26.0, 58.0, 61.0, 70.0, 75.0];
    let reports: Vec<(f64, Option<f64>, Option<f64>)> = minutes
        .iter()
        .zip([1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0])
        .map(|(&minute, speed)| (minute, Some(speed), Some(270.0)))
        .collect();
    let mean = AlignMethod::VectorMean {
        window: Duration::from_mins(13),
        least_reports: 2,
    };
    let linear = AlignMethod::Linear {
        tolerance: Duration::from_mins(6),
    };
    for method in [nearest(5), nearest(2), linear, mean] {
        let analysis = analysis(5, method);
        let (whole, books) = run(&table(&reports), &analysis);
        let sensors = sensors(Some(1.0));
        for cut in 1..14_i64 {
            // Analysis times before `cut` in the first window, which has all reports that matter to them.
            let reach = 14.0;
            let (end, carried) = ((cut * 5) as f64 + reach, (cut * 5) as f64 - reach);
            let first: Vec<_> = reports.iter().copied().filter(|r| r.0 < end).collect();
            let more: Vec<_> = reports.iter().copied().filter(|r| r.0 >= end).collect();
            let first = table(&first);
            #[expect(clippy::cast_possible_truncation, reason = "small test numbers")]
            let from = Time::from_micros(carried as i64 * MINUTE);
            let (second, _) = ReportTable::following(&[rows(&more)], 1, &first, from, from);
            let mut cut_books = AlignBooks::default();
            let one = Aligner::new(&first, &analysis, &sensors, i64::MIN..cut);
            let mut u = one.align(one.grid().blocks(BLOCK_TIMES).concat()).u;
            cut_books.add(&one, Some(from));
            let two = Aligner::new(&second, &analysis, &sensors, cut..i64::MAX);
            let again = first.of_station_from(0, from);
            let used = second
                .of_station(0)
                .zip(again)
                .filter(|&(_, i)| one.is_used(i));
            two.mark_used(used.map(|(i, _)| i));
            u.extend(two.align(two.grid().blocks(BLOCK_TIMES).concat()).u);
            cut_books.add(&two, None);
            assert_eq!(u, whole.u, "{method:?} {cut}");
            assert_eq!(cut_books.all, books.all, "{method:?} {cut}");
            assert_eq!(cut_books.period, books.period, "{method:?} {cut}");
        }
    }
}
