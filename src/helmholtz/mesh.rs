//! The mesh of triangles that the parts of the wind live on.

use std::collections::HashMap;

use geographiclib_rs::Geodesic;
use nalgebra::Vector3;

use crate::kinematics::seen_from;
use crate::polygon::sphere::{latitude_longitude, unit_vector};
use crate::station::Position;
use crate::units::Wind;

/// A triangle in a plane of its own, x towards east and y towards north at its middle.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Element {
    /// Its corners, as numbers of nodes.
    pub(super) nodes: [usize; 3],
    /// m².
    pub(super) area: f64,
    /// Gradient of the function that is 1 at a corner and 0 at the others, 1/m.
    pub(super) gradients: [[f64; 2]; 3],
    /// Sine and cosine of the angle by which winds of a corner turn counter-clockwise when they are carried to the middle.
    turns: [[f64; 2]; 3],
}

impl Element {
    /// From the places of its corners in its plane; `None` without an area.
    fn new(places: [[f64; 2]; 3], turns: [[f64; 2]; 3]) -> Option<Self> {
        let [a, b, c] = places;
        let twice = (b[0] - a[0]) * (c[1] - a[1]) - (c[0] - a[0]) * (b[1] - a[1]);
        let across = |[x, y]: [f64; 2], [x2, y2]: [f64; 2]| [(y - y2) / twice, (x2 - x) / twice];
        let area = 0.5 * twice.abs();
        (area > 0.0 && area.is_finite()).then(|| Self {
            nodes: [0; 3],
            area,
            gradients: [across(b, c), across(c, a), across(a, b)],
            turns,
        })
    }

    /// A wind of a corner as the triangle sees it.
    pub(super) fn carry(&self, corner: usize, Wind { u, v }: Wind) -> [f64; 2] {
        let [sin, cos] = self.turns[corner];
        [u * cos - v * sin, v * cos + u * sin]
    }

    /// A wind of the triangle as a corner sees it.
    pub(super) fn carry_back(&self, corner: usize, [u, v]: [f64; 2]) -> Wind {
        let [sin, cos] = self.turns[corner];
        Wind {
            u: u * cos + v * sin,
            v: v * cos - u * sin,
        }
    }

    /// Gradient of a function with these values at the corners.
    pub(super) fn gradient(&self, values: [f64; 3]) -> [f64; 2] {
        let mut sum = [0.0; 2];
        for (value, [x, y]) in values.into_iter().zip(self.gradients) {
            sum[0] += value * x;
            sum[1] += value * y;
        }
        sum
    }
}

/// What a mesh is made of.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct MeshSummary {
    /// The stations that are its nodes, ascending.
    pub stations: Vec<usize>,
    /// For each whether it lies inside: all triangles around it are in the mesh.
    pub interior: Vec<bool>,
    /// Its triangles.
    pub triangles: usize,
    /// Triangles that hang together with it by a single station or not at all, and so are not in it.
    pub left_out: usize,
    /// Holes in it.
    pub holes: usize,
    /// Its area, m².
    pub area: f64,
}

impl MeshSummary {
    /// Number of stations inside.
    #[must_use]
    pub fn inside(&self) -> usize {
        self.interior.iter().filter(|&&inside| inside).count()
    }
}

/// A connected mesh of triangles.
#[derive(Debug, Clone, PartialEq)]
pub struct Mesh {
    pub(super) summary: MeshSummary,
    pub(super) elements: Vec<Element>,
}

impl Mesh {
    /// The mesh of triangles of stations given by number: of those that hang together by their sides, the part of the
    /// largest area. `None` without any triangle.
    ///
    /// Each triangle has a plane of its own: the places of its corners by distance and azimuth from its middle (WGS 84),
    /// and winds carried along the geodesics with their angle to them, as in [`crate::kinematics::PolygonFrame`]. A function
    /// that is linear in each triangle is then continuous over the mesh on the curved Earth too.
    #[must_use]
    pub fn new(triangles: &[[usize; 3]], positions: &[Position]) -> Option<Self> {
        let geodesic = Geodesic::wgs84();
        Self::of(triangles, |corners| {
            let sum: Vector3<f64> = corners.iter().map(|&s| unit_vector(positions[s])).sum();
            let middle = latitude_longitude(&sum);
            let seen = corners.map(|s| seen_from(&geodesic, middle, positions[s]));
            Element::new(seen.map(|s| s.0), seen.map(|s| s.1))
        })
    }

    /// The mesh of triangles of points in a plane, m.
    #[must_use]
    pub fn in_plane(triangles: &[[usize; 3]], points: &[[f64; 2]]) -> Option<Self> {
        Self::of(triangles, |corners| {
            Element::new(corners.map(|p| points[p]), [[0.0, 1.0]; 3])
        })
    }

    fn of(
        triangles: &[[usize; 3]],
        element: impl Fn([usize; 3]) -> Option<Element>,
    ) -> Option<Self> {
        let made = triangles
            .iter()
            .filter_map(|&corners| Some((corners, element(corners)?)));
        let (corners, made): (Vec<[usize; 3]>, Vec<Element>) = made.unzip();
        let kept = largest_part(&corners, &made);
        let mut stations: Vec<usize> = kept.iter().flat_map(|&e| corners[e]).collect();
        stations.sort_unstable();
        stations.dedup();
        let node = |s: usize| stations.binary_search(&s).unwrap_or(0); // a station of the list
        let elements: Vec<Element> = kept
            .iter()
            .map(|&e| Element {
                nodes: corners[e].map(node),
                ..made[e].clone()
            })
            .collect();
        let mut sides: HashMap<[usize; 2], u32> = HashMap::new();
        for side in elements.iter().flat_map(|e| sides_of(e.nodes)) {
            *sides.entry(side).or_default() += 1;
        }
        let mut interior = vec![true; stations.len()];
        for (side, _) in sides.iter().filter(|&(_, &triangles)| triangles == 1) {
            for &node in side {
                interior[node] = false;
            }
        }
        let mut area = crate::sum::CompensatedSum::default();
        for e in &elements {
            area.add(e.area);
        }
        (!elements.is_empty()).then(|| Self {
            summary: MeshSummary {
                triangles: elements.len(),
                left_out: made.len() - elements.len(),
                // Euler: nodes − sides + triangles = 1 − holes.
                holes: (1 + sides.len()).saturating_sub(stations.len() + elements.len()),
                area: area.total(),
                stations,
                interior,
            },
            elements,
        })
    }

    /// What it is made of.
    #[must_use]
    pub fn summary(&self) -> &MeshSummary {
        &self.summary
    }
}

/// The sides of a triangle, the lower node first.
fn sides_of([a, b, c]: [usize; 3]) -> [[usize; 2]; 3] {
    [(a, b), (b, c), (c, a)].map(|(p, q)| [p.min(q), p.max(q)])
}

/// Numbers of the triangles of the part with the largest area, ascending; of equal parts the first.
fn largest_part(corners: &[[usize; 3]], elements: &[Element]) -> Vec<usize> {
    let mut beside: HashMap<[usize; 2], Vec<usize>> = HashMap::new();
    for (e, &nodes) in corners.iter().enumerate() {
        for side in sides_of(nodes) {
            beside.entry(side).or_default().push(e);
        }
    }
    let mut seen = vec![false; corners.len()];
    let (mut best, mut largest) = (Vec::new(), 0.0);
    for start in 0..corners.len() {
        if seen[start] {
            continue;
        }
        seen[start] = true;
        let mut part = vec![start];
        let (mut at, mut area) = (0, 0.0);
        while let Some(&e) = part.get(at) {
            area += elements[e].area;
            for other in sides_of(corners[e]).iter().flat_map(|side| &beside[side]) {
                if !seen[*other] {
                    seen[*other] = true;
                    part.push(*other);
                }
            }
            at += 1;
        }
        if area > largest {
            (best, largest) = (part, area);
        }
    }
    best.sort_unstable();
    best
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    /// Two triangles of each cell of a grid of unit cells; cells for which `there` is false are left out.
    fn grid(n: usize, there: impl Fn(usize, usize) -> bool) -> (Vec<[usize; 3]>, Vec<[f64; 2]>) {
        let at = |i: usize, j: usize| i * (n + 1) + j;
        let points = (0..=n).flat_map(|i| (0..=n).map(move |j| [j as f64, i as f64]));
        let cells = (0..n).flat_map(|i| (0..n).map(move |j| (i, j)));
        let triangles = cells.filter(|&(i, j)| there(i, j)).flat_map(|(i, j)| {
            [
                [at(i, j), at(i, j + 1), at(i + 1, j + 1)],
                [at(i, j), at(i + 1, j + 1), at(i + 1, j)],
            ]
        });
        (triangles.collect(), points.collect())
    }

    #[test]
    fn holes_boundary_and_parts() {
        let (triangles, points) = grid(5, |_, _| true);
        let whole = Mesh::in_plane(&triangles, &points).unwrap();
        assert_eq!((whole.summary.holes, whole.summary.inside()), (0, 16));
        assert!((whole.summary.area - 25.0).abs() < 1e-12);

        // One cell taken out of the middle: a hole, its four corners are on the boundary.
        let (triangles, points) = grid(5, |i, j| (i, j) != (2, 2));
        let ring = Mesh::in_plane(&triangles, &points).unwrap();
        assert_eq!((ring.summary.holes, ring.summary.inside()), (1, 12));

        // Two cells that touch at a corner stay two parts; two holes that touch at a corner stay two holes.
        let (triangles, points) = grid(5, |i, j| (i, j) != (1, 1) && (i, j) != (2, 2));
        let two = Mesh::in_plane(&triangles, &points).unwrap();
        assert_eq!(two.summary.holes, 2);
        let (triangles, points) = grid(5, |i, j| (i < 2 && j < 3) || (i == 2 && j == 3));
        let part = Mesh::in_plane(&triangles, &points).unwrap().summary;
        assert_eq!(
            (part.triangles, part.left_out, part.stations.len()),
            (12, 2, 12)
        );
    }

    #[test]
    fn gradients_are_those_of_a_plane() {
        let corners = [[3.0, 1.0], [7.0, 2.0], [4.0, 6.0]];
        // Either way round.
        for order in [[0, 1, 2], [2, 1, 0]] {
            let places = order.map(|k: usize| corners[k]);
            let element = Element::new(places, [[0.0, 1.0]; 3]).unwrap();
            let values = places.map(|[x, y]| 2.0 - 0.5 * x + 3.0 * y);
            let [x, y] = element.gradient(values);
            assert!((x + 0.5).abs() < 1e-14 && (y - 3.0).abs() < 1e-14);
            assert!((element.area - 9.5).abs() < 1e-14);
        }
        assert!(Element::new([[0.0, 0.0], [1.0, 1.0], [2.0, 2.0]], [[0.0, 1.0]; 3]).is_none());
    }

    #[test]
    fn nothing_makes_no_mesh() {
        assert!(Mesh::in_plane(&[], &[]).is_none());
    }
}
