mod directives;
mod errors;
mod hierarchy;
mod robustness;
mod statements;

use super::*;
use crate::read::counts::InstanceCounts;

fn read(text: &str) -> Result<Netlist, ReadError> {
    read_verilog(&[Source::from_text("n.v", text)])
}

/// Counts under the only top, as `name=count` in order.
fn counts(text: &str) -> String {
    shown(&read(text).unwrap().counts(None).unwrap())
}

fn shown(counts: &InstanceCounts) -> String {
    let rows: Vec<String> = counts.counts.iter().map(|(k, n)| format!("{k}={n}")).collect();
    rows.join(" ")
}

/// Counts of one module with this body.
fn body(text: &str) -> String {
    counts(&format!("module m (a, b);\n{text}\nendmodule"))
}

fn message(text: &str) -> String {
    read(text).unwrap_err().to_string()
}

/// The error of one module with this body, which begins on line 2.
fn body_message(text: &str) -> String {
    message(&format!("module m (a, b);\n{text}\nendmodule"))
}
