//! Any bytes as a station list, table or GeoJSON. The first byte chooses the format.
#![no_main]

use std::collections::BTreeSet;
use std::fs;
use std::sync::LazyLock;

use gyremesh::error::Error;
use gyremesh::input::TextFormat;
use gyremesh::station::{Catalogue, Network, Period, StationColumns, doubts, read_catalogue};
use libfuzzer_sys::fuzz_target;
use tempfile::TempDir;

static FOLDER: LazyLock<TempDir> = LazyLock::new(|| tempfile::tempdir().expect("a folder"));

fn check(network: &Network) {
    let ids: BTreeSet<&str> = network.stations().iter().map(|s| s.id.as_str()).collect();
    assert_eq!(ids.len(), network.len(), "each station once");
    for (k, station) in network.stations().iter().enumerate() {
        assert!(!station.id.is_empty() && !station.id.contains(char::is_whitespace));
        assert_eq!(network.find(&station.id), Some(k));
        assert!((-90.0..=90.0).contains(&station.position.latitude()));
        assert!((-180.0..180.0).contains(&station.position.longitude()));
        assert!(station.elevation.is_none_or(f64::is_finite));
    }
    // Doubts compare stations with each other.
    if network.len() < 100 {
        let _ = doubts(network);
        let _ = network.coincident();
    }
}

fuzz_target!(|data: &[u8]| {
    let Some((&choice, bytes)) = data.split_first() else {
        return;
    };
    let choice = choice.wrapping_sub(b'0');
    let named = |name: &str| Some(name.to_string()).filter(|_| choice & 1 == 1);
    let catalogue = Catalogue {
        columns: StationColumns {
            name: named("name"),
            elevation: named("elevation"),
            aliases: named("aliases").into_iter().collect(),
            valid_from: named("from"),
            valid_to: named("to"),
            speed_unit: named("unit"),
            declination: named("declination"),
            sensor_height: named("height"),
            roughness: named("roughness"),
            ..StationColumns::default()
        },
        text: TextFormat {
            decimal_comma: choice & 2 == 2,
            latin1: choice & 4 == 4,
            skip_lines: u64::from(choice >> 3 & 1),
            ..TextFormat::default()
        },
        first_of_each: choice & 16 == 16,
        only: (choice & 32 == 32).then(|| vec!["A".into(), "B C".into()]),
        ..Catalogue::default()
    };
    let path = FOLDER.path().join("stations.csv");
    fs::write(&path, bytes).expect("written");
    match read_catalogue(&path, &catalogue) {
        Ok(list) => {
            check(&list.all_times());
            match list.network(Period::default()) {
                Ok(network) => check(&network),
                Err(problems) => assert!(!problems.is_empty()),
            }
        }
        Err(Error::Invalid(problems)) => assert!(!problems.is_empty()),
        Err(error) => assert!(matches!(error, Error::Read { .. }), "{error}"),
    }
});
