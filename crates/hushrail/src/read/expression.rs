//! Arithmetic of SPICE decks: parsing to a tree once, evaluating it in a scope many times.

use std::sync::Arc;

use super::number::leading_number;

/// An expression as written, names in lower case.
#[derive(Debug, Clone, PartialEq)]
pub enum Expr {
    /// A number.
    Num(f64),
    /// A name to look up in the scope.
    Name(Arc<str>),
    /// A prefix operator.
    Unary(Op, Box<Expr>),
    /// An infix operator.
    Binary(Op, Box<Expr>, Box<Expr>),
    /// `condition ? then : otherwise`.
    Choose(Box<[Expr; 3]>),
    /// A function call.
    Call(Arc<str>, Vec<Expr>),
}

/// Operators, loosest binding first.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[expect(missing_docs, reason = "the names are the operators")]
pub enum Op {
    Or,
    And,
    Eq,
    Ne,
    Lt,
    Le,
    Gt,
    Ge,
    Add,
    Sub,
    Mul,
    Div,
    Mod,
    Pow,
    Neg,
    Not,
}

impl Op {
    fn level(self) -> u8 {
        match self {
            Self::Or => 1,
            Self::And => 2,
            Self::Eq | Self::Ne => 3,
            Self::Lt | Self::Le | Self::Gt | Self::Ge => 4,
            Self::Add | Self::Sub => 5,
            Self::Mul | Self::Div | Self::Mod => 6,
            Self::Neg | Self::Not => 7,
            Self::Pow => 8,
        }
    }
}

/// Why an expression has no value.
#[derive(Debug, Clone, PartialEq)]
#[expect(missing_docs, reason = "described on the variants")]
pub enum EvalError {
    /// A name the scope does not hold.
    Undefined { name: String },
    /// A parameter defined through itself.
    Circular { name: String },
    /// A function that does not exist.
    NoFunction { name: String },
    /// A function with the wrong number of arguments.
    Arguments { name: String, wanted: usize, found: usize },
    /// A result that is not a finite number.
    NotFinite { what: String },
}

/// Where names get their values while an expression is evaluated.
pub trait Scope {
    /// The value of a name in lower case, `None` when the scope does not define it.
    fn value(&self, name: &str) -> Option<Result<f64, EvalError>>;
    /// The names that could have been meant, for suggestions.
    fn names(&self) -> Vec<String>;
    /// A function defined in the deck.
    fn function(&self, _name: &str) -> Option<Arc<UserFunction>> {
        None
    }
}

/// A function defined in the deck by `.func`.
#[derive(Debug, Clone, PartialEq)]
pub struct UserFunction {
    /// Names of the arguments.
    pub args: Vec<Arc<str>>,
    /// What it computes.
    pub body: Expr,
}

/// What stopped the parser: byte offset, what was found, what was wanted.
#[derive(Debug, Clone, PartialEq)]
pub struct ParseStop {
    /// Byte offset in the text given to the parser.
    pub offset: usize,
    /// What stands there.
    pub found: String,
    /// What would be right.
    pub wanted: &'static str,
}

const MAX_DEPTH: u32 = 120;

/// Parses the longest expression at the start of `text`; returns it and the number of bytes it took.
pub fn parse_prefix(text: &str) -> Result<(Expr, usize), ParseStop> {
    let mut p = Parser { text, at: 0, depth: 0 };
    let e = p.expression(1)?;
    Ok((e, p.at))
}

struct Parser<'a> {
    text: &'a str,
    at: usize,
    depth: u32,
}

impl Parser<'_> {
    fn rest(&self) -> &str {
        &self.text[self.at..]
    }

    fn skip_space(&mut self) {
        let n = self.rest().len() - self.rest().trim_start().len();
        self.at += n;
    }

    fn stop(&self, wanted: &'static str) -> ParseStop {
        let word: String = self.rest().chars().take(20).take_while(|c| !c.is_whitespace()).collect();
        let found = if word.is_empty() { "the end of the line".to_owned() } else { format!("`{word}`") };
        ParseStop { offset: self.at, found, wanted }
    }

    fn operator(&self) -> Option<(Op, usize)> {
        let r = self.rest().as_bytes();
        let two = |a: u8, b: u8| r.first() == Some(&a) && r.get(1) == Some(&b);
        Some(match r.first()? {
            b'|' if two(b'|', b'|') => (Op::Or, 2),
            b'&' if two(b'&', b'&') => (Op::And, 2),
            b'=' if two(b'=', b'=') => (Op::Eq, 2),
            b'!' if two(b'!', b'=') => (Op::Ne, 2),
            b'<' if two(b'<', b'=') => (Op::Le, 2),
            b'>' if two(b'>', b'=') => (Op::Ge, 2),
            b'<' => (Op::Lt, 1),
            b'>' => (Op::Gt, 1),
            b'+' => (Op::Add, 1),
            b'-' => (Op::Sub, 1),
            b'*' if two(b'*', b'*') => (Op::Pow, 2),
            b'*' => (Op::Mul, 1),
            b'/' => (Op::Div, 1),
            b'%' => (Op::Mod, 1),
            b'^' => (Op::Pow, 1),
            _ => return None,
        })
    }

    fn expression(&mut self, min_level: u8) -> Result<Expr, ParseStop> {
        self.depth += 1;
        if self.depth > MAX_DEPTH {
            return Err(self.stop("fewer nested brackets (at most 120)"));
        }
        let mut left = self.primary()?;
        loop {
            let before = self.at;
            self.skip_space();
            if let Some((op, len)) = self.operator()
                && op.level() >= min_level
            {
                self.at += len;
                // powers bind to the right, everything else to the left
                let right = self.expression(if op == Op::Pow { op.level() } else { op.level() + 1 })?;
                left = Expr::Binary(op, Box::new(left), Box::new(right));
            } else if min_level == 1 && self.rest().starts_with('?') {
                self.at += 1;
                let then = self.expression(1)?;
                self.skip_space();
                if !self.rest().starts_with(':') {
                    return Err(self.stop("want `:` and the other value"));
                }
                self.at += 1;
                let otherwise = self.expression(1)?;
                left = Expr::Choose(Box::new([left, then, otherwise]));
            } else {
                self.at = before;
                break;
            }
        }
        self.depth -= 1;
        Ok(left)
    }

    fn primary(&mut self) -> Result<Expr, ParseStop> {
        self.skip_space();
        let Some(first) = self.rest().bytes().next() else {
            return Err(self.stop("want a number, a name or an expression"));
        };
        match first {
            b'-' | b'+' | b'!' => {
                self.at += 1;
                let level = Op::Neg.level();
                let inner = self.expression(level)?;
                Ok(match (first, inner) {
                    (b'+', e) => e,
                    (b'-', Expr::Num(v)) => Expr::Num(-v),
                    (b'-', e) => Expr::Unary(Op::Neg, Box::new(e)),
                    (_, e) => Expr::Unary(Op::Not, Box::new(e)),
                })
            }
            b'(' | b'{' | b'\'' => {
                self.at += 1;
                let e = self.expression(1)?;
                self.skip_space();
                let close = match first {
                    b'(' => ')',
                    b'{' => '}',
                    _ => '\'',
                };
                if !self.rest().starts_with(close) {
                    return Err(self.stop(match close {
                        ')' => "want an operator or the closing `)`",
                        '}' => "want an operator or the closing `}`",
                        _ => "want an operator or the closing quote",
                    }));
                }
                self.at += 1;
                Ok(e)
            }
            b'0'..=b'9' | b'.' => {
                let Some((v, len)) = leading_number(self.rest()) else {
                    return Err(self.stop("want a number such as 1.5u"));
                };
                self.at += len;
                Ok(Expr::Num(v))
            }
            c if c.is_ascii_alphabetic() || c == b'_' => {
                let len = self
                    .rest()
                    .bytes()
                    .take_while(|c| c.is_ascii_alphanumeric() || matches!(c, b'_' | b'.' | b'#' | b'$'))
                    .count();
                let name: Arc<str> = self.rest()[..len].to_ascii_lowercase().into();
                self.at += len;
                if !self.rest().starts_with('(') {
                    return Ok(Expr::Name(name));
                }
                self.at += 1;
                let mut args = Vec::new();
                self.skip_space();
                if self.rest().starts_with(')') {
                    self.at += 1;
                    return Ok(Expr::Call(name, args));
                }
                loop {
                    args.push(self.expression(1)?);
                    self.skip_space();
                    match self.rest().bytes().next() {
                        Some(b',') => self.at += 1,
                        Some(b')') => {
                            self.at += 1;
                            return Ok(Expr::Call(name, args));
                        }
                        _ => return Err(self.stop("want `,` or the closing `)` of the arguments")),
                    }
                }
            }
            _ => Err(self.stop("want a number, a name or an expression")),
        }
    }
}

/// Names and argument counts of the functions every deck may use; 9 stands for "two or more".
pub const FUNCTIONS: [(&str, usize); 33] = [
    ("abs", 1),
    ("acos", 1),
    ("agauss", 3),
    ("asin", 1),
    ("atan", 1),
    ("atan2", 2),
    ("aunif", 2),
    ("ceil", 1),
    ("cos", 1),
    ("cosh", 1),
    ("exp", 1),
    ("floor", 1),
    ("gauss", 3),
    ("if", 3),
    ("int", 1),
    ("ln", 1),
    ("log", 1),
    ("log10", 1),
    ("max", 9),
    ("min", 9),
    ("nint", 1),
    ("pow", 2),
    ("pwr", 2),
    ("round", 1),
    ("sgn", 1),
    ("sign", 2),
    ("sin", 1),
    ("sinh", 1),
    ("sqrt", 1),
    ("tan", 1),
    ("tanh", 1),
    ("ternary_fcn", 3),
    ("unif", 2),
];

fn builtin(name: &str, a: &[f64]) -> f64 {
    match name {
        "abs" => a[0].abs(),
        "acos" => a[0].acos(),
        "asin" => a[0].asin(),
        "atan" => a[0].atan(),
        "atan2" => a[0].atan2(a[1]),
        "ceil" => a[0].ceil(),
        "cos" => a[0].cos(),
        "cosh" => a[0].cosh(),
        "exp" => a[0].exp(),
        "floor" => a[0].floor(),
        "if" | "ternary_fcn" => {
            if a[0] == 0.0 {
                a[2]
            } else {
                a[1]
            }
        }
        "int" => a[0].trunc(),
        "ln" | "log" => a[0].ln(),
        "log10" => a[0].log10(),
        "max" => a.iter().copied().fold(f64::NEG_INFINITY, f64::max),
        "min" => a.iter().copied().fold(f64::INFINITY, f64::min),
        "nint" | "round" => a[0].round(),
        "pow" => a[0].powf(a[1]),
        "pwr" => a[0].abs().powf(a[1]).copysign(a[0]),
        "sgn" => {
            if a[0] == 0.0 {
                0.0
            } else {
                a[0].signum()
            }
        }
        "sign" => a[0].abs().copysign(a[1]),
        "sin" => a[0].sin(),
        "sinh" => a[0].sinh(),
        "sqrt" => a[0].sqrt(),
        "tan" => a[0].tan(),
        "tanh" => a[0].tanh(),
        // a random draw takes its nominal value; the reader notes that
        "agauss" | "gauss" | "unif" | "aunif" => a[0],
        _ => f64::NAN,
    }
}

impl Expr {
    /// The value in a scope.
    ///
    /// # Errors
    /// A name or function is not defined, a definition is circular, or the result is not finite.
    pub fn eval(&self, scope: &dyn Scope) -> Result<f64, EvalError> {
        let v = match self {
            Self::Num(v) => return Ok(*v),
            Self::Name(n) => {
                return scope.value(n).unwrap_or_else(|| Err(EvalError::Undefined { name: n.to_string() }));
            }
            Self::Unary(op, e) => {
                let v = e.eval(scope)?;
                if *op == Op::Neg { -v } else { f64::from(v == 0.0) }
            }
            Self::Binary(op, a, b) => {
                let (a, b) = (a.eval(scope)?, b.eval(scope)?);
                match op {
                    Op::Or => f64::from(a != 0.0 || b != 0.0),
                    Op::And => f64::from(a != 0.0 && b != 0.0),
                    Op::Eq => f64::from(a == b),
                    Op::Ne => f64::from(a != b),
                    Op::Lt => f64::from(a < b),
                    Op::Le => f64::from(a <= b),
                    Op::Gt => f64::from(a > b),
                    Op::Ge => f64::from(a >= b),
                    Op::Add => a + b,
                    Op::Sub | Op::Neg => a - b,
                    Op::Mul | Op::Not => a * b,
                    Op::Div => a / b,
                    Op::Mod => a % b,
                    Op::Pow => a.powf(b),
                }
            }
            Self::Choose(c) => {
                return if c[0].eval(scope)? == 0.0 { c[2].eval(scope) } else { c[1].eval(scope) };
            }
            Self::Call(name, args) => {
                if let Some(f) = scope.function(name) {
                    if f.args.len() != args.len() {
                        return Err(EvalError::Arguments {
                            name: name.to_string(),
                            wanted: f.args.len(),
                            found: args.len(),
                        });
                    }
                    let values = args.iter().map(|e| e.eval(scope)).collect::<Result<Vec<_>, _>>()?;
                    let inner = Arguments { names: &f.args, values: &values, outer: scope };
                    f.body.eval(&inner)?
                } else {
                    let Some(&(_, wanted)) = FUNCTIONS.iter().find(|(n, _)| *n == &**name) else {
                        return Err(EvalError::NoFunction { name: name.to_string() });
                    };
                    let values = args.iter().map(|e| e.eval(scope)).collect::<Result<Vec<_>, _>>()?;
                    let random = matches!(&**name, "agauss" | "gauss" | "unif" | "aunif");
                    let fits = match wanted {
                        9 => values.len() >= 2,
                        w if random => values.len() >= 2 && values.len() <= w + 1,
                        w => values.len() == w,
                    };
                    if !fits {
                        return Err(EvalError::Arguments {
                            name: name.to_string(),
                            wanted: wanted.min(2),
                            found: values.len(),
                        });
                    }
                    builtin(name, &values)
                }
            }
        };
        if v.is_finite() { Ok(v) } else { Err(EvalError::NotFinite { what: format!("{v}") }) }
    }
}

struct Arguments<'a> {
    names: &'a [Arc<str>],
    values: &'a [f64],
    outer: &'a dyn Scope,
}

impl Scope for Arguments<'_> {
    fn value(&self, name: &str) -> Option<Result<f64, EvalError>> {
        match self.names.iter().position(|n| &**n == name) {
            Some(i) => Some(Ok(self.values[i])),
            None => self.outer.value(name),
        }
    }
    fn names(&self) -> Vec<String> {
        self.outer.names()
    }
    // a deck function that calls itself would never end: inside one, only the built-in functions are seen
}

#[cfg(test)]
mod tests {
    use super::*;

    struct Fixed;
    impl Scope for Fixed {
        fn value(&self, name: &str) -> Option<Result<f64, EvalError>> {
            match name {
                "l" => Some(Ok(0.15)),
                "w" => Some(Ok(0.65)),
                _ => None,
            }
        }
        fn names(&self) -> Vec<String> {
            vec!["l".into(), "w".into()]
        }
    }

    #[test]
    fn arithmetic_follows_the_usual_rules() {
        let cases = [
            ("1+2*3", 7.0),
            ("(1+2)*3", 9.0),
            ("-2**2", -4.0),
            ("2**3**2", 512.0),
            ("2^-1", 0.5),
            ("{sqrt(l*w)}", (0.15f64 * 0.65).sqrt()),
            ("'max(1, 2, 3) - min(4,5)'", -1.0),
            ("1 > 2 ? 10 : 20", 20.0),
            ("if(L < 1, 3, 4)", 3.0),
            ("1u/1n", 1000.0),
            ("!0 && 1 || 0", 1.0),
            ("7 % 4", 3.0),
            ("agauss(5, 1, 3)", 5.0),
            ("pwr(-8, 1/3)", -2.0),
        ];
        for (text, want) in cases {
            let (e, used) = parse_prefix(text).expect(text);
            assert_eq!(used, text.len(), "{text}");
            let got = e.eval(&Fixed).expect(text);
            assert!((got - want).abs() < 1e-12, "{text} gave {got}");
        }
    }

    #[test]
    fn a_value_ends_where_the_next_name_begins() {
        let (e, used) = parse_prefix("-2.5e-9 wvth0 = 3").expect("parses");
        assert_eq!((e, used), (Expr::Num(-2.5e-9), 7));
    }

    #[test]
    fn wrong_expressions_say_what_was_wanted() {
        for (text, wanted) in [("1 +", "number"), ("{1", "}"), ("f(1", ")"), ("*", "number"), ("1 ? 2", ":")]
        {
            assert!(parse_prefix(text).expect_err(text).wanted.contains(wanted), "{text}");
        }
        let undefined = parse_prefix("q+1").expect("parses").0.eval(&Fixed);
        assert_eq!(undefined, Err(EvalError::Undefined { name: "q".into() }));
        let division = parse_prefix("1/0").expect("parses").0.eval(&Fixed);
        assert!(matches!(division, Err(EvalError::NotFinite { .. })));
        assert!(parse_prefix(&"(".repeat(5000)).is_err());
    }
}
