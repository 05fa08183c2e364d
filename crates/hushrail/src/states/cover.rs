//! Short sums of products for a truth table.

#![expect(
    clippy::cast_possible_truncation,
    reason = "nets, gates and states are numbered with 32 bits; readers refuse more"
)]

/// A product of variables: those in `care` have the values in `value`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Cube {
    /// Variables that count.
    pub care: u32,
    /// Their values.
    pub value: u32,
}

impl Cube {
    /// Whether an assignment lies in it.
    pub fn holds(&self, code: usize) -> bool {
        code as u32 & self.care == self.value
    }
}

/// An irredundant cover of a truth table, whose index has the value of variable k in bit k: Minato and Morreale's method
/// (Minato, *IEEE Trans. CAD* 12 (1993) 1502, from memory), by splitting at the last variable.
pub fn cover(on: &[bool]) -> Vec<Cube> {
    let mut out = Vec::new();
    let vars = on.len().trailing_zeros();
    split(on, on, vars, Cube { care: 0, value: 0 }, &mut out);
    out
}

/// Covers at least `low` and at most `high`; gives what is covered.
fn split(low: &[bool], high: &[bool], vars: u32, within: Cube, out: &mut Vec<Cube>) -> Vec<bool> {
    if low.iter().all(|x| !x) {
        return vec![false; low.len()];
    }
    if high.iter().all(|x| *x) {
        out.push(within);
        return vec![true; low.len()];
    }
    let half = low.len() / 2;
    let ((l0, l1), (h0, h1)) = (low.split_at(half), high.split_at(half));
    let bit = 1 << (vars - 1);
    let only = |l: &[bool], h: &[bool]| -> Vec<bool> { l.iter().zip(h).map(|(l, h)| *l && !*h).collect() };
    let with = |value| Cube { care: within.care | bit, value: within.value | value };
    let c0 = split(&only(l0, h1), h0, vars - 1, with(0), out);
    let c1 = split(&only(l1, h0), h1, vars - 1, with(bit), out);
    let rest: Vec<bool> = (0..half).map(|i| l0[i] && !c0[i] || l1[i] && !c1[i]).collect();
    let both: Vec<bool> = h0.iter().zip(h1).map(|(a, b)| *a && *b).collect();
    let cs = split(&rest, &both, vars - 1, within, out);
    (0..half).map(|i| c0[i] || cs[i]).chain((0..half).map(|i| c1[i] || cs[i])).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn known_functions_have_their_textbook_size() {
        let table = |n: usize, f: &dyn Fn(usize) -> bool| (0..1 << n).map(f).collect::<Vec<_>>();
        assert_eq!(cover(&table(2, &|c| c != 3)).len(), 2, "nand");
        assert_eq!(cover(&table(2, &|c| c == 3)).len(), 1, "and");
        assert_eq!(cover(&table(3, &|c| c.count_ones() >= 2)).len(), 3, "majority");
        assert_eq!(cover(&table(3, &|c| c.count_ones() % 2 == 1)).len(), 4, "parity");
        assert_eq!(cover(&[true]), [Cube { care: 0, value: 0 }], "a constant");
        assert!(cover(&table(3, &|_| false)).is_empty());
    }

    proptest! {
        #[test]
        fn covers_are_exact_and_without_waste(on in prop::collection::vec(any::<bool>(), 64)) {
            let cubes = cover(&on);
            for (code, want) in on.iter().enumerate() {
                prop_assert_eq!(cubes.iter().any(|c| c.holds(code)), *want);
            }
            for skip in 0..cubes.len() {
                let others = cubes.iter().enumerate().filter(|(k, _)| *k != skip).map(|(_, c)| c);
                let others: Vec<_> = others.collect();
                prop_assert!((0..64).any(|code| on[code] && !others.iter().any(|c| c.holds(code))));
            }
        }
    }
}
