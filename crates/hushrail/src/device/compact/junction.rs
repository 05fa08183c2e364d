//! A junction between diffusion and body: diffusion, generation, band-to-band tunnelling.

use super::gate::{HBAR, M0, Q};
use crate::device::bsim4::silicon::EPS_SI;
use crate::device::dual::{Over, Real, choose};

/// Tunnelling mass of silicon in units of the free electron's (Chen et al., *IEEE Electron Device Lett.* 8 (1987) 515).
const TUNNEL_MASS: f64 = 0.2;

/// One junction of one device at its temperature.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Junction<P> {
    /// Saturation current of diffusion, A; follows ni².
    pub diffusion_a: P,
    /// Generation current at zero bias, A; follows ni.
    pub generation_a: P,
    /// Thermal voltage, V.
    pub vt: P,
    /// Built-in voltage between diffusion and body, V.
    pub built_in_v: P,
    /// Band-to-band tunnelling.
    pub tunnelling: Option<BandToBand<P>>,
}

/// Band-to-band tunnelling in the junction at the gate edge.
///
/// ```text
/// J = A·E·V/√Eg·exp(−B·Eg^1.5/E),   E = √(2·q·N·(V + Vbi)/εsi)
/// A = √(2·m)·q³/(4·π³·ħ²),   B = 4·√(2·m)/(3·q·ħ),   m = 0.2·m0,   Eg in J
/// ```
///
/// for a one-sided abrupt junction against the doping `N` at a reverse voltage `V`.
///
/// # Source
/// Taur and Ning, *Fundamentals of Modern VLSI Devices*, section on band-to-band tunnelling; Roy, Mukhopadhyay,
/// Mahmoodi-Meimand, *Proc. IEEE* 91 (2003) 305–327.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct BandToBand<P> {
    /// A·area/√Eg, A·m/V².
    pub scale: P,
    /// B·Eg^1.5, V/m.
    pub b_v_m: P,
    /// 2·q·N/εsi, V/m².
    pub field_sq: P,
    /// Built-in voltage against the doping N, V.
    pub built_in_v: P,
}

/// Field of the exponent, `B·Eg^1.5`, V/m, for a band gap in eV.
pub fn band_to_band_field<P: Real>(gap_ev: P) -> P {
    let mass = TUNNEL_MASS * M0;
    gap_ev * gap_ev.sqrt() * (4.0 * (2.0 * mass).sqrt() * Q.sqrt() / (3.0 * HBAR))
}

impl<P: Real> BandToBand<P> {
    /// For an area (m²) against a doping (m⁻³), with band gap (eV) and built-in voltage (V).
    pub fn new(area_m2: P, doping_m3: P, gap_ev: P, built_in_v: P) -> Self {
        let mass = TUNNEL_MASS * M0;
        let a = (2.0 * mass).sqrt() * Q.powi(3) / (4.0 * std::f64::consts::PI.powi(3) * HBAR * HBAR);
        Self {
            scale: area_m2 * a / (gap_ev * Q).sqrt(),
            b_v_m: band_to_band_field(gap_ev),
            field_sq: doping_m3 * (2.0 * Q / EPS_SI),
            built_in_v,
        }
    }

    /// Current from body to diffusion at the forward voltage `v`, A. Forward of zero the field is held, which leaves a
    /// conductance that the diode hides.
    #[inline(always)]
    fn current<R: Over<P>>(&self, v: R) -> R {
        let across = choose!(v.below(0.0), -v, v.like(0.0));
        let field = ((across + self.built_in_v) * self.field_sq).sqrt();
        v * field * (-(v.lift(self.b_v_m) / field)).exp() * self.scale
    }
}

impl<P: Real> Junction<P> {
    /// Current from body to diffusion at the forward voltage `v`, A.
    ///
    /// ```text
    /// I = Id·(exp(v/vt) − 1) + Ig·(exp(v/2vt) − 1)·√(1 − v/Vbi) + tunnelling
    /// ```
    ///
    /// The second term is generation in the depletion layer (reverse) and recombination there (forward); the root is the
    /// width of the layer, held open by 4 vt where it would close.
    ///
    /// # Source
    /// Sah, Noyce, Shockley, *Proc. IRE* 45 (1957) 1228–1243; Sze and Ng, *Physics of Semiconductor Devices*, chapter 2.
    #[inline(always)]
    pub fn current<R: Over<P>>(&self, v: R) -> R {
        let mut i = v.like(0.0);
        if self.diffusion_a.val() > 0.0 {
            i = i + (v / self.vt).exp_m1() * self.diffusion_a;
        }
        if self.generation_a.val() > 0.0 {
            let open = -(v / self.built_in_v) + 1.0;
            let close = v.lift(self.vt) / self.built_in_v * 4.0;
            let width = ((open + (open.sq() + close.sq()).sqrt()) * 0.5).sqrt();
            i = i + (v / (self.vt * 2.0)).exp_m1() * width * self.generation_a;
        }
        if let Some(t) = &self.tunnelling {
            i = i + t.current(v);
        }
        i
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 36.209 MV/cm for 0.2 m0 and 1.12 eV, from the printed formula by an independent program; five digits printed.
    #[test]
    fn field_of_the_exponent_is_that_of_the_triangular_barrier() {
        assert!((band_to_band_field(1.12) / 36.209e8 - 1.0).abs() < 2e-5);
    }

    /// 5e18 cm⁻³ and 2 V across: 1.76 MV/cm, and tunnelling of the order of 1 nA in 1 µm² (the order Roy et al. plot).
    #[test]
    fn tunnelling_grows_steeply_with_reverse_bias() {
        let t = BandToBand::new(1e-12, 5e24, 1.12, 1.0);
        let field = (2.0 * t.field_sq).sqrt();
        assert!((field / 1.759e8 - 1.0).abs() < 1e-3, "{field}");
        let i: f64 = -t.current(-1.0);
        assert!(i > 1e-10 && i < 1e-8, "{i}");
        assert!(-t.current(-1.5) > 5.0 * i);
        assert_eq!(t.current::<f64>(0.0), 0.0);
    }
}
