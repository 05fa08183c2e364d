//! From instance counts to a block: which cells have netlists, what to do with those that have none.

use std::sync::Arc;

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::table::TableCell;
use crate::cell::{Cell, CellReader};
use crate::read::counts::InstanceCounts;
use crate::read::deck::Note;
pub use crate::read::pattern::fits_pattern;
use crate::read::source::{Place, ReadError, nearest};

/// What to do with a master that has no transistor netlist.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum Policy {
    /// Stop with an error.
    Error,
    /// Count it as drawing nothing.
    Zero,
    /// Take the netlist of another cell.
    Alias(String),
    /// A given supply current at full supply, A; taken as proportional to the voltage between the rails.
    CurrentA(f64),
    /// Take its leakage from the Liberty libraries of the study.
    Liberty,
}

/// Weights of the states of one cell.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub enum StateWeights {
    /// Every state counts the same.
    #[default]
    Uniform,
    /// Conditions (products of pins, such as `A&!B`) and their weights; scaled to add up to one.
    Given(IndexMap<String, f64>),
    /// A weight for every state, as [`BoundCell::states`](crate::cell::BoundCell::states) numbers them; scaled likewise.
    ByState(Vec<f64>),
}

/// One kind of cell in a block.
#[derive(Debug, Clone)]
pub struct BlockCell {
    /// Master name in the netlist.
    pub master: String,
    /// Its transistors.
    pub cell: Arc<Cell>,
    /// Instances.
    pub count: u64,
    /// Weights of its states.
    pub weights: StateWeights,
    /// Whether it stays on the real rails asleep.
    pub powered: bool,
}

/// A master without transistors, and what was done about it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Uncovered {
    /// Master name.
    pub master: String,
    /// Instances.
    pub count: u64,
    /// The policy that applied.
    pub policy: Policy,
}

/// A bag of cells.
#[derive(Debug, Clone, Default)]
pub struct Block {
    /// Cells with netlists.
    pub cells: Vec<BlockCell>,
    /// Masters without, counted.
    pub uncovered: Vec<Uncovered>,
    /// Masters without, known by tables; they stand among the uncovered too.
    pub tables: Vec<TableCell>,
}

impl Block {
    /// All instances, covered or not.
    pub fn instances(&self) -> u64 {
        self.cells.iter().map(|c| c.count).sum::<u64>() + self.uncovered.iter().map(|u| u.count).sum::<u64>()
    }
    /// Instances whose current is computed from transistors.
    pub fn covered(&self) -> u64 {
        self.cells.iter().map(|c| c.count).sum()
    }
}

/// Builds a block. `policies` maps patterns to policies, the first that fits counts; masters that fit none are an error
/// that names them.
///
/// # Errors
/// A master without netlist and without policy, an alias to a cell that does not exist, or a cell that cannot be read.
pub fn build_block(
    counts: &InstanceCounts,
    reader: &CellReader<'_>,
    policies: &IndexMap<String, Policy>,
    weights: &IndexMap<String, StateWeights>,
    notes: &mut Vec<Note>,
) -> Result<Block, ReadError> {
    let mut block = Block::default();
    let origin = if counts.top.is_empty() { "instance counts" } else { counts.top.as_str() };
    let at = || Place::new(&Arc::from(origin), 1, 1);
    let has = |name: &str| reader.deck.subckts.contains_key(name.to_ascii_lowercase().as_str());
    let mut lost: Vec<(&String, u64)> = Vec::new();
    for (master, &count) in &counts.counts {
        if count == 0 {
            continue;
        }
        let policy = policies.iter().find(|(p, _)| fits_pattern(p, master)).map(|(_, v)| v.clone());
        let source = match &policy {
            Some(Policy::Alias(other)) if !has(other) => {
                let names = reader.deck.subckts.values().map(|s| &*s.name);
                return Err(ReadError::Unknown {
                    at: at(),
                    kind: "cell (alias)",
                    name: other.clone(),
                    nearest: nearest(other, names),
                });
            }
            Some(Policy::Alias(other)) => Some(other.clone()),
            Some(_) => None,
            None if has(master) => Some(master.clone()),
            None => {
                lost.push((master, count));
                continue;
            }
        };
        match (source, policy) {
            (Some(name), policy) => {
                if matches!(policy, Some(Policy::Alias(_))) {
                    notes.push(Note::new(
                        "alias",
                        format!("{count} instances of `{master}` computed as `{name}`"),
                    ));
                }
                let cell = Arc::new(reader.cell(&name, notes)?);
                let weights = weights.get(master).cloned().unwrap_or_default();
                block.cells.push(BlockCell { master: master.clone(), cell, count, weights, powered: false });
            }
            (None, Some(Policy::Error)) => lost.push((master, count)),
            (None, Some(policy)) => {
                if let Policy::CurrentA(a) = policy
                    && !(a >= 0.0 && a.is_finite())
                {
                    return Err(ReadError::Range {
                        at: at(),
                        name: format!("current of `{master}`"),
                        value: format!("{a} A"),
                        wanted: "want zero or more".into(),
                    });
                }
                block.uncovered.push(Uncovered { master: master.clone(), count, policy });
            }
            (None, None) => {}
        }
    }
    if let Some((first, _)) = lost.first() {
        let total: u64 = lost.iter().map(|l| l.1).sum();
        let list: Vec<String> = lost.iter().take(6).map(|(m, n)| format!("`{m}` ×{n}")).collect();
        let more = if lost.len() > 6 { format!(" and {} more", lost.len() - 6) } else { String::new() };
        let names = reader.deck.subckts.values().map(|s| &*s.name);
        let near = nearest(first, names).map_or_else(String::new, |n| format!(" (nearest netlist: `{n}`)"));
        return Err(ReadError::Syntax {
            at: at(),
            found: format!("{total} instances have no transistor netlist: {}{more}{near}", list.join(", ")),
            wanted: "state a policy for them: zero, alias, current_a, or liberty".into(),
        });
    }
    if block.cells.is_empty() && block.uncovered.is_empty() {
        return Err(ReadError::Nothing {
            path: counts.top.clone(),
            wanted: "instance of a cell".into(),
            empty: counts.counts.is_empty(),
        });
    }
    for master in weights.keys() {
        if !counts.counts.contains_key(master) {
            return Err(ReadError::Unknown {
                at: at(),
                kind: "cell (state weights)",
                name: master.clone(),
                nearest: nearest(master, counts.counts.keys().map(String::as_str)),
            });
        }
    }
    Ok(block)
}
