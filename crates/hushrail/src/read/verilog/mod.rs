//! Instance counts from structural Verilog (IEEE 1364-2005), through the hierarchy.
//!
//! What is read: modules with any port list, instances of modules and cells, instance arrays with constant ends,
//! the gate and switch primitives of the language (counted under their keyword, `nand` and so on), declarations,
//! assigns, attributes, and the compiler directives with macros, conditional text and includes. The given files
//! are read in order as one text, so a macro of the first holds in the second. What is not structure (`always`,
//! `initial`, `generate`, `specify`, primitives given by a table, …) is an error with its place, for a count
//! without it would be a guess.
//!
//! * A master that no module defines is a leaf.
//! * A module with an empty body, no instance and no assign, is a black box and counts as a leaf too.
//! * A module that holds assigns only counts nothing: wires are no cells.
//!
//! Text is read through a window that slides ([`read_verilog_from`]). Bit masks of the bytes that mean something in
//! a pin list are made for a window at a time; the commonest statements, one named instance and one declared net,
//! are taken from the masks without cutting them into tokens, and anything unusual falls back to the careful way.
//! Nothing is kept of an instance but its count, so memory grows with masters; only instances of modules that have a
//! body keep their names, for the paths of [`Netlist::counts_under`]. Whether a master has a body is known when its
//! module comes first; when some module comes after its use the text is read a second time, which costs time and no
//! memory.
//!
//! What a count does not look at: the inside of pin and port lists, where only parentheses must balance, and whether
//! names of nets are declared. Two instances with one name are reported where names are kept, that is for modules
//! with a body. [`connect`] checks all of it.
//!
//! # Example
//! ```
//! use hushrail::read::{Source, verilog::read_verilog};
//! let text = "
//! module pair (input a, output z);
//!   wire m;
//!   inv_1 u1 (.A(a), .Y(m)), u2 (.A(m), .Y(z));
//! endmodule
//! module top (input [7:0] a, output [7:0] z);
//!   pair bank [7:0] (.a(a), .z(z));
//!   decap_4 \\fill[0] ();
//! endmodule";
//! let net = read_verilog(&[Source::from_text("top.v", text)])?;
//! let all = net.counts(None)?;
//! assert_eq!((all.counts["inv_1"], all.counts["decap_4"]), (16, 1));
//! assert_eq!(net.counts_under(None, "bank[3]")?.total(), 2);
//! # Ok::<(), hushrail::read::ReadError>(())
//! ```

pub mod connect;
mod directive;
mod elaborate;
mod files;
mod keyword;
mod lex;
mod marks;
mod parse;
mod phrase;
mod range;
#[cfg(test)]
mod tests;

use indexmap::{IndexMap, IndexSet};
use rustc_hash::{FxBuildHasher, FxHashMap};

use super::source::{Input, Place, ReadError, Source};
use super::window::PIECE;

/// The modules of one or more Verilog files and what each holds.
#[derive(Debug, Clone)]
pub struct Netlist {
    /// Names of masters and modules; their positions stand for them everywhere else.
    names: IndexSet<Box<str>, FxBuildHasher>,
    /// In order of definition.
    modules: Vec<Module>,
    /// The module of a name.
    defined: FxHashMap<usize, usize>,
}

#[derive(Debug, Clone)]
struct Module {
    name: usize,
    at: Place,
    /// Instances by master, in first-seen order.
    cells: IndexMap<usize, u64, FxBuildHasher>,
    /// Instances of modules with a body, by their names.
    children: IndexMap<Box<str>, Child, FxBuildHasher>,
    has_assigns: bool,
}

impl Module {
    fn is_black_box(&self) -> bool {
        self.cells.is_empty() && !self.has_assigns
    }
}

/// An instance, or array of instances, of a module with a body.
#[derive(Debug, Clone, Copy)]
struct Child {
    master: usize,
    range: Option<(i64, i64)>,
}

/// How many instances an array with these ends holds; nothing past `u64::MAX`.
fn width(range: Option<(i64, i64)>) -> Option<u64> {
    range.map_or(Some(1), |(first, last)| first.abs_diff(last).checked_add(1))
}

/// The error for a number past what can be counted.
fn too_many(at: Place, name: &str) -> ReadError {
    ReadError::Range {
        at,
        name: name.to_owned(),
        value: format!("past {}", u64::MAX),
        wanted: "want fewer instances; check the ends of instance arrays".into(),
    }
}

/// Reads structural Verilog from files that belong together, in order.
///
/// # Errors
/// The text is cut off, is not Verilog or holds more than structure; a module is defined twice or holds two
/// modules of one instance name; an instance array has an end that is not a whole number, or too many members;
/// a macro is not defined; an included file cannot be read; there is no module.
pub fn read_verilog(sources: &[Source]) -> Result<Netlist, ReadError> {
    let mut inputs: Vec<Input> = sources.iter().cloned().map(Input::from).collect();
    read_verilog_from(&mut inputs)
}

/// Reads structural Verilog piece by piece from files or streams that belong together, in order.
///
/// Memory does not grow with the files, but for the files that they include. A stream can be read once only:
/// when one of its modules comes before a module that it instantiates, counts are the same, but paths through
/// such instances are not known.
///
/// # Errors
/// As for [`read_verilog`], and an input cannot be read.
///
/// # Example
/// ```
/// use hushrail::read::{Input, verilog::read_verilog_from};
/// let text = "module top; inv_1 u1 (), u2 (); endmodule";
/// let net = read_verilog_from(&mut [Input::stream("-", text.as_bytes())])?;
/// assert_eq!(net.counts(None)?.total(), 2);
/// # Ok::<(), hushrail::read::ReadError>(())
/// ```
pub fn read_verilog_from(inputs: &mut [Input]) -> Result<Netlist, ReadError> {
    read_in_pieces(inputs, PIECE)
}

fn read_in_pieces(inputs: &mut [Input], piece: usize) -> Result<Netlist, ReadError> {
    let net = parse::parse(inputs, None, piece)?;
    match parse::missing_names(&net) {
        Some(bodies) if inputs.iter().all(Input::is_lasting) => parse::parse(inputs, Some(&bodies), piece),
        _ => Ok(net),
    }
}
