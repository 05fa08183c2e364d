//! Generic technologies: starting values from the literature for planning, **not** data of any process.
//!
//! Each name ends in its channel type: `generic 130 nm n`, `generic 130 nm p` and so on; [`NAMES`] lists them. Replace
//! numbers by measured or simulated ones as they become known: threshold, slope and DIBL first, then GIDL.
//!
//! Where the numbers come from:
//!
//! - 45 nm low power and 65 nm: threshold, body coefficient, oxide and GIDL constants of the predictive cards of Zhao and Cao
//!   (*IEEE Trans. Electron Devices* 53 (2006) 2816–2823), rounded; the doping of the same 45 nm card gives φ and the halo.
//!   Their drain-induced barrier lowering and swing parameters have another meaning, so those come from below. The
//!   p-channel threshold at 65 nm is the n-channel's less the difference the 45 nm cards have.
//! - 130 nm and 28 nm: threshold, oxide and doping of the usual order for the node, from memory; GIDL constants of the cards
//!   above, whose authors use the same at both nodes.
//! - Slope factor 1.4 to 1.6 (swing 83 to 95 mV a decade at 300 K) and DIBL 60 to 130 mV/V: ranges of planar bulk devices,
//!   common practice without one source; DIBL grows as the node shrinks.
//! - Body coefficient where no card gives it: `√(2·q·εsi·N)/Cox` of the doping.
//! - Mobility of the order of the universal mobility at 1 MV/cm (Takagi et al., *IEEE Trans. Electron Devices* 41 (1994)
//!   2357–2362, from memory); saturation velocity 1e5 m/s for electrons, 8e4 m/s for holes; series resistance
//!   200 Ω·µm and 300 Ω·µm, the order of the international roadmap of 2001, from memory.
//! - Generation current 1e-4 A/m²: `q·ni·W/(2·τ)` with 60 nm and about 1 µs; the same over 0.1 µm of wall; diffusion
//!   `q·ni²·D/(N·L)` with N = 5e23 1/m³, L = 10 µm, D = 1e-3 m²/s.
//! - Barriers of 3.1 V and 4.5 V and the SiO2 they belong to as in the BSIM4.8.0 manual, section 4; the tunnelling thickness is
//!   the electrical one (this reproduces the order of the 45 nm card, 1e-10 A/µm), and 0.5 nm more at 28 nm, where
//!   a high-k stack takes off two to three decades (common practice).

use super::card::CompactCard;
use crate::device::Polarity;

/// All names.
pub const NAMES: [&str; 8] = [
    "generic 130 nm n",
    "generic 130 nm p",
    "generic 65 nm n",
    "generic 65 nm p",
    "generic 45 nm low power n",
    "generic 45 nm low power p",
    "generic 28 nm n",
    "generic 28 nm p",
];

/// What differs between the technologies; SI units.
pub(super) struct Generic {
    name: &'static str,
    vt0_v: f64,
    slope_n: f64,
    dibl_v_v: f64,
    body_sqrt_v: f64,
    phi_v: f64,
    mobility_m2_vs: f64,
    oxide_m: f64,
    length_m: f64,
    halo_m3: f64,
    junction_depth_m: f64,
    overlap_m: f64,
    tunnel_oxide_m: f64,
}

#[rustfmt::skip]
const ALL: [Generic; 8] = [
    Generic { name: NAMES[0], vt0_v: 0.38, slope_n: 1.40, dibl_v_v: 0.060, body_sqrt_v: 0.38, phi_v: 0.85, mobility_m2_vs: 0.0300,
              oxide_m: 2.30e-9, length_m: 130e-9, halo_m3: 1.5e24, junction_depth_m: 60e-9, overlap_m: 20e-9, tunnel_oxide_m: 2.30e-9 },
    Generic { name: NAMES[1], vt0_v: 0.36, slope_n: 1.42, dibl_v_v: 0.070, body_sqrt_v: 0.38, phi_v: 0.85, mobility_m2_vs: 0.0080,
              oxide_m: 2.35e-9, length_m: 130e-9, halo_m3: 1.5e24, junction_depth_m: 60e-9, overlap_m: 20e-9, tunnel_oxide_m: 2.35e-9 },
    Generic { name: NAMES[2], vt0_v: 0.43, slope_n: 1.50, dibl_v_v: 0.090, body_sqrt_v: 0.50, phi_v: 0.89, mobility_m2_vs: 0.0280,
              oxide_m: 1.85e-9, length_m:  65e-9, halo_m3: 2.5e24, junction_depth_m: 30e-9, overlap_m: 12e-9, tunnel_oxide_m: 1.85e-9 },
    Generic { name: NAMES[3], vt0_v: 0.40, slope_n: 1.55, dibl_v_v: 0.100, body_sqrt_v: 0.50, phi_v: 0.89, mobility_m2_vs: 0.0085,
              oxide_m: 1.95e-9, length_m:  65e-9, halo_m3: 2.5e24, junction_depth_m: 30e-9, overlap_m: 12e-9, tunnel_oxide_m: 1.95e-9 },
    Generic { name: NAMES[4], vt0_v: 0.62, slope_n: 1.50, dibl_v_v: 0.100, body_sqrt_v: 0.40, phi_v: 0.90, mobility_m2_vs: 0.0280,
              oxide_m: 1.80e-9, length_m:  45e-9, halo_m3: 3.2e24, junction_depth_m: 25e-9, overlap_m: 10e-9, tunnel_oxide_m: 1.80e-9 },
    Generic { name: NAMES[5], vt0_v: 0.59, slope_n: 1.55, dibl_v_v: 0.110, body_sqrt_v: 0.40, phi_v: 0.90, mobility_m2_vs: 0.0090,
              oxide_m: 1.82e-9, length_m:  45e-9, halo_m3: 3.2e24, junction_depth_m: 25e-9, overlap_m: 10e-9, tunnel_oxide_m: 1.82e-9 },
    Generic { name: NAMES[6], vt0_v: 0.50, slope_n: 1.55, dibl_v_v: 0.120, body_sqrt_v: 0.40, phi_v: 0.91, mobility_m2_vs: 0.0250,
              oxide_m: 1.50e-9, length_m:  30e-9, halo_m3: 4.0e24, junction_depth_m: 20e-9, overlap_m:  6e-9, tunnel_oxide_m: 2.00e-9 },
    Generic { name: NAMES[7], vt0_v: 0.48, slope_n: 1.60, dibl_v_v: 0.130, body_sqrt_v: 0.40, phi_v: 0.91, mobility_m2_vs: 0.0100,
              oxide_m: 1.55e-9, length_m:  30e-9, halo_m3: 4.0e24, junction_depth_m: 20e-9, overlap_m:  6e-9, tunnel_oxide_m: 2.05e-9 },
];

impl Generic {
    /// The technology of a name; case and surrounding blanks do not count.
    pub(super) fn find(name: &str) -> Option<&'static Self> {
        ALL.iter().find(|g| g.name.eq_ignore_ascii_case(name.trim()))
    }

    /// Its card.
    pub(super) fn card(&self) -> CompactCard {
        let n_channel = self.name.ends_with('n');
        let of = |n: f64, p: f64| if n_channel { n } else { p };
        CompactCard {
            polarity: if n_channel { Polarity::N } else { Polarity::P },
            vt0_v: self.vt0_v,
            slope_n: self.slope_n,
            dibl_v_v: self.dibl_v_v,
            body_sqrt_v: self.body_sqrt_v,
            phi_v: self.phi_v,
            mobility_m2_vs: self.mobility_m2_vs,
            oxide_m: self.oxide_m,
            nominal_c: 27.0,
            length_m: Some(self.length_m),
            vt_temp_v_k: -0.5e-3, // between the default of BSIM4 (−0.37 mV/K) and textbook −1 mV/K
            mobility_exponent: -1.5,
            theta_1_v: 0.3, // order of universal mobility's fall, from memory
            saturation_m_s: Some(of(1e5, 8e4)),
            series_ohm_m: of(2e-4, 3e-4),
            gidl_a_s: 2e-4,
            gidl_b_v_m: 2.1e9,
            gidl_c_v3: 2e-4,
            gidl_e_v: 0.8,
            gidl_follows_gap: true,
            generation_a_m2: 1e-4,
            generation_a_m: 1e-11,
            diffusion_a_m2: 7e-9,
            halo_m3: self.halo_m3,
            junction_depth_m: self.junction_depth_m,
            overlap_m: self.overlap_m,
            tunnel_barrier_v: Some(of(3.1, 4.5)),
            tunnel_mass: of(0.4, 0.32),
            tunnel_oxide_m: Some(self.tunnel_oxide_m),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_generic_card_passes_its_own_check() {
        for name in NAMES {
            CompactCard::generic(name).expect(name).check().expect(name);
        }
    }
}
