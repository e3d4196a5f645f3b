#![expect(clippy::unwrap_used, reason = "a test may panic")]

use super::*;

fn nearest(day: u8, hour: u8, minute: u8, reference: &str) -> String {
    DayTime::new(day, hour, minute)
        .unwrap()
        .nearest(Time::parse_rfc3339(reference).unwrap())
        .unwrap()
        .to_string()
}

#[test]
fn day_and_hour_take_month_and_year_from_the_reference() {
    let cases = [
        ((17, 12), "2023-01-17T12:05:02Z", "2023-01-17T12:00:00Z"),
        // A correction that came the next day.
        ((17, 12), "2023-01-18T09:43:00Z", "2023-01-17T12:00:00Z"),
        // Over the ends of month and year, both ways.
        ((31, 23), "2023-01-01T00:10:00Z", "2022-12-31T23:00:00Z"),
        ((1, 0), "2022-12-31T23:55:00Z", "2023-01-01T00:00:00Z"),
        ((30, 18), "2023-05-01T06:00:00Z", "2023-04-30T18:00:00Z"),
        ((28, 23), "2023-03-01T00:30:00Z", "2023-02-28T23:00:00Z"),
        // Leap years: 2024 and 2000 are, 2023 and 1900 are not, so 29 is January's (30 days) or March's (28 days).
        ((29, 23), "2024-03-01T00:30:00Z", "2024-02-29T23:00:00Z"),
        ((29, 23), "2000-03-01T00:30:00Z", "2000-02-29T23:00:00Z"),
        ((29, 0), "2023-03-01T00:30:00Z", "2023-03-29T00:00:00Z"),
        ((29, 0), "1900-03-01T00:30:00Z", "1900-03-29T00:00:00Z"),
        // February and April have no 31: 31 January is 29 days back, 31 March is 30 days ahead.
        ((31, 0), "2023-03-01T00:00:00Z", "2023-01-31T00:00:00Z"),
        ((31, 0), "2023-04-20T00:00:00Z", "2023-03-31T00:00:00Z"),
        // 24:00 is the end of the day, here of the year.
        ((31, 24), "2022-12-31T23:50:00Z", "2023-01-01T00:00:00Z"),
        // 15 days either way: the earlier.
        ((15, 0), "2023-04-30T00:00:00Z", "2023-04-15T00:00:00Z"),
    ];
    for ((day, hour), reference, expected) in cases {
        assert_eq!(
            nearest(day, hour, 0, reference),
            expected,
            "{day} {hour} at {reference}"
        );
    }
    assert_eq!(
        nearest(22, 2, 53, "2022-10-22T03:00:00Z"),
        "2022-10-22T02:53:00Z"
    );
}

#[test]
fn days_and_times_that_do_not_exist_are_refused() {
    for (day, hour, minute) in [(0, 0, 0), (32, 0, 0), (1, 25, 0), (1, 24, 1), (1, 0, 60)] {
        assert!(DayTime::new(day, hour, minute).is_none());
    }
    for text in ["", "1", "17121", "+1+2", "2202é", "220253Z"] {
        assert!(DayTime::parse(text).is_none(), "{text}");
    }
    // Outside the calendar, but no panic.
    let first = DayTime::new(1, 0, 0).unwrap();
    assert!(first.nearest(Time::from_micros(i64::MAX)).is_none());
    assert!(first.nearest(Time::from_micros(i64::MIN)).is_none());
}

#[test]
fn a_bound_is_the_figure_above_the_one_in_the_group() {
    let speed = CodedSpeed::new(49, SpeedUnit::MetrePerSecond, true);
    assert_eq!((speed.value, speed.at_least), (50.0, true));
}

#[test]
fn errors_say_what_was_found_and_what_is_expected() {
    let error = |word| CodeError {
        word,
        expected: "day and time ddhhmmZ",
    };
    assert_eq!(
        error("99\u{7}9999Z").to_string(),
        "`99\\u{7}9999Z` cannot be read (day and time ddhhmmZ expected)"
    );
    assert_eq!(
        error("").to_string(),
        "the report ends early (day and time ddhhmmZ expected)"
    );
}

fn pieces(text: &str) -> Vec<(u64, &str, u64)> {
    Pieces::new(text, |line| line.starts_with("AAXX"))
        .map(|piece| (piece.line, piece.text, piece.bulletin))
        .collect()
}

#[test]
fn reports_end_at_equals_signs_bulletins_and_new_starts() {
    let text = "\u{1}\r\r\n123\r\r\nSMRO01 YRBK 171200\r\r\nAAXX 17121\r\r\n\r\r\n15015 a\r\r\nb= 15020 c=\r\r\n\u{3}\
        \u{1}\r\r\n12345\r\r\n\r\r\nSMRO01 YRBK 171200 CCA\r\r\nAAXX 17121 15015 d\r\r\nAAXX 17181 15090 e\r\r\n\u{3}";
    assert_eq!(
        pieces(text),
        [
            (4, "AAXX 17121\r\r\n\r\r\n15015 a\r\r\nb", 1),
            (7, "15020 c", 1),
            (12, "AAXX 17121 15015 d", 2),
            (13, "AAXX 17181 15090 e", 2),
        ]
    );
    let framed = "ZCZC 042\nSMRO01 YRBK 171200\n15015 a=\nNNNN\n\n";
    assert_eq!(pieces(framed), [(3, "15015 a", 1)]);
}

#[test]
fn text_without_equals_signs_has_one_report_a_line() {
    assert_eq!(
        pieces("\u{feff}a b\r\n\n c \r\rd\n12345\n12345"),
        [
            (1, "a b", 0),
            (3, "c \r\rd", 0),
            (4, "12345", 0),
            (5, "12345", 0)
        ]
    );
    assert_eq!(pieces(" \r\n\u{3}"), []);
}

#[test]
fn headings_are_told_from_reports() {
    let heading = Heading::parse("SMRO01 YRBK 171200 CCB").unwrap();
    assert_eq!((heading.designator, heading.correction), ("SMRO01", 2));
    assert_eq!(
        Heading::parse("SAUK1 EGGY 220250 COR").unwrap().correction,
        1
    );
    assert_eq!(
        Heading::parse("SAUK31 EGGY 220250 RRA").unwrap().correction,
        0
    );
    for line in [
        "SMRO01 YRBK",
        "AAXX 17121",
        "EGLL 220250Z 24010KT",
        "SMRO01 YRBK 171200 CCA x",
        "SMRO01 YRBK 17120/",
    ] {
        assert!(Heading::parse(line).is_none(), "{line}");
    }
}
