//! Gate-induced drain leakage.

use super::prepare::{Gidl, Prepared};
use crate::device::dual::{Over, Real, choose};

/// Current from a diffusion to the body, all fingers, A; `vdiff_gate` is diffusion minus (effective) gate, `vdb`
/// diffusion minus body.
///
/// ```text
/// gidlMod 0:  I = A·W·x·exp(−B/x)·Vdb³/(C + Vdb³),            x = (Vds − Vgs − E)/(3·toxe)
/// gidlMod 1:  I = A·W·x·exp(−B/x)·exp(K/(Vbd − F)),           x = (Vds − R·Vgs − E)/(3·toxe)
/// ```
///
/// Where the material is described (`mtrlmod = 1`), `3·toxe` is `EOT·EPSRSUB/3.9` and VFBSD is added to the voltage.
///
/// Zero for x ≤ 0 and for a forward-biased junction, with all derivatives continuous there in gidlMod 0.
///
/// Source: BSIM4.8.0 manual, section 6.2.
#[inline(always)]
pub fn current<P: Real, R: Over<P>>(p: &Prepared<P>, g: &Gidl<P>, vd: R, vg: R, vdb: R) -> R {
    let zero = vdb.like(0.0);
    choose!(vdb.at_most(0.0), zero, {
        let x = (if p.gidlmod == 0 { vd - vg } else { vd - vg * g.r } - g.e + p.gidl_vfbsd) / p.gidl_reach;
        choose!(x.at_most(g.b.val() / 690.0), zero, {
            let base = x * (-(x.lift(g.b) / x)).exp() * g.a * p.weffcj * p.nf;
            if p.gidlmod == 0 {
                let cube = vdb * vdb * vdb;
                base * cube / (cube + g.c)
            } else if g.k.val() == 0.0 {
                base
            } else {
                let reach = -vdb - g.f;
                choose!(reach.at_least(0.0), zero, base * (reach.lift(g.k) / reach).exp())
            }
        })
    })
}
