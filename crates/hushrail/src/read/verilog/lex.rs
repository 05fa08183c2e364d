//! Bytes to tokens, over a stack of texts: the file, the files it includes, the macros it uses.
//!
//! A token is a kind and two offsets into the text on top of the stack; nothing is copied. Pin lists, which make
//! up most of a netlist, are never cut into tokens: [`Lexer::skip_list`] runs over them byte by byte and stops
//! only where a byte can change the depth of the parentheses or hide one that would.

use std::cell::Cell;
use std::sync::Arc;

use rustc_hash::FxHashMap;

use super::directive::{Branch, Macro};
use super::files::{Files, Spot};
use super::marks::Marks;
use crate::read::source::{Input, Place, ReadError};

/// Includes and macros may nest this deep; a text that uses itself ends here.
const MAX_DEPTH: usize = 64;

const SPACE: u8 = 1;
const WORD: u8 = 2;
const DIGIT: u8 = 4;

/// What each byte can be: white space, part of a word, a digit.
static CLASS: [u8; 256] = classes();

const fn classes() -> [u8; 256] {
    let mut table = [0; 256];
    let mut byte = 0u8;
    loop {
        table[byte as usize] = match byte {
            b' ' | b'\t'..=b'\r' => SPACE,
            b'0'..=b'9' => WORD | DIGIT,
            b'a'..=b'z' | b'A'..=b'Z' | b'_' | b'$' => WORD,
            _ => 0,
        };
        if byte == u8::MAX {
            return table;
        }
        byte += 1;
    }
}

pub(super) fn is_space(byte: u8) -> bool {
    CLASS[usize::from(byte)] & SPACE != 0
}

fn is_word(byte: u8) -> bool {
    CLASS[usize::from(byte)] & WORD != 0
}

fn is_digit(byte: u8) -> bool {
    CLASS[usize::from(byte)] & DIGIT != 0
}

/// A comment, string or attribute whose end is missing.
#[derive(Debug, Clone, Copy)]
pub(super) struct Unclosed {
    what: &'static str,
    start: usize,
}

/// The end of the run of word bytes that starts at `i`.
pub(super) fn word_end(bytes: &[u8], mut i: usize) -> usize {
    while bytes.get(i).is_some_and(|&b| is_word(b)) {
        i += 1;
    }
    i
}

/// The end of an escaped identifier: the first white space after the backslash at `i`.
pub(super) fn escaped_end(bytes: &[u8], i: usize) -> usize {
    let mut end = i + 1;
    while bytes.get(end).is_some_and(|&b| !is_space(b)) {
        end += 1;
    }
    end
}

/// The end of a comment whose slash is at `i`, or nothing when the slash is just a slash.
///
/// A line comment ends before its line break.
pub(super) fn comment_end(bytes: &[u8], i: usize) -> Result<Option<usize>, Unclosed> {
    match bytes.get(i + 1) {
        Some(b'/') => {
            let rest = &bytes[i + 2..];
            Ok(Some(i + 2 + memchr::memchr(b'\n', rest).unwrap_or(rest.len())))
        }
        Some(b'*') => {
            let end = memchr::memmem::find(&bytes[i + 2..], b"*/");
            end.map(|n| Some(i + n + 4)).ok_or(Unclosed { what: "comment", start: i })
        }
        _ => Ok(None),
    }
}

/// The end of a string whose first quote is at `i`; a string ends on its line.
pub(super) fn string_end(bytes: &[u8], i: usize) -> Result<usize, Unclosed> {
    let mut end = i + 1;
    loop {
        match bytes.get(end) {
            Some(b'"') => return Ok(end + 1),
            Some(b'\\') => end += 2,
            None | Some(b'\n') => return Err(Unclosed { what: "string", start: i }),
            Some(_) => end += 1,
        }
    }
}

/// Whether an attribute `(* … *)` begins with the parenthesis at `i`.
fn is_attribute(bytes: &[u8], i: usize) -> bool {
    bytes.get(i + 1) == Some(&b'*')
}

/// The end of an attribute that begins at `i`.
fn attribute_end(bytes: &[u8], i: usize) -> Result<usize, Unclosed> {
    let mut end = i + 2;
    while let Some(&b) = bytes.get(end) {
        end = match b {
            b'*' if bytes.get(end + 1) == Some(&b')') => return Ok(end + 2),
            b'"' => string_end(bytes, end)?,
            b'\\' => escaped_end(bytes, end),
            b'/' => comment_end(bytes, end)?.unwrap_or(end + 1),
            _ => end + 1,
        };
    }
    Err(Unclosed { what: "attribute", start: i })
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Kind {
    Word,
    /// An escaped identifier; its text is the name without the backslash.
    Escaped,
    Number,
    Text,
    Symbol(u8),
    End,
}

/// A token; its text is to be taken before the next token is asked for.
#[derive(Debug, Clone, Copy)]
pub(super) struct Token {
    pub(super) kind: Kind,
    pub(super) spot: Spot,
    start: usize,
    end: usize,
}

impl Token {
    pub(super) fn is(&self, symbol: u8) -> bool {
        self.kind == Kind::Symbol(symbol)
    }
}

/// One text on the stack; of a given file, what its window shows.
pub(super) struct Frame {
    pub(super) text: Arc<str>,
    pub(super) pos: usize,
    pub(super) marks: Marks,
    /// Where in the file the text begins.
    base: usize,
    /// Whether text may follow in the file.
    pub(super) has_more: bool,
    /// The file the text is, or in which the macro is used.
    pub(super) file: usize,
    /// Where the file uses the macro whose text this is; nothing for a file.
    used_at: Option<Spot>,
    /// Conditionals open when the text began.
    pub(super) branches: usize,
}

impl Frame {
    fn of_file(files: &Files, file: usize, branches: usize) -> Self {
        let window = files.window(file);
        let text = Arc::clone(window.text());
        let pos = if text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 };
        let (base, has_more) = (window.base(), window.has_more());
        Self { pos, marks: Marks::of(&text), text, base, has_more, file, used_at: None, branches }
    }
}

pub(super) struct Lexer<'f> {
    pub(super) files: &'f mut Files,
    pub(super) top: Frame,
    below: Vec<Frame>,
    pub(super) macros: FxHashMap<String, Macro>,
    pub(super) branches: Vec<Branch>,
    /// Bytes of macro text since a file last used one.
    pub(super) expanded: usize,
    /// Where the module, the statement and a part of it begin, whose places must outlast the window.
    pub(super) module: Option<Spot>,
    pub(super) statement: Option<Spot>,
    pub(super) part: Option<Spot>,
    /// Whether the end of the text was met inside something since this was last cleared.
    pub(super) ran_out: Cell<bool>,
}

impl<'f> Lexer<'f> {
    pub(super) fn new(files: &'f mut Files) -> Self {
        Self {
            files,
            top: Frame {
                text: "".into(),
                pos: 0,
                marks: Marks::default(),
                base: 0,
                has_more: false,
                file: 0,
                used_at: None,
                branches: 0,
            },
            below: Vec::new(),
            macros: FxHashMap::default(),
            branches: Vec::new(),
            expanded: 0,
            module: None,
            statement: None,
            part: None,
            ran_out: Cell::new(false),
        }
    }

    /// Goes on with a given file; macros stay defined.
    pub(super) fn open(&mut self, input: &mut Input) -> Result<(), ReadError> {
        let file = self.files.open(input)?;
        self.top = Frame::of_file(self.files, file, self.branches.len());
        Ok(())
    }

    /// Lets go of the given file that has been read.
    pub(super) fn close(&mut self) {
        self.files.close(self.top.file);
    }

    /// Reads on in the file on top, whose text from `keep` on is still needed; false when it has no more.
    ///
    /// The present position moves along. Offsets into the text do not.
    #[cold]
    pub(super) fn read_on(&mut self, keep: usize) -> Result<bool, ReadError> {
        if !self.top.has_more {
            return Ok(false);
        }
        let mut needed: Vec<Spot> = [self.module, self.statement, self.part].into_iter().flatten().collect();
        needed.extend(self.branches.iter().map(|b| b.spot));
        let file = self.top.file;
        let moved = self.files.slide(file, keep, &needed)?;
        let window = self.files.window(file);
        self.top.has_more = window.has_more();
        if moved {
            self.top.text = Arc::clone(window.text());
            self.top.base = window.base();
            self.top.marks.set(self.top.text.as_bytes());
            self.top.pos = self.top.pos.saturating_sub(keep);
        }
        Ok(moved)
    }

    /// The place of an offset in the top text; inside a macro, of its use in the file.
    pub(super) fn spot(&self, offset: usize) -> Spot {
        self.top.used_at.unwrap_or(Spot { file: self.top.file, offset: self.top.base + offset })
    }

    pub(super) fn place(&self, spot: Spot) -> Place {
        self.files.place(spot)
    }

    pub(super) fn syntax(&self, at: Spot, found: impl Into<String>, wanted: impl Into<String>) -> ReadError {
        ReadError::Syntax { at: self.place(at), found: found.into(), wanted: wanted.into() }
    }

    /// The error for a file that ends inside `what`, which begins at `at`.
    pub(super) fn cut_off(&self, at: Spot, what: &str, end: &str) -> ReadError {
        self.ran_out.set(true);
        let found = format!("the file ends inside the {what} that begins here");
        self.syntax(at, found, format!("want {end} before the end; is the file cut off?"))
    }

    pub(super) fn unclosed(&self, open: Unclosed) -> ReadError {
        let at = self.spot(open.start);
        if self.lacks_line_end(open.start) {
            self.ran_out.set(true);
        }
        match open.what {
            "string" => self.syntax(at, "this string does not end on its line", "close it with `\"`"),
            "comment" => self.cut_off(at, "comment", "`*/`"),
            what => self.cut_off(at, what, "`*)`"),
        }
    }

    /// Puts the text of a macro on the stack.
    pub(super) fn enter_macro(&mut self, text: Arc<str>, used_at: Spot) -> Result<(), ReadError> {
        let file = self.top.file;
        let frame = Frame {
            pos: 0,
            marks: Marks::of(&text),
            text,
            base: 0,
            has_more: false,
            file,
            used_at: Some(used_at),
            branches: self.branches.len(),
        };
        self.enter(frame, used_at)
    }

    /// Puts a file on the stack.
    pub(super) fn enter_file(&mut self, file: usize, used_at: Spot) -> Result<(), ReadError> {
        self.enter(Frame::of_file(self.files, file, self.branches.len()), used_at)
    }

    fn enter(&mut self, frame: Frame, used_at: Spot) -> Result<(), ReadError> {
        if self.below.len() >= MAX_DEPTH {
            let found = format!("includes or macros nest deeper than {MAX_DEPTH} levels here");
            return Err(self.syntax(used_at, found, "a file or a macro must not use itself"));
        }
        self.below.push(std::mem::replace(&mut self.top, frame));
        Ok(())
    }

    /// Whether the top text is that of a macro.
    pub(super) fn in_macro(&self) -> bool {
        self.top.used_at.is_some()
    }

    /// Leaves the top text at its end; false when it is the given file.
    fn leave(&mut self) -> Result<bool, ReadError> {
        if self.branches.len() > self.top.branches {
            return Err(self.open_branch());
        }
        Ok(self.below.pop().map(|frame| self.top = frame).is_some())
    }

    /// The text of the token read last.
    pub(super) fn text(&self, token: Token) -> &str {
        self.top.text.get(token.start..token.end).unwrap_or_default()
    }

    /// The token read last, as messages show it.
    pub(super) fn shown(&self, token: Token) -> String {
        let text = self.text(token);
        match text.char_indices().nth(40) {
            _ if token.kind == Kind::End => "the end of the file".into(),
            Some((cut, _)) => format!("`{}…`", &text[..cut]),
            None => format!("`{text}`"),
        }
    }

    /// Takes the token read last back.
    pub(super) fn back(&mut self, token: Token) {
        self.top.pos = if token.kind == Kind::Escaped { token.start - 1 } else { token.start };
    }

    /// The next token; comments, attributes, white space and directives are none.
    pub(super) fn next(&mut self) -> Result<Token, ReadError> {
        loop {
            let bytes = self.top.text.as_bytes();
            let mut i = self.top.pos;
            while bytes.get(i).is_some_and(|&b| is_space(b)) {
                i += 1;
            }
            let Some(&b) = bytes.get(i) else {
                self.top.pos = i;
                if self.read_on(i)? || self.leave()? {
                    continue;
                }
                return Ok(self.token(Kind::End, i, i));
            };
            let skipped = match b {
                b'/' => comment_end(bytes, i),
                b'(' if is_attribute(bytes, i) => attribute_end(bytes, i).map(Some),
                b'`' => {
                    self.top.pos = i;
                    self.directive()?;
                    continue;
                }
                _ => Ok(None),
            };
            match skipped {
                Ok(Some(end)) if self.may_go_on(end) => {
                    self.top.pos = i;
                    self.read_on(i)?;
                    continue;
                }
                Ok(Some(end)) => {
                    self.top.pos = end;
                    continue;
                }
                Ok(None) => {}
                Err(_) if self.read_on(i)? => {
                    self.top.pos = 0;
                    continue;
                }
                Err(open) => return Err(self.unclosed(open)),
            }
            let (kind, start, end) = match b {
                b'"' => match string_end(bytes, i) {
                    Ok(end) => (Kind::Text, i, end),
                    Err(_) if self.lacks_line_end(i) && self.read_on(i)? => {
                        self.top.pos = 0;
                        continue;
                    }
                    Err(open) => return Err(self.unclosed(open)),
                },
                b'\\' => (Kind::Escaped, i + 1, escaped_end(bytes, i)),
                _ if is_digit(b) => (Kind::Number, i, number_end(bytes, i)),
                _ if is_word(b) => (Kind::Word, i, self.top.marks.word_end(i).min(bytes.len())),
                _ if b.is_ascii_graphic() => (Kind::Symbol(b), i, i + 1),
                _ => {
                    let c = self.top.text.get(i..).and_then(|t| t.chars().next()).unwrap_or_default();
                    let found = format!("the character `{}`", c.escape_default());
                    return Err(self.syntax(self.spot(i), found, "want ASCII text outside of comments"));
                }
            };
            if self.may_go_on(end) {
                self.top.pos = i;
                self.read_on(i)?;
                continue;
            }
            if kind == Kind::Escaped && start == end {
                let wanted = "want a name right after the backslash of an escaped identifier";
                return Err(self.syntax(self.spot(i), "a backslash without a name", wanted));
            }
            self.top.pos = end;
            return Ok(self.token(kind, start, end));
        }
    }

    fn token(&self, kind: Kind, start: usize, end: usize) -> Token {
        let shift = usize::from(kind == Kind::Escaped);
        Token { kind, spot: self.spot(start - shift), start, end }
    }

    /// Whether what ends at `end` might be longer, or mean something else, with the text that follows the window.
    fn may_go_on(&self, end: usize) -> bool {
        self.top.has_more && end + 1 >= self.top.text.len()
    }

    /// Whether the window ends on the line of `i`.
    pub(super) fn lacks_line_end(&self, i: usize) -> bool {
        self.top.has_more && memchr::memchr(b'\n', &self.top.text.as_bytes()[i..]).is_none()
    }

    /// Runs to the parenthesis that closes `depth` open ones, of the statement that begins at `statement`.
    pub(super) fn skip_list(&mut self, mut depth: usize, statement: Spot) -> Result<(), ReadError> {
        loop {
            let (i, stop) = match self.top.run_list(&mut depth) {
                Stop::Closed => return Ok(()),
                Stop::End => (self.top.text.len(), None),
                Stop::At(i, stop) => (i, Some(stop)),
            };
            self.top.pos = i;
            match stop {
                Some(Thing::Directive) => self.directive()?,
                Some(Thing::Semicolon) => {
                    let found = format!(
                        "`;` inside the parentheses of the statement that begins at {}",
                        self.place(statement)
                    );
                    return Err(self.syntax(self.spot(i), found, "close them with `)` before `;`"));
                }
                Some(Thing::Unclosed(_)) | None if self.read_on(i)? => {}
                Some(Thing::Unclosed(open)) => return Err(self.unclosed(open)),
                Some(Thing::Cut) => {
                    self.read_on(i)?;
                }
                None if self.leave()? => {}
                None => return Err(self.cut_off(statement, "statement", "`)` and `;`")),
            }
        }
    }
}

/// Why a run over a pin list stops.
enum Stop {
    /// The last parenthesis is closed, and the position behind it.
    Closed,
    /// The text ends.
    End,
    At(usize, Thing),
}

enum Thing {
    Directive,
    Semicolon,
    /// Something that the end of the window may have cut.
    Cut,
    Unclosed(Unclosed),
}

impl Frame {
    /// Runs over a pin list from the present position on, as far as the text goes without help.
    fn run_list(&mut self, depth: &mut usize) -> Stop {
        let bytes = self.text.as_bytes();
        let mut start = self.pos;
        'jump: loop {
            for i in self.marks.from(start) {
                let byte = bytes.get(i).copied().unwrap_or_default();
                if byte == b')' {
                    *depth -= 1;
                    if *depth == 0 {
                        self.pos = i + 1;
                        return Stop::Closed;
                    }
                    continue;
                }
                let next = bytes.get(i + 1);
                if byte == b'(' && next.is_some_and(|&b| b != b'*') {
                    *depth += 1;
                    continue;
                }
                let end = match byte {
                    _ if next.is_none() && self.has_more => return Stop::At(i, Thing::Cut),
                    b'(' if next.is_some() => attribute_end(bytes, i),
                    b'(' => {
                        *depth += 1;
                        continue;
                    }
                    b'\\' => Ok(escaped_end(bytes, i)),
                    b'/' => match comment_end(bytes, i) {
                        Ok(None) => continue,
                        Ok(Some(end)) => Ok(end),
                        Err(open) => Err(open),
                    },
                    b'"' => string_end(bytes, i),
                    b'`' => return Stop::At(i, Thing::Directive),
                    b';' => return Stop::At(i, Thing::Semicolon),
                    _ => return Stop::End,
                };
                match end {
                    Ok(end) if self.has_more && end + 1 >= bytes.len() => return Stop::At(i, Thing::Cut),
                    Ok(end) => {
                        start = end;
                        continue 'jump;
                    }
                    Err(open) => return Stop::At(i, Thing::Unclosed(open)),
                }
            }
            return Stop::End;
        }
    }

    /// The plain or escaped name at or after `i`, its first byte and its end, when all of it and the byte
    /// after it are in the text.
    #[inline]
    pub(super) fn name_from(&self, mut i: usize) -> Option<(usize, usize)> {
        let bytes = self.text.as_bytes();
        i = self.solid_from(i)?;
        let first = *bytes.get(i)?;
        let end = match first {
            b'\\' => escaped_end(bytes, i),
            _ if is_word(first) && !is_digit(first) => self.marks.word_end(i),
            _ => return None,
        };
        (end + 1 < bytes.len()).then_some((i, end))
    }

    /// The first byte at or after `i` that is no white space.
    #[inline]
    pub(super) fn solid_from(&self, mut i: usize) -> Option<usize> {
        let bytes = self.text.as_bytes();
        while is_space(*bytes.get(i)?) {
            i += 1;
        }
        Some(i)
    }
}

/// The end of a number that starts at `i`; digits may hold `_`, a fraction and letters (checked by whoever needs
/// the value).
fn number_end(bytes: &[u8], i: usize) -> usize {
    let end = word_end(bytes, i);
    match (bytes.get(end), bytes.get(end + 1)) {
        (Some(b'.'), Some(&digit)) if is_digit(digit) => word_end(bytes, end + 1),
        _ => end,
    }
}
