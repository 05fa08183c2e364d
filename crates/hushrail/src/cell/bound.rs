//! A cell at a corner: its devices made, its plan worked out, its states enumerated and solved.

use std::sync::Arc;

use rustc_hash::FxHashMap;
use serde::{Deserialize, Serialize};

use super::cell::{Cell, Part, Role};
use super::logic::{Logic, Switches};
use crate::circuit::network::{Element, Network, Placed, Volt, bias_of};
use crate::circuit::newton::{Effort, SolveOptions, Solver, Workspace};
use crate::circuit::plan::Plan;
use crate::device::diode::Diode;
use crate::device::process::{Process, Request, Transistor};
use crate::device::range::Outside;
use crate::physics::Kelvin;
use crate::read::deck::Note;
use crate::read::source::ReadError;

/// A state of a cell could not be solved, or its states cannot be listed.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CellError {
    /// Kirchhoff's law is not met within the limits.
    #[error(
        "no operating point for cell `{cell}` in state {state} at {temp_c:.1} °C with rails at {supply_v} and {ground_v} V: residual {residual_a:.3e} A after \
         {steps} steps (limit {allowed_a:.1e} A), worst at node `{node}`"
    )]
    Unbalanced {
        /// The cell.
        cell: String,
        /// Its state.
        state: String,
        /// Temperature, degrees Celsius.
        temp_c: f64,
        /// Supply rail, V.
        supply_v: f64,
        /// Ground rail, V.
        ground_v: f64,
        /// The worst node.
        node: String,
        /// Its imbalance, A.
        residual_a: f64,
        /// What was allowed, A.
        allowed_a: f64,
        /// Steps taken.
        steps: usize,
    },
    /// Too many inputs or loops to list every state.
    #[error(
        "cell `{cell}` has {count} {what}; at most {limit} can be enumerated: give the states that matter"
    )]
    TooMany {
        /// The cell.
        cell: String,
        /// What there is too much of.
        what: &'static str,
        /// How many.
        count: usize,
        /// How many can be handled.
        limit: usize,
    },
    /// The answer would rest on numbers that the user has not asked for.
    #[error(
        "cell `{cell}` in state {state}: a transistor leaves the points of its table: {reason}; add points, or set `extrapolate = true` \
         and read the result as a guess"
    )]
    Outside {
        /// The cell.
        cell: String,
        /// Its state.
        state: String,
        /// Which voltage, and the range.
        reason: String,
    },
}

/// Voltages the cell's surroundings hold, V.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Levels {
    /// Supply rail of the logic.
    pub supply_v: f64,
    /// Ground rail of the logic.
    pub ground_v: f64,
    /// n-well.
    pub nwell_v: f64,
    /// p-well.
    pub pwell_v: f64,
    /// Inputs at one.
    pub high_v: f64,
    /// Inputs at zero.
    pub low_v: f64,
}

impl Levels {
    /// Full supply, wells tied to the rails.
    pub fn powered(vdd_v: f64) -> Self {
        Self { supply_v: vdd_v, ground_v: 0.0, nwell_v: vdd_v, pwell_v: 0.0, high_v: vdd_v, low_v: 0.0 }
    }
}

/// One state of a cell: input values and, where it stores, what it stores.
#[derive(Debug, Clone, PartialEq)]
pub struct State {
    /// Input values in the order of the input ports.
    pub inputs: Vec<bool>,
    /// Logic value of every node.
    pub logic: Vec<Logic>,
    /// Pins and values, such as `A=0 B=1 Y=1`.
    pub label: String,
}

/// Currents of one solved state.
#[derive(Debug, Clone, PartialEq)]
pub struct StateCurrents {
    /// Current into the cell at each port by mechanism (order of [`crate::device::Mechanism::ALL`]), A; outputs carry none.
    pub ports: Vec<[f64; 5]>,
    /// Power that each mechanism dissipates in the cell, W, wherever its current flows; adds up to what the ports bring in
    /// (Tellegen's theorem).
    pub power_w: [f64; 5],
    /// Node voltages, V.
    pub node_v: Vec<f64>,
    /// Value of every port by its voltage against the middle of the rails.
    pub port_bits: Vec<bool>,
    /// Work done.
    pub effort: Effort,
    /// Whether the point is one the cell stays in, with every gate at the value the state names.
    pub stable: bool,
    /// The transistor furthest outside what its model rests on.
    pub outside: Option<Outside>,
}

/// A device made once for each model, geometry and temperature.
#[derive(Debug, Default)]
pub struct DeviceShelf {
    transistors: FxHashMap<(Arc<str>, Vec<(Arc<str>, u64)>), Transistor>,
    diodes: FxHashMap<(Arc<str>, Vec<(Arc<str>, u64)>), (Diode, f64)>,
    /// Remarks of the cards.
    pub notes: Vec<Note>,
}

impl DeviceShelf {
    fn key(r: &Request) -> (Arc<str>, Vec<(Arc<str>, u64)>) {
        (Arc::clone(&r.model), r.params.iter().map(|(n, v)| (Arc::clone(n), v.to_bits())).collect())
    }

    /// The transistor asked for, made at most once.
    ///
    /// # Errors
    /// See [`Process::transistor`].
    pub fn transistor(&mut self, p: &Process, r: &Request, t: Kelvin) -> Result<Transistor, ReadError> {
        let key = Self::key(r);
        if let Some(found) = self.transistors.get(&key) {
            return Ok(found.clone());
        }
        let made = p.transistor(r, t, &mut self.notes)?;
        self.transistors.insert(key, made.clone());
        Ok(made)
    }

    fn diode(&mut self, p: &Process, r: &Request, t: Kelvin) -> Result<(Diode, f64), ReadError> {
        let key = Self::key(r);
        if let Some(found) = self.diodes.get(&key) {
            return Ok(*found);
        }
        let made = p.diode(r, t, &mut self.notes)?;
        self.diodes.insert(key, made);
        Ok(made)
    }

    /// Number of distinct devices.
    pub fn len(&self) -> usize {
        self.transistors.len() + self.diodes.len()
    }
    /// Whether nothing was made yet.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }
}

/// A cell with the devices of one process corner and temperature.
#[derive(Debug, Clone)]
pub struct BoundCell {
    /// The cell.
    pub cell: Arc<Cell>,
    /// Its network.
    pub net: Network,
    /// Its plan.
    pub plan: Plan,
    /// Temperature.
    pub temp: Kelvin,
    /// Whether every transistor has GIDL in its card.
    pub has_gidl: bool,
}

/// Most inputs of which all combinations are listed.
pub const MAX_INPUTS: usize = 12;

impl BoundCell {
    /// Makes the devices of a cell.
    ///
    /// # Errors
    /// A model, bin or size that cannot be made; the message names the line of the netlist.
    pub fn new(
        cell: &Arc<Cell>,
        process: &Process,
        temp: Kelvin,
        floor_s: f64,
        shelf: &mut DeviceShelf,
    ) -> Result<Self, ReadError> {
        let mut net = Network { n_nodes: cell.nodes.len(), elements: Vec::new(), floor_s };
        let mut has_gidl = true;
        for p in &cell.parts {
            net.elements.push(match p {
                Part::Transistor(r, nodes) => {
                    let t = shelf.transistor(process, r, temp)?;
                    has_gidl &= t.device.has_gidl();
                    Element::Transistor(Placed { device: t.device, count: t.count, nodes: *nodes })
                }
                Part::Diode(r, nodes) => {
                    let (d, m) = shelf.diode(process, r, temp)?;
                    Element::Diode(d, m, *nodes)
                }
                Part::Conductance(g, nodes) => Element::Conductance(*g, *nodes),
            });
        }
        let plan = Plan::new(&net, &cell.held());
        Ok(Self { cell: Arc::clone(cell), net, plan, temp, has_gidl })
    }

    /// Every state: all input vectors, and for each every value the loops can hold.
    ///
    /// # Errors
    /// More inputs or loops than can be listed.
    pub fn states(&self) -> Result<Vec<State>, CellError> {
        let inputs: Vec<usize> = self.cell.ports_of(Role::Input).collect();
        if inputs.len() > MAX_INPUTS {
            return Err(CellError::TooMany {
                cell: self.cell.name.to_string(),
                what: "inputs",
                count: inputs.len(),
                limit: MAX_INPUTS,
            });
        }
        let mut out = Vec::new();
        for code in 0..1u32 << inputs.len() {
            // the first input is the most significant bit, as people write truth tables
            let bits: Vec<bool> =
                (0..inputs.len()).map(|i| code >> (inputs.len() - 1 - i) & 1 == 1).collect();
            out.extend(self.states_with(&bits)?);
        }
        Ok(out)
    }

    /// The states with the inputs at `bits`.
    ///
    /// # Errors
    /// More loops than can be listed.
    pub fn states_with(&self, bits: &[bool]) -> Result<Vec<State>, CellError> {
        let held = self.held_logic(bits);
        let fix =
            Switches::new(&self.net, &self.plan).fixpoints(&held).map_err(|count| CellError::TooMany {
                cell: self.cell.name.to_string(),
                what: "nets in loops",
                count,
                limit: super::logic::MAX_LOOP_NETS,
            })?;
        let many = fix.len() > 1;
        Ok(fix
            .into_iter()
            .enumerate()
            .map(|(k, logic)| {
                let mut words = Vec::new();
                for (i, r) in self.cell.roles.iter().enumerate() {
                    let v = logic[self.cell.port_nodes[i]];
                    match (r, v.bit()) {
                        (Role::Input | Role::Output, Some(b)) => {
                            words.push(format!("{}={}", self.cell.ports[i], u8::from(b)));
                        }
                        (Role::Output, None) => words.push(format!("{}=z", self.cell.ports[i])),
                        _ => {}
                    }
                }
                let mut label = words.join(" ");
                if many {
                    label = format!("{label} #{k}");
                }
                State { inputs: bits.to_vec(), logic, label }
            })
            .collect())
    }

    fn held_logic(&self, bits: &[bool]) -> Vec<Option<bool>> {
        let mut held = vec![None; self.cell.nodes.len()];
        let mut next = bits.iter();
        for (r, &n) in self.cell.roles.iter().zip(&self.cell.port_nodes) {
            let v = match r {
                Role::Input => next.next().copied(),
                Role::Output => None,
                _ => continue,
            };
            if held[n].is_none() {
                held[n] = v;
            }
        }
        for (r, &n) in self.cell.roles.iter().zip(&self.cell.port_nodes) {
            match r {
                Role::Supply | Role::Nwell => held[n] = Some(true),
                Role::Ground | Role::Pwell => held[n] = Some(false),
                _ => {}
            }
        }
        held
    }

    /// Solves one state at given levels.
    ///
    /// # Errors
    /// No operating point within the limits.
    pub fn solve(
        &self,
        state: &State,
        levels: &Levels,
        options: &SolveOptions,
        w: &mut Workspace,
    ) -> Result<StateCurrents, CellError> {
        let (v, effort, stable) = self.operating_point(state, levels, options, w)?;
        Ok(self.currents_at(&v, levels, effort, stable))
    }

    /// Solves one state whose currents are an answer and not a step to one: numbers outside the points of a table are refused
    /// unless its device says otherwise.
    ///
    /// # Errors
    /// As for [`BoundCell::solve`], or [`CellError::Outside`].
    pub fn answer(
        &self,
        state: &State,
        levels: &Levels,
        options: &SolveOptions,
        w: &mut Workspace,
    ) -> Result<StateCurrents, CellError> {
        let c = self.solve(state, levels, options, w)?;
        match &c.outside {
            Some(o) if o.refused => Err(CellError::Outside {
                cell: self.cell.name.to_string(),
                state: state.label.clone(),
                reason: o.to_string(),
            }),
            _ => Ok(c),
        }
    }

    /// Node voltages of one state, the work they took, and whether the cell stays there.
    pub(crate) fn operating_point(
        &self,
        state: &State,
        levels: &Levels,
        options: &SolveOptions,
        w: &mut Workspace,
    ) -> Result<(Vec<Volt>, Effort, bool), CellError> {
        let cell = &self.cell;
        let mut bits = state.inputs.iter();
        let mut v = self.held_volts(levels, || {
            if bits.next().copied().unwrap_or(false) { levels.high_v } else { levels.low_v }
        });
        let held = cell.held();
        let rails: Vec<f64> = (0..v.len()).filter(|&n| held[n]).map(|n| v[n].rail).collect();
        let vt = self.temp.thermal_voltage();
        for n in (0..v.len()).filter(|&n| !held[n]) {
            v[n] = self.guess(state.logic[n], n, levels);
        }
        let mut solver = Solver::new(&self.net, &self.plan, options, vt, &rails);
        solver.solve(&mut v, w).map_err(|e| CellError::Unbalanced {
            cell: cell.name.to_string(),
            state: state.label.clone(),
            temp_c: self.temp.celsius(),
            supply_v: levels.supply_v,
            ground_v: levels.ground_v,
            node: cell.nodes[e.node].to_string(),
            residual_a: e.residual_a,
            allowed_a: e.allowed_a,
            steps: e.steps,
        })?;
        let stable = self.keeps(state, &v, levels) && solver.is_stable(&v, w);
        Ok((v, solver.effort, stable))
    }

    /// Voltages of rails, wells and inputs; those of the inputs come from `input`, in the order of the ports.
    pub(super) fn held_volts(&self, levels: &Levels, mut input: impl FnMut() -> f64) -> Vec<Volt> {
        let cell = &self.cell;
        let mut v = vec![Volt::default(); cell.nodes.len()];
        for (r, &n) in cell.roles.iter().zip(&cell.port_nodes) {
            if *r == Role::Input {
                v[n] = Volt::held(input());
            }
        }
        for (r, &n) in cell.roles.iter().zip(&cell.port_nodes) {
            let level = match r {
                Role::Supply => levels.supply_v,
                Role::Ground => levels.ground_v,
                Role::Nwell => levels.nwell_v,
                Role::Pwell => levels.pwell_v,
                Role::Input | Role::Output => continue,
            };
            v[n] = Volt::held(level);
        }
        v
    }

    /// Where the voltage of an unknown node is sought first.
    pub(super) fn guess(&self, logic: Logic, node: usize, levels: &Levels) -> Volt {
        let vt = self.temp.thermal_voltage();
        let (lo, hi) = (levels.ground_v, levels.supply_v);
        match (logic, self.plan.polarity[node]) {
            (Logic::Low, _) => Volt { rail: lo, offset: 0.0 },
            (Logic::High, _) => Volt { rail: hi, offset: 0.0 },
            (Logic::Floating, Some(crate::device::Polarity::N)) => Volt { rail: lo, offset: 1.5 * vt },
            (Logic::Floating, Some(crate::device::Polarity::P)) => Volt { rail: hi, offset: -1.5 * vt },
            _ => Volt { rail: lo, offset: 0.5 * (hi - lo) },
        }
    }

    /// Whether every net that gates a transistor of a cell with loops still has the value of the state: where rails have
    /// collapsed too far, the solver ends in what is left of the states.
    fn keeps(&self, state: &State, v: &[Volt], levels: &Levels) -> bool {
        let middle = 0.5 * (levels.supply_v + levels.ground_v);
        let looped = self.plan.groups.iter().any(|g| g.len() > 1);
        !looped
            || self.net.elements.iter().all(|e| match e {
                Element::Transistor(p) => {
                    let gate = p.nodes[1];
                    state.logic[gate].bit().is_none_or(|b| (v[gate].get() > middle) == b)
                }
                _ => true,
            })
    }

    fn currents_at(&self, v: &[Volt], levels: &Levels, effort: Effort, stable: bool) -> StateCurrents {
        let cell = &self.cell;
        let (lo, hi) = (levels.ground_v, levels.supply_v);
        let mut at_node = vec![[0.0; 5]; v.len()];
        let mut outside = None;
        for e in &self.net.elements {
            if let Element::Transistor(p) = e {
                outside = Outside::worse(outside, p.device.outside(bias_of(&p.nodes, v)));
            }
            let split = self.net.by_mechanism(e, v);
            for (m, row) in split.iter().enumerate() {
                for (t, &n) in e.nodes().iter().enumerate() {
                    at_node[n][m] += row[t];
                }
            }
        }
        let mut power_w = [0.0; 5];
        for (split, x) in at_node.iter().zip(v) {
            for (p, i) in power_w.iter_mut().zip(split) {
                *p += i * x.get();
            }
        }
        let mut counted = vec![false; v.len()];
        let ports = cell
            .roles
            .iter()
            .zip(&cell.port_nodes)
            .map(|(r, &n)| {
                // ports tied to one node share its current: the first takes it
                if *r == Role::Output || counted[n] {
                    [0.0; 5]
                } else {
                    counted[n] = true;
                    at_node[n]
                }
            })
            .collect();
        let middle = 0.5 * (lo + hi);
        StateCurrents {
            ports,
            power_w,
            port_bits: cell.port_nodes.iter().map(|&n| v[n].get() > middle).collect(),
            node_v: v.iter().map(|x| x.get()).collect(),
            effort,
            outside,
            stable,
        }
    }
}

impl StateCurrents {
    /// Current into all ports of a role by mechanism, A.
    pub fn role(&self, cell: &Cell, role: Role) -> [f64; 5] {
        let mut sum = [0.0; 5];
        for i in cell.ports_of(role) {
            for (s, x) in sum.iter_mut().zip(self.ports[i]) {
                *s += x;
            }
        }
        sum
    }
}

/// Power drawn from supply and n-well with wells tied to the rails, W.
pub fn supply_power(cell: &BoundCell, c: &StateCurrents, levels: &Levels) -> f64 {
    let total = |r: Role| c.role(&cell.cell, r).iter().sum::<f64>();
    let inputs: f64 = cell
        .cell
        .ports_of(Role::Input)
        .filter(|&i| c.port_bits[i])
        .map(|i| c.ports[i].iter().sum::<f64>())
        .sum();
    levels.supply_v * total(Role::Supply) + levels.nwell_v * total(Role::Nwell) + levels.high_v * inputs
}
