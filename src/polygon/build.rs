//! Builds all polygons of a network.

use std::collections::{BTreeMap, HashMap, HashSet};

use geographiclib_rs::Geodesic;
use nalgebra::Vector3;

use super::delaunay::{network_centre, triangulate};
use super::ring::{defects, overlap};
use super::shape::interior_angles;
use super::sphere::{latitude_longitude, unit_vector};
use super::{
    CoefficientRow, DirectedEdge, EdgeSet, Exclusion, InvalidPolygon, LONG_EDGE, PolygonKind,
    Shape, StationPolygon, geodesic_area,
};
use crate::error::{Error, Place, Problem, nearest_name};
use crate::settings::{PolygonChoice, PolygonLimits, RegionParts, RegionSettings};
use crate::station::{Network, Position};
use crate::warning::{STEEP, Warning};

/// A triangle with a smaller angle is flat: its stations stand on one line within what positions are known to
/// (9 m in 50 km), degrees.
const FLAT: f64 = 0.01;

/// The polygons of a network.
#[derive(Debug, Default)]
pub struct BuiltPolygons {
    /// Polygons within the limits: triangles in the order of their stations, then rings, then regions, as named.
    pub polygons: Vec<StationPolygon>,
    /// Polygons outside the limits, with the reason.
    pub excluded: Vec<(StationPolygon, Exclusion)>,
    /// Triangles dropped because their stations stand on one line.
    pub flat: usize,
    /// The edges of all.
    pub edges: EdgeSet,
    /// What the user should know.
    pub warnings: Vec<Warning>,
}

/// Builds triangles, rings and regions.
///
/// # Errors
/// All defects of rings and regions; stations that make no polygon at all.
pub fn build_polygons(
    network: &Network,
    choice: &PolygonChoice,
    limits: &PolygonLimits,
) -> Result<BuiltPolygons, Error> {
    let mut builder = Builder::new(network, limits);
    let needs_triangles = choice.triangles
        || choice
            .regions
            .iter()
            .any(|r| !matches!(r.parts, RegionParts::Polygons(_)));
    if needs_triangles {
        builder.triangles()?;
    } else {
        // Rings alone: the network must still fit into a hemisphere for its maps.
        let directions: Vec<Vector3<f64>> =
            builder.positions.iter().map(|&p| unit_vector(p)).collect();
        network_centre(&directions)?;
    }
    for ring in &choice.rings {
        builder.ring(&ring.name, &ring.stations, &ring.place);
    }
    for region in &choice.regions {
        builder.region(region);
    }
    if !builder.problems.is_empty() {
        return Err(Error::Invalid(builder.problems));
    }
    let mut built = builder.built;
    if !choice.triangles {
        built.polygons.retain(|p| p.kind != PolygonKind::Triangle);
        built
            .excluded
            .retain(|(p, _)| p.kind != PolygonKind::Triangle);
    }
    warn(&mut built, limits);
    Ok(built)
}

/// Builds triangles of stations given by number, counter-clockwise; those on one line are dropped.
#[must_use]
pub fn build_triangles(
    network: &Network,
    triangles: &[[usize; 3]],
    limits: &PolygonLimits,
) -> BuiltPolygons {
    let mut builder = Builder::new(network, limits);
    for triangle in triangles {
        builder.triangle(*triangle);
    }
    builder.built
}

/// Numbers of the stations that make triangles, one at each place, and the warnings of the others.
pub(crate) fn apart(network: &Network) -> (Vec<usize>, Vec<Warning>) {
    let doubles = network.coincident();
    let left_out: HashSet<&str> = doubles
        .iter()
        .filter_map(|w| match w {
            Warning::OnePlace { left_out, .. } => Some(left_out.as_str()),
            _ => None,
        })
        .collect();
    let stations = (0..network.len())
        .filter(|&s| !left_out.contains(network.stations()[s].id.as_str()))
        .collect();
    (stations, doubles)
}

fn warn(built: &mut BuiltPolygons, limits: &PolygonLimits) {
    let slopes = built.polygons.iter().filter_map(|p| p.shape.slope);
    let steep: Vec<f64> = slopes
        .map(|slope| slope * limits.vertical_shear)
        .filter(|&error| error >= STEEP)
        .collect();
    if !steep.is_empty() {
        built.warnings.push(Warning::SteepGround {
            polygons: steep.len(),
            worst: steep.iter().copied().fold(0.0, f64::max),
            shear: limits.vertical_shear,
        });
    }
    let long: Vec<f64> = built
        .polygons
        .iter()
        .map(|p| p.shape.longest_edge)
        .filter(|&l| l > LONG_EDGE)
        .collect();
    if !long.is_empty() {
        built.warnings.push(Warning::LongEdges {
            polygons: long.len(),
            longest: long.iter().copied().fold(0.0, f64::max),
        });
    }
    let (usable, of) = (
        built.polygons.len(),
        built.polygons.len() + built.excluded.len(),
    );
    if 2 * usable < of {
        built.warnings.push(Warning::FewPolygons { usable, of });
    }
}

/// A part of a region: the number of a polygon within the limits, or of one left out.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum PartOf {
    Used(usize),
    LeftOut(usize),
}

struct Builder<'a> {
    network: &'a Network,
    limits: &'a PolygonLimits,
    positions: Vec<Position>,
    geodesic: Geodesic,
    built: BuiltPolygons,
    problems: Vec<Problem>,
}

impl<'a> Builder<'a> {
    fn new(network: &'a Network, limits: &'a PolygonLimits) -> Self {
        Self {
            network,
            limits,
            positions: network.stations().iter().map(|s| s.position).collect(),
            geodesic: Geodesic::wgs84(),
            built: BuiltPolygons::default(),
            problems: Vec::new(),
        }
    }
}

impl Builder<'_> {
    fn triangle(&mut self, ring: [usize; 3]) {
        let id = ring
            .map(|s| self.network.stations()[s].id.as_str())
            .join("+");
        match self.polygon(id, PolygonKind::Triangle, vec![ring.to_vec()]) {
            Some(polygon) => self.add(polygon),
            None => self.built.flat += 1,
        }
    }

    fn triangles(&mut self) -> Result<(), Error> {
        let (stations, doubles) = apart(self.network);
        for ring in triangulate(&self.positions, &stations)? {
            self.triangle(ring);
        }
        let flat = |p: &StationPolygon| p.shape.smallest_angle < FLAT;
        if self.built.polygons.is_empty() && self.built.excluded.iter().all(|(p, _)| flat(p)) {
            return Err(Error::Network(format!(
                "all {} stations stand on one line; they make no polygon",
                stations.len()
            )));
        }
        self.built.warnings.extend(doubles);
        Ok(())
    }

    fn ring(&mut self, name: &str, stations: &[String], place: &Place) {
        let mut ring = Vec::new();
        for station in stations {
            match self.network.find(station) {
                Some(s) => ring.push(s),
                None => self.unknown_station(name, station, place),
            }
        }
        if ring.len() < stations.len() || self.name_is_taken(name, place) {
            return;
        }
        let mut defects = defects(&ring, self.network);
        if defects.is_empty() {
            let reversed = self.area(&ring) < 0.0;
            if reversed {
                ring.reverse();
            }
            match self.polygon(name.to_string(), PolygonKind::Ring, vec![ring]) {
                Some(polygon) => match self.spike(&polygon, reversed) {
                    None => {
                        self.add(polygon);
                        return;
                    }
                    Some(defect) => defects.push(defect),
                },
                None => defects.push(InvalidPolygon::Flat),
            }
        }
        for defect in defects {
            self.problem(place, format!("ring `{name}`: {defect}"));
        }
    }

    /// The corner of a ring where it runs back the way it came, which rounding can hide from the test for crossings; the
    /// edges are named in the user's direction.
    fn spike(&self, polygon: &StationPolygon, reversed: bool) -> Option<InvalidPolygon> {
        let edges = &self.built.edges;
        let corner = interior_angles(&polygon.path, edges)
            .position(|a| !(FLAT..=360.0 - FLAT).contains(&a))?;
        let name = |edge: DirectedEdge| {
            let (from, to, _) = edges.ends(edge);
            let id = |s: usize| self.network.stations()[s].id.clone();
            if reversed {
                (id(to), id(from))
            } else {
                (id(from), id(to))
            }
        };
        let before = (corner + polygon.path.len() - 1) % polygon.path.len();
        let (first, second) = if reversed {
            (corner, before)
        } else {
            (before, corner)
        };
        Some(InvalidPolygon::EdgesCross {
            first: name(polygon.path[first]),
            second: name(polygon.path[second]),
        })
    }

    fn region(&mut self, region: &RegionSettings) {
        let place = &region.place;
        let parts: Vec<PartOf> = match &region.parts {
            RegionParts::AllTriangles => self.triangles_where(|_| true),
            RegionParts::TrianglesOf(stations) => {
                let mut wanted = HashSet::new();
                for station in stations {
                    match self.network.find(station) {
                        Some(s) => {
                            wanted.insert(s);
                        }
                        None => self.unknown_station(&region.name, station, place),
                    }
                }
                self.triangles_where(|ring| ring.iter().all(|s| wanted.contains(s)))
            }
            RegionParts::Polygons(ids) => {
                let mut parts = Vec::new();
                for id in ids {
                    if let Some(k) = self.built.polygons.iter().position(|p| &p.id == id) {
                        parts.push(PartOf::Used(k));
                    } else {
                        self.missing_part(region, id);
                    }
                }
                if parts.len() < ids.len() {
                    return;
                }
                parts
            }
        };
        if parts.is_empty() {
            self.problem(
                place,
                format!("region `{}` has no polygon within the limits", region.name),
            );
            return;
        }
        if self.name_is_taken(&region.name, place) || self.parts_overlap(region, &parts) {
            return;
        }
        let polygon = self.union(&region.name, &parts);
        self.built.polygons.push(polygon);
    }

    fn part(&self, part: PartOf) -> &StationPolygon {
        match part {
            PartOf::Used(k) => &self.built.polygons[k],
            PartOf::LeftOut(k) => &self.built.excluded[k].0,
        }
    }

    /// The triangles whose ring is wanted. Of those left out, the ones that other parts enclose belong to a region all
    /// the same: their sides cancel, and without them the region would have holes. So they are taken off from the
    /// outside only.
    fn triangles_where(&self, wanted: impl Fn(&[usize]) -> bool) -> Vec<PartOf> {
        let used = (0..self.built.polygons.len()).map(PartOf::Used);
        let left_out = (0..self.built.excluded.len()).map(PartOf::LeftOut);
        let is_wanted = |part: &PartOf| {
            let p = self.part(*part);
            p.kind == PolygonKind::Triangle && p.outline.iter().all(|ring| wanted(ring))
        };
        let mut parts: Vec<PartOf> = used.chain(left_out).filter(is_wanted).collect();
        loop {
            let mut sides: HashMap<usize, u32> = HashMap::new();
            for side in parts.iter().flat_map(|&part| &self.part(part).path) {
                *sides.entry(side.edge).or_default() += 1;
            }
            let before = parts.len();
            parts.retain(|&part| {
                let enclosed = |side: &DirectedEdge| sides.get(&side.edge) == Some(&2);
                matches!(part, PartOf::Used(_)) || self.part(part).path.iter().all(enclosed)
            });
            if parts.len() == before {
                return parts;
            }
        }
    }

    fn missing_part(&mut self, region: &RegionSettings, id: &str) {
        let message = match self.built.excluded.iter().find(|(p, _)| p.id == id) {
            Some((_, why)) => format!(
                "region `{}`: polygon `{id}` is outside the limits ({why})",
                region.name
            ),
            None => {
                let ids = self.built.polygons.iter().map(|p| p.id.as_str());
                let near = nearest_name(id, ids)
                    .map_or_else(String::new, |n| format!("; is `{n}` meant?"));
                format!("region `{}`: there is no polygon `{id}`{near}", region.name)
            }
        };
        self.problem(&region.place, message);
    }

    /// Triangles never overlap each other; anything with a ring or region among them is looked at pair by pair.
    fn parts_overlap(&mut self, region: &RegionSettings, parts: &[PartOf]) -> bool {
        let before = self.problems.len();
        for (k, &a) in parts.iter().enumerate() {
            for &b in &parts[k + 1..] {
                let (pa, pb) = (self.part(a), self.part(b));
                let triangles =
                    pa.kind == PolygonKind::Triangle && pb.kind == PolygonKind::Triangle;
                let shared = if triangles {
                    a == b
                } else {
                    // A hole only takes ground away; to look at outlines with holes as if they had none is too strict
                    // by a case that no one needs.
                    pa.outline.iter().any(|ra| {
                        pb.outline
                            .iter()
                            .any(|rb| overlap(ra, rb, self.network).unwrap_or(true))
                    })
                };
                if shared {
                    let message = format!(
                        "region `{}`: `{}` and `{}` overlap",
                        region.name, pa.id, pb.id
                    );
                    self.problem(&region.place, message);
                }
            }
        }
        self.problems.len() > before
    }

    /// The union: edges that two parts share cancel before anything is added up, the outline remains.
    fn union(&self, name: &str, parts: &[PartOf]) -> StationPolygon {
        let mut net: BTreeMap<usize, i32> = BTreeMap::new();
        let mut area = crate::sum::CompensatedSum::default();
        for &k in parts {
            let part = self.part(k);
            area.add(part.shape.area);
            for directed in &part.path {
                *net.entry(directed.edge).or_default() += if directed.forward { 1 } else { -1 };
            }
        }
        let path: Vec<DirectedEdge> = net
            .into_iter()
            .filter(|&(_, n)| n != 0)
            .map(|(edge, n)| DirectedEdge {
                edge,
                forward: n > 0,
            })
            .collect();
        let (outline, path) = loops(&path, &self.built.edges);
        self.assemble(
            name.to_string(),
            PolygonKind::Region,
            outline,
            path,
            area.total(),
        )
    }

    fn area(&self, ring: &[usize]) -> f64 {
        geodesic_area(ring.iter().map(|&s| self.positions[s]), &self.geodesic).0
    }

    /// A polygon from counter-clockwise rings; `None` if it has no area.
    fn polygon(
        &mut self,
        id: String,
        kind: PolygonKind,
        outline: Vec<Vec<usize>>,
    ) -> Option<StationPolygon> {
        let area: f64 = outline.iter().map(|ring| self.area(ring)).sum();
        // Below this the area is lost in its own rounding (0.1 m²).
        if area < 100.0 {
            return None;
        }
        let mut path = Vec::new();
        for ring in &outline {
            for (k, &a) in ring.iter().enumerate() {
                let b = ring[(k + 1) % ring.len()];
                path.push(
                    self.built
                        .edges
                        .directed(a, b, &self.positions, &self.geodesic),
                );
            }
        }
        Some(self.assemble(id, kind, outline, path, area))
    }

    fn assemble(
        &self,
        id: String,
        kind: PolygonKind,
        outline: Vec<Vec<usize>>,
        path: Vec<DirectedEdge>,
        area: f64,
    ) -> StationPolygon {
        let edges = &self.built.edges;
        let row = CoefficientRow::of(&path, edges, area);
        let middle: Vector3<f64> = row
            .stations
            .iter()
            .map(|&s| unit_vector(self.positions[s]))
            .sum();
        StationPolygon {
            id,
            kind,
            shape: Shape::of(area, &path, edges, &row, self.network),
            middle: latitude_longitude(&middle),
            outline,
            path,
            row,
        }
    }

    fn add(&mut self, polygon: StationPolygon) {
        let angle = polygon.shape.smallest_angle;
        let flat = polygon.kind == PolygonKind::Triangle && angle < FLAT;
        let why = flat.then_some(Exclusion::SmallAngle(angle, FLAT));
        match why.or_else(|| Exclusion::of(&polygon.shape, self.limits)) {
            None => self.built.polygons.push(polygon),
            Some(why) => self.built.excluded.push((polygon, why)),
        }
    }

    fn name_is_taken(&mut self, name: &str, place: &Place) -> bool {
        let all = self
            .built
            .polygons
            .iter()
            .chain(self.built.excluded.iter().map(|(p, _)| p));
        let taken = all.into_iter().any(|p| p.id == name);
        if taken {
            self.problem(place, format!("there is already a polygon `{name}`"));
        }
        taken
    }

    fn unknown_station(&mut self, polygon: &str, station: &str, place: &Place) {
        let ids = self.network.stations().iter().map(|s| s.id.as_str());
        let near =
            nearest_name(station, ids).map_or_else(String::new, |n| format!("; is `{n}` meant?"));
        self.problem(
            place,
            format!("`{polygon}` names station `{station}`, which is not in the list{near}"),
        );
    }

    fn problem(&mut self, place: &Place, message: String) {
        self.problems.push(Problem::new(place.clone(), message));
    }
}

/// Orders the edges of an outline into closed paths, each beginning with its smallest station.
///
/// Where two paths touch at a station, either way of joining them has the same edges and so the same sums.
fn loops(path: &[DirectedEdge], edges: &EdgeSet) -> (Vec<Vec<usize>>, Vec<DirectedEdge>) {
    let mut leaving: HashMap<usize, Vec<DirectedEdge>> = HashMap::new();
    let mut starts: Vec<usize> = Vec::new();
    for &edge in path {
        let start = edges.ends(edge).0;
        leaving.entry(start).or_default().push(edge);
        starts.push(start);
    }
    starts.sort_unstable();
    let (mut rings, mut ordered) = (Vec::new(), Vec::new());
    for start in starts {
        let mut ring = Vec::new();
        let mut at = start;
        while let Some(edge) = leaving.get_mut(&at).and_then(Vec::pop) {
            ring.push(at);
            ordered.push(edge);
            at = edges.ends(edge).1;
            if at == start {
                break;
            }
        }
        if !ring.is_empty() {
            rings.push(ring);
        }
    }
    (rings, ordered)
}
