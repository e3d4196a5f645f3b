//! All tests of the reports of a station, one report after the other.

use rayon::prelude::*;

use super::agreement::agreement_flag;
use super::attenuated::Attenuated;
use super::climatology::Climatology;
use super::gap::gap_flag;
use super::location::location_flag;
use super::persistence::Persistence;
use super::point::{Point, larger};
use super::range::{range_flag, tell_range};
use super::rate::RateOfChange;
use super::spike::spike_flag;
use super::steps::Steps;
use super::stuck::Stuck;
use super::witness::{Listener, Nobody, Witness};
use super::{Explained, Flag, Test, TestFlags};
use crate::report::{Content, ReportTable, Rounding, RoundingFinder};
use crate::settings::CheckLimits;
use crate::station::Position;

/// What the tests of a station know of its reports so far.
///
/// Every report is judged once, in the order of time, with the reports after it in sight; so the flags do not depend on
/// the windows in which the reports came.
#[derive(Debug, Clone)]
pub struct StationScreen {
    rounding: RoundingFinder,
    steps: Steps,
    /// Reports until the steps are looked at again.
    until_look: u32,
    looks: u32,
    /// Time of the last report of any kind, μs.
    last_time: Option<i64>,
    /// The last report with a wind.
    last: Option<Point>,
    climatology: Climatology,
    rate: RateOfChange,
    stuck: Stuck,
    persistence: Persistence,
    attenuated: Attenuated,
    listener: Option<Box<Listener>>,
}

impl Default for StationScreen {
    fn default() -> Self {
        Self {
            rounding: RoundingFinder::default(),
            steps: Steps::default(),
            until_look: FIRST_LOOK,
            looks: 0,
            last_time: None,
            last: None,
            climatology: Climatology::default(),
            rate: RateOfChange::default(),
            stuck: Stuck::default(),
            persistence: Persistence::default(),
            attenuated: Attenuated::default(),
            listener: None,
        }
    }
}

/// Reports before the steps of a station are looked at for the first time; then after twice as many each time.
const FIRST_LOOK: u32 = 32;
/// How often they are looked at: later reports change nothing.
const LOOKS: u32 = 6;

/// Flags of the reports of one station.
struct Columns<'a> {
    own: &'a mut [Flag],
    tests: &'a mut [TestFlags],
    /// The first of them in the table.
    start: usize,
}

/// Judges the new reports of each station of a table. `limits` of `None` judges nothing, but still finds the steps to
/// which the stations round. `positions` are those of the station list.
pub fn screen(
    table: &mut ReportTable,
    screens: &mut [StationScreen],
    positions: &[Position],
    limits: Option<&CheckLimits>,
) {
    let (mut flags, mut tests) = table.take_flags();
    let (mut rest, mut rest_tests) = (flags.as_mut_slice(), tests.as_mut_slice());
    let mut parts = Vec::with_capacity(screens.len());
    for station in 0..table.stations() {
        let reports = table.of_station(station);
        let (flags, later) = rest.split_at_mut(reports.len());
        let (tests, later_tests) = rest_tests.split_at_mut(reports.len());
        (rest, rest_tests) = (later, later_tests);
        parts.push(Columns {
            own: flags,
            tests,
            start: reports.start,
        });
    }
    let seen: &ReportTable = table;
    let mask = limits.map_or_else(TestFlags::default, |l| TestFlags::mask_without(&l.off));
    screens
        .par_iter_mut()
        .zip(parts)
        .enumerate()
        .for_each(|(station, (screen, mut part))| {
            let Some(limits) = limits else {
                return screen.look_only(seen, station);
            };
            let job = Job {
                table: seen,
                station,
                listed: positions.get(station).copied(),
                limits,
                mask,
            };
            match screen.listener.take() {
                None => screen.judge(&job, &mut part, &mut Nobody),
                Some(mut listener) => {
                    screen.judge(&job, &mut part, &mut *listener);
                    screen.listener = Some(listener);
                }
            }
        });
    table.put_flags(flags, tests);
}

/// Judges a whole table at once.
pub fn screen_all(table: &mut ReportTable, positions: &[Position], limits: &CheckLimits) {
    let mut screens = vec![StationScreen::default(); table.stations()];
    screen(table, &mut screens, positions, Some(limits));
}

/// The reports of a station and what to judge them by.
struct Job<'a> {
    table: &'a ReportTable,
    station: usize,
    listed: Option<Position>,
    limits: &'a CheckLimits,
    mask: TestFlags,
}

/// The first report with a wind among `from..end`, with its place.
#[inline]
fn following(table: &ReportTable, from: usize, end: usize, fastest: f64) -> (usize, Option<Point>) {
    let mut k = from;
    while k < end {
        if let Some(point) = Point::of(table, k, fastest) {
            return (k, Some(point));
        }
        k += 1;
    }
    (usize::MAX, None)
}

impl StationScreen {
    /// Listens to the tests of the reports at or near a time.
    pub fn listen(&mut self, listener: Listener) {
        self.listener = Some(Box::new(listener));
    }

    /// What was heard, in the order of time.
    #[must_use]
    pub fn heard(&self) -> Vec<Explained> {
        let listener = self.listener.as_deref();
        listener.map_or_else(Vec::new, Listener::heard)
    }

    /// Steps of the station's reports, as far as they are known by now.
    #[must_use]
    pub fn rounding(&self) -> Rounding {
        self.rounding.found()
    }

    fn look_only(&mut self, table: &ReportTable, station: usize) {
        for i in table.fresh(station) {
            if !self.rounding.wants_more() {
                break;
            }
            self.rounding.add(table.speed(i), table.direction(i));
        }
    }

    fn judge<W: Witness>(&mut self, job: &Job, out: &mut Columns, witness: &mut W) {
        let table = job.table;
        let end = table.of_station(job.station).end;
        let fastest = job.limits.range.speed_fail;
        // The next report with a wind, where it is known already.
        let mut next: (usize, Option<Point>) = (usize::MAX, None);
        for i in table.fresh(job.station) {
            witness.begin(table, i);
            if self.rounding.wants_more() {
                self.look(table, i);
            }
            let point = if next.0 == i {
                next.1
            } else {
                Point::of(table, i, fastest)
            };
            let mut tests = self.alone(job, i, witness);
            if let Some(now) = point
                && !table.has_level(i)
            {
                next = following(table, i + 1, end, fastest);
                tests = self.in_series(&now, next.1.as_ref(), tests, job.limits, witness);
            }
            let tests = tests.masked(job.mask);
            let flag = match table.content(i) {
                Content::Nothing => Flag::Missing,
                _ => tests.worst(),
            };
            witness.end(flag);
            let k = i - out.start;
            out.own[k] = out.own[k].worst(flag);
            out.tests[k] = tests;
        }
    }

    /// The tests that need no other wind.
    #[inline]
    fn alone<W: Witness>(&mut self, job: &Job, i: usize, witness: &mut W) -> TestFlags {
        let (table, limits) = (job.table, job.limits);
        let time = table.times()[i].micros();
        let since = self.last_time.map(|last| time - last);
        self.last_time = Some(time);
        let gap = gap_flag(since, limits.gap, witness);
        let mut tests = TestFlags::default().with(Test::TimingGap, gap);
        if table.has_moving()
            && let (Some(own), Some(listed), Some(furthest)) = (
                table.moving(i).and_then(|m| m.position),
                job.listed,
                limits.displacement,
            )
        {
            let flag = location_flag(own, listed, furthest, witness);
            tests = tests.with(Test::Location, flag);
        }
        let speed = table.speed(i);
        let range = range_flag(speed, &limits.range);
        tell_range(speed, &limits.range, range, witness);
        let Some(speed) = speed else {
            return tests;
        };
        let climatology = self
            .climatology
            .judge(time, speed, &limits.climatology, witness);
        let agreement = agreement_flag(table, i, table.content(i), &limits.agreement, witness);
        tests
            .with(Test::GrossRange, range)
            .with(Test::Climatology, climatology)
            .with(Test::Agreement, agreement)
    }

    /// The tests of a wind among those before and after it.
    #[inline]
    fn in_series<W: Witness>(
        &mut self,
        now: &Point,
        next: Option<&Point>,
        tests: TestFlags,
        limits: &CheckLimits,
        witness: &mut W,
    ) -> TestFlags {
        let back = now.step_from(self.last.as_ref(), limits.gap);
        let ahead = next.and_then(|next| next.step_from(Some(now), limits.gap));
        let since = back.map_or(i64::MAX, |step| step.time);
        // What rounding of the direction can do to u or v, m/s.
        let before = self.last.map_or(0.0, |last| last.speed);
        let after = next.map_or(0.0, |next| next.speed);
        let rounding = self.steps.turn * larger(now.speed, larger(before, after));
        self.last = Some(*now);
        let spike = spike_flag(back, ahead, rounding, &limits.spike, witness);
        let rate = self
            .rate
            .judge(now.time, back, rounding, &limits.rate_of_change, witness);
        let stuck = self
            .stuck
            .judge(now, back.is_some(), self.steps, limits, witness);
        let persistence = self
            .persistence
            .judge(now, since, &limits.persistence, witness);
        let attenuated = self.attenuated.judge(
            now.time,
            now.speed,
            limits.starting_speed,
            &limits.attenuated_signal,
            witness,
        );
        tests
            .with(Test::Spike, spike)
            .with(Test::RateOfChange, rate)
            .with(Test::FlatLine, stuck.flat_line)
            .with(Test::StuckVane, stuck.vane)
            .with(Test::FrozenAnemometer, stuck.anemometer)
            .with(Test::Persistence, persistence)
            .with(Test::AttenuatedSignal, attenuated)
    }

    /// Looks to which steps the station rounds, at fixed numbers of its reports.
    #[cold]
    fn look(&mut self, table: &ReportTable, i: usize) {
        let direction = table.direction(i);
        self.rounding.add(table.speed(i), direction);
        self.until_look = self
            .until_look
            .saturating_sub(u32::from(direction.is_some()));
        if self.until_look > 0 || self.looks == LOOKS {
            return;
        }
        self.looks += 1;
        self.until_look = FIRST_LOOK << self.looks;
        self.steps = Steps::from(self.rounding.found());
    }
}
