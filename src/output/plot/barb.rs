//! Wind barbs: a staff towards where the wind blows from; a half barb is 5 kt, a barb 10 kt, a pennant 50 kt; calm is a
//! circle. Barbs lie clockwise of the staff's tip on the northern hemisphere, counter-clockwise on the southern (WMO-No.
//! 485, Manual on the Global Data-processing System, graphical representation of data; from memory).

use std::fmt::Write as _;

use super::svg::short;
use crate::units::{FromDirection, SpeedUnit, Wind};

/// Length of the staff, pixels.
const STAFF: f64 = 24.0;
/// Length of a barb.
const BARB: f64 = 10.0;
/// From barb to barb along the staff.
const STEP: f64 = 3.6;
/// Fastest wind drawn, in half barbs (200 kt); anything faster is drawn as that.
pub(crate) const MOST: usize = 40;

/// Half barbs of a speed in m/s: the nearest 5 kt. 0 stands for less than 2.5 kt.
pub(crate) fn halves(speed: f64) -> usize {
    let steps = (speed / (5.0 * SpeedUnit::Knot.in_metres_per_second()))
        .round()
        .clamp(0.0, MOST as f64);
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "0 to 40"
    )]
    if steps.is_nan() { 0 } else { steps as usize }
}

/// Path data of the barbs for a wind from the top of the picture, its station at 0, 0; pennants are closed, so the path
/// is to be stroked and filled.
pub(crate) fn barb(halves: usize, southern: bool) -> String {
    if halves == 0 {
        return "M5 0A5 5 0 1 1 -5 0A5 5 0 1 1 5 0".into();
    }
    let side = if southern { -1.0 } else { 1.0 };
    let mut data = format!("M0 0L0 {}", -STAFF);
    let (pennants, barbs, half) = (halves / 10, halves % 10 / 2, halves % 2);
    let mut at = -STAFF;
    // Writing to a string cannot fail.
    for _ in 0..pennants {
        let (tip, end) = (short(at + 0.5 * STEP), short(at + 1.5 * STEP));
        let _ = write!(data, "M0 {}L{} {tip}L0 {end}Z", short(at), side * BARB);
        at += 1.5 * STEP;
    }
    if pennants > 0 {
        at += 0.5 * STEP;
    }
    for _ in 0..barbs {
        let (x, y) = (side * BARB, short(at - 0.4 * BARB));
        let _ = write!(data, "M0 {}L{x} {y}", short(at));
        at += STEP;
    }
    if half == 1 {
        // A half barb alone stands off the tip, so that it is not taken for a whole one.
        if halves == 1 {
            at += STEP;
        }
        let (x, y) = (side * 0.5 * BARB, short(at - 0.2 * BARB));
        let _ = write!(data, "M0 {}L{x} {y}", short(at));
    }
    data
}

/// Half barbs and where the wind blows from, degrees clockwise from north; a calm has no direction.
pub(crate) fn of_wind(wind: Wind) -> (usize, f64) {
    let direction = wind.from_direction().map_or(0.0, FromDirection::degrees);
    match halves(wind.speed()) {
        0 => (0, 0.0),
        n => (n, direction),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 5 kt steps: 12 kt is one barb, 13 kt a barb and a half, 65 kt a pennant, a barb and a half.
    #[test]
    fn speeds_become_barbs() {
        let knots = |kt: f64| halves(kt * SpeedUnit::Knot.in_metres_per_second());
        assert_eq!(
            [2.0, 3.0, 12.0, 13.0, 65.0, 900.0].map(knots),
            [0, 1, 2, 3, 13, MOST]
        );
        let strokes = |kt: f64| {
            let data = barb(knots(kt), false);
            (data.matches('Z').count(), data.matches('M').count() - 1)
        };
        // Pennants; all marks on the staff.
        assert_eq!(strokes(65.0), (1, 3));
        assert_eq!(strokes(45.0), (0, 5));
        assert_eq!(strokes(100.0), (2, 2));
    }

    #[test]
    fn southern_barbs_are_mirrored() {
        assert!(barb(2, false).contains("L10 "));
        assert!(barb(2, true).contains("L-10 "));
    }
}
