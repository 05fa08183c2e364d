//! Walking along one logical line.

use crate::read::lines::{Loc, Logical};

/// A position in one logical line.
pub(super) struct Cursor<'a> {
    pub(super) line: &'a Logical,
    pub(super) at: usize,
}

impl Cursor<'_> {
    pub(super) fn rest(&self) -> &str {
        &self.line.text[self.at..]
    }
    pub(super) fn loc(&self) -> Loc {
        self.line.loc(self.at)
    }
    pub(super) fn skip(&mut self, also: &[char]) {
        let r = self.rest();
        self.at += r.len() - r.trim_start_matches(|c: char| c.is_whitespace() || also.contains(&c)).len();
    }
    /// The next word: up to white space or one of `= ( ) , { ' "`.
    pub(super) fn word(&mut self) -> (String, Loc) {
        self.skip(&[]);
        let loc = self.loc();
        let end = self.rest().find(|c: char| c.is_whitespace() || "=(),{}'\"".contains(c));
        let word = self.rest()[..end.unwrap_or(self.rest().len())].to_owned();
        self.at += word.len();
        (word, loc)
    }
    pub(super) fn takes(&mut self, c: char) -> bool {
        self.skip(&[]);
        let yes = self.rest().starts_with(c);
        if yes {
            self.at += c.len_utf8();
        }
        yes
    }
    pub(super) fn is_end(&mut self) -> bool {
        self.skip(&[]);
        self.rest().is_empty()
    }
}
