//! Waking: the rail charges through the switch, segments in turn, and pulls on the package.
//!
//! `C·dx/dt = I_switch(x, b, gates) − I_block(x)` for the span x left to the block; with a package also
//! `C_d·db/dt = I_real − i` and `L·di/dt = b − R·i` for the loss b at the real rail and the current i through the package
//! (Kirchhoff's laws). The current of the switch is the device's own at every moment.

use serde::{Deserialize, Serialize};

use super::error::{TransitionError, not_negative, positive};
use super::gated::{FingerCurrent, Gated};
use super::ode::{Motion, Tolerance, Trace, integrate};
use super::quadrature::gauss;
use crate::device::root::summit;
use crate::read::deck::Note;
use crate::standby::stress::Moment;

/// When a segment is switched on.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum Start {
    /// At a time, s.
    AtS(f64),
    /// When the span reached this share of the supply.
    AtShare(f64),
}

/// Part of a switch that is turned on at once.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Segment {
    /// Its width, m; one finger or more.
    pub width_m: f64,
    /// When it starts.
    pub start: Start,
}

/// Between the ideal supply and the real rail: one loop for supply and ground together.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Package {
    /// Series inductance of the loop, H.
    pub inductance_h: f64,
    /// Series resistance of the loop, ohm.
    pub resistance_ohm: f64,
    /// Decoupling at the real rail, F.
    pub decoupling_f: f64,
}

/// How a domain is woken.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct WakeSpec {
    /// Segments in turn; the whole switch at zero when left out.
    #[serde(default)]
    pub segments: Option<Vec<Segment>>,
    /// Time a gate takes from its off to its on level, s.
    #[serde(default)]
    pub gate_slew_s: f64,
    /// The rail is ready within this share of the supply.
    #[serde(default = "ready")]
    pub ready_within: f64,
    /// Package and decoupling; an ideal supply when left out.
    #[serde(default)]
    pub package: Option<Package>,
    /// Span at the start, V; the rest point when left out.
    #[serde(default)]
    pub from_span_v: Option<f64>,
    /// Time after which a rail that is not ready is given up, s.
    #[serde(default)]
    pub give_up_s: Option<f64>,
}

fn ready() -> f64 {
    0.05
}

impl Default for WakeSpec {
    fn default() -> Self {
        Self {
            segments: None,
            gate_slew_s: 0.0,
            ready_within: ready(),
            package: None,
            from_span_v: None,
            give_up_s: None,
        }
    }
}

/// A wake-up.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Wake {
    /// Times, s; rows below are as long.
    pub times_s: Vec<f64>,
    /// Span left to the block, V.
    pub span_v: Vec<f64>,
    /// Loss at the real rail, V; all zero without a package.
    pub loss_v: Vec<f64>,
    /// Current of the switch (and clamp) into the block's rail, A.
    pub switch_a: Vec<f64>,
    /// Current of the block, A.
    pub block_a: Vec<f64>,
    /// Current through the package, A; that of the switch without one.
    pub supply_a: Vec<f64>,
    /// Gate that is furthest on, V.
    pub gate_first_v: Vec<f64>,
    /// Gate that is furthest off, V.
    pub gate_last_v: Vec<f64>,
    /// Largest current of the switch, A.
    pub peak_a: f64,
    /// When, s.
    pub peak_s: f64,
    /// Largest rate of the switch's current, A/s; none when gates jump (no slew time).
    pub peak_rate_a_s: Option<f64>,
    /// When the rail is within its share of the supply, s.
    pub rail_ready_s: f64,
    /// When it is and every gate has arrived, s.
    pub ready_s: f64,
    /// When each segment starts, s.
    pub starts_s: Vec<f64>,
    /// Largest loss at the real rail (undershoot), V.
    pub bounce_v: f64,
    /// Largest gain at the real rail (overshoot), V.
    pub overshoot_v: f64,
    /// Charge the supply delivered until the end of the rows, C.
    pub charge_c: f64,
    /// Energy the supply delivered, J.
    pub energy_j: f64,
    /// Largest relative difference between charge moved and integral of current at rail, decoupling and package.
    pub charge_mismatch: f64,
    /// Remarks.
    pub notes: Vec<Note>,
}

impl Wake {
    /// Terminal voltages of the switch all along, for [`switch_stress`](crate::standby::stress::switch_stress).
    pub fn moments(&self, g: &Gated<'_>) -> Vec<Moment> {
        let at = |k: usize, gate: f64| {
            g.switch.waking(g.vdd_v, self.times_s[k], gate, self.span_v[k], self.loss_v[k])
        };
        (0..self.times_s.len())
            .flat_map(|k| [at(k, self.gate_first_v[k]), at(k, self.gate_last_v[k])])
            .collect()
    }
}

/// Fingers that start together.
#[derive(Debug, Clone, Copy)]
pub(super) struct Group {
    pub(super) fingers: f64,
    /// Infinite until it is known.
    pub(super) start: f64,
}

/// The equations of one piece: which groups have started is fixed at its beginning.
struct Waking<'a> {
    g: &'a Gated<'a>,
    groups: &'a [Group],
    slew: f64,
    /// Start of the piece.
    now: f64,
    package: Option<Package>,
}

/// Everything that flows at one moment.
struct Flow {
    all: FingerCurrent,
    /// d(rail current)/dt by the gates alone.
    by_gates: f64,
    block: crate::block::curve::Sloped,
}

impl Waking<'_> {
    fn gate(&self, t: f64, group: &Group) -> (f64, f64) {
        let (off, on) = (self.g.switch.gate_v, self.g.on_v);
        if group.start > self.now {
            return (off, 0.0);
        }
        let rate = (on - off) / self.slew;
        if self.slew > 0.0 && t < group.start + self.slew && self.now < group.start + self.slew {
            (off + rate * (t - group.start), rate)
        } else {
            (on, 0.0)
        }
    }

    fn flow(&self, t: f64, span: f64, loss: f64) -> Flow {
        let zero = FingerCurrent {
            rail_a: 0.0,
            real_a: 0.0,
            per_span: 0.0,
            per_loss: 0.0,
            per_gate: 0.0,
            real_per: [0.0; 2],
        };
        let (mut all, mut by_gates) = (zero, 0.0);
        // groups whose gates are together are one
        let mut together: Vec<(f64, f64, f64)> = Vec::with_capacity(3);
        for group in self.groups {
            let (gate, rate) = self.gate(t, group);
            match together.iter_mut().find(|x| x.0 == gate && x.1 == rate) {
                Some(x) => x.2 += group.fingers,
                None => together.push((gate, rate, group.fingers)),
            }
        }
        for (gate, rate, n) in together {
            let f = self.g.finger(gate, span, loss);
            all.rail_a += n * f.rail_a;
            all.real_a += n * f.real_a;
            all.per_span += n * f.per_span;
            all.per_loss += n * f.per_loss;
            for (to, x) in all.real_per.iter_mut().zip(f.real_per) {
                *to += n * x;
            }
            by_gates += n * f.per_gate * rate;
        }
        let clamp = self.g.clamp_gives(span, loss);
        all.rail_a += clamp.rail_a;
        all.real_a += clamp.real_a;
        all.per_span += clamp.rail_per[0];
        all.per_loss += clamp.rail_per[1];
        for (to, x) in all.real_per.iter_mut().zip(clamp.real_per) {
            *to += x;
        }
        Flow { all, by_gates, block: self.g.block(span) }
    }
}

impl Motion<1> for Waking<'_> {
    fn rate(&self, t: f64, y: &[f64; 1]) -> [f64; 1] {
        let f = self.flow(t, y[0], 0.0);
        [(f.all.rail_a - f.block.value) / self.g.rail_f]
    }
    fn jacobian(&self, t: f64, y: &[f64; 1]) -> [[f64; 1]; 1] {
        let f = self.flow(t, y[0], 0.0);
        [[(f.all.per_span - f.block.per_v) / self.g.rail_f]]
    }
}

impl Motion<3> for Waking<'_> {
    fn rate(&self, t: f64, y: &[f64; 3]) -> [f64; 3] {
        let Some(p) = self.package else { return [0.0; 3] };
        let f = self.flow(t, y[0], y[1]);
        [
            (f.all.rail_a - f.block.value) / self.g.rail_f,
            (f.all.real_a - y[2]) / p.decoupling_f,
            (y[1] - p.resistance_ohm * y[2]) / p.inductance_h,
        ]
    }
    fn jacobian(&self, t: f64, y: &[f64; 3]) -> [[f64; 3]; 3] {
        let Some(p) = self.package else { return [[0.0; 3]; 3] };
        let f = self.flow(t, y[0], y[1]);
        let (c, d, l) = (self.g.rail_f, p.decoupling_f, p.inductance_h);
        [
            [(f.all.per_span - f.block.per_v) / c, f.all.per_loss / c, 0.0],
            [f.all.real_per[0] / d, f.all.real_per[1] / d, -1.0 / d],
            [0.0, 1.0 / l, -p.resistance_ohm / l],
        ]
    }
}

/// Checks the segments and makes groups of them.
pub(super) fn groups(g: &Gated<'_>, spec: &WakeSpec) -> Result<Vec<Group>, TransitionError> {
    let Some(segments) = &spec.segments else {
        return Ok(vec![Group { fingers: g.switch.fingers, start: 0.0 }]);
    };
    let (finger_m, devices) = g.fingers();
    let mut sum = 0.0;
    let mut out = Vec::new();
    for s in segments {
        not_negative("segment width (m)", s.width_m)?;
        match s.start {
            Start::AtS(t) => not_negative("start of a segment (s)", t)?,
            Start::AtShare(share) if share > 0.0 && share < 1.0 => {}
            Start::AtShare(value) => {
                return Err(TransitionError::Range {
                    what: "start of a segment (share of the supply)".into(),
                    value,
                    wanted: "want more than zero and less than one".into(),
                });
            }
        }
        if s.width_m > 0.0 && s.width_m < finger_m * (1.0 - 1e-9) {
            return Err(TransitionError::Narrow { width_m: s.width_m, finger_m });
        }
        let fingers = s.width_m / finger_m * devices;
        sum += fingers;
        let start = if let Start::AtS(t) = s.start { t } else { f64::INFINITY };
        out.push(Group { fingers, start });
    }
    if !((sum - g.switch.fingers).abs() <= 1e-6 * g.switch.fingers) {
        return Err(TransitionError::Segments { sum, switch: g.switch.fingers });
    }
    Ok(out)
}

impl Gated<'_> {
    /// Width of one finger, m, and devices that one finger of the switch stands for.
    pub(super) fn fingers(&self) -> (f64, f64) {
        let spec = self.scheme.header.as_ref().or(self.scheme.footer.as_ref());
        spec.map_or((1.0, 1.0), |s| {
            let finger = s.finger_width_m.unwrap_or(s.width_m);
            (finger, self.switch.fingers * finger / s.width_m)
        })
    }
}

/// Checks a request's numbers and gives the span at the start; `rest_span_v` is where the rail rests, where it is known.
pub(super) fn start_span(
    g: &Gated<'_>,
    spec: &WakeSpec,
    rest_span_v: Option<f64>,
) -> Result<f64, TransitionError> {
    not_negative("gate slew (s)", spec.gate_slew_s)?;
    if !(spec.ready_within > 0.0 && spec.ready_within < 1.0) {
        return Err(TransitionError::Range {
            what: "ready_within (share of the supply)".into(),
            value: spec.ready_within,
            wanted: "want more than zero and less than one".into(),
        });
    }
    if let Some(t) = spec.give_up_s {
        positive("give_up_s (s)", t)?;
    }
    match (spec.from_span_v, rest_span_v) {
        (Some(v), _) if v >= 0.0 && v < g.vdd_v => Ok(v),
        (Some(value), _) => Err(TransitionError::Range {
            what: "span at the start (V)".into(),
            value,
            wanted: format!("want zero or more and less than the supply ({} V)", g.vdd_v),
        }),
        (None, Some(v)) => Ok(v),
        (None, None) => g.rest_span_v(),
    }
}

/// Wakes a domain.
///
/// # Errors
/// Numbers that cannot be, segments that do not make the switch, a rail that never becomes ready.
pub fn wake_up(g: &Gated<'_>, spec: &WakeSpec) -> Result<Wake, TransitionError> {
    let from = start_span(g, spec, None)?;
    let groups = groups(g, spec)?;
    match spec.package {
        None => run::<1>(g, spec, groups, [from]),
        Some(p) => {
            positive("package inductance (H)", p.inductance_h)?;
            not_negative("package resistance (ohm)", p.resistance_ohm)?;
            positive("decoupling (F)", p.decoupling_f)?;
            let i = g.switch.fingers * g.finger(g.switch.gate_v, from, 0.0).real_a
                + g.clamp_gives(from, 0.0).real_a;
            run::<3>(g, spec, groups, [from, p.resistance_ohm * i, i])
        }
    }
}

/// One piece of the motion, with what was known when it began.
struct Piece<const N: usize> {
    groups: Vec<Group>,
    now: f64,
    trace: Trace<N>,
}

fn run<const N: usize>(
    g: &Gated<'_>,
    spec: &WakeSpec,
    mut groups: Vec<Group>,
    from: [f64; N],
) -> Result<Wake, TransitionError>
where
    for<'b> Waking<'b>: Motion<N>,
{
    let slew = spec.gate_slew_s;
    let wanted = (1.0 - spec.ready_within) * g.vdd_v;
    let on = g.switch.fingers * g.finger(g.on_v, from[0], 0.0).rail_a;
    let pace = g.rail_f * g.vdd_v / on.abs().max(1e-30);
    let latest = groups.iter().map(|x| x.start).filter(|t| t.is_finite()).fold(0.0, f64::max);
    let give_up = spec.give_up_s.unwrap_or(1e4 * pace + 10.0 * (latest + slew));
    let tolerance = Tolerance {
        relative: 1e-9,
        absolute: std::array::from_fn(|i| if i == 2 { 1e-10 * on.abs() } else { 1e-10 * g.vdd_v }),
    };
    let share = |k: usize| match spec.segments.as_ref().map(|s| s[k].start) {
        Some(Start::AtShare(x)) => x * g.vdd_v,
        _ => f64::INFINITY,
    };
    let (mut t, mut y) = (0.0, from);
    let mut pieces: Vec<Piece<N>> = Vec::new();
    let mut rail_ready = (y[0] >= wanted).then_some(0.0);
    let mut stop_at: Option<f64> = None;
    loop {
        for (k, x) in groups.iter_mut().enumerate() {
            // a threshold met exactly by the event may lie an ulp above the state
            if x.start.is_infinite() && y[0] >= share(k) * (1.0 - 1e-12) {
                x.start = t;
            }
        }
        if rail_ready.is_none() && y[0] >= wanted * (1.0 - 1e-12) {
            rail_ready = Some(t);
        }
        let last = groups.iter().map(|x| x.start).fold(0.0, f64::max) + slew;
        if let (Some(r), None, true) = (rail_ready, stop_at, last.is_finite()) {
            // long enough for the tail to be seen, and for the package to ring
            let done = r.max(last);
            let ring = spec
                .package
                .map_or(0.0, |p| 4.0 * std::f64::consts::TAU * (p.inductance_h * p.decoupling_f).sqrt());
            stop_at = Some((1.3 * done).max(done + ring).max(t));
        }
        if stop_at.is_some_and(|s| t >= s) {
            break;
        }
        if t >= give_up {
            let clamp = g.clamp_gives(y[0], 0.0).rail_a;
            let gives_a: f64 = groups
                .iter()
                .map(|x| {
                    x.fingers
                        * g.finger(if x.start <= t { g.on_v } else { g.switch.gate_v }, y[0], 0.0).rail_a
                })
                .sum::<f64>()
                + clamp;
            let draws_a = g.block(y[0]).value;
            return Err(TransitionError::NotReady {
                at_v: y[0],
                time_s: t,
                wanted_v: groups
                    .iter()
                    .enumerate()
                    .filter(|(_, x)| x.start.is_infinite())
                    .map(|(k, _)| share(k))
                    .fold(wanted, f64::min),
                gives_a,
                draws_a,
            });
        }
        let next = groups
            .iter()
            .flat_map(|x| [x.start, x.start + slew])
            .chain(stop_at)
            .filter(|x| *x > t)
            .fold(give_up, f64::min);
        let goal = groups
            .iter()
            .enumerate()
            .filter(|(_, x)| x.start.is_infinite())
            .map(|(k, _)| share(k))
            .chain(rail_ready.is_none().then_some(wanted))
            .fold(f64::INFINITY, f64::min);
        let mut piece = Piece { groups: groups.clone(), now: t, trace: Trace::default() };
        let motion = Waking { g, groups: &piece.groups, slew, now: t, package: spec.package };
        let event = move |_: f64, y: &[f64; N]| y[0] - goal;
        let event: Option<&dyn Fn(f64, &[f64; N]) -> f64> = goal.is_finite().then_some(&event);
        let ended = integrate(&motion, (t, y), next, 1e-4 * pace, &tolerance, event, &mut piece.trace)?;
        (t, y) = (ended.t, ended.y);
        if ended.event {
            y[0] = goal;
        }
        pieces.push(piece);
    }
    let rail_ready_s = rail_ready.unwrap_or(t);
    let starts_s: Vec<f64> = groups.iter().map(|x| x.start).collect();
    let ready_s = starts_s.iter().fold(rail_ready_s, |m, s| m.max(s + slew));
    let mut wake = Wake {
        times_s: Vec::new(),
        span_v: Vec::new(),
        loss_v: Vec::new(),
        switch_a: Vec::new(),
        block_a: Vec::new(),
        supply_a: Vec::new(),
        gate_first_v: Vec::new(),
        gate_last_v: Vec::new(),
        peak_a: 0.0,
        peak_s: 0.0,
        peak_rate_a_s: (slew > 0.0).then_some(0.0),
        rail_ready_s,
        ready_s,
        starts_s,
        bounce_v: 0.0,
        overshoot_v: 0.0,
        charge_c: 0.0,
        energy_j: 0.0,
        charge_mismatch: 0.0,
        notes: g.notes(),
    };
    if slew == 0.0 {
        wake.notes.push(Note::new(
            "no-gate-slew",
            "gates jump: the current of the switch jumps with them and has no finite rate; give a slew time for di/dt",
        ));
    }
    record(g, spec, &pieces, &mut wake);
    Ok(wake)
}

/// Looks at the current in each step.
const PARTS: usize = 8;

/// Rows, peaks and integrals of a finished motion.
fn record<const N: usize>(g: &Gated<'_>, spec: &WakeSpec, pieces: &[Piece<N>], wake: &mut Wake) {
    // charge into the rail, out of the decoupling, through the package; moved and integrated
    let (mut into_rail, mut into_real, mut through) = (0.0, 0.0, 0.0);
    let (mut first, mut last): (Option<[f64; N]>, Option<[f64; N]>) = (None, None);
    for p in pieces {
        let w = Waking { g, groups: &p.groups, slew: spec.gate_slew_s, now: p.now, package: spec.package };
        let loss = |y: &[f64; N]| if N == 3 { y[1] } else { 0.0 };
        let current = |t: f64, y: &[f64; N]| w.flow(t, y[0], loss(y));
        let steps = &p.trace.steps;
        for (k, s) in steps.iter().enumerate() {
            let [a, b, c] = gauss(s.t, s.end, |t| {
                let y = s.at(t);
                let f = current(t, &y);
                [f.all.rail_a - f.block.value, f.all.real_a, if N == 3 { y[2] } else { f.all.real_a }]
            });
            into_rail += a;
            into_real += b;
            through += c;
            let mut best = (f64::NEG_INFINITY, s.t);
            for q in 0..=PARTS {
                let t = s.t + (s.end - s.t) * q as f64 / PARTS as f64;
                let y = s.at(t);
                let f = current(t, &y);
                if f.all.rail_a > best.0 {
                    best = (f.all.rail_a, t);
                }
                if let Some(most) = &mut wake.peak_rate_a_s {
                    let span_rate = (f.all.rail_a - f.block.value) / g.rail_f;
                    let loss_rate = match spec.package {
                        Some(p) if N == 3 => (f.all.real_a - y[2]) / p.decoupling_f,
                        _ => 0.0,
                    };
                    let rate = f.by_gates + f.all.per_span * span_rate + f.all.per_loss * loss_rate;
                    *most = most.max(rate.abs());
                }
                wake.bounce_v = wake.bounce_v.max(loss(&y));
                wake.overshoot_v = wake.overshoot_v.max(-loss(&y));
                // ends of steps and their middle make the rows; both sides of a jump are kept
                if q == 0 || q == PARTS / 2 || (q == PARTS && k + 1 == steps.len()) {
                    let gates = p.groups.iter().map(|x| w.gate(t, x).0);
                    let towards = (g.on_v - g.switch.gate_v).signum();
                    let (lo, hi) = gates.fold((f64::INFINITY, f64::NEG_INFINITY), |(lo, hi), v| {
                        (lo.min(towards * v), hi.max(towards * v))
                    });
                    wake.times_s.push(t);
                    wake.span_v.push(y[0]);
                    wake.loss_v.push(loss(&y));
                    wake.switch_a.push(f.all.rail_a);
                    wake.block_a.push(f.block.value);
                    wake.supply_a.push(if N == 3 { y[2] } else { f.all.real_a });
                    wake.gate_first_v.push(towards * hi);
                    wake.gate_last_v.push(towards * lo);
                }
            }
            if best.0 > wake.peak_a {
                let reach = (s.end - s.t) / PARTS as f64;
                let (t, i) = summit((best.1 - reach).max(s.t), (best.1 + reach).min(s.end), |t| {
                    current(t, &s.at(t)).all.rail_a
                });
                (wake.peak_a, wake.peak_s) = if i > best.0 { (i, t) } else { best };
            }
            first.get_or_insert_with(|| s.at(s.t));
            last = Some(s.at(s.end));
        }
    }
    wake.charge_c = through;
    wake.energy_j = g.vdd_v * through;
    if let (Some(a), Some(b)) = (first, last) {
        let moved = g.rail_f * (b[0] - a[0]);
        let scale = moved.abs().max(into_real.abs()).max(1e-40);
        wake.charge_mismatch = (moved - into_rail).abs() / scale;
        if let Some(p) = spec.package {
            let drained = p.decoupling_f * (loss_of(&b) - loss_of(&a));
            wake.charge_mismatch = wake.charge_mismatch.max((into_real - through - drained).abs() / scale);
        }
    }
}

fn loss_of<const N: usize>(y: &[f64; N]) -> f64 {
    if N == 3 { y[1] } else { 0.0 }
}
