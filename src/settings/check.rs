//! Limits of the tests of the reports, `[check]`, with their defaults.

use serde::Serialize;

use crate::check::Test;

/// Minutes and hours in μs.
const MINUTE: i64 = 60_000_000;
const HOUR: i64 = 60 * MINUTE;

/// Limits of the tests. Times are in μs, speeds in m/s; each test says where its defaults come from.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct CheckLimits {
    /// Tests that are not made.
    pub off: Vec<Test>,
    /// Reports further apart do not follow each other: a gap, and no comparison. QARTOD's example is 1 h; 10 minutes
    /// more keep hourly reports together that are sent a little early or late.
    #[serde(rename = "gap_s", serialize_with = "seconds")]
    pub gap: i64,
    /// How far a report may stand from the place in the list, m; `None`: anywhere. QARTOD's example.
    pub displacement: Option<f64>,
    /// Gross range.
    #[serde(flatten)]
    pub range: RangeLimits,
    /// Climatology; none by default.
    pub climatology: Vec<Season>,
    /// Below this a wind may repeat itself; by default what a calm means (`sensor.calm_below`).
    pub starting_speed: f64,
    /// Spike.
    pub spike: SpikeLimits,
    /// Rate of change.
    pub rate_of_change: RateLimits,
    /// Flat line.
    pub flat_line: FlatLimits,
    /// Stuck vane.
    pub stuck_vane: StuckLimits,
    /// Frozen anemometer.
    pub frozen_anemometer: StuckLimits,
    /// Persistence.
    pub persistence: PersistenceLimits,
    /// Agreement of fields.
    pub agreement: AgreementLimits,
    /// Attenuated signal.
    pub attenuated_signal: AttenuatedLimits,
    /// Neighbours.
    pub neighbour: NeighbourLimits,
}

/// Limits of the range test, m/s.
///
/// Defaults: QARTOD wind manual, test 4, examples (sensor span 0-100, user span 0-75 m/s; `methods.md` 6.1).
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct RangeLimits {
    /// A faster wind is suspect.
    pub speed_suspect: f64,
    /// A faster wind is impossible and fails.
    pub speed_fail: f64,
}

impl Default for RangeLimits {
    fn default() -> Self {
        Self {
            speed_suspect: 75.0,
            speed_fail: 100.0,
        }
    }
}

/// Speeds that the user expects in some months.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Season {
    /// Bit k for month k, 1 to 12.
    months: u16,
    /// m/s
    pub speed_least: f64,
    /// m/s
    pub speed_most: f64,
}

impl Season {
    /// Limits of these months, 1 to 12.
    #[must_use]
    pub fn new(months: &[u32], speed_least: f64, speed_most: f64) -> Self {
        let bits = months.iter().filter(|m| (1..=12).contains(*m));
        Self {
            months: bits.fold(0, |all, month| all | 1 << month),
            speed_least,
            speed_most,
        }
    }

    /// True if it holds in a month.
    #[must_use]
    pub fn has_month(&self, month: u32) -> bool {
        month < 16 && self.months & 1 << month != 0
    }
}

/// Limits of the spike test, m/s: QARTOD wind manual, test 6, examples.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct SpikeLimits {
    /// More is suspect.
    pub suspect: f64,
    /// More fails.
    pub fail: f64,
}

/// Limits of the rate of change: QARTOD wind manual, test 7, examples (3 standard deviations, 8 h).
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct RateLimits {
    /// Standard deviations.
    pub deviations: f64,
    /// The past that they are taken from.
    #[serde(rename = "period_s", serialize_with = "seconds")]
    pub period: i64,
    /// Smaller changes of u or v are never suspect, m/s. WMO doubts steps of more than 10 m/s between successive means
    /// (Zahumenský 2004, from memory).
    pub least: f64,
    /// Fewer changes make no standard deviation.
    pub least_changes: f64,
}

/// How many reports, and for how long, may repeat each other.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct RunLimits {
    /// So many are suspect, if they last long enough.
    pub suspect_reports: u32,
    /// So many fail, if they last long enough.
    pub fail_reports: u32,
    /// How long is suspect.
    #[serde(rename = "suspect_after_s", serialize_with = "seconds")]
    pub suspect_after: i64,
    /// How long fails.
    #[serde(rename = "fail_after_s", serialize_with = "seconds")]
    pub fail_after: i64,
    /// How long is suspect at stations that round coarsely.
    #[serde(rename = "coarse_suspect_after_s", serialize_with = "seconds")]
    pub coarse_suspect_after: i64,
    /// How long fails at stations that round coarsely.
    #[serde(rename = "coarse_fail_after_s", serialize_with = "seconds")]
    pub coarse_fail_after: i64,
}

impl RunLimits {
    /// How long is suspect and how long fails, μs; at a coarse station `coarse` times what is stated for those, at a
    /// fine one it is 0.
    #[inline]
    #[must_use]
    pub fn after(&self, coarse: f64) -> (i64, i64) {
        #[expect(clippy::cast_possible_truncation, reason = "a cast takes the largest")]
        let times = |after: i64| (after as f64 * coarse) as i64;
        if coarse > 0.0 {
            (
                times(self.coarse_suspect_after),
                times(self.coarse_fail_after),
            )
        } else {
            (self.suspect_after, self.fail_after)
        }
    }
}

/// Limits of the flat line test.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct FlatLimits {
    /// Speeds within this are equal, m/s.
    pub speed: f64,
    /// Directions within this are equal, degrees.
    pub direction: f64,
    /// How many, how long.
    #[serde(flatten)]
    pub run: RunLimits,
}

/// Limits of the tests for a stuck vane and a frozen anemometer.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct StuckLimits {
    /// By how much the other quantity must vary: m/s for the vane, degrees for the anemometer.
    pub varies: f64,
    /// How many, how long.
    #[serde(flatten)]
    pub run: RunLimits,
}

/// Limits of the persistence test: WMO guidelines for automatic stations (Zahumenský 2004), but 5 degrees for its 10: a
/// steady sea wind of 10 m/s stays within 10 degrees for an hour (Singapore, S102, 2017-06-10), as turbulence over water
/// turns the one-minute mean by some 2 degrees; and winds below 1 m/s are exempt, where WMO exempts 0.1 m/s: at a
/// turbulence intensity of 15 % sixty values of a slower wind span less than 0.5 m/s (S109, 2017-06-27).
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct PersistenceLimits {
    /// Least variation of the speed, m/s.
    pub speed: f64,
    /// Least variation of the direction, degrees.
    pub direction: f64,
    /// The time in which it is expected.
    #[serde(rename = "period_s", serialize_with = "seconds")]
    pub period: i64,
    /// Slower winds are exempt, m/s.
    pub exempt_below: f64,
    /// Made only for reports at most so far apart.
    #[serde(rename = "interval_s", serialize_with = "seconds")]
    pub interval: i64,
}

/// Limits of the agreement of fields.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct AgreementLimits {
    /// How far the gust may be below the mean, m/s: rounding of both.
    pub gust_below: f64,
    /// A calm with a direction is suspect.
    pub calm_direction: bool,
}

/// Limits of the attenuated signal.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct AttenuatedLimits {
    /// Half a day.
    #[serde(rename = "period_s", serialize_with = "seconds")]
    pub period: i64,
    /// Least range of the speed in it, m/s.
    pub least_range: f64,
    /// The station's usual range must be so many times that.
    pub usual_times: f64,
    /// A calm is exempt until it lasts so long.
    #[serde(rename = "calm_after_s", serialize_with = "seconds")]
    pub calm_after: i64,
}

/// Limits of the neighbour test ([`crate::spatial`]).
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct NeighbourLimits {
    /// A wind is an outlier so many standard deviations off the prediction from its neighbours. 5, the upper end of what
    /// `methods.md` 6.3 gives (3 to 5): errors of winds have longer tails than normal ones, and a front is none.
    pub deviations: f64,
    /// Fewer neighbours make no prediction. 3: a mean wind and something to doubt it by.
    pub least_neighbours: u32,
    /// The station's report before and after speak for an outlier only if they are within this of it; as for gaps.
    #[serde(rename = "report_within_s", serialize_with = "seconds")]
    pub report_within: i64,
}

impl Default for NeighbourLimits {
    fn default() -> Self {
        Self {
            deviations: 5.0,
            least_neighbours: 3,
            report_within: 70 * MINUTE,
        }
    }
}

impl CheckLimits {
    /// The defaults, with the starting speed of the sensors, m/s.
    #[must_use]
    pub fn with_starting_speed(starting_speed: f64) -> Self {
        Self {
            starting_speed,
            ..Self::default()
        }
    }
}

impl Default for CheckLimits {
    fn default() -> Self {
        let run = |reports: (u32, u32), after: (i64, i64), coarse: (i64, i64)| RunLimits {
            suspect_reports: reports.0,
            fail_reports: reports.1,
            suspect_after: after.0,
            fail_after: after.1,
            coarse_suspect_after: coarse.0 * HOUR,
            coarse_fail_after: coarse.1 * HOUR,
        };
        Self {
            off: Vec::new(),
            gap: 70 * MINUTE,
            displacement: Some(20e3),
            range: RangeLimits::default(),
            climatology: Vec::new(),
            starting_speed: 0.5,
            spike: SpikeLimits {
                suspect: 20.0,
                fail: 40.0,
            },
            rate_of_change: RateLimits {
                deviations: 3.0,
                period: 8 * HOUR,
                least: 10.0,
                least_changes: 6.0,
            },
            flat_line: FlatLimits {
                speed: 0.0,
                direction: 0.05,
                run: run((3, 5), (20 * MINUTE, 30 * MINUTE), (6, 12)),
            },
            stuck_vane: StuckLimits {
                varies: 0.5,
                run: run((6, 12), (3 * HOUR, 6 * HOUR), (18, 48)),
            },
            frozen_anemometer: StuckLimits {
                varies: 10.0,
                run: run((6, 12), (3 * HOUR, 6 * HOUR), (12, 24)),
            },
            persistence: PersistenceLimits {
                speed: 0.5,
                direction: 5.0,
                period: HOUR,
                exempt_below: 1.0,
                interval: 2 * MINUTE,
            },
            agreement: AgreementLimits {
                gust_below: 0.5,
                calm_direction: false,
            },
            attenuated_signal: AttenuatedLimits {
                period: 12 * HOUR,
                least_range: 0.5,
                usual_times: 4.0,
                calm_after: 48 * HOUR,
            },
            neighbour: NeighbourLimits::default(),
        }
    }
}

#[expect(
    clippy::trivially_copy_pass_by_ref,
    reason = "the signature is serde's"
)]
fn seconds<S: serde::Serializer>(micros: &i64, serializer: S) -> Result<S::Ok, S::Error> {
    serializer.serialize_f64(*micros as f64 / 1e6)
}
