//! States: what every instance of a netlist holds while its block is parked.
//!
//! - [`function`]: what a cell computes, from its transistors; [`cover`]: the same as short sums of products.
//! - [`circuit`]: a netlist with functions, in an order in which drivers come first.
//! - [`values`]: zeros, ones and unknowns through a circuit, sixty-four vectors at a time.
//! - [`probability`]: how likely each net is at one.
//! - [`mod@shares`]: both turned into weights of the states of every cell, and how much of them is known.
//! - [`mod@search`]: the vector that leaks least.
//!
//! Values are zero-delay and of a settled circuit. Unknown is unknown: it stays a probability and is said to be assumed.

pub mod circuit;
pub mod cover;
pub mod function;
pub mod probability;
pub mod search;
pub mod shares;
pub mod values;

pub use circuit::{Circuit, CircuitError, Source};
pub use function::CellFunction;
pub use probability::{Held, Parking, ParkingError, carry, probabilities};
pub use search::{Found, SearchSpec, search};
pub use shares::{Certainty, StateShares, shares};
pub use values::Values;
