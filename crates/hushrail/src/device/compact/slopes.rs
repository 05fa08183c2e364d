//! Currents of a compact device with their exact slopes to the numbers of its card, for fits.

use super::branches;
use super::card::{CompactCard, CompactError, wrong};
use super::params::{Param, Values};
use super::prepare::Prepared;
use crate::device::dual::{Dual, Real};
use crate::device::{Bias, Geometry};
use crate::physics::Kelvin;

/// Numbers varied in one pass.
const LANES: usize = 6;

/// Terminal currents at some biases, and their slopes.
#[derive(Debug, Clone, PartialEq)]
pub struct Slopes {
    /// Into drain, gate, source and body at each bias, A.
    pub currents: Vec<[f64; 4]>,
    /// The same per unit of each number, numbers varying fastest: bias, number.
    pub slopes: Vec<[f64; 4]>,
}

impl CompactCard {
    /// Currents at biases, each with its slopes to some numbers of the card; from the equations of the device itself with
    /// dual numbers in its parameters.
    ///
    /// # Errors
    /// As for [`CompactCard::device`]; a number that the card does not give; a current that is not finite.
    pub fn slopes(
        &self,
        free: &[Param],
        geometry: &Geometry,
        temp: Kelvin,
        biases: &[Bias<f64>],
    ) -> Result<Slopes, CompactError> {
        self.device(geometry, temp)?;
        if let Some(p) = free.iter().find(|p| self.get(**p).is_none()) {
            return Err(wrong(p.row().name, "not given".into(), "want a value to vary"));
        }
        let n = free.len();
        let mut out =
            Slopes { currents: vec![[0.0; 4]; biases.len()], slopes: vec![[0.0; 4]; biases.len() * n] };
        let lift = Dual::<LANES>::of;
        let (lifted, temp_k) = (geometry.lift(), lift(temp.get()));
        // without free numbers one pass for the currents
        for first in (0..n.max(1)).step_by(LANES) {
            let part = &free[first..n.min(first + LANES)];
            let values = Values::new(self, |p, v| match part.iter().position(|q| *q == p) {
                Some(i) => Dual::variable(v, i),
                None => lift(v),
            });
            let prepared = Prepared::new(&values, &lifted, temp_k);
            for (i, bias) in biases.iter().enumerate() {
                let at = Bias { vgs: lift(bias.vgs), vds: lift(bias.vds), vbs: lift(bias.vbs) };
                let terminals = branches(&prepared, at).terminals();
                if terminals.iter().any(|t| !t.v.is_finite() || t.d.iter().any(|d| !d.is_finite())) {
                    return Err(wrong(
                        "current or one of its slopes",
                        format!("not finite at vgs {} V, vds {} V, vbs {} V", bias.vgs, bias.vds, bias.vbs),
                        "want voltages and parameters of a transistor",
                    ));
                }
                out.currents[i] = terminals.map(|t| t.v);
                for k in 0..part.len() {
                    out.slopes[i * n + first + k] = terminals.map(|t| t.d[k]);
                }
            }
        }
        Ok(out)
    }
}
