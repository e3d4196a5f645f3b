//! Arguments as typed, and the help text.

use std::path::PathBuf;
use std::time::Duration;

use clap::{Args as ClapArgs, Parser, Subcommand};

use crate::settings::Overrides;
use crate::time::Time;
use crate::units;

/// Where the air converges and spins up, by how much, and whether to believe it.
#[derive(Debug, Parser)]
#[command(version, about, long_about = LONG_ABOUT, after_help = AFTER_HELP, max_term_width = 100)]
pub struct Args {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

const LONG_ABOUT: &str = "\
Gyremesh reads the reports of a network of wind stations, joins the stations to polygons, integrates the wind along \
the edges of each polygon, and gives area-mean vorticity and divergence with their errors.

Every command takes the settings file of a network, `network.toml`. Options on the command line override it. Paths in \
it are relative to it.";

const AFTER_HELP: &str = "\
Exit status: 0 complete; 1 complete, but some input was unusable (stderr says what); 2 not done.

These are estimates, not warnings: follow the national weather service, site safety rules and local codes.";

/// The commands, in the order of the data.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// List the polygons of a network, their shape and what is left out; needs no reports
    #[command(after_help = POLYGONS_HELP)]
    Polygons(PolygonsArgs),
    /// Estimate area-mean vorticity and divergence from the reports (the main job)
    #[command(after_help = ESTIMATE_HELP)]
    Estimate(EstimateArgs),
}

const POLYGONS_HELP: &str = "\
Reads:   settings, station list.
Prints:  a line for each polygon: area, longest edge, smallest angle, shape quality (1 = regular), the error of \
vorticity or divergence for an error of 1 m/s in each wind component (1e-5 /s), and why it is left out.
Writes:  with --out: mesh.geojson (RFC 7946) and mesh.csv.

Example: gyremesh polygons networks/ostrin/network.toml";

const ESTIMATE_HELP: &str = "\
Reads:   settings, station list, report files.
Prints:  period, share of reports used, polygons, strongest convergence and spin-up, stations that reported least.
Writes:  polygons.csv (a row for each time and polygon), mesh.geojson, stations.csv, summary.json. Files appear only \
when they are whole.

Settings file (defaults in brackets):
  name                        name of the network
  [stations]  file            CSV with a header line
              columns         id, latitude, longitude [of these names], name, elevation [none]
              elevation_unit  m, km or ft [m]
              only            list of identifiers [all]
  [[reports]] files           list of names and patterns; gzip is recognised
              columns         station, time, direction, speed [of these names], or eastward, northward
              speed_unit      m/s, km/h, mph or kt [m/s]
              missing         texts that mean no value [NA, N/A, NaN, null, M, MM, -, ///, -9999, -999, empty]
  [sensor]    speed_sd [0.25 m/s], speed_sd_share [0.05], direction_sd [2.5 degrees]: standard deviations
              speed_step, direction_step [0]: steps of the reports; calm_below [0.5 m/s]
  [analysis]  interval [10 min], method = nearest or mean [nearest], tolerance [half the interval],
              window [the interval], least_reports [1], from, to [all]
  [check]     speed_suspect [75 m/s], speed_fail [100 m/s]
  [polygons]  triangles [true]
  [[polygons.ring]]    name, stations in order
  [[polygons.region]]  name, and polygons, triangles_of (stations) or all_triangles = true
  [limits]    smallest_angle [15 degrees], longest_edge, smallest_area, largest_area [none]

Example: gyremesh estimate networks/ostrin/network.toml --out out/ostrin";

/// Options of `polygons`.
#[derive(Debug, ClapArgs)]
pub struct PolygonsArgs {
    /// Settings file
    pub network: PathBuf,
    /// Write mesh.geojson and mesh.csv into this folder
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,
    /// Limits in place of those of the settings
    #[command(flatten)]
    pub limits: LimitArgs,
}

/// Options of `estimate`.
#[derive(Debug, ClapArgs)]
pub struct EstimateArgs {
    /// Settings file
    pub network: PathBuf,
    /// Folder of the results [default: out/NAME, NAME being the folder of the settings file]
    #[arg(long, value_name = "DIR")]
    pub out: Option<PathBuf>,
    /// Report files in place of those of the settings, in the format of the first [[reports]]
    #[arg(long, value_name = "FILE", num_args = 1..)]
    pub reports: Vec<PathBuf>,
    /// Time between estimates, such as 5min or 1h
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    pub interval: Option<Duration>,
    /// How far a report may be from the analysis time
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    pub tolerance: Option<Duration>,
    /// Take the vector mean of the reports in the window of this length that ends at the analysis time
    #[arg(long, value_name = "DURATION", value_parser = units::parse_duration)]
    pub window: Option<Duration>,
    /// First analysis time, RFC 3339
    #[arg(long, value_name = "TIME", value_parser = Time::parse_rfc3339)]
    pub from: Option<Time>,
    /// Last analysis time, RFC 3339
    #[arg(long, value_name = "TIME", value_parser = Time::parse_rfc3339)]
    pub to: Option<Time>,
    /// Limits in place of those of the settings
    #[command(flatten)]
    pub limits: LimitArgs,
    /// Threads; the results do not depend on it [default: all processors]
    #[arg(long, value_name = "N")]
    pub threads: Option<usize>,
    /// Print no summary and no progress; warnings remain
    #[arg(long, short)]
    pub quiet: bool,
}

/// Limits of the polygons.
#[derive(Debug, ClapArgs)]
pub struct LimitArgs {
    /// Leave out polygons with a smaller angle
    #[arg(long, value_name = "DEGREES")]
    pub smallest_angle: Option<f64>,
    /// Leave out polygons with a longer edge, such as 80km
    #[arg(long, value_name = "LENGTH", value_parser = units::parse_length)]
    pub longest_edge: Option<f64>,
}

impl From<&PolygonsArgs> for Overrides {
    fn from(args: &PolygonsArgs) -> Self {
        Self {
            smallest_angle: args.limits.smallest_angle,
            longest_edge: args.limits.longest_edge,
            ..Self::default()
        }
    }
}

impl From<&EstimateArgs> for Overrides {
    fn from(args: &EstimateArgs) -> Self {
        Self {
            reports: args.reports.clone(),
            interval: args.interval,
            tolerance: args.tolerance,
            window: args.window,
            from: args.from,
            to: args.to,
            smallest_angle: args.limits.smallest_angle,
            longest_edge: args.limits.longest_edge,
        }
    }
}
