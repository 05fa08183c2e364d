//! Characters of the Liberty format: blanks, comments, words, strings; and the quick way past a group that is not wanted.

use std::borrow::Cow;

use crate::read::source::{Place, ReadError, Source};

/// Walks the bytes of a file.
#[derive(Debug)]
pub(super) struct Lexer<'a> {
    source: &'a Source,
    text: &'a str,
    pub(super) at: usize,
    /// Where the last place was found: offset, line, offset of the line's start. Places are mostly asked for in order.
    last: (usize, usize, usize),
}

/// Bytes that a word cannot hold.
fn ends_word(b: u8) -> bool {
    b.is_ascii_whitespace() || b"(){}:;,\"\\".contains(&b)
}

/// Bytes that matter on the way to the end of a group.
const MATTERS: [bool; 256] = {
    let mut t = [false; 256];
    t[b'{' as usize] = true;
    t[b'}' as usize] = true;
    t[b'"' as usize] = true;
    t[b'/' as usize] = true;
    t
};

impl<'a> Lexer<'a> {
    pub(super) fn new(source: &'a Source) -> Self {
        let text: &'a str = &source.text;
        // a byte order mark is no text
        let at = if text.starts_with('\u{feff}') { 3 } else { 0 };
        Self { source, text, at, last: (0, 1, 0) }
    }

    pub(super) fn peek(&self) -> Option<u8> {
        self.text.as_bytes().get(self.at).copied()
    }

    /// The place of a byte.
    pub(super) fn place(&mut self, offset: usize) -> Place {
        let offset = offset.min(self.text.len());
        let line = self.line(offset) as usize;
        let start = self.last.2;
        let along = String::from_utf8_lossy(&self.text.as_bytes()[start..offset]).chars().count();
        Place::new(&self.source.path, line, along + 1)
    }

    /// The line of a byte.
    pub(super) fn line(&mut self, offset: usize) -> u32 {
        let offset = offset.min(self.text.len());
        if offset < self.last.0 {
            self.last = (0, 1, 0);
        }
        let (from, mut line, mut start) = self.last;
        for (i, b) in self.text.as_bytes()[from..offset].iter().enumerate() {
            if *b == b'\n' {
                (line, start) = (line + 1, from + i + 1);
            }
        }
        self.last = (offset, line, start);
        u32::try_from(line).unwrap_or(u32::MAX)
    }

    pub(super) fn wrong(
        &mut self,
        offset: usize,
        found: impl Into<String>,
        wanted: impl Into<String>,
    ) -> ReadError {
        ReadError::Syntax { at: self.place(offset), found: found.into(), wanted: wanted.into() }
    }

    /// What stands here, for messages.
    pub(super) fn found(&self) -> String {
        let rest = &self.text[self.at..];
        match rest.chars().next() {
            None => "the file ends".into(),
            Some('\n' | '\r') => "the line ends".into(),
            Some(_) => {
                let word = rest.bytes().take_while(|b| !ends_word(*b)).count().min(40);
                let mut end = word.max(1);
                while !rest.is_char_boundary(end) {
                    end += 1;
                }
                format!("`{}`", &rest[..end])
            }
        }
    }

    /// Passes blanks, comments and line continuations; with `lines` false it stops at the end of the line.
    pub(super) fn blanks(&mut self, lines: bool) -> Result<(), ReadError> {
        let bytes = self.text.as_bytes();
        while let Some(&b) = bytes.get(self.at) {
            match b {
                b'\n' | b'\r' if !lines => return Ok(()),
                b' ' | b'\t' | b'\n' | b'\r' | 0x0c | 0x0b => self.at += 1,
                b'\\' if self.continues() > 0 => self.at += self.continues(),
                b'/' if self.comment()? => {}
                _ => return Ok(()),
            }
        }
        Ok(())
    }

    /// Length of a backslash that ends its line, with the blanks after it and the end of the line; zero when it does not.
    fn continues(&self) -> usize {
        let rest = &self.text.as_bytes()[self.at + 1..];
        let blanks = rest.iter().take_while(|b| b" \t\r".contains(b)).count();
        if rest.get(blanks) == Some(&b'\n') { blanks + 2 } else { 0 }
    }

    /// Passes a comment that starts here.
    fn comment(&mut self) -> Result<bool, ReadError> {
        let rest = &self.text[self.at..];
        if let Some(inner) = rest.strip_prefix("/*") {
            let Some(end) = inner.find("*/") else {
                let at = self.at;
                return Err(self.wrong(at, "a comment that does not end", "want `*/` after it"));
            };
            self.at += end + 4;
            return Ok(true);
        }
        let is_line = rest.starts_with("//");
        if is_line {
            self.at += rest.find('\n').unwrap_or(rest.len());
        }
        Ok(is_line)
    }

    /// A run of characters that are neither blank nor punctuation; empty when there is none.
    pub(super) fn word(&mut self) -> &'a str {
        let start = self.at;
        let bytes = self.text.as_bytes();
        while let Some(&b) = bytes.get(self.at) {
            if ends_word(b) || b == b'/' && matches!(bytes.get(self.at + 1), Some(b'*' | b'/')) {
                break;
            }
            self.at += 1;
        }
        &self.text[start..self.at]
    }

    /// The text of a string whose opening quote stands here.
    pub(super) fn string(&mut self) -> Result<Cow<'a, str>, ReadError> {
        let open = self.at;
        let bytes = self.text.as_bytes();
        let mut i = open + 1;
        let mut plain = true;
        loop {
            match bytes.get(i) {
                Some(b'"') => break,
                Some(b'\\') => (plain, i) = (false, i + 2),
                Some(_) => i += 1,
                None => return Err(self.wrong(open, "a string that does not end", "want a closing quote")),
            }
        }
        self.at = i + 1;
        let inner = &self.text[open + 1..i];
        if plain {
            return Ok(Cow::Borrowed(inner));
        }
        let mut out = String::with_capacity(inner.len());
        let mut chars = inner.chars().peekable();
        while let Some(c) = chars.next() {
            match (c, chars.peek().copied()) {
                ('\\', Some('"' | '\\')) => out.extend(chars.next()),
                ('\\', Some(' ' | '\t' | '\r' | '\n')) => {
                    // a backslash before the end of the line joins it to the next
                    while chars.peek().is_some_and(|c| matches!(c, ' ' | '\t' | '\r')) {
                        chars.next();
                    }
                    if chars.peek() == Some(&'\n') {
                        chars.next();
                    }
                    out.push(' ');
                }
                (c, _) => out.push(c),
            }
        }
        Ok(Cow::Owned(out))
    }

    /// The text up to `;`, `}` or the end of the line, without comments and blanks around it.
    pub(super) fn bare(&mut self) -> Result<Cow<'a, str>, ReadError> {
        let start = self.at;
        let mut end = start;
        let mut joined: Option<String> = None;
        loop {
            let here = self.at;
            match self.peek() {
                None | Some(b';' | b'}' | b'\n' | b'\r') => break,
                Some(b'{' | b'"') => {
                    let found = self.found();
                    return Err(self.wrong(here, found, "want `;` or the end of the line after a value"));
                }
                Some(b'(' | b')' | b':' | b',') => {
                    self.at += 1;
                    end = self.at;
                    if let Some(j) = &mut joined {
                        j.push_str(&self.text[here..end]);
                    }
                }
                Some(_) => {
                    self.blanks(false)?;
                    if self.at > here {
                        if self.text[here..self.at].contains(['/', '\\']) && joined.is_none() {
                            joined = Some(self.text[start..end].to_owned());
                        }
                        if let Some(j) = &mut joined {
                            j.push(' ');
                        }
                        continue;
                    }
                    if self.word().is_empty() {
                        self.at += 1; // a backslash that joins nothing
                    }
                    end = self.at;
                    if let Some(j) = &mut joined {
                        j.push_str(&self.text[here..end]);
                    }
                }
            }
        }
        Ok(joined.map_or(Cow::Borrowed(&self.text[start..end]), |j| Cow::Owned(j.trim().to_owned())))
    }

    /// Goes past the `}` that closes the group whose `{` stands at `open`; the walk starts after it.
    pub(super) fn skip_group(&mut self, open: usize) -> Result<(), ReadError> {
        let bytes = self.text.as_bytes();
        let mut depth = 1usize;
        while let Some(skip) = bytes[self.at..].iter().position(|b| MATTERS[*b as usize]) {
            self.at += skip;
            match bytes[self.at] {
                b'{' => depth += 1,
                b'}' => {
                    depth -= 1;
                    if depth == 0 {
                        self.at += 1;
                        return Ok(());
                    }
                }
                b'"' => {
                    let quote = self.at;
                    loop {
                        let rest = &bytes[self.at + 1..];
                        let Some(i) = rest.iter().position(|b| matches!(b, b'"' | b'\\')) else {
                            return Err(self.wrong(
                                quote,
                                "a string that does not end",
                                "want a closing quote",
                            ));
                        };
                        if rest[i] == b'"' {
                            self.at += i + 1;
                            break;
                        }
                        self.at = (self.at + i + 2).min(bytes.len() - 1);
                    }
                }
                _ => {
                    if self.comment()? {
                        continue;
                    }
                }
            }
            self.at += 1;
        }
        self.at = bytes.len();
        Err(self.wrong(open, "a group that is not closed", "want `}` before the end of the file"))
    }
}
