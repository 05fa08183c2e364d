//! A cell: its transistors between named nodes, read from a netlist, independent of process and corner.

use std::sync::Arc;

use indexmap::IndexMap;
use rustc_hash::FxHashMap;

use crate::circuit::network::Node;
use crate::device::process::{Request, length_power};
use crate::read::deck::{Deck, DeckScope, Note, PinDirection, Subckt};
use crate::read::source::{Place, ReadError, nearest};

/// What a port is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, serde::Serialize, serde::Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Role {
    /// The supply rail of the logic.
    Supply,
    /// The ground rail of the logic.
    Ground,
    /// Body of the p-channel transistors.
    Nwell,
    /// Body of the n-channel transistors.
    Pwell,
    /// Driven from outside.
    Input,
    /// Driven by the cell.
    Output,
}

impl Role {
    /// Lower-case name.
    pub fn name(self) -> &'static str {
        match self {
            Self::Supply => "supply",
            Self::Ground => "ground",
            Self::Nwell => "nwell",
            Self::Pwell => "pwell",
            Self::Input => "input",
            Self::Output => "output",
        }
    }
}

/// Which port names are rails and wells; names ignore case.
#[derive(Debug, Clone, PartialEq, Eq, serde::Serialize, serde::Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct RailNames {
    /// Supply rails.
    pub supply: Vec<String>,
    /// Ground rails.
    pub ground: Vec<String>,
    /// n-wells.
    pub nwell: Vec<String>,
    /// p-wells or substrate.
    pub pwell: Vec<String>,
    /// Inputs that the netlist does not declare and that drive a pass transistor; otherwise a port on a drain is an output.
    pub input: Vec<String>,
    /// Outputs that the netlist does not declare and that touch no drain.
    pub output: Vec<String>,
}

impl Default for RailNames {
    fn default() -> Self {
        let list = |names: &[&str]| names.iter().map(ToString::to_string).collect();
        Self {
            supply: list(&["VPWR", "VDD", "VCC"]),
            ground: list(&["VGND", "VSS", "GND"]),
            nwell: list(&["VPB", "VNW", "VBP"]),
            pwell: list(&["VNB", "VPW", "VBN"]),
            input: Vec::new(),
            output: Vec::new(),
        }
    }
}

impl RailNames {
    fn role(&self, port: &str) -> Option<Role> {
        let is = |names: &[String]| names.iter().any(|n| n.eq_ignore_ascii_case(port));
        [
            (&self.supply, Role::Supply),
            (&self.ground, Role::Ground),
            (&self.nwell, Role::Nwell),
            (&self.pwell, Role::Pwell),
            (&self.input, Role::Input),
            (&self.output, Role::Output),
        ]
        .into_iter()
        .find(|(names, _)| is(names))
        .map(|(_, r)| r)
    }
}

/// One element of a cell.
#[derive(Debug, Clone)]
pub enum Part {
    /// A transistor: what is asked for; drain, gate, source, body.
    Transistor(Request, [Node; 4]),
    /// A diode: what is asked for; anode, cathode.
    Diode(Request, [Node; 2]),
    /// A resistor, S.
    Conductance(f64, [Node; 2]),
}

/// A cell's topology.
#[derive(Debug, Clone)]
pub struct Cell {
    /// Name as written.
    pub name: Arc<str>,
    /// Ports as written.
    pub ports: Vec<Arc<str>>,
    /// Role of each port.
    pub roles: Vec<Role>,
    /// Node of each port.
    pub port_nodes: Vec<Node>,
    /// Names of the nodes.
    pub nodes: Vec<Arc<str>>,
    /// Elements.
    pub parts: Vec<Part>,
    /// Where it is defined.
    pub at: Place,
}

const MAX_NESTING: usize = 20;

/// Builds cells from a netlist deck.
pub struct CellReader<'a> {
    /// The netlist.
    pub deck: &'a Deck,
    /// Rails and wells.
    pub rails: &'a RailNames,
    /// Whether a name is a device of the process (and not a cell of the netlist).
    pub is_device: &'a dyn Fn(&str) -> bool,
}

struct Builder {
    names: FxHashMap<String, usize>,
    list: Vec<Arc<str>>,
    parent: Vec<usize>,
    parts: Vec<Part>,
}

impl Builder {
    fn node(&mut self, name: &str) -> usize {
        // SPICE names ignore case
        let key = name.to_ascii_lowercase();
        if let Some(&n) = self.names.get(&key) {
            return n;
        }
        let n = self.list.len();
        self.names.insert(key, n);
        self.list.push(name.into());
        self.parent.push(n);
        n
    }
    fn root(&self, mut n: usize) -> usize {
        while self.parent[n] != n {
            n = self.parent[n];
        }
        n
    }
    fn tie(&mut self, a: usize, b: usize) {
        let (a, b) = (self.root(a), self.root(b));
        self.parent[a.max(b)] = a.min(b);
    }
}

impl CellReader<'_> {
    /// Reads one cell.
    ///
    /// # Errors
    /// The cell does not exist, is not made of known devices, or its ports cannot be understood.
    pub fn cell(&self, name: &str, notes: &mut Vec<Note>) -> Result<Cell, ReadError> {
        let Some(sub) = self.deck.subckts.get(name.to_ascii_lowercase().as_str()) else {
            let at = Place::new(self.deck.files.first().unwrap_or(&Arc::from("netlist")), 1, 1);
            let names = self.deck.subckts.values().map(|s| &*s.name);
            return Err(ReadError::Unknown {
                at,
                kind: "cell",
                name: name.into(),
                nearest: nearest(name, names),
            });
        };
        let mut b =
            Builder { names: FxHashMap::default(), list: Vec::new(), parent: Vec::new(), parts: Vec::new() };
        // rails first, so that ties keep the rail's number
        let mut order: Vec<usize> = (0..sub.ports.len()).collect();
        order.sort_by_key(|&i| self.rails.role(&sub.ports[i]).is_none());
        for i in order {
            b.node(&sub.ports[i]);
        }
        let ports: IndexMap<String, usize> =
            sub.ports.iter().map(|p| (p.to_ascii_lowercase(), b.node(p))).collect();
        self.flatten(sub, "", &ports, &[], &mut b, notes, 0)?;

        let mut number = vec![usize::MAX; b.list.len()];
        let mut nodes = Vec::new();
        for i in 0..b.list.len() {
            let r = b.root(i);
            if number[r] == usize::MAX {
                number[r] = nodes.len();
                nodes.push(Arc::clone(&b.list[r]));
            }
            number[i] = number[r];
        }
        let mut parts = b.parts;
        for p in &mut parts {
            match p {
                Part::Transistor(_, n) => n.iter_mut().for_each(|x| *x = number[*x]),
                Part::Diode(_, n) | Part::Conductance(_, n) => n.iter_mut().for_each(|x| *x = number[*x]),
            }
        }
        let at = sub.loc.place(&self.deck.files);
        let mut names = sub.ports.clone();
        let mut port_nodes: Vec<Node> =
            names.iter().map(|p| number[ports[&p.to_ascii_lowercase()]]).collect();
        // a rail or well that the cell uses without a port is global: it is held like one
        for (n, name) in nodes.iter().enumerate() {
            let global = self.rails.role(name).is_some_and(|r| !matches!(r, Role::Input | Role::Output));
            if global && !port_nodes.contains(&n) {
                let text = format!(
                    "cell `{}` uses `{name}` without a port; held as the rail or well of that name",
                    sub.name
                );
                notes.push(Note::new("global-rail", text));
                names.push(Arc::clone(name));
                port_nodes.push(n);
            }
        }
        let drains: Vec<bool> = (0..nodes.len())
            .map(|n| parts.iter().any(|p| matches!(p, Part::Transistor(_, t) if t[0] == n || t[2] == n)))
            .collect();
        let roles: Vec<Role> = names
            .iter()
            .zip(&port_nodes)
            .map(|(p, &n)| {
                let declared =
                    sub.directions.iter().find(|(d, _)| d.eq_ignore_ascii_case(p)).map(|(_, d)| *d);
                match (self.rails.role(p), declared) {
                    (Some(r), _) => r,
                    (None, Some(PinDirection::Input)) => Role::Input,
                    (None, Some(PinDirection::Output)) => Role::Output,
                    _ if drains[n] => Role::Output,
                    _ => Role::Input,
                }
            })
            .collect();
        for (role, what, names) in
            [(Role::Supply, "supply", &self.rails.supply), (Role::Ground, "ground", &self.rails.ground)]
        {
            if !roles.contains(&role) {
                let port_list = sub.ports.iter().map(|p| &**p).collect::<Vec<_>>().join(" ");
                let near = names.first().and_then(|n| nearest(n, sub.ports.iter().map(|p| &**p)));
                return Err(ReadError::Syntax {
                    at,
                    found: format!(
                        "cell `{}` has no port named {} (its ports: {port_list})",
                        sub.name,
                        names.join(" or ")
                    ),
                    wanted: near.map_or_else(
                        || format!("name the {what} port of the cells"),
                        |n| format!("name the {what} port of the cells; did you mean `{n}`?"),
                    ),
                });
            }
        }
        let mut rail_at: IndexMap<Node, Role> = IndexMap::new();
        for (i, r) in roles.iter().enumerate() {
            if matches!(r, Role::Supply | Role::Ground)
                && let Some(other) = rail_at.insert(port_nodes[i], *r).filter(|o| o != r)
            {
                return Err(ReadError::Syntax {
                    at,
                    found: format!(
                        "in cell `{}` {} and {} are tied together",
                        sub.name,
                        other.name(),
                        r.name()
                    ),
                    wanted: "remove the tie".into(),
                });
            }
        }
        let cell = Cell { name: Arc::clone(&sub.name), ports: names, roles, port_nodes, nodes, parts, at };
        cell.check_gates()?;
        Ok(cell)
    }

    /// Adds the elements of a subcircuit, going into cells it is made of.
    #[expect(clippy::too_many_arguments, reason = "one recursion, all of it its state")]
    fn flatten(
        &self,
        sub: &Subckt,
        prefix: &str,
        ports: &IndexMap<String, usize>,
        instance: &[(Arc<str>, f64)],
        b: &mut Builder,
        notes: &mut Vec<Note>,
        depth: usize,
    ) -> Result<(), ReadError> {
        let scope = DeckScope::new(self.deck, Some(sub), instance, 25.0);
        let scale = self.deck.scale();
        for e in &sub.elements {
            let at = e.loc.place(&self.deck.files);
            let nodes: Vec<usize> = e
                .nodes
                .iter()
                .map(|n| match ports.get(&n.to_ascii_lowercase()) {
                    Some(&k) => k,
                    None => b.node(&format!("{prefix}{n}")),
                })
                .collect();
            let wrong = |found: String, wanted: &str| ReadError::Syntax {
                at: at.clone(),
                found,
                wanted: wanted.into(),
            };
            // lengths and areas in SI; words that are not numbers (topology remarks) are left out with a note
            let numbers = |notes: &mut Vec<Note>| -> Result<Vec<(Arc<str>, f64)>, ReadError> {
                let mut out = Vec::new();
                for (name, def) in &e.params {
                    let power = match &**name {
                        // spellings of netlists alone
                        "perim" => 1,
                        "a" if e.kind == 'D' || e.kind == 'X' => 2,
                        "p" if e.kind == 'D' || e.kind == 'X' => 1,
                        other => length_power(other).unwrap_or(0),
                    };
                    if let crate::read::expression::Expr::Name(word) = &def.expr {
                        let known = sub.params.contains_key(word) || self.deck.params.contains_key(word);
                        if !known && !instance.iter().any(|(n, _)| n == word) && power == 0 {
                            let note = Note::new(
                                "instance-parameter",
                                format!("instance parameter `{name} = {word}` is a remark and has no effect"),
                            );
                            note.add_once(notes);
                            continue;
                        }
                    }
                    out.push((Arc::clone(name), self.deck.eval(def, &scope)? * scale.powi(power)));
                }
                Ok(out)
            };
            match e.kind {
                'R' => {
                    let value = match (&e.value, e.params.iter().find(|(n, _)| &**n == "r")) {
                        (Some(d), _) | (None, Some((_, d))) => self.deck.eval(d, &scope)?,
                        (None, None) if &*e.model == "short" => 0.0,
                        _ => {
                            return Err(wrong(
                                format!("resistor `{}` has no value", e.name),
                                "want ohms, or the model `short` for a wire",
                            ));
                        }
                    };
                    if value < 0.0 {
                        return Err(wrong(
                            format!("resistor `{}` is {value} ohm", e.name),
                            "want zero or more",
                        ));
                    }
                    if value == 0.0 {
                        b.tie(nodes[0], nodes[1]);
                    } else {
                        b.parts.push(Part::Conductance(1.0 / value, [nodes[0], nodes[1]]));
                    }
                }
                'C' => {}
                'D' => {
                    let mut params = numbers(notes)?;
                    if let Some(d) = &e.value {
                        params.push(("area".into(), self.deck.eval(d, &scope)? * scale.powi(2)));
                    }
                    let request = Request { model: Arc::clone(&e.model), params, at: at.clone() };
                    b.parts.push(Part::Diode(request, [nodes[0], nodes[1]]));
                }
                'M' => {
                    let request =
                        Request { model: Arc::clone(&e.model), params: numbers(notes)?, at: at.clone() };
                    b.parts.push(Part::Transistor(request, [nodes[0], nodes[1], nodes[2], nodes[3]]));
                }
                _ => {
                    let inner = self.deck.subckts.get(&e.model);
                    if &*e.model == "short" && inner.is_none() && nodes.len() >= 2 {
                        b.tie(nodes[0], nodes[1]);
                    } else if (self.is_device)(&e.model) {
                        let request =
                            Request { model: Arc::clone(&e.model), params: numbers(notes)?, at: at.clone() };
                        match nodes[..] {
                            [d, g, s, body] => b.parts.push(Part::Transistor(request, [d, g, s, body])),
                            [a, c] => b.parts.push(Part::Diode(request, [a, c])),
                            _ => {
                                return Err(wrong(
                                    format!("device `{}` has {} terminals", e.name, nodes.len()),
                                    "want 4 for a transistor, 2 for a diode",
                                ));
                            }
                        }
                    } else if let Some(inner) = inner {
                        if depth >= MAX_NESTING {
                            return Err(wrong(
                                format!("cell `{}` nests more than {MAX_NESTING} deep", sub.name),
                                "look for a cell that contains itself",
                            ));
                        }
                        if inner.ports.len() != nodes.len() {
                            return Err(wrong(
                                format!("`{}` gives {} nodes to `{}`", e.name, nodes.len(), inner.name),
                                &format!("want {}", inner.ports.len()),
                            ));
                        }
                        let map: IndexMap<String, usize> =
                            inner.ports.iter().map(|p| p.to_ascii_lowercase()).zip(nodes).collect();
                        let mut values = Vec::new();
                        for (name, def) in &e.params {
                            values.push((Arc::clone(name), self.deck.eval(def, &scope)?));
                        }
                        let deeper = format!("{prefix}{}.", e.name);
                        self.flatten(inner, &deeper, &map, &values, b, notes, depth + 1)?;
                    } else {
                        let names = self.deck.subckts.keys().map(|k| &**k);
                        return Err(ReadError::Unknown {
                            at: at.clone(),
                            kind: "model or cell",
                            name: e.model.to_string(),
                            nearest: nearest(&e.model, names),
                        });
                    }
                }
            }
        }
        Ok(())
    }
}

impl Cell {
    /// Nodes held from outside: rails, wells and inputs.
    pub fn held(&self) -> Vec<bool> {
        let mut held = vec![false; self.nodes.len()];
        for (r, &n) in self.roles.iter().zip(&self.port_nodes) {
            if *r != Role::Output {
                held[n] = true;
            }
        }
        held
    }

    /// Ports of a role, by index.
    pub fn ports_of(&self, role: Role) -> impl Iterator<Item = usize> {
        self.roles.iter().enumerate().filter(move |(_, r)| **r == role).map(|(i, _)| i)
    }

    /// Every gate must be driven by something.
    fn check_gates(&self) -> Result<(), ReadError> {
        let mut driven = self.held();
        for p in &self.parts {
            match p {
                Part::Transistor(_, n) => {
                    driven[n[0]] = true;
                    driven[n[2]] = true;
                }
                Part::Diode(_, n) | Part::Conductance(_, n) => {
                    driven[n[0]] = true;
                    driven[n[1]] = true;
                }
            }
        }
        for p in &self.parts {
            if let Part::Transistor(r, n) = p
                && !driven[n[1]]
            {
                return Err(ReadError::Syntax {
                    at: r.at.clone(),
                    found: format!(
                        "the gate at node `{}` of cell `{}` is driven by nothing",
                        self.nodes[n[1]], self.name
                    ),
                    wanted: "connect it to a port or to the drain of a transistor".into(),
                });
            }
        }
        Ok(())
    }
}
