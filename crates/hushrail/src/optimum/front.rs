//! Candidates over all corners: which none beats, and which comes nearest where none fits.

use serde::{Deserialize, Serialize};

use super::limits::{Binding, Limit};

/// One candidate over all corners.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Candidate {
    /// Settings, in the order of the knobs.
    pub values: Vec<f64>,
    /// Power asleep, joined over the corners, W.
    pub power_w: f64,
    /// Area of the switches, m², where a density is given.
    pub area_m2: Option<f64>,
    /// Time to ready at the slowest corner, s, where the rail's capacitance is given. A candidate that breaks another limit has
    /// none where its wake-up takes an integration in time.
    pub wake_s: Option<f64>,
    /// The corner with the highest power.
    pub corner: String,
    /// The limit that is nearest, if there is one.
    pub binding: Option<Binding>,
}

/// A limit over all candidates.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LimitCount {
    /// The limit.
    pub limit: Limit,
    /// Candidates that break it; with those of `untested`, at most that many more.
    pub broken_by: usize,
    /// Candidates of which it is not known: they break another limit, and their wake-up takes an integration in time that was
    /// left out. Zero for limits without wake-up; a stress that is too high without the way up is counted as broken.
    #[serde(default)]
    pub untested: usize,
    /// Where it stands with the candidate that meets it best, of those of which it is known.
    pub best: Option<Binding>,
}

/// No candidate meets every limit.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Infeasible {
    /// The candidate that comes nearest.
    pub nearest: Candidate,
    /// In words: which limit binds it and by how much.
    pub reason: String,
}

/// What is left to the limit that is nearest; nothing binds a candidate without limits.
pub(super) fn margin(c: &Candidate) -> f64 {
    c.binding.as_ref().map_or(0.0, |b| b.margin)
}

/// In words why no candidate of `all` fits, when this is the nearest.
pub(super) fn infeasible(nearest: &Candidate, all: usize, counts: &[LimitCount]) -> Infeasible {
    let mut reason = format!(
        "no candidate of {all} meets every limit; the nearest: {}",
        nearest.binding.as_ref().map_or_else(String::new, Binding::words)
    );
    for c in counts.iter().filter(|c| c.broken_by > 0 && c.broken_by + c.untested == all) {
        if let Some(b) = &c.best {
            let which = if c.untested == 0 {
                String::new()
            } else {
                format!(" of the {} it was tested on", c.broken_by)
            };
            let more = format!(
                "; {} is broken by every candidate{which}, at best {:.4e} {} at corner `{}`",
                c.limit.name(),
                b.value,
                c.limit.unit(),
                b.corner
            );
            reason.push_str(&more);
        }
    }
    Infeasible { nearest: nearest.clone(), reason }
}

/// Whether one is nowhere worse and somewhere better.
pub fn dominates(a: &Candidate, b: &Candidate) -> bool {
    let pairs = objectives(a).into_iter().zip(objectives(b));
    let mut better = false;
    for (x, y) in pairs {
        if x > y {
            return false;
        }
        better |= x < y;
    }
    better
}

/// What is made small; what is not known is the same for all.
fn objectives(c: &Candidate) -> [f64; 3] {
    [c.power_w, c.area_m2.unwrap_or(0.0), c.wake_s.unwrap_or(0.0)]
}

/// Indices of the candidates that none dominates, by rising power; of equal ones the first.
pub(super) fn front(all: &[&Candidate]) -> Vec<usize> {
    let mut order: Vec<usize> = (0..all.len()).collect();
    // whoever dominates stands before whom it dominates
    order.sort_by(|a, b| {
        let (x, y) = (objectives(all[*a]), objectives(all[*b]));
        x.iter()
            .zip(&y)
            .map(|(x, y)| x.total_cmp(y))
            .find(|o| o.is_ne())
            .unwrap_or(std::cmp::Ordering::Equal)
            .then(a.cmp(b))
    });
    let mut kept: Vec<usize> = Vec::new();
    for k in order {
        let new = objectives(all[k]);
        let beaten = kept.iter().any(|j| objectives(all[*j]).iter().zip(&new).all(|(x, y)| x <= y));
        if !beaten {
            kept.push(k);
        }
    }
    kept
}
