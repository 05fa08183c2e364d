//! Tunnelling through the gate oxide: to the channel, at the edges, to the body.

use super::channel::Channel;
use super::prepare::{Prepared, Tunnel};
use super::threshold::Threshold;
use crate::device::dual::{Number, Over, Real, choose};

/// Gate currents of all fingers, A, positive out of the gate.
#[derive(Debug, Clone, Copy)]
pub struct GateCurrents<R> {
    /// Gate to source.
    pub gs: R,
    /// Gate to drain.
    pub gd: R,
    /// Gate to body.
    pub gb: R,
}

/// `exp(B·(a + (a·c − b)·V − b·c·V²))`.
#[inline(always)]
fn attenuation<P: Real, R: Over<P>>(b_const: P, [a, b, c]: [P; 3], v: R) -> R {
    ((v * (a * c - b) - v.sq() * (b * c) + a) * b_const).exp()
}

/// Edge current for one overlap; `v` is gate minus diffusion, signed.
#[inline(always)]
fn edge<P: Real, R: Over<P>>(t: &Tunnel<P>, scale: P, abc: [P; 3], v: R) -> R {
    let away = ((v - t.vfbsd).sq() + 1e-4).sqrt();
    v * away * scale * attenuation(t.b_edge, abc, away)
}

impl<R: Number> GateCurrents<R> {
    /// All components at a bias with `vds ≥ 0`; `exchanged` says where drain and source have changed places for that. Both
    /// currents are those of the physical drain and source.
    ///
    /// The published prefactor `Vgse` does not vanish at zero bias when the gate is depleted a little there; its value at zero
    /// is taken off within about 10 mV of zero bias (2e−8 of the current at 1 V), so no current flows without voltage.
    /// Where PIGCD is not given, its published formula turns negative in weak inversion, where the channel current it splits
    /// is negligible; there it is held positive, value and slope continuous.
    ///
    /// Source: BSIM4.8.0 manual, sections 4.1 to 4.3.
    #[inline(always)]
    pub fn at<P: Real>(
        p: &Prepared<P>,
        t: &Tunnel<P>,
        exchanged: R::Mask,
        th: &Threshold<R>,
        ch: &Channel<R>,
        vgs: R,
        vds: R,
    ) -> Self
    where
        R: Over<P>,
    {
        let zero = vds.like(0.0);
        let (vge, vbs) = (th.vgs_eff, th.vbseff);

        // oxide voltage in accumulation and in depletion/inversion
        let v3 = -(vge - vbs) + p.vfbzb - 0.02;
        let sign = if p.vfbzb.val() <= 0.0 { -0.08 } else { 0.08 };
        let root = (v3.sq() + vds.lift(p.vfbzb) * sign).sqrt();
        let vfbeff = -((v3 + root) * 0.5) + p.vfbzb;
        let vox_acc = (v3 + root) * 0.5;
        let vox_acc = choose!(vox_acc.below(0.0), zero, vox_acc);
        let t3 = vge - vfbeff - vbs - th.vgsteff;
        let half = vds.lift(p.k1ox) * 0.5;
        let vox_dep = if p.k1ox.val() == 0.0 {
            zero
        } else {
            choose!(t3.below(0.0), t3, ((half.sq() + t3).sqrt() - half) * p.k1ox)
        };
        let vox_inv = vox_dep + th.vgsteff;

        let (mut gs, mut gd, mut gb) = (zero, zero, zero);
        let pre = vge + ((vgs / 0.01).sq() + 1.0).recip() * t.rest_v;
        if t.igc != 0 {
            let onset = if t.igc == 1 { vge - p.vth0 } else { vge - th.vth };
            let aux = (onset / t.vt_nigc).softplus() * t.vt_nigc;
            let igc = pre * aux * t.a_channel * attenuation(t.b_channel, [t.aigc, t.bigc, t.cigc], vox_inv);
            let share = if let Some(v) = t.pigcd {
                vds.lift(v)
            } else {
                let over = th.vgsteff + 1e-20;
                let r = ch.vdseff * 0.5 / over;
                let r = choose!(r.at_most(0.75), r, (-((r - 0.75) / 0.2)).exp() * -0.2 + 0.95);
                -(over.recip().sq() * t.b_channel) * (-r + 1.0)
            };
            let x = share * ch.vdseff;
            // x + e^−x − 1 and 1 − (x + 1)·e^−x without the large part of their cancellation
            let (e, less) = (-x).exp_and_m1();
            let below = x.sq() + 2e-4;
            gs = igc * (x + less + 1e-4) / below;
            gd = igc * (-(x * e + less) + 1e-4) / below;
            // the physical drain keeps its own edge when the channel runs the other way
            let vgd = vgs - vds;
            (gs, gd) = (R::select(exchanged, gd, gs), R::select(exchanged, gs, gd));
            gs = gs + edge(t, t.a_edge_s, t.edge_s, R::select(exchanged, vgd, vgs));
            gd = gd + edge(t, t.a_edge_d, t.edge_d, R::select(exchanged, vgs, vgd));
        }
        if t.igb {
            let across = pre - vbs;
            let aux = ((vox_inv - t.eigbinv) / t.vt_nigbinv).softplus() * t.vt_nigbinv;
            let inv = across * aux * t.a_bulk_inv * attenuation(t.b_bulk_inv, t.inv, vox_inv);
            let aux = ((-across + p.vfbzb) / t.vt_nigbacc).softplus() * t.vt_nigbacc;
            let acc = across * aux * t.a_bulk_acc * attenuation(t.b_bulk_acc, t.acc, vox_acc);
            gb = inv + acc;
        }
        let nf = vds.lift(p.nf);
        Self { gs: gs * nf, gd: gd * nf, gb: gb * nf }
    }
}
