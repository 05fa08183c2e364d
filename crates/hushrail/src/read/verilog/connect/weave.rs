//! Text to modules with their connections.

use rustc_hash::FxHashMap;

use super::body::{Body, BodyPort, Conn, Decl, Inst, Loc, ONE, POSITION, RESERVED, UNSIZED, ZERO};
use super::names::Names;
use super::ports::Direction;
use crate::read::source::{Input, Place, ReadError, Source};
use crate::read::verilog::files::{Files, Spot};
use crate::read::verilog::keyword::Keyword;
use crate::read::verilog::lex::{Kind, Lexer, Token};
use crate::read::window::PIECE;

/// Vectors and concatenations of more bits than this are a slip.
pub(super) const MAX_WIDTH: u64 = 1 << 24;

/// Where a connection is to something other than one plain name.
const NO_NAME: u32 = u32::MAX;

/// Everything that was read.
pub(super) struct Woven {
    pub(super) names: Names,
    pub(super) bodies: Vec<Body>,
    /// The body of a name.
    pub(super) defined: FxHashMap<u32, usize>,
    pub(super) paths: Vec<std::sync::Arc<str>>,
}

/// What a name stands for in the present module.
#[derive(Debug, Clone, Copy, Default)]
struct Meaning {
    /// The module this holds in, from one.
    module: u32,
    /// The net's declaration and one, or zero.
    decl: u32,
    is_instance: bool,
    has_direction: bool,
    has_type: bool,
}

pub(super) struct Weaver<'f> {
    pub(super) lex: Lexer<'f>,
    pub(super) names: Names,
    bodies: Vec<Body>,
    defined: FxHashMap<u32, usize>,
    /// By name.
    scope: Vec<Meaning>,
    module: u32,
    pub(super) body: Body,
    /// Numbers of masters that are no reserved words.
    plain: Vec<bool>,
    /// By master: the module and the first connection of its last instance, whose ports likely come again.
    last: Vec<(u32, u32)>,
    /// By connection of the module: the name of its net, or no name; supplies likely come again too.
    tied: Vec<u32>,
}

pub(super) fn weave(inputs: &mut [Input]) -> Result<Woven, ReadError> {
    let mut files = Files::new(PIECE);
    let mut weaver = Weaver {
        lex: Lexer::new(&mut files),
        names: Names::default(),
        bodies: Vec::new(),
        defined: FxHashMap::default(),
        scope: Vec::new(),
        module: 0,
        body: empty(0, Place::new(&"".into(), 1, 1)),
        plain: Vec::new(),
        last: Vec::new(),
        tied: Vec::new(),
    };
    for input in &mut *inputs {
        weaver.lex.open(input)?;
        weaver.file()?;
        weaver.lex.close();
    }
    let Weaver { names, bodies, defined, .. } = weaver;
    if bodies.is_empty() {
        let wanted = "Verilog module";
        return Err(if inputs.is_empty() {
            Source::from_text("", "").nothing(wanted)
        } else {
            files.window(0).nothing(wanted)
        });
    }
    Ok(Woven { names, bodies, defined, paths: files.paths() })
}

fn empty(name: u32, at: Place) -> Body {
    Body {
        name,
        at,
        ports: Vec::new(),
        decls: Vec::new(),
        nets: RESERVED,
        insts: Vec::new(),
        arrays: Vec::new(),
        conns: Vec::new(),
        bits: Vec::new(),
        aliases: Vec::new(),
        has_assigns: false,
    }
}

fn short(n: usize) -> u32 {
    u32::try_from(n).unwrap_or(u32::MAX)
}

/// What a declaration says about its names.
#[derive(Debug, Clone, Copy)]
struct Kinds {
    direction: Option<Direction>,
    has_type: bool,
    supply: Option<u32>,
    range: Option<(i64, i64)>,
}

const NO_KIND: Kinds = Kinds { direction: None, has_type: false, supply: None, range: None };

impl Weaver<'_> {
    fn file(&mut self) -> Result<(), ReadError> {
        while let Some(start) = self.lex.next_module()? {
            self.module(start)?;
        }
        Ok(())
    }

    pub(super) fn intern(&mut self, token: Token) -> Result<u32, ReadError> {
        let id = self.names.intern(self.lex.text(token));
        id.ok_or_else(|| self.too_large(token.spot, "names"))
    }

    fn too_large(&self, at: Spot, what: &str) -> ReadError {
        ReadError::Range {
            at: self.lex.place(at),
            name: what.to_owned(),
            value: "past what 32 bits can number".into(),
            wanted: "want a smaller netlist, or count it without its connections".into(),
        }
    }

    fn meaning(&mut self, name: u32) -> &mut Meaning {
        let at = name as usize;
        if self.scope.len() <= at {
            self.scope.resize((at + 1).max(self.names.len()), Meaning::default());
        }
        let meaning = &mut self.scope[at];
        if meaning.module != self.module {
            *meaning = Meaning { module: self.module, ..Meaning::default() };
        }
        meaning
    }

    fn loc(&mut self, spot: Spot) -> Loc {
        let (line, column) = self.lex.files.next_line_column(spot);
        Loc { file: short(spot.file), line: short(line), column: short(column) }
    }

    fn module(&mut self, start: Spot) -> Result<(), ReadError> {
        self.lex.module = Some(start);
        let token = self.lex.next()?;
        if !self.lex.is_name(token) {
            return Err(self.lex.misfit(token, start, "the name of the module"));
        }
        let name = self.intern(token)?;
        let at = self.lex.files.next_place(token.spot);
        if let Some(&first) = self.defined.get(&name) {
            let found = format!(
                "module `{}` is defined twice, first at {}",
                self.lex.text(token),
                self.bodies[first].at
            );
            return Err(self.lex.syntax(token.spot, found, "keep one of the two"));
        }
        self.module += 1;
        self.body = empty(name, at);
        self.tied.clear();
        self.header(start)?;
        loop {
            if self.common_instance()? {
                continue;
            }
            let token = self.lex.next()?;
            self.lex.statement = Some(token.spot);
            match self.lex.keyword(token) {
                None if token.kind == Kind::End => {
                    let what = format!("module `{}`", self.names.get(name));
                    return Err(self.lex.cut_off(start, &what, "`endmodule`"));
                }
                None if token.is(b';') => {}
                None if self.lex.is_name(token) => self.instances(token, false)?,
                Some(Keyword::Gate) => self.instances(token, true)?,
                Some(Keyword::Declaration | Keyword::Supply) => self.nets(token)?,
                Some(Keyword::Assign) => self.assign(token.spot)?,
                Some(Keyword::EndModule) => break,
                Some(Keyword::Behaviour) => return Err(self.lex.behaviour(token)),
                Some(Keyword::Module) => {
                    let found = format!("a module inside module `{}`", self.names.get(name));
                    return Err(self.lex.syntax(token.spot, found, "want `endmodule` first"));
                }
                None if token.kind == Kind::Word => return Err(self.lex.behaviour(token)),
                _ => {
                    let wanted = "an instance, a declaration or `endmodule`";
                    return Err(self.lex.misfit(token, token.spot, wanted));
                }
            }
        }
        self.lex.module = None;
        self.lex.statement = None;
        self.finish()
    }

    /// Ties the ports to the nets declared for them.
    fn finish(&mut self) -> Result<(), ReadError> {
        let mut body = std::mem::replace(&mut self.body, empty(0, Place::new(&"".into(), 1, 1)));
        for i in 0..body.ports.len() {
            let BodyPort { name, net, loc, .. } = body.ports[i];
            let meaning = *self.meaning(net);
            if meaning.decl == 0 {
                return Err(ReadError::Syntax {
                    at: self.place(loc),
                    found: format!("port `{}` is never declared", self.names.get(name)),
                    wanted: "want an `input`, `output` or `inout` declaration of it in the module".into(),
                });
            }
            body.ports[i].decl = meaning.decl as usize - 1;
        }
        body.insts.shrink_to_fit();
        self.defined.insert(body.name, self.bodies.len());
        self.bodies.push(body);
        Ok(())
    }

    fn place(&self, loc: Loc) -> Place {
        let path = self.lex.files.window(loc.file as usize).path();
        Place::new(path, loc.line as usize, loc.column as usize)
    }

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
            self.port_list(start)?;
            token = self.lex.next()?;
        }
        if token.is(b';') {
            Ok(())
        } else {
            Err(self.lex.misfit(token, start, "`;` after the module's ports"))
        }
    }

    fn port_list(&mut self, start: Spot) -> Result<(), ReadError> {
        let mut kinds = NO_KIND;
        let mut token = self.lex.next()?;
        if token.is(b')') {
            return Ok(());
        }
        loop {
            if let Some(Keyword::Declaration | Keyword::Supply) = self.lex.keyword(token) {
                kinds = NO_KIND;
                token = self.kinds(token, &mut kinds, start)?;
            }
            let mut spot = token.spot;
            let dotted = token.is(b'.');
            if dotted {
                token = self.lex.next()?;
                spot = token.spot;
            }
            if !self.lex.is_name(token) {
                return Err(self.lex.misfit(token, start, "the name of a port"));
            }
            let name = self.intern(token)?;
            let loc = self.loc(spot);
            if kinds.direction.is_some() {
                self.declare(name, spot, kinds)?;
            }
            token = self.lex.next()?;
            let mut net = name;
            if dotted {
                if !token.is(b'(') {
                    return Err(self.lex.misfit(token, start, "`(` and the net behind the port"));
                }
                token = self.lex.next()?;
                if !self.lex.is_name(token) {
                    return Err(self.lex.misfit(token, start, "the name of one net behind the port"));
                }
                net = self.intern(token)?;
                token = self.lex.next()?;
                if !token.is(b')') {
                    return Err(self.lex.misfit(token, start, "`)` after the net behind the port"));
                }
                token = self.lex.next()?;
            }
            if self.body.ports.iter().any(|p| p.name == name) {
                let at = self.place(loc);
                let found = format!("port `{}` stands twice in the list", self.names.get(name));
                return Err(ReadError::Syntax { at, found, wanted: "want each port once".into() });
            }
            self.body.ports.push(BodyPort { name, net, decl: 0, direction: kinds.direction, loc });
            if token.is(b')') {
                return Ok(());
            }
            if !token.is(b',') {
                return Err(self.lex.misfit(token, start, "`,` or `)` after a port"));
            }
            token = self.lex.next()?;
        }
    }

    /// Reads directions, types and the range from `token` on; the token after them.
    fn kinds(&mut self, mut token: Token, kinds: &mut Kinds, start: Spot) -> Result<Token, ReadError> {
        loop {
            match self.lex.keyword(token) {
                Some(Keyword::Declaration | Keyword::Supply) => match self.lex.text(token) {
                    "input" => kinds.direction = Some(Direction::Input),
                    "output" => kinds.direction = Some(Direction::Output),
                    "inout" => kinds.direction = Some(Direction::Inout),
                    "supply0" => (kinds.supply, kinds.has_type) = (Some(ZERO), true),
                    "supply1" => (kinds.supply, kinds.has_type) = (Some(ONE), true),
                    _ => kinds.has_type = true,
                },
                Some(Keyword::Inner) => {}
                _ if token.is(b'(') => {
                    let next = self.lex.after_strength(token, start)?;
                    if next.is(b'(') {
                        // a charge strength, the only other thing in parentheses here
                        self.lex.skip_list(1, start)?;
                        token = self.lex.next()?;
                    } else {
                        token = next;
                    }
                    continue;
                }
                _ if token.is(b'#') => {
                    token = self.lex.after_hash(token, start)?;
                    continue;
                }
                _ if token.is(b'[') => {
                    if kinds.range.is_some() {
                        return Err(self.lex.misfit(
                            token,
                            start,
                            "one range; arrays of vectors are not nets",
                        ));
                    }
                    kinds.range = Some(self.lex.range(start)?);
                }
                _ => return Ok(token),
            }
            token = self.lex.next()?;
        }
    }

    fn nets(&mut self, head: Token) -> Result<(), ReadError> {
        let start = head.spot;
        let is_net = !matches!(
            self.lex.text(head),
            "parameter"
                | "localparam"
                | "specparam"
                | "defparam"
                | "genvar"
                | "event"
                | "real"
                | "realtime"
                | "integer"
                | "time"
        );
        if !is_net {
            return self.lex.declaration(head).map(|_| ());
        }
        let mut kinds = NO_KIND;
        let mut token = self.kinds(head, &mut kinds, start)?;
        loop {
            if !self.lex.is_name(token) {
                return Err(self.lex.misfit(token, start, "the name of a net"));
            }
            let name = self.intern(token)?;
            let spot = token.spot;
            self.lex.part = Some(spot);
            let decl = self.declare(name, spot, kinds)?;
            token = self.lex.next()?;
            if token.is(b'=') {
                let Decl { base, .. } = self.body.decls[decl];
                let left: Vec<u32> = (base..base + self.body.decls[decl].width()).collect();
                token = self.alias(&left, spot)?;
            }
            if token.is(b';') {
                return Ok(());
            }
            if token.is(b'[') {
                return Err(self.lex.misfit(
                    token,
                    start,
                    "the range before the name; arrays of nets are not read",
                ));
            }
            if !token.is(b',') {
                return Err(self.lex.misfit(token, start, "`,` or `;` after the name of a net"));
            }
            token = self.lex.next()?;
        }
    }

    /// Declares a net, or says more of one that is declared.
    fn declare(&mut self, name: u32, spot: Spot, kinds: Kinds) -> Result<usize, ReadError> {
        let (left, right) = kinds.range.unwrap_or((0, 0));
        let narrow = |n: i64| i32::try_from(n).ok();
        let (Some(left), Some(right), true) = (narrow(left), narrow(right), left.abs_diff(right) < MAX_WIDTH)
        else {
            return Err(self.too_wide(spot, left.abs_diff(right).saturating_add(1)));
        };
        let meaning = *self.meaning(name);
        let decl = if meaning.decl > 0 {
            let decl = meaning.decl as usize - 1;
            let known = self.body.decls[decl];
            let again = meaning.has_direction && kinds.direction.is_some()
                || meaning.has_type && kinds.has_type && kinds.direction.is_none();
            let fits = known.left == left && known.right == right;
            if again || !(meaning.has_direction || kinds.direction.is_some()) || !fits {
                let found = if fits || again {
                    format!("`{}` is declared or used before", self.names.get(name))
                } else {
                    format!(
                        "`{}` has the range [{left}:{right}] here and [{}:{}] before",
                        self.names.get(name),
                        known.left,
                        known.right
                    )
                };
                return Err(self.lex.syntax(spot, found, "want one declaration of each net, before its use"));
            }
            decl
        } else {
            self.add_net(name, left, right, spot)?
        };
        let meaning = self.meaning(name);
        meaning.has_direction |= kinds.direction.is_some();
        meaning.has_type |= kinds.has_type;
        if let Some(direction) = kinds.direction {
            let known = self.body.ports.iter_mut().filter(|p| p.net == name);
            known.for_each(|p| p.direction = Some(direction));
        }
        if let Some(level) = kinds.supply {
            let Decl { base, .. } = self.body.decls[decl];
            let width = self.body.decls[decl].width();
            self.body.aliases.extend((base..base + width).map(|bit| (bit, level)));
        }
        Ok(decl)
    }

    fn too_wide(&self, spot: Spot, width: u64) -> ReadError {
        ReadError::Range {
            at: self.lex.place(spot),
            name: "width".into(),
            value: format!("{width} bits"),
            wanted: format!("want at most {MAX_WIDTH}; check the ends of the range"),
        }
    }

    fn add_net(&mut self, name: u32, left: i32, right: i32, spot: Spot) -> Result<usize, ReadError> {
        let decl = Decl { name, base: self.body.nets, left, right };
        let nets = self.body.nets.checked_add(decl.width()).filter(|&n| n < u32::MAX / 2);
        self.body.nets = nets.ok_or_else(|| self.too_large(spot, "number of nets"))?;
        self.body.decls.push(decl);
        let number = short(self.body.decls.len());
        self.meaning(name).decl = number;
        Ok(self.body.decls.len() - 1)
    }

    /// The declaration of a net that is used; a name nobody declared is a net of one bit.
    pub(super) fn net(&mut self, name: u32, spot: Spot) -> Result<usize, ReadError> {
        match self.meaning(name).decl {
            0 => self.add_net(name, 0, 0, spot),
            n => Ok(n as usize - 1),
        }
    }

    fn assign(&mut self, start: Spot) -> Result<(), ReadError> {
        self.body.has_assigns = true;
        let mut token = self.lex.next()?;
        token = self.lex.after_strength(token, start)?;
        token = self.lex.after_hash(token, start)?;
        loop {
            let spot = token.spot;
            self.lex.part = Some(spot);
            let from = self.body.bits.len();
            let (mut after, _) = self.expression(token, 0, start)?;
            let left = self.body.bits.split_off(from);
            if !after.is(b'=') {
                return Err(self.lex.misfit(after, start, "`=` after the left side of an assign"));
            }
            if left.iter().any(|&bit| bit < RESERVED) {
                return Err(self.lex.syntax(spot, "a constant on the left of an assign", "want a net there"));
            }
            after = self.alias(&left, spot)?;
            if after.is(b';') {
                return Ok(());
            }
            if !after.is(b',') {
                let wanted =
                    "`;` after one net, constant or concatenation; logic in an assign is not structure";
                return Err(self.lex.misfit(after, start, wanted));
            }
            token = self.lex.next()?;
        }
    }

    /// Reads the right side of an `=` and makes its nets those on the left; the token after it.
    fn alias(&mut self, left: &[u32], spot: Spot) -> Result<Token, ReadError> {
        self.body.has_assigns = true;
        let token = self.lex.next()?;
        let from = self.body.bits.len();
        let (after, is_unsized) = self.expression(token, 0, spot)?;
        let mut right = self.body.bits.split_off(from);
        if is_unsized {
            right = super::link::fitted(&right, left.len());
        }
        if right.len() != left.len() {
            let found = format!("{} bits on the left of `=` and {} on the right", left.len(), right.len());
            return Err(self.lex.syntax(spot, found, "want as many on both sides"));
        }
        self.body.aliases.extend(left.iter().copied().zip(right));
        Ok(after)
    }

    fn begin(&mut self, name: u32, master: u32, spot: Spot) -> Result<(), ReadError> {
        if !self.names.get(name).is_empty() && std::mem::replace(&mut self.meaning(name).is_instance, true) {
            let found = format!(
                "module `{}` has two instances named `{}`",
                self.names.get(self.body.name),
                self.names.get(name)
            );
            return Err(self.lex.syntax(spot, found, "want one name for each instance"));
        }
        let loc = self.loc(spot);
        if self.body.bits.len().max(self.body.conns.len()) >= 1 << 31 {
            return Err(self.too_large(spot, "number of pins"));
        }
        self.body.insts.push(Inst { name, master, conns: short(self.body.conns.len()), loc });
        Ok(())
    }

    /// Reads a statement of the commonest form, one named instance, or nothing when its beginning is unusual.
    fn common_instance(&mut self) -> Result<bool, ReadError> {
        let frame = &self.lex.top;
        let Some((head_start, head_end)) = frame.name_from(frame.pos) else { return Ok(false) };
        let head = frame.text.get(head_start..head_end).unwrap_or_default();
        let Some(master) = self.names.find(head) else { return Ok(false) };
        if !self.plain.get(master as usize).copied().unwrap_or_default() {
            return Ok(false);
        }
        let Some((name_start, name_end)) = frame.name_from(head_end) else { return Ok(false) };
        let name = frame.text.get(name_start..name_end).unwrap_or_default();
        let Some(mark) = frame.solid_from(name_end) else { return Ok(false) };
        let bytes = frame.text.as_bytes();
        let is_name =
            name.len() > 1 && !name.starts_with('$') || name.len() == 1 && name != "\\" && name != "$";
        if !is_name || bytes.get(mark) != Some(&b'(') || matches!(bytes.get(mark + 1), None | Some(b'*')) {
            return Ok(false);
        }
        if crate::read::verilog::keyword::keyword(name).is_some() {
            return Ok(false);
        }
        let name = self.names.intern(name.strip_prefix('\\').unwrap_or(name));
        let (head, spot) = (self.lex.spot(head_start), self.lex.spot(name_start));
        let name = name.ok_or_else(|| self.too_large(spot, "names"))?;
        self.lex.statement = Some(head);
        self.lex.part = Some(spot);
        self.begin(name, master, spot)?;
        self.lex.top.pos = mark + 1;
        self.pins(master, head)?;
        self.more_instances(master, false, head)?;
        Ok(true)
    }

    fn instances(&mut self, head: Token, gate: bool) -> Result<(), ReadError> {
        let master = self.intern(head)?;
        let is_plain = head.kind == Kind::Word && !gate;
        let mut token = self.lex.next()?;
        if gate {
            token = self.lex.after_strength(token, head.spot)?;
        }
        token = self.lex.after_hash(token, head.spot)?;
        self.instance(token, master, gate, head.spot)?;
        self.more_instances(master, gate, head.spot)?;
        if is_plain {
            if self.plain.len() <= master as usize {
                self.plain.resize(self.names.len(), false);
            }
            self.plain[master as usize] = true;
        }
        Ok(())
    }

    fn more_instances(&mut self, master: u32, gate: bool, start: Spot) -> Result<(), ReadError> {
        loop {
            let token = self.lex.next()?;
            if token.is(b';') {
                return Ok(());
            }
            if !token.is(b',') {
                return Err(self.lex.misfit(token, start, "`,` or `;` after the pins of an instance"));
            }
            let token = self.lex.next()?;
            self.instance(token, master, gate, start)?;
        }
    }

    fn instance(&mut self, mut token: Token, master: u32, gate: bool, start: Spot) -> Result<(), ReadError> {
        self.lex.part = Some(token.spot);
        if self.lex.is_name(token) {
            let name = self.intern(token)?;
            self.begin(name, master, token.spot)?;
            token = self.lex.next()?;
            if token.is(b'[') {
                let (first, last) = self.lex.range(start)?;
                if first.abs_diff(last) >= u64::from(u32::MAX / 2) {
                    return Err(self.lex.too_many("number of instances", start));
                }
                self.body.arrays.push((short(self.body.insts.len() - 1), first, last));
                token = self.lex.next()?;
            }
            if !token.is(b'(') {
                return Err(self.lex.misfit(token, start, "`(` and the pins of the instance"));
            }
        } else if gate && token.is(b'(') {
            let name = self.names.intern("").unwrap_or_default();
            self.begin(name, master, token.spot)?;
        } else {
            return Err(self.lex.misfit(token, start, "the name of the instance"));
        }
        self.pins(master, start)
    }

    /// Reads pins up to the parenthesis that closes them.
    fn pins(&mut self, master: u32, start: Spot) -> Result<(), ReadError> {
        let mut position = 0u32;
        let mut is_first = true;
        let conns = short(self.body.conns.len());
        if self.last.len() <= master as usize {
            self.last.resize(self.names.len(), (0, 0));
        }
        let (module, before) = std::mem::replace(&mut self.last[master as usize], (self.module, conns));
        let mut likely = if module == self.module { before } else { conns };
        loop {
            let guess = self.body.conns.get(likely as usize).filter(|_| likely < conns).map(|c| c.port);
            let guess = guess.zip(self.tied.get(likely as usize).copied());
            likely += 1;
            if self.common_pin(guess)? {
                is_first = false;
                let frame = &self.lex.top;
                match frame.text.as_bytes().get(frame.pos) {
                    Some(b',') => {
                        self.lex.top.pos += 1;
                        continue;
                    }
                    Some(b')') => {
                        self.lex.top.pos += 1;
                        return Ok(());
                    }
                    _ => {}
                }
            } else {
                let token = self.lex.next()?;
                if is_first && token.is(b')') {
                    return Ok(());
                }
                is_first = false;
                if token.is(b'.') {
                    self.named_pin(start)?;
                } else if token.is(b',') || token.is(b')') {
                    // a positional pin left open
                    self.connect_to(POSITION | position);
                    position += 1;
                    if token.is(b')') {
                        return Ok(());
                    }
                    continue;
                } else {
                    let conn = self.connect_to(POSITION | position);
                    position += 1;
                    let (after, is_unsized) = self.expression(token, 0, start)?;
                    if is_unsized {
                        self.body.conns[conn].port |= UNSIZED;
                    }
                    self.lex.back(after);
                }
            }
            let token = self.lex.next()?;
            if token.is(b')') {
                return Ok(());
            }
            if !token.is(b',') {
                return Err(self.lex.misfit(token, start, "`,` or `)` after a pin"));
            }
        }
    }

    fn connect_to(&mut self, port: u32) -> usize {
        self.body.conns.push(Conn { port, bits: short(self.body.bits.len()) });
        self.tied.push(NO_NAME);
        self.body.conns.len() - 1
    }

    /// Reads `.port(net)` when it stands in the window in just this form.
    ///
    /// The guess, names of a port and a net, only saves looking them up.
    fn common_pin(&mut self, guess: Option<(u32, u32)>) -> Result<bool, ReadError> {
        let frame = &self.lex.top;
        let bytes = frame.text.as_bytes();
        let Some(dot) = frame.solid_from(frame.pos).filter(|&i| bytes[i] == b'.') else { return Ok(false) };
        let Some((port_start, port_end)) = frame.name_from(dot + 1) else { return Ok(false) };
        let Some(open) = frame.solid_from(port_end).filter(|&i| bytes[i] == b'(') else { return Ok(false) };
        let Some((net_start, net_end)) = frame.name_from(open + 1) else { return Ok(false) };
        let Some(close) = frame.solid_from(net_end).filter(|&i| bytes[i] == b')') else { return Ok(false) };
        let port = frame.text.get(port_start..port_end).unwrap_or_default();
        let net = frame.text.get(net_start..net_end).unwrap_or_default();
        let is_name = |name: &str| {
            !name.starts_with('$') && name != "\\" && crate::read::verilog::keyword::keyword(name).is_none()
        };
        let likely_net = guess.map(|g| g.1).filter(|&id| id != NO_NAME && self.names.get(id) == net);
        let likely_port =
            guess.map(|g| g.0).filter(|&id| id & (POSITION | UNSIZED) == 0 && self.names.get(id) == port);
        if !is_name(port) || likely_net.is_none() && !is_name(net) {
            return Ok(false);
        }
        let port = likely_port.or_else(|| self.names.intern(port.strip_prefix('\\').unwrap_or(port)));
        let is_plain = !net.starts_with('\\');
        let net = likely_net.or_else(|| self.names.intern(net.strip_prefix('\\').unwrap_or(net)));
        let spot = self.lex.spot(net_start);
        let (Some(port), Some(net)) = (port, net) else { return Err(self.too_large(spot, "names")) };
        let conn = self.connect_to(port);
        // an escaped name may spell a reserved word, which a plain one must not
        if is_plain {
            self.tied[conn] = net;
        }
        let decl = self.net(net, spot)?;
        let decl = self.body.decls[decl];
        self.body.bits.extend(decl.base..decl.base + decl.width());
        self.lex.top.pos = close + 1;
        Ok(true)
    }

    fn named_pin(&mut self, start: Spot) -> Result<(), ReadError> {
        let token = self.lex.next()?;
        if token.is(b'*') {
            let wanted = "want its pins by name: `.port(net)`";
            return Err(self.lex.syntax(token.spot, "`.*` leaves the pins to be guessed", wanted));
        }
        if !self.lex.is_name(token) {
            return Err(self.lex.misfit(token, start, "the name of a port after `.`"));
        }
        let spot = token.spot;
        let port = self.intern(token)?;
        let conn = self.connect_to(port);
        let token = self.lex.next()?;
        if token.is(b',') || token.is(b')') {
            // `.name` alone stands for `.name(name)`
            let decl = self.net(port, spot)?;
            let decl = self.body.decls[decl];
            self.body.bits.extend(decl.base..decl.base + decl.width());
            self.lex.back(token);
            return Ok(());
        }
        if !token.is(b'(') {
            return Err(self.lex.misfit(token, start, "`(` and the net of the pin"));
        }
        let token = self.lex.next()?;
        if token.is(b')') {
            return Ok(());
        }
        let (after, is_unsized) = self.expression(token, 0, start)?;
        if is_unsized {
            self.body.conns[conn].port |= UNSIZED;
        }
        if after.is(b')') {
            return Ok(());
        }
        let wanted = "`)` after one net, constant or concatenation; logic in a pin is not structure";
        Err(self.lex.misfit(after, start, wanted))
    }
}
