//! Joins the stages: settings and stations, reports, checks, alignment, estimates.

mod calibrate;
mod complete;
mod decompose;
mod estimation;
mod events;
mod field;
mod level_polygons;
mod neighbours;
mod outliers;
mod profile;
mod reading;
mod remesh;
mod run;
mod windows;

use std::path::{Path, PathBuf};

use crate::error::{Error, Problem};
use crate::integral::{SelfTest, planetary_vorticity, self_test};
use crate::polygon::{BuiltPolygons, build_polygons, median_edge};
use crate::settings::{Overrides, Settings, read_settings};
use crate::station::{Network, Period, Position, doubts, read_catalogue};
use crate::structure::typical_spacing;
use crate::warning::Warning;

pub use calibrate::{CalibrationOutcome, calibrate};
pub use events::{EventsOutcome, find_events, find_events_and};
pub use profile::{LevelEstimate, PolygonProfile, ProfileOutcome, profile};
pub use reading::Reading;
pub use run::{BlockView, Outcome, StructureReport, run};
pub use windows::{Window, Windows};

/// Settings and stations: all that reading the reports needs.
#[derive(Debug)]
pub struct Sources {
    /// The settings file.
    pub path: PathBuf,
    /// The settings.
    pub settings: Settings,
    /// The stations; of one that moved, the last place.
    pub network: Network,
    /// What the user should know.
    pub warnings: Vec<Warning>,
}

impl Sources {
    /// Reads settings and station list.
    ///
    /// # Errors
    /// All defects of both at once.
    pub fn read(path: &Path, overrides: &Overrides) -> Result<Self, Error> {
        let (sources, problems) = read_sources(path, overrides, false)?;
        if problems.is_empty() {
            Ok(sources)
        } else {
            Err(Error::Invalid(problems))
        }
    }
}

/// A network ready for estimates: settings checked, stations read, polygons built.
#[derive(Debug)]
pub struct Setup {
    /// The settings file.
    pub path: PathBuf,
    /// The settings.
    pub settings: Settings,
    /// The stations; of one that moved, the place in the analysis period.
    pub network: Network,
    /// The polygons.
    pub built: BuiltPolygons,
    /// Planetary vorticity of each polygon, 1/s.
    pub planetary: Vec<f64>,
    /// The self-test of the geometry, passed.
    pub self_test: SelfTest,
    /// What the user should know of the stations.
    pub warnings: Vec<Warning>,
}

impl Setup {
    /// Whether there is anything to estimate.
    ///
    /// # Errors
    /// No polygon is within the limits.
    pub fn has_polygons(&self) -> Result<(), Error> {
        if self.built.polygons.is_empty() {
            return Err(Error::Network(format!(
                "none of {} polygons is within the limits; `gyremesh polygons` lists the reasons",
                self.built.excluded.len()
            )));
        }
        Ok(())
    }

    /// Reads settings and stations, and builds the polygons.
    ///
    /// # Errors
    /// All defects of settings, station list, rings and regions at once; stations that make no polygon; a failed
    /// self-test.
    pub fn read(path: &Path, overrides: &Overrides) -> Result<Self, Error> {
        let (sources, mut problems) = read_sources(path, overrides, true)?;
        let Sources {
            path,
            settings,
            network,
            warnings,
        } = sources;
        let built = match build_polygons(&network, &settings.polygons, &settings.limits) {
            Ok(built) => built,
            Err(Error::Invalid(more)) => {
                problems.extend(more);
                return Err(Error::Invalid(problems));
            }
            Err(Error::Network(message)) if problems.is_empty() => {
                // A misplaced station may be the reason.
                let lines = warnings.iter().map(|warning| format!("\n  {warning}"));
                return Err(Error::Network(message + &lines.collect::<String>()));
            }
            Err(error) if problems.is_empty() => return Err(error),
            Err(error) => {
                problems.push(Problem::new(
                    crate::error::Place::default(),
                    error.to_string(),
                ));
                return Err(Error::Invalid(problems));
            }
        };
        if !problems.is_empty() {
            return Err(Error::Invalid(problems));
        }
        let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
        let self_test = self_test(&built.polygons, &built.edges, &positions);
        if !self_test.passed {
            return Err(Error::SelfTest {
                polygon: self_test.polygon,
                difference: self_test.largest_difference,
                allowed: self_test.allowed,
            });
        }
        let planetary = built
            .polygons
            .iter()
            .map(|p| planetary_vorticity(p, &positions))
            .collect();
        Ok(Self {
            path,
            settings,
            network,
            built,
            planetary,
            self_test,
            warnings,
        })
    }
}

impl Setup {
    /// How far apart the stations stand, m: the median edge of all polygons, or the typical distance to a neighbour where
    /// there are none; `None` for fewer than two places.
    #[must_use]
    pub fn spacing(&self) -> Option<f64> {
        self.median_edge()
            .or_else(|| typical_spacing(&self.network))
    }

    /// Median length of the edges of all polygons, m.
    #[must_use]
    pub fn median_edge(&self) -> Option<f64> {
        median_edge(&self.built.edges)
    }
}

/// The parts of the analysis period in which no station moves; one where nothing does, and where settings or station list
/// have defects, which [`Setup::read`] tells.
///
/// # Errors
/// The settings cannot be read.
pub fn epochs(path: &Path, overrides: &Overrides) -> Result<Vec<Period>, Error> {
    let (settings, _) = read_settings(path, overrides)?;
    let period = Period {
        from: settings.analysis.from,
        to: settings.analysis.to,
    };
    match read_catalogue(&settings.station_file, &settings.catalogue) {
        Ok(list) => Ok(list.epochs(period)),
        Err(_) => Ok(vec![period]),
    }
}

/// Settings and stations with the defects of the settings. Without `one_place`, a station that moved is taken at its
/// last place.
fn read_sources(
    path: &Path,
    overrides: &Overrides,
    one_place: bool,
) -> Result<(Sources, Vec<Problem>), Error> {
    let (settings, mut problems) = read_settings(path, overrides)?;
    if settings.station_file.as_os_str().is_empty() {
        return Err(Error::Invalid(problems));
    }
    let period = Period {
        from: settings.analysis.from,
        to: settings.analysis.to,
    };
    let made = read_catalogue(&settings.station_file, &settings.catalogue).and_then(|list| {
        let network = if one_place {
            list.network(period).map_err(Error::Invalid)?
        } else {
            list.all_times()
        };
        Ok((network, list.warnings().to_vec()))
    });
    match made {
        Ok((network, mut warnings)) => {
            warnings.extend(doubts(&network));
            let sources = Sources {
                path: path.to_path_buf(),
                settings,
                network,
                warnings,
            };
            Ok((sources, problems))
        }
        Err(Error::Invalid(more)) => {
            problems.extend(more);
            Err(Error::Invalid(problems))
        }
        Err(error) => Err(error),
    }
}
