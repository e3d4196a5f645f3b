//! From reports on levels to profiles of vorticity, divergence and vertical motion.

use std::collections::{BTreeMap, BTreeSet};

use super::estimation::{corrections, height_factors, sensor_errors};
use super::field::FieldState;
use super::level_polygons::{Shapes, motion_of};
use super::run::no_usable_report;
use super::{Reading, Setup, Window, Windows};
use crate::align::{AlignedWind, WindBlock, instrument_covariance};
use crate::check::Flag;
use crate::error::{Error, Place, Problem};
use crate::profile::{Ascent, Coordinate, Level, LevelReport, LevelWind, Measured, Motion, NoWind};
use crate::report::{Content, InputOrder, ReportFiles, ReportTable};
use crate::settings::{AlignMethod, SensorErrors};
use crate::station::{Correction, Position};
use crate::time::{Time, micros_of};
use crate::warning::Warning;

/// Reports further apart in time than this are of different ascents, μs. 10 min: a balloon reports at least every 3 km
/// of its rise at 5 m/s, profilers every 10 min or oftener (common practice).
const NEXT_ASCENT: i64 = 600_000_000;
/// What reports with their own positions may be away from the place in the list without being suspect, m: no balloon
/// drifts further (100 m/s for 80 min).
const DRIFT: f64 = 500e3;

/// A polygon at one level.
#[derive(Debug, Clone, PartialEq)]
pub struct LevelEstimate {
    /// The level or layer.
    pub level: Level,
    /// Stations of the polygon at this level, counter-clockwise.
    pub stations: Vec<usize>,
    /// Latitude and longitude of the middle of where they were, degrees, and the area between them, m².
    pub place: Option<((f64, f64), f64)>,
    /// Vorticity and divergence, 1/s.
    pub estimate: Option<[Measured; 2]>,
    /// Where the motion holds: the level, or the top of the layer, Pa or m.
    pub motion_at: f64,
    /// Vertical motion: ω, Pa/s, or w, m/s.
    pub motion: Option<Motion>,
    /// The same adjusted to the upper boundary.
    pub adjusted: Option<Motion>,
    /// Worst flag of the winds; missing where there is no estimate.
    pub flag: Flag,
    /// What is to be said of it; empty if nothing is.
    pub reason: String,
}

/// The profile of a polygon at one time.
#[derive(Debug, Clone, PartialEq)]
pub struct PolygonProfile {
    /// The nominal time.
    pub time: Time,
    /// Name of the polygon.
    pub polygon: String,
    /// From the bottom up.
    pub levels: Vec<LevelEstimate>,
}

/// What came of a profile run.
#[derive(Debug)]
pub struct ProfileOutcome {
    /// The books of the reports as read and checked.
    pub reading: Reading,
    /// By time, then triangles in the order of their stations, then rings.
    pub profiles: Vec<PolygonProfile>,
    /// Nominal times with reports.
    pub times: u64,
    /// Of platforms, times and levels: with a wind, and without by reason.
    pub with_wind: u64,
    /// Those without.
    pub without: BTreeMap<NoWind, u64>,
    /// Smallest and largest share of the stated prior in the structure function behind the sampling errors; `None` for
    /// errors of the instruments alone.
    pub prior_share: Option<[f64; 2]>,
    /// What the user should know.
    pub warnings: Vec<Warning>,
}

/// Profiles of a network's triangles and rings at the analysis times: winds of each platform at the levels of
/// `settings.profile`, polygons between the places where the platforms were, vertical motion. Without levels, and with
/// `profile.height`, w at that height from the divergence at the ground. The neighbour test is not made; corrections of
/// the station list are.
///
/// # Errors
/// No levels in the settings, or another method than the nearest reports; as [`super::run()`].
pub fn profile(
    setup: &Setup,
    order: InputOrder,
    mut progress: impl FnMut(u64),
) -> Result<ProfileOutcome, Error> {
    let tolerance = checked(setup)?;
    let mut settings = setup.settings.clone();
    let allowed = settings.check.displacement;
    settings.check.displacement = allowed.map(|allowed| allowed.max(DRIFT));
    let files = ReportFiles::new(&settings.reports, &setup.network);
    let mut windows = Windows::new(&files, &settings, order)?;
    let mut state = State::new(setup, tolerance);
    let mut window = None;
    while let Some(next) = windows.after(window.as_ref())? {
        state.window(&next)?;
        progress(windows.rows());
        window = Some(next);
    }
    let mut reading = windows.reading();
    if state.times == 0 {
        return Err(no_usable_report(&mut reading));
    }
    if state.with_wind == 0 {
        return Err(Error::Reports(no_level(setup, state.seen)));
    }
    let warnings = [&setup.warnings, &reading.warnings, &state.warnings];
    Ok(ProfileOutcome {
        warnings: warnings.into_iter().flatten().cloned().collect(),
        reading,
        profiles: state.profiles,
        times: state.times,
        with_wind: state.with_wind,
        without: state.without,
        prior_share: state.prior_share,
    })
}

/// Refuses settings that make no profile; the tolerance in time, μs.
fn checked(setup: &Setup) -> Result<i64, Error> {
    let wrong = |key: &str, message: &str| {
        let place = Place {
            file: setup.path.display().to_string(),
            line: None,
            column: Some(key.into()),
        };
        Err(Error::Invalid(vec![Problem::new(place, message)]))
    };
    let wanted = &setup.settings.profile;
    match (wanted.levels.is_empty(), wanted.height) {
        (true, None) => {
            return wrong(
                "profile.levels",
                "there are no levels (such as levels = [\"850 hPa\", \"700 hPa\"], or layers = [[\"0 m\", \"500 m\"]], \
                 expected; or height = \"500 m\" for reports without levels)",
            );
        }
        (false, Some(_)) => {
            return wrong(
                "profile.height",
                "a height is for reports without levels; there are levels too (one of them expected)",
            );
        }
        (false, None) if wanted.levels.len() < 2 && matches!(wanted.levels[0], Level::At(_)) => {
            return wrong(
                "profile.levels",
                "one level makes no profile (two or more expected)",
            );
        }
        _ => {}
    }
    match setup.settings.analysis.method {
        AlignMethod::Nearest { tolerance } => Ok(micros_of(tolerance)),
        _ => wrong(
            "analysis.method",
            "profiles take the reports nearest to a time (`nearest` expected)",
        ),
    }
}

/// Why no platform has a wind at any level, from the levels that were seen.
fn no_level(setup: &Setup, seen: Option<[f64; 2]>) -> String {
    let coordinate = setup.settings.profile.coordinate;
    match seen {
        None if setup.settings.profile.levels.is_empty() => {
            "the reports stand on levels: state `profile.levels` in place of `profile.height`"
                .into()
        }
        None => {
            "no usable report stands on a level (is `columns.level` of [[reports]] missing?)".into()
        }
        Some([low, high]) => format!(
            "no platform has a wind at any of the levels: read as {}, the reports stand from {} to {} (`level_unit` of \
             [[reports]], `profile.levels` and `profile.largest_gap` decide)",
            match coordinate {
                Coordinate::Pressure => "pressures",
                Coordinate::Height => "heights",
            },
            coordinate.words(low),
            coordinate.words(high)
        ),
    }
}

/// What is kept from window to window.
struct State<'a> {
    setup: &'a Setup,
    tolerance: i64,
    levels: Vec<Level>,
    /// The structure function of each level.
    fields: Vec<FieldState>,
    corrections: Vec<Option<Correction>>,
    factors: Vec<Option<f64>>,
    sensors: Vec<SensorErrors>,
    profiles: Vec<PolygonProfile>,
    times: u64,
    with_wind: u64,
    without: BTreeMap<NoWind, u64>,
    prior_share: Option<[f64; 2]>,
    /// Smallest and largest level of the usable reports.
    seen: Option<[f64; 2]>,
    warnings: Vec<Warning>,
}

impl<'a> State<'a> {
    fn new(setup: &'a Setup, tolerance: i64) -> Self {
        let settings = &setup.settings;
        let mut levels = settings.profile.levels.clone();
        let on_ground = levels.is_empty();
        if on_ground {
            levels.push(Level::At(0.0));
        }
        let spacing = setup.spacing().filter(|_| settings.errors.complete);
        let fields = spacing.into_iter().flat_map(|spacing| {
            let field = move |_| FieldState::new(settings, &setup.network, spacing);
            (0..levels.len()).map(field)
        });
        let (factors, warnings) = if on_ground {
            height_factors(settings, &setup.network)
        } else {
            (vec![Some(1.0); setup.network.len()], Vec::new())
        };
        Self {
            fields: fields.collect(),
            corrections: corrections(&setup.network),
            factors,
            sensors: Vec::new(),
            profiles: Vec::new(),
            times: 0,
            with_wind: 0,
            without: BTreeMap::new(),
            prior_share: None,
            seen: None,
            warnings,
            setup,
            tolerance,
            levels,
        }
    }

    /// Pa or m; reports without levels count as at height 0.
    fn coordinate(&self) -> Coordinate {
        if self.setup.settings.profile.levels.is_empty() {
            Coordinate::Height
        } else {
            self.setup.settings.profile.coordinate
        }
    }

    fn window(&mut self, window: &Window) -> Result<(), Error> {
        let analysis = &self.setup.settings.analysis;
        self.sensors = sensor_errors(&self.setup.settings.sensor, &window.rounding);
        let interval = micros_of(analysis.interval).max(1);
        let mut multiples = BTreeSet::new();
        for (i, time) in window.table.times().iter().enumerate() {
            if !is_usable(&window.table, i) {
                continue;
            }
            let first = time
                .micros()
                .saturating_sub(self.tolerance)
                .saturating_sub(1);
            let last = time
                .micros()
                .saturating_add(self.tolerance)
                .div_euclid(interval);
            let first = (first.div_euclid(interval) + 1).max(window.multiples.start);
            multiples.extend(first..(last + 1).min(window.multiples.end));
        }
        for multiple in multiples {
            let time = Time::from_micros(multiple.saturating_mul(interval));
            let inside = analysis.from.is_none_or(|from| from <= time)
                && analysis.to.is_none_or(|to| time <= to);
            if inside {
                self.at(&window.table, time)?;
            }
        }
        Ok(())
    }

    /// The profiles of one nominal time.
    fn at(&mut self, table: &ReportTable, time: Time) -> Result<(), Error> {
        self.times += 1;
        let ascents: Vec<Ascent> = (0..table.stations())
            .map(|station| self.ascent(table, station, time))
            .collect();
        let reporting: Vec<bool> = ascents.iter().map(|a| !a.reports().is_empty()).collect();
        let shapes = Shapes::new(self.setup, &reporting)?;
        let mut profiles: Vec<PolygonProfile> = shapes
            .names()
            .map(|name| PolygonProfile {
                time,
                polygon: name.to_string(),
                levels: Vec::with_capacity(self.levels.len()),
            })
            .collect();
        for (k, &level) in self.levels.iter().enumerate() {
            let winds: Vec<Result<LevelWind, NoWind>> =
                ascents.iter().map(|ascent| ascent.at(level)).collect();
            for wind in &winds {
                match wind {
                    Ok(_) => self.with_wind += 1,
                    Err(why) => *self.without.entry(*why).or_default() += 1,
                }
            }
            let block = block_of(time, &winds);
            let model = self.fields.get_mut(k).and_then(|field| {
                let blocks = vec![block.clone()];
                let model = field.advance(&blocks).into_iter().flatten().next_back();
                field.keep_last(blocks);
                model
            });
            if let Some(model) = &model {
                let share = model.prior_share;
                let [least, most] = self.prior_share.unwrap_or([share; 2]);
                self.prior_share = Some([least.min(share), most.max(share)]);
            }
            let estimates = shapes.at(self.setup, level, &winds, &block, model.as_ref());
            for (profile, estimate) in profiles.iter_mut().zip(estimates) {
                profile.levels.push(estimate);
            }
        }
        for profile in &mut profiles {
            motion_of(self.setup, &ascents, profile);
        }
        self.profiles.append(&mut profiles);
        Ok(())
    }

    /// What a station reports around a time, of several ascents that nearest to it.
    fn ascent(&mut self, table: &ReportTable, station: usize, time: Time) -> Ascent {
        let from = time.plus_micros(-self.tolerance);
        let until = time.plus_micros(self.tolerance);
        let reports = table.of_station_from(station, from);
        let usable: Vec<usize> = reports
            .take_while(|&i| table.times()[i] <= until)
            .filter(|&i| is_usable(table, i))
            .collect();
        let at = |i: usize| table.times()[i].micros();
        let groups = usable.chunk_by(|&a, &b| at(b) - at(a) <= NEXT_ASCENT);
        let distance = |group: &&[usize]| {
            let nearest = group.iter().map(|&i| (at(i) - time.micros()).abs()).min();
            let middle = match (group.first(), group.last()) {
                (Some(&a), Some(&b)) => (at(a) / 2 + at(b) / 2 - time.micros()).abs(),
                _ => i64::MAX,
            };
            (middle, nearest)
        };
        let nearest = groups.min_by_key(distance).unwrap_or_default();
        let reports = nearest
            .iter()
            .filter_map(|&i| self.report(table, station, i, time));
        let reports: Vec<LevelReport> = reports.collect();
        let on_ground = self.setup.settings.profile.levels.is_empty();
        for report in reports.iter().filter(|_| !on_ground) {
            let [low, high] = self.seen.unwrap_or([report.level; 2]);
            self.seen = Some([low.min(report.level), high.max(report.level)]);
        }
        Ascent::new(
            self.coordinate(),
            self.setup.settings.profile.largest_gap,
            reports,
        )
    }

    /// A usable report as it stands on its level.
    fn report(
        &self,
        table: &ReportTable,
        station: usize,
        i: usize,
        time: Time,
    ) -> Option<LevelReport> {
        let moving = table.moving(i);
        let level = moving.and_then(|m| m.level);
        let level = match self.setup.settings.profile.levels.is_empty() {
            false => level?,
            true if level.is_some() => return None,
            true => 0.0,
        };
        let position = moving.and_then(|m| m.position).map_or_else(
            || {
                self.setup
                    .network
                    .stations()
                    .get(station)
                    .map(|s| s.position)
            },
            Some,
        )?;
        let factor = self.factors.get(station).copied().flatten()?;
        let mut wind = table.wind(i)?;
        let at = table.times()[i];
        if let Some(Some(correction)) = self.corrections.get(station)
            && correction.holds_at(at)
        {
            wind = correction.apply(wind);
        }
        let calm = table.content(i) == Content::Calm;
        let mut covariance = instrument_covariance(wind, calm, self.sensors.get(station)?);
        for entry in [&mut covariance.uu, &mut covariance.uv, &mut covariance.vv] {
            *entry *= factor * factor;
        }
        (wind.u, wind.v) = (factor * wind.u, factor * wind.v);
        Some(LevelReport {
            level,
            wind,
            covariance,
            position,
            flag: table.flag(i),
            age: (at.micros() - time.micros()).abs() as f64 * 1e-6,
        })
    }
}

/// True if report `i` has a wind that did not fail.
fn is_usable(table: &ReportTable, i: usize) -> bool {
    table.flag(i).is_usable() && table.wind(i).is_some()
}

/// The winds of all platforms at one level and time.
fn block_of(time: Time, winds: &[Result<LevelWind, NoWind>]) -> WindBlock {
    let mut block = WindBlock::empty(vec![time], winds.len());
    for (station, wind) in winds.iter().enumerate() {
        if let Ok(wind) = wind {
            #[expect(
                clippy::cast_possible_truncation,
                reason = "seven digits are enough for an age"
            )]
            let age = wind.age as f32;
            let value = AlignedWind {
                wind: wind.wind,
                covariance: wind.covariance,
                flag: wind.flag,
                age,
            };
            block.set(station, 0, &value);
        }
    }
    block
}

/// Where the platforms were; those without a wind where the list has them.
pub(super) fn places(setup: &Setup, winds: &[Result<LevelWind, NoWind>]) -> Vec<Position> {
    let stations = setup.network.stations().iter().zip(winds);
    stations
        .map(|(station, wind)| wind.map_or(station.position, |w| w.position))
        .collect()
}
