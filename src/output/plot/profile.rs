//! The profile of one polygon: vorticity, divergence and vertical motion by level.

use super::axis::{Axis, label, plain_time, roomy};
use super::footnote;
use super::svg::{Anchor, GRID, NOTE, Paint, Style, Svg, fitted, polyline};
use crate::output::{CAUTION, assumptions};
use crate::pipeline::{LevelEstimate, PolygonProfile, ProfileOutcome, Setup};
use crate::profile::Coordinate;

const WIDTH: f64 = 1000.0;
const TOP: f64 = 96.0;
const HEIGHT: f64 = 440.0;
const LEFT: f64 = 84.0;
const PANEL: f64 = 272.0;
const GAP: f64 = 24.0;
const HALF_95: f64 = 1.96;
const COLOURS: [&str; 3] = ["#1b5e8c", "#a4500f", "#2f5d3a"];

/// Height or pressure, value, half of the 95 % interval.
type Point = (f64, f64, f64);

/// The profile of a polygon as SVG; `None` where it has no estimate at any level.
#[must_use]
pub fn profile_picture(
    setup: &Setup,
    outcome: &ProfileOutcome,
    profile: &PolygonProfile,
) -> Option<String> {
    let pressure = setup.settings.profile.coordinate == Coordinate::Pressure;
    // hPa, or km.
    let unit = if pressure { 1e-2 } else { 1e-3 };
    let pick = |value: fn(&LevelEstimate) -> Option<(f64, f64, f64)>| -> Vec<Point> {
        profile.levels.iter().filter_map(value).collect()
    };
    let estimate = |k: usize| -> Vec<Point> {
        let levels = profile.levels.iter();
        let levels = levels.filter_map(|l| Some((l.level.middle(), l.estimate?[k])));
        levels
            .map(|(at, m)| (at, 1e5 * m.value, 1e5 * HALF_95 * m.se))
            .collect()
    };
    let motion = pick(|l| {
        let motion = l.adjusted.or(l.motion)?;
        let se = motion.se.max(motion.se_correlated);
        Some((l.motion_at, motion.value, HALF_95 * se))
    });
    let panels = [
        (estimate(0), "vorticity, 10⁻⁵ s⁻¹"),
        (estimate(1), "divergence, 10⁻⁵ s⁻¹"),
        (
            motion,
            if pressure {
                "ω, Pa s⁻¹ (upward is negative)"
            } else {
                "w, m s⁻¹ (upward is positive)"
            },
        ),
    ];
    let heights = || panels.iter().flat_map(|p| &p.0).map(|p| p.0 * unit);
    let [low, high] = roomy(heights());
    heights().next()?;
    // Pressure falls upward.
    let ends = if pressure {
        [TOP, TOP + HEIGHT]
    } else {
        [TOP + HEIGHT, TOP]
    };
    let upward = Axis::linear([low, high], ends);
    let title = format!(
        "Profile of {} at {}",
        profile.polygon,
        plain_time(profile.time)
    );
    let mut svg = Svg::new(WIDTH, TOP + HEIGHT + 120.0, &title);
    let name = fitted(&profile.polygon, 22.0, WIDTH - 48.0);
    svg.text([24.0, 36.0], &name, Style::new(22.0).bold());
    let below = format!(
        "{}, {}; bars: 95 % intervals",
        setup.settings.name,
        plain_time(profile.time)
    );
    svg.text(
        [24.0, 60.0],
        &fitted(&below, 15.0, WIDTH - 48.0),
        Style::new(15.0),
    );
    let ticks = upward.ticks(8.0);
    let step = match ticks[..] {
        [a, b, ..] => b - a,
        _ => 1.0,
    };
    for tick in &ticks {
        let style = Style::new(12.0).at(Anchor::End);
        svg.text(
            [LEFT - 8.0, upward.pixel(*tick) + 4.0],
            &label(*tick, step),
            style,
        );
    }
    let name = if pressure {
        "pressure, hPa"
    } else {
        "height, km"
    };
    svg.upright([LEFT - 52.0, TOP + 0.5 * HEIGHT], name, Style::new(13.0));
    for (k, (points, name)) in panels.iter().enumerate() {
        let left = LEFT + k as f64 * (PANEL + GAP);
        panel(&mut svg, left, &upward, unit, points, (name, COLOURS[k]));
    }
    let notes = [assumptions(setup, outcome).join(" "), CAUTION.to_string()].join(" ");
    footnote(&mut svg, [24.0, TOP + HEIGHT + 64.0], &notes, WIDTH - 48.0);
    Some(svg.finish())
}

fn panel(
    svg: &mut Svg,
    left: f64,
    upward: &Axis,
    unit: f64,
    points: &[Point],
    (name, colour): (&str, &str),
) {
    let bounds = points.iter().flat_map(|p| [p.1 - p.2, p.1 + p.2]);
    let across = Axis::linear(roomy(bounds.chain([0.0])), [left, left + PANEL]);
    for tick in upward.ticks(8.0) {
        let y = upward.pixel(tick);
        svg.line([left, y], [left + PANEL, y], Paint::line(GRID, 1.0));
    }
    let ticks = across.ticks(4.0);
    let step = match ticks[..] {
        [a, b, ..] => b - a,
        _ => 1.0,
    };
    for tick in &ticks {
        let x = across.pixel(*tick);
        let paint = if tick.abs() < 1e-9 * step {
            Paint::line(NOTE, 1.4)
        } else {
            Paint::line(GRID, 1.0)
        };
        svg.line([x, TOP], [x, TOP + HEIGHT], paint);
        let style = Style::new(12.0).at(Anchor::Middle);
        svg.text([x, TOP + HEIGHT + 18.0], &label(*tick, step), style);
    }
    let middle = Style::new(13.0).at(Anchor::Middle);
    svg.text([left + 0.5 * PANEL, TOP + HEIGHT + 38.0], name, middle);
    let at = |p: &Point| [across.pixel(p.1), upward.pixel(p.0 * unit)];
    let line: Vec<[f64; 2]> = points.iter().map(at).collect();
    svg.path(&polyline(&line, false), Paint::line(colour, 1.6));
    for p in points {
        let [x, y] = at(p);
        let (a, b) = (across.pixel(p.1 - p.2), across.pixel(p.1 + p.2));
        svg.line([a, y], [b, y], Paint::line(colour, 1.2));
        svg.circle([x, y], 3.6, Paint::fill(colour));
    }
    if points.is_empty() {
        svg.text([left + 16.0, TOP + 30.0], "none", Style::note(13.0));
    }
    svg.rect([left, TOP, PANEL, HEIGHT], Paint::line(NOTE, 1.0));
}
