//! From the reports to events.

use super::Setup;
use super::run::{BlockView, Outcome, run};
use crate::align::WindBlock;
use crate::error::Error;
use crate::event::{
    AreaEvent, AreaFinder, LineEvent, LineFinder, Passage, ShiftFinder, Snapshot, Tracker,
};
use crate::polygon::StationPolygon;
use crate::report::InputOrder;
use crate::structure::{LocalPlane, TemporalFunction};
use crate::time::Time;

/// What came of a search for events.
#[derive(Debug)]
pub struct EventsOutcome {
    /// The run that they come from.
    pub run: Outcome,
    /// The plane in which places are given.
    pub plane: LocalPlane,
    /// Areas, in the order of their start.
    pub areas: Vec<AreaEvent>,
    /// For each area the station that all of it lies around, if the means of the whole run around that station are odd
    /// ([`Outcome::attributions`]).
    pub doubts: Vec<Option<usize>>,
    /// Lines, in the order of their start.
    pub lines: Vec<LineEvent>,
    /// Wind shifts at stations in the order in which they became known, with the place of their line in the list.
    pub passages: Vec<(Passage, Option<usize>)>,
}

/// The winds and strong triangles of a block.
struct Observed {
    winds: WindBlock,
    temporal: Vec<TemporalFunction>,
    snapshots: Vec<Snapshot>,
}

/// Runs the main job and follows what happens; `progress` hears how many rows have been read.
///
/// # Errors
/// As [`super::run()`]; a network without two places.
pub fn find_events(
    setup: &Setup,
    order: InputOrder,
    progress: impl FnMut(u64),
) -> Result<EventsOutcome, Error> {
    find_events_and(setup, order, |_| (), |()| Ok(()), progress)
}

/// The same, and what [`super::run()`] does with `encode` and `write`.
///
/// # Errors
/// As [`find_events`]; whatever `write` returns.
pub fn find_events_and<T: Send>(
    setup: &Setup,
    order: InputOrder,
    encode: impl Fn(&BlockView) -> T + Sync,
    mut write: impl FnMut(T) -> Result<(), Error> + Send,
    progress: impl FnMut(u64),
) -> Result<EventsOutcome, Error> {
    let settings = &setup.settings;
    let interval = settings.analysis.interval.as_secs_f64();
    let spacing = setup
        .spacing()
        .ok_or_else(|| Error::Network("events need stations at two places at least".into()))?;
    let plane = LocalPlane::at(middle(setup));
    let network = &setup.network;
    let polygons = &setup.built.polygons;
    let finder = AreaFinder::new(
        network,
        &plane,
        polygons,
        &setup.planetary,
        settings.events.onset,
    );
    let places = settings.places.iter().map(|place| place.position);
    let mut tracker = Tracker::new(settings.events.lasting, interval);
    let mut shifts = ShiftFinder::new(network.len(), &settings.events, interval);
    let mut lines = LineFinder::new(network, &plane, spacing, &settings.events, places);
    let prior = settings.errors.structure.prior(spacing).temporal;

    let observe = |seen: &BlockView| {
        let observed = Observed {
            winds: seen.winds.clone(),
            temporal: seen.models.iter().map(|model| model.temporal).collect(),
            snapshots: finder.snapshots(seen.estimates),
        };
        (observed, encode(seen))
    };
    let follow = |(observed, encoded): (Observed, T)| {
        for snapshot in &observed.snapshots {
            tracker.advance(snapshot);
        }
        for (t, &time) in observed.winds.times.iter().enumerate() {
            let temporal = observed.temporal.get(t).unwrap_or(&prior);
            let passages = shifts.advance(&observed.winds, t, temporal);
            lines.advance(time, &passages);
        }
        write(encoded)
    };
    let run = run(setup, order, observe, follow, progress)?;
    let (lines, passages) = lines.finish();
    let areas = tracker.finish();
    let doubts = areas.iter().map(|area| doubt(setup, &run, area));
    Ok(EventsOutcome {
        doubts: doubts.collect(),
        run,
        plane,
        areas,
        lines,
        passages,
    })
}

impl EventsOutcome {
    /// Latitude and longitude of a point of the plane, degrees.
    #[must_use]
    pub fn place(&self, at: [f64; 2]) -> Option<(f64, f64)> {
        let position = self.plane.position(at).ok()?;
        Some((position.latitude(), position.longitude()))
    }

    /// First and last analysis time.
    #[must_use]
    pub fn period(&self) -> Option<(Time, Time)> {
        self.run.period.ends
    }
}

/// The odd station that all of an area lies around.
fn doubt(setup: &Setup, run: &Outcome, area: &AreaEvent) -> Option<usize> {
    let polygons: Vec<&StationPolygon> = (area.polygons.iter().chain([&area.peak.polygon]))
        .filter_map(|&number| run.polygon(setup, number))
        .collect();
    let odd = run.attributions.iter().map(|found| found.station);
    let mut around = odd.filter(|s| polygons.iter().all(|p| p.row.stations.contains(s)));
    around.next()
}

/// The middle of the stations: of their directions from the Earth's centre, so that the date line does not matter.
fn middle(setup: &Setup) -> (f64, f64) {
    let mut sum = [0.0; 3];
    for station in setup.network.stations() {
        let (sin, cos) = station.position.latitude().to_radians().sin_cos();
        let (east, north) = station.position.longitude().to_radians().sin_cos();
        sum = [sum[0] + cos * north, sum[1] + cos * east, sum[2] + sin];
    }
    let latitude = sum[2].atan2(sum[0].hypot(sum[1])).to_degrees();
    (latitude, sum[1].atan2(sum[0]).to_degrees())
}
