//! What can go wrong while a domain is awake or keeps its state.

use crate::block::current::{BindError, BlockError};
use crate::cell::CellError;
use crate::read::source::ReadError;

/// A question about the awake domain, or about kept state, without answer.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum AwakeError {
    /// A number that cannot be.
    #[error("{what} is {value}; {wanted}")]
    Range {
        /// The quantity.
        what: String,
        /// What was found.
        value: String,
        /// What would be right.
        wanted: String,
    },
    /// A card, bin or size.
    #[error(transparent)]
    Read(#[from] ReadError),
    /// A cell without operating point.
    #[error(transparent)]
    Cell(Box<CellError>),
    /// The block.
    #[error(transparent)]
    Block(Box<BlockError>),
    /// The load asks more than the switch gives at any droop.
    #[error(
        "no operating point{at}: the load draws {load_a:.3e} A where the switch gives at most {given_a:.3e} A (at {droop_v:.4} V droop), \
         short by {short_a:.3e} A; widen the switch by {factor:.2} times or lower the load"
    )]
    Overloaded {
        /// Where, with a leading blank; empty when there is only one place.
        at: String,
        /// What the load draws at the droop that comes nearest, A.
        load_a: f64,
        /// What the switch gives there, A.
        given_a: f64,
        /// That droop, V.
        droop_v: f64,
        /// What is missing, A.
        short_a: f64,
        /// Times the width needed at that droop.
        factor: f64,
    },
    /// No width meets the budget.
    #[error(
        "no width up to {max_width_m:.3e} m keeps the droop within {budget_v:.4} V at corner `{corner}`: {why}; raise the budget, the boost or \
         the largest width"
    )]
    NoWidth {
        /// The corner that decides.
        corner: String,
        /// The budget, V.
        budget_v: f64,
        /// Largest width allowed, m.
        max_width_m: f64,
        /// By how much it misses.
        why: String,
    },
    /// The cell stores nothing with the inputs asked for.
    #[error("cell `{cell}` stores nothing{given}: no loop of its netlist holds two values there")]
    StoresNothing {
        /// The cell.
        cell: String,
        /// The inputs asked for, with a leading blank; empty for all.
        given: String,
    },
    /// The cell does not hold even at full supply.
    #[error(
        "cell `{cell}` never holds at corner `{corner}`: at the full {supply_v:.3} V {reason} (inputs {inputs})"
    )]
    NeverHolds {
        /// The cell.
        cell: String,
        /// The corner.
        corner: String,
        /// Full supply, V.
        supply_v: f64,
        /// What is missing.
        reason: String,
        /// The inputs that decide.
        inputs: String,
    },
    /// A curve that no square can be laid into.
    #[error("transfer curve of {what}: {reason}")]
    Curve {
        /// Whose.
        what: String,
        /// Why.
        reason: String,
    },
    /// The answer would rest on numbers that the user has not asked for.
    #[error(
        "the switch {when} leaves the points of its table: {reason}; add points, or set `extrapolate = true` and read the result as a guess"
    )]
    Outside {
        /// Awake or asleep.
        when: &'static str,
        /// Which voltage, and the range.
        reason: String,
    },
    /// A part of the rail that no switch reaches.
    #[error("rail network: {reason}")]
    Rail {
        /// Why.
        reason: String,
    },
    /// The user stopped the work.
    #[error("stopped")]
    Stopped,
}

impl From<CellError> for AwakeError {
    fn from(e: CellError) -> Self {
        Self::Cell(Box::new(e))
    }
}

impl From<BlockError> for AwakeError {
    fn from(e: BlockError) -> Self {
        Self::Block(Box::new(e))
    }
}

impl From<BindError> for AwakeError {
    fn from(e: BindError) -> Self {
        match e {
            BindError::Read(e) => Self::Read(e),
            BindError::Block(e) => e.into(),
        }
    }
}

/// An [`AwakeError::Range`].
pub(super) fn range<T>(what: &str, value: String, wanted: &str) -> Result<T, AwakeError> {
    Err(AwakeError::Range { what: what.to_owned(), value, wanted: wanted.to_owned() })
}

/// Refuses what is not a finite number above zero.
pub(super) fn positive(what: &str, value: f64, unit: &str) -> Result<(), AwakeError> {
    if value > 0.0 && value.is_finite() {
        Ok(())
    } else {
        range(what, format!("{value} {unit}"), "want a finite number above zero")
    }
}
