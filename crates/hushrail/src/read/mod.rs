//! Files in: every reader turns text into records that keep their places, and says what is wrong where.

pub mod condition;
pub mod counts;
pub mod deck;
pub mod expression;
pub mod liberty;
pub mod lines;
pub mod number;
pub mod source;
pub mod spice;
pub mod verilog;

pub use condition::Condition;
pub use deck::{Deck, Note};
pub use liberty::{LibertyOptions, read_liberty, write_liberty};
pub use source::{Place, ReadError, Source};
pub use spice::{DeckOptions, read_deck};
