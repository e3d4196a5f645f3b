//! Every number of the invented day over Ostrin Lake, with its unit and meaning.
//!
//! Directions of wind are directions *from*, headings are directions of motion *toward*; both in degrees clockwise from
//! true north. Points in kilometres are east and north of the network centre in the local plane (see `network`). Times
//! are minutes after 2031-06-14T00:00:00Z, unless the name says otherwise.

/// Seed used when none is given.
pub const DEFAULT_SEED: u64 = 20_310_614;

/// Last report of the day, minutes: 2031-06-15T00:00:00Z.
pub const LAST_MINUTE: u32 = 24 * 60;
/// Time between two reports of a station, minutes.
pub const REPORT_INTERVAL_MINUTES: u32 = 5;

// Mean flow: uniform and of constant speed, with a slow turn and a weak constant gradient.

/// Speed of the mean flow at the network centre, m/s.
pub const MEAN_SPEED: f64 = 5.0;
/// Direction of the mean flow at the beginning, the middle and the end of the day, degrees.
pub const MEAN_DIRECTION: f64 = 240.0;
/// Largest turn of the mean flow: veered by this much at 06:00Z, backed by as much at 18:00Z, degrees.
pub const MEAN_TURN: f64 = 20.0;
/// Gradient of the eastward component toward the east, 1/s.
pub const MEAN_U_X: f64 = -0.6e-5;
/// Gradient of the eastward component toward the north, 1/s.
pub const MEAN_U_Y: f64 = -1.0e-5;
/// Gradient of the northward component toward the east, 1/s.
pub const MEAN_V_X: f64 = 0.4e-5;
/// Gradient of the northward component toward the north, 1/s.
pub const MEAN_V_Y: f64 = -0.2e-5;

// Lake-breeze line: straight, of unlimited length, moving along its normal.

/// The line forms on the shore, minutes: 11:00Z.
pub const LINE_START: u32 = 11 * 60;
/// The line is gone, minutes: 19:00Z.
pub const LINE_END: u32 = 19 * 60;
/// Time to full strength after the start, and from full strength to nothing before the end, minutes.
pub const LINE_RAMP: u32 = 45;
/// Heading of the motion, along the normal of the line, degrees.
pub const LINE_HEADING: f64 = 60.0;
/// Speed of the motion, m/s.
pub const LINE_SPEED: f64 = 3.2;
/// Wind behind the line minus wind ahead of it, component along the heading, m/s; half of it on each side.
pub const LINE_JUMP: f64 = 6.0;
/// Half-width `w` of the transition `tanh(s / w)`, km.
pub const LINE_HALF_WIDTH_KM: f64 = 3.0;
/// Distance of the shore from the network centre along the heading, km (negative: behind the centre).
pub const SHORE_KM: f64 = -45.0;

// Vortex: Lamb-Oseen profile, counter-clockwise.

/// The vortex appears, minutes: 02:30Z.
pub const VORTEX_START: u32 = 2 * 60 + 30;
/// The vortex is gone, minutes: 07:00Z.
pub const VORTEX_END: u32 = 7 * 60;
/// Time to full strength after the start, and from full strength to nothing before the end, minutes.
pub const VORTEX_RAMP: u32 = 45;
/// Centre at the start, km east and km north.
pub const VORTEX_ORIGIN_KM: (f64, f64) = (-64.0, -8.0);
/// Heading of the motion, degrees.
pub const VORTEX_HEADING: f64 = 80.0;
/// Speed of the motion, m/s.
pub const VORTEX_SPEED: f64 = 8.0;
/// Largest tangential wind at full strength, m/s.
pub const VORTEX_MAXIMUM_WIND: f64 = 7.0;
/// Radius of the largest tangential wind, km.
pub const VORTEX_RADIUS_KM: f64 = 9.0;
/// Lamb-Oseen shape constant: the positive root of `exp(a) = 1 + 2 a`, which puts the maximum at the radius above.
pub const LAMB_OSEEN_ALPHA: f64 = 1.256_431_208_626_17;

// Turbulence: plane waves carried by the mean flow.

/// Number of waves; every second one is solenoidal, the others are divergent.
pub const MODES: u32 = 160;
/// Shortest wavelength, km.
pub const SHORTEST_WAVE_KM: f64 = 4.0;
/// Longest wavelength, km.
pub const LONGEST_WAVE_KM: f64 = 250.0;
/// Exponent of the one-dimensional energy spectrum.
pub const SPECTRUM_EXPONENT: f64 = -5.0 / 3.0;
/// Root mean square of one component, m/s, over many places and times.
pub const TURBULENCE_RMS: f64 = 0.8;

// Sensors.

/// Standard deviation of the speed error, m/s.
pub const SPEED_NOISE: f64 = 0.2;
/// Standard deviation of the direction error, degrees.
pub const DIRECTION_NOISE: f64 = 2.0;
/// Below this measured speed a report is calm: speed 0.0 and direction 0, m/s.
pub const CALM_BELOW: f64 = 0.3;
/// Gust: turbulence intensity of the flow within one interval.
pub const GUST_INTENSITY: f64 = 0.16;
/// Gust: mean peak factor, in standard deviations of the flow within one interval.
pub const GUST_PEAK: f64 = 2.2;
/// Gust: standard deviation of the peak factor.
pub const GUST_PEAK_SPREAD: f64 = 0.5;
/// Gust: smallest peak factor, so that a gust is never below the mean.
pub const GUST_PEAK_LEAST: f64 = 0.2;

// Faults. The three stations are inside the network, no two of them are neighbours or share a neighbour.

/// Station with a turned vane, all day.
pub const VANE_STATION: &str = "OS13";
/// Reported minus true direction of that station, degrees.
pub const VANE_OFFSET: f64 = 25.0;
/// Station that reports knots in the columns of m/s, all day.
pub const KNOTS_STATION: &str = "OS18";
/// Knots in one metre per second; the international nautical mile is 1852 m.
pub const KNOTS_PER_M_S: f64 = 3600.0 / 1852.0;
/// Station that repeats one report.
pub const STUCK_STATION: &str = "OS36";
/// First repeated report, minutes: 09:10Z.
pub const STUCK_START: u32 = 9 * 60 + 10;
/// Last repeated report, minutes: 13:40Z.
pub const STUCK_END: u32 = 13 * 60 + 40;

// Dropouts.

/// Station that sends nothing for a while.
pub const SILENT_STATION: &str = "OS32";
/// First report not sent, minutes: 15:00Z.
pub const SILENT_START: u32 = 15 * 60;
/// Last report not sent, minutes: 17:30Z.
pub const SILENT_END: u32 = 17 * 60 + 30;
/// Probability that a single report is lost.
pub const LOST_PROBABILITY: f64 = 0.015;
/// Probability that a single report arrives without direction, speed and gust (about 30 in the day).
pub const EMPTY_PROBABILITY: f64 = 0.0028;

// Polygons whose true means are written down.

/// Triangles of neighbouring stations, all without faults, in any order of the corners.
pub const TRUTH_TRIANGLES: [[&str; 3]; 5] = [
    ["OS14", "OS22", "OS23"],
    ["OS07", "OS15", "OS10"],
    ["OS16", "OS29", "OS17"],
    ["OS14", "OS28", "OS15"],
    ["OS04", "OS09", "OS10"],
];
/// Times of the true means, minutes: quiet, vortex (2), line (3).
pub const TRUTH_MINUTES: [u32; 6] = [60, 225, 315, 750, 850, 960];
/// Points of the quadrature on one edge; even, as two of them share a panel.
pub const EDGE_POINTS: u32 = 400;

/// RFC 3339 text of a time in minutes after the start of the day; the day after is the last one possible.
pub fn rfc3339(minute: u32) -> String {
    let (day, rest) = (14 + minute / 1440, minute % 1440);
    format!("2031-06-{day:02}T{:02}:{:02}:00Z", rest / 60, rest % 60)
}
