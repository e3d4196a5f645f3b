//! Wind reports: reading them into columns.
//!
//! A report is one station's wind at one time. Readers turn rows of any format into [`Rows`], plain columns in the
//! order of the input; [`ReportTable`] sorts them by station and time, counts repeats, and is what all later stages
//! see. No reader allocates per row.

mod blocks;
mod csv;
mod number;
mod table;

use serde::Serialize;

use crate::units::SpeedUnit;

pub use csv::{ReadOutcome, read_reports};
pub use table::{Content, ReportTable, Rows};

/// Columns and units of a long table: one row for each station and time.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct ReportFormat {
    /// Column of the station identifier.
    pub station: String,
    /// Column of the time, RFC 3339.
    pub time: String,
    /// Columns of the wind.
    pub wind: WindColumns,
    /// Unit of speeds and components.
    #[serde(serialize_with = "unit_symbol")]
    pub speed_unit: SpeedUnit,
    /// Texts that mean "no value"; if empty, [`MISSING_MARKS`].
    pub missing: Vec<String>,
}

/// Texts that mean "no value" unless the settings state others (common practice).
pub const MISSING_MARKS: [&str; 11] = [
    "", "NA", "N/A", "NaN", "null", "M", "MM", "-", "///", "-9999", "-999",
];

/// How the wind is given.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum WindColumns {
    /// Direction it blows from, degrees clockwise from true north, and speed.
    DirectionSpeed {
        /// Column of the direction.
        direction: String,
        /// Column of the speed.
        speed: String,
    },
    /// Components.
    Components {
        /// Column of the component towards east.
        eastward: String,
        /// Column of the component towards north.
        northward: String,
    },
}

#[expect(
    clippy::trivially_copy_pass_by_ref,
    reason = "the signature is serde's"
)]
fn unit_symbol<S: serde::Serializer>(unit: &SpeedUnit, serializer: S) -> Result<S::Ok, S::Error> {
    serializer.serialize_str(unit.symbol())
}
