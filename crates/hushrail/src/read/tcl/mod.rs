//! The plain Tcl that power intent is written in: an interpreter with places, limits and no way out.
//!
//! Words, braces, quotes, backslashes, variables and arrays, commands in brackets, `expr`, control flow, procedures,
//! lists and strings. Every value knows where it was written, also through a variable, so an error about a name in a
//! list points at the name. Steps, depth and memory are limited. Nothing is printed: what `puts` says is a note. The
//! environment is what the caller gives. Files are only read, by `source` and by the commands of the host.
//!
//! What differs from the language: inside braces a backslash at the end of a line becomes as many blanks as it has
//! bytes, so that places hold; there are no namespaces (`::` leads to a global), no channels, no processes, no
//! regular expressions; whole numbers have 64 bits and leaving them is an error.

mod builtin;
mod control;
mod expr;
pub(in crate::read) mod list;
mod number;
mod strings;
#[cfg(test)]
mod tests;
mod value;
mod variables;
mod words;

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use rustc_hash::FxHashMap;

pub use value::{Spot, Value, Word};

use super::deck::Note;
use super::source::{Place, ReadError, Source, nearest};
use value::Files;
use variables::Frame;

/// How far a script may go.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Limits {
    /// Commands and pieces of text made, about.
    pub steps: u64,
    /// Scripts, brackets, procedures, parentheses and files within each other.
    pub depth: usize,
}

impl Default for Limits {
    fn default() -> Self {
        Self { steps: 5_000_000, depth: 100 }
    }
}

/// Why a script stops.
#[derive(Debug)]
pub enum Stop {
    /// Something is wrong.
    Error(Box<ReadError>),
    /// A limit was passed; `catch` does not hold it.
    Limit(Box<ReadError>),
    /// `return`.
    Return(Value),
    /// `break`, and where.
    Break(Spot),
    /// `continue`, and where.
    Continue(Spot),
}

impl From<ReadError> for Stop {
    fn from(e: ReadError) -> Self {
        Self::Error(Box::new(e))
    }
}

/// What a script comes to.
pub type Outcome = Result<Value, Stop>;

/// Commands beyond the language.
pub trait Host {
    /// The names of the commands, for suggestions.
    fn names(&self) -> Vec<&str>;
    /// Runs a command; nothing when there is no such command.
    fn call(&mut self, tcl: &mut Interpreter, words: &[Word]) -> Option<Outcome>;
}

/// No commands beyond the language.
impl Host for () {
    fn names(&self) -> Vec<&str> {
        Vec::new()
    }

    fn call(&mut self, _: &mut Interpreter, _: &[Word]) -> Option<Outcome> {
        None
    }
}

#[derive(Debug, Clone)]
struct Procedure {
    params: Arc<[(String, Option<Value>)]>,
    body: Value,
}

/// A running script: its variables, procedures, files and notes.
#[derive(Debug)]
pub struct Interpreter {
    files: Files,
    frames: Vec<Frame>,
    procedures: FxHashMap<String, Procedure>,
    limits: Limits,
    steps: u64,
    depth: usize,
    /// Files that are being read, innermost last.
    open: Vec<PathBuf>,
    notes: Vec<Note>,
}

/// Notes kept of `puts`.
const MAX_NOTES: usize = 200;
/// Bytes of text that count as one step.
const BYTES_PER_STEP: u64 = 32;

impl Interpreter {
    /// An interpreter whose array `env` holds `env`.
    pub fn new(env: &BTreeMap<String, String>, limits: Limits) -> Self {
        let mut global = Frame::default();
        global.set_array("env", env);
        Self {
            files: Files::default(),
            frames: vec![global],
            procedures: FxHashMap::default(),
            limits,
            steps: 0,
            depth: 0,
            open: Vec::new(),
            notes: Vec::new(),
        }
    }

    /// Runs a file.
    ///
    /// # Errors
    /// What is wrong in it, with the place of the word; a limit that is passed.
    pub fn run(&mut self, host: &mut dyn Host, source: &Source) -> Result<Value, ReadError> {
        let script = self.files.add(source)?;
        let outcome = self.evaluate(host, &script);
        self.finished(outcome)
    }

    /// What has been noted; emptied.
    pub fn take_notes(&mut self) -> Vec<Note> {
        std::mem::take(&mut self.notes)
    }

    /// Keeps a note.
    pub fn note(&mut self, code: &str, at: Spot, text: &str) {
        if self.notes.len() < MAX_NOTES {
            let note = Note::new(code, format!("{}: {text}", self.place(at)));
            note.add_once(&mut self.notes);
        }
    }

    /// The place that a spot stands for.
    pub fn place(&self, spot: Spot) -> Place {
        self.files.place(spot)
    }

    /// A result of an inner script as that of the whole.
    pub fn finished(&self, outcome: Outcome) -> Result<Value, ReadError> {
        match outcome {
            Ok(value) | Err(Stop::Return(value)) => Ok(value),
            Err(Stop::Error(e) | Stop::Limit(e)) => Err(*e),
            Err(Stop::Break(at)) => Err(self.loose("break", at)),
            Err(Stop::Continue(at)) => Err(self.loose("continue", at)),
        }
    }

    fn loose(&self, word: &str, at: Spot) -> ReadError {
        ReadError::Syntax {
            at: self.place(at),
            found: format!("`{word}` outside a loop"),
            wanted: "want it in the body of `while`, `for` or `foreach`".into(),
        }
    }

    /// The error for a word that does not fit.
    pub fn wrong(&self, at: Spot, found: impl Into<String>, wanted: impl Into<String>) -> Stop {
        ReadError::Syntax { at: self.place(at), found: found.into(), wanted: wanted.into() }.into()
    }

    /// The error for a name that nothing defines.
    pub fn unknown<'a>(
        &self,
        at: Spot,
        kind: &'static str,
        name: &str,
        known: impl IntoIterator<Item = &'a str>,
    ) -> Stop {
        let nearest = nearest(name, known);
        ReadError::Unknown { at: self.place(at), kind, name: short(name), nearest }.into()
    }

    /// The elements of a word that is a list.
    pub fn list(&mut self, word: &Value) -> Result<Vec<Value>, Stop> {
        self.spend(word.text().len(), word.spot())?;
        list::elements(word).map_err(|(byte, what)| {
            self.wrong(word.spot_of(byte), what, "want a list, with its braces closed")
        })
    }

    /// Where a byte of a value was written.
    pub fn spot_in(&self, value: &Value, byte: usize) -> Spot {
        value.spot_of(byte)
    }

    /// Evaluates a script.
    pub fn evaluate(&mut self, host: &mut dyn Host, script: &Value) -> Outcome {
        self.deeper(script.spot(), |tcl| words::script(tcl, host, script))
    }

    /// Reads and runs a file that a command names.
    ///
    /// A relative path starts from the folder of the file that holds the command.
    ///
    /// # Errors
    /// The file cannot be read, is being read already, or holds an error.
    pub fn run_file(&mut self, host: &mut dyn Host, name: &Word) -> Outcome {
        let path = self.resolve(name);
        let full = std::fs::canonicalize(&path).unwrap_or_else(|_| path.clone());
        let first = self.files.source(Spot::default()).map(|s| PathBuf::from(&*s.path));
        let is_first = first.and_then(|p| std::fs::canonicalize(p).ok()).is_some_and(|p| p == full);
        if is_first || self.open.contains(&full) {
            return Err(self.wrong(
                name.at,
                format!("`{}` is being read already", short(name.text())),
                "want a file that does not load itself",
            ));
        }
        let kind = std::fs::metadata(&path);
        if kind.as_ref().is_ok_and(|m| !m.is_file()) {
            return Err(self.wrong(name.at, format!("`{}` is no file", short(name.text())), "want a file"));
        }
        let source = Source::open(&path).map_err(|e| match e {
            ReadError::Io { reason, .. } => self.wrong(
                name.at,
                format!("`{}` cannot be read: {reason}", path.display()),
                "want a file, from the folder of this one",
            ),
            other => other.into(),
        })?;
        self.spend(source.text.len().saturating_add(3200), name.at)?;
        let script = self.files.add(&source)?;
        self.open.push(full);
        let outcome = self.evaluate(host, &script);
        self.open.pop();
        match outcome {
            Err(Stop::Return(value)) => Ok(value),
            Err(stop @ (Stop::Break(_) | Stop::Continue(_))) => {
                Err(self.finished(Err(stop)).map_or_else(Stop::from, |_| {
                    self.wrong(name.at, "a loop's end outside a loop", "want it inside")
                }))
            }
            other => other,
        }
    }

    /// The path a word names.
    fn resolve(&self, name: &Word) -> PathBuf {
        let folder = self.files.source(name.at).map_or_else(PathBuf::new, |s| s.folder.clone());
        folder.join(Path::new(name.text()))
    }

    /// Counts work that a command of the host does.
    pub fn charge(&mut self, bytes: usize, at: Spot) -> Result<(), Stop> {
        self.spend(bytes, at)
    }

    /// Counts text that is made.
    pub(super) fn spend(&mut self, bytes: usize, at: Spot) -> Result<(), Stop> {
        self.steps = self.steps.saturating_add(1 + bytes as u64 / BYTES_PER_STEP);
        if self.steps <= self.limits.steps {
            return Ok(());
        }
        Err(Stop::Limit(Box::new(ReadError::Syntax {
            at: self.place(at),
            found: format!("the script takes more than {} steps", self.limits.steps),
            wanted: "want one that ends; is there a loop without end?".into(),
        })))
    }

    /// Goes one level down.
    fn deeper<T>(&mut self, at: Spot, work: impl FnOnce(&mut Self) -> Result<T, Stop>) -> Result<T, Stop> {
        if self.depth >= self.limits.depth {
            return Err(Stop::Limit(Box::new(ReadError::Syntax {
                at: self.place(at),
                found: format!("scripts within scripts go more than {} deep", self.limits.depth),
                wanted: "want fewer levels; does a procedure call itself without end?".into(),
            })));
        }
        self.depth += 1;
        let out = work(self);
        self.depth -= 1;
        out
    }
}

/// A text cut for a message.
pub(super) fn short(text: &str) -> String {
    if text.chars().count() <= 60 {
        text.to_owned()
    } else {
        text.chars().take(57).collect::<String>() + "…"
    }
}
