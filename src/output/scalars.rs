//! `scalars.csv`: observed scalars over the polygons, a row for each time, polygon and scalar; empty where something is
//! missing.

use zmij::Buffer;

use super::csv::quoted;
use super::kinematics::short;
use crate::kinematics::{ScalarCells, ScalarQuantity};
use crate::pipeline::Setup;

/// Writes rows of `scalars.csv`.
pub(super) struct ScalarRows {
    polygons: Vec<String>,
    scalars: Vec<String>,
}

impl ScalarRows {
    pub(super) fn new(setup: &Setup) -> Self {
        let polygons = setup.built.polygons.iter();
        let scalars = setup.settings.scalars.iter();
        Self {
            polygons: polygons.map(|p| quoted(&p.id)).collect(),
            scalars: scalars.map(|s| quoted(&s.name)).collect(),
        }
    }

    pub(super) fn header() -> String {
        let mut out = String::from("time,polygon,scalar");
        for quantity in ScalarQuantity::ALL {
            for part in [",", quantity.name(), ",", quantity.name(), "_se"] {
                out.push_str(part);
            }
        }
        out.push_str(",flag\n");
        out
    }

    pub(super) fn encode(&self, block: &ScalarCells) -> Vec<u8> {
        let (n, scalars) = (block.times.len(), self.scalars.len());
        let mut out = Vec::with_capacity(block.cells.len() * 256);
        let mut buffer = Buffer::new();
        for (t, time) in block.times.iter().enumerate() {
            let time = time.to_string();
            for (p, polygon) in self.polygons.iter().enumerate() {
                for (k, scalar) in self.scalars.iter().enumerate() {
                    for (text, end) in [(&time, b','), (polygon, b','), (scalar, b',')] {
                        out.extend_from_slice(text.as_bytes());
                        out.push(end);
                    }
                    let cell = &block.cells[(p * scalars + k) * n + t];
                    for quantity in ScalarQuantity::ALL {
                        if let Some((value, error)) = cell.get(quantity) {
                            out.extend_from_slice(buffer.format(value).as_bytes());
                            out.push(b',');
                            out.extend_from_slice(buffer.format(short(error)).as_bytes());
                        } else {
                            out.push(b',');
                        }
                        out.push(b',');
                    }
                    out.extend_from_slice(cell.flag.value().to_string().as_bytes());
                    out.push(b'\n');
                }
            }
        }
        out
    }
}
