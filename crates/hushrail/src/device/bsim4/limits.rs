//! Largest voltages that a card states for its own use.

use super::table::Id;
use super::values::Card;
use crate::device::range::{Basis, Outside};
use crate::device::{Bias, Polarity};

/// One voltage: name, limit and reverse limit of the card, and its value from (vgs, vds, vbs) of an n-channel device.
type Limit = (&'static str, Id, Id, fn(f64, f64, f64) -> f64);

const LIMITS: [Limit; 6] = [
    ("vgs", Id::VgsMax, Id::VgsrMax, |g, _, _| g),
    ("vgd", Id::VgdMax, Id::VgdrMax, |g, d, _| g - d),
    ("vgb", Id::VgbMax, Id::VgbrMax, |g, _, b| g - b),
    ("vds", Id::VdsMax, Id::VdsMax, |_, d, _| d),
    ("vbs", Id::VbsMax, Id::VbsrMax, |_, _, b| b),
    ("vbd", Id::VbdMax, Id::VbdrMax, |_, d, b| b - d),
];

/// The limits a card gives.
#[derive(Debug, Clone, Default)]
pub struct Limits {
    stated: Vec<(usize, [f64; 2])>,
}

impl Limits {
    /// Reads them from a card; a reverse limit that is not given equals the forward one. The card counts body voltages in
    /// reverse as positive `VBSR_MAX` and forward ones as `VBS_MAX`.
    ///
    /// Source: BSIM4.8.0 manual, Appendix A (from memory of it).
    pub fn of(card: &Card) -> Self {
        let all = LIMITS.iter().enumerate();
        let given = all.filter(|(_, (_, top, reverse, _))| card.has(*top) || card.has(*reverse));
        let range = |(k, (_, top, reverse, _)): (usize, &Limit)| {
            let (high, low) = (card.base(*top).abs(), card.base(*reverse).abs());
            (k, [-low, if card.has(*top) { high } else { low }])
        };
        Self { stated: given.map(range).collect() }
    }

    /// The limit that a bias exceeds most.
    pub fn outside(&self, polarity: Polarity, bias: Bias<f64>) -> Option<Outside> {
        let s = polarity.sign();
        let each = self.stated.iter().filter_map(|(k, range)| {
            let (name, .., value) = LIMITS[*k];
            Outside::of(Basis::Card, name, value(s * bias.vgs, s * bias.vds, s * bias.vbs), *range)
        });
        each.map(Some).fold(None, Outside::worse)
    }
}
