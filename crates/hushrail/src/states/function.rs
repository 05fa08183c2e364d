//! What a cell computes, from its own transistors seen as switches.

use serde::{Deserialize, Serialize};

use super::cover::{Cube, cover};
use crate::cell::logic::Logic;
use crate::cell::{BoundCell, CellError, Role};

/// One output.
#[derive(Debug, Clone, PartialEq)]
pub struct Output {
    /// The port.
    pub name: String,
    /// Value for each code; none where it floats, fights or cannot be told.
    pub table: Vec<Option<bool>>,
    /// Products whose sum is where it can be one (codes without a value included).
    pub can_one: Vec<Cube>,
    /// Where it can be zero.
    pub can_zero: Vec<Cube>,
}

/// A cell's outputs and states over its inputs.
///
/// A code has the value of input k in bit k. A cell that stores has one variable more, the last: the value that its first
/// storing output keeps where the inputs do not decide it.
#[derive(Debug, Clone, PartialEq)]
pub struct CellFunction {
    /// The cell.
    pub name: String,
    /// Input ports in the order of the cell.
    pub inputs: Vec<String>,
    /// Outputs in the order of the cell.
    pub outputs: Vec<Output>,
    /// Index of the output whose kept value is the last variable.
    pub keeps: Option<usize>,
    /// For each code the states that fit it, as [`BoundCell::states`] numbers them.
    pub states: Vec<Vec<u32>>,
    /// Number of states.
    pub state_count: usize,
}

/// Most inputs of a cell whose table is made.
pub const MOST_INPUTS: usize = 12;

/// How two descriptions of a cell disagree.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Disagreement {
    /// The cell.
    pub cell: String,
    /// The output.
    pub output: String,
    /// Input values where they differ, such as `A=0 B=1`.
    pub at: String,
    /// By the transistors.
    pub transistors: bool,
    /// By the other description.
    pub other: bool,
}

impl CellFunction {
    /// Derives the function of a cell from its switch picture: every input vector, every value its loops can keep.
    ///
    /// # Errors
    /// More inputs or loops than can be listed.
    pub fn of(bound: &BoundCell) -> Result<Self, CellError> {
        let cell = &bound.cell;
        let ports = |role| cell.ports_of(role).map(|i| (cell.ports[i].to_string(), cell.port_nodes[i]));
        let inputs: Vec<(String, usize)> = ports(Role::Input).collect();
        let outputs: Vec<(String, usize)> = ports(Role::Output).collect();
        let n = inputs.len();
        if n > MOST_INPUTS {
            return Err(CellError::TooMany {
                cell: cell.name.to_string(),
                what: "inputs",
                count: n,
                limit: MOST_INPUTS,
            });
        }
        // in the order of `BoundCell::states`: the first input is the most significant bit there
        let mut fits: Vec<Vec<(u32, Vec<Logic>)>> = vec![Vec::new(); 1 << n];
        let mut state_count = 0;
        for row in 0..1usize << n {
            let bits: Vec<bool> = (0..n).map(|k| row >> (n - 1 - k) & 1 == 1).collect();
            let code = bits.iter().enumerate().fold(0, |c, (k, b)| c | usize::from(*b) << k);
            for s in bound.states_with(&bits)? {
                fits[code].push((state_count, outputs.iter().map(|(_, node)| s.logic[*node]).collect()));
                state_count += 1;
            }
        }
        let varies = |o: usize, f: &[(u32, Vec<Logic>)]| {
            let mut bits = f.iter().filter_map(|(_, v)| v[o].bit());
            bits.next().is_some_and(|first| bits.any(|b| b != first))
        };
        let keeps = (0..outputs.len()).find(|o| fits.iter().any(|f| varies(*o, f)));
        let vars = n + usize::from(keeps.is_some());
        let mut states = vec![Vec::new(); 1 << vars];
        let mut tables = vec![vec![None; 1 << vars]; outputs.len()];
        for code in 0..1usize << vars {
            let all = &fits[code & ((1 << n) - 1)];
            let kept = code >> n & 1 == 1;
            let own: Vec<&(u32, Vec<Logic>)> = match keeps {
                Some(o) if varies(o, all) => all.iter().filter(|(_, v)| v[o].bit() == Some(kept)).collect(),
                _ => all.iter().collect(),
            };
            states[code] = own.iter().map(|x| x.0).collect();
            for (o, table) in tables.iter_mut().enumerate() {
                let mut bits = own.iter().map(|x| x.1[o].bit());
                let first = bits.next().flatten();
                table[code] = first.filter(|_| bits.all(|b| b == first));
            }
        }
        let outputs = outputs
            .into_iter()
            .zip(tables)
            .map(|((name, _), table)| {
                let can =
                    |value: bool| table.iter().map(|x| x.is_none_or(|b| b == value)).collect::<Vec<_>>();
                Output { name, can_one: cover(&can(true)), can_zero: cover(&can(false)), table }
            })
            .collect();
        Ok(Self {
            name: cell.name.to_string(),
            inputs: inputs.into_iter().map(|x| x.0).collect(),
            outputs,
            keeps,
            states,
            state_count: state_count as usize,
        })
    }

    /// Variables: inputs, and the kept value where there is one.
    pub fn vars(&self) -> usize {
        self.inputs.len() + usize::from(self.keeps.is_some())
    }

    /// Variables that some output answers to.
    pub fn support(&self) -> u32 {
        let cubes = self.outputs.iter().flat_map(|o| o.can_one.iter().chain(&o.can_zero));
        cubes.fold(0, |m, c| m | c.care)
    }

    /// Input values of a code in words.
    pub fn words(&self, code: usize) -> String {
        let words: Vec<String> =
            self.inputs.iter().enumerate().map(|(k, p)| format!("{p}={}", code >> k & 1)).collect();
        words.join(" ")
    }

    /// Where another description of an output, given as a function of named pins, says something else. Codes at which either
    /// has no value are left out.
    pub fn disagreements(
        &self,
        output: &str,
        other: &dyn Fn(&dyn Fn(&str) -> Option<bool>) -> Option<bool>,
    ) -> Vec<Disagreement> {
        let Some(own) = self.outputs.iter().find(|o| o.name == output) else { return Vec::new() };
        let mut found = Vec::new();
        for (code, value) in own.table.iter().enumerate() {
            let pin = |name: &str| {
                let k = self.inputs.iter().position(|p| p == name)?;
                Some(code >> k & 1 == 1)
            };
            if let (Some(a), Some(b)) = (*value, other(&pin))
                && a != b
            {
                found.push(Disagreement {
                    cell: self.name.clone(),
                    output: output.to_owned(),
                    at: self.words(code),
                    transistors: a,
                    other: b,
                });
            }
        }
        found
    }
}
