//! Values and probabilities as weights of the states of every cell, and how much of them is known.

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::probability::{Ground, Probabilities};
use crate::read::verilog::connect::Connected;

/// How many instances are in a known, a probable, an assumed state.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub struct Certainty {
    /// Every pin has one value.
    pub known: u64,
    /// Some pins have probabilities that follow from given ones.
    pub probable: u64,
    /// Some pins rest on an assumption.
    pub assumed: u64,
    /// Cells without function.
    pub opaque: u64,
}

impl Certainty {
    /// All instances.
    pub fn all(&self) -> u64 {
        self.known + self.probable + self.assumed + self.opaque
    }
}

/// Weights of states by master.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct StateShares {
    /// Master → weight of each state as [`BoundCell::states`](crate::cell::BoundCell::states) numbers them; adds up to the
    /// number of instances.
    pub weights: IndexMap<String, Vec<f64>>,
    /// How sure they are.
    pub certainty: Certainty,
}

/// Adds up the states of every instance.
pub fn shares(net: &Connected, p: &Probabilities<'_>) -> StateShares {
    let c = p.circuit;
    let mut sums: Vec<Vec<f64>> = c.functions.iter().map(|f| vec![0.0; f.state_count]).collect();
    let mut names: Vec<Option<String>> = vec![None; c.functions.len()];
    let mut certainty = Certainty { opaque: c.opaque.values().sum(), ..Certainty::default() };
    // in the order of the netlist, so that sums do not depend on how gates were sorted
    let mut order: Vec<usize> = (0..c.gates.len()).collect();
    order.sort_unstable_by_key(|k| c.gates[*k].instance);
    for k in order {
        let g = &c.gates[k];
        let f = g.function as usize;
        names[f].get_or_insert_with(|| net.master_name(net.master(g.instance)).to_owned());
        let own = &mut sums[f];
        p.codes(k, &mut |code, share| {
            let fits = &c.functions[f].states[code];
            for s in fits {
                own[*s as usize] += share / fits.len() as f64;
            }
        });
        match p.rests_on(k) {
            Ground::Known => certainty.known += 1,
            Ground::Given => certainty.probable += 1,
            Ground::Assumed => certainty.assumed += 1,
        }
    }
    let weights = names.into_iter().zip(sums).filter_map(|(n, s)| Some((n?, s))).collect();
    StateShares { weights, certainty }
}
