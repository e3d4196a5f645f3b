//! The text of `gyremesh polygons`, in 80 columns.

use std::fmt::Write as _;

use super::{WIDTH, cell, cut, heading};
use crate::pipeline::Setup;
use crate::polygon::{Exclusion, StationPolygon};

/// The table of `polygons`.
pub(crate) fn polygon_table(setup: &Setup) -> String {
    let mut out = String::new();
    let built = &setup.built;
    // Writing to a string cannot fail.
    let _ = writeln!(out, "{}", heading(&cut(&setup.settings.name, WIDTH)));
    let _ = writeln!(
        out,
        "{} stations, {} polygons within the limits, {} left out",
        setup.network.len(),
        built.polygons.len(),
        built.excluded.len()
    );
    let _ = writeln!(
        out,
        "noise: error of vorticity or divergence, 1e-5 /s, for 1 m/s in each component\n"
    );
    let columns = format!(
        "{:<24} {:>9} {:>8} {:>6} {:>7} {:>6}  left out",
        "polygon", "area km2", "edge km", "angle", "quality", "noise"
    );
    let _ = writeln!(out, "{}", heading(&columns));
    let used = built.polygons.iter().map(|p| (p, None));
    let excluded = built.excluded.iter().map(|(p, why)| (p, Some(why)));
    for (polygon, why) in used.chain(excluded) {
        out.push_str(&polygon_line(polygon, why));
    }
    if built.flat > 0 {
        let _ = writeln!(
            out,
            "\n{} triangles of stations on one line dropped",
            built.flat
        );
    }
    out
}

fn polygon_line(polygon: &StationPolygon, why: Option<&Exclusion>) -> String {
    let shape = &polygon.shape;
    let line = format!(
        "{} {:>9.1} {:>8.1} {:>6.1} {:>7.2} {:>6.1}  {}",
        cell(&polygon.id, 24),
        shape.area / 1e6,
        shape.longest_edge / 1e3,
        shape.smallest_angle,
        shape.quality,
        shape.noise_factor * 1e5,
        why.map_or_else(String::new, short_reason)
    );
    cut(line.trim_end(), WIDTH) + "\n"
}

fn short_reason(why: &Exclusion) -> String {
    match why {
        Exclusion::SmallAngle(..) => "angle",
        Exclusion::LongEdge(..) => "edge",
        Exclusion::SmallArea(..) => "too small",
        Exclusion::LargeArea(..) => "too large",
        Exclusion::ElevationSpread(..) => "heights",
        Exclusion::Slope(..) => "slope",
    }
    .into()
}
