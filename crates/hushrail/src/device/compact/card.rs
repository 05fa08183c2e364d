//! The few parameters of a compact device, with units in their names and ranges that are checked.

use serde::{Deserialize, Serialize};

use super::generic::{self, Generic};
use super::params::{Param, Values};
use super::prepare::Prepared;
use super::{Compact, junction};
use crate::device::{Geometry, Polarity};
use crate::physics::{CELSIUS_ZERO_K, Kelvin};
use crate::read::source::{Place, ReadError, hint, nearest};

/// What a compact device is made of. Voltages are those of an n-channel device for both polarities: an enhancement
/// transistor has a positive `vt0_v`, n or p.
///
/// A TOML table of the same names is read as one; keys that are left out take the value named here, and where that is zero
/// or absent the effect is off.
///
/// # Example
/// ```
/// use hushrail::device::{Bias, Device, Geometry, compact::CompactCard};
/// use hushrail::physics::Kelvin;
/// let card = CompactCard::generic("generic 45 nm low power n")?;
/// let device = card.device(&Geometry::new(1e-6, 45e-9), Kelvin::from_celsius(25.0)?)?;
/// let off = |overdrive: f64| device.branches(Bias { vgs: -overdrive, vds: 1.1, vbs: 0.0 }).terminals()[0];
/// assert!(off(0.1) < off(0.0)); // super cut-off …
/// assert!(off(0.6) > off(0.0)); // … until GIDL takes over
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CompactCard {
    /// `n` or `p`.
    #[serde(with = "letter")]
    pub polarity: Polarity,
    /// Threshold without drain and body voltage, V: where the gate overdrive of strong inversion starts. It lies above
    /// a threshold read at a small constant current, usually by 50 mV to 100 mV.
    pub vt0_v: f64,
    /// Slope factor n in weak inversion at threshold: swing = n·kT/q·ln 10.
    pub slope_n: f64,
    /// Threshold lost per volt between drain and source (DIBL), V/V.
    pub dibl_v_v: f64,
    /// Body-effect coefficient γ, √V.
    pub body_sqrt_v: f64,
    /// Surface potential at threshold φ, V.
    pub phi_v: f64,
    /// Mobility at threshold, m²/(V·s).
    pub mobility_m2_vs: f64,
    /// Electrical oxide thickness, m.
    pub oxide_m: f64,
    /// Temperature the numbers hold at, °C; 27.
    #[serde(default = "nominal_c")]
    pub nominal_c: f64,
    /// Channel length at which `vt0_v` and `dibl_v_v` hold, m. With it both follow the length of a device; without, they are
    /// the same at every length.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub length_m: Option<f64>,
    /// Threshold change with temperature, V/K; −0.367 mV/K (BSIM4's KT1 = −0.11 V over 300.15 K).
    #[serde(default = "vt_temp_v_k")]
    pub vt_temp_v_k: f64,
    /// Exponent of T in the mobility; −1.5 (BSIM4's UTE).
    #[serde(default = "mobility_exponent")]
    pub mobility_exponent: f64,
    /// Loss of mobility per volt of gate overdrive θ, 1/V; 0.
    #[serde(default)]
    pub theta_1_v: f64,
    /// Saturation velocity, m/s; none.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub saturation_m_s: Option<f64>,
    /// Resistance of source and drain together times width, Ω·m; 0. (100 Ω·µm is 1e-4.)
    #[serde(default)]
    pub series_ohm_m: f64,
    /// GIDL prefactor A, S; 0, which switches GIDL off.
    #[serde(default)]
    pub gidl_a_s: f64,
    /// GIDL field B, V/m; 2.3e9.
    #[serde(default = "gidl_b_v_m")]
    pub gidl_b_v_m: f64,
    /// GIDL body factor C, V³; 0.5.
    #[serde(default = "gidl_c_v3")]
    pub gidl_c_v3: f64,
    /// GIDL band bending E, V; 0.8.
    #[serde(default = "gidl_e_v")]
    pub gidl_e_v: f64,
    /// Whether B follows the band gap, `B ∝ Eg^1.5`; true.
    #[serde(default = "yes")]
    pub gidl_follows_gap: bool,
    /// Generation current of a junction at zero bias over its area, A/m²; 0. Follows ni.
    #[serde(default)]
    pub generation_a_m2: f64,
    /// The same over its perimeter, A/m; 0.
    #[serde(default)]
    pub generation_a_m: f64,
    /// Saturation current of diffusion over the area, A/m²; 0. Follows ni².
    #[serde(default)]
    pub diffusion_a_m2: f64,
    /// Doping of the body against the drain at the gate edge, 1/m³; 0, which switches band-to-band tunnelling off.
    #[serde(default)]
    pub halo_m3: f64,
    /// Depth of the junction wall at the gate edge that tunnels, m; 0.
    #[serde(default)]
    pub junction_depth_m: f64,
    /// Gate over diffusion at each edge, m; 0.
    #[serde(default)]
    pub overlap_m: f64,
    /// Barrier of the oxide for the carriers of the channel, V (3.1 for electrons, 4.5 for holes in SiO2); none, which
    /// switches gate tunnelling off.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub tunnel_barrier_v: Option<f64>,
    /// Tunnelling mass in the oxide, in free electron masses; 0.4.
    #[serde(default = "tunnel_mass")]
    pub tunnel_mass: f64,
    /// Thickness carriers tunnel through, m; that of `oxide_m` when not given.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub tunnel_oxide_m: Option<f64>,
}

fn nominal_c() -> f64 {
    27.0
}
fn vt_temp_v_k() -> f64 {
    -0.11 / 300.15 // KT1/TNOM, defaults of the BSIM4.8.0 manual
}
fn mobility_exponent() -> f64 {
    -1.5 // UTE, default of the BSIM4.8.0 manual
}
fn gidl_b_v_m() -> f64 {
    2.3e9 // BGIDL, default of the BSIM4.8.0 manual
}
fn gidl_c_v3() -> f64 {
    0.5 // CGIDL, default of the BSIM4.8.0 manual
}
fn gidl_e_v() -> f64 {
    0.8 // EGIDL, default of the BSIM4.8.0 manual
}
fn tunnel_mass() -> f64 {
    0.4 // Schuegraf and Hu, IEEE T-ED 41 (1994) 761, from memory
}
fn yes() -> bool {
    true
}

/// Polarity as a letter in text.
pub mod letter {
    use serde::{Deserialize, Deserializer, Serializer, de};

    use crate::device::Polarity;

    /// Writes `n` or `p`.
    ///
    /// # Errors
    /// Those of the serializer.
    pub fn serialize<S: Serializer>(p: &Polarity, s: S) -> Result<S::Ok, S::Error> {
        s.serialize_str(if *p == Polarity::N { "n" } else { "p" })
    }

    /// Reads `n` or `p`.
    ///
    /// # Errors
    /// Any other text.
    pub fn deserialize<'de, D: Deserializer<'de>>(d: D) -> Result<Polarity, D::Error> {
        match &*String::deserialize(d)? {
            "n" | "N" => Ok(Polarity::N),
            "p" | "P" => Ok(Polarity::P),
            other => Err(de::Error::unknown_variant(other, &["n", "p"])),
        }
    }
}

/// A card or a device that cannot be.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CompactError {
    /// A value outside what is possible.
    #[error("`{name}` is {value}; {wanted}")]
    Range {
        /// The quantity.
        name: String,
        /// What was found, with unit.
        value: String,
        /// What would be right.
        wanted: String,
    },
    /// A card has no such number.
    #[error("a compact device has no `{name}`{}", hint(.nearest.as_ref()))]
    Parameter {
        /// The name.
        name: String,
        /// The nearest known one.
        nearest: Option<String>,
    },
    /// No generic technology has the name.
    #[error("generic device `{name}` is not defined{}; known: {}", hint(.nearest.as_ref()), generic::NAMES.join(", "))]
    Unknown {
        /// The name.
        name: String,
        /// The nearest known one.
        nearest: Option<String>,
    },
}

impl CompactError {
    /// The same as an error of a place in a file.
    pub fn at(self, at: &Place) -> ReadError {
        let at = at.clone();
        match self {
            Self::Range { name, value, wanted } => ReadError::Range { at, name, value, wanted },
            Self::Parameter { name, nearest } => {
                ReadError::Unknown { at, kind: "parameter of a compact device", name, nearest }
            }
            Self::Unknown { name, nearest } => ReadError::Unknown {
                at,
                kind: "generic device",
                name,
                nearest: nearest.or_else(|| Some(generic::NAMES.join("`, `"))),
            },
        }
    }
}

pub(super) fn wrong(name: &str, value: String, wanted: impl Into<String>) -> CompactError {
    CompactError::Range { name: name.into(), value, wanted: wanted.into() }
}

impl CompactCard {
    /// Starting values of a generic technology, such as `generic 65 nm n`; see [`super::generic`].
    ///
    /// # Errors
    /// No such name; the message lists those there are.
    pub fn generic(name: &str) -> Result<Self, CompactError> {
        Generic::find(name).map(Generic::card).ok_or_else(|| CompactError::Unknown {
            name: name.to_owned(),
            nearest: nearest(name, generic::NAMES),
        })
    }

    /// The numbers a study may leave out at what they then are; NaN where it must give one.
    pub(super) fn bare(polarity: Polarity) -> Self {
        let must = f64::NAN;
        Self {
            polarity,
            vt0_v: must,
            slope_n: must,
            dibl_v_v: must,
            body_sqrt_v: must,
            phi_v: must,
            mobility_m2_vs: must,
            oxide_m: must,
            nominal_c: nominal_c(),
            length_m: None,
            vt_temp_v_k: vt_temp_v_k(),
            mobility_exponent: mobility_exponent(),
            theta_1_v: 0.0,
            saturation_m_s: None,
            series_ohm_m: 0.0,
            gidl_a_s: 0.0,
            gidl_b_v_m: gidl_b_v_m(),
            gidl_c_v3: gidl_c_v3(),
            gidl_e_v: gidl_e_v(),
            gidl_follows_gap: yes(),
            generation_a_m2: 0.0,
            generation_a_m: 0.0,
            diffusion_a_m2: 0.0,
            halo_m3: 0.0,
            junction_depth_m: 0.0,
            overlap_m: 0.0,
            tunnel_barrier_v: None,
            tunnel_mass: tunnel_mass(),
            tunnel_oxide_m: None,
        }
    }

    /// Checks every value against what is physically possible.
    ///
    /// # Errors
    /// The first value out of range, with name, value and range.
    pub fn check(&self) -> Result<(), CompactError> {
        for &p in Param::ALL {
            let row = p.row();
            if let Some(v) = self.get(p)
                && !(v >= row.low && v <= row.high)
            {
                let unit = if row.unit.is_empty() { String::new() } else { format!(" {}", row.unit) };
                return Err(wrong(row.name, format!("{v:?}{unit}"), row.wanted()));
            }
        }
        let (least, ..) = self.least_slope();
        if self.slope_n < least {
            return Err(wrong(
                "slope_n",
                format!("{:?}", self.slope_n),
                format!(
                    "want at least 1 + body_sqrt_v/(2·√phi_v) = {least:.3}: the depletion layer of `body_sqrt_v` alone \
                     costs that much"
                ),
            ));
        }
        for (name, v, unit, needs, other) in [
            ("halo_m3", self.halo_m3, "1/m³", "junction_depth_m", self.junction_depth_m > 0.0),
            ("overlap_m", self.overlap_m, "m", "tunnel_barrier_v", self.tunnel_barrier_v.is_some()),
            ("length_m", self.length_m.unwrap_or(0.0), "m", "body_sqrt_v", self.body_sqrt_v > 0.0),
        ] {
            if v > 0.0 && !other {
                let wanted = format!("it has no effect without `{needs}`: give that, or leave `{name}` out");
                return Err(wrong(name, format!("{v:?} {unit}"), wanted));
            }
        }
        Ok(())
    }

    /// The device of this card, ready to evaluate.
    ///
    /// Junction currents need the areas and perimeters of the geometry, as a netlist gives them; without there is only
    /// band-to-band tunnelling at the gate edge, which goes with the width. Stress and well proximity have no effect.
    ///
    /// # Errors
    /// A value of the card or of the geometry out of range, or a card that does not hold at the temperature.
    pub fn device(&self, geometry: &Geometry, temp: Kelvin) -> Result<Compact, CompactError> {
        self.check()?;
        for (name, v) in [("width", geometry.width_m), ("length", geometry.length_m)] {
            if !(v > 0.0 && v <= 0.02) {
                return Err(wrong(name, format!("{v:?} m"), "want a size above zero and below 2 cm"));
            }
        }
        for (name, v) in
            [("ad", geometry.ad_m2), ("as", geometry.as_m2), ("pd", geometry.pd_m), ("ps", geometry.ps_m)]
        {
            if !(v >= 0.0 && v.is_finite()) {
                return Err(wrong(name, format!("{v:?}"), "want zero or more"));
            }
        }
        if !geometry.delvto_v.is_finite() {
            return Err(wrong("delvto", format!("{:?} V", geometry.delvto_v), "want a finite voltage"));
        }
        if !(geometry.mobility_factor > 0.0 && geometry.mobility_factor.is_finite()) {
            return Err(wrong(
                "mulu0",
                format!("{:?}", geometry.mobility_factor),
                "want a factor above zero",
            ));
        }
        let prepared = Prepared::new(&Values::new(self, |_, v| v), geometry, temp.get());
        let hot = |name: &str, value: String| {
            let nominal = self.nominal_c;
            Err(wrong(
                &format!("{name} at {:.1} °C", temp.celsius()),
                value,
                format!(
                    "the card does not hold so far from its {nominal} °C; want a smaller step or a larger `phi_v`"
                ),
            ))
        };
        if !(prepared.phi.is_finite() && prepared.phi > 0.05) {
            return hot("phi_v", format!("{:.3} V", prepared.phi));
        }
        if !(prepared.most_a >= 0.0) {
            return hot("saturation_m_s", format!("{:.3e} A of largest current", prepared.most_a));
        }
        let source: &junction::Junction<f64> = &prepared.source;
        if let Some(t) = source.tunnelling
            && !(t.built_in_v > 0.0)
        {
            return hot("built-in voltage of `halo_m3`", format!("{:.3} V", t.built_in_v));
        }
        Ok(Compact { prepared })
    }

    /// Temperature of the numbers, K.
    pub(super) fn nominal_k(&self) -> f64 {
        self.nominal_c + CELSIUS_ZERO_K
    }
}
