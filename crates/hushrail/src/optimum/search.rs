//! Valleys of a function of one variable: a scan that finds the deepest, a bracketing search into it, and the point where the
//! slope is nothing.

/// Which end of the range the lowest point is at.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum End {
    /// The lower.
    Low,
    /// The higher.
    High,
}

/// The lowest point found.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Valley {
    /// Where.
    pub x: f64,
    /// Value there.
    pub f: f64,
    /// The end of the range it is at, if it is not inside.
    pub end: Option<End>,
}

/// Where the slope is nothing.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Stationary {
    /// Where.
    pub x: f64,
    /// Slope left there.
    pub slope: f64,
    /// Second derivative there.
    pub curvature: f64,
}

/// Golden section: (3 − √5)/2.
const GOLDEN: f64 = 0.381_966_011_250_105_1;

/// Scans `points` equal steps and searches the neighbourhood of the lowest to `tol`.
///
/// Method of the search: golden section with parabolas where they are safe, Brent, *Algorithms for Minimization without
/// Derivatives* (1973), chapter 5.
///
/// # Errors
/// Whatever `f` returns.
pub fn valley<E>(
    lo: f64,
    hi: f64,
    points: usize,
    tol: f64,
    mut f: impl FnMut(f64) -> Result<f64, E>,
) -> Result<Valley, E> {
    let n = points.max(3);
    let at = |k: usize| if k + 1 == n { hi } else { lo + (hi - lo) * k as f64 / (n - 1) as f64 };
    let mut best = (0, f64::INFINITY);
    for k in 0..n {
        let y = f(at(k))?;
        if y < best.1 {
            best = (k, y);
        }
    }
    let k = best.0;
    let (a, b) = (at(k.saturating_sub(1)), at((k + 1).min(n - 1)));
    let (x, y) = brent(a, b, at(k), best.1, tol, &mut f)?;
    let end = if k == 0 && x - lo <= 4.0 * tol {
        Some(End::Low)
    } else if k + 1 == n && hi - x <= 4.0 * tol {
        Some(End::High)
    } else {
        None
    };
    Ok(match end {
        // the scan stood on the very end
        Some(_) => Valley { x: at(k), f: best.1.min(y), end },
        None => Valley { x, f: y, end },
    })
}

fn brent<E>(
    lo: f64,
    hi: f64,
    start: f64,
    at_start: f64,
    tol: f64,
    f: &mut impl FnMut(f64) -> Result<f64, E>,
) -> Result<(f64, f64), E> {
    let (mut a, mut b) = (lo, hi);
    let (mut x, mut fx) = (start, at_start);
    let (mut w, mut fw, mut v, mut fv) = (x, fx, x, fx);
    let (mut step, mut before) = (0.0f64, 0.0f64);
    for _ in 0..100 {
        let middle = 0.5 * (a + b);
        if (x - middle).abs() <= 2.0 * tol - 0.5 * (b - a) {
            break;
        }
        let mut golden = true;
        if before.abs() > tol {
            let r = (x - w) * (fx - fv);
            let mut q = (x - v) * (fx - fw);
            let mut p = (x - v) * q - (x - w) * r;
            q = 2.0 * (q - r);
            if q > 0.0 {
                p = -p;
            }
            q = q.abs();
            if p.abs() < (0.5 * q * before).abs() && p > q * (a - x) && p < q * (b - x) {
                before = step;
                step = p / q;
                let u = x + step;
                if u - a < 2.0 * tol || b - u < 2.0 * tol {
                    step = tol.copysign(middle - x);
                }
                golden = false;
            }
        }
        if golden {
            before = if x < middle { b - x } else { a - x };
            step = GOLDEN * before;
        }
        let u = x + if step.abs() >= tol { step } else { tol.copysign(step) };
        let fu = f(u)?;
        if fu <= fx {
            if u < x {
                b = x;
            } else {
                a = x;
            }
            (v, fv, w, fw, x, fx) = (w, fw, x, fx, u, fu);
        } else {
            if u < x {
                a = u;
            } else {
                b = u;
            }
            if fu <= fw || w == x {
                (v, fv, w, fw) = (w, fw, u, fu);
            } else if fu <= fv || v == x || v == w {
                (v, fv) = (u, fu);
            }
        }
    }
    Ok((x, fx))
}

/// Slope and second derivative from five points `h` apart: errors fall like h⁴.
///
/// Source: Abramowitz and Stegun, *Handbook of Mathematical Functions*, table 25.2 (from memory).
///
/// # Errors
/// Whatever `f` returns.
pub fn slopes<E>(x: f64, h: f64, f: &mut impl FnMut(f64) -> Result<f64, E>) -> Result<(f64, f64), E> {
    let [a, b, c, d, e] = [f(x - 2.0 * h)?, f(x - h)?, f(x)?, f(x + h)?, f(x + 2.0 * h)?];
    Ok((((a - e) + 8.0 * (d - b)) / (12.0 * h), (16.0 * (b + d) - a - e - 30.0 * c) / (12.0 * h * h)))
}

/// Relative to the second derivative, how far from the stationary point the search may end.
const NEAR: f64 = 1e-7;
/// Slope that a relative accuracy of 1e-9 in each value cannot tell from none, for steps of 2e-3.
const NOISE: f64 = 1e-6;

/// From `x`, which is near the bottom of a valley in `[lo, hi]`, to the point where the slope is nothing: Newton first, then
/// secant steps on the slope, none longer than `reach`.
///
/// `None` when the function does not bend upwards there or the steps do not close.
///
/// # Errors
/// Whatever `f` returns.
pub fn stationary<E>(
    x: f64,
    (lo, hi): (f64, f64),
    h: f64,
    reach: f64,
    mut f: impl FnMut(f64) -> Result<f64, E>,
) -> Result<Option<Stationary>, E> {
    let inside = |x: f64| x.clamp(lo + 2.0 * h, hi - 2.0 * h);
    if hi - lo <= 8.0 * h {
        return Ok(None);
    }
    let mut x = inside(x);
    let (mut slope, mut curvature) = slopes(x, h, &mut f)?;
    for _ in 0..12 {
        if !(curvature > 0.0) {
            return Ok(None);
        }
        if slope.abs() <= (NEAR * curvature).max(NOISE) {
            return Ok(Some(Stationary { x, slope, curvature }));
        }
        let next = inside(x + (-slope / curvature).clamp(-reach, reach));
        if next == x {
            return Ok(None);
        }
        let (s, _) = slopes(next, h, &mut f)?;
        curvature = (s - slope) / (next - x);
        (x, slope) = (next, s);
    }
    Ok(None)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_the_valley_of_two_exponentials() {
        // A17 of the reference sheet: Is·exp(−a·V) + Ib·exp(V/Vb), with its check value B7.1 (derived there)
        let (a, vb) = (0.2 / (1.4 * 25.851_999_786e-3), 0.25);
        let f = |v: f64| (1e-9f64 * (-a * v).exp() + 1e-12 * (v / vb).exp()).ln();
        let found = valley::<()>(0.0, 2.0, 17, 1e-6, |v| Ok(f(v))).expect("no error");
        assert_eq!(found.end, None);
        let s =
            stationary::<()>(found.x, (0.0, 2.0), 2e-3, 0.1, |v| Ok(f(v))).expect("no error").expect("bends");
        assert!((s.x - 0.759_075).abs() < 1e-6, "{}", s.x);
        assert!((f(s.x).exp() / 3.590_452e-11 - 1.0).abs() < 1e-6);
        assert!((f(0.0).exp() / f(s.x).exp() / 27.8795 - 1.0).abs() < 1e-5);
        assert!(s.slope.abs() < 2e-6 && s.curvature > 0.0);
    }

    #[test]
    fn the_deeper_of_two_valleys_and_both_ends() {
        let two = |x: f64| (10.0 * x).cos() + 0.3 * x;
        let v = valley::<()>(0.0, 1.2, 33, 1e-7, |x| Ok(two(x))).expect("no error");
        assert!((v.x - 0.311_16).abs() < 1e-4, "{v:?}");
        let down = valley::<()>(0.0, 1.0, 9, 1e-7, |x| Ok(-x)).expect("no error");
        assert_eq!((down.x, down.end), (1.0, Some(End::High)));
        let up = valley::<()>(0.0, 1.0, 9, 1e-7, Ok).expect("no error");
        assert_eq!((up.x, up.end), (0.0, Some(End::Low)));
        // inside, but within the first step of the scan
        let near = valley::<()>(0.0, 1.0, 9, 1e-7, |x| Ok((x - 0.01f64).powi(2))).expect("no error");
        assert!(near.end.is_none() && (near.x - 0.01).abs() < 1e-6, "{near:?}");
    }
}
