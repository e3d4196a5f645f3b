//! Rotational, divergent and harmonic part of the wind over a network (Helmholtz).
//!
//! V = k × ∇ψ + ∇χ + V_h with streamfunction ψ and velocity potential χ that are linear in each triangle of the mesh and 0
//! on its boundary (Lynch 1989, MWR 117, 1492, the natural partition; `methods.md` 7). The three parts are orthogonal, so the
//! kinetic energy is shared out among them; χ = 0 on the boundary gives the divergent part the least energy it can have.
//!
//! - **Signs**: ψ grows to the right of the rotational wind seen from above (a counter-clockwise vortex is a minimum of ψ), χ
//!   grows downwind of the divergent wind (a source is a minimum of χ).
//! - **What the harmonic part holds**: whatever has neither vorticity nor divergence inside: a uniform wind all of it, pure
//!   deformation, and what is imposed from outside. Weather larger than the network is harmonic. The shares of the others
//!   say what the network itself encloses.
//! - **Resolution**: ψ and χ have one value for each station inside. Without one, all is harmonic. Triangles see means of
//!   their corners' winds: the energy is that of these means, less than that of the stations' winds.
//! - **Holes** (stations that do not report, triangles outside the limits): ψ = χ = 0 on their edges too, as on the outer
//!   boundary. Circulation around a hole and flux out of it are in the harmonic part, which then has no
//!   single-valued potential. `polygons.missing = "remesh"` closes holes of missing stations.
//! - **Errors**: none are given. Those of the winds between the stations are correlated from triangle to triangle, and without
//!   them an error would be too small. The vorticity and divergence behind ψ and χ have theirs in `polygons.csv`.

mod factor;
mod mesh;
mod order;
mod split;

use std::sync::Arc;

use crate::time::Time;

pub use factor::Factor;
pub use mesh::{Mesh, MeshSummary};
pub use order::reverse_cuthill_mckee;
pub use split::{AtStation, Decomposer, Part, Split};

/// The parts of the wind at a run of times.
#[derive(Debug, Clone, Default)]
pub struct DecompositionBlock {
    /// The analysis times.
    pub times: Vec<Time>,
    /// At each time the number of stations that report.
    pub reporting: Vec<usize>,
    /// At each time the mesh and the parts; `None` where no three neighbouring stations report.
    pub at: Vec<Option<(Arc<MeshSummary>, Split)>>,
}

/// Kinetic energy of a run by parts.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct EnergyBooks {
    /// Times with a mesh.
    pub times: u64,
    /// Sum over these times, m²/s².
    pub energy: f64,
    /// Sums of the parts.
    pub parts: [f64; 3],
}

impl EnergyBooks {
    /// Those of a block.
    #[must_use]
    pub fn of(block: &DecompositionBlock) -> Self {
        let mut sums = Self::default();
        for (_, split) in block.at.iter().flatten() {
            sums.times += 1;
            sums.energy += split.energy;
            for (sum, part) in sums.parts.iter_mut().zip(split.parts) {
                *sum += part;
            }
        }
        sums
    }

    /// Takes in those of a later block.
    pub fn merge(&mut self, later: &Self) {
        self.times += later.times;
        self.energy += later.energy;
        for (sum, part) in self.parts.iter_mut().zip(later.parts) {
            *sum += part;
        }
    }

    /// Share of a part; `None` without energy.
    #[must_use]
    pub fn share(&self, part: Part) -> Option<f64> {
        (self.energy > 0.0).then(|| self.parts[part as usize] / self.energy)
    }
}
