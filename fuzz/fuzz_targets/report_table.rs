//! Any bytes as a table of reports. The first three bytes choose the format, counted from the sign `0`.
#![no_main]

mod common;

use std::time::Duration;

use gyremesh::input::{Label, RepeatedHour, TextFormat, TimeForm, TimeFormat, Zone};
use gyremesh::report::{Columns, ReportForm, ReportFormat, WindColumns, read_bytes};
use gyremesh::units::North;
use gyremesh::units::SpeedUnit;
use libfuzzer_sys::fuzz_target;

/// Takes a number of 0 to `of - 1` off a choice.
fn take(choice: &mut u8, of: u8) -> u8 {
    let taken = *choice % of;
    *choice /= of;
    taken
}

fn text(mut choice: u8) -> TextFormat {
    TextFormat {
        delimiter: [None, Some(';'), Some('\t'), Some('|'), Some(',')]
            [usize::from(take(&mut choice, 5))],
        decimal_comma: take(&mut choice, 2) == 1,
        latin1: take(&mut choice, 2) == 1,
        skip_lines: u64::from(take(&mut choice, 2)),
        missing: match take(&mut choice, 2) {
            0 => Vec::new(),
            _ => vec!["999".into(), "-".into()],
        },
    }
}

fn wind(choice: u8) -> WindColumns {
    let two = |direction: &str, speed: &str| WindColumns::DirectionSpeed {
        direction: direction.into(),
        speed: speed.into(),
    };
    match choice {
        0 => two("direction", "speed"),
        1 => WindColumns::Components {
            eastward: "u".into(),
            northward: "v".into(),
        },
        2 => WindColumns::Speed {
            speed: "speed".into(),
        },
        3 => WindColumns::Direction {
            direction: "direction".into(),
        },
        4 => two("{station}_dir", "{station}_speed"),
        5 => WindColumns::Speed {
            speed: "{station}".into(),
        },
        _ => WindColumns::Metar {
            report: "report".into(),
        },
    }
}

fn columns(mut choice: u8) -> (Columns, North) {
    let layout = take(&mut choice, 8);
    let wind = wind(layout);
    let named = |name: &str| Some(name.to_string());
    let more = take(&mut choice, 2) == 1;
    let north = if take(&mut choice, 2) == 1 {
        North::Magnetic
    } else {
        North::True
    };
    let columns = Columns {
        station: named("station").filter(|_| !wind.is_wide() && layout != 7),
        time: match layout {
            7 => Vec::new(),
            _ if take(&mut choice, 2) == 1 => vec!["date".into(), "time".into()],
            _ => vec!["time".into()],
        },
        wind,
        gust: named("gust").filter(|_| more),
        latitude: named("latitude").filter(|_| more),
        longitude: named("longitude").filter(|_| more),
        level: named("level").filter(|_| more),
        scalars: Vec::new(),
    };
    (columns, north)
}

fn time(mut choice: u8) -> TimeFormat {
    TimeFormat {
        form: match take(&mut choice, 5) {
            0 => TimeForm::Rfc3339,
            1 => TimeForm::Compact,
            2 => TimeForm::EpochSeconds,
            3 => TimeForm::EpochMilliseconds,
            _ => TimeForm::Pattern("%d.%m.%Y %H:%M".into()),
        },
        zone: match take(&mut choice, 4) {
            0 => Zone::InText,
            1 => Zone::Fixed(0),
            2 => Zone::Fixed(8 * 3600),
            _ => Zone::parse("Europe/Berlin").expect("a zone"),
        },
        label: [Label::End, Label::Middle, Label::Start][usize::from(take(&mut choice, 3))],
        repeated_hour: RepeatedHour::Second,
        averaging: Duration::from_mins(10),
    }
}

fuzz_target!(|data: &[u8]| {
    let [a, b, c, bytes @ ..] = data else {
        return;
    };
    let [a, b, c] = [a, b, c].map(|choice| choice.wrapping_sub(b'0'));
    let (columns, north) = columns(b);
    let format = ReportFormat {
        form: ReportForm::Table(columns),
        text: text(a),
        time: time(c),
        speed_unit: SpeedUnit::KilometrePerHour,
        north,
        level_factor: 100.0,
        reference: common::reference(),
    };
    let network = common::network();
    let outcome = read_bytes(bytes, "fuzz", &format, &network);
    common::balance(&outcome, &network);
});
