//! Pictures of the results.

use std::io;
use std::path::Path;

use clap::{Args, ValueEnum};

use crate::error::{Error, nearest_name};
use crate::output::plot::{Quantity, map_picture, png, series_picture, structure_picture};
use crate::output::{Frames, OutputSet};
use crate::pipeline::{Outcome, Setup};
use crate::time::Time;

/// Pictures.
#[derive(Debug, Args)]
pub(super) struct PictureArgs {
    /// Draw pictures too, in one format or both: png, svg
    #[arg(long, value_name = "FORMAT", value_delimiter = ',')]
    pub plot: Vec<PictureFormat>,
}

/// A format of pictures.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(super) enum PictureFormat {
    /// Pixels, sharp in print
    Png,
    /// Shapes and text
    Svg,
}

impl PictureArgs {
    /// Writes a picture in the formats asked for.
    pub fn put(&self, set: &mut OutputSet, name: &str, svg: &str) -> Result<(), Error> {
        if self.plot.contains(&PictureFormat::Svg) {
            set.put(&format!("{name}.svg"), svg.as_bytes())?;
        }
        if self.plot.contains(&PictureFormat::Png) {
            let name = format!("{name}.png");
            let bytes =
                png(svg).map_err(|e| Error::write(Path::new(&name), io::Error::other(e)))?;
            set.put(&name, &bytes)?;
        }
        Ok(())
    }

    /// The option, for those that it does not go with.
    pub fn asked(&self) -> (&'static str, bool) {
        ("--plot", self.any())
    }

    /// Whether there is one to draw.
    pub fn any(&self) -> bool {
        !self.plot.is_empty()
    }
}

/// The number of the polygon of a name.
pub(super) fn polygon(setup: &Setup, name: &str) -> Result<usize, Error> {
    let names = || setup.built.polygons.iter().map(|p| p.id.as_str());
    names().position(|id| id == name).ok_or_else(|| {
        let near = nearest_name(name, names());
        let meant = near.map_or_else(String::new, |near| format!("; is `{near}` meant?"));
        Error::Network(format!(
            "there is no polygon `{name}` within the limits{meant}"
        ))
    })
}

/// The pictures of `estimate`: maps at the times asked for, else at that of the strongest value; the series of a
/// polygon, if none is asked for that of the strongest convergence; the last structure function.
pub(super) fn put_pictures(
    set: &mut OutputSet,
    pictures: &PictureArgs,
    (setup, outcome): (&Setup, &Outcome),
    frames: &Frames,
    polygon: Option<usize>,
) -> Result<(), Error> {
    for quantity in Quantity::ALL {
        let name = quantity.name();
        let strongest = frames.strongest[quantity.index()].as_ref();
        if let (true, Some(frame)) = (frames.at.is_empty(), strongest) {
            let picture = map_picture(setup, frame, quantity);
            pictures.put(set, &format!("map_{name}"), &picture)?;
        }
        for (k, frame) in frames.at.iter().enumerate() {
            // Two times asked for may have the same nearest one.
            if frames.at[..k]
                .iter()
                .all(|before| before.time != frame.time)
            {
                let picture = map_picture(setup, frame, quantity);
                pictures.put(
                    set,
                    &format!("map_{name}_{}", in_name(frame.time)),
                    &picture,
                )?;
            }
        }
    }
    let strongest = || outcome.extremes.convergence.map(|peak| peak.polygon);
    if let Some(polygon) = polygon.or_else(strongest)
        && let Some(picture) = series_picture(setup, frames, polygon)
    {
        pictures.put(set, "series", &picture)?;
    }
    if let Some(report) = outcome.structure.last()
        && let Some(picture) = structure_picture(setup, report)
    {
        pictures.put(set, "structure", &picture)?;
    }
    Ok(())
}

/// A time as part of a file's name: the basic form of ISO 8601, 20310614T144500Z.
fn in_name(time: Time) -> String {
    time.to_string().replace(['-', ':'], "")
}
