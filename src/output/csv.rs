//! Comma-separated results: UTF-8, LF, empty for a missing value, shortest numbers that read back the same.

use zmij::Buffer;

use super::reason::Reasons;
use crate::check::Test;
use crate::integral::{Cause, EstimateBlock, Group, RunStatistics, Sense};
use crate::pipeline::{Outcome, Setup};
use crate::polygon::StationPolygon;
use crate::station::Network;

/// Header of `polygons.csv`: the first eleven columns are the contract of the format.
const POLYGON_COLUMNS: &str = "time,polygon,stations,area_km2,vorticity,vorticity_se,divergence,divergence_se,\
                               planetary_vorticity,absolute_vorticity,flag,sense,age_s,\
                               vorticity_se_instrument,vorticity_se_sampling,vorticity_se_timing,\
                               divergence_se_instrument,divergence_se_sampling,divergence_se_timing,\
                               vorticity_significant,divergence_significant,reason\n";

/// Writes rows of `polygons.csv`, one for each time and polygon.
pub struct PolygonRows {
    /// For each polygon the text of its fixed columns: polygon, stations and area with commas around.
    fixed: Vec<String>,
    planetary: Vec<f64>,
    planetary_text: Vec<String>,
    network: Network,
    reasons: Reasons,
    reason_words: Vec<String>,
    complete: bool,
}

impl PolygonRows {
    /// Prepares the columns that do not change with time.
    #[must_use]
    pub fn new(setup: &Setup) -> Self {
        let reasons = Reasons::new(&setup.network);
        let polygons = setup.built.polygons.iter();
        let fixed = polygons.map(|p| fixed(p, &setup.network)).collect();
        Self {
            fixed,
            planetary_text: setup.planetary.iter().map(|&f| number(f)).collect(),
            planetary: setup.planetary.clone(),
            network: setup.network.clone(),
            reason_words: reasons.words().iter().map(|w| quoted(w)).collect(),
            reasons,
            complete: setup.settings.errors.complete,
        }
    }

    /// The header line.
    #[must_use]
    pub fn header() -> &'static str {
        POLYGON_COLUMNS
    }

    /// The rows of a block, by time, then polygon.
    #[must_use]
    pub fn encode(&self, block: &EstimateBlock) -> Vec<u8> {
        let n = block.times.len();
        let mut out = Vec::with_capacity(n * self.fixed.len() * 192);
        let mut buffer = Buffer::new();
        let extra: Vec<(String, f64, String)> = block
            .extra
            .iter()
            .map(|extra| {
                let fixed = fixed(&extra.polygon, &self.network);
                (fixed, extra.planetary, number(extra.planetary))
            })
            .collect();
        let common = self.fixed.iter().zip(&self.planetary);
        let common = common.zip(&self.planetary_text);
        let polygons: Vec<(&str, f64, &str)> = common
            .map(|((fixed, &f), text)| (fixed.as_str(), f, text.as_str()))
            .chain(
                extra
                    .iter()
                    .map(|(fixed, f, text)| (fixed.as_str(), *f, text.as_str())),
            )
            .collect();
        for (t, time) in block.times.iter().enumerate() {
            let time = time.to_string();
            for (p, &(fixed, planetary, planetary_text)) in polygons.iter().enumerate() {
                let cell = p * n + t;
                if !block.stands(cell) {
                    continue;
                }
                out.extend_from_slice(time.as_bytes());
                out.extend_from_slice(fixed.as_bytes());
                let missing = !block.flag[cell].is_usable();
                for value in [
                    block.vorticity[cell],
                    block.vorticity_se[cell],
                    block.divergence[cell],
                    block.divergence_se[cell],
                ] {
                    if !missing {
                        out.extend_from_slice(buffer.format(value).as_bytes());
                    }
                    out.push(b',');
                }
                out.extend_from_slice(planetary_text.as_bytes());
                out.push(b',');
                let sense = if missing {
                    None
                } else {
                    let absolute = block.vorticity[cell] + planetary;
                    out.extend_from_slice(buffer.format(absolute).as_bytes());
                    Sense::of(block.vorticity[cell], planetary)
                };
                out.push(b',');
                out.push(b'0' + block.flag[cell].value());
                out.push(b',');
                out.extend_from_slice(sense.map_or("", Sense::name).as_bytes());
                out.push(b',');
                if !missing {
                    out.extend_from_slice(buffer.format(block.age[cell]).as_bytes());
                }
                self.errors(&mut out, &mut buffer, block, cell);
                out.push(b',');
                if let Some(Some(cause)) = block.causes.get(cell) {
                    let words = &self.reason_words[self.reasons.index(*cause)];
                    out.extend_from_slice(words.as_bytes());
                }
                out.push(b'\n');
            }
        }
        out
    }
}

impl PolygonRows {
    /// The parts of the errors, and what differs from zero.
    fn errors(&self, out: &mut Vec<u8>, buffer: &mut Buffer, block: &EstimateBlock, cell: usize) {
        let missing = !block.flag[cell].is_usable();
        for parts in [&block.budget.vorticity, &block.budget.divergence] {
            for (part, asked_for) in [
                (&parts.instrument, true),
                (&parts.sampling, self.complete),
                (&parts.timing, self.complete),
            ] {
                out.push(b',');
                if asked_for && !missing {
                    #[expect(
                        clippy::cast_possible_truncation,
                        reason = "seven digits are enough for a part of an error"
                    )]
                    let part = part[cell] as f32;
                    out.extend_from_slice(buffer.format(part).as_bytes());
                }
            }
        }
        for significant in &block.significant {
            out.push(b',');
            if !missing {
                out.push(b'0' + u8::from(significant[cell]));
            }
        }
    }
}

/// The fixed columns of a polygon: its name, stations and area with commas around.
fn fixed(polygon: &StationPolygon, network: &Network) -> String {
    format!(
        ",{},{},{},",
        quoted(&polygon.id),
        quoted(&station_list(polygon, network)),
        number(polygon.shape.area / 1e6)
    )
}

/// Station identifiers of a polygon: counter-clockwise, separated by spaces; further paths of a region after `|`.
pub(super) fn station_list(polygon: &StationPolygon, network: &Network) -> String {
    let rings: Vec<String> = polygon
        .outline
        .iter()
        .map(|ring| {
            let ids: Vec<&str> = ring
                .iter()
                .map(|&s| network.stations()[s].id.as_str())
                .collect();
            ids.join(" ")
        })
        .collect();
    rings.join(" | ")
}

/// A field, quoted where it must be (RFC 4180).
pub(crate) fn quoted(text: &str) -> String {
    if text.contains([',', '"', '\n', '\r']) {
        format!("\"{}\"", text.replace('"', "\"\""))
    } else {
        text.to_string()
    }
}

pub(super) fn number(value: f64) -> String {
    Buffer::new().format(value).to_string()
}

pub(super) fn optional(value: Option<f64>) -> String {
    value.map_or_else(String::new, number)
}

/// `stations.csv`: the health of each station. Speeds in m/s, direction in degrees.
#[must_use]
pub fn stations_csv(setup: &Setup, outcome: &Outcome) -> String {
    let mut out = String::from(
        "station,name,latitude,longitude,elevation_m,reports,calm,no_direction,no_speed,suspect,failed,used,values,\
         availability,first_report,last_report,mean_speed,vector_mean_speed,vector_mean_direction,interval_s,gaps,direction_step_deg,speed_step,speed_step_unit,height_factor,\
         pass_share,suspect_share,fail_share,neighbour_suspect,neighbour_failed,\
         mean_offset_u_m_s,mean_offset_v_m_s,mean_offset_se_m_s,mean_offset_explains\n",
    );
    let times = outcome.period.times.max(1) as f64;
    for (k, station) in setup.network.stations().iter().enumerate() {
        let reading = &outcome.reading.stations[k];
        let (first, last) = reading
            .period
            .map_or_else(Default::default, |(a, b)| (a.to_string(), b.to_string()));
        let mean = reading.vector_mean;
        let speed_step = reading.rounding.speed;
        let [pass, suspect, fail] = reading.shares();
        let (by_neighbours, offset) = (
            reading.of_test(Test::Neighbour),
            outcome.attributions.iter().find(|a| a.station == k),
        );
        let share = |share: f64| optional((reading.reports > 0).then_some(share));
        let fields = [
            quoted(&station.id),
            quoted(&station.name),
            number(station.position.latitude()),
            number(station.position.longitude()),
            optional(station.elevation),
            reading.reports.to_string(),
            reading.calm.to_string(),
            reading.no_direction.to_string(),
            reading.no_speed.to_string(),
            reading.suspect.to_string(),
            reading.failed.to_string(),
            outcome.used[k].to_string(),
            outcome.values[k].to_string(),
            number(outcome.values[k] as f64 / times),
            first,
            last,
            optional(reading.mean_speed),
            optional(mean.map(crate::units::Wind::speed)),
            optional(
                mean.and_then(crate::units::Wind::from_direction)
                    .map(crate::units::FromDirection::degrees),
            ),
            optional(reading.interval.map(|i| i as f64 * 1e-6)),
            reading.gaps.to_string(),
            optional(reading.rounding.direction),
            optional(speed_step.map(|s| s.count)),
            speed_step.map_or("", |s| s.unit.symbol()).to_string(),
            optional(outcome.height_factors[k]),
            share(pass),
            share(suspect),
            share(fail),
            by_neighbours.0.to_string(),
            by_neighbours.1.to_string(),
            optional(offset.map(|a| a.offset.u)),
            optional(offset.map(|a| a.offset.v)),
            optional(offset.map(|a| a.error)),
            optional(offset.map(|a| a.explained)),
        ];
        out.push_str(&fields.join(","));
        out.push('\n');
    }
    out
}

/// `polygon_summary.csv`: what the values of each polygon come to, 1/s.
#[must_use]
pub fn summary_csv(setup: &Setup, outcome: &Outcome) -> String {
    let mut out = String::from("polygon");
    out.push_str(&statistics_columns());
    for cause in Cause::NAMES {
        out.push(',');
        out.push_str(cause);
    }
    out.push('\n');
    let causes = Some(outcome.causes.0.as_slice());
    statistics_rows(&mut out, setup, outcome, &outcome.statistics, causes, "");
    out
}

/// `polygon_means.csv`: the same for each hour, day, month or period.
#[must_use]
pub fn means_csv(setup: &Setup, outcome: &Outcome) -> String {
    let mut out = format!("group,polygon{}\n", statistics_columns());
    for (&group, statistics) in &outcome.means.0 {
        let name = group_name(setup, group);
        statistics_rows(&mut out, setup, outcome, statistics, None, &(name + ","));
    }
    out
}

/// A group of times as it is written.
pub(super) fn group_name(setup: &Setup, group: Group) -> String {
    match group {
        Group::Hour(hour) => format!("{hour:02}"),
        Group::Month(year, month) => format!("{year:04}-{month:02}"),
        Group::Day(year, month, day) => format!("{year:04}-{month:02}-{day:02}"),
        Group::Period(k) => {
            let period = setup.settings.means.periods.get(k);
            period.map_or_else(String::new, |p| quoted(&p.name))
        }
    }
}

fn statistics_columns() -> String {
    let mut out = String::new();
    for quantity in ["vorticity", "divergence"] {
        for column in [
            "values",
            "mean",
            "mean_se",
            "sd",
            "min",
            "min_time",
            "max",
            "max_time",
            "significant_share",
        ] {
            out.push(',');
            out.push_str(quantity);
            out.push('_');
            out.push_str(column);
        }
    }
    out
}

/// A row for each polygon, each after `before`, with the counts of its causes where they are given.
fn statistics_rows(
    out: &mut String,
    setup: &Setup,
    outcome: &Outcome,
    statistics: &RunStatistics,
    causes: Option<&[[u64; 5]]>,
    before: &str,
) {
    for (p, ((polygon, vorticity), divergence)) in setup
        .built
        .polygons
        .iter()
        .chain(outcome.extra.iter().map(|extra| &extra.polygon))
        .zip(&statistics.vorticity)
        .zip(&statistics.divergence)
        .enumerate()
    {
        out.push_str(before);
        out.push_str(&quoted(&polygon.id));
        for s in [vorticity, divergence] {
            let there = |value: f64| optional((s.count > 0).then_some(value));
            let time = |peak: Option<(f64, crate::time::Time)>| {
                peak.map_or_else(String::new, |p| p.1.to_string())
            };
            for field in [
                s.count.to_string(),
                there(s.mean),
                optional(s.mean_error()),
                optional(s.standard_deviation()),
                optional(s.smallest.map(|p| p.0)),
                time(s.smallest),
                optional(s.largest.map(|p| p.0)),
                time(s.largest),
                there(s.significant as f64 / s.count.max(1) as f64),
            ] {
                out.push(',');
                out.push_str(&field);
            }
        }
        for n in causes
            .and_then(|causes| causes.get(p))
            .into_iter()
            .flatten()
        {
            out.push(',');
            out.push_str(&n.to_string());
        }
        out.push('\n');
    }
}

/// `mesh.csv`: shape and use of every polygon, without any report.
#[must_use]
pub fn mesh_csv(setup: &Setup) -> String {
    let mut out = String::from(
        "polygon,kind,stations,area_km2,perimeter_km,longest_edge_km,smallest_angle_deg,shape_quality,\
         noise_factor_per_m,elevation_spread_m,slope,planetary_vorticity,excluded\n",
    );
    let used = setup
        .built
        .polygons
        .iter()
        .zip(&setup.planetary)
        .map(|(p, &f)| (p, Some(f), String::new()));
    let excluded = setup
        .built
        .excluded
        .iter()
        .map(|(p, why)| (p, None, why.to_string()));
    for (polygon, planetary, excluded) in used.chain(excluded) {
        let shape = &polygon.shape;
        let fields = [
            quoted(&polygon.id),
            polygon.kind.name().to_string(),
            quoted(&station_list(polygon, &setup.network)),
            number(shape.area / 1e6),
            number(shape.perimeter / 1e3),
            number(shape.longest_edge / 1e3),
            number(shape.smallest_angle),
            number(shape.quality),
            number(shape.noise_factor),
            optional(shape.elevation_spread),
            optional(shape.slope),
            optional(planetary),
            quoted(&excluded),
        ];
        out.push_str(&fields.join(","));
        out.push('\n');
    }
    out
}
