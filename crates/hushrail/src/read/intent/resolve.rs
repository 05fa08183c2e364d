//! Intent mapped onto a netlist: who belongs to which domain, and what feeds it.

use indexmap::IndexMap;
use rustc_hash::FxHashMap;
use serde::Serialize;

use super::super::counts::InstanceCounts;
use super::super::deck::Note;
use super::super::source::{Place, ReadError, nearest};
use super::super::verilog::connect::{Connected, InstanceId, NetId};
use super::locate::{instance_error, is_module_instance, leaves, net_at, net_error};
use super::model::{Domain, Intent, Isolation, Named, PowerSwitch, Retention, place};

/// A net that intent names, found in the netlist.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Control {
    /// The port of the switch, or what the net does.
    pub role: String,
    /// The whole path as the intent names it.
    pub path: String,
    /// The net; none for one that only the intent makes.
    #[serde(skip)]
    pub net: Option<NetId>,
}

/// A switch that feeds a domain.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct MappedSwitch {
    /// Whole name.
    pub name: String,
    /// Nets it takes from.
    pub inputs: Vec<String>,
    /// Its control nets.
    pub controls: Vec<Control>,
    /// Its acknowledge nets.
    pub acks: Vec<Control>,
    /// Where it is made.
    #[serde(serialize_with = "place")]
    pub at: Place,
}

/// A domain and its part of the netlist.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct MappedDomain {
    /// Whole name.
    pub name: String,
    /// Its leaf cells by kind.
    pub counts: InstanceCounts,
    /// Its leaf cells.
    #[serde(skip)]
    pub instances: Vec<InstanceId>,
    /// Primary power, as the intent names it.
    pub power: Option<String>,
    /// Primary ground.
    pub ground: Option<String>,
    /// Switches whose output is the primary power.
    pub headers: Vec<MappedSwitch>,
    /// Switches whose output is the primary ground.
    pub footers: Vec<MappedSwitch>,
    /// Isolation at its boundary.
    pub isolations: Vec<Isolation>,
    /// Nets that switch the isolation on, in that order.
    pub isolation_nets: Vec<Control>,
    /// Retention in it.
    pub retentions: Vec<Retention>,
    /// Nets that save and restore, in that order.
    pub retention_nets: Vec<Control>,
}

impl MappedDomain {
    /// Whether a switch feeds it.
    pub fn is_switched(&self) -> bool {
        !(self.headers.is_empty() && self.footers.is_empty())
    }
}

/// Intent on a netlist.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct DomainMap {
    /// Domains in the order they are made.
    pub domains: Vec<MappedDomain>,
    /// Leaf cells of no domain.
    pub outside: InstanceCounts,
    /// Remarks.
    pub notes: Vec<Note>,
    #[serde(skip)]
    of: Vec<Option<u32>>,
}

impl DomainMap {
    /// The domain of a whole name.
    pub fn domain(&self, name: &str) -> Option<&MappedDomain> {
        self.domains.iter().find(|d| d.name == name)
    }

    /// The domain that a leaf cell belongs to; its place in [`DomainMap::domains`].
    pub fn domain_of(&self, instance: InstanceId) -> Option<usize> {
        self.of.get(instance.0 as usize).copied().flatten().map(|d| d as usize)
    }

    /// The domain of a whole name, or the error with the nearest.
    ///
    /// # Errors
    /// There is no such domain.
    pub fn domain_or(&self, name: &str, at: &Place) -> Result<&MappedDomain, ReadError> {
        self.domain(name).ok_or_else(|| ReadError::Unknown {
            at: at.clone(),
            kind: "power domain",
            name: name.to_owned(),
            nearest: nearest(name, self.domains.iter().map(|d| d.name.as_str())),
        })
    }
}

/// Maps intent onto a netlist.
///
/// An element belongs to its domain with all that is below it, but for what another domain lists further down, and for
/// what is excluded. A domain is switched when its primary power, or ground, is joined with the output of a switch.
///
/// # Errors
/// An element, scope or control net that does not exist, with the nearest that does; an instance in two domains; a
/// domain with two primary supplies, or one net for power and ground.
pub fn resolve(intent: &Intent, net: &Connected) -> Result<DomainMap, ReadError> {
    for scope in &intent.scopes {
        if !is_module_instance(net, &scope.path) {
            return Err(instance_error(net, scope, "scope"));
        }
    }
    let (of, instances) = assign(intent, net)?;
    let mut notes = Vec::new();
    let mut supplies = Supplies::of(intent);
    let mut domains = Vec::with_capacity(intent.domains.len());
    let mut fed = vec![false; intent.switches.len()];
    for (d, cells) in intent.domains.iter().zip(instances) {
        let power = supplies.primary(d, "power", d.primary_power.as_deref())?;
        let ground = supplies.primary(d, "ground", d.primary_ground.as_deref())?;
        if let (Some(p), Some(g)) = (&power, &ground)
            && supplies.joined(p, g)
        {
            return Err(ReadError::Syntax {
                at: d.at.clone(),
                found: format!("`{p}` is power and ground of power domain `{}`", d.name),
                wanted: "want two nets".into(),
            });
        }
        if power.is_none() || ground.is_none() {
            let text = format!("{}: power domain `{}` has no primary power and ground", d.at, d.name);
            Note::new("domain-without-supply", text).add_once(&mut notes);
        }
        let mut headers = Vec::new();
        let mut footers = Vec::new();
        for (i, switch) in intent.switches.iter().enumerate() {
            let output = format!("{}/{}", switch.name, switch.output.port);
            for (rail, list) in [(&power, &mut headers), (&ground, &mut footers)] {
                if rail.as_ref().is_some_and(|r| supplies.joined(r, &output)) {
                    fed[i] = true;
                    list.push(mapped_switch(switch, intent, net)?);
                }
            }
        }
        let isolations: Vec<Isolation> =
            intent.isolations.iter().filter(|i| i.domain == d.name).cloned().collect();
        let retentions: Vec<Retention> =
            intent.retentions.iter().filter(|r| r.domain == d.name).cloned().collect();
        let mut isolation_nets = Vec::new();
        for isolation in &isolations {
            for signal in &isolation.signals {
                isolation_nets.push(control(&isolation.name, signal, intent, net)?);
            }
        }
        let mut retention_nets = Vec::new();
        for retention in &retentions {
            for (role, trigger) in [("save", &retention.save), ("restore", &retention.restore)] {
                if let Some(t) = trigger {
                    let named = Named { path: t.net.clone(), at: t.at.clone() };
                    retention_nets.push(control(role, &named, intent, net)?);
                }
            }
            for element in &retention.elements {
                // an element may be a register or a part of the hierarchy, or a net that one drives
                if leaves(net, &element.path).is_none() && net_at(net, &element.path).is_none() {
                    return Err(instance_error(net, element, "element of retention"));
                }
            }
        }
        if cells.is_empty() {
            let text = format!("{}: power domain `{}` holds no cell", d.at, d.name);
            Note::new("domain-without-cells", text).add_once(&mut notes);
        }
        domains.push(MappedDomain {
            name: d.name.clone(),
            counts: counted(net, cells.iter().copied()),
            instances: cells,
            power,
            ground,
            headers,
            footers,
            isolations,
            isolation_nets,
            retentions,
            retention_nets,
        });
    }
    for (switch, _) in intent.switches.iter().zip(fed).filter(|s| !s.1) {
        let text = format!("{}: switch `{}` feeds no domain's primary supply", switch.at, switch.name);
        Note::new("switch-without-domain", text).add_once(&mut notes);
    }
    let outside = counted(net, net.instances().filter(|i| of.get(i.0 as usize).copied().flatten().is_none()));
    if outside.total() > 0 {
        let text = format!("{} leaf cells belong to no power domain", outside.total());
        Note::new("cells-without-domain", text).add_once(&mut notes);
    }
    Ok(DomainMap { domains, outside, notes, of })
}

fn counted(net: &Connected, instances: impl Iterator<Item = InstanceId>) -> InstanceCounts {
    let mut by_master: IndexMap<_, u64, rustc_hash::FxBuildHasher> = IndexMap::default();
    for instance in instances {
        *by_master.entry(net.master(instance)).or_default() += 1;
    }
    let mut out = InstanceCounts { top: net.top().to_owned(), ..InstanceCounts::default() };
    for (master, n) in by_master {
        out.add(net.master_name(master), n);
    }
    out
}

/// What one domain says belongs to it.
struct Claim<'a> {
    domain: usize,
    path: &'a str,
    leaves: Vec<InstanceId>,
}

type Assigned = (Vec<Option<u32>>, Vec<Vec<InstanceId>>);

/// The domain of each leaf cell, and the leaf cells of each domain.
fn assign(intent: &Intent, net: &Connected) -> Result<Assigned, ReadError> {
    let mut claims: Vec<Claim<'_>> = Vec::new();
    let mut owners: FxHashMap<String, usize> = FxHashMap::default();
    for (domain, d) in intent.domains.iter().enumerate() {
        let scope = d.include_scope.then_some((d.scope.as_str(), &d.at));
        let elements = d.elements.iter().map(|e| (e.path.as_str(), &e.at));
        for (path, at) in scope.into_iter().chain(elements) {
            let Some(leaves) = leaves(net, path) else {
                let named = Named { path: path.to_owned(), at: at.clone() };
                return Err(instance_error(net, &named, "element of the power domain"));
            };
            match owners.insert(path.replace('.', "/"), domain) {
                None => claims.push(Claim { domain, path, leaves }),
                Some(other) if other == domain => {}
                Some(other) => {
                    let shown = if path.is_empty() { "the top" } else { path };
                    let (a, b) = (&intent.domains[other], d);
                    return Err(ReadError::Syntax {
                        at: at.clone(),
                        found: format!(
                            "`{shown}` is in two power domains: `{}` ({}) and `{}`",
                            a.name, a.at, b.name
                        ),
                        wanted: "want each instance listed in one".into(),
                    });
                }
            }
        }
    }
    // what lies further in is smaller, or has the longer path, and comes later
    claims.sort_by_key(|c| (std::cmp::Reverse(c.leaves.len()), c.path.len()));
    let total = net.instances().count();
    let mut of: Vec<Option<u32>> = vec![None; total];
    let mut stamp = vec![0u32; total];
    let mut round = 0u32;
    for claim in &claims {
        let d = &intent.domains[claim.domain];
        round += 1;
        for out in &d.exclude {
            let Some(cells) = leaves(net, &out.path) else {
                return Err(instance_error(net, out, "element left out of the power domain"));
            };
            for cell in cells {
                stamp[cell.0 as usize] = round;
            }
        }
        for cell in &claim.leaves {
            if stamp[cell.0 as usize] != round {
                of[cell.0 as usize] = u32::try_from(claim.domain).ok();
            }
        }
    }
    let mut instances = vec![Vec::new(); intent.domains.len()];
    for cell in net.instances() {
        if let Some(d) = of[cell.0 as usize] {
            instances[d as usize].push(cell);
        }
    }
    Ok((of, instances))
}

fn control(role: &str, named: &Named, intent: &Intent, net: &Connected) -> Result<Control, ReadError> {
    let found = net_at(net, &named.path);
    if found.is_none() && !intent.logic_nets.contains(&named.path) {
        return Err(net_error(net, named));
    }
    Ok(Control { role: role.to_owned(), path: named.path.clone(), net: found })
}

fn mapped_switch(switch: &PowerSwitch, intent: &Intent, net: &Connected) -> Result<MappedSwitch, ReadError> {
    let nets = |list: &[super::SwitchControl]| {
        let given = list.iter().filter_map(|c| c.net.as_ref().map(|n| (c, n)));
        given
            .map(|(c, n)| control(&c.port, &Named { path: n.clone(), at: c.at.clone() }, intent, net))
            .collect::<Result<Vec<_>, _>>()
    };
    Ok(MappedSwitch {
        name: switch.name.clone(),
        inputs: switch.inputs.iter().map(|i| i.net.clone().unwrap_or_else(|| i.port.clone())).collect(),
        controls: nets(&switch.controls)?,
        acks: nets(&switch.acks)?,
        at: switch.at.clone(),
    })
}

/// Which names of supplies are one net.
struct Supplies {
    ids: IndexMap<String, usize>,
}

impl Supplies {
    fn of(intent: &Intent) -> Self {
        let mut s = Self { ids: IndexMap::new() };
        for c in &intent.connections {
            s.join(&c.net, &c.port);
        }
        for set in &intent.supply_sets {
            for (function, net) in &set.functions {
                s.join(&format!("{}.{function}", set.name), net);
            }
        }
        for d in &intent.domains {
            for (handle, set) in &d.supplies {
                for function in ["power", "ground"] {
                    s.join(&format!("{}.{handle}.{function}", d.name), &format!("{set}.{function}"));
                }
            }
        }
        for switch in &intent.switches {
            for port in switch.inputs.iter().chain([&switch.output]) {
                let name = format!("{}/{}", switch.name, port.port);
                match &port.net {
                    Some(net) => s.join(&name, net),
                    None => {
                        s.id(&name);
                    }
                }
            }
        }
        s
    }

    fn id(&mut self, name: &str) -> usize {
        let next = self.ids.len();
        *self.ids.entry(name.to_owned()).or_insert(next)
    }

    fn root(&self, mut id: usize) -> usize {
        while let Some((_, &up)) = self.ids.get_index(id).filter(|e| *e.1 != id) {
            id = up;
        }
        id
    }

    fn join(&mut self, a: &str, b: &str) {
        let (a, b) = (self.id(a), self.id(b));
        let (a, b) = (self.root(a), self.root(b));
        if let Some((_, up)) = self.ids.get_index_mut(a.max(b)) {
            *up = a.min(b);
        }
    }

    fn joined(&self, a: &str, b: &str) -> bool {
        let root = |name: &str| self.ids.get_index_of(name).map(|i| self.root(i));
        a == b || root(a).zip(root(b)).is_some_and(|(a, b)| a == b)
    }

    /// The primary supply of a domain: the net given, or the function of its primary set.
    fn primary(
        &mut self,
        d: &Domain,
        function: &str,
        given: Option<&str>,
    ) -> Result<Option<String>, ReadError> {
        let own = format!("{}.primary.{function}", d.name);
        let from_set = self.ids.contains_key(&own);
        let Some(net) = given else { return Ok(from_set.then(|| self.plain(&own))) };
        if from_set && !self.joined(&own, net) {
            return Err(ReadError::Syntax {
                at: d.at.clone(),
                found: format!(
                    "two primary {function} nets for power domain `{}`: `{net}` and `{}`",
                    d.name,
                    self.plain(&own)
                ),
                wanted: "want one".into(),
            });
        }
        Ok(Some(net.to_owned()))
    }

    /// A net joined with a function of a set, when there is one.
    fn plain(&self, name: &str) -> String {
        let nets = self.ids.keys().filter(|k| !k.contains('.') && self.joined(k, name));
        nets.min_by_key(|k| k.matches('/').count()).cloned().unwrap_or_else(|| name.to_owned())
    }
}
