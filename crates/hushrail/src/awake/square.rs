//! The butterfly of two falling curves and the largest squares in its lobes.
//!
//! Method of maximum squares: Seevinck, List and Lohstroh, *JSSC* 22(5) (1987) 748 (from memory). On a line of slope +1 at
//! offset `c = y − x` each curve has one point; the horizontal distance of the two is the side of the square between them, and
//! the noise margin is the smaller of the largest sides of the two lobes. No axes are rotated: `y − x` falls along the first
//! curve and rises along the second, so both points are roots of monotone functions.

use serde::{Deserialize, Serialize};

use super::curve::{Curve, CurvePoint};

/// A largest square.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Square {
    /// Its side, V.
    pub side_v: f64,
    /// Lower left corner, V.
    pub x_v: f64,
    /// Lower left corner, V.
    pub y_v: f64,
}

/// Two curves over each other: `y = f(x)` and `x = g(y)`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Butterfly {
    /// `f`: points (x, y).
    pub first: Curve,
    /// `g`: points (y, x).
    pub second: Curve,
    /// Squares of the lobe above the diagonal (x low, y high) and below it; `None` when there is only one crossing, which
    /// means that nothing is held.
    pub squares: Option<[Square; 2]>,
    /// Offsets `y − x` of the two squares, V.
    pub(super) offsets: [f64; 2],
}

impl Butterfly {
    /// The smaller side, V; zero when nothing is held.
    pub fn margin_v(&self) -> f64 {
        self.squares.as_ref().map_or(0.0, |s| s[0].side_v.min(s[1].side_v))
    }
}

/// Horizontal distance of the first curve from the second at an offset.
fn distance(first: &Curve, second: &Curve, c: f64) -> f64 {
    // x = g(y) with y − x = c: the offset of the second curve is −c
    first.input_at_offset(c) - (second.input_at_offset(-c) - c)
}

struct Lobes {
    /// Offsets of the largest distance of either sign between the outer crossings.
    peaks: [f64; 2],
    crossings: Vec<f64>,
}

/// Offsets at which curves have points and in between, highest first.
fn offsets(first: &Curve, second: &Curve) -> Vec<f64> {
    let (a, b) = (first.offsets(), second.offsets());
    let (low, high) = (a.0.max(-b.1), a.1.min(-b.0));
    let mut c: Vec<f64> = first.points.iter().map(|p| p.out_v - p.in_v).collect();
    c.extend(second.points.iter().map(|p| p.in_v - p.out_v));
    c.extend([low, high]);
    c.retain(|c| *c >= low && *c <= high);
    c.sort_by(|x, y| y.total_cmp(x));
    c.dedup();
    let mut fine = Vec::with_capacity(4 * c.len());
    for w in c.windows(2) {
        fine.extend((0..4).map(|k| w[0] + (w[1] - w[0]) * f64::from(k) / 4.0));
    }
    fine.extend(c.last());
    fine
}

fn lobes(first: &Curve, second: &Curve) -> Lobes {
    let c = offsets(first, second);
    let d: Vec<f64> = c.iter().map(|&c| distance(first, second, c)).collect();
    let mut crossings = Vec::new();
    // both curves fall, so the distance is not positive at the highest offset they share and not negative at the lowest; where
    // they end in a rail to the last digit, rounding must not hide that
    let positive = |k: usize| k + 1 == c.len() || k > 0 && d[k] > 0.0;
    for k in 1..c.len() {
        if positive(k) != positive(k - 1) {
            crossings.push(k);
        }
    }
    let inside = match (crossings.first(), crossings.last()) {
        (Some(&a), Some(&b)) if crossings.len() >= 3 => a..b,
        _ => 0..0,
    };
    let mut peaks = [f64::NAN; 2];
    for (p, sign) in peaks.iter_mut().zip([1.0, -1.0]) {
        if let Some(k) = inside.clone().max_by(|&i, &j| (sign * d[i]).total_cmp(&(sign * d[j]))) {
            // the top of the distance between the neighbours, by golden section
            let (mut lo, mut hi) = (c[(k + 1).min(c.len() - 1)], c[k.saturating_sub(1)]);
            let golden = 0.5 * (5f64.sqrt() - 1.0);
            for _ in 0..60 {
                let (u, v) = (hi - golden * (hi - lo), lo + golden * (hi - lo));
                if sign * distance(first, second, u) > sign * distance(first, second, v) {
                    hi = v;
                } else {
                    lo = u;
                }
            }
            *p = 0.5 * (lo + hi);
        }
    }
    Lobes { peaks, crossings: crossings.iter().map(|&k| 0.5 * (c[k] + c[k - 1])).collect() }
}

/// Rounds in which points are added around the squares and crossings.
const ROUNDS: i32 = 4;

/// A lobe smaller than this share of the range is rounding of the solved voltages and not a lobe.
const RESOLVED: f64 = 1e-8;

/// The butterfly of two sampled curves as they are, without further points.
pub fn butterfly_of(first: Curve, second: Curve) -> Butterfly {
    let l = lobes(&first, &second);
    let range = first.range_v();
    let squares = (l.crossings.len() >= 3)
        .then(|| {
            l.peaks.map(|c| {
                let (x1, x2) = (first.input_at_offset(c), second.input_at_offset(-c) - c);
                Square { side_v: (x1 - x2).abs(), x_v: x1.min(x2), y_v: x1.min(x2) + c }
            })
        })
        .filter(|s| s.iter().all(|s| s.side_v > RESOLVED * (range.1 - range.0)));
    Butterfly { first, second, squares, offsets: l.peaks }
}

/// Refines two sampled curves around their squares and crossings, and finds the largest squares.
///
/// # Errors
/// Whatever the functions return.
pub fn refine<E>(
    mut first: Curve,
    mut second: Curve,
    f: &mut impl FnMut(f64) -> Result<CurvePoint, E>,
    g: &mut impl FnMut(f64) -> Result<CurvePoint, E>,
) -> Result<Butterfly, E> {
    let width = |c: &Curve| (c.range_v().1 - c.range_v().0) / 64.0;
    let (wide_f, wide_g) = (width(&first), width(&second));
    for round in 0..ROUNDS {
        let l = lobes(&first, &second);
        let places = l.peaks.into_iter().filter(|c| c.is_finite()).chain(l.crossings.iter().copied());
        for c in places.collect::<Vec<f64>>() {
            for k in [-1.0, -0.5, 0.0, 0.5, 1.0] {
                let shrink = 0.25f64.powi(round);
                let x = first.input_at_offset(c) + k * wide_f * shrink;
                if x > first.range_v().0 && x < first.range_v().1 {
                    first.add(x, f)?;
                }
                let y = second.input_at_offset(-c) + k * wide_g * shrink;
                if y > second.range_v().0 && y < second.range_v().1 {
                    second.add(y, g)?;
                }
            }
        }
    }
    Ok(butterfly_of(first, second))
}

/// Samples two falling curves over a range and lays the largest squares into their butterfly.
///
/// # Errors
/// Whatever the functions return.
pub fn butterfly<E>(
    lo: f64,
    hi: f64,
    f: &mut impl FnMut(f64) -> Result<CurvePoint, E>,
    g: &mut impl FnMut(f64) -> Result<CurvePoint, E>,
) -> Result<Butterfly, E> {
    let (first, second) = (Curve::sample(lo, hi, f)?, Curve::sample(lo, hi, g)?);
    refine(first, second, f, g)
}
