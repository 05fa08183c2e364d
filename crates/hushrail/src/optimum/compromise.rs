//! One setting of a knob for all corners, and what each corner loses by it against its own optimum.

use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::corner::{CURVE, CornerOptimum, NEAR, SCAN, STEP, ln_power, optimum_of};
use super::error::{OptimumError, range as wrong};
use super::knob::{Knob, KnobRange};
use super::search::{stationary, valley};
use super::site::{Site, Turned};
use crate::read::deck::Note;
use crate::standby::Scheme;

/// What a single setting is judged by.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Goal {
    /// Power of the worst corner.
    #[default]
    Worst,
    /// Mean power, with a weight for each corner; all alike when empty.
    Mean(Vec<f64>),
    /// Largest factor that any corner loses against its own optimum.
    Loss,
}

impl Goal {
    /// Weights of a mean that fit the corners, adding up to one.
    pub(super) fn weights(&self, corners: usize) -> Result<Vec<f64>, OptimumError> {
        let Self::Mean(w) = self else { return Ok(Vec::new()) };
        if w.is_empty() {
            return Ok(vec![1.0 / corners as f64; corners]);
        }
        let sum: f64 = w.iter().sum();
        if w.len() != corners || !(sum > 0.0 && sum.is_finite()) || w.iter().any(|x| !(*x >= 0.0)) {
            let found = format!("{} with sum {sum}", w.len());
            return wrong("weights", found, &format!("want {corners}, none below zero, not all zero"));
        }
        Ok(w.iter().map(|x| x / sum).collect())
    }
}

/// What one corner pays for the compromise.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Paid {
    /// The corner.
    pub corner: String,
    /// Power with the compromise, W.
    pub power_w: f64,
    /// Power at its own optimum, W.
    pub own_w: f64,
    /// Its own setting, if it has one.
    pub own_value: Option<f64>,
    /// Power lost, relative to its own optimum.
    pub loss: f64,
}

/// One setting for all corners.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Compromise {
    /// The knob.
    pub knob: Knob,
    /// What it was judged by.
    pub goal: Goal,
    /// The setting.
    pub value: f64,
    /// The objective there: W, or a factor for [`Goal::Loss`].
    pub objective: f64,
    /// Whether the objective has no slope there; else two corners hold each other, or it is an end of the range.
    pub smooth: bool,
    /// Slope of ln(objective) left, where it is smooth.
    pub slope: Option<f64>,
    /// The corner that decides, or the two that hold each other; empty for a mean.
    pub deciding: Vec<String>,
    /// Every corner.
    pub corners: Vec<Paid>,
    /// Each corner's own optimum.
    pub optima: Vec<CornerOptimum>,
    /// Remarks.
    pub notes: Vec<Note>,
}

/// Corners within this of the highest decide together.
const LEVEL: f64 = 3e-4;

/// One setting over all sites, with each site's own optimum. `done` counts the sites whose optimum is known.
///
/// # Errors
/// No site, weights that do not fit, or what [`corner_optimum`](super::corner::corner_optimum) cannot do at one of them.
pub fn compromise(
    sites: &[Site<'_>],
    scheme: &Scheme,
    range: &KnobRange,
    goal: &Goal,
    done: &AtomicUsize,
    stop: &AtomicBool,
) -> Result<Compromise, OptimumError> {
    range.check(scheme)?;
    if sites.is_empty() {
        return wrong("number of corners", "0".into(), "want one or more");
    }
    let weights = goal.weights(sites.len())?;
    let found: Vec<(Turned<'_>, CornerOptimum)> = sites
        .par_iter()
        .map(|s| {
            if stop.load(Ordering::Relaxed) {
                return Err(OptimumError::Stopped);
            }
            let t = Turned::new(s, scheme, range.knob, CURVE, stop)?;
            let o = optimum_of(&t, range)?;
            done.fetch_add(1, Ordering::Relaxed);
            Ok((t, o))
        })
        .collect::<Vec<Result<_, _>>>()
        .into_iter()
        .collect::<Result<_, _>>()?;
    let (turned, optima): (Vec<_>, Vec<_>) = found.into_iter().unzip();
    let own: Vec<f64> = optima.iter().map(|o| ln_power(o.power_w)).collect();
    // each corner's part of the objective, on the logarithm
    let parts = |value: f64, quick: bool| -> Result<Vec<f64>, OptimumError> {
        turned
            .par_iter()
            .map(|t| if quick { t.quick(value) } else { t.direct(value) })
            .collect::<Vec<_>>()
            .into_iter()
            .zip(&own)
            .map(|(a, own)| {
                let y = ln_power(a?.power_w);
                Ok(if *goal == Goal::Loss { y - own } else { y })
            })
            .collect()
    };
    let join = |y: &[f64]| match goal {
        Goal::Mean(_) => y.iter().zip(&weights).map(|(y, w)| w * y.exp()).sum::<f64>().max(1e-300).ln(),
        Goal::Worst | Goal::Loss => y.iter().copied().fold(f64::NEG_INFINITY, f64::max),
    };
    let knob = range.knob;
    let value_of = |x: f64| knob.value(x).clamp(range.low, range.high);
    let (lo, hi) = (knob.variable(range.low), knob.variable(range.high));
    let low = valley(lo, hi, SCAN, NEAR, |x| parts(value_of(x), true).map(|y| join(&y)))?;
    let at_bottom = parts(value_of(low.x), false)?;
    let top = join(&at_bottom);
    let high: Vec<usize> = match goal {
        Goal::Mean(_) => Vec::new(),
        _ => (0..sites.len()).filter(|k| at_bottom[*k] >= top - LEVEL).collect(),
    };
    let mut x = low.x;
    let (mut slope, mut notes) = (None, Vec::new());
    if low.end.is_none() {
        let reach = 0.02 * (hi - lo);
        let flat = match (goal, high.as_slice()) {
            (Goal::Mean(_), _) => {
                stationary(x, (lo, hi), STEP, reach, |x| parts(value_of(x), false).map(|y| join(&y)))?
            }
            (_, [k]) => stationary(x, (lo, hi), STEP, reach, |x| {
                turned[*k].direct(value_of(x)).map(|a| ln_power(a.power_w))
            })?,
            _ => None,
        };
        if let Some(s) = flat
            && join(&parts(value_of(s.x), false)?) <= top + 1e-7
        {
            (x, slope) = (s.x, Some(s.slope));
        } else if let [a, b] = high.as_slice() {
            x = crossing(x, (lo, hi), |x| {
                let at = |k: usize| turned[k].direct(value_of(x)).map(|p| ln_power(p.power_w));
                let (own_a, own_b) = if *goal == Goal::Loss { (own[*a], own[*b]) } else { (0.0, 0.0) };
                Ok((at(*a)? - own_a) - (at(*b)? - own_b))
            })?
            .unwrap_or(x);
        }
    } else if optima.iter().any(|o| o.standing == super::Standing::NoGidl) {
        notes.extend(
            optima.iter().flat_map(|o| o.notes.iter().filter(|n| n.code == "no-gidl").cloned()).take(1),
        );
    }
    let value = value_of(x);
    let last = parts(value, false)?;
    let objective = join(&last).exp();
    let deciding = if matches!(goal, Goal::Mean(_)) {
        Vec::new()
    } else {
        let top = join(&last);
        (0..sites.len()).filter(|k| last[*k] >= top - LEVEL).map(|k| sites[k].corner.to_owned()).collect()
    };
    let corners = optima
        .iter()
        .zip(&last)
        .zip(&own)
        .map(|((o, y), own)| {
            let power_w = if *goal == Goal::Loss { (y + own).exp() } else { y.exp() };
            Paid {
                corner: o.corner.clone(),
                power_w,
                own_w: o.power_w,
                own_value: o.value,
                loss: power_w / o.power_w - 1.0,
            }
        })
        .collect();
    Ok(Compromise {
        knob,
        goal: goal.clone(),
        value,
        objective,
        smooth: slope.is_some(),
        slope,
        deciding,
        corners,
        optima,
        notes,
    })
}

/// Where two corners are level, near `x`: secant steps.
fn crossing(
    x: f64,
    (lo, hi): (f64, f64),
    mut f: impl FnMut(f64) -> Result<f64, OptimumError>,
) -> Result<Option<f64>, OptimumError> {
    let (mut a, mut b) = (x, (x + STEP).min(hi));
    let (mut fa, mut fb) = (f(a)?, f(b)?);
    for _ in 0..20 {
        if fb.abs() <= 1e-8 {
            return Ok(Some(b));
        }
        if fb == fa {
            return Ok(None);
        }
        let next =
            (b - fb * (b - a) / (fb - fa)).clamp(lo.max(x - 0.02 * (hi - lo)), hi.min(x + 0.02 * (hi - lo)));
        (a, fa) = (b, fb);
        b = next;
        fb = f(b)?;
    }
    Ok(None)
}
