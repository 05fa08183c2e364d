//! Depletion of a polysilicon gate.

use crate::device::dual::{Over, Real, choose};

/// Gate voltage behind the depletion of a polysilicon gate (manual, section 1.2).
#[inline(always)]
pub(super) fn effective_gate<P: Real, R: Over<P>>(poly: Option<(P, P)>, vgs: R) -> R {
    let Some((onset, scale)) = poly else { return vgs };
    choose!(vgs.at_most(onset.val()), vgs, {
        let over = vgs - onset;
        let root = (over * 2.0 / scale + 1.0).sqrt();
        let t2 = over * 2.0 / (root + 1.0);
        let t3 = t2.sq() * 0.5 / scale;
        let t7 = -t3 + 1.07;
        let t6 = (t7.sq() + 0.224).sqrt();
        vgs - (-(t7 + t6) * 0.5 + 1.12)
    })
}
