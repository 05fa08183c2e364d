//! A netlist with functions: instances in an order in which drivers come first.

#![expect(
    clippy::cast_possible_truncation,
    reason = "nets, gates and states are numbered with 32 bits; readers refuse more"
)]

use std::sync::Arc;

use rustc_hash::FxHashMap;

use super::function::CellFunction;
use crate::read::deck::Note;
use crate::read::verilog::connect::{Connected, InstanceId, NetId};

/// A circuit that cannot be made.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CircuitError {
    /// A path that the netlist does not have.
    #[error("the netlist has no instance `{path}`")]
    NoPath {
        /// The path.
        path: String,
    },
    /// A cell whose pins are not those of its netlist.
    #[error("cell `{master}` has no pin `{pin}` in the netlist of the design; it has {known}")]
    NoPin {
        /// The cell.
        master: String,
        /// The pin of its transistors.
        pin: String,
        /// Pins that the design connects.
        known: String,
    },
}

/// Nets of one instance.
#[derive(Debug, Clone, Copy)]
pub struct Gate {
    /// What it computes.
    pub function: u32,
    /// First of its nets in [`Circuit::nets`]: inputs, the kept value, outputs.
    pub start: u32,
    /// The instance.
    pub instance: InstanceId,
}

/// Where a value enters a circuit.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Source {
    /// A net that nothing of the circuit drives.
    Net(NetId),
    /// What an instance keeps.
    Kept(InstanceId),
}

/// Instances with functions, drivers first; instances without are left out and counted.
#[derive(Debug, Clone)]
pub struct Circuit {
    /// Functions.
    pub functions: Vec<Arc<CellFunction>>,
    /// Instances in order.
    pub gates: Vec<Gate>,
    /// Their nets; numbers past the netlist's are kept values.
    pub nets: Vec<u32>,
    /// Number of nets, kept values included.
    pub net_count: usize,
    /// Where values enter, in a fixed order: nets by number, then kept values.
    pub sources: Vec<(Source, u32)>,
    /// Gates of closed loops, from this place on in `gates`; evaluated until nothing changes.
    pub looped_from: usize,
    /// Gates that read each net: starts into `readers`.
    pub reader_starts: Vec<u32>,
    /// Positions of gates.
    pub readers: Vec<u32>,
    /// Instances without function, by master.
    pub opaque: FxHashMap<u32, u64>,
    /// Remarks.
    pub notes: Vec<Note>,
}

impl Circuit {
    /// Makes a circuit of the instances under a path, with the functions of their masters.
    ///
    /// # Errors
    /// A path that is not there, or a cell without the pins its function needs.
    pub fn new(
        net: &Connected,
        path: &str,
        functions: &dyn Fn(&str) -> Option<Arc<CellFunction>>,
    ) -> Result<Self, CircuitError> {
        let instances =
            net.instances_under(path).ok_or_else(|| CircuitError::NoPath { path: path.to_owned() })?;
        let mut made: Vec<Option<(u32, Vec<u32>)>> = Vec::new();
        let mut list = Vec::new();
        // for each master: its function, and where the pins of its variables and outputs are
        for m in 0..net.master_count() {
            let id = crate::read::verilog::connect::MasterId(m as u32);
            let name = net.master_name(id);
            let Some(f) = functions(name) else {
                made.push(None);
                continue;
            };
            let ports: Vec<_> = net.ports_of(id).collect();
            let place = |pin: &String| {
                ports.iter().find(|p| p.name == *pin).map(|p| p.first as u32).ok_or_else(|| {
                    CircuitError::NoPin {
                        master: name.to_owned(),
                        pin: pin.clone(),
                        known: ports.iter().map(|p| p.name).collect::<Vec<_>>().join(", "),
                    }
                })
            };
            // an output that nobody connects may be missing
            let out = |o: &super::function::Output| place(&o.name).unwrap_or(u32::MAX);
            let mut places = f.inputs.iter().map(place).collect::<Result<Vec<_>, _>>()?;
            places.extend(f.outputs.iter().map(out));
            made.push(Some((list.len() as u32, places)));
            list.push(f);
        }
        let mut next_net = net.net_count() as u32;
        let (mut gates, mut nets) = (Vec::new(), Vec::new());
        let mut opaque: FxHashMap<u32, u64> = FxHashMap::default();
        let mut kept = Vec::new();
        let mut drivers: Vec<u32> = vec![NONE; net.net_count()];
        let mut several = 0u64;
        for i in instances {
            let master = net.master(i).0;
            let Some((f, places)) = &made[master as usize] else {
                *opaque.entry(master).or_default() += 1;
                continue;
            };
            let function = &list[*f as usize];
            let gate = gates.len() as u32;
            let start = nets.len() as u32;
            let pins = net.pins(i);
            // an open pin is unknown to its reader and nothing to its driver
            let at = |k: usize| {
                places.get(k).and_then(|p| pins.get(*p as usize)).filter(|n| **n != NetId::OPEN).map(|n| n.0)
            };
            let inputs = function.inputs.len();
            nets.extend((0..inputs).map(|k| at(k).unwrap_or(NetId::UNKNOWN.0)));
            if function.keeps.is_some() {
                kept.push((Source::Kept(i), next_net));
                nets.push(next_net);
                next_net += 1;
            }
            for o in 0..function.outputs.len() {
                let n = at(inputs + o).filter(|n| !NetId(*n).is_constant());
                nets.push(n.unwrap_or(NONE));
                if let Some(n) = n {
                    if drivers[n as usize] == NONE {
                        drivers[n as usize] = gate;
                    } else if drivers[n as usize] != gate {
                        drivers[n as usize] = SEVERAL;
                        several += 1;
                    }
                }
            }
            gates.push(Gate { function: *f, start, instance: i });
        }
        // a net with several drivers keeps none: its value is not told
        let mut notes = Vec::new();
        if several > 0 {
            for g in &gates {
                let f = &list[g.function as usize];
                for k in 0..f.outputs.len() {
                    let n = &mut nets[g.start as usize + f.vars() + k];
                    if *n != NONE && drivers[*n as usize] == SEVERAL {
                        *n = NONE;
                    }
                }
            }
            notes.push(Note::new(
                "several-drivers",
                format!("{several} nets have several drivers; their values are taken as unknown"),
            ));
        }
        let mut c = Self {
            functions: list,
            gates,
            nets,
            net_count: next_net as usize,
            sources: Vec::new(),
            looped_from: 0,
            reader_starts: Vec::new(),
            readers: Vec::new(),
            opaque,
            notes,
        };
        c.order(&drivers);
        c.read_by();
        // what somebody reads and nobody drives
        let mut seen = vec![false; net.net_count()];
        for g in &c.gates {
            let f = &c.functions[g.function as usize];
            for &n in &c.nets[g.start as usize..][..f.inputs.len()] {
                seen[n as usize] = true;
            }
        }
        for (n, seen) in seen.iter().enumerate() {
            if *seen && !NetId(n as u32).is_constant() && (drivers[n] == NONE || drivers[n] == SEVERAL) {
                c.sources.push((Source::Net(NetId(n as u32)), n as u32));
            }
        }
        c.sources.extend(kept);
        Ok(c)
    }

    /// Nets of a gate's variables.
    pub fn variables(&self, g: &Gate) -> &[u32] {
        &self.nets[g.start as usize..][..self.functions[g.function as usize].vars()]
    }

    /// Nets of a gate's outputs; [`NONE`] where nothing is driven.
    pub fn outputs(&self, g: &Gate) -> &[u32] {
        let f = &self.functions[g.function as usize];
        &self.nets[g.start as usize + f.vars()..][..f.outputs.len()]
    }

    /// Gates in an order in which drivers come first (Kahn 1962); what is left lies on loops or behind them.
    fn order(&mut self, drivers: &[u32]) {
        let n = self.gates.len();
        let mut waits = vec![0u32; n];
        let mut follow_starts = vec![0u32; n + 1];
        let edges = |c: &Self, visit: &mut dyn FnMut(usize, usize)| {
            for (k, g) in c.gates.iter().enumerate() {
                let support = c.functions[g.function as usize].support();
                for (v, &net) in c.variables(g).iter().enumerate() {
                    if support >> v & 1 == 1
                        && let Some(&d) = drivers.get(net as usize)
                        && d != NONE
                        && d != SEVERAL
                    {
                        visit(d as usize, k);
                    }
                }
            }
        };
        edges(self, &mut |from, to| {
            follow_starts[from + 1] += 1;
            waits[to] += 1;
        });
        for k in 0..n {
            follow_starts[k + 1] += follow_starts[k];
        }
        let mut fill = follow_starts.clone();
        let mut follow = vec![0u32; follow_starts[n] as usize];
        edges(self, &mut |from, to| {
            follow[fill[from] as usize] = to as u32;
            fill[from] += 1;
        });
        let mut order: Vec<u32> = (0..n as u32).filter(|k| waits[*k as usize] == 0).collect();
        let mut at = 0;
        while at < order.len() {
            let k = order[at] as usize;
            at += 1;
            for &to in &follow[follow_starts[k] as usize..follow_starts[k + 1] as usize] {
                waits[to as usize] -= 1;
                if waits[to as usize] == 0 {
                    order.push(to);
                }
            }
        }
        self.looped_from = order.len();
        order.extend((0..n as u32).filter(|k| waits[*k as usize] > 0));
        if self.looped_from < n {
            self.notes.push(Note::new(
                "closed-loops",
                format!(
                    "{} instances lie on closed loops of combinational logic or behind them; what the loops keep stays unknown",
                    n - self.looped_from
                ),
            ));
        }
        // nets in the order of gates, so that a pass runs through memory once
        let mut nets = Vec::with_capacity(self.nets.len());
        let gates = order
            .iter()
            .map(|k| {
                let g = self.gates[*k as usize];
                let f = &self.functions[g.function as usize];
                let start = nets.len() as u32;
                nets.extend_from_slice(&self.nets[g.start as usize..][..f.vars() + f.outputs.len()]);
                Gate { start, ..g }
            })
            .collect();
        (self.gates, self.nets) = (gates, nets);
    }

    fn read_by(&mut self) {
        let mut starts = vec![0u32; self.net_count + 1];
        for g in &self.gates {
            for &n in self.variables(g) {
                starts[n as usize + 1] += 1;
            }
        }
        for k in 0..self.net_count {
            starts[k + 1] += starts[k];
        }
        let mut fill = starts.clone();
        let mut readers = vec![0u32; starts[self.net_count] as usize];
        for (k, g) in self.gates.iter().enumerate() {
            for &n in self.variables(g) {
                readers[fill[n as usize] as usize] = k as u32;
                fill[n as usize] += 1;
            }
        }
        (self.reader_starts, self.readers) = (starts, readers);
    }

    /// Gates that read a net.
    pub fn readers_of(&self, net: u32) -> &[u32] {
        &self.readers
            [self.reader_starts[net as usize] as usize..self.reader_starts[net as usize + 1] as usize]
    }

    /// Paths of the nets where values enter, or of the instances that keep some.
    pub fn source_names(&self, net: &Connected, kept: bool) -> Vec<String> {
        let name = |s: &Source| match s {
            Source::Net(n) if !kept => Some(net.net_path(*n)),
            Source::Kept(i) if kept => Some(net.instance_path(*i)),
            _ => None,
        };
        self.sources.iter().filter_map(|(s, _)| name(s)).collect()
    }
}

/// No net.
pub const NONE: u32 = u32::MAX;
const SEVERAL: u32 = u32::MAX - 1;
