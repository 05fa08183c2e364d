//! Dual numbers: a value and its first derivatives carried through every formula, so that one text of an equation
//! gives current and exact conductances.

use std::ops::{Add, Div, Mul, Neg, Sub};

/// What a comparison of [`Number`]s gives.
pub trait Answer: Copy {
    /// The answer where there is a single one; a row has one for each point.
    fn single(self) -> Option<bool>;
}

impl Answer for bool {
    #[inline(always)]
    fn single(self) -> Option<bool> {
        Some(self)
    }
}

/// `choose!(mask, then, otherwise)`: one of two results by a comparison of a [`Number`]. Both sides must be harmless to
/// evaluate anywhere: infinities and NaN are, panics are not.
macro_rules! choose {
    ($mask:expr, $then:expr, $otherwise:expr $(,)?) => {{
        let mask = $mask;
        match $crate::device::dual::Answer::single(mask) {
            Some(true) => $then,
            Some(false) => $otherwise,
            None => $crate::device::dual::Number::select(mask, $then, $otherwise),
        }
    }};
}
pub(crate) use choose;

/// What the device equations need of a number: plain, dual, or a row of bias points ([`super::lanes`]).
///
/// A row has no single value to branch on, so equations compare into a mask and choose with the macro `choose!`. A single
/// number evaluates the side it takes and nothing else; a row evaluates both and takes each point from its own side. The
/// sides are expressions, not closures: a closure is a function of its own, compiled without the wide instructions.
pub trait Number:
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
    /// The answer of a comparison.
    type Mask: Answer;

    /// A constant of the same kind as this number.
    fn like(self, v: f64) -> Self;
    /// Whether the value is below `c`; false for NaN, as all comparisons.
    fn below(self, c: f64) -> Self::Mask;
    /// Whether the value is `c` or less.
    fn at_most(self, c: f64) -> Self::Mask;
    /// Whether the value is above `c`.
    fn above(self, c: f64) -> Self::Mask;
    /// Whether the value is `c` or more.
    fn at_least(self, c: f64) -> Self::Mask;
    /// One of two results.
    fn select(mask: Self::Mask, then: Self, otherwise: Self) -> Self;

    /// eˣ, continued by its tangent beyond 650 so that no infinity appears.
    fn exp(self) -> Self;
    /// eˣ − 1 without cancellation, continued like [`exp`](Number::exp).
    fn exp_m1(self) -> Self;
    /// eˣ and eˣ − 1, each with all its digits; for x up to 650.
    fn exp_and_m1(self) -> (Self, Self);
    /// Natural logarithm.
    fn ln(self) -> Self;
    /// ln(1 + x) without cancellation.
    fn ln_1p(self) -> Self;
    /// ln(1 + eˣ), exact in both tails.
    fn softplus(self) -> Self;
    /// Square root.
    fn sqrt(self) -> Self;
    /// 1/x.
    fn recip(self) -> Self;
    /// x².
    fn sq(self) -> Self;
    /// Hyperbolic tangent.
    fn tanh(self) -> Self;
    /// Magnitude.
    fn abs(self) -> Self;
    /// xʸ for positive x.
    #[inline(always)]
    fn pow(self, y: Self) -> Self {
        (self.ln() * y).exp()
    }
}

/// A single number, whose value can be looked at.
pub trait Real: Number<Mask = bool> {
    /// A constant.
    fn of(v: f64) -> Self;
    /// The value without its derivatives.
    fn val(self) -> f64;
    /// Applies a function of which value and slope at `val` are given.
    fn chain(self, value: f64, slope: f64) -> Self;
    /// Arc tangent.
    #[inline]
    fn atan(self) -> Self {
        self.chain(self.val().atan(), 1.0 / (1.0 + self.val() * self.val()))
    }
}

/// The functions of a [`Number`] out of `val` and `chain`, for each kind of single number.
macro_rules! functions_of_single_numbers {
    () => {
        type Mask = bool;

        #[inline]
        fn like(self, v: f64) -> Self {
            Self::of(v)
        }
        #[inline]
        fn below(self, c: f64) -> bool {
            self.val() < c
        }
        #[inline]
        fn at_most(self, c: f64) -> bool {
            self.val() <= c
        }
        #[inline]
        fn above(self, c: f64) -> bool {
            self.val() > c
        }
        #[inline]
        fn at_least(self, c: f64) -> bool {
            self.val() >= c
        }
        #[inline]
        fn select(mask: bool, then: Self, otherwise: Self) -> Self {
            if mask { then } else { otherwise }
        }
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
        #[inline]
        fn exp_m1(self) -> Self {
            let x = self.val();
            if x > 650.0 {
                return Number::exp(self);
            }
            let e = x.exp_m1();
            self.chain(e, e + 1.0)
        }
        #[inline]
        fn exp_and_m1(self) -> (Self, Self) {
            if self.val() > -std::f64::consts::LN_2 {
                let less = Number::exp_m1(self);
                (less + 1.0, less)
            } else {
                let e = Number::exp(self);
                (e, e - 1.0)
            }
        }
        #[inline]
        fn ln(self) -> Self {
            self.chain(self.val().ln(), 1.0 / self.val())
        }
        #[inline]
        fn ln_1p(self) -> Self {
            self.chain(self.val().ln_1p(), 1.0 / (1.0 + self.val()))
        }
        #[inline]
        fn softplus(self) -> Self {
            let x = self.val();
            let e = f64::exp(-x.abs());
            let tail = f64::ln_1p(e);
            if x > 0.0 { self.chain(x + tail, 1.0 / (1.0 + e)) } else { self.chain(tail, e / (1.0 + e)) }
        }
        #[inline]
        fn sqrt(self) -> Self {
            let r = self.val().sqrt();
            self.chain(r, 0.5 / r)
        }
        #[inline]
        fn recip(self) -> Self {
            let r = 1.0 / self.val();
            self.chain(r, -r * r)
        }
        #[inline]
        fn sq(self) -> Self {
            self.chain(self.val() * self.val(), 2.0 * self.val())
        }
        #[inline]
        fn tanh(self) -> Self {
            let t = self.val().tanh();
            self.chain(t, 1.0 - t * t)
        }
        #[inline]
        fn abs(self) -> Self {
            if self.val() < 0.0 { -self } else { self }
        }
    };
}

/// A number that may be combined with parameters of type `P` (plain, or dual in the parameters).
pub trait Over<P>:
    Number + Add<P, Output = Self> + Sub<P, Output = Self> + Mul<P, Output = Self> + Div<P, Output = Self>
{
    /// A parameter as a number of the same kind as this one.
    fn lift(self, p: P) -> Self;
}

impl Number for f64 {
    functions_of_single_numbers!();
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
    fn lift(self, p: f64) -> Self {
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

impl<const N: usize> Number for Dual<N> {
    functions_of_single_numbers!();
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
    fn lift(self, p: f64) -> Self {
        Self::of(p)
    }
}

impl<const N: usize> Over<Dual<N>> for Dual<N> {
    #[inline]
    fn lift(self, p: Self) -> Self {
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
