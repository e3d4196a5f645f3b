//! The values of a block as the file stores them.

use super::variables::{FLAGS, FaceVariable, Source, face_variables, flag_value, reason_node};
use crate::pipeline::{BlockView, Setup};
use crate::time::Time;

/// Turns blocks into what the file stores; shared by all threads.
pub(in crate::output) struct FaceRows {
    variables: Vec<FaceVariable>,
    planetary: Vec<f64>,
    stations: usize,
}

/// A block as the file stores it: columns by time, then face or node.
pub(in crate::output) struct FaceBlock {
    pub(super) times: Vec<Time>,
    /// Numbers in the run of the faces that follow those of the whole network.
    pub(super) extra: Vec<usize>,
    /// In the order of [`face_variables`].
    pub(super) numbers: Vec<Vec<f32>>,
    /// In the order of [`FLAGS`].
    pub(super) flags: Vec<Vec<i8>>,
    pub(super) reason_node: Vec<i32>,
    /// Winds of the stations in the order of [`super::WINDS`].
    pub(super) winds: [Vec<f32>; 4],
    pub(super) wind_flag: Vec<i8>,
}

impl FaceRows {
    pub(in crate::output) fn new(setup: &Setup) -> Self {
        let settings = &setup.settings;
        Self {
            variables: face_variables(settings.errors.complete, settings.kinematics.write),
            planetary: setup.planetary.clone(),
            stations: setup.network.len(),
        }
    }

    #[expect(
        clippy::cast_possible_truncation,
        reason = "the file stores seven digits"
    )]
    pub(in crate::output) fn encode(&self, seen: &BlockView) -> FaceBlock {
        let block = seen.estimates;
        let n = block.times.len();
        let extra = block.extra.iter().map(|extra| extra.planetary);
        let planetary: Vec<f64> = self.planetary.iter().copied().chain(extra).collect();
        let faces = planetary.len();
        let cells = || (0..n).flat_map(|t| (0..faces).map(move |p| (p * n + t, p)));
        let number = |source: Source, cell: usize, p: usize| -> f32 {
            let found = match source {
                Source::Estimate(of) => {
                    let usable = block.stands(cell) && block.flag[cell].is_usable();
                    usable.then(|| of(block, cell, planetary[p]))
                }
                // Faces that fill holes have no kinematics.
                Source::Value(q) | Source::Error(q) => seen
                    .kinematics
                    .filter(|_| p < self.planetary.len())
                    .and_then(|k| k.cells.get(cell)?.get(q))
                    .map(|(value, error)| match source {
                        Source::Error(_) => error,
                        _ => value,
                    }),
            };
            found.map_or(f32::NAN, |found| found as f32)
        };
        let column = |variable: &FaceVariable| {
            let cells = cells();
            cells
                .map(|(cell, p)| number(variable.source, cell, p))
                .collect()
        };
        let winds = seen.winds;
        let of_stations = || (0..n).flat_map(|t| (0..self.stations).map(move |s| s * n + t));
        let wind = |column: &[f64], of: fn(f64) -> f64| -> Vec<f32> {
            let values = of_stations().map(|cell| {
                if winds.flag[cell].is_usable() {
                    of(column[cell]) as f32
                } else {
                    f32::NAN
                }
            });
            values.collect()
        };
        FaceBlock {
            times: block.times.clone(),
            extra: block.extra.iter().map(|extra| extra.number).collect(),
            numbers: self.variables.iter().map(column).collect(),
            flags: FLAGS
                .iter()
                .map(|flag| {
                    let cells = cells();
                    cells
                        .map(|(cell, _)| {
                            if block.stands(cell) {
                                (flag.of)(block, cell)
                            } else {
                                flag.absent
                            }
                        })
                        .collect()
                })
                .collect(),
            reason_node: cells().map(|(cell, _)| reason_node(block, cell)).collect(),
            winds: [
                wind(&winds.u, |u| u),
                wind(&winds.var_u, |variance| variance.max(0.0).sqrt()),
                wind(&winds.v, |v| v),
                wind(&winds.var_v, |variance| variance.max(0.0).sqrt()),
            ],
            wind_flag: of_stations()
                .map(|cell| flag_value(winds.flag[cell]))
                .collect(),
        }
    }
}
