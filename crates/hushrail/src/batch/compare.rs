//! A published leakage table held against the cards and netlists of a study.

use std::path::PathBuf;
use std::sync::Arc;

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::load::Library;
use super::study::read_study;
use super::watch::{Progress, watched};
use crate::check::compare::{
    Compared, Comparison, CornerStatistics, PublishedCorner, read_published, read_published_corners,
};
use crate::check::suspects::{Suspect, SuspectRules, find_suspects};
use crate::circuit::newton::SolveOptions;
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
    let source = Source::open(&request.study)?;
    let study = read_study(&source)?;
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
    let comparison = Comparison {
        cells: &cells,
        processes: &library.processes,
        floor_s: request.floor_s,
        options: options.clone(),
    };
    let mut compared = watched(rows.len(), progress, |w| comparison.run(&rows, &corners, &w.done, &w.stop))?;
    for n in std::mem::take(&mut compared.notes) {
        n.add_once(&mut notes);
    }
    compared.notes = notes;
    let suspects = find_suspects(&rows, &corners, Some(&compared), &request.rules);
    Ok(ComparisonReport { statistics: compared.statistics(), compared, suspects, cells_lost })
}
