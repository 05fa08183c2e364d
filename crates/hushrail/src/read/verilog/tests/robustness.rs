use proptest::prelude::*;

use super::*;

const GOOD: &str = r#"`timescale 1ns/1ps
`define W 8
`define ONE(c, n) c n (.A("x)"), .B(a)) ;
(* top = "m;" *)
module m #(parameter P = 1) (a, \b[0] , c); // ports
  input a; output [`W-1:0] \b[0] ; wire x = 1'b0, \y.z/[1] ;
  assign \b[0] [1] = {2{a}} ^ 4'h3;
  (* keep *) INV #(.A(1)) \u.1[3]/x (.A(\b[0] [2]), /* ) */ .X( )), u2 [3:0] (.A({a, 1'b1}));
`ifdef X
  BAD `else BUF u3 (`ifndef Y .A(a) `endif ); `endif
  nand (strong0, weak1) #(1, 2) (a, x), g1 (x, a);
  sub s1 (), s2 [1:0] (.p(x)); `ONE(OR, \o ) 
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
    assert_eq!(shown(&read(GOOD).unwrap().counts(None).unwrap()), "INV=5 BUF=1 nand=2 NOR=3 OR=1");
}

#[test]
fn every_cut_is_an_error() {
    let first = GOOD.find("module m").unwrap() + 1;
    let last = GOOD.find("endmodule").unwrap() + "endmodule".len();
    for cut in first..last {
        let error = read(&GOOD[..cut]).expect_err(&GOOD[..cut]);
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
                let pins = format!("(.A{gap}(a){gap}){gap};");
                text += &[gap, &master, " \\u.", &i.to_string(), "[0] ", gap, &array, &pins].concat();
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
