//! A choice among 10,000 candidates at 25 corners. Fixed inputs, invented cards.

#[path = "../tests/common/mod.rs"]
mod common;

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicUsize};
use std::time::Duration;

use common::{CARDS, CELLS};
use criterion::{Criterion, Throughput, criterion_group, criterion_main};
use hushrail::awake::Load;
use hushrail::awake::size::LayoutDensity;
use hushrail::block::{BoundBlock, build_block};
use hushrail::cell::{CellReader, DeviceShelf, RailNames};
use hushrail::circuit::newton::SolveOptions;
use hushrail::device::process::Process;
use hushrail::optimum::choose::FreeKnob;
use hushrail::optimum::limits::ChooseLimits;
use hushrail::optimum::{ChooseSpec, Knob, Site, choose};
use hushrail::physics::Kelvin;
use hushrail::read::counts::read_counts_csv;
use hushrail::read::{DeckOptions, Source, read_deck};
use hushrail::standby::Scheme;
use hushrail::standby::scheme::SwitchSpec;
use hushrail::transition::{Segment, Start, WakeSpec};
use indexmap::IndexMap;

fn line(n: usize, lo: f64, hi: f64) -> Vec<f64> {
    (0..n).map(|k| lo + (hi - lo) * k as f64 / (n - 1) as f64).collect()
}

fn choice(c: &mut Criterion) {
    let processes: Vec<Process> = [0.04, 0.02, 0.0, -0.02, -0.04]
        .iter()
        .map(|dv| {
            let cards = CARDS.replace(".param dv = 0.0", &format!(".param dv = {dv}"));
            Process::read("x", &[Source::from_text("cards.lib", &cards)], &DeckOptions::default())
                .expect("cards")
        })
        .collect();
    let deck = read_deck(&[Source::from_text("cells.sp", CELLS)], &DeckOptions::default()).expect("cells");
    let rails = RailNames::default();
    let reader = CellReader { deck: &deck, rails: &rails, is_device: &|n| processes[0].defines(n) };
    let counts =
        read_counts_csv(&Source::from_text("n.csv", "cell,count\ninv,3000\nnand2,2000\n")).expect("counts");
    let block =
        build_block(&counts, &reader, &IndexMap::new(), &IndexMap::new(), &mut Vec::new()).expect("block");
    let origin: Arc<str> = Arc::from("bench");
    let mut at = Vec::new();
    for p in &processes {
        for t in [-40.0, 0.0, 25.0, 85.0, 125.0] {
            let temp = Kelvin::from_celsius(t).expect("in range");
            let bound =
                BoundBlock::new(&block, p, temp, 1.0, &mut DeviceShelf::default(), &SolveOptions::default());
            at.push((format!("{t}"), p, temp, bound.expect("bound")));
        }
    }
    let sites: Vec<Site<'_>> = at
        .iter()
        .map(|(corner, process, temp, block)| Site {
            corner,
            process,
            temp: *temp,
            vdd_v: 1.0,
            block,
            origin: &origin,
        })
        .collect();
    let footer = SwitchSpec {
        finger_width_m: Some(1e-6),
        diffusion_m: Some(120e-9),
        ..SwitchSpec::new("nx", 40e-6, 60e-9)
    };
    let scheme = Scheme { name: "footer".into(), footer: Some(footer), ..Scheme::default() };
    let spec = ChooseSpec {
        knobs: vec![
            FreeKnob { knob: Knob::FooterOverdrive, values: line(25, 0.0, 0.4) },
            FreeKnob { knob: Knob::FooterWidth, values: line(40, 20e-6, 200e-6) },
            FreeKnob { knob: Knob::FooterWellBias, values: line(10, 0.0, 0.5) },
        ],
        limits: ChooseLimits { droop_v: Some(0.05), oxide_v: Some(1.3), ..ChooseLimits::default() },
        load: Some(Load::Constant { current_a: 2e-3 }),
        density: Some(LayoutDensity { m2_per_m: 0.4e-6, row_overhead_m2: 2e-12, width_per_row_m: 50e-6 }),
        ..ChooseSpec::default()
    };
    let mut group = c.benchmark_group("choice");
    group.sample_size(10).measurement_time(Duration::from_secs(20));
    let waking = ChooseLimits { wake_s: Some(2e-9), in_rush_a: Some(40e-3), ..spec.limits };
    let part = |width_m: f64, start| Segment { width_m, start };
    let segments =
        vec![part(5e-6, Start::AtS(0.0)), part(15e-6, Start::AtShare(0.6)), part(20e-6, Start::AtS(2e-9))];
    let parts = WakeSpec { segments: Some(segments), ..WakeSpec::default() };
    for (name, rail_f, limits, wake) in [
        ("10,000 candidates x 25 corners", None, spec.limits, WakeSpec::default()),
        ("10,000 x 25 with limits of wake-up and in-rush", Some(20e-12), waking, WakeSpec::default()),
        ("10,000 x 25 with segments", Some(20e-12), waking, parts),
    ] {
        let spec = ChooseSpec { rail_f, limits, wake, ..spec.clone() };
        group.throughput(Throughput::Elements(spec.size() as u64 * 25));
        group.bench_function(name, |b| {
            b.iter(|| {
                let found = choose(&sites, &scheme, &spec, &AtomicUsize::new(0), &AtomicBool::new(false))
                    .expect("chosen");
                assert!(found.failed == 0);
                found.front.len()
            });
        });
    }
    group.finish();
}

criterion_group!(benches, choice);
criterion_main!(benches);
