//! A clamp beside a sleeping switch: a transistor that conducts when real and virtual rail are far apart, so that state is kept.

use std::sync::Arc;

use serde::{Deserialize, Serialize};

use super::scheme::SwitchSpec;
use super::switch::{Side, Switch};
use crate::cell::DeviceShelf;
use crate::device::process::Process;
use crate::device::{Bias, Branches, Polarity};
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
        if d.overdrive_v != 0.0 || d.boost_v != 0.0 || d.well_bias_v != 0.0 || d.body_to_gate {
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
