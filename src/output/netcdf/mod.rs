//! `polygons.nc`: the series as NetCDF-4 after CF 1.8 and UGRID 1.0.
//!
//! Polygons are faces, stations are nodes; values, errors and flags stand over time and face, the winds behind them over
//! time and node. Polygons that are left out are no faces. Numbers have seven digits, NaN where missing.
//!
//! Triangles that come and go (`missing = "remesh"`) are faces of their own, without a value where they do not stand;
//! they are known at the end only, so the whole series stays in memory until then: about 60 bytes for each polygon and time
//! while reports are read (with kinematics 200), and twice as much while the file is made.
//!
//! The file holds no clock time: the same input, settings and version give the same bytes.

mod block;
mod file;
mod mesh;
mod variables;

use std::path::Path;

use netcdf_writer::{DimensionId, NcAttrValue};

use self::file::{Attribute, NetcdfFile, text, texts};
use self::mesh::{Faces, ON_FACES, ON_NODES, Places};
use self::variables::{FLAG_MEANINGS, FLAG_VALUES, FLAGS, FaceVariable, face_variables};
use crate::error::Error;
use crate::integral::ExtraPolygon;
use crate::pipeline::Setup;

pub(super) use self::block::{FaceBlock, FaceRows};

/// The winds of the stations: name, name of the table of CF, long name.
const WINDS: [(&str, &str, &str); 4] = [
    (
        "station_u",
        "eastward_wind",
        "wind of the station at the time, towards east",
    ),
    (
        "station_u_se",
        "eastward_wind standard_error",
        "standard error of station_u, of the instrument",
    ),
    (
        "station_v",
        "northward_wind",
        "wind of the station at the time, towards north",
    ),
    (
        "station_v_se",
        "northward_wind standard_error",
        "standard error of station_v, of the instrument",
    ),
];

/// The blocks of a run, until the file is made of them.
#[derive(Default)]
pub(super) struct FaceFile {
    blocks: Vec<FaceBlock>,
}

impl FaceFile {
    /// Keeps a block.
    pub(super) fn append(&mut self, block: FaceBlock) {
        self.blocks.push(block);
    }

    /// Makes the file; `extra` are the polygons of the run that stand only where stations are missing, by their numbers.
    ///
    /// # Errors
    /// The library's refusal.
    pub(super) fn finish(self, setup: &Setup, extra: &[ExtraPolygon]) -> Result<Vec<u8>, Error> {
        self.make(setup, extra).map_err(|error| {
            let error = std::io::Error::other(error.to_string());
            Error::write(Path::new("polygons.nc"), error)
        })
    }

    fn make(self, setup: &Setup, extra: &[ExtraPolygon]) -> netcdf_writer::Result<Vec<u8>> {
        let faces = Faces::new(setup, extra);
        let mut file = NetcdfFile::new(self.about(setup))?;
        let time = file.unlimited_dimension("time")?;
        let places = faces.put(&mut file)?;
        let times = self.blocks.iter().flat_map(|block| &block.times);
        let times: Vec<f64> = times.map(|time| time.micros() as f64 * 1e-6).collect();
        let attributes = texts(&[
            ("standard_name", "time"),
            ("long_name", "analysis time"),
            ("units", "seconds since 1970-01-01T00:00:00Z"),
            ("calendar", "standard"),
            ("units_metadata", "leap_seconds: none"),
            ("axis", "T"),
        ]);
        file.put("time", &[time], attributes, &times)?;
        let variables = face_variables(
            setup.settings.errors.complete,
            setup.settings.kinematics.write,
        );
        let common = setup.built.polygons.len();
        let mut series = Series {
            blocks: self.blocks,
            common,
            faces: faces.polygons.len(),
        };
        series.put_faces(&mut file, time, &places, &variables)?;
        series.put_winds(&mut file, time, &places, setup.network.len())?;
        drop(series);
        let settings = format!("{:#}", super::summary::settings(&setup.settings));
        file.put_text("settings", "settings of the run, JSON", &settings)?;
        file.into_bytes()
    }

    /// Attributes of the file.
    fn about(&self, setup: &Setup) -> Vec<Attribute<'static>> {
        let name = &setup.settings.name;
        let version = env!("CARGO_PKG_VERSION");
        let times = || self.blocks.iter().flat_map(|block| &block.times);
        let ends = times().next().zip(times().last());
        let period = ends.map_or_else(String::new, |(first, last)| format!("{first} to {last}"));
        let title = format!("{name}: area-mean vorticity and divergence of station polygons");
        let history = format!("gyremesh {version} estimate, reports for {period}");
        let source = format!("reports of surface wind stations; gyremesh {version}");
        texts(&[
            ("Conventions", "CF-1.8 UGRID-1.0"),
            ("title", &title),
            ("institution", name),
            ("source", &source),
            ("history", &history),
            (
                "references",
                "Bellamy 1949, Bull. Amer. Meteor. Soc. 30, 45; IOOS QARTOD manual for wind data",
            ),
            ("comment", super::CAUTION),
            ("error_bars", super::error_bars(&setup.settings.errors)),
        ])
    }
}

/// The blocks as they become variables, one after the other; each column is dropped when it is written.
struct Series {
    blocks: Vec<FaceBlock>,
    common: usize,
    faces: usize,
}

impl Series {
    /// A column of all blocks over time and face; `missing` where a face does not stand in a block.
    fn of_faces<T: Copy>(
        &mut self,
        missing: T,
        take: impl Fn(&mut FaceBlock) -> Option<Vec<T>>,
    ) -> Vec<T> {
        let times: usize = self.blocks.iter().map(|block| block.times.len()).sum();
        let mut out = Vec::with_capacity(times * self.faces);
        for block in &mut self.blocks {
            let column = take(block).unwrap_or_default();
            for row in column.chunks(self.common + block.extra.len()) {
                let from = out.len();
                out.extend_from_slice(row.get(..self.common).unwrap_or(row));
                out.resize(from + self.faces, missing);
                for (&number, &value) in block.extra.iter().zip(row.iter().skip(self.common)) {
                    if let Some(place) = out.get_mut(from + number) {
                        *place = value;
                    }
                }
            }
        }
        out
    }

    fn of_nodes<T>(&mut self, take: impl Fn(&mut FaceBlock) -> Option<Vec<T>>) -> Vec<T> {
        let columns = self.blocks.iter_mut().filter_map(take);
        columns.flatten().collect()
    }

    fn put_faces(
        &mut self,
        file: &mut NetcdfFile,
        time: DimensionId,
        places: &Places,
        variables: &[FaceVariable],
    ) -> netcdf_writer::Result<()> {
        let (on, faces) = ([time, places.face], self.faces);
        for (k, variable) in variables.iter().enumerate() {
            let cell_methods = if variable.is_mean { "face: mean" } else { "" };
            let mut attributes = texts(&[
                ("standard_name", &variable.standard_name),
                ("long_name", &variable.long_name),
                ("units", variable.units),
                ("cell_methods", cell_methods),
                ("cell_measures", "area: area"),
                ("ancillary_variables", &variable.ancillary),
            ]);
            attributes.extend(texts(&ON_FACES));
            let values = self.of_faces(f32::NAN, |block| {
                block.numbers.get_mut(k).map(std::mem::take)
            });
            let fill = Some(f32::NAN);
            file.put_series(&variable.name, on, faces, fill, attributes, &values)?;
        }
        for (k, flag) in FLAGS.iter().enumerate() {
            let mut attributes = texts(&[
                ("standard_name", flag.standard_name),
                ("long_name", flag.long_name),
                ("flag_meanings", flag.meanings),
            ]);
            attributes.push(("flag_values", NcAttrValue::Bytes(flag.values.to_vec())));
            attributes.extend(texts(&ON_FACES));
            let values = self.of_faces(flag.absent, |block| {
                block.flags.get_mut(k).map(std::mem::take)
            });
            file.put_series(flag.name, on, faces, None, attributes, &values)?;
        }
        let mut attributes = texts(&[(
            "long_name",
            "station behind the reason: its number among the nodes, from 0",
        )]);
        attributes.extend(texts(&ON_FACES));
        let values = self.of_faces(-1, |block| Some(std::mem::take(&mut block.reason_node)));
        file.put_series("reason_node", on, faces, Some(-1_i32), attributes, &values)
    }

    fn put_winds(
        &mut self,
        file: &mut NetcdfFile,
        time: DimensionId,
        places: &Places,
        stations: usize,
    ) -> netcdf_writer::Result<()> {
        let on = [time, places.node];
        for (k, (name, standard_name, long_name)) in WINDS.into_iter().enumerate() {
            let is_error = name.ends_with("_se");
            let ancillary = format!("{name}_se station_flag");
            let mut attributes = texts(&[
                ("standard_name", standard_name),
                ("long_name", long_name),
                ("units", "m s-1"),
                (
                    "ancillary_variables",
                    if is_error { "" } else { &ancillary },
                ),
            ]);
            attributes.extend(texts(&ON_NODES));
            let values = self.of_nodes(|block| block.winds.get_mut(k).map(std::mem::take));
            let fill = Some(f32::NAN);
            file.put_series(name, on, stations, fill, attributes, &values)?;
        }
        let mut attributes = vec![
            ("standard_name", text("aggregate_quality_flag")),
            (
                "long_name",
                text("quality of the wind of the station, IOOS QARTOD"),
            ),
            ("flag_values", NcAttrValue::Bytes(FLAG_VALUES.to_vec())),
            ("flag_meanings", text(FLAG_MEANINGS)),
        ];
        attributes.extend(texts(&ON_NODES));
        let values = self.of_nodes(|block| Some(std::mem::take(&mut block.wind_flag)));
        file.put_series("station_flag", on, stations, None, attributes, &values)
    }
}
