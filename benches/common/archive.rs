//! A made-up archive of reports: any number of stations, days and minutes, the same for the same seed.
#![allow(dead_code, reason = "each bench uses a part of it")]

use std::fs::File;
use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};

use gyremesh::time::Time;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Normal};

/// What is in the archive.
#[derive(Debug, Clone, Copy)]
pub struct Archive {
    /// Stations, on a jittered lattice 30 km apart.
    pub stations: usize,
    /// Days.
    pub days: usize,
    /// Minutes between reports.
    pub minutes: usize,
}

/// 2031-01-01T00:00:00Z
const START: i64 = 1_924_992_000_000_000;

impl Archive {
    /// Reports of all stations together.
    pub fn reports(&self) -> usize {
        self.stations * self.times()
    }

    fn times(&self) -> usize {
        self.days * 1440 / self.minutes
    }

    /// Latitude and longitude of the stations.
    pub fn places(&self, rng: &mut ChaCha8Rng) -> Vec<(f64, f64)> {
        let jitter = Normal::new(0.0, 0.05).unwrap();
        let across = (self.stations as f64).sqrt().ceil() as usize;
        // No network is wider than a hemisphere: spacing shrinks beyond 10,000 stations.
        let spacing = 0.27_f64.min(60.0 / across as f64);
        (0..self.stations)
            .map(|k| {
                let (row, column) = ((k / across) as f64, (k % across) as f64);
                let half = across as f64 / 2.0;
                let latitude = 46.0 + (row - half + jitter.sample(rng)) * spacing;
                let shrink = latitude.to_radians().cos();
                let longitude = -29.0 + (column - half + jitter.sample(rng)) * spacing / shrink;
                (latitude, longitude)
            })
            .collect()
    }

    /// Writes `network.toml`, `stations.csv` and `reports.csv` into a folder; the path of the first.
    pub fn write(&self, folder: &Path) -> PathBuf {
        let mut rng = ChaCha8Rng::seed_from_u64(4);
        let mut stations = BufWriter::new(File::create(folder.join("stations.csv")).unwrap());
        writeln!(stations, "id,latitude,longitude").unwrap();
        for (k, (latitude, longitude)) in self.places(&mut rng).into_iter().enumerate() {
            writeln!(stations, "ST{k:05},{latitude:.5},{longitude:.5}").unwrap();
        }
        stations.flush().unwrap();
        self.write_reports(&folder.join("reports.csv"), &mut rng);
        let settings = format!(
            "name = \"Archive\"\n[stations]\nfile = \"stations.csv\"\n[[reports]]\nfiles = [\"reports.csv\"]\n\
             [analysis]\ninterval = \"{} min\"\n[sensor]\nspeed_step = \"0.01 m/s\"\ndirection_step = 0.1\n",
            self.minutes
        );
        let path = folder.join("network.toml");
        std::fs::write(&path, settings).unwrap();
        path
    }

    /// Reports by time, then station: each wind follows the one before it and the mean of all.
    fn write_reports(&self, path: &Path, rng: &mut ChaCha8Rng) {
        let mut out = BufWriter::with_capacity(1 << 20, File::create(path).unwrap());
        out.write_all(b"time,station,direction,speed\n").unwrap();
        let noise = Normal::new(0.0, 0.4).unwrap();
        let mut winds = vec![(0.0_f64, 0.0_f64); self.stations];
        let names: Vec<String> = (0..self.stations).map(|k| format!(",ST{k:05},")).collect();
        let mut digits = [0; 8];
        for t in 0..self.times() {
            let micros = START + 60_000_000 * (t * self.minutes) as i64;
            let time = Time::from_micros(micros).to_string();
            let day = t as f64 * self.minutes as f64 / 1440.0;
            let mean = (6.0 * (day * 0.9).sin(), 5.0 * (day * 0.37).cos());
            for (wind, name) in winds.iter_mut().zip(&names) {
                wind.0 = 0.97 * wind.0 + noise.sample(rng);
                wind.1 = 0.97 * wind.1 + noise.sample(rng);
                let (u, v) = (mean.0 + wind.0, mean.1 + wind.1);
                let direction = (-u).atan2(-v).to_degrees().rem_euclid(360.0);
                out.write_all(time.as_bytes()).unwrap();
                out.write_all(name.as_bytes()).unwrap();
                put(&mut out, &mut digits, (direction * 10.0).round() as u32, 1);
                out.write_all(b",").unwrap();
                put(
                    &mut out,
                    &mut digits,
                    (u.hypot(v) * 100.0).round() as u32,
                    2,
                );
                out.write_all(b"\n").unwrap();
            }
        }
        out.flush().unwrap();
    }
}

/// Writes a number with a fixed count of decimals.
fn put(out: &mut impl Write, digits: &mut [u8; 8], number: u32, decimals: usize) {
    let mut rest = number;
    let mut at = digits.len();
    loop {
        if digits.len() - at == decimals {
            at -= 1;
            digits[at] = b'.';
        }
        at -= 1;
        digits[at] = b'0' + (rest % 10) as u8;
        rest /= 10;
        if rest == 0 && digits.len() - at > decimals + 1 {
            break;
        }
    }
    out.write_all(&digits[at..]).unwrap();
}
