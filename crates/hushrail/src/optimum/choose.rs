//! The choice: candidates at all corners, held against limits, and the front of those that nothing beats in power, area and
//! wake-up time at once.

use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

use indexmap::IndexMap;
use rayon::prelude::*;
use rustc_hash::FxHashMap;
use serde::{Deserialize, Serialize};

use super::compromise::Goal;
use super::error::{OptimumError, range};
use super::front::{Candidate, Infeasible, LimitCount, front, nearest};
use super::knob::Knob;
use super::limits::{Binding, ChooseLimits, Limit};
use super::site::{Made, Site};
use crate::awake::AwakeError;
use crate::awake::droop::{Load, settle_switches};
use crate::awake::size::LayoutDensity;
use crate::block::{BlockCurve, Parts};
use crate::cell::DeviceShelf;
use crate::read::deck::Note;
use crate::standby::Scheme;
use crate::standby::rest::settle_clamped;
use crate::standby::switch::Switch;
use crate::transition::{Gated, Segment, TransitionError, WakeSpec, wake_up};

/// A knob and the settings to try.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct FreeKnob {
    /// The knob.
    pub knob: Knob,
    /// Settings; a column of the list of candidates when there is one.
    #[serde(default)]
    pub values: Vec<f64>,
}

/// What is asked of a choice.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ChooseSpec {
    /// Free knobs.
    pub knobs: Vec<FreeKnob>,
    /// Candidates one by one, a setting for each knob; all combinations of the knobs' settings when left out.
    #[serde(default)]
    pub candidates: Option<Vec<Vec<f64>>>,
    /// Limits.
    #[serde(default)]
    pub limits: ChooseLimits,
    /// How power is joined over the corners.
    #[serde(default)]
    pub goal: Goal,
    /// The load awake; needed for a droop limit.
    #[serde(default)]
    pub load: Option<Load>,
    /// Layout density of switches; area is an objective when it is given.
    #[serde(default)]
    pub density: Option<LayoutDensity>,
    /// Capacitance of the virtual rail, F; the wake-up time is an objective when it is given.
    #[serde(default)]
    pub rail_f: Option<f64>,
    /// How a domain is woken; segments are shares of the switch: their widths are scaled to each candidate's.
    #[serde(default)]
    pub wake: WakeSpec,
    /// Relative accuracy of the block's curves.
    #[serde(default = "tolerance")]
    pub tolerance: f64,
}

fn tolerance() -> f64 {
    1e-3
}

impl Default for ChooseSpec {
    fn default() -> Self {
        Self {
            knobs: Vec::new(),
            candidates: None,
            limits: ChooseLimits::default(),
            goal: Goal::default(),
            load: None,
            density: None,
            rail_f: None,
            wake: WakeSpec::default(),
            tolerance: tolerance(),
        }
    }
}

impl ChooseSpec {
    /// Number of candidates; at most what a choice takes.
    pub fn size(&self) -> usize {
        match &self.candidates {
            Some(list) => list.len(),
            None => self.knobs.iter().fold(1, |n: usize, k| n.saturating_mul(k.values.len())).min(MOST),
        }
    }
}

/// A point of the front.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct FrontPoint {
    /// The candidate.
    pub candidate: Candidate,
    /// Power at its deciding corner by the device solver, W.
    pub checked_w: f64,
    /// Largest relative difference of the curve to it.
    pub curve_miss: f64,
}

/// The answer.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Chosen {
    /// Knobs in the order of the settings.
    pub knobs: Vec<Knob>,
    /// Corners.
    pub corners: Vec<String>,
    /// What the front was made of: `power_w`, `area_m2`, `wake_s`.
    pub objectives: Vec<String>,
    /// The front, by rising power.
    pub front: Vec<FrontPoint>,
    /// Every candidate that meets the limits, in the order of the candidates.
    pub feasible: Vec<Candidate>,
    /// All candidates.
    pub candidates: usize,
    /// Candidates without an answer at some corner.
    pub failed: usize,
    /// The limits over all candidates.
    pub limits: Vec<LimitCount>,
    /// Why the front is empty, when it is.
    pub infeasible: Option<Infeasible>,
    /// Remarks; the first reason of failure is among them.
    pub notes: Vec<Note>,
}

/// Most candidates of one choice.
const MOST: usize = 1_000_000;
/// Candidates that one task works at one corner; droops are shared within it, so that it is not small.
const CHUNK: usize = 1024;

/// One candidate at one corner.
#[derive(Debug, Clone, Copy)]
struct Found {
    power_w: f64,
    oxide_v: f64,
    field_v_m: f64,
    span_v: f64,
    droop_v: Option<f64>,
    wake_s: Option<f64>,
    peak_a: Option<f64>,
}

impl Found {
    fn of(&self, limit: Limit) -> Option<f64> {
        match limit {
            Limit::Droop => self.droop_v,
            Limit::Wake => self.wake_s,
            Limit::InRush => self.peak_a,
            Limit::Oxide => Some(self.oxide_v),
            Limit::Field => Some(self.field_v_m),
            Limit::Span => Some(self.span_v),
            Limit::Standby => Some(self.power_w),
            Limit::Area => None,
        }
    }
}

/// Settings of every candidate.
fn settings(spec: &ChooseSpec) -> Result<Vec<Vec<f64>>, OptimumError> {
    let n = spec.knobs.len();
    if n == 0 {
        return range("number of free knobs", "0".into(), "want one or more");
    }
    for (i, k) in spec.knobs.iter().enumerate() {
        if spec.knobs[..i].iter().any(|x| x.knob == k.knob) {
            return range("knob", format!("{} twice", k.knob.name()), "want each knob once");
        }
    }
    let too_many = |found: String| range("number of candidates", found, &format!("want 1 to {MOST}"));
    if let Some(list) = &spec.candidates {
        if let Some(row) = list.iter().find(|r| r.len() != n) {
            return range(
                "a candidate's settings",
                row.len().to_string(),
                &format!("want {n}, one for each knob"),
            );
        }
        if list.is_empty() || list.len() > MOST {
            return too_many(list.len().to_string());
        }
        return Ok(list.clone());
    }
    if let Some(k) = spec.knobs.iter().find(|k| k.values.is_empty()) {
        return range(&format!("settings of {}", k.knob.name()), "none".into(), "want one or more");
    }
    let all = spec.knobs.iter().try_fold(1usize, |n, k| n.checked_mul(k.values.len()).filter(|n| *n <= MOST));
    let Some(all) = all else { return too_many(format!("more than {MOST}")) };
    Ok((0..all)
        .map(|mut i| {
            let mut row = vec![0.0; n];
            for (k, to) in spec.knobs.iter().zip(&mut row).rev() {
                *to = k.values[i % k.values.len()];
                i /= k.values.len();
            }
            row
        })
        .collect())
}

fn check(spec: &ChooseSpec, sites: usize) -> Result<(), OptimumError> {
    spec.limits.check()?;
    if sites == 0 {
        return range("number of corners", "0".into(), "want one or more");
    }
    if spec.goal == Goal::Loss {
        return range("goal of a choice", "loss".into(), "want worst or mean");
    }
    let needs = |limit: &str, key: &str| {
        range(&format!("limit of {limit}"), format!("given without {key}"), &format!("want {key} with it"))
    };
    if spec.limits.droop_v.is_some() && spec.load.is_none() {
        return needs("droop", "load");
    }
    if spec.limits.area_m2.is_some() && spec.density.is_none() {
        return needs("area", "density");
    }
    if (spec.limits.wake_s.is_some() || spec.limits.in_rush_a.is_some()) && spec.rail_f.is_none() {
        return needs("wake or in_rush", "rail_f");
    }
    Ok(())
}

/// What of a scheme the block sees, so that candidates share its curve.
fn block_key(s: &Scheme) -> [u64; 2] {
    [s.nwell_bias_v.to_bits(), s.pwell_bias_v.to_bits()]
}

/// A block at a corner, with its curve where it has one.
struct Drawn {
    parts: Parts,
    curve: Option<BlockCurve>,
}

/// Works a choice out; the same bits for any number of threads. `done` counts candidates × corners.
///
/// # Errors
/// A request that contradicts itself, a block without operating point, or `stop` raised. Candidates that cannot be computed at a
/// corner are counted, limits that nobody meets are told in [`Chosen::infeasible`].
pub fn choose(
    sites: &[Site<'_>],
    scheme: &Scheme,
    spec: &ChooseSpec,
    done: &AtomicUsize,
    stop: &AtomicBool,
) -> Result<Chosen, OptimumError> {
    check(spec, sites.len())?;
    let weights = spec.goal.weights(sites.len())?;
    let rows = settings(spec)?;
    let mut schemes = Vec::with_capacity(rows.len());
    let mut areas = Vec::with_capacity(rows.len());
    for row in &rows {
        let mut s = scheme.clone();
        for (k, value) in spec.knobs.iter().zip(row) {
            k.knob.put(&mut s, *value)?;
        }
        areas.push(area(&s, spec)?);
        schemes.push(s);
    }
    // blocks first: one for each corner and each setting of the block's wells
    let mut keys: IndexMap<[u64; 2], &Scheme> = IndexMap::new();
    for s in &schemes {
        keys.entry(block_key(s)).or_insert(s);
    }
    let pairs: Vec<(&Site<'_>, &Scheme)> =
        sites.iter().flat_map(|site| keys.values().map(move |s| (site, *s))).collect();
    let drawn = pairs
        .par_iter()
        .map(|(site, s)| {
            if stop.load(Ordering::Relaxed) {
                return Err(OptimumError::Stopped);
            }
            let parts = site.parts(s)?;
            let curve = site.curve(s, &parts, spec.tolerance, stop)?;
            Ok(Drawn { parts, curve })
        })
        .collect::<Vec<Result<Drawn, OptimumError>>>()
        .into_iter()
        .collect::<Result<Vec<_>, _>>()?;
    let block_of =
        |site: usize, s: &Scheme| keys.get_index_of(&block_key(s)).map(|k| &drawn[site * keys.len() + k]);
    let chunks: Vec<(usize, usize)> = (0..schemes.len())
        .step_by(CHUNK)
        .flat_map(|start| (0..sites.len()).map(move |site| (start, site)))
        .collect();
    let parts = chunks
        .par_iter()
        .map(|(start, site)| {
            let mut one = Corner {
                site: &sites[*site],
                spec,
                shelf: DeviceShelf::default(),
                droops: FxHashMap::default(),
                stop,
            };
            let mut out = Vec::with_capacity(CHUNK);
            for s in schemes.iter().skip(*start).take(CHUNK) {
                if stop.load(Ordering::Relaxed) {
                    return Err(OptimumError::Stopped);
                }
                out.push(match block_of(*site, s) {
                    Some(d) => one.work(s, d),
                    None => Err(OptimumError::Stopped),
                });
                done.fetch_add(1, Ordering::Relaxed);
            }
            Ok(out)
        })
        .collect::<Vec<Result<Vec<Result<Found, OptimumError>>, OptimumError>>>()
        .into_iter()
        .collect::<Result<Vec<_>, _>>()?;
    if stop.load(Ordering::Relaxed) {
        return Err(OptimumError::Stopped);
    }
    let at =
        |candidate: usize, site: usize| &parts[(candidate / CHUNK) * sites.len() + site][candidate % CHUNK];
    let mut notes = Vec::new();
    let mut failed = 0;
    let mut all: Vec<(usize, Candidate)> = Vec::new();
    let mut counts: Vec<LimitCount> = Limit::ALL
        .iter()
        .filter(|l| spec.limits.allowed(**l).is_some())
        .map(|l| LimitCount { limit: *l, broken_by: 0, best: None })
        .collect();
    for (i, row) in rows.iter().enumerate() {
        let mut found = Vec::with_capacity(sites.len());
        for site in 0..sites.len() {
            match at(i, site) {
                Ok(f) => found.push(*f),
                Err(e) => {
                    if failed == 0 {
                        notes.push(Note::new(
                            "candidate-failed",
                            format!("the first candidate without an answer: {e}"),
                        ));
                    }
                    failed += 1;
                    break;
                }
            }
        }
        if found.len() == sites.len() {
            all.push((i, candidate(sites, spec, &weights, row, areas[i], &found, &mut counts)));
        }
    }
    let fits = |c: &Candidate| c.binding.as_ref().is_none_or(|b| b.margin >= 0.0);
    let feasible: Vec<usize> = (0..all.len()).filter(|k| fits(&all[*k].1)).collect();
    let infeasible = if feasible.is_empty() { nearest(&all, &counts) } else { None };
    let chosen = front(&feasible.iter().map(|k| &all[*k].1).collect::<Vec<_>>());
    let points = chosen
        .par_iter()
        .map(|k| {
            let (i, c) = &all[feasible[*k]];
            let site = sites.iter().position(|s| s.corner == c.corner).unwrap_or(0);
            let s = &schemes[*i];
            let Some(d) = block_of(site, s) else { return Err(OptimumError::Stopped) };
            let made = sites[site].made(s, &mut DeviceShelf::default())?;
            let direct =
                settle_clamped(s, &d.parts, sites[site].vdd_v, made.header, made.footer, made.clamps, stop)
                    .map_err(|e| OptimumError::rest(sites[site].corner, e))?;
            let quick = at(*i, site).as_ref().map_or(f64::NAN, |f| f.power_w);
            Ok(FrontPoint {
                candidate: c.clone(),
                checked_w: direct.power_w,
                curve_miss: (quick / direct.power_w - 1.0).abs(),
            })
        })
        .collect::<Vec<Result<FrontPoint, OptimumError>>>()
        .into_iter()
        .collect::<Result<Vec<_>, _>>()?;
    let mut objectives = vec!["power_w".to_owned()];
    for (name, there) in [("area_m2", spec.density.is_some()), ("wake_s", spec.rail_f.is_some())] {
        if there {
            objectives.push(name.to_owned());
        }
    }
    if failed == rows.len() {
        notes.push(Note::new("no-answer", "no candidate has an answer at every corner".to_owned()));
    }
    Ok(Chosen {
        knobs: spec.knobs.iter().map(|k| k.knob).collect(),
        corners: sites.iter().map(|s| s.corner.to_owned()).collect(),
        objectives,
        front: points,
        feasible: feasible.iter().map(|k| all[*k].1.clone()).collect(),
        candidates: rows.len(),
        failed,
        limits: counts,
        infeasible,
        notes,
    })
}

/// Area of the switches of a scheme, where a density is given, m².
fn area(s: &Scheme, spec: &ChooseSpec) -> Result<Option<f64>, OptimumError> {
    let Some(d) = &spec.density else { return Ok(None) };
    let mut sum = 0.0;
    for x in [&s.header, &s.footer].into_iter().flatten() {
        // transistors in series behind one gate take their width each
        let width = x.width_m * x.stacked as f64;
        let (a, _) = d
            .area_m2(width)
            .map_err(|e| OptimumError::Awake { corner: "every".into(), reason: Box::new(e) })?;
        sum += a;
    }
    Ok(Some(sum))
}

/// One corner under one task: devices and droops are known once.
struct Corner<'a> {
    site: &'a Site<'a>,
    spec: &'a ChooseSpec,
    shelf: DeviceShelf,
    droops: FxHashMap<Vec<u64>, f64>,
    stop: &'a AtomicBool,
}

impl Corner<'_> {
    fn work(&mut self, s: &Scheme, d: &Drawn) -> Result<Found, OptimumError> {
        let made = self.site.made(s, &mut self.shelf)?;
        let droop_v = self.droop(s, &made)?;
        let v = self.site.vdd_v;
        // awake, gate and source are a supply and the boost apart
        let awake = [&made.header, &made.footer]
            .into_iter()
            .flatten()
            .map(|x| ((x.awake_gate_v - x.rail_v).abs(), x.device.oxide_m()));
        let (mut oxide_v, mut field_v_m) = (0.0f64, 0.0f64);
        for (x, thick) in awake {
            oxide_v = oxide_v.max(x);
            field_v_m = field_v_m.max(x / thick);
        }
        let (wake_s, peak_a) = self.wake(s, d, made.switch())?;
        let Made { header, footer, clamps } = made;
        let rest = match &d.curve {
            Some(c) => settle_clamped(s, c, v, header, footer, clamps, self.stop),
            None => settle_clamped(s, &d.parts, v, header, footer, clamps, self.stop),
        }
        .map_err(|e| OptimumError::rest(self.site.corner, e))?;
        Ok(Found {
            power_w: rest.power_w,
            oxide_v: oxide_v.max(rest.oxide_v),
            field_v_m: field_v_m.max(rest.oxide_field_v_m),
            span_v: rest.virtual_supply_v - rest.virtual_ground_v,
            droop_v,
            wake_s,
            peak_a,
        })
    }

    /// Droop; the whole supply where the switch cannot carry the load. What the gate does asleep does not move it.
    fn droop(&mut self, s: &Scheme, made: &Made) -> Result<Option<f64>, OptimumError> {
        let Some(load) = &self.spec.load else { return Ok(None) };
        let key: Vec<u64> = [&s.header, &s.footer]
            .into_iter()
            .flatten()
            .flat_map(|x| {
                let body = if x.body_to_gate { x.boost_v } else { x.well_bias_v };
                [x.width_m, x.length_m, x.finger_width_m.unwrap_or(x.width_m), x.boost_v, body]
                    .map(f64::to_bits)
            })
            .collect();
        if let Some(known) = self.droops.get(&key) {
            return Ok(Some(*known));
        }
        let v = match settle_switches(load, made.header.as_ref(), made.footer.as_ref()) {
            Ok((d, ..)) => d.droop_v,
            Err(AwakeError::Overloaded { .. }) => self.site.vdd_v,
            Err(e) => {
                return Err(OptimumError::Awake { corner: self.site.corner.into(), reason: Box::new(e) });
            }
        };
        self.droops.insert(key, v);
        Ok(Some(v))
    }

    /// Time to ready and largest current, where the rail's capacitance is given.
    fn wake(
        &self,
        s: &Scheme,
        d: &Drawn,
        switch: Option<&Switch>,
    ) -> Result<(Option<f64>, Option<f64>), OptimumError> {
        let Some(rail_f) = self.spec.rail_f else { return Ok((None, None)) };
        let wrong = |e: TransitionError| OptimumError::Transition {
            corner: self.site.corner.into(),
            reason: Box::new(e),
        };
        let (Some(curve), Some(switch)) = (&d.curve, switch) else {
            return Err(wrong(TransitionError::Switches {
                scheme: s.name.clone(),
                found: "not one switch over one virtual rail",
            }));
        };
        let spec = match (&self.spec.wake.segments, s.header.as_ref().or(s.footer.as_ref())) {
            (Some(segments), Some(x)) => {
                let sum: f64 = segments.iter().map(|g| g.width_m).sum();
                let scaled =
                    segments.iter().map(|g| Segment { width_m: g.width_m * x.width_m / sum, ..*g }).collect();
                &WakeSpec { segments: Some(scaled), ..self.spec.wake.clone() }
            }
            _ => &self.spec.wake,
        };
        let g = Gated::new(s, curve, switch, rail_f).map_err(wrong)?;
        let wake = wake_up(&g, spec).map_err(wrong)?;
        Ok((Some(wake.ready_s), Some(wake.peak_a)))
    }
}

/// Joins a candidate over the corners and holds it against the limits.
fn candidate(
    sites: &[Site<'_>],
    spec: &ChooseSpec,
    weights: &[f64],
    row: &[f64],
    area_m2: Option<f64>,
    found: &[Found],
    counts: &mut [LimitCount],
) -> Candidate {
    let mut worst = 0;
    for (k, f) in found.iter().enumerate() {
        if f.power_w > found[worst].power_w {
            worst = k;
        }
    }
    let power_w = if weights.is_empty() {
        found[worst].power_w
    } else {
        found.iter().zip(weights).map(|(f, w)| f.power_w * w).sum()
    };
    let mut binding: Option<Binding> = None;
    for count in counts {
        let limit = count.limit;
        let Some(allowed) = spec.limits.allowed(limit) else { continue };
        let mut least: Option<Binding> = None;
        let mut hold = |corner: &str, value: f64| {
            let margin = limit.margin(value, allowed);
            if least.as_ref().is_none_or(|b| margin < b.margin) {
                least = Some(Binding { limit, corner: corner.to_owned(), value, allowed, margin });
            }
        };
        if limit == Limit::Area {
            if let Some(a) = area_m2 {
                hold("every", a);
            }
        } else {
            for (site, f) in sites.iter().zip(found) {
                if let Some(v) = f.of(limit) {
                    hold(site.corner, v);
                }
            }
        }
        let Some(least) = least else { continue };
        if least.margin < 0.0 {
            count.broken_by += 1;
        }
        if count.best.as_ref().is_none_or(|b| least.margin > b.margin) {
            count.best = Some(least.clone());
        }
        if binding.as_ref().is_none_or(|b| least.margin < b.margin) {
            binding = Some(least);
        }
    }
    Candidate {
        values: row.to_vec(),
        power_w,
        area_m2,
        wake_s: found
            .iter()
            .filter_map(|f| f.wake_s)
            .fold(None, |m: Option<f64>, x| Some(m.map_or(x, |m| m.max(x)))),
        corner: sites[worst].corner.to_owned(),
        binding,
    }
}
