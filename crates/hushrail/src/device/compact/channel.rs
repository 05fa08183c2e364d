//! Channel current from weak to strong inversion, symmetric in drain and source.

use super::prepare::Prepared;
use crate::device::Bias;
use crate::device::dual::{Number, Over, Real, choose};

/// The interpolation function `F(v) = ln²(1 + exp(v/2))`.
///
/// # Source
/// Enz, Krummenacher, Vittoz, *Analog Integr. Circuits Signal Process.* 8 (1995) 83–114, doi:10.1007/BF01239381.
#[inline(always)]
pub fn interpolation<R: Number>(v: R) -> R {
    (v * 0.5).softplus().sq()
}

/// The voltage of an inversion level: the inverse of [`interpolation`], `v = 2·ln(exp(√i) − 1)`.
pub fn interpolation_inverse(i: f64) -> f64 {
    let root = i.sqrt();
    // ln(e^r − 1) = r + ln(1 − e^−r), which does not overflow
    2.0 * (root + (-(-root).exp_m1()).ln())
}

/// Channel current and the inversion charges at both ends.
#[derive(Debug, Clone, Copy)]
pub struct Channel<R> {
    /// Drain to source, A.
    pub ids: R,
    /// Inversion charge at the source end over the oxide capacitance, V.
    pub source_v: R,
    /// The same at the drain end, V.
    pub drain_v: R,
}

impl<R: Number> Channel<R> {
    /// The current at `vds ≥ 0`.
    ///
    /// ```text
    /// I  = 2·n·β·UT²·(qs² − qd²)/M/√(1 + ρ²),   β = µ·Cox·W/L
    /// qs = ln(1 + exp((Vp − Vs)/2UT)),   qd = ln(1 + exp((Vp − Vd)/2UT))
    /// ```
    ///
    /// **Pinch-off voltage.** `Vp` is the channel potential at which the gate holds the surface at threshold; all voltages
    /// are referred to the body. It solves the sum of the charges that the gate has to supply:
    ///
    /// ```text
    /// Vg − Vt0 + η·(Vd + Vs) + r·min(Vd, Vs) = a·Vp + γ·(√(φ + Vp) − √φ)
    /// a = n − γ/(2·√φ),   r = a − 1 − 2·η
    /// ```
    ///
    /// γ is the depletion layer, `η` the pull of each junction on the barrier (quasi-two-dimensional, the same from both
    /// ends), `r` what is left of the slope factor `n`. Seen from the source this is the usual law: threshold
    /// `Vt0 + γ·(√(φ + Vsb) − √φ) − η·Vds`, slope factor `n` there. The smaller of Vd and Vs is
    /// `(Vd + Vs − Vds·tanh(Vds/UT))/2`, even and smooth in Vds. The root of the quadratic in `√(φ + Vp)` is taken in its
    /// rationalised form; where the gate drive falls below flat band (accumulation) it goes smoothly to `Vp = −φ` within 2 UT,
    /// as the surface then no longer follows the gate. The same limit holds in forward body bias.
    ///
    /// **Digits at small Vds.** `D = qs − qd = ln1p(−e^a·expm1(−Vds/2UT)/(1 + e^b))`, and `qs² − qd² = D·(D + 2·qd)`.
    ///
    /// **Mobility and series resistance.** `M = 1 + (θ + µ·Cox·R/L)·n·UT·(qs + qd)`; `2·n·UT·q` is the gate overdrive at an
    /// end, so that with small Vds the resistance is `(1 + θ·Vov)/(β·Vov) + R/W`.
    ///
    /// **Velocity saturation.** `ρ = I0/(W·Cox·vsat·2·n·UT·qs)`, the current over the most that the charge at the source can
    /// carry. With small Vds the root is `√(1 + (µ·Vds/(vsat·L))²)`; with large Vds the current goes to that most, and never
    /// falls with Vds. In weak inversion ρ vanishes with the charge.
    ///
    /// # Source
    /// Enz, Krummenacher, Vittoz, *Analog Integr. Circuits Signal Process.* 8 (1995) 83–114 (interpolation, pinch-off);
    /// Liu et al., *IEEE Trans. Electron Devices* 40 (1993) 86–95 (barrier lowering from both ends); Caughey and Thomas,
    /// *Proc. IEEE* 55 (1967) 2192–2193 (velocity, exponent 2); Tsividis and McAndrew, *Operation and Modeling of the MOS
    /// Transistor* (θ and series resistance).
    #[inline(always)]
    pub fn at<P: Real>(p: &Prepared<P>, Bias { vgs, vds, vbs }: Bias<R>) -> Self
    where
        R: Over<P>,
    {
        let y = vds / p.two_vt;
        let (e, fall) = (-y).exp_and_m1();
        // Vds·(1 − tanh(Vds/UT)) = 2·Vds·e⁴/(1 + e⁴) with e = exp(−Vds/2UT)
        let e4 = e.sq().sq();
        let rest = vds * e4 * 2.0 / (e4 + 1.0);
        let drive = vgs - vbs * p.linear - p.vt0 + vds * p.dibl + rest * p.half_rest;
        let above_flat = (drive + p.flat_v) / p.two_vt;
        // 1 + e^−34 is 1 in double precision
        let above_flat = choose!(above_flat.below(34.0), above_flat.softplus(), above_flat) * p.two_vt;
        let root = above_flat * 2.0 / ((above_flat * (p.linear * 4.0) + p.gamma * p.gamma).sqrt() + p.gamma);
        let ea = ((root.sq() - p.phi + vbs) / p.two_vt).exp();
        let eb = ea * e;
        let d = -(ea * fall / (eb + 1.0));
        let d = d.ln_1p();
        let qd = eb.ln_1p();
        let (qs, sum) = (qd + d, qd * 2.0 + d);
        let mut ids = d * sum * p.specific_a;
        if p.mobility_loss.val() > 0.0 {
            ids = ids / (sum * p.mobility_loss + 1.0);
        }
        if p.most_a.val() > 0.0 {
            // 1e−280 only matters where no charge is left at all
            let rho = ids / ((qs + 1e-280) * p.most_a);
            ids = ids / (rho.sq() + 1.0).sqrt();
        }
        Self { ids, source_v: qs * p.charge_v, drain_v: qd * p.charge_v }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Values of the project's reference sheet, B5.1, B5.2 and B5.6, computed there from the printed formula by an independent
    /// program; the tolerance is their last digit.
    #[test]
    fn interpolation_and_inverse_meet_the_references() {
        for (v, want) in [
            (-10.0, 4.509591e-5),
            (-5.0, 6.223590e-3),
            (0.0, 0.4804530139),
            (5.0, 6.650672),
            (10.0, 25.067199),
            (20.0, 100.000908),
        ] {
            let got: f64 = interpolation(v);
            assert!((got / want - 1.0).abs() < 2e-7, "{v}: {got}");
        }
        for (i, want) in [(0.01, -4.5043), (0.1, -1.9780), (1.0, 1.0826), (10.0, 6.2381), (100.0, 19.9999)] {
            assert!((interpolation_inverse(i) - want).abs() < 6e-5, "{i}");
        }
    }
}
