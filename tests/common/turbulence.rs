//! Winds that are known everywhere: sums of random Fourier modes with a power-law spectrum.

use gyremesh::align::{Covariance, WindBlock};
use gyremesh::check::Flag;
use gyremesh::kinematics::LocalWind;
use gyremesh::polygon::{BuiltPolygons, StationPolygon, build_polygons};
use gyremesh::settings::{PolygonChoice, PolygonLimits};
use gyremesh::station::Network;
use gyremesh::time::Time;
use gyremesh::units::Wind;
use rand::{Rng, RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

use super::{Plane, network, set};

/// How the stations stand.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Layout {
    Regular,
    Jittered,
    Clustered,
}

/// What is simulated.
#[derive(Debug, Clone, Copy)]
pub struct Class {
    /// The spectrum falls as k^(−slope).
    pub slope: f64,
    /// Share of the variance in winds without vorticity; the rest is without divergence.
    pub divergent: f64,
    /// Root mean square of either component, m/s.
    pub rms: f64,
    /// Distance between stations, m.
    pub spacing: f64,
    pub layout: Layout,
    /// Standard deviation of the sensors' errors of either component, m/s.
    pub noise: f64,
    /// Share of the reports that are missing.
    pub dropouts: f64,
    /// Longest wave, in spacings.
    pub outer: f64,
    /// Stations on a side of the network.
    pub side: usize,
    /// What the winds grow by in a day.
    pub growth: f64,
}

impl Default for Class {
    fn default() -> Self {
        Self {
            slope: 5.0 / 3.0,
            divergent: 0.5,
            rms: 2.0,
            spacing: 30e3,
            layout: Layout::Jittered,
            noise: 0.3,
            dropouts: 0.0,
            outer: 20.0,
            side: 7,
            growth: 1.0,
        }
    }
}

/// Shortest wave, in spacings: what is shorter has next to no part in the variance between stations.
const INNER: f64 = 0.1;
/// Wavenumbers, evenly spaced in their logarithm.
const MODES: usize = 120;

/// One wave: V(x) = direction · (a cos k·x + b sin k·x).
struct Wave {
    k: [f64; 2],
    direction: [f64; 2],
    a: f64,
    b: f64,
}

/// A Gaussian random wind field in the plane.
pub struct Field(Vec<Wave>);

impl Field {
    pub fn new(class: &Class, random: &mut impl Rng) -> Self {
        let normal = |random: &mut _| -> f64 { StandardNormal.sample(random) };
        let (low, high) = (
            (std::f64::consts::TAU / (class.outer * class.spacing)).ln(),
            (std::f64::consts::TAU / (INNER * class.spacing)).ln(),
        );
        let wavenumber = |j: usize| (low + (high - low) * (j as f64 + 0.5) / MODES as f64).exp();
        // Of the variance, E(k) dk = k^(1 − slope) d ln k; either component has half of a mode's.
        let variance = |j: usize| wavenumber(j).powf(1.0 - class.slope);
        let total: f64 = (0..MODES).map(variance).sum();
        let mut waves = Vec::new();
        for j in 0..MODES {
            for (share, along) in [(class.divergent, true), (1.0 - class.divergent, false)] {
                if share <= 0.0 {
                    continue;
                }
                let (sin, cos) = random.random_range(0.0..std::f64::consts::TAU).sin_cos();
                let k = wavenumber(j);
                let sd = class.rms * (2.0 * share * variance(j) / total).sqrt();
                waves.push(Wave {
                    k: [k * cos, k * sin],
                    direction: if along { [cos, sin] } else { [-sin, cos] },
                    a: sd * normal(random),
                    b: sd * normal(random),
                });
            }
        }
        Self(waves)
    }

    /// Winds at the places, and the integral of the wind, m²/s, along straight lines between numbered places.
    pub fn sample(
        &self,
        places: &[(f64, f64)],
        lines: &[[usize; 2]],
    ) -> (Vec<(f64, f64)>, Vec<[f64; 2]>) {
        let mut winds = vec![(0.0, 0.0); places.len()];
        let mut integrals = vec![[0.0; 2]; lines.len()];
        let mut phases = vec![(0.0, 0.0, 0.0); places.len()];
        for wave in &self.0 {
            for ((phase, wind), &(x, y)) in phases.iter_mut().zip(&mut winds).zip(places) {
                let angle = wave.k[0] * x + wave.k[1] * y;
                let (sin, cos) = angle.sin_cos();
                *phase = (angle, sin, cos);
                let value = wave.a * cos + wave.b * sin;
                wind.0 += value * wave.direction[0];
                wind.1 += value * wave.direction[1];
            }
            for (integral, &[i, j]) in integrals.iter_mut().zip(lines) {
                let ((p, sin_p, cos_p), (q, sin_q, cos_q)) = (phases[i], phases[j]);
                let along = q - p;
                let mean = if along.abs() > 1e-4 {
                    (wave.a * (sin_q - sin_p) - wave.b * (cos_q - cos_p)) / along
                } else {
                    0.5 * (wave.a * (cos_p + cos_q) + wave.b * (sin_p + sin_q))
                };
                integral[0] += mean * wave.direction[0];
                integral[1] += mean * wave.direction[1];
            }
        }
        for (integral, &[i, j]) in integrals.iter_mut().zip(lines) {
            let length = (places[j].0 - places[i].0).hypot(places[j].1 - places[i].1);
            *integral = integral.map(|m| m * length);
        }
        (winds, integrals)
    }
}

impl Field {
    /// For each line its part of the area integral of the wind, m³/s, of a polygon that has it on its outline with the
    /// inside on the left: a cos θ + b sin θ is the divergence of k/k² (a sin θ − b cos θ).
    pub fn area_parts(&self, places: &[(f64, f64)], lines: &[[usize; 2]]) -> Vec<[f64; 2]> {
        let mut parts = vec![[0.0; 2]; lines.len()];
        for wave in &self.0 {
            let [kx, ky] = wave.k;
            for (part, &[i, j]) in parts.iter_mut().zip(lines) {
                let (a, b) = (places[i], places[j]);
                let (p, q) = (kx * a.0 + ky * a.1, kx * b.0 + ky * b.1);
                let along = q - p;
                let mean = if along.abs() > 1e-4 {
                    (wave.a * (p.cos() - q.cos()) - wave.b * (q.sin() - p.sin())) / along
                } else {
                    0.5 * (wave.a * (p.sin() + q.sin()) - wave.b * (p.cos() + q.cos()))
                };
                // k · n L / k².
                let across = (kx * (b.1 - a.1) - ky * (b.0 - a.0)) / (kx * kx + ky * ky);
                part[0] += mean * across * wave.direction[0];
                part[1] += mean * across * wave.direction[1];
            }
        }
        parts
    }

    /// Winds at the places at `steps` times `dt` s apart: the waves are carried by the mean wind of each time, and each
    /// loses its phase in the time that its own wind takes across it. By place, then time; the mean wind is added.
    pub fn series(
        &self,
        places: &[(f64, f64)],
        mean: &[(f64, f64)],
        dt: f64,
        random: &mut impl Rng,
    ) -> Vec<Vec<(f64, f64)>> {
        let mut winds = vec![mean.to_vec(); places.len()];
        for wave in &self.0 {
            let [kx, ky] = wave.k;
            let lasting = 1.0 / (kx.hypot(ky) * wave.a.hypot(wave.b)).max(1e-9);
            let mut phase: f64 = 0.0;
            let factors: Vec<(f64, f64)> = mean
                .iter()
                .map(|(u, v)| {
                    let kick: f64 = StandardNormal.sample(random);
                    phase += (kx * u + ky * v) * dt + kick * (2.0 * dt / lasting).sqrt();
                    phase.sin_cos()
                })
                .collect();
            for (&(x, y), of_place) in places.iter().zip(&mut winds) {
                let (sin, cos) = (kx * x + ky * y).sin_cos();
                // a cos(θ − φ) + b sin(θ − φ)
                let (p, q) = (wave.a * cos + wave.b * sin, wave.a * sin - wave.b * cos);
                for ((u, v), (sin, cos)) in of_place.iter_mut().zip(&factors) {
                    let value = p * cos + q * sin;
                    *u += value * wave.direction[0];
                    *v += value * wave.direction[1];
                }
            }
        }
        winds
    }
}

/// A mean wind that comes and goes (AR(1) of `lasting` s, both components), m/s.
pub fn mean_wind(
    steps: usize,
    dt: f64,
    lasting: f64,
    about: (f64, f64),
    sd: f64,
    random: &mut impl Rng,
) -> Vec<(f64, f64)> {
    let memory = (-dt / lasting).exp();
    let mut draw = || -> f64 { StandardNormal.sample(random) };
    let (mut u, mut v) = (sd * draw(), sd * draw());
    let kick = sd * (1.0 - memory * memory).sqrt();
    (0..steps)
        .map(|_| {
            u = memory * u + kick * draw();
            v = memory * v + kick * draw();
            (about.0 + u, about.1 + v)
        })
        .collect()
}

/// A simulated network with its polygons.
pub struct Simulation {
    pub class: Class,
    pub places: Vec<(f64, f64)>,
    pub plane: Plane,
    pub network: Network,
    pub built: BuiltPolygons,
    lines: Vec<[usize; 2]>,
}

impl Simulation {
    pub fn new(class: Class, seed: u64) -> Self {
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        let places = layout(&class, &mut random);
        let plane = Plane {
            origin: (47.0, 8.0),
            shrink: 1.0,
        };
        let network = network(&plane.place(&places));
        let choice = PolygonChoice {
            triangles: true,
            rings: vec![],
            regions: vec![],
        };
        let built = build_polygons(&network, &choice, &PolygonLimits::default()).unwrap();
        let lines = built.edges.edges().iter().map(|e| [e.from, e.to]).collect();
        Self {
            class,
            places,
            plane,
            network,
            built,
            lines,
        }
    }

    /// Takes other polygons of the same stations.
    pub fn rebuild(&mut self, built: BuiltPolygons) {
        self.lines = built.edges.edges().iter().map(|e| [e.from, e.to]).collect();
        self.built = built;
    }

    /// Fields of `times` hours, each drawn anew: the winds as reported, and for each time and polygon the true
    /// vorticity and divergence. `report` makes a report of a true wind.
    pub fn run(
        &self,
        times: usize,
        seed: u64,
        report: impl FnMut((f64, f64), &mut ChaCha8Rng) -> (Wind, Covariance),
    ) -> (WindBlock, Vec<Vec<[f64; 2]>>) {
        self.simulate(times, seed, report, |_, integrals| {
            let polygons = self.built.polygons.iter();
            polygons.map(|p| self.truth(p, integrals)).collect()
        })
    }

    /// [`Self::run`] with what `truth` makes of each field and its integrals along the edges.
    fn simulate<T>(
        &self,
        times: usize,
        seed: u64,
        mut report: impl FnMut((f64, f64), &mut ChaCha8Rng) -> (Wind, Covariance),
        of_field: impl Fn(&Field, &[[f64; 2]]) -> T,
    ) -> (WindBlock, Vec<T>) {
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        let hours =
            (0..i64::try_from(times).unwrap()).map(|k| Time::from_micros(k * 3_600_000_000));
        let mut block = WindBlock::empty(hours.collect(), self.places.len());
        let mut truth = Vec::new();
        for t in 0..times {
            let class = Class {
                rms: self.class.rms * self.class.growth.powf(t as f64 / 24.0),
                ..self.class
            };
            let field = Field::new(&class, &mut random);
            let (winds, integrals) = field.sample(&self.places, &self.lines);
            truth.push(of_field(&field, &integrals));
            let local = self.plane.turn(&self.places, &winds);
            for (station, &wind) in local.iter().enumerate() {
                if random.random_range(0.0..1.0) < self.class.dropouts {
                    continue;
                }
                let (wind, covariance) = report(wind, &mut random);
                set(&mut block, station, t, wind, covariance, Flag::Pass);
            }
        }
        (block, truth)
    }

    /// [`Self::run`] with Gaussian sensor errors of the class.
    pub fn noisy(&self, times: usize, seed: u64) -> (WindBlock, Vec<Vec<[f64; 2]>>) {
        self.run(times, seed, sensors(self.class.noise))
    }

    /// [`Self::noisy`] over a mean wind, with the true mean wind and gradient over each polygon in its own frame.
    pub fn kinematics(
        &self,
        times: usize,
        seed: u64,
        mean: (f64, f64),
    ) -> (WindBlock, Vec<Vec<LocalWind>>) {
        let report = sensors(self.class.noise);
        let mut simulation = self.simulate(times, seed, report, |field, integrals| {
            let parts = field.area_parts(&self.places, &self.lines);
            let polygons = self.built.polygons.iter();
            polygons
                .map(|p| self.local_truth(p, integrals, &parts, mean))
                .collect()
        });
        // The mean wind of the plane, which no report of `simulate` has yet.
        let over = self
            .plane
            .turn(&self.places, &vec![mean; self.places.len()]);
        for (station, (u, v)) in over.into_iter().enumerate() {
            for cell in simulation.0.of_station(station) {
                simulation.0.u[cell] += u;
                simulation.0.v[cell] += v;
            }
        }
        simulation
    }

    fn local_truth(
        &self,
        polygon: &StationPolygon,
        integrals: &[[f64; 2]],
        parts: &[[f64; 2]],
        over: (f64, f64),
    ) -> LocalWind {
        let (mut mean, mut gradient, mut area) = ([0.0; 2], [0.0; 4], 0.0);
        for &directed in &polygon.path {
            let (from, to, _) = self.built.edges.ends(directed);
            let (a, b) = (self.places[from], self.places[to]);
            let (dx, dy) = (b.0 - a.0, b.1 - a.1);
            let length = dx.hypot(dy);
            // Of the line from its first to its second end; the integrals know no direction.
            let sign = if directed.forward { 1.0 } else { -1.0 };
            let [u, v] = integrals[directed.edge];
            mean[0] += sign * parts[directed.edge][0];
            mean[1] += sign * parts[directed.edge][1];
            for (g, term) in gradient.iter_mut().zip([u * dy, -u * dx, v * dy, -v * dx]) {
                *g += term / length;
            }
            area += 0.5 * (a.0 * b.1 - b.0 * a.1);
        }
        // From the axes of the plane to those of the polygon's middle.
        let stations = polygon.row.stations.iter().map(|&s| self.places[s]);
        let n = polygon.row.stations.len() as f64;
        let middle = stations.fold((0.0, 0.0), |m, p| (m.0 + p.0 / n, m.1 + p.1 / n));
        let turned = self.plane.turn(&[middle], &[(1.0, 0.0)])[0];
        let (cos, sin) = turned;
        let rotate = |u: f64, v: f64| (u * cos - v * sin, v * cos + u * sin);
        let (u, v) = rotate(mean[0] / area + over.0, mean[1] / area + over.1);
        let [u_x, u_y, v_x, v_y] = gradient.map(|g| g / area);
        // R G Rᵀ.
        let (a, c) = rotate(u_x, v_x);
        let (b, d) = rotate(u_y, v_y);
        let ((u_x, u_y), (v_x, v_y)) = (rotate(a, b), rotate(c, d));
        LocalWind {
            mean: Wind { u, v },
            gradient: [u_x, u_y, v_x, v_y],
        }
    }

    fn truth(&self, polygon: &StationPolygon, integrals: &[[f64; 2]]) -> [f64; 2] {
        let (mut circulation, mut flux, mut area) = (0.0, 0.0, 0.0);
        for &directed in &polygon.path {
            let (from, to, _) = self.built.edges.ends(directed);
            let (a, b) = (self.places[from], self.places[to]);
            let (dx, dy) = (b.0 - a.0, b.1 - a.1);
            let length = dx.hypot(dy);
            let [u, v] = integrals[directed.edge];
            circulation += (u * dx + v * dy) / length;
            flux += (u * dy - v * dx) / length;
            area += 0.5 * (a.0 * b.1 - b.0 * a.1);
        }
        [circulation / area, flux / area]
    }
}

/// Reports with Gaussian errors of this standard deviation in either component.
fn sensors(sd: f64) -> impl FnMut((f64, f64), &mut ChaCha8Rng) -> (Wind, Covariance) {
    move |(u, v), random| {
        let mut error = || -> f64 {
            let e: f64 = StandardNormal.sample(random);
            sd * e
        };
        let wind = Wind {
            u: u + error(),
            v: v + error(),
        };
        let covariance = Covariance {
            uu: sd * sd,
            uv: 0.0,
            vv: sd * sd,
        };
        (wind, covariance)
    }
}

/// Places of side² stations, m; none nearer to another than an eighth of the spacing.
fn layout(class: &Class, random: &mut ChaCha8Rng) -> Vec<(f64, f64)> {
    let (n, middle) = (class.side, 0.5 * (class.side as f64 - 1.0));
    let scatter = |random: &mut ChaCha8Rng, by: f64| -> [f64; 2] {
        [random.random_range(-by..by), random.random_range(-by..by)]
    };
    let mut places: Vec<[f64; 2]> = Vec::new();
    let apart = |places: &[[f64; 2]], p: [f64; 2]| {
        places
            .iter()
            .all(|q| (p[0] - q[0]).hypot(p[1] - q[1]) > 0.125)
    };
    match class.layout {
        Layout::Regular | Layout::Jittered => {
            let by = if class.layout == Layout::Regular {
                0.01
            } else {
                0.35
            };
            for i in 0..n {
                for j in 0..n {
                    let [x, y] = scatter(random, by);
                    places.push([i as f64 - middle + x, j as f64 - middle + y]);
                }
            }
        }
        Layout::Clustered => {
            let mut centres: Vec<[f64; 2]> = Vec::new();
            for _ in 0..n {
                centres.push(scatter(random, 0.5 * n as f64));
            }
            while places.len() < n * n {
                let [x, y] = centres[random.random_range(0..n)];
                let mut offset = || -> f64 {
                    let e: f64 = StandardNormal.sample(random);
                    0.8 * e
                };
                let p = [x + offset(), y + offset()];
                if apart(&places, p) {
                    places.push(p);
                }
            }
        }
    }
    places
        .iter()
        .map(|[x, y]| (x * class.spacing, y * class.spacing))
        .collect()
}
