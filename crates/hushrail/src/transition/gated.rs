//! A domain between awake and asleep: the block's curve on one side of the virtual rail, the switch on the other.
//!
//! The state is the span left to the block. The rail's capacitance is counted across the block, so that a header's rail and a
//! footer's obey one equation, `C·d(span)/dt = I_switch − I_block`, and what the capacitance gives back while the rail falls
//! is current that the supply does not deliver.

use std::sync::atomic::AtomicBool;

use super::error::{TransitionError, positive};
use crate::block::current::total;
use crate::block::curve::Sloped;
use crate::block::{BlockCurve, Book, Collapsing};
use crate::device::dual::Real;
use crate::device::{Bias, Polarity, Terminal, per_terminal};
use crate::read::deck::Note;
use crate::standby::clamp::ClampCurrent;
use crate::standby::rest::Clamps;
use crate::standby::stress::caution;
use crate::standby::switch::Side;
use crate::standby::{Clamp, Scheme, Switch, rest_rails};

/// A domain with one switch, ready to be moved.
#[derive(Debug, Clone)]
pub struct Gated<'a> {
    /// What is done to it.
    pub scheme: &'a Scheme,
    /// Its current over the rail.
    pub curve: &'a BlockCurve,
    /// Its switch.
    pub switch: &'a Switch,
    /// Supply, V.
    pub vdd_v: f64,
    /// Capacitance of the virtual rail, across the block, F.
    pub rail_f: f64,
    /// How far past its on rail the gate is driven awake, V.
    pub boost_v: f64,
    /// Gate awake, V.
    pub on_v: f64,
    rail: Collapsing,
    clamp: Option<&'a Clamp>,
}

/// Current of one finger into the block with its slopes.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct FingerCurrent {
    /// Into the virtual rail (out of it, for a footer), A.
    pub rail_a: f64,
    /// From the real rail, A.
    pub real_a: f64,
    /// d rail_a / d span, S.
    pub per_span: f64,
    /// d rail_a / d loss at the real rail, S.
    pub per_loss: f64,
    /// d rail_a / d gate voltage, S.
    pub per_gate: f64,
    /// d real_a / d (span, loss), S.
    pub real_per: [f64; 2],
}

impl<'a> Gated<'a> {
    /// Joins a scheme, its block's curve and its switch.
    ///
    /// # Errors
    /// A scheme without exactly one switch or without numbers that can be, a curve of the other rail, a capacitance that is
    /// not above zero.
    pub fn new(
        scheme: &'a Scheme,
        curve: &'a BlockCurve,
        switch: &'a Switch,
        rail_f: f64,
    ) -> Result<Self, TransitionError> {
        scheme.check().map_err(crate::standby::RestError::from)?;
        let found = match (&scheme.header, &scheme.footer) {
            (Some(_), Some(_)) => "header and footer",
            _ => "no switch",
        };
        let rail = scheme
            .collapsing()
            .ok_or_else(|| TransitionError::Switches { scheme: scheme.name.clone(), found })?;
        let side = if rail == Collapsing::Supply { Side::Header } else { Side::Footer };
        if switch.side != side || curve.points().collapsing != rail {
            return Err(TransitionError::Switches {
                scheme: scheme.name.clone(),
                found: "a switch or a curve of the other rail",
            });
        }
        positive("rail capacitance (F)", rail_f)?;
        positive("fingers of the switch", switch.fingers)?;
        let vdd_v = curve.vdd_v();
        let on_v = switch.awake_gate_v;
        let past = if switch.device.polarity() == Polarity::P { -on_v } else { on_v - vdd_v };
        let boost_v = past.max(0.0);
        Ok(Self { scheme, curve, switch, vdd_v, rail_f, boost_v, on_v, rail, clamp: None })
    }

    /// The same with the clamp of its scheme, made for the corner.
    ///
    /// # Errors
    /// A clamp of the other rail.
    pub fn clamped(self, clamp: Option<&'a Clamp>) -> Result<Self, TransitionError> {
        if clamp.is_some_and(|c| c.side() != self.switch.side) {
            return Err(TransitionError::Switches {
                scheme: self.scheme.name.clone(),
                found: "a clamp of the other rail",
            });
        }
        Ok(Self { clamp, ..self })
    }

    /// Whether a clamp stands beside the switch.
    pub fn is_clamped(&self) -> bool {
        self.clamp.is_some()
    }

    /// Span at which a second supply holds the rail asleep, V.
    pub fn held_span_v(&self) -> Option<f64> {
        match self.rail {
            Collapsing::Supply => self.scheme.held_supply_v,
            Collapsing::Ground => self.scheme.held_ground_v.map(|v| self.vdd_v - v),
        }
    }

    /// What the clamp gives with a span left and a loss at the real rail.
    pub fn clamp_gives(&self, span_v: f64, loss_v: f64) -> ClampCurrent {
        let none = ClampCurrent { rail_a: 0.0, real_a: 0.0, rail_per: [0.0; 2], real_per: [0.0; 2] };
        self.clamp.map_or(none, |c| c.gives(span_v, loss_v))
    }

    /// How many books of the block hang on the rail; which they are is fixed by the rail.
    pub(super) fn books(&self) -> usize {
        self.scheme.on_rail(self.rail).len()
    }

    /// Current that the block takes from its rail with a span left, A.
    pub fn block(&self, span_v: f64) -> Sloped {
        let sign = if self.rail == Collapsing::Supply { 1.0 } else { -1.0 };
        let mut sum = Sloped::default();
        for b in self.scheme.on_rail(self.rail) {
            let x = self.curve.book(*b, span_v);
            sum.value += sign * x.value;
            sum.per_v += sign * x.per_v;
        }
        sum
    }

    /// Current of one finger with its gate at a voltage, a span left to the block and a loss at the real rail.
    pub fn finger(&self, gate_v: f64, span_v: f64, loss_v: f64) -> FingerCurrent {
        let s = self.switch;
        let (drain, source, sign) = match s.side {
            Side::Header => (span_v, self.vdd_v - loss_v, -1.0),
            Side::Footer => (self.vdd_v - span_v, loss_v, 1.0),
        };
        let (body_v, body_per_gate) = s.body_at(gate_v);
        let t =
            s.device.branches_dual(Bias::from_terminals(drain, gate_v, source, body_v).dual()).terminals();
        let (d, q) = (t[Terminal::Drain as usize], t[Terminal::Source as usize]);
        let (dd, dq) = (per_terminal(d.d), per_terminal(q.d));
        // header: drain rises with the span, source falls with the loss; footer: both the other way, and so do the currents
        FingerCurrent {
            rail_a: sign * d.val(),
            real_a: -sign * q.val(),
            per_span: -dd[Terminal::Drain as usize],
            per_loss: dd[Terminal::Source as usize],
            per_gate: sign * (dd[Terminal::Gate as usize] + body_per_gate * dd[Terminal::Body as usize]),
            real_per: [dq[Terminal::Drain as usize], -dq[Terminal::Source as usize]],
        }
    }

    /// Where the rail rests with the switch off: the span left, V.
    ///
    /// # Errors
    /// No rest point.
    pub fn rest_span_v(&self) -> Result<f64, TransitionError> {
        let own = self.settled_span_v(self.scheme, self.switch.clone())?;
        match self.held_span_v() {
            Some(held) if held < own => Err(TransitionError::Range {
                what: "level at which a second supply holds the rail (V left to the block)".into(),
                value: held,
                wanted: format!("want more than the {own:.6} V at which the rail rests by itself"),
            }),
            Some(held) => Ok(held),
            None => Ok(own),
        }
    }

    /// Where the rail settles with the switch on and the block idle: the span, V.
    ///
    /// # Errors
    /// No balance.
    pub fn awake_span_v(&self) -> Result<f64, TransitionError> {
        self.settled_span_v(self.scheme, self.switch.awakened())
    }

    /// Where switch, clamp and block settle by themselves: the span, V.
    fn settled_span_v(&self, scheme: &Scheme, switch: Switch) -> Result<f64, TransitionError> {
        let free = Scheme { held_supply_v: None, held_ground_v: None, ..scheme.clone() };
        let (clamp, switch) = (self.clamp.cloned(), Some(switch));
        let (header, footer, clamps) = if self.rail == Collapsing::Supply {
            (switch, None, Clamps { header: clamp, footer: None })
        } else {
            (None, switch, Clamps { header: None, footer: clamp })
        };
        let stop = AtomicBool::new(false);
        let (supply, ground) = rest_rails(&free, self.curve, self.vdd_v, header, footer, clamps, &stop)?;
        Ok(supply - ground)
    }

    /// The virtual rail's voltage with a span left, V.
    pub fn rail_v(&self, span_v: f64) -> f64 {
        let (supply, ground) = self.rail.rails(self.vdd_v, span_v);
        if self.rail == Collapsing::Supply { supply } else { ground }
    }

    /// Power from all supplies with the switch off if the rail were held at a span, W: what the block takes from its rail counts
    /// at the full supply, whoever delivers it.
    pub fn held_power_w(&self, span_v: f64) -> f64 {
        let s = self.switch;
        let v = self.rail_v(span_v);
        let t = s.branches(v).terminals();
        let (gate, body) = (t[Terminal::Gate as usize] * s.gate_v, t[Terminal::Body as usize] * s.body_v);
        let ends = gate + body + self.clamp.map_or(0.0, |c| c.ends_w(v));
        let (supply, ground) = self.rail.rails(self.vdd_v, span_v);
        let levels = self.scheme.levels(self.vdd_v, supply, ground);
        let inside = |b: Book| self.scheme.on_rail(self.rail).contains(&b);
        let book = |b: Book| self.curve.book(b, span_v).value;
        let well = |b: Book, v: f64| if inside(b) { 0.0 } else { book(b) * v };
        let wells = [well(Book::Nwell, levels.nwell_v), well(Book::Pwell, levels.pwell_v)];
        // what the pump loses on the levels it makes
        let made =
            [(s.gate_v, gate), (s.body_v, body), (levels.nwell_v, wells[0]), (levels.pwell_v, wells[1])];
        let made: f64 =
            made.iter().filter(|(v, _)| *v > self.vdd_v || *v < 0.0).map(|(_, w)| w.max(0.0)).sum();
        let lost = self.scheme.pump_efficiency.map_or(0.0, |e| made * (1.0 / e - 1.0));
        let rail = match self.rail {
            // what enters the switch at the real rail and does not come out at the virtual one
            Collapsing::Supply => {
                let lost = t[Terminal::Source as usize] + t[Terminal::Drain as usize];
                let clamp = self.clamp_gives(span_v, 0.0);
                self.vdd_v * (self.block(span_v).value + lost + clamp.real_a - clamp.rail_a)
            }
            Collapsing::Ground => self.vdd_v * book(Book::Supply),
        };
        let islands = self.vdd_v * total(&self.curve.points().real[0]);
        rail + wells[0] + wells[1] + ends + lost + islands + self.scheme.overhead_a * self.vdd_v
    }

    /// Current that the sleeping switch and the clamp give with a span left, A.
    pub fn off_a(&self, span_v: f64) -> f64 {
        self.switch.fingers * self.finger(self.switch.gate_v, span_v, 0.0).rail_a
            + self.clamp_gives(span_v, 0.0).rail_a
    }

    /// Remarks that go with every transition of this domain.
    pub fn notes(&self) -> Vec<Note> {
        let mut notes = vec![caution()];
        let over = self.scheme.header.as_ref().or(self.scheme.footer.as_ref()).map_or(0.0, |s| s.overdrive_v);
        if over > 0.0 && !self.switch.device.has_gidl() {
            notes.push(crate::block::current::gidl_note("the switch"));
        }
        if !self.curve.points().jumps_v.is_empty() {
            notes.push(Note::new(
                "curve-jumps",
                "the block's current jumps on the way of the rail: stored states are lost there, and the way up is taken along \
                 the curve of the way down",
            ));
        }
        notes
    }
}
