//! Doubts about positions: stations that stand where none is likely to stand.

use super::{Network, Position, Station};
use crate::units::sin_cos_degrees;
use crate::warning::Warning;

/// Mean radius of the Earth, m (GRS 80, Moritz 2000); distances here are good to 0.6 %, enough for a doubt.
const EARTH_RADIUS: f64 = 6_371_008.8;
/// A position within this of 0, 0 is likely to be an unknown one, degrees.
const NEAR_ZERO: f64 = 0.01;
/// ... unless other stations are this near, m.
const FAR_FROM_ZERO: f64 = 500e3;
/// A station is far if its nearest neighbour is farther than this, m,
const FAR: f64 = 100e3;
/// and farther than this many times the median over the network.
const FAR_IN_MEDIANS: f64 = 10.0;
/// A changed position fits if a neighbour is within this many medians, or if it is in the box of the others.
const FITS_IN_MEDIANS: f64 = 3.0;
/// In a wider box, degrees, nearly any position would fit, so it explains nothing.
const WIDEST_BOX: f64 = 30.0;
/// In a smaller network a median says nothing.
const FEWEST_STATIONS: usize = 4;
/// Stations that a warning names; the others are counted.
const NAMED: usize = 3;

/// How a position may have been written wrongly.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum PositionSlip {
    /// West for east or east for west.
    LongitudeSign,
    /// South for north or north for south.
    LatitudeSign,
    /// Latitude in the place of the longitude.
    Swapped,
}

/// Stations at 0, 0, and stations far from all others, with the slip that would explain it.
///
/// - **Assumes**: most positions are right. A group of stations with the same slip is not found: its members have
///   near neighbours.
/// - **Accuracy**: distances on a sphere. Nearest neighbours are exact, found along the axis of the Earth, so a network
///   of tens of thousands of stations costs no more than it must.
#[must_use]
pub fn doubts(network: &Network) -> Vec<Warning> {
    let stations = network.stations();
    let near_zero = |s: &&Station| {
        let p = s.position;
        p.latitude().abs() <= NEAR_ZERO && p.longitude().abs() <= NEAR_ZERO
    };
    let (at_zero, placed): (Vec<&Station>, Vec<&Station>) = stations.iter().partition(near_zero);
    let points = Points::new(&placed);
    let mut warnings = Vec::new();
    let origin = at_zero.first().map(|s| direction(s.position));
    let to_zero = origin.and_then(|origin| points.nearest(origin, None));
    let placed = match to_zero {
        Some((_, distance)) if distance > FAR_FROM_ZERO => {
            warnings.push(Warning::AtZero {
                stations: at_zero.len(),
                first: at_zero.iter().take(NAMED).map(|s| s.id.clone()).collect(),
                metres: distance,
            });
            placed
        }
        _ => stations.iter().collect(),
    };
    if placed.len() >= FEWEST_STATIONS {
        warnings.extend(far_stations(&placed));
    }
    warnings
}

fn far_stations(stations: &[&Station]) -> Vec<Warning> {
    let points = Points::new(stations);
    let nearest: Vec<(usize, f64)> = stations
        .iter()
        .enumerate()
        .filter_map(|(k, s)| points.nearest(direction(s.position), Some(k)))
        .collect();
    let mut sorted: Vec<f64> = nearest.iter().map(|&(_, distance)| distance).collect();
    sorted.sort_by(f64::total_cmp);
    let Some(&median) = sorted.get(sorted.len() / 2) else {
        return Vec::new();
    };
    let limit = FAR.max(FAR_IN_MEDIANS * median);
    let is_far = |&(_, &(_, distance)): &(&&Station, &(usize, f64))| distance > limit;
    let others: Vec<&Station> = stations
        .iter()
        .zip(&nearest)
        .filter(|pair| !is_far(pair))
        .map(|(s, _)| *s)
        .collect();
    let others = Others {
        points: Points::new(&others),
        frame: Frame::new(&others),
        near: FITS_IN_MEDIANS * median,
    };
    let mut explained = Vec::new();
    let mut unexplained: Vec<Warning> = Vec::new();
    for (station, &(neighbour, metres)) in stations.iter().zip(&nearest).filter(is_far) {
        let slip = others.slip(station.position);
        let warning = Warning::FarStation {
            station: station.id.clone(),
            nearest: stations
                .get(neighbour)
                .map_or_else(String::new, |s| s.id.clone()),
            metres,
            median,
            slip,
            more: 0,
        };
        if slip.is_some() {
            explained.push(warning);
        } else {
            unexplained.push(warning);
        }
    }
    // A network with a dense part has many lonely stations: one of them stands for all.
    let others_like_it = unexplained.len().saturating_sub(1);
    if let Some(Warning::FarStation { more, .. }) = unexplained.first_mut() {
        *more = others_like_it;
    }
    unexplained.truncate(1);
    explained.extend(unexplained);
    explained
}

/// The stations that are not far.
struct Others {
    points: Points,
    frame: Option<Frame>,
    near: f64,
}

impl Others {
    /// The slip after whose correction the station is nearest to the others, if any makes it fit.
    fn slip(&self, p: Position) -> Option<PositionSlip> {
        let (lat, lon) = (p.latitude(), p.longitude());
        let candidates = [
            (PositionSlip::LongitudeSign, lat, -lon),
            (PositionSlip::LatitudeSign, -lat, lon),
            (PositionSlip::Swapped, lon, lat),
        ];
        candidates
            .into_iter()
            .filter_map(|(slip, lat, lon)| {
                // A longitude beyond 90 cannot have been a latitude.
                let changed = Position::new(lat, lon).ok()?;
                let (_, distance) = self.points.nearest(direction(changed), None)?;
                let inside = self.frame.is_some_and(|frame| frame.contains(changed));
                (inside || distance <= self.near).then_some((slip, distance))
            })
            .min_by(|a, b| a.1.total_cmp(&b.1))
            .map(|(slip, _)| slip)
    }
}

/// A box in latitude and longitude, which may lie across the date line.
#[derive(Debug, Clone, Copy)]
struct Frame {
    south: f64,
    north: f64,
    /// Longitude from which the others are counted.
    middle: f64,
    west: f64,
    east: f64,
}

impl Frame {
    /// The box of the stations, if it is small.
    fn new(stations: &[&Station]) -> Option<Self> {
        let middle = stations.first()?.position.longitude();
        let mut frame = Self {
            south: f64::INFINITY,
            north: f64::NEG_INFINITY,
            middle,
            west: f64::INFINITY,
            east: f64::NEG_INFINITY,
        };
        for station in stations {
            let (lat, lon) = frame.coordinates(station.position);
            frame.south = frame.south.min(lat);
            frame.north = frame.north.max(lat);
            frame.west = frame.west.min(lon);
            frame.east = frame.east.max(lon);
        }
        let is_small =
            frame.north - frame.south <= WIDEST_BOX && frame.east - frame.west <= WIDEST_BOX;
        is_small.then_some(frame)
    }

    fn coordinates(&self, p: Position) -> (f64, f64) {
        let lon = (p.longitude() - self.middle + 180.0).rem_euclid(360.0) - 180.0;
        (p.latitude(), lon)
    }

    fn contains(&self, p: Position) -> bool {
        let (lat, lon) = self.coordinates(p);
        (self.south..=self.north).contains(&lat) && (self.west..=self.east).contains(&lon)
    }
}

/// Unit vector of a position on a sphere.
fn direction(p: Position) -> [f64; 3] {
    let (sin_lat, cos_lat) = sin_cos_degrees(p.latitude());
    let (sin_lon, cos_lon) = sin_cos_degrees(p.longitude());
    [cos_lat * cos_lon, cos_lat * sin_lon, sin_lat]
}

/// Points of the unit sphere, sorted along the axis.
struct Points(Vec<([f64; 3], usize)>);

impl Points {
    fn new(stations: &[&Station]) -> Self {
        let mut points: Vec<([f64; 3], usize)> = stations
            .iter()
            .enumerate()
            .map(|(k, s)| (direction(s.position), k))
            .collect();
        points.sort_by(|a, b| a.0[2].total_cmp(&b.0[2]).then(a.1.cmp(&b.1)));
        Self(points)
    }

    /// The nearest point and its distance, m; `except` is passed over.
    fn nearest(&self, from: [f64; 3], except: Option<usize>) -> Option<(usize, f64)> {
        let start = self.0.partition_point(|(p, _)| p[2] < from[2]);
        let (below, above) = self.0.split_at(start);
        let mut best: Option<(f64, usize)> = None;
        // Outward in both directions: points differ at least by what their heights above the equator differ.
        let mut scan = |side: &mut dyn Iterator<Item = &([f64; 3], usize)>| {
            for &(p, k) in side {
                let along = p[2] - from[2];
                if best.is_some_and(|(chord, _)| along * along > chord) {
                    break;
                }
                let chord = (p[0] - from[0]).powi(2) + (p[1] - from[1]).powi(2) + along * along;
                let is_better = best.is_none_or(|(least, other)| (chord, k) < (least, other));
                if Some(k) != except && is_better {
                    best = Some((chord, k));
                }
            }
        };
        scan(&mut above.iter());
        scan(&mut below.iter().rev());
        best.map(|(chord, k)| (k, 2.0 * EARTH_RADIUS * (chord.sqrt() / 2.0).min(1.0).asin()))
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn stations(positions: &[(f64, f64)]) -> Vec<Station> {
        let station = |(k, &(lat, lon)): (usize, &(f64, f64))| {
            Station::new(format!("S{k:02}"), Position::new(lat, lon).unwrap())
        };
        positions.iter().enumerate().map(station).collect()
    }

    proptest! {
        #[test]
        fn the_nearest_is_that_of_a_plain_loop(
            positions in proptest::collection::vec((-90.0..90.0, -180.0..180.0), 2..40),
        ) {
            let stations = stations(&positions);
            let stations: Vec<&Station> = stations.iter().collect();
            let points = Points::new(&stations);
            for (k, station) in stations.iter().enumerate() {
                let from = direction(station.position);
                let angle = |p: [f64; 3]| (0..3).map(|i| (p[i] - from[i]).powi(2)).sum::<f64>();
                let least = stations
                    .iter()
                    .enumerate()
                    .filter(|(j, _)| *j != k)
                    .map(|(_, s)| angle(direction(s.position)))
                    .fold(f64::INFINITY, f64::min);
                let (found, _) = points.nearest(from, Some(k)).unwrap();
                // The same sum in another order of terms.
                prop_assert!((angle(direction(stations[found].position)) - least).abs() < 1e-14);
            }
        }
    }

    #[test]
    fn a_box_across_the_date_line() {
        let stations = stations(&[(-17.0, 178.0), (-18.0, -179.0), (-19.0, 179.5)]);
        let frame = Frame::new(&stations.iter().collect::<Vec<_>>()).unwrap();
        assert!(frame.contains(Position::new(-18.0, 180.0).unwrap()));
        assert!(!frame.contains(Position::new(-18.0, 0.0).unwrap()));
        assert!(!frame.contains(Position::new(-18.0, 177.0).unwrap()));
    }
}
