//! A picture as SVG 1.1 text.

use std::fmt::Write as _;

/// Dark ink of axes and text.
pub(super) const INK: &str = "#22272e";
/// Quieter ink of ticks and notes.
pub(super) const NOTE: &str = "#59626e";
/// Lines behind the data.
pub(super) const GRID: &str = "#d9dde2";
/// The family of the font that comes with the program, then what a viewer may have.
const FONTS: &str = "Noto Sans, Helvetica, Arial, sans-serif";

/// How a shape is painted.
#[derive(Debug, Clone, Copy)]
pub(super) struct Paint<'a> {
    /// Colour inside; `none` for none.
    pub(super) fill: &'a str,
    /// Colour of the line; `none` for none.
    pub(super) stroke: &'a str,
    /// Width of the line, pixels.
    pub(super) width: f64,
}

impl<'a> Paint<'a> {
    /// An inside without a line.
    pub(super) const fn fill(fill: &'a str) -> Self {
        Self {
            fill,
            stroke: "none",
            width: 0.0,
        }
    }

    /// A line without an inside.
    pub(super) const fn line(stroke: &'a str, width: f64) -> Self {
        Self {
            fill: "none",
            stroke,
            width,
        }
    }
}

/// Where a text stands against its point.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Anchor {
    Start,
    Middle,
    End,
}

/// A text: size in pixels.
#[derive(Debug, Clone, Copy)]
pub(super) struct Style {
    pub(super) size: f64,
    pub(super) anchor: Anchor,
    pub(super) bold: bool,
    pub(super) colour: &'static str,
}

impl Style {
    /// Text of a size that begins at its point.
    pub(super) const fn new(size: f64) -> Self {
        Self {
            size,
            anchor: Anchor::Start,
            bold: false,
            colour: INK,
        }
    }

    pub(super) const fn note(size: f64) -> Self {
        Self {
            colour: NOTE,
            ..Self::new(size)
        }
    }

    pub(super) const fn bold(self) -> Self {
        Self { bold: true, ..self }
    }

    pub(super) const fn at(self, anchor: Anchor) -> Self {
        Self { anchor, ..self }
    }
}

/// A picture as it grows: origin at the upper left, x to the right, y down, pixels.
#[derive(Debug)]
pub(super) struct Svg {
    body: String,
}

impl Svg {
    /// A white picture; the title is read out by screen readers.
    pub(super) fn new(width: f64, height: f64, title: &str) -> Self {
        let mut svg = Self {
            body: format!(
                "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{width}\" height=\"{height}\" \
                 viewBox=\"0 0 {width} {height}\" role=\"img\" font-family=\"{FONTS}\">\n<title>{}</title>\n",
                escaped(title)
            ),
        };
        svg.rect([0.0, 0.0, width, height], Paint::fill("#ffffff"));
        svg
    }

    /// Markup as it is.
    pub(super) fn raw(&mut self, markup: &str) {
        self.body.push_str(markup);
        self.body.push('\n');
    }

    /// A rectangle: left, top, width, height.
    pub(super) fn rect(&mut self, [x, y, width, height]: [f64; 4], paint: Paint) {
        let (x, y) = (short(x), short(y));
        let (width, height) = (short(width), short(height));
        self.element(
            &format!("rect x=\"{x}\" y=\"{y}\" width=\"{width}\" height=\"{height}\""),
            paint,
            "",
        );
    }

    /// A path by its data.
    pub(super) fn path(&mut self, data: &str, paint: Paint) {
        self.path_with(data, paint, "");
    }

    /// A path with further attributes.
    pub(super) fn path_with(&mut self, data: &str, paint: Paint, more: &str) {
        self.element(&format!("path d=\"{data}\""), paint, more);
    }

    /// A straight line.
    pub(super) fn line(&mut self, from: [f64; 2], to: [f64; 2], paint: Paint) {
        self.path(&polyline(&[from, to], false), paint);
    }

    /// A filled or open circle.
    pub(super) fn circle(&mut self, centre: [f64; 2], radius: f64, paint: Paint) {
        let (x, y) = (short(centre[0]), short(centre[1]));
        self.element(
            &format!("circle cx=\"{x}\" cy=\"{y}\" r=\"{}\"", short(radius)),
            paint,
            "",
        );
    }

    fn element(&mut self, element: &str, paint: Paint, more: &str) {
        // Writing to a string cannot fail.
        let _ = write!(self.body, "<{element} fill=\"{}\"", paint.fill);
        if paint.stroke != "none" {
            let width = short(paint.width);
            let _ = write!(
                self.body,
                " stroke=\"{}\" stroke-width=\"{width}\" stroke-linejoin=\"round\"",
                paint.stroke
            );
        }
        let _ = writeln!(self.body, "{more}/>");
    }

    /// A text with its foot at a point.
    pub(super) fn text(&mut self, at: [f64; 2], text: &str, style: Style) {
        self.text_with(at, text, style, "");
    }

    /// A text that runs upwards, centred at a point.
    pub(super) fn upright(&mut self, [x, y]: [f64; 2], text: &str, style: Style) {
        let turn = format!(" transform=\"rotate(-90 {} {})\"", short(x), short(y));
        self.text_with([x, y], text, style.at(Anchor::Middle), &turn);
    }

    fn text_with(&mut self, [x, y]: [f64; 2], text: &str, style: Style, more: &str) {
        let anchor = match style.anchor {
            Anchor::Start => "start",
            Anchor::Middle => "middle",
            Anchor::End => "end",
        };
        let weight = if style.bold {
            " font-weight=\"bold\""
        } else {
            ""
        };
        let _ = writeln!(
            self.body,
            "<text x=\"{}\" y=\"{}\" font-size=\"{}\" text-anchor=\"{anchor}\" fill=\"{}\"{weight}{more}>{}</text>",
            short(x),
            short(y),
            short(style.size),
            style.colour,
            escaped(text)
        );
    }

    /// The whole picture.
    pub(super) fn finish(mut self) -> String {
        self.body.push_str("</svg>\n");
        self.body
    }
}

/// Path data of points, closed or open; hundredths of a pixel.
pub(super) fn polyline(points: &[[f64; 2]], closed: bool) -> String {
    let mut data = String::with_capacity(points.len() * 12);
    for (k, [x, y]) in points.iter().enumerate() {
        let letter = if k == 0 { 'M' } else { 'L' };
        let _ = write!(data, "{letter}{} {}", short(*x), short(*y));
    }
    if closed {
        data.push('Z');
    }
    data
}

/// A number of pixels to a hundredth.
pub(super) fn short(value: f64) -> f64 {
    let rounded = (value * 100.0).round() / 100.0;
    // No "-0".
    rounded + 0.0
}

/// Text for markup.
pub(super) fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '&' => out.push_str("&amp;"),
            '<' => out.push_str("&lt;"),
            '>' => out.push_str("&gt;"),
            '"' => out.push_str("&quot;"),
            // XML 1.0 has no other control characters.
            c if c.is_control() => out.push(' '),
            c => out.push(c),
        }
    }
    out
}

/// Width that a text takes, roughly: 0.56 of its size for each character (measured on the font that comes with the program).
pub(super) fn width_of(text: &str, size: f64) -> f64 {
    0.56 * size * text.chars().count() as f64
}

/// The text cut to a width.
pub(super) fn fitted(text: &str, size: f64, width: f64) -> String {
    if width_of(text, size) <= width {
        return text.to_string();
    }
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a width of a picture"
    )]
    let most = (width / (0.56 * size)).floor().max(1.0) as usize;
    let mut short: String = text.chars().take(most.saturating_sub(1)).collect();
    short.push('…');
    short
}
