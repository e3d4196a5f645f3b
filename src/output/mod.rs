//! Writes results. Nothing here computes.

#[cfg(feature = "parquet")]
mod arrow;
mod calibration;
#[cfg(feature = "parquet")]
mod columns;
mod csv;
mod decompose;
mod events;
mod features;
mod file;
mod fits;
mod flagged;
#[cfg(feature = "parquet")]
mod flagged_parquet;
mod frames;
mod geojson;
#[cfg(feature = "parquet")]
mod geoparquet;
mod kinematics;
mod mesh;
mod netcdf;
#[cfg(feature = "parquet")]
mod parquet;
pub mod plot;
mod profile;
mod reading;
mod reason;
mod report;
mod scalars;
mod series;
#[cfg(feature = "parquet")]
mod standing;
mod structure;
mod summary;
#[cfg(feature = "parquet")]
mod template;
mod vertical_motion;

pub use calibration::{
    GAUGE, calibration_csv, calibration_json, corrected_list, corrected_list_section,
    corrections_of, maintenance_csv, what,
};
pub(crate) use csv::quoted;
pub use csv::{PolygonRows, means_csv, mesh_csv, stations_csv, summary_csv};
pub use events::{
    area_id, arrivals_csv, events_csv, events_geojson, events_json, line_id, shifts_csv,
};
pub use file::OutputSet;
pub use flagged::{FlaggedFiles, FlaggedFormats};
pub use frames::{Cell, Frame, Frames};
pub use geojson::{mesh_geojson, outline_geometry};
pub use kinematics::kinematics_means_csv;
pub use mesh::mesh_json;
pub use profile::{assumptions, profile_csv, profile_json, w_of};
pub use reading::reading_json;
pub use report::report_html;
pub use series::{EncodedBlock, SeriesChoice, SeriesEncoder, SeriesFiles, SeriesFormat, series};
pub use structure::structure_csv;
pub(crate) use summary::significant_share;
pub use summary::summary_json;
pub use vertical_motion::assumption_of_height;

#[cfg(feature = "parquet")]
use crate::pipeline::Setup;
use crate::settings::ErrorSettings;

/// What a polygon's estimate is not, wherever results are shown.
pub const CAUTION: &str = "These are estimates, not warnings. For severe weather, turbines and aviation follow the national \
                           weather service, site safety rules, local codes and licensed practice.";

/// What the error bars hold.
#[must_use]
pub fn error_bars(errors: &ErrorSettings) -> &'static str {
    if errors.complete {
        "one standard error: sensors and sites, the wind between the stations, and reports beside the analysis time; \
         a sensor that is turned or mis-scaled is not in it"
    } else {
        "one standard error, from instrument errors and rounding only; the wind between the stations is not in it"
    }
}

/// What tables say of the run: key and text.
#[cfg(feature = "parquet")]
fn file_metadata(setup: &Setup) -> [(&'static str, String); 5] {
    let settings = &setup.settings;
    [
        ("program", format!("gyremesh {}", env!("CARGO_PKG_VERSION"))),
        ("network", settings.name.clone()),
        ("caution", CAUTION.to_string()),
        ("error_bars", error_bars(&settings.errors).to_string()),
        ("settings", summary::settings(settings).to_string()),
    ]
}
