//! `decompose.csv` and `decompose_stations.csv`: rotational, divergent and harmonic part of the wind.

use zmij::Buffer;

use super::csv::quoted;
use crate::helmholtz::{DecompositionBlock, Part};
use crate::pipeline::Setup;

/// Writes rows of both files.
pub(super) struct DecomposeRows {
    names: Vec<String>,
}

/// Rows of a block.
pub(super) struct DecomposeBytes {
    pub(super) energies: Vec<u8>,
    pub(super) stations: Vec<u8>,
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

    pub(super) fn encode(&self, block: &DecompositionBlock) -> DecomposeBytes {
        let mut out = DecomposeBytes {
            energies: Vec::new(),
            stations: Vec::new(),
        };
        let mut buffer = Buffer::new();
        let mut counts = String::new();
        for ((time, found), reporting) in block.times.iter().zip(&block.at).zip(&block.reporting) {
            let time = time.to_string();
            let energies = &mut out.energies;
            energies.extend_from_slice(time.as_bytes());
            let Some((mesh, split)) = found else {
                // Times without a mesh keep their row.
                energies.extend_from_slice(format!(",{reporting},0,0,0,0,0").as_bytes());
                energies.extend_from_slice(&[b','; 8]);
                energies.push(b'\n');
                continue;
            };
            counts.clear();
            for count in [
                *reporting,
                mesh.stations.len(),
                mesh.inside(),
                mesh.triangles,
                mesh.left_out,
                mesh.holes,
            ] {
                counts.push(',');
                counts.push_str(&count.to_string());
            }
            energies.extend_from_slice(counts.as_bytes());
            let numbers = [mesh.area / 1e6, split.energy].into_iter();
            for number in numbers.chain(split.parts) {
                energies.push(b',');
                energies.extend_from_slice(buffer.format(number).as_bytes());
            }
            for part in Part::ALL {
                energies.push(b',');
                if let Some(share) = split.share(part) {
                    energies.extend_from_slice(buffer.format(share).as_bytes());
                }
            }
            energies.push(b'\n');
            let nodes = mesh
                .stations
                .iter()
                .zip(&mesh.interior)
                .zip(&split.stations);
            for ((&station, &inside), found) in nodes {
                let row = &mut out.stations;
                row.extend_from_slice(time.as_bytes());
                row.push(b',');
                row.extend_from_slice(self.names[station].as_bytes());
                row.extend_from_slice(if inside { b",true" } else { b",false" });
                let potentials = [found.streamfunction, found.velocity_potential];
                let winds = found.parts.iter().flat_map(|w| [w.u, w.v]);
                for number in potentials.into_iter().chain(winds) {
                    row.push(b',');
                    row.extend_from_slice(buffer.format(number).as_bytes());
                }
                row.push(b'\n');
            }
        }
        out
    }
}
