//! How the standby current of cells and blocks answers to what makes their devices, over the corners of a study.

use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::Ordering;

use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::load::load_study;
use super::run::Failure;
use super::study::read_study;
use super::watch::{Progress, watched};
use super::{Library, LoadedDomain};
use crate::block::{BlockSensitivity, BoundBlock};
use crate::cell::sensitivity::{LogSlopes, StateSensitivity};
use crate::cell::{BoundCell, Cell, DeviceShelf, Levels};
use crate::circuit::newton::{SolveOptions, Workspace};
use crate::corner::Corner;
use crate::read::deck::Note;
use crate::read::source::{ReadError, Source};

/// Sensitivity of one state of a cell.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CellSlopes {
    /// Cell.
    pub cell: String,
    /// Corner.
    pub corner: String,
    /// State.
    pub state: String,
    /// Current from supply, n-well and inputs at one, A.
    pub current_a: f64,
    /// Its logarithmic slopes.
    pub slopes: LogSlopes,
}

/// Sensitivity of the block of a domain, powered.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct BlockSlopes {
    /// Domain.
    pub domain: String,
    /// Corner.
    pub corner: String,
    /// Current from supply, n-well and inputs at one, A.
    pub current_a: f64,
    /// Its logarithmic slopes.
    pub slopes: LogSlopes,
}

/// What a run found.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct SensitivityTable {
    /// States of cells: cells, then corners, then states.
    pub cells: Vec<CellSlopes>,
    /// Blocks: domains, then corners.
    pub blocks: Vec<BlockSlopes>,
    /// What failed; a cell stands under `domain`.
    pub failures: Vec<Failure>,
    /// Remarks, each once.
    pub notes: Vec<Note>,
    /// Whether the run was stopped before its end.
    pub stopped: bool,
}

/// What is asked for.
#[derive(Debug, Clone, Default)]
pub struct SensitivityRequest {
    /// The study.
    pub study: PathBuf,
    /// Patterns of cell names; none when empty.
    pub cells: Vec<String>,
    /// Whether the blocks of the study's domains are wanted.
    pub blocks: bool,
}

enum Task<'a> {
    Cell(&'a Arc<Cell>),
    Block(&'a LoadedDomain),
}

type Found = (Vec<(String, StateSensitivity)>, Option<BlockSensitivity>, Vec<Note>);

/// Works the sensitivities of a study out.
///
/// # Errors
/// A file that cannot be read, or a pattern that fits no cell. Points that fail are listed.
pub fn sensitivities_of_study(
    request: &SensitivityRequest,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<SensitivityTable, ReadError> {
    let source = Source::open(&request.study)?;
    let study = read_study(&source)?;
    let library = Library::load(&study, &source.folder)?;
    let mut notes = library.notes.clone();
    let cells =
        if request.cells.is_empty() { Vec::new() } else { library.cells(&request.cells, &mut notes)? };
    let loaded = if request.blocks { Some(load_study(&study, &source.path, &source.folder)?) } else { None };
    let domains: &[LoadedDomain] = loaded.as_ref().map_or(&[], |l| &l.domains);
    let tasks: Vec<(Task<'_>, &Corner)> = cells
        .iter()
        .map(Task::Cell)
        .chain(domains.iter().map(Task::Block))
        .flat_map(|t| {
            library.corners.iter().map(move |c| match t {
                Task::Cell(x) => (Task::Cell(x), c),
                Task::Block(d) => (Task::Block(d), c),
            })
        })
        .collect();
    let parts = watched(tasks.len(), progress, |watch| {
        tasks
            .par_iter()
            .map_init(Workspace::default, |w, (task, corner)| {
                if watch.stop.load(Ordering::Relaxed) {
                    return None;
                }
                let found = one(task, corner, &library, options, w);
                watch.done.fetch_add(1, Ordering::Relaxed);
                Some(found)
            })
            .collect::<Vec<_>>()
    });
    let mut table = SensitivityTable { notes, ..SensitivityTable::default() };
    for (part, (task, corner)) in parts.into_iter().zip(&tasks) {
        let name = match task {
            Task::Cell(c) => c.name.to_string(),
            Task::Block(d) => d.name.clone(),
        };
        let corner = corner.name.clone();
        match part {
            None => table.stopped = true,
            Some(Err(reason)) => {
                table.failures.push(Failure { domain: name, scheme: String::new(), corner, reason });
            }
            Some(Ok((states, block, notes))) => {
                for (state, s) in states {
                    let (current_a, slopes) = (s.current_a, s.slopes());
                    let (cell, corner) = (name.clone(), corner.clone());
                    table.cells.push(CellSlopes { cell, corner, state, current_a, slopes });
                }
                if let Some(b) = block {
                    let (current_a, slopes) = (b.current_a, b.slopes);
                    table.blocks.push(BlockSlopes { domain: name, corner, current_a, slopes });
                }
                for n in notes {
                    n.add_once(&mut table.notes);
                }
            }
        }
    }
    Ok(table)
}

fn one(
    task: &Task<'_>,
    corner: &Corner,
    library: &Library,
    options: &SolveOptions,
    w: &mut Workspace,
) -> Result<Found, String> {
    let temp = corner.check().map_err(|e| e.to_string())?;
    let process =
        library.processes.get(&corner.process).ok_or_else(|| format!("no process `{}`", corner.process))?;
    let mut shelf = DeviceShelf::default();
    let levels = Levels::powered(corner.vdd_v);
    match task {
        Task::Cell(cell) => {
            let bound = BoundCell::new(cell, process, temp, 0.0, &mut shelf).map_err(|e| e.to_string())?;
            let mut rows = Vec::new();
            for s in bound.states().map_err(|e| e.to_string())? {
                let found = bound.sensitivity(process, &s, &levels, options, w).map_err(|e| e.to_string())?;
                rows.push((s.label, found));
            }
            Ok((rows, None, shelf.notes))
        }
        Task::Block(d) => {
            let bound = BoundBlock::new(&d.block, process, temp, corner.vdd_v, &mut shelf, options)
                .map_err(|e| e.to_string())?;
            let found = bound.sensitivity(process, &levels).map_err(|e| e.to_string())?;
            Ok((Vec::new(), Some(found), shelf.notes))
        }
    }
}
