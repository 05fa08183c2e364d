//! What a netlist does not say: the pins of its leaf cells.

use std::hash::BuildHasher;

use indexmap::IndexMap;

/// Which way values go through a port.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Direction {
    /// The cell listens.
    Input,
    /// The cell drives.
    Output,
    /// Both, or a supply.
    Inout,
}

/// A port of a cell or module.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Port {
    /// Its name.
    pub name: String,
    /// Which way values go; nothing when nobody said.
    pub direction: Option<Direction>,
    /// How many bits it has.
    pub width: u32,
}

impl Port {
    /// A port of one bit.
    pub fn new(name: &str, direction: Direction) -> Self {
        Self { name: name.to_owned(), direction: Some(direction), width: 1 }
    }
}

/// Where the ports of leaf cells are looked up, in the order of positional pins.
///
/// `()` knows no cell.
pub trait CellPorts {
    /// The ports of a cell, or nothing when it is not known.
    fn ports(&self, cell: &str) -> Option<Vec<Port>>;
}

impl CellPorts for () {
    fn ports(&self, _: &str) -> Option<Vec<Port>> {
        None
    }
}

impl<S: BuildHasher> CellPorts for IndexMap<String, Vec<Port>, S> {
    fn ports(&self, cell: &str) -> Option<Vec<Port>> {
        self.get(cell).cloned()
    }
}
