//! From which stations each one is predicted.

use crate::station::{Network, Position};
use crate::structure::{LocalPlane, PlanePoint, nearest_stations};

/// Stations that a wind is predicted from, at most. Nearer ones screen those behind them: under k^(−5/3) ten give a
/// prediction whose error is within 1.5 % of that from thirty, at all exponents to 4/3 (`tests` of this folder).
pub(super) const MOST: usize = 10;

/// A station and those around it, in the plane about it.
#[derive(Debug, Clone)]
pub(super) struct Neighbourhood {
    pub(super) here: PlanePoint,
    /// Nearest first, at most [`MOST`].
    pub(super) others: Vec<(usize, PlanePoint)>,
}

/// Chooses among the stations that report, within four spacings.
pub(super) fn choose(network: &Network, spacing: f64, reporting: &[bool]) -> Vec<Neighbourhood> {
    let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
    let near = nearest_stations(&positions, 4.0 * spacing, MOST, reporting);
    near.into_iter()
        .zip(&positions)
        .map(|(others, &position)| {
            let plane = LocalPlane::at((position.latitude(), position.longitude()));
            Neighbourhood {
                here: plane.place(position),
                others: others
                    .into_iter()
                    .map(|other| (other, plane.place(positions[other])))
                    .collect(),
            }
        })
        .collect()
}
