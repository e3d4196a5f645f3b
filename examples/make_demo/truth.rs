//! What was planted, and the true area means of a few triangles, as JSON.

use serde_json::{Value, json};

use crate::field::{WindField, line_reference, vortex_centre};
use crate::network::{CENTRE_LATITUDE, CENTRE_LONGITUDE, LocalPlane, Point, STATIONS, Station};
use crate::reports::Reports;
use crate::scenario::{self as day, rfc3339};

/// Describes the scenario that was written, with sorted keys.
pub fn describe(
    seed: u64,
    weather: bool,
    faults: bool,
    field: &WindField,
    plane: &LocalPlane,
    reports: &Reports,
) -> Value {
    let mut truth = json!({
        "scenario": "Ostrin Lake mesonet, invented",
        "seed": seed,
        "conventions": {
            "wind_direction": "direction the wind blows from, degrees clockwise from true north",
            "heading": "direction of motion, degrees clockwise from true north",
            "vorticity": "positive counter-clockwise seen from above",
            "truth_polygons": "means over the triangle with straight edges in the local plane",
        },
        "local_plane": {
            "kind": "equirectangular: x = (longitude - centre) * metres per degree, y likewise from latitude; \
                     metres per degree of WGS 84 at the centre",
            "centre_latitude_deg": CENTRE_LATITUDE,
            "centre_longitude_deg": CENTRE_LONGITUDE,
            "metres_per_degree_longitude": rounded(plane.metres_per_degree_east, 3),
            "metres_per_degree_latitude": rounded(plane.metres_per_degree_north, 3),
        },
        "mean_flow": mean_flow(),
        "turbulence": turbulence(),
        "noise": {
            "speed_sd_m_s": day::SPEED_NOISE,
            "direction_sd_deg": day::DIRECTION_NOISE,
            "speed_step_m_s": 0.1,
            "direction_step_deg": 1,
            "calm_below_m_s": day::CALM_BELOW,
        },
        "reports": {
            "start": rfc3339(0),
            "end": rfc3339(day::LAST_MINUTE),
            "interval_minutes": day::REPORT_INTERVAL_MINUTES,
            "stations": STATIONS.len(),
            "rows": reports.rows,
            "calm_rows": reports.calm,
        },
        "faults": if faults { planted_faults() } else { json!([]) },
        "dropouts": {
            "lost_rows": reports.lost,
            "empty_rows": reports.empty,
            "silent_rows": reports.silent,
        },
        "truth_polygons": triangles(field, plane),
    });
    if weather {
        truth["line"] = line(plane);
        truth["vortex"] = vortex(plane);
    }
    if faults {
        truth["dropouts"]["silent_station"] = json!({
            "station": day::SILENT_STATION,
            "from": rfc3339(day::SILENT_START),
            "to": rfc3339(day::SILENT_END),
        });
    }
    truth.sort_all_objects();
    truth
}

fn mean_flow() -> Value {
    json!({
        "speed_m_s": day::MEAN_SPEED,
        "direction_deg": day::MEAN_DIRECTION,
        "turn_deg": day::MEAN_TURN,
        "turn": "direction = direction_deg + turn_deg * sin(2 pi t / 24 h)",
        "u_x_per_s": day::MEAN_U_X,
        "u_y_per_s": day::MEAN_U_Y,
        "v_x_per_s": day::MEAN_V_X,
        "v_y_per_s": day::MEAN_V_Y,
        "vorticity_per_s": rounded(day::MEAN_V_X - day::MEAN_U_Y, 12),
        "divergence_per_s": rounded(day::MEAN_U_X + day::MEAN_V_Y, 12),
    })
}

fn line(plane: &LocalPlane) -> Value {
    let (latitude, longitude) = position(plane, line_reference(60.0 * f64::from(day::LINE_START)));
    json!({
        "start": rfc3339(day::LINE_START),
        "end": rfc3339(day::LINE_END),
        "ramp_minutes": day::LINE_RAMP,
        "reference_latitude_deg": latitude,
        "reference_longitude_deg": longitude,
        "reference_time": rfc3339(day::LINE_START),
        "heading_deg": day::LINE_HEADING,
        "speed_m_s": day::LINE_SPEED,
        "normal_jump_m_s": day::LINE_JUMP,
        "half_width_km": day::LINE_HALF_WIDTH_KM,
        "profile": "component along heading_deg: -normal_jump_m_s / 2 * tanh(distance ahead / half_width_km)",
    })
}

fn vortex(plane: &LocalPlane) -> Value {
    let track = |minute: u32| position(plane, vortex_centre(60.0 * f64::from(minute)));
    let (start_latitude, start_longitude) = track(day::VORTEX_START);
    let (end_latitude, end_longitude) = track(day::VORTEX_END);
    json!({
        "start": rfc3339(day::VORTEX_START),
        "start_latitude_deg": start_latitude,
        "start_longitude_deg": start_longitude,
        "end": rfc3339(day::VORTEX_END),
        "end_latitude_deg": end_latitude,
        "end_longitude_deg": end_longitude,
        "ramp_minutes": day::VORTEX_RAMP,
        "heading_deg": day::VORTEX_HEADING,
        "speed_m_s": day::VORTEX_SPEED,
        "core_radius_km": day::VORTEX_RADIUS_KM,
        "maximum_wind_m_s": day::VORTEX_MAXIMUM_WIND,
        "sense": "counter-clockwise",
        "profile": "Lamb-Oseen",
    })
}

fn turbulence() -> Value {
    json!({
        "modes": day::MODES,
        "shortest_wavelength_km": day::SHORTEST_WAVE_KM,
        "longest_wavelength_km": day::LONGEST_WAVE_KM,
        "spectrum_exponent": rounded(day::SPECTRUM_EXPONENT, 6),
        "solenoidal_share": 0.5,
        "component_rms_m_s": day::TURBULENCE_RMS,
        "drift": "with the mean flow at its middle direction",
    })
}

fn planted_faults() -> Value {
    json!([
        {
            "station": day::VANE_STATION,
            "kind": "vane turned",
            "from": rfc3339(0),
            "to": rfc3339(day::LAST_MINUTE),
            "reported_minus_true_deg": day::VANE_OFFSET,
        },
        {
            "station": day::KNOTS_STATION,
            "kind": "knots in columns of m/s",
            "from": rfc3339(0),
            "to": rfc3339(day::LAST_MINUTE),
            "reported_over_true": rounded(day::KNOTS_PER_M_S, 6),
        },
        {
            "station": day::STUCK_STATION,
            "kind": "stuck: direction, speed and gust repeated",
            "from": rfc3339(day::STUCK_START),
            "to": rfc3339(day::STUCK_END),
            "duration_minutes": day::STUCK_END - day::STUCK_START,
        },
    ])
}

/// True means of all chosen triangles at all chosen times.
fn triangles(field: &WindField, plane: &LocalPlane) -> Value {
    let mut list = Vec::new();
    for ids in day::TRUTH_TRIANGLES {
        let mut corners: Vec<&Station> = STATIONS.iter().filter(|s| ids.contains(&s.id)).collect();
        let mut ring: Vec<Point> = corners.iter().map(|s| plane.point(s)).collect();
        if signed_area(&ring) < 0.0 {
            corners.reverse();
            ring.reverse();
        }
        let stations: Vec<&str> = corners.iter().map(|s| s.id).collect();
        for minute in day::TRUTH_MINUTES {
            let (vorticity, divergence) = area_means(field, &ring, 60.0 * f64::from(minute));
            list.push(json!({
                "stations": stations,
                "time": rfc3339(minute),
                "vorticity_per_s": rounded(vorticity, 11),
                "divergence_per_s": rounded(divergence, 11),
            }));
        }
    }
    Value::Array(list)
}

/// Area of a ring in m², positive when counter-clockwise.
fn signed_area(ring: &[Point]) -> f64 {
    edges(ring)
        .map(|(a, b)| 0.5 * (a.x * b.y - b.x * a.y))
        .sum()
}

/// Edges of a closed ring, in its order.
fn edges(ring: &[Point]) -> impl Iterator<Item = (Point, Point)> {
    ring.iter()
        .copied()
        .zip(ring.iter().copied().cycle().skip(1))
}

/// Area-mean vorticity and divergence, 1/s, from circulation and outward flux along the straight edges.
///
/// Composite two-point Gauss-Legendre rule; its error is below 1e-11 1/s, which is the last digit written.
fn area_means(field: &WindField, ring: &[Point], time_s: f64) -> (f64, f64) {
    let panels = day::EDGE_POINTS / 2;
    let weight = 0.5 / f64::from(panels);
    let offset = 0.5 / 3.0_f64.sqrt();
    let (mut circulation, mut flux) = (0.0, 0.0);
    for (a, b) in edges(ring) {
        let (dx, dy) = (b.x - a.x, b.y - a.y);
        for panel in 0..panels {
            for node in [0.5 - offset, 0.5 + offset] {
                let part = (f64::from(panel) + node) / f64::from(panels);
                let point = Point {
                    x: a.x + part * dx,
                    y: a.y + part * dy,
                };
                let wind = field.wind(point, time_s);
                circulation += weight * (wind.u * dx + wind.v * dy);
                flux += weight * (wind.u * dy - wind.v * dx);
            }
        }
    }
    let area = signed_area(ring);
    (circulation / area, flux / area)
}

/// Latitude and longitude of a point, degrees, to five decimals.
fn position(plane: &LocalPlane, point: Point) -> (f64, f64) {
    let (latitude, longitude) = plane.geographic(point);
    (rounded(latitude, 5), rounded(longitude, 5))
}

/// A value rounded to a number of decimals, so that the text does not depend on the last bits.
fn rounded(value: f64, decimals: i32) -> f64 {
    let scale = 10.0_f64.powi(decimals);
    (value * scale).round() / scale
}
