//! Zeros, ones and unknowns, sixty-four vectors at a time.

#![expect(
    clippy::cast_possible_truncation,
    reason = "nets, gates and states are numbered with 32 bits; readers refuse more"
)]

use super::circuit::{Circuit, NONE};
use super::cover::Cube;
use crate::read::verilog::connect::NetId;

/// Variables of a gate at most: inputs and what is kept, up to a power of two.
const MOST: usize = 16;

/// A literal: variable, and which of its words is asked.
#[derive(Debug, Clone, Copy)]
struct Literal {
    var: u8,
    one: bool,
}

/// An output's sums of products, laid out to be run through.
#[derive(Debug, Clone, Default)]
struct Program {
    /// Literals of all products.
    literals: Vec<Literal>,
    /// Products: ends in `literals`; first those of zero, then those of one.
    ends: Vec<u32>,
    /// How many of them are of zero.
    zeros: usize,
}

impl Program {
    fn of(can_zero: &[Cube], can_one: &[Cube]) -> Self {
        let mut p = Self { zeros: can_zero.len(), ..Self::default() };
        for c in can_zero.iter().chain(can_one) {
            for var in (0..32).filter(|v| c.care >> v & 1 == 1) {
                p.literals.push(Literal { var, one: c.value >> var & 1 == 1 });
            }
            p.ends.push(p.literals.len() as u32);
        }
        p
    }

    /// Words of zero and one, from those of the variables.
    #[inline]
    fn run(&self, variables: &[[u64; 2]; MOST]) -> [u64; 2] {
        let mut out = [0u64; 2];
        let mut at = 0;
        for (k, &end) in self.ends.iter().enumerate() {
            let mut word = !0u64;
            for l in &self.literals[at..end as usize] {
                word &= variables[l.var as usize % MOST][usize::from(l.one)];
            }
            out[usize::from(k >= self.zeros)] |= word;
            at = end as usize;
        }
        out
    }
}

/// Values of every net in sixty-four vectors: whether it can be zero, whether it can be one. Both: unknown.
///
/// The values of a gate are exact for its own variables; that two of them are one net somewhere before is not seen, so that a
/// known value may come out unknown, never the other way round.
#[derive(Debug, Clone)]
pub struct Values<'a> {
    circuit: &'a Circuit,
    programs: Vec<Vec<Program>>,
    /// For each net the words of zero and of one.
    pub rails: Vec<[u64; 2]>,
}

impl<'a> Values<'a> {
    /// Everything unknown but the constants.
    pub fn new(circuit: &'a Circuit) -> Self {
        let programs = circuit
            .functions
            .iter()
            .map(|f| f.outputs.iter().map(|o| Program::of(&o.can_zero, &o.can_one)).collect())
            .collect();
        let mut rails = vec![[!0u64; 2]; circuit.net_count];
        rails[NetId::ZERO.0 as usize] = [!0, 0];
        rails[NetId::ONE.0 as usize] = [0, !0];
        Self { circuit, programs, rails }
    }

    /// Puts one value into all vectors of a net; unknown for none.
    pub fn set(&mut self, net: u32, value: Option<bool>) {
        self.rails[net as usize] = match value {
            Some(true) => [0, !0],
            Some(false) => [!0, 0],
            None => [!0, !0],
        };
    }

    /// The value of a net in the first vector.
    pub fn first(&self, net: u32) -> Option<bool> {
        match self.rails[net as usize].map(|w| w & 1) {
            [1, 0] => Some(false),
            [0, 1] => Some(true),
            _ => None,
        }
    }

    /// Words of a gate's variables.
    #[inline]
    fn gather(&self, variables: &[u32]) -> [[u64; 2]; MOST] {
        let mut words = [[0; 2]; MOST];
        for (to, n) in words.iter_mut().zip(variables) {
            *to = self.rails[*n as usize];
        }
        words
    }

    /// New words of an output of a gate.
    pub(super) fn output(&self, gate: usize, output: usize) -> [u64; 2] {
        let g = &self.circuit.gates[gate];
        self.programs[g.function as usize][output].run(&self.gather(self.circuit.variables(g)))
    }

    /// Evaluates a gate; whether anything changed. Nets in `held` stay.
    fn gate(&mut self, k: usize, held: &dyn Fn(u32) -> bool) -> bool {
        let g = &self.circuit.gates[k];
        let mut changed = false;
        let words = self.gather(self.circuit.variables(g));
        let programs = &self.programs[g.function as usize];
        for (program, &net) in programs.iter().zip(self.circuit.outputs(g)) {
            if net == NONE || held(net) {
                continue;
            }
            let new = program.run(&words);
            let old = &mut self.rails[net as usize];
            changed |= *old != new;
            *old = new;
        }
        changed
    }

    /// Carries the values of the sources through the circuit.
    pub fn propagate(&mut self) {
        self.propagate_but(&|_| false);
    }

    /// The same, leaving nets that are held to a value as they are.
    pub fn propagate_but(&mut self, held: &dyn Fn(u32) -> bool) {
        for k in 0..self.circuit.looped_from {
            self.gate(k, held);
        }
        self.settle_loops(held);
    }

    /// Closed loops, from unknown: every step can only make known (the functions are monotone in knowledge), so this ends.
    pub(super) fn settle_loops(&mut self, held: &dyn Fn(u32) -> bool) {
        for k in self.circuit.looped_from..self.circuit.gates.len() {
            for &net in self.circuit.outputs(&self.circuit.gates[k]) {
                if net != NONE && !held(net) {
                    self.rails[net as usize] = [!0; 2];
                }
            }
        }
        loop {
            let mut changed = false;
            for k in self.circuit.looped_from..self.circuit.gates.len() {
                changed |= self.gate(k, held);
            }
            if !changed {
                break;
            }
        }
    }
}
