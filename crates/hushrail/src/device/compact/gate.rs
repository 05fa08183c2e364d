//! Direct tunnelling through the gate oxide, at the overlapped edges and over the channel.

use crate::device::dual::{Over, Real, choose};

/// Elementary charge, C; exact since the SI of 2019.
pub(super) const Q: f64 = 1.602176634e-19;
/// Reduced Planck constant, J·s; exact since the SI of 2019 (h/2π).
pub(super) const HBAR: f64 = 1.054571817e-34;
/// Rest mass of the electron, kg (CODATA 2018).
pub(super) const M0: f64 = 9.1093837015e-31;

/// Constants of direct tunnelling for one device.
///
/// ```text
/// J = A·(V/t)²·exp(−B·t·h(V/φb)/φb),   h(z) = (1 − (1 − z)^1.5)/z
/// A = q²/(16·π²·ħ·φb),   B = 4·√(2·m·q)·φb^1.5/(3·ħ)
/// ```
///
/// with the barrier `φb` in V, so that `A` is in A/V² and `B` in V/m. Above `V = φb` the barrier is a triangle
/// (Fowler-Nordheim): `h = 1/z`; value and slope go on there.
///
/// # Source
/// Schuegraf and Hu, *IEEE Trans. Electron Devices* 41 (1994) 761–767; as used by Roy, Mukhopadhyay, Mahmoodi-Meimand,
/// *Proc. IEEE* 91 (2003) 305–327.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Tunnel<P> {
    /// A/t², S/m²/V.
    pub a_t2: P,
    /// B·t/φb, a number.
    pub exponent: P,
    /// Barrier φb, V.
    pub barrier_v: P,
    /// Area of one overlap, m².
    pub edge_m2: P,
    /// Half the area of the channel, m².
    pub half_channel_m2: P,
    /// Voltage of the depletion charge in the oxide at threshold, V.
    pub depletion_v: P,
}

/// `A = q²/(16·π²·ħ·φb)`, A/V².
pub fn tunnel_a<P: Real>(barrier_v: P) -> P {
    (barrier_v * (16.0 * std::f64::consts::PI.powi(2) * HBAR / (Q * Q))).recip()
}

/// `B = 4·√(2·m·q)·φb^1.5/(3·ħ)`, V/m, for a mass in units of the free electron's.
pub fn tunnel_b<P: Real>(barrier_v: P, mass: P) -> P {
    (mass * (2.0 * M0 * Q)).sqrt() * barrier_v * barrier_v.sqrt() * (4.0 / (3.0 * HBAR))
}

impl<P: Real> Tunnel<P> {
    /// `exp(−B·t·h(z)/φb)` for a voltage from zero up.
    #[inline(always)]
    fn transmission<R: Over<P>>(&self, v: R) -> R {
        let z = v / self.barrier_v;
        let h = choose!(
            z.below(1.0 - 1e-9),
            {
                // (1 − s³)/(1 − s²) with s = √(1 − z): no cancellation at small z
                let s = (-z + 1.0).sqrt();
                (s + s.sq() + 1.0) / (s + 1.0)
            },
            z.recip()
        );
        (-(h * self.exponent)).exp()
    }

    /// Current from the gate into the diffusion below one overlap, A; `v` is gate minus diffusion.
    #[inline(always)]
    pub fn edge<R: Over<P>>(&self, v: R) -> R {
        let size = v.abs();
        v * size * self.a_t2 * self.edge_m2 * self.transmission(size)
    }

    /// Current from the gate into one end of the channel, A: half the area of the channel at the state of that end.
    ///
    /// `v` is gate minus diffusion, `charge_v` the inversion charge there over the oxide capacitance. One factor of the
    /// oxide voltage is replaced by `charge_v` (no carriers, no current) and the other by `v` (no voltage, no current), as in
    /// BSIM4 (manual, section 4.3.2).
    #[inline(always)]
    pub fn channel_end<R: Over<P>>(&self, v: R, charge_v: R) -> R {
        v * charge_v * self.a_t2 * self.half_channel_m2 * self.transmission(charge_v + self.depletion_v)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A equals the prefactors the BSIM4 manual prints for barriers of 3.1 V and 4.5 V; they carry six digits.
    #[test]
    fn prefactor_is_that_of_the_published_model() {
        assert!((tunnel_a::<f64>(3.1) / 4.97232e-7 - 1.0).abs() < 2e-5);
        assert!((tunnel_a::<f64>(4.5) / 3.42537e-7 - 1.0).abs() < 2e-5);
    }

    /// The two shapes of the barrier meet with value and slope.
    #[test]
    fn trapezoid_and_triangle_meet() {
        let t = Tunnel {
            a_t2: 1.0,
            exponent: 20.0,
            barrier_v: 3.1,
            edge_m2: 1.0,
            half_channel_m2: 1.0,
            depletion_v: 0.0,
        };
        let h = 1e-6;
        let (below, at, above): (f64, f64, f64) = (t.edge(3.1 - h), t.edge(3.1), t.edge(3.1 + h));
        assert!(((above - at) / (at - below) - 1.0).abs() < 1e-3, "{below} {at} {above}");
    }
}
