//! Studies in parallel: loading what a study names, planning its points, running them.

pub mod awake;
pub mod characterise;
pub mod compare;
mod intent;
pub mod keep;
pub mod load;
pub mod optimum;
pub mod parked;
pub mod run;
pub mod sensitivity;
pub mod study;
pub mod transition;
pub mod watch;

pub use characterise::{LeakageRow, characterise};
pub use load::{Library, Loaded, LoadedDomain, load_study};
pub use optimum::{ChoiceSpec, OptimumSpec, choice, optimum};
pub use run::{Estimate, PointResult, estimate};
pub use transition::{TransitionSpec, Transitions, transitions};
pub use watch::Progress;
