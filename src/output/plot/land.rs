//! The land behind the map: Natural Earth 1:10 million, public domain, simplified (`examples/make_land.py` made the
//! file; the coast is good to some 400 m).

use std::sync::OnceLock;

use super::projection::{Frame, RADIUS};
use super::svg::polyline;

static PACKED: &[u8] = include_bytes!("land.bin");
/// Degrees of one unit of the file.
const UNIT: f64 = 1e-3;
/// Points nearer than this to the last are left out, pixels.
const NEAR: f64 = 0.4;

/// Latitude and longitude, degrees, of the points of each ring.
type Rings = Vec<Vec<(f64, f64)>>;

/// All rings of the file, each clockwise seen from above; none if it cannot be read, which a test would tell.
fn rings() -> &'static Rings {
    static RINGS: OnceLock<Rings> = OnceLock::new();
    RINGS.get_or_init(|| {
        let bytes = zstd::decode_all(PACKED).unwrap_or_default();
        let mut numbers = Numbers(&bytes);
        let mut rings = Vec::new();
        while let Some(count) = numbers.next() {
            let (mut x, mut y) = (0, 0);
            let mut ring = Vec::new();
            for _ in 0..count {
                let (Some(dx), Some(dy)) = (numbers.signed(), numbers.signed()) else {
                    return rings;
                };
                (x, y) = (x + dx, y + dy);
                ring.push((y as f64 * UNIT, x as f64 * UNIT));
            }
            rings.push(ring);
        }
        rings
    })
}

/// LEB128 numbers.
struct Numbers<'a>(&'a [u8]);

impl Numbers<'_> {
    fn next(&mut self) -> Option<u64> {
        let mut number = 0;
        for shift in (0..63).step_by(7) {
            let (&byte, rest) = self.0.split_first()?;
            self.0 = rest;
            number |= u64::from(byte & 0x7f) << shift;
            if byte < 0x80 {
                return Some(number);
            }
        }
        None
    }

    /// A zigzag number.
    fn signed(&mut self) -> Option<i64> {
        let number = self.next()?;
        let half = i64::try_from(number >> 1).ok()?;
        Some(if number & 1 == 0 { half } else { -half - 1 })
    }
}

/// Path data of the land within the frame, to be filled by the even-odd rule; empty where there is none.
pub(super) fn land(frame: &Frame) -> String {
    let [left, top, width, height] = frame.inside;
    // A little more than is seen, so that no line runs along the edge.
    let outer = [
        left - 4.0,
        top - 4.0,
        left + width + 4.0,
        top + height + 4.0,
    ];
    let mut data = String::new();
    for ring in rings() {
        let points: Vec<[f64; 2]> = ring
            .iter()
            .map(|&(lat, lon)| frame.pixel(lat, lon))
            .collect();
        // The map turns a ring around its antipode inside out: the land is what lies outside. The ring runs
        // counter-clockwise then, which makes its area negative, as pixels run downwards, and it holds most of the Earth.
        let hemisphere = std::f64::consts::TAU * (RADIUS / frame.metres).powi(2);
        if 0.5 * doubled_area(&points) < -hemisphere {
            let [left, top, right, bottom] = outer;
            let corners = [[left, top], [right, top], [right, bottom], [left, bottom]];
            data.push_str(&polyline(&corners, true));
        }
        let mut clipped = points;
        for side in 0..4 {
            clipped = cut(&clipped, side, outer);
            if clipped.is_empty() {
                break;
            }
        }
        let mut kept: Vec<[f64; 2]> = Vec::new();
        for point in clipped {
            let near = |last: &[f64; 2]| (last[0] - point[0]).hypot(last[1] - point[1]) < NEAR;
            if !kept.last().is_some_and(near) {
                kept.push(point);
            }
        }
        if kept.len() > 2 {
            data.push_str(&polyline(&kept, true));
        }
    }
    data
}

/// Twice the signed area of a ring.
fn doubled_area(ring: &[[f64; 2]]) -> f64 {
    let next = ring.iter().cycle().skip(1);
    let pairs = ring.iter().zip(next);
    pairs.map(|(a, b)| a[0] * b[1] - b[0] * a[1]).sum()
}

/// The part of a ring on the inner side of one side of the box: left, top, right, bottom.
///
/// - **Reference**: Sutherland & Hodgman 1974, Reentrant polygon clipping, CACM 17, 32-42.
fn cut(ring: &[[f64; 2]], side: usize, outer: [f64; 4]) -> Vec<[f64; 2]> {
    let (axis, bound) = (side % 2, outer[side]);
    let inside = |p: &[f64; 2]| {
        if side < 2 {
            p[axis] >= bound
        } else {
            p[axis] <= bound
        }
    };
    if ring.iter().all(inside) {
        return ring.to_vec();
    }
    let mut out = Vec::with_capacity(ring.len());
    let Some(&last) = ring.last() else {
        return out;
    };
    let mut before = last;
    for &point in ring {
        if inside(&before) != inside(&point) {
            let part = (bound - before[axis]) / (point[axis] - before[axis]);
            let mut at = [0, 1].map(|k| before[k] + part * (point[k] - before[k]));
            at[axis] = bound;
            out.push(at);
        }
        if inside(&point) {
            out.push(point);
        }
        before = point;
    }
    out
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;
    use crate::station::Position;

    /// Even-odd: whether a place is on land.
    fn on_land(latitude: f64, longitude: f64) -> bool {
        let mut inside = false;
        for ring in rings() {
            let mut before = ring[ring.len() - 1];
            for &point in ring {
                let ((y1, x1), (y2, x2)) = (before, point);
                if (y1 > latitude) != (y2 > latitude)
                    && longitude < x1 + (latitude - y1) / (y2 - y1) * (x2 - x1)
                {
                    inside = !inside;
                }
                before = point;
            }
        }
        inside
    }

    /// Facts of geography.
    #[test]
    fn known_places_are_on_land_or_at_sea() {
        assert!(rings().len() > 1000, "{}", rings().len());
        for (latitude, longitude) in [(48.9, 2.3), (-25.0, 134.0), (22.4, 114.1), (40.75, -73.97)] {
            assert!(on_land(latitude, longitude), "{latitude} {longitude}");
        }
        for (latitude, longitude) in [(46.5, -29.8), (0.0, -150.0), (22.2, 114.6), (43.0, 5.0)] {
            assert!(!on_land(latitude, longitude), "{latitude} {longitude}");
        }
    }

    /// Even-odd: whether a pixel lies inside a path.
    fn inside(data: &str, at: [f64; 2]) -> bool {
        let mut inside = false;
        for ring in data.split('M').skip(1) {
            let numbers = ring.split(['L', 'Z', ' ']).filter(|n| !n.is_empty());
            let numbers: Vec<f64> = numbers.map(|n| n.parse().unwrap()).collect();
            let points: Vec<[f64; 2]> = numbers.chunks(2).map(|p| [p[0], p[1]]).collect();
            let mut before = points[points.len() - 1];
            for point in points {
                let ([x1, y1], [x2, y2]) = (before, point);
                if (y1 > at[1]) != (y2 > at[1]) && at[0] < x1 + (at[1] - y1) / (y2 - y1) * (x2 - x1)
                {
                    inside = !inside;
                }
                before = point;
            }
        }
        inside
    }

    /// South America lies around the antipode of Hong Kong, Spain around that of New Zealand.
    #[test]
    fn the_map_shows_the_land_of_the_file() {
        let place = |latitude, longitude| Position::new(latitude, longitude).unwrap();
        for (south, west, size) in [
            (22.2, 113.9, 0.3),
            (-41.5, 172.5, 2.0),
            (46.2, -30.2, 1.0),
            (40.5, -74.3, 0.6),
            (-10.0, -70.0, 20.0),
            (-22.5, 165.0, 2.0),
        ] {
            let places = [place(south, west), place(south + size, west + size)];
            let frame = Frame::around(&places, [0.0, 0.0, 600.0, 500.0], 300.0, 40.0);
            let data = land(&frame);
            let (mut right, mut all) = (0, 0);
            for i in 0..12 {
                for j in 0..12 {
                    let part = |k: i32| f64::from(k) / 11.0 * size;
                    let (latitude, longitude) = (south + part(i), west + part(j));
                    let same = inside(&data, frame.pixel(latitude, longitude))
                        == on_land(latitude, longitude);
                    right += i32::from(same);
                    all += 1;
                }
            }
            // Some of the places may lie within a pixel of the coast.
            assert!(right >= all - 2, "{south} {west}: {right} of {all}");
        }
    }

    #[test]
    fn land_stays_within_the_frame() {
        let place = |latitude, longitude| Position::new(latitude, longitude).unwrap();
        let places = [place(22.2, 113.9), place(22.5, 114.3)];
        let frame = Frame::around(&places, [0.0, 0.0, 600.0, 500.0], 300.0, 40.0);
        let data = land(&frame);
        let points: Vec<f64> = data
            .split(['M', 'L', 'Z', ' '])
            .filter_map(|n| n.parse().ok())
            .collect();
        assert!(points.len() > 100, "{}", points.len());
        assert!(points.iter().all(|&p| (-4.1..=604.1).contains(&p)));
    }
}
