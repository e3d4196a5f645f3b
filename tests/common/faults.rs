//! Simulated networks with faults of sensors, and their calibration.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};

use gyremesh::align::{BLOCK_TIMES, Covariance, WindBlock};
use gyremesh::calibration::{Calibration, CalibrationSettings, Calibrator};
use gyremesh::check::Flag;
use gyremesh::station::Network;
use gyremesh::structure::{
    BlockSums, NetworkGeometry, StructureFunction, StructureSettings, StructureWindow,
    typical_spacing,
};
use gyremesh::time::Time;
use gyremesh::units::Wind;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

use super::turbulence::{Class, Field, mean_wind};
use super::{Plane, network, set};

/// What is wrong with a station.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Planted {
    /// Degrees clockwise.
    Turned(f64),
    /// Reported over true speed.
    Scaled(f64),
    /// Turned from this share of the record on.
    TurnedLate(f64, f64),
    /// Turned so far from each share of the record on.
    Turns(&'static [(f64, f64)]),
    Reversed,
    Swapped,
    Mirrored,
    /// Steps that the clock is ahead.
    Clock(usize),
    /// The same from one share of the record to another.
    ClockInPart(usize, f64, f64),
    /// s that the clock gains in a day; right in the middle of the record.
    ClockDrift(f64),
    /// Share of the values.
    Spiking(f64),
    Stuck,
    Still,
    /// With this station.
    Exchanged(usize),
}

impl Planted {
    pub fn kind(self) -> &'static str {
        match self {
            Self::Turned(_) => "turned",
            Self::Scaled(f) if (f - 1.9438).abs() < 0.01 => "unit (kt)",
            Self::Scaled(_) => "scaled",
            Self::TurnedLate(..) | Self::Turns(_) => "turned late",
            Self::Reversed => "reversed",
            Self::Swapped => "u, v swapped",
            Self::Mirrored => "mirrored",
            Self::Clock(_) => "clock 1 h",
            Self::ClockInPart(..) => "daylight time",
            Self::ClockDrift(_) => "clock drifts",
            Self::Spiking(_) => "spiking",
            Self::Stuck => "stuck",
            Self::Still => "still",
            Self::Exchanged(_) => "exchanged",
        }
    }
}

/// 40 stations about 30 km apart.
pub fn forty(random: &mut ChaCha8Rng) -> Vec<(f64, f64)> {
    let mut places = Vec::new();
    for i in 0..8 {
        for j in 0..5 {
            let mut jitter = || random.random_range(-0.3..0.3);
            let (x, y) = (f64::from(i) - 3.5 + jitter(), f64::from(j) - 2.0 + jitter());
            places.push((30e3 * x, 30e3 * y));
        }
    }
    places
}

/// A network with its winds.
pub struct Case {
    pub network: Network,
    /// By station, then time.
    pub winds: Vec<Vec<(f64, f64)>>,
    pub dt: f64,
}

/// A record of `days` days every `dt` s with sensors that err by 0.3 m/s.
pub fn case(seed: u64, days: f64, dt: f64, planted: &[(usize, Planted)]) -> Case {
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    let places = forty(&mut random);
    let plane = Plane {
        origin: (47.0, 8.0),
        shrink: 1.0,
    };
    let network = network(&plane.place(&places));
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "some thousands"
    )]
    let steps = (days * 86_400.0 / dt) as usize;
    let mean = mean_wind(steps, dt, 12.0 * 3600.0, (3.0, 2.0), 4.0, &mut random);
    let class = Class {
        rms: 1.5,
        ..Class::default()
    };
    let field = Field::new(&class, &mut random);
    let plain = field.series(&places, &mean, dt, &mut random);
    let mut winds = vec![Vec::with_capacity(steps); places.len()];
    let turns = plane.turn(&places, &vec![(1.0, 0.0); places.len()]);
    for ((of, turn), to) in plain.iter().zip(&turns).zip(&mut winds) {
        to.extend(
            of.iter()
                .map(|&(u, v)| (u * turn.0 - v * turn.1, u * turn.1 + v * turn.0)),
        );
    }
    let truth = winds.clone();
    for (s, fault) in planted {
        let of = &mut winds[*s];
        let turn = |(u, v): (f64, f64), degrees: f64| {
            let (sin, cos) = degrees.to_radians().sin_cos();
            (u * cos + v * sin, v * cos - u * sin)
        };
        match *fault {
            Planted::Turned(d) => of.iter_mut().for_each(|w| *w = turn(*w, d)),
            Planted::TurnedLate(d, share) => {
                #[allow(
                    clippy::cast_possible_truncation,
                    clippy::cast_sign_loss,
                    reason = "small"
                )]
                let from = (share * steps as f64) as usize;
                of[from..].iter_mut().for_each(|w| *w = turn(*w, d));
            }
            Planted::Turns(turns) => {
                for (k, w) in of.iter_mut().enumerate() {
                    let share = k as f64 / steps as f64;
                    let last = turns.iter().rfind(|t| t.0 <= share);
                    *w = turn(*w, last.map_or(0.0, |t| t.1));
                }
            }
            Planted::Scaled(f) => of.iter_mut().for_each(|w| *w = (f * w.0, f * w.1)),
            Planted::Reversed => of.iter_mut().for_each(|w| *w = (-w.0, -w.1)),
            Planted::Swapped => of.iter_mut().for_each(|w| *w = (w.1, w.0)),
            Planted::Mirrored => of.iter_mut().for_each(|w| w.0 = -w.0),
            Planted::Clock(ahead) => {
                for t in (0..steps).rev() {
                    of[t] = if t >= ahead {
                        truth[*s][t - ahead]
                    } else {
                        (f64::NAN, f64::NAN)
                    };
                }
            }
            Planted::ClockInPart(ahead, from, to) => {
                for t in ahead..steps {
                    if (from..to).contains(&(t as f64 / steps as f64)) {
                        of[t] = truth[*s][t - ahead];
                    }
                }
            }
            Planted::ClockDrift(a_day) => drift(of, &truth[*s], a_day / 86_400.0),
            Planted::Spiking(share) => {
                for w in of.iter_mut() {
                    if random.random_range(0.0..1.0) < share {
                        *w = (
                            random.random_range(-40.0..40.0),
                            random.random_range(-40.0..40.0),
                        );
                    }
                }
            }
            Planted::Stuck => of.iter_mut().for_each(|w| *w = (3.0, 1.0)),
            Planted::Still => of.iter_mut().for_each(|w| *w = (0.0, 0.0)),
            Planted::Exchanged(other) => of.clone_from(&truth[other]),
        }
        if !matches!(fault, Planted::Stuck | Planted::Still) {
            add_errors(of, &mut random);
        }
    }
    for (s, of) in winds.iter_mut().enumerate() {
        if planted.iter().all(|p| p.0 != s) {
            add_errors(of, &mut random);
        }
    }
    Case { network, winds, dt }
}

/// Errors of sensors, 0.3 m/s in either component.
fn add_errors(winds: &mut [(f64, f64)], random: &mut ChaCha8Rng) {
    for w in winds {
        let mut error = || -> f64 { StandardNormal.sample(random) };
        *w = (w.0 + 0.3 * error(), w.1 + 0.3 * error());
    }
}

/// Winds of a clock that gains this share of the time, right in the middle.
fn drift(winds: &mut [(f64, f64)], truth: &[(f64, f64)], share: f64) {
    let middle = 0.5 * truth.len() as f64;
    for (t, w) in winds.iter_mut().enumerate() {
        // The report of time t was taken so much earlier.
        let at = t as f64 - share * (t as f64 - middle);
        let at = at.clamp(0.0, (truth.len() - 2) as f64);
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "clamped"
        )]
        let k = at as usize;
        let part = at - k as f64;
        let (a, b) = (truth[k], truth[k + 1]);
        *w = (a.0 + part * (b.0 - a.0), a.1 + part * (b.1 - a.1));
    }
}

impl Case {
    pub fn calibrate(&self) -> Calibration {
        self.calibrate_with(CalibrationSettings::default())
    }

    /// Replaces each wind by the mean of itself and those of the `n` − 1 steps before it.
    pub fn average(&mut self, n: usize) {
        for of in &mut self.winds {
            let before = of.clone();
            for (t, w) in of.iter_mut().enumerate() {
                let part = &before[(t + 1).saturating_sub(n)..=t];
                let sum = part.iter().fold((0.0, 0.0), |s, w| (s.0 + w.0, s.1 + w.1));
                *w = (sum.0 / part.len() as f64, sum.1 / part.len() as f64);
            }
        }
    }

    /// Blocks of winds with the structure function at each of their times.
    pub fn blocks(&self) -> Vec<(WindBlock, Vec<StructureFunction>)> {
        let spacing = typical_spacing(&self.network).unwrap();
        let settings = StructureSettings::default();
        let geometry = NetworkGeometry::new(&self.network, spacing, &[]);
        let mut window = StructureWindow::new(&geometry, settings);
        let steps = self.winds[0].len();
        let mut blocks: Vec<(WindBlock, Vec<StructureFunction>)> = Vec::new();
        for start in (0..steps).step_by(BLOCK_TIMES) {
            let range = start..(start + BLOCK_TIMES).min(steps);
            #[allow(clippy::cast_possible_truncation, reason = "some weeks in μs")]
            let time = |t: usize| Time::from_micros((t as f64 * self.dt * 1e6) as i64);
            let mut block = WindBlock::empty(range.clone().map(time).collect(), self.winds.len());
            let covariance = Covariance {
                uu: 0.09,
                uv: 0.0,
                vv: 0.09,
            };
            for (s, of) in self.winds.iter().enumerate() {
                for (t, &(u, v)) in of[range.clone()].iter().enumerate() {
                    if u.is_finite() {
                        set(&mut block, s, t, Wind { u, v }, covariance, Flag::Pass);
                    }
                }
            }
            let previous = blocks.last().map(|b| &b.0);
            let sums = BlockSums::of(&geometry, &settings, self.dt, previous, &block);
            let models = window.advance(&geometry, &sums, &block.times);
            blocks.push((block, models));
        }
        blocks
    }

    pub fn calibrate_with(&self, own: CalibrationSettings) -> Calibration {
        let spacing = typical_spacing(&self.network).unwrap();
        let mut calibrator = Calibrator::new(&self.network, spacing, self.dt, own);
        for (block, models) in self.blocks() {
            calibrator.take(&block, &models);
        }
        let declinations = vec![Some(3.0); self.network.len()];
        calibrator.finish(&declinations)
    }

    /// Writes stations, reports (times as they are; whole tenths of a degree and hundredths of m/s) and settings into a
    /// folder; `settings` is what stands after the reports. Gives the path of the settings.
    pub fn write(&self, folder: &Path, reports: &str, settings: &str) -> PathBuf {
        let mut list = String::from("id,lat,lon\n");
        for station in self.network.stations() {
            let (lat, lon) = (station.position.latitude(), station.position.longitude());
            writeln!(list, "{},{lat},{lon}", station.id).unwrap();
        }
        let mut rows = String::from("time,station,dir,speed\n");
        for t in 0..self.winds[0].len() {
            #[allow(clippy::cast_possible_truncation, reason = "some weeks in μs")]
            let time = Time::from_micros(FIRST_DAY + (t as f64 * self.dt * 1e6) as i64);
            for (station, of) in self.network.stations().iter().zip(&self.winds) {
                let (u, v) = of[t];
                if u.is_finite() {
                    let from = (-u).atan2(-v).to_degrees().rem_euclid(360.0);
                    let (id, speed) = (&station.id, u.hypot(v));
                    writeln!(rows, "{time},{id},{from:.1},{speed:.2}").unwrap();
                }
            }
        }
        let text = format!(
            "name = \"simulated\"\n[stations]\nfile = \"stations.csv\"\n\
             columns = {{ id = \"id\", latitude = \"lat\", longitude = \"lon\" }}\n\
             [[reports]]\nfiles = [\"reports.csv\"]\n\
             columns = {{ station = \"station\", time = \"time\", direction = \"dir\", speed = \"speed\" }}\n\
             speed_unit = \"m/s\"\n{reports}\n{settings}\n"
        );
        let path = folder.join("network.toml");
        std::fs::write(folder.join("stations.csv"), list).unwrap();
        std::fs::write(folder.join("reports.csv"), rows).unwrap();
        std::fs::write(&path, text).unwrap();
        path
    }
}

/// 2031-06-01T00:00:00Z in μs.
pub const FIRST_DAY: i64 = 1_938_038_400_000_000;
