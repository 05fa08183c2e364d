//! Supply ports, nets and sets, and which of them a domain runs on.

use indexmap::IndexMap;

use super::super::tcl::{Interpreter, Spot, Stop, Word};
use super::model::{Connection, SupplyNet, SupplyPort, SupplySet};
use super::table::{Args, cut};
use super::{Reader, Value, twice};

/// Functions of a supply set.
const FUNCTIONS: [&str; 6] = ["power", "ground", "nwell", "pwell", "deepnwell", "deeppwell"];

impl Reader<'_> {
    fn scope_of_domain(&self, tcl: &Interpreter, args: &Args) -> Result<Option<String>, Stop> {
        args.word("domain").map(|w| self.domain_named(tcl, w)).transpose()
    }

    pub(super) fn create_supply_port(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let word = &args.words[0];
        self.scope_of_domain(tcl, args)?;
        let direction = args.word("direction").map_or("in", |w| w.text());
        if !["in", "out", "inout"].contains(&direction) {
            let at = args.spot("direction");
            return Err(tcl.unknown(at, "direction", direction, ["in", "out", "inout"]));
        }
        let name = self.whole(word);
        if let Some(first) = self.intent.supply_ports.iter().find(|p| p.name == name) {
            return Err(twice(tcl, word.at, "supply port", word, &first.at));
        }
        let direction = direction.to_owned();
        self.intent.supply_ports.push(SupplyPort { name, direction, at: tcl.place(word.at) });
        Ok(())
    }

    pub(super) fn create_supply_net(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let word = &args.words[0];
        let domain = self.scope_of_domain(tcl, args)?;
        let name = self.whole(word);
        let resolve = args.word("resolve").map(|w| w.text().to_owned());
        if let Some(net) = self.intent.supply_nets.iter_mut().find(|n| n.name == name) {
            if !args.has("reuse") {
                let first = net.at.clone();
                return Err(tcl.wrong(
                    word.at,
                    format!("supply net `{}` is defined twice; first in {first}", cut(word.text())),
                    "want another name, or `-reuse` in another domain",
                ));
            }
            net.domains.extend(domain);
            return Ok(());
        }
        let at = tcl.place(word.at);
        self.intent.supply_nets.push(SupplyNet { name, resolve, domains: domain.into_iter().collect(), at });
        Ok(())
    }

    /// The whole name of a supply set, or of a domain's handle, that a word names.
    pub(super) fn supply_set(&self, tcl: &Interpreter, word: &Word) -> Result<String, Stop> {
        let name = self.whole(word);
        if self.intent.supply_sets.iter().any(|s| s.name == name) || self.handle(&name).is_some() {
            return Ok(name);
        }
        let known = self.known(self.intent.supply_sets.iter().map(|s| s.name.as_str()));
        Err(tcl.unknown(word.value.spot(), "supply set", word.text(), known))
    }

    /// The domain and handle of `domain.handle`.
    fn handle(&self, name: &str) -> Option<(usize, String)> {
        let (domain, handle) = name.rsplit_once('.')?;
        let i = self.intent.domains.iter().position(|d| d.name == domain)?;
        Some((i, handle.to_owned()))
    }

    /// The whole name of a net, port, function of a set or port of a switch that a word names.
    pub(super) fn supply(&self, tcl: &Interpreter, value: &Value) -> Result<String, Stop> {
        let name = self.whole_text(value.text());
        if self.is_supply(&name) {
            return Ok(name);
        }
        let intent = &self.intent;
        let nets = intent.supply_nets.iter().map(|n| n.name.as_str());
        let known = self.known(nets.chain(intent.supply_ports.iter().map(|p| p.name.as_str())));
        Err(tcl.unknown(value.spot(), "supply net", value.text(), known))
    }

    fn is_supply(&self, name: &str) -> bool {
        let intent = &self.intent;
        let of_set = || {
            name.rsplit_once('.').is_some_and(|(set, _)| {
                intent.supply_sets.iter().any(|s| s.name == set) || self.handle(set).is_some()
            })
        };
        intent.supply_nets.iter().any(|n| n.name == name)
            || intent.supply_ports.iter().any(|p| p.name == name)
            || self.is_switch_port(name)
            || of_set()
    }

    pub(super) fn is_switch_port(&self, name: &str) -> bool {
        name.rsplit_once('/').is_some_and(|(switch, port)| {
            self.intent
                .switch(switch)
                .is_some_and(|s| s.output.port == port || s.inputs.iter().any(|i| i.port == port))
        })
    }

    pub(super) fn create_supply_set(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let word = &args.words[0];
        let name = self.whole(word);
        let mut functions = Vec::new();
        for function in args.each("function") {
            let parts = tcl.list(&function.value)?;
            let [kind, net] = parts.as_slice() else {
                let found = format!("`{}` is no function of a supply set", cut(function.text()));
                return Err(tcl.wrong(function.at, found, "want `{power net}`"));
            };
            if !FUNCTIONS.contains(&kind.text()) {
                return Err(tcl.unknown(kind.spot(), "function of a supply set", kind.text(), FUNCTIONS));
            }
            functions.push((kind.text().to_owned(), self.supply(tcl, net)?, net.spot()));
        }
        let handle = self.handle(&name).is_some();
        let index = match (self.intent.supply_sets.iter().position(|s| s.name == name), args.has("update")) {
            (Some(i), true) => i,
            (Some(i), false) => {
                let first = self.intent.supply_sets[i].at.clone();
                return Err(twice(tcl, word.at, "supply set", word, &first));
            }
            (None, true) if !handle => {
                self.supply_set(tcl, word)?;
                return Ok(());
            }
            (None, _) => {
                let at = tcl.place(word.at);
                self.intent.supply_sets.push(SupplySet { name, functions: IndexMap::new(), at });
                self.intent.supply_sets.len() - 1
            }
        };
        for (kind, net, at) in functions {
            let set = &mut self.intent.supply_sets[index];
            match set.functions.get(&kind) {
                Some(old) if *old != net => {
                    let found =
                        format!("two nets for `{kind}` of supply set `{}`: `{old}` and `{net}`", set.name);
                    return Err(tcl.wrong(at, found, "want one"));
                }
                _ => set.functions.insert(kind, net),
            };
        }
        Ok(())
    }

    pub(super) fn connect_supply_net(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let net = self.supply(tcl, &args.words[0].value)?;
        self.scope_of_domain(tcl, args)?;
        let ports = self.names_in(tcl, args.word("ports"))?;
        self.intent
            .connections
            .extend(ports.into_iter().map(|p| Connection { net: net.clone(), port: p.path }));
        Ok(())
    }

    /// Gives a domain a supply set by handle.
    pub(super) fn associate(
        &mut self,
        tcl: &Interpreter,
        domain: usize,
        handle: &str,
        set: String,
        at: Spot,
    ) -> Result<(), Stop> {
        let domain = &mut self.intent.domains[domain];
        match domain.supplies.get(handle) {
            Some(old) if *old != set => {
                let found = format!(
                    "two supply sets for `{handle}` of power domain `{}`: `{old}` and `{set}`",
                    domain.name
                );
                Err(tcl.wrong(at, found, "want one"))
            }
            _ => {
                domain.supplies.insert(handle.to_owned(), set);
                Ok(())
            }
        }
    }

    pub(super) fn associate_supply_set(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let set = self.supply_set(tcl, &args.words[0])?;
        let Some(word) = args.word("handle") else { return Ok(()) };
        for value in tcl.list(&word.value)? {
            let Some((domain, handle)) = self.handle(&self.whole_text(value.text())) else {
                let known: Vec<String> = self
                    .known(self.intent.domains.iter().map(|d| d.name.as_str()))
                    .into_iter()
                    .map(|d| format!("{d}.primary"))
                    .collect();
                let known = known.iter().map(String::as_str);
                return Err(tcl.unknown(value.spot(), "supply set handle", value.text(), known));
            };
            self.associate(tcl, domain, &handle, set.clone(), value.spot())?;
        }
        Ok(())
    }

    pub(super) fn set_domain_supply_net(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let name = self.domain_named(tcl, &args.words[0])?;
        for (option, is_power) in [("primary_power_net", true), ("primary_ground_net", false)] {
            let Some(word) = args.word(option) else { continue };
            let net = self.supply(tcl, &word.value)?;
            let Some(domain) = self.intent.domains.iter_mut().find(|d| d.name == name) else { continue };
            let slot = if is_power { &mut domain.primary_power } else { &mut domain.primary_ground };
            if let Some(old) = slot.as_ref().filter(|old| **old != net) {
                let what = if is_power { "power" } else { "ground" };
                let found = format!("two primary {what} nets for power domain `{name}`: `{old}` and `{net}`");
                return Err(tcl.wrong(word.at, found, "want one"));
            }
            *slot = Some(net);
        }
        Ok(())
    }
}
