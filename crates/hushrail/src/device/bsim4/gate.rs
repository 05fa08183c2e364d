//! Tunnelling through the gate oxide: to the channel, at the edges, to the body.

use super::channel::Channel;
use super::prepare::{Prepared, Tunnel};
use super::threshold::Threshold;
use crate::device::dual::{Over, Real};

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
fn attenuation<P: Real, R: Over<P>>(b_const: P, [a, b, c]: [P; 3], v: R) -> R {
    ((v * (a * c - b) - v.sq() * (b * c) + a) * b_const).exp()
}

/// Edge current for one overlap; `v` is gate minus diffusion, signed.
fn edge<P: Real, R: Over<P>>(t: &Tunnel<P>, scale: P, abc: [P; 3], v: R) -> R {
    let away = ((v - t.vfbsd).sq() + 1e-4).sqrt();
    v * away * scale * attenuation(t.b_edge, abc, away)
}

impl<R: Real> GateCurrents<R> {
    /// All components at a bias with `vds ≥ 0`.
    ///
    /// The published prefactor `Vgse` does not vanish at zero bias when the gate is depleted a little there; its value at zero
    /// is taken off within about 10 mV of zero bias (2e−8 of the current at 1 V), so no current flows without voltage.
    /// Where PIGCD is not given, its published formula turns negative in weak inversion, where the channel current it splits
    /// is negligible; there it is held positive, value and slope continuous.
    ///
    /// Source: BSIM4.8.0 manual, sections 4.1 to 4.3.
    pub fn at<P: Real>(
        p: &Prepared<P>,
        t: &Tunnel<P>,
        exchanged: bool,
        th: &Threshold<R>,
        ch: &Channel<R>,
        vgs: R,
        vds: R,
    ) -> Self
    where
        R: Over<P>,
    {
        let zero = R::of(0.0);
        // the physical drain keeps its own edge when the channel runs the other way
        let mut ends = [(t.a_edge_s, t.edge_s), (t.a_edge_d, t.edge_d)];
        if exchanged {
            ends.swap(0, 1);
        }
        let (vge, vbs) = (th.vgs_eff, th.vbseff);

        // oxide voltage in accumulation and in depletion/inversion
        let v3 = -(vge - vbs) + p.vfbzb - 0.02;
        let sign = if p.vfbzb.val() <= 0.0 { -0.08 } else { 0.08 };
        let root = (v3.sq() + R::lift(p.vfbzb) * sign).sqrt();
        let vfbeff = -((v3 + root) * 0.5) + p.vfbzb;
        let mut vox_acc = (v3 + root) * 0.5;
        if vox_acc.val() < 0.0 {
            vox_acc = zero;
        }
        let t3 = vge - vfbeff - vbs - th.vgsteff;
        let half = R::lift(p.k1ox) * 0.5;
        let vox_dep = if p.k1ox.val() == 0.0 {
            zero
        } else if t3.val() < 0.0 {
            t3
        } else {
            ((half.sq() + t3).sqrt() - half) * p.k1ox
        };
        let vox_inv = vox_dep + th.vgsteff;

        let (mut gs, mut gd, mut gb) = (zero, zero, zero);
        let pre = vge + ((vgs / 0.01).sq() + 1.0).recip() * t.rest_v;
        if t.igc != 0 {
            let onset = if t.igc == 1 { vge - p.vth0 } else { vge - th.vth };
            let aux = (onset / t.vt_nigc).softplus() * t.vt_nigc;
            let igc = pre * aux * t.a_channel * attenuation(t.b_channel, [t.aigc, t.bigc, t.cigc], vox_inv);
            let share = if let Some(v) = t.pigcd {
                R::lift(v)
            } else {
                let over = th.vgsteff + 1e-20;
                let r = ch.vdseff * 0.5 / over;
                let r = if r.val() <= 0.75 { r } else { (-((r - 0.75) / 0.2)).exp() * -0.2 + 0.95 };
                -(over.recip().sq() * t.b_channel) * (-r + 1.0)
            };
            let x = share * ch.vdseff;
            let e = (-x).exp();
            let below = x.sq() + 2e-4;
            gs = igc * (x + e - 1.0 + 1e-4) / below;
            gd = igc * (-((x + 1.0) * e) + 1.0 + 1e-4) / below;
            gs = gs + edge(t, ends[0].0, ends[0].1, vgs);
            gd = gd + edge(t, ends[1].0, ends[1].1, vgs - vds);
        }
        if t.igb {
            let across = pre - vbs;
            let aux = ((vox_inv - t.eigbinv) / t.vt_nigbinv).softplus() * t.vt_nigbinv;
            let inv = across * aux * t.a_bulk_inv * attenuation(t.b_bulk_inv, t.inv, vox_inv);
            let aux = ((-across + p.vfbzb) / t.vt_nigbacc).softplus() * t.vt_nigbacc;
            let acc = across * aux * t.a_bulk_acc * attenuation(t.b_bulk_acc, t.acc, vox_acc);
            gb = inv + acc;
        }
        let nf = R::lift(p.nf);
        Self { gs: gs * nf, gd: gd * nf, gb: gb * nf }
    }
}
