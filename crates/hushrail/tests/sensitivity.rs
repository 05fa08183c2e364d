//! Exact sensitivities against re-computation with slightly different devices.

mod common;

use std::sync::Arc;

use common::{CARDS, CELLS};
use hushrail::cell::{BoundCell, CellReader, DeviceShelf, Levels, RailNames};
use hushrail::circuit::newton::{SolveOptions, Workspace};
use hushrail::device::process::{Process, Request};
use hushrail::device::sensitivity::Knob;
use hushrail::device::{Bias, Device};
use hushrail::physics::Kelvin;
use hushrail::read::{DeckOptions, Place, Source, read_deck};

fn process(cards: &str) -> Process {
    Process::read("x", &[Source::from_text("c.lib", cards)], &DeckOptions::default()).expect("cards")
}

fn request(model: &str, w: f64, l: f64) -> Request {
    let params = [("w", w), ("l", l), ("ad", 1e-13), ("as", 1e-13), ("pd", 1.2e-6), ("ps", 1.2e-6)];
    Request {
        model: model.into(),
        params: params.map(|(n, v)| (Arc::from(n), v)).to_vec(),
        at: Place::new(&Arc::from("t"), 1, 1),
    }
}

#[test]
fn device_slopes_equal_differences_of_remade_devices() {
    let p = process(CARDS);
    for (model, sign) in [("nx", 1.0), ("px", -1.0)] {
        let make = |cards: &str, w: f64, l: f64, t: f64| -> Arc<dyn Device> {
            let temp = Kelvin::from_celsius(t).expect("fine");
            process(cards).transistor(&request(model, w, l), temp, &mut Vec::new()).expect("device").device
        };
        let varied = p
            .varied(&request(model, 1e-6, 70e-9), Kelvin::from_celsius(50.0).expect("fine"), &mut Vec::new())
            .expect("device");
        for vgs in [-0.5, 0.0, 0.3, 1.0] {
            let bias = Bias { vgs: sign * vgs, vds: sign * 0.9, vbs: sign * -0.2 };
            let exact = varied.log_slopes(bias).expect("current");
            let id = |d: &dyn Device| d.branches(bias).terminals()[0];
            let nominal = id(&*make(CARDS, 1e-6, 70e-9, 50.0));
            let slope = |up: f64, down: f64, h: f64| (up - down) / (2.0 * h) / nominal;
            for knob in Knob::ALL {
                let got = exact[knob as usize];
                let want = match knob {
                    Knob::Threshold => {
                        let cards = |d: f64| CARDS.replace(".param dv = 0.0", &format!(".param dv = {d:e}"));
                        let at = |d: f64| id(&*make(&cards(d), 1e-6, 70e-9, 50.0));
                        slope(at(1e-5), at(-1e-5), 1e-5)
                    }
                    Knob::Length => slope(
                        id(&*make(CARDS, 1e-6, 70.001e-9, 50.0)),
                        id(&*make(CARDS, 1e-6, 69.999e-9, 50.0)),
                        1e-12,
                    ),
                    Knob::Width => slope(
                        id(&*make(CARDS, 1.00001e-6, 70e-9, 50.0)),
                        id(&*make(CARDS, 0.99999e-6, 70e-9, 50.0)),
                        1e-11,
                    ),
                    Knob::Temperature => slope(
                        id(&*make(CARDS, 1e-6, 70e-9, 50.001)),
                        id(&*make(CARDS, 1e-6, 70e-9, 49.999)),
                        1e-3,
                    ),
                    Knob::Oxide => {
                        // toxm follows toxe when the card is rewritten, so it is given first
                        let base = CARDS
                            .replace("toxe=2n", "toxe=2n toxm=2n")
                            .replace("toxe=2.1n", "toxe=2.1n toxm=2.1n");
                        let cards = |d: f64| {
                            base.replace("toxe=2n", &format!("toxe={:e}", 2e-9 + d))
                                .replace("toxe=2.1n", &format!("toxe={:e}", 2.1e-9 + d))
                        };
                        let at = |d: f64| id(&*make(&cards(d), 1e-6, 70e-9, 50.0));
                        slope(at(1e-14), at(-1e-14), 1e-14)
                    }
                };
                // differences carry about 1e-5 of their own
                assert!(
                    (got - want).abs() <= 1e-4 * want.abs() + 1e-3,
                    "{model} {vgs} {knob:?}: {got} {want}"
                );
            }
        }
    }
}

#[test]
fn cell_slopes_follow_the_node_voltages() {
    let deck = read_deck(&[Source::from_text("cells.sp", CELLS)], &DeckOptions::default()).expect("cells");
    let rails = RailNames::default();
    let (options, mut w) = (SolveOptions::default(), Workspace::default());
    let bound = |cards: &str, name: &str, temp_c: f64| {
        let p = process(cards);
        let reader = CellReader { deck: &deck, rails: &rails, is_device: &|n| p.defines(n) };
        let cell = Arc::new(reader.cell(name, &mut Vec::new()).expect("cell"));
        let t = Kelvin::from_celsius(temp_c).expect("fine");
        BoundCell::new(&cell, &p, t, 0.0, &mut DeviceShelf::default()).expect("bound")
    };
    for name in ["inv", "nand2", "latch"] {
        let cell = bound(CARDS, name, 40.0);
        let cards = |d: f64| CARDS.replace(".param dv = 0.0", &format!(".param dv = {d:e}"));
        let others = [
            (bound(&cards(1e-4), name, 40.0), bound(&cards(-1e-4), name, 40.0), Knob::Threshold, 1e-4),
            (bound(CARDS, name, 40.01), bound(CARDS, name, 39.99), Knob::Temperature, 1e-2),
        ];
        for (k, state) in cell.states().expect("states").iter().enumerate() {
            let levels = Levels::powered(1.0);
            let s = cell.sensitivity(&process(CARDS), state, &levels, &options, &mut w).expect("slopes");
            let mut current = |c: &BoundCell, vdd: f64| {
                let state = &c.states().expect("states")[k];
                c.sensitivity(&process(CARDS), state, &Levels::powered(vdd), &options, &mut w)
                    .expect("solved")
                    .current_a
            };
            for (up, down, knob, h) in &others {
                let want = (current(up, 1.0) - current(down, 1.0)) / (2.0 * h) / s.current_a;
                let got = s.d_ln[*knob as usize];
                assert!(
                    (got - want).abs() <= 2e-3 * want.abs() + 1e-4,
                    "{name} {} {knob:?}: {got} {want}",
                    state.label
                );
            }
            let want = (current(&cell, 1.0005) - current(&cell, 0.9995)) / 1e-3 / s.current_a;
            assert!((s.d_ln_supply - want).abs() <= 1e-3 * want.abs(), "{name} {}: {want}", state.label);
        }
    }
}
