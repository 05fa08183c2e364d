//! Low-field mobility and what surface roughness, phonons and charged impurities leave of it.

use super::prepare::Prepared;
use super::threshold::{Threshold, folded};
use crate::device::dual::{Over, Real, choose};

/// Constants of the seven published forms.
#[derive(Debug, Clone)]
#[expect(missing_docs, reason = "symbols of the manual, section 5.2")]
pub struct Mobility<P> {
    pub model: i64,
    /// U0 at temperature, with its length law, stress and well proximity, m²/Vs.
    pub u0: P,
    pub ua: P,
    pub ub: P,
    pub uc: P,
    pub ud: P,
    pub eu: P,
    pub ucs: P,
    /// `C0·(VTH0 − VFB − φs)`, V.
    pub vtfbphi1: P,
    /// `2·type·(PHIG − EASUB − Eg/2 + 0.45)` where the material is described, else 0, V.
    pub gate_shift: P,
    /// Vgsteff at `Vgse = Vth`, `Vds = Vbs = 0`, V; model 3 only.
    pub vgsteff_vth: P,
}

/// `ud·(v·toxe/(Vgsteff + 2·√(v² + 10⁻⁴)))²`: scattering by charge, screened by the channel.
#[inline(always)]
fn coulomb<P: Real, R: Over<P>>(p: &Prepared<P>, vgsteff: R, v: R) -> R {
    if p.mobility.ud.val() == 0.0 {
        return v.like(0.0);
    }
    let screened = (v.sq() + 0.0001).sqrt();
    let reach = (vgsteff + screened * 2.0).recip() * p.toxe;
    reach.sq() * p.mobility.ud * v.sq()
}

/// `(UA + UC·Vbs)·E^EU`.
#[inline(always)]
fn lateral<P: Real, R: Over<P>>(p: &Prepared<P>, volts: R, vbseff: R) -> R {
    let m = &p.mobility;
    let field = volts / p.toxe;
    let held = choose!(field.above(0.0), field.pow(volts.lift(m.eu)), volts.like(0.0));
    held * (vbseff * m.uc + m.ua)
}

/// Effective mobility, m²/Vs.
///
/// ```text
/// μ = U0·(1 − UP·exp(−L/LP)) / (1 + scattering)
/// 0, 4:  (UA + UC·Vbs)·E + UB·E² + Coulomb
/// 1, 5:  (UA·E + UB·E²)·(1 + UC·Vbs) + Coulomb
/// 2, 6:  (UA + UC·Vbs)·E^EU + Coulomb
/// 3:     (UA + UC·Vbs)·E^EU + UD/(½ + ½·Vgsteff/Vgsteff(Vth))^UCS,    E in MV/cm with the ⅙ of the effective field
/// E = (Vgsteff + 2·Vth)/TOXE in 0 and 1, (Vgsteff + C0·(VTH0 − VFB − φs))/TOXE in the others
/// ```
///
/// The Coulomb term holds Vth in 0 to 2 and C0·(VTH0 − VFB − φs) in 4 to 6. Where the material is described
/// (`mtrlmod = 1`), `2·type·(PHIG − EASUB − Eg/2 + 0.45)` is taken off the voltage in E.
///
/// Source: BSIM4.8.0 manual, section 5.2 (models 3 to 6 from memory of it).
#[inline(always)]
pub fn effective<P: Real, R: Over<P>>(p: &Prepared<P>, th: &Threshold<R>) -> R {
    let m = &p.mobility;
    let (vgsteff, vbseff, vth) = (th.vgsteff, th.vbseff, th.vth);
    let flat = vgsteff.lift(m.vtfbphi1);
    let (gate, charge) = match m.model {
        0 | 1 => (vth * 2.0, vth),
        2 => (flat, vth),
        _ => (flat, flat),
    };
    let volts = vgsteff + gate - m.gate_shift;
    let scattering = match m.model {
        2 | 6 => lateral(p, volts, vbseff) + coulomb(p, vgsteff, charge),
        3 => {
            let screen = (vgsteff / m.vgsteff_vth + 1.0) * 0.5;
            lateral(p, volts * (1e-8 / 6.0), vbseff) + vgsteff.lift(m.ud) / screen.pow(vgsteff.lift(m.ucs))
        }
        model => {
            let field = volts / p.toxe;
            let body = if model % 4 == 1 {
                field * (field * m.ub + m.ua) * (vbseff * m.uc + 1.0)
            } else {
                field * (vbseff * m.uc + m.ua + field * m.ub)
            };
            body + coulomb(p, vgsteff, charge)
        }
    };
    // far below −0.8 (unphysical cards) the denominator turns into a positive hyperbola
    let denominator = folded(scattering, -0.8, (0.6, 1.0), (7.0, 10.0));
    vgsteff.lift(m.u0) / denominator
}
