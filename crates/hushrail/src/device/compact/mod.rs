//! The compact model: a transistor from a dozen numbers, for planning before foundry cards exist.
//!
//! Charge-based all-region channel after Enz, Krummenacher and Vittoz, referred to the body and symmetric in drain and source
//! ([`channel`]); GIDL and GISL ([`gidl`]), junctions with generation, diffusion and band-to-band tunnelling
//! ([`junction`]), direct tunnelling through the gate ([`gate`]). Every current is zero without voltage, currents flow along
//! branches, value and slope are continuous everywhere.
//!
//! **Why this form.** Series transistors of a law `I = f(Vg, Vs) − f(Vg, Vd)` share one current exactly, so stacks come out
//! as the algebra says; drain and source have no names. A law in gate overdrive and drain saturation voltage, as in the
//! textbooks' hand analysis, has neither property and kinks between its regions.
//!
//! Formulas come from the sources each item names, through the project's reference sheet; papers other than the BSIM4 manual are
//! cited from memory.
//!
//! **What it does not hold.** Channel-length modulation beyond DIBL, impact ionisation, poly depletion, quantum shifts, pocket
//! implants and their reverse short-channel effect, narrow-width effects, stress, gate-to-body tunnelling (accumulation),
//! junction breakdown. Off-currents and the resistance at small drain voltage are what the parameters say they are; saturated
//! on-currents are estimates.

pub mod card;
pub mod channel;
pub mod gate;
pub mod generic;
pub mod gidl;
pub mod junction;
pub mod params;
pub mod prepare;
pub mod slopes;

use super::bulk::{RowLaw, Width, sweep};
use super::dual::{Dual, Over, Real};
use super::lanes::Lanes;
use super::{Bias, Branches, Device, Polarity};
pub use card::{CompactCard, CompactError};
use channel::Channel;
pub use gidl::GidlLaw;
pub use params::Param;
use prepare::Prepared;

/// A compact transistor at one temperature.
#[derive(Debug, Clone)]
pub struct Compact {
    /// All constants of the instance.
    pub prepared: Prepared<f64>,
}

/// Branch currents at a bias, whatever the kind of number.
#[inline(always)]
pub fn branches<P: Real, R: Over<P>>(p: &Prepared<P>, bias: Bias<R>) -> Branches<R> {
    let mirrored = p.polarity == Polarity::P;
    let bias = if mirrored { bias.reversed() } else { bias };
    let Bias { vgs, vds, vbs } = bias;
    let (vgd, vbd) = (vgs - vds, vbs - vds);
    let exchanged = vds.below(0.0);
    let ch = Channel::at(p, bias.exchanged(exchanged));
    let mut b = Branches { channel_ds: ch.ids, ..Branches::all(vds.like(0.0)) }.exchanged(exchanged);
    if let Some(g) = &p.gidl {
        b.gidl_db = g.current(p.width_m, -vgd, -vbd);
        b.gidl_sb = g.current(p.width_m, -vgs, -vbs);
    }
    if let Some(t) = &p.tunnel {
        let drain_v = R::select(exchanged, ch.source_v, ch.drain_v);
        let source_v = R::select(exchanged, ch.drain_v, ch.source_v);
        b.gate_gd = t.edge(vgd) + t.channel_end(vgd, drain_v);
        b.gate_gs = t.edge(vgs) + t.channel_end(vgs, source_v);
    }
    b.junction_sb = -p.source.current(vbs);
    b.junction_db = -p.drain.current(vbd);
    if mirrored { b.reversed() } else { b }
}

impl RowLaw for Compact {
    #[inline(always)]
    fn row<S: pulp::Simd>(&self, bias: Bias<Lanes<S>>) -> Branches<Lanes<S>> {
        branches(&self.prepared, bias)
    }
}

impl Compact {
    /// [`Device::branches_many`] with vectors of a width that is asked for.
    ///
    /// # Panics
    /// When the lengths differ.
    pub fn branches_with(&self, biases: &[Bias<f64>], out: &mut [Branches<f64>], width: Width) {
        sweep(self, biases, out, width);
    }
}

impl Device for Compact {
    fn polarity(&self) -> Polarity {
        self.prepared.polarity
    }
    fn branches(&self, bias: Bias<f64>) -> Branches<f64> {
        branches(&self.prepared, bias)
    }
    fn branches_many(&self, biases: &[Bias<f64>], out: &mut [Branches<f64>]) {
        self.branches_with(biases, out, Width::Machine);
    }
    fn branches_dual(&self, bias: Bias<Dual<3>>) -> Branches<Dual<3>> {
        branches(&self.prepared, bias)
    }
    fn has_gate_current(&self) -> bool {
        self.prepared.tunnel.is_some()
    }
    fn has_gidl(&self) -> bool {
        self.prepared.gidl.is_some()
    }
    fn oxide_m(&self) -> f64 {
        self.prepared.oxide_m
    }
    fn thermal_voltage(&self) -> f64 {
        self.prepared.vt
    }
}
