//! Any bytes as METAR: as one report, as bulletins, as a file.
#![no_main]

mod common;

use gyremesh::report::{ReportForm, ReportFormat, metars, parse_metar, read_bytes};
use libfuzzer_sys::fuzz_target;

fuzz_target!(|data: &[u8]| {
    let text = String::from_utf8_lossy(data);
    let _ = parse_metar(&text);
    let lines = 1 + text.matches('\n').count() as u64;
    let mut last = 0;
    for entry in metars(&text) {
        assert!((last..=lines).contains(&entry.line));
        assert!(text.contains(entry.text));
        last = entry.line;
        if let Ok(metar) = entry.report {
            assert_eq!(metar.station.len(), 4);
            assert!(!metar.nil || metar.wind.is_none());
            let speed = metar.wind.and_then(|wind| wind.speed);
            assert!(speed.is_none_or(|speed| (0.0..=1000.0).contains(&speed.value)));
        }
    }
    let format = ReportFormat {
        form: ReportForm::Metar,
        reference: common::reference(),
        ..ReportFormat::default()
    };
    let network = common::network();
    let outcome = read_bytes(data, "fuzz", &format, &network);
    common::balance(&outcome, &network);
});
