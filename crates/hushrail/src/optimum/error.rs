//! What can go wrong while an optimum is sought.

use crate::awake::AwakeError;
use crate::block::CurveError;
use crate::block::current::BlockError;
use crate::standby::RestError;
use crate::standby::scheme::SchemeError;
use crate::transition::TransitionError;

/// An optimum that cannot be sought.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum OptimumError {
    /// A number or a list that cannot be.
    #[error("optimum: {what} is {value}; {wanted}")]
    Range {
        /// The quantity.
        what: String,
        /// What was found.
        value: String,
        /// What would be right.
        wanted: String,
    },
    /// A knob of a part that the scheme does not have.
    #[error("scheme `{scheme}` has no {part}: knob `{knob}` turns nothing; want a scheme with it")]
    NoPart {
        /// The scheme.
        scheme: String,
        /// The knob.
        knob: &'static str,
        /// What is missing.
        part: &'static str,
    },
    /// A point that does not come to rest.
    #[error("corner `{corner}`: {reason}")]
    Rest {
        /// The corner.
        corner: String,
        /// Why.
        reason: Box<RestError>,
    },
    /// A droop that cannot be computed.
    #[error("corner `{corner}`: {reason}")]
    Awake {
        /// The corner.
        corner: String,
        /// Why.
        reason: Box<AwakeError>,
    },
    /// A wake-up that cannot be computed.
    #[error("corner `{corner}`: {reason}")]
    Transition {
        /// The corner.
        corner: String,
        /// Why.
        reason: Box<TransitionError>,
    },
    /// A block's curve that cannot be made.
    #[error(transparent)]
    Curve(Box<CurveError>),
    /// The scheme itself.
    #[error(transparent)]
    Scheme(#[from] SchemeError),
    /// The user stopped the work.
    #[error("stopped")]
    Stopped,
}

impl OptimumError {
    /// A point that does not come to rest.
    pub(super) fn rest(corner: &str, e: RestError) -> Self {
        Self::Rest { corner: corner.to_owned(), reason: Box::new(e) }
    }

    /// The block at a corner.
    pub(super) fn block(corner: &str, e: BlockError) -> Self {
        Self::rest(corner, e.into())
    }
}

impl From<CurveError> for OptimumError {
    fn from(e: CurveError) -> Self {
        Self::Curve(Box::new(e))
    }
}

/// An [`OptimumError::Range`].
pub(super) fn range<T>(what: &str, value: String, wanted: &str) -> Result<T, OptimumError> {
    Err(OptimumError::Range { what: what.to_owned(), value, wanted: wanted.to_owned() })
}
