//! What transitions refuse, and why.

use crate::block::CurveError;
use crate::standby::RestError;
use crate::standby::stress::StressError;

/// A transition that cannot be computed.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum TransitionError {
    /// A number out of range.
    #[error("transition: {what} is {value}; {wanted}")]
    Range {
        /// The quantity, with its unit.
        what: String,
        /// What was found.
        value: f64,
        /// What would be right.
        wanted: String,
    },
    /// A capacitance that is not known; it is not guessed.
    #[error("no capacitance given for {what}: transitions are not computed; give `{key}`")]
    NoCapacitance {
        /// Of what.
        what: &'static str,
        /// What to give.
        key: &'static str,
    },
    /// Something else that is not known and not guessed.
    #[error("{what} is not given; {wanted}")]
    Missing {
        /// The quantity.
        what: &'static str,
        /// What to give.
        wanted: &'static str,
    },
    /// Both or none of header and footer.
    #[error(
        "scheme `{scheme}` has {found}: a transition is computed for one virtual rail; want a header or a footer"
    )]
    Switches {
        /// The scheme.
        scheme: String,
        /// What it has.
        found: &'static str,
    },
    /// A rail that stays up when the switch is off.
    #[error(
        "the rail does not collapse: it rests at {rest_v:.6} V of {vdd_v:.4} V, where the switch still gives what the block draws; \
         nothing is saved and no transition exists"
    )]
    NoCollapse {
        /// Span at rest, V.
        rest_v: f64,
        /// Full supply, V.
        vdd_v: f64,
    },
    /// A rail that never becomes ready.
    #[error(
        "the rail is not ready: {at_v:.6} V after {time_s:.3e} s, wanted {wanted_v:.6} V; the switch on gives {gives_a:.3e} A where \
         the block draws {draws_a:.3e} A"
    )]
    NotReady {
        /// Span reached, V.
        at_v: f64,
        /// When, s.
        time_s: f64,
        /// Span wanted, V.
        wanted_v: f64,
        /// Of the fingers that are on, A.
        gives_a: f64,
        /// Of the block, A.
        draws_a: f64,
    },
    /// A switch that is narrower than one finger.
    #[error("segments: {width_m:.3e} m is narrower than one finger ({finger_m:.3e} m)")]
    Narrow {
        /// Width asked for, m.
        width_m: f64,
        /// One finger, m.
        finger_m: f64,
    },
    /// Segments that do not make the switch.
    #[error("segments add up to {sum} fingers, the switch has {switch}")]
    Segments {
        /// Of the segments.
        sum: f64,
        /// Of the switch.
        switch: f64,
    },
    /// A peak limit that no ladder meets.
    #[error(
        "no ladder keeps {limit_a:.3e} A: {why} draws {least_a:.3e} A, {:.2} times the limit; a narrower finger or a slower gate is needed",
        least_a / limit_a
    )]
    NoLadder {
        /// The limit, A.
        limit_a: f64,
        /// Smallest peak there is, A.
        least_a: f64,
        /// What draws it.
        why: String,
    },
    /// Segments too few for a block that draws much.
    #[error(
        "no ladder of {segments} segments keeps {limit_a:.3e} A: with {:.1} % of the switch on the rail stops at {stops_v:.4} V, where the \
         block takes what comes, and the next step there breaks the limit; want more segments or a higher limit",
        100.0 * share
    )]
    ShortLadder {
        /// Segments allowed.
        segments: usize,
        /// Where the rail stops, V.
        stops_v: f64,
        /// Share of the switch that is on.
        share: f64,
        /// The limit, A.
        limit_a: f64,
    },
    /// The equations of motion.
    #[error("integration stopped at {time_s:.3e} s: {reason}")]
    Integration {
        /// When, s.
        time_s: f64,
        /// Why.
        reason: &'static str,
    },
    /// A histogram that cannot be normalised.
    #[error("histogram of idle times: {0}")]
    Histogram(String),
    /// The rest point.
    #[error(transparent)]
    Rest(Box<RestError>),
    /// The curve of the block.
    #[error(transparent)]
    Curve(Box<CurveError>),
    /// Stress along the way.
    #[error(transparent)]
    Stress(#[from] StressError),
}

impl From<RestError> for TransitionError {
    fn from(e: RestError) -> Self {
        Self::Rest(Box::new(e))
    }
}

impl From<CurveError> for TransitionError {
    fn from(e: CurveError) -> Self {
        Self::Curve(Box::new(e))
    }
}

/// Refuses what is not a number above zero.
pub(super) fn positive(what: &str, value: f64) -> Result<(), TransitionError> {
    if value > 0.0 && value.is_finite() {
        return Ok(());
    }
    Err(TransitionError::Range { what: what.into(), value, wanted: "want a number above zero".into() })
}

/// Refuses what is not zero or more.
pub(super) fn not_negative(what: &str, value: f64) -> Result<(), TransitionError> {
    if value >= 0.0 && value.is_finite() {
        return Ok(());
    }
    Err(TransitionError::Range { what: what.into(), value, wanted: "want zero or more".into() })
}
