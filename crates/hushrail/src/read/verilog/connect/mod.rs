//! Netlists with their connections: a flat graph of leaf cells and nets.
//!
//! [`connect`] reads the same text as a count does, ties pins to nets, and lays the hierarchy below one top module
//! out. Numbers stand for everything: a leaf cell is an [`InstanceId`], its pins are a slice of [`NetId`] in the
//! order of its master's ports, the pins at a net are a slice too. A name is kept once for all modules; paths are
//! put together when asked for, so they cost nothing per instance.
//!
//! * Leaf cells of one module instance are numbered in a row, module instances level by level.
//! * Nets joined by an `assign` or through a port are one net, named after its uppermost place.
//! * `1'b0` and `supply0` are one net, [`NetId::ZERO`], likewise [`NetId::ONE`]; `1'bx` and `1'bz` have a net each.
//! * Leaf cells' ports come from a [`CellPorts`]. Of a cell it does not know, the pins that instances name are kept
//!   by name, without directions, each as wide as what it is first tied to.
//! * What a count runs over is checked here: names of ports, widths, names of instances, pins connected twice. Logic
//!   in an `assign` or a pin is an error.
//! * A net without a driver or with several is a note.
//!
//! # Example
//! ```
//! use hushrail::read::{Input, Source};
//! use hushrail::read::verilog::connect::{ConnectOptions, NetId, connect};
//! let text = "
//! module pair (input a, output z);
//!   wire m;
//!   inv_1 u1 (.A(a), .Y(m));
//!   inv_1 u2 (.A(m), .Y(z));
//! endmodule
//! module top (input a, output [1:0] z);
//!   pair low (.a(a), .z(z[0]));
//!   pair high (.a(1'b1), .z(z[1]));
//! endmodule";
//! let mut inputs = [Input::from(Source::from_text("top.v", text))];
//! let net = connect(&mut inputs, None, &(), &ConnectOptions::default())?;
//! let u1 = net.instance("high/u1").expect("there");
//! assert_eq!(net.pins(u1)[0], NetId::ONE);
//! assert_eq!(net.net_path(net.pins(u1)[1]), "high/m");
//! assert_eq!(net.net("low/z"), net.net("z[0]"));
//! assert_eq!(net.counts().counts["inv_1"], 4);
//! # Ok::<(), hushrail::read::ReadError>(())
//! ```

mod body;
mod expression;
mod graph;
mod join;
mod link;
mod names;
mod ports;
#[cfg(test)]
mod tests;
mod weave;

pub use graph::{CellPort, Connected, InstanceId, MasterId, NetId};
pub use ports::{CellPorts, Direction, Port};

use super::super::source::{Input, ReadError};

/// What to do with cells that neither a module nor the lookup describes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum UnknownCells {
    /// Keep them, with the pins that instances name.
    #[default]
    Keep,
    /// Stop with an error that names the nearest module.
    Refuse,
}

/// How a netlist is connected.
#[derive(Debug, Clone)]
#[non_exhaustive]
pub struct ConnectOptions {
    /// Cells without known ports.
    pub unknown_cells: UnknownCells,
    /// So many instances, of cells or of modules, are laid out at most: a slip in the ends of an array must not
    /// fill the memory. A hundred millions by default.
    pub max_instances: u64,
}

impl Default for ConnectOptions {
    fn default() -> Self {
        Self { unknown_cells: UnknownCells::default(), max_instances: 100_000_000 }
    }
}

impl ConnectOptions {
    /// Says what to do with cells without known ports.
    pub fn unknown_cells(self, unknown_cells: UnknownCells) -> Self {
        Self { unknown_cells, ..self }
    }

    /// Says how many instances are laid out at most.
    pub fn max_instances(self, max_instances: u64) -> Self {
        Self { max_instances, ..self }
    }
}

/// Reads a netlist with its connections below `top`, or below the only possible top module when it is left out.
///
/// # Errors
/// As for [`read_verilog`](super::read_verilog) and its counts; a port that a module or known cell lacks, too many
/// pins, a pin connected twice, unequal widths, two instances with one name, a net declared twice, an index outside
/// its range, logic in an `assign` or a pin, a cell nobody knows when those are refused, more instances than
/// asked for, more than 2^31 pins or nets.
pub fn connect<C: CellPorts + ?Sized>(
    inputs: &mut [Input],
    top: Option<&str>,
    cells: &C,
    options: &ConnectOptions,
) -> Result<Connected, ReadError> {
    link::link(weave::weave(inputs)?, top, cells, options)
}
