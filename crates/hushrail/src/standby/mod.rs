//! Standby: what is done to a domain asleep, where its rails come to rest, what it still draws.

mod account;
pub mod clamp;
pub mod curve;
pub mod rest;
pub mod scheme;
pub mod stress;
pub mod switch;

pub use clamp::{Clamp, ClampSpec};
pub use rest::{Asleep, PathShare, RestError, SupplyCurrent, rest_rails, settle, settle_with};
pub use scheme::{Scheme, SwitchSpec, WellTie};
pub use stress::{StressLimits, SwitchStress};
pub use switch::Switch;
