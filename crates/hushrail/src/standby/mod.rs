//! Standby: what is done to a domain asleep, where its rails come to rest, what it still draws.

mod account;
pub mod rest;
pub mod scheme;
pub mod switch;

pub use rest::{Asleep, PathShare, RestError, SupplyCurrent, settle};
pub use scheme::{Scheme, SwitchSpec, WellTie};
