use std::fmt::Write as _;

use indexmap::IndexMap;
use proptest::prelude::*;

use super::*;
use crate::read::Source;
use crate::read::verilog::read_verilog;

fn cells() -> IndexMap<String, Vec<Port>> {
    let (i, o) = (Direction::Input, Direction::Output);
    let cell = |ports: &[(&str, Direction, u32)]| {
        ports.iter().map(|&(n, d, width)| Port { width, ..Port::new(n, d) }).collect::<Vec<_>>()
    };
    IndexMap::from([
        ("INV".to_owned(), cell(&[("A", i, 1), ("Y", o, 1)])),
        ("NAND".to_owned(), cell(&[("A", i, 1), ("B", i, 1), ("Y", o, 1)])),
        ("RAM".to_owned(), cell(&[("D", i, 4), ("Q", o, 4)])),
    ])
}

fn join(text: &str) -> Result<Connected, ReadError> {
    join_at(text, None)
}

fn join_at(text: &str, top: Option<&str>) -> Result<Connected, ReadError> {
    connect(&mut [Source::from_text("n.v", text).into()], top, &cells(), &ConnectOptions::default())
}

fn message(text: &str) -> String {
    join(text).map(|_| ()).unwrap_err().to_string()
}

/// Nets at the pins of an instance, by their names.
fn at(net: &Connected, path: &str) -> String {
    let instance = net.instance(path).unwrap_or_else(|| panic!("no {path}"));
    assert_eq!(net.instance(&net.instance_path(instance)), Some(instance));
    let names =
        net.pins(instance).iter().map(|&n| if n == NetId::OPEN { "-".into() } else { net.net_path(n) });
    names.collect::<Vec<_>>().join(" ")
}

#[test]
fn pins_by_name_position_and_expression() {
    let net = join(
        "module top (input [3:0] a, output [0:3] z, inout \\p[0] );
           wire w, \\x/y ; supply1 vdd; supply0 gnd; tri [1:0] t; logic l;
           (* keep = \"a;b\" *) INV u1 (.A(a[3]), .Y(w)), u2 (w, z[0]);
           INV u3 (.Y( ), .A(\\x/y ));
           INV \\u.4[1] (.A(\\p[0] ), .Y(implicit));
           NAND u5 (vdd, , z[1]);
           RAM r1 (.D({2{gnd, 1'b1}}), .Q({z[2], l, t}));
           RAM r2 (.D(4'b01xz), .Q(z));
           RAM r3 (.D('1), .Q(a)), r4 (.D(5)), r5 (.D(4'd9)), r6 (.D({t, a[1:0]}));
         endmodule",
    )
    .unwrap();
    assert_eq!(at(&net, "u1"), "a[3] w");
    assert_eq!(at(&net, "u2"), "w z[0]");
    assert_eq!(at(&net, "u3"), "x/y -");
    assert_eq!(at(&net, "u.4[1]"), "p[0] implicit");
    assert_eq!(at(&net, "u5"), "1'b1 - z[1]");
    assert_eq!(at(&net, "r1"), "1'b0 1'b1 1'b0 1'b1 z[2] l t[1] t[0]");
    assert_eq!(at(&net, "r2"), "1'b0 1'b1 1'bx 1'bz z[0] z[1] z[2] z[3]");
    assert_eq!(at(&net, "r3"), "1'b1 1'b1 1'b1 1'b1 a[3] a[2] a[1] a[0]");
    assert_eq!(at(&net, "r4"), "1'b0 1'b1 1'b0 1'b1 - - - -");
    assert_eq!(at(&net, "r5"), "1'b1 1'b0 1'b0 1'b1 - - - -");
    assert_eq!(at(&net, "r6"), "t[1] t[0] a[1] a[0] - - - -");
    assert_eq!(net.net("p[0]").map(|n| net.net_pins(n).count()), Some(1));
    assert_eq!(net.top_ports().len(), 9);
}

#[test]
fn aliases_join_nets_through_the_hierarchy() {
    let net = join(
        "module feed (input a, output b, output c); assign b = a; assign c = 1'b0; endmodule
         module mid (a, b, c); input a; output b; output [1:0] c; wire [1:0] c; feed f (a, b, c[0]);
           assign c[1] = 1'b1; INV i (.A(b), .Y()); endmodule
         module top (input x, output [1:0] y); wire n; mid m (.a(x), .b(n), .c(y)); INV v (.A(n), .Y(q));
           wire k = n; assign {o, p} = {q, k}; endmodule",
    )
    .unwrap();
    assert_eq!(at(&net, "m/i"), "x -");
    assert_eq!(at(&net, "v"), "x q");
    for (path, wanted) in
        [("k", "x"), ("o", "q"), ("m.f.b", "x"), ("y[0]", "1'b0"), ("m/c[1]", "1'b1"), ("m/f/c", "1'b0")]
    {
        assert_eq!(net.net_path(net.net(path).unwrap()), wanted, "{path}");
    }
    assert_eq!(net.net("m/none"), None);
    assert_eq!(net.instance("m"), None);
    assert_eq!(net.instances_under("m").unwrap().len(), 1);
    assert_eq!(net.instances_under("").unwrap().len(), 2);
    assert_eq!(net.instances_under("v"), None);
}

#[test]
fn arrays_share_or_split_their_nets() {
    let net = join(
        "module pair (input a, output z); INV u (.A(a), .Y(m)); INV w [1:0] (.A({a, m}), .Y(z)); endmodule
         module top (input [2:0] a, output [2:0] z, input e);
           pair p [4:6] (.a(a), .z(z)); INV i [2:0] (.A(e), .Y(z)); UNK k [1:0] (.P(a[1:0]), .Q(e)); endmodule",
    )
    .unwrap();
    assert_eq!(net.instance_count(), 3 * 3 + 3 + 2);
    assert_eq!(at(&net, "p[4]/u"), "a[2] p[4]/m");
    assert_eq!(at(&net, "p[6]/w[0]"), "p[6]/m z[0]");
    assert_eq!(at(&net, "i[2]"), "e z[2]");
    assert_eq!(at(&net, "k[1]"), "a[1] e");
    assert_eq!(net.instance("p/u"), None);
    assert_eq!(net.instance("p[7]/u"), None);
    let under = net.instances_under("p[5]").unwrap();
    let paths: Vec<String> = under.iter().map(|&i| net.instance_path(i)).collect();
    assert_eq!(paths, ["p[5]/u", "p[5]/w[1]", "p[5]/w[0]"]);
}

#[test]
fn unknown_cells_keep_their_pins_by_name() {
    let text =
        "module top (input [1:0] a); X u1 (.P(a), .\\q[0] (b)), u2 (.R(b), .P(2'b01)); nand (n, a[0], b);
        X u3 (); buf g (o, b); Y u4 (a, b); endmodule";
    let net = join(text).unwrap();
    let ports: Vec<String> = net
        .ports_of(net.master_named("X").unwrap())
        .map(|p| format!("{} {} {} {:?}", p.name, p.width, p.first, p.direction))
        .collect();
    assert_eq!(ports, ["P 2 0 None", "q[0] 1 2 None", "R 1 3 None"]);
    assert_eq!(at(&net, "u2"), "1'b0 1'b1 - b");
    assert_eq!(at(&net, "u4"), "a[1] a[0] b");
    let gate: Vec<_> = net.ports_of(net.master_named("nand").unwrap()).map(|p| p.direction).collect();
    assert_eq!(gate, [Some(Direction::Output), Some(Direction::Input), Some(Direction::Input)]);
    let refuse = ConnectOptions::default().unknown_cells(UnknownCells::Refuse);
    let known = "module NOR (input A, output Y); endmodule module t; NOR u1 (); NORR u2 (); endmodule";
    let error = connect(&mut [Source::from_text("n.v", known).into()], Some("t"), &(), &refuse).unwrap_err();
    assert_eq!(error.to_string(), "n.v:1:69: module `NORR` is not defined; did you mean `NOR`?");
}

#[test]
fn odd_nets_are_notes() {
    let net = join(
        "module top (input a, output z, y); INV u1 (a, m), u2 (b, m), u3 (m, a); INV u4 (.A(1'b0), .Y(gnd));
         supply0 gnd2; assign gnd = gnd2; assign y = 1'b1; assign y = 1'b0; endmodule",
    )
    .map(|n| n.notes().iter().map(|n| n.text.clone()).collect::<Vec<_>>())
    .unwrap();
    assert_eq!(
        net,
        [
            "in the top one net is tied to zero and to one; each keeps its own",
            "net `1'b0` has 2 drivers",
            "net `a` has 2 drivers",
            "net `z` has no driver and 1 pins that listen",
            "net `m` has 2 drivers",
            "net `b` has no driver and 1 pins that listen",
        ]
    );
}

#[test]
fn bad_connections_are_placed() {
    let child = "module c (input a, input [1:0] b); INV u (.A(a)); endmodule\n";
    for (body, wanted) in [
        (
            "c u (.none(x));",
            "n.v:3:3: `c` has no port `none`, at instance `u` of `c` in module `t`; want one of its ports",
        ),
        (
            "INV u (.AA(x));",
            "n.v:3:5: `INV` has no port `AA`, at instance `u` of `INV` in module `t`; did you mean `A`?",
        ),
        ("c u (x, 2'b00, z);", "n.v:3:3: 3 pins by position and 2 ports"),
        ("c u (.a(x), .b(y));", "n.v:3:3: port `b` has 2 bits and is tied to 1"),
        ("INV u (.A(2'b00));", "n.v:3:5: port `A` has 1 bits and is tied to 2"),
        ("c u [2:0] (.b(4'b0));", "n.v:3:3: port `b` has 2 bits and is tied to 4"),
        ("INV u (.A(x), .A(y));", "n.v:3:5: pin `A` is connected twice"),
        ("INV u (.A(x), y);", "n.v:3:5: pins by name and by position in one instance"),
        ("INV u (), u ();", "n.v:3:11: module `t` has two instances named `u`"),
        (
            "INV u (.A(x & y));",
            "n.v:3:13: `&` does not fit here; want `)` after one net, constant or concatenation",
        ),
        ("INV u (.A(~x));", "n.v:3:11: `~` does not fit here; want a net, a constant or `{`"),
        ("INV u (.*);", "n.v:3:9: `.*` leaves the pins to be guessed"),
        ("assign x = y | z;", "n.v:3:14: `|` does not fit here; want `;` after one net"),
        ("assign x = 2'b00;", "n.v:3:8: 1 bits on the left of `=` and 2 on the right"),
        ("assign 1'b0 = x;", "n.v:3:8: a constant on the left of an assign"),
        ("wire [3:0] v; INV u (.A(v[4]));", "n.v:3:15: `index of v` is 4; want one within [3:0]"),
        ("wire [3:0] v; c u (.b(v[0:1]));", "n.v:3:15: `v[0:1]` runs against the range"),
        ("wire v; wire v;", "n.v:3:14: `v` is declared or used before"),
        ("INV u (.A(v)); wire [1:0] v;", "n.v:3:27: `v` has the range [1:0] here and [0:0] before"),
        ("wire [3:0] v [1:0];", "n.v:3:12: `v` does not fit here"),
        ("wire [99999999:0] v;", "n.v:3:19: `width` is 100000000 bits"),
        ("INV u (.A({3{1'b0}}), .Y({x, 1}));", "n.v:3:1: a constant without a width inside braces"),
        ("RAM u (.D({99999999{x}}));", "n.v:3:1: `width of a replication` is 99999999 times 1 bits"),
        ("RAM u (.D(4'b0123));", "n.v:3:1: `0123` is no value in this base"),
        ("RAM u (.D(0'b0));", "n.v:3:1: `width of a constant` is 0 bits"),
        ("always @(x) y = 1;", "n.v:3:1: `always` is behaviour, not structure"),
        ("t u ();", "n.v:3:3: module `t` contains itself through this instance"),
        ("INV u (.A(x)", "n.v:4:1: `endmodule` does not fit here; want `,` or `)` after a pin"),
    ] {
        let text = format!("{child}module t (input x, y);\n{body}\nendmodule");
        let error = join_at(&text, Some("t")).map(|_| ()).expect_err(body).to_string();
        let wanted = wanted.replace("n.v:3:12: `v`", "n.v:3:14: `[`");
        assert!(error.starts_with(&wanted), "{body}\n got {error}\nwant {wanted}");
    }
    for (text, wanted) in [
        ("module t (a); INV u (); endmodule", "n.v:1:11: port `a` is never declared"),
        ("module t (a, a); input a; INV u (); endmodule", "n.v:1:14: port `a` stands twice in the list"),
        (
            "module t; endmodule module t; endmodule",
            "n.v:1:28: module `t` is defined twice, first at n.v:1:8",
        ),
        ("", "n.v: no Verilog module found (the file is empty)"),
        ("module a; INV u (); endmodule module b; INV u (); endmodule", "n.v:1:8: 2 modules that nothing"),
        ("module t; x u (); endmodule module x (input a); t v [99:0] (); endmodule", "n.v:1:"),
    ] {
        assert!(message(text).starts_with(wanted), "{text}\n got {}\nwant {wanted}", message(text));
    }
}

#[test]
fn what_cannot_be_numbered_is_refused_before_it_is_laid_out() {
    let mut text = "module m0; INV u (); endmodule\n".to_owned();
    for i in 1..6 {
        let _ = writeln!(text, "module m{i}; m{} u [999:0] (); endmodule", i - 1);
    }
    assert!(message(&text).contains("want at most 100000000 to connect"), "{}", message(&text));
}

const GOOD: &str = r"`define W 4
module m #(parameter P = 1) (a, \b[0] , c); // ports
  input a; output [`W-1:0] \b[0] ; input c; wire x = 1'b0, \y.z/[1] ;
  assign \b[0] [1] = a;
  (* keep *) INV #(.A(1)) \u.1[3]/x (.A(\b[0] [2]), /* ) */ .Y( )), u2 [3:0] (.A({a, 3'b1}), .Y(\b[0] ));
`ifdef X
  BAD `else BUF u3 (.A(a) `ifndef Y ,.Z(x) `endif ); `endif
  nand (strong0, weak1) #(1, 2) (q, a, x), g1 (x, a);
  sub s1 (), s2 [1:0] (.p(x)), s3 (\b[0] [3]); RAM r (.D({2{1'b0, a}}));
endmodule
module sub (p); inout p; NOR n1 (p); endmodule
";

fn everything(text: &str) {
    let counted = read_verilog(&[Source::from_text("n.v", text)]);
    if let Ok(net) = join(text) {
        // a design without any instance has no counts
        if let Ok(counts) = counted.unwrap().counts(None) {
            assert_eq!(net.counts(), counts, "{text}");
        }
        for instance in net.instances() {
            let _ = (net.instance_path(instance), net.master_name(net.master(instance)));
            for (k, &n) in net.pins(instance).iter().enumerate().filter(|(_, n)| **n != NetId::OPEN) {
                assert!(net.net_pins(n).any(|p| p == (instance, k)));
            }
        }
        let _ = (net.net(text), net.instance(text), net.heap_bytes());
    }
}

#[test]
fn the_good_text_is_good_and_every_cut_of_it_an_error() {
    let net = join(GOOD).unwrap();
    assert_eq!(net.instance_count(), 13);
    assert_eq!(at(&net, "s3/n1"), "b[0][3]");
    let first = GOOD.find("module m").unwrap() + 1;
    let last = GOOD.find("endmodule").unwrap() + "endmodule".len();
    for cut in first..last {
        let error = join(&GOOD[..cut]).map(|_| ()).expect_err(&GOOD[..cut]);
        assert!(matches!(error, ReadError::Syntax { .. } | ReadError::Unknown { .. }), "{error}");
    }
    for cut in 0..GOOD.len() {
        everything(&GOOD[..cut]);
        everything(&GOOD[cut..]);
    }
}

proptest! {
    #[test]
    fn any_bytes_give_a_value_or_an_error(bytes in proptest::collection::vec(any::<u8>(), 0..300)) {
        let text = String::from_utf8_lossy(&bytes);
        everything(&text);
        everything(&format!("module m; {text}"));
        everything(&format!("module m; INV u1 ({text}"));
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
            "(", ")", "[", "]", ":", ",", "#", "7", "'", "h", "b0", "INV", "nand", "wire", "input", "output", ";", ";",
            "assign", "=", "supply0", "(*", "*)", "\\e ", "x", "y", "u1", ".", ".A(", "{", "}", "1'b0", "2", "RAM u2",
        ]), 0..60)
    ) {
        everything(&format!("module m (x, y); {} endmodule", words.join(" ")));
        everything(&format!("module m; {} endmodule", words.concat()));
    }
}
