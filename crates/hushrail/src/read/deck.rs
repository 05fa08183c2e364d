//! What SPICE text holds once read: parameters, models, subcircuits, and the scopes their expressions live in.

use std::cell::RefCell;
use std::sync::Arc;

use indexmap::IndexMap;
use serde::{Deserialize, Serialize};

use super::expression::{EvalError, Expr, Scope, UserFunction};
use super::lines::Loc;
use super::source::{ReadError, nearest};

/// Something worth telling the user that is not an error.
#[derive(Debug, Clone, PartialEq, Eq, Hash, Serialize, Deserialize)]
pub struct Note {
    /// A short stable code, such as `no-dc-effect`.
    pub code: String,
    /// The sentence, with file, line and column where there is one.
    pub text: String,
}

impl Note {
    /// A note from its parts.
    pub fn new(code: &str, text: impl Into<String>) -> Self {
        Self { code: code.to_owned(), text: text.into() }
    }

    /// Adds the note to a list unless it stands there already.
    pub fn add_once(self, notes: &mut Vec<Self>) {
        if !notes.contains(&self) {
            notes.push(self);
        }
    }
}

/// An expression and where it is written.
#[derive(Debug, Clone)]
pub struct Definition {
    /// What to compute.
    pub expr: Expr,
    /// Where it stands.
    pub loc: Loc,
}

/// One `.model`, not evaluated.
#[derive(Debug, Clone)]
pub struct ModelText {
    /// Name in lower case, with its bin suffix.
    pub name: Arc<str>,
    /// Type word in lower case: `nmos`, `pmos`, `d`…
    pub kind: Arc<str>,
    /// Parameters in the order written; names in lower case.
    pub values: Vec<(Arc<str>, Definition)>,
    /// Where it stands.
    pub loc: Loc,
}

impl ModelText {
    /// The name without a bin suffix: `nch.3` belongs to family `nch`.
    pub fn family(&self) -> &str {
        match self.name.rsplit_once('.') {
            Some((base, bin)) if !bin.is_empty() && bin.bytes().all(|b| b.is_ascii_digit()) => base,
            _ => &self.name,
        }
    }

    /// The definition of one parameter.
    pub fn get(&self, name: &str) -> Option<&Definition> {
        self.values.iter().rev().find(|(n, _)| &**n == name).map(|(_, d)| d)
    }
}

/// Direction of a pin as a netlist declares it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum PinDirection {
    /// Driven from outside.
    Input,
    /// Driven by the cell.
    Output,
    /// Both.
    Inout,
}

/// One element line of a subcircuit.
#[derive(Debug, Clone)]
pub struct Element {
    /// Name as written.
    pub name: Arc<str>,
    /// First letter in upper case: M, X, D, R, C.
    pub kind: char,
    /// Nodes as written.
    pub nodes: Vec<Arc<str>>,
    /// Model or subcircuit in lower case; empty when the line gives none.
    pub model: Arc<str>,
    /// A value given by position.
    pub value: Option<Definition>,
    /// `name=value` pairs; names in lower case.
    pub params: Vec<(Arc<str>, Definition)>,
    /// Where it stands.
    pub loc: Loc,
}

/// One `.subckt`.
#[derive(Debug, Clone)]
pub struct Subckt {
    /// Name as written.
    pub name: Arc<str>,
    /// Ports as written.
    pub ports: Vec<Arc<str>>,
    /// Default parameters, from the `.subckt` line and from `.param` lines inside.
    pub params: IndexMap<Arc<str>, Definition>,
    /// Models defined inside.
    pub models: Vec<ModelText>,
    /// Elements.
    pub elements: Vec<Element>,
    /// Declared pin directions, where the netlist has them.
    pub directions: IndexMap<Arc<str>, PinDirection>,
    /// Where it stands.
    pub loc: Loc,
}

/// Everything read from one set of SPICE files.
#[derive(Debug, Clone, Default)]
pub struct Deck {
    /// Names of the files, as [`Loc`] counts them.
    pub files: Vec<Arc<str>>,
    /// `.option scale`, metres per unit of length, when set.
    pub scale_m: Option<f64>,
    /// Global parameters; the last definition of a name counts.
    pub params: IndexMap<Arc<str>, Definition>,
    /// Functions defined by the deck.
    pub functions: IndexMap<Arc<str>, Arc<UserFunction>>,
    /// Models outside subcircuits.
    pub models: Vec<ModelText>,
    /// Subcircuits by name in lower case.
    pub subckts: IndexMap<Arc<str>, Subckt>,
    /// Remarks of the reader.
    pub notes: Vec<Note>,
}

impl Deck {
    /// Metres per unit of length, one when the deck does not say.
    pub fn scale(&self) -> f64 {
        self.scale_m.unwrap_or(1.0)
    }

    /// Evaluates a definition, turning a failure into an error with its place.
    ///
    /// # Errors
    /// An undefined name or function, a circular definition, or a value that is not finite.
    pub fn eval(&self, def: &Definition, scope: &DeckScope<'_>) -> Result<f64, ReadError> {
        def.expr.eval(scope).map_err(|e| self.explain(e, def.loc, scope))
    }

    fn explain(&self, e: EvalError, loc: Loc, scope: &DeckScope<'_>) -> ReadError {
        let at = loc.place(&self.files);
        match e {
            EvalError::Undefined { name } => {
                let names = scope.names();
                let near = nearest(&name, names.iter().map(String::as_str));
                ReadError::Unknown { at, kind: "parameter", name, nearest: near }
            }
            EvalError::Circular { name } => ReadError::Syntax {
                at,
                found: format!("parameter `{name}` is defined through itself"),
                wanted: "give one of the parameters in the circle a value".into(),
            },
            EvalError::NoFunction { name } => {
                let known = super::expression::FUNCTIONS.iter().map(|f| f.0);
                let near = nearest(&name, known.chain(self.functions.keys().map(|k| &**k)));
                ReadError::Unknown { at, kind: "function", name, nearest: near }
            }
            EvalError::Arguments { name, wanted, found } => ReadError::Syntax {
                at,
                found: format!("function `{name}` has {found} arguments"),
                wanted: format!("want {wanted}"),
            },
            EvalError::NotFinite { what } => ReadError::Range {
                at,
                name: "expression".into(),
                value: what,
                wanted: "want a finite number; look for a division by zero or a root of a negative value"
                    .into(),
            },
        }
    }
}

/// The names an expression can see: values of the instance, parameters of its subcircuit, then of the deck.
pub struct DeckScope<'a> {
    /// The deck.
    pub deck: &'a Deck,
    /// The subcircuit the expression stands in.
    pub subckt: Option<&'a Subckt>,
    /// Values of this instance; they win.
    pub instance: &'a [(Arc<str>, f64)],
    /// Temperature that `temper` stands for, degrees Celsius.
    pub temp_c: f64,
    open: RefCell<Vec<String>>,
}

impl<'a> DeckScope<'a> {
    /// A scope; see the fields.
    pub fn new(
        deck: &'a Deck,
        subckt: Option<&'a Subckt>,
        instance: &'a [(Arc<str>, f64)],
        temp_c: f64,
    ) -> Self {
        Self { deck, subckt, instance, temp_c, open: RefCell::new(Vec::new()) }
    }
}

impl Scope for DeckScope<'_> {
    fn value(&self, name: &str) -> Option<Result<f64, EvalError>> {
        if let Some((_, v)) = self.instance.iter().rev().find(|(n, _)| &**n == name) {
            return Some(Ok(*v));
        }
        let def = self.subckt.and_then(|s| s.params.get(name)).or_else(|| self.deck.params.get(name));
        let Some(def) = def else {
            return (name == "temper").then_some(Ok(self.temp_c));
        };
        if let Expr::Num(v) = def.expr {
            return Some(Ok(v));
        }
        if self.open.borrow().iter().any(|n| n == name) {
            return Some(Err(EvalError::Circular { name: name.to_owned() }));
        }
        self.open.borrow_mut().push(name.to_owned());
        let v = def.expr.eval(self);
        self.open.borrow_mut().pop();
        Some(v)
    }

    fn names(&self) -> Vec<String> {
        let inner = self.subckt.into_iter().flat_map(|s| s.params.keys());
        let own = self.instance.iter().map(|(n, _)| n);
        own.chain(inner).chain(self.deck.params.keys()).map(ToString::to_string).collect()
    }

    fn function(&self, name: &str) -> Option<Arc<UserFunction>> {
        self.deck.functions.get(name).cloned()
    }
}
