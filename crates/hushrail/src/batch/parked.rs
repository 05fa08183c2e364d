//! Domains of a study whose states are known: what their instances hold while parked, and the vector that leaks least.

use std::path::Path;
use std::sync::Arc;

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::load::Library;
use super::study::{DomainSpec, Study, read_study};
use super::watch::{Progress, watched};
use crate::block::{Policy, StateWeights, build::fits_pattern};
use crate::cell::bound::supply_power;
use crate::cell::{BoundCell, CellReader, DeviceShelf, Levels};
use crate::circuit::newton::{SolveOptions, Workspace};
use crate::corner::Corner;
use crate::read::counts::InstanceCounts;
use crate::read::deck::Note;
use crate::read::source::{Input, Place, ReadError, Source, nearest};
use crate::read::verilog::connect::{CellPorts, ConnectOptions, Connected, Direction, Port, connect};
use crate::read::verilog::read_verilog_from;
use crate::states::circuit::Source as Entry;
use crate::states::probability::{Ground, Held, carry, resolve};
use crate::states::{CellFunction, Certainty, Circuit, SearchSpec, StateShares, search, shares};

/// Cells of a design with what they compute.
pub struct Functions {
    by_master: IndexMap<String, Arc<CellFunction>>,
    bound: IndexMap<String, BoundCell>,
}

impl CellPorts for Functions {
    fn ports(&self, cell: &str) -> Option<Vec<Port>> {
        let f = self.by_master.get(cell)?;
        let inputs = f.inputs.iter().map(|n| Port::new(n, Direction::Input));
        let outputs = f.outputs.iter().map(|o| Port::new(&o.name, Direction::Output));
        // rails of a netlist with supply pins
        let cell = &self.bound.get(cell)?.cell;
        let known = |n: &str| f.inputs.iter().any(|x| x == n) || f.outputs.iter().any(|o| o.name == n);
        let rails = cell.ports.iter().filter(|p| !known(p)).map(|p| Port::new(p, Direction::Inout));
        Some(inputs.chain(outputs).chain(rails).collect())
    }
}

/// A domain with its connections.
pub struct ParkedDomain {
    /// The whole design.
    pub net: Connected,
    /// The domain's part.
    pub circuit: Circuit,
    /// Instance path of the domain.
    pub path: String,
    functions: Functions,
}

impl ParkedDomain {
    /// Reads a domain with its connections; `counts` are its instances, whose masters need functions.
    ///
    /// # Errors
    /// A netlist or cell that cannot be read, a path that is not there, cells with pins that do not fit.
    pub fn read(
        d: &DomainSpec,
        library: &Library,
        folder: &Path,
        counts: &InstanceCounts,
        notes: &mut Vec<Note>,
    ) -> Result<Self, ReadError> {
        let functions =
            library.with_reader(|reader| functions(counts.counts.keys(), d, library, reader, notes))?;
        let mut inputs: Vec<Input> = d.verilog.iter().map(|f| Input::file(&folder.join(f))).collect();
        let net = connect(&mut inputs, d.top.as_deref(), &functions, &ConnectOptions::default())?;
        let at = || Place::new(&Arc::from(d.verilog.first().map_or("netlist", String::as_str)), 1, 1);
        let circuit =
            Circuit::new(&net, &d.path, &|name| functions.by_master.get(name).cloned()).map_err(|e| {
                ReadError::Syntax {
                    at: at(),
                    found: e.to_string(),
                    wanted: "want pins and paths of the netlist".into(),
                }
            })?;
        notes.extend(circuit.notes.iter().cloned());
        Ok(Self { net, circuit, path: d.path.clone(), functions })
    }

    /// The same of a domain that is not counted yet.
    fn counted(
        d: &DomainSpec,
        library: &Library,
        folder: &Path,
        notes: &mut Vec<Note>,
    ) -> Result<Self, ReadError> {
        let mut inputs: Vec<Input> = d.verilog.iter().map(|f| Input::file(&folder.join(f))).collect();
        let counts = read_verilog_from(&mut inputs)?.counts_under(d.top.as_deref(), &d.path)?;
        Self::read(d, library, folder, &counts, notes)
    }

    /// What is known by net, with names checked.
    fn given(&self, d: &DomainSpec, origin: &Arc<str>) -> Result<Vec<Option<Held>>, ReadError> {
        let parking = d.parked.clone().unwrap_or_default();
        resolve(&self.net, &self.circuit, &self.path, &parking).map_err(|e| ReadError::Syntax {
            at: Place::new(origin, 1, 1),
            found: format!("domain `{}`: {e}", d.name),
            wanted: "want names of the domain".into(),
        })
    }

    /// States of all instances.
    ///
    /// # Errors
    /// Names that are not there, or shares that are none.
    pub fn shares(&self, d: &DomainSpec, origin: &Arc<str>) -> Result<StateShares, ReadError> {
        Ok(shares(&self.net, &carry(&self.circuit, &self.given(d, origin)?)))
    }
}

/// Functions of masters, those of other cells where a policy says so.
fn functions<'a>(
    masters: impl Iterator<Item = &'a String>,
    d: &DomainSpec,
    library: &Library,
    reader: &CellReader<'_>,
    notes: &mut Vec<Note>,
) -> Result<Functions, ReadError> {
    let mut out = Functions { by_master: IndexMap::new(), bound: IndexMap::new() };
    let Some((process, corner)) =
        library.corners.iter().find_map(|c| library.processes.get(&c.process).map(|p| (p, c)))
    else {
        return Ok(out);
    };
    let mut shelf = DeviceShelf::default();
    for master in masters {
        let policy = d.policy.iter().find(|(p, _)| fits_pattern(p, master)).map(|(_, v)| v);
        let source = match policy {
            Some(Policy::Alias(other)) => other,
            Some(_) => continue,
            None => master,
        };
        if !reader.deck.subckts.contains_key(source.to_ascii_lowercase().as_str()) {
            continue;
        }
        let cell = Arc::new(reader.cell(source, notes)?);
        let at = |found: String| ReadError::Syntax {
            at: cell.at.clone(),
            found,
            wanted: "want a cell whose states can be listed, or weights of its states".into(),
        };
        let temp = corner.check().map_err(|e| at(format!("{} is {}", e.what, e.value)))?;
        let bound = BoundCell::new(&cell, process, temp, 0.0, &mut shelf)?;
        let f = CellFunction::of(&bound).map_err(|e| at(e.to_string()))?;
        out.by_master.insert(master.clone(), Arc::new(f));
        out.bound.insert(master.clone(), bound);
    }
    Ok(out)
}

/// Weights of a domain's states as blocks take them.
pub fn weights(shares: &StateShares) -> IndexMap<String, StateWeights> {
    shares.weights.iter().map(|(m, w)| (m.clone(), StateWeights::ByState(w.clone()))).collect()
}

/// States of a domain.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct DomainStates {
    /// Domain.
    pub domain: String,
    /// How sure the states are.
    pub certainty: Certainty,
    /// Cell → state → instances in it, on average.
    pub cells: IndexMap<String, IndexMap<String, f64>>,
    /// Net → share of time at one.
    pub nets: IndexMap<String, f64>,
    /// Nets that rest on an assumption.
    pub assumed: Vec<String>,
    /// Remarks.
    pub notes: Vec<Note>,
}

/// States of a domain's instances as its `parked` table and the connections give them.
///
/// # Errors
/// Files, names, cells whose states cannot be listed.
pub fn states_of_study(study: &Path, domain: Option<&str>) -> Result<DomainStates, ReadError> {
    let source = Source::open(study)?;
    let study: Study = read_study(&source)?;
    let library = Library::load(&study, &source.folder)?;
    let d = pick("domain", &study.domain, |d| &d.name, domain, false, &source.path)?;
    let mut notes = Vec::new();
    let parked = ParkedDomain::counted(d, &library, &source.folder, &mut notes)?;
    let p = carry(&parked.circuit, &parked.given(d, &source.path)?);
    let found = shares(&parked.net, &p);
    let mut out = DomainStates {
        domain: d.name.clone(),
        certainty: found.certainty,
        cells: IndexMap::new(),
        nets: IndexMap::new(),
        assumed: Vec::new(),
        notes,
    };
    for (master, weights) in &found.weights {
        let Some(bound) = parked.functions.bound.get(master) else { continue };
        let states = bound.states().map_err(|e| ReadError::Syntax {
            at: bound.cell.at.clone(),
            found: e.to_string(),
            wanted: "want a cell whose states can be listed".into(),
        })?;
        let own = states.into_iter().zip(weights).filter(|(_, w)| **w > 0.0).map(|(s, w)| (s.label, *w));
        out.cells.insert(master.clone(), own.collect());
    }
    let mut there = vec![false; parked.net.net_count()];
    for g in &parked.circuit.gates {
        let own = parked.circuit.variables(g).iter().chain(parked.circuit.outputs(g));
        for n in own {
            // kept values and outputs that nobody reads are past the end
            if let Some(x) = there.get_mut(*n as usize) {
                *x = true;
            }
        }
    }
    for n in parked.net.nets().filter(|n| !n.is_constant() && there[n.0 as usize]) {
        let path = parked.net.net_path(n);
        if p.ground[n.0 as usize] == Ground::Assumed {
            out.assumed.push(path.clone());
        }
        out.nets.insert(path, p.one[n.0 as usize]);
    }
    Ok(out)
}

/// A search asked of a study.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ParkRequest {
    /// The domain; the only one when left out.
    #[serde(default)]
    pub domain: Option<String>,
    /// The corner at which it should leak least; the first when left out.
    #[serde(default)]
    pub corner: Option<String>,
    /// How long and from where.
    #[serde(default)]
    pub search: SearchSpec,
}

/// What a search found. Powers are those of the cells at full rails, W.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Parked {
    /// Domain.
    pub domain: String,
    /// Corner.
    pub corner: String,
    /// Value of every net that could be chosen.
    pub nets: IndexMap<String, f64>,
    /// Value that every register should keep, where those could be chosen.
    pub registers: IndexMap<String, f64>,
    /// Power with these values, W.
    pub power_w: f64,
    /// Mean over random vectors, W.
    pub random_mean_w: f64,
    /// Least of sixty-four random vectors, W.
    pub random_least_w: f64,
    /// Sum of every instance's least power, W: no vector draws less.
    pub bound_w: f64,
    /// How far above the bound, relative to it.
    pub gap: f64,
    /// Flips tried.
    pub tried: u64,
    /// Certainty with these values.
    pub certainty: Certainty,
    /// Remarks.
    pub notes: Vec<Note>,
    /// Whether it was stopped before its end.
    pub stopped: bool,
}

fn pick<'t, T>(
    kind: &'static str,
    all: &'t [T],
    name: impl Fn(&T) -> &str,
    wanted: Option<&str>,
    first: bool,
    at: &Arc<str>,
) -> Result<&'t T, ReadError> {
    let found = match wanted {
        Some(w) => all.iter().find(|x| name(x) == w),
        None if first || all.len() == 1 => all.first(),
        None => None,
    };
    found.ok_or_else(|| match wanted {
        Some(w) => ReadError::Unknown {
            at: Place::new(at, 1, 1),
            kind,
            name: w.to_owned(),
            nearest: nearest(w, all.iter().map(name)),
        },
        None => ReadError::Syntax {
            at: Place::new(at, 1, 1),
            found: format!("{} of kind {kind}, and none is named", all.len()),
            wanted: "want the name of one".into(),
        },
    })
}

/// Searches the vector that leaks least of a domain whose other values its `parked` table gives.
///
/// # Errors
/// Files, names, cells whose states cannot be solved.
pub fn park_study(
    study: &Path,
    request: &ParkRequest,
    options: &SolveOptions,
    progress: &mut Progress<'_>,
) -> Result<Parked, ReadError> {
    let source = Source::open(study)?;
    let study: Study = read_study(&source)?;
    let library = Library::load(&study, &source.folder)?;
    let d = pick("domain", &study.domain, |d| &d.name, request.domain.as_deref(), false, &source.path)?;
    let c: &Corner =
        pick("corner", &library.corners, |c| &c.name, request.corner.as_deref(), true, &source.path)?;
    let mut notes = Vec::new();
    let parked = ParkedDomain::counted(d, &library, &source.folder, &mut notes)?;
    let leaks = leaks(&parked, &library, c, options, &source.path)?;
    let given = parked.given(d, &source.path)?;
    let (mut fixed, mut free) = (Vec::new(), Vec::new());
    for (entry, n) in &parked.circuit.sources {
        match (given[*n as usize], entry) {
            (Some(Held::Value(v)), _) => fixed.push((*n, v)),
            (None, Entry::Net(_)) => free.push((*entry, *n)),
            (None, Entry::Kept(_)) if request.search.registers => free.push((*entry, *n)),
            _ => {}
        }
    }
    let nets: Vec<u32> = free.iter().map(|x| x.1).collect();
    let total = request.search.flips as usize;
    let found = watched(total, progress, |w| {
        search(&parked.circuit, &leaks, &fixed, &nets, &request.search, &w.done, &w.stop)
    });
    let mut all = given;
    for (n, v) in nets.iter().zip(&found.values) {
        all[*n as usize] = Some(Held::Value(*v));
    }
    let certainty = shares(&parked.net, &carry(&parked.circuit, &all)).certainty;
    let mut out = Parked {
        domain: d.name.clone(),
        corner: c.name.clone(),
        nets: IndexMap::new(),
        registers: IndexMap::new(),
        power_w: found.leak,
        random_mean_w: found.random_mean,
        random_least_w: found.random_least,
        bound_w: found.bound,
        gap: found.gap(),
        tried: found.tried,
        certainty,
        notes,
        stopped: found.stopped,
    };
    for ((entry, _), v) in free.iter().zip(&found.values) {
        let one = f64::from(u8::from(*v));
        match entry {
            Entry::Net(n) => out.nets.insert(parked.net.net_path(*n), one),
            Entry::Kept(i) => out.registers.insert(parked.net.instance_path(*i), one),
        };
    }
    Ok(out)
}

/// Power of each code of each function at full rails, W.
fn leaks(
    parked: &ParkedDomain,
    library: &Library,
    c: &Corner,
    options: &SolveOptions,
    origin: &Arc<str>,
) -> Result<Vec<Vec<f64>>, ReadError> {
    let wrong = |found: String| ReadError::Syntax {
        at: Place::new(origin, 1, 1),
        found,
        wanted: "want cells that can be solved at the corner".into(),
    };
    let temp = c.check().map_err(|e| wrong(format!("{} of corner `{}` is {}", e.what, e.corner, e.value)))?;
    let process =
        library.processes.get(&c.process).ok_or_else(|| wrong(format!("no process `{}`", c.process)))?;
    let levels = Levels::powered(c.vdd_v);
    let mut shelf = DeviceShelf::default();
    let mut out = Vec::new();
    for f in &parked.circuit.functions {
        let known = parked.functions.by_master.iter().find(|(_, x)| Arc::ptr_eq(x, f));
        let cell = known.and_then(|(m, _)| parked.functions.bound.get(m));
        let Some(cell) = cell else { return Err(wrong(format!("cell `{}` is lost", f.name))) };
        let bound = BoundCell::new(&cell.cell, process, temp, 0.0, &mut shelf)?;
        let mut work = Workspace::default();
        let mut powers = Vec::with_capacity(f.state_count);
        for s in bound.states().map_err(|e| wrong(e.to_string()))? {
            let found = bound.solve(&s, &levels, options, &mut work).map_err(|e| wrong(e.to_string()))?;
            powers.push(supply_power(&bound, &found, &levels));
        }
        out.push(
            f.states
                .iter()
                .map(|fits| fits.iter().map(|s| powers[*s as usize]).sum::<f64>() / fits.len().max(1) as f64)
                .collect(),
        );
    }
    Ok(out)
}
