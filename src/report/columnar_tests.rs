use std::sync::Arc;

use arrow_array::types::Int8Type;
use arrow_array::{
    Array, ArrayRef, BooleanArray, Date32Array, DictionaryArray, Float32Array, Int64Array,
    StringArray, Time32SecondArray, TimestampMillisecondArray, UInt64Array,
};
use arrow_schema::TimeUnit;

use super::cells::{Cell, Cells, Kind};
use super::is_columnar;
use super::times::Times;
use crate::input::{Label, RepeatedHour, TimeForm, TimeFormat, Zone};

#[test]
fn the_first_bytes_tell_a_columnar_file() {
    assert!(is_columnar(b"PAR1\x15\x04"));
    assert!(is_columnar(b"ARROW1\0\0"));
    for other in [&b""[..], b"PAR", b"station,time", b"ARROW", b"\x1f\x8b"] {
        assert!(!is_columnar(other));
    }
}

#[test]
fn values_of_any_type_are_what_text_would_say() {
    let text = |array: ArrayRef| {
        let cells = Cells::new(&array);
        let mut text = Vec::new();
        for row in 0..=array.len() {
            cells.at(row).append_to(&mut text);
            text.push(b';');
        }
        String::from_utf8_lossy(&text).into_owned()
    };
    let large = UInt64Array::from(vec![Some(u64::MAX), None]);
    assert_eq!(text(Arc::new(large)), "18446744073709551615;;;");
    let single = Float32Array::from(vec![Some(0.5), Some(f32::NAN), None]);
    assert_eq!(text(Arc::new(single)), "0.5;;;;");
    let spaced = StringArray::from(vec![" a b ", ""]);
    assert_eq!(text(Arc::new(spaced)), "a b;;;");
    let words: DictionaryArray<Int8Type> = [Some("x"), None, Some("x")].into_iter().collect();
    assert_eq!(text(Arc::new(words)), "x;;x;;");
    let none: DictionaryArray<Int8Type> = [None::<&str>, None].into_iter().collect();
    assert_eq!(text(Arc::new(none)), ";;;");
    let yes = BooleanArray::from(vec![true]);
    assert_eq!(Kind::of(yes.data_type()), None);
}

/// Times of the first row.
fn first_time(kinds: &[Kind], arrays: &[ArrayRef], format: &TimeFormat) -> Result<String, String> {
    let clock = TimeFormat {
        form: TimeForm::Rfc3339,
        ..format.clone()
    };
    let columns: Vec<Cells> = arrays.iter().map(Cells::new).collect();
    let mut times = Times::new(kinds, format, &clock);
    let first = times.read(&columns, 0).map(|time| time.to_string());
    // The second time the answer may come from memory.
    assert_eq!(times.read(&columns, 0).map(|time| time.to_string()), first);
    first
}

#[test]
fn local_timestamps_follow_zone_repeated_hour_and_label() {
    // 2013-11-03 01:30 of New York came twice (IANA time zone database): 05:30 and 06:30 UTC.
    let milliseconds = 1_383_442_200_000;
    let array: [ArrayRef; 1] = [Arc::new(TimestampMillisecondArray::from(vec![
        milliseconds,
    ]))];
    let kinds = [Kind::Local(TimeUnit::Millisecond)];
    let mut format = TimeFormat {
        zone: Zone::Named(chrono_tz::America::New_York),
        ..TimeFormat::default()
    };
    let read = |format: &TimeFormat| first_time(&kinds, &array, format);
    assert_eq!(read(&format), Ok("2013-11-03T05:30:00Z".into()));
    format.repeated_hour = RepeatedHour::Second;
    assert_eq!(read(&format), Ok("2013-11-03T06:30:00Z".into()));
    format.label = Label::Middle;
    format.averaging = std::time::Duration::from_mins(10);
    assert_eq!(read(&format), Ok("2013-11-03T06:35:00Z".into()));
    format.zone = Zone::Fixed(3600);
    assert_eq!(read(&format), Ok("2013-11-03T00:35:00Z".into()));
    // The same value as an instant needs no zone.
    format.zone = Zone::InText;
    let instant = [Kind::Instant(TimeUnit::Millisecond)];
    assert_eq!(
        first_time(&instant, &array, &format),
        Ok("2013-11-03T01:35:00Z".into())
    );
}

#[test]
fn times_before_1970_and_far_outside_the_calendar() {
    let read = |value: i64, unit| {
        let array: [ArrayRef; 1] = [Arc::new(Int64Array::from(vec![value]))];
        first_time(&[Kind::Instant(unit)], &array, &TimeFormat::default())
    };
    assert_eq!(
        read(-1, TimeUnit::Nanosecond),
        Ok("1969-12-31T23:59:59.999999Z".into())
    );
    for (value, unit) in [
        (i64::MAX, TimeUnit::Second),
        (i64::MIN, TimeUnit::Millisecond),
        (i64::MAX, TimeUnit::Microsecond),
    ] {
        let message = read(value, unit).err();
        assert!(
            message.is_some_and(|m| m.contains("not in the years 1800 to 2200")),
            "{value}"
        );
    }
}

#[test]
fn days_and_times_of_day_in_two_columns() {
    let format = TimeFormat {
        zone: Zone::Fixed(8 * 3600),
        ..TimeFormat::default()
    };
    let day: ArrayRef = Arc::new(Date32Array::from(vec![15_748]));
    let clock: ArrayRef = Arc::new(Time32SecondArray::from(vec![9 * 3600 + 300]));
    let text: ArrayRef = Arc::new(StringArray::from(vec!["09:05"]));
    let kinds = [Kind::Day, Kind::Clock(TimeUnit::Second)];
    let expected = Ok("2013-02-12T01:05:00Z".to_string());
    assert_eq!(first_time(&kinds, &[day.clone(), clock], &format), expected);
    let kinds = [Kind::Day, Kind::Text];
    assert_eq!(first_time(&kinds, &[day.clone(), text], &format), expected);
    assert_eq!(
        first_time(&[Kind::Day], std::slice::from_ref(&day), &format),
        Ok("2013-02-11T16:00:00Z".into())
    );
    // 24 hours and more are no time of day.
    let late: ArrayRef = Arc::new(Time32SecondArray::from(vec![86_400]));
    let kinds = [Kind::Day, Kind::Clock(TimeUnit::Second)];
    assert!(first_time(&kinds, &[day, late], &format).is_err());
}

#[test]
fn numbers_are_times_of_the_stated_form() {
    let read = |form: TimeForm, value: i64| {
        let format = TimeFormat {
            form,
            zone: Zone::Fixed(0),
            ..TimeFormat::default()
        };
        let array: [ArrayRef; 1] = [Arc::new(Int64Array::from(vec![value]))];
        first_time(&[Kind::Integer], &array, &format)
    };
    let expected = Ok("2013-02-12T08:00:00Z".to_string());
    assert_eq!(read(TimeForm::EpochSeconds, 1_360_656_000), expected);
    assert_eq!(
        read(TimeForm::EpochMilliseconds, 1_360_656_000_000),
        expected
    );
    assert_eq!(read(TimeForm::Compact, 201_302_120_800), expected);
    assert!(read(TimeForm::Rfc3339, 201_302_120_800).is_err());
    assert_eq!(Cells::Nothing.at(0), Cell::Missing);
}
