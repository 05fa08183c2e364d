//! A clamp beside a sleeping switch: where it holds the virtual rail, whether state is kept there, and what leaks.

use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use serde::{Deserialize, Serialize};

use super::error::{AwakeError, range};
use super::keep::{Collapse, CollapseSide};
use crate::block::current::{BlockCurrents, BoundBlock, total};
use crate::cell::DeviceShelf;
use crate::device::process::Process;
use crate::device::root::increasing;
use crate::device::{Bias, Polarity};
use crate::physics::Kelvin;
use crate::standby::switch::{Side, Switch};
use crate::standby::{SwitchSpec, WellTie};

/// A transistor between real and virtual rail that conducts when they are far apart: connected as a diode, or with its gate at a
/// level of its own (reference sheet A19). Overdrive, boost and well bias of the spec have no meaning here and must be zero.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ClampSpec {
    /// The transistor.
    pub device: SwitchSpec,
    /// Level of its gate, V; as a diode when left out.
    #[serde(default)]
    pub gate_v: Option<f64>,
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
    /// No card or bin, or numbers that cannot be.
    pub fn new(
        spec: &ClampSpec,
        side: Side,
        process: &Process,
        temp: Kelvin,
        vdd_v: f64,
        shelf: &mut DeviceShelf,
        origin: &Arc<str>,
    ) -> Result<Self, AwakeError> {
        let d = &spec.device;
        d.check("clamp").map_err(|(what, value, wanted)| AwakeError::Range { what, value, wanted })?;
        if d.overdrive_v != 0.0 || d.boost_v != 0.0 || d.well_bias_v != 0.0 {
            return range(
                "overdrive, boost or well bias of the clamp",
                "not zero".into(),
                "want none of them",
            );
        }
        if let Some(g) = spec.gate_v
            && !(-1.0..=vdd_v + 1.0).contains(&g)
        {
            return range("gate of the clamp", format!("{g} V"), &format!("want -1 V to {} V", vdd_v + 1.0));
        }
        Ok(Self { switch: Switch::new(d, side, process, temp, vdd_v, shelf, origin)?, gate_v: spec.gate_v })
    }

    /// Current it gives the block with the virtual rail at `v`, A.
    pub fn gives_a(&self, v: f64) -> f64 {
        let s = &self.switch;
        let natural = (s.side == Side::Header) == (s.device.polarity() == Polarity::P);
        // the diode's gate sits on its drain: the virtual rail for the polarity that switches this rail, the real one otherwise
        let gate = self.gate_v.unwrap_or(if natural { v } else { s.rail_v });
        let drain = s.device.branches(Bias::from_terminals(v, gate, s.rail_v, s.body_v)).terminals()[0];
        let sign = if s.side == Side::Header { -1.0 } else { 1.0 };
        sign * drain * s.fingers
    }
}

/// A clamped domain.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Clamped {
    /// Virtual rail, V.
    pub rail_v: f64,
    /// Span left to the block, V.
    pub span_v: f64,
    /// Current of the block at its moving rail, A.
    pub block_a: f64,
    /// What the clamp gives of it, A.
    pub clamp_a: f64,
    /// What the sleeping switch gives of it, A.
    pub switch_a: f64,
}

fn drawn(c: &BlockCurrents, collapse: Collapse) -> f64 {
    match collapse.side {
        CollapseSide::Header => {
            total(&c.supply) + if collapse.nwell == WellTie::Virtual { total(&c.nwell) } else { 0.0 }
        }
        CollapseSide::Footer => {
            -total(&c.ground) - if collapse.pwell == WellTie::Virtual { total(&c.pwell) } else { 0.0 }
        }
    }
}

/// Current a block draws with its rails at a span, A, and its currents in full: what leaks at a clamp level.
///
/// # Errors
/// The block.
pub fn leaks_at(
    block: &BoundBlock,
    collapse: &Collapse,
    vdd_v: f64,
    span_v: f64,
    stop: &AtomicBool,
) -> Result<(f64, BlockCurrents), AwakeError> {
    let c = block.currents(&collapse.levels(vdd_v, span_v), stop)?;
    Ok((drawn(&c, *collapse), c))
}

/// Where clamp, sleeping switch and block settle.
///
/// # Errors
/// The block, or [`AwakeError::ClampIdle`] where the clamp gives less than the switch even with all of the supply across it.
pub fn settle_clamped(
    clamp: &Clamp,
    asleep: Option<&Switch>,
    block: &BoundBlock,
    collapse: &Collapse,
    stop: &AtomicBool,
) -> Result<Clamped, AwakeError> {
    let vdd = clamp.switch.vdd_v;
    let rail = |span: f64| match collapse.side {
        CollapseSide::Header => span,
        CollapseSide::Footer => vdd - span,
    };
    let sign = if collapse.side == CollapseSide::Header { -1.0 } else { 1.0 };
    let switch = |span: f64| asleep.map_or(0.0, |s| sign * s.branches(rail(span)).terminals()[0]);
    let (clamp_a, other_a) = (clamp.gives_a(rail(0.0)), switch(0.0));
    if !(clamp_a > other_a.max(0.0)) {
        return Err(AwakeError::ClampIdle { clamp_a, other_a });
    }
    let span_v = increasing(1e-9, vdd, 1e-12, 1e-9, 120, |span| {
        let (block_a, _) = leaks_at(block, collapse, vdd, span, stop)?;
        let given = clamp.gives_a(rail(span)) + switch(span);
        Ok::<f64, AwakeError>(match (block_a > 0.0, given > 0.0) {
            (true, true) => (block_a / given).ln(),
            (true, false) => 200.0,
            _ => -200.0,
        })
    })?;
    let (block_a, _) = leaks_at(block, collapse, vdd, span_v, stop)?;
    Ok(Clamped {
        rail_v: rail(span_v),
        span_v,
        block_a,
        clamp_a: clamp.gives_a(rail(span_v)),
        switch_a: switch(span_v),
    })
}
