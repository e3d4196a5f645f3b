//! How winds differ with distance and time in this network.

mod fit;
mod function;
mod geometry;
mod neighbours;
mod plane;
mod predict;
mod shape;
mod sums;
mod window;

pub use function::{Exponent, StructureFunction, StructureSettings, TemporalFunction};
pub use geometry::{CLASSES, NetworkGeometry};
pub use neighbours::typical_spacing;
pub use plane::{LocalPlane, PlanePoint};
pub use predict::{Prediction, Predictor};
pub use sums::{BlockSums, LAGS, LagSum, PairSum, PlaneSum, StructureSums};
pub use window::StructureWindow;
