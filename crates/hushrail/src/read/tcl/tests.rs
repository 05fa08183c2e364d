use std::collections::BTreeMap;

use proptest::prelude::*;

use super::*;

fn run_with(text: &str, limits: Limits) -> Result<String, ReadError> {
    let env =
        BTreeMap::from([("HOME".to_owned(), "/none".to_owned()), ("MODE".to_owned(), "amber".to_owned())]);
    let mut tcl = Interpreter::new(&env, limits);
    tcl.run(&mut (), &Source::from_text("s.tcl", text)).map(|v| v.text().to_owned())
}

fn run(text: &str) -> String {
    run_with(text, Limits::default()).unwrap_or_else(|e| e.to_string())
}

#[test]
fn plain_scripts_give_what_the_language_says() {
    let mut wrong = Vec::new();
    for (text, wanted) in [
        ("set a 1; set b $a$a", "11"),
        ("set a {x y}; llength $a", "2"),
        ("set a \"x\n y\"; lindex $a 1", "y"),
        ("set n a; set $n 3; set a", "3"),
        ("set v(1) x; set i 1; set v($i)", "x"),
        ("set ::env(MODE)", "amber"),
        ("info exists ::env(MODE)", "1"),
        ("info exists env(NONE)", "0"),
        ("info exists nothing", "0"),
        ("# a comment \\\n goes on\nset a 2", "2"),
        ("set a 5 ;# behind", "5"),
        ("expr {1 + 2 * 3}", "7"),
        ("expr 7 / 2", "3"),
        ("expr {-7 / 2}", "-4"),
        ("expr {-7 % 3}", "2"),
        ("expr {2 ** 3 ** 2}", "512"),
        ("expr {7.0 / 2}", "3.5"),
        ("expr {1e3 + 1}", "1001.0"),
        ("expr {\"amber\" == \"amber\"}", "1"),
        ("expr {\"a\" eq \"b\" || {b} in {a b}}", "1"),
        ("expr {3 ni {1 2}}", "1"),
        ("expr {0 && [bogus]}", "0"),
        ("expr {1 ? \"yes\" : [bogus]}", "yes"),
        ("expr {!true || off}", "0"),
        ("expr {max(1, 2.5, 2)}", "2.5"),
        ("expr {int(2.7) + round(2.7) + abs(-1)}", "6"),
        ("expr {0x10 + 1}", "17"),
        ("if {0} {set a 1} elseif {1} {set a 2} else {set a 3}", "2"),
        ("set s 0; for {set i 0} {$i < 4} {incr i} {incr s $i}; set s", "6"),
        ("set s {}; foreach {a b} {1 2 3} {append s $a-$b,}; set s", "1-2,3-,"),
        ("set s 0; foreach x {1 2 3 4} {if {$x == 2} continue; if {$x == 4} break; incr s $x}; set s", "4"),
        ("set i 0; while {1} {if {[incr i] > 5} break}; set i", "6"),
        ("proc f {a {b 2} args} {return $a/$b/[llength $args]}; f 1; f 1 3 4 5", "1/3/2"),
        ("set g 1; proc f {} {global g; incr g; return $::g}; f", "2"),
        ("proc f n {if {$n < 2} {return 1}; expr {$n * [f [expr {$n - 1}]]}}; f 5", "120"),
        ("switch -glob abc {x {set a 1} a* {set a 2} default {set a 3}}", "2"),
        ("switch b {a - b - c {set a 1} default {set a 2}}", "1"),
        ("catch {bogus} message", "1"),
        ("catch {set a 4} b; set b", "4"),
        ("lappend l a {b c} d; lindex $l 1", "b c"),
        ("lrange {a b c d} 1 end-1", "b c"),
        ("lsort -decreasing {b a c}", "c b a"),
        ("lsort -integer -unique {10 9 10}", "9 10"),
        ("lsearch {a b c} b", "1"),
        ("lsearch -all -inline -glob {ab ac b} a*", "ab ac"),
        ("join {a b c} /", "a/b/c"),
        ("split a/b//c /", "a b {} c"),
        ("concat {a b} c {d}", "a b c d"),
        ("string toupper ab", "AB"),
        ("string match {u_*\\[0\\]} {u_x[0]}", "1"),
        ("string range abcdef 1 end-2", "bcd"),
        ("string map {a 1 b 2} aabbc", "1122c"),
        ("string first b abc", "1"),
        ("string trim {  a }", "a"),
        ("format %03d|%-4s|%.2f|%x 7 ab 1.005 255", "007|ab  |1.00|ff"),
        ("array set a {x 1 y 2}; lsort [array names a]", "x y"),
        ("set l {a b}; list {*}$l c", "a b c"),
        ("file join a b/c", "a/b/c"),
        ("file tail a/b.upf", "b.upf"),
        ("eval {set a 9}", "9"),
        ("set a \\\n  4", "4"),
        ("set a {x \\\n y}; llength $a", "2"),
        ("set a [list \\[ {}]; lindex $a 0", "["),
        ("set \"a b\" 1; set {a b}", "1"),
        ("set a ${env(HOME)}", "/none"),
        ("set a $", "$"),
        ("set a \\u00e9\\x41\\101", "éAA"),
        ("set é 1; set é", "1"),
        ("", ""),
    ] {
        let got = run(text);
        if got != wanted {
            wrong.push(format!("{text}\n got {got}\nwant {wanted}"));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn errors_stand_at_the_word() {
    let mut wrong = Vec::new();
    for (text, wanted) in [
        ("set a 1\nbogus x", "s.tcl:2:1: command `bogus` is not defined"),
        ("foreahc x {1} {}", "s.tcl:1:1: command `foreahc` is not defined; did you mean `foreach`?"),
        (
            "set abc 1\nif {1} {\n  set b $abd\n}",
            "s.tcl:3:9: variable `abd` is not defined; did you mean `abc`?",
        ),
        (
            "set ::env(MODES)",
            "s.tcl:1:5: variable of the environment `MODES` is not defined; did you mean `MODE`?",
        ),
        ("set a {", "s.tcl:1:7: a brace that is not closed"),
        ("set a \"x\nset b 1", "s.tcl:1:7: a quote that is not closed"),
        ("set a [set b 1", "s.tcl:1:7: a bracket that is not closed"),
        ("set a {x}y", "s.tcl:1:10: text right behind a brace"),
        ("set a b c", "s.tcl:1:1: `set` with 3 words behind it; want `set name ?value?`"),
        ("set a \\\n", "s.tcl:1:7: the text ends behind a backslash"),
        ("set a 1; if {$a = 1} {}", "s.tcl:1:17: `= 1` does not fit here"),
        ("if {amber == 1} {}", "s.tcl:1:5: `amber` stands bare in an expression"),
        ("expr {1 / 0}", "s.tcl:1:9: a division by zero"),
        ("expr {9223372036854775807 + 1}", "s.tcl:1:27: `9223372036854775807 + 1` is no whole number"),
        ("expr {1 << 70}", "s.tcl:1:9: `1 << 70` is no whole number of 64 bits"),
        ("expr {(-9223372036854775807 - 1) / -1}", "s.tcl:1:34: "),
        ("expr {sqrt(-1)}", "s.tcl:1:7: `sqrt` gives NaN"),
        ("expr {sqr(4)}", "s.tcl:1:7: function `sqr` is not defined; did you mean `sqrt`?"),
        ("break", "s.tcl:1:1: `break` outside a loop"),
        ("proc f {} {break}\nf", "s.tcl:1:12: `break` outside a loop"),
        ("proc f x {}\nf", "s.tcl:2:1: `f` without its parameter `x`"),
        ("exec rm x", "s.tcl:1:1: the Tcl command `exec` is not offered"),
        ("regexp a b", "s.tcl:1:1: the Tcl command `regexp` is not offered"),
        ("source none.tcl", "s.tcl:1:8: `none.tcl` cannot be read: no such file"),
        ("source /", "s.tcl:1:8: `/` is no file"),
        ("error {no power}", "s.tcl:1:1: no power; the script itself says so"),
        (
            "string lenght a",
            "s.tcl:1:8: subcommand of string `lenght` is not defined; did you mean `length`?",
        ),
        ("llength \"a \\{b\"", "s.tcl:1:"),
        ("set l {a {b}c}; lindex $l 0", "s.tcl:1:13: text right behind a brace"),
        ("incr a x", "s.tcl:1:8: `x` is no whole number"),
        ("set é [bogus]", "s.tcl:1:8: command `bogus`"),
    ] {
        let got = run(text);
        if !got.starts_with(wanted) {
            wrong.push(format!("{text}\n got {got}\nwant {wanted}"));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn scripts_without_end_are_stopped() {
    let quick = Limits { steps: 20_000, ..Limits::default() };
    for text in [
        "while {1} {}",
        "for {} {1} {} {}",
        "while 1 {catch {error x}}",
        "set a x; while {1} {append a $a}",
        "set a [string repeat x 1000]; string repeat $a 1000000",
        "proc f {} {while {1} {}}; catch f",
    ] {
        let e = run_with(text, quick).expect_err(text).to_string();
        assert!(e.contains("more than 20000 steps"), "{text}: {e}");
    }
    let deep = "[list ".repeat(10_000);
    let parens = format!("expr {{{}}}", "(".repeat(10_000));
    let signs = format!("expr {{{}1}}", "!".repeat(10_000));
    let arrays = format!("set x $a{}", "($a".repeat(10_000));
    for text in ["proc f x {f $x}\nf 1", "proc f x {catch {f $x}}\nf 1", &deep, &parens, &signs, &arrays] {
        let e = run(text);
        assert!(e.contains("deep"), "{}: {e}", short(text));
    }
}

#[test]
fn what_puts_says_is_a_note() {
    let mut tcl = Interpreter::new(&BTreeMap::new(), Limits::default());
    tcl.run(&mut (), &Source::from_text("s.tcl", "set a 1\nputs \"a is $a\"")).expect("good");
    assert_eq!(tcl.take_notes(), [Note::new("script-says", "s.tcl:2:1: a is 1")]);
}

#[test]
fn values_keep_the_place_they_were_written_at() {
    struct Keep(Vec<String>);
    impl Host for Keep {
        fn names(&self) -> Vec<&str> {
            vec!["keep"]
        }
        fn call(&mut self, tcl: &mut Interpreter, words: &[Word]) -> Option<Outcome> {
            if words[0].text() != "keep" {
                return None;
            }
            let all = tcl.list(&words[1].value).unwrap();
            self.0.extend(all.iter().map(|v| format!("{} {}", v.text(), tcl.place(v.spot()))));
            Some(Ok(words[1].value.clone()))
        }
    }
    let text = "set n 15\nset all \"\n  one\n  two_$n three\n\"\nlappend more four {five}\nkeep $all\nkeep [concat $more {a\n b}]\n";
    let mut keep = Keep(Vec::new());
    Interpreter::new(&BTreeMap::new(), Limits::default())
        .run(&mut keep, &Source::from_text("s", text))
        .unwrap();
    assert_eq!(
        keep.0,
        ["one s:3:3", "two_15 s:4:3", "three s:4:10", "four s:6:14", "five s:6:20", "a s:8:21", "b s:9:2"]
    );
}

proptest! {
    #[test]
    fn no_script_panics(text in "[a-c$\\[\\]{}\"\\\\ ;\n()#é0-9+*?:!<=-]{0,60}") {
        let _ = run_with(&text, Limits { steps: 2000, depth: 20 });
        let _ = run_with(&format!("expr {{{text}}}"), Limits { steps: 2000, depth: 20 });
        let _ = run_with(&format!("set a 1; lindex [list {text}] end"), Limits { steps: 2000, depth: 20 });
    }

    #[test]
    fn lists_come_back(parts in proptest::collection::vec("[a{}\\[\\]$\" \\\\;#\n]{0,6}", 0..5)) {
        let text = list::join(parts.iter().map(String::as_str));
        let value = Value::new(text.as_str(), Spot::default());
        let back = list::elements(&value).map_err(|e| TestCaseError::fail(format!("{text:?}: {e:?}")))?;
        let back: Vec<&str> = back.iter().map(Value::text).collect();
        prop_assert_eq!(back, parts);
    }
}
