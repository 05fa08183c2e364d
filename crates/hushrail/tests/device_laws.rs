//! Laws every BSIM4 device must obey, on an invented card with every mechanism on.

mod common;

use std::sync::Arc;

use common::{CARDS, process, uniform};
use hushrail::device::process::{Process, Request};
use hushrail::device::{Bias, Device, Mechanism};
use hushrail::physics::Kelvin;
use hushrail::read::{DeckOptions, Place, Source};

/// What is added to both test cards: every mode of the manual that changes an equation.
const MODES: [&str; 10] = [
    "",
    "rdsmod=1 rdw=80 rsw=80 rdwmin=10 rswmin=10 prwg=0.1 prwb=0.05 vfbsdoff=0.1",
    "rsh=15",
    "mobmod=3 ud=0.5 tempmod=3 at=1e-3 ua1=0.1 uc1=0.1 ud1=0.1",
    "mobmod=4 ud=1e14 up=0.2 lp=50n",
    "mobmod=5 ud=1e14 uc=-0.03 tempmod=2 at=1e-3 ua1=1e-3 ub1=1e-3 uc1=1e-3 dvtp0=5n dvtp1=0.4",
    "mobmod=6 ud=1e14 ua=1e-15",
    "mtrlmod=1 eot=1.6n epsrsub=12.5 bg0sub=1.0 phig=4.2 easub=4.05 ados=1.1 bdos=0.9",
    "lambda=2e-9 vtl=1.5e5 xn=3 lc=5n",
    "gidlmod=1 rgidl=0.9 kgidl=0.2 fgidl=0.1",
];

fn moded(mode: &str) -> Process {
    let text = CARDS.replace("level=54 version=4.5", &format!("level=54 version=4.5 {mode}"));
    assert!(mode.is_empty() || text.len() > CARDS.len());
    Process::read("x", &[Source::from_text("cards.lib", &text)], &DeckOptions::default()).expect("cards")
}

/// A device of each polarity in each mode.
fn devices(temp_c: f64) -> impl Iterator<Item = (String, Arc<dyn Device>)> {
    MODES.iter().flat_map(move |mode| {
        let p = moded(mode);
        ["nx", "px"].map(|model| (format!("{model} {mode}"), make(&p, model, temp_c)))
    })
}

fn device(model: &str, temp_c: f64) -> Arc<dyn Device> {
    make(&process(), model, temp_c)
}

fn make(process: &Process, model: &str, temp_c: f64) -> Arc<dyn Device> {
    let params: [(&str, f64); 10] = [
        ("nrd", 1.5),
        ("nrs", 1.5),
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
    process.transistor(&r, t, &mut Vec::new()).expect("device").device
}

fn biases(count: u64) -> impl Iterator<Item = [f64; 4]> {
    (0..count).map(|k| std::array::from_fn(|i| 2.4 * uniform(7, 4 * k + i as u64) - 1.2))
}

fn at([d, g, s, b]: [f64; 4]) -> Bias<f64> {
    Bias::from_terminals(d, g, s, b)
}

#[test]
fn terminal_currents_add_up_to_nothing() {
    for (model, dev) in devices(60.0) {
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
    for temp_c in [-55.0, 27.0, 175.0] {
        for (model, dev) in devices(temp_c) {
            assert_eq!(dev.branches(at([0.0; 4])).terminals(), [0.0; 4], "{model}");
        }
    }
}

#[test]
fn drain_and_source_are_interchangeable() {
    for (model, dev) in devices(27.0) {
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
    for (model, dev) in devices(27.0) {
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
    for (model, dev) in devices(27.0) {
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

/// Resistances that do not depend on bias only move the terminals: the currents are those of the bare device at the
/// voltages behind the resistances (Kirchhoff).
#[test]
fn a_device_with_resistance_is_the_bare_device_behind_it() {
    let with = moded("rsh=15");
    for model in ["nx", "px"] {
        let (bare, dev) = (device(model, 27.0), make(&with, model, 27.0));
        for v in biases(500) {
            let b = at(v);
            let got = dev.branches(b).terminals();
            let (a, c) = (-22.5 * got[2], 22.5 * got[0]);
            let want = bare.branches(Bias { vgs: b.vgs - a, vds: b.vds - a - c, vbs: b.vbs - a }).terminals();
            let most = want.iter().fold(0.0f64, |m, i| m.max(i.abs()));
            for t in 0..4 {
                assert!((got[t] - want[t]).abs() <= 1e-11 * most, "{model} {v:?}: {got:?} {want:?}");
            }
        }
    }
}

/// A described material with the constants of silicon and oxide is silicon and oxide: what the two parts of the manual say
/// agrees where they overlap. Left over: the rounding of the model's own constants (1.03594e-10 F/m against 11.7·ε0, and
/// the exponent 21.5565981 of its carrier density).
#[test]
fn described_silicon_is_silicon() {
    let gap = 1.16 - 7.02e-4 * 300.15f64.powi(2) / (300.15 + 1108.0);
    let (easub, phig) = (4.05, 4.05 + 0.5 * gap - 0.45);
    // GIDL sees the flat band of the diffusion, which the silicon form has in EGIDL; it stays out of this comparison
    let same =
        format!("mtrlmod=1 eot=2n epsrox=3.9 toxp=2n agidl=0 igcmod=0 igbmod=0 phig={phig} easub={easub}");
    let cards = CARDS
        .replace("toxe=2.1n", "toxe=2n")
        .replace("igcmod=1 igbmod=1 ", "")
        .replace("agidl=2e-5 ", "")
        .replace("agidl=1e-5 ", "");
    let text = cards.replace("level=54 version=4.5", &format!("level=54 version=4.5 {same}"));
    let plain = cards.replace("level=54 version=4.5", "level=54 version=4.5 agidl=0 igcmod=0 igbmod=0");
    let read = |t: &str| {
        Process::read("x", &[Source::from_text("cards.lib", t)], &DeckOptions::default()).expect("cards")
    };
    let (silicon, described) = (read(&plain), read(&text));
    for temp_c in [-40.0, 125.0] {
        for model in ["nx", "px"] {
            let (a, b) = (make(&silicon, model, temp_c), make(&described, model, temp_c));
            for v in biases(400) {
                let (x, y) = (a.branches(at(v)).channel_ds, b.branches(at(v)).channel_ds);
                assert!((x - y).abs() <= 5e-5 * x.abs(), "{model} {temp_c} {v:?}: {x} {y}");
            }
        }
    }
}

/// Junctions driven hard forward through a resistance, cold: what the exponential does to a solver inside the device.
#[test]
fn resistances_hold_junctions_driven_forward() {
    for mode in ["rdsmod=1 rsw=80 rdw=90", "rsh=15", "rdsmod=1 rsw=5000 rdw=9000 rsh=1000"] {
        let p = moded(&format!("{mode} jss=1e-3 ijthsfwd=0"));
        for model in ["nx", "px"] {
            for temp_c in [-55.0, 25.0, 150.0] {
                let dev = make(&p, model, temp_c);
                for v in biases(600) {
                    let b = at(v.map(|x| 1.4 * x));
                    let i = dev.branches_dual(b.dual()).terminals();
                    let most = i.iter().fold(0.0f64, |m, i| m.max(i.v.abs()));
                    assert!(
                        i.iter().all(|i| i.v.is_finite() && i.d.iter().all(|d| d.is_finite())),
                        "{mode} {model} {v:?}"
                    );
                    assert!(i.iter().map(|i| i.v).sum::<f64>().abs() <= 1e-14 * most, "{mode} {model} {v:?}");
                }
            }
        }
    }
}
