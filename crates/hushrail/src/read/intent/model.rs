//! What power intent says, as records that keep their places.
//!
//! Names are whole: the path of the scope, `/`, the name. The top has the empty path.

use indexmap::IndexMap;
use serde::{Serialize, Serializer};

use super::super::deck::Note;
use super::super::source::Place;
use super::condition::Condition;

pub(super) fn place<S: Serializer>(at: &Place, serializer: S) -> Result<S::Ok, S::Error> {
    serializer.collect_str(at)
}

/// A name that a list holds, and where it is written.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Named {
    /// The whole path.
    pub path: String,
    /// Where it is written.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A power domain.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Domain {
    /// Whole name.
    pub name: String,
    /// Path of the scope it is made in.
    pub scope: String,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
    /// Instances that belong to it with what is below them.
    pub elements: Vec<Named>,
    /// Instances that do not.
    pub exclude: Vec<Named>,
    /// Whether the scope itself belongs to it.
    pub include_scope: bool,
    /// Net that `set_domain_supply_net` names for power.
    pub primary_power: Option<String>,
    /// The same for ground.
    pub primary_ground: Option<String>,
    /// Supply sets by handle, such as `primary`.
    pub supplies: IndexMap<String, String>,
}

/// A supply port.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SupplyPort {
    /// Whole name.
    pub name: String,
    /// `in`, `out` or `inout`.
    pub direction: String,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A supply net.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SupplyNet {
    /// Whole name.
    pub name: String,
    /// How several drivers are resolved, when that is said.
    pub resolve: Option<String>,
    /// Domains it is made available in.
    pub domains: Vec<String>,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A supply set: nets by function.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SupplySet {
    /// Whole name; `DOMAIN.handle` for one that comes with a domain.
    pub name: String,
    /// Net, or function of another set, by function: `power`, `ground`…
    pub functions: IndexMap<String, String>,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A supply net tied to a port.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Connection {
    /// The net.
    pub net: String,
    /// The port, of a scope or of a switch (`switch/port`).
    pub port: String,
}

/// A state of a supply.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SupplyState {
    /// Port or net.
    pub supply: String,
    /// Name of the state.
    pub name: String,
    /// Voltages, V: nominal, or least and most, or all three; nothing when off.
    pub volts: Vec<f64>,
    /// Where it stands.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A supply port of a switch.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct SwitchSupply {
    /// Name of the port.
    pub port: String,
    /// Net at it, when given.
    pub net: Option<String>,
}

/// A control or acknowledge port of a switch.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SwitchControl {
    /// Name of the port.
    pub port: String,
    /// Whole path of the net at it, when given.
    pub net: Option<String>,
    /// What an acknowledge port says.
    pub condition: Option<Condition>,
    /// Where it is written.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A state of a switch.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct SwitchState {
    /// Name.
    pub name: String,
    /// Input port that it connects, when it is on.
    pub input: Option<String>,
    /// When it holds, in names of control ports.
    pub condition: Condition,
}

/// A power switch.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct PowerSwitch {
    /// Whole name.
    pub name: String,
    /// Domain it is given with.
    pub domain: Option<String>,
    /// Input supplies.
    pub inputs: Vec<SwitchSupply>,
    /// Output supply.
    pub output: SwitchSupply,
    /// Control ports.
    pub controls: Vec<SwitchControl>,
    /// Acknowledge ports.
    pub acks: Vec<SwitchControl>,
    /// States in which it conducts.
    pub on_states: Vec<SwitchState>,
    /// States in which it conducts in part.
    pub partial_states: Vec<SwitchState>,
    /// States in which it does not conduct.
    pub off_states: Vec<SwitchState>,
    /// States that must not be.
    pub error_states: Vec<SwitchState>,
    /// Supply set of its own gates.
    pub supply_set: Option<String>,
    /// Instances of the netlist that it stands for.
    pub instances: Vec<Named>,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

impl PowerSwitch {
    /// Whether it conducts, when that follows from what is known of its control ports.
    pub fn conducts(&self, known: &dyn Fn(&str) -> Option<bool>) -> Option<bool> {
        let any = |states: &[SwitchState]| {
            let values: Vec<_> = states.iter().map(|s| s.condition.value(known)).collect();
            if values.contains(&Some(true)) {
                Some(true)
            } else if !values.is_empty() && values.iter().all(|v| *v == Some(false)) {
                Some(false)
            } else {
                None
            }
        };
        match any(&self.on_states) {
            Some(on) => Some(on),
            None if any(&self.off_states) == Some(true) => Some(false),
            None => None,
        }
    }
}

/// A strategy for isolation at the boundary of a domain.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Isolation {
    /// Name.
    pub name: String,
    /// Domain.
    pub domain: String,
    /// Ports or instances it is for; the whole boundary when empty.
    pub elements: Vec<Named>,
    /// What it is not for.
    pub exclude: Vec<Named>,
    /// `inputs`, `outputs` or `both`, when said.
    pub applies_to: Option<String>,
    /// `0`, `1`, `any`, `Z`, `latch` or a value; one for each signal.
    pub clamp_values: Vec<String>,
    /// Nets that switch it on; whole paths.
    pub signals: Vec<Named>,
    /// `high` or `low`, one for each signal.
    pub senses: Vec<String>,
    /// Where the cells go.
    pub location: Option<String>,
    /// Supply set of the driver it is for.
    pub source: Option<String>,
    /// Supply set of the receiver it is for.
    pub sink: Option<String>,
    /// Supply sets of the cells.
    pub supplies: Vec<String>,
    /// Power net of the cells.
    pub power_net: Option<String>,
    /// Ground net of the cells.
    pub ground_net: Option<String>,
    /// Whether it says that nothing is isolated.
    pub none: bool,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A save or restore signal.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Trigger {
    /// Whole path of the net.
    pub net: String,
    /// `high`, `low`, `posedge` or `negedge`.
    pub edge: String,
    /// Where it is written.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A strategy for retention in a domain.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Retention {
    /// Name.
    pub name: String,
    /// Domain.
    pub domain: String,
    /// What it is for; all that stores when empty.
    pub elements: Vec<Named>,
    /// What it is not for.
    pub exclude: Vec<Named>,
    /// What saves.
    pub save: Option<Trigger>,
    /// What restores.
    pub restore: Option<Trigger>,
    /// When the state is kept, as written.
    pub condition: Option<String>,
    /// Supply set that keeps it.
    pub supply: Option<String>,
    /// Power net that keeps it.
    pub power_net: Option<String>,
    /// Ground net that keeps it.
    pub ground_net: Option<String>,
    /// Whether it says that nothing is kept.
    pub none: bool,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A strategy for level shifters.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct LevelShifter {
    /// Name.
    pub name: String,
    /// Domain.
    pub domain: String,
    /// What it is for; the whole boundary when empty.
    pub elements: Vec<Named>,
    /// What it is not for.
    pub exclude: Vec<Named>,
    /// `inputs`, `outputs` or `both`, when said.
    pub applies_to: Option<String>,
    /// `low_to_high`, `high_to_low` or `both`, when said.
    pub rule: Option<String>,
    /// Where the cells go.
    pub location: Option<String>,
    /// Difference that needs a shift, V, as written.
    pub threshold: Option<String>,
    /// Whether it says that nothing is shifted.
    pub none: bool,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A named state of a domain, supply set or group; expressions as written.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct PowerState {
    /// Domain, supply set, group…, as a whole name.
    pub object: String,
    /// Name of the state.
    pub name: String,
    /// When it holds.
    pub logic: Option<String>,
    /// Which supplies it means.
    pub supply: Option<String>,
    /// How what it powers behaves.
    pub simstate: Option<String>,
    /// Whether it may be; nothing when not said.
    pub legal: Option<bool>,
    /// Where it stands.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A row of a state table.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct TableRow {
    /// Name.
    pub name: String,
    /// A state for each supply; `*` for any.
    pub states: Vec<String>,
}

/// A power state table.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct StateTable {
    /// Whole name.
    pub name: String,
    /// Supplies: ports, nets or ports of switches.
    pub supplies: Vec<String>,
    /// Rows.
    pub rows: Vec<TableRow>,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// Power intent: what the files say.
#[derive(Debug, Clone, PartialEq, Default, Serialize)]
pub struct Intent {
    /// Version that the files name.
    pub version: Option<String>,
    /// Scopes other than the top that are gone into.
    pub scopes: Vec<Named>,
    /// Power domains.
    pub domains: Vec<Domain>,
    /// Supply ports.
    pub supply_ports: Vec<SupplyPort>,
    /// Supply nets.
    pub supply_nets: Vec<SupplyNet>,
    /// Supply sets.
    pub supply_sets: Vec<SupplySet>,
    /// Nets tied to ports.
    pub connections: Vec<Connection>,
    /// States of supplies.
    pub supply_states: Vec<SupplyState>,
    /// Power switches.
    pub switches: Vec<PowerSwitch>,
    /// Isolation.
    pub isolations: Vec<Isolation>,
    /// Retention.
    pub retentions: Vec<Retention>,
    /// Level shifters.
    pub level_shifters: Vec<LevelShifter>,
    /// Power states.
    pub power_states: Vec<PowerState>,
    /// State tables.
    pub state_tables: Vec<StateTable>,
    /// Logic nets and ports that the intent makes.
    pub logic_nets: Vec<String>,
    /// Remarks.
    pub notes: Vec<Note>,
}

impl Intent {
    /// The domain of a whole name.
    pub fn domain(&self, name: &str) -> Option<&Domain> {
        self.domains.iter().find(|d| d.name == name)
    }

    /// The switch of a whole name.
    pub fn switch(&self, name: &str) -> Option<&PowerSwitch> {
        self.switches.iter().find(|s| s.name == name)
    }
}
