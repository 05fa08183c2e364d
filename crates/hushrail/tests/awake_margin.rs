//! Noise margins, delay and kept state on idealised devices. Reference sheet B9 and B10 unless said otherwise.

mod common;

use std::convert::Infallible;
use std::sync::Arc;

use common::{AllRegion, Symmetric, channel_device, own_inverter, own_pair, room, weak};
use hushrail::awake::AwakeError;
use hushrail::awake::curve::CurvePoint;
use hushrail::awake::delay::{Swing, delay_penalty};
use hushrail::awake::keep::{
    Collapse, CollapseSide, Mismatch, Need, Population, hold, loops, retention, sigmas,
};
use hushrail::awake::margin::{AtRails, margins};
use hushrail::awake::square::butterfly;
use hushrail::cell::{BoundCell, Levels};
use hushrail::circuit::newton::SolveOptions;
use hushrail::device::dual::Real;
use hushrail::device::{Bias, Branches, Device, Polarity};
use hushrail::physics::Kelvin;
use hushrail::standby::WellTie;

const HEADER: Collapse =
    Collapse { side: CollapseSide::Header, nwell: WellTie::Virtual, pwell: WellTie::Virtual };

fn pair(n: f64) -> BoundCell {
    let two = |p| [weak(p, n), weak(p, n)];
    own_pair(&two(Polarity::N), &two(Polarity::P), room())
}

/// B10.3 and B10.4 within 0.5 %: of two inverters between them, and of the loop cut open.
#[test]
fn weak_inversion_margins_are_those_of_the_sheet() {
    let o = SolveOptions::default();
    for (n, row) in [
        (1.0, [(0.10, 25.73e-3), (0.15, 50.38e-3), (0.20, 75.33e-3), (0.30, 125.32e-3)]),
        (1.4, [(0.10, 20.88e-3), (0.15, 45.32e-3), (0.20, 70.24e-3), (0.30, 120.23e-3)]),
    ] {
        let inverter = own_inverter(weak(Polarity::N, n), weak(Polarity::P, n), room());
        let cell = pair(n);
        for (vdd, want) in row {
            let at = AtRails { cell: &inverter, levels: Levels::powered(vdd) };
            let m = margins(at, at, &o).expect("curves").square.expect("pair").margin_v;
            assert!((m / want - 1.0).abs() < 5e-3, "n {n} at {vdd}: {m} for {want}");
            let l = &loops(&cell, &Levels::powered(vdd), &[], &o).expect("a loop")[0];
            let h = hold(&cell, l, &Levels::powered(vdd), None, &o).expect("held");
            assert!((h.margin_v / m - 1.0).abs() < 1e-6, "{} {m}", h.margin_v);
        }
    }
}

/// The curve of A23 in closed form: `Vin = VDD/2 + (n·vT/2)·ln[(1 − e^(−(VDD − Vo)/vT))/(1 − e^(−Vo/vT))]`.
#[test]
fn solved_curve_is_the_closed_form() {
    use hushrail::awake::margin::{Tracer, paths};
    let (n, vt, vdd) = (1.4, 25.851999786e-3, 0.2);
    let inverter = own_inverter(weak(Polarity::N, n), weak(Polarity::P, n), room());
    let o = SolveOptions::default();
    let path = &paths(&inverter).expect("listed")[0];
    let mut t = Tracer::of_path(&inverter, path, &Levels::powered(vdd), (0.0, vdd), &o);
    for k in 1..20 {
        let vo = vdd * f64::from(k) / 20.0;
        let (a, b) = (-(-(vdd - vo) / vt).exp_m1(), -(-vo / vt).exp_m1());
        let vin = 0.5 * vdd + 0.5 * n * vt * (a / b).ln();
        let p = t.at(vin).expect("solved");
        assert!((p.out_v - vo).abs() < 1e-9, "{vo} {p:?}");
        // dVin/dVo = −(n/2)·[(1 − a)/a + (1 − b)/b]
        let slope = -2.0 / (n * ((1.0 - a) / a + (1.0 - b) / b));
        assert!((p.slope / slope - 1.0).abs() < 1e-6, "{p:?} {slope}");
    }
}

/// B10.1 and B10.2: the loop lives down to `2·vT·ln(1 + n)`. Within 5e-5: the bracket is 2 µV wide, and a lobe opens with the 3/2
/// power of what lies above.
#[test]
fn ideal_loop_is_lost_where_its_gain_is_one() {
    let o = SolveOptions::default();
    for (n, want) in [(1.0, 35.8385e-3), (1.2, 40.7664e-3), (1.4, 45.2652e-3), (1.5, 47.3759e-3)] {
        let r = retention(
            &pair(n),
            "ideal",
            1.0,
            &HEADER,
            &[],
            &Need { margin_v: 0.0, population: None },
            &o,
            &|| false,
        )
        .expect("holds");
        assert!((r.retention_v / want - 1.0).abs() < 5e-5, "n {n}: {} for {want}", r.retention_v);
    }
}

/// The same at 125 °C, where `vT` is 34.309912 mV (reference sheet B1.5): retention voltages rise with temperature.
#[test]
fn ideal_loop_needs_more_when_hot() {
    let hot = Kelvin::from_celsius(125.0).expect("in range");
    let vt_v = 34.309912e-3;
    let dev =
        |polarity| Arc::new(Symmetric { i0_a: 1e-9, n: 1.4, vt_v, polarity, leak_s: 0.0 }) as Arc<dyn Device>;
    let two = |p| [dev(p), dev(p)];
    let cell = own_pair(&two(Polarity::N), &two(Polarity::P), hot);
    let need = Need { margin_v: 0.0, population: None };
    let r = retention(&cell, "hot", 1.0, &HEADER, &[], &need, &SolveOptions::default(), &|| false)
        .expect("holds");
    let want = 2.0 * vt_v * 2.4f64.ln();
    assert!((r.retention_v / want - 1.0).abs() < 5e-5, "{} for {want}", r.retention_v);
}

/// A curve no library makes: `y = V/2·(1 − tanh(g·(x − t)/V))`.
fn tanh_curve(vdd: f64, gain: f64, trip: f64) -> impl Fn(f64) -> CurvePoint {
    move |x| {
        let t = (gain * (x - trip) / vdd).tanh();
        CurvePoint { in_v: x, out_v: 0.5 * vdd * (1.0 - t), slope: -0.5 * gain * (1.0 - t * t) }
    }
}

/// Largest axis-parallel square between `y = f(x)` and `x = g(y)`, by trying corners: the side grows until it leaves the lobe.
fn brute_force(f: &dyn Fn(f64) -> f64, g: &dyn Fn(f64) -> f64, vdd: f64, upper: bool) -> f64 {
    let mut best = 0.0f64;
    let n = 4000;
    for k in 0..=n {
        // one corner on g (upper lobe: lower left), the opposite one must stay on the near side of f
        let y = vdd * f64::from(k) / f64::from(n);
        let (x, y0) = if upper { (g(y), y) } else { (y, f(y)) };
        let inside = |s: f64| if upper { y0 + s <= f(x + s) } else { x + s <= g(y0 + s) };
        if !inside(0.0) {
            continue;
        }
        let (mut lo, mut hi) = (0.0, vdd);
        for _ in 0..50 {
            let mid = 0.5 * (lo + hi);
            if inside(mid) { lo = mid } else { hi = mid }
        }
        best = best.max(lo);
    }
    best
}

#[test]
fn squares_are_those_of_a_brute_force_search() {
    for (ga, ta, gb, tb) in
        [(6.0, 0.5, 6.0, 0.5), (10.0, 0.4, 7.0, 0.55), (40.0, 0.3, 25.0, 0.45), (4.0, 0.52, 9.0, 0.5)]
    {
        let (f, g) = (tanh_curve(1.0, ga, ta), tanh_curve(1.0, gb, tb));
        let b = butterfly(0.0, 1.0, &mut |x| Ok::<_, Infallible>(f(x)), &mut |y| Ok(g(y)))
            .unwrap_or_else(|e| match e {});
        let s = b.squares.as_ref().expect("bistable");
        for (k, upper) in [(0, true), (1, false)] {
            let want = brute_force(&|x| f(x).out_v, &|y| g(y).out_v, 1.0, upper);
            assert!(
                (s[k].side_v - want).abs() < 2e-6,
                "{ga} {ta} {gb} {tb} lobe {k}: {} for {want}",
                s[k].side_v
            );
            // both corners on the curves
            let (x, y, d) = (s[k].x_v, s[k].y_v, s[k].side_v);
            let (low, high) = ((x, y), (x + d, y + d));
            let (on_f, on_g) = if upper { (high, low) } else { (low, high) };
            assert!((f(on_f.0).out_v - on_f.1).abs() < 1e-5 && (g(on_g.1).out_v - on_g.0).abs() < 1e-5);
        }
    }
    // gain below one: nothing is held
    let f = tanh_curve(1.0, 1.9, 0.5);
    let b = butterfly(0.0, 1.0, &mut |x| Ok::<_, Infallible>(f(x)), &mut |y| Ok(f(y)))
        .unwrap_or_else(|e| match e {});
    assert!(b.squares.is_none() && b.margin_v() == 0.0);
}

fn all_region(polarity: Polarity, vt0_v: f64) -> Arc<dyn Device> {
    Arc::new(AllRegion { is_a: 1e-6, n: 1.3, vt0_v, vt_v: 25.851999786e-3, polarity, leak_s: 1e-15 })
}

/// Unity gain of the solved curve against differences of the curve itself, and margins that shrink on drooped rails and between
/// rails.
#[test]
fn margins_shrink_on_drooped_rails_and_between_rails() {
    let o = SolveOptions::default();
    let inverter = own_inverter(all_region(Polarity::N, 0.35), all_region(Polarity::P, 0.35), room());
    let at = |lo: f64, hi: f64| AtRails {
        cell: &inverter,
        levels: Levels { supply_v: hi, ground_v: lo, nwell_v: hi, pwell_v: lo, high_v: hi, low_v: lo },
    };
    let full = margins(at(0.0, 1.0), at(0.0, 1.0), &o).expect("curves");
    let u = full.paths[0].unity.expect("gain");
    // equal devices: symmetric about the middle
    assert!((u.vil_v + u.vih_v - 1.0).abs() < 1e-6 && (u.nml_v - u.nmh_v).abs() < 1e-6, "{u:?}");
    let path = &hushrail::awake::margin::paths(&inverter).expect("listed")[0];
    let mut t =
        hushrail::awake::margin::Tracer::of_path(&inverter, path, &Levels::powered(1.0), (0.0, 1.0), &o);
    let mut out = |x: f64| t.at(x).expect("solved").out_v;
    for v in [u.vil_v, u.vih_v] {
        let slope = (out(v + 1e-5) - out(v - 1e-5)) / 2e-5;
        assert!((slope + 1.0).abs() < 1e-4, "{slope}");
    }
    let drooped = margins(at(0.05, 0.95), at(0.05, 0.95), &o).expect("curves");
    let mixed = margins(at(0.05, 0.95), at(0.0, 1.0), &o).expect("curves");
    let nm = |m: &hushrail::awake::margin::Margins| {
        (m.nml_v.expect("gain"), m.square.as_ref().expect("pair").margin_v)
    };
    assert!(nm(&drooped).0 < nm(&full).0 && nm(&drooped).1 < nm(&full).1);
    // the margins between rails are made of what either cell does at its own
    let d = drooped.paths[0].unity.expect("gain");
    assert!((nm(&mixed).0 - (u.vil_v - d.vol_v)).abs() < 1e-6, "{:?} {u:?} {d:?}", mixed.nml_v);
    assert!((mixed.nmh_v.expect("gain") - (d.voh_v - u.vih_v)).abs() < 1e-6);
    assert_eq!(mixed.paths.len(), 2);
    // below its least supply the cell restores nothing
    let dead = margins(at(0.0, 0.03), at(0.0, 0.03), &o).expect("curves");
    assert!(dead.nml_v.is_none() && dead.square.expect("pair").margin_v == 0.0);
}

/// `I = K·(Vgs − Vth)^α`, saturated within a few millivolts of drain voltage; a thousandth of it remains below threshold.
#[derive(Debug, Clone)]
struct Alpha {
    polarity: Polarity,
    alpha: f64,
}

impl Alpha {
    fn law<R: Real>(&self, b: Bias<R>) -> Branches<R> {
        let s = self.polarity.sign();
        let (over, vds) = (b.vgs * s - 0.3, b.vds * s);
        let drive = if over.val() > 1e-3 { (over.ln() * self.alpha).exp() } else { R::of(1e-6) };
        Branches { channel_ds: drive * (vds * 400.0).tanh() * (1e-4 * s), ..Branches::zero() }
    }
}

channel_device!(Alpha, |d| d.polarity, |_| 25.85e-3);

/// B9.5 to B9.7. The leak of the off device is 1e-6 of 0.7^α of the on one, which is the tolerance in both conventions.
#[test]
fn delay_penalties_are_those_of_the_alpha_power_law() {
    let o = SolveOptions::default();
    for (droop, alpha, a, b) in [
        (0.05, 1.0, 7.6923e-2, 2.3077e-2),
        (0.05, 1.3, 10.1134e-2, 4.6077e-2),
        (0.05, 2.0, 15.9763e-2, 10.1775e-2),
        (0.10, 1.3, 22.1886e-2, 9.9698e-2),
    ] {
        let dev = |polarity| Arc::new(Alpha { polarity, alpha }) as Arc<dyn Device>;
        let inverter = own_inverter(dev(Polarity::N), dev(Polarity::P), room());
        let full = Levels::powered(1.0);
        // footer: the ground rises, inputs and load stay at full rails
        let footer = Levels { ground_v: droop, pwell_v: droop, ..full };
        let falls = |l: &Levels, swing| {
            let p = delay_penalty(&inverter, &full, l, swing, &o).expect("moves");
            p.into_iter().find(|p| p.edge == "Y falls").expect("edge").penalty
        };
        assert!((falls(&footer, Swing::Full) - a).abs() < 3e-6, "{} {a}", falls(&footer, Swing::Full));
        let header = Levels::powered(1.0 - droop);
        assert!((falls(&header, Swing::Local) - b).abs() < 3e-6, "{} {b}", falls(&header, Swing::Local));
    }
}

fn skewed(shift: f64) -> BoundCell {
    let n = [all_region(Polarity::N, 0.35 + shift), all_region(Polarity::N, 0.33)];
    let p = [all_region(Polarity::P, 0.36), all_region(Polarity::P, 0.35)];
    own_pair(&n, &p, room())
}

/// Slopes of the squares to thresholds against differences, on a loop that is not symmetric.
#[test]
fn exact_slopes_of_the_margin_are_its_differences() {
    let o = SolveOptions::default();
    let levels = Levels::powered(0.5);
    let at = |shift: f64| {
        let cell = skewed(shift);
        let l = loops(&cell, &levels, &[], &o).expect("a loop").swap_remove(0);
        let s = sigmas(&cell, &Mismatch { n_v_m: 1e-9, p_v_m: 2e-9 }).expect("sizes");
        hold(&cell, &l, &levels, Some(&s), &o).expect("held")
    };
    let h = 1e-4;
    let (mid, up, down) = (at(0.0), at(h), at(-h));
    let slopes = mid.to_thresholds.as_ref().expect("asked for");
    for k in 0..2 {
        let want = (up.lobes_v[k] - down.lobes_v[k]) / (2.0 * h);
        assert!((slopes[k][0] - want).abs() < 2e-3, "lobe {k}: {} for {want}", slopes[k][0]);
    }
    // Pelgrom: 1 mV·µm over 0.2 µm × 0.1 µm, 2 mV·µm over 0.4 µm × 0.1 µm
    let (sn, sp) = (1e-3 / 0.02f64.sqrt(), 2e-3 / 0.04f64.sqrt());
    let want = slopes[0].iter().zip([sn, sp, sn, sp]).map(|(d, s)| (d * s) * (d * s)).sum::<f64>().sqrt();
    assert!((mid.sigma_v.expect("asked for")[0] / want - 1.0).abs() < 1e-12);
}

/// The linear spread against loops whose thresholds were drawn.
#[test]
fn spread_of_the_margin_is_that_of_drawn_loops() {
    let o = SolveOptions::default();
    let levels = Levels::powered(0.5);
    let ideal = skewed(0.0);
    let l = loops(&ideal, &levels, &[], &o).expect("a loop").swap_remove(0);
    let m = Mismatch { n_v_m: 1e-9, p_v_m: 1e-9 };
    let s = sigmas(&ideal, &m).expect("sizes");
    let predicted = hold(&ideal, &l, &levels, Some(&s), &o).expect("held");
    let draws = 400u64;
    let mut sides = [Vec::new(), Vec::new()];
    for d in 0..draws {
        // Box and Muller on counted numbers
        let z: Vec<f64> = (0..4)
            .map(|k| {
                let (u, v) = (common::uniform(7, 8 * d + 2 * k), common::uniform(7, 8 * d + 2 * k + 1));
                (-2.0 * (1.0 - u).ln()).sqrt() * (std::f64::consts::TAU * v).cos()
            })
            .collect();
        let n = [all_region(Polarity::N, 0.35 + z[0] * s[0]), all_region(Polarity::N, 0.33 + z[2] * s[2])];
        let p = [all_region(Polarity::P, 0.36 + z[1] * s[1]), all_region(Polarity::P, 0.35 + z[3] * s[3])];
        let cell = own_pair(&n, &p, room());
        let h = hold(&cell, &l, &levels, None, &o).expect("held");
        for k in 0..2 {
            sides[k].push(h.lobes_v[k]);
        }
    }
    for k in 0..2 {
        let mean = sides[k].iter().sum::<f64>() / draws as f64;
        let sd = (sides[k].iter().map(|x| (x - mean).powi(2)).sum::<f64>() / (draws - 1) as f64).sqrt();
        // 400 draws: one standard error of a standard deviation is 3.5 %; four of them
        let want = predicted.sigma_v.expect("asked for")[k];
        assert!((sd / want - 1.0).abs() < 0.14, "lobe {k}: drawn {sd}, predicted {want}");
    }
}

#[test]
fn more_bits_and_more_margin_need_more_voltage_and_impossible_needs_are_refused() {
    let o = SolveOptions::default();
    let cell = skewed(0.0);
    let with = |margin_v: f64, bits: Option<f64>, a: f64, vdd: f64| {
        let population =
            bits.map(|bits| Population { mismatch: Mismatch { n_v_m: a, p_v_m: a }, bits, failing: 0.01 });
        retention(&cell, "c", vdd, &HEADER, &[], &Need { margin_v, population }, &o, &|| false)
    };
    let v = |m, b| with(m, b, 1e-9, 1.0).expect("holds").retention_v;
    let (bare, margin, few, many) = (v(0.0, None), v(0.05, None), v(0.0, Some(1.0)), v(0.0, Some(1e6)));
    assert!(bare < margin && bare < few && few < many, "{bare} {margin} {few} {many}");
    let r = with(0.0, Some(1e6), 1e-9, 1.0).expect("holds");
    // at most 1e-8 may fail: 5.61 standard deviations of one side, a little more for both
    assert!(r.z_score.is_some_and(|z| (5.6..5.8).contains(&z)), "{:?}", r.z_score);
    let e = with(0.0, Some(1e6), 3e-8, 0.3).expect_err("never").to_string();
    assert!(e.contains("never holds at corner `c`") && e.contains("standard deviations"), "{e}");
    let e = with(0.4, None, 0.0, 0.5).expect_err("never").to_string();
    assert!(e.contains("the margin is") && e.contains("asked for"), "{e}");
    let e = with(0.0, None, 0.0, 0.03).expect_err("never");
    assert!(matches!(&e, AwakeError::StoresNothing { .. } | AwakeError::NeverHolds { .. }), "{e}");
    assert!(with(f64::NAN, None, 0.0, 1.0).is_err());
    assert!(with(0.0, Some(0.0), 0.0, 1.0).is_err());
    let stopped =
        retention(&cell, "c", 1.0, &HEADER, &[], &Need { margin_v: 0.0, population: None }, &o, &|| true);
    assert!(matches!(stopped, Err(AwakeError::Stopped)));
    let inverter = own_inverter(weak(Polarity::N, 1.0), weak(Polarity::P, 1.0), room());
    let e = loops(&inverter, &Levels::powered(1.0), &[], &o).expect_err("no loop").to_string();
    assert!(e.contains("stores nothing"), "{e}");
    let e = loops(&cell, &Levels::powered(1.0), &[("X".into(), true)], &o).expect_err("no input").to_string();
    assert!(e.contains("`X`"), "{e}");
}
