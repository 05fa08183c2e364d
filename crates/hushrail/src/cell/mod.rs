//! Cells: topology, states, and the current of every terminal in every state.

pub mod bound;
#[expect(clippy::module_inception, reason = "the file holds the cell itself")]
pub mod cell;
pub mod edit;
pub mod logic;
pub mod posed;
pub mod sensitivity;
pub use bound::{BoundCell, CellError, DeviceShelf, Levels, State, StateCurrents, supply_power};
pub use cell::{Cell, CellReader, RailNames, Role};
