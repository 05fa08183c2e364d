//! Expressions: numbers, strings, comparison, logic, choice, membership, functions.

use super::list;
use super::number::{Number, number, real_text, truth};
use super::value::{Value, Word};
use super::words::{Cursor, braced, bracket, joined, quoted, variable, wants};
use super::{Host, Interpreter, Outcome, Stop, short};

/// Operators from loosest to tightest.
const LEVELS: [&[&str]; 11] = [
    &["||"],
    &["&&"],
    &["|"],
    &["^"],
    &["&"],
    &["==", "!=", "eq", "ne", "in", "ni"],
    &["<=", ">=", "<", ">", "lt", "gt", "le", "ge"],
    &["<<", ">>"],
    &["+", "-"],
    &["*", "/", "%"],
    &["**"],
];

const FUNCTIONS: [&str; 20] = [
    "abs", "acos", "asin", "atan", "bool", "ceil", "cos", "double", "entier", "exp", "floor", "int", "log",
    "log10", "max", "min", "pow", "round", "sqrt", "sin",
];

pub(super) fn command(tcl: &mut Interpreter, host: &mut dyn Host, words: &[Word]) -> Outcome {
    if words.len() < 2 {
        return Err(wants(tcl, words, "expr expression"));
    }
    let text = joined(&words[1..]);
    evaluate(tcl, host, &text)
}

/// Whether a condition holds.
pub(super) fn condition(tcl: &mut Interpreter, host: &mut dyn Host, word: &Word) -> Result<bool, Stop> {
    let value = evaluate(tcl, host, &word.value)?;
    truth(value.text()).ok_or_else(|| {
        tcl.wrong(
            word.at,
            format!("`{}` is no truth value", short(value.text())),
            "want a number or a boolean",
        )
    })
}

fn evaluate(tcl: &mut Interpreter, host: &mut dyn Host, text: &Value) -> Outcome {
    tcl.spend(text.text().len(), text.spot())?;
    let mut e = Expression { tcl, host, cursor: Cursor { script: text, pos: 0 } };
    let value = e.choice(true)?;
    e.blanks();
    if e.cursor.peek().is_some() {
        let found = format!("`{}` does not fit here", short(e.rest()));
        return Err(e.wrong(&found, "want an operator or the end of the expression"));
    }
    Ok(value)
}

struct Expression<'a, 'b> {
    tcl: &'a mut Interpreter,
    host: &'a mut dyn Host,
    cursor: Cursor<'b>,
}

impl Expression<'_, '_> {
    fn rest(&self) -> &str {
        self.cursor.script.text().get(self.cursor.pos..).unwrap_or_default()
    }

    fn wrong(&self, found: &str, wanted: &str) -> Stop {
        self.tcl.wrong(self.cursor.spot(), found, wanted)
    }

    fn blanks(&mut self) {
        while self.cursor.peek().is_some() {
            let bytes = self.cursor.bytes();
            if list::is_blank(bytes, self.cursor.pos) || bytes[self.cursor.pos] == b'\n' {
                self.cursor.pos += list::continuation(bytes, self.cursor.pos).unwrap_or(1);
            } else {
                break;
            }
        }
    }

    fn made(&self, text: impl Into<std::sync::Arc<str>>) -> Value {
        Value::new(text, self.cursor.script.spot_of(0))
    }

    fn deeper(&mut self) -> Result<(), Stop> {
        if self.tcl.depth >= self.tcl.limits.depth {
            let spot = self.cursor.spot();
            return Err(self.tcl.deeper(spot, |_| Ok(())).err().unwrap_or_else(|| {
                self.wrong("an expression that is nested too deep", "want fewer levels")
            }));
        }
        self.tcl.depth += 1;
        Ok(())
    }

    fn choice(&mut self, live: bool) -> Outcome {
        self.deeper()?;
        let out = self.choice_inside(live);
        self.tcl.depth -= 1;
        out
    }

    fn choice_inside(&mut self, live: bool) -> Outcome {
        let at = self.cursor.pos;
        let condition = self.binary(0, live)?;
        self.blanks();
        if self.cursor.peek() != Some(b'?') {
            return Ok(condition);
        }
        let holds = if live { self.truth(&condition, at)? } else { false };
        self.cursor.pos += 1;
        let yes = self.choice(live && holds)?;
        self.blanks();
        if self.cursor.peek() != Some(b':') {
            return Err(self.wrong("a choice without its second half", "want `: value`"));
        }
        self.cursor.pos += 1;
        let no = self.choice(live && !holds)?;
        Ok(if holds { yes } else { no })
    }

    fn truth(&self, value: &Value, at: usize) -> Result<bool, Stop> {
        truth(value.text()).ok_or_else(|| {
            let found = format!("`{}` is no truth value", short(value.text()));
            self.tcl.wrong(self.cursor.script.spot_of(at), found, "want a number or a boolean")
        })
    }

    fn operator(&self, level: usize) -> Option<&'static str> {
        let rest = self.rest();
        let op = LEVELS[level].iter().find(|op| rest.starts_with(**op))?;
        let next = rest.as_bytes().get(op.len()).copied();
        let longer = match *op {
            "|" => next == Some(b'|'),
            "&" => next == Some(b'&'),
            "*" => next == Some(b'*'),
            "<" => next == Some(b'<'),
            ">" => next == Some(b'>'),
            word if word.as_bytes()[0].is_ascii_alphabetic() => {
                next.is_some_and(|b| b.is_ascii_alphanumeric() || b == b'_')
            }
            _ => false,
        };
        (!longer).then_some(*op)
    }

    fn binary(&mut self, level: usize, live: bool) -> Outcome {
        if level == LEVELS.len() {
            return self.unary(live);
        }
        let start = self.cursor.pos;
        let mut left = self.binary(level + 1, live)?;
        loop {
            self.blanks();
            let Some(op) = self.operator(level) else { return Ok(left) };
            let at = self.cursor.pos;
            self.cursor.pos += op.len();
            if level < 2 {
                let decided = live && self.truth(&left, start)? == (op == "||");
                let second = self.cursor.pos;
                let right = self.binary(level + 1, live && !decided)?;
                let value = if !live {
                    false
                } else if decided {
                    op == "||"
                } else {
                    self.truth(&right, second)?
                };
                left = self.made(if value { "1" } else { "0" });
            } else if op == "**" {
                // from the right
                let right = self.binary(level, live)?;
                left = if live { self.apply(op, &left, &right, at)? } else { left };
            } else {
                let right = self.binary(level + 1, live)?;
                left = if live { self.apply(op, &left, &right, at)? } else { left };
            }
        }
    }

    fn apply(&mut self, op: &str, left: &Value, right: &Value, at: usize) -> Outcome {
        let (l, r) = (left.text(), right.text());
        let flag = |b: bool| Ok(self.made(if b { "1" } else { "0" }));
        match op {
            "eq" => return flag(l == r),
            "ne" => return flag(l != r),
            "lt" => return flag(l < r),
            "gt" => return flag(l > r),
            "le" => return flag(l <= r),
            "ge" => return flag(l >= r),
            "in" | "ni" => {
                let all = self.tcl.list(right)?;
                let inside = all.iter().any(|v| v.text() == l);
                return Ok(self.made(if inside == (op == "in") { "1" } else { "0" }));
            }
            _ => {}
        }
        let numbers = number(l).zip(number(r));
        if matches!(op, "==" | "!=" | "<" | ">" | "<=" | ">=") {
            let order = match numbers {
                Some((Number::Whole(a), Number::Whole(b))) => Some(a.cmp(&b)),
                Some((a, b)) => a.real().partial_cmp(&b.real()),
                None => Some(l.cmp(r)),
            };
            return flag(match (op, order) {
                ("!=", None) => true,
                (_, None) => false,
                ("==", Some(o)) => o.is_eq(),
                ("!=", Some(o)) => o.is_ne(),
                ("<", Some(o)) => o.is_lt(),
                (">", Some(o)) => o.is_gt(),
                ("<=", Some(o)) => o.is_le(),
                (_, Some(o)) => o.is_ge(),
            });
        }
        let spot = self.cursor.script.spot_of(at);
        let Some((a, b)) = numbers else {
            let bad = if number(l).is_none() { l } else { r };
            return Err(self.tcl.wrong(
                spot,
                format!("`{}` is no number for `{op}`", short(bad)),
                "want numbers on both sides",
            ));
        };
        let result = match (a, b) {
            (Number::Whole(a), Number::Whole(b)) => whole(op, a, b).map(Number::Whole),
            (a, b) => real(op, a.real(), b.real()).map(Number::Real),
        };
        match result {
            Ok(n) => Ok(self.made(n.text())),
            Err(what) => Err(self.tcl.wrong(spot, what, "want numbers that the operator takes")),
        }
    }

    fn unary(&mut self, live: bool) -> Outcome {
        self.blanks();
        let at = self.cursor.pos;
        let Some(op @ (b'-' | b'+' | b'!' | b'~')) = self.cursor.peek() else { return self.operand(live) };
        self.cursor.pos += 1;
        self.deeper()?;
        let value = self.unary(live);
        self.tcl.depth -= 1;
        let value = value?;
        if !live {
            return Ok(value);
        }
        if op == b'!' {
            let holds = self.truth(&value, at)?;
            return Ok(self.made(if holds { "0" } else { "1" }));
        }
        let made = match (op, number(value.text())) {
            (b'-', Some(Number::Whole(n))) => n.checked_neg().map(Number::Whole),
            (b'-', Some(Number::Real(x))) => Some(Number::Real(-x)),
            (b'+', n) => n,
            (_, Some(Number::Whole(n))) => Some(Number::Whole(!n)),
            _ => None,
        };
        let Some(n) = made else {
            let found = format!("`{}` is no number for `{}`", short(value.text()), char::from(op));
            return Err(self.tcl.wrong(self.cursor.script.spot_of(at), found, "want a number"));
        };
        Ok(self.made(n.text()))
    }

    fn operand(&mut self, live: bool) -> Outcome {
        match self.cursor.peek() {
            None => Err(self.wrong("the expression ends where a value should stand", "want a value")),
            Some(b'(') => {
                let open = self.cursor.spot();
                self.cursor.pos += 1;
                let value = self.choice(live)?;
                self.blanks();
                if self.cursor.peek() != Some(b')') {
                    return Err(self.tcl.wrong(
                        open,
                        "a parenthesis that is not closed",
                        "close it with `)`",
                    ));
                }
                self.cursor.pos += 1;
                Ok(value)
            }
            Some(b'$') => match variable(self.tcl, self.host, &mut self.cursor, live)? {
                Some(value) => Ok(value),
                None => Err(self.wrong("a dollar without a name", "want `$name`")),
            },
            Some(b'[') => bracket(self.tcl, self.host, &mut self.cursor, live),
            Some(b'"') => quoted(self.tcl, self.host, &mut self.cursor, live),
            Some(b'{') => braced(self.tcl, &mut self.cursor),
            Some(b) if b.is_ascii_digit() || b == b'.' => {
                let bytes = self.cursor.bytes();
                let start = self.cursor.pos;
                let mut end = start;
                while let Some(&b) = bytes.get(end) {
                    let signed = matches!(b, b'+' | b'-')
                        && matches!(bytes[end.saturating_sub(1)], b'e' | b'E')
                        && !self.cursor.script.text()[start..end].to_ascii_lowercase().starts_with("0x");
                    if !(b.is_ascii_alphanumeric() || b == b'.' || signed) {
                        break;
                    }
                    end += 1;
                }
                let text = self.cursor.script.slice(start, end);
                if number(text.text()).is_none() {
                    let found = format!("`{}` is no number", short(text.text()));
                    return Err(self.wrong(&found, "want a number, or quotes around a text"));
                }
                self.cursor.pos = end;
                Ok(text)
            }
            Some(b) if b.is_ascii_alphabetic() => self.named(live),
            Some(_) => {
                let found = format!("`{}` does not fit here", short(self.rest()));
                Err(self.wrong(&found, "want a value"))
            }
        }
    }

    fn named(&mut self, live: bool) -> Outcome {
        let start = self.cursor.pos;
        let length = self.rest().bytes().take_while(|b| b.is_ascii_alphanumeric() || *b == b'_').count();
        let name = self.cursor.script.slice(start, start + length);
        self.cursor.pos += length;
        self.blanks();
        if self.cursor.peek() == Some(b'(') {
            if !FUNCTIONS.contains(&name.text()) {
                return Err(self.tcl.unknown(name.spot(), "function", name.text(), FUNCTIONS));
            }
            return self.function(&name, live);
        }
        if truth(name.text()).is_some() {
            return Ok(name);
        }
        let found = format!("`{}` stands bare in an expression", short(name.text()));
        let wanted = format!("want `\"{0}\"` for a text, `${0}` for a variable", short(name.text()));
        Err(self.tcl.wrong(name.spot(), found, wanted))
    }

    fn function(&mut self, name: &Value, live: bool) -> Outcome {
        let mut numbers = Vec::new();
        loop {
            self.cursor.pos += 1;
            let at = self.cursor.pos;
            let value = self.choice(live)?;
            if live && name.text() == "bool" {
                let holds = self.truth(&value, at)?;
                numbers.push(Number::Whole(i64::from(holds)));
            } else if live {
                let Some(n) = number(value.text()) else {
                    let found = format!("`{}` is no number for `{}`", short(value.text()), name.text());
                    return Err(self.tcl.wrong(self.cursor.script.spot_of(at), found, "want a number"));
                };
                numbers.push(n);
            }
            self.blanks();
            match self.cursor.peek() {
                Some(b',') => {}
                Some(b')') => break,
                _ => return Err(self.wrong("a function that is not closed", "want `,` or `)`")),
            }
        }
        self.cursor.pos += 1;
        if !live {
            return Ok(self.made("0"));
        }
        match function(name.text(), &numbers) {
            Some(Number::Real(x)) if !x.is_finite() => {
                let found = format!("`{}` gives {}", name.text(), real_text(x));
                Err(self.tcl.wrong(name.spot(), found, "want arguments it is defined for"))
            }
            Some(n) => Ok(self.made(n.text())),
            None => {
                let found = format!("`{}` does not take these {} values", name.text(), numbers.len());
                Err(self.tcl.wrong(name.spot(), found, "want the arguments of the function"))
            }
        }
    }
}

fn whole(op: &str, a: i64, b: i64) -> Result<i64, String> {
    let shift = || u32::try_from(b).ok().filter(|n| *n < 63);
    let out = match op {
        "+" => a.checked_add(b),
        "-" => a.checked_sub(b),
        "*" => a.checked_mul(b),
        "/" | "%" if b == 0 => return Err("a division by zero".into()),
        // towards minus infinity, and a remainder of the sign of the divisor
        "/" => a.checked_div(b).map(|q| if a % b != 0 && (a < 0) != (b < 0) { q - 1 } else { q }),
        "%" => a.checked_rem(b).map(|r| if r != 0 && (r < 0) != (b < 0) { r + b } else { r }),
        "**" => u32::try_from(b).ok().and_then(|n| a.checked_pow(n)),
        "<<" => shift().and_then(|n| a.checked_mul(1i64 << n)),
        ">>" => u32::try_from(b).ok().map(|n| a >> n.min(63)),
        "&" => Some(a & b),
        "|" => Some(a | b),
        _ => Some(a ^ b),
    };
    out.ok_or_else(|| format!("`{a} {op} {b}` is no whole number of 64 bits"))
}

fn real(op: &str, a: f64, b: f64) -> Result<f64, String> {
    let x = match op {
        "+" => a + b,
        "-" => a - b,
        "*" => a * b,
        "/" if b == 0.0 => return Err("a division by zero".into()),
        "/" => a / b,
        "**" => a.powf(b),
        _ => return Err(format!("`{op}` does not take numbers with a fraction")),
    };
    if x.is_finite() { Ok(x) } else { Err(format!("`{a} {op} {b}` has no finite value")) }
}

#[expect(clippy::cast_possible_truncation, reason = "held against the ends of the range first")]
fn to_whole(x: f64) -> Option<Number> {
    (x.abs() < 9.2e18).then_some(Number::Whole(x as i64))
}

fn function(name: &str, n: &[Number]) -> Option<Number> {
    let real = |f: fn(f64) -> f64, x: &Number| Some(Number::Real(f(x.real())));
    match (name, n) {
        ("bool", [x]) => Some(*x),
        ("abs", [Number::Whole(x)]) => x.checked_abs().map(Number::Whole),
        ("abs", [x]) => real(f64::abs, x),
        ("double", [x]) => Some(Number::Real(x.real())),
        ("int" | "entier" | "round", [Number::Whole(x)]) => Some(Number::Whole(*x)),
        ("int" | "entier", [x]) => to_whole(x.real().trunc()),
        ("round", [x]) => to_whole(x.real().round()),
        ("ceil", [x]) => real(f64::ceil, x),
        ("floor", [x]) => real(f64::floor, x),
        ("sqrt", [x]) => real(f64::sqrt, x),
        ("exp", [x]) => real(f64::exp, x),
        ("log", [x]) => real(f64::ln, x),
        ("log10", [x]) => real(f64::log10, x),
        ("sin", [x]) => real(f64::sin, x),
        ("cos", [x]) => real(f64::cos, x),
        ("atan", [x]) => real(f64::atan, x),
        ("asin", [x]) => real(f64::asin, x),
        ("acos", [x]) => real(f64::acos, x),
        ("pow", [a, b]) => Some(Number::Real(a.real().powf(b.real()))),
        ("max" | "min", [first, rest @ ..]) => Some(rest.iter().fold(*first, |best, x| {
            let better = if name == "max" { x.real() > best.real() } else { x.real() < best.real() };
            if better { *x } else { best }
        })),
        _ => None,
    }
}
