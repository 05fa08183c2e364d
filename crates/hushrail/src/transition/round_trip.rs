//! What one sleep and one wake-up cost besides the charge of the rail.

use serde::{Deserialize, Serialize};

use super::capacitance::GateCapacitance;
use super::error::{TransitionError, not_negative, positive};
use super::gated::Gated;
use super::sleep::Fall;
use crate::device::Polarity;
use crate::read::deck::Note;

/// What a round trip needs to know; energies that are left out count as zero and are said to.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CycleCosts {
    /// The switch's gate.
    #[serde(default)]
    pub gate: GateCapacitance,
    /// Capacitance of the switch's body to everything else, F; must be given when its bias awake is another than asleep.
    #[serde(default)]
    pub switch_well_f: Option<f64>,
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
/// overdrive or boost (reference sheet A25); the efficiency is the scheme's. Moving a well between its bias awake and asleep
/// costs the charge once, see `Well` in the source.
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
    let efficiency = s.pump_efficiency.unwrap_or(1.0);
    let mut notes = g.notes();
    let wells = [
        (true, s.awake_nwell_bias_v, s.nwell_bias_v, costs.nwell_f, "the biased n-wells", "nwell_f"),
        (false, s.awake_pwell_bias_v, s.pwell_bias_v, costs.pwell_f, "the biased p-wells", "pwell_f"),
        (
            g.switch.device.polarity() == Polarity::P,
            spec.awake_well_bias_v(),
            spec.well_bias_v,
            costs.switch_well_f,
            "the well of the switch, which moves",
            "switch_well_f",
        ),
    ];
    let moved = wells.iter().any(|w| w.1 != w.2);
    if (pumped || moved) && s.pump_efficiency.is_none() {
        notes.push(Note::new(
            "pump-without-loss",
            "levels beyond the rails count as made without loss: the scheme has no `pump_efficiency`",
        ));
    }
    let gate_f = costs.gate.farads(g.switch, spec.width_m, spec.length_m)?;
    let gate_j = gate_f * swing * swing / if pumped { efficiency } else { 1.0 };
    let mut wells_j = 0.0;
    for (n_well, awake_v, asleep_v, farads, what, key) in wells {
        if awake_v == asleep_v {
            continue;
        }
        let farads = farads.ok_or(TransitionError::NoCapacitance { what, key })?;
        positive(&format!("{key} (F)"), farads)?;
        wells_j += farads * Well { above: n_well, vdd_v: g.vdd_v, efficiency }.moved_j_f(awake_v, asleep_v);
    }
    if spec.body_to_gate {
        match costs.switch_well_f {
            Some(f) => {
                positive("switch_well_f (F)", f)?;
                wells_j += f * swing * swing / if pumped { efficiency } else { 1.0 };
            }
            None => notes.push(Note::new(
                "body-charge-left-out",
                "the body of the switch moves with its gate and its charge is not counted: give `switch_well_f`",
            )),
        }
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

/// What it takes to move a well out and back.
///
/// Charge comes from where the well goes and leaves to where it came from. A level that a rail is gives its charge back to the
/// rail; a level within the rails (forward bias) is taken as made from the rail by a linear source, which gives nothing back;
/// levels beyond are made by the pump. For n-wells, above their rail by the bias, one volt moved out and back therefore costs
/// `(Vdd + high)/efficiency` (or Vdd, when `high` is not above the rail) less Vdd when `low` is the rail; for p-wells, below
/// ground by the bias, `high/efficiency` for the way down and Vdd for a way up to a level above ground (derived).
struct Well {
    above: bool,
    vdd_v: f64,
    efficiency: f64,
}

impl Well {
    /// Energy for each farad, J/F, between two biases, reverse positive.
    fn moved_j_f(&self, one_v: f64, other_v: f64) -> f64 {
        let (high, low) = (one_v.max(other_v), one_v.min(other_v));
        let per_charge = if self.above {
            let taken = if high > 0.0 { (self.vdd_v + high) / self.efficiency } else { self.vdd_v };
            taken - if low == 0.0 { self.vdd_v } else { 0.0 }
        } else {
            high.max(0.0) / self.efficiency + if low < 0.0 { self.vdd_v } else { 0.0 }
        };
        (high - low) * per_charge
    }
}
