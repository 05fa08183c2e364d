//! The normal distribution: tail probability and its quantile.

/// Probability that a standard normal number is above `z`.
///
/// `½·erfc(z/√2)`: the power series of erf below 2 and the continued fraction of erfc above (Abramowitz and Stegun, *Handbook of
/// Mathematical Functions* (1964), 7.1.6 and 7.1.14).
pub fn upper_tail(z: f64) -> f64 {
    if z < 0.0 {
        return 1.0 - upper_tail(-z);
    }
    let x = z / std::f64::consts::SQRT_2;
    if x < 2.0 {
        // erf(x) = 2/√π·exp(−x²)·Σ 2ⁿ·x²ⁿ⁺¹/(1·3·…·(2n+1))
        let (mut term, mut sum, mut n) = (x, x, 0.0);
        while term > 1e-17 * sum {
            n += 1.0;
            term *= 2.0 * x * x / (2.0 * n + 1.0);
            sum += term;
        }
        return 0.5 - sum * (-x * x).exp() / std::f64::consts::PI.sqrt();
    }
    // erfc(x) = exp(−x²)/√π · 1/(x + (1/2)/(x + 1/(x + (3/2)/(x + …)))), from the far end
    let fraction = (1..=120).rev().fold(x, |f, k| x + 0.5 * f64::from(k) / f);
    0.5 * (-x * x).exp() / (fraction * std::f64::consts::PI.sqrt())
}

/// The `z` above which a standard normal number lies with probability `tail`, for `0 < tail < 1`; by bisection.
pub fn upper_quantile(tail: f64) -> f64 {
    let (mut lo, mut hi) = (-40.0, 40.0);
    for _ in 0..90 {
        let mid = 0.5 * (lo + hi);
        if upper_tail(mid) > tail { lo = mid } else { hi = mid }
    }
    0.5 * (lo + hi)
}

#[cfg(test)]
mod tests {
    use super::{upper_quantile, upper_tail};

    #[test]
    fn tails_and_quantiles_are_those_of_tables() {
        // z for one in a million: 4.753 (reference sheet A27); 1.959964 and 0.158655 are textbook values (from memory)
        assert!((upper_quantile(1e-6) - 4.753424).abs() < 1e-6, "{}", upper_quantile(1e-6));
        assert!((upper_quantile(0.025) - 1.959964).abs() < 1e-6);
        assert!((upper_tail(1.0) - 0.1586552539).abs() < 1e-10);
        // both branches meet
        let z = 2.0 * std::f64::consts::SQRT_2;
        assert!((upper_tail(z - 1e-12) / upper_tail(z + 1e-12) - 1.0).abs() < 1e-10);
        assert_eq!(upper_tail(0.0), 0.5);
    }
}
