//! Awake: what the switch costs while the domain works, and what keeps stored values alive on a lowered rail.
//!
//! - [`resistance`]: on-resistance at the operating point, and its trade against the off current.
//! - [`droop`]: the rail where switch and load agree, for loads that answer to it; what a neighbour couples in.
//! - [`size`]: the smallest width for a droop budget at the worst corner, and its area.
//! - [`curve`], [`square`], [`margin`]: transfer curves, the butterfly and its largest squares, static noise margins.
//! - [`delay`]: delay penalty from solved on-currents.
//! - [`network`]: many switches along a rail with resistance.
//! - [`keep`], [`leaks`]: hold margin, data-retention voltage, the level a clamp must hold and what leaks there.

pub mod curve;
pub mod delay;
pub mod droop;
mod error;
pub mod keep;
pub mod leaks;
pub mod margin;
pub mod network;
pub mod normal;
pub mod resistance;
pub mod size;
pub mod square;

pub use droop::{Droop, Load};
pub use error::AwakeError;
