//! What one sleep and one wake-up cost besides the charge of the rail.

use serde::{Deserialize, Serialize};

use super::capacitance::GateCapacitance;
use super::error::{TransitionError, not_negative, positive};
use super::gated::Gated;
use super::sleep::Fall;
use crate::read::deck::Note;

/// What a round trip needs to know; energies that are left out count as zero and are said to.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CycleCosts {
    /// The switch's gate.
    #[serde(default)]
    pub gate: GateCapacitance,
    /// Efficiency of what makes levels beyond the rails (overdrive, boost, well bias); must be given when there are any.
    #[serde(default)]
    pub pump_efficiency: Option<f64>,
    /// Capacitance of the block's n-wells, F; must be given when they are biased.
    #[serde(default)]
    pub nwell_f: Option<f64>,
    /// Capacitance of the block's p-wells, F; must be given when they are biased.
    #[serde(default)]
    pub pwell_f: Option<f64>,
    /// Saving the state, J.
    #[serde(default)]
    pub retention_save_j: Option<f64>,
    /// Restoring it, J.
    #[serde(default)]
    pub retention_restore_j: Option<f64>,
    /// Isolation, control, drivers of the gate tree, J.
    #[serde(default)]
    pub control_j: Option<f64>,
}

/// Energies of a round trip.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct RoundTrip {
    /// Length of the sleep, s.
    pub asleep_s: f64,
    /// Recharging the rail from where it fell to, J. In the supply ledger only: the block ledger has it in what is saved.
    pub rail_j: f64,
    /// Gate of the switch over its full swing with the pump's losses, `C·(Vdd + overdrive + boost)²/efficiency`, J.
    pub gate_j: f64,
    /// Swing of the gate, V.
    pub gate_swing_v: f64,
    /// Capacitance of the gate, F.
    pub gate_f: f64,
    /// Wells moved out and back, J.
    pub wells_j: f64,
    /// State saved and restored, J.
    pub retention_j: f64,
    /// Isolation and control, J.
    pub control_j: f64,
    /// All without the rail, J: what a sleep must save by the block ledger to pay.
    pub fixed_j: f64,
    /// Remarks.
    pub notes: Vec<Note>,
}

/// Costs of a sleep of a length.
///
/// The gate's energy is that of one charge and discharge over the swing, taken through the pump as a whole where there is
/// overdrive or boost (reference sheet A25). A well that moves by its bias costs what its pump takes less what flows back into
/// the rail: `Q·((Vdd + bias)/efficiency − Vdd)` for n-wells, `Q·bias/efficiency` for p-wells, `Q = C·bias` (derived).
///
/// # Errors
/// A missing capacitance or efficiency, or numbers that cannot be.
pub fn round_trip(fall: &Fall<'_>, costs: &CycleCosts, asleep_s: f64) -> Result<RoundTrip, TransitionError> {
    not_negative("time asleep (s)", asleep_s)?;
    let g = fall.gated;
    let fixed = fixed_costs(g, costs)?;
    let rail_j = g.vdd_v * g.rail_f * (fall.from_span_v - fall.span_v(asleep_s));
    Ok(RoundTrip { asleep_s, rail_j, ..fixed })
}

/// Costs that do not depend on how long the sleep is.
pub(super) fn fixed_costs(g: &Gated<'_>, costs: &CycleCosts) -> Result<RoundTrip, TransitionError> {
    let s = g.scheme;
    let Some(spec) = s.header.as_ref().or(s.footer.as_ref()) else {
        return Err(TransitionError::Switches { scheme: s.name.clone(), found: "no switch" });
    };
    let swing = (g.switch.gate_v - g.on_v).abs();
    let pumped = spec.overdrive_v > 0.0 || g.boost_v > 0.0;
    let biased = s.nwell_bias_v != 0.0 || s.pwell_bias_v != 0.0;
    let efficiency = match costs.pump_efficiency {
        Some(e) if e > 0.0 && e <= 1.0 => e,
        None if !pumped && !biased => 1.0,
        None => {
            return Err(TransitionError::Missing {
                what: "pump efficiency",
                wanted: "levels beyond the rails (overdrive, boost, well bias) are made by something: want its efficiency",
            });
        }
        Some(value) => {
            return Err(TransitionError::Range {
                what: "pump efficiency".into(),
                value,
                wanted: "want more than zero and not above one".into(),
            });
        }
    };
    let gate_f = costs.gate.farads(g.switch, spec.width_m, spec.length_m)?;
    let gate_j = gate_f * swing * swing / if pumped { efficiency } else { 1.0 };
    let mut wells_j = 0.0;
    if s.nwell_bias_v != 0.0 {
        let c = costs
            .nwell_f
            .ok_or(TransitionError::NoCapacitance { what: "the biased n-wells", key: "nwell_f" })?;
        positive("n-well capacitance (F)", c)?;
        let bias = s.nwell_bias_v;
        wells_j += (c * bias).abs() * ((g.vdd_v + bias) / efficiency - g.vdd_v).abs();
    }
    if s.pwell_bias_v != 0.0 {
        let c = costs
            .pwell_f
            .ok_or(TransitionError::NoCapacitance { what: "the biased p-wells", key: "pwell_f" })?;
        positive("p-well capacitance (F)", c)?;
        wells_j += c * s.pwell_bias_v * s.pwell_bias_v / efficiency;
    }
    let mut left_out = Vec::new();
    let mut energy = |what: &'static str, e: Option<f64>| {
        let Some(e) = e else {
            left_out.push(what);
            return Ok(0.0);
        };
        not_negative(&format!("{what} (J)"), e).map(|()| e)
    };
    let retention_j = energy("retention_save_j", costs.retention_save_j)?
        + energy("retention_restore_j", costs.retention_restore_j)?;
    let control_j = energy("control_j", costs.control_j)?;
    let mut notes = g.notes();
    if !left_out.is_empty() {
        notes.push(Note::new(
            "costs-left-out",
            format!("not given and counted as zero: {}", left_out.join(", ")),
        ));
    }
    Ok(RoundTrip {
        asleep_s: 0.0,
        rail_j: 0.0,
        gate_j,
        gate_swing_v: swing,
        gate_f,
        wells_j,
        retention_j,
        control_j,
        fixed_j: gate_j + wells_j + retention_j + control_j,
        notes,
    })
}
