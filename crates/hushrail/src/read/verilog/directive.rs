//! Compiler directives (IEEE 1364-2005, clause 19): macros, conditional text, includes; the others are passed over.

use std::sync::Arc;

use super::files::Spot;
use super::lex::{Lexer, comment_end, escaped_end, is_space, string_end, word_end};
use crate::read::source::{ReadError, nearest};

/// Text that one use of a macro may grow to, in bytes, with what it uses in turn.
const MAX_EXPANDED: usize = 1 << 24;

/// What `` `define `` keeps.
pub(super) struct Macro {
    /// Names of the arguments; nothing for a macro that takes no list.
    arguments: Option<Vec<String>>,
    body: Arc<str>,
}

/// An open `` `ifdef `` or `` `ifndef ``.
#[derive(Debug, Clone, Copy)]
pub(super) struct Branch {
    pub(super) spot: Spot,
    /// Whether one of its texts has been read.
    taken: bool,
    /// Whether `` `else `` has been seen.
    last: bool,
}

impl Lexer<'_> {
    /// Obeys the directive whose backtick is at the present position.
    ///
    /// Its line is read into the window first; what may take more lines, macros and their arguments, says that
    /// it met the end of the window and is tried again with more text.
    pub(super) fn directive(&mut self) -> Result<(), ReadError> {
        loop {
            let start = self.top.pos;
            if self.lacks_line_end(start) && self.read_on(start)? {
                continue;
            }
            self.ran_out.set(false);
            let result = self.obey();
            if result.is_ok() || !self.ran_out.get() || !self.top.has_more {
                return result;
            }
            self.top.pos = start;
            self.read_on(start)?;
        }
    }

    fn obey(&mut self) -> Result<(), ReadError> {
        let text = Arc::clone(&self.top.text);
        let start = self.top.pos;
        let end = word_end(text.as_bytes(), start + 1);
        let name = text.get(start + 1..end).unwrap_or_default();
        let spot = self.spot(start);
        self.top.pos = end;
        match name {
            "" => {
                let wanted = "want a directive or a macro right after it";
                Err(self.syntax(spot, "a backtick without a name", wanted))
            }
            "ifdef" | "ifndef" => {
                let condition = self.operand(spot, name)?;
                let taken = self.macros.contains_key(&condition) == (name == "ifdef");
                self.branches.push(Branch { spot, taken, last: false });
                if taken { Ok(()) } else { self.skip_branch() }
            }
            "else" | "elsif" => {
                // this text was read, so no other one of the same conditional is
                self.enters_branch(name, spot)?;
                self.skip_branch()
            }
            "endif" => {
                self.open_here(name, spot)?;
                self.branches.pop();
                Ok(())
            }
            "define" => self.define(spot),
            "undef" => {
                let name = self.operand(spot, name)?;
                self.macros.remove(&name);
                Ok(())
            }
            "include" => self.include(spot),
            "celldefine" | "endcelldefine" | "resetall" | "nounconnected_drive" | "end_keywords" => Ok(()),
            "default_nettype" | "unconnected_drive" => self.operand(spot, name).map(|_| ()),
            "begin_keywords" => self.quoted(spot, name).map(|_| ()),
            "timescale" | "line" | "pragma" => {
                self.skip_line();
                Ok(())
            }
            name => self.use_macro(name, spot),
        }
    }

    /// The error for a conditional that its text leaves open.
    pub(super) fn open_branch(&self) -> ReadError {
        let spot = self.branches.last().map_or(self.spot(self.top.pos), |b| b.spot);
        self.cut_off(spot, "conditional text", "`endif")
    }

    fn skip_blanks(&mut self) {
        let bytes = self.top.text.as_bytes();
        while matches!(bytes.get(self.top.pos), Some(b' ' | b'\t')) {
            self.top.pos += 1;
        }
    }

    /// Runs to the end of the line or to a comment on it.
    fn skip_line(&mut self) {
        let bytes = self.top.text.as_bytes();
        while let Some(&b) = bytes.get(self.top.pos) {
            let next = bytes.get(self.top.pos + 1);
            if b == b'\n' || b == b'/' && matches!(next, Some(b'/' | b'*')) {
                return;
            }
            self.top.pos += 1;
        }
    }

    /// The name after a directive.
    fn operand(&mut self, spot: Spot, directive: &str) -> Result<String, ReadError> {
        self.skip_blanks();
        let start = self.top.pos;
        self.top.pos = word_end(self.top.text.as_bytes(), start);
        if self.top.pos == start {
            return Err(self.syntax(spot, format!("`{directive} without a name"), "want a name after it"));
        }
        Ok(self.top.text.get(start..self.top.pos).unwrap_or_default().to_owned())
    }

    /// The string after a directive, without its quotes.
    fn quoted(&mut self, spot: Spot, directive: &str) -> Result<String, ReadError> {
        self.skip_blanks();
        let start = self.top.pos;
        let bytes = self.top.text.as_bytes();
        if bytes.get(start) != Some(&b'"') {
            let found = format!("`{directive} without a string");
            return Err(self.syntax(spot, found, format!("want `{directive} \"…\"")));
        }
        match string_end(bytes, start) {
            Ok(end) => {
                self.top.pos = end;
                Ok(self.top.text.get(start + 1..end - 1).unwrap_or_default().to_owned())
            }
            Err(open) => Err(self.unclosed(open)),
        }
    }

    fn include(&mut self, spot: Spot) -> Result<(), ReadError> {
        let path = self.quoted(spot, "include")?;
        let file = self.files.include(self.top.file, &path, spot)?;
        self.enter_file(file, spot)
    }

    /// The conditional that `directive` belongs to: one that this same text opened.
    fn open_here(&mut self, directive: &str, spot: Spot) -> Result<&mut Branch, ReadError> {
        if self.branches.len() <= self.top.branches {
            let found = format!("`{directive} without an open conditional");
            return Err(self.syntax(spot, found, "want `ifdef or `ifndef before it in the same file"));
        }
        let last = self.branches.len() - 1;
        Ok(&mut self.branches[last])
    }

    /// Whether the text after an `` `else `` or `` `elsif `` is to be read.
    fn enters_branch(&mut self, directive: &str, spot: Spot) -> Result<bool, ReadError> {
        if self.open_here(directive, spot)?.last {
            let found = format!("`{directive} after `else");
            return Err(self.syntax(spot, found, "want `endif there"));
        }
        let holds = if directive == "elsif" {
            let condition = self.operand(spot, directive)?;
            self.macros.contains_key(&condition)
        } else {
            true
        };
        let branch = self.open_here(directive, spot)?;
        let enters = holds && !branch.taken;
        branch.taken |= enters;
        branch.last = directive == "else";
        Ok(enters)
    }

    /// Runs over text that a conditional leaves out, to the text that is read next.
    fn skip_branch(&mut self) -> Result<(), ReadError> {
        let mut depth = 0usize;
        let mut text = Arc::clone(&self.top.text);
        let mut i = self.top.pos;
        loop {
            let bytes = text.as_bytes();
            let Some(&b) = bytes.get(i) else {
                if self.read_on(i)? {
                    (text, i) = (Arc::clone(&self.top.text), 0);
                    continue;
                }
                return Err(self.open_branch());
            };
            // the line of a directive, and the whole of what hides one
            let is_cut = match b {
                b'\\' => self.top.has_more && escaped_end(bytes, i) >= bytes.len(),
                b'"' | b'`' => self.lacks_line_end(i),
                b'/' => {
                    self.top.has_more
                        && !matches!(comment_end(bytes, i), Ok(end) if end.unwrap_or(i + 1) < bytes.len())
                }
                _ => false,
            };
            if is_cut && self.read_on(i)? {
                (text, i) = (Arc::clone(&self.top.text), 0);
                continue;
            }
            i = match b {
                b'\\' => escaped_end(bytes, i),
                // text left out may be anything, so an open string ends on its line
                b'"' => string_end(bytes, i).unwrap_or(i + 1),
                b'/' => match comment_end(bytes, i) {
                    Ok(end) => end.unwrap_or(i + 1),
                    Err(open) => return Err(self.unclosed(open)),
                },
                b'`' => {
                    let end = word_end(bytes, i + 1);
                    self.top.pos = end;
                    let name = text.get(i + 1..end).unwrap_or_default();
                    match name {
                        "ifdef" | "ifndef" => depth += 1,
                        "endif" if depth == 0 => {
                            self.branches.pop();
                            return Ok(());
                        }
                        "endif" => depth -= 1,
                        _ => {}
                    }
                    let turns = depth == 0 && matches!(name, "else" | "elsif");
                    if turns && self.enters_branch(name, self.spot(i))? {
                        return Ok(());
                    }
                    end
                }
                _ => i + 1,
            };
        }
    }

    fn define(&mut self, spot: Spot) -> Result<(), ReadError> {
        let name = self.operand(spot, "define")?;
        let text = Arc::clone(&self.top.text);
        let bytes = text.as_bytes();
        let mut i = self.top.pos;
        let arguments = if bytes.get(i) == Some(&b'(') {
            let Some(close) = text.get(i..).and_then(|t| t.find(')')) else {
                return Err(self.cut_off(spot, "argument list", "`)`"));
            };
            let list = text.get(i + 1..i + close).unwrap_or_default();
            i += close + 1;
            let names: Vec<String> = list.split(',').map(|a| a.trim().to_owned()).collect();
            if names.iter().any(|a| a.is_empty() || word_end(a.as_bytes(), 0) != a.len()) {
                let found = format!("the argument list `({list})` of macro `{name}`");
                return Err(self.syntax(spot, found, "want names separated by commas"));
            }
            Some(names)
        } else {
            None
        };
        let mut body = String::new();
        while let Some(&b) = bytes.get(i) {
            let end = match b {
                b'\n' => break,
                b'\\' if bytes[i + 1..].starts_with(b"\n") => i + 2,
                b'\\' if bytes[i + 1..].starts_with(b"\r\n") => i + 3,
                b'\\' => escaped_end(bytes, i),
                b'"' => match string_end(bytes, i) {
                    Ok(end) => end,
                    Err(open) => return Err(self.unclosed(open)),
                },
                b'/' => match comment_end(bytes, i) {
                    Ok(None) => i + 1,
                    Ok(Some(end)) => {
                        body.push(' ');
                        i = end;
                        continue;
                    }
                    Err(open) => return Err(self.unclosed(open)),
                },
                _ => piece_end(&text, i),
            };
            let piece = text.get(i..end).unwrap_or_default();
            body.push_str(if piece.starts_with("\\\n") || piece.starts_with("\\\r") { "\n" } else { piece });
            i = end;
        }
        if i >= bytes.len() && self.top.has_more {
            return Err(self.cut_off(spot, "macro", "the end of its line"));
        }
        self.top.pos = i;
        self.macros.insert(name, Macro { arguments, body: body.into() });
        Ok(())
    }

    fn use_macro(&mut self, name: &str, spot: Spot) -> Result<(), ReadError> {
        let Some(found) = self.macros.get(name) else {
            return Err(ReadError::Unknown {
                at: self.place(spot),
                kind: "macro",
                name: name.to_owned(),
                nearest: nearest(name, self.macros.keys().map(String::as_str)),
            });
        };
        let body = Arc::clone(&found.body);
        let names = found.arguments.clone();
        let room = MAX_EXPANDED.saturating_sub(if self.in_macro() { self.expanded } else { 0 });
        let body = match names {
            None => Some(body),
            Some(names) => {
                let values = self.macro_values(name, &names, spot)?;
                substitute(&body, &names, &values, room).map(Arc::from)
            }
        };
        // a use costs something even when its text is empty
        let Some(body) = body.filter(|b| b.len() + 16 <= room) else {
            let found = format!("macro `{name}` grows past {} MiB here", MAX_EXPANDED >> 20);
            return Err(self.syntax(spot, found, "want macros that do not multiply each other"));
        };
        self.expanded = MAX_EXPANDED - room + body.len() + 16;
        self.enter_macro(body, spot)
    }

    /// The values of a macro's arguments, from the parentheses that follow its name.
    fn macro_values(&mut self, name: &str, names: &[String], spot: Spot) -> Result<Vec<String>, ReadError> {
        let text = Arc::clone(&self.top.text);
        let bytes = text.as_bytes();
        let mut i = self.top.pos;
        while bytes.get(i).is_some_and(|&b| is_space(b)) {
            i += 1;
        }
        if bytes.get(i) != Some(&b'(') {
            self.ran_out.set(i >= bytes.len());
            let wanted = format!("want `{name}({}) as it is defined", names.join(", "));
            return Err(self.syntax(spot, format!("macro `{name}` without its arguments"), wanted));
        }
        i += 1;
        let (mut depth, mut start, mut values) = (0usize, i, Vec::new());
        loop {
            let end = match bytes.get(i) {
                None => return Err(self.cut_off(spot, "macro argument list", "`)`")),
                Some(b')') if depth == 0 => break,
                Some(b')' | b']' | b'}') => {
                    depth = depth.saturating_sub(1);
                    Ok(i + 1)
                }
                Some(b'(' | b'[' | b'{') => {
                    depth += 1;
                    Ok(i + 1)
                }
                Some(b',') if depth == 0 => {
                    values.push(text.get(start..i).unwrap_or_default().trim_start().to_owned());
                    start = i + 1;
                    Ok(i + 1)
                }
                Some(b'"') => string_end(bytes, i),
                Some(b'\\') => Ok(escaped_end(bytes, i)),
                Some(b'/') => comment_end(bytes, i).map(|end| end.unwrap_or(i + 1)),
                Some(_) => Ok(i + 1),
            };
            i = match end {
                Ok(end) => end,
                Err(open) => return Err(self.unclosed(open)),
            };
        }
        values.push(text.get(start..i).unwrap_or_default().trim_start().to_owned());
        self.top.pos = i + 1;
        if values.len() != names.len() {
            let found = format!("macro `{name}` with {} arguments", values.len());
            return Err(self.syntax(spot, found, format!("want {}: {}", names.len(), names.join(", "))));
        }
        Ok(values)
    }
}

/// The end of a word, or of the one character at `i`.
fn piece_end(text: &str, i: usize) -> usize {
    let end = word_end(text.as_bytes(), i);
    if end > i { end } else { i + text.get(i..).and_then(|t| t.chars().next()).map_or(1, char::len_utf8) }
}

/// The body with values in place of names; nothing when it grows past `room` bytes.
fn substitute(body: &str, names: &[String], values: &[String], room: usize) -> Option<String> {
    let bytes = body.as_bytes();
    let mut out = String::new();
    let mut i = 0;
    while let Some(&b) = bytes.get(i) {
        let end = match b {
            b'"' => string_end(bytes, i).unwrap_or(i + 1),
            b'\\' => escaped_end(bytes, i),
            _ => piece_end(body, i),
        };
        let piece = body.get(i..end).unwrap_or_default();
        let value = names.iter().position(|n| n == piece).map_or(piece, |n| &values[n]);
        out.push_str(value);
        if out.len() > room {
            return None;
        }
        i = end;
    }
    Some(out)
}
