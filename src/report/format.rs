//! What the settings say of a group of report files.

use serde::Serialize;

use crate::input::{TextFormat, TimeFormat};
use crate::time::Time;
use crate::units::{North, SpeedUnit};

/// The mark in a column name that stands for the station: such a table is wide, a column for each station.
pub(super) const STATION_MARK: &str = "{station}";

/// How a group of report files is written.
#[derive(Debug, Clone, PartialEq)]
pub struct ReportFormat {
    /// Table or code form.
    pub form: ReportForm,
    /// Text of tables.
    pub text: TextFormat,
    /// Times of tables.
    pub time: TimeFormat,
    /// Unit of speeds, components and gusts, unless a station has its own; code forms carry theirs.
    pub speed_unit: SpeedUnit,
    /// What directions are counted from, unless a station has its own.
    pub north: North,
    /// One unit of the level column in Pa or m.
    pub level_factor: f64,
    /// A time within two weeks of all code-form reports, which carry only day and hour.
    pub reference: Option<Time>,
}

impl Default for ReportFormat {
    fn default() -> Self {
        Self {
            form: ReportForm::Table(Columns::default()),
            text: TextFormat::default(),
            time: TimeFormat::default(),
            speed_unit: SpeedUnit::MetrePerSecond,
            north: North::True,
            level_factor: 1.0,
            reference: None,
        }
    }
}

/// Table or code form.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
#[expect(
    clippy::large_enum_variant,
    reason = "there is one for each group of report files"
)]
pub enum ReportForm {
    /// Rows and columns: text, Parquet or Arrow IPC (found by the content).
    Table(Columns),
    /// METAR and SPECI (WMO-No. 306, FM 15 and FM 16), in bulletins or one a line.
    Metar,
    /// SYNOP from land stations (WMO-No. 306, FM 12), in bulletins.
    Synop,
}

/// Columns of a table by name.
///
/// If a name of the wind holds `{station}`, the table is wide: one row for each time, a column for each station.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Columns {
    /// Station identifier; `None` in a wide table, or where a METAR column tells it.
    pub station: Option<String>,
    /// The time; the texts of several columns are joined by a space. None where a METAR column tells it.
    pub time: Vec<String>,
    /// The wind.
    pub wind: WindColumns,
    /// Gust.
    pub gust: Option<String>,
    /// Degrees north of a platform that moves.
    pub latitude: Option<String>,
    /// Degrees east of a platform that moves.
    pub longitude: Option<String>,
    /// Level of the report: height or pressure.
    pub level: Option<String>,
    /// Observed scalars, in tables with a row for each station and time.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub scalars: Vec<ScalarColumn>,
}

/// The column of an observed scalar, such as temperature.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct ScalarColumn {
    /// The user's name of it.
    pub name: String,
    /// Name of the column.
    pub column: String,
    /// Its place among the scalars of all report files, below [`super::SCALARS`].
    pub slot: usize,
}

impl Default for Columns {
    fn default() -> Self {
        Self {
            station: Some("station".into()),
            time: vec!["time".into()],
            wind: WindColumns::DirectionSpeed {
                direction: "direction".into(),
                speed: "speed".into(),
            },
            gust: None,
            latitude: None,
            longitude: None,
            level: None,
            scalars: Vec::new(),
        }
    }
}

/// How the wind is given.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum WindColumns {
    /// Direction it blows from, degrees or compass words, and speed.
    DirectionSpeed {
        /// Column of the direction.
        direction: String,
        /// Column of the speed.
        speed: String,
    },
    /// Speed alone; the direction stands in another file.
    Speed {
        /// Column of the speed.
        speed: String,
    },
    /// Direction alone; the speed stands in another file.
    Direction {
        /// Column of the direction.
        direction: String,
    },
    /// Components.
    Components {
        /// Column of the component towards east.
        eastward: String,
        /// Column of the component towards north.
        northward: String,
    },
    /// The text of a METAR or SPECI.
    Metar {
        /// Column of the text.
        report: String,
    },
}

impl WindColumns {
    /// Names of the one or two columns.
    #[must_use]
    pub fn names(&self) -> (&str, Option<&str>) {
        match self {
            Self::DirectionSpeed { direction, speed } => (direction, Some(speed)),
            Self::Components {
                eastward,
                northward,
            } => (eastward, Some(northward)),
            Self::Speed { speed: one }
            | Self::Direction { direction: one }
            | Self::Metar { report: one } => (one, None),
        }
    }

    /// True if the table has a column for each station.
    #[must_use]
    pub fn is_wide(&self) -> bool {
        let (first, second) = self.names();
        first.contains(STATION_MARK) || second.is_some_and(|s| s.contains(STATION_MARK))
    }
}
