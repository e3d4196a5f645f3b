//! Checked settings, shared by library and command line.
//!
//! One TOML file per network, `networks/<name>/network.toml`. Paths in it are relative to it. All defects of the file
//! are listed at once, each with its line; an unknown key is a defect.

mod analysis;
mod calibration;
mod check;
mod check_keys;
mod errors;
mod events;
mod kinematics;
mod means;
mod path;
mod profile;
mod read;
mod reports;
mod scalars;
mod section;

use std::collections::BTreeMap;
use std::path::PathBuf;
use std::time::Duration;

use crate::align::HeightReduction;
use crate::check::Test;
use crate::error::Place;
use crate::input::Zone;
use crate::report::ReportFormat;
use crate::station::Catalogue;
use crate::structure::StructureSettings;
use crate::time::Time;

pub use check::{
    AgreementLimits, AttenuatedLimits, CheckLimits, FlatLimits, NeighbourLimits, PersistenceLimits,
    RangeLimits, RateLimits, RunLimits, Season, SpikeLimits, StuckLimits,
};
pub use events::{EventSettings, NamedPlace, Onset};
pub use kinematics::height_above_ground;
pub use profile::{Boundary, ProfileSettings};
pub use read::{Overrides, read_settings};

/// Everything a run needs to know, verified.
#[derive(Debug, Clone, PartialEq)]
pub struct Settings {
    /// Name of the network, for people.
    pub name: String,
    /// The station list.
    pub station_file: PathBuf,
    /// How to read it.
    pub catalogue: Catalogue,
    /// The report files and how to read each group.
    pub reports: Vec<ReportSource>,
    /// What is known of the sensors.
    pub sensor: SensorErrors,
    /// Analysis times.
    pub analysis: Analysis,
    /// What the errors hold.
    pub errors: ErrorSettings,
    /// Whether the kinematics of each polygon are written, and from which speed on.
    pub kinematics: KinematicsSettings,
    /// Observed scalars, by name; their order is that of [`crate::report::ScalarValues`].
    pub scalars: Vec<ScalarSettings>,
    /// Height above the ground at which the vertical wind is written, m, from the divergence at the ground.
    pub w_at: Option<f64>,
    /// Whether the rotational, divergent and harmonic part of the wind are written.
    pub decompose: bool,
    /// Over which times values are averaged.
    pub means: MeansSettings,
    /// What the calibration leaves out.
    pub calibration: CalibrationChoice,
    /// What counts as an event.
    pub events: EventSettings,
    /// Places for which arrival times are wanted.
    pub places: Vec<NamedPlace>,
    /// Levels and boundaries of profiles.
    pub profile: ProfileSettings,
    /// Limits of the tests of the reports.
    pub check: CheckLimits,
    /// Which polygons are built.
    pub polygons: PolygonChoice,
    /// What becomes of triangles where stations are missing.
    pub missing: Missing,
    /// Which polygons are left out.
    pub limits: PolygonLimits,
    /// Whether the reports are checked at all.
    pub screen: bool,
    /// Memory that sorting the reports may take, bytes; what does not fit is put on disk.
    pub memory: usize,
    /// Where the reports, once read, are kept for another run.
    pub cache: Option<PathBuf>,
}

impl Settings {
    /// True if winds are judged by their neighbours.
    #[must_use]
    pub fn tests_neighbours(&self) -> bool {
        self.screen && !self.check.off.contains(&Test::Neighbour)
    }
}

/// Default of [`Settings::memory`]: 1 GiB.
pub const MEMORY: usize = 1 << 30;

/// A group of report files of one format.
#[derive(Debug, Clone, PartialEq)]
pub struct ReportSource {
    /// The files, globs resolved, in order.
    pub files: Vec<PathBuf>,
    /// Columns and units.
    pub format: ReportFormat,
}

/// Errors of the sensors and of the code they report in; standard deviations.
///
/// Defaults: WMO-No. 8 requires 0.5 m/s up to 5 m/s, 10 % above, and 5 degrees, at k = 2 (from memory, `methods.md`
/// 5.2); a standard deviation is half of that.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct SensorErrors {
    /// Standard deviation of the speed at low speed, m/s.
    pub speed_sd: f64,
    /// Standard deviation of the speed as a share of the speed; the larger of the two holds.
    pub speed_sd_share: f64,
    /// Standard deviation of the direction, degrees.
    pub direction_sd: f64,
    /// Step of the reported speeds, m/s; if not stated, found for each station from its reports.
    pub speed_step: Option<f64>,
    /// Step of the reported directions, degrees; if not stated, found for each station from its reports.
    pub direction_step: Option<f64>,
    /// A calm means a speed below this, m/s.
    pub calm_below: f64,
}

impl Default for SensorErrors {
    fn default() -> Self {
        Self {
            speed_sd: 0.25,
            speed_sd_share: 0.05,
            direction_sd: 2.5,
            speed_step: None,
            direction_step: None,
            calm_below: 0.5,
        }
    }
}

/// What the errors of the estimates hold, and how they are found.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct ErrorSettings {
    /// True for all parts, false for the instruments alone.
    pub complete: bool,
    /// Share of false calls among the values called different from zero. Default 5 %, common practice.
    pub false_discovery_rate: f64,
    /// How winds differ with distance and time.
    pub structure: StructureSettings,
}

impl Default for ErrorSettings {
    fn default() -> Self {
        Self {
            complete: true,
            false_discovery_rate: 0.05,
            structure: StructureSettings::default(),
        }
    }
}

/// Kinematics of each polygon.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct KinematicsSettings {
    /// Whether they are written.
    pub write: bool,
    /// Mean wind below which nothing is said that depends on its direction, m/s. 1 m/s (`methods.md` 3).
    pub least_speed: f64,
}

impl Default for KinematicsSettings {
    fn default() -> Self {
        Self {
            write: false,
            least_speed: 1.0,
        }
    }
}

/// An observed scalar, such as temperature or humidity.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct ScalarSettings {
    /// The user's name of it.
    pub name: String,
    /// Standard error of a value, in its own unit.
    pub error: f64,
}

/// What values are averaged by.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum MeansBy {
    /// By hour of the day, over all days.
    Hour,
    /// By calendar day.
    Day,
    /// By calendar month.
    Month,
    /// By named period.
    Period,
}

/// A named period, both ends included.
#[derive(Debug, Clone, PartialEq)]
pub struct NamedPeriod {
    /// Its name.
    pub name: String,
    /// First time.
    pub from: Time,
    /// Last time.
    pub to: Time,
}

/// Averages over times.
#[derive(Debug, Clone, PartialEq)]
pub struct MeansSettings {
    /// What by; `None` for no averages.
    pub by: Option<MeansBy>,
    /// Whose clock tells hours, days and months.
    pub zone: Zone,
    /// The named periods.
    pub periods: Vec<NamedPeriod>,
}

impl MeansSettings {
    /// The words of the settings.
    pub const WORDS: [(&'static str, MeansBy); 4] = [
        ("hour", MeansBy::Hour),
        ("day", MeansBy::Day),
        ("month", MeansBy::Month),
        ("period", MeansBy::Period),
    ];
}

/// What the calibration leaves out: sectors of wind direction, degrees, from and to clockwise, in which a station stands
/// in the wake of a turbine or in the lee of something else.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct CalibrationChoice {
    /// At all stations.
    pub sectors: Vec<[f64; 2]>,
    /// By station.
    pub station_sectors: BTreeMap<String, Vec<[f64; 2]>>,
    /// Rotor diameter of all stations, m, if they are turbines: the sectors that they disturb for each other are left out.
    pub rotor: Option<f64>,
    /// By station; 0 for a mast.
    pub station_rotors: BTreeMap<String, f64>,
    /// Distance in diameters up to which a turbine disturbs another.
    pub wake_reach: f64,
}

impl Default for CalibrationChoice {
    fn default() -> Self {
        Self {
            sectors: Vec::new(),
            station_sectors: BTreeMap::new(),
            rotor: None,
            station_rotors: BTreeMap::new(),
            wake_reach: WAKE_REACH,
        }
    }
}

/// Default of [`CalibrationChoice::wake_reach`]: beyond 20 diameters no turbine counts (IEC 61400-12-1:2005, annex A; from
/// memory).
pub const WAKE_REACH: f64 = 20.0;

/// How reports become winds at analysis times.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Analysis {
    /// Time between analysis times, which are whole multiples of it since 1970-01-01T00:00:00Z.
    pub interval: Duration,
    /// What stands for a station at an analysis time.
    pub method: AlignMethod,
    /// First analysis time, if limited.
    pub from: Option<Time>,
    /// Last analysis time, if limited.
    pub to: Option<Time>,
    /// Common height to which speeds are reduced, if asked for.
    pub height: Option<HeightReduction>,
    /// The level to use, where reports stand on levels: height, m, or pressure, Pa.
    pub level: Option<f64>,
}

impl Default for Analysis {
    fn default() -> Self {
        let interval = Duration::from_mins(10);
        Self {
            interval,
            method: AlignMethod::Nearest {
                tolerance: interval / 2,
            },
            from: None,
            to: None,
            height: None,
            level: None,
        }
    }
}

/// What stands for a station at an analysis time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum AlignMethod {
    /// The report nearest in time, at most `tolerance` away; of two equally near the earlier.
    Nearest {
        /// Largest distance in time.
        tolerance: Duration,
    },
    /// u and v on the straight line between the reports before and after, each at most `tolerance` away.
    Linear {
        /// Largest distance in time.
        tolerance: Duration,
    },
    /// The vector mean of the reports in the window that ends at the analysis time.
    VectorMean {
        /// Length of the window.
        window: Duration,
        /// Fewest reports that make a mean.
        least_reports: u32,
    },
}

/// Which polygons are built.
#[derive(Debug, Clone, PartialEq)]
pub struct PolygonChoice {
    /// All Delaunay triangles.
    pub triangles: bool,
    /// Rings named by the user.
    pub rings: Vec<RingSettings>,
    /// Unions of polygons named by the user.
    pub regions: Vec<RegionSettings>,
}

/// What becomes of the triangles of a station that is missing.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Missing {
    /// They have no value.
    #[default]
    Skip,
    /// Other triangles of the stations that report stand in their place.
    Remesh,
}

/// A ring named by the user.
#[derive(Debug, Clone, PartialEq)]
pub struct RingSettings {
    /// Its name.
    pub name: String,
    /// Stations in order round the ring, either way.
    pub stations: Vec<String>,
    /// Where the settings name it.
    pub place: Place,
}

/// A union of polygons named by the user.
#[derive(Debug, Clone, PartialEq)]
pub struct RegionSettings {
    /// Its name.
    pub name: String,
    /// What it is made of.
    pub parts: RegionParts,
    /// Where the settings name it.
    pub place: Place,
}

/// What a region is made of.
#[derive(Debug, Clone, PartialEq)]
pub enum RegionParts {
    /// These polygons.
    Polygons(Vec<String>),
    /// All triangles whose corners are all among these stations; those outside the limits only where they are enclosed.
    TrianglesOf(Vec<String>),
    /// All triangles; those outside the limits only where they are enclosed.
    AllTriangles,
}

/// Limits outside which a polygon is left out.
#[derive(Debug, Clone, Copy, PartialEq, serde::Serialize)]
pub struct PolygonLimits {
    /// Smallest interior angle, degrees. Default 15: below it the error of a triangle is at least 1.5 times that of the
    /// equilateral one of the same area (from the noise factor, `methods.md` 1.4).
    pub smallest_angle: f64,
    /// Longest edge, m; none by default, but edges over 500 km give a warning.
    pub longest_edge: Option<f64>,
    /// Smallest area, m².
    pub smallest_area: f64,
    /// Largest area, m².
    pub largest_area: Option<f64>,
    /// Largest difference of the stations' elevations, m; none by default.
    pub elevation_spread: Option<f64>,
    /// Largest slope of the plane of the stations times [`Self::vertical_shear`], 1/s: what a wind that changes with
    /// height adds to vorticity or divergence (`methods.md` 4). None by default.
    pub slope_error: Option<f64>,
    /// Vertical shear to expect, 1/s. Default 0.01: 10 m/s over a kilometre (the example of `methods.md` 4).
    pub vertical_shear: f64,
    /// An estimate with an older wind is suspect, s; none by default, as the age is in the error.
    pub largest_age: Option<f64>,
}

impl Default for PolygonLimits {
    fn default() -> Self {
        Self {
            smallest_angle: 15.0,
            longest_edge: None,
            smallest_area: 0.0,
            largest_area: None,
            elevation_spread: None,
            slope_error: None,
            vertical_shear: 0.01,
            largest_age: None,
        }
    }
}
