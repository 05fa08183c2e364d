//! Files in: every reader turns text into records that keep their places, and says what is wrong where.

pub mod condition;
pub mod counts;
pub mod deck;
pub mod def;
pub mod expression;
pub mod instances;
pub mod intent;
pub mod liberty;
pub mod lines;
pub mod number;
pub mod pattern;
pub mod source;
pub mod spice;
pub mod tcl;
pub mod verilog;
mod window;

pub use condition::Condition;
pub use deck::{Deck, Note};
pub use liberty::{LibertyOptions, read_liberty, write_liberty};
pub use source::{Input, Place, ReadError, Source};
pub use spice::{DeckOptions, read_deck};
