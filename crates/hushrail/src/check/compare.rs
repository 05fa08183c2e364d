//! Predictions against a published leakage table: every row matched to a solved state, and statistics over them.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

use indexmap::IndexMap;
use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use crate::cell::{BoundCell, Cell, CellError, DeviceShelf, Levels, State, supply_power};
use crate::circuit::newton::{SolveOptions, Workspace};
use crate::device::process::Process;
use crate::physics::Kelvin;
use crate::read::Condition;
use crate::read::deck::Note;
use crate::read::source::{Place, ReadError, Source, nearest};

/// One row of a published table.
#[derive(Debug, Clone, PartialEq)]
pub struct PublishedRow {
    /// Cell, as the table names it.
    pub cell: String,
    /// Corner, as the table names it.
    pub corner: String,
    /// Condition, such as `!A&B`; empty for any state.
    pub when: String,
    /// Published value, W.
    pub power_w: f64,
    /// Line of the table.
    pub line: u64,
}

/// A corner of a published table.
#[derive(Debug, Clone, PartialEq)]
pub struct PublishedCorner {
    /// Name.
    pub name: String,
    /// Process the table states.
    pub process: String,
    /// Temperature, degrees Celsius.
    pub temp_c: f64,
    /// Supply, V; wells are tied to the rails.
    pub vdd_v: f64,
}

fn csv_error(source: &Source, e: &csv::Error) -> ReadError {
    let line = e.position().map_or(1, csv::Position::line);
    #[expect(clippy::cast_possible_truncation, reason = "line numbers")]
    let at = Place::new(&source.path, line as usize, 1);
    ReadError::Syntax {
        at,
        found: e.to_string(),
        wanted: "want the same number of fields on every line".into(),
    }
}

/// Reads a CSV table with a header into records by column name.
fn records(source: &Source, columns: &[&str]) -> Result<Vec<(u64, Vec<String>)>, ReadError> {
    let mut reader = csv::Reader::from_reader(source.text.as_bytes());
    let header = reader.headers().map_err(|e| csv_error(source, &e))?.clone();
    let mut index = Vec::new();
    for c in columns {
        let Some(i) = header.iter().position(|h| h == *c) else {
            return Err(ReadError::Unknown {
                at: Place::new(&source.path, 1, 1),
                kind: "column",
                name: (*c).to_owned(),
                nearest: nearest(c, header.iter()),
            });
        };
        index.push(i);
    }
    let mut out = Vec::new();
    for r in reader.records() {
        let r = r.map_err(|e| csv_error(source, &e))?;
        let line = r.position().map_or(0, csv::Position::line);
        out.push((line, index.iter().map(|&i| r.get(i).unwrap_or("").to_owned()).collect()));
    }
    if out.is_empty() {
        return Err(source.nothing("row of data"));
    }
    Ok(out)
}

fn number(source: &Source, line: u64, column: &str, text: &str) -> Result<f64, ReadError> {
    #[expect(clippy::cast_possible_truncation, reason = "line numbers")]
    let at = || Place::new(&source.path, line as usize, 1);
    match text.trim().parse::<f64>() {
        Ok(v) if v.is_finite() => Ok(v),
        _ => Err(ReadError::Syntax {
            at: at(),
            found: format!("column `{column}` holds `{text}`"),
            wanted: "want a finite number".into(),
        }),
    }
}

/// Reads `cell,corner,when,leakage_nw` (other columns are left alone).
///
/// # Errors
/// A missing column or a value that is not a number.
pub fn read_published(source: &Source) -> Result<Vec<PublishedRow>, ReadError> {
    records(source, &["cell", "corner", "when", "leakage_nw"])?
        .into_iter()
        .map(|(line, f)| {
            Ok(PublishedRow {
                power_w: number(source, line, "leakage_nw", &f[3])? * 1e-9,
                cell: f[0].clone(),
                corner: f[1].clone(),
                when: f[2].clone(),
                line,
            })
        })
        .collect()
}

/// Reads `corner,process,temp_c,vdd_v`.
///
/// # Errors
/// A missing column or a value that is not a number.
pub fn read_published_corners(source: &Source) -> Result<Vec<PublishedCorner>, ReadError> {
    records(source, &["corner", "process", "temp_c", "vdd_v"])?
        .into_iter()
        .map(|(line, f)| {
            Ok(PublishedCorner {
                temp_c: number(source, line, "temp_c", &f[2])?,
                vdd_v: number(source, line, "vdd_v", &f[3])?,
                name: f[0].clone(),
                process: f[1].clone(),
            })
        })
        .collect()
}

/// Everything a comparison needs.
pub struct Comparison<'a> {
    /// Cells by the table's name.
    pub cells: &'a IndexMap<String, Arc<Cell>>,
    /// The process behind each process name of the table.
    pub processes: &'a IndexMap<String, Process>,
    /// Conductance the table's circuit program put across junctions, S.
    pub floor_s: f64,
    /// Solver limits.
    pub options: SolveOptions,
}

/// A row with its prediction.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ComparedRow {
    /// Cell.
    pub cell: String,
    /// Corner.
    pub corner: String,
    /// Condition.
    pub when: String,
    /// Published, nW.
    pub published_nw: f64,
    /// Predicted, nW.
    pub predicted_nw: f64,
    /// States averaged.
    pub states: usize,
}

impl ComparedRow {
    /// Predicted over published.
    pub fn ratio(&self) -> f64 {
        self.predicted_nw / self.published_nw
    }
    /// |log10 ratio|.
    pub fn decades(&self) -> f64 {
        self.ratio().log10().abs()
    }
}

/// A row that could not be predicted, and why.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Unmatched {
    /// Cell.
    pub cell: String,
    /// Corner.
    pub corner: String,
    /// Condition.
    pub when: String,
    /// Why.
    pub reason: String,
}

/// What a comparison found.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Compared {
    /// Rows with predictions, in the order of the table.
    pub rows: Vec<ComparedRow>,
    /// Rows without.
    pub unmatched: Vec<Unmatched>,
    /// Remarks on the cards and on what the predictions rest on, each once.
    pub notes: Vec<Note>,
}

/// Statistics of the rows of one corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CornerStatistics {
    /// Corner.
    pub corner: String,
    /// Rows predicted.
    pub states: usize,
    /// Median of predicted over published.
    pub median_ratio: f64,
    /// Median of |log10 ratio|.
    pub median_decades: f64,
    /// 90th percentile of |log10 ratio|.
    pub p90_decades: f64,
    /// Largest |log10 ratio|.
    pub worst_decades: f64,
    /// Share of rows within 0.3 %.
    pub within_0p3_percent: f64,
    /// Share of rows within 1 %.
    pub within_1_percent: f64,
    /// Share of rows within 2 %.
    pub within_2_percent: f64,
    /// Share of rows within 5 %.
    pub within_5_percent: f64,
}

fn percentile(sorted: &[f64], p: f64) -> f64 {
    if sorted.is_empty() {
        return 0.0;
    }
    let x = p * (sorted.len() - 1) as f64;
    #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "index within the slice")]
    let i = x.floor() as usize;
    let j = (i + 1).min(sorted.len() - 1);
    sorted[i] + (sorted[j] - sorted[i]) * (x - i as f64)
}

impl Compared {
    /// Statistics by corner, in the order the corners first appear.
    pub fn statistics(&self) -> Vec<CornerStatistics> {
        let mut by: IndexMap<&str, Vec<&ComparedRow>> = IndexMap::new();
        for r in &self.rows {
            by.entry(&r.corner).or_default().push(r);
        }
        by.into_iter()
            .map(|(corner, rows)| {
                let mut ratio: Vec<f64> = rows.iter().map(|r| r.ratio()).collect();
                let mut dec: Vec<f64> = rows.iter().map(|r| r.decades()).collect();
                ratio.sort_by(f64::total_cmp);
                dec.sort_by(f64::total_cmp);
                let share = |tol: f64| {
                    rows.iter().filter(|r| (r.ratio() - 1.0).abs() <= tol).count() as f64 / rows.len() as f64
                };
                CornerStatistics {
                    corner: corner.to_owned(),
                    states: rows.len(),
                    median_ratio: percentile(&ratio, 0.5),
                    median_decades: percentile(&dec, 0.5),
                    p90_decades: percentile(&dec, 0.9),
                    worst_decades: percentile(&dec, 1.0),
                    within_0p3_percent: share(0.003),
                    within_1_percent: share(0.01),
                    within_2_percent: share(0.02),
                    within_5_percent: share(0.05),
                }
            })
            .collect()
    }

    /// The rows furthest off, worst first.
    pub fn worst(&self, n: usize) -> Vec<&ComparedRow> {
        let mut rows: Vec<&ComparedRow> = self.rows.iter().collect();
        rows.sort_by(|a, b| b.decades().total_cmp(&a.decades()));
        rows.truncate(n);
        rows
    }
}

/// Of one cell at one corner: rows, rows without prediction, remarks.
type Part = (Vec<ComparedRow>, Vec<Unmatched>, Vec<Note>);

impl Comparison<'_> {
    /// Predicts every row, cells and corners in parallel; the result does not depend on the number of threads. `done` counts
    /// rows, `stop` ends the work early.
    ///
    /// # Errors
    /// A corner or process the comparison does not know, or a temperature out of range.
    pub fn run(
        &self,
        rows: &[PublishedRow],
        corners: &[PublishedCorner],
        done: &AtomicUsize,
        stop: &AtomicBool,
    ) -> Result<Compared, ReadError> {
        let mut tasks: IndexMap<(&str, &str), Vec<&PublishedRow>> = IndexMap::new();
        for r in rows {
            tasks.entry((&r.corner, &r.cell)).or_default().push(r);
        }
        let table: Arc<str> = Arc::from("published table");
        for r in rows {
            #[expect(clippy::cast_possible_truncation, reason = "line numbers")]
            let at = Place::new(&table, r.line as usize, 1);
            let Some(c) = corners.iter().find(|c| c.name == r.corner) else {
                return Err(ReadError::Unknown {
                    at,
                    kind: "corner",
                    name: r.corner.clone(),
                    nearest: nearest(&r.corner, corners.iter().map(|c| c.name.as_str())),
                });
            };
            if !self.processes.contains_key(&c.process) {
                return Err(ReadError::Unknown {
                    at,
                    kind: "process",
                    name: c.process.clone(),
                    nearest: nearest(&c.process, self.processes.keys().map(String::as_str)),
                });
            }
        }
        let list: Vec<_> = tasks.into_iter().collect();
        let done: Vec<Part> = list
            .par_iter()
            .map_init(Workspace::default, |w, ((corner, cell), rows)| {
                if stop.load(Ordering::Relaxed) {
                    return Default::default();
                }
                let c = corners.iter().find(|c| c.name == *corner);
                done.fetch_add(rows.len(), Ordering::Relaxed);
                c.map_or_else(Default::default, |c| self.cell(cell, c, rows, w))
            })
            .collect();
        let mut out = Compared::default();
        for (rows, bad, notes) in done {
            out.rows.extend(rows);
            out.unmatched.extend(bad);
            for n in notes {
                n.add_once(&mut out.notes);
            }
        }
        Ok(out)
    }

    fn cell(&self, name: &str, corner: &PublishedCorner, rows: &[&PublishedRow], w: &mut Workspace) -> Part {
        let fail = |reason: String| {
            let bad = rows.iter().map(|r| Unmatched {
                cell: r.cell.clone(),
                corner: r.corner.clone(),
                when: r.when.clone(),
                reason: reason.clone(),
            });
            (Vec::new(), bad.collect(), Vec::new())
        };
        let Some(cell) = self.cells.get(name) else { return fail("no netlist for this cell".into()) };
        let Some(process) = self.processes.get(&corner.process) else { return fail("no cards".into()) };
        let temp = match Kelvin::from_celsius(corner.temp_c) {
            Ok(t) => t,
            Err(e) => return fail(e.to_string()),
        };
        let mut shelf = DeviceShelf::default();
        let bound = match BoundCell::new(cell, process, temp, self.floor_s, &mut shelf) {
            Ok(b) => b,
            Err(e) => return fail(e.to_string()),
        };
        let levels = Levels::powered(corner.vdd_v);
        let solved = match self.solve_all(&bound, &levels, w, &mut shelf.notes) {
            Ok(s) => s,
            Err(e) => return fail(e.to_string()),
        };
        let mut good = Vec::new();
        let mut bad = Vec::new();
        for r in rows {
            let mut sum = 0.0;
            let mut n = 0;
            let reason = match Condition::parse(&r.when) {
                Err(e) => format!("condition: {e}"),
                Ok(condition) => {
                    let port = |p: &str| cell.ports.iter().position(|q| **q == *p);
                    if let Some(p) = condition.pins().into_iter().find(|p| port(p).is_none()) {
                        format!("the cell has no pin `{p}`")
                    } else {
                        for (_, bits, power) in &solved {
                            let mut bit = |p: &str| port(p).and_then(|i| bits.get(i).copied());
                            if condition.value(&mut bit) == Some(true) {
                                sum += power;
                                n += 1;
                            }
                        }
                        "no state of the netlist fits the condition".into()
                    }
                }
            };
            if n > 0 {
                good.push(ComparedRow {
                    cell: r.cell.clone(),
                    corner: r.corner.clone(),
                    when: r.when.clone(),
                    published_nw: r.power_w * 1e9,
                    predicted_nw: sum / n as f64 * 1e9,
                    states: n,
                });
            } else {
                bad.push(Unmatched {
                    cell: r.cell.clone(),
                    corner: r.corner.clone(),
                    when: r.when.clone(),
                    reason,
                });
            }
        }
        (good, bad, shelf.notes)
    }

    fn solve_all(
        &self,
        bound: &BoundCell,
        levels: &Levels,
        w: &mut Workspace,
        notes: &mut Vec<Note>,
    ) -> Result<Vec<(State, Vec<bool>, f64)>, CellError> {
        let mut out: Vec<(State, Vec<bool>, f64)> = Vec::new();
        for s in bound.states()? {
            let c = bound.answer(&s, levels, &self.options, w)?;
            if let Some(o) = &c.outside {
                o.note().add_once(notes);
            }
            if !c.stable {
                continue;
            }
            let p = supply_power(bound, &c, levels);
            out.push((s, c.port_bits, p));
        }
        Ok(out)
    }
}
