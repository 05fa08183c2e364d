//! The law of gate-induced drain leakage, usable with any channel law.

use crate::device::dual::{Over, Real, choose};

/// Constants of the law for one edge of one device.
///
/// ```text
/// I = A·W·x·exp(−B/x)·Vdb³/(C + Vdb³),   x = (Vdg − E)/(3·tox)
/// ```
///
/// `A` in S, `B` and `x` in V/m, `C` in V³, `E` in V, `W` and `tox` in m; `Vdg` is diffusion minus gate and `Vdb`
/// diffusion minus body, both of an n-channel device. The current flows from the diffusion into the body. Zero for
/// `x ≤ 0` and `Vdb ≤ 0`, where value and slope vanish.
///
/// # Source
/// Chen, Chan, Chen, Ko, Hu, *IEEE Electron Device Lett.* 8 (1987) 515–517 (`x·exp(−B/x)`, 3·tox for the permittivity
/// ratio); BSIM4.8.0 manual, section 6.2, gidlMod 0 (threshold `E` and the factor of the body).
///
/// # Example
/// ```
/// use hushrail::device::compact::GidlLaw;
/// let law = GidlLaw { a_s: 2e-4, b_v_m: 2.1e9, c_v3: 2e-4, e_v: 0.8, oxide_m: 1.8e-9 };
/// let i: f64 = law.current(1e-6, 1.5, 1.1);
/// assert!((i / 2.388352e-9 - 1.0).abs() < 1e-6); // A in one micrometre of width
/// assert_eq!(law.current::<f64>(1e-6, 0.7, 1.1), 0.0); // below the threshold of tunnelling
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GidlLaw<P> {
    /// Prefactor A, S.
    pub a_s: P,
    /// Field B, V/m.
    pub b_v_m: P,
    /// C of the body factor, V³.
    pub c_v3: P,
    /// Band bending E below which nothing tunnels, V.
    pub e_v: P,
    /// Electrical oxide thickness, m.
    pub oxide_m: P,
}

impl<P: Real> GidlLaw<P> {
    /// Current from the diffusion into the body, A.
    #[inline(always)]
    pub fn current<R: Over<P>>(&self, width_m: P, vdg: R, vdb: R) -> R {
        let zero = vdb.like(0.0);
        choose!(vdb.at_most(0.0), zero, {
            let x = (vdg - self.e_v) / (vdg.lift(self.oxide_m) * 3.0);
            // exp(−690) is below the smallest normal number
            choose!(x.at_most(self.b_v_m.val() / 690.0), zero, {
                let cube = vdb * vdb * vdb;
                x * (-(x.lift(self.b_v_m) / x)).exp() * self.a_s * width_m * cube / (cube + self.c_v3)
            })
        })
    }
}
