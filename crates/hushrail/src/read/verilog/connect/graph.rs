//! The graph of leaf cells and nets, and its names, which stay in their modules.

use super::body::{Decl, RESERVED};
use super::link::Flat;
use super::names::Names;
use super::ports::Direction;
use crate::read::counts::InstanceCounts;
use crate::read::deck::Note;
use crate::read::verilog::elaborate::pieces;

/// Marks the number of a module among those of leaf cells.
pub(super) const CHILD: u32 = 1 << 31;
/// A pin tied to nothing.
pub(super) const OPEN: u32 = u32::MAX;
/// Nets named one by one in notes.
const MAX_NOTES: usize = 20;

#[derive(Debug, Clone)]
pub(super) struct MasterPort {
    pub(super) name: u32,
    pub(super) direction: Option<Direction>,
    pub(super) width: u32,
    /// Its first pin among those of the master.
    pub(super) first: u32,
}

#[derive(Debug, Clone)]
pub(super) struct Master {
    pub(super) name: u32,
    pub(super) ports: Vec<MasterPort>,
    pub(super) pins: u32,
    /// Whether its ports were given.
    pub(super) known: bool,
    pub(super) is_gate: bool,
}

#[derive(Debug, Clone, Copy)]
pub(super) struct LeafEntry {
    pub(super) name: u32,
    /// Leaf cells of the module before this one.
    pub(super) first: u32,
}

#[derive(Debug, Clone, Copy)]
pub(super) struct ChildEntry {
    pub(super) name: u32,
    pub(super) module: u32,
    /// Module instances of the module before this one.
    pub(super) child: u32,
}

/// The names in a module.
#[derive(Debug, Clone, Default)]
pub(super) struct Shape {
    pub(super) name: u32,
    pub(super) decls: Vec<Decl>,
    pub(super) leaves: Vec<LeafEntry>,
    pub(super) children: Vec<ChildEntry>,
    /// Ends of arrays by number of the entry, marked when it is a module's.
    pub(super) arrays: Vec<(u32, i64, i64)>,
    /// Entries by name.
    pub(super) by_name: Vec<(u32, u32)>,
    pub(super) nets_by_name: Vec<u32>,
    pub(super) child_total: u32,
}

impl Shape {
    pub(super) fn child_count(&self) -> usize {
        self.child_total as usize
    }

    pub(super) fn grow_children(&mut self, members: u32) {
        self.child_total = self.child_total.saturating_add(members);
    }

    pub(super) fn finish(&mut self) {
        self.by_name.sort_unstable();
        self.arrays.sort_unstable();
        self.nets_by_name = (0..u32::try_from(self.decls.len()).unwrap_or(u32::MAX)).collect();
        let decls = &self.decls;
        self.nets_by_name.sort_unstable_by_key(|&d| decls[d as usize].name);
        self.by_name.shrink_to_fit();
        self.arrays.shrink_to_fit();
        self.leaves.shrink_to_fit();
        self.children.shrink_to_fit();
        self.decls.shrink_to_fit();
    }

    fn entry(&self, name: u32) -> Option<u32> {
        let at = self.by_name.partition_point(|e| e.0 < name);
        self.by_name.get(at).filter(|e| e.0 == name).map(|e| e.1)
    }

    fn decl(&self, name: u32) -> Option<Decl> {
        let at = self.nets_by_name.partition_point(|&d| self.decls[d as usize].name < name);
        let decl = self.decls[*self.nets_by_name.get(at)? as usize];
        (decl.name == name).then_some(decl)
    }

    fn range(&self, entry: u32) -> Option<(i64, i64)> {
        let at = self.arrays.partition_point(|a| a.0 < entry);
        self.arrays.get(at).filter(|a| a.0 == entry).map(|a| (a.1, a.2))
    }

    /// The declaration of a net of the module and the net's index in it.
    fn decl_of(&self, local: u32) -> Option<Decl> {
        let at = self.decls.partition_point(|d| d.base <= local).checked_sub(1)?;
        self.decls.get(at).copied()
    }

    fn heap_bytes(&self) -> usize {
        self.decls.capacity() * size_of::<Decl>()
            + self.leaves.capacity() * size_of::<LeafEntry>()
            + self.children.capacity() * size_of::<ChildEntry>()
            + self.arrays.capacity() * size_of::<(u32, i64, i64)>()
            + self.by_name.capacity() * size_of::<(u32, u32)>()
            + self.nets_by_name.capacity() * 4
    }
}

/// An instance of a module.
#[derive(Debug, Clone, Copy)]
pub(super) struct Scope {
    pub(super) module: u32,
    pub(super) parent: u32,
    /// Its first leaf cell; those of one scope stand together.
    pub(super) inst_start: u32,
    /// Its first child scope; they stand together too.
    pub(super) child_start: u32,
    pub(super) wire_start: u32,
}

impl Scope {
    pub(super) const ROOT: Self =
        Self { module: 0, parent: OPEN, inst_start: 0, child_start: 0, wire_start: 0 };
}

/// A net of the flat graph. The first four are constants, see [`NetId::ZERO`] and its neighbours.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct NetId(pub u32);

impl NetId {
    /// Everything tied to low: `1'b0`, `supply0`.
    pub const ZERO: Self = Self(0);
    /// Everything tied to high: `1'b1`, `supply1`.
    pub const ONE: Self = Self(1);
    /// Everything tied to `1'bx`.
    pub const UNKNOWN: Self = Self(2);
    /// Pins tied to `1'bz`: no drive, and no connection among them.
    pub const FLOATING: Self = Self(3);
    /// What [`Connected::pins`] holds for a pin that is left open.
    pub const OPEN: Self = Self(OPEN);

    /// Whether this is one of the constants.
    pub fn is_constant(self) -> bool {
        self.0 < RESERVED
    }
}

/// A leaf cell of the flat graph.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct InstanceId(pub u32);

/// A kind of leaf cell.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct MasterId(pub u32);

/// A port of a kind of leaf cell and where its pins are.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct CellPort<'a> {
    /// Its name; a number from one for a port known by position only.
    pub name: &'a str,
    /// Which way values go; nothing when nobody said.
    pub direction: Option<Direction>,
    /// How many pins it has, leftmost bit first.
    pub width: usize,
    /// The first of them in [`Connected::pins`].
    pub first: usize,
}

/// Leaf cells, nets and which pins meet where, through the whole hierarchy.
///
/// Made by [`connect`](super::connect). Instances, nets and masters are numbered from zero; see the module's
/// documentation for how they are laid out.
#[derive(Debug, Clone)]
pub struct Connected {
    names: Names,
    masters: Vec<Master>,
    shapes: Vec<Shape>,
    scopes: Vec<Scope>,
    /// The net of each local net of each scope.
    wires: Vec<u32>,
    master_of: Vec<u32>,
    /// First pins, with one more at the end.
    pin_starts: Vec<u32>,
    pins: Vec<NetId>,
    instance_of_pin: Vec<InstanceId>,
    /// Where the pins of each net begin in `net_pins`, with one more at the end.
    net_starts: Vec<u32>,
    net_pins: Vec<u32>,
    /// Scope and local number that a net is named after.
    owners: Vec<(u32, u32)>,
    ports: Vec<(NetId, Option<Direction>)>,
    notes: Vec<Note>,
}

fn short(n: usize) -> u32 {
    u32::try_from(n).unwrap_or(u32::MAX)
}

impl Connected {
    pub(super) fn new(
        names: Names,
        masters: Vec<Master>,
        shapes: Vec<Shape>,
        flat: Flat,
        ports: &[(u32, Option<Direction>)],
    ) -> Self {
        let (new, old) = flat.join.numbered();
        let to_net = |n: u32| if n == OPEN { OPEN } else { new[n as usize] };
        let mut wires = flat.wires;
        for wire in &mut wires {
            *wire = to_net(*wire);
        }
        wires.shrink_to_fit();
        let mut pins: Vec<NetId> = flat.pins.iter().map(|&n| NetId(to_net(n))).collect();
        pins.shrink_to_fit();
        let mut pin_starts = flat.starts;
        pin_starts.push(short(pins.len()));
        pin_starts.shrink_to_fit();
        let owners: Vec<(u32, u32)> = old.iter().map(|&n| flat.owners[n as usize]).collect();
        let mut net_starts = vec![0u32; owners.len() + 1];
        for net in pins.iter().filter(|n| n.0 != OPEN) {
            net_starts[net.0 as usize + 1] += 1;
        }
        for i in 1..net_starts.len() {
            net_starts[i] += net_starts[i - 1];
        }
        let mut next = net_starts.clone();
        let total = net_starts.last().map_or(0, |&n| n as usize);
        let mut net_pins = vec![0u32; total];
        let mut instance_of_pin = Vec::with_capacity(pins.len());
        for (i, ends) in pin_starts.windows(2).enumerate() {
            for pin in ends[0]..ends[1] {
                instance_of_pin.push(InstanceId(short(i)));
                let net = pins[pin as usize].0;
                if net != OPEN {
                    net_pins[next[net as usize] as usize] = pin;
                    next[net as usize] += 1;
                }
            }
        }
        let (mut scopes, mut master_of) = (flat.scopes, flat.masters);
        scopes.shrink_to_fit();
        master_of.shrink_to_fit();
        let ports = ports.iter().map(|&(local, d)| (NetId(wires[local as usize]), d)).collect();
        let mut out = Self {
            names,
            masters,
            shapes,
            scopes,
            wires,
            master_of,
            pin_starts,
            pins,
            instance_of_pin,
            net_starts,
            net_pins,
            owners,
            ports,
            notes: Vec::new(),
        };
        out.notes = out.remarks(&flat.shorts);
        out
    }

    /// The name of the top module.
    pub fn top(&self) -> &str {
        self.scopes.first().map_or("", |s| self.names.get(self.shapes[s.module as usize].name))
    }

    /// How many leaf cells there are.
    pub fn instance_count(&self) -> usize {
        self.master_of.len()
    }

    /// How many nets there are, the four constants among them.
    pub fn net_count(&self) -> usize {
        self.owners.len()
    }

    /// How many pins the leaf cells have, open ones among them.
    pub fn pin_count(&self) -> usize {
        self.pins.len()
    }

    /// How many kinds of leaf cells there are.
    pub fn master_count(&self) -> usize {
        self.masters.len()
    }

    /// All leaf cells.
    pub fn instances(&self) -> impl Iterator<Item = InstanceId> + use<> {
        (0..short(self.master_of.len())).map(InstanceId)
    }

    /// All nets, the four constants first.
    pub fn nets(&self) -> impl Iterator<Item = NetId> + use<> {
        (0..short(self.owners.len())).map(NetId)
    }

    /// What a leaf cell is.
    pub fn master(&self, instance: InstanceId) -> MasterId {
        MasterId(self.master_of[instance.0 as usize])
    }

    /// The name of a kind of leaf cell.
    pub fn master_name(&self, master: MasterId) -> &str {
        self.names.get(self.masters[master.0 as usize].name)
    }

    /// The kind of leaf cell of a name.
    pub fn master_named(&self, name: &str) -> Option<MasterId> {
        let id = self.names.find(name)?;
        self.masters.iter().position(|m| m.name == id).map(|m| MasterId(short(m)))
    }

    /// The ports of a kind of leaf cell, in the order of its pins.
    pub fn ports_of(&self, master: MasterId) -> impl Iterator<Item = CellPort<'_>> {
        self.masters[master.0 as usize].ports.iter().map(|p| CellPort {
            name: self.names.get(p.name),
            direction: p.direction,
            width: p.width as usize,
            first: p.first as usize,
        })
    }

    /// The nets at the pins of a leaf cell, in the order of [`Connected::ports_of`] its master;
    /// [`NetId::OPEN`] where there is none.
    pub fn pins(&self, instance: InstanceId) -> &[NetId] {
        let i = instance.0 as usize;
        &self.pins[self.pin_starts[i] as usize..self.pin_starts[i + 1] as usize]
    }

    /// The pins at a net: leaf cell and position among its pins; none for [`NetId::OPEN`].
    pub fn net_pins(&self, net: NetId) -> impl Iterator<Item = (InstanceId, usize)> {
        let n = net.0 as usize;
        let ends = self.net_starts.get(n).zip(self.net_starts.get(n.saturating_add(1)));
        let pins = ends.map_or(&[][..], |(&a, &b)| &self.net_pins[a as usize..b as usize]);
        pins.iter().map(|&pin| {
            let instance = self.instance_of_pin[pin as usize];
            (instance, (pin - self.pin_starts[instance.0 as usize]) as usize)
        })
    }

    /// The nets at the ports of the top module, bit by bit, with their directions.
    pub fn top_ports(&self) -> &[(NetId, Option<Direction>)] {
        &self.ports
    }

    /// What is unusual: nets without a driver, with several, ties of zero to one.
    pub fn notes(&self) -> &[Note] {
        &self.notes
    }

    /// How many leaf cells there are of each kind, in the order in which kinds were first seen.
    pub fn counts(&self) -> InstanceCounts {
        let mut counts = vec![0u64; self.masters.len()];
        for &m in &self.master_of {
            counts[m as usize] += 1;
        }
        let mut out = InstanceCounts { top: self.top().to_owned(), ..InstanceCounts::default() };
        for (master, n) in self.masters.iter().zip(counts).filter(|&(_, n)| n > 0) {
            out.add(self.names.get(master.name), n);
        }
        out
    }

    /// The path of a leaf cell from the top, names joined by `/`, members of arrays as `name[3]`.
    pub fn instance_path(&self, instance: InstanceId) -> String {
        let scope = self.scopes.partition_point(|s| s.inst_start <= instance.0).saturating_sub(1);
        // scopes without a leaf share their start with the one after them, which is the one that holds it
        let mut out = self.scope_path(scope);
        let shape = &self.shapes[self.scopes[scope].module as usize];
        let local = instance.0 - self.scopes[scope].inst_start;
        let at = shape.leaves.partition_point(|l| l.first <= local).saturating_sub(1);
        if let Some(leaf) = shape.leaves.get(at) {
            out.push_str(self.names.get(leaf.name));
            push_member(&mut out, shape.range(short(at)), local - leaf.first);
        }
        out
    }

    /// The path of a scope with a separator at its end; nothing for the top.
    fn scope_path(&self, scope: usize) -> String {
        let mut chain = Vec::new();
        let mut at = scope;
        while let Some(parent) = self.scopes.get(self.scopes[at].parent as usize) {
            chain.push((at, parent));
            at = self.scopes[at].parent as usize;
        }
        let mut out = String::new();
        for (scope, parent) in chain.into_iter().rev() {
            let shape = &self.shapes[parent.module as usize];
            let local = short(scope) - parent.child_start;
            let entry = shape.children.partition_point(|c| c.child <= local).saturating_sub(1);
            if let Some(child) = shape.children.get(entry) {
                out.push_str(self.names.get(child.name));
                push_member(&mut out, shape.range(CHILD | short(entry)), local - child.child);
            }
            out.push('/');
        }
        out
    }

    /// The uppermost path of a net, `a/b/n[3]`; `1'b0` and so on for constants.
    pub fn net_path(&self, net: NetId) -> String {
        if let Some(constant) = ["1'b0", "1'b1", "1'bx", "1'bz"].get(net.0 as usize) {
            return (*constant).to_owned();
        }
        let Some(&(scope, local)) = self.owners.get(net.0 as usize) else { return String::new() };
        let mut out = self.scope_path(scope as usize);
        let shape = &self.shapes[self.scopes[scope as usize].module as usize];
        if let Some(decl) = shape.decl_of(local) {
            out.push_str(self.names.get(decl.name));
            if decl.width() > 1 || decl.left != 0 {
                out.push('[');
                out.push_str(&decl.index(local).to_string());
                out.push(']');
            }
        }
        out
    }

    /// The leaf cell at a path from the top.
    ///
    /// Names are separated by `/` or `.`; where a name holds such a character itself, the longest that exists is
    /// taken. A member of an array is `name[3]`.
    pub fn instance(&self, path: &str) -> Option<InstanceId> {
        self.search(path, |scope, name| {
            let (entry, member) = self.entry(scope, name)?;
            if entry & CHILD > 0 {
                return None;
            }
            let shape = &self.shapes[self.scopes[scope].module as usize];
            let local = shape.leaves[entry as usize].first + member;
            Some(InstanceId(self.scopes[scope].inst_start + local))
        })
    }

    /// The net at a path from the top; a bit of a vector is `name[3]`. Paths as in [`Connected::instance`].
    pub fn net(&self, path: &str) -> Option<NetId> {
        self.search(path, |scope, name| {
            let shape = &self.shapes[self.scopes[scope].module as usize];
            let whole = self.names.find(name).and_then(|id| shape.decl(id));
            let local = if let Some(decl) = whole.filter(|d| d.width() == 1) {
                decl.base
            } else {
                let (vector, index) = indexed(name)?;
                shape.decl(self.names.find(vector)?)?.bit(index)?
            };
            Some(NetId(self.wires[(self.scopes[scope].wire_start + local) as usize]))
        })
    }

    /// All leaf cells under the module instance at a path, in order; the empty path is the top. Nothing when there is
    /// no such instance.
    pub fn instances_under(&self, path: &str) -> Option<Vec<InstanceId>> {
        let root =
            if path.is_empty() { 0 } else { self.search(path, |scope, name| self.child_scope(scope, name))? };
        let mut out = Vec::new();
        let mut inside = vec![false; self.scopes.len()];
        for (k, scope) in self.scopes.iter().enumerate().skip(root) {
            inside[k] = k == root || inside.get(scope.parent as usize).copied().unwrap_or_default();
            if inside[k] {
                let end = self.scopes.get(k + 1).map_or(short(self.master_of.len()), |s| s.inst_start);
                out.extend((scope.inst_start..end).map(InstanceId));
            }
        }
        Some(out)
    }

    /// The paths of all module instances below the top, level by level.
    pub fn module_instances(&self) -> impl Iterator<Item = String> {
        (1..self.scopes.len()).map(|scope| {
            let mut path = self.scope_path(scope);
            path.pop();
            path
        })
    }

    /// The names of the nets in the module instance at a path, ports among them, bit by bit; the empty path is the
    /// top. Nothing when there is no such instance.
    pub fn nets_in(&self, path: &str) -> Option<Vec<String>> {
        let scope =
            if path.is_empty() { 0 } else { self.search(path, |scope, name| self.child_scope(scope, name))? };
        let shape = &self.shapes[self.scopes[scope].module as usize];
        let mut out = Vec::new();
        for decl in &shape.decls {
            let name = self.names.get(decl.name);
            if decl.width() == 1 {
                out.push(name.to_owned());
            } else {
                out.extend(
                    (decl.base..decl.base + decl.width()).map(|l| format!("{name}[{}]", decl.index(l))),
                );
            }
        }
        Some(out)
    }

    /// Number and member of what a name stands for among the instances of a scope.
    fn entry(&self, scope: usize, name: &str) -> Option<(u32, u32)> {
        let shape = &self.shapes[self.scopes[scope].module as usize];
        let whole = self.names.find(name).and_then(|id| shape.entry(id));
        if let Some(entry) = whole.filter(|&e| shape.range(e).is_none()) {
            return Some((entry, 0));
        }
        let (array, index) = indexed(name)?;
        let entry = shape.entry(self.names.find(array)?)?;
        let (first, last) = shape.range(entry)?;
        let inside = (first.min(last)..=first.max(last)).contains(&index);
        inside.then(|| u32::try_from(first.abs_diff(index)).ok().map(|m| (entry, m))).flatten()
    }

    fn child_scope(&self, scope: usize, name: &str) -> Option<usize> {
        let (entry, member) = self.entry(scope, name).filter(|e| e.0 & CHILD > 0)?;
        let shape = &self.shapes[self.scopes[scope].module as usize];
        let child = shape.children[(entry & !CHILD) as usize].child + member;
        Some((self.scopes[scope].child_start + child) as usize)
    }

    /// Walks down a path to its last name, which `at_end` looks up.
    fn search<T>(&self, path: &str, at_end: impl Fn(usize, &str) -> Option<T>) -> Option<T> {
        let path = path.strip_prefix(['/', '.']).unwrap_or(path);
        let mut open = vec![(0usize, 0usize)];
        let mut tried = rustc_hash::FxHashSet::default();
        while let Some((scope, offset)) = open.pop() {
            if !tried.insert((scope, offset)) {
                continue;
            }
            let rest = path.get(offset..).filter(|r| !r.is_empty())?;
            // shortest first, so that the longest is tried first
            for (name, used) in pieces(rest) {
                if offset + used >= path.len() {
                    if let Some(found) = at_end(scope, name) {
                        return Some(found);
                    }
                } else if let Some(child) = self.child_scope(scope, name) {
                    open.push((child, offset + used));
                }
            }
        }
        None
    }

    fn remarks(&self, shorts: &[u32]) -> Vec<Note> {
        let mut notes = Vec::new();
        for &scope in shorts.iter().take(MAX_NOTES) {
            let path = self.scope_path(scope as usize);
            let place = if path.is_empty() { "the top" } else { path.trim_end_matches('/') };
            Note::new(
                "tied-to-both",
                format!("in {place} one net is tied to zero and to one; each keeps its own"),
            )
            .add_once(&mut notes);
        }
        // drivers, listeners and pins of unknown direction at each net
        let mut ends = vec![(0u32, 0u32, 0u32); self.owners.len()];
        let mut add = |net: NetId, direction: Option<Direction>| {
            if let Some(end) = ends.get_mut(net.0 as usize) {
                match direction {
                    Some(Direction::Output) => end.0 += 1,
                    Some(Direction::Input) => end.1 += 1,
                    _ => end.2 += 1,
                }
            }
        };
        for instance in self.instances() {
            let pins = self.pins(instance);
            for port in &self.masters[self.master_of[instance.0 as usize] as usize].ports {
                for pin in port.first..port.first + port.width {
                    add(pins[pin as usize], port.direction);
                }
            }
        }
        for &(net, direction) in &self.ports {
            // seen from inside, what comes in is a driver
            add(
                net,
                direction.map(|d| match d {
                    Direction::Input => Direction::Output,
                    Direction::Output => Direction::Input,
                    Direction::Inout => Direction::Inout,
                }),
            );
        }
        let (mut undriven, mut multiple) = (0usize, 0usize);
        for net in self.nets() {
            let (drivers, listeners, others) = ends[net.0 as usize];
            let drivers = drivers + u32::from(net == NetId::ZERO || net == NetId::ONE);
            if drivers > 1 {
                multiple += 1;
                if multiple <= MAX_NOTES {
                    let text = format!("net `{}` has {drivers} drivers", self.net_path(net));
                    notes.push(Note::new("multiply-driven-net", text));
                }
            } else if drivers == 0 && others == 0 && listeners > 0 && !net.is_constant() {
                undriven += 1;
                if undriven <= MAX_NOTES {
                    let text = format!(
                        "net `{}` has no driver and {listeners} pins that listen",
                        self.net_path(net)
                    );
                    notes.push(Note::new("undriven-net", text));
                }
            }
        }
        for (code, what, n) in
            [("multiply-driven-net", "several drivers", multiple), ("undriven-net", "no driver", undriven)]
        {
            if n > MAX_NOTES {
                notes.push(Note::new(code, format!("{} more nets have {what}", n - MAX_NOTES)));
            }
        }
        notes
    }

    /// Bytes of memory that all this takes, names among them.
    pub fn heap_bytes(&self) -> usize {
        let masters: usize = self
            .masters
            .iter()
            .map(|m| size_of::<Master>() + m.ports.capacity() * size_of::<MasterPort>())
            .sum();
        let shapes: usize = self.shapes.iter().map(|s| size_of::<Shape>() + s.heap_bytes()).sum();
        let numbers = self.wires.capacity()
            + self.master_of.capacity()
            + self.pin_starts.capacity()
            + self.pins.capacity()
            + self.instance_of_pin.capacity()
            + self.net_starts.capacity()
            + self.net_pins.capacity()
            + 2 * self.owners.capacity();
        let notes: usize =
            self.notes.iter().map(|n| size_of::<Note>() + n.code.capacity() + n.text.capacity()).sum();
        self.names.heap_bytes()
            + masters
            + shapes
            + self.scopes.capacity() * size_of::<Scope>()
            + 4 * numbers
            + self.ports.capacity() * size_of::<(NetId, Option<Direction>)>()
            + notes
    }

    /// [`Connected::heap_bytes`] for each pin.
    pub fn bytes_per_pin(&self) -> f64 {
        self.heap_bytes() as f64 / self.pins.len().max(1) as f64
    }
}

fn push_member(out: &mut String, range: Option<(i64, i64)>, member: u32) {
    if let Some((first, last)) = range {
        let n = i64::from(member);
        let index = if first > last { first - n } else { first + n };
        out.push('[');
        out.push_str(&index.to_string());
        out.push(']');
    }
}

/// `name[3]` taken apart.
fn indexed(name: &str) -> Option<(&str, i64)> {
    let (array, index) = name.strip_suffix(']')?.rsplit_once('[')?;
    Some((array.trim_end(), index.trim().parse().ok()?))
}
