//! Cells without transistors whose leakage comes from Liberty tables of corners.
//!
//! At a corner that a library was made for, the current at full supply is the library's, state by state. Elsewhere, and over a
//! collapsing rail, it is a law fitted to all libraries of the process ([`fit`]), and what the tables cannot tell is stated as
//! an interval ([`law`]).

pub mod fit;
pub mod law;

use std::sync::Arc;

use super::build::{Block, Policy, StateWeights};
use super::current::BlockError;
use crate::cell::Levels;
use crate::physics::Kelvin;
use crate::read::Condition;
use crate::read::deck::Note;
use crate::read::liberty::{Basis, CellState, Library};
use fit::{FitPoint, LeakageFit};
use law::{Bound, TableLaw};

/// Libraries of corners and the processes each speaks for.
#[derive(Debug, Clone, Default)]
pub struct TableSet {
    /// Libraries; one without processes speaks for every one.
    pub libraries: Vec<(Vec<String>, Arc<Library>)>,
}

/// What one library says about a cell.
#[derive(Debug, Clone, PartialEq)]
pub struct TablePoint {
    /// Library.
    pub library: String,
    /// Processes it speaks for; every one when empty.
    pub processes: Vec<String>,
    /// Supply and temperature with the weighted current at full supply.
    pub point: FitPoint,
    /// The weakest source among the states.
    pub basis: Basis,
}

/// One kind of cell in a block, known by tables.
#[derive(Debug, Clone, PartialEq)]
pub struct TableCell {
    /// Master name.
    pub master: String,
    /// Instances.
    pub count: u64,
    /// By library.
    pub points: Vec<TablePoint>,
}

/// A table cell at a corner.
#[derive(Debug, Clone)]
pub(super) struct TableMember {
    pub(super) master: String,
    pub(super) count: u64,
    pub(super) law: Arc<TableLaw>,
}

impl TableMember {
    /// Current of all instances at given levels, A.
    pub(super) fn current_a(&self, levels: &Levels, bound: Bound) -> f64 {
        self.count as f64 * self.law.current_a(levels.supply_v - levels.ground_v, bound)
    }
}

fn wrong(master: &str, reason: impl Into<String>) -> BlockError {
    BlockError::Table { master: master.to_owned(), reason: reason.into() }
}

impl TableSet {
    /// The current of a cell by every library that has it, its states weighted.
    ///
    /// # Errors
    /// No library has the cell; a library without unit, supply or temperature; a state without value; weights that fit nothing.
    pub fn points(&self, master: &str, weights: &StateWeights) -> Result<Vec<TablePoint>, BlockError> {
        let mut out = Vec::new();
        let mut nearest = None;
        for (processes, library) in &self.libraries {
            if !library.cells.contains_key(master) {
                if let Err(e) = library.cell(master) {
                    nearest = Some(e.to_string());
                }
                continue;
            }
            let of =
                |what: &str| wrong(master, format!("library `{}` ({}) {what}", library.name, library.path));
            let (Some(unit_w), Some(voltage_v), Some(temp_c)) =
                (library.units.leakage_w, library.nominal.voltage_v, library.nominal.temp_c)
            else {
                return Err(of(
                    "lacks its unit of leakage, its supply or its temperature; give them in the study",
                ));
            };
            if !(voltage_v > 0.0) {
                return Err(of("has a supply of zero or less"));
            }
            let temp = Kelvin::from_celsius(temp_c).map_err(|e| of(&format!("is for a {e}")))?;
            let states = library.states(master).map_err(|e| wrong(master, e.to_string()))?;
            let mut sum = 0.0;
            let mut basis = Basis::State;
            for (s, w) in weigh(master, &states, weights)? {
                let Some(x) = s.over_v else {
                    let bits: Vec<_> = s.bits.iter().map(|(n, b)| format!("{n}={}", u8::from(*b))).collect();
                    return Err(of(&format!("has no leakage for the state {}", bits.join(" "))));
                };
                basis = basis.max(s.basis);
                sum += w * x;
            }
            out.push(TablePoint {
                library: library.name.clone(),
                processes: processes.clone(),
                point: FitPoint { voltage_v, temp, current_a: sum * unit_w },
                basis,
            });
        }
        if out.is_empty() {
            let reason = nearest.unwrap_or_else(|| "the study has no [[liberty]] table".into());
            return Err(wrong(master, reason));
        }
        Ok(out)
    }
}

/// Weights of states, adding up to one; states without weight are left out.
fn weigh<'s>(
    master: &str,
    states: &'s [CellState],
    weights: &StateWeights,
) -> Result<Vec<(&'s CellState, f64)>, BlockError> {
    let weight = |reason: String| BlockError::Weights { master: master.to_owned(), reason };
    let StateWeights::Given(given) = weights else {
        return Ok(states.iter().map(|s| (s, 1.0 / states.len() as f64)).collect());
    };
    let mut w = vec![0.0; states.len()];
    for (when, x) in given {
        if !(*x >= 0.0 && x.is_finite()) {
            return Err(weight(format!("weight {x} of `{when}` is not zero or more")));
        }
        let condition = Condition::parse(when).map_err(|e| weight(e.to_string()))?;
        let holds = |s: &CellState| condition.value(&mut |p| s.bit(p)) == Some(true);
        let fits: Vec<usize> = (0..states.len()).filter(|&i| holds(&states[i])).collect();
        if fits.is_empty() && *x > 0.0 {
            return Err(weight(format!("no state fits `{when}`")));
        }
        for &i in &fits {
            w[i] += x / fits.len() as f64;
        }
    }
    let sum: f64 = w.iter().sum();
    if !(sum > 0.0) {
        return Err(weight("all weights are zero".into()));
    }
    Ok(states.iter().zip(w).filter(|(_, x)| *x > 0.0).map(|(s, x)| (s, x / sum)).collect())
}

impl Block {
    /// Looks up the masters whose policy is `liberty`.
    ///
    /// # Errors
    /// As for [`TableSet::points`].
    pub fn take_tables(
        &mut self,
        tables: &TableSet,
        weights: impl Fn(&str) -> StateWeights,
        notes: &mut Vec<Note>,
    ) -> Result<(), BlockError> {
        for u in &self.uncovered {
            if u.policy != Policy::Liberty || self.tables.iter().any(|t| t.master == u.master) {
                continue;
            }
            let points = tables.points(&u.master, &weights(&u.master))?;
            for p in &points {
                let what = match p.basis {
                    Basis::State | Basis::Plain => continue,
                    Basis::Cell => "`cell_leakage_power`, the same in every state",
                    Basis::Default | Basis::Nothing => "a default of the library",
                };
                let text = format!("`{}` in library `{}`: some states have {what}", u.master, p.library);
                Note::new("liberty-default", text).add_once(notes);
            }
            self.tables.push(TableCell { master: u.master.clone(), count: u.count, points });
        }
        Ok(())
    }
}

impl TableCell {
    /// The law at a corner, with a remark on what it rests on.
    pub(super) fn bind(
        &self,
        process: &str,
        temp: Kelvin,
        vdd_v: f64,
        notes: &mut Vec<Note>,
    ) -> Result<TableMember, BlockError> {
        let of_process = |p: &&TablePoint| p.processes.is_empty() || p.processes.iter().any(|n| n == process);
        let points: Vec<&TablePoint> = self.points.iter().filter(of_process).collect();
        if points.is_empty() {
            return Err(wrong(&self.master, format!("no library is for process `{process}`")));
        }
        if let Some(p) = points.iter().find(|p| !(p.point.current_a > 0.0)) {
            let reason = format!("its current in library `{}` is {} A", p.library, p.point.current_a);
            return Err(wrong(&self.master, reason));
        }
        let exact = points.iter().find(|p| {
            (p.point.voltage_v - vdd_v).abs() < 1e-6 && (p.point.temp.get() - temp.get()).abs() < 0.01
        });
        let data: Vec<FitPoint> = points.iter().map(|p| p.point).collect();
        let fit = LeakageFit::new(&data);
        let law = TableLaw::new(fit, exact.map(|p| p.point.current_a), &data, temp, vdd_v).map_err(|e| {
            let near: Vec<_> = points.iter().take(8).map(|p| format!("`{}`", p.library)).collect();
            wrong(&self.master, format!("{e}; libraries of the process: {}", near.join(", ")))
        })?;
        let source = match exact {
            Some(p) => format!("from library `{}`", p.library),
            None => format!("fitted, within {:.0} % (two sigma)", 100.0 * (2.0 * law.sigma()).exp_m1()),
        };
        let text = format!(
            "`{}` at process `{process}`, {vdd_v} V, {:.0} °C: {source}; {}",
            self.master,
            temp.celsius(),
            law.in_words()
        );
        Note::new("liberty-law", text).add_once(notes);
        Ok(TableMember { master: self.master.clone(), count: self.count, law: Arc::new(law) })
    }
}
