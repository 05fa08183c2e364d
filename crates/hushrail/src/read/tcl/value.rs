//! Values: text that knows where it was written.

use std::sync::Arc;

use crate::read::source::{Place, ReadError, Source};

/// A place, packed: number of the file and byte in it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Spot {
    file: u32,
    offset: u32,
}

impl Spot {
    pub(super) fn new(file: u32, offset: usize) -> Self {
        Self { file, offset: u32::try_from(offset).unwrap_or(u32::MAX) }
    }

    fn along(self, bytes: usize) -> Self {
        Self { offset: self.offset.saturating_add(u32::try_from(bytes).unwrap_or(u32::MAX)), ..self }
    }
}

/// Text, and where it comes from.
#[derive(Debug, Clone)]
pub struct Value {
    pub(super) text: Arc<str>,
    pub(super) spot: Spot,
    pub(super) origin: Origin,
}

/// How a text relates to what is written in the file.
#[derive(Debug, Clone)]
pub(super) enum Origin {
    /// It stands there byte for byte.
    Exact,
    /// All of it has one place.
    Made,
    /// Pieces: the first byte of each, its place, and whether it stands there byte for byte.
    Pieces(Arc<[(usize, Spot, bool)]>),
}

impl Value {
    pub(super) fn new(text: impl Into<Arc<str>>, spot: Spot) -> Self {
        Self { text: text.into(), spot, origin: Origin::Made }
    }

    /// Text that a command makes.
    pub fn at(text: impl Into<Arc<str>>, spot: Spot) -> Self {
        Self::new(text, spot)
    }

    /// The text.
    pub fn text(&self) -> &str {
        &self.text
    }

    /// Where it was written; for text put together from pieces, where that was done.
    pub fn spot(&self) -> Spot {
        self.spot
    }

    /// Where a byte of it was written.
    pub(super) fn spot_of(&self, byte: usize) -> Spot {
        match &self.origin {
            Origin::Exact => self.spot.along(byte),
            Origin::Made => self.spot,
            Origin::Pieces(pieces) => {
                let at = pieces.partition_point(|p| p.0 <= byte).saturating_sub(1);
                match pieces.get(at) {
                    Some(&(start, spot, true)) => spot.along(byte.saturating_sub(start)),
                    Some(&(_, spot, false)) => spot,
                    None => self.spot,
                }
            }
        }
    }

    fn is_exact(&self, from: usize, to: usize) -> bool {
        match &self.origin {
            Origin::Exact => true,
            Origin::Made => false,
            Origin::Pieces(pieces) => {
                let at = pieces.partition_point(|p| p.0 <= from);
                let exact = at.checked_sub(1).and_then(|i| pieces.get(i)).is_some_and(|p| p.2);
                exact && pieces.get(at).is_none_or(|p| p.0 >= to)
            }
        }
    }

    /// A piece of it, which keeps its own place.
    pub(super) fn slice(&self, from: usize, to: usize) -> Self {
        let text = self.text.get(from..to).unwrap_or_default();
        let origin = if self.is_exact(from, to) { Origin::Exact } else { Origin::Made };
        Self { text: text.into(), spot: self.spot_of(from), origin }
    }
}

/// A word of a command: its value and where the word stands.
#[derive(Debug, Clone)]
pub struct Word {
    /// The value after substitution; its own place may be where a variable was set.
    pub value: Value,
    /// Where the word stands in the command.
    pub at: Spot,
}

impl Word {
    /// The text after substitution.
    pub fn text(&self) -> &str {
        &self.value.text
    }
}

/// The texts that were read, for places.
#[derive(Debug, Default)]
pub(super) struct Files {
    list: Vec<(Source, Vec<u32>)>,
}

impl Files {
    /// Adds a file; the value is its text.
    pub(super) fn add(&mut self, source: &Source) -> Result<Value, ReadError> {
        if u32::try_from(source.text.len()).is_err() {
            return Err(ReadError::Range {
                at: Place::new(&source.path, 1, 1),
                name: "size of the file".into(),
                value: format!("{} bytes", source.text.len()),
                wanted: "want less than four gigabytes".into(),
            });
        }
        let starts = memchr::memchr_iter(b'\n', source.text.as_bytes())
            .filter_map(|i| u32::try_from(i + 1).ok())
            .collect();
        let number = u32::try_from(self.list.len()).unwrap_or(u32::MAX);
        self.list.push((source.clone(), starts));
        Ok(Value { text: Arc::clone(&source.text), spot: Spot::new(number, 0), origin: Origin::Exact })
    }

    pub(super) fn source(&self, spot: Spot) -> Option<&Source> {
        self.list.get(spot.file as usize).map(|f| &f.0)
    }

    pub(super) fn place(&self, spot: Spot) -> Place {
        let Some((source, starts)) = self.list.get(spot.file as usize) else {
            return Place::new(&Arc::from("?"), 1, 1);
        };
        let line = starts.partition_point(|&s| s <= spot.offset);
        let start = line.checked_sub(1).map_or(0, |i| starts[i]) as usize;
        let end = (spot.offset as usize).min(source.text.len());
        let before = source.text.as_bytes().get(start..end).unwrap_or_default();
        // bytes that go on a character do not begin one
        let column = before.iter().filter(|b| **b & 0xc0 != 0x80).count();
        Place::new(&source.path, line + 1, column + 1)
    }
}
