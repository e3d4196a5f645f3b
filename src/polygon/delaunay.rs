//! Delaunay triangulation on the sphere.

use std::collections::{BTreeSet, HashMap};

use nalgebra::Vector3;
use spade::{DelaunayTriangulation, HasPosition, Point2, Triangulation};

use super::sphere::{Tangent, cap_centre, unit_vector};
use crate::error::Error;
use crate::station::Position;

/// Two triangles count as four stations on one circle if their opposite angles add up to 180 degrees within this
/// (radians): far above rounding, far below what positions are known to.
const ON_ONE_CIRCLE: f64 = 1e-9;

struct Vertex {
    point: Point2<f64>,
}

impl HasPosition for Vertex {
    type Scalar = f64;

    fn position(&self) -> Point2<f64> {
        self.point
    }
}

/// Triangles of station numbers, counter-clockwise seen from above, each beginning with its smallest number, in
/// ascending order. `stations` are the numbers to use.
///
/// - **Method**: stereographic projection about the centre of the network keeps circles, so the planar Delaunay
///   triangulation is the spherical one, over the antimeridian and a pole too.
/// - **Ties**: where four stations stand on one circle, the diagonal goes through the southernmost of them (then the
///   westernmost), whatever the order or names of the stations.
///
/// # Errors
/// Fewer than three stations, or a network that does not fit into a hemisphere.
pub fn triangulate(positions: &[Position], stations: &[usize]) -> Result<Vec<[usize; 3]>, Error> {
    if stations.len() < 3 {
        return Err(Error::Network(format!(
            "{} stations make no polygon (at least 3 at different places expected)",
            stations.len()
        )));
    }
    let directions: Vec<Vector3<f64>> = stations
        .iter()
        .map(|&s| unit_vector(positions[s]))
        .collect();
    let centre = network_centre(&directions)?;
    let tangent = Tangent::at(centre);
    let plane: Vec<[f64; 2]> = directions
        .iter()
        // Coordinates that are zero but for rounding would be refused by the triangulation as too small.
        .map(|p| {
            tangent
                .stereographic(p)
                .map(|x| if x.abs() < 1e-30 { 0.0 } else { x })
        })
        .collect();
    let vertices = plane
        .iter()
        .map(|&[x, y]| Vertex {
            point: Point2::new(x, y),
        })
        .collect();
    let delaunay = DelaunayTriangulation::<Vertex>::bulk_load_stable(vertices)
        .map_err(|e| Error::Network(format!("the stations cannot be triangulated: {e}")))?;
    let mut triangles: Vec<[usize; 3]> = delaunay
        .inner_faces()
        .map(|face| face.vertices().map(|v| v.fix().index()))
        .collect();

    let rank = south_to_north(positions, stations);
    settle_ties(&mut triangles, &plane, &rank);

    let mut out: Vec<[usize; 3]> = triangles
        .into_iter()
        .map(|t| smallest_first(t.map(|i| stations[i])))
        .collect();
    out.sort_unstable();
    Ok(out)
}

/// Centre of the network, a unit vector.
///
/// # Errors
/// The network does not fit into a hemisphere.
pub(super) fn network_centre(directions: &[Vector3<f64>]) -> Result<Vector3<f64>, Error> {
    cap_centre(directions)
        .filter(|centre| directions.iter().all(|p| p.dot(centre) > 0.01))
        .ok_or_else(|| {
            Error::Network(
                "the stations are spread over more than a hemisphere; cut the network into parts (`stations.only`)"
                    .into(),
            )
        })
}

/// For each station its place in the order from south to north, then west to east.
fn south_to_north(positions: &[Position], stations: &[usize]) -> Vec<usize> {
    let mut order: Vec<usize> = (0..stations.len()).collect();
    order.sort_by(|&a, &b| {
        let (p, q) = (positions[stations[a]], positions[stations[b]]);
        p.latitude()
            .total_cmp(&q.latitude())
            .then(p.longitude().total_cmp(&q.longitude()))
    });
    let mut rank = vec![0; order.len()];
    for (place, &i) in order.iter().enumerate() {
        rank[i] = place;
    }
    rank
}

/// The same triangle, the lowest number first.
pub(crate) fn smallest_first([a, b, c]: [usize; 3]) -> [usize; 3] {
    if a < b && a < c {
        [a, b, c]
    } else if b < c {
        [b, c, a]
    } else {
        [c, a, b]
    }
}

/// Flips the diagonals of cocircular quadrilaterals until each goes through the vertex of lowest rank.
///
/// Every flip replaces a diagonal by one whose lowest rank is lower, so it ends; and a fan from the lowest vertex is
/// the only end, so the result depends on the positions alone.
fn settle_ties(triangles: &mut [[usize; 3]], plane: &[[f64; 2]], rank: &[usize]) {
    let mut owner: HashMap<(usize, usize), usize> = HashMap::with_capacity(triangles.len() * 3);
    for (t, &[a, b, c]) in triangles.iter().enumerate() {
        for edge in [(a, b), (b, c), (c, a)] {
            owner.insert(edge, t);
        }
    }
    // Edges to look at; ordered, so that the work is the same in every run.
    let mut work: BTreeSet<(usize, usize)> = owner.keys().filter(|(a, b)| a < b).copied().collect();
    while let Some((a, c)) = work.pop_first() {
        let (Some(&left), Some(&right)) = (owner.get(&(a, c)), owner.get(&(c, a))) else {
            continue;
        };
        // Triangle `left` is a, c, b; triangle `right` is c, a, d: the quadrilateral is a, d, c, b.
        let (Some(b), Some(d)) = (third(triangles[left], a, c), third(triangles[right], c, a))
        else {
            continue;
        };
        let lowest = rank[a].min(rank[c]);
        if lowest < rank[b].min(rank[d]) || !on_one_circle(plane, a, b, c, d) {
            continue;
        }
        triangles[left] = [b, a, d];
        triangles[right] = [d, c, b];
        owner.remove(&(a, c));
        owner.remove(&(c, a));
        for (edge, t) in [
            ((b, a), left),
            ((a, d), left),
            ((d, b), left),
            ((d, c), right),
            ((c, b), right),
            ((b, d), right),
        ] {
            owner.insert(edge, t);
        }
        for (p, q) in [(a, b), (b, c), (c, d), (d, a)] {
            work.insert((p.min(q), p.max(q)));
        }
    }
}

/// The third vertex of a triangle that runs from `a` to `b`.
fn third(triangle: [usize; 3], a: usize, b: usize) -> Option<usize> {
    triangle.into_iter().find(|&v| v != a && v != b)
}

/// True if the angles at `b` and `d`, opposite to the diagonal a-c, add up to 180 degrees.
fn on_one_circle(plane: &[[f64; 2]], a: usize, b: usize, c: usize, d: usize) -> bool {
    let angle = |at: usize, from: usize, to: usize| {
        let [x, y] = plane[at];
        let p = [plane[from][0] - x, plane[from][1] - y];
        let q = [plane[to][0] - x, plane[to][1] - y];
        (p[0] * q[1] - p[1] * q[0])
            .atan2(p[0] * q[0] + p[1] * q[1])
            .abs()
    };
    let sum = angle(b, a, c) + angle(d, c, a);
    (sum - std::f64::consts::PI).abs() < ON_ONE_CIRCLE
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn positions(points: &[(f64, f64)]) -> Vec<Position> {
        points
            .iter()
            .map(|&(lat, lon)| Position::new(lat, lon).unwrap())
            .collect()
    }

    fn all(n: usize) -> Vec<usize> {
        (0..n).collect()
    }

    #[test]
    fn cocircular_stations_make_a_fan_from_the_southernmost() {
        // Twelve stations on one small circle.
        let centre = unit_vector(Position::new(50.0, 10.0).unwrap());
        let tangent = Tangent::at(centre);
        let ring: Vec<Position> = (0..12)
            .map(|k| {
                let (sin, cos) = (f64::from(k) * std::f64::consts::PI / 6.0 + 0.1).sin_cos();
                let p = centre
                    + 0.01 * (cos * tangent_x(&tangent) + sin * tangent_y(&tangent, &centre));
                let (lat, lon) = super::super::sphere::latitude_longitude(&p);
                Position::new(lat, lon).unwrap()
            })
            .collect();
        let triangles = triangulate(&ring, &all(12)).unwrap();
        assert_eq!(triangles.len(), 10);
        let south = (0..12)
            .min_by(|&a, &b| ring[a].latitude().total_cmp(&ring[b].latitude()))
            .unwrap();
        assert!(
            triangles.iter().all(|t| t.contains(&south)),
            "{triangles:?}"
        );
    }

    fn tangent_x(t: &Tangent) -> Vector3<f64> {
        t.x
    }

    fn tangent_y(t: &Tangent, centre: &Vector3<f64>) -> Vector3<f64> {
        centre.cross(&t.x)
    }

    #[test]
    fn a_grid_gives_the_same_triangles_in_any_order() {
        let grid: Vec<(f64, f64)> = (0..5)
            .flat_map(|i| {
                (0..5).map(move |j| (45.0 + 0.2 * f64::from(i), 7.0 + 0.3 * f64::from(j)))
            })
            .collect();
        let forward = triangulate(&positions(&grid), &all(25)).unwrap();
        // The stations of a side meridian stand on one geodesic: slivers there are no part of the grid.
        let geodesic = geographiclib_rs::Geodesic::wgs84();
        let grid_positions = positions(&grid);
        let large = forward.iter().filter(|t| {
            let ring = t.iter().map(|&s| grid_positions[s]);
            super::super::geodesic_area(ring, &geodesic).0 > 1e8
        });
        assert_eq!(large.count(), 32);
        let reversed: Vec<(f64, f64)> = grid.iter().rev().copied().collect();
        let mut backward: Vec<[usize; 3]> = triangulate(&positions(&reversed), &all(25))
            .unwrap()
            .into_iter()
            .map(|t| smallest_first(t.map(|i| 24 - i)))
            .collect();
        backward.sort_unstable();
        assert_eq!(forward, backward);
    }

    #[test]
    fn too_few_and_too_wide_are_refused() {
        let two = positions(&[(0.0, 0.0), (1.0, 1.0)]);
        assert!(
            triangulate(&two, &all(2))
                .unwrap_err()
                .to_string()
                .contains("2 stations")
        );
        let world = positions(&[(0.0, 0.0), (0.0, 120.0), (0.0, -120.0), (80.0, 0.0)]);
        assert!(
            triangulate(&world, &all(4))
                .unwrap_err()
                .to_string()
                .contains("hemisphere")
        );
        let wide = positions(&[(0.0, 0.0), (0.0, 150.0), (60.0, 75.0)]);
        assert_eq!(triangulate(&wide, &all(3)).unwrap(), [[0, 1, 2]]);
    }
}
