//! One device evaluation, one state of a cell, one device made from its card. Fixed inputs, an invented card.

#[path = "../tests/common/mod.rs"]
mod common;

use std::hint::black_box;
use std::sync::Arc;

use common::{CELLS, process};
use criterion::{Criterion, criterion_group, criterion_main};
use hushrail::cell::{BoundCell, CellReader, DeviceShelf, Levels, RailNames};
use hushrail::circuit::newton::{SolveOptions, Workspace};
use hushrail::device::Bias;
use hushrail::device::process::Request;
use hushrail::physics::Kelvin;
use hushrail::read::{DeckOptions, Place, Source, read_deck};

fn device(c: &mut Criterion) {
    let p = process();
    let temp = Kelvin::from_celsius(25.0).expect("in range");
    let request = Request {
        model: "nx".into(),
        params: [("w", 1e-6), ("l", 60e-9), ("ad", 1e-13), ("as", 1e-13), ("pd", 1.2e-6), ("ps", 1.2e-6)]
            .map(|(n, v)| (Arc::from(n), v))
            .to_vec(),
        at: Place::new(&Arc::from("bench"), 1, 1),
    };
    c.bench_function("device from card", |b| {
        b.iter(|| p.transistor(black_box(&request), temp, &mut Vec::new()).expect("device"));
    });
    let dev = p.transistor(&request, temp, &mut Vec::new()).expect("device").device;
    let off = Bias { vgs: -0.1, vds: 1.0, vbs: 0.0 };
    c.bench_function("BSIM4 currents", |b| b.iter(|| dev.branches(black_box(off))));
    c.bench_function("BSIM4 currents and slopes", |b| b.iter(|| dev.branches_dual(black_box(off).dual())));
}

fn cell(c: &mut Criterion) {
    let p = process();
    let deck = read_deck(&[Source::from_text("cells.sp", CELLS)], &DeckOptions::default()).expect("cells");
    let rails = RailNames::default();
    let reader = CellReader { deck: &deck, rails: &rails, is_device: &|n| p.defines(n) };
    let temp = Kelvin::from_celsius(25.0).expect("in range");
    let options = SolveOptions::default();
    let levels = Levels::powered(1.1);
    for name in ["inv", "nand2", "latch"] {
        let cell = Arc::new(reader.cell(name, &mut Vec::new()).expect("cell"));
        let bound = BoundCell::new(&cell, &p, temp, 0.0, &mut DeviceShelf::default()).expect("bound");
        let states = bound.states().expect("states");
        let mut w = Workspace::default();
        c.bench_function(&format!("all states of {name} ({})", states.len()), |b| {
            b.iter(|| {
                for s in &states {
                    black_box(bound.solve(s, &levels, &options, &mut w).expect("solved"));
                }
            });
        });
    }
}

criterion_group!(benches, device, cell);
criterion_main!(benches);
