//! `polygons.geojson`: the polygons with their values at some times.

use geojson::{Feature, Geometry, JsonObject, feature::Id};
use serde_json::{Value, json};

use super::csv::station_list;
use super::geojson::{geojson_geometry, outline_geometry};
use super::reason::Reasons;
use crate::integral::{EstimateBlock, Sense};
use crate::kinematics::Quantity;
use crate::pipeline::{BlockView, Setup};
use crate::polygon::StationPolygon;
use crate::station::Network;
use crate::time::Time;

/// Before the features, and after them.
pub(super) const COLLECTION: [&str; 2] =
    ["{\"type\":\"FeatureCollection\",\"features\":[\n", "\n]}\n"];
/// Between features.
pub(super) const BETWEEN: &str = ",\n";

/// Makes features of blocks: one for each polygon that stands at a time that is asked for, with the columns of
/// `polygons.csv` as properties, and those of `kinematics.csv` if they are there; null for a missing value.
pub(super) struct PolygonFeatures {
    /// Asked for; the last of each block if none is.
    at: Vec<Time>,
    /// For each polygon of the whole network.
    shapes: Vec<Shaped>,
    network: Network,
    reasons: Reasons,
    complete: bool,
}

/// What does not change with time.
struct Shaped {
    id: String,
    stations: String,
    area_km2: f64,
    planetary: f64,
    geometry: Geometry,
}

impl Shaped {
    fn of(polygon: &StationPolygon, planetary: f64, network: &Network) -> Self {
        Self {
            id: polygon.id.clone(),
            stations: station_list(polygon, network),
            area_km2: polygon.shape.area / 1e6,
            planetary,
            geometry: geojson_geometry(&outline_geometry(polygon, network)),
        }
    }
}

impl PolygonFeatures {
    pub(super) fn new(setup: &Setup, at: &[Time]) -> Self {
        let polygons = setup.built.polygons.iter().zip(&setup.planetary);
        Self {
            at: at.to_vec(),
            shapes: polygons
                .map(|(p, &f)| Shaped::of(p, f, &setup.network))
                .collect(),
            network: setup.network.clone(),
            reasons: Reasons::new(&setup.network),
            complete: setup.settings.errors.complete,
        }
    }

    /// The features of a block, by time, then polygon, and their times.
    pub(super) fn encode(&self, seen: &BlockView) -> (Vec<u8>, Vec<Time>) {
        let block = seen.estimates;
        let n = block.times.len();
        let wanted = |t: &usize| {
            let is_last = *t + 1 == n;
            (self.at.is_empty() && is_last) || self.at.contains(&block.times[*t])
        };
        let times: Vec<usize> = (0..n).filter(wanted).collect();
        if times.is_empty() {
            return (Vec::new(), Vec::new());
        }
        let extra = block.extra.iter();
        let extra = extra.map(|e| Shaped::of(&e.polygon, e.planetary, &self.network));
        let extra: Vec<Shaped> = extra.collect();
        let mut out = Vec::new();
        for &t in &times {
            for (p, shaped) in self.shapes.iter().chain(&extra).enumerate() {
                if !block.stands(p * n + t) {
                    continue;
                }
                if !out.is_empty() {
                    out.extend_from_slice(BETWEEN.as_bytes());
                }
                let feature = Feature {
                    bbox: None,
                    geometry: Some(shaped.geometry.clone()),
                    id: Some(Id::String(shaped.id.clone())),
                    properties: Some(self.properties(seen, shaped, p, t)),
                    foreign_members: None,
                };
                out.extend_from_slice(feature.to_string().as_bytes());
            }
        }
        (out, times.into_iter().map(|t| block.times[t]).collect())
    }

    fn properties(&self, seen: &BlockView, shaped: &Shaped, p: usize, t: usize) -> JsonObject {
        let block: &EstimateBlock = seen.estimates;
        let n = block.times.len();
        let cell = p * n + t;
        let usable = block.flag[cell].is_usable();
        let value = |number: f64| if usable { json!(number) } else { Value::Null };
        let part = |column: &[f64], asked_for: bool| {
            let part = column.get(cell).filter(|_| asked_for && usable);
            part.map_or(Value::Null, |&part| json!(part))
        };
        let called = |k: usize| {
            let called = block.significant[k].get(cell).filter(|_| usable);
            called.map_or(Value::Null, |&called| json!(called))
        };
        let sense = Sense::of(block.vorticity[cell], shaped.planetary).filter(|_| usable);
        let cause = block.causes.get(cell).copied().flatten();
        let (z, d) = (&block.budget.vorticity, &block.budget.divergence);
        let mut out = JsonObject::new();
        for (name, value) in [
            ("time", json!(block.times[t].to_string())),
            ("polygon", json!(shaped.id)),
            ("stations", json!(shaped.stations)),
            ("area_km2", json!(shaped.area_km2)),
            ("vorticity", value(block.vorticity[cell])),
            ("vorticity_se", value(block.vorticity_se[cell])),
            ("divergence", value(block.divergence[cell])),
            ("divergence_se", value(block.divergence_se[cell])),
            ("planetary_vorticity", json!(shaped.planetary)),
            (
                "absolute_vorticity",
                value(block.vorticity[cell] + shaped.planetary),
            ),
            ("flag", json!(block.flag[cell].value())),
            ("sense", json!(sense.map(Sense::name))),
            ("age_s", value(f64::from(block.age[cell]))),
            ("vorticity_se_instrument", part(&z.instrument, true)),
            ("vorticity_se_sampling", part(&z.sampling, self.complete)),
            ("vorticity_se_timing", part(&z.timing, self.complete)),
            ("divergence_se_instrument", part(&d.instrument, true)),
            ("divergence_se_sampling", part(&d.sampling, self.complete)),
            ("divergence_se_timing", part(&d.timing, self.complete)),
            ("vorticity_significant", called(0)),
            ("divergence_significant", called(1)),
            (
                "reason",
                json!(cause.map(|cause| &self.reasons.words()[self.reasons.index(cause)])),
            ),
        ] {
            out.insert(name.into(), value);
        }
        // Polygons that fill holes have no kinematics.
        if let Some(kinematics) = seen.kinematics.filter(|_| p < self.shapes.len()) {
            for quantity in Quantity::ALL {
                let found = kinematics.cells.get(cell).and_then(|q| q.get(quantity));
                out.insert(quantity.name().into(), json!(found.map(|v| v.0)));
                out.insert(format!("{}_se", quantity.name()), json!(found.map(|v| v.1)));
            }
        }
        out
    }
}
