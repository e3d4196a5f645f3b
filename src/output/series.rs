//! The series of all polygons, in the formats asked for.

use std::path::Path;

use super::csv::PolygonRows;
use super::decompose::{DecomposeBytes, DecomposeRows};
use super::file::OutputSet;
use super::fits::FitRows;
use super::kinematics::KinematicsRows;
#[cfg(feature = "parquet")]
use super::kinematics::{KinematicsParquet, kinematics_parquet};
#[cfg(feature = "parquet")]
use super::parquet::{ParquetFile, ParquetRows, RowGroup, parquet_series};
use super::scalars::ScalarRows;
use super::vertical_motion::VerticalMotionRows;
use crate::error::Error;
use crate::pipeline::{BlockView, Setup};

/// Formats of the series, and of the flagged reports.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Formats {
    /// CSV: `polygons.csv`, `reports_flagged.csv`.
    pub csv: bool,
    /// Parquet: `polygons.parquet`, `reports_flagged.parquet`.
    pub parquet: bool,
}

/// Turns blocks of estimates into bytes; shared by all threads.
pub struct SeriesEncoder {
    csv: Option<PolygonRows>,
    fits: Option<FitRows>,
    kinematics: Option<KinematicsRows>,
    decompose: Option<DecomposeRows>,
    scalars: Option<ScalarRows>,
    vertical_motion: Option<VerticalMotionRows>,
    #[cfg(feature = "parquet")]
    parquet: Option<ParquetRows>,
    #[cfg(feature = "parquet")]
    kinematics_parquet: Option<KinematicsParquet>,
}

/// The files that the bytes go to, in the order of time.
pub struct SeriesFiles {
    csv: Option<usize>,
    fits: Option<usize>,
    kinematics: Option<usize>,
    /// `decompose.csv` and `decompose_stations.csv`.
    decompose: Option<[usize; 2]>,
    scalars: Option<usize>,
    vertical_motion: Option<usize>,
    #[cfg(feature = "parquet")]
    parquet: Option<(usize, ParquetFile)>,
    #[cfg(feature = "parquet")]
    kinematics_parquet: Option<(usize, ParquetFile)>,
}

/// An encoded block.
pub struct EncodedBlock {
    csv: Option<Vec<u8>>,
    fits: Option<Vec<u8>>,
    kinematics: Option<Vec<u8>>,
    decompose: Option<DecomposeBytes>,
    scalars: Option<Vec<u8>>,
    vertical_motion: Option<Vec<u8>>,
    #[cfg(feature = "parquet")]
    parquet: Option<parquet::errors::Result<RowGroup>>,
    #[cfg(feature = "parquet")]
    kinematics_parquet: Option<parquet::errors::Result<RowGroup>>,
}

/// Starts the files of the series.
///
/// # Errors
/// A file cannot be made; Parquet is asked for and the program was built without it.
pub fn series(
    setup: &Setup,
    formats: Formats,
    set: &mut OutputSet,
) -> Result<(SeriesEncoder, SeriesFiles), Error> {
    let csv_file = if formats.csv {
        let file = set.create("polygons.csv")?;
        set.write(file, PolygonRows::header().as_bytes())?;
        Some(file)
    } else {
        None
    };
    // Where there are polygons with more than three stations, and a series at all.
    let with_fits = setup.settings.errors.complete
        && (formats.csv || formats.parquet)
        && setup.built.polygons.iter().any(|p| p.size() > 3);
    let fits_file = if with_fits {
        let file = set.create("fits.csv")?;
        set.write(file, FitRows::header().as_bytes())?;
        Some(file)
    } else {
        None
    };
    let with_kinematics = setup.settings.kinematics.write;
    let kinematics_file = if with_kinematics && formats.csv {
        let file = set.create("kinematics.csv")?;
        set.write(file, KinematicsRows::header().as_bytes())?;
        Some(file)
    } else {
        None
    };
    let with_scalars = with_kinematics && !setup.settings.scalars.is_empty();
    let scalars_file = if with_scalars && (formats.csv || formats.parquet) {
        let file = set.create("scalars.csv")?;
        set.write(file, ScalarRows::header().as_bytes())?;
        Some(file)
    } else {
        None
    };
    let w_at = (setup.settings.w_at).filter(|_| formats.csv || formats.parquet);
    let vertical_file = if w_at.is_some() {
        let file = set.create("vertical_motion.csv")?;
        set.write(file, VerticalMotionRows::header().as_bytes())?;
        Some(file)
    } else {
        None
    };
    let decompose_files = if setup.settings.decompose && (formats.csv || formats.parquet) {
        let energies = set.create("decompose.csv")?;
        set.write(energies, DecomposeRows::energy_header().as_bytes())?;
        let stations = set.create("decompose_stations.csv")?;
        set.write(stations, DecomposeRows::station_header().as_bytes())?;
        Some([energies, stations])
    } else {
        None
    };
    #[cfg(not(feature = "parquet"))]
    if formats.parquet {
        let reason = std::io::Error::other("this program was built without the feature `parquet`");
        return Err(Error::write(Path::new("polygons.parquet"), reason));
    }
    #[cfg(feature = "parquet")]
    let (parquet_rows, parquet_file) = if formats.parquet {
        let file = set.create("polygons.parquet")?;
        let (rows, parquet) = parquet_series(setup).map_err(|e| parquet_error(&e))?;
        (Some(rows), Some((file, parquet)))
    } else {
        (None, None)
    };
    #[cfg(feature = "parquet")]
    let (kinematics_rows, kinematics_table) = if formats.parquet && with_kinematics {
        let file = set.create("kinematics.parquet")?;
        let (rows, parquet) = kinematics_parquet(setup).map_err(|e| parquet_error(&e))?;
        (Some(rows), Some((file, parquet)))
    } else {
        (None, None)
    };
    let encoder = SeriesEncoder {
        csv: formats.csv.then(|| PolygonRows::new(setup)),
        fits: with_fits.then(|| FitRows::new(setup)),
        kinematics: kinematics_file.map(|_| KinematicsRows::new(setup)),
        decompose: decompose_files.map(|_| DecomposeRows::new(setup)),
        scalars: scalars_file.map(|_| ScalarRows::new(setup)),
        vertical_motion: w_at.map(|height| VerticalMotionRows::new(setup, height)),
        #[cfg(feature = "parquet")]
        parquet: parquet_rows,
        #[cfg(feature = "parquet")]
        kinematics_parquet: kinematics_rows,
    };
    let files = SeriesFiles {
        csv: csv_file,
        fits: fits_file,
        kinematics: kinematics_file,
        decompose: decompose_files,
        scalars: scalars_file,
        vertical_motion: vertical_file,
        #[cfg(feature = "parquet")]
        parquet: parquet_file,
        #[cfg(feature = "parquet")]
        kinematics_parquet: kinematics_table,
    };
    Ok((encoder, files))
}

#[cfg(feature = "parquet")]
fn parquet_error(error: &parquet::errors::ParquetError) -> Error {
    Error::write(
        Path::new("polygons.parquet"),
        std::io::Error::other(error.to_string()),
    )
}

impl SeriesEncoder {
    /// Encodes a block in all formats.
    #[must_use]
    pub fn encode(&self, seen: &BlockView) -> EncodedBlock {
        let (block, kinematics) = (seen.estimates, seen.kinematics);
        EncodedBlock {
            csv: self.csv.as_ref().map(|rows| rows.encode(block)),
            fits: self.fits.as_ref().map(|rows| rows.encode(block)),
            kinematics: self
                .kinematics
                .as_ref()
                .zip(kinematics)
                .map(|(rows, block)| rows.encode(block)),
            decompose: self
                .decompose
                .as_ref()
                .zip(seen.decomposition)
                .map(|(rows, block)| rows.encode(block)),
            scalars: self
                .scalars
                .as_ref()
                .zip(seen.scalars)
                .map(|(rows, block)| rows.encode(block)),
            vertical_motion: self.vertical_motion.as_ref().map(|rows| rows.encode(block)),
            #[cfg(feature = "parquet")]
            parquet: self.parquet.as_ref().map(|rows| rows.encode(block)),
            #[cfg(feature = "parquet")]
            kinematics_parquet: self
                .kinematics_parquet
                .as_ref()
                .zip(kinematics)
                .map(|(rows, block)| rows.encode(block)),
        }
    }
}

impl SeriesFiles {
    /// Appends an encoded block.
    ///
    /// # Errors
    /// The system's refusal, a full disk for one.
    pub fn write(&mut self, set: &mut OutputSet, block: EncodedBlock) -> Result<(), Error> {
        if let (Some(file), Some(bytes)) = (self.csv, &block.csv) {
            set.write(file, bytes)?;
        }
        if let (Some(file), Some(bytes)) = (self.fits, &block.fits) {
            set.write(file, bytes)?;
        }
        if let (Some(file), Some(bytes)) = (self.kinematics, &block.kinematics) {
            set.write(file, bytes)?;
        }
        if let (Some(file), Some(bytes)) = (self.scalars, &block.scalars) {
            set.write(file, bytes)?;
        }
        if let (Some(file), Some(bytes)) = (self.vertical_motion, &block.vertical_motion) {
            set.write(file, bytes)?;
        }
        if let (Some([energies, stations]), Some(bytes)) = (self.decompose, &block.decompose) {
            set.write(energies, &bytes.energies)?;
            set.write(stations, &bytes.stations)?;
        }
        #[cfg(feature = "parquet")]
        for (table, group) in [
            (&mut self.parquet, block.parquet),
            (&mut self.kinematics_parquet, block.kinematics_parquet),
        ] {
            if let (Some((file, parquet)), Some(group)) = (table, group) {
                let bytes = group
                    .and_then(|group| parquet.append(group))
                    .map_err(|e| parquet_error(&e))?;
                set.write(*file, &bytes)?;
            }
        }
        Ok(())
    }

    /// Completes the files.
    ///
    /// # Errors
    /// The system's refusal.
    #[cfg_attr(
        not(feature = "parquet"),
        expect(unused_variables, reason = "only Parquet has an end")
    )]
    pub fn finish(self, set: &mut OutputSet) -> Result<(), Error> {
        #[cfg(feature = "parquet")]
        for (file, parquet) in self.parquet.into_iter().chain(self.kinematics_parquet) {
            let bytes = parquet.finish().map_err(|e| parquet_error(&e))?;
            set.write(file, &bytes)?;
        }
        Ok(())
    }
}
