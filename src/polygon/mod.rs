//! Polygons of stations: Delaunay triangles, rings named by the user, and unions of them.

mod build;
mod delaunay;
mod edge;
mod ring;
mod row;
mod shape;
pub mod sphere;

use geographiclib_rs::{Geodesic, PolygonArea, Winding};

use crate::station::Position;

pub(crate) use build::apart;
pub use build::{BuiltPolygons, build_polygons, build_triangles};
pub(crate) use delaunay::smallest_first;
pub use delaunay::triangulate;
pub use edge::{DirectedEdge, Edge, EdgeSet, LONG_EDGE, flux_rule_error, median_edge};
pub use ring::{InvalidPolygon, defects};
pub use row::CoefficientRow;
pub use shape::{Exclusion, Shape};

/// What a polygon is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum PolygonKind {
    /// A triangle of the Delaunay triangulation.
    Triangle,
    /// A ring named by the user.
    Ring,
    /// A union of polygons named by the user.
    Region,
}

impl PolygonKind {
    /// The kind as a word.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Triangle => "triangle",
            Self::Ring => "ring",
            Self::Region => "region",
        }
    }
}

/// A polygon of stations.
#[derive(Debug, Clone, PartialEq)]
pub struct StationPolygon {
    /// Its name: station identifiers joined by `+` for a triangle, the user's name for rings and regions.
    pub id: String,
    /// What it is.
    pub kind: PolygonKind,
    /// Closed paths of station numbers with the inside on the left: counter-clockwise outlines, clockwise holes.
    pub outline: Vec<Vec<usize>>,
    /// The edges of all paths.
    pub path: Vec<DirectedEdge>,
    /// Shape measures.
    pub shape: Shape,
    /// Latitude and longitude of the middle of its stations, degrees.
    pub middle: (f64, f64),
    /// Weights of the winds.
    pub row: CoefficientRow,
}

impl StationPolygon {
    /// Circulation along the outline and flux out of it, m²/s, of winds given by station: vorticity and divergence times
    /// the area.
    pub fn circulation_and_flux(&self, wind: impl Fn(usize) -> crate::units::Wind) -> (f64, f64) {
        let (vorticity, divergence) = self.row.apply(wind);
        (vorticity * self.shape.area, divergence * self.shape.area)
    }

    /// Number of stations whose winds matter.
    #[must_use]
    pub fn size(&self) -> usize {
        self.row.stations.len()
    }
}

/// Signed area of a closed path on WGS 84, m², positive counter-clockwise; its perimeter, m.
///
/// - **Accuracy**: about 0.1 m² (measured by the table of `tests/data/planetary_vorticity.csv`).
/// - **Reference**: Karney 2013, Algorithms for geodesics, J. Geodesy 87, 43-55, section 6.
#[must_use]
pub fn geodesic_area(path: impl Iterator<Item = Position>, geodesic: &Geodesic) -> (f64, f64) {
    let mut area = PolygonArea::new(geodesic, Winding::CounterClockwise);
    for p in path {
        area.add_point(p.latitude(), p.longitude());
    }
    let (perimeter, area, _) = area.compute(true);
    (area, perimeter)
}
