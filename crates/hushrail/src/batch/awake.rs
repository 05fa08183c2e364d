//! Domains of a study awake at every corner, in parallel.

use std::path::Path;
use std::sync::Arc;
use std::sync::atomic::Ordering;

use indexmap::IndexMap;
use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::load::{Library, Loaded, load_study};
use super::run::Failure;
use super::study::{asked, read_study};
use super::watch::{Progress, Watch, watched};
use crate::awake::AwakeError;
use crate::awake::delay::{DelayPenalty, Swing, delay_penalty};
use crate::awake::droop::{CoupledNoise, Droop, Load, in_series, neighbour_step, settle_switches};
use crate::awake::margin::{AtRails, Margins, margins};
use crate::awake::resistance::{OnPoint, on_point};
use crate::awake::size::{LayoutDensity, SizeCorner, Sized, smallest_pair, smallest_switch};
use crate::cell::{BoundCell, Cell, DeviceShelf, Levels};
use crate::circuit::newton::SolveOptions;
use crate::corner::Corner;
use crate::device::process::Process;
use crate::read::deck::Note;
use crate::read::source::{Place, ReadError, Source, nearest};
use crate::standby::stress::caution;
use crate::standby::switch::{Side, Switch};
use crate::standby::{Scheme, SwitchSpec};

/// What is asked of a study's domains while they work.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct AwakeRequest {
    /// Load of each domain by name; domains without one are left out.
    pub loads: IndexMap<String, Load>,
    /// Current step of a neighbour on the same virtual rail, A.
    #[serde(default)]
    pub neighbour_a: Option<f64>,
    /// Droop to size for, V, over one switch; no sizes when left out. Widths go up to that of the scheme times `widest`.
    #[serde(default)]
    pub budget_v: Option<f64>,
    /// Largest width tried, as a multiple of the scheme's.
    #[serde(default = "widest")]
    pub widest: f64,
    /// Layout density of switch cells.
    #[serde(default)]
    pub density: Option<LayoutDensity>,
    /// Cells (`*` for any run of characters) whose noise margins and delay penalties are wanted.
    #[serde(default)]
    pub cells: Vec<String>,
    /// Swing of the delay penalty; by default the drooped rails.
    #[serde(default = "local")]
    pub swing: Swing,
}

fn local() -> Swing {
    Swing::Local
}

fn widest() -> f64 {
    1000.0
}

/// One switch of a domain awake.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct SwitchAwake {
    /// At its droop.
    pub on: OnPoint,
    /// Off current with the rail fully collapsed, A.
    pub off_a: f64,
    /// Chord resistance × off current, V.
    pub merit_v: f64,
    /// Body of the switch past its rail while awake, V, as the scheme ties it.
    pub body_v: f64,
}

/// One cell on the drooped rails.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CellAwake {
    /// The cell.
    pub cell: String,
    /// Smallest low margin at unity gain, V; none where the cell stores or restores nothing.
    pub nml_v: Option<f64>,
    /// Smallest high margin, V.
    pub nmh_v: Option<f64>,
    /// Side of the largest square of its worst pair of curves, V.
    pub square_v: Option<f64>,
    /// The same at full rails, V.
    pub full_square_v: Option<f64>,
    /// Delay penalty of every output and edge.
    pub delays: Vec<DelayPenalty>,
}

/// A domain awake behind a scheme's switches at a corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct AwakePoint {
    /// Domain.
    pub domain: String,
    /// Scheme.
    pub scheme: String,
    /// Corner.
    pub corner: String,
    /// Droop over all its switches.
    pub droop: Droop,
    /// Virtual supply, V.
    pub virtual_supply_v: f64,
    /// Virtual ground, V.
    pub virtual_ground_v: f64,
    /// Header.
    pub header: Option<SwitchAwake>,
    /// Footer.
    pub footer: Option<SwitchAwake>,
    /// What a neighbour's step couples in.
    pub neighbour: Option<CoupledNoise>,
    /// Cells asked for.
    pub cells: Vec<CellAwake>,
}

/// The smallest switch of a domain and scheme over all corners.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct SizePoint {
    /// Domain.
    pub domain: String,
    /// Scheme.
    pub scheme: String,
    /// Which of its switches.
    pub side: Side,
    /// The answer.
    pub size: Sized,
}

/// Everything found.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct AwakeReport {
    /// Always `hushrail-awake`.
    pub format: String,
    /// Version of this format.
    pub version: u32,
    /// Heading of the study.
    pub title: String,
    /// Corners in order.
    pub corners: Vec<Corner>,
    /// Domains, then schemes, then corners.
    pub points: Vec<AwakePoint>,
    /// Smallest switches.
    pub sizes: Vec<SizePoint>,
    /// What could not be computed.
    pub failures: Vec<Failure>,
    /// Remarks, each once.
    #[serde(default)]
    pub notes: Vec<Note>,
    /// Whether the run was stopped before its end.
    pub stopped: bool,
}

pub(super) fn study(path: &str) -> Result<(super::study::Study, Source), ReadError> {
    let source = Source::open(Path::new(path))?;
    let study = read_study(&source)?;
    Ok((study, source))
}

pub(super) fn process<'a>(all: &'a IndexMap<String, Process>, c: &Corner) -> Result<&'a Process, AwakeError> {
    all.get(&c.process).ok_or_else(|| AwakeError::Range {
        what: format!("process of corner `{}`", c.name),
        value: format!("`{}`", c.process),
        wanted: "want a process of the study".into(),
    })
}

pub(super) fn temperature(c: &Corner) -> Result<crate::physics::Kelvin, AwakeError> {
    c.check().map_err(|e| AwakeError::Range {
        what: format!("{} of corner `{}`", e.what, e.corner),
        value: e.value,
        wanted: e.wanted,
    })
}

/// Runs the awake question on a study; what its `[awake]` table asks when no request is given.
///
/// # Errors
/// Files that cannot be read, or a load of a domain that the study does not have; what fails at a point is listed in the report.
pub fn awake_study(
    path: &str,
    request: Option<&AwakeRequest>,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<AwakeReport, ReadError> {
    let (s, source) = study(path)?;
    let request = &asked(request, s.awake.as_ref(), "[awake]", &source)?;
    let loaded = load_study(&s, &source.path, &source.folder)?;
    let unknown = |kind, name: &String, names: Vec<&str>| ReadError::Unknown {
        at: Place::new(&source.path, 1, 1),
        kind,
        name: name.clone(),
        nearest: nearest(name, names),
    };
    for name in request.loads.keys() {
        if !loaded.domains.iter().any(|d| d.name == *name) {
            return Err(unknown("domain", name, loaded.domains.iter().map(|d| &*d.name).collect()));
        }
    }
    let cells = if request.cells.is_empty() {
        Vec::new()
    } else {
        Library::load(&s, &source.folder)?.cells(&request.cells, &mut Vec::new())?
    };
    let switched = |s: &&Scheme| s.header.is_some() || s.footer.is_some();
    let mut plan = Vec::new();
    for d in &loaded.domains {
        let Some(load) = request.loads.get(&d.name) else { continue };
        for s in loaded.schemes.iter().filter(switched).filter(|s| s.applies_to(&d.name)) {
            plan.extend(loaded.corners.iter().map(|c| (&*d.name, load, s, c)));
        }
    }
    let (points, sizes, stopped) = watched(plan.len(), progress, |watch| {
        let points: Vec<Result<(AwakePoint, Vec<Note>), Failure>> = plan
            .par_iter()
            .map(|(d, load, s, c)| {
                let r = point(&loaded, d, load, s, c, request, &cells, options, watch);
                watch.done.fetch_add(1, Ordering::Relaxed);
                r.map_err(|e| Failure {
                    domain: (*d).to_owned(),
                    scheme: s.name.clone(),
                    corner: c.name.clone(),
                    reason: e.to_string(),
                })
            })
            .collect();
        let sizes = request.budget_v.map(|b| sizes(&loaded, request, b)).unwrap_or_default();
        (points, sizes, watch.stop.load(Ordering::Relaxed))
    });
    let mut report = AwakeReport {
        format: "hushrail-awake".into(),
        version: 1,
        title: loaded.title.clone(),
        corners: loaded.corners.clone(),
        points: Vec::new(),
        sizes: Vec::new(),
        failures: Vec::new(),
        notes: loaded.notes.clone(),
        stopped,
    };
    for p in points {
        match p {
            Ok((p, notes)) => {
                for n in notes {
                    n.add_once(&mut report.notes);
                }
                report.points.push(p);
            }
            Err(f) if stopped && f.reason == AwakeError::Stopped.to_string() => {}
            Err(f) => report.failures.push(f),
        }
    }
    for s in sizes {
        match s {
            Ok(s) => report.sizes.push(s),
            Err(f) => report.failures.push(f),
        }
    }
    Ok(report)
}

fn sizes(loaded: &Loaded, request: &AwakeRequest, budget_v: f64) -> Vec<Result<SizePoint, Failure>> {
    let mut out = Vec::new();
    for d in &loaded.domains {
        let Some(load) = request.loads.get(&d.name) else { continue };
        for s in loaded.schemes.iter().filter(|s| s.applies_to(&d.name)) {
            let found = sizes_of(loaded, request, load, s, budget_v);
            match found {
                Ok(list) => out.extend(list.into_iter().map(|(side, size)| {
                    Ok(SizePoint { domain: d.name.clone(), scheme: s.name.clone(), side, size })
                })),
                Err(e) => out.push(Err(Failure {
                    domain: d.name.clone(),
                    scheme: s.name.clone(),
                    corner: String::new(),
                    reason: e.to_string(),
                })),
            }
        }
    }
    out
}

/// The smallest switches of one scheme.
fn sizes_of(
    loaded: &Loaded,
    request: &AwakeRequest,
    load: &Load,
    s: &Scheme,
    budget_v: f64,
) -> Result<Vec<(Side, Sized)>, AwakeError> {
    let largest = |spec: &SwitchSpec| {
        let finger_width_m = Some(spec.finger_width_m.unwrap_or(spec.width_m));
        SwitchSpec { width_m: spec.width_m * request.widest, finger_width_m, ..spec.clone() }
    };
    let corners = loaded
        .corners
        .iter()
        .map(|c| {
            let (process, temp) = (process(&loaded.processes, c)?, temperature(c)?);
            Ok(SizeCorner { name: &c.name, process, temp, vdd_v: c.vdd_v })
        })
        .collect::<Result<Vec<_>, AwakeError>>()?;
    let (density, origin) = (request.density.as_ref(), &loaded.origin);
    let one = |spec, side| {
        smallest_switch(&largest(spec), side, load, budget_v, &corners, density, origin)
            .map(|size| vec![(side, size)])
    };
    match (&s.header, &s.footer) {
        (None, None) => Ok(Vec::new()),
        (Some(h), None) => one(h, Side::Header),
        (None, Some(f)) => one(f, Side::Footer),
        (Some(h), Some(f)) => {
            smallest_pair(&largest(h), &largest(f), load, budget_v, &corners, density, origin)
                .map(|[h, f]| vec![(Side::Header, h), (Side::Footer, f)])
        }
    }
}

#[expect(clippy::too_many_arguments, reason = "one point of the plan: everything that defines it")]
fn point(
    loaded: &Loaded,
    domain: &str,
    load: &Load,
    scheme: &Scheme,
    corner: &Corner,
    request: &AwakeRequest,
    cells: &[Arc<Cell>],
    options: &SolveOptions,
    watch: &Watch,
) -> Result<(AwakePoint, Vec<Note>), AwakeError> {
    let stopped = || watch.stop.load(Ordering::Relaxed);
    if stopped() {
        return Err(AwakeError::Stopped);
    }
    let (process, temp) = (process(&loaded.processes, corner)?, temperature(corner)?);
    let vdd = corner.vdd_v;
    let mut shelf = DeviceShelf::default();
    let mut make = |spec: &Option<SwitchSpec>, side| {
        spec.as_ref()
            .map(|s| Switch::new(s, side, process, temp, vdd, &mut shelf, &loaded.origin))
            .transpose()
    };
    let (header, footer) = (make(&scheme.header, Side::Header)?, make(&scheme.footer, Side::Footer)?);
    let (droop, over_header, over_footer) = settle_switches(load, header.as_ref(), footer.as_ref())?;
    let awake = |s: &Option<Switch>, d: f64| {
        s.as_ref()
            .map(|s| {
                let (on, off_a) = (on_point(s, d)?, s.off_current_a());
                Ok::<_, AwakeError>(SwitchAwake {
                    merit_v: on.chord_ohm * off_a,
                    body_v: (s.awake_body_v - s.rail_v).abs(),
                    on,
                    off_a,
                })
            })
            .transpose()
    };
    let neighbour = match (request.neighbour_a, &header, &footer) {
        (None, ..) | (_, None, None) => None,
        (Some(step), Some(s), None) | (Some(step), None, Some(s)) => {
            Some(neighbour_step(load, step, vdd, &|d| s.awake_current(d).0)?)
        }
        (Some(step), Some(h), Some(f)) => Some(neighbour_step(load, step, vdd, &|d| in_series(h, f, d))?),
    };
    let (supply_v, ground_v) = (vdd - over_header, over_footer);
    let full = Levels::powered(vdd);
    let drooped = scheme.awake_levels(vdd, supply_v, ground_v);
    let mut list = Vec::new();
    for cell in cells {
        if stopped() {
            return Err(AwakeError::Stopped);
        }
        let bound = BoundCell::new(cell, process, temp, 0.0, &mut shelf)?;
        let own = |levels| {
            let at = AtRails { cell: &bound, levels };
            match margins(at, at, options) {
                Ok(m) => Ok(Some(m)),
                // cells that store have a hold margin instead
                Err(AwakeError::Curve { .. }) => Ok(None),
                Err(e) => Err(e),
            }
        };
        let (at_full, at_drooped) = (own(full)?, own(drooped)?);
        let square = |m: &Option<Margins>| m.as_ref().and_then(|m| m.square.as_ref()).map(|s| s.margin_v);
        list.push(CellAwake {
            cell: cell.name.to_string(),
            nml_v: at_drooped.as_ref().and_then(|m| m.nml_v),
            nmh_v: at_drooped.as_ref().and_then(|m| m.nmh_v),
            square_v: square(&at_drooped),
            full_square_v: square(&at_full),
            delays: delay_penalty(&bound, &full, &drooped, request.swing, options)?,
        });
    }
    let mut notes = std::mem::take(&mut shelf.notes);
    for (switch, over_v) in [(&header, over_header), (&footer, over_footer)] {
        let Some(s) = switch else { continue };
        notes.extend(s.device.outside(s.awake_bias(over_v)).map(|o| o.note()));
        if (s.awake_gate_v - s.rail_v).abs() > vdd {
            notes.push(caution());
        }
    }
    let point = AwakePoint {
        domain: domain.to_owned(),
        scheme: scheme.name.clone(),
        corner: corner.name.clone(),
        header: awake(&header, over_header)?,
        footer: awake(&footer, over_footer)?,
        droop,
        virtual_supply_v: supply_v,
        virtual_ground_v: ground_v,
        neighbour,
        cells: list,
    };
    Ok((point, notes))
}
