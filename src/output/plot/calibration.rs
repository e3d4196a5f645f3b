//! Turns and factors of all stations, with their 95 % intervals.

use super::axis::roomy;
use super::chart::Chart;
use super::footnote;
use super::svg::{Anchor, NOTE, Paint, Style, Svg, fitted};
use crate::calibration::GainEstimate;
use crate::output::GAUGE;
use crate::pipeline::{CalibrationOutcome, Setup};

const LEFT: f64 = 90.0;
const HEIGHT: f64 = 240.0;
const SOUND: &str = "#59626e";
const FAULT: &str = "#a4500f";

/// Value and half of the 95 % interval.
type Reading = fn(&GainEstimate) -> (f64, f64);

/// Turn and factor of every station, those with a ticket in colour, as SVG.
#[must_use]
pub fn calibration_picture(setup: &Setup, outcome: &CalibrationOutcome) -> String {
    let stations = setup.network.stations();
    let count = stations.len().max(1) as f64;
    // Room for an upright identifier each.
    let width = (LEFT + 24.0 + 21.0 * count).clamp(700.0, 4000.0);
    let title = format!("{}: calibration", setup.settings.name);
    let mut svg = Svg::new(width, 706.0, &title);
    let name = fitted(&setup.settings.name, 22.0, width - 48.0);
    svg.text([24.0, 36.0], &name, Style::new(22.0).bold());
    svg.text(
        [24.0, 60.0],
        "Vanes and anemometers against the network; bars: 95 % intervals",
        Style::new(15.0),
    );
    let faults: Vec<usize> = outcome
        .calibration
        .tickets
        .iter()
        .map(|t| t.station)
        .collect();
    let readings: [(&str, f64, Reading); 2] = [
        ("turn, degrees clockwise", 0.0, |g| {
            (g.turn, g.half_95 * g.turn_se)
        }),
        ("factor of the speed", 1.0, |g| {
            (g.factor, g.half_95 * g.factor_se)
        }),
    ];
    for (k, (name, sound, reading)) in readings.into_iter().enumerate() {
        let found: Vec<Option<(f64, f64)>> = (outcome.calibration.stations.iter())
            .map(|s| s.gain.as_ref().map(reading))
            .collect();
        let ends = found.iter().flatten().flat_map(|p| [p.0 - p.1, p.0 + p.1]);
        let place = [
            LEFT,
            84.0 + k as f64 * (HEIGHT + 24.0),
            width - LEFT - 24.0,
            HEIGHT,
        ];
        let chart = Chart::linear(place, [-0.5, count - 0.5], roomy(ends.chain([sound])));
        chart.y_axis(&mut svg, name);
        let y = chart.y.pixel(sound);
        svg.line([chart.x.from, y], [chart.x.to, y], Paint::line(NOTE, 1.2));
        for (s, found) in found.iter().enumerate() {
            let Some((value, half)) = *found else {
                continue;
            };
            let colour = if faults.contains(&s) { FAULT } else { SOUND };
            chart.bar(
                &mut svg,
                s as f64,
                [value - half, value + half],
                Paint::line(colour, 1.4),
            );
            svg.circle(chart.at(s as f64, value), 3.4, Paint::fill(colour));
        }
        chart.border(&mut svg);
        if k == 1 {
            for (s, station) in stations.iter().enumerate() {
                let x = chart.x.pixel(s as f64);
                let text = fitted(&station.id, 11.0, 76.0);
                let y = chart.y.from + 10.0 + 0.5 * super::svg::width_of(&text, 11.0);
                svg.upright([x + 4.0, y], &text, Style::new(11.0).at(Anchor::Middle));
            }
        }
    }
    svg.circle([36.0, 664.0], 3.4, Paint::fill(FAULT));
    svg.text(
        [46.0, 668.0],
        "with a ticket in the maintenance list",
        Style::new(12.0),
    );
    footnote(&mut svg, [24.0, 688.0], GAUGE, width - 48.0);
    svg.finish()
}
