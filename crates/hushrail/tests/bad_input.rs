//! Bad input gets one clear error: file, line, column, what was found, what would be right. Nothing panics.

mod common;

use std::io::Write as _;
use std::path::PathBuf;
use std::sync::Arc;

use common::{CARDS, CELLS, process};
use hushrail::block::build_block;
use hushrail::cell::{BoundCell, CellReader, DeviceShelf, RailNames};
use hushrail::device::process::{Process, Request};
use hushrail::physics::Kelvin;
use hushrail::read::counts::InstanceCounts;
use hushrail::read::{Deck, DeckOptions, Place, ReadError, Source, read_deck};
use proptest::prelude::*;

fn scratch(name: &str, bytes: &[u8]) -> PathBuf {
    let dir = std::env::temp_dir().join(format!("hushrail-bad-{}", std::process::id()));
    std::fs::create_dir_all(&dir).expect("scratch folder");
    let path = dir.join(name);
    std::fs::write(&path, bytes).expect("scratch file");
    path
}

fn says(e: &ReadError, wanted: &[&str]) {
    let text = e.to_string();
    for w in wanted {
        assert!(text.contains(w), "`{w}` is missing in: {text}");
    }
}

fn deck(text: &str) -> Result<Deck, ReadError> {
    read_deck(&[Source::from_text("t.sp", text)], &DeckOptions::default())
}

fn card(text: &str) -> Result<(), ReadError> {
    let p = Process::read("x", &[Source::from_text("t.lib", text)], &DeckOptions::default())?;
    p.transistor(
        &request(&[("w", 1e-6), ("l", 60e-9)]),
        Kelvin::from_celsius(25.0).expect("fine"),
        &mut Vec::new(),
    )?;
    Ok(())
}

fn request(params: &[(&str, f64)]) -> Request {
    Request {
        model: "nx".into(),
        params: params.iter().map(|(n, v)| (Arc::from(*n), *v)).collect(),
        at: Place::new(&Arc::from("net.sp"), 7, 3),
    }
}

#[test]
fn files_that_cannot_be_text_are_named() {
    says(
        &Source::open(&PathBuf::from("no/such.lib")).expect_err("missing"),
        &["no/such.lib", "no such file"],
    );
    let bad = Source::open(&scratch("latin.lib", b"* ok\n.param x = 1 $ \xb5m\n")).expect_err("not UTF-8");
    says(&bad, &["latin.lib:2:16", "0xb5", "UTF-8"]);
    let mut gz = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::default());
    gz.write_all(".param x = 1\n".repeat(500).as_bytes()).expect("in memory");
    let bytes = gz.finish().expect("in memory");
    assert!(Source::open(&scratch("good.lib.gz", &bytes)).is_ok());
    for cut in [12, bytes.len() / 2, bytes.len() - 1] {
        let e = Source::open(&scratch("cut.lib.gz", &bytes[..cut])).expect_err("cut");
        says(&e, &["cut.lib.gz", "gzip", "cut off"]);
    }
    for text in ["", "   \n\n", "* only a comment\n"] {
        says(&deck(text).expect_err("empty"), &["t.sp", "no SPICE"]);
    }
}

#[test]
fn broken_text_is_placed_to_the_column() {
    for (text, wanted) in [
        (".param a = \n", "t.sp:1:11"),
        (".param a = 1 b\n", "t.sp:1:14"),
        (".param a = {1 + \n", "t.sp:1:16"),
        (".model nx nmos level=54 vth0\n", "t.sp:1:25"),
        (".modle nx nmos level=54\n", "did you mean `.model`?"),
        (".subckt a b c\nM1 b c\n.ends\n", "t.sp:2:1"),
        (".subckt a b c\nM1 b c c c nx w=1u\n", "no `.ends`"),
        (".ends\n", "without `.subckt`"),
        (".subckt a b b\n.ends\n", "stands twice"),
        (".subckt a b\n.ends\n.subckt A b\n.ends\n", "second time"),
        (".lib tt\n.param a=1\n", "no `.endl`"),
        (".include \"nowhere.lib\"\n", "nowhere.lib"),
        ("Z1 a b c\n", "want an element"),
        (".param a = 'f(1'\n", "t.sp:1"),
    ] {
        says(&deck(text).expect_err(text), &[wanted]);
    }
    let sections = [Source::from_text("t.lib", ".lib tt\n.param a=1\n.endl\n.lib ff\n.param a=2\n.endl\n")];
    says(&read_deck(&sections, &DeckOptions::default()).expect_err("no section chosen"), &["tt, ff"]);
    let e = read_deck(&sections, &DeckOptions::default().section("fff")).expect_err("wrong section");
    says(&e, &["section `fff`", "did you mean `ff`?"]);
}

#[test]
fn cards_that_mean_nothing_are_refused() {
    for (from, to, wanted) in [
        ("vth0={0.38+dv}", "vht0={0.38+dv}", "did you mean `vth0`?"),
        ("level=54 version=4.5 binunit=1", "level=49 version=4.5 binunit=1", "only BSIM4"),
        ("level=54 version=4.5 binunit=1", "level=54 version=5.0 binunit=1", "versions 4.0 to 4.8"),
        ("level=54 version=4.5 binunit=1", "version=4.5 binunit=1", "no `level`"),
        ("{0.38+dv}", "{0.38+dw}", "parameter `dw` is not defined; did you mean `dv`?"),
        ("{0.38+dv}", "{0.38/0}", "finite number"),
        ("{0.38+dv}", "{squirt(2)}", "function `squirt`"),
        (".param dv = 0.0", ".param dv = {dv}", "through itself"),
        ("toxe=2n", "toxe=-2n", "t.lib"),
        ("toxe=2n", "toxe=-2n", "`toxe` is -0.000000002; want a value above 0"),
        ("igcmod=1", "igcmod=7", "want 0, 1 or 2"),
        ("igcmod=1", "igcmod=1 mtrlmod=2", "want 0 (silicon and oxide) or 1 (described)"),
        ("igcmod=1", "igcmod=1 mtrlmod=1 bg0sub=0.04", "band gap"),
        ("igcmod=1", "igcmod=1 mtrlmod=1 eot=0", "`eot` is 0"),
        ("igcmod=1", "igcmod=1 rdsmod=2", "want 0 (inside the channel equation) or 1 (in series)"),
        ("igcmod=1", "igcmod=1 mobmod=7", "want 0 to 6"),
        ("lmin=50n", "lmin=500n", "no bin covers it"),
        (".model nx.0 nmos", ".model nx.0 njf", "nmos or pmos"),
        (".model nx.0 nmos", ".model ny.0 nmos", "did you mean"),
        ("toxref=2n", "toxref=-1", "above 0"),
        ("toxe=2n", "toxe=2n xj=1n lxj=-1", "`xj of model `nx` at this size`"),
        ("toxe=2n", "toxe=2n geomod=11", "want 0 to 10"),
        ("bigsd=2e-3", "bigsd=1e30", "not a finite number"),
        (".model px pmos", ".model nx.0 pmos", "second time"),
    ] {
        assert!(CARDS.contains(from), "{from}");
        says(&card(&CARDS.replacen(from, to, 1)).expect_err(to), &[wanted]);
    }
}

#[test]
fn what_is_not_computed_is_said() {
    let p = Process::read(
        "x",
        &[Source::from_text("t.lib", &CARDS.replace("toxe=2n", "toxe=2n rsh=10 rgeomod=1 rbodymod=1"))],
        &DeckOptions::default(),
    )
    .expect("cards");
    let t = Kelvin::from_celsius(25.0).expect("fine");
    let codes = |params: &[(&str, f64)]| {
        let mut notes = Vec::new();
        p.transistor(&request(params), t, &mut notes).expect("device");
        notes.into_iter().map(|n| n.code).collect::<Vec<_>>()
    };
    let with = codes(&[("w", 1e-6), ("l", 60e-9), ("nrs", 1.0), ("colour", 3.0)]);
    assert!(
        with.contains(&"diffusion-resistance".into())
            && with.contains(&"body-resistance".into())
            && with.contains(&"instance-parameter".into()),
        "{with:?}"
    );
    let computed = [("w", 1e-6), ("l", 60e-9), ("nrd", 1.0), ("nrs", 1.0)];
    assert_eq!(codes(&computed), ["body-resistance"]);
}

#[test]
fn impossible_devices_are_refused_with_the_netlist_line() {
    let p = process();
    let t = Kelvin::from_celsius(25.0).expect("fine");
    for (params, wanted) in [
        (vec![("w", -1e-6), ("l", 60e-9)], "width"),
        (vec![("w", 0.65), ("l", 0.15)], "scale"),
        (vec![("w", 1e-6), ("l", 60e-9), ("nf", 0.5)], "fingers"),
        (vec![("w", 1e-6), ("l", 60e-9), ("m", 0.0)], "`m` is 0"),
        (vec![("w", 1e-6), ("l", 60e-9), ("ad", -1e-12)], "ad"),
        (vec![("w", f64::NAN), ("l", 60e-9)], "width"),
        (vec![("w", 1e-6), ("l", 20e-9)], "no bin covers it; the nearest is L 0.0500"),
    ] {
        let e = p.transistor(&request(&params), t, &mut Vec::new()).expect_err("impossible");
        says(&e, &["net.sp:7:3", wanted]);
    }
    let hot = Kelvin::from_celsius(900.0).expect_err("too hot").to_string();
    assert!(hot.contains("900") && hot.contains("-100 to 300"));
}

fn cells(text: &str, rails: &RailNames, name: &str) -> Result<(), ReadError> {
    let p = process();
    let d = deck(text)?;
    let reader = CellReader { deck: &d, rails, is_device: &|n| p.defines(n) };
    let cell = Arc::new(reader.cell(name, &mut Vec::new())?);
    BoundCell::new(&cell, &p, Kelvin::from_celsius(25.0).expect("fine"), 0.0, &mut DeviceShelf::default())?;
    Ok(())
}

#[test]
fn cells_that_cannot_work_are_refused() {
    let rails = RailNames::default();
    cells(CELLS, &rails, "nand2").expect("the good one");
    for (from, to, name, wanted) in [
        (
            "VPW nx w=0.4u l=60n ad",
            "VPW nz w=0.4u l=60n ad",
            "inv",
            "t.sp:3:1: model `nz` is not defined; did you mean `nx`?",
        ),
        ("m1 Y A n1 VPW", "m1 Y zz n1 VPW", "nand2", "node `zz` of cell `nand2` is driven by nothing"),
        ("w=0.5u l=60n ad=0.06p as=0.03p", "w=-0.5u l=60n ad=0.06p as=0.03p", "nand2", "width"),
        ("xg G gn VDD VSS VNW VPW inv", "xg G gn VDD VSS VNW VPW inw", "latch", "did you mean `inv`?"),
        ("xg G gn VDD VSS VNW VPW inv", "xg G gn VDD VSS VNW inv", "latch", "gives 5 nodes to `inv`; want 6"),
        ("", "", "nand4", "cell `nand4` is not defined; did you mean `nand2`?"),
    ] {
        says(&cells(&CELLS.replacen(from, to, 1), &rails, name).expect_err(to), &[wanted]);
    }
    let wrong = RailNames { supply: vec!["VDDX".into()], ..RailNames::default() };
    says(
        &cells(CELLS, &wrong, "inv").expect_err("no such port"),
        &["no port named VDDX", "did you mean `VDD`?"],
    );
    let cut: String = CELLS.chars().take(CELLS.len() / 2).collect();
    says(&cells(&cut, &rails, "inv").expect_err("cut off"), &["t.sp:"]);
}

#[test]
fn a_well_without_a_port_is_global_and_said() {
    let p = process();
    let d = deck(&CELLS.replace(".subckt inv A Y VDD VSS VNW VPW", ".subckt inv A Y VDD VSS VNW"))
        .expect("cells");
    let rails = RailNames::default();
    let reader = CellReader { deck: &d, rails: &rails, is_device: &|n| p.defines(n) };
    let mut notes = Vec::new();
    let cell = reader.cell("inv", &mut notes).expect("good");
    assert_eq!(cell.ports.last().map(|p| &**p), Some("VPW"));
    assert!(notes.iter().any(|n| n.code == "global-rail" && n.text.contains("`VPW`")));
}

#[test]
fn masters_without_netlist_need_a_policy() {
    let p = process();
    let d = deck(CELLS).expect("cells");
    let rails = RailNames::default();
    let reader = CellReader { deck: &d, rails: &rails, is_device: &|n| p.defines(n) };
    let mut counts = InstanceCounts { top: "chip".into(), ..InstanceCounts::default() };
    counts.add("inv", 10);
    counts.add("nand22", 3);
    let none = indexmap::IndexMap::new();
    let e = build_block(&counts, &reader, &none, &indexmap::IndexMap::new(), &mut Vec::new())
        .expect_err("unmapped");
    says(&e, &["3 instances", "`nand22` ×3", "nearest netlist: `nand2`", "policy"]);
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 400, ..ProptestConfig::default() })]

    #[test]
    fn no_text_panics_the_reader(text in "[ -~\\n]{0,300}") {
        let _ = deck(&text);
    }

    #[test]
    fn no_mutation_of_good_cards_panics(at in 0usize..3000, put in "[ -~\\n]{0,6}", cut in 0usize..40) {
        let at = at.min(CARDS.len());
        let mut text = CARDS[..at].to_owned();
        text.push_str(&put);
        text.push_str(CARDS.get(at + cut..).unwrap_or(""));
        let _ = card(&text);
    }
}

#[test]
fn a_netlist_cut_at_every_byte_is_an_error_or_right() {
    let p = process();
    let rails = RailNames::default();
    for n in 0..CELLS.len() {
        if let Ok(d) = deck(&CELLS[..n]) {
            let reader = CellReader { deck: &d, rails: &rails, is_device: &|m| p.defines(m) };
            for name in ["inv", "nand2", "latch"] {
                let _ = reader.cell(name, &mut Vec::new());
            }
        }
    }
}

/// Bins must leave one card for every size: a gap and an overlap are both said, with the bins.
#[test]
fn bins_that_overlap_or_leave_a_gap_are_refused() {
    let two = |l0: &str| {
        let n = CARDS.find(".model px").expect("two cards");
        let first = CARDS[..n].replace("lmax=10u", "lmax=60n");
        let body = &CARDS[CARDS.find(".model nx.0").expect("bin")..n];
        let second = body.replace(".model nx.0", ".model nx.1").replace("lmin=50n", l0);
        format!("{first}{second}{}", &CARDS[n..])
    };
    for (l0, wanted) in [
        ("lmin=60n", None),
        ("lmin=55n", Some("bins `nx.0` and `nx.1` both cover it")),
        ("lmin=70n", Some("no bin covers it; the nearest is")),
    ] {
        let text = two(l0);
        let p =
            Process::read("x", &[Source::from_text("t.lib", &text)], &DeckOptions::default()).expect("cards");
        let at = |l: f64| {
            let t = Kelvin::from_celsius(25.0).expect("fine");
            p.transistor(&request(&[("w", 1e-6), ("l", l)]), t, &mut Vec::new())
        };
        assert!(at(52e-9).is_ok() && at(80e-9).is_ok(), "{l0}");
        match (wanted, at(if l0 == "lmin=55n" { 57e-9 } else { 60e-9 })) {
            (None, made) => assert!(made.is_ok()),
            // the upper edge of the last bin below a gap still belongs to it
            (Some(wanted), _) if l0 == "lmin=70n" => {
                says(&at(65e-9).expect_err("gap"), &[wanted, "net.sp:7:3"]);
            }
            (Some(wanted), made) => says(&made.expect_err("overlap"), &[wanted, "net.sp:7:3"]),
        }
    }
}
