#![expect(clippy::unwrap_used, reason = "a test may panic")]

use proptest::prelude::*;

use super::*;
use crate::units::Wind;

const KNOT: f64 = 1852.0 / 3600.0;

/// Direction (-1 variable, -2 zero, none missing), speed and gust in units of the report.
type Figures = (Option<f64>, Option<f64>, Option<f64>);

fn figures(wind: &CodedWind) -> Figures {
    let direction = match wind.direction {
        CodedDirection::From(direction) => Some(direction.degrees()),
        CodedDirection::Variable => Some(-1.0),
        CodedDirection::Zero => Some(-2.0),
        CodedDirection::Missing => None,
    };
    let unit = wind.unit.in_metres_per_second();
    let speed = |speed: Option<CodedSpeed>| speed.map(|speed| (speed.value / unit).round());
    (direction, speed(wind.speed), speed(wind.gust))
}

fn wind(group: &str) -> CodedWind {
    group_wind(group).unwrap()
}

fn group_wind(group: &str) -> Option<CodedWind> {
    parse_metar(&format!("EGLL 220250Z {group} 9999"))
        .unwrap()
        .wind
}

#[test]
fn groups_are_decoded() {
    let cases: [(&str, Figures, SpeedUnit); 15] = [
        // Annex 3 and United States practice (WMO-No. 306 FM 15; decode checks).
        ("13008KT", (Some(130.0), Some(8.0), None), SpeedUnit::Knot),
        (
            "08032G45KT",
            (Some(80.0), Some(32.0), Some(45.0)),
            SpeedUnit::Knot,
        ),
        ("VRB04KT", (Some(-1.0), Some(4.0), None), SpeedUnit::Knot),
        ("00000KT", (None, Some(0.0), None), SpeedUnit::Knot),
        (
            "210103G130KT",
            (Some(210.0), Some(103.0), Some(130.0)),
            SpeedUnit::Knot,
        ),
        (
            "32012G22KT",
            (Some(320.0), Some(12.0), Some(22.0)),
            SpeedUnit::Knot,
        ),
        (
            "36005MPS",
            (Some(360.0), Some(5.0), None),
            SpeedUnit::MetrePerSecond,
        ),
        (
            "27036KMH",
            (Some(270.0), Some(36.0), None),
            SpeedUnit::KilometrePerHour,
        ),
        // As received, October 2022 (public cache of the United States Aviation Weather Center).
        ("///24KT", (None, Some(24.0), None), SpeedUnit::Knot),
        (
            "32020G//KT",
            (Some(320.0), Some(20.0), None),
            SpeedUnit::Knot,
        ),
        ("210006KT", (Some(210.0), Some(6.0), None), SpeedUnit::Knot),
        ("24000KT", (Some(240.0), Some(0.0), None), SpeedUnit::Knot),
        ("00036KT", (Some(-2.0), Some(36.0), None), SpeedUnit::Knot),
        ("E20011KT", (Some(200.0), Some(11.0), None), SpeedUnit::Knot),
        ("270//KT", (Some(270.0), None, None), SpeedUnit::Knot),
    ];
    for (group, expected, unit) in cases {
        let wind = wind(group);
        assert_eq!((figures(&wind), wind.unit), (expected, unit), "{group}");
        assert_eq!(wind.estimated, group.starts_with('E'), "{group}");
        assert_eq!(wind.is_calm(), expected.1 == Some(0.0), "{group}");
    }
    for group in ["/////KT", "/////", "/////MPS", "/////KT ///V///"] {
        assert!(group_wind(group).is_none(), "{group}");
    }
}

#[test]
fn speeds_are_metres_per_second() {
    let close = |speed: Option<CodedSpeed>, expected: f64| {
        (speed.unwrap().value - expected).abs() < 1e-12 // rounding of one product
    };
    assert!(close(wind("13008KT").speed, 8.0 * KNOT));
    assert!(close(wind("27036KMH").speed, 10.0));
    let north = wind("36005MPS");
    let vector = Wind::blowing_from(5.0, north.known_direction().unwrap());
    assert!(close(north.speed, 5.0) && vector == Wind { u: 0.0, v: -5.0 });
}

// P99KT: 100 kt = 51.444 m/s or more, not 99 kt.
#[test]
fn figures_that_do_not_fit_are_lower_bounds() {
    for (group, bound) in [
        ("240P99KT", 100.0 * KNOT),
        ("240P49MPS", 50.0),
        ("240P199KMH", 200.0 / 3.6),
    ] {
        let speed = wind(group).speed.unwrap();
        assert!(
            speed.at_least && (speed.value - bound).abs() < 1e-12,
            "{group}"
        );
    }
    let storm = wind("24095GP99KT");
    assert!(!storm.speed.unwrap().at_least);
    assert!(storm.gust.unwrap().at_least && storm.gust.unwrap().value > 51.444);
}

#[test]
fn calm_variable_and_zero_have_no_known_direction() {
    for group in ["00000KT", "VRB04KT", "00036KT", "///24KT", "24000KT"] {
        assert!(wind(group).known_direction().is_none(), "{group}");
    }
}

#[test]
fn sector_follows_the_wind() {
    let sector = wind("32012G22KT 280V350").sector.unwrap();
    assert_eq!((sector.0.degrees(), sector.1.degrees()), (280.0, 350.0));
    assert!(wind("32012KT 9000NDV").sector.is_none());
    assert!(wind("32012KT 9999 280V350").sector.is_none());
    assert!(wind("32012KT ///V///").sector.is_none());
}

#[test]
fn words_before_the_wind_are_understood() {
    let metar = parse_metar("CYXY 220200Z CCA 01005KT 310V070 5SM -RA BR").unwrap();
    assert_eq!((metar.station, metar.correction), ("CYXY", 1));
    assert_eq!(metar.time, DayTime::new(22, 2, 0));
    let metar = parse_metar("SPECI COR EHJR 220225Z AUTO ///24KT ////").unwrap();
    assert!(metar.special && metar.automatic && metar.correction == 1);
    let metar = parse_metar("METAR PHTO 220153Z COR 12009KT 10SM=").unwrap();
    assert!(!metar.special && metar.correction == 1 && metar.wind.is_some());
    let metar = parse_metar("SVSR 220203Z AUTO NIL").unwrap();
    assert!(metar.nil && metar.wind.is_none());
    assert!(parse_metar("METAR EGLL NIL=").unwrap().nil);
    // The time without Z (as received), or none at all.
    let metar = parse_metar("SYKM 221800 10008KT 9999").unwrap();
    assert_eq!(metar.time, DayTime::new(22, 18, 0));
    assert!(parse_metar("EGLL AUTO 10008KT").unwrap().time.is_none());
}

#[test]
fn only_the_place_makes_a_group_the_wind() {
    for text in [
        "KVDF 231135Z AUTO 10SM CLR 16/14 A3012 RMK PK WND 31029/2254",
        "KSUS 231054Z 10SM SCT100 RMK WIND THR35 36003KT",
        "CWIL 220230Z AUTO ///// ////SM FEW009 24012KT",
        "PASY 220247Z AUTO M 7SM 24012KT",
        "EHJR 220225Z ///023/// 24012KT",
        "SCBA 221900Z ",
    ] {
        assert!(parse_metar(text).unwrap().wind.is_none(), "{text}");
    }
}

#[test]
fn what_cannot_be_read_is_named() {
    for (text, word, expected) in [
        (
            "KEKS 220235Z AUTO 12/92000013G23KT 10SM",
            "12/92000013G23KT",
            WIND,
        ),
        ("KWHP 221850Z 1508G20KT 10SM", "1508G20KT", WIND),
        ("HSPN 231100Z 04014 9999", "04014", UNIT),
        ("EGLL 220250Z VRB04 9999", "VRB04", UNIT),
        ("EGLL 220250Z 37010KT", "37010KT", WIND),
        ("EGLL 220250Z 24010G2KT", "24010G2KT", WIND),
        ("EGLL 220250Z 24010KT 280V370", "280V370", SECTOR),
        ("EGLL 322550Z 24010KT", "322550Z", TIME),
        ("EGLL 2202Z 24010KT", "2202Z", TIME),
        ("UTO8 M M M 822/02/00", "M", TIME),
        ("THIS is no report", "is", TIME),
        ("EGLL", "", TIME),
        ("TAF EGLL 220500Z", "TAF", STATION),
        ("", "", STATION),
    ] {
        assert_eq!(
            parse_metar(text).unwrap_err(),
            error(word, expected),
            "{text}"
        );
    }
}

#[test]
fn bulletins_give_their_kind_and_correction() {
    let text = "SAUK31 EGGY 220250 CCB\r\r\nMETAR\r\r\nEGLL 220250Z 24010KT 9999\r\r\nNOSIG=\r\r\nEGKK 220250Z NIL=\r\r\n\
        SPUK31 EGGY 220255\r\r\nEGSS 220255Z 25010KT=\r\r\nSAUK32 EGGY 220250\r\r\nMETAR NIL=\r\r\n\
        SPECI\r\r\nEGCC 220250Z 26010KT\r\r\nMETAR EGLC 220250Z 27010KT=";
    let seen: Vec<_> = metars(text)
        .map(|entry| {
            let metar = entry.report.unwrap();
            (entry.line, metar.station, metar.special, metar.correction)
        })
        .collect();
    let expected = [
        (3, "EGLL", false, 2),
        (5, "EGKK", false, 2),
        (7, "EGSS", true, 0),
        (11, "EGCC", true, 0),
        (12, "EGLC", false, 0),
    ];
    assert_eq!(seen, expected);
    assert_eq!(
        metars(text).next().unwrap().text,
        "EGLL 220250Z 24010KT 9999\r\r\nNOSIG"
    );
}

// A closing sign that is missing or astray must not swallow the reports after it.
#[test]
fn each_line_that_starts_a_report_is_one() {
    let text = "EGLL 220250Z 24010KT 9999\nEGKK 220250Z 25010KT RMK A=B\nEGSS 220250Z 26010KT\n 9999 NOSIG\n";
    let stations: Vec<_> = metars(text)
        .map(|entry| entry.report.map(|metar| metar.station).map_err(|e| e.word))
        .collect();
    assert_eq!(stations, [Ok("EGLL"), Ok("EGKK"), Err("B"), Ok("EGSS")]);
}

proptest! {
    #[test]
    fn any_text_is_read_or_refused(text in any::<String>(), lines in "([A-Z0-9/=V \r\n\u{1}\u{3}é]{0,12}){0,12}") {
        for text in [&text, &lines] {
            let _ = parse_metar(text);
            prop_assert!(metars(text).count() <= text.len());
        }
    }

    #[test]
    fn a_damaged_report_is_read_or_refused(
        good in prop::sample::select(vec![
            "METAR COR EGLL 220250Z AUTO 24012G25KT 210V270 9999=",
            "SPECI UTO8 220250Z VRBP49MPS ///V///",
            "SAUK31 EGGY 220250 CCA\r\r\nMETAR\r\r\nEGLL 220250Z E24012KT=\r\r\n",
        ]),
        damage in prop::collection::vec((any::<prop::sample::Index>(), any::<char>(), 0..3_u8), 1..6),
    ) {
        let mut text: Vec<char> = good.chars().collect();
        for (at, c, how) in damage {
            let at = at.index(text.len());
            match how {
                0 => text[at] = c,
                1 => text.insert(at, c),
                _ if text.len() > 1 => { text.remove(at); }
                _ => {}
            }
        }
        let text: String = text.into_iter().collect();
        let _ = parse_metar(&text);
        for entry in metars(&text) {
            let place = text.split('\n').nth(usize::try_from(entry.line - 1).unwrap()).unwrap();
            let first = entry.text.split('\n').next().unwrap();
            let first = first.trim_end_matches(|c: char| c == ' ' || c.is_ascii_control());
            prop_assert!(place.contains(first));
        }
    }
}
