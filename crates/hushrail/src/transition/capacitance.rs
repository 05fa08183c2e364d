//! Capacitances a transition needs: given, or from what is given; never guessed.

use serde::{Deserialize, Serialize};

use super::error::{TransitionError, positive};
use crate::standby::Switch;

/// Permittivity of silicon dioxide, F/m: 3.9 times that of the vacuum, 8.8541878128e-12 F/m (CODATA 2018).
pub const OXIDE_F_M: f64 = 3.9 * 8.854_187_812_8e-12;

/// Everything that hangs on the virtual rail, counted across the block.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct RailCapacitance {
    /// In all, F.
    #[serde(default)]
    pub total_f: Option<f64>,
    /// Of one instance, F.
    #[serde(default)]
    pub per_instance_f: Option<f64>,
    /// Of a square metre of cells, F/m²; needs `area_m2`.
    #[serde(default)]
    pub per_area_f_m2: Option<f64>,
    /// Area of the cells, m².
    #[serde(default)]
    pub area_m2: Option<f64>,
}

impl RailCapacitance {
    /// A capacitance given as it is.
    pub fn of(total_f: f64) -> Self {
        Self { total_f: Some(total_f), ..Self::default() }
    }

    /// The sum of what is given, F.
    ///
    /// # Errors
    /// Nothing given, an area without a capacitance or the other way round, a number that is not above zero.
    pub fn farads(&self, instances: u64) -> Result<f64, TransitionError> {
        let key = "total_f, per_instance_f, or per_area_f_m2 with area_m2";
        let mut sum = None;
        let mut add = |what: &str, x: f64, n: f64| {
            positive(what, x)?;
            sum = Some(sum.unwrap_or(0.0) + x * n);
            Ok::<(), TransitionError>(())
        };
        if let Some(c) = self.total_f {
            add("rail capacitance (F)", c, 1.0)?;
        }
        if let Some(c) = self.per_instance_f {
            add("rail capacitance of an instance (F)", c, instances as f64)?;
        }
        match (self.per_area_f_m2, self.area_m2) {
            (Some(c), Some(a)) => {
                positive("cell area (m²)", a)?;
                add("rail capacitance per area (F/m²)", c, a)?;
            }
            (Some(_), None) => {
                return Err(TransitionError::NoCapacitance { what: "the cells' area", key: "area_m2" });
            }
            (None, Some(_)) => {
                return Err(TransitionError::NoCapacitance { what: "the cells' area", key: "per_area_f_m2" });
            }
            (None, None) => {}
        }
        let sum = sum.ok_or(TransitionError::NoCapacitance { what: "the virtual rail", key })?;
        positive("rail capacitance (F)", sum)?;
        Ok(sum)
    }
}

/// Gate of the switch: given per width, or the card's oxide over the channel with an overlap given.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct GateCapacitance {
    /// In all, F.
    #[serde(default)]
    pub total_f: Option<f64>,
    /// Of a metre of width, F/m; overlaps included.
    #[serde(default)]
    pub per_width_f_m: Option<f64>,
    /// Overlap and fringe of both edges, F/m, on top of the oxide over the channel, `ε/tox·W·L`.
    #[serde(default)]
    pub overlap_f_m: Option<f64>,
}

impl GateCapacitance {
    /// Capacitance of the whole gate, F. The oxide over the channel counts in full over the whole swing, which is its upper
    /// bound: a depleted channel holds less.
    ///
    /// # Errors
    /// Nothing given, more than one way given, or a number that is not above zero.
    pub fn farads(&self, switch: &Switch, width_m: f64, length_m: f64) -> Result<f64, TransitionError> {
        positive("switch width (m)", width_m)?;
        positive("switch length (m)", length_m)?;
        match (self.total_f, self.per_width_f_m, self.overlap_f_m) {
            (Some(c), None, None) => positive("gate capacitance (F)", c).map(|()| c),
            (None, Some(c), None) => positive("gate capacitance per width (F/m)", c).map(|()| c * width_m),
            (None, None, Some(o)) => {
                super::error::not_negative("overlap capacitance (F/m)", o)?;
                let oxide = switch.device.oxide_m();
                positive("oxide thickness (m)", oxide)?;
                Ok(OXIDE_F_M / oxide * width_m * length_m + o * width_m)
            }
            (None, None, None) => Err(TransitionError::NoCapacitance {
                what: "the switch's gate",
                key: "gate: total_f, per_width_f_m, or overlap_f_m for the card's oxide with overlap",
            }),
            _ => Err(TransitionError::Range {
                what: "number of ways the gate capacitance is given".into(),
                value: [self.total_f, self.per_width_f_m, self.overlap_f_m].iter().flatten().count() as f64,
                wanted: "want one of total_f, per_width_f_m, overlap_f_m".into(),
            }),
        }
    }
}
