//! Falling asleep: the rail's collapse, and what is saved on the way by two ledgers.
//!
//! Supply ledger: what the supplies deliver less, minus the charge that the rail must get back. Block ledger: what the block
//! takes less. They are the same energy, since `C·dx = −∫(I_block − I_switch)dt` (reference sheet A25, derived there); both
//! are computed, and how far they differ is told.

use serde::{Deserialize, Serialize};

use super::error::{TransitionError, not_negative, positive};
use super::gated::Gated;
use super::ode::{Motion, Tolerance, Trace, integrate};
use super::quadrature::gauss;
use crate::read::deck::Note;

/// How a domain is put to sleep.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SleepSpec {
    /// Time the gate takes from its on to its off level, s.
    #[serde(default)]
    pub gate_slew_s: f64,
    /// Span at the start, V; where the switched-on rail settles when left out.
    #[serde(default)]
    pub from_span_v: Option<f64>,
}

/// A collapse, for reports.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Collapse {
    /// Times, s; rows below are as long.
    pub times_s: Vec<f64>,
    /// Span left to the block, V.
    pub span_v: Vec<f64>,
    /// Current of the switch, A.
    pub switch_a: Vec<f64>,
    /// Current of the block, A.
    pub block_a: Vec<f64>,
    /// Energy saved when the sleep ends then, without the costs of a round trip, J: block ledger.
    pub saved_j: Vec<f64>,
    /// The same by the supply ledger, J.
    pub saved_supply_j: Vec<f64>,
    /// Span at the start, V.
    pub from_span_v: f64,
    /// Span at rest, V.
    pub rest_span_v: f64,
    /// Time constant: when the rail has fallen by 1 − 1/e of its whole way to rest, s.
    pub time_constant_s: f64,
    /// Time constant if the block were a resistor of its current awake, C·Vdd/I, s.
    pub ohmic_time_constant_s: f64,
    /// When half the way is done, s.
    pub half_way_s: f64,
    /// When what is left of the way is a millionth of the supply, s.
    pub settled_s: f64,
    /// Power without switching anything, W.
    pub ungated_power_w: f64,
    /// Power at rest, W.
    pub rest_power_w: f64,
    /// Largest difference of the ledgers over the largest energy moved.
    pub ledger_mismatch: f64,
    /// Remarks.
    pub notes: Vec<Note>,
}

/// A collapse that can be asked at any time.
#[derive(Debug)]
pub struct Fall<'a> {
    /// The domain.
    pub gated: &'a Gated<'a>,
    /// Power without switching anything, W.
    pub ungated_power_w: f64,
    /// Span at the start, V.
    pub from_span_v: f64,
    /// Span at rest, V.
    pub rest_span_v: f64,
    slew_s: f64,
    trace: Trace<1>,
    /// Energies of both ledgers at the start of each step and at the end: block, supply without recharge.
    sums: Vec<[f64; 2]>,
}

struct Falling<'a> {
    g: &'a Gated<'a>,
    slew: f64,
    /// Whether the gate still moves in this piece.
    moving: bool,
}

impl Falling<'_> {
    fn gate(&self, t: f64) -> f64 {
        let (off, on) = (self.g.switch.gate_v, self.g.on_v);
        if self.moving { on + (off - on) * (t / self.slew).min(1.0) } else { off }
    }
}

impl Motion<1> for Falling<'_> {
    fn rate(&self, t: f64, y: &[f64; 1]) -> [f64; 1] {
        let i = self.g.switch.fingers * self.g.finger(self.gate(t), y[0], 0.0).rail_a;
        let clamp = self.g.clamp_gives(y[0], 0.0).rail_a;
        [(i + clamp - self.g.block(y[0]).value) / self.g.rail_f]
    }
    fn jacobian(&self, t: f64, y: &[f64; 1]) -> [[f64; 1]; 1] {
        let per = self.g.switch.fingers * self.g.finger(self.gate(t), y[0], 0.0).per_span;
        let clamp = self.g.clamp_gives(y[0], 0.0).rail_per[0];
        [[(per + clamp - self.g.block(y[0]).per_v) / self.g.rail_f]]
    }
}

/// What is left of the way when the rail counts as settled, over the supply.
const SETTLED: f64 = 1e-6;

/// Puts a domain to sleep; `ungated_power_w` is its power with nothing switched.
///
/// # Errors
/// Numbers that cannot be, or a rail that does not collapse.
pub fn fall_asleep<'a>(
    g: &'a Gated<'a>,
    spec: &SleepSpec,
    ungated_power_w: f64,
) -> Result<Fall<'a>, TransitionError> {
    not_negative("gate slew (s)", spec.gate_slew_s)?;
    positive("ungated power (W)", ungated_power_w)?;
    let from = match spec.from_span_v {
        Some(v) if v > 0.0 && v <= g.vdd_v => v,
        Some(value) => {
            return Err(TransitionError::Range {
                what: "span at the start (V)".into(),
                value,
                wanted: format!("want more than zero and not above the supply ({} V)", g.vdd_v),
            });
        }
        None => g.awake_span_v()?,
    };
    let rest = g.rest_span_v()?;
    // a held rail is met on the way down, one that settles by itself only in the limit
    let near = if g.held_span_v().is_some() { rest } else { rest + SETTLED * g.vdd_v };
    if !(near < from - SETTLED * g.vdd_v) {
        return Err(TransitionError::NoCollapse { rest_v: rest, vdd_v: g.vdd_v });
    }
    let block = g.block(from).value;
    positive("current of the block, awake (A)", block)?;
    let pace = g.rail_f * g.vdd_v / block;
    let tolerance = Tolerance { relative: 1e-9, absolute: [1e-10 * g.vdd_v] };
    let event = move |_: f64, y: &[f64; 1]| near - y[0];
    let mut trace = Trace::default();
    let (mut t, mut y) = (0.0, [from]);
    if spec.gate_slew_s > 0.0 {
        let motion = Falling { g, slew: spec.gate_slew_s, moving: true };
        let first = 1e-4 * pace.min(spec.gate_slew_s);
        let e = integrate(&motion, (t, y), spec.gate_slew_s, first, &tolerance, Some(&event), &mut trace)?;
        (t, y) = (e.t, e.y);
    }
    if y[0] > near {
        let motion = Falling { g, slew: 0.0, moving: false };
        let e = integrate(&motion, (t, y), 1e12 * pace, 1e-4 * pace, &tolerance, Some(&event), &mut trace)?;
        if !e.event {
            return Err(TransitionError::NoCollapse { rest_v: e.y[0], vdd_v: g.vdd_v });
        }
    }
    let mut fall = Fall {
        gated: g,
        ungated_power_w,
        from_span_v: from,
        rest_span_v: rest,
        slew_s: spec.gate_slew_s,
        trace,
        sums: Vec::new(),
    };
    let mut sum = [0.0; 2];
    fall.sums.push(sum);
    for s in &fall.trace.steps {
        let part = gauss(s.t, s.end, |t| fall.savings_w(t, s.at(t)[0]));
        sum = [sum[0] + part[0], sum[1] + part[1]];
        fall.sums.push(sum);
    }
    Ok(fall)
}

impl Fall<'_> {
    fn switch_a(&self, t: f64, span: f64) -> f64 {
        let motion = Falling { g: self.gated, slew: self.slew_s, moving: t < self.slew_s };
        self.gated.switch.fingers * self.gated.finger(motion.gate(t), span, 0.0).rail_a
            + self.gated.clamp_gives(span, 0.0).rail_a
    }

    /// Power saved at a moment: block ledger, supply ledger without the recharge.
    fn savings_w(&self, t: f64, span: f64) -> [f64; 2] {
        let g = self.gated;
        let block = self.ungated_power_w - g.held_power_w(span);
        [block, block + g.vdd_v * (g.block(span).value - self.switch_a(t, span))]
    }

    /// When the rail counts as settled, s.
    pub fn settled_s(&self) -> f64 {
        self.trace.end().unwrap_or(0.0)
    }

    /// Span left after a time asleep, V.
    pub fn span_v(&self, t: f64) -> f64 {
        if t >= self.settled_s() {
            return self.rest_span_v;
        }
        self.trace.at(t).map_or(self.rest_span_v, |y| y[0])
    }

    /// Energy saved by a sleep of this length, without the costs of a round trip, J: block ledger, supply ledger.
    pub fn ledgers_j(&self, t: f64) -> [f64; 2] {
        let g = self.gated;
        let steps = &self.trace.steps;
        let end = self.settled_s();
        let (sum, span) = if t >= end {
            let sum = self.sums[self.sums.len() - 1];
            let at_rest = self.ungated_power_w - self.rest_power_w();
            let later = (t - end) * at_rest;
            // the last millionth of the way counts as done at once
            let left = steps.last().map_or(self.rest_span_v, |s| s.at(s.end)[0]);
            ([sum[0] + later, sum[1] + later], left)
        } else {
            let k = steps.partition_point(|s| s.t <= t).saturating_sub(1);
            let s = &steps[k];
            let part = gauss(s.t, t.max(s.t), |t| self.savings_w(t, s.at(t)[0]));
            ([self.sums[k][0] + part[0], self.sums[k][1] + part[1]], s.at(t.max(s.t))[0])
        };
        [sum[0], sum[1] - g.vdd_v * g.rail_f * (self.from_span_v - span)]
    }

    /// Energy saved by a sleep of this length, without the costs of a round trip, J.
    pub fn saved_j(&self, t: f64) -> f64 {
        self.ledgers_j(t)[0]
    }

    /// Power at rest, W: what the supplies deliver there, a second supply that holds the rail at its own level.
    pub fn rest_power_w(&self) -> f64 {
        let (g, rest) = (self.gated, self.rest_span_v);
        let missing = g.block(rest).value - g.off_a(rest);
        let below = if g.held_span_v().is_some() { g.vdd_v - rest } else { g.vdd_v };
        g.held_power_w(rest) - below * missing
    }

    /// When the rail has done a share of its way to rest, s.
    pub fn when(&self, share: f64) -> f64 {
        let goal = self.from_span_v + share * (self.rest_span_v - self.from_span_v);
        let (mut lo, mut hi) = (0.0, self.settled_s());
        for _ in 0..100 {
            let middle = 0.5 * (lo + hi);
            if middle <= lo || middle >= hi {
                break;
            }
            if self.span_v(middle) > goal {
                lo = middle;
            } else {
                hi = middle;
            }
        }
        hi
    }

    /// Rows for reports and pictures.
    pub fn collapse(&self) -> Collapse {
        let g = self.gated;
        let mut times: Vec<f64> = self
            .trace
            .steps
            .iter()
            .flat_map(|s| [s.t, 0.5 * (s.t + s.end)])
            .chain([self.settled_s()])
            .collect();
        times.dedup();
        let span_v: Vec<f64> =
            times.iter().map(|t| self.trace.at(*t).map_or(self.rest_span_v, |y| y[0])).collect();
        let ledgers: Vec<[f64; 2]> = times.iter().map(|t| self.ledgers_j(*t)).collect();
        let moved = g.vdd_v * g.rail_f * (self.from_span_v - self.rest_span_v);
        let scale = ledgers.iter().fold(moved.abs(), |m, l| m.max(l[0].abs()));
        let mut notes = g.notes();
        notes.push(Note::new(
            "rail-capacitance",
            "the rail's capacitance is the one given, taken as constant and across the block; cells whose inputs float while the rail \
             moves may draw more than the static currents counted here",
        ));
        Collapse {
            switch_a: times.iter().zip(&span_v).map(|(t, v)| self.switch_a(*t, *v)).collect(),
            block_a: span_v.iter().map(|v| g.block(*v).value).collect(),
            saved_j: ledgers.iter().map(|l| l[0]).collect(),
            saved_supply_j: ledgers.iter().map(|l| l[1]).collect(),
            from_span_v: self.from_span_v,
            rest_span_v: self.rest_span_v,
            time_constant_s: self.when(1.0 - (-1f64).exp()),
            ohmic_time_constant_s: g.rail_f * g.vdd_v / g.block(self.from_span_v).value,
            half_way_s: self.when(0.5),
            settled_s: self.settled_s(),
            ungated_power_w: self.ungated_power_w,
            rest_power_w: self.rest_power_w(),
            ledger_mismatch: ledgers.iter().fold(0.0f64, |m, l| m.max((l[0] - l[1]).abs() / scale)),
            times_s: times,
            span_v,
            notes,
        }
    }
}
