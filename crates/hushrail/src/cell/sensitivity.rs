//! How the supply current of a cell state answers to threshold, length, width, temperature, oxide and supply, all
//! transistors varied together: node voltages follow by the implicit function theorem, `J·dV = −∂F/∂p`.

use serde::{Deserialize, Serialize};

use super::bound::{BoundCell, CellError, Levels, State};
use super::cell::{Part, Role};
use crate::circuit::eliminate::solve_pivoting;
use crate::circuit::network::{Element, Volt, bias_of};
use crate::circuit::newton::{SolveOptions, Workspace};
use crate::device::Bias;
use crate::device::process::Process;
use crate::device::sensitivity::{KNOBS, Knob, Varied};
use crate::read::source::ReadError;

/// Supply current of a state and its logarithmic derivatives.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct StateSensitivity {
    /// Current from supply, n-well and inputs at one, A.
    pub current_a: f64,
    /// d ln I / d knob, in the order of [`Knob::ALL`], per unit of the knob.
    pub d_ln: [f64; KNOBS],
    /// d ln I / d supply, supply, n-well and inputs at one moved together, 1/V.
    pub d_ln_supply: f64,
}

/// d ln I / d knob of a current.
#[derive(Debug, Clone, Copy, Default, PartialEq, Serialize, Deserialize)]
pub struct LogSlopes {
    /// To the magnitude of all thresholds, 1/V.
    pub threshold_v: f64,
    /// To all drawn lengths, 1/m.
    pub length_m: f64,
    /// To all drawn widths, 1/m.
    pub width_m: f64,
    /// To the temperature, 1/K.
    pub temperature_k: f64,
    /// To all oxide thicknesses, 1/m.
    pub oxide_m: f64,
    /// To supply, n-well and inputs at one together, 1/V.
    pub supply_v: f64,
}

impl LogSlopes {
    /// The numbers, knobs in the order of [`Knob::ALL`], then the supply.
    pub fn to_array(self) -> [f64; COLUMNS] {
        [self.threshold_v, self.length_m, self.width_m, self.temperature_k, self.oxide_m, self.supply_v]
    }
    /// From the numbers in that order.
    pub fn from_array(a: [f64; COLUMNS]) -> Self {
        let [threshold_v, length_m, width_m, temperature_k, oxide_m, supply_v] = a;
        Self { threshold_v, length_m, width_m, temperature_k, oxide_m, supply_v }
    }
}

impl StateSensitivity {
    /// The slopes by name.
    pub fn slopes(&self) -> LogSlopes {
        let [t, l, w, k, o] = self.d_ln;
        LogSlopes::from_array([t, l, w, k, o, self.d_ln_supply])
    }
}

/// The knobs and the supply.
pub const COLUMNS: usize = KNOBS + 1;

/// Why a sensitivity has no value.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SensitivityError {
    /// A card or bin.
    #[error(transparent)]
    Read(#[from] ReadError),
    /// The state has no operating point.
    #[error(transparent)]
    Cell(#[from] CellError),
    /// The conductance matrix is singular.
    #[error("cell `{cell}` in state {state}: the conductance matrix is singular")]
    Singular {
        /// The cell.
        cell: String,
        /// Its state.
        state: String,
    },
    /// No current flows, so that its logarithm has no slope.
    #[error("cell `{cell}` in state {state}: no current flows")]
    NoCurrent {
        /// The cell.
        cell: String,
        /// Its state.
        state: String,
    },
}

impl BoundCell {
    /// Sensitivities of one state; `process` is the one the cell was bound to.
    ///
    /// # Errors
    /// See [`SensitivityError`].
    pub fn sensitivity(
        &self,
        process: &Process,
        state: &State,
        levels: &Levels,
        options: &SolveOptions,
        w: &mut Workspace,
    ) -> Result<StateSensitivity, SensitivityError> {
        let v: Vec<Volt> = self.operating_point(state, levels, options, w)?.0;
        let named = || (self.cell.name.to_string(), state.label.clone());
        let held = self.cell.held();
        let unknown: Vec<usize> = (0..v.len()).filter(|&i| !held[i]).collect();
        let n = unknown.len();
        let mut local = vec![usize::MAX; v.len()];
        for (i, &node) in unknown.iter().enumerate() {
            local[node] = i;
        }
        // nodes at one that move with the supply, and those whose current counts
        let mut counts = vec![false; v.len()];
        let mut bits = state.inputs.iter();
        for (role, &node) in self.cell.roles.iter().zip(&self.cell.port_nodes) {
            let high = *role == Role::Input && bits.next().copied().unwrap_or(false);
            counts[node] |= high || matches!(role, Role::Supply | Role::Nwell);
        }
        let mut jacobian = vec![0.0; n * n];
        let mut push = vec![[0.0; COLUMNS]; n];
        let mut own = [0.0; COLUMNS];
        let mut pull = vec![0.0; n];
        let mut current = 0.0;
        for (part, e) in self.cell.parts.iter().zip(&self.net.elements) {
            let s = self.net.stamp(e, &v);
            let by_knob: [[f64; KNOBS]; 4] = match (part, e) {
                (Part::Transistor(r, _), Element::Transistor(p)) => {
                    let varied: Varied = process.varied(r, self.temp, &mut Vec::new())?;
                    let bias: Bias<f64> = bias_of(&p.nodes, &v);
                    varied.terminals(bias).map(|t| t.d)
                }
                (_, Element::Diode(d, m, nodes)) => {
                    let slope = d.temperature_slope(v[nodes[0]].over(v[nodes[1]]), self.temp.get()) * m;
                    let mut rows = [[0.0; KNOBS]; 4];
                    rows[0][Knob::Temperature as usize] = slope;
                    rows[1][Knob::Temperature as usize] = -slope;
                    rows
                }
                _ => [[0.0; KNOBS]; 4],
            };
            for t in 0..s.n {
                let node = s.nodes[t];
                let supply_slope: f64 = (0..s.n).filter(|&u| counts[s.nodes[u]]).map(|u| s.slope[t][u]).sum();
                if counts[node] {
                    current += s.current[t];
                    for k in 0..KNOBS {
                        own[k] += by_knob[t][k];
                    }
                    own[KNOBS] += supply_slope;
                }
                for u in 0..s.n {
                    let col = local[s.nodes[u]];
                    if col == usize::MAX {
                        continue;
                    }
                    if counts[node] {
                        pull[col] += s.slope[t][u];
                    }
                    if local[node] != usize::MAX {
                        jacobian[local[node] * n + col] += s.slope[t][u];
                    }
                }
                if local[node] != usize::MAX {
                    for k in 0..KNOBS {
                        push[local[node]][k] += by_knob[t][k];
                    }
                    push[local[node]][KNOBS] += supply_slope;
                }
            }
        }
        if !(current.abs() > 0.0) {
            let (cell, state) = named();
            return Err(SensitivityError::NoCurrent { cell, state });
        }
        for k in 0..COLUMNS {
            let mut rhs: Vec<f64> = push.iter().map(|p| -p[k]).collect();
            if n > 0 && solve_pivoting(n, &mut jacobian.clone(), &mut rhs) == 0.0 {
                let (cell, state) = named();
                return Err(SensitivityError::Singular { cell, state });
            }
            own[k] += pull.iter().zip(&rhs).map(|(g, dv)| g * dv).sum::<f64>();
        }
        let mut d_ln = [0.0; KNOBS];
        for k in 0..KNOBS {
            d_ln[k] = own[k] / current;
        }
        Ok(StateSensitivity { current_a: current, d_ln, d_ln_supply: own[KNOBS] / current })
    }
}
