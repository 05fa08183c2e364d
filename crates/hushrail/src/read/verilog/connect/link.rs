//! Modules to one flat graph: ports are matched by name or position, then the hierarchy is laid out.

use rustc_hash::FxHashMap;

use super::body::{
    Body, Conn, Decl, FLOATING, Inst, Loc, ONE, PORT, POSITION, RESERVED, UNKNOWN, UNSIZED, ZERO,
};
use super::graph::{CHILD, ChildEntry, Connected, LeafEntry, Master, MasterPort, OPEN, Scope, Shape};
use super::join::Join;
use super::names::Names;
use super::ports::{CellPorts, Direction};
use super::weave::Woven;
use super::{ConnectOptions, UnknownCells};
use crate::read::source::{Place, ReadError, nearest};
use crate::read::verilog::keyword::{Keyword, keyword};

/// The graph's numbers have room for this many of anything.
const MAX_COUNT: u64 = 1 << 31;

/// The bits of a constant without a width, made as wide as its port.
pub(super) fn fitted(bits: &[u32], width: usize) -> Vec<u32> {
    let first = bits.first().copied().unwrap_or(ZERO);
    // a single digit fills the port, a number is extended by zeros
    let fill = if bits.len() == 1 || first >= UNKNOWN { first } else { ZERO };
    let missing = width.saturating_sub(bits.len());
    let skipped = bits.len().saturating_sub(width);
    std::iter::repeat_n(fill, missing).chain(bits[skipped..].iter().copied()).collect()
}

fn short(n: usize) -> u32 {
    u32::try_from(n).unwrap_or(u32::MAX)
}

pub(super) struct Linker<'a, C> {
    names: Names,
    bodies: Vec<Body>,
    defined: FxHashMap<u32, usize>,
    paths: Vec<std::sync::Arc<str>>,
    cells: &'a C,
    options: &'a ConnectOptions,
    masters: Vec<Master>,
    master_of: FxHashMap<u32, u32>,
    /// Ports of each body as a master.
    faces: Vec<Vec<MasterPort>>,
}

/// How much lies below one instance of a module.
#[derive(Debug, Clone, Copy, Default)]
struct Size {
    instances: u64,
    pins: u64,
    scopes: u64,
    nets: u64,
}

pub(super) fn link<C: CellPorts + ?Sized>(
    woven: Woven,
    top: Option<&str>,
    cells: &C,
    options: &ConnectOptions,
) -> Result<Connected, ReadError> {
    let Woven { names, bodies, defined, paths } = woven;
    let faces = bodies.iter().map(face).collect();
    let mut linker = Linker {
        names,
        bodies,
        defined,
        paths,
        cells: &cells,
        options,
        masters: Vec::new(),
        master_of: FxHashMap::default(),
        faces,
    };
    let top = linker.top(top)?;
    let order = linker.order(top)?;
    for &body in &order {
        linker.aim(body)?;
    }
    for arrays in [false, true] {
        for &body in &order {
            linker.resolve(body, arrays)?;
        }
    }
    linker.lay_out();
    linker.check_size(&order)?;
    Ok(linker.flatten(top, &order))
}

fn face(body: &Body) -> Vec<MasterPort> {
    let ports = body.ports.iter().map(|p| MasterPort {
        name: p.name,
        direction: p.direction,
        width: body.decls[p.decl].width(),
        first: 0,
    });
    ports.collect()
}

impl<C: CellPorts + ?Sized> Linker<'_, &C> {
    fn name(&self, body: usize) -> &str {
        self.names.get(self.bodies[body].name)
    }

    fn place(&self, loc: Loc) -> Place {
        let path = self.paths.get(loc.file as usize).cloned().unwrap_or_else(|| "?".into());
        Place::new(&path, loc.line as usize, loc.column as usize)
    }

    /// The body of a master when it has one with something in it.
    fn body_of(&self, master: u32) -> Option<usize> {
        self.defined.get(&master).copied().filter(|&b| !self.bodies[b].is_black_box())
    }

    fn top(&self, name: Option<&str>) -> Result<usize, ReadError> {
        if let Some(name) = name {
            let found = self.names.find(name).and_then(|id| self.defined.get(&id));
            return found.copied().ok_or_else(|| ReadError::Unknown {
                at: self.bodies[0].at.clone(),
                kind: "top module",
                name: name.to_owned(),
                nearest: nearest(name, (0..self.bodies.len()).map(|b| self.name(b))),
            });
        }
        let mut used = vec![false; self.names.len()];
        for inst in self.bodies.iter().flat_map(|b| &b.insts) {
            used[inst.master as usize] = true;
        }
        let mut tops: Vec<usize> =
            (0..self.bodies.len()).filter(|&b| !used[self.bodies[b].name as usize]).collect();
        if tops.iter().any(|&b| !self.bodies[b].is_black_box()) {
            tops.retain(|&b| !self.bodies[b].is_black_box());
        }
        match tops[..] {
            [only] => Ok(only),
            [] => Ok(0),
            [first, ..] => {
                let shown: Vec<String> =
                    tops.iter().take(8).map(|&t| format!("`{}`", self.name(t))).collect();
                let more = if tops.len() > shown.len() { ", …" } else { "" };
                Err(ReadError::Syntax {
                    at: self.bodies[first].at.clone(),
                    found: format!(
                        "{} modules that nothing instantiates: {}{more}",
                        tops.len(),
                        shown.join(", ")
                    ),
                    wanted: "name the one that is the top".into(),
                })
            }
        }
    }

    /// The bodies below `top`, each after all that it holds.
    fn order(&self, top: usize) -> Result<Vec<usize>, ReadError> {
        let mut finished = Vec::new();
        let mut seen = vec![false; self.bodies.len()];
        let mut open = vec![false; self.bodies.len()];
        let mut walk = vec![(top, 0)];
        (seen[top], open[top]) = (true, true);
        while let Some((body, next)) = walk.last_mut() {
            let body = *body;
            let Some(inst) = self.bodies[body].insts.get(*next) else {
                open[body] = false;
                finished.push(body);
                walk.pop();
                continue;
            };
            *next += 1;
            match self.body_of(inst.master) {
                Some(child) if open[child] => {
                    return Err(ReadError::Syntax {
                        at: self.place(inst.loc),
                        found: format!("module `{}` contains itself through this instance", self.name(child)),
                        wanted: "want a hierarchy that ends in cells".into(),
                    });
                }
                Some(child) if !seen[child] => {
                    (seen[child], open[child]) = (true, true);
                    walk.push((child, 0));
                }
                _ => {}
            }
        }
        Ok(finished)
    }

    /// Replaces the names of masters by what they are.
    fn aim(&mut self, body: usize) -> Result<(), ReadError> {
        for i in 0..self.bodies[body].insts.len() {
            let Inst { master, loc, .. } = self.bodies[body].insts[i];
            let target = match self.body_of(master) {
                Some(child) => CHILD | short(child),
                None => match self.master_of.get(&master) {
                    Some(&m) => m,
                    None => self.new_master(master, loc)?,
                },
            };
            self.bodies[body].insts[i].master = target;
        }
        Ok(())
    }

    fn new_master(&mut self, name: u32, loc: Loc) -> Result<u32, ReadError> {
        let text = self.names.get(name).to_owned();
        let is_gate = keyword(&text) == Some(Keyword::Gate);
        let mut known = true;
        let ports = if let Some(ports) = self.cells.ports(&text) {
            let mut list = Vec::with_capacity(ports.len());
            for port in ports {
                let id = self.names.intern(&port.name).unwrap_or_default();
                list.push(MasterPort {
                    name: id,
                    direction: port.direction,
                    width: port.width.max(1),
                    first: 0,
                });
            }
            list
        } else if let Some(&body) = self.defined.get(&name) {
            self.faces[body].clone()
        } else {
            known = false;
            if self.options.unknown_cells == UnknownCells::Refuse && !is_gate {
                return Err(ReadError::Unknown {
                    at: self.place(loc),
                    kind: "module",
                    nearest: nearest(&text, (0..self.bodies.len()).map(|b| self.name(b))),
                    name: text,
                });
            }
            Vec::new()
        };
        let id = short(self.masters.len());
        self.masters.push(Master { name, ports, pins: 0, known, is_gate });
        self.master_of.insert(name, id);
        Ok(id)
    }

    /// Replaces names and positions of ports by their numbers; widths are held against each other.
    fn resolve(&mut self, body: usize, arrays: bool) -> Result<(), ReadError> {
        let mut array = 0;
        let mut seen: Vec<u32> = Vec::new();
        for i in 0..self.bodies[body].insts.len() {
            let known_array = self.bodies[body].arrays.get(array).filter(|a| a.0 as usize == i).copied();
            array += usize::from(known_array.is_some());
            if known_array.is_some() != arrays {
                continue;
            }
            let members = known_array.map_or(1, |(_, first, last)| first.abs_diff(last) + 1);
            let inst = self.bodies[body].insts[i];
            let stamp = short(i) + 1;
            let conns = self.bodies[body].conns_of(i);
            let count = conns.len();
            let mut has = (false, false);
            for (k, c) in conns.enumerate() {
                let Conn { port, .. } = self.bodies[body].conns[c];
                if port & POSITION > 0 {
                    has.1 = true;
                } else {
                    has.0 = true;
                }
                if has == (true, true) {
                    let found = "pins by name and by position in one instance";
                    return Err(self.at_inst(body, inst, found, "want one or the other"));
                }
                let number = self.port_number(body, inst, port, k, count)?;
                if seen.len() <= number {
                    seen.resize(number + 1, 0);
                }
                if std::mem::replace(&mut seen[number], stamp) == stamp {
                    let found = format!("pin `{}` is connected twice", self.names.get(port & PORT));
                    return Err(self.at_inst(body, inst, &found, "want each pin once"));
                }
                self.bodies[body].conns[c].port = short(number) | port & UNSIZED;
                self.check_width(body, inst, c, number, members, arrays)?;
            }
        }
        Ok(())
    }

    fn ports(&self, target: u32) -> &[MasterPort] {
        if target & CHILD > 0 {
            &self.faces[(target & !CHILD) as usize]
        } else {
            &self.masters[target as usize].ports
        }
    }

    fn target_name(&self, target: u32) -> &str {
        if target & CHILD > 0 {
            self.name((target & !CHILD) as usize)
        } else {
            self.names.get(self.masters[target as usize].name)
        }
    }

    fn at_inst(&self, body: usize, inst: Inst, found: &str, wanted: &str) -> ReadError {
        let name = self.names.get(inst.name);
        let found = format!(
            "{found}, at instance `{name}` of `{}` in module `{}`",
            self.target_name(inst.master),
            self.name(body)
        );
        ReadError::Syntax { at: self.place(inst.loc), found, wanted: wanted.to_owned() }
    }

    fn port_number(
        &mut self,
        body: usize,
        inst: Inst,
        port: u32,
        k: usize,
        count: usize,
    ) -> Result<usize, ReadError> {
        let ports = self.ports(inst.master);
        let grows = inst.master & CHILD == 0 && !self.masters[inst.master as usize].known;
        if port & POSITION > 0 {
            let number = (port & PORT) as usize;
            if number < ports.len() {
                if grows {
                    self.direct_gate(inst.master, count);
                }
                return Ok(number);
            }
            if !grows {
                let found = format!("{} pins by position and {} ports", count, ports.len());
                return Err(self.at_inst(
                    body,
                    inst,
                    &found,
                    "want as many pins as the module has ports, or fewer",
                ));
            }
            for n in ports.len()..=number {
                let name = self.names.intern(&(n + 1).to_string()).unwrap_or_default();
                let port = MasterPort { name, direction: None, width: 0, first: 0 };
                self.masters[inst.master as usize].ports.push(port);
            }
            self.direct_gate(inst.master, count);
            return Ok(number);
        }
        let name = port & PORT;
        // pins mostly come in the order in which they came before
        if ports.get(k).is_some_and(|p| p.name == name) {
            return Ok(k);
        }
        if let Some(number) = ports.iter().position(|p| p.name == name) {
            return Ok(number);
        }
        if grows {
            let number = ports.len();
            self.masters[inst.master as usize].ports.push(MasterPort {
                name,
                direction: None,
                width: 0,
                first: 0,
            });
            return Ok(number);
        }
        let text = self.names.get(name);
        let near = nearest(text, ports.iter().map(|p| self.names.get(p.name)));
        let wanted =
            near.map_or_else(|| "want one of its ports".to_owned(), |n| format!("did you mean `{n}`?"));
        let found = format!("`{}` has no port `{text}`", self.target_name(inst.master));
        Err(self.at_inst(body, inst, &found, &wanted))
    }

    /// Directions of the pins of a gate of the language with so many of them.
    fn direct_gate(&mut self, master: u32, count: usize) {
        let master = &mut self.masters[master as usize];
        if !master.is_gate {
            return;
        }
        let name = self.names.get(master.name);
        let many_out = matches!(name, "buf" | "not");
        let both = if name.starts_with("rtran") || name.starts_with("tran") { 2 } else { 0 };
        let out = if name.starts_with("pull") { usize::MAX } else { 1 };
        for (i, port) in master.ports.iter_mut().enumerate() {
            let direction = match i {
                _ if i < both => Direction::Inout,
                _ if both > 0 => Direction::Input,
                _ if many_out && i + 1 < count => Direction::Output,
                _ if i < out && !many_out => Direction::Output,
                _ => Direction::Input,
            };
            let clash = many_out && port.direction.is_some_and(|d| d != direction);
            port.direction = if clash { None } else { Some(direction) };
        }
    }

    fn check_width(
        &mut self,
        body: usize,
        inst: Inst,
        conn: usize,
        number: usize,
        members: u64,
        is_array: bool,
    ) -> Result<(), ReadError> {
        let bits = self.bodies[body].bits_of(conn).len() as u64;
        let width = u64::from(self.ports(inst.master)[number].width);
        if bits == 0 || self.bodies[body].conns[conn].port & UNSIZED > 0 {
            return Ok(());
        }
        if width == 0 {
            // nobody said how wide this port is: as wide as what it is first tied to
            let share = if is_array && bits.is_multiple_of(members) { bits / members } else { bits };
            self.masters[inst.master as usize].ports[number].width = u32::try_from(share).unwrap_or(u32::MAX);
            return Ok(());
        }
        if bits == width || is_array && width.checked_mul(members) == Some(bits) {
            return Ok(());
        }
        let port = self.names.get(self.ports(inst.master)[number].name);
        let found = format!("port `{port}` has {width} bits and is tied to {bits}");
        Err(self.at_inst(body, inst, &found, "want as many bits on both sides"))
    }

    fn lay_out(&mut self) {
        for master in &mut self.masters {
            for port in &mut master.ports {
                port.width = port.width.max(1);
                port.first = master.pins;
                master.pins = master.pins.saturating_add(port.width);
            }
            master.ports.shrink_to_fit();
        }
    }

    /// Checks that everything can be numbered before anything is laid out.
    fn check_size(&self, order: &[usize]) -> Result<(), ReadError> {
        let mut sizes: FxHashMap<usize, Size> = FxHashMap::default();
        for &b in order {
            let body = &self.bodies[b];
            let mut size = Size { scopes: 1, nets: u64::from(body.nets), ..Size::default() };
            let mut array = 0;
            for (i, inst) in body.insts.iter().enumerate() {
                let mut times = 1;
                if let Some((_, first, last)) = body.arrays.get(array).filter(|a| a.0 as usize == i) {
                    times = first.abs_diff(*last) + 1;
                    array += 1;
                }
                let one = if inst.master & CHILD > 0 {
                    sizes.get(&((inst.master & !CHILD) as usize)).copied().unwrap_or_default()
                } else {
                    let pins = u64::from(self.masters[inst.master as usize].pins);
                    Size { instances: 1, pins, ..Size::default() }
                };
                let add = |sum: &mut u64, n: u64| *sum = sum.saturating_add(n.saturating_mul(times));
                add(&mut size.instances, one.instances);
                add(&mut size.pins, one.pins);
                add(&mut size.scopes, one.scopes);
                add(&mut size.nets, one.nets);
            }
            let most = self.options.max_instances.min(MAX_COUNT);
            for (name, n, limit) in [
                ("number of instances", size.instances, most),
                ("number of module instances", size.scopes, most),
                ("number of pins", size.pins, MAX_COUNT),
                ("number of nets", size.nets, MAX_COUNT),
            ] {
                if n > limit {
                    return Err(ReadError::Range {
                        at: body.at.clone(),
                        name: name.into(),
                        value: format!("{n} in module `{}`", self.name(b)),
                        wanted: format!("want at most {limit} to connect; a count has no such limit"),
                    });
                }
            }
            sizes.insert(b, size);
        }
        Ok(())
    }

    fn flatten(mut self, top: usize, order: &[usize]) -> Connected {
        let mut shape_of = vec![u32::MAX; self.bodies.len()];
        let mut shapes = Vec::with_capacity(order.len());
        for &b in order {
            shape_of[b] = short(shapes.len());
            shapes.push(self.shape(b));
        }
        for shape in &mut shapes {
            for child in &mut shape.children {
                child.module = shape_of[child.module as usize];
            }
        }
        let mut flat = Flat::default();
        flat.join.new_nets(RESERVED);
        flat.owners.resize(RESERVED as usize, (0, 0));
        flat.push(top, &self.bodies[top], Scope { module: shape_of[top], ..Scope::ROOT });
        let mut k = 0;
        while k < flat.scopes.len() {
            let b = flat.bodies[k] as usize;
            flat.fill(k, &self.bodies, b, &self.masters, &shape_of);
            k += 1;
        }
        let ports: Vec<(u32, Option<Direction>)> = self.bodies[top]
            .ports
            .iter()
            .flat_map(|p| {
                let Decl { base, .. } = self.bodies[top].decls[p.decl];
                let width = self.bodies[top].decls[p.decl].width();
                (base..base + width).map(|bit| (bit, p.direction))
            })
            .collect();
        self.names.shrink();
        Connected::new(self.names, self.masters, shapes, flat, &ports)
    }

    /// What stays of a module: the names in it.
    fn shape(&mut self, b: usize) -> Shape {
        let body = &mut self.bodies[b];
        let mut shape = Shape { name: body.name, decls: std::mem::take(&mut body.decls), ..Shape::default() };
        let mut array = 0;
        let mut first = 0u32;
        for (i, inst) in body.insts.iter().enumerate() {
            let range = body.arrays.get(array).filter(|a| a.0 as usize == i).map(|a| (a.1, a.2));
            array += usize::from(range.is_some());
            let members = range.map_or(1, |(a, b)| u32::try_from(a.abs_diff(b) + 1).unwrap_or(u32::MAX));
            let number = if inst.master & CHILD > 0 {
                let module = inst.master & !CHILD;
                shape.children.push(ChildEntry {
                    name: inst.name,
                    module,
                    child: short(shape.child_count()),
                });
                shape.grow_children(members);
                CHILD | short(shape.children.len() - 1)
            } else {
                shape.leaves.push(LeafEntry { name: inst.name, first });
                first = first.saturating_add(members);
                short(shape.leaves.len() - 1)
            };
            if let Some(range) = range {
                shape.arrays.push((number, range.0, range.1));
            }
            shape.by_name.push((inst.name, number));
        }
        shape.finish();
        // the bodies still need their declarations
        body.decls.clone_from(&shape.decls);
        shape
    }
}

/// The graph while it is laid out.
#[derive(Default)]
pub(super) struct Flat {
    pub(super) scopes: Vec<Scope>,
    /// The body of each scope.
    bodies: Vec<u32>,
    pub(super) wires: Vec<u32>,
    pub(super) join: Join,
    /// Scope and local number of each net.
    pub(super) owners: Vec<(u32, u32)>,
    pub(super) masters: Vec<u32>,
    pub(super) starts: Vec<u32>,
    pub(super) pins: Vec<u32>,
    /// Scopes in which zero and one are tied together.
    pub(super) shorts: Vec<u32>,
}

impl Flat {
    /// Adds a scope whose ports are tied to nothing yet.
    fn push(&mut self, body: usize, of: &Body, scope: Scope) -> usize {
        let wire_start = short(self.wires.len());
        self.wires.extend([ZERO, ONE, UNKNOWN, FLOATING]);
        self.wires.resize(wire_start as usize + of.nets as usize, OPEN);
        self.scopes.push(Scope { wire_start, ..scope });
        self.bodies.push(short(body));
        self.scopes.len() - 1
    }

    fn fill(&mut self, k: usize, bodies: &[Body], b: usize, masters: &[Master], shape_of: &[u32]) {
        let body = &bodies[b];
        let start = self.scopes[k].wire_start as usize;
        self.scopes[k].inst_start = short(self.masters.len());
        self.scopes[k].child_start = short(self.scopes.len());
        for local in RESERVED..body.nets {
            let wire = &mut self.wires[start + local as usize];
            if *wire == OPEN {
                *wire = self.join.new_nets(1);
                self.owners.push((short(k), local));
            }
        }
        for &(a, b) in &body.aliases {
            if a == FLOATING || b == FLOATING {
                continue;
            }
            let (a, b) = (self.wires[start + a as usize], self.wires[start + b as usize]);
            if !self.join.join(a, b) {
                self.shorts.push(short(k));
            }
        }
        let mut array = 0;
        for (i, inst) in body.insts.iter().enumerate() {
            let is_array = body.arrays.get(array).is_some_and(|a| a.0 as usize == i);
            let members = if is_array {
                let (_, first, last) = body.arrays[array];
                array += 1;
                usize::try_from(first.abs_diff(last) + 1).unwrap_or(usize::MAX)
            } else {
                1
            };
            for member in 0..members {
                if inst.master & CHILD > 0 {
                    let child = (inst.master & !CHILD) as usize;
                    let scope = Scope { module: shape_of[child], parent: short(k), ..Scope::ROOT };
                    let new = self.push(child, &bodies[child], scope);
                    let target = self.scopes[new].wire_start as usize;
                    for c in body.conns_of(i) {
                        let port = (body.conns[c].port & PORT) as usize;
                        let decl = bodies[child].decls[bodies[child].ports[port].decl];
                        let width = decl.width() as usize;
                        self.tie(body, start, c, member, width, |flat, n, net| {
                            let at = target + decl.base as usize + n;
                            match flat.wires[at] {
                                OPEN => flat.wires[at] = net,
                                other => {
                                    if !flat.join.join(other, net) {
                                        flat.shorts.push(short(k));
                                    }
                                }
                            }
                        });
                    }
                } else {
                    let master = &masters[inst.master as usize];
                    let first = self.pins.len();
                    self.masters.push(inst.master);
                    self.starts.push(short(first));
                    self.pins.resize(first + master.pins as usize, OPEN);
                    for c in body.conns_of(i) {
                        let port = &master.ports[(body.conns[c].port & PORT) as usize];
                        let at = first + port.first as usize;
                        self.tie(body, start, c, member, port.width as usize, |flat, n, net| {
                            flat.pins[at + n] = net;
                        });
                    }
                }
            }
        }
    }

    /// Gives the net of each bit of a port.
    #[inline]
    fn tie(
        &mut self,
        body: &Body,
        start: usize,
        conn: usize,
        member: usize,
        width: usize,
        mut each: impl FnMut(&mut Self, usize, u32),
    ) {
        let bits = body.bits_of(conn);
        if let (1, [bit]) = (width, bits) {
            let net = self.wires[start + *bit as usize];
            return each(self, 0, net);
        }
        let adapted;
        let bits = if body.conns[conn].port & UNSIZED > 0 {
            adapted = fitted(bits, width);
            &adapted[..]
        } else if bits.len() > width {
            bits.get(member * width..(member + 1) * width).unwrap_or_default()
        } else {
            bits
        };
        for (n, &bit) in bits.iter().enumerate() {
            let net = self.wires[start + bit as usize];
            each(self, n, net);
        }
    }
}
