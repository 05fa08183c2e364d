//! The semiconductor under the gate: silicon, or what a card with `mtrlmod = 1` describes.

use super::silicon::{EPS_SI, MODEL_EPS0, MODEL_KB_OVER_Q, band_gap, intrinsic_density};
use super::table::Id;
use super::values::Card;
use crate::device::dual::Real;

/// Permittivity, band gap and carrier density of the channel material.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Material {
    /// Permittivity, F/m.
    pub permittivity: f64,
    /// `(BG0SUB, TBGASUB, TBGBSUB, NI0SUB)` of a material that is not the model's silicon.
    other: Option<[f64; 4]>,
}

/// Temperature at which NI0SUB is stated, K.
const REFERENCE_K: f64 = 300.15;

impl Material {
    /// What a card stands on.
    pub fn of(card: &Card) -> Self {
        if card.flag(Id::Mtrlmod) == 0 {
            return Self { permittivity: EPS_SI, other: None };
        }
        let other = [Id::Bg0sub, Id::Tbgasub, Id::Tbgbsub, Id::Ni0sub].map(|id| card.base(id));
        Self { permittivity: card.base(Id::Epsrsub) * MODEL_EPS0, other: Some(other) }
    }

    /// Band gap, eV: `BG0SUB − TBGASUB·T²/(T + TBGBSUB)`.
    ///
    /// Source: BSIM4.8.0 manual, section 13 (Varshni's law).
    pub fn gap<P: Real>(&self, t: P) -> P {
        let Some([gap0, a, b, _]) = self.other else { return band_gap(t) };
        t.sq() * -a / (t + b) + gap0
    }

    /// Intrinsic carrier density, cm⁻³: `NI0SUB·(T/300.15)^1.5·exp(Eg(300.15)/2vt(300.15) − Eg(T)/2vt(T))`.
    ///
    /// Source: the law of mass action; BSIM4.8.0 manual, section 13, states the same at 300.15 K.
    pub fn intrinsic<P: Real>(&self, t: P) -> P {
        let Some([.., ni0]) = self.other else { return intrinsic_density(t) };
        let half_gap_over = |t: P| self.gap(t) / (t * (2.0 * MODEL_KB_OVER_Q));
        let ratio = t / REFERENCE_K;
        ratio * ratio.sqrt() * ni0 * (half_gap_over(P::of(REFERENCE_K)) - half_gap_over(t)).exp()
    }
}
