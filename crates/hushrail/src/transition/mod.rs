//! Transitions: waking and falling asleep, what the round trip costs and from which idle time on it pays.

pub mod break_even;
pub mod capacitance;
pub mod duty;
mod error;
pub mod gated;
pub mod ladder;
pub mod ode;
mod quadrature;
pub mod quick;
pub mod round_trip;
pub mod sleep;
pub mod wake;

pub use break_even::{BreakEven, break_even};
pub use capacitance::{GateCapacitance, RailCapacitance};
pub use duty::{Battery, Duty, DutyProfile, Idle, Policy, duty};
pub use error::TransitionError;
pub use gated::Gated;
pub use ladder::{Ladder, LadderSpec, design_ladder};
pub use quick::{WakeShelf, WakeSummary};
pub use round_trip::{CycleCosts, RoundTrip, round_trip};
pub use sleep::{Collapse, Fall, SleepSpec, fall_asleep};
pub use wake::{Package, Segment, Start, Wake, WakeSpec, wake_up};
