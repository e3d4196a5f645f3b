//! The series of all polygons, in the formats asked for.

use std::path::Path;

use super::csv::PolygonRows;
use super::file::OutputSet;
use super::fits::FitRows;
#[cfg(feature = "parquet")]
use super::parquet::{ParquetFile, ParquetRows, RowGroup, parquet_series};
use crate::error::Error;
use crate::integral::EstimateBlock;
use crate::pipeline::Setup;

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
    #[cfg(feature = "parquet")]
    parquet: Option<ParquetRows>,
}

/// The files that the bytes go to, in the order of time.
pub struct SeriesFiles {
    csv: Option<usize>,
    fits: Option<usize>,
    #[cfg(feature = "parquet")]
    parquet: Option<(usize, ParquetFile)>,
}

/// An encoded block.
pub struct EncodedBlock {
    csv: Option<Vec<u8>>,
    fits: Option<Vec<u8>>,
    #[cfg(feature = "parquet")]
    parquet: Option<parquet::errors::Result<RowGroup>>,
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
    let encoder = SeriesEncoder {
        csv: formats.csv.then(|| PolygonRows::new(setup)),
        fits: with_fits.then(|| FitRows::new(setup)),
        #[cfg(feature = "parquet")]
        parquet: parquet_rows,
    };
    let files = SeriesFiles {
        csv: csv_file,
        fits: fits_file,
        #[cfg(feature = "parquet")]
        parquet: parquet_file,
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
    pub fn encode(&self, block: &EstimateBlock) -> EncodedBlock {
        EncodedBlock {
            csv: self.csv.as_ref().map(|rows| rows.encode(block)),
            fits: self.fits.as_ref().map(|rows| rows.encode(block)),
            #[cfg(feature = "parquet")]
            parquet: self.parquet.as_ref().map(|rows| rows.encode(block)),
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
        #[cfg(feature = "parquet")]
        if let (Some((file, parquet)), Some(group)) = (&mut self.parquet, block.parquet) {
            let bytes = group
                .and_then(|group| parquet.append(group))
                .map_err(|e| parquet_error(&e))?;
            set.write(*file, &bytes)?;
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
        if let Some((file, parquet)) = self.parquet {
            let bytes = parquet.finish().map_err(|e| parquet_error(&e))?;
            set.write(file, &bytes)?;
        }
        Ok(())
    }
}
