//! Axes: round numbers and times.

use chrono::{DateTime, Datelike, Timelike};

use crate::time::Time;

/// A straight scale from values to pixels.
#[derive(Debug, Clone, Copy)]
pub(super) struct Axis {
    pub(super) low: f64,
    pub(super) high: f64,
    pub(super) from: f64,
    pub(super) to: f64,
    logarithmic: bool,
}

impl Axis {
    /// From `low` at pixel `from` to `high` at pixel `to`.
    pub(super) fn linear([low, high]: [f64; 2], [from, to]: [f64; 2]) -> Self {
        let high = if high > low { high } else { low + 1.0 };
        Self {
            low,
            high,
            from,
            to,
            logarithmic: false,
        }
    }

    /// The same for logarithms; both values are greater than 0.
    pub(super) fn logarithmic([low, high]: [f64; 2], [from, to]: [f64; 2]) -> Self {
        let high = if high > low { high } else { 10.0 * low };
        Self {
            low,
            high,
            from,
            to,
            logarithmic: true,
        }
    }

    pub(super) fn pixel(&self, value: f64) -> f64 {
        let part = if self.logarithmic {
            (value.max(self.low * 1e-3) / self.low).ln() / (self.high / self.low).ln()
        } else {
            (value - self.low) / (self.high - self.low)
        };
        self.from + part * (self.to - self.from)
    }

    /// Round values, not many more than `about`.
    pub(super) fn ticks(&self, about: f64) -> Vec<f64> {
        if self.logarithmic {
            return self.decades();
        }
        let step = round_step((self.high - self.low) / about);
        let first = (self.low / step - 1e-9).ceil();
        let count = ((self.high / step + 1e-9).floor() - first).max(0.0);
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a few ticks"
        )]
        let count = count.min(100.0) as usize;
        (0..=count).map(|k| (first + k as f64) * step).collect()
    }

    /// 1, 2 and 5 times powers of ten.
    fn decades(&self) -> Vec<f64> {
        let mut ticks = Vec::new();
        let mut ten = 10f64.powf(self.low.log10().floor());
        while ten <= self.high && ticks.len() < 60 {
            let round = [1.0, 2.0, 5.0].map(|m| m * ten);
            let (low, high) = (self.low * 0.999_999, self.high * 1.000_001);
            ticks.extend(round.into_iter().filter(|t| (low..=high).contains(t)));
            ten *= 10.0;
        }
        if ticks.len() > 9 {
            ticks.retain(|t| (t.log10() - t.log10().round()).abs() < 1e-9);
        }
        ticks
    }
}

/// 1, 2 or 5 times a power of ten, at least `step`.
pub(super) fn round_step(step: f64) -> f64 {
    if !(step.is_finite() && step > 0.0) {
        return 1.0;
    }
    let ten = 10f64.powf(step.log10().floor());
    let found = [1.0, 2.0, 5.0, 10.0].into_iter();
    let mut found = found.map(|m| m * ten).filter(|m| *m >= step * 0.999_999);
    found.next().unwrap_or(10.0 * ten)
}

/// A range with some room above and below the values.
pub(super) fn roomy(values: impl Iterator<Item = f64>) -> [f64; 2] {
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for value in values.filter(|v| v.is_finite()) {
        (low, high) = (low.min(value), high.max(value));
    }
    if low > high {
        return [-1.0, 1.0];
    }
    let room = 0.06 * (high - low).max(1e-9 * high.abs().max(1e-9));
    [low - room, high + room]
}

/// A number for an axis: no more digits than its step needs; an en dash for the minus sign, which the font does not have.
pub(super) fn label(value: f64, step: f64) -> String {
    let places = (-(step.abs().log10() + 1e-9).floor()).clamp(0.0, 9.0);
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "0 to 9"
    )]
    let places = if places.is_nan() { 0 } else { places as usize };
    let text = format!("{:.places$}", value + 0.0);
    text.replace('-', "\u{2013}")
}

/// Times on an axis, as seconds since the first, with their texts; the texts of midnights are dates.
pub(super) fn time_ticks(first: Time, last: Time, about: f64) -> Vec<(f64, String)> {
    const MINUTE: i64 = 60_000_000;
    const STEPS: [i64; 14] = [
        1, 2, 5, 10, 15, 30, 60, 120, 180, 360, 720, 1440, 2880, 10080,
    ];
    let (first, last) = (first.micros(), last.micros());
    let span = last.saturating_sub(first).max(1) as f64 / MINUTE as f64;
    let wanted = span / about;
    let step = STEPS.into_iter().find(|&s| s as f64 >= wanted);
    let step = step.unwrap_or_else(|| {
        let days = round_step(wanted / 1440.0).max(10.0);
        #[expect(clippy::cast_possible_truncation, reason = "days of 400 years at most")]
        let days = days as i64;
        days * 1440
    }) * MINUTE;
    let mut ticks = Vec::new();
    let mut at = first.div_euclid(step) * step;
    while at <= last && ticks.len() < 60 {
        if at >= first {
            ticks.push(((at - first) as f64 / 1e6, tick_text(at)));
        }
        at += step;
    }
    ticks
}

fn tick_text(micros: i64) -> String {
    let Some(time) = DateTime::from_timestamp_micros(micros) else {
        return String::new();
    };
    if time.hour() == 0 && time.minute() == 0 {
        format!("{:02}-{:02}", time.month(), time.day())
    } else {
        format!("{:02}:{:02}", time.hour(), time.minute())
    }
}

/// A time for people: date and minute, UTC.
pub(crate) fn plain_time(time: Time) -> String {
    let text = time.to_string();
    let day: String = text.chars().take(10).collect();
    let clock: String = text.chars().skip(11).take(5).collect();
    format!("{day} {clock} UTC")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round() {
        let axis = Axis::linear([-7.3, 21.0], [0.0, 100.0]);
        assert_eq!(axis.ticks(6.0), vec![-5.0, 0.0, 5.0, 10.0, 15.0, 20.0]);
        let axis = Axis::logarithmic([3.0, 120.0], [0.0, 100.0]);
        assert_eq!(axis.ticks(6.0), vec![5.0, 10.0, 20.0, 50.0, 100.0]);
        assert!((axis.pixel(3.0)).abs() < 1e-9 && (axis.pixel(120.0) - 100.0).abs() < 1e-9);
        assert_eq!(label(-0.2, 0.1), "\u{2013}0.2");
        assert_eq!(label(20.0, 5.0), "20");
    }

    #[test]
    fn times_are_round_and_midnights_dates() {
        let hour = 3_600_000_000;
        let first = Time::from_micros(10 * 24 * hour + 30 * 60_000_000);
        let ticks = time_ticks(first, Time::from_micros(11 * 24 * hour), 8.0);
        let texts: Vec<&str> = ticks.iter().map(|t| t.1.as_str()).collect();
        assert_eq!(
            texts,
            [
                "03:00", "06:00", "09:00", "12:00", "15:00", "18:00", "21:00", "01-12"
            ]
        );
        assert!((ticks[0].0 - 9000.0).abs() < 1e-6);
    }
}
