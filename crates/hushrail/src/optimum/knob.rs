//! Knobs: the numbers of a scheme that an optimum may turn.

use serde::{Deserialize, Serialize};

use super::error::{OptimumError, range};
use crate::standby::{Scheme, SwitchSpec};

/// A number of a scheme.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Knob {
    /// How far past its off rail the header's gate is driven asleep, V.
    HeaderOverdrive,
    /// The same of the footer, V.
    FooterOverdrive,
    /// How far past its on rail the header's gate is driven awake, V.
    HeaderBoost,
    /// The same of the footer, V.
    FooterBoost,
    /// Body of the header beyond its rail, reverse positive, V.
    HeaderWellBias,
    /// Body of the footer beyond its rail, reverse positive, V.
    FooterWellBias,
    /// Width of the header, m; fingers stay as they are.
    HeaderWidth,
    /// Width of the footer, m; fingers stay as they are.
    FooterWidth,
    /// Channel length of the header, m.
    HeaderLength,
    /// Channel length of the footer, m.
    FooterLength,
    /// N-wells of the block above their rail, V.
    NwellBias,
    /// P-wells of the block below their rail, V.
    PwellBias,
    /// Level at which a second supply holds the virtual supply, V.
    HeldSupply,
    /// Level at which a second supply holds the virtual ground, V.
    HeldGround,
    /// Gate of the clamp beside the header, V.
    HeaderClampGate,
    /// Gate of the clamp beside the footer, V.
    FooterClampGate,
}

impl Knob {
    /// All of them.
    pub const ALL: [Self; 16] = [
        Self::HeaderOverdrive,
        Self::FooterOverdrive,
        Self::HeaderBoost,
        Self::FooterBoost,
        Self::HeaderWellBias,
        Self::FooterWellBias,
        Self::HeaderWidth,
        Self::FooterWidth,
        Self::HeaderLength,
        Self::FooterLength,
        Self::NwellBias,
        Self::PwellBias,
        Self::HeldSupply,
        Self::HeldGround,
        Self::HeaderClampGate,
        Self::FooterClampGate,
    ];

    /// As studies and reports write it.
    pub fn name(self) -> &'static str {
        match self {
            Self::HeaderOverdrive => "header_overdrive",
            Self::FooterOverdrive => "footer_overdrive",
            Self::HeaderBoost => "header_boost",
            Self::FooterBoost => "footer_boost",
            Self::HeaderWellBias => "header_well_bias",
            Self::FooterWellBias => "footer_well_bias",
            Self::HeaderWidth => "header_width",
            Self::FooterWidth => "footer_width",
            Self::HeaderLength => "header_length",
            Self::FooterLength => "footer_length",
            Self::NwellBias => "nwell_bias",
            Self::PwellBias => "pwell_bias",
            Self::HeldSupply => "held_supply",
            Self::HeldGround => "held_ground",
            Self::HeaderClampGate => "header_clamp_gate",
            Self::FooterClampGate => "footer_clamp_gate",
        }
    }

    /// Unit of its values.
    pub fn unit(self) -> &'static str {
        if self.is_size() { "m" } else { "V" }
    }

    /// Sizes are turned by factors, voltages by steps.
    pub fn is_size(self) -> bool {
        matches!(self, Self::HeaderWidth | Self::FooterWidth | Self::HeaderLength | Self::FooterLength)
    }

    /// Whether the knob drives a gate past its off rail.
    pub fn is_overdrive(self) -> bool {
        matches!(self, Self::HeaderOverdrive | Self::FooterOverdrive)
    }

    /// Whether a voltage beyond the rails has to be made for it, so that zero needs no generator.
    pub fn is_made(self) -> bool {
        self.is_overdrive()
            || matches!(self, Self::HeaderWellBias | Self::FooterWellBias | Self::NwellBias | Self::PwellBias)
    }

    /// Whether the block itself is another one at another setting, so that its curve cannot be kept.
    pub fn moves_block(self) -> bool {
        matches!(self, Self::NwellBias | Self::PwellBias)
    }

    /// The setting as a variable of the search: the logarithm of a size, a voltage as it is.
    pub(super) fn variable(self, value: f64) -> f64 {
        if self.is_size() { value.ln() } else { value }
    }

    /// The setting of a variable.
    pub(super) fn value(self, variable: f64) -> f64 {
        if self.is_size() { variable.exp() } else { variable }
    }

    /// Puts a value into a scheme.
    ///
    /// # Errors
    /// The scheme lacks the part, or is refused with the value.
    pub fn put(self, scheme: &mut Scheme, value: f64) -> Result<(), OptimumError> {
        let name = scheme.name.clone();
        let missing = |part| OptimumError::NoPart { scheme: name.clone(), knob: self.name(), part };
        let header = |s: &mut Scheme, f: &dyn Fn(&mut SwitchSpec)| {
            s.header.as_mut().map(f).ok_or_else(|| missing("header"))
        };
        let footer = |s: &mut Scheme, f: &dyn Fn(&mut SwitchSpec)| {
            s.footer.as_mut().map(f).ok_or_else(|| missing("footer"))
        };
        match self {
            Self::HeaderOverdrive => header(scheme, &|s| s.overdrive_v = value)?,
            Self::FooterOverdrive => footer(scheme, &|s| s.overdrive_v = value)?,
            Self::HeaderBoost => header(scheme, &|s| s.boost_v = value)?,
            Self::FooterBoost => footer(scheme, &|s| s.boost_v = value)?,
            Self::HeaderWellBias => header(scheme, &|s| s.well_bias_v = value)?,
            Self::FooterWellBias => footer(scheme, &|s| s.well_bias_v = value)?,
            Self::HeaderWidth => header(scheme, &|s| s.width_m = value)?,
            Self::FooterWidth => footer(scheme, &|s| s.width_m = value)?,
            Self::HeaderLength => header(scheme, &|s| s.length_m = value)?,
            Self::FooterLength => footer(scheme, &|s| s.length_m = value)?,
            Self::NwellBias => scheme.nwell_bias_v = value,
            Self::PwellBias => scheme.pwell_bias_v = value,
            Self::HeldSupply => scheme.held_supply_v = Some(value),
            Self::HeldGround => scheme.held_ground_v = Some(value),
            Self::HeaderClampGate => {
                scheme.header_clamp.as_mut().ok_or_else(|| missing("header clamp"))?.gate_v = Some(value);
            }
            Self::FooterClampGate => {
                scheme.footer_clamp.as_mut().ok_or_else(|| missing("footer clamp"))?.gate_v = Some(value);
            }
        }
        Ok(scheme.check()?)
    }

    /// The scheme with a value.
    ///
    /// # Errors
    /// As [`put`](Self::put).
    pub fn at(self, scheme: &Scheme, value: f64) -> Result<Scheme, OptimumError> {
        let mut s = scheme.clone();
        self.put(&mut s, value)?;
        Ok(s)
    }

    /// The scheme with the knob at zero; what makes voltages goes with the last of them. `None` when zero is not such a setting.
    pub fn without(self, scheme: &Scheme) -> Option<Scheme> {
        if !self.is_made() {
            return None;
        }
        let mut s = self.at(scheme, 0.0).ok()?;
        let made =
            |x: &Option<SwitchSpec>| x.as_ref().is_some_and(|x| x.overdrive_v != 0.0 || x.well_bias_v != 0.0);
        let left = made(&s.header) || made(&s.footer) || s.nwell_bias_v != 0.0 || s.pwell_bias_v != 0.0;
        if !left {
            s.overhead_a = 0.0;
            s.pump_efficiency = None;
        }
        Some(s)
    }
}

/// A knob and the settings it may have.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct KnobRange {
    /// The knob.
    pub knob: Knob,
    /// Lowest setting.
    pub low: f64,
    /// Highest setting.
    pub high: f64,
}

impl KnobRange {
    /// Checks the range, and a scheme at both of its ends.
    ///
    /// # Errors
    /// Ends that are not finite or do not rise, sizes that are not above zero, a scheme that is refused at an end.
    pub fn check(&self, scheme: &Scheme) -> Result<(), OptimumError> {
        let (name, unit) = (self.knob.name(), self.knob.unit());
        if !(self.low < self.high && self.low.is_finite() && self.high.is_finite()) {
            let found = format!("{} to {} {unit}", self.low, self.high);
            return range(&format!("range of {name}"), found, "want a lower and a higher finite end");
        }
        if self.knob.is_size() && self.low <= 0.0 {
            return range(&format!("low end of {name}"), format!("{} m", self.low), "want a size above zero");
        }
        self.knob.at(scheme, self.low)?;
        self.knob.at(scheme, self.high)?;
        Ok(())
    }
}
