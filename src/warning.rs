//! Warnings: what was noticed, and what to do about it.

use std::fmt;

use crate::station::PositionSlip;

/// Slope times shear that is worth a warning, 1/s: as large as the vorticity and divergence of fronts (`methods.md` 4 and 9).
pub(crate) const STEEP: f64 = 1e-4;

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
    /// Stations of the list that have no position in any row.
    NoPosition {
        /// How many.
        stations: usize,
        /// The first of them.
        first: Vec<String>,
    },
    /// Aliases that do not tell stations apart; they are not used.
    SharedAliases {
        /// How many.
        aliases: usize,
        /// The first of them.
        first: String,
        /// Stations it belongs to.
        stations: Vec<String>,
    },
    /// Stations at latitude 0, longitude 0, far from all others.
    AtZero {
        /// How many.
        stations: usize,
        /// The first of them.
        first: Vec<String>,
        /// Distance of the nearest other station, m.
        metres: f64,
    },
    /// A station far from all others.
    FarStation {
        /// The station.
        station: String,
        /// The one nearest to it.
        nearest: String,
        /// Their distance, m.
        metres: f64,
        /// Median distance of nearest stations in the network, m.
        median: f64,
        /// What would explain it.
        slip: Option<PositionSlip>,
        /// Stations that are as far from all others, besides this one.
        more: usize,
    },
    /// Stations of some polygons stand on slopes.
    SteepGround {
        /// Polygons where vertical shear passes for 1e-4 1/s or more.
        polygons: usize,
        /// The largest slope times the shear to expect, 1/s.
        worst: f64,
        /// The shear to expect, 1/s.
        shear: f64,
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
    /// Stations without a usable report.
    NeverReported {
        /// How many.
        stations: usize,
        /// The first of them.
        first: Vec<String>,
        /// Polygons that have no value for it.
        polygons: usize,
    },
    /// Line integral and linear fit of a polygon disagree beyond their errors.
    FitDisagrees {
        /// Which.
        polygon: String,
        /// Share of the times at which they do.
        share: f64,
        /// Times compared.
        times: u64,
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

    fn far_station(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self::FarStation {
            station,
            nearest,
            metres,
            median,
            slip,
            more,
        } = self
        else {
            return Ok(());
        };
        write!(
            f,
            "station `{station}` stands {:.0} km from the nearest other station, `{nearest}` (median of the network \
             {:.0} km)",
            metres / 1e3,
            median / 1e3
        )?;
        if *more > 0 {
            write!(f, ", and {more} more are as lonely")?;
        }
        f.write_str(match slip {
            Some(PositionSlip::LongitudeSign) => {
                ": is the sign of the longitude mirrored? With the other sign it would stand among them"
            }
            Some(PositionSlip::LatitudeSign) => {
                ": is the sign of the latitude mirrored? With the other sign it would stand among them"
            }
            Some(PositionSlip::Swapped) => {
                ": are latitude and longitude swapped? The other way round it would stand among them"
            }
            None => {
                ": check the position; if it is right, set `limits.longest_edge` so that its long edges make no \
                 polygons"
            }
        })
    }
}

/// The names, and how many more there are.
fn some_of(first: &[String], of: usize) -> String {
    let names: Vec<String> = first.iter().map(|name| format!("`{name}`")).collect();
    match of.saturating_sub(first.len()) {
        0 => names.join(", "),
        more => format!("{} and {more} more", names.join(", ")),
    }
}

impl fmt::Display for Warning {
    #[expect(clippy::too_many_lines, reason = "one arm for each warning")]
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
            Self::NoPosition { stations, first } => write!(
                f,
                "without a position in any row of the list, so left out: {}. Add a row with latitude and longitude to \
                 use such a station",
                some_of(first, *stations)
            ),
            Self::SharedAliases {
                aliases,
                first,
                stations,
            } => {
                let names = some_of(stations, stations.len());
                write!(
                    f,
                    "alias `{first}` belongs to several stations ({names}) and is not used"
                )?;
                if *aliases > 1 {
                    write!(f, ", nor are {} more like it", aliases - 1)?;
                }
                f.write_str(
                    ". Give each station its own, or leave that column out of `stations.columns.aliases`",
                )
            }
            Self::AtZero {
                stations,
                first,
                metres,
            } => write!(
                f,
                "at latitude 0, longitude 0, {:.0} km from all other stations: {}. Is the position unknown? State it, or \
                 take the station out of the list",
                metres / 1e3,
                some_of(first, *stations)
            ),
            Self::FarStation { .. } => self.far_station(f),
            Self::SteepGround {
                polygons,
                worst,
                shear,
            } => write!(
                f,
                "{polygons} polygons stand on slopes where a wind that changes by {shear} 1/s with height passes for \
                 vorticity or divergence of {STEEP:.0e} 1/s or more (up to {worst:.0e}). Set `limits.slope_error` to \
                 leave them out"
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
            Self::NeverReported {
                stations,
                first,
                polygons,
            } => {
                let names: Vec<String> = first.iter().map(|id| format!("`{id}`")).collect();
                let more = if *stations > first.len() { ", ..." } else { "" };
                write!(
                    f,
                    "{stations} stations have no usable report ({}{more}), so {polygons} polygons have no values; name \
                     the others in `stations.only` to join them without these",
                    names.join(", ")
                )
            }
            Self::FitDisagrees {
                polygon,
                share,
                times,
            } => write!(
                f,
                "{polygon}: line integral and linear fit disagree beyond their errors at {:.0} % of {times} times (1 % \
                 expected); a wind of one of its stations may be wrong, or the weather smaller than the polygon",
                100.0 * share
            ),
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
