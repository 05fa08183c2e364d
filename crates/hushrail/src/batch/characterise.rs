//! Leakage tables: cells × corners × states, every terminal, by mechanism.

use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::Ordering;

use indexmap::IndexMap;
use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::load::Library;
use super::run::Failure;
use super::study::read_study;
use super::watch::{Progress, watched};
use crate::cell::{BoundCell, Cell, DeviceShelf, Levels, Role};
use crate::circuit::newton::{SolveOptions, Workspace};
use crate::corner::Corner;
use crate::device::process::Process;
use crate::read::deck::Note;
use crate::read::liberty;
use crate::read::source::{Place, ReadError, Source};

/// One state of one cell at one corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LeakageRow {
    /// Cell.
    pub cell: String,
    /// Corner.
    pub corner: String,
    /// Pins and values.
    pub state: String,
    /// Power drawn from supply, n-well and inputs at one, W.
    pub power_w: f64,
    /// Current into each port, A.
    pub ports: IndexMap<String, f64>,
    /// Power by mechanism (channel, gidl, gate, junction, floor) over the supply voltage, A; adds up to `power_w`.
    pub mechanisms: [f64; 5],
    /// Whether the point is one the cell stays in.
    pub stable: bool,
}

/// A leakage table.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct LeakageTable {
    /// Rows: cells, then corners, then states.
    pub rows: Vec<LeakageRow>,
    /// Cells that failed at a corner.
    pub failures: Vec<Failure>,
    /// Remarks, each once.
    pub notes: Vec<Note>,
    /// Whether the run was stopped before its end.
    pub stopped: bool,
}

impl LeakageTable {
    /// The rows of one corner as a Liberty library in nW; `name` is the library's.
    ///
    /// Conditions name inputs, and for cells that keep state the outputs too. Where two states have the same pins all the
    /// same, the larger counts and a note says so.
    pub fn library(&self, name: &str, corner: &Corner) -> liberty::Library {
        let mut out = liberty::Library { name: name.to_owned(), ..liberty::Library::default() };
        out.units = liberty::Units { leakage_w: Some(1e-9), voltage_v: Some(1.0) };
        out.nominal =
            liberty::Nominal { process: None, voltage_v: Some(corner.vdd_v), temp_c: Some(corner.temp_c) };
        let mut rows: IndexMap<&str, Vec<&LeakageRow>> = IndexMap::new();
        for r in self.rows.iter().filter(|r| r.corner == corner.name) {
            rows.entry(&r.cell).or_default().push(r);
        }
        for (cell, rows) in rows {
            out.cells.insert(cell.to_owned(), library_cell(cell, &rows, &mut out.notes));
        }
        out
    }
}

fn library_cell(name: &str, rows: &[&LeakageRow], notes: &mut Vec<Note>) -> liberty::LibraryCell {
    let mut cell = liberty::LibraryCell::default();
    let pins_of = |r: &LeakageRow, inputs_only: bool| -> String {
        let words = r.state.split_whitespace().filter_map(|w| w.split_once('='));
        let known = words.filter(|(p, v)| *v != "z" && !(inputs_only && !r.ports.contains_key(*p)));
        let signed: Vec<String> =
            known.map(|(p, v)| format!("{}{p}", if v == "1" { "" } else { "!" })).collect();
        signed.join("&")
    };
    for r in rows {
        for (pin, _) in r.state.split_whitespace().filter_map(|w| w.split_once('=')) {
            let direction = if r.ports.contains_key(pin) { "input" } else { "output" };
            let new = || liberty::Pin { direction: direction.to_owned(), ..liberty::Pin::default() };
            cell.pins.entry(pin.to_owned()).or_insert_with(new);
        }
        if !r.stable {
            let text = format!("cell `{name}`: the state `{}` is not one it stays in", r.state);
            Note::new("liberty-states", text).add_once(notes);
        }
    }
    let mut seen: IndexMap<String, usize> = IndexMap::new();
    for r in rows {
        *seen.entry(pins_of(r, true)).or_default() += 1;
    }
    // a cell that keeps state is told by all its pins, in every state: a condition on inputs alone would hold for others too
    let keeps = seen.values().any(|n| *n > 1);
    for r in rows {
        let when = pins_of(r, !keeps);
        let value = r.power_w / 1e-9;
        if let Some(g) = cell.leakage.iter_mut().find(|g| g.when == when) {
            let text = format!("cell `{name}`: two states have the pins `{when}`; the larger counts");
            Note::new("liberty-states", text).add_once(notes);
            g.value = g.value.max(value);
        } else {
            cell.leakage.push(liberty::LeakageGroup { when, value, ..liberty::LeakageGroup::default() });
        }
    }
    let n = cell.leakage.len() as f64;
    cell.cell_leakage_power = Some(cell.leakage.iter().map(|g| g.value).sum::<f64>() / n);
    cell
}

/// Solves every state of every cell at every corner with the rails at full supply.
pub fn characterise(
    cells: &[Arc<Cell>],
    processes: &IndexMap<String, Process>,
    corners: &[Corner],
    floor_s: f64,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> LeakageTable {
    let tasks: Vec<(&Arc<Cell>, &Corner)> =
        cells.iter().flat_map(|c| corners.iter().map(move |k| (c, k))).collect();
    let parts = watched(tasks.len(), progress, |watch| {
        tasks
            .par_iter()
            .map_init(Workspace::default, |w, (cell, corner)| {
                if watch.stop.load(Ordering::Relaxed) {
                    return None;
                }
                let r = one(cell, processes, corner, floor_s, options, w);
                watch.done.fetch_add(1, Ordering::Relaxed);
                Some(r)
            })
            .collect::<Vec<_>>()
    });
    let mut table = LeakageTable::default();
    for (part, (cell, corner)) in parts.into_iter().zip(tasks) {
        match part {
            None => table.stopped = true,
            Some(Ok((rows, notes))) => {
                table.rows.extend(rows);
                for n in notes {
                    n.add_once(&mut table.notes);
                }
            }
            Some(Err(reason)) => table.failures.push(Failure {
                domain: cell.name.to_string(),
                scheme: String::new(),
                corner: corner.name.clone(),
                reason,
            }),
        }
    }
    table
}

fn one(
    cell: &Arc<Cell>,
    processes: &IndexMap<String, Process>,
    corner: &Corner,
    floor_s: f64,
    options: &SolveOptions,
    w: &mut Workspace,
) -> Result<(Vec<LeakageRow>, Vec<Note>), String> {
    let temp = corner.check().map_err(|e| e.to_string())?;
    let process = processes.get(&corner.process).ok_or_else(|| format!("no process `{}`", corner.process))?;
    let mut shelf = DeviceShelf::default();
    let bound = BoundCell::new(cell, process, temp, floor_s, &mut shelf).map_err(|e| e.to_string())?;
    let levels = Levels::powered(corner.vdd_v);
    let mut rows = Vec::new();
    for s in bound.states().map_err(|e| e.to_string())? {
        let c = bound.answer(&s, &levels, options, w).map_err(|e| e.to_string())?;
        if let Some(o) = &c.outside {
            o.note().add_once(&mut shelf.notes);
        }
        let mechanisms = c.power_w.map(|p| p / corner.vdd_v);
        let mut ports = IndexMap::new();
        for (i, role) in cell.roles.iter().enumerate() {
            if *role != Role::Output {
                ports.insert(cell.ports[i].to_string(), c.ports[i].iter().sum());
            }
        }
        rows.push(LeakageRow {
            cell: cell.name.to_string(),
            corner: corner.name.clone(),
            state: s.label.clone(),
            power_w: crate::cell::supply_power(&bound, &c, &levels),
            ports,
            mechanisms,
            stable: c.stable,
        });
    }
    Ok((rows, shelf.notes))
}

/// A leakage table asked for through a study file.
#[derive(Debug, Clone, Default)]
pub struct TableRequest {
    /// The study; its domains and schemes are not needed.
    pub study: PathBuf,
    /// Patterns of cell names; all cells when empty.
    pub cells: Vec<String>,
    /// Conductance across junctions, S; zero unless wanted.
    pub floor_s: f64,
}

/// Why a table could not be made at all.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum TableError {
    /// A file or a cell.
    #[error(transparent)]
    Read(#[from] ReadError),
}

/// Reads the study and solves its cells at its corners.
///
/// # Errors
/// A file that cannot be read, a pattern that fits no cell, or a study without corner. Cells that fail at a corner are listed
/// in the table.
pub fn table_of_study(
    request: &TableRequest,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<LeakageTable, TableError> {
    let source = Source::open(&request.study)?;
    let study = read_study(&source)?;
    let library = Library::load(&study, &source.folder)?;
    if library.corners.is_empty() {
        return Err(ReadError::Syntax {
            at: Place::new(&source.path, 1, 1),
            found: "the study has no corner".into(),
            wanted: "want [[corner]] tables or a [grid]".into(),
        }
        .into());
    }
    let mut notes = library.notes.clone();
    let cells = library.cells(&request.cells, &mut notes)?;
    let mut table =
        characterise(&cells, &library.processes, &library.corners, request.floor_s, options, progress);
    for n in notes.into_iter().rev() {
        if !table.notes.contains(&n) {
            table.notes.insert(0, n);
        }
    }
    Ok(table)
}
