//! Modules to counts: the hierarchy below a top module, whole, at a path, or split by paths.

use indexmap::IndexMap;
use rustc_hash::{FxBuildHasher, FxHashMap, FxHashSet};

use super::{Child, Netlist, too_many, width};
use crate::read::counts::InstanceCounts;
use crate::read::source::{ReadError, nearest};

/// Leaf masters and their counts, in first-seen order.
type Leaves = IndexMap<usize, u64, FxBuildHasher>;

/// An instance found by its path.
struct Found {
    /// From the top: which child, and which member of it when it is an array and one is named.
    steps: Vec<(usize, Option<i64>)>,
    /// The module it is an instance of.
    module: usize,
    /// How many there are of it, through the arrays above.
    times: u64,
}

impl Netlist {
    /// Names of all modules in order of definition, black boxes included.
    pub fn modules(&self) -> impl Iterator<Item = &str> {
        self.modules.iter().map(|m| &*self.names[m.name])
    }

    /// Names of the modules that nobody instantiates, in order of definition.
    ///
    /// Black boxes are left out unless there is nothing else: a library may declare cells that a design lacks.
    pub fn tops(&self) -> Vec<&str> {
        self.top_modules().into_iter().map(|m| &*self.names[self.modules[m].name]).collect()
    }

    /// Counts of leaf masters under `top`, or under the only possible top module when it is left out.
    ///
    /// # Errors
    /// There are several tops to choose from; `top` is not defined; a module contains itself; the number of
    /// instances passes `u64::MAX`; there is no instance at all.
    pub fn counts(&self, top: Option<&str>) -> Result<InstanceCounts, ReadError> {
        let top = self.top(top)?;
        let leaves = self.whole(top)?;
        Ok(self.named(top, &leaves))
    }

    /// Counts of leaf masters under the instance at `path`, seen from the top module.
    ///
    /// Names are separated by `/` or `.`; where an escaped name holds such a character itself, the longest name
    /// that exists is taken. An array stands for all its members, `bank[3]` for one. Only instances of modules
    /// with a body can be named. The empty path is the whole design. `top` of the result is the module at the
    /// path.
    ///
    /// # Errors
    /// As for [`Netlist::counts`], and there is no such instance.
    pub fn counts_under(&self, top: Option<&str>, path: &str) -> Result<InstanceCounts, ReadError> {
        let top = self.top(top)?;
        self.whole(top)?;
        let found = self.find(top, path)?;
        Ok(self.named(found.module, &self.leaves(found.module, found.times)?))
    }

    /// Counts under each of `paths`, and of the rest of the design outside all of them.
    ///
    /// Paths as in [`Netlist::counts_under`]. Parts and rest add up to [`Netlist::counts`].
    ///
    /// # Errors
    /// As for [`Netlist::counts_under`], and two paths share instances.
    pub fn counts_split(
        &self,
        top: Option<&str>,
        paths: &[&str],
    ) -> Result<(Vec<InstanceCounts>, InstanceCounts), ReadError> {
        let top = self.top(top)?;
        let mut rest = self.whole(top)?;
        let found = paths.iter().map(|path| self.find(top, path)).collect::<Result<Vec<_>, _>>()?;
        self.check_apart(top, paths, &found)?;
        let mut parts = Vec::with_capacity(found.len());
        for part in &found {
            let leaves = self.leaves(part.module, part.times)?;
            for (master, count) in &leaves {
                if let Some(left) = rest.get_mut(master) {
                    *left = left.saturating_sub(*count);
                }
            }
            parts.push(self.named(part.module, &leaves));
        }
        rest.retain(|_, &mut left| left > 0);
        Ok((parts, self.named(top, &rest)))
    }

    /// The module of a master when it has a body.
    fn body(&self, master: usize) -> Option<usize> {
        self.defined.get(&master).copied().filter(|&m| !self.modules[m].is_black_box())
    }

    fn name_of(&self, module: usize) -> &str {
        &self.names[self.modules[module].name]
    }

    fn named(&self, top: usize, leaves: &Leaves) -> InstanceCounts {
        InstanceCounts {
            top: self.name_of(top).to_owned(),
            counts: leaves.iter().map(|(&master, &n)| (self.names[master].to_string(), n)).collect(),
        }
    }

    fn top_modules(&self) -> Vec<usize> {
        let used: FxHashSet<usize> = self.modules.iter().flat_map(|m| m.cells.keys().copied()).collect();
        let mut tops: Vec<usize> =
            (0..self.modules.len()).filter(|&m| !used.contains(&self.modules[m].name)).collect();
        if tops.iter().any(|&m| !self.modules[m].is_black_box()) {
            tops.retain(|&m| !self.modules[m].is_black_box());
        }
        tops
    }

    fn top(&self, name: Option<&str>) -> Result<usize, ReadError> {
        if let Some(name) = name {
            let found = self.names.get_index_of(name).and_then(|id| self.defined.get(&id));
            return found.copied().ok_or_else(|| ReadError::Unknown {
                at: self.modules[0].at.clone(),
                kind: "top module",
                name: name.to_owned(),
                nearest: nearest(name, self.modules()),
            });
        }
        match self.top_modules()[..] {
            [only] => Ok(only),
            // each module is used by another: what follows meets the cycle
            [] => Ok(0),
            [first, ..] => {
                let tops = self.tops();
                let shown: Vec<String> = tops.iter().take(8).map(|t| format!("`{t}`")).collect();
                let more = if tops.len() > shown.len() { ", …" } else { "" };
                Err(ReadError::Syntax {
                    at: self.modules[first].at.clone(),
                    found: format!(
                        "{} modules that nothing instantiates: {}{more}",
                        tops.len(),
                        shown.join(", ")
                    ),
                    wanted: "name the one to count as top".into(),
                })
            }
        }
    }

    /// The leaves of the whole design, of which there must be some and no more than can be summed.
    fn whole(&self, top: usize) -> Result<Leaves, ReadError> {
        let leaves = self.leaves(top, 1)?;
        let at = &self.modules[top].at;
        if leaves.is_empty() {
            let wanted = format!("instances in module `{}`", self.name_of(top));
            return Err(ReadError::Nothing { path: at.path.to_string(), wanted, empty: false });
        }
        let total = leaves.values().try_fold(0u64, |sum, &n| sum.checked_add(n));
        total.map(|_| leaves).ok_or_else(|| too_many(at.clone(), "number of instances"))
    }

    /// The leaves below `times` instances of a module.
    ///
    /// One walk in depth finds the order in which leaves are first seen and the order in which modules finish;
    /// the latter, turned round, has each module after all that use it, so counts are final when passed down.
    fn leaves(&self, root: usize, times: u64) -> Result<Leaves, ReadError> {
        let mut leaves = Leaves::default();
        let mut finished: Vec<usize> = Vec::new();
        let mut seen = vec![false; self.modules.len()];
        let mut open = vec![false; self.modules.len()];
        let mut walk: Vec<(usize, usize)> = vec![(root, 0)];
        (seen[root], open[root]) = (true, true);
        while let Some((module, next)) = walk.last_mut() {
            let module = *module;
            let Some((&master, _)) = self.modules[module].cells.get_index(*next) else {
                open[module] = false;
                finished.push(module);
                walk.pop();
                continue;
            };
            *next += 1;
            match self.body(master) {
                None => {
                    leaves.entry(master).or_insert(0);
                }
                Some(child) if open[child] => return Err(self.cycle(child, &walk)),
                Some(child) if seen[child] => {}
                Some(child) => {
                    (seen[child], open[child]) = (true, true);
                    walk.push((child, 0));
                }
            }
        }
        let mut instances: FxHashMap<usize, u64> = FxHashMap::default();
        instances.insert(root, times);
        for &module in finished.iter().rev() {
            let times = instances.get(&module).copied().unwrap_or_default();
            for (&master, &n) in &self.modules[module].cells {
                let sum = match self.body(master) {
                    Some(child) => instances.entry(child).or_insert(0),
                    None => leaves.entry(master).or_insert(0),
                };
                *sum = times
                    .checked_mul(n)
                    .and_then(|n| sum.checked_add(n))
                    .ok_or_else(|| too_many(self.modules[module].at.clone(), &self.names[master]))?;
            }
        }
        Ok(leaves)
    }

    fn cycle(&self, child: usize, walk: &[(usize, usize)]) -> ReadError {
        let from = walk.iter().position(|&(m, _)| m == child).unwrap_or_default();
        let mut names: Vec<String> =
            walk[from..].iter().map(|&(m, _)| format!("`{}`", self.name_of(m))).collect();
        if names.len() > 8 {
            names.splice(4..names.len() - 3, ["…".to_owned()]);
        }
        names.push(format!("`{}`", self.name_of(child)));
        ReadError::Syntax {
            at: self.modules[child].at.clone(),
            found: format!("module `{}` contains itself: {}", self.name_of(child), names.join(" > ")),
            wanted: "want a hierarchy that ends in cells".into(),
        }
    }

    /// The instance at a path, trying the longest names first.
    fn find(&self, top: usize, path: &str) -> Result<Found, ReadError> {
        let end = path.len() - usize::from(path.ends_with(['/', '.']) && path.len() > 1);
        let start = usize::from(path.starts_with(['/', '.'])).min(end);
        let path = &path[start..end];
        let mut open = vec![(Found { steps: Vec::new(), module: top, times: 1 }, 0)];
        let mut tried: FxHashSet<(usize, usize)> = FxHashSet::default();
        let mut farthest = (0, top);
        while let Some((found, offset)) = open.pop() {
            let rest = path.get(offset..).unwrap_or_default();
            if rest.is_empty() {
                return Ok(found);
            }
            if !tried.insert((found.module, offset)) {
                continue;
            }
            if offset > farthest.0 {
                farthest = (offset, found.module);
            }
            // pushed shortest first, so the longest is tried first
            for (name, used) in pieces(rest) {
                let Some((child, member)) = self.child(found.module, name) else { continue };
                let Child { master, range } = self.modules[found.module].children[child];
                let Some(module) = self.body(master) else { continue };
                let many = if member.is_some() { Some(1) } else { width(range) };
                let times = many.and_then(|n| found.times.checked_mul(n));
                let times = times.ok_or_else(|| too_many(self.modules[module].at.clone(), name))?;
                let mut steps = found.steps.clone();
                steps.push((child, member));
                open.push((Found { steps, module, times }, offset + used));
            }
        }
        let (offset, module) = farthest;
        let rest = &path[offset..];
        let name = rest.split(['/', '.']).next().unwrap_or_default();
        Err(ReadError::Unknown {
            at: self.modules[module].at.clone(),
            kind: "module instance",
            name: name.to_owned(),
            nearest: nearest(name, self.modules[module].children.keys().map(|n| &**n)),
        })
    }

    /// The child with this name, or the array of which it names a member.
    fn child(&self, module: usize, name: &str) -> Option<(usize, Option<i64>)> {
        let children = &self.modules[module].children;
        if let Some(child) = children.get_index_of(name) {
            return Some((child, None));
        }
        let (array, member) = name.strip_suffix(']')?.rsplit_once('[')?;
        let (child, _, found) = children.get_full(array.trim_end())?;
        let (first, last) = found.range?;
        let member: i64 = member.trim().parse().ok()?;
        (first.min(last)..=first.max(last)).contains(&member).then_some((child, Some(member)))
    }

    /// Checks that no two paths share an instance.
    fn check_apart(&self, top: usize, paths: &[&str], found: &[Found]) -> Result<(), ReadError> {
        for (i, a) in found.iter().enumerate() {
            for (j, b) in found.iter().enumerate().skip(i + 1) {
                let shared = a
                    .steps
                    .iter()
                    .zip(&b.steps)
                    .all(|(&(x, m), &(y, n))| x == y && (m == n || m.is_none() || n.is_none()));
                if shared {
                    return Err(ReadError::Syntax {
                        at: self.modules[top].at.clone(),
                        found: format!("paths `{}` and `{}` share instances", paths[i], paths[j]),
                        wanted: "want each instance under one path only".into(),
                    });
                }
            }
        }
        Ok(())
    }
}

/// The names a path can begin with and the bytes each uses with its separator, shortest first.
pub(super) fn pieces(path: &str) -> Vec<(&str, usize)> {
    if let Some(escaped) = path.strip_prefix('\\') {
        let end = escaped.find(char::is_whitespace).unwrap_or(escaped.len());
        let after = escaped[end..].trim_start();
        let used = path.len() - after.strip_prefix(['/', '.']).unwrap_or(after).len();
        return vec![(&escaped[..end], used)];
    }
    let cuts = path.match_indices(['/', '.']).map(|(cut, _)| (&path[..cut], cut + 1));
    cuts.chain([(path, path.len())]).collect()
}
