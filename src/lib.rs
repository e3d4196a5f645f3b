//! Area-averaged vorticity and divergence, with error bars, from the reports of wind-station networks.
//!
//! Three stations, three winds, one polygon:
//!
//! ```
//! use gyremesh::polygon::build_polygons;
//! use gyremesh::settings::{PolygonChoice, PolygonLimits};
//! use gyremesh::station::{Network, Position, Station};
//! use gyremesh::units::{FromDirection, Wind};
//!
//! let station = |id: &str, latitude, longitude| {
//!     Station::new(id, Position::new(latitude, longitude).unwrap())
//! };
//! let network = Network::new(vec![
//!     station("A", 46.0, 7.0), station("B", 46.0, 7.4), station("C", 46.3, 7.2),
//! ]);
//! let choice = PolygonChoice { triangles: true, rings: vec![], regions: vec![] };
//! let built = build_polygons(&network, &choice, &PolygonLimits::default()).unwrap();
//!
//! let from = |degrees| FromDirection::new(degrees).unwrap();
//! let winds = [(5.0, 250.0), (4.0, 300.0), (3.0, 180.0)].map(|(v, d)| Wind::blowing_from(v, from(d)));
//! let (vorticity, divergence) = built.polygons[0].row.apply(|station| winds[station]);
//! let error = 0.5 * built.polygons[0].shape.noise_factor; // for 0.5 m/s in each component
//! let text = format!("divergence ({:+.1} ± {:.1})e-5 1/s", divergence * 1e5, error * 1e5);
//! assert_eq!(text, "divergence (+5.5 ± 2.9)e-5 1/s");
//! # let _ = vorticity;
//! ```
//!
//! # Conventions
//!
//! | | |
//! |---|---|
//! | Direction | where the wind blows *from*, degrees clockwise from true north, in (0, 360]; calm has none |
//! | Components | `u` towards east, `v` towards north, m/s |
//! | Polygons | counter-clockwise seen from above; edges are geodesics of WGS 84, normals point outward |
//! | Vorticity | positive counter-clockwise in both hemispheres; cyclonic where it has the sign of f |
//! | Divergence | positive for air flowing out |
//! | Units | SI inside, degrees where a name says so; other units end in the reader |
//! | Time | UTC, whole microseconds ([`time::Time`]) |
//! | Missing | `Option`, or [`check::Flag::Missing`] beside a column; never a special number |
//!
//! # Stages, in the order of the data
//!
//! - [`settings`]: one TOML file for each network, all its defects at once.
//! - [`station`]: stations and the network they make.
//! - [`input`], [`report`]: files of many forms, wind reports into columns.
//! - [`check`]: flags of the reports.
//! - [`align`]: winds of all stations at analysis times, with their instrument errors.
//! - [`structure`]: how winds differ with distance and time; what the error bars contain.
//! - [`spatial`]: each wind against what the stations around it predict.
//! - [`calibration`]: stations off in direction, speed or time.
//! - [`polygon`]: triangles, rings, regions; shape and coefficient rows.
//! - [`integral`]: area means with their errors.
//! - [`kinematics`]: deformation, curvature and shear and the like of each polygon.
//! - [`helmholtz`]: rotational, divergent and harmonic part of the wind.
//! - [`event`]: areas, wind shifts and lines, followed in time.
//! - [`profile`]: winds on levels, vertical motion.
//! - [`pipeline`]: joins them; [`output`] writes; [`cli`] speaks.
//!
//! # Accuracy
//!
//! Area means of the planetary vorticity agree with an independent integration to 1e-9, vorticity and divergence of
//! random polygons with NumPy and GeographicLib to 1e-9 of the largest term (`tests/geodesic.rs`).
//!
//! # What it does not do
//!
//! It warns of nothing: for severe weather, turbines and aviation follow the national weather service, site safety
//! rules, local codes and licensed practice.

pub mod align;
pub mod calibration;
pub mod check;
pub mod cli;
pub mod error;
pub mod event;
pub mod helmholtz;
pub mod input;
pub mod integral;
pub mod kinematics;
pub mod output;
pub mod pipeline;
pub mod polygon;
pub mod profile;
pub mod report;
pub mod settings;
pub mod spatial;
pub mod station;
pub mod structure;
pub mod sum;
pub mod tally;
pub mod time;
pub mod units;
pub mod warning;
