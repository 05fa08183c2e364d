//! Instance counts of a netlist, whatever it is written in.

use super::counts::InstanceCounts;
use super::def::count_def;
use super::source::{Input, ReadError};
use super::verilog::read_verilog_from;

/// Counts the instances under `path`, seen from `top`, of structural Verilog, or of one layout.
///
/// An input whose name ends in `.def` or `.def.gz` is a layout, see [`count_def`]; all others are Verilog and belong
/// together, see [`read_verilog_from`] and [`Netlist::counts_under`](super::verilog::Netlist::counts_under).
///
/// # Errors
/// As for the two readers; a layout beside another input, with a path, or of another design than `top`.
pub fn count_instances(
    inputs: &mut [Input],
    top: Option<&str>,
    path: &str,
) -> Result<InstanceCounts, ReadError> {
    let Some(layout) = inputs.iter().position(|i| is_layout(&i.path)) else {
        return read_verilog_from(inputs)?.counts_under(top, path);
    };
    let name = inputs[layout].path.to_string();
    let wrong = |found: String, wanted: &str| ReadError::Io {
        path: name.clone(),
        reason: format!("{found}; {wanted}"),
        missing: false,
    };
    if inputs.len() > 1 {
        return Err(wrong("a layout beside other files".into(), "want one layout, or Verilog only"));
    }
    if !path.is_empty() {
        let found = format!("a layout has no module instances, so none at `{path}`");
        return Err(wrong(found, "want no path, or the Verilog netlist"));
    }
    let counts = count_def(&mut inputs[layout])?;
    match top {
        Some(top) if top != counts.top => Err(wrong(
            format!("the layout is of design `{}`, not `{top}`", counts.top),
            "want its own name as top",
        )),
        _ => Ok(counts),
    }
}

fn is_layout(name: &str) -> bool {
    let name = name.to_ascii_lowercase();
    name.strip_suffix(".gz").unwrap_or(&name).strip_suffix(".def").is_some()
}

#[cfg(test)]
mod tests {
    use super::*;

    const DEF: &str = "DESIGN c ;\nCOMPONENTS 1 ;\n- u1 inv ;\nEND COMPONENTS\nEND DESIGN\n";
    const VERILOG: &str = "module c; inv u1 (), u2 (); endmodule";

    fn count(inputs: &[(&'static str, &'static str)], top: Option<&str>, path: &str) -> Result<u64, String> {
        let mut inputs: Vec<Input> = inputs.iter().map(|(n, t)| Input::stream(n, t.as_bytes())).collect();
        count_instances(&mut inputs, top, path).map(|c| c.total()).map_err(|e| e.to_string())
    }

    #[test]
    fn the_name_says_what_a_file_is() {
        assert_eq!(count(&[("x.DEF.gz", DEF)], Some("c"), ""), Ok(1));
        assert_eq!(count(&[("-", VERILOG), ("b.v", "")], None, ""), Ok(2));
        for (inputs, top, path, wanted) in [
            (
                &[("x.def", DEF), ("y.v", VERILOG)][..],
                None,
                "",
                "x.def: cannot be read: a layout beside other files",
            ),
            (
                &[("x.def", DEF)],
                None,
                "u1",
                "x.def: cannot be read: a layout has no module instances, so none at `u1`",
            ),
            (&[("x.def", DEF)], Some("d"), "", "x.def: cannot be read: the layout is of design `c`, not `d`"),
            (&[("x.def", VERILOG)], None, "", "x.def:1:1: DEF statement `module` is not defined"),
        ] {
            let error = count(inputs, top, path).unwrap_err();
            assert!(error.starts_with(wanted), "{error}");
        }
    }

    #[test]
    fn a_stream_is_read_once() {
        let mut inputs = [Input::stream("-", VERILOG.as_bytes())];
        assert_eq!(count_instances(&mut inputs, None, "").unwrap().total(), 2);
        let again = count_instances(&mut inputs, None, "").unwrap_err().to_string();
        assert!(again.starts_with("-: cannot be read: a stream can be read once only"), "{again}");
    }

    #[test]
    fn gzip_is_undone_and_a_cut_is_found() {
        use std::io::Write as _;
        let mut gz = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::default());
        let body = "inv u (.A(a), .Y(y));\n".repeat(20_000);
        gz.write_all(format!("module c; {body} endmodule").as_bytes()).unwrap();
        let bytes = gz.finish().unwrap();
        let read = |bytes: &[u8]| {
            count_instances(&mut [Input::stream("-", std::io::Cursor::new(bytes.to_vec()))], None, "")
        };
        assert_eq!(read(&bytes).unwrap().total(), 20_000);
        for cut in [12, bytes.len() / 2, bytes.len() - 1] {
            let error = read(&bytes[..cut]).unwrap_err();
            assert!(matches!(error, ReadError::Gzip { .. }), "{error}");
        }
    }

    #[test]
    fn a_byte_that_is_no_text_is_placed_in_any_window() {
        let text = [b"module c; // \xc3\xa9\n inv u1 ();\n \xc3\xa9\xff".as_slice(), &[b' '; 99]].concat();
        let mut inputs = [Input::stream("-", std::io::Cursor::new(text))];
        let error = count_instances(&mut inputs, None, "").unwrap_err().to_string();
        assert!(error.starts_with("-:3:3: byte 0xff is not UTF-8"), "{error}");
    }
}
