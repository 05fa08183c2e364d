//! What a study names, read: cards, cells, domains.

use std::borrow::Cow;
use std::path::Path;
use std::sync::Arc;

use indexmap::IndexMap;
use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::intent::Designs;
use super::parked::{self, ParkedDomain};
use super::study::{LibertySpec, Limits, ProcessSpec, Study};
use crate::block::build::fits_pattern;
use crate::block::{Block, StateWeights, TableSet, Uncovered, build_block};
use crate::cell::{Cell, CellReader, RailNames};
use crate::corner::Corner;
use crate::device::process::Process;
use crate::device::spec::DeviceSpec;
use crate::read::Input;
use crate::read::counts::{InstanceCounts, read_counts_csv};
use crate::read::deck::{Deck, Note};
use crate::read::intent::MappedDomain;
use crate::read::liberty::{LibertyOptions, read_liberty};
use crate::read::source::{Place, ReadError, Source, nearest};
use crate::read::spice::{DeckOptions, read_deck};
use crate::read::verilog::read_verilog_from;
use crate::standby::Scheme;
use crate::standby::scheme::SchemeError;
use crate::states::Certainty;

/// A domain with its block.
#[derive(Debug, Clone)]
pub struct LoadedDomain {
    /// Name.
    pub name: String,
    /// Its cells.
    pub block: Block,
    /// What the counts say.
    pub summary: DomainSummary,
    /// What the power intent says, for a domain taken from it.
    pub intent: Option<MappedDomain>,
}

/// Numbers of a domain for reports.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct DomainSummary {
    /// Name.
    pub name: String,
    /// All instances.
    pub instances: u64,
    /// Instances computed from transistors.
    pub computed: u64,
    /// Masters without transistors, and what was done.
    pub uncovered: Vec<Uncovered>,
    /// Instances in known, probable and assumed states, where the domain has a `parked` table.
    #[serde(default)]
    pub certainty: Option<Certainty>,
}

/// Everything a run needs, in memory.
#[derive(Debug)]
pub struct Loaded {
    /// Heading.
    pub title: String,
    /// Processes by name.
    pub processes: IndexMap<String, Process>,
    /// Domains.
    pub domains: Vec<LoadedDomain>,
    /// Corners.
    pub corners: Vec<Corner>,
    /// Schemes.
    pub schemes: Vec<Scheme>,
    /// Cells that schemes add, by the name they use.
    pub added: IndexMap<String, Arc<Cell>>,
    /// Limits.
    pub limits: Limits,
    /// Where messages about schemes point.
    pub origin: Arc<str>,
    /// Remarks of the readers.
    pub notes: Vec<Note>,
}

impl Loaded {
    /// The block of a domain under a scheme: its own, or one with cells changed, left powered or added.
    ///
    /// # Errors
    /// Changes that cannot be made.
    pub fn block_under<'a>(
        &self,
        d: &'a LoadedDomain,
        scheme: &Scheme,
    ) -> Result<Cow<'a, Block>, SchemeError> {
        if !scheme.changes_block() {
            return Ok(Cow::Borrowed(&d.block));
        }
        let known = |(name, n): (&String, &u64)| self.added.get(name).map(|cell| (Arc::clone(cell), *n));
        let added: Vec<_> = scheme.added.iter().filter_map(known).collect();
        let changed = d.block.changed(&scheme.changes, &scheme.powered, &added);
        changed.map(Cow::Owned).map_err(|e| SchemeError {
            scheme: scheme.name.clone(),
            what: e.what,
            value: e.value,
            wanted: e.wanted,
        })
    }
}

/// Reads the cards of a process.
///
/// # Errors
/// See [`Process::read`].
pub fn load_process(
    name: &str,
    spec: &ProcessSpec,
    aliases: &IndexMap<String, String>,
    devices: &IndexMap<String, DeviceSpec>,
    folder: &Path,
) -> Result<Process, ReadError> {
    let sources = spec.files.iter().map(|f| Source::open(&folder.join(f))).collect::<Result<Vec<_>, _>>()?;
    let mut options = DeckOptions { scale_m: spec.scale_m, ..DeckOptions::default() };
    options.section.clone_from(&spec.section);
    options.skip_includes.clone_from(&spec.skip_includes);
    let own: Vec<_> =
        devices.iter().filter(|(n, _)| !spec.device.contains_key(*n)).chain(&spec.device).collect();
    let mut p =
        if sources.is_empty() { Process::empty(name) } else { Process::read(name, &sources, &options)? };
    for (device, d) in own {
        let at = Place::new(&Arc::from(format!("device `{device}` of process `{name}`")), 1, 1);
        p = p.device(device, d.load(folder, &at)?);
    }
    for (a, b) in aliases {
        p = p.alias(a, b);
    }
    Ok(p)
}

/// Reads the Liberty libraries of a study, side by side.
///
/// # Errors
/// The first file that cannot be read or understood.
pub fn load_tables(
    specs: &[LibertySpec],
    folder: &Path,
    notes: &mut Vec<Note>,
) -> Result<TableSet, ReadError> {
    let files: Vec<(&LibertySpec, &String)> =
        specs.iter().flat_map(|s| s.files.iter().map(move |f| (s, f))).collect();
    let read: Vec<_> = files
        .par_iter()
        .map(|(s, f)| {
            let options =
                LibertyOptions { leakage_unit_w: s.leakage_unit_w, voltage_v: s.vdd_v, temp_c: s.temp_c };
            Source::open(&folder.join(f)).and_then(|source| read_liberty(&source, &options))
        })
        .collect();
    let mut tables = TableSet::default();
    for ((spec, _), library) in files.iter().zip(read) {
        let mut library = library?;
        for n in std::mem::take(&mut library.notes) {
            n.add_once(notes);
        }
        tables.libraries.push((spec.process.clone(), Arc::new(library)));
    }
    Ok(tables)
}

/// Cards, cell netlists and corners: what is needed before any domain.
#[derive(Debug)]
pub struct Library {
    /// Processes by name.
    pub processes: IndexMap<String, Process>,
    /// The cell netlists.
    pub deck: Deck,
    /// Names of rails and wells.
    pub rails: RailNames,
    /// Corners.
    pub corners: Vec<Corner>,
    /// Remarks of the readers.
    pub notes: Vec<Note>,
}

impl Library {
    /// Reads the cards and netlists of a study.
    ///
    /// # Errors
    /// The first file that cannot be read or understood.
    pub fn load(study: &Study, folder: &Path) -> Result<Self, ReadError> {
        let mut notes = Vec::new();
        let mut processes = IndexMap::new();
        for (name, spec) in &study.process {
            let p = load_process(name, spec, &study.models, &study.device, folder)?;
            notes.extend(p.deck.notes.iter().cloned());
            processes.insert(name.clone(), p);
        }
        let sources = study
            .cells
            .netlists
            .iter()
            .map(|f| Source::open(&folder.join(f)))
            .collect::<Result<Vec<_>, _>>()?;
        let options = DeckOptions { scale_m: study.cells.scale_m, ..DeckOptions::default() };
        let deck = read_deck(&sources, &options)?;
        notes.extend(deck.notes.iter().cloned());
        Ok(Self { processes, deck, rails: study.cells.rails.clone(), corners: study.corners(), notes })
    }

    /// Calls `f` with a reader of the cells.
    pub fn with_reader<T>(&self, f: impl FnOnce(&CellReader<'_>) -> T) -> T {
        let first = self.processes.values().next();
        let is_device = |name: &str| first.is_some_and(|p| p.defines(name));
        f(&CellReader { deck: &self.deck, rails: &self.rails, is_device: &is_device })
    }

    /// Cells whose names fit one of the patterns (`*` for any run); all cells without patterns.
    ///
    /// # Errors
    /// A pattern that fits no cell, or a cell that cannot be read.
    pub fn cells(&self, patterns: &[String], notes: &mut Vec<Note>) -> Result<Vec<Arc<Cell>>, ReadError> {
        for p in patterns {
            if !self.deck.subckts.values().any(|s| fits_pattern(p, &s.name)) {
                let at = Place::new(self.deck.files.first().unwrap_or(&Arc::from("netlist")), 1, 1);
                let near = nearest(p, self.deck.subckts.values().map(|s| &*s.name));
                return Err(ReadError::Unknown { at, kind: "cell", name: p.clone(), nearest: near });
            }
        }
        self.with_reader(|reader| {
            self.deck
                .subckts
                .values()
                .filter(|s| patterns.is_empty() || patterns.iter().any(|p| fits_pattern(p, &s.name)))
                .map(|s| reader.cell(&s.name, notes).map(Arc::new))
                .collect()
        })
    }
}

/// Reads everything a study names; `folder` is where its relative paths start.
///
/// # Errors
/// A study without domain, scheme or corner, the first file that cannot be read or understood, or a domain that cannot be
/// built.
pub fn load_study(study: &Study, origin: &str, folder: &Path) -> Result<Loaded, ReadError> {
    for (empty, what) in [
        (study.domain.is_empty(), "a [[domain]] table"),
        (study.scheme.is_empty(), "a [[scheme]] table"),
        (study.corners().is_empty(), "[[corner]] tables or a [grid] with three lists that are not empty"),
    ] {
        if empty {
            return Err(ReadError::Syntax {
                at: Place::new(&Arc::from(origin), 1, 1),
                found: format!("the study lacks {what}"),
                wanted: "want at least one".into(),
            });
        }
    }
    let library = Library::load(study, folder)?;
    let mut notes = library.notes.clone();
    let tables = load_tables(&study.liberty, folder, &mut notes)?;
    let mut netlists: IndexMap<&[String], crate::read::verilog::Netlist> = IndexMap::new();
    let mut designs = Designs::default();
    let mut domains = Vec::new();
    for d in &study.domain {
        let mapped = designs.domain(study, d, origin, folder, &mut notes)?;
        let counts: InstanceCounts = if let Some(mapped) = &mapped {
            mapped.counts.clone()
        } else if let Some(f) = &d.counts {
            read_counts_csv(&Source::open(&folder.join(f))?)?
        } else {
            if !netlists.contains_key(d.verilog.as_slice()) {
                let mut inputs: Vec<Input> = d.verilog.iter().map(|f| Input::file(&folder.join(f))).collect();
                netlists.insert(&d.verilog, read_verilog_from(&mut inputs)?);
            }
            netlists[d.verilog.as_slice()].counts_under(d.top.as_deref(), &d.path)?
        };
        let (mut weights, mut certainty) = (IndexMap::new(), None);
        if d.parked.is_some() {
            let parked = ParkedDomain::read(d, &library, folder, &counts, &mut notes)?;
            let shares = parked.shares(d, &Arc::from(origin))?;
            weights = parked::weights(&shares);
            certainty = Some(shares.certainty);
        }
        weights.extend(d.weights());
        let mut block =
            library.with_reader(|reader| build_block(&counts, reader, &d.policy, &weights, &mut notes))?;
        let weight = |m: &str| weights.get(m).cloned().unwrap_or_else(StateWeights::default);
        block.take_tables(&tables, weight, &mut notes).map_err(|e| ReadError::Syntax {
            at: Place::new(&Arc::from(origin), 1, 1),
            found: format!("domain `{}`: {e}", d.name),
            wanted: "want a [[liberty]] table with libraries that tell it, or another policy".into(),
        })?;
        let summary = DomainSummary {
            name: d.name.clone(),
            instances: block.instances(),
            computed: block.covered(),
            uncovered: block.uncovered.clone(),
            certainty,
        };
        domains.push(LoadedDomain { name: d.name.clone(), block, summary, intent: mapped });
    }
    let mut added = IndexMap::new();
    for name in study.scheme.iter().flat_map(|s| s.added.keys()) {
        if !added.contains_key(name) {
            let cell = library.with_reader(|reader| reader.cell(name, &mut notes))?;
            added.insert(name.clone(), Arc::new(cell));
        }
    }
    let mut distinct: Vec<Note> = Vec::new();
    for n in notes {
        n.add_once(&mut distinct);
    }
    Ok(Loaded {
        title: study.title.clone(),
        processes: library.processes,
        domains,
        corners: library.corners,
        schemes: study.scheme.clone(),
        added,
        limits: study.limits.clone(),
        origin: origin.into(),
        notes: distinct,
    })
}
