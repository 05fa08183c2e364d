//! A published leakage table held against the cards and netlists of a study.

use std::path::PathBuf;
use std::sync::Arc;

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::load::Library;
use super::study::read_study;
use super::watch::{Progress, watched};
use crate::cell::Cell;
use crate::check::compare::{
    Compared, Comparison, CornerStatistics, PublishedCorner, PublishedRow, read_published,
    read_published_corners,
};
use crate::check::suspects::{Suspect, SuspectRules, find_suspects};
use crate::circuit::newton::SolveOptions;
use crate::device::compact::CompactCard;
use crate::device::process::Process;
use crate::device::spec::{DeviceModel, DeviceSpec};
use crate::read::deck::Note;
use crate::read::source::{ReadError, Source};

/// A comparison asked for through a study file.
#[derive(Debug, Clone, Default)]
pub struct CompareRequest {
    /// The study; its domains and schemes are not needed.
    pub study: PathBuf,
    /// The published table: `cell,corner,when,leakage_nw`.
    pub table: PathBuf,
    /// Its corners: `corner,process,temp_c,vdd_v`; the study's own corners when left out.
    pub corners: Option<PathBuf>,
    /// What the netlist puts before the table's cell names.
    pub prefix: String,
    /// Conductance the table's circuit program put across junctions, S.
    pub floor_s: f64,
    /// When a row is suspect.
    pub rules: SuspectRules,
}

/// A comparison with its statistics.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ComparisonReport {
    /// By corner.
    pub statistics: Vec<CornerStatistics>,
    /// Rows and what could not be matched.
    pub compared: Compared,
    /// Rows under suspicion, worst first.
    pub suspects: Vec<Suspect>,
    /// Cells of the table that could not be read, and why.
    pub cells_lost: IndexMap<String, String>,
}

/// A published table with the cells it names, read once; predictions may then be made with one set of devices after the
/// other.
#[derive(Debug)]
pub struct LoadedTable {
    /// Cards, netlists and corners of the study.
    pub library: Library,
    /// Rows of the table.
    pub rows: Vec<PublishedRow>,
    /// Its corners.
    pub corners: Vec<PublishedCorner>,
    /// Cells by the table's name.
    pub cells: IndexMap<String, Arc<Cell>>,
    /// Cells that could not be read, and why.
    pub cells_lost: IndexMap<String, String>,
    /// Remarks of the readers.
    pub notes: Vec<Note>,
    /// Conductance across junctions, S.
    pub floor_s: f64,
}

impl LoadedTable {
    /// Reads study, table and corners. `devices` come with the study's own: cells may name them.
    ///
    /// # Errors
    /// A file that cannot be read or understood.
    pub fn read(
        request: &CompareRequest,
        devices: &IndexMap<String, CompactCard>,
    ) -> Result<Self, ReadError> {
        let source = Source::open(&request.study)?;
        let mut study = read_study(&source)?;
        for (name, card) in devices {
            let spec = DeviceSpec { compact: Some(card.clone()), ..DeviceSpec::default() };
            study.device.entry(name.clone()).or_insert(spec);
        }
        let library = Library::load(&study, &source.folder)?;
        let rows = read_published(&Source::open(&request.table)?)?;
        let corners = match &request.corners {
            Some(f) => read_published_corners(&Source::open(f)?)?,
            None => library
                .corners
                .iter()
                .map(|c| PublishedCorner {
                    name: c.name.clone(),
                    process: c.process.clone(),
                    temp_c: c.temp_c,
                    vdd_v: c.vdd_v,
                })
                .collect(),
        };
        let mut cells = IndexMap::new();
        let mut cells_lost = IndexMap::new();
        let mut notes = library.notes.clone();
        library.with_reader(|reader| {
            for r in &rows {
                if cells.contains_key(&r.cell) || cells_lost.contains_key(&r.cell) {
                    continue;
                }
                match reader.cell(&format!("{}{}", request.prefix, r.cell), &mut notes) {
                    Ok(c) => {
                        cells.insert(r.cell.clone(), Arc::new(c));
                    }
                    Err(e) => {
                        cells_lost.insert(r.cell.clone(), e.to_string());
                    }
                }
            }
        });
        Ok(Self { library, rows, corners, cells, cells_lost, notes, floor_s: request.floor_s })
    }

    /// Predicts every row; `devices` stand for whatever the study has under their names.
    ///
    /// # Errors
    /// A corner or process that the study does not know.
    pub fn predict(
        &self,
        devices: &IndexMap<String, CompactCard>,
        options: &SolveOptions,
        progress: &mut Progress<'_>,
    ) -> Result<Compared, ReadError> {
        let replaced: IndexMap<String, Process>;
        let processes = if devices.is_empty() {
            &self.library.processes
        } else {
            let with = |p: &Process| {
                devices.iter().fold(p.clone(), |p, (name, card)| {
                    p.replace(name, DeviceModel::Compact(Box::new(card.clone())))
                })
            };
            replaced = self.library.processes.iter().map(|(n, p)| (n.clone(), with(p))).collect();
            &replaced
        };
        let comparison =
            Comparison { cells: &self.cells, processes, floor_s: self.floor_s, options: options.clone() };
        let mut found = watched(self.rows.len(), progress, |w| {
            comparison.run(&self.rows, &self.corners, &w.done, &w.stop)
        })?;
        let mut notes = self.notes.clone();
        for n in std::mem::take(&mut found.notes) {
            n.add_once(&mut notes);
        }
        found.notes = notes;
        Ok(found)
    }
}

/// Reads everything and compares.
///
/// # Errors
/// A file that cannot be read, or a corner or process the study does not know. Cells and rows that cannot be predicted are
/// listed in the report.
pub fn compare_study(
    request: &CompareRequest,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<ComparisonReport, ReadError> {
    let none = IndexMap::new();
    let table = LoadedTable::read(request, &none)?;
    let compared = table.predict(&none, options, progress)?;
    let suspects = find_suspects(&table.rows, &table.corners, Some(&compared), &request.rules);
    let cells_lost = table.cells_lost;
    Ok(ComparisonReport { statistics: compared.statistics(), compared, suspects, cells_lost })
}
