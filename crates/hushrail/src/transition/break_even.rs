//! The sleep time from which a round trip pays, by solving; the formula of a fully collapsed rail beside it.

use serde::{Deserialize, Serialize};

use super::error::TransitionError;
use super::round_trip::{CycleCosts, RoundTrip, fixed_costs, round_trip};
use super::sleep::Fall;
use crate::read::deck::Note;

/// Where a sleep begins to pay.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BreakEven {
    /// Sleep time at which saved energy and costs are equal, s; `None` when it never is.
    pub time_s: Option<f64>,
    /// Span left to the block then, V.
    pub span_v: Option<f64>,
    /// `(C·Vdd² + costs)/(P_ungated − P_rest)`: the rail fully recharged and the saving at rest from the start, s.
    pub full_collapse_s: Option<f64>,
    /// That formula over the solved time.
    pub ratio: Option<f64>,
    /// Costs of the round trip at that time, or of one long enough to settle.
    pub costs: RoundTrip,
    /// Remarks.
    pub notes: Vec<Note>,
}

/// Solves `saved(t) = costs` on the block ledger.
///
/// # Errors
/// What [`round_trip`] refuses.
pub fn break_even(fall: &Fall<'_>, costs: &CycleCosts) -> Result<BreakEven, TransitionError> {
    let g = fall.gated;
    let fixed = fixed_costs(g, costs)?;
    let per_s = fall.ungated_power_w - fall.rest_power_w();
    let settled = fall.settled_s();
    let gain = |t: f64| fall.saved_j(t) - fixed.fixed_j;
    let time_s = if gain(settled) >= 0.0 {
        // the first crossing: what is saved grows as long as the block draws less than awake
        let (mut lo, mut hi) = (0.0, settled);
        for _ in 0..200 {
            let middle = 0.5 * (lo + hi);
            if middle <= lo || middle >= hi {
                break;
            }
            if gain(middle) < 0.0 { lo = middle } else { hi = middle }
        }
        Some(hi)
    } else if per_s > 0.0 {
        Some(settled - gain(settled) / per_s)
    } else {
        None
    };
    let full_collapse_s = (per_s > 0.0).then(|| (g.vdd_v * g.vdd_v * g.rail_f + fixed.fixed_j) / per_s);
    let mut notes = fixed.notes.clone();
    if time_s.is_none() {
        notes.push(Note::new(
            "never-pays",
            format!(
                "asleep the domain draws {:.3e} W, awake {:.3e} W: no sleep is long enough to pay",
                fall.rest_power_w(),
                fall.ungated_power_w
            ),
        ));
    }
    Ok(BreakEven {
        span_v: time_s.map(|t| fall.span_v(t)),
        ratio: time_s.zip(full_collapse_s).and_then(|(t, f)| (t > 0.0).then(|| f / t)),
        costs: round_trip(fall, costs, time_s.unwrap_or(settled))?,
        time_s,
        full_collapse_s,
        notes,
    })
}
