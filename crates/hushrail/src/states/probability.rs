//! How likely each net is at one.

#![expect(
    clippy::cast_possible_truncation,
    reason = "nets, gates and states are numbered with 32 bits; readers refuse more"
)]

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::circuit::{Circuit, NONE, Source};
use super::values::Values;
use crate::read::pattern::fits_pattern;
use crate::read::source::nearest;
use crate::read::verilog::connect::{Connected, NetId};

/// What is known of a net or of what an instance keeps.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Held {
    /// It is at this value.
    Value(bool),
    /// It is at one for this share of the time.
    Probability(f64),
}

impl Held {
    /// From the share of time at one; zero and one are values.
    pub fn of(one: f64) -> Self {
        if one == 0.0 || one == 1.0 { Self::Value(one == 1.0) } else { Self::Probability(one) }
    }
}

/// What is known of a circuit that is parked: share of time at one by name; zero and one are values. Names are paths below the
/// circuit's top or the design's; `*` stands for any run of characters.
///
/// Later entries win over earlier ones. What nothing is said of counts as one half of the time at one, and is told as assumed.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Parking {
    /// Nets: inputs, clamped outputs of isolation, or any other.
    #[serde(default)]
    pub nets: IndexMap<String, f64>,
    /// What registers keep: instance paths.
    #[serde(default)]
    pub registers: IndexMap<String, f64>,
}

/// A parking that names what is not there, or says what cannot be.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ParkingError {
    /// Nothing has the name.
    #[error("{kind} `{name}` is not in the netlist{}", near.as_ref().map_or(String::new(), |n| format!("; did you mean `{n}`?")))]
    Unknown {
        /// `net` or `register`.
        kind: &'static str,
        /// As given.
        name: String,
        /// The nearest known name.
        near: Option<String>,
    },
    /// A probability that is none.
    #[error("probability of `{name}` is {value}; want 0 to 1")]
    Range {
        /// Of what.
        name: String,
        /// As given.
        value: f64,
    },
}

/// How sure a net's probability is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Ground {
    /// One value.
    Known,
    /// From probabilities that were given.
    Given,
    /// From an assumption somewhere.
    Assumed,
}

/// Probabilities of every net.
#[derive(Debug, Clone)]
pub struct Probabilities<'a> {
    /// The circuit.
    pub circuit: &'a Circuit,
    /// Probability of one.
    pub one: Vec<f64>,
    /// What it rests on.
    pub ground: Vec<Ground>,
    /// Largest change in the last pass over closed loops.
    pub unsettled: f64,
}

/// Carries what is known through a circuit: values where they follow, probabilities elsewhere, the variables of a gate taken
/// as independent; names start at the instance path `under` or at the top (Parker and McCluskey, *IEEE Trans. Comput.* C-24 (1975) 668, first order, from memory).
///
/// # Errors
/// Names that nothing has, probabilities outside zero to one.
pub fn probabilities<'a>(
    net: &Connected,
    circuit: &'a Circuit,
    under: &str,
    parking: &Parking,
) -> Result<Probabilities<'a>, ParkingError> {
    Ok(carry(circuit, &resolve(net, circuit, under, parking)?))
}

/// What is known, by net number.
///
/// # Errors
/// As [`probabilities`].
pub fn resolve(
    net: &Connected,
    circuit: &Circuit,
    under: &str,
    parking: &Parking,
) -> Result<Vec<Option<Held>>, ParkingError> {
    let mut given: Vec<Option<Held>> = vec![None; circuit.net_count];
    for (name, one) in parking.nets.iter().chain(&parking.registers) {
        if !(0.0..=1.0).contains(one) {
            return Err(ParkingError::Range { name: name.clone(), value: *one });
        }
    }
    let inside = if under.is_empty() { String::new() } else { format!("{under}/") };
    let wild = parking.nets.keys().any(|k| k.contains('*'));
    let paths: Vec<(String, u32)> = if wild {
        net.nets().filter(|n| !n.is_constant()).map(|n| (net.net_path(n), n.0)).collect()
    } else {
        Vec::new()
    };
    let matches = |pattern: &str, path: &str| {
        fits_pattern(pattern, path)
            || path.strip_prefix(&inside).is_some_and(|own| fits_pattern(pattern, own))
    };
    for (name, one) in &parking.nets {
        let mut found = false;
        let literal = net.net(&format!("{inside}{name}")).or_else(|| net.net(name));
        if let Some(n) = literal.filter(|n| !n.is_constant()) {
            given[n.0 as usize] = Some(Held::of(*one));
            found = true;
        } else if name.contains('*') {
            for (_, n) in paths.iter().filter(|(p, _)| matches(name, p)) {
                given[*n as usize] = Some(Held::of(*one));
                found = true;
            }
        }
        if !found {
            let names: Vec<String> = circuit.source_names(net, false);
            let near = nearest(name, names.iter().map(|n| n.strip_prefix(&inside).unwrap_or(n)));
            return Err(ParkingError::Unknown { kind: "net", name: name.clone(), near });
        }
    }
    if parking.registers.is_empty() {
        return Ok(given);
    }
    let kept: Vec<(String, u32)> = circuit
        .sources
        .iter()
        .filter_map(|(s, n)| match s {
            Source::Kept(i) => Some((net.instance_path(*i), *n)),
            Source::Net(_) => None,
        })
        .collect();
    for (name, one) in &parking.registers {
        let mut found = false;
        for (_, n) in kept.iter().filter(|(p, _)| matches(name, p)) {
            given[*n as usize] = Some(Held::of(*one));
            found = true;
        }
        // a pattern may find nothing in a block without registers
        if !found && !name.contains('*') {
            let near = nearest(name, kept.iter().map(|(p, _)| p.strip_prefix(&inside).unwrap_or(p)));
            return Err(ParkingError::Unknown { kind: "register", name: name.clone(), near });
        }
    }
    Ok(given)
}

/// The same with what is known by net number.
pub fn carry<'a>(circuit: &'a Circuit, given: &[Option<Held>]) -> Probabilities<'a> {
    let held = |n: u32| given[n as usize].is_some();
    let mut values = Values::new(circuit);
    for (n, h) in given.iter().enumerate() {
        if let Some(Held::Value(v)) = h {
            values.set(n as u32, Some(*v));
        }
    }
    values.propagate_but(&held);
    let mut p = Probabilities {
        circuit,
        one: vec![0.5; circuit.net_count],
        ground: vec![Ground::Assumed; circuit.net_count],
        unsettled: 0.0,
    };
    for n in 0..circuit.net_count {
        if let Some(v) = values.first(n as u32) {
            (p.one[n], p.ground[n]) = (if v { 1.0 } else { 0.0 }, Ground::Known);
        } else if let Some(Held::Probability(x)) = given[n] {
            (p.one[n], p.ground[n]) = (x, Ground::Given);
        }
    }
    p.ground[NetId::UNKNOWN.0 as usize] = Ground::Assumed;
    for k in 0..circuit.looped_from {
        p.gate(k, &held);
    }
    for _ in 0..PASSES {
        p.unsettled = 0.0;
        for k in circuit.looped_from..circuit.gates.len() {
            let change = p.gate(k, &held);
            p.unsettled = p.unsettled.max(change);
        }
        if p.unsettled < 1e-9 {
            break;
        }
    }
    p
}

/// Passes over closed loops.
const PASSES: usize = 50;

impl Probabilities<'_> {
    /// Calls `f` with every code of a gate that can be and its probability.
    pub fn codes(&self, gate: usize, f: &mut dyn FnMut(usize, f64)) {
        let g = &self.circuit.gates[gate];
        let vars = self.circuit.variables(g);
        // known variables are fixed, the others run
        let mut base = 0;
        let mut open = Vec::new();
        for (k, &n) in vars.iter().enumerate() {
            match self.one[n as usize] {
                1.0 => base |= 1 << k,
                0.0 => {}
                p => open.push((k, p)),
            }
        }
        for run in 0..1usize << open.len() {
            let (mut code, mut share) = (base, 1.0);
            for (j, (k, p)) in open.iter().enumerate() {
                if run >> j & 1 == 1 {
                    code |= 1 << k;
                    share *= p;
                } else {
                    share *= 1.0 - p;
                }
            }
            f(code, share);
        }
    }

    /// What the variables of a gate rest on, the worst of them.
    pub fn rests_on(&self, gate: usize) -> Ground {
        let g = &self.circuit.gates[gate];
        let f = &self.circuit.functions[g.function as usize];
        let vars = self.circuit.variables(g);
        // what a cell keeps does not matter where its inputs decide
        let decided = f.keeps.is_some_and(|_| {
            let last = vars.len() - 1;
            let mut same = true;
            self.codes(gate, &mut |code, _| {
                same &= f.states[code] == f.states[code ^ 1 << last];
            });
            same
        });
        let count = vars.len() - usize::from(decided);
        vars[..count].iter().map(|n| self.ground[*n as usize]).max().unwrap_or(Ground::Known)
    }

    fn gate(&mut self, k: usize, held: &dyn Fn(u32) -> bool) -> f64 {
        let circuit = self.circuit;
        let g = &circuit.gates[k];
        let f = &circuit.functions[g.function as usize];
        let mut change = 0.0f64;
        for (o, &net) in circuit.outputs(g).iter().enumerate() {
            if net == NONE || held(net) || self.ground[net as usize] == Ground::Known {
                continue;
            }
            let (mut one, mut unclear) = (0.0, false);
            self.codes(k, &mut |code, share| match f.outputs[o].table[code] {
                Some(true) => one += share,
                Some(false) => {}
                None => {
                    unclear |= share > 0.0;
                    one += 0.5 * share;
                }
            });
            // rounding may not leave the range
            let one = one.clamp(0.0, 1.0);
            change = change.max((one - self.one[net as usize]).abs());
            self.one[net as usize] = one;
            self.ground[net as usize] =
                if unclear { Ground::Assumed } else { self.rests_on(k).max(Ground::Given) };
        }
        change
    }
}
