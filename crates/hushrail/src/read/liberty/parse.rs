//! Statements of the Liberty format one after the other: groups that open and close, attributes with their values.

use std::borrow::Cow;

use super::lex::Lexer;
use crate::read::source::{ReadError, Source};

/// One attribute: `name : value;` or `name (value, value);`.
#[derive(Debug, Clone, PartialEq)]
pub struct Attribute<'a> {
    /// Name.
    pub name: &'a str,
    /// Values; one for the form with the colon.
    pub values: Vec<Cow<'a, str>>,
    /// Offset of the name.
    pub at: usize,
    /// Offset of the first value.
    pub value_at: usize,
}

impl Attribute<'_> {
    /// The first value, or nothing.
    pub fn text(&self) -> &str {
        self.values.first().map_or("", |v| v.trim())
    }

    /// All values, with blanks between.
    pub fn joined(&self) -> String {
        self.values.iter().map(|v| v.trim()).collect::<Vec<_>>().join(" ")
    }
}

/// The head of a group: `name (argument, argument) {`.
#[derive(Debug, Clone, PartialEq)]
pub struct Head<'a> {
    /// What sort of group.
    pub name: &'a str,
    /// What stands in its brackets.
    pub args: Vec<Cow<'a, str>>,
    /// Offset of the name.
    pub at: usize,
    /// Offset of the opening brace.
    pub brace: usize,
}

impl Head<'_> {
    /// The first argument, or nothing.
    pub fn arg(&self) -> &str {
        self.args.first().map_or("", |v| v.trim())
    }

    /// All arguments, with blanks between.
    pub fn joined(&self) -> String {
        self.args.iter().map(|v| v.trim()).collect::<Vec<_>>().join(" ")
    }
}

/// What one step through the file gives.
#[derive(Debug, Clone, PartialEq)]
pub enum Event<'a> {
    /// A group opens.
    Open(Head<'a>),
    /// An attribute of the group that is open.
    Attribute(Attribute<'a>),
    /// The innermost group closes.
    Close,
}

/// Walks the statements of a file.
#[derive(Debug)]
pub struct Parser<'a> {
    pub(super) lexer: Lexer<'a>,
    /// Braces that are open.
    open: Vec<usize>,
}

impl<'a> Parser<'a> {
    /// Starts at the top of a file.
    pub fn new(source: &'a Source) -> Self {
        Self { lexer: Lexer::new(source), open: Vec::new() }
    }

    /// The next statement; `None` at the end of the file.
    ///
    /// # Errors
    /// Text that is no statement, or an end before every group is closed.
    pub fn step(&mut self) -> Result<Option<Event<'a>>, ReadError> {
        loop {
            self.lexer.blanks(true)?;
            match self.lexer.peek() {
                Some(b';') => self.lexer.at += 1,
                Some(b'}') => {
                    let at = self.lexer.at;
                    if self.open.pop().is_none() {
                        return Err(self.lexer.wrong(at, "`}` closes nothing", "want one `}` for each `{`"));
                    }
                    self.lexer.at += 1;
                    return Ok(Some(Event::Close));
                }
                Some(_) => return self.statement().map(Some),
                None => {
                    return match self.open.last() {
                        Some(&at) => Err(self.lexer.wrong(
                            at,
                            "a group that is not closed",
                            "want `}` before the end of the file",
                        )),
                        None => Ok(None),
                    };
                }
            }
        }
    }

    /// Passes the group that has just opened, whatever is in it.
    ///
    /// # Errors
    /// A group, string or comment that does not end.
    pub fn skip(&mut self) -> Result<(), ReadError> {
        match self.open.pop() {
            Some(open) => self.lexer.skip_group(open),
            None => Ok(()),
        }
    }

    fn statement(&mut self) -> Result<Event<'a>, ReadError> {
        let at = self.lexer.at;
        let name = self.lexer.word();
        if name.is_empty() {
            let found = self.lexer.found();
            return Err(self.lexer.wrong(at, found, "want the name of an attribute or group"));
        }
        self.lexer.blanks(true)?;
        match self.lexer.peek() {
            Some(b':') => {
                self.lexer.at += 1;
                self.simple(name, at)
            }
            Some(b'(') => {
                self.lexer.at += 1;
                self.lexer.blanks(true)?;
                let value_at = self.lexer.at;
                let values = self.list()?;
                self.lexer.blanks(true)?;
                if self.lexer.peek() == Some(b'{') {
                    let brace = self.lexer.at;
                    self.open.push(brace);
                    self.lexer.at += 1;
                    return Ok(Event::Open(Head { name, args: values, at, brace }));
                }
                Ok(Event::Attribute(Attribute { name, values, at, value_at }))
            }
            _ => {
                let (here, found) = (self.lexer.at, self.lexer.found());
                let wanted = "want `:` and a value, or `(`…`)`";
                Err(self.lexer.wrong(here, format!("{found} after `{name}`"), wanted))
            }
        }
    }

    /// The value after a colon.
    fn simple(&mut self, name: &'a str, at: usize) -> Result<Event<'a>, ReadError> {
        self.lexer.blanks(true)?;
        let value_at = self.lexer.at;
        let value = if self.lexer.peek() == Some(b'"') {
            let value = self.lexer.string()?;
            self.lexer.blanks(false)?;
            match self.lexer.peek() {
                Some(b';' | b'}' | b'\n' | b'\r') | None => {}
                Some(_) => {
                    let (here, found) = (self.lexer.at, self.lexer.found());
                    let found = format!("{found} after the value of `{name}`");
                    return Err(self.lexer.wrong(here, found, "want `;` or the end of the line"));
                }
            }
            value
        } else {
            let value = self.lexer.bare()?;
            if value.is_empty() {
                let found = format!("{} where the value of `{name}` belongs", self.lexer.found());
                let here = self.lexer.at;
                return Err(self.lexer.wrong(here, found, "want a value, then `;`"));
            }
            value
        };
        Ok(Event::Attribute(Attribute { name, values: vec![value], at, value_at }))
    }

    /// Values up to the closing bracket.
    fn list(&mut self) -> Result<Vec<Cow<'a, str>>, ReadError> {
        let mut values = Vec::new();
        loop {
            self.lexer.blanks(true)?;
            let here = self.lexer.at;
            match self.lexer.peek() {
                Some(b')') => {
                    self.lexer.at += 1;
                    return Ok(values);
                }
                Some(b',') => self.lexer.at += 1,
                Some(b'"') => values.push(self.lexer.string()?),
                _ => {
                    let mut word = Cow::Borrowed(self.lexer.word());
                    // ranges of buses, such as `A[7:0]`
                    while !word.is_empty() && self.lexer.peek() == Some(b':') {
                        self.lexer.at += 1;
                        word = Cow::Owned(format!("{word}:{}", self.lexer.word()));
                    }
                    if word.is_empty() {
                        let found = self.lexer.found();
                        return Err(self.lexer.wrong(here, found, "want a value, `,` or `)`"));
                    }
                    values.push(word);
                }
            }
        }
    }
}
