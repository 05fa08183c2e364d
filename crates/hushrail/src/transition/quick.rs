//! Time to ready and in-rush without integrating in time, for many domains that share a block and a corner.
//!
//! With an ideal supply and gates that jump, the motion between two starts of segments is one-dimensional and does not depend
//! on time: `C·dx/dt = n·i(x) + m·j(x) − I_block(x)` with n fingers on and m still off (Kirchhoff's current law, as in
//! [`wake`](super::wake)). Separated, the time from one span to another is the integral `∫ C·dx/(n·i + m·j − I_block)`: Gauss and
//! Legendre's rule on panels between the knots of the curves, halved where the net current changes to less than 0.4 of itself. The
//! current of one finger is a cubic with the device's own slopes at its knots, refined to [`MISS`]; it depends on neither width
//! nor overdrive (that of a finger which is on) nor capacitance, so that domains share it.
//!
//! A gate that slews, or a package, makes the motion depend on time or on more than one state: those domains, and every case
//! that the integral does not cover (a clamp beside the switch, a rail that falls before it rises, a current that is no smooth function), are integrated
//! by [`wake_up`].

use std::sync::Arc;

use rustc_hash::FxHashMap;

use super::error::TransitionError;
use super::gated::Gated;
use super::quadrature::{ORDER, places, weights};
use super::wake::{Group, Start, Wake, WakeSpec, groups, start_span, wake_up};
use crate::block::BlockCurve;
use crate::device::root::summit;
use crate::standby::stress::{Moment, Pair};
use crate::standby::switch::Side;

/// What limits and objectives need of a wake-up.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct WakeSummary {
    /// When the rail is within its share of the supply, s.
    pub rail_ready_s: f64,
    /// When it is and every gate has arrived, s.
    pub ready_s: f64,
    /// Largest current of the switch, A.
    pub peak_a: f64,
    /// Largest voltage between gate and drain or source on the way, V.
    pub oxide_v: f64,
    /// Largest voltage between drain and bulk on the way, V.
    pub drain_bulk_v: f64,
}

impl WakeSummary {
    /// Of an integrated wake-up.
    pub fn of(wake: &Wake, g: &Gated<'_>) -> Self {
        let mut stress = Stress::default();
        for m in wake.moments(g) {
            stress.see(&m);
        }
        Self {
            rail_ready_s: wake.rail_ready_s,
            ready_s: wake.ready_s,
            peak_a: wake.peak_a,
            oxide_v: stress.oxide_v,
            drain_bulk_v: stress.drain_bulk_v,
        }
    }
}

/// Extremes over moments.
#[derive(Debug, Clone, Copy, Default)]
struct Stress {
    oxide_v: f64,
    drain_bulk_v: f64,
}

impl Stress {
    fn see(&mut self, m: &Moment) {
        self.oxide_v = self.oxide_v.max(m.of(Pair::GateDrain).abs()).max(m.of(Pair::GateSource).abs());
        self.drain_bulk_v = self.drain_bulk_v.max(m.of(Pair::DrainBulk).abs());
    }
}

/// Largest difference of a finger's cubic to the device at a check point, relative to the current there. The check point becomes
/// a knot itself: an error of fourth order then falls sixteenfold.
pub const MISS: f64 = 1e-7;
/// Currents below this share of the largest count as this share.
const FLOOR: f64 = 1e-6;
/// Intervals before the first check.
const START: usize = 8;
/// Evaluations of the device before a current is taken for no smooth function.
const EVALUATIONS: usize = 1000;
/// A panel is even enough for the rule when the smallest net current is more than this share of the largest: the nearest pole of
/// the integrand is then 0.67 widths or more outside, and five points leave (1 + 2·0.67 + √((1 + 2·0.67)² − 1))^−10 ≈ 3e-7 of
/// the panel (bound of Gauss's rule by the ellipse of analyticity; Davis and Rabinowitz, *Methods of Numerical Integration*,
/// section 4.6, from memory), less where the pole is further.
const EVEN: f64 = 0.4;
/// Over the supply: a rail that has come this near to where it stalls stands. The integration in time resolves as much.
const STANDS: f64 = 1e-10;
/// Net current over all that flows, below which a rail that has just been left alone is at rest.
const AT_REST: f64 = 1e-6;

/// Current of one finger over the span, gate and body held.
#[derive(Debug)]
struct Finger {
    knots: Vec<f64>,
    value: Vec<f64>,
    slope: Vec<f64>,
}

impl Finger {
    /// `None` when the current is no smooth function.
    fn of(g: &Gated<'_>, gate_v: f64) -> Option<Self> {
        let at = |x: f64| {
            let f = g.finger(gate_v, x, 0.0);
            (x, f.rail_a, f.per_span)
        };
        let mut knots: Vec<(f64, f64, f64)> =
            (0..=START).map(|k| at(g.vdd_v * k as f64 / START as f64)).collect();
        let mut open = vec![true; START];
        let mut spent = knots.len();
        while open.iter().any(|o| *o) {
            let most = knots.iter().fold(0.0f64, |m, k| m.max(k.1.abs()));
            let (mut next, mut next_open) = (Vec::new(), Vec::new());
            for (i, pair) in knots.windows(2).enumerate() {
                next.push(pair[0]);
                if !open[i] {
                    next_open.push(false);
                    continue;
                }
                let middle = at(0.5 * (pair[0].0 + pair[1].0));
                spent += 1;
                let h = pair[1].0 - pair[0].0;
                let guess = 0.5 * (pair[0].1 + pair[1].1) + 0.125 * h * (pair[0].2 - pair[1].2);
                let miss = (guess - middle.1).abs();
                if !miss.is_finite() || spent > EVALUATIONS {
                    return None;
                }
                let met = miss <= MISS * middle.1.abs().max(FLOOR * most);
                next.push(middle);
                next_open.extend([!met, !met]);
            }
            next.extend(knots.last());
            (knots, open) = (next, next_open);
        }
        Some(Self {
            knots: knots.iter().map(|k| k.0).collect(),
            value: knots.iter().map(|k| k.1).collect(),
            slope: knots.iter().map(|k| k.2).collect(),
        })
    }

    fn at(&self, x: f64) -> f64 {
        let k = self.knots.partition_point(|k| *k <= x).clamp(1, self.knots.len() - 1) - 1;
        let h = self.knots[k + 1] - self.knots[k];
        let t = (x - self.knots[k]) / h;
        let (a, rise) = (self.value[k], self.value[k + 1] - self.value[k]);
        let (p, q) = (self.slope[k] * h, self.slope[k + 1] * h);
        a + t * (p + t * (3.0 * rise - 2.0 * p - q + t * (p + q - 2.0 * rise)))
    }
}

/// What the current of a finger depends on, besides process, temperature and supply.
#[derive(Debug, Clone, PartialEq, Eq, Hash)]
struct FingerKey {
    model: String,
    bits: [u64; 8],
}

impl FingerKey {
    fn of(g: &Gated<'_>, gate_v: f64) -> Self {
        let spec = g.scheme.header.as_ref().or(g.scheme.footer.as_ref());
        let s = g.switch;
        let side = if s.side == Side::Header { 1.0 } else { 0.0 };
        let (model, [w, l, stacked, diffusion, edge]) = spec.map_or((String::new(), [0.0; 5]), |x| {
            let finger = x.finger_width_m.unwrap_or(x.width_m);
            let own = |v: Option<f64>| v.unwrap_or(-1.0);
            (x.model.clone(), [finger, x.length_m, x.stacked as f64, own(x.diffusion_m), own(x.edge_m)])
        });
        Self {
            model,
            bits: [w, l, stacked, diffusion, edge, gate_v, s.body_at(gate_v).0, side].map(f64::to_bits),
        }
    }
}

/// A quantity at the panels' points and at their ends.
#[derive(Debug, Default)]
struct Laid {
    inside: Vec<[f64; ORDER]>,
    ends: Vec<f64>,
}

impl Laid {
    fn of(breaks: &[f64], f: impl Fn(f64) -> f64) -> Self {
        Self {
            inside: breaks.windows(2).map(|w| places(w[0], w[1]).map(&f)).collect(),
            ends: breaks.iter().map(|x| f(*x)).collect(),
        }
    }
}

/// A finger that is on and a block, over the span.
#[derive(Debug)]
struct Road {
    breaks: Vec<f64>,
    on: Laid,
    block: Laid,
    /// Largest current of the finger from each end on.
    most_after: Vec<f64>,
}

/// What domains on one block at one corner share. Keep one for each block's curve: devices are told apart by the scheme's words,
/// which mean the same only under one process, temperature and supply.
#[derive(Debug)]
pub struct WakeShelf<'a> {
    curve: &'a BlockCurve,
    fingers: FxHashMap<FingerKey, Option<Arc<Finger>>>,
    roads: FxHashMap<(FingerKey, usize), Arc<Road>>,
    off: FxHashMap<(FingerKey, FingerKey, usize), Arc<Laid>>,
}

impl<'a> WakeShelf<'a> {
    /// An empty one.
    pub fn new(curve: &'a BlockCurve) -> Self {
        Self { curve, fingers: FxHashMap::default(), roads: FxHashMap::default(), off: FxHashMap::default() }
    }

    /// The curve it belongs to.
    pub fn curve(&self) -> &'a BlockCurve {
        self.curve
    }

    fn finger(&mut self, g: &Gated<'_>, key: &FingerKey, gate_v: f64) -> Option<Arc<Finger>> {
        if let Some(known) = self.fingers.get(key) {
            return known.clone();
        }
        let made = Finger::of(g, gate_v).map(Arc::new);
        self.fingers.insert(key.clone(), made.clone());
        made
    }

    fn road(&mut self, g: &Gated<'_>, key: &(FingerKey, usize), on: &Finger) -> Arc<Road> {
        if let Some(known) = self.roads.get(key) {
            return Arc::clone(known);
        }
        let mut breaks: Vec<f64> = self.curve.points().knots.iter().map(|k| k.span_v).collect();
        breaks.extend(&on.knots);
        breaks.sort_by(f64::total_cmp);
        breaks.dedup_by(|a, b| *a - *b <= 1e-12 * g.vdd_v);
        let current = Laid::of(&breaks, |x| on.at(x));
        let mut most_after = current.ends.clone();
        for k in (0..current.inside.len()).rev() {
            most_after[k] =
                current.inside[k].iter().fold(most_after[k].max(most_after[k + 1]), |m, x| m.max(*x));
        }
        let block = Laid::of(&breaks, |x| g.block(x).value);
        let made = Arc::new(Road { breaks, on: current, block, most_after });
        self.roads.insert(key.clone(), Arc::clone(&made));
        made
    }

    /// Time to ready, largest current and stress of a wake-up: those of [`wake_up`], to about 1e-7. `rest_span_v` is where the
    /// rail rests with the switch off, where it is known already.
    ///
    /// # Errors
    /// As [`wake_up`].
    pub fn wake(
        &mut self,
        g: &Gated<'_>,
        spec: &WakeSpec,
        rest_span_v: Option<f64>,
    ) -> Result<WakeSummary, TransitionError> {
        match self.quick(g, spec, rest_span_v)? {
            Some(found) => Ok(found),
            None => Ok(WakeSummary::of(&wake_up(g, spec)?, g)),
        }
    }

    /// The same where the integral covers the case; `None` where it takes [`wake_up`].
    ///
    /// # Errors
    /// As [`wake_up`].
    pub fn quick(
        &mut self,
        g: &Gated<'_>,
        spec: &WakeSpec,
        rest_span_v: Option<f64>,
    ) -> Result<Option<WakeSummary>, TransitionError> {
        if !is_quick(spec) || g.is_clamped() || !std::ptr::eq(g.curve, self.curve) {
            return Ok(None);
        }
        let from = start_span(g, spec, rest_span_v)?;
        let groups = groups(g, spec)?;
        let on_key = FingerKey::of(g, g.on_v);
        let Some(on) = self.finger(g, &on_key, g.on_v) else { return Ok(None) };
        let key = (on_key, g.books());
        let road = self.road(g, &key, &on);
        let off = if groups.iter().any(|x| x.start > 0.0) {
            let gate_v = g.switch.gate_v;
            let off_key = FingerKey::of(g, gate_v);
            let Some(finger) = self.finger(g, &off_key, gate_v) else { return Ok(None) };
            let (on_key, books) = key;
            let laid = self.off.entry((on_key, off_key, books));
            let laid = laid.or_insert_with(|| Arc::new(Laid::of(&road.breaks, |x| finger.at(x))));
            Some((finger, Arc::clone(laid)))
        } else {
            None
        };
        Way { g, on: &on, off: off.as_ref().map(|(f, l)| (&**f, &**l)), road: &road }.run(spec, groups, from)
    }
}

/// Whether a wake-up is worked out by integrals; with slewing gates or a package it is integrated in time.
pub fn is_quick(spec: &WakeSpec) -> bool {
    spec.gate_slew_s == 0.0 && spec.package.is_none()
}

/// One domain on its way up.
struct Way<'a> {
    g: &'a Gated<'a>,
    on: &'a Finger,
    off: Option<(&'a Finger, &'a Laid)>,
    road: &'a Road,
}

/// Fingers on and off.
#[derive(Clone, Copy)]
struct Mix {
    on: f64,
    off: f64,
}

/// How a piece ended.
enum Ended {
    /// At the span asked for, at a time.
    Goal(f64),
    /// At the time asked for, at a span.
    Time(f64),
    /// Standing still at a span.
    Stands(f64),
    /// Where the integral does not reach.
    Beyond,
}

/// The largest current so far.
struct Peak(f64);

/// A piece of a panel: currents of the switch and net currents at its points, and at its end.
struct Points {
    switch: [f64; ORDER],
    net: [f64; ORDER],
    end: (f64, f64),
}

impl Way<'_> {
    fn off_at(&self, x: f64) -> f64 {
        self.off.map_or(0.0, |(f, _)| f.at(x))
    }

    /// Current of the switch and net current into the rail.
    fn at(&self, m: Mix, x: f64) -> (f64, f64) {
        let i = m.on * self.on.at(x) + if m.off > 0.0 { m.off * self.off_at(x) } else { 0.0 };
        (i, i - self.g.block(x).value)
    }

    fn laid(&self, m: Mix, k: usize) -> Points {
        let (r, off) = (self.road, self.off.filter(|_| m.off > 0.0));
        let mut switch = r.on.inside[k].map(|i| m.on * i);
        let mut end = m.on * r.on.ends[k + 1];
        if let Some((_, laid)) = off {
            for (to, j) in switch.iter_mut().zip(&laid.inside[k]) {
                *to += m.off * j;
            }
            end += m.off * laid.ends[k + 1];
        }
        let mut net = switch;
        for (to, b) in net.iter_mut().zip(&r.block.inside[k]) {
            *to -= b;
        }
        Points { switch, net, end: (end, end - r.block.ends[k + 1]) }
    }

    fn fresh(&self, m: Mix, a: f64, b: f64) -> Points {
        let both = places(a, b).map(|x| self.at(m, x));
        Points { switch: both.map(|p| p.0), net: both.map(|p| p.1), end: self.at(m, b) }
    }

    /// From `x` at `t` until the span `goal` or the time `until`.
    fn advance(&self, m: Mix, mut x: f64, mut t: f64, goal: f64, until: f64, peak: &mut Peak) -> Ended {
        let (g, breaks) = (self.g, &self.road.breaks);
        let (first, mut net) = self.at(m, x);
        peak.0 = peak.0.max(first);
        let gross = m.on * self.on.at(x).abs() + m.off * self.off_at(x).abs() + g.block(x).value.abs();
        if net.abs() <= AT_REST * gross {
            return Ended::Stands(x);
        }
        if net < 0.0 {
            return Ended::Beyond;
        }
        let mut k = breaks.partition_point(|b| *b <= x).max(1) - 1;
        let mut reach = f64::INFINITY;
        while x < goal {
            let Some(end) = breaks.get(k + 1).copied() else { return Ended::Beyond };
            let top = end.min(goal);
            let mut b = top.min(x + reach);
            let (points, dt) = loop {
                let points = if x == breaks[k] && b == end { self.laid(m, k) } else { self.fresh(m, x, b) };
                let (mut lo, mut hi) = (net.min(points.end.1), net.max(points.end.1));
                for n in points.net {
                    (lo, hi) = (lo.min(n), hi.max(n));
                }
                if lo > EVEN * hi {
                    let dt = g.rail_f
                        * (b - x)
                        * weights().iter().zip(points.net).map(|(w, n)| w / n).sum::<f64>();
                    break (points, dt);
                }
                if !hi.is_finite() {
                    return Ended::Beyond;
                }
                if b - x <= STANDS * g.vdd_v {
                    return Ended::Stands(x);
                }
                b = 0.5 * (x + b);
                reach = b - x;
            };
            reach *= 2.0;
            if t + dt > until {
                let at = self.when(m, x, b, (until - t, dt));
                peak.0 = peak.0.max(self.at(m, at).0);
                return Ended::Time(at);
            }
            let inside = points.switch.iter().fold(points.end.0, |m, i| m.max(*i));
            if inside > peak.0 {
                let (_, i) = summit(x, b, |x| self.at(m, x).0);
                peak.0 = inside.max(i);
            }
            t += dt;
            (x, net) = (b, points.end.1);
            if b == end {
                k += 1;
                reach = f64::INFINITY;
            }
        }
        Ended::Goal(t)
    }

    /// The span that is reached from `a` after a time, where `b` takes the whole: Newton on the integral, whose slope is the
    /// integrand.
    fn when(&self, m: Mix, a: f64, b: f64, (after, whole): (f64, f64)) -> f64 {
        let c = self.g.rail_f;
        let (mut lo, mut hi, mut x) = (a, b, a + (b - a) * (after / whole).clamp(0.01, 0.99));
        for _ in 0..60 {
            let p = self.fresh(m, a, x);
            let t = c * (x - a) * weights().iter().zip(p.net).map(|(w, n)| w / n).sum::<f64>();
            if t < after {
                lo = x;
            } else {
                hi = x;
            }
            let next = x + (after - t) * p.end.1 / c;
            // Newton's next step would be of the second order of this one
            if (next - x).abs() <= 1e-8 * self.g.vdd_v {
                return next.clamp(a, b);
            }
            let inside = next > lo && next < hi;
            x = if inside { next } else { 0.5 * (lo + hi) };
        }
        x
    }

    /// The way from rest to ready, piece by piece as [`wake_up`] takes it.
    fn run(
        &self,
        spec: &WakeSpec,
        mut groups: Vec<Group>,
        from: f64,
    ) -> Result<Option<WakeSummary>, TransitionError> {
        let g = self.g;
        let wanted = (1.0 - spec.ready_within) * g.vdd_v;
        let pace = g.rail_f * g.vdd_v / (g.switch.fingers * self.on.at(from)).abs().max(1e-30);
        let latest = groups.iter().map(|x| x.start).filter(|t| t.is_finite()).fold(0.0, f64::max);
        let give_up = spec.give_up_s.unwrap_or(1e4 * pace + 10.0 * latest);
        let share = |k: usize| match spec.segments.as_ref().map(|s| s[k].start) {
            Some(Start::AtShare(x)) => x * g.vdd_v,
            _ => f64::INFINITY,
        };
        let (mut t, mut x) = (0.0, from);
        let mut rail_ready = None;
        let mut peak = Peak(0.0);
        let mut stress = Stress::default();
        let mut see = |m: Mix, x: f64| {
            for (n, gate) in [(m.on, g.on_v), (m.off, g.switch.gate_v)] {
                if n > 0.0 {
                    stress.see(&g.switch.waking(g.vdd_v, 0.0, gate, x, 0.0));
                }
            }
        };
        let m = loop {
            for (k, x_k) in groups.iter_mut().enumerate() {
                if x_k.start.is_infinite() && x >= share(k) * (1.0 - 1e-12) {
                    x_k.start = t;
                }
            }
            if rail_ready.is_none() && x >= wanted * (1.0 - 1e-12) {
                rail_ready = Some(t);
            }
            let mut m = Mix { on: 0.0, off: 0.0 };
            for x_k in &groups {
                *(if x_k.start <= t { &mut m.on } else { &mut m.off }) += x_k.fingers;
            }
            see(m, x);
            if rail_ready.is_some() && groups.iter().all(|x_k| x_k.start <= t) {
                break m;
            }
            let until = groups.iter().map(|x| x.start).filter(|s| *s > t).fold(f64::INFINITY, f64::min);
            let waits = |goal: f64| {
                groups
                    .iter()
                    .enumerate()
                    .filter(|(_, x)| x.start.is_infinite())
                    .fold(goal, |m, (k, _)| m.min(share(k)))
            };
            let goal = waits(if rail_ready.is_none() { wanted } else { f64::INFINITY });
            let next = until.min(give_up);
            match self.advance(m, x, t, goal, next, &mut peak) {
                Ended::Goal(at) => (x, t) = (goal, at),
                Ended::Time(at) | Ended::Stands(at) => (x, t) = (at, next),
                Ended::Beyond => return Ok(None),
            }
            if t >= give_up {
                let (gives_a, net) = self.at(m, x);
                let (at_v, time_s, draws_a) = (x, t, gives_a - net);
                return Err(TransitionError::NotReady {
                    at_v,
                    time_s,
                    wanted_v: waits(wanted),
                    gives_a,
                    draws_a,
                });
            }
            see(m, x);
        };
        let rail_ready_s = rail_ready.unwrap_or(t);
        let ready_s = groups.iter().fold(rail_ready_s, |m, x| m.max(x.start));
        if t > 0.0 {
            peak.0 = peak.0.max(self.at(m, x).0);
        }
        // afterwards the rail goes on upwards with all fingers on: their current must not rise again
        let k = self.road.breaks.partition_point(|b| *b <= x).max(1) - 1;
        let after = m.on * self.road.most_after.get(k + 1).copied().unwrap_or(0.0);
        if after > peak.0 || 1.3 * ready_s > give_up {
            return Ok(None);
        }
        Ok(Some(WakeSummary {
            rail_ready_s,
            ready_s,
            peak_a: peak.0,
            oxide_v: stress.oxide_v,
            drain_bulk_v: stress.drain_bulk_v,
        }))
    }
}
