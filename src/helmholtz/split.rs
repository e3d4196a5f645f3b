//! The parts of the wind over a mesh.

use std::sync::Arc;

use super::factor::Factor;
use super::mesh::{Element, Mesh, MeshSummary};
use crate::units::Wind;

/// The parts of a wind, in the order of the output.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Part {
    /// k × ∇ψ: has all vorticity, no divergence.
    Rotational,
    /// ∇χ: has all divergence, no vorticity.
    Divergent,
    /// What is left, with neither: uniform winds, deformation, circulation around holes.
    Harmonic,
}

impl Part {
    /// All of them.
    pub const ALL: [Self; 3] = [Self::Rotational, Self::Divergent, Self::Harmonic];

    /// The part as a word.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Rotational => "rotational",
            Self::Divergent => "divergent",
            Self::Harmonic => "harmonic",
        }
    }
}

/// What is found at a station.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct AtStation {
    /// Streamfunction ψ, m²/s; 0 on the boundary.
    pub streamfunction: f64,
    /// Velocity potential χ, m²/s; 0 on the boundary.
    pub velocity_potential: f64,
    /// The parts of the wind, m/s: means of the triangles around, by area.
    pub parts: [Wind; 3],
}

/// The parts of the wind at one time.
#[derive(Debug, Clone, PartialEq)]
pub struct Split {
    /// Kinetic energy of the triangles' mean winds, ½ |V|² averaged over the mesh, m²/s².
    pub energy: f64,
    /// That of each part; they sum to `energy` but for rounding.
    pub parts: [f64; 3],
    /// At the nodes, in the order of [`MeshSummary::stations`].
    pub stations: Vec<AtStation>,
}

impl Split {
    /// Share of a part in the kinetic energy; `None` in a calm.
    #[must_use]
    pub fn share(&self, part: Part) -> Option<f64> {
        (self.energy > 0.0).then(|| self.parts[part as usize] / self.energy)
    }
}

/// A mesh with the factor of its matrix.
#[derive(Debug, Clone)]
pub struct Decomposer {
    summary: Arc<MeshSummary>,
    elements: Vec<Element>,
    /// For each node its number among the unknowns; none on the boundary.
    unknown: Vec<Option<usize>>,
    /// None without a node inside.
    factor: Option<Factor>,
}

impl Decomposer {
    /// Factors the matrix Σ A ∇φᵢ·∇φⱼ of a mesh, φ the functions that are 1 at one node and 0 at all others. `None` if
    /// rounding has made it singular, in a mesh of needles.
    #[must_use]
    pub fn new(mesh: Mesh) -> Option<Self> {
        let Mesh { summary, elements } = mesh;
        let mut unknowns = 0;
        let number = |&inside: &bool| {
            inside.then(|| {
                unknowns += 1;
                unknowns - 1
            })
        };
        let unknown: Vec<Option<usize>> = summary.interior.iter().map(number).collect();
        let mut columns: Vec<Vec<(usize, f64)>> = vec![Vec::new(); unknowns];
        for e in &elements {
            for (&a, [ax, ay]) in e.nodes.iter().zip(e.gradients) {
                for (&b, [bx, by]) in e.nodes.iter().zip(e.gradients) {
                    if let (Some(i), Some(j)) = (unknown[a], unknown[b]) {
                        columns[j].push((i, e.area * (ax * bx + ay * by)));
                    }
                }
            }
        }
        let factor = if unknowns > 0 {
            Some(Factor::of(&columns)?)
        } else {
            None
        };
        Some(Self {
            summary: Arc::new(summary),
            elements,
            unknown,
            factor,
        })
    }

    /// What the mesh is made of.
    #[must_use]
    pub fn mesh(&self) -> &Arc<MeshSummary> {
        &self.summary
    }

    /// The factor; none without a station inside.
    #[must_use]
    pub fn factor(&self) -> Option<&Factor> {
        self.factor.as_ref()
    }

    /// The parts of the winds at `times` times, given by station (as numbered by the mesh's maker) and time, all
    /// solved together. The result for a time does not depend on the others.
    ///
    /// - **Equations**: for every φ of a node inside, with V the mean of a triangle's three winds,
    ///   Σ A ∇χ·∇φ = Σ A V·∇φ and Σ A ∇ψ·∇φ = Σ A V·(k × ∇φ), χ = ψ = 0 on the boundary, that of holes too.
    /// - **Accuracy**: the parts are orthogonal to rounding, so their energies sum to the whole to 10⁻¹⁰
    ///   (`tests/helmholtz.rs`).
    /// - **Reference**: Lynch 1989, MWR 117, 1492; `methods.md` 7.
    pub fn split(&self, times: usize, wind: impl Fn(usize, usize) -> Wind) -> Vec<Split> {
        let stations = &self.summary.stations;
        // Mean winds of triangles × times.
        let mut means = vec![[0.0; 2]; self.elements.len() * times];
        let columns = means.chunks_exact_mut(times.max(1));
        for (e, means) in self.elements.iter().zip(columns) {
            for (corner, &node) in e.nodes.iter().enumerate() {
                for (t, mean) in means.iter_mut().enumerate() {
                    let [u, v] = e.carry(corner, wind(stations[node], t));
                    mean[0] += u / 3.0;
                    mean[1] += v / 3.0;
                }
            }
        }
        self.of_means(times, &means)
    }

    /// The parts of winds that are constant in each triangle; triangles × times.
    fn of_means(&self, m: usize, means: &[[f64; 2]]) -> Vec<Split> {
        let unknowns = self.factor.as_ref().map_or(0, Factor::unknowns);
        // Of each unknown the right sides for χ of all times, then those for ψ.
        let mut sides = vec![0.0; unknowns * 2 * m];
        for (e, means) in self.elements.iter().zip(means.chunks_exact(m.max(1))) {
            for (&node, [x, y]) in e.nodes.iter().zip(e.gradients) {
                let Some(i) = self.unknown[node] else {
                    continue;
                };
                let (potential, stream) = sides[i * 2 * m..(i + 1) * 2 * m].split_at_mut(m);
                for ((chi, psi), [u, v]) in potential.iter_mut().zip(stream).zip(means) {
                    *chi += e.area * (u * x + v * y);
                    *psi += e.area * (v * x - u * y);
                }
            }
        }
        if let Some(factor) = &self.factor {
            factor.solve(&mut sides, 2 * m);
        }
        (0..m)
            .map(|t| {
                let at = |node: usize| match self.unknown[node] {
                    Some(i) => [sides[i * 2 * m + t], sides[i * 2 * m + m + t]],
                    None => [0.0; 2],
                };
                self.at_time(at, |e| means[e * m + t])
            })
            .collect()
    }

    /// One time, from χ and ψ of the nodes and the mean winds of the triangles.
    fn at_time(
        &self,
        solution: impl Fn(usize) -> [f64; 2],
        mean: impl Fn(usize) -> [f64; 2],
    ) -> Split {
        let mut split = Split {
            energy: 0.0,
            parts: [0.0; 3],
            stations: vec![AtStation::default(); self.summary.stations.len()],
        };
        let mut around = vec![0.0; split.stations.len()];
        for (k, e) in self.elements.iter().enumerate() {
            let corners = e.nodes.map(&solution);
            let [u, v] = mean(k);
            let [chi_x, chi_y] = e.gradient(corners.map(|c| c[0]));
            let [psi_x, psi_y] = e.gradient(corners.map(|c| c[1]));
            let (rotational, divergent) = ([-psi_y, psi_x], [chi_x, chi_y]);
            let harmonic = [
                u - divergent[0] - rotational[0],
                v - divergent[1] - rotational[1],
            ];
            let parts = [rotational, divergent, harmonic];
            split.energy += 0.5 * e.area * (u * u + v * v);
            for (sum, [u, v]) in split.parts.iter_mut().zip(parts) {
                *sum += 0.5 * e.area * (u * u + v * v);
            }
            for (corner, &node) in e.nodes.iter().enumerate() {
                around[node] += e.area;
                for (sum, part) in split.stations[node].parts.iter_mut().zip(parts) {
                    let wind = e.carry_back(corner, part);
                    sum.u += e.area * wind.u;
                    sum.v += e.area * wind.v;
                }
            }
        }
        let area = self.summary.area;
        split.energy /= area;
        split.parts = split.parts.map(|sum| sum / area);
        for (node, (found, area)) in split.stations.iter_mut().zip(around).enumerate() {
            [found.velocity_potential, found.streamfunction] = solution(node);
            for part in &mut found.parts {
                part.u /= area;
                part.v /= area;
            }
        }
        split
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    /// Gradients of functions that are linear in each triangle and 0 on the boundary come back to rounding, whatever they are.
    #[test]
    fn piecewise_linear_potentials_come_back() {
        // 7 × 6 points, pushed off the grid so that no two triangles are alike.
        let at = |i: usize, j: usize| i * 7 + j;
        let wave = |k: usize| f64::sin(12.9898 * (k as f64 + 1.0));
        let points: Vec<[f64; 2]> = (0..42)
            .map(|k| {
                [
                    (k % 7) as f64 + 0.3 * wave(k),
                    (k / 7) as f64 + 0.3 * wave(k + 50),
                ]
            })
            .collect();
        let cells = (0..5).flat_map(|i| (0..6).map(move |j| (i, j)));
        let triangles: Vec<[usize; 3]> = cells
            .flat_map(|(i, j)| {
                let (a, b, c, d) = (at(i, j), at(i, j + 1), at(i + 1, j + 1), at(i + 1, j));
                [[a, b, c], [a, c, d]]
            })
            .collect();
        let decomposer = Decomposer::new(Mesh::in_plane(&triangles, &points).unwrap()).unwrap();
        let interior = &decomposer.summary.interior;
        assert_eq!(interior.iter().filter(|&&inside| inside).count(), 20);
        let potential = |node: usize, seed: usize| {
            if interior[node] {
                wave(node + seed)
            } else {
                0.0
            }
        };
        let (mut means, mut energies) = (Vec::new(), [0.0; 2]);
        for e in &decomposer.elements {
            let [chi_x, chi_y] = e.gradient(e.nodes.map(|node| potential(node, 100)));
            let [psi_x, psi_y] = e.gradient(e.nodes.map(|node| potential(node, 200)));
            means.push([chi_x - psi_y, chi_y + psi_x]);
            energies[0] += 0.5 * e.area * psi_x.hypot(psi_y).powi(2) / decomposer.summary.area;
            energies[1] += 0.5 * e.area * chi_x.hypot(chi_y).powi(2) / decomposer.summary.area;
        }
        let found = &decomposer.of_means(1, &means)[0];
        for (node, found) in found.stations.iter().enumerate() {
            assert!((found.velocity_potential - potential(node, 100)).abs() < 1e-13);
            assert!((found.streamfunction - potential(node, 200)).abs() < 1e-13);
        }
        let [rotational, divergent, harmonic] = found.parts;
        assert!(
            (rotational - energies[0]).abs() < 1e-13 && (divergent - energies[1]).abs() < 1e-13
        );
        assert!(harmonic < 1e-25);
    }
}
