//! Scopes, files, domains, and looking for instances.

use super::super::tcl::{Interpreter, Outcome, Stop, Value, list};
use super::locate::{instance_error, is_instance, is_module_instance};
use super::model::Domain;
use super::table::{Args, cut};
use super::{Named, Reader, twice};

impl Reader<'_> {
    pub(super) fn upf_version(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let Some(word) = args.words.first() else { return Ok(()) };
        let Ok(version) = word.text().trim().parse::<f64>() else {
            let found = format!("`{}` is no version", cut(word.text()));
            return Err(tcl.wrong(word.at, found, "want 1.0, 2.0, 2.1, 3.0 or 3.1"));
        };
        if !(1.0..=3.1).contains(&version) {
            tcl.note("version-beyond", word.at, &format!("version {version} is read as 3.1"));
        }
        self.version = Some(version);
        self.intent.version = Some(word.text().trim().to_owned());
        Ok(())
    }

    /// Checks that a scope is in the netlist, when there is one, and keeps it.
    fn enter(&mut self, tcl: &Interpreter, value: &Value) -> Result<String, Stop> {
        let named = self.named(tcl, value);
        if let Some(design) = self.design
            && !is_module_instance(design, &named.path)
        {
            return Err(instance_error(design, &named, "scope").into());
        }
        let path = named.path.clone();
        if !path.is_empty() && !self.intent.scopes.iter().any(|s| s.path == path) {
            self.intent.scopes.push(named);
        }
        Ok(path)
    }

    pub(super) fn set_scope(&mut self, tcl: &mut Interpreter, args: &Args) -> Outcome {
        let old = if self.scope.is_empty() { "/".to_owned() } else { format!("/{}", self.scope) };
        match args.words.first() {
            None => self.scope.clear(),
            Some(word) if word.text() == ".." => {
                let parent = self.scope.rsplit_once('/').map_or("", |p| p.0).to_owned();
                self.scope = parent;
            }
            Some(word) if word.text() == "/" => self.scope.clear(),
            Some(word) => self.scope = self.enter(tcl, &word.value)?,
        }
        Ok(Value::at(old, args.at))
    }

    pub(super) fn load_upf(&mut self, tcl: &mut Interpreter, args: &Args) -> Outcome {
        let scopes = match args.word("scope") {
            None => vec![self.scope.clone()],
            Some(word) => {
                let all = tcl.list(&word.value)?;
                all.iter().map(|v| self.enter(tcl, v)).collect::<Result<_, _>>()?
            }
        };
        let old = self.scope.clone();
        for scope in scopes {
            self.scope = scope;
            tcl.run_file(self, &args.words[0])?;
            self.scope.clone_from(&old);
        }
        Ok(Value::at("", args.at))
    }

    pub(super) fn create_power_domain(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let old = self.scope.clone();
        if let Some(scope) = args.word("scope") {
            self.scope = self.enter(tcl, &scope.value)?;
        }
        let made = self.make_domain(tcl, args);
        self.scope = old;
        made
    }

    fn make_domain(&mut self, tcl: &mut Interpreter, args: &Args) -> Result<(), Stop> {
        let word = &args.words[0];
        if word.text().is_empty() || word.text().contains(char::is_whitespace) {
            let found = format!("`{}` is no name", cut(word.text()));
            return Err(tcl.wrong(word.at, found, "want a name without blanks"));
        }
        let name = self.whole(word);
        let elements = self.names_in(tcl, args.word("elements"))?;
        let exclude = self.names_in(tcl, args.word("exclude_elements"))?;
        let mut supplies = Vec::new();
        for supply in args.each("supply") {
            let parts = tcl.list(&supply.value)?;
            let (handle, set) = match parts.as_slice() {
                [handle] => (handle, None),
                [handle, set] => (handle, Some(set)),
                _ => {
                    let found = format!("`{}` is no supply", cut(supply.text()));
                    return Err(tcl.wrong(supply.at, found, "want `{handle}` or `{handle supply_set}`"));
                }
            };
            if let Some(set) = set {
                let set = super::Word { value: set.clone(), at: set.spot() };
                let set = self.supply_set(tcl, &set)?;
                supplies.push((handle.text().to_owned(), set, supply.at));
            }
        }
        let index = match (self.intent.domains.iter().position(|d| d.name == name), args.has("update")) {
            (Some(i), true) => i,
            (None, false) => {
                self.intent.domains.push(Domain {
                    name,
                    scope: self.scope.clone(),
                    at: tcl.place(word.at),
                    elements: Vec::new(),
                    exclude: Vec::new(),
                    include_scope: false,
                    primary_power: None,
                    primary_ground: None,
                    supplies: indexmap::IndexMap::new(),
                });
                self.intent.domains.len() - 1
            }
            (Some(i), false) => {
                let first = self.intent.domains[i].at.clone();
                return Err(twice(tcl, word.at, "power domain", word, &first));
            }
            (None, true) => {
                self.domain_named(tcl, word)?;
                return Ok(());
            }
        };
        for (handle, set, at) in supplies {
            self.associate(tcl, index, &handle, set, at)?;
        }
        let domain = &mut self.intent.domains[index];
        let once = |list: &mut Vec<Named>, new: Vec<Named>| {
            for n in new {
                if !list.iter().any(|o| o.path == n.path) {
                    list.push(n);
                }
            }
        };
        once(&mut domain.elements, elements);
        once(&mut domain.exclude, exclude);
        domain.include_scope |= args.has("include_scope");
        Ok(())
    }

    pub(super) fn find_objects(&mut self, tcl: &mut Interpreter, args: &Args) -> Outcome {
        let Some(design) = self.design else {
            let found = "`find_objects` without a netlist to look in";
            return Err(tcl.wrong(args.at, found, "give the netlist with the intent"));
        };
        if args.has("regexp") {
            return Err(tcl.wrong(
                args.spot("regexp"),
                "`-regexp` is not offered",
                "want a pattern with `*`",
            ));
        }
        let kind = args.word("object_type").map_or("inst", |w| w.text());
        if !matches!(kind, "inst" | "cell" | "model") || kind == "model" {
            let at = args.spot("object_type");
            return Err(tcl.wrong(
                at,
                format!("objects of type `{}` are not offered", cut(kind)),
                "want `inst`",
            ));
        }
        let pattern = args.word("pattern").map_or("*", |w| w.text());
        let scope = self.enter(tcl, &args.words[0].value)?;
        let deep = args.is_on("transitive");
        let prefix = if scope.is_empty() { String::new() } else { format!("{scope}/") };
        let mut found: Vec<String> = Vec::new();
        let all = design.module_instances().chain(design.instances().map(|i| design.instance_path(i)));
        for path in all {
            let Some(below) = path.strip_prefix(&prefix) else { continue };
            tcl.charge(below.len(), args.at)?;
            let name = below.rsplit_once('/').map_or(below, |p| p.1);
            let inside = deep || !below.contains('/');
            let fits = if args.has("exact") { name == pattern } else { list::fits(pattern, name) };
            if inside && fits && is_instance(design, &path) {
                // as one would name it here
                let here = path.strip_prefix(&self.scope).and_then(|p| p.strip_prefix('/'));
                let shown = if self.scope.is_empty() { Some(path.as_str()) } else { here };
                found.push(shown.map_or_else(|| format!("/{path}"), str::to_owned));
            }
        }
        if found.is_empty() {
            tcl.note("nothing-found", args.at, &format!("no instance fits `{}`", cut(pattern)));
        }
        found.sort_unstable();
        found.dedup();
        Ok(Value::at(list::join(found.iter().map(String::as_str)), args.at))
    }
}
