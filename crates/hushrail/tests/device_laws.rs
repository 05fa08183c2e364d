//! Laws every BSIM4 device must obey, on an invented card with every mechanism on.

mod common;

use std::sync::Arc;

use common::{process, uniform};
use hushrail::device::process::Request;
use hushrail::device::{Bias, Device, Mechanism};
use hushrail::physics::Kelvin;
use hushrail::read::Place;

fn device(model: &str, temp_c: f64) -> Arc<dyn Device> {
    let params: [(&str, f64); 8] = [
        ("w", 1e-6),
        ("l", 60e-9),
        ("ad", 0.2e-12),
        ("as", 0.2e-12),
        ("pd", 2.4e-6),
        ("ps", 2.4e-6),
        ("sa", 0.3e-6),
        ("sb", 0.3e-6),
    ];
    let r = Request {
        model: model.into(),
        params: params.iter().map(|(n, v)| (Arc::from(*n), *v)).collect(),
        at: Place::new(&Arc::from("test"), 1, 1),
    };
    let t = Kelvin::from_celsius(temp_c).expect("in range");
    process().transistor(&r, t, &mut Vec::new()).expect("device").device
}

fn biases(count: u64) -> impl Iterator<Item = [f64; 4]> {
    (0..count).map(|k| std::array::from_fn(|i| 2.4 * uniform(7, 4 * k + i as u64) - 1.2))
}

fn at([d, g, s, b]: [f64; 4]) -> Bias<f64> {
    Bias::from_terminals(d, g, s, b)
}

#[test]
fn terminal_currents_add_up_to_nothing() {
    for model in ["nx", "px"] {
        let dev = device(model, 60.0);
        for v in biases(2000) {
            let b = dev.branches(at(v));
            for t in Mechanism::ALL.iter().map(|m| b.terminals_of(*m)).chain([b.terminals()]) {
                let most = t.iter().fold(0.0f64, |m, i| m.max(i.abs()));
                assert!(t.iter().sum::<f64>().abs() <= 1e-15 * most, "{model} {v:?} {t:?}");
                assert!(t.iter().all(|i| i.is_finite()), "{model} {v:?}");
            }
        }
    }
}

#[test]
fn no_voltage_means_no_current_at_any_temperature() {
    for model in ["nx", "px"] {
        for temp_c in [-55.0, 27.0, 175.0] {
            assert_eq!(device(model, temp_c).branches(at([0.0; 4])).terminals(), [0.0; 4]);
        }
    }
}

#[test]
fn drain_and_source_are_interchangeable() {
    for model in ["nx", "px"] {
        let dev = device(model, 27.0);
        for [d, g, s, b] in biases(2000) {
            let one = dev.branches(at([d, g, s, b])).terminals();
            let two = dev.branches(at([s, g, d, b])).terminals();
            let most = one.iter().fold(0.0f64, |m, i| m.max(i.abs()));
            for (i, j) in [(0, 2), (1, 1), (2, 0), (3, 3)] {
                assert!((one[i] - two[j]).abs() <= 1e-12 * most, "{model}: {one:?} {two:?}");
            }
        }
    }
}

#[test]
fn dual_slopes_equal_differences() {
    // five-point differences: error of order h⁴; 1e-5 leaves room for their own rounding
    let h = 1e-4;
    for model in ["nx", "px"] {
        let dev = device(model, 27.0);
        for v in biases(600) {
            let bias = at(v);
            let dual = dev.branches_dual(bias.dual()).terminals();
            let value = dev.branches(bias).terminals();
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
                    assert!((dual[t].v - value[t]).abs() <= 1e-12 * value[t].abs() + 1e-30);
                    let slope = (8.0 * (p1[t] - m1[t]) - (p2[t] - m2[t])) / (12.0 * h);
                    let scale = slope.abs().max(value[t].abs()).max(p1[t].abs());
                    assert!(
                        (dual[t].d[k] - slope).abs() <= 2e-5 * scale + 1e-22,
                        "{model} {v:?} terminal {t} slope {k}: {} {slope}",
                        dual[t].d[k]
                    );
                }
            }
        }
    }
}

/// Value and slope have no step anywhere along a sweep: neighbouring slopes differ by less than the sweep explains.
#[test]
fn currents_and_slopes_are_continuous_across_regions() {
    for model in ["nx", "px"] {
        let dev = device(model, 27.0);
        let s = dev.polarity().sign();
        for (what, fixed) in
            [(0, [0.9, 0.0, -0.4]), (1, [0.5, 0.0, 0.0]), (1, [-0.3, 0.0, -0.5]), (2, [0.4, 0.8, 0.0])]
        {
            let mut last: Option<([f64; 4], [f64; 4])> = None;
            let step = 1e-4;
            for k in -12000..12000 {
                let x = f64::from(k) * step;
                let mut b = Bias { vgs: s * fixed[0], vds: s * fixed[1], vbs: s * fixed[2] };
                match what {
                    0 => b.vgs = s * x,
                    1 => b.vds = s * x,
                    _ if x > 0.5 => break,
                    _ => b.vbs = s * x,
                }
                let t = dev.branches_dual(b.dual()).terminals();
                let now = (t.map(|i| i.v), t.map(|i| i.d[what]));
                if let Some((v0, d0)) = last {
                    for i in 0..4 {
                        let mean = 0.5 * (d0[i] + now.1[i]);
                        let jump = (now.0[i] - v0[i] - s * step * mean).abs();
                        let scale = now.0[i].abs().max(v0[i].abs());
                        assert!(
                            jump <= 2e-3 * scale + 1e-20,
                            "{model} sweep {what} at {x}: step of {jump} in {scale}"
                        );
                    }
                }
                last = Some(now);
            }
        }
    }
}

/// The thermal limit kT/q·ln 10 (59.5 mV a decade at 300 K, CODATA 2018 constants) holds for any silicon barrier device.
#[test]
fn subthreshold_slope_stays_above_the_thermal_limit() {
    for model in ["nx", "px"] {
        for temp_c in [-40.0, 27.0, 125.0] {
            let dev = device(model, temp_c);
            let s = dev.polarity().sign();
            let limit =
                Kelvin::from_celsius(temp_c).expect("fine").thermal_voltage() * std::f64::consts::LN_10;
            for k in 0..30 {
                let vgs = 0.05 + 0.01 * f64::from(k);
                let i = |v: f64| s * dev.branches(Bias { vgs: s * v, vds: s * 0.5, vbs: 0.0 }).channel_ds;
                let swing = 2e-3 / (i(vgs + 1e-3) / i(vgs - 1e-3)).log10();
                assert!(
                    swing > limit && swing < 3.0 * limit || vgs > 0.25,
                    "{model} {temp_c}: {swing} V/decade"
                );
            }
        }
    }
}

#[test]
fn channel_current_only_falls_with_overdrive_and_gidl_only_rises() {
    for model in ["nx", "px"] {
        let dev = device(model, 27.0);
        let s = dev.polarity().sign();
        let (mut channel, mut gidl) = (f64::INFINITY, 0.0);
        for k in 0..120 {
            let b = dev.branches(Bias { vgs: -s * 0.01 * f64::from(k), vds: s * 1.1, vbs: 0.0 });
            assert!(b.channel_ds.abs() < channel && b.gidl_db.abs() >= gidl, "{model} at {k}0 mV");
            (channel, gidl) = (b.channel_ds.abs(), b.gidl_db.abs());
        }
        assert!(gidl > channel, "{model}: no optimum in reach");
    }
}
