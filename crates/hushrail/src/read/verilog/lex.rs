//! Bytes to tokens, over a stack of texts: the file, the files it includes, the macros it uses.
//!
//! A token is a kind and two offsets into the text on top of the stack; nothing is copied. Pin lists, which make
//! up most of a netlist, are never cut into tokens: [`Lexer::skip_list`] runs over them byte by byte and stops
//! only where a byte can change the depth of the parentheses or hide one that would.

use std::sync::Arc;

use rustc_hash::FxHashMap;

use super::directive::{Branch, Macro};
use super::files::{Files, Spot};
use crate::read::source::{Place, ReadError};

/// Includes and macros may nest this deep; a text that uses itself ends here.
const MAX_DEPTH: usize = 64;

const SPACE: u8 = 1;
const WORD: u8 = 2;
const DIGIT: u8 = 4;
const LIST: u8 = 8;

/// What each byte can be: white space, part of a word, a digit, a byte that matters inside a pin list.
static CLASS: [u8; 256] = classes();

const fn classes() -> [u8; 256] {
    let mut table = [0; 256];
    let mut byte = 0u8;
    loop {
        table[byte as usize] = match byte {
            b' ' | b'\t'..=b'\r' => SPACE,
            b'0'..=b'9' => WORD | DIGIT,
            b'a'..=b'z' | b'A'..=b'Z' | b'_' | b'$' => WORD,
            b'(' | b')' | b';' | b'/' | b'"' | b'\\' | b'`' => LIST,
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
            Ok(Some(i + 2 + rest.iter().position(|&b| b == b'\n').unwrap_or(rest.len())))
        }
        Some(b'*') => {
            let end = bytes[i + 2..].windows(2).position(|w| w == b"*/");
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

/// One text on the stack.
pub(super) struct Frame {
    pub(super) text: Arc<str>,
    pub(super) pos: usize,
    /// The file the text is, or in which the macro is used.
    pub(super) file: usize,
    /// Where the file uses the macro whose text this is; nothing for a file.
    used_at: Option<Spot>,
    /// Conditionals open when the text began.
    pub(super) branches: usize,
}

impl Frame {
    fn of_file(files: &Files, file: usize, branches: usize) -> Self {
        let text = files.text(file);
        let pos = if text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 };
        Self { text, pos, file, used_at: None, branches }
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
}

impl<'f> Lexer<'f> {
    pub(super) fn new(files: &'f mut Files) -> Self {
        Self {
            files,
            top: Frame { text: "".into(), pos: 0, file: 0, used_at: None, branches: 0 },
            below: Vec::new(),
            macros: FxHashMap::default(),
            branches: Vec::new(),
            expanded: 0,
        }
    }

    /// Goes on with a given file; macros stay defined.
    pub(super) fn open(&mut self, file: usize) {
        self.top = Frame::of_file(self.files, file, self.branches.len());
    }

    /// The place of an offset in the top text; inside a macro, of its use in the file.
    pub(super) fn spot(&self, offset: usize) -> Spot {
        self.top.used_at.unwrap_or(Spot { file: self.top.file, offset })
    }

    pub(super) fn place(&self, spot: Spot) -> Place {
        self.files.place(spot)
    }

    pub(super) fn syntax(&self, at: Spot, found: impl Into<String>, wanted: impl Into<String>) -> ReadError {
        ReadError::Syntax { at: self.place(at), found: found.into(), wanted: wanted.into() }
    }

    /// The error for a file that ends inside `what`, which begins at `at`.
    pub(super) fn cut_off(&self, at: Spot, what: &str, end: &str) -> ReadError {
        let found = format!("the file ends inside the {what} that begins here");
        self.syntax(at, found, format!("want {end} before the end; is the file cut off?"))
    }

    pub(super) fn unclosed(&self, open: Unclosed) -> ReadError {
        let at = self.spot(open.start);
        match open.what {
            "string" => self.syntax(at, "this string does not end on its line", "close it with `\"`"),
            "comment" => self.cut_off(at, "comment", "`*/`"),
            what => self.cut_off(at, what, "`*)`"),
        }
    }

    /// Puts the text of a macro on the stack.
    pub(super) fn enter_macro(&mut self, text: Arc<str>, used_at: Spot) -> Result<(), ReadError> {
        let file = self.top.file;
        let frame = Frame { text, pos: 0, file, used_at: Some(used_at), branches: self.branches.len() };
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
                if self.leave()? {
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
                Ok(Some(end)) => {
                    self.top.pos = end;
                    continue;
                }
                Ok(None) => {}
                Err(open) => return Err(self.unclosed(open)),
            }
            let (kind, start, end) = match b {
                b'"' => match string_end(bytes, i) {
                    Ok(end) => (Kind::Text, i, end),
                    Err(open) => return Err(self.unclosed(open)),
                },
                b'\\' => (Kind::Escaped, i + 1, escaped_end(bytes, i)),
                _ if is_digit(b) => (Kind::Number, i, number_end(bytes, i)),
                _ if is_word(b) => (Kind::Word, i, word_end(bytes, i)),
                _ if b.is_ascii_graphic() => (Kind::Symbol(b), i, i + 1),
                _ => {
                    let c = self.top.text.get(i..).and_then(|t| t.chars().next()).unwrap_or_default();
                    let found = format!("the character `{}`", c.escape_default());
                    return Err(self.syntax(self.spot(i), found, "want ASCII text outside of comments"));
                }
            };
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

    /// Runs to the parenthesis that closes `depth` open ones, of the statement that begins at `statement`.
    pub(super) fn skip_list(&mut self, mut depth: usize, statement: Spot) -> Result<(), ReadError> {
        loop {
            let bytes = self.top.text.as_bytes();
            let mut i = self.top.pos;
            let directive = loop {
                let Some(&b) = bytes.get(i) else { break false };
                if CLASS[usize::from(b)] & LIST == 0 {
                    i += 1;
                    continue;
                }
                let end = match b {
                    b')' => {
                        depth -= 1;
                        if depth == 0 {
                            self.top.pos = i + 1;
                            return Ok(());
                        }
                        Ok(i + 1)
                    }
                    b'(' if is_attribute(bytes, i) => attribute_end(bytes, i),
                    b'(' => {
                        depth += 1;
                        Ok(i + 1)
                    }
                    b'/' => comment_end(bytes, i).map(|end| end.unwrap_or(i + 1)),
                    b'"' => string_end(bytes, i),
                    b'\\' => Ok(escaped_end(bytes, i)),
                    b'`' => break true,
                    _ => {
                        let found = format!(
                            "`;` inside the parentheses of the statement that begins at {}",
                            self.place(statement)
                        );
                        return Err(self.syntax(self.spot(i), found, "close them with `)` before `;`"));
                    }
                };
                i = match end {
                    Ok(end) => end,
                    Err(open) => return Err(self.unclosed(open)),
                };
            };
            self.top.pos = i;
            if directive {
                self.directive()?;
            } else if !self.leave()? {
                return Err(self.cut_off(statement, "statement", "`)` and `;`"));
            }
        }
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
