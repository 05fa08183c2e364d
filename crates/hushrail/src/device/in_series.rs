//! Two devices in series with one gate and one body: a stacked switch, or a transistor split into a stack.
//!
//! More than two are two of which one is such a pair again.

use std::sync::Arc;

use super::dual::{Dual, Real};
use super::range::Outside;
use super::root::increasing;
use super::{Bias, Branches, Device, Polarity, Terminal};

/// Two devices in series: the upper one's source is the lower one's drain.
#[derive(Debug, Clone)]
pub struct InSeries {
    upper: Arc<dyn Device>,
    lower: Arc<dyn Device>,
}

/// Accuracy of the balance at the node between them, in the logarithm of the two currents.
const BALANCE: f64 = 1e-13;
/// Evaluations before the best point is taken.
const EVALUATIONS: usize = 200;

/// Grows with `a − b`: the logarithm of their ratio where they have one sign.
fn log_ratio(a: f64, b: f64) -> f64 {
    if a > 0.0 && b > 0.0 {
        (a / b).ln()
    } else if a < 0.0 && b < 0.0 {
        (b / a).ln()
    } else {
        500.0 * (f64::from(u8::from(a > b)) - f64::from(u8::from(a < b)))
    }
}

impl InSeries {
    /// `count` equal devices in series; one is the device itself.
    pub fn of(device: &Arc<dyn Device>, count: usize) -> Arc<dyn Device> {
        let one = || Arc::clone(device);
        (1..count).fold(one(), |upper, _| Arc::new(Self { upper, lower: one() }))
    }

    fn biases<R: Real>(b: Bias<R>, x: R) -> (Bias<R>, Bias<R>) {
        let upper = Bias { vgs: b.vgs - x, vds: b.vds - x, vbs: b.vbs - x };
        (upper, Bias { vgs: b.vgs, vds: x, vbs: b.vbs })
    }

    /// Voltage of the node between them over the source: what the upper one lets through is what the lower one takes.
    fn middle(&self, b: Bias<f64>) -> f64 {
        let s = self.upper.polarity().sign();
        // in the sense of an n-channel device, both currents positive downwards
        let balance = |x: f64| {
            let (upper, lower) = Self::biases(b, s * x);
            let into = -s * self.upper.branches(upper).terminals()[Terminal::Source as usize];
            let out = s * self.lower.branches(lower).terminals()[Terminal::Drain as usize];
            Ok::<f64, std::convert::Infallible>(log_ratio(out, into))
        };
        let vds = s * b.vds;
        if vds == 0.0 && s * b.vbs == 0.0 && s * b.vgs == 0.0 {
            return 0.0;
        }
        // leaks to body and gate can pull the node a little beyond the ends
        let (low, high) = (vds.min(0.0), vds.max(0.0));
        let beyond = 0.2 + 0.1 * (high - low);
        let inside = balance(low).unwrap_or(0.0) <= 0.0 && balance(high).unwrap_or(0.0) >= 0.0;
        let (low, high) = if inside { (low, high) } else { (low - beyond, high + beyond) };
        s * increasing(low, high, 1e-16, BALANCE, EVALUATIONS, balance).unwrap_or(0.0)
    }

    /// Leaks of the node between count at the source end; what flows into the drain that leaks nowhere is channel current.
    fn together<R: Real>(upper: Branches<R>, lower: Branches<R>) -> Branches<R> {
        let drain = upper.terminals()[Terminal::Drain as usize];
        let to_body = upper.impact_db + upper.gidl_db + upper.junction_db;
        Branches {
            channel_ds: drain - to_body + upper.gate_gd,
            impact_db: upper.impact_db,
            gidl_db: upper.gidl_db,
            junction_db: upper.junction_db,
            gate_gd: upper.gate_gd,
            impact_sb: upper.impact_sb + lower.impact_db + lower.impact_sb,
            gidl_sb: upper.gidl_sb + lower.gidl_db + lower.gidl_sb,
            junction_sb: upper.junction_sb + lower.junction_db + lower.junction_sb,
            gate_gs: upper.gate_gs + lower.gate_gd + lower.gate_gs,
            gate_gb: upper.gate_gb + lower.gate_gb,
        }
    }
}

impl Device for InSeries {
    fn polarity(&self) -> Polarity {
        self.upper.polarity()
    }
    fn branches(&self, bias: Bias<f64>) -> Branches<f64> {
        let (u, l) = Self::biases(bias, self.middle(bias));
        Self::together(self.upper.branches(u), self.lower.branches(l))
    }
    /// The node between follows by the implicit function theorem.
    fn branches_dual(&self, bias: Bias<Dual<3>>) -> Branches<Dual<3>> {
        let plain = Bias { vgs: bias.vgs.val(), vds: bias.vds.val(), vbs: bias.vbs.val() };
        let x = self.middle(plain);
        let (u, l) = Self::biases(plain, x);
        let (upper, lower) = (self.upper.branches_dual(u.dual()), self.lower.branches_dual(l.dual()));
        // F = current into the node's two terminals; slopes to (vgs, vds, vbs) of each device
        let (is, id) =
            (upper.terminals()[Terminal::Source as usize], lower.terminals()[Terminal::Drain as usize]);
        let to_middle = -(is.d[0] + is.d[1] + is.d[2]) + id.d[1];
        let outer = [is.d[0] + id.d[0], is.d[1], is.d[2] + id.d[2]];
        let dx = outer.map(|f| if to_middle == 0.0 { 0.0 } else { -f / to_middle });
        // chain rule from each device's own voltages to the outer ones, and from those to whatever `bias` carries
        let carry = |i: Dual<3>, own: [[f64; 3]; 3]| {
            let to_outer: [f64; 3] = std::array::from_fn(|k| (0..3).map(|v| i.d[v] * own[v][k]).sum());
            let d: [f64; 3] = std::array::from_fn(|k| {
                to_outer[0] * bias.vgs.d[k] + to_outer[1] * bias.vds.d[k] + to_outer[2] * bias.vbs.d[k]
            });
            Dual { v: i.v, d }
        };
        let unit = |k: usize| -> [f64; 3] { std::array::from_fn(|j| f64::from(u8::from(j == k))) };
        let less = |a: [f64; 3]| -> [f64; 3] { std::array::from_fn(|j| a[j] - dx[j]) };
        let of_upper = [less(unit(0)), less(unit(1)), less(unit(2))];
        let of_lower = [unit(0), dx, unit(2)];
        Self::together(upper.map(|i| carry(i, of_upper)), lower.map(|i| carry(i, of_lower)))
    }
    fn has_gate_current(&self) -> bool {
        self.upper.has_gate_current() || self.lower.has_gate_current()
    }
    fn has_gidl(&self) -> bool {
        self.upper.has_gidl() && self.lower.has_gidl()
    }
    fn oxide_m(&self) -> f64 {
        self.upper.oxide_m().min(self.lower.oxide_m())
    }
    fn thermal_voltage(&self) -> f64 {
        self.upper.thermal_voltage()
    }
    fn outside(&self, bias: Bias<f64>) -> Option<Outside> {
        let (u, l) = Self::biases(bias, self.middle(bias));
        Outside::worse(self.upper.outside(u), self.lower.outside(l))
    }
}
