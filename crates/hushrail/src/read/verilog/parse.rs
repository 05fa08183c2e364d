//! Tokens to modules: which masters each module holds, how often, and the names of its child modules.

use indexmap::{IndexMap, IndexSet};
use rustc_hash::{FxHashMap, FxHashSet};

use super::files::{Files, Spot};
use super::keyword::{Keyword, keyword};
use super::lex::{Kind, Lexer, Token};
use super::{Child, Module, Netlist};
use crate::read::source::ReadError;

/// Reads the given files in order, as one text.
///
/// Instance names are kept for masters that `bodies` marks as modules with a body; without it, for those whose
/// module came before.
pub(super) fn parse(files: &mut Files, bodies: Option<&[bool]>) -> Result<Netlist, ReadError> {
    let given = files.given();
    let mut parser = Parser {
        lex: Lexer::new(files),
        bodies,
        net: Netlist { names: IndexSet::default(), modules: Vec::new(), defined: FxHashMap::default() },
    };
    for file in 0..given {
        parser.lex.open(file);
        parser.file()?;
    }
    Ok(parser.net)
}

pub(super) struct Parser<'f> {
    pub(super) lex: Lexer<'f>,
    bodies: Option<&'f [bool]>,
    net: Netlist,
}

impl Parser<'_> {
    fn file(&mut self) -> Result<(), ReadError> {
        loop {
            let token = self.lex.next()?;
            match (token.kind, self.keyword(token)) {
                (Kind::End, _) => return Ok(()),
                (_, Some(Keyword::Module)) => self.module(token.spot)?,
                (_, Some(Keyword::Behaviour)) => return Err(self.behaviour(token)),
                _ => {
                    let found = format!("{} outside of a module", self.lex.shown(token));
                    return Err(self.lex.syntax(token.spot, found, "want `module` or the end of the file"));
                }
            }
        }
    }

    fn keyword(&self, token: Token) -> Option<Keyword> {
        if token.kind == Kind::Word { keyword(self.lex.text(token)) } else { None }
    }

    /// Whether the token is a name somebody chose.
    fn is_name(&self, token: Token) -> bool {
        match token.kind {
            Kind::Word => {
                let text = self.lex.text(token);
                !text.starts_with('$') && keyword(text).is_none()
            }
            Kind::Escaped => true,
            _ => false,
        }
    }

    fn behaviour(&self, token: Token) -> ReadError {
        let found = format!("{} is behaviour, not structure", self.lex.shown(token));
        let wanted =
            "only structural netlists (instances, nets, assigns) can be counted; synthesise it first";
        self.lex.syntax(token.spot, found, wanted)
    }

    /// The error for a token that does not fit into the statement that begins at `statement`.
    pub(super) fn misfit(&self, token: Token, statement: Spot, wanted: &str) -> ReadError {
        if token.kind == Kind::End {
            return self.lex.cut_off(statement, "statement", wanted);
        }
        let found = format!("{} does not fit here", self.lex.shown(token));
        self.lex.syntax(token.spot, found, format!("want {wanted}"))
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
        let token = self.lex.next()?;
        if !self.is_name(token) {
            return Err(self.misfit(token, start, "the name of the module"));
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
        loop {
            let token = self.lex.next()?;
            match self.keyword(token) {
                None if token.kind == Kind::End => {
                    let what = format!("module `{}`", self.net.names[name]);
                    return Err(self.lex.cut_off(start, &what, "`endmodule`"));
                }
                None if token.is(b';') => {}
                None if self.is_name(token) => self.instances(token, false, &mut module)?,
                Some(Keyword::Gate) => self.instances(token, true, &mut module)?,
                Some(Keyword::Declaration | Keyword::Supply) => {
                    module.has_assigns |= self.declaration(token)?;
                }
                Some(Keyword::Assign) => {
                    self.declaration(token)?;
                    module.has_assigns = true;
                }
                Some(Keyword::EndModule) => break,
                Some(Keyword::Behaviour) => return Err(self.behaviour(token)),
                Some(Keyword::Module) => {
                    let found = format!("a module inside module `{}`", self.net.names[name]);
                    return Err(self.lex.syntax(token.spot, found, "want `endmodule` first"));
                }
                None if token.kind == Kind::Word => return Err(self.behaviour(token)),
                _ => return Err(self.misfit(token, token.spot, "an instance, a declaration or `endmodule`")),
            }
        }
        self.net.defined.insert(name, self.net.modules.len());
        self.net.modules.push(module);
        Ok(())
    }

    /// Parameter list, port list and the semicolon after them.
    fn header(&mut self, start: Spot) -> Result<(), ReadError> {
        let mut token = self.lex.next()?;
        if token.is(b'#') {
            token = self.lex.next()?;
            if !token.is(b'(') {
                return Err(self.misfit(token, start, "`(` and the parameters"));
            }
            self.lex.skip_list(1, start)?;
            token = self.lex.next()?;
        }
        if token.is(b'(') {
            self.lex.skip_list(1, start)?;
            token = self.lex.next()?;
        }
        if token.is(b';') { Ok(()) } else { Err(self.misfit(token, start, "`;` after the module's ports")) }
    }

    /// Runs over a declaration or assignment; returns whether it holds an `=`.
    ///
    /// Two names side by side mean that a semicolon is missing, and an instance would be lost.
    fn declaration(&mut self, head: Token) -> Result<bool, ReadError> {
        let (mut depth, mut has_equals) = (0usize, false);
        // whether the token before ends an operand, and the symbol it is
        let (mut operand, mut symbol_before) = (false, None);
        loop {
            let token = self.lex.next()?;
            let symbol = if let Kind::Symbol(symbol) = token.kind { Some(symbol) } else { None };
            let before = std::mem::replace(&mut symbol_before, symbol);
            match token.kind {
                Kind::End => return Err(self.misfit(token, head.spot, "`;`")),
                Kind::Word | Kind::Escaped | Kind::Number | Kind::Text => {
                    if operand {
                        return Err(self.misfit(token, head.spot, "`;` or an operator"));
                    }
                    match self.keyword(token) {
                        Some(Keyword::Declaration | Keyword::Supply | Keyword::Strength | Keyword::Inner) => {
                        }
                        // the digits of `4'b 01` may stand apart from the base, and a name follows a delay
                        None => {
                            operand = match before {
                                Some(b'\'') => !is_base(self.lex.text(token)),
                                Some(b'#') => false,
                                _ => true,
                            }
                        }
                        Some(_) => return Err(self.misfit(token, head.spot, "`;` before it")),
                    }
                }
                Kind::Symbol(symbol) => {
                    operand = false;
                    match symbol {
                        b'(' | b'[' | b'{' => depth += 1,
                        b')' | b']' | b'}' if depth > 0 => depth -= 1,
                        b')' | b']' | b'}' => {
                            return Err(self.misfit(token, head.spot, "its opening counterpart before it"));
                        }
                        b';' if depth == 0 => return Ok(has_equals),
                        b';' => {
                            return Err(self.misfit(token, head.spot, "all parentheses closed before it"));
                        }
                        b'=' => has_equals = true,
                        _ => {}
                    }
                }
            }
        }
    }

    /// Reads the instances of a master or gate whose name has been read.
    fn instances(&mut self, head: Token, gate: bool, module: &mut Module) -> Result<(), ReadError> {
        let master = self.intern(head);
        let keep = self.keeps_names(master);
        let mut token = self.lex.next()?;
        if gate && token.is(b'(') {
            let inner = self.lex.next()?;
            if matches!(self.keyword(inner), Some(Keyword::Supply | Keyword::Strength)) {
                self.lex.skip_list(1, head.spot)?;
                token = self.lex.next()?;
            } else {
                self.lex.back(inner);
            }
        }
        if token.is(b'#') {
            let value = self.lex.next()?;
            match value.kind {
                Kind::Symbol(b'(') => self.lex.skip_list(1, head.spot)?,
                Kind::Number | Kind::Word | Kind::Escaped => {}
                _ => return Err(self.misfit(value, head.spot, "a delay or parameters after `#`")),
            }
            token = self.lex.next()?;
        }
        loop {
            let mut range = None;
            if self.is_name(token) {
                let at = token.spot;
                let name = keep.then(|| Box::<str>::from(self.lex.text(token)));
                token = self.lex.next()?;
                if token.is(b'[') {
                    range = Some(self.range(head.spot)?);
                    token = self.lex.next()?;
                }
                if !token.is(b'(') {
                    return Err(self.misfit(token, head.spot, "`(` and the pins of the instance"));
                }
                if let Some(name) = name {
                    if module.children.contains_key(&name) {
                        let found = format!(
                            "module `{}` has two instances named `{name}`",
                            self.net.names[module.name]
                        );
                        return Err(self.lex.syntax(at, found, "want one name for each instance"));
                    }
                    module.children.insert(name, Child { master, range });
                }
            } else if !(gate && token.is(b'(')) {
                return Err(self.misfit(token, head.spot, "the name of the instance"));
            }
            self.lex.skip_list(1, head.spot)?;
            self.add(module, master, range, head.spot)?;
            token = self.lex.next()?;
            if token.is(b';') {
                return Ok(());
            }
            if !token.is(b',') {
                return Err(self.misfit(token, head.spot, "`,` or `;` after the pins of an instance"));
            }
            token = self.lex.next()?;
        }
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
        *count = sum.ok_or_else(|| self.too_many(&self.net.names[master], at))?;
        Ok(())
    }

    pub(super) fn too_many(&self, name: &str, at: Spot) -> ReadError {
        super::too_many(self.lex.place(at), name)
    }
}

/// Whether the text after the quote of a based number is the base alone.
fn is_base(text: &str) -> bool {
    text.strip_prefix(['s', 'S']).unwrap_or(text).len() == 1
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
