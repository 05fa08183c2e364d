//! Design of segments that keep the in-rush below a limit.
//!
//! Start: the geometric ladder `Σ g_j = I_max/V` of a resistive switch (reference sheet A24, derived there). Then every
//! threshold is solved with the device's own current: a step may come where the fingers that are on after it draw the limit.

use serde::{Deserialize, Serialize};

use super::error::{TransitionError, positive};
use super::gated::Gated;
use super::wake::{Segment, Start, Wake, WakeSpec, wake_up};
use crate::device::root::increasing;

/// What is wanted of a ladder.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LadderSpec {
    /// Largest current of the switch, A.
    pub peak_a: f64,
    /// Segments at most.
    pub segments: usize,
}

/// A ladder.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Ladder {
    /// Segments with their times.
    pub segments: Vec<Segment>,
    /// Span over supply at which each step may come; zero for the first.
    pub shares: Vec<f64>,
    /// Fingers of each segment.
    pub fingers: Vec<f64>,
    /// The limit, A.
    pub limit_a: f64,
    /// The wake-up with these segments, run again from the times.
    pub wake: Wake,
}

/// How near its plateau a rail is waited for, over the supply: seven time constants; beyond, it creeps.
const NEAR: f64 = 1e-3;
/// Tries with a smaller target when the package's ringing adds to the current.
const TRIES: usize = 6;

/// Designs segments for a wake-up; slew, package and start are taken from `spec`, its segments are not.
///
/// # Errors
/// A limit that one finger breaks (said by how much), or what [`wake_up`] cannot do.
pub fn design_ladder(g: &Gated<'_>, spec: &WakeSpec, want: &LadderSpec) -> Result<Ladder, TransitionError> {
    positive("peak limit (A)", want.peak_a)?;
    if want.segments == 0 || want.segments > 1000 {
        return Err(TransitionError::Range {
            what: "number of segments".into(),
            value: want.segments as f64,
            wanted: "want 1 to 1000".into(),
        });
    }
    // a hair below, so that the limit holds after the rounding of times
    let mut target = want.peak_a * (1.0 - 1e-6);
    let mut best = f64::INFINITY;
    for _ in 0..TRIES {
        let ladder = once(g, spec, want, target)?;
        if ladder.wake.peak_a <= want.peak_a {
            return Ok(ladder);
        }
        best = best.min(ladder.wake.peak_a);
        target *= 0.98 * want.peak_a / ladder.wake.peak_a;
    }
    Err(TransitionError::NoLadder {
        limit_a: want.peak_a,
        least_a: best,
        why: "the best ladder, with the package ringing,".into(),
    })
}

fn once(g: &Gated<'_>, spec: &WakeSpec, want: &LadderSpec, target: f64) -> Result<Ladder, TransitionError> {
    let (finger_m, devices) = g.fingers();
    let all = g.switch.fingers / devices;
    let all = if (all - all.round()).abs() < 1e-6 { all.round() } else { all };
    let from = match spec.from_span_v {
        Some(v) => v,
        None => g.rest_span_v()?,
    };
    // current with so many fingers on at a span, the others leaking
    let current = |n: f64, span: f64| {
        let on = g.finger(g.on_v, span, 0.0).rail_a;
        let off = g.finger(g.switch.gate_v, span, 0.0).rail_a;
        devices * (n * on + (all - n) * off)
    };
    // where the rail stops with so many fingers on
    let plateau = |n: f64| {
        increasing::<TransitionError>(from, g.vdd_v, 1e-12 * g.vdd_v, 1e-9, 200, |x| {
            let (gives, draws) = (current(n, x), g.block(x).value);
            Ok(if gives > 0.0 && draws > 0.0 { (draws / gives).ln() } else { draws - gives })
        })
    };
    let (one, none) = (current(1.0, from), current(0.0, from));
    let refuse = |least_a: f64, why: &str| TransitionError::NoLadder {
        limit_a: want.peak_a,
        least_a,
        why: why.into(),
    };
    if !(one <= target) && all > 1.0 {
        return Err(refuse(one, "one finger, the narrowest first step,"));
    }
    let most = ((target - none) / (one - none)).floor().min(all);
    let mut sums = vec![if current(all, from) <= target { all } else { most }];
    if sums[0] < all {
        if !(most >= 1.0) {
            return Err(refuse(one, "one finger, the narrowest first step,"));
        }
        if want.segments == 1 {
            return Err(refuse(current(all, from), "the whole switch in one segment"));
        }
        // geometric steps, each small enough that the rail reaches it against the block
        while sums[sums.len() - 1] < all {
            let on = sums[sums.len() - 1];
            let left = want.segments - sums.len();
            let stops = plateau(on)?;
            let short = || TransitionError::ShortLadder {
                segments: want.segments,
                stops_v: stops,
                share: on / all,
                limit_a: want.peak_a,
            };
            if left == 0 {
                return Err(short());
            }
            let wished = if left == 1 { all } else { (on * (all / on).powf(1.0 / left as f64)).floor() };
            let reached = (stops - NEAR * g.vdd_v).max(from);
            let (one, none) = (current(1.0, reached), current(0.0, reached));
            let n = wished.min(((target - none) / (one - none)).floor());
            if n <= on && wished > on {
                return Err(short());
            }
            sums.push(n.max(on + 1.0).min(all));
        }
    }
    let mut shares = vec![0.0];
    for n in &sums[1..] {
        let span = increasing::<TransitionError>(from, g.vdd_v, 1e-13 * g.vdd_v, 1e-12, 200, |x| {
            let i = current(*n, x);
            Ok(if i > 0.0 { (target / i).ln() } else { 1.0 })
        })?;
        shares.push(span / g.vdd_v);
    }
    let mut fingers = Vec::new();
    let mut before = 0.0;
    for n in &sums {
        fingers.push(n - before);
        before = *n;
    }
    let segment = |k: usize, start| Segment { width_m: fingers[k] * finger_m, start };
    let by_share = (0..sums.len())
        .map(|k| segment(k, if k == 0 { Start::AtS(0.0) } else { Start::AtShare(shares[k]) }))
        .collect();
    let first = wake_up(g, &WakeSpec { segments: Some(by_share), ..spec.clone() })?;
    let segments: Vec<Segment> =
        first.starts_s.iter().enumerate().map(|(k, t)| segment(k, Start::AtS(*t))).collect();
    let wake = wake_up(g, &WakeSpec { segments: Some(segments.clone()), ..spec.clone() })?;
    Ok(Ladder { segments, shares, fingers, limit_a: want.peak_a, wake })
}
