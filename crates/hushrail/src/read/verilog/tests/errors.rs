use super::*;

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
