//! Cells of netlists awake and kept: an invented process, and the open SKY130 kit (Apache-2.0) where it lies beside the project.

#![expect(clippy::print_stdout, reason = "skips and measured numbers are said aloud")]

mod common;

use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use common::{CELLS, process};
use hushrail::awake::AwakeError;
use hushrail::awake::keep::{Collapse, CollapseSide, Mismatch, Need, Population, hold, loops, retention};
use hushrail::awake::leaks::leaks_at;
use hushrail::awake::margin::{AtRails, margins};
use hushrail::block::{BoundBlock, build_block};
use hushrail::cell::{BoundCell, CellReader, DeviceShelf, Levels, RailNames};
use hushrail::circuit::newton::SolveOptions;
use hushrail::device::process::Process;
use hushrail::physics::Kelvin;
use hushrail::read::counts::read_counts_csv;
use hushrail::read::spice::read_deck;
use hushrail::read::{DeckOptions, Source};
use hushrail::standby::{ClampSpec, Scheme, SwitchSpec, WellTie, settle};
use indexmap::IndexMap;

const HEADER: Collapse =
    Collapse { side: CollapseSide::Header, nwell: WellTie::Virtual, pwell: WellTie::Virtual };

fn celsius(c: f64) -> Kelvin {
    Kelvin::from_celsius(c).expect("in range")
}

fn rails() -> RailNames {
    let list = |n: &str| vec![n.to_owned()];
    RailNames { nwell: list("VNW"), pwell: list("VPW"), ..RailNames::default() }
}

fn latch(text: &str, temp_c: f64) -> BoundCell {
    let deck = read_deck(&[Source::from_text("cells.sp", text)], &DeckOptions::default()).expect("netlist");
    let (p, rails) = (process(), rails());
    let is_device = |n: &str| p.defines(n);
    let reader = CellReader { deck: &deck, rails: &rails, is_device: &is_device };
    let cell = Arc::new(reader.cell("latch", &mut Vec::new()).expect("cell"));
    BoundCell::new(&cell, &p, celsius(temp_c), 0.0, &mut DeviceShelf::default()).expect("bound")
}

fn drv(cell: &BoundCell, need: &Need) -> f64 {
    retention(cell, "c", 1.0, &HEADER, &[], need, &SolveOptions::default(), &|| false)
        .expect("holds")
        .retention_v
}

const BARE: Need = Need { margin_v: 0.0, population: None };

/// A latch holds with its gate low and is transparent with it high; with mismatch its retention voltage rises with the number
/// of bits and falls with the size of its devices (Pelgrom's law).
#[test]
fn latch_is_found_by_its_own_loop_and_its_retention_voltage_falls_with_size() {
    let o = SolveOptions::default();
    let cell = latch(CELLS, 25.0);
    let full = Levels::powered(1.0);
    let l = loops(&cell, &full, &[], &o).expect("holds");
    assert_eq!(l.iter().map(|l| l.inputs.as_str()).collect::<Vec<_>>(), ["D=0 G=0", "D=1 G=0"]);
    let e = loops(&cell, &full, &[("G".into(), true)], &o).expect_err("transparent");
    assert!(matches!(&e, AwakeError::StoresNothing { given, .. } if given == " with G=1"), "{e}");
    let margin = |v: f64| hold(&cell, &l[0], &HEADER.levels(1.0, v), None, &o).expect("solved").margin_v;
    let row = [0.2, 0.4, 0.6, 1.0].map(margin);
    assert!(row.windows(2).all(|w| w[1] > w[0]), "{row:?}");
    // hold margin about VDD/2 less a few thermal voltages (reference sheet A23): between a fifth and a half of 1 V
    assert!((0.2..0.5).contains(&row[3]), "{row:?}");
    // no gate has gain below 2·vT·ln 2 (reference sheet B10.1)
    let bare = drv(&cell, &BARE);
    assert!(bare > 35.6e-3 && bare < 0.5, "{bare}");
    let need = |bits| Need {
        margin_v: 0.0,
        population: Some(Population { mismatch: Mismatch { n_v_m: 2e-9, p_v_m: 2e-9 }, bits, failing: 1e-3 }),
    };
    let wide = latch(&CELLS.replace("w=0.4u", "w=1.6u").replace("w=0.6u", "w=2.4u"), 25.0);
    let (small, large) = (drv(&cell, &need(1e6)), drv(&wide, &need(1e6)));
    assert!(large < small && drv(&cell, &need(1.0)) < small, "{small} {large}");
}

#[test]
fn nand_is_worst_over_its_side_inputs() {
    let o = SolveOptions::default();
    let deck = read_deck(&[Source::from_text("cells.sp", CELLS)], &DeckOptions::default()).expect("netlist");
    let (p, rails) = (process(), rails());
    let is_device = |n: &str| p.defines(n);
    let reader = CellReader { deck: &deck, rails: &rails, is_device: &is_device };
    let cell = Arc::new(reader.cell("nand2", &mut Vec::new()).expect("cell"));
    let b = BoundCell::new(&cell, &p, celsius(25.0), 0.0, &mut DeviceShelf::default()).expect("bound");
    let at = AtRails { cell: &b, levels: Levels::powered(1.0) };
    let m = margins(at, at, &o).expect("curves");
    assert_eq!(m.paths.len(), 2);
    let nml = m.paths.iter().map(|p| p.unity.expect("gain").vil_v).fold(1.0, f64::min)
        - m.paths.iter().map(|p| p.unity.expect("gain").vol_v).fold(0.0, f64::max);
    assert!((m.nml_v.expect("gain") - nml).abs() < 1e-12);
    assert!(m.square.expect("pair").margin_v > 0.1);
    let latch = latch(CELLS, 25.0);
    let at = AtRails { cell: &latch, levels: Levels::powered(1.0) };
    // a transparent latch passes D on; that is a path that does not depend on what is stored
    assert!(margins(at, at, &o).expect("curves").paths.iter().all(|p| p.input == "D" && p.others == "G=1"));
}

#[test]
fn a_wider_clamp_leaves_more_and_leaks_what_its_level_says() {
    let deck = read_deck(&[Source::from_text("cells.sp", CELLS)], &DeckOptions::default()).expect("netlist");
    let (p, rails) = (process(), rails());
    let is_device = |n: &str| p.defines(n);
    let reader = CellReader { deck: &deck, rails: &rails, is_device: &is_device };
    let counts =
        read_counts_csv(&Source::from_text("n.csv", "cell,count\ninv,3000\nlatch,500\n")).expect("counts");
    let block =
        build_block(&counts, &reader, &IndexMap::new(), &IndexMap::new(), &mut Vec::new()).expect("block");
    let t = celsius(25.0);
    let b = BoundBlock::new(&block, &p, t, 1.0, &mut DeviceShelf::default(), &SolveOptions::default())
        .expect("bound");
    let spec = |width_m| SwitchSpec::new("px", width_m, 60e-9);
    let stop = AtomicBool::new(false);
    let origin = Arc::from("test");
    let real = Collapse { nwell: WellTie::Real, ..HEADER };
    let at = |w| {
        let scheme = Scheme {
            header: Some(spec(1e-7)),
            header_clamp: Some(ClampSpec { device: spec(w), gate_v: None }),
            ..Scheme::default()
        };
        let rest =
            settle(&scheme, &b, &p, t, 1.0, &mut DeviceShelf::default(), &origin, &stop).expect("settles");
        assert!(rest.residual < 1e-6);
        // the current found there is the one that a clamp level is charged with
        let (leak, _) = leaks_at(&b, &real, 1.0, rest.virtual_supply_v, &stop).expect("solved");
        let drawn: f64 = rest.block.supply.iter().sum();
        assert!((leak / drawn - 1.0).abs() < 1e-9);
        rest.virtual_supply_v
    };
    let (narrow, wide) = (at(2e-6), at(2e-5));
    // a wider diode gives the rail more: about a swing per decade of width (reference sheet A19)
    assert!(wide > narrow + 0.03 && wide < narrow + 0.3, "{narrow} {wide}");
    let boosted = ClampSpec { device: SwitchSpec { boost_v: 0.1, ..spec(1e-6) }, gate_v: None };
    assert!(boosted.check("clamp").is_err());
    assert!(ClampSpec { device: spec(1e-6), gate_v: Some(9.0) }.check("clamp").is_err());
}

fn sky130() -> Option<(Process, PathBuf)> {
    let dir = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../../../shared/data/sky130");
    if !dir.is_dir() {
        println!("skipped: the open data set is not beside the project");
        return None;
    }
    let files = [
        "cards/continuous_leak.spice",
        "cards/diode/sky130_fd_pr__model__parasitic__diode_ps2nw.model.spice",
    ];
    let sources = files.map(|f| Source::open(&dir.join(f)).expect("card"));
    let p = Process::read("ff", &sources, &DeckOptions::default()).expect("cards");
    let p = [
        ("nfet_01v8", "sky130_fd_pr__nfet_01v8"),
        ("pfet_01v8_hvt", "sky130_fd_pr__pfet_01v8_hvt"),
        ("nwell_psub", "sky130_fd_pr__model__parasitic__diode_ps2nw"),
    ]
    .iter()
    .fold(p, |p, (a, b)| p.alias(a, b));
    Some((p, dir))
}

/// Margins of real cells at a few rails. No published margins of the kit are at hand: what is held is that they exist, grow with
/// the rail, stay below half of it, and that the latch is lost above the floor of reference sheet B10.1.
#[test]
fn open_inverter_and_latch_hold_at_a_few_rails() {
    let Some((p, dir)) = sky130() else { return };
    let o = SolveOptions::default();
    let source = Source::open(&dir.join("netlists/geometry.spice")).expect("netlists");
    let deck = read_deck(&[source], &DeckOptions::default()).expect("netlists");
    let rails = RailNames::default();
    let is_device = |n: &str| p.defines(n);
    let reader = CellReader { deck: &deck, rails: &rails, is_device: &is_device };
    let cell = |name: &str| {
        let c = Arc::new(reader.cell(name, &mut Vec::new()).expect("cell"));
        BoundCell::new(&c, &p, celsius(25.0), 0.0, &mut DeviceShelf::default()).expect("bound")
    };
    let (inverter, latch) = (cell("sky130_fd_sc_hd__inv_1"), cell("sky130_fd_sc_hd__dlxtp_1"));
    let stored = loops(&latch, &Levels::powered(1.8), &[], &o).expect("stores");
    let mut last = (0.0, 0.0);
    for v in [0.4, 0.8, 1.2, 1.8] {
        let at = AtRails { cell: &inverter, levels: Levels::powered(v) };
        let m = margins(at, at, &o).expect("curves");
        let (nml, nmh) = (m.nml_v.expect("gain"), m.nmh_v.expect("gain"));
        let square = m.square.expect("pair").margin_v;
        let held = stored
            .iter()
            .map(|l| hold(&latch, l, &Levels::powered(v), None, &o).expect("solved").margin_v)
            .fold(f64::INFINITY, f64::min);
        println!("{v} V: inverter NML {nml:.4}, NMH {nmh:.4}, square {square:.4} V; latch holds {held:.4} V");
        assert!(square > last.0 && held > last.1 && square < 0.5 * v && held < 0.5 * v);
        assert!(nml > 0.0 && nmh > 0.0 && nml + nmh < v);
        last = (square, held);
    }
    let r = retention(&latch, "ff", 1.8, &HEADER, &[], &BARE, &o, &|| false).expect("holds");
    println!("latch: retention {:.4} V, {} decides", r.retention_v, r.decides.inputs);
    assert!(r.retention_v > 35.6e-3 && r.retention_v < 0.4, "{}", r.retention_v);
}
