//! The files a netlist comes from, and places in them.

use std::path::PathBuf;
use std::sync::Arc;

use rustc_hash::FxHashMap;

use crate::read::source::{Input, Place, ReadError, Source};
use crate::read::window::Window;

/// An offset in one of the files.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Spot {
    pub(super) file: usize,
    pub(super) offset: usize,
}

/// The files given, read piece by piece, and the files they include, each read once and kept.
pub(super) struct Files {
    list: Vec<Window>,
    /// Bytes that a window onto a given file takes at a time.
    piece: usize,
    included: FxHashMap<PathBuf, usize>,
}

impl Files {
    pub(super) fn new(piece: usize) -> Self {
        Self { list: Vec::new(), piece, included: FxHashMap::default() }
    }

    /// Opens a given file; its number.
    pub(super) fn open(&mut self, input: &mut Input) -> Result<usize, ReadError> {
        self.list.push(Window::open(input, self.piece)?);
        Ok(self.list.len() - 1)
    }

    /// Lets go of the text of a given file that has been read.
    pub(super) fn close(&mut self, file: usize) {
        self.list[file].close();
    }

    /// What is in memory of a file.
    pub(super) fn window(&self, file: usize) -> &Window {
        &self.list[file]
    }

    /// Reads on in a file; see [`Window::slide`].
    pub(super) fn slide(&mut self, file: usize, keep: usize, needed: &[Spot]) -> Result<bool, ReadError> {
        let needed: Vec<usize> = needed.iter().filter(|s| s.file == file).map(|s| s.offset).collect();
        self.list[file].slide(keep, &needed)
    }

    /// The number of the file at `path` seen from the folder of file `from`, read now if it is new.
    pub(super) fn include(&mut self, from: usize, path: &str, at: Spot) -> Result<usize, ReadError> {
        let path = self.list[from].folder.join(path);
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
        self.list.push(Window::open(&mut source.into(), 0)?);
        self.included.insert(path, file);
        Ok(file)
    }

    pub(super) fn place(&self, spot: Spot) -> Place {
        self.list[spot.file].place(spot.offset)
    }

    /// The names of all files by number.
    pub(super) fn paths(&self) -> Vec<Arc<str>> {
        self.list.iter().map(|w| Arc::clone(w.path())).collect()
    }

    /// Line and column like `next_place`.
    pub(super) fn next_line_column(&mut self, spot: Spot) -> (usize, usize) {
        self.list[spot.file].next_place(spot.offset)
    }

    /// Like `place`, but counts on from the last place asked for: many places of one file cost one pass.
    pub(super) fn next_place(&mut self, spot: Spot) -> Place {
        let window = &mut self.list[spot.file];
        let (line, column) = window.next_place(spot.offset);
        let path = Arc::clone(window.path());
        Place::new(&path, line, column)
    }
}
