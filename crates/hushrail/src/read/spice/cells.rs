//! Subcircuits and their elements.

use std::sync::Arc;

use indexmap::IndexMap;

use super::Reader;
use super::cursor::Cursor;
use crate::read::deck::{Definition, Element, Subckt};
use crate::read::expression::Expr;
use crate::read::lines::Loc;
use crate::read::number::whole_number;
use crate::read::source::ReadError;

impl Reader<'_> {
    pub(super) fn subckt(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        let (name, loc) = c.word();
        if name.is_empty() {
            return Err(self.wrong(loc, "`.subckt` without a name", "want `.subckt NAME port port …`"));
        }
        if let Some(outer) = self.open.last() {
            let outer = outer.name.clone();
            return Err(self.wrong(
                loc,
                format!("subcircuit `{name}` starts inside `{outer}`"),
                "want `.ends` first: nested definitions are not supported",
            ));
        }
        let mut sub = Subckt {
            name: name.as_str().into(),
            ports: Vec::new(),
            params: IndexMap::new(),
            models: Vec::new(),
            elements: Vec::new(),
            directions: IndexMap::new(),
            loc,
        };
        while !c.is_end() {
            c.skip(&['(', ')', ',']);
            let before = c.at;
            let (word, l) = c.word();
            if word.is_empty() {
                if c.is_end() {
                    break;
                }
                return Err(self.wrong(l, "a broken port list", "want port names, then `name = value`"));
            }
            if c.takes('=') {
                c.at = before;
                let (key, key_loc) = self.key(c, "subcircuit line")?;
                let mut def = self.value(c)?;
                def.loc = key_loc;
                sub.params.insert(key, def);
            } else if word.eq_ignore_ascii_case("params:") || word == "/" {
            } else if sub.ports.iter().any(|p| **p == *word) {
                return Err(self.wrong(l, format!("port `{word}` stands twice"), "want each port once"));
            } else {
                sub.ports.push(word.into());
            }
        }
        self.open.push(sub);
        Ok(())
    }

    pub(super) fn ends(&mut self, c: &mut Cursor<'_>, loc: Loc) -> Result<(), ReadError> {
        let (name, _) = c.word();
        let Some(sub) = self.open.pop() else {
            return Err(self.wrong(loc, "`.ends` without `.subckt`", "remove it"));
        };
        if !name.is_empty() && !name.eq_ignore_ascii_case(&sub.name) {
            let want = format!("want `.ends {}`", sub.name);
            return Err(self.wrong(loc, format!("`.ends {name}` closes nothing"), want));
        }
        let key = self.lower(&sub.name);
        if let Some(first) = self.deck.subckts.get(&key) {
            let at = first.loc.place(&self.deck.files);
            return Err(self.wrong(
                sub.loc,
                format!("subcircuit `{}` is defined a second time", sub.name),
                format!("the first definition is at {at}; keep one"),
            ));
        }
        self.deck.subckts.insert(key, sub);
        Ok(())
    }

    pub(super) fn element(&mut self, name: &str, loc: Loc, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        let kind = name.chars().next().unwrap_or(' ').to_ascii_uppercase();
        if !"MXDRC".contains(kind) {
            return Err(self.wrong(
                loc,
                format!("found `{name}`"),
                "want an element (M, X, D, R, C) or a directive that starts with a dot",
            ));
        }
        let mut words: Vec<(String, Loc)> = Vec::new();
        let mut value = None;
        let mut params = Vec::new();
        while !c.is_end() {
            c.skip(&['(', ')', ',']);
            if c.is_end() {
                break;
            }
            let before = c.at;
            if c.rest().starts_with(['{', '\'']) {
                value = Some(self.value(c)?);
                continue;
            }
            let (word, l) = c.word();
            if word.is_empty() {
                return Err(self.wrong(
                    l,
                    "a stray character",
                    "want nodes, a model and `name = value` pairs",
                ));
            }
            if c.takes('=') {
                if word.starts_with('$') {
                    c.word(); // layout remark of a CDL netlist
                    continue;
                }
                c.at = before;
                let (key, key_loc) = self.key(c, "element")?;
                let mut def = self.value(c)?;
                def.loc = key_loc;
                params.push((key, def));
            } else if word == "/" || word.starts_with("$[") {
            } else if !params.is_empty() {
                return Err(self.wrong(
                    l,
                    format!("found `{word}` behind the parameters"),
                    "want `name = value`",
                ));
            } else {
                words.push((word, l));
            }
        }
        let fixed = match kind {
            'M' => Some(4),
            'D' | 'R' | 'C' => Some(2),
            _ => None,
        };
        let n_nodes = fixed.unwrap_or_else(|| words.len().saturating_sub(1));
        let enough =
            if matches!(kind, 'R' | 'C') { words.len() >= 2 } else { words.len() > n_nodes && n_nodes > 0 };
        if !enough {
            let what = match kind {
                'M' => "want drain, gate, source, body and model",
                'D' => "want anode, cathode and model",
                'X' => "want nodes and the name of a subcircuit",
                _ => "want two nodes and a value",
            };
            return Err(self.wrong(loc, format!("`{name}` has {} words", words.len()), what));
        }
        let mut rest = words.split_off(n_nodes).into_iter();
        let mut model: Arc<str> = "".into();
        if let Some((w, l)) = rest.next() {
            match whole_number(&w) {
                Some(v) if matches!(kind, 'R' | 'C') => {
                    value = Some(Definition { expr: Expr::Num(v), loc: l });
                }
                _ => model = self.lower(&w),
            }
        }
        if let Some((w, l)) = rest.next() {
            match whole_number(&w) {
                Some(v) if value.is_none() => value = Some(Definition { expr: Expr::Num(v), loc: l }),
                _ => return Err(self.wrong(l, format!("found `{w}`"), "want `name = value`")),
            }
        }
        let nodes = words.into_iter().map(|(w, _)| self.name(&w)).collect();
        let element = Element { name: name.into(), kind, nodes, model, value, params, loc };
        let Some(sub) = self.open.last_mut() else {
            return Err(self.wrong(
                loc,
                format!("element `{name}` stands outside a subcircuit"),
                "want cells as `.subckt … .ends`",
            ));
        };
        sub.elements.push(element);
        Ok(())
    }
}
