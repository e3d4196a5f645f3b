//! The columns of the series as arrays: those of `polygons.csv`, typed; null for a missing value.

use std::sync::Arc;

use arrow_array::{ArrayRef, StringArray, new_null_array};
use arrow_schema::{ArrowError, DataType, Field, Schema, SchemaRef, TimeUnit};

use super::csv::station_list;
use super::reason::Reasons;
use super::standing::StandingRows;
use crate::integral::{EstimateBlock, Sense};
use crate::pipeline::Setup;
use crate::polygon::StationPolygon;
use crate::station::Network;

/// Names and numbers of the polygons, and how a block becomes columns.
pub(super) struct SeriesColumns {
    pub(super) schema: SchemaRef,
    pub(super) senses: ArrayRef,
    /// The reasons that can stand, in the order of [`Reasons::index`].
    pub(super) reasons: ArrayRef,
    pub(super) of_reasons: Reasons,
    pub(super) planetary: Vec<f64>,
    /// Identifiers of the polygons of the whole network.
    pub(super) polygons: ArrayRef,
    /// Their stations.
    pub(super) stations: ArrayRef,
    /// Their areas, km².
    pub(super) area: Vec<f64>,
    pub(super) complete: bool,
    network: Network,
}

impl SeriesColumns {
    pub(super) fn new(setup: &Setup) -> Self {
        let of_reasons = Reasons::new(&setup.network);
        let polygons = &setup.built.polygons;
        let lists = polygons.iter().map(|p| station_list(p, &setup.network));
        Self {
            schema: Arc::new(schema()),
            senses: Arc::new(StringArray::from(vec![
                Sense::Cyclonic.name(),
                Sense::Anticyclonic.name(),
            ])),
            reasons: Arc::new(StringArray::from(of_reasons.words().to_vec())),
            of_reasons,
            planetary: setup.planetary.clone(),
            polygons: Arc::new(StringArray::from_iter_values(
                polygons.iter().map(|p| p.id.as_str()),
            )),
            stations: Arc::new(StringArray::from_iter_values(lists)),
            area: polygons.iter().map(|p| p.shape.area / 1e6).collect(),
            complete: setup.settings.errors.complete,
            network: setup.network.clone(),
        }
    }

    /// Identifiers and stations of the polygons, with those of some more.
    fn names<'p>(&self, more: impl Iterator<Item = &'p StationPolygon> + Clone) -> [ArrayRef; 2] {
        let with = |own: &ArrayRef, more: Vec<String>| -> ArrayRef {
            let own = own.as_any().downcast_ref::<StringArray>();
            let own = own.into_iter().flatten().flatten().map(String::from);
            Arc::new(StringArray::from(own.chain(more).collect::<Vec<String>>()))
        };
        let ids = more.clone().map(|p| p.id.clone()).collect();
        let lists = more.map(|p| station_list(p, &self.network)).collect();
        [with(&self.polygons, ids), with(&self.stations, lists)]
    }

    /// The columns of any block: rows of the polygons that stand, by time, then polygon.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn of(&self, block: &EstimateBlock) -> Result<Vec<ArrayRef>, ArrowError> {
        let rows = StandingRows::new(block);
        let extra = |p: usize| block.extra.get(p.checked_sub(self.planetary.len())?);
        let planetary = |p: usize| {
            let own = self.planetary.get(p).copied();
            own.or_else(|| extra(p).map(|extra| extra.planetary))
                .unwrap_or_default()
        };
        let area = |p: usize| {
            let own = self.area.get(p).copied();
            own.or_else(|| extra(p).map(|extra| extra.polygon.shape.area / 1e6))
                .unwrap_or_default()
        };
        let extras = block.extra.iter().map(|extra| &extra.polygon);
        let [ids, stations] = self.names(extras);
        let sense = |cell: usize, p: usize| {
            let sense = Sense::of(block.vorticity[cell], planetary(p));
            let sense = sense.filter(|_| block.flag[cell].is_usable());
            sense.map(|sense| usize::from(sense == Sense::Anticyclonic))
        };
        let reason = |cell: usize, _| {
            let cause = block.causes.get(cell).copied().flatten();
            cause.map(|cause| self.of_reasons.index(cause))
        };
        let part = |column: &[f64], asked_for: bool| {
            if asked_for {
                rows.part(column)
            } else {
                new_null_array(&DataType::Float32, rows.len())
            }
        };
        let (z, d) = (&block.budget.vorticity, &block.budget.divergence);
        Ok(vec![
            rows.times(),
            rows.named(|_, p| Some(p), &ids)?,
            rows.named(|_, p| Some(p), &stations)?,
            rows.given(|_, p| area(p)),
            rows.values(|cell, _| block.vorticity[cell]),
            rows.values(|cell, _| block.vorticity_se[cell]),
            rows.values(|cell, _| block.divergence[cell]),
            rows.values(|cell, _| block.divergence_se[cell]),
            rows.given(|_, p| planetary(p)),
            rows.values(|cell, p| block.vorticity[cell] + planetary(p)),
            rows.flags(),
            rows.named(sense, &self.senses)?,
            rows.ages(),
            part(&z.instrument, true),
            part(&z.sampling, self.complete),
            part(&z.timing, self.complete),
            part(&d.instrument, true),
            part(&d.sampling, self.complete),
            part(&d.timing, self.complete),
            rows.called(&block.significant[0]),
            rows.called(&block.significant[1]),
            rows.named(reason, &self.reasons)?,
        ])
    }
}

/// The columns of the contract, with their units.
fn schema() -> Schema {
    let dictionary = || DataType::Dictionary(Box::new(DataType::Int32), Box::new(DataType::Utf8));
    let field = |name: &str, kind: DataType, nullable: bool, units: &str| {
        let field = Field::new(name, kind, nullable);
        if units.is_empty() {
            field
        } else {
            field.with_metadata([("units".to_string(), units.to_string())].into())
        }
    };
    let number =
        |name: &str, nullable: bool, units: &str| field(name, DataType::Float64, nullable, units);
    let part = |name: &str| field(name, DataType::Float32, true, "s-1");
    let time = DataType::Timestamp(TimeUnit::Microsecond, Some("UTC".into()));
    Schema::new(vec![
        field("time", time, false, ""),
        field("polygon", dictionary(), false, ""),
        field("stations", dictionary(), false, ""),
        number("area_km2", false, "km2"),
        number("vorticity", true, "s-1"),
        number("vorticity_se", true, "s-1"),
        number("divergence", true, "s-1"),
        number("divergence_se", true, "s-1"),
        number("planetary_vorticity", false, "s-1"),
        number("absolute_vorticity", true, "s-1"),
        field("flag", DataType::UInt8, false, ""),
        field("sense", dictionary(), true, ""),
        field("age_s", DataType::Float32, true, "s"),
        part("vorticity_se_instrument"),
        part("vorticity_se_sampling"),
        part("vorticity_se_timing"),
        part("divergence_se_instrument"),
        part("divergence_se_sampling"),
        part("divergence_se_timing"),
        field("vorticity_significant", DataType::Boolean, true, ""),
        field("divergence_significant", DataType::Boolean, true, ""),
        field("reason", dictionary(), true, ""),
    ])
}
