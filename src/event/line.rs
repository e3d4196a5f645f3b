//! Wind shifts of several stations joined into a moving line.

use super::arrival::{Forecast, PlaceArrival};
use super::fit::{Arrival, LineFit};
use super::motion::Motion;
use super::shift::{Passage, micros};
use super::track::seconds;
use crate::settings::EventSettings;
use crate::station::{Network, Position};
use crate::structure::{LocalPlane, PlanePoint};
use crate::time::Time;

/// Speeds that a line may have, m/s: below, a whole day of mean flow passes before it has crossed a network; 40 m/s is
/// more than gust fronts and squall lines reach (from memory).
const SPEEDS: std::ops::RangeInclusive<f64> = 1.0..=40.0;
/// A passage without a line is given up, and a line without a passage is over, after this time, s. A line of 3 m/s needs
/// 2 h from station to station 20 km apart.
const PATIENCE: f64 = 10_800.0;
/// How far a station may be from the nearest one of its line, in spacings of the network.
const NEAR: f64 = 2.5;
/// Passages around one with which it is tried.
const TRIED: usize = 8;
/// A line must have been on its way so many times as long as its wind shift takes at a station: all stations whose wind
/// changes slowly at about the same time are no line, though chance may order their times.
const ON_ITS_WAY: f64 = 3.0;
/// Standard deviation by which the pace of a line changes on the way to a place, as a share: assumed. Gust fronts and sea
/// breezes change theirs by at least so much within hours.
const CHANGES: f64 = 0.1;
/// Standard errors by which an arrival may miss the line's time.
const MISS: f64 = 3.0;
/// Two changes are alike if they differ by less than this share of the larger: 41 degrees at the same size, or three times
/// the size in the same direction.
const ALIKE: f64 = 0.7;

/// A line along which the wind shifts.
#[derive(Debug, Clone, PartialEq)]
pub struct LineEvent {
    /// First passage.
    pub start: Time,
    /// Last passage.
    pub end: Time,
    /// When enough stations had been passed to know the line.
    pub known_at: Time,
    /// True if more passages might have followed at the end of the run.
    pub open: bool,
    /// Stations passed, by their numbers, in the order of time.
    pub stations: Vec<usize>,
    /// How it moves.
    pub motion: Motion,
    /// Mean wind after less before, m/s, in the axes of the plane (x east, y north at the centre of the network).
    pub change: [f64; 2],
    /// The part of the change along the motion, m/s: above 0 the air flows together on the line.
    pub closing: f64,
    /// Where it was at whole hours: both ends, in the plane, m.
    pub fronts: Vec<(Time, [[f64; 2]; 2])>,
    /// When it reaches the places asked for: those that it comes by.
    pub arrivals: Vec<PlaceArrival>,
}

impl LineEvent {
    /// True if the air flows together on the line for the larger part of the change.
    #[must_use]
    pub fn is_convergent(&self) -> bool {
        let [x, y] = self.change;
        self.closing > 0.5 * x.hypot(y)
    }

    /// What it is, in words.
    #[must_use]
    pub fn name(&self) -> &'static str {
        if self.is_convergent() {
            "convergence line"
        } else {
            "wind-shift line"
        }
    }
}

/// A passage in the plane.
#[derive(Debug, Clone, Copy)]
struct Known {
    /// Its number among all passages.
    number: usize,
    passage: Passage,
    at: [f64; 2],
    change: [f64; 2],
}

/// A line that may go on.
#[derive(Debug)]
struct Open {
    number: usize,
    members: Vec<Known>,
    fit: LineFit,
    /// Times of the fit count from here.
    zero: Time,
    known_at: Time,
    /// For each place the first forecast.
    forecasts: Vec<Option<Forecast>>,
}

/// Joins passages into lines as they become known.
#[derive(Debug)]
pub struct LineFinder {
    least: usize,
    reach: f64,
    spacing: f64,
    stations: Vec<PlanePoint>,
    places: Vec<[f64; 2]>,
    free: Vec<Known>,
    open: Vec<Open>,
    /// Lines that are over, with their numbers.
    over: Vec<(usize, LineEvent)>,
    begun: usize,
    /// All passages, with the number of their line.
    passages: Vec<(Passage, Option<usize>)>,
    last: Option<Time>,
}

impl LineFinder {
    /// For a network with stations `spacing` m apart, and the places for which arrival times are wanted.
    #[must_use]
    pub fn new(
        network: &Network,
        plane: &LocalPlane,
        spacing: f64,
        settings: &EventSettings,
        places: impl Iterator<Item = Position>,
    ) -> Self {
        let stations = network.stations().iter();
        Self {
            least: settings.least_stations,
            reach: settings.reach,
            spacing,
            stations: stations.map(|s| plane.place(s.position)).collect(),
            places: places.map(|p| plane.place(p).at).collect(),
            free: Vec::new(),
            open: Vec::new(),
            over: Vec::new(),
            begun: 0,
            passages: Vec::new(),
            last: None,
        }
    }

    /// Takes in the passages that became known at a time.
    pub fn advance(&mut self, now: Time, passages: &[Passage]) {
        self.last = Some(now);
        self.free
            .retain(|known| seconds(known.passage.time, now) <= PATIENCE);
        let (over, open) = std::mem::take(&mut self.open)
            .into_iter()
            .partition(|line: &Open| seconds(line.end(), now) > PATIENCE);
        self.open = open;
        let over: Vec<Open> = over;
        for line in over {
            self.close(&line, false);
        }
        for passage in passages {
            let place = self.stations[passage.station]; // a station of the network
            let change = passage.change();
            let known = Known {
                number: self.passages.len(),
                passage: *passage,
                at: place.at,
                change: place.to_plane([change.u, change.v]),
            };
            self.passages.push((*passage, None));
            if !self.joins(known, now) {
                self.free.push(known);
                self.begins(known, now);
            }
        }
    }

    /// Gives a passage to the line that it fits best, if it fits one.
    fn joins(&mut self, known: Known, now: Time) -> bool {
        let near = NEAR * self.spacing;
        let misses = self.open.iter().enumerate().filter_map(|(k, line)| {
            let miss = line.miss(&known)?;
            (miss <= MISS && line.is_near(&known, near)).then_some((k, miss))
        });
        let Some((best, _)) = misses.min_by(|a, b| a.1.total_cmp(&b.1)) else {
            return false;
        };
        let line = &mut self.open[best];
        line.members.push(known);
        let fit = line.fitted().filter(is_plausible);
        let Some(fit) = fit else {
            line.members.pop();
            return false;
        };
        line.fit = fit;
        self.passages[known.number].1 = Some(line.number);
        self.forecast(best, now);
        true
    }

    /// Begins a line with a passage, if there are enough others that make one with it.
    fn begins(&mut self, known: Known, now: Time) {
        let near = NEAR * self.spacing;
        let mut around: Vec<(f64, Known)> = self
            .free
            .iter()
            .filter(|other| other.passage.station != known.passage.station)
            .filter(|other| alike(other.change, known.change))
            .map(|other| (distance(other.at, known.at), *other))
            .filter(|other| other.0 <= near)
            .collect();
        around.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.number.cmp(&b.1.number)));
        around.truncate(TRIED);
        let mut best: Option<Open> = None;
        for (k, (_, b)) in around.iter().enumerate() {
            for (_, c) in &around[k + 1..] {
                if b.passage.station == c.passage.station || is_flat(known.at, b.at, c.at) {
                    continue;
                }
                let Some(line) = self.grown(vec![known, *b, *c], now) else {
                    continue;
                };
                let more = best.as_ref().is_none_or(|best| {
                    let (n, of_best) = (line.members.len(), best.members.len());
                    n > of_best || n == of_best && line.roughness() < best.roughness()
                });
                if more {
                    best = Some(line);
                }
            }
        }
        let enough = |line: &Open| {
            let motion = line.fit.motion();
            line.members.len() >= self.least
                && is_plausible(&line.fit)
                && motion.speed_error < 0.5 * motion.speed
                && seconds(line.start(), line.end()) >= ON_ITS_WAY * line.width()
        };
        let Some(mut line) = best.filter(enough) else {
            return;
        };
        line.number = self.begun;
        self.begun += 1;
        line.forecasts = vec![None; self.places.len()];
        for member in &line.members {
            self.passages[member.number].1 = Some(line.number);
        }
        let is_member = |k: &Known| line.members.iter().any(|m| m.number == k.number);
        self.free.retain(|k| !is_member(k));
        self.open.push(line);
        self.forecast(self.open.len() - 1, now);
    }

    /// A line through three passages with all free ones that fit it, one after the other, the nearest first.
    fn grown(&self, seed: Vec<Known>, now: Time) -> Option<Open> {
        let zero = seed.first()?.passage.time;
        let near = NEAR * self.spacing;
        let fit = LineFit::of(&arrivals(&seed, zero)).filter(is_plausible)?;
        let mut line = Open {
            number: 0,
            members: seed,
            fit,
            zero,
            known_at: now,
            forecasts: Vec::new(),
        };
        loop {
            let candidates = self.free.iter().filter_map(|known| {
                let miss = line.miss(known)?;
                let away = line.distance(known);
                (miss <= MISS && away <= near).then_some((away, known))
            });
            let nearest = candidates.min_by(|a, b| {
                let number = a.1.number.cmp(&b.1.number);
                a.0.total_cmp(&b.0).then(number)
            });
            let Some((_, &known)) = nearest else { break };
            line.members.push(known);
            line.fit = line.fitted().filter(is_plausible)?;
        }
        // Those that fitted at first may not fit all.
        while line.members.len() > self.least {
            let misses = line.members.iter().map(|member| line.raw_miss(member));
            let worst = misses.enumerate().max_by(|a, b| a.1.total_cmp(&b.1));
            let Some((k, _)) = worst.filter(|worst| worst.1 > MISS) else {
                break;
            };
            line.members.remove(k);
            line.fit = line.fitted().filter(is_plausible)?;
        }
        Some(line)
    }

    /// Notes the first forecast for each place that an open line has not reached yet.
    fn forecast(&mut self, line: usize, now: Time) {
        let line = &mut self.open[line];
        for (k, &at) in self.places.iter().enumerate() {
            let arrival = line.arrival(at, self.reach, self.spacing);
            if line.forecasts[k].is_none()
                && let Some((time, error)) = arrival.filter(|arrival| arrival.0 > now)
            {
                // From the middle of what has been seen to the arrival.
                let (start, end) = (line.start(), line.end());
                let ahead = seconds(end, time) + 0.5 * seconds(start, end);
                line.forecasts[k] = Some(Forecast {
                    made_at: now,
                    time,
                    error: error.hypot(CHANGES * ahead.max(0.0)),
                });
            }
        }
    }

    fn close(&mut self, line: &Open, open: bool) {
        let mut members = line.members.clone();
        members.sort_by_key(|m| (m.passage.time, m.passage.station));
        let count = members.len() as f64;
        let mean = |k: usize| members.iter().map(|m| m.change[k]).sum::<f64>() / count;
        let change = [mean(0), mean(1)];
        let [e, n] = line.fit.normal();
        let arrivals = self.places.iter().zip(&line.forecasts).enumerate();
        let arrivals = arrivals.filter_map(|(place, (&at, &first))| {
            let last = line.arrival(at, self.reach, self.spacing);
            (first.is_some() || last.is_some()).then_some(PlaceArrival { place, first, last })
        });
        let (start, end) = (line.start(), line.end());
        let event = LineEvent {
            start,
            end,
            known_at: line.known_at,
            open,
            stations: members.iter().map(|m| m.passage.station).collect(),
            motion: line.told().motion(),
            change,
            closing: change[0] * e + change[1] * n,
            fronts: line.fronts(0.5 * self.spacing),
            arrivals: arrivals.collect(),
        };
        self.over.push((line.number, event));
    }

    /// All lines in the order of their start; all passages in the order in which they became known, with the place of
    /// their line in that list.
    #[must_use]
    pub fn finish(mut self) -> (Vec<LineEvent>, Vec<(Passage, Option<usize>)>) {
        for line in std::mem::take(&mut self.open) {
            self.close(&line, true);
        }
        let mut over = self.over;
        over.sort_by_key(|(number, line)| (line.start, *number));
        let mut place = vec![None; self.begun];
        for (k, (number, _)) in over.iter().enumerate() {
            place[*number] = Some(k);
        }
        let numbered = |(passage, line): (Passage, Option<usize>)| {
            (passage, line.and_then(|number| place[number]))
        };
        let passages = self.passages.into_iter().map(numbered).collect();
        (over.into_iter().map(|(_, line)| line).collect(), passages)
    }
}

impl Open {
    fn start(&self) -> Time {
        let times = self.members.iter().map(|m| m.passage.time);
        times.min().unwrap_or(self.zero)
    }

    fn end(&self) -> Time {
        let times = self.members.iter().map(|m| m.passage.time);
        times.max().unwrap_or(self.zero)
    }

    /// The fit with the errors that are told.
    fn told(&self) -> LineFit {
        self.fit
            .with_unsteadiness(&arrivals(&self.members, self.zero))
    }

    /// How long the wind shift takes at a station on average, s.
    fn width(&self) -> f64 {
        let widths = self.members.iter().map(|m| m.passage.width);
        widths.sum::<f64>() / self.members.len().max(1) as f64
    }

    fn fitted(&self) -> Option<LineFit> {
        LineFit::of(&arrivals(&self.members, self.zero))
    }

    fn distance(&self, known: &Known) -> f64 {
        let distances = self.members.iter().map(|m| distance(m.at, known.at));
        distances.fold(f64::INFINITY, f64::min)
    }

    fn is_near(&self, known: &Known, near: f64) -> bool {
        self.distance(known) <= near
    }

    /// By how many standard errors a passage misses the line; `None` if it cannot be of it.
    fn miss(&self, known: &Known) -> Option<f64> {
        let count = self.members.len() as f64;
        let mean = |k: usize| self.members.iter().map(|m| m.change[k]).sum::<f64>() / count;
        let station = known.passage.station;
        if self.members.iter().any(|m| m.passage.station == station)
            || !alike(known.change, [mean(0), mean(1)])
        {
            return None;
        }
        let off = seconds(self.zero, known.passage.time) - self.fit.time_at(known.at);
        let own = known.passage.error.powi(2) + self.fit.excess();
        Some(off.abs() / (own + self.fit.variance_at(known.at)).sqrt())
    }

    /// By how many of its own standard errors a member misses the line.
    fn raw_miss(&self, known: &Known) -> f64 {
        let off = seconds(self.zero, known.passage.time) - self.fit.time_at(known.at);
        off.abs() / (known.passage.error.powi(2) + self.fit.excess()).sqrt()
    }

    fn roughness(&self) -> f64 {
        self.members.iter().map(|m| self.raw_miss(m).powi(2)).sum()
    }

    /// Ranges of the members along the motion and across it, from the middle of the fit, m.
    fn extent(&self) -> [[f64; 2]; 2] {
        let [e, n] = self.fit.normal();
        let range = |[a, b]: [f64; 2]| {
            let along = self.members.iter().map(|m| m.at[0] * a + m.at[1] * b);
            along.fold([f64::INFINITY, f64::NEG_INFINITY], |[least, most], x| {
                [least.min(x), most.max(x)]
            })
        };
        [range([e, n]), range([-n, e])]
    }

    /// When the line comes by a point, and the error, s: points not behind the first station passed, not more than
    /// `reach` beyond the last, and not more than a spacing to the side.
    fn arrival(&self, at: [f64; 2], reach: f64, spacing: f64) -> Option<(Time, f64)> {
        let [e, n] = self.fit.normal();
        let [along, across] = self.extent();
        let ahead = at[0] * e + at[1] * n;
        let aside = at[1] * e - at[0] * n;
        let within = (along[0]..=along[1] + reach).contains(&ahead)
            && (across[0] - spacing..=across[1] + spacing).contains(&aside);
        let time = self.zero.plus_micros(micros(self.fit.time_at(at).round()));
        within.then(|| (time, self.fit.error_at(at)))
    }

    /// Both ends of the line at each whole hour of its life, and at its last passage.
    fn fronts(&self, beyond: f64) -> Vec<(Time, [[f64; 2]; 2])> {
        const HOUR: i64 = 3_600_000_000;
        /// Whole hours shown at most.
        const MOST: usize = 200;
        let [e, n] = self.fit.normal();
        let [_, [left, right]] = self.extent();
        let (first, last) = (self.start().micros(), self.end().micros());
        let whole = (first.div_euclid(HOUR) + 1..).map(|hour| hour.saturating_mul(HOUR));
        let hours = whole.take_while(|&time| time < last).take(MOST);
        let at = |micros: i64| {
            let time = Time::from_micros(micros);
            let [x, y] = self.fit.front(seconds(self.zero, time));
            let aside = y * e - x * n;
            let end = |side: f64| [x - n * (side - aside), y + e * (side - aside)];
            (time, [end(left - beyond), end(right + beyond)])
        };
        hours.chain([last]).map(at).collect()
    }
}

fn arrivals(members: &[Known], zero: Time) -> Vec<Arrival> {
    let arrival = |known: &Known| Arrival {
        at: known.at,
        time: seconds(zero, known.passage.time),
        error: known.passage.error,
    };
    members.iter().map(arrival).collect()
}

fn is_plausible(fit: &LineFit) -> bool {
    SPEEDS.contains(&fit.speed())
}

fn distance(a: [f64; 2], b: [f64; 2]) -> f64 {
    (a[0] - b[0]).hypot(a[1] - b[1])
}

/// True if three points lie nearly on one line: a sine below 0.2 at the first.
fn is_flat(a: [f64; 2], b: [f64; 2], c: [f64; 2]) -> bool {
    let (p, q) = ([b[0] - a[0], b[1] - a[1]], [c[0] - a[0], c[1] - a[1]]);
    (p[0] * q[1] - p[1] * q[0]).abs() < 0.2 * p[0].hypot(p[1]) * q[0].hypot(q[1])
}

fn alike(a: [f64; 2], b: [f64; 2]) -> bool {
    let larger = a[0].hypot(a[1]).max(b[0].hypot(b[1]));
    distance(a, b) <= ALIKE * larger
}
