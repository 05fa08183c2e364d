//! States of a netlist: cell functions against their published truth, values and probabilities against brute force, a search
//! against all vectors.

mod common;

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicUsize};

use common::{CELLS, process};
use hushrail::cell::{BoundCell, CellReader, DeviceShelf, RailNames};
use hushrail::physics::Kelvin;
use hushrail::read::spice::DeckOptions;
use hushrail::read::verilog::connect::{CellPorts, ConnectOptions, Connected, Direction, Port, connect};
use hushrail::read::{Input, Source, read_deck};
use hushrail::states::probability::{Held, Parking, ParkingError, carry, probabilities};
use hushrail::states::{CellFunction, Circuit, SearchSpec, Values, search, shares};
use indexmap::IndexMap;
use proptest::prelude::*;

fn celsius(c: f64) -> Kelvin {
    Kelvin::from_celsius(c).expect("in range")
}

fn rails() -> RailNames {
    let list = |n: &str| vec![n.to_owned()];
    RailNames { nwell: list("VNW"), pwell: list("VPW"), ..RailNames::default() }
}

fn functions() -> IndexMap<String, Arc<CellFunction>> {
    let deck = read_deck(&[Source::from_text("cells.sp", CELLS)], &DeckOptions::default()).expect("netlist");
    let (p, rails) = (process(), rails());
    let is_device = |n: &str| p.defines(n);
    let reader = CellReader { deck: &deck, rails: &rails, is_device: &is_device };
    let mut shelf = DeviceShelf::default();
    ["inv", "nand2", "latch"]
        .into_iter()
        .map(|name| {
            let cell = Arc::new(reader.cell(name, &mut Vec::new()).expect("cell"));
            let bound = BoundCell::new(&cell, &p, celsius(25.0), 0.0, &mut shelf).expect("bound");
            (name.to_owned(), Arc::new(CellFunction::of(&bound).expect("function")))
        })
        .collect()
}

struct Ports<'a>(&'a IndexMap<String, Arc<CellFunction>>);

impl CellPorts for Ports<'_> {
    fn ports(&self, cell: &str) -> Option<Vec<Port>> {
        let f = self.0.get(cell)?;
        let inputs = f.inputs.iter().map(|n| Port::new(n, Direction::Input));
        Some(inputs.chain(f.outputs.iter().map(|o| Port::new(&o.name, Direction::Output))).collect())
    }
}

fn netlist(text: &str, f: &IndexMap<String, Arc<CellFunction>>) -> Connected {
    let mut inputs = [Input::from(Source::from_text("top.v", text))];
    connect(&mut inputs, None, &Ports(f), &ConnectOptions::default()).unwrap_or_else(|e| panic!("{e}"))
}

fn circuit(net: &Connected, f: &IndexMap<String, Arc<CellFunction>>) -> Circuit {
    Circuit::new(net, "", &|name| f.get(name).cloned()).unwrap_or_else(|e| panic!("{e}"))
}

#[test]
fn functions_are_those_of_the_cells_names() {
    let f = functions();
    let bits = |name: &str, o: usize| f[name].outputs[o].table.clone();
    assert_eq!(bits("inv", 0), [Some(true), Some(false)]);
    assert_eq!(bits("nand2", 0), [Some(true), Some(true), Some(true), Some(false)]);
    assert_eq!((f["inv"].keeps, f["nand2"].keeps), (None, None));
    let latch = &f["latch"];
    let kept = latch.keeps.expect("a latch keeps");
    let vars = latch.inputs.len();
    // wherever the two values of what is kept give different outputs, the output is the kept value
    let table = &latch.outputs[kept].table;
    let holds: Vec<usize> = (0..1 << vars).filter(|c| table[*c] != table[c | 1 << vars]).collect();
    assert!(!holds.is_empty() && holds.len() < 1 << vars, "it holds for some inputs and is open for others");
    assert!(holds.iter().all(|c| table[*c] == Some(false) && table[c | 1 << vars] == Some(true)));
    assert!(latch.states.iter().all(|s| !s.is_empty()));
}

/// A chain of random gates, as Verilog.
fn random_text(gates: &[(bool, usize, usize)], inputs: usize) -> String {
    let ports: Vec<String> = (0..inputs).map(|k| format!("i{k}")).collect();
    let net = |k: usize| if k < inputs { format!("i{k}") } else { format!("n{}", k - inputs) };
    let ports = ports.join(", ");
    let wires = (0..gates.len()).map(|k| format!(" wire n{k};\n"));
    // in reverse, so that the order of the netlist is no help
    let cells = gates.iter().enumerate().rev().map(|(k, (nand, a, b))| {
        let (a, b) = (net(a % (inputs + k)), net(b % (inputs + k)));
        if *nand {
            format!(" nand2 g{k} (.A({a}), .B({b}), .Y(n{k}));\n")
        } else {
            format!(" inv g{k} (.A({a}), .Y(n{k}));\n")
        }
    });
    let body: String = wires.chain(cells).collect();
    format!("module top ({ports});\n input {ports};\n{body}endmodule\n")
}

/// All nets of all input vectors, by the definition of the gates.
fn truth(gates: &[(bool, usize, usize)], inputs: usize, vector: usize) -> Vec<bool> {
    let mut v: Vec<bool> = (0..inputs).map(|k| vector >> k & 1 == 1).collect();
    for (k, (nand, a, b)) in gates.iter().enumerate() {
        let (a, b) = (v[a % (inputs + k)], v[b % (inputs + k)]);
        v.push(if *nand { !(a && b) } else { !a });
    }
    v
}

fn gates() -> impl Strategy<Value = Vec<(bool, usize, usize)>> {
    prop::collection::vec((any::<bool>(), 0usize..64, 0usize..64), 1..25)
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 40, ..ProptestConfig::default() })]

    #[test]
    fn values_probabilities_and_searches_agree_with_brute_force(gates in gates()) {
        let f = functions();
        let inputs = 4;
        let net = netlist(&random_text(&gates, inputs), &f);
        let c = circuit(&net, &f);
        let id = |name: &str| net.net(name).map(|n| n.0);
        let names: Vec<String> =
            (0..inputs).map(|k| format!("i{k}")).chain((0..gates.len()).map(|k| format!("n{k}"))).collect();
        // sixty-four vectors at once
        let mut v = Values::new(&c);
        for (k, name) in names.iter().take(inputs).enumerate() {
            let word = (0..64u64).fold(0, |w, lane| w | (lane >> k & 1) << lane);
            if let Some(n) = id(name) {
                v.rails[n as usize] = [!word, word];
            }
        }
        v.propagate();
        for vector in 0..16usize {
            for (name, want) in names.iter().zip(truth(&gates, inputs, vector)) {
                if let Some(n) = id(name).filter(|n| *n as usize >= 4) {
                    let got = v.rails[n as usize].map(|w| w >> vector & 1);
                    prop_assert_eq!(got, [u64::from(!want), u64::from(want)], "{} at {}", name, vector);
                }
            }
        }
        // an unknown input: what is said to be known is so for both of its values
        let mut part = Values::new(&c);
        for name in names.iter().take(inputs).skip(1) {
            if let Some(n) = id(name) {
                part.set(n, Some(true));
            }
        }
        part.propagate();
        let both = [truth(&gates, inputs, 0b1110), truth(&gates, inputs, 0b1111)];
        for (k, name) in names.iter().enumerate().skip(inputs) {
            if let Some(known) = id(name).and_then(|n| part.first(n)) {
                prop_assert!(both.iter().all(|t| t[k] == known), "{}", name);
            }
        }
        // states of given inputs are the states of the truth
        let held = |vector: usize| {
            let mut given = vec![None; c.net_count];
            for (k, name) in names.iter().take(inputs).enumerate() {
                if let Some(n) = id(name) {
                    given[n as usize] = Some(Held::Value(vector >> k & 1 == 1));
                }
            }
            given
        };
        let leaks: Vec<Vec<f64>> = c
            .functions
            .iter()
            .map(|f| (0..1usize << f.vars()).map(|code| 1.0 + (code * 7 % 5) as f64 + f.vars() as f64).collect())
            .collect();
        let of = |vector: usize| -> f64 {
            let t = truth(&gates, inputs, vector);
            let mut sum = 0.0;
            for (k, (nand, a, b)) in gates.iter().enumerate() {
                let (a, b) = (t[a % (inputs + k)], t[b % (inputs + k)]);
                let name = if *nand { "nand2" } else { "inv" };
                let place = c.functions.iter().position(|f| f.name == name).expect("there");
                let code = if *nand { usize::from(a) | usize::from(b) << 1 } else { usize::from(a) };
                sum += leaks[place][code];
            }
            sum
        };
        for vector in [0usize, 5, 15] {
            let p = carry(&c, &held(vector));
            let s = shares(&net, &p);
            prop_assert_eq!(s.certainty.known, gates.len() as u64);
            let total: f64 = s.weights.values().flatten().sum();
            prop_assert!((total - gates.len() as f64).abs() < 1e-9);
        }
        // the search finds the least of all vectors
        let free: Vec<u32> = names.iter().take(inputs).filter_map(|n| id(n)).filter(|n| *n >= 4).collect();
        let (done, stop) = (AtomicUsize::new(0), AtomicBool::new(false));
        let spec = SearchSpec { flips: 60, ..SearchSpec::default() };
        let found = search(&c, &leaks, &[], &free, &spec, &done, &stop);
        let least = (0..16).map(of).fold(f64::INFINITY, f64::min);
        prop_assert!((found.leak - least).abs() < 1e-9, "{} {}", found.leak, least);
        prop_assert!(found.bound <= found.leak + 1e-9 && found.leak <= found.random_mean + 1e-9);
        let again = search(&c, &leaks, &[], &free, &spec, &done, &stop);
        prop_assert_eq!(again, found);
    }
}

/// Without reconvergence the probabilities of independent inputs are exact.
#[test]
fn probabilities_of_a_tree_are_products() {
    let f = functions();
    let text = "module top (a, b, c, d, y); input a, b, c, d; output y;
      nand2 g0 (.A(a), .B(b), .Y(m)); nand2 g1 (.A(c), .B(d), .Y(n)); nand2 g2 (.A(m), .B(n), .Y(y)); endmodule";
    let net = netlist(text, &f);
    let c = circuit(&net, &f);
    let mut parking = Parking::default();
    for (name, p) in [("a", 0.2), ("b", 0.5), ("c", 0.9)] {
        parking.nets.insert(name.into(), p);
    }
    let p = probabilities(&net, &c, "", &parking).expect("known names");
    let at = |name: &str| p.one[net.net(name).expect("net").0 as usize];
    assert!((at("m") - (1.0 - 0.2 * 0.5)).abs() < 1e-15);
    assert!((at("n") - (1.0 - 0.9 * 0.5)).abs() < 1e-15);
    assert!((at("y") - (1.0 - at("m") * at("n"))).abs() < 1e-15);
    let s = shares(&net, &p);
    // g0 rests on given numbers, g1 and g2 on the half assumed for d
    assert_eq!((s.certainty.known, s.certainty.probable, s.certainty.assumed), (0, 1, 2));
    let w = &s.weights["nand2"];
    assert!((w.iter().sum::<f64>() - 3.0).abs() < 1e-12);
}

#[test]
fn loops_stay_unknown_until_an_input_decides() {
    let f = functions();
    let text = "module top (r, s, q); input r, s; output q;
      nand2 g0 (.A(s), .B(qn), .Y(q)); nand2 g1 (.A(r), .B(q), .Y(qn)); inv g2 (.A(q), .Y(z)); endmodule";
    let net = netlist(text, &f);
    let c = circuit(&net, &f);
    assert!(c.notes.iter().any(|n| n.code == "closed-loops"));
    let mut v = Values::new(&c);
    let n = |name: &str| net.net(name).expect("net").0;
    for name in ["r", "s"] {
        v.set(n(name), Some(true));
    }
    v.propagate();
    assert_eq!((v.first(n("q")), v.first(n("z"))), (None, None));
    v.set(n("s"), Some(false));
    v.propagate();
    assert_eq!((v.first(n("q")), v.first(n("qn")), v.first(n("z"))), (Some(true), Some(false), Some(false)));
    // and back: what was known is not remembered
    v.set(n("s"), Some(true));
    v.propagate();
    assert_eq!(v.first(n("q")), None);
}

#[test]
fn kept_values_enter_as_registers() {
    let f = functions();
    let latch = &f["latch"];
    let pins: Vec<String> = latch.inputs.iter().map(|p| format!(".{p}(i_{p})")).collect();
    let ports: Vec<String> = latch.inputs.iter().map(|p| format!("i_{p}")).collect();
    let q = &latch.outputs[latch.keeps.expect("keeps")].name;
    let text = format!(
        "module top ({0}, y); input {0}; output y; latch keep (.{q}(k), {1}); inv g (.A(k), .Y(y)); endmodule",
        ports.join(", "),
        pins.join(", ")
    );
    let net = netlist(&text, &f);
    let c = circuit(&net, &f);
    assert_eq!(c.source_names(&net, true), ["keep"]);
    // inputs at which it holds
    let vars = latch.inputs.len();
    let table = &latch.outputs[latch.keeps.expect("keeps")].table;
    let code = (0..1usize << vars).find(|c| table[*c] != table[c | 1 << vars]).expect("holds");
    let mut parking = Parking::default();
    for (k, p) in latch.inputs.iter().enumerate() {
        parking.nets.insert(format!("i_{p}"), f64::from(u8::from(code >> k & 1 == 1)));
    }
    let unknown = probabilities(&net, &c, "", &parking).expect("names");
    assert_eq!(shares(&net, &unknown).certainty.assumed, 2);
    parking.registers.insert("*".into(), 1.0);
    let p = probabilities(&net, &c, "", &parking).expect("names");
    assert_eq!(p.one[net.net("y").expect("net").0 as usize], 0.0);
    assert_eq!(shares(&net, &p).certainty.known, 2);
}

#[test]
fn names_that_are_not_there_are_refused_with_a_neighbour() {
    let f = functions();
    let net =
        netlist("module top (reset, y); input reset; output y; inv g (.A(reset), .Y(y)); endmodule", &f);
    let c = circuit(&net, &f);
    let mut parking = Parking::default();
    parking.nets.insert("rest".into(), 1.0);
    let e = probabilities(&net, &c, "", &parking).expect_err("unknown");
    assert!(matches!(&e, ParkingError::Unknown { near: Some(n), .. } if n == "reset"), "{e}");
    let mut parking = Parking::default();
    parking.nets.insert("reset".into(), 1.5);
    assert!(probabilities(&net, &c, "", &parking).expect_err("range").to_string().contains("want 0 to 1"));
    let e = Circuit::new(&net, "nowhere", &|n| f.get(n).cloned()).expect_err("path").to_string();
    assert!(e.contains("nowhere"), "{e}");
}
