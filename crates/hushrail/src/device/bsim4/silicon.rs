//! Constants and silicon laws as the published model carries them, kept so that cards mean what their foundry extracted.

use crate::device::dual::{Number, Real};

/// k/q as the published model carries it, V/K. Kept so that cards mean what their foundry extracted.
pub const MODEL_KB_OVER_Q: f64 = 8.617087e-5;
/// Elementary charge as the published model carries it, C.
pub const MODEL_Q: f64 = 1.60219e-19;
/// Permittivity of vacuum as the published model carries it, F/m.
pub const MODEL_EPS0: f64 = 8.85418e-12;
/// Permittivity of silicon as the published model carries it, F/m.
pub const EPS_SI: f64 = 1.03594e-10;

/// Band gap of silicon as the model has it: `1.16 − 7.02e−4·T²/(T + 1108)` eV (BSIM4.8.0 manual, section 13).
pub fn band_gap<P: Real>(t: P) -> P {
    t.sq() * -7.02e-4 / (t + 1108.0) + 1.16
}

/// Intrinsic carrier density of silicon as the model has it, cm⁻³.
pub fn intrinsic_density<P: Real>(t: P) -> P {
    let ratio = t / 300.15;
    let vt = t * MODEL_KB_OVER_Q;
    ratio * ratio.sqrt() * 1.45e10 * (-band_gap(t) / (vt * 2.0) + 21.5565981).exp()
}

/// `1/(2·cosh x − 2)` with the model's tiny floor, the length law of all short-channel terms.
#[inline(always)]
pub(super) fn theta<R: Number>(x: R) -> R {
    let u = (-x).exp();
    u / ((-u + 1.0).sq() + u * (2.0 * 1.713908431e-15))
}
