//! `decompose.csv` and `decompose_stations.csv`: rotational, divergent and harmonic part of the wind.

use zmij::Buffer;

use super::csv::quoted;
use crate::helmholtz::{DecompositionBlock, Part};
use crate::pipeline::Setup;

/// Writes rows of either file.
pub(super) struct DecomposeRows {
    names: Vec<String>,
}

impl DecomposeRows {
    pub(super) fn new(setup: &Setup) -> Self {
        let stations = setup.network.stations().iter();
        Self {
            names: stations.map(|s| quoted(&s.id)).collect(),
        }
    }

    /// Of `decompose.csv`.
    pub(super) fn energy_header() -> String {
        let mut out = String::from(
            "time,stations_reporting,stations,stations_inside,triangles,triangles_left_out,holes,area_km2,kinetic_energy",
        );
        for what in ["energy", "share"] {
            for part in Part::ALL {
                for text in [",", part.name(), "_", what] {
                    out.push_str(text);
                }
            }
        }
        out.push('\n');
        out
    }

    /// Of `decompose_stations.csv`.
    pub(super) fn station_header() -> String {
        let mut out = String::from("time,station,inside,streamfunction,velocity_potential");
        for part in Part::ALL {
            for component in ["_u", "_v"] {
                for text in [",", part.name(), component] {
                    out.push_str(text);
                }
            }
        }
        out.push('\n');
        out
    }

    /// Rows of `decompose.csv`; times without a mesh keep theirs.
    pub(super) fn energies(block: &DecompositionBlock) -> Vec<u8> {
        let mut out = Vec::with_capacity(block.times.len() * 256);
        let mut buffer = Buffer::new();
        for ((time, found), reporting) in block.times.iter().zip(&block.at).zip(&block.reporting) {
            out.extend_from_slice(format!("{time},{reporting}").as_bytes());
            let Some((mesh, split)) = found else {
                out.extend_from_slice(b",0,0,0,0,0,,,,,,,,\n");
                continue;
            };
            for count in [
                mesh.stations.len(),
                mesh.inside(),
                mesh.triangles,
                mesh.left_out,
                mesh.holes,
            ] {
                out.extend_from_slice(format!(",{count}").as_bytes());
            }
            let numbers = [mesh.area / 1e6, split.energy].into_iter();
            for number in numbers.chain(split.parts) {
                out.push(b',');
                out.extend_from_slice(buffer.format(number).as_bytes());
            }
            for part in Part::ALL {
                out.push(b',');
                if let Some(share) = split.share(part) {
                    out.extend_from_slice(buffer.format(share).as_bytes());
                }
            }
            out.push(b'\n');
        }
        out
    }

    /// Rows of `decompose_stations.csv`, of the stations of the mesh.
    pub(super) fn stations(&self, block: &DecompositionBlock) -> Vec<u8> {
        let mut out = Vec::new();
        let mut buffer = Buffer::new();
        for (time, found) in block.times.iter().zip(&block.at) {
            let Some((mesh, split)) = found else {
                continue;
            };
            let time = time.to_string();
            let nodes = mesh
                .stations
                .iter()
                .zip(&mesh.interior)
                .zip(&split.stations);
            for ((&station, &inside), found) in nodes {
                out.extend_from_slice(time.as_bytes());
                out.push(b',');
                out.extend_from_slice(self.names[station].as_bytes());
                out.extend_from_slice(if inside { b",true" } else { b",false" });
                let potentials = [found.streamfunction, found.velocity_potential];
                let winds = found.parts.iter().flat_map(|w| [w.u, w.v]);
                for number in potentials.into_iter().chain(winds) {
                    out.push(b',');
                    out.extend_from_slice(buffer.format(number).as_bytes());
                }
                out.push(b'\n');
            }
        }
        out
    }
}
