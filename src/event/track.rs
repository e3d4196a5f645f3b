//! Areas followed in time: onset, end, splits and merges.

use std::cmp::Reverse;

use super::area::{AreaKind, Cell, Snapshot, connected};
use super::motion::{Motion, Path};
use crate::integral::Peak;
use crate::time::Time;

/// An area that is gone for no longer than this goes on, s: a vortex of 8 m/s needs that time past a hole of 15 km in the
/// mesh.
const GAP: f64 = 1200.0;

/// An area over its life.
#[derive(Debug, Clone, PartialEq)]
pub struct AreaEvent {
    /// What the air does.
    pub kind: AreaKind,
    /// First time with a triangle that begins an event.
    pub start: Time,
    /// Last time with a triangle that belongs to it.
    pub end: Time,
    /// True if it was still there at the end of the run.
    pub open: bool,
    /// The strongest mean.
    pub peak: Peak,
    /// The strength there: 1 is what begins an event.
    pub strength: f64,
    /// The triangles when their area was largest.
    pub polygons: Vec<usize>,
    /// That area, m².
    pub area: f64,
    /// Its centres, weighted by circulation or flux.
    pub path: Path,
    /// How it moves until the last time with a triangle that begins an event.
    pub motion: Option<Motion>,
    /// The event that it split off from, by its place in the list.
    pub split_from: Option<usize>,
    /// The event that it merged into, by its place in the list.
    pub merged_into: Option<usize>,
}

/// A followed area.
#[derive(Debug)]
struct Track {
    number: usize,
    event: AreaEvent,
    /// Its cells at the last time.
    cells: Vec<Cell>,
    /// True once it has lasted long enough.
    confirmed: bool,
}

/// Follows the areas of all kinds.
#[derive(Debug)]
pub struct Tracker {
    lasting: f64,
    /// An area that is gone for longer is over, s.
    gap: f64,
    tracks: [Vec<Track>; 4],
    /// Events that are over, with their numbers.
    over: Vec<(usize, AreaEvent)>,
    next: usize,
    last: Option<Time>,
}

/// Seconds from one time to another.
pub(super) fn seconds(from: Time, to: Time) -> f64 {
    to.micros().saturating_sub(from.micros()) as f64 * 1e-6
}

impl Tracker {
    /// Areas that last less than `lasting` s are no events; `interval` s lie between the times.
    #[must_use]
    pub fn new(lasting: f64, interval: f64) -> Self {
        Self {
            lasting,
            gap: GAP.max(interval),
            tracks: Default::default(),
            over: Vec::new(),
            next: 0,
            last: None,
        }
    }

    /// Takes in the next time.
    pub fn advance(&mut self, snapshot: &Snapshot) {
        self.last = Some(snapshot.time);
        for (k, cells) in snapshot.cells.iter().enumerate() {
            self.advance_kind(k, snapshot.time, cells);
        }
    }

    fn advance_kind(&mut self, kind: usize, time: Time, cells: &[Cell]) {
        let (gone, mut tracks): (Vec<Track>, Vec<Track>) = std::mem::take(&mut self.tracks[kind])
            .into_iter()
            .partition(|track| seconds(track.event.end, time) > self.gap);
        for track in gone {
            self.close(track);
        }
        let groups: Vec<Vec<Cell>> = connected(cells)
            .into_iter()
            .map(|group| group.into_iter().map(|k| cells[k]).collect())
            .collect();
        // What each track and each group share; most shared first.
        let mut pairs = Vec::new();
        for (t, track) in tracks.iter().enumerate() {
            for (g, group) in groups.iter().enumerate() {
                let shared = shared_area(&track.cells, group);
                if shared > 0.0 || touch(&track.cells, group) {
                    pairs.push((track.confirmed, shared, t, g));
                }
            }
        }
        pairs.sort_by(|a, b| {
            let order = (Reverse(a.0), a.2, a.3).cmp(&(Reverse(b.0), b.2, b.3));
            Reverse(a.0)
                .cmp(&Reverse(b.0))
                .then(b.1.total_cmp(&a.1))
                .then(order)
        });
        let mut group_of = vec![None; tracks.len()];
        let mut track_of = vec![None; groups.len()];
        for &(_, _, t, g) in &pairs {
            if group_of[t].is_none() && track_of[g].is_none() {
                (group_of[t], track_of[g]) = (Some(g), Some(t));
            }
        }
        let shared = |wanted: &dyn Fn(usize, usize) -> bool| {
            let mut found = pairs
                .iter()
                .filter(|&&(_, shared, t, g)| shared > 0.0 && wanted(t, g));
            found.next().copied()
        };
        // Tracks whose cells have become part of another's group.
        let merged: Vec<Option<usize>> = (0..tracks.len())
            .map(|t| {
                let (_, _, _, g) = shared(&|other, _| group_of[t].is_none() && other == t)?;
                Some(tracks[track_of[g]?].number)
            })
            .collect();
        let mut fresh = Vec::new();
        for (g, group) in groups.iter().enumerate() {
            if track_of[g].is_some() || !group.iter().any(|cell| cell.begins) {
                continue;
            }
            let split_from = shared(&|_, other| other == g).map(|pair| tracks[pair.2].number);
            if let Some(track) =
                Track::begin(self.next, AreaKind::ALL[kind], time, group, split_from)
            {
                fresh.push(track);
                self.next += 1;
            }
        }
        for (t, track) in tracks.iter_mut().enumerate() {
            if let Some(g) = group_of[t] {
                track.go_on(time, &groups[g], self.lasting);
            }
        }
        for (track, merged) in tracks.into_iter().zip(merged) {
            match merged {
                Some(into) => {
                    let mut track = track;
                    track.event.merged_into = Some(into);
                    self.close(track);
                }
                None => self.tracks[kind].push(track),
            }
        }
        self.tracks[kind].extend(fresh);
    }

    fn close(&mut self, mut track: Track) {
        if track.confirmed {
            track.event.motion = track.event.path.motion();
            self.over.push((track.number, track.event));
        }
    }

    /// All events, in the order of their start.
    #[must_use]
    pub fn finish(mut self) -> Vec<AreaEvent> {
        for tracks in std::mem::take(&mut self.tracks) {
            for mut track in tracks {
                let since = self.last.map_or(0.0, |last| seconds(track.event.end, last));
                track.event.open = since <= self.gap;
                self.close(track);
            }
        }
        let mut events = self.over;
        events.sort_by_key(|(number, event)| (event.start, event.kind, *number));
        let numbers: Vec<usize> = events.iter().map(|(number, _)| *number).collect();
        let place = |number: usize| numbers.iter().position(|&n| n == number);
        let mut listed: Vec<AreaEvent> = Vec::with_capacity(events.len());
        for (_, mut event) in events {
            event.split_from = event.split_from.and_then(place);
            event.merged_into = event.merged_into.and_then(place);
            listed.push(event);
        }
        listed
    }
}

impl Track {
    fn begin(
        number: usize,
        kind: AreaKind,
        time: Time,
        cells: &[Cell],
        split_from: Option<usize>,
    ) -> Option<Self> {
        let strongest = strongest(cells)?;
        let mut track = Self {
            number,
            event: AreaEvent {
                kind,
                start: time,
                end: time,
                open: false,
                peak: peak(strongest, time),
                strength: strongest.strength,
                polygons: Vec::new(),
                area: 0.0,
                path: Path::default(),
                motion: None,
                split_from,
                merged_into: None,
            },
            cells: Vec::new(),
            confirmed: false,
        };
        track.go_on(time, cells, f64::INFINITY);
        Some(track)
    }

    fn go_on(&mut self, time: Time, cells: &[Cell], lasting: f64) {
        let event = &mut self.event;
        event.end = time;
        if let Some(strongest) = strongest(cells).filter(|s| s.strength > event.strength) {
            event.strength = strongest.strength;
            event.peak = peak(strongest, time);
        }
        let area: f64 = cells.iter().map(|cell| cell.area).sum();
        if area > event.area {
            event.area = area;
            event.polygons = cells.iter().map(|cell| cell.polygon).collect();
        }
        let weight = |cell: &Cell| cell.value.abs() * cell.area;
        let total: f64 = cells.iter().map(weight).sum();
        let mean = |k: usize| cells.iter().map(|c| weight(c) * c.centre[k]).sum::<f64>() / total;
        event.path.push(
            time,
            [mean(0), mean(1)],
            cells.iter().map(|c| c.area).sum::<f64>() / cells.len() as f64,
        );
        self.cells.clear();
        self.cells.extend_from_slice(cells);
        if cells.iter().any(|cell| cell.begins) {
            event.path.count(time);
            let lasted = seconds(event.start, time);
            self.confirmed |= lasted >= lasting && lasted > 0.0;
        }
    }
}

/// The strongest cell, of equals the first.
fn strongest(cells: &[Cell]) -> Option<&Cell> {
    cells
        .iter()
        .reduce(|a, b| if b.strength > a.strength { b } else { a })
}

fn peak(cell: &Cell, time: Time) -> Peak {
    Peak {
        polygon: cell.polygon,
        time,
        value: cell.value,
        error: cell.error,
    }
}

fn shared_area(a: &[Cell], b: &[Cell]) -> f64 {
    let both = b
        .iter()
        .filter(|cell| a.iter().any(|other| other.polygon == cell.polygon));
    both.map(|cell| cell.area).sum()
}

/// True if a triangle of one has a station in common with one of the other.
fn touch(a: &[Cell], b: &[Cell]) -> bool {
    let has = |station: &usize| a.iter().any(|cell| cell.stations.contains(station));
    b.iter().any(|cell| cell.stations.iter().any(has))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Triangles in a row: number k has the stations k, k + 1, k + 2, so that only those apart by three or more are apart.
    fn cell(k: usize, strength: f64) -> Cell {
        Cell {
            polygon: k,
            stations: [k, k + 1, k + 2],
            area: 1e8,
            centre: [1e4 * k as f64, 0.0],
            value: -1e-4 * strength,
            error: 1e-5,
            strength,
            begins: strength >= 1.0,
        }
    }

    /// Convergence in these triangles, 5 min apart; `None` for a time without any.
    fn follow(times: &[&[(usize, f64)]]) -> Vec<AreaEvent> {
        let mut tracker = Tracker::new(900.0, 300.0);
        for (t, cells) in times.iter().enumerate() {
            let time = Time::from_micros(300_000_000 * i64::try_from(t).unwrap_or(0));
            let cells = cells
                .iter()
                .map(|&(k, strength)| cell(k, strength))
                .collect();
            let cells = [cells, Vec::new(), Vec::new(), Vec::new()];
            tracker.advance(&Snapshot { time, cells });
        }
        tracker.finish()
    }

    fn minutes(time: Time) -> i64 {
        time.micros() / 60_000_000
    }

    #[test]
    fn onset_and_end_have_their_own_strength() {
        let weak: &[(usize, f64)] = &[(0, 0.6)];
        let strong: &[(usize, f64)] = &[(0, 1.5), (1, 0.7)];
        let events = follow(&[
            weak,
            weak,
            strong,
            strong,
            &[(0, 1.1)],
            strong,
            weak,
            weak,
            &[],
        ]);
        assert_eq!(events.len(), 1);
        assert_eq!((minutes(events[0].start), minutes(events[0].end)), (10, 35));
        assert!((events[0].area - 2e8).abs() < 1.0 && events[0].polygons == [0, 1]);
        assert!((events[0].strength - 1.5).abs() < 1e-12 && minutes(events[0].peak.time) == 10);
        // A strong triangle for 10 min only is no event.
        assert!(follow(&[strong, strong, strong, weak, weak, weak]).is_empty());
    }

    #[test]
    fn a_short_gap_does_not_end_an_area_and_a_long_one_does() {
        let on: &[(usize, f64)] = &[(0, 1.5)];
        let off: &[(usize, f64)] = &[];
        let short = follow(&[on, on, on, on, off, off, off, on, on, on, on]);
        assert_eq!(short.len(), 1);
        let long = follow(&[on, on, on, on, off, off, off, off, on, on, on, on]);
        assert_eq!(long.len(), 2);
        assert!(!long[0].open && long[1].open);
    }

    #[test]
    fn the_larger_part_goes_on_and_splits_and_merges_are_noted() {
        let whole: &[(usize, f64)] = &[(0, 1.2), (2, 1.2), (4, 1.2), (5, 1.2), (6, 1.2)];
        let parts: &[(usize, f64)] = &[(0, 1.2), (4, 1.2), (5, 1.2), (6, 1.2)];
        let events = follow(&[
            whole, whole, parts, parts, parts, parts, whole, whole, whole,
        ]);
        assert_eq!(events.len(), 2);
        assert_eq!((minutes(events[0].start), minutes(events[0].end)), (0, 40));
        assert_eq!((minutes(events[1].start), minutes(events[1].end)), (10, 25));
        assert_eq!(
            (events[1].split_from, events[1].merged_into),
            (Some(0), Some(0))
        );
        assert_eq!((events[0].split_from, events[0].merged_into), (None, None));
    }

    #[test]
    fn an_area_is_followed_from_triangle_to_triangle() {
        let times: Vec<Vec<(usize, f64)>> = (0..30).map(|t| vec![(t / 3, 1.2)]).collect();
        let times: Vec<&[(usize, f64)]> = times.iter().map(Vec::as_slice).collect();
        let events = follow(&times);
        assert_eq!(events.len(), 1);
        let motion = events[0]
            .motion
            .map(|m| (m.speed, m.speed_error, m.heading));
        // 10 km in 15 min towards east.
        let expected = 1e4 / 900.0;
        let (speed, error, heading) = motion.unwrap_or_default();
        assert!(
            (speed - expected).abs() < 2.0 * error && error < 2.0,
            "{motion:?}"
        );
        assert!((heading - 90.0).abs() < 1.0, "{motion:?}");
    }
}
