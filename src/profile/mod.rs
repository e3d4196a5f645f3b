//! Profiles: the wind of platforms that report on many levels, and the vertical motion that their divergence makes.
//!
//! [`Ascent`] gives a platform's wind and place at a level or in a layer, [`Column`] the vertical motion, with errors. The
//! areas between, level by level, are polygons like all others ([`crate::pipeline::profile()`]).

mod atmosphere;
mod level;
mod vertical;

pub use atmosphere::{Air, GAS_CONSTANT, GRAVITY, air_at_height, air_at_pressure, w_of_omega};
pub use level::{Ascent, Level, LevelReport, LevelWind, NoWind};
pub use vertical::{
    Adjustment, Column, Measured, Motion, VerticalMotion, motion_along_slope, motion_at_height,
};

/// What levels are counted in.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Coordinate {
    /// Pressure, Pa, falling upward.
    Pressure,
    /// Height, m, growing upward.
    Height,
}

impl Coordinate {
    /// True if `a` is above `b`.
    #[must_use]
    pub fn is_above(self, a: f64, b: f64) -> bool {
        match self {
            Self::Pressure => a < b,
            Self::Height => a > b,
        }
    }

    /// A level with its unit, such as `850 hPa` or `1500 m`.
    #[must_use]
    pub fn words(self, level: f64) -> String {
        match self {
            Self::Pressure => format!("{} hPa", (level / 100.0 * 1e6).round() / 1e6),
            Self::Height => format!("{} m", (level * 1e6).round() / 1e6),
        }
    }
}
