//! Four stations round the bay of Ostrin Lake and one set of winds: what the air does over the polygon between them, each
//! number with its standard error.
//!
//! ```console
//! $ cargo run --example polygon_of_four
//! ```
#![expect(clippy::print_stdout, reason = "an example prints")]

use std::error::Error;

use gyremesh::align::{AlignedWind, WindBlock, instrument_covariance};
use gyremesh::check::Flag;
use gyremesh::error::Place;
use gyremesh::integral::{Sampling, complete_errors, estimate, planetary_vorticity};
use gyremesh::kinematics::{Kinematics, Quantities, Quantity};
use gyremesh::output::CAUTION;
use gyremesh::polygon::{build_polygons, median_edge};
use gyremesh::settings::{
    KinematicsSettings, PolygonChoice, PolygonLimits, RingSettings, SensorErrors,
};
use gyremesh::station::{Network, Position, Station};
use gyremesh::structure::StructureSettings;
use gyremesh::time::Time;
use gyremesh::units::{FromDirection, Wind};

/// Identifier, latitude, longitude, direction from which the wind blows (degrees), speed (m/s).
const REPORTS: [(&str, f64, f64, f64, f64); 4] = [
    ("Quay", 46.48, -30.25, 245.0, 6.1),
    ("Point", 46.46, -29.96, 275.0, 3.4),
    ("Ridge", 46.66, -29.94, 295.0, 2.2),
    ("Weir", 46.68, -30.22, 230.0, 5.0),
];

fn main() -> Result<(), Box<dyn Error>> {
    // The stations. From here on each is known by its place in the network, which sorts them by identifier.
    let stations = REPORTS.map(|(id, latitude, longitude, ..)| {
        Position::new(latitude, longitude).map(|position| Station::new(id, position))
    });
    let network = Network::new(stations.into_iter().collect::<Result<_, _>>()?);
    let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();

    // One polygon: the ring through all four, in the order in which they stand.
    let ring = RingSettings {
        name: "bay".into(),
        stations: REPORTS.map(|report| report.0.to_string()).into(),
        place: Place::default(),
    };
    let choice = PolygonChoice {
        triangles: false,
        rings: vec![ring],
        regions: Vec::new(),
    };
    let built = build_polygons(&network, &choice, &PolygonLimits::default())?;
    let polygon = built
        .polygons
        .first()
        .ok_or("the limits leave no polygon")?;
    let f = planetary_vorticity(polygon, &positions);

    let winds = winds(&network)?;

    // What the stations do not see of the wind between them: a network learns it from its reports; one time alone must
    // take what is usual.
    let spacing = median_edge(&built.edges).ok_or("a polygon has edges")?;
    let usual = [StructureSettings::default().prior(spacing)];
    let sampling = Sampling::new(&built.polygons, &built.edges, &positions, spacing);
    let mut block = estimate(&built.polygons, &winds);
    block.budget = complete_errors(&built.polygons, &sampling, &winds, &usual, &mut block);

    println!(
        "Polygon {}, {:.0} km2, edges of {:.0} km, at {}\n",
        polygon.id,
        polygon.shape.area / 1e6,
        spacing / 1e3,
        block.times[0]
    );
    let parts = &block.budget;
    for (name, value, error, parts) in [
        (
            "vorticity",
            &block.vorticity,
            &block.vorticity_se,
            &parts.vorticity,
        ),
        (
            "divergence",
            &block.divergence,
            &block.divergence_se,
            &parts.divergence,
        ),
    ] {
        println!(
            "{name:<22} ({:+6.1} ± {:4.1})e-5 1/s   sensors {:.1}, wind between the stations {:.1}",
            value[0] * 1e5,
            error[0] * 1e5,
            parts.instrument[0] * 1e5,
            parts.sampling[0] * 1e5
        );
    }
    println!(
        "{:<22} ({:+6.1}       )e-5 1/s\n",
        "planetary vorticity",
        f * 1e5
    );

    let settings = KinematicsSettings::default();
    let kinematics = Kinematics::new(&built.polygons, &built.edges, &positions, &[f], settings);
    let found = kinematics.of(&winds, &block, Some((&sampling, &usual)));
    print_kinematics(&found.cells[0]);
    println!("\n± is one standard error. {CAUTION}");
    Ok(())
}

/// The winds at one time, with the errors of common sensors.
fn winds(network: &Network) -> Result<WindBlock, Box<dyn Error>> {
    let time = Time::parse_rfc3339("2031-06-14T15:00:00Z")?;
    let sensor = SensorErrors::default();
    let mut winds = WindBlock::empty(vec![time], network.len());
    for (id, _, _, direction, speed) in REPORTS {
        let from = FromDirection::new(direction).ok_or("a direction lies between 0 and 360")?;
        let wind = Wind::blowing_from(speed, from);
        let value = AlignedWind {
            wind,
            covariance: instrument_covariance(wind, false, &sensor),
            flag: Flag::Pass,
            age: 0.0,
        };
        let station = network.find(id).ok_or("a station of the list")?;
        winds.set(station, 0, &value);
    }
    Ok(winds)
}

fn print_kinematics(found: &Quantities) {
    for quantity in [
        Quantity::MeanSpeed,
        Quantity::MeanDirection,
        Quantity::CurvatureVorticity,
        Quantity::ShearVorticity,
        Quantity::TotalDeformation,
        Quantity::DilatationAxis,
        Quantity::RossbyNumber,
    ] {
        let name = quantity.name().replace('_', " ");
        match found.get(quantity) {
            Some((value, error)) if quantity.units() == "s-1" => {
                println!(
                    "{name:<22} ({:+6.1} ± {:4.1})e-5 1/s",
                    value * 1e5,
                    error * 1e5
                );
            }
            Some((value, error)) if quantity.units() == "1" => {
                println!("{name:<22}  {value:6.1} ± {error:4.1}");
            }
            Some((value, error)) => {
                println!("{name:<22}  {value:6.1} ± {error:4.1} {}", quantity.units());
            }
            None => println!("{name:<22}  cannot be told from these winds"),
        }
    }
}
