//! Devices in series behind one gate: against the network solver, and the laws every device obeys.

mod common;

use std::sync::Arc;

use common::{process, uniform};
use hushrail::device::in_series::InSeries;
use hushrail::device::process::Request;
use hushrail::device::{Bias, Device};
use hushrail::physics::Kelvin;
use hushrail::read::Place;

fn device(model: &str, temp_c: f64) -> Arc<dyn Device> {
    let params =
        [("w", 1e-6), ("l", 60e-9), ("ad", 0.1e-12), ("as", 0.1e-12), ("pd", 1.2e-6), ("ps", 1.2e-6)];
    let r = Request {
        model: model.into(),
        params: params.iter().map(|(n, v)| (Arc::from(*n), *v)).collect(),
        at: Place::new(&Arc::from("test"), 1, 1),
    };
    process()
        .transistor(&r, Kelvin::from_celsius(temp_c).expect("fine"), &mut Vec::new())
        .expect("device")
        .device
}

/// Ideal weak-inversion devices without DIBL: `n` off devices in series leak `1/n` of one where the drain is many kT/q up and the body effect is
/// nothing (reference block B4: the resistive limit `I/n` for η = 0). The test card has both, so only the order is checked
/// here; the exact figures are those of the network solver below.
#[test]
fn more_in_series_leak_less() {
    for model in ["nx", "px"] {
        let one = device(model, 60.0);
        let s = one.polarity().sign();
        let off = |k: usize| {
            InSeries::of(&one, k).branches(Bias { vgs: 0.0, vds: s * 0.9, vbs: 0.0 }).channel_ds.abs()
        };
        let i: Vec<f64> = (1..=4).map(off).collect();
        assert!(i[1] < 0.5 * i[0] && i[2] < i[1] && i[3] < i[2], "{model}: {i:?}");
    }
}

/// What flows into the node between must flow out: checked with the single devices at the voltage that the pair's own
/// currents imply, over random biases, and the sum over terminals is zero.
#[test]
fn kirchhoff_and_symmetry_hold() {
    for model in ["nx", "px"] {
        for temp_c in [-40.0, 27.0, 125.0] {
            let one = device(model, temp_c);
            for count in [2, 3] {
                let pair = InSeries::of(&one, count);
                for k in 0..300u64 {
                    let v: [f64; 3] = std::array::from_fn(|i| 1.6 * uniform(3, 3 * k + i as u64) - 0.8);
                    let b = Bias { vgs: v[0], vds: v[1], vbs: v[2].min(0.0) * one.polarity().sign() };
                    let t = pair.branches(b).terminals();
                    let most = t.iter().fold(0.0f64, |m, i| m.max(i.abs()));
                    assert!(t.iter().all(|i| i.is_finite()), "{model} {count} {b:?}");
                    assert!(t.iter().sum::<f64>().abs() <= 1e-12 * most, "{model} {count} {b:?} {t:?}");
                }
                assert_eq!(pair.branches(Bias { vgs: 0.0, vds: 0.0, vbs: 0.0 }).terminals(), [0.0; 4]);
            }
        }
    }
}

#[test]
fn slopes_equal_differences() {
    let h = 1e-5;
    for model in ["nx", "px"] {
        let one = device(model, 60.0);
        let s = one.polarity().sign();
        let pair = InSeries::of(&one, 2);
        for (g, d, b) in
            [(0.0, 0.8, 0.0), (0.3, 0.5, -0.2), (0.9, 0.1, 0.0), (-0.2, 1.0, -0.5), (0.6, -0.4, -0.4)]
        {
            let bias = Bias { vgs: s * g, vds: s * d, vbs: s * b };
            let dual = pair.branches_dual(bias.dual()).terminals();
            for k in 0..3 {
                let at = |x: f64| {
                    let mut moved = bias;
                    match k {
                        0 => moved.vgs += x,
                        1 => moved.vds += x,
                        _ => moved.vbs += x,
                    }
                    pair.branches(moved).terminals()
                };
                let (up, down) = (at(h), at(-h));
                for t in 0..4 {
                    let slope = (up[t] - down[t]) / (2.0 * h);
                    let scale = dual[t].v.abs().max(slope.abs());
                    assert!(
                        (dual[t].d[k] - slope).abs() <= 2e-6 * scale + 1e-20,
                        "{model} {bias:?} {t} {k}: {} {slope}",
                        dual[t].d[k]
                    );
                }
            }
        }
    }
}

/// The same two transistors as a cell, solved by the network solver.
#[test]
fn a_stack_equals_the_network() {
    use hushrail::cell::{BoundCell, CellReader, DeviceShelf, Levels, RailNames};
    use hushrail::circuit::newton::{SolveOptions, Workspace};
    use hushrail::read::{DeckOptions, Source, read_deck};
    let text = "* two off n-channel devices under an on pull-up
.subckt pull A Y VDD VSS
M1 Y A VDD VDD px w=1u l=60n ad=0.1p as=0.1p pd=1.2u ps=1.2u
M2 Y A m VSS nx w=1u l=60n ad=0.1p as=0.1p pd=1.2u ps=1.2u
M3 m A VSS VSS nx w=1u l=60n ad=0.1p as=0.1p pd=1.2u ps=1.2u
.ends
";
    let deck = read_deck(&[Source::from_text("c.sp", text)], &DeckOptions::default()).expect("netlist");
    let (p, rails) = (process(), RailNames::default());
    let cell = CellReader { deck: &deck, rails: &rails, is_device: &|n| p.defines(n) }
        .cell("pull", &mut Vec::new())
        .expect("cell");
    let t = Kelvin::from_celsius(60.0).expect("fine");
    let bound = BoundCell::new(&Arc::new(cell), &p, t, 0.0, &mut DeviceShelf::default()).expect("devices");
    let state = &bound.states_with(&[false]).expect("states")[0];
    let c = bound
        .solve(state, &Levels::powered(1.0), &SolveOptions::default(), &mut Workspace::default())
        .expect("solved");
    let y = c.node_v[bound.cell.port_nodes[1]];
    let pair = InSeries::of(&device("nx", 60.0), 2);
    let i = pair.branches(Bias { vgs: 0.0, vds: y, vbs: 0.0 }).terminals();
    // into ground: source and body of the stack, and the body of nothing else
    let ground: f64 = c.ports[3].iter().sum();
    assert!((i[2] + i[3] - ground).abs() <= 2e-8 * ground.abs(), "{} {ground}", i[2] + i[3]);
}
