//! Transitions of a study: every domain under every scheme with one switch at every corner.

use std::path::PathBuf;
use std::sync::atomic::Ordering;

use indexmap::IndexMap;
use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::load::{Loaded, LoadedDomain, load_study};
use super::run::Failure;
use super::study::{asked, read_study};
use super::watch::{Progress, Watch, watched};
use crate::block::{BlockCurve, BoundBlock, Draw, Parts};
use crate::cell::{DeviceShelf, Levels};
use crate::circuit::newton::SolveOptions;
use crate::corner::Corner;
use crate::read::deck::Note;
use crate::read::source::{ReadError, Source};
use crate::standby::stress::{Moment, switch_stress};
use crate::standby::switch::Side;
use crate::standby::{Clamp, Scheme, StressLimits, Switch, SwitchStress};
use crate::transition::{
    Battery, BreakEven, Collapse, CycleCosts, Duty, DutyProfile, Gated, Ladder, LadderSpec, RailCapacitance,
    SleepSpec, TransitionError, Wake, WakeSpec, break_even, design_ladder, duty, fall_asleep, wake_up,
};

/// What is asked of the transitions of a study. Capacitances are given here or nothing is computed.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct TransitionSpec {
    /// The virtual rail's capacitance.
    #[serde(default)]
    pub rail: RailCapacitance,
    /// Costs of a round trip.
    #[serde(default)]
    pub costs: CycleCosts,
    /// The wake-up.
    #[serde(default)]
    pub wake: WakeSpec,
    /// Falling asleep.
    #[serde(default)]
    pub sleep: SleepSpec,
    /// A ladder to design, instead of the segments of `wake`.
    #[serde(default)]
    pub ladder: Option<LadderSpec>,
    /// What the domain does over time.
    #[serde(default)]
    pub duty: Option<DutyProfile>,
    /// What it lives on.
    #[serde(default)]
    pub battery: Option<Battery>,
    /// Limits of stress.
    #[serde(default)]
    pub limits: StressLimits,
    /// Relative accuracy of the block's curve.
    #[serde(default = "tolerance")]
    pub tolerance: f64,
    /// Domains; all when empty.
    #[serde(default)]
    pub domains: Vec<String>,
    /// Schemes; all with one switch when empty.
    #[serde(default)]
    pub schemes: Vec<String>,
    /// Corners; all when empty.
    #[serde(default)]
    pub corners: Vec<String>,
}

fn tolerance() -> f64 {
    1e-3
}

impl Default for TransitionSpec {
    fn default() -> Self {
        Self {
            rail: RailCapacitance::default(),
            costs: CycleCosts::default(),
            wake: WakeSpec::default(),
            sleep: SleepSpec::default(),
            ladder: None,
            duty: None,
            battery: None,
            limits: StressLimits::default(),
            tolerance: tolerance(),
            domains: Vec::new(),
            schemes: Vec::new(),
            corners: Vec::new(),
        }
    }
}

/// The current of a block over its rail, for pictures.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct RailCurve {
    /// Span left to the block, V.
    pub span_v: Vec<f64>,
    /// What the block takes from its virtual rail, A.
    pub block_a: Vec<f64>,
    /// What the sleeping switch gives, A.
    pub switch_a: Vec<f64>,
    /// Largest relative difference found at a check point.
    pub accuracy: f64,
    /// Spans at which the current jumps, V.
    pub jumps_v: Vec<f64>,
    /// Evaluations of the block.
    pub evaluations: usize,
}

/// Transitions of one domain under one scheme at one corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TransitionPoint {
    /// Domain.
    pub domain: String,
    /// Scheme.
    pub scheme: String,
    /// Corner.
    pub corner: String,
    /// Supply, V.
    pub vdd_v: f64,
    /// Capacitance of the virtual rail, F.
    pub rail_f: f64,
    /// The block's curve.
    pub curve: RailCurve,
    /// Falling asleep.
    pub collapse: Collapse,
    /// Waking; from rest.
    pub wake: Wake,
    /// The ladder, when one was asked for; `wake` is then its wake-up.
    pub ladder: Option<LadderSteps>,
    /// Where a sleep begins to pay.
    pub break_even: BreakEven,
    /// Averages of the duty profile.
    pub duty: Option<Duty>,
    /// Stress of the switch asleep, awake and while waking.
    pub stress: SwitchStress,
}

/// A ladder without its wake-up.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LadderSteps {
    /// Fingers of each segment.
    pub fingers: Vec<f64>,
    /// Width of each segment, m.
    pub width_m: Vec<f64>,
    /// Start of each segment, s.
    pub starts_s: Vec<f64>,
    /// Span over supply at each start.
    pub shares: Vec<f64>,
    /// The limit, A.
    pub limit_a: f64,
    /// Achieved, A.
    pub peak_a: f64,
}

/// Everything a run found.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
pub struct Transitions {
    /// Points: domains, then schemes, then corners.
    pub points: Vec<TransitionPoint>,
    /// Points that failed.
    pub failures: Vec<Failure>,
    /// Remarks, each once; the caution on stress is always among them when there is a point.
    pub notes: Vec<Note>,
    /// Whether the run was stopped before its end.
    pub stopped: bool,
}

/// What is asked for.
#[derive(Debug, Clone, Default)]
pub struct TransitionRequest {
    /// The study.
    pub study: PathBuf,
    /// What of it; what its `[transition]` table asks when left out.
    pub spec: Option<TransitionSpec>,
}

/// Works the transitions of a study out.
///
/// # Errors
/// A file that cannot be read or understood. Points that fail are listed.
pub fn transitions_of_study(
    request: &TransitionRequest,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Transitions, ReadError> {
    let source = Source::open(&request.study)?;
    let study = read_study(&source)?;
    let spec = asked(request.spec.as_ref(), study.transition.as_ref(), "[transition]", &source)?;
    let loaded = load_study(&study, &source.path, &source.folder)?;
    Ok(transitions(&loaded, &spec, options, progress))
}

/// Works the transitions of a loaded study out; the same bits for any number of threads.
pub fn transitions(
    loaded: &Loaded,
    spec: &TransitionSpec,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Transitions {
    let wanted = |list: &[String], name: &str| list.is_empty() || list.iter().any(|x| x == name);
    let mut tasks: Vec<(&LoadedDomain, &Scheme, &Corner)> = Vec::new();
    for d in loaded.domains.iter().filter(|d| wanted(&spec.domains, &d.name)) {
        for s in loaded.schemes.iter().filter(|s| s.applies_to(&d.name)) {
            let asked = !spec.schemes.is_empty() && wanted(&spec.schemes, &s.name);
            if !(asked || spec.schemes.is_empty() && s.collapsing().is_some()) {
                continue;
            }
            tasks.extend(loaded.corners.iter().filter(|c| wanted(&spec.corners, &c.name)).map(|c| (d, s, c)));
        }
    }
    // schemes that leave the block alike share its curve: it is what takes the time
    let mut distinct: IndexMap<String, (&LoadedDomain, &Scheme, &Corner)> = IndexMap::new();
    for &(d, s, c) in &tasks {
        distinct.entry(curve_key(d, s, c)).or_insert((d, s, c));
    }
    let distinct: Vec<(String, (&LoadedDomain, &Scheme, &Corner))> = distinct.into_iter().collect();
    let parts = watched(distinct.len() + tasks.len(), progress, |watch| {
        let curves: IndexMap<&str, Result<Ready, String>> = distinct
            .par_iter()
            .map(|(key, (d, s, c))| {
                let ready = ready(loaded, d, s, c, spec.tolerance, options, watch);
                watch.done.fetch_add(1, Ordering::Relaxed);
                (key.as_str(), ready)
            })
            .collect::<Vec<_>>()
            .into_iter()
            .collect();
        tasks
            .par_iter()
            .map(|(d, s, c)| {
                if watch.stop.load(Ordering::Relaxed) {
                    return None;
                }
                let mut notes = Vec::new();
                let found = match &curves[curve_key(d, s, c).as_str()] {
                    Ok(ready) => one(loaded, d, s, c, spec, ready, &mut notes),
                    Err(e) => Err(e.clone()),
                };
                watch.done.fetch_add(1, Ordering::Relaxed);
                Some((found, notes, watch.stop.load(Ordering::Relaxed)))
            })
            .collect::<Vec<_>>()
    });
    let mut out = Transitions { notes: loaded.notes.clone(), ..Transitions::default() };
    for ((d, s, c), part) in tasks.iter().zip(parts) {
        let Some((found, notes, stopped)) = part else {
            out.stopped = true;
            continue;
        };
        for n in notes {
            n.add_once(&mut out.notes);
        }
        match found {
            Ok(p) => {
                let all = [&p.collapse.notes, &p.wake.notes, &p.break_even.notes, &p.stress.notes];
                for n in all.into_iter().flatten() {
                    n.clone().add_once(&mut out.notes);
                }
                out.points.push(p);
            }
            Err(_) if stopped => out.stopped = true,
            Err(reason) => out.failures.push(Failure {
                domain: d.name.clone(),
                scheme: s.name.clone(),
                corner: c.name.clone(),
                reason,
            }),
        }
    }
    let mut lost = |kind: &str, names: &[String], known: &mut dyn Iterator<Item = &str>| {
        let known: Vec<&str> = known.collect();
        for n in names.iter().filter(|n| !known.contains(&n.as_str())) {
            out.failures.push(Failure {
                domain: String::new(),
                scheme: String::new(),
                corner: String::new(),
                reason: format!("the study has no {kind} `{n}`; it has {}", known.join(", ")),
            });
        }
    };
    lost("domain", &spec.domains, &mut loaded.domains.iter().map(|d| d.name.as_str()));
    lost("scheme", &spec.schemes, &mut loaded.schemes.iter().map(|s| s.name.as_str()));
    lost("corner", &spec.corners, &mut loaded.corners.iter().map(|c| c.name.as_str()));
    out
}

/// What the curve of a block depends on.
fn curve_key(d: &LoadedDomain, s: &Scheme, c: &Corner) -> String {
    let wells = (s.nwell, s.pwell, s.nwell_bias_v, s.pwell_bias_v);
    format!(
        "{}|{}|{:?}|{wells:?}|{:?}",
        d.name,
        c.name,
        s.collapsing(),
        (&s.parked, &s.powered, &s.added, &s.changes)
    )
}

/// The curve of a block, and its power when nothing is switched.
struct Ready {
    curve: BlockCurve,
    ungated_w: f64,
    notes: Vec<Note>,
}

fn ready(
    loaded: &Loaded,
    d: &LoadedDomain,
    scheme: &Scheme,
    c: &Corner,
    tolerance: f64,
    options: &SolveOptions,
    watch: &Watch,
) -> Result<Ready, String> {
    let temp = c.check().map_err(|e| e.to_string())?;
    let process = loaded.processes.get(&c.process).ok_or_else(|| format!("no process `{}`", c.process))?;
    scheme.check().map_err(|e| e.to_string())?;
    let mut shelf = DeviceShelf::default();
    let block = loaded.block_under(d, scheme).map_err(|e| e.to_string())?;
    let bound =
        BoundBlock::new(&block, process, temp, c.vdd_v, &mut shelf, options).map_err(|e| e.to_string())?;
    let powered = bound.draw_totals(&Levels::powered(c.vdd_v), &watch.stop).map_err(|e| e.to_string())?;
    let ungated_w = c.vdd_v * (powered[0] + powered[2]);
    let parts = Parts::new(&bound, &scheme.parked, false, c.vdd_v).map_err(|e| e.to_string())?;
    let curve = scheme.curve(&parts, c.vdd_v, tolerance, &watch.stop).map_err(|e| e.to_string())?;
    Ok(Ready { curve, ungated_w, notes: shelf.notes })
}

fn one(
    loaded: &Loaded,
    d: &LoadedDomain,
    scheme: &Scheme,
    c: &Corner,
    spec: &TransitionSpec,
    ready: &Ready,
    notes: &mut Vec<Note>,
) -> Result<TransitionPoint, String> {
    let temp = c.check().map_err(|e| e.to_string())?;
    let process = loaded.processes.get(&c.process).ok_or_else(|| format!("no process `{}`", c.process))?;
    let rail_f = spec.rail.farads(d.summary.instances).map_err(|e| e.to_string())?;
    let mut shelf = DeviceShelf::default();
    scheme.check().map_err(|e| e.to_string())?;
    let made = match (&scheme.header, &scheme.footer) {
        (Some(h), None) => Some((h, Side::Header)),
        (None, Some(f)) => Some((f, Side::Footer)),
        _ => None,
    };
    let Some((switch_spec, side)) = made else {
        let found = if scheme.header.is_some() { "header and footer" } else { "no switch" };
        return Err(TransitionError::Switches { scheme: scheme.name.clone(), found }.to_string());
    };
    let switch = Switch::new(switch_spec, side, process, temp, c.vdd_v, &mut shelf, &loaded.origin)
        .map_err(|e| e.to_string())?;
    let clamp = if side == Side::Header { &scheme.header_clamp } else { &scheme.footer_clamp };
    let clamp = clamp
        .as_ref()
        .map(|x| Clamp::new(x, side, process, temp, c.vdd_v, &mut shelf, &loaded.origin))
        .transpose()
        .map_err(|e| e.to_string())?;
    notes.append(&mut shelf.notes);
    notes.extend(ready.notes.iter().cloned());
    let Ready { curve, ungated_w, .. } = ready;
    let ungated_w = *ungated_w;
    let words = |e: TransitionError| e.to_string();
    let g =
        Gated::new(scheme, curve, &switch, rail_f).and_then(|g| g.clamped(clamp.as_ref())).map_err(words)?;
    let fall = fall_asleep(&g, &spec.sleep, ungated_w).map_err(words)?;
    let pays = break_even(&fall, &spec.costs).map_err(words)?;
    let duty = match &spec.duty {
        Some(p) => Some(duty(&fall, &spec.costs, p, spec.battery.as_ref()).map_err(words)?),
        None => None,
    };
    let (wake, ladder) = match &spec.ladder {
        None => (wake_up(&g, &spec.wake).map_err(words)?, None),
        Some(want) => {
            let Ladder { segments, shares, fingers, limit_a, wake } =
                design_ladder(&g, &spec.wake, want).map_err(words)?;
            let steps = LadderSteps {
                fingers,
                width_m: segments.iter().map(|s| s.width_m).collect(),
                starts_s: wake.starts_s.clone(),
                shares,
                limit_a,
                peak_a: wake.peak_a,
            };
            (wake, Some(steps))
        }
    };
    let mut moments: Vec<Moment> = wake.moments(&g);
    moments.push(switch.asleep(g.rail_v(fall.rest_span_v)));
    moments.push(switch.awake(g.on_v, g.rail_v(fall.from_span_v)));
    let stress = switch_stress(switch.device.oxide_m(), &moments, &spec.limits).map_err(|e| e.to_string())?;
    let points = curve.points();
    let span_v: Vec<f64> = points.knots.iter().map(|k| k.span_v).collect();
    Ok(TransitionPoint {
        domain: d.name.clone(),
        scheme: scheme.name.clone(),
        corner: c.name.clone(),
        vdd_v: c.vdd_v,
        rail_f,
        curve: RailCurve {
            block_a: span_v.iter().map(|x| g.block(*x).value).collect(),
            switch_a: span_v.iter().map(|x| g.off_a(*x)).collect(),
            span_v,
            accuracy: points.accuracy,
            jumps_v: points.jumps_v.clone(),
            evaluations: points.evaluations,
        },
        collapse: fall.collapse(),
        wake,
        ladder,
        break_even: pays,
        duty,
        stress,
    })
}
