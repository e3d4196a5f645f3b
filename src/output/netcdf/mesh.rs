//! The mesh: polygons as faces, stations as nodes (UGRID 1.0), and the same polygons as geometries of CF 1.8, chapter 7.5.

use geographiclib_rs::Geodesic;
use netcdf_writer::{DimensionId, NcAttrValue, Result};

use super::file::{Attribute, NetcdfFile, text, texts};
use crate::integral::ExtraPolygon;
use crate::pipeline::Setup;
use crate::polygon::{PolygonKind, StationPolygon, geodesic_area};
use crate::station::{Position, Station};

/// The faces of the run: the polygons of the whole network, then those that filled holes, by their numbers.
pub(super) struct Faces<'a> {
    setup: &'a Setup,
    pub(super) polygons: Vec<(&'a StationPolygon, f64)>,
}

/// The dimensions that variables stand on.
pub(super) struct Places {
    pub(super) face: DimensionId,
    pub(super) node: DimensionId,
}

/// Attributes of every variable on faces.
pub(super) const ON_FACES: [(&str, &str); 4] = [
    ("mesh", "mesh"),
    ("location", "face"),
    ("coordinates", "face_lon face_lat"),
    ("grid_mapping", "crs"),
];
/// Attributes of every variable on nodes.
pub(super) const ON_NODES: [(&str, &str); 4] = [
    ("mesh", "mesh"),
    ("location", "node"),
    ("coordinates", "node_lon node_lat"),
    ("grid_mapping", "crs"),
];

impl<'a> Faces<'a> {
    pub(super) fn new(setup: &'a Setup, extra: &'a [ExtraPolygon]) -> Self {
        let common = setup.built.polygons.iter();
        let common = common.zip(setup.planetary.iter().copied());
        let extra = extra.iter().map(|e| (&e.polygon, e.planetary));
        Self {
            setup,
            polygons: common.chain(extra).collect(),
        }
    }

    /// Writes dimensions, mesh, geometry and what is fixed for each face and node.
    pub(super) fn put(&self, file: &mut NetcdfFile) -> Result<Places> {
        let places = Places {
            face: file.dimension("face", self.polygons.len())?,
            node: file.dimension("node", self.setup.network.len())?,
        };
        file.container(
            "crs",
            vec![
                ("grid_mapping_name", text("latitude_longitude")),
                ("long_name", text("WGS 84")),
                ("semi_major_axis", NcAttrValue::Doubles(vec![6_378_137.0])),
                (
                    "inverse_flattening",
                    NcAttrValue::Doubles(vec![298.257_223_563]),
                ),
            ],
        )?;
        self.put_nodes(file, &places)?;
        self.put_topology(file, &places)?;
        self.put_rings(file, &places)?;
        self.put_fixed(file, &places)?;
        Ok(places)
    }

    fn stations(&self) -> impl Iterator<Item = &'a Station> {
        self.setup.network.stations().iter()
    }

    fn put_nodes(&self, file: &mut NetcdfFile, places: &Places) -> Result<()> {
        let longitudes: Vec<f64> = self.stations().map(|s| s.position.longitude()).collect();
        let latitudes: Vec<f64> = self.stations().map(|s| s.position.latitude()).collect();
        let node = [places.node];
        let of = |words| degrees("of the station", words);
        file.put("node_lon", &node, of(LONGITUDE), &longitudes)?;
        file.put("node_lat", &node, of(LATITUDE), &latitudes)?;
        let ids: Vec<&str> = self.stations().map(|s| s.id.as_str()).collect();
        file.put_words("station", places.node, "station identifier", &ids)?;
        let names: Vec<&str> = self.stations().map(|s| s.name.as_str()).collect();
        file.put_words("station_name", places.node, "station name", &names)?;
        let heights: Vec<f64> = self
            .stations()
            .map(|s| s.elevation.unwrap_or(f64::NAN))
            .collect();
        let mut attributes = texts(&[
            ("standard_name", "surface_altitude"),
            ("long_name", "height of the ground above mean sea level"),
            ("units", "m"),
        ]);
        attributes.extend(texts(&ON_NODES));
        file.put_with_fill("elevation", &node, f64::NAN, attributes, &heights)
    }

    fn put_topology(&self, file: &mut NetcdfFile, places: &Places) -> Result<()> {
        file.container(
            "mesh",
            vec![
                ("cf_role", text("mesh_topology")),
                ("long_name", text("polygons of stations")),
                ("topology_dimension", NcAttrValue::Ints(vec![2])),
                ("node_coordinates", text("node_lon node_lat")),
                ("face_node_connectivity", text("face_nodes")),
                ("face_dimension", text("face")),
                ("face_coordinates", text("face_lon face_lat")),
            ],
        )?;
        let rings: Vec<&[usize]> = self.polygons.iter().map(|(p, _)| self.outer(p)).collect();
        let widest = rings.iter().map(|ring| ring.len()).max().unwrap_or(3);
        let width = file.dimension("face_node_max", widest)?;
        let nodes = rings.iter().flat_map(|ring| {
            (0..widest).map(|k| {
                let station = ring.get(k).and_then(|&s| i32::try_from(s).ok());
                station.unwrap_or(-1)
            })
        });
        let nodes: Vec<i32> = nodes.collect();
        let mut attributes = vec![
            ("cf_role", text("face_node_connectivity")),
            (
                "long_name",
                text("stations of each face, counter-clockwise"),
            ),
            ("start_index", NcAttrValue::Ints(vec![0])),
        ];
        if self.polygons.iter().any(|(p, _)| p.outline.len() > 1) {
            let comment =
                "a face of several rings has the largest of them here; `geometry` has all";
            attributes.push(("comment", text(comment)));
        }
        let dimensions = [places.face, width];
        file.put_with_fill("face_nodes", &dimensions, -1_i32, attributes, &nodes)?;
        let middle = |of: fn((f64, f64)) -> f64| -> Vec<f64> {
            let middles = self.polygons.iter().map(|(p, _)| of(p.middle));
            middles.collect()
        };
        let of = |words| degrees("of the middle of the stations", words);
        let face = [places.face];
        file.put("face_lon", &face, of(LONGITUDE), &middle(|m| m.1))?;
        file.put("face_lat", &face, of(LATITUDE), &middle(|m| m.0))
    }

    /// The largest ring.
    fn outer<'p>(&self, polygon: &'p StationPolygon) -> &'p [usize] {
        let area = |ring: &&Vec<usize>| self.ring_area(ring);
        let largest = polygon
            .outline
            .iter()
            .max_by(|a, b| area(a).total_cmp(&area(b)));
        largest.map_or(&[], Vec::as_slice)
    }

    /// Signed area of a ring, m², below 0 for a hole.
    fn ring_area(&self, ring: &[usize]) -> f64 {
        let stations = self.setup.network.stations();
        let positions: Vec<Position> = ring.iter().map(|&s| stations[s].position).collect();
        geodesic_area(positions.into_iter(), &Geodesic::wgs84()).0
    }

    /// Closed rings, outlines before their holes; longitudes go on beyond 180 where a ring crosses the antimeridian.
    fn put_rings(&self, file: &mut NetcdfFile, places: &Places) -> Result<()> {
        let stations = self.setup.network.stations();
        let (mut x, mut y) = (Vec::new(), Vec::new());
        let (mut counts, mut parts, mut holes) = (Vec::new(), Vec::new(), Vec::new());
        for (polygon, _) in &self.polygons {
            let mut of_face = 0;
            for ring in &polygon.outline {
                let mut before: Option<f64> = None;
                for &s in ring.iter().chain(ring.first()) {
                    let position = stations[s].position;
                    let longitude = position.longitude();
                    let longitude = before.map_or(longitude, |before| {
                        // Whole turns, so that the ring closes on its very first point.
                        longitude + 360.0 * ((before - longitude) / 360.0).round()
                    });
                    before = Some(longitude);
                    x.push(longitude);
                    y.push(position.latitude());
                }
                let points = i32::try_from(ring.len() + 1).unwrap_or(i32::MAX);
                of_face += points;
                parts.push(points);
                holes.push(i32::from(self.ring_area(ring) < 0.0));
            }
            counts.push(of_face);
        }
        let has_parts = parts.len() > self.polygons.len();
        let mut attributes: Vec<Attribute> = vec![
            ("geometry_type", text("polygon")),
            ("node_count", text("ring_node_count")),
            ("node_coordinates", text("ring_lon ring_lat")),
            ("coordinates", text("face_lon face_lat")),
            ("grid_mapping", text("crs")),
        ];
        if has_parts {
            attributes.push(("part_node_count", text("ring_part_node_count")));
            attributes.push(("interior_ring", text("ring_is_hole")));
        }
        file.container("geometry", attributes)?;
        let vertex = file.dimension("ring_vertex", x.len())?;
        let with_axis = |words: &'static [(&'static str, &'static str); 2], axis| {
            let mut attributes = degrees("of the rings of each face", words);
            attributes.push(("axis", text(axis)));
            attributes
        };
        file.put("ring_lon", &[vertex], with_axis(LONGITUDE, "X"), &x)?;
        file.put("ring_lat", &[vertex], with_axis(LATITUDE, "Y"), &y)?;
        let named = |long_name: &'static str| texts(&[("long_name", long_name)]);
        let count = named("points of each face in ring_lon and ring_lat");
        file.put("ring_node_count", &[places.face], count, &counts)?;
        if has_parts {
            let part = file.dimension("ring_part", parts.len())?;
            let count = named("points of each ring");
            file.put("ring_part_node_count", &[part], count, &parts)?;
            let hole = named("1 where the ring is a hole");
            file.put("ring_is_hole", &[part], hole, &holes)?;
        }
        Ok(())
    }

    fn put_fixed(&self, file: &mut NetcdfFile, places: &Places) -> Result<()> {
        let ids: Vec<&str> = self.polygons.iter().map(|(p, _)| p.id.as_str()).collect();
        file.put_words("polygon", places.face, "polygon identifier", &ids)?;
        let face = [places.face];
        let fixed = |standard_name: &str, long_name: &str, units: &str| {
            let mut attributes = texts(&[
                ("standard_name", standard_name),
                ("long_name", long_name),
                ("units", units),
                ("geometry", "geometry"),
            ]);
            attributes.extend(texts(&ON_FACES));
            attributes
        };
        type Of = fn(&StationPolygon, f64) -> f64;
        let numbers: [(&str, &str, &str, &str, Of); 8] = [
            ("area", "cell_area", "area on WGS 84", "m2", |p, _| {
                p.shape.area
            }),
            (
                "planetary_vorticity",
                "coriolis_parameter",
                "area-mean planetary vorticity",
                "s-1",
                |_, planetary| planetary,
            ),
            ("perimeter", "", "length of the edges", "m", |p, _| {
                p.shape.perimeter
            }),
            (
                "longest_edge",
                "",
                "length of the longest edge",
                "m",
                |p, _| p.shape.longest_edge,
            ),
            (
                "smallest_angle",
                "",
                "smallest interior angle",
                "degree",
                |p, _| p.shape.smallest_angle,
            ),
            (
                "shape_quality",
                "",
                "1 for the regular polygon",
                "1",
                |p, _| p.shape.quality,
            ),
            (
                "noise_factor",
                "",
                "error of vorticity and of divergence for an error of 1 m/s in the winds",
                "m-1",
                |p, _| p.shape.noise_factor,
            ),
            (
                "elevation_spread",
                "",
                "highest less lowest station",
                "m",
                |p, _| p.shape.elevation_spread.unwrap_or(f64::NAN),
            ),
        ];
        for (name, standard_name, long_name, units, of) in numbers {
            let values: Vec<f64> = self.polygons.iter().map(|(p, f)| of(p, *f)).collect();
            let attributes = fixed(standard_name, long_name, units);
            file.put_with_fill(name, &face, f64::NAN, attributes, &values)?;
        }
        let flags = |long_name: &str, values: Vec<i8>, meanings: &str| {
            let mut attributes = fixed("", long_name, "");
            attributes.push(("flag_values", NcAttrValue::Bytes(values)));
            attributes.push(("flag_meanings", text(meanings)));
            attributes
        };
        let kinds = self.polygons.iter().map(|(p, _)| match p.kind {
            PolygonKind::Triangle => 1,
            PolygonKind::Ring => 2,
            PolygonKind::Region => 3,
        });
        let kinds: Vec<i8> = kinds.collect();
        let attributes = flags("what the polygon is", vec![1, 2, 3], "triangle ring region");
        file.put("kind", &face, attributes, &kinds)?;
        let common = self.setup.built.polygons.len();
        let fills: Vec<i8> = (0..self.polygons.len())
            .map(|p| i8::from(p >= common))
            .collect();
        let attributes = flags(
            "whether it stands only where stations are missing",
            vec![0, 1],
            "no yes",
        );
        file.put("fills_hole", &face, attributes, &fills)
    }
}

const LONGITUDE: &[(&str, &str); 2] = &[("standard_name", "longitude"), ("units", "degrees_east")];
const LATITUDE: &[(&str, &str); 2] = &[("standard_name", "latitude"), ("units", "degrees_north")];

/// Attributes of a coordinate.
fn degrees(of: &str, words: &'static [(&'static str, &'static str); 2]) -> Vec<Attribute<'static>> {
    let mut attributes = texts(words);
    let name = words[0].1;
    attributes.push(("long_name", text(format!("{name} {of}"))));
    attributes
}
