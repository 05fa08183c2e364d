//! Schemes: everything done to a domain in standby.

use serde::{Deserialize, Serialize};

use crate::block::{Book, Collapsing};
use crate::cell::Levels;

/// Where the wells of the block are tied.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum WellTie {
    /// To the real rail: keeps its junction leakage, reverse-biases the collapsed devices.
    #[default]
    Real,
    /// To the virtual rail: collapses with it.
    Virtual,
}

/// One switch between a real and a virtual rail.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SwitchSpec {
    /// Transistor model, as the cards or an alias name it.
    pub model: String,
    /// Total width, m.
    pub width_m: f64,
    /// Channel length, m.
    pub length_m: f64,
    /// Width of one finger, m; the whole width when left out.
    #[serde(default)]
    pub finger_width_m: Option<f64>,
    /// How far past its off rail the gate is driven asleep, V.
    #[serde(default)]
    pub overdrive_v: f64,
    /// How far past its on rail the gate is driven awake, V.
    #[serde(default)]
    pub boost_v: f64,
    /// Body voltage beyond the rail, reverse positive, V.
    #[serde(default)]
    pub well_bias_v: f64,
    /// Length of the drain and source diffusions of a finger, m, for its junctions; none when left out.
    #[serde(default)]
    pub diffusion_m: Option<f64>,
    /// Gate to diffusion edge, m, for layout stress; none when left out.
    #[serde(default)]
    pub edge_m: Option<f64>,
}

impl SwitchSpec {
    /// Checks every number; the error is what is wrong, what was found, what would be right.
    ///
    /// # Errors
    /// Sizes that are not positive, a finger wider than the whole, voltages outside −1 V to 5 V.
    pub fn check(&self, what: &str) -> Result<(), (String, String, String)> {
        let wrong = |name: &str, value: String, wanted: &str| {
            Err((format!("{what} {name}"), value, wanted.to_owned()))
        };
        for (name, v) in [("width", self.width_m), ("length", self.length_m)] {
            if !(v > 0.0 && v.is_finite()) {
                return wrong(name, format!("{v} m"), "want a size above zero");
            }
        }
        if let Some(f) = self.finger_width_m
            && !(f > 0.0 && f <= self.width_m)
        {
            let wanted =
                format!("want a width above zero and not above the whole width ({} m)", self.width_m);
            return wrong("finger width", format!("{f} m"), &wanted);
        }
        let volts =
            [("overdrive", self.overdrive_v), ("boost", self.boost_v), ("well bias", self.well_bias_v)];
        for (name, v) in volts {
            if !(-1.0..=5.0).contains(&v) {
                return wrong(name, format!("{v} V"), "want -1 V to 5 V");
            }
        }
        for (name, v) in [("diffusion", self.diffusion_m), ("edge", self.edge_m)] {
            if v.is_some_and(|v| !(v > 0.0 && v < 1e-3)) {
                return wrong(name, format!("{v:?} m"), "want a length above zero");
            }
        }
        Ok(())
    }
}

/// Everything done to a domain in standby. Without header and footer the domain stays powered.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Scheme {
    /// Name in reports.
    pub name: String,
    /// Domains it is tried on; all when empty.
    #[serde(default)]
    pub domains: Vec<String>,
    /// Switch between the supply and the virtual supply.
    #[serde(default)]
    pub header: Option<SwitchSpec>,
    /// Switch between the virtual ground and the ground.
    #[serde(default)]
    pub footer: Option<SwitchSpec>,
    /// Where the n-wells of the block are tied when there is a header.
    #[serde(default)]
    pub nwell: WellTie,
    /// Where the p-wells of the block are tied when there is a footer.
    #[serde(default)]
    pub pwell: WellTie,
    /// Block n-wells above their rail, reverse positive, V.
    #[serde(default)]
    pub nwell_bias_v: f64,
    /// Block p-wells below their rail, reverse positive, V.
    #[serde(default)]
    pub pwell_bias_v: f64,
    /// Supply current of what makes the scheme work (pump, level shifter, bias generator), A.
    #[serde(default)]
    pub overhead_a: f64,
}

/// A scheme that cannot be.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("scheme `{scheme}`: {what} is {value}; {wanted}")]
pub struct SchemeError {
    /// The scheme.
    pub scheme: String,
    /// The quantity.
    pub what: String,
    /// What was found.
    pub value: String,
    /// What would be right.
    pub wanted: String,
}

impl Scheme {
    /// A scheme that leaves the domain powered.
    pub fn ungated(name: &str) -> Self {
        Self { name: name.to_owned(), ..Self::default() }
    }

    /// Whether the scheme is meant for a domain.
    pub fn applies_to(&self, domain: &str) -> bool {
        self.domains.is_empty() || self.domains.iter().any(|d| d == domain)
    }

    /// Whether nothing is switched or biased.
    pub fn is_ungated(&self) -> bool {
        self.header.is_none() && self.footer.is_none() && self.nwell_bias_v == 0.0 && self.pwell_bias_v == 0.0
    }

    /// Rails and wells of the block with its virtual rails where they are.
    pub fn levels(&self, vdd_v: f64, supply_v: f64, ground_v: f64) -> Levels {
        let nwell = if self.nwell == WellTie::Virtual { supply_v } else { vdd_v };
        let pwell = if self.pwell == WellTie::Virtual { ground_v } else { 0.0 };
        Levels {
            supply_v,
            ground_v,
            nwell_v: nwell + self.nwell_bias_v,
            pwell_v: pwell - self.pwell_bias_v,
            high_v: supply_v,
            low_v: ground_v,
        }
    }

    /// Books of the block that hang on a virtual rail: the rail's own, and the well's when it is tied to it without bias.
    pub fn on_rail(&self, rail: Collapsing) -> &'static [Book] {
        match rail {
            Collapsing::Supply if self.nwell == WellTie::Virtual && self.nwell_bias_v == 0.0 => {
                &[Book::Supply, Book::Nwell]
            }
            Collapsing::Supply => &[Book::Supply],
            Collapsing::Ground if self.pwell == WellTie::Virtual && self.pwell_bias_v == 0.0 => {
                &[Book::Ground, Book::Pwell]
            }
            Collapsing::Ground => &[Book::Ground],
        }
    }

    /// Checks every number.
    ///
    /// # Errors
    /// Widths that are not positive, overdrives or biases outside −1 V to 5 V, an overhead below zero.
    pub fn check(&self) -> Result<(), SchemeError> {
        let wrong = |what: &str, value: String, wanted: &str| {
            Err(SchemeError { scheme: self.name.clone(), what: what.into(), value, wanted: wanted.into() })
        };
        for (what, s) in [("header", &self.header), ("footer", &self.footer)] {
            let Some(s) = s else { continue };
            s.check(what).or_else(|(name, value, wanted)| wrong(&name, value, &wanted))?;
        }
        for (name, v) in [("n-well bias", self.nwell_bias_v), ("p-well bias", self.pwell_bias_v)] {
            if !(-1.0..=5.0).contains(&v) {
                return wrong(name, format!("{v} V"), "want -1 V to 5 V");
            }
        }
        if !(self.overhead_a >= 0.0 && self.overhead_a.is_finite()) {
            return wrong("overhead", format!("{} A", self.overhead_a), "want zero or more");
        }
        Ok(())
    }
}
