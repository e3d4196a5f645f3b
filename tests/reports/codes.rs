//! METAR and SYNOP files. No place has a location indicator with Q, nor a station number in block 00.

use super::{Found, Site, lines_of};
use gyremesh::tally::Reason;

const STATIONS: &str = "id,latitude,longitude\nQXAA,46.0,-30.0\nQXBB,46.0,-29.7\n00003,46.2,-29.85\n00004,46.3,-29.5\n";
const REFERENCE: &str = "reference = \"2031-06-14T12:00:00Z\"";
/// 10, 12 and 9 knots in m/s, six decimals.
const TEN: &str = "5.144444";
const TWELVE: &str = "6.173333";
const NINE: &str = "4.63";

fn read(form: &str, text: &str) -> Found {
    let settings = format!("[[reports]]\nfiles = [\"r.txt\"]\nform = \"{form}\"\n{REFERENCE}");
    Site::new(STATIONS, &settings, &[("r.txt", text.as_bytes())]).read()
}

fn metar_winds() -> [String; 2] {
    [
        format!("QXAA 2031-06-14T11:50:00Z 270 {TEN}"),
        format!("QXBB 2031-06-14T11:50:00Z 280 {TWELVE}"),
    ]
}

#[test]
fn metar_in_bulletins_and_one_a_line() {
    let bulletin = "\u{1}\r\r\n123\r\r\nSAXX31 QXQX 141150\r\r\nMETAR QXAA 141150Z 27010G22KT 240V300\r\r\n  \
                    9999 FEW030=\r\r\nMETAR QXBB 141150Z 28012KT CAVOK=\r\r\n\u{3}";
    let plain = "QXAA 141150Z 27010G22KT 9999\nSPECI QXBB 141150Z AUTO 28012KT CAVOK\n";
    for text in [bulletin, plain] {
        let found = read("metar", text);
        assert!(found.reading.is_complete(), "{:?}", found.reading.warnings);
        assert_eq!(found.lines(), metar_winds(), "{text}");
        // 22 kt, exactly.
        let gust = found.table.gust(0).unwrap();
        assert!((gust - 22.0 * 1852.0 / 3600.0).abs() < 1e-12, "{gust}");
    }
}

#[test]
fn metar_in_a_column_with_its_own_and_with_other_times() {
    let with_columns = "report,id,at\nQXAA 141150Z 27010KT,QXAA,2031-06-14T11:50:00Z\n\
                        \"METAR QXBB 141150Z 28012KT RMK A, B\",QXBB,2031-06-14T11:50:00Z\n";
    let columns = "columns = { report = \"report\", station = \"id\", time = \"at\" }";
    assert_eq!(lines_of(STATIONS, columns, with_columns), metar_winds());
    let alone = "n;text\n1;QXAA 141150Z 27010KT\n2;QXBB 141150Z 28012KT\n";
    let columns = format!("columns = {{ report = \"text\" }}\n{REFERENCE}");
    assert_eq!(lines_of(STATIONS, &columns, alone), metar_winds());
}

#[test]
fn a_corrected_metar_replaces_the_first_wherever_it_stands() {
    let first = "METAR QXAA 141150Z 09003KT=\n";
    let corrected = "METAR COR QXAA 141150Z 27010KT=\n";
    for text in [format!("{first}{corrected}"), format!("{corrected}{first}")] {
        let found = read("metar", &text);
        assert_eq!(found.lines(), metar_winds()[..1]);
        assert_eq!(found.repeats(Reason::Corrected), 1);
        assert!(found.reading.conflicts.is_empty());
    }
}

#[test]
fn winds_that_are_none_stay_what_they_are() {
    let text = "QXAA 141150Z VRB03KT\nQXBB 141150Z 00000KT\nQXAA 141220Z /////KT\nQXBB 141220Z 00008KT\n\
                QXAA 141250Z P99KT 9999\nQXBB 141250Z 280P99KT\n";
    let found = read("metar", text);
    assert_eq!(
        found.lines(),
        [
            "QXAA 2031-06-14T11:50:00Z - 1.543333",
            "QXAA 2031-06-14T12:20:00Z - -",
            "QXBB 2031-06-14T11:50:00Z - 0",
            "QXBB 2031-06-14T12:20:00Z - 4.115556",
            "QXBB 2031-06-14T12:50:00Z - -",
        ]
    );
    let warning = found.reading.warnings[0].to_string();
    assert!(warning.contains("r.txt:5: `P99KT`"), "{warning}");
}

#[test]
fn synop_bulletins_with_a_correction() {
    let text = "SMXX01 QXQX 141200\r\r\nAAXX 14124\r\r\n00003 41598 72710 10150 20090=\r\r\n\
                00004 41598 80909 10140=\r\r\n\
                SMXX01 QXQX 141200 CCA\r\r\nAAXX 14124\r\r\n00003 41598 72812 10150=\r\r\n\
                SMXX01 QXQX 141800\r\r\nAAXX 14181\r\r\n00003 41598 /9905=\r\r\n00004 NIL=\r\r\n";
    let found = read("synop", text);
    assert!(found.reading.is_complete(), "{:?}", found.reading.warnings);
    assert_eq!(
        found.lines(),
        [
            format!("00003 2031-06-14T12:00:00Z 280 {TWELVE}"),
            "00003 2031-06-14T18:00:00Z - 5".to_string(),
            format!("00004 2031-06-14T12:00:00Z 90 {NINE}"),
        ]
    );
    assert_eq!(found.repeats(Reason::Corrected), 1);
    assert_eq!(found.reading.rows.count(Reason::Nil), 1);
}

#[test]
fn day_and_hour_over_the_end_of_a_month() {
    let text = "QXAA 302350Z 27010KT\nQXAA 010020Z 28012KT\nQXBB 302400Z 27010KT\n";
    let settings =
        "[[reports]]\nfiles = [\"r.txt\"]\nform = \"metar\"\nreference = \"2031-07-01T06:00:00Z\"";
    let found = Site::new(STATIONS, settings, &[("r.txt", text.as_bytes())]).read();
    assert_eq!(
        found.lines(),
        [
            format!("QXAA 2031-06-30T23:50:00Z 270 {TEN}"),
            format!("QXAA 2031-07-01T00:20:00Z 280 {TWELVE}"),
            format!("QXBB 2031-07-01T00:00:00Z 270 {TEN}"),
        ]
    );
}
