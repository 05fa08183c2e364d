//! Drain and source junctions: diffusion current, breakdown, and trap-assisted tunnelling in reverse.

use super::material::Material;
use super::silicon::MODEL_KB_OVER_Q;
use super::table::Id;
use super::values::{Card, Values};
use crate::device::Geometry;
use crate::device::dual::{Over, Real, choose};

/// One trap-assisted component: prefactor (A), NJTS·Vt(Tnom) (V), VTS (V).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Trap<P> {
    current_a: P,
    slope_v: P,
    vts_v: P,
}

/// One junction of one device (all fingers together).
#[derive(Debug, Clone)]
pub struct JunctionSide<P> {
    /// Saturation current, A.
    pub isat_a: P,
    /// NJ·Vt, V.
    nvt_v: P,
    /// Forward voltage above which the current goes on along its tangent, V; infinite when there is none.
    forward_limit_v: f64,
    /// Breakdown, when it is modelled.
    breakdown: Option<Breakdown<P>>,
    traps: [Option<Trap<P>>; 3],
}

/// Breakdown of one junction.
#[derive(Debug, Clone)]
struct Breakdown<P> {
    /// XJBV·Isat, A.
    prefactor_a: P,
    /// Breakdown voltage BV, V.
    bv_v: P,
    /// Reverse voltage beyond which it goes on along its tangent, V (diode model 2; infinite in model 0).
    limit_v: f64,
}

impl<P: Real> Breakdown<P> {
    /// Current from diffusion to body at the forward voltage `v`, A, with what flows at zero.
    #[inline(always)]
    fn at<R: Over<P>>(&self, v: R, nvt_v: P) -> R {
        if self.limit_v == f64::INFINITY {
            return (-(v + self.bv_v) / nvt_v).exp() * self.prefactor_a;
        }
        let beyond = v.below(-self.limit_v);
        let held = choose!(beyond, v.like(-self.limit_v), v);
        let e = (-(held + self.bv_v) / nvt_v).exp() * self.prefactor_a;
        choose!(beyond, e - (v + self.limit_v) / nvt_v * e, e)
    }
}

/// Both junctions.
pub struct Junctions<P> {
    /// At the source.
    pub source: JunctionSide<P>,
    /// At the drain.
    pub drain: JunctionSide<P>,
}

struct SideIds {
    js: [Id; 3],
    nj: Id,
    xti: Id,
    ijthfwd: Id,
    ijthrev: Id,
    xjbv: Id,
    bv: Id,
    jts: [Id; 3],
    njts: [Id; 3],
    tnjts: [Id; 3],
    xts: [Id; 3],
    vts: [Id; 3],
}

const SOURCE: SideIds = SideIds {
    js: [Id::Jss, Id::Jsws, Id::Jswgs],
    nj: Id::Njs,
    xti: Id::Xtis,
    ijthfwd: Id::Ijthsfwd,
    ijthrev: Id::Ijthsrev,
    xjbv: Id::Xjbvs,
    bv: Id::Bvs,
    jts: [Id::Jtss, Id::Jtssws, Id::Jtsswgs],
    njts: [Id::Njts, Id::Njtssw, Id::Njtsswg],
    tnjts: [Id::Tnjts, Id::Tnjtssw, Id::Tnjtsswg],
    xts: [Id::Xtss, Id::Xtssws, Id::Xtsswgs],
    vts: [Id::Vtss, Id::Vtssws, Id::Vtsswgs],
};
const DRAIN: SideIds = SideIds {
    js: [Id::Jsd, Id::Jswd, Id::Jswgd],
    nj: Id::Njd,
    xti: Id::Xtid,
    ijthfwd: Id::Ijthdfwd,
    ijthrev: Id::Ijthdrev,
    xjbv: Id::Xjbvd,
    bv: Id::Bvd,
    jts: [Id::Jtsd, Id::Jtsswd, Id::Jtsswgd],
    njts: [Id::Njtsd, Id::Njtsswd, Id::Njtsswgd],
    tnjts: [Id::Tnjtsd, Id::Tnjtsswd, Id::Tnjtsswgd],
    xts: [Id::Xtsd, Id::Xtsswd, Id::Xtsswgd],
    vts: [Id::Vtsd, Id::Vtsswd, Id::Vtsswgd],
};

impl<P: Real> Junctions<P> {
    /// Saturation currents at temperature from the areas and perimeters of the layout.
    ///
    /// ```text
    /// Js(T) = Js·exp[(Eg(Tnom)/Vt(Tnom) − Eg(T)/Vt(T) + XTI·ln(T/Tnom))/NJ]
    /// Isat  = A·Js + (P − Weffcj·NF)·Jsw + Weffcj·NF·Jswg      (perMod 1: P includes the gate edge)
    /// ```
    ///
    /// Where area and perimeter are both zero there is no junction (only the gate-edge and trap terms of the width).
    ///
    /// Source: BSIM4.8.0 manual, sections 10.1, 11.1 and 13.
    pub fn of(card: &Card, v: &Values<P>, g: &Geometry<P>, temp_k: P, tnom_k: f64) -> Self {
        let material = Material::of(card);
        let side = |ids: &SideIds, area: P, perimeter: P| {
            let vt = temp_k * MODEL_KB_OVER_Q;
            let vt0 = MODEL_KB_OVER_Q * tnom_k;
            let (eg0, eg) = (material.gap(tnom_k), material.gap(temp_k));
            let ratio = temp_k / tnom_k;
            let nj = v[ids.nj];
            let grow = ((-(eg / vt) + eg0 / vt0 + v[ids.xti] * ratio.ln()) / nj).exp();
            let gate_edge = v.size.weffcj * g.fingers;
            let has = area.val() > 0.0 || perimeter.val() > 0.0;
            let outer = if card.flag(Id::Permod) == 0 { perimeter } else { perimeter - gate_edge };
            let outer = if outer.val() < 0.0 { P::of(0.0) } else { outer };
            let isat = if has {
                (area * v[ids.js[0]] + outer * v[ids.js[1]] + gate_edge * v[ids.js[2]]) * grow
            } else {
                P::of(0.0)
            };
            let isat = if isat.val() > 0.0 { isat } else { P::of(0.0) };
            let nvt = vt * nj;
            let dio = card.flag(Id::Diomod);
            let ijth = card.base(ids.ijthfwd);
            let limited = dio != 0 && isat.val() > 0.0 && ijth > 0.0;
            let forward_limit_v =
                if limited { nvt.val() * (ijth / isat.val()).ln_1p() } else { f64::INFINITY };
            let breakdown = (dio != 1 && isat.val() > 0.0).then(|| {
                let (prefactor, bv) = (v[ids.xjbv] * isat, v[ids.bv]);
                let reverse = card.base(ids.ijthrev);
                let limited = dio == 2 && reverse > 0.0 && prefactor.val() > 0.0;
                let beyond = if limited {
                    nvt.val() * (reverse / prefactor.val()).ln().max(0.0)
                } else {
                    f64::INFINITY
                };
                Breakdown { prefactor_a: prefactor, bv_v: bv, limit_v: bv.val() + beyond }
            });
            let jtw = v[Id::Jtweff];
            let edge_growth = if jtw.val() > 0.0 { (jtw / v.size.weffcj).sqrt() + 1.0 } else { P::of(1.0) };
            let sizes = [area, outer, gate_edge * edge_growth];
            let traps = std::array::from_fn(|i| {
                let j = v[ids.jts[i]];
                if !(j.val() > 0.0 && sizes[i].val() > 0.0) {
                    return None;
                }
                let n = v[ids.njts[i]] * (v[ids.tnjts[i]] * (ratio - 1.0) + 1.0);
                let heat = (v[ids.xts[i]] * (ratio - 1.0) * eg0 / vt).exp();
                Some(Trap { current_a: j * sizes[i] * heat, slope_v: n * vt0, vts_v: v[ids.vts[i]] })
            });
            JunctionSide { isat_a: isat, nvt_v: nvt, forward_limit_v, breakdown, traps }
        };
        Self { source: side(&SOURCE, g.as_m2, g.ps_m), drain: side(&DRAIN, g.ad_m2, g.pd_m) }
    }
}

impl<P: Real> JunctionSide<P> {
    /// Current from body to diffusion at forward voltage `v`, A.
    ///
    /// ```text
    /// I = Isat·(exp(V/nVt) − 1) − breakdown − Σ Jts·(exp(−V/(NJTS·Vt0) · VTS/(VTS − V)) − 1)
    /// ```
    ///
    /// Above the forward limit the current goes on along its tangent (value and slope continuous).
    #[inline(always)]
    pub fn current<R: Over<P>>(&self, v: R) -> R {
        let mut i = v.like(0.0);
        if self.isat_a.val() > 0.0 {
            let isat = v.lift(self.isat_a);
            i = if self.forward_limit_v < f64::INFINITY {
                choose!(v.at_most(self.forward_limit_v), isat * (v / self.nvt_v).exp_m1(), {
                    let edge = P::of(self.forward_limit_v) / self.nvt_v;
                    let top = self.isat_a * edge.exp();
                    (v - self.forward_limit_v) / self.nvt_v * top + self.isat_a * edge.exp_m1()
                })
            } else {
                isat * (v / self.nvt_v).exp_m1()
            };
            if let Some(b) = &self.breakdown {
                // zero at zero bias: the share that breakdown has there is taken off
                i = i - (b.at(v, self.nvt_v) - b.at(v.like(0.0), self.nvt_v));
            }
        }
        for t in self.traps.iter().flatten() {
            // VTS − V must stay positive; forward bias beyond VTS/2 has no trap current worth its sign
            let reach = -(v - t.vts_v);
            let half = t.vts_v.val() * 0.5;
            let x = choose!(
                reach.above(half),
                -(v / t.slope_v) * t.vts_v / reach,
                v.like(-half) / t.slope_v * 2.0
            );
            i = i - x.exp_m1() * t.current_a;
        }
        i
    }
}
