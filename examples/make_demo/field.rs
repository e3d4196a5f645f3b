//! The analytic wind field: mean flow, lake-breeze line, vortex and turbulence.

use std::f64::consts::{PI, TAU};

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::StandardNormal;

use crate::network::Point;
use crate::scenario as day;

/// Stream of random numbers for the turbulence, apart from those of the sensors and of the dropouts.
const TURBULENCE_STREAM: u64 = 1;

/// Wind components, m/s.
#[derive(Clone, Copy, Default)]
pub struct Wind {
    /// Toward the east.
    pub u: f64,
    /// Toward the north.
    pub v: f64,
}

impl Wind {
    /// Adds `speed` m/s toward a heading given as its unit vector (east, north).
    fn add_toward(&mut self, speed: f64, (east, north): (f64, f64)) {
        self.u += speed * east;
        self.v += speed * north;
    }
}

/// Unit vector (east, north) toward a heading in degrees clockwise from true north.
pub fn toward(heading: f64) -> (f64, f64) {
    heading.to_radians().sin_cos()
}

/// Strength between 0 and 1 of something that lasts from `start` to `end`, all in minutes: a half cosine of length
/// `ramp` at both ends, and 1 between them.
pub fn strength(time_s: f64, start: u32, end: u32, ramp: u32) -> f64 {
    let minute = time_s / 60.0;
    let inside = (minute - f64::from(start)).min(f64::from(end) - minute);
    let part = (inside / f64::from(ramp)).clamp(0.0, 1.0);
    0.5 - 0.5 * (PI * part).cos()
}

/// Seconds from `minute` to `time_s`.
fn seconds_since(minute: u32, time_s: f64) -> f64 {
    time_s - 60.0 * f64::from(minute)
}

/// Point on the line, on its way along the heading through the network centre.
pub fn line_reference(time_s: f64) -> Point {
    let (east, north) = toward(day::LINE_HEADING);
    let distance = 1e3 * day::SHORE_KM + day::LINE_SPEED * seconds_since(day::LINE_START, time_s);
    Point {
        x: distance * east,
        y: distance * north,
    }
}

/// Centre of the vortex.
pub fn vortex_centre(time_s: f64) -> Point {
    let (east, north) = toward(day::VORTEX_HEADING);
    let distance = day::VORTEX_SPEED * seconds_since(day::VORTEX_START, time_s);
    Point {
        x: 1e3 * day::VORTEX_ORIGIN_KM.0 + distance * east,
        y: 1e3 * day::VORTEX_ORIGIN_KM.1 + distance * north,
    }
}

/// Direction of the mean flow, degrees.
pub fn mean_direction(time_s: f64) -> f64 {
    day::MEAN_DIRECTION + day::MEAN_TURN * (TAU * time_s / 86_400.0).sin()
}

/// One plane wave of the turbulence.
struct Mode {
    /// Wave vector, rad/m.
    wave_vector: (f64, f64),
    /// Unit vector of the oscillation: along the wave vector (divergent) or across it (solenoidal).
    axis: (f64, f64),
    /// Amplitude, m/s.
    amplitude: f64,
    /// Frequency for one who moves with the mean flow, rad/s.
    frequency: f64,
    /// Phase at the centre at the start of the day, rad.
    phase: f64,
}

/// The whole field of one day.
pub struct WindField {
    weather: bool,
    modes: Vec<Mode>,
}

impl WindField {
    /// The field that belongs to a seed; without `weather` it has neither line nor vortex.
    pub fn new(seed: u64, weather: bool) -> Self {
        Self {
            weather,
            modes: turbulence(seed),
        }
    }

    /// Wind at a point of the local plane, `time_s` seconds after the start of the day.
    pub fn wind(&self, point: Point, time_s: f64) -> Wind {
        let mut wind = mean_flow(point, time_s);
        if self.weather {
            add_line(&mut wind, point, time_s);
            add_vortex(&mut wind, point, time_s);
        }
        // The waves drift with the mean flow of the centre at its middle direction, which keeps the phase in closed form.
        let (east, north) = toward(day::MEAN_DIRECTION + 180.0);
        let x = point.x - day::MEAN_SPEED * east * time_s;
        let y = point.y - day::MEAN_SPEED * north * time_s;
        for mode in &self.modes {
            let (k, l) = mode.wave_vector;
            let phase = k * x + l * y - mode.frequency * time_s + mode.phase;
            wind.add_toward(mode.amplitude * phase.cos(), mode.axis);
        }
        wind
    }
}

fn mean_flow(point: Point, time_s: f64) -> Wind {
    let mut wind = Wind {
        u: day::MEAN_U_X * point.x + day::MEAN_U_Y * point.y,
        v: day::MEAN_V_X * point.x + day::MEAN_V_Y * point.y,
    };
    wind.add_toward(day::MEAN_SPEED, toward(mean_direction(time_s) + 180.0));
    wind
}

fn add_line(wind: &mut Wind, point: Point, time_s: f64) {
    let part = strength(time_s, day::LINE_START, day::LINE_END, day::LINE_RAMP);
    let normal = toward(day::LINE_HEADING);
    let reference = line_reference(time_s);
    let ahead = (point.x - reference.x) * normal.0 + (point.y - reference.y) * normal.1;
    let step = (ahead / (1e3 * day::LINE_HALF_WIDTH_KM)).tanh();
    wind.add_toward(-0.5 * day::LINE_JUMP * part * step, normal);
}

fn add_vortex(wind: &mut Wind, point: Point, time_s: f64) {
    let part = strength(time_s, day::VORTEX_START, day::VORTEX_END, day::VORTEX_RAMP);
    let centre = vortex_centre(time_s);
    let (dx, dy) = (point.x - centre.x, point.y - centre.y);
    let alpha = day::LAMB_OSEEN_ALPHA;
    let radius = 1e3 * day::VORTEX_RADIUS_KM;
    let ratio_squared = (dx * dx + dy * dy) / (radius * radius);
    // Tangential wind over radius (an angular velocity); its limit at the centre keeps the division finite.
    let shape = if ratio_squared < 1e-12 {
        alpha
    } else {
        -(-alpha * ratio_squared).exp_m1() / ratio_squared
    };
    let angular_velocity = part * day::VORTEX_MAXIMUM_WIND * (1.0 + 0.5 / alpha) * shape / radius;
    wind.u -= angular_velocity * dy;
    wind.v += angular_velocity * dx;
}

/// Draws the waves of the turbulence.
///
/// Wave numbers are spread evenly in their logarithm, one drawn in each interval, so that the energy of a wave is
/// proportional to `k E(k)`. The frequency in the moving frame is normal with the standard deviation of an eddy
/// turnover, `rms k0 (k / k0)^(2/3)`, where `k0` belongs to the longest wave. Amplitudes are scaled so that the mean of
/// the two component variances is the square of the chosen root mean square.
fn turbulence(seed: u64) -> Vec<Mode> {
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    random.set_stream(TURBULENCE_STREAM);
    let least = TAU / (1e3 * day::LONGEST_WAVE_KM);
    let largest = TAU / (1e3 * day::SHORTEST_WAVE_KM);
    let mut modes: Vec<Mode> = (0..day::MODES)
        .map(|number| {
            let place = (f64::from(number) + random.random::<f64>()) / f64::from(day::MODES);
            let wave_number = least * (largest / least).powf(place);
            let (east, north) = toward(360.0 * random.random::<f64>());
            let axis = if number % 2 == 0 {
                (-north, east)
            } else {
                (east, north)
            };
            let turnover = day::TURBULENCE_RMS * least * (wave_number / least).powf(2.0 / 3.0);
            Mode {
                wave_vector: (wave_number * east, wave_number * north),
                axis,
                amplitude: wave_number.powf(0.5 * (1.0 + day::SPECTRUM_EXPONENT)),
                frequency: turnover * random.sample::<f64, _>(StandardNormal),
                phase: TAU * random.random::<f64>(),
            }
        })
        .collect();
    let variance: f64 = modes.iter().map(|m| 0.5 * m.amplitude * m.amplitude).sum();
    let scale = day::TURBULENCE_RMS * (2.0 / variance).sqrt();
    for mode in &mut modes {
        mode.amplitude *= scale;
    }
    modes
}
