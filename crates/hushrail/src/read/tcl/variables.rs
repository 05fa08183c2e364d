//! Variables: scalars and arrays, in the global frame and in those of procedures.

use std::collections::BTreeMap;

use indexmap::IndexMap;
use rustc_hash::FxHashMap;

use super::list;
use super::number::{Number, number};
use super::value::{Spot, Value, Word};
use super::words::{listed, wants};
use super::{Interpreter, Outcome, Stop};
use crate::read::source::ReadError;

#[derive(Debug, Clone)]
pub(super) enum Variable {
    Scalar(Value),
    Array(IndexMap<String, Value>),
    /// The global of this name.
    Global,
}

/// The variables of a procedure, or the globals.
#[derive(Debug, Default)]
pub(super) struct Frame {
    variables: FxHashMap<String, Variable>,
}

impl Frame {
    pub(super) fn set_array(&mut self, name: &str, entries: &BTreeMap<String, String>) {
        let entries =
            entries.iter().map(|(k, v)| (k.clone(), Value::new(v.as_str(), Spot::default()))).collect();
        self.variables.insert(name.to_owned(), Variable::Array(entries));
    }
}

/// A name taken apart: the variable, and the index when it is an element of an array.
fn parts(name: &str) -> (&str, Option<&str>) {
    match name.strip_suffix(')').and_then(|n| n.split_once('(')) {
        Some((array, index)) => (array, Some(index)),
        None => (name, None),
    }
}

impl Interpreter {
    /// The frame and the name in it that a name stands for.
    fn seat<'a>(&self, name: &'a str) -> (usize, &'a str) {
        if let Some(global) = name.strip_prefix("::") {
            return (0, global);
        }
        let top = self.frames.len().saturating_sub(1);
        let linked =
            self.frames.last().is_some_and(|f| matches!(f.variables.get(name), Some(Variable::Global)));
        (if linked { 0 } else { top }, name)
    }

    fn look(&self, name: &str) -> Option<&Variable> {
        let (frame, name) = self.seat(name);
        self.frames.get(frame)?.variables.get(name).filter(|v| !matches!(v, Variable::Global))
    }

    /// Whether a variable, or an element of an array, has a value.
    pub(super) fn exists(&self, name: &str) -> bool {
        let (array, index) = parts(name);
        match (self.look(array), index) {
            (Some(Variable::Array(entries)), Some(index)) => entries.contains_key(index),
            (Some(_), None) => true,
            _ => false,
        }
    }

    /// The value of a variable.
    pub(super) fn get(&self, name: &str, at: Spot) -> Outcome {
        let (array, index) = parts(name);
        match (self.look(array), index) {
            (Some(Variable::Scalar(value)), None) => Ok(value.clone()),
            (Some(Variable::Array(entries)), Some(index)) => match entries.get(index) {
                Some(value) => Ok(value.clone()),
                None if array.trim_start_matches("::") == "env" => {
                    let e = ReadError::Unknown {
                        at: self.place(at),
                        kind: "variable of the environment",
                        name: index.to_owned(),
                        nearest: crate::read::source::nearest(index, entries.keys().map(String::as_str)),
                    };
                    Err(e.into())
                }
                None => {
                    let known: Vec<String> = entries.keys().map(|k| format!("{array}({k})")).collect();
                    Err(self.unknown(at, "variable", name, known.iter().map(String::as_str)))
                }
            },
            (Some(Variable::Array(_)), None) => {
                Err(self.wrong(at, format!("`{name}` is an array"), format!("want `{name}(index)`")))
            }
            (Some(Variable::Scalar(_)), Some(_)) => {
                Err(self.wrong(at, format!("`{array}` is no array"), format!("want `{array}`")))
            }
            (None | Some(Variable::Global), _) => {
                let mut known = self.variable_names();
                known.sort_unstable();
                Err(self.unknown(at, "variable", array, known))
            }
        }
    }

    fn variable_names(&self) -> Vec<&str> {
        let frame = self.frames.last().into_iter();
        frame.flat_map(|f| f.variables.keys().map(String::as_str)).collect()
    }

    /// Gives a variable a value.
    pub(super) fn set(&mut self, name: &str, value: Value, at: Spot) -> Result<(), Stop> {
        let (array, index) = parts(name);
        let (frame, key) = self.seat(array);
        let Some(frame) = self.frames.get_mut(frame) else { return Ok(()) };
        let found = match (frame.variables.get_mut(key), index) {
            (Some(Variable::Array(entries)), Some(index)) => {
                entries.insert(index.to_owned(), value);
                return Ok(());
            }
            (Some(slot @ Variable::Scalar(_)), None) => {
                *slot = Variable::Scalar(value);
                return Ok(());
            }
            (None | Some(Variable::Global), Some(index)) => {
                let entries = IndexMap::from_iter([(index.to_owned(), value)]);
                frame.variables.insert(key.to_owned(), Variable::Array(entries));
                return Ok(());
            }
            (None | Some(Variable::Global), None) => {
                frame.variables.insert(key.to_owned(), Variable::Scalar(value));
                return Ok(());
            }
            (Some(Variable::Array(_)), None) => "an array",
            (Some(Variable::Scalar(_)), Some(_)) => "no array",
        };
        Err(self.wrong(at, format!("`{array}` is {found}"), "want another name, or unset it first"))
    }

    fn unset(&mut self, name: &str) -> bool {
        let (array, index) = parts(name);
        let (frame, key) = self.seat(array);
        let Some(frame) = self.frames.get_mut(frame) else { return false };
        match index {
            None => frame.variables.remove(key).is_some(),
            Some(index) => match frame.variables.get_mut(key) {
                Some(Variable::Array(entries)) => entries.shift_remove(index).is_some(),
                _ => false,
            },
        }
    }
}

pub(super) fn set(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    match words {
        [_, name] => tcl.get(name.text(), name.at),
        [_, name, value] => {
            tcl.set(name.text(), value.value.clone(), name.at)?;
            Ok(value.value.clone())
        }
        _ => Err(wants(tcl, words, "set name ?value?")),
    }
}

pub(super) fn unset(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let mut quiet = false;
    for word in &words[1..] {
        if word.text() == "-nocomplain" {
            quiet = true;
        } else if word.text() != "--" && !tcl.unset(word.text()) && !quiet {
            tcl.get(word.text(), word.at)?;
        }
    }
    Ok(Value::new("", words[0].at))
}

pub(super) fn global(tcl: &mut Interpreter, words: &[Word]) -> Value {
    if tcl.frames.len() > 1 {
        for word in &words[1..] {
            let name = word.text().trim_start_matches("::").to_owned();
            if let Some(frame) = tcl.frames.last_mut() {
                frame.variables.insert(name, Variable::Global);
            }
        }
    }
    Value::new("", words[0].at)
}

pub(super) fn incr(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let (name, by) = match words {
        [_, name] => (name, 1),
        [_, name, by] => (name, tcl.whole(by)?),
        _ => return Err(wants(tcl, words, "incr name ?step?")),
    };
    let old = if tcl.exists(name.text()) {
        let value = tcl.get(name.text(), name.at)?;
        tcl.whole(&Word { value, at: name.at })?
    } else {
        0
    };
    let Some(sum) = old.checked_add(by) else {
        return Err(tcl.wrong(name.at, "a whole number past 64 bits", "want smaller numbers"));
    };
    let value = Value::new(sum.to_string(), name.at);
    tcl.set(name.text(), value.clone(), name.at)?;
    Ok(value)
}

pub(super) fn append(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let Some(name) = words.get(1) else { return Err(wants(tcl, words, "append name ?text …?")) };
    let old = tcl.exists(name.text()).then(|| tcl.get(name.text(), name.at)).transpose()?;
    let mut text = old.map_or_else(String::new, |v| v.text().to_owned());
    for word in &words[2..] {
        text.push_str(word.text());
    }
    tcl.spend(text.len(), name.at)?;
    let value = Value::new(text, name.at);
    tcl.set(name.text(), value.clone(), name.at)?;
    Ok(value)
}

pub(super) fn lappend(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let Some(name) = words.get(1) else { return Err(wants(tcl, words, "lappend name ?element …?")) };
    let mut all = if tcl.exists(name.text()) {
        let old = tcl.get(name.text(), name.at)?;
        tcl.list(&old)?
    } else {
        Vec::new()
    };
    all.extend(words[2..].iter().map(|w| w.value.clone()));
    let value = listed(&all, name.at);
    tcl.spend(value.text().len(), name.at)?;
    tcl.set(name.text(), value.clone(), name.at)?;
    Ok(value)
}

pub(super) fn array(tcl: &mut Interpreter, words: &[Word]) -> Outcome {
    let (Some(what), Some(name)) = (words.get(1), words.get(2)) else {
        return Err(wants(tcl, words, "array exists|get|names|set|size|unset name ?…?"));
    };
    let entries = match tcl.look(name.text()) {
        Some(Variable::Array(entries)) => Some(entries.clone()),
        _ => None,
    };
    let at = words[0].at;
    let pattern = words.get(3).map_or("*", Word::text);
    let fitting = entries.iter().flatten().filter(|(k, _)| list::fits(pattern, k));
    match (what.text(), words.len()) {
        ("exists", 3) => Ok(Value::new(if entries.is_some() { "1" } else { "0" }, at)),
        ("size", 3) => Ok(Value::new(entries.map_or(0, |e| e.len()).to_string(), at)),
        ("names", 3 | 4) => Ok(Value::new(list::join(fitting.map(|(k, _)| k.as_str())), at)),
        ("get", 3 | 4) => {
            let all: Vec<&str> = fitting.flat_map(|(k, v)| [k.as_str(), v.text()]).collect();
            Ok(Value::new(list::join(all), at))
        }
        ("set", 4) => {
            let all = tcl.list(&words[3].value)?;
            if !all.len().is_multiple_of(2) {
                return Err(tcl.wrong(
                    words[3].at,
                    "a list of an odd length",
                    "want keys and values in turn",
                ));
            }
            for pair in all.chunks_exact(2) {
                let key = format!("{}({})", name.text(), pair[0].text());
                tcl.set(&key, pair[1].clone(), name.at)?;
            }
            Ok(Value::new("", at))
        }
        ("unset", 3) => {
            tcl.unset(name.text());
            Ok(Value::new("", at))
        }
        ("exists" | "size" | "names" | "get" | "set" | "unset", _) => {
            Err(wants(tcl, words, "array exists|get|names|set|size|unset name ?…?"))
        }
        (other, _) => Err(tcl.unknown(
            what.at,
            "subcommand of array",
            other,
            ["exists", "get", "names", "set", "size", "unset"],
        )),
    }
}

impl Interpreter {
    /// The whole number a word is.
    pub(super) fn whole(&self, word: &Word) -> Result<i64, Stop> {
        match number(word.text()) {
            Some(Number::Whole(n)) => Ok(n),
            _ => Err(self.wrong(
                word.at,
                format!("`{}` is no whole number", super::short(word.text())),
                "want one of 64 bits",
            )),
        }
    }
}
