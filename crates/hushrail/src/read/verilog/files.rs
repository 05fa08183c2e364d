//! The files a netlist comes from, and places in them.

use std::path::PathBuf;
use std::sync::Arc;

use rustc_hash::FxHashMap;

use crate::read::source::{Place, ReadError, Source};

/// An offset in one of the files.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Spot {
    pub(super) file: usize,
    pub(super) offset: usize,
}

/// How far the lines of a file have been counted.
#[derive(Debug, Clone, Copy)]
struct Mark {
    offset: usize,
    line: usize,
    column: usize,
}

const START: Mark = Mark { offset: 0, line: 1, column: 1 };

/// The files given and the files they include, each read once.
pub(super) struct Files {
    list: Vec<(Source, Mark)>,
    given: usize,
    included: FxHashMap<PathBuf, usize>,
}

impl Files {
    pub(super) fn new(sources: &[Source]) -> Self {
        Self {
            list: sources.iter().map(|s| (s.clone(), START)).collect(),
            given: sources.len(),
            included: FxHashMap::default(),
        }
    }

    /// How many files were given.
    pub(super) fn given(&self) -> usize {
        self.given
    }

    /// The text of a file.
    pub(super) fn text(&self, file: usize) -> Arc<str> {
        Arc::clone(&self.list[file].0.text)
    }

    /// The number of the file at `path` seen from the folder of file `from`, read now if it is new.
    pub(super) fn include(&mut self, from: usize, path: &str, at: Spot) -> Result<usize, ReadError> {
        let path = self.list[from].0.folder.join(path);
        if let Some(&file) = self.included.get(&path) {
            return Ok(file);
        }
        let source = Source::open(&path).map_err(|e| match e {
            ReadError::Io { path, reason, missing } => {
                let at = self.place(at);
                ReadError::Io { path, reason: format!("{reason}; {at} includes it"), missing }
            }
            other => other,
        })?;
        let file = self.list.len();
        self.list.push((source, START));
        self.included.insert(path, file);
        Ok(file)
    }

    pub(super) fn place(&self, spot: Spot) -> Place {
        let source = &self.list[spot.file].0;
        Place::of_offset(&source.path, &source.text, spot.offset)
    }

    /// Like `place`, but counts on from the last place asked for: many places of one file cost one pass.
    pub(super) fn next_place(&mut self, spot: Spot) -> Place {
        let (source, mark) = &mut self.list[spot.file];
        if spot.offset < mark.offset {
            *mark = START;
        }
        let passed = &source.text.as_bytes()[mark.offset..spot.offset.min(source.text.len())];
        let is_character = |b: u8| b & 0xc0 != 0x80;
        mark.column = match passed.iter().rposition(|&b| b == b'\n') {
            Some(i) => 1 + count(&passed[i + 1..], is_character),
            None => mark.column + count(passed, is_character),
        };
        mark.line += count(passed, |b| b == b'\n');
        mark.offset += passed.len();
        Place::new(&source.path, mark.line, mark.column)
    }
}

fn count(bytes: &[u8], is: impl Fn(u8) -> bool) -> usize {
    bytes.iter().filter(|&&b| is(b)).count()
}
