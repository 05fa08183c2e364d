//! Rows of bias points in vector registers: the same equations, eight, four or one point at a time.
//!
//! [`Lanes`] is a [`Number`] made of one vector of the machine. Which vectors there are is found out at run time (crate
//! `pulp`); everything from the entry to the last addition is inlined into one function that the compiler may build with
//! the wide instructions.
//!
//! **Same bits on every machine.** Each lane goes through the same IEEE operations in the same order whatever the width,
//! and nothing is added across lanes. The equations fuse no product with a sum; the functions below do, by an explicit
//! instruction that a machine without it imitates to the bit. So a result depends neither on the machine nor on the place of
//! a point in an array; tests compare bits.
//!
//! **Functions.** exp, ln and their relatives are polynomials of our own, within 2 ulp of the exact values (see the tests);
//! the scalar path calls the standard library. The two paths differ by that, far below 1e-12. Below 2.2e-308 an exponential is zero.

use std::ops::{Add, Div, Mul, Neg, Sub};

use pulp::Simd;
use pulp::bytemuck::cast;

use super::dual::{Answer, Number, Over};

/// One vector of numbers.
#[derive(Debug, Clone, Copy)]
pub struct Lanes<S: Simd> {
    simd: S,
    v: S::f64s,
}

/// The answers of a comparison, one for each point.
#[derive(Debug, Clone, Copy)]
pub struct LaneMask<S: Simd>(S::m64s);

impl<S: Simd> Answer for LaneMask<S> {
    #[inline(always)]
    fn single(self) -> Option<bool> {
        None
    }
}

/// ln 2 in two parts; the first has 21 trailing zero bits, so its product with an exponent is exact.
const LN_2: (f64, f64) = (6.931_471_803_691_238e-1, 1.908_214_929_270_587_7e-10);
/// Adding this leaves the nearest integer in the last bits.
const ROUND: f64 = 6_755_399_441_055_744.0; // 1.5·2⁵²
/// From here on an exponential goes on along its tangent.
const TOP: f64 = 650.0;
/// Below this an exponential is not a normal number.
const BOTTOM: f64 = -708.0;
/// Bits of an exponent in the upper half of a double.
const EXPONENT_SHIFT: u32 = 20;

/// Shifts both halves of every double by the place of the exponent, left or right.
#[inline(always)]
fn shift_halves<S: Simd>(simd: S, v: S::f64s, left: bool) -> S::f64s {
    if size_of::<S::u32s>() == size_of::<S::f64s>() {
        let (bits, by) = (cast::<S::f64s, S::u32s>(v), simd.splat_u32s(EXPONENT_SHIFT));
        let bits =
            if left { simd.wrapping_dyn_shl_u32s(bits, by) } else { simd.wrapping_dyn_shr_u32s(bits, by) };
        cast(bits)
    } else {
        // a single double is twice as long as the single word of that kind of vector
        let [low, high]: [u32; 2] = cast(v);
        let shift = |x: u32| if left { x << EXPONENT_SHIFT } else { x >> EXPONENT_SHIFT };
        cast([shift(low), shift(high)])
    }
}

impl<S: Simd> Lanes<S> {
    /// Points in one vector.
    pub const COUNT: usize = S::F64_LANES;

    /// The numbers `slice[..COUNT]`.
    #[inline(always)]
    pub(super) fn load(simd: S, slice: &[f64]) -> Self {
        Self { simd, v: simd.partial_load_f64s(slice) }
    }
    /// Writes the numbers to `slice[..COUNT]`.
    #[inline(always)]
    pub(super) fn store(self, slice: &mut [f64]) {
        self.simd.partial_store_f64s(slice, self.v);
    }
    #[inline(always)]
    fn at(self, v: S::f64s) -> Self {
        Self { simd: self.simd, v }
    }
    /// `self·factor + term`, rounded once on every machine.
    #[inline(always)]
    fn fused(self, factor: Self, term: Self) -> Self {
        self.at(self.simd.mul_add_f64s(self.v, factor.v, term.v))
    }
    /// The same with a constant.
    #[inline(always)]
    fn times(self, factor: f64, term: Self) -> Self {
        self.fused(self.like(factor), term)
    }
    #[inline(always)]
    fn keep_bits(self, mask: u64) -> Self {
        let bits = self.simd.and_u64s(self.simd.transmute_u64s_f64s(self.v), self.simd.splat_u64s(mask));
        self.at(self.simd.transmute_f64s_u64s(bits))
    }
    #[inline(always)]
    fn set_bits(self, mask: u64) -> Self {
        let bits = self.simd.or_u64s(self.simd.transmute_u64s_f64s(self.v), self.simd.splat_u64s(mask));
        self.at(self.simd.transmute_f64s_u64s(bits))
    }

    /// 2ⁿ, eʳ − 1 and the factor of the tangent, with x = n·ln 2 + r and |r| ≤ ln 2/2.
    ///
    /// The polynomial is the series of eʳ − 1 to r¹³; what is left out is below r¹³/14! < 2e-17 of it. The sums are taken in
    /// pairs, which shortens the chain.
    #[inline(always)]
    fn exp_parts(self) -> (Self, Self, Self) {
        let low = Self::select(self.below(BOTTOM), self.like(BOTTOM), self);
        let x = Self::select(self.above(TOP), self.like(TOP), low);
        let n = x * std::f64::consts::LOG2_E + ROUND - ROUND;
        let r = (-n).times(LN_2.1, (-n).times(LN_2.0, x));
        // 1.5·2²⁰ puts n into the upper half of the double; its shift pushes all but the exponent out
        let power = n + (1_572_864.0 + 1023.0);
        let power = self.at(shift_halves(self.simd, power.v, true));
        let c = &INVERSE_FACTORIALS;
        let r2 = r * r;
        let r4 = r2 * r2;
        let a = r.times(c[3], r.like(c[2]));
        let b = r.times(c[5], r.like(c[4]));
        let d = r.times(c[7], r.like(c[6]));
        let e = r.times(c[9], r.like(c[8]));
        let f = r.times(c[11], r.like(c[10]));
        let g = r.times(c[13], r.like(c[12]));
        let p = g.fused(r2, f).fused(r4, e.fused(r2, d));
        let p = p.fused(r4, b.fused(r2, a));
        // 1 up to the top, then 1 + (x − top)
        (power, r2.fused(p, r), low - x + 1.0)
    }

    /// ln of a number above zero. Zero, infinity, NaN and negative numbers as usual.
    ///
    /// # Source
    /// Method and coefficients of `log` in Sun Microsystems' fdlibm (1993, freely distributable):
    /// ln(1 + f) = f − f²/2 + s·(f²/2 + R(s²)), s = f/(2 + f), error below 1 ulp.
    #[inline(always)]
    fn log(self) -> Self {
        self.log_with(self.like(0.0))
    }

    /// ln(x + lost) of a number and of what rounding took from it, which is below half its last place.
    ///
    /// The loss adds `lost/x`, of which a few bits are enough: with x = m·2ᵉ it is `lost·2⁻ᵉ·(2 − m)`, exact for m near 1,
    /// where the logarithm itself is small.
    #[inline(always)]
    fn log_with(self, lost: Self) -> Self {
        let tiny = self.below(f64::MIN_POSITIVE);
        let x = Self::select(tiny, self * TWO_54, self);
        // exponent and mantissa, this in (√½, √2]
        let raw = self.at(shift_halves(self.simd, x.v, false)).keep_bits(0x0000_0fff_0000_0000);
        let e = raw.set_bits(0x4130_0000_0000_0000) - (1_048_576.0 + 1023.0);
        let m = x.keep_bits(0x000f_ffff_ffff_ffff).set_bits(0x3ff0_0000_0000_0000);
        let wide = m.above(std::f64::consts::SQRT_2);
        let m = Self::select(wide, m * 0.5, m);
        let e = Self::select(wide, e + 1.0, e);
        let lost =
            lost * self.at(shift_halves(self.simd, (-e + (1_572_864.0 + 1023.0)).v, true)) * (-m + 2.0);
        let e = Self::select(tiny, e - 54.0, e);
        let f = m - 1.0;
        let s = f / (f + 2.0);
        let z = s * s;
        let w = z * z;
        let even = w.times(1.531383769920937332e-01, w.like(2.222219843214978396e-01));
        let even = w * w.fused(even, w.like(3.999999999940941908e-01));
        let odd = w.times(1.479819860511658591e-01, w.like(1.818357216161805012e-01));
        let odd = w.fused(odd, w.like(2.857142874366239149e-01));
        let odd = z * w.fused(odd, w.like(6.666666666666735130e-01));
        let half = f * f * 0.5;
        let low = s.fused(half + (even + odd), e.times(LN_2.1, lost));
        let l = e.times(LN_2.0, f - (half - low));
        // infinity and NaN stay, zero and below have no logarithm
        let l = Self::select(self.at_most(f64::MAX), l, self);
        let l = Self::select(self.at_most(0.0), self.like(f64::NEG_INFINITY), l);
        Self::select(self.below(0.0), self.like(f64::NAN), l)
    }
}

const TWO_54: f64 = 18_014_398_509_481_984.0;

/// 1/k!.
const INVERSE_FACTORIALS: [f64; 14] = {
    let mut all = [1.0; 14];
    let (mut k, mut factorial) = (1, 1.0);
    while k < 14 {
        factorial *= k as f64; // exact up to 18!
        all[k] = 1.0 / factorial;
        k += 1;
    }
    all
};

impl<S: Simd> Number for Lanes<S> {
    type Mask = LaneMask<S>;

    #[inline(always)]
    fn like(self, v: f64) -> Self {
        self.at(self.simd.splat_f64s(v))
    }
    #[inline(always)]
    fn below(self, c: f64) -> LaneMask<S> {
        LaneMask(self.simd.less_than_f64s(self.v, self.simd.splat_f64s(c)))
    }
    #[inline(always)]
    fn at_most(self, c: f64) -> LaneMask<S> {
        LaneMask(self.simd.less_than_or_equal_f64s(self.v, self.simd.splat_f64s(c)))
    }
    #[inline(always)]
    fn above(self, c: f64) -> LaneMask<S> {
        LaneMask(self.simd.greater_than_f64s(self.v, self.simd.splat_f64s(c)))
    }
    #[inline(always)]
    fn at_least(self, c: f64) -> LaneMask<S> {
        LaneMask(self.simd.greater_than_or_equal_f64s(self.v, self.simd.splat_f64s(c)))
    }
    #[inline(always)]
    fn select(mask: LaneMask<S>, then: Self, otherwise: Self) -> Self {
        then.at(then.simd.select_f64s(mask.0, then.v, otherwise.v))
    }

    #[inline(always)]
    fn exp(self) -> Self {
        let (power, less, tangent) = self.exp_parts();
        let e = power.fused(less, power) * tangent;
        Self::select(self.below(BOTTOM), self.like(0.0), e)
    }
    #[inline(always)]
    fn exp_m1(self) -> Self {
        let (power, less, tangent) = self.exp_parts();
        power.fused(less, power - 1.0) * tangent
    }
    #[inline(always)]
    fn exp_and_m1(self) -> (Self, Self) {
        let (power, less, _) = self.exp_parts();
        let e = power.fused(less, power);
        (Self::select(self.below(BOTTOM), self.like(0.0), e), power.fused(less, power - 1.0))
    }
    #[inline(always)]
    fn ln(self) -> Self {
        self.log()
    }
    /// ln(u) with what rounding took from u = 1 + x given back.
    #[inline(always)]
    fn ln_1p(self) -> Self {
        let u = self + 1.0;
        u.log_with(self - (u - 1.0))
    }
    #[inline(always)]
    fn softplus(self) -> Self {
        let tail = (-self.abs()).exp().ln_1p();
        Self::select(self.above(0.0), self + tail, tail)
    }
    #[inline(always)]
    fn sqrt(self) -> Self {
        self.at(self.simd.sqrt_f64s(self.v))
    }
    #[inline(always)]
    fn recip(self) -> Self {
        self.like(1.0) / self
    }
    #[inline(always)]
    fn sq(self) -> Self {
        self * self
    }
    /// −m/(m + 2) with m = e^(−2|x|) − 1, and the sign of x.
    #[inline(always)]
    fn tanh(self) -> Self {
        let m = (self.abs() * -2.0).exp_m1();
        let t = -m / (m + 2.0);
        Self::select(self.below(0.0), -t, t)
    }
    #[inline(always)]
    fn abs(self) -> Self {
        self.at(self.simd.abs_f64s(self.v))
    }
}

impl<S: Simd> Over<f64> for Lanes<S> {
    #[inline(always)]
    fn lift(self, p: f64) -> Self {
        self.like(p)
    }
}

impl<S: Simd> Neg for Lanes<S> {
    type Output = Self;
    #[inline(always)]
    fn neg(self) -> Self {
        self.at(self.simd.neg_f64s(self.v))
    }
}

/// An operation between rows, and between a row and a number.
macro_rules! operation {
    ($trait:ident, $name:ident, $of_simd:ident) => {
        impl<S: Simd> $trait for Lanes<S> {
            type Output = Self;
            #[inline(always)]
            fn $name(self, o: Self) -> Self {
                self.at(self.simd.$of_simd(self.v, o.v))
            }
        }
    };
    ($trait:ident, $name:ident, $of_simd:ident, and f64) => {
        operation!($trait, $name, $of_simd);
        impl<S: Simd> $trait<f64> for Lanes<S> {
            type Output = Self;
            #[inline(always)]
            fn $name(self, o: f64) -> Self {
                self.at(self.simd.$of_simd(self.v, self.simd.splat_f64s(o)))
            }
        }
    };
}
operation!(Add, add, add_f64s, and f64);
operation!(Sub, sub, sub_f64s, and f64);
operation!(Mul, mul, mul_f64s, and f64);
operation!(Div, div, div_f64s);

/// As a product with the reciprocal, which is the same for all points: a division of vectors takes ten times as long.
impl<S: Simd> Div<f64> for Lanes<S> {
    type Output = Self;
    #[inline(always)]
    fn div(self, o: f64) -> Self {
        self * (1.0 / o)
    }
}

#[cfg(test)]
mod tests {
    use pulp::{Arch, Scalar, WithSimd};

    use super::Lanes;
    use crate::device::dual::Number;

    #[derive(Clone, Copy, Debug)]
    enum Function {
        Exp,
        ExpM1,
        BothExp,
        BothM1,
        Ln,
        Ln1p,
        Softplus,
        Tanh,
        Sqrt,
        Recip,
    }
    use Function::{BothExp, BothM1, Exp, ExpM1, Ln, Ln1p, Recip, Softplus, Sqrt, Tanh};

    struct Apply<'a>(Function, &'a [f64]);

    impl WithSimd for Apply<'_> {
        type Output = Vec<f64>;
        #[inline(always)]
        fn with_simd<S: pulp::Simd>(self, simd: S) -> Vec<f64> {
            let mut out = vec![0.0; self.1.len()];
            for (x, y) in self.1.chunks(Lanes::<S>::COUNT).zip(out.chunks_mut(Lanes::<S>::COUNT)) {
                let x = Lanes::load(simd, x);
                let r = match self.0 {
                    Exp => x.exp(),
                    ExpM1 => x.exp_m1(),
                    BothExp => x.exp_and_m1().0,
                    BothM1 => x.exp_and_m1().1,
                    Ln => x.ln(),
                    Ln1p => x.ln_1p(),
                    Softplus => x.softplus(),
                    Tanh => x.tanh(),
                    Sqrt => x.sqrt(),
                    Recip => x.recip(),
                };
                r.store(y);
            }
            out
        }
    }

    /// Values of the machine's vectors, after a check that one lane gives the same bits.
    fn apply(f: Function, x: &[f64]) -> Vec<f64> {
        let (wide, one) = (Arch::new().dispatch(Apply(f, x)), pulp::Simd::vectorize(Scalar, Apply(f, x)));
        for ((x, a), b) in x.iter().zip(&wide).zip(&one) {
            assert!(a.to_bits() == b.to_bits() || a.is_nan() && b.is_nan(), "{f:?}({x:e}): {a:e} {b:e}");
        }
        wide
    }

    /// Points in proportion between `least` and `most`, both signs when asked.
    fn spread(least: f64, most: f64, count: u32, both: bool) -> Vec<f64> {
        let (low, ratio) = (f64::ln(least), f64::ln(most) - f64::ln(least));
        let up = (0..count).map(move |k| f64::exp(low + ratio * f64::from(k) / f64::from(count)));
        if both { up.flat_map(|x| [x, -x]).collect() } else { up.collect() }
    }

    fn worst_ulp(f: Function, x: &[f64], exact: impl Fn(f64) -> f64) -> f64 {
        let mut worst = 0.0f64;
        for (x, got) in x.iter().zip(apply(f, x)) {
            let want = exact(*x);
            if got == want {
                continue;
            }
            let ulp = want.abs().max(f64::MIN_POSITIVE) * f64::EPSILON;
            let off = (got - want).abs() / ulp;
            assert!(off < 4.0, "{f:?}({x:e}): {got:e} instead of {want:e}");
            worst = worst.max(off);
        }
        worst
    }

    /// The standard library is within 1 ulp of the exact value, so 3 here means at most 4 from there.
    #[test]
    fn functions_are_within_a_few_ulp_of_the_standard_library() {
        let all = spread(1e-300, 640.0, 40_000, true);
        let mut worst = vec![
            (Exp, worst_ulp(Exp, &all, f64::exp)),
            (ExpM1, worst_ulp(ExpM1, &all, f64::exp_m1)),
            (BothExp, worst_ulp(BothExp, &all, f64::exp)),
            (BothM1, worst_ulp(BothM1, &all, f64::exp_m1)),
            (Softplus, worst_ulp(Softplus, &all, Number::softplus)),
            (Tanh, worst_ulp(Tanh, &all, f64::tanh)),
        ];
        let positive = spread(1e-320, 1e308, 60_000, false);
        worst.push((Ln, worst_ulp(Ln, &positive, f64::ln)));
        let near_one: Vec<f64> = spread(1e-16, 0.5, 20_000, true).iter().map(|x| 1.0 + x).collect();
        worst.push((Ln, worst_ulp(Ln, &near_one, f64::ln)));
        worst.push((Ln1p, worst_ulp(Ln1p, &positive, f64::ln_1p)));
        worst.push((Ln1p, worst_ulp(Ln1p, &spread(1e-300, 0.999_999, 40_000, true), f64::ln_1p)));
        worst.push((Sqrt, worst_ulp(Sqrt, &positive, f64::sqrt)));
        worst.push((Recip, worst_ulp(Recip, &spread(1e-300, 1e300, 1000, true), f64::recip)));
        for (f, ulp) in worst {
            assert!(ulp <= 3.0, "{f:?}: {ulp} ulp");
        }
    }

    #[test]
    fn edges_are_those_of_a_single_number() {
        let x = [
            f64::INFINITY,
            f64::NEG_INFINITY,
            f64::NAN,
            0.0,
            -0.0,
            -1.0,
            650.0,
            651.0,
            700.0,
            1e4,
            -1e300,
            -745.0,
        ];
        let single: [(Function, fn(f64) -> f64); 6] = [
            (Exp, Number::exp),
            (ExpM1, Number::exp_m1),
            (Ln, Number::ln),
            (Ln1p, Number::ln_1p),
            (Softplus, Number::softplus),
            (Tanh, Number::tanh),
        ];
        for (f, single) in single {
            for (x, got) in x.iter().zip(apply(f, &x)) {
                let want = single(*x);
                let same = got == want || got.is_nan() && want.is_nan();
                // what is not a normal number is zero
                assert!(
                    same || (got / want - 1.0).abs() < 1e-15 || want.abs() < f64::MIN_POSITIVE && got == 0.0,
                    "{f:?}({x:e}): {got:e} instead of {want:e}"
                );
            }
        }
        assert_eq!(apply(Exp, &[0.0]), [1.0]);
        assert_eq!(apply(ExpM1, &[0.0]), [0.0]);
        assert_eq!(apply(Ln, &[1.0]), [0.0]);
        assert_eq!(apply(Ln1p, &[0.0]), [0.0]);
    }
}
