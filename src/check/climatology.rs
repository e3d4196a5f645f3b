//! Climatology: the user's limits by month.

use chrono::{DateTime, Datelike, Months, NaiveDate};

use super::witness::Witness;
use super::{Flag, Test};
use crate::settings::Season;

/// Knows which limits hold at the time.
#[derive(Debug, Clone, Default)]
pub(super) struct Climatology {
    /// The month of the last report, μs.
    month: (i64, i64),
    season: Option<Season>,
}

impl Climatology {
    /// Suspect outside the limits of the month (UTC).
    ///
    /// - **Reference**: QARTOD wind manual, test 5 (climatology; spring 0 to 60 m/s in its example; no fail).
    #[inline]
    pub fn judge<W: Witness>(
        &mut self,
        time: i64,
        speed: f64,
        seasons: &[Season],
        witness: &mut W,
    ) -> Flag {
        if seasons.is_empty() {
            return Flag::NotEvaluated;
        }
        if time < self.month.0 || time >= self.month.1 {
            let (month, from, to) = month_of(time);
            self.month = (from, to);
            self.season = seasons.iter().find(|s| s.has_month(month)).copied();
        }
        let Some(season) = self.season else {
            return Flag::NotEvaluated;
        };
        let flag = if speed > season.speed_most || speed < season.speed_least {
            Flag::Suspect
        } else {
            Flag::Pass
        };
        witness.tell(Test::Climatology, flag, || {
            format!(
                "{speed:.1} m/s; {} to {} m/s are expected in this month",
                season.speed_least, season.speed_most
            )
        });
        flag
    }
}

/// Month (1 to 12) of a time, its beginning and its end, μs.
fn month_of(time: i64) -> (u32, i64, i64) {
    let micros = |date: Option<NaiveDate>| {
        let start = date.and_then(|d| d.and_hms_opt(0, 0, 0));
        start.map(|s| s.and_utc().timestamp_micros())
    };
    // Times of reports lie in the years 1800 to 2200.
    let Some(date) = DateTime::from_timestamp_micros(time).map(|t| t.date_naive()) else {
        return (1, time, time);
    };
    let first = date.with_day(1);
    let next = first.and_then(|d| d.checked_add_months(Months::new(1)));
    match (micros(first), micros(next)) {
        (Some(from), Some(to)) => (date.month(), from, to),
        _ => (date.month(), time, time),
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::super::witness::Nobody;
    use super::*;
    use crate::time::Time;

    #[test]
    fn the_spring_of_the_manual() {
        let spring = [Season::new(&[3, 4, 5], 0.0, 60.0)];
        let mut state = Climatology::default();
        let mut flag = |time: &str, speed| {
            let time = Time::parse_rfc3339(time).unwrap().micros();
            state.judge(time, speed, &spring, &mut Nobody)
        };
        assert_eq!(flag("2031-02-28T23:59:59Z", 70.0), Flag::NotEvaluated);
        assert_eq!(flag("2031-03-01T00:00:00Z", 60.0), Flag::Pass);
        assert_eq!(flag("2031-05-31T23:59:59Z", 60.5), Flag::Suspect);
        assert_eq!(flag("2031-06-01T00:00:00Z", 60.5), Flag::NotEvaluated);
    }
}
