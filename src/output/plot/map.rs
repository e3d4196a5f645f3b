//! The map of one quantity at one time.

use super::axis::{label, plain_time};
use super::barb::{barb, of_wind};
use super::base::{LABEL, MapBase, around, is_triangle, label_texts};
use super::colour::{NO_VALUE, Scale};
use super::svg::{Anchor, GRID, INK, NOTE, Paint, Style, Svg, fitted, short};
use super::{COAST, LAND, Quantity, SEA, footnote, height_of};
use crate::output::CAUTION;
use crate::output::frames::Frame;
use crate::pipeline::Setup;

const WIDTH: f64 = 1000.0;
const MARGIN: f64 = 24.0;
/// Above the map: title and time.
const HEAD: f64 = 78.0;
/// Below it: colours and signs.
const FOOT: f64 = 88.0;
/// Lines that mark values which cannot be told from zero.
pub(crate) const HATCH: &str = "<pattern id=\"hatch\" width=\"7\" height=\"7\" patternUnits=\"userSpaceOnUse\" \
     patternTransform=\"rotate(45)\"><path d=\"M0 0V7\" stroke=\"#22272e\" stroke-opacity=\"0.32\" stroke-width=\"1.6\"/></pattern>";

/// The map of a quantity at the time of a frame, as SVG.
#[must_use]
pub fn map_picture(setup: &Setup, frame: &Frame, quantity: Quantity) -> String {
    let inside = [MARGIN, HEAD, WIDTH - 2.0 * MARGIN, 760.0];
    let base = MapBase::new(setup, inside, 420.0);
    let [left, top, width, height] = base.inside;
    let title = format!("{} of {}", quantity.title(), setup.settings.name);
    let foot = FOOT + height_of(CAUTION, WIDTH - 2.0 * MARGIN) + 6.0;
    let mut svg = Svg::new(WIDTH, top + height + foot, &title);
    let heading = fitted(&setup.settings.name, 22.0, width - 220.0);
    svg.text([left, 36.0], &heading, Style::new(22.0).bold());
    let below = format!("{}, {}", quantity.title(), plain_time(frame.time));
    svg.text([left, 61.0], &below, Style::new(16.0));

    svg.raw(&format!(
        "<defs>{HATCH}<clipPath id=\"frame\"><rect x=\"{left}\" y=\"{top}\" width=\"{width}\" height=\"{}\"/></clipPath></defs>",
        short(height)
    ));
    svg.raw("<g clip-path=\"url(#frame)\">");
    svg.rect(base.inside, Paint::fill(SEA));
    let coast = Paint {
        fill: LAND,
        stroke: COAST,
        width: 0.8,
    };
    svg.path_with(&base.land, coast, " fill-rule=\"evenodd\"");
    let scale = polygons(&mut svg, setup, &base, frame, quantity);
    stations(&mut svg, setup, &base, frame);
    scale_bar(&mut svg, &base);
    svg.raw("</g>");
    svg.rect(base.inside, Paint::line(NOTE, 1.0));
    legend(&mut svg, top + height, scale, quantity);
    svg.finish()
}

fn polygons(
    svg: &mut Svg,
    setup: &Setup,
    base: &MapBase,
    frame: &Frame,
    quantity: Quantity,
) -> Scale {
    let q = quantity.index();
    let cells = || setup.built.polygons.iter().zip(&frame.cells);
    let there = cells().filter(|(_, cell)| cell.flag.is_usable());
    let scale = Scale::of(there.map(|(_, cell)| cell.value[q]));
    for path in &base.excluded {
        svg.path_with(path, Paint::fill(NO_VALUE), " fill-opacity=\"0.55\"");
    }
    for ((polygon, cell), outline) in cells().zip(&base.polygons) {
        let usable = cell.flag.is_usable();
        let colour = if usable {
            scale.colour(cell.value[q])
        } else {
            NO_VALUE.to_string()
        };
        if outline.filled {
            let paint = Paint {
                fill: &colour,
                stroke: "#ffffff",
                width: 0.8,
            };
            svg.path_with(&outline.path, paint, " fill-rule=\"evenodd\"");
            if usable && !cell.significant[q] {
                svg.path(&outline.path, Paint::fill("url(#hatch)"));
            }
        } else if !is_triangle(polygon) {
            svg.path_with(
                &outline.path,
                Paint::line(NOTE, 1.4),
                " stroke-dasharray=\"6 4\"",
            );
        }
    }
    scale
}

fn stations(svg: &mut Svg, setup: &Setup, base: &MapBase, frame: &Frame) {
    let mut taken = Vec::new();
    for (spot, (wind, _)) in base.stations.iter().zip(&frame.winds) {
        let [x, y] = spot.at;
        let Some(wind) = wind else {
            svg.circle([x, y], 3.4, Paint::line(INK, 1.2));
            continue;
        };
        let (halves, direction) = of_wind(*wind);
        let turn = direction + spot.north;
        let data = barb(halves, base.southern);
        let place = format!(
            " transform=\"translate({} {}) rotate({})\"",
            short(x),
            short(y),
            short(turn)
        );
        let paint = Paint {
            fill: if halves >= 10 { INK } else { "none" },
            stroke: INK,
            width: 1.3,
        };
        // Seen on dark polygons too.
        let halo = format!("{place} stroke-opacity=\"0.75\"");
        svg.path_with(&data, Paint::line("#ffffff", 3.6), &halo);
        svg.path_with(&data, paint, &place);
        svg.circle([x, y], 2.4, Paint::fill(INK));
        let (sin, cos) = turn.to_radians().sin_cos();
        for along in [8.0, 16.0, 24.0] {
            taken.push(around([x + along * sin, y - along * cos], 6.0));
        }
    }
    let texts = label_texts(setup);
    for (foot, text) in base.labels(&texts, &taken).into_iter().zip(&texts) {
        if let Some([x, y]) = foot {
            halo(svg, [x, y], text);
            svg.text([x, y], text, Style::new(LABEL));
        }
    }
}

/// The same text as a white shadow.
fn halo(svg: &mut Svg, [x, y]: [f64; 2], text: &str) {
    svg.raw(&format!(
        "<text x=\"{}\" y=\"{}\" font-size=\"{LABEL}\" fill=\"none\" stroke=\"#ffffff\" stroke-width=\"2.6\" \
         stroke-opacity=\"0.8\" stroke-linejoin=\"round\">{}</text>",
        short(x),
        short(y),
        super::svg::escaped(text)
    ));
}

/// Scale bar and north, in the lower left corner.
fn scale_bar(svg: &mut Svg, base: &MapBase) {
    let [left, top, _, height] = base.inside;
    let (length, text) = &base.bar;
    let (x, y) = (left + 14.0, top + height - 14.0);
    svg.rect(
        [left + 6.0, y - 24.0, length + 58.0, 32.0],
        Paint::fill("#ffffffd9"),
    );
    let data = format!(
        "M{} {}V{}H{}V{}",
        short(x),
        short(y - 6.0),
        short(y),
        short(x + length),
        short(y - 6.0)
    );
    svg.path(&data, Paint::line(INK, 1.6));
    let middle = Style::new(11.0).at(Anchor::Middle);
    svg.text([x + 0.5 * length, y - 9.0], text, middle);
    let arrow = format!(
        " transform=\"translate({} {}) rotate({})\"",
        short(x + length + 26.0),
        short(y - 8.0),
        short(base.north)
    );
    svg.path_with("M0 -12L5 6L0 2.5L-5 6Z", Paint::fill(INK), &arrow);
    svg.text(
        [x + length + 38.0, y - 4.0],
        "N",
        Style::new(11.0).at(Anchor::Middle),
    );
}

fn legend(svg: &mut Svg, bottom: f64, scale: Scale, quantity: Quantity) {
    let (x, y, width) = (MARGIN, bottom + 24.0, 380.0);
    let steps = 76;
    for k in 0..steps {
        let value = scale.limit * ((f64::from(k) + 0.5) / f64::from(steps) * 2.0 - 1.0);
        let step = width / f64::from(steps);
        // Half a pixel more, so that no seam shows.
        let part = [x + f64::from(k) * step, y, step + 0.5, 14.0];
        svg.rect(part, Paint::fill(&scale.colour(value)));
    }
    svg.rect([x, y, width, 14.0], Paint::line(NOTE, 0.8));
    let tick = Style::new(12.0).at(Anchor::Middle);
    for part in [-1.0, -0.5, 0.0, 0.5, 1.0] {
        let at = x + 0.5 * width * (1.0 + part);
        svg.line([at, y + 14.0], [at, y + 18.0], Paint::line(NOTE, 0.8));
        let value = 1e5 * scale.limit * part;
        let text = label(value, 0.5e5 * scale.limit);
        svg.text([at, y + 31.0], &text, tick);
    }
    svg.text([x, y + 48.0], quantity.axis(), Style::note(12.0));

    let signs = x + width + 34.0;
    let box_at = |row: f64| [signs, y - 4.0 + 20.0 * row, 22.0, 14.0];
    svg.rect(box_at(0.0), Paint::fill("#f2b878"));
    svg.rect(box_at(0.0), Paint::fill("url(#hatch)"));
    svg.rect(box_at(1.0), Paint::fill(NO_VALUE));
    svg.text(
        [signs + 30.0, y + 7.0],
        "hatched: not distinguishable from zero",
        Style::new(12.0),
    );
    svg.text(
        [signs + 30.0, y + 27.0],
        "grey: no estimate",
        Style::new(12.0),
    );
    svg.text(
        [signs, y + 48.0],
        "open circle: no wind; dashed: ring or region",
        Style::note(12.0),
    );
    let barbs = signs + 300.0;
    for (k, (halves, text)) in [(1, "5 kt"), (2, "10 kt"), (10, "50 kt")]
        .iter()
        .enumerate()
    {
        let at = barbs + 68.0 * k as f64;
        let place = format!(" transform=\"translate({at} {}) rotate(90)\"", y + 8.0);
        let paint = Paint {
            fill: if *halves >= 10 { INK } else { "none" },
            stroke: INK,
            width: 1.3,
        };
        svg.path_with(&barb(*halves, false), paint, &place);
        svg.text([at, y + 31.0], text, Style::new(12.0));
    }
    svg.line(
        [MARGIN, y + 59.0],
        [WIDTH - MARGIN, y + 59.0],
        Paint::line(GRID, 1.0),
    );
    footnote(svg, [MARGIN, y + 76.0], CAUTION, WIDTH - 2.0 * MARGIN);
}
