//! `[analysis]`: analysis times, height, level.

use std::time::Duration;

use super::read::Overrides;
use super::section::Section;
use super::{AlignMethod, Analysis};
use crate::align::{HeightReduction, Profile};
use crate::time::Time;
use crate::units;

pub(super) fn analysis(mut section: Section, overrides: &Overrides) -> Analysis {
    let default = Analysis::default();
    let positive = |text: &str| match units::parse_duration(text)? {
        Duration::ZERO => Err(format!(
            "`{text}` is no time at all (more than 0 s expected)"
        )),
        duration => Ok(duration),
    };
    let interval = section.parsed("interval", positive);
    let interval = overrides.interval.or(interval).unwrap_or(default.interval);
    let method = section.value::<String>("method");
    let tolerance = section.parsed("tolerance", units::parse_duration);
    let tolerance = overrides.tolerance.or(tolerance).unwrap_or(interval / 2);
    let window = section.parsed("window", positive);
    let window = overrides.window.or(window).unwrap_or(interval);
    let least_reports = section
        .value::<u32>("least_reports")
        .map_or(1, |f| f.value.max(1));
    let nearest = AlignMethod::Nearest { tolerance };
    let linear = AlignMethod::Linear { tolerance };
    let mean = AlignMethod::VectorMean {
        window,
        least_reports,
    };
    let method = match method {
        _ if overrides.window.is_some() => mean,
        None => nearest,
        Some(found) => match found.value.as_str() {
            "nearest" => nearest,
            "linear" => linear,
            "mean" => mean,
            other => {
                section.problem(
                    found.place,
                    format!("`{other}` is no method (`nearest`, `linear` or `mean` expected)"),
                );
                nearest
            }
        },
    };
    let from = section.parsed("from", Time::parse_rfc3339);
    let to = section.parsed("to", Time::parse_rfc3339);
    let analysis = Analysis {
        interval,
        method,
        from: overrides.from.or(from),
        to: overrides.to.or(to),
        height: height(&mut section),
        level: section.parsed("level", level),
    };
    if let (Some(from), Some(to)) = (analysis.from, analysis.to)
        && from > to
    {
        section.problem(
            section.place(),
            format!("the period ends ({to}) before it begins ({from})"),
        );
    }
    section.finish();
    analysis
}

/// The common height, if asked for.
fn height(section: &mut Section) -> Option<HeightReduction> {
    let height = section.parsed("height", units::parse_length);
    let logarithmic = section.choice("profile", &[("log", true), ("power", false)]);
    let exponent = section.number("exponent", 0.0..=1.0);
    let profile = match logarithmic {
        // 1/7 is the usual exponent of neutral air over open ground (common practice).
        Some(false) => Profile::Power {
            exponent: exponent.unwrap_or(1.0 / 7.0),
        },
        _ => Profile::Logarithmic,
    };
    Some(HeightReduction {
        height: height.filter(|h| *h > 0.0)?,
        profile,
    })
}

/// A level: pressure, Pa, or height, m.
pub(super) fn level(text: &str) -> Result<f64, String> {
    let pressure = text.strip_suffix("hPa").map(|n| (n, 100.0));
    if let Some((number, factor)) = pressure.or_else(|| text.strip_suffix("Pa").map(|n| (n, 1.0))) {
        let number: Option<f64> = number.trim().parse().ok().filter(|n: &f64| n.is_finite());
        return number
            .map(|n| n * factor)
            .ok_or_else(|| format!("`{text}` is not a level (such as `850 hPa` or `100 m`)"));
    }
    units::parse_length(text)
        .map_err(|_| format!("`{text}` is not a level (such as `850 hPa` or `100 m`)"))
}
