//! The ends of instance arrays.

use super::files::Spot;
use super::lex::{Kind, Lexer, Token};
use crate::read::source::ReadError;

impl Lexer<'_> {
    /// The two ends of an instance array whose `[` has been read.
    pub(super) fn range(&mut self, statement: Spot) -> Result<(i64, i64), ReadError> {
        let first = self.constant(statement)?;
        let token = self.next()?;
        if !token.is(b':') {
            return Err(self.misfit(token, statement, "`[first:last]` after the name of an instance array"));
        }
        let last = self.constant(statement)?;
        let token = self.next()?;
        if !token.is(b']') {
            return Err(self.misfit(token, statement, "`]` after two whole numbers"));
        }
        Ok((first, last))
    }

    /// A whole number, or a sum or difference of some.
    pub(super) fn constant(&mut self, statement: Spot) -> Result<i64, ReadError> {
        let mut sum = 0i64;
        let mut token = self.next()?;
        let mut negative = false;
        loop {
            while token.is(b'-') || token.is(b'+') {
                negative ^= token.is(b'-');
                token = self.next()?;
            }
            let value = self.whole_number(token, statement)?;
            let next = if negative { sum.checked_sub(value) } else { sum.checked_add(value) };
            sum = next.ok_or_else(|| self.too_many("array index", token.spot))?;
            token = self.next()?;
            if !token.is(b'-') && !token.is(b'+') {
                self.back(token);
                return Ok(sum);
            }
            negative = false;
        }
    }

    /// A decimal or based number, `12` or `8'hc`, that begins with `token`.
    fn whole_number(&mut self, token: Token, statement: Spot) -> Result<i64, ReadError> {
        self.part = Some(token.spot);
        let wanted = "a whole number; array ends must not be parameters";
        let mut digits = match token.kind {
            Kind::Number => self.text(token).replace('_', ""),
            Kind::Symbol(b'\'') => String::new(),
            _ => return Err(self.misfit(token, statement, wanted)),
        };
        let mut radix = 10;
        let mut quote = token;
        if token.kind == Kind::Number {
            quote = self.next()?;
        }
        if quote.is(b'\'') {
            let base = self.next()?;
            let text =
                if base.kind == Kind::Word { self.text(base).to_ascii_lowercase() } else { String::new() };
            let text = text.strip_prefix('s').unwrap_or(&text);
            radix = match text.bytes().next() {
                Some(b'b') => 2,
                Some(b'o') => 8,
                Some(b'd') => 10,
                Some(b'h') => 16,
                _ => return Err(self.misfit(base, statement, "a base b, o, d or h after `'`")),
            };
            digits = text[1..].replace('_', "");
            if digits.is_empty() {
                let rest = self.next()?;
                digits = self.text(rest).replace('_', "");
            }
        } else {
            self.back(quote);
        }
        if digits.is_empty() || !digits.chars().all(|c| c.is_digit(radix)) {
            let found = format!("`{digits}` is not a whole number");
            return Err(self.syntax(token.spot, found, format!("want {wanted}")));
        }
        i64::from_str_radix(&digits, radix).map_err(|_| self.too_many("array index", token.spot))
    }
}
