//! Mechanical stress from the ends of the diffusion (sa, sb, sd, fingers).

use super::table::Id;
use super::values::Values;
use crate::device::Geometry;
use crate::device::dual::Real;

/// What stress changes.
#[derive(Debug, Clone, Copy)]
pub struct Stress<P> {
    /// Factor on mobility.
    pub mobility: P,
    /// Factor on saturation velocity.
    pub velocity: P,
    /// Shift of the signed zero-bias threshold, V.
    pub dvth0: P,
    /// Shift of K2.
    pub dk2: P,
    /// Shift of ETA0.
    pub deta0: P,
}

impl<P: Real> Stress<P> {
    /// The effect at temperature ratio `tr = T/Tnom − 1`; none unless sa and sb are above zero.
    ///
    /// ```text
    /// 1/SAeff = (1/NF)·Σ 1/(SA + L/2 + i·(SD + L)),     OD = 1/SAeff + 1/SBeff
    /// ΔVTH0  = KVTH0/Kstress_vth0 · (OD − ODref)         acts on the signed threshold
    /// ```
    ///
    /// Source: BSIM4.8.0 manual, section 14.
    pub fn of(v: &Values<P>, g: &Geometry<P>, tr: P) -> Self {
        let zero = P::of(0.0);
        let none = Self { mobility: P::of(1.0), velocity: P::of(1.0), dvth0: zero, dk2: zero, deta0: zero };
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "finger counts are small"
        )]
        let fingers = g.fingers.val().round().max(1.0) as usize;
        if !(g.sa_m.val() > 0.0 && g.sb_m.val() > 0.0 && (fingers == 1 || g.sd_m.val() > 0.0)) {
            return none;
        }
        let half = g.length_m * 0.5;
        let (mut inv_a, mut inv_b) = (zero, zero);
        for i in 0..fingers {
            let along = (g.sd_m + g.length_m) * i as f64;
            inv_a = inv_a + (g.sa_m + half + along).recip() / fingers as f64;
            inv_b = inv_b + (g.sb_m + half + along).recip() / fingers as f64;
        }
        let od = inv_a + inv_b;
        let od_ref = (v[Id::Saref] + half).recip() + (v[Id::Sbref] + half).recip();
        let power = |x: P, n: P| if n.val() == 0.0 { P::of(1.0) } else { x.pow(n) };
        let w = v.size.wnew + v[Id::Wlod];
        let law = |l: Id, wd: Id, p: Id, ln: Id, wn: Id| {
            let (tl, tw) = (power(v.size.lnew, v[ln]), power(w, v[wn]));
            v[l] / tl + v[wd] / tw + v[p] / (tl * tw) + 1.0
        };
        let kvth = law(Id::Lkvth0, Id::Wkvth0, Id::Pkvth0, Id::Llodvth, Id::Wlodvth);
        let kvth = (kvth.sq() + 1e-9).sqrt();
        let ku =
            law(Id::Lku0, Id::Wku0, Id::Pku0, Id::Llodku0, Id::Wlodku0) * (v[Id::Tku0] * tr + 1.0) + 1e-9;
        let (rho, rho_ref) = (v[Id::Ku0] / ku * od, v[Id::Ku0] / ku * od_ref);
        let offset = od - od_ref;
        Self {
            mobility: (rho + 1.0) / (rho_ref + 1.0),
            velocity: (v[Id::Kvsat] * rho + 1.0) / (v[Id::Kvsat] * rho_ref + 1.0),
            dvth0: v[Id::Kvth0] / kvth * offset,
            dk2: v[Id::Stk2] / power(kvth, v[Id::Lodk2]) * offset,
            deta0: v[Id::Steta0] / power(kvth, v[Id::Lodeta0]) * offset,
        }
    }
}
