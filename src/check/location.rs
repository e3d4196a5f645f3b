//! The report's own position.

use super::witness::Witness;
use super::{Flag, Test};
use crate::station::Position;

/// Radius of the sphere that serves here, m.
const EARTH: f64 = 6.371e6;
/// A position of 0 N, 0 E within this is a receiver without a fix, degrees.
const NOWHERE: f64 = 1e-4;

/// Where the report says it stands against where the list has the station.
///
/// - **Reference**: QARTOD wind manual, test 3 (location; RANGEMAX 20 km in its example). Impossible coordinates are
///   unreadable and do not come here.
pub(super) fn location_flag<W: Witness>(
    own: Position,
    listed: Position,
    furthest: f64,
    witness: &mut W,
) -> Flag {
    let distance = distance(own, listed);
    let nowhere = own.latitude().abs() < NOWHERE && own.longitude().abs() < NOWHERE;
    let flag = match distance > furthest {
        true if nowhere => Flag::Fail,
        true => Flag::Suspect,
        false => Flag::Pass,
    };
    witness.tell(Test::Location, flag, || {
        let far = format!(
            "{:.1} km from the place in the station list; more than {} km is suspect",
            distance / 1e3,
            furthest / 1e3
        );
        if nowhere {
            format!("0 N 0 E is no position; {far}")
        } else {
            far
        }
    });
    flag
}

/// Great-circle distance (haversine), m: the limit needs no ellipsoid.
fn distance(a: Position, b: Position) -> f64 {
    let half = |d: f64| (d.to_radians() / 2.0).sin().powi(2);
    let (p, q) = (a.latitude().to_radians(), b.latitude().to_radians());
    let h =
        half(a.latitude() - b.latitude()) + p.cos() * q.cos() * half(a.longitude() - b.longitude());
    2.0 * EARTH * h.min(1.0).sqrt().asin()
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::super::witness::Nobody;
    use super::*;

    #[test]
    fn a_displaced_buoy_is_suspect_and_no_fix_fails() {
        let at = |latitude, longitude| Position::new(latitude, longitude).unwrap();
        let flag = |own| location_flag(own, at(46.0, -30.0), 20e3, &mut Nobody);
        assert_eq!(flag(at(46.1, -30.0)), Flag::Pass); // 11 km
        assert_eq!(flag(at(46.2, -30.0)), Flag::Suspect); // 22 km
        assert_eq!(flag(at(0.0, 0.0)), Flag::Fail);
        let edge = location_flag(at(46.0, 179.99), at(46.0, -179.99), 20e3, &mut Nobody);
        assert_eq!(edge, Flag::Pass);
    }
}
