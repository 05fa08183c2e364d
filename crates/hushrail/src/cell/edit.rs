//! A cell with its transistors exchanged, lengthened or split into stacks: what a designer may do against leakage inside.

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::cell::{Cell, Part};
use crate::device::process::Request;

/// What is done to every transistor of a cell.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct CellEdit {
    /// Models to put for others, such as a high threshold for a low one; names ignore case.
    pub models: IndexMap<String, String>,
    /// Added to every drawn length, m.
    pub lengthen_m: f64,
    /// Split every transistor into two in series of half its width (stack forcing: Narendra et al., ISLPED 2001, from memory). The
    /// input capacitance stays, the drive falls to about a quarter.
    pub stack: bool,
}

impl CellEdit {
    /// Whether it changes nothing.
    pub fn is_nothing(&self) -> bool {
        self.models.is_empty() && self.lengthen_m == 0.0 && !self.stack
    }
}

fn scaled(r: &Request, names: &[&str], factor: f64) -> Request {
    let params = r
        .params
        .iter()
        .map(|(n, v)| (n.clone(), if names.contains(&&**n) { v * factor } else { *v }))
        .collect();
    Request { params, ..r.clone() }
}

impl Cell {
    /// The cell after an edit.
    #[must_use]
    pub fn edited(&self, edit: &CellEdit) -> Self {
        let mut out = self.clone();
        out.parts.clear();
        for part in &self.parts {
            let Part::Transistor(r, nodes) = part else {
                out.parts.push(part.clone());
                continue;
            };
            let mut r = r.clone();
            if let Some((_, to)) = edit.models.iter().find(|(from, _)| from.eq_ignore_ascii_case(&r.model)) {
                r.model = to.to_lowercase().into();
            }
            for (name, v) in &mut r.params {
                if &**name == "l" {
                    *v += edit.lengthen_m;
                }
            }
            if !edit.stack {
                out.parts.push(Part::Transistor(r, *nodes));
                continue;
            }
            let half = scaled(&r, &["w", "ad", "as", "pd", "ps"], 0.5);
            let middle = out.nodes.len();
            out.nodes.push(format!("{}~{middle}", out.nodes[nodes[0]]).into());
            let [d, g, s, b] = *nodes;
            out.parts.push(Part::Transistor(half.clone(), [d, g, middle, b]));
            out.parts.push(Part::Transistor(half, [middle, g, s, b]));
        }
        out
    }
}
