use proptest::prelude::*;

use super::*;

fn read(text: &str) -> Result<Netlist, ReadError> {
    read_verilog(&[Source::from_text("n.v", text)])
}

/// Counts under the only top, as `name=count` in order.
fn counts(text: &str) -> String {
    shown(&read(text).unwrap().counts(None).unwrap())
}

fn shown(counts: &crate::read::counts::InstanceCounts) -> String {
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

// ---- instances

#[test]
fn instances_count_by_master_in_first_seen_order() {
    assert_eq!(body("NAND u1 (.A(a), .Y(b)); INV u2 (a, b); NAND u3 (.A(a));"), "NAND=2 INV=1");
}

#[test]
fn commas_separate_instances_of_one_master() {
    assert_eq!(body("INV a1(.A(a)), b1 (a, b),\n c1 [3:0] ();"), "INV=6");
}

#[test]
fn arrays_count_all_members_in_either_direction() {
    assert_eq!(
        body("D d [1815:0] (); E e[0:604] (.A(a)); F f [-1:1] (); G g [5:5] ();"),
        "D=1816 E=605 F=3 G=1"
    );
}

#[test]
fn array_ends_may_be_based_numbers_sums_and_macros() {
    assert_eq!(
        body("D d [8'h0f:'b0] (); E e ['d 9 : 0] (); F f [1_0-1:2+1] (); G g[4'sd3:0]();"),
        "D=16 E=10 F=7 G=4"
    );
    assert_eq!(counts("`define W 8\nmodule m; D d [`W-1:0] (); E e[`W :1](); endmodule"), "D=8 E=8");
}

#[test]
fn parameters_and_delays_stand_before_the_name() {
    assert_eq!(
        body("A #(.W(3), .S(\")\")) u1 (); B #5 u2 (), u3 (); C #1.5 u4(); D #(1,2) u5 (a); E #d u6 ();"),
        "A=1 B=2 C=1 D=1 E=1"
    );
}

#[test]
fn pins_may_be_anything_in_parentheses() {
    let pins = ".X( ), .A({a, b[3:0], 2'b1_0}), .B(1'b0), .C({4{a}}), .D(\\x(y ), .E(4'hz), .F(a / b), .G(\"a)\\\");\")";
    assert_eq!(body(&format!("M u1 ({pins});\nN u2 (a, , {{a, {{2{{b}}}}}}, 1'b1);")), "M=1 N=1");
}

#[test]
fn comments_stand_between_any_tokens() {
    let text = "/*0*/module/*;*/m//x)\n(/*(*/a//;\n)/**/;/***/INV/*a*/u1//\"\n[/*1*/3/**/:/**/0/**/]/**/(/*)*/.A/**/(a//)\n)/*;*/)/**/;/*/ endmodule */endmodule//";
    assert_eq!(counts(text), "INV=4");
}

#[test]
fn attributes_stand_anywhere_and_hide_what_they_hold() {
    let text = "(* top, src = \"a;b*)\" *) module m ((* x *) a, b);
        (* keep = 1, s = \"; endmodule\" *) INV (* y=\";\" *) u1 ((* p = \")\" *) .A(a) (* ) ; ( *), .B(b)) (* z *) ;
        (* \\e*) *) wire w; (* // *) c \n *) INV u2 ();
    endmodule (* end *)";
    assert_eq!(counts(text), "INV=2");
}

#[test]
fn escaped_identifiers_end_only_at_white_space() {
    let text = "wire \\n[1];x ; wire [3:0] \\b(( ;
        INV \\foo.bar[3]/x (.A(\\n)1 ), .B(\\b((  [2])), \\u;2\t(), \\u'3\n[1:0] ();
        \\my.cell;( u4 (.\\p) (a)); assign \\b(( [0] = \\n[1];x ;";
    assert_eq!(body(text), "INV=4 my.cell;(=1");
}

#[test]
fn an_escaped_name_is_the_plain_name() {
    assert_eq!(counts("module \\c ; INV u1(); endmodule module t; \\c u1 (); c u2 (); endmodule"), "INV=2");
    assert_eq!(body("\\module u1 (); \\endmodule u2 ();"), "module=1 endmodule=1");
}

#[test]
fn names_may_hold_dollars_and_digits() {
    assert_eq!(body("_A$1 b$2 ();"), "_A$1=1");
}

// ---- gate primitives

#[test]
fn gates_count_under_their_keyword() {
    let gates = "and nand or nor xor xnor buf not bufif0 bufif1 notif0 notif1 nmos pmos rnmos rpmos cmos rcmos \
                 tran rtran tranif0 tranif1 rtranif0 rtranif1 pullup pulldown";
    let text: String = gates.split(' ').map(|g| format!("{g} g_{g} (a, b);\n")).collect();
    let wanted: Vec<String> = gates.split(' ').map(|g| format!("{g}=1")).collect();
    assert_eq!(body(&text), wanted.join(" "));
}

#[test]
fn gates_need_no_name() {
    assert_eq!(
        body("and (a, b, c); or (a, b), (b, a), o3 (a, b); not ({a}, b); buf ((a), b);"),
        "and=1 or=3 not=1 buf=1"
    );
}

#[test]
fn gates_take_strengths_delays_and_ranges() {
    let text = "and (strong0, weak1) #(1, 2) a1 (a, b), (b, a);
        nand (supply0, highz1) (a, b); pullup (strong1) (a), p2 (b); pulldown (pull0, pull1) p3 [3:0] (a);
        or #3 (a, b); nor #(1:2:3) n1 [1:0] (a, b); buf ( /* c */ weak0, weak1) b1 (a, b);";
    assert_eq!(body(text), "and=2 nand=1 pullup=2 pulldown=4 or=1 nor=2 buf=1");
}

// ---- what is passed over

#[test]
fn declarations_hold_no_instances() {
    let text = "input a; output [7:0] b; inout c; wire d, e; wire signed [3:0] f = 4'b 01_1x; tri g; tri0 h; tri1 i;
        triand j; trior k; trireg (small) #(0, 0, 50) l; wand m1; wor n; supply0 gnd, vss; supply1 vdd; uwire o;
        reg [3:0] p; reg q = 1'b0; integer r; real s; realtime t; time u; event v; genvar w;
        parameter P = 3, Q = \"a;b\"; localparam [1:0] R = 2'sb 10; parameter real S = 1.5e-3; specparam T = 1;
        defparam u1.P = 4, u1.Q = {2{a}}; wire (strong0, pull1) vectored [1:0] x = a ? b : c; output wire y; output reg z;
        assign b = {a, 3'h7} + (d ^ ~e); assign (strong0, weak1) #3 f[0] = a, f[1] = b; assign \\g.h[1] = $signed(a); ;
        INV u1 ();";
    assert_eq!(body(text), "INV=1");
}

#[test]
fn port_lists_are_old_new_or_missing() {
    for header in [
        "module m",
        "module m ()",
        "module m (a, b)",
        "module m (.x(a), .y({b, c[1:0]}))",
        "macromodule m (input a, output reg [3:0] b = 4'd3)",
        "module m #(parameter W = 4, parameter S = \")\") (input wire signed [W-1:0] a, input b)",
        "module m #() (a)",
        "module \\m (a)",
    ] {
        assert_eq!(counts(&format!("{header}; INV u1 (a); endmodule")), "INV=1", "{header}");
    }
}

// ---- directives

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
        `define TWO(c, n) c n``_1 (); c n\n
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
    let mut text = String::from("`define A0 x x x x x x x x\n");
    for i in 1..40 {
        text +=
            &["`define A", &i.to_string(), " `A", &(i - 1).to_string(), " `A", &(i - 1).to_string(), "\n"]
                .concat();
    }
    text += "module m; wire `A39 ; endmodule";
    // the first doubled name ends it; with commas nothing does but the limit
    let error = message(&text.replace("x x", "x,x").replace("x x", "x,x").replace(" `A0 `A0", " `A0,`A0"));
    assert!(error.contains("does not fit here") || error.contains("grows past 16 MiB"), "{error}");
    let empty = text.replace("x x x x x x x x", "");
    assert_eq!(
        message(&empty),
        "n.v:41:16: macro `A0` grows past 16 MiB here; want macros that do not multiply each other"
    );
    let mut nested = String::from("`define D(x) x x x x x x x x\nmodule m; ");
    nested += &"`D(".repeat(60);
    nested += &")".repeat(60);
    let error = message(&nested);
    assert!(error.contains("macro `D` grows past 16 MiB here"), "{error}");
}

// ---- hierarchy

const TREE: &str = "
module leafy (a); input a; INV u1 (a); NAND u2 (a), u3 (a); endmodule
module box (a); input a; endmodule
module mid (a); leafy l1 (a); leafy l2 [3:0] (a); BUF b1 (a); box x1 (a); endmodule
module top (a);
  NOR n1 (a);
  mid \\core/a (a);
  mid bank [1:0] (a);
  leafy core (a);
  INV i1 (a);
endmodule
module unused_box; endmodule";

#[test]
fn counts_multiply_through_the_hierarchy() {
    let net = read(TREE).unwrap();
    assert_eq!(net.modules().collect::<Vec<_>>(), ["leafy", "box", "mid", "top", "unused_box"]);
    assert_eq!(net.tops(), ["top"]);
    let c = net.counts(None).unwrap();
    assert_eq!(c.top, "top");
    assert_eq!(shown(&c), "NOR=1 INV=17 NAND=32 BUF=3 box=3");
    assert_eq!(shown(&net.counts(Some("mid")).unwrap()), "INV=5 NAND=10 BUF=1 box=1");
}

#[test]
fn a_module_may_come_after_its_use() {
    let modules: Vec<&str> = TREE.trim().split_inclusive("endmodule").collect();
    let turned: String = modules.iter().rev().copied().collect();
    let (a, b) = (read(TREE).unwrap(), read(&turned).unwrap());
    assert_eq!(a.counts(None).unwrap(), b.counts(None).unwrap());
    for path in ["core", "core/a", "bank", "bank[1]/l2[3]"] {
        assert_eq!(a.counts_under(None, path).unwrap(), b.counts_under(None, path).unwrap(), "{path}");
    }
}

#[test]
fn files_may_come_in_any_order() {
    let top = Source::from_text("t.v", "module t; c u1 (); c u2 [1:0] (); endmodule");
    let cell = Source::from_text("c.v", "module c; INV u1 (); endmodule");
    for sources in [[top.clone(), cell.clone()], [cell, top]] {
        let net = read_verilog(&sources).unwrap();
        assert_eq!(net.counts(None).unwrap().total(), 3);
        assert_eq!(net.counts_under(None, "u2[0]").unwrap().total(), 1);
    }
}

#[test]
fn names_are_kept_only_for_modules_with_a_body() {
    let net = read(TREE).unwrap();
    let kept: Vec<usize> = net.modules.iter().map(|m| m.children.len()).collect();
    assert_eq!(kept, [0, 0, 2, 3, 0]);
}

#[test]
fn a_module_of_assigns_counts_nothing_and_an_empty_one_is_a_leaf() {
    let text = "module tie (z); output z; assign z = 1'b0; endmodule module bb (z); output z; endmodule
        module wired (z); wire z = 1'b1; endmodule
        module top; tie t1 (); bb b1 (); wired w1 (); INV i1 (); endmodule";
    assert_eq!(counts(text), "bb=1 INV=1");
    assert_eq!(read(text).unwrap().counts_under(None, "t1").unwrap().total(), 0);
}

#[test]
fn several_tops_are_listed() {
    let net =
        read("module x; INV u(); endmodule module y; INV u(); endmodule module z; x u(); endmodule").unwrap();
    assert_eq!(net.tops(), ["y", "z"]);
    assert_eq!(
        net.counts(None).unwrap_err().to_string(),
        "n.v:1:37: 2 modules that nothing instantiates: `y`, `z`; name the one to count as top"
    );
    assert_eq!(net.counts(Some("y")).unwrap().total(), 1);
}

#[test]
fn an_unknown_top_gets_a_suggestion() {
    let net = read("module alpha; INV u(); endmodule").unwrap();
    assert_eq!(
        net.counts(Some("alhpa")).unwrap_err().to_string(),
        "n.v:1:8: top module `alhpa` is not defined; did you mean `alpha`?"
    );
    // a cell is no module
    assert!(matches!(net.counts(Some("INV")), Err(ReadError::Unknown { .. })));
}

#[test]
fn recursion_names_its_cycle() {
    let net =
        read("module t; a u(); endmodule module a; b u(); endmodule module b; INV i(); a u(); endmodule")
            .unwrap();
    let wanted = "n.v:1:35: module `a` contains itself: `a` > `b` > `a`; want a hierarchy that ends in cells";
    assert_eq!(net.counts(None).unwrap_err().to_string(), wanted);
    assert_eq!(net.counts_under(None, "u/u").unwrap_err().to_string(), wanted);
    assert_eq!(net.counts_split(None, &["u"]).unwrap_err().to_string(), wanted);
    let net = read("module a; a u(); endmodule").unwrap();
    assert_eq!(
        net.counts(None).unwrap_err().to_string(),
        "n.v:1:8: module `a` contains itself: `a` > `a`; want a hierarchy that ends in cells"
    );
}

#[test]
fn doubled_modules_name_both_places() {
    assert_eq!(
        message("module a; endmodule\n module a; endmodule"),
        "n.v:2:9: module `a` is defined twice, first at n.v:1:8; keep one of the two"
    );
}

#[test]
fn doubled_names_of_child_modules_are_found() {
    for text in [
        "module c; I i(); endmodule\nmodule t; c u(), u(); endmodule",
        "module t; c u(); c u(); endmodule\nmodule c; I i(); endmodule",
    ] {
        let error = message(text);
        assert!(
            error.ends_with("module `t` has two instances named `u`; want one name for each instance"),
            "{error}"
        );
    }
}

#[test]
fn overflow_is_out_of_range() {
    let wanted = "past 18446744073709551615; want fewer instances; check the ends of instance arrays";
    let max = i64::MAX;
    assert_eq!(
        body_message(&format!("I u [{max}:0] (), v[{max}:0] ();")),
        format!("n.v:2:1: `I` is {wanted}")
    );
    assert_eq!(
        body_message("I u [9223372036854775808:0] ();"),
        format!("n.v:2:6: `array index` is {wanted}")
    );
    assert_eq!(body_message(&format!("I u [{max}+1:0] ();")), format!("n.v:2:26: `array index` is {wanted}"));
    let net =
        read(&format!("module c; I i[{max}:0] (); endmodule module t; c u [2:0] (); endmodule")).unwrap();
    assert_eq!(net.counts(None).unwrap_err().to_string(), format!("n.v:1:8: `I` is {wanted}"));
    let net = read(&format!("module c; I i[{max}:0] (); J j[{max}:0] (); endmodule")).unwrap();
    assert_eq!(
        net.counts(None).unwrap_err().to_string(),
        format!("n.v:1:8: `number of instances` is {wanted}")
    );
}

#[test]
fn a_deep_hierarchy_needs_no_stack() {
    let mut text = String::from("module m0; INV u (); endmodule\n");
    for i in 1..50_000 {
        text += &["module m", &i.to_string(), "; m", &(i - 1).to_string(), " u (); endmodule\n"].concat();
    }
    let net = read(&text).unwrap();
    assert_eq!(net.counts(None).unwrap().total(), 1);
    assert_eq!(net.counts_under(None, &vec!["u"; 300].join("/")).unwrap().top, "m49699");
}

#[test]
fn a_wide_diamond_is_walked_once() {
    let mut text = String::from("module m0; INV u (); endmodule\n");
    for i in 1..60 {
        let below = (i - 1).to_string();
        text += &["module m", &i.to_string(), "; m", &below, " u (), v (); endmodule\n"].concat();
    }
    assert_eq!(counts(&text), format!("INV={}", 1u64 << 59));
}

// ---- paths

#[test]
fn paths_take_either_separator_and_the_longest_name() {
    let net = read(TREE).unwrap();
    let under = |path: &str| {
        let c = net.counts_under(None, path).unwrap();
        format!("{}: {}", c.top, shown(&c))
    };
    assert_eq!(under("core"), "leafy: INV=1 NAND=2");
    assert_eq!(under("core/a"), "mid: INV=5 NAND=10 BUF=1 box=1");
    assert_eq!(under("\\core/a "), "mid: INV=5 NAND=10 BUF=1 box=1");
    assert_eq!(under("\\core/a /l2[3]"), "leafy: INV=1 NAND=2");
    assert_eq!(under("/core/a.l2/"), "leafy: INV=4 NAND=8");
    assert_eq!(under("bank"), "mid: INV=10 NAND=20 BUF=2 box=2");
    assert_eq!(under("bank[1]"), "mid: INV=5 NAND=10 BUF=1 box=1");
    assert_eq!(under("bank[0].l2[3]"), "leafy: INV=1 NAND=2");
    assert_eq!(under("bank.l1"), "leafy: INV=2 NAND=4");
    assert_eq!(under(""), "top: NOR=1 INV=17 NAND=32 BUF=3 box=3");
    assert_eq!(net.counts_under(Some("mid"), "l1").unwrap().total(), 3);
}

#[test]
fn a_shorter_name_is_tried_when_the_longest_leads_nowhere() {
    let text = "module c; I i(); endmodule module d; c y(); endmodule module t; d x(); c \\x/z (); d \\x/y (); endmodule";
    let net = read(text).unwrap();
    // `x/y` is an instance of its own, and below it there is `y` too
    assert_eq!(net.counts_under(None, "x/y").unwrap().top, "d");
    assert_eq!(net.counts_under(None, "x/y/y").unwrap().top, "c");
    assert_eq!(net.counts_under(None, "x/z").unwrap().top, "c");
    let net = read("module c; I i(); endmodule module b; c z(); endmodule module d; b y(); endmodule module t; d x(); c \\x/y (); endmodule").unwrap();
    assert_eq!(net.counts_under(None, "x/y/z").unwrap().top, "c");
}

#[test]
fn unknown_paths_get_a_suggestion() {
    let net = read(TREE).unwrap();
    for (path, wanted) in [
        ("bnak/l1", "n.v:5:8: module instance `bnak` is not defined; did you mean `bank`?"),
        ("bank/l3", "n.v:4:8: module instance `l3` is not defined; did you mean `l1`?"),
        ("bank[2]", "n.v:5:8: module instance `bank[2]` is not defined"),
        ("bank[x]/l1", "n.v:5:8: module instance `bank[x]` is not defined"),
        ("core[0]", "n.v:5:8: module instance `core[0]` is not defined"),
        ("n1", "n.v:5:8: module instance `n1` is not defined"),
        ("core/u1", "n.v:2:8: module instance `u1` is not defined"),
        ("//", "n.v:5:8: module instance `` is not defined"),
    ] {
        let error = net.counts_under(None, path);
        if path == "//" {
            assert_eq!(error.unwrap().top, "top");
        } else {
            assert_eq!(error.unwrap_err().to_string(), wanted);
        }
    }
}

#[test]
fn parts_and_rest_add_up() {
    let net = read(TREE).unwrap();
    let (parts, rest) = net.counts_split(None, &["bank[0]", "core/a/l2", "core"]).unwrap();
    let parts: Vec<String> = parts.iter().map(shown).collect();
    assert_eq!(parts, ["INV=5 NAND=10 BUF=1 box=1", "INV=4 NAND=8", "INV=1 NAND=2"]);
    assert_eq!(shown(&rest), "NOR=1 INV=7 NAND=12 BUF=2 box=2");
    assert_eq!(rest.top, "top");
    let (parts, rest) = net.counts_split(None, &[]).unwrap();
    assert!(parts.is_empty());
    assert_eq!(rest, net.counts(None).unwrap());
    let (parts, rest) = net.counts_split(None, &[""]).unwrap();
    assert_eq!(parts[0], net.counts(None).unwrap());
    assert_eq!(rest.total(), 0);
}

#[test]
fn paths_that_share_instances_are_refused() {
    let net = read(TREE).unwrap();
    for paths in [
        ["bank", "bank/l1"],
        ["bank[0]", "bank"],
        ["core", "core"],
        ["", "core"],
        ["bank/l2[1]", "bank[1]/l2"],
    ] {
        assert_eq!(
            net.counts_split(None, &paths).unwrap_err().to_string(),
            format!(
                "n.v:5:8: paths `{}` and `{}` share instances; want each instance under one path only",
                paths[0], paths[1]
            )
        );
    }
    for paths in
        [["bank[0]", "bank[1]"], ["core", "core/a"], ["bank/l2[1]", "bank/l2[0]"], ["bank[0]/l1", "bank[1]"]]
    {
        net.counts_split(None, &paths).unwrap();
    }
}

// ---- errors

#[test]
fn behaviour_is_refused_with_its_place() {
    for word in [
        "always", "initial", "task", "function", "generate", "specify", "for", "if", "case", "casex",
        "casez", "begin", "$display",
    ] {
        assert_eq!(
            body_message(&format!("  INV u1 ();\n  {word} @(*) x = 1;")),
            format!(
                "n.v:3:3: `{word}` is behaviour, not structure; only structural netlists (instances, nets, assigns) can be counted; synthesise it first"
            )
        );
    }
    assert!(
        message("primitive p (a, b); table 0 : 1; endtable endprimitive")
            .starts_with("n.v:1:1: `primitive` is behaviour")
    );
}

#[test]
fn a_missing_semicolon_never_loses_an_instance() {
    for (text, wanted) in [
        ("wire a\nINV u1 ();", "n.v:3:1: `INV` does not fit here; want `;` or an operator"),
        ("wire [3:0]\nINV u1 ();", "n.v:3:5: `u1` does not fit here; want `;` or an operator"),
        ("wire\nINV u1 ();", "n.v:3:5: `u1` does not fit here; want `;` or an operator"),
        ("assign a = b\nINV u1 ();", "n.v:3:1: `INV` does not fit here; want `;` or an operator"),
        ("assign a = {b}\nINV u1 ();", "n.v:3:5: `u1` does not fit here; want `;` or an operator"),
        ("assign a = 1'b0\nINV u1 ();", "n.v:3:1: `INV` does not fit here; want `;` or an operator"),
        ("assign a = 1'b 0\nINV u1 ();", "n.v:3:1: `INV` does not fit here; want `;` or an operator"),
        ("assign a = {b}\nnand (a, b);", "n.v:3:1: `nand` does not fit here; want `;` before it"),
        ("wire a", "n.v:3:1: `endmodule` does not fit here; want `;` or an operator"),
        ("assign a = (b;", "n.v:2:14: `;` does not fit here; want all parentheses closed before it"),
        ("assign a = b);", "n.v:2:13: `)` does not fit here; want its opening counterpart before it"),
        (
            "INV u1 ()\nINV u2 ();",
            "n.v:3:1: `INV` does not fit here; want `,` or `;` after the pins of an instance",
        ),
        (
            "INV u1 (.A(a)\nINV u2 ();",
            "n.v:3:10: `;` inside the parentheses of the statement that begins at n.v:2:1; close them with `)` before `;`",
        ),
    ] {
        assert_eq!(body_message(text), wanted, "{text}");
    }
}

#[test]
fn statements_that_are_no_instances_are_refused() {
    for (text, wanted) in [
        ("INV;", "n.v:2:4: `;` does not fit here; want the name of the instance"),
        ("INV (a, b);", "n.v:2:5: `(` does not fit here; want the name of the instance"),
        ("INV wire ();", "n.v:2:5: `wire` does not fit here; want the name of the instance"),
        ("INV u1;", "n.v:2:7: `;` does not fit here; want `(` and the pins of the instance"),
        (
            "INV u1 [3] ();",
            "n.v:2:10: `]` does not fit here; want `[first:last]` after the name of an instance array",
        ),
        (
            "INV u1 [W:0] ();",
            "n.v:2:9: `W` does not fit here; want a whole number; array ends must not be parameters",
        ),
        (
            "INV u1 [1.5:0] ();",
            "n.v:2:9: `1.5` is not a whole number; want a whole number; array ends must not be parameters",
        ),
        (
            "INV u1 [4'bx:0] ();",
            "n.v:2:9: `x` is not a whole number; want a whole number; array ends must not be parameters",
        ),
        ("INV u1 [4'q1:0] ();", "n.v:2:11: `q1` does not fit here; want a base b, o, d or h after `'`"),
        ("INV u1 [1:0 ();", "n.v:2:13: `(` does not fit here; want `]` after two whole numbers"),
        ("INV # ; u1 ();", "n.v:2:7: `;` does not fit here; want a delay or parameters after `#`"),
        ("3 u1 ();", "n.v:2:1: `3` does not fit here; want an instance, a declaration or `endmodule`"),
        ("else u1 ();", "n.v:2:1: `else` does not fit here; want an instance, a declaration or `endmodule`"),
        (
            "strong0 u1;",
            "n.v:2:1: `strong0` does not fit here; want an instance, a declaration or `endmodule`",
        ),
        (
            "\"INV\" u1 ();",
            "n.v:2:1: `\"INV\"` does not fit here; want an instance, a declaration or `endmodule`",
        ),
        (
            "\\ u1 ();",
            "n.v:2:1: a backslash without a name; want a name right after the backslash of an escaped identifier",
        ),
        ("µ u1 ();", "n.v:2:1: the character `\\u{b5}`; want ASCII text outside of comments"),
        ("/* µ */ \u{1} u1 ();", "n.v:2:9: the character `\\u{1}`; want ASCII text outside of comments"),
        ("module n;", "n.v:2:1: a module inside module `m`; want `endmodule` first"),
    ] {
        assert_eq!(body_message(text), wanted, "{text}");
    }
    for (text, wanted) in [
        ("\n  INV u1 ();", "n.v:2:3: `INV` outside of a module; want `module` or the end of the file"),
        ("<html>", "n.v:1:1: `<` outside of a module; want `module` or the end of the file"),
        ("module m; endmodule ;", "n.v:1:21: `;` outside of a module; want `module` or the end of the file"),
        ("module wire;", "n.v:1:8: `wire` does not fit here; want the name of the module"),
        ("module m (a) INV", "n.v:1:14: `INV` does not fit here; want `;` after the module's ports"),
        ("module m # 3", "n.v:1:12: `3` does not fit here; want `(` and the parameters"),
    ] {
        assert_eq!(message(text), wanted, "{text}");
    }
}

#[test]
fn errors_inside_a_macro_name_its_use() {
    assert_eq!(
        message("`define BAD INV u1 ;\nmodule m;\n  `BAD endmodule"),
        "n.v:3:3: `;` does not fit here; want `(` and the pins of the instance"
    );
}

#[test]
fn long_tokens_are_shown_short() {
    let error = body_message(&format!("INV \"{}\";", "é".repeat(100)));
    assert_eq!(
        error,
        format!("n.v:2:5: `\"{}…` does not fit here; want the name of the instance", "é".repeat(39))
    );
}

#[test]
fn a_cut_off_file_names_what_is_open() {
    let end = "before the end; is the file cut off?";
    for (text, wanted) in [
        (
            "\n module m;\n INV u1 ();\n",
            format!("n.v:2:2: the file ends inside the module `m` that begins here; want `endmodule` {end}"),
        ),
        (
            "module m (a,\n",
            format!("n.v:1:1: the file ends inside the statement that begins here; want `)` and `;` {end}"),
        ),
        (
            "module",
            format!(
                "n.v:1:1: the file ends inside the statement that begins here; want the name of the module {end}"
            ),
        ),
        (
            "module m;\n  INV u1 (.A(a),\n .B(",
            format!("n.v:2:3: the file ends inside the statement that begins here; want `)` and `;` {end}"),
        ),
        (
            "module m;\n  INV u1",
            format!(
                "n.v:2:3: the file ends inside the statement that begins here; want `(` and the pins of the instance {end}"
            ),
        ),
        (
            "module m;\n  wire a,\n",
            format!("n.v:2:3: the file ends inside the statement that begins here; want `;` {end}"),
        ),
        (
            "module m;\n INV u1 (a /* ;\n endmodule",
            format!("n.v:2:12: the file ends inside the comment that begins here; want `*/` {end}"),
        ),
        (
            "module m; /* ;\n endmodule",
            format!("n.v:1:11: the file ends inside the comment that begins here; want `*/` {end}"),
        ),
        (
            "module m; (* a = \n endmodule",
            format!("n.v:1:11: the file ends inside the attribute that begins here; want `*)` {end}"),
        ),
        (
            "module m; INV u1 ((* a ) endmodule",
            format!("n.v:1:19: the file ends inside the attribute that begins here; want `*)` {end}"),
        ),
        (
            "module m; parameter a = \"b;\nendmodule",
            "n.v:1:25: this string does not end on its line; close it with `\"`".to_owned(),
        ),
        (
            "module m; INV u1 (\"a",
            "n.v:1:19: this string does not end on its line; close it with `\"`".to_owned(),
        ),
    ] {
        assert_eq!(message(text), wanted, "{text}");
    }
}

#[test]
fn no_module_is_nothing() {
    assert_eq!(message(""), "n.v: no Verilog module found (the file is empty)");
    assert_eq!(message(" // only a comment\n`define A\n"), "n.v: no Verilog module found");
    assert!(matches!(read_verilog(&[]), Err(ReadError::Nothing { .. })));
    let net = read("module m; assign a = b; endmodule").unwrap();
    assert_eq!(net.counts(None).unwrap_err().to_string(), "n.v: no instances in module `m` found");
    let net = read("module m; endmodule").unwrap();
    assert_eq!(net.counts(None).unwrap_err().to_string(), "n.v: no instances in module `m` found");
}

#[test]
fn places_count_characters_and_every_line_end() {
    let net = read("/* é\r\né */ module a; I i(); endmodule module b; I i(); endmodule\r\n\r\n module c; a u(); b v(); endmodule").unwrap();
    let places: Vec<String> = net.modules.iter().map(|m| m.at.to_string()).collect();
    assert_eq!(places, ["n.v:2:13", "n.v:2:40", "n.v:4:9"]);
}

// ---- robustness

const GOOD: &str = r#"`timescale 1ns/1ps
`define W 8
`define TWO(c, n) c n (.A(a)), n``b (.A("x)")) ;
(* top = "m;" *)
module m #(parameter P = 1) (a, \b[0] , c); // ports
  input a; output [`W-1:0] \b[0] ; wire x = 1'b0, \y.z/[1] ;
  assign \b[0] [1] = {2{a}} ^ 4'h3;
  (* keep *) INV #(.A(1)) \u.1[3]/x (.A(\b[0] [2]), /* ) */ .X( )), u2 [3:0] (.A({a, 1'b1}));
`ifdef X
  BAD `else BUF u3 (`ifndef Y .A(a) `endif ); `endif
  nand (strong0, weak1) #(1, 2) (a, x), g1 (x, a);
  sub s1 (), s2 [1:0] (.p(x));
endmodule
module sub (p); inout p; NOR n1 (p); endmodule
"#;

fn everything(text: &str) {
    if let Ok(net) = read(text) {
        let _ = net.tops();
        let _ = net.counts(None);
        for top in net.modules() {
            let _ = net.counts(Some(top));
            let _ = net.counts_split(Some(top), &["s1", "s2[0]", text]);
            let _ = net.counts_under(Some(top), text);
        }
    }
}

#[test]
fn the_good_text_is_good() {
    let good = GOOD.replace("n``b", "n");
    assert_eq!(shown(&read(&good).unwrap().counts(None).unwrap()), "INV=5 BUF=1 nand=2 NOR=3");
}

#[test]
fn every_cut_is_an_error() {
    let good = GOOD.replace("n``b", "n");
    let first = good.find("(* top").unwrap() + 1;
    let last = good.find("endmodule").unwrap() + "endmodule".len();
    for cut in first..last {
        let error = read(&good[..cut]).expect_err(&good[..cut]);
        assert!(matches!(error, ReadError::Syntax { .. } | ReadError::Unknown { .. }), "{error}");
    }
    for cut in 0..good.len() {
        everything(&good[..cut]);
        everything(&good[cut..]);
    }
}

proptest! {
    #[test]
    fn any_bytes_give_a_value_or_an_error(bytes in proptest::collection::vec(any::<u8>(), 0..300)) {
        let text = String::from_utf8_lossy(&bytes);
        everything(&text);
        everything(&format!("module m; {text}"));
        everything(&format!("module m; INV u1 ({text}"));
        everything(&format!("`define A(x, y) {text}\n`A(a, b) `A({text})"));
    }

    #[test]
    fn changed_text_gives_a_value_or_an_error(
        changes in proptest::collection::vec((0..GOOD.len(), 0usize..4, "[ -~\n\\\\`\"(/*;]{0,4}"), 1..6)
    ) {
        let mut text = GOOD.to_owned();
        for (at, removed, added) in changes {
            let at = at.min(text.len());
            text.replace_range(at..(at + removed).min(text.len()), &added);
        }
        everything(&text);
    }

    #[test]
    fn words_in_any_order_give_a_value_or_an_error(
        words in proptest::collection::vec(proptest::sample::select(vec![
            "module", "endmodule", "m", "n", ";", "(", ")", "[", "]", ":", ",", "#", "7", "'", "h", "INV", "nand", "wire",
            "assign", "=", "supply0", "strong1", "(*", "*)", "\"", "\\e ", "`ifdef", "`else", "`elsif", "`endif", "`define",
            "`A", "A", "`undef", "\n", "//", "/*", "*/", "`", "-", "+", ".", "always", "$x", "{", "}",
        ]), 0..60)
    ) {
        everything(&words.join(" "));
        everything(&words.concat());
    }

    /// The obvious twin: counts known from how the text was made.
    #[test]
    fn made_netlists_count_as_made(
        modules in proptest::collection::vec(
            proptest::collection::vec((0usize..6, proptest::option::of((-9i64..9, -9i64..9)), 0usize..8), 1..6), 1..6),
        turned in any::<bool>(),
    ) {
        let noise = [" ", "\n", "/* ; ) */", "// ( \n", "(* a = \"*)\" *)", "\t", "\r\n", "/**/"];
        let mut texts = Vec::new();
        let mut known: Vec<std::collections::BTreeMap<String, u64>> = Vec::new();
        for (m, rows) in modules.iter().enumerate() {
            let mut text = format!("module m{m} (a, b);");
            let mut sum = std::collections::BTreeMap::new();
            for (i, &(pick, range, gap)) in rows.iter().enumerate() {
                let gap = noise[gap];
                let many = range.map_or(1, |(a, b)| a.abs_diff(b) + 1);
                let array = range.map_or(String::new(), |(a, b)| format!("[{a}:{gap}{b}]"));
                // the last row uses the module before, so that one top remains
                let child = m.checked_sub(1).filter(|_| i + 1 == rows.len() || pick == 5);
                let master = child.map_or(format!("CELL_{pick}"), |c| format!("m{c}"));
                text += &format!("{gap}{master} {gap}\\u.{i}[0] {gap}{array}(.A{gap}(a){gap}){gap};");
                match child {
                    Some(c) => for (k, n) in &known[c] { *sum.entry(k.clone()).or_insert(0) += many * n; },
                    None => *sum.entry(master).or_insert(0) += many,
                }
            }
            texts.push(text + " endmodule\n");
            known.push(sum);
        }
        if turned {
            texts.reverse();
        }
        let net = read(&texts.concat()).unwrap();
        let c = net.counts(None).unwrap();
        let made = known.last().unwrap();
        prop_assert_eq!(c.counts.len(), made.len());
        prop_assert!(c.counts.iter().all(|(k, n)| made[k] == *n), "{:?} {:?}", c, made);
        if let Some(last) = modules.len().checked_sub(2) {
            let path = format!("u.{}[0]", modules[last + 1].len() - 1);
            let (parts, rest) = net.counts_split(None, &[&path]).unwrap();
            prop_assert_eq!(parts[0].total() + rest.total(), c.total());
            prop_assert_eq!(&parts[0].top, &format!("m{last}"));
        }
    }
}
