//! Wake-ups worked out by integrals against the same integrated in time.

mod common;

use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use common::{CARDS, CELLS};
use hushrail::block::{BlockCurve, BoundBlock, Parts, build_block};
use hushrail::cell::{CellReader, DeviceShelf, RailNames};
use hushrail::circuit::newton::SolveOptions;
use hushrail::device::process::Process;
use hushrail::physics::Kelvin;
use hushrail::read::counts::read_counts_csv;
use hushrail::read::{DeckOptions, Source, read_deck};
use hushrail::standby::scheme::SwitchSpec;
use hushrail::standby::switch::Side;
use hushrail::standby::{Scheme, Switch};
use hushrail::transition::{
    Gated, Package, Segment, Start, TransitionError, WakeShelf, WakeSpec, WakeSummary, wake_up,
};
use indexmap::IndexMap;

/// What the two may differ by, relative: the integration in time is good to about 1e-7 itself.
const TOLERANCE: f64 = 1e-6;
const C: f64 = 20e-12;

struct Corner {
    process: Process,
    temp: Kelvin,
    block: BoundBlock,
}

fn corner(dv: f64, temp_c: f64) -> Corner {
    let cards = CARDS.replace(".param dv = 0.0", &format!(".param dv = {dv}"));
    let process = Process::read("x", &[Source::from_text("cards.lib", &cards)], &DeckOptions::default())
        .expect("cards");
    let deck = read_deck(&[Source::from_text("cells.sp", CELLS)], &DeckOptions::default()).expect("cells");
    let counts =
        read_counts_csv(&Source::from_text("n.csv", "cell,count\ninv,3000\nnand2,2000\n")).expect("counts");
    let temp = Kelvin::from_celsius(temp_c).expect("in range");
    let block = {
        let rails = RailNames::default();
        let reader = CellReader { deck: &deck, rails: &rails, is_device: &|n| process.defines(n) };
        let block = build_block(&counts, &reader, &IndexMap::new(), &IndexMap::new(), &mut Vec::new());
        let (block, shelf) = (block.expect("block"), &mut DeviceShelf::default());
        BoundBlock::new(&block, &process, temp, 1.0, shelf, &SolveOptions::default()).expect("bound")
    };
    Corner { process, temp, block }
}

fn scheme(model: &str, side: Side, width_m: f64) -> Scheme {
    let spec = SwitchSpec { finger_width_m: Some(1e-6), ..SwitchSpec::new(model, width_m, 60e-9) };
    let mut s = Scheme::ungated("gated");
    *(if side == Side::Header { &mut s.header } else { &mut s.footer }) = Some(spec);
    s
}

fn spec_of(s: &mut Scheme) -> &mut SwitchSpec {
    s.header.as_mut().or(s.footer.as_mut()).expect("a switch")
}

impl Corner {
    fn curve(&self, s: &Scheme) -> BlockCurve {
        let parts = Parts::new(&self.block, &s.parked, s.zigzag, 1.0).expect("parts");
        s.curve(&parts, 1.0, 1e-3, &AtomicBool::new(false)).expect("curve")
    }
    fn switch(&self, s: &Scheme) -> Switch {
        let (spec, side) = match (&s.header, &s.footer) {
            (Some(x), _) => (x, Side::Header),
            (None, x) => (x.as_ref().expect("a switch"), Side::Footer),
        };
        let (shelf, origin) = (&mut DeviceShelf::default(), &Arc::from("test"));
        Switch::new(spec, side, &self.process, self.temp, 1.0, shelf, origin).expect("switch")
    }
}

fn same(got: &WakeSummary, g: &Gated<'_>, spec: &WakeSpec, what: &str) {
    let wake = wake_up(g, spec).unwrap_or_else(|e| panic!("{what}: {e}"));
    let want = WakeSummary::of(&wake, g);
    let near = |a: f64, b: f64, which: &str| {
        assert!(
            (a - b).abs() <= TOLERANCE * b.abs(),
            "{what}: {which} {a:e}, integrated {b:e}: {:e}",
            a / b - 1.0
        );
    };
    near(got.ready_s, want.ready_s, "ready");
    near(got.rail_ready_s, want.rail_ready_s, "rail ready");
    near(got.peak_a, want.peak_a, "peak");
    // the integrated rows go on after the rail is ready, to the full rail at most
    assert!(got.oxide_v <= want.oxide_v + TOLERANCE && want.oxide_v - got.oxide_v <= 0.05, "{what}: oxide");
    assert!(got.drain_bulk_v <= want.drain_bulk_v + 0.05, "{what}: drain to bulk");
}

#[test]
fn integrals_give_what_the_integration_in_time_gives() {
    let ways = |width_m: f64, share: f64| {
        let part = |k: f64, start| Segment { width_m: k * width_m / 8.0, start };
        let plan = |all: Vec<Segment>| WakeSpec { segments: Some(all), ..WakeSpec::default() };
        vec![
            ("at once", WakeSpec::default()),
            ("within a thousandth", WakeSpec { ready_within: 1e-3, ..WakeSpec::default() }),
            ("from a given span", WakeSpec { from_span_v: Some(0.3), ..WakeSpec::default() }),
            (
                "shares",
                plan(vec![
                    part(1.0, Start::AtS(0.0)),
                    part(2.0, Start::AtShare(share)),
                    part(5.0, Start::AtShare(0.9)),
                ]),
            ),
            (
                "times",
                plan(vec![
                    part(1.0, Start::AtS(1e-10)),
                    part(3.0, Start::AtS(4e-10)),
                    part(4.0, Start::AtS(7e-10)),
                ]),
            ),
            ("a late segment", plan(vec![part(4.0, Start::AtS(0.0)), part(4.0, Start::AtS(2e-7))])),
            (
                "both",
                plan(vec![
                    part(1.0, Start::AtS(0.0)),
                    part(3.0, Start::AtShare(0.8)),
                    part(4.0, Start::AtS(3e-9)),
                ]),
            ),
        ]
    };
    let mut count = 0;
    for (dv, temp_c) in [(0.0, 25.0), (-0.04, 125.0), (0.04, -40.0)] {
        let c = corner(dv, temp_c);
        for (model, side) in [("nx", Side::Footer), ("px", Side::Header), ("nx", Side::Header)] {
            let curve = c.curve(&scheme(model, side, 40e-6));
            let mut shelf = WakeShelf::new(&curve);
            for (width_m, over, boost, well) in [
                (40e-6, 0.0, 0.0, 0.0),
                (80e-6, 0.2, 0.1, 0.0),
                (200e-6, 0.3, 0.0, 0.4),
                (40e-6, 0.4, 0.5, 0.0),
            ] {
                let mut s = scheme(model, side, width_m);
                let x = spec_of(&mut s);
                (x.overdrive_v, x.boost_v, x.well_bias_v) = (over, boost, well);
                let switch = c.switch(&s);
                let g = Gated::new(&s, &curve, &switch, C).expect("domain");
                for (name, spec) in ways(width_m, 0.6) {
                    let what = format!(
                        "{model} {side:?} dv {dv} {temp_c} °C {width_m} {over} {boost} {well}, {name}"
                    );
                    match shelf.quick(&g, &spec, None) {
                        Ok(Some(got)) => {
                            same(&got, &g, &spec, &what);
                            count += 1;
                        }
                        // the n-channel header's gate takes more from an empty rail than its channel gives
                        Ok(None) => assert!(model == "nx" && side == Side::Header, "{what}: not covered"),
                        // an n-channel header reaches a threshold below its supply only
                        Err(e) => {
                            let want = wake_up(&g, &spec).expect_err("neither");
                            let parts = |e: &TransitionError| match e {
                                TransitionError::NotReady { at_v, time_s, wanted_v, gives_a, draws_a } => {
                                    [*at_v, *time_s, *wanted_v, *gives_a, *draws_a]
                                }
                                e => panic!("{what}: {e}"),
                            };
                            for (a, b) in parts(&e).iter().zip(parts(&want)) {
                                assert!((a - b).abs() <= 1e-5 * b.abs(), "{what}: {e}; integrated: {want}");
                            }
                        }
                    }
                }
            }
        }
    }
    assert!(count > 150, "{count} compared");
}

#[test]
fn what_the_integral_does_not_cover_is_integrated() {
    let c = corner(0.0, 25.0);
    let s = scheme("nx", Side::Footer, 40e-6);
    let (curve, switch) = (c.curve(&s), c.switch(&s));
    let g = Gated::new(&s, &curve, &switch, C).expect("domain");
    let mut shelf = WakeShelf::new(&curve);
    let package = Package { inductance_h: 1e-9, resistance_ohm: 0.1, decoupling_f: 1e-9 };
    for (name, spec) in [
        ("slew", WakeSpec { gate_slew_s: 1e-9, ..WakeSpec::default() }),
        ("package", WakeSpec { package: Some(package), ..WakeSpec::default() }),
    ] {
        assert!(shelf.quick(&g, &spec, None).expect("covered or not").is_none(), "{name}");
        let got = shelf.wake(&g, &spec, None).expect("awake");
        assert_eq!(got, WakeSummary::of(&wake_up(&g, &spec).expect("awake"), &g), "{name}");
    }
    // a shelf of another curve does not answer for this domain
    let other = c.curve(&s);
    assert!(WakeShelf::new(&other).quick(&g, &WakeSpec::default(), None).expect("refused").is_none());
    // a time at which it is given up
    let spec = WakeSpec { give_up_s: Some(1e-12), ..WakeSpec::default() };
    let (got, want) = (shelf.wake(&g, &spec, None).expect_err("late"), wake_up(&g, &spec).expect_err("late"));
    assert_eq!(got.to_string(), want.to_string());
    let spec = WakeSpec { ready_within: 1.5, ..WakeSpec::default() };
    assert_eq!(shelf.wake(&g, &spec, None).expect_err("range"), wake_up(&g, &spec).expect_err("range"));
}
