//! Liberty libraries: leakage by state, supply pins, what cells are for in power gating, functions and stored values.
//!
//! Timing, power and noise tables are passed over without being looked into. A file may be a library or a fragment (cell groups
//! only); what a fragment leaves open, units above all, comes from [`LibertyOptions`] or stays unknown. Nothing is assumed: what
//! is missing, zero or contradictory stands in [`Library::notes`].

mod check;
mod lex;
pub mod library;
pub mod parse;
mod pins;
mod reader;
pub mod state;
pub mod unit;
pub mod write;

pub use library::{CellRole, LeakageGroup, Library, LibraryCell, Nominal, PgPin, Pin, Storage, Units};
pub use reader::{LibertyOptions, read_liberty};
pub use state::{Basis, CellState, StateError};
pub use write::write_liberty;
