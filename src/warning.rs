//! Warnings: what was noticed, and what to do about it.

use std::fmt;

/// Something a user should know; the run goes on.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum Warning {
    /// Two stations stand at one place.
    OnePlace {
        /// Station that makes triangles.
        kept: String,
        /// Station left out of the triangulation.
        left_out: String,
        /// Their distance, m.
        metres: f64,
    },
    /// Edges so long that the flux rule loses accuracy.
    LongEdges {
        /// Polygons with such an edge.
        polygons: usize,
        /// Longest edge, m.
        longest: f64,
    },
    /// Reports of stations that the list does not have.
    UnknownStation {
        /// Name in the reports.
        name: String,
        /// Rows.
        rows: u64,
        /// The station that may be meant.
        nearest: Option<String>,
    },
    /// The speeds of a station cannot be reduced to the common height.
    NoHeightFactor {
        /// Which.
        station: String,
        /// Why.
        reason: String,
    },
    /// Input rows that could not be used.
    UnusableRows {
        /// File.
        file: String,
        /// Rows.
        rows: u64,
        /// The first of them, with place and reason.
        first: Vec<crate::error::Problem>,
    },
    /// Most polygons cannot be used.
    FewPolygons {
        /// Polygons within the limits.
        usable: usize,
        /// All polygons.
        of: usize,
    },
}

impl Warning {
    /// True if it means that some input was unusable (exit status 1).
    #[must_use]
    pub fn is_unusable_input(&self) -> bool {
        matches!(
            self,
            Self::UnusableRows { .. } | Self::UnknownStation { .. }
        )
    }
}

impl fmt::Display for Warning {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::OnePlace {
                kept,
                left_out,
                metres,
            } => write!(
                f,
                "stations `{kept}` and `{left_out}` stand {metres:.1} m apart; `{left_out}` is left out of the \
                 triangles. If they are two sensors of one site, keep the better one in the list"
            ),
            Self::LongEdges { polygons, longest } => write!(
                f,
                "polygons with an edge over {:.0} km: {polygons} (longest {:.0} km); the flux along such an edge is \
                 only good to {:.0e} of the wind through it. Set `limits.longest_edge` to leave them out",
                crate::polygon::LONG_EDGE / 1e3,
                longest / 1e3,
                crate::polygon::flux_rule_error(*longest)
            ),
            Self::UnknownStation {
                name,
                rows,
                nearest,
            } => {
                write!(
                    f,
                    "{rows} reports of `{name}`, which is not in the station list"
                )?;
                match nearest {
                    Some(nearest) => write!(f, "; is `{nearest}` meant?"),
                    None => Ok(()),
                }
            }
            Self::NoHeightFactor { station, reason } => write!(
                f,
                "station `{station}` is left out, its speeds cannot be reduced to the common height: {reason}"
            ),
            Self::UnusableRows { file, rows, first } => {
                write!(f, "{file}: {rows} rows could not be used")?;
                for problem in first {
                    write!(f, "\n  {problem}")?;
                }
                let more = rows.saturating_sub(first.len() as u64);
                if more > 0 && !first.is_empty() {
                    write!(f, "\n  and {more} more")?;
                }
                Ok(())
            }
            Self::FewPolygons { usable, of } => write!(
                f,
                "only {usable} of {of} polygons are within the limits; `gyremesh polygons` lists the reasons"
            ),
        }
    }
}
