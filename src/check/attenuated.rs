//! Attenuated signal.

use super::point::{hours, larger, smaller};
use super::witness::Witness;
use super::{Flag, Test};
use crate::settings::AttenuatedLimits;

/// Parts of the past that are forgotten one after the other.
const PARTS: usize = 12;
/// The same, for times.
const TIME_PARTS: i64 = 12;
/// Parts that must have a report.
const FEWEST_PARTS: usize = 6;

/// Slowest and fastest, m/s.
#[derive(Debug, Clone, Copy)]
struct Extent {
    least: f64,
    most: f64,
}

impl Extent {
    const NONE: Self = Self {
        least: f64::INFINITY,
        most: f64::NEG_INFINITY,
    };

    fn with(self, other: &Self) -> Self {
        Self {
            least: smaller(self.least, other.least),
            most: larger(self.most, other.most),
        }
    }

    fn is_some(&self) -> bool {
        self.most >= self.least
    }
}

/// Remembers slowest and fastest wind of half a day, to a twelfth of it, and what is usual at the station.
#[derive(Debug, Clone)]
pub(super) struct Attenuated {
    /// End of the current part, μs; parts end at multiples of their length since 1970.
    end: i64,
    current: Extent,
    past: [Extent; PARTS],
    next: usize,
    total: Extent,
    /// The past is whole enough to tell.
    known: bool,
    /// Sum and number of the ranges of earlier half days.
    usual: (f64, f64),
    /// Parts since the last of them.
    since: usize,
    /// Since when there is no more than a calm, μs.
    calm_since: Option<i64>,
}

impl Default for Attenuated {
    fn default() -> Self {
        Self {
            end: 0,
            current: Extent::NONE,
            past: [Extent::NONE; PARTS],
            next: 0,
            total: Extent::NONE,
            known: false,
            usual: (0.0, 0.0),
            since: 0,
            calm_since: None,
        }
    }
}

impl Attenuated {
    /// Suspect where the speed varies by less than the limit over half a day, at a station where it usually varies much
    /// more. A calm must last longer, as it does in sound sensors.
    ///
    /// - **Reference**: QARTOD wind manual, test 10 (attenuated signal; 12 h in its example, the limit left open); 0.5
    ///   m/s in 12 h is EPA's in its guidance for meteorological monitoring (from memory).
    #[inline]
    pub fn judge<W: Witness>(
        &mut self,
        time: i64,
        speed: f64,
        starting_speed: f64,
        limits: &AttenuatedLimits,
        witness: &mut W,
    ) -> Flag {
        if time >= self.end {
            self.forget(time, limits);
        }
        self.current.least = smaller(self.current.least, speed);
        self.current.most = larger(self.current.most, speed);
        if speed >= starting_speed {
            self.calm_since = None;
        } else if self.calm_since.is_none() {
            self.calm_since = Some(time);
        }
        let usual = self.usual_range();
        if !self.known || usual.is_none() {
            witness.tell(Test::AttenuatedSignal, Flag::NotEvaluated, || {
                "too little is known of the half days before".into()
            });
            return Flag::NotEvaluated;
        }
        let range = larger(self.total.most, self.current.most)
            - smaller(self.total.least, self.current.least);
        let usual = usual.unwrap_or(0.0);
        let attenuated = range < limits.least_range
            && usual >= limits.usual_times * limits.least_range
            && self
                .calm_since
                .is_none_or(|since| time - since >= limits.calm_after);
        let flag = if attenuated {
            Flag::Suspect
        } else {
            Flag::Pass
        };
        witness.tell(Test::AttenuatedSignal, flag, || {
            let calm = self.calm_since.map_or_else(String::new, |since| {
                format!(
                    "; calm for {}, exempt until {}",
                    hours(time - since),
                    hours(limits.calm_after)
                )
            });
            format!(
                "speeds of {} span {range:.1} m/s, usually {usual:.1}; less than {} m/s is suspect where {} are usual\
                 {calm}",
                hours(limits.period),
                limits.least_range,
                limits.usual_times * limits.least_range
            )
        });
        flag
    }

    /// Mean range of earlier half days, of which there must be two.
    fn usual_range(&self) -> Option<f64> {
        (self.usual.1 >= 2.0).then(|| self.usual.0 / self.usual.1)
    }

    /// Begins the part in which `time` lies.
    #[cold]
    fn forget(&mut self, time: i64, limits: &AttenuatedLimits) {
        let length = (limits.period / TIME_PARTS).max(1);
        let parts = (time - self.end).div_euclid(length).saturating_add(1);
        let parts = usize::try_from(parts).map_or(PARTS + 1, |parts| parts.min(PARTS + 1));
        for _ in 0..parts {
            self.past[self.next] = std::mem::replace(&mut self.current, Extent::NONE); // below PARTS
            self.next = (self.next + 1) % PARTS;
        }
        self.end = time
            .div_euclid(length)
            .saturating_add(1)
            .saturating_mul(length);
        self.total = self.past.iter().fold(Extent::NONE, Extent::with);
        let filled = self.past.iter().filter(|e| e.is_some()).count();
        // The oldest parts come first from `next` on.
        let oldest = (0..PARTS / 4).any(|k| self.past[(self.next + k) % PARTS].is_some());
        self.known = filled >= FEWEST_PARTS && oldest;
        self.since += parts;
        let range = self.total.most - self.total.least;
        if self.known && self.since >= PARTS && range >= limits.least_range {
            self.usual = (self.usual.0 + range, self.usual.1 + 1.0);
            self.since = 0;
        }
    }
}
