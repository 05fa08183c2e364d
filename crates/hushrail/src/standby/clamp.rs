//! A clamp beside a sleeping switch: a transistor that conducts when real and virtual rail are far apart, so that state is kept.

use std::sync::Arc;

use serde::{Deserialize, Serialize};

use super::scheme::SwitchSpec;
use super::switch::{Side, Switch};
use crate::cell::DeviceShelf;
use crate::device::dual::Real;
use crate::device::process::Process;
use crate::device::{Bias, Branches, Polarity, Terminal, per_terminal};
use crate::physics::Kelvin;
use crate::read::source::ReadError;

/// A transistor between real and virtual rail, connected as a diode or with its gate at a level of its own. Overdrive, boost and
/// well bias of the spec have no meaning here and must be zero.
///
/// Source: reference works on clamped virtual rails (Agarwal et al., ISQED 2006; Mistry et al. on head and foot clamps).
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ClampSpec {
    /// The transistor.
    pub device: SwitchSpec,
    /// Level of its gate, V; as a diode when left out.
    #[serde(default)]
    pub gate_v: Option<f64>,
}

impl ClampSpec {
    /// Checks every number; the error is what is wrong, what was found, what would be right.
    ///
    /// # Errors
    /// As for [`SwitchSpec::check`]; overdrive, boost or well bias that are not zero; a gate level beyond −1 V to 6 V.
    pub fn check(&self, what: &str) -> Result<(), (String, String, String)> {
        self.device.check(what)?;
        let d = &self.device;
        if d.overdrive_v != 0.0
            || d.boost_v != 0.0
            || d.well_bias_v != 0.0
            || d.awake_well_bias_v() != 0.0
            || d.body_to_gate
        {
            let name = format!("overdrive, boost, well bias or body_to_gate of the {what}");
            return Err((name, "given".into(), "want none of them".into()));
        }
        match self.gate_v {
            Some(g) if !(-1.0..=6.0).contains(&g) => {
                Err((format!("gate of the {what}"), format!("{g} V"), "want -1 V to 6 V".into()))
            }
            _ => Ok(()),
        }
    }
}

/// What a clamp gives, with slopes to the span left and to the loss at the real rail.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ClampCurrent {
    /// Into the virtual rail (out of it, for a footer), A.
    pub rail_a: f64,
    /// From the real rail, A.
    pub real_a: f64,
    /// d rail_a / d (span, loss), S.
    pub rail_per: [f64; 2],
    /// d real_a / d (span, loss), S.
    pub real_per: [f64; 2],
}

/// A clamp at a corner.
#[derive(Debug, Clone)]
pub struct Clamp {
    switch: Switch,
    gate_v: Option<f64>,
}

impl Clamp {
    /// Makes its device.
    ///
    /// # Errors
    /// No card or bin.
    pub fn new(
        spec: &ClampSpec,
        side: Side,
        process: &Process,
        temp: Kelvin,
        vdd_v: f64,
        shelf: &mut DeviceShelf,
        origin: &Arc<str>,
    ) -> Result<Self, ReadError> {
        let switch = Switch::new(&spec.device, side, process, temp, vdd_v, shelf, origin)?;
        Ok(Self { switch, gate_v: spec.gate_v })
    }

    /// The rail it stands on.
    pub fn side(&self) -> Side {
        self.switch.side
    }

    /// Supply of the domain, V.
    pub fn vdd_v(&self) -> f64 {
        self.switch.vdd_v
    }

    /// Whether the gate sits on the virtual rail: a diode of the polarity that switches this rail.
    pub fn gate_moves(&self) -> bool {
        let s = &self.switch;
        self.gate_v.is_none() && (s.side == Side::Header) == (s.device.polarity() == Polarity::P)
    }

    /// Level of its gate with the virtual rail at `v`, V.
    pub fn gate_at(&self, v: f64) -> f64 {
        self.gate_v.unwrap_or(if self.gate_moves() { v } else { self.switch.rail_v })
    }

    /// Branch currents of the whole clamp with its virtual rail at `v`; the source is on the real rail.
    pub fn branches(&self, v: f64) -> Branches<f64> {
        let s = &self.switch;
        let bias = Bias::from_terminals(v, self.gate_at(v), s.rail_v, s.body_v);
        s.device.branches(bias).map(|i| i * s.fingers)
    }

    /// Current and slopes with `span_v` left to the block and `loss_v` lost at the real rail: into the virtual rail as
    /// [`gives_a`](Self::gives_a) counts it, out of the real one, A, and their slopes to span and loss, S.
    pub fn gives(&self, span_v: f64, loss_v: f64) -> ClampCurrent {
        let s = &self.switch;
        let (drain, source, sign) = match s.side {
            Side::Header => (span_v, s.vdd_v - loss_v, -1.0),
            Side::Footer => (s.vdd_v - span_v, loss_v, 1.0),
        };
        let moves = self.gate_moves();
        let gate = self.gate_v.unwrap_or(if moves { drain } else { source });
        let t =
            s.device.branches_dual(Bias::from_terminals(drain, gate, source, s.body_v).dual()).terminals();
        // the gate belongs to the rail it is tied to
        let own = |terminal: Terminal, tied: bool| {
            let (mut i, mut per) = (t[terminal as usize].val(), per_terminal(t[terminal as usize].d));
            if tied {
                let gate = &t[Terminal::Gate as usize];
                i += gate.val();
                for (to, x) in per.iter_mut().zip(per_terminal(gate.d)) {
                    *to += x;
                }
            }
            (i, per)
        };
        let to_real = self.gate_v.is_none() && !moves;
        let (rail, by_rail) = own(Terminal::Drain, moves);
        let (real, by_real) = own(Terminal::Source, to_real);
        // header: the drain rises with the span and the source falls with the loss; a footer the other way, with its currents
        let slopes = |by: [f64; 4]| {
            let drain = by[Terminal::Drain as usize] + if moves { by[Terminal::Gate as usize] } else { 0.0 };
            let source =
                by[Terminal::Source as usize] + if to_real { by[Terminal::Gate as usize] } else { 0.0 };
            [drain, source]
        };
        let ([rd, rs], [qd, qs]) = (slopes(by_rail), slopes(by_real));
        let n = s.fingers;
        ClampCurrent {
            rail_a: sign * rail * n,
            real_a: -sign * real * n,
            rail_per: [-rd * n, rs * n],
            real_per: [qd * n, -qs * n],
        }
    }

    /// Power its gate and body take from supplies of their own with the virtual rail at `v`, W.
    pub fn ends_w(&self, v: f64) -> f64 {
        let t = self.branches(v).terminals();
        let gate = self.gate_v.map_or(0.0, |g| g * t[Terminal::Gate as usize]);
        gate + self.body_v() * t[Terminal::Body as usize]
    }

    /// Body, V.
    pub fn body_v(&self) -> f64 {
        self.switch.body_v
    }

    /// Real rail, V.
    pub fn rail_v(&self) -> f64 {
        self.switch.rail_v
    }

    /// Current it gives the block with the virtual rail at `v`, A.
    pub fn gives_a(&self, v: f64) -> f64 {
        let t = self.branches(v).terminals();
        let at_rail = t[0] + if self.gate_moves() { t[1] } else { 0.0 };
        if self.switch.side == Side::Header { -at_rail } else { at_rail }
    }
}
