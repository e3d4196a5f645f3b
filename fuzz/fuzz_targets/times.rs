//! One time: the first sign chooses form and zone, counted from `0`; the rest of its line is a pattern, and the next
//! line the time.
#![no_main]

mod common;

use gyremesh::input::{TextFormat, TimeForm, TimeFormat, Zone};
use gyremesh::report::{ReportFormat, read_bytes};
use gyremesh::time::Time;
use libfuzzer_sys::fuzz_target;

fuzz_target!(|text: &str| {
    let Some((pattern, time)) = text.split_once('\n') else {
        return;
    };
    let mut signs = pattern.chars();
    let choice = signs
        .next()
        .map_or(0, |sign| (sign as usize).wrapping_sub('0' as usize));
    let forms = [
        TimeForm::Pattern(signs.as_str().into()),
        TimeForm::Rfc3339,
        TimeForm::Compact,
        TimeForm::EpochSeconds,
        TimeForm::EpochMilliseconds,
    ];
    let zones = ["UTC", "-09:30", "Europe/Berlin", "Australia/Lord_Howe"];
    let format = ReportFormat {
        text: TextFormat {
            delimiter: Some('|'),
            ..TextFormat::default()
        },
        time: TimeFormat {
            form: forms[choice % 5].clone(),
            zone: Zone::parse(zones[choice / 5 % 4]).expect("a zone"),
            ..TimeFormat::default()
        },
        ..ReportFormat::default()
    };
    let time: String = time.chars().filter(|c| !"|\n\"".contains(*c)).collect();
    // Twice: the reader remembers the last time.
    let table =
        format!("time|station|direction|speed\n{time}|A|270|5\n{time}|B|90|5\n{time}|A|270|5\n");
    let network = common::network();
    let outcome = read_bytes(table.as_bytes(), "fuzz", &format, &network);
    let table = common::balance(&outcome, &network);
    assert_eq!(outcome.tally.received, 3);
    assert!(matches!(table.len(), 0 | 2));
    if let Some((first, last)) = table.period() {
        assert_eq!(first, last);
        assert_eq!(Time::parse_rfc3339(&first.to_string()), Ok(first));
    }
});
