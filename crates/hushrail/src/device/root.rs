//! Roots of monotone balances: bracketed in one variable, secant updates in two.

/// A root of an increasing function in `[lo, hi]`, to `tol` in the variable or `f_tol` in the value; at most `limit`
/// evaluations. When the function has one sign over the whole range, the nearer end is returned.
///
/// Method: Chandrupatla, *Adv. Eng. Software* 28 (1997) 145: inverse quadratic interpolation where it is safe,
/// bisection elsewhere.
///
/// # Errors
/// Whatever `f` returns.
pub fn increasing<E>(
    lo: f64,
    hi: f64,
    tol: f64,
    f_tol: f64,
    limit: usize,
    mut f: impl FnMut(f64) -> Result<f64, E>,
) -> Result<f64, E> {
    let (mut a, mut fa) = (hi, f(hi)?);
    if fa <= 0.0 {
        return Ok(hi);
    }
    let (mut b, mut fb) = (lo, f(lo)?);
    if fb >= 0.0 {
        return Ok(lo);
    }
    let (mut c, mut fc);
    // the secant first: balances are nearly straight
    let mut t = (fa / (fa - fb)).clamp(0.02, 0.98);
    for _ in 0..limit {
        let x = a + t * (b - a);
        let y = f(x)?;
        if (y > 0.0) == (fa > 0.0) {
            (c, fc) = (a, fa);
        } else {
            (c, fc) = (b, fb);
            (b, fb) = (a, fa);
        }
        (a, fa) = (x, y);
        let (best, f_best) = if fa.abs() < fb.abs() { (a, fa) } else { (b, fb) };
        let width = (b - a).abs();
        if f_best.abs() <= f_tol || width <= 2.0 * tol {
            return Ok(best);
        }
        let (xi, phi) = ((a - b) / (c - b), (fa - fb) / (fc - fb));
        let smooth = phi * phi < xi && (1.0 - phi) * (1.0 - phi) < 1.0 - xi;
        t = if smooth {
            fa / (fb - fa) * fc / (fb - fc) + (c - a) / (b - a) * fa / (fc - fa) * fb / (fc - fb)
        } else {
            0.5
        };
        let edge = (tol / width).min(0.5);
        t = t.clamp(edge, 1.0 - edge);
    }
    Ok(if fa.abs() < fb.abs() { a } else { b })
}

/// The largest value of a function with one summit between two points, by golden section (Kiefer 1953).
pub fn summit(mut a: f64, mut b: f64, f: impl Fn(f64) -> f64) -> (f64, f64) {
    let g = 0.5 * (5f64.sqrt() - 1.0);
    let (mut x, mut y) = (b - g * (b - a), a + g * (b - a));
    let (mut fx, mut fy) = (f(x), f(y));
    for _ in 0..40 {
        if fx > fy {
            (b, y, fy) = (y, x, fx);
            x = b - g * (b - a);
            fx = f(x);
        } else {
            (a, x, fx) = (x, y, fy);
            y = a + g * (b - a);
            fy = f(y);
        }
    }
    if fx > fy { (x, fx) } else { (y, fy) }
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
