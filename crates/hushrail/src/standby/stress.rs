//! Stress of a switch: the voltage of every pair of its terminals and the field across its oxide, asleep, awake and between.
//!
//! The field is |V| over the electrical oxide thickness of the card, without what the silicon drops: the conservative bound
//! (a physical thickness, which is smaller, gives more). Lifetime laws take every number from their user.

use serde::{Deserialize, Serialize};

use super::switch::{Side, Switch};
use crate::physics::{KB_OVER_Q, Kelvin};
use crate::read::deck::Note;

/// The caution that goes with every stress shown.
pub fn caution() -> Note {
    Note::new(
        "oxide-caution",
        "oxide and junction stress are computed from the card's electrical thickness; the limits are the foundry's reliability \
         rules, and only a qualified sign-off can say that they are kept",
    )
}

/// When a stress acts.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Phase {
    /// At rest.
    Asleep,
    /// Switched on, the rail full.
    Awake,
    /// On the way from rest to awake.
    Waking,
}

/// A pair of terminals.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Pair {
    /// Across the oxide at the virtual rail.
    GateDrain,
    /// Across the oxide at the real rail.
    GateSource,
    /// Across the drain junction.
    DrainBulk,
    /// Across the oxide over the body.
    GateBulk,
    /// Along the channel.
    DrainSource,
}

impl Pair {
    /// All, in report order.
    pub const ALL: [Self; 5] =
        [Self::GateDrain, Self::GateSource, Self::DrainBulk, Self::GateBulk, Self::DrainSource];

    /// In words.
    pub fn name(self) -> &'static str {
        match self {
            Self::GateDrain => "gate-drain",
            Self::GateSource => "gate-source",
            Self::DrainBulk => "drain-bulk",
            Self::GateBulk => "gate-bulk",
            Self::DrainSource => "drain-source",
        }
    }

    fn over_oxide(self) -> bool {
        matches!(self, Self::GateDrain | Self::GateSource | Self::GateBulk)
    }
}

/// Terminal voltages of a switch at one moment, V.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Moment {
    /// When.
    pub phase: Phase,
    /// Time since the wake-up began, s; zero at rest.
    pub time_s: f64,
    /// Gate.
    pub gate_v: f64,
    /// Drain: the virtual rail.
    pub drain_v: f64,
    /// Source: the real rail.
    pub source_v: f64,
    /// Body.
    pub body_v: f64,
}

impl Moment {
    /// Signed voltage of a pair, first terminal against second, V.
    pub fn of(&self, pair: Pair) -> f64 {
        match pair {
            Pair::GateDrain => self.gate_v - self.drain_v,
            Pair::GateSource => self.gate_v - self.source_v,
            Pair::DrainBulk => self.drain_v - self.body_v,
            Pair::GateBulk => self.gate_v - self.body_v,
            Pair::DrainSource => self.drain_v - self.source_v,
        }
    }
}

/// Limits as the user has them from the foundry; what is left out is not judged.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct StressLimits {
    /// Largest voltage of any pair over the oxide, V.
    #[serde(default)]
    pub oxide_v: Option<f64>,
    /// Largest field across the oxide, V/m.
    #[serde(default)]
    pub field_v_m: Option<f64>,
    /// Largest voltage between drain and bulk, V.
    #[serde(default)]
    pub drain_bulk_v: Option<f64>,
}

/// The worst of one pair in one phase.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PairStress {
    /// The pair.
    pub pair: Pair,
    /// When.
    pub phase: Phase,
    /// Largest magnitude, with its sign, V.
    pub voltage_v: f64,
    /// Time since the wake-up began, s; zero at rest.
    pub time_s: f64,
    /// Field across the oxide, V/m; `None` for a pair that is not across it.
    pub field_v_m: Option<f64>,
    /// Limits that apply, with whether each holds: name, value, allowed (SI), holds.
    pub limits: Vec<StressCheck>,
}

/// A limit and how the stress stands to it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct StressCheck {
    /// `oxide_v`, `field_v_m` or `drain_bulk_v`.
    pub limit: String,
    /// Found, V or V/m.
    pub value: f64,
    /// Allowed, V or V/m.
    pub allowed: f64,
    /// Whether it holds.
    pub holds: bool,
}

/// Stress of a switch.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct SwitchStress {
    /// Every pair in every phase that was looked at: phases, then pairs.
    pub pairs: Vec<PairStress>,
    /// Largest voltage across the oxide, V.
    pub oxide_v: f64,
    /// Largest field across the oxide, V/m.
    pub field_v_m: f64,
    /// Electrical oxide thickness, m.
    pub oxide_m: f64,
    /// Whether every limit given holds.
    pub holds: bool,
    /// Remarks; the caution is always among them.
    pub notes: Vec<Note>,
}

/// A number that cannot be.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("stress: {what} is {value}; {wanted}")]
pub struct StressError {
    /// The quantity.
    pub what: String,
    /// What was found.
    pub value: f64,
    /// What would be right.
    pub wanted: &'static str,
}

fn positive(what: &str, value: f64) -> Result<(), StressError> {
    if value > 0.0 && value.is_finite() {
        Ok(())
    } else {
        Err(StressError { what: what.into(), value, wanted: "want a number above zero" })
    }
}

impl Switch {
    /// Terminal voltages at rest with the virtual rail at `rail_v`.
    pub fn asleep(&self, rail_v: f64) -> Moment {
        Moment {
            phase: Phase::Asleep,
            time_s: 0.0,
            gate_v: self.gate_v,
            drain_v: rail_v,
            source_v: self.rail_v,
            body_v: self.body_v,
        }
    }

    /// Terminal voltages switched on, with the gate at `gate_v` and the virtual rail at `rail_v`.
    pub fn awake(&self, gate_v: f64, rail_v: f64) -> Moment {
        Moment { phase: Phase::Awake, gate_v, body_v: self.body_at(gate_v).0, ..self.asleep(rail_v) }
    }

    /// Terminal voltages with the span `span_v` left to the block and `loss_v` lost at the real rail.
    pub fn waking(&self, vdd_v: f64, time_s: f64, gate_v: f64, span_v: f64, loss_v: f64) -> Moment {
        let (drain_v, source_v) = match self.side {
            Side::Header => (span_v, vdd_v - loss_v),
            Side::Footer => (vdd_v - span_v, loss_v),
        };
        let body_v = self.body_at(gate_v).0;
        Moment { phase: Phase::Waking, time_s, gate_v, drain_v, source_v, body_v }
    }
}

/// The worst of every pair in every phase, against limits.
///
/// # Errors
/// No moment, a voltage that is not a number, a limit or a thickness that is not above zero.
pub fn switch_stress(
    oxide_m: f64,
    moments: &[Moment],
    limits: &StressLimits,
) -> Result<SwitchStress, StressError> {
    positive("oxide thickness (m)", oxide_m)?;
    for (what, v) in [
        ("oxide voltage limit (V)", limits.oxide_v),
        ("oxide field limit (V/m)", limits.field_v_m),
        ("drain-bulk limit (V)", limits.drain_bulk_v),
    ] {
        v.map_or(Ok(()), |v| positive(what, v))?;
    }
    if moments.is_empty() {
        return Err(StressError { what: "number of moments".into(), value: 0.0, wanted: "want one or more" });
    }
    let mut pairs = Vec::new();
    for phase in [Phase::Asleep, Phase::Awake, Phase::Waking] {
        for pair in Pair::ALL {
            let mut worst: Option<(f64, f64)> = None;
            for m in moments.iter().filter(|m| m.phase == phase) {
                let v = m.of(pair);
                if !v.is_finite() {
                    let what = format!("{} voltage (V)", pair.name());
                    return Err(StressError { what, value: v, wanted: "want a finite number" });
                }
                if worst.is_none_or(|w| v.abs() > w.0.abs()) {
                    worst = Some((v, m.time_s));
                }
            }
            let Some((voltage_v, time_s)) = worst else { continue };
            let field_v_m = pair.over_oxide().then(|| voltage_v.abs() / oxide_m);
            let mut checks = Vec::new();
            let mut hold = |limit: &str, value: f64, allowed: Option<f64>| {
                if let Some(allowed) = allowed {
                    checks.push(StressCheck { limit: limit.into(), value, allowed, holds: value <= allowed });
                }
            };
            if let Some(field) = field_v_m {
                hold("oxide_v", voltage_v.abs(), limits.oxide_v);
                hold("field_v_m", field, limits.field_v_m);
            } else if pair == Pair::DrainBulk {
                hold("drain_bulk_v", voltage_v.abs(), limits.drain_bulk_v);
            }
            pairs.push(PairStress { pair, phase, voltage_v, time_s, field_v_m, limits: checks });
        }
    }
    let oxide_v = pairs.iter().filter(|p| p.pair.over_oxide()).fold(0.0f64, |m, p| m.max(p.voltage_v.abs()));
    Ok(SwitchStress {
        oxide_v,
        field_v_m: oxide_v / oxide_m,
        oxide_m,
        holds: pairs.iter().flat_map(|p| &p.limits).all(|l| l.holds),
        pairs,
        notes: vec![caution()],
    })
}

/// A law of oxide lifetime. No number of it has a default: they are the user's, from the foundry.
///
/// Laws: E model after McPherson, 1/E model after Chen and Hu, power law after Wu et al. 2002 (from memory, as is the area
/// scaling of a Weibull distribution in [`Area`]).
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(tag = "law", rename_all = "snake_case", deny_unknown_fields)]
pub enum LifetimeLaw {
    /// `t = t_ref·exp(−γ·(E − E_ref))·exp(Ea/k·(1/T − 1/T_ref))`.
    Field {
        /// Lifetime at the reference, s.
        reference_s: f64,
        /// Field of the reference, V/m.
        reference_field_v_m: f64,
        /// Acceleration γ, m/V.
        gamma_m_v: f64,
        /// Activation energy, eV.
        activation_ev: f64,
        /// Temperature of the reference, degrees Celsius.
        reference_temp_c: f64,
    },
    /// `t = t_ref·exp(G·(1/E − 1/E_ref))`.
    InverseField {
        /// Lifetime at the reference, s.
        reference_s: f64,
        /// Field of the reference, V/m.
        reference_field_v_m: f64,
        /// Acceleration G, V/m.
        g_v_m: f64,
    },
    /// `t = t_ref·(V/V_ref)^−N`.
    Power {
        /// Lifetime at the reference, s.
        reference_s: f64,
        /// Voltage of the reference, V.
        reference_v: f64,
        /// Exponent N.
        exponent: f64,
    },
}

/// Scaling of a lifetime to another area: `t(A) = t(A_ref)·(A_ref/A)^(1/β)`, β the Weibull slope.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Area {
    /// Gate area under stress, m².
    pub area_m2: f64,
    /// Area of the reference, m².
    pub reference_area_m2: f64,
    /// Weibull slope β.
    pub weibull_slope: f64,
}

/// A lifetime; never without its caution.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Lifetime {
    /// Lifetime under uninterrupted stress, s; infinite where there is none under the law.
    pub lifetime_s: f64,
    /// Remarks; the caution is always among them.
    pub notes: Vec<Note>,
}

/// Lifetime of an oxide under a constant voltage.
///
/// # Errors
/// A number that is not above zero, or a lifetime beyond what a number holds.
pub fn lifetime(
    law: &LifetimeLaw,
    voltage_v: f64,
    oxide_m: f64,
    temp: Kelvin,
    area: Option<&Area>,
) -> Result<Lifetime, StressError> {
    let v = voltage_v.abs();
    positive("oxide voltage (V)", v)?;
    positive("oxide thickness (m)", oxide_m)?;
    let field = v / oxide_m;
    let ln_t = match *law {
        LifetimeLaw::Field {
            reference_s,
            reference_field_v_m,
            gamma_m_v,
            activation_ev,
            reference_temp_c,
        } => {
            positive("reference lifetime (s)", reference_s)?;
            positive("reference field (V/m)", reference_field_v_m)?;
            positive("field acceleration (m/V)", gamma_m_v)?;
            let value = reference_temp_c;
            let at = Kelvin::from_celsius(value).map_err(|_| StressError {
                what: "reference temperature (°C)".into(),
                value,
                wanted: "want -100 to 300 °C",
            })?;
            if !(activation_ev >= 0.0 && activation_ev.is_finite()) {
                let what = "activation energy (eV)".into();
                return Err(StressError { what, value: activation_ev, wanted: "want zero or more" });
            }
            reference_s.ln() - gamma_m_v * (field - reference_field_v_m)
                + activation_ev / KB_OVER_Q * (1.0 / temp.get() - 1.0 / at.get())
        }
        LifetimeLaw::InverseField { reference_s, reference_field_v_m, g_v_m } => {
            positive("reference lifetime (s)", reference_s)?;
            positive("reference field (V/m)", reference_field_v_m)?;
            positive("field acceleration (V/m)", g_v_m)?;
            reference_s.ln() + g_v_m * (1.0 / field - 1.0 / reference_field_v_m)
        }
        LifetimeLaw::Power { reference_s, reference_v, exponent } => {
            positive("reference lifetime (s)", reference_s)?;
            positive("reference voltage (V)", reference_v)?;
            positive("exponent", exponent)?;
            reference_s.ln() - exponent * (v / reference_v).ln()
        }
    };
    let ln_area = match area {
        None => 0.0,
        Some(a) => {
            positive("area (m²)", a.area_m2)?;
            positive("reference area (m²)", a.reference_area_m2)?;
            positive("Weibull slope", a.weibull_slope)?;
            (a.reference_area_m2 / a.area_m2).ln() / a.weibull_slope
        }
    };
    let lifetime_s = (ln_t + ln_area).exp();
    if !lifetime_s.is_finite() {
        return Err(StressError {
            what: "logarithm of the lifetime (ln s)".into(),
            value: ln_t + ln_area,
            wanted: "want below 709: the law is far from its reference",
        });
    }
    Ok(Lifetime { lifetime_s, notes: vec![caution()] })
}
