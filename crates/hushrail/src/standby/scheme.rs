//! Schemes: everything done to a domain in standby.

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::clamp::ClampSpec;

use crate::block::change::{CellChange, Parked};
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
    /// The same awake, V; as asleep when left out. Between the two the body moves with the gate.
    #[serde(default)]
    pub awake_well_bias_v: Option<f64>,
    /// Body tied to the gate: reverse-biased by the overdrive asleep, driven forward awake.
    #[serde(default)]
    pub body_to_gate: bool,
    /// Transistors in series behind one gate.
    #[serde(default = "one")]
    pub stacked: usize,
    /// Length of the drain and source diffusions of a finger, m, for its junctions; none when left out.
    #[serde(default)]
    pub diffusion_m: Option<f64>,
    /// Gate to diffusion edge, m, for layout stress; none when left out.
    #[serde(default)]
    pub edge_m: Option<f64>,
}

fn one() -> usize {
    1
}

impl SwitchSpec {
    /// A switch of one finger without overdrive, bias or junctions.
    pub fn new(model: &str, width_m: f64, length_m: f64) -> Self {
        Self {
            model: model.to_owned(),
            width_m,
            length_m,
            finger_width_m: None,
            overdrive_v: 0.0,
            boost_v: 0.0,
            well_bias_v: 0.0,
            awake_well_bias_v: None,
            body_to_gate: false,
            stacked: 1,
            diffusion_m: None,
            edge_m: None,
        }
    }

    /// Body voltage beyond the rail awake, V.
    pub fn awake_well_bias_v(&self) -> f64 {
        self.awake_well_bias_v.unwrap_or(self.well_bias_v)
    }

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
        let volts = [
            ("overdrive", self.overdrive_v),
            ("boost", self.boost_v),
            ("well bias", self.well_bias_v),
            ("awake well bias", self.awake_well_bias_v.unwrap_or(0.0)),
        ];
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
        if !(1..=4).contains(&self.stacked) {
            return wrong("stacked", self.stacked.to_string(), "want 1 to 4 in series");
        }
        for (name, v) in [("well bias", self.well_bias_v), ("awake well bias", self.awake_well_bias_v())] {
            if self.body_to_gate && v != 0.0 {
                return wrong(name, format!("{v} V"), "want none with body_to_gate");
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
    /// Block n-wells above their rail awake, V; negative: forward, faster.
    #[serde(default)]
    pub awake_nwell_bias_v: f64,
    /// Block p-wells below their rail awake, V; negative: forward, faster.
    #[serde(default)]
    pub awake_pwell_bias_v: f64,
    /// Supply current of what makes the scheme work (pump, level shifter, bias generator), A.
    #[serde(default)]
    pub overhead_a: f64,
    /// Share of the power drawn from the supply that reaches voltages beyond the rails (gates driven past them, biased wells);
    /// without loss when left out.
    #[serde(default)]
    pub pump_efficiency: Option<f64>,
    /// Holds the virtual supply from below when it falls far, so that state is kept.
    #[serde(default)]
    pub header_clamp: Option<ClampSpec>,
    /// Holds the virtual ground from above when it rises far.
    #[serde(default)]
    pub footer_clamp: Option<ClampSpec>,
    /// Level at which a second supply holds the virtual supply asleep, V.
    #[serde(default)]
    pub held_supply_v: Option<f64>,
    /// Level at which a second supply holds the virtual ground asleep, V.
    #[serde(default)]
    pub held_ground_v: Option<f64>,
    /// Header for the cells parked at zero and footer for those parked at one: every output keeps a real rail.
    #[serde(default)]
    pub zigzag: bool,
    /// States in which cells are parked: pattern of masters (`*` for any run) to a product of pins, such as `A&!B`.
    #[serde(default)]
    pub parked: Parked,
    /// Cells that stay on the real rails: patterns of masters (retention registers, always-on buffers).
    #[serde(default)]
    pub powered: Vec<String>,
    /// Cells added on the real rails, with their number: isolation, retention latches, buffers.
    #[serde(default)]
    pub added: IndexMap<String, u64>,
    /// Cells changed inside: other thresholds, longer channels, forced stacks.
    #[serde(default)]
    pub changes: Vec<CellChange>,
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
        self.header.is_none()
            && self.footer.is_none()
            && self.nwell_bias_v == 0.0
            && self.pwell_bias_v == 0.0
            && self.awake_nwell_bias_v == 0.0
            && self.awake_pwell_bias_v == 0.0
            && self.parked.is_empty()
            && !self.changes_block()
    }

    /// Whether the block is another one than the netlist says.
    pub fn changes_block(&self) -> bool {
        !(self.changes.is_empty() && self.powered.is_empty() && self.added.is_empty())
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

    /// The same awake: wells at their awake bias.
    pub fn awake_levels(&self, vdd_v: f64, supply_v: f64, ground_v: f64) -> Levels {
        let asleep = self.levels(vdd_v, supply_v, ground_v);
        Levels {
            nwell_v: asleep.nwell_v - self.nwell_bias_v + self.awake_nwell_bias_v,
            pwell_v: asleep.pwell_v + self.pwell_bias_v - self.awake_pwell_bias_v,
            ..asleep
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
        for (what, c, switch) in [
            ("header clamp", &self.header_clamp, self.header.is_some()),
            ("footer clamp", &self.footer_clamp, self.footer.is_some()),
        ] {
            let Some(c) = c else { continue };
            c.check(what).or_else(|(name, value, wanted)| wrong(&name, value, &wanted))?;
            if !switch {
                return wrong(what, "without its switch".into(), "want the switch it stands beside");
            }
        }
        for (what, v, switch) in [
            ("held_supply_v", self.held_supply_v, self.header.is_some()),
            ("held_ground_v", self.held_ground_v, self.footer.is_some()),
        ] {
            let Some(v) = v else { continue };
            if !(0.0..=5.0).contains(&v) {
                return wrong(what, format!("{v} V"), "want a level between the rails");
            }
            if !switch {
                return wrong(what, "without its switch".into(), "want the switch it stands beside");
            }
        }
        if self.zigzag {
            if self.header.is_none() || self.footer.is_none() {
                return wrong("zigzag", "without header and footer".into(), "want both");
            }
            if self.nwell == WellTie::Virtual || self.pwell == WellTie::Virtual {
                return wrong(
                    "wells",
                    "virtual".into(),
                    "want real wells in zigzag rows: neighbours share them",
                );
            }
        }
        if let Some(e) = self.pump_efficiency
            && !(e > 0.0 && e <= 1.0)
        {
            return wrong("pump_efficiency", e.to_string(), "want a share above 0 and up to 1");
        }
        for (name, v) in [
            ("n-well bias", self.nwell_bias_v),
            ("p-well bias", self.pwell_bias_v),
            ("awake n-well bias", self.awake_nwell_bias_v),
            ("awake p-well bias", self.awake_pwell_bias_v),
        ] {
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
