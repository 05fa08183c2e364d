//! A domain at a corner, asked again and again under schemes that differ in a knob: devices are made once, the block's current is
//! a curve where one virtual rail falls away.

use std::sync::atomic::AtomicBool;
use std::sync::{Arc, Mutex, PoisonError};

use super::error::OptimumError;
use super::knob::Knob;
use crate::block::{BlockCurve, BoundBlock, CurveError, Parts};
use crate::cell::DeviceShelf;
use crate::device::process::Process;
use crate::physics::Kelvin;
use crate::standby::rest::{Clamps, settle_clamped};
use crate::standby::switch::{Side, Switch};
use crate::standby::{Asleep, Clamp, RestError, Scheme};

/// A domain at a corner.
#[derive(Debug, Clone, Copy)]
pub struct Site<'a> {
    /// The corner's name.
    pub corner: &'a str,
    /// Its cards.
    pub process: &'a Process,
    /// Its temperature.
    pub temp: Kelvin,
    /// Its supply, V.
    pub vdd_v: f64,
    /// The block there.
    pub block: &'a BoundBlock,
    /// Where messages about the scheme point.
    pub origin: &'a Arc<str>,
}

/// Switches and clamps of a scheme, made.
pub(super) struct Made {
    pub(super) header: Option<Switch>,
    pub(super) footer: Option<Switch>,
    pub(super) clamps: Clamps,
}

impl Made {
    /// The one switch, where there is one.
    pub(super) fn switch(&self) -> Option<&Switch> {
        self.header.as_ref().or(self.footer.as_ref())
    }
}

impl Site<'_> {
    /// The block under a scheme: parked, in rows, its powered cells apart.
    pub(super) fn parts(&self, scheme: &Scheme) -> Result<Parts, OptimumError> {
        Parts::new(self.block, &scheme.parked, scheme.zigzag, self.vdd_v)
            .map_err(|e| OptimumError::block(self.corner, e))
    }

    /// The block's curve; `None` where no single rail falls away or the curve is not met.
    pub(super) fn curve(
        &self,
        scheme: &Scheme,
        parts: &Parts,
        tolerance: f64,
        stop: &AtomicBool,
    ) -> Result<Option<BlockCurve>, OptimumError> {
        if scheme.collapsing().is_none() {
            return Ok(None);
        }
        match scheme.curve(parts, self.vdd_v, tolerance, stop) {
            Ok(c) => Ok(Some(c)),
            Err(CurveError::Accuracy { .. }) => Ok(None),
            Err(CurveError::Block(e)) => Err(OptimumError::block(self.corner, e)),
            Err(e) => Err(e.into()),
        }
    }

    /// Switches and clamps of a scheme, from a shelf.
    pub(super) fn made(&self, scheme: &Scheme, shelf: &mut DeviceShelf) -> Result<Made, OptimumError> {
        let wrong = |e| OptimumError::rest(self.corner, RestError::Read(e));
        let (p, t, v, o) = (self.process, self.temp, self.vdd_v, self.origin);
        let mut switch = |spec: &Option<_>, side| {
            spec.as_ref().map(|s| Switch::new(s, side, p, t, v, shelf, o)).transpose().map_err(wrong)
        };
        let header = switch(&scheme.header, Side::Header)?;
        let footer = switch(&scheme.footer, Side::Footer)?;
        let mut clamp = |spec: &Option<_>, side| {
            spec.as_ref().map(|c| Clamp::new(c, side, p, t, v, shelf, o)).transpose().map_err(wrong)
        };
        let clamps = Clamps {
            header: clamp(&scheme.header_clamp, Side::Header)?,
            footer: clamp(&scheme.footer_clamp, Side::Footer)?,
        };
        Ok(Made { header, footer, clamps })
    }
}

/// A site with one knob free.
pub(super) struct Turned<'a> {
    pub(super) site: &'a Site<'a>,
    pub(super) scheme: &'a Scheme,
    pub(super) knob: Knob,
    parts: Parts,
    curve: Option<BlockCurve>,
    shelf: Mutex<DeviceShelf>,
    stop: &'a AtomicBool,
}

impl<'a> Turned<'a> {
    /// Prepares a site; the curve is made where the knob leaves the block alone.
    pub(super) fn new(
        site: &'a Site<'a>,
        scheme: &'a Scheme,
        knob: Knob,
        tolerance: f64,
        stop: &'a AtomicBool,
    ) -> Result<Self, OptimumError> {
        let parts = site.parts(scheme)?;
        let curve = if knob.moves_block() { None } else { site.curve(scheme, &parts, tolerance, stop)? };
        Ok(Self { site, scheme, knob, parts, curve, shelf: Mutex::default(), stop })
    }

    /// At rest with the knob at a value, on the curve where there is one.
    pub(super) fn quick(&self, value: f64) -> Result<Asleep, OptimumError> {
        self.settle(&self.knob.at(self.scheme, value)?, true)
    }

    /// At rest with the knob at a value, by the device solver.
    pub(super) fn direct(&self, value: f64) -> Result<Asleep, OptimumError> {
        self.settle(&self.knob.at(self.scheme, value)?, false)
    }

    /// At rest under a scheme.
    pub(super) fn settle(&self, scheme: &Scheme, quick: bool) -> Result<Asleep, OptimumError> {
        let made = self.site.made(scheme, &mut self.shelf.lock().unwrap_or_else(PoisonError::into_inner))?;
        let v = self.site.vdd_v;
        let found = match (&self.curve, quick) {
            (Some(c), true) => settle_clamped(scheme, c, v, made.header, made.footer, made.clamps, self.stop),
            _ => settle_clamped(scheme, &self.parts, v, made.header, made.footer, made.clamps, self.stop),
        };
        found.map_err(|e| OptimumError::rest(self.site.corner, e))
    }

    /// Whether the switch that the knob drives has GIDL in its card; true where there is no such switch.
    pub(super) fn has_gidl(&self) -> Result<bool, OptimumError> {
        let mut shelf = self.shelf.lock().unwrap_or_else(PoisonError::into_inner);
        let made = self.site.made(self.scheme, &mut shelf)?;
        let of = |s: &Option<Switch>| s.as_ref().is_none_or(|s| s.device.has_gidl());
        Ok(match self.knob {
            Knob::HeaderOverdrive => of(&made.header),
            Knob::FooterOverdrive => of(&made.footer),
            _ => true,
        })
    }
}
