//! For each test of the reports a series that is good and one that is bad, with the numbers of the manuals; and what must
//! not be taken for a fault: calms, rounding, fronts.
#![allow(
    clippy::unwrap_used,
    clippy::panic,
    reason = "tests may panic; their numbers are small"
)]

use gyremesh::check::Flag::{Fail, NotEvaluated, Pass, Suspect};
use gyremesh::check::{Flag, StationScreen, Test, screen, screen_all};
use gyremesh::report::{Moving, Part, Report, ReportTable, Rows};
use gyremesh::settings::CheckLimits;
use gyremesh::station::Position;
use gyremesh::time::Time;
use gyremesh::units::FromDirection;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

const KNOT: f64 = 1852.0 / 3600.0;

/// A report without gust and position, minutes after 2031-06-14T00Z; 0 m/s is calm.
fn report(minute: f64, direction: f64, speed: f64) -> Report {
    let start = Time::parse_rfc3339("2031-06-14T00:00:00Z").unwrap();
    #[expect(clippy::cast_possible_truncation, reason = "small test numbers")]
    let time = start.plus_micros((minute * 6e7) as i64);
    Report {
        station: 0,
        time,
        speed: Some(speed),
        direction: (speed > 0.0).then(|| FromDirection::new(direction.rem_euclid(360.0)).unwrap()),
        part: Part::Whole,
        gust: None,
        moving: None,
        correction: 0,
        place: (0, 1),
    }
}

fn screened(reports: &[Report], limits: &CheckLimits) -> ReportTable {
    let mut rows = Rows::default();
    for report in reports {
        rows.push(report);
    }
    let (mut table, _) = ReportTable::new(&[rows], 1);
    let listed = Position::new(46.0, -30.0).unwrap();
    screen_all(&mut table, &[listed], limits);
    table
}

/// Flags of a test, and the worst of all tests, of reports at equal intervals (minutes).
fn flags(test: Test, interval: f64, winds: &[(f64, f64)]) -> Vec<Flag> {
    let reports: Vec<Report> = (0..)
        .zip(winds)
        .map(|(k, &(direction, speed))| report(f64::from(k) * interval, direction, speed))
        .collect();
    let table = screened(&reports, &CheckLimits::default());
    (0..table.len()).map(|i| table.test_flag(i, test)).collect()
}

/// The worst of the flags.
fn worst(flags: &[Flag]) -> Flag {
    flags.iter().copied().max().unwrap()
}

/// A wind that varies as winds do: a slow swing and turbulence, to 1 degree and 0.1 m/s.
fn weather(n: usize, speed: f64, seed: u64) -> Vec<(f64, f64)> {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let (mut gust, mut turn) = (0.0, 0.0);
    (0..n)
        .map(|k| {
            gust = 0.7 * gust + rng.random_range(-1.0..1.0);
            turn = 0.7 * turn + rng.random_range(-1.0..1.0);
            let swing = (k as f64 / 70.0).sin();
            let direction: f64 = 240.0 + 30.0 * swing + 8.0 * turn;
            let speed: f64 = speed * (1.0 + 0.2 * swing + 0.12 * gust);
            (direction.round(), (speed.max(0.0) * 10.0).round() / 10.0)
        })
        .collect()
}

#[test]
fn ordinary_weather_passes_every_test() {
    for (interval, seed) in [(1.0, 1), (5.0, 2), (10.0, 3), (60.0, 4)] {
        let winds = weather(2000, 7.0, seed);
        for test in Test::ALL {
            let found = worst(&flags(test, interval, &winds));
            assert!(found <= Flag::Pass, "{test:?} {interval} min: {found:?}");
        }
    }
}

#[test]
fn timing_gap_of_more_than_an_hour() {
    let times = [0.0, 60.0, 130.0, 201.0];
    let reports = times.map(|t| report(t, 240.0, 5.0 + t / 100.0));
    let table = screened(&reports, &CheckLimits::default());
    let found: Vec<u8> = (0..4)
        .map(|i| table.test_flag(i, Test::TimingGap).value())
        .collect();
    assert_eq!(found, [2, 1, 1, 9]);
    // It says nothing of the report itself.
    assert_eq!(table.flag(3), Flag::Pass);
}

#[test]
fn location_of_reports_with_a_position() {
    let at = |latitude, longitude| {
        let moving = Moving {
            position: Some(Position::new(latitude, longitude).unwrap()),
            level: None,
        };
        Report {
            moving: Some(moving),
            ..report(latitude, 240.0, latitude / 10.0)
        }
    };
    let reports = [
        report(-1.0, 240.0, 5.0),
        at(0.0, 0.0),
        at(46.1, -30.0),
        at(46.2, -30.0),
    ];
    let found = |limits: &CheckLimits| -> Vec<u8> {
        let table = screened(&reports, limits);
        (0..4)
            .map(|i| table.test_flag(i, Test::Location).value())
            .collect()
    };
    assert_eq!(found(&CheckLimits::default()), [2, 4, 1, 3]);
    let anywhere = CheckLimits {
        displacement: None,
        ..CheckLimits::default()
    };
    assert_eq!(found(&anywhere), [2, 2, 2, 2]);
}

/// QARTOD: 20 and 40 m/s; the next report is waited for, and there is none after the last.
#[test]
fn spikes_of_the_manual() {
    let spike = |height: f64| {
        let mut winds = vec![(240.0, 5.0), (241.0, 5.5), (239.0, 5.2), (242.0, 4.8)];
        winds[2].1 += height;
        flags(Test::Spike, 10.0, &winds)
    };
    assert_eq!(spike(0.0), [NotEvaluated, Pass, Pass, NotEvaluated]);
    assert_eq!(spike(19.0), [NotEvaluated, Pass, Pass, NotEvaluated]);
    assert_eq!(spike(21.0), [NotEvaluated, Pass, Suspect, NotEvaluated]);
    assert_eq!(spike(41.0), [NotEvaluated, Pass, Fail, NotEvaluated]);
    // A vane that points the other way for one report, in 25 m/s.
    let mut turned = weather(100, 25.0, 3);
    turned[70].0 -= 180.0;
    let found = flags(Test::Spike, 10.0, &turned);
    assert_eq!((found[69], found[70], found[71]), (Pass, Fail, Pass));
    // An impossible report makes no spikes of its neighbours.
    let impossible = [(240.0, 5.0), (240.0, 468.0), (240.0, 5.0), (241.0, 5.1)];
    assert_eq!(worst(&flags(Test::Spike, 10.0, &impossible)), Pass);
    assert_eq!(worst(&flags(Test::GrossRange, 10.0, &impossible)), Fail);
}

/// QARTOD: 3 standard deviations of 8 h; WMO: steps up to 10 m/s are no doubt.
#[test]
fn rate_of_change_of_the_manual() {
    let step = |size: f64| {
        let mut winds = weather(100, 5.0, 9);
        winds.iter_mut().skip(60).for_each(|wind| wind.1 += size);
        let found = flags(Test::RateOfChange, 10.0, &winds);
        let others = found.iter().enumerate().filter(|(k, _)| *k != 60);
        assert!(others.map(|(_, f)| *f).max() <= Some(Flag::Pass));
        found[60]
    };
    assert_eq!(step(0.0), Flag::Pass);
    assert_eq!(step(8.0), Flag::Pass);
    assert_eq!(step(16.0), Flag::Suspect);
    // The first changes have nothing to be compared with.
    let early = flags(Test::RateOfChange, 10.0, &weather(8, 5.0, 9));
    assert_eq!(early[6..], [Flag::NotEvaluated, Flag::Pass]);
}

/// Eight points of the compass at 30 m/s: a step of 45 degrees is 23 m/s of u and v, and nothing happened.
#[test]
fn points_of_the_compass_make_no_changes() {
    let winds: Vec<(f64, f64)> = (0..300)
        .map(|k| {
            let direction = if k % 5 == 0 { 45.0 } else { 90.0 };
            (direction, f64::from(100 + k * 7 % 11) / 3.6)
        })
        .collect();
    for test in Test::ALL {
        let found = worst(&flags(test, 10.0, &winds));
        assert!(found <= Flag::Pass, "{test:?}: {found:?}");
    }
}

/// QARTOD: 3 equal reports are suspect, 5 fail; here if they last 20 and 30 minutes.
#[test]
fn flat_line_of_the_manual() {
    let mut winds = weather(100, 6.0, 5);
    for k in 60..70 {
        winds[k] = winds[60];
    }
    let found = flags(Test::FlatLine, 10.0, &winds);
    let mut expected = vec![Flag::Pass; 100];
    expected[62..64].fill(Flag::Suspect); // the third and fourth, 20 and 30 min
    expected[64..70].fill(Flag::Fail);
    assert_eq!(found, expected);
    // Reports of each minute repeat themselves now and then: five, but not for half an hour.
    let mut winds = weather(100, 6.0, 5);
    for k in 60..65 {
        winds[k] = winds[60];
    }
    assert_eq!(worst(&flags(Test::FlatLine, 1.0, &winds)), Flag::Pass);
}

#[test]
fn a_calm_spell_is_no_flat_line() {
    for calm in [(0.0, 0.0), (240.0, 0.4)] {
        let mut winds = weather(400, 4.0, 6);
        winds[100..300].fill(calm); // 33 h
        for test in Test::ALL {
            let found = worst(&flags(test, 10.0, &winds));
            assert!(found <= Flag::Pass, "{test:?} {calm:?}: {found:?}");
        }
    }
}

/// 10 degrees and 1 kt, each 1, 10 or 60 minutes: steady winds repeat themselves for hours.
#[test]
fn rounding_is_no_flat_line() {
    for (interval, seed) in [(1.0, 7), (10.0, 8), (60.0, 9)] {
        let mut rng = ChaCha8Rng::seed_from_u64(seed);
        let mut same = 0;
        let mut winds: Vec<(f64, f64)> = Vec::new();
        for k in 0..3000 {
            let drift = (f64::from(k) * interval / 500.0).sin();
            let direction: f64 =
                180.0 + 60.0 * drift + rng.random_range(-1.0..1.0) * (3.0 + interval / 4.0);
            let knots: f64 =
                10.0 + 6.0 * drift + rng.random_range(-0.5..0.5) * (1.0 + interval / 20.0);
            let wind = ((direction / 10.0).round() * 10.0, knots.round() * KNOT);
            same += u32::from(winds.last() == Some(&wind));
            winds.push(wind);
        }
        assert!(interval > 30.0 || same > 800, "{same}");
        for test in [Test::FlatLine, Test::StuckVane, Test::FrozenAnemometer] {
            let found = worst(&flags(test, interval, &winds));
            assert_eq!(found, Flag::Pass, "{test:?} {interval} min");
        }
    }
}

#[test]
fn stuck_vane_and_frozen_anemometer() {
    let stuck = |change: fn(&mut (f64, f64), (f64, f64))| {
        let mut winds = weather(200, 7.0, 12);
        let first = winds[60];
        winds[60..120].iter_mut().for_each(|w| change(w, first));
        winds
    };
    let vane = stuck(|wind, first| wind.0 = first.0);
    let found = flags(Test::StuckVane, 10.0, &vane);
    assert_eq!(worst(&found[..78]), Flag::Pass);
    assert_eq!((found[78], found[96]), (Flag::Suspect, Flag::Fail)); // 3 and 6 h
    assert_eq!(worst(&found[120..]), Flag::Pass);
    assert_eq!(
        worst(&flags(Test::FrozenAnemometer, 10.0, &vane)),
        Flag::Pass
    );
    let anemometer = stuck(|wind, first| wind.1 = first.1);
    let found = flags(Test::FrozenAnemometer, 10.0, &anemometer);
    assert_eq!(
        (found[77], found[78], found[96]),
        (Flag::Pass, Flag::Suspect, Flag::Fail)
    );
    assert_eq!(
        worst(&flags(Test::StuckVane, 10.0, &anemometer)),
        Flag::Pass
    );
    // Two directions in a row may be the same by chance.
    assert!(worst(&flags(Test::FlatLine, 10.0, &anemometer)) <= Flag::Suspect);
}

/// WMO: an hour of one-minute values varies by 0.5 m/s.
#[test]
fn persistence_of_one_minute_values() {
    let dull = |range: f64| -> Vec<(f64, f64)> {
        let winds = weather(200, 7.0, 13).into_iter().enumerate();
        winds
            .map(|(k, wind)| match k {
                60..150 => (wind.0, 6.0 + range * f64::from(u8::from(k % 7 == 0))),
                _ => wind,
            })
            .collect()
    };
    let found = flags(Test::Persistence, 1.0, &dull(0.3));
    assert_eq!(
        (found[119], found[121], found[155]),
        (Flag::Pass, Flag::Suspect, Flag::Pass)
    );
    assert_eq!(
        worst(&flags(Test::Persistence, 1.0, &dull(0.6))),
        Flag::Pass
    );
    assert_eq!(
        worst(&flags(Test::Persistence, 10.0, &dull(0.3))),
        Flag::NotEvaluated
    );
}

#[test]
fn agreement_of_gust_and_mean() {
    let with = |gust: f64| Report {
        gust: Some(gust),
        ..report(gust, 240.0, 8.0)
    };
    let no_direction = Report {
        direction: None,
        ..report(99.0, 240.0, 8.0)
    };
    let reports = [with(7.4), with(7.6), with(12.0), no_direction];
    let table = screened(&reports, &CheckLimits::default());
    let found: Vec<u8> = (0..4)
        .map(|i| table.test_flag(i, Test::Agreement).value())
        .collect();
    assert_eq!(found, [3, 1, 1, 1]);
    assert_eq!(table.flag(3), Flag::Pass);
}

/// EPA: 0.5 m/s in 12 h, where the station's own winds usually span more.
#[test]
fn attenuated_signal_of_half_a_day() {
    let mut winds = weather(600, 6.0, 14);
    for (k, wind) in winds.iter_mut().enumerate().skip(300).take(150) {
        wind.1 = 5.0 + 0.1 * (k % 4) as f64;
    }
    let found = flags(Test::AttenuatedSignal, 10.0, &winds);
    assert_eq!(worst(&found[..370]), Flag::Pass);
    assert_eq!(found[380], Flag::Suspect);
    assert_eq!(worst(&found[460..]), Flag::Pass);
    // A calm of two days and more.
    let mut winds = weather(900, 6.0, 14);
    winds[300..650].fill((0.0, 0.0));
    let found = flags(Test::AttenuatedSignal, 10.0, &winds);
    assert_eq!(
        (found[300 + 287], found[300 + 289]),
        (Flag::Pass, Flag::Suspect)
    );
}

/// 10 m/s and 120 degrees in ten minutes: suspect at most.
#[test]
fn a_front_passes_or_is_suspect() {
    for interval in [1.0, 5.0, 10.0] {
        let mut winds = weather(300, 5.0, 15);
        for wind in winds.iter_mut().skip(150) {
            *wind = (wind.0 + 120.0, wind.1 + 10.0);
        }
        for test in Test::ALL {
            let found = flags(test, interval, &winds);
            let raised = found.iter().filter(|&&f| f >= Flag::Suspect).count();
            assert!(worst(&found) <= Flag::Suspect && raised <= 1, "{test:?}");
        }
    }
}

#[test]
fn tests_that_are_off_say_nothing() {
    let limits = CheckLimits {
        off: vec![Test::GrossRange],
        ..CheckLimits::default()
    };
    let table = screened(&[report(0.0, 240.0, 468.0)], &limits);
    assert_eq!(table.flag(0), Flag::Pass);
    assert_eq!(table.test_flag(0, Test::GrossRange), Flag::NotEvaluated);
}

/// However a series is cut, each report has the same flags.
#[test]
fn cutting_a_series_changes_no_flag() {
    let mut winds = weather(500, 7.0, 16);
    winds[100].1 += 30.0;
    winds[250].1 += 25.0;
    for k in 300..320 {
        winds[k] = winds[300];
    }
    let reports: Vec<Report> = (0..)
        .zip(&winds)
        .map(|(k, w)| report(f64::from(k) * 10.0, w.0, w.1))
        .collect();
    let limits = CheckLimits::default();
    let whole = screened(&reports, &limits);
    assert_eq!(whole.flag(100), Flag::Suspect);
    for cut in (50..1000).step_by(50) {
        let mut screens = vec![StationScreen::default()];
        let mut before = ReportTable::default();
        let mut found = Vec::new();
        // Each window has the reports of the next 70 minutes in sight.
        for (start, end) in (0..5000).step_by(cut).map(|t| (t, t + cut)) {
            let time = |minute: usize| report(minute as f64, 0.0, 1.0).time;
            let sight = time(end + 70);
            let from = if start == 0 {
                time(0)
            } else {
                time(start + 70)
            };
            let mut rows = Rows::default();
            let new = reports.iter().filter(|r| r.time >= from && r.time < sight);
            new.for_each(|r| rows.push(r));
            let (mut table, _) =
                ReportTable::following(&[rows], 1, &before, time(start), time(end));
            screen(&mut table, &mut screens, &[], Some(&limits));
            found.extend(table.fresh(0).map(|i| (table.flag(i), table.tests(i))));
            before = table;
        }
        let expected: Vec<_> = (0..whole.len())
            .map(|i| (whole.flag(i), whole.tests(i)))
            .collect();
        assert!(found == expected, "windows of {cut} min");
    }
}
