//! What does not change with time on a map: land, outlines of polygons, stations, scale bar.

use geo::MultiPolygon;

use super::axis::round_step;
use super::land::land;
use super::projection::Frame;
use super::svg::{fitted, polyline, width_of};
use crate::output::geojson::outline_geometry;
use crate::pipeline::Setup;
use crate::polygon::{PolygonKind, StationPolygon};
use crate::station::Position;

/// Size of station labels, pixels.
pub(crate) const LABEL: f64 = 11.0;
/// Longest station label, pixels.
const LABEL_WIDTH: f64 = 84.0;

/// A polygon on the map.
#[derive(Debug, Clone)]
pub(crate) struct Outline {
    /// Path data.
    pub(crate) path: String,
    /// Whether it is filled; the others lie over those that are, and only their outline shows.
    pub(crate) filled: bool,
}

/// A station on the map.
#[derive(Debug, Clone)]
pub(crate) struct Spot {
    /// Pixels.
    pub(crate) at: [f64; 2],
    /// Degrees from the top of the picture to north there.
    pub(crate) north: f64,
}

/// The map of a network.
#[derive(Debug)]
pub(crate) struct MapBase {
    /// Left, top, width, height of the map, pixels.
    pub(crate) inside: [f64; 4],
    /// Path data of the land.
    pub(crate) land: String,
    /// The polygons of the network.
    pub(crate) polygons: Vec<Outline>,
    /// Path data of the polygons left out.
    pub(crate) excluded: Vec<String>,
    /// The stations.
    pub(crate) stations: Vec<Spot>,
    /// Length of the scale bar, pixels, and what it stands for.
    pub(crate) bar: (f64, String),
    /// Degrees from the top of the picture to north in its middle.
    pub(crate) north: f64,
    /// Whether barbs are those of the southern hemisphere.
    pub(crate) southern: bool,
}

impl MapBase {
    /// The map within a rectangle, not lower than `least`.
    pub(crate) fn new(setup: &Setup, inside: [f64; 4], least: f64) -> Self {
        let places: Vec<Position> = setup
            .network
            .stations()
            .iter()
            .map(|s| s.position)
            .collect();
        let frame = Frame::around(&places, inside, least, 48.0);
        let triangles = setup.built.polygons.iter().any(is_triangle);
        let outline = |polygon: &StationPolygon| Outline {
            path: path(&frame, &outline_geometry(polygon, &setup.network)),
            filled: !triangles || is_triangle(polygon),
        };
        let excluded = setup.built.excluded.iter();
        let excluded = excluded.map(|(polygon, _)| outline(polygon).path).collect();
        let spot = |place: &Position| Spot {
            at: frame.pixel(place.latitude(), place.longitude()),
            north: frame.north(place.latitude(), place.longitude()),
        };
        let stations: Vec<Spot> = places.iter().map(spot).collect();
        let mean = places.iter().map(|p| p.latitude()).sum::<f64>() / places.len().max(1) as f64;
        let [_, _, width, _] = frame.inside;
        // The longest round length that takes at most a fifth of the map.
        let most = 0.2 * width * frame.metres;
        let length = round_step(0.4 * most);
        let length = if 2.0 * length <= most {
            2.0 * length
        } else {
            length
        };
        let text = if length >= 1000.0 {
            format!("{} km", length / 1e3)
        } else {
            format!("{length} m")
        };
        let turns = stations.iter().map(|s| s.north).sum::<f64>() / stations.len().max(1) as f64;
        Self {
            inside: frame.inside,
            land: land(&frame),
            polygons: setup.built.polygons.iter().map(outline).collect(),
            excluded,
            stations,
            bar: (length / frame.metres, text),
            north: turns,
            southern: mean < 0.0,
        }
    }

    /// Where the labels of the stations stand (left, foot), each beside its station and none over another, a station or
    /// an obstacle (left, top, right, bottom); a label without room is left out.
    pub(crate) fn labels(&self, texts: &[String], obstacles: &[[f64; 4]]) -> Vec<Option<[f64; 2]>> {
        let mut taken: Vec<[f64; 4]> = obstacles.to_vec();
        let dots = self.stations.iter().map(|s| around(s.at, 4.0));
        taken.extend(dots);
        let [left, top, width, height] = self.inside;
        let mut placed = Vec::with_capacity(texts.len());
        for (spot, text) in self.stations.iter().zip(texts) {
            let (w, [x, y]) = (width_of(text, LABEL), spot.at);
            // Beside, below, above, then the corners.
            let feet = [
                [x + 7.0, y + 4.0],
                [x - 7.0 - w, y + 4.0],
                [x - 0.5 * w, y + 16.0],
                [x - 0.5 * w, y - 8.0],
                [x + 5.0, y + 14.0],
                [x - 5.0 - w, y + 14.0],
                [x + 5.0, y - 6.0],
                [x - 5.0 - w, y - 6.0],
            ];
            let room = |foot: &[f64; 2]| {
                let own = text_box(*foot, w);
                let inside = own[0] > left && own[2] < left + width;
                let inside = inside && own[1] > top && own[3] < top + height;
                inside && !taken.iter().any(|other| overlap(&own, other))
            };
            let foot = feet.into_iter().find(room);
            if let Some(foot) = foot {
                taken.push(text_box(foot, w));
            }
            placed.push(foot);
        }
        placed
    }
}

/// Labels of the stations: their identifiers, cut where they are long.
pub(crate) fn label_texts(setup: &Setup) -> Vec<String> {
    let stations = setup.network.stations().iter();
    stations
        .map(|s| fitted(&s.id, LABEL, LABEL_WIDTH))
        .collect()
}

pub(crate) fn is_triangle(polygon: &StationPolygon) -> bool {
    polygon.kind == PolygonKind::Triangle
}

/// The square around a point.
pub(super) fn around([x, y]: [f64; 2], half: f64) -> [f64; 4] {
    [x - half, y - half, x + half, y + half]
}

fn text_box([x, y]: [f64; 2], width: f64) -> [f64; 4] {
    [x, y - 0.8 * LABEL, x + width, y + 0.2 * LABEL]
}

fn overlap(a: &[f64; 4], b: &[f64; 4]) -> bool {
    a[0] < b[2] && b[0] < a[2] && a[1] < b[3] && b[1] < a[3]
}

fn path(frame: &Frame, parts: &MultiPolygon<f64>) -> String {
    let mut data = String::new();
    for part in &parts.0 {
        for ring in std::iter::once(part.exterior()).chain(part.interiors()) {
            let mut points: Vec<[f64; 2]> = ring.coords().map(|c| frame.pixel(c.y, c.x)).collect();
            points.pop();
            data.push_str(&polyline(&points, true));
        }
    }
    data
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 45 stations strewn over a map, by a linear congruential generator (Knuth, MMIX; from memory).
    #[test]
    fn labels_of_45_stations_do_not_overlap() {
        let mut state: u64 = 7;
        let mut next = |most: f64| {
            state = state
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(1_442_695_040_888_963_407);
            (state >> 40) as f64 / 16_777_216.0 * most
        };
        let spot = |_| Spot {
            at: [60.0 + next(830.0), 130.0 + next(600.0)],
            north: 0.0,
        };
        let base = MapBase {
            inside: [24.0, 78.0, 952.0, 760.0],
            land: String::new(),
            polygons: Vec::new(),
            excluded: Vec::new(),
            stations: (0..45).map(spot).collect(),
            bar: (0.0, String::new()),
            north: 0.0,
            southern: false,
        };
        let texts: Vec<String> = (0..45).map(|k| format!("STATION{k:02}")).collect();
        let feet = base.labels(&texts, &[]);
        let boxes: Vec<[f64; 4]> = (feet.iter().zip(&texts))
            .filter_map(|(foot, text)| Some(text_box((*foot)?, width_of(text, LABEL))))
            .collect();
        assert!(boxes.len() > 40, "{} labels", boxes.len());
        for (k, a) in boxes.iter().enumerate() {
            assert!(boxes[..k].iter().all(|b| !overlap(a, b)));
            let dots = base.stations.iter().map(|s| around(s.at, 3.9));
            assert!(dots.into_iter().all(|dot| !overlap(a, &dot)));
        }
    }
}
