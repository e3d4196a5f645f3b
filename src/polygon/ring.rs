//! Rings of stations: what makes one simple, and every defect of one that is not.

use std::fmt;

use geo::algorithm::line_intersection::line_intersection;
use geo::{Coord, Line};
use geographiclib_rs::Geodesic;
use nalgebra::Vector3;

use super::sphere::{Tangent, cap_centre, unit_vector};
use crate::station::{Network, ONE_PLACE};

/// Why stations make no polygon.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum InvalidPolygon {
    /// Fewer than three stations.
    TooFewStations {
        /// How many there are.
        got: usize,
    },
    /// A station is named twice.
    StationRepeated {
        /// Which.
        station: String,
    },
    /// Two stations stand at one place.
    StationsCoincide {
        /// One.
        a: String,
        /// The other.
        b: String,
        /// Their distance, m.
        metres: f64,
    },
    /// Two edges cross or touch.
    EdgesCross {
        /// One, as start and end station.
        first: (String, String),
        /// The other.
        second: (String, String),
    },
    /// The ring does not fit into a hemisphere.
    TooWide,
    /// The stations stand on one line.
    Flat,
}

impl fmt::Display for InvalidPolygon {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::TooFewStations { got } => {
                write!(f, "{got} stations make no ring (at least 3 expected)")
            }
            Self::StationRepeated { station } => {
                write!(
                    f,
                    "station `{station}` is named twice (each once expected, without closing the ring)"
                )
            }
            Self::StationsCoincide { a, b, metres } => {
                write!(
                    f,
                    "stations `{a}` and `{b}` stand at one place ({metres:.1} m apart)"
                )
            }
            Self::EdgesCross { first, second } => write!(
                f,
                "the edge from `{}` to `{}` crosses the edge from `{}` to `{}`",
                first.0, first.1, second.0, second.1
            ),
            Self::TooWide => f.write_str("the ring is wider than a hemisphere"),
            Self::Flat => f.write_str("the stations stand on one line"),
        }
    }
}

impl std::error::Error for InvalidPolygon {}

/// Every defect of a ring of stations (numbers of the network) but flatness, which its area tells.
#[must_use]
pub fn defects(ring: &[usize], network: &Network) -> Vec<InvalidPolygon> {
    let name = |s: usize| network.stations()[s].id.clone();
    let mut found = Vec::new();
    if ring.len() < 3 {
        found.push(InvalidPolygon::TooFewStations { got: ring.len() });
    }
    let geodesic = Geodesic::wgs84();
    for (k, &a) in ring.iter().enumerate() {
        for &b in &ring[k + 1..] {
            if a == b {
                found.push(InvalidPolygon::StationRepeated { station: name(a) });
                continue;
            }
            let (p, q) = (
                network.stations()[a].position,
                network.stations()[b].position,
            );
            let metres = p.distance(q, &geodesic);
            if metres < ONE_PLACE {
                found.push(InvalidPolygon::StationsCoincide {
                    a: name(a),
                    b: name(b),
                    metres,
                });
            }
        }
    }
    if !found.is_empty() {
        return found;
    }
    let directions: Vec<Vector3<f64>> = ring
        .iter()
        .map(|&s| unit_vector(network.stations()[s].position))
        .collect();
    let Some(outline) = flat_outline(&directions) else {
        return vec![InvalidPolygon::TooWide];
    };
    for (i, j) in crossings(&outline) {
        let edge = |k: usize| (name(ring[k]), name(ring[(k + 1) % ring.len()]));
        found.push(InvalidPolygon::EdgesCross {
            first: edge(i),
            second: edge(j),
        });
    }
    found
}

/// The ring in a plane where its edges are straight; `None` if it does not fit into a hemisphere.
fn flat_outline(directions: &[Vector3<f64>]) -> Option<Vec<Coord<f64>>> {
    let centre = cap_centre(directions)?;
    let tangent = Tangent::at(centre);
    directions
        .iter()
        .map(|p| {
            (p.dot(&centre) > 0.01).then(|| {
                let [x, y] = tangent.gnomonic(p);
                Coord { x, y }
            })
        })
        .collect()
}

/// Pairs of edges that meet where a simple ring's edges do not: neighbours only at their common end, others nowhere.
fn crossings(outline: &[Coord<f64>]) -> Vec<(usize, usize)> {
    let n = outline.len();
    let edge = |k: usize| Line::new(outline[k], outline[(k + 1) % n]);
    let mut found = Vec::new();
    for i in 0..n {
        for j in i + 1..n {
            let neighbours = j == i + 1 || (i == 0 && j == n - 1);
            let meets = match line_intersection(edge(i), edge(j)) {
                None => false,
                Some(geo::LineIntersection::Collinear { .. }) => true,
                Some(geo::LineIntersection::SinglePoint { .. }) => !neighbours,
            };
            if meets {
                found.push((i, j));
            }
        }
    }
    found
}

/// True if the two outlines (loops of station numbers, counter-clockwise) share ground.
///
/// They do if edges cross, if an edge runs the same way in both, or if a corner or an edge's middle of one lies inside
/// the other. `None` if together they do not fit into a hemisphere.
pub(super) fn overlap(a: &[usize], b: &[usize], network: &Network) -> Option<bool> {
    use geo::{Contains, LineString, Point, Polygon};

    let directions: Vec<Vector3<f64>> = a
        .iter()
        .chain(b)
        .map(|&s| unit_vector(network.stations()[s].position))
        .collect();
    let flat = flat_outline(&directions)?;
    let (fa, fb) = flat.split_at(a.len());
    let edges = |ring: &[usize]| -> Vec<(usize, usize)> {
        (0..ring.len())
            .map(|k| (ring[k], ring[(k + 1) % ring.len()]))
            .collect()
    };
    let (ea, eb) = (edges(a), edges(b));
    if ea.iter().any(|edge| eb.contains(edge)) {
        return Some(true);
    }
    let line = |flat: &[Coord<f64>], k: usize| Line::new(flat[k], flat[(k + 1) % flat.len()]);
    for i in 0..fa.len() {
        for j in 0..fb.len() {
            let proper = matches!(
                line_intersection(line(fa, i), line(fb, j)),
                Some(geo::LineIntersection::SinglePoint {
                    is_proper: true,
                    ..
                })
            );
            if proper {
                return Some(true);
            }
        }
    }
    let polygon = |flat: &[Coord<f64>]| Polygon::new(LineString::new(flat.to_vec()), Vec::new());
    let (pa, pb) = (polygon(fa), polygon(fb));
    let inside = |outer: &Polygon<f64>, inner: &[Coord<f64>], shared: &dyn Fn(usize) -> bool| {
        (0..inner.len()).any(|k| {
            let middle = line(inner, k);
            let middle = Point::from((middle.start + middle.end) / 2.0);
            outer.contains(&Point::from(inner[k])) || (!shared(k) && outer.contains(&middle))
        })
    };
    // The middle of a shared edge lies on both outlines; rounding must not put it inside.
    let shared_b = |k: usize| ea.contains(&(eb[k].1, eb[k].0));
    let shared_a = |k: usize| eb.contains(&(ea[k].1, ea[k].0));
    Some(inside(&pa, fb, &shared_b) || inside(&pb, fa, &shared_a))
}
