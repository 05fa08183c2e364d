//! What a choice must meet, and how far a candidate is from it.

use serde::{Deserialize, Serialize};

use super::error::{OptimumError, range};

/// A limit of a choice.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Limit {
    /// Droop awake, V; over header and footer together.
    Droop,
    /// Time to ready, s.
    Wake,
    /// Largest current while waking, A.
    InRush,
    /// Oxide voltage of a switch, gate to drain or source, V: asleep, awake, and on the way where a wake-up is computed.
    Oxide,
    /// Field it means over the electrical thickness, V/m.
    Field,
    /// Voltage between drain and bulk of a switch, V; when, as for the oxide.
    DrainBulk,
    /// Area of the switches, m².
    Area,
    /// Span left to the block asleep, V: what keeps stored values, margin included. At least this.
    Span,
    /// The same against the corner's own retention voltage and a margin, V.
    Retention,
    /// Power asleep, W.
    Standby,
}

impl Limit {
    /// All, in report order.
    pub const ALL: [Self; 10] = [
        Self::Droop,
        Self::Wake,
        Self::InRush,
        Self::Oxide,
        Self::Field,
        Self::DrainBulk,
        Self::Area,
        Self::Span,
        Self::Retention,
        Self::Standby,
    ];

    /// As reports write it.
    pub fn name(self) -> &'static str {
        match self {
            Self::Droop => "droop",
            Self::Wake => "wake",
            Self::InRush => "in_rush",
            Self::Oxide => "oxide",
            Self::Field => "field",
            Self::DrainBulk => "drain_bulk",
            Self::Area => "area",
            Self::Span => "span",
            Self::Retention => "retention",
            Self::Standby => "standby",
        }
    }

    /// Unit of its value.
    pub fn unit(self) -> &'static str {
        match self {
            Self::Droop | Self::Oxide | Self::DrainBulk | Self::Span | Self::Retention => "V",
            Self::Wake => "s",
            Self::InRush => "A",
            Self::Field => "V/m",
            Self::Area => "m²",
            Self::Standby => "W",
        }
    }

    /// What is left to the limit, relative to it; below zero when it is broken.
    pub fn margin(self, value: f64, allowed: f64) -> f64 {
        if self.is_least() { value / allowed - 1.0 } else { 1.0 - value / allowed }
    }

    /// Whether it is a lower limit.
    pub fn is_least(self) -> bool {
        matches!(self, Self::Span | Self::Retention)
    }

    /// Whether it is one of the wake-up alone.
    pub fn is_of_waking(self) -> bool {
        matches!(self, Self::Wake | Self::InRush)
    }

    /// Whether the way up may add to it.
    pub fn is_of_stress(self) -> bool {
        matches!(self, Self::Oxide | Self::Field | Self::DrainBulk)
    }
}

/// Limits of a choice; those left out do not bind.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ChooseLimits {
    /// Largest droop awake, V.
    #[serde(default)]
    pub droop_v: Option<f64>,
    /// Longest time to ready, s.
    #[serde(default)]
    pub wake_s: Option<f64>,
    /// Largest current while waking, A.
    #[serde(default)]
    pub in_rush_a: Option<f64>,
    /// Largest oxide voltage, V.
    #[serde(default)]
    pub oxide_v: Option<f64>,
    /// Largest oxide field, V/m.
    #[serde(default)]
    pub field_v_m: Option<f64>,
    /// Largest voltage between drain and bulk, V.
    #[serde(default)]
    pub drain_bulk_v: Option<f64>,
    /// Largest area, m².
    #[serde(default)]
    pub area_m2: Option<f64>,
    /// Smallest span left asleep, V.
    #[serde(default)]
    pub span_v: Option<f64>,
    /// Smallest span left asleep above each corner's retention voltage, V; zero or more. The voltages stand beside the limits.
    #[serde(default)]
    pub retention_margin_v: Option<f64>,
    /// Largest power asleep, W.
    #[serde(default)]
    pub standby_w: Option<f64>,
}

impl ChooseLimits {
    /// The value allowed; of retention the margin alone.
    pub fn allowed(&self, limit: Limit) -> Option<f64> {
        match limit {
            Limit::Droop => self.droop_v,
            Limit::Wake => self.wake_s,
            Limit::InRush => self.in_rush_a,
            Limit::Oxide => self.oxide_v,
            Limit::Field => self.field_v_m,
            Limit::DrainBulk => self.drain_bulk_v,
            Limit::Area => self.area_m2,
            Limit::Span => self.span_v,
            Limit::Retention => self.retention_margin_v,
            Limit::Standby => self.standby_w,
        }
    }

    /// Checks every number.
    ///
    /// # Errors
    /// A limit that is not a finite number above zero; a margin may be zero.
    pub fn check(&self) -> Result<(), OptimumError> {
        for l in Limit::ALL {
            let Some(v) = self.allowed(l) else { continue };
            let (fits, wanted) = if l == Limit::Retention {
                (v >= 0.0, "want a finite number, zero or more")
            } else {
                (v > 0.0, "want a finite number above zero")
            };
            if !(fits && v.is_finite()) {
                return range(&format!("limit of {}", l.name()), format!("{v} {}", l.unit()), wanted);
            }
        }
        Ok(())
    }
}

/// A limit of a candidate where it is nearest: which corner, and what is left.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Binding {
    /// The limit.
    pub limit: Limit,
    /// The corner.
    pub corner: String,
    /// Value there, SI.
    pub value: f64,
    /// Value allowed, SI.
    pub allowed: f64,
    /// What is left, relative to the limit; below zero when it is broken.
    pub margin: f64,
}

impl Binding {
    /// In words.
    pub fn words(&self) -> String {
        let Self { limit, corner, value, allowed, margin } = self;
        let (name, unit) = (limit.name(), limit.unit());
        let sense = if limit.is_least() { "at least" } else { "at most" };
        let state = if *margin < 0.0 { "is broken" } else { "holds" };
        let by = 100.0 * margin.abs();
        format!(
            "{name} {state} at corner `{corner}`: {value:.4e} {unit}, {sense} {allowed:.4e} {unit} asked; {by:.3} % of the limit"
        )
    }
}
