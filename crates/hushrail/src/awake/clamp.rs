//! A clamp beside a sleeping switch: where it holds the virtual rail, whether state is kept there, and what leaks.

use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use serde::{Deserialize, Serialize};

use super::error::AwakeError;
use super::keep::{Collapse, CollapseSide};
use crate::block::current::{BlockCurrents, BoundBlock, total};
use crate::cell::DeviceShelf;
use crate::device::process::Process;
use crate::device::root::increasing;
use crate::physics::Kelvin;
use crate::standby::switch::{Side, Switch};
use crate::standby::{Clamp, ClampSpec, WellTie};

/// Makes a clamp after checking its numbers.
///
/// # Errors
/// No card or bin, or numbers that cannot be.
pub fn make_clamp(
    spec: &ClampSpec,
    side: Side,
    process: &Process,
    temp: Kelvin,
    vdd_v: f64,
    shelf: &mut DeviceShelf,
    origin: &Arc<str>,
) -> Result<Clamp, AwakeError> {
    spec.check("clamp").map_err(|(what, value, wanted)| AwakeError::Range { what, value, wanted })?;
    Ok(Clamp::new(spec, side, process, temp, vdd_v, shelf, origin)?)
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
    let vdd = clamp.vdd_v();
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
