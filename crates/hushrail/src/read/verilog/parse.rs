//! Tokens to modules: which masters each module holds, how often, and the names of its child modules.

use indexmap::{IndexMap, IndexSet};
use rustc_hash::{FxHashMap, FxHashSet};

use super::files::{Files, Spot};
use super::keyword::{Keyword, keyword};
use super::lex::{Kind, Lexer, Token};
use super::{Child, Module, Netlist};
use crate::read::source::{Input, ReadError, Source};

/// Reads the inputs in order, as one text, in pieces of about `piece` bytes.
///
/// Instance names are kept for masters that `bodies` marks as modules with a body; without it, for those whose
/// module came before.
pub(super) fn parse(
    inputs: &mut [Input],
    bodies: Option<&[bool]>,
    piece: usize,
) -> Result<Netlist, ReadError> {
    let mut files = Files::new(piece);
    let mut parser = Parser {
        lex: Lexer::new(&mut files),
        bodies,
        net: Netlist { names: IndexSet::default(), modules: Vec::new(), defined: FxHashMap::default() },
        heads: FxHashMap::default(),
    };
    for input in &mut *inputs {
        parser.lex.open(input)?;
        parser.file()?;
        parser.lex.close();
    }
    if parser.net.modules.is_empty() {
        let wanted = "Verilog module";
        return Err(if inputs.is_empty() {
            Source::from_text("", "").nothing(wanted)
        } else {
            parser.lex.files.window(0).nothing(wanted)
        });
    }
    Ok(parser.net)
}

pub(super) struct Parser<'f> {
    pub(super) lex: Lexer<'f>,
    bodies: Option<&'f [bool]>,
    net: Netlist,
    /// What the first words of common statements of this module are.
    heads: FxHashMap<Box<str>, Head>,
}

/// What a common statement begins with.
#[derive(Debug, Clone, Copy)]
enum Head {
    /// A master whose instances need no names: its position in the module's list.
    Leaf(usize),
    /// A declaration of nets or ports.
    Declaration,
}

impl Parser<'_> {
    fn file(&mut self) -> Result<(), ReadError> {
        while let Some(start) = self.lex.next_module()? {
            self.module(start)?;
        }
        Ok(())
    }

    fn intern(&mut self, token: Token) -> usize {
        let name = self.lex.text(token);
        match self.net.names.get_index_of(name) {
            Some(id) => id,
            None => self.net.names.insert_full(name.into()).0,
        }
    }

    /// Reads a module whose keyword, at `start`, has been read.
    fn module(&mut self, start: Spot) -> Result<(), ReadError> {
        self.lex.module = Some(start);
        let token = self.lex.next()?;
        if !self.lex.is_name(token) {
            return Err(self.lex.misfit(token, start, "the name of the module"));
        }
        let name = self.intern(token);
        let at = self.lex.files.next_place(token.spot);
        if let Some(&first) = self.net.defined.get(&name) {
            let found = format!(
                "module `{}` is defined twice, first at {}",
                self.lex.text(token),
                self.net.modules[first].at
            );
            return Err(self.lex.syntax(token.spot, found, "keep one of the two"));
        }
        let mut module = Module {
            name,
            at,
            cells: IndexMap::default(),
            children: IndexMap::default(),
            has_assigns: false,
        };
        self.header(start)?;
        self.heads.clear();
        loop {
            if self.common(&mut module)? {
                continue;
            }
            let token = self.lex.next()?;
            self.lex.statement = Some(token.spot);
            match self.lex.keyword(token) {
                None if token.kind == Kind::End => {
                    let what = format!("module `{}`", self.net.names[name]);
                    return Err(self.lex.cut_off(start, &what, "`endmodule`"));
                }
                None if token.is(b';') => {}
                None if self.lex.is_name(token) => self.instances(token, false, &mut module)?,
                Some(Keyword::Gate) => self.instances(token, true, &mut module)?,
                Some(Keyword::Declaration | Keyword::Supply) => {
                    let word = self.lex.text(token);
                    if !self.heads.contains_key(word) {
                        self.heads.insert(word.into(), Head::Declaration);
                    }
                    module.has_assigns |= self.lex.declaration(token)?;
                }
                Some(Keyword::Assign) => {
                    self.lex.declaration(token)?;
                    module.has_assigns = true;
                }
                Some(Keyword::EndModule) => break,
                Some(Keyword::Behaviour) => return Err(self.lex.behaviour(token)),
                Some(Keyword::Module) => {
                    let found = format!("a module inside module `{}`", self.net.names[name]);
                    return Err(self.lex.syntax(token.spot, found, "want `endmodule` first"));
                }
                None if token.kind == Kind::Word => return Err(self.lex.behaviour(token)),
                _ => {
                    return Err(self.lex.misfit(
                        token,
                        token.spot,
                        "an instance, a declaration or `endmodule`",
                    ));
                }
            }
        }
        self.lex.statement = None;
        self.lex.module = None;
        self.net.defined.insert(name, self.net.modules.len());
        self.net.modules.push(module);
        Ok(())
    }

    /// Reads a statement of the two commonest forms, one instance with a name and one declaration of one net, or
    /// nothing when anything about it is unusual.
    ///
    /// What is taken here is taken as the careful way would; `tests` hold the two against each other.
    fn common(&mut self, module: &mut Module) -> Result<bool, ReadError> {
        let frame = &self.lex.top;
        let start = frame.pos;
        let Some((head_start, head_end)) = frame.name_from(start) else { return Ok(false) };
        let head = frame.text.get(head_start..head_end).unwrap_or_default();
        let Some(&head_kind) = self.heads.get(head) else { return Ok(false) };
        let Some((name_start, name_end)) = frame.name_from(head_end) else { return Ok(false) };
        let name = frame.text.get(name_start..name_end).unwrap_or_default();
        let Some(mark) = frame.solid_from(name_end) else { return Ok(false) };
        let bytes = frame.text.as_bytes();
        if name.len() == 1 && name.starts_with('\\') || name.starts_with('$') || keyword(name).is_some() {
            return Ok(false);
        }
        match head_kind {
            Head::Declaration if bytes.get(mark) == Some(&b';') => {
                self.lex.top.pos = mark + 1;
                Ok(true)
            }
            Head::Leaf(place) if bytes.get(mark) == Some(&b'(') => {
                if matches!(bytes.get(mark + 1), None | Some(b'*')) {
                    return Ok(false);
                }
                let spot = self.lex.spot(head_start);
                self.lex.statement = Some(spot);
                self.lex.top.pos = mark + 1;
                self.lex.skip_list(1, spot)?;
                let frame = &self.lex.top;
                match frame.solid_from(frame.pos) {
                    Some(end) if frame.text.as_bytes()[end] == b';' => {
                        self.lex.top.pos = end + 1;
                        if let Some(count) = module.cells.get_index_mut(place).map(|(_, n)| n)
                            && let Some(more) = count.checked_add(1)
                        {
                            *count = more;
                            return Ok(true);
                        }
                        Err(self.lex.too_many("number of instances", spot))
                    }
                    _ => {
                        let master = module.cells.get_index(place).map_or(0, |(&m, _)| m);
                        self.add(module, master, None, spot)?;
                        self.more_instances(master, spot, false, module)?;
                        Ok(true)
                    }
                }
            }
            _ => Ok(false),
        }
    }

    /// Parameter list, port list and the semicolon after them.
    fn header(&mut self, start: Spot) -> Result<(), ReadError> {
        let mut token = self.lex.next()?;
        if token.is(b'#') {
            token = self.lex.next()?;
            if !token.is(b'(') {
                return Err(self.lex.misfit(token, start, "`(` and the parameters"));
            }
            self.lex.skip_list(1, start)?;
            token = self.lex.next()?;
        }
        if token.is(b'(') {
            self.lex.skip_list(1, start)?;
            token = self.lex.next()?;
        }
        if token.is(b';') {
            Ok(())
        } else {
            Err(self.lex.misfit(token, start, "`;` after the module's ports"))
        }
    }

    /// Reads the instances of a master or gate whose name has been read.
    fn instances(&mut self, head: Token, gate: bool, module: &mut Module) -> Result<(), ReadError> {
        let master = self.intern(head);
        let keep = self.keeps_names(master);
        let is_common = head.kind == Kind::Word && !gate && !keep;
        let common = is_common.then(|| Box::<str>::from(self.lex.text(head)));
        let mut token = self.lex.next()?;
        if gate {
            token = self.lex.after_strength(token, head.spot)?;
        }
        token = self.lex.after_hash(token, head.spot)?;
        self.instance(token, master, head.spot, gate, module)?;
        if let Some(name) = common
            && let Some(place) = module.cells.get_index_of(&master)
        {
            self.heads.insert(name, Head::Leaf(place));
        }
        self.more_instances(master, head.spot, gate, module)
    }

    /// Reads on after the pins of an instance, to the semicolon.
    fn more_instances(
        &mut self,
        master: usize,
        statement: Spot,
        gate: bool,
        module: &mut Module,
    ) -> Result<(), ReadError> {
        loop {
            let token = self.lex.next()?;
            if token.is(b';') {
                return Ok(());
            }
            if !token.is(b',') {
                return Err(self.lex.misfit(token, statement, "`,` or `;` after the pins of an instance"));
            }
            let token = self.lex.next()?;
            self.instance(token, master, statement, gate, module)?;
        }
    }

    /// Reads one instance, its name and pins, from its first token on.
    fn instance(
        &mut self,
        mut token: Token,
        master: usize,
        statement: Spot,
        gate: bool,
        module: &mut Module,
    ) -> Result<(), ReadError> {
        let keep = self.keeps_names(master);
        let mut range = None;
        if self.lex.is_name(token) {
            let at = token.spot;
            self.lex.part = Some(at);
            let name = keep.then(|| Box::<str>::from(self.lex.text(token)));
            token = self.lex.next()?;
            if token.is(b'[') {
                range = Some(self.lex.range(statement)?);
                token = self.lex.next()?;
            }
            if !token.is(b'(') {
                return Err(self.lex.misfit(token, statement, "`(` and the pins of the instance"));
            }
            if let Some(name) = name {
                if module.children.contains_key(&name) {
                    let found =
                        format!("module `{}` has two instances named `{name}`", self.net.names[module.name]);
                    return Err(self.lex.syntax(at, found, "want one name for each instance"));
                }
                module.children.insert(name, Child { master, range });
            }
        } else if !(gate && token.is(b'(')) {
            return Err(self.lex.misfit(token, statement, "the name of the instance"));
        }
        self.lex.skip_list(1, statement)?;
        self.add(module, master, range, statement)
    }

    fn keeps_names(&self, master: usize) -> bool {
        match self.bodies {
            Some(bodies) => bodies.get(master).copied().unwrap_or_default(),
            None => self.net.defined.get(&master).is_some_and(|&m| !self.net.modules[m].is_black_box()),
        }
    }

    fn add(
        &self,
        module: &mut Module,
        master: usize,
        range: Option<(i64, i64)>,
        at: Spot,
    ) -> Result<(), ReadError> {
        let count = module.cells.entry(master).or_insert(0);
        let sum = super::width(range).and_then(|n| count.checked_add(n));
        *count = sum.ok_or_else(|| self.lex.too_many(&self.net.names[master], at))?;
        Ok(())
    }
}

/// Which masters are modules with a body, when some module lacks the names of such children.
pub(super) fn missing_names(net: &Netlist) -> Option<Vec<bool>> {
    let mut bodies = vec![false; net.names.len()];
    for module in net.modules.iter().filter(|m| !m.is_black_box()) {
        bodies[module.name] = true;
    }
    let complete = net.modules.iter().all(|module| {
        let named: FxHashSet<usize> = module.children.values().map(|c| c.master).collect();
        module.cells.keys().all(|&master| !bodies[master] || named.contains(&master))
    });
    (!complete).then_some(bodies)
}
