//! Body voltage limits, threshold, slope factor and effective overdrive.

use super::poly::effective_gate;
use super::prepare::Prepared;
use super::silicon::theta;
use crate::device::dual::{Number, Over, Real, choose};

/// What later equations need of the threshold.
#[derive(Debug, Clone, Copy)]
#[expect(missing_docs, reason = "symbols of the manual, section 2 and 3")]
pub struct Threshold<R> {
    pub vbseff: R,
    pub sqrt_phis: R,
    pub xdep: R,
    pub vth: R,
    pub n: R,
    pub vgs_eff: R,
    pub vgsteff: R,
}

/// `1 + x` where it is safe, a smooth positive continuation `(a + b·x)/(c + d·x)` below `limit`.
#[inline(always)]
pub(super) fn folded<R: Number>(x: R, limit: f64, top: (f64, f64), bottom: (f64, f64)) -> R {
    choose!(x.at_least(limit), x + 1.0, (x * top.1 + top.0) / (x * bottom.1 + bottom.0))
}

/// Body bias held between a floor far in reverse and 0.95·φs in forward (manual, section 2.1).
///
/// Both limits are hyperbolas; they are written as the quotient of their quadratics, so that zero stays exactly zero.
#[inline(always)]
fn effective_body<P: Real, R: Over<P>>(p: &Prepared<P>, vbs: R) -> R {
    let floor = -vbs.lift(p.vbsc);
    let t1 = ((vbs + floor - 0.001).sq() + floor * 0.004).sqrt();
    let low = floor * vbs * 2.0 / (floor - vbs + 0.001 + t1);
    let top = vbs.lift(p.phi) * 0.95;
    let t1 = ((top - low - 0.001).sq() + top * 0.004).sqrt();
    top * low * 2.0 / (top + low + 0.001 + t1)
}

impl<R: Number> Threshold<R> {
    /// Works out the threshold at a bias with `vds ≥ 0`.
    ///
    /// ```text
    /// Vth = VTH0 + (K1ox·√(φ−Vbs) − K1·√φ)·√(1+LPEB/L) − K2ox·Vbs + pocket + narrow width
    ///       − charge sharing − DIBL·Vds + temperature − DITS
    /// n   = 1 + (NFACTOR·εsi/Xdep + (CDSC + CDSCB·Vbs + CDSCD·Vds)·θ + CIT)/Coxe
    /// Vgsteff = n·vt·ln(1+exp(m*·Vgst/(n·vt))) / (m* + n·Coxe/Cdep0·exp((Voff′ − (1−m*)·Vgst)/(n·vt)))
    /// ```
    ///
    /// The exponents are not clamped at ±34 as in the released code; values differ by less than 1e−15 relative.
    ///
    /// Source: BSIM4.8.0 manual, sections 2.2 to 2.6 and 3.1.
    #[inline(always)]
    pub fn at<P: Real>(p: &Prepared<P>, vgs: R, vds: R, vbs: R) -> Self
    where
        R: Over<P>,
    {
        let vbseff = effective_body(p, vbs);
        let phis = -(vbseff - p.phi);
        let sqrt_phis = phis.sqrt();
        let xdep = sqrt_phis * p.xdep0_over;
        let root_xdep = xdep.sqrt();

        let lt1 = root_xdep * p.factor1 * folded(vbseff * p.dvt2, -0.5, (1.0, 3.0), (3.0, 8.0));
        let theta0 = theta(vds.lift(p.dvt1l) / lt1);
        let short = theta0 * p.dvt0 * p.v0;
        let narrow_short = if p.dvt0w.val() == 0.0 {
            vds.like(0.0)
        } else {
            let ltw = root_xdep * p.factor1 * folded(vbseff * p.dvt2w, -0.5, (1.0, 3.0), (3.0, 8.0));
            theta(vds.lift(p.dvt1wl) / ltw) * p.dvt0w * p.v0
        };
        let dibl = vbseff * p.etab + p.eta0;
        let dibl = choose!(dibl.below(1e-4), (-dibl + 2e-4) / (dibl * -2e4 + 3.0), dibl);
        let body = (sqrt_phis * p.k1ox - vds.lift(p.k1) * p.sqrt_phi) * p.lpe_vb - vbseff * p.k2ox;
        let width = (vbseff * p.k3b + p.k3) * p.narrow;
        let mut vth = body + p.vth0 - short - narrow_short + width + p.t1_const + vbseff * p.kt2_tr
            - dibl * p.theta0vb0 * vds;

        let cdep = vds.lift(p.nfactor_eps) / xdep;
        let coupling = vbseff * p.cdscb + vds * p.cdscd + p.cdsc;
        let x = (cdep + coupling * theta0 + p.cit) / p.coxe;
        let n = folded(x, -0.5, (1.0, 3.0), (3.0, 8.0));

        if p.dvtp0.val() > 0.0 {
            let reach = ((-(vds * p.dvtp1)).exp() + 1.0) * p.dvtp0 + p.leff;
            vth = vth - n * p.vt_dits * (vds.lift(p.leff) / reach).ln();
        }
        if p.dvtp4.val() != 0.0 && p.dvtp2.val() != 0.0 {
            vth = vth - (vds * p.dvtp4).tanh() * p.dvtp2;
        }

        let vgs_eff = effective_gate(p.poly, vgs);
        let vgst = vgs_eff - vth;
        let nvt = n * p.vt;
        let up = vgst * p.mstar / nvt;
        let m1 = vgst - vgst * p.mstar;
        let down = (-m1 + p.voffcbn) / nvt;
        let vgsteff = nvt * up.softplus() / (n * p.coxe_over_cdep0 * down.exp() + p.mstar);
        Self { vbseff, sqrt_phis, xdep, vth, n, vgs_eff, vgsteff }
    }
}
