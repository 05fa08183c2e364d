//! Resistance of source and drain outside the channel: the gate- and body-dependent one of `rdsmod = 1`, and that of
//! the diffusions.

use super::prepare::Prepared;
use crate::device::dual::{Over, Real};
use crate::device::{Bias, Branches, Polarity};

/// One end of the device.
#[derive(Debug, Clone)]
pub struct EndResistance<P> {
    /// `RSW/(10⁶·Weffcj)^WR/NF` at temperature, Ω; zero unless `rdsmod = 1`.
    pub overlap_ohm: P,
    /// `RSWMIN/(10⁶·Weffcj)^WR/NF` at temperature, Ω; zero unless `rdsmod = 1`.
    pub least_ohm: P,
    /// `RSH·NRS`, Ω.
    pub diffusion_ohm: P,
}

/// Both ends.
#[derive(Debug, Clone)]
pub struct Series<P> {
    /// At the source terminal.
    pub source: EndResistance<P>,
    /// At the drain terminal.
    pub drain: EndResistance<P>,
    /// PRWG, 1/V.
    pub prwg: P,
    /// PRWB, V⁻¹.
    pub prwb: P,
    /// Flat-band voltage between gate and diffusion, V.
    pub vfbsd: P,
}

impl<P: Real> Series<P> {
    /// Resistance of one end, Ω, with its gate and its body seen from the inner diffusion (n-channel sense).
    ///
    /// ```text
    /// R = RMIN + R0·[1/(1 + PRWG·(Vg − Vfbsd)) − PRWB·Vb] + RSH·squares
    /// ```
    ///
    /// `Vg − Vfbsd` and the bracket are held positive by hyperbolas of 10 mV and 0.1, as in the internal resistance.
    ///
    /// Source: BSIM4.8.0 manual, section 7.1.
    fn at<R: Over<P>>(&self, end: &EndResistance<P>, vg: R, vb: R) -> R {
        let fixed = vg.lift(end.least_ohm) + end.diffusion_ohm;
        if end.overlap_ohm.val() == 0.0 {
            return fixed;
        }
        let above = vg - self.vfbsd;
        let above = (above + (above.sq() + 1e-4).sqrt()) * 0.5;
        let bracket = (above * self.prwg + 1.0).recip() - vb * self.prwb;
        (bracket + (bracket.sq() + 0.01).sqrt()) * 0.5 * end.overlap_ohm + fixed
    }
}

/// Most steps of the inner iteration.
const STEPS: usize = 200;

/// Branch currents of a device between its contacts: `inner` are those between the ends of the channel.
///
/// Solves `a = −Rs·Is`, `b = Rd·Id` for the voltages lost at source and drain. The Jacobian comes from differences and
/// only steers; the iteration ends on the exact equations, three steps after the values stand still, which carries the
/// derivatives with it (implicit function theorem). Currents that do not converge are returned as NaN, which every
/// caller reports.
pub fn through<P: Real, R: Over<P> + Real>(
    p: &Prepared<P>,
    s: &Series<P>,
    bias: Bias<R>,
    inner: impl Fn(Bias<R>) -> Branches<R>,
) -> Branches<R> {
    let sign = if p.polarity == Polarity::P { -1.0 } else { 1.0 };
    let inside = |a: R, b: R| Bias { vgs: bias.vgs - a, vds: bias.vds - a - b, vbs: bias.vbs - a };
    // what each drop lacks to the drop that its current makes, and the currents
    let lack = |a: R, b: R| {
        let u = inside(a, b);
        let currents = inner(u);
        let [id, _, is, _] = currents.terminals();
        let rs = s.at(&s.source, u.vgs * sign, u.vbs * sign);
        let rd = s.at(&s.drain, (u.vgs - u.vds) * sign, (u.vbs - u.vds) * sign);
        let gross = currents.gross() * rs.val().max(rd.val());
        ((a + rs * is, b - rd * id), currents, gross)
    };
    let (mut a, mut b) = (R::of(0.0), R::of(0.0));
    let (mut lacks, mut currents, mut gross) = lack(a, b);
    let worst = |(f, g): (R, R)| f.val().abs().max(g.val().abs());
    let mut jacobian: Option<[[f64; 2]; 2]> = None;
    let (mut still, mut last) = (0, f64::INFINITY);
    for _ in 0..STEPS {
        let (f, g) = lacks;
        let size = worst(lacks);
        if jacobian.is_none() || size > 0.1 * last {
            let h = 1e-7;
            let ((fa, ga), ..) = lack(a + h, b);
            let ((fb, gb), ..) = lack(a, b + h);
            let slope = |x: R, y: R| (y.val() - x.val()) / h;
            jacobian = Some([[slope(f, fa), slope(f, fb)], [slope(g, ga), slope(g, gb)]]);
        }
        last = size;
        let Some([[j11, j12], [j21, j22]]) = jacobian else { break };
        let det = j11 * j22 - j12 * j21;
        let (mut da, mut db) = ((f * j22 - g * j12) / det, (g * j11 - f * j21) / det);
        let step = da.val().abs().max(db.val().abs());
        if !step.is_finite() {
            break;
        }
        let scale = a.val().abs().max(b.val().abs());
        still = if step <= 1e-13 * scale + 1e-15 * (gross + scale) { still + 1 } else { 0 };
        if still == 3 {
            return currents;
        }
        // the exponential of a junction driven forward throws a full step across the bias: go back until it gains
        let mut tried = lack(a - da, b - db);
        if step > 1e-9 * scale {
            for _ in 0..60 {
                if worst(tried.0) < size {
                    break;
                }
                (da, db) = (da * 0.5, db * 0.5);
                tried = lack(a - da, b - db);
            }
        }
        (a, b) = (a - da, b - db);
        (lacks, currents, gross) = tried;
    }
    Branches::zero().map(|_: R| R::of(f64::NAN))
}
