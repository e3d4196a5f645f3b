//! Which stations stand near which.

use std::collections::BTreeMap;

use crate::station::{Network, ONE_PLACE, Position};

/// Mean radius of the Earth, m (IUGG 1980, from memory). Distances found here only choose stations.
const EARTH_RADIUS: f64 = 6_371_008.8;

/// Of the stations around one, the nearest so many are all considered, and of the others so many at even steps.
const NEAREST: usize = 32;
const OTHERS: usize = 64;

/// Finds stations near each other by cells of space.
pub(super) struct Neighbours {
    points: Vec<[f64; 3]>,
    cells: BTreeMap<[i64; 3], Vec<usize>>,
    size: f64,
}

impl Neighbours {
    /// Prepares a search out to `reach` m.
    pub(super) fn new(positions: &[Position], reach: f64) -> Self {
        let size = reach.max(1.0);
        let points: Vec<[f64; 3]> = positions.iter().map(|&p| in_space(p)).collect();
        let mut cells: BTreeMap<[i64; 3], Vec<usize>> = BTreeMap::new();
        for (k, p) in points.iter().enumerate() {
            cells.entry(cell(p, size)).or_default().push(k);
        }
        Self {
            points,
            cells,
            size,
        }
    }

    /// The stations within the reach of station `k` and not at its place, nearest first, with their distances along
    /// the chord, m.
    pub(super) fn around(&self, k: usize) -> Vec<(usize, f64)> {
        let here = &self.points[k];
        let [x, y, z] = cell(here, self.size);
        let mut found = Vec::new();
        for i in x - 1..=x + 1 {
            for j in y - 1..=y + 1 {
                for l in z - 1..=z + 1 {
                    for &other in self.cells.get(&[i, j, l]).into_iter().flatten() {
                        let d = distance(here, &self.points[other]);
                        if d <= self.size && d > ONE_PLACE {
                            found.push((other, d));
                        }
                    }
                }
            }
        }
        found.sort_by(|a, b| a.1.total_cmp(&b.1).then(a.0.cmp(&b.0)));
        found
    }

    /// As [`Self::around`], thinned where there are very many.
    pub(super) fn some_around(&self, k: usize) -> Vec<(usize, f64)> {
        let mut found = self.around(k);
        let others = found.split_off(NEAREST.min(found.len()));
        let step = others.len().div_ceil(OTHERS).max(1);
        found.extend(others.into_iter().step_by(step));
        found
    }
}

/// Networks up to this size are searched whole.
const SMALL: usize = 200;

/// For each station the nearest others that are `allowed`, at most `most`, nearest first. In networks of more than 200
/// stations those farther away than `reach` m are not looked at.
pub(crate) fn nearest_stations(
    positions: &[Position],
    reach: f64,
    most: usize,
    allowed: &[bool],
) -> Vec<Vec<usize>> {
    let reach = if positions.len() <= SMALL { 2e7 } else { reach };
    let near = Neighbours::new(positions, reach);
    (0..positions.len())
        .map(|k| {
            let others = near.around(k).into_iter().map(|(other, _)| other);
            let allowed = |&other: &usize| allowed.get(other).copied().unwrap_or(false);
            others.filter(allowed).take(most).collect()
        })
        .collect()
}

/// Typical distance between neighbouring stations, m: the median over the stations of the distance to the fourth
/// nearest, or to the farthest of fewer.
///
/// For stations at random the fourth nearest is 1.09/√density away on average and a Delaunay edge 1.13/√density
/// (Miles 1970, Math. Biosci. 6, 85; from memory). `None` for fewer than two places.
#[must_use]
pub fn typical_spacing(network: &Network) -> Option<f64> {
    let mut points: Vec<[f64; 3]> = network
        .stations()
        .iter()
        .map(|s| in_space(s.position))
        .collect();
    // Sorted along the axis on which they are most spread, only a strip needs looking at.
    let spread = |axis: usize| {
        let values = points.iter().map(|p| p[axis]);
        values.clone().fold(f64::MIN, f64::max) - values.fold(f64::MAX, f64::min)
    };
    let axis = (0..3).max_by(|&a, &b| spread(a).total_cmp(&spread(b)))?;
    points.sort_by(|a, b| a[axis].total_cmp(&b[axis]));
    let mut fourth: Vec<f64> = (0..points.len())
        .filter_map(|k| fourth_nearest(&points, k, axis))
        .collect();
    fourth.sort_by(f64::total_cmp);
    fourth.get(fourth.len() / 2).copied()
}

fn fourth_nearest(points: &[[f64; 3]], k: usize, axis: usize) -> Option<f64> {
    let here = &points[k];
    let mut nearest: Vec<f64> = Vec::with_capacity(5);
    let (before, after) = (points[..k].iter().rev(), points[k + 1..].iter());
    let mut look = |side: &mut dyn Iterator<Item = &[f64; 3]>| {
        for p in side {
            if nearest.len() == 4 && (p[axis] - here[axis]).abs() > nearest[3] {
                break;
            }
            let d = distance(here, p);
            if d > ONE_PLACE {
                let place = nearest.partition_point(|&n| n < d);
                nearest.insert(place, d);
                nearest.truncate(4);
            }
        }
    };
    look(&mut { before });
    look(&mut { after });
    nearest.last().copied()
}

fn in_space(position: Position) -> [f64; 3] {
    let (sin_lat, cos_lat) = position.latitude().to_radians().sin_cos();
    let (sin_lon, cos_lon) = position.longitude().to_radians().sin_cos();
    [cos_lat * cos_lon, cos_lat * sin_lon, sin_lat].map(|c| c * EARTH_RADIUS)
}

fn cell(p: &[f64; 3], size: f64) -> [i64; 3] {
    #[expect(
        clippy::cast_possible_truncation,
        reason = "at most the Earth's radius in metres"
    )]
    p.map(|c| (c / size).floor() as i64)
}

fn distance(a: &[f64; 3], b: &[f64; 3]) -> f64 {
    let d = [a[0] - b[0], a[1] - b[1], a[2] - b[2]];
    (d[0] * d[0] + d[1] * d[1] + d[2] * d[2]).sqrt()
}
