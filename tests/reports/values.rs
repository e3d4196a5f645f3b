//! Units, north, height, rounding, positions of their own, repeats, names.

use super::{Found, STATIONS, Site, TABLE, WINDS, lines, lines_of};
use gyremesh::tally::Reason;

fn read(format: &str, text: &str) -> Found {
    let settings = format!("[[reports]]\nfiles = [\"r.csv\"]\n{format}");
    Site::new(STATIONS, &settings, &[("r.csv", text.as_bytes())]).read()
}

/// The network with a column more in the list, a value for each station.
fn list_with(column: &str, values: [&str; 3]) -> String {
    let ends = [column].into_iter().chain(values);
    let lines = STATIONS.lines().zip(ends);
    let lines: Vec<String> = lines.map(|(line, end)| format!("{line},{end}")).collect();
    lines.join("\n")
}

#[test]
fn a_station_with_its_own_unit_of_speed() {
    let stations = list_with("unit", ["kt", "", "km/h"]);
    let format = "speed_unit = \"mph\"";
    let settings = format!(
        "columns = {{ speed_unit = \"unit\" }}\n[[reports]]\nfiles = [\"r.csv\"]\n{format}"
    );
    let text = TABLE
        .replace("5.5", "36")
        .replace(",6\n", ",10\n")
        .replace("7.25", "36");
    let found = Site::new(&stations, &settings, &[("r.csv", text.as_bytes())]).read();
    // Definitions: 1 kt = 1852/3600 m/s, 1 mph = 0.44704 m/s.
    assert_eq!(
        found.lines(),
        [
            "A 2031-06-14T00:00:00Z 270 18.52",
            "B 2031-06-14T00:00:00Z 280.5 4.4704",
            "C 2031-06-14T00:00:00Z 250 10",
        ]
    );
}

#[test]
fn magnetic_directions_with_a_stated_declination() {
    let stations = list_with("d", ["-20", "5.5", "120"]);
    let settings =
        "columns = { declination = \"d\" }\n[[reports]]\nfiles = [\"r.csv\"]\nnorth = \"magnetic\"";
    let found = Site::new(&stations, settings, &[("r.csv", TABLE.as_bytes())]).read();
    let directions: Vec<f64> = (0..3)
        .map(|i| found.table.direction(i).unwrap().degrees())
        .collect();
    // Sums of numbers that are exact in binary.
    assert_eq!(directions, [250.0, 286.0, 10.0]);
}

/// One station of three counts from magnetic north; a word that is no north is a defect.
#[test]
fn north_of_a_single_station() {
    let with = |norths: [&str; 3]| {
        let list = list_with("d,north", norths);
        let settings = "columns = { declination = \"d\", north = \"north\" }\n[[reports]]\nfiles = [\"r.csv\"]";
        Site::new(&list, settings, &[("r.csv", TABLE.as_bytes())])
    };
    let found = with(["-20,magnetic", "5.5,true", "120,"]).read();
    let directions: Vec<f64> = (0..3)
        .map(|i| found.table.direction(i).unwrap().degrees())
        .collect();
    assert_eq!(directions, [250.0, 280.5, 250.0]);
}

/// World Magnetic Model 2025 by the Python package pygeomag 1.1.0: -9.4163 degrees at A, -9.3027 at B, in 2025.5.
#[test]
fn magnetic_directions_by_the_model() {
    let text =
        "time,station,direction,speed\n2025-03-01T00:00:00Z,A,10,5\n2025-11-01T00:00:00Z,B,5,5\n";
    let found = read("north = \"magnetic\"", text);
    for (i, expected) in [10.0 - 9.4163, 365.0 - 9.3027].into_iter().enumerate() {
        let direction = found.table.direction(i).unwrap().degrees();
        // Single precision of the model, and the middle of the year to a day.
        assert!(
            (direction - expected).abs() < 0.003,
            "{direction} {expected}"
        );
    }
    let before = read("north = \"magnetic\"", &text.replace("2025-03", "2013-03"));
    assert_eq!(before.reading.rows.count(Reason::NoDeclination), 1);
    assert!(!before.reading.is_complete());
}

/// The factor of 2 m to 10 m over open grass, ln(10/0.03)/ln(2/0.03), is a value of the textbooks.
#[test]
fn speeds_are_reduced_to_a_common_height() {
    let columns = "columns = { sensor_height = \"z\", roughness = \"z0\" }\n";
    let reports = "[[reports]]\nfiles = [\"r.csv\"]\n[analysis]\nheight = \"10 m\"";
    let files: [(&str, &[u8]); 1] = [("r.csv", TABLE.as_bytes())];
    let mixed = list_with("z,z0", ["2,0.03", "10,0.1", "10,0.03"]);
    let site = Site::new(&mixed, &format!("{columns}{reports}"), &files);
    let factors = site.estimate("stations.csv", "height_factor");
    assert!((factors[0] - 1.38323).abs() < 5e-6, "{factors:?}");
    assert!((factors[1] - 1.0).abs() < 1e-15 && (factors[2] - 1.0).abs() < 1e-15);

    // With one factor for all, all estimates have it: rounding of a few products.
    let low = list_with("z,z0", ["2,0.03"; 3]);
    let of =
        |settings: &str| Site::new(&low, settings, &files).estimate("polygons.csv", "vorticity");
    let reduced = of(&format!("{columns}{reports}"))[0];
    let plain = of("[[reports]]\nfiles = [\"r.csv\"]")[0];
    let factor = (10.0_f64 / 0.03).ln() / (2.0_f64 / 0.03).ln();
    assert!(
        (reduced / plain - factor).abs() < 1e-12,
        "{reduced} {plain}"
    );
}

#[test]
fn rounding_that_is_found_goes_into_the_error_bars() {
    let mut rows = vec!["time,station,direction,speed".to_string()];
    for hour in 0..24 {
        for (station, offset) in [("A", 0), ("B", 20), ("C", 50)] {
            let direction = (hour * 70 + offset) % 360;
            rows.push(format!(
                "2031-06-14T{hour:02}:00:00Z,{station},{direction},7.03"
            ));
        }
    }
    let text = rows.join("\n");
    let errors = |sensor: &str| {
        let settings = format!(
            "[[reports]]\nfiles = [\"r.csv\"]\n[sensor]\nspeed_step = \"0 m/s\"\n{sensor}\n\
             [analysis]\ninterval = \"1 h\""
        );
        let site = Site::new(STATIONS, &settings, &[("r.csv", text.as_bytes())]);
        let errors = site.estimate("polygons.csv", "vorticity_se");
        assert_eq!(errors.len(), 24);
        errors
    };
    let (found, stated, none) = (
        errors(""),
        errors("direction_step = 10"),
        errors("direction_step = 0"),
    );
    assert_eq!(found, stated);
    // A step of 10 degrees adds 10/√12 = 2.9 degrees to the 2.5 of the sensor; across the wind the error grows by
    // √(1 + (2.9/2.5)²) = 1.5, along it not at all.
    let ratios: Vec<f64> = found.iter().zip(&none).map(|(a, b)| a / b).collect();
    assert!(ratios.iter().all(|r| (1.0..1.55).contains(r)), "{ratios:?}");
    assert!(ratios.iter().any(|&r| r > 1.1), "{ratios:?}");
}

#[test]
fn positions_and_levels_of_their_own_are_kept() {
    let text = "time,station,direction,speed,lat,lon,p\n\
                2031-06-14T00:00:00Z,A,270,20,46.5,190,500\n\
                2031-06-14T00:00:00Z,A,260,10,46.25,190.5,850\n\
                2031-06-14T00:00:00Z,A,260,10,46.25,190.5,850\n\
                2031-06-14T00:00:00Z,B,250,5,NA,NA,NA\n";
    let format = "level_unit = \"hPa\"\ncolumns = { direction = \"direction\", speed = \"speed\", latitude = \"lat\", \
                  longitude = \"lon\", level = \"p\" }";
    let found = read(format, text);
    let table = &found.table;
    assert_eq!(found.repeats(Reason::Repeated), 1);
    assert_eq!(table.len(), 3);
    let own: Vec<_> = (0..3).map(|i| table.moving(i)).collect();
    let positions: Vec<_> = own
        .iter()
        .map(|own| {
            own.and_then(|own| own.position)
                .map(|p| (p.latitude(), p.longitude()))
        })
        .collect();
    // Sorted by level; numbers that are exact in binary.
    assert_eq!(
        positions,
        [Some((46.5, -170.0)), Some((46.25, -169.5)), None]
    );
    let levels: Vec<_> = own
        .iter()
        .map(|own| own.and_then(|own| own.level))
        .collect();
    assert_eq!(levels, [Some(50_000.0), Some(85_000.0), None]);
}

#[test]
fn rows_in_any_order_and_repeats_that_agree() {
    let mut rows: Vec<&str> = TABLE.lines().collect();
    rows[1..].reverse();
    rows.push(rows[2]);
    rows.push("2031-06-13T23:50:00Z,B,281,6");
    let found = read("", &rows.join("\n"));
    let earlier = "B 2031-06-13T23:50:00Z 281 6";
    assert_eq!(found.lines(), [WINDS[0], earlier, WINDS[1], WINDS[2]]);
    assert_eq!(found.repeats(Reason::Repeated), 1);
    assert!(found.reading.conflicts.is_empty());
    assert!(found.reading.is_complete());
}

#[test]
fn of_repeats_that_disagree_the_later_holds_and_both_are_named() {
    let text = TABLE.replace("A,270,5.5", "A,90,3") + "2031-06-14T00:00:00Z,A,270,5.5\n";
    let found = read("", &text);
    assert_eq!(found.lines(), WINDS);
    assert_eq!(found.repeats(Reason::Replaced), 1);
    let [conflict] = &found.reading.conflicts[..] else {
        panic!("one conflict expected");
    };
    assert_eq!((conflict.set_aside, conflict.holds), ((0, 2), (0, 5)));

    // A row that lacks a value says nothing against one that has it.
    let emptier = format!("{TABLE}2031-06-14T00:00:00Z,A,NA,5.5\n");
    let found = read("", &emptier);
    assert_eq!(found.lines(), WINDS);
    assert_eq!(found.repeats(Reason::Emptier), 1);
}

#[test]
fn the_later_file_holds_where_two_disagree() {
    let settings = "[[reports]]\nfiles = [\"b.csv\", \"a.csv\"]";
    let old = TABLE.replace("250,7.25", "240,9");
    let files: [(&str, &[u8]); 2] = [("a.csv", TABLE.as_bytes()), ("b.csv", old.as_bytes())];
    let found = Site::new(STATIONS, settings, &files).read();
    assert_eq!(found.lines(), WINDS);
    assert_eq!(found.repeats(Reason::Repeated), 2);
    let conflict = found.reading.conflicts[0];
    assert_eq!((conflict.set_aside, conflict.holds), ((0, 4), (1, 4)));
}

#[test]
fn an_unknown_station_is_told_with_the_nearest_name() {
    let stations = STATIONS.replace("A,", "Kestrel Hill,");
    let text = TABLE.replace(",A,", ",Kestrel Hill,");
    let known = lines_of(&stations, "", &text);
    assert!(known.contains(&WINDS[0].replace('A', "Kestrel_Hill")));
    let settings = "[[reports]]\nfiles = [\"r.csv\"]";
    let text = TABLE.replace(",A,", ",Kestrel Hil,");
    let found = Site::new(&stations, settings, &[("r.csv", text.as_bytes())]).read();
    let warnings: Vec<String> = found
        .reading
        .warnings
        .iter()
        .map(ToString::to_string)
        .collect();
    let expected =
        "1 reports of `Kestrel Hil`, which is not in the station list; is `Kestrel Hill` meant?";
    assert_eq!(warnings, [expected]);
    assert_eq!(found.reading.rows.count(Reason::UnknownStation), 1);
    assert!(!found.reading.is_complete());
}

#[test]
fn components_are_the_wind_they_make() {
    let text = "time,station,u,v\n2031-06-14T00:00:00Z,A,5.5,0\n2031-06-14T00:00:00Z,B,0,-6\n\
                2031-06-14T00:00:00Z,C,0,0\n";
    let columns = "columns = { eastward = \"u\", northward = \"v\" }";
    let expected = [
        "A 2031-06-14T00:00:00Z 270 5.5",
        "B 2031-06-14T00:00:00Z 360 6",
        "C 2031-06-14T00:00:00Z - 0",
    ];
    assert_eq!(lines(columns, text), expected);
}
