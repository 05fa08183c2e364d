//! Liberty libraries: read, asked for states, written and read back.

use hushrail::read::liberty::{
    Basis, CellRole, LeakageGroup, LibertyOptions, Library, LibraryCell, Nominal, Pin, Units,
};
use hushrail::read::{ReadError, Source, read_liberty, write_liberty};
use proptest::prelude::*;

const SMALL: &str = r#"/* a small library */
library ("small_tt") {
  delay_model : table_lookup;
  leakage_power_unit : 1nW;
  voltage_unit : "100mV";
  nom_process : 1.0; nom_voltage : 18
  nom_temperature : "25";
  voltage_map (VDD, 18); voltage_map ("VSS", 0.0);
  define ("my_attribute", "cell", "string");
  operating_conditions (tt) { process : 1; voltage : 18; temperature : 25; }
  default_operating_conditions : tt;
  default_cell_leakage_power : 0.5;
  lu_table_template (t) { variable_1 : x; index_1 ("1, 2, \
    3"); }
  type (two) { base_type : array; data_type : bit; bit_width : 2; bit_from : 1; bit_to : 0; }
  cell (nand2) {
    area : 3.5;
    cell_leakage_power : 2;
    pg_pin (VDD) { pg_type : primary_power; voltage_name : "VDD"; }
    pg_pin (VSS) { pg_type : "primary_ground"; voltage_name : VSS }
    leakage_power () { when : "A B"; value : 4.0; related_pg_pin : VDD; }
    leakage_power () { when : "!A * B"; value : "1.5"; related_pg_pin : "VDD"; }
    leakage_power () { when : "A&B'"; value : 1.25; related_pg_pin : VDD; }
    leakage_power () { when : "(A+B)'&Y"; value : 0.25; related_pg_pin : VDD; }
    pin (A, B) { direction : input; capacitance : 0.001; }
    pin (Y) {
      direction : output; function : "!(A&B)";
      timing () { related_pin : "A"; cell_rise (t) { values ("1, 2, } {", "4, \"5\", 6"); } // } not here
      }
      internal_power () { power (t) { values ("1, 2, 3"); } }
    }
  }
  cell (latch) {
    leakage_power () { when : "Q"; value : 3; }
    leakage_power () { value : 1; }
    latch (IQ, IQN) { enable : "G"; data_in : "D"; clear : "R"; }
    pin (D) { direction : input; } pin (G) { direction : input; clock : true; } pin (R) { direction : input; }
    pin (Q) { direction : output; function : IQ; }
    bus (S) { bus_type : two; direction : input; pin (S[0]) { always_on : true; } }
  }
  cell (header) {
    switch_cell_type : coarse_grain; always_on : true;
    pg_pin (VDD) { pg_type : primary_power; }
    pg_pin (VV) { pg_type : internal_power; direction : output; switch_function : "SLEEP"; pg_function : "VDD"; }
    pin (SLEEP) { direction : input; switch_pin : true; related_power_pin : VDD; }
  }
  cell (iso) { is_isolation_cell : true; cell_leakage_power : 1;
    pin (EN) { direction : input; isolation_cell_enable_pin : true; } }
  cell (keep) { retention_cell : "RFF"; cell_leakage_power : 1; }
}
"#;

fn read(text: &str) -> Result<Library, ReadError> {
    read_liberty(&Source::from_text("a.lib", text), &LibertyOptions::default())
}

fn codes(library: &Library) -> Vec<&str> {
    library.notes.iter().map(|n| n.code.as_str()).collect()
}

#[test]
fn a_library_is_read_with_its_units_pins_and_purposes() {
    let l = read(SMALL).expect("good");
    assert_eq!(l.name, "small_tt");
    assert_eq!(l.units, Units { leakage_w: Some(1e-9), voltage_v: Some(0.1) });
    let corner = Nominal { process: Some(1.0), voltage_v: Some(18.0 * 0.1), temp_c: Some(25.0) };
    assert_eq!((l.nominal, l.conditions["tt"]), (corner, corner));
    let [note] = &l.notes[..] else { panic!("{:?}", l.notes) };
    assert_eq!(note.text, "a.lib:41: cell `header`: neither leakage groups nor `cell_leakage_power`");
    let nand = &l.cells["nand2"];
    assert_eq!((nand.area, nand.cell_leakage_power, nand.line), (Some(3.5), Some(2.0), 16));
    assert_eq!(nand.pins.keys().collect::<Vec<_>>(), ["A", "B", "Y"]);
    assert_eq!(nand.leakage[1].line, 22);
    assert!(nand.pg_pins["VSS"].is_ground());
    let latch = &l.cells["latch"];
    assert_eq!(latch.pins.keys().collect::<Vec<_>>(), ["D", "G", "R", "Q", "S[1]", "S[0]"]);
    assert_eq!(latch.pins["S[0]"].direction, "input");
    assert_eq!(latch.pins["S[0]"].attributes["always_on"], "true");
    let roles = |n: &str| l.cells[n].roles();
    assert_eq!(roles("header"), [CellRole::Switch("coarse_grain".into()), CellRole::AlwaysOn]);
    assert_eq!(roles("iso"), [CellRole::Isolation]);
    assert_eq!(roles("keep"), [CellRole::Retention("RFF".into())]);
    assert_eq!(l.cells["header"].pg_pins["VV"].attributes["switch_function"], "SLEEP");
}

#[test]
fn states_find_their_leakage_through_outputs_and_stored_values() {
    let l = read(SMALL).expect("good");
    let states = l.states("nand2").expect("states");
    let power: Vec<_> = states.iter().map(|s| s.power).collect();
    assert_eq!(power, [Some(0.25), Some(1.5), Some(1.25), Some(4.0)]);
    assert!(states.iter().all(|s| s.basis == Basis::State));
    assert_eq!(states[0].over_v, Some(0.25 / (18.0 * 0.1)));
    assert_eq!(states[3].bit("Y"), Some(false));

    let latch = l.states("latch").expect("states");
    for s in &latch {
        let [g, r, d, q] = ["G", "R", "D", "Q"].map(|p| s.bit(p).expect("known"));
        assert!(!(r && q) && (r || !g || q == d), "{s:?}");
        assert_eq!(s.power, Some(if q { 3.0 } else { 1.0 }));
        assert_eq!(s.basis, if q { Basis::State } else { Basis::Plain });
    }
    assert_eq!(latch.len(), 4 * (4 + 2 + 4));
    assert_eq!(l.states("iso").expect("states")[0].basis, Basis::Cell);
    assert_eq!(l.states("header").expect("states")[0].basis, Basis::Default);
    let e = l.states("nnd2").expect_err("no such cell").to_string();
    assert_eq!(e, "library `small_tt` has no cell `nnd2`; did you mean `nand2`?");
}

#[test]
fn several_supplies_add_up_over_their_own_voltages() {
    let l = read(
        r#"library (x) { leakage_power_unit : "1uW"; voltage_unit : "1V"; nom_voltage : 1.0; nom_temperature : 25;
        voltage_map (A, 1.0); voltage_map (B, 2.0); voltage_map (G, 0.0);
        cell (c) {
          pg_pin (VA) { pg_type : primary_power; voltage_name : A; }
          pg_pin (VB) { pg_type : backup_power; voltage_name : B; }
          pg_pin (VG) { pg_type : primary_ground; voltage_name : G; }
          leakage_power () { when : "D"; value : 3; related_pg_pin : VA; }
          leakage_power () { when : "D'"; value : 1; related_pg_pin : VA; }
          leakage_power () { value : 4; related_pg_pin : VB; }
          leakage_power () { value : 0; related_pg_pin : VG; }
          pin (D) { direction : input; } } }"#,
    )
    .expect("good");
    assert_eq!(l.notes, []);
    let s = l.states("c").expect("states");
    assert_eq!(
        s.iter().map(|s| (s.power, s.over_v)).collect::<Vec<_>>(),
        [(Some(5.0), Some(1.0 + 2.0)), (Some(7.0), Some(3.0 + 2.0))]
    );
}

#[test]
fn a_fragment_takes_what_is_given() {
    let text =
        "cell (a) { leakage_power () { when : \"A\"; value : 2; } }\ncell (b) { cell_leakage_power : 1; }\n";
    let l = read(text).expect("cells only");
    assert_eq!(codes(&l), ["fragment", "missing", "missing", "no-unit"]);
    assert_eq!(l.watts(1.0), None);
    let options = LibertyOptions { leakage_unit_w: Some(1e-9), voltage_v: Some(1.1), temp_c: Some(25.0) };
    let l = read_liberty(&Source::from_text("f", text), &options).expect("cells only");
    assert_eq!((codes(&l), l.watts(2.0)), (vec!["fragment"], Some(2e-9)));
    // states of a cell without pins come from its conditions
    let s = l.states("a").expect("states");
    assert_eq!(s.iter().map(|s| s.power).collect::<Vec<_>>(), [None, Some(2.0)]);
}

#[test]
fn what_contradicts_is_noted_and_never_assumed() {
    let cell = |inner: &str| {
        format!(
            "library (x) {{ leakage_power_unit : \"1nW\"; voltage_unit : \"1V\"; nom_voltage : 1; nom_temperature : 25;\n\
             cell (c) {{ cell_leakage_power : 1; pin (A) {{ direction : input; }} pin (B) {{ direction : input; }}\n{inner}\n}} }}"
        )
    };
    let group =
        |when: &str, value: &str| format!("leakage_power () {{ when : \"{when}\"; value : {value}; }}");
    for (inner, code, part) in [
        (group("A", "1") + &group("A", "2"), "duplicate-when", "`A` is 1 and 2; the first counts"),
        (group("A", "1") + &group("B", "2"), "overlap", "both may hold"),
        (group("A^B", "1") + &group("A|B", "2"), "overlap", "both may hold"),
        (group("A", "0"), "zero", "leakage of `A` is 0"),
        (group("A", "-1e-3"), "negative", "leakage of `A` is -0.001"),
        (group("X", "1"), "unknown-pin", "the cell has no pin `X`"),
        (group("A", "2") + &group("!A", "3"), "contradiction", "`cell_leakage_power` is 1, its states lie from 2 to 3"),
        ("leakage_power () { wen : \"A\"; value : 1; }".into(), "unknown", "`wen` in a leakage group is not known; did you mean `when`?"),
        ("leakage_power () { when : \"A\"; }".into(), "no-value", "without `value`"),
        ("leakage_power () { value : 1; related_pg_pin : V; } pg_pin (W) { pg_type : primary_power; pg_typ : x; }".into(), "unknown-supply", "no supply pin `V`"),
        ("pg_pin (W) { pg_typ : x; }".into(), "unknown", "did you mean `pg_type`?"),
        ("cell_leakage_power : 2;".into(), "contradiction", "is 1 and 2; the last counts"),
        ("pin (Y) { function : \"A+\"; }".into(), "function", "ends too early"),
        ("} cell (c) { area : 1;".into(), "duplicate-cell", "cell `c` stands twice"),
        ("} cell (d) { area : 1;".into(), "no-leakage", "neither leakage groups nor"),
    ] {
        let l = read(&cell(&inner)).expect(&inner);
        let found = l.notes.iter().find(|n| n.code == code);
        assert!(found.is_some_and(|n| n.text.contains(part) && n.text.starts_with("a.lib:")), "{inner}: {:?}", l.notes);
    }
    for inner in [
        group("A", "1") + &group("A", "1.000001"),
        group("A&B", "1") + &group("A&!B", "2"),
        group("A^B", "0.5") + &group("A&B", "2"),
    ] {
        assert_eq!(read(&cell(&inner)).expect("good").notes, [], "{inner}");
    }
    let whole = cell("");
    for (from, to, code, part) in [
        ("leakage_power_unit : \"1nW\";", "", "no-unit", "known up to a factor only"),
        ("voltage_unit : \"1V\";", "", "no-unit", "read as V"),
        ("nom_voltage : 1;", "", "missing", "no `nom_voltage`"),
        (
            "nom_voltage : 1;",
            "nom_voltage : 1; default_operating_conditions : k;",
            "contradiction",
            "`k` are not in the library",
        ),
        (
            "nom_voltage : 1;",
            "nom_voltage : 1; default_operating_conditions : k; operating_conditions (k) { voltage : 2; }",
            "contradiction",
            "have 2",
        ),
        (
            "nom_voltage : 1;",
            "nom_voltage : 1; voltage_map (V, 1); voltage_map (V, 2);",
            "contradiction",
            "1 and 2 in the voltage map",
        ),
    ] {
        let l = read(&whole.replace(from, to)).expect(to);
        assert!(l.notes.iter().any(|n| n.code == code && n.text.contains(part)), "{to}: {:?}", l.notes);
    }
}

#[test]
fn mistakes_are_placed_and_say_what_would_be_right() {
    for (text, wanted) in [
        ("", "a.lib: no library or cell found (the file is empty)"),
        ("/* x */", "a.lib: no library or cell found"),
        ("library (x) {", "a.lib:1:13: a group that is not closed; want `}` before the end of the file"),
        (
            "library (x) {\n cell (a) {\n  area : ;\n } }",
            "a.lib:3:10: `;` where the value of `area` belongs; want a value, then `;`",
        ),
        ("library (x) {\n cell (a) { area : big; } }", "a.lib:2:20: `big` of `area`; want a finite number"),
        (
            "library (x) { leakage_power_unit : \"1nA\"; }",
            "a.lib:1:36: `1nA` of `leakage_power_unit`; want a unit such as 1nW",
        ),
        (
            "library (x) { cell (a) { leakage_power () { when : \"A&\"; value : 1; } } }",
            "a.lib:1:55: `when`: `A&` ends too early; want the name of a pin, 0, 1 or a bracket",
        ),
        ("library (x) { cell () { } }", "a.lib:1:15: a cell named ``; want one name in the brackets"),
        ("library (x) { } }", "a.lib:1:17: `}` closes nothing; want one `}` for each `{`"),
        (
            "library (x) { } library (y) { }",
            "a.lib:1:17: a second `library` group; want one library in a file, or cells only",
        ),
        ("libary (x) { }", "a.lib:1:1: group `libary` is not defined; did you mean `library`?"),
        ("library (x) { a \"b\"; }", "a.lib:1:17: `\"` after `a`; want `:` and a value, or `(`…`)`"),
        (
            "library (x) { a : \"b\" c; }",
            "a.lib:1:23: `c` after the value of `a`; want `;` or the end of the line",
        ),
        ("library (x) { a : \"b; }", "a.lib:1:19: a string that does not end; want a closing quote"),
        ("library (x) { /* }", "a.lib:1:15: a comment that does not end; want `*/` after it"),
        (
            "library (x) { timing () { a : \"b; } }",
            "a.lib:1:31: a string that does not end; want a closing quote",
        ),
        ("area : 1;", "a.lib:1:1: `area` outside of a library; want `library (NAME) {` or `cell (NAME) {`"),
        (
            "library (x) { voltage_map (V); }",
            "a.lib:1:28: `voltage_map (V)`; want the name of a supply and its voltage",
        ),
    ] {
        assert_eq!(read(text).expect_err(text).to_string(), wanted, "{text}");
    }
}

#[test]
fn a_file_cut_off_anywhere_is_an_error_or_whole() {
    let whole = read(SMALL).expect("good");
    let last = SMALL.rfind('}').expect("there") + 1;
    for end in 0..SMALL.len() {
        let found = read(&SMALL[..end]);
        if end < last {
            assert!(found.is_err(), "cut at {end}");
        } else {
            assert_eq!(found.as_ref(), Ok(&whole), "cut at {end}");
        }
    }
    // a fragment may lose whole cells and nothing else
    let fragment = "cell (a) { cell_leakage_power : 1; }\ncell (b) { cell_leakage_power : 2; }\n";
    let both = read(fragment).expect("good");
    for end in 0..fragment.len() {
        if let Ok(l) = read(&fragment[..end]) {
            assert!(!l.cells.is_empty() && l.cells.iter().all(|(n, c)| both.cells[n] == *c), "cut at {end}");
        }
    }
}

/// Without what depends on the file's layout.
fn bare(mut l: Library) -> Library {
    l.path.clear();
    l.notes.clear();
    for c in l.cells.values_mut() {
        c.line = 0;
        c.leakage.iter_mut().for_each(|g| g.line = 0);
    }
    l
}

#[test]
fn what_is_written_reads_back_unchanged() {
    let l = bare(read(SMALL).expect("good"));
    let text = write_liberty(&l);
    assert_eq!(bare(read(&text).expect("own text")), l, "{text}");
    assert_eq!(write_liberty(&bare(read(&text).expect("own text"))), text);
}

proptest! {
    #[test]
    fn any_leakage_reads_back_unchanged(
        values in proptest::collection::vec((any::<f64>(), "[A-D]([&|^][A-D]){0,3}"), 1..8),
        unit in proptest::sample::select(vec![1e-9, 1e-12, 1e-11, 1.0, 3.7e-10]),
        name in "[a-z\"\\\\ ][A-Za-z0-9_\\[\\]\"\\\\ µ]{0,6}[a-z]",
    ) {
        let mut cell = LibraryCell::default();
        cell.pins.insert("A[0]".into(), Pin { direction: "input".into(), ..Pin::default() });
        for (v, when) in values {
            let value = if v.is_finite() { v } else { 1.0 };
            cell.leakage.push(LeakageGroup { when, value, supply: Some("VDD".into()), line: 0 });
        }
        let mut l = Library { name: name.trim().to_owned(), ..Library::default() };
        l.units.leakage_w = Some(unit);
        l.nominal = Nominal { process: None, voltage_v: Some(1.1), temp_c: Some(-40.0) };
        l.cells.insert(name.trim().to_owned(), cell);
        let again = read(&write_liberty(&l)).map(bare);
        prop_assert_eq!(again, Ok(l));
    }

    #[test]
    fn no_text_panics(bytes in proptest::collection::vec(any::<u8>(), 0..200), at in 0usize..2000, signs in "[(){}:;,\"\\\\/*\n a1]{0,40}") {
        let _ = read(&String::from_utf8_lossy(&bytes));
        let _ = read(&signs);
        let at = at.min(SMALL.len());
        let _ = read(&format!("{}{signs}{}", &SMALL[..at], &SMALL[at..]));
        let _ = read(&format!("library (x) {{ cell (c) {{ {signs} }} }}"));
    }
}
