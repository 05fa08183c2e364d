//! Corners: process, supply and temperature under one name.

use serde::{Deserialize, Serialize};

use crate::physics::Kelvin;

/// A corner.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Corner {
    /// Name in reports.
    pub name: String,
    /// Name of the process.
    pub process: String,
    /// Supply, V.
    pub vdd_v: f64,
    /// Temperature, degrees Celsius.
    pub temp_c: f64,
}

/// A corner that cannot be.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[error("corner `{corner}`: {what} is {value}; {wanted}")]
pub struct CornerError {
    /// The corner.
    pub corner: String,
    /// The quantity.
    pub what: &'static str,
    /// What was found.
    pub value: String,
    /// What would be right.
    pub wanted: String,
}

impl Corner {
    /// Checks supply and temperature.
    ///
    /// # Errors
    /// A supply outside 0.05 V to 20 V, or a temperature outside the range of the equations.
    pub fn check(&self) -> Result<Kelvin, CornerError> {
        let wrong = |what, value, wanted| CornerError { corner: self.name.clone(), what, value, wanted };
        if !(self.vdd_v >= 0.05 && self.vdd_v <= 20.0) {
            return Err(wrong("supply", format!("{} V", self.vdd_v), "want 0.05 V to 20 V".into()));
        }
        Kelvin::from_celsius(self.temp_c).map_err(|_| {
            let (lo, hi) = crate::physics::TEMP_RANGE_C;
            wrong("temperature", format!("{} °C", self.temp_c), format!("want {lo} to {hi} °C"))
        })
    }
}
