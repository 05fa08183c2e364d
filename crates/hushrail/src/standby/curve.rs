//! The block's curve under a scheme: its wells where the scheme ties them.

use std::sync::atomic::AtomicBool;

use super::scheme::Scheme;
use crate::block::{BlockCurve, Collapsing, CurveError, Draw};

impl Scheme {
    /// Which rail falls away asleep; `None` when none does or both do.
    pub fn collapsing(&self) -> Option<Collapsing> {
        match (&self.header, &self.footer) {
            (Some(_), None) => Some(Collapsing::Supply),
            (None, Some(_)) => Some(Collapsing::Ground),
            _ => None,
        }
    }

    /// Samples a block over the rail that falls away under this scheme, to a relative tolerance; see [`BlockCurve::sample`].
    ///
    /// # Errors
    /// A scheme without exactly one switch, or what [`BlockCurve::sample`] cannot do.
    pub fn curve(
        &self,
        block: &dyn Draw,
        vdd_v: f64,
        tolerance: f64,
        stop: &AtomicBool,
    ) -> Result<BlockCurve, CurveError> {
        let Some(rail) = self.collapsing() else {
            return Err(CurveError::Points(format!(
                "scheme `{}` has {}; a curve is over one virtual rail: want a header or a footer",
                self.name,
                if self.header.is_some() { "header and footer" } else { "no switch" }
            )));
        };
        let levels = |span: f64| {
            let (supply, ground) = rail.rails(vdd_v, span);
            self.levels(vdd_v, supply, ground)
        };
        BlockCurve::sample(block, rail, vdd_v, &levels, tolerance, stop)
    }
}
