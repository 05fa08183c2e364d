//! Integrals along a trace: Gauss and Legendre's rule of five points in every step, exact to degree nine.

/// Points in (0, 1) and weights; Abramowitz and Stegun, table 25.4 (from memory, checked by the tests on powers).
const POINTS: [(f64, f64); 5] = [
    (0.046_910_077_030_668_0, 0.118_463_442_528_094_54),
    (0.230_765_344_947_158_45, 0.239_314_335_249_683_23),
    (0.5, 0.284_444_444_444_444_44),
    (0.769_234_655_052_841_5, 0.239_314_335_249_683_23),
    (0.953_089_922_969_332, 0.118_463_442_528_094_54),
];

/// Points of the rule.
pub(super) const ORDER: usize = POINTS.len();

/// Where the rule looks between `a` and `b`.
pub(super) fn places(a: f64, b: f64) -> [f64; ORDER] {
    POINTS.map(|(x, _)| a + x * (b - a))
}

/// Weights of the points, for a width of one.
pub(super) fn weights() -> [f64; ORDER] {
    POINTS.map(|(_, w)| w)
}

/// Integral of several functions at once from `a` to `b`.
pub(super) fn gauss<const K: usize>(a: f64, b: f64, mut f: impl FnMut(f64) -> [f64; K]) -> [f64; K] {
    let mut sum = [0.0; K];
    for (x, w) in POINTS {
        for (s, y) in sum.iter_mut().zip(f(a + x * (b - a))) {
            *s += w * y;
        }
    }
    sum.map(|s| s * (b - a))
}

#[cfg(test)]
mod tests {
    use super::gauss;

    #[test]
    fn powers_to_nine_are_exact() {
        for n in 0..=9 {
            let [got] = gauss(0.0, 2.0, |x| [x.powi(n)]);
            let want = 2f64.powi(n + 1) / f64::from(n + 1);
            assert!((got / want - 1.0).abs() < 1e-13, "{n}: {got} {want}");
        }
    }
}
