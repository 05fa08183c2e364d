//! The current of a block at given rails and wells: count × state weight × current, summed in a fixed order.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::build::{Block, Policy, StateWeights};
use super::table::TableMember;
use super::table::law::Bound;
use crate::cell::sensitivity::{COLUMNS, LogSlopes, SensitivityError};
use crate::cell::{BoundCell, CellError, DeviceShelf, Levels, Role, State};
use crate::circuit::newton::{Effort, SolveOptions, Workspace};
use crate::device::process::Process;
use crate::device::range::Outside;
use crate::physics::Kelvin;
use crate::read::Condition;
use crate::read::deck::Note;
use crate::read::source::ReadError;

/// A block's current could not be computed.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum BlockError {
    /// A cell failed.
    #[error(transparent)]
    Cell(#[from] CellError),
    /// The user stopped the work.
    #[error("stopped")]
    Stopped,
    /// Levels that a curve was not sampled at.
    #[error(
        "the block's curve was sampled with other wells or rails: {what} at {given_v:.4} V, the curve has {curve_v:.4} V there"
    )]
    OffCurve {
        /// The rail or well.
        what: &'static str,
        /// Asked for, V.
        given_v: f64,
        /// Of the curve, V.
        curve_v: f64,
    },
    /// A cell whose tables do not tell enough.
    #[error("leakage of `{master}` from tables: {reason}")]
    Table {
        /// The cell.
        master: String,
        /// Why.
        reason: String,
    },
    /// State weights that fit no state or do not add up.
    #[error("state weights of `{master}`: {reason}")]
    Weights {
        /// The cell.
        master: String,
        /// Why.
        reason: String,
    },
}

/// A cell of the block at a corner with its weighted states.
#[derive(Debug, Clone)]
pub(super) struct Member {
    pub(super) master: String,
    pub(super) count: u64,
    pub(super) bound: Arc<BoundCell>,
    pub(super) states: Vec<(State, f64)>,
    /// Whether it stays on the real rails asleep.
    pub(super) powered: bool,
}

/// A block with the devices of one corner.
#[derive(Debug)]
pub struct BoundBlock {
    pub(super) members: Vec<Member>,
    /// Cells known by tables.
    pub(super) tables: Vec<TableMember>,
    /// Which end of what their tables allow.
    pub(super) bound: Bound,
    /// Current of masters given by value, A at full supply.
    pub(super) given_a: f64,
    /// Full supply the given currents refer to, V.
    pub(super) vdd_v: f64,
    pub(super) options: SolveOptions,
    /// Whether all transistors have GIDL in their cards.
    pub has_gidl: bool,
}

/// Share of one cell in the supply current.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CellShare {
    /// Master name.
    pub master: String,
    /// Instances.
    pub count: u64,
    /// Current from supply and n-well, A, all instances.
    pub current_a: f64,
}

/// Currents of a block at one set of rails, A, by mechanism in the order of [`crate::device::Mechanism::ALL`].
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BlockCurrents {
    /// Into the block from its supply rail, inputs at one included.
    pub supply: [f64; 5],
    /// Into the block from its ground rail, inputs at zero included (negative: it flows out).
    pub ground: [f64; 5],
    /// Into the n-wells.
    pub nwell: [f64; 5],
    /// Into the p-wells.
    pub pwell: [f64; 5],
    /// Power that each mechanism dissipates inside, W, wherever its current flows.
    pub power_w: [f64; 5],
    /// From the real supply, past any switch: cells that stay powered, and what live neighbours hold at one.
    #[serde(default)]
    pub real_supply: [f64; 5],
    /// Into the real ground, past any switch (negative: it flows out).
    #[serde(default)]
    pub real_ground: [f64; 5],
    /// Part of `supply` that enters through inputs at one.
    #[serde(default)]
    pub inputs_high: [f64; 5],
    /// Part of `ground` that enters through inputs at zero.
    #[serde(default)]
    pub inputs_low: [f64; 5],
    /// Part of `supply` given by value and not computed, A.
    pub given_a: f64,
    /// By cell, in the order of the netlist.
    pub cells: Vec<CellShare>,
    /// States solved.
    pub states: usize,
    /// States whose operating point is not one the cell stays in.
    pub unstable: usize,
    /// Newton steps.
    pub steps: usize,
    /// Times a fallback of the solver was needed.
    pub fallbacks: usize,
    /// The transistor furthest outside what its model rests on.
    pub outside: Option<Outside>,
}

/// Sum over mechanisms.
pub fn total(x: &[f64; 5]) -> f64 {
    x.iter().sum()
}

impl BlockCurrents {
    /// Adds the books of another part.
    pub(super) fn join(&mut self, other: Self) {
        self.given_a += other.given_a;
        self.cells.extend(other.cells);
        self.states += other.states;
        self.unstable += other.unstable;
        self.steps += other.steps;
        self.fallbacks += other.fallbacks;
        self.outside = Outside::worse(self.outside.take(), other.outside);
        for (to, x) in [
            (&mut self.supply, &other.supply),
            (&mut self.ground, &other.ground),
            (&mut self.nwell, &other.nwell),
            (&mut self.pwell, &other.pwell),
            (&mut self.power_w, &other.power_w),
            (&mut self.real_supply, &other.real_supply),
            (&mut self.real_ground, &other.real_ground),
            (&mut self.inputs_high, &other.inputs_high),
            (&mut self.inputs_low, &other.inputs_low),
        ] {
            add(to, x, 1.0);
        }
    }

    /// No current anywhere.
    pub fn zero() -> Self {
        Self {
            supply: [0.0; 5],
            ground: [0.0; 5],
            nwell: [0.0; 5],
            pwell: [0.0; 5],
            power_w: [0.0; 5],
            real_supply: [0.0; 5],
            real_ground: [0.0; 5],
            inputs_high: [0.0; 5],
            inputs_low: [0.0; 5],
            given_a: 0.0,
            cells: Vec::new(),
            states: 0,
            unstable: 0,
            steps: 0,
            fallbacks: 0,
            outside: None,
        }
    }
}

pub(super) fn add(to: &mut [f64; 5], x: &[f64; 5], weight: f64) {
    for (t, v) in to.iter_mut().zip(x) {
        *t += weight * v;
    }
}

impl BoundBlock {
    /// Makes the devices of every cell and lists its states with their weights.
    ///
    /// # Errors
    /// A device that cannot be made (with the line of the netlist), or states that cannot be listed.
    pub fn new(
        block: &Block,
        process: &Process,
        temp: Kelvin,
        vdd_v: f64,
        shelf: &mut DeviceShelf,
        options: &SolveOptions,
    ) -> Result<Self, BindError> {
        let mut members = Vec::new();
        let mut has_gidl = true;
        for c in &block.cells {
            let bound = BoundCell::new(&c.cell, process, temp, 0.0, shelf)?;
            has_gidl &= bound.has_gidl;
            let states = bound.states().map_err(BlockError::Cell)?;
            let states = weigh(&c.master, &bound, states, &c.weights)?;
            let (master, bound) = (c.master.clone(), Arc::new(bound));
            members.push(Member { master, count: c.count, bound, states, powered: c.powered });
        }
        let mut tables = Vec::new();
        for t in &block.tables {
            tables.push(t.bind(&process.name, temp, vdd_v, &mut shelf.notes)?);
        }
        let is_known = |m: &str| block.tables.iter().any(|t| t.master == m);
        if let Some(u) = block.uncovered.iter().find(|u| u.policy == Policy::Liberty && !is_known(&u.master))
        {
            let reason = "no libraries were given".to_owned();
            return Err(BlockError::Table { master: u.master.clone(), reason }.into());
        }
        let given_a = block
            .uncovered
            .iter()
            .map(|u| match u.policy {
                Policy::CurrentA(a) => a * u.count as f64,
                _ => 0.0,
            })
            .sum();
        Ok(Self { members, tables, bound: Bound::Middle, given_a, vdd_v, options: options.clone(), has_gidl })
    }

    /// Whether cells known by tables are in it, whose current over a collapsing rail is an interval.
    pub fn has_tables(&self) -> bool {
        !self.tables.is_empty()
    }

    /// The block at one end of what its tables allow.
    #[must_use]
    pub fn at_bound(&self, bound: Bound) -> Self {
        Self {
            members: self.members.clone(),
            tables: self.tables.clone(),
            bound,
            given_a: self.given_a,
            vdd_v: self.vdd_v,
            options: self.options.clone(),
            has_gidl: self.has_gidl,
        }
    }

    /// The currents at given levels. Work is shared over threads by cell and summed in order, so the bits do not depend on
    /// their number.
    ///
    /// # Errors
    /// A state without operating point, or `stop` raised.
    pub fn currents(&self, levels: &Levels, stop: &AtomicBool) -> Result<BlockCurrents, BlockError> {
        let parts: Vec<Result<BlockCurrents, BlockError>> = self
            .members
            .par_iter()
            .map_init(Workspace::default, |w, m| m.currents(levels, &self.options, w, stop))
            .collect();
        let mut sum = BlockCurrents::zero();
        for p in parts {
            sum.join(p?);
        }
        for t in &self.tables {
            let i = t.current_a(levels, self.bound);
            sum.supply[0] += i;
            sum.ground[0] -= i;
            sum.power_w[0] += i * (levels.supply_v - levels.ground_v);
            sum.cells.push(CellShare { master: t.master.clone(), count: t.count, current_a: i });
        }
        if self.given_a != 0.0 {
            let i = self.given_a * (levels.supply_v - levels.ground_v) / self.vdd_v;
            sum.supply[0] += i;
            sum.ground[0] -= i;
            sum.power_w[0] += i * (levels.supply_v - levels.ground_v);
            sum.given_a = i;
        }
        Ok(sum)
    }
}

/// Current of a block and its logarithmic slopes, all devices varied together.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BlockSensitivity {
    /// Current from supply, n-well and inputs at one, A; what is given by value included, which answers to no knob.
    pub current_a: f64,
    /// d ln I / d knob.
    pub slopes: LogSlopes,
}

impl BoundBlock {
    /// How the current of the block answers to what makes its devices; `process` is the one it was bound to. A state in which no
    /// current flows counts for nothing.
    ///
    /// # Errors
    /// See [`SensitivityError`].
    pub fn sensitivity(
        &self,
        process: &Process,
        levels: &Levels,
    ) -> Result<BlockSensitivity, SensitivityError> {
        let parts: Vec<Result<(f64, [f64; COLUMNS]), SensitivityError>> = self
            .members
            .par_iter()
            .map_init(Workspace::default, |w, m| {
                let mut sum = (0.0, [0.0; COLUMNS]);
                for (state, weight) in &m.states {
                    let s = match m.bound.sensitivity(process, state, levels, &self.options, w) {
                        Ok(s) => s,
                        Err(SensitivityError::NoCurrent { .. }) => continue,
                        Err(e) => return Err(e),
                    };
                    let i = s.current_a * weight * m.count as f64;
                    sum.0 += i;
                    for (to, d) in sum.1.iter_mut().zip(s.slopes().to_array()) {
                        *to += i * d;
                    }
                }
                Ok(sum)
            })
            .collect();
        let known = self.tables.iter().map(|t| t.current_a(levels, self.bound));
        let mut current_a = self.given_a + known.sum::<f64>();
        let mut slopes = [0.0; COLUMNS];
        for p in parts {
            let (i, d) = p?;
            current_a += i;
            for (to, d) in slopes.iter_mut().zip(d) {
                *to += d;
            }
        }
        if !(current_a.abs() > 0.0) {
            let (cell, state) = ("the block".into(), "all".into());
            return Err(SensitivityError::NoCurrent { cell, state });
        }
        Ok(BlockSensitivity { current_a, slopes: LogSlopes::from_array(slopes.map(|d| d / current_a)) })
    }
}

/// A block could not be bound to a corner.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum BindError {
    /// Cards, bins or sizes.
    #[error(transparent)]
    Read(#[from] ReadError),
    /// States or weights.
    #[error(transparent)]
    Block(#[from] BlockError),
}

/// Matches weights to states.
pub(super) fn weigh(
    master: &str,
    bound: &BoundCell,
    states: Vec<State>,
    weights: &StateWeights,
) -> Result<Vec<(State, f64)>, BlockError> {
    let wrong = |reason: String| BlockError::Weights { master: master.to_owned(), reason };
    let given = match weights {
        StateWeights::Uniform => {
            let n = states.len() as f64;
            return Ok(states.into_iter().map(|s| (s, 1.0 / n)).collect());
        }
        StateWeights::ByState(w) => {
            let sum: f64 = w.iter().sum();
            if w.len() != states.len() || !(sum > 0.0) || w.iter().any(|x| !(*x >= 0.0 && x.is_finite())) {
                return Err(wrong(format!("{} weights for {} states", w.len(), states.len())));
            }
            let weighed = states.into_iter().zip(w).filter(|(_, x)| **x > 0.0);
            return Ok(weighed.map(|(s, x)| (s, x / sum)).collect());
        }
        StateWeights::Given(given) => given,
    };
    let mut w = vec![0.0; states.len()];
    for (when, weight) in given {
        if !(*weight >= 0.0 && weight.is_finite()) {
            return Err(wrong(format!("weight {weight} of `{when}` is not zero or more")));
        }
        let condition = Condition::parse(when).map_err(|e| wrong(e.to_string()))?;
        let cell = &bound.cell;
        let port = |p: &str| cell.ports.iter().position(|q| **q == *p);
        if let Some(p) = condition.pins().into_iter().find(|p| port(p).is_none()) {
            return Err(wrong(format!("`{when}`: the cell has no pin `{p}`")));
        }
        let fits: Vec<usize> = states
            .iter()
            .enumerate()
            .filter(|(_, s)| {
                condition.value(&mut |p| port(p).and_then(|i| s.logic[cell.port_nodes[i]].bit()))
                    == Some(true)
            })
            .map(|(i, _)| i)
            .collect();
        if fits.is_empty() && *weight > 0.0 {
            return Err(wrong(format!("no state fits `{when}`")));
        }
        for &i in &fits {
            w[i] += weight / fits.len() as f64;
        }
    }
    let sum: f64 = w.iter().sum();
    if !(sum > 0.0) {
        return Err(wrong("all weights are zero".into()));
    }
    Ok(states.into_iter().zip(w).filter(|(_, x)| *x > 0.0).map(|(s, x)| (s, x / sum)).collect())
}

impl Member {
    fn currents(
        &self,
        levels: &Levels,
        options: &SolveOptions,
        w: &mut Workspace,
        stop: &AtomicBool,
    ) -> Result<BlockCurrents, BlockError> {
        let mut sum = BlockCurrents::zero();
        let cell = &self.bound.cell;
        let n = self.count as f64;
        for (state, weight) in &self.states {
            if stop.load(Ordering::Relaxed) {
                return Err(BlockError::Stopped);
            }
            let c = self.bound.solve(state, levels, options, w)?;
            let x = n * weight;
            for (to, role) in [
                (&mut sum.supply, Role::Supply),
                (&mut sum.ground, Role::Ground),
                (&mut sum.nwell, Role::Nwell),
                (&mut sum.pwell, Role::Pwell),
            ] {
                add(to, &c.role(cell, role), x);
            }
            // an input at one is held by a driver on the supply, an input at zero by one on the ground
            for (i, &high) in cell.ports_of(Role::Input).zip(&state.inputs) {
                for to in if high {
                    [&mut sum.supply, &mut sum.inputs_high]
                } else {
                    [&mut sum.ground, &mut sum.inputs_low]
                } {
                    add(to, &c.ports[i], x);
                }
            }
            add(&mut sum.power_w, &c.power_w, x);
            sum.states += 1;
            sum.unstable += usize::from(!c.stable);
            sum.outside = Outside::worse(sum.outside.take(), c.outside);
            let Effort { steps, transient, bisection, joint } = c.effort;
            sum.steps += steps;
            sum.fallbacks += transient + bisection + joint;
        }
        sum.cells.push(CellShare {
            master: self.master.clone(),
            count: self.count,
            current_a: total(&sum.supply) + total(&sum.nwell),
        });
        Ok(sum)
    }
}

/// The remark on cards without GIDL, when it matters.
pub fn gidl_note(what: &str) -> Note {
    Note::new(
        "no-gidl",
        format!(
            "the card of {what} has gate-induced drain leakage switched off: with it, the current can only fall as the \
             gate is driven past the rail; no optimum overdrive can be read from this card"
        ),
    )
}
