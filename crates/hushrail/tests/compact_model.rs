//! Laws every compact device must obey, and its reference values.
//!
//! Values named B… are rows of the project's reference sheet: computed there in double precision from the printed formula by an
//! independent program. They check the equations, not silicon.

mod common;

use std::sync::Arc;

use common::{Gate, Ideal, chain, r1, uniform};
use hushrail::device::compact::channel::interpolation;
use hushrail::device::compact::params::{COUNT, Param, Values};
use hushrail::device::compact::prepare::Prepared;
use hushrail::device::compact::{Compact, CompactCard, CompactError, GidlLaw, branches, generic};
use hushrail::device::dual::{Dual, Real};
use hushrail::device::{Bias, Branches, Device, Geometry, Mechanism, Polarity};
use hushrail::physics::Kelvin;
use proptest::prelude::*;

const VT_300K: f64 = 25.851999786e-3;

fn at_c(temp_c: f64) -> Kelvin {
    Kelvin::from_celsius(temp_c).expect("in range")
}

fn full(length_m: f64) -> Geometry {
    Geometry { ad_m2: 0.2e-12, as_m2: 0.1e-12, pd_m: 2.4e-6, ps_m: 1.2e-6, ..Geometry::new(1e-6, length_m) }
}

fn generic_device(name: &str, temp_c: f64) -> Compact {
    let card = CompactCard::generic(name).expect(name);
    card.device(&full(card.length_m.expect("given")), at_c(temp_c)).expect(name)
}

/// The channel alone: no leaks, no loss of mobility, no saturation, DIBL zero, slope from the depletion layer only.
fn plain(body_sqrt_v: f64, phi_v: f64) -> CompactCard {
    let card: CompactCard = toml::from_str(
        r#"
        polarity = "n"
        vt0_v = 0.45
        slope_n = 1.4
        dibl_v_v = 0.0
        body_sqrt_v = 0.4
        phi_v = 0.8
        mobility_m2_vs = 0.03
        oxide_m = 2e-9
        "#,
    )
    .expect("a card");
    CompactCard { body_sqrt_v, phi_v, slope_n: 1.0 + body_sqrt_v / (2.0 * phi_v.sqrt()), ..card }
}

fn biases(count: u64, reach: f64) -> impl Iterator<Item = [f64; 4]> {
    (0..count).map(move |k| std::array::from_fn(|i| reach * (2.0 * uniform(11, 4 * k + i as u64) - 1.0)))
}

fn at([d, g, s, b]: [f64; 4]) -> Bias<f64> {
    Bias::from_terminals(d, g, s, b)
}

fn close(got: f64, want: f64, rel: f64, what: &str) {
    assert!((got / want - 1.0).abs() < rel, "{what}: {got:e} instead of {want:e}");
}

#[test]
fn terminal_currents_add_up_to_nothing() {
    for name in generic::NAMES {
        for temp_c in [-55.0, 60.0, 175.0] {
            let dev = generic_device(name, temp_c);
            for v in biases(600, 1.3) {
                let b = dev.branches(at(v));
                for t in Mechanism::ALL.iter().map(|m| b.terminals_of(*m)).chain([b.terminals()]) {
                    let most = t.iter().fold(0.0f64, |m, i| m.max(i.abs()));
                    assert!(t.iter().sum::<f64>().abs() <= 1e-15 * most, "{name} {v:?} {t:?}");
                    assert!(t.iter().all(|i| i.is_finite()), "{name} {v:?}");
                }
            }
        }
    }
}

#[test]
fn no_voltage_means_no_current_at_any_temperature() {
    for name in generic::NAMES {
        for temp_c in [-55.0, 27.0, 175.0] {
            assert_eq!(generic_device(name, temp_c).branches(at([0.0; 4])).terminals(), [0.0; 4], "{name}");
        }
    }
}

#[test]
fn drain_and_source_are_interchangeable() {
    for name in generic::NAMES {
        let card = CompactCard::generic(name).expect(name);
        let g = Geometry { ad_m2: 0.1e-12, pd_m: 1.2e-6, ..full(card.length_m.expect("given")) };
        let dev = card.device(&g, at_c(27.0)).expect(name);
        for [d, g, s, b] in biases(1000, 1.3) {
            let one = dev.branches(at([d, g, s, b]));
            let two = dev.branches(at([s, g, d, b]));
            let (i, j) = (one.terminals(), two.terminals());
            let most = i.iter().fold(0.0f64, |m, i| m.max(i.abs()));
            for (x, y) in [(0, 2), (1, 1), (2, 0), (3, 3)] {
                assert!((i[x] - j[y]).abs() <= 1e-12 * most, "{name}: {i:?} {j:?}");
            }
            // from the same three differences, nothing at all is left
            let b = Bias { vgs: g - s, vds: d - s, vbs: b - s };
            if b.vds > 0.0 {
                let back = Bias { vgs: b.vgs - b.vds, vds: -b.vds, vbs: b.vbs - b.vds };
                let again =
                    dev.branches(Bias { vgs: back.vgs - back.vds, vds: b.vds, vbs: back.vbs - back.vds });
                assert_eq!(dev.branches(back).channel_ds, -again.channel_ds, "{name}");
            }
        }
    }
}

/// All even derivatives of the channel current vanish at Vds = 0 when gate and body sit midway: a third difference over ±h
/// sees a kink of the n-th derivative as h^(n−3).
#[test]
fn channel_is_smooth_through_no_drain_voltage() {
    let dev = generic_device("generic 28 nm n", 27.0);
    for vg in [0.1, 0.5, 0.9] {
        let i = |v: f64| dev.branches(Bias { vgs: vg + 0.5 * v, vds: v, vbs: 0.5 * v - 0.2 }).channel_ds;
        let third = |h: f64| (i(2.0 * h) - 2.0 * i(h) + 2.0 * i(-h) - i(-2.0 * h)) / (2.0 * h * h * h);
        assert!((third(1e-3) / third(5e-4) - 1.0).abs() < 0.02, "{vg}: {} {}", third(1e-3), third(5e-4));
        let slope = dev.branches_dual(Bias { vgs: vg, vds: 0.0, vbs: -0.2 }.dual()).channel_ds.d[1];
        // antisymmetric: the difference quotient has no term of order h
        assert!((i(1e-6) / 1e-6 / slope - 1.0).abs() < 1e-8, "{vg}");
    }
}

#[test]
fn dual_slopes_equal_differences() {
    // five-point differences: error of order h⁴; 2e-5 leaves room for their own rounding
    let h = 1e-4;
    for name in ["generic 28 nm n", "generic 45 nm low power p", "generic 130 nm n"] {
        for temp_c in [-40.0, 110.0] {
            let dev = generic_device(name, temp_c);
            for v in biases(500, 1.2) {
                let bias = at(v);
                let dual = dev.branches_dual(bias.dual()).terminals();
                let value = dev.branches(bias).terminals();
                // a forward junction of 100 A leaves its rounding in the sums
                let gross = dev.branches(bias).map(f64::abs).terminals().map(f64::abs);
                for k in 0..3 {
                    let shifted = |x: f64| {
                        let mut b = bias;
                        match k {
                            0 => b.vgs += x,
                            1 => b.vds += x,
                            _ => b.vbs += x,
                        }
                        dev.branches(b).terminals()
                    };
                    let (p1, m1, p2, m2) = (shifted(h), shifted(-h), shifted(2.0 * h), shifted(-2.0 * h));
                    for t in 0..4 {
                        assert!((dual[t].v - value[t]).abs() <= 1e-12 * gross[t] + 1e-30);
                        let slope = (8.0 * (p1[t] - m1[t]) - (p2[t] - m2[t])) / (12.0 * h);
                        let scale = slope.abs().max(value[t].abs()).max(p1[t].abs());
                        assert!(
                            (dual[t].d[k] - slope).abs() <= 2e-5 * scale + 1e-22,
                            "{name} {v:?} terminal {t} slope {k}: {} {slope}",
                            dual[t].d[k]
                        );
                    }
                }
            }
        }
    }
}

/// Value and slope have no step anywhere along a sweep: neighbouring slopes differ by less than the sweep explains.
#[test]
fn currents_and_slopes_are_continuous_across_regions() {
    for name in ["generic 28 nm n", "generic 65 nm p", "generic 45 nm low power n"] {
        for temp_c in [-55.0, 27.0, 175.0] {
            let dev = generic_device(name, temp_c);
            let s = dev.polarity().sign();
            for (what, fixed) in [
                (0, [0.9, 0.0, -0.4]),
                (0, [0.0, 1.1, 0.3]),
                (1, [0.5, 0.0, 0.0]),
                (1, [-0.3, 0.0, -0.5]),
                (1, [1.1, 0.0, 0.2]),
                (2, [0.4, 0.8, 0.0]),
                (2, [-0.6, 1.0, 0.0]),
            ] {
                let step = 1e-4;
                let sweep = |k: i32| {
                    let x = f64::from(k) * step;
                    let mut b = Bias { vgs: s * fixed[0], vds: s * fixed[1], vbs: s * fixed[2] };
                    match what {
                        0 => b.vgs = s * x,
                        1 => b.vds = s * x,
                        _ => b.vbs = s * x,
                    }
                    dev.branches_dual(b.dual()).terminals().map(|i| (i.v, s * i.d[what]))
                };
                let top = if what == 2 { 5000 } else { 15000 };
                let mut last = sweep(-15000);
                for k in -14999..top {
                    let now = sweep(k);
                    for i in 0..4 {
                        let mean = 0.5 * (last[i].1 + now[i].1);
                        let jump = (now[i].0 - last[i].0 - step * mean).abs();
                        let scale = now[i].0.abs().max(last[i].0.abs());
                        assert!(
                            jump <= 2e-5 * scale + 1e-22,
                            "{name} sweep {what} at {k}: {jump} in {scale}"
                        );
                        // a slope that steps would differ by a fixed share of itself
                        let turn = (now[i].1 - last[i].1).abs();
                        let steep = now[i].1.abs().max(last[i].1.abs()).max(scale / 0.05);
                        assert!(
                            turn <= 0.02 * steep + 2e-15,
                            "{name} sweep {what} at {k}: {turn} in {steep}"
                        );
                    }
                    last = now;
                }
            }
        }
    }
}

/// kT/q·ln 10 bounds the swing (59.526 mV at 300 K and 79.001 mV at 398.15 K, B1.6, B1.7); at threshold it is n times that.
#[test]
fn subthreshold_swing_is_the_slope_factor_above_the_thermal_limit() {
    for name in generic::NAMES {
        let n = CompactCard::generic(name).expect(name).slope_n;
        for temp_c in [-55.0, 27.0, 175.0] {
            let dev = generic_device(name, temp_c);
            let s = dev.polarity().sign();
            let limit = at_c(temp_c).thermal_voltage() * std::f64::consts::LN_10;
            for k in 0..200 {
                let vgs = -0.005 * f64::from(k);
                let i = |v: f64| s * dev.branches(Bias { vgs: s * v, vds: s * 0.5, vbs: 0.0 }).channel_ds;
                let swing = 2e-3 / (i(vgs + 1e-3) / i(vgs - 1e-3)).log10();
                assert!(swing > limit, "{name} {temp_c} {vgs}: {swing} V/decade");
                if k == 0 {
                    // the depletion layer is thinner than at threshold (the more so when hot), so a little above n
                    assert!(swing > 0.99 * n * limit && swing < 1.15 * n * limit, "{name} {temp_c}: {swing}");
                }
            }
        }
    }
    // without anything but the slope factor it is met exactly: B1.8, S(1.4) = 83.3370 mV/decade at 300 K
    let card = CompactCard { slope_n: 1.4, nominal_c: 26.85, ..plain(0.0, 1.1) };
    let dev = card.device(&Geometry::new(1e-6, 1e-7), at_c(26.85)).expect("device");
    let i = |v: f64| dev.branches(Bias { vgs: v, vds: 1.0, vbs: 0.0 }).channel_ds;
    close(0.02 / (i(-0.44) / i(-0.46)).log10(), 83.3370e-3, 1e-5, "swing");
}

#[test]
fn channel_current_only_falls_with_overdrive_and_gidl_only_rises() {
    for name in generic::NAMES {
        let dev = generic_device(name, 27.0);
        let s = dev.polarity().sign();
        let (mut channel, mut gidl, mut total) = (f64::INFINITY, 0.0, f64::INFINITY);
        let mut turned = false;
        for k in 0..120 {
            let b = dev.branches(Bias { vgs: -s * 0.01 * f64::from(k), vds: s * 1.1, vbs: 0.0 });
            assert!(b.channel_ds.abs() < channel || k > 80, "{name} at {k}0 mV");
            assert!(b.channel_ds.abs() <= channel && b.gidl_db.abs() >= gidl, "{name} at {k}0 mV");
            (channel, gidl) = (b.channel_ds.abs(), b.gidl_db.abs());
            let drain = b.terminals()[0].abs();
            turned |= drain > total;
            assert!(turned == (drain > total), "{name}: two minima in overdrive, at {k}0 mV");
            total = drain;
        }
        assert!(turned && gidl > channel, "{name}: no optimum in reach");
    }
}

/// The overdrive of the least drain current.
fn optimum(total: impl Fn(f64) -> f64) -> f64 {
    let (mut lo, mut hi) = (0.0, 1.0);
    for _ in 0..200 {
        let (a, b) = (lo + (hi - lo) * 0.381966, hi - (hi - lo) * 0.381966);
        if total(a) < total(b) { hi = b } else { lo = a }
    }
    0.5 * (lo + hi)
}

#[test]
fn optimum_overdrive_rises_with_temperature_and_leaks_grow_in_their_order() {
    for name in generic::NAMES {
        let mut last = -1.0;
        for temp_c in [-40.0, 25.0, 85.0, 125.0] {
            let dev = generic_device(name, temp_c);
            let s = dev.polarity().sign();
            let best =
                optimum(|v| s * dev.branches(Bias { vgs: -s * v, vds: s * 1.0, vbs: 0.0 }).terminals()[0]);
            assert!(best > last, "{name} {temp_c}: {best} after {last}");
            last = best;
        }
        // 298 K to 383 K: 8 to 100 for the channel (C2 of the sheet, wide for its thresholds); GIDL moves with the gap only
        let off = |t: f64| {
            let dev = generic_device(name, t);
            let s = dev.polarity().sign();
            dev.branches(Bias { vgs: -s * 0.4, vds: s * 1.1, vbs: 0.0 }).map(|i| i * s)
        };
        let on = |t: f64| {
            let dev = generic_device(name, t);
            let s = dev.polarity().sign();
            s * dev.branches(Bias { vgs: 0.0, vds: s * 1.1, vbs: 0.0 }).channel_ds
        };
        let grown = on(110.0) / on(25.0);
        assert!(grown > 8.0 && grown < 100.0, "{name}: channel x{grown}");
        let gidl = off(110.0).gidl_db / off(25.0).gidl_db;
        assert!(gidl > 1.0 && gidl < 3.0, "{name}: GIDL x{gidl}");
        // without temperature but for the carriers that are left in the channel
        close(off(110.0).gate_gd, off(25.0).gate_gd, 1e-3, name);
    }
}

/// B5.8, B5.9 and the limits of the law itself.
#[test]
fn specific_current_and_transconductance_are_those_of_the_law() {
    // φ = 1.1 V keeps flat band far away, where the gate drive D over it is smoothed by exp(−D/2UT)
    // n = 1.4, β = 300 µA/V², 300 K: Is = 5.613938e-7 A (B5.8); µ·Cox·W/L from 3.9·ε0
    let cox = 3.453133e-11 / 2e-9;
    let card =
        CompactCard { slope_n: 1.4, nominal_c: 26.85, mobility_m2_vs: 300e-6 / cox, ..plain(0.0, 1.1) };
    let dev = card.device(&Geometry::new(1e-6, 1e-6), at_c(26.85)).expect("device");
    close(dev.prepared.specific_a, 5.613938e-7, 1e-6, "specific current");
    let of = |v: f64| {
        // gate of the pinch-off voltage v·UT
        dev.branches_dual(Bias { vgs: 0.45 + 1.4 * VT_300K * v, vds: 3.0, vbs: 0.0 }.dual()).channel_ds
    };
    for v in [-10.0, -5.0, 0.0, 5.0, 10.0, 20.0] {
        close(of(v).v, dev.prepared.specific_a * interpolation(v), 1e-8, "interpolation");
    }
    // gm·n·UT/I at i = 1 is 0.632121 (B5.9); v of i = 1 is 1.0826 to five digits (B5.6)
    let i = of(1.082_648);
    close(i.d[0] * 1.4 * VT_300K / i.v, 0.632121, 1e-5, "gm/I");
}

/// B3.6: γ = 0.4 √V, φ = 0.8 V; threshold at a constant inversion level moves by exactly the square-root law.
#[test]
fn body_effect_is_the_square_root_law() {
    for dibl in [0.0, 0.1] {
        let card = CompactCard { dibl_v_v: dibl, slope_n: 1.6, nominal_c: 26.85, ..plain(0.4, 0.8) };
        let dev = card.device(&Geometry::new(1e-6, 1e-7), at_c(26.85)).expect("device");
        let gate = |vbs: f64, level: f64| {
            let (mut lo, mut hi) = (-1.0, 3.0);
            for _ in 0..100 {
                let mid = 0.5 * (lo + hi);
                if dev.branches(Bias { vgs: mid, vds: 1.0, vbs }).channel_ds > level {
                    hi = mid;
                } else {
                    lo = mid;
                }
            }
            lo
        };
        // at threshold the pinch-off voltage is the source's: I = Is·F(0)
        let level = dev.prepared.specific_a * interpolation(0.0);
        let rest = gate(0.0, level);
        close(rest, 0.45 - dibl * 1.0, 1e-6, "threshold");
        for (vsb, want_mv) in [(0.1, 21.702), (0.2, 42.229), (0.5, 98.299), (1.0, 178.885)] {
            close((gate(-vsb, level) - rest) * 1e3, want_mv, 3e-5, "body effect");
        }
    }
}

/// B3.4: mobility falls to 0.654542 from 300.15 K to 398.15 K. B3.1: −0.36648 mV/K by default.
#[test]
fn temperature_laws_are_met() {
    let card = CompactCard { slope_n: 1.4, ..plain(0.0, 0.8) };
    let g = Geometry::new(1e-6, 1e-7);
    let (cool, hot) =
        (card.device(&g, at_c(27.0)).expect("cool"), card.device(&g, at_c(125.0)).expect("hot"));
    let ut = at_c(125.0).thermal_voltage() / at_c(27.0).thermal_voltage();
    close(hot.prepared.specific_a / cool.prepared.specific_a / (ut * ut), 0.654542, 2e-6, "mobility");
    close((hot.prepared.vt0 - cool.prepared.vt0) / 98.0, -0.36648e-3, 1e-4, "threshold");
    // B2.14: diffusion x3122.8 from 300.15 to 358.15 K and x2.20493e5 to 398.15 K; B2.15: generation x65.9 from 298.15 K
    let card = CompactCard { diffusion_a_m2: 1e-6, ..plain(0.4, 0.8) };
    let is = |c: &CompactCard, t: f64| {
        let d = c.device(&full(1e-7), at_c(t)).expect("device");
        (d.prepared.drain.diffusion_a, d.prepared.drain.generation_a)
    };
    close(is(&card, 85.0).0 / is(&card, 27.0).0, 3122.8, 2e-5, "diffusion");
    close(is(&card, 125.0).0 / is(&card, 27.0).0, 2.20493e5, 2e-5, "diffusion");
    let card = CompactCard { generation_a_m2: 1e-4, ..plain(0.4, 0.8) };
    close(is(&card, 85.0).1 / is(&card, 25.0).1, 65.9, 1e-3, "generation");
}

/// Numbers of the printed laws, computed by hand outside: surface potential, length, and the sign of a threshold shift.
#[test]
fn surface_potential_length_and_instance_shift_are_met() {
    let card = plain(0.4, 0.8);
    let g = Geometry::new(1e-6, 1e-7);
    for (temp_c, want) in [(27.0, 0.8), (125.0, 0.63906657), (-55.0, 0.92379763)] {
        close(card.device(&g, at_c(temp_c)).expect("device").prepared.phi, want, 1e-6, "surface potential");
    }
    let card = CompactCard { vt_temp_v_k: 0.0, ..CompactCard::generic("generic 65 nm n").expect("known") };
    let long = card.device(&Geometry::new(1e-6, 84.5e-9), at_c(27.0)).expect("device").prepared;
    close(long.dibl, 0.03449466, 1e-5, "barrier lowering of 1.3 times the length");
    close(long.vt0, 0.44249357, 1e-5, "threshold of 1.3 times the length");
    // an instance shift is that of the card's own sign, as in BSIM4: a p-channel threshold grows with a negative one
    let card = CompactCard::generic("generic 65 nm p").expect("known");
    let off = |delvto_v: f64| {
        let g = Geometry { delvto_v, ..Geometry::new(1e-6, 65e-9) };
        let d = card.device(&g, at_c(27.0)).expect("device");
        d.branches(Bias { vgs: 0.0, vds: -1.0, vbs: 0.0 }).channel_ds
    };
    assert!(off(-0.02) / off(0.0) < 0.7 && off(0.02) / off(0.0) > 1.4);
}

/// Generation grows with the width of the depletion layer, √(1 + V/Vbi); forward it is exp(V/2UT), then diffusion exp(V/UT).
#[test]
fn junction_follows_its_two_laws() {
    let card = CompactCard { generation_a_m2: 1e-3, diffusion_a_m2: 1e-7, ..plain(0.4, 0.8) };
    let d = card.device(&full(1e-7), at_c(27.0)).expect("device");
    let i = |v: f64| d.prepared.drain.current(v);
    let built_in = d.prepared.drain.built_in_v;
    for v in [0.5, 1.0, 2.0] {
        // the smoothing where the layer would close is 2·(UT/Vbi)² here, 0.3 %
        close(-i(-v) / 2e-16, (1.0 + v / built_in).sqrt(), 4e-3, "generation");
    }
    let slope = |v: f64| (i(v + 1e-3) / i(v - 1e-3)).ln() / 2e-3 * d.prepared.vt;
    assert!(slope(0.2) > 0.45 && slope(0.2) < 0.55, "{}", slope(0.2));
    assert!(slope(0.8) > 0.97 && slope(0.8) < 1.01, "{}", slope(0.8));
}

/// B9.1: µ·Cox = 300 µA/V², W = 1 mm, L = 60 nm, overdrive 0.55 V: 0.363636 Ω; resistance in series and θ add as documented.
#[test]
fn resistance_at_small_drain_voltage_is_what_the_parameters_say() {
    let cox = 3.453133e-11 / 2e-9;
    let card = CompactCard { mobility_m2_vs: 300e-6 / cox, nominal_c: 26.85, ..plain(0.0, 0.8) };
    let g = Geometry::new(1e-3, 60e-9);
    let ohm = |c: &CompactCard| {
        let d = c.device(&g, at_c(26.85)).expect("device");
        d.branches_dual(Bias { vgs: 1.0, vds: 0.0, vbs: 0.0 }.dual()).channel_ds.d[1].recip()
    };
    close(ohm(&card), 0.363636, 3e-5, "on-resistance");
    let lossy = CompactCard { theta_1_v: 0.3, series_ohm_m: 2e-4, ..card.clone() };
    close(ohm(&lossy), ohm(&card) * (1.0 + 0.3 * 0.55) + 2e-4 / 1e-3, 3e-5, "with losses");
    // velocity: in the limit of large drain voltage the current is W·Cox·vsat·overdrive, smoothed against β/2·overdrive²
    let fast = CompactCard { saturation_m_s: Some(1e5), ..card };
    let d = fast.device(&g, at_c(26.85)).expect("device");
    let i = d.branches(Bias { vgs: 1.0, vds: 1.2, vbs: 0.0 }).channel_ds;
    let (slow, most): (f64, f64) = (0.5 * 300e-6 * 1e-3 / 60e-9 * 0.55 * 0.55, 1e-3 * cox * 1e5 * 0.55);
    close(i, slow / (1.0 + (slow / most).powi(2)).sqrt(), 1e-3, "saturated");
    let mut last = 0.0;
    for k in 1..300 {
        let i = d.branches(Bias { vgs: 1.0, vds: 0.005 * f64::from(k), vbs: 0.0 }).channel_ds;
        assert!(i >= last * (1.0 - 1e-14), "falls at {k}");
        last = i;
    }
}

/// An ideal subthreshold device with the GIDL law of the compact model; constants of the block B6.
fn block_b6() -> GidlLaw<f64> {
    GidlLaw { a_s: 2e-4, b_v_m: 2.1e9, c_v3: 2e-4, e_v: 0.8, oxide_m: 1.8e-9 }
}

fn off_total<R: Real + hushrail::device::dual::Over<f64>>(ideal: &Ideal, vdd: f64, overdrive: R) -> [R; 2] {
    let x = (-overdrive + ideal.eta * vdd - ideal.vt0_v) / (ideal.n * ideal.vt_v);
    let channel = x.exp() * (ideal.i0_a * -(-vdd / ideal.vt_v).exp_m1());
    [channel, block_b6().current(1e-6, overdrive + vdd, R::of(vdd))]
}

#[test]
fn gidl_and_the_optimum_of_an_ideal_switch_are_met() {
    // B6.1, printed to seven digits
    for (vdg, want) in
        [(1.1, 4.259522e-19), (1.3, 2.616629e-12), (1.5, 2.388352e-9), (1.8, 4.402218e-7), (2.0, 3.496788e-6)]
    {
        close(block_b6().current(1e-6, vdg, 1.1), want, 2e-7, "GIDL");
    }
    // B6.3 to B6.7: Vt0, VDD, T-dependent voltage, overdrive, total, gain; the last digit of each is the tolerance
    let hot = 358.15 / 300.0 * VT_300K;
    for (vt0_v, vdd, vt_v, od, total, gain) in [
        (0.35, 1.0, VT_300K, 0.233445, Some(2.277982e-13), 439.1),
        (0.25, 1.0, VT_300K, 0.267358, None, 1068.7),
        (0.45, 1.0, VT_300K, 0.202836, None, 196.6),
        (0.35, 1.1, VT_300K, 0.170941, Some(1.780080e-12), 74.08),
        (0.25, 1.1, VT_300K, 0.208790, None, 199.6),
        (0.45, 1.1, VT_300K, 0.136682, None, 30.17),
        (0.35, 1.1, hot, 0.1948, Some(6.303443e-12), 3.869984e-10 / 6.303443e-12),
    ] {
        let ideal = Ideal { vt0_v, vt_v, ..r1() };
        // the same law as the shared reference device
        let b = ideal.branches(Bias { vgs: -od, vds: vdd, vbs: 0.0 }).channel_ds;
        close(off_total(&ideal, vdd, od)[0], b, 1e-12, "law");
        // the slope of the sum changes sign once
        let (mut lo, mut hi) = (0.0, 0.6);
        for _ in 0..80 {
            let mid = 0.5 * (lo + hi);
            let [c, g] = off_total(&ideal, vdd, Dual::<1>::variable(mid, 0));
            if c.d[0] + g.d[0] < 0.0 { lo = mid } else { hi = mid }
        }
        let sum = |v: f64| off_total(&ideal, vdd, v).iter().sum::<f64>();
        assert!(
            (lo - od).abs() < if od == 0.1948 { 6e-5 } else { 6e-7 },
            "{vt0_v} {vdd}: {lo} instead of {od}"
        );
        if let Some(total) = total {
            close(sum(lo), total, 3e-7, "total");
        }
        close(sum(0.0) / sum(lo), gain, 2.5e-4, "gain");
        close(optimum(sum), lo, 1e-6, "golden section");
        if vt0_v == 0.35 && vdd == 1.0 {
            let [c, g] = off_total(&ideal, vdd, lo);
            close(c, 1.580941e-13, 3e-6, "channel at the optimum");
            close(g, 6.970403e-14, 3e-6, "GIDL at the optimum");
            // B6.8
            close(g / c, 0.441, 1.2e-3, "ratio");
        }
    }
}

fn stack(card: &CompactCard, n: usize, vdd: f64) -> (Vec<f64>, f64, f64) {
    let d =
        || Arc::new(card.device(&Geometry::new(1e-6, 1e-7), at_c(26.85)).expect("device")) as Arc<dyn Device>;
    let gates = vec![Gate::At(0.0); n];
    let (_, one) = chain(vec![d()], &gates[..1], vdd, VT_300K);
    let (nodes, i) = chain((0..n).map(|_| d()).collect(), &gates, vdd, VT_300K);
    (nodes, i, one / i)
}

/// With DIBL zero and the slope factor of the depletion layer alone the current is f(Vg, Vs) − f(Vg, Vd): terms telescope, so N
/// devices leak 1/N and the nodes lie at −UT·ln(1 − j/N) (B4.13: 17.9192 mV for two; 10.4820 and 28.4013 mV for three).
#[test]
fn n_equal_devices_leak_one_nth_without_dibl_and_less_with_it() {
    for (gamma, phi) in [(0.0, 0.8), (0.3, 0.85), (0.6, 0.9)] {
        // far below threshold: the interpolation leaves the exponential by exp(−Vt0/(2n·UT)), 1e-5 here
        let card = CompactCard { nominal_c: 26.85, vt0_v: 0.7, ..plain(gamma, phi) };
        for n in 2..=6usize {
            let (nodes, _, factor) = stack(&card, n, 1.5);
            close(factor, n as f64, 2e-9, "one nth");
            for (j, v) in nodes.iter().enumerate() {
                close(*v, -VT_300K * (1.0 - (j + 1) as f64 / n as f64).ln(), 5e-5, "node");
            }
        }
        // any DIBL makes a stack better than that, and a rest of the slope factor makes it worse
        let pulled = CompactCard { dibl_v_v: 0.08, slope_n: card.slope_n + 0.16, ..card.clone() };
        assert!(stack(&pulled, 2, 1.0).2 > 4.0);
        let coupled = CompactCard { slope_n: card.slope_n + 0.3, ..card };
        let x = stack(&coupled, 2, 1.0).2;
        assert!(x > 1.7 && x < 1.995, "{x}");
    }
    // B4.12: η = 0, kg = 0, n = 1.4: X = 1.791906; the smooth minimum of Vs and Vd moves it by less than 2 %
    let none = CompactCard { slope_n: 1.4, nominal_c: 26.85, ..plain(0.0, 0.8) };
    close(stack(&none, 2, 1.0).2, 1.791906, 2e-2, "no body effect");
}

/// The law of the stack literature (A2) with kg = 0.2, η = 0.1, n = 1.4 is this model's where the body effect is linear: the
/// same two-stack factor (B4.1: 13.769 at 1 V), within what the curvature of the square root makes of it.
#[test]
fn two_stack_factor_agrees_with_the_engineering_law() {
    for (vdd, want) in [(0.5, 4.441140), (0.8, 8.577305), (1.0, 13.769366)] {
        let phi: f64 = 1.1;
        let card = CompactCard {
            dibl_v_v: 0.1,
            slope_n: 1.4,
            nominal_c: 26.85,
            vt0_v: 0.45,
            ..plain(0.4 * phi.sqrt(), phi)
        };
        close(stack(&card, 2, vdd).2, want, 0.08, "two-stack");
    }
}

/// Mixed stacks of on, off and overdriven devices of one and of different technologies: every one is balanced.
#[test]
#[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "numbers in [0, 6)")]
fn random_stacks_find_their_balance() {
    for k in 0..3000u64 {
        let u = |i: u64| uniform(23, 32 * k + i);
        let temp_c = -55.0 + 230.0 * u(0);
        let n = 2 + (u(1) * 5.0) as usize;
        let device = |j: usize| {
            let name = generic::NAMES[2 * (u(2 + j as u64) * 4.0) as usize];
            Arc::new(generic_device(name, temp_c)) as Arc<dyn Device>
        };
        let gates: Vec<Gate> = (0..n)
            .map(|j| match u(10 + j as u64) {
                x if x < 0.4 => Gate::At(0.0),
                x if x < 0.6 => Gate::At(1.1),
                x => Gate::At(2.0 * (x - 0.6) - 0.4),
            })
            .collect();
        let vt = at_c(temp_c).thermal_voltage();
        let (nodes, i) = chain((0..n).map(device).collect(), &gates, 1.1, vt);
        assert!(i.is_finite() && nodes.iter().all(|v| *v > -0.7 && *v < 1.8), "{k}: {nodes:?} {i}");
    }
}

/// The same equations with parameters that carry derivatives: threshold, length, width, temperature and oxide.
#[test]
fn parameter_slopes_equal_differences() {
    let card = CompactCard::generic("generic 65 nm p").expect("known");
    let make = |x: [f64; 5]| {
        let card = CompactCard {
            oxide_m: x[4],
            tunnel_oxide_m: card.tunnel_oxide_m.map(|t| t * x[4] / card.oxide_m),
            ..card.clone()
        };
        let g = Geometry { delvto_v: x[0], length_m: x[1], width_m: x[2], ..full(65e-9) };
        Prepared::new(&Values::new(&card, |_, v| v), &g, x[3])
    };
    let x0 = [0.01, 70e-9, 1e-6, 330.0, card.oxide_m];
    let of = |i: usize| Dual::<5>::variable(x0[i], i);
    let g: Geometry<Dual<5>> =
        Geometry { delvto_v: of(0), length_m: of(1), width_m: of(2), ..full(65e-9).lift() };
    let values = Values::new(&card, |p, v| match p {
        Param::Oxide => of(4),
        Param::TunnelOxide => of(4) * (v / card.oxide_m),
        _ => Dual::of(v),
    });
    let dual = Prepared::new(&values, &g, of(3));
    for v in biases(200, 1.1) {
        let b = at(v);
        let lift = |x: f64| Dual::<5>::of(x);
        let got = branches(&dual, Bias { vgs: lift(b.vgs), vds: lift(b.vds), vbs: lift(b.vbs) });
        for i in 0..5 {
            let shifted = |h: f64| {
                let mut x = x0;
                x[i] += h;
                branches(&make(x), b)
            };
            let h = 1e-4 * x0[i].abs();
            let parts = |b: Branches<f64>| [b.channel_ds, b.gidl_db, b.junction_sb, b.gate_gd];
            let [p1, m1, p2, m2] = [h, -h, 2.0 * h, -2.0 * h].map(|h| parts(shifted(h)));
            for (k, exact) in parts(got.map(|x| x.d[i])).into_iter().enumerate() {
                let slope = (8.0 * (p1[k] - m1[k]) - (p2[k] - m2[k])) / (12.0 * h);
                let scale = slope.abs().max(p1[k].abs() / x0[i].abs());
                assert!(
                    (exact - slope).abs() <= 1e-5 * scale + 1e-25,
                    "{v:?} knob {i} part {k}: {exact} {slope}"
                );
            }
        }
    }
}

#[test]
fn longer_channels_leak_less() {
    // 1.1 to 1.5 times the length: 3 to 10 times less (C28 of the sheet, common practice); resistance up as length or less
    for name in generic::NAMES.iter().filter(|n| n.ends_with('n')) {
        let card = CompactCard::generic(name).expect(name);
        let l = card.length_m.expect("given");
        let at = |k: f64, vgs: f64, vds: f64| {
            let d = card.device(&Geometry::new(1e-6, k * l), at_c(27.0)).expect("device");
            d.branches(Bias { vgs, vds, vbs: 0.0 }).channel_ds
        };
        let gain = at(1.0, 0.0, 1.0) / at(1.3, 0.0, 1.0);
        assert!(gain > 2.0 && gain < 12.0, "{name}: {gain}");
        let ohm = at(1.0, 1.1, 0.01) / at(1.3, 1.1, 0.01);
        assert!(ohm > 1.05 && ohm < 1.5, "{name}: {ohm}");
    }
}

/// Common practice (C18, C19 of the sheet): about ten times for 0.2 nm, about double for 100 to 150 mV.
#[test]
fn gate_tunnelling_follows_thickness_and_voltage() {
    let at = |thick: f64, v: f64| {
        let card = CompactCard {
            overlap_m: 10e-9,
            tunnel_barrier_v: Some(3.1),
            tunnel_oxide_m: Some(thick),
            ..plain(0.4, 0.8)
        };
        let d = card.device(&Geometry::new(1e-6, 1e-7), at_c(27.0)).expect("device");
        -d.branches(Bias { vgs: 0.0, vds: v, vbs: 0.0 }).gate_gd
    };
    let step = at(1.4e-9, 1.0) / at(1.6e-9, 1.0);
    assert!(step > 6.0 && step < 20.0, "{step}");
    let volt = at(1.5e-9, 1.1) / at(1.5e-9, 1.0);
    assert!(volt > 1.3 && volt < 2.2, "{volt}");
}

#[test]
fn optimum_well_bias_exists_and_ends_in_band_to_band_tunnelling() {
    let dev = generic_device("generic 65 nm n", 27.0);
    let drain = |v: f64| dev.branches(Bias { vgs: 0.0, vds: 1.1, vbs: -v }).terminals()[0];
    let best = optimum(|v| drain(2.0 * v)) * 2.0;
    assert!(best > 0.2 && best < 1.9, "{best}");
    let at = |v: f64| dev.branches(Bias { vgs: 0.0, vds: 1.1, vbs: -v }).junction_db;
    assert!(at(1.0) > 5.0 * at(0.5) && at(1.5) > 5.0 * at(1.0), "{} {} {}", at(0.5), at(1.0), at(1.5));
}

#[test]
fn cards_round_trip_and_refuse_nonsense_by_name() {
    for name in generic::NAMES {
        let card = CompactCard::generic(name).expect(name);
        let text = toml::to_string(&card).expect("text");
        assert_eq!(toml::from_str::<CompactCard>(&text).expect("card"), card);
    }
    let good = CompactCard::generic("generic 65 nm n").expect("known");
    let bad = |f: &dyn Fn(&mut CompactCard)| {
        let mut c = good.clone();
        f(&mut c);
        c.device(&Geometry::new(1e-6, 65e-9), at_c(27.0)).expect_err("bad").to_string()
    };
    for (text, wanted) in [
        (bad(&|c| c.oxide_m = 1.85), "`oxide_m` is 1.85 m; want 5e-10 to 1e-7 m"),
        (bad(&|c| c.vt0_v = f64::NAN), "`vt0_v` is NaN V; want -2.0 to 3.0 V"),
        (bad(&|c| c.mobility_m2_vs = 280.0), "`mobility_m2_vs` is 280.0 m²/(V·s)"),
        (bad(&|c| c.slope_n = 1.1), "want at least 1 + body_sqrt_v/(2·√phi_v) = 1.265"),
        (
            bad(&|c| c.junction_depth_m = 0.0),
            "`halo_m3` is 2.5e24 1/m³; it has no effect without `junction_depth_m`",
        ),
        (bad(&|c| c.tunnel_barrier_v = None), "without `tunnel_barrier_v`"),
        (bad(&|c| c.body_sqrt_v = 0.0), "`length_m` is 6.5e-8 m; it has no effect without `body_sqrt_v`"),
        (bad(&|c| c.gidl_c_v3 = 0.0), "`gidl_c_v3` is 0.0 V³"),
        (bad(&|c| c.dibl_v_v = 100.0), "`dibl_v_v` is 100.0 V/V; want 0.0 to 0.5 V/V"),
    ] {
        assert!(text.contains(wanted), "{text} lacks {wanted}");
    }
    let size = good.device(&Geometry::new(1.0, 65e-9), at_c(27.0)).expect_err("too wide").to_string();
    assert!(size.contains("`width` is 1.0 m; want a size above zero and below 2 cm"), "{size}");
    let thin = CompactCard { phi_v: 0.5, body_sqrt_v: 0.3, ..good.clone() };
    let hot = thin.device(&Geometry::new(1e-6, 65e-9), at_c(300.0)).expect_err("too hot").to_string();
    assert!(hot.contains("phi_v at 300.0 °C"), "{hot}");
    let e = CompactCard::generic("generic 45 nm low power").expect_err("no polarity");
    assert!(
        matches!(&e, CompactError::Unknown { nearest: Some(n), .. } if n.starts_with("generic 45 nm")),
        "{e}"
    );
    assert!(CompactCard::generic("x").expect_err("unknown").to_string().contains("generic 130 nm n"));
    for (from, to, wanted) in [
        ("\"n\"", "\"nmos\"", "unknown variant `nmos`, expected `n` or `p`"),
        ("vt0_v", "vt_v", "unknown field `vt_v`"),
        ("vt0_v = 0.43\n", "", "missing field `vt0_v`"),
    ] {
        let text = toml::to_string(&good).expect("text").replace(from, to);
        let e = toml::from_str::<CompactCard>(&text).expect_err(to).to_string();
        assert!(e.contains(wanted), "{e}");
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 300, failure_persistence: None, ..ProptestConfig::default() })]

    /// Any card within its ranges gives finite, balanced currents that vanish without voltage, and a monotone channel.
    #[test]
    fn any_legal_card_keeps_the_laws(
        (vt0_v, dibl_v_v, body_sqrt_v, phi_v) in (-0.3f64..1.2, 0.0f64..0.4, 0.0f64..1.0, 0.5f64..1.1),
        (extra, oxide_nm, length_um, temp_c) in (0.0f64..1.0, 0.8f64..10.0, 0.02f64..10.0, -55.0f64..175.0),
        (d, g, s, b) in (-2.0f64..2.0, -2.5f64..2.5, -2.0f64..2.0, -2.0f64..2.0),
        p_channel: bool,
    ) {
        let card = CompactCard {
            polarity: if p_channel { Polarity::P } else { Polarity::N },
            vt0_v, dibl_v_v, body_sqrt_v, phi_v,
            slope_n: 1.0 + body_sqrt_v / (2.0 * phi_v.sqrt()) + extra,
            oxide_m: oxide_nm * 1e-9,
            length_m: None,
            tunnel_oxide_m: None,
            ..CompactCard::generic("generic 28 nm n").expect("known")
        };
        let dev = card.device(&full(length_um * 1e-6), at_c(temp_c)).expect("legal");
        prop_assert_eq!(dev.branches(at([0.0; 4])).terminals(), [0.0; 4]);
        let dual = dev.branches_dual(at([d, g, s, b]).dual());
        let t = dual.terminals();
        let most = t.iter().fold(0.0f64, |m, i| m.max(i.v.abs()));
        prop_assert!(t.iter().map(|i| i.v).sum::<f64>().abs() <= 1e-15 * most);
        prop_assert!(t.iter().all(|i| i.v.is_finite() && i.d.iter().all(|x| x.is_finite())));
        // more drain-source voltage never means less current, more gate drive never less magnitude
        prop_assert!(dual.channel_ds.d[1] >= 0.0, "drain conductance {:?}", dual.channel_ds);
        let drive = dev.polarity().sign() * (d - s);
        prop_assert!(dual.channel_ds.d[0] * drive.signum() >= 0.0, "transconductance {:?}", dual.channel_ds);
    }
}

/// Slopes to every number a fit may set, against five-point differences of the device itself.
#[test]
fn slopes_to_the_numbers_of_a_card_equal_differences() {
    let free: Vec<Param> = Param::ALL.iter().copied().filter(|p| p.row().fitted).collect();
    assert_eq!(free.len(), COUNT - 2);
    for name in ["generic 65 nm n", "generic 28 nm p"] {
        let card = CompactCard::generic(name).expect("known");
        let (g, temp) = (full(70e-9), at_c(85.0));
        let biases: Vec<_> = biases(60, 1.1).map(at).collect();
        let got = card.slopes(&free, &g, temp, &biases).expect("slopes");
        let device = card.device(&g, temp).expect("device");
        for (b, i) in biases.iter().zip(&got.currents) {
            for (x, y) in device.branches(*b).terminals().iter().zip(i) {
                assert!((x - y).abs() <= 1e-12 * x.abs().max(y.abs()), "{x} {y}");
            }
        }
        for (k, p) in free.iter().enumerate() {
            let v = card.get(*p).expect("generic cards give all");
            let h = 1e-4 * v.abs();
            let shifted = |h: f64| {
                let mut c = card.clone();
                c.set(*p, v + h);
                c.slopes(&[], &g, temp, &biases).expect("currents").currents
            };
            let [p1, m1, p2, m2] = [h, -h, 2.0 * h, -2.0 * h].map(shifted);
            for j in 0..biases.len() {
                for t in 0..4 {
                    let slope = (8.0 * (p1[j][t] - m1[j][t]) - (p2[j][t] - m2[j][t])) / (12.0 * h);
                    let exact = got.slopes[j * free.len() + k][t];
                    // a difference loses what the terminal's current has in rounding, 1e-16 over 1e-4 and some
                    let scale = slope.abs().max(got.currents[j][t].abs() / v.abs());
                    assert!(
                        (exact - slope).abs() <= 2e-6 * scale + 1e-25,
                        "{name} {p:?} {t}: {exact} {slope}"
                    );
                }
            }
        }
    }
}

#[test]
fn a_card_of_named_numbers_is_judged() {
    let all = [
        ("vt0_v", 0.4),
        ("slope_n", 1.4),
        ("dibl_v_v", 0.05),
        ("body_sqrt_v", 0.4),
        ("phi_v", 0.9),
        ("mobility_m2_vs", 0.03),
        ("oxide_m", 2e-9),
    ];
    let made = |numbers: &[(&str, f64)]| {
        CompactCard::from_numbers(Polarity::N, numbers.iter().copied(), true).map_err(|e| e.to_string())
    };
    assert_eq!(made(&all).expect("whole").vt0_v, 0.4);
    let bad = made(&all[1..]).expect_err("no threshold");
    assert!(bad.contains("`vt0_v` is missing; want -2.0 to 3.0 V"), "{bad}");
    let bad = made(&[&all[..], &[("vt_v", 0.4)]].concat()).expect_err("no such number");
    assert!(bad.contains("has no `vt_v`; did you mean `vt0_v`"), "{bad}");
    let bad = made(&[&all[..], &[("gidl_a_s", f64::NAN)]].concat()).expect_err("not a number");
    assert!(bad.contains("`gidl_a_s` is NaN S; want 0.0 to 1.0 S"), "{bad}");
}
