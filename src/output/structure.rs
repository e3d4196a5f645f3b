//! `structure.csv`: how winds differ with distance, day by day.

use crate::output::csv::number;
use crate::pipeline::Outcome;

/// The structure function at the end of each day and of the run, a row for each class of distance. Squared differences
/// in m²/s², without the variances of the instruments; empty without rows where it was not asked for.
#[must_use]
pub fn structure_csv(outcome: &Outcome) -> String {
    let mut out = String::from(
        "time,distance_km,pairs,longitudinal,transverse,fitted_longitudinal,fitted_transverse,exponent,\
         site_variance,prior_share\n",
    );
    for report in &outcome.structure {
        let time = report.time.to_string();
        let function = &report.function;
        for row in &report.rows {
            let fields = [
                time.clone(),
                number(row.distance / 1e3),
                number(row.pairs),
                number(row.longitudinal),
                number(row.transverse),
                number(row.fitted_longitudinal),
                number(row.fitted_transverse),
                number(function.exponent.value()),
                number(function.site_variance),
                number(function.prior_share),
            ];
            out.push_str(&fields.join(","));
            out.push('\n');
        }
    }
    out
}
