//! Channel current from deep subthreshold to saturation, with output resistance and impact ionisation.

use super::mobility;
use super::prepare::Prepared;
use super::threshold::Threshold;
use crate::device::dual::{Number, Over, Real, choose};

/// Channel current and what the gate equations need of it.
#[derive(Debug, Clone, Copy)]
pub struct Channel<R> {
    /// Drain to source, all fingers, A.
    pub ids: R,
    /// Impact ionisation, drain to body, all fingers, A.
    pub impact: R,
    /// Effective drain voltage, V.
    pub vdseff: R,
}

/// Keeps bulk charge above 0.1 (manual, section 5.1).
#[inline(always)]
fn at_least_tenth<R: Number>(x: R) -> R {
    choose!(x.below(0.1), (-x + 0.2) / (x * -20.0 + 3.0), x)
}

/// 1/(1 + x), continued positive below −0.9 (manual, sections 5.1 and 5.9).
#[inline(always)]
fn shrink<R: Number>(x: R) -> R {
    choose!(x.at_least(-0.9), (x + 1.0).recip(), (x * 20.0 + 17.0) / (x + 0.8))
}

impl<R: Number> Channel<R> {
    /// The current at `vds ≥ 0`.
    ///
    /// ```text
    /// Ids = β·Vgsteff·Vdseff·(1 − Abulk·Vdseff/(2·(Vgsteff+2vt)))/(1 + Vdseff/EsatL)/(1 + Rds·…)
    ///       · (1 + (Vds−Vdseff)/VADIBL)·(1 + (Vds−Vdseff)/VADITS)·(1 + ln(VA/VAsat)/Cclm)·(1 + (Vds−Vdseff)/VASCBE)
    /// ```
    ///
    /// `Vdseff` and `Vdsat` are written in their conjugate forms, so an on device that carries picoamperes keeps every
    /// digit of its tiny drain voltage.
    ///
    /// Velocity overshoot (LAMBDA) raises the critical field beyond saturation; the ballistic limit at the source (VTL) holds
    /// the current under `W·Coxeff·Vgsteff·v` with the manual's exponent 2·MM = 4.
    ///
    /// Source: BSIM4.8.0 manual, sections 5.1 to 5.9 and 6.1.
    #[inline(always)]
    pub fn at<P: Real>(p: &Prepared<P>, th: &Threshold<R>, vds: R) -> Self
    where
        R: Over<P>,
    {
        let one = vds.like(1.0);
        let zero = vds.like(0.0);
        let (vgsteff, vbseff) = (th.vgsteff, th.vbseff);
        let dsqrt = th.sqrt_phis - p.sqrt_phi;

        let weff = -((vgsteff * p.dwg + dsqrt * p.dwb) * 2.0) + p.weff;
        let weff = choose!(weff.below(2e-8), (-weff + 4e-8) * 2e-8 / (weff * -2.0 + 6e-8), weff);
        let no_rds = p.rds0.val() == 0.0 && p.rdswmin.val() == 0.0;
        let rds = if no_rds {
            zero
        } else {
            let t2 = (vgsteff * p.prwg + 1.0).recip() + dsqrt * p.prwb;
            let t3 = t2 + (t2.sq() + 0.01).sqrt();
            t3 * p.rds0 * 0.5 + p.rdswmin
        };

        let t1 = vds.lift(p.k1ox) * p.lpe_vb * 0.5 / th.sqrt_phis + p.k2ox - vds.lift(p.k3b) * p.narrow;
        let reach = (th.xdep * p.xj).sqrt();
        let t5 = vds.lift(p.leff) / (reach * 2.0 + p.leff);
        let bulk_width = if p.b0.val() == 0.0 { zero } else { vds.lift(p.b0) / (vds.lift(p.weff) + p.b1) };
        let abulk0 = t1 * (t5 * p.a0 + bulk_width) + 1.0;
        let slope = -(t1 * (t5 * t5 * t5 * p.a0 * p.ags));
        let t2 = vbseff * p.keta;
        let keta = shrink(t2);
        let abulk = at_least_tenth(abulk0 + slope * vgsteff) * keta;

        let v2t = vgsteff + vds.lift(p.vt) * 2.0;
        let ueff = mobility::effective(p, th);

        let wv = weff * p.vsat * p.coxe;
        let wvr = wv * rds;
        let esat_l = vds.lift(p.vsat) * 2.0 / ueff * p.leff;
        let lambda = if p.a1.val() == 0.0 {
            vds.lift(p.a2)
        } else if p.a1.val() > 0.0 {
            let t0 = -vds.lift(p.a2) + 1.0;
            let t1 = t0 - vgsteff * p.a1 - 0.0001;
            let t2 = (t1.sq() + t0 * 0.0004).sqrt();
            t0 + p.a2 - (t1 + t2) * 0.5
        } else {
            let t1 = vgsteff * p.a1 + p.a2 - 0.0001;
            (t1 + (t1.sq() + vds.lift(p.a2) * 0.0004).sqrt()) * 0.5
        };
        let vdsat = if no_rds && p.a1.val() == 0.0 && p.a2.val() == 1.0 {
            esat_l * v2t / (abulk * esat_l + v2t)
        } else {
            let t9 = abulk * wvr;
            let t7 = v2t * t9;
            let t0 = abulk * 2.0 * (t9 - 1.0 + lambda.recip());
            let t1 = v2t * (lambda.recip() * 2.0 - 1.0) + abulk * esat_l + t7 * 3.0;
            let t2 = v2t * (esat_l + v2t * wvr * 2.0);
            t2 * 2.0 / (t1 + (t1.sq() - t0 * t2 * 2.0).sqrt())
        };

        // Vdseff = Vdsat − (T1 + T2)/2 with T1 = Vdsat − Vds − δ, T2 = √(T1² + 4δ·Vdsat), rationalised
        let t1 = vdsat - vds - p.delta;
        let t2 = (t1.sq() + vdsat * p.delta * 4.0).sqrt();
        let sum = vdsat + vds + p.delta + t2;
        let vdseff = vdsat * vds * 2.0 / sum;
        let beyond = choose!(t1.above(0.0), vdsat * p.delta * 4.0 / (t2 + t1), t2 - t1);
        let diff = vds * beyond / sum;

        // velocity overshoot acts beyond the saturation voltage
        let mut esat_l = esat_l;
        if p.lambda.val() > 0.0 {
            let over = diff * p.leff / (esat_l * p.litl);
            esat_l = esat_l * ((over * 0.5).tanh() * p.lambda / (ueff * p.leff) + 1.0);
        }

        let field = (vgsteff + p.vtfbphi2) / (vds.lift(p.toxp) * 2e8);
        let deepest = vds.lift(p.centroid);
        let centroid =
            choose!(field.above(0.0), deepest / ((field.ln() * p.centroid_power).exp() + 1.0), deepest);
        let coxeff = vds.lift(p.coxp) * p.eps_sub / (centroid * p.coxp + p.eps_sub);
        let beta = ueff * coxeff * weff / p.leff;
        let gche = beta * vgsteff * (one - vdseff * abulk * 0.5 / v2t) / (vdseff / esat_l + 1.0);
        let idl = gche / (gche * rds + 1.0);

        let fp = if p.fprout.val() <= 0.0 {
            one
        } else {
            (vds.lift(p.leff).sqrt() * p.fprout / v2t + 1.0).recip()
        };
        let pvag = if p.pvag.val() == 0.0 {
            one
        } else {
            let t9 = vgsteff * p.pvag / esat_l;
            choose!(t9.above(-0.9), t9 + 1.0, (t9 + 0.8) / (t9 * 20.0 + 17.0))
        };
        let mut ids = idl;
        if p.theta_rout.val() > 1.7e-15 {
            let t8 = abulk * vdsat;
            let mut va = (v2t - v2t * t8 / (v2t + t8)) / p.theta_rout;
            let t7 = vbseff * p.pdiblcb;
            va = va * shrink(t7);
            ids = ids * (diff / (va * pvag) + 1.0);
        }
        if p.pdits.val() > 1.7e-15 {
            let t1 = (vds * p.pditsd).exp();
            let va = (t1 * (p.pditsl * p.leff + P::of(1.0)) + 1.0) / p.pdits * fp;
            ids = ids * (diff / va + 1.0);
        }
        if p.pclm.val() > 1.7e-15 {
            let t1 = vdsat * ueff / (vds.lift(p.vsat) * 2.0) + p.leff;
            let cclm = fp * pvag * (rds * idl + 1.0) * t1 / (p.pclm * p.litl);
            let tmp = one - abulk * vdsat * 0.5 / v2t;
            let va_sat =
                (esat_l + vdsat + wvr * vgsteff * 2.0 * tmp) / (lambda.recip() * 2.0 - 1.0 + wvr * abulk);
            ids = ids * ((cclm * diff / va_sat).ln_1p() / cclm + 1.0);
        }
        let mut impact = zero;
        if p.alpha.val() > 0.0 && p.beta0.val() > 0.0 {
            impact = choose!(
                diff.above(p.beta0.val() / 690.0),
                {
                    let rate = diff * (-(diff.lift(p.beta0) / diff)).exp() * p.alpha / p.leff;
                    ids * vdseff * rate * p.nf
                },
                zero
            );
        }
        if p.pscbe2.val() > 0.0 {
            ids = choose!(
                diff.above(p.pscbe1.val() * p.litl.val() / 690.0),
                {
                    let inverse = (-(diff.lift(p.pscbe1) * p.litl / diff)).exp() * p.pscbe2 / p.leff;
                    ids * (diff * inverse + 1.0)
                },
                ids
            );
        }
        let mut ids = ids * vdseff;
        if let Some(limit) = p.source_velocity {
            // (1 + x⁴)^(−¼) with x the velocity at the source over its ballistic limit
            let x = ids / (weff * coxeff * vgsteff * limit);
            ids = ids / (x.sq().sq() + 1.0).sqrt().sqrt();
        }
        Self { ids: ids * p.nf, impact, vdseff }
    }
}
