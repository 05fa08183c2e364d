mod directives;
mod errors;
mod hierarchy;
mod robustness;
mod statements;

use super::*;
use crate::read::counts::InstanceCounts;

fn read(text: &str) -> Result<Netlist, ReadError> {
    let whole = read_verilog(&[Source::from_text("n.v", text)]);
    // a window that slides at every few bytes must not change anything
    for piece in [4, 7, 61] {
        let pieces = read_in_pieces(&mut [Input::in_pieces("n.v", text)], piece);
        let shown =
            |net: &Result<Netlist, ReadError>| net.as_ref().map(everything).map_err(ToString::to_string);
        assert_eq!(shown(&pieces), shown(&whole), "in pieces of {piece} bytes: {text}");
    }
    whole
}

/// All that is known without a second reading.
fn everything(net: &Netlist) -> String {
    let modules = net.modules.iter().map(|m| {
        let cells: Vec<String> = m.cells.iter().map(|(&k, n)| format!("{}={n}", net.names[k])).collect();
        format!("{} {} {} {}", net.names[m.name], m.at, m.has_assigns, cells.join(" "))
    });
    modules.collect::<Vec<_>>().join("\n")
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
