use super::*;

#[test]
fn directives_without_meaning_here_are_passed_over() {
    let text = "`timescale 1ns / 1ps // x\n`celldefine `default_nettype none module m; `resetall
        `line 3 \"x.v\" 0\n INV u1 (`nounconnected_drive .A(a)); `unconnected_drive pull0 INV u2 ();
        `pragma keep ; ( \"\n`begin_keywords \"1364-2005\" INV u3 (); `end_keywords endmodule `endcelldefine\n`timescale 1ns/1ps /*\n*/";
    assert_eq!(counts(text), "INV=3");
}

#[test]
fn macros_stand_for_their_text() {
    let text = "`define CELL INV // not this\n`define PINS (.A(a), /* , */ .B(\"//\")) \\\n ;\n`define NAME(x) \\u.x \n
        module m; `CELL u1 `PINS `CELL u2 (.A(`CELL )); endmodule";
    assert_eq!(counts(text), "INV=2");
}

#[test]
fn macros_take_arguments() {
    let text = "`define PAIR(c, n, p) c n (.p(p), .A(a)), \\n.2 (\"p\");\n
        module m; `PAIR(INV, u1, {a, b}) `PAIR (BUF ,\n u2, (x, y)) `PAIR(/*,*/ `G , u3, \\, ) endmodule";
    assert_eq!(counts(&format!("`define G NOR\n{text}")), "INV=2 BUF=2 NOR=2");
}

#[test]
fn macros_hold_until_undefined_and_across_files() {
    let a = Source::from_text("a.v", "`define X INV\n");
    let b = Source::from_text("b.v", "module m; `X u1 (); endmodule `undef X");
    let c = Source::from_text("c.v", "module n; m u1 (); `X u2 (); endmodule");
    let net = read_verilog(&[a.clone(), b.clone()]).unwrap();
    assert_eq!(net.counts(None).unwrap().total(), 1);
    assert_eq!(read_verilog(&[a, b, c]).unwrap_err().to_string(), "c.v:1:20: macro `X` is not defined");
}

#[test]
fn conditional_text_is_read_when_it_holds() {
    let text = |define: &str| {
        format!(
            "{define} module m;
            `ifdef A INV u1 (); `ifdef Z BAD `else BUF u2 (); `endif `elsif B /* `endif */ NOR u3 ();
            `else OR u4 (\"`endif\"); `endif `ifndef A AND u5 (`ifdef B .P(a)); `else .Q(a), .R(b)); `endif `endif
            OAI u6 (.A(a), `ifdef A .P(p), `else .Q((q)), `endif .B(b));
            endmodule"
        )
    };
    assert_eq!(counts(&text("`define A\n")), "INV=1 BUF=1 OAI=1");
    assert_eq!(counts(&text("`define B 1\n")), "NOR=1 AND=1 OAI=1");
    assert_eq!(counts(&text("")), "OR=1 AND=1 OAI=1");
    assert_eq!(counts(&text("`define A\n`define B\n`undef A\n")), "NOR=1 AND=1 OAI=1");
    let first = "`define B\n`define C\nmodule m; `ifdef A I1 u(); `elsif B I2 u(); `elsif C I3 u(); `else I4 u(); `endif";
    assert_eq!(counts(&format!("{first} endmodule")), "I2=1");
}

#[test]
fn text_left_out_may_be_anything_but_a_comment_without_end() {
    assert_eq!(
        counts(
            "`ifdef X \" ' # always \\`endif é ) \n `define E \\\n `else module m; I u(); endmodule `endif"
        ),
        "I=1"
    );
    assert_eq!(
        message("`ifdef X\n /* \n`endif"),
        "n.v:2:2: the file ends inside the comment that begins here; want `*/` before the end; is the file cut off?"
    );
}

#[test]
fn includes_are_relative_to_the_file_that_asks() {
    let folder = std::env::temp_dir().join(format!("hushrail-include-{}", std::process::id()));
    std::fs::create_dir_all(folder.join("sub")).unwrap();
    let write = |name: &str, text: &str| std::fs::write(folder.join(name), text).unwrap();
    write(
        "top.v",
        "module top; `include \"sub/cells.v\"\n c u2 (); endmodule `include \"sub/c.v\"\n`include \"sub/c.v\"",
    );
    write("sub/cells.v", "\u{feff}INV u1 (), `include \"names.vh\"\n();");
    write("sub/names.vh", "\\more[ ");
    write("sub/c.v", "`ifndef C\n`define C\nmodule c; BUF u1(); endmodule\n`endif");
    write("bad.v", "module b;\n `include \"none.v\"\nendmodule");
    write("loop.v", "`include \"loop.v\"\n");
    write("open.v", "module o; INV u1 (`include \"sub/open.vh\"\n); endmodule");
    write("sub/open.vh", "`ifdef A\n");
    let open = |name: &str| read_verilog(&[Source::open(&folder.join(name)).unwrap()]);

    let net = open("top.v").unwrap();
    assert_eq!(shown(&net.counts(None).unwrap()), "INV=2 BUF=1");
    assert_eq!(net.counts_under(None, "u2").unwrap().total(), 1);
    let error = open("bad.v").unwrap_err();
    assert!(matches!(&error, ReadError::Io { missing: true, .. }));
    assert!(
        error.to_string().ends_with(
            "no such file; {}/bad.v:2:2 includes it".replace("{}", &folder.display().to_string()).as_str()
        ),
        "{error}"
    );
    let error = open("loop.v").unwrap_err().to_string();
    assert!(error.contains("loop.v:1:1: includes or macros nest deeper than 64 levels here"), "{error}");
    let error = open("open.v").unwrap_err().to_string();
    assert!(
        error.contains("open.vh:1:1: the file ends inside the conditional text that begins here"),
        "{error}"
    );
    std::fs::remove_dir_all(&folder).unwrap();
}

#[test]
fn wrong_directives_are_named() {
    for (text, wanted) in [
        ("` module", "n.v:1:1: a backtick without a name; want a directive or a macro right after it"),
        (
            "\n `else",
            "n.v:2:2: `else without an open conditional; want `ifdef or `ifndef before it in the same file",
        ),
        (
            "`endif",
            "n.v:1:1: `endif without an open conditional; want `ifdef or `ifndef before it in the same file",
        ),
        ("`ifdef A\n`else\n`elsif B\n`endif", "n.v:3:1: `elsif after `else; want `endif there"),
        ("`ifdef\n", "n.v:1:1: `ifdef without a name; want a name after it"),
        ("`define\nA", "n.v:1:1: `define without a name; want a name after it"),
        ("`include x", "n.v:1:1: `include without a string; want `include \"…\""),
        (
            "`define A(x, ) x\n",
            "n.v:1:1: the argument list `(x, )` of macro `A`; want names separated by commas",
        ),
        (
            "`define A(x",
            "n.v:1:1: the file ends inside the argument list that begins here; want `)` before the end; is the file cut off?",
        ),
        (
            "`define A(x, y) x\n`A;",
            "n.v:2:1: macro `A` without its arguments; want `A(x, y) as it is defined",
        ),
        ("`define A(x, y) x\n `A(1)", "n.v:2:2: macro `A` with 1 arguments; want 2: x, y"),
        (
            "`define A(x) x\n `A((1)",
            "n.v:2:2: the file ends inside the macro argument list that begins here; want `)` before the end; is the file cut off?",
        ),
        ("`define WIDTH 3\n`WIDHT", "n.v:2:1: macro `WIDHT` is not defined; did you mean `WIDTH`?"),
        (
            "`define A `B\n`define B `A\n `A",
            "n.v:3:2: includes or macros nest deeper than 64 levels here; a file or a macro must not use itself",
        ),
        (
            "\n`ifdef A\n module",
            "n.v:2:1: the file ends inside the conditional text that begins here; want `endif before the end; is the file cut off?",
        ),
        (
            "\n`ifndef A\n",
            "n.v:2:1: the file ends inside the conditional text that begins here; want `endif before the end; is the file cut off?",
        ),
    ] {
        assert_eq!(message(text), wanted, "{text}");
    }
}

#[test]
fn macros_that_multiply_each_other_end() {
    let mut text = String::from("`define A0\n");
    for i in 1..40 {
        text +=
            &["`define A", &i.to_string(), " `A", &(i - 1).to_string(), " `A", &(i - 1).to_string(), "\n"]
                .concat();
    }
    text += "module m; wire `A39 ; endmodule";
    let error = message(&text);
    assert!(error.starts_with("n.v:41:16: macro `A"), "{error}");
    assert!(
        error.ends_with("` grows past 16 MiB here; want macros that do not multiply each other"),
        "{error}"
    );
    let mut nested = String::from("`define D(x) x x x x x x x x\nmodule m; ");
    nested += &"`D(".repeat(60);
    nested += &")".repeat(60);
    let error = message(&nested);
    assert!(error.contains("macro `D` grows past 16 MiB here"), "{error}");
}
