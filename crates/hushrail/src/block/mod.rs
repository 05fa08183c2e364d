//! Blocks: a bag of cells whose current is known as a function of its rails and wells.

pub mod build;
pub mod change;
pub mod current;
pub mod curve;
pub mod parts;
pub mod table;

pub use build::{Block, BlockCell, Policy, StateWeights, Uncovered, build_block};
pub use change::{CellChange, ChangeError, Parked};
pub use current::{BlockCurrents, BlockError, BlockSensitivity, BoundBlock};
pub use curve::{BlockCurve, Book, Collapsing, CurveError, Draw};
pub use parts::Parts;
pub use table::law::Bound;
pub use table::{TableCell, TableSet};
