//! Transfer curves: voltage out against voltage in, with exact slopes, sampled where they bend.

use serde::{Deserialize, Serialize};

use crate::device::root::increasing;

/// A point of a transfer curve.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct CurvePoint {
    /// Voltage in, V.
    pub in_v: f64,
    /// Voltage out, V.
    pub out_v: f64,
    /// d out / d in.
    pub slope: f64,
}

/// A falling transfer curve, points in rising order of the input.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Curve {
    /// Points.
    pub points: Vec<CurvePoint>,
}

/// Points before refinement.
const FIRST: usize = 33;
/// A step of the output larger than this share of the range is divided.
const STEP: f64 = 1.0 / 12.0;
/// Smallest step of the input as a share of the range.
const LEAST: f64 = 1e-5;

impl Curve {
    /// Samples a curve over `[lo, hi]`, more densely where it is steep.
    ///
    /// # Errors
    /// Whatever `f` returns.
    pub fn sample<E>(lo: f64, hi: f64, f: &mut impl FnMut(f64) -> Result<CurvePoint, E>) -> Result<Self, E> {
        let mut points = Vec::new();
        for k in 0..FIRST {
            let next = f(lo + (hi - lo) * k as f64 / (FIRST - 1) as f64)?;
            // from the last point to this one, the left half of every step too large first
            let mut ahead = vec![next];
            while let Some(&b) = ahead.last() {
                let Some(&a) = points.last() else {
                    points.push(b);
                    ahead.pop();
                    continue;
                };
                let a: CurvePoint = a;
                let wide = (b.out_v - a.out_v).abs() > STEP * (hi - lo);
                if wide && b.in_v - a.in_v > LEAST * (hi - lo) {
                    ahead.push(f(0.5 * (a.in_v + b.in_v))?);
                } else {
                    points.push(b);
                    ahead.pop();
                }
            }
        }
        Ok(Self { points })
    }

    /// Adds a point unless one is there.
    ///
    /// # Errors
    /// Whatever `f` returns.
    pub fn add<E>(&mut self, in_v: f64, f: &mut impl FnMut(f64) -> Result<CurvePoint, E>) -> Result<(), E> {
        let k = self.points.partition_point(|p| p.in_v < in_v);
        let near = |p: &CurvePoint| (p.in_v - in_v).abs() < 1e-12;
        if self.points.get(k).is_some_and(near) || k > 0 && near(&self.points[k - 1]) {
            return Ok(());
        }
        let p = f(in_v)?;
        self.points.insert(k, p);
        Ok(())
    }

    /// Lowest and highest input, V.
    pub fn range_v(&self) -> (f64, f64) {
        match (self.points.first(), self.points.last()) {
            (Some(a), Some(b)) => (a.in_v, b.in_v),
            _ => (0.0, 0.0),
        }
    }

    /// `out − in` falls along the curve; lowest and highest value.
    pub(super) fn offsets(&self) -> (f64, f64) {
        match (self.points.first(), self.points.last()) {
            (Some(a), Some(b)) => (b.out_v - b.in_v, a.out_v - a.in_v),
            _ => (0.0, 0.0),
        }
    }

    /// Input at which `out − in` is `c`: a cubic with the exact end slopes, held monotone (limit after Fritsch and Carlson,
    /// *SIAM J. Numer. Anal.* 17 (1980) 238).
    pub(super) fn input_at_offset(&self, c: f64) -> f64 {
        let p = &self.points;
        let k = p.partition_point(|q| q.out_v - q.in_v > c).clamp(1, p.len() - 1);
        let (a, b) = (&p[k - 1], &p[k]);
        let (ca, cb) = (a.out_v - a.in_v, b.out_v - b.in_v);
        let h = cb - ca;
        if !(h < 0.0) {
            return 0.5 * (a.in_v + b.in_v);
        }
        let secant = (b.in_v - a.in_v) / h;
        // d in / d offset, between three secants and zero (both are negative)
        let limit = |slope: f64| (1.0 / (slope - 1.0)).min(0.0).max(3.0 * secant);
        let (ma, mb) = (limit(a.slope), limit(b.slope));
        let t = ((c - ca) / h).clamp(0.0, 1.0);
        let (t2, t3) = (t * t, t * t * t);
        (2.0 * t3 - 3.0 * t2 + 1.0) * a.in_v
            + (t3 - 2.0 * t2 + t) * h * ma
            + (-2.0 * t3 + 3.0 * t2) * b.in_v
            + (t3 - t2) * h * mb
    }

    /// The outermost inputs at which the slope is −1, found on the exact slope; `None` when it never is that steep.
    ///
    /// # Errors
    /// Whatever `f` returns.
    pub fn unity_gain<E>(
        &self,
        f: &mut impl FnMut(f64) -> Result<CurvePoint, E>,
    ) -> Result<Option<(CurvePoint, CurvePoint)>, E> {
        let steep = |p: &CurvePoint| p.slope < -1.0;
        let p = &self.points;
        let (Some(first), Some(last)) = (p.iter().position(steep), p.iter().rposition(steep)) else {
            return Ok(None);
        };
        if first == 0 || last + 1 == p.len() {
            return Ok(None);
        }
        let low = increasing(p[first - 1].in_v, p[first].in_v, 1e-12, 1e-9, 200, |x| Ok(-1.0 - f(x)?.slope))?;
        let high = increasing(p[last].in_v, p[last + 1].in_v, 1e-12, 1e-9, 200, |x| Ok(f(x)?.slope + 1.0))?;
        Ok(Some((f(low)?, f(high)?)))
    }
}
