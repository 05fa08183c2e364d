//! A block asleep in parts: what is switched, what stays on the real rails, and rows switched by the value they are parked at.

use std::sync::OnceLock;
use std::sync::atomic::AtomicBool;

use super::build::{StateWeights, fits_pattern};
use super::change::Parked;
use super::current::{BlockCurrents, BlockError, BoundBlock, Member, add, weigh};
use super::curve::Draw;
use crate::cell::{Levels, Role};

impl BoundBlock {
    /// Some of the members; what is known by value and by tables goes with one part only.
    fn with_members(&self, members: Vec<Member>, given: bool) -> Self {
        let (given_a, tables) = if given { (self.given_a, self.tables.clone()) } else { (0.0, Vec::new()) };
        Self {
            members,
            tables,
            bound: self.bound,
            given_a,
            vdd_v: self.vdd_v,
            options: self.options.clone(),
            has_gidl: self.has_gidl,
        }
    }

    /// What is switched, and what stays on the real rails when there is any.
    pub fn parted(&self) -> (Self, Option<Self>) {
        let (powered, switched): (Vec<_>, Vec<_>) = self.members.iter().cloned().partition(|m| m.powered);
        let island = (!powered.is_empty()).then(|| self.with_members(powered, false));
        (self.with_members(switched, true), island)
    }

    /// The block with cells parked in given states.
    ///
    /// # Errors
    /// A pattern that fits no cell, or a condition that no state of a cell fits.
    pub fn parked(&self, parked: &Parked) -> Result<Self, BlockError> {
        let mut used = vec![false; parked.len()];
        let mut members = Vec::with_capacity(self.members.len());
        for m in &self.members {
            let found = parked.iter().enumerate().find(|(_, (p, _))| fits_pattern(p, &m.master));
            let Some((k, (_, when))) = found else {
                members.push(m.clone());
                continue;
            };
            used[k] = true;
            let states = m.bound.states().map_err(BlockError::Cell)?;
            let given = StateWeights::Given([(when.clone(), 1.0)].into_iter().collect());
            let states = weigh(&m.master, &m.bound, states, &given)?;
            members.push(Member { states, ..m.clone() });
        }
        if let Some(k) = used.iter().position(|u| !u) {
            let (pattern, _) = parked.get_index(k).map_or(("", ""), |(p, w)| (p, w));
            let reason = "no cell of the block fits the pattern".to_owned();
            return Err(BlockError::Weights { master: pattern.to_owned(), reason });
        }
        Ok(self.with_members(members, true))
    }

    /// States whose first output is one, and the others: a cell without output counts among the others.
    pub fn by_output(&self) -> (Self, Self) {
        let mut parts = [Vec::new(), Vec::new()];
        for m in &self.members {
            let output = m.bound.cell.ports_of(Role::Output).next();
            let high = |s: &crate::cell::State| {
                output.and_then(|p| s.logic[m.bound.cell.port_nodes[p]].bit()) == Some(true)
            };
            let (up, down): (Vec<_>, Vec<_>) = m.states.iter().cloned().partition(|(s, _)| high(s));
            for (to, states) in parts.iter_mut().zip([up, down]) {
                if !states.is_empty() {
                    to.push(Member { states, ..m.clone() });
                }
            }
        }
        let [up, down] = parts;
        (self.with_members(up, false), self.with_members(down, true))
    }
}

/// How the switched part hangs on the virtual rails.
#[derive(Debug)]
enum Rows {
    /// All of it on both.
    Together(BoundBlock),
    /// Cells parked at one between real supply and virtual ground, cells parked at zero between virtual supply and real ground;
    /// inputs come from neighbours whose output rail is real.
    Zigzag { high: BoundBlock, low: BoundBlock },
}

/// A block asleep.
#[derive(Debug)]
pub struct Parts {
    rows: Rows,
    island: Option<BoundBlock>,
    powered: Levels,
    known: OnceLock<BlockCurrents>,
}

impl Parts {
    /// A block under a scheme: parked, in zigzag rows or not, its powered cells apart; `vdd_v` feeds those.
    ///
    /// # Errors
    /// As for [`BoundBlock::parked`].
    pub fn new(block: &BoundBlock, parked: &Parked, zigzag: bool, vdd_v: f64) -> Result<Self, BlockError> {
        let (switched, island) = block.parted();
        let switched = if parked.is_empty() { switched } else { switched.parked(parked)? };
        let rows = if zigzag {
            let (high, low) = switched.by_output();
            Rows::Zigzag { high, low }
        } else {
            Rows::Together(switched)
        };
        Ok(Self { rows, island, powered: Levels::powered(vdd_v), known: OnceLock::new() })
    }

    fn island(&self, stop: &AtomicBool) -> Result<Option<&BlockCurrents>, BlockError> {
        let Some(island) = &self.island else { return Ok(None) };
        if let Some(known) = self.known.get() {
            return Ok(Some(known));
        }
        let found = island.currents(&self.powered, stop)?;
        Ok(Some(self.known.get_or_init(|| found)))
    }
}

impl BlockCurrents {
    /// Books all of it on the real rails, wells included.
    fn on_real_rails(mut self) -> Self {
        for (real, rail, well) in [
            (&mut self.real_supply, &mut self.supply, &mut self.nwell),
            (&mut self.real_ground, &mut self.ground, &mut self.pwell),
        ] {
            add(real, rail, 1.0);
            add(real, well, 1.0);
            (*rail, *well) = ([0.0; 5], [0.0; 5]);
        }
        self
    }
}

impl Draw for Parts {
    fn draw(&self, levels: &Levels, stop: &AtomicBool) -> Result<BlockCurrents, BlockError> {
        let mut sum = match &self.rows {
            Rows::Together(b) => b.currents(levels, stop)?,
            Rows::Zigzag { high, low } => {
                let live = &self.powered;
                let inputs = |l: Levels| Levels { high_v: live.supply_v, low_v: live.ground_v, ..l };
                let mut up = high.currents(&inputs(Levels { supply_v: live.supply_v, ..*levels }), stop)?;
                let mut down = low.currents(&inputs(Levels { ground_v: live.ground_v, ..*levels }), stop)?;
                // rails and inputs that live go to the real rails; what is left hangs on the virtual ones
                add(&mut up.real_supply, &up.supply, 1.0);
                up.supply = [0.0; 5];
                add(&mut up.real_ground, &up.inputs_low, 1.0);
                add(&mut up.ground, &up.inputs_low, -1.0);
                add(&mut down.real_ground, &down.ground, 1.0);
                down.ground = [0.0; 5];
                add(&mut down.real_supply, &down.inputs_high, 1.0);
                add(&mut down.supply, &down.inputs_high, -1.0);
                up.join(down);
                up
            }
        };
        if let Some(island) = self.island(stop)? {
            sum.join(island.clone().on_real_rails());
        }
        Ok(sum)
    }
}
