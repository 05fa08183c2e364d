//! SPICE and CDL text to a [`Deck`]: `.model`, `.param`, `.func`, `.include`, `.lib`, `.subckt`, `.option`, elements.
//!
//! Dialect: names ignore case; `$` after a space and `;` start comments; values stand bare, in `{…}` or in `'…'`;
//! a later definition of a parameter replaces an earlier one; values of an instance win over `.param` lines inside
//! its subcircuit. Directives that only steer a simulation are noted and skipped; anything else unknown is an error.

use std::path::PathBuf;
use std::sync::Arc;

use indexmap::IndexMap;
use rustc_hash::FxHashSet;

use super::deck::{Deck, Definition, Element, ModelText, Note, PinDirection, Subckt};
use super::expression::{Expr, UserFunction, parse_prefix};
use super::lines::{Lines, Loc, Logical, Step};
use super::source::{ReadError, Source, nearest};

/// How to read a deck.
#[derive(Debug, Clone, Default)]
#[non_exhaustive]
pub struct DeckOptions {
    /// The `.lib` section to take from each top file that has sections.
    pub section: Option<String>,
    /// Paths, as the deck writes them, whose `.include` is skipped, with a note.
    pub skip_includes: Vec<String>,
    /// Metres per unit of length when the deck has no `.option scale`.
    pub scale_m: Option<f64>,
}

impl DeckOptions {
    /// Takes one `.lib` section.
    #[must_use]
    pub fn section(mut self, name: &str) -> Self {
        self.section = Some(name.to_owned());
        self
    }
    /// Skips an include.
    #[must_use]
    pub fn skip_include(mut self, file: &str) -> Self {
        self.skip_includes.push(file.to_owned());
        self
    }
    /// Sets the scale for text that does not give it.
    #[must_use]
    pub fn scale(mut self, metres: f64) -> Self {
        self.scale_m = Some(metres);
        self
    }
}

const MAX_INCLUDE_DEPTH: usize = 32;
/// Directives of simulation decks that say nothing about devices or cells.
const RUN_ONLY: [&str; 22] = [
    ".ac",
    ".backanno",
    ".connect",
    ".dc",
    ".end",
    ".four",
    ".global",
    ".ic",
    ".meas",
    ".measure",
    ".nodeset",
    ".noise",
    ".op",
    ".plot",
    ".print",
    ".probe",
    ".save",
    ".temp",
    ".title",
    ".tran",
    ".width",
    ".protect",
];
const DIRECTIVES: [&str; 14] = [
    ".model",
    ".param",
    ".parameters",
    ".func",
    ".include",
    ".inc",
    ".lib",
    ".endl",
    ".subckt",
    ".macro",
    ".ends",
    ".eom",
    ".option",
    ".options",
];

/// Reads SPICE text from several sources, in order, into one deck.
///
/// # Errors
/// The first thing wrong, with file, line and column: see [`ReadError`].
pub fn read_deck(sources: &[Source], options: &DeckOptions) -> Result<Deck, ReadError> {
    let mut r =
        Reader { options, deck: Deck::default(), names: FxHashSet::default(), open: Vec::new(), depth: 0 };
    for s in sources {
        r.file(s, options.section.as_deref())?;
        if let Some(sub) = r.open.last() {
            let place = sub.loc.place(&r.deck.files);
            return Err(ReadError::Syntax {
                at: place,
                found: format!("subcircuit `{}` has no `.ends`; the file ends inside it", sub.name),
                wanted: "want `.ends`; the file may be cut off".into(),
            });
        }
    }
    if r.deck.scale_m.is_none() {
        r.deck.scale_m = options.scale_m;
    }
    if r.deck.models.is_empty()
        && r.deck.subckts.is_empty()
        && r.deck.params.is_empty()
        && let Some(s) = sources.first()
    {
        return Err(s.nothing("SPICE model, parameter or subcircuit"));
    }
    Ok(r.deck)
}

struct Reader<'a> {
    options: &'a DeckOptions,
    deck: Deck,
    names: FxHashSet<Arc<str>>,
    open: Vec<Subckt>,
    depth: usize,
}

/// A position in one logical line.
struct Cursor<'a> {
    line: &'a Logical,
    at: usize,
}

impl Cursor<'_> {
    fn rest(&self) -> &str {
        &self.line.text[self.at..]
    }
    fn loc(&self) -> Loc {
        self.line.loc(self.at)
    }
    fn skip(&mut self, also: &[char]) {
        let r = self.rest();
        self.at += r.len() - r.trim_start_matches(|c: char| c.is_whitespace() || also.contains(&c)).len();
    }
    /// The next word: up to white space or one of `= ( ) , { ' "`.
    fn word(&mut self) -> (String, Loc) {
        self.skip(&[]);
        let loc = self.loc();
        let end = self.rest().find(|c: char| c.is_whitespace() || "=(),{}'\"".contains(c));
        let word = self.rest()[..end.unwrap_or(self.rest().len())].to_owned();
        self.at += word.len();
        (word, loc)
    }
    fn takes(&mut self, c: char) -> bool {
        self.skip(&[]);
        let yes = self.rest().starts_with(c);
        if yes {
            self.at += c.len_utf8();
        }
        yes
    }
    fn is_end(&mut self) -> bool {
        self.skip(&[]);
        self.rest().is_empty()
    }
}

impl Reader<'_> {
    fn name(&mut self, text: &str) -> Arc<str> {
        if let Some(n) = self.names.get(text) {
            return Arc::clone(n);
        }
        let n: Arc<str> = text.into();
        self.names.insert(Arc::clone(&n));
        n
    }
    fn lower(&mut self, text: &str) -> Arc<str> {
        if text.bytes().any(|b| b.is_ascii_uppercase()) {
            self.name(&text.to_ascii_lowercase())
        } else {
            self.name(text)
        }
    }
    fn wrong(&self, loc: Loc, found: impl Into<String>, wanted: impl Into<String>) -> ReadError {
        ReadError::Syntax { at: loc.place(&self.deck.files), found: found.into(), wanted: wanted.into() }
    }

    fn file(&mut self, source: &Source, section: Option<&str>) -> Result<(), ReadError> {
        let file = u32::try_from(self.deck.files.len()).unwrap_or(u32::MAX);
        self.deck.files.push(Arc::clone(&source.path));
        let mut lines = Lines::new(&source.text, file);
        let mut line = Logical::default();
        let mut sections: Vec<String> = Vec::new();
        let mut inside: Option<(String, Loc)> = None;
        let mut taken = false;
        while let Some(step) = lines.next_into(&mut line) {
            if let Step::Declaration(text, number) = step {
                if section.is_none() || inside.as_ref().is_some_and(|(n, _)| Some(n.as_str()) == section) {
                    self.declaration(text, Loc { file, line: number, column: 1 })?;
                }
                continue;
            }
            let mut c = Cursor { line: &line, at: 0 };
            let (word, loc) = c.word();
            let lower = word.to_ascii_lowercase();
            if lower == ".endl" {
                if inside.take().is_none() {
                    return Err(self.wrong(loc, "`.endl` without a `.lib` section", "remove it"));
                }
                continue;
            }
            if lower == ".lib" && !has_two_words(&c) {
                let (name, _) = c.word();
                if let Some((open, _)) = &inside {
                    let open = open.clone();
                    return Err(self.wrong(
                        loc,
                        format!("section `{name}` starts inside section `{open}`"),
                        "want `.endl` first",
                    ));
                }
                let name = name.to_ascii_lowercase();
                sections.push(name.clone());
                taken |= section.is_some_and(|s| s.eq_ignore_ascii_case(&name));
                inside = Some((name, loc));
                continue;
            }
            let active = match (&inside, section) {
                (None, _) => true,
                (Some((name, _)), Some(s)) => name.eq_ignore_ascii_case(s),
                (Some(_), None) => false,
            };
            if active {
                self.statement(&lower, &word, loc, c, source)?;
            }
        }
        if let Some((name, loc)) = inside {
            return Err(self.wrong(
                loc,
                format!("section `{name}` has no `.endl`"),
                "the file may be cut off",
            ));
        }
        match section {
            Some(s) if !taken && !sections.is_empty() => {
                let at = Loc { file, line: 1, column: 1 }.place(&self.deck.files);
                let near = nearest(s, sections.iter().map(String::as_str));
                Err(ReadError::Unknown {
                    at,
                    kind: "section",
                    name: s.to_owned(),
                    nearest: near.or(sections.pop()),
                })
            }
            None if !sections.is_empty() => Err(ReadError::Syntax {
                at: Loc { file, line: 1, column: 1 }.place(&self.deck.files),
                found: format!("the file has sections ({}) and none was chosen", sections.join(", ")),
                wanted: "name the section to take".into(),
            }),
            _ => Ok(()),
        }
    }

    fn declaration(&mut self, text: &str, loc: Loc) -> Result<(), ReadError> {
        let mut words = text.split_whitespace();
        match words.next().unwrap_or("").to_ascii_lowercase().as_str() {
            ".pininfo" => {
                if let Some(sub) = self.open.last_mut() {
                    for w in words {
                        let (pin, dir) = w.split_once(':').unwrap_or((w, ""));
                        let dir = match dir.to_ascii_uppercase().as_str() {
                            "I" => PinDirection::Input,
                            "O" => PinDirection::Output,
                            "B" | "IO" => PinDirection::Inout,
                            _ => continue,
                        };
                        sub.directions.insert(pin.into(), dir);
                    }
                }
            }
            ".scale" => match words.next().unwrap_or("").to_ascii_lowercase().as_str() {
                "micron" => self.deck.scale_m = Some(1e-6),
                "meter" => self.deck.scale_m = Some(1.0),
                other => {
                    let found = format!("`*.SCALE {other}`");
                    return Err(self.wrong(loc, found, "want MICRON or METER"));
                }
            },
            _ => {}
        }
        Ok(())
    }

    fn statement(
        &mut self,
        lower: &str,
        word: &str,
        loc: Loc,
        mut c: Cursor<'_>,
        source: &Source,
    ) -> Result<(), ReadError> {
        match lower {
            ".model" => self.model(&mut c),
            ".param" | ".parameters" => self.params(&mut c),
            ".func" => self.function(&mut c),
            ".include" | ".inc" => self.include(&mut c, None, source),
            ".lib" => self.include(&mut c, Some(()), source),
            ".subckt" | ".macro" => self.subckt(&mut c),
            ".ends" | ".eom" => self.ends(&mut c, loc),
            ".option" | ".options" => self.option(&mut c),
            _ if RUN_ONLY.contains(&lower) => {
                let place = loc.place(&self.deck.files);
                if lower != ".end" {
                    self.deck.notes.push(Note::new(
                        "directive-skipped",
                        format!("{place}: `{word}` says nothing of devices; skipped"),
                    ));
                }
                Ok(())
            }
            _ if lower.starts_with('.') => {
                let near = nearest(lower, DIRECTIVES);
                Err(ReadError::Unknown {
                    at: loc.place(&self.deck.files),
                    kind: "directive",
                    name: word.to_owned(),
                    nearest: near,
                })
            }
            _ => self.element(word, loc, &mut c),
        }
    }

    /// `name = expression`, the cursor behind the name.
    fn value(&mut self, c: &mut Cursor<'_>) -> Result<Definition, ReadError> {
        c.skip(&[]);
        let loc = c.loc();
        match parse_prefix(c.rest()) {
            Ok((expr, used)) => {
                c.at += used;
                Ok(Definition { expr, loc })
            }
            Err(stop) => {
                c.at += stop.offset;
                let loc = c.loc();
                Err(self.wrong(loc, format!("found {}", stop.found), stop.wanted))
            }
        }
    }

    fn key(&mut self, c: &mut Cursor<'_>, what: &str) -> Result<(Arc<str>, Loc), ReadError> {
        c.skip(&[',']);
        let (word, loc) = c.word();
        if word.is_empty() || !c.takes('=') {
            let found = if word.is_empty() {
                format!("found `{}`", c.rest().chars().take(20).collect::<String>())
            } else {
                format!("found `{word}` without a value")
            };
            return Err(self.wrong(loc, found, format!("want `name = value` in this {what}")));
        }
        Ok((self.lower(&word), loc))
    }

    fn model(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        let (name, loc) = c.word();
        let (kind, kind_loc) = c.word();
        if name.is_empty() || kind.is_empty() {
            return Err(self.wrong(
                kind_loc,
                "`.model` without a name and a type",
                "want `.model NAME nmos …`",
            ));
        }
        let mut values = Vec::with_capacity(300);
        let bracket = c.takes('(');
        loop {
            c.skip(&[',']);
            if bracket && c.takes(')') {
                if !c.is_end() {
                    let l = c.loc();
                    return Err(self.wrong(l, "text behind the closing `)`", "want the end of the model"));
                }
                break;
            }
            if c.is_end() {
                if bracket {
                    let l = c.loc();
                    return Err(self.wrong(l, "the model ends", "want the closing `)`"));
                }
                break;
            }
            let (key, key_loc) = self.key(c, "model")?;
            if &*key == "version" {
                // versions may have three parts: 4.8.2 reads as 4.82
                c.skip(&[]);
                let l = c.loc();
                let (text, _) = c.word();
                if let Some((expr, ())) = version_number(&text).map(|v| (Expr::Num(v), ())) {
                    values.push((key, Definition { expr, loc: l }));
                    continue;
                }
                c.at -= text.len();
            }
            let mut def = self.value(c)?;
            def.loc = key_loc;
            values.push((key, def));
        }
        let model = ModelText { name: self.lower(&name), kind: self.lower(&kind), values, loc };
        match self.open.last_mut() {
            Some(sub) => sub.models.push(model),
            None => self.deck.models.push(model),
        }
        Ok(())
    }

    fn params(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        while !c.is_end() {
            c.skip(&[',']);
            let before = c.at;
            let (word, _) = c.word();
            if c.rest().starts_with('(') && !word.is_empty() {
                c.at = before;
                self.function(c)?;
                return Ok(());
            }
            c.at = before;
            let (key, key_loc) = self.key(c, "parameter list")?;
            let mut def = self.value(c)?;
            def.loc = key_loc;
            match self.open.last_mut() {
                Some(sub) => sub.params.insert(key, def),
                None => self.deck.params.insert(key, def),
            };
        }
        Ok(())
    }

    fn function(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        let (name, loc) = c.word();
        if name.is_empty() || !c.takes('(') {
            return Err(self.wrong(
                loc,
                "a function without arguments",
                "want `.func name(x, y) {expression}`",
            ));
        }
        let mut args = Vec::new();
        loop {
            c.skip(&[',']);
            if c.takes(')') {
                break;
            }
            let (arg, l) = c.word();
            if arg.is_empty() {
                return Err(self.wrong(
                    l,
                    "a broken argument list",
                    "want names separated by commas and `)`",
                ));
            }
            args.push(self.lower(&arg));
        }
        c.takes('=');
        let body = self.value(c)?.expr;
        let key = self.lower(&name);
        self.deck.functions.insert(key, Arc::new(UserFunction { args, body }));
        Ok(())
    }

    fn include(&mut self, c: &mut Cursor<'_>, lib: Option<()>, source: &Source) -> Result<(), ReadError> {
        c.skip(&[]);
        let loc = c.loc();
        let quote = c.rest().chars().next().filter(|q| *q == '"' || *q == '\'');
        let path = if let Some(q) = quote {
            c.at += 1;
            let Some(end) = c.rest().find(q) else {
                return Err(self.wrong(loc, "a file name without closing quote", "want the closing quote"));
            };
            let p = c.rest()[..end].to_owned();
            c.at += end + 1;
            p
        } else {
            let end = c.rest().find(char::is_whitespace).unwrap_or(c.rest().len());
            let p = c.rest()[..end].to_owned();
            c.at += end;
            p
        };
        if path.is_empty() {
            return Err(self.wrong(loc, "no file name", "want the path of the file to include"));
        }
        let section = if lib.is_some() { Some(c.word().0) } else { None };
        if self.options.skip_includes.contains(&path) {
            let place = loc.place(&self.deck.files);
            self.deck.notes.push(Note::new("include-skipped", format!("{place}: `{path}` skipped as asked")));
            return Ok(());
        }
        if self.depth >= MAX_INCLUDE_DEPTH {
            return Err(self.wrong(
                loc,
                "includes nested more than 32 deep",
                "look for a file that includes itself",
            ));
        }
        let full: PathBuf = source.folder.join(&path);
        let inner = Source::open(&full).map_err(|e| match e {
            ReadError::Io { path, reason, .. } => ReadError::Syntax {
                at: loc.place(&self.deck.files),
                found: format!("the included file `{path}` cannot be read: {reason}"),
                wanted: "paths are relative to the file that includes them".into(),
            },
            other => other,
        })?;
        self.depth += 1;
        let done = self.file(&inner, section.as_deref());
        self.depth -= 1;
        done
    }

    fn subckt(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        let (name, loc) = c.word();
        if name.is_empty() {
            return Err(self.wrong(loc, "`.subckt` without a name", "want `.subckt NAME port port …`"));
        }
        if let Some(outer) = self.open.last() {
            let outer = outer.name.clone();
            return Err(self.wrong(
                loc,
                format!("subcircuit `{name}` starts inside `{outer}`"),
                "want `.ends` first: nested definitions are not supported",
            ));
        }
        let mut sub = Subckt {
            name: name.as_str().into(),
            ports: Vec::new(),
            params: IndexMap::new(),
            models: Vec::new(),
            elements: Vec::new(),
            directions: IndexMap::new(),
            loc,
        };
        while !c.is_end() {
            c.skip(&['(', ')', ',']);
            let before = c.at;
            let (word, l) = c.word();
            if word.is_empty() {
                if c.is_end() {
                    break;
                }
                return Err(self.wrong(l, "a broken port list", "want port names, then `name = value`"));
            }
            if c.takes('=') {
                c.at = before;
                let (key, key_loc) = self.key(c, "subcircuit line")?;
                let mut def = self.value(c)?;
                def.loc = key_loc;
                sub.params.insert(key, def);
            } else if word.eq_ignore_ascii_case("params:") || word == "/" {
            } else if sub.ports.iter().any(|p| **p == *word) {
                return Err(self.wrong(l, format!("port `{word}` stands twice"), "want each port once"));
            } else {
                sub.ports.push(word.into());
            }
        }
        self.open.push(sub);
        Ok(())
    }

    fn ends(&mut self, c: &mut Cursor<'_>, loc: Loc) -> Result<(), ReadError> {
        let (name, _) = c.word();
        let Some(sub) = self.open.pop() else {
            return Err(self.wrong(loc, "`.ends` without `.subckt`", "remove it"));
        };
        if !name.is_empty() && !name.eq_ignore_ascii_case(&sub.name) {
            let want = format!("want `.ends {}`", sub.name);
            return Err(self.wrong(loc, format!("`.ends {name}` closes nothing"), want));
        }
        let key = self.lower(&sub.name);
        if let Some(first) = self.deck.subckts.get(&key) {
            let at = first.loc.place(&self.deck.files);
            return Err(self.wrong(
                sub.loc,
                format!("subcircuit `{}` is defined a second time", sub.name),
                format!("the first definition is at {at}; keep one"),
            ));
        }
        self.deck.subckts.insert(key, sub);
        Ok(())
    }

    fn option(&mut self, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        while !c.is_end() {
            c.skip(&[',']);
            let (word, loc) = c.word();
            if word.is_empty() {
                return Err(self.wrong(loc, "a broken option", "want `name = value`"));
            }
            let key = word.to_ascii_lowercase();
            if !c.takes('=') {
                continue;
            }
            let def = self.value(c)?;
            if key == "scale" {
                let scope = super::deck::DeckScope::new(&self.deck, None, &[], 25.0);
                let v = self.deck.eval(&def, &scope)?;
                if v <= 0.0 {
                    return Err(self.wrong(
                        loc,
                        format!("scale = {v}"),
                        "want metres per unit, such as 1e-6",
                    ));
                }
                self.deck.scale_m = Some(v);
            } else if key != "scalm" {
                let place = loc.place(&self.deck.files);
                let text = format!("{place}: option `{key}` has no effect on the computation");
                self.deck.notes.push(Note::new("option-skipped", text));
            }
        }
        Ok(())
    }

    fn element(&mut self, name: &str, loc: Loc, c: &mut Cursor<'_>) -> Result<(), ReadError> {
        let kind = name.chars().next().unwrap_or(' ').to_ascii_uppercase();
        if !"MXDRC".contains(kind) {
            return Err(self.wrong(
                loc,
                format!("found `{name}`"),
                "want an element (M, X, D, R, C) or a directive that starts with a dot",
            ));
        }
        let mut words: Vec<(String, Loc)> = Vec::new();
        let mut value = None;
        let mut params = Vec::new();
        while !c.is_end() {
            c.skip(&['(', ')', ',']);
            if c.is_end() {
                break;
            }
            let before = c.at;
            if c.rest().starts_with(['{', '\'']) {
                value = Some(self.value(c)?);
                continue;
            }
            let (word, l) = c.word();
            if word.is_empty() {
                return Err(self.wrong(
                    l,
                    "a stray character",
                    "want nodes, a model and `name = value` pairs",
                ));
            }
            if c.takes('=') {
                if word.starts_with('$') {
                    c.word(); // layout remark of a CDL netlist
                    continue;
                }
                c.at = before;
                let (key, key_loc) = self.key(c, "element")?;
                let mut def = self.value(c)?;
                def.loc = key_loc;
                params.push((key, def));
            } else if word == "/" || word.starts_with("$[") {
            } else if !params.is_empty() {
                return Err(self.wrong(
                    l,
                    format!("found `{word}` behind the parameters"),
                    "want `name = value`",
                ));
            } else {
                words.push((word, l));
            }
        }
        let fixed = match kind {
            'M' => Some(4),
            'D' | 'R' | 'C' => Some(2),
            _ => None,
        };
        let n_nodes = fixed.unwrap_or_else(|| words.len().saturating_sub(1));
        let enough =
            if matches!(kind, 'R' | 'C') { words.len() >= 2 } else { words.len() > n_nodes && n_nodes > 0 };
        if !enough {
            let what = match kind {
                'M' => "want drain, gate, source, body and model",
                'D' => "want anode, cathode and model",
                'X' => "want nodes and the name of a subcircuit",
                _ => "want two nodes and a value",
            };
            return Err(self.wrong(loc, format!("`{name}` has {} words", words.len()), what));
        }
        let mut rest = words.split_off(n_nodes).into_iter();
        let mut model: Arc<str> = "".into();
        if let Some((w, l)) = rest.next() {
            match super::number::whole_number(&w) {
                Some(v) if matches!(kind, 'R' | 'C') => {
                    value = Some(Definition { expr: Expr::Num(v), loc: l });
                }
                _ => model = self.lower(&w),
            }
        }
        if let Some((w, l)) = rest.next() {
            match super::number::whole_number(&w) {
                Some(v) if value.is_none() => value = Some(Definition { expr: Expr::Num(v), loc: l }),
                _ => return Err(self.wrong(l, format!("found `{w}`"), "want `name = value`")),
            }
        }
        let nodes = words.into_iter().map(|(w, _)| self.name(&w)).collect();
        let element = Element { name: name.into(), kind, nodes, model, value, params, loc };
        let Some(sub) = self.open.last_mut() else {
            return Err(self.wrong(
                loc,
                format!("element `{name}` stands outside a subcircuit"),
                "want cells as `.subckt … .ends`",
            ));
        };
        sub.elements.push(element);
        Ok(())
    }
}

/// Whether `.lib` is followed by a file and a section, and so calls a section instead of opening one.
fn has_two_words(c: &Cursor<'_>) -> bool {
    let rest = c.rest().trim();
    let first_end = match rest.chars().next() {
        Some(q @ ('"' | '\'')) => rest[1..].find(q).map(|i| i + 2),
        _ => rest.find(char::is_whitespace),
    };
    first_end.is_some_and(|i| !rest[i..].trim().is_empty())
}

/// `4.5` as it is, `4.8.2` as 4.82.
fn version_number(text: &str) -> Option<f64> {
    let mut parts = text.splitn(2, '.');
    let major = parts.next()?;
    let minor: String = parts.next().unwrap_or("0").chars().filter(|c| *c != '.').collect();
    if major.is_empty() || !major.bytes().chain(minor.bytes()).all(|b| b.is_ascii_digit()) {
        return None;
    }
    format!("{major}.{minor}").parse().ok()
}
