//! Logical lines of SPICE text: continuations joined, comments removed, every byte still knowing its place.

use std::sync::Arc;

use super::source::Place;

/// A place packed for storage beside each of many thousand values: file number, line, column.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default)]
pub struct Loc {
    /// Index into the deck's list of files.
    pub file: u32,
    /// Line, from one.
    pub line: u32,
    /// Column, from one.
    pub column: u32,
}

impl Loc {
    /// The place with the file's name spelled out.
    pub fn place(self, files: &[Arc<str>]) -> Place {
        let path = files.get(self.file as usize).cloned().unwrap_or_else(|| "?".into());
        Place { path, line: self.line, column: self.column }
    }
}

/// One statement: the joined text and where its pieces came from.
#[derive(Debug, Default)]
pub struct Logical {
    /// Text without comments and continuation marks.
    pub text: String,
    pieces: Vec<(usize, u32, u32)>,
    file: u32,
}

impl Logical {
    /// Where the byte at `offset` of the joined text stands in the file.
    pub fn loc(&self, offset: usize) -> Loc {
        let i = self.pieces.partition_point(|p| p.0 <= offset).saturating_sub(1);
        let (start, line, column) = self.pieces.get(i).copied().unwrap_or((0, 1, 1));
        let bytes = self.text.get(start..offset.min(self.text.len()));
        let along = bytes.map_or(0, |s| s.chars().count());
        Loc { file: self.file, line, column: column + u32::try_from(along).unwrap_or(0) }
    }

    fn push(&mut self, line: u32, column: u32, piece: &str) {
        if !self.text.is_empty() {
            self.text.push(' ');
        }
        self.pieces.push((self.text.len(), line, column));
        self.text.push_str(piece);
    }
}

/// What one step through the file gives.
pub enum Step<'a> {
    /// A statement.
    Statement,
    /// A comment that starts `*.` and may carry a declaration (pin directions of a CDL netlist).
    Declaration(&'a str, u32),
}

/// Walks the logical lines of a file.
pub struct Lines<'a> {
    lines: std::iter::Peekable<std::iter::Enumerate<std::str::Lines<'a>>>,
    file: u32,
}

impl<'a> Lines<'a> {
    /// Starts at the top of `text`, which is file number `file` of the deck.
    pub fn new(text: &'a str, file: u32) -> Self {
        Self { lines: text.lines().enumerate().peekable(), file }
    }

    /// Fills `out` with the next statement, or returns a declaration comment; `None` at the end.
    pub fn next_into(&mut self, out: &mut Logical) -> Option<Step<'a>> {
        out.text.clear();
        out.pieces.clear();
        out.file = self.file;
        while let Some(&(i, raw)) = self.lines.peek() {
            let number = u32::try_from(i + 1).unwrap_or(u32::MAX);
            let body = raw.trim_start();
            let indent = raw.len() - body.len();
            if body.is_empty() {
                self.lines.next();
            } else if let Some(comment) = body.strip_prefix('*') {
                if is_declaration(comment) {
                    if !out.text.is_empty() {
                        return Some(Step::Statement);
                    }
                    self.lines.next();
                    return Some(Step::Declaration(comment.trim(), number));
                }
                self.lines.next();
            } else {
                let (piece, skipped) = match body.strip_prefix('+') {
                    Some(rest) => (rest, indent + 1),
                    None if out.text.is_empty() => (body, indent),
                    None => return Some(Step::Statement),
                };
                let code = without_comment(piece);
                let trimmed = code.trim_start();
                let column = raw[..skipped + (code.len() - trimmed.len())].chars().count() + 1;
                let trimmed = trimmed.trim_end();
                if !trimmed.is_empty() {
                    out.push(number, u32::try_from(column).unwrap_or(u32::MAX), trimmed);
                }
                self.lines.next();
            }
        }
        if out.text.is_empty() { None } else { Some(Step::Statement) }
    }
}

/// Whether a comment carries a declaration of the CDL dialect; any other comment that starts `*.` is a comment.
fn is_declaration(comment: &str) -> bool {
    let word = comment.split_whitespace().next().unwrap_or("");
    word.eq_ignore_ascii_case(".pininfo") || word.eq_ignore_ascii_case(".scale")
}

/// Cuts an end-of-line comment: `;` anywhere, `$` at the start or after a space unless it opens `$name=` or `$[`.
fn without_comment(line: &str) -> &str {
    let b = line.as_bytes();
    let mut quote = None;
    for (i, &c) in b.iter().enumerate() {
        match (quote, c) {
            (Some(q), c) if c == q => quote = None,
            (None, b'\'' | b'"') => quote = Some(c),
            (None, b';') => return &line[..i],
            (None, b'$') if i == 0 || b[i - 1].is_ascii_whitespace() => {
                let after = &b[i + 1..];
                let word = after.iter().take_while(|c| c.is_ascii_alphanumeric() || **c == b'_').count();
                let is_key = word > 0 && after.get(word) == Some(&b'=');
                if !is_key && after.first() != Some(&b'[') {
                    return &line[..i];
                }
            }
            _ => {}
        }
    }
    line
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn continuations_join_across_comments_and_keep_their_places() {
        let text = "* head\n.param a = 1 $ first\n* between\n*.param off = 1\n\n  + b = '2 $ 3' ; tail\nM1 d g s b n\n";
        let mut lines = Lines::new(text, 0);
        let mut l = Logical::default();
        assert!(matches!(lines.next_into(&mut l), Some(Step::Statement)));
        assert_eq!(l.text, ".param a = 1 b = '2 $ 3'");
        let b = l.text.find("b =").expect("there");
        assert_eq!((l.loc(b).line, l.loc(b).column), (6, 5));
        assert_eq!((l.loc(0).line, l.loc(0).column), (2, 1));
        assert!(lines.next_into(&mut l).is_some());
        assert_eq!(l.text, "M1 d g s b n");
        assert!(lines.next_into(&mut l).is_none());
    }

    #[test]
    fn declarations_in_comments_are_kept() {
        let mut lines = Lines::new("*.PININFO A:I Y:O\n* plain\n", 0);
        let mut l = Logical::default();
        assert!(matches!(lines.next_into(&mut l), Some(Step::Declaration(".PININFO A:I Y:O", 1))));
        assert!(lines.next_into(&mut l).is_none());
    }
}
