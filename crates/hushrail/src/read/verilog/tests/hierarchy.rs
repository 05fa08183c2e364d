use super::*;

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
    let turned = modules.iter().rev().copied().collect::<Vec<_>>().join("\n");
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
    // the place is in the module that the longest names lead to, here `d` and not `c`
    assert_eq!(
        net.counts_under(None, "x/y/q").unwrap_err().to_string(),
        "n.v:1:35: module instance `q` is not defined; did you mean `y`?"
    );
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
    assert!(rest.counts.is_empty());
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
