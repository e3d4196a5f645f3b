//! Pictures: maps, series, profiles, structure functions and calibrations, as SVG and PNG.

mod axis;
pub(crate) mod barb;
pub(crate) mod base;
mod calibration;
mod chart;
pub(crate) mod colour;
mod land;
mod map;
mod png;
mod profile;
mod projection;
mod series;
mod structure;
mod svg;

pub(crate) use axis::plain_time;
pub use calibration::calibration_picture;
pub(crate) use map::HATCH;
pub use map::map_picture;
pub use png::png;
pub use profile::profile_picture;
pub use series::series_picture;
pub use structure::structure_picture;

use self::svg::{Style, Svg, width_of};

/// Colours of the ground of maps.
pub(crate) const LAND: &str = "#ece9e1";
/// Water.
pub(crate) const SEA: &str = "#dfe8ee";
/// Coasts.
pub(crate) const COAST: &str = "#8b9198";

/// What a picture shows.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Quantity {
    /// Area-mean relative vorticity.
    Vorticity,
    /// Area-mean horizontal divergence.
    Divergence,
}

impl Quantity {
    /// Both.
    pub const ALL: [Self; 2] = [Self::Vorticity, Self::Divergence];

    /// Its place in a pair of columns.
    #[must_use]
    pub const fn index(self) -> usize {
        match self {
            Self::Vorticity => 0,
            Self::Divergence => 1,
        }
    }

    /// Its name.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Vorticity => "vorticity",
            Self::Divergence => "divergence",
        }
    }

    /// Its name at the beginning of a sentence.
    #[must_use]
    pub const fn title(self) -> &'static str {
        match self {
            Self::Vorticity => "Area-mean vorticity",
            Self::Divergence => "Area-mean divergence",
        }
    }

    /// What stands along its axis.
    #[must_use]
    pub const fn axis(self) -> &'static str {
        match self {
            Self::Vorticity => "vorticity, 10⁻⁵ s⁻¹ (positive: counter-clockwise)",
            Self::Divergence => "divergence, 10⁻⁵ s⁻¹ (negative: convergence)",
        }
    }
}

/// A text in small letters, in lines of a width.
fn footnote(svg: &mut Svg, [x, mut y]: [f64; 2], text: &str, width: f64) {
    // Running text is narrower than identifiers.
    let fits = |line: &str, word: &str| 0.94 * width_of(&format!("{line} {word}"), 11.0) <= width;
    let mut line = String::new();
    for word in text.split_whitespace() {
        if !line.is_empty() && !fits(&line, word) {
            svg.text([x, y], &line, Style::note(11.0));
            line.clear();
            y += 15.0;
        }
        if !line.is_empty() {
            line.push(' ');
        }
        line.push_str(word);
    }
    svg.text([x, y], &line, Style::note(11.0));
}
