//! Delay penalty of drooped rails, from the solved current of the cell's own pull-up or pull-down network.
//!
//! For a step at the input the output moves as `C·dV/dt = −I(V)`, so its delay to the threshold is `C·∫dV/I(V)`; the capacitance
//! drops out of the ratio. Two conventions of the swing differ by a factor of two and more (reference sheet A22, E-19), so the
//! caller names one.

use serde::{Deserialize, Serialize};

use super::error::AwakeError;
use crate::cell::posed::Posed;
use crate::cell::{BoundCell, CellError, Levels, Role, State};
use crate::circuit::newton::SolveOptions;

/// What the output swings over.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Swing {
    /// The full supply, half of which is the threshold: only the drive falls. A load elsewhere at full rails.
    Full,
    /// The drooped rails: the whole local supply falls.
    Local,
}

/// Delay penalty of one edge of one cell.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct DelayPenalty {
    /// The cell.
    pub cell: String,
    /// Output and edge, such as `Y falls`.
    pub edge: String,
    /// Inputs of the worst state.
    pub inputs: String,
    /// Delay over delay at full rails, less one.
    pub penalty: f64,
    /// Current at the start of the swing at full rails, A.
    pub full_a: f64,
    /// The same on the drooped rails, A.
    pub drooped_a: f64,
}

/// Abscissae and weights of Gauss and Legendre with eight points on [−1, 1], positive half (Abramowitz and Stegun, *Handbook of
/// Mathematical Functions* (1964), table 25.4).
const GAUSS: [(f64, f64); 4] = [
    (0.183434642495650, 0.362683783378362),
    (0.525532409916329, 0.313706645877887),
    (0.796666477413627, 0.222381034453374),
    (0.960289856497536, 0.101228536290376),
];

/// `∫dV/I` of an output between two voltages, V/A, and the current at the start, A. `None` where the current changes sign: the
/// output never gets there.
fn charge_time(
    cell: &BoundCell,
    state: &State,
    levels: &Levels,
    output: usize,
    (from, to): (f64, f64),
    options: &SolveOptions,
) -> Result<Option<(f64, f64)>, CellError> {
    let mut p = Posed::new(cell, state, levels, None, &[output], options);
    let sign = (to - from).signum();
    let mut current = |v: f64| {
        p.set(output, v);
        p.solve()?;
        // positive as the cell drives its output from `from` to `to`
        Ok::<f64, CellError>(-p.current_into(output) * sign)
    };
    let start = current(from)?;
    let (mid, half) = (0.5 * (from + to), 0.5 * (to - from));
    let mut sum = 0.0;
    for (x, weight) in GAUSS {
        for side in [-1.0, 1.0] {
            let i = current(mid + side * x * half)?;
            if !(i > 0.0) {
                return Ok(None);
            }
            sum += weight / i;
        }
    }
    Ok(Some((sum * half.abs(), start)))
}

/// Worst penalty of every output and edge of a cell whose rails droop from `full` to `drooped`; worst over input values. Cells
/// that store are taken in their states without storage.
///
/// # Errors
/// A cell without operating point, or whose output no longer crosses the threshold on the drooped rails.
pub fn delay_penalty(
    cell: &BoundCell,
    full: &Levels,
    drooped: &Levels,
    swing: Swing,
    options: &SolveOptions,
) -> Result<Vec<DelayPenalty>, AwakeError> {
    let inputs: Vec<&str> = cell.cell.ports_of(Role::Input).map(|i| &*cell.cell.ports[i]).collect();
    let mut worst: Vec<DelayPenalty> = Vec::new();
    let states = cell.states()?;
    for s in &states {
        // a value that is stored is not driven through
        if states.iter().filter(|o| o.inputs == s.inputs).count() > 1 {
            continue;
        }
        for port in cell.cell.ports_of(Role::Output) {
            let n = cell.cell.port_nodes[port];
            let Some(rises) = s.logic[n].bit() else { continue };
            let span = |l: &Levels| {
                let (lo, hi) = (l.ground_v, l.supply_v);
                let start = if rises { lo } else { hi };
                (start, 0.5 * (lo + hi))
            };
            let reference = span(full);
            let there = match swing {
                Swing::Full => reference,
                Swing::Local => span(drooped),
            };
            let edge = format!("{} {}", cell.cell.ports[port], if rises { "rises" } else { "falls" });
            let words: Vec<String> =
                inputs.iter().zip(&s.inputs).map(|(n, b)| format!("{n}={}", u8::from(*b))).collect();
            let stuck = |where_: &str| AwakeError::Curve {
                what: format!("cell `{}`, {edge} with {}", cell.cell.name, words.join(" ")),
                reason: format!("its output does not reach the middle of its swing {where_}"),
            };
            let (t0, full_a) =
                charge_time(cell, s, full, n, reference, options)?.ok_or_else(|| stuck("at full rails"))?;
            let (t1, drooped_a) = charge_time(cell, s, drooped, n, there, options)?
                .ok_or_else(|| stuck("on the drooped rails"))?;
            let found = DelayPenalty {
                cell: cell.cell.name.to_string(),
                edge,
                inputs: words.join(" "),
                penalty: t1 / t0 - 1.0,
                full_a,
                drooped_a,
            };
            match worst.iter_mut().find(|w| w.edge == found.edge) {
                Some(w) if w.penalty < found.penalty => *w = found,
                Some(_) => {}
                None => worst.push(found),
            }
        }
    }
    Ok(worst)
}
