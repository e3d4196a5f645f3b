//! Vorticity and divergence of one polygon in the course of time, with their errors.

use std::fmt::Write as _;

use super::axis::roomy;
use super::chart::Chart;
use super::svg::{NOTE, Paint, Style, Svg, fitted};
use super::{Quantity, footnote};
use crate::output::frames::Frames;
use crate::output::{CAUTION, error_bars};
use crate::pipeline::Setup;

const WIDTH: f64 = 1000.0;
const LEFT: f64 = 84.0;
const HEIGHT: f64 = 230.0;
/// Half-width of the band, standard errors: a 95 % interval.
const HALF_95: f64 = 1.96;
/// Line and band of both quantities, which differ in lightness too.
pub(crate) const COLOURS: [(&str, &str); 2] = [("#1b5e8c", "#c4dcec"), ("#a4500f", "#f3d9bd")];

/// The series of a polygon, by its number, as SVG; `None` if there is no such polygon or no time.
#[must_use]
pub fn series_picture(setup: &Setup, frames: &Frames, polygon: usize) -> Option<String> {
    let found = setup.built.polygons.get(polygon)?;
    let (first, last) = (frames.kept.first()?.time, frames.kept.last()?.time);
    let seconds = |micros: i64| (micros - first.micros()) as f64 / 1e6;
    let title = format!("{}: {}", setup.settings.name, found.id);
    let foot = 90.0 + 2.0 * (HEIGHT + 30.0) + 34.0;
    let mut svg = Svg::new(WIDTH, foot + 44.0, &title);
    svg.text(
        [24.0, 36.0],
        &fitted(&found.id, 22.0, WIDTH - 48.0),
        Style::new(22.0).bold(),
    );
    let below = format!(
        "{}; {:.0} km²; line: estimate, band: 95 % interval",
        setup.settings.name,
        found.shape.area / 1e6
    );
    svg.text(
        [24.0, 60.0],
        &fitted(&below, 15.0, WIDTH - 48.0),
        Style::new(15.0),
    );
    for quantity in Quantity::ALL {
        let q = quantity.index();
        let top = 84.0 + q as f64 * (HEIGHT + 30.0);
        let points: Vec<Option<(f64, f64, f64)>> = frames
            .kept
            .iter()
            .map(|frame| {
                let cell = frame.cells.get(polygon)?;
                let (value, error) = (1e5 * cell.value[q], 1e5 * HALF_95 * cell.error[q]);
                let x = seconds(frame.time.micros());
                cell.flag.is_usable().then_some((x, value, error))
            })
            .collect();
        let bounds = points.iter().flatten().flat_map(|p| [p.1 - p.2, p.1 + p.2]);
        let range = roomy(bounds.chain([0.0]));
        let place = [LEFT, top, WIDTH - LEFT - 34.0, HEIGHT];
        let chart = Chart::linear(place, [0.0, seconds(last.micros()).max(1.0)], range);
        chart.y_axis(&mut svg, &format!("{}, 10⁻⁵ s⁻¹", quantity.name()));
        if q == 1 {
            chart.time_axis(&mut svg, first, last);
        }
        let (line, band) = COLOURS[q];
        let bands: Vec<_> = points
            .iter()
            .map(|p| p.map(|(x, y, e)| (x, [y - e, y + e])))
            .collect();
        chart.band(&mut svg, &bands, band);
        chart.zero(&mut svg);
        let values: Vec<_> = points.iter().map(|p| p.map(|(x, y, _)| (x, y))).collect();
        chart.curve(&mut svg, &values, Paint::line(line, 1.6));
        if values.iter().all(Option::is_none) {
            svg.text(
                [LEFT + 16.0, top + 30.0],
                "no estimate at any time",
                Style::note(13.0),
            );
        }
        chart.border(&mut svg);
    }
    let mut notes = format!("Errors: {}. ", error_bars(&setup.settings.errors));
    if frames.every > 1 {
        // Writing to a string cannot fail.
        let _ = write!(notes, "Every {}th analysis time is shown. ", frames.every);
    }
    notes.push_str(CAUTION);
    svg.line(
        [24.0, foot - 14.0],
        [WIDTH - 24.0, foot - 14.0],
        Paint::line(NOTE, 0.4),
    );
    footnote(&mut svg, [24.0, foot + 2.0], &notes, WIDTH - 48.0);
    Some(svg.finish())
}
