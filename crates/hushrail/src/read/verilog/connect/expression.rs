//! Nets in places where values stand: names, selects, constants, concatenations, replications.

use super::body::{FLOATING, UNKNOWN};
use super::weave::{MAX_WIDTH, Weaver};
use crate::read::source::ReadError;
use crate::read::verilog::files::Spot;
use crate::read::verilog::lex::{Kind, Token};

/// Braces may nest this deep.
const MAX_DEPTH: usize = 64;

impl Weaver<'_> {
    /// Reads what begins with `token` and adds its bits, leftmost first; the token after it, and whether it is a
    /// constant without a width.
    pub(super) fn expression(
        &mut self,
        token: Token,
        depth: usize,
        start: Spot,
    ) -> Result<(Token, bool), ReadError> {
        if token.is(b'{') {
            self.braces(depth, start)?;
            return Ok((self.lex.next()?, false));
        }
        if token.kind == Kind::Number || token.is(b'\'') {
            return self.constant(token, start);
        }
        if !self.lex.is_name(token) {
            return Err(self.lex.misfit(token, start, "a net, a constant or `{`; logic is not structure"));
        }
        let name = self.intern(token)?;
        let decl = self.net(name, token.spot)?;
        let decl = self.body.decls[decl];
        let after = self.lex.next()?;
        if !after.is(b'[') {
            self.body.bits.extend(decl.base..decl.base + decl.width());
            return Ok((after, false));
        }
        let first = self.lex.constant(start)?;
        let mut last = first;
        let mut token = self.lex.next()?;
        if token.is(b':') {
            last = self.lex.constant(start)?;
            token = self.lex.next()?;
        }
        if !token.is(b']') {
            return Err(self.lex.misfit(token, start, "`]` after a whole number or two"));
        }
        match (decl.bit(first), decl.bit(last)) {
            (Some(a), Some(b)) if a <= b => self.body.bits.extend(a..=b),
            (Some(_), Some(_)) => {
                let found = format!("`{}[{first}:{last}]` runs against the range", self.names.get(name));
                let wanted = format!("want the order of [{}:{}]", decl.left, decl.right);
                return Err(self.lex.syntax(start, found, wanted));
            }
            _ => {
                let outside = if decl.bit(first).is_none() { first } else { last };
                return Err(ReadError::Range {
                    at: self.lex.place(start),
                    name: format!("index of {}", self.names.get(name)),
                    value: outside.to_string(),
                    wanted: format!("want one within [{}:{}]", decl.left, decl.right),
                });
            }
        }
        Ok((self.lex.next()?, false))
    }

    /// A concatenation or replication whose brace has been read.
    fn braces(&mut self, depth: usize, start: Spot) -> Result<(), ReadError> {
        if depth >= MAX_DEPTH {
            let found = format!("braces nest deeper than {MAX_DEPTH} levels here");
            return Err(self.lex.syntax(start, found, "want fewer"));
        }
        let from = self.body.bits.len();
        let mut token = self.lex.next()?;
        let is_count = token.kind == Kind::Number;
        let mut is_first = true;
        loop {
            let before = self.body.bits.len();
            let (mut after, is_unsized) = self.expression(token, depth + 1, start)?;
            if is_first && is_count && is_unsized && after.is(b'{') {
                // the number just read is a count
                let count = self.value_of(before);
                self.body.bits.truncate(from);
                self.braces(depth + 1, start)?;
                let piece = self.body.bits[from..].to_vec();
                let width = u64::try_from(piece.len()).ok().and_then(|n| n.checked_mul(count));
                if width.is_none_or(|w| w > MAX_WIDTH) {
                    return Err(ReadError::Range {
                        at: self.lex.place(start),
                        name: "width of a replication".into(),
                        value: format!("{count} times {} bits", piece.len()),
                        wanted: format!("want at most {MAX_WIDTH} bits"),
                    });
                }
                self.body.bits.truncate(from);
                for _ in 0..count {
                    self.body.bits.extend_from_slice(&piece);
                }
                after = self.lex.next()?;
                if after.is(b'}') {
                    return Ok(());
                }
                return Err(self.lex.misfit(after, start, "`}` after a replication"));
            }
            if is_unsized {
                let found = "a constant without a width inside braces";
                return Err(self.lex.syntax(start, found, "want its width before the base, as in 4'b0101"));
            }
            is_first = false;
            if after.is(b'}') {
                return Ok(());
            }
            if !after.is(b',') {
                return Err(self.lex.misfit(after, start, "`,` or `}` in a concatenation"));
            }
            if self.body.bits.len() as u64 - from as u64 > MAX_WIDTH {
                let found = format!("a concatenation of more than {MAX_WIDTH} bits");
                return Err(self.lex.syntax(start, found, "want fewer"));
            }
            token = self.lex.next()?;
        }
    }

    /// The number whose bits begin at `from`.
    fn value_of(&self, from: usize) -> u64 {
        self.body.bits[from..].iter().fold(0, |n: u64, &bit| n << 1 | u64::from(bit & 1))
    }

    /// A constant that begins with `token`: `12`, `4'b01xz`, `'h3`, `'1`.
    fn constant(&mut self, token: Token, start: Spot) -> Result<(Token, bool), ReadError> {
        let mut width = None;
        if token.kind == Kind::Number {
            let text = self.lex.text(token).replace('_', "");
            let quote = self.lex.next()?;
            let Ok(value) = text.parse::<u32>() else {
                let found = format!("`{text}` is not a whole number of 32 bits");
                return Err(self.lex.syntax(start, found, "want one, or a constant with a width and a base"));
            };
            if !quote.is(b'\'') {
                self.body.bits.extend((0..32).rev().map(|i| value >> i & 1));
                return Ok((quote, true));
            }
            if value == 0 || u64::from(value) > MAX_WIDTH {
                return Err(ReadError::Range {
                    at: self.lex.place(start),
                    name: "width of a constant".into(),
                    value: format!("{value} bits"),
                    wanted: format!("want 1 to {MAX_WIDTH}"),
                });
            }
            width = Some(value as usize);
        }
        let base = self.lex.next()?;
        let text = self.lex.text(base).to_ascii_lowercase();
        if width.is_none() && matches!(&*text, "0" | "1" | "x" | "z") {
            self.body.bits.push(level(text.as_bytes()[0]));
            return Ok((self.lex.next()?, true));
        }
        let text = text.strip_prefix('s').unwrap_or(&text);
        let (per_digit, mut digits) = match (base.kind, text.as_bytes().first()) {
            (Kind::Word, Some(b'b')) => (1, text[1..].to_owned()),
            (Kind::Word, Some(b'o')) => (3, text[1..].to_owned()),
            (Kind::Word, Some(b'h')) => (4, text[1..].to_owned()),
            (Kind::Word, Some(b'd')) => (0, text[1..].to_owned()),
            _ => return Err(self.lex.misfit(base, start, "a base b, o, d or h after `'`")),
        };
        if digits.is_empty() {
            let rest = self.lex.next()?;
            digits = self.lex.text(rest).to_ascii_lowercase();
        }
        digits.retain(|c| c != '_');
        let Some(bits) = value_bits(&digits, per_digit) else {
            let found = format!("`{digits}` is no value in this base");
            return Err(self.lex.syntax(start, found, "want digits of the base, x or z"));
        };
        // a constant with a width is extended by its first digit when that is no level, one without by zeros
        let wanted = width.unwrap_or(32);
        let fill = if width.is_some() && bits[0] >= UNKNOWN { bits[0] } else { 0 };
        let skipped = if width.is_some() { bits.len().saturating_sub(wanted) } else { 0 };
        self.body.bits.extend(std::iter::repeat_n(fill, wanted.saturating_sub(bits.len())));
        self.body.bits.extend_from_slice(&bits[skipped..]);
        Ok((self.lex.next()?, width.is_none()))
    }
}

fn level(digit: u8) -> u32 {
    match digit {
        b'0' => 0,
        b'1' => 1,
        b'z' | b'?' => FLOATING,
        _ => UNKNOWN,
    }
}

/// The bits of digits with so many bits each; zero stands for decimal.
fn value_bits(digits: &str, per_digit: u32) -> Option<Vec<u32>> {
    if digits.is_empty() {
        return None;
    }
    if per_digit == 0 {
        if matches!(digits, "x" | "z") {
            return Some(vec![level(digits.as_bytes()[0])]);
        }
        let value: u128 = digits.parse().ok()?;
        return Some(
            (0..128 - value.leading_zeros().min(127)).rev().map(|i| u32::from(value >> i & 1 == 1)).collect(),
        );
    }
    let mut bits = Vec::new();
    for digit in digits.bytes() {
        if matches!(digit, b'x' | b'z') {
            bits.extend(std::iter::repeat_n(level(digit), per_digit as usize));
        } else {
            let value = char::from(digit).to_digit(1 << per_digit)?;
            bits.extend((0..per_digit).rev().map(|i| value >> i & 1));
        }
    }
    Some(bits)
}
