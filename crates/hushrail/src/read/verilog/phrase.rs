//! What the two ways of reading modules share: kinds of words, errors, and parts of statements that are run over.

use super::files::Spot;
use super::keyword::{Keyword, keyword};
use super::lex::{Kind, Lexer, Token};
use crate::read::source::ReadError;

impl Lexer<'_> {
    pub(super) fn keyword(&self, token: Token) -> Option<Keyword> {
        if token.kind == Kind::Word { keyword(self.text(token)) } else { None }
    }

    /// Reads the keyword of the next module and gives its place; nothing at the end of the file.
    pub(super) fn next_module(&mut self) -> Result<Option<Spot>, ReadError> {
        let token = self.next()?;
        match (token.kind, self.keyword(token)) {
            (Kind::End, _) => Ok(None),
            (_, Some(Keyword::Module)) => Ok(Some(token.spot)),
            (_, Some(Keyword::Behaviour)) => Err(self.behaviour(token)),
            _ => {
                let found = format!("{} outside of a module", self.shown(token));
                Err(self.syntax(token.spot, found, "want `module` or the end of the file"))
            }
        }
    }

    /// Whether the token is a name somebody chose.
    pub(super) fn is_name(&self, token: Token) -> bool {
        match token.kind {
            Kind::Word => {
                let text = self.text(token);
                !text.starts_with('$') && keyword(text).is_none()
            }
            Kind::Escaped => true,
            _ => false,
        }
    }

    pub(super) fn behaviour(&self, token: Token) -> ReadError {
        let found = format!("{} is behaviour, not structure", self.shown(token));
        let wanted =
            "only structural netlists (instances, nets, assigns) can be counted; synthesise it first";
        self.syntax(token.spot, found, wanted)
    }

    /// The error for a token that does not fit into the statement that begins at `statement`.
    pub(super) fn misfit(&self, token: Token, statement: Spot, wanted: &str) -> ReadError {
        if token.kind == Kind::End {
            return self.cut_off(statement, "statement", wanted);
        }
        let found = format!("{} does not fit here", self.shown(token));
        self.syntax(token.spot, found, format!("want {wanted}"))
    }

    /// Reads on from `token` over a drive strength in parentheses, where one stands; the token after it.
    pub(super) fn after_strength(&mut self, token: Token, statement: Spot) -> Result<Token, ReadError> {
        if token.is(b'(') {
            let inner = self.next()?;
            if matches!(self.keyword(inner), Some(Keyword::Supply | Keyword::Strength)) {
                self.skip_list(1, statement)?;
                return self.next();
            }
            self.back(inner);
        }
        Ok(token)
    }

    /// Reads on from `token` over `#` and a delay or parameters, where they stand; the token after them.
    pub(super) fn after_hash(&mut self, token: Token, statement: Spot) -> Result<Token, ReadError> {
        if !token.is(b'#') {
            return Ok(token);
        }
        let value = self.next()?;
        match value.kind {
            Kind::Symbol(b'(') => self.skip_list(1, statement)?,
            Kind::Number | Kind::Word | Kind::Escaped => {}
            _ => return Err(self.misfit(value, statement, "a delay or parameters after `#`")),
        }
        self.next()
    }

    /// Runs over a declaration or assignment; returns whether it holds an `=`.
    ///
    /// Two names side by side mean that a semicolon is missing, and an instance would be lost.
    pub(super) fn declaration(&mut self, head: Token) -> Result<bool, ReadError> {
        let (mut depth, mut has_equals) = (0usize, false);
        // whether the token before ends an operand, and the symbol it is
        let (mut operand, mut symbol_before) = (false, None);
        loop {
            let token = self.next()?;
            let symbol = if let Kind::Symbol(symbol) = token.kind { Some(symbol) } else { None };
            let before = std::mem::replace(&mut symbol_before, symbol);
            match token.kind {
                Kind::End => return Err(self.misfit(token, head.spot, "`;`")),
                Kind::Word | Kind::Escaped | Kind::Number | Kind::Text => {
                    if operand {
                        return Err(self.misfit(token, head.spot, "`;` or an operator"));
                    }
                    match self.keyword(token) {
                        Some(Keyword::Declaration | Keyword::Supply | Keyword::Strength | Keyword::Inner) => {
                        }
                        // the digits of `4'b 01` may stand apart from the base, and a name follows a delay
                        None => {
                            operand = match before {
                                Some(b'\'') => !is_base(self.text(token)),
                                Some(b'#') => false,
                                _ => true,
                            }
                        }
                        Some(_) => return Err(self.misfit(token, head.spot, "`;` before it")),
                    }
                }
                Kind::Symbol(symbol) => {
                    operand = false;
                    match symbol {
                        b'(' | b'[' | b'{' => depth += 1,
                        b')' | b']' | b'}' if depth > 0 => depth -= 1,
                        b')' | b']' | b'}' => {
                            return Err(self.misfit(token, head.spot, "its opening counterpart before it"));
                        }
                        b';' if depth == 0 => return Ok(has_equals),
                        b';' => {
                            return Err(self.misfit(token, head.spot, "all parentheses closed before it"));
                        }
                        b'=' => has_equals = true,
                        _ => {}
                    }
                }
            }
        }
    }

    pub(super) fn too_many(&self, name: &str, at: Spot) -> ReadError {
        super::too_many(self.place(at), name)
    }
}

/// Whether the text after the quote of a based number is the base alone.
fn is_base(text: &str) -> bool {
    text.strip_prefix(['s', 'S']).unwrap_or(text).len() == 1
}
