//! Conditions on pins and functions of pins: boolean expressions after the rules of the Liberty format.
//!
//! Operators, those that bind closest first: inversion (`!A`, `A'`), exclusive or (`A^B`), and (`A&B`, `A*B`, or the two side by
//! side), or (`A|B`, `A+B`). `0` and `1` are constants. A name that could be mistaken stands in quotes: `"1A"`. The empty text
//! holds always.

use std::collections::BTreeMap;
use std::fmt;

/// How deep brackets and inversions may nest.
const DEEPEST: usize = 200;

/// A boolean expression over pins.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Condition {
    /// Always this.
    Constant(bool),
    /// The value of a pin or of a stored variable.
    Pin(String),
    /// Inverted.
    Not(Box<Self>),
    /// All of these.
    And(Vec<Self>),
    /// Any of these.
    Or(Vec<Self>),
    /// An odd number of these.
    Xor(Vec<Self>),
}

/// What is wrong in the text of a condition.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("{found}; {wanted}")]
pub struct ConditionError {
    /// Byte offset in the text.
    pub at: usize,
    /// What was found.
    pub found: String,
    /// What would be right.
    pub wanted: &'static str,
}

impl Condition {
    /// Reads an expression; the empty text is always true.
    ///
    /// # Errors
    /// An operator without operand, a bracket without its partner, a character that belongs to no name.
    pub fn parse(text: &str) -> Result<Self, ConditionError> {
        let mut p = Parser { text, at: 0, depth: 0 };
        p.blanks();
        if p.at == text.len() {
            return Ok(Self::Constant(true));
        }
        let whole = p.any()?;
        if p.at < text.len() {
            return Err(p.wrong("want an operator, or the end"));
        }
        Ok(whole)
    }

    /// The value, where `pin` knows enough; an unknown pin that makes no difference does no harm.
    pub fn value(&self, pin: &mut dyn FnMut(&str) -> Option<bool>) -> Option<bool> {
        match self {
            Self::Constant(b) => Some(*b),
            Self::Pin(name) => pin(name),
            Self::Not(x) => x.value(pin).map(|b| !b),
            Self::And(list) => decided(list, false, pin),
            Self::Or(list) => decided(list, true, pin),
            Self::Xor(list) => list.iter().try_fold(false, |odd, x| x.value(pin).map(|b| odd ^ b)),
        }
    }

    /// Names in the order they first stand.
    pub fn pins(&self) -> Vec<&str> {
        let mut out = Vec::new();
        self.collect(&mut out);
        out
    }

    fn collect<'a>(&'a self, out: &mut Vec<&'a str>) {
        match self {
            Self::Constant(_) => {}
            Self::Pin(name) if out.contains(&name.as_str()) => {}
            Self::Pin(name) => out.push(name),
            Self::Not(x) => x.collect(out),
            Self::And(list) | Self::Or(list) | Self::Xor(list) => list.iter().for_each(|x| x.collect(out)),
        }
    }

    /// The pins a product fixes, with their values; `None` for anything but a product, or one that contradicts itself.
    pub fn product(&self) -> Option<BTreeMap<&str, bool>> {
        let mut pins = BTreeMap::new();
        self.factors(&mut pins).then_some(pins)
    }

    fn factors<'a>(&'a self, pins: &mut BTreeMap<&'a str, bool>) -> bool {
        let mut fix = |name: &'a str, value| pins.insert(name, value).is_none_or(|old| old == value);
        match self {
            Self::Constant(b) => *b,
            Self::Pin(name) => fix(name, true),
            Self::Not(x) => matches!(&**x, Self::Pin(name) if fix(name, false)),
            Self::And(list) => list.iter().all(|x| x.factors(pins)),
            Self::Or(_) | Self::Xor(_) => false,
        }
    }

    /// How closely it binds: a part that binds less closely than the whole needs brackets.
    fn rank(&self) -> u8 {
        match self {
            Self::Or(_) => 0,
            Self::And(_) => 1,
            Self::Xor(_) => 2,
            _ => 3,
        }
    }
}

/// `and` for `absorbing` false, `or` for `absorbing` true.
fn decided(list: &[Condition], absorbing: bool, pin: &mut dyn FnMut(&str) -> Option<bool>) -> Option<bool> {
    let mut known = true;
    for x in list {
        match x.value(pin) {
            Some(b) if b == absorbing => return Some(absorbing),
            Some(_) => {}
            None => known = false,
        }
    }
    known.then_some(!absorbing)
}

impl fmt::Display for Condition {
    /// Text that [`Condition::parse`] reads back.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let part = |f: &mut fmt::Formatter<'_>, x: &Self, least: u8| {
            if x.rank() < least { write!(f, "({x})") } else { write!(f, "{x}") }
        };
        let joined = |f: &mut fmt::Formatter<'_>, list: &[Self], sign: &str| {
            for (i, x) in list.iter().enumerate() {
                if i > 0 {
                    f.write_str(sign)?;
                }
                part(f, x, self.rank() + 1)?;
            }
            Ok(())
        };
        match self {
            Self::Constant(b) => f.write_str(if *b { "1" } else { "0" }),
            Self::Pin(name) if name.starts_with(|c: char| c.is_ascii_digit()) => write!(f, "\"{name}\""),
            Self::Pin(name) => f.write_str(name),
            Self::Not(x) => {
                f.write_str("!")?;
                part(f, x, 3)
            }
            Self::And(list) => joined(f, list, "&"),
            Self::Or(list) => joined(f, list, "|"),
            Self::Xor(list) => joined(f, list, "^"),
        }
    }
}

struct Parser<'a> {
    text: &'a str,
    at: usize,
    depth: usize,
}

fn is_name(b: u8) -> bool {
    b.is_ascii_alphanumeric() || b"_.$[]:<>".contains(&b)
}

impl Parser<'_> {
    fn peek(&self) -> Option<u8> {
        self.text.as_bytes().get(self.at).copied()
    }

    fn blanks(&mut self) {
        while self.peek().is_some_and(|b| b.is_ascii_whitespace()) {
            self.at += 1;
        }
    }

    fn takes(&mut self, signs: [u8; 2]) -> bool {
        self.blanks();
        let found = self.peek().is_some_and(|b| signs.contains(&b));
        self.at += usize::from(found);
        found
    }

    fn wrong(&self, wanted: &'static str) -> ConditionError {
        let found = match self.text.get(self.at..).and_then(|t| t.chars().next()) {
            Some(c) => format!("`{c}` in `{}`", self.text),
            None => format!("`{}` ends too early", self.text),
        };
        ConditionError { at: self.at, found, wanted }
    }

    fn any(&mut self) -> Result<Condition, ConditionError> {
        let mut list = vec![self.all()?];
        while self.takes(*b"|+") {
            list.push(self.all()?);
        }
        Ok(one_or(list, Condition::Or))
    }

    fn all(&mut self) -> Result<Condition, ConditionError> {
        let mut list = vec![self.odd()?];
        loop {
            if !self.takes(*b"&*") && !self.peek().is_some_and(|b| is_name(b) || b"!(\"".contains(&b)) {
                return Ok(one_or(list, Condition::And));
            }
            list.push(self.odd()?);
        }
    }

    fn odd(&mut self) -> Result<Condition, ConditionError> {
        let mut list = vec![self.single()?];
        while self.takes(*b"^^") {
            list.push(self.single()?);
        }
        Ok(one_or(list, Condition::Xor))
    }

    fn single(&mut self) -> Result<Condition, ConditionError> {
        self.blanks();
        let mut inverted = false;
        while self.takes(*b"!!") {
            inverted = !inverted;
        }
        self.blanks();
        let start = self.at;
        let mut found = match self.peek() {
            Some(b'(') => {
                if self.depth == DEEPEST {
                    return Err(self.wrong("want fewer brackets inside each other"));
                }
                (self.depth, self.at) = (self.depth + 1, self.at + 1);
                let inner = self.any()?;
                if !self.takes(*b"))") {
                    return Err(self.wrong("want `)`"));
                }
                self.depth -= 1;
                inner
            }
            Some(b'"') => {
                self.at += 1;
                let length = self.text[self.at..].find('"');
                let name = length.map_or("", |n| &self.text[self.at..self.at + n]);
                if name.is_empty() || !name.bytes().all(is_name) {
                    return Err(self.wrong("want the name of a pin and a closing quote"));
                }
                self.at += name.len() + 1;
                Condition::Pin(name.to_owned())
            }
            Some(b) if is_name(b) => {
                while self.peek().is_some_and(is_name) {
                    self.at += 1;
                }
                match &self.text[start..self.at] {
                    "0" => Condition::Constant(false),
                    "1" => Condition::Constant(true),
                    name => Condition::Pin(name.to_owned()),
                }
            }
            _ => return Err(self.wrong("want the name of a pin, 0, 1 or a bracket")),
        };
        while self.takes(*b"''") {
            inverted = !inverted;
        }
        if inverted {
            found = match found {
                Condition::Not(x) => *x,
                x => Condition::Not(Box::new(x)),
            };
        }
        Ok(found)
    }
}

fn one_or(mut list: Vec<Condition>, many: fn(Vec<Condition>) -> Condition) -> Condition {
    match list.pop() {
        Some(only) if list.is_empty() => only,
        Some(last) => {
            list.push(last);
            many(list)
        }
        None => Condition::Constant(true),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn shown(text: &str) -> String {
        Condition::parse(text).map_or_else(|e| format!("{}: {e}", e.at), |c| c.to_string())
    }

    #[test]
    fn operators_bind_as_the_format_says() {
        for (text, wanted) in [
            ("A&B|C", "A&B|C"),
            ("A+B*C", "A|B&C"),
            ("A^B&C", "A^B&C"),
            ("A&B^C|D", "A&B^C|D"),
            ("(A&B)^C", "(A&B)^C"),
            ("A B' !C", "A&!B&!C"),
            ("A(B+C)", "A&(B|C)"),
            ("(A)(B)", "A&B"),
            ("!(A B)'", "A&B"),
            ("!!A''", "A"),
            ("!A[3]&B_1[0]", "!A[3]&B_1[0]"),
            ("\"1A\" + 0", "\"1A\"|0"),
            ("", "1"),
            (" 1 ", "1"),
        ] {
            assert_eq!(shown(text), wanted, "{text}");
        }
        let table = |text: &str| -> Vec<Option<bool>> {
            let c = Condition::parse(text).expect("fine");
            let bit = |k: u8, p: &str| Some(k >> (p.as_bytes()[0] - b'A') & 1 == 1);
            (0..16).map(|k| c.value(&mut |p| bit(k, p))).collect()
        };
        assert_eq!(table("A^B&C"), table("(A^B)&C"));
        assert_eq!(table("A&B^C"), table("A&(B^C)"));
        assert_eq!(table("A|B^C D"), table("A|((B^C)&D)"));
        assert_eq!(table("!A^B"), table("(!A)^B"));
    }

    #[test]
    fn mistakes_are_placed() {
        for (text, at, part) in [
            ("A&", 2, "`A&` ends too early; want the name"),
            ("A|&B", 2, "`&` in `A|&B`"),
            ("(A", 2, "want `)`"),
            ("A)", 1, "want an operator, or the end"),
            ("!", 1, "want the name"),
            ("A=1", 1, "`=`"),
            ("\"1A", 1, "closing quote"),
            ("A&µ", 2, "`µ`"),
        ] {
            let e = Condition::parse(text).expect_err(text);
            assert!(e.at == at && e.to_string().contains(part), "{text}: {} {e}", e.at);
        }
        assert!(Condition::parse(&"(".repeat(100_000)).is_err());
        assert_eq!(shown(&format!("{}A", "!".repeat(100_001))), "!A");
    }

    #[test]
    fn products_tell_their_pins() {
        let c = Condition::parse("!A1 & B[0]").expect("a product");
        let pins = c.product().expect("a product");
        assert_eq!((pins["A1"], pins["B[0]"]), (false, true));
        for other in ["A|B", "A^B", "A&!A", "!(A&B)"] {
            assert_eq!(Condition::parse(other).expect(other).product(), None, "{other}");
        }
    }

    #[test]
    fn an_unknown_pin_matters_only_where_it_matters() {
        let value = |text: &str| {
            Condition::parse(text).expect(text).value(&mut |p| match p {
                "A" => Some(true),
                "B" => Some(false),
                _ => None,
            })
        };
        assert_eq!(
            ["A|X", "B&X", "A&X", "X^A", "!X", "B|X&B"].map(value),
            [Some(true), Some(false), None, None, None, Some(false)]
        );
    }

    proptest! {
        #[test]
        fn any_text_gives_a_condition_that_reads_back_or_an_error(text in "[A-C01!'&*|+^() \"µ]{0,24}") {
            if let Ok(c) = Condition::parse(&text) {
                let again = Condition::parse(&c.to_string());
                prop_assert_eq!(again.map(|a| a.to_string()), Ok(c.to_string()));
            }
        }
    }
}
