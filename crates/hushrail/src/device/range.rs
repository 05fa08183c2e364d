//! Where a model stops being backed: what a card states, or how far the points of a table reach.

use serde::{Deserialize, Serialize};

use crate::read::deck::Note;

/// What stands behind a range.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Basis {
    /// Largest voltages stated by a card.
    Card,
    /// The points of a table.
    Points,
}

/// A bias that the basis of a model does not cover.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Outside {
    /// What stands behind the range.
    pub basis: Basis,
    /// Which voltage: `vgs`, `vds`, `vbs`, `vgd`, `vgb`, `vbd`; its sign is that of an n-channel device.
    pub quantity: String,
    /// The voltage, V.
    pub value_v: f64,
    /// Lower end of the range, V.
    pub low_v: f64,
    /// Upper end of the range, V.
    pub high_v: f64,
    /// Whether the user has not asked for numbers out there: the answer must not be given.
    pub refused: bool,
}

impl Outside {
    /// The bias against a range; `None` inside.
    pub fn of(basis: Basis, quantity: &str, value_v: f64, [low_v, high_v]: [f64; 2]) -> Option<Self> {
        let slack = 1e-9;
        let inside = value_v >= low_v - slack && value_v <= high_v + slack;
        (!inside).then(|| Self { basis, quantity: quantity.into(), value_v, low_v, high_v, refused: false })
    }
    /// How far outside, V.
    pub fn excess_v(&self) -> f64 {
        (self.low_v - self.value_v).max(self.value_v - self.high_v)
    }
    /// The worse of two: refused before allowed, then the furthest out; the first on a tie.
    pub fn worse(a: Option<Self>, b: Option<Self>) -> Option<Self> {
        match (a, b) {
            (Some(a), Some(b)) => {
                let later = (b.refused, b.excess_v()) > (a.refused, a.excess_v());
                Some(if later { b } else { a })
            }
            (a, b) => a.or(b),
        }
    }
    /// The remark for a result that rests on it.
    pub fn note(&self) -> Note {
        let (code, what) = match self.basis {
            Basis::Card => ("past-card-limits", "the voltages its card states as largest"),
            Basis::Points => ("outside-points", "the points of its table"),
        };
        Note::new(
            code,
            format!("a transistor leaves {what} ({self}): currents there are extrapolated, not known"),
        )
    }
}

impl std::fmt::Display for Outside {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let Self { quantity, value_v, low_v, high_v, .. } = self;
        write!(f, "{quantity} is {value_v:.4} V, the range is {low_v:.4} to {high_v:.4} V")
    }
}
