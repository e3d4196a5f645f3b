//! Triangles whose means are strong, and the areas that they make.

use std::collections::BTreeMap;

use crate::check::Flag;
use crate::integral::{EstimateBlock, ExtraPolygon, Sense};
use crate::polygon::{PolygonKind, StationPolygon};
use crate::settings::Onset;
use crate::station::Network;
use crate::structure::{LocalPlane, PlanePoint};
use crate::time::Time;

/// What the air does in an area.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum AreaKind {
    /// It flows together.
    Convergence,
    /// It flows apart.
    Divergence,
    /// It turns with the Earth.
    Cyclonic,
    /// It turns against the Earth.
    Anticyclonic,
}

impl AreaKind {
    /// All kinds, in the order of [`Snapshot::cells`].
    pub const ALL: [Self; 4] = [
        Self::Convergence,
        Self::Divergence,
        Self::Cyclonic,
        Self::Anticyclonic,
    ];

    /// The kind in words.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Convergence => "convergence",
            Self::Divergence => "divergence",
            Self::Cyclonic => "cyclonic spin-up",
            Self::Anticyclonic => "anticyclonic spin-up",
        }
    }

    /// What its values are: the divergence or the vorticity.
    #[must_use]
    pub const fn quantity(self) -> &'static str {
        match self {
            Self::Convergence | Self::Divergence => "divergence",
            Self::Cyclonic | Self::Anticyclonic => "vorticity",
        }
    }
}

/// An event goes on while its triangles have this share of the strength that begins one.
const STAYS: f64 = 0.5;
/// Least standard errors by which a triangle that belongs to an event differs from zero; 1.96 hold 95 %.
const DEVIATIONS: f64 = 1.96;

/// A triangle at a time at which its mean is strong.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Cell {
    /// Its number in the run.
    pub polygon: usize,
    /// Its stations, ascending.
    pub stations: [usize; 3],
    /// Its area, m².
    pub area: f64,
    /// Its centre in the plane of the network, m.
    pub centre: [f64; 2],
    /// Its mean, 1/s.
    pub value: f64,
    /// Standard error of the mean, 1/s.
    pub error: f64,
    /// Its strength: 1 is what begins an event.
    pub strength: f64,
    /// True if it can begin an event: strong enough, and called different from zero.
    pub begins: bool,
}

/// The strong triangles of a time.
#[derive(Debug, Clone, PartialEq)]
pub struct Snapshot {
    /// The time.
    pub time: Time,
    /// By kind, in the order of [`AreaKind::ALL`].
    pub cells: [Vec<Cell>; 4],
}

/// A triangle of the mesh.
#[derive(Debug, Clone, Copy)]
struct Triangle {
    stations: [usize; 3],
    area: f64,
    centre: [f64; 2],
    planetary: f64,
}

/// Finds the strong triangles of each time.
#[derive(Debug)]
pub struct AreaFinder {
    /// For each polygon, if it is a triangle.
    triangles: Vec<Option<Triangle>>,
    places: Vec<PlanePoint>,
    onset: Onset,
}

impl AreaFinder {
    /// For the polygons of a network; `planetary` holds their planetary vorticities, 1/s.
    #[must_use]
    pub fn new(
        network: &Network,
        plane: &LocalPlane,
        polygons: &[StationPolygon],
        planetary: &[f64],
        onset: Onset,
    ) -> Self {
        let stations = network.stations().iter();
        let places: Vec<PlanePoint> = stations.map(|s| plane.place(s.position)).collect();
        let triangles = polygons.iter().zip(planetary);
        Self {
            triangles: triangles
                .map(|(polygon, &f)| triangle(polygon, f, &places))
                .collect(),
            places,
            onset,
        }
    }

    /// The strong triangles at each time of a block: of the faultless ones, those with half the strength of an onset
    /// that differ from zero by 1.96 standard errors.
    #[must_use]
    pub fn snapshots(&self, block: &EstimateBlock) -> Vec<Snapshot> {
        let n = block.times.len();
        let extra = |extra: &ExtraPolygon| {
            let of_extra = triangle(&extra.polygon, extra.planetary, &self.places)?;
            Some((extra.number, of_extra))
        };
        let common = self.triangles.iter().enumerate();
        let triangles: Vec<Option<(usize, Triangle)>> = common
            .map(|(number, triangle)| triangle.map(|triangle| (number, triangle)))
            .chain(block.extra.iter().map(extra))
            .collect();
        let mut snapshots: Vec<Snapshot> = block
            .times
            .iter()
            .map(|&time| Snapshot {
                time,
                cells: Default::default(),
            })
            .collect();
        for (row, triangle) in triangles.iter().enumerate() {
            let Some((polygon, triangle)) = *triangle else {
                continue;
            };
            for (t, snapshot) in snapshots.iter_mut().enumerate() {
                let cell = row * n + t;
                if block.flag[cell] > Flag::Pass || !block.stands(cell) {
                    continue;
                }
                let (z, d) = (block.vorticity[cell], block.divergence[cell]);
                let turns = match Sense::of(z, triangle.planetary) {
                    Some(Sense::Cyclonic) => Some(2),
                    Some(Sense::Anticyclonic) => Some(3),
                    None => None,
                };
                let flows = Some(usize::from(d > 0.0));
                for (kind, quantity, value, error) in [
                    (flows, 1, d, block.divergence_se[cell]),
                    (turns, 0, z, block.vorticity_se[cell]),
                ] {
                    let strength = self.strength(value, triangle.area);
                    let Some(kind) = kind else { continue };
                    if strength < STAYS || value.abs() < DEVIATIONS * error {
                        continue;
                    }
                    let significant = block.significant[quantity].get(cell);
                    snapshot.cells[kind].push(Cell {
                        polygon,
                        stations: triangle.stations,
                        area: triangle.area,
                        centre: triangle.centre,
                        value,
                        error,
                        strength,
                        begins: strength >= 1.0 && significant.copied().unwrap_or(false),
                    });
                }
            }
        }
        snapshots
    }

    fn strength(&self, value: f64, area: f64) -> f64 {
        match self.onset {
            Onset::Jump(jump) => value.abs() * area.sqrt() / jump,
            Onset::Value(least) => value.abs() / least,
        }
    }
}

fn triangle(polygon: &StationPolygon, planetary: f64, places: &[PlanePoint]) -> Option<Triangle> {
    let [outline] = polygon.outline.as_slice() else {
        return None;
    };
    let mut stations: [usize; 3] = outline.as_slice().try_into().ok()?;
    if polygon.kind != PolygonKind::Triangle {
        return None;
    }
    stations.sort_unstable();
    let corners = stations.map(|s| places[s].at); // stations of the network
    let mean = |k: usize| corners.iter().map(|corner| corner[k]).sum::<f64>() / 3.0;
    Some(Triangle {
        stations,
        area: polygon.shape.area,
        centre: [mean(0), mean(1)],
        planetary,
    })
}

/// The cell that stands for all that hang together with one.
fn find(root: &[usize], mut k: usize) -> usize {
    while root[k] != k {
        k = root[k];
    }
    k
}

/// Cells that hang together by shared stations: their numbers, ascending, in the order of their first. Shared sides alone
/// would part a vortex about a station, or behind a triangle left out.
#[must_use]
pub fn connected(cells: &[Cell]) -> Vec<Vec<usize>> {
    let mut root: Vec<usize> = (0..cells.len()).collect();
    let mut first: BTreeMap<usize, usize> = BTreeMap::new();
    for (k, cell) in cells.iter().enumerate() {
        for station in cell.stations {
            if let Some(&other) = first.get(&station) {
                let (a, b) = (find(&root, other), find(&root, k));
                root[a.max(b)] = a.min(b);
            } else {
                first.insert(station, k);
            }
        }
    }
    let mut groups: BTreeMap<usize, Vec<usize>> = BTreeMap::new();
    for k in 0..cells.len() {
        groups.entry(find(&root, k)).or_default().push(k);
    }
    groups.into_values().collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    pub(in crate::event) fn cell(polygon: usize, stations: [usize; 3], strength: f64) -> Cell {
        Cell {
            polygon,
            stations,
            area: 1e8,
            centre: [0.0, 0.0],
            value: 1e-4 * strength,
            error: 1e-5,
            strength,
            begins: strength >= 1.0,
        }
    }

    #[test]
    fn triangles_hang_together_by_stations() {
        let cells = [
            cell(0, [0, 1, 2], 1.0),
            cell(1, [5, 6, 7], 1.0),
            cell(2, [3, 4, 8], 1.0),
            cell(3, [2, 3, 9], 1.0),
        ];
        assert_eq!(connected(&cells), [vec![0, 2, 3], vec![1]]);
    }
}
