//! Roots of monotone balances: bracketed in one variable, secant updates in two.

/// A root of an increasing function in `[lo, hi]`, to `tol` in the variable or `f_tol` in the value; at most `limit`
/// evaluations. The ends need not be evaluated beforehand.
///
/// Method: Illinois variant of false position with bisection when it stalls.
///
/// # Errors
/// Whatever `f` returns.
pub fn increasing<E>(
    mut lo: f64,
    mut hi: f64,
    tol: f64,
    f_tol: f64,
    limit: usize,
    mut f: impl FnMut(f64) -> Result<f64, E>,
) -> Result<f64, E> {
    let mut f_lo = f(lo)?;
    if f_lo >= 0.0 {
        return Ok(lo);
    }
    let mut f_hi = f(hi)?;
    if f_hi <= 0.0 {
        return Ok(hi);
    }
    let mut last = 0i8;
    let mut width = hi - lo;
    for k in 0..limit {
        let mut x = hi - f_hi * (hi - lo) / (f_hi - f_lo);
        let inside = x > lo && x < hi;
        if !inside || (k % 3 == 2 && hi - lo > 0.5 * width) {
            x = 0.5 * (lo + hi);
        }
        if k % 3 == 2 {
            width = hi - lo;
        }
        let y = f(x)?;
        if y.abs() <= f_tol || hi - lo <= tol {
            return Ok(x);
        }
        if y > 0.0 {
            (hi, f_hi) = (x, y);
            if last == 1 {
                f_lo *= 0.5;
            }
            last = 1;
        } else {
            (lo, f_lo) = (x, y);
            if last == -1 {
                f_hi *= 0.5;
            }
            last = -1;
        }
    }
    Ok(if f_hi.abs() < f_lo.abs() { hi } else { lo })
}

#[cfg(test)]
mod tests {
    use super::increasing;

    #[test]
    fn finds_roots_of_steep_and_flat_functions() {
        for (f, want) in [
            ((|x: f64| x.exp() - 2.0) as fn(f64) -> f64, 2f64.ln()),
            (|x: f64| (20.0 * (x - 0.7)).sinh(), 0.7),
            (|x: f64| (x - 0.123).cbrt(), 0.123),
        ] {
            let mut n = 0;
            let x = increasing::<()>(0.0, 1.0, 1e-13, 1e-14, 200, |x| {
                n += 1;
                Ok(f(x))
            });
            assert!((x.expect("no error") - want).abs() < 1e-10, "{n} steps");
            assert!(n < 60, "{n}");
        }
    }
}
