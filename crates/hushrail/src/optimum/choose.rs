//! The choice: candidates at all corners, held against limits, and the front of those that nothing beats in power, area and
//! wake-up time at once.
//!
//! Limits are tested in two rounds. What rests and what is awake comes first, and with it the wake-up where it is an integral
//! ([`quick`](crate::transition::quick): ideal supply, gates that jump). Where a gate slews or a package rings, a wake-up is an
//! integration in time of milliseconds: it is done for the candidates that hold every limit of the first round, and where
//! none fits, for as many more as it takes to know the nearest, 256 at most (the nearest is then that of those tested). What a limit was not tested on is counted in
//! [`LimitCount::untested`].
//!
//! Stress on the way up. With an ideal supply source and body stand, and the drain moves one way. A gate-drain voltage is then
//! linear in gate and drain, each of which runs from one end to the other: its extremes are at ends of both. For a p-channel header
//! (gate from V + o to −b, drain from x to V, with overdrive o, boost b, span at rest x) the four are V + o − x, o, −b − x and
//! −b − V; the largest is one of the first, asleep, and the last, awake, and a footer of n-channels is its mirror. An n-channel
//! header has its largest, V + b − x, when its gate jumps while its rail is still low: so ends of pieces are always looked at. With
//! a package the rows of the integration are.

use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

use indexmap::IndexMap;
use rayon::prelude::*;
use rustc_hash::FxHashMap;
use serde::{Deserialize, Serialize};

use super::compromise::Goal;
use super::error::{OptimumError, range};
use super::front::{Candidate, Infeasible, LimitCount, front, infeasible, margin};
use super::knob::Knob;
use super::limits::{Binding, ChooseLimits, Limit};
use super::site::{Made, Site};
use crate::awake::AwakeError;
use crate::awake::droop::{Load, settle_switches};
use crate::awake::size::LayoutDensity;
use crate::block::{BlockCurve, Parts};
use crate::cell::DeviceShelf;
use crate::read::deck::Note;
use crate::read::source::nearest;
use crate::standby::Scheme;
use crate::standby::rest::settle_clamped;
use crate::standby::stress::Pair;
use crate::standby::switch::{Side, Switch};
use crate::transition::quick::is_quick;
use crate::transition::{Gated, Segment, TransitionError, WakeShelf, WakeSpec, WakeSummary, wake_up};

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
    /// Retention voltage at each corner, V; needed for a margin of retention.
    #[serde(default)]
    pub retention_v: Option<IndexMap<String, f64>>,
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
            retention_v: None,
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

/// Candidates that are integrated at once in search of the nearest where none fits, and how often: no wake-up is worth more.
const BATCH: usize = 16;
const BATCHES: usize = 16;

/// One candidate at one corner.
#[derive(Debug, Clone, Copy)]
struct Found {
    power_w: f64,
    /// Over the switches, with the thickness of the oxide of each in the field.
    oxide_v: f64,
    field_v_m: f64,
    drain_bulk_v: f64,
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
            Limit::DrainBulk => Some(self.drain_bulk_v),
            Limit::Span | Limit::Retention => Some(self.span_v),
            Limit::Standby => Some(self.power_w),
            Limit::Area => None,
        }
    }

    fn woken(&mut self, w: &WakeSummary, oxide_m: f64) {
        (self.wake_s, self.peak_a) = (Some(w.ready_s), Some(w.peak_a));
        self.oxide_v = self.oxide_v.max(w.oxide_v);
        self.field_v_m = self.field_v_m.max(w.oxide_v / oxide_m);
        self.drain_bulk_v = self.drain_bulk_v.max(w.drain_bulk_v);
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

/// Checks a request; gives the retention voltages in the order of the corners, where they bind.
fn check(spec: &ChooseSpec, sites: &[Site<'_>]) -> Result<Vec<f64>, OptimumError> {
    spec.limits.check()?;
    if sites.is_empty() {
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
    match (&spec.retention_v, spec.limits.retention_margin_v) {
        (None, None) => Ok(Vec::new()),
        (None, Some(_)) => needs("retention", "retention_v"),
        (Some(_), None) => {
            range("retention_v", "given without a margin".into(), "want the limit retention_margin_v with it")
        }
        (Some(table), Some(_)) => sites
            .iter()
            .map(|s| match table.get(s.corner) {
                Some(v) if *v > 0.0 && v.is_finite() => Ok(*v),
                Some(v) => range(
                    &format!("retention voltage at corner `{}`", s.corner),
                    format!("{v} V"),
                    "want a finite number above zero",
                ),
                None => {
                    let near = nearest(s.corner, table.keys().map(String::as_str));
                    let hint =
                        near.map_or_else(String::new, |n| format!("; the nearest name given is `{n}`"));
                    let what = format!("retention voltage at corner `{}`", s.corner);
                    range(&what, "not given".into(), &format!("want one for every corner{hint}"))
                }
            })
            .collect(),
    }
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
    let retention = check(spec, sites)?;
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
    let block_of = |site: usize, s: &Scheme| {
        keys.get_index_of(&block_key(s)).map(|k| (k, &drawn[site * keys.len() + k]))
    };
    // the second round, where there is one
    let slow = spec.rail_f.is_some() && !is_quick(&spec.wake);
    let chunks: Vec<(usize, usize)> = (0..schemes.len())
        .step_by(CHUNK)
        .flat_map(|start| (0..sites.len()).map(move |site| (start, site)))
        .collect();
    let parts = chunks
        .par_iter()
        .map(|(start, site)| {
            let mut one = Corner::new(&sites[*site], spec, stop);
            let mut out = Vec::with_capacity(CHUNK);
            for s in schemes.iter().skip(*start).take(CHUNK) {
                if stop.load(Ordering::Relaxed) {
                    return Err(OptimumError::Stopped);
                }
                out.push(match block_of(*site, s) {
                    Some((k, d)) => one.work(s, k, d, slow),
                    None => Err(OptimumError::Stopped),
                });
                if !slow {
                    done.fetch_add(1, Ordering::Relaxed);
                }
            }
            Ok(out)
        })
        .collect::<Vec<Result<Vec<Result<Found, OptimumError>>, OptimumError>>>()
        .into_iter()
        .collect::<Result<Vec<_>, _>>()?;
    let mut table = Table { parts, sites: sites.len() };
    let rules = Rules { sites, spec, weights: &weights, retention: &retention, rows: &rows, areas: &areas };
    let mut tested = vec![!slow; rows.len()];
    if slow {
        let wake = |table: &mut Table, which: &[usize], counted: usize| {
            let pairs: Vec<(usize, usize)> =
                which.iter().flat_map(|i| (0..sites.len()).map(move |site| (*i, site))).collect();
            let woken: Vec<Result<(WakeSummary, f64), OptimumError>> = pairs
                .par_iter()
                .map(|(i, site)| {
                    let s = &schemes[*i];
                    let (false, Some((_, d))) = (stop.load(Ordering::Relaxed), block_of(*site, s)) else {
                        return Err(OptimumError::Stopped);
                    };
                    let found = Corner::new(&sites[*site], spec, stop).integrate(s, d);
                    done.fetch_add(counted, Ordering::Relaxed);
                    found
                })
                .collect();
            for ((i, site), w) in pairs.into_iter().zip(woken) {
                let cell = table.cell(i, site);
                match (w, cell.as_mut()) {
                    (Ok((w, oxide_m)), Ok(f)) => f.woken(&w, oxide_m),
                    (Err(e), _) => *cell = Err(e),
                    _ => {}
                }
            }
        };
        // what is left to each candidate by the limits of the first round
        let left: Vec<Option<f64>> = (0..rows.len())
            .map(|i| Some(margin(&rules.candidate(i, &table.row(i).ok()?, false, &mut []))))
            .collect();
        let second: Vec<usize> = (0..rows.len()).filter(|i| left[*i].is_some_and(|m| m >= 0.0)).collect();
        let others = rows.len() - second.len();
        done.fetch_add(others * sites.len(), Ordering::Relaxed);
        wake(&mut table, &second, 1);
        let mut near = f64::NEG_INFINITY;
        for i in second {
            tested[i] = true;
            if let Ok(found) = table.row(i) {
                near = near.max(margin(&rules.candidate(i, &found, true, &mut [])));
            }
        }
        // a wake-up only takes from what is left: the nearest is known when no other has as much left before it
        let mut order: Vec<(f64, usize)> =
            left.iter().enumerate().filter_map(|(i, m)| m.filter(|m| *m < 0.0).map(|m| (m, i))).collect();
        order.sort_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)));
        for some in order.chunks(BATCH).take(BATCHES) {
            if near >= 0.0 || near > some[0].0 || stop.load(Ordering::Relaxed) {
                break;
            }
            let some: Vec<usize> = some.iter().map(|(_, i)| *i).collect();
            wake(&mut table, &some, 0);
            for i in some {
                tested[i] = true;
                if let Ok(found) = table.row(i) {
                    near = near.max(margin(&rules.candidate(i, &found, true, &mut [])));
                }
            }
        }
    }
    if stop.load(Ordering::Relaxed) {
        return Err(OptimumError::Stopped);
    }
    let mut notes = Vec::new();
    let mut failed = 0;
    let mut all: Vec<(usize, Candidate)> = Vec::new();
    let mut counts: Vec<LimitCount> = Limit::ALL
        .iter()
        .filter(|l| spec.limits.allowed(**l).is_some())
        .map(|l| LimitCount { limit: *l, broken_by: 0, untested: 0, best: None })
        .collect();
    for (i, whole) in tested.iter().enumerate() {
        match table.row(i) {
            Ok(found) => all.push((i, rules.candidate(i, &found, *whole, &mut counts))),
            Err(e) => {
                if failed == 0 {
                    let words = format!("the first candidate without an answer: {e}");
                    notes.push(Note::new("candidate-failed", words));
                }
                failed += 1;
            }
        }
    }
    let without = tested.iter().filter(|t| !**t).count();
    if without > 0 {
        notes.push(Note::new(
            "wake-untested",
            format!("{without} candidates break another limit: their wake-up was not integrated"),
        ));
    }
    let feasible: Vec<usize> = (0..all.len()).filter(|k| margin(&all[*k].1) >= 0.0).collect();
    let mut nearest: Option<&Candidate> = None;
    for (_, c) in all.iter().filter(|(i, _)| feasible.is_empty() && tested[*i]) {
        if nearest.is_none_or(|b| margin(c) > margin(b)) {
            nearest = Some(c);
        }
    }
    let infeasible = nearest.map(|c| infeasible(c, all.len(), &counts));
    let chosen = front(&feasible.iter().map(|k| &all[*k].1).collect::<Vec<_>>());
    let points = chosen
        .par_iter()
        .map(|k| {
            let (i, c) = &all[feasible[*k]];
            let site = sites.iter().position(|s| s.corner == c.corner).unwrap_or(0);
            let s = &schemes[*i];
            let Some((_, d)) = block_of(site, s) else { return Err(OptimumError::Stopped) };
            let made = sites[site].made(s, &mut DeviceShelf::default())?;
            let direct =
                settle_clamped(s, &d.parts, sites[site].vdd_v, made.header, made.footer, made.clamps, stop)
                    .map_err(|e| OptimumError::rest(sites[site].corner, e))?;
            let quick = table.get(*i, site).as_ref().map_or(f64::NAN, |f| f.power_w);
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

/// What was found, chunk by chunk.
struct Table {
    parts: Vec<Vec<Result<Found, OptimumError>>>,
    sites: usize,
}

impl Table {
    fn get(&self, candidate: usize, site: usize) -> &Result<Found, OptimumError> {
        &self.parts[(candidate / CHUNK) * self.sites + site][candidate % CHUNK]
    }
    fn cell(&mut self, candidate: usize, site: usize) -> &mut Result<Found, OptimumError> {
        &mut self.parts[(candidate / CHUNK) * self.sites + site][candidate % CHUNK]
    }
    /// A candidate at every corner, or why it has no answer at the first that has none.
    fn row(&self, candidate: usize) -> Result<Vec<Found>, &OptimumError> {
        (0..self.sites).map(|site| self.get(candidate, site).as_ref().copied()).collect()
    }
}

/// One corner under one task: devices, droops and currents of fingers are known once.
struct Corner<'a> {
    site: &'a Site<'a>,
    spec: &'a ChooseSpec,
    shelf: DeviceShelf,
    droops: FxHashMap<Vec<u64>, f64>,
    wakes: FxHashMap<usize, WakeShelf<'a>>,
    stop: &'a AtomicBool,
}

impl<'a> Corner<'a> {
    fn new(site: &'a Site<'a>, spec: &'a ChooseSpec, stop: &'a AtomicBool) -> Self {
        Self {
            site,
            spec,
            shelf: DeviceShelf::default(),
            droops: FxHashMap::default(),
            wakes: FxHashMap::default(),
            stop,
        }
    }

    /// Everything of a candidate but what takes an integration in time; `block` tells its block from the others.
    fn work(&mut self, s: &Scheme, block: usize, d: &'a Drawn, slow: bool) -> Result<Found, OptimumError> {
        let made = self.site.made(s, &mut self.shelf)?;
        let droop_v = self.droop(s, &made)?;
        let v = self.site.vdd_v;
        let (mut oxide_v, mut field_v_m, mut drain_bulk_v) = (0.0f64, 0.0f64, 0.0f64);
        for x in [&made.header, &made.footer].into_iter().flatten() {
            // awake with the whole supply on the block: gate and source are a supply and the boost apart
            let m = x.awake(x.awake_gate_v, x.rail_v);
            let over = m.of(Pair::GateSource).abs().max(m.of(Pair::GateDrain).abs());
            oxide_v = oxide_v.max(over);
            field_v_m = field_v_m.max(over / x.device.oxide_m());
            drain_bulk_v = drain_bulk_v.max((m.drain_v - x.awake_body_v).abs());
        }
        let switches: Vec<Switch> = [&made.header, &made.footer].into_iter().flatten().cloned().collect();
        let Made { header, footer, clamps } = made;
        let beside = clamps.clone();
        let rest = match &d.curve {
            Some(c) => settle_clamped(s, c, v, header, footer, clamps, self.stop),
            None => settle_clamped(s, &d.parts, v, header, footer, clamps, self.stop),
        }
        .map_err(|e| OptimumError::rest(self.site.corner, e))?;
        for x in &switches {
            let rail_v = if x.side == Side::Header { rest.virtual_supply_v } else { rest.virtual_ground_v };
            drain_bulk_v = drain_bulk_v.max(x.asleep(rail_v).of(Pair::DrainBulk).abs());
        }
        let span_v = rest.virtual_supply_v - rest.virtual_ground_v;
        let mut found = Found {
            power_w: rest.power_w,
            oxide_v: oxide_v.max(rest.oxide_v),
            field_v_m: field_v_m.max(rest.oxide_field_v_m),
            drain_bulk_v,
            span_v,
            droop_v,
            wake_s: None,
            peak_a: None,
        };
        if let (Some(rail_f), false) = (self.spec.rail_f, slow) {
            let (curve, switch) = self.one_rail(s, d, switches.first())?;
            let wrong = |e| self.wrong(e);
            let g = Gated::new(s, curve, switch, rail_f);
            let g = g
                .and_then(|g| g.clamped(beside.header.as_ref().or(beside.footer.as_ref())))
                .map_err(wrong)?;
            let scaled = self.scaled(s);
            let shelf = self.wakes.entry(block).or_insert_with(|| WakeShelf::new(curve));
            let woken = shelf.wake(&g, scaled.as_ref().unwrap_or(&self.spec.wake), Some(span_v));
            let woken = woken.map_err(|e| self.wrong(e))?;
            found.woken(&woken, switch.device.oxide_m());
        }
        Ok(found)
    }

    fn wrong(&self, e: TransitionError) -> OptimumError {
        OptimumError::Transition { corner: self.site.corner.into(), reason: Box::new(e) }
    }

    fn one_rail<'s>(
        &self,
        s: &Scheme,
        d: &'a Drawn,
        switch: Option<&'s Switch>,
    ) -> Result<(&'a BlockCurve, &'s Switch), OptimumError> {
        let found = "not one switch over one virtual rail";
        d.curve
            .as_ref()
            .zip(switch)
            .ok_or_else(|| self.wrong(TransitionError::Switches { scheme: s.name.clone(), found }))
    }

    /// The wake-up with its segments scaled to the switch, where it has segments.
    fn scaled(&self, s: &Scheme) -> Option<WakeSpec> {
        let (segments, x) = (self.spec.wake.segments.as_ref()?, s.header.as_ref().or(s.footer.as_ref())?);
        let sum: f64 = segments.iter().map(|g| g.width_m).sum();
        let scaled =
            segments.iter().map(|g| Segment { width_m: g.width_m * x.width_m / sum, ..*g }).collect();
        Some(WakeSpec { segments: Some(scaled), ..self.spec.wake.clone() })
    }

    /// The wake-up integrated in time, and the thickness of the switch's oxide.
    fn integrate(&mut self, s: &Scheme, d: &'a Drawn) -> Result<(WakeSummary, f64), OptimumError> {
        let made = self.site.made(s, &mut self.shelf)?;
        let (curve, switch) = self.one_rail(s, d, made.switch())?;
        let rail_f = self.spec.rail_f.unwrap_or_default();
        let clamp = made.clamps.header.as_ref().or(made.clamps.footer.as_ref());
        let g =
            Gated::new(s, curve, switch, rail_f).and_then(|g| g.clamped(clamp)).map_err(|e| self.wrong(e))?;
        let scaled = self.scaled(s);
        let wake = wake_up(&g, scaled.as_ref().unwrap_or(&self.spec.wake)).map_err(|e| self.wrong(e))?;
        Ok((WakeSummary::of(&wake, &g), switch.device.oxide_m()))
    }

    /// Droop; the whole supply where the switch cannot carry the load. What the gate does asleep does not move it.
    fn droop(&mut self, s: &Scheme, made: &Made) -> Result<Option<f64>, OptimumError> {
        let Some(load) = &self.spec.load else { return Ok(None) };
        let key: Vec<u64> = [&s.header, &s.footer]
            .into_iter()
            .flatten()
            .flat_map(|x| {
                let body = if x.body_to_gate { x.boost_v } else { x.awake_well_bias_v() };
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
}

/// What candidates are held against.
struct Rules<'a> {
    sites: &'a [Site<'a>],
    spec: &'a ChooseSpec,
    weights: &'a [f64],
    /// Retention voltages of the corners, V; empty without a margin.
    retention: &'a [f64],
    rows: &'a [Vec<f64>],
    areas: &'a [Option<f64>],
}

impl Rules<'_> {
    /// A limit where it is nearest.
    fn least(&self, limit: Limit, area_m2: Option<f64>, found: &[Found]) -> Option<Binding> {
        let allowed = self.spec.limits.allowed(limit)?;
        let of = |corner: &str, value: f64, allowed: f64| Binding {
            limit,
            corner: corner.to_owned(),
            value,
            allowed,
            margin: limit.margin(value, allowed),
        };
        if limit == Limit::Area {
            return Some(of("every", area_m2?, allowed));
        }
        let mut least: Option<(f64, usize, f64, f64)> = None;
        for (k, f) in found.iter().enumerate() {
            let above = if limit == Limit::Retention { self.retention[k] } else { 0.0 };
            let Some(value) = f.of(limit) else { continue };
            let left = limit.margin(value, above + allowed);
            if least.is_none_or(|l| left < l.0) {
                least = Some((left, k, value, above + allowed));
            }
        }
        least.map(|(_, k, value, allowed)| of(self.sites[k].corner, value, allowed))
    }

    /// Joins a candidate over the corners and holds it against the limits; `whole` says whether its wake-up is known or not
    /// asked for.
    fn candidate(&self, i: usize, found: &[Found], whole: bool, counts: &mut [LimitCount]) -> Candidate {
        let area_m2 = self.areas[i];
        let mut worst = 0;
        for (k, f) in found.iter().enumerate() {
            if f.power_w > found[worst].power_w {
                worst = k;
            }
        }
        let power_w = if self.weights.is_empty() {
            found[worst].power_w
        } else {
            found.iter().zip(self.weights).map(|(f, w)| f.power_w * w).sum()
        };
        let mut binding: Option<Binding> = None;
        for limit in Limit::ALL {
            if self.spec.limits.allowed(limit).is_none() {
                continue;
            }
            let least = self.least(limit, area_m2, found);
            let broken = least.as_ref().is_some_and(|b| b.margin < 0.0);
            let known = whole || !(limit.is_of_waking() || limit.is_of_stress());
            if let Some(count) = counts.iter_mut().find(|c| c.limit == limit) {
                count.broken_by += usize::from(broken);
                count.untested += usize::from(!known && !broken);
                if let Some(b) = least.as_ref().filter(|_| known)
                    && count.best.as_ref().is_none_or(|x| b.margin > x.margin)
                {
                    count.best = Some(b.clone());
                }
            }
            if let Some(least) = least
                && binding.as_ref().is_none_or(|b| least.margin < b.margin)
            {
                binding = Some(least);
            }
        }
        Candidate {
            values: self.rows[i].clone(),
            power_w,
            area_m2,
            wake_s: found
                .iter()
                .filter_map(|f| f.wake_s)
                .fold(None, |m: Option<f64>, x| Some(m.map_or(x, |m| m.max(x)))),
            corner: self.sites[worst].corner.to_owned(),
            binding,
        }
    }
}
