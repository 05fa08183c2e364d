//! What depends on geometry and temperature only, computed once per device and corner.

use super::gate::{Tunnel, tunnel_a, tunnel_b};
use super::gidl::GidlLaw;
use super::junction::{BandToBand, Junction};
use super::params::{Param, Values};
use crate::device::bsim4::silicon::{EPS_SI, band_gap, intrinsic_density};
use crate::device::dual::Real;
use crate::device::{Geometry, Polarity};
use crate::physics::KB_OVER_Q;

/// Permittivity of SiO2, F/m: 3.9 × 8.8541878128e-12 (CODATA 2018).
const EPS_OX: f64 = 3.9 * 8.8541878128e-12;
/// Loss of saturation velocity over the relative rise of temperature: AT/VSAT of the BSIM4.8.0 manual's defaults.
const VELOCITY_LOSS: f64 = 3.3e4 / 8e4;

/// All constants of one device.
#[derive(Debug, Clone)]
pub struct Prepared<P> {
    /// Channel type.
    pub polarity: Polarity,
    /// Thermal voltage kT/q, V.
    pub vt: P,
    /// Twice that, V.
    pub two_vt: P,
    /// Threshold at zero bias, V.
    pub vt0: P,
    /// Surface potential at threshold, V.
    pub phi: P,
    /// Body-effect coefficient, √V.
    pub gamma: P,
    /// Slope factor without the depletion layer: `a = n − γ/(2·√φ)` at the nominal temperature.
    pub linear: P,
    /// Barrier lowering η, V/V.
    pub dibl: P,
    /// Half of the rest `r = a − 1 − 2·η`.
    pub half_rest: P,
    /// Gate drive at threshold over flat band, `a·φ + γ·√φ`, V.
    pub flat_v: P,
    /// Specific current 2·n·β·vt², A.
    pub specific_a: P,
    /// (θ + µ·Cox·R/L)·n·vt.
    pub mobility_loss: P,
    /// W·Cox·vsat·2·n·vt, A: the largest current over the inversion level at the source; zero without saturation.
    pub most_a: P,
    /// 2·n·vt, V: oxide voltage of the inversion charge over its level.
    pub charge_v: P,
    /// Electrical oxide thickness, m.
    pub oxide_m: P,
    /// Width of all fingers, m.
    pub width_m: P,
    /// GIDL and GISL.
    pub gidl: Option<GidlLaw<P>>,
    /// Source junction.
    pub source: Junction<P>,
    /// Drain junction.
    pub drain: Junction<P>,
    /// Gate tunnelling.
    pub tunnel: Option<Tunnel<P>>,
}

/// Length law of charge sharing, `exp(−L/2l) + 2·exp(−L/l)` with `l = (εsi·tox/εox)·√(2·√φ/γ)`.
///
/// The natural length `l = √(εsi·tox·Xdep/εox)`, with the depletion depth `Xdep = 2·εsi·√φ/(γ·Cox)` that belongs to γ and φ.
///
/// Source: Liu et al., *IEEE Trans. Electron Devices* 40 (1993) 86–95.
fn sharing<P: Real>(length_m: P, oxide_m: P, phi: P, gamma: P) -> P {
    let natural = oxide_m * ((phi.sqrt() * 2.0 / gamma).sqrt() * (EPS_SI / EPS_OX));
    let x = (-(length_m / natural) * 0.5).exp();
    x + x.sq() * 2.0
}

impl<P: Real> Prepared<P> {
    /// Constants at a geometry, an oxide thickness and a temperature.
    ///
    /// ```text
    /// Vt0(T) = Vt0 + TC·(T − Tn)                       µ(T) = µ·(T/Tn)^k
    /// φ(T)   = φ·T/Tn − 3·UT·ln(T/Tn) − Eg(Tn)·T/Tn + Eg(T)
    /// vsat(T) = vsat·(1 − 0.4125·(T/Tn − 1))
    /// Ig(T)  = Ig·(T/Tn)^1.5·exp(x/2),   Id(T) = Id·(T/Tn)^3·exp(x),   x = Eg(Tn)/UT(Tn) − Eg(T)/UT
    /// ```
    ///
    /// With a reference length L0: `η(L) = η·s(L)/s(L0)` and `Vt0(L) = Vt0 + (Eg − φ)·(η(L0) − η(L))`, where `Eg − φ` is
    /// twice the drop from a junction to the channel at threshold.
    ///
    /// # Source
    /// BSIM4.8.0 manual, section 13 (threshold, mobility, velocity, band gap; ni and ni² laws of a junction); Bucher et al.,
    /// EKV 2.6 manual (φ); Liu et al., *IEEE Trans. Electron Devices* 40 (1993) 86–95 (length).
    pub fn new(card: &Values<P>, g: &Geometry<P>, temp_k: P) -> Self {
        let of = P::of;
        let get = |p: Param| card.get(p);
        let nominal = card.nominal_k;
        let oxide_m = get(Param::Oxide);
        let (gap0, vt_nominal) = (band_gap(nominal), KB_OVER_Q * nominal);
        let (gap, vt) = (band_gap(temp_k), temp_k * KB_OVER_Q);
        let (ratio, rise) = (temp_k / nominal, temp_k - nominal);
        let ln_ratio = ratio.ln();

        let (gamma, phi0) = (get(Param::Body), get(Param::Phi));
        let linear = get(Param::SlopeN) - gamma / (phi0.sqrt() * 2.0);
        let phi = ratio * phi0 - vt * ln_ratio * 3.0 - ratio * gap0 + gap;
        let mut dibl = get(Param::Dibl);
        let mut vt0 = rise * get(Param::VtTemp) + get(Param::Vt0) + g.delvto_v * card.polarity.sign();
        if let Some(l0) = card.given(Param::Length) {
            let at = |l: P| sharing(l, oxide_m, phi0, gamma);
            let here = dibl * at(g.length_m) / at(l0);
            vt0 = vt0 + (dibl - here) * (-phi0 + gap0);
            dibl = here;
        }
        // φ below zero is refused by the caller; the root must only not panic
        let root_phi = phi.sqrt();
        let slope = linear + gamma / (root_phi * 2.0);
        let cox = oxide_m.recip() * EPS_OX;
        let mobility =
            (ln_ratio * get(Param::MobilityExponent)).exp() * get(Param::Mobility) * g.mobility_factor;
        let beta_per_w = mobility * cox / g.length_m;
        let charge_v = slope * vt * 2.0;
        let velocity = -(ratio - 1.0) * VELOCITY_LOSS + 1.0;
        let most_a =
            card.given(Param::Saturation).map_or(of(0.0), |v| velocity * v * g.width_m * cox * charge_v);

        let gidl = (get(Param::GidlA).val() > 0.0).then(|| {
            let relative = gap / gap0;
            let follow = if card.gidl_follows_gap { relative * relative.sqrt() } else { of(1.0) };
            GidlLaw {
                a_s: get(Param::GidlA),
                b_v_m: follow * get(Param::GidlB),
                c_v3: get(Param::GidlC),
                e_v: get(Param::GidlE),
                oxide_m,
            }
        });

        let excess = -(gap / vt) + gap0 / vt_nominal;
        let diffusion = (excess + ln_ratio * 3.0).exp() * get(Param::Diffusion);
        let generation = (excess * 0.5 + ln_ratio * 1.5).exp();
        let edge_area = g.width_m * get(Param::JunctionDepth);
        let halo = get(Param::Halo);
        let tunnelling = (halo.val() > 0.0).then(|| {
            // the diffusion is degenerate: its Fermi level is at the band edge
            let built_in = gap * 0.5 + vt * (intrinsic_density(temp_k).recip() * (halo * 1e-6)).ln();
            BandToBand::new(edge_area, halo, gap, built_in)
        });
        let junction = |area: P, perimeter: P| Junction {
            diffusion_a: diffusion * area,
            generation_a: generation
                * (area * get(Param::GenerationArea) + perimeter * get(Param::GenerationEdge)),
            vt,
            built_in_v: (gap + phi) * 0.5,
            tunnelling,
        };

        let tunnel = card.given(Param::TunnelBarrier).map(|barrier_v| {
            let thick = card.given(Param::TunnelOxide).unwrap_or(oxide_m);
            Tunnel {
                a_t2: thick.sq().recip() * tunnel_a(barrier_v),
                exponent: thick * (tunnel_b(barrier_v, get(Param::TunnelMass)) / barrier_v),
                barrier_v,
                edge_m2: g.width_m * get(Param::Overlap),
                half_channel_m2: g.width_m * g.length_m * 0.5,
                depletion_v: gamma * root_phi,
            }
        });

        Self {
            polarity: card.polarity,
            vt,
            two_vt: vt * 2.0,
            vt0,
            phi,
            gamma,
            linear,
            dibl,
            half_rest: (linear - dibl * 2.0 - 1.0) * 0.5,
            flat_v: linear * phi + gamma * root_phi,
            specific_a: slope * 2.0 * beta_per_w * g.width_m * vt.sq(),
            mobility_loss: (mobility * cox * get(Param::Series) / g.length_m + get(Param::Theta))
                * slope
                * vt,
            most_a,
            charge_v,
            oxide_m,
            width_m: g.width_m,
            gidl,
            source: junction(g.as_m2, g.ps_m),
            drain: junction(g.ad_m2, g.pd_m),
            tunnel,
        }
    }
}
