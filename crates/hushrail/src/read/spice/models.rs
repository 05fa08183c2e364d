//! `.model`, `.param` and `.func`.

use std::sync::Arc;

use super::Reader;
use super::cursor::Cursor;
use crate::read::deck::{Definition, ModelText};
use crate::read::expression::{Expr, UserFunction};
use crate::read::source::ReadError;

impl Reader<'_> {
    pub(super) fn model(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        let (name, loc) = c.word();
        let (kind, kind_loc) = c.word();
        if name.is_empty() || kind.is_empty() {
            return Err(self.wrong(
                kind_loc,
                "`.model` without a name and a type",
                "want `.model NAME nmos …`",
            ));
        }
        let mut values = Vec::with_capacity(300);
        let bracket = c.takes('(');
        loop {
            c.skip(&[',']);
            if bracket && c.takes(')') {
                if !c.is_end() {
                    let l = c.loc();
                    return Err(self.wrong(l, "text behind the closing `)`", "want the end of the model"));
                }
                break;
            }
            if c.is_end() {
                if bracket {
                    let l = c.loc();
                    return Err(self.wrong(l, "the model ends", "want the closing `)`"));
                }
                break;
            }
            let (key, key_loc) = self.key(c, "model")?;
            if &*key == "version" {
                // versions may have three parts: 4.8.2 reads as 4.82
                c.skip(&[]);
                let l = c.loc();
                let (text, _) = c.word();
                if let Some((expr, ())) = version_number(&text).map(|v| (Expr::Num(v), ())) {
                    values.push((key, Definition { expr, loc: l }));
                    continue;
                }
                c.at -= text.len();
            }
            let mut def = self.value(c)?;
            def.loc = key_loc;
            values.push((key, def));
        }
        let model = ModelText { name: self.lower(&name), kind: self.lower(&kind), values, loc };
        let scope = self.open.last().map_or(&self.deck.models, |sub| &sub.models);
        if let Some(first) = scope.iter().find(|m| m.name == model.name) {
            let wanted =
                format!("the first definition is at {}; keep one", first.loc.place(&self.deck.files));
            return Err(self.wrong(model.loc, format!("model `{name}` is defined a second time"), wanted));
        }
        match self.open.last_mut() {
            Some(sub) => sub.models.push(model),
            None => self.deck.models.push(model),
        }
        Ok(())
    }

    pub(super) fn params(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        while !c.is_end() {
            c.skip(&[',']);
            let before = c.at;
            let (word, _) = c.word();
            if c.rest().starts_with('(') && !word.is_empty() {
                c.at = before;
                self.function(c)?;
                return Ok(());
            }
            c.at = before;
            let (key, key_loc) = self.key(c, "parameter list")?;
            let mut def = self.value(c)?;
            def.loc = key_loc;
            match self.open.last_mut() {
                Some(sub) => sub.params.insert(key, def),
                None => self.deck.params.insert(key, def),
            };
        }
        Ok(())
    }

    pub(super) fn function(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        let (name, loc) = c.word();
        if name.is_empty() || !c.takes('(') {
            return Err(self.wrong(
                loc,
                "a function without arguments",
                "want `.func name(x, y) {expression}`",
            ));
        }
        let mut args = Vec::new();
        loop {
            c.skip(&[',']);
            if c.takes(')') {
                break;
            }
            let (arg, l) = c.word();
            if arg.is_empty() {
                return Err(self.wrong(
                    l,
                    "a broken argument list",
                    "want names separated by commas and `)`",
                ));
            }
            args.push(self.lower(&arg));
        }
        c.takes('=');
        let body = self.value(c)?.expr;
        let key = self.lower(&name);
        self.deck.functions.insert(key, Arc::new(UserFunction { args, body }));
        Ok(())
    }
}

/// `4.5` as it is, `4.8.2` as 4.82.
fn version_number(text: &str) -> Option<f64> {
    let mut parts = text.splitn(2, '.');
    let major = parts.next()?;
    let minor: String = parts.next().unwrap_or("0").chars().filter(|c| *c != '.').collect();
    if major.is_empty() || !major.bytes().chain(minor.bytes()).all(|b| b.is_ascii_digit()) {
        return None;
    }
    format!("{major}.{minor}").parse().ok()
}
