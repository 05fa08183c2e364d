use super::*;

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
        body("D d [8'h0f:'b0] (); E e ['d 9 : 0] (); F f [1_0-1:2+1] (); G g[4'sd3:0](); H h[-1+3:0]();"),
        "D=16 E=10 F=7 G=4 H=3"
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

#[test]
fn gates_count_under_their_keyword() {
    let gates = "and nand or nor xor xnor buf not bufif0 bufif1 notif0 notif1 nmos pmos rnmos rpmos cmos rcmos \
                 tran rtran tranif0 tranif1 rtranif0 rtranif1 pullup pulldown";
    let text: Vec<String> = gates.split(' ').map(|g| format!("{g} g_{g} (a, b);\n")).collect();
    let wanted: Vec<String> = gates.split(' ').map(|g| format!("{g}=1")).collect();
    assert_eq!(body(&text.concat()), wanted.join(" "));
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

#[test]
fn declarations_hold_no_instances() {
    let text = "input a; output [7:0] b; inout c; wire d, e; wire signed [3:0] f = 4'b 01_1x; tri g; tri0 h; tri1 i;
        triand j; trior k; trireg (small) #(0, 0, 50) l; wand m1; wor n; supply0 gnd, vss; supply1 vdd; uwire #1.5 o; wire #d o2; wire #(1, 2) o3;
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
