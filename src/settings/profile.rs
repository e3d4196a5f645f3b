//! `[profile]`: levels, boundaries and adjustment of the vertical motion.

use super::analysis::level;
use super::kinematics::height_above_ground;
use super::section::{Found, Section};
use crate::profile::{Adjustment, Coordinate, Level};

/// A boundary of the vertical motion.
#[derive(Debug, Clone, Copy, Default, PartialEq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Boundary {
    /// No motion.
    #[default]
    Zero,
    /// The air follows the ground (lower boundary only).
    Slope,
    /// A motion stated by the user: Pa/s over pressure, m/s over height.
    Given(f64),
}

/// What a profile is made of.
#[derive(Debug, Clone, PartialEq)]
pub struct ProfileSettings {
    /// What the levels are counted in.
    pub coordinate: Coordinate,
    /// Levels, or layers that follow each other, from the bottom up; empty if none are stated.
    pub levels: Vec<Level>,
    /// Furthest distance of two reports between which winds are interpolated, Pa or m. Default 200 hPa, the distance of
    /// the mandatory levels of 700 and 500 hPa, or 2,500 m, about the same.
    pub largest_gap: f64,
    /// Motion at the lowest level.
    pub lower: Boundary,
    /// Motion at the highest level.
    pub upper: Boundary,
    /// How the upper boundary is met.
    pub adjustment: Adjustment,
    /// Over height: true for the density of the standard atmosphere, false for a constant one.
    pub anelastic: bool,
    /// For reports without levels: the height up to which the divergence is taken to be that of the ground, m.
    pub height: Option<f64>,
}

impl Default for ProfileSettings {
    fn default() -> Self {
        Self {
            coordinate: Coordinate::Pressure,
            levels: Vec::new(),
            largest_gap: PRESSURE_GAP,
            lower: Boundary::Zero,
            upper: Boundary::Zero,
            adjustment: Adjustment::Linear,
            anelastic: true,
            height: None,
        }
    }
}

const PRESSURE_GAP: f64 = 20e3;
const HEIGHT_GAP: f64 = 2_500.0;

pub(super) fn profile(mut section: Section) -> ProfileSettings {
    let default = ProfileSettings::default();
    let levels = section.value::<Vec<String>>("levels");
    let layers = section.value::<Vec<[String; 2]>>("layers");
    if let (Some(_), Some(layers)) = (&levels, &layers) {
        section.problem(
            layers.place.clone(),
            "there are `levels` and `layers` (one of them expected)",
        );
    }
    let (coordinate, levels) = match (levels, layers) {
        (Some(levels), _) => of_levels(&section, &levels),
        (None, Some(layers)) => of_layers(&section, &layers),
        (None, None) => None,
    }
    .unwrap_or((default.coordinate, Vec::new()));
    let gap = section.value::<String>("largest_gap").and_then(|found| {
        same_kind(&section, &found, coordinate).filter(|gap| {
            let positive = *gap > 0.0;
            if !positive {
                let message = format!("`{}` is no distance (more than 0 expected)", found.value);
                section.problem(found.place.clone(), message);
            }
            positive
        })
    });
    let mut boundary = |key, slope| section.parsed(key, |text| boundary(text, coordinate, slope));
    let (lower, upper) = (
        boundary("lower_boundary", true),
        boundary("upper_boundary", false),
    );
    let adjustments = [
        ("linear", Adjustment::Linear),
        ("constant", Adjustment::Constant),
        ("none", Adjustment::None),
    ];
    let adjustment = section.choice("adjustment", &adjustments);
    let anelastic = section.choice("density", &[("standard", true), ("constant", false)]);
    let height = section.parsed("height", height_above_ground);
    section.finish();
    ProfileSettings {
        coordinate,
        levels,
        largest_gap: gap.unwrap_or(match coordinate {
            Coordinate::Pressure => PRESSURE_GAP,
            Coordinate::Height => HEIGHT_GAP,
        }),
        lower: lower.unwrap_or_default(),
        upper: upper.unwrap_or_default(),
        adjustment: adjustment.unwrap_or_default(),
        anelastic: anelastic.unwrap_or(default.anelastic),
        height,
    }
}

/// A level with what it is counted in.
fn one(text: &str) -> Result<(Coordinate, f64), String> {
    let value = level(text)?;
    if text.trim_end().ends_with("Pa") {
        if value > 0.0 {
            Ok((Coordinate::Pressure, value))
        } else {
            Err(format!("`{text}` is no pressure (more than 0 expected)"))
        }
    } else {
        Ok((Coordinate::Height, value))
    }
}

/// A distance in what the levels are counted in.
fn same_kind(section: &Section, found: &Found<String>, coordinate: Coordinate) -> Option<f64> {
    let message = match one(&found.value) {
        Ok((kind, value)) if kind == coordinate => return Some(value),
        Ok(_) => format!("`{}` is not counted in what the levels are", found.value),
        Err(message) => message,
    };
    section.problem(found.place.clone(), message);
    None
}

/// Levels from the bottom up.
fn of_levels(section: &Section, found: &Found<Vec<String>>) -> Option<(Coordinate, Vec<Level>)> {
    let (coordinate, mut levels) = numbers(section, found.value.iter(), found)?;
    levels.sort_by(f64::total_cmp);
    if coordinate == Coordinate::Pressure {
        levels.reverse();
    }
    let twice = levels
        .windows(2)
        .find(|pair| !coordinate.is_above(pair[1], pair[0]));
    if let Some(pair) = twice {
        let message = format!("{} is there twice", coordinate.words(pair[0]));
        section.problem(found.place.clone(), message);
        return None;
    }
    Some((coordinate, levels.into_iter().map(Level::At).collect()))
}

/// Layers from the bottom up, each on top of the one before.
fn of_layers(
    section: &Section,
    found: &Found<Vec<[String; 2]>>,
) -> Option<(Coordinate, Vec<Level>)> {
    let (coordinate, bounds) = numbers(section, found.value.iter().flatten(), found)?;
    let mut layers: Vec<(f64, f64)> = bounds
        .chunks_exact(2)
        .map(|pair| {
            if coordinate.is_above(pair[0], pair[1]) {
                (pair[1], pair[0])
            } else {
                (pair[0], pair[1])
            }
        })
        .collect();
    layers.sort_by(|a, b| a.0.total_cmp(&b.0));
    if coordinate == Coordinate::Pressure {
        layers.reverse();
    }
    let thin = layers
        .iter()
        .find(|(bottom, top)| !coordinate.is_above(*top, *bottom));
    let apart = layers
        .windows(2)
        .find(|pair| (pair[0].1 - pair[1].0).abs() > 1e-9);
    let message = match (thin, apart) {
        (Some(&(bottom, _)), _) => {
            format!("a layer begins and ends at {}", coordinate.words(bottom))
        }
        (None, Some(pair)) => format!(
            "a layer ends at {} and the next begins at {} (the same expected)",
            coordinate.words(pair[0].1),
            coordinate.words(pair[1].0)
        ),
        (None, None) => {
            let layers = layers.into_iter().map(|(a, b)| Level::Between(a, b));
            return Some((coordinate, layers.collect()));
        }
    };
    section.problem(found.place.clone(), message);
    None
}

/// Levels of one kind, as written.
fn numbers<'t, T>(
    section: &Section,
    texts: impl Iterator<Item = &'t String>,
    found: &Found<T>,
) -> Option<(Coordinate, Vec<f64>)> {
    let mut coordinate = None;
    let mut values = Vec::new();
    for text in texts {
        let message = match one(text) {
            Ok((kind, value)) if coordinate.is_none_or(|c| c == kind) => {
                coordinate = Some(kind);
                values.push(value);
                continue;
            }
            Ok(_) => format!("`{text}`: levels are all pressures or all heights"),
            Err(message) => message,
        };
        section.problem(found.place.clone(), message);
        return None;
    }
    if coordinate.is_none() {
        section.problem(
            found.place.clone(),
            "there is no level (such as `850 hPa` or `100 m`)",
        );
    }
    Some((coordinate?, values))
}

/// A boundary: `zero`, `slope` or a motion with its unit.
fn boundary(text: &str, coordinate: Coordinate, slope: bool) -> Result<Boundary, String> {
    let (unit, example) = match coordinate {
        Coordinate::Pressure => ("Pa/s", "0.05 Pa/s"),
        Coordinate::Height => ("m/s", "0.02 m/s"),
    };
    match text.trim() {
        "zero" => return Ok(Boundary::Zero),
        "slope" if slope => return Ok(Boundary::Slope),
        _ => {}
    }
    let number = text.trim().strip_suffix(unit);
    let number: Option<f64> = number.and_then(|n| n.trim().parse().ok());
    match number.filter(|n| n.is_finite()) {
        Some(number) => Ok(Boundary::Given(number)),
        None => {
            let words = if slope { "`zero`, `slope`" } else { "`zero`" };
            Err(format!(
                "`{text}` is no boundary ({words} or a motion such as `{example}` expected)"
            ))
        }
    }
}
