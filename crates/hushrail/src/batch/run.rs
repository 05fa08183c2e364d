//! The main job: domains × schemes × corners, in parallel, the same bits for any number of threads.

use std::sync::atomic::Ordering;

use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::load::{DomainSummary, Loaded, LoadedDomain};
use super::watch::{Progress, Watch, watched};
use crate::block::{Bound, BoundBlock};
use crate::cell::DeviceShelf;
use crate::circuit::newton::SolveOptions;
use crate::corner::Corner;
use crate::read::deck::Note;
use crate::standby::{Asleep, RestError, Scheme, settle};

/// A limit and how a result stands to it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LimitCheck {
    /// Name of the limit.
    pub limit: String,
    /// Value found, SI.
    pub value: f64,
    /// Value allowed, SI.
    pub allowed: f64,
    /// Whether it holds.
    pub holds: bool,
}

/// One point: a domain under a scheme at a corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PointResult {
    /// Domain.
    pub domain: String,
    /// Scheme.
    pub scheme: String,
    /// Corner.
    pub corner: String,
    /// The domain at rest.
    pub asleep: Asleep,
    /// Power with nothing switched at the same corner, W.
    pub ungated_power_w: f64,
    /// Current with nothing switched, A.
    pub ungated_current_a: f64,
    /// Share of the ungated power saved.
    pub saving: f64,
    /// What the tables of cells without transistors leave open; absent where no such cell is in the domain.
    #[serde(default)]
    pub interval: Option<Interval>,
    /// Limits.
    pub limits: Vec<LimitCheck>,
}

/// Least and most that tables allow, all cells at the same end.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Interval {
    /// Standby power, W.
    pub power_w: (f64, f64),
    /// Standby current, A.
    pub current_a: (f64, f64),
    /// Power with nothing switched, W.
    pub ungated_power_w: (f64, f64),
}

/// A point that could not be computed.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Failure {
    /// Domain.
    pub domain: String,
    /// Scheme; empty when every scheme is concerned.
    pub scheme: String,
    /// Corner.
    pub corner: String,
    /// Why.
    pub reason: String,
}

/// Everything a run found.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Estimate {
    /// Always `hushrail-estimate`.
    pub format: String,
    /// Version of this format.
    pub version: u32,
    /// Heading.
    pub title: String,
    /// Domains.
    pub domains: Vec<DomainSummary>,
    /// Scheme names in order.
    pub schemes: Vec<String>,
    /// Corners in order.
    pub corners: Vec<Corner>,
    /// Points: domains, then schemes, then corners.
    pub points: Vec<PointResult>,
    /// Points that failed.
    pub failures: Vec<Failure>,
    /// Remarks, each once.
    pub notes: Vec<Note>,
    /// Whether the run was stopped before its end.
    pub stopped: bool,
}

/// Runs a loaded study.
///
/// Failures of points are listed in the result, never dropped; a stop keeps what was finished.
pub fn estimate(loaded: &Loaded, options: &SolveOptions, progress: &mut Progress<'_>) -> Estimate {
    let slots = loaded.domains.len() * loaded.schemes.len() * loaded.corners.len();
    let applicable = loaded
        .domains
        .iter()
        .map(|d| loaded.schemes.iter().filter(|s| s.applies_to(&d.name)).count())
        .sum::<usize>();
    let parts = watched(applicable * loaded.corners.len(), progress, |watch| {
        let pairs: Vec<(&LoadedDomain, &Corner)> =
            loaded.domains.iter().flat_map(|d| loaded.corners.iter().map(move |c| (d, c))).collect();
        pairs.par_iter().map(|(d, c)| pair(loaded, d, c, options, watch)).collect::<Vec<_>>()
    });
    let mut notes = loaded.notes.clone();
    let mut points: Vec<Option<PointResult>> = Vec::new();
    let mut failures = Vec::new();
    let mut stopped = false;
    points.resize_with(slots, || None);
    let (ns, nc) = (loaded.schemes.len(), loaded.corners.len());
    for (k, part) in parts.into_iter().enumerate() {
        let (d, c) = (k / nc.max(1), k % nc.max(1));
        for (s, p) in part.points.into_iter().enumerate() {
            if let Some(p) = p {
                for n in &p.asleep.notes {
                    n.clone().add_once(&mut notes);
                }
                points[(d * ns + s) * nc + c] = Some(p);
            }
        }
        for n in part.notes {
            n.add_once(&mut notes);
        }
        failures.extend(part.failures);
        stopped |= part.stopped;
    }
    Estimate {
        format: "hushrail-estimate".into(),
        version: 1,
        title: loaded.title.clone(),
        domains: loaded.domains.iter().map(|d| d.summary.clone()).collect(),
        schemes: loaded.schemes.iter().map(|s| s.name.clone()).collect(),
        corners: loaded.corners.clone(),
        points: points.into_iter().flatten().collect(),
        failures,
        notes,
        stopped,
    }
}

struct Part {
    points: Vec<Option<PointResult>>,
    failures: Vec<Failure>,
    notes: Vec<Note>,
    stopped: bool,
}

/// All schemes of one domain at one corner: the devices are made once, the ungated reference is solved once.
fn pair(loaded: &Loaded, d: &LoadedDomain, c: &Corner, options: &SolveOptions, watch: &Watch) -> Part {
    let mut part = Part { points: Vec::new(), failures: Vec::new(), notes: Vec::new(), stopped: false };
    let fail = |scheme: &str, reason: String| Failure {
        domain: d.name.clone(),
        scheme: scheme.to_owned(),
        corner: c.name.clone(),
        reason,
    };
    let mut shelf = DeviceShelf::default();
    let temp = match c.check() {
        Ok(t) => t,
        Err(e) => {
            part.failures.push(fail("", e.to_string()));
            return part;
        }
    };
    let Some(process) = loaded.processes.get(&c.process) else {
        part.failures.push(fail("", format!("no process `{}`", c.process)));
        return part;
    };
    let bound = match BoundBlock::new(&d.block, process, temp, c.vdd_v, &mut shelf, options) {
        Ok(b) => b,
        Err(e) => {
            part.failures.push(fail("", e.to_string()));
            return part;
        }
    };
    let has_tables = bound.has_tables();
    let ends = has_tables.then(|| [Bound::Low, Bound::High].map(|end| bound.at_bound(end)));
    let mut one = |scheme: &Scheme, end: Bound| -> Result<Asleep, RestError> {
        if !scheme.changes_block() {
            let bound = match (&ends, end) {
                (Some([low, _]), Bound::Low) => low,
                (Some([_, high]), Bound::High) => high,
                _ => &bound,
            };
            return settle(scheme, bound, process, temp, c.vdd_v, &mut shelf, &loaded.origin, &watch.stop);
        }
        let block = loaded.block_under(d, scheme)?;
        let bound = BoundBlock::new(&block, process, temp, c.vdd_v, &mut shelf, options)?.at_bound(end);
        settle(scheme, &bound, process, temp, c.vdd_v, &mut shelf, &loaded.origin, &watch.stop)
    };
    let ungated = Scheme::ungated("ungated");
    let reference = one(&ungated, Bound::Middle);
    let reference_ends = has_tables.then(|| (one(&ungated, Bound::Low), one(&ungated, Bound::High)));
    for scheme in &loaded.schemes {
        if !scheme.applies_to(&d.name) {
            part.points.push(None);
            continue;
        }
        let asleep = if scheme.is_ungated() && scheme.overhead_a == 0.0 {
            reference.clone()
        } else {
            one(scheme, Bound::Middle)
        };
        let ends = has_tables.then(|| (one(scheme, Bound::Low), one(scheme, Bound::High)));
        let interval = match (&reference_ends, &ends) {
            (Some((Ok(a), Ok(b))), Some((Ok(c), Ok(d)))) => Some(Interval {
                power_w: (c.power_w, d.power_w),
                current_a: (c.current_a, d.current_a),
                ungated_power_w: (a.power_w, b.power_w),
            }),
            _ => None,
        };
        let asleep =
            ends.into_iter().flat_map(|(a, b)| [a.err(), b.err()]).flatten().next().map_or(asleep, Err);
        match (&reference, asleep) {
            (Ok(r), Ok(a)) => {
                let mut limits = Vec::new();
                let mut hold = |name: &str, value: f64, allowed: Option<f64>| {
                    if let Some(allowed) = allowed {
                        limits.push(LimitCheck {
                            limit: name.into(),
                            value,
                            allowed,
                            holds: value <= allowed,
                        });
                    }
                };
                hold("oxide_v", a.oxide_v, loaded.limits.oxide_v);
                hold("standby_a", a.current_a, loaded.limits.standby_a);
                part.points.push(Some(PointResult {
                    domain: d.name.clone(),
                    scheme: scheme.name.clone(),
                    corner: c.name.clone(),
                    saving: 1.0 - a.power_w / r.power_w,
                    ungated_power_w: r.power_w,
                    ungated_current_a: r.current_a,
                    asleep: a,
                    interval,
                    limits,
                }));
            }
            (reference, asleep) => {
                let e = asleep.err().or_else(|| reference.as_ref().err().cloned());
                if watch.stop.load(Ordering::Relaxed) {
                    part.stopped = true;
                } else {
                    let text = e.map_or_else(String::new, |e| e.to_string());
                    part.failures.push(fail(&scheme.name, text));
                }
                part.points.push(None);
            }
        }
        watch.done.fetch_add(1, Ordering::Relaxed);
    }
    part.notes = shelf.notes;
    part
}
