//! Units at the edge of the program. Inside it everything is SI, angles in degrees only where a name says so.

use std::fmt;
use std::str::FromStr;
use std::sync::LazyLock;
use std::time::Duration;

/// Unit of a wind speed in an input.
///
/// Factors are exact: 1 kt = 1852 m / 3600 s, 1 mph = 0.44704 m/s (international mile), 1 km/h = 1 m / 3.6 s
/// (SI brochure 9th ed., table 8 and common practice for the mile).
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum SpeedUnit {
    /// m/s
    #[default]
    MetrePerSecond,
    /// km/h
    KilometrePerHour,
    /// mph
    MilePerHour,
    /// kt
    Knot,
}

impl SpeedUnit {
    /// One of this unit in m/s.
    #[must_use]
    pub const fn in_metres_per_second(self) -> f64 {
        match self {
            Self::MetrePerSecond => 1.0,
            Self::KilometrePerHour => 1.0 / 3.6,
            Self::MilePerHour => 0.44704,
            Self::Knot => 1852.0 / 3600.0,
        }
    }

    /// The symbol.
    #[must_use]
    pub const fn symbol(self) -> &'static str {
        match self {
            Self::MetrePerSecond => "m/s",
            Self::KilometrePerHour => "km/h",
            Self::MilePerHour => "mph",
            Self::Knot => "kt",
        }
    }
}

impl fmt::Display for SpeedUnit {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.symbol())
    }
}

impl FromStr for SpeedUnit {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        match text.trim() {
            "m/s" | "m s-1" | "mps" => Ok(Self::MetrePerSecond),
            "km/h" | "kmh" => Ok(Self::KilometrePerHour),
            "mph" | "mi/h" => Ok(Self::MilePerHour),
            "kt" | "kn" | "knots" => Ok(Self::Knot),
            _ => Err(format!(
                "`{text}` is not a unit of speed (m/s, km/h, mph or kt expected)"
            )),
        }
    }
}

/// What directions are counted from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, serde::Serialize)]
#[serde(rename_all = "snake_case")]
pub enum North {
    /// True north.
    True,
    /// Magnetic north: the declination of the station is added.
    Magnetic,
}

impl FromStr for North {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        match text.trim() {
            "true" => Ok(Self::True),
            "magnetic" => Ok(Self::Magnetic),
            _ => Err(format!(
                "`{text}` is no north (`true` or `magnetic` expected)"
            )),
        }
    }
}

/// Direction the wind blows *from*, degrees clockwise from true north, in (0, 360]. Calm has none.
#[derive(Debug, Clone, Copy, PartialEq, PartialOrd)]
pub struct FromDirection(f64);

impl FromDirection {
    /// Takes degrees from 0 to 360; 0 becomes 360. `None` outside, or if not a number.
    #[must_use]
    pub fn new(degrees: f64) -> Option<Self> {
        if degrees > 0.0 && degrees <= 360.0 {
            Some(Self(degrees))
        } else if degrees == 0.0 {
            Some(Self(360.0))
        } else {
            None
        }
    }

    /// Degrees in (0, 360].
    #[must_use]
    pub fn degrees(self) -> f64 {
        self.0
    }
}

/// Wind components, m/s: `u` towards east, `v` towards north.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Wind {
    /// Towards east.
    pub u: f64,
    /// Towards north.
    pub v: f64,
}

impl Wind {
    /// From speed and direction: u = −V sin d, v = −V cos d (CF `wind_from_direction`).
    #[must_use]
    pub fn blowing_from(speed: f64, from: FromDirection) -> Self {
        let (sin, cos) = sin_cos_of_direction(from.0);
        Self {
            u: -speed * sin,
            v: -speed * cos,
        }
    }

    /// Speed, m/s.
    #[must_use]
    pub fn speed(self) -> f64 {
        self.u.hypot(self.v)
    }

    /// Direction it blows from; `None` for no wind at all.
    #[must_use]
    pub fn from_direction(self) -> Option<FromDirection> {
        if self.u == 0.0 && self.v == 0.0 {
            return None;
        }
        let degrees = (-self.u).atan2(-self.v).to_degrees();
        FromDirection::new(if degrees <= 0.0 {
            degrees + 360.0
        } else {
            degrees
        })
    }
}

/// Sine and cosine of an angle in degrees, exact at multiples of 90.
#[must_use]
pub fn sin_cos_degrees(degrees: f64) -> (f64, f64) {
    // Reduce to [-45, 45] exactly, as GeographicLib's sincosd does (Karney 2013), so that north has no eastward part.
    let turned = if degrees.abs() < 36_000.0 {
        degrees
    } else {
        degrees.rem_euclid(360.0)
    };
    // The nearest multiple of 90 by a cast: rounding is a call into the mathematics library.
    #[expect(clippy::cast_possible_truncation, reason = "below 36 000 degrees")]
    let quarter = (turned / 90.0 + 400.5) as i32 - 400;
    let (sin, cos) = (turned - 90.0 * f64::from(quarter)).to_radians().sin_cos();
    match quarter.rem_euclid(4) {
        1 => (cos, -sin),
        2 => (-sin, -cos),
        3 => (-cos, sin),
        _ => (sin, cos),
    }
}

/// Directions are mostly whole tenths of a degree: each with its sine and cosine.
static TENTHS: LazyLock<Vec<(f64, (f64, f64))>> = LazyLock::new(|| {
    let degrees = (0..=3600).map(|k| f64::from(k) / 10.0);
    degrees.map(|d| (d, sin_cos_degrees(d))).collect()
});

/// [`sin_cos_degrees`] of 0 to 360 degrees.
#[inline]
fn sin_cos_of_direction(degrees: f64) -> (f64, f64) {
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "0 to 3600; a cast takes anything else to the ends, which are then not equal"
    )]
    let tenth = (degrees * 10.0 + 0.5) as usize;
    match TENTHS.get(tenth) {
        #[expect(clippy::float_cmp, reason = "the very same angle is looked for")]
        Some(&(known, sin_cos)) if known == degrees => sin_cos,
        _ => sin_cos_degrees(degrees),
    }
}

/// Splits "5 min" into 5 and "min".
fn number_and_unit(text: &str) -> Option<(f64, &str)> {
    let text = text.trim();
    let split = text
        .find(|c: char| !(c.is_ascii_digit() || matches!(c, '.' | '-' | '+')))
        .unwrap_or(text.len());
    let (number, unit) = text.split_at(split);
    let number: f64 = number.parse().ok()?;
    number.is_finite().then(|| (number, unit.trim()))
}

/// Reads an amount of memory with its unit, such as `500 MiB`, into bytes.
///
/// # Errors
/// Says what was found and what is expected.
pub fn parse_memory(text: &str) -> Result<usize, String> {
    let expected = || {
        format!(
            "`{text}` is not an amount of memory (number and unit expected, such as `500 MiB` or `2 GB`)"
        )
    };
    let (number, unit) = number_and_unit(text).ok_or_else(expected)?;
    let factor = match unit {
        "kB" => 1e3,
        "MB" => 1e6,
        "GB" => 1e9,
        "KiB" => 1024.0,
        "MiB" => 1_048_576.0,
        "GiB" => 1_073_741_824.0,
        _ => return Err(expected()),
    };
    if number <= 0.0 {
        return Err(expected());
    }
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "above 0; a cast takes what is too large to the largest"
    )]
    Ok((number * factor) as usize)
}

/// Reads a speed with its unit, such as `1 kt`, into m/s.
///
/// # Errors
/// Says what was found and what is expected.
pub fn parse_speed(text: &str) -> Result<f64, String> {
    let expected = || {
        format!("`{text}` is not a speed (number and unit expected, such as `1 kt` or `0.5 m/s`)")
    };
    let (number, unit) = number_and_unit(text).ok_or_else(expected)?;
    let unit: SpeedUnit = unit.parse().map_err(|_| expected())?;
    if number < 0.0 {
        return Err(format!(
            "`{text}` is negative (a speed of 0 or more expected)"
        ));
    }
    Ok(number * unit.in_metres_per_second())
}

/// Reads a length with its unit (m, km, ft), such as `500 km`, into metres.
///
/// # Errors
/// Says what was found and what is expected.
pub fn parse_length(text: &str) -> Result<f64, String> {
    let expected = || {
        format!("`{text}` is not a length (number and unit m, km or ft expected, such as `500 km`)")
    };
    let (number, unit) = number_and_unit(text).ok_or_else(expected)?;
    Ok(number * length_unit(unit).ok_or_else(expected)?)
}

/// One of the named unit of length in metres.
#[must_use]
pub fn length_unit(unit: &str) -> Option<f64> {
    match unit {
        "m" => Some(1.0),
        "km" => Some(1000.0),
        // The international foot, exact.
        "ft" => Some(0.3048),
        _ => None,
    }
}

/// Reads an area with its unit (m2, km2), such as `10 km2`, into m².
///
/// # Errors
/// Says what was found and what is expected.
pub fn parse_area(text: &str) -> Result<f64, String> {
    let expected = || {
        format!("`{text}` is not an area (number and unit m2 or km2 expected, such as `10 km2`)")
    };
    let (number, unit) = number_and_unit(text).ok_or_else(expected)?;
    match unit {
        "km2" | "km²" if number >= 0.0 => Ok(number * 1e6),
        "m2" | "m²" if number >= 0.0 => Ok(number),
        _ => Err(expected()),
    }
}

/// Reads a duration with its unit (s, min, h, d), such as `5 min`.
///
/// # Errors
/// Says what was found and what is expected.
pub fn parse_duration(text: &str) -> Result<Duration, String> {
    let expected = || {
        format!(
            "`{text}` is not a duration (number and unit s, min, h or d expected, such as `5 min`)"
        )
    };
    let (number, unit) = number_and_unit(text).ok_or_else(expected)?;
    let seconds = match unit {
        "s" => 1.0,
        "min" => 60.0,
        "h" => 3600.0,
        "d" => 86_400.0,
        _ => return Err(expected()),
    };
    let total = number * seconds;
    // A thousand years: longer is a slip, and would overflow the clock.
    if !(0.0..=3.2e10).contains(&total) {
        return Err(expected());
    }
    // Whole microseconds: the resolution of `Time`.
    Ok(Duration::from_secs_f64((total * 1e6).round() / 1e6))
}

#[cfg(test)]
#[expect(
    clippy::float_cmp,
    reason = "conversions are exact or as the standard prints them"
)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    // methods.md 5.1: exact factors.
    #[test]
    fn factors_are_exact() {
        assert_eq!(
            SpeedUnit::Knot.in_metres_per_second(),
            0.514_444_444_444_444_5
        );
        assert_eq!(SpeedUnit::MilePerHour.in_metres_per_second(), 0.44704);
        assert_eq!(parse_speed("3.6 km/h").unwrap(), 1.0);
    }

    #[test]
    fn north_wind_blows_south_and_has_no_eastward_part() {
        let north = Wind::blowing_from(5.0, FromDirection::new(360.0).unwrap());
        assert_eq!((north.u, north.v), (0.0, -5.0));
        let west = Wind::blowing_from(5.0, FromDirection::new(270.0).unwrap());
        assert_eq!((west.u, west.v), (5.0, 0.0));
        assert_eq!(north.from_direction().unwrap().degrees(), 360.0);
        assert_eq!(west.from_direction().unwrap().degrees(), 270.0);
    }

    #[test]
    fn sines_are_exact_at_quarter_turns_and_right_elsewhere() {
        assert_eq!(sin_cos_degrees(-90.0), (-1.0, 0.0));
        assert_eq!(sin_cos_degrees(360.0), (0.0, 1.0));
        assert_eq!(sin_cos_degrees(36_000_000.0), (0.0, 1.0));
        for k in -8000..8000 {
            let degrees = f64::from(k) * 0.1;
            let (sin, cos) = sin_cos_degrees(degrees);
            let (s, c) = degrees.to_radians().sin_cos();
            assert!(
                (sin - s).abs() < 1e-14 && (cos - c).abs() < 1e-14,
                "{degrees}"
            );
        }
    }

    #[test]
    fn tenths_of_a_degree_are_the_same_from_the_table() {
        for degrees in [0.1, 45.0, 359.9, 273.4, 123.456, 360.0, 1e-9, 0.05] {
            assert_eq!(sin_cos_of_direction(degrees), sin_cos_degrees(degrees));
        }
    }

    #[test]
    fn directions_outside_the_circle_are_refused() {
        assert!(FromDirection::new(400.0).is_none());
        assert!(FromDirection::new(-1.0).is_none());
        assert!(FromDirection::new(f64::NAN).is_none());
        assert_eq!(FromDirection::new(0.0).unwrap().degrees(), 360.0);
    }

    #[test]
    fn quantities_need_their_unit() {
        assert_eq!(parse_duration("5 min").unwrap(), Duration::from_mins(5));
        assert_eq!(parse_duration("1h").unwrap(), Duration::from_hours(1));
        assert!(parse_duration("5").unwrap_err().contains("`5`"));
        assert!(parse_duration("-5 min").is_err());
        assert_eq!(parse_length("500 km").unwrap(), 500_000.0);
        assert_eq!(parse_area("10 km2").unwrap(), 1e7);
        assert_eq!(parse_memory("1.5 KiB").unwrap(), 1536);
        assert_eq!(parse_memory("2GB").unwrap(), 2_000_000_000);
        assert!(parse_memory("0 MiB").is_err() && parse_memory("5").is_err());
        assert!(parse_speed("3 furlongs").is_err());
        assert!(parse_speed("-3 kt").is_err());
    }
}
