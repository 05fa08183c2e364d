//! Conditions on nets: the Boolean expressions of switch states and strategies.

use serde::{Serialize, Serializer};

/// A Boolean expression of names.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Condition {
    /// True or false.
    Constant(bool),
    /// A port or net, as written but for escapes.
    Name(String),
    /// Not.
    Not(Box<Condition>),
    /// Both.
    And(Box<Condition>, Box<Condition>),
    /// Either.
    Or(Box<Condition>, Box<Condition>),
    /// One of them; what is not equal.
    Xor(Box<Condition>, Box<Condition>),
}

/// What is wrong in a condition, and at which byte.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("{found}; {wanted}")]
pub struct ConditionError {
    /// The byte.
    pub byte: usize,
    /// What was found.
    pub found: String,
    /// What would be right.
    pub wanted: &'static str,
}

/// Parentheses and signs within each other.
const MAX_DEPTH: usize = 100;
/// Operators of one condition.
const MAX_PARTS: usize = 2000;

impl Condition {
    /// Reads a condition: `!`, `~`, `&`, `&&`, `|`, `||`, `^`, `~^`, `==`, `!=`, parentheses, `1'b0`, `0`, `1`.
    ///
    /// A name may have a hierarchy (`u_a/sleep`, `u_a.sleep`), an index and escapes (`\a[0] `, `a\[0\]`).
    ///
    /// # Errors
    /// Text that is no such expression.
    ///
    /// # Example
    /// ```
    /// use hushrail::read::intent::Condition;
    /// let c = Condition::read("!sleep && (mode == 1'b1 | test)")?;
    /// assert_eq!(c.value(&|name| Some(name == "mode")), Some(true));
    /// assert_eq!(c.names(), ["sleep", "mode", "test"]);
    /// # Ok::<(), hushrail::read::intent::ConditionError>(())
    /// ```
    pub fn read(text: &str) -> Result<Self, ConditionError> {
        let mut p = Parser { text, pos: 0, depth: 0, parts: 0 };
        let out = p.level(0)?;
        p.blanks();
        if p.pos < text.len() {
            return Err(p.wrong("want an operator or the end of the condition"));
        }
        Ok(out)
    }

    /// Its value, when that follows from what is known of its names.
    pub fn value(&self, known: &dyn Fn(&str) -> Option<bool>) -> Option<bool> {
        match self {
            Self::Constant(value) => Some(*value),
            Self::Name(name) => known(name),
            Self::Not(a) => a.value(known).map(|v| !v),
            Self::And(a, b) => match (a.value(known), b.value(known)) {
                (Some(false), _) | (_, Some(false)) => Some(false),
                (Some(true), Some(true)) => Some(true),
                _ => None,
            },
            Self::Or(a, b) => match (a.value(known), b.value(known)) {
                (Some(true), _) | (_, Some(true)) => Some(true),
                (Some(false), Some(false)) => Some(false),
                _ => None,
            },
            Self::Xor(a, b) => Some(a.value(known)? != b.value(known)?),
        }
    }

    /// The names in it, each once, in order.
    pub fn names(&self) -> Vec<&str> {
        let mut out = Vec::new();
        self.collect(&mut out);
        out
    }

    fn collect<'a>(&'a self, out: &mut Vec<&'a str>) {
        match self {
            Self::Constant(_) => {}
            Self::Name(name) => {
                if !out.contains(&name.as_str()) {
                    out.push(name);
                }
            }
            Self::Not(a) => a.collect(out),
            Self::And(a, b) | Self::Or(a, b) | Self::Xor(a, b) => {
                a.collect(out);
                b.collect(out);
            }
        }
    }
}

impl std::fmt::Display for Condition {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Constant(value) => write!(f, "{}", u8::from(*value)),
            Self::Name(name) => write!(f, "{name}"),
            Self::Not(a) => match **a {
                Self::Constant(_) | Self::Name(_) | Self::Not(_) => write!(f, "!{a}"),
                _ => write!(f, "!({a})"),
            },
            Self::And(a, b) => write!(f, "{} & {}", Inner(a), Inner(b)),
            Self::Or(a, b) => write!(f, "{} | {}", Inner(a), Inner(b)),
            Self::Xor(a, b) => write!(f, "{} ^ {}", Inner(a), Inner(b)),
        }
    }
}

/// A part of a condition, in parentheses where it needs them.
struct Inner<'a>(&'a Condition);

impl std::fmt::Display for Inner<'_> {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self.0 {
            Condition::Constant(_) | Condition::Name(_) | Condition::Not(_) => write!(f, "{}", self.0),
            _ => write!(f, "({})", self.0),
        }
    }
}

impl Serialize for Condition {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

struct Parser<'a> {
    text: &'a str,
    pos: usize,
    depth: usize,
    parts: usize,
}

const LEVELS: [&[&str]; 6] =
    [&["||"], &["&&"], &["|"], &["^", "~^", "^~"], &["&"], &["===", "!==", "==", "!="]];

impl Parser<'_> {
    fn rest(&self) -> &str {
        self.text.get(self.pos..).unwrap_or_default()
    }

    fn wrong(&self, wanted: &'static str) -> ConditionError {
        let rest: String = self.rest().chars().take(30).collect();
        let found = if rest.is_empty() {
            "the condition ends too early".to_owned()
        } else {
            format!("`{rest}` does not fit here")
        };
        ConditionError { byte: self.pos, found, wanted }
    }

    fn blanks(&mut self) {
        self.pos += self.rest().len() - self.rest().trim_start().len();
    }

    fn operator(&self, level: usize) -> Option<&'static str> {
        let rest = self.rest();
        let op = LEVELS[level].iter().find(|op| rest.starts_with(**op))?;
        let doubled = op.len() == 1 && *op != "^" && rest[1..].starts_with(op);
        (!doubled).then_some(*op)
    }

    fn level(&mut self, level: usize) -> Result<Condition, ConditionError> {
        if level == LEVELS.len() {
            return self.operand();
        }
        let mut left = self.level(level + 1)?;
        loop {
            self.blanks();
            let Some(op) = self.operator(level) else { return Ok(left) };
            self.parts += 1;
            if self.parts > MAX_PARTS {
                return Err(self.wrong("want a condition of fewer parts"));
            }
            self.pos += op.len();
            let right = self.level(level + 1)?;
            let (a, b) = (Box::new(left), Box::new(right));
            left = match op {
                "||" | "|" => Condition::Or(a, b),
                "&&" | "&" => Condition::And(a, b),
                "^" | "!=" | "!==" => Condition::Xor(a, b),
                _ => Condition::Not(Box::new(Condition::Xor(a, b))),
            };
        }
    }

    fn operand(&mut self) -> Result<Condition, ConditionError> {
        self.blanks();
        if self.depth >= MAX_DEPTH {
            return Err(self.wrong("want fewer levels"));
        }
        match self.rest().bytes().next() {
            Some(b'!' | b'~') => {
                self.pos += 1;
                self.depth += 1;
                let inside = self.operand()?;
                self.depth -= 1;
                Ok(Condition::Not(Box::new(inside)))
            }
            Some(b'(') => {
                self.pos += 1;
                self.depth += 1;
                let inside = self.level(0)?;
                self.depth -= 1;
                self.blanks();
                if !self.rest().starts_with(')') {
                    return Err(self.wrong("want `)`"));
                }
                self.pos += 1;
                Ok(inside)
            }
            // Tcl quotes names so
            Some(b'{') => {
                let Some(end) = self.rest().find('}') else { return Err(self.wrong("want `}`")) };
                let inside = self.rest()[1..end].to_owned();
                let outer = self.pos;
                let value = Self::nested(&inside, self.depth)
                    .map_err(|e| ConditionError { byte: outer + 1 + e.byte, ..e })?;
                self.pos += end + 1;
                Ok(value)
            }
            Some(b'0'..=b'9' | b'\'') => self.constant(),
            Some(b) if b.is_ascii_alphabetic() || b"_\\/.$".contains(&b) => self.name(),
            _ => Err(self.wrong("want a name, a constant, `!` or `(`")),
        }
    }

    fn nested(text: &str, depth: usize) -> Result<Condition, ConditionError> {
        let mut p = Parser { text, pos: 0, depth: depth + 1, parts: 0 };
        let out = p.level(0)?;
        p.blanks();
        if p.pos < text.len() { Err(p.wrong("want an operator")) } else { Ok(out) }
    }

    fn constant(&mut self) -> Result<Condition, ConditionError> {
        let length = self
            .rest()
            .bytes()
            .take_while(|b| b.is_ascii_alphanumeric() || *b == b'\'' || *b == b'_')
            .count();
        let word = self.rest()[..length].to_ascii_lowercase();
        let digits = match word.rsplit_once('\'') {
            Some(("" | "1", tail)) => tail.strip_prefix(['b', 'h', 'd', 'o']).unwrap_or(tail),
            Some(_) => return Err(self.wrong("want a constant of one bit")),
            None => &word,
        };
        let value = match digits {
            "0" => false,
            "1" => true,
            _ => return Err(self.wrong("want the constant `0`, `1`, `1'b0` or `1'b1`")),
        };
        self.pos += length;
        Ok(Condition::Constant(value))
    }

    fn name(&mut self) -> Result<Condition, ConditionError> {
        let bytes = self.rest().as_bytes();
        let mut name = String::new();
        let mut i = 0;
        while let Some(&b) = bytes.get(i) {
            match b {
                b'\\' if bytes.get(i + 1).is_some_and(|b| b"[]".contains(b)) => {
                    name.push(char::from(bytes[i + 1]));
                    i += 2;
                }
                // an escaped name ends at a blank, or before what goes on
                b'\\' => {
                    let run = &self.rest()[i + 1..];
                    let end = run.find(char::is_whitespace).unwrap_or(run.len());
                    if end == 0 {
                        self.pos += i;
                        return Err(self.wrong("want a name behind the backslash"));
                    }
                    name.push_str(&run[..end]);
                    i += 1 + end;
                    let after = bytes.get(i + 1);
                    if after.is_some_and(|b| b"/.[".contains(b)) {
                        i += 1;
                    } else {
                        break;
                    }
                }
                b'[' => {
                    let Some(end) = self.rest()[i..].find(']') else {
                        self.pos += i;
                        return Err(self.wrong("want `]`"));
                    };
                    name.push_str(self.rest()[i..=i + end].trim_end_matches("\\]"));
                    if name.ends_with(|c: char| c != ']') {
                        name.push(']');
                    }
                    i += end + 1;
                }
                b if b.is_ascii_alphanumeric() || b"_/.$".contains(&b) => {
                    name.push(char::from(b));
                    i += 1;
                }
                _ => break,
            }
        }
        self.pos += i;
        Ok(Condition::Name(name))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn shown(text: &str) -> String {
        Condition::read(text).map_or_else(|e| format!("{}: {e}", e.byte), |c| c.to_string())
    }

    #[test]
    fn conditions_of_real_files_are_understood() {
        for (text, wanted) in [
            ("!SD_sd", "!SD_sd"),
            ("ctrl", "ctrl"),
            ("a & !b | c", "(a & !b) | c"),
            ("a && b || ~c ^ d", "(a & b) | (!c ^ d)"),
            ("(sleep == 1'b0)", "!(sleep ^ 0)"),
            ("ack != 1", "ack ^ 1"),
            ("u_a/\\b[0] & c[3]", "u_a/b[0] & c[3]"),
            ("u_a/b\\[0\\]&c", "u_a/b[0] & c"),
            ("{a} & {!b}", "a & !b"),
            ("a ~^ b", "!(a ^ b)"),
        ] {
            assert_eq!(shown(text), wanted, "{text}");
        }
    }

    #[test]
    fn what_is_no_condition_is_refused_at_its_byte() {
        for (text, wanted) in [
            ("", "0: the condition ends too early"),
            ("a &", "3: the condition ends too early"),
            ("a b", "2: `b` does not fit here"),
            ("(a", "2: the condition ends too early; want `)`"),
            ("a == 2'b01", "5: `2'b01` does not fit here; want a constant of one bit"),
            ("a[0", "1: `[0` does not fit here; want `]`"),
            ("a = b", "2: `= b` does not fit here"),
            ("\\ ", "0: `\\ ` does not fit here; want a name behind the backslash"),
        ] {
            assert!(shown(text).starts_with(wanted), "{text}: {}", shown(text));
        }
        assert!(shown(&"!".repeat(10_000)).contains("fewer levels"));
        assert!(shown(&"(".repeat(10_000)).contains("fewer levels"));
        assert!(shown(&"a&".repeat(100_000)).contains("fewer parts"));
    }

    proptest::proptest! {
        #[test]
        fn no_text_panics(text in "[ab01!~&|^=()'{}\\[\\]\\\\ /.é]{0,40}") {
            let _ = Condition::read(&text);
        }
    }
}
