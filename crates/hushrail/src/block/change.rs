//! A block after a designer's changes: cells exchanged by count, cells that stay powered, cells added around it.

use std::sync::Arc;

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::build::{Block, BlockCell, StateWeights, fits_pattern};
use crate::cell::Cell;
use crate::cell::edit::CellEdit;

/// An edit of some cells of a block.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CellChange {
    /// Patterns of masters (`*` for any run).
    pub cells: Vec<String>,
    /// Share of their instances that is changed, 0 to 1: dual-threshold assignment by count.
    #[serde(default = "all")]
    pub share: f64,
    /// What is done to them.
    pub edit: CellEdit,
}

fn all() -> f64 {
    1.0
}

/// A change that cannot be made.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("{what} is {value}; {wanted}")]
pub struct ChangeError {
    /// The quantity.
    pub what: String,
    /// What was found.
    pub value: String,
    /// What would be right.
    pub wanted: String,
}

fn wrong<T>(what: &str, value: String, wanted: impl Into<String>) -> Result<T, ChangeError> {
    Err(ChangeError { what: what.into(), value, wanted: wanted.into() })
}

impl Block {
    /// The block with cells changed (`changes`, the first pattern that fits a cell counts), cells left on the real rails
    /// (`powered`, patterns) and cells added on the real rails (`added`: isolation, retention, buffers).
    ///
    /// # Errors
    /// A share outside 0 to 1, a length that is not finite, or a pattern that fits no cell.
    pub fn changed(
        &self,
        changes: &[CellChange],
        powered: &[String],
        added: &[(Arc<Cell>, u64)],
    ) -> Result<Self, ChangeError> {
        for c in changes {
            if !(0.0..=1.0).contains(&c.share) {
                return wrong("share of changed cells", c.share.to_string(), "want 0 to 1");
            }
            if !(c.edit.lengthen_m.abs() < 1e-3) {
                return wrong("lengthen_m", format!("{} m", c.edit.lengthen_m), "want a length below 1 mm");
            }
            if c.edit.is_nothing() {
                return wrong("an edit", "nothing".into(), "want models, lengthen_m or stack");
            }
        }
        let patterns = changes.iter().flat_map(|c| &c.cells).chain(powered);
        for p in patterns {
            if !self.cells.iter().any(|c| fits_pattern(p, &c.master)) {
                let some: Vec<&str> = self.cells.iter().take(6).map(|c| c.master.as_str()).collect();
                return wrong(
                    "a pattern of cells",
                    format!("`{p}`"),
                    format!("no cell of the block fits it; there are {}", some.join(", ")),
                );
            }
        }
        let mut out =
            Self { cells: Vec::new(), uncovered: self.uncovered.clone(), tables: self.tables.clone() };
        for c in &self.cells {
            let powered = c.powered || powered.iter().any(|p| fits_pattern(p, &c.master));
            let change = changes.iter().find(|x| x.cells.iter().any(|p| fits_pattern(p, &c.master)));
            #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "a share of a count")]
            let changed = change.map_or(0, |x| (c.count as f64 * x.share).round() as u64);
            if changed < c.count {
                out.cells.push(BlockCell { count: c.count - changed, powered, ..c.clone() });
            }
            if let (Some(x), true) = (change, changed > 0) {
                let cell = Arc::new(c.cell.edited(&x.edit));
                out.cells.push(BlockCell { count: changed, cell, powered, ..c.clone() });
            }
        }
        for (cell, count) in added {
            out.cells.push(BlockCell {
                master: cell.name.to_string(),
                cell: Arc::clone(cell),
                count: *count,
                weights: StateWeights::Uniform,
                powered: true,
            });
        }
        Ok(out)
    }
}

/// Conditions that park cells asleep: pattern of masters to a product of pins.
pub type Parked = IndexMap<String, String>;
