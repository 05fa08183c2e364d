//! Optima and choices of a study: a domain under a scheme with free knobs, at every corner.

use std::path::Path;

use std::sync::atomic::{AtomicBool, Ordering};

use indexmap::IndexMap;
use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::load::{Loaded, LoadedDomain, load_study};
use super::study::{Study, asked, read_study};
use super::watch::{Progress, Watch, watched};
use crate::awake::AwakeError;
use crate::awake::keep::{Need, Retention, retention_along};
use crate::block::BoundBlock;
use crate::cell::{BoundCell, DeviceShelf, Role};
use crate::circuit::newton::SolveOptions;
use crate::corner::Corner;
use crate::device::process::Process;
use crate::optimum::{
    ChooseSpec, Chosen, Compromise, Goal, KnobRange, OptimumError, Site, choose, compromise,
};
use crate::physics::Kelvin;
use crate::read::deck::Note;
use crate::read::source::{ReadError, Source, nearest};
use crate::standby::Scheme;
use crate::transition::RailCapacitance;

/// Where an optimum is sought.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Where {
    /// The domain; the only one when left out.
    #[serde(default)]
    pub domain: Option<String>,
    /// The scheme; the only one when left out.
    #[serde(default)]
    pub scheme: Option<String>,
    /// Corners; all when empty.
    #[serde(default)]
    pub corners: Vec<String>,
}

/// An optimum asked of a study.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct OptimumSpec {
    /// Where.
    #[serde(default)]
    pub at: Where,
    /// The knob and its range.
    pub range: KnobRange,
    /// What the compromise is judged by.
    #[serde(default)]
    pub goal: Goal,
}

/// A choice asked of a study.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ChoiceSpec {
    /// Where.
    #[serde(default)]
    pub at: Where,
    /// The virtual rail's capacitance; wake-up is not computed without it.
    #[serde(default)]
    pub rail: Option<RailCapacitance>,
    /// What the cells of the domain that store must keep, for the limit `retention_margin_v`.
    #[serde(default)]
    pub keep: KeepSpec,
    /// The choice; its `rail_f` comes from `rail`, its `retention_v` from the cells of the domain when it is left out.
    pub among: ChooseSpec,
}

/// What cells must keep asleep.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct KeepSpec {
    /// The margin of the cell itself, and how many may fail.
    #[serde(default)]
    pub need: Need,
    /// Inputs that are known asleep, such as a clock that stands low; all vectors are tried for the others.
    #[serde(default)]
    pub inputs: IndexMap<String, bool>,
}

/// The retention voltage of a domain at a corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Kept {
    /// The corner.
    pub corner: String,
    /// The cell that needs most.
    pub cell: String,
    /// The lowest span that keeps every cell, V.
    pub retention_v: f64,
}

/// The optimum of a knob over the corners of a study.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Optimum {
    /// Domain.
    pub domain: String,
    /// Scheme.
    pub scheme: String,
    /// Corners in order.
    pub corners: Vec<Corner>,
    /// One setting for all, with each corner's own.
    pub compromise: Compromise,
    /// Remarks, each once.
    pub notes: Vec<Note>,
}

/// A choice over the corners of a study.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Choice {
    /// Domain.
    pub domain: String,
    /// Scheme.
    pub scheme: String,
    /// Corners in order.
    pub corners: Vec<Corner>,
    /// Retention voltages by corner, where they were computed.
    #[serde(default)]
    pub kept: Vec<Kept>,
    /// What was found.
    pub chosen: Chosen,
    /// Remarks, each once.
    pub notes: Vec<Note>,
}

/// A study's question without answer.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum OptimumFailure {
    /// A file.
    #[error(transparent)]
    Read(#[from] ReadError),
    /// The search.
    #[error(transparent)]
    Optimum(#[from] OptimumError),
    /// A part of the request that the study does not have.
    #[error("{0}")]
    Request(String),
}

/// Blocks of a domain under a scheme at corners, bound: what sites are made of.
#[derive(Debug)]
pub struct BoundCorners<'a> {
    loaded: &'a Loaded,
    /// Domain.
    pub domain: &'a LoadedDomain,
    /// Scheme.
    pub scheme: &'a Scheme,
    /// Corners.
    pub corners: Vec<&'a Corner>,
    blocks: Vec<(&'a Process, Kelvin, BoundBlock)>,
}

impl<'a> BoundCorners<'a> {
    /// Finds and binds what a request names.
    ///
    /// # Errors
    /// A name the study does not have, or a block that cannot be made at a corner.
    pub fn new(loaded: &'a Loaded, at: &Where, options: &SolveOptions) -> Result<Self, OptimumFailure> {
        fn pick<'t, T>(
            kind: &str,
            all: &'t [T],
            name: &dyn Fn(&T) -> &str,
            wanted: Option<&str>,
        ) -> Result<&'t T, OptimumFailure> {
            let found = match (wanted, all) {
                (None, [one]) => Some(one),
                (None, _) => None,
                (Some(w), _) => all.iter().find(|x| name(x) == w),
            };
            found.ok_or_else(|| {
                let names: Vec<&str> = all.iter().map(name).collect();
                let asked = wanted.map_or_else(
                    || format!("no {kind} is named"),
                    |w| format!("the study has no {kind} `{w}`"),
                );
                OptimumFailure::Request(format!("{asked}; it has {}", names.join(", ")))
            })
        }
        let domain = pick("domain", &loaded.domains, &|d| &d.name, at.domain.as_deref())?;
        let scheme = pick("scheme", &loaded.schemes, &|s| &s.name, at.scheme.as_deref())?;
        let corners = if at.corners.is_empty() {
            loaded.corners.iter().collect()
        } else {
            let one = |c: &String| pick("corner", &loaded.corners, &|c: &Corner| &c.name, Some(c));
            at.corners.iter().map(one).collect::<Result<Vec<_>, _>>()?
        };
        let block = loaded.block_under(domain, scheme).map_err(OptimumError::Scheme)?;
        let blocks = corners
            .par_iter()
            .map(|c| {
                let wrong = |e: String| OptimumFailure::Request(format!("corner `{}`: {e}", c.name));
                let temp = c.check().map_err(|e| wrong(e.to_string()))?;
                let process = loaded
                    .processes
                    .get(&c.process)
                    .ok_or_else(|| wrong(format!("no process `{}`", c.process)))?;
                let mut shelf = DeviceShelf::default();
                let bound = BoundBlock::new(&block, process, temp, c.vdd_v, &mut shelf, options)
                    .map_err(|e| wrong(e.to_string()))?;
                Ok((process, temp, bound))
            })
            .collect::<Vec<Result<_, OptimumFailure>>>()
            .into_iter()
            .collect::<Result<_, _>>()?;
        Ok(Self { loaded, domain, scheme, corners, blocks })
    }

    /// The sites.
    pub fn sites(&self) -> Vec<Site<'_>> {
        self.corners
            .iter()
            .zip(&self.blocks)
            .map(|(c, (process, temp, block))| Site {
                corner: &c.name,
                process,
                temp: *temp,
                vdd_v: c.vdd_v,
                block,
                origin: &self.loaded.origin,
            })
            .collect()
    }

    /// The lowest span at each corner that keeps what the cells of the domain store, with the rails and wells of the scheme; cells
    /// on the real rails are left out. In the order of the corners.
    ///
    /// # Errors
    /// Two virtual rails, no cell that stores, an input that no such cell has, or a cell that does not hold at full rails.
    pub fn kept(
        &self,
        keep: &KeepSpec,
        options: &SolveOptions,
        stop: &AtomicBool,
    ) -> Result<Vec<Kept>, OptimumFailure> {
        let scheme = self.scheme;
        let request = |words: String| Err(OptimumFailure::Request(words));
        let Some(rail) = scheme.collapsing() else {
            return request(format!(
                "retention: scheme `{}` has not exactly one virtual rail; give `retention_v` for every corner",
                scheme.name
            ));
        };
        let block = self.loaded.block_under(self.domain, scheme).map_err(OptimumError::Scheme)?;
        let cells: Vec<_> = block.cells.iter().filter(|c| !c.powered).map(|c| &c.cell).collect();
        let inputs = |c: &crate::cell::Cell| -> Vec<String> {
            c.ports_of(Role::Input).map(|i| c.ports[i].to_string()).collect()
        };
        let known: Vec<String> = cells.iter().flat_map(|c| inputs(c)).collect();
        for name in keep.inputs.keys() {
            if !known.iter().any(|k| k.eq_ignore_ascii_case(name)) {
                let near = nearest(name, known.iter().map(String::as_str));
                let hint = near.map_or_else(String::new, |n| format!("; the nearest is `{n}`"));
                return request(format!("retention: no cell of the domain has an input `{name}`{hint}"));
            }
        }
        let plan: Vec<(usize, usize)> =
            (0..self.corners.len()).flat_map(|k| (0..cells.len()).map(move |c| (k, c))).collect();
        let found: Vec<Result<Retention, AwakeError>> = plan
            .par_iter()
            .map(|(k, c)| {
                let ((process, temp, _), cell) = (&self.blocks[*k], cells[*c]);
                let vdd_v = self.corners[*k].vdd_v;
                let names = inputs(cell);
                let given: Vec<(String, bool)> = keep
                    .inputs
                    .iter()
                    .filter(|(n, _)| names.iter().any(|m| m.eq_ignore_ascii_case(n)))
                    .map(|(n, b)| (n.clone(), *b))
                    .collect();
                let bound = BoundCell::new(cell, process, *temp, 0.0, &mut DeviceShelf::default())?;
                let levels = |span_v: f64| {
                    let (supply_v, ground_v) = rail.rails(vdd_v, span_v);
                    scheme.levels(vdd_v, supply_v, ground_v)
                };
                let stopped = || stop.load(Ordering::Relaxed);
                let corner = &self.corners[*k].name;
                retention_along(&bound, corner, vdd_v, &levels, &given, &keep.need, options, &stopped)
            })
            .collect();
        let mut kept: Vec<Option<Kept>> = vec![None; self.corners.len()];
        for ((k, _), r) in plan.into_iter().zip(found) {
            let corner = &self.corners[k].name;
            match r {
                Ok(r) if kept[k].as_ref().is_none_or(|x| r.retention_v > x.retention_v) => {
                    let (cell, retention_v) = (r.cell, r.retention_v);
                    kept[k] = Some(Kept { corner: corner.clone(), cell, retention_v });
                }
                Ok(_) | Err(AwakeError::StoresNothing { .. }) => {}
                Err(AwakeError::Stopped) => return Err(OptimumError::Stopped.into()),
                Err(e) => {
                    return Err(OptimumError::Awake { corner: corner.clone(), reason: Box::new(e) }.into());
                }
            }
        }
        kept.into_iter().collect::<Option<Vec<_>>>().map_or_else(
            || {
                request(format!(
                    "retention: no cell of domain `{}` that falls asleep stores anything; leave `retention_margin_v` out",
                    self.domain.name
                ))
            },
            Ok,
        )
    }

    fn owned(&self) -> Vec<Corner> {
        self.corners.iter().map(|c| (*c).clone()).collect()
    }
}

/// Reads a study.
fn load(path: &Path) -> Result<Loaded, ReadError> {
    load_with(path).map(|(loaded, ..)| loaded)
}

fn load_with(path: &Path) -> Result<(Loaded, Study, Source), ReadError> {
    let source = Source::open(path)?;
    let study = read_study(&source)?;
    Ok((load_study(&study, &source.path, &source.folder)?, study, source))
}

/// The optimum of a knob of a study's scheme, at every corner and over all of them.
///
/// # Errors
/// A file, a name, or what [`compromise()`] cannot do.
pub fn optimum_of_study(
    study: &Path,
    spec: &OptimumSpec,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Optimum, OptimumFailure> {
    optimum(&load(study)?, spec, options, progress)
}

/// Every optimum that the `[[optimum]]` tables of a study ask for.
///
/// # Errors
/// No such table, or as [`optimum_of_study`].
pub fn optima_of_study(
    study: &Path,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Vec<Optimum>, OptimumFailure> {
    let (loaded, study, source) = load_with(study)?;
    let some = (!study.optimum.is_empty()).then_some(&study.optimum);
    let list = asked(None, some, "[[optimum]]", &source)?;
    list.iter().map(|spec| optimum(&loaded, spec, options, progress)).collect()
}

/// Every choice that the `[[choice]]` tables of a study ask for.
///
/// # Errors
/// No such table, or as [`choice_of_study`].
pub fn choices_of_study(
    study: &Path,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Vec<Choice>, OptimumFailure> {
    let (loaded, study, source) = load_with(study)?;
    let some = (!study.choice.is_empty()).then_some(&study.choice);
    let list = asked(None, some, "[[choice]]", &source)?;
    list.iter().map(|spec| choice(&loaded, spec, options, progress)).collect()
}

/// The same of a loaded study; the same bits for any number of threads.
///
/// # Errors
/// As [`optimum_of_study`].
pub fn optimum(
    loaded: &Loaded,
    spec: &OptimumSpec,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Optimum, OptimumFailure> {
    let bound = BoundCorners::new(loaded, &spec.at, options)?;
    let sites = bound.sites();
    let found = watched(sites.len(), progress, |w: &Watch| {
        compromise(&sites, bound.scheme, &spec.range, &spec.goal, &w.done, &w.stop)
    })?;
    let mut notes = loaded.notes.clone();
    for n in found.notes.iter().chain(found.optima.iter().flat_map(|o| &o.notes)) {
        n.clone().add_once(&mut notes);
    }
    Ok(Optimum {
        domain: bound.domain.name.clone(),
        scheme: bound.scheme.name.clone(),
        corners: bound.owned(),
        compromise: found,
        notes,
    })
}

/// A choice among the settings of a study's scheme.
///
/// # Errors
/// A file, a name, or what [`choose()`] cannot do.
pub fn choice_of_study(
    study: &Path,
    spec: &ChoiceSpec,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Choice, OptimumFailure> {
    choice(&load(study)?, spec, options, progress)
}

/// The same of a loaded study; the same bits for any number of threads.
///
/// # Errors
/// As [`choice_of_study`].
pub fn choice(
    loaded: &Loaded,
    spec: &ChoiceSpec,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Choice, OptimumFailure> {
    let bound = BoundCorners::new(loaded, &spec.at, options)?;
    let sites = bound.sites();
    let mut asked = spec.among.clone();
    if let Some(rail) = &spec.rail {
        let farads = rail.farads(bound.domain.summary.instances);
        asked.rail_f = Some(farads.map_err(|e| OptimumFailure::Request(e.to_string()))?);
    }
    let computes = asked.limits.retention_margin_v.is_some() && asked.retention_v.is_none();
    if let Some(k) = asked.knobs.iter().find(|k| computes && k.knob.moves_block()) {
        return Err(OptimumFailure::Request(format!(
            "retention: knob `{}` moves the wells of the cells that store; give `retention_v` for every corner, good for all of its settings",
            k.knob.name()
        )));
    }
    let total = sites.len() * asked.size();
    let (chosen, kept) = watched(total, progress, |w: &Watch| {
        let kept = if computes { bound.kept(&spec.keep, options, &w.stop)? } else { Vec::new() };
        if computes {
            asked.retention_v = Some(kept.iter().map(|k| (k.corner.clone(), k.retention_v)).collect());
        }
        let chosen = choose(&sites, bound.scheme, &asked, &w.done, &w.stop)?;
        Ok::<_, OptimumFailure>((chosen, kept))
    })?;
    let mut notes = loaded.notes.clone();
    for n in &chosen.notes {
        n.clone().add_once(&mut notes);
    }
    Ok(Choice {
        domain: bound.domain.name.clone(),
        scheme: bound.scheme.name.clone(),
        corners: bound.owned(),
        kept,
        chosen,
        notes,
    })
}
