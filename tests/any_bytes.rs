//! Any bytes at all: no reader panics, and its books balance. A fixed seed, so that a failure comes back;
//! `PROPTEST_RNG_SEED` and `PROPTEST_CASES` override it. The fuzz targets look further.
#![allow(clippy::unwrap_used, clippy::panic, reason = "tests may panic")]

mod common;

use gyremesh::input::{TextFormat, TimeForm, TimeFormat, Zone};
use gyremesh::report::{
    Columns, ReportForm, ReportFormat, ReportTable, WindColumns, metars, read_bytes, synops,
};
use gyremesh::time::Time;
use gyremesh::units::North;
use proptest::prelude::*;
use proptest::test_runner::RngSeed;

fn config() -> ProptestConfig {
    let default = ProptestConfig::default();
    ProptestConfig {
        rng_seed: match default.rng_seed {
            RngSeed::Random => RngSeed::Fixed(20_260_613),
            seed @ RngSeed::Fixed(_) => seed,
        },
        failure_persistence: None,
        ..default
    }
}

/// One of the ways a table may be written.
fn format(kind: u8) -> ReportFormat {
    let wind = match kind % 5 {
        0 => Columns::default().wind,
        1 => WindColumns::Speed {
            speed: "speed".into(),
        },
        2 => WindColumns::Components {
            eastward: "direction".into(),
            northward: "speed".into(),
        },
        3 => WindColumns::DirectionSpeed {
            direction: "{station}_d".into(),
            speed: "{station}_s".into(),
        },
        _ => WindColumns::Metar {
            report: "speed".into(),
        },
    };
    let time = match kind % 4 {
        0 => TimeForm::Rfc3339,
        1 => TimeForm::Compact,
        2 => TimeForm::EpochSeconds,
        _ => TimeForm::Pattern("%d.%m.%Y %H:%M".into()),
    };
    ReportFormat {
        form: match kind % 11 {
            9 => ReportForm::Metar,
            10 => ReportForm::Synop,
            _ => ReportForm::Table(Columns {
                wind,
                ..Columns::default()
            }),
        },
        text: TextFormat {
            delimiter: [None, Some(';'), Some('\t')][usize::from(kind % 3)],
            decimal_comma: kind.is_multiple_of(7),
            latin1: kind.is_multiple_of(2),
            skip_lines: u64::from(kind % 3 == 1),
            missing: vec![],
        },
        time: TimeFormat {
            form: time,
            zone: Zone::parse(["UTC", "+08:00", "America/New_York"][usize::from(kind % 3)])
                .unwrap(),
            ..TimeFormat::default()
        },
        north: if kind.is_multiple_of(6) {
            North::Magnetic
        } else {
            North::True
        },
        reference: Some(Time::from_micros(1_700_000_000_000_000)),
        ..ReportFormat::default()
    }
}

fn reads(bytes: &[u8], kind: u8) {
    let network = common::network(&[(46.0, 7.0), (46.0, 8.0), (47.0, 7.5)]);
    let outcome = read_bytes(bytes, "bytes", &format(kind), &network);
    assert!(outcome.tally.balances(), "{:?}", outcome.tally);
    let (table, tally) = ReportTable::new(&outcome.rows, network.len());
    assert!(tally.balances());
    assert_eq!(tally.received, outcome.tally.passed);
    for i in 0..table.len() {
        assert!(
            table
                .speed(i)
                .is_none_or(|speed| speed >= 0.0 && speed.is_finite())
        );
        assert!(
            table
                .wind(i)
                .is_none_or(|wind| wind.u.is_finite() && wind.v.is_finite())
        );
    }
}

proptest! {
    #![proptest_config(config())]

    #[test]
    fn bytes_of_any_kind(bytes in proptest::collection::vec(any::<u8>(), 0..400), kind in any::<u8>()) {
        reads(&bytes, kind);
    }

    /// Text that looks like a table: the right header, fields that are nearly right.
    #[test]
    fn nearly_tables(
        kind in any::<u8>(),
        delimiter in "[,;\t]",
        rows in proptest::collection::vec(
            ("S00[0-3]|\"S001|NIL", "20[0-9]{2}-[01][0-9]-[0-3][0-9]T[0-9:]{0,8}Z?|[0-9]{10,13}|[0-9.: ]{0,16}",
             "-?[0-9]{0,3}[.,]?[0-9]?|[A-Za-z ]{0,9}|///|[0-9]{5}KT", "-?[0-9]{0,3}(\\.[0-9]{0,4})?|NA|[A-Z0-9 =]{0,30}"),
            0..20,
        ),
        end in "\n|\r\n|\r\r\n",
    ) {
        let mut text = ["time", "station", "direction", "speed", "S000_d", "S000_s"].join(&delimiter) + &end;
        for (station, time, direction, speed) in rows {
            text += &[&*time, &*station, &*direction, &*speed, &*direction, &*speed].join(&delimiter);
            text += &end;
        }
        reads(text.as_bytes(), kind);
    }

    #[test]
    fn nearly_code_forms(text in "(METAR |SPECI |AAXX 1[0-9]{4} )?([A-Z]{4}|1[0-9]{4}) [0-9Z/ GKTMPSVRB=\n]{0,60}") {
        prop_assert!(metars(&text).count() <= text.len() + 1);
        prop_assert!(synops(&text).count() <= text.len() + 1);
    }
}
