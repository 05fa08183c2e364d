//! The optimum of one knob at one corner: where the power of all supplies is least, and what takes over beyond it.
//!
//! Overdrive: subthreshold current falls by a decade per swing while GIDL, edge tunnelling and what the pump loses rise; at the
//! optimum their slopes cancel, not their currents. Well bias: likewise against junction tunnelling. Source: Kawaguchi, Nose and
//! Sakurai, *JSSC* 35 (2000) 1498 for the overdriven switch, Keshavarzi et al., ISLPED 1999 for the well (both from memory); the
//! condition itself is derived. The search stands on ln(power), the slope on the device solver's own answers.

use std::sync::atomic::AtomicBool;

use serde::{Deserialize, Serialize};

use super::error::OptimumError;
use super::knob::{Knob, KnobRange};
use super::search::{End, Valley, stationary, valley};
use super::site::{Site, Turned};
use crate::block::current::gidl_note;
use crate::device::Mechanism;
use crate::read::deck::Note;
use crate::standby::{Asleep, Scheme};

/// Points of the scan that finds the deepest valley.
pub(super) const SCAN: usize = 33;
/// Step of the slope: V, or the logarithm of a size.
pub(super) const STEP: f64 = 2e-3;
/// Where the search on the curve ends; the slope takes over from there.
pub(super) const NEAR: f64 = 1e-5;
/// Relative accuracy of the curves that are searched on.
pub(super) const CURVE: f64 = 1e-3;

/// Where the optimum stands in its range.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Standing {
    /// Inside, at no slope.
    Inside,
    /// At the low end: every step from there costs power.
    LowEnd,
    /// At the high end: more would save more.
    HighEnd,
    /// At the high end of an overdrive whose card has no GIDL: there is no optimum to be read from it.
    NoGidl,
}

/// Power of one mechanism (or `overhead`) and how it moves with the knob.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Share {
    /// `channel`, `gidl`, `gate`, `junction`, `floor`, `overhead`.
    pub name: String,
    /// At the optimum, W.
    pub power_w: f64,
    /// Slope there: W per V, or W per factor e of a size.
    pub slope_w: f64,
}

/// A point of the scan.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Swept {
    /// Setting.
    pub value: f64,
    /// Power of all supplies, W.
    pub power_w: f64,
    /// By mechanism in the order of [`Mechanism::ALL`], then the overhead, W.
    pub by_w: [f64; 6],
}

/// The optimum of one knob at one corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CornerOptimum {
    /// The corner.
    pub corner: String,
    /// Where it stands.
    pub standing: Standing,
    /// The setting; none where the card lacks what sets it.
    pub value: Option<f64>,
    /// Power of all supplies there (without a setting, at the high end), W.
    pub power_w: f64,
    /// Slope of ln(power) left there, per V or per factor e of a size.
    pub slope: f64,
    /// Second derivative of ln(power) there.
    pub curvature: f64,
    /// By mechanism, and the overhead.
    pub shares: Vec<Share>,
    /// What rises fastest at the optimum: it takes over beyond it. None at the high end.
    pub takes_over: Option<String>,
    /// What falls fastest there: it rules before it. None at the low end.
    pub gives_way: Option<String>,
    /// Power with the knob at zero and without a generator, W, where one is stated.
    pub without_w: Option<f64>,
    /// Span left to the block there, V.
    pub span_v: f64,
    /// Oxide voltage of the switch there, V.
    pub oxide_v: f64,
    /// Largest relative difference of the curve's power to the solver's, where both are known.
    pub curve_miss: f64,
    /// The scan, by rising setting.
    pub sweep: Vec<Swept>,
    /// Remarks.
    pub notes: Vec<Note>,
}

/// Power by mechanism and overhead, W; the sum is the power of the supplies.
pub(super) fn shares(a: &Asleep, vdd_v: f64) -> [f64; 6] {
    let m = a.mechanisms;
    [m[0] * vdd_v, m[1] * vdd_v, m[2] * vdd_v, m[3] * vdd_v, m[4] * vdd_v, a.overhead_w]
}

fn share_name(k: usize) -> &'static str {
    Mechanism::ALL.get(k).map_or("overhead", |m| m.name())
}

/// ln(power); a power that is none is far below every other.
pub(super) fn ln_power(power_w: f64) -> f64 {
    power_w.max(1e-300).ln()
}

/// The optimum of a knob at a site.
///
/// # Errors
/// A range or scheme that cannot be, a point that does not come to rest, or `stop` raised.
pub fn corner_optimum(
    site: &Site<'_>,
    scheme: &Scheme,
    range: &KnobRange,
    stop: &AtomicBool,
) -> Result<CornerOptimum, OptimumError> {
    range.check(scheme)?;
    optimum_of(&Turned::new(site, scheme, range.knob, CURVE, stop)?, range)
}

/// The same on a prepared site.
pub(super) fn optimum_of(t: &Turned<'_>, range: &KnobRange) -> Result<CornerOptimum, OptimumError> {
    let knob = t.knob;
    let (lo, hi) = (knob.variable(range.low), knob.variable(range.high));
    let mut sweep = Vec::new();
    let vdd = t.site.vdd_v;
    let found = valley(lo, hi, SCAN, NEAR, |x| {
        let value = knob.value(x).clamp(range.low, range.high);
        let a = t.quick(value)?;
        if sweep.len() < SCAN {
            sweep.push(Swept { value, power_w: a.power_w, by_w: shares(&a, vdd) });
        }
        Ok::<f64, OptimumError>(ln_power(a.power_w))
    })?;
    let at = |x: f64| t.direct(knob.value(x).clamp(range.low, range.high));
    let inside = if found.end.is_some() {
        None
    } else {
        stationary(found.x, (lo, hi), STEP, 0.05 * (hi - lo), |x| at(x).map(|a| ln_power(a.power_w)))?
    };
    let mut notes = Vec::new();
    let x = inside.map_or(found.x, |s| s.x);
    let rest = at(x)?;
    let step = STEP.min((hi - lo) / 8.0);
    // beside the end, both points are on the side of the range
    let (left, right) = ((x - step).max(lo), (x + step).min(hi));
    let (before, after) = (at(left)?, at(right)?);
    let (p0, p1, p2) = (shares(&before, vdd), shares(&rest, vdd), shares(&after, vdd));
    let list: Vec<Share> = (0..6)
        .map(|k| Share {
            name: share_name(k).to_owned(),
            power_w: p1[k],
            slope_w: (p2[k] - p0[k]) / (right - left),
        })
        .collect();
    let (slope, curvature) = if let Some(s) = inside {
        (s.slope, s.curvature)
    } else {
        let y = [&before, &rest, &after].map(|a| ln_power(a.power_w));
        let bend = (y[2] - 2.0 * y[1] + y[0]) / (step * step);
        ((y[2] - y[0]) / (right - left), if found.end.is_none() { bend } else { 0.0 })
    };
    let without_gidl = knob.is_overdrive() && !t.has_gidl()?;
    let standing = standing(&found, without_gidl);
    if without_gidl {
        gidl_note(&format!("the switch that {} drives", knob.name())).add_once(&mut notes);
    }
    if standing == Standing::Inside && inside.is_none() {
        notes.push(Note::new(
            "not-smooth",
            format!(
                "corner `{}`: the power is not smooth at the optimum of {}: its place is that of the search, to {:.1e} {}",
                t.site.corner,
                knob.name(),
                NEAR,
                knob.unit()
            ),
        ));
    }
    let rising = list.iter().filter(|s| s.slope_w > 0.0).max_by(|a, b| a.slope_w.total_cmp(&b.slope_w));
    let falling = list.iter().filter(|s| s.slope_w < 0.0).min_by(|a, b| a.slope_w.total_cmp(&b.slope_w));
    let name = |s: Option<&Share>| s.map(|s| s.name.clone());
    let (takes_over, gives_way) = match standing {
        Standing::Inside => (name(rising), name(falling)),
        Standing::LowEnd => (name(rising), None),
        Standing::HighEnd | Standing::NoGidl => (None, name(falling)),
    };
    if standing == Standing::HighEnd {
        notes.push(Note::new(
            "optimum-beyond",
            format!(
                "corner `{}`: power still falls at the high end of {}: the optimum lies beyond, or the card lacks what sets it",
                t.site.corner,
                knob.name()
            ),
        ));
    }
    let without_w = worth(t, &rest, &mut notes)?;
    for n in &rest.notes {
        n.clone().add_once(&mut notes);
    }
    let on_curve = t.quick(knob.value(x).clamp(range.low, range.high))?;
    let value = knob.value(x).clamp(range.low, range.high);
    Ok(CornerOptimum {
        corner: t.site.corner.to_owned(),
        standing,
        value: (standing != Standing::NoGidl).then_some(value),
        power_w: rest.power_w,
        slope,
        curvature,
        shares: list,
        takes_over,
        gives_way,
        without_w,
        span_v: rest.virtual_supply_v - rest.virtual_ground_v,
        oxide_v: rest.oxide_v,
        curve_miss: (on_curve.power_w / rest.power_w - 1.0).abs(),
        sweep,
        notes,
    })
}

fn standing(found: &Valley, without_gidl: bool) -> Standing {
    match (found.end, without_gidl) {
        (None, _) => Standing::Inside,
        (Some(End::Low), _) => Standing::LowEnd,
        (Some(End::High), false) => Standing::HighEnd,
        (Some(End::High), true) => Standing::NoGidl,
    }
}

/// Power without the knob and without its generator, where a generator is stated; a remark when that is less.
fn worth(t: &Turned<'_>, best: &Asleep, notes: &mut Vec<Note>) -> Result<Option<f64>, OptimumError> {
    if t.scheme.overhead_a == 0.0 && t.scheme.pump_efficiency.is_none() {
        return Ok(None);
    }
    let Some(plain) = t.knob.without(t.scheme) else { return Ok(None) };
    // the curve of a block whose wells move is not kept, so the parts are right for it as well
    let w = t.settle(&plain, false)?.power_w;
    if w <= best.power_w {
        notes.push(Note::new(
            "not-worth-it",
            format!(
                "corner `{}`: without {} and what makes it the domain draws {w:.3e} W, with the best setting {:.3e} W",
                t.site.corner,
                Knob::name(t.knob),
                best.power_w
            ),
        ));
    }
    Ok(Some(w))
}
