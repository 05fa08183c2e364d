//! Optimum: the best setting of a knob at a corner, one setting for all corners, and the choice among whole schemes.
//!
//! - [`knob`]: what may be turned, and what is put into a scheme.
//! - [`search`]: valleys of one variable, and the point in them where the slope is nothing.
//! - [`site`]: a domain at a corner, asked again and again under schemes that differ in a knob.
//! - [`corner`]: the optimum of one knob at one corner, and the mechanism that takes over beyond it.
//! - [`mod@compromise`]: one setting for all corners, and what each loses by it.
//! - [`limits`]: what a choice must meet, and how far a candidate is from it.
//! - [`front`]: candidates that none beats, and the nearest where none fits.
//! - [`mod@choose`]: candidates at all corners, limits, the Pareto front.
//!
//! The objective is the power of all supplies asleep: what makes a voltage (quiescent current and efficiency of the pump, level
//! shifter, bias generator) is in it.

pub mod choose;
pub mod compromise;
pub mod corner;
mod error;
pub mod front;
pub mod knob;
pub mod limits;
pub mod search;
pub mod site;

pub use choose::{ChooseSpec, Chosen, choose};
pub use compromise::{Compromise, Goal, compromise};
pub use corner::{CornerOptimum, Standing, corner_optimum};
pub use error::OptimumError;
pub use knob::{Knob, KnobRange};
pub use site::Site;
