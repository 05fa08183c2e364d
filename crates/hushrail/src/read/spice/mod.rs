//! SPICE and CDL text to a [`Deck`]: `.model`, `.param`, `.func`, `.include`, `.lib`, `.subckt`, `.option`, elements.
//!
//! Dialect: names ignore case; `$` after a space and `;` start comments; values stand bare, in `{…}` or in `'…'`;
//! a later definition of a parameter replaces an earlier one; values of an instance win over `.param` lines inside
//! its subcircuit. Directives that only steer a simulation are noted and skipped; anything else unknown is an error.

mod cells;
mod cursor;
mod models;

use std::path::PathBuf;
use std::sync::Arc;

use rustc_hash::FxHashSet;

use crate::read::deck::{Deck, Definition, Note, PinDirection, Subckt};
use crate::read::expression::parse_prefix;
use crate::read::lines::{Lines, Loc, Logical, Step};
use crate::read::source::{ReadError, Source, nearest};
use cursor::Cursor;

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
                let scope = crate::read::deck::DeckScope::new(&self.deck, None, &[], 25.0);
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
