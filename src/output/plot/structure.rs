//! The structure function: what was found by distance, and the fit.

use super::axis::plain_time;
use super::chart::Chart;
use super::svg::{Paint, Style, Svg, fitted};
use crate::pipeline::{Setup, StructureReport};

const WIDTH: f64 = 800.0;
/// Of differences along and across the line between two stations.
const COLOURS: [&str; 2] = ["#1b5e8c", "#a4500f"];

/// Mean squared differences by distance with the fitted function, as SVG; `None` if nothing was found at any distance.
#[must_use]
pub fn structure_picture(setup: &Setup, report: &StructureReport) -> Option<String> {
    let rows = || report.rows.iter().filter(|row| row.pairs > 0.0);
    let distances = || rows().map(|row| row.distance / 1e3);
    let low = distances().fold(f64::INFINITY, f64::min);
    let high = distances().fold(0.0, f64::max);
    let function = &report.function;
    let values = rows().flat_map(|row| {
        let fitted = function.at(row.distance);
        [row.longitudinal, row.transverse, fitted[0], fitted[1]]
    });
    let positive: Vec<f64> = values.filter(|v| *v > 0.0).collect();
    let least = positive.iter().copied().fold(f64::INFINITY, f64::min);
    let most = positive.iter().copied().fold(0.0, f64::max);
    if !(low <= high && least <= most) {
        return None;
    }
    let title = format!("{}: how winds differ with distance", setup.settings.name);
    let mut svg = Svg::new(WIDTH, 560.0, &title);
    let name = fitted(&setup.settings.name, 22.0, WIDTH - 48.0);
    svg.text([24.0, 36.0], &name, Style::new(22.0).bold());
    let below = format!(
        "How winds differ with distance, the day up to {}",
        plain_time(report.time)
    );
    svg.text([24.0, 60.0], &below, Style::new(15.0));
    let chart = Chart::logarithmic(
        [90.0, 84.0, WIDTH - 114.0, 390.0],
        [low * 0.8, high * 1.25],
        [least * 0.7, most * 1.5],
    );
    chart.y_axis(&mut svg, "mean squared difference, m² s⁻²");
    chart.x_axis(&mut svg, "distance, km");
    let steps = 60;
    for (part, colour) in COLOURS.into_iter().enumerate() {
        let point = |k: usize| {
            let d = low * (high / low).powf(k as f64 / f64::from(steps));
            let value = function.at(1e3 * d)[part];
            (value > 0.0).then_some((d, value))
        };
        #[expect(clippy::cast_sign_loss, reason = "60")]
        let points: Vec<_> = (0..=steps as usize).map(point).collect();
        chart.curve(&mut svg, &points, Paint::line(colour, 1.8));
        for row in rows() {
            let found = [row.longitudinal, row.transverse][part];
            if found > 0.0 {
                let at = chart.at(row.distance / 1e3, found);
                let paint = Paint {
                    fill: if part == 0 { colour } else { "#ffffff" },
                    stroke: colour,
                    width: 1.8,
                };
                svg.circle(at, 4.0, paint);
            }
        }
    }
    chart.border(&mut svg);
    for (k, text) in ["along the line between two stations", "across it"]
        .into_iter()
        .enumerate()
    {
        let y = 106.0 + 20.0 * k as f64;
        let paint = Paint {
            fill: if k == 0 { COLOURS[0] } else { "#ffffff" },
            stroke: COLOURS[k],
            width: 1.8,
        };
        svg.line(
            [104.0, y - 4.0],
            [130.0, y - 4.0],
            Paint::line(COLOURS[k], 1.8),
        );
        svg.circle([117.0, y - 4.0], 4.0, paint);
        svg.text([138.0, y], text, Style::new(12.0));
    }
    let note = format!(
        "Points: found in the window; lines: the fit, exponent {:.2}, sites {:.2} m/s, {:.0} % of it the stated prior.",
        function.exponent.value(),
        function.site_variance.sqrt(),
        100.0 * function.prior_share
    );
    svg.text([24.0, 542.0], &note, Style::note(12.0));
    Some(svg.finish())
}
