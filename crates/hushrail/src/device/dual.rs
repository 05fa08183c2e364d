//! Dual numbers: a value and its first derivatives carried through every formula, so that one text of an equation
//! gives current and exact conductances.

use std::ops::{Add, Div, Mul, Neg, Sub};

/// What the device equations need of a number.
pub trait Real:
    Copy
    + std::fmt::Debug
    + Add<Output = Self>
    + Sub<Output = Self>
    + Mul<Output = Self>
    + Div<Output = Self>
    + Neg<Output = Self>
    + Add<f64, Output = Self>
    + Sub<f64, Output = Self>
    + Mul<f64, Output = Self>
    + Div<f64, Output = Self>
{
    /// A constant.
    fn of(v: f64) -> Self;
    /// The value without its derivatives.
    fn val(self) -> f64;
    /// Applies a function of which value and slope at `val` are given.
    fn chain(self, value: f64, slope: f64) -> Self;

    /// eˣ, continued by its tangent beyond 650 so that no infinity appears.
    #[inline]
    fn exp(self) -> Self {
        let x = self.val();
        if x > 650.0 {
            let top = 650f64.exp();
            return self.chain(top * (x - 649.0), top);
        }
        let e = x.exp();
        self.chain(e, e)
    }
    /// Natural logarithm.
    #[inline]
    fn ln(self) -> Self {
        self.chain(self.val().ln(), 1.0 / self.val())
    }
    /// Square root.
    #[inline]
    fn sqrt(self) -> Self {
        let r = self.val().sqrt();
        self.chain(r, 0.5 / r)
    }
    /// 1/x.
    #[inline]
    fn recip(self) -> Self {
        let r = 1.0 / self.val();
        self.chain(r, -r * r)
    }
    /// x².
    #[inline]
    fn sq(self) -> Self {
        self.chain(self.val() * self.val(), 2.0 * self.val())
    }
    /// eˣ − 1 without cancellation.
    #[inline]
    fn exp_m1(self) -> Self {
        let x = self.val();
        if x > 650.0 {
            return self.exp();
        }
        let e = x.exp_m1();
        self.chain(e, e + 1.0)
    }
    /// ln(1 + x) without cancellation.
    #[inline]
    fn ln_1p(self) -> Self {
        self.chain(self.val().ln_1p(), 1.0 / (1.0 + self.val()))
    }
    /// ln(1 + eˣ), exact in both tails.
    #[inline]
    fn softplus(self) -> Self {
        let x = self.val();
        let e = (-x.abs()).exp();
        let tail = e.ln_1p();
        if x > 0.0 { self.chain(x + tail, 1.0 / (1.0 + e)) } else { self.chain(tail, e / (1.0 + e)) }
    }
    /// Arc tangent.
    #[inline]
    fn atan(self) -> Self {
        self.chain(self.val().atan(), 1.0 / (1.0 + self.val() * self.val()))
    }
    /// Hyperbolic tangent.
    #[inline]
    fn tanh(self) -> Self {
        let t = self.val().tanh();
        self.chain(t, 1.0 - t * t)
    }
    /// xʸ for positive x.
    #[inline]
    fn pow(self, y: Self) -> Self {
        (self.ln() * y).exp()
    }
    /// Magnitude.
    #[inline]
    fn abs(self) -> Self {
        if self.val() < 0.0 { -self } else { self }
    }
}

/// A number that may be combined with parameters of type `P` (plain, or dual in the parameters).
pub trait Over<P>:
    Real + Add<P, Output = Self> + Sub<P, Output = Self> + Mul<P, Output = Self> + Div<P, Output = Self>
{
    /// A parameter as a number of this kind.
    fn lift(p: P) -> Self;
}

impl Real for f64 {
    #[inline]
    fn of(v: f64) -> Self {
        v
    }
    #[inline]
    fn val(self) -> f64 {
        self
    }
    #[inline]
    fn chain(self, value: f64, _slope: f64) -> Self {
        value
    }
}

impl Over<f64> for f64 {
    #[inline]
    fn lift(p: f64) -> Self {
        p
    }
}

/// A value and its derivatives with respect to N variables.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Dual<const N: usize> {
    /// The value.
    pub v: f64,
    /// First derivatives.
    pub d: [f64; N],
}

impl<const N: usize> Dual<N> {
    /// The variable number `i` itself, at value `v`.
    pub fn variable(v: f64, i: usize) -> Self {
        let mut d = [0.0; N];
        d[i] = 1.0;
        Self { v, d }
    }
    #[inline]
    fn map2(self, o: Self, v: f64, f: impl Fn(f64, f64) -> f64) -> Self {
        let mut d = [0.0; N];
        for i in 0..N {
            d[i] = f(self.d[i], o.d[i]);
        }
        Self { v, d }
    }
    #[inline]
    fn map(self, v: f64, f: impl Fn(f64) -> f64) -> Self {
        let mut d = [0.0; N];
        for i in 0..N {
            d[i] = f(self.d[i]);
        }
        Self { v, d }
    }
}

impl<const N: usize> Real for Dual<N> {
    #[inline]
    fn of(v: f64) -> Self {
        Self { v, d: [0.0; N] }
    }
    #[inline]
    fn val(self) -> f64 {
        self.v
    }
    #[inline]
    fn chain(self, value: f64, slope: f64) -> Self {
        self.map(value, |d| d * slope)
    }
}

impl<const N: usize> Over<f64> for Dual<N> {
    #[inline]
    fn lift(p: f64) -> Self {
        Self::of(p)
    }
}

impl<const N: usize> Over<Dual<N>> for Dual<N> {
    #[inline]
    fn lift(p: Self) -> Self {
        p
    }
}

impl<const N: usize> Add for Dual<N> {
    type Output = Self;
    #[inline]
    fn add(self, o: Self) -> Self {
        self.map2(o, self.v + o.v, |a, b| a + b)
    }
}
impl<const N: usize> Sub for Dual<N> {
    type Output = Self;
    #[inline]
    fn sub(self, o: Self) -> Self {
        self.map2(o, self.v - o.v, |a, b| a - b)
    }
}
impl<const N: usize> Mul for Dual<N> {
    type Output = Self;
    #[inline]
    #[expect(clippy::suspicious_arithmetic_impl, reason = "the product rule adds")]
    fn mul(self, o: Self) -> Self {
        self.map2(o, self.v * o.v, |a, b| a * o.v + b * self.v)
    }
}
impl<const N: usize> Div for Dual<N> {
    type Output = Self;
    #[inline]
    fn div(self, o: Self) -> Self {
        let r = 1.0 / o.v;
        let v = self.v * r;
        self.map2(o, v, |a, b| (a - b * v) * r)
    }
}
impl<const N: usize> Neg for Dual<N> {
    type Output = Self;
    #[inline]
    fn neg(self) -> Self {
        self.map(-self.v, |d| -d)
    }
}
impl<const N: usize> Add<f64> for Dual<N> {
    type Output = Self;
    #[inline]
    fn add(self, o: f64) -> Self {
        Self { v: self.v + o, d: self.d }
    }
}
impl<const N: usize> Sub<f64> for Dual<N> {
    type Output = Self;
    #[inline]
    fn sub(self, o: f64) -> Self {
        Self { v: self.v - o, d: self.d }
    }
}
impl<const N: usize> Mul<f64> for Dual<N> {
    type Output = Self;
    #[inline]
    fn mul(self, o: f64) -> Self {
        self.map(self.v * o, |d| d * o)
    }
}
impl<const N: usize> Div<f64> for Dual<N> {
    type Output = Self;
    #[inline]
    fn div(self, o: f64) -> Self {
        self * (1.0 / o)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn derivatives_agree_with_differences() {
        fn f<R: Real>(x: R) -> R {
            (x * x + 1.0).sqrt().ln() * x.exp() / (x + 3.0) + x.softplus() * x.atan() - (x + 2.0).pow(x)
        }
        for x in [-0.7, 0.3, 1.9] {
            let d = f(Dual::<1>::variable(x, 0));
            let h = 1e-6;
            let slope = (f(x + h) - f(x - h)) / (2.0 * h);
            assert!((d.v - f(x)).abs() < 1e-14);
            assert!((d.d[0] - slope).abs() < 1e-8 * slope.abs().max(1.0), "{x}: {} {slope}", d.d[0]);
        }
    }
}
