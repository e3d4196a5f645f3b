#![expect(clippy::unwrap_used, reason = "a test may panic")]
#![expect(clippy::float_cmp, reason = "tens of degrees are exact")]

use proptest::prelude::*;

use super::*;

const KNOT: f64 = 1852.0 / 3600.0;

fn only(text: &str) -> Result<Synop<'_>, CodeError<'_>> {
    let mut entries = synops(text);
    let entry = entries.next().unwrap();
    assert!(entries.next().is_none());
    entry.report
}

fn wind(groups: &str) -> Option<CodedWind> {
    let text = format!("AAXX 17121 15015 01597 {groups}=");
    only(&text).unwrap().wind
}

fn is_close(speed: Option<CodedSpeed>, expected: f64) -> bool {
    // Rounding of one product.
    (speed.unwrap().value - expected).abs() < 1e-12
}

// FM 12 decode check: day 19, 09 UTC, iw 4; 240 degrees, 4 kt = 2.0578 m/s.
#[test]
fn knots_of_an_anemometer() {
    let synop = only("AAXX 19094 07015 22962 02404 10050=").unwrap();
    assert_eq!(synop.station, "07015");
    assert_eq!(Some(synop.time), DayTime::new(19, 9, 0));
    let wind = synop.wind.unwrap();
    assert_eq!(wind.known_direction().unwrap().degrees(), 240.0);
    assert!((wind.speed.unwrap().value - 2.0578).abs() < 5e-5);
    assert!(!wind.estimated && wind.gust.is_none());
}

// As received from Romania, January 2023 (wmo-im/synop2bufr, data/wis2box_data), cut;
// one group made missing and one report NIL by hand.
#[test]
fn a_bulletin_is_read_over_its_broken_lines() {
    let text = "SMRO01 YRBK 171200 CCB\n\nAAXX 17121\n\n15108 01/92 92514 11028 48315 50001 333 48013\n\n55300\n\n\
        0//// 20270 3//// 69947 91020 911// 92727=\n\n15280 01/90 92012 11041 333 3//// 91020 911//=\n\
        15360\n02997 3////\n10098 333 91011=\n\n15410 NIL=\n\n\n\n";
    let entries: Vec<_> = synops(text).collect();
    let seen: Vec<_> = entries
        .iter()
        .map(|entry| {
            let synop = entry.report.unwrap();
            assert_eq!(synop.correction, 2);
            (entry.line, synop.station, synop.nil, synop.wind.is_some())
        })
        .collect();
    let expected = [
        (5, "15108", false, true),
        (11, "15280", false, true),
        (12, "15360", false, false),
        (16, "15410", true, false),
    ];
    assert_eq!(seen, expected);
    let wind = entries[0].report.unwrap().wind.unwrap();
    assert_eq!(wind.known_direction().unwrap().degrees(), 250.0);
    assert!(is_close(wind.speed, 14.0) && is_close(wind.gust, 20.0));
}

#[test]
fn calm_variable_missing_and_zero() {
    assert!(wind("70000").unwrap().is_calm());
    assert_eq!(wind("79903").unwrap().direction, CodedDirection::Variable);
    assert_eq!(wind("70012").unwrap().direction, CodedDirection::Zero);
    assert_eq!(wind("7//12").unwrap().direction, CodedDirection::Missing);
    assert_eq!(wind("724//").unwrap().speed, None);
    assert_eq!(wind("7////"), None);
    assert_eq!(
        wind("/3605").unwrap().known_direction().unwrap().degrees(),
        360.0
    );
}

#[test]
fn speeds_of_99_units_and_more_are_in_the_next_group() {
    let speed = |groups| wind(groups).unwrap().speed;
    assert!(is_close(speed("72499 00112 10050"), 112.0));
    assert!(!speed("72499 00112").unwrap().at_least);
    // The group is missing: 99 or more.
    assert!(is_close(speed("72499 10050"), 99.0) && speed("72499").unwrap().at_least);
    // Only after 99.
    assert!(is_close(speed("72498 00112"), 98.0));
    let gust = |groups| wind(groups).unwrap().gust;
    assert!(is_close(
        gust("72450 10050 333 10101 91099 00125 91199 00130"),
        125.0
    ));
    assert_eq!(gust("72450 10050 333 910// 91104"), None);
    assert_eq!(gust("72450 10050 91020"), None);
    assert_eq!(gust("72450 10050 333 10101 555 91020"), None);
}

#[test]
fn wind_indicator_gives_unit_and_estimate() {
    for (indicator, unit, estimated) in [
        ("0", 1.0, true),
        ("1", 1.0, false),
        ("3", KNOT, true),
        ("4", KNOT, false),
    ] {
        let text = format!("AAXX 1712{indicator} 15015 01597 72410=");
        let wind = only(&text).unwrap().wind.unwrap();
        assert!(is_close(wind.speed, 10.0 * unit));
        assert_eq!(wind.estimated, estimated);
    }
    // Without a unit a wind is nothing, but its absence needs none.
    let error = only("AAXX 1712/ 15015 01597 72410=").unwrap_err();
    assert_eq!((error.word, error.expected), ("1712/", UNIT));
    assert!(
        only("AAXX 1712/ 15015 01597 7////=")
            .unwrap()
            .wind
            .is_none()
    );
}

#[test]
fn what_cannot_be_read_is_named() {
    for (text, word, expected) in [
        ("15015 01597 72410=", "15015", SECTION_0),
        ("AAXX 32121 15015 01597 72410=", "32121", TIME),
        ("AAXX 17122 15015 01597 72410=", "17122", UNIT),
        ("AAXX 17121 1501 01597 72410=", "1501", STATION),
        ("AAXX 17121 15015 0159 72410=", "0159", VISIBILITY),
        ("AAXX 17121 15015 01597=", "", WIND),
        ("AAXX 17121 15015 01597 7241=", "7241", WIND),
        ("AAXX 17121 15015 01597 73710=", "73710", WIND),
        ("AAXX 17121 15015 01597 7241/=", "7241/", WIND),
    ] {
        assert_eq!(only(text), Err(CodeError { word, expected }), "{text}");
    }
    let ship = only("BBXX SHIP 17124 99500 10050=").unwrap_err();
    assert_eq!(ship.word, "BBXX");
}

#[test]
fn a_section_counts_until_the_next_bulletin() {
    let text = "SMRO01 YRBK 171200\nNIL=\nSMRO01 YRBK 171800\nAAXX 17181\nNIL=\n\
        SMRO01 YRBK 180000\nAAXX 18001\n15015 01597 72410=\nSMRO01 YRBK 180600\n15020 01597 72410=";
    let seen: Vec<_> = synops(text)
        .map(|entry| {
            (
                entry.line,
                entry.report.map(|r| r.station).map_err(|e| e.expected),
            )
        })
        .collect();
    assert_eq!(seen, [(8, Ok("15015")), (10, Err(SECTION_0))]);
}

proptest! {
    #[test]
    fn any_text_is_read_or_refused(text in any::<String>(), groups in "(AAXX|[0-9/]{5}|333|=|\n|NIL|é| ){0,40}") {
        for text in [&text, &groups, &format!("AAXX 17121 15015 {groups}")] {
            prop_assert!(synops(text).count() <= text.len());
        }
    }

    #[test]
    fn a_damaged_report_is_read_or_refused(
        damage in prop::collection::vec((any::<prop::sample::Index>(), any::<char>()), 1..6),
    ) {
        let good = "SMRO01 YRBK 171200 CCA\n\nAAXX 17121\n\n15108 01/92 92599 00112 11028 333 91099 00125 911//=\n";
        let mut text: Vec<char> = good.chars().collect();
        for (at, c) in damage {
            let at = at.index(text.len());
            text[at] = c;
        }
        let text: String = text.into_iter().collect();
        for entry in synops(&text) {
            if let Err(error) = entry.report {
                prop_assert!(error.word.is_empty() || text.contains(error.word));
            }
        }
    }
}
