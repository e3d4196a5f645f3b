//! `gyremesh polygons --expect`: what a network can resolve, before any report is read.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};

use clap::Args;
use serde_json::{Value, json};

use super::text::{WIDTH, cell, cut, heading, wrapped};
use crate::align::instrument_covariance;
use crate::error::{Error, Place, Problem};
use crate::integral::{ExpectedErrors, Sampling, expected_errors};
use crate::output::CAUTION;
use crate::pipeline::Setup;
use crate::station::Position;
use crate::structure::{Exponent, StructureFunction};
use crate::units::{self, Wind};

/// Speed at which the errors of the sensors are taken if they are not stated, m/s: a light wind, between the errors that
/// are the same at all speeds and those that grow with it.
const SPEED: f64 = 5.0;

/// What `polygons --expect` assumes.
#[derive(Debug, Args)]
pub(super) struct ExpectArgs {
    /// Show the errors to expect of vorticity and divergence: what can this network resolve?
    #[arg(long)]
    pub expect: bool,
    /// With --expect: error of either wind component of a sensor, such as 0.3m/s [default: of the settings at 5 m/s]
    #[arg(long, value_name = "SPEED", value_parser = units::parse_speed, requires = "expect")]
    sensor_error: Option<f64>,
    /// With --expect: how much either component of the wind differs over --distance (root mean square)
    #[arg(long, value_name = "SPEED", value_parser = units::parse_speed, requires = "expect")]
    difference: Option<f64>,
    /// With --expect: the distance of --difference
    #[arg(long, value_name = "LENGTH", value_parser = units::parse_length, requires = "expect")]
    distance: Option<f64>,
    /// With --expect: exponent by which squared differences grow with distance, 1/3 to 2
    #[arg(long, value_name = "NUMBER", value_parser = exponent, requires = "expect")]
    exponent: Option<f64>,
    /// With --expect: take the structure function found by a run, from its summary.json
    #[arg(long, value_name = "FILE", requires = "expect", conflicts_with_all = ["difference", "distance", "exponent"])]
    past: Option<PathBuf>,
}

fn exponent(text: &str) -> Result<f64, String> {
    let found: Option<f64> = text.parse().ok();
    found
        .filter(|p| (1.0 / 3.0..=1.97).contains(p))
        .ok_or_else(|| format!("`{text}` is no exponent (1/3 to 1.97 expected, such as 0.67)"))
}

/// What was assumed, and what follows for each polygon.
pub(super) struct Expectation {
    sensor_sd: f64,
    function: StructureFunction,
    origin: String,
    errors: Vec<ExpectedErrors>,
}

impl Expectation {
    /// For the polygons within the limits.
    pub(super) fn of(setup: &Setup, args: &ExpectArgs) -> Result<Self, Error> {
        let sensor_sd = args.sensor_error.unwrap_or_else(|| {
            let wind = Wind { u: SPEED, v: 0.0 };
            let covariance = instrument_covariance(wind, false, &setup.settings.sensor);
            (0.5 * (covariance.uu + covariance.vv)).sqrt()
        });
        let spacing = setup.median_edge().unwrap_or(1.0);
        let (function, origin) = match &args.past {
            Some(file) => (past(file)?, format!("as found in {}", file.display())),
            None => {
                let mut structure = setup.settings.errors.structure;
                if let Some(difference) = args.difference {
                    structure.prior_difference = difference * difference;
                }
                if let Some(distance) = args.distance {
                    structure.prior_distance = distance;
                }
                if let Some(exponent) = args.exponent {
                    structure.prior_exponent = exponent;
                }
                (structure.prior(spacing), "as stated".to_string())
            }
        };
        let positions: Vec<Position> = setup
            .network
            .stations()
            .iter()
            .map(|s| s.position)
            .collect();
        let (polygons, edges) = (&setup.built.polygons, &setup.built.edges);
        let sampling = Sampling::new(polygons, edges, &positions, function.reference);
        let constants = sampling.constants(function.exponent);
        let errors = polygons.iter().zip(constants);
        let errors = errors.map(|(p, c)| expected_errors(p, c, &function, sensor_sd));
        Ok(Self {
            sensor_sd,
            errors: errors.collect(),
            function,
            origin,
        })
    }

    /// The table, in 80 columns.
    pub(super) fn text(&self, setup: &Setup) -> String {
        let mut out = String::new();
        let f = &self.function;
        let [along, across] = f.at(f.reference);
        // Writing to a string cannot fail.
        let _ = writeln!(
            out,
            "{}\nErrors to expect of vorticity and divergence, 1e-5 /s",
            heading(&cut(&setup.settings.name, WIDTH))
        );
        let assumed = format!(
            "Sensors: {:.2} m/s in each component. Winds {:.1} km apart differ by {:.1} m/s in each component, exponent \
             {:.2}, sites {:.1} m/s ({}). All reports at the analysis time.",
            self.sensor_sd,
            f.reference / 1e3,
            (0.5 * (along + across)).sqrt(),
            f.exponent.value(),
            f.site_variance.sqrt(),
            self.origin
        );
        let _ = writeln!(out, "{}\n", wrapped(&assumed, WIDTH));
        let columns = format!(
            "{:<23} {:>9} {:>7} {:>8} {:>8} {:>9} {:>10}",
            "polygon", "area km2", "sensors", "unseen", "unseen", "vorticity", "divergence"
        );
        let _ = writeln!(out, "{}", heading(&columns));
        let _ = writeln!(out, "{:<41} {:>8} {:>8}", "", "(vort.)", "(div.)");
        for (polygon, error) in setup.built.polygons.iter().zip(&self.errors) {
            let tenths = [
                error.instrument,
                error.sampling[0],
                error.sampling[1],
                error.total[0],
                error.total[1],
            ]
            .map(|value| format!("{:.1}", value * 1e5));
            let [sensors, z, d, vorticity, divergence] = tenths;
            let _ = writeln!(
                out,
                "{} {:>9.1} {sensors:>7} {z:>8} {d:>8} {vorticity:>9} {divergence:>10}",
                cell(&polygon.id, 23),
                polygon.shape.area / 1e6,
            );
        }
        let note = "sensors: with better sensors and sites this part shrinks; unseen: the wind between the stations, \
                    with stations nearer to each other. A value counts as different from zero beyond about twice the \
                    last columns.";
        let _ = writeln!(
            out,
            "\n{}\n{}",
            wrapped(note, WIDTH),
            wrapped(CAUTION, WIDTH)
        );
        out
    }

    /// The table as JSON, with what was assumed.
    pub(super) fn json(&self, setup: &Setup) -> String {
        let polygons = setup.built.polygons.iter().zip(&self.errors);
        let polygons = polygons.map(|(polygon, error)| {
            json!({
                "polygon": polygon.id,
                "area_km2": polygon.shape.area / 1e6,
                "se_instrument": error.instrument,
                "vorticity_se_sampling": error.sampling[0],
                "divergence_se_sampling": error.sampling[1],
                "vorticity_se": error.total[0],
                "divergence_se": error.total[1],
            })
        });
        let value = json!({
            "network": setup.settings.name,
            "assumed": {
                "sensor_sd": self.sensor_sd,
                "structure": { "function": self.function, "origin": self.origin },
            },
            "polygons": polygons.collect::<Vec<Value>>(),
            "units": { "errors": "s-1", "sensor_sd": "m s-1", "area_km2": "km2" },
            "caution": CAUTION,
        });
        format!("{value:#}\n")
    }

    /// The table as CSV, 1/s.
    pub(super) fn csv(&self, setup: &Setup) -> String {
        let mut out = String::from(
            "polygon,se_instrument,vorticity_se_sampling,divergence_se_sampling,vorticity_se,divergence_se\n",
        );
        for (polygon, error) in setup.built.polygons.iter().zip(&self.errors) {
            let fields = [
                error.instrument,
                error.sampling[0],
                error.sampling[1],
                error.total[0],
                error.total[1],
            ];
            out.push_str(&crate::output::quoted(&polygon.id));
            for field in fields {
                let _ = write!(out, ",{field:e}");
            }
            out.push('\n');
        }
        out
    }
}

/// The structure function of the `summary.json` of a run.
fn past(file: &Path) -> Result<StructureFunction, Error> {
    let text = std::fs::read_to_string(file).map_err(|error| Error::read(file, error))?;
    let problem = |message: String| {
        let place = Place {
            file: file.display().to_string(),
            ..Place::default()
        };
        Error::Invalid(vec![Problem::new(place, message)])
    };
    let summary: Value = serde_json::from_str(&text)
        .map_err(|error| problem(format!("{error} (the summary.json of a run expected)")))?;
    let function = &summary["structure"]["function"];
    let number = |name: &str| {
        let found = function[name].as_f64().filter(|value| *value >= 0.0);
        found.ok_or_else(|| {
            problem(format!(
                "`structure.function.{name}` is no number (the summary.json of a run with complete errors expected)"
            ))
        })
    };
    Ok(StructureFunction {
        reference: number("reference")?.max(1.0),
        longitudinal: number("longitudinal")?,
        transverse: number("transverse")?,
        exponent: Exponent::nearest(number("exponent")?),
        site_variance: number("site_variance")?,
        ..crate::structure::StructureSettings::default().prior(1.0)
    })
}
