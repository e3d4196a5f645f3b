//! The numbers of the page, for its script: columns by time, whole numbers to keep it small.

use serde_json::{Value, json};

use crate::check::Flag;
use crate::output::frames::{Cell, Frames};
use crate::output::plot::barb::MOST;
use crate::output::plot::colour::{DARK_STOPS, STOPS, Scale};
use crate::output::reason::Reasons;
use crate::pipeline::Setup;
use crate::units::{FromDirection, SpeedUnit, Wind};

/// Whole numbers are so many to 1 1/s.
const PER_SECOND: f64 = 1e7;
/// Whole numbers are so many to 1 m/s.
const PER_SPEED: f64 = 10.0;
/// Directions are added to speeds times this.
const TURN: i64 = 400;

/// For each time and polygon vorticity, divergence, their standard errors (1e-7 1/s), state and reason; for each time
/// and station the wind.
pub(super) fn data(setup: &Setup, frames: &Frames) -> Value {
    let reasons = Reasons::new(&setup.network);
    let kept = frames.shown();
    let column = |pick: &dyn Fn(&Cell) -> f64| -> Vec<Vec<i64>> {
        let row = |cells: &[Cell]| {
            let number = |cell: &Cell| {
                if cell.flag.is_usable() {
                    whole(pick(cell) * PER_SECOND)
                } else {
                    0
                }
            };
            cells.iter().map(number).collect()
        };
        kept.iter().map(|frame| row(&frame.cells)).collect()
    };
    let states = kept.iter().map(|frame| {
        let states = frame.cells.iter().map(state);
        states.collect::<String>()
    });
    let mut why = Vec::new();
    for (t, frame) in kept.iter().enumerate() {
        for (p, cell) in frame.cells.iter().enumerate() {
            if let Some(cause) = cell.cause {
                why.push([t, p, reasons.index(cause)]);
            }
        }
    }
    let winds = kept.iter().map(|frame| {
        let winds = frame.winds.iter().map(|(wind, _)| wind_number(*wind));
        winds.collect::<Vec<i64>>()
    });
    let limit = |q: usize| {
        let cells = kept.iter().flat_map(|frame| &frame.cells);
        Scale::of(cells.filter(|c| c.flag.is_usable()).map(|c| c.value[q])).limit
    };
    json!({
        "times": kept.iter().map(|f| f.time.micros() / 1_000_000).collect::<Vec<_>>(),
        "perSecond": PER_SECOND,
        "perSpeed": PER_SPEED,
        "turn": TURN,
        "halfBarb": 5.0 * SpeedUnit::Knot.in_metres_per_second(),
        "mostHalves": MOST,
        "limits": [limit(0), limit(1)],
        "light": STOPS,
        "dark": DARK_STOPS,
        "value": [column(&|c| c.value[0]), column(&|c| c.value[1])],
        "error": [column(&|c| c.error[0]), column(&|c| c.error[1])],
        "state": states.collect::<Vec<_>>(),
        "why": why,
        "reasons": reasons.words(),
        "winds": winds.collect::<Vec<_>>(),
    })
}

/// One letter: `m` missing, `f` failed; else the first of four for passed (`a`), not evaluated (`A`) and suspect (`s`),
/// plus 1 if the vorticity differs from zero, plus 2 if the divergence does.
fn state(cell: &Cell) -> char {
    let first = match cell.flag {
        Flag::Missing => return 'm',
        Flag::Fail => return 'f',
        Flag::Pass => b'a',
        Flag::NotEvaluated => b'A',
        Flag::Suspect => b's',
    };
    let [vorticity, divergence] = cell.significant.map(u8::from);
    char::from(first + vorticity + 2 * divergence)
}

/// Direction in whole degrees plus 400 times the speed in tenths of m/s; -1 for none.
fn wind_number(wind: Option<Wind>) -> i64 {
    let Some(wind) = wind else {
        return -1;
    };
    let direction = wind.from_direction().map_or(0.0, FromDirection::degrees);
    whole(direction) + TURN * whole(wind.speed() * PER_SPEED)
}

fn whole(value: f64) -> i64 {
    #[expect(
        clippy::cast_possible_truncation,
        reason = "the cast saturates, and values of the air are small"
    )]
    let whole = value.round() as i64;
    whole
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn states_tell_flag_and_significance() {
        let cell = |flag, significant| Cell {
            value: [0.0; 2],
            error: [0.0; 2],
            significant,
            flag,
            cause: None,
        };
        assert_eq!(state(&cell(Flag::Pass, [false, false])), 'a');
        assert_eq!(state(&cell(Flag::Pass, [true, true])), 'd');
        assert_eq!(state(&cell(Flag::Suspect, [false, true])), 'u');
        assert_eq!(state(&cell(Flag::Missing, [true, true])), 'm');
    }

    #[test]
    fn winds_are_packed() {
        let wind = Wind { u: 0.0, v: -5.04 };
        assert_eq!(wind_number(Some(wind)), 400 * 50 + 360);
        assert_eq!(wind_number(Some(Wind { u: 0.0, v: 0.0 })), 0);
        assert_eq!(wind_number(None), -1);
    }
}
