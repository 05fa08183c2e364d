//! Files in: every reader turns text into records that keep their places, and says what is wrong where.

pub mod counts;
pub mod source;
pub mod verilog;

pub use source::{Place, ReadError, Source};
