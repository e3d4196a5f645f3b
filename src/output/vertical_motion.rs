//! `vertical_motion.csv`: vertical wind at a stated height from the divergence at the ground, rows as in `polygons.csv`.

use zmij::Buffer;

use super::csv::quoted;
use crate::integral::EstimateBlock;
use crate::pipeline::Setup;
use crate::profile::{Measured, motion_at_height};

/// What w = −D h takes for granted.
#[must_use]
pub fn assumption_of_height(height: f64) -> String {
    format!(
        "w = -D h: the divergence at the ground is taken to be the same from flat ground up to h = {height} m."
    )
}

/// Writes rows of `vertical_motion.csv`.
pub(super) struct VerticalMotionRows {
    names: Vec<String>,
    height: f64,
    height_text: String,
}

impl VerticalMotionRows {
    pub(super) fn new(setup: &Setup, height: f64) -> Self {
        let polygons = setup.built.polygons.iter();
        Self {
            names: polygons.map(|p| quoted(&p.id)).collect(),
            height,
            height_text: Buffer::new().format(height).to_string(),
        }
    }

    pub(super) fn header() -> &'static str {
        "time,polygon,height,w,w_se,flag\n"
    }

    pub(super) fn encode(&self, block: &EstimateBlock) -> Vec<u8> {
        let n = block.times.len();
        let mut out = Vec::with_capacity(block.flag.len() * 80);
        let mut buffer = Buffer::new();
        let extra: Vec<String> = block.extra.iter().map(|e| quoted(&e.polygon.id)).collect();
        for (t, time) in block.times.iter().enumerate() {
            let time = time.to_string();
            for (p, name) in self.names.iter().chain(&extra).enumerate() {
                let cell = p * n + t;
                if !block.stands(cell) {
                    continue;
                }
                for text in [time.as_str(), name, &self.height_text] {
                    out.extend_from_slice(text.as_bytes());
                    out.push(b',');
                }
                if block.flag[cell].is_usable() {
                    let divergence = Measured {
                        value: block.divergence[cell],
                        se: block.divergence_se[cell],
                    };
                    let w = motion_at_height(divergence, self.height);
                    for number in [w.value, w.se] {
                        out.extend_from_slice(buffer.format(number).as_bytes());
                        out.push(b',');
                    }
                } else {
                    out.extend_from_slice(b",,");
                }
                out.push(b'0' + block.flag[cell].value());
                out.push(b'\n');
            }
        }
        out
    }
}
