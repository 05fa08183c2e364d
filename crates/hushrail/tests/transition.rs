//! Waking, falling asleep and what they cost, against closed forms. "A24" and the like are sections of the reference sheet the
//! project was planned with; values marked so were derived there from printed formulas.

mod common;

use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use common::{AllRegion, Ideal, channel_device, r1};
use hushrail::block::{BlockCurrents, BlockCurve, BlockError, Collapsing, CurveError, Draw};
use hushrail::cell::Levels;
use hushrail::device::dual::Real;
use hushrail::device::{Bias, Branches, Device, Polarity};
use hushrail::standby::rest::Clamps;
use hushrail::standby::scheme::SwitchSpec;
use hushrail::standby::stress::{Area, LifetimeLaw, Pair, lifetime, switch_stress};
use hushrail::standby::switch::Side;
use hushrail::standby::{Scheme, StressLimits, Switch, rest_rails};
use hushrail::transition::{
    Battery, CycleCosts, DutyProfile, GateCapacitance, Gated, Idle, LadderSpec, Package, Policy,
    RailCapacitance, Segment, SleepSpec, Start, TransitionError, WakeSpec, break_even, design_ladder, duty,
    fall_asleep, round_trip, wake_up,
};

/// A block whose current is a law of the span.
struct Law<F>(F);

impl<F: Fn(f64) -> f64 + Sync> Draw for Law<F> {
    fn draw(&self, levels: &Levels, _: &AtomicBool) -> Result<BlockCurrents, BlockError> {
        let span = levels.supply_v - levels.ground_v;
        let i = (self.0)(span);
        let mut c = BlockCurrents::zero();
        (c.supply[0], c.ground[0], c.power_w[0]) = (i, -i, i * span);
        Ok(c)
    }
}

/// What a test switch does when its gate is above half a volt; below, it leaks.
#[derive(Debug, Clone, Copy)]
enum On {
    /// Conductance, S.
    Ohmic(f64),
    /// Current, A, once the drain is some millivolts up.
    Constant(f64),
}

#[derive(Debug, Clone, Copy)]
struct Plain {
    on: On,
    /// Current off, A.
    leak_a: f64,
}

impl Plain {
    fn law<R: Real>(self, b: Bias<R>) -> Branches<R> {
        let saturated = |i: f64| -(-(b.vds / 1e-3)).exp_m1() * i;
        let i = if b.vgs.val() <= 0.5 {
            saturated(self.leak_a)
        } else {
            match self.on {
                On::Ohmic(g) => b.vds * g,
                On::Constant(i) => saturated(i),
            }
        };
        Branches { channel_ds: i, ..Branches::zero() }
    }
}

channel_device!(Plain, |_| Polarity::N, |_| 25.852e-3);

fn scheme(width_m: f64, overdrive_v: f64) -> Scheme {
    let footer =
        SwitchSpec { finger_width_m: Some(1e-6), overdrive_v, ..SwitchSpec::new("nx", width_m, 6e-8) };
    Scheme { footer: Some(footer), ..Scheme::ungated("foot") }
}

fn switch(device: impl Device + 'static, scheme: &Scheme) -> Switch {
    let spec = scheme.footer.as_ref().expect("a footer");
    Switch {
        device: Arc::new(device),
        fingers: spec.width_m / 1e-6,
        side: Side::Footer,
        rail_v: 0.0,
        gate_v: -spec.overdrive_v,
        awake_gate_v: 1.0,
        vdd_v: 1.0,
        body_v: 0.0,
        awake_body_v: 0.0,
    }
}

fn curve(scheme: &Scheme, law: impl Fn(f64) -> f64 + Sync) -> BlockCurve {
    scheme.curve(&Law(law), 1.0, 1e-6, &AtomicBool::new(false)).expect("smooth law")
}

fn close(got: f64, want: f64, tolerance: f64, what: &str) {
    assert!((got / want - 1.0).abs() <= tolerance, "{what}: {got:e}, want {want:e}");
}

const C: f64 = 200e-12;

/// A switch of 1 Ω on 200 pF (B11.1), and one of 50 mA (B11.2); no block current.
#[test]
fn charging_follows_the_closed_forms() {
    let s = scheme(1e-3, 0.0);
    let none = curve(&s, |_| 0.0);
    let ohm = switch(Plain { on: On::Ohmic(1e-3), leak_a: 0.0 }, &s);
    let g = Gated::new(&s, &none, &ohm, C).expect("domain");
    for (within, want) in [(0.1, 460.517e-12), (0.01, 921.034e-12)] {
        let spec = WakeSpec { ready_within: within, from_span_v: Some(0.0), ..WakeSpec::default() };
        let w = wake_up(&g, &spec).expect("awake");
        close(w.ready_s, want, 1e-6, "time to ready");
        close(w.peak_a, 1.0, 1e-9, "peak");
        assert_eq!(w.peak_s, 0.0);
        assert!(w.charge_mismatch < 1e-8, "{}", w.charge_mismatch);
        for (t, x) in w.times_s.iter().zip(&w.span_v) {
            assert!((x - (1.0 - (-t / 200e-12).exp())).abs() < 1e-8, "{t} {x}");
        }
    }
    let source = switch(Plain { on: On::Constant(50e-6), leak_a: 0.0 }, &s);
    let g = Gated::new(&s, &none, &source, C).expect("domain");
    let spec = WakeSpec { ready_within: 0.1, from_span_v: Some(0.0), ..WakeSpec::default() };
    let w = wake_up(&g, &spec).expect("awake");
    close(w.ready_s, 0.9 * 4.0e-9, 1e-7, "time at constant current");
    close(w.peak_a, 50e-3, 1e-9, "peak at constant current");
}

/// Logarithmic collapse (B8.11): I0 = 1 mA, 200 pF, η = 0.1, n = 1.4, no switch leakage, to 1e-4.
#[test]
fn collapse_of_a_law_with_dibl() {
    let a = 0.1 / (1.4 * 25.851999786e-3);
    let s = scheme(1e-3, 0.0);
    let c = curve(&s, |x| 1e-3 * (-a * (1.0 - x)).exp());
    let sw = switch(Plain { on: On::Ohmic(1.0), leak_a: 0.0 }, &s);
    let g = Gated::new(&s, &c, &sw, C).expect("domain");
    let fall =
        fall_asleep(&g, &SleepSpec { from_span_v: Some(1.0), ..SleepSpec::default() }, 1e-3).expect("asleep");
    for (t, want) in [(10e-9, 46.835e-3), (100e-9, 0.314054), (1e-6, 0.975626)] {
        close(1.0 - fall.span_v(t), want, 1e-4, "virtual ground");
        close(1.0 - fall.span_v(t), (a * 1e-3 * t / C).ln_1p() / a, 1e-6, "virtual ground, closed form");
    }
    // B11.5: 5 pC of gate charge at 1 V
    let costs = CycleCosts {
        gate: GateCapacitance { total_f: Some(5e-12), ..Default::default() },
        ..Default::default()
    };
    let b = break_even(&fall, &costs).expect("solved");
    close(b.time_s.expect("pays"), 30.3362e-9, 1e-4, "break-even");
    close(1.0 - b.span_v.expect("pays"), 126.68e-3, 1e-4, "rail at break-even");
    let ratio = b.ratio.expect("both");
    assert!(ratio > 4.4 && ratio < 6.9, "B11.6, trend: {ratio}");
}

/// Ohmic collapse: B11.4 (to 1e-5), the formula of full collapse B11.3 (exact), ledgers to 1e-6, the time constant.
#[test]
fn collapse_of_an_ohmic_block() {
    let s = scheme(1e-3, 0.0);
    let c = curve(&s, |x| 1e-3 * x);
    let costs = CycleCosts {
        gate: GateCapacitance { total_f: Some(5e-12), ..Default::default() },
        ..Default::default()
    };
    let from = SleepSpec { from_span_v: Some(1.0), ..SleepSpec::default() };
    let tight = switch(Plain { on: On::Ohmic(1.0), leak_a: 0.0 }, &s);
    let g = Gated::new(&s, &c, &tight, C).expect("domain");
    let fall = fall_asleep(&g, &from, 1e-3).expect("asleep");
    let b = break_even(&fall, &costs).expect("solved");
    close(b.time_s.expect("pays"), 46.4520e-9, 1e-5, "break-even");
    close(b.span_v.expect("pays"), 0.793, 1e-3, "rail at break-even");
    close(b.full_collapse_s.expect("saves"), 205.0e-9, 1e-6, "full collapse, no sleep current");
    let report = fall.collapse();
    close(report.time_constant_s, 200e-9, 1e-6, "time constant");
    close(report.ohmic_time_constant_s, 200e-9, 1e-9, "ohmic time constant");
    assert!(report.ledger_mismatch < 1e-6, "{}", report.ledger_mismatch);

    let leaky = switch(Plain { on: On::Ohmic(1.0), leak_a: 10e-9 }, &s);
    let g = Gated::new(&s, &c, &leaky, C).expect("domain");
    let fall = fall_asleep(&g, &from, 1e-3).expect("asleep");
    close(fall.rest_span_v, 0.01, 1e-7, "rest point");
    let b = break_even(&fall, &costs).expect("solved");
    close(b.full_collapse_s.expect("saves"), 207.0707e-9, 1e-6, "full collapse");
    assert!(fall.collapse().ledger_mismatch < 1e-6);
    // beyond the collapse both ledgers go on together
    let [x, y] = fall.ledgers_j(1e-3);
    close(x, y, 1e-6, "ledgers, long after");
    // small sleeps cost nothing of the rail: the supply ledger's recharge
    let r = round_trip(&fall, &costs, 1e-12).expect("costs");
    assert!(r.rail_j < 1e-14 && (r.gate_j / 5e-12 - 1.0).abs() < 1e-12, "{r:?}");
    assert!(r.notes.iter().any(|n| n.code == "costs-left-out"));
}

/// Overdrive: `C·(Vdd + Vod)²/efficiency` (A25), and an efficiency that is not guessed.
#[test]
fn the_gate_is_paid_over_its_full_swing() {
    let s = Scheme { pwell_bias_v: 0.5, pump_efficiency: Some(0.5), ..scheme(1e-3, 0.2) };
    let c = curve(&s, |x| 1e-3 * x);
    let sw = switch(Plain { on: On::Ohmic(1.0), leak_a: 0.0 }, &s);
    let sw = Switch { awake_gate_v: 1.1, ..sw };
    let g = Gated::new(&s, &c, &sw, C).expect("domain");
    let fall = fall_asleep(&g, &SleepSpec::default(), 1e-3).expect("asleep");
    let gate = GateCapacitance { per_width_f_m: Some(1e-9), ..Default::default() };
    let costs = CycleCosts { gate, pwell_f: Some(10e-12), ..Default::default() };
    let r = round_trip(&fall, &costs, 1e-6).expect("costs");
    close(r.gate_swing_v, 1.3, 1e-12, "swing");
    close(r.gate_j, 1e-12 * 1.3 * 1.3 / 0.5, 1e-12, "gate");
    close(r.wells_j, 10e-12 * 0.5 * 0.5 / 0.5, 1e-12, "wells");
    let e = round_trip(&fall, &CycleCosts { pwell_f: None, ..costs }, 1e-6).expect_err("no well");
    assert!(e.to_string().contains("no capacitance given for the biased p-wells"), "{e}");
    // the card's oxide: ε/tox·W·L with overlap, 3.9·8.854e-12/2e-9·1e-3·6e-8 + 1e-3·1e-10
    let gate = GateCapacitance { overlap_f_m: Some(1e-10), ..Default::default() };
    let r = round_trip(&fall, &CycleCosts { gate, ..costs }, 1e-6).expect("costs");
    close(r.gate_f, 3.9 * 8.8541878128e-12 / 2e-9 * 6e-11 + 1e-13, 1e-9, "oxide");
}

/// A current step into a series RLC: `b(t) = R·I + …` underdamped, derived from Kirchhoff's laws.
#[test]
fn bounce_of_a_current_step() {
    let s = scheme(1e-3, 0.0);
    let none = curve(&s, |_| 0.0);
    let source = switch(Plain { on: On::Constant(50e-6), leak_a: 0.0 }, &s);
    // a rail so large that the current stays what it is
    let g = Gated::new(&s, &none, &source, 1e-6).expect("domain");
    let p = Package { inductance_h: 1e-9, resistance_ohm: 0.2, decoupling_f: 1e-9 };
    let spec =
        WakeSpec { from_span_v: Some(0.0), ready_within: 0.5, package: Some(p), ..WakeSpec::default() };
    let w = wake_up(&g, &spec).expect("awake");
    let (l, r, c, i0) = (p.inductance_h, p.resistance_ohm, p.decoupling_f, 50e-3);
    let alpha = r / (2.0 * l);
    let omega = (1.0 / (l * c) - alpha * alpha).sqrt();
    // b'' + (R/L)·b' + b/(LC) = R·I/(LC) with b(0) = 0, b'(0) = I/C
    let b = |t: f64| {
        let e = (-alpha * t).exp();
        r * i0 * (1.0 - e * ((omega * t).cos() + alpha / omega * (omega * t).sin()))
            + i0 / c / omega * e * (omega * t).sin()
    };
    for (t, got) in w.times_s.iter().zip(&w.loss_v) {
        assert!((got - b(*t)).abs() < 1e-7, "{t:e}: {got} {}", b(*t));
    }
    let want = (0..200_000).map(|k| b(f64::from(k) * 1e-13)).fold(0.0, f64::max);
    close(w.bounce_v, want, 1e-4, "bounce");
    assert!(w.charge_mismatch < 1e-8, "{}", w.charge_mismatch);
}

/// The limit holds when the ladder is run again, with a gate that slews and with a package; a resistive switch's ladder is
/// geometric.
#[test]
fn ladders_keep_their_limit() {
    let s = scheme(1e-3, 0.0);
    let c = curve(&s, |x| 1e-5 * x);
    let ohm = switch(Plain { on: On::Ohmic(1e-3), leak_a: 1e-12 }, &s);
    let g = Gated::new(&s, &c, &ohm, C).expect("domain");
    let want = LadderSpec { peak_a: 0.1, segments: 4 };
    let spec = WakeSpec { from_span_v: Some(0.0), ..WakeSpec::default() };
    let l = design_ladder(&g, &spec, &want).expect("ladder");
    assert!(l.wake.peak_a <= 0.1 && l.wake.peak_a > 0.0985, "{}", l.wake.peak_a);
    assert_eq!(l.fingers.iter().sum::<f64>(), 1000.0);
    // Σg_j = I/(V − x): 99, 213, 460, 1000 fingers up to one finger of rounding
    let sums: Vec<f64> = l
        .fingers
        .iter()
        .scan(0.0, |a, f| {
            *a += f;
            Some(*a)
        })
        .collect();
    for (k, n) in sums.iter().enumerate() {
        assert!((n - 99.0 * (1000f64 / 99.0).powf(k as f64 / 3.0)).abs() <= 1.0, "{sums:?}");
        assert!(k == 0 || (n * 1e-3 * (1.0 - l.shares[k]) - 0.1).abs() < 1e-5, "{:?}", l.shares);
    }
    assert!(l.wake.ready_s > 0.95 * C / 0.1, "no faster than its charge allows");

    let soft =
        AllRegion { is_a: 1e-6, n: 1.4, vt0_v: 0.35, vt_v: 25.852e-3, polarity: Polarity::N, leak_s: 0.0 };
    let soft = switch(soft, &s);
    let g = Gated::new(&s, &c, &soft, C).expect("domain");
    let whole = wake_up(&g, &WakeSpec { gate_slew_s: 1e-10, ..WakeSpec::default() }).expect("awake").peak_a;
    for package in [None, Some(Package { inductance_h: 1e-10, resistance_ohm: 0.01, decoupling_f: 2e-9 })] {
        let spec = WakeSpec { gate_slew_s: 1e-10, package, ..WakeSpec::default() };
        let l = design_ladder(&g, &spec, &LadderSpec { peak_a: 0.1 * whole, segments: 6 }).expect("ladder");
        assert!(l.wake.peak_a <= 0.1 * whole, "{package:?}");
        assert!(l.wake.peak_rate_a_s.expect("slew given") > 0.0);
    }
    let e = design_ladder(&g, &spec, &LadderSpec { peak_a: 1e-9, segments: 6 })
        .expect_err("one finger is too much");
    assert!(
        matches!(e, TransitionError::NoLadder { .. }) && e.to_string().contains("times the limit"),
        "{e}"
    );
}

/// B8.1 to B8.10 by a curve: rest points of the engineering law, to 1e-5; 100 um of block at Vt 0.30, footer of its own.
#[test]
fn rest_points_on_a_curve_meet_the_published_ones() {
    for (ws, vts, vod, kg, want_v, want_cut) in [
        (50.0, 0.30, 0.0, 0.0, 0.625435, 5.629745),
        (50.0, 0.30, 0.0, 0.2, 0.312718, 13.357793),
        (50.0, 0.30, 0.05, 0.0, 0.874044, 11.275722),
        (50.0, 0.35, 0.0, 0.0, 0.874044, 11.275722),
        (10.0, 0.30, 0.0, 0.0, 0.910840, 12.793431),
        (200.0, 0.30, 0.0, 0.0, 0.374565, 2.814872),
        (50.0, 0.45, 0.0, 0.0, 0.996599, 127.359563),
        (50.0, 0.45, 0.10, 0.0, 0.999795, 2000.527526),
        (50.0, 0.45, 0.0, 0.2, 0.687717, 299.001997),
        (50.0, 0.45, 0.10, 0.2, 0.931172, 2418.174776),
    ] {
        let s = scheme(ws * 1e-6, vod);
        let block = Ideal { vt0_v: 0.30, kg, width: 100.0, ..r1() };
        let law = |x: f64| block.branches(Bias { vgs: 0.0, vds: x, vbs: x - 1.0 }).channel_ds;
        let c = curve(&s, law);
        let sw = switch(Ideal { vt0_v: vts, ..r1() }, &s);
        let stop = AtomicBool::new(false);
        let (_, ground) =
            rest_rails(&s, &c, 1.0, None, Some(sw.clone()), Clamps::default(), &stop).expect("rest");
        assert!((ground - want_v).abs() < 1e-5, "{ws} {vts} {vod} {kg}: {ground}");
        let asleep = sw.branches(ground).channel_ds;
        close(3.982040e-8 / asleep, want_cut, 2e-5, "reduction");
        let direct =
            rest_rails(&s, &Law(law), 1.0, None, Some(sw), Clamps::default(), &stop).expect("rest").1;
        assert!((ground - direct).abs() < 1e-6, "{ground} {direct}");
    }
}

/// B12: fields to 1e-4, the ratio of B12.6 exact; all pairs of an overdriven footer.
#[test]
fn stress_of_a_switch() {
    let moment = |vdd: f64, vod: f64| {
        let s = scheme(1e-3, vod);
        let mut sw = switch(Plain { on: On::Ohmic(1.0), leak_a: 0.0 }, &s);
        sw.body_v = -0.2;
        sw.asleep(vdd)
    };
    for (vdd, vod, oxide, want) in [
        (1.95, 0.0, 4.148e-9, 4.7011e8),
        (1.8, 0.0, 4.148e-9, 4.3394e8),
        (1.1, 0.0, 1.8e-9, 6.1111e8),
        (1.1, 0.3, 1.8e-9, 7.7778e8),
        (1.1, 0.0, 1.85e-9, 5.9459e8),
    ] {
        let s = switch_stress(oxide, &[moment(vdd, vod)], &StressLimits::default()).expect("stress");
        let gd = s.pairs.iter().find(|p| p.pair == Pair::GateDrain).expect("pair");
        close(gd.field_v_m.expect("over oxide"), want, 1e-4, "field");
        close(-gd.voltage_v / vdd, (vdd + vod) / vdd, 1e-14, "B12.6");
        assert!(s.notes.iter().any(|n| n.code == "oxide-caution"));
    }
    let limits = StressLimits { oxide_v: Some(1.3), field_v_m: Some(8e8), drain_bulk_v: Some(1.2) };
    let s = switch_stress(1.8e-9, &[moment(1.1, 0.3)], &limits).expect("stress");
    let holds = |pair| {
        s.pairs
            .iter()
            .find(|p| p.pair == pair)
            .expect("pair")
            .limits
            .iter()
            .map(|l| l.holds)
            .collect::<Vec<_>>()
    };
    assert_eq!(holds(Pair::GateDrain), [false, true]);
    assert_eq!(holds(Pair::GateSource), [true, true]);
    assert_eq!(holds(Pair::DrainBulk), [false]);
    assert!(!s.holds);
    assert!(switch_stress(0.0, &[moment(1.1, 0.3)], &limits).is_err());
    assert!(switch_stress(1e-9, &[], &limits).is_err());
    assert!(switch_stress(1e-9, &[moment(f64::NAN, 0.3)], &limits).is_err());
}

/// Lifetime laws at and off their reference; numbers are the test's own.
#[test]
fn lifetimes_follow_their_laws() {
    let temp = hushrail::physics::Kelvin::from_celsius(125.0).expect("in range");
    let field = LifetimeLaw::Field {
        reference_s: 1e8,
        reference_field_v_m: 5e8,
        gamma_m_v: 2e-8,
        activation_ev: 0.7,
        reference_temp_c: 125.0,
    };
    let at =
        |law: &LifetimeLaw, v: f64, area| lifetime(law, v, 2e-9, temp, area).expect("lifetime").lifetime_s;
    close(at(&field, 1.0, None), 1e8, 1e-12, "reference");
    close(at(&field, 1.2, None), 1e8 * (-2.0f64).exp(), 1e-12, "E");
    let inverse = LifetimeLaw::InverseField { reference_s: 1e8, reference_field_v_m: 5e8, g_v_m: 3.5e10 };
    close(at(&inverse, -1.25, None), 1e8 * (3.5e10 * (1.6e-9 - 2e-9f64)).exp(), 1e-9, "1/E");
    let power = LifetimeLaw::Power { reference_s: 1e8, reference_v: 1.0, exponent: 45.0 };
    close(at(&power, 1.1, None), 1e8 * 1.1f64.powi(-45), 1e-9, "power");
    let area = Area { area_m2: 8e-12, reference_area_m2: 1e-12, weibull_slope: 1.5 };
    close(at(&power, 1.0, Some(&area)), 1e8 * 0.25, 1e-12, "area");
    assert!(lifetime(&power, 1e-9, 2e-9, temp, None).is_err(), "beyond what a number holds");
    assert!(lifetime(&power, f64::NAN, 2e-9, temp, None).is_err());
}

#[test]
fn duty_and_battery() {
    let s = scheme(1e-3, 0.0);
    let c = curve(&s, |x| 1e-3 * x);
    let sw = switch(Plain { on: On::Ohmic(1.0), leak_a: 10e-9 }, &s);
    let g = Gated::new(&s, &c, &sw, C).expect("domain");
    let fall =
        fall_asleep(&g, &SleepSpec { from_span_v: Some(1.0), ..SleepSpec::default() }, 1e-3).expect("asleep");
    let costs = CycleCosts {
        gate: GateCapacitance { total_f: Some(5e-12), ..Default::default() },
        ..Default::default()
    };
    let profile = |idle: &[(f64, f64)], policy| DutyProfile {
        idle: idle.iter().map(|&(duration_s, weight)| Idle { duration_s, weight }).collect(),
        busy_s: 1.0,
        busy_power_w: 2e-3,
        policy,
    };
    let run = |p: &DutyProfile, b: Option<&Battery>| duty(&fall, &costs, p, b);
    let battery =
        Battery { capacity_ah: 0.1, self_discharge_per_year: 0.0, voltage_v: None, efficiency: None };
    let d = run(&profile(&[(9.0, 3.0)], Policy::Always), Some(&battery)).expect("average");
    // 9 s at 10 uW, 1 s at 2 mW, and the 200 pC·V + 5 pJ of a cycle
    close(d.power_w, (9.0 * 1e-5 + 2e-3 + 2.0e-10) / 10.0, 1e-6, "average");
    close(d.share_asleep, 0.9, 1e-12, "share");
    close(d.battery_life_s.expect("given"), 360.0 / d.current_a, 1e-12, "life");
    let leaky = Battery { self_discharge_per_year: 0.1, ..battery };
    let short = run(&profile(&[(9.0, 3.0)], Policy::Always), Some(&leaky)).expect("average").battery_life_s;
    assert!(short.expect("given") < 360.0 / d.current_a);
    // waiting sleeps less than knowing; a threshold at break-even is no worse than always or never on short idles
    let short = &[(5e-9, 100.0), (1e-3, 1.0)];
    let threshold = break_even(&fall, &costs).expect("solved").time_s.expect("pays");
    let power = |p| run(&profile(short, p), None).expect("average").power_w;
    let knows = power(Policy::IfLongerThanS(threshold));
    assert!(
        knows <= power(Policy::Always)
            && knows < power(Policy::Never)
            && knows < power(Policy::AfterS(threshold))
    );
    for (bad, says) in [
        (&[(1.0, 0.0)][..], "cannot be normalised"),
        (&[][..], "cannot be normalised"),
        (&[(-1.0, 1.0)][..], "entry 1"),
        (&[(1.0, f64::NAN)][..], "entry 1"),
    ] {
        let e = run(&profile(bad, Policy::Always), None).expect_err(says).to_string();
        assert!(e.contains(says), "{e}");
    }
    let e = run(&profile(&[(1.0, 1.0)], Policy::AfterS(-1.0)), None).expect_err("negative").to_string();
    assert!(e.contains("threshold"), "{e}");
    let half = Battery { voltage_v: Some(3.0), ..battery };
    assert!(run(&profile(&[(1.0, 1.0)], Policy::Always), Some(&half)).is_err());
}

#[test]
fn what_cannot_be_is_refused_in_words() {
    let s = scheme(1e-3, 0.0);
    let c = curve(&s, |x| 1e-6 * x);
    let ohm = switch(Plain { on: On::Ohmic(1e-3), leak_a: 1e-12 }, &s);
    let g = Gated::new(&s, &c, &ohm, C).expect("domain");
    let says = |e: TransitionError, text: &str| assert!(e.to_string().contains(text), "{e}");

    says(
        RailCapacitance::default().farads(3).expect_err("none"),
        "no capacitance given for the virtual rail: transitions are not computed",
    );
    says(
        RailCapacitance { per_area_f_m2: Some(1.0), ..Default::default() }.farads(3).expect_err("no area"),
        "area_m2",
    );
    assert_eq!(RailCapacitance { per_instance_f: Some(1e-15), ..Default::default() }.farads(2), Ok(2e-15));
    says(
        GateCapacitance::default().farads(&ohm, 1e-3, 6e-8).expect_err("none"),
        "no capacitance given for the switch's gate",
    );
    says(Gated::new(&s, &c, &ohm, -1.0).expect_err("negative"), "rail capacitance (F) is -1");
    says(Gated::new(&Scheme::ungated("on"), &c, &ohm, C).expect_err("no switch"), "no switch");

    // a switch that leaks more than the block draws holds the rail up
    let holds = switch(Plain { on: On::Ohmic(1e-3), leak_a: 1e-3 }, &s);
    let held = Gated::new(&s, &c, &holds, C).expect("domain");
    let e = fall_asleep(&held, &SleepSpec { from_span_v: Some(0.9999), ..SleepSpec::default() }, 1e-6)
        .expect_err("held");
    says(e, "the rail does not collapse");
    says(
        fall_asleep(&g, &SleepSpec { gate_slew_s: -1.0, ..Default::default() }, 1e-6).expect_err("t"),
        "gate slew (s) is -1",
    );
    says(
        fall_asleep(&g, &SleepSpec { from_span_v: Some(f64::NAN), ..Default::default() }, 1e-6)
            .expect_err("v"),
        "span at the start",
    );

    let wake = |segments: &[(f64, Start)]| {
        let segments = segments.iter().map(|&(width_m, start)| Segment { width_m, start }).collect();
        wake_up(&g, &WakeSpec { segments: Some(segments), ..WakeSpec::default() })
    };
    says(wake(&[]).expect_err("none"), "segments add up to 0 fingers, the switch has 1000");
    says(wake(&[(0.0, Start::AtS(0.0))]).expect_err("zero"), "segments add up to 0 fingers");
    says(
        wake(&[(1e-7, Start::AtS(0.0)), (1e-3, Start::AtS(0.0))]).expect_err("thin"),
        "narrower than one finger",
    );
    says(wake(&[(1e-3, Start::AtS(-1e-9))]).expect_err("past"), "start of a segment (s) is -");
    says(wake(&[(1e-3, Start::AtShare(1.5))]).expect_err("beyond"), "share of the supply");
    says(wake(&[(1e-3, Start::AtShare(0.9))]).expect_err("nothing is on"), "the rail is not ready");
    says(
        wake_up(&g, &WakeSpec { ready_within: 0.0, ..Default::default() }).expect_err("zero"),
        "ready_within",
    );
    let p = Package { inductance_h: 0.0, resistance_ohm: 0.0, decoupling_f: 1e-9 };
    says(
        wake_up(&g, &WakeSpec { package: Some(p), ..Default::default() }).expect_err("zero"),
        "package inductance",
    );

    let stop = AtomicBool::new(false);
    let sample = |tol| {
        BlockCurve::sample(&Law(|x| x), Collapsing::Ground, 1.0, &|x| s.levels(1.0, 1.0, 1.0 - x), tol, &stop)
    };
    assert!(matches!(sample(0.5), Err(CurveError::Range { .. })));
    let nan = s.curve(&Law(|x: f64| (x - 0.5).ln()), 1.0, 1e-3, &stop);
    assert!(nan.expect_err("not a number").to_string().contains("is not a number"));
    let off = c.draw(&Levels::powered(0.7), &stop).expect_err("supply is at 1 V on this curve").to_string();
    assert!(off.contains("sampled with other wells or rails"), "{off}");
}
