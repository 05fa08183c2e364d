//! A switch at a corner: its transistor, and its currents off and on.

use std::sync::Arc;

use serde::{Deserialize, Serialize};

use super::scheme::SwitchSpec;
use crate::cell::DeviceShelf;
use crate::device::in_series::InSeries;
use crate::device::process::{Process, Request};
use crate::device::range::Outside;
use crate::device::{Bias, Branches, Device, Polarity};
use crate::physics::Kelvin;
use crate::read::source::{Place, ReadError};

/// Which rail a switch stands on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Side {
    /// Between supply and virtual supply.
    Header,
    /// Between virtual ground and ground.
    Footer,
}

/// A switch with its device.
#[derive(Debug, Clone)]
pub struct Switch {
    /// One finger.
    pub device: Arc<dyn Device>,
    /// Fingers in parallel.
    pub fingers: f64,
    /// Where it stands.
    pub side: Side,
    /// Real rail, V.
    pub rail_v: f64,
    /// Gate asleep, V.
    pub gate_v: f64,
    /// Gate awake, V.
    pub awake_gate_v: f64,
    /// Supply, V.
    pub vdd_v: f64,
    /// Body asleep, V.
    pub body_v: f64,
    /// Body awake, V.
    pub awake_body_v: f64,
}

impl Switch {
    /// Makes the device of a switch; `vdd_v` is the supply, ground is 0 V.
    ///
    /// An n-channel header or p-channel footer is legal: its off rail is still the one on the far side of turning on.
    ///
    /// # Errors
    /// No card or bin for the model and size.
    pub fn new(
        spec: &SwitchSpec,
        side: Side,
        process: &Process,
        temp: Kelvin,
        vdd_v: f64,
        shelf: &mut DeviceShelf,
        origin: &Arc<str>,
    ) -> Result<Self, ReadError> {
        let finger = spec.finger_width_m.unwrap_or(spec.width_m);
        let mut params: Vec<(Arc<str>, f64)> = vec![("w".into(), finger), ("l".into(), spec.length_m)];
        if let Some(d) = spec.diffusion_m {
            // every diffusion is shared by two fingers; perimeters include the gate edges
            let (area, perimeter) = (finger * d / 2.0, d + finger);
            params.extend(
                [("ad", area), ("as", area), ("pd", perimeter), ("ps", perimeter)]
                    .map(|(n, v)| (n.into(), v)),
            );
        }
        if let Some(e) = spec.edge_m {
            params.extend([("sa", e), ("sb", e)].map(|(n, v)| (n.into(), v)));
        }
        let request =
            Request { model: spec.model.to_lowercase().into(), params, at: Place::new(origin, 1, 1) };
        let t = shelf.transistor(process, &request, temp)?;
        let p_channel = t.device.polarity() == Polarity::P;
        let gate_v = if p_channel { vdd_v + spec.overdrive_v } else { -spec.overdrive_v };
        let awake_gate_v = if p_channel { -spec.boost_v } else { vdd_v + spec.boost_v };
        let body = |bias: f64| if p_channel { vdd_v + bias } else { -bias };
        let (body_v, awake_body_v) = (body(spec.well_bias_v), body(spec.awake_well_bias_v()));
        let rail_v = if side == Side::Header { vdd_v } else { 0.0 };
        Ok(Self {
            device: InSeries::of(&t.device, spec.stacked),
            fingers: spec.width_m / finger * t.count,
            side,
            rail_v,
            gate_v,
            awake_gate_v,
            vdd_v,
            body_v: if spec.body_to_gate { gate_v } else { body_v },
            awake_body_v: if spec.body_to_gate { awake_gate_v } else { awake_body_v },
        })
    }

    /// Branch currents of the whole switch with its virtual rail at `v`; the source is on the real rail.
    pub fn branches(&self, v: f64) -> Branches<f64> {
        self.device.branches(self.bias(v)).map(|i| i * self.fingers)
    }

    fn bias(&self, v: f64) -> Bias<f64> {
        Bias::from_terminals(v, self.gate_v, self.rail_v, self.body_v)
    }

    /// Body while the gate is at a voltage, V, and its slope: between its two levels it moves with the gate.
    pub fn body_at(&self, gate_v: f64) -> (f64, f64) {
        let (swing, move_v) = (self.awake_gate_v - self.gate_v, self.awake_body_v - self.body_v);
        if move_v == 0.0 || swing == 0.0 {
            return (self.body_v, 0.0);
        }
        let slope = move_v / swing;
        (self.body_v + slope * (gate_v - self.gate_v), slope)
    }

    /// The switch as it is awake: gate and body at their levels then.
    pub fn awakened(&self) -> Self {
        Self { gate_v: self.awake_gate_v, body_v: self.awake_body_v, ..self.clone() }
    }

    /// Voltage of the virtual rail when `droop_v` is lost across the switch.
    pub fn virtual_rail_v(&self, droop_v: f64) -> f64 {
        if self.side == Side::Header { self.rail_v - droop_v } else { self.rail_v + droop_v }
    }

    /// Bias awake with `droop_v` across the switch; the body stays where the scheme ties it.
    pub fn awake_bias(&self, droop_v: f64) -> Bias<f64> {
        Bias::from_terminals(self.virtual_rail_v(droop_v), self.awake_gate_v, self.rail_v, self.awake_body_v)
    }

    /// Current of the whole switch at its virtual rail, positive as the load draws it, and its slope to the droop: A and S.
    fn through(&self, bias: Bias<f64>) -> (f64, f64) {
        let drain = self.device.branches_dual(bias.dual()).terminals()[0];
        // the slope to the drain voltage is that to vds
        let sign = if self.side == Side::Header { -1.0 } else { 1.0 };
        (sign * drain.v * self.fingers, drain.d[1] * self.fingers)
    }

    /// What the switch gives its load awake at a droop, A, and the slope to the droop, S.
    pub fn awake_current(&self, droop_v: f64) -> (f64, f64) {
        self.through(self.awake_bias(droop_v))
    }

    /// What the switch lets through asleep with its virtual rail fully collapsed, A.
    pub fn off_current_a(&self) -> f64 {
        let collapsed = if self.side == Side::Header { 0.0 } else { self.vdd_v };
        self.through(self.bias(collapsed)).0
    }

    /// What its bias asks beyond what its model rests on, with the virtual rail at `v`.
    pub fn outside(&self, v: f64) -> Option<Outside> {
        self.device.outside(self.bias(v))
    }

    /// Largest gate-to-drain or gate-to-source voltage asleep with the virtual rail at `v`, and awake, V.
    pub fn oxide_v(&self, v: f64) -> f64 {
        let awake = (self.awake_gate_v - self.rail_v).abs();
        (self.gate_v - v).abs().max((self.gate_v - self.rail_v).abs()).max(awake)
    }
}
