//! Cells of a study that keep their state, and their noise margins, at every corner, in parallel.

use std::sync::Arc;
use std::sync::atomic::Ordering;

use indexmap::IndexMap;
use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::awake::{process, study, temperature};
use super::load::{Library, load_study};
use super::run::Failure;
use super::study::asked;
use super::watch::{Progress, watched};
use crate::awake::AwakeError;
use crate::awake::keep::{Collapse, CollapseSide, Need, Retention, retention};
use crate::awake::leaks::leaks_at;
use crate::awake::margin::{AtRails, Margins, margins};
use crate::block::BoundBlock;
use crate::cell::{BoundCell, Cell, DeviceShelf, Levels};
use crate::circuit::newton::SolveOptions;
use crate::corner::Corner;
use crate::read::source::{Place, ReadError, nearest};

/// What is asked of cells that store.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct KeepRequest {
    /// Cells (`*` for any run of characters).
    pub cells: Vec<String>,
    /// Inputs that are known, such as a clock that stands low; all vectors are tried for the others.
    #[serde(default)]
    pub inputs: IndexMap<String, bool>,
    /// How the rails come together.
    pub collapse: Collapse,
    /// What must be left.
    #[serde(default)]
    pub need: Need,
    /// Domain whose leakage at the lowest span is wanted.
    #[serde(default)]
    pub domain: Option<String>,
}

/// Everything found.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct KeepReport {
    /// Cells, then corners.
    pub retentions: Vec<Retention>,
    /// Clamp level of each corner: the span that keeps every cell asked for, and what leaks there.
    pub levels: Vec<ClampLevel>,
    /// What could not be computed (`domain` holds the cell).
    pub failures: Vec<Failure>,
    /// Whether the run was stopped before its end.
    pub stopped: bool,
}

/// The span a clamp must leave at a corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ClampLevel {
    /// The corner.
    pub corner: String,
    /// Span between the rails, V.
    pub span_v: f64,
    /// The rail that moves, V.
    pub rail_v: f64,
    /// The cell that decides.
    pub cell: String,
    /// Current the domain draws at its moving rail there, A; where a domain was named.
    pub leak_a: Option<f64>,
    /// The same at full rails, A.
    pub full_leak_a: Option<f64>,
}

/// Lowest spans that keep the state of a study's cells; what its `[keep]` table asks when no request is given.
///
/// # Errors
/// Files that cannot be read, cells or a domain that do not exist; what fails at a corner is listed in the report.
pub fn keep_study(
    path: &str,
    request: Option<&KeepRequest>,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<KeepReport, ReadError> {
    let (s, source) = study(path)?;
    let request = &asked(request, s.keep.as_ref(), "[keep]", &source)?;
    let library = Library::load(&s, &source.folder)?;
    let cells = library.cells(&request.cells, &mut Vec::new())?;
    let loaded = match &request.domain {
        None => None,
        Some(name) => {
            let loaded = load_study(&s, &source.path, &source.folder)?;
            if !loaded.domains.iter().any(|d| d.name == *name) {
                return Err(ReadError::Unknown {
                    at: Place::new(&source.path, 1, 1),
                    kind: "domain",
                    name: name.clone(),
                    nearest: nearest(name, loaded.domains.iter().map(|d| &*d.name)),
                });
            }
            Some(loaded)
        }
    };
    let given: Vec<(String, bool)> = request.inputs.iter().map(|(n, b)| (n.clone(), *b)).collect();
    let plan: Vec<(&Arc<Cell>, &Corner)> =
        cells.iter().flat_map(|c| library.corners.iter().map(move |k| (c, k))).collect();
    let total = plan.len() + library.corners.len();
    Ok(watched(total, progress, |watch| {
        let failed = |of: &str, c: &Corner, e: &AwakeError| Failure {
            domain: of.to_owned(),
            scheme: String::new(),
            corner: c.name.clone(),
            reason: e.to_string(),
        };
        let found: Vec<Result<Retention, AwakeError>> = plan
            .par_iter()
            .map(|(cell, c)| {
                let (process, temp) = (process(&library.processes, c)?, temperature(c)?);
                let bound = BoundCell::new(cell, process, temp, 0.0, &mut DeviceShelf::default())?;
                let stop = || watch.stop.load(Ordering::Relaxed);
                let (collapse, need) = (&request.collapse, &request.need);
                let r = retention(&bound, &c.name, c.vdd_v, collapse, &given, need, options, &stop);
                watch.done.fetch_add(1, Ordering::Relaxed);
                r
            })
            .collect();
        let levels: Vec<Option<Result<ClampLevel, AwakeError>>> = library
            .corners
            .par_iter()
            .enumerate()
            .map(|(k, c)| {
                let of_corner = (0..cells.len()).map(|i| &found[i * library.corners.len() + k]);
                let held: Vec<&Retention> = of_corner.filter_map(|r| r.as_ref().ok()).collect();
                // a level that some cell does not keep is none
                if held.len() < cells.len() {
                    return None;
                }
                let worst = held.into_iter().max_by(|a, b| a.retention_v.total_cmp(&b.retention_v))?;
                let level = || {
                    let span_v = worst.retention_v;
                    let (mut leak_a, mut full_leak_a) = (None, None);
                    if let (Some(loaded), Some(name)) = (&loaded, &request.domain)
                        && let Some(d) = loaded.domains.iter().find(|d| d.name == *name)
                    {
                        let (process, temp) = (process(&loaded.processes, c)?, temperature(c)?);
                        let block = BoundBlock::new(
                            &d.block,
                            process,
                            temp,
                            c.vdd_v,
                            &mut DeviceShelf::default(),
                            options,
                        )?;
                        let at =
                            |v| leaks_at(&block, &request.collapse, c.vdd_v, v, &watch.stop).map(|x| x.0);
                        (leak_a, full_leak_a) = (Some(at(span_v)?), Some(at(c.vdd_v)?));
                    }
                    let rail_v = match request.collapse.side {
                        CollapseSide::Header => span_v,
                        CollapseSide::Footer => c.vdd_v - span_v,
                    };
                    let (corner, cell) = (c.name.clone(), worst.cell.clone());
                    Ok(ClampLevel { corner, span_v, rail_v, cell, leak_a, full_leak_a })
                };
                let r = level();
                watch.done.fetch_add(1, Ordering::Relaxed);
                Some(r)
            })
            .collect();
        let stopped = watch.stop.load(Ordering::Relaxed);
        let mut report =
            KeepReport { retentions: Vec::new(), levels: Vec::new(), failures: Vec::new(), stopped };
        for ((cell, c), r) in plan.iter().zip(found) {
            match r {
                Ok(r) => report.retentions.push(r),
                Err(AwakeError::Stopped) => {}
                Err(e) => report.failures.push(failed(&cell.name, c, &e)),
            }
        }
        for (c, r) in library.corners.iter().zip(levels) {
            match r {
                Some(Ok(l)) => report.levels.push(l),
                Some(Err(e)) if !stopped => report.failures.push(failed("", c, &e)),
                _ => {}
            }
        }
        report
    }))
}

/// Noise margins between two cells of a study.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct MarginRequest {
    /// The cell that drives.
    pub driver: String,
    /// The cell that receives; the driver's own when left out.
    #[serde(default)]
    pub receiver: Option<String>,
    /// Voltage lost at supply and ground of the driver, V; wells stay at the full rails.
    #[serde(default)]
    pub driver_droop_v: (f64, f64),
    /// The same of the receiver.
    #[serde(default)]
    pub receiver_droop_v: (f64, f64),
    /// Corners by name; all when empty.
    #[serde(default)]
    pub corners: Vec<String>,
}

/// Margins at a corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CornerMargins {
    /// The corner.
    pub corner: String,
    /// The margins.
    pub margins: Margins,
}

/// Noise margins at the corners asked for.
///
/// # Errors
/// Whatever is wrong with files, names or rails, and the first corner without answer.
pub fn margin_study(
    path: &str,
    request: &MarginRequest,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Vec<CornerMargins>, AwakeError> {
    let (s, source) = study(path)?;
    let library = Library::load(&s, &source.folder)?;
    let receiver = request.receiver.as_ref().unwrap_or(&request.driver);
    let cells = library.with_reader(|r| {
        [&request.driver, receiver]
            .into_iter()
            .map(|n| r.cell(n, &mut Vec::new()).map(Arc::new))
            .collect::<Result<Vec<_>, _>>()
    })?;
    for name in &request.corners {
        if !library.corners.iter().any(|c| c.name == *name) {
            return Err(AwakeError::Read(ReadError::Unknown {
                at: Place::new(&source.path, 1, 1),
                kind: "corner",
                name: name.clone(),
                nearest: nearest(name, library.corners.iter().map(|c| &*c.name)),
            }));
        }
    }
    let wanted: Vec<&Corner> = library
        .corners
        .iter()
        .filter(|c| request.corners.is_empty() || request.corners.contains(&c.name))
        .collect();
    watched(wanted.len(), progress, |watch| {
        wanted
            .par_iter()
            .map(|c| {
                if watch.stop.load(Ordering::Relaxed) {
                    return Err(AwakeError::Stopped);
                }
                let (process, temp) = (process(&library.processes, c)?, temperature(c)?);
                let mut shelf = DeviceShelf::default();
                let bound = cells
                    .iter()
                    .map(|cell| BoundCell::new(cell, process, temp, 0.0, &mut shelf))
                    .collect::<Result<Vec<_>, _>>()?;
                let levels = |(up, down): (f64, f64)| {
                    let l = Levels::powered(c.vdd_v);
                    let (supply_v, ground_v) = (c.vdd_v - up, down);
                    if !(up >= 0.0 && down >= 0.0 && supply_v > ground_v) {
                        return Err(AwakeError::Range {
                            what: "droop of the rails".into(),
                            value: format!("{up} and {down} V"),
                            wanted: format!("want zero or more, together below the supply, {} V", c.vdd_v),
                        });
                    }
                    Ok(Levels { supply_v, ground_v, high_v: supply_v, low_v: ground_v, ..l })
                };
                let driver = AtRails { cell: &bound[0], levels: levels(request.driver_droop_v)? };
                let second = usize::from(receiver != &request.driver);
                let receiver = AtRails { cell: &bound[second], levels: levels(request.receiver_droop_v)? };
                let margins = margins(driver, receiver, options)?;
                watch.done.fetch_add(1, Ordering::Relaxed);
                Ok(CornerMargins { corner: c.name.clone(), margins })
            })
            .collect()
    })
}
