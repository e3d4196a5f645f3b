//! The series of all polygons, in the formats asked for.
//!
//! Each file has an [`Encoder`], which all threads share and which turns a block into a [`Piece`], and a [`Writer`], which
//! takes the pieces in the order of time and gives the bytes that are ready.

use std::path::Path;

#[cfg(feature = "parquet")]
use arrow_array::RecordBatch;

#[cfg(feature = "parquet")]
use super::arrow::{ArrowFile, ArrowRows, kinematics_arrow, kinematics_batch};
use super::csv::PolygonRows;
use super::decompose::DecomposeRows;
use super::features::{BETWEEN, COLLECTION, PolygonFeatures};
use super::file::OutputSet;
use super::fits::FitRows;
use super::kinematics::KinematicsRows;
#[cfg(feature = "parquet")]
use super::kinematics::{KinematicsColumns, KinematicsParquet, kinematics_parquet};
use super::netcdf::{FaceBlock, FaceFile, FaceRows};
#[cfg(feature = "parquet")]
use super::parquet::{ParquetFile, ParquetRows, RowGroup, parquet_series};
use super::scalars::ScalarRows;
use super::vertical_motion::VerticalMotionRows;
use crate::error::Error;
use crate::integral::ExtraPolygon;
use crate::pipeline::{BlockView, Setup};
use crate::time::Time;

/// A format of the series.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum SeriesFormat {
    /// `polygons.csv`: text.
    Csv,
    /// `polygons.parquet`: the same columns, typed.
    Parquet,
    /// `polygons.arrow`: the same columns as an Arrow IPC file.
    Arrow,
    /// `polygons.nc`: NetCDF-4 after CF and UGRID.
    Netcdf,
    /// `polygons.geojson`: the polygons with their values at some times.
    Geojson,
}

/// What is wanted of the series.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct SeriesChoice {
    /// The formats.
    pub formats: Vec<SeriesFormat>,
    /// Times of `polygons.geojson`; the last analysis time if there is none.
    pub at: Vec<Time>,
}

/// How a file's blocks are encoded.
enum Encoder {
    Csv(PolygonRows),
    Fits(FitRows),
    KinematicsCsv(KinematicsRows),
    Scalars(ScalarRows),
    VerticalMotion(VerticalMotionRows),
    Energies,
    Potentials(DecomposeRows),
    #[cfg(feature = "parquet")]
    Parquet(Box<ParquetRows>),
    #[cfg(feature = "parquet")]
    KinematicsParquet(KinematicsParquet),
    #[cfg(feature = "parquet")]
    Arrow(Box<ArrowRows>),
    #[cfg(feature = "parquet")]
    KinematicsArrow(KinematicsColumns),
    Netcdf(FaceRows),
    Geojson(PolygonFeatures),
}

/// An encoded block of one file.
enum Piece {
    Nothing,
    Bytes(Vec<u8>),
    #[cfg(feature = "parquet")]
    RowGroup(RowGroup),
    #[cfg(feature = "parquet")]
    Batch(RecordBatch),
    Faces(Box<FaceBlock>),
    /// Features, and their times.
    Features(Vec<u8>, Vec<Time>),
}

/// How the pieces of a file become its bytes.
enum Writer {
    Text,
    #[cfg(feature = "parquet")]
    Parquet(Box<ParquetFile>),
    #[cfg(feature = "parquet")]
    Arrow(Box<ArrowFile>),
    Netcdf(FaceFile),
    Geojson(Collection),
}

/// The features so far.
struct Collection {
    /// Times asked for that have not come; `None` if the last is wanted.
    wanted: Option<Vec<Time>>,
    features: Vec<u8>,
}

/// Turns blocks of estimates into pieces of all files; shared by all threads.
pub struct SeriesEncoder(Vec<Encoder>);

/// The files that the pieces go to, in the order of time.
pub struct SeriesFiles(Vec<File>);

struct File {
    name: &'static str,
    number: usize,
    writer: Writer,
}

/// A block, encoded for every file.
///
/// Where a library refused, its words stand in place of the piece.
pub struct EncodedBlock(Vec<Result<Piece, String>>);

/// Starts the files of the series.
///
/// # Errors
/// A file cannot be made; Parquet or Arrow is asked for and the program was built without them.
pub fn series(
    setup: &Setup,
    choice: &SeriesChoice,
    set: &mut OutputSet,
) -> Result<(SeriesEncoder, SeriesFiles), Error> {
    let mut start = Start {
        set,
        encoders: Vec::new(),
        files: Vec::new(),
    };
    let kinematics = setup.settings.kinematics.write;
    let wants = |format| choice.formats.contains(&format);
    if wants(SeriesFormat::Csv) {
        let rows = Encoder::Csv(PolygonRows::new(setup));
        start.text("polygons.csv", PolygonRows::header(), rows)?;
    }
    // Where there are polygons with more than three stations, and a series at all.
    if setup.settings.errors.complete
        && !choice.formats.is_empty()
        && setup.built.polygons.iter().any(|p| p.size() > 3)
    {
        let rows = Encoder::Fits(FitRows::new(setup));
        start.text("fits.csv", FitRows::header(), rows)?;
    }
    if wants(SeriesFormat::Csv) && kinematics {
        let rows = Encoder::KinematicsCsv(KinematicsRows::new(setup));
        start.text("kinematics.csv", &KinematicsRows::header(), rows)?;
    }
    if !choice.formats.is_empty() {
        start.more_text(setup)?;
    }
    for format in [SeriesFormat::Parquet, SeriesFormat::Arrow] {
        if wants(format) {
            start.tables(setup, format, kinematics)?;
        }
    }
    if wants(SeriesFormat::Netcdf) {
        let rows = Encoder::Netcdf(FaceRows::new(setup));
        start.file("polygons.nc", rows, Writer::Netcdf(FaceFile::default()))?;
    }
    if wants(SeriesFormat::Geojson) {
        let features = Encoder::Geojson(PolygonFeatures::new(setup, &choice.at));
        let collection = Collection {
            wanted: Some(choice.at.clone()).filter(|at| !at.is_empty()),
            features: Vec::new(),
        };
        start.file("polygons.geojson", features, Writer::Geojson(collection))?;
    }
    Ok((SeriesEncoder(start.encoders), SeriesFiles(start.files)))
}

/// The files as they are started.
struct Start<'a> {
    set: &'a mut OutputSet,
    encoders: Vec<Encoder>,
    files: Vec<File>,
}

impl Start<'_> {
    fn file(&mut self, name: &'static str, encoder: Encoder, writer: Writer) -> Result<(), Error> {
        let number = self.set.create(name)?;
        self.encoders.push(encoder);
        self.files.push(File {
            name,
            number,
            writer,
        });
        Ok(())
    }

    fn text(&mut self, name: &'static str, header: &str, encoder: Encoder) -> Result<(), Error> {
        self.file(name, encoder, Writer::Text)?;
        self.files.last().map_or(Ok(()), |file| {
            self.set.write(file.number, header.as_bytes())
        })
    }

    /// What is written as text alone, where it is asked for.
    fn more_text(&mut self, setup: &Setup) -> Result<(), Error> {
        let settings = &setup.settings;
        if settings.kinematics.write && !settings.scalars.is_empty() {
            let rows = Encoder::Scalars(ScalarRows::new(setup));
            self.text("scalars.csv", &ScalarRows::header(), rows)?;
        }
        if let Some(height) = settings.w_at {
            let rows = Encoder::VerticalMotion(VerticalMotionRows::new(setup, height));
            self.text("vertical_motion.csv", VerticalMotionRows::header(), rows)?;
        }
        if settings.decompose {
            let header = DecomposeRows::energy_header();
            self.text("decompose.csv", &header, Encoder::Energies)?;
            let rows = Encoder::Potentials(DecomposeRows::new(setup));
            let header = DecomposeRows::station_header();
            self.text("decompose_stations.csv", &header, rows)?;
        }
        Ok(())
    }

    #[cfg(feature = "parquet")]
    fn tables(
        &mut self,
        setup: &Setup,
        format: SeriesFormat,
        kinematics: bool,
    ) -> Result<(), Error> {
        if format == SeriesFormat::Parquet {
            let name = "polygons.parquet";
            let (rows, file) = parquet_series(setup).map_err(|e| refused(name, &e))?;
            let (rows, file) = (Encoder::Parquet(Box::new(rows)), Box::new(file));
            self.file(name, rows, Writer::Parquet(file))?;
            if kinematics {
                let name = "kinematics.parquet";
                let (rows, file) = kinematics_parquet(setup).map_err(|e| refused(name, &e))?;
                let rows = Encoder::KinematicsParquet(rows);
                self.file(name, rows, Writer::Parquet(Box::new(file)))?;
            }
        } else {
            let name = "polygons.arrow";
            let (rows, file) = ArrowRows::start(setup).map_err(|e| refused(name, &e))?;
            let (rows, file) = (Encoder::Arrow(Box::new(rows)), Box::new(file));
            self.file(name, rows, Writer::Arrow(file))?;
            if kinematics {
                let name = "kinematics.arrow";
                let (columns, file) = kinematics_arrow(setup).map_err(|e| refused(name, &e))?;
                let columns = Encoder::KinematicsArrow(columns);
                self.file(name, columns, Writer::Arrow(Box::new(file)))?;
            }
        }
        Ok(())
    }

    #[cfg(not(feature = "parquet"))]
    fn tables(&mut self, _: &Setup, format: SeriesFormat, _: bool) -> Result<(), Error> {
        let name = match format {
            SeriesFormat::Parquet => "polygons.parquet",
            _ => "polygons.arrow",
        };
        let reason = "this program was built without the feature `parquet`";
        Err(refused(name, &reason))
    }
}

/// What a library said of a file.
fn refused(name: &str, error: &dyn std::fmt::Display) -> Error {
    Error::write(Path::new(name), std::io::Error::other(error.to_string()))
}

impl SeriesEncoder {
    /// Encodes a block for every file.
    #[must_use]
    pub fn encode(&self, seen: &BlockView) -> EncodedBlock {
        let pieces = self.0.iter().map(|encoder| encoder.encode(seen));
        EncodedBlock(pieces.collect())
    }
}

impl Encoder {
    fn encode(&self, seen: &BlockView) -> Result<Piece, String> {
        let block = seen.estimates;
        match (self, seen.kinematics) {
            (Self::Csv(rows), _) => Ok(Piece::Bytes(rows.encode(block))),
            (Self::Fits(rows), _) => Ok(Piece::Bytes(rows.encode(block))),
            (Self::KinematicsCsv(rows), Some(block)) => Ok(Piece::Bytes(rows.encode(block))),
            (Self::Scalars(rows), _) => Ok(seen
                .scalars
                .map_or(Piece::Nothing, |block| Piece::Bytes(rows.encode(block)))),
            (Self::VerticalMotion(rows), _) => Ok(Piece::Bytes(rows.encode(block))),
            (Self::Energies, _) => Ok(seen.decomposition.map_or(Piece::Nothing, |block| {
                Piece::Bytes(DecomposeRows::energies(block))
            })),
            (Self::Potentials(rows), _) => Ok(seen
                .decomposition
                .map_or(Piece::Nothing, |block| Piece::Bytes(rows.stations(block)))),
            #[cfg(feature = "parquet")]
            (Self::Parquet(rows), _) => words(rows.encode(block)).map(Piece::RowGroup),
            #[cfg(feature = "parquet")]
            (Self::KinematicsParquet(rows), Some(block)) => {
                words(rows.encode(block)).map(Piece::RowGroup)
            }
            #[cfg(feature = "parquet")]
            (Self::Arrow(rows), _) => words(rows.encode(block)).map(Piece::Batch),
            #[cfg(feature = "parquet")]
            (Self::KinematicsArrow(columns), Some(block)) => {
                words(kinematics_batch(columns, block)).map(Piece::Batch)
            }
            (Self::Netcdf(rows), _) => Ok(Piece::Faces(Box::new(rows.encode(seen)))),
            (Self::Geojson(features), _) => {
                let (features, times) = features.encode(seen);
                Ok(Piece::Features(features, times))
            }
            // Kinematics that are not there.
            _ => Ok(Piece::Nothing),
        }
    }
}

/// What a library said, in words.
fn words<T, E: std::fmt::Display>(result: Result<T, E>) -> Result<T, String> {
    result.map_err(|error| error.to_string())
}

impl SeriesFiles {
    /// Appends an encoded block.
    ///
    /// # Errors
    /// The system's refusal, a full disk for one.
    pub fn write(&mut self, set: &mut OutputSet, block: EncodedBlock) -> Result<(), Error> {
        for (file, piece) in self.0.iter_mut().zip(block.0) {
            let bytes = piece.and_then(|piece| file.writer.add(piece));
            let bytes = bytes.map_err(|e| refused(file.name, &e))?;
            set.write(file.number, &bytes)?;
        }
        Ok(())
    }

    /// Completes the files, and writes `mesh.parquet` beside Parquet; returns the times asked for that are no analysis times.
    /// `extra` are the polygons of the run that stand only where stations are missing.
    ///
    /// # Errors
    /// The system's refusal.
    pub fn finish(
        self,
        setup: &Setup,
        extra: &[ExtraPolygon],
        set: &mut OutputSet,
    ) -> Result<Vec<Time>, Error> {
        let mut unmet = Vec::new();
        #[cfg(feature = "parquet")]
        if self.0.iter().any(|file| file.name == "polygons.parquet") {
            let name = "mesh.parquet";
            let mesh = super::geoparquet::mesh_parquet(setup, extra);
            set.put(name, &mesh.map_err(|e| refused(name, &e))?)?;
        }
        for file in self.0 {
            if let Writer::Geojson(collection) = &file.writer {
                unmet.extend(collection.wanted.iter().flatten());
            }
            let bytes = file.writer.finish(setup, extra);
            let bytes = bytes.map_err(|e| refused(file.name, &e))?;
            set.write(file.number, &bytes)?;
        }
        Ok(unmet)
    }
}

impl Writer {
    /// Takes the next piece; gives the bytes that are ready.
    fn add(&mut self, piece: Piece) -> Result<Vec<u8>, String> {
        match (self, piece) {
            (Self::Text, Piece::Bytes(bytes)) => return Ok(bytes),
            #[cfg(feature = "parquet")]
            (Self::Parquet(file), Piece::RowGroup(group)) => return words(file.append(group)),
            #[cfg(feature = "parquet")]
            (Self::Arrow(file), Piece::Batch(batch)) => return words(file.append(&batch)),
            (Self::Netcdf(file), Piece::Faces(block)) => file.append(*block),
            (Self::Geojson(collection), Piece::Features(features, times)) => {
                collection.add(features, &times);
            }
            // A file takes the pieces of its own encoder.
            _ => {}
        }
        Ok(Vec::new())
    }

    /// The last bytes.
    fn finish(self, setup: &Setup, extra: &[ExtraPolygon]) -> Result<Vec<u8>, String> {
        match self {
            Self::Text => Ok(Vec::new()),
            #[cfg(feature = "parquet")]
            Self::Parquet(file) => words(file.finish()),
            #[cfg(feature = "parquet")]
            Self::Arrow(file) => words(file.finish()),
            Self::Netcdf(file) => words(file.finish(setup, extra)),
            Self::Geojson(collection) => Ok(collection.finish()),
        }
    }
}

impl Collection {
    fn add(&mut self, features: Vec<u8>, times: &[Time]) {
        if features.is_empty() {
            return;
        }
        let Some(wanted) = &mut self.wanted else {
            self.features = features;
            return;
        };
        wanted.retain(|time| !times.contains(time));
        if !self.features.is_empty() {
            self.features.extend_from_slice(BETWEEN.as_bytes());
        }
        self.features.extend(features);
    }

    fn finish(self) -> Vec<u8> {
        let [before, after] = COLLECTION.map(str::as_bytes);
        [before, &self.features, after].concat()
    }
}
