//! A frame with axes, and what is drawn in it.

use std::fmt::Write as _;

use super::axis::{Axis, label, time_ticks};
use super::svg::{Anchor, GRID, NOTE, Paint, Style, Svg, polyline, short};
use crate::time::Time;

/// Size of the numbers on axes, pixels.
const NUMBERS: f64 = 12.0;

/// Axes of a chart: x to the right, y up.
#[derive(Debug, Clone, Copy)]
pub(super) struct Chart {
    pub(super) x: Axis,
    pub(super) y: Axis,
}

impl Chart {
    /// Within left, top, width, height.
    pub(super) fn linear([left, top, width, height]: [f64; 4], x: [f64; 2], y: [f64; 2]) -> Self {
        Self {
            x: Axis::linear(x, [left, left + width]),
            y: Axis::linear(y, [top + height, top]),
        }
    }

    /// With logarithmic axes.
    pub(super) fn logarithmic(
        [left, top, width, height]: [f64; 4],
        x: [f64; 2],
        y: [f64; 2],
    ) -> Self {
        Self {
            x: Axis::logarithmic(x, [left, left + width]),
            y: Axis::logarithmic(y, [top + height, top]),
        }
    }

    pub(super) fn at(&self, x: f64, y: f64) -> [f64; 2] {
        [self.x.pixel(x), self.y.pixel(y)]
    }

    fn left(&self) -> f64 {
        self.x.from
    }

    fn bottom(&self) -> f64 {
        self.y.from
    }

    /// Lines and numbers of the y axis, and its name.
    pub(super) fn y_axis(&self, svg: &mut Svg, name: &str) {
        let ticks = self.y.ticks(6.0);
        let step = step_of(&ticks);
        for &tick in &ticks {
            let y = self.y.pixel(tick);
            svg.line([self.left(), y], [self.x.to, y], Paint::line(GRID, 1.0));
            let step = if step > 0.0 { step } else { tick };
            let style = Style::new(NUMBERS).at(Anchor::End);
            svg.text([self.left() - 8.0, y + 4.0], &label(tick, step), style);
        }
        let middle = 0.5 * (self.y.from + self.y.to);
        svg.upright([self.left() - 52.0, middle], name, Style::new(13.0));
    }

    /// Numbers of the x axis, and its name.
    pub(super) fn x_axis(&self, svg: &mut Svg, name: &str) {
        let ticks = self.x.ticks(7.0);
        let step = step_of(&ticks);
        for &tick in &ticks {
            let step = if step > 0.0 { step } else { tick };
            self.x_tick(svg, tick, &label(tick, step));
        }
        self.x_name(svg, name);
    }

    /// The x axis for seconds since a time.
    pub(super) fn time_axis(&self, svg: &mut Svg, first: Time, last: Time) {
        for (seconds, text) in time_ticks(first, last, 9.0) {
            self.x_tick(svg, seconds, &text);
        }
        self.x_name(svg, "time, UTC");
    }

    fn x_tick(&self, svg: &mut Svg, at: f64, text: &str) {
        let x = self.x.pixel(at);
        svg.line([x, self.y.to], [x, self.bottom()], Paint::line(GRID, 1.0));
        let style = Style::new(NUMBERS).at(Anchor::Middle);
        svg.text([x, self.bottom() + 18.0], text, style);
    }

    fn x_name(&self, svg: &mut Svg, name: &str) {
        let middle = 0.5 * (self.x.from + self.x.to);
        let style = Style::new(13.0).at(Anchor::Middle);
        svg.text([middle, self.bottom() + 38.0], name, style);
    }

    /// The box around it.
    pub(super) fn border(&self, svg: &mut Svg) {
        let (left, top) = (self.left(), self.y.to);
        svg.rect(
            [left, top, self.x.to - left, self.bottom() - top],
            Paint::line(NOTE, 1.0),
        );
    }

    /// The line y = 0, if it is within.
    pub(super) fn zero(&self, svg: &mut Svg) {
        if self.y.low < 0.0 && self.y.high > 0.0 {
            let y = self.y.pixel(0.0);
            svg.line([self.left(), y], [self.x.to, y], Paint::line(NOTE, 1.2));
        }
    }

    /// A line through points, broken where one is missing.
    pub(super) fn curve(&self, svg: &mut Svg, points: &[Option<(f64, f64)>], paint: Paint) {
        let pieces = points.split(Option::is_none);
        let mut data = String::new();
        for piece in pieces.filter(|p| !p.is_empty()) {
            let pixels: Vec<[f64; 2]> = piece.iter().flatten().map(|p| self.at(p.0, p.1)).collect();
            data.push_str(&polyline(&pixels, false));
            if let [[x, y]] = pixels[..] {
                // A point alone shows as a short dash; writing to a string cannot fail.
                let _ = write!(data, "L{} {}", short(x + 1.5), short(y));
            }
        }
        if !data.is_empty() {
            svg.path(&data, paint);
        }
    }

    /// The band between lower and upper values, broken where one is missing.
    pub(super) fn band(&self, svg: &mut Svg, points: &[Option<(f64, [f64; 2])>], fill: &str) {
        let mut data = String::new();
        for piece in points.split(Option::is_none).filter(|p| p.len() > 1) {
            let there = || piece.iter().flatten();
            let upper = there().map(|p| self.at(p.0, p.1[1]));
            let lower = there().rev().map(|p| self.at(p.0, p.1[0]));
            let ring: Vec<[f64; 2]> = upper.chain(lower).collect();
            data.push_str(&polyline(&ring, true));
        }
        if !data.is_empty() {
            svg.path(&data, Paint::fill(fill));
        }
    }

    /// A point with a vertical bar.
    pub(super) fn bar(&self, svg: &mut Svg, x: f64, [low, high]: [f64; 2], paint: Paint) {
        let [a, b] = [self.at(x, low), self.at(x, high)];
        let cap = |y: f64| format!("M{} {}h8", short(a[0] - 4.0), short(y));
        let data = format!("{}{}{}", polyline(&[a, b], false), cap(a[1]), cap(b[1]));
        svg.path(&data, paint);
    }
}

fn step_of(ticks: &[f64]) -> f64 {
    match ticks {
        // Evenly spaced.
        [a, b, c, ..] if ((c - b) - (b - a)).abs() < 1e-6 * (c - a).abs() => b - a,
        [a, b] => b - a,
        _ => 0.0,
    }
}
