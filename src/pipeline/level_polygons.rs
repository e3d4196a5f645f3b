//! Polygons between platforms level by level, and the vertical motion of each.

use super::Setup;
use super::profile::{LevelEstimate, PolygonProfile, places};
use crate::align::WindBlock;
use crate::check::Flag;
use crate::error::Error;
use crate::integral::{Sampling, complete_errors, estimate, slopes_of_plane};
use crate::polygon::{BuiltPolygons, StationPolygon, build_polygons, build_triangles, triangulate};
use crate::profile::{
    Ascent, Column, Coordinate, GRAVITY, Level, LevelWind, Measured, Motion, NoWind, air_at_height,
    air_at_pressure, motion_along_slope, motion_at_height,
};
use crate::settings::{Boundary, PolygonChoice, RingSettings};
use crate::station::{Network, Position};
use crate::structure::{LocalPlane, StructureFunction};
use crate::warning::Warning;

/// The polygons of one nominal time: the same at all levels.
pub(super) struct Shapes<'a> {
    /// Stations and name of each triangle.
    triangles: Vec<([usize; 3], String)>,
    rings: &'a [RingSettings],
}

impl<'a> Shapes<'a> {
    /// Triangles of the platforms that report on any level, from the places in the station list, and the rings.
    pub(super) fn new(setup: &'a Setup, reporting: &[bool]) -> Result<Self, Error> {
        let network = &setup.network;
        let choice = &setup.settings.polygons;
        let doubles = network.coincident();
        let is_double = |id: &str| {
            let of =
                |w: &Warning| matches!(w, Warning::OnePlace { left_out, .. } if left_out == id);
            doubles.iter().any(of)
        };
        let stations: Vec<usize> = (0..network.len())
            .filter(|&s| reporting.get(s) == Some(&true))
            .filter(|&s| !is_double(&network.stations()[s].id))
            .collect();
        let mut triangles = Vec::new();
        if choice.triangles && stations.len() >= 3 {
            let positions: Vec<Position> = network.stations().iter().map(|s| s.position).collect();
            let found = triangulate(&positions, &stations)?;
            // Limits hold at each level, but a triangle that is outside of them on the ground is none.
            let built = build_triangles(network, &found, &setup.settings.limits);
            for polygon in built.polygons {
                if let Some(&[a, b, c]) = polygon.outline.first().map(Vec::as_slice) {
                    triangles.push(([a, b, c], polygon.id));
                }
            }
        }
        Ok(Self {
            triangles,
            rings: &choice.rings,
        })
    }

    pub(super) fn names(&self) -> impl Iterator<Item = &str> {
        let triangles = self.triangles.iter().map(|t| t.1.as_str());
        triangles.chain(self.rings.iter().map(|ring| ring.name.as_str()))
    }

    /// The estimates of all polygons at a level, in the order of their names.
    pub(super) fn at(
        &self,
        setup: &Setup,
        level: Level,
        winds: &[Result<LevelWind, NoWind>],
        block: &WindBlock,
        model: Option<&StructureFunction>,
    ) -> Vec<LevelEstimate> {
        let there = Network::new(
            setup
                .network
                .stations()
                .iter()
                .zip(places(setup, winds))
                .map(|(station, position)| {
                    let mut station = station.clone();
                    station.position = position;
                    // Limits of terrain are for stations on the ground.
                    station.elevation = None;
                    station
                })
                .collect(),
        );
        let limits = &setup.settings.limits;
        let complete: Vec<[usize; 3]> = self
            .triangles
            .iter()
            .map(|t| t.0)
            .filter(|t| t.iter().all(|&s| winds[s].is_ok()))
            .collect();
        let built = build_triangles(&there, &complete, limits);
        let mut found = estimates(&built, &there, level, block, model);
        let mut out = Vec::new();
        for (triangle, name) in &self.triangles {
            let missing = missing(setup, triangle, winds);
            out.push(match found.iter().position(|(id, _)| id == name) {
                Some(k) => found.swap_remove(k).1,
                None if !missing.is_empty() => nothing(level, triangle, &missing),
                None => nothing(level, triangle, "its stations stand on one line there"),
            });
        }
        for ring in self.rings {
            out.push(Self::ring(setup, &there, level, winds, block, model, ring));
        }
        out
    }

    /// A ring at a level: without the platforms that have no wind there, as long as three are left.
    fn ring(
        setup: &Setup,
        there: &Network,
        level: Level,
        winds: &[Result<LevelWind, NoWind>],
        block: &WindBlock,
        model: Option<&StructureFunction>,
        ring: &RingSettings,
    ) -> LevelEstimate {
        let all: Vec<usize> = ring
            .stations
            .iter()
            .filter_map(|id| there.find(id))
            .collect();
        let present: Vec<usize> = all.iter().copied().filter(|&s| winds[s].is_ok()).collect();
        let missing = missing(setup, &all, winds);
        if present.len() < 3 {
            return nothing(level, &all, &missing);
        }
        let id = |&s: &usize| there.stations()[s].id.clone();
        let choice = PolygonChoice {
            triangles: false,
            rings: vec![RingSettings {
                stations: present.iter().map(id).collect(),
                ..ring.clone()
            }],
            regions: Vec::new(),
        };
        match build_polygons(there, &choice, &setup.settings.limits) {
            Ok(built) => match estimates(&built, there, level, block, model).pop() {
                Some((_, mut found)) => {
                    if !missing.is_empty() {
                        let rest = std::mem::take(&mut found.reason);
                        found.reason = format!("{missing}: the polygon is without");
                        if !rest.is_empty() {
                            found.reason = format!("{}; {rest}", found.reason);
                        }
                    }
                    found
                }
                None => nothing(level, &present, "it has no area there"),
            },
            Err(Error::Invalid(problems)) => {
                let words: Vec<&str> = problems.iter().map(|p| p.message.as_str()).collect();
                nothing(level, &present, &words.join("; "))
            }
            Err(error) => nothing(level, &present, &error.to_string()),
        }
    }
}

/// Which stations have no wind at a level, and why.
fn missing(setup: &Setup, stations: &[usize], winds: &[Result<LevelWind, NoWind>]) -> String {
    let words = stations.iter().filter_map(|&s| {
        let why = winds[s].err()?;
        Some(format!(
            "{} {}",
            setup.network.stations()[s].id,
            why.words()
        ))
    });
    words.collect::<Vec<_>>().join(", ")
}

/// Where a level's motion holds.
fn motion_at(level: Level) -> f64 {
    match level {
        Level::At(level) => level,
        Level::Between(_, top) => top,
    }
}

fn nothing(level: Level, stations: &[usize], reason: &str) -> LevelEstimate {
    LevelEstimate {
        level,
        stations: stations.to_vec(),
        place: None,
        estimate: None,
        motion_at: motion_at(level),
        motion: None,
        adjusted: None,
        flag: Flag::Missing,
        reason: reason.to_string(),
    }
}

/// Estimates of polygons at one level, by name; those outside the limits with the reason.
fn estimates(
    built: &BuiltPolygons,
    there: &Network,
    level: Level,
    block: &WindBlock,
    model: Option<&StructureFunction>,
) -> Vec<(String, LevelEstimate)> {
    let polygons = &built.polygons;
    let mut estimated = estimate(polygons, block);
    if let Some(model) = model {
        let positions: Vec<Position> = there.stations().iter().map(|s| s.position).collect();
        let sampling = Sampling::new(polygons, &built.edges, &positions, model.reference);
        complete_errors(polygons, &sampling, block, &[*model], &mut estimated);
    }
    let stations = |polygon: &StationPolygon| polygon.outline.concat();
    let mut out = Vec::new();
    for (p, polygon) in polygons.iter().enumerate() {
        // One time: a cell for each polygon.
        let value = |values: &[f64], errors: &[f64]| Measured {
            value: values[p],
            se: errors[p],
        };
        let mut found = nothing(level, &stations(polygon), "");
        found.place = Some((polygon.middle, polygon.shape.area));
        found.flag = estimated.flag[p];
        if found.flag.is_usable() {
            found.estimate = Some([
                value(&estimated.vorticity, &estimated.vorticity_se),
                value(&estimated.divergence, &estimated.divergence_se),
            ]);
        }
        out.push((polygon.id.clone(), found));
    }
    for (polygon, why) in &built.excluded {
        let mut found = nothing(
            level,
            &stations(polygon),
            &format!("outside the limits: {why}"),
        );
        found.place = Some((polygon.middle, polygon.shape.area));
        out.push((polygon.id.clone(), found));
    }
    out
}

/// Adds the vertical motion to a profile.
pub(super) fn motion_of(setup: &Setup, ascents: &[Ascent], profile: &mut PolygonProfile) {
    let wanted = &setup.settings.profile;
    if wanted.levels.is_empty() {
        return at_height(wanted.height.unwrap_or_default(), profile);
    }
    let levels = &mut profile.levels;
    let Some(first) = levels.iter().position(|l| l.estimate.is_some()) else {
        return;
    };
    let below = levels[..first].iter();
    if below.clone().any(|l| !is_underground(setup, ascents, l)) {
        let words = "no estimate at a level below that is above the ground: no vertical motion";
        return say(&mut levels[first], words);
    }
    let run = levels[first..].iter().take_while(|l| l.estimate.is_some());
    let run: Vec<&LevelEstimate> = run.collect();
    let (count, coordinate) = (run.len(), wanted.coordinate);
    let density = |height: f64| {
        if wanted.anelastic {
            air_at_height(height).density
        } else {
            1.0
        }
    };
    let column = match run.first().map(|l| l.level) {
        Some(Level::Between(bottom, _)) => {
            let tops = run.iter().map(|l| l.motion_at);
            let bounds: Vec<f64> = std::iter::once(bottom).chain(tops).collect();
            Column::of_layers(coordinate, &bounds, density)
        }
        _ => {
            let bounds: Vec<f64> = run.iter().map(|l| l.motion_at).collect();
            Column::of_levels(coordinate, &bounds, density)
        }
    };
    let bottom = match levels[first].level {
        Level::At(level) | Level::Between(level, _) => level,
    };
    let Some(column) = column else {
        say(&mut levels[first], "no level beside it: no vertical motion");
        return;
    };
    let lower = match wanted.lower {
        Boundary::Zero => Ok(Measured::default()),
        Boundary::Given(motion) => Ok(Measured::exact(motion)),
        Boundary::Slope => along_ground(setup, ascents, &levels[first].stations, bottom),
    };
    let lower = match lower {
        Ok(lower) => lower,
        Err(why) => return say(&mut levels[first], &why),
    };
    let upper = match wanted.upper {
        Boundary::Given(motion) => Measured::exact(motion),
        Boundary::Zero | Boundary::Slope => Measured::default(),
    };
    let divergence = levels[first..first + count].iter();
    let divergence: Vec<Measured> = divergence.filter_map(|l| Some(l.estimate?[1])).collect();
    let Some(found) = column.motion(&divergence, lower, upper, wanted.adjustment) else {
        return;
    };
    // Of layers the bottom of the lowest has no row.
    let skip = found.motion.len() - count;
    let complete = first + count == levels.len();
    for (k, level) in levels[first..first + count].iter_mut().enumerate() {
        level.motion = found.motion.get(k + skip).copied();
        if complete {
            level.adjusted = found.adjusted.get(k + skip).copied();
        }
    }
    if first > 0 {
        let words = format!(
            "the lower boundary is taken at {}",
            coordinate.words(bottom)
        );
        say(&mut levels[first], &words);
    }
    if !complete {
        let last = first + count - 1;
        say(
            &mut levels[last],
            "the profile ends here: motion not adjusted",
        );
        for level in levels[first + count..]
            .iter_mut()
            .filter(|l| l.estimate.is_some())
        {
            say(level, "above a gap: no vertical motion");
        }
    }
}

/// By how much the pressure at the ground may differ from the standard atmosphere's, as a share, and the same in height,
/// m: 50 hPa, the deepest lows (common practice).
const GROUND: (f64, f64) = (0.05, 400.0);

/// True if the reason for no estimate at a level is that the ground is above it.
fn is_underground(setup: &Setup, ascents: &[Ascent], level: &LevelEstimate) -> bool {
    let bottom = match level.level {
        Level::At(level) | Level::Between(level, _) => level,
    };
    let without = level
        .stations
        .iter()
        .filter(|&&s| ascents[s].at(level.level).is_err());
    let mut without = without.peekable();
    without.peek().is_some()
        && without.all(|&s| {
            let ground = setup.network.stations()[s].elevation;
            ascents[s].at(level.level) == Err(NoWind::Below)
                && ground.is_none_or(|z| match setup.settings.profile.coordinate {
                    Coordinate::Pressure => air_at_height(z).pressure <= bottom * (1.0 + GROUND.0),
                    Coordinate::Height => z >= bottom - GROUND.1,
                })
        })
}

/// w at a height from the divergence at the ground.
fn at_height(height: f64, profile: &mut PolygonProfile) {
    for level in &mut profile.levels {
        level.motion_at = height;
        level.motion = level.estimate.map(|[_, divergence]| {
            let w = motion_at_height(divergence, height);
            Motion {
                value: w.value,
                se: w.se,
                se_correlated: w.se,
            }
        });
    }
}

fn say(level: &mut LevelEstimate, words: &str) {
    if !level.reason.is_empty() {
        level.reason.push_str("; ");
    }
    level.reason.push_str(words);
}

/// Motion of the air that follows the ground of the stations: their mean lowest wind on the plane through their
/// elevations. Over pressure ω = −ρ g w with the standard density; what the pressure changes in time and along the wind is
/// left out (`methods.md` 4).
fn along_ground(
    setup: &Setup,
    ascents: &[Ascent],
    stations: &[usize],
    bottom: f64,
) -> Result<Measured, String> {
    let all = setup.network.stations();
    let middle = stations.first().map(|&s| all[s].position);
    let middle = middle.map_or((0.0, 0.0), |p| (p.latitude(), p.longitude()));
    let plane = LocalPlane::at(middle);
    let (mut places, mut heights) = (Vec::new(), Vec::new());
    let (mut u, mut v, mut variances) = (0.0, 0.0, [0.0; 3]);
    let n = stations.len() as f64;
    for &s in stations {
        let point = plane.place(all[s].position);
        let Some(height) = all[s].elevation else {
            return Err(format!(
                "{} has no elevation: no slope, no vertical motion",
                all[s].id
            ));
        };
        let Some(report) = ascents[s].lowest() else {
            return Err(format!("{} has no wind: no vertical motion", all[s].id));
        };
        places.push(point.at);
        heights.push(height);
        let [east, north] = point.to_plane([report.wind.u, report.wind.v]);
        u += east / n;
        v += north / n;
        let c = report.covariance;
        for (sum, entry) in variances.iter_mut().zip([c.uu, c.uv, c.vv]) {
            *sum += entry / (n * n);
        }
    }
    let Some(weights) = slopes_of_plane(&places) else {
        return Err("its stations stand on one line: no slope".into());
    };
    let slope = [0, 1].map(|axis| {
        let terms = weights.iter().zip(&heights).map(|(w, z)| w[axis] * z);
        terms.sum::<f64>()
    });
    let w = motion_along_slope(crate::units::Wind { u, v }, variances, slope);
    Ok(match setup.settings.profile.coordinate {
        Coordinate::Height => w,
        Coordinate::Pressure => {
            let factor = air_at_pressure(bottom).density * GRAVITY;
            Measured {
                value: -factor * w.value,
                se: factor * w.se,
            }
        }
    })
}
