//! What a block draws with its rails held at a span: what leaks where its state is just kept.

use std::sync::atomic::AtomicBool;

use super::error::AwakeError;
use super::keep::{Collapse, CollapseSide};
use crate::block::current::{BlockCurrents, BoundBlock, total};
use crate::standby::WellTie;

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
