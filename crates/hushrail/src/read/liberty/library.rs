//! What a Liberty file says, as far as standby current needs it.

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use crate::read::deck::Note;

/// A library: the cells of one corner.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Library {
    /// Name in the file; empty for a fragment.
    pub name: String,
    /// The file, as the user named it.
    pub path: String,
    /// Units, where they are stated.
    pub units: Units,
    /// Process, supply and temperature it was made for (`nom_*`).
    pub nominal: Nominal,
    /// `operating_conditions` by name.
    #[serde(default)]
    pub conditions: IndexMap<String, Nominal>,
    /// `default_operating_conditions`.
    #[serde(default)]
    pub default_conditions: Option<String>,
    /// Names of supplies and their voltages, V.
    #[serde(default)]
    pub voltage_map: IndexMap<String, f64>,
    /// `default_cell_leakage_power`, in the library's unit.
    #[serde(default)]
    pub default_cell_leakage_power: Option<f64>,
    /// `default_leakage_power_density`, in the library's unit over its unit of area.
    #[serde(default)]
    pub default_leakage_power_density: Option<f64>,
    /// Cells by name, in the order of the file.
    pub cells: IndexMap<String, LibraryCell>,
    /// What is missing, zero or contradictory.
    #[serde(default)]
    pub notes: Vec<Note>,
}

/// Units in SI; what the file does not state is absent.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
pub struct Units {
    /// W per unit of leakage.
    pub leakage_w: Option<f64>,
    /// V per unit of voltage.
    pub voltage_v: Option<f64>,
}

/// A corner as far as it is stated.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
pub struct Nominal {
    /// Scaling factor of the process.
    pub process: Option<f64>,
    /// Supply, V.
    pub voltage_v: Option<f64>,
    /// Temperature, degrees Celsius.
    pub temp_c: Option<f64>,
}

/// A cell.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct LibraryCell {
    /// Area in the library's unit.
    #[serde(default)]
    pub area: Option<f64>,
    /// `cell_leakage_power`, in the library's unit.
    #[serde(default)]
    pub cell_leakage_power: Option<f64>,
    /// Leakage by state and supply.
    #[serde(default)]
    pub leakage: Vec<LeakageGroup>,
    /// Supply and well pins.
    #[serde(default)]
    pub pg_pins: IndexMap<String, PgPin>,
    /// Signal pins; buses are taken apart.
    #[serde(default)]
    pub pins: IndexMap<String, Pin>,
    /// What keeps a value: flip-flops, latches, state tables.
    #[serde(default)]
    pub storage: Vec<Storage>,
    /// What the cell is for in power gating: the attributes as written.
    #[serde(default)]
    pub attributes: IndexMap<String, String>,
    /// Line of the cell in its file; zero when it comes from none.
    #[serde(default)]
    pub line: u32,
}

/// One `leakage_power` group.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct LeakageGroup {
    /// Condition as written; empty for every state that no other group has.
    pub when: String,
    /// Value in the library's unit.
    pub value: f64,
    /// The supply it is drawn from (`related_pg_pin`), when one is named.
    #[serde(default)]
    pub supply: Option<String>,
    /// Line of the group; zero when it comes from no file.
    #[serde(default)]
    pub line: u32,
}

/// A supply or well pin.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct PgPin {
    /// `pg_type`, such as `primary_power`; empty when not stated.
    pub kind: String,
    /// Name in the voltage map.
    #[serde(default)]
    pub voltage_name: Option<String>,
    /// Other attributes: `direction`, `switch_function`, `pg_function`, `physical_connection`…
    #[serde(default)]
    pub attributes: IndexMap<String, String>,
}

impl PgPin {
    /// Whether current into it costs no power: grounds and wells at ground.
    pub fn is_ground(&self) -> bool {
        matches!(self.kind.as_str(), "primary_ground" | "backup_ground" | "internal_ground" | "pwell")
    }
}

/// A signal pin.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Pin {
    /// `input`, `output`, `inout` or `internal`; empty when not stated.
    pub direction: String,
    /// What it puts out (`function`, or `state_function` of a cell with a state table).
    #[serde(default)]
    pub function: Option<String>,
    /// When it lets go (`three_state`).
    #[serde(default)]
    pub three_state: Option<String>,
    /// Supply it belongs to.
    #[serde(default)]
    pub related_power_pin: Option<String>,
    /// Ground it belongs to.
    #[serde(default)]
    pub related_ground_pin: Option<String>,
    /// What the pin is for in power gating and clocking: the attributes as written.
    #[serde(default)]
    pub attributes: IndexMap<String, String>,
}

/// A group that keeps a value.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Storage {
    /// `ff`, `latch`, `ff_bank`, `latch_bank` or `statetable`.
    pub kind: String,
    /// What stands in its brackets.
    pub args: Vec<String>,
    /// Its attributes as written: `clocked_on`, `next_state`, `enable`, `data_in`, `clear`…
    pub attributes: IndexMap<String, String>,
}

/// What a cell is for in power gating.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum CellRole {
    /// A power switch, of this type (`coarse_grain`, `fine_grain`).
    Switch(String),
    /// Clamps what comes out of a sleeping domain.
    Isolation,
    /// Between two supplies.
    LevelShifter,
    /// Keeps its value asleep, in this style.
    Retention(String),
    /// Stays on the real rails.
    AlwaysOn,
}

impl LibraryCell {
    /// What the attributes say the cell is for; a cell may be several things.
    pub fn roles(&self) -> Vec<CellRole> {
        let is = |name: &str| self.attributes.get(name).is_some_and(|v| v.eq_ignore_ascii_case("true"));
        let mut out = Vec::new();
        if let Some(kind) = self.attributes.get("switch_cell_type") {
            out.push(CellRole::Switch(kind.clone()));
        }
        if is("is_isolation_cell") || is("is_clock_isolation_cell") {
            out.push(CellRole::Isolation);
        }
        if is("is_level_shifter") {
            out.push(CellRole::LevelShifter);
        }
        for name in ["retention_cell", "power_gating_cell"] {
            if let Some(style) = self.attributes.get(name) {
                out.push(CellRole::Retention(style.clone()));
            }
        }
        if is("always_on") {
            out.push(CellRole::AlwaysOn);
        }
        out
    }

    /// Names of the variables a state-keeping group defines; the second of `ff` and `latch` is the first inverted.
    pub fn stored_names(&self) -> impl Iterator<Item = &str> {
        self.storage.iter().flat_map(Storage::names)
    }
}

impl Storage {
    /// Variables it defines.
    pub fn names(&self) -> Vec<&str> {
        if self.kind == "statetable" {
            // the second argument lists the internal nodes
            let Some(nodes) = self.args.get(1) else { return Vec::new() };
            return nodes.split_whitespace().collect();
        }
        self.args.iter().take(2).map(String::as_str).collect()
    }
}

impl Library {
    /// A value of leakage in W; `None` when the unit is not known.
    pub fn watts(&self, value: f64) -> Option<f64> {
        self.units.leakage_w.map(|w| value * w)
    }

    /// The voltage of a supply pin of a cell, V: by the voltage map, or else the nominal supply.
    pub fn supply_v(&self, cell: &LibraryCell, supply: Option<&str>) -> Option<f64> {
        let name = supply.and_then(|s| cell.pg_pins.get(s)).and_then(|p| p.voltage_name.as_deref());
        name.and_then(|n| self.voltage_map.get(n)).copied().or(self.nominal.voltage_v)
    }
}
