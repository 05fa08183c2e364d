//! One device evaluation, one state of a cell, one device made from its card. Fixed inputs, an invented card.

#[path = "../tests/common/mod.rs"]
mod common;

use std::hint::black_box;
use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use common::{CELLS, process, uniform};
use criterion::{Criterion, Throughput, criterion_group, criterion_main};
use hushrail::block::{Block, BlockCell, BoundBlock, StateWeights};
use hushrail::cell::{BoundCell, CellReader, DeviceShelf, Levels, RailNames};
use hushrail::circuit::newton::{SolveOptions, Workspace};
use hushrail::device::bulk::Width;
use hushrail::device::compact::CompactCard;
use hushrail::device::process::Request;
use hushrail::device::{Bias, Branches, Device, Geometry};
use hushrail::physics::Kelvin;
use hushrail::read::{DeckOptions, Place, Source, read_deck};
use hushrail::standby::rest::Clamps;
use hushrail::standby::scheme::SwitchSpec;
use hushrail::standby::switch::Side;
use hushrail::standby::{Scheme, Switch, rest_rails, settle_with};

/// Points of one array: within the first cache.
const POINTS: u64 = 512;

fn request() -> Request {
    Request {
        model: "nx".into(),
        params: [("w", 1e-6), ("l", 60e-9), ("ad", 1e-13), ("as", 1e-13), ("pd", 1.2e-6), ("ps", 1.2e-6)]
            .map(|(n, v)| (Arc::from(n), v))
            .to_vec(),
        at: Place::new(&Arc::from("bench"), 1, 1),
    }
}

fn device(c: &mut Criterion) {
    let p = process();
    let temp = Kelvin::from_celsius(25.0).expect("in range");
    let request = request();
    c.bench_function("device from card", |b| {
        b.iter(|| p.transistor(black_box(&request), temp, &mut Vec::new()).expect("device"));
    });
    let dev = p.transistor(&request, temp, &mut Vec::new()).expect("device").device;
    let off = Bias { vgs: -0.1, vds: 1.0, vbs: 0.0 };
    c.bench_function("BSIM4 currents", |b| b.iter(|| dev.branches(black_box(off))));
    c.bench_function("BSIM4 currents and slopes", |b| b.iter(|| dev.branches_dual(black_box(off).dual())));
}

/// Bias points all over the field of a device, one at a time and in lanes of each width.
fn lanes(c: &mut Criterion) {
    let temp = Kelvin::from_celsius(25.0).expect("in range");
    let biases: Vec<Bias<f64>> = (0..POINTS)
        .map(|k| {
            let [g, d, b] = [0, 1, 2].map(|i| uniform(5, 3 * k + i));
            Bias { vgs: 1.7 * g - 0.6, vds: 1.1 * d, vbs: 1.1 * b - 1.0 }
        })
        .collect();
    let mut out = vec![Branches::zero(); biases.len()];
    let g = Geometry { ad_m2: 1e-13, as_m2: 1e-13, pd_m: 1.2e-6, ps_m: 1.2e-6, ..Geometry::new(1e-6, 45e-9) };
    let card = CompactCard::generic("generic 45 nm low power n").expect("known");
    let compact = card.device(&g, temp).expect("device");
    let bsim4 = process().transistor(&request(), temp, &mut Vec::new()).expect("device").device;
    for (name, device) in [("compact", &compact as &dyn Device), ("BSIM4", &*bsim4)] {
        let mut group = c.benchmark_group(format!("{name}, {POINTS} points"));
        group.throughput(Throughput::Elements(POINTS));
        group.bench_function("one at a time", |b| {
            b.iter(|| {
                for (b, o) in biases.iter().zip(&mut out) {
                    *o = device.branches(*b);
                }
            });
        });
        group.bench_function("in lanes", |b| b.iter(|| device.branches_many(black_box(&biases), &mut out)));
        group.finish();
    }
    let mut group = c.benchmark_group(format!("compact by width, {POINTS} points"));
    group.throughput(Throughput::Elements(POINTS));
    for width in [Width::Avx512, Width::Avx2, Width::Portable] {
        group.bench_function(format!("{width:?}"), |b| {
            b.iter(|| compact.branches_with(black_box(&biases), &mut out, width));
        });
    }
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

/// The rest point of a block of three kinds of cells from its curve: the root, and with all books. The bar is 20 µs.
fn rest_on_curve(c: &mut Criterion) {
    let p = process();
    let temp = Kelvin::from_celsius(25.0).expect("in range");
    let header =
        SwitchSpec { overdrive_v: 0.1, diffusion_m: Some(1e-7), ..SwitchSpec::new("px", 2e-5, 6e-8) };
    let scheme = Scheme { header: Some(header.clone()), ..Scheme::ungated("header") };
    let deck = read_deck(&[Source::from_text("cells.sp", CELLS)], &DeckOptions::default()).expect("cells");
    let reader = CellReader { deck: &deck, rails: &RailNames::default(), is_device: &|name| p.defines(name) };
    let cells = ["inv", "nand2", "latch"].map(|name| BlockCell {
        master: name.into(),
        cell: Arc::new(reader.cell(name, &mut Vec::new()).expect("cell")),
        count: 100,
        weights: StateWeights::Uniform,
        powered: false,
    });
    let block = Block { cells: cells.to_vec(), ..Block::default() };
    let mut shelf = DeviceShelf::default();
    let bound = BoundBlock::new(&block, &p, temp, 1.0, &mut shelf, &SolveOptions::default()).expect("block");
    let stop = AtomicBool::new(false);
    let curve = scheme.curve(&bound, 1.0, 1e-3, &stop).expect("curve");
    let switch =
        Switch::new(&header, Side::Header, &p, temp, 1.0, &mut shelf, &Arc::from("bench")).expect("switch");
    c.bench_function("rest point on a curve", |b| {
        b.iter(|| {
            rest_rails(&scheme, black_box(&curve), 1.0, Some(switch.clone()), None, Clamps::default(), &stop)
                .expect("rest")
        });
    });
    c.bench_function("rest point on a curve, all books", |b| {
        b.iter(|| {
            settle_with(&scheme, black_box(&curve), 1.0, Some(switch.clone()), None, &stop).expect("rest")
        });
    });
    c.bench_function("rest point by the block itself", |b| {
        b.iter(|| {
            rest_rails(&scheme, black_box(&bound), 1.0, Some(switch.clone()), None, Clamps::default(), &stop)
                .expect("rest")
        });
    });
}

criterion_group!(benches, device, lanes, cell, rest_on_curve);
criterion_main!(benches);
