//! Awake switches: resistance, droop, width, neighbours. Reference sheet B9 unless said otherwise.

mod common;

use std::sync::Arc;

use common::{channel_device, process};
use hushrail::awake::droop::{neighbour_step, resistor, settle_droop, settle_switches};
use hushrail::awake::resistance::{merit_figure, on_point};
use hushrail::awake::size::{LayoutDensity, SizeCorner, smallest_switch};
use hushrail::awake::{AwakeError, Load};
use hushrail::cell::DeviceShelf;
use hushrail::device::dual::Real;
use hushrail::device::{Bias, Branches, Polarity};
use hushrail::physics::Kelvin;
use hushrail::standby::SwitchSpec;
use hushrail::standby::switch::{Side, Switch};

/// Long channel: `I = k·(Vov·Vds − Vds²/2)` up to `Vds = Vov`, constant beyond.
#[derive(Debug, Clone)]
struct SquareLaw {
    k: f64,
    threshold_v: f64,
}

impl SquareLaw {
    fn law<R: Real>(&self, b: Bias<R>) -> Branches<R> {
        let over = b.vgs - self.threshold_v;
        let i = if over.val() <= 0.0 {
            R::of(0.0)
        } else if b.vds.val() < over.val() {
            (over * b.vds - b.vds.sq() * 0.5) * self.k
        } else {
            over.sq() * (0.5 * self.k)
        };
        Branches { channel_ds: i, ..Branches::zero() }
    }
}

channel_device!(SquareLaw, |_| Polarity::N, |_| 25.85e-3);

/// A footer at 1 V with 0.55 V overdrive awake.
fn footer(k: f64) -> Switch {
    Switch {
        device: Arc::new(SquareLaw { k, threshold_v: 0.45 }),
        fingers: 1.0,
        side: Side::Footer,
        rail_v: 0.0,
        gate_v: 0.0,
        awake_gate_v: 1.0,
        vdd_v: 1.0,
        body_v: 0.0,
        awake_body_v: 0.0,
    }
}

/// B9.1, B9.2: exact to the printed digits.
#[test]
fn resistance_of_a_long_channel_is_the_textbook_one() {
    let s = footer(300e-6 * 1e-3 / 60e-9);
    let r = on_point(&s, 0.0).expect("on");
    assert!(
        (r.chord_ohm - 0.363636).abs() < 5e-7 && (r.slope_ohm.expect("rises") - 0.363636).abs() < 5e-7,
        "{r:?}"
    );
    let r = on_point(&s, 0.05).expect("on");
    assert!((r.chord_ohm - 0.380952).abs() < 5e-7, "{r:?}");
    // dI/dV = k·(Vov − Vds)
    assert!((r.slope_ohm.expect("rises") - 1.0 / (5.0 * 0.5)).abs() < 1e-12, "{r:?}");
}

/// B9.3: W/L of the rule droops more than asked by the Vx/2 term; with it the droop is met.
#[test]
fn droop_of_the_sized_switch_is_the_one_it_was_sized_for() {
    let load = Load::Constant { current_a: 10e-3 };
    let droop = |w_over_l: f64| {
        let s = footer(300e-6 * w_over_l);
        settle_switches(&load, None, Some(&s)).expect("settles").0.droop_v
    };
    // to the six digits of the sheet's W/L
    assert!((droop(1673.20) / 37.5e-3 - 1.0).abs() < 3e-6, "{}", droop(1673.20));
    assert!(droop(1616.16) > 38.8e-3);
}

/// B9.4 within 1e-5.
#[test]
fn load_that_falls_with_its_rail_droops_less() {
    let load = Load::AlphaPower { current_a: 0.1, threshold_v: 0.3, alpha: 1.3 };
    for (ohm, want) in [(0.25, 23.8963e-3), (0.5, 45.7904e-3), (1.0, 84.5846e-3)] {
        let d = settle_droop(&load, 1.0, &resistor(ohm)).expect("settles");
        assert!((d.droop_v / want - 1.0).abs() < 1e-5, "{ohm}: {d:?}");
        assert!((d.unanswered_v.expect("carried") - 0.1 * ohm).abs() < 1e-12, "{d:?}");
    }
    // proportional: V·R/(R + VDD/I) by hand
    let d = settle_droop(&Load::Proportional { current_a: 0.1 }, 1.0, &resistor(1.0)).expect("settles");
    assert!((d.droop_v - 1.0 / 11.0).abs() < 1e-14, "{d:?}");
}

#[test]
fn tables_and_profiles_are_read_as_they_stand() {
    let table = Load::Table { rail_v: vec![0.8, 0.9, 1.0], current_a: vec![0.05, 0.08, 0.1] };
    // between 0.9 and 1.0 V: I = 0.08 + 0.2·(V − 0.9); with R = 1: d = 0.1 − 0.2·d
    let d = settle_droop(&table, 1.0, &resistor(1.0)).expect("settles");
    assert!((d.droop_v - 0.1 / 1.2).abs() < 1e-14, "{d:?}");
    let profile = Load::Profile { time_s: vec![0.0, 1e-9, 4e-9], current_a: vec![0.1, 0.02, 0.0] };
    let d = settle_droop(&profile, 1.0, &resistor(0.5)).expect("settles");
    assert!((d.droop_v - 0.05).abs() < 1e-14, "{d:?}");
    assert!((d.average_v.expect("profile") - 0.5 * (0.1 + 3.0 * 0.02) / 4.0).abs() < 1e-14, "{d:?}");
}

#[test]
fn load_that_no_switch_carries_is_told_by_how_much() {
    // square law at 0.55 V overdrive: k/2·0.3025 at most
    let s = footer(0.1);
    let e = settle_switches(&Load::Constant { current_a: 0.02 }, None, Some(&s)).expect_err("too much");
    let AwakeError::Overloaded { load_a, given_a, factor, .. } = &e else { panic!("{e}") };
    assert!((given_a - 0.05 * 0.3025).abs() < 1e-12 && *load_a == 0.02, "{e}");
    assert!((factor - 0.02 / (0.05 * 0.3025)).abs() < 1e-9, "{e}");
    assert!(e.to_string().contains("short by 4.875e-3 A"), "{e}");
}

#[test]
fn neighbour_on_a_shared_switch_is_felt_through_its_resistance() {
    let load = Load::Constant { current_a: 0.01 };
    let n = neighbour_step(&load, 0.02, 1.0, &resistor(0.5)).expect("settles");
    assert!((n.noise_v - 0.01).abs() < 1e-14 && (n.before_v - 0.005).abs() < 1e-14, "{n:?}");
    // a victim that draws less on a lower rail feels less
    let n =
        neighbour_step(&Load::Proportional { current_a: 1.0 }, 0.02, 1.0, &resistor(0.5)).expect("settles");
    assert!((n.noise_v - 0.01 / 1.5).abs() < 1e-14, "{n:?}");
}

fn spec(model: &str, width_m: f64) -> SwitchSpec {
    SwitchSpec { finger_width_m: Some(2e-6), ..SwitchSpec::new(model, width_m, 60e-9) }
}

fn celsius(c: f64) -> Kelvin {
    Kelvin::from_celsius(c).expect("in range")
}

#[test]
fn width_is_the_first_whole_finger_that_meets_the_budget_at_the_worst_corner() {
    let p = process();
    let origin: Arc<str> = "test".into();
    let corners: Vec<SizeCorner> = [("cold", -40.0, 1.0), ("hot", 125.0, 1.0), ("low", 25.0, 0.8)]
        .map(|(name, c, vdd_v)| SizeCorner { name, process: &p, temp: celsius(c), vdd_v })
        .into();
    let load = Load::Constant { current_a: 2e-3 };
    let density = LayoutDensity { m2_per_m: 1e-6, row_overhead_m2: 2e-12, width_per_row_m: 50e-6 };
    for (model, side) in [("px", Side::Header), ("nx", Side::Footer)] {
        let s = smallest_switch(&spec(model, 2e-2), side, &load, 0.05, &corners, Some(&density), &origin)
            .expect("sized");
        assert_eq!(s.corner, "low");
        // one finger fewer breaks the budget at the deciding corner, and no corner breaks it as it is
        let droop = |n: f64| {
            let made = Switch::new(
                &spec(model, n * 2e-6),
                side,
                &p,
                celsius(25.0),
                0.8,
                &mut DeviceShelf::default(),
                &origin,
            )
            .expect("switch");
            settle_droop(&load, 0.8, &|d| made.awake_current(d).0).expect("settles").droop_v
        };
        assert!(droop(s.fingers) <= 0.05 && droop(s.fingers - 1.0) > 0.05, "{s:?}");
        assert!(s.corners.iter().all(|c| c.droop_v <= 0.05), "{s:?}");
        assert!((s.width_m - s.fingers * 2e-6).abs() < 1e-15);
        let rows = (s.width_m / 50e-6).ceil();
        assert!((s.area_m2.expect("density") - (s.width_m * 1e-6 + rows * 2e-12)).abs() < 1e-24);
        // a boosted gate needs fewer
        let boosted = SwitchSpec { boost_v: 0.3, ..spec(model, 2e-2) };
        let b = smallest_switch(&boosted, side, &load, 0.05, &corners, None, &origin).expect("sized");
        assert!(b.fingers < s.fingers, "{b:?}");
    }
    let e = smallest_switch(&spec("nx", 2e-5), Side::Footer, &load, 0.05, &corners, None, &origin)
        .expect_err("too small")
        .to_string();
    assert!(e.contains("at corner `low`") && e.contains("fingers") && e.contains("are needed"), "{e}");
    let narrow = SwitchSpec { finger_width_m: Some(2e-6), ..spec("nx", 1e-6) };
    let e = smallest_switch(&narrow, Side::Footer, &load, 0.05, &corners, None, &origin)
        .expect_err("narrower than a finger")
        .to_string();
    assert!(e.contains("finger width") && e.contains("not above the whole width"), "{e}");
    for bad in [0.0, -0.1, 0.9, f64::NAN] {
        let e = smallest_switch(&spec("nx", 1e-3), Side::Footer, &load, bad, &corners, None, &origin)
            .expect_err("budget");
        assert!(e.to_string().contains("droop budget"), "{e}");
    }
}

#[test]
fn merit_falls_with_boost_and_with_overdrive_until_gidl() {
    let p = process();
    let candidates = [(spec("nx", 1e-4), Side::Footer), (spec("px", 1e-4), Side::Header)];
    let (over, boost) = ([0.0, 0.05, 0.1, 0.2, 0.3, 0.5, 0.8], [0.0, 0.2]);
    let (origin, hot) = ("test".into(), celsius(125.0));
    let grid = merit_figure(&candidates, &over, &boost, 0.02, &p, hot, 1.0, &origin).expect("figure");
    assert_eq!(grid.len(), 2 * over.len() * 2);
    let at = |k: usize, o: usize, b: usize| &grid[(k * over.len() + o) * 2 + b];
    for k in 0..2 {
        assert!(at(k, 0, 1).on_ohm < at(k, 0, 0).on_ohm && at(k, 0, 1).off_a == at(k, 0, 0).off_a);
        let best = (0..over.len())
            .min_by(|&i, &j| at(k, i, 0).merit_v.total_cmp(&at(k, j, 0).merit_v))
            .expect("a grid");
        assert!(best > 0, "super cut-off pays");
        assert!(at(k, over.len() - 1, 0).merit_v > at(k, best, 0).merit_v, "until GIDL takes over");
        assert!((at(k, 5, 0).oxide_v - 1.5).abs() < 1e-12 && (at(k, 0, 1).oxide_v - 1.2).abs() < 1e-12);
    }
    // the product does not depend on width
    let wide = [(spec("nx", 3e-4), Side::Footer)];
    let w = merit_figure(&wide, &over[..1], &boost[..1], 0.02, &p, hot, 1.0, &origin).expect("figure");
    assert!((w[0].merit_v / at(0, 0, 0).merit_v - 1.0).abs() < 1e-12);
    let bad = SwitchSpec { finger_width_m: Some(1.0), ..spec("nx", 1e-4) };
    let e = merit_figure(&[(bad, Side::Footer)], &over, &boost, 0.0, &p, celsius(25.0), 1.0, &origin)
        .expect_err("finger");
    assert!(e.to_string().contains("candidate 1 finger width"), "{e}");
}

#[test]
fn header_and_footer_share_the_droop_by_their_currents() {
    let p = process();
    let (mut shelf, origin) = (DeviceShelf::default(), Arc::from("test"));
    let mut make = |model, side, w| {
        Switch::new(&spec(model, w), side, &p, celsius(25.0), 1.0, &mut shelf, &origin).expect("switch")
    };
    let (h, f) = (make("px", Side::Header, 4e-5), make("nx", Side::Footer, 2e-5));
    let load = Load::Proportional { current_a: 1e-3 };
    let (d, over_h, over_f) = settle_switches(&load, Some(&h), Some(&f)).expect("settles");
    assert!((over_h + over_f - d.droop_v).abs() < 1e-15);
    for i in [h.awake_current(over_h).0, f.awake_current(over_f).0] {
        assert!((i / d.current_a - 1.0).abs() < 1e-9, "{i} {d:?}");
    }
    let alone = settle_switches(&load, Some(&h), None).expect("settles").0;
    assert!(alone.droop_v < d.droop_v);
    assert!(settle_switches(&load, None, None).is_err());
}

#[test]
fn impossible_loads_are_refused() {
    for (load, wanted) in [
        (Load::Constant { current_a: -1.0 }, "load current"),
        (Load::Constant { current_a: f64::NAN }, "load current"),
        (Load::AlphaPower { current_a: 1.0, threshold_v: 1.0, alpha: 1.3 }, "threshold of the load"),
        (Load::AlphaPower { current_a: 1.0, threshold_v: 0.3, alpha: 0.0 }, "alpha"),
        (Load::Table { rail_v: vec![1.0, 0.5], current_a: vec![0.0, 0.0] }, "rising"),
        (Load::Profile { time_s: vec![0.0], current_a: vec![0.0] }, "two or more"),
    ] {
        let e = settle_droop(&load, 1.0, &resistor(1.0)).expect_err(wanted).to_string();
        assert!(e.contains(wanted), "{e}");
    }
    assert!(on_point(&footer(1.0), 1.5).is_err());
    let off = Switch { awake_gate_v: 0.2, ..footer(1.0) };
    assert!(on_point(&off, 0.1).expect_err("off").to_string().contains("gate level that turns it on"));
}
